"""Volume cells of VTK unstructured grids: shapes by the numbers of the open VTK file format."""

from __future__ import annotations

from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FileError
from fluxmesh.surface.readers.cell_shapes import SHAPES
from fluxmesh.surface.readers.faces import gather
from fluxmesh.surface.readers.volume import CellBlock, Polyhedra, Volume
from fluxmesh.surface.readers.vtk_cells import cell_arrays, cell_type_name, cell_types

__all__ = ["volume_cell_count", "volume_of_grid"]

_VOXEL, _POLYHEDRON = 11, 42
# a voxel runs row by row, a hexahedron around
_FROM_VOXEL = [0, 1, 3, 2, 4, 5, 7, 6]
_NUMBERS: Final = {
    10: "tetra",
    11: "hexahedron",
    12: "hexahedron",
    13: "wedge",
    14: "pyramid",
    15: "penta_prism",
    16: "hexa_prism",
    24: "tetra10",
    25: "hexahedron20",
    26: "wedge15",
    27: "pyramid13",
    29: "hexahedron27",
    32: "wedge18",
}
# Lagrange cells of order 1 and 2 that have the points of the plain one in the same order
_LAGRANGE: Final = {71: {4: "tetra", 10: "tetra10"}, 72: {8: "hexahedron"}, 73: {6: "wedge"}}


def volume_cell_count(data: Any, hidden: NDArray[np.bool_] | None) -> int:
    """Count the volume cells of a grid.

    Parameters
    ----------
    data : vtkUnstructuredGrid
        Cells of any type.
    hidden : ndarray of bool, shape (n_cells,), or None
        Cells to leave out.

    Returns
    -------
    int
        Cells of dimension three, of any shape.
    """
    types = cell_types(data)
    counts = np.bincount(types if hidden is None else types[~hidden], minlength=256)
    return sum(int(counts[number]) for number in np.flatnonzero(counts) if cell_type_name(int(number))[1] == 3)


def volume_of_grid(data: Any, hidden: NDArray[np.bool_] | None, where: str) -> Volume:
    """Pick the volume cells out of a VTK unstructured grid.

    Parameters
    ----------
    data : vtkUnstructuredGrid
        Cells of any type.
    hidden : ndarray of bool, shape (n_cells,), or None
        Cells to leave out.
    where : str
        File, for messages.

    Returns
    -------
    Volume
        By shape; cells are numbered as in the grid.

    Raises
    ------
    FileError
        Polyhedra whose faces are not there.
    """
    types = cell_types(data)
    connectivity, offsets = cell_arrays(data.GetCells())
    if offsets is None:
        offsets = np.arange(0, connectivity.size + 1, 3, dtype=np.int64)
    sizes = np.diff(offsets)
    blocks: list[CellBlock] = []
    unknown: dict[str, int] = {}
    names: set[str] = set()
    polyhedra = None
    for number in np.unique(types):
        name, dimension = cell_type_name(int(number))
        if dimension != 3:
            continue
        names.add(name)
        chosen = types == number
        if hidden is not None:
            chosen &= ~hidden
        cells = np.flatnonzero(chosen)
        if number == _POLYHEDRON:
            polyhedra = _polyhedra(data, cells, where)
            continue
        for size in np.unique(sizes[cells]):
            some = cells[sizes[cells] == size]
            shape = _LAGRANGE[int(number)].get(int(size)) if number in _LAGRANGE else _NUMBERS.get(int(number))
            if shape is None or SHAPES[shape].size != size:
                unknown[name] = unknown.get(name, 0) + some.size
                continue
            rows = connectivity[offsets[some][:, None] + np.arange(size)]
            blocks.append(CellBlock(shape, rows[:, _FROM_VOXEL] if number == _VOXEL else rows, some))
    return Volume(tuple(blocks), polyhedra, frozenset(names), unknown)


def _polyhedra(data: Any, cells: NDArray[np.int64], where: str) -> Polyhedra:
    """Return the faces of the polyhedra of a grid."""
    faces, starts = cell_arrays(data.GetPolyhedronFaces())
    if starts is None:
        starts = np.arange(0, faces.size + 1, 3, dtype=np.int64)
    of_cell, firsts = cell_arrays(data.GetPolyhedronFaceLocations())
    if firsts is None:
        firsts = np.arange(0, of_cell.size + 1, 3, dtype=np.int64)
    count = starts.size - 1
    if int(cells.max(initial=-1)) >= firsts.size - 1 or bool(((of_cell < 0) | (of_cell >= count)).any()):
        raise FileError(
            f"has {cells.size} polyhedra, but not the faces they name", where, "The file is damaged; export it again"
        )
    chosen, ends = gather(of_cell, firsts, cells)
    connectivity, offsets = gather(faces, starts, chosen)
    return Polyhedra(connectivity, offsets, np.repeat(cells, np.diff(ends)))
