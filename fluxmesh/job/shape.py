"""From a case to its control surface, with the arrays of the file beside it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluxmesh.case.model import Case
from fluxmesh.errors import FieldError, GroupError, InputError
from fluxmesh.job.exported import ExportedArrays
from fluxmesh.job.mesh import Loaded, load_mesh
from fluxmesh.surface.groups import Pick, by_array, by_pick, by_sets
from fluxmesh.surface.mend import mend
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.surface import ControlSurface, Group

__all__ = ["Shape", "read_shape"]


@dataclass(frozen=True, eq=False)
class Shape:
    """A control surface with the arrays that came with it.

    Attributes
    ----------
    surface : ControlSurface
        Metres, normals out of the fluid.
    arrays : ExportedArrays
        In the file's units.
    turned : ndarray of bool, shape (n_faces,), or None
        Faces whose corner order was turned from that of the file.
    """

    surface: ControlSurface
    arrays: ExportedArrays
    turned: NDArray[np.bool_] | None


def read_shape(case: Case, loaded: Loaded | None = None) -> Shape:
    """Read the mesh of a case and make its control surface.

    Parameters
    ----------
    case : Case
        The case.
    loaded : Loaded, optional
        Its mesh, if it was read before.

    Returns
    -------
    Shape
        Checked and mended.

    Raises
    ------
    InputError
        Files, groups or the surface are at fault; the message names them.
    """
    loaded = loaded or load_mesh(case)
    mesh, where, joined_groups, has = loaded.mesh, loaded.where, loaded.owner, loaded.has
    points = np.ascontiguousarray(mesh.points, dtype=np.float64)
    factor = case.surface.length_unit.factor
    if factor != 1.0:
        points = points * factor
    groups = tuple(Group(name, section.role) for name, section in case.groups.items())
    try:
        notes: list[str] = _skipped(mesh)
        owner = joined_groups if joined_groups is not None else _groups_of(case, mesh, points, notes)
        # the invariants first: mending trusts shapes and indices
        ControlSurface(points, mesh.connectivity, mesh.offsets, mesh.kinds, owner, groups, closed=False)
        mended = mend(
            points,
            mesh.connectivity,
            mesh.offsets,
            mesh.kinds,
            owner,
            tuple(case.groups),
            require_closed=case.surface.closed,
            weld_tolerance=None if case.surface.weld is None else float(case.surface.weld),
        )
    except InputError as error:
        if error.where.startswith(where):
            raise
        raise type(error)(error.found, f"{where}: {error.where}" if error.where else where, error.remedy) from error
    kept = mended.kept_faces
    face = mesh.face_arrays if kept is None else {name: values[kept] for name, values in mesh.face_arrays.items()}
    surface = ControlSurface(
        points=mended.points,
        connectivity=mended.connectivity,
        offsets=mended.offsets,
        kinds=mended.kinds,
        group_of_face=mended.group_of_face,
        groups=groups,
        closed=mended.closed and case.surface.closed,
        shells=mended.shells,
        notes=(*notes, *mended.notes),
    )
    return Shape(surface, ExportedArrays(mesh.source, mesh.node_arrays, face, has), mended.turned)


def _skipped(mesh: RawMesh) -> list[str]:
    return [
        f"{count} {kind} cells of {mesh.source} are no faces and were passed over"
        for kind, count in mesh.skipped.items()
    ]


def _groups_of(case: Case, mesh: RawMesh, points: NDArray[np.float64], notes: list[str]) -> NDArray[np.int32]:
    """Return the group of every face, by array, by sets or by rule."""
    naming = case.surface.groups
    rest = [name for name, section in case.groups.items() if section.rest]
    wanted = {name: section.tag or (name,) for name, section in case.groups.items() if not section.rest}
    order = list(case.groups)
    if naming is not None and naming.array is not None:
        owner = by_array(_group_array(mesh, naming.array), wanted, rest=bool(rest), array=naming.array)
    elif naming is not None and naming.sets:
        owner = by_sets(
            mesh.face_sets,
            {name: tuple(str(tag) for tag in tags) for name, tags in wanted.items()},
            mesh.face_count,
            rest=bool(rest),
        )
    else:
        picks = {
            name: Pick(section.pick.normal, section.pick.near, np.degrees(section.pick.angle))
            for name, section in case.groups.items()
            if section.pick is not None
        }
        wanted = dict.fromkeys(picks, ())
        owner, said = by_pick(points, mesh.connectivity, mesh.offsets, picks, rest=bool(rest), kinds=mesh.kinds)
        notes += said
    number = np.array([*(order.index(name) for name in wanted), order.index(rest[0]) if rest else -1], dtype=np.int32)
    owner = number[owner]
    if rest and not (owner == number[-1]).any():
        raise GroupError(
            f"group '{rest[0]}' has no faces", remedy="The other groups took them all: drop it, or correct them"
        )
    return owner


def _group_array(mesh: RawMesh, name: str) -> NDArray[np.generic]:
    if name in mesh.face_arrays:
        return mesh.face_arrays[name]
    if name in mesh.node_arrays:
        raise FieldError(
            f"the array '{name}' sits on points",
            where="surface.groups.array",
            remedy="Groups are sets of faces: a face (cell) array is needed",
        )
    listed = ", ".join(sorted(mesh.face_arrays)) or "none"
    raise FieldError(f"there is no face array '{name}'", where="surface.groups.array", remedy=f"The file has {listed}")
