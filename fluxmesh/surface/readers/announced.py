"""What a file announces, held against its length before a library takes memory for it.

A count in a text file needs at least a byte each, an array of an HDF5 file the bytes that are stored of it, and
files that an XDMF file names lie beside it.
"""

from __future__ import annotations

import mmap
import re
from collections.abc import Iterator
from math import prod
from pathlib import Path
from typing import Any, Final
from xml.etree import ElementTree

from fluxmesh.errors import FileError
from fluxmesh.surface.readers.xml_index import file_beside

__all__ = ["require_possible"]

_DAMAGED: Final = "It is damaged, was cut short or is still being written; export or copy it again"
_KINDS_OF_MEDIT = rb"Vertices|Edges|Triangles\w*|Quadrilaterals\w*|Tetrahedra\w*|Hexahedra\w*|Prisms|Pyramids|Corners"
# Format -> where it has counts.
_COUNTS: Final = {
    "avsucd": re.compile(rb"\A(?:\s*#[^\n]*\n)*\s*(\d+)\s+(\d+)\s+(\d+)\s+(\d+)"),
    "dolfin-xml": re.compile(rb"""<\w+\s[^>]*?\bsize\s*=\s*["'](\d+)"""),
    "gmsh": re.compile(rb"^\$(?:Nodes|Elements|PhysicalNames)[ \t\r]*\n\s*(\d+)(?:[ \t]+(\d+))?", re.MULTILINE),
    "medit": re.compile(rb"^[ \t]*(?:" + _KINDS_OF_MEDIT + rb")\s+(\d+)", re.MULTILINE),
    "netgen": re.compile(
        rb"^[ \t]*(?:surfaceelements\w*|volumeelements|edgesegments\w*|points)[ \t\r]*\n\s*(\d+)", re.MULTILINE
    ),
    "off": re.compile(rb"\A\s*\w*OFF[^\n]*\n(?:[ \t]*#[^\n]*\n|[ \t\r]*\n)*\s*(\d+)\s+(\d+)(?:\s+(\d+))?"),
    "su2": re.compile(rb"^[ \t]*(?:NPOIN|NELEM|NMARK|MARKER_ELEMS)[ \t]*=[ \t]*(\d+)", re.MULTILINE),
    "ugrid": re.compile(rb"\A\s*(\d+)\s+(\d+)\s+(\d+)\s+(\d+)\s+(\d+)\s+(\d+)\s+(\d+)\s"),
}
_HDF: Final = ("h5m", "hmf", "med")
# An array may be packed, but not as much as this: more is damage, or meant to fill the memory.
_MOST_PACKED: Final = 1000


def require_possible(path: Path, name: str) -> None:
    """Raise if a file announces more than it can hold, or data in files elsewhere.

    Parameters
    ----------
    path : Path
        An existing file.
    name : str
        Its format, as meshio calls it.

    Raises
    ------
    FileError
        A count that the length of the file rules out, or data kept in another
        file (XDMF: in another folder).
    """
    if path.suffix.lower() == ".gz":
        return
    if name in _HDF:
        _require_stored(path, str(path))
    elif name == "xdmf":
        _require_beside(path)
    elif path.suffix.lower() == ".meshb":
        _require_medit(path)
    elif name in _COUNTS:
        with path.open("rb") as stream, mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ) as data:
            for match in _COUNTS[name].finditer(data):
                for digits in match.groups():
                    _require_count(int(digits[:30]) if digits else 0, len(data), str(path))


def _require_count(count: int, size: int, where: str) -> None:
    if count > size:
        raise FileError(f"announces {count} of something, more than its {size} bytes can hold", where, _DAMAGED)


def _require_medit(path: Path) -> None:
    """Walk the sections of a binary file: each has a number, where the next one is, and a count."""
    size = path.stat().st_size
    with path.open("rb") as stream:
        head = stream.read(8)
        order = "little" if head[:4] == b"\1\0\0\0" else "big"
        version = int.from_bytes(head[4:], order)  # type: ignore[arg-type]
        place, count = (8 if version >= 3 else 4), (8 if version >= 4 else 4)
        at = 8
        while 0 < at < size - 4 - place - count:
            stream.seek(at)
            section = stream.read(4 + place + count)
            kind = int.from_bytes(section[:4], order)  # type: ignore[arg-type]
            if kind > 3:  # the first three hold no lists
                _require_count(int.from_bytes(section[4 + place :], order), size, str(path))  # type: ignore[arg-type]
            following = int.from_bytes(section[4 : 4 + place], order)  # type: ignore[arg-type]
            if following <= at:
                return
            at = following


def _require_stored(path: Path, where: str) -> None:
    """Look at every array of an HDF5 file without reading it."""
    try:
        import h5py
    except ImportError:
        return  # meshio says it
    try:
        with h5py.File(path, "r") as file:
            for name, found in _members(file, h5py):
                if isinstance(found, str):
                    raise FileError(f"its {name!r} is kept in another file", where, "Write all data into one file")
                stored = int(found.id.get_storage_size())
                if found.is_virtual or found.external is not None:
                    raise FileError(f"its {name!r} is kept in another file", where, "Write all data into one file")
                if found.nbytes > _MOST_PACKED * (stored + 4096):
                    raise FileError(
                        f"its {name!r} announces {found.nbytes} bytes, {stored} are stored", where, _DAMAGED
                    )
    except FileError:
        raise
    except (AttributeError, LookupError, OSError, RuntimeError, TypeError, ValueError) as error:
        raise FileError(f"its HDF5 structure cannot be read ({error})", where, _DAMAGED) from error


def _members(file: Any, h5py: Any) -> Iterator[tuple[str, Any]]:
    """Yield the arrays of an HDF5 file, and the names of other files that it links to."""
    seen: set[Any] = set()
    waiting = [("", file)]
    while waiting:
        above, group = waiting.pop()
        for key in group:
            link = group.get(key, getlink=True)
            name = f"{above}/{key}"
            if isinstance(link, h5py.ExternalLink):
                yield name, str(link.filename)
            if not isinstance(link, h5py.HardLink):
                continue
            found = group[key]
            if found.id in seen:
                continue
            seen.add(found.id)
            if isinstance(found, h5py.Group):
                waiting.append((name, found))
            elif isinstance(found, h5py.Dataset):
                yield name, found


def _require_beside(path: Path) -> None:
    """Look at what every item of an XDMF file says of its data."""
    where = str(path)
    try:
        root = ElementTree.parse(path).getroot()
    except (ElementTree.ParseError, ValueError, LookupError) as error:
        raise FileError(f"its XML cannot be read ({error})", where, _DAMAGED) from error
    opened: set[Path] = set()
    for item in root.iter("DataItem"):
        kind, text = item.get("Format", "XML").upper(), (item.text or "").strip()
        try:
            count = prod(int(word) for word in item.get("Dimensions", "0").split())
        except ValueError:
            continue  # meshio says it
        if kind == "XML":
            _require_count(count, path.stat().st_size, where)
            continue
        if kind not in ("HDF", "BINARY") or not text:
            continue
        # a drive letter has a colon of its own, but then the file is elsewhere anyway
        name = text.split(":")[0] if kind == "HDF" else text
        beside = file_beside(path, name.removeprefix(f"{path.parent.absolute()}/"), where)
        if kind == "BINARY":
            _require_count(count, beside.stat().st_size, where)
        elif beside not in opened:
            opened.add(beside)
            _require_stored(beside, str(beside))
