"""Residuals of all laws under many changes at once: algebra on the entries."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.causes.change import Knobs
from fluxmesh.assess.causes.entries import DYNAMIC, HEAD, OWN, UNIT, Entries
from fluxmesh.assess.causes.facts import Source
from fluxmesh.field.pressure import Head, PressureKind

__all__ = ["Residuals", "evaluate"]

Array = NDArray[np.float64]

_SMALLEST_SHARE: Final = 1e-4  # as the verdict has it: forces count against this share of pressure times area at least
_ROUNDING: Final = 1e-9  # of pressure times area: what sums of a high level may lose in single precision, cancelled


@dataclass(frozen=True, eq=False)
class Residuals:
    """Residuals under n changes.

    Attributes
    ----------
    mass : ndarray, shape (n,), float64
        kg/s.
    wrench : ndarray, shape (n, 9), float64
        Linear momentum, and angular momentum about the anchor and about the origin of the table.
    mass_size : ndarray, shape (n,), float64
        Sum of the sizes of all flows, kg/s.
    sizes, strict : ndarray, shape (n, 3), float64
        What the three parts of `wrench` are measured by: as the verdict does, and with the mean
        pressure taken off, which a high level of pressure cannot make large.
    nets : dict of str to ndarray, shape (n, 9)
        Flux, pressure, viscous force, and weight with the head that was put back, summed over the surface. A dynamic
        pressure that was taken off or added counts with the flux: it goes as the flux does.
    gap : ndarray, shape (n,), float64
        Length of the sum of area vectors over the area.
    dynamic : ndarray, shape (n,), float64
        Dynamic pressure integrated over the area, N.
    lowest : ndarray, shape (n,), float64
        Least mean pressure of a group that has one, Pa; zero without any.
    """

    mass: Array
    wrench: Array
    mass_size: Array
    sizes: Array
    strict: Array
    nets: dict[str, Array]
    gap: Array
    dynamic: Array
    lowest: Array

    def mass_relative(self) -> Array:
        """Return the mass residual over the flows, shape (n,)."""
        return np.abs(self.mass) / np.where(self.mass_size > 0, self.mass_size, 1.0)

    def relative(self, *, strict: bool = False) -> Array:
        """Return the length of each momentum residual over its size, shape (n, 3)."""
        return np.asarray(_lengths(self.wrench[:, None]) / (self.strict if strict else self.sizes))

    def plus(self, mass: Array, wrench: Array) -> Residuals:
        """Return the residuals with something added to them; sizes stay.

        Parameters
        ----------
        mass : ndarray, shape (n,), float64
            kg/s.
        wrench : ndarray, shape (n, 9), float64
            As `wrench`.
        """
        return replace(self, mass=self.mass + mass, wrench=self.wrench + wrench)


def _speeds(entries: Entries, density: Array, length: Array, speed: Array, supplied: Array) -> tuple[Array, Array]:
    """Factors on the velocity and on the mass flow of each group, shape (n, n_groups)."""
    columns, masses = [], []
    ones = np.ones_like(density)
    for source in entries.facts.flow:
        factor, mass = ones, None
        if source is Source.ARRAY:
            factor = speed
        elif source is Source.MASS_FLUX:
            factor, mass = speed, ones
        elif source is Source.VELOCITY:
            factor = supplied
        elif source is Source.FLOW_RATE:
            factor = supplied / length**2
        elif source is Source.MASS_FLOW:
            factor = supplied / (density * length**2)
        columns.append(factor)
        masses.append(density * factor * length**2 if mass is None else mass)
    return np.stack(columns, axis=1), np.stack(masses, axis=1)


def evaluate(entries: Entries, knobs: Knobs) -> Residuals:
    """Return the residuals of all laws under many changes.

    Parameters
    ----------
    entries : Entries
        The laws.
    knobs : Knobs
        The changes.

    Returns
    -------
    Residuals
        Each momentum residual about a point that goes with the coordinates, where those are scaled.
    """
    density, length, speed, supplied, traction, stores = knobs.scalars.T
    factors = knobs.factors
    facts = entries.facts
    velocity, carried = _speeds(entries, density, length, speed, supplied)
    mass_factor = carried * factors[:, 0]
    mass = entries.mass * mass_factor
    solved = np.array([source is Source.CONTINUITY for source in facts.flow])
    if solved.any():
        mass, mass_factor, velocity = _solved(entries, mass, mass_factor, velocity, solved, density, length)
    size = (entries.mass_size * np.abs(mass_factor)).sum(axis=1) + abs(entries.stored_mass * stores)
    stored_mass = entries.stored_mass * stores
    spread = np.ones_like(mass)
    if knobs.spread.any():
        share = np.where(knobs.spread, (mass.sum(axis=1) + stored_mass) / np.maximum(size, 1e-300), 0.0)
        spread = 1.0 - share[:, None] * np.sign(mass)
        mass = mass * spread
    areal = (length**2)[:, None]
    given = np.array([source is Source.MASS_FLUX for source in facts.flow])
    flux_factor = np.where(given, velocity, density[:, None] * velocity**2 * areal) * spread**2 * factors[:, 1]
    arm = np.ones((len(knobs), 9))
    arm[:, 3:] = length[:, None]
    flux = (flux_factor[:, :, None] * entries.flux + mass_factor[:, :, None] * entries.swept) * arm[:, None]
    drift = mass_factor[:, :, None] * entries.drift * arm[:, None]
    pressure, restored, unit, swift = _pressure(entries, knobs, velocity, areal)
    dynamic = np.einsum("ng,gc->nc", _dynamic(entries, knobs, velocity) * areal * factors[:, 2],
                        entries.pressure[:, DYNAMIC, :9]) * arm  # fmt: skip
    spread_pressure, spread_unit = pressure[:, :, 9], unit[:, :, 9]
    whole_pressure = spread_pressure + restored[:, :, 9]
    acting = np.abs(whole_pressure).sum(axis=1) + swift
    # the strict size counts neither a level nor a restored head, which the weight takes up whatever it is
    mean = spread_pressure.sum(axis=1) / np.maximum(np.abs(spread_unit).sum(axis=1), 1e-300)
    uneven = (pressure - mean[:, None, None] * unit)[:, :, :9] * arm[:, None]
    swings = np.abs(spread_pressure - mean[:, None] * spread_unit).sum(axis=1)
    restored = restored[:, :, :9] * arm[:, None]
    pressure = pressure[:, :, :9] * arm[:, None] + restored
    powers = (entries.density * density[:, None]) ** knobs.powers[:, 1:2]
    viscous = (traction[:, None] * powers * areal * factors[:, 3])[:, :, None] * entries.viscous * arm[:, None]
    gravity = np.where(np.isnan(knobs.gravity), entries.gravity(), knobs.gravity)
    pull = entries.held * density[:, None] * gravity
    shared = np.einsum("ng,gkc->nkc", factors[:, 4], entries.weight)
    weight = np.einsum("nk,nkc->nc", pull, shared) * (length**3)[:, None] * arm
    stored = stores[:, None] * entries.stored + density[:, None] * entries.carried_along
    wrench = (flux + drift + pressure + viscous).sum(axis=1) + weight + stored
    still = stored - density[:, None] * entries.drift_stored
    area = np.abs(factors[:, 4]) * areal * entries.area
    whole = area.sum(axis=1)
    body = weight + restored.sum(axis=1)
    others = _lengths(flux) + _lengths(viscous) + _lengths(still[:, None])
    ordinary = others + _lengths(pressure) + _lengths(weight[:, None])
    strict = others + _lengths(uneven) + _lengths(body[:, None])
    least = _SMALLEST_SHARE * acting
    # a level of pressure must not hide what is left; round-off of it may
    least_strict = _SMALLEST_SHARE * (swings + swift) + _ROUNDING * acting
    radius = np.sqrt(whole / (4 * np.pi))
    vectors = np.einsum("ng,gk->nk", factors[:, 4], entries.area_vector)
    known = entries.balance.setting.data.pressure & (spread_unit > 0)
    return Residuals(
        mass=mass.sum(axis=1) + stored_mass,
        wrench=wrench,
        mass_size=size,
        sizes=_floored(ordinary, least, radius),
        strict=_floored(strict, least_strict, radius),
        nets={
            "flux": (flux + drift).sum(axis=1) + stored + dynamic,
            "pressure": pressure.sum(axis=1) - dynamic,
            "viscous": viscous.sum(axis=1),
            "weight": body,
        },
        gap=np.linalg.norm(vectors, axis=1) / max(float(entries.area.sum()), 1e-300),
        dynamic=swift / 2,
        lowest=np.min(np.where(known, whole_pressure, 0.0) / np.where(known, spread_unit, 1.0), axis=1, initial=0.0),
    )


def _solved(
    entries: Entries,
    mass: Array,
    mass_factor: Array,
    velocity: Array,
    solved: NDArray[np.bool_],
    density: Array,
    length: Array,
) -> tuple[Array, Array, Array]:
    """Solve the one flow that continuity gives anew."""
    k = int(np.flatnonzero(solved)[0])
    others = mass.sum(axis=1) - mass[:, k]
    base = entries.mass[k] if entries.mass[k] != 0.0 else 1.0
    factor = -others / base
    mass, mass_factor, velocity = mass.copy(), mass_factor.copy(), velocity.copy()
    mass[:, k], mass_factor[:, k] = -others, factor
    velocity[:, k] = factor / (density * length**2)
    return mass, mass_factor, velocity


def _pressure(entries: Entries, knobs: Knobs, velocity: Array, areal: Array) -> tuple[Array, Array, Array, Array]:
    """Pressure entries (n, groups, 10) but a restored head, that head, one pascal, and twice the dynamic pressure."""
    facts = entries.facts
    density, length = knobs.scalars[:, 0], knobs.scalars[:, 1]
    exported = facts.pressure_array
    power = knobs.powers[:, 0]
    kinematic = 1.0 if facts.kind is PressureKind.KINEMATIC else 0.0
    own = entries.density ** power[:, None] * (density ** (kinematic + power))[:, None]
    heads = (1.0 if facts.head is Head.REMOVED else 0.0) + knobs.powers[:, 3]
    gravity = np.where(np.isnan(knobs.gravity), entries.gravity(), knobs.gravity)
    slope = (entries.held * density * heads)[:, None] * gravity
    offset = length[:, None] * entries.balance.table.origin - np.asarray(facts.datum)
    factor = (areal * knobs.factors[:, 2])[:, :, None]
    weights = np.zeros((len(knobs), entries.count, 6))
    weights[:, :, OWN] = np.where(exported, own, 1.0)
    weights[:, :, UNIT] = knobs.levels
    weights[:, :, DYNAMIC] = _dynamic(entries, knobs, velocity)
    restored = np.zeros((len(knobs), entries.count, 6))
    restored[:, :, UNIT] = np.where(exported, np.einsum("nk,nk->n", slope, offset)[:, None], 0.0)
    restored[:, :, HEAD : HEAD + 3] = np.where(exported[:, None], (slope * length[:, None])[:, None], 0.0)
    made, head = (
        np.matmul((part * factor).transpose(1, 0, 2), entries.pressure).transpose(1, 0, 2)
        for part in (weights, restored)
    )
    unit = (np.abs(knobs.factors[:, 4]) * areal)[:, :, None] * entries.pressure[:, UNIT]
    swift = density[:, None] * velocity**2 * areal * entries.pressure[:, DYNAMIC, 9]
    return made, head, unit, 2 * np.abs(swift).sum(axis=1)


def _dynamic(entries: Entries, knobs: Knobs, velocity: Array) -> Array:
    """Factors on the dynamic pressure of each group that is added to the exported one, shape (n, n_groups)."""
    exported = entries.facts.pressure_array
    added = np.where(exported, knobs.powers[:, 2:3], 0.0) * knobs.scalars[:, :1]
    return np.asarray(added * velocity**2)


def _lengths(rows: Array) -> Array:
    """Sum over groups of the lengths of the three parts, shape (n, 3)."""
    blocks = rows.reshape(*rows.shape[:2], 3, 3)
    return np.asarray(np.sqrt(np.einsum("ngbk,ngbk->ngb", blocks, blocks)).sum(axis=1))


def _floored(sizes: Array, least: Array, radius: Array) -> Array:
    forces = np.maximum(sizes[:, 0], least)
    moments = np.maximum(sizes[:, 1:], (radius * forces)[:, None])
    return np.asarray(np.maximum(np.concatenate([forces[:, None], moments], axis=1), 1e-300))
