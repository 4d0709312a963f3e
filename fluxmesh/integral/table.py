"""The additive table: group by basis integral.

Pieces of a surface add up to the whole, and every law is algebra on this
table: nothing after it touches the faces again. Positions are taken about a
near `origin`, so that a surface far from the coordinate origin loses no digits.

With ``x`` the position about `origin`, ``n`` the unit normal out of the fluid,
``V`` the velocity relative to the surface, ``rho`` the density, ``p`` the pressure and ``t`` the viscous
traction on the fluid, the basis integrals are those listed in `BASIS`.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import fsum
from typing import Final

import numpy as np
from numpy.typing import NDArray

__all__ = ["BASIS", "BLOCKS", "WIDTH", "IntegralTable", "column_slice", "symmetric_index"]

# name -> (block, number of components, integrand, unit); the order is the layout.
BASIS: Final[dict[str, tuple[str, int, str, str]]] = {
    "area": ("geometry", 1, "1", "m^2"),
    "area_vector": ("geometry", 3, "n", "m^2"),
    "position": ("geometry", 3, "x", "m^3"),
    "position_normal": ("geometry", 9, "x_i n_j", "m^3"),
    "square_normal": ("geometry", 18, "x_k x_l n_j, kl in xx yy zz yz xz xy", "m^4"),
    "pressure_force": ("pressure", 3, "-p n", "N"),
    "moment_of_pressure": ("pressure", 3, "-x × p n", "N m"),
    "pressure_area": ("pressure", 1, "p", "N"),
    "viscous_force": ("traction", 3, "t", "N"),
    "moment_of_viscous": ("traction", 3, "x × t", "N m"),
    "density_area": ("density", 1, "rho", "kg/m"),
    "mass_flow": ("flow", 1, "rho V·n", "kg/s"),
    "volume_flow": ("flow", 1, "V·n", "m^3/s"),
    "momentum_flux": ("flow", 3, "rho V (V·n)", "N"),
    "moment_of_momentum_flux": ("flow", 3, "x × rho V (V·n)", "N m"),
    "kinetic_energy_flux": ("flow", 1, "rho V²/2 (V·n)", "W"),
    "reversed_mass_flow": ("flow", 1, "rho max(-V·n, 0)", "kg/s"),
    "normal_momentum": ("flow", 1, "rho (V·n)²", "N"),
    "velocity_area": ("flow", 3, "V", "m^3/s"),
    "speed_area": ("flow", 1, "|V|", "m^3/s"),
    "dynamic_pressure_area": ("flow", 1, "rho V²/2", "N"),
    "dynamic_pressure_force": ("flow", 3, "-rho V²/2 n", "N"),
    "moment_of_dynamic_pressure": ("flow", 3, "-x × rho V²/2 n", "N m"),
    "dynamic_pressure_mass_flow": ("flow", 1, "rho V²/2 rho V·n", "Pa kg/s"),
    "pressure_volume_flow": ("flow", 1, "p V·n", "W"),
    "pressure_mass_flow": ("flow", 1, "p rho V·n", "Pa kg/s"),
    "viscous_power": ("flow", 1, "t·V", "W"),
    "mass_flow_position": ("flow", 3, "x rho V·n", "kg m/s"),
    "mass_flow_square": ("flow", 6, "x_k x_l rho V·n, kl in xx yy zz yz xz xy", "kg m^2/s"),
}
"""Layout of the table: block, components, integrand and unit of each entry."""


def _slices() -> dict[str, slice]:
    start = 0
    slices = {}
    for name, (_, components, _, _) in BASIS.items():
        slices[name] = slice(start, start + components)
        start += components
    return slices


_SLICES: Final = _slices()
WIDTH: Final[int] = max(piece.stop for piece in _SLICES.values())
"""Number of columns."""


def _blocks() -> dict[str, slice]:
    found: dict[str, slice] = {}
    for name, (block, *_) in BASIS.items():
        start = found[block].start if block in found else _SLICES[name].start
        found[block] = slice(start, _SLICES[name].stop)
    return found


BLOCKS: Final[dict[str, slice]] = _blocks()
"""Columns that are computed together."""


def column_slice(name: str) -> slice:
    """Return the columns of one basis integral.

    Parameters
    ----------
    name : str
        A key of `BASIS`.

    Returns
    -------
    slice
        Its columns.
    """
    return _SLICES[name]


def symmetric_index(k: int, m: int) -> int:
    """Return where the pair ``(k, m)`` stands in the order xx yy zz yz xz xy.

    Parameters
    ----------
    k, m : int
        Component numbers, 0 to 2, in either order.

    Returns
    -------
    int
        0 to 5.
    """
    return k if k == m else 6 - k - m


@dataclass(frozen=True, eq=False)
class IntegralTable:
    """Basis integrals of every group.

    Attributes
    ----------
    values : ndarray, shape (n_groups, WIDTH), float64
        One row a group, columns as in `BASIS`, SI units. Each value is the
        correctly rounded sum of its face integrals.
    origin : ndarray, shape (3,), float64
        Point that positions and moments are taken about, in metres.
    """

    values: NDArray[np.float64]
    origin: NDArray[np.float64]

    def column(self, name: str) -> NDArray[np.float64]:
        """Return one basis integral for every group.

        Parameters
        ----------
        name : str
            A key of `BASIS`.

        Returns
        -------
        ndarray, shape (n_groups,) or (n_groups, components), float64
            In the unit that `BASIS` states.
        """
        piece = self.values[:, _SLICES[name]]
        return piece[:, 0] if BASIS[name][1] == 1 else piece

    def total(self, name: str, groups: NDArray[np.bool_] | None = None) -> NDArray[np.float64]:
        """Return the sum over groups of one basis integral, correctly rounded.

        Parameters
        ----------
        name : str
            A key of `BASIS`.
        groups : ndarray of bool, shape (n_groups,), optional
            Which groups to add; all by default.

        Returns
        -------
        ndarray, shape () or (components,), float64
            In the unit that `BASIS` states.
        """
        piece = self.values[:, _SLICES[name]]
        if groups is not None:
            piece = piece[groups]
        sums = np.array([fsum(column) for column in piece.T])
        return sums[0] if BASIS[name][1] == 1 else sums
