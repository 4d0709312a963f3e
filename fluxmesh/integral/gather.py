"""Gathering corner data of flat faces into the buffer of a batch of triangles.

Leaves of the compiled kernel. `nodes` holds the three points of each lane's
triangle, `faces` its face; `where`, `node`, `face`, `group` and `scale` are a
field's `fluxmesh.integral.layout.FieldArrays`, handed on one by one: taking an
array out of a tuple costs an atomic count each time, which would dwarf the loads.
"""

from __future__ import annotations

from math import sqrt
from typing import Any

import numpy as np

from fluxmesh.compiling import compiled
from fluxmesh.integral.lanes import LANES, M, P, R, V, X
from fluxmesh.integral.layout import AT_FACE, AT_NODE, PER_GROUP

__all__ = [
    "clear",
    "fan_areas",
    "finish_pressure",
    "load_centre",
    "load_centre_scalar",
    "load_points",
    "load_scalar",
    "load_vector",
    "share_of_fan",
    "still",
]


@compiled
def clear(b: Any) -> None:
    """Empty the buffer; places that stay empty have no area and a density of 1."""
    b[:] = 0.0
    for i in range(R, R + 3 * LANES):
        b[i] = 1.0


@compiled
def load_points(b: Any, points: Any, ox: float, oy: float, oz: float, nodes: Any, filled: int) -> None:
    """Load corner positions about the origin ``(ox, oy, oz)``."""
    for i in range(filled):
        for c in range(3):
            node = nodes[c * LANES + i]
            row = np.uint64(X + 3 * c * LANES + i)
            b[row] = points[node, 0] - ox
            b[row + np.uint64(LANES)] = points[node, 1] - oy
            b[row + np.uint64(2 * LANES)] = points[node, 2] - oz


@compiled
def load_vector(
    b: Any,
    start: int,
    where: int,
    node: Any,
    face: Any,
    group: Any,
    scale: float,
    g: int,
    nodes: Any,
    faces: Any,
    filled: int,
) -> None:
    """Load a vector at the corners, from points, faces or the group."""
    if where == AT_NODE:
        for i in range(filled):
            for c in range(3):
                at = nodes[c * LANES + i]
                row = np.uint64(start + 3 * c * LANES + i)
                b[row] = scale * node[at, 0]
                b[row + np.uint64(LANES)] = scale * node[at, 1]
                b[row + np.uint64(2 * LANES)] = scale * node[at, 2]
    elif where == AT_FACE:
        for i in range(filled):
            for c in range(3):
                at = faces[i]
                row = np.uint64(start + 3 * c * LANES + i)
                b[row] = scale * face[at, 0]
                b[row + np.uint64(LANES)] = scale * face[at, 1]
                b[row + np.uint64(2 * LANES)] = scale * face[at, 2]
    elif where == PER_GROUP:
        for k in range(3):
            for c in range(3):
                for i in range(filled):
                    b[start + (3 * c + k) * LANES + i] = group[g, k]


@compiled
def load_scalar(
    b: Any,
    start: int,
    where: int,
    node: Any,
    face: Any,
    group: Any,
    scale: float,
    g: int,
    nodes: Any,
    faces: Any,
    filled: int,
) -> None:
    """Load a scalar at the corners, from points, faces or the group."""
    if where == AT_NODE:
        for i in range(filled):
            for c in range(3):
                b[np.uint64(start + c * LANES + i)] = scale * node[nodes[c * LANES + i]]
    elif where == AT_FACE:
        for i in range(filled):
            for c in range(3):
                b[np.uint64(start + c * LANES + i)] = scale * face[faces[i]]
    elif where == PER_GROUP:
        for c in range(3):
            for i in range(filled):
                b[start + c * LANES + i] = group[g]


@compiled
def finish_pressure(b: Any, times_density: bool, offset: float, hx: float, hy: float, hz: float) -> None:
    """Turn exported into gauge pressure with its head (places not filled have no area)."""
    for c in range(3):
        for i in range(LANES):
            exported = b[P + c * LANES + i]
            if times_density:
                exported *= b[R + c * LANES + i]
            row = X + 3 * c * LANES + i
            b[P + c * LANES + i] = exported + (offset + hx * b[row] + hy * b[row + LANES] + hz * b[row + 2 * LANES])


@compiled
def still(b: Any, mass_given: bool) -> bool:
    """Return whether nothing flows in the whole batch: most faces of most exports."""
    for i in range(V, V + 9 * LANES):
        if b[i] != 0.0:
            return False
    if mass_given:
        for i in range(M, M + LANES):
            if b[i] != 0.0:
                return False
    return True


@compiled
def fan_areas(points: Any, connectivity: Any, first: int, last: int, centre: Any, areas: Any) -> None:
    """Find the areas of the triangles of a polygon's fan, each with the sign of its side."""
    size = last - first
    nx, ny, nz = 0.0, 0.0, 0.0
    for turn in range(2):
        for e in range(size):
            a = connectivity[first + e]
            c = connectivity[first + (e + 1 if e + 1 < size else 0)]
            ax, ay, az = points[a, 0] - centre[0], points[a, 1] - centre[1], points[a, 2] - centre[2]
            bx, by, bz = points[c, 0] - centre[0], points[c, 1] - centre[1], points[c, 2] - centre[2]
            x, y, z = 0.5 * (ay * bz - az * by), 0.5 * (az * bx - ax * bz), 0.5 * (ax * by - ay * bx)
            if turn == 0:
                nx, ny, nz = nx + x, ny + y, nz + z
            else:
                sign = -1.0 if x * nx + y * ny + z * nz < 0.0 else 1.0
                areas[e] = sign * sqrt(x * x + y * y + z * z)


@compiled
def load_centre(
    b: Any,
    i: int,
    start: int,
    values: Any,
    connectivity: Any,
    first: int,
    last: int,
    scale: float,
    shift: Any,
) -> None:
    """Load the mean over a polygon's corners of a vector on points, as the third corner of lane `i`."""
    for k in range(3):
        total = 0.0
        for e in range(first, last):
            total += values[connectivity[e], k] - shift[k]
        b[start + (6 + k) * LANES + i] = scale * (total / (last - first))


@compiled
def load_centre_scalar(
    b: Any, i: int, start: int, values: Any, connectivity: Any, first: int, last: int, scale: float
) -> None:
    """Load the mean over a polygon's corners of a scalar on points, as the third corner of lane `i`."""
    total = 0.0
    for e in range(first, last):
        total += values[connectivity[e]]
    b[start + 2 * LANES + i] = scale * (total / (last - first))


@compiled
def share_of_fan(points: Any, connectivity: Any, first: int, last: int, origin: Any, start: int) -> float:
    """Return the share of a polygon's area in the triangle of its fan that begins at corner `start`."""
    centre = np.zeros(3)
    for k in range(3):
        for e in range(first, last):
            centre[k] += points[connectivity[e], k] - origin[k]
        centre[k] = origin[k] + centre[k] / (last - first)
    areas = np.zeros(last - first)
    fan_areas(points, connectivity, first, last, centre, areas)
    total, part = 0.0, 0.0
    for e in range(first, last):
        total += areas[e - first]
        if connectivity[e] == start:
            part = areas[e - first]
    return part / total if total != 0.0 else 0.0
