"""What the motion of the control surface adds: to fluxes, to storage, and in power.

The table holds fluxes by the relative velocity ``Vr``. With the velocity of the surface
``W = U + Ω × (x - c)`` the momentum that ``Vr + W`` carries needs only the first and second
moments of the mass flow, and the rate of what the volume holds needs its mass, mass moment
and relative momentum ``P``. For any quantity with components fixed in the frame
``dG/dt = (dG/dt)_frame + Ω × G`` (Batchelor 1967, An Introduction to Fluid Dynamics, §3.2,
from memory). With ``r`` from the point that moments are about, ``W_0, a_0`` velocity and
acceleration of the frame there, ``S = ∫ρ r dv``, ``L = ∫r × ρVr dv``, ``J`` the inertia tensor:

    d/dt ∫ρV dv     = (dP/dt)_frame + Ω × P + W_0 dM/dt + M a_0 + Ω × (dS/dt)_frame + Ω × (Ω × S)
    d/dt ∫r × ρV dv = (dL/dt)_frame + Ω × L + W_0 × Φ + S × a_0 + (dJ/dt)_frame Ω + Ω × JΩ

with ``Φ = ∮ r ρVr·n dA = P - (dS/dt)_frame``, which conservation of mass gives.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from fluxmesh.balance.setting import Setting
from fluxmesh.balance.storage import Storage
from fluxmesh.balance.weight import Fluid
from fluxmesh.balance.wrench import Vector
from fluxmesh.field.contents import Contents
from fluxmesh.field.frame import Frame
from fluxmesh.integral.table import IntegralTable

__all__ = ["FrameTerms", "Held", "frame_terms", "held_in", "mass_flow_moments", "storage_about"]

_UNKNOWN = np.full(3, np.nan)


@dataclass(frozen=True, eq=False)
class Held:
    """What the volume holds, for the terms of a moving frame; NaN where it is not known.

    Attributes
    ----------
    mass : float
        kg.
    centre : ndarray, shape (3,), float64
        Centre of mass, m.
    momentum : ndarray, shape (3,), float64
        Of the relative velocity, kg m/s.
    angular : ndarray, shape (3,), float64
        Of the relative velocity about `about`, kg m²/s.
    inertia : ndarray, shape (3, 3), float64
        ``∫ρ (r² I - r r) dv`` about `about`, kg m².
    about : ndarray, shape (3,), float64
        The point, m.
    """

    mass: float
    centre: Vector
    momentum: Vector
    angular: Vector
    inertia: Vector
    about: Vector


@dataclass(frozen=True, eq=False)
class FrameTerms:
    """What the motion of the frame adds, about one point.

    Attributes
    ----------
    flux, moment : ndarray, shape (n_groups, 3), float64
        Momentum of ``W`` carried out through each group, N, and its moment, N m.
    force, couple : ndarray, shape (3,), float64
        Rate of momentum and angular momentum inside, beyond that seen from the
        frame; N and N m. NaN where it is not known.
    drift_flux, drift_moment : ndarray, shape (n_groups, 3), float64
        The part of `flux` and `moment` that is due to the steady velocity alone.
    drift_force, drift_couple : ndarray, shape (3,), float64
        The same of `force` and `couple`; it cancels `drift_flux` where mass closes.
    axial : float
        Component of `couple` along the axis, which is known from the surface alone
        where the flow is steady in the frame, N m.
    """

    flux: Vector
    moment: Vector
    force: Vector
    couple: Vector
    drift_flux: Vector
    drift_moment: Vector
    drift_force: Vector
    drift_couple: Vector
    axial: float


def mass_flow_moments(table: IntegralTable, about: Vector) -> tuple[Vector, Vector]:
    """Return first and second moments of the mass flow of every group about a point.

    Parameters
    ----------
    table : IntegralTable
        The table.
    about : ndarray, shape (3,), float64
        The point, m.

    Returns
    -------
    first : ndarray, shape (n_groups, 3), float64
        ``∫r ρVr·n dA``, kg m/s.
    second : ndarray, shape (n_groups, 3, 3), float64
        ``∫r r ρVr·n dA``, kg m²/s.
    """
    flow, near = table.column("mass_flow"), table.column("mass_flow_position")
    square = table.column("mass_flow_square")[:, [[0, 5, 4], [5, 1, 3], [4, 3, 2]]]
    shift = table.origin - about
    crossed = shift[:, None] * near[:, None, :]
    second = square + crossed + crossed.transpose(0, 2, 1) + flow[:, None, None] * np.outer(shift, shift)
    return near + flow[:, None] * shift, second


def storage_about(storage: Storage, anchor: Vector, about: Vector) -> Storage:
    """Return the same rates, moments taken about another point.

    Parameters
    ----------
    storage : Storage
        Rates, moments about `anchor`.
    anchor, about : ndarray, shape (3,), float64
        The two points, m.

    Returns
    -------
    Storage
        Moments about `about`.
    """
    shift = anchor - about
    moment, inertia = storage.mass_moment, storage.inertia
    if inertia is not None and moment is not None:
        crossed = np.outer(shift, moment)
        inertia = inertia + crossed + crossed.T + storage.mass * np.outer(shift, shift)
    return replace(
        storage,
        angular_momentum=storage.angular_momentum + np.cross(shift, storage.momentum),
        mass_moment=None if moment is None else moment + storage.mass * shift,
        inertia=inertia,
    )


def held_in(
    table: IntegralTable,
    setting: Setting,
    fluid: Fluid | None,
    storage: Storage,
    contents: Contents | None,
    about: Vector,
) -> Held:
    """Return what the volume holds, from its contents or as far as the surface tells it.

    Parameters
    ----------
    table : IntegralTable
        The table.
    setting : Setting
        What is known where.
    fluid : Fluid or None
        The fluid held.
    storage : Storage
        Rates as seen from the frame.
    contents : Contents or None
        Integrals over the volume, of relative velocity.
    about : ndarray, shape (3,), float64
        The point that moments are about, m.

    Returns
    -------
    Held
        Without contents: mass and centre of the fluid; the momentum from the
        first moment of the mass flow ``P = Φ + dS/dt`` (conservation of mass), where all
        flows are known; angular momentum and inertia are not known.
    """
    nan = float("nan")
    mass, centre = (nan, _UNKNOWN) if fluid is None else (fluid.mass, fluid.centre)
    momentum, angular, inertia = _UNKNOWN, _UNKNOWN, np.full((3, 3), np.nan)
    if setting.closed and setting.data.flux[setting.ports()].all():
        momentum = mass_flow_moments(table, about)[0].sum(axis=0) + _moment_rate(storage)
    if contents is not None and contents.mass is not None:
        shift = contents.origin - about
        first = contents.mass_moment if contents.mass_moment is not None else _UNKNOWN
        mass, centre = contents.mass, contents.origin + first / contents.mass
        if contents.mass_inertia is not None:
            crossed = np.outer(shift, first)
            second = contents.mass_inertia + crossed + crossed.T + mass * np.outer(shift, shift)
            inertia = np.trace(second) * np.eye(3) - second
        if contents.momentum is not None and contents.moment_of_velocity is not None:
            momentum = contents.momentum
            near = contents.moment_of_velocity
            angular = np.array([near[1, 2] - near[2, 1], near[2, 0] - near[0, 2], near[0, 1] - near[1, 0]])
            angular = angular + np.cross(shift, momentum)
    return Held(mass, centre, momentum, angular, inertia, about)


def _moment_rate(storage: Storage) -> Vector:
    """Rate of the mass moment seen from the frame: zero where the mass stays and nothing says otherwise."""
    if storage.mass_moment is not None:
        return storage.mass_moment
    return np.zeros(3) if storage.mass == 0.0 else _UNKNOWN


def frame_terms(table: IntegralTable, frame: Frame, held: Held, storage: Storage) -> FrameTerms:
    """Return what the motion of the frame adds to fluxes and storage.

    Parameters
    ----------
    table : IntegralTable
        Fluxes by the relative velocity.
    frame : Frame
        The motion.
    held : Held
        What the volume holds; `FrameTerms` is about its point.
    storage : Storage
        Rates as seen from the frame.

    Returns
    -------
    FrameTerms
        Formulas as above.
    """
    about = held.about
    spin, here, drift = frame.spin, frame.at(about), np.asarray(frame.velocity, dtype=np.float64)
    accelerated = frame.acceleration_at(about)
    flow = table.column("mass_flow")
    first, second = mass_flow_moments(table, about)
    turning = np.trace(second, axis1=1, axis2=2)[:, None] * spin - second @ spin
    flux = flow[:, None] * here + np.cross(spin, first)
    moment = np.cross(first, here) + turning
    arm = held.mass * (held.centre - about)
    total = first.sum(axis=0)
    force = here * storage.mass
    couple = np.cross(here, total)
    if accelerated.any():
        force = force + held.mass * accelerated
        couple = couple + np.cross(arm, accelerated)
    axis = np.asarray(frame.axis, dtype=np.float64)
    axial = float(couple @ axis)
    if frame.turns:
        shifting = _moment_rate(storage)
        force = force + np.cross(spin, held.momentum) + np.cross(spin, shifting) + np.cross(spin, np.cross(spin, arm))
        swelling = _inertia_rate(storage) @ spin
        couple = couple + np.cross(spin, held.angular) + swelling + np.cross(spin, held.inertia @ spin)
        axial += float(swelling @ axis)
    return FrameTerms(
        flux=flux,
        moment=moment,
        force=force,
        couple=couple,
        drift_flux=flow[:, None] * drift,
        drift_moment=np.cross(first, drift),
        drift_force=drift * storage.mass,
        drift_couple=np.cross(drift, total),
        axial=axial,
    )


def _inertia_rate(storage: Storage) -> Vector:
    if storage.inertia is not None:
        return np.asarray(np.trace(storage.inertia) * np.eye(3) - storage.inertia)
    return np.zeros((3, 3)) if storage.mass == 0.0 else np.full((3, 3), np.nan)
