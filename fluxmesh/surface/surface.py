"""The control surface as data: points, faces and groups, with their invariants.

A face is a row of point indices in cyclic order; by the right-hand rule its
normal points OUT of the fluid. Curved faces list corners first, then mid-side
points (the order of the open VTK file format).
"""

from __future__ import annotations

from dataclasses import dataclass, field
from enum import IntEnum, StrEnum
from typing import Any

import numpy as np
from numpy.typing import NDArray

import fluxmesh
from fluxmesh.errors import GroupError, SurfaceError
from fluxmesh.units import LARGEST

__all__ = ["ControlSurface", "FaceKind", "Group", "Role"]


class FaceKind(IntEnum):
    """Shape of a face.

    ``POLYGON`` has three or more corners and straight edges; the others are
    the quadratic triangle and quadrilaterals with 6, 8 and 9 points.
    """

    POLYGON = 0
    TRIANGLE6 = 1
    QUAD8 = 2
    QUAD9 = 3


class Role(StrEnum):
    """What a face group is to the flow."""

    INLET = "inlet"
    OUTLET = "outlet"
    OPEN = "open"
    WALL = "wall"
    SYMMETRY = "symmetry"

    @property
    def is_port(self) -> bool:
        """Whether flow may pass."""
        return self in (Role.INLET, Role.OUTLET, Role.OPEN)


@dataclass(frozen=True)
class Group:
    """A named set of faces.

    Attributes
    ----------
    name : str
        Unique within a surface.
    role : Role
        What the group is to the flow.
    """

    name: str
    role: Role


@dataclass(frozen=True, eq=False)
class ControlSurface:
    """A surface whose faces carry groups.

    Attributes
    ----------
    points : ndarray, shape (n_points, 3), float64
        Coordinates in metres.
    connectivity : ndarray, shape (n_entries,), int64
        Point indices of all faces, one face after the other.
    offsets : ndarray, shape (n_faces + 1,), int64, or None
        Face ``f`` has the entries ``connectivity[offsets[f]:offsets[f + 1]]``;
        None when every face is a straight triangle.
    kinds : ndarray, shape (n_faces,), int8, or None
        `FaceKind` of each face; None when all are ``POLYGON``.
    group_of_face : ndarray, shape (n_faces,), int32
        Index into `groups`.
    groups : tuple of Group
        At least one; names are unique.
    closed : bool
        True when edge pairing found the surface closed and consistently
        oriented, normals out of the fluid.
    shells : int
        Number of edge-connected pieces (1 when it was not counted).
    notes : tuple of str
        What was mended or noticed on the way, one sentence each.

    Raises
    ------
    SurfaceError
        Shapes that do not fit together, points that are not finite, or
        indices out of range.
    GroupError
        No group, or two of one name.
    """

    points: NDArray[np.float64]
    connectivity: NDArray[np.int64]
    offsets: NDArray[np.int64] | None
    kinds: NDArray[np.int8] | None
    group_of_face: NDArray[np.int32]
    groups: tuple[Group, ...]
    closed: bool
    shells: int = 1
    notes: tuple[str, ...] = field(default=())

    def __post_init__(self) -> None:
        """Check the invariants once, at the door."""
        _require_points(self.points)
        if self.face_count == 0:
            raise SurfaceError("the surface has no faces", remedy="Give a mesh of triangles, quads or polygons")
        _require_faces(self)
        names = [group.name for group in self.groups]
        if not names:
            raise GroupError("the surface has no group", remedy="Name at least one face group")
        repeated = {name for name in names if names.count(name) > 1} if len(set(names)) < len(names) else set()
        if repeated:
            raise GroupError(f"group names occur twice: {', '.join(sorted(repeated))}")

    @property
    def face_count(self) -> int:
        """Number of faces."""
        return self.connectivity.size // 3 if self.offsets is None else self.offsets.size - 1

    @property
    def point_count(self) -> int:
        """Number of points, used or not."""
        return int(self.points.shape[0])

    def _repr_html_(self) -> str:
        """Show groups and shape in a notebook; the package's door loads what that needs."""
        return fluxmesh.html_of(self)


def _require_points(points: NDArray[Any]) -> None:
    if points.ndim != 2 or points.shape[1] != 3 or points.dtype != np.float64:
        raise SurfaceError(
            f"points have shape {points.shape} and type {points.dtype}",
            remedy="An array of shape (n, 3), float64, is needed",
        )
    # NaN comes out of both: only where they are not within bounds is the slow look needed
    if points.size and not (points.max() <= LARGEST and points.min() >= -LARGEST):
        bad = np.flatnonzero(~np.isfinite(points).all(axis=1))
        if bad.size:
            raise SurfaceError(
                f"{bad.size} of {points.shape[0]} points have coordinates that are not finite, "
                f"the first is point {bad[0]}",
                remedy="Export the mesh again",
            )
        far = np.flatnonzero((np.abs(points) > LARGEST).any(axis=1))
        raise SurfaceError(
            f"{far.size} of {points.shape[0]} points lie beyond {LARGEST:g} m, the first is point {far[0]}",
            remedy="Check the length unit; or the file is damaged: export it again",
        )


def _require_faces(surface: ControlSurface) -> None:
    entries, offsets = surface.connectivity, surface.offsets
    if offsets is None and entries.size % 3:
        raise SurfaceError(f"{entries.size} entries do not make whole triangles")
    if offsets is not None and (
        offsets[0] != 0 or offsets[-1] != entries.size or (offsets[1:] - offsets[:-1]).min(initial=3) < 3
    ):
        raise SurfaceError("face offsets do not rise from 0 to the number of entries by 3 or more a face")
    low, high = int(entries.min()), int(entries.max())
    if low < 0 or high >= surface.point_count:
        raise SurfaceError(
            f"faces use point {low if low < 0 else high}, but there are {surface.point_count} points",
            remedy="The file is damaged or its counts are wrong",
        )
    groups = surface.group_of_face
    if groups.shape != (surface.face_count,):
        raise SurfaceError(f"{groups.size} group numbers for {surface.face_count} faces")
    if int(groups.min()) < 0 or int(groups.max()) >= len(surface.groups):
        raise GroupError("a face belongs to no group", remedy="Give every face one of the groups")
    if surface.kinds is not None and surface.kinds.shape != (surface.face_count,):
        raise SurfaceError(f"{surface.kinds.size} face kinds for {surface.face_count} faces")
