"""Point files: VTK and PLY data sets whose points carry arrays; their faces and cells, if any, are left aside."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FileError
from fluxmesh.guarded import reading
from fluxmesh.surface.readers.ply import _header as ply_header
from fluxmesh.surface.readers.ply import _read_element as read_ply_element
from fluxmesh.surface.readers.vtk_dataset import plain_text
from fluxmesh.surface.readers.vtk_guard import try_reader
from fluxmesh.surface.readers.vtk_legacy import check_vtk_legacy, legacy_holds_polyhedra
from fluxmesh.surface.readers.vtk_messages import captured_messages
from fluxmesh.surface.readers.vtk_xml import check_vtk_xml, holds_polyhedra

__all__ = ["PointArrays", "read_ply_points", "read_vtk_points"]

_GHOST_ARRAY = "vtkGhostType"


@dataclass(frozen=True, eq=False)
class PointArrays:
    """Points of a file, and what they carry.

    Attributes
    ----------
    places : ndarray, shape (n_points, 3), float64
        In the file's unit.
    arrays : dict of str to ndarray, shape (n_points,) or (n_points, k)
        In the file's units, of any type.
    hint : str
        What else the file holds that may have been meant; "" for nothing.
    notes : tuple of str
        What to say of the file: that it may be cut within its last number.
    """

    places: NDArray[np.float64]
    arrays: dict[str, NDArray[Any]]
    hint: str = ""
    notes: tuple[str, ...] = ()


def read_vtk_points(path: Path) -> PointArrays:
    """Read the points of a VTK file (.vtp, .vtu, or legacy .vtk) and their arrays.

    Parameters
    ----------
    path : Path
        An existing file, not empty.

    Returns
    -------
    PointArrays
        All points, whether cells use them or not.

    Raises
    ------
    FileError
        Cut short, damaged, or a data set without points.
    FieldError
        An array has the wrong length.
    """
    notes: tuple[str, ...] = ()
    if path.suffix.lower() == ".vtk":
        notes = check_vtk_legacy(path)
        reader, doubtful = _legacy_reader(), legacy_holds_polyhedra(path)
    else:
        reader, doubtful = _xml_reader(path), holds_polyhedra(path)
    if doubtful:
        try_reader(reader, path)
    with reading(path), captured_messages() as log:
        reader.SetFileName(str(path))
        reader.Update()
        output = reader.GetOutputDataObject(0)
    if log.failure:
        raise FileError(f"cannot be read ({log.failure})", str(path), "It is damaged or cut short; export it again")
    from vtkmodules.util.numpy_support import vtk_to_numpy
    from vtkmodules.vtkCommonCore import vtkDataArray
    from vtkmodules.vtkCommonDataModel import vtkPointSet

    if not isinstance(output, vtkPointSet):
        kind = "nothing" if output is None else f"a data set of kind {output.GetClassName().removeprefix('vtk')}"
        raise FileError(f"holds {kind}", str(path), "Polydata or a grid with points is needed")
    points = output.GetPoints()
    places = np.zeros((0, 3)) if points is None else vtk_to_numpy(points.GetData()).astype(np.float64)
    data, arrays = output.GetPointData(), {}
    for index in range(data.GetNumberOfArrays()):
        array = data.GetAbstractArray(index)
        name = plain_text(array.GetName() or f"unnamed {index}")
        if name == _GHOST_ARRAY:
            continue
        if isinstance(array, vtkDataArray):
            arrays[name] = vtk_to_numpy(array)
        else:
            arrays[name] = np.full(places.shape[0], "", dtype=np.str_)
    cells = output.GetCellData()
    on_cells = [plain_text(cells.GetArrayName(index) or "") for index in range(cells.GetNumberOfArrays())]
    hint = f"its cells carry {', '.join(on_cells)}: read it as a volume instead" if on_cells else ""
    return PointArrays(places, arrays, hint, notes)


def _xml_reader(path: Path) -> Any:
    kind = check_vtk_xml(path)
    from vtkmodules.vtkIOXML import vtkXMLPolyDataReader, vtkXMLUnstructuredGridReader

    readers = {"PolyData": vtkXMLPolyDataReader, "UnstructuredGrid": vtkXMLUnstructuredGridReader}
    if kind not in readers:
        raise FileError(f"holds a data set of kind {kind}", str(path), f"Kinds with points are {', '.join(readers)}")
    return readers[kind]()


def _legacy_reader() -> Any:
    from vtkmodules.vtkIOLegacy import vtkGenericDataObjectReader

    reader = vtkGenericDataObjectReader()
    # without these, only the first array of each kind is read
    for kind in ("Scalars", "Vectors", "Tensors", "Normals", "TCoords", "Fields"):
        getattr(reader, f"ReadAll{kind}On")()
    return reader


def read_ply_points(path: Path) -> PointArrays:
    """Read the vertices of a PLY file and their properties.

    Parameters
    ----------
    path : Path
        An existing file, not empty.

    Returns
    -------
    PointArrays
        All vertices; a list property is left aside.

    Raises
    ------
    FileError
        Cut short, no PLY file, or vertices without coordinates.
    """
    where = str(path)
    elements, source = ply_header(path.read_bytes(), where)
    at = 0
    for element in elements:
        columns, at = read_ply_element(element, source, at)
        if element.name == "vertex":
            break
    else:
        raise FileError("has no vertices", where, "Export points with their values")
    missing = [axis for axis in "xyz" if axis not in columns]
    if missing:
        raise FileError(f"its vertices have no {', '.join(missing)}", where, "Export the points with coordinates")
    places = np.column_stack([columns.pop(axis).values for axis in "xyz"]).astype(np.float64)
    return PointArrays(places, {name: column.values for name, column in columns.items() if column.starts is None})
