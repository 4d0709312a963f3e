"""Quadrature over volume cells: integrals of node and cell values and of their products.

A cell maps a reference cell to space by its shape functions, and carries node
values the same way (isoparametric cells: O. C. Zienkiewicz, R. L. Taylor, The
Finite Element Method, from memory).
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import lru_cache
from math import fsum
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.integral.rules import TRIANGLE_DEGREE4, collapsed_triangle

__all__ = ["BLOCK_POINTS", "CellRule", "CellTotals", "integrate_cells", "reference_rule"]

BLOCK_POINTS: Final = 16384
"""Quadrature points that a block of cells should have: its tables then stay in the cache."""

# Of a cell's extent cubed: what is less is no volume but round-off.
_FLAT: Final = 1e-12


@dataclass(frozen=True, eq=False)
class CellRule:
    """Quadrature on one type of cell.

    Attributes
    ----------
    weights : ndarray, shape (q,), float64
        They sum to the volume of the reference cell.
    values : ndarray, shape (q, size), float64
        Shape functions at the points.
    slopes : ndarray, shape (q, 3, size) or (1, 3, size), float64
        Their derivatives; one set where they are the same everywhere.
    """

    weights: NDArray[np.float64]
    values: NDArray[np.float64]
    slopes: NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class CellTotals:
    """Integrals over cells, of columns ``1, x, y, z``, the node values, the cell values.

    Attributes
    ----------
    first : ndarray, shape (m,), float64
        Integral of each column.
    second : ndarray, shape (m, m), float64, or None
        Integral of the product of two columns with the weight.
    sound, turned : int
        Cells of positive volume, and of negative.
    """

    first: NDArray[np.float64]
    second: NDArray[np.float64] | None
    sound: int
    turned: int


def integrate_cells(
    blocks: Iterable[tuple[NDArray[np.float64], NDArray[np.float64]]],
    rule: CellRule,
    *,
    weight: int | None = None,
    products: bool = True,
    rounding: float = 0.0,
) -> CellTotals:
    """Integrate over cells of one type, block by block.

    Parameters
    ----------
    blocks : iterable of (ndarray, shape (k, size, n), ndarray, shape (l, n)), float64
        Node values of n cells, the coordinates in the first three rows, and
        their cell values; k and l are the same in all blocks.
    rule : CellRule
        Quadrature of the type.
    weight : int, optional
        Column (counted as in `CellTotals`) that products are multiplied by; 1 by default.
    products : bool, optional
        Whether products are wanted at all.
    rounding : float, optional
        Half the width to which coordinates are known, in their unit: a cell
        is not called turned for less.

    Returns
    -------
    CellTotals
        Signed: where the map is turned inside out a cell counts as negative.
        Blocks are added without round-off.
    """
    firsts, seconds = [], []
    sound = turned = 0
    for nodes, constants in blocks:
        k, _, n = nodes.shape
        table = np.empty((1 + k + constants.shape[0], rule.weights.size, n))
        table[0] = 1.0
        np.matmul(rule.values, nodes, out=table[1 : 1 + k])
        table[1 + k :] = constants[:, None, :]
        volumes = rule.weights[:, None] * _determinants(rule, nodes[:3])
        flat = table.reshape(table.shape[0], -1)
        firsts.append(flat @ volumes.ravel())
        if products:
            weighted = volumes if weight is None else volumes * table[weight]
            seconds.append((flat * weighted.ravel()) @ flat.T)
        volume = volumes.sum(axis=0)
        extent = (nodes[:3].max(axis=1) - nodes[:3].min(axis=1)).max(axis=0)
        nothing = extent**2 * (_FLAT * extent + 4.0 * rounding)
        sound += int(np.count_nonzero(volume > nothing))
        turned += int(np.count_nonzero(volume < -nothing))
    return CellTotals(_summed(firsts), _summed(seconds) if products else None, sound, turned)


def _determinants(rule: CellRule, places: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return what the map multiplies volumes by, shape (q or 1, n)."""
    size, n = places.shape[1:]
    slopes = np.matmul(rule.slopes.transpose(1, 0, 2).reshape(-1, size), places)
    x, y, z = slopes.reshape(3, 3, -1, n)
    # a row for each coordinate, a column for each parameter
    first = x[0] * (y[1] * z[2] - y[2] * z[1])
    second = x[1] * (y[2] * z[0] - y[0] * z[2])
    third = x[2] * (y[0] * z[1] - y[1] * z[0])
    return np.asarray(first + second + third)


def _summed(parts: list[NDArray[np.float64]]) -> NDArray[np.float64]:
    stack = np.stack(parts)
    flat = stack.reshape(stack.shape[0], -1).T
    return np.array([fsum(row) for row in flat.tolist()]).reshape(stack.shape[1:])


@lru_cache(maxsize=32)
def reference_rule(summed: int, together: int, alone: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return quadrature points of a reference cell.

    Parameters
    ----------
    summed : {0, 2, 3}
        How many of the coordinates add up to at most 1: 3 in a tetrahedron,
        2 in a wedge, 0 in a cube.
    together : int
        Degree in those coordinates to which the rule is exact.
    alone : int
        Degree in each of the others.

    Returns
    -------
    places : ndarray, shape (q, 3), float64
        Coordinates, 0 to 1.
    weights : ndarray, shape (q,), float64
        They sum to the volume of the reference cell.

    Notes
    -----
    Tetrahedra of degree 3: five points, A. H. Stroud 1971, Approximate
    Calculation of Multiple Integrals (from memory); one weight is negative.
    Beyond: conical products of Gauss-Jacobi rules (the same). Others: products of
    Gauss-Legendre rules and of the rules on the triangle of `fluxmesh.integral.rules`.
    """
    line, length = _gauss(alone // 2 + 1)
    if summed == 3:
        return _tetrahedron(together)
    if summed == 2:
        if together <= 4:
            face = np.array([corners[1:] for corners, _ in TRIANGLE_DEGREE4])
            area = np.array([weight for _, weight in TRIANGLE_DEGREE4])
        else:
            face, area = collapsed_triangle(together // 2 + 1)
    else:
        face = np.stack(np.meshgrid(line, line, indexing="ij"), axis=-1).reshape(-1, 2)
        area = 2.0 * np.outer(length, length).ravel()
    places = np.column_stack([np.repeat(face, line.size, axis=0), np.tile(line, face.shape[0])])
    return places, np.outer(0.5 * area, length).ravel()


def _gauss(count: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Points between 0 and 1, and weights that sum to 1."""
    nodes, weights = np.polynomial.legendre.leggauss(count)
    return (nodes + 1.0) / 2.0, weights / 2.0


def _tetrahedron(degree: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    if degree <= 3:
        corner = np.full((4, 3), 1.0 / 6.0)
        corner[1:][np.diag_indices(3)] = 0.5
        places = np.concatenate([np.full((1, 3), 0.25), corner])
        return places, np.array([-4.0, *[2.25] * 4]) / 30.0
    from scipy.special import roots_jacobi

    count = degree // 2 + 1
    # u = 1 - r, and so on: the volume shrinks as the square towards the tip, and as the distance towards its edge
    axes = [roots_jacobi(count, power, 0.0) for power in (2.0, 1.0, 0.0)]
    r, s, t = np.meshgrid(*[(nodes + 1.0) / 2.0 for nodes, _ in axes], indexing="ij")
    weights = np.einsum("i,j,k->ijk", axes[0][1] / 8.0, axes[1][1] / 4.0, axes[2][1] / 2.0)
    places = np.stack([r, s * (1.0 - r), t * (1.0 - r) * (1.0 - s)], axis=-1)
    return places.reshape(-1, 3), weights.ravel()
