"""STL files, binary and ASCII: the numbers through trimesh, the frame around them checked here.

trimesh drops a last solid that is cut short, and takes the word "solid" inside
a solid's name for the start of the next one. So the text is cut into solids
here, and trimesh gets one at a time.
"""

from __future__ import annotations

import io
import logging
import re
import warnings
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FileError
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.faces import require_faces

__all__ = ["read_stl"]

_HEADER, _RECORD = 84, 50  # bytes before the triangles, and of each
_SOLID = re.compile(rb"^[ \t]*solid\b[ \t]*([^\r\n]*)", re.MULTILINE | re.IGNORECASE)
_END = re.compile(rb"^[ \t]*endsolid\b[^\r\n]*", re.MULTILINE | re.IGNORECASE)
_CUT_SHORT = "It was cut short or is still being written; export or copy it again"


def read_stl(path: Path) -> RawMesh:
    """Read a binary or ASCII STL file.

    Parameters
    ----------
    path : Path
        An existing file, not empty.

    Returns
    -------
    RawMesh
        A soup of triangles, three points each. Every solid of an ASCII file
        is a face set of its name; the two free bytes of a binary record are
        the face array "attribute" when any is set.

    Raises
    ------
    FileError
        The file is cut short, is no STL file, or has no faces.
    """
    from trimesh.exchange.stl import HeaderError, load_stl_binary

    # what it has to say of normals that cannot be read, with a traceback, would go to the terminal: they are not used
    logging.getLogger("trimesh").addHandler(logging.NullHandler())
    with path.open("rb") as stream:
        try:
            loaded = load_stl_binary(stream)
        except HeaderError:
            stream.seek(0)
            return _read_ascii(stream.read(), path)
    # an empty file gives no vertices
    points = np.ascontiguousarray(loaded.get("vertices", np.zeros((0, 3), dtype=np.float32)), dtype=np.float32)
    face_arrays = {}
    attribute = loaded.get("face_attributes", {}).get("stl")
    if attribute is not None and attribute.any():
        face_arrays["attribute"] = np.ascontiguousarray(attribute, dtype=np.int32)
    return _soup(path, points, face_arrays=face_arrays)


def _soup(
    path: Path,
    points: NDArray[np.floating],
    face_arrays: dict[str, NDArray[np.int32]] | None = None,
    face_sets: dict[str, NDArray[np.int64]] | None = None,
) -> RawMesh:
    return require_faces(
        RawMesh(
            source=path.name,
            points=points,
            connectivity=np.arange(points.shape[0], dtype=np.int64),
            offsets=None,
            kinds=None,
            face_arrays=dict(face_arrays or {}),
            face_sets=face_sets or {},
        ),
        str(path),
    )


def _read_ascii(text: bytes, path: Path) -> RawMesh:
    if b"\0" in text[:1024] or not text[:1024].lstrip().lower().startswith(b"solid"):
        raise _no_stl(text, path)
    points: list[NDArray[np.float64]] = []
    sets: dict[str, NDArray[np.int64]] = {}
    count = position = 0
    while (solid := _SOLID.search(text, position)) is not None:
        end = _END.search(text, solid.end())
        name = solid[1].strip().decode("utf-8", "replace") or f"solid {len(sets) + 1}"
        following = _SOLID.search(text, solid.end())
        if end is None or (following is not None and following.start() < end.start()):
            raise FileError(f"its solid {name!r} has no end", str(path), _CUT_SHORT)
        corners = _corners(text[solid.end() : end.start()], name, path)
        faces = np.arange(count, count + len(corners) // 3)
        sets[name] = np.concatenate([sets[name], faces]) if name in sets else faces
        points.append(corners)
        count += faces.size
        position = end.end()
    if text[position:].strip():
        line = text[position:].strip().split(b"\n")[0][:40].decode("utf-8", "replace")
        raise FileError(f"has {line!r} after its last solid", str(path), _CUT_SHORT)
    return _soup(path, np.concatenate(points), face_sets=sets)


def _corners(body: bytes, name: str, path: Path) -> NDArray[np.float64]:
    """Return the corners of one solid, shape (3 n, 3)."""
    from trimesh.exchange.stl import load_stl_ascii

    facets = len(re.findall(rb"\bendfacet\b", body, re.IGNORECASE))
    count = len(re.findall(rb"\bvertex\b", body, re.IGNORECASE))
    if count != 3 * facets:
        raise FileError(
            f"its solid {name!r} has {facets} facets but {count} vertices where {3 * facets} are needed",
            str(path),
            "The file is damaged; export it again",
        )
    try:
        with warnings.catch_warnings():
            # NumPy before 2.3 only warns when it stops at a word that is no number
            warnings.simplefilter("error", DeprecationWarning)
            loaded = load_stl_ascii(io.BytesIO(b"solid s\n" + body + b"\nendsolid s\n"))
    except (ValueError, DeprecationWarning) as error:
        raise FileError(
            f"its solid {name!r} has a vertex that is not three numbers ({error})",
            str(path),
            "The file is damaged; export it again",
        ) from error
    corners: NDArray[np.float64] = loaded.get("vertices", np.zeros((0, 3)))
    if len(corners) != count:
        raise FileError(
            f"its solid {name!r} has {count} vertices, of which {len(corners)} have three numbers",
            str(path),
            "The file is damaged; export it again",
        )
    return corners


def _no_stl(text: bytes, path: Path) -> FileError:
    if len(text) < _HEADER:
        return FileError(f"is no STL file: {len(text)} bytes are too few", str(path), _CUT_SHORT)
    announced = int(np.frombuffer(text, "<u4", 1, _HEADER - 4)[0])
    return FileError(
        f"is no whole STL file: its header announces {announced} triangles, {_HEADER + _RECORD * announced} bytes, "
        f"but it has {len(text)} bytes",
        str(path),
        _CUT_SHORT,
    )
