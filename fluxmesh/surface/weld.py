"""Points that stand in one place joined for the pairing of edges, exactly first, then nearly."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.compiling import compiled, run_parts, thread_count

__all__ = ["join_equal_points", "join_near_points", "with_midsides"]

_MOST_PARTS = 4
_CROWD = 16  # more near neighbours than this a point: the tolerance exceeds the spacing of the points


def join_equal_points(points: NDArray[np.float64], candidates: NDArray[np.bool_]) -> NDArray[np.int64]:
    """Give points of equal coordinates one representative.

    Parameters
    ----------
    points : ndarray, shape (n_points, 3), float64
        Coordinates, m; -0.0 equals 0.0, otherwise all bits count.
    candidates : ndarray, shape (n_points,), bool
        Points that may be joined.

    Returns
    -------
    ndarray, shape (n_points,), int64
        The lowest candidate at the same place; a point that is no candidate
        stands for itself.
    """
    bits = np.ascontiguousarray(points).view(np.int64)
    representative = np.arange(points.shape[0])
    parts = min(_MOST_PARTS, thread_count())
    counts = np.zeros(parts, np.int64)
    run_parts(lambda part: _count_places(part, bits, candidates, counts), parts)
    # each part owns a table for its share of the hashes, at most two thirds full
    tables = [np.full(1 << max(4, int(1.5 * n).bit_length()), -1, np.int64) for n in counts.tolist()]
    run_parts(lambda part: _join_equal(part, parts, bits, candidates, tables[part], representative), parts)
    return representative


def join_near_points(
    points: NDArray[np.float64],
    candidates: NDArray[np.bool_],
    representative: NDArray[np.int64],
    tolerance: float,
    faces: tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.int8]],
) -> NDArray[np.int64]:
    """Give points within a tolerance of each other one representative.

    Points of one face are never joined: a cluster that holds two of them stays
    as it was.

    Parameters
    ----------
    points : ndarray, shape (n_points, 3), float64
        Coordinates, m.
    candidates : ndarray, shape (n_points,), bool
        Points that may be joined; only representatives count.
    representative : ndarray, shape (n_points,), int64
        From `join_equal_points`, or every point for itself.
    tolerance : float
        Distance, m.
    faces : tuple of ndarray
        Connectivity, offsets and kinds, of size 0 when absent.

    Returns
    -------
    ndarray, shape (n_points,), int64
        A new representative for each point; `representative` itself when
        nothing can be joined.
    """
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components
    from scipy.spatial import cKDTree

    own = np.flatnonzero(candidates & (representative == np.arange(representative.size)))
    if own.size < 2 or tolerance <= 0:
        return representative
    tree = cKDTree(points[own])
    if tree.count_neighbors(tree, tolerance) > _CROWD * own.size:
        return representative
    pairs = tree.query_pairs(tolerance, output_type="ndarray")
    if pairs.shape[0] == 0:
        return representative
    links = coo_array((np.ones(pairs.shape[0], np.int8), (pairs[:, 0], pairs[:, 1])), (own.size, own.size))
    clusters, label = connected_components(links, directed=False)
    lowest = np.full(clusters, representative.size)
    np.minimum.at(lowest, label, own)
    joined = np.arange(representative.size)
    joined[own] = lowest[label]
    sizes = np.zeros(representative.size, np.int64)
    sizes[lowest] = np.bincount(label, minlength=clusters)
    # from point to representative to cluster
    joined = joined[representative]
    collapsing = np.zeros(representative.size, np.bool_)
    _mark_collapsing(*faces, representative, joined, sizes, collapsing)
    return np.where(collapsing[joined], representative, joined)


def with_midsides(
    on_open_edge: NDArray[np.bool_],
    faces: tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.int8]],
    representative: NDArray[np.int64],
) -> NDArray[np.bool_]:
    """Add the mid-side points between marked corners to the marks.

    Parameters
    ----------
    on_open_edge : ndarray, shape (n_points,), bool
        Marked representatives of corners.
    faces : tuple of ndarray
        Connectivity, offsets and kinds, of size 0 when absent.
    representative : ndarray, shape (n_points,), int64
        Point that stands for each point.

    Returns
    -------
    ndarray, shape (n_points,), bool
        The marks, with the mid-side points of curved faces.
    """
    if faces[2].size == 0:
        return on_open_edge
    marks = on_open_edge.copy()
    _mark_midsides(*faces, representative, on_open_edge, marks)
    return marks


@compiled
def _hash(x: int, y: int, z: int) -> Any:
    """Mix three coordinates by the finaliser of a 64-bit multiplicative generator."""
    value = np.uint64(0)
    for word in (x, y, z):
        # -0.0 has the bits of the least integer
        bits = np.uint64(0) if word == np.int64(-9223372036854775808) else np.uint64(word)
        value = (value ^ bits) * np.uint64(0x9E3779B97F4A7C15)
        value ^= value >> np.uint64(32)
        value *= np.uint64(0xD6E8FEB86659FD93)
        value ^= value >> np.uint64(29)
    return value


@compiled
def _count_places(part: int, bits: Any, candidates: Any, counts: Any) -> None:
    parts = np.uint64(counts.size)
    count = 0
    for point in range(candidates.size):
        if candidates[point]:
            value = _hash(bits[point, 0], bits[point, 1], bits[point, 2])
            if (value >> np.uint64(48)) % parts == np.uint64(part):
                count += 1
    counts[part] = count


@compiled
def _join_equal(part: int, parts: int, bits: Any, candidates: Any, table: Any, representative: Any) -> None:
    mask = np.uint64(table.size - 1)
    points = bits.view(np.float64)
    for point in range(candidates.size):
        if not candidates[point]:
            continue
        value = _hash(bits[point, 0], bits[point, 1], bits[point, 2])
        if (value >> np.uint64(48)) % np.uint64(parts) != np.uint64(part):
            continue
        place = value & mask
        while True:
            other = table[place]
            if other < 0:
                table[place] = point
                break
            if (
                points[other, 0] == points[point, 0]
                and points[other, 1] == points[point, 1]
                and points[other, 2] == points[point, 2]
            ):
                representative[point] = other
                break
            place = (place + np.uint64(1)) & mask


@compiled
def _mark_collapsing(
    connectivity: Any, offsets: Any, kinds: Any, before: Any, after: Any, sizes: Any, collapsing: Any
) -> None:
    """Mark clusters that would join two points of one face."""
    faces = connectivity.size // 3 if offsets.size == 0 else offsets.size - 1
    for face in range(faces):
        first = 3 * face if offsets.size == 0 else offsets[face]
        end = first + 3 if offsets.size == 0 else offsets[face + 1]
        for i in range(first, end):
            cluster = after[connectivity[i]]
            if sizes[cluster] < 2:
                continue
            for j in range(i + 1, end):
                if after[connectivity[j]] == cluster and before[connectivity[j]] != before[connectivity[i]]:
                    collapsing[cluster] = True


@compiled
def _mark_midsides(
    connectivity: Any, offsets: Any, kinds: Any, representative: Any, on_open_edge: Any, marks: Any
) -> None:
    for face in range(kinds.size):
        if kinds[face] == 0:
            continue
        first = offsets[face]
        size = 3 if kinds[face] == 1 else 4
        for i in range(size):
            corner = representative[connectivity[first + i]]
            following = representative[connectivity[first + (i + 1) % size]]
            if on_open_edge[corner] and on_open_edge[following]:
                marks[connectivity[first + size + i]] = True
