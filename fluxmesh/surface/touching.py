"""Which faces touch along an edge, where coincident points count as one, and what hangs together."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.surface.face_geometry import corner_entries

__all__ = ["edge_neighbours", "region_of"]


def edge_neighbours(
    points: NDArray[Any],
    connectivity: NDArray[np.int64],
    offsets: NDArray[np.int64] | None,
    faces: NDArray[np.int64],
    merge: float,
) -> NDArray[np.int64]:
    """Return pairs of faces that share an edge.

    Points that coincide count as one: exactly, and, along edges that are
    then still alone, within `merge`.

    Parameters
    ----------
    points, connectivity, offsets
        As `face_areas_normals`.
    faces : ndarray of int64
        Only these faces are looked at.
    merge : float
        Distance, in the points' unit, within which points coincide.

    Returns
    -------
    ndarray, shape (n, 2), int64
        Positions in `faces`. Of k faces at one edge, neighbours in the list
        of the k are paired.
    """
    entries, starts = corner_entries(offsets, faces)
    tails = connectivity[entries]
    following = np.arange(1, starts[-1] + 1)
    following[starts[1:] - 1] = starts[:-1]
    used = np.zeros(points.shape[0], dtype=bool)
    used[tails] = True
    tails = (np.cumsum(used) - 1)[tails]
    place = points[used].astype(np.float64)
    tails = _same_places(place)[tails]
    owner = np.repeat(np.arange(faces.size), np.diff(starts))
    pairs, alone = _pair_edges(tails, tails[following], owner)
    if alone.any() and merge > 0.0:
        rim = np.unique(np.concatenate([tails[alone], tails[following][alone]]))
        tails = _same_within(place, rim, merge)[tails]
        pairs, _ = _pair_edges(tails, tails[following], owner)
    return pairs


def _same_places(place: NDArray[np.float64]) -> NDArray[np.int64]:
    """Number points so that exact copies bear one number: that of the first of them."""
    bits = (place + 0.0).view(np.uint64)  # adding zero makes -0.0 and 0.0 the same bits
    # odd multipliers keep every bit; copies that collide by chance are told apart below
    mixed = bits * np.array([0x9E3779B97F4A7C15, 0xC2B2AE3D27D4EB4F, 0x165667B19E3779F9], dtype=np.uint64)
    mixed ^= mixed >> np.uint64(29)
    keys = mixed[:, 0] * np.uint64(3) + mixed[:, 1] * np.uint64(5) + mixed[:, 2] * np.uint64(7)
    _, first, number = np.unique(keys, return_index=True, return_inverse=True)
    same = first[number]
    apart = (place[same] != place).any(axis=1)
    same[apart] = np.flatnonzero(apart)
    return same


def _same_within(place: NDArray[np.float64], rim: NDArray[np.int64], merge: float) -> NDArray[np.int64]:
    """Number points so that those of `rim` within `merge` of each other bear one number."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components
    from scipy.spatial import cKDTree

    close = cKDTree(place[rim]).query_pairs(merge, output_type="ndarray")
    graph = coo_array((np.ones(len(close), dtype=bool), (close[:, 0], close[:, 1])), shape=(rim.size, rim.size))
    label = connected_components(graph, directed=False)[1]
    _, first = np.unique(label, return_index=True)
    number = np.arange(place.shape[0], dtype=np.int64)
    number[rim] = rim[first[label]]
    return number


def _pair_edges(
    tails: NDArray[np.int64], heads: NDArray[np.int64], owner: NDArray[np.int64]
) -> tuple[NDArray[np.int64], NDArray[np.bool_]]:
    """Return pairs of owners of equal edges, and which edges have no partner."""
    low, high = np.minimum(tails, heads), np.maximum(tails, heads)
    keys = low * (int(high.max(initial=0)) + 1) + high
    order = np.argsort(keys)
    equal = keys[order[1:]] == keys[order[:-1]]
    pairs = np.column_stack([owner[order[:-1]], owner[order[1:]]])[equal]
    alone = np.ones(keys.size, dtype=bool)
    alone[order[:-1][equal]] = False
    alone[order[1:][equal]] = False
    return pairs[pairs[:, 0] != pairs[:, 1]], alone


def region_of(pairs: NDArray[np.int64], count: int) -> NDArray[np.int64]:
    """Label connected faces.

    Parameters
    ----------
    pairs : ndarray, shape (n, 2), int64
        Faces that touch.
    count : int
        Number of faces.

    Returns
    -------
    ndarray, shape (count,), int64
        Equal for faces that hang together; labels run from 0.
    """
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    graph = coo_array((np.ones(len(pairs), dtype=bool), (pairs[:, 0], pairs[:, 1])), shape=(count, count))
    return np.asarray(connected_components(graph, directed=False)[1], dtype=np.int64)
