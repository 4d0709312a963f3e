"""Faces told apart by their corners, whatever point they start with and whichever way they turn."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = ["coincident_points", "face_labels", "lone_rows"]

# odd constants of a mixing function that spreads neighbouring numbers over 64 bits
_MIX = (np.uint64(0x9E3779B97F4A7C15), np.uint64(0xBF58476D1CE4E5B9), np.uint64(0x94D049BB133111EB))


def face_labels(connectivity: NDArray[np.int64], offsets: NDArray[np.int64]) -> NDArray[np.int64]:
    """Number faces so that those with the same corners have the same number.

    Parameters
    ----------
    connectivity : ndarray, shape (n_entries,), int64
        Corners of the faces, one after the other; no mid-side points. From 0.
    offsets : ndarray, shape (n_faces + 1,), int64
        Where each face starts; every face has a corner.

    Returns
    -------
    ndarray, shape (n_faces,), int64
        Labels from 0. Faces with equal sets of corners share one; others do
        so with a chance below 1e-20 for a billion faces, because each corner
        is drawn two 64-bit numbers and the sums are compared.
    """
    if offsets.size < 2:
        return np.zeros(0, dtype=np.int64)
    words, seconds = (
        np.add.reduceat(table[connectivity], offsets[:-1]) for table in _tables(int(connectivity.max()) + 1)
    )
    order, equal = _sorted(words, seconds)
    return _numbered(order, equal)


def lone_rows(blocks: Sequence[NDArray[np.int64]], count: int) -> list[NDArray[np.bool_]]:
    """Tell which faces share their corners with no other face.

    Parameters
    ----------
    blocks : sequence of ndarray, shape (n, k), int64
        Corners of the faces, of one or several sizes.
    count : int
        Number of points.

    Returns
    -------
    list of ndarray of bool, shape (n,)
        For each block: whether no other face, of any block, has the same set
        of corners; as sure as `face_labels`.
    """
    words, seconds = (
        np.concatenate([_row_sums(table, rows) for rows in blocks]) if blocks else np.zeros(0, dtype=np.uint64)
        for table in _tables(count)
    )
    order, equal = _sorted(words, seconds)
    lone = np.empty(words.size, dtype=np.bool_)
    lone[order] = ~(np.concatenate([[False], equal]) | np.concatenate([equal, [False]]))[: words.size]
    ends = np.cumsum([len(rows) for rows in blocks])
    return np.split(lone, ends[:-1])


def _tables(count: int) -> tuple[NDArray[np.uint64], NDArray[np.uint64]]:
    """Return two numbers for each point, whose sums tell sets of points apart in any order."""
    first = _mixed(np.arange(count, dtype=np.uint64))
    return first, _mixed(first)


def _row_sums(table: NDArray[np.uint64], rows: NDArray[np.int64]) -> NDArray[np.uint64]:
    total = table[rows[:, 0]]
    for column in range(1, rows.shape[1]):
        total += table[rows[:, column]]
    return total


def _sorted(words: NDArray[np.uint64], seconds: NDArray[np.uint64]) -> tuple[NDArray[np.int64], NDArray[np.bool_]]:
    """Return an order that puts equal pairs of words side by side, and which equal the one before."""
    order = np.argsort(words)
    ordered, beside = words[order], seconds[order]
    same = ordered[1:] == ordered[:-1]
    equal = same & (beside[1:] == beside[:-1])
    if bool((same != equal).any()):
        order = np.lexsort((seconds, words))
        equal = (words[order[1:]] == words[order[:-1]]) & (seconds[order[1:]] == seconds[order[:-1]])
    return order, equal


def coincident_points(points: NDArray[Any]) -> NDArray[np.int64]:
    """Give points at exactly the same place the same number.

    Parameters
    ----------
    points : ndarray, shape (n_points, 3)
        Coordinates.

    Returns
    -------
    ndarray, shape (n_points,), int64
        Numbers from 0.
    """
    if not len(points):
        return np.zeros(0, dtype=np.int64)
    # a float64 as an integer has one pattern a value, once -0.0 is gone
    rows = np.ascontiguousarray(np.asarray(points, dtype=np.float64) + 0.0).view(np.uint64)
    words = np.zeros(len(rows), dtype=np.uint64)
    for column in range(rows.shape[1]):
        words = _mixed(words ^ rows[:, column])
    order = np.argsort(words)
    same = words[order[1:]] == words[order[:-1]]
    equal = same & (rows[order[1:]] == rows[order[:-1]]).all(axis=1)
    if bool((same != equal).any()):
        order = np.lexsort(rows.T)
        equal = (rows[order[1:]] == rows[order[:-1]]).all(axis=1)
    return _numbered(order, equal)


def _numbered(order: NDArray[np.int64], equal: NDArray[np.bool_]) -> NDArray[np.int64]:
    """Number sorted things, given which are equal to the one before."""
    labels = np.empty(order.size, dtype=np.int64)
    labels[order] = np.concatenate([[0], np.cumsum(~equal)])
    return labels


def _mixed(words: NDArray[np.uint64]) -> NDArray[np.uint64]:
    words = words + _MIX[0]
    words = (words ^ (words >> np.uint64(30))) * _MIX[1]
    words = (words ^ (words >> np.uint64(27))) * _MIX[2]
    return words ^ (words >> np.uint64(31))
