"""What a VTK XML file declares, held against what it holds, before VTK reads it.

VTK drops the surplus of an array that is too long without a word, and its
errors for a file that was cut short name the symptom. The open format (VTK
XML, "appended", "binary" and "ascii" data) states every length, so both can be
told from a few bytes an array.
"""

from __future__ import annotations

import binascii
import html
import mmap
import re
import zlib
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from fluxmesh.errors import FieldError, FileError

__all__ = ["check_vtk_xml", "holds_polyhedra", "vtk_xml_kind"]

_TAG = re.compile(rb"<(/?)(Piece|PointData|CellData|Points|Polys|Cells|DataArray|Array)\b([^>]*)>")
_ATTRIBUTE = re.compile(r"""(\w+)\s*=\s*(?:"([^"]*)"|'([^']*)')""")
_POLYHEDRA = re.compile(
    rb"""<DataArray\b[^>]*Name\s*=\s*["'](?:faces|faceoffsets|face_offsets|polyhedron_offsets)["']"""
)
_BYTES = {
    **{f"{sign}Int{8 * size}": size for sign in ("", "U") for size in (1, 2, 4, 8)},
    "Float32": 4,
    "Float64": 8,
}
# No compressor makes a mesh smaller by more: a larger length is damage, or meant to fill the memory.
_MOST_PACKED = 10_000
_CUT_SHORT = "It was cut short or is still being written; export or copy it again"


@dataclass(frozen=True)
class _Layout:
    """How a file stores the bytes of its arrays."""

    order: str  # numpy byte order
    word: int  # bytes of a length
    compressor: str  # "" for none
    encoding: str  # of the appended data: raw or base64
    appended_at: int  # first byte of the appended data
    appended_end: int  # first byte after them

    @property
    def compressed(self) -> bool:
        return bool(self.compressor)


@dataclass(frozen=True)
class _Declared:
    """One array as its tag declares it."""

    place: str  # the tag around it: PointData, CellData, Points, ...
    attributes: dict[str, str]
    values: int | None  # how many the mesh needs; None when that is not known
    inline_at: int  # first byte after the tag

    @property
    def name(self) -> str:
        return self.attributes.get("Name", self.place)

    @property
    def components(self) -> int:
        return int(self.attributes.get("NumberOfComponents", "1"))


def check_vtk_xml(path: Path) -> str:
    """Check that a VTK XML file is whole and that its arrays fit its mesh.

    Parameters
    ----------
    path : Path
        An existing file, not empty.

    Returns
    -------
    str
        The kind of data set it declares, such as "PolyData".

    Raises
    ------
    FileError
        The file is no VTK XML file, or is cut short.
    FieldError
        An array on points or cells has the wrong length.
    """
    with path.open("rb") as stream, mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ) as data:
        head = _head(data, path)
        if data.rfind(b"</VTKFile", max(0, len(data) - 65536)) < 0:
            raise FileError(
                f"the closing tag </VTKFile> is missing at its end ({len(data)} bytes)", str(path), _CUT_SHORT
            )
        try:
            layout = _layout(data, head)
            for declared in _arrays(data, layout):
                _check_length(declared, data, layout, str(path))
        except (ValueError, KeyError, IndexError, OverflowError, zlib.error) as error:
            if isinstance(error, FieldError | FileError):
                raise
            raise FileError(f"its XML is damaged ({error})", str(path), "Export it again") from error
    return head.get("type", "nothing")


def vtk_xml_kind(path: Path) -> str:
    """Return the kind of data set that a VTK XML file declares.

    Parameters
    ----------
    path : Path
        An existing file, not empty.

    Returns
    -------
    str
        Such as "PolyData".

    Raises
    ------
    FileError
        The file is no VTK XML file.
    """
    with path.open("rb") as stream, mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ) as data:
        return _head(data, path).get("type", "nothing")


def holds_polyhedra(path: Path) -> bool:
    """Return whether a VTK XML grid has lists of polyhedron faces.

    Parameters
    ----------
    path : Path
        A file that `check_vtk_xml` passed.

    Returns
    -------
    bool
        True when such an array is declared, empty or not.
    """
    with path.open("rb") as stream, mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ) as data:
        end = data.find(b"<AppendedData")
        return _POLYHEDRA.search(data, 0, end if end >= 0 else len(data)) is not None


def _head(data: mmap.mmap, path: Path) -> dict[str, str]:
    """Return the attributes of the tag that opens the file."""
    start = data.find(b"<VTKFile", 0, 65536)
    if start < 0:
        raise FileError("is no VTK XML file", str(path), "Check that the suffix tells what the file is")
    return _attributes(data[start : data.find(b">", start)].decode("utf-8", "replace"))


def _find(data: mmap.mmap, mark: bytes, start: int) -> int:
    at = data.find(mark, start)
    if at < 0:
        raise ValueError(f"no '{mark.decode()}' after byte {start}")
    return at


def _attributes(text: str) -> dict[str, str]:
    return {key: html.unescape(one or other) for key, one, other in _ATTRIBUTE.findall(text)}


def _layout(data: mmap.mmap, head: dict[str, str]) -> _Layout:
    at = data.find(b"<AppendedData")
    encoding, appended_at, appended_end = "raw", len(data), len(data)
    if at >= 0:
        end = data.find(b">", at)
        encoding = _attributes(data[at:end].decode("utf-8", "replace")).get("encoding", "base64")
        appended_at = _find(data, b"_", end) + 1
        appended_end = data.rfind(b"</AppendedData")
    return _Layout(
        order=">" if head.get("byte_order") == "BigEndian" else "<",
        word=8 if head.get("header_type") == "UInt64" else 4,
        compressor=head.get("compressor", ""),
        encoding=encoding,
        appended_at=appended_at,
        appended_end=appended_end,
    )


def _arrays(data: mmap.mmap, layout: _Layout) -> Iterator[_Declared]:
    piece: dict[str, str] = {}
    place = ""
    for tag in _TAG.finditer(data, 0, layout.appended_at):
        closing, name = tag[1], tag[2].decode()
        if closing:
            place = place if name in ("DataArray", "Array", "Piece") else ""
            continue
        attributes = _attributes(tag[3].decode("utf-8", "replace"))
        if name == "Piece":
            piece = attributes
        elif name not in ("DataArray", "Array"):
            # <PointData/> with nothing in it has no closing tag
            place = "" if tag[3].endswith(b"/") else name
        elif place:
            needed = _needed(piece, place, attributes)
            yield _Declared(place, attributes, needed, tag.end())


def _needed(piece: dict[str, str], place: str, attributes: dict[str, str]) -> int | None:
    """Return how many tuples an array must have."""
    cells = sum(int(piece.get(f"NumberOf{kind}", "0")) for kind in ("Cells", "Verts", "Lines", "Strips", "Polys"))
    if place in ("PointData", "Points"):
        return int(piece["NumberOfPoints"])
    if place == "CellData":
        return cells
    if attributes.get("Name") in ("offsets", "types"):
        return int(piece["NumberOfPolys"]) if place == "Polys" else cells
    return None  # connectivity: its length is in the offsets


def _check_length(declared: _Declared, data: mmap.mmap, layout: _Layout, where: str) -> None:
    if declared.attributes.get("type") == "String":
        _check_words(declared, data, layout, where)
        return
    size = _BYTES.get(declared.attributes.get("type", ""))
    if size is None:
        return
    if declared.values is None:
        if declared.attributes.get("format", "ascii") != "ascii":
            _declared_bytes(declared, data, layout, where)
        return
    needed = declared.values * declared.components
    if declared.attributes.get("format", "ascii") == "ascii":
        held = float(_count_tokens(data, declared.inline_at))
    else:
        held = _declared_bytes(declared, data, layout, where) / size
    if held == needed:
        return
    shape = f"{declared.values} {'points' if declared.place in ('PointData', 'Points') else 'cells'}"
    if declared.components > 1:
        shape += f" of {declared.components} components"
    if declared.place in ("PointData", "CellData"):
        raise FieldError(
            f"array {declared.name!r} holds {held:.10g} values, but there are {shape}", where, "Export it again"
        )
    raise FileError(
        f"{declared.name!r} of {declared.place} holds {held:.10g} values, but there are {shape}",
        where,
        "The file is damaged; export it again",
    )


def _check_words(declared: _Declared, data: mmap.mmap, layout: _Layout, where: str) -> None:
    """Raise if an array of text has more words than places: VTK writes the others beyond its memory."""
    if declared.attributes.get("format", "ascii") == "ascii":
        tokens = data[declared.inline_at : _find(data, b"<", declared.inline_at)].split()
        held = sum(1 for token in tokens if not token.strip(b"0"))
    else:
        count = _declared_bytes(declared, data, layout, where)
        start, base64 = _start_of(declared, data, layout)
        if layout.compressed:
            if layout.compressor != "vtkZLibDataCompressor":
                return
            text = _unpacked(data, start, layout, base64, count)
        elif base64:
            stored = data[start : start + -(-(layout.word + count) // 3) * 4]
            text = binascii.a2b_base64(stored)[layout.word :]
        else:
            text = data[start + layout.word : start + layout.word + count]
        held = text.count(b"\0")
    if declared.values is not None and held != declared.values * declared.components:
        raise FieldError(
            f"array {declared.name!r} holds {held} words, but there are {declared.values} places for them",
            where,
            "Export it again",
        )


def _unpacked(data: mmap.mmap, start: int, layout: _Layout, base64: bool, count: int) -> bytes:
    """Return an array in one piece; its lengths have been checked."""
    head = _words(data, start, 3, layout, base64)
    if len(head) < 3 or not head[0]:
        return b""
    table = (3 + head[0]) * layout.word
    sizes = _words(data, start, 3 + head[0], layout, base64)[3:]
    at = start + (-(-table // 3) * 4 if base64 else table)
    stored = data[at : at + (-(-sum(sizes) // 3) * 4 if base64 else sum(sizes))]
    packed = binascii.a2b_base64(stored) if base64 else stored
    parts, first = [], 0
    for size in sizes:
        parts.append(zlib.decompressobj().decompress(packed[first : first + size], count + 1))
        first += size
    return b"".join(parts)


def _count_tokens(data: mmap.mmap, start: int) -> int:
    text = np.frombuffer(data[start : _find(data, b"<", start)], dtype=np.uint8)
    dark = text > ord(" ")
    return int(np.count_nonzero(dark[1:] & ~dark[:-1])) + int(dark[:1].sum())


def _start_of(declared: _Declared, data: mmap.mmap, layout: _Layout) -> tuple[int, bool]:
    """Return the first byte of an array that is not in ASCII, and whether it is in base64."""
    if declared.attributes["format"] == "appended":
        return layout.appended_at + int(declared.attributes["offset"]), layout.encoding == "base64"
    start = declared.inline_at
    while data[start : start + 1].isspace():
        start += 1
    return start, True


def _declared_bytes(declared: _Declared, data: mmap.mmap, layout: _Layout, where: str) -> int:
    """Return how many bytes an array has once unpacked, as its length words say, which the file must hold."""
    start, base64 = _start_of(declared, data, layout)
    end = layout.appended_end if declared.attributes["format"] == "appended" else _find(data, b"<", start)
    words = _words(data, start, 3 if layout.compressed else 1, layout, base64)
    if not layout.compressed:
        # the length is encoded together with its data
        count = words[0] if words else 0
        stop = start + _stored(layout.word + count, base64)
    elif len(words) == 3 and words[0] > 0:
        blocks, full, last = words
        if full == 0 or last > full:  # VTK would divide by it
            raise FileError(
                f"array {declared.name!r} is packed in blocks of {full} bytes, with {last} in the last",
                where,
                "The file is damaged; export it again",
            )
        count = blocks * full if last == 0 else (blocks - 1) * full + last
        table = (3 + blocks) * layout.word
        stop = start + _stored(table, base64)
        if stop <= end:
            packed = sum(_words(data, start, 3 + blocks, layout, base64)[3:])
            stop += _stored(packed, base64)
            if count > _MOST_PACKED * packed:
                raise FileError(
                    f"array {declared.name!r} announces {count} bytes, but {packed} are stored", where, _CUT_SHORT
                )
    else:  # no block at all: one zero word and nothing else
        count, stop = 0, start
    if stop > end:
        what = "the appended data end" if end == layout.appended_end else "its text ends"
        begin = layout.appended_at if end == layout.appended_end else start
        raise FileError(
            f"{what} before array {declared.name!r} does: {stop - begin} bytes are needed, {end - begin} are there",
            where,
            _CUT_SHORT,
        )
    return count


def _stored(count: int, base64: bool) -> int:
    # 4 characters carry 3 bytes; what fills the last four may be missing
    return -(-count * 4 // 3) if base64 else count


def _words(data: mmap.mmap, start: int, count: int, layout: _Layout, base64: bool) -> list[int]:
    """Return the length words at the head of an array, as many as are there."""
    length = count * layout.word
    stored = data[start : start + (-(-length // 3) * 4 if base64 else length)]
    head = binascii.a2b_base64(stored) if base64 else stored
    found: list[int] = np.frombuffer(
        head[: min(length, len(head)) // layout.word * layout.word], f"{layout.order}u{layout.word}"
    ).tolist()
    return found
