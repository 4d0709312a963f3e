"""Cells of VTK data sets as faces: shapes by the numbers of the open VTK file format."""

from __future__ import annotations

import re
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError, FileError
from fluxmesh.surface.readers.faces import Faces, gather, strip_triangles
from fluxmesh.surface.surface import FaceKind

__all__ = ["cell_arrays", "cell_type_name", "cell_types", "faces_of_grid", "faces_of_polydata", "hidden_cells"]

# Bits of the open "vtkGhostType" cell array: a copy of another piece's cell, a cell to be left out.
_GHOST_BITS = 1 | 32
_TRIANGLE, _STRIP, _POLYGON, _PIXEL = 5, 6, 7, 8
# Cell type -> number of points (0: three or more) -> kind of face.
# An arbitrary-order (Lagrange) cell of order 1 or 2 has the points of the plain one in the same order.
_FACE_SHAPES: dict[int, dict[int, FaceKind]] = {
    _TRIANGLE: {3: FaceKind.POLYGON},
    _POLYGON: {0: FaceKind.POLYGON},
    _PIXEL: {4: FaceKind.POLYGON},
    9: {4: FaceKind.POLYGON},  # quad
    22: {6: FaceKind.TRIANGLE6},
    23: {8: FaceKind.QUAD8},
    28: {9: FaceKind.QUAD9},
    69: {3: FaceKind.POLYGON, 6: FaceKind.TRIANGLE6},  # Lagrange triangle
    70: {4: FaceKind.POLYGON, 9: FaceKind.QUAD9},  # Lagrange quadrilateral
}
_SMALL = "polygon of fewer than 3 points"


def faces_of_polydata(data: Any, where: str) -> Faces:
    """Pick the faces out of VTK polydata.

    Parameters
    ----------
    data : vtkPolyData
        Its cells are, in the order of its cell data, vertices, lines,
        polygons and strips.
    where : str
        File, for messages.

    Returns
    -------
    Faces
        Polygons first, then the triangles of the strips.
    """
    polygons, strips = data.GetPolys(), data.GetStrips()
    skipped = {"vertex": int(data.GetNumberOfVerts()), "line": int(data.GetNumberOfLines())}
    before = sum(skipped.values())
    skipped = {name: count for name, count in skipped.items() if count}
    count = int(data.GetNumberOfPolys())
    connectivity, offsets = cell_arrays(polygons, where)
    sound = offsets is None or bool((offsets[1:] - offsets[:-1]).min(initial=3) >= 3)
    if before == 0 and sound and data.GetNumberOfStrips() == 0:
        return Faces(connectivity, offsets, None, None, skipped)
    rows = np.arange(count)
    if not sound:
        assert offsets is not None
        rows = np.flatnonzero(offsets[1:] - offsets[:-1] >= 3)
        skipped[_SMALL] = count - rows.size
        connectivity, offsets = gather(connectivity, offsets, rows)
    cells = before + rows
    if data.GetNumberOfStrips():
        triangles, strip = strip_triangles(*_with_offsets(*cell_arrays(strips, where)))
        sizes = np.full(rows.size, 3) if offsets is None else np.diff(offsets)
        connectivity = np.concatenate([connectivity, triangles.ravel()])
        offsets = _starts(np.concatenate([sizes, np.full(strip.size, 3)]))
        cells = np.concatenate([cells, before + count + strip])
    return Faces(connectivity, _or_none(offsets), None, cells, skipped)


def faces_of_grid(data: Any, where: str) -> Faces:
    """Pick the faces out of a VTK unstructured grid.

    Parameters
    ----------
    data : vtkUnstructuredGrid
        Cells of any type.
    where : str
        File, for messages.

    Returns
    -------
    Faces
        In the order of the cells, the triangles of strips last.

    Raises
    ------
    FileError
        A cell is a face of a shape that is not supported, or does not have
        the points of its type.
    """
    types = cell_types(data)
    connectivity, offsets = cell_arrays(data.GetCells(), where)
    counts = np.bincount(types, minlength=256)
    if offsets is None and counts[_TRIANGLE] == types.size:
        return Faces(connectivity, None, None)
    connectivity, starts = _with_offsets(connectivity, offsets)
    sizes = np.diff(starts)
    kind_of_cell = np.full(types.size, -1, dtype=np.int8)
    skipped: dict[str, int] = {}
    for number in np.flatnonzero(counts):
        if number in _FACE_SHAPES:
            _sort_in(int(number), types, sizes, kind_of_cell, skipped, where)
        elif number != _STRIP:
            name, dimension = cell_type_name(int(number))
            if dimension == 2:
                raise _unsupported(name, int(counts[number]), where)
            skipped[name] = int(counts[number])
    if counts[_PIXEL]:
        # a pixel runs row by row, a face runs around
        third = starts[:-1][types == _PIXEL] + 2
        connectivity = connectivity.copy()
        connectivity[third], connectivity[third + 1] = connectivity[third + 1], connectivity[third]
    rows = np.flatnonzero(kind_of_cell >= 0)
    kinds = kind_of_cell
    cells: NDArray[np.int64] | None = None
    if rows.size < types.size:
        strips = np.flatnonzero(types == _STRIP)
        triangles, strip = strip_triangles(*gather(connectivity, starts, strips))
        connectivity, starts = gather(connectivity, starts, rows)
        connectivity = np.concatenate([connectivity, triangles.ravel()])
        starts = np.concatenate([starts, starts[-1] + 3 * np.arange(1, strip.size + 1)])
        kinds = np.concatenate([kind_of_cell[rows], np.zeros(strip.size, dtype=np.int8)])
        cells = np.concatenate([rows, strips[strip]])
    straight = not kinds.any()
    return Faces(connectivity, _or_none(starts) if straight else starts, None if straight else kinds, cells, skipped)


def _sort_in(
    number: int,
    types: NDArray[Any],
    sizes: NDArray[np.int64],
    kind_of_cell: NDArray[np.int8],
    skipped: dict[str, int],
    where: str,
) -> None:
    """Set the kind of all cells of one type."""
    shapes = _FACE_SHAPES[number]
    cells = np.flatnonzero(types == number)
    if 0 in shapes:
        small = sizes[cells] < 3
        kind_of_cell[cells[~small]] = shapes[0]
        if small.any():
            skipped[_SMALL] = int(small.sum())
        return
    for size in np.unique(sizes[cells]):
        if int(size) not in shapes:
            name = cell_type_name(number)[0]
            fits = " or ".join(str(allowed) for allowed in shapes)
            raise FileError(
                f"has a {name} of {size} points, where {fits} can be read",
                where,
                "Export triangles, quads, polygons, or quadratic triangles and quads",
            )
        kind_of_cell[cells[sizes[cells] == size]] = shapes[int(size)]


def cell_arrays(cells: Any, where: str = "") -> tuple[NDArray[np.int64], NDArray[np.int64] | None]:
    """View a VTK cell array.

    Parameters
    ----------
    cells : vtkCellArray or None
        Cells of any size.
    where : str, optional
        File, for messages.

    Returns
    -------
    connectivity : ndarray, shape (n_entries,), int64
        Points of the cells, one after the other.
    offsets : ndarray, shape (n_cells + 1,), int64, or None
        Where each cell starts; None when all cells have three points, or there is none.

    Raises
    ------
    FileError
        Cells that do not lie within the list of their points.
    """
    from vtkmodules.util.numpy_support import vtk_to_numpy

    if cells is None or cells.GetNumberOfCells() == 0:
        return np.zeros(0, dtype=np.int64), None
    connectivity = vtk_to_numpy(cells.GetConnectivityArray()).astype(np.int64, copy=False)
    size = int(cells.IsHomogeneous())  # asked in C++: the common size, or -1
    if size == 3:
        return connectivity, None
    if size > 0:
        # offsets of equal cells may be stored as a formula that NumPy cannot view
        return connectivity, np.arange(0, connectivity.size + 1, size, dtype=np.int64)
    offsets = vtk_to_numpy(cells.GetOffsetsArray()).astype(np.int64, copy=False)
    if offsets[0] != 0 or offsets[-1] != connectivity.size or (offsets[1:] < offsets[:-1]).any():
        raise FileError(
            "its cells do not lie within the list of their points", where, "The file is damaged; export it again"
        )
    return connectivity, offsets


def _with_offsets(
    connectivity: NDArray[np.int64], offsets: NDArray[np.int64] | None
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    if offsets is None:
        offsets = np.arange(0, connectivity.size + 1, 3, dtype=np.int64)
    return connectivity, offsets


def _starts(sizes: NDArray[np.int64]) -> NDArray[np.int64]:
    return np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64)


def _or_none(offsets: NDArray[np.int64] | None) -> NDArray[np.int64] | None:
    """Return None for offsets that only step by three."""
    if offsets is None or bool((offsets[1:] - offsets[:-1] == 3).all()):
        return None
    return offsets


def cell_types(data: Any) -> NDArray[Any]:
    """View the type numbers of the cells of a grid.

    Parameters
    ----------
    data : vtkUnstructuredGrid
        Cells of any type.

    Returns
    -------
    ndarray, shape (n_cells,), uint8
        Numbers of the open VTK file format.
    """
    from vtkmodules.util.numpy_support import vtk_to_numpy

    if data.GetNumberOfCells() == 0:
        return np.zeros(0, dtype=np.uint8)
    # the accessor was renamed in VTK 9.6
    types = data.GetCellTypesArray() if _before_9_6() else data.GetCellTypes()
    view: NDArray[Any] = vtk_to_numpy(types)
    return view


def _before_9_6() -> bool:
    from vtkmodules.vtkCommonCore import vtkVersion

    return (vtkVersion.GetVTKMajorVersion(), vtkVersion.GetVTKMinorVersion()) < (9, 6)


def cell_type_name(number: int) -> tuple[str, int]:
    """Name a VTK cell type.

    Parameters
    ----------
    number : int
        Number of the open VTK file format.

    Returns
    -------
    name : str
        In plain words.
    dimension : int
        0 to 3.
    """
    if _before_9_6():
        from vtkmodules.vtkCommonDataModel import vtkCellTypes as types
    else:
        from vtkmodules.vtkCommonDataModel import vtkCellTypeUtilities as types

    name = types.GetClassNameFromTypeId(number).removeprefix("vtk")
    return re.sub(r"(?<=[a-z])(?=[A-Z])", " ", name).lower(), int(types.GetDimension(number))


def _unsupported(name: str, count: int, where: str) -> FileError:
    return FileError(
        f"has {count} faces of type {name}, which cannot be read",
        where,
        "Export triangles, quads, polygons, or quadratic triangles and quads",
    )


def hidden_cells(ghosts: NDArray[Any], where: str) -> NDArray[np.bool_]:
    """Return which cells are marked as copies of another piece's, or as left out.

    Parameters
    ----------
    ghosts : ndarray
        The array of marks.
    where : str
        File and block, for messages.

    Returns
    -------
    ndarray of bool, shape (n_cells,)
        One a cell.

    Raises
    ------
    FieldError
        The array holds no such marks.
    """
    if ghosts.ndim != 1 or ghosts.dtype.kind not in "iu":
        raise FieldError(
            "array 'vtkGhostType' holds no whole number a cell", where, "It marks cells to be left out; rename it"
        )
    hidden: NDArray[np.bool_] = (ghosts & _GHOST_BITS) != 0
    return hidden
