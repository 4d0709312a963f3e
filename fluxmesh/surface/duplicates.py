"""Faces given twice: found where edges are crowded, dropped within a group, refused across groups."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from fluxmesh.surface.edges import EdgePairing

__all__ = ["Duplicates", "find_duplicates"]

_Ints = NDArray[np.int64]


class Duplicates(NamedTuple):
    """Faces on the same points.

    Attributes
    ----------
    extra : ndarray, shape (n,), int64
        Faces to drop.
    original : ndarray, shape (n,), int64
        The face that each of them repeats.
    paired : int
        Faces that lie on another with the opposite normal, and balance with
        it: a thin wall of no thickness.
    """

    extra: _Ints
    original: _Ints
    paired: int


def find_duplicates(
    connectivity: _Ints,
    offsets: _Ints | None,
    kinds: NDArray[np.int8] | None,
    pairing: EdgePairing,
    representative: _Ints | None = None,
) -> Duplicates:
    """Find faces that lie on the same points as another.

    Copies that run the same way are duplicates. Copies that run opposite ways
    are the two sides of a thin wall when every edge of it has an even number
    of faces; otherwise the orientation of the file is not to be trusted there
    and they are duplicates too.

    Parameters
    ----------
    connectivity, offsets, kinds, representative
        As for `fluxmesh.surface.edges.pair_edges`.
    pairing : EdgePairing
        Of these faces, with its lists.

    Returns
    -------
    Duplicates
        What to drop, and what was found and is to stay.
    """
    crowded = pairing.crowded_edges
    faces = np.unique(np.concatenate([crowded[:, 2], pairing.same_way_edges[:, 2:].ravel()]))
    copies, forward = _copies(faces, connectivity, offsets, kinds, representative)
    # only sets of two or more matter from here on
    multiple = np.bincount(copies, minlength=1)[copies] > 1 if copies.size else np.zeros(0, np.bool_)
    faces, copies, forward = faces[multiple], copies[multiple], forward[multiple]
    if faces.size == 0:
        none = np.empty(0, np.int64)
        return Duplicates(none, none, 0)
    _, copies = np.unique(copies, return_inverse=True)
    count = int(copies.max()) + 1
    ahead = np.bincount(copies, forward, count).astype(np.int64)
    behind = np.bincount(copies, minlength=count) - ahead
    one_way = (ahead == 0) | (behind == 0)
    keep_one = one_way | _beside_odd_edges(faces, copies, count, crowded)
    keep_pair = ~keep_one & (ahead == behind)
    # faces rise, so the first of each set, and of each set and direction, is the lowest
    _, first_of_set = np.unique(copies, return_index=True)
    first_of_way = np.zeros(faces.size, np.bool_)
    first_of_way[np.unique(2 * copies + forward, return_index=True)[1]] = True
    is_first = np.zeros(faces.size, np.bool_)
    is_first[first_of_set] = True
    drop = np.where(keep_one[copies], ~is_first, keep_pair[copies] & ~first_of_way)
    originals = faces[first_of_set][copies]
    paired = int(np.count_nonzero(~keep_one[copies] & ~drop))
    return Duplicates(faces[drop], originals[drop], paired)


def _copies(
    faces: _Ints,
    connectivity: _Ints,
    offsets: _Ints | None,
    kinds: NDArray[np.int8] | None,
    representative: _Ints | None,
) -> tuple[_Ints, NDArray[np.bool_]]:
    """Number faces by what they lie on, and say which run the way of their lowest numbering."""
    sets = np.empty(faces.size, np.int64)
    forward = np.zeros(faces.size, np.bool_)
    kind = np.zeros(faces.size, np.int64) if kinds is None else kinds[faces].astype(np.int64)
    starts = 3 * faces if offsets is None else offsets[faces]
    sizes = np.full(faces.size, 3) if offsets is None else offsets[faces + 1] - starts
    count = 0
    for shape in np.unique(np.stack([kind, sizes]), axis=1).T.tolist():
        chosen = np.flatnonzero((kind == shape[0]) & (sizes == shape[1]))
        entries = connectivity[starts[chosen, None] + np.arange(shape[1])]
        if representative is not None:
            entries = representative[entries]
        corners = {0: shape[1], 1: 3}.get(shape[0], 4)
        key, forward[chosen] = _canonical(entries, corners)
        _, labels = np.unique(key, axis=0, return_inverse=True)
        sets[chosen] = count + labels.ravel()
        count += int(labels.max()) + 1
    return sets, forward


def _canonical(entries: _Ints, corners: int) -> tuple[_Ints, NDArray[np.bool_]]:
    """Begin each row at its lowest corner and run towards the lower neighbour."""
    places = np.arange(corners)
    lowest = np.argmin(entries[:, :corners], axis=1)[:, None]
    ahead = np.take_along_axis(entries, (lowest + places) % corners, axis=1)
    back = np.take_along_axis(entries, (lowest - places) % corners, axis=1)
    forward = ahead[:, 1] < ahead[:, -1]
    # mid-side points are set by the corners; sorted they tell a bulge from a flat face
    others = np.sort(entries[:, corners:], axis=1)
    return np.hstack([np.where(forward[:, None], ahead, back), others]), forward


def _beside_odd_edges(faces: _Ints, copies: _Ints, count: int, crowded: _Ints) -> NDArray[np.bool_]:
    """Say which sets hang together with an edge that has an odd number of faces."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    ends = np.sort(crowded[:, :2], axis=1)
    changes = np.any(ends[1:] != ends[:-1], axis=1)
    edge = np.concatenate([[0], np.cumsum(changes)])[: len(ends)]
    edges = int(edge.max(initial=-1)) + 1
    odd = np.bincount(edge, minlength=edges) % 2 == 1
    place = np.searchsorted(faces, crowded[:, 2])
    place[place == faces.size] = 0
    here = faces[place] == crowded[:, 2]
    rows, columns = copies[place[here]], count + edge[here]
    links = coo_array((np.ones(rows.size, np.int8), (rows, columns)), (count + edges, count + edges))
    clusters, label = connected_components(links, directed=False)
    touched = np.zeros(clusters, np.bool_)
    touched[label[count:][odd]] = True
    return np.asarray(touched[label[:count]])
