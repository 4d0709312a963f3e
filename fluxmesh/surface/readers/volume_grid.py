"""Volume files, read as the one grid that fields are sampled from."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError, FileError
from fluxmesh.guarded import reading
from fluxmesh.surface.readers.meshio_formats import _read as read_by_meshio
from fluxmesh.surface.readers.meshio_formats import meshio_notes, meshio_suffixes
from fluxmesh.surface.readers.vtk_cells import cell_arrays, cell_type_name, cell_types, hidden_cells
from fluxmesh.surface.readers.vtk_dataset import plain_text
from fluxmesh.surface.readers.vtk_guard import try_reader
from fluxmesh.surface.readers.vtk_legacy import check_vtk_legacy, legacy_holds_polyhedra
from fluxmesh.surface.readers.vtk_messages import captured_messages
from fluxmesh.surface.readers.vtk_xml import check_vtk_xml, holds_polyhedra
from fluxmesh.surface.readers.xml_index import file_beside, read_xml_index
from fluxmesh.units import LARGEST

__all__ = ["VolumeMesh", "read_volume", "volume_mesh", "volume_suffixes"]

_DAMAGED: Final = "The file is damaged or cut short; export it again"
_EXPORT: Final = "Export the volume mesh of the flow: tetrahedra, hexahedra, wedges, pyramids or polyhedra"
_GHOST_ARRAY: Final = "vtkGhostType"
_KEPT: Final = "fluxmesh kept"
# Points of the volume cells of fixed size, by the numbers of the open VTK file format.
_SIZES: Final = {
    **{10: 4, 11: 8, 12: 8, 13: 6, 14: 5, 15: 10, 16: 12},
    **{24: 10, 25: 20, 26: 15, 27: 13, 29: 27, 31: 12, 32: 18, 33: 24, 37: 19},
}


@dataclass(frozen=True, eq=False)
class VolumeMesh:
    """Volume cells with arrays, in the file's own units.

    Attributes
    ----------
    source : str
        File name, for messages.
    grid : vtkUnstructuredGrid
        Volume cells only: no faces, lines or ghosts.
    node_arrays : dict of str to ndarray, shape (n_points,) or (n_points, k)
        Numbers on points.
    cell_arrays : dict of str to ndarray, shape (n_cells,) or (n_cells, k)
        Numbers on cells.
    partial : tuple of str
        Arrays that only some of its blocks have, left out of the above.
    notes : tuple of str
        What to say of the file: that it may be cut within its last number.
    """

    source: str
    grid: Any
    node_arrays: dict[str, NDArray[Any]] = field(default_factory=dict)
    cell_arrays: dict[str, NDArray[Any]] = field(default_factory=dict)
    partial: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()


def volume_suffixes() -> tuple[str, ...]:
    """Return the suffixes of files that a volume can be read from.

    Returns
    -------
    tuple of str
        Sorted, lower case, with the dot.
    """
    return tuple(sorted({".pvtu", ".vtk", ".vtm", ".vtu"} | meshio_suffixes()))


def read_volume(path: Path) -> VolumeMesh:
    """Read the volume cells of a file, with their arrays.

    Parameters
    ----------
    path : Path
        A VTK unstructured grid (XML, legacy, in pieces or in blocks), a legacy
        structured grid, or any volume format that meshio reads.

    Returns
    -------
    VolumeMesh
        Its volume cells.

    Raises
    ------
    FileError
        No such file, of unknown suffix, cut short, damaged, with a piece
        missing, or without volume cells.
    FieldError
        An array has the wrong length.
    """
    where = str(path)
    if not path.is_file():
        found = "is a folder, not a file" if path.is_dir() else "there is no such file"
        raise FileError(found, where, "Check the path; it is relative to the case file")
    suffix = path.suffix.lower()
    try:
        if path.stat().st_size == 0:
            raise FileError("is empty", where, "Export it again")
        with reading(path):
            if suffix == ".vtm":
                return _read_blocks(path)
            if suffix in (".vtu", ".pvtu", ".vtk"):
                grid, notes = _read_vtk(path)
                return replace(volume_mesh(grid, path.name, where), notes=notes)
            if {suffix, "".join(path.suffixes[-2:]).lower()} & meshio_suffixes():
                return replace(volume_mesh(_from_meshio(path), path.name, where), notes=meshio_notes(path))
    except OSError as error:
        found = f"cannot be read ({error.strerror or error})"
        raise FileError(found, where, "Check that you may read it") from error
    raise FileError(
        f"its suffix {path.suffix!r} tells no known volume format" if suffix else "has no suffix",
        where,
        f"Known suffixes are {', '.join(volume_suffixes())}",
    )


def volume_mesh(data: Any, source: str = "volume", where: str = "") -> VolumeMesh:
    """Take the volume cells out of a VTK data set.

    Parameters
    ----------
    data : vtkDataSet
        An unstructured grid, or a structured one, with cells of any type.
    source : str, optional
        Its name, for messages.
    where : str, optional
        File, for messages; `source` by default.

    Returns
    -------
    VolumeMesh
        Volume cells, without ghosts; arrays of numbers only.

    Raises
    ------
    FileError
        No volume cells, point indices out of range, cells with another number
        of points than their type has, or coordinates that are not finite.
    FieldError
        An array has the wrong length.
    """
    where = where or source
    from vtkmodules.vtkCommonDataModel import (
        vtkImageData,
        vtkRectilinearGrid,
        vtkStructuredGrid,
        vtkUnstructuredGrid,
    )

    if isinstance(data, vtkStructuredGrid | vtkRectilinearGrid | vtkImageData):
        data = _appended([data])
    if not isinstance(data, vtkUnstructuredGrid):
        kind = "nothing" if data is None else data.GetClassName().removeprefix("vtk")
        raise FileError(f"holds a data set of kind {kind}, which has no volume cells", where, _EXPORT)
    _require_sound(data, where)
    grid = _volume_cells(data, where)
    nodes = dict(_arrays(grid.GetPointData(), int(grid.GetNumberOfPoints()), "points", where))
    cells = dict(_arrays(grid.GetCellData(), int(grid.GetNumberOfCells()), "cells", where))
    return VolumeMesh(source, grid, nodes, cells)


def _require_sound(grid: Any, where: str) -> None:
    """Raise on what would let VTK read memory that is not there, or find no cell at all."""
    from vtkmodules.util.numpy_support import vtk_to_numpy

    count = int(grid.GetNumberOfPoints())
    types = cell_types(grid)
    connectivity, offsets = cell_arrays(grid.GetCells())
    low, high = int(connectivity.min(initial=0)), int(connectivity.max(initial=-1))
    if low < 0 or high >= count:
        raise FileError(f"a cell uses point {low if low < 0 else high}, but there are {count} points", where, _DAMAGED)
    sizes = np.full(types.size, 3) if offsets is None else np.diff(offsets)
    for number in np.unique(types):
        wrong = np.flatnonzero((types == number) & (sizes != _SIZES.get(int(number), -1)))
        if int(number) in _SIZES and wrong.size:
            name = cell_type_name(int(number))[0]
            found = f"cell {wrong[0]} is a {name} of {sizes[wrong[0]]} points, where {_SIZES[int(number)]} are needed"
            raise FileError(found, where, _DAMAGED)
    finite = np.isfinite(vtk_to_numpy(grid.GetPoints().GetData())) if count else np.ones((1, 3), np.bool_)
    if not finite.all():
        bad = int(np.flatnonzero(~finite.all(axis=1))[0])
        raise FileError(f"the coordinates of point {bad} are not finite", where, "Export it again")
    if count and float(np.abs(vtk_to_numpy(grid.GetPoints().GetData())).max()) > LARGEST:
        raise FileError(f"has a point farther than {LARGEST:g} from the origin", where, "Export it again")


def _volume_cells(grid: Any, where: str) -> Any:
    """Return the grid without faces, lines and ghosts: itself, when it has none."""
    from vtkmodules.util.numpy_support import numpy_to_vtk, vtk_to_numpy

    types = cell_types(grid)
    solid = np.zeros(256, dtype=np.bool_)
    for number in np.unique(types):
        solid[number] = cell_type_name(int(number))[1] == 3
    kept = solid[types]
    if not kept.any():
        counts = np.bincount(types, minlength=256)
        listed = ", ".join(f"{counts[n]} of type {cell_type_name(int(n))[0]}" for n in np.flatnonzero(counts))
        raise FileError(f"has no volume cells (its cells: {listed or 'none'})", where, _EXPORT)
    ghosts = grid.GetCellData().GetArray(_GHOST_ARRAY)
    if ghosts is not None and ghosts.GetNumberOfTuples() == kept.size:
        kept &= ~hidden_cells(vtk_to_numpy(ghosts), where)
        if not kept.any():
            raise FileError("has no volume cells but ghosts", where, _EXPORT)
    if kept.all():
        return grid
    from vtkmodules.vtkCommonDataModel import vtkDataObject, vtkUnstructuredGrid
    from vtkmodules.vtkFiltersCore import vtkThreshold

    marked = vtkUnstructuredGrid()
    marked.ShallowCopy(grid)
    mark = numpy_to_vtk(kept.astype(np.uint8))
    mark.SetName(_KEPT)
    marked.GetCellData().AddArray(mark)
    # VTK's filters may leave out ghosts on their own
    marked.GetCellData().RemoveArray(_GHOST_ARRAY)
    marked.GetPointData().RemoveArray(_GHOST_ARRAY)
    threshold = vtkThreshold()
    threshold.SetInputData(marked)
    threshold.SetInputArrayToProcess(0, 0, 0, vtkDataObject.FIELD_ASSOCIATION_CELLS, _KEPT)
    threshold.SetThresholdFunction(vtkThreshold.THRESHOLD_UPPER)
    threshold.SetUpperThreshold(0.5)
    threshold.Update()
    return threshold.GetOutput()


def _arrays(attributes: Any, count: int, on: str, where: str) -> Iterator[tuple[str, NDArray[Any]]]:
    """Yield the arrays of numbers, as views of VTK's memory."""
    from vtkmodules.util.numpy_support import vtk_to_numpy

    for index in range(attributes.GetNumberOfArrays()):
        array = attributes.GetArray(index)
        if array is None or array.GetName() in (None, _KEPT, _GHOST_ARRAY):
            continue
        tuples = int(array.GetNumberOfTuples())
        if tuples != count:
            found = f"array {plain_text(array.GetName())!r} holds {tuples} values, but there are {count} {on}"
            raise FieldError(found, where, "Export it again")
        yield plain_text(array.GetName()), vtk_to_numpy(array)


def _read_vtk(path: Path) -> tuple[Any, tuple[str, ...]]:
    """Run the VTK reader that fits the suffix; return its grid, and notes."""
    suffix, doubtful = path.suffix.lower(), False
    notes: tuple[str, ...] = ()
    if suffix == ".vtk":
        notes = check_vtk_legacy(path)
        doubtful = legacy_holds_polyhedra(path)
        from vtkmodules.vtkIOLegacy import vtkGenericDataObjectReader

        reader = vtkGenericDataObjectReader()
        for kind in ("Scalars", "Vectors", "Tensors", "Normals", "TCoords", "Fields"):
            getattr(reader, f"ReadAll{kind}On")()
    elif suffix == ".pvtu":
        for piece in _named_files(path, "Piece", "Source"):
            check_vtk_xml(piece)
            doubtful = doubtful or holds_polyhedra(piece)
        from vtkmodules.vtkIOXML import vtkXMLPUnstructuredGridReader

        reader = vtkXMLPUnstructuredGridReader()
    else:
        kind = check_vtk_xml(path)
        if kind != "UnstructuredGrid":
            raise FileError(f"holds a data set of kind {kind}, which has no volume cells", str(path), _EXPORT)
        from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridReader

        reader = vtkXMLUnstructuredGridReader()
        doubtful = holds_polyhedra(path)
    if doubtful:
        try_reader(reader, path)
    with captured_messages() as log:
        reader.SetFileName(str(path))
        reader.Update()
        output = reader.GetOutputDataObject(0)
    if log.failure:
        raise FileError(f"cannot be read ({log.failure})", str(path), "It is damaged or cut short; export it again")
    return output, notes


def _named_files(path: Path, tag: str, attribute: str) -> list[Path]:
    """Return the files that an index of pieces or blocks names; each must be there."""
    root = read_xml_index(path)
    names = [element.attrib[attribute] for element in root.iter(tag) if attribute in element.attrib]
    files = [path.parent / name for name in names]
    if not files:
        raise FileError("names no files of pieces", str(path), "Export it again, with its pieces")
    gone = [file for file in files if not file.is_file()]
    if gone:
        raise FileError(
            f"{len(gone)} of its {len(files)} pieces are missing, the first is {gone[0].name}",
            str(path),
            f"Put the pieces where the file names them: {gone[0]}",
        )
    return [file_beside(path, name, str(path)) for name in names]


def _read_blocks(path: Path) -> VolumeMesh:
    """Read a multi-block set: all blocks with volume cells as one grid."""
    blocks = []
    for file in _named_files(path, "DataSet", "file"):
        if file.suffix.lower() == ".vtp":
            continue  # surfaces of the same set
        if file.suffix.lower() not in (".vtu", ".pvtu", ".vtk"):
            raise FileError(
                f"its block {file.name} is of no kind that can be read", str(path), "Export blocks as .vtu files"
            )
        grid, notes = _read_vtk(file)
        blocks.append(replace(volume_mesh(grid, file.name, str(file)), notes=notes))
    if not blocks:
        raise FileError("has no blocks with volume cells", str(path), _EXPORT)
    names = [{*block.node_arrays, *block.cell_arrays} for block in blocks]
    partial = tuple(name for name in sorted(set().union(*names)) if not all(name in each for each in names))
    notes = tuple(note for block in blocks for note in block.notes)
    joined = volume_mesh(_appended([block.grid for block in blocks]), path.name, str(path))
    return VolumeMesh(joined.source, joined.grid, joined.node_arrays, joined.cell_arrays, partial, notes)


def _appended(grids: list[Any]) -> Any:
    """Return several grids of any kind as one unstructured grid; points are not merged."""
    from vtkmodules.vtkFiltersCore import vtkAppendFilter

    append = vtkAppendFilter()
    append.MergePointsOff()
    # grids whose points follow from their axes would have them rounded to single precision
    if not all(grid.IsA("vtkPointSet") for grid in grids):
        append.SetOutputPointsPrecision(append.DOUBLE_PRECISION)
    for grid in grids:
        append.AddInputData(grid)
    append.Update()
    return append.GetOutput()


def _from_meshio(path: Path) -> Any:
    """Return what meshio reads as a VTK grid."""
    mesh = read_by_meshio(path)
    if not any(block.dim == 3 and len(block.data) for block in mesh.cells):
        counts: dict[str, int] = {}
        for block in mesh.cells:
            counts[block.type] = counts.get(block.type, 0) + len(block.data)
        listed = ", ".join(f"{count} of type {name}" for name, count in counts.items())
        raise FileError(f"has no volume cells (its cells: {listed or 'none'})", str(path), _EXPORT)
    import pyvista

    try:
        return pyvista.from_meshio(mesh)
    except (LookupError, TypeError, ValueError) as error:
        said = str(error).splitlines()
        raise FileError(
            f"its cells and arrays do not fit together ({said[0] if said else type(error).__name__})",
            str(path),
            _DAMAGED,
        ) from error
