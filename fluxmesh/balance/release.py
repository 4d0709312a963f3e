"""What the device would do at the first moment if the anchor let go."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fluxmesh.balance.hardware import Reaction
from fluxmesh.balance.setting import Setting
from fluxmesh.balance.weight import Fluid
from fluxmesh.balance.wrench import Vector, moved

__all__ = ["Release", "release"]


@dataclass(frozen=True, eq=False)
class Release:
    """First motion of hardware and fluid without the anchor.

    Attributes
    ----------
    direction : ndarray, shape (3,), float64
        Unit vector that it would start along.
    acceleration : ndarray, shape (3,), float64, or None
        First acceleration of the common centre of mass, m/s²; None when the
        hardware's or the fluid's mass is not known.
    turning_moment : ndarray, shape (3,), float64, or None
        Moment about the common centre of mass, N m: it would also start to
        turn. None when a mass is not known.
    """

    direction: Vector
    acceleration: Vector | None
    turning_moment: Vector | None


def release(reaction: Reaction, fluid: Fluid | None, setting: Setting) -> Release | None:
    """Return the first motion if the anchor let go.

    Parameters
    ----------
    reaction : Reaction
        What the anchor gives.
    fluid : Fluid or None
        The fluid held.
    setting : Setting
        The hardware.

    Returns
    -------
    Release or None
        None when there is nothing to hold.
    """
    push = -reaction.wrench.force
    size = float(np.linalg.norm(push))
    if size == 0.0:
        return None
    hardware = setting.hardware
    if hardware is None or fluid is None or hardware.mass + fluid.mass <= 0.0:
        return Release(push / size, None, None)
    mass = hardware.mass + fluid.mass
    centre = (hardware.mass * np.asarray(hardware.centre) + fluid.mass * fluid.centre) / mass
    return Release(push / size, push / mass, -moved(reaction.wrench, centre).moment)
