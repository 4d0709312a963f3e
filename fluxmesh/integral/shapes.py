"""Shape functions of curved faces at quadrature points.

Quadratic triangle (6 points), serendipity quadrilateral (8) and Lagrange
quadrilateral (9), points in the order of the open VTK file format. Functions:
Zienkiewicz and Taylor, The Finite Element Method, standard shape functions
(from memory; tested by partition of unity and interpolation).
"""

from __future__ import annotations

from functools import lru_cache
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from fluxmesh.integral.rules import collapsed_triangle, gauss_square

__all__ = ["ShapeTables", "quadratic_quad8", "quadratic_quad9", "quadratic_triangle", "shape_tables"]

_COUNT = 6  # per direction: degree 10, for area vector (2) × moment (2) × momentum flux (4) and density (2)


class ShapeTables(NamedTuple):
    """Values at the quadrature points of the three curved faces.

    Attributes
    ----------
    value : ndarray, shape (3, n_quadrature, 9), float64
        Shape functions by kind - 1, quadrature point and face point (rest 0).
    along_u, along_v : ndarray, shape (3, n_quadrature, 9), float64
        Their derivatives.
    weight : ndarray, shape (3, n_quadrature), float64
        Weights for the reference domain's area.
    size : ndarray, shape (3,), int64
        Points of each kind of face.
    """

    value: NDArray[np.float64]
    along_u: NDArray[np.float64]
    along_v: NDArray[np.float64]
    weight: NDArray[np.float64]
    size: NDArray[np.int64]


def quadratic_triangle(u: NDArray[np.float64], v: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the 6 functions and their derivatives.

    Parameters
    ----------
    u, v : ndarray, shape (n,), float64
        Coordinates in the triangle (0, 0), (1, 0), (0, 1).

    Returns
    -------
    ndarray, shape (3, n, 6), float64
        Values, derivatives by `u`, derivatives by `v`.
    """
    w = 1 - u - v
    value = [w * (2 * w - 1), u * (2 * u - 1), v * (2 * v - 1), 4 * u * w, 4 * u * v, 4 * v * w]
    by_u = [1 - 4 * w, 4 * u - 1, 0 * u, 4 * (w - u), 4 * v, -4 * v]
    by_v = [1 - 4 * w, 0 * u, 4 * v - 1, -4 * u, 4 * u, 4 * (w - v)]
    return np.array([np.stack(f, axis=-1) for f in (value, by_u, by_v)])


_CORNERS = ((-1, -1), (1, -1), (1, 1), (-1, 1))
_MIDS = ((0, -1), (1, 0), (0, 1), (-1, 0))


def quadratic_quad8(u: NDArray[np.float64], v: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the 8 serendipity functions and their derivatives.

    Parameters
    ----------
    u, v : ndarray, shape (n,), float64
        Coordinates in the square [-1, 1]².

    Returns
    -------
    ndarray, shape (3, n, 8), float64
        Values, derivatives by `u`, derivatives by `v`.
    """
    value, by_u, by_v = [], [], []
    for a, b in _CORNERS:
        p, q = 1 + a * u, 1 + b * v
        value.append(p * q * (a * u + b * v - 1) / 4)
        by_u.append(a * q * (2 * a * u + b * v) / 4)
        by_v.append(b * p * (a * u + 2 * b * v) / 4)
    for a, b in _MIDS:
        if a == 0:
            value.append((1 - u * u) * (1 + b * v) / 2)
            by_u.append(-u * (1 + b * v))
            by_v.append(b * (1 - u * u) / 2)
        else:
            value.append((1 + a * u) * (1 - v * v) / 2)
            by_u.append(a * (1 - v * v) / 2)
            by_v.append(-v * (1 + a * u))
    return np.array([np.stack(f, axis=-1) for f in (value, by_u, by_v)])


def quadratic_quad9(u: NDArray[np.float64], v: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the 9 Lagrange functions and their derivatives.

    Parameters
    ----------
    u, v : ndarray, shape (n,), float64
        Coordinates in the square [-1, 1]².

    Returns
    -------
    ndarray, shape (3, n, 9), float64
        Values, derivatives by `u`, derivatives by `v`.
    """

    def line(s: NDArray[np.float64], at: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        if at == 0:
            return 1 - s * s, -2 * s
        return s * (s + at) / 2, s + at / 2

    value, by_u, by_v = [], [], []
    for a, b in (*_CORNERS, *_MIDS, (0, 0)):
        (f, df), (g, dg) = line(u, a), line(v, b)
        value.append(f * g)
        by_u.append(df * g)
        by_v.append(f * dg)
    return np.array([np.stack(f, axis=-1) for f in (value, by_u, by_v)])


@lru_cache(maxsize=1)
def shape_tables() -> ShapeTables:
    """Return shape functions and weights at the quadrature points of all curved faces."""
    count = _COUNT * _COUNT
    tables = np.zeros((3, 3, count, 9))
    weights = np.empty((3, count))
    on_triangle, triangle_weights = collapsed_triangle(_COUNT)
    on_square, square_weights = gauss_square(_COUNT)
    tables[:, 0, :, :6] = quadratic_triangle(*on_triangle.T)
    tables[:, 1, :, :8] = quadratic_quad8(*on_square.T)
    tables[:, 2, :, :] = quadratic_quad9(*on_square.T)
    weights[0], weights[1], weights[2] = triangle_weights / 2, square_weights, square_weights
    return ShapeTables(tables[0], tables[1], tables[2], weights, np.array([6, 8, 9]))
