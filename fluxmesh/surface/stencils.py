"""Slopes of values at scattered places by least squares over their neighbours, compiled.

Around each place a polynomial through its own value is fitted in two coordinates of a
plane: linear, or quadratic. Coordinates are stretched to the spread of the
neighbours first, so that long thin faces do no harm, and a little
damping of the second derivatives, taken back by refinement, lets a stencil that does not tell all coefficients
give the smallest ones (Tikhonov's iterated regularisation; from memory). All of it is free of a direction: results turn
with the surface.
"""

from __future__ import annotations

from math import copysign, sqrt
from typing import Any, Final

import numpy as np

from fluxmesh.compiling import compiled, compiled_inline

__all__ = ["fit_faces", "fit_sectors", "frame_of"]

_DAMPING: Final = 1e-6  # of the sum of weights, on second derivatives
_FAINT: Final = 1e-12  # the same on first derivatives: a linear function stays exact
_LEVEL: Final = 1e-8  # the same on the derivative along the normal: a surface this little off a plane tells none
_REFINED: Final = 3
_THINNEST: Final = 1e-6  # smallest spread over greatest: beyond, neighbours lie on a line


@compiled_inline
def frame_of(x: float, y: float, z: float) -> tuple[float, float, float, float, float, float]:
    """Return two unit vectors square to a unit vector and to each other.

    Duff et al. 2017, Building an Orthonormal Basis, Revisited, J. Comput. Graph. Tech. 6(1) (from memory).
    """
    sign = copysign(1.0, z)
    a = -1.0 / (sign + z)
    b = x * y * a
    return 1.0 + sign * x * x * a, sign * b, -sign * x, b, sign + y * y * a, -y


@compiled
def _grown(some: Any, count: int) -> Any:
    more = np.empty(2 * some.size, some.dtype)
    more[:count] = some[:count]
    return more


@compiled
def _ring(at: int, around_start: Any, around: Any, starts: Any, face: Any, label: Any, marks: Any, stamp: int,
    found: Any, count: int) -> Any:  # fmt: skip
    """Add what shares a face with sector `at` and is not marked yet."""
    for i in range(around_start[at], around_start[at + 1]):
        owner = face[around[i]]
        for j in range(starts[owner], starts[owner + 1]):
            other = label[j]
            if marks[other] != stamp:
                marks[other] = stamp
                if count == found.size:
                    found = _grown(found, count)
                found[count] = other
                count += 1
    return found, count


@compiled
def fit_sectors(
    first: int, last: int, starts: Any, face: Any, label: Any, around_start: Any, around: Any,
    position: Any, normal: Any, wanted: Any, values: Any, spatial: bool, slopes: Any,
) -> None:  # fmt: skip
    """Fit a quadratic over two rings of neighbours of each sector in its tangent plane.

    `label` is the sector of each corner, `around` its inverse; `slopes`, shape
    (n_sectors, m, 3), get the derivatives of `values`, shape (n_sectors, m), along the two
    vectors of `frame_of` and the normal. With `spatial` a function that is linear in space is
    taken out first: what the bend of the surface does to it is no property of the function. Else the
    derivative along the normal is zero.
    """
    marks = np.full(position.shape[0], -1, np.int32)
    found = np.empty(64, np.int32)
    m = values.shape[1]
    right, matrix, work, linear = np.empty((5, m)), np.empty((5, 5)), np.empty((3, 5)), np.empty((3, m))
    places = np.empty((64, 4))
    for s in range(first, last):
        if not wanted[s]:
            continue
        marks[s] = s
        found, count = _ring(s, around_start, around, starts, face, label, marks, s, found, 0)
        near = count
        for i in range(near):
            found, count = _ring(found[i], around_start, around, starts, face, label, marks, s, found, count)
        if places.shape[0] < count:
            places = np.empty((2 * count, 4))
        _project(s, count, found, position, normal, places)
        _fit(s, count, found, places, values, slopes, 5, spatial, right, matrix, work, linear)


@compiled
def fit_faces(
    first: int, last: int, starts: Any, face: Any, label: Any, around_start: Any, around: Any,
    position: Any, normal: Any, wanted: Any, values: Any, spatial: bool, slopes: Any,
) -> None:  # fmt: skip
    """Fit a linear function over the faces that share a sector with each face, in its plane.

    Arrays are those of `fit_sectors`, but `position`, `normal`, `wanted`, `values`
    and `slopes` go by face; `spatial` has no say.
    """
    marks = np.full(position.shape[0], -1, np.int32)
    found = np.empty(64, np.int32)
    m = values.shape[1]
    right, matrix, work, linear = np.empty((5, m)), np.empty((5, 5)), np.empty((3, 5)), np.empty((3, m))
    places = np.empty((64, 4))
    for f in range(first, last):
        if not wanted[f]:
            continue
        marks[f] = f
        count = 0
        for k in range(starts[f], starts[f + 1]):
            for i in range(around_start[label[k]], around_start[label[k] + 1]):
                other = face[around[i]]
                if marks[other] != f:
                    marks[other] = f
                    if count == found.size:
                        found = _grown(found, count)
                    found[count] = other
                    count += 1
        if places.shape[0] < count:
            places = np.empty((2 * count, 4))
        _project(f, count, found, position, normal, places)
        _fit(f, count, found, places, values, slopes, 2, False, right, matrix, work, linear)


@compiled
def _project(s: int, count: int, found: Any, position: Any, normal: Any, places: Any) -> None:
    nx, ny, nz = normal[s, 0], normal[s, 1], normal[s, 2]
    ax, ay, az, bx, by, bz = frame_of(nx, ny, nz)
    for i in range(count):
        o = found[i]
        x, y, z = position[o, 0] - position[s, 0], position[o, 1] - position[s, 1], position[o, 2] - position[s, 2]
        places[i, 0] = x * ax + y * ay + z * az
        places[i, 1] = x * bx + y * by + z * bz
        places[i, 2] = x * nx + y * ny + z * nz


@compiled
def _fit(
    s: int, count: int, found: Any, places: Any, values: Any, slopes: Any, order: int, spatial: bool, right: Any,
    matrix: Any, work: Any, linear: Any,
) -> None:  # fmt: skip
    m = values.shape[1]
    slopes[s, :, :] = 0.0
    # spread of the neighbours: principal axes of their second moments
    uu, uv, vv, ww = 0.0, 0.0, 0.0, 0.0
    for i in range(count):
        u, v, w = places[i, 0], places[i, 1], places[i, 2]
        uu, uv, vv, ww = uu + u * u, uv + u * v, vv + v * v, ww + w * w
    if not uu + vv > _THINNEST * _THINNEST * ww:
        return
    half, apart = 0.5 * (uu - vv), sqrt(0.25 * (uu - vv) ** 2 + uv * uv)
    # the axis of the greater spread: from the better conditioned of two forms
    cx, cy = (half + apart, uv) if half >= 0.0 else (uv, apart - half)
    size = sqrt(cx * cx + cy * cy)
    cx, cy = (cx / size, cy / size) if size > 0.0 else (1.0, 0.0)
    large = sqrt((0.5 * (uu + vv) + apart) / count)
    small = sqrt(max(0.5 * (uu + vv) - apart, 0.0) / count)
    # how far neighbours lie off a line is rounding there, and must not tell a slope
    line = small <= _THINNEST * large
    small = large if line else small
    total = 0.0
    for i in range(count):
        u = (places[i, 0] * cx + places[i, 1] * cy) / large
        v = 0.0 if line else (places[i, 1] * cx - places[i, 0] * cy) / small
        places[i, 0], places[i, 1], places[i, 2], places[i, 3] = u, v, places[i, 2] / large, _weight(u * u + v * v)
        total += places[i, 3]
    linear[:, :] = 0.0
    if spatial:
        _solve_least_squares(s, count, found, places, values, 3, True, total, linear, right, matrix, work)
        for k in range(m):
            for p in range(3):
                linear[p, k] = right[p, k]
    _solve_least_squares(s, count, found, places, values, order, False, total, linear, right, matrix, work)
    for k in range(m):
        gu, gv = (right[0, k] + linear[0, k]) / large, (right[1, k] + linear[1, k]) / small
        slopes[s, k, 0] = gu * cx - gv * cy
        slopes[s, k, 1] = gu * cy + gv * cx
        slopes[s, k, 2] = linear[2, k] / large


@compiled
def _solve_least_squares(
    s: int, count: int, found: Any, places: Any, values: Any, order: int, spatial: bool, total: float, linear: Any,
    right: Any, matrix: Any, work: Any,
) -> None:  # fmt: skip
    """Leave the coefficients of the fit to what is beyond `linear` in `right`."""
    m = values.shape[1]
    right[:, :] = 0.0
    matrix[:, :] = 0.0
    for i in range(count):
        o = found[i]
        u, v, w = places[i, 0], places[i, 1], places[i, 2]
        work[0, 0], work[0, 1] = u, v
        work[0, 2], work[0, 3], work[0, 4] = w if spatial else 0.5 * u * u, sqrt(0.5) * u * v, 0.5 * v * v
        weight = places[i, 3]
        for p in range(order):
            scaled = weight * work[0, p]
            for q in range(p + 1):
                matrix[p, q] += scaled * work[0, q]
        for k in range(m):
            scaled = weight * (values[o, k] - values[s, k] - u * linear[0, k] - v * linear[1, k] - w * linear[2, k])
            for p in range(order):
                right[p, k] += scaled * work[0, p]
    for p in range(order):
        work[0, p] = (_FAINT if p < 2 else _LEVEL if spatial else _DAMPING) * total
        matrix[p, p] += work[0, p]
    _factor(matrix, order)
    for k in range(m):
        for p in range(order):
            work[1, p] = right[p, k]
        _solve(matrix, order, work[1])
        # (A + D) x' = b + D x
        for _ in range(_REFINED):
            for p in range(order):
                work[2, p] = right[p, k] + work[0, p] * work[1, p]
            _solve(matrix, order, work[2])
            for p in range(order):
                work[1, p] = work[2, p]
        for p in range(order):
            right[p, k] = work[1, p]


@compiled_inline
def _weight(square: float) -> float:
    # steep, by measured errors on plane ports and smooth bodies: the second ring helps where the first does not suffice
    near = 1.0 / (0.03 + square)
    return near * near * near


@compiled
def _factor(matrix: Any, order: int) -> None:
    """Cholesky factor of the lower triangle, in place; its diagonal inverted."""
    for p in range(order):
        least = 1e-3 * _FAINT * matrix[p, p]
        for q in range(p + 1):
            value = matrix[p, q]
            for k in range(q):
                value -= matrix[p, k] * matrix[q, k]
            if p == q:
                matrix[p, p] = 1.0 / sqrt(max(value, least))
            else:
                matrix[p, q] = value * matrix[q, q]


@compiled
def _solve(matrix: Any, order: int, x: Any) -> None:
    for p in range(order):
        for q in range(p):
            x[p] -= matrix[p, q] * x[q]
        x[p] *= matrix[p, p]
    for p in range(order - 1, -1, -1):
        for q in range(p + 1, order):
            x[p] -= matrix[q, p] * x[q]
        x[p] *= matrix[p, p]
