"""A surface as exported made ready: joined where that closes it, duplicates dropped, normals out of the fluid.

Nothing is mended silently: every change is a note, and what cannot be mended
is an error that says where.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import GroupError, SurfaceError
from fluxmesh.surface.duplicates import find_duplicates
from fluxmesh.surface.edges import EdgePairing
from fluxmesh.surface.extent import used_box
from fluxmesh.surface.holes import describe_openings, find_holes
from fluxmesh.surface.orient import faces_against_majority
from fluxmesh.surface.shells import ShellMeasures, measure_shells, nesting_depths
from fluxmesh.surface.weld import join_equal_points, join_near_points, with_midsides
from fluxmesh.surface.wording import counted, length_text, names_text, place_text
from fluxmesh.surface.workpiece import Workpiece

__all__ = ["Mended", "mend"]

_NEARNESS = 1e-6  # of the diagonal of the box round the points that faces use: default tolerance of the second joining
_GAP = 1e-6  # of the edge's length: mid-side points further apart than this leave a gap
_MOST_SHELLS_TOLD = 5
_LOST = 0.1  # share of a volume that rounding of the coordinates may be
_ABSURD = "Check coordinates and length_unit for absurd sizes, or move the surface near the origin"


@dataclass(frozen=True, eq=False)
class Mended:
    """A surface after mending.

    Attributes
    ----------
    points : ndarray, shape (n_points, 3), float64
        Coordinates, m; the array given, unless near points were moved together.
    connectivity : ndarray, shape (n_entries,), int64
        Point indices, faces turned as `turned` says; points that were joined
        keep their own numbers, since data on them may differ.
    offsets : ndarray, shape (n_faces + 1,), int64, or None
        Where each face starts.
    kinds : ndarray, shape (n_faces,), int8, or None
        `fluxmesh.surface.surface.FaceKind` of each face.
    group_of_face : ndarray, shape (n_faces,), int32
        Group of each face.
    kept_faces : ndarray, shape (n_faces,), int64, or None
        Number that each face had before; None when all were kept.
    turned : ndarray, shape (n_faces,), bool, or None
        Faces that run the other way than before (data along the normal
        change sign); None when there are none.
    representative : ndarray, shape (n_points,), int64, or None
        Point that stands for each point where coincident ones were joined;
        None when none were.
    closed : bool
        Every edge is run as often forward as backward; normals then point
        out of the fluid.
    shells : int
        Number of shells that enclose volume; of an open surface, number of
        pieces that hang together over edges.
    notes : tuple of str
        What was mended or noticed, one sentence each without a full stop.
    """

    points: NDArray[np.float64]
    connectivity: NDArray[np.int64]
    offsets: NDArray[np.int64] | None
    kinds: NDArray[np.int8] | None
    group_of_face: NDArray[np.int32]
    kept_faces: NDArray[np.int64] | None
    turned: NDArray[np.bool_] | None
    representative: NDArray[np.int64] | None
    closed: bool
    shells: int
    notes: tuple[str, ...]


def mend(
    points: NDArray[np.float64],
    connectivity: NDArray[np.int64],
    offsets: NDArray[np.int64] | None,
    kinds: NDArray[np.int8] | None,
    group_of_face: NDArray[np.int32],
    group_names: Sequence[str],
    *,
    require_closed: bool = True,
    weld_tolerance: float | None = None,
    source: str = "",
) -> Mended:
    """Close, clean and orient a surface as far as that is certain.

    A surface that is closed already is not joined anywhere: joining could
    break it. Otherwise points on open edges are joined, first those with equal
    coordinates, then those within a tolerance if that closes the surface.
    Copies of faces are dropped. Neighbours are made to run opposite ways (the
    greater area keeps its way), then each shell is turned so that normals point
    out of the fluid.

    Parameters
    ----------
    points : ndarray, shape (n_points, 3), float64
        Coordinates, m.
    connectivity : ndarray, shape (n_entries,), int64
        Point indices of all faces, one face after the other.
    offsets : ndarray, shape (n_faces + 1,), int64, or None
        Where each face starts; None when every face is a straight triangle.
    kinds : ndarray, shape (n_faces,), int8, or None
        `fluxmesh.surface.surface.FaceKind` of each face; None when all are
        straight-edged.
    group_of_face : ndarray, shape (n_faces,), int32
        Index into `group_names`.
    group_names : sequence of str
        Names of the groups, for messages.
    require_closed : bool, optional
        False accepts an open surface and notes its holes.
    weld_tolerance : float, optional
        Distance of the second joining, m; 1e-6 of the diagonal of the box round
        the points that faces use by default, 0 for none.
    source : str, optional
        File name, for messages.

    Returns
    -------
    Mended
        New arrays where something changed; the arrays given are never written to.

    Raises
    ------
    SurfaceError
        Arrays that do not fit together, points that are not finite, a surface
        that stays open, or one that is one-sided.
    GroupError
        A face lies in two groups, or in none.
    """
    try:
        piece = Workpiece.check(points, connectivity, offsets, kinds, group_of_face, group_names)
        if weld_tolerance is not None and not weld_tolerance >= 0:
            raise SurfaceError(f"the tolerance for joining points is {weld_tolerance:.4g} m", remedy="Give 0 or more")
        return _mend(piece, require_closed, weld_tolerance)
    except (SurfaceError, GroupError) as error:
        if source and not error.where:
            raise type(error)(error.found, source, error.remedy) from error
        raise


def _mend(piece: Workpiece, require_closed: bool, weld_tolerance: float | None) -> Mended:
    pairing = piece.pair()
    if pairing.sealed:
        pairing = _drop_duplicates(piece, pairing)
    else:
        pairing = _join_equal(piece, pairing)
    if not pairing.sealed:
        pairing = _join_near(piece, pairing, weld_tolerance)
    if pairing.same_way_count:
        pairing = _run_one_way(piece, pairing)
    measures = measure_shells(piece.facets, pairing.shell_of_face, pairing.shell_count)
    if measures.flat_faces.any():
        flat = int(np.count_nonzero(measures.flat_faces))
        verb = "has" if flat == 1 else "have"
        piece.note(f"{counted(flat, 'face')} {verb} no area: {piece.groups_text(measures.flat_faces)}")
    shells = pairing.shell_count
    if pairing.closed:
        _require_volume(measures, require_closed)
        _point_outward(piece, pairing, measures)
        # thin walls of no thickness may be many shells by their edges, but bound nothing
        shells = int(np.count_nonzero(~measures.empty)) or shells
    else:
        _tell_open(piece, require_closed)
    _tell_midside_gaps(piece, pairing)
    return Mended(
        points=piece.points,
        connectivity=piece.connectivity,
        offsets=piece.offsets,
        kinds=piece.kinds,
        group_of_face=piece.group_of_face,
        kept_faces=piece.kept_faces,
        turned=piece.turned,
        representative=piece.representative,
        closed=pairing.closed,
        shells=shells,
        notes=tuple(piece.notes),
    )


def _join_equal(piece: Workpiece, pairing: EdgePairing) -> EdgePairing:
    """Join points of equal coordinates on open edges; that is kept whether or not it closes the surface."""
    joined = join_equal_points(piece.points, _candidates(piece, pairing))
    moved = joined != np.arange(joined.size)
    if moved.any():
        piece.representative = joined
        pairing = piece.pair()
    pairing = _drop_duplicates(piece, pairing)
    if moved.any():
        outcome = "to close the surface" if pairing.sealed else "but the surface stays open"
        piece.note(f"{_joined_text(joined, moved)} joined {outcome} (exactly equal coordinates)")
    return pairing


def _join_near(piece: Workpiece, pairing: EdgePairing, tolerance: float | None) -> EdgePairing:
    """Join points within a tolerance on open edges, and move them together, if that closes the surface."""
    if tolerance is None:
        low, high = used_box(piece.points, piece.connectivity)
        tolerance = _NEARNESS * float(np.linalg.norm(high - low))
    before = np.arange(piece.points.shape[0]) if piece.representative is None else piece.representative
    joined = join_near_points(piece.points, _candidates(piece, pairing), before, tolerance, piece.facets[1:])
    moved = joined != before
    if not moved.any():
        return pairing
    trial = piece.copy()
    trial.representative = joined
    trial_pairing = trial.pair(listing=True)
    extra = find_duplicates(trial.connectivity, trial.offsets, trial.kinds, trial_pairing, joined).extra
    if extra.size:
        trial.drop(extra)
        trial_pairing = trial.pair()
    if not trial_pairing.sealed:
        return pairing
    piece.representative = joined
    pairing = _drop_duplicates(piece, piece.pair())
    shift = float(np.linalg.norm(piece.points[joined[moved]] - piece.points[moved], axis=1).max())
    piece.move_together()
    piece.note(
        f"{_joined_text(joined, moved)} joined to close the surface "
        f"(within {length_text(tolerance)}, moved by up to {length_text(shift)})"
    )
    return pairing


def _candidates(piece: Workpiece, pairing: EdgePairing) -> NDArray[np.bool_]:
    if piece.kinds is None:
        return pairing.on_open_edge
    before = np.arange(piece.points.shape[0]) if piece.representative is None else piece.representative
    return with_midsides(pairing.on_open_edge, piece.facets[1:], before)


def _joined_text(joined: NDArray[np.int64], moved: NDArray[np.bool_]) -> str:
    places = np.zeros(joined.size, np.bool_)
    places[joined[moved]] = True
    count = int(np.count_nonzero(places))
    points = int(np.count_nonzero(moved)) + count
    return f"{points} points at {counted(count, 'coincident place')}"


def _drop_duplicates(piece: Workpiece, pairing: EdgePairing) -> EdgePairing:
    if not (pairing.crowded_count or pairing.same_way_count):
        return pairing
    listed = piece.pair(listing=True)
    found = find_duplicates(piece.connectivity, piece.offsets, piece.kinds, listed, piece.representative)
    if found.paired:
        piece.note(
            f"{counted(found.paired, 'face')} lie on another with the opposite normal "
            "(a thin wall of no thickness) and were kept"
        )
    if found.extra.size == 0:
        return pairing
    groups = piece.group_of_face
    apart = np.flatnonzero(groups[found.extra] != groups[found.original])
    if apart.size:
        copy, first = int(found.extra[apart[0]]), int(found.original[apart[0]])
        names = [piece.group_names[groups[face]] for face in (first, copy)]
        more = f"; so do {counted(apart.size - 1, 'more face')}" if apart.size > 1 else ""
        raise GroupError(
            f"face {piece.number_in_file(copy)} lies in groups '{names[0]}' and '{names[1]}': "
            f"it is face {piece.number_in_file(first)} again{more}",
            remedy="Export each face in one group only",
        )
    mask = np.zeros(groups.size, np.bool_)
    mask[found.extra] = True
    copies = "a copy of another and was" if found.extra.size == 1 else "copies of others and were"
    verb = "is" if found.extra.size == 1 else "are"
    piece.note(f"{counted(found.extra.size, 'face')} {verb} {copies} dropped: {piece.groups_text(mask)}")
    piece.drop(found.extra)
    return piece.pair()


def _run_one_way(piece: Workpiece, pairing: EdgePairing) -> EdgePairing:
    mask = faces_against_majority(piece.points, piece.connectivity, piece.offsets, piece.kinds, piece.representative)
    if not mask.any():
        return pairing
    piece.turn(mask)
    count = int(np.count_nonzero(mask))
    verb = "was" if count == 1 else "were"
    piece.note(f"{counted(count, 'face')} {verb} turned to match the neighbours: {piece.groups_text(mask)}")
    return piece.pair()


def _require_volume(measures: ShellMeasures, require_closed: bool) -> None:
    """Refuse closed shells whose volume is nothing, or lost in the rounding of the coordinates."""
    if not (np.isfinite(measures.volume).all() and np.isfinite(measures.area).all()):
        raise SurfaceError("areas and volumes overflow", remedy=_ABSURD)
    empty = measures.empty
    if empty.all() and require_closed:
        far = float(np.maximum(np.abs(measures.low), np.abs(measures.high)).max())
        raise SurfaceError(
            "the surface encloses no volume: it is flat, or the sides of a wall of no thickness, "
            f"with coordinates up to {length_text(far)}",
            remedy="Export the whole surface round the fluid, with correct coordinates, "
            "or set closed = false to get the integrals of each group only",
        )
    lost = np.flatnonzero(~empty & (measures.rounding > _LOST * np.abs(measures.volume)))
    if lost.size:
        shell = int(lost[0])
        far = float(np.maximum(np.abs(measures.low[shell]), np.abs(measures.high[shell])).max())
        raise SurfaceError(
            f"the volume of {abs(measures.volume[shell]):.3g} m³ is lost in rounding: "
            f"coordinates of {length_text(far)} are known to {length_text(float(np.spacing(far)) / 2)} only, "
            f"on a shell {length_text(float(measures.diagonal[shell]))} across",
            remedy=_ABSURD,
        )


def _point_outward(piece: Workpiece, pairing: EdgePairing, measures: ShellMeasures) -> None:
    """Turn the shells whose normals point into the fluid."""
    shells = pairing.shell_of_face
    depths = nesting_depths(piece.facets, shells, measures)
    empty = measures.empty
    wrong = ((measures.volume > 0) == (depths % 2 == 1)) & ~empty
    if wrong.any():
        # a face without edges belongs to no shell
        piece.turn(wrong[shells] & (shells >= 0))
        if (wrong | empty).all():
            piece.note("all faces pointed into the fluid and were turned")
        else:
            _tell_turned(piece, shells, np.flatnonzero(wrong).tolist(), depths)
    if empty.all():
        piece.note("the surface encloses no volume")
    elif empty.any():
        mask = empty[shells] & (shells >= 0)
        count = counted(int(np.count_nonzero(mask)), "face")
        piece.note(f"{count} form shells that enclose no volume: {piece.groups_text(mask)}")


def _tell_turned(
    piece: Workpiece, shell_of_face: NDArray[np.int32], turned: list[int], depths: NDArray[np.int64]
) -> None:
    for shell in turned[:_MOST_SHELLS_TOLD]:
        mask = shell_of_face == shell
        place = "a cavity: " if depths[shell] % 2 else "around fluid: "
        faces = counted(int(np.count_nonzero(mask)), "face")
        piece.note(f"shell {shell + 1} ({place}{faces}, {names_text(piece.groups_of(mask))}) was turned")
    more = len(turned) - _MOST_SHELLS_TOLD
    if more > 0:
        piece.note(f"{counted(more, 'more shell')} {'was' if more == 1 else 'were'} turned")


def _tell_open(piece: Workpiece, require_closed: bool) -> None:
    pairing = piece.pair(listing=True)
    rows = pairing.open_edges
    single = ~np.isin(_edge_keys(piece, rows), _edge_keys(piece, pairing.crowded_edges))
    crowded = ""
    if pairing.unbalanced_crowded_count:
        crowded = _crowded_text(piece, pairing.unbalanced_crowded_count, rows[~single][0])
    if single.any():
        openings = find_holes(piece.points, rows[single], piece.group_of_face, piece.group_names)
        found = f"the surface is open: {describe_openings(openings)}"
        remedy = "Add the missing faces (a port that was not exported?)"
        if openings.slits == openings.count:
            remedy = (
                "Export it so that neighbours share the points of their edge, "
                "or raise weld, the distance within which points are joined"
            )
        if crowded:
            found += f"; {crowded}"
    else:
        found = f"{crowded} without a balance"
        remedy = "Leave out inner walls and overlapping faces: export the wetted surface only"
    if require_closed:
        raise SurfaceError(found, remedy=f"{remedy}, or set closed = false to get the integrals of each group only")
    piece.note(found)


def _edge_keys(piece: Workpiece, rows: NDArray[np.int64]) -> NDArray[np.int64]:
    return np.asarray(rows[:, :2].min(axis=1) * piece.points.shape[0] + rows[:, :2].max(axis=1))


def _crowded_text(piece: Workpiece, count: int, edge: NDArray[np.int64]) -> str:
    group = piece.group_names[piece.group_of_face[edge[2]]]
    place = place_text(piece.points[edge[:2]].mean(axis=0))
    verb = "joins" if count == 1 else "join"
    first = "it is" if count == 1 else "the first is"
    return f"{counted(count, 'edge')} {verb} more than two faces ({first} at {place}, at group '{group}')"


def _tell_midside_gaps(piece: Workpiece, pairing: EdgePairing) -> None:
    """Note edges along which curved faces part: their mid-side points stand in different places."""
    rows = pairing.midside_gaps
    if rows.shape[0] == 0:
        return
    ends = piece.points[rows[:, :2]]
    straight = ends.mean(axis=1)
    mids = [np.where(mid[:, None] >= 0, piece.points[mid], straight) for mid in (rows[:, 4], rows[:, 5])]
    gap = np.linalg.norm(mids[0] - mids[1], axis=1)
    open_ = gap > _GAP * np.linalg.norm(ends[:, 1] - ends[:, 0], axis=1)
    if not open_.any():
        return
    worst = int(np.argmax(gap))
    edges = counted(int(np.count_nonzero(open_)), "edge")
    piece.note(
        f"curved faces part along {edges}, by up to {length_text(float(gap[worst]))} at {place_text(straight[worst])}: "
        "their mid-side points differ"
    )
