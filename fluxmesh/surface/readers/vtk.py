"""VTK files (XML and legacy): polydata and unstructured grids, as views of VTK's own memory.

VTK's reader classes are called directly: importing them takes half the time of
importing a package built on them, and nothing in between copies an array.
"""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError, FileError
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.faces import Faces, gather, require_faces
from fluxmesh.surface.readers.vtk_cells import faces_of_grid, faces_of_polydata
from fluxmesh.surface.readers.vtk_legacy import check_vtk_legacy
from fluxmesh.surface.readers.vtk_messages import captured_messages
from fluxmesh.surface.readers.vtk_xml import check_vtk_xml

__all__ = ["read_vtk_legacy", "read_vtk_xml"]

# Bits of the open "vtkGhostType" cell array: a copy of another piece's cell, a cell to be left out.
_GHOST_ARRAY = "vtkGhostType"
_GHOST_BITS = 1 | 32


def read_vtk_xml(path: Path) -> RawMesh:
    """Read VTK XML polydata or an unstructured grid.

    Parameters
    ----------
    path : Path
        An existing file, not empty.

    Returns
    -------
    RawMesh
        Its faces, and every array on points and cells.

    Raises
    ------
    FileError
        The file is cut short, damaged, of another kind, or has no faces.
    FieldError
        An array has the wrong length.
    """
    kind = check_vtk_xml(path)
    from vtkmodules.vtkIOXML import vtkXMLPolyDataReader, vtkXMLUnstructuredGridReader

    readers = {"PolyData": vtkXMLPolyDataReader, "UnstructuredGrid": vtkXMLUnstructuredGridReader}
    if kind not in readers:
        raise FileError(f"holds a data set of kind {kind}", str(path), f"Kinds with faces are {', '.join(readers)}")
    return _read(readers[kind](), path)


def read_vtk_legacy(path: Path) -> RawMesh:
    """Read a legacy VTK file that holds polydata or an unstructured grid.

    Parameters
    ----------
    path : Path
        An existing file, not empty.

    Returns
    -------
    RawMesh
        Its faces, and every array on points and cells.

    Raises
    ------
    FileError
        The file is cut short, damaged, of another kind, or has no faces.
    FieldError
        An array has the wrong length.
    """
    check_vtk_legacy(path)
    from vtkmodules.vtkIOLegacy import vtkGenericDataObjectReader

    reader = vtkGenericDataObjectReader()
    # Without these, only the first array of each kind is read.
    for kind in ("Scalars", "Vectors", "Tensors", "Normals", "TCoords", "Fields"):
        getattr(reader, f"ReadAll{kind}On")()
    return _read(reader, path)


def _read(reader: Any, path: Path) -> RawMesh:
    """Run a VTK reader and take its output apart."""
    from vtkmodules.vtkCommonDataModel import vtkPolyData, vtkUnstructuredGrid

    with captured_messages() as log:
        reader.SetFileName(str(path))
        reader.Update()
        output = reader.GetOutputDataObject(0)
    if log.failure:
        raise FileError(f"cannot be read ({log.failure})", str(path), "It is damaged or cut short; export it again")
    if isinstance(output, vtkPolyData):
        faces = faces_of_polydata(output, str(path))
    elif isinstance(output, vtkUnstructuredGrid):
        faces = faces_of_grid(output, str(path))
    else:
        kind = "nothing" if output is None else output.GetClassName().removeprefix("vtk")
        raise FileError(
            f"holds a data set of kind {kind}", str(path), "Kinds with faces are PolyData, UnstructuredGrid"
        )
    cell_count = int(output.GetNumberOfCells())
    cells = dict(_arrays(output.GetCellData(), cell_count, "cells", path))
    faces, ghosts = _without_ghosts(faces, cells.pop(_GHOST_ARRAY, None), cell_count)
    if faces.cell_of_face is not None:
        cells = {name: values[faces.cell_of_face] for name, values in cells.items()}
    points = output.GetPoints()
    nodes = dict(_arrays(output.GetPointData(), int(output.GetNumberOfPoints()), "points", path))
    nodes.pop(_GHOST_ARRAY, None)
    return require_faces(
        RawMesh(
            source=path.name,
            points=_floating(_view(points.GetData())) if points is not None else np.zeros((0, 3)),
            connectivity=faces.connectivity,
            offsets=faces.offsets,
            kinds=faces.kinds,
            node_arrays=nodes,
            face_arrays=cells,
            skipped=faces.skipped | ghosts,
        ),
        str(path),
    )


def _view(array: Any) -> NDArray[Any]:
    """Return a VTK array as NumPy sees it, without a copy; the view keeps the memory alive."""
    from vtkmodules.util.numpy_support import vtk_to_numpy

    view: NDArray[Any] = vtk_to_numpy(array)
    return view


def _floating(points: NDArray[Any]) -> NDArray[Any]:
    return points if points.dtype in (np.float32, np.float64) else points.astype(np.float64)


def _arrays(attributes: Any, count: int, on: str, path: Path) -> Iterator[tuple[str, NDArray[Any]]]:
    """Yield the arrays of VTK point or cell data, text included."""
    from vtkmodules.vtkCommonCore import vtkDataArray, vtkStringArray

    for index in range(attributes.GetNumberOfArrays()):
        array = attributes.GetAbstractArray(index)
        name = array.GetName() or f"unnamed {index}"
        tuples = int(array.GetNumberOfTuples())
        if tuples != count:
            raise FieldError(
                f"array {name!r} holds {tuples} values, but there are {count} {on}", str(path), "Export it again"
            )
        if isinstance(array, vtkDataArray):
            yield name, _view(array)
        elif isinstance(array, vtkStringArray):
            text = np.array(list(map(array.GetValue, range(array.GetNumberOfValues()))), dtype=np.str_)
            components = int(array.GetNumberOfComponents())
            yield name, text if components == 1 else text.reshape(-1, components)


def _without_ghosts(faces: Faces, ghosts: NDArray[Any] | None, cell_count: int) -> tuple[Faces, dict[str, int]]:
    """Leave out cells that a partitioned export marks as copies, and count them."""
    if ghosts is None or not ghosts.any():
        return faces, {}
    cells = np.arange(cell_count) if faces.cell_of_face is None else faces.cell_of_face
    kept = np.flatnonzero((ghosts[cells] & _GHOST_BITS) == 0)
    dropped = cells.size - kept.size
    if dropped == 0:
        return faces, {}
    if faces.offsets is None:
        connectivity, offsets = faces.connectivity.reshape(-1, 3)[kept].ravel(), None
    else:
        connectivity, offsets = gather(faces.connectivity, faces.offsets, kept)
    kinds = None if faces.kinds is None else faces.kinds[kept]
    return Faces(connectivity, offsets, kinds, cells[kept], faces.skipped), {"ghost": dropped}
