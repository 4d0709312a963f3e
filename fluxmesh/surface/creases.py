"""Creases of a surface that stands for a curved one, and the smooth sectors between them.

An edge is a crease when its faces meet at an angle that a smooth surface does not
explain: a great one, or one far above what the faces beside it turn by over the same
distance. Around a point the faces between creases form a sector; within a sector
the surface is smooth, and so are the fields on it if no group ends there.
"""

from __future__ import annotations

from functools import partial
from math import atan2, cos, radians, sqrt
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.compiling import compiled, compiled_inline, run_parts, thread_count
from fluxmesh.surface.face_geometry import FaceGeometry
from fluxmesh.surface.half_edges import HalfEdges, next_corner

__all__ = ["ALWAYS", "crease_edges", "sectors"]

ALWAYS: Final = radians(40.0)
"""Angle between neighbouring faces from which an edge is a crease whatever lies beside it."""

_NEVER: Final = radians(0.2)  # below this no mesh turns sharply: rounded coordinates turn faces a little, too
_ABRUPT: Final = 3.0  # times what the faces beside an edge turn by over the same distance
_ALIKE: Final = 0.2  # a crease leads on over an edge whose angle differs by less than this share
_STEPS: Final = 4  # edges by which a crease may lead on
_ALIGNED: Final = cos(radians(25.0))
_ONWARD: Final = cos(radians(60.0))  # an edge that leads on from another in about its direction


def crease_edges(
    points: NDArray[np.float64], halves: HalfEdges, geometry: FaceGeometry, threads: int | None = None
) -> NDArray[np.bool_]:
    """Return which half edges are sharp.

        The angle θ between two faces is compared with what the faces around both ends
        of their edge predict: an edge among them with angle θ', centroids a distance d' apart
        across it and direction at an angle φ to the edge in question stands for a
        curvature ``θ'/d' cos²φ`` across the latter (Euler's formula; do Carmo, Differential Geometry of
        Curves and Surfaces, section 3-2, from memory). The edges that lead on from the edge itself
        do not count: a crease would excuse itself. Where creases meet they do
    excuse each other; there a crease leads on over edges of about its own angle and direction.

        Parameters
        ----------
        points : ndarray, shape (n_points, 3), float64
            Coordinates, m.
        halves : HalfEdges
            The half edges.
        geometry : FaceGeometry
            Of the faces as polygons of their corners.
        threads : int, optional
            Threads; the result does not depend on it.

        Returns
        -------
        ndarray, shape (n_corners,), bool
            True for both halves of a crease, and for half edges without a single
            counterpart.
    """
    count = halves.twin.size
    angle, reach = np.zeros(count), np.zeros(count)
    sharp = np.zeros(count, np.bool_)
    parts = 1 if count < 4096 else 4 * (threads or thread_count())
    bounds = np.linspace(0, count, parts + 1).astype(np.int64)
    mesh = (points, halves.starts, halves.face, halves.place, halves.twin, halves.around_start, halves.around)
    faces = (geometry.normals, geometry.centroids)
    run_parts(lambda p: _angles(bounds[p], bounds[p + 1], *mesh, *faces, angle, reach), parts, threads)
    run_parts(lambda p: _sharp(bounds[p], bounds[p + 1], *mesh, angle, reach, sharp), parts, threads)
    for _ in range(_STEPS):
        before = sharp.copy()
        run_parts(partial(_lead_on_part, bounds, (*mesh, angle, before, sharp)), parts, threads)
        if np.array_equal(before, sharp):
            break
    return sharp


def _lead_on_part(bounds: NDArray[np.int64], arrays: tuple[Any, ...], part: int) -> None:
    _lead_on(int(bounds[part]), int(bounds[part + 1]), *arrays)


def sectors(halves: HalfEdges, cut: NDArray[np.bool_]) -> tuple[NDArray[np.int32], int]:
    """Join the corners of each point over the edges that are not cut.

    Parameters
    ----------
    halves : HalfEdges
        The half edges.
    cut : ndarray, shape (n_corners,), bool
        Half edges not to join over; those without a single counterpart never are.

    Returns
    -------
    sector : ndarray, shape (n_corners,), int32
        Sector of each corner, numbered by their first corners.
    count : int
        Number of sectors.
    """
    parent = np.arange(halves.twin.size, dtype=np.int32)
    count = int(_join(halves.starts, halves.face, halves.twin, cut, parent))
    return parent, count


@compiled
def _angles(
    first: int, last: int, points: Any, starts: Any, face: Any, place: Any, twin: Any, around_start: Any, around: Any,
    normals: Any, centroids: Any, angle: Any, reach: Any,
) -> None:  # fmt: skip
    """Angle between the faces of each edge, and how far apart their centroids are across it."""
    for k in range(first, last):
        m = twin[k]
        if m < 0:
            continue
        f, g = face[k], face[m]
        ax, ay, az = normals[f, 0], normals[f, 1], normals[f, 2]
        bx, by, bz = normals[g, 0], normals[g, 1], normals[g, 2]
        cx, cy, cz = ay * bz - az * by, az * bx - ax * bz, ax * by - ay * bx
        angle[k] = atan2(sqrt(cx * cx + cy * cy + cz * cz), ax * bx + ay * by + az * bz)
        ex, ey, ez, _ = _edge(points, place[k], place[next_corner(starts, face, k)])
        dx, dy, dz = (
            centroids[g, 0] - centroids[f, 0],
            centroids[g, 1] - centroids[f, 1],
            centroids[g, 2] - centroids[f, 2],
        )
        cx, cy, cz = dy * ez - dz * ey, dz * ex - dx * ez, dx * ey - dy * ex
        reach[k] = sqrt(cx * cx + cy * cy + cz * cz)


@compiled_inline
def _edge(points: Any, a: int, b: int) -> tuple[float, float, float, float]:
    x, y, z = points[b, 0] - points[a, 0], points[b, 1] - points[a, 1], points[b, 2] - points[a, 2]
    length = sqrt(x * x + y * y + z * z)
    over = 1.0 / length if length > 0.0 else 0.0
    return x * over, y * over, z * over, length


@compiled
def _sharp(
    first: int, last: int, points: Any, starts: Any, face: Any, place: Any, twin: Any, around_start: Any, around: Any,
    angle: Any, reach: Any, sharp: Any,
) -> None:  # fmt: skip
    for k in range(first, last):
        m = twin[k]
        if m < 0 or angle[k] >= ALWAYS:
            sharp[k] = True
        elif angle[k] > _NEVER and reach[k] > 0.0:
            sharp[k] = _stands_out(k, m, points, starts, face, place, twin, around_start, around, angle, reach)


@compiled
def _stands_out(
    k: int, m: int, points: Any, starts: Any, face: Any, place: Any, twin: Any, around_start: Any, around: Any,
    angle: Any, reach: Any,
) -> bool:  # fmt: skip
    """Whether the faces beside a half edge do not explain its angle."""
    a, b = place[k], place[next_corner(starts, face, k)]
    enough = angle[k] / (_ABRUPT * reach[k])
    sharing, parallel = 0.0, False
    for end in (a, b):
        for at in range(around_start[end], around_start[end + 1]):
            owner = face[around[at]]
            for j in range(starts[owner], starts[owner + 1]):
                if j == k or j == m or twin[j] < 0 or reach[j] == 0.0:  # noqa: SIM109
                    continue
                bend, shares, along = _bend(points, starts, face, place, j, a, b, angle, reach)
                if shares:
                    sharing = max(sharing, bend)
                elif bend >= enough:
                    return False
                else:
                    parallel = parallel or along * along > 0.5
    # spokes of a cone have nothing parallel beside them but each other
    return parallel or sharing < enough


@compiled
def _lead_on(
    first: int, last: int, points: Any, starts: Any, face: Any, place: Any, twin: Any, around_start: Any, around: Any,
    angle: Any, before: Any, sharp: Any,
) -> None:  # fmt: skip
    """Mark edges that carry on a crease."""
    for k in range(first, last):
        if before[k] or not angle[k] > _NEVER:
            continue
        a, b = place[k], place[next_corner(starts, face, k)]
        ex, ey, ez, _ = _edge(points, a, b)
        for end in (a, b):
            for at in range(around_start[end], around_start[end + 1]):
                owner = face[around[at]]
                for j in range(starts[owner], starts[owner + 1]):
                    c, d = place[j], place[next_corner(starts, face, j)]
                    if twin[j] < 0 or not before[j] or (c != end and d != end):
                        continue
                    fx, fy, fz, _ = _edge(points, c, d)
                    along = ex * fx + ey * fy + ez * fz
                    onward = -along if c == a or d == b else along
                    if onward > _ALIGNED and abs(angle[j] - angle[k]) < _ALIKE * angle[j]:
                        sharp[k] = True


@compiled_inline
def _bend(
    points: Any, starts: Any, face: Any, place: Any, j: int, a: int, b: int, angle: Any, reach: Any
) -> tuple[float, bool, float]:
    """Curvature across the edge from a to b that edge j stands for, whether they share an end, cos of their angle."""
    c, d = place[j], place[next_corner(starts, face, j)]
    ex, ey, ez, _ = _edge(points, a, b)
    fx, fy, fz, _ = _edge(points, c, d)
    along = ex * fx + ey * fy + ez * fz
    at_first, at_last = c == a or d == b, c == b or d == a
    shares = at_first or at_last
    # the outward direction of an edge that leads on
    onward = -along if at_first else along
    if shares and onward > _ONWARD:
        return 0.0, True, along
    return angle[j] / reach[j] * along * along, shares, along


@compiled_inline
def _root(parent: Any, k: int) -> int:
    while parent[k] != k:
        parent[k] = parent[parent[k]]
        k = parent[k]
    return k


@compiled
def _join(starts: Any, face: Any, twin: Any, cut: Any, parent: Any) -> int:
    for k in range(twin.size):
        m = twin[k]
        if m > k and not cut[k]:
            after, other = next_corner(starts, face, k), next_corner(starts, face, m)
            a, b = _root(parent, k), _root(parent, other)
            parent[max(a, b)] = min(a, b)
            a, b = _root(parent, after), _root(parent, m)
            parent[max(a, b)] = min(a, b)
    count = 0
    for k in range(parent.size):
        # roots are the lowest corners of their sets, so they have their number (negative) when others ask
        if parent[k] == k:
            parent[k] = -1 - count
            count += 1
        else:
            parent[k] = parent[parent[k]]
    for k in range(parent.size):
        parent[k] = -1 - parent[k]
    return count
