"""OBJ files: points shared, polygons whole, and every name a face carries.

The general readers at hand cut polygons into triangles, copy the points once a
group, or forget the names; groups and shared points are what is needed here.
"""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FileError
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.ending import ending_notes
from fluxmesh.surface.readers.faces import require_faces

__all__ = ["read_obj"]

# Names in force, by the keyword that sets them, most specific first.
_NAMING = {"g": "group", "o": "object", "usemtl": "material"}
_CUT_SHORT = "The file is damaged or cut short; export it again"


def read_obj(path: Path) -> RawMesh:
    """Read the polygons of an OBJ file.

    Parameters
    ----------
    path : Path
        An existing file, not empty.

    Returns
    -------
    RawMesh
        Texture and normal indices are left aside. Each group, object and
        material name is a face set; where two of them bear one name but hold
        different faces, the later kind is called "object NAME" or
        "material NAME".

    Raises
    ------
    FileError
        A line that is damaged, a point that is not there, or no faces.
    """
    text = path.read_bytes().replace(b"\\\r\n", b" ").replace(b"\\\n", b" ").decode("utf-8", "replace")
    vertices: list[str] = []
    faces: list[str] = []
    points_before: list[int] = []  # how many points stood before each face: negative indices count from there
    spans: dict[tuple[str, str], list[tuple[int, int]]] = {}
    current: dict[str, tuple[tuple[str, ...], int]] = {}
    skipped: dict[str, int] = {}
    for line in text.splitlines():
        word, rest = [*line.split(None, 1), "", ""][:2]
        if word == "v":
            vertices.append(rest)
        elif word == "f":
            faces.append(rest)
            points_before.append(len(vertices))
        elif word in _NAMING:
            _close(spans, current, word, len(faces))
            names = rest.split() if word == "g" else [rest.strip()]
            current[word] = (tuple(name for name in names if name), len(faces))
        elif word in ("l", "p"):
            name = "line" if word == "l" else "point"
            skipped[name] = skipped.get(name, 0) + 1
    for word in list(current):
        _close(spans, current, word, len(faces))
    points = _points(vertices, path)
    connectivity, offsets = _faces(faces, points_before, path)
    return require_faces(
        RawMesh(
            source=path.name,
            points=points,
            connectivity=connectivity,
            offsets=offsets,
            kinds=None,
            face_sets=_sets(spans),
            skipped=skipped,
            notes=ending_notes(path),
        ),
        str(path),
    )


def _close(
    spans: dict[tuple[str, str], list[tuple[int, int]]],
    current: dict[str, tuple[tuple[str, ...], int]],
    word: str,
    face: int,
) -> None:
    """End the names a keyword has in force."""
    names, start = current.pop(word, ((), face))
    if face > start:
        for name in names:
            spans.setdefault((word, name), []).append((start, face))


def _sets(spans: dict[tuple[str, str], list[tuple[int, int]]]) -> dict[str, NDArray[np.int64]]:
    sets: dict[str, NDArray[np.int64]] = {}
    for word, kind in _NAMING.items():
        for (owner, name), runs in spans.items():
            if owner != word:
                continue
            faces = np.concatenate([np.arange(start, stop) for start, stop in runs])
            if name not in sets:
                sets[name] = faces
            elif not np.array_equal(sets[name], faces):
                sets[f"{kind} {name}"] = faces
    return sets


def _points(vertices: list[str], path: Path) -> NDArray[np.float64]:
    """Return coordinates; weights and colours after them are left aside."""
    words = " ".join(vertices).split()
    try:
        if vertices and len(words) == 3 * len(vertices):
            return np.array(words, dtype=np.float64).reshape(-1, 3)
        return np.array([line.split()[:3] for line in vertices], dtype=np.float64).reshape(-1, 3)
    except ValueError as error:
        bad = next(
            index for index, line in enumerate(vertices) if len(line.split()) < 3 or not _numbers(line.split()[:3])
        )
        raise FileError(
            f"vertex {bad + 1} is '{vertices[bad]}', which is not three numbers", str(path), _CUT_SHORT
        ) from error


def _numbers(words: list[str]) -> bool:
    try:
        return bool([float(word) for word in words])
    except ValueError:
        return False


def _faces(
    faces: list[str], points_before: list[int], path: Path
) -> tuple[NDArray[np.int64], NDArray[np.int64] | None]:
    joined = "\n".join(faces)
    if "/" in joined:
        joined = re.sub(r"/[^\s]*", "", joined)
    rows = joined.split("\n") if faces else []
    sizes = np.array([len(row.split()) for row in rows], dtype=np.int64)
    small = np.flatnonzero(sizes < 3)
    if small.size:
        raise FileError(f"face {small[0]} is 'f {faces[small[0]]}', fewer than three points", str(path), _CUT_SHORT)
    try:
        connectivity = np.array(joined.split(), dtype=np.int64)
    except (ValueError, OverflowError) as error:
        raise FileError(f"has a face whose points are no whole numbers ({error})", str(path), _CUT_SHORT) from error
    starts = np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64)
    if (connectivity == 0).any():
        face = int(np.searchsorted(starts, np.flatnonzero(connectivity == 0)[0], "right")) - 1
        raise FileError(f"face {face} uses point 0, but points are counted from 1", str(path), _CUT_SHORT)
    negative = connectivity < 0
    connectivity[~negative] -= 1
    if negative.any():
        connectivity[negative] += np.repeat(points_before, sizes)[negative]
    return connectivity, None if bool((sizes == 3).all()) else starts
