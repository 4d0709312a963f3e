"""What undoes a suspected slip: factors and additions on the entries, one at a time or many side by side."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields
from typing import Final

import numpy as np
from numpy.typing import NDArray

__all__ = ["Change", "GroupFactor", "Knobs", "clash", "paired", "stacked"]


@dataclass(frozen=True)
class GroupFactor:
    """Factors on the entries of one group.

    Attributes
    ----------
    group : int
        Its number.
    mass, flux, pressure, viscous, shape : float
        On its mass flow, momentum flux, pressure, viscous force, and on its area vector,
        volume and weight.
    """

    group: int
    mass: float = 1.0
    flux: float = 1.0
    pressure: float = 1.0
    viscous: float = 1.0
    shape: float = 1.0


@dataclass(frozen=True)
class Change:
    """A change of the table, the setting or the storage that undoes a slip; nothing by default.

    Attributes
    ----------
    density, length, speed, supplied, traction, storage : float
        Factors on the density, on the coordinates, on exported velocities, on supplied velocities,
        on the viscous traction, and on the rates of what is inside.
    over_density, traction_over_density : int
        Power of the density that exported pressure and traction are multiplied with.
    dynamic : float
        How many dynamic pressures are added to the exported pressure.
    head : int
        How many hydrostatic heads are added to it.
    gravity : tuple of 3 floats or None
        Another gravity, m/s².
    levels : tuple of (int, float)
        Pressure added at groups, Pa.
    groups : tuple of GroupFactor
        Factors on the entries of groups.
    spread : bool
        Whether what mass lacks is spread over all flows in proportion to their size.
    """

    density: float = 1.0
    length: float = 1.0
    speed: float = 1.0
    supplied: float = 1.0
    traction: float = 1.0
    storage: float = 1.0
    over_density: int = 0
    traction_over_density: int = 0
    dynamic: float = 0.0
    head: int = 0
    gravity: tuple[float, float, float] | None = None
    levels: tuple[tuple[int, float], ...] = ()
    groups: tuple[GroupFactor, ...] = ()
    spread: bool = False

    def touched(self) -> frozenset[str]:
        """Return what is changed: two changes of one thing do not go together, but factors of groups do."""
        names = {each.name for each in fields(self) if getattr(self, each.name) != each.default}
        return frozenset(names - {"groups"})


_SCALARS: Final = ("density", "length", "speed", "supplied", "traction", "storage")
_POWERS: Final = ("over_density", "traction_over_density", "dynamic", "head")


@dataclass(frozen=True, eq=False)
class Knobs:
    """Many changes side by side.

    Attributes
    ----------
    scalars : ndarray, shape (n, 6), float64
        Density, length, speed, supplied, traction, storage: factors.
    powers : ndarray, shape (n, 4), float64
        Powers of density for pressure and traction, dynamic pressures and heads that are added.
    gravity : ndarray, shape (n, 3), float64
        NaN where it stays.
    levels : ndarray, shape (n, n_groups), float64
        Added pressure, Pa.
    factors : ndarray, shape (n, 5, n_groups), float64
        Mass, flux, pressure, viscous, shape.
    spread : ndarray of bool, shape (n,)
    """

    scalars: NDArray[np.float64]
    powers: NDArray[np.float64]
    gravity: NDArray[np.float64]
    levels: NDArray[np.float64]
    factors: NDArray[np.float64]
    spread: NDArray[np.bool_]

    def __len__(self) -> int:
        """Return the number of changes."""
        return int(self.scalars.shape[0])

    def with_density(self, factor: NDArray[np.float64]) -> Knobs:
        """Return the same with another factor on the density for each, shape (n,)."""
        scalars = self.scalars.copy()
        scalars[:, 0] = factor
        return Knobs(scalars, self.powers, self.gravity, self.levels, self.factors, self.spread)

    def rows(self, which: NDArray[np.int64] | slice) -> Knobs:
        """Return some of the changes."""
        return Knobs(
            self.scalars[which],
            self.powers[which],
            self.gravity[which],
            self.levels[which],
            self.factors[which],
            self.spread[which],
        )


def stacked(changes: Sequence[Change], groups: int) -> Knobs:
    """Return changes side by side.

    Parameters
    ----------
    changes : sequence of Change
        Any number.
    groups : int
        Number of groups.
    """
    count = len(changes)
    levels, factors = np.zeros((count, groups)), np.ones((count, 5, groups))
    gravity = np.full((count, 3), np.nan)
    for k, change in enumerate(changes):
        if change.gravity is not None:
            gravity[k] = change.gravity
        for group, level in change.levels:
            levels[k, group] += level
        for each in change.groups:
            factors[k, :, each.group] *= (each.mass, each.flux, each.pressure, each.viscous, each.shape)
    return Knobs(
        np.array([[getattr(change, name) for name in _SCALARS] for change in changes], dtype=float).reshape(count, 6),
        np.array([[getattr(change, name) for name in _POWERS] for change in changes], dtype=float).reshape(count, 4),
        gravity,
        levels,
        factors,
        np.array([change.spread for change in changes], dtype=np.bool_),
    )


def paired(knobs: Knobs, first: NDArray[np.int64], second: NDArray[np.int64], others: Knobs | None = None) -> Knobs:
    """Return pairs of changes that do not clash.

    Parameters
    ----------
    knobs : Knobs
        Single changes.
    first, second : ndarray, shape (m,), int64
        Which go together.
    others : Knobs, optional
        What `second` is taken from, where that is not `knobs`.
    """
    one, two = knobs.rows(first), (knobs if others is None else others).rows(second)
    return Knobs(
        one.scalars * two.scalars,
        one.powers + two.powers,
        np.where(np.isnan(one.gravity), two.gravity, one.gravity),
        one.levels + two.levels,
        one.factors * two.factors,
        one.spread | two.spread,
    )


def clash(changes: Sequence[Change]) -> NDArray[np.bool_]:
    """Return which changes touch the same thing, shape (n, n).

    Parameters
    ----------
    changes : sequence of Change
        Any number.
    """
    touched = [change.touched() for change in changes]
    names = sorted(frozenset().union(*touched))
    marks = np.array([[name in those for name in names] for those in touched], dtype=np.int64)
    marks = marks.reshape(len(changes), len(names))
    return np.asarray(marks @ marks.T > 0)
