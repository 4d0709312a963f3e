"""What the data say for or against a suspected slip beside the residuals: shifts of what the slip costs.

Two slips may undo one and the same residual. What tells them apart then is not the balance, but a second reading of
the same quantity, or that what one of them says cannot be, or hardly.
"""

from __future__ import annotations

from math import log
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.causes.entries import Entries
from fluxmesh.assess.causes.facts import Source

__all__ = ["ATMOSPHERE", "STANDARD", "flux_odds", "flux_over_velocity", "gravity_odds", "speed_odds"]

ATMOSPHERE: Final = 101325.0
"""Pa; standard atmosphere (ISO 2533), where a case gives none."""

STANDARD: Final = 9.80665
"""m/s²; standard acceleration of free fall (ISO 80000-3)."""

_EARTH: Final = 0.01  # from 9.780 m/s² at the equator to 9.832 at the poles (WGS 84), and what is rounded
_BODIES: Final = (1.0, 30.0)  # m/s²: from a little below the Moon (1.62) to a little above Jupiter (24.8; from memory)
_ODD: Final = 2.0  # a gravity that is not that of the Earth, but of some body or of a tilted or reduced model
_ABSURD: Final = 4.0  # one that is that of no body
_ALIKE: Final = 0.1  # share by which mass flow and velocity of an export differ at most where both are sound
_SECOND: Final = 3.0  # that a second reading of the same quantity agrees, or does not: a logarithm
_HELD: Final = 0.15  # of the largest mean speed of a group, below which one is held by a wall
_SLANTED: Final = 1e-3  # of what crosses a port, over the speed times its area, that tells nothing any more


def gravity_odds(size: float) -> float:
    """Return what it costs to have gravity of a size, beside that of the Earth.

    Parameters
    ----------
    size : float
        m/s²; above zero.
    """
    if abs(size / STANDARD - 1.0) <= _EARTH:
        return 0.0
    return _ODD if _BODIES[0] <= size <= _BODIES[1] else _ABSURD


def flux_over_velocity(entries: Entries) -> NDArray[np.float64]:
    """Return the exported mass flow of each port over what density and exported velocity make of it.

    Over a plane group ``∫ V·n dA`` is ``n · ∫ V dA``, which the table holds whatever the mass flow is.

    Parameters
    ----------
    entries : Entries
        The laws.

    Returns
    -------
    ndarray, shape (n_groups,), float64
        1 where both agree; NaN where no mass flow was exported, the group is not plane, or hardly anything crosses it.
    """
    table = entries.balance.table
    exported = np.array([source is Source.MASS_FLUX for source in entries.facts.flow])
    normal = np.divide(entries.area_vector, entries.area[:, None], out=np.zeros_like(entries.area_vector),
                       where=entries.area[:, None] > 0)  # fmt: skip
    made = entries.density * np.einsum("gk,gk->g", table.column("velocity_area"), normal)
    told = exported & entries.flat() & (np.abs(made) > _SLANTED * entries.density * table.column("speed_area"))
    return np.asarray(np.divide(entries.mass, made, out=np.full_like(made, np.nan), where=told))


def flux_odds(ratios: NDArray[np.float64], group: int, factor: float) -> float:
    """Return what it costs to say that the mass flow of one group must be multiplied by a factor.

    Below zero where its velocity says the same, above where its velocity agrees with the mass flow as it is.

    Parameters
    ----------
    ratios : ndarray, shape (n_groups,), float64
        See `flux_over_velocity`.
    group : int
        The group.
    factor : float
        The factor.

    Returns
    -------
    float
        Zero where the velocity tells nothing: there is none, or mass flows and velocities agree nowhere else,
        so that a unit or the density may be off.
    """
    if abs(ratios[group] - 1.0) <= _ALIKE:
        return _SECOND
    others = np.delete(ratios, group)
    others = others[np.isfinite(others)]
    if others.size and not (np.abs(others - 1.0) <= _ALIKE).any():
        return 0.0
    return -_SECOND if abs(ratios[group] * factor - 1.0) <= _ALIKE else 0.0


def speed_odds(entries: Entries, group: int, factor: float) -> float:
    """Return what it costs to say that the exported velocity of one port must be multiplied by a factor.

    Fluid that slides along planes of symmetry and moving or frictionless walls is about as fast as at the ports: the
    ratio of both mean speeds is taken to be spread as ``exp(-|ln ratio|)``.

    Parameters
    ----------
    entries : Entries
        The laws.
    group : int
        The port.
    factor : float
        The factor.

    Returns
    -------
    float
        Zero where nothing slides along the other groups.
    """
    swept = entries.balance.table.column("speed_area")
    speed = np.divide(swept, entries.area, out=np.zeros_like(swept), where=entries.area > 0)
    # walls that hold the fluid say nothing, but for what their rims share with ports
    sliding = (entries.mass_size <= _SLANTED * float(entries.mass_size.max())) & (speed > _HELD * float(speed.max()))
    if not sliding.any() or swept[group] <= 0:
        return 0.0
    beside = float(swept[sliding].sum() / entries.area[sliding].sum())
    ratio = float(speed[group]) / beside
    return abs(log(abs(factor) * ratio)) - abs(log(ratio))
