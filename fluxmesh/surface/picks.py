"""Faces picked by rule, on a mesh without tags: the planar region near a place."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import GroupError
from fluxmesh.surface.face_geometry import FaceGeometry, bounding_diagonal, corners, face_geometry, nearest_face
from fluxmesh.surface.planar import MERGE_SHARE, planar_region_around, planar_regions
from fluxmesh.surface.surroundings import require_whole
from fluxmesh.surface.wording import counted, length_text, place_text

__all__ = ["Pick", "by_pick"]

_FAR = 0.01  # share of the bounding diagonal from which on a picked face is not "near" any more


@dataclass(frozen=True)
class Pick:
    """A rule that picks a planar region.

    Attributes
    ----------
    normal : sequence of 3 float
        Direction of the region's normal, out of the fluid; any length.
    near : sequence of 3 float
        A place in or near the region, in the unit of the points.
    angle_deg : float
        How far a face's normal may be off, degrees.
    """

    normal: Sequence[float]
    near: Sequence[float]
    angle_deg: float = 1.0


def by_pick(
    points: NDArray[Any],
    connectivity: NDArray[np.int64],
    offsets: NDArray[np.int64] | None,
    picks: Mapping[str, Pick],
    *,
    rest: bool = False,
    kinds: NDArray[np.int8] | None = None,
    flipped: bool = False,
    tolerance: float = 1e-4,
) -> tuple[NDArray[np.int32], tuple[str, ...]]:
    """Sort faces into groups by rule, on a mesh without tags.

    A pick takes, of the faces whose normal fits, the nearest to its place and
    all that hang together with it smoothly or in one plane, through shared
    edges; coincident points count as one.

    Parameters
    ----------
    points : ndarray, shape (n_points, 3)
        Metres.
    connectivity, offsets, kinds
        As in `fluxmesh.surface.rawmesh.RawMesh`.
    picks : mapping of str to Pick
        Group name -> rule.
    rest : bool, optional
        Whether faces may be left over.
    flipped : bool, optional
        Whether the faces are known to be oriented into the fluid.
    tolerance : float, optional
        How far corners beyond a sharp edge may lie off the plane, over the
        diagonal of the bounding box.

    Returns
    -------
    group_of_face : ndarray, shape (n_faces,), int32
        Position of each face's group in `picks`; -1 for faces left over.
    notes : tuple of str
        What was taken otherwise than asked: the opposite normal, a region far
        from the place, or one that goes on smoothly beyond what was taken.

    Raises
    ------
    GroupError
        No face fits, two picks catch one face, a pick catches only a part of
        a bent or rough region, or faces are left over while `rest` is false.
    """
    connectivity, offsets = corners(connectivity, offsets, kinds)
    geometry = face_geometry(points, connectivity, offsets)
    if flipped:
        geometry = FaceGeometry(geometry.areas, -geometry.normals, geometry.centroids)
    diagonal = bounding_diagonal(points, connectivity)
    owner = np.full(geometry.areas.size, -1, dtype=np.int32)
    names, notes = list(picks), []
    for index, (name, pick) in enumerate(picks.items()):
        seed, faces, note = _seed(points, connectivity, offsets, geometry, diagonal, name, pick)
        notes += note
        region = planar_region_around(
            points, connectivity, offsets, geometry, faces, seed, tolerance * diagonal, MERGE_SHARE * diagonal
        )
        taken = region[owner[region] >= 0]
        if taken.size:
            raise GroupError(
                f"the picks of groups '{names[owner[taken[0]]]}' and '{name}' both catch face {taken[0]} "
                f"at {place_text(geometry.centroids[taken[0]])}",
                remedy="Correct normal or near of one of them",
            )
        owner[region] = index
    for index, (name, pick) in enumerate(picks.items()):
        region, axis = np.flatnonzero(owner == index), np.asarray(pick.normal, np.float64)
        axis = axis * np.sign(float(geometry.areas[region] @ (geometry.normals[region] @ axis))) / np.linalg.norm(axis)
        notes += require_whole(
            name,
            points,
            connectivity,
            offsets,
            geometry,
            region,
            owner < 0,
            axis,
            pick.angle_deg,
            MERGE_SHARE * diagonal,
        )
    left = int((owner < 0).sum())
    if left and not rest:
        raise GroupError(
            f"{counted(left, 'face')} in no group: no pick caught them",
            remedy="Pick them too, or give one group rest = true",
        )
    return owner, tuple(notes)


def _seed(
    points: NDArray[Any],
    connectivity: NDArray[np.int64],
    offsets: NDArray[np.int64] | None,
    geometry: FaceGeometry,
    diagonal: float,
    name: str,
    pick: Pick,
) -> tuple[int, NDArray[np.int64], list[str]]:
    """Return the face a pick starts from, the faces whose normal fits, and what to note."""
    normal, near = np.asarray(pick.normal, np.float64), np.asarray(pick.near, np.float64)
    length = float(np.linalg.norm(normal))
    if normal.shape != (3,) or near.shape != (3,) or not 0.0 < length < np.inf or not np.isfinite(near).all():
        raise GroupError(
            f"the pick of group '{name}' has normal {pick.normal} and near {pick.near}",
            remedy="Both are three finite numbers, and the normal is not zero",
        )
    if not 0.0 < pick.angle_deg < 90.0:
        raise GroupError(
            f"the pick of group '{name}' has an angle of {pick.angle_deg:g} degrees",
            remedy="An angle above 0 and below 90 degrees is needed",
        )
    cosines = geometry.normals @ (normal / length)
    least = np.cos(np.radians(pick.angle_deg))
    sides = [np.flatnonzero(cosines >= least), np.flatnonzero(-cosines >= least)]
    reach = [nearest_face(points, connectivity, offsets, geometry, side, near) if side.size else None for side in sides]
    asked, opposite = reach
    wanted = f"normal {_direction(normal / length)}"
    if asked is not None:
        nearest = min(side[1] for side in reach if side is not None)
        if nearest > 10.0 * diagonal:
            raise GroupError(
                f"the place {place_text(near)} of group '{name}' is {length_text(nearest)} from the nearest face that "
                f"faces {_direction(normal / length)}, on a surface {length_text(diagonal)} across",
                remedy='near is in metres unless it says otherwise: { value = [..], unit = "mm" }',
            )
        far = asked[1] > _FAR * diagonal
        if far and opposite is not None and opposite[1] < 0.1 * asked[1]:
            # most likely the normal was given into the fluid: the place tells
            note = (
                f"group '{name}': the nearest face with {wanted} is {length_text(asked[1])} from the place given, "
                f"one with the opposite normal only {length_text(opposite[1])}; that one was taken. "
                "Normals point out of the fluid"
            )
            return opposite[0], sides[1], [note]
        note = f"group '{name}': the nearest face with {wanted} is {length_text(asked[1])} from the place given"
        return asked[0], sides[0], [note] if far else []
    if opposite is not None:
        note = f"group '{name}': no face has {wanted}; the region with the opposite normal was taken"
        return opposite[0], sides[1], [note]
    regions = planar_regions(points, connectivity, offsets)
    found = ""
    if regions:
        closest = min(regions, key=lambda region: float(np.linalg.norm(region.centroid - near)))
        found = (
            f"; the planar region nearest to {place_text(near)} has normal {_direction(closest.normal)}, "
            f"centroid {place_text(closest.centroid)} and area {closest.area:.4g} m²"
        )
    raise GroupError(
        f"group '{name}' has no faces: no face has a normal within {pick.angle_deg:g} degrees of "
        f"{_direction(normal / length)}{found}",
        remedy="Correct the normal, or widen the angle",
    )


def _direction(normal: NDArray[np.float64]) -> str:
    return "(" + ", ".join(f"{component:.4g}" for component in np.round(normal, 4) + 0.0) + ")"
