"""Labels placed in a picture so that none covers another."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

__all__ = ["place_labels"]

# Distances, in label heights, and directions tried around each anchor point.
_RINGS = (0.35, 0.8, 1.4, 2.2, 3.2, 4.6, 6.5)
_DIRECTIONS = 24


def place_labels(
    anchors: NDArray[np.float64],
    sizes: NDArray[np.float64],
    area: tuple[float, float, float, float],
    *,
    wanted: NDArray[np.float64] | None = None,
    boxes: NDArray[np.float64] | None = None,
    lines: NDArray[np.float64] | None = None,
    busy: NDArray[np.bool_] | None = None,
    gap: float = 4.0,
) -> NDArray[np.float64]:
    """Find a place for each label near its anchor point, the first ones first.

    A place is taken only when it is inside the area and clear of all boxes and
    of the labels before it. Among those, one is preferred that is near the
    anchor, lies in the wanted direction, crosses no line, and whose leader
    crosses no box. Greedy: no label is moved again.

    Parameters
    ----------
    anchors : ndarray, shape (n, 2), float64
        Points that the labels belong to, in pixels, y up.
    sizes : ndarray, shape (n, 2), float64
        Width and height of the labels in pixels.
    area : tuple of float
        Left, bottom, right, top that labels must stay in.
    wanted : ndarray, shape (n, 2), float64, optional
        Direction in which each label should lie; zero for no wish.
    boxes : ndarray, shape (m, 4), float64, optional
        Left, bottom, right, top that must stay free.
    lines : ndarray, shape (k, 4), float64, optional
        Lines from (x, y) to (x, y) that should stay free.
    busy : ndarray, shape (height, width), bool, optional
        Pixels of the area that should rather stay free, first row at the bottom.
    gap : float
        Clear space around each label in pixels.

    Returns
    -------
    ndarray, shape (n, 4), float64
        Left, bottom, right, top of each label; NaN for one that has no room.
    """
    count = len(anchors)
    placed = np.full((count, 4), np.nan)
    taken = np.empty((0, 4)) if boxes is None else np.asarray(boxes, dtype=np.float64).reshape(-1, 4)
    strokes = np.empty((0, 4)) if lines is None else np.asarray(lines, dtype=np.float64).reshape(-1, 4)
    filled = np.zeros((1, 1)) if busy is None else np.pad(busy, ((1, 0), (1, 0))).cumsum(axis=0).cumsum(axis=1)
    for i in range(count):
        wish = np.zeros(2) if wanted is None else np.asarray(wanted[i], dtype=np.float64)
        free = np.empty((0, 4))
        for middles in (_rings(anchors[i], sizes[i]), _lattice(sizes[i], area)):
            candidates = np.hstack([middles - 0.5 * sizes[i], middles + 0.5 * sizes[i]])
            inside = (candidates[:, :2] >= area[:2]).all(axis=1) & (candidates[:, 2:] <= area[2:]).all(axis=1)
            candidates = candidates[inside]
            free = candidates[~_overlap(candidates, taken, gap).any(axis=1)]
            if len(free):
                break
        else:
            continue
        cost = _cost(free, anchors[i], sizes[i], wish, taken, strokes)
        cost += 1.5 * _covered(free - np.tile(area[:2], 2), filled)
        placed[i] = free[int(np.argmin(cost))]
        taken = np.vstack([taken, placed[i]])
        # the leader too should stay free of later labels
        middle = placed[i].reshape(2, 2).mean(axis=0)
        strokes = np.vstack([strokes, np.concatenate([anchors[i], middle])])
    return placed


def _rings(anchor: NDArray[np.float64], size: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return middles of labels on rings about the anchor, the nearest first."""
    angle = np.arange(_DIRECTIONS) * (2.0 * np.pi / _DIRECTIONS)
    ray = np.stack([np.cos(angle), np.sin(angle)], axis=1)
    # The middle of the label goes to where its box just leaves the ring's distance.
    reach = np.min(0.5 * size / np.maximum(np.abs(ray), 1e-9), axis=1)
    return np.vstack([anchor + ray * (reach + ring * size[1])[:, None] for ring in _RINGS])


def _lattice(size: NDArray[np.float64], area: tuple[float, float, float, float]) -> NDArray[np.float64]:
    """Return middles of labels all over the area."""
    across = np.arange(area[0] + 0.5 * size[0], area[2] - 0.5 * size[0] + 1.0, max(0.5 * size[0], 8.0))
    along = np.arange(area[1] + 0.5 * size[1], area[3] - 0.5 * size[1] + 1.0, max(size[1], 8.0))
    return np.stack(np.meshgrid(across, along), axis=-1).reshape(-1, 2)


def _covered(boxes: NDArray[np.float64], filled: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the share of busy pixels in each box, from the running sums over rows and columns."""
    columns = np.clip(np.round(boxes[:, [0, 2]]).astype(np.int64), 0, filled.shape[1] - 1)
    rows = np.clip(np.round(boxes[:, [1, 3]]).astype(np.int64), 0, filled.shape[0] - 1)
    (left, right), (bottom, top) = columns.T, rows.T
    inside = filled[top, right] - filled[bottom, right] - filled[top, left] + filled[bottom, left]
    return np.asarray(inside / np.maximum((right - left) * (top - bottom), 1))


def _overlap(boxes: NDArray[np.float64], others: NDArray[np.float64], gap: float) -> NDArray[np.bool_]:
    """Return, for each pair, whether the boxes come nearer than the gap; shape (n, m)."""
    a, b = boxes[:, None, :], others[None, :, :]
    return np.asarray(
        (a[..., 0] < b[..., 2] + gap)
        & (b[..., 0] < a[..., 2] + gap)
        & (a[..., 1] < b[..., 3] + gap)
        & (b[..., 1] < a[..., 3] + gap)
    )


def _cost(
    boxes: NDArray[np.float64],
    anchor: NDArray[np.float64],
    size: NDArray[np.float64],
    wish: NDArray[np.float64],
    taken: NDArray[np.float64],
    strokes: NDArray[np.float64],
) -> NDArray[np.float64]:
    """Return what each free place costs, in label heights of distance."""
    nearest = np.clip(anchor, boxes[:, :2], boxes[:, 2:])
    cost = np.linalg.norm(nearest - anchor, axis=1) / size[1]
    # a label over its own anchor hides it
    cost += 6.0 * (nearest == anchor).all(axis=1)
    away = 0.5 * (boxes[:, :2] + boxes[:, 2:]) - anchor
    if wish.any():
        turn = (away @ wish) / np.maximum(np.linalg.norm(away, axis=1) * np.linalg.norm(wish), 1e-9)
        cost += 2.0 * (1.0 - turn)
    leaders = np.hstack([np.broadcast_to(anchor, nearest.shape), nearest])
    if len(strokes):
        # close beside a line is almost as bad as on it: the label seems to belong to it
        margin = 0.2 * size[1] * np.array([-1.0, -1.0, 1.0, 1.0])
        cost += 1.0 * _hits(strokes, boxes).sum(axis=0) + 0.6 * _hits(strokes, boxes + margin).sum(axis=0)
        cost += 0.7 * _crossings(leaders, strokes).sum(axis=1)
    if len(taken):
        cost += 2.5 * _hits(leaders, taken).sum(axis=1)
    return np.asarray(cost)


def _hits(lines: NDArray[np.float64], boxes: NDArray[np.float64]) -> NDArray[np.bool_]:
    """Return whether each line passes through each box; shape (n_lines, n_boxes).

    Slab test: the line runs through the box when the ranges of its parameter
    that lie between the box's sides in x and in y have a part in common.
    """
    start, step = lines[:, None, :2], (lines[:, 2:] - lines[:, :2])[:, None, :]
    # A line along an axis gets a step too small to matter, in place of a division by zero.
    step = np.where(np.abs(step) < 1e-9, 1e-9, step)
    one, two = (boxes[None, :, :2] - start) / step, (boxes[None, :, 2:] - start) / step
    enter = np.minimum(one, two).max(axis=-1)
    leave = np.maximum(one, two).min(axis=-1)
    return np.asarray((enter < leave) & (leave > 0.0) & (enter < 1.0))


def _crossings(lines: NDArray[np.float64], others: NDArray[np.float64]) -> NDArray[np.bool_]:
    """Return whether each line cuts each other line; shape (n_lines, n_others)."""
    p, r = lines[:, None, :2], (lines[:, 2:] - lines[:, :2])[:, None, :]
    q, s = others[None, :, :2], (others[:, 2:] - others[:, :2])[None, :, :]
    area = r[..., 0] * s[..., 1] - r[..., 1] * s[..., 0]
    # parallel lines are counted as apart
    whole = np.where(np.abs(area) < 1e-9, np.inf, area)
    gap = q - p
    t = (gap[..., 0] * s[..., 1] - gap[..., 1] * s[..., 0]) / whole
    v = (gap[..., 0] * r[..., 1] - gap[..., 1] * r[..., 0]) / whole
    return np.asarray((np.abs(area) >= 1e-9) & (t >= 0.0) & (t <= 1.0) & (v >= 0.0) & (v <= 1.0))
