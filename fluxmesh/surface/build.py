"""A control surface from arrays: faces sorted into groups, checked and mended."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any, cast

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fluxmesh.errors import GroupError, SurfaceError
from fluxmesh.surface.mend import mend
from fluxmesh.surface.surface import ControlSurface, FaceKind, Group, Role

__all__ = ["control_surface", "face_arrays"]

Faces = ArrayLike | Sequence[Sequence[int]]
_CURVED = {6: FaceKind.TRIANGLE6, 8: FaceKind.QUAD8, 9: FaceKind.QUAD9}


def face_arrays(
    faces: Faces, *, curved: bool = False
) -> tuple[NDArray[np.int64], NDArray[np.int64] | None, NDArray[np.int8] | None]:
    """Return faces as the flat arrays of a `ControlSurface`.

    Parameters
    ----------
    faces : array_like of int, shape (n_faces, size), or sequence of sequences
        Point indices of each face in cyclic order.
    curved : bool, optional
        Whether faces of 6, 8 and 9 points are quadratic (corners first, then
        mid-side points) and not polygons.

    Returns
    -------
    connectivity : ndarray, int64
        All entries.
    offsets : ndarray, int64, or None
        None for triangles only.
    kinds : ndarray, int8, or None
        None when all edges are straight.

    Raises
    ------
    SurfaceError
        No face, a face of fewer than three points, or indices that are not whole
        numbers.
    """
    rows: list[NDArray[Any]] | NDArray[Any]
    if isinstance(faces, np.ndarray) and faces.ndim == 2:
        sizes = np.full(faces.shape[0], faces.shape[1], dtype=np.int64)
        flat = faces.ravel()
    else:
        rows = [np.asarray(face) for face in cast(Sequence[Sequence[int]], faces)]
        sizes = np.array([row.size for row in rows], dtype=np.int64)
        flat = np.concatenate(rows) if rows else np.empty(0, np.int64)
    if sizes.size == 0:
        raise SurfaceError("the surface has no faces", remedy="Give triangles, quads or polygons")
    if sizes.min() < 3:
        raise SurfaceError(
            f"face {int(sizes.argmin())} has {int(sizes.min())} points", remedy="A face needs three or more"
        )
    if flat.dtype.kind not in "iu":
        raise SurfaceError(f"face entries have type {flat.dtype}", remedy="Point indices are whole numbers")
    connectivity = np.ascontiguousarray(flat, dtype=np.int64)
    if (sizes == 3).all():
        return connectivity, None, None
    offsets = np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64)
    kinds = None
    if curved:
        kinds = np.zeros(sizes.size, dtype=np.int8)
        for size, kind in _CURVED.items():
            kinds[sizes == size] = kind
        if not kinds.any():
            kinds = None
    return connectivity, offsets, kinds


def _sorted_into(groups: Mapping[str, tuple[str, ArrayLike]], count: int) -> NDArray[np.int32]:
    owner = np.full(count, -1, dtype=np.int32)
    names = list(groups)
    for k, (name, (_, faces)) in enumerate(groups.items()):
        index = np.asarray(faces)
        if index.dtype == np.bool_:
            index = np.flatnonzero(index)
        if index.size == 0:
            raise GroupError(f"group '{name}' has no faces")
        if index.dtype.kind not in "iu" or index.min() < 0 or index.max() >= count:
            raise GroupError(f"group '{name}' names faces that are not there", remedy=f"There are {count} faces")
        taken = index[owner[index] >= 0]
        if taken.size:
            other = names[int(owner[taken[0]])]
            raise GroupError(
                f"face {taken[0]} lies in groups '{other}' and '{name}'", remedy="A face belongs to one group"
            )
        owner[index] = k
    left = np.flatnonzero(owner < 0)
    if left.size:
        raise GroupError(
            f"{left.size} faces lie in no group, the first is face {left[0]}",
            remedy="Give every face a group",
        )
    return owner


def control_surface(
    points: ArrayLike,
    faces: Faces,
    groups: Mapping[str, tuple[str, ArrayLike]],
    *,
    curved: bool = False,
    closed: bool = True,
    weld: float | None = None,
) -> ControlSurface:
    """Make a control surface from arrays.

    Parameters
    ----------
    points : array_like, shape (n_points, 3)
        Coordinates in metres.
    faces : array_like of int, shape (n_faces, size), or sequence of sequences
        Point indices of each face in cyclic order.
    groups : mapping of str to (role, faces)
        For each group its role (``inlet``, ``outlet``, ``open``, ``wall``,
        ``symmetry``) and its faces as indices or as a mask. Every face belongs
        to exactly one group.
    curved : bool, optional
        Whether faces of 6, 8 and 9 points are quadratic.
    closed : bool, optional
        Whether an open surface is an error.
    weld : float, optional
        Points nearer than this, in metres, may be joined if that closes the
        surface; by default 1e-6 of the size.

    Returns
    -------
    ControlSurface
        Normals out of the fluid; what was mended is in its notes. Faces that
        were dropped as duplicates are gone from its arrays.

    Raises
    ------
    SurfaceError
        A surface that is open, or broken otherwise.
    GroupError
        Faces in no group or in two, a group without faces, or an unknown role.
    """
    xyz = np.ascontiguousarray(points, dtype=np.float64)
    connectivity, offsets, kinds = face_arrays(faces, curved=curved)
    count = connectivity.size // 3 if offsets is None else offsets.size - 1
    try:
        made = tuple(Group(name, Role(role)) for name, (role, _) in groups.items())
    except ValueError as error:
        raise GroupError(f"{error}", remedy=f"Roles are {', '.join(role.value for role in Role)}") from error
    owner = _sorted_into(groups, count)
    # invariants first: mending trusts shapes and indices
    ControlSurface(xyz, connectivity, offsets, kinds, owner, made, closed=False)
    mended = mend(
        xyz,
        connectivity,
        offsets,
        kinds,
        owner,
        tuple(g.name for g in made),
        require_closed=closed,
        weld_tolerance=weld,
    )
    return ControlSurface(
        points=mended.points,
        connectivity=mended.connectivity,
        offsets=mended.offsets,
        kinds=mended.kinds,
        group_of_face=mended.group_of_face,
        groups=made,
        closed=mended.closed,
        shells=mended.shells,
        notes=mended.notes,
    )
