"""VTK files (XML and legacy): polydata and unstructured grids, as views of VTK's own memory.

VTK's reader classes are called directly: importing them takes half the time of
importing a package built on them, and nothing in between copies an array.
"""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

from fluxmesh.errors import FileError
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.content import FileContent, surface_of
from fluxmesh.surface.readers.vtk_dataset import content_of_dataset
from fluxmesh.surface.readers.vtk_guard import try_reader
from fluxmesh.surface.readers.vtk_legacy import check_vtk_legacy, legacy_holds_polyhedra
from fluxmesh.surface.readers.vtk_messages import captured_messages
from fluxmesh.surface.readers.vtk_xml import check_vtk_xml, holds_polyhedra

__all__ = ["VTK_XML_KINDS", "content_of_vtk_xml", "read_vtk_legacy", "read_vtk_xml"]

VTK_XML_KINDS = ("PolyData", "UnstructuredGrid")
"""Kinds of data set that `content_of_vtk_xml` reads."""


def read_vtk_xml(path: Path, skin: bool | None = None) -> RawMesh:
    """Read VTK XML polydata or an unstructured grid.

    Parameters
    ----------
    path : Path
        An existing file, not empty.
    skin : bool, optional
        As `fluxmesh.surface.files.read_mesh`.

    Returns
    -------
    RawMesh
        Its faces or its skin, and every array on points and cells.

    Raises
    ------
    FileError
        The file is cut short, damaged, of another kind, or has no faces.
    FieldError
        An array has the wrong length.
    """
    return surface_of(content_of_vtk_xml(path), str(path), skin)


def content_of_vtk_xml(path: Path) -> FileContent:
    """Read all cells of VTK XML polydata or an unstructured grid.

    Parameters
    ----------
    path : Path
        An existing file, not empty.

    Returns
    -------
    FileContent
        Faces and volume cells; there may be none.

    Raises
    ------
    FileError
        The file is cut short, damaged, or of another kind.
    FieldError
        An array has the wrong length.
    """
    kind = check_vtk_xml(path)
    from vtkmodules.vtkIOXML import vtkXMLPolyDataReader, vtkXMLUnstructuredGridReader

    if kind not in VTK_XML_KINDS:
        raise FileError(
            f"holds a data set of kind {kind}", str(path), f"Kinds with faces are {', '.join(VTK_XML_KINDS)}"
        )
    reader = vtkXMLPolyDataReader() if kind == "PolyData" else vtkXMLUnstructuredGridReader()
    if kind == "UnstructuredGrid" and holds_polyhedra(path):
        try_reader(reader, path)
    return _read(reader, path)


def read_vtk_legacy(path: Path, skin: bool | None = None) -> RawMesh:
    """Read a legacy VTK file that holds polydata or an unstructured grid.

    Parameters
    ----------
    path : Path
        An existing file, not empty.
    skin : bool, optional
        As `fluxmesh.surface.files.read_mesh`.

    Returns
    -------
    RawMesh
        Its faces or its skin, and every array on points and cells.

    Raises
    ------
    FileError
        The file is cut short, damaged, of another kind, or has no faces.
    FieldError
        An array has the wrong length.
    """
    notes = check_vtk_legacy(path)
    from vtkmodules.vtkIOLegacy import vtkGenericDataObjectReader

    reader = vtkGenericDataObjectReader()
    # Without these, only the first array of each kind is read.
    for kind in ("Scalars", "Vectors", "Tensors", "Normals", "TCoords", "Fields"):
        getattr(reader, f"ReadAll{kind}On")()
    if legacy_holds_polyhedra(path):
        try_reader(reader, path)
    content = _read(reader, path)
    return surface_of(replace(content, notes=(*content.notes, *notes)), str(path), skin)


def _read(reader: Any, path: Path) -> FileContent:
    """Run a VTK reader and take its output apart."""
    with captured_messages() as log:
        reader.SetFileName(str(path))
        reader.Update()
        output = reader.GetOutputDataObject(0)
    if log.failure:
        raise FileError(f"cannot be read ({log.failure})", str(path), "It is damaged or cut short; export it again")
    return content_of_dataset(output, path.name, str(path))
