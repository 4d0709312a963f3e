"""Compiled passes of the edge pairing: half edges in buckets, matched bucket by bucket.

A face with corners ``c0, c1, ... `` has the half edges ``c0 -> c1``,
``c1 -> c2``, ... Each goes into the bucket of its lower point as the pair
``(higher point, 2 face + backward)``, where backward is 1 when the half edge
runs from its higher to its lower point. Within a bucket equal higher points
are one edge. Filling is a counting sort and buckets are small, so the whole is
linear in the number of half edges.

Absent arrays (offsets, kinds, representative) are passed as arrays of size 0.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.compiling import compiled

__all__ = [
    "corner_count",
    "count_half_edges",
    "edge_end",
    "index_range",
    "join",
    "label_sheets",
    "lay_starts",
    "match_edges",
    "merge_forests",
    "place_half_edges",
]

Ints = NDArray[Any]
_SMALL_BUCKET = 48  # insertion sort up to here, merge sort beyond: a fan of a million faces stays n log n


@compiled
def index_range(part: int, entries: Ints, lows: Ints, highs: Ints) -> None:
    """Write the least and greatest entry of one part of the connectivity."""
    low = entries[0]
    high = entries[0]
    for at in range(entries.size * part // lows.size, entries.size * (part + 1) // lows.size):
        low = min(low, entries[at])
        high = max(high, entries[at])
    lows[part] = low
    highs[part] = high


@compiled
def corner_count(face: int, offsets: Ints, kinds: Ints) -> int:
    """Return the number of corners of a face; mid-side points are none."""
    if kinds.size == 0 or kinds[face] == 0:
        return int(offsets[face + 1] - offsets[face])
    return 3 if kinds[face] == 1 else 4


@compiled
def _load_corners(
    face: int, connectivity: Ints, offsets: Ints, kinds: Ints, representative: Ints, corners: Ints
) -> int:
    """Put the corners of a face into `corners`; leave out repeats and spikes, which enclose nothing."""
    size = corner_count(face, offsets, kinds)
    plain = True
    for i in range(size):
        corner = connectivity[offsets[face] + i]
        if representative.size:
            corner = representative[corner]
        corners[i] = corner
        if (i > 0 and corners[i - 1] == corner) or (i > 1 and corners[i - 2] == corner):
            plain = False
    plain = plain and corners[size - 1] != corners[0]
    if plain and (size == 3 or (corners[size - 2] != corners[0] and corners[size - 1] != corners[1])):
        return size
    return _prune(corners, size)


@compiled
def _prune(corners: Ints, size: int) -> int:
    """Remove repeats (a, a) and spikes (a, b, a) from a cycle, in place; return its new length."""
    kept = 0
    for i in range(size):
        corner = corners[i]
        if kept > 0 and corners[kept - 1] == corner:
            continue
        if kept > 1 and corners[kept - 2] == corner:
            kept -= 1
            continue
        corners[kept] = corner
        kept += 1
    start = 0
    while kept - start > 2:
        if corners[start] == corners[kept - 1]:
            kept -= 1
        elif corners[start] == corners[kept - 2]:
            kept -= 2  # ..., x, a, b then a again: the spike b and one a go
        elif corners[start + 1] == corners[kept - 1]:
            start += 1  # a, then b, a, ...: the spike b and one a go
            kept -= 1
        else:
            break
    size = kept - start
    if size < 3:
        return 0
    for i in range(size):
        corners[i] = corners[start + i]
    return size


@compiled
def _load_triangle(face: int, connectivity: Ints, representative: Ints) -> tuple[int, int, int]:
    a, b, c = connectivity[3 * face], connectivity[3 * face + 1], connectivity[3 * face + 2]
    if representative.size:
        return representative[a], representative[b], representative[c]
    return a, b, c


@compiled
def count_half_edges(
    part: int,
    connectivity: Ints,
    offsets: Ints,
    kinds: Ints,
    representative: Ints,
    most_corners: int,
    counts: Ints,
    no_edges: Ints,
) -> None:
    """Count the half edges by lower point, row `part` of `counts`; mark faces that have no edge left."""
    parts = counts.shape[0]
    faces = connectivity.size // 3 if offsets.size == 0 else offsets.size - 1
    first, end = faces * part // parts, faces * (part + 1) // parts
    row = counts[part]
    if offsets.size == 0:  # by far the most common, and three times faster without a list of corners
        for face in range(first, end):
            a, b, c = _load_triangle(face, connectivity, representative)
            if a == b or b == c or c == a:
                no_edges[face] = True
                continue
            row[min(a, b)] += 1
            row[min(b, c)] += 1
            row[min(c, a)] += 1
        return
    corners = np.empty(most_corners, np.int64)
    for face in range(first, end):
        size = _load_corners(face, connectivity, offsets, kinds, representative, corners)
        if size == 0:
            no_edges[face] = True
            continue
        last = corners[size - 1]
        for i in range(size):
            row[min(last, corners[i])] += 1
            last = corners[i]


@compiled
def lay_starts(counts: Ints, starts: Ints) -> None:
    """Turn counts into the first place of each bucket and, in place, of each part within it."""
    place = starts[0]
    for point in range(counts.shape[1]):
        starts[point] = place
        for part in range(counts.shape[0]):
            count = counts[part, point]
            counts[part, point] = place
            place += count
    starts[counts.shape[1]] = place


@compiled
def place_half_edges(
    part: int,
    connectivity: Ints,
    offsets: Ints,
    kinds: Ints,
    representative: Ints,
    most_corners: int,
    places: Ints,
    slots: Ints,
) -> None:
    """Put every half edge into its bucket, in the order of the faces whatever the number of parts."""
    parts = places.shape[0]
    faces = connectivity.size // 3 if offsets.size == 0 else offsets.size - 1
    first, end = faces * part // parts, faces * (part + 1) // parts
    row = places[part]
    if offsets.size == 0:
        for face in range(first, end):
            a, b, c = _load_triangle(face, connectivity, representative)
            if a != b and b != c and c != a:
                _place(a, b, face, row, slots)
                _place(b, c, face, row, slots)
                _place(c, a, face, row, slots)
        return
    corners = np.empty(most_corners, np.int64)
    for face in range(first, end):
        size = _load_corners(face, connectivity, offsets, kinds, representative, corners)
        if size == 0:
            continue
        last = corners[size - 1]
        for i in range(size):
            _place(last, corners[i], face, row, slots)
            last = corners[i]


@compiled
def _place(start: int, end: int, face: int, row: Ints, slots: Ints) -> None:
    low, high = min(start, end), max(start, end)
    place = row[low]
    row[low] = place + 1
    slots[place, 0] = high
    slots[place, 1] = 2 * face + (1 if start > end else 0)


@compiled
def _sort_bucket(slots: Ints, first: int, end: int) -> None:
    """Sort one bucket by higher point; faces of one edge stay in the order of the faces."""
    if end - first > _SMALL_BUCKET:
        order = np.argsort(slots[first:end, 0].copy(), kind="mergesort")
        bucket = slots[first:end].copy()
        for i in range(order.size):
            slots[first + i, 0] = bucket[order[i], 0]
            slots[first + i, 1] = bucket[order[i], 1]
        return
    for i in range(first + 1, end):
        point, half = slots[i, 0], slots[i, 1]
        j = i - 1
        while j >= first and slots[j, 0] > point:
            slots[j + 1, 0] = slots[j, 0]
            slots[j + 1, 1] = slots[j, 1]
            j -= 1
        slots[j + 1, 0] = point
        slots[j + 1, 1] = half


@compiled
def edge_end(slots: Ints, first: int, bucket_end: int) -> int:
    """Return the slot after the last half edge of the edge that begins at slot `first`."""
    end = first + 1
    while end < bucket_end and slots[end, 0] == slots[first, 0]:
        end += 1
    return end


@compiled
def join(parents: Ints, one: int, other: int) -> None:
    """Unite two sets; a parent never has a higher number than its child.

    Rem's algorithm with splicing, as measured by Patwary, Blair and Manne,
    "Experiments on union-find algorithms for the disjoint-set data
    structure", SEA 2010.
    """
    while parents[one] != parents[other]:
        if parents[one] < parents[other]:
            one, other = other, one
        if parents[one] == one:
            parents[one] = parents[other]
            return
        above = parents[one]
        parents[one] = parents[other]
        one = above


@compiled
def match_edges(
    first_point: int,
    end_point: int,
    starts: Ints,
    slots: Ints,
    forest: Ints,
    tally: Ints,
    on_open_edge: Ints,
) -> None:
    """Sort each bucket, count its edges by kind and unite the faces of two-face edges.

    Works on the buckets of ``first_point`` to ``end_point``; each part of them
    has its own forest. ``tally`` gets the numbers of: edges, edges with an odd
    number of faces, two-face edges run the same way, edges of more than two
    faces, those of them not balanced, half edges of them, and half edges
    without a counterpart outside two-face edges.
    """
    for face in range(forest.size):
        forest[face] = face
    edges = odd = same_way = crowded = unbalanced = crowded_halves = single = 0
    for point in range(first_point, end_point):
        bucket_end = starts[point + 1]
        _sort_bucket(slots, starts[point], bucket_end)
        first = starts[point]
        while first < bucket_end:
            end = edge_end(slots, first, bucket_end)
            edges += 1
            if end - first == 2:
                join(forest, slots[first, 1] >> 1, slots[first + 1, 1] >> 1)
                if (slots[first, 1] ^ slots[first + 1, 1]) & 1 == 0:
                    same_way += 1
            else:
                backward = 0
                for i in range(first, end):
                    backward += slots[i, 1] & 1
                excess = abs(end - first - 2 * backward)
                single += excess
                if (end - first) % 2:
                    odd += 1
                    on_open_edge[point] = True
                    on_open_edge[slots[first, 0]] = True
                if end - first > 2:
                    crowded += 1
                    crowded_halves += end - first
                    if excess:
                        unbalanced += 1
            first = end
    tally[0] = edges
    tally[1] = odd
    tally[2] = same_way
    tally[3] = crowded
    tally[4] = unbalanced
    tally[5] = crowded_halves
    tally[6] = single


@compiled
def merge_forests(forest: Ints, other: Ints) -> None:
    """Unite in `forest` what is united in `other`."""
    for face in range(forest.size):
        if other[face] != face:
            join(forest, face, other[face])


@compiled
def label_sheets(forest: Ints, no_edges: Ints) -> int:
    """Turn a forest, in place, into labels 0, 1, ... by lowest face.

    Faces marked in `no_edges` get the label -1.

    Returns
    -------
    int
        Number of labels.
    """
    count = 0
    for face in range(forest.size):
        # a parent comes before its children, so its entry is a label already
        if forest[face] != face:
            forest[face] = forest[forest[face]]
        elif no_edges[face]:
            forest[face] = -1
        else:
            forest[face] = count
            count += 1
    return count
