"""How fast what the volume holds changes: given, from snapshots of the volume, or from exports of its surface."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from math import fsum
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fluxmesh.balance.wrench import Vector
from fluxmesh.errors import FieldError
from fluxmesh.field.contents import Contents, contents_about
from fluxmesh.integral.table import IntegralTable

__all__ = [
    "Storage",
    "momentum_from_surface",
    "rate_order",
    "rate_weights",
    "storage_from_contents",
    "storage_from_momentum",
    "unknown_storage",
]

# two times count as the middle when `at` is off it by no more than this share of their distance
_MIDDLE: Final = 1e-6


def _zeros() -> Vector:
    return np.zeros(3)


@dataclass(frozen=True, eq=False)
class Storage:
    """Rates of what the volume holds, seen from the frame of the control surface; all zero for a steady flow.

    Velocities are relative to the surface. A NaN entry of a vector is a rate
    that is not known.

    Attributes
    ----------
    mass : float
        Rate of ``∫ρ dv``, kg/s.
    momentum : ndarray, shape (3,), float64
        Rate of ``∫ρVr dv``, N.
    angular_momentum : ndarray, shape (3,), float64
        Rate of ``∫r × ρVr dv`` about the anchor, N m.
    energy : float or None
        Rate of the kinetic and internal energy, W; None when it is not known.
    mass_moment : ndarray, shape (3,), float64, or None
        Rate of ``∫ρ r dv``, r from the anchor, kg m/s; None when it is not known.
    inertia : ndarray, shape (3, 3), float64, or None
        Rate of ``∫ρ r_i r_j dv``, r from the anchor, kg m²/s; None when it is
        not known.
    carried : dict of str to float
        Rates of what the flow carries, by name.
    basis : str
        "given", "snapshots" or "surface".
    notes : tuple of str
        How the rates were found and what they leave out, one sentence each.
    """

    mass: float = 0.0
    momentum: Vector = field(default_factory=_zeros)
    angular_momentum: Vector = field(default_factory=_zeros)
    energy: float | None = None
    mass_moment: Vector | None = None
    inertia: Vector | None = None
    carried: Mapping[str, float] = field(default_factory=dict)
    basis: str = "given"
    notes: tuple[str, ...] = ()


def unknown_storage(reason: str, *, basis: str = "snapshots") -> Storage:
    """Return a storage of which nothing is known.

    Parameters
    ----------
    reason : str
        Why, one sentence without a full stop.
    basis : str, optional
        Where it was looked for.
    """
    nothing = np.full(3, np.nan)
    return Storage(float("nan"), nothing, nothing.copy(), basis=basis, notes=(reason,))


def _required_times(times: ArrayLike, at: float) -> NDArray[np.float64]:
    """Times as an array; an error unless they rise and `at` is among them or between them."""
    instants = np.asarray(times, dtype=np.float64)
    if instants.ndim != 1 or instants.size < 2:
        raise FieldError(
            f"{instants.size} instant is given" if instants.size == 1 else "no instants are given",
            remedy="A rate needs the flow at two instants or more",
        )
    if not np.isfinite(instants).all():
        raise FieldError("a time is no finite number", remedy="Give times in seconds")
    falls = np.flatnonzero(np.diff(instants) <= 0)
    if falls.size:
        k = int(falls[0])
        raise FieldError(
            f"the times do not rise: number {k + 1} is {instants[k]:.12g} s and number {k + 2} is "
            f"{instants[k + 1]:.12g} s",
            remedy="List the snapshots in the order of time, each time once",
        )
    if not instants[0] <= at <= instants[-1]:
        raise FieldError(
            f"a rate at {at:.12g} s is asked for, and the snapshots reach from {instants[0]:.12g} s to "
            f"{instants[-1]:.12g} s",
            remedy="Give a snapshot on either side, or at that time",
        )
    return instants


def rate_weights(times: ArrayLike, at: float) -> NDArray[np.float64]:
    """Return the weights that make a rate out of values at some times.

    Parameters
    ----------
    times : array_like, shape (n,), n >= 2
        Strictly rising, s; the steps may be uneven.
    at : float
        When the rate is wanted, s; from the first time to the last.

    Returns
    -------
    ndarray, shape (n,), float64
        1/s; their sum is zero. The rate is the slope at `at` of the parabola
        through the three nearest times (Lagrange's form; Fornberg 1988, Math.
        Comp. 51, 699-706, from memory): of second order on uneven steps, and
        one-sided at either end. With two times it is the slope of the line
        between them, of second order in their middle only.

    Raises
    ------
    FieldError
        Fewer than two times, times that do not rise (the message names the
        first pair), or a time outside them.
    """
    instants = _required_times(times, at)
    weights = np.zeros(instants.size)
    if instants.size == 2:
        weights[:] = np.array([-1.0, 1.0]) / (instants[1] - instants[0])
        return weights
    # the nearest of a rising row stand side by side
    near = np.sort(np.argsort(np.abs(instants - at), kind="stable")[:3])
    a, b, c = instants[near]
    first = ((at - b) + (at - c)) / ((a - b) * (a - c))
    last = ((at - a) + (at - b)) / ((c - a) * (c - b))
    weights[near] = first, -(first + last), last
    return weights


def rate_order(times: ArrayLike, at: float) -> int:
    """Return the order in the time step of the rate that `rate_weights` makes.

    Parameters
    ----------
    times : array_like, shape (n,)
        As for `rate_weights`.
    at : float
        When the rate is wanted, s.

    Returns
    -------
    int
        2, but 1 for two times with `at` off their middle.

    Raises
    ------
    FieldError
        As for `rate_weights`.
    """
    instants = _required_times(times, at)
    middle = (instants[0] + instants[-1]) / 2
    off = abs(at - middle) > _MIDDLE * (instants[-1] - instants[0])
    return 1 if instants.size == 2 and off else 2


def storage_from_contents(
    times: ArrayLike,
    contents: Sequence[Contents],
    at: float,
    anchor: Sequence[float] | Vector,
    *,
    mechanical: bool = False,
) -> Storage:
    """Return the rates of what a volume holds from its contents at some times.

    Parameters
    ----------
    times : array_like, shape (n,), n >= 2
        Strictly rising, s.
    contents : sequence of Contents, length n
        Of one and the same volume, with velocities relative to the control
        surface.
    at : float
        When the rates are wanted, s; from the first time to the last.
    anchor : sequence of 3 floats
        Point that angular momentum, first moment and inertia are about, m.
    mechanical : bool, optional
        Whether the internal energy, where it is not known, does not change: so
        in the mechanical energy of a fluid of one density.

    Returns
    -------
    Storage
        Of the basis "snapshots". What a snapshot does not tell is NaN or None.

    Raises
    ------
    FieldError
        As for `rate_weights`; or a number of contents that is not that of the
        times.
    """
    weights = rate_weights(times, at)
    if len(contents) != weights.size:
        raise FieldError(f"{weights.size} times are given, and the contents at {len(contents)}")
    instants = np.asarray(times, dtype=np.float64)
    used = np.flatnonzero(weights)
    origin = np.asarray(contents[int(used[0])].origin, dtype=np.float64)
    shift = origin - np.asarray(anchor, dtype=np.float64)
    held = [contents_about(contents[int(k)], origin) for k in used]

    def rate(values: Sequence[ArrayLike | None]) -> Vector | None:
        if any(value is None for value in values):
            return None
        return _combined(weights[used], np.array(values, dtype=np.float64))

    mass = rate([one.mass for one in held])
    momentum = rate([one.momentum for one in held])
    turning = rate([one.angular_momentum for one in held])
    first = rate([one.mass_moment for one in held])
    second = rate([one.mass_inertia for one in held])
    energy = rate([_energy(one, mechanical) for one in held])
    nothing = np.full(3, np.nan)
    inertia = None
    if second is not None and first is not None and mass is not None:
        inertia = second + np.outer(shift, first) + np.outer(first, shift) + np.outer(shift, shift) * mass
    names = sorted(set.intersection(*(set(one.carried) for one in held)))
    rows = np.array([[one.carried[name] for name in names] for one in held])
    return Storage(
        mass=float("nan") if mass is None else float(mass),
        momentum=nothing if momentum is None else momentum,
        angular_momentum=nothing if turning is None or momentum is None else turning + np.cross(shift, momentum),
        energy=None if energy is None else float(energy),
        mass_moment=None if first is None or mass is None else first + shift * mass,
        inertia=inertia,
        carried=dict(zip(names, _combined(weights[used], rows).tolist())),
        basis="snapshots",
        notes=(_said(instants, weights, at),),
    )


def _combined(weights: NDArray[np.float64], rows: Vector) -> Vector:
    """Weighted sum over the first direction, for weights that add up to zero."""
    # taking off the first row keeps the digits of a small change of something large
    terms = (weights * (rows - rows[0]).T).T.reshape(len(weights), -1)
    return np.array([fsum(column) for column in terms.T.tolist()]).reshape(rows.shape[1:])


def _energy(one: Contents, mechanical: bool) -> float | None:
    internal = 0.0 if one.internal_energy is None and mechanical else one.internal_energy
    return None if one.kinetic_energy is None or internal is None else one.kinetic_energy + internal


def _said(instants: NDArray[np.float64], weights: NDArray[np.float64], at: float) -> str:
    """How a rate was found, in one sentence."""
    used = np.flatnonzero(weights)
    listed = ", ".join(f"{t:.6g}" for t in instants[used])
    text = f"Storage at {at:.6g} s is the rate of what the snapshots at {listed} s hold"
    if rate_order(instants, at) == 1:
        text += ", of first order in the time step only: a third snapshot, or a time in the middle, makes it second"
    return text


def momentum_from_surface(table: IntegralTable, centre: Vector) -> Vector:
    """Return the momentum inside a closed surface, of a fluid of one density.

    Parameters
    ----------
    table : IntegralTable
        Table of the closed surface, whose flow has one density everywhere.
    centre : ndarray, shape (3,), float64
        Point that positions count from, m: near the middle, a mass balance that does
        not quite close costs least there.

    Returns
    -------
    ndarray, shape (3,), float64
        ``∫ρVr dv = ∮ x ρVr·n dA``, kg m/s (Gauss' theorem on ``∇·(x ρVr)``
        with ``∇·Vr = 0``). It holds at every instant, and for the relative
        velocity too, because a surface that keeps its shape moves without
        divergence.
    """
    away = table.origin - np.asarray(centre, dtype=np.float64)
    return table.total("mass_flow_position") + away * float(table.total("mass_flow"))


def storage_from_momentum(times: ArrayLike, momenta: ArrayLike, at: float) -> Storage:
    """Return the rates of a fluid of one density from its momentum at some times.

    Parameters
    ----------
    times : array_like, shape (n,), n >= 2
        Strictly rising, s.
    momenta : array_like, shape (n, 3)
        From `momentum_from_surface`, kg m/s.
    at : float
        When the rates are wanted, s.

    Returns
    -------
    Storage
        Of the basis "surface". Mass and its moments do not change, since one density
        fills one volume; angular momentum and energy are not known.

    Raises
    ------
    FieldError
        As for `rate_weights`.
    """
    instants = np.asarray(times, dtype=np.float64)
    weights = rate_weights(instants, at)
    rows = np.asarray(momenta, dtype=np.float64)
    if rows.shape != (weights.size, 3):
        raise FieldError(f"{weights.size} times are given, and momenta of the shape {rows.shape}")
    listed = ", ".join(f"{t:.6g}" for t in instants[np.flatnonzero(weights)])
    said = (
        f"Storage at {at:.6g} s is the rate of the momentum that the surfaces at {listed} s tell of, "
        "for a fluid of one density; those of angular momentum and energy are not known"
    )
    if rate_order(instants, at) == 1:
        said += "; it is of first order in the time step only"
    return Storage(
        momentum=_combined(weights, rows),
        angular_momentum=np.full(3, np.nan),
        mass_moment=np.zeros(3),
        inertia=np.zeros((3, 3)),
        basis="surface",
        notes=(said,),
    )
