"""Every other mesh format, through meshio: named sets, physical groups, mixed blocks."""

from __future__ import annotations

import io
import re
import struct
import zlib
from collections.abc import Iterable, Iterator
from contextlib import contextmanager, redirect_stderr, redirect_stdout
from dataclasses import replace
from pathlib import Path
from typing import Any
from warnings import catch_warnings, simplefilter
from xml.etree.ElementTree import ParseError

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError, FileError
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.announced import require_possible
from fluxmesh.surface.readers.cell_shapes import SHAPES
from fluxmesh.surface.readers.content import FileContent, surface_of
from fluxmesh.surface.readers.ending import ending_notes
from fluxmesh.surface.readers.faces import Faces, join_blocks
from fluxmesh.surface.readers.gmsh_counts import require_gmsh_counts
from fluxmesh.surface.readers.gmsh_numbers import place_by_number
from fluxmesh.surface.readers.volume import CellBlock, Volume
from fluxmesh.surface.surface import FaceKind

__all__ = ["meshio_notes", "meshio_suffixes", "read_meshio"]

_KINDS = {
    "triangle": FaceKind.POLYGON,
    "quad": FaceKind.POLYGON,
    "polygon": FaceKind.POLYGON,
    "triangle6": FaceKind.TRIANGLE6,
    "quad8": FaceKind.QUAD8,
    "quad9": FaceKind.QUAD9,
}
_FLAT = ("triangle", "quad", "polygon", "VTK_LAGRANGE_TRIANGLE", "VTK_LAGRANGE_QUADRILATERAL")
_SOLID = (
    *("tetra", "hexahedron", "wedge", "pyramid", "penta_prism", "hexa_prism", "polyhedron"),
    *("VTK_LAGRANGE_TETRAHEDRON", "VTK_LAGRANGE_HEXAHEDRON", "VTK_LAGRANGE_WEDGE", "VTK_LAGRANGE_PYRAMID"),
)
# What its readers are seen to raise on files that are damaged or not of their format.
_DAMAGE = (
    ArithmeticError,
    AssertionError,
    AttributeError,
    EOFError,
    LookupError,
    MemoryError,
    NameError,
    OSError,
    ParseError,
    RuntimeError,
    RuntimeWarning,
    StopIteration,
    SystemExit,
    TypeError,
    ValueError,
    struct.error,
    zlib.error,
)
# A writer without a reader, a reader of volumes alone, and one whose pattern takes exponential time.
_LEFT_OUT = {"svg", "tetgen", "wkt"}
# Readers that take an open file. Many of them read on for ever at the end of one that was cut short,
# so they get a file that does not let them.
_TEXT = frozenset(
    (".avs", ".bdf", ".dat", ".dato", ".fem", ".inp", ".mesh", ".nas", ".off", ".post", ".su2", ".tec", ".vol")
)
_BINARY = frozenset([".mdpa", ".msh"])
# What it says aloud of files that it reads all the same, though they were cut short.
_CUT = re.compile(r"(\$\w+)\s+not\s+closed|but\s+found\s+only")
_WRONG_LENGTH = re.compile(r"""point_data\["(.+)"\]|cell data '(.+)'""")


def meshio_suffixes() -> frozenset[str]:
    """Return the suffixes meshio has a reader for, lower case with the dot.

    Returns
    -------
    frozenset of str
        Such as ".msh" or ".vol.gz".
    """
    import meshio

    table = meshio.extension_to_filetypes
    return frozenset(suffix for suffix, formats in table.items() if not _LEFT_OUT.issuperset(formats))


def read_meshio(path: Path, skin: bool | None = None) -> RawMesh:
    """Read a mesh file of any format meshio knows.

    Parameters
    ----------
    path : Path
        An existing file, not empty.
    skin : bool, optional
        As `fluxmesh.surface.files.read_mesh`.

    Returns
    -------
    RawMesh
        Its two-dimensional cells, or the skin of the three-dimensional ones;
        cell sets, named physical groups and named families become
        `RawMesh.face_sets`.

    Raises
    ------
    FileError
        The file is damaged, of another format, needs a package that is not
        installed, or has no faces.
    FieldError
        An array has the wrong length.
    """
    content = _content(_read(path), path.name, str(path))
    return surface_of(replace(content, notes=(*content.notes, *meshio_notes(path))), str(path), skin)


def meshio_notes(path: Path) -> tuple[str, ...]:
    """Note a text file that may be cut within its last number.

    Parameters
    ----------
    path : Path
        An existing file.

    Returns
    -------
    tuple of str
        One note, or none.
    """
    return ending_notes(path) if path.suffix.lower() in _TEXT else ()


def _content(mesh: Any, source: str, where: str) -> FileContent:
    """Sort the blocks of a mesh."""
    blocks: list[tuple[FaceKind, NDArray[Any]]] = []
    kept: list[int] = []
    solid: list[int] = []
    skipped: dict[str, int] = {}
    for index, block in enumerate(mesh.cells):
        if block.type in _KINDS and len(block.data):
            blocks.append((_KINDS[block.type], _rows(block, where)))
            kept.append(index)
        elif len(block.data) and block.type.startswith(_FLAT):
            raise FileError(
                f"has {len(block.data)} faces of type {block.type}, which cannot be read",
                where,
                "Export triangles, quads, polygons, or quadratic triangles and quads",
            )
        elif len(block.data):
            skipped[block.type] = skipped.get(block.type, 0) + len(block.data)
            if block.type.startswith(_SOLID):
                solid.append(index)
    connectivity, offsets, kinds = join_blocks(blocks)
    face_arrays = _on_cells(mesh, kept)
    starts = np.concatenate([[0], np.cumsum([rows.shape[0] for _, rows in blocks])]).astype(np.int64)
    return FileContent(
        source=source,
        points=_three_columns(np.asarray(mesh.points), where),
        faces=Faces(connectivity, offsets, kinds, None, skipped),
        volume=lambda: _volume(mesh, solid, where),
        volume_cells=sum(len(mesh.cells[index].data) for index in solid),
        node_arrays=dict(mesh.point_data),
        face_arrays=face_arrays,
        cell_arrays=_on_cells(mesh, solid),
        face_sets=_named_by_tag(mesh, face_arrays) | _cell_sets(mesh, kept, starts),
    )


def _on_cells(mesh: Any, blocks: list[int]) -> dict[str, NDArray[Any]]:
    """Return the cell arrays of some blocks, one block after the other."""
    return {
        name: np.concatenate([np.asarray(values[index]) for index in blocks]) if blocks else np.zeros(0)
        for name, values in mesh.cell_data.items()
    }


def _volume(mesh: Any, solid: list[int], where: str) -> Volume:
    """Return the volume cells, numbered from 0 in the order of their blocks."""
    blocks: list[CellBlock] = []
    unknown: dict[str, int] = {}
    first = 0
    for index in solid:
        block = mesh.cells[index]
        count = len(block.data)
        shape = SHAPES.get(block.type)
        if shape is None:
            unknown[block.type] = unknown.get(block.type, 0) + count
            continue
        rows = _rows(block, where)
        if rows.shape[1] != shape.size:
            raise FileError(
                f"has a block of {block.type} cells with {rows.shape[1]} points each, where {shape.size} are needed",
                where,
                "The file is damaged or cut short; export it again",
            )
        cells = np.arange(first, first + count, dtype=np.int64)
        blocks.append(CellBlock(block.type, rows.astype(np.int64), cells))
        first += count
    return Volume(tuple(blocks), None, frozenset(mesh.cells[index].type for index in solid), unknown)


def _read(path: Path) -> Any:
    """Let meshio read a file: it prints, and it ends the process, where others raise."""
    import meshio

    reasons = []
    for name in _formats(path):
        require_possible(path, name)
        said = io.StringIO()
        try:
            with _opened(path, name) as source, redirect_stdout(said), redirect_stderr(said), catch_warnings():
                if name == "gmsh":
                    simplefilter("error", RuntimeWarning)  # a point number that is no whole number
                mesh = meshio.read(source, file_format=name)
        except ImportError as error:
            raise FileError(
                f"needs the package {error.name} to be read", str(path), f"Install it: pip install {error.name}"
            ) from error
        except (meshio.ReadError, *_DAMAGE) as error:
            array = _WRONG_LENGTH.search(str(error))
            if array:
                raise FieldError(
                    f"array {array[1] or array[2]!r} has the wrong length ({error})", str(path), "Export it again"
                ) from error
            reasons.append(_reason(error, said.getvalue()))
            continue
        cut = _CUT.search(said.getvalue())
        if cut:
            raise FileError(
                f"its section {cut[1]} does not end" if cut[1] else "has fewer markers than it announces",
                str(path),
                "It was cut short or is still being written; export or copy it again",
            )
        if name == "gmsh":
            cells = [np.shape(block.data) for block in mesh.cells]
            require_gmsh_counts(path, len(mesh.points), [shape[:2] for shape in cells if len(shape) == 2])
            place_by_number(path, mesh)
        return mesh
    raise FileError(
        f"cannot be read as a {path.suffix} file ({'; '.join(reasons)})",
        str(path),
        "It is damaged, cut short, or its suffix does not tell what it is",
    )


def _formats(path: Path) -> list[str]:
    """Return meshio's names of the formats a file may have."""
    import meshio

    suffix = path.suffix.lower()
    double = "".join(path.suffixes[-2:]).lower()
    formats = meshio.extension_to_filetypes.get(double) or meshio.extension_to_filetypes[suffix]
    if "gmsh" in formats:
        # two formats share the suffix, and only one of them starts with a dollar sign
        with path.open("rb") as stream:
            dollar = stream.read(1) == b"$"
        formats = [name for name in formats if (name == "gmsh") == dollar]
    return list(formats)


@contextmanager
def _opened(path: Path, name: str) -> Iterator[Any]:
    """Give what meshio shall read: the path, or a stream that does not end in silence."""
    suffix = path.suffix.lower()
    if suffix in _TEXT:
        with _EndingText(path.open("rb"), encoding="utf-8", errors="replace") as text:
            yield text
    elif suffix in _BINARY and name != "gmsh":  # which takes a path only
        with _EndingBytes(io.FileIO(path)) as stream:
            yield stream
    else:
        yield path


class _Patience:
    """Counts reads that gave nothing, and ends them."""

    def __init__(self) -> None:
        self.left = 1000

    def check(self, got: bytes | str) -> None:
        if not got:
            self.left -= 1
            if self.left < 0:
                raise EOFError("the file ends too early")


class _EndingBytes(io.BufferedReader):
    """A file that raises when it is read again and again after its end."""

    def __init__(self, raw: io.FileIO) -> None:
        super().__init__(raw)
        self._patience = _Patience()

    def read(self, size: int | None = -1, /) -> bytes:
        got = super().read(size)
        self._patience.check(got)
        return got

    def readline(self, size: int | None = -1, /) -> bytes:
        got = super().readline(size)
        self._patience.check(got)
        return got


class _EndingText(io.TextIOWrapper):
    """The same for text."""

    def __init__(self, stream: Any, encoding: str, errors: str) -> None:
        super().__init__(stream, encoding=encoding, errors=errors)
        self._patience = _Patience()

    def readline(self, size: int = -1, /) -> str:  # type: ignore[override]
        got = super().readline(size)
        self._patience.check(got)
        return got


def _reason(error: BaseException, said: str) -> str:
    """Return one clause on why meshio gave up."""
    if isinstance(error, SystemExit):
        # what it printed before it ended the process; the last line only repeats the file name
        lines = [line.strip() for line in said.splitlines() if line.strip() and "Couldn't read" not in line]
        return lines[0].rstrip(".") if lines and not lines[0].startswith("Error:") else "not of this format"
    text = str(error).splitlines()
    return f"{type(error).__name__}: {text[0]}" if text else type(error).__name__


def _rows(block: Any, where: str) -> NDArray[Any]:
    """Return the point indices of a block, a row a face."""
    rows = np.asarray(block.data)
    if rows.ndim != 2 or rows.shape[1] < 3 or rows.dtype.kind not in "iu":
        raise FileError(
            f"has a block of {block.type} faces whose point indices make no table (shape {rows.shape})",
            where,
            "The file is damaged or cut short; export it again",
        )
    return rows


def _three_columns(points: NDArray[Any], where: str) -> NDArray[Any]:
    """Return points with three columns of floats; a plane mesh lies at z = 0."""
    if points.ndim != 2 or points.shape[1] not in (2, 3):
        raise FileError(
            f"its points have shape {points.shape}", where, "Points with two or three coordinates are needed"
        )
    if points.dtype not in (np.float32, np.float64):
        points = points.astype(np.float64)
    if points.shape[1] == 2:
        points = np.column_stack([points, np.zeros(points.shape[0], dtype=points.dtype)])
    return points


def _cell_sets(mesh: Any, kept: list[int], starts: NDArray[np.int64]) -> dict[str, NDArray[np.int64]]:
    """Return cell sets as face indices; sets without faces are left out."""
    sets = {}
    for name, members in mesh.cell_sets.items():
        if name.startswith("gmsh:"):  # book-keeping of the reader, not a set of cells
            continue
        parts = [
            start + np.asarray(members[index], dtype=np.int64)
            for start, index in zip(starts, kept)
            if members[index] is not None and len(members[index])
        ]
        if parts:
            sets[name] = np.concatenate(parts)
    return sets


def _named_by_tag(mesh: Any, face_arrays: dict[str, NDArray[Any]]) -> dict[str, NDArray[np.int64]]:
    """Return sets that a file names through an integer tag on its cells."""
    sets: dict[str, NDArray[np.int64]] = {}
    physical = face_arrays.get("gmsh:physical")
    if physical is not None:
        for name, entry in mesh.field_data.items():
            number, dimension = _tag_and_dimension(entry)
            if dimension == 2:
                sets[name] = np.flatnonzero(physical == number)
    families = face_arrays.get("cell_tags")
    if families is not None:
        for number, names in getattr(mesh, "cell_tags", {}).items():
            for name in names:
                faces = np.flatnonzero(families == number)
                sets[name] = np.concatenate([sets[name], faces]) if name in sets else faces
    return {name: faces for name, faces in sets.items() if faces.size}


def _tag_and_dimension(entry: Iterable[Any]) -> tuple[int, int]:
    values = [int(value) for value in np.ravel(np.asarray(entry))]
    return (values[0], values[1]) if len(values) == 2 else (0, -1)
