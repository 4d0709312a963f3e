"""An unstructured CGNS zone: its boundary faces, or all its faces, or its cells."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError, FileError
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.cgns_boundary import Boundary, PointSet, boundaries
from fluxmesh.surface.readers.cgns_elements import Elements, read_elements
from fluxmesh.surface.readers.cgns_nodes import Node
from fluxmesh.surface.readers.cgns_solutions import ListedArrays, read_coordinates, read_solutions
from fluxmesh.surface.readers.components import with_vectors
from fluxmesh.surface.readers.content import FileContent, sets_having
from fluxmesh.surface.readers.faces import Faces, gather
from fluxmesh.surface.readers.overlay import match_faces
from fluxmesh.surface.readers.skin import corner_rows, take_skin
from fluxmesh.surface.surface import Role

__all__ = ["unstructured_content"]


def unstructured_content(
    zone: Node, sizes: NDArray[np.int64], families: Mapping[str, str], source: str, alone: bool
) -> FileContent:
    """Read an unstructured zone.

    Parameters
    ----------
    zone : Node
        A Zone_t node.
    sizes : ndarray of int64
        Its numbers of vertices and cells.
    families : mapping of str to str
        Types of boundary conditions of the families.
    source : str
        File name, for messages.
    alone : bool
        Whether the file has no other zone.

    Returns
    -------
    FileContent
        Faces that boundary conditions cover, a set for each. Without such
        conditions, all surface elements: a set for each section, "zone/section"
        where there are several zones; a zone of one section of surface
        elements is one set of the zone's name.

    Raises
    ------
    FileError
        The zone is damaged, or has elements that cannot be read.
    FieldError
        An array has the wrong length.
    """
    vertices, cells = int(sizes[0]), int(sizes[1])
    points = read_coordinates(zone, (vertices,))
    elements = read_elements(zone)
    nodes, in_cells, on_faces = read_solutions(zone, (vertices,), (cells,))
    conditions = list(boundaries(zone, 1, families))
    covered = _covered(conditions, elements, points, zone)
    sets, roles = _named(conditions, covered)
    if sets:
        chosen = np.unique(np.concatenate(list(sets.values())))
    elif elements.volume.polyhedra is not None:
        chosen = np.zeros(0, dtype=np.int64)  # the skin tells the outer faces
    else:
        chosen = np.flatnonzero(~elements.inner)
        sets = _sections(elements, chosen, zone.name, alone)
    position = np.full(elements.numbers.size, -1, dtype=np.int64)
    position[chosen] = np.arange(chosen.size)
    connectivity, offsets = gather(elements.connectivity, elements.offsets, chosen)
    kinds = elements.kinds[chosen]
    skipped = dict(elements.skipped)
    left = int(np.count_nonzero(~elements.inner)) - chosen.size
    if left > 0 and chosen.size:
        skipped["face in no boundary condition"] = left
    cell_count = sum(elements.volume.counts().values())
    for name, count in elements.volume.counts().items():
        skipped[name] = count
    faces = Faces(connectivity, offsets, kinds if kinds.any() else None, None, skipped)
    own = _own_arrays(on_faces, conditions, covered, elements, position, chosen.size)
    if in_cells and cell_count not in (0, cells):
        raise FileError(
            f"has {cell_count} volume cells, but announces {cells}", zone.where, "The file is damaged; export it again"
        )
    behind, notes = _behind(in_cells, elements, faces, points, position, zone)
    named = {name: position[faces] for name, faces in sets.items()}
    nodes, behind, own = with_vectors(nodes), with_vectors(behind), _beside(with_vectors(own), behind)
    return FileContent(
        source=source,
        points=points,
        faces=faces,
        volume=lambda: elements.volume,
        volume_cells=cell_count,
        node_arrays=nodes,
        face_arrays={**behind, **own},
        cell_arrays=with_vectors(in_cells) if cell_count else {},
        face_sets=named,
        sets_have=sets_having(named, (*nodes, *behind), own),
        roles=roles,
        face_notes=notes,
    )


def _covered(
    conditions: list[Boundary], elements: Elements, points: NDArray[Any], zone: Node
) -> list[NDArray[np.int64]]:
    """Return the faces that each condition covers, in its own order."""
    return [_faces_of(condition.points, elements, points.shape[0], condition.where) for condition in conditions]


def _faces_of(points: PointSet, elements: Elements, vertex_count: int, where: str) -> NDArray[np.int64]:
    values = points.values.ravel()
    if points.location == "Vertex":
        corner = np.zeros(vertex_count + 1, dtype=np.bool_)
        low, high = int(values.min()), int(values.max())
        if low < 1 or high > vertex_count:
            raise FileError(f"names vertex {low if low < 1 else high} of {vertex_count}", where, "Export it again")
        if points.is_range:
            corner[low : high + 1] = True
        else:
            corner[values] = True
        entries, starts = corner_rows(elements.connectivity, elements.offsets, elements.kinds)
        if not entries.size:
            return np.zeros(0, dtype=np.int64)
        inside = np.minimum.reduceat(corner[np.clip(entries + 1, 0, vertex_count)].astype(np.int8), starts[:-1])
        return np.flatnonzero((inside == 1) & ~elements.inner)
    if not points.location.endswith("FaceCenter"):
        return np.zeros(0, dtype=np.int64)  # an edge, or a set of cells: no boundary
    numbers = values
    if points.is_range:
        # one more than there are faces is enough to see that a range leaves them
        first, last = int(values.min()), int(values.max())
        numbers = np.arange(first, min(last, first + elements.numbers.size) + 1, dtype=np.int64)
    place = np.searchsorted(elements.numbers, numbers)
    there = place < elements.numbers.size
    there[there] = elements.numbers[place[there]] == numbers[there]
    if not there.all():
        raise FileError(
            f"names the element {numbers[~there][0]}, which is no face of its zone",
            where,
            "Export the zone with its boundary faces as elements",
        )
    return place.astype(np.int64)


def _named(
    conditions: list[Boundary], covered: list[NDArray[np.int64]]
) -> tuple[dict[str, NDArray[np.int64]], dict[str, Role]]:
    """Return the faces of each name, and the role that its conditions agree on."""
    sets: dict[str, NDArray[np.int64]] = {}
    roles: dict[str, set[Role | None]] = {}
    for condition, faces in zip(conditions, covered):
        if faces.size:
            sets[condition.name] = np.unique(np.concatenate([sets.get(condition.name, faces[:0]), faces]))
            roles.setdefault(condition.name, set()).add(condition.role)
    said = {name: next(iter(found)) for name, found in roles.items() if len(found) == 1}
    return sets, {name: role for name, role in said.items() if role is not None}


def _sections(elements: Elements, chosen: NDArray[np.int64], zone: str, alone: bool) -> dict[str, NDArray[np.int64]]:
    present = np.unique(elements.section[chosen])
    if present.size == 0:
        return {}
    if present.size == 1:
        on_volume = alone and bool(elements.volume.counts())
        return {elements.sections[present[0]] if on_volume else zone: chosen}
    before = "" if alone else f"{zone}/"
    return {f"{before}{elements.sections[index]}": chosen[elements.section[chosen] == index] for index in present}


def _own_arrays(
    on_faces: ListedArrays,
    conditions: list[Boundary],
    covered: list[NDArray[np.int64]],
    elements: Elements,
    position: NDArray[np.int64],
    count: int,
) -> dict[str, NDArray[Any]]:
    """Return arrays that the file gives on faces; NaN where it gives none."""
    arrays: dict[str, NDArray[Any]] = {}

    def lay(name: str, faces: NDArray[np.int64], values: NDArray[Any], where: str) -> None:
        if values.size not in (1, faces.size):
            raise FieldError(
                f"array {name!r} holds {values.size} values for {faces.size} faces", where, "Export it again"
            )
        place = position[faces]
        whole = arrays.setdefault(name, np.full(count, np.nan))
        whole[place[place >= 0]] = values if values.size == 1 else values[place >= 0]

    for points, found in on_faces:
        faces = _faces_of(points, elements, 0, "a flow solution at face centres")
        for name, values in found.items():
            lay(name, faces, values, "a flow solution at face centres")
    for condition, faces in zip(conditions, covered):
        for name, values in condition.arrays.items():
            if condition.points.location.endswith("FaceCenter") or values.size == 1:
                lay(name, faces, values, condition.where)
    return arrays


def _beside(own: dict[str, NDArray[Any]], behind: dict[str, NDArray[Any]]) -> dict[str, NDArray[Any]]:
    """Name the arrays of boundary conditions so that they hide none of the solution."""
    return {f"DirichletData/{name}" if name in behind else name: values for name, values in own.items()}


def _behind(
    in_cells: dict[str, NDArray[Any]],
    elements: Elements,
    faces: Faces,
    points: NDArray[Any],
    position: NDArray[np.int64],
    zone: Node,
) -> tuple[dict[str, NDArray[Any]], tuple[str, ...]]:
    """Return arrays at cell centres as values on faces."""
    count = np.count_nonzero(position >= 0)
    if not in_cells or not count:
        return {}, ()
    if not elements.volume.counts():
        # the faces are the cells, by element number
        if any(values.size != elements.numbers.size for values in in_cells.values()):
            raise FieldError(
                f"arrays at cell centres hold {max(values.size for values in in_cells.values())} values, "
                f"but there are {elements.numbers.size} elements",
                zone.where,
                "Export it again",
            )
        chosen = position >= 0
        return {name: values[chosen] for name, values in in_cells.items()}, ()
    skin = take_skin(elements.volume, points, zone.where)
    every = np.arange(points.shape[0])
    listed = RawMesh("", points, faces.connectivity, faces.offsets, faces.kinds)
    hull = RawMesh("", points, skin.connectivity, skin.offsets, skin.kinds)
    partner = match_faces(listed, hull, every, every)
    assert skin.cell_of_face is not None
    cell = np.where(partner >= 0, skin.cell_of_face[partner], -1)
    laid = {}
    for name, values in in_cells.items():
        laid[name] = values[cell] if (cell >= 0).all() else np.where(cell >= 0, values[cell], np.nan)
    listed_names = ", ".join(repr(name) for name in sorted(in_cells))
    return laid, (f"values of {listed_names} on the faces of {zone.name} are those of the cell behind each face",)
