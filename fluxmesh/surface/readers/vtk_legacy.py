"""Whether a legacy VTK file is whole: VTK itself reads a cut one in ASCII without a word."""

from __future__ import annotations

import mmap
import re
from pathlib import Path
from typing import Any

import numpy as np

from fluxmesh.errors import FileError
from fluxmesh.surface.readers.ending import ending_notes
from fluxmesh.surface.readers.vtk_legacy_blocks import KEYWORD, require_room, without_notes

__all__ = ["check_vtk_legacy", "legacy_holds_polyhedra"]

_COMPONENTS = {b"VECTORS": 3, b"NORMALS": 3, b"TENSORS": 9, b"TENSORS6": 6, b"GLOBAL_IDS": 1, b"PEDIGREE_IDS": 1}


def check_vtk_legacy(path: Path) -> tuple[str, ...]:
    """Check that a legacy VTK file can hold what it announces; in ASCII, that its last block does.

    Parameters
    ----------
    path : Path
        An existing file, not empty.

    Returns
    -------
    tuple of str
        What to note: an ASCII file that may be cut within its last number.

    Raises
    ------
    FileError
        The file is no legacy VTK file, announces more than it can hold, or
        its last block is cut short.
    """
    with path.open("rb") as stream, mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ) as data:
        head = data[:1024].splitlines()
        if not head[0].lstrip().lower().startswith(b"# vtk datafile"):
            raise FileError(
                "is no legacy VTK file: its first line is not '# vtk DataFile ...'",
                str(path),
                "Check that the suffix tells what the file is",
            )
        kind = head[2].strip().upper() if len(head) > 2 else b""
        body = data.find(b"\n", data.find(head[2], len(head[0]))) if kind else -1
        text = kind.startswith(b"ASCII")
        if body >= 0 and (text or kind.startswith(b"BINARY")):
            blocks = list(KEYWORD.finditer(data, body)) if text else None
            if blocks:
                _require_last_block(data, blocks, str(path))
            require_room(data, body, blocks, str(path))
    return ending_notes(path) if text else ()


def _require_last_block(data: Any, blocks: list[re.Match[bytes]], where: str) -> None:
    """Raise if the last block of an ASCII file holds fewer values than it announces."""
    kept = without_notes(data, blocks)
    lines = [block[0].split() for block, _ in kept]
    needed = _values_needed(lines) if lines else None
    if needed is None:
        return
    last, end = kept[-1]
    held = len(data[last.end() : end].split())
    if held < needed:
        raise FileError(
            f"its last block '{b' '.join(lines[-1]).decode('utf-8', 'replace')}' holds {held} values of {needed}",
            where,
            "It was cut short or is still being written; export or copy it again",
        )


def legacy_holds_polyhedra(path: Path) -> bool:
    """Return whether a legacy VTK grid has cells that are polyhedra.

    Parameters
    ----------
    path : Path
        A file that `check_vtk_legacy` passed.

    Returns
    -------
    bool
        True also where the types of the cells cannot be told.
    """
    with path.open("rb") as stream, mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ) as data:
        at = data.rfind(b"CELL_TYPES")
        if at < 0:
            # a damaged word, or no grid
            return b"UNSTRUCTURED_GRID" in data[:4096]
        end = data.find(b"\n", at)
        words = data[at:end].split()
        if len(words) < 2 or not words[1].isdigit():
            return True
        count = int(words[1])
        if data[:1024].splitlines()[2].strip().upper().startswith(b"ASCII"):
            numbers = data[end : end + 16 * count].split()[:count]
            return b"42" in numbers
        stored = data[end + 1 : end + 1 + 4 * count]
        return bool((np.frombuffer(stored[: len(stored) // 4 * 4], dtype=">i4") == 42).any())


def _values_needed(lines: list[list[bytes]]) -> int | None:
    """Return how many values must follow the last keyword line, None when it does not say."""
    last, word = lines[-1], lines[-1][0].upper()
    try:
        if word == b"POINTS":
            return 3 * int(last[1])
        if word in (b"POLYGONS", b"TRIANGLE_STRIPS", b"LINES", b"VERTICES", b"CELLS"):
            return int(last[2])
        if word == b"CELL_TYPES":
            return int(last[1])
        if word in (b"OFFSETS", b"CONNECTIVITY"):
            owner = next(line for line in reversed(lines) if line[0].upper() not in (b"OFFSETS", b"CONNECTIVITY"))
            return int(owner[1] if word == b"OFFSETS" else owner[2])
        if word in _COMPONENTS:
            return _COMPONENTS[word] * _tuples(lines)
        if word == b"LOOKUP_TABLE" and lines[-2][0].upper() == b"SCALARS":
            return _tuples(lines) * (int(lines[-2][3]) if len(lines[-2]) > 3 else 1)
        if len(last) == 4 and last[1].isdigit() and last[2].isdigit():  # an array of a FIELD
            return int(last[1]) * int(last[2])
    except (ValueError, IndexError, StopIteration):
        return None  # VTK words the error of a damaged line better
    return None


def _tuples(lines: list[list[bytes]]) -> int:
    return next(int(line[1]) for line in reversed(lines) if line[0].upper() in (b"POINT_DATA", b"CELL_DATA"))
