"""Whether all that a .msh file announces was read: its general reader drops what a damaged count leaves over."""

from __future__ import annotations

import mmap
import re
import struct
from pathlib import Path
from typing import Any

import numpy as np

from fluxmesh.errors import FileError

__all__ = ["require_gmsh_counts"]

_FORMAT = re.compile(rb"\$MeshFormat\s+(\d+)(?:\.(\d+))?\s+([01])\s+(\d+)")
_DAMAGED = "It is damaged; export it again"
_CHUNK = 1 << 24


def require_gmsh_counts(path: Path, points: int, cells: list[tuple[int, int]]) -> None:
    """Hold what was read of a .msh file (versions 2 to 4.1) against the counts of its sections, and their length.

    Parameters
    ----------
    path : Path
        The file.
    points : int
        Points that were read.
    cells : list of (int, int)
        Number of cells, and points of each, of every block that was read.

    Raises
    ------
    FileError
        Fewer or more points or cells than announced, or a section of another
        length than they take.
    """
    where = str(path)
    with path.open("rb") as stream, mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ) as data:
        version = _FORMAT.search(data[:4096])
        if version is None:
            return
        numbers = int(version[1]), int(version[2] or (1 if version[1] == b"4" else 2))
        text, size = version[3] == b"0", int(version[4])
        read = {"Nodes": points, "Elements": sum(count for count, _ in cells)}
        for section, count in read.items():
            begin, end = data.find(f"${section}".encode()), data.find(f"$End{section}".encode())
            begin = data.find(b"\n", begin) + 1 if begin >= 0 else 0
            if begin == 0 or end < 0:
                continue
            try:
                blocks, announced = _announced(data, begin, numbers, text, size)
            except (ValueError, IndexError, struct.error) as error:
                raise FileError(f"its section ${section} does not start with its counts", where, _DAMAGED) from error
            if announced != count:
                raise FileError(f"announces {announced} of its {section}, {count} were read", where, _DAMAGED)
            if numbers >= (4, 1):
                values = 4 * count if section == "Nodes" else sum(k * (1 + each) for k, each in cells)
                if text:
                    held, needed = _words(data, begin, end), 4 + 4 * blocks + values
                elif section == "Nodes":
                    held, needed = end - begin, 4 * size + blocks * (12 + size) + count * (size + 24)
                else:
                    held, needed = end - begin, 4 * size + blocks * (12 + size) + values * size
                # a newline may end binary data
                if held != needed and (text or held != needed + 1):
                    unit = "numbers" if text else "bytes"
                    raise FileError(
                        f"its section ${section} holds {held} {unit} where {needed} are needed", where, _DAMAGED
                    )
            elif numbers[0] == 2 and text:
                held = _lines(data, begin, end) - 1
                if held != count:
                    raise FileError(f"announces {count} of its {section}, and lists {held}", where, _DAMAGED)


def _announced(data: Any, begin: int, version: tuple[int, int], text: bool, size: int) -> tuple[int, int]:
    """Return the number of blocks of a section, 1 before version 4, and of what it lists."""
    if version[0] < 4 or text:
        words = data[begin : data.find(b"\n", begin)].split()
        return (int(words[0]), int(words[1])) if version[0] >= 4 else (1, int(words[0]))
    width = size if version >= (4, 1) else 8
    blocks, count = struct.unpack_from("<QQ" if width == 8 else "<II", data, begin)
    return blocks, count


def _words(data: Any, begin: int, end: int) -> int:
    """Count words without making them."""
    count, blank = 0, True
    for start in range(begin, end, _CHUNK):
        ink = np.frombuffer(data[start : min(end, start + _CHUNK)], np.uint8) > 32
        count += int(np.count_nonzero(ink[1:] & ~ink[:-1])) + int(blank and bool(ink[0]))
        blank = not ink[-1]
    return count


def _lines(data: Any, begin: int, end: int) -> int:
    """Count lines that are not blank."""
    return sum(1 for line in data[begin:end].splitlines() if line.strip())
