"""What the blocks of a legacy VTK file announce, held against what the file can hold.

VTK's reader takes memory by the counts it finds, and walks lists of cells by the lengths in them: with damaged
ones it ends the process.
"""

from __future__ import annotations

import re
import warnings
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FileError

__all__ = ["KEYWORD", "require_room", "without_notes"]

KEYWORD = re.compile(rb"\n[ \t]*(?!(?:nan|inf)\b)[A-Za-z_][^\r\n]*", re.IGNORECASE)
"""A line that starts with a letter opens a block, unless it is a value that is not finite; with the newline before."""

_SIZES = {
    **dict.fromkeys((b"char", b"signed_char", b"unsigned_char"), 1),
    **dict.fromkeys((b"short", b"unsigned_short"), 2),
    **dict.fromkeys((b"int", b"unsigned_int", b"float", b"vtkidtype"), 4),
    **dict.fromkeys((b"long", b"unsigned_long", b"double", b"vtktypeint64", b"vtktypeuint64"), 8),
}
_CELLS = (b"POLYGONS", b"TRIANGLE_STRIPS", b"LINES", b"VERTICES", b"CELLS")
_PER_TUPLE = {
    **dict.fromkeys((b"VECTORS", b"NORMALS"), 3),
    b"TENSORS": 9,
    b"TENSORS6": 6,
    **dict.fromkeys((b"GLOBAL_IDS", b"PEDIGREE_IDS", b"EDGE_FLAGS"), 1),
}
_STRINGS = (b"string", b"utf8_string")
_OPENING = (*_CELLS, *_PER_TUPLE, b"POINT_DATA", b"CELL_DATA", b"FIELD", b"SCALARS", b"METADATA")
_VERSION = re.compile(rb"[^\r\n]*Version\s+(\d{1,2})\.(\d{1,2})(?!\S)", re.IGNORECASE)
_TYPE = re.compile(rb"\w+")
_WORD = re.compile(rb"[A-Z_0-9]+")
_BLANK_LINE = re.compile(rb"\n[ \t\r]*\n")
_SILENT = (b"DATASET", b"DIMENSIONS", b"ORIGIN", b"SPACING", b"ASPECT_RATIO", b"ASCII", b"BINARY")
_DAMAGED = "It is damaged, was cut short or is still being written; export or copy it again"


@dataclass
class _Reading:
    """What earlier lines say of the blocks that follow."""

    where: str
    modern: bool  # cells as offsets and connectivity, from version 5.1 on
    binary: bool
    tuples: int = 0
    cells: tuple[int, int] = (0, 0)
    scalars: tuple[int, bytes] | None = None
    arrays: int = 0  # of a FIELD, still to come
    counts: dict[bytes, int] = field(default_factory=dict)

    def block(self, words: list[bytes], room: int) -> tuple[int, bytes] | None:
        """Return how many values of which type follow a line; None for a line that is not known."""
        try:
            found = self._block(words)
        except FileError:
            raise
        except (ValueError, IndexError) as error:
            line = b" ".join(words)[:60].decode("utf-8", "replace")
            raise FileError(f"its line '{line}' cannot be understood", self.where, _DAMAGED) from error
        if found is not None and not _TYPE.fullmatch(found[1]):
            raise FileError(f"has values of the type {found[1][:40]!r}", self.where, _DAMAGED)
        # an array of a FIELD has at least a line
        self.require(words, 8 * self.arrays, room)
        return found

    def _block(self, words: list[bytes]) -> tuple[int, bytes] | None:
        word = words[0].upper()
        scalars, self.scalars = self.scalars, None
        found = (0, b"int")
        if self.is_array(words):
            self.arrays -= 1
            return int(words[1]) * int(words[2]), words[3]
        if self.arrays > 0 and self.binary:
            raise FileError(f"has {self.arrays} arrays less than it announces", self.where, _DAMAGED)
        if word == b"POINTS":
            found = 3 * self._number(words[1]), words[2]
        elif word in _CELLS:
            self.cells = self._number(words[1]), self._number(words[2])
            found = (0 if self.modern else self.cells[1]), b"int"
            self.counts[word] = max(0, self.cells[0] - 1) if self.modern else self.cells[0]
        elif word in (b"OFFSETS", b"CONNECTIVITY"):
            found = self.cells[word == b"CONNECTIVITY"], words[1]
        elif word == b"CELL_TYPES":
            self.counts[word] = self._number(words[1])
            found = self.counts[word], b"int"
        elif word in (b"POINT_DATA", b"CELL_DATA"):
            self.tuples = self._number(words[1])
        elif word == b"SCALARS":
            self.scalars = (self._number(words[3]) if len(words) > 3 else 1), words[2]
        elif word == b"LOOKUP_TABLE":
            if scalars is None:
                found = 4 * self._number(words[2]), b"unsigned_char"
            else:
                found = scalars[0] * self.tuples, scalars[1]
        elif word in _PER_TUPLE:
            found = _PER_TUPLE[word] * self.tuples, words[2]
        elif word == b"TEXTURE_COORDINATES":
            found = self._number(words[2]) * self.tuples, words[3]
        elif word == b"COLOR_SCALARS":
            found = self._number(words[2]) * self.tuples, b"unsigned_char"
        elif word == b"FIELD":
            self.arrays = self._number(words[2])
        elif word.endswith(b"_COORDINATES"):
            found = self._number(words[1]), words[2]
        elif word not in _SILENT:
            return None
        return found

    def is_array(self, words: list[bytes]) -> bool:
        """Return whether a line opens an array of a FIELD."""
        return self.arrays > 0 and len(words) == 4 and words[1].isdigit() and words[2].isdigit()

    def _number(self, word: bytes) -> int:
        number = int(word)
        if number < 0:
            raise FileError(f"announces {number} of something, less than none", self.where, _DAMAGED)
        return number

    def require(self, words: list[bytes], needed: int, room: int) -> None:
        """Raise if a block needs more bytes than are left."""
        if needed > room:
            line = b" ".join(words)[:60].decode("utf-8", "replace")
            raise FileError(f"its block '{line}' needs {needed} bytes, {room} are left", self.where, _DAMAGED)

    def require_cells(self, word: bytes, values: NDArray[Any]) -> None:
        """Raise if the lengths of a list of cells do not add up to it."""
        count, size = self.cells
        sound = True
        if word == b"OFFSETS":
            if values.size:
                sound = bool(values[0] == 0 and values[-1] == size and (values[1:] >= values[:-1]).all())
        elif word in _CELLS and count:
            first = int(values[0]) + 1 if values.size else 0
            if size != first * count or first < 1 or not (values[::first] == first - 1).all():
                sound = _adds_up(values.astype(np.int64).tolist(), count)
        if not sound:
            raise FileError("has a list of cells whose lengths do not add up", self.where, _DAMAGED)


def _adds_up(values: list[int], count: int) -> bool:
    at = 0
    for _ in range(count):
        if at >= len(values) or values[at] < 0:
            return False
        at += values[at] + 1
    return at == len(values)


def without_notes(data: Any, blocks: Sequence[re.Match[bytes]]) -> list[tuple[re.Match[bytes], int]]:
    """Return the blocks of an ASCII file without VTK's notes on arrays, which can look like arrays themselves.

    Parameters
    ----------
    data : bytes or mmap
        The file.
    blocks : sequence of re.Match
        Every `KEYWORD` of it.

    Returns
    -------
    list of (re.Match, int)
        Those outside of METADATA, and where the values after each end.
    """
    kept: list[tuple[re.Match[bytes], int]] = []
    skipped = 0
    for number, match in enumerate(blocks):
        if match.start() < skipped:
            continue
        if match[0].split()[0].upper() == b"METADATA":
            blank = _BLANK_LINE.search(data, match.start())
            skipped = blank.end() if blank else len(data)
        else:
            kept.append((match, blocks[number + 1].start() if number + 1 < len(blocks) else len(data)))
    return kept


def require_room(data: Any, body: int, blocks: Sequence[re.Match[bytes]] | None, where: str) -> None:
    """Check counts and lists of cells of a legacy VTK file before its reader trusts them.

    Parameters
    ----------
    data : bytes or mmap
        The file.
    body : int
        Where the third line ends.
    blocks : sequence of re.Match, or None
        Every `KEYWORD` of an ASCII file from there on; None for a binary file.
    where : str
        File, for messages.

    Raises
    ------
    FileError
        A block of more values than the file can hold, a negative count, or
        cells whose lengths do not add up. Lines that are not known end the
        check: VTK stops at them too.
    """
    version = _VERSION.match(data[:256].lstrip())
    if version is None:
        raise FileError("its first line does not tell the version of the format", where, _DAMAGED)
    reading = _Reading(where, (int(version[1]), int(version[2])) >= (5, 1), blocks is None)
    if blocks is None:
        _binary(data, body, reading)
    else:
        _text(data, blocks, reading)
    types = reading.counts.get(b"CELL_TYPES")
    if types is not None and types != reading.counts.get(b"CELLS", types):
        raise FileError(f"has {reading.counts[b'CELLS']} cells, but types of {types}", where, _DAMAGED)


def _text(data: Any, blocks: Sequence[re.Match[bytes]], reading: _Reading) -> None:
    strings = False
    for match, end in without_notes(data, blocks):
        words = match[0].split()
        word = words[0].upper()
        if strings and word not in _OPENING and not reading.is_array(words):
            continue  # the words of an array of text
        room = len(data) - match.end()
        found = reading.block(words, room)
        if found is None:
            continue
        strings = found[1].lower() in _STRINGS
        # each value takes a digit and, but for the last, a blank
        reading.require(words, found[0] if strings else max(0, 2 * found[0] - 1), room)
        if (word in _CELLS or word == b"OFFSETS") and found[0]:
            values = _whole(data[match.end() : end], reading)
            if values.size >= found[0]:
                reading.require_cells(word, values[: found[0]])


def _whole(text: bytes, reading: _Reading) -> NDArray[np.int64]:
    try:
        with warnings.catch_warnings():
            # NumPy before 2.3 only warns when it stops at a word that is no number
            warnings.simplefilter("error", DeprecationWarning)
            return np.fromstring(text, np.int64, sep=" ")
    except (ValueError, DeprecationWarning) as error:
        raise FileError("has a list of cells with a word that is no whole number", reading.where, _DAMAGED) from error


def _binary(data: Any, at: int, reading: _Reading) -> None:
    end = len(data)
    while True:
        while at < end and data[at : at + 1].isspace():
            at += 1
        stop = data.find(b"\n", at)
        if at >= end or stop < 0:
            if reading.arrays:
                raise FileError(f"has {reading.arrays} arrays less than it announces", reading.where, _DAMAGED)
            return
        words = data[at : min(stop, at + 4096)].split()
        at = stop + 1
        word = words[0].upper()
        if not _WORD.fullmatch(word) and not reading.arrays:
            raise FileError("has binary data of another length than its counts say", reading.where, _DAMAGED)
        if word == b"METADATA":
            at = data.find(b"\n\n", stop - 1)
            if at < 0:
                return
            continue
        found = reading.block(words, end - at)
        if found is None:
            return
        count, kind = found[0], found[1].lower()
        if kind in _STRINGS:
            reading.require(words, count, end - at)
            for _ in range(count):
                # the two highest bits tell over how many bytes the length runs: 8, 4, 2 or 1
                width = 8 >> (data[at] >> 6)
                length = int.from_bytes(data[at : at + width], "big") & ((1 << (8 * width - 2)) - 1)
                at += width
                reading.require(words, length, end - at)
                at += length
            continue
        if kind != b"bit" and kind not in _SIZES:
            return
        size = (count + 7) // 8 if kind == b"bit" else count * _SIZES[kind]
        reading.require(words, size, end - at)
        if (word in _CELLS or word == b"OFFSETS") and count:
            reading.require_cells(word, np.frombuffer(data[at : at + size], f">i{_SIZES[kind]}"))
        at += size
