"""Small meshes for pairing and mending: points (n, 3) and faces as rows or lists, normals outward."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import trimesh
from numpy.typing import ArrayLike, NDArray

from fluxmesh.surface.surface import FaceKind

Points = NDArray[np.float64]
Faces = NDArray[np.int64]


def flat(faces: Sequence[ArrayLike] | Faces) -> tuple[Faces, Faces | None]:
    """Return connectivity and offsets; no offsets for triangles."""
    rows = [np.asarray(face, np.int64) for face in faces]
    sizes = [row.size for row in rows]
    connectivity = np.concatenate(rows)
    return connectivity, None if set(sizes) == {3} else np.concatenate([[0], np.cumsum(sizes)])


def cube_quads(side: float = 1.0, origin: ArrayLike = (0, 0, 0)) -> tuple[Points, Faces]:
    corners = np.array([[x, y, z] for z in (0, 1) for y in (0, 1) for x in (0, 1)], float)
    faces = [[0, 2, 3, 1], [4, 5, 7, 6], [0, 1, 5, 4], [2, 6, 7, 3], [0, 4, 6, 2], [1, 3, 7, 5]]
    return np.asarray(origin, float) + side * corners, np.array(faces)


def cube(side: float = 1.0, origin: ArrayLike = (0, 0, 0)) -> tuple[Points, Faces]:
    points, quads = cube_quads(side, origin)
    return points, np.concatenate([quads[:, [0, 1, 2]], quads[:, [0, 2, 3]]])


def tetrahedron() -> tuple[Points, Faces]:
    points = np.array([[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1]], float)
    return points, np.array([[0, 2, 1], [0, 1, 3], [1, 2, 3], [2, 0, 3]])


def sphere(level: int = 2, radius: float = 1.0, origin: ArrayLike = (0, 0, 0)) -> tuple[Points, Faces]:
    ball = trimesh.creation.icosphere(level, radius)
    return np.asarray(origin, float) + np.array(ball.vertices), np.array(ball.faces, np.int64)


def together(*parts: tuple[Points, Faces]) -> tuple[Points, Faces]:
    """Put meshes side by side in one, points apart."""
    shifts = np.cumsum([0, *(len(points) for points, _ in parts)])
    return (
        np.concatenate([points for points, _ in parts]),
        np.concatenate([faces + shift for (_, faces), shift in zip(parts, shifts)]),
    )


def soup(points: Points, faces: Faces) -> tuple[Points, Faces]:
    """Give every face its own points."""
    return points[faces].reshape(-1, 3), np.arange(faces.size).reshape(faces.shape)


def twisted_grid(n: int, m: int) -> Faces:
    """Return triangles of a grid closed both ways, one with a twist: a Klein bottle."""

    def point(i: int, j: int) -> int:
        return (i % n) * m + (j if i < n else m - j) % m

    cells = [(i, j) for i in range(n) for j in range(m)]
    lower = [[point(i, j), point(i + 1, j), point(i + 1, j + 1)] for i, j in cells]
    upper = [[point(i, j), point(i + 1, j + 1), point(i, j + 1)] for i, j in cells]
    return np.array(lower + upper)


def moebius(n: int = 12) -> tuple[Points, Faces]:
    """Return a Möbius band of `n` cells."""
    turn = np.arange(n) * 2 * np.pi / n
    rims = []
    for side in (-0.3, 0.3):
        radius = 1 + side * np.cos(turn / 2)
        rims.append(np.column_stack([radius * np.cos(turn), radius * np.sin(turn), side * np.sin(turn / 2)]))
    quads = [[i, i + 1, n + i + 1, n + i] for i in range(n - 1)] + [[n - 1, n, 0, 2 * n - 1]]
    return np.concatenate(rims), np.array([t for a, b, c, d in quads for t in ([a, b, c], [a, c, d])])


def curved(points: Points, faces: Faces, kind: FaceKind) -> tuple[Points, Faces, NDArray[np.int8]]:
    """Add mid-side points (and centres) to straight faces: points, rows, kinds."""
    mids: dict[tuple[int, int], int] = {}
    extra: list[Points] = []

    def place(corners: tuple[int, ...]) -> int:
        extra.append(points[list(corners)].mean(axis=0))
        return len(points) + len(extra) - 1

    rows = []
    for face in faces.tolist():
        row = list(face)
        for a, b in zip(face, face[1:] + face[:1]):
            edge = (min(a, b), max(a, b))
            if edge not in mids:
                mids[edge] = place(edge)
            row.append(mids[edge])
        if kind is FaceKind.QUAD9:
            row.append(place(tuple(face)))
        rows.append(row)
    return np.concatenate([points, extra]), np.array(rows), np.full(len(rows), kind, np.int8)
