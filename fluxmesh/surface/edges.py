"""Edge pairing: what is closed, which way faces run, and which faces hang together.

Every face brings its half edges, from corner to corner in its own direction. A
surface is closed and consistently oriented when each edge is run as often
forward as backward. One counting sort finds that in linear time.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, NamedTuple, TypeAlias

import numpy as np
from numpy.typing import NDArray

from fluxmesh.compiling import run_parts, thread_count
from fluxmesh.errors import SurfaceError
from fluxmesh.surface import edge_kernels, edge_passes

__all__ = ["EdgePairing", "FaceRelation", "pair_edges", "relate_faces"]

_MOST_PARTS = 4  # each part needs a forest of the faces and a count of the points
_NARROW_LIMIT = 2**31  # work arrays hold 32-bit numbers up to here
_NO_INDEX = np.empty(0, np.int64)
_NO_KIND = np.empty(0, np.int8)
_Index: TypeAlias = NDArray[Any]


@dataclass(frozen=True, eq=False)
class EdgePairing:
    """What the pairing of half edges found.

    A sheet is a set of faces joined over edges of exactly two faces. A shell is
    a sheet, or several that close only together at edges of more than two.

    Attributes
    ----------
    edge_count : int
        Number of edges.
    odd_count : int
        Edges with an odd number of faces: there is a hole beside each,
        whichever way faces run.
    same_way_count : int
        Edges of two faces that both run the same way.
    crowded_count : int
        Edges of more than two faces.
    unbalanced_crowded_count : int
        Those of them that are not run as often forward as backward.
    open_edges : ndarray, shape (m, 3), int64
        Half edges without a counterpart, ``[from, to, face]``: all edges of a
        single face, and the excess at unbalanced crowded edges. Two-face edges
        are never here.
    same_way_edges : ndarray, shape (same_way_count, 4), int64
        ``[lower point, higher point, face, face]``.
    crowded_edges : ndarray, shape (c, 3), int64
        All half edges of crowded edges, ``[from, to, face]``, edge by edge.
    midside_gaps : ndarray, shape (g, 6), int64
        Two-face edges whose faces name different mid-side points:
        ``[lower point, higher point, face, face, mid, mid]``, -1 for a straight side.
    on_open_edge : ndarray, shape (n_points,), bool
        Points (representatives, when given) at an end of an odd edge.
    shell_of_face : ndarray, shape (n_faces,), int32
        Shells are numbered by their first face; -1 for a face that repeats
        points so that it has no edges left.
    shell_count : int
        Number of shells.
    closed : bool
        Every edge is run as often forward as backward.
    """

    edge_count: int
    odd_count: int
    same_way_count: int
    crowded_count: int
    unbalanced_crowded_count: int
    open_edges: NDArray[np.int64]
    same_way_edges: NDArray[np.int64]
    crowded_edges: NDArray[np.int64]
    midside_gaps: NDArray[np.int64]
    on_open_edge: NDArray[np.bool_]
    shell_of_face: NDArray[np.int32]
    shell_count: int
    closed: bool

    @property
    def sealed(self) -> bool:
        """Every edge has an even number of faces: closed, but for the way faces run."""
        return self.odd_count == 0

    @property
    def consistent(self) -> bool:
        """No two neighbours run the same way, and crowded edges balance."""
        return self.same_way_count == 0 and self.unbalanced_crowded_count == 0


@dataclass(frozen=True, eq=False)
class FaceRelation:
    """Which faces run against the first face of their sheet.

    Attributes
    ----------
    first_face : ndarray, shape (n_faces,), int32 or int64
        Lowest face of each face's sheet.
    against : ndarray, shape (n_faces,), bool
        True for a face that must turn to run as the first face of its sheet does.
    conflict : tuple of int, or None
        ``(point, point, face, face)`` of an edge at which a sheet contradicts
        itself: it is one-sided. None when there is no such sheet.
    """

    first_face: NDArray[Any]
    against: NDArray[np.bool_]
    conflict: tuple[int, int, int, int] | None


class _Faces(NamedTuple):
    """Arguments the kernels share; absent arrays have size 0."""

    connectivity: NDArray[np.int64]
    offsets: NDArray[np.int64]
    kinds: NDArray[np.int8]
    representative: NDArray[np.int64]

    @property
    def face_count(self) -> int:
        return self.offsets.size - 1 if self.offsets.size else self.connectivity.size // 3


class _Matched(NamedTuple):
    """Sorted buckets, the forest of the faces, and what was counted."""

    starts: _Index
    slots: _Index
    forest: _Index
    tally: NDArray[np.int64]
    on_open_edge: NDArray[np.bool_]
    no_edges: NDArray[np.bool_]


def pair_edges(
    connectivity: NDArray[np.int64],
    offsets: NDArray[np.int64] | None,
    kinds: NDArray[np.int8] | None,
    point_count: int,
    representative: NDArray[np.int64] | None = None,
    *,
    listing: bool = True,
) -> EdgePairing:
    """Pair the half edges of a surface in linear time.

    Curved faces are paired by their corners. Repeated corners and spikes
    (there and back) of a face enclose nothing and are passed over.

    Parameters
    ----------
    connectivity : ndarray, shape (n_entries,), int64
        Point indices of all faces, one face after the other.
    offsets : ndarray, shape (n_faces + 1,), int64, or None
        Where each face starts; None when every face is a straight triangle.
    kinds : ndarray, shape (n_faces,), int8, or None
        `fluxmesh.surface.surface.FaceKind` of each face; None when all are
        straight-edged.
    point_count : int
        Number of points.
    representative : ndarray, shape (n_points,), int64, optional
        Point that stands for each point: pairing runs as if they were one.
    listing : bool, optional
        False leaves `open_edges`, `same_way_edges`, `crowded_edges` and
        `midside_gaps` empty; a surface with no shared point would list all.

    Returns
    -------
    EdgePairing
        The same for any number of threads.

    Raises
    ------
    SurfaceError
        No faces, offsets that do not fit, or indices out of range.

    Notes
    -----
    Five million triangles need about 180 MB of work memory on two threads.
    """
    faces = _faces(connectivity, offsets, kinds, point_count, representative)
    matched = _match(faces, point_count)
    edges, odd, same_way, crowded, unbalanced, crowded_halves, single = (int(n) for n in matched.tally)
    shell_of_face = matched.forest
    sheets = int(edge_kernels.label_sheets(shell_of_face, matched.no_edges))
    if crowded:
        sheet_of_face = shell_of_face.copy()
        sheets = int(edge_passes.join_sheets(matched.starts, matched.slots, sheet_of_face, sheets, shell_of_face))
    listed = listing and (single or same_way or crowded)
    open_edges = np.empty((single if listed else 0, 3), np.int64)
    same_way_edges = np.empty((same_way if listed else 0, 4), np.int64)
    crowded_edges = np.empty((crowded_halves if listed else 0, 3), np.int64)
    if listed:
        edge_passes.list_edges(matched.starts, matched.slots, open_edges, same_way_edges, crowded_edges)
    return EdgePairing(
        edge_count=edges,
        odd_count=odd,
        same_way_count=same_way,
        crowded_count=crowded,
        unbalanced_crowded_count=unbalanced,
        open_edges=open_edges,
        same_way_edges=same_way_edges,
        crowded_edges=crowded_edges,
        midside_gaps=_midside_gaps(matched, faces, listing),
        on_open_edge=matched.on_open_edge,
        shell_of_face=shell_of_face.astype(np.int32, copy=False),
        shell_count=sheets,
        closed=single == 0 and same_way == 0,
    )


def relate_faces(
    connectivity: NDArray[np.int64],
    offsets: NDArray[np.int64] | None,
    kinds: NDArray[np.int8] | None,
    point_count: int,
    representative: NDArray[np.int64] | None = None,
) -> FaceRelation:
    """Find which faces of each sheet run against the sheet's first face.

    Only edges of exactly two faces relate their faces: at a crowded edge it is
    open which two belong together.

    Parameters
    ----------
    connectivity, offsets, kinds, point_count, representative
        As for `pair_edges`.

    Returns
    -------
    FaceRelation
        The relation, and a place where a one-sided sheet contradicts itself.

    Raises
    ------
    SurfaceError
        As `pair_edges`.
    """
    faces = _faces(connectivity, offsets, kinds, point_count, representative)
    matched = _match(faces, point_count)
    parents = np.empty(faces.face_count, matched.slots.dtype)
    against = np.zeros(faces.face_count, np.uint8)
    conflict = np.full(4, -1, np.int64)
    edge_passes.relate_faces(matched.starts, matched.slots, parents, against, conflict)
    low, high, one, other = (int(n) for n in conflict)
    return FaceRelation(
        first_face=parents,
        against=against.view(np.bool_),
        conflict=None if low < 0 else (low, high, one, other),
    )


def _faces(
    connectivity: NDArray[np.int64],
    offsets: NDArray[np.int64] | None,
    kinds: NDArray[np.int8] | None,
    point_count: int,
    representative: NDArray[np.int64] | None,
) -> _Faces:
    """Check what the kernels rely on: they do not look at bounds."""
    entries = np.ascontiguousarray(connectivity, np.int64)
    starts = _NO_INDEX if offsets is None else np.ascontiguousarray(offsets, np.int64)
    _require_whole_faces(entries, starts, kinds)
    parts = thread_count()
    lows, highs = np.empty(parts, np.int64), np.empty(parts, np.int64)
    run_parts(lambda part: edge_kernels.index_range(part, entries, lows, highs), parts)
    low, high = int(lows.min()), int(highs.max())
    if low < 0 or high >= point_count:
        at = int(np.flatnonzero((entries < 0) | (entries >= point_count))[0])
        face = at // 3 if offsets is None else int(np.searchsorted(starts, at, side="right")) - 1
        raise SurfaceError(
            f"face {face} uses point {entries[at]}, but there are {point_count} points",
            remedy="The file is damaged or its counts are wrong; export the mesh again",
        )
    if representative is not None:
        _require_representatives(representative, point_count)
    curved = kinds is not None and bool(kinds.any())
    return _Faces(
        connectivity=entries,
        offsets=starts,
        kinds=np.ascontiguousarray(kinds, np.int8) if curved else _NO_KIND,
        representative=_NO_INDEX if representative is None else np.ascontiguousarray(representative, np.int64),
    )


def _require_whole_faces(entries: NDArray[np.int64], starts: NDArray[np.int64], kinds: NDArray[np.int8] | None) -> None:
    if entries.size == 0:
        raise SurfaceError("the surface has no faces", remedy="Give a mesh of triangles, quads or polygons")
    if starts.size == 0:
        if entries.size % 3:
            raise SurfaceError(f"{entries.size} entries do not make whole triangles")
        if kinds is not None and kinds.any():
            raise SurfaceError("curved faces need offsets", remedy="Give where each face starts")
        return
    sizes = np.diff(starts)
    if starts[0] != 0 or starts[-1] != entries.size or sizes.min(initial=3) < 3:
        raise SurfaceError(
            "face offsets do not rise from 0 to the number of entries by 3 or more a face",
            remedy="The file is damaged; export the mesh again",
        )
    if kinds is None:
        return
    if kinds.shape != sizes.shape:
        raise SurfaceError(f"{kinds.size} face kinds for {sizes.size} faces")
    for kind, size in ((1, 6), (2, 8), (3, 9)):
        bad = np.flatnonzero((kinds == kind) & (sizes != size))
        if bad.size:
            raise SurfaceError(
                f"face {bad[0]} is a curved face of {size} points by its kind, but has {sizes[bad[0]]}",
                remedy="The file is damaged; export the mesh again",
            )


def _require_representatives(representative: NDArray[np.int64], point_count: int) -> None:
    if representative.shape != (point_count,):
        raise SurfaceError(f"{representative.size} representatives for {point_count} points")
    low, high = int(representative.min()), int(representative.max())
    if low < 0 or high >= point_count:
        bad = low if low < 0 else high
        raise SurfaceError(f"a point is represented by point {bad}, but there are {point_count} points")


def _match(faces: _Faces, point_count: int) -> _Matched:
    """Fill the buckets by a counting sort and match within each."""
    parts = min(_MOST_PARTS, thread_count(), faces.face_count)
    starts, slots, no_edges = _fill_buckets(faces, point_count, parts)
    # parts of equal work: buckets of low points are fuller when points are numbered at random
    bounds = np.searchsorted(starts, np.linspace(0, int(starts[-1]), parts + 1).astype(starts.dtype))
    bounds[0], bounds[-1] = 0, point_count
    forests = [np.empty(faces.face_count, starts.dtype) for _ in range(parts)]
    tallies = np.zeros((parts, 7), np.int64)
    on_open_edge = np.zeros(point_count, np.bool_)
    run_parts(
        lambda p: edge_kernels.match_edges(
            bounds[p], bounds[p + 1], starts, slots, forests[p], tallies[p], on_open_edge
        ),
        parts,
    )
    for other in forests[1:]:
        edge_kernels.merge_forests(forests[0], other)
    return _Matched(starts, slots, forests[0], tallies.sum(axis=0), on_open_edge, no_edges)


def _fill_buckets(faces: _Faces, point_count: int, parts: int) -> tuple[_Index, _Index, NDArray[np.bool_]]:
    # a slot holds a point and twice a face; places run up to the number of entries
    narrow = max(point_count, 2 * faces.face_count, faces.connectivity.size) < _NARROW_LIMIT
    index = np.int32 if narrow else np.int64
    most_corners = int(np.diff(faces.offsets).max()) if faces.offsets.size else 3
    counts: _Index = np.zeros((parts, point_count), index)
    no_edges = np.zeros(faces.face_count, np.bool_)
    run_parts(lambda p: edge_kernels.count_half_edges(p, *faces, most_corners, counts, no_edges), parts)
    starts: _Index = np.zeros(point_count + 1, index)
    edge_kernels.lay_starts(counts, starts)
    slots: _Index = np.empty((int(starts[-1]), 2), index)
    run_parts(lambda p: edge_kernels.place_half_edges(p, *faces, most_corners, counts, slots), parts)
    return starts, slots, no_edges


def _midside_gaps(matched: _Matched, faces: _Faces, listing: bool) -> NDArray[np.int64]:
    none = np.empty((0, 6), np.int64)
    if faces.kinds.size == 0 or not listing:
        return none
    arguments = (matched.starts, matched.slots, *faces)
    count = int(edge_passes.list_midside_gaps(*arguments, none))
    if count == 0:
        return none
    gaps = np.empty((count, 6), np.int64)
    edge_passes.list_midside_gaps(*arguments, gaps)
    return gaps
