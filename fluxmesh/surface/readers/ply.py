"""PLY files, ASCII and binary: every property kept, polygons whole.

The general readers at hand refuse binary files that mix triangles with other
polygons, or cut polygons into triangles and lose which face a value belongs to.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FileError
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.ending import ending_notes
from fluxmesh.surface.readers.faces import require_faces

__all__ = ["read_ply"]

_TYPES = {
    **dict.fromkeys(("char", "int8"), "i1"),
    **dict.fromkeys(("uchar", "uint8"), "u1"),
    **dict.fromkeys(("short", "int16"), "i2"),
    **dict.fromkeys(("ushort", "uint16"), "u2"),
    **dict.fromkeys(("int", "int32"), "i4"),
    **dict.fromkeys(("uint", "uint32"), "u4"),
    **dict.fromkeys(("float", "float32"), "f4"),
    **dict.fromkeys(("double", "float64"), "f8"),
    "int64": "i8",
    "uint64": "u8",
}
_CUT_SHORT = "It was cut short or is damaged; export or copy it again"


@dataclass(frozen=True)
class _Property:
    name: str
    value: np.dtype[Any]
    count: np.dtype[Any] | None  # type of the length of a list; None for a single value


@dataclass(frozen=True)
class _Element:
    name: str
    rows: int
    properties: list[_Property]


@dataclass(frozen=True, eq=False)
class _Column:
    """Values of one property; `starts` says where each row begins when it is a list."""

    values: NDArray[Any]
    starts: NDArray[np.int64] | None


class _Source:
    """The data part: bytes of a binary file, or the words of an ASCII one."""

    def __init__(self, body: bytes, binary: bool, where: str) -> None:
        self.where = where
        self.binary = binary
        if binary:
            self.slots: NDArray[Any] = np.frombuffer(body, dtype=np.uint8)
        else:
            try:
                self.slots = np.array(body.split(), dtype=np.float64)
            except ValueError as error:
                raise FileError(f"has a word that is no number ({error})", where, _CUT_SHORT) from error

    def width(self, kind: np.dtype[Any]) -> int:
        """Return how many slots one value takes."""
        return kind.itemsize if self.binary else 1

    def values(self, at: NDArray[np.int64], kind: np.dtype[Any]) -> NDArray[Any]:
        """Return the values that start at some slots."""
        values: NDArray[Any]
        if self.binary:
            values = self.slots[at[:, None] + np.arange(kind.itemsize)].reshape(-1).view(kind)
        else:
            values = self._cast(self.slots[at], kind)
        return values

    def strided(self, first: int, stride: int, rows: int, columns: int, kind: np.dtype[Any]) -> NDArray[Any]:
        """Return `columns` neighbouring values from each of `rows` rows of equal length."""
        if not self.binary:
            table = self.slots[first : first + stride * rows]
            table = np.lib.stride_tricks.as_strided(
                table, (rows, columns), (stride * table.itemsize, table.itemsize), writeable=False
            )
            return self._cast(table, kind)
        view = np.ndarray((rows, columns), kind, self.slots.data, first, (stride, kind.itemsize))
        return view.astype(kind.newbyteorder("="))

    def holds(self, number: int, first: int, stride: int, rows: int, kind: np.dtype[Any]) -> bool:
        """Return whether a number stands at one place of each row."""
        if self.binary:
            return bool((self.strided(first, stride, rows, 1, kind) == number).all())
        return bool((self.slots[first : first + stride * rows : stride] == number).all())

    def _cast(self, numbers: NDArray[Any], kind: np.dtype[Any]) -> NDArray[Any]:
        """Return numbers of a text as the type that the header announces, which they must fit."""
        if kind.kind == "f":
            with np.errstate(over="ignore"):  # beyond the range is infinite, and refused where it is used
                return numbers.astype(kind)
        bounds = np.iinfo(kind)
        # NaN fits nowhere; the float above the largest of 64 bits is one too many
        fits = (numbers >= float(bounds.min)) & (numbers < float(bounds.max) + 1.0) & (numbers == np.rint(numbers))
        if not fits.all():
            raise FileError(
                f"has the number {numbers[~fits][0]:g} where its header announces whole numbers of type {kind.name}",
                self.where,
                _CUT_SHORT,
            )
        return numbers.astype(kind)


def read_ply(path: Path) -> RawMesh:
    """Read the vertices and faces of a PLY file.

    Parameters
    ----------
    path : Path
        An existing file, not empty.

    Returns
    -------
    RawMesh
        Every further property of vertices and faces is an array of its name;
        a list property becomes an array of several components when all its
        rows are equally long, and is left aside otherwise.

    Raises
    ------
    FileError
        The file is cut short, is no PLY file, or has no faces.
    """
    where = str(path)
    text = path.read_bytes()
    elements, source = _header(text, where)
    found: dict[str, dict[str, _Column]] = {}
    at = 0
    for element in elements:
        found[element.name], at = _read_element(element, source, at)
    rest = source.slots[at:]
    if rest.size and not (source.binary and bytes(rest[:64]).isspace()):
        raise FileError(f"has {rest.size} more {_unit(source)} than its header announces", where, _CUT_SHORT)
    skipped = {
        element.name: element.rows
        for element in elements
        if element.name not in ("vertex", "face", "material") and element.rows
    }
    vertex, face = found.get("vertex", {}), found.get("face", {})
    missing = [axis for axis in "xyz" if axis not in vertex]
    if missing:
        raise FileError(f"its vertices have no {', '.join(missing)}", where, "Export the mesh with coordinates")
    polygons = face.pop("vertex_indices", None) or face.pop("vertex_index", None)
    points = np.column_stack([vertex.pop(axis).values for axis in "xyz"])
    if points.dtype not in (np.float32, np.float64):
        points = points.astype(np.float64)
    connectivity, offsets = _polygons(polygons, where)
    return require_faces(
        RawMesh(
            source=path.name,
            points=points,
            connectivity=connectivity,
            offsets=offsets,
            kinds=None,
            node_arrays=_arrays(vertex),
            face_arrays=_arrays(face),
            skipped=skipped,
            notes=() if source.binary else ending_notes(path),
        ),
        where,
    )


def _header(text: bytes, where: str) -> tuple[list[_Element], _Source]:
    end = text.find(b"end_header")
    stop = text.find(b"\n", end) + 1
    if not text.startswith(b"ply"):
        raise FileError("is no PLY file: it does not start with 'ply'", where, "Check its suffix")
    if end < 0 or stop == 0:
        raise FileError("its header does not end", where, _CUT_SHORT)
    elements: list[_Element] = []
    order = ""
    for line in text[:end].decode("utf-8", "replace").splitlines()[1:]:
        words = line.split()
        try:
            if words[:1] == ["format"]:
                order = {"ascii": "=", "binary_little_endian": "<", "binary_big_endian": ">"}[words[1]]
            elif words[:1] == ["element"]:
                if int(words[2]) < 0:
                    raise ValueError("a count below zero")
                elements.append(_Element(words[1], int(words[2]), []))
            elif words[:2] == ["property", "list"]:
                kinds = [np.dtype(order + _TYPES[word]) for word in words[2:4]]
                elements[-1].properties.append(_Property(words[4], kinds[1], kinds[0]))
            elif words[:1] == ["property"]:
                elements[-1].properties.append(_Property(words[2], np.dtype(order + _TYPES[words[1]]), None))
        except (KeyError, IndexError, ValueError) as error:
            raise FileError(f"its header line '{line}' cannot be understood", where, "Export it again") from error
    if not order:
        raise FileError("its header names no format", where, _CUT_SHORT)
    return elements, _Source(text[stop:], order != "=", where)


def _unit(source: _Source) -> str:
    return "bytes" if source.binary else "numbers"


def _read_element(element: _Element, source: _Source, at: int) -> tuple[dict[str, _Column], int]:
    """Read one element from slot `at` on; return its columns and where the next one starts."""
    if element.rows == 0:
        return {prop.name: _Column(np.zeros(0, dtype=prop.value), None) for prop in element.properties}, at
    lengths, stride = _first_row(element, source, at)
    if at + stride * element.rows <= source.slots.size:
        columns = _equal_rows(element, source, at, lengths, stride)
        if columns is not None:
            return columns, at + stride * element.rows
    return _ragged_rows(element, source, at)


def _first_row(element: _Element, source: _Source, at: int) -> tuple[list[int], int]:
    """Return the length of each property in the first row, and that row's slots."""
    lengths, here = [], at
    for prop in element.properties:
        length = 1
        if prop.count is not None:
            _require(source, here + source.width(prop.count), element)
            length = _length(source.values(np.array([here]), prop.count).item(), 0, source, element)
            here += source.width(prop.count)
        lengths.append(length)
        here += length * source.width(prop.value)
    return lengths, here - at


def _require(source: _Source, needed: int, element: _Element) -> None:
    if needed > source.slots.size:
        raise FileError(
            f"ends within its {element.rows} rows of '{element.name}': "
            f"{needed} {_unit(source)} of data are needed at least, {source.slots.size} are there",
            source.where,
            _CUT_SHORT,
        )


def _length(number: float, row: int, source: _Source, element: _Element) -> int:
    if not (number >= 0 and number % 1 == 0):  # NaN is neither; the rest of infinity is NaN
        raise FileError(f"row {row} of '{element.name}' has a list of length {number:g}", source.where, _CUT_SHORT)
    return int(number)


def _equal_rows(
    element: _Element, source: _Source, at: int, lengths: list[int], stride: int
) -> dict[str, _Column] | None:
    """Read rows that are all as long as the first; None when they are not."""
    here = at
    # all lengths first: where they differ, no value is where it seems to be
    for prop, length in zip(element.properties, lengths):
        if prop.count is not None:
            if not source.holds(length, here, stride, element.rows, prop.count):
                return None
            here += source.width(prop.count)
        here += length * source.width(prop.value)
    columns, here = {}, at
    for prop, length in zip(element.properties, lengths):
        starts = None
        if prop.count is not None:
            here += source.width(prop.count)
            starts = np.arange(element.rows + 1, dtype=np.int64) * length
        values = source.strided(here, stride, element.rows, length, prop.value)
        columns[prop.name] = _Column(values.reshape(-1), starts)
        here += length * source.width(prop.value)
    return columns


def _ragged_rows(element: _Element, source: _Source, at: int) -> tuple[dict[str, _Column], int]:
    """Read rows of different lengths: where a row starts is known only from the one before."""
    # lists may be empty, but their lengths are there: no more memory is taken than the file can fill
    least = sum(source.width(prop.count or prop.value) for prop in element.properties)
    _require(source, at + least * element.rows, element)
    begins = np.empty((len(element.properties), element.rows), dtype=np.int64)
    counts = np.ones((len(element.properties), element.rows), dtype=np.int64)
    plan = [
        (index, 0 if prop.count is None else source.width(prop.count), source.width(prop.value), prop.count)
        for index, prop in enumerate(element.properties)
    ]
    body = source.slots.data
    order: Literal["big", "little"] = (
        "big" if any(prop.value.byteorder == ">" for prop in element.properties) else "little"
    )
    limit = source.slots.size
    for row in range(element.rows):
        for index, head, width, count_type in plan:
            length = 1
            if count_type is not None:
                _require(source, at + head, element)
                length = _length(
                    int.from_bytes(body[at : at + head], order) if source.binary else body[at], row, source, element
                )
                at += head
                # at once: what is too long for the file can be too large for an array
                _require(source, at + length * width, element)
                counts[index, row] = length
            begins[index, row] = at
            at += length * width
        if at > limit:
            _require(source, at, element)
    columns = {}
    for index, prop in enumerate(element.properties):
        sizes = counts[index]
        starts = np.zeros(element.rows + 1, dtype=np.int64)
        np.cumsum(sizes, out=starts[1:])
        within = np.arange(starts[-1]) - np.repeat(starts[:-1], sizes)
        slots = np.repeat(begins[index], sizes) + within * source.width(prop.value)
        values = source.values(slots, prop.value)
        columns[prop.name] = _Column(
            values.astype(prop.value.newbyteorder("="), copy=False), None if prop.count is None else starts
        )
    return columns, at


def _polygons(column: _Column | None, where: str) -> tuple[NDArray[np.int64], NDArray[np.int64] | None]:
    if column is None or column.starts is None:
        return np.zeros(0, dtype=np.int64), None
    sizes = np.diff(column.starts)
    small = np.flatnonzero(sizes < 3)
    if small.size:
        raise FileError(f"face {small[0]} has {sizes[small[0]]} points", where, "Faces of three or more are needed")
    connectivity = column.values.astype(np.int64)
    return connectivity, None if bool((sizes == 3).all()) else column.starts


def _arrays(columns: dict[str, _Column]) -> dict[str, NDArray[Any]]:
    arrays = {}
    for name, column in columns.items():
        if column.starts is None:
            arrays[name] = column.values
        elif column.starts.size > 1 and bool((np.diff(column.starts) == column.starts[1]).all()):
            length = int(column.starts[1])
            arrays[name] = column.values if length == 1 else column.values.reshape(-1, length)
    return arrays
