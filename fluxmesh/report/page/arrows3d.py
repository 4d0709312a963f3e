"""Force arrows as solids for the turnable scene: to scale, in forms that differ, none inside another."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.report.picture_arrows import Reach
from fluxmesh.report.scene import Scene

__all__ = ["SolidArrow", "solid_arrows"]

# Shares of the diagonal of the surface's box.
_SHORTEST = 0.055
_CLEARANCE = 0.012
_TAG = 0.03
# A force below this share of the largest is listed but not drawn.
_LEAST_SHARE = 1e-6
_STATIONS: Final = np.linspace(0.0, 1.0, 13)[:, None]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class _Form:
    """Shape of a kind of arrow; lengths as shares of the diagonal."""

    radius: float
    head_radius: float
    head_length: float
    sides: int
    dashes: int = 1


_FORMS: Final = {
    "pressure": _Form(0.006, 0.017, 0.042, 16),
    "momentum": _Form(0.0055, 0.017, 0.036, 16, dashes=4),
    "weight": _Form(0.004, 0.013, 0.034, 16),
    "resultant": _Form(0.012, 0.028, 0.052, 4),
    "reaction": _Form(0.012, 0.028, 0.052, 4, dashes=4),
}


@dataclass(frozen=True, eq=False)
class SolidArrow:
    """An arrow as triangles.

    Attributes
    ----------
    points : ndarray, shape (n, 3), float64
        m.
    triangles : ndarray, shape (m, 3), int64
        Point indices.
    outer : ndarray, shape (3,), float64
        Where its tag is to stand: beyond the end that is farther from the surface, m.
    tail, tip : ndarray, shape (3,), float64
        Its ends, m.
    enlarged : bool
        Drawn longer than the scale says, to be seen.
    drawn : bool
        False for a force too small to be drawn.
    """

    points: Array
    triangles: NDArray[np.int64]
    outer: Array
    tail: Array
    tip: Array
    enlarged: bool
    drawn: bool


def solid_arrows(scene: Scene, reach: Reach) -> list[SolidArrow]:
    """Return the arrows of a scene as solids.

    Parameters
    ----------
    scene : Scene
        With its arrows.
    reach : Reach
        Where they lie, from `fluxmesh.report.picture_arrows.reach_of`.

    Returns
    -------
    list of SolidArrow
        In the order of the scene's arrows. Arrows that would lie in one another are set side by side.
    """
    low, high = scene.points.min(axis=0), scene.points.max(axis=0)
    middle, size = 0.5 * (low + high), float(np.linalg.norm(high - low))
    largest = max((arrow.magnitude for arrow in scene.arrows), default=0.0)
    made: dict[int, SolidArrow] = {}
    placed: list[tuple[Array, Array, float]] = []
    order = sorted(range(len(scene.arrows)), key=lambda i: (scene.arrows[i].group is None, -scene.arrows[i].magnitude))
    for i in order:
        arrow = scene.arrows[i]
        form = _FORMS[arrow.kind]
        if largest <= 0.0 or arrow.magnitude < _LEAST_SHARE * largest:
            nothing = np.empty((0, 3))
            made[i] = SolidArrow(
                nothing, np.empty((0, 3), np.int64), reach.at[i], reach.at[i], reach.at[i], False, False
            )
            continue
        unit = arrow.vector / arrow.magnitude
        tail, tip = reach.tail[i], reach.tip[i]
        enlarged = float(np.linalg.norm(tip - tail)) < _SHORTEST * size
        if enlarged:
            arrives = not np.array_equal(reach.at[i], reach.tail[i])
            tail, tip = (tip - _SHORTEST * size * unit, tip) if arrives else (tail, tail + _SHORTEST * size * unit)
        radius = form.head_radius * size
        shift = _sidestep(tail, tip, radius, placed, _CLEARANCE * size)
        tail, tip = tail + shift, tip + shift
        placed.append((tail, tip, radius))
        points, triangles = _solid(tail, tip, form, size)
        far, near = (tail, tip) if np.linalg.norm(tail - middle) > np.linalg.norm(tip - middle) else (tip, tail)
        outer = far + _TAG * size * (far - near) / float(np.linalg.norm(far - near))
        aside = float(np.linalg.norm(shift))
        # the tag of an arrow set aside goes further aside, off that of its neighbour
        outer = outer + _TAG * size * shift / aside if aside > 0.0 else outer
        made[i] = SolidArrow(points, triangles, outer, tail, tip, enlarged, True)
    return [made[i] for i in range(len(scene.arrows))]


def _square_to(unit: Array) -> tuple[Array, Array]:
    """Two unit vectors square to a third and to one another."""
    other = np.eye(3)[int(np.argmin(np.abs(unit)))]
    one = np.cross(unit, other)
    one /= np.linalg.norm(one)
    return one, np.cross(unit, one)


def _solid(tail: Array, tip: Array, form: _Form, size: float) -> tuple[Array, NDArray[np.int64]]:
    """Shaft, in dashes where the form has them, and head."""
    length = float(np.linalg.norm(tip - tail))
    head = min(form.head_length * size, 0.6 * length)
    thick = min(1.0, head / (form.head_length * size) + 0.25)
    shaft, radius = length - head, form.radius * size * thick
    profiles = []
    # dashes of two parts drawn to one part left out
    count = form.dashes if shaft > 1.5 * form.dashes * radius else 1
    step = shaft / (count - 1 / 3)
    for k in range(count):
        start = k * step
        profiles.append([(start, 0.0), (start, radius), (start + (step * 2 / 3), radius), (start + step * 2 / 3, 0.0)])
    profiles.append([(shaft, 0.0), (shaft, form.head_radius * size * thick), (length, 0.0)])
    return _turned(tail, (tip - tail) / length, profiles, form.sides)


def _turned(
    start: Array, unit: Array, profiles: Sequence[Sequence[tuple[float, float]]], sides: int
) -> tuple[Array, NDArray[np.int64]]:
    """Turn outlines, each (distance along, radius), about an axis; a corner of its own at each edge of an outline."""
    one, other = _square_to(unit)
    angles = 2 * np.pi * (np.arange(sides) + 0.5) / sides
    around = np.cos(angles)[:, None] * one + np.sin(angles)[:, None] * other
    points: list[Array] = []
    triangles: list[NDArray[np.int64]] = []
    count = 0
    here = np.arange(sides)
    following = (here + 1) % sides
    for profile in profiles:
        for (along, radius), (further, wider) in pairwise(profile):
            ring = start + along * unit + radius * around
            next_ring = start + further * unit + wider * around
            points += [ring, next_ring]
            a, b = count + here, count + following
            c, d = a + sides, b + sides
            if radius > 0.0:
                triangles.append(np.stack([a, b, c], axis=1))
            if wider > 0.0:
                triangles.append(np.stack([b, d, c], axis=1))
            count += 2 * sides
    return np.vstack(points), np.vstack(triangles).astype(np.int64)


def _sidestep(
    tail: Array, tip: Array, radius: float, placed: Sequence[tuple[Array, Array, float]], gap: float
) -> Array:
    """Return the smallest shift square to an arrow that frees it from those placed before."""
    one, other = _square_to((tip - tail) / np.linalg.norm(tip - tail))
    best, least = np.zeros(3), np.inf
    for ring in range(5):
        for angle in np.arange(0.0, 2 * np.pi, np.pi / 4) if ring else (0.0,):
            shift = ring * (radius + 0.5 * gap) * (np.cos(angle) * one + np.sin(angle) * other)
            mine = tail + shift + _STATIONS * (tip - tail)
            cost = 0.02 * ring
            for other_tail, other_tip, other_radius in placed:
                theirs = other_tail + _STATIONS * (other_tip - other_tail)
                away = np.linalg.norm(mine[:, None] - theirs[None, :], axis=-1)
                near = radius + other_radius + gap
                cost += float((away.min(axis=1) < near).mean()) + float((away.min(axis=0) < near).mean())
            if cost < least - 1e-9:
                best, least = shift, cost
    return np.asarray(best)
