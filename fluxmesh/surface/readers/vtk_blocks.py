"""VTK files that list others: multi-block and partitioned sets, and data sets in pieces."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from xml.etree.ElementTree import Element

from fluxmesh.errors import FileError, InputError
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.content import FileContent, surface_of_parts
from fluxmesh.surface.readers.vtk import VTK_XML_KINDS, content_of_vtk_xml
from fluxmesh.surface.readers.vtk_xml import vtk_xml_kind
from fluxmesh.surface.readers.xml_index import file_beside, read_xml_index

__all__ = ["read_vtk_blocks", "read_vtk_pieces"]

_SETS = ("vtkMultiBlockDataSet", "vtkPartitionedDataSetCollection", "vtkPartitionedDataSet")
_PIECED = ("PPolyData", "PUnstructuredGrid")
# blocks within blocks, and files that list files
_DEEPEST = 50


@dataclass(frozen=True)
class _Leaf:
    """A file that a set lists, and the path of names to it."""

    name: str
    reference: str


def read_vtk_blocks(path: Path, skin: bool | None = None) -> RawMesh:
    """Read a multi-block or partitioned set of VTK XML files.

    Parameters
    ----------
    path : Path
        An existing file, not empty.
    skin : bool, optional
        As `fluxmesh.surface.files.read_mesh`.

    Returns
    -------
    RawMesh
        The faces of all blocks; each block is a set of the names on its path,
        joined by "/", and "block_3" where it has no name.

    Raises
    ------
    FileError
        The file or one that it lists is missing, cut short or damaged, lies
        outside its folder, or no block has faces; the message names the block.
    FieldError
        An array has the wrong length, or differs between blocks.
    """
    parts, notes = _contents(path, str(path), (path.resolve(),), set())
    return surface_of_parts(parts, str(path), skin, path.name, named=True, notes=notes)


def read_vtk_pieces(path: Path, skin: bool | None = None) -> RawMesh:
    """Read a data set that is stored in pieces, a VTK XML file each.

    Parameters
    ----------
    path : Path
        An existing file, not empty.
    skin : bool, optional
        As `fluxmesh.surface.files.read_mesh`.

    Returns
    -------
    RawMesh
        The faces of all pieces, without ghosts. Points of different pieces
        are not merged.

    Raises
    ------
    FileError
        As `read_vtk_blocks`; the message names the piece.
    FieldError
        As `read_vtk_blocks`.
    """
    parts, notes = _contents(path, str(path), (path.resolve(),), set())
    return surface_of_parts(parts, str(path), skin, path.name, named=False, notes=notes)


def _contents(
    path: Path, where: str, above: tuple[Path, ...], seen: set[Path]
) -> tuple[list[tuple[str, FileContent]], tuple[str, ...]]:
    """Return the blocks of a file with their names, and what was passed over.

    Each file is read once: sets that list one another, ten at a time, would make a list without end.
    """
    if len(above) > _DEEPEST + 1:
        raise FileError(f"lists files that list files, more than {_DEEPEST} deep", where, "Export it again")
    root = read_xml_index(path)
    kind = root.get("type", "nothing")
    # not by root.find, to which the kind would be a path: it is any text here
    body = next((element for element in root if element.tag == kind), None)
    if kind not in (*_SETS, *_PIECED) or body is None:
        raise FileError(
            f"holds a data set of kind {kind or '(none)'}",
            where,
            f"Kinds that list files are {', '.join((*_SETS, *_PIECED))}",
        )
    pieced = kind in _PIECED
    parts: list[tuple[str, FileContent]] = []
    notes: list[str] = []
    for leaf in _pieces(body, where) if pieced else _leaves(body, "", where, 0):
        here = f"{where}: {'piece' if pieced else 'block'} {leaf.name!r}"
        file = file_beside(path, leaf.reference, here)
        whole = file.resolve()
        if whole in seen and whole not in above:
            raise FileError(
                f"lists {file.name} a second time", here, "Each file can be one part of the surface; export it again"
            )
        seen.add(whole)
        try:
            inner, more = _leaf_contents(file, here, (*above, whole), seen)
        except InputError as error:
            if error.where.startswith(where):
                raise
            raise type(error)(error.found, f"{here} ({leaf.reference})", error.remedy) from error
        parts += [(_below(leaf.name, name), part) for name, part in inner]
        notes += more
    return parts, tuple(notes)


def _below(name: str, inner: str) -> str:
    return "/".join(part for part in (name, inner) if part)


def _leaf_contents(
    file: Path, where: str, above: tuple[Path, ...], seen: set[Path]
) -> tuple[list[tuple[str, FileContent]], tuple[str, ...]]:
    kind = vtk_xml_kind(file)
    if kind in _PIECED or kind in _SETS:
        inner, notes = _contents(file, where, above, seen)
        # pieces are parts of one block, blocks have names of their own
        return [("" if kind in _PIECED else name, part) for name, part in inner], notes
    if kind in VTK_XML_KINDS:
        return [("", content_of_vtk_xml(file))], ()
    return [], (f"{where.rpartition(': ')[2]} holds a data set of kind {kind} and was passed over",)


def _pieces(body: Element, where: str) -> Iterator[_Leaf]:
    """Yield the pieces of a data set."""
    for number, piece in enumerate(body.iter("Piece")):
        source = piece.get("Source")
        if source is None:
            raise FileError(f"its piece {number} names no file", where, "Export it again")
        yield _Leaf(str(number), source)


def _leaves(body: Element, above: str, where: str, depth: int) -> Iterator[_Leaf]:
    """Yield the files of a set, block by block."""
    if depth > _DEEPEST:
        raise FileError(f"has blocks within blocks, more than {_DEEPEST} deep", where, "Export it with fewer levels")
    for number, element in enumerate(body):
        name = _below(above, element.get("name") or f"block_{element.get('index', number)}")
        if element.tag == "DataSet":
            reference = element.get("file")
            if reference is not None:  # a block may be empty
                yield _Leaf(name, reference)
        elif element.tag == "Block":
            yield from _leaves(element, name, where, depth + 1)
        elif element.tag in ("Piece", "Partitions"):
            for part in element:
                reference = part.get("file")
                if part.tag == "DataSet" and reference is not None:
                    yield _Leaf(name, reference)
