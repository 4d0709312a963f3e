"""Mesh files: one table from suffix to reader, and the checks every file passes."""

from __future__ import annotations

import difflib
from collections.abc import Callable, Mapping
from pathlib import Path

from fluxmesh.errors import FileError, GroupError
from fluxmesh.guarded import reading
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.cgns import read_cgns
from fluxmesh.surface.readers.exodus import read_exodus
from fluxmesh.surface.readers.joining import JoinedMeshes, join_meshes
from fluxmesh.surface.readers.meshio_formats import meshio_suffixes, read_meshio
from fluxmesh.surface.readers.obj import read_obj
from fluxmesh.surface.readers.ply import read_ply
from fluxmesh.surface.readers.stl import read_stl
from fluxmesh.surface.readers.vtk import read_vtk_legacy, read_vtk_xml
from fluxmesh.surface.readers.vtk_blocks import read_vtk_blocks, read_vtk_pieces

__all__ = ["known_suffixes", "read_mesh", "read_meshes", "skin_hint"]

_Reader = Callable[[Path, bool | None], RawMesh]


def _faces_only(reader: Callable[[Path], RawMesh]) -> _Reader:
    """Wrap the reader of a format that has no volume cells."""

    def faces(path: Path, skin: bool | None) -> RawMesh:
        if skin:
            raise FileError(f"a {path.suffix} file has no volume cells", str(path), "Leave out skin = true")
        return reader(path)

    return faces


# A new reader is one line here; every other suffix goes to meshio's own table.
_READERS: dict[str, _Reader] = {
    ".cgns": read_cgns,
    ".e": read_exodus,
    ".ex2": read_exodus,
    ".exii": read_exodus,
    ".exo": read_exodus,
    ".exodus": read_exodus,
    ".g": read_exodus,
    ".gen": read_exodus,
    ".obj": _faces_only(read_obj),
    ".ply": _faces_only(read_ply),
    ".pvtp": read_vtk_pieces,
    ".pvtu": read_vtk_pieces,
    ".stl": _faces_only(read_stl),
    ".vtk": read_vtk_legacy,
    ".vtm": read_vtk_blocks,
    ".vtmb": read_vtk_blocks,
    ".vtp": read_vtk_xml,
    ".vtpc": read_vtk_blocks,
    ".vtu": read_vtk_xml,
}


def known_suffixes() -> tuple[str, ...]:
    """Return every suffix there is a reader for.

    Returns
    -------
    tuple of str
        Sorted, lower case, with the dot.
    """
    return tuple(sorted(meshio_suffixes() | _READERS.keys()))


def read_mesh(path: Path, *, skin: bool | None = None) -> RawMesh:
    """Read the faces of a mesh file, or the skin of its volume cells.

    Parameters
    ----------
    path : Path
        File with one of `known_suffixes`.
    skin : bool, optional
        True: the skin of the volume cells, that is the faces that belong to
        one cell only, normals out of the volume; where the file lists faces
        too, they leave their arrays and sets on those of the skin that have
        the same corners. False: the listed faces. Default: the listed faces,
        and the skin only where the file has none.

    Returns
    -------
    RawMesh
        Faces, arrays and named sets, in the file's own units. On a skin, the
        arrays on cells are those of the cell behind each face, and
        `RawMesh.derived` says so.

    Raises
    ------
    FileError
        No such file, a folder, unreadable, empty, of unknown suffix, cut
        short, damaged, or without faces (`skin`: without volume cells).
    FieldError
        An array has the wrong length.
    """
    reader = _reader_of(path)
    try:
        with path.open("rb") as stream:
            empty = not stream.read(1)
        if empty:
            raise FileError("is empty", str(path), "Export it again")
        with reading(path):
            return reader(path, skin)
    except OSError as error:
        raise FileError(
            f"cannot be read ({error.strerror or error})", str(path), "Check that you may read it"
        ) from error


def read_meshes(files: Mapping[str, Path], *, skin: bool | None = None) -> JoinedMeshes:
    """Read one file a group and put them into one mesh.

    Parameters
    ----------
    files : mapping of str to Path
        Group name -> file, at least one.
    skin : bool, optional
        As `read_mesh`.

    Returns
    -------
    JoinedMeshes
        The joint mesh, the group of every face, and which arrays each file
        has. Points of neighbouring files are not merged.

    Raises
    ------
    FileError
        As `read_mesh`.
    FieldError
        As `read_mesh`, or arrays of one name that do not fit together.
    GroupError
        No file, or two groups that name one file.
    """
    if not files:
        raise GroupError("no group has a file", remedy="Name at least one file")
    owners: dict[Path, str] = {}
    for name, path in files.items():
        other = owners.setdefault(path.resolve(), name)
        if other != name:
            raise GroupError(
                f"groups {other!r} and {name!r} are the same file {path.name}",
                where="surface.files",
                remedy="Give each group a file of its own",
            )
    return join_meshes({name: read_mesh(path, skin=skin) for name, path in files.items()})


def skin_hint(mesh: RawMesh) -> str:
    """Say that the skin of the volume cells could be taken instead of the faces.

    Parameters
    ----------
    mesh : RawMesh
        Faces that do not close, say.

    Returns
    -------
    str
        One sentence without a full stop, "" when the file has no volume cells
        beside the faces.
    """
    if not mesh.volume_cells:
        return ""
    return (
        f"{mesh.source} also holds {mesh.volume_cells} volume cells: "
        "'skin = true' under [surface] takes their skin, with the tags of the faces on it"
    )


def _reader_of(path: Path) -> _Reader:
    where = str(path)
    if not path.exists():
        raise FileError("there is no such file", where, _nearest(path))
    if path.is_dir():
        raise FileError("is a folder, not a file", where, "Name one mesh file in it")
    if not path.is_file():
        raise FileError("is no regular file", where, "Name a mesh file")
    reader = _READERS.get(path.suffix.lower())
    if reader is not None:
        return reader
    if {path.suffix.lower(), "".join(path.suffixes[-2:]).lower()} & meshio_suffixes():
        return read_meshio
    raise FileError(
        f"its suffix {path.suffix!r} tells no known mesh format" if path.suffix else "has no suffix",
        where,
        f"Known suffixes are {', '.join(known_suffixes())}",
    )


def _nearest(path: Path) -> str:
    """Return a hint at a file of nearly that name."""
    if not path.parent.is_dir():
        return f"There is no folder {path.parent} either"
    near = difflib.get_close_matches(path.name, [entry.name for entry in path.parent.iterdir()], n=1)
    return f"Did you mean {near[0]!r}?" if near else "Check the path; it is relative to the case file"
