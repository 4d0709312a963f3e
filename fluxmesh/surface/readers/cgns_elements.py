"""Element sections of an unstructured CGNS zone, sorted into faces and volume cells.

Type numbers and the order of points are those of the SIDS (CGNS documentation,
"Unstructured Grid Element Numbering Conventions"; the numbers from memory of its
list ElementType_t, checked against files that the CGNS library wrote).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FileError
from fluxmesh.surface.readers.cgns_nodes import Node
from fluxmesh.surface.readers.faces import gather
from fluxmesh.surface.readers.volume import CellBlock, Polyhedra, Volume
from fluxmesh.surface.surface import FaceKind

__all__ = ["Elements", "read_elements"]

_MIXED, _NGON, _NFACE = 20, 22, 23
# number -> points: elements without area
_LINES: Final = {2: 1, 3: 2, 4: 3, 24: 4}
_FACES: Final = {
    5: (3, FaceKind.POLYGON),
    6: (6, FaceKind.TRIANGLE6),
    7: (4, FaceKind.POLYGON),
    8: (8, FaceKind.QUAD8),
    9: (9, FaceKind.QUAD9),
}
_CELLS: Final = {
    10: "tetra",
    11: "tetra10",
    12: "pyramid",
    13: "pyramid14",
    14: "wedge",
    15: "wedge15",
    16: "wedge18",
    17: "hexahedron",
    18: "hexahedron20",
    19: "hexahedron27",
    21: "pyramid13",
}
_CELL_SIZES: Final = {10: 4, 11: 10, 12: 5, 13: 14, 14: 6, 15: 15, 16: 18, 17: 8, 18: 20, 19: 27, 21: 13}
# The SIDS number the mid-points of upright edges before those of the top.
_TO_VTK: Final = {
    15: [*range(9), 12, 13, 14, 9, 10, 11],
    16: [*range(9), 12, 13, 14, 9, 10, 11, 15, 16, 17],
    18: [*range(12), 16, 17, 18, 19, 12, 13, 14, 15],
    19: [*range(12), 16, 17, 18, 19, 12, 13, 14, 15, 24, 22, 21, 23, 20, 25, 26],
}


@dataclass(frozen=True, eq=False)
class Elements:
    """The elements of a zone.

    Attributes
    ----------
    connectivity, offsets : ndarray of int64
        Points of the faces, from 0, as in `RawMesh`.
    kinds : ndarray, shape (n_faces,), int8
        `FaceKind` of each.
    numbers : ndarray, shape (n_faces,), int64
        Element number of each face, rising.
    section : ndarray, shape (n_faces,), int64
        Position in `sections` of the section of each face.
    sections : tuple of str
        Names of the sections that hold faces.
    inner : ndarray of bool, shape (n_faces,)
        Faces that are known to lie between two cells.
    volume : Volume
        Cells, numbered from 0 among the volume cells by element number.
    skipped : dict of str to int
        Points and lines.
    """

    connectivity: NDArray[np.int64]
    offsets: NDArray[np.int64]
    kinds: NDArray[np.int8]
    numbers: NDArray[np.int64]
    section: NDArray[np.int64]
    sections: tuple[str, ...]
    inner: NDArray[np.bool_]
    volume: Volume
    skipped: dict[str, int]


@dataclass(frozen=True, eq=False)
class _Run:
    """Elements of one type, from one section."""

    kind: int
    rows: NDArray[np.int64]  # (n, k), from 0
    numbers: NDArray[np.int64]
    section: str


@dataclass(frozen=True, eq=False)
class _Ragged:
    """Polygons (points from 0) or polyhedra (signed face numbers)."""

    entries: NDArray[np.int64]
    offsets: NDArray[np.int64]
    numbers: NDArray[np.int64]
    section: str
    inner: NDArray[np.bool_]


def read_elements(zone: Node) -> Elements:
    """Read the element sections of an unstructured zone.

    Parameters
    ----------
    zone : Node
        A Zone_t node.

    Returns
    -------
    Elements
        Faces and volume cells.

    Raises
    ------
    FileError
        A section that is damaged, or of elements that cannot be read.
    """
    runs: list[_Run] = []
    polygons: list[_Ragged] = []
    polyhedra: list[_Ragged] = []
    for section in zone.children("Elements_t"):
        kind, first, last = _head(section)
        if kind in (_NGON, _NFACE):
            (polygons if kind == _NGON else polyhedra).append(_ragged(section, kind, first, last))
        else:
            runs += _runs(section, kind, first, last)
    skipped: dict[str, int] = {}
    for run in runs:
        if run.kind in _LINES:
            name = "vertex" if run.kind == 2 else "line"
            skipped[name] = skipped.get(name, 0) + len(run.numbers)
    volume = _volume([run for run in runs if run.kind in _CELLS], polyhedra, polygons, zone)
    return _faces([run for run in runs if run.kind in _FACES], polygons, volume, skipped)


def _head(section: Node) -> tuple[int, int, int]:
    head = section.integers()
    span = section.child("ElementRange")
    limits = np.zeros(0, dtype=np.int64) if span is None else span.integers()
    if head.size < 1 or limits.size != 2 or limits[0] < 1 or limits[1] < limits[0] - 1:
        raise _damaged(section, f"has the type {head.tolist()} and the range {limits.tolist()}")
    return int(head[0]), int(limits[0]), int(limits[1])


def _entries(section: Node) -> NDArray[np.int64]:
    node = section.child("ElementConnectivity")
    if node is None:
        raise _damaged(section, "has no connectivity")
    return node.integers()


def _runs(section: Node, kind: int, first: int, last: int) -> Iterator[_Run]:
    """Yield the elements of a section by type."""
    count = last - first + 1
    entries = _entries(section)
    if kind == _MIXED:
        starts = _starts(section, entries, count, mixed=True)
        types = entries[starts[:-1]]
        for number in np.unique(types):
            chosen = np.flatnonzero(types == number)
            size = _size(int(number), section)
            if bool((np.diff(starts)[chosen] != size + 1).any()):
                raise _damaged(section, f"has elements of type {number} that do not have {size} points")
            rows = entries[starts[:-1][chosen][:, None] + np.arange(1, size + 1)] - 1
            yield _Run(int(number), rows, first + chosen, section.name)
        return
    size = _size(kind, section)
    if entries.size != count * size:
        raise _damaged(section, f"holds {entries.size} point numbers, but there are {count} elements of {size}")
    yield _Run(kind, entries.reshape(count, size) - 1, np.arange(first, last + 1, dtype=np.int64), section.name)


def _size(kind: int, section: Node) -> int:
    if kind in _FACES:
        return _FACES[kind][0]
    size = _CELL_SIZES.get(kind) or _LINES.get(kind)
    if size is None:
        raise FileError(
            f"has elements of the type number {kind}, which cannot be read",
            section.where,
            "Export linear or quadratic elements, or polygons and polyhedra",
        )
    return size


def _starts(section: Node, entries: NDArray[np.int64], count: int, *, mixed: bool) -> NDArray[np.int64]:
    """Return where each element of varying size starts; older files only imply it."""
    node = section.child("ElementStartOffset")
    if node is not None:
        starts = node.integers()
        if (
            starts.size != count + 1
            or starts[0] != 0
            or starts[-1] != entries.size
            or bool((np.diff(starts) < 1).any())
        ):
            raise _damaged(section, f"has offsets that do not cut {entries.size} numbers into {count} elements")
        return starts
    starts = np.zeros(count + 1, dtype=np.int64)
    listed = entries.tolist()
    place = 0
    for index in range(count):
        if place >= len(listed):
            raise _damaged(section, f"ends within its {count} elements")
        place += 1 + (_size(listed[place], section) if mixed else listed[place])
        if place <= starts[index]:
            raise _damaged(section, f"has an element of {listed[starts[index]]} points")
        starts[index + 1] = place
    if place != len(listed):
        raise _damaged(section, f"holds {len(listed)} numbers, but its {count} elements need {place}")
    return starts


def _ragged(section: Node, kind: int, first: int, last: int) -> _Ragged:
    """Return polygons or polyhedra."""
    count = last - first + 1
    entries = _entries(section)
    starts = _starts(section, entries, count, mixed=False)
    if section.child("ElementStartOffset") is None:
        # each element begins with its size
        kept = np.ones(entries.size, dtype=np.bool_)
        kept[starts[:-1]] = False
        entries, starts = entries[kept], starts - np.arange(count + 1)
    parents = section.child("ParentElements")
    inner = np.zeros(count, dtype=np.bool_)
    if kind == _NGON and parents is not None:
        pairs = parents.integers()
        if pairs.size != 2 * count:
            raise _damaged(section, f"names {pairs.size} parents of {count} faces")
        inner = (pairs.reshape(2, count) != 0).all(axis=0)
    numbers = np.arange(first, last + 1, dtype=np.int64)
    return _Ragged(entries - 1 if kind == _NGON else entries, starts, numbers, section.name, inner)


def _volume(runs: list[_Run], polyhedra: list[_Ragged], polygons: list[_Ragged], zone: Node) -> Volume:
    """Return the volume cells, ranked by element number."""
    counted = [run.numbers for run in runs] + [part.numbers for part in polyhedra]
    numbers = np.sort(np.concatenate([np.zeros(0, np.int64), *counted]))
    blocks = tuple(
        CellBlock(
            _CELLS[run.kind],
            run.rows[:, _TO_VTK[run.kind]] if run.kind in _TO_VTK else run.rows,
            np.searchsorted(numbers, run.numbers),
        )
        for run in runs
    )
    if not polyhedra:
        return Volume(blocks)
    entries, offsets, known = _joined(polygons)
    parts = []
    for cells in polyhedra:
        rows = np.searchsorted(known, np.abs(cells.entries))
        if rows.size and (
            known.size == 0 or bool((known[np.minimum(rows, known.size - 1)] != np.abs(cells.entries)).any())
        ):
            raise FileError(
                f"polyhedra of section {cells.section!r} use faces that are not there",
                zone.where,
                "The file is damaged or incomplete; export it again",
            )
        connectivity, starts = gather(entries, offsets, rows)
        owner = np.repeat(np.searchsorted(numbers, cells.numbers), np.diff(cells.offsets))
        parts.append(Polyhedra(connectivity, starts, owner))
    whole = Polyhedra(
        np.concatenate([part.connectivity for part in parts]),
        _chained([part.offsets for part in parts]),
        np.concatenate([part.cells for part in parts]),
    )
    return Volume(blocks, whole)


def _joined(polygons: list[_Ragged]) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.int64]]:
    """Return points, offsets and numbers of all polygons, by number."""
    if not polygons:
        return np.zeros(0, np.int64), np.zeros(1, np.int64), np.zeros(0, np.int64)
    numbers = np.concatenate([part.numbers for part in polygons])
    order = np.argsort(numbers)
    entries, offsets = gather(
        np.concatenate([part.entries for part in polygons]), _chained([part.offsets for part in polygons]), order
    )
    return entries, offsets, numbers[order]


def _chained(offsets: list[NDArray[np.int64]]) -> NDArray[np.int64]:
    sizes = np.concatenate([np.diff(part) for part in offsets])
    return np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64)


def _faces(runs: list[_Run], polygons: list[_Ragged], volume: Volume, skipped: dict[str, int]) -> Elements:
    """Return all faces by element number."""
    names = list(dict.fromkeys([*(run.section for run in runs), *(part.section for part in polygons)]))
    sizes = [np.full(len(run.rows), run.rows.shape[1]) for run in runs] + [np.diff(part.offsets) for part in polygons]
    flat = [run.rows.ravel() for run in runs] + [part.entries for part in polygons]
    kinds = [np.full(len(run.rows), _FACES[run.kind][1], dtype=np.int8) for run in runs]
    kinds += [np.zeros(len(part.numbers), dtype=np.int8) for part in polygons]
    inner = [np.zeros(len(run.rows), dtype=np.bool_) for run in runs] + [part.inner for part in polygons]
    numbers = [run.numbers for run in runs] + [part.numbers for part in polygons]
    section = [np.full(len(run.numbers), names.index(run.section), dtype=np.int64) for run in runs]
    section += [np.full(len(part.numbers), names.index(part.section), dtype=np.int64) for part in polygons]
    if not names:
        none = np.zeros(0, dtype=np.int64)
        return Elements(
            none, np.zeros(1, np.int64), none.astype(np.int8), none, none, (), none.astype(np.bool_), volume, skipped
        )
    number = np.concatenate(numbers)
    order = np.argsort(number, kind="stable")
    starts = np.concatenate([[0], np.cumsum(np.concatenate(sizes))]).astype(np.int64)
    connectivity, offsets = gather(np.concatenate(flat), starts, order)
    return Elements(
        connectivity,
        offsets,
        np.concatenate(kinds)[order],
        number[order],
        np.concatenate(section)[order],
        tuple(names),
        np.concatenate(inner)[order],
        volume,
        skipped,
    )


def _damaged(section: Node, found: str) -> FileError:
    return FileError(f"its section {section.name!r} {found}", section.where, "The file is damaged; export it again")
