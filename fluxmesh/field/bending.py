"""Straight faces bent to quadratic ones, with quadratic fields on them: the compiled part.

Along an edge, position and node fields follow the cubic that has their values and slopes
at both ends (Hermite); its middle gives the mid-side point. At the middle of a face of more
corners, ``f = mean(f_i + ½ g_i·d_i)``, the same rule for more than two points: exact for
quadratic functions.
"""

from __future__ import annotations

from math import sqrt
from typing import Any, Final

import numpy as np

from fluxmesh.compiling import compiled, compiled_inline
from fluxmesh.integral.layout import AT_FACE, AT_NODE
from fluxmesh.surface.stencils import frame_of

__all__ = ["bend_face", "sound_faces"]

_ROUNDING: Final = 1e-8  # of the length of an edge


@compiled
def sound_faces(points: Any, starts: Any, place: Any, normals: Any, sound: Any) -> None:
    """Mark faces that can be bent: with area, and every piece about their middle the right way round."""
    centre = np.empty(3)
    for f in range(sound.size):
        first, size = starts[f], starts[f + 1] - starts[f]
        nx, ny, nz = normals[f, 0], normals[f, 1], normals[f, 2]
        good = nx != 0.0 or ny != 0.0 or nz != 0.0
        if size > 3:
            for k in range(3):
                centre[k] = 0.0
                for i in range(size):
                    centre[k] += points[place[first + i], k] / size
            for i in range(size):
                a, b = place[first + i], place[first + (i + 1) % size]
                if size == 4:
                    # a quadrilateral map is sound where all its corners are
                    c = place[first + (i + 2) % size]
                    good = good and _volume(points[b] - points[a], points[c] - points[b], nx, ny, nz) > 0.0
                else:
                    good = good and _volume(points[a] - centre, points[b] - centre, nx, ny, nz) > 0.0
        sound[f] = good


@compiled_inline
def _volume(u: Any, v: Any, x: float, y: float, z: float) -> float:
    volume: float = (u[1] * v[2] - u[2] * v[1]) * x + (u[2] * v[0] - u[0] * v[2]) * y + (u[0] * v[1] - u[1] * v[0]) * z
    return volume


@compiled
def _flatten(edge: Any, normal: Any, row: int, out: Any) -> None:
    """Project an edge onto the tangent plane of a normal."""
    off = edge[0] * normal[row, 0] + edge[1] * normal[row, 1] + edge[2] * normal[row, 2]
    for k in range(3):
        out[k] = edge[k] - off * normal[row, k]


@compiled
def _tangents(
    k: int, after: int, points: Any, place: Any, sharp: Any, sector: Any, normal: Any, along: Any,
    curved: bool, edge: Any, begin: Any, end: Any,
) -> None:  # fmt: skip
    """Slopes of the position at both ends of a half edge, for a parameter from 0 to 1."""
    a, b = place[k], place[after]
    for c in range(3):
        edge[c] = points[b, c] - points[a, c]
    if not curved:
        begin[:], end[:] = edge, edge
        return
    if not sharp[k]:
        _flatten(edge, normal, sector[k], begin)
        _flatten(edge, normal, sector[after], end)
        return
    at_a, at_b = 0.0, 0.0
    for c in range(3):
        at_a += along[a, c] * edge[c]
        at_b += along[b, c] * edge[c]
    for c in range(3):
        begin[c], end[c] = at_a * along[a, c], at_b * along[b, c]
    # at a corner of the curve: the parabola that the other end asks for
    if at_a == 0.0 and at_b == 0.0:
        begin[:], end[:] = edge, edge
    elif at_a == 0.0:
        for c in range(3):
            begin[c] = 2.0 * edge[c] - end[c]
    elif at_b == 0.0:
        for c in range(3):
            end[c] = 2.0 * edge[c] - begin[c]


@compiled_inline
def _straight(edge: Any, begin: Any, end: Any) -> bool:
    """Whether an edge bends by no more than the rounding of recovered normals: what is plane stays plane."""
    bend, length = 0.0, 0.0
    for k in range(3):
        bend += (begin[k] - end[k]) ** 2
        length += edge[k] ** 2
    return bend <= _ROUNDING * _ROUNDING * length


@compiled_inline
def _slope(s: int, j: int, slopes: Any, normal: Any, row: int, d: Any) -> float:
    """Change of column j of sector s over a step d."""
    ax, ay, az, bx, by, bz = frame_of(normal[row, 0], normal[row, 1], normal[row, 2])
    first, second = d[0] * ax + d[1] * ay + d[2] * az, d[0] * bx + d[1] * by + d[2] * bz
    third = d[0] * normal[row, 0] + d[1] * normal[row, 1] + d[2] * normal[row, 2]
    change: float = slopes[s, j, 0] * first + slopes[s, j, 1] * second + slopes[s, j, 2] * third
    return change


@compiled
def bend_face(
    f: int, points: Any, starts: Any, point: Any, place: Any, sharp: Any, rigid: Any, shape_sector: Any, normal: Any,
    along: Any, centroids: Any, face_normals: Any, curved: bool, where: Any, node: Any, node_column: Any, sector: Any,
    node_slopes: Any, face_values: Any, face_column: Any, face_slopes: Any, flat: Any, local: Any, field: Any,
    edge: Any, t0: Any, t1: Any, middle: Any,
) -> None:  # fmt: skip
    """Write the points and values of one face of n corners.

    `where` holds for each column where the face's group takes it from. Rows of `local`, shape
    (3 n + 1, 3), and `field`, shape (3 n + 1, columns): the corners, the middles of the
    edges, the middle of the face (n > 3), and the middles from there to the corners (n > 4).
    """
    columns = where.size
    first, n = starts[f], starts[f + 1] - starts[f]
    c = 2 * n  # the middle
    flat[c, :] = 0.0
    local[c, :] = 0.0
    field[c, :] = 0.0
    for a in range(n):
        for k in range(3):
            local[a, k] = flat[a, k] = points[place[first + a], k]
            flat[c, k] += flat[a, k] / n
        for j in range(columns):
            if where[j] == AT_NODE:
                field[a, j] = node[point[first + a], node_column[j]]
    for a in range(n):
        b = a + 1 if a + 1 < n else 0
        k0, k1 = first + a, first + b
        _tangents(k0, k1, points, place, sharp, shape_sector, normal, along, curved, edge, t0, t1)
        bent = 0.0 if not curved or rigid[k0] or _straight(edge, t0, t1) else 0.125
        for k in range(3):
            flat[n + a, k] = 0.5 * (flat[a, k] + flat[b, k])
            local[n + a, k] = flat[n + a, k] + bent * (t0[k] - t1[k])
        for j in range(columns):
            if where[j] == AT_NODE:
                m = node_column[j]
                field[n + a, j] = 0.5 * (field[a, j] + field[b, j]) + 0.125 * (
                    _slope(sector[k0], m, node_slopes, normal, shape_sector[k0], t0)
                    - _slope(sector[k1], m, node_slopes, normal, shape_sector[k1], t1)
                )
    if n > 3:
        middle[0, :] = 0.0
        for a in range(n):
            k0 = first + a
            for k in range(3):
                edge[k] = flat[c, k] - flat[a, k]
                middle[0, k] += normal[shape_sector[k0], k]
            t0[:] = edge
            if curved:
                _flatten(edge, normal, shape_sector[k0], t0)
            if curved and not _straight(edge, edge, t0):
                for k in range(3):
                    local[c, k] += 0.5 * (t0[k] - edge[k]) / n
            for j in range(columns):
                if where[j] == AT_NODE:
                    step = _slope(sector[k0], node_column[j], node_slopes, normal, shape_sector[k0], t0)
                    field[c, j] += (field[a, j] + 0.5 * step) / n
        for k in range(3):
            local[c, k] += flat[c, k]
    if n > 4:
        _bend_spokes(
            first, n, normal, shape_sector, middle, curved, where, node_column, sector, node_slopes, flat,
            local, field, edge, t0, t1,
        )  # fmt: skip
    _lay_face_values(
        f, 3 * n + 1, where, face_values, face_column, face_slopes, centroids, face_normals, flat, field, edge
    )


@compiled
def _bend_spokes(
    first: int, n: int, normal: Any, shape_sector: Any, middle: Any, curved: bool, where: Any,
    node_column: Any, sector: Any, node_slopes: Any, flat: Any, local: Any, field: Any, edge: Any, t0: Any, t1: Any,
) -> None:  # fmt: skip
    """Middles between the corners of a polygon and its middle, whose slope is the mean of its corners'."""
    c = 2 * n
    size = sqrt(middle[0, 0] ** 2 + middle[0, 1] ** 2 + middle[0, 2] ** 2)
    for k in range(3):
        middle[0, k] /= size if size > 0.0 else 1.0
    for a in range(n):
        for k in range(3):
            edge[k] = local[c, k] - local[a, k]
            flat[c + 1 + a, k] = 0.5 * (flat[a, k] + flat[c, k])
        row = shape_sector[first + a]
        t0[:], t1[:] = edge, edge
        if curved:
            _flatten(edge, normal, row, t0)
            _flatten(edge, middle, 0, t1)
        bent = 0.0 if not curved or _straight(edge, t0, t1) else 0.125
        for k in range(3):
            local[c + 1 + a, k] = 0.5 * (local[a, k] + local[c, k]) + bent * (t0[k] - t1[k])
        for j in range(where.size):
            if where[j] == AT_NODE:
                m = node_column[j]
                mean = 0.0
                for b in range(n):
                    mean += _slope(sector[first + b], m, node_slopes, normal, shape_sector[first + b], t1) / n
                field[c + 1 + a, j] = 0.5 * (field[a, j] + field[c, j]) + 0.125 * (
                    _slope(sector[first + a], m, node_slopes, normal, row, t0) - mean
                )


@compiled
def _lay_face_values(
    f: int, count: int, where: Any, face_values: Any, face_column: Any, face_slopes: Any, centroids: Any,
    face_normals: Any, flat: Any, field: Any, edge: Any,
) -> None:  # fmt: skip
    """Linear functions about the centroid of the straight face: its mean over that is the face's own value."""
    for j in range(where.size):
        if where[j] == AT_FACE:
            m = face_column[j]
            for a in range(count):
                for k in range(3):
                    edge[k] = flat[a, k] - centroids[f, k]
                field[a, j] = face_values[f, m] + _slope(f, m, face_slopes, face_normals, f, edge)
