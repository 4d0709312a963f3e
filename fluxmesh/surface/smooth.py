"""The smooth shape that straight faces stand for: normals in each sector, tangents along creases."""

from __future__ import annotations

from math import acos, sqrt
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from fluxmesh.compiling import compiled, compiled_inline, run_parts, thread_count
from fluxmesh.surface.creases import ALWAYS, crease_edges, sectors
from fluxmesh.surface.face_geometry import FaceGeometry, face_geometry
from fluxmesh.surface.half_edges import HalfEdges, half_edges, next_corner, sort_into
from fluxmesh.surface.stencils import fit_sectors
from fluxmesh.surface.surface import ControlSurface

__all__ = ["SmoothShape", "part_bounds", "smooth_shape"]

_STEADY = 0.5  # a fitted normal this far (cosine) from the mean of the faces is not believed
_NEVER = 0.02  # radians: a curve that turns by less at a point has no corner there
_ABRUPT = 3.0  # times what the curve turns by at the points beside over the same distance


class SmoothShape(NamedTuple):
    """What is known of the shape between the points.

    Attributes
    ----------
    halves : HalfEdges
        The half edges.
    geometry : FaceGeometry
        Of the faces as polygons of their corners.
    sharp : ndarray, shape (n_corners,), bool
        Half edges that no smooth surface runs across.
    sector : ndarray, shape (n_corners,), int32
        Smooth sector of each corner.
    normal : ndarray, shape (n_sectors, 3), float64
        Unit normal of the smooth surface in each sector.
    along : ndarray, shape (n_points, 3), float64
        Unit tangent of the one curve of sharp edges through a place; zero where there is no such
        curve, or it has a corner.
    """

    halves: HalfEdges
    geometry: FaceGeometry
    sharp: NDArray[np.bool_]
    sector: NDArray[np.int32]
    normal: NDArray[np.float64]
    along: NDArray[np.float64]


def part_bounds(count: int, threads: int | None) -> NDArray[np.int64]:
    """Return bounds of a few parts of `count` things for each thread."""
    parts = 1 if count < 4096 else 4 * (threads or thread_count())
    return np.linspace(0, count, parts + 1).astype(np.int64)


def smooth_shape(surface: ControlSurface, *, threads: int | None = None) -> SmoothShape:
    """Recover creases, normals and the curves along creases of a surface.

    Normals come from quadratics fitted to the points of two rings of faces within each
    sector: exact for a paraboloid, second order up to a crease.

    Parameters
    ----------
    surface : ControlSurface
        The surface; curved faces count by their corners.
    threads : int, optional
        Threads; the result does not depend on it.

    Returns
    -------
    SmoothShape
        Groups play no part in it.
    """
    halves = half_edges(surface)
    geometry = face_geometry(surface.points, halves.point, halves.starts)
    sharp = crease_edges(surface.points, halves, geometry, threads)
    sector, count = sectors(halves, sharp)
    around_start, around = sort_into(sector, count)
    position, mean = np.empty((count, 3)), np.empty((count, 3))
    _means(halves.face, halves.place, around_start, around, surface.points, geometry.areas, geometry.normals,
           position, mean)  # fmt: skip
    slopes = np.zeros((count, 3, 3))
    wanted = np.ones(count, np.bool_)
    bounds = part_bounds(count, threads)
    run_parts(
        lambda p: fit_sectors(
            bounds[p], bounds[p + 1], halves.starts, halves.face, sector, around_start, around,
            position, mean, wanted, position, False, slopes,
        ),
        bounds.size - 1,
        threads,
    )  # fmt: skip
    fitted = np.cross(slopes[:, :, 0], slopes[:, :, 1])
    size = np.linalg.norm(fitted, axis=1)
    believed = np.einsum("sk,sk->s", fitted, mean) > _STEADY * size
    normal = np.where(believed[:, None], fitted / np.where(size > 0, size, 1.0)[:, None], mean)
    along = np.zeros_like(surface.points)
    _curves(surface.points, halves.starts, halves.face, halves.place, halves.twin, sharp, along)
    return SmoothShape(halves, geometry, sharp, sector, normal, along)


@compiled
def _means(
    face: Any, place: Any, around_start: Any, around: Any, points: Any, areas: Any, normals: Any, position: Any,
    mean: Any,
) -> None:  # fmt: skip
    """Place of each sector and the mean normal of its faces, by their areas."""
    for s in range(position.shape[0]):
        x, y, z = 0.0, 0.0, 0.0
        for i in range(around_start[s], around_start[s + 1]):
            f = face[around[i]]
            x += areas[f] * normals[f, 0]
            y += areas[f] * normals[f, 1]
            z += areas[f] * normals[f, 2]
        size = sqrt(x * x + y * y + z * z)
        first = around[around_start[s]]
        if not size > 0.0:
            x, y, z, size = 0.0, 0.0, 1.0, 1.0
        mean[s, 0], mean[s, 1], mean[s, 2] = x / size, y / size, z / size
        for k in range(3):
            position[s, k] = points[place[first], k]


@compiled
def _curves(points: Any, starts: Any, face: Any, place: Any, twin: Any, sharp: Any, along: Any) -> None:
    """Tangents of the curves of sharp edges at places where just two of them meet without a corner."""
    ends = np.full((points.shape[0], 2), -1, np.int64)
    degree = np.zeros(points.shape[0], np.int8)
    for k in range(twin.size):
        if not sharp[k]:
            continue
        a, b = place[k], place[next_corner(starts, face, k)]
        for one, other in ((a, b), (b, a)):
            if degree[one] < 3 and ends[one, 0] != other and ends[one, 1] != other and one != other:
                if degree[one] < 2:
                    ends[one, degree[one]] = other
                degree[one] += 1
    for p in range(points.shape[0]):
        if degree[p] != 2:
            continue
        turn, length = _turn(points, ends[p, 0], p, ends[p, 1])
        if turn >= ALWAYS or not length > 0.0:
            continue
        beside, known = 0.0, False
        for q in ends[p]:
            if degree[q] == 2:
                other, size = _turn(points, ends[q, 0], q, ends[q, 1])
                if size > 0.0:
                    beside, known = max(beside, other / size), True
        if known and turn > _NEVER and turn > _ABRUPT * beside * length:
            continue
        _tangent(points, ends[p, 0], p, ends[p, 1], along)


@compiled_inline
def _turn(points: Any, a: int, b: int, c: int) -> tuple[float, float]:
    """Angle by which a curve turns at b, and half the length of its two edges."""
    ux, uy, uz = points[b, 0] - points[a, 0], points[b, 1] - points[a, 1], points[b, 2] - points[a, 2]
    vx, vy, vz = points[c, 0] - points[b, 0], points[c, 1] - points[b, 1], points[c, 2] - points[b, 2]
    u, v = sqrt(ux * ux + uy * uy + uz * uz), sqrt(vx * vx + vy * vy + vz * vz)
    if u == 0.0 or v == 0.0:
        return 0.0, 0.0
    # chord of the unit vectors: exact for small angles, where the cosine is not
    dx, dy, dz = vx / v - ux / u, vy / v - uy / u, vz / v - uz / u
    half = 0.5 * sqrt(dx * dx + dy * dy + dz * dz)
    return 2.0 * (0.5 * np.pi - acos(min(half, 1.0))), 0.5 * (u + v)


@compiled
def _tangent(points: Any, a: int, b: int, c: int, along: Any) -> None:
    """Tangent at b of the parabola through three points, by the lengths of its chords."""
    u, v = 0.0, 0.0
    for k in range(3):
        u += (points[b, k] - points[a, k]) ** 2
        v += (points[c, k] - points[b, k]) ** 2
    u, v = sqrt(u), sqrt(v)
    size = 0.0
    for k in range(3):
        along[b, k] = (points[b, k] - points[a, k]) * v / u + (points[c, k] - points[b, k]) * u / v
        size += along[b, k] ** 2
    size = sqrt(size)
    for k in range(3):
        along[b, k] /= size
