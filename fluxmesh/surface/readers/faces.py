"""Cells of a file sorted into faces: which shapes are faces, which are left out."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FileError
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.surface import FaceKind

__all__ = ["Faces", "gather", "join_blocks", "require_faces", "strip_triangles"]


@dataclass(frozen=True, eq=False)
class Faces:
    """Faces picked out of the cells of a file.

    Attributes
    ----------
    connectivity : ndarray, shape (n_entries,), int64
        As in `RawMesh`.
    offsets : ndarray, shape (n_faces + 1,), int64, or None
        As in `RawMesh`; None when every face is a straight triangle.
    kinds : ndarray, shape (n_faces,), int8, or None
        As in `RawMesh`; None when all are straight-edged.
    cell_of_face : ndarray, shape (n_faces,), int64, or None
        The cell each face came from; None when face ``i`` is cell ``i``.
    skipped : dict of str to int
        Cells that are no faces, counted by their type's name.
    """

    connectivity: NDArray[np.int64]
    offsets: NDArray[np.int64] | None
    kinds: NDArray[np.int8] | None
    cell_of_face: NDArray[np.int64] | None = None
    skipped: dict[str, int] = field(default_factory=dict)


def gather(
    connectivity: NDArray[np.int64], offsets: NDArray[np.int64], rows: NDArray[Any]
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Take some rows of a ragged table.

    Parameters
    ----------
    connectivity : ndarray, shape (n_entries,), int64
        All rows, one after the other.
    offsets : ndarray, shape (n_rows + 1,), int64
        Where each row starts.
    rows : ndarray of int, shape (k,)
        Rows to take, in this order.

    Returns
    -------
    connectivity : ndarray, shape (m,), int64
        Entries of the rows taken.
    offsets : ndarray, shape (k + 1,), int64
        Where each of them starts.
    """
    sizes = offsets[rows + 1] - offsets[rows]
    taken = np.zeros(rows.size + 1, dtype=np.int64)
    np.cumsum(sizes, out=taken[1:])
    entries = np.repeat(offsets[rows] - taken[:-1], sizes) + np.arange(taken[-1])
    return connectivity[entries], taken


def strip_triangles(
    connectivity: NDArray[np.int64], offsets: NDArray[np.int64]
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Cut triangle strips into triangles that all keep the strip's orientation.

    Parameters
    ----------
    connectivity : ndarray, shape (n_entries,), int64
        Points of the strips, one strip after the other.
    offsets : ndarray, shape (n_strips + 1,), int64
        Where each strip starts.

    Returns
    -------
    triangles : ndarray, shape (m, 3), int64
        Point indices; every second triangle has its first two points swapped.
    strip_of_triangle : ndarray, shape (m,), int64
        The strip each triangle was cut from.
    """
    counts = np.maximum(np.diff(offsets) - 2, 0)
    strip = np.repeat(np.arange(counts.size), counts)
    firsts = np.zeros(counts.size, dtype=np.int64)
    np.cumsum(counts[:-1], out=firsts[1:])
    step = np.arange(strip.size) - firsts[strip]
    start = offsets[strip] + step
    odd = step % 2
    corners = np.column_stack([start + odd, start + 1 - odd, start + 2])
    return connectivity[corners].reshape(-1, 3), strip


def join_blocks(
    blocks: Sequence[tuple[FaceKind, NDArray[Any]]],
) -> tuple[NDArray[np.int64], NDArray[np.int64] | None, NDArray[np.int8] | None]:
    """Put blocks of equal faces one after the other.

    Parameters
    ----------
    blocks : sequence of (FaceKind, ndarray of int, shape (n, k))
        Kind and point indices of each block.

    Returns
    -------
    connectivity : ndarray, shape (n_entries,), int64
        Point indices of all faces.
    offsets : ndarray, shape (n_faces + 1,), int64, or None
        None when all are straight triangles.
    kinds : ndarray, shape (n_faces,), int8, or None
        None when all are straight-edged.
    """
    if len(blocks) == 1:
        connectivity = np.ascontiguousarray(blocks[0][1], dtype=np.int64).ravel()
    else:
        flat = [np.asarray(rows, dtype=np.int64).ravel() for _, rows in blocks]
        connectivity = np.concatenate(flat) if flat else np.zeros(0, dtype=np.int64)
    counts = [rows.shape[0] for _, rows in blocks]
    offsets = kinds = None
    if any(rows.shape[1] != 3 for _, rows in blocks):
        sizes = np.repeat([rows.shape[1] for _, rows in blocks], counts)
        offsets = np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64)
    if any(kind is not FaceKind.POLYGON for kind, _ in blocks):
        kinds = np.repeat(np.array([kind for kind, _ in blocks], dtype=np.int8), counts)
    return connectivity, offsets, kinds


def require_faces(mesh: RawMesh, where: str) -> RawMesh:
    """Check that a mesh has faces and that they use points that exist.

    Parameters
    ----------
    mesh : RawMesh
        As read.
    where : str
        File, for messages.

    Returns
    -------
    RawMesh
        The same mesh.

    Raises
    ------
    FileError
        No faces, or point indices out of range.
    """
    if mesh.face_count == 0:
        held = ", ".join(f"{count} of type {name}" for name, count in mesh.skipped.items())
        raise FileError(
            "holds no faces" + (f", only cells of other kinds: {held}" if held else ""),
            where,
            "Export the surface of the mesh as triangles, quads or polygons",
        )
    # Read as unsigned, a negative index is a huge one: one pass finds both ends.
    highest = int(mesh.connectivity.view(np.uint64).max())
    if highest >= mesh.points.shape[0]:
        wrong = int(np.flatnonzero(mesh.connectivity.view(np.uint64) >= mesh.points.shape[0])[0])
        face = wrong // 3 if mesh.offsets is None else int(np.searchsorted(mesh.offsets, wrong, "right")) - 1
        raise FileError(
            f"face {face} uses point {mesh.connectivity[wrong]}, but there are {mesh.points.shape[0]} points",
            where,
            "The file is damaged or cut short; export it again",
        )
    return mesh
