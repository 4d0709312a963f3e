"""Conservation of linear and angular momentum over the surface."""

from __future__ import annotations

from dataclasses import dataclass
from math import fsum

import numpy as np
from numpy.typing import NDArray

from fluxmesh.balance.wrench import Vector, Wrench
from fluxmesh.integral.table import IntegralTable

__all__ = ["Ledger", "angular_ledger", "moments_about", "momentum_ledger"]


@dataclass(frozen=True, eq=False)
class Ledger:
    """Entries of one momentum law, group by group, and what is left.

    ``storage + flux = pressure + viscous + weight`` for the whole closed surface.

    Attributes
    ----------
    group_flux, group_pressure, group_viscous : ndarray, shape (n_groups, 3), float64
        Flux of momentum OUT through each group; pressure and viscous force ON
        THE FLUID at each group; N, or N m for angular momentum.
    weight, storage : ndarray, shape (3,), float64
        Weight of the fluid, and rate of the momentum contained.
    """

    group_flux: Vector
    group_pressure: Vector
    group_viscous: Vector
    weight: Vector
    storage: Vector

    def flux(self, groups: NDArray[np.bool_] | None = None) -> Vector:
        """Return the flux summed over all groups, or over some."""
        return _sum(self.group_flux, groups)

    def pressure(self, groups: NDArray[np.bool_] | None = None) -> Vector:
        """Return the pressure entry summed over all groups, or over some."""
        return _sum(self.group_pressure, groups)

    def viscous(self, groups: NDArray[np.bool_] | None = None) -> Vector:
        """Return the viscous entry summed over all groups, or over some."""
        return _sum(self.group_viscous, groups)

    def residual(self) -> Vector:
        """Return left side minus right side, shape (3,)."""
        rows = np.concatenate(
            [
                self.group_flux,
                -self.group_pressure,
                -self.group_viscous,
                -self.weight[None],
                self.storage[None],
            ]
        )
        return _sum(rows, None)

    def size(self) -> float:
        """Return the sum of the lengths of all entries that should cancel."""
        rows = np.concatenate(
            [self.group_flux, self.group_pressure, self.group_viscous, self.weight[None], self.storage[None]]
        )
        return fsum(np.linalg.norm(rows, axis=1).tolist())

    def relative(self) -> float | None:
        """Return the residual's length over `size`; None when all entries are zero."""
        size = self.size()
        return float(np.linalg.norm(self.residual())) / size if size > 0 else None


def _sum(rows: Vector, groups: NDArray[np.bool_] | None) -> Vector:
    chosen = rows if groups is None else rows[groups]
    return np.array([fsum(column) for column in chosen.T.tolist()])


def momentum_ledger(table: IntegralTable, weight: Vector, storage: Vector | None = None) -> Ledger:
    """Return the ledger of linear momentum.

    Parameters
    ----------
    table : IntegralTable
        The table.
    weight : ndarray, shape (3,), float64
        Weight of the fluid, N.
    storage : ndarray, shape (3,), float64, optional
        Rate of the momentum contained, N.
    """
    return Ledger(
        table.column("momentum_flux"),
        table.column("pressure_force"),
        table.column("viscous_force"),
        weight,
        np.zeros(3) if storage is None else storage,
    )


def moments_about(table: IntegralTable, moment: str, force: str, about: Vector) -> Vector:
    """Return the moments of an entry of all groups about a point.

    Parameters
    ----------
    table : IntegralTable
        The table, whose moments are about its near origin.
    moment, force : str
        Names of the entry's moment and of its force in the table.
    about : ndarray, shape (3,), float64
        The point, m.

    Returns
    -------
    ndarray, shape (n_groups, 3), float64
        N m.
    """
    return table.column(moment) + np.cross(table.origin - about, table.column(force))


def angular_ledger(table: IntegralTable, weight: Wrench, storage: Vector | None = None) -> Ledger:
    """Return the ledger of angular momentum about the point of `weight`.

    Parameters
    ----------
    table : IntegralTable
        The table.
    weight : Wrench
        Weight of the fluid and its moment about the point wanted.
    storage : ndarray, shape (3,), float64, optional
        Rate of the angular momentum contained, N m.
    """
    about = weight.at
    return Ledger(
        moments_about(table, "moment_of_momentum_flux", "momentum_flux", about),
        moments_about(table, "moment_of_pressure", "pressure_force", about),
        moments_about(table, "moment_of_viscous", "viscous_force", about),
        weight.moment,
        np.zeros(3) if storage is None else storage,
    )
