"""A structured CGNS zone: quads of its boundary conditions, and its hexahedra."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FileError
from fluxmesh.surface.readers.cgns_boundary import Boundary, boundaries
from fluxmesh.surface.readers.cgns_nodes import Node
from fluxmesh.surface.readers.cgns_solutions import read_coordinates, read_solutions
from fluxmesh.surface.readers.components import with_vectors
from fluxmesh.surface.readers.content import FileContent
from fluxmesh.surface.readers.faces import Faces
from fluxmesh.surface.readers.same_faces import face_labels
from fluxmesh.surface.readers.volume import CellBlock, Volume
from fluxmesh.surface.surface import Role

__all__ = ["structured_content"]


def structured_content(zone: Node, sizes: NDArray[np.int64], families: Mapping[str, str], source: str) -> FileContent:
    """Read a structured zone.

    Parameters
    ----------
    zone : Node
        A Zone_t node.
    sizes : ndarray, shape (3, index dimension), int64
        Numbers of vertices and cells along each index.
    families : mapping of str to str
        Types of boundary conditions of the families.
    source : str
        File name, for messages.

    Returns
    -------
    FileContent
        Quads of the boundary conditions, a set for each, normals out of the
        zone; a surface zone (two indices) is a set of its own name.

    Raises
    ------
    FileError
        The zone is damaged, or a boundary condition lists points where a
        range is needed.
    FieldError
        An array has the wrong length.
    """
    shape = tuple(int(count) for count in sizes[0])
    cells = tuple(count - 1 for count in shape)
    if min(cells) < 1 or len(shape) not in (2, 3):
        raise FileError(
            f"has {' x '.join(map(str, shape))} points", zone.where, "Two or more along each index are needed"
        )
    points = read_coordinates(zone, shape)
    nodes, in_cells, _ = read_solutions(zone, shape, cells)
    if len(shape) == 2:
        quads = _quads(_numbers(shape).transpose())
        return FileContent(
            source=source,
            points=points,
            faces=_faces(quads, {}),
            volume=lambda: Volume(()),
            node_arrays=with_vectors(nodes),
            face_arrays=with_vectors(in_cells),
            face_sets={zone.name: np.arange(len(quads))},
        )
    cell_count = int(np.prod(cells))
    patches = [_patch(condition, shape, points) for condition in boundaries(zone, 3, families)]
    quads, owners, sets, roles = _united(patches)
    behind = {name: values[owners] for name, values in in_cells.items()} if len(quads) else {}
    note = f"values of {', '.join(map(repr, sorted(behind)))} on the faces of {zone.name} are those of the cell behind"
    return FileContent(
        source=source,
        points=points,
        faces=_faces(quads, {"hexahedron": cell_count}),
        volume=lambda: Volume((CellBlock("hexahedron", _hexahedra(shape), np.arange(cell_count)),), None),
        volume_cells=cell_count,
        node_arrays=with_vectors(nodes),
        face_arrays=with_vectors(behind),
        cell_arrays=with_vectors(in_cells),
        face_sets=sets,
        roles=roles,
        face_notes=(f"{note} each face",) if behind else (),
    )


def _faces(quads: NDArray[np.int64], skipped: dict[str, int]) -> Faces:
    offsets = np.arange(0, 4 * len(quads) + 1, 4, dtype=np.int64)
    return Faces(quads.ravel(), offsets, None, None, skipped)


def _numbers(shape: tuple[int, ...]) -> NDArray[np.int64]:
    """Return the number of each point by its indices."""
    return np.arange(int(np.prod(shape)), dtype=np.int64).reshape(shape[::-1]).transpose()


def _hexahedra(shape: tuple[int, ...]) -> NDArray[np.int64]:
    n = _numbers(shape)
    low, high = n[:, :, :-1], n[:, :, 1:]
    corners = [
        part[i:, j:][: shape[0] - 1, : shape[1] - 1]
        for part in (low, high)
        for i, j in ((0, 0), (1, 0), (1, 1), (0, 1))
    ]
    # the first index runs fastest, as in the arrays on cells
    return np.stack([corner.transpose().ravel() for corner in corners], axis=1)


def _quads(p: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return the quads of a table of point numbers, the last index first around."""
    corners = [p[:-1, :-1], p[:-1, 1:], p[1:, 1:], p[1:, :-1]]
    return np.stack([corner.ravel() for corner in corners], axis=1)


def _patch(
    condition: Boundary, shape: tuple[int, ...], points: NDArray[Any]
) -> tuple[Boundary, NDArray[np.int64], NDArray[np.int64]]:
    """Return the quads of a boundary condition, and the cell behind each."""
    covered = condition.points
    if not covered.is_range:
        raise FileError(
            "lists single points of a structured zone, where a range is needed",
            condition.where,
            "Export the condition as a PointRange, or the zone as unstructured",
        )
    first, last = np.sort(covered.values, axis=0) - 1
    along = _normal_index(condition, first, last, shape)
    if covered.location != "Vertex":
        # faces between points: one more point than faces across
        last = last + (np.arange(3) != along)
    if int(first.min()) < 0 or bool((last >= shape).any()):
        raise FileError(
            f"its range {(first + 1).tolist()} to {(last + 1).tolist()} leaves the zone of {list(shape)} points",
            condition.where,
            "The file is damaged; export it again",
        )
    others = [(along + 1) % 3, (along + 2) % 3]
    numbers = _numbers(shape)[tuple(slice(int(a), int(b) + 1) for a, b in zip(first, last))]
    # quads whose normal runs along the index, for a right-handed zone
    quads = _quads(numbers.transpose(along, others[1], others[0])[0])
    at_start = int(first[along]) == 0
    if at_start != (_handedness(shape, points) < 0):
        quads = quads[:, [0, 3, 2, 1]]
    layer = 0 if at_start else int(first[along]) - 1
    cells = _numbers(tuple(n - 1 for n in shape))
    window = [slice(int(a), max(int(b), int(a) + 1)) for a, b in zip(first, last)]
    window[along] = slice(layer, layer + 1)
    owners = cells[tuple(window)].transpose(along, others[1], others[0])[0].ravel()
    return condition, quads, owners


def _normal_index(
    condition: Boundary, first: NDArray[np.int64], last: NDArray[np.int64], shape: tuple[int, ...]
) -> int:
    """Return the index along which the range has no extent."""
    location = condition.points.location
    flat = [int(index) for index in np.flatnonzero(first == last)]
    if location == "Vertex":
        fits = flat
    elif location in ("IFaceCenter", "JFaceCenter", "KFaceCenter"):
        fits = [index for index in flat if index == "IJK".index(location[0])]
    else:
        fits = [index for index in flat if first[index] in (0, shape[index] - 1)]
        if len(fits) > 1:
            # a range one cell wide fits two ways: the side that it covers as a whole is meant
            whole = [(first[other] == 0) & (last[other] == shape[other] - 2) for other in range(3)]
            fits = [index for index in fits if all(whole[other] for other in range(3) if other != index)]
    if len(fits) == 1:
        return fits[0]
    raise FileError(
        f"its range {(first + 1).tolist()} to {(last + 1).tolist()} at {location} is no face of the zone",
        condition.where,
        "Export the condition with a PointRange over one plane of vertices",
    )


def _handedness(shape: tuple[int, ...], points: NDArray[Any]) -> float:
    """Return a number whose sign is that of the volume of the zone's cells in index space."""
    grid = points.astype(np.float64).reshape(*shape[::-1], 3)
    step = [np.diff(grid, axis=axis)[tuple(slice(n - 1) for n in shape[::-1])] for axis in (2, 1, 0)]
    return float(np.einsum("...i,...i->...", np.cross(step[0], step[1]), step[2]).sum())


def _united(
    patches: list[tuple[Boundary, NDArray[np.int64], NDArray[np.int64]]],
) -> tuple[NDArray[np.int64], NDArray[np.int64], dict[str, NDArray[np.int64]], dict[str, Role]]:
    """Return all quads, each once, with the sets and roles of the conditions."""
    if not patches:
        return np.zeros((0, 4), dtype=np.int64), np.zeros(0, dtype=np.int64), {}, {}
    quads = np.concatenate([patch[1] for patch in patches])
    owners = np.concatenate([patch[2] for patch in patches])
    labels = face_labels(quads.ravel(), np.arange(0, quads.size + 1, 4, dtype=np.int64))
    _, kept, place = np.unique(labels, return_index=True, return_inverse=True)
    order = np.argsort(kept)
    rank = np.empty(order.size, dtype=np.int64)
    rank[order] = np.arange(order.size)
    sets: dict[str, NDArray[np.int64]] = {}
    roles: dict[str, set[Role | None]] = {}
    start = 0
    for condition, rows, _ in patches:
        faces = rank[place[start : start + len(rows)]]
        sets[condition.name] = np.unique(np.concatenate([sets.get(condition.name, faces[:0]), faces]))
        roles.setdefault(condition.name, set()).add(condition.role)
        start += len(rows)
    said = {name: next(iter(found)) for name, found in roles.items() if len(found) == 1}
    return quads[kept[order]], owners[kept[order]], sets, {n: role for n, role in said.items() if role is not None}
