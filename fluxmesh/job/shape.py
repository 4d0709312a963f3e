"""From a case to its control surface, with the arrays of the file beside it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluxmesh.case.model import Case
from fluxmesh.errors import FieldError, GroupError, InputError, SurfaceError
from fluxmesh.job.exported import ExportedArrays
from fluxmesh.job.mesh import Loaded, load_mesh
from fluxmesh.surface.files import skin_hint
from fluxmesh.surface.groups import Pick, by_array, by_pick, by_sets
from fluxmesh.surface.mend import Mended, mend
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
        picked = joined_groups is None and case.surface.groups is None
        owner = np.zeros(mesh.face_count, np.int32)
        if not picked:
            owner = joined_groups if joined_groups is not None else _groups_in_file(case, mesh)
        # the invariants first: mending trusts shapes and indices
        ControlSurface(points, mesh.connectivity, mesh.offsets, mesh.kinds, owner, groups, closed=False)
        mended = mend(
            points,
            mesh.connectivity,
            mesh.offsets,
            mesh.kinds,
            owner,
            ("the surface",) if picked else tuple(case.groups),
            require_closed=case.surface.closed,
            weld_tolerance=None if case.surface.weld is None else float(case.surface.weld),
        )
        owner = mended.group_of_face
        if picked:
            # only now do all normals point out of the fluid, and a missing cap has been told as a hole
            owner = _picked_groups(case, mended, notes)
    except InputError as error:
        if error.where.startswith(where):
            raise
        hint = f". {skin_hint(mesh)}" if isinstance(error, SurfaceError) and skin_hint(mesh) else ""
        at = f"{where}: {error.where}" if error.where else where
        raise type(error)(error.found, at, error.remedy + hint) from error
    kept = mended.kept_faces
    face = mesh.face_arrays if kept is None else {name: values[kept] for name, values in mesh.face_arrays.items()}
    surface = ControlSurface(
        points=mended.points,
        connectivity=mended.connectivity,
        offsets=mended.offsets,
        kinds=mended.kinds,
        group_of_face=owner,
        groups=groups,
        closed=mended.closed and case.surface.closed,
        shells=mended.shells,
        notes=(*notes, *mended.notes),
    )
    return Shape(surface, ExportedArrays(mesh.source, mesh.node_arrays, face, has), mended.turned)


def _skipped(mesh: RawMesh) -> list[str]:
    said = [f"The surface is {mesh.derived} of {mesh.source}"] if mesh.derived else []
    said += mesh.notes
    if not mesh.derived:
        said += [
            f"{count} {kind} cells of {mesh.source} are no faces and were passed over"
            for kind, count in mesh.skipped.items()
        ]
    return said


def _groups_in_file(case: Case, mesh: RawMesh) -> NDArray[np.int32]:
    """Return the group of every face, by array or by named sets."""
    naming = case.surface.groups
    rest = any(section.rest for section in case.groups.values())
    wanted = {name: section.tag or (name,) for name, section in case.groups.items() if not section.rest}
    if naming is not None and naming.array is not None:
        owner = by_array(_group_array(mesh, naming.array), wanted, rest=rest, array=naming.array)
    else:
        sets = {name: tuple(str(tag) for tag in tags) for name, tags in wanted.items()}
        owner = by_sets(mesh.face_sets, sets, mesh.face_count, rest=rest)
    return _numbered(case, list(wanted), owner)


def _picked_groups(case: Case, mended: Mended, notes: list[str]) -> NDArray[np.int32]:
    """Return the group of every face of a mended surface, by rule."""
    picks = {
        name: Pick(section.pick.normal, section.pick.near, np.degrees(section.pick.angle))
        for name, section in case.groups.items()
        if section.pick is not None
    }
    rest = any(section.rest for section in case.groups.values())
    owner, said = by_pick(mended.points, mended.connectivity, mended.offsets, picks, rest=rest, kinds=mended.kinds)
    notes += said
    return _numbered(case, list(picks), owner)


def _numbered(case: Case, names: list[str], owner: NDArray[np.int32]) -> NDArray[np.int32]:
    """From places in `names`, -1 for faces left over, to places among the groups of the case."""
    order = list(case.groups)
    rest = next((name for name, section in case.groups.items() if section.rest), None)
    number = np.array([*(order.index(name) for name in names), -1 if rest is None else order.index(rest)], np.int32)
    owner = number[owner]
    if rest is not None and not (owner == number[-1]).any():
        raise GroupError(
            f"group '{rest}' has no faces", remedy="The other groups took them all: drop it, or correct them"
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
