"""Half edges of a surface and their counterparts, corner by corner.

Corner ``k`` of a face starts the half edge to the face's next corner. Its
counterpart runs the other way in the neighbouring face. Points that stand in one
place on open edges count as one, as in `fluxmesh.surface.mend`.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from fluxmesh.compiling import compiled
from fluxmesh.surface.face_geometry import corners
from fluxmesh.surface.surface import ControlSurface
from fluxmesh.surface.weld import join_equal_points

__all__ = ["HalfEdges", "half_edges", "next_corner", "sort_into"]

_SMALL_BUCKET = 48  # compared one by one up to here, sorted beyond


class HalfEdges(NamedTuple):
    """Corners of all faces and how they hang together; curved faces by their corners.

    Attributes
    ----------
    starts : ndarray, shape (n_faces + 1,), int64
        Corners of face ``f`` are ``starts[f]`` to ``starts[f + 1]``.
    face : ndarray, shape (n_corners,), int32
        Face of each corner.
    point : ndarray, shape (n_corners,), int64
        Point of each corner.
    place : ndarray, shape (n_corners,), int64
        The same where points in one place on open edges count as one.
    twin : ndarray, shape (n_corners,), int32
        Corner that starts the counterpart of each half edge; -1 where there is
        none, -2 at an edge of more than two faces or of two that run the same way.
    around_start : ndarray, shape (n_points + 1,), int64
        Where the corners of each place start in `around`.
    around : ndarray, shape (n_corners,), int32
        Corners by place.
    """

    starts: NDArray[np.int64]
    face: NDArray[np.int32]
    point: NDArray[np.int64]
    place: NDArray[np.int64]
    twin: NDArray[np.int32]
    around_start: NDArray[np.int64]
    around: NDArray[np.int32]


def half_edges(surface: ControlSurface) -> HalfEdges:
    """Return the half edges of a surface with their counterparts.

    Parameters
    ----------
    surface : ControlSurface
        The surface.

    Returns
    -------
    HalfEdges
        In linear time, but for the sorting at points of very many faces.
    """
    point, offsets = corners(surface.connectivity, surface.offsets, surface.kinds)
    starts = 3 * np.arange(surface.face_count + 1, dtype=np.int64) if offsets is None else offsets
    face = np.repeat(np.arange(surface.face_count, dtype=np.int32), np.diff(starts))
    place = point
    twin = _pair(starts, face, place, surface.point_count)
    single = np.flatnonzero(twin == -1)
    if single.size:
        candidates = np.zeros(surface.point_count, np.bool_)
        candidates[point[single]] = True
        candidates[point[_following(starts, face, single)]] = True
        place = join_equal_points(surface.points, candidates)[point]
        twin = _pair(starts, face, place, surface.point_count)
    around_start, around = sort_into(place, surface.point_count)
    return HalfEdges(starts, face, point, place, twin, around_start, around)


def sort_into(label: NDArray[Any], count: int) -> tuple[NDArray[np.int64], NDArray[np.int32]]:
    """Sort entries into numbered bins, keeping their order within each.

    Parameters
    ----------
    label : ndarray of int, shape (n,)
        Bin of each entry.
    count : int
        Number of bins.

    Returns
    -------
    starts : ndarray, shape (count + 1,), int64
        Where each bin starts.
    entries : ndarray, shape (n,), int32
        Entries by bin.
    """
    starts = np.zeros(count + 1, np.int64)
    entries = np.empty(label.size, np.int32)
    _sort_into(label, starts, entries)
    return starts, entries


@compiled
def next_corner(starts: Any, face: Any, corner: int) -> int:
    """Return the corner after a corner in its face."""
    owner = face[corner]
    return corner + 1 if corner + 1 < starts[owner + 1] else starts[owner]


@compiled
def _following(starts: Any, face: Any, some: Any) -> Any:
    result = np.empty(some.size, np.int64)
    for i in range(some.size):
        result[i] = next_corner(starts, face, some[i])
    return result


@compiled
def _sort_into(label: Any, starts: Any, entries: Any) -> None:
    for k in range(label.size):
        starts[label[k] + 1] += 1
    for i in range(1, starts.size):
        starts[i] += starts[i - 1]
    fill = starts[:-1].copy()
    for k in range(label.size):
        entries[fill[label[k]]] = k
        fill[label[k]] += 1


def _pair(
    starts: NDArray[np.int64], face: NDArray[np.int32], place: NDArray[np.int64], point_count: int
) -> NDArray[np.int32]:
    low, high = np.empty(place.size, np.int64), np.empty(place.size, np.int64)
    _ends(starts, face, place, low, high)
    bucket_start, bucket = sort_into(low, point_count)
    twin = np.full(place.size, -1, np.int32)
    _match(bucket_start, bucket, high, place, twin)
    return twin


@compiled
def _ends(starts: Any, face: Any, place: Any, low: Any, high: Any) -> None:
    for k in range(place.size):
        a, b = place[k], place[next_corner(starts, face, k)]
        low[k], high[k] = min(a, b), max(a, b)


@compiled
def _match(bucket_start: Any, bucket: Any, high: Any, place: Any, twin: Any) -> None:
    for point in range(bucket_start.size - 1):
        some = bucket[bucket_start[point] : bucket_start[point + 1]]
        if some.size > _SMALL_BUCKET:
            keys = np.empty(some.size, np.int64)
            for i in range(some.size):
                keys[i] = high[some[i]]
            some = some[np.argsort(keys)]
            first = 0
            while first < some.size:
                last = first + 1
                while last < some.size and high[some[last]] == high[some[first]]:
                    last += 1
                _match_edge(some[first:last], high[some[first]], point, high, place, twin)
                first = last
        else:
            for i in range(some.size):
                if twin[some[i]] == -1:
                    _match_edge(some[i:], high[some[i]], point, high, place, twin)


@compiled
def _match_edge(some: Any, end: int, point: int, high: Any, place: Any, twin: Any) -> None:
    """Match the half edges among `some` between two points."""
    count, one, two = 0, -1, -1
    for k in some:
        if high[k] == end:
            count += 1
            one, two = two, k
    if count == 2 and end != point and place[one] != place[two]:
        twin[one], twin[two] = two, one
    elif count > 1 or end == point:
        for k in some:
            if high[k] == end:
                twin[k] = -2
