"""Faces of one mesh found again on another: tags taken over, shared faces dropped."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.joining import keep_faces
from fluxmesh.surface.readers.same_faces import coincident_points, face_labels
from fluxmesh.surface.readers.skin import corner_rows

__all__ = ["drop_shared", "match_faces", "overlay"]


def match_faces(
    mesh: RawMesh, other: RawMesh, points: NDArray[np.int64], other_points: NDArray[np.int64]
) -> NDArray[np.int64]:
    """Find the faces of one mesh that another one has too.

    Parameters
    ----------
    mesh, other : RawMesh
        Faces to find, and where to find them.
    points, other_points : ndarray, shape (n_points,), int64
        Number of each point of either mesh in a numbering that both share.

    Returns
    -------
    ndarray, shape (mesh.face_count,), int64
        The first face of `other` with the same corners, -1 where there is none.
    """
    one, one_starts = corner_rows(mesh.connectivity, mesh.offsets, mesh.kinds)
    two, two_starts = corner_rows(other.connectivity, other.offsets, other.kinds)
    labels = face_labels(
        np.concatenate([points[one], other_points[two]]), np.concatenate([one_starts, one_starts[-1] + two_starts[1:]])
    )
    first = np.full(int(labels.max(initial=-1)) + 1, -1, dtype=np.int64)
    theirs = labels[mesh.face_count :]
    # backwards, so that the first of several stays
    first[theirs[::-1]] = np.arange(theirs.size - 1, -1, -1)
    return first[labels[: mesh.face_count]]


def drop_shared(mesh: RawMesh, part: NDArray[np.int32]) -> RawMesh:
    """Drop the faces that two parts of a volume have in common.

    Parameters
    ----------
    mesh : RawMesh
        The skins of all parts.
    part : ndarray, shape (n_faces,), int32
        The part of each face.

    Returns
    -------
    RawMesh
        Without pairs of faces of two parts whose corners lie at exactly the
        same places: such a face lies inside the whole. A pair within one part
        (the two sides of a thin wall) stays.
    """
    corners, starts = corner_rows(mesh.connectivity, mesh.offsets, mesh.kinds)
    labels = face_labels(coincident_points(mesh.points)[corners], starts)
    count = np.bincount(labels)
    total = np.bincount(labels, weights=part)
    # of a pair, the parts differ when the sum is not twice the one
    inside = (count[labels] == 2) & (total[labels] != 2.0 * part)
    if not inside.any():
        return mesh
    dropped = int(np.count_nonzero(inside)) // 2
    kept = keep_faces(mesh, np.flatnonzero(~inside))
    return replace(kept, notes=(*kept.notes, f"{dropped} faces between blocks of {mesh.source} lie inside the volume"))


def overlay(skin: RawMesh, tagged: RawMesh, points: NDArray[np.int64], tagged_points: NDArray[np.int64]) -> RawMesh:
    """Give a skin the arrays and sets of the tagged faces that coincide with its own.

    Parameters
    ----------
    skin : RawMesh
        The skin of the volume cells.
    tagged : RawMesh
        Faces that the file lists.
    points, tagged_points : ndarray, shape (n_points,), int64
        As in `match_faces`.

    Returns
    -------
    RawMesh
        The skin. Where a tagged face coincides, its values count. Elsewhere
        an array of floats keeps the value of the cell, and tags are missing
        (NaN, or empty text), because tags of cells are no tags of faces.
        Tagged faces inside the volume are counted in `RawMesh.skipped`.
    """
    partner = match_faces(skin, tagged, points, tagged_points)
    matched = partner >= 0
    arrays = dict(skin.face_arrays)
    for name, values in tagged.face_arrays.items():
        arrays[name] = _laid_over(values, partner, skin.face_arrays.get(name))
    position = np.full(tagged.face_count, -1, dtype=np.int64)
    position[partner[matched]] = np.flatnonzero(matched)
    # a face that is tagged twice lends both its tags
    again = match_faces(tagged, tagged, tagged_points, tagged_points)
    position = position[again]
    sets = {name: np.unique(position[faces][position[faces] >= 0]) for name, faces in tagged.face_sets.items()}
    own = {name: faces[~matched[faces]] for name, faces in skin.face_sets.items() if name not in sets}
    sets = {name: faces for name, faces in {**own, **sets}.items() if faces.size}
    inside = int(np.count_nonzero(position < 0))
    skipped = dict(skin.skipped)
    if inside:
        skipped["face inside the volume"] = inside
    return replace(
        skin,
        face_arrays=arrays,
        face_sets=sets,
        skipped=skipped,
        sets_have=_haves(skin, tagged, sets),
        roles={name: role for name, role in {**skin.roles, **tagged.roles}.items() if name in sets},
        notes=tuple(dict.fromkeys((*skin.notes, *tagged.notes))),
    )


def _laid_over(values: NDArray[Any], partner: NDArray[np.int64], under: NDArray[Any] | None) -> NDArray[Any]:
    """Return tagged values where there are any, else those of the cells."""
    matched = partner >= 0
    if matched.all():
        return values[partner]
    if values.dtype.kind in "SU":
        laid = np.full((partner.size, *values.shape[1:]), "", dtype=values.dtype)
    elif values.dtype.kind == "f" and under is not None and under.shape[1:] == values.shape[1:]:
        laid = under.astype(np.result_type(under, values))
    else:
        laid = np.full((partner.size, *values.shape[1:]), np.nan, dtype=np.result_type(values, np.float64))
    laid[matched] = values[partner[matched]]
    return laid


def _haves(skin: RawMesh, tagged: RawMesh, sets: dict[str, NDArray[np.int64]]) -> dict[str, frozenset[str]] | None:
    if skin.sets_have is None and tagged.sets_have is None and not skin.face_sets:
        return None
    under = frozenset(skin.node_arrays) | frozenset(skin.face_arrays)
    have = {}
    for name in sets:
        if name in tagged.face_sets:
            listed = frozenset(tagged.face_arrays)
            have[name] = under | (listed if tagged.sets_have is None else listed & tagged.sets_have[name])
        else:
            have[name] = under if skin.sets_have is None else skin.sets_have[name]
    return have
