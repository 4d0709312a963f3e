"""Whether a picked region is all of what it was picked from: faces left out that go on smoothly beyond its rim.

A cap that is slightly domed, or rough because its coordinates were rounded, falls apart under a narrow angle;
what is left out of a port would silently be wall.
"""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import GroupError
from fluxmesh.surface.face_geometry import FaceGeometry, corner_entries
from fluxmesh.surface.touching import edge_neighbours, region_of
from fluxmesh.surface.wording import counted

__all__ = ["require_whole"]

_FACTOR, _MOST_MORE = 3.0, 10.0  # of the angle of the pick, and degrees beyond it: up to there a face is "near"
_SMOOTH = 20.0  # degrees from the normal of the region up to which what goes on is told
_STEEP = 45.0  # degrees, beyond any roughness
# shares of the area of the region
_REFUSED = 0.02  # of near faces: more is no sliver, and no rounded edge of a tenth of the radius
_TOLD = 1e-3
_REFUSED_ROUGH = 0.2  # of faces up to `_STEEP`, where up and down balance


class _Patch(NamedTuple):
    """The region and the free faces that might belong to it."""

    faces: NDArray[np.int64]
    inside: NDArray[np.bool_]
    pairs: NDArray[np.int64]
    cosines: NDArray[np.float64]
    areas: NDArray[np.float64]

    def beyond(self, angle_deg: float) -> NDArray[np.bool_]:
        """Return which faces hang together with the region through faces within an angle of its normal."""
        allowed = self.inside | (self.cosines >= math.cos(math.radians(angle_deg)))
        label = region_of(self.pairs[allowed[self.pairs].all(axis=1)], self.faces.size)
        joined = np.zeros(self.faces.size, np.bool_)
        joined[label[self.inside]] = True
        return joined[label] & allowed & ~self.inside

    def share(self, which: NDArray[np.bool_]) -> float:
        """Return the area of some faces over that of the region."""
        return float(self.areas[which].sum() / self.areas[self.inside].sum())


def require_whole(
    name: str,
    points: NDArray[Any],
    connectivity: NDArray[np.int64],
    offsets: NDArray[np.int64] | None,
    geometry: FaceGeometry,
    region: NDArray[np.int64],
    free: NDArray[np.bool_],
    direction: NDArray[np.float64],
    angle_deg: float,
    merge: float,
) -> list[str]:
    """Refuse a picked region that is a part of a bent or rough one, and tell what else goes on smoothly.

    Faces left out are near when they hang together with the region through
    faces within three times the angle of the pick (at most 10 degrees more) of
    its mean normal; a fiftieth of its area of them is refused. So is a rough
    cap: a fifth of its area up to 45 degrees off, bent all over, up as often as
    down. Faces up to 20 degrees off, such as a rounded rim, are noted.

    Parameters
    ----------
    name : str
        Group, for messages.
    points, connectivity, offsets
        As `fluxmesh.surface.face_geometry.face_areas_normals`.
    geometry : FaceGeometry
        Of all faces.
    region : ndarray of int64
        The faces picked.
    free : ndarray, shape (n_faces,), bool
        Faces that no pick took.
    direction : ndarray, shape (3,), float64
        Unit normal asked for, by the orientation of the faces.
    angle_deg : float
        Angle of the pick, degrees.
    merge : float
        Distance within which points coincide, in the points' unit.

    Returns
    -------
    list of str
        Notes.

    Raises
    ------
    GroupError
        The region is only a part.
    """
    patch = _patch(points, connectivity, offsets, geometry, region, free, merge)
    if patch is None:
        return []
    near = patch.beyond(min(_FACTOR * angle_deg, angle_deg + _MOST_MORE))
    if patch.share(near) > _REFUSED:
        raise _part(name, patch, near, geometry, direction, "go on nearly in its plane")
    left, why = patch.beyond(_SMOOTH), "a rounded edge?"
    steep = patch.beyond(_STEEP)
    if patch.share(steep) > _TOLD and _is_rough(patch, steep | patch.inside, geometry):
        left, why = steep, "a rough surface, from rounded coordinates?"
        if patch.share(left) > _REFUSED_ROUGH:
            raise _part(name, patch, left, geometry, direction, "belong to the same rough surface")
    if patch.share(left) <= _TOLD:
        return []
    count = int(left.sum())
    return [
        f"group '{name}': {counted(count, 'face')} beside it, with {_share_text(patch.share(left))} its area and "
        f"turned by less than {_STEEP if left is steep else _SMOOTH:g} degrees, {'is' if count == 1 else 'are'} left "
        f"out ({why}); an angle of {_needed(patch, left, geometry, direction)} deg for the pick takes them"
    ]


def _patch(
    points: NDArray[Any],
    connectivity: NDArray[np.int64],
    offsets: NDArray[np.int64] | None,
    geometry: FaceGeometry,
    region: NDArray[np.int64],
    free: NDArray[np.bool_],
    merge: float,
) -> _Patch | None:
    """Return the region with all free faces that are not steep to it; None where none of them touches it."""
    weighted = geometry.areas[region] @ geometry.normals[region]
    normal = weighted / np.linalg.norm(weighted)
    cosines = geometry.normals @ normal
    inside = np.zeros(free.size, np.bool_)
    inside[region] = True
    others = np.flatnonzero(~inside & free & (cosines >= math.cos(math.radians(_STEEP))))
    # most rims are sharp all round: then the few other faces beside the region, or their absence, settle it
    own = points[connectivity[corner_entries(offsets, region)[0]]]
    low, high = own.min(axis=0) - merge, own.max(axis=0) + merge
    entries, starts = corner_entries(offsets, others)
    place = points[connectivity[entries]]
    boxed = np.all((place >= low) & (place <= high), axis=1)
    beside = others[np.logical_or.reduceat(boxed, starts[:-1])] if others.size else others
    if beside.size == 0:
        return None
    close = np.union1d(region, beside)
    pairs = edge_neighbours(points, connectivity, offsets, close, merge)
    if not np.logical_xor(*inside[close][pairs.T]).any():
        return None
    faces = np.union1d(region, others)
    pairs = edge_neighbours(points, connectivity, offsets, faces, merge)
    return _Patch(faces, inside[faces], pairs, cosines[faces], geometry.areas[faces])


def _is_rough(patch: _Patch, which: NDArray[np.bool_], geometry: FaceGeometry) -> bool:
    """Tell whether faces are bent against each other nearly everywhere, up as often as down."""
    one, other = patch.pairs[which[patch.pairs].all(axis=1)].T
    towards = geometry.centroids[patch.faces[other]] - geometry.centroids[patch.faces[one]]
    turn = geometry.normals[patch.faces[other]] - geometry.normals[patch.faces[one]]
    length = np.linalg.norm(towards, axis=1)
    # sine of the angle between neighbours, positive where the edge is convex
    bend = np.einsum("ij,ij->i", towards, turn) / np.where(length > 0.0, length, 1.0)
    weight = np.minimum(patch.areas[one], patch.areas[other])
    bent = np.abs(bend) > math.sin(math.radians(0.5))
    return bool(weight[bent].sum() > 0.5 * weight.sum() and abs(weight @ bend) < 0.5 * float(weight @ np.abs(bend)))


def _part(
    name: str,
    patch: _Patch,
    left: NDArray[np.bool_],
    geometry: FaceGeometry,
    direction: NDArray[np.float64],
    how: str,
) -> GroupError:
    return GroupError(
        f"the pick of group '{name}' takes only a part of what it names: {counted(int(patch.inside.sum()), 'face')}, "
        f"while {counted(int(left.sum()), 'face')} with {_share_text(patch.share(left))} that area {how} "
        "and would be left out",
        remedy=f"Raise the angle of the pick to {_needed(patch, left, geometry, direction)} deg to take them too; "
        "if they are no part of it, lower it",
    )


def _needed(patch: _Patch, left: NDArray[np.bool_], geometry: FaceGeometry, direction: NDArray[np.float64]) -> str:
    """Return the angle that takes all these faces, degrees."""
    least = float((geometry.normals[patch.faces[left]] @ direction).min())
    degrees = math.degrees(math.acos(min(1.0, max(-1.0, least))))
    step = 1.0 if degrees > 2.0 else 0.1
    return f"{step * math.ceil(1.001 * degrees / step):g}"


def _share_text(share: float) -> str:
    return f"{100.0 * share:.3g} % of" if share < 2.0 else f"{share:.3g} times"
