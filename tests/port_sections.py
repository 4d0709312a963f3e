"""Straight ducts with any cross-section, to test what is laid on their ports."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fluxmesh.surface.build import control_surface
from fluxmesh.surface.surface import ControlSurface
from tests.solids import disc, rigid_motion

Array = NDArray[np.float64]
Rows = Sequence[NDArray[np.int64]]
WALL = "wall"


def duct(
    section: tuple[Array, Rows],
    side: Callable[[Array], str] = lambda middle: WALL,
    *,
    askew: bool = False,
    split: bool = False,
    **options: Any,
) -> ControlSurface:
    """Extrude a plane mesh by 1 along z: ports ``in`` (group 0) and ``out`` (group 1), sides by the role of each.

    `side` takes the middle of a rim edge and names the role of the quad on it.
    `split` gives the ports points of their own, as exports do where groups meet.
    """
    plane, faces = np.asarray(section[0], float), [np.asarray(f, np.int64) for f in section[1]]
    count = len(plane)
    used: dict[tuple[int, int], int] = {}
    for face in faces:
        for edge in zip(face.tolist(), np.roll(face, -1).tolist()):
            used[edge] = used.get(edge, 0) + 1
    rim = [(a, b) for a, b in used if (b, a) not in used]
    points = np.concatenate([np.column_stack([plane, np.full(count, z)]) for z in (0.0, 1.0)])
    low, high = (0, count)
    shift = 2 * count if split else 0
    if split:
        points = np.concatenate([points, points])
    quads = [np.array([a + shift, b + shift, b + count + shift, a + count + shift]) for a, b in rim]
    rows = [*(face[::-1] + low for face in faces), *(face + high for face in faces), *quads]
    roles = [side((plane[a] + plane[b]) / 2) for a, b in rim]
    groups = {"in": ("inlet", np.arange(len(faces))), "out": ("outlet", len(faces) + np.arange(len(faces)))}
    for role in dict.fromkeys(roles):
        groups[f"side {role}"] = (role, 2 * len(faces) + np.flatnonzero([r == role for r in roles]))
    if askew:
        turn, move = rigid_motion(np.random.default_rng(5), 3.0)
        points = points @ turn.T + move
    return control_surface(points, rows, groups, **options)


def round_section(around: int, rings: int, radius: float = 1.0) -> tuple[Array, Rows]:
    """Return a disc of triangles and quads."""
    points, faces = disc(around, rings)
    return radius * points, faces


def grid_section(xs: ArrayLike, ys: ArrayLike, *, quads: bool = False, wrap: bool = False) -> tuple[Array, Rows]:
    """Return a rectangle of cells; `wrap` joins the last column of ``xs`` to the first."""
    xs, ys = np.asarray(xs, float), np.asarray(ys, float)
    x, y = np.meshgrid(xs, ys, indexing="ij")
    number = np.arange(x.size).reshape(x.shape)
    number = np.concatenate([number, number[:1]]) if wrap else number
    a, b, c, d = (m.ravel() for m in (number[:-1, :-1], number[1:, :-1], number[1:, 1:], number[:-1, 1:]))
    points = np.column_stack([x.ravel(), y.ravel()])
    if quads:
        return points, list(np.column_stack([a, b, c, d]))
    return points, list(np.concatenate([np.column_stack([a, b, c]), np.column_stack([a, c, d])]))


def annulus_section(inner: float, outer: float, around: int, rings: int, *, quads: bool = True) -> tuple[Array, Rows]:
    """Return the ring between two circles."""
    angle = np.arange(around) * (2 * np.pi / around)
    flat, faces = grid_section(-angle, np.linspace(inner, outer, rings + 1), quads=quads, wrap=True)
    return flat[:, 1:] * np.column_stack([np.cos(flat[:, 0]), np.sin(flat[:, 0])]), faces


def kept(section: tuple[Array, Rows], inside: Callable[[Array], bool]) -> tuple[Array, Rows]:
    """Return the faces whose mean corner lies inside."""
    faces = [face for face in section[1] if inside(section[0][face].mean(axis=0))]
    names, number = np.unique(np.concatenate(faces), return_inverse=True)
    cuts = np.cumsum([len(face) for face in faces])[:-1]
    return section[0][names], np.split(number, cuts)


def curved_duct(section: tuple[Array, Rows], size: int, **options: Any) -> ControlSurface:
    """Extrude a plane mesh of quadratic faces, made from straight ones; middles of rim edges go out to their circle.

    Triangles get 6 points, quads `size` (8 or 9).
    """
    plane, faces = np.asarray(section[0], float), [face.tolist() for face in section[1]]
    edges = [(a, b) for face in faces for a, b in zip(face, face[1:] + face[:1])]
    rim = [(a, b) for a, b in edges if (b, a) not in set(edges)]
    number = {edge: len(plane) + k for k, edge in enumerate(dict.fromkeys((min(e), max(e)) for e in edges))}
    middles = np.array([(plane[a] + plane[b]) / 2 for a, b in number])
    for a, b in rim:
        row = number[min(a, b), max(a, b)] - len(plane)
        middles[row] *= np.linalg.norm(plane[a]) / np.linalg.norm(middles[row])
    points, rows = [plane, middles], []
    count = len(plane) + len(middles)
    for face in faces:
        row = face + [number[min(e), max(e)] for e in zip(face, face[1:] + face[:1])]
        if len(face) == 4 and size == 9:
            points.append(plane[face].mean(axis=0)[None])
            row.append(count)
            count += 1
        rows.append(np.array(row))
    flat = np.concatenate(points)
    turned = [
        row[[0, 2, 1, 5, 4, 3]] if len(row) == 6 else row[[0, 3, 2, 1, 7, 6, 5, 4, *([8] * (len(row) == 9))]]
        for row in rows
    ]
    # halfway up, each rim point once more
    corners = sorted({point for edge in rim for point in edge})
    up = {point: 2 * count + k for k, point in enumerate(corners)}
    levels = [np.column_stack([flat, np.full(count, z)]) for z in (0.0, 1.0)]
    levels.append(np.column_stack([flat[corners], np.full(len(corners), 0.5)]))
    sides = []
    for a, b in rim:
        m = number[min(a, b), max(a, b)]
        sides.append(np.array([a, b, b + count, a + count, m, up[b], m + count, up[a]]))
    parts = len(rows)
    groups = {
        "in": ("inlet", np.arange(parts)),
        "out": ("outlet", parts + np.arange(parts)),
        "side": (WALL, 2 * parts + np.arange(len(sides))),
    }
    every = [*turned, *(row + count for row in rows), *sides]
    return control_surface(np.concatenate(levels), every, groups, curved=True, **options)


def polygon_section(contour: ArrayLike) -> tuple[Array, Rows]:
    """Return one polygon, counter-clockwise."""
    points = np.asarray(contour, float)
    return points, [np.arange(len(points))]
