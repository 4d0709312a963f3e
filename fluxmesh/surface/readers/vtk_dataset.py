"""A VTK data set in memory taken apart: faces, volume cells and arrays, as views of VTK's own memory."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError, FileError
from fluxmesh.surface.readers.content import FileContent
from fluxmesh.surface.readers.faces import Faces, gather
from fluxmesh.surface.readers.vtk_cells import faces_of_grid, faces_of_polydata, hidden_cells
from fluxmesh.surface.readers.vtk_volume import volume_cell_count, volume_of_grid

__all__ = ["content_of_dataset", "plain_text"]

_GHOST_ARRAY = "vtkGhostType"
_LONGEST_WORD = 4096


def content_of_dataset(data: Any, source: str, where: str) -> FileContent:
    """Take a VTK data set apart.

    Parameters
    ----------
    data : vtkDataObject or None
        Polydata or an unstructured grid.
    source : str
        File name, for messages.
    where : str
        File and block, for messages.

    Returns
    -------
    FileContent
        Its cells without ghosts, and every array on points and cells.

    Raises
    ------
    FileError
        A data set of another kind, or faces of a shape that is not supported.
    FieldError
        An array has the wrong length.
    """
    from vtkmodules.vtkCommonDataModel import vtkPolyData, vtkUnstructuredGrid

    grid = isinstance(data, vtkUnstructuredGrid)
    if grid:
        faces = faces_of_grid(data, where)
    elif isinstance(data, vtkPolyData):
        faces = faces_of_polydata(data, where)
    else:
        kind = "nothing" if data is None else data.GetClassName().removeprefix("vtk")
        raise FileError(f"holds a data set of kind {kind}", where, "Kinds with faces are PolyData, UnstructuredGrid")
    cell_count = int(data.GetNumberOfCells())
    cells = dict(_arrays(data.GetCellData(), cell_count, "cells", where))
    ghosts = cells.pop(_GHOST_ARRAY, None)
    hidden = None if ghosts is None else hidden_cells(ghosts, where)
    if hidden is not None and not hidden.any():
        hidden = None
    faces, dropped = _without_ghosts(faces, hidden, cell_count)
    points = data.GetPoints()
    nodes = dict(_arrays(data.GetPointData(), int(data.GetNumberOfPoints()), "points", where))
    nodes.pop(_GHOST_ARRAY, None)
    faces = Faces(faces.connectivity, faces.offsets, faces.kinds, faces.cell_of_face, faces.skipped | dropped)
    of_face = cells if faces.cell_of_face is None else {k: values[faces.cell_of_face] for k, values in cells.items()}
    return FileContent(
        source=source,
        points=_floating(_view(points.GetData())) if points is not None else np.zeros((0, 3)),
        faces=faces,
        volume=lambda: volume_of_grid(data, hidden, where),
        volume_cells=volume_cell_count(data, hidden) if grid else 0,
        node_arrays=nodes,
        face_arrays=of_face,
        cell_arrays=cells,
    )


def plain_text(text: str | bytes) -> str:
    """Return a name or word of a VTK file; what is no UTF-8 comes as bytes, and is taken as Latin-1.

    Parameters
    ----------
    text : str or bytes
        As VTK hands it over.
    """
    return text.decode("latin-1") if isinstance(text, bytes) else text


def _view(array: Any) -> NDArray[Any]:
    """Return a VTK array as NumPy sees it, without a copy; the view keeps the memory alive."""
    from vtkmodules.util.numpy_support import vtk_to_numpy

    view: NDArray[Any] = vtk_to_numpy(array)
    return view


def _floating(points: NDArray[Any]) -> NDArray[Any]:
    return points if points.dtype in (np.float32, np.float64) else points.astype(np.float64)


def _arrays(attributes: Any, count: int, on: str, where: str) -> Iterator[tuple[str, NDArray[Any]]]:
    """Yield the arrays of VTK point or cell data, text included."""
    from vtkmodules.vtkCommonCore import vtkDataArray, vtkStringArray

    for index in range(attributes.GetNumberOfArrays()):
        array = attributes.GetAbstractArray(index)
        name = plain_text(array.GetName() or f"unnamed {index}")
        tuples = int(array.GetNumberOfTuples())
        if tuples != count:
            raise FieldError(
                f"array {name!r} holds {tuples} values, but there are {count} {on}", where, "Export it again"
            )
        if isinstance(array, vtkDataArray):
            yield name, _view(array)
        elif isinstance(array, vtkStringArray):
            words = [plain_text(array.GetValue(place)) for place in range(array.GetNumberOfValues())]
            if max(map(len, words), default=0) > _LONGEST_WORD:
                raise FieldError(f"array {name!r} holds text of more than {_LONGEST_WORD} signs", where, "Leave it out")
            text = np.array(words, dtype=np.str_)
            components = int(array.GetNumberOfComponents())
            yield name, text if components == 1 else text.reshape(-1, components)


def _without_ghosts(faces: Faces, hidden: NDArray[np.bool_] | None, cell_count: int) -> tuple[Faces, dict[str, int]]:
    """Leave out cells that a partitioned export marks as copies, and count them."""
    if hidden is None:
        return faces, {}
    cells = np.arange(cell_count) if faces.cell_of_face is None else faces.cell_of_face
    kept = np.flatnonzero(~hidden[cells])
    dropped = cells.size - kept.size
    if dropped == 0:
        return faces, {}
    if faces.offsets is None:
        connectivity, offsets = faces.connectivity.reshape(-1, 3)[kept].ravel(), None
    else:
        connectivity, offsets = gather(faces.connectivity, faces.offsets, kept)
    kinds = None if faces.kinds is None else faces.kinds[kept]
    return Faces(connectivity, offsets, kinds, cells[kept], faces.skipped), {"ghost": dropped}
