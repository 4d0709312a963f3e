"""The box round the points that faces use: a stray point far away must not stretch it."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.compiling import compiled, run_parts

__all__ = ["used_box"]

_PARTS = 4


def used_box(
    points: NDArray[np.float64], connectivity: NDArray[np.int64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the corners of the box round the points that faces use.

    Parameters
    ----------
    points : ndarray, shape (n_points, 3), float64
        Coordinates, finite.
    connectivity : ndarray, shape (n_entries,), int64
        Points that faces use, at least one.

    Returns
    -------
    low, high : ndarray, shape (3,), float64
        In the points' unit.
    """
    used = np.zeros(points.shape[0], np.bool_)
    lows = np.full((_PARTS, 3), np.inf)
    highs = np.full((_PARTS, 3), -np.inf)
    run_parts(lambda part: _mark_used(part, _PARTS, connectivity, used), _PARTS)
    run_parts(lambda part: _box(part, points, used, lows, highs), _PARTS)
    return lows.min(axis=0), highs.max(axis=0)


@compiled
def _mark_used(part: int, parts: int, connectivity: Any, used: Any) -> None:
    # threads may mark one point at once: they write the same
    for entry in range(connectivity.size * part // parts, connectivity.size * (part + 1) // parts):
        used[connectivity[entry]] = True


@compiled
def _box(part: int, points: Any, used: Any, lows: Any, highs: Any) -> None:
    parts, count = lows.shape[0], used.size
    x0 = y0 = z0 = np.inf
    x1 = y1 = z1 = -np.inf
    for point in range(count * part // parts, count * (part + 1) // parts):
        if used[point]:
            x, y, z = points[point, 0], points[point, 1], points[point, 2]
            x0, y0, z0 = min(x0, x), min(y0, y), min(z0, z)
            x1, y1, z1 = max(x1, x), max(y1, y), max(z1, z)
    lows[part, 0], lows[part, 1], lows[part, 2] = x0, y0, z0
    highs[part, 0], highs[part, 1], highs[part, 2] = x1, y1, z1
