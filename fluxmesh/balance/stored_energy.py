"""Rate of the energy that a moving control surface holds, in the inertial frame."""

from __future__ import annotations

from math import fsum, isfinite

import numpy as np

from fluxmesh.balance.frame import mass_flow_moments
from fluxmesh.balance.setting import Setting
from fluxmesh.balance.storage import Storage
from fluxmesh.balance.weight import Fluid
from fluxmesh.balance.wrench import Vector
from fluxmesh.integral.table import IntegralTable

__all__ = ["stored_energy"]


def stored_energy(
    table: IntegralTable, setting: Setting, storage: Storage | None, fluid: Fluid | None
) -> tuple[float | None, str]:
    """Return the rate of internal, kinetic and potential energy inside, with absolute velocities.

    Parameters
    ----------
    table : IntegralTable
        The table.
    setting : Setting
        Gravity, anchor and motion of the control surface.
    storage : Storage or None
        Rates as seen from the control surface; None for steady. Its energy is internal
        and kinetic with relative velocities; where it is given and not from snapshots,
        potential energy is in it too.
    fluid : Fluid or None
        Fluid held.

    Returns
    -------
    rate : float or None
        W; None when it is not known.
    said : str
        What is missing.

    Notes
    -----
    What is steady as seen from the frame may change in the inertial one. With
    ``W = U + Ω × r`` and ``a = dU/dt``, a steady relative flow gains kinetic energy at
    the rate ``(a + U × Ω)·∫ρV dv`` and potential energy at ``-g·∫ρW dv``; both vanish for
    a steady translation on a level and for a rotation about an axis that rests and stands upright. Own
    derivation: ``d(V²/2)/dt = V·(Ω × Vr + dW/dt)`` at a point that moves with the frame.
    """
    frame = setting.frame
    rate, said = _seen(setting, storage)
    if rate is None or frame is None:
        return rate, said
    gravity = np.asarray(setting.gravity, dtype=np.float64)
    velocity = np.asarray(frame.velocity, dtype=np.float64)
    push = np.asarray(frame.acceleration, dtype=np.float64) + np.cross(velocity, frame.spin)
    if not push.any() and not gravity.any():
        return rate, ""
    about = np.asarray(setting.anchor, dtype=np.float64)
    carried = np.zeros(3)  # ∫ρW dv
    if frame.turns or velocity.any():
        if fluid is None:
            return None, "the surface moves, and the mass of the fluid held is not known"
        carried = fluid.mass * frame.at(fluid.centre)
    gained = -float(gravity @ carried)
    if push.any():
        # ∫ρVr dv = ∮ρ r Vr·n dA + d/dt ∫ρ r dv, by the mass law
        first, _ = mass_flow_moments(table, about)
        gained += _dot(push, first.sum(axis=0) + _moment_rate(storage) + carried)
    total = rate + gained
    return (total, "") if isfinite(total) else (None, "the rate of the moment of the mass inside is not known")


def _seen(setting: Setting, storage: Storage | None) -> tuple[float | None, str]:
    """The rates that are seen from the frame, for the absolute velocities."""
    if storage is None:
        return 0.0, ""
    if storage.energy is None:
        return None, "the rate of the energy inside is not known"
    terms = [storage.energy]
    gravity = np.asarray(setting.gravity, dtype=np.float64)
    moment = _moment_rate(storage)
    if storage.basis != "given":
        terms.append(-_dot(gravity, moment))
    frame = setting.frame
    if frame is not None:
        about = np.asarray(setting.anchor, dtype=np.float64)
        speed, spin = frame.at(about), frame.spin
        inertia = storage.inertia
        if inertia is None:
            inertia = np.full((3, 3), 0.0 if storage.mass == 0.0 else np.nan)
        terms += [
            _dot(speed, storage.momentum),
            _dot(spin, storage.angular_momentum),
            float(speed @ speed) * storage.mass / 2,
            _dot(np.cross(speed, spin), moment),
            _dot((float(spin @ spin) * np.eye(3) - np.outer(spin, spin)).ravel(), inertia.ravel()) / 2,
        ]
    total = fsum(terms)
    return (total, "") if isfinite(total) else (None, "a rate that the energy of a moving surface needs is not known")


def _moment_rate(storage: Storage | None) -> Vector:
    """Rate of ``∫ρ(x - anchor) dv``; NaN where it is not known."""
    if storage is None:
        return np.zeros(3)
    if storage.mass_moment is None:
        return np.full(3, 0.0 if storage.mass == 0.0 else np.nan)
    return storage.mass_moment


def _dot(factors: Vector, values: Vector) -> float:
    """Scalar product; values that are not known do not matter where their factor is zero."""
    needed = factors != 0.0
    return float(factors[needed] @ values[needed])
