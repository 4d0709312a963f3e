"""Polygons and points with arrays as a VTK XML file (.vtp), the open format that most viewers read."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from html import escape
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.report.export_text import one_line, writable
from fluxmesh.surface.surface import ControlSurface

__all__ = ["Numbers", "PolygonData", "outlines", "vtp_bytes"]

_TYPES: Final = {"f8": "Float64", "i8": "Int64", "i4": "Int32", "i1": "Int8"}

# what an array of a file may hold
Numbers = NDArray[np.float64] | NDArray[np.int64] | NDArray[np.int32] | NDArray[np.int8]


@dataclass(frozen=True, eq=False)
class PolygonData:
    """What one file holds.

    Attributes
    ----------
    points : ndarray, shape (n_points, 3), float64
        m.
    connectivity, offsets : ndarray, shape (n,), int64
        Point indices of all cells, and where each cell ends.
    vertices : bool
        Whether the cells are single points, not polygons.
    cells, at_points : mapping of str to ndarray
        Arrays with a row a cell or a point.
    texts : mapping of str to sequence of str
        Texts that belong to the whole file.
    numbers : mapping of str to ndarray
        Numbers that belong to the whole file.
    words_at_points : mapping of str to sequence of str
        Texts with one entry a point.
    """

    points: NDArray[np.float64]
    connectivity: NDArray[np.int64]
    offsets: NDArray[np.int64]
    vertices: bool = False
    cells: Mapping[str, Numbers] = field(default_factory=dict)
    at_points: Mapping[str, Numbers] = field(default_factory=dict)
    texts: Mapping[str, Sequence[str]] = field(default_factory=dict)
    numbers: Mapping[str, Numbers] = field(default_factory=dict)
    words_at_points: Mapping[str, Sequence[str]] = field(default_factory=dict)


def outlines(surface: ControlSurface) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return each face as a polygon, so that one cell is one face.

    Parameters
    ----------
    surface : ControlSurface
        The surface.

    Returns
    -------
    connectivity, offsets : ndarray, int64
        Point indices round each face, and where each ends. A curved face goes through
        its mid-side points; the one in the middle is left out.
    """
    if surface.offsets is None:
        return surface.connectivity, np.arange(3, surface.connectivity.size + 1, 3)
    if surface.kinds is None or not surface.kinds.any():
        return surface.connectivity, surface.offsets[1:]
    corners = np.array([0, 3, 4, 4])[surface.kinds]
    sizes = np.where(surface.kinds > 0, 2 * corners, np.diff(surface.offsets))
    ends = np.cumsum(sizes)
    face = np.repeat(np.arange(surface.face_count), sizes)
    step = np.arange(face.size) - (ends - sizes)[face]
    # corner, mid-side, corner, ...: corners come first in a curved face, then mid-sides in the same order
    place = np.where(surface.kinds[face] > 0, step // 2 + (step % 2) * corners[face], step)
    return surface.connectivity[surface.offsets[:-1][face] + place], ends


def vtp_bytes(data: PolygonData) -> bytes:
    """Return a file of polygons, or of points, with raw binary arrays in full precision.

    Parameters
    ----------
    data : PolygonData
        What it holds. Names and texts may hold anything: they are escaped, or coded as numbers.

    Returns
    -------
    bytes
        "VTK File Formats" (the VTK Book, appendix), version 1.0, little endian.
    """
    writer = _Writer()
    count = data.offsets.size
    kind = "Verts" if data.vertices else "Polys"
    head = {"Points": len(data.points), "Verts": 0, "Lines": 0, "Strips": 0, "Polys": 0, kind: count}
    parts = [
        '<?xml version="1.0"?>\n<VTKFile type="PolyData" version="1.0" byte_order="LittleEndian" '
        'header_type="UInt64">\n<PolyData>\n<FieldData>\n',
        *(writer.text(name, words, tuples=True) for name, words in data.texts.items()),
        *(writer.array(name, values, tuples=True) for name, values in data.numbers.items()),
        "</FieldData>\n<Piece ",
        " ".join(f'NumberOf{name}="{number}"' for name, number in head.items()),
        ">\n<PointData>\n",
        *(writer.array(name, values) for name, values in data.at_points.items()),
        *(writer.text(name, words) for name, words in data.words_at_points.items()),
        "</PointData>\n<CellData>\n",
        *(writer.array(name, values) for name, values in data.cells.items()),
        "</CellData>\n<Points>\n",
        writer.array("Points", data.points),
        f"</Points>\n<{kind}>\n",
        writer.array("connectivity", data.connectivity),
        writer.array("offsets", data.offsets),
        f'</{kind}>\n</Piece>\n</PolyData>\n<AppendedData encoding="raw">\n_',
    ]
    return b"".join(["".join(parts).encode(), *writer.blocks, b"\n</AppendedData>\n</VTKFile>\n"])


class _Writer:
    """Writes heads of arrays, and keeps their numbers for the end of the file."""

    def __init__(self) -> None:
        self.blocks: list[bytes] = []
        self._size = 0

    def array(self, name: str, values: Numbers, *, tuples: bool = False) -> str:
        plain = np.ascontiguousarray(values)
        content = plain.astype(plain.dtype.newbyteorder("<"), copy=False).tobytes()
        components = 1 if plain.ndim == 1 else plain.shape[1]
        count = f' NumberOfTuples="{len(plain)}"' if tuples else ""
        head = (
            f'<DataArray type="{_TYPES[plain.dtype.str[1:]]}" Name="{_safe(name)}" '
            f'NumberOfComponents="{components}"{count} format="appended" offset="{self._size}"/>\n'
        )
        length = len(content).to_bytes(8, "little")
        self.blocks += [length, content]
        self._size += len(length) + len(content)
        return head

    def text(self, name: str, words: Sequence[str], *, tuples: bool = False) -> str:
        # each letter as a number, each text ended by 0: nothing in a name can be taken for markup
        codes = b"".join(writable(word).encode() + b"\0" for word in words)
        numbers = " ".join(map(str, codes))
        count = f' NumberOfTuples="{len(words)}"' if tuples else ""
        return f'<Array type="String" Name="{_safe(name)}"{count} format="ascii">\n{numbers}\n</Array>\n'


def _safe(name: str) -> str:
    return escape(one_line(name), quote=True)
