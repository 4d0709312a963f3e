"""Compiled passes over matched buckets: what is open, crowded or at odds, and which faces must turn.

The buckets are those of `fluxmesh.surface.edge_kernels.match_edges`; only
surfaces that are not closed and consistent at first sight come here.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.compiling import compiled
from fluxmesh.surface.edge_kernels import corner_count, edge_end, join

__all__ = ["join_sheets", "list_edges", "list_midside_gaps", "relate_faces"]

Ints = NDArray[Any]


@compiled
def join_sheets(starts: Ints, slots: Ints, sheet_of_face: Ints, sheets: int, shell_of_face: Ints) -> int:
    """Unite sheets that close only together at edges of more than two faces.

    A sheet is a set of faces joined over two-face edges. One that meets a
    crowded edge with an even number of faces closes there by itself; those that
    meet it with an odd number belong together.

    Returns
    -------
    int
        Number of shells; `shell_of_face` gets the labels.
    """
    parents = np.arange(sheets)
    for point in range(starts.size - 1):
        first = starts[point]
        while first < starts[point + 1]:
            end = edge_end(slots, first, starts[point + 1])
            if end - first > 2:
                here = np.empty(end - first, np.int64)
                for i in range(first, end):
                    here[i - first] = sheet_of_face[slots[i, 1] >> 1]
                here.sort()
                partner = -1
                i = 0
                while i < here.size:
                    j = i + 1
                    while j < here.size and here[j] == here[i]:
                        j += 1
                    if (j - i) % 2:
                        if partner >= 0:
                            join(parents, partner, here[i])
                        partner = here[i]
                    i = j
            first = end
    count = 0
    for sheet in range(sheets):
        if parents[sheet] == sheet:
            parents[sheet] = count
            count += 1
        else:
            parents[sheet] = parents[parents[sheet]]
    for face in range(sheet_of_face.size):
        shell_of_face[face] = parents[sheet_of_face[face]] if sheet_of_face[face] >= 0 else -1
    return count


@compiled
def list_edges(starts: Ints, slots: Ints, single: Ints, same_way: Ints, crowded: Ints) -> None:
    """List half edges without counterpart, two-face edges run the same way, and crowded half edges."""
    singles = same_ways = crowdeds = 0
    for point in range(starts.size - 1):
        first = starts[point]
        while first < starts[point + 1]:
            end = edge_end(slots, first, starts[point + 1])
            if end - first == 2:
                if (slots[first, 1] ^ slots[first + 1, 1]) & 1 == 0:
                    same_way[same_ways, 0] = point
                    same_way[same_ways, 1] = slots[first, 0]
                    same_way[same_ways, 2] = slots[first, 1] >> 1
                    same_way[same_ways, 3] = slots[first + 1, 1] >> 1
                    same_ways += 1
            else:
                backward = 0
                for i in range(first, end):
                    backward += slots[i, 1] & 1
                excess_way = 1 if 2 * backward > end - first else 0
                excess = abs(end - first - 2 * backward)
                for i in range(end - 1, first - 1, -1):
                    if excess > 0 and slots[i, 1] & 1 == excess_way:
                        _write_half_edge(single, singles, point, slots, i)
                        singles += 1
                        excess -= 1
                if end - first > 2:
                    for i in range(first, end):
                        _write_half_edge(crowded, crowdeds, point, slots, i)
                        crowdeds += 1
            first = end


@compiled
def _write_half_edge(rows: Ints, at: int, point: int, slots: Ints, slot: int) -> None:
    backward = slots[slot, 1] & 1
    rows[at, backward] = point
    rows[at, 1 - backward] = slots[slot, 0]
    rows[at, 2] = slots[slot, 1] >> 1


@compiled
def relate_faces(starts: Ints, slots: Ints, parents: Ints, turned: Ints, conflict: Ints) -> None:
    """Find which faces of each sheet must turn to run as its first face does.

    Disjoint sets with parity: ``turned[f]`` is relative to the parent while
    they are built and relative to the sheet's first face at the end.
    ``conflict`` gets (lower point, higher point, face, face) of the first edge
    at which a sheet contradicts itself, and stays as it was when there is none.
    """
    for face in range(parents.size):
        parents[face] = face
    found = False
    for point in range(starts.size - 1):
        first = starts[point]
        while first < starts[point + 1]:
            end = edge_end(slots, first, starts[point + 1])
            if end - first == 2:
                one, other = slots[first, 1] >> 1, slots[first + 1, 1] >> 1
                differ = 1 - ((slots[first, 1] ^ slots[first + 1, 1]) & 1)
                root, root_other = _root(parents, turned, one), _root(parents, turned, other)
                # after _root, `turned` of a face is relative to its root
                differ ^= turned[one] if one != root else 0
                differ ^= turned[other] if other != root_other else 0
                if root < root_other:
                    parents[root_other] = root
                    turned[root_other] = differ
                elif root_other < root:
                    parents[root] = root_other
                    turned[root] = differ
                elif differ and not found:
                    found = True
                    conflict[0] = point
                    conflict[1] = slots[first, 0]
                    conflict[2] = one
                    conflict[3] = other
            first = end
    for face in range(parents.size):
        _root(parents, turned, face)


@compiled
def _root(parents: Ints, turned: Ints, face: int) -> int:
    """Return the root of a face and hang the faces on the way directly below it."""
    root = face
    parity = 0
    while parents[root] != root:
        parity ^= turned[root]
        root = parents[root]
    while parents[face] != root and face != root:
        above = parents[face]
        own = turned[face]
        parents[face] = root
        turned[face] = parity
        parity ^= own
        face = above
    return root


@compiled
def list_midside_gaps(
    starts: Ints,
    slots: Ints,
    connectivity: Ints,
    offsets: Ints,
    kinds: Ints,
    representative: Ints,
    gaps: Ints,
) -> int:
    """List two-face edges whose faces name different mid-side points; -1 for a straight side.

    Rows of `gaps` are (lower point, higher point, face, face, mid, mid), as
    many as fit.

    Returns
    -------
    int
        Number of such edges.
    """
    count = 0
    for point in range(starts.size - 1):
        first = starts[point]
        while first < starts[point + 1]:
            end = edge_end(slots, first, starts[point + 1])
            if end - first == 2:
                one, other = slots[first, 1] >> 1, slots[first + 1, 1] >> 1
                far = slots[first, 0]
                mid = _midside(one, point, far, connectivity, offsets, kinds, representative)
                mid_other = _midside(other, point, far, connectivity, offsets, kinds, representative)
                if mid != mid_other:
                    if count < gaps.shape[0]:
                        gaps[count, 0] = point
                        gaps[count, 1] = far
                        gaps[count, 2] = one
                        gaps[count, 3] = other
                        gaps[count, 4] = mid
                        gaps[count, 5] = mid_other
                    count += 1
            first = end
    return count


@compiled
def _midside(
    face: int,
    near: int,
    far: int,
    connectivity: Ints,
    offsets: Ints,
    kinds: Ints,
    representative: Ints,
) -> int:
    if kinds[face] == 0:
        return -1
    size = corner_count(face, offsets, kinds)
    for i in range(size):
        corner = connectivity[offsets[face] + i]
        following = connectivity[offsets[face] + (i + 1) % size]
        mid = connectivity[offsets[face] + size + i]
        if representative.size:
            corner = representative[corner]
            following = representative[following]
            mid = representative[mid]
        if (corner == near and following == far) or (corner == far and following == near):
            return int(mid)
    return -1
