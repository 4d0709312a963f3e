"""The cells of a volume mesh, type by type and block by block, as tables of node and cell values."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError
from fluxmesh.field.volume_shapes import cell_map
from fluxmesh.integral.cells import BLOCK_POINTS, CellRule, reference_rule
from fluxmesh.surface.readers.cell_shapes import SHAPES
from fluxmesh.surface.readers.faces import gather
from fluxmesh.surface.readers.volume import Polyhedra
from fluxmesh.surface.readers.volume_grid import VolumeMesh
from fluxmesh.surface.readers.vtk_cells import cell_arrays, cell_type_name, cell_types
from fluxmesh.surface.readers.vtk_volume import volume_of_grid

__all__ = ["CellKind", "cell_kinds", "cell_rule"]

Block = tuple[NDArray[np.float64], NDArray[np.float64]]

# Shape of the readers -> type in the open VTK file format, whose shape functions it has.
_NUMBERS: Final = {
    **{"tetra": 10, "hexahedron": 12, "wedge": 13, "pyramid": 14},
    **{"tetra10": 24, "hexahedron20": 25, "wedge15": 26, "pyramid13": 27, "hexahedron27": 29, "wedge18": 32},
}
# Types that the readers of surfaces do not know, but whose shape functions are known here.
_FURTHER: Final = (31, 33)
_TETRA: Final = 10


@dataclass(frozen=True, eq=False)
class CellKind:
    """All cells of one type.

    Attributes
    ----------
    name : str
        Singular.
    rule : CellRule
        Their quadrature; of tetrahedra where they are cut into such.
    directed : bool
        Whether the order of their points tells inside from outside.
    blocks : iterator of (ndarray, shape (k, size, n), ndarray, shape (l, n)), float64
        Node values and cell values of n cells each.
    """

    name: str
    rule: CellRule
    directed: bool
    blocks: Iterator[Block]


@cache
def cell_rule(number: int) -> CellRule:
    """Return the quadrature of a cell type.

    Parameters
    ----------
    number : int
        Type of the cell in the open VTK file format; one that `cell_map` knows.

    Returns
    -------
    CellRule
        Exact for products of three functions that the shape functions carry,
        coordinates included, on a cell mapped by them.
    """
    shape = cell_map(number)
    assert shape is not None
    together, alone = shape.degrees()
    # three functions and the determinant of three derivatives, each of one degree less in the coordinate it is by
    if shape.summed == 3:
        degrees = (6 * together - 3, 0)
    elif shape.summed == 2:
        degrees = (6 * together - 2, 6 * alone - 1)
    else:
        degrees = (0, 6 * alone - 1)
    places, weights = reference_rule(shape.summed, *degrees)
    values, slopes = shape.shape_functions(places)
    return CellRule(weights, values, slopes[:1] if number == _TETRA else slopes)


def cell_kinds(volume: VolumeMesh, on_nodes: NDArray[np.float64], on_cells: NDArray[np.float64]) -> Iterator[CellKind]:
    """Sort the cells of a volume by type.

    Parameters
    ----------
    volume : VolumeMesh
        Cells.
    on_nodes : ndarray, shape (k, n_points), float64
        Node values, the coordinates in the first three rows.
    on_cells : ndarray, shape (l, n_cells), float64
        Cell values.

    Yields
    ------
    CellKind
        Polyhedra and prisms are cut into tetrahedra about the means of their
        corners and of the corners of each face, values alike.

    Raises
    ------
    FieldError
        Cells of a type whose shape functions are not known.
    """
    found = volume_of_grid(volume.grid, None, volume.source)
    types = cell_types(volume.grid)
    further = {cell_type_name(number)[0]: number for number in _FURTHER}
    unknown = {name: count for name, count in found.unknown.items() if name not in further}
    if unknown:
        listed = ", ".join(f"{count} of type {name}" for name, count in unknown.items())
        raise FieldError(
            f"has cells that cannot be integrated over: {listed}",
            where=volume.source,
            remedy="Export linear or quadratic tetrahedra, hexahedra, wedges and pyramids, or polyhedra",
        )
    for block in found.blocks:
        name, faces = SHAPES[block.shape].name, SHAPES[block.shape].faces
        if block.shape in _NUMBERS:
            rule = cell_rule(_NUMBERS[block.shape])
            yield CellKind(name, rule, True, _blocks(block.rows, block.cells, rule, on_nodes, on_cells))
        else:
            cut = _cut(_prisms(block.rows, block.cells, faces), on_nodes, on_cells)
            yield CellKind(name, cell_rule(_TETRA), False, cut)
    connectivity, starts = cell_arrays(volume.grid.GetCells())
    for name, number in further.items():
        cells = np.flatnonzero(types == number)
        if cells.size:
            assert starts is not None
            rule = cell_rule(number)
            rows = connectivity[starts[cells][:, None] + np.arange(rule.values.shape[1])]
            yield CellKind(name, rule, True, _blocks(rows, cells, rule, on_nodes, on_cells))
    if found.polyhedra is not None:
        yield CellKind("polyhedron", cell_rule(_TETRA), False, _cut(found.polyhedra, on_nodes, on_cells))


def _blocks(
    rows: NDArray[np.int64],
    cells: NDArray[np.int64],
    rule: CellRule,
    on_nodes: NDArray[np.float64],
    on_cells: NDArray[np.float64],
) -> Iterator[Block]:
    step = max(BLOCK_POINTS // rule.weights.size, 1)
    for first in range(0, cells.size, step):
        some = np.ascontiguousarray(rows[first : first + step].T)
        yield on_nodes.take(some, axis=1), on_cells.take(cells[first : first + step], axis=1)


def _prisms(rows: NDArray[np.int64], cells: NDArray[np.int64], faces: tuple[tuple[int, ...], ...]) -> Polyhedra:
    """Return prisms as polyhedra."""
    sizes = np.tile([len(face) for face in faces], cells.size)
    offsets = np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64)
    corners = [corner for face in faces for corner in face]
    return Polyhedra(rows[:, corners].ravel(), offsets, np.repeat(cells, len(faces)))


def _cut(polyhedra: Polyhedra, on_nodes: NDArray[np.float64], on_cells: NDArray[np.float64]) -> Iterator[Block]:
    """Yield polyhedra cut into tetrahedra, some of them at a time."""
    whole = np.flatnonzero(np.diff(polyhedra.offsets) >= 3)
    connectivity, offsets = gather(polyhedra.connectivity, polyhedra.offsets, whole)
    owner = polyhedra.cells[whole]
    if not owner.size:
        return
    # faces of one cell follow each other; a block ends with a cell
    starts = np.flatnonzero(np.concatenate([[True], owner[1:] != owner[:-1]]))
    step = BLOCK_POINTS // cell_rule(_TETRA).weights.size
    part = offsets[starts] // step
    ends = np.flatnonzero(part[1:] != part[:-1]) + 1
    for some in np.split(starts, ends):
        last = starts[np.searchsorted(starts, some[-1]) + 1] if some[-1] != starts[-1] else owner.size
        low, high = offsets[some[0]], offsets[last]
        yield _tetrahedra(
            connectivity[low:high],
            offsets[some[0] : last] - low,
            some - some[0],
            owner[some],
            on_nodes,
            on_cells,
        )


def _tetrahedra(
    corners: NDArray[np.int64],
    face_start: NDArray[np.int64],
    cell_start: NDArray[np.int64],
    cells: NDArray[np.int64],
    on_nodes: NDArray[np.float64],
    on_cells: NDArray[np.float64],
) -> Block:
    """Cut a few polyhedra: one tetrahedron for each edge of each face.

    Parameters
    ----------
    corners : ndarray, shape (n,), int64
        Points around the faces, one face after the other.
    face_start, cell_start : ndarray of int64
        Where each face starts among the corners, and each cell among the faces.
    cells : ndarray, shape (n_cells,), int64
        Numbers of the cells.
    on_nodes, on_cells : ndarray
        As in `cell_kinds`.
    """
    face_size = np.diff(np.append(face_start, corners.size))
    cell_size = np.diff(np.append(cell_start, face_start.size))
    face = np.repeat(np.arange(face_start.size), face_size)
    cell_of_face = np.repeat(np.arange(cells.size), cell_size)
    cell = cell_of_face[face]
    after = np.arange(1, corners.size + 1)
    after[face_start + face_size - 1] = face_start
    here = on_nodes.take(corners, axis=1)
    there = here.take(after, axis=1)
    # sums of a face's corners, and of the corners of a cell's faces
    sums = np.add.reduceat(here, face_start, axis=1)
    faces = (sums / face_size).take(face, axis=1)
    entries = np.add.reduceat(face_size, cell_start)
    middles = (np.add.reduceat(sums, cell_start, axis=1) / entries).take(cell, axis=1)
    nodes = np.stack([there, here, faces, middles], axis=1)
    turned = _turned(nodes, face_start, cell_start, cell_of_face, corners, corners[after], cell)[face]
    if turned.any():
        nodes[:, :2, turned] = nodes[:, 1::-1, turned]
    return nodes, on_cells.take(cells[cell], axis=1)


def _turned(
    nodes: NDArray[np.float64],
    face_start: NDArray[np.int64],
    cell_start: NDArray[np.int64],
    cell_of_face: NDArray[np.int64],
    here: NDArray[np.int64],
    there: NDArray[np.int64],
    cell: NDArray[np.int64],
) -> NDArray[np.bool_]:
    """Return the faces whose corners run the other way round than seen from outside their cell, shape (n_faces,).

    Files do not keep the direction of a polyhedron's faces. A face that the middle of its cell sees from inside
    tells by itself; where that differs among the faces of a cell, but they all run one way, they are all kept or all
    turned: a cell that is not star-shaped.
    """
    b, a, f, m = np.moveaxis(nodes[:3], 1, 0)
    volume = np.einsum("ij,ij->j", np.cross(a - b, f - b, axis=0), m - b)
    of_face = np.add.reduceat(volume, face_start)
    of_cell = np.add.reduceat(of_face, cell_start)
    turned = of_face < 0
    some = np.minimum.reduceat(turned, cell_start) != np.maximum.reduceat(turned, cell_start)
    if some.any():
        one_way = some & ~_crossed(here, there, cell, some)
        chosen = one_way[cell_of_face]
        turned[chosen] = (of_cell < 0)[cell_of_face[chosen]]
    return np.asarray(turned)


def _crossed(
    here: NDArray[np.int64], there: NDArray[np.int64], cell: NDArray[np.int64], some: NDArray[np.bool_]
) -> NDArray[Any]:
    """Return the cells among some whose faces do not all run one way: an edge is not passed once each way."""
    entries = np.flatnonzero(some[cell])
    one, two, owner = here[entries], there[entries], cell[entries]
    low, high, sign = np.minimum(one, two), np.maximum(one, two), np.where(one < two, 1, -1)
    order = np.lexsort((sign, high, low, owner))
    low, high, sign, owner = low[order], high[order], sign[order], owner[order]
    first = np.concatenate([[True], (owner[1:] != owner[:-1]) | (low[1:] != low[:-1]) | (high[1:] != high[:-1])])
    starts = np.flatnonzero(first)
    uneven = np.add.reduceat(sign, starts) != 0
    crossed = np.zeros(some.size, dtype=np.bool_)
    crossed[owner[starts[uneven]]] = True
    return crossed
