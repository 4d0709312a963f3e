"""Compiled passes over flat facets: areas, volumes, solid angles, and the turning of faces.

Polygons are fans from their first corner; curved faces are split into flat
triangles through their mid-side points, so that neighbours share all facet
edges and a closed surface stays closed. Absent arrays are passed with size 0.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.compiling import compiled

__all__ = [
    "cell_numbers",
    "cell_sums",
    "face_areas",
    "face_centre",
    "first_of_label",
    "measure_shells",
    "near_winding",
    "order_by_label",
    "reverse_faces",
    "solid_angle",
]

Array = NDArray[Any]

_ON_FACET = 1e-9  # sine of the angle below which a point counts as lying on a facet
_FACETS_OF_KIND = np.array([0, 4, 6, 8])
_FACETS = np.zeros((4, 8, 3), np.int64)
_FACETS[1, :4] = [[0, 3, 5], [3, 1, 4], [5, 4, 2], [3, 4, 5]]
_FACETS[2, :6] = [[0, 4, 7], [1, 5, 4], [2, 6, 5], [3, 7, 6], [4, 5, 6], [4, 6, 7]]
_FACETS[3] = [[0, 4, 8], [4, 1, 8], [1, 5, 8], [5, 2, 8], [2, 6, 8], [6, 3, 8], [3, 7, 8], [7, 0, 8]]


@compiled
def _facet_count(face: int, offsets: Array, kinds: Array) -> int:
    if offsets.size == 0:
        return 1
    if kinds.size == 0 or kinds[face] == 0:
        return int(offsets[face + 1] - offsets[face] - 2)
    return int(_FACETS_OF_KIND[kinds[face]])


@compiled
def _facet(face: int, which: int, connectivity: Array, offsets: Array, kinds: Array) -> tuple[int, int, int]:
    if offsets.size == 0:
        return connectivity[3 * face], connectivity[3 * face + 1], connectivity[3 * face + 2]
    first = offsets[face]
    if kinds.size == 0 or kinds[face] == 0:
        return connectivity[first], connectivity[first + which + 1], connectivity[first + which + 2]
    row = _FACETS[kinds[face], which]
    return connectivity[first + row[0]], connectivity[first + row[1]], connectivity[first + row[2]]


@compiled
def _normal(points: Array, i: int, j: int, k: int) -> tuple[float, float, float]:
    """Return twice the area vector of a facet, m²."""
    ux, uy, uz = points[j, 0] - points[i, 0], points[j, 1] - points[i, 1], points[j, 2] - points[i, 2]
    vx, vy, vz = points[k, 0] - points[i, 0], points[k, 1] - points[i, 1], points[k, 2] - points[i, 2]
    return uy * vz - uz * vy, uz * vx - ux * vz, ux * vy - uy * vx


@compiled
def measure_shells(
    part: int,
    points: Array,
    connectivity: Array,
    offsets: Array,
    kinds: Array,
    shell_of_face: Array,
    origins: Array,
    thinness: float,
    boxed: bool,
    lows: Array,
    highs: Array,
    sums: Array,
    flat: Array,
) -> None:
    """Add up volume and area of each shell, find its box, and mark faces without area.

    Parameters
    ----------
    part : int
        Which of the ``sums.shape[0]`` parts of the faces.
    points, connectivity, offsets, kinds : ndarray
        The surface.
    shell_of_face : ndarray, shape (n_faces,), int32
        Faces with -1 count in no shell.
    origins : ndarray, shape (n_shells, 3), float64
        A point near each shell, m; its volume is taken about it.
    thinness : float
        A face whose area is at most this times its longest side squared has none.
    boxed : bool
        Whether boxes are wanted: finding them costs more than all the rest.
    lows, highs : ndarray, shape (n_parts, n_shells, 3), float64
        Corners of the boxes, m; to be given as +inf and -inf.
    sums : ndarray, shape (n_parts, n_shells, 2), float64
        Signed volume, m³, and area, m²; to be given as 0.
    flat : ndarray, shape (n_faces,), bool
        Gets True for faces without area.
    """
    parts = sums.shape[0]
    faces = shell_of_face.size
    first, end = faces * part // parts, faces * (part + 1) // parts
    begin = first
    while begin < end:
        # a run of faces of one shell is summed in registers
        stop = begin + 1
        while stop < end and shell_of_face[stop] == shell_of_face[begin]:
            stop += 1
        shell = shell_of_face[begin]
        origin = origins[max(shell, 0)]
        x0 = y0 = z0 = np.inf
        x1 = y1 = z1 = -np.inf
        volume = total = 0.0
        for face in range(begin, stop):
            area = longest = 0.0
            for which in range(_facet_count(face, offsets, kinds)):
                i, j, k = _facet(face, which, connectivity, offsets, kinds)
                ax, ay, az = points[i, 0], points[i, 1], points[i, 2]
                bx, by, bz = points[j, 0], points[j, 1], points[j, 2]
                cx, cy, cz = points[k, 0], points[k, 1], points[k, 2]
                if boxed:
                    x0, y0, z0 = min(x0, ax, bx, cx), min(y0, ay, by, cy), min(z0, az, bz, cz)
                    x1, y1, z1 = max(x1, ax, bx, cx), max(y1, ay, by, cy), max(z1, az, bz, cz)
                ux, uy, uz, vx, vy, vz = bx - ax, by - ay, bz - az, cx - ax, cy - ay, cz - az
                nx, ny, nz = uy * vz - uz * vy, uz * vx - ux * vz, ux * vy - uy * vx
                area += 0.5 * np.sqrt(nx * nx + ny * ny + nz * nz)
                longest = max(longest, ux * ux + uy * uy + uz * uz, vx * vx + vy * vy + vz * vz)
                volume += (ax - origin[0]) * nx + (ay - origin[1]) * ny + (az - origin[2]) * nz
            total += area
            if area <= thinness * longest:
                flat[face] = True
        if shell >= 0:
            if boxed:
                _add_run(lows[part, shell], highs[part, shell], x0, y0, z0, x1, y1, z1)
            sums[part, shell, 0] += volume / 6.0
            sums[part, shell, 1] += total
        begin = stop


@compiled
def _add_run(low: Array, high: Array, x0: float, y0: float, z0: float, x1: float, y1: float, z1: float) -> None:
    low[0], low[1], low[2] = min(low[0], x0), min(low[1], y0), min(low[2], z0)
    high[0], high[1], high[2] = max(high[0], x1), max(high[1], y1), max(high[2], z1)


@compiled
def face_areas(points: Array, connectivity: Array, offsets: Array, kinds: Array, areas: Array) -> None:
    """Write the area of every face, m²."""
    for face in range(areas.size):
        areas[face] = 0.0
        for which in range(_facet_count(face, offsets, kinds)):
            i, j, k = _facet(face, which, connectivity, offsets, kinds)
            nx, ny, nz = _normal(points, i, j, k)
            areas[face] += 0.5 * np.sqrt(nx * nx + ny * ny + nz * nz)


@compiled
def first_of_label(labels: Array, first: Array) -> None:
    """Write the lowest face of each label; labels below 0 are passed over."""
    for face in range(labels.size - 1, -1, -1):
        if labels[face] >= 0:
            first[labels[face]] = face


@compiled
def order_by_label(labels: Array, starts: Array, order: Array) -> None:
    """Sort faces by label in linear time: those of label s end up in ``order[starts[s]:starts[s + 1]]``.

    `starts` has two entries more than there are labels and is given as 0.
    """
    for face in range(labels.size):
        if labels[face] >= 0:
            starts[labels[face] + 2] += 1
    for label in range(2, starts.size):
        starts[label] += starts[label - 1]
    for face in range(labels.size):
        if labels[face] >= 0:
            order[starts[labels[face] + 1]] = face
            starts[labels[face] + 1] += 1


@compiled
def reverse_faces(connectivity: Array, offsets: Array, kinds: Array, mask: Array) -> None:
    """Turn the marked faces in place: first corner stays, corners and mid-side points run backward."""
    for face in range(mask.size):
        if not mask[face]:
            continue
        if offsets.size == 0:
            first, size = 3 * face, 3
        else:
            first, size = offsets[face], offsets[face + 1] - offsets[face]
        kind = kinds[face] if kinds.size else 0
        if kind:
            size = 3 if kind == 1 else 4
        _reverse(connectivity, first + 1, first + size)
        if kind:
            _reverse(connectivity, first + size, first + 2 * size)


@compiled
def _reverse(entries: Array, first: int, end: int) -> None:
    while first < end - 1:
        end -= 1
        entries[first], entries[end] = entries[end], entries[first]
        first += 1


@compiled
def face_centre(face: int, points: Array, connectivity: Array, offsets: Array, kinds: Array, centre: Array) -> None:
    """Write a point on a face: the middle of its largest facet, m."""
    best = -1.0
    for which in range(_facet_count(face, offsets, kinds)):
        i, j, k = _facet(face, which, connectivity, offsets, kinds)
        nx, ny, nz = _normal(points, i, j, k)
        size = nx * nx + ny * ny + nz * nz
        if size > best:
            best = size
            for axis in range(3):
                centre[axis] = (points[i, axis] + points[j, axis] + points[k, axis]) / 3.0


@compiled
def solid_angle(
    first: int,
    end: int,
    order: Array,
    points: Array,
    connectivity: Array,
    offsets: Array,
    kinds: Array,
    at: Array,
) -> float:
    """Return the solid angle that faces subtend, positive when their normals point away.

    Van Oosterom and Strackee, "The solid angle of a plane triangle", IEEE
    Trans. Biomed. Eng. BME-30:125-126, 1983.

    Parameters
    ----------
    first, end : int
        The faces ``order[first:end]``.
    order, points, connectivity, offsets, kinds : ndarray
        The surface.
    at : ndarray, shape (3,), float64
        Where it is seen from, m.

    Returns
    -------
    float
        Steradian; 4 pi inside a closed surface with outward normals, 0 outside,
        2 pi on it.
    """
    total = 0.0
    for place in range(first, end):
        face = order[place]
        for which in range(_facet_count(face, offsets, kinds)):
            i, j, k = _facet(face, which, connectivity, offsets, kinds)
            ax, ay, az = points[i, 0] - at[0], points[i, 1] - at[1], points[i, 2] - at[2]
            bx, by, bz = points[j, 0] - at[0], points[j, 1] - at[1], points[j, 2] - at[2]
            cx, cy, cz = points[k, 0] - at[0], points[k, 1] - at[1], points[k, 2] - at[2]
            a = np.sqrt(ax * ax + ay * ay + az * az)
            b = np.sqrt(bx * bx + by * by + bz * bz)
            c = np.sqrt(cx * cx + cy * cy + cz * cz)
            triple = ax * (by * cz - bz * cy) + ay * (bz * cx - bx * cz) + az * (bx * cy - by * cx)
            ab, bc, ca = ax * bx + ay * by + az * bz, bx * cx + by * cy + bz * cz, cx * ax + cy * ay + cz * az
            below = a * b * c + ab * c + bc * a + ca * b
            # on the facet itself the angle is neither +2 pi nor -2 pi: left out, so that the sum is a half
            if below > 0.0 or abs(triple) > _ON_FACET * a * b * c:
                total += 2.0 * np.arctan2(triple, below)
    return total


@compiled
def cell_numbers(
    points: Array,
    connectivity: Array,
    offsets: Array,
    kinds: Array,
    faces: Array,
    low: Array,
    step: Array,
    most: int,
    numbers: Array,
) -> None:
    """Write which cell of a grid of `most` cells a side holds the first point of each of `faces`."""
    for place in range(faces.size):
        corner = _facet(faces[place], 0, connectivity, offsets, kinds)[0]
        number = 0
        for axis in range(3):
            cell = int((points[corner, axis] - low[axis]) / step[axis]) if step[axis] > 0 else 0
            number = number * most + min(max(cell, 0), most - 1)
        numbers[place] = number


@compiled
def cell_sums(
    starts: Array,
    order: Array,
    points: Array,
    connectivity: Array,
    offsets: Array,
    kinds: Array,
    sums: Array,
) -> None:
    """Write area vector, m², centre, m, and radius, m, of the faces in each cell."""
    for cell in range(sums.shape[0]):
        row = sums[cell]
        weight = 0.0
        first, end = starts[cell], starts[cell + 1]
        for place in range(first, end):
            for which in range(_facet_count(order[place], offsets, kinds)):
                i, j, k = _facet(order[place], which, connectivity, offsets, kinds)
                nx, ny, nz = _normal(points, i, j, k)
                area = np.sqrt(nx * nx + ny * ny + nz * nz)
                weight += area
                row[0] += 0.5 * nx
                row[1] += 0.5 * ny
                row[2] += 0.5 * nz
                for axis in range(3):
                    row[3 + axis] += area * (points[i, axis] + points[j, axis] + points[k, axis]) / 3.0
        some = _facet(order[first], 0, connectivity, offsets, kinds)[0]
        for axis in range(3):
            row[3 + axis] = row[3 + axis] / weight if weight > 0.0 else points[some, axis]
        furthest = 0.0
        for place in range(first, end):
            for which in range(_facet_count(order[place], offsets, kinds)):
                for corner in _facet(order[place], which, connectivity, offsets, kinds):
                    x, y, z = points[corner, 0] - row[3], points[corner, 1] - row[4], points[corner, 2] - row[5]
                    furthest = max(furthest, x * x + y * y + z * z)
        row[6] = np.sqrt(furthest)


@compiled
def near_winding(
    starts: Array,
    order: Array,
    points: Array,
    connectivity: Array,
    offsets: Array,
    kinds: Array,
    sums: Array,
    farness: float,
    at: Array,
) -> float:
    """Return the winding number with far cells taken as dipoles.

    After Barill, Dickson, Schmidt, Levin and Jacobson, "Fast winding numbers
    for soups and clouds", ACM Trans. Graph. 37(4), 2018, with one level of
    cells: a cell further off than `farness` times its radius subtends
    ``A·r/|r|³``.
    """
    total = 0.0
    for cell in range(sums.shape[0]):
        rx, ry, rz = sums[cell, 3] - at[0], sums[cell, 4] - at[1], sums[cell, 5] - at[2]
        distance = np.sqrt(rx * rx + ry * ry + rz * rz)
        if distance > farness * sums[cell, 6]:
            total += (sums[cell, 0] * rx + sums[cell, 1] * ry + sums[cell, 2] * rz) / distance**3
        else:
            total += solid_angle(starts[cell], starts[cell + 1], order, points, connectivity, offsets, kinds, at)
    return total / (4.0 * np.pi)
