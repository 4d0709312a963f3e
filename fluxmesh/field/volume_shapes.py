"""Shape functions of volume cells, and which point of a cell lies at a place.

A cell maps parametric coordinates to space with its shape functions, and its
node values the same way (isoparametric cells: O. C. Zienkiewicz, R. L. Taylor,
The Finite Element Method, from memory). VTK inverts the map of curved and
warped cells to a few digits only; Newton's method here takes it to round-off.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from functools import cache
from typing import Final

import numpy as np
from numpy.typing import NDArray

__all__ = ["CellMap", "cell_map", "outside_tetrahedra"]

# Cells whose shape functions are polynomials of at most degree 2 in each parametric coordinate,
# by the numbers of the open VTK file format: those with triangular sections, and the others.
_SUM_OF_THREE: Final = frozenset([10, 24])
_SUM_OF_TWO: Final = frozenset([13, 26, 31, 32])
_BOX: Final = frozenset([11, 12, 14, 25, 27, 29, 33])
_NODES: Final = 4  # places an axis that the polynomials are fitted to; 3 would do


@dataclass(frozen=True, eq=False)
class CellMap:
    """Shape functions of one type of cell, as polynomials of s = 2 r - 1.

    Attributes
    ----------
    size : int
        Number of nodes.
    powers : ndarray, shape (n_terms, 3), int64
        Powers of the three parametric coordinates in each term.
    factors : ndarray, shape (n_terms, 4 * size), float64
        Factor of each term in each shape function, then in their derivatives
        by the three coordinates r.
    summed : int
        The first 2 or 3 coordinates r add up to at most 1 in the cell; 0: to
        anything.
    """

    size: int
    powers: NDArray[np.int64]
    factors: NDArray[np.float64]
    summed: int

    def shape_functions(self, at: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Return the shape functions and their derivatives at some places.

        Parameters
        ----------
        at : ndarray, shape (m, 3), float64
            Parametric coordinates.

        Returns
        -------
        values : ndarray, shape (m, size), float64
            They sum to 1.
        slopes : ndarray, shape (m, 3, size), float64
            By each parametric coordinate.
        """
        every = (self._terms(at) @ self.factors).reshape(-1, 4, self.size)
        return np.ascontiguousarray(every[:, 0]), np.ascontiguousarray(every[:, 1:])

    def degrees(self) -> tuple[int, int]:
        """Return the degrees of the shape functions.

        Returns
        -------
        together : int
            In the coordinates that add up to at most 1; 0 where there are none.
        alone : int
            In each of the others; 0 where there are none.
        """
        powers = self.powers[self.factors[:, : self.size].any(axis=1)]
        together = int(powers[:, : self.summed].sum(axis=1).max()) if self.summed else 0
        return together, int(powers[:, self.summed :].max(initial=0))

    def values(self, at: NDArray[np.float64], nodes: NDArray[np.float64]) -> NDArray[np.float64]:
        """Interpolate node values.

        Parameters
        ----------
        at : ndarray, shape (m, 3), float64
            Parametric coordinates, 0 to 1 in the cell.
        nodes : ndarray, shape (m, size, k), float64
            Node values of the cell of each.

        Returns
        -------
        ndarray, shape (m, k), float64
            Values.
        """
        weights = self._terms(at) @ self.factors[:, : self.size]
        return np.asarray(np.matmul(weights[:, None], nodes)[:, 0])

    def invert(
        self, nodes: NDArray[np.float64], places: NDArray[np.float64], *, steps: int = 25
    ) -> tuple[NDArray[np.float64], NDArray[np.bool_]]:
        """Find the parametric coordinates of places, by Newton's method from the middle of each cell.

        Parameters
        ----------
        nodes : ndarray, shape (m, size, 3), float64
            Nodes of the cell that each place lies in or near.
        places : ndarray, shape (m, 3), float64
            Places, in the same unit.
        steps : int, optional
            Most steps.

        Returns
        -------
        at : ndarray, shape (m, 3), float64
            Parametric coordinates.
        found : ndarray, shape (m,), bool
            Whether the steps came to rest.
        """
        middle = {0: (0.5, 0.5, 0.5), 2: (1 / 3, 1 / 3, 0.5), 3: (0.25, 0.25, 0.25)}[self.summed]
        at = np.tile(middle, (places.shape[0], 1))
        found = np.zeros(places.shape[0], dtype=np.bool_)
        active = np.arange(places.shape[0])
        # about a near origin, so that small cells far from the origin keep their digits
        places, nodes = places - nodes[:, 0], nodes - nodes[:, :1]
        for _ in range(steps):
            if not active.size:
                break
            here = at[active]
            weights = (self._terms(here) @ self.factors).reshape(-1, 4, self.size)
            mapped = np.matmul(weights, nodes if active.size == nodes.shape[0] else nodes[active])
            short, (a, b, c) = places[active] - mapped[:, 0], np.moveaxis(mapped[:, 1:], 1, 0)
            # Cramer's rule: rows of the inverse of [a b c] are b x c, c x a, a x b over the volume
            rows = np.stack([np.cross(b, c), np.cross(c, a), np.cross(a, b)], axis=1)
            volume = np.einsum("mk,mk->m", a, rows[:, 0])
            sound = volume != 0
            step = np.einsum("mrk,mk->mr", rows, short) / np.where(sound, volume, 1.0)[:, None]
            length = np.abs(step).max(axis=1)
            # a long step leads away from where the map can be trusted
            full = step
            step = full * np.minimum(1.0, 0.5 / np.maximum(length, 0.5))[:, None]
            at[active] = np.clip(here + step, -1.0, 2.0)
            if self.size == 4:  # the map of a straight tetrahedron is linear: one step is all of it
                at[active] = here + full
                found[active] = sound
                break
            # Newton's steps shrink quadratically: after one of 1e-8 what is left is round-off
            rest = sound & (length < 1e-8)
            found[active[rest]] = True
            active = active[sound & ~rest]
        return at, found

    def outside(self, at: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return how far parametric coordinates lie outside the cell.

        Parameters
        ----------
        at : ndarray, shape (m, 3), float64
            Parametric coordinates.

        Returns
        -------
        ndarray, shape (m,), float64
            0 in the cell, in parts of its size.
        """
        over = np.maximum(-at.min(axis=1), at.max(axis=1) - 1.0)
        if self.summed:
            over = np.maximum(over, at[:, : self.summed].sum(axis=1) - 1.0)
        return np.asarray(np.maximum(over, 0.0))

    def clamp(self, at: NDArray[np.float64]) -> NDArray[np.float64]:
        """Move parametric coordinates into the cell.

        Parameters
        ----------
        at : ndarray, shape (m, 3), float64
            Parametric coordinates.

        Returns
        -------
        ndarray, shape (m, 3), float64
            Those in the cell unchanged.
        """
        clamped = np.clip(at, 0.0, 1.0)
        if self.summed:
            total = clamped[:, : self.summed].sum(axis=1, keepdims=True)
            clamped[:, : self.summed] /= np.maximum(total, 1.0)
        return np.asarray(clamped)

    def _terms(self, at: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the terms, shape (m, n_terms)."""
        s = 2 * at - 1
        table = np.stack([np.ones_like(s), s, s**2])
        x, y, z = self.powers.T
        return np.asarray((table[x, :, 0] * table[y, :, 1] * table[z, :, 2]).T)


def outside_tetrahedra(
    points: NDArray[np.float64], rows: NDArray[np.int64], places: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return how far outside straight tetrahedra places lie.

    Parameters
    ----------
    points : ndarray, shape (3, n_points), float64
        Coordinates, an axis a row.
    rows : ndarray, shape (m, 4), int64
        Nodes of the tetrahedron of each place.
    places : ndarray, shape (m, 3), float64
        Places, in the same unit.

    Returns
    -------
    ndarray, shape (m,), float64
        As `CellMap.outside`: what the least barycentric coordinate is below 0.
        Infinite for a tetrahedron without volume.
    """
    # axis by axis, in columns: many times quicker than rows of three
    first = [axis[rows[:, 0]] for axis in points]
    place = [places[:, k] - first[k] for k in range(3)]
    edges = [[points[k][rows[:, node]] - first[k] for k in range(3)] for node in (1, 2, 3)]
    volume, rest, least = np.zeros(0), np.ones(rows.shape[0]), np.zeros(rows.shape[0])
    for turn in range(3):
        a, b, c = (edges[(turn + step) % 3] for step in range(3))
        normal = [b[1] * c[2] - b[2] * c[1], b[2] * c[0] - b[0] * c[2], b[0] * c[1] - b[1] * c[0]]
        if turn == 0:
            volume = a[0] * normal[0] + a[1] * normal[1] + a[2] * normal[2]
            volume[volume == 0] = np.nan
        share = (place[0] * normal[0] + place[1] * normal[1] + place[2] * normal[2]) / volume
        rest -= share
        np.minimum(least, share, out=least)
    outside = -np.minimum(least, rest)
    outside[np.isnan(outside)] = np.inf
    return np.asarray(outside)


@cache
def cell_map(number: int) -> CellMap | None:
    """Return the shape functions of a cell type, fitted to VTK's own.

    Parameters
    ----------
    number : int
        Type of the cell in the open VTK file format.

    Returns
    -------
    CellMap or None
        None for polyhedra, cells of any order, and others whose shape
        functions are no polynomials of degree 2 in each coordinate.
    """
    if number not in _SUM_OF_THREE | _SUM_OF_TWO | _BOX:
        return None
    from vtkmodules.vtkCommonDataModel import vtkGenericCell

    cell = vtkGenericCell()
    cell.SetCellType(number)
    size = int(cell.GetNumberOfPoints())
    axis = -np.cos(np.pi * (np.arange(_NODES) + 0.5) / _NODES)  # Chebyshev nodes: a well-conditioned fit
    s = np.array(list(itertools.product(axis, repeat=3)))
    weights = np.empty((s.shape[0], size))
    held = [0.0] * size
    for row, place in zip(weights, (s + 1) / 2):
        cell.InterpolateFunctions(list(place), held)
        row[:] = held
    powers = np.array(list(itertools.product(range(3), repeat=3)))
    terms = (s[:, None, :] ** powers[None]).prod(axis=2)
    factors = np.linalg.lstsq(terms, weights, rcond=None)[0]
    if np.abs(terms @ factors - weights).max() > 1e-12:
        return None
    factors[np.abs(factors) < 1e-13] = 0.0
    parts = [factors]
    for along in range(3):
        # the derivative of a term by r: 2 times its power times the term of one power less
        slope = np.zeros_like(factors)
        for term in np.flatnonzero(powers[:, along]):
            lower = powers[term] - (np.arange(3) == along)
            slope[(powers == lower).all(axis=1)] += 2 * powers[term, along] * factors[term]
        parts.append(slope)
    every = np.concatenate(parts, axis=1)
    used = every.any(axis=1)
    summed = 3 if number in _SUM_OF_THREE else (2 if number in _SUM_OF_TWO else 0)
    return CellMap(size, powers[used], every[used], summed)
