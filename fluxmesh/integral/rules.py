"""Quadrature rules on the reference triangle and square.

Weights sum to 1 for the triangle (multiply by its area) and to 4 for the
square ``[-1, 1]²``.
"""

from __future__ import annotations

from functools import lru_cache
from math import sqrt
from typing import Final

import numpy as np
from numpy.typing import NDArray

__all__ = ["TRIANGLE_DEGREE4", "collapsed_triangle", "gauss_square"]


def _degree4() -> tuple[tuple[tuple[float, float, float], float], ...]:
    root = sqrt(38 - 44 * sqrt(2 / 5))
    spread = sqrt(213125 - 53320 * sqrt(10))
    rule = []
    for sign in (1, -1):
        a = (8 - sqrt(10) + sign * root) / 18
        weight = (620 + sign * spread) / 3720
        rest = 1 - 2 * a
        rule += [((rest, a, a), weight), ((a, rest, a), weight), ((a, a, rest), weight)]
    return tuple(rule)


TRIANGLE_DEGREE4: Final = _degree4()
"""Six-point rule, exact to degree 4: ``((l1, l2, l3), weight)`` in barycentric coordinates.

Dunavant 1985, Int. J. Numer. Methods Eng. 21:1129-1148, in closed form (the
printed 15 digits would cost two bits).
"""


@lru_cache(maxsize=8)
def collapsed_triangle(count: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the collapsed-square rule with ``count²`` points.

    Parameters
    ----------
    count : int
        Points in each direction; exact to degree ``2 count - 2``.

    Returns
    -------
    points : ndarray, shape (count**2, 2), float64
        Coordinates in the triangle (0, 0), (1, 0), (0, 1).
    weights : ndarray, shape (count**2,), float64
        They sum to 1.

    Notes
    -----
    Stroud 1971, Approximate Calculation of Multiple Integrals, conical product
    (formula from memory), with Gauss-Legendre points in both directions. It is collapsed to
    the first corner: a face that is turned keeps that, and so its points.
    """
    nodes, weights = np.polynomial.legendre.leggauss(count)
    s, w = (nodes + 1) / 2, weights / 2
    u, v = np.meshgrid(s, s, indexing="ij")
    points = np.column_stack([((1 - v) * (1 - u)).ravel(), (v * (1 - u)).ravel()])
    return points, 2 * (np.outer(w * (1 - s), w)).ravel()


@lru_cache(maxsize=8)
def gauss_square(count: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the tensor Gauss-Legendre rule on the square ``[-1, 1]²``.

    Parameters
    ----------
    count : int
        Points in each direction; exact to degree ``2 count - 1`` in each.

    Returns
    -------
    points : ndarray, shape (count**2, 2), float64
        Coordinates.
    weights : ndarray, shape (count**2,), float64
        They sum to 4.
    """
    nodes, weights = np.polynomial.legendre.leggauss(count)
    u, v = np.meshgrid(nodes, nodes, indexing="ij")
    return np.column_stack([u.ravel(), v.ravel()]), np.outer(weights, weights).ravel()
