"""What a file holds, faces and volume cells, made into one surface: its faces, or its skin."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FileError
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.faces import Faces, require_faces
from fluxmesh.surface.readers.joining import join_meshes, keep_faces
from fluxmesh.surface.readers.overlay import drop_shared, overlay
from fluxmesh.surface.readers.same_faces import coincident_points
from fluxmesh.surface.readers.skin import take_skin
from fluxmesh.surface.readers.volume import Volume, described
from fluxmesh.surface.surface import Role

__all__ = ["FileContent", "sets_having", "surface_of", "surface_of_parts"]


@dataclass(frozen=True, eq=False)
class FileContent:
    """Cells and arrays of a file, or of one block of it.

    Attributes
    ----------
    source : str
        File name, for messages.
    points : ndarray, shape (n_points, 3), float32 or float64
        Coordinates.
    faces : Faces
        The cells that are faces; there may be none.
    volume : callable
        Gives the volume cells; called only when their skin is wanted.
    volume_cells : int
        How many there are.
    node_arrays : dict of str to ndarray
        Arrays on points.
    face_arrays : dict of str to ndarray
        Arrays on `faces`.
    cell_arrays : dict of str to ndarray
        Arrays on volume cells, by the cell numbers that `volume` gives.
    face_sets, sets_have, roles, notes
        As in `RawMesh`.
    face_notes : tuple of str
        Notes that hold for the listed faces, not for the skin.
    """

    source: str
    points: NDArray[Any]
    faces: Faces
    volume: Callable[[], Volume]
    volume_cells: int = 0
    node_arrays: dict[str, NDArray[Any]] = field(default_factory=dict)
    face_arrays: dict[str, NDArray[Any]] = field(default_factory=dict)
    cell_arrays: dict[str, NDArray[Any]] = field(default_factory=dict)
    face_sets: dict[str, NDArray[np.int64]] = field(default_factory=dict)
    sets_have: dict[str, frozenset[str]] | None = None
    roles: dict[str, Role] = field(default_factory=dict)
    notes: tuple[str, ...] = ()
    face_notes: tuple[str, ...] = ()

    @property
    def face_count(self) -> int:
        """Number of faces."""
        return self.faces.connectivity.size // 3 if self.faces.offsets is None else self.faces.offsets.size - 1


def sets_having(
    sets: Mapping[str, NDArray[np.int64]], everywhere: Iterable[str], partial: Mapping[str, NDArray[Any]]
) -> dict[str, frozenset[str]] | None:
    """Tell which arrays each set has values of.

    Parameters
    ----------
    sets : mapping of str to ndarray of int64
        Faces of each set.
    everywhere : iterable of str
        Arrays that all faces have.
    partial : mapping of str to ndarray, shape (n_faces,) or (n_faces, k)
        Arrays that are NaN on the faces that have no value.

    Returns
    -------
    dict of str to frozenset of str, or None
        As `RawMesh.sets_have`.
    """
    if not partial:
        return None
    all_have = frozenset(everywhere)
    return {
        name: all_have | {array for array, values in partial.items() if not np.isnan(values[faces]).any()}
        for name, faces in sets.items()
    }


def surface_of(content: FileContent, where: str, skin: bool | None) -> RawMesh:
    """Return the faces of a file, or the skin of its volume cells.

    Parameters
    ----------
    content : FileContent
        What the file holds.
    where : str
        File, for messages.
    skin : bool or None
        True: the skin, on which listed faces leave their arrays and sets.
        False: the listed faces. None: the skin only if no face is listed.

    Returns
    -------
    RawMesh
        With faces.

    Raises
    ------
    FileError
        No faces, no volume cells where a skin is wanted, or point indices
        out of range.
    """
    if not _wants_skin([content], where, skin):
        return require_faces(_listed(content), where)
    taken = _skin(content, content.volume(), where, content.source)
    if content.face_count:
        every = np.arange(content.points.shape[0])
        listed = _listed(replace(content, face_notes=()))
        taken = overlay(taken, require_faces(listed, where), every, every)
    return keep_faces(taken, np.arange(taken.face_count))


def surface_of_parts(
    parts: Sequence[tuple[str, FileContent]],
    where: str,
    skin: bool | None,
    source: str,
    *,
    named: bool,
    notes: tuple[str, ...] = (),
) -> RawMesh:
    """Return the faces of several blocks, or the skin of their volume cells, as one mesh.

    Parameters
    ----------
    parts : sequence of (str, FileContent)
        Name of each block, and what it holds; parts of one block share its name.
    where, skin
        As `surface_of`. The skin leaves out faces that cells of two blocks
        share: faces with corners at exactly the same places.
    source : str
        Name of the file, for messages.
    named : bool
        Whether the faces of each block become a set of its name.
    notes : tuple of str, optional
        What to say beside it.

    Returns
    -------
    RawMesh
        Points of different blocks stay separate. Arrays that only some blocks
        have are NaN (text: empty) on the others.

    Raises
    ------
    FileError
        As `surface_of`.
    FieldError
        Arrays of one name that do not fit together.
    """
    filled = [_Part(f"{name} ({index})", name, part) for index, (name, part) in enumerate(parts) if _has_cells(part)]
    if not filled:
        raise FileError(
            "; ".join(("holds no faces in any of its blocks", *notes)),
            where,
            "Export the surface of the mesh as triangles, quads or polygons",
        )
    if _wants_skin([part.content for part in filled], where, skin):
        mesh = _joint_skin(filled, where, source, named)
    else:
        mesh = _joint_faces(filled, where, named)
    return replace(mesh, source=source, notes=(*notes, *mesh.notes))


@dataclass(frozen=True, eq=False)
class _Part:
    """A block, or one of several parts of it."""

    key: str
    name: str
    content: FileContent

    def named(self, mesh: RawMesh, named: bool) -> RawMesh:
        if not named:
            return mesh
        return replace(mesh, face_sets={**mesh.face_sets, self.name: np.arange(mesh.face_count, dtype=np.int64)})


def _joint_faces(parts: list[_Part], where: str, named: bool) -> RawMesh:
    """Return the listed faces of all parts."""
    meshes = {
        part.key: part.named(require_faces(_listed(part.content), f"{where}: {part.name}"), named)
        for part in parts
        if part.content.face_count
    }
    joint = join_meshes(meshes).mesh
    # what the other parts hold is passed over
    skipped = dict(joint.skipped)
    for part in parts:
        if not part.content.face_count:
            for name, count in part.content.faces.skipped.items():
                skipped[name] = skipped.get(name, 0) + count
    return replace(joint, skipped=skipped, volume_cells=sum(part.content.volume_cells for part in parts))


def _joint_skin(parts: list[_Part], where: str, source: str, named: bool) -> RawMesh:
    """Return the skin of the volume cells of all parts together."""
    solid = [part for part in parts if part.content.volume_cells]
    volumes = [part.content.volume() for part in solid]
    skins = {
        part.key: part.named(_skin(part.content, volume, f"{where}: {part.name}", source), named)
        for part, volume in zip(solid, volumes)
    }
    joined = join_meshes(skins)
    whole = replace(joined.mesh, source=source, derived=f"the skin of {described(volumes)}")
    taken = drop_shared(whole, joined.group_of_face)
    if any(part.content.face_count for part in parts):
        silent = [replace(part, content=replace(part.content, face_notes=())) for part in parts]
        listed = _joint_faces(silent, where, named)
        same = coincident_points(np.concatenate([taken.points, listed.points]))
        count = taken.points.shape[0]
        taken = overlay(taken, listed, same[:count], same[count:])
    return keep_faces(taken, np.arange(taken.face_count))


def _has_cells(content: FileContent) -> bool:
    return bool(content.face_count or content.volume_cells)


def _wants_skin(contents: list[FileContent], where: str, skin: bool | None) -> bool:
    cells = sum(content.volume_cells for content in contents)
    if skin and not cells:
        raise FileError("has no volume cells whose skin could be taken", where, "Leave out skin = true")
    return bool(skin) or (skin is None and cells > 0 and not any(content.face_count for content in contents))


def _listed(content: FileContent) -> RawMesh:
    faces = content.faces
    return RawMesh(
        source=content.source,
        points=content.points,
        connectivity=faces.connectivity,
        offsets=faces.offsets,
        kinds=faces.kinds,
        node_arrays=content.node_arrays,
        face_arrays=content.face_arrays,
        face_sets=content.face_sets,
        skipped=faces.skipped,
        volume_cells=content.volume_cells,
        sets_have=content.sets_have,
        roles=content.roles,
        notes=(*content.notes, *content.face_notes),
    )


def _skin(content: FileContent, volume: Volume, where: str, source: str) -> RawMesh:
    """Return the skin with all points of the file."""
    faces = take_skin(volume, content.points, where)
    cells = volume.names | volume.counts().keys()
    arrays = {name: values[faces.cell_of_face] for name, values in content.cell_arrays.items()}
    notes = content.notes
    if arrays:
        listed = ", ".join(repr(name) for name in sorted(arrays))
        notes = (*notes, f"values of {listed} on the skin of {source} are those of the cell behind each face")
    return RawMesh(
        source=content.source,
        points=content.points,
        connectivity=faces.connectivity,
        offsets=faces.offsets,
        kinds=faces.kinds,
        node_arrays=content.node_arrays,
        face_arrays=arrays,
        skipped={name: count for name, count in content.faces.skipped.items() if name not in cells},
        derived=f"the skin of {described([volume])}",
        notes=notes,
    )
