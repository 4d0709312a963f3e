"""Conservation of linear and angular momentum over the surface."""

from __future__ import annotations

from dataclasses import dataclass
from math import fsum

import numpy as np
from numpy.typing import NDArray

from fluxmesh.balance.frame import FrameTerms
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
        Weight of the fluid, and rate of the momentum contained; NaN where the
        rate is not known.
    drift_flux : ndarray, shape (n_groups, 3), float64, or None
        Part of `group_flux` that a steady velocity of the control surface carries.
    drift_storage : ndarray, shape (3,), float64, or None
        The same of `storage`.
    """

    group_flux: Vector
    group_pressure: Vector
    group_viscous: Vector
    weight: Vector
    storage: Vector
    drift_flux: Vector | None = None
    drift_storage: Vector | None = None

    @property
    def known(self) -> bool:
        """Whether the rate of what is contained is known, so that there is a residual."""
        return bool(np.isfinite(self.storage).all())

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
        """Return the sum of the lengths of all entries that should cancel.

        What the steady velocity of the control surface carries is not counted: it
        cancels where mass does, and would make any residual look small.
        """
        flux = self.group_flux if self.drift_flux is None else self.group_flux - self.drift_flux
        storage = self.storage if self.drift_storage is None else self.storage - self.drift_storage
        rows = np.concatenate([flux, self.group_pressure, self.group_viscous, self.weight[None], storage[None]])
        return fsum(np.nan_to_num(np.linalg.norm(rows, axis=1)).tolist())

    def along(self, axis: Vector, storage: float) -> Ledger:
        """Return the components along an axis, with the rate of what is contained along it.

        Parameters
        ----------
        axis : ndarray, shape (3,), float64
            Unit vector.
        storage : float
            Component of the rate along the axis.
        """

        def part(rows: Vector) -> Vector:
            return np.asarray((rows @ axis)[..., None] * axis)

        return Ledger(
            part(self.group_flux),
            part(self.group_pressure),
            part(self.group_viscous),
            part(self.weight),
            storage * axis,
            None if self.drift_flux is None else part(self.drift_flux),
            None if self.drift_storage is None else part(self.drift_storage),
        )

    def relative(self) -> float | None:
        """Return the residual's length over `size`; None when all entries are zero or one is not known."""
        size = self.size() if self.known else 0.0
        return float(np.linalg.norm(self.residual())) / size if size > 0 else None


def _sum(rows: Vector, groups: NDArray[np.bool_] | None) -> Vector:
    chosen = rows if groups is None else rows[groups]
    return np.array([fsum(column) for column in chosen.T.tolist()])


def momentum_ledger(table: IntegralTable, weight: Vector, storage: Vector, frame: FrameTerms | None = None) -> Ledger:
    """Return the ledger of linear momentum, of absolute velocity.

    Parameters
    ----------
    table : IntegralTable
        Fluxes by the relative velocity.
    weight : ndarray, shape (3,), float64
        Weight of the fluid, N.
    storage : ndarray, shape (3,), float64
        Rate of the momentum contained, as seen from the control surface, N.
    frame : FrameTerms, optional
        What its motion adds.
    """
    flux = table.column("momentum_flux")
    pressure, viscous = table.column("pressure_force"), table.column("viscous_force")
    if frame is None:
        return Ledger(flux, pressure, viscous, weight, storage)
    return Ledger(
        flux + frame.flux,
        pressure,
        viscous,
        weight,
        storage + frame.force,
        frame.drift_flux,
        frame.drift_force,
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


def angular_ledger(table: IntegralTable, weight: Wrench, storage: Vector, frame: FrameTerms | None = None) -> Ledger:
    """Return the ledger of angular momentum about the point of `weight`.

    Parameters
    ----------
    table : IntegralTable
        Fluxes by the relative velocity.
    weight : Wrench
        Weight of the fluid and its moment about the point wanted.
    storage : ndarray, shape (3,), float64
        Rate of the angular momentum contained, as seen from the control surface, N m.
    frame : FrameTerms, optional
        What its motion adds, about the same point.
    """
    about = weight.at
    flux = moments_about(table, "moment_of_momentum_flux", "momentum_flux", about)
    pressure = moments_about(table, "moment_of_pressure", "pressure_force", about)
    viscous = moments_about(table, "moment_of_viscous", "viscous_force", about)
    if frame is None:
        return Ledger(flux, pressure, viscous, weight.moment, storage)
    return Ledger(
        flux + frame.moment,
        pressure,
        viscous,
        weight.moment,
        storage + frame.couple,
        frame.drift_moment,
        frame.drift_couple,
    )
