"""Values of a .msh file by the numbers of its nodes and elements: its general reader takes them as they come.

The layout is that of the open MSH formats 2.2, 4.0 and 4.1: sections ``$NodeData`` and ``$ElementData`` list a
number and its values a row, in any order.
"""

from __future__ import annotations

import mmap
import re
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError, FileError

__all__ = ["place_by_number"]

_FORMAT = re.compile(rb"\$MeshFormat\s+(\d+)(?:\.(\d+))?\s+([01])\s+(\d+)")
_DATA = re.compile(rb"^\$(NodeData|ElementData)[ \t\r]*\n", re.MULTILINE)
_DAMAGED = "It is damaged; export it again"

Numbers = NDArray[np.float64]


@dataclass(frozen=True)
class _File:
    data: Any
    where: str
    version: tuple[int, int]
    text: bool
    word: int

    def section(self, name: str) -> tuple[int, int]:
        """Return where the content of a section begins and ends."""
        begin, end = self.data.find(b"\n$" + name.encode() + b"\n"), self.data.find(b"\n$End" + name.encode())
        if begin < 0:
            begin = self.data.find(b"\n$" + name.encode() + b"\r\n")
        if begin < 0 or end < 0:
            raise FileError(f"has values, but no section ${name}", self.where, _DAMAGED)
        return self.data.find(b"\n", begin + 1) + 1, end


def place_by_number(path: Path, mesh: Any) -> None:
    """Give each node and cell of a mesh the values that the file lists under its number.

    Parameters
    ----------
    path : Path
        A .msh file of version 2 or 4.
    mesh : meshio.Mesh
        What was read of it; its arrays are put in order.

    Raises
    ------
    FieldError
        A number that no node or element has, or that occurs twice.
    FileError
        The numbers cannot be told.
    """
    where = str(path)
    with path.open("rb") as stream, mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ) as data:
        head = _FORMAT.search(data[:4096])
        found = [] if head is None else list(_DATA.finditer(data))
        if head is None or not found:
            return
        version = int(head[1]), int(head[2] or (1 if head[1] == b"4" else 2))
        file = _File(data, where, version, head[3] == b"0", int(head[4]))
        try:
            rows = {}
            for match in found:
                name, numbers = _numbers_of_values(file, match.end())
                # of several sections of one name, the last is what was read
                rows[match[1], name] = numbers
            on_nodes = {name: numbers for (kind, name), numbers in rows.items() if kind == b"NodeData"}
            on_cells = {name: numbers for (kind, name), numbers in rows.items() if kind == b"ElementData"}
            if on_nodes:
                owners = _node_numbers(file)
                for name, numbers in on_nodes.items():
                    order = _order(owners, numbers, name, "node", where)
                    if order is not None:
                        mesh.point_data[name] = np.asarray(mesh.point_data[name])[order]
            if on_cells:
                owners = _element_numbers(file, [np.shape(block.data)[1] for block in mesh.cells])
                ends = np.cumsum([len(block.data) for block in mesh.cells])[:-1]
                for name, numbers in on_cells.items():
                    order = _order(owners, numbers, name, "element", where)
                    if order is not None:
                        mesh.cell_data[name] = np.split(np.concatenate(mesh.cell_data[name])[order], ends)
        except (ValueError, IndexError, KeyError, OverflowError) as error:
            if isinstance(error, FieldError | FileError):
                raise
            raise FileError(f"the numbers of its nodes and values cannot be told ({error})", where, _DAMAGED) from error


def _order(owners: Numbers, numbers: Numbers, name: str, kind: str, where: str) -> NDArray[np.intp] | None:
    """Return which row of values each owner has; None where they are in order already."""
    if owners.shape == numbers.shape and bool((owners == numbers).all()):
        return None
    order = np.argsort(numbers, kind="stable")
    listed = numbers[order]
    twice = np.flatnonzero(listed[1:] == listed[:-1])
    if twice.size:
        raise FieldError(f"array {name!r} lists {kind} {listed[twice[0]]:.0f} twice", where, _DAMAGED)
    at = np.minimum(np.searchsorted(listed, owners), max(listed.size - 1, 0))
    missing = np.ones(owners.size, dtype=np.bool_) if not listed.size else listed[at] != owners
    if missing.any():
        first = owners[np.flatnonzero(missing)[0]]
        raise FieldError(
            f"array {name!r} has no value of {kind} {first:.0f}, and of {int(missing.sum())} in all",
            where,
            f"Export a value for every {kind}",
        )
    if listed.size > owners.size:
        raise FieldError(
            f"array {name!r} lists {listed.size} values, but there are {owners.size} {kind}s", where, _DAMAGED
        )
    return order[at]


def _numbers_of_values(file: _File, at: int) -> tuple[str, Numbers]:
    """Return the name of a section of values, and the number of each row."""
    lines = _Lines(file.data, at)
    names = [lines.next().strip().decode("utf-8", "replace").replace('"', "") for _ in range(lines.number())]
    for _ in range(lines.number()):
        lines.next()
    whole = [lines.number() for _ in range(lines.number())]
    components, count = whole[1], whole[2]
    if components < 0 or count < 0 or (1 + components) * count > len(file.data):
        raise ValueError(f"{count} rows of {components} values")
    if file.text:
        values = _floats(file.data[lines.at : file.data.find(b"$End", lines.at)])
        return names[0], values[: count * (1 + components)].reshape(count, 1 + components)[:, 0]
    kind = np.dtype([("number", "i4"), ("values", "f8", (components,))])
    return names[0], np.frombuffer(file.data[lines.at : lines.at + count * kind.itemsize], kind)["number"].astype(
        np.float64
    )


class _Lines:
    def __init__(self, data: Any, at: int) -> None:
        self.data, self.at = data, at
        self._left = 1000

    def next(self) -> bytes:
        end = self.data.find(b"\n", self.at)
        self._left -= 1
        if end < 0 or self._left < 0:
            raise ValueError("a head without an end")
        line: bytes = self.data[self.at : end]
        self.at = end + 1
        return line

    def number(self) -> int:
        return int(self.next())


def _floats(text: bytes) -> Numbers:
    return np.array(text.split(), dtype=np.float64)


def _node_numbers(file: _File) -> Numbers:
    """Return the numbers of all nodes, in the order of the file."""
    begin, end = file.section("Nodes")
    if file.version[0] < 4:
        count = int(file.data[begin : file.data.find(b"\n", begin)])
        if file.text:
            values = _floats(file.data[begin:end])
            return values[1 : 1 + 4 * count].reshape(count, 4)[:, 0]
        kind = np.dtype([("number", "i4"), ("place", "f8", (3,))])
        begin = file.data.find(b"\n", begin) + 1
        return np.frombuffer(file.data[begin : begin + count * kind.itemsize], kind)["number"].astype(np.float64)
    separate = file.version >= (4, 1)
    return _joined(
        part[0] if separate else part[1].reshape(-1, 4)[:, 0] for part in _blocks(file, begin, end, separate, None)
    )


def _element_numbers(file: _File, sizes: list[int]) -> Numbers:
    """Return the numbers of all elements, in the order of the file."""
    begin, end = file.section("Elements")
    if file.version[0] < 4 and file.text:
        lines = file.data[begin:end].splitlines()[1:]
        return np.array([float(line.split(None, 1)[0]) for line in lines if line.strip()])
    if file.version[0] < 4:
        return _joined(_binary_elements(file, file.data.find(b"\n", begin) + 1, end))
    return _joined(part[1][:, 0] for part in _blocks(file, begin, end, False, sizes))


def _joined(parts: Iterator[Numbers]) -> Numbers:
    return np.concatenate([np.zeros(0), *parts])


def _binary_elements(file: _File, at: int, end: int) -> Iterator[Numbers]:
    from meshio._common import num_nodes_per_cell
    from meshio.gmsh.common import _gmsh_to_meshio_type

    while at + 12 <= end:
        kind, count, tags = np.frombuffer(file.data[at : at + 12], "i4").tolist()
        width = 1 + tags + num_nodes_per_cell[_gmsh_to_meshio_type[kind]]
        at += 12
        rows = np.frombuffer(file.data[at : at + 4 * width * count], "i4").reshape(count, width)
        at += 4 * width * count
        yield rows[:, 0].astype(np.float64)


def _blocks(
    file: _File, at: int, end: int, separate: bool, sizes: list[int] | None
) -> Iterator[tuple[Numbers, NDArray[Any]]]:
    """Yield the blocks of a section of version 4: numbers listed before the places, or rows."""
    if not file.text and file.version < (4, 1):
        raise ValueError("binary data of version 4.0")
    values = _floats(file.data[at:end]) if file.text else np.zeros(0)
    words = f"u{file.word}"
    if file.text:
        blocks, position = int(values[0]), 4 if file.version >= (4, 1) else 2
    else:
        blocks, position = int(np.frombuffer(file.data[at : at + file.word], words)[0]), at + 4 * file.word
    for number in range(min(blocks, end - at)):
        width = 3 if sizes is None and separate else 4 if sizes is None else 1 + sizes[number]
        if file.text:
            count = int(values[position + 3])
            position += 4
            numbers = values[position : position + count] if separate else values[:0]
            position += count if separate else 0
            rows = values[position : position + count * width].reshape(count, width)
            position += count * width
        else:
            position += 12
            count = int(np.frombuffer(file.data[position : position + file.word], words)[0])
            position += file.word
            length = count * file.word * (1 if separate else width)
            flat = np.frombuffer(file.data[position : position + length], words).astype(np.float64)
            position += length + (24 * count if separate else 0)
            numbers, rows = (flat, flat[:0]) if separate else (flat[:0], flat.reshape(count, width))
        yield numbers, rows
