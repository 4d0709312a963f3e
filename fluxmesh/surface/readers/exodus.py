"""Exodus files: side sets become sets of faces, with the variables of nodes, elements and sets.

Read variable by variable from the netCDF file below it. VTK's own reader ends the
process on some damaged files (3 of 50, measured with VTK 9.7.2), and reads most of
them without a word.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError, FileError
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.cell_shapes import SHAPES
from fluxmesh.surface.readers.components import with_vectors
from fluxmesh.surface.readers.content import FileContent, sets_having, surface_of
from fluxmesh.surface.readers.exodus_model import Block, Model, SideSet, read_model
from fluxmesh.surface.readers.faces import Faces, gather, join_blocks
from fluxmesh.surface.readers.netcdf import opened_netcdf
from fluxmesh.surface.readers.volume import CellBlock, Volume
from fluxmesh.surface.surface import FaceKind

__all__ = ["read_exodus"]

# What h5py and NumPy are seen to raise on damaged files.
_DAMAGE = (ArithmeticError, LookupError, MemoryError, OSError, RecursionError, RuntimeError, TypeError, ValueError)
_BACK = {
    3: [0, 2, 1],
    4: [0, 3, 2, 1],
    6: [0, 2, 1, 5, 4, 3],
    8: [0, 3, 2, 1, 7, 6, 5, 4],
    9: [0, 3, 2, 1, 7, 6, 5, 4, 8],
}


def read_exodus(path: Path, skin: bool | None = None) -> RawMesh:
    """Read an Exodus file.

    Parameters
    ----------
    path : Path
        An existing file, not empty.
    skin : bool, optional
        As `fluxmesh.surface.files.read_mesh`.

    Returns
    -------
    RawMesh
        The faces of all side sets, normals out of their elements, a set for
        each; without side sets the shell elements, a set for each block;
        without either the skin. Variables are those of the last time step:
        of nodes on nodes; of elements on the faces before them; of side sets
        on their faces, under "side set/name" where an element variable has
        the same name.

    Raises
    ------
    FileError
        The file is damaged, cut short, needs a package that is not installed,
        or has no faces.
    FieldError
        A variable has the wrong length.
    """
    try:
        with opened_netcdf(path) as variables:
            model = read_model(variables)
    except (FileError, FieldError):
        raise
    except _DAMAGE as error:
        said = str(error).strip("'\"").splitlines()
        raise FileError(
            f"cannot be read as Exodus ({type(error).__name__}: {said[0] if said else 'no reason given'})",
            str(path),
            "It is damaged or cut short; export or copy it again",
        ) from error
    return surface_of(_content(model, path.name, str(path)), str(path), skin)


def _content(model: Model, source: str, where: str) -> FileContent:
    skipped: dict[str, int] = {}
    for block in model.blocks:
        if block.shape.dimension != 2:
            skipped[block.shape.name] = skipped.get(block.shape.name, 0) + len(block.rows)
    sides, sets, left_out = _sides(model, where)
    if left_out:
        skipped["side that is no face"] = left_out
    note = ""
    own: dict[str, NDArray[Any]] = {}
    if len(sides):
        shells = sum(len(block.rows) for block in model.blocks if block.shape.dimension == 2)
        if shells:
            skipped["shell"] = shells
        faces = _faces_of_sides(model, sides, skipped)
        own = _set_variables(model, sides, sets, where)
        note = "the element behind each face"
    else:
        faces, sets = _shells(model, skipped, where)
    element = faces.cell_of_face
    assert element is not None
    on_faces = {name: values[element] for name, values in model.element_arrays.items()}
    nodes, behind = with_vectors(model.node_arrays), with_vectors(on_faces)
    named = {f"side set/{name}" if name in behind else name: values for name, values in with_vectors(own).items()}
    listed = ", ".join(map(repr, sorted(on_faces)))
    return FileContent(
        source=source,
        points=model.points,
        faces=faces,
        volume=lambda: _volume(model),
        volume_cells=sum(len(block.rows) for block in model.blocks if block.shape.dimension == 3),
        node_arrays=nodes,
        face_arrays={**behind, **named},
        cell_arrays=with_vectors(model.element_arrays),
        face_sets=sets,
        sets_have=sets_having(sets, (*nodes, *behind), named),
        notes=model.notes,
        face_notes=(f"values of {listed} on the faces of {source} are those of {note}",) if listed and note else (),
    )


def _volume(model: Model) -> Volume:
    blocks: list[CellBlock] = []
    unknown: dict[str, int] = {}
    names = set()
    for block in model.blocks:
        if block.shape.dimension != 3 or not len(block.rows):
            continue
        names.add(block.shape.name)
        if block.shape.solid:
            cells = np.arange(block.first, block.first + len(block.rows), dtype=np.int64)
            blocks.append(CellBlock(block.shape.solid, block.rows, cells))
        else:
            unknown[block.shape.name] = unknown.get(block.shape.name, 0) + len(block.rows)
    return Volume(tuple(blocks), None, frozenset(names), unknown)


def _block_of(model: Model, elements: NDArray[np.int64]) -> NDArray[np.int64]:
    return np.searchsorted([block.first for block in model.blocks], elements, side="right") - 1


def _sides(model: Model, where: str) -> tuple[NDArray[np.int64], dict[str, NDArray[np.int64]], int]:
    """Return all sides once, as (element, side) from 0, the faces of each set, and how many sides are no faces."""
    kept: list[NDArray[np.int64]] = []
    names: list[str] = []
    left_out = 0
    for side_set in model.side_sets:
        block = _block_of(model, side_set.elements)
        faced = np.zeros(side_set.elements.size, dtype=np.bool_)
        for number in np.unique(block):
            owner = model.blocks[number]
            here = block == number
            faced[here] = side_set.sides[here] < _side_count(owner, side_set, where)
        left_out += int(np.count_nonzero(~faced))
        kept.append(np.column_stack([side_set.elements, side_set.sides])[faced])
        names.append(side_set.name)
    if not kept:
        return np.zeros((0, 2), dtype=np.int64), {}, 0
    sides, place = np.unique(np.concatenate(kept), axis=0, return_inverse=True)
    sets: dict[str, NDArray[np.int64]] = {}
    for name, faces in zip(names, np.split(place.ravel(), np.cumsum([len(part) for part in kept])[:-1])):
        if faces.size:
            sets[name] = np.unique(np.concatenate([sets.get(name, faces[:0]), faces]))
    return sides, sets, left_out


def _side_count(block: Block, side_set: SideSet, where: str) -> int:
    """Return how many sides of an element are faces."""
    if block.shape.dimension == 3 and not block.shape.solid:
        raise FileError(
            f"side set {side_set.name!r} has sides of elements of type {block.shape.name}, which cannot be read",
            where,
            "Export linear or quadratic tetrahedra, hexahedra, wedges, pyramids or shells",
        )
    if block.shape.dimension == 3:
        return len(block.shape.sides)
    return 2 if block.shape.sheet is not None else 0


def _faces_of_sides(model: Model, sides: NDArray[np.int64], skipped: dict[str, int]) -> Faces:
    """Return the face of each side."""
    parts: list[tuple[FaceKind, NDArray[Any]]] = []
    place: list[NDArray[np.int64]] = []
    block = _block_of(model, sides[:, 0])
    for number in np.unique(block):
        owner = model.blocks[number]
        for side in np.unique(sides[block == number, 1]):
            chosen = np.flatnonzero((block == number) & (sides[:, 1] == side))
            rows = owner.rows[sides[chosen, 0] - owner.first]
            if owner.shape.dimension == 3:
                shape = SHAPES[owner.shape.solid]
                face = owner.shape.sides[side]
                parts.append((shape.kind(face), rows[:, list(shape.faces[face])]))
            else:
                assert owner.shape.sheet is not None
                parts.append((owner.shape.sheet, rows[:, _BACK[rows.shape[1]]] if side else rows))
            place.append(chosen)
    connectivity, offsets, kinds = join_blocks(parts)
    order = np.argsort(np.concatenate(place))
    if offsets is None:
        connectivity = connectivity.reshape(-1, 3)[order].ravel()
    else:
        connectivity, offsets = gather(connectivity, offsets, order)
    return Faces(connectivity, offsets, None if kinds is None else kinds[order], sides[:, 0], skipped)


def _shells(model: Model, skipped: dict[str, int], where: str) -> tuple[Faces, dict[str, NDArray[np.int64]]]:
    """Return the elements that are faces, and the set of each block."""
    parts: list[tuple[FaceKind, NDArray[Any]]] = []
    elements: list[NDArray[np.int64]] = [np.zeros(0, dtype=np.int64)]
    sets: dict[str, NDArray[np.int64]] = {}
    count = 0
    for block in model.blocks:
        if block.shape.dimension != 2 or not len(block.rows):
            continue
        if block.shape.sheet is None:
            raise FileError(
                f"has {len(block.rows)} faces of type {block.shape.name} with {block.rows.shape[1]} points, "
                "which cannot be read",
                where,
                "Export triangles, quads, or quadratic triangles and quads",
            )
        parts.append((block.shape.sheet, block.rows))
        elements.append(np.arange(block.first, block.first + len(block.rows), dtype=np.int64))
        faces = np.arange(count, count + len(block.rows), dtype=np.int64)
        sets[block.name] = np.concatenate([sets.get(block.name, faces[:0]), faces])
        count += len(block.rows)
    connectivity, offsets, kinds = join_blocks(parts)
    return Faces(connectivity, offsets, kinds, np.concatenate(elements), skipped), sets


def _set_variables(
    model: Model, sides: NDArray[np.int64], sets: dict[str, NDArray[np.int64]], where: str
) -> dict[str, NDArray[Any]]:
    """Return the variables of side sets on all faces; NaN where a set has none."""
    found: dict[str, NDArray[Any]] = {}
    stride = int(sides[:, 1].max()) + 1
    keys = sides[:, 0] * stride + sides[:, 1]  # rising, because the sides are sorted
    for side_set in model.side_sets:
        wanted = side_set.elements * stride + side_set.sides
        place = np.minimum(np.searchsorted(keys, wanted), keys.size - 1)
        there = (keys[place] == wanted) & (side_set.sides < stride)
        for name, values in side_set.arrays.items():
            whole = found.setdefault(name, np.full(len(sides), np.nan))
            whole[place[there]] = values[there]
    return found
