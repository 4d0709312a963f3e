"""Distance from the walls of a port, in its plane."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from fluxmesh.field.profiles.port import PortPatch, plane_coordinates, require_wall

__all__ = ["distance_to_segments", "edge_segments", "largest_wall_distance", "wall_distance"]

_CURVE_PARTS = 32  # a curved edge in that many chords: a thousandth of its own sagitta is left

_MOST_PROMISING = 4000


def edge_segments(patch: PortPatch, edges: NDArray[np.int64]) -> NDArray[np.float64]:
    """Return edges of a port as straight segments in its plane.

    Parameters
    ----------
    patch : PortPatch
        The port.
    edges : ndarray, shape (n, 3), int64
        Ends and mid-side point of each, as `PortPatch.wall_edges`.

    Returns
    -------
    ndarray, shape (m, 2, 2), float64
        Segment, end, coordinate (m), as `plane_coordinates`; curved edges
        become chords.
    """
    place = plane_coordinates(patch, patch.points[edges])
    bend = np.linalg.norm(place[:, 2] - 0.5 * (place[:, 0] + place[:, 1]), axis=1)
    curved = bend > 1e-12 * patch.size
    s = np.linspace(0, 1, _CURVE_PARTS + 1)
    along = np.stack([(1 - s) * (1 - 2 * s), s * (2 * s - 1), 4 * s * (1 - s)], axis=1) @ place[curved]
    chords = np.stack([along[:, :-1], along[:, 1:]], axis=2).reshape(-1, 2, 2)
    return np.concatenate([place[~curved, :2], chords])


def distance_to_segments(places: NDArray[np.float64], segments: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return distances to the nearest of some segments, exact but for round-off.

    Parameters
    ----------
    places : ndarray, shape (n, 2), float64
        Places.
    segments : ndarray, shape (m, 2, 2), float64
        Both ends of each segment; m is at least 1.

    Returns
    -------
    ndarray, shape (n,), float64
        In the unit of the coordinates.

    Notes
    -----
    Places are taken in square cells. What lies within `r` of the middle of its
    cell, `d` from the nearest segment, has its nearest segment within
    ``d + 2 r`` of the middle, so that few segments are left for a cell.
    """
    nearest = np.empty(len(places))
    if len(places) == 0:
        return nearest
    order, starts = _cells(places, len(segments))
    for first, end in pairwise(starts.tolist()):
        here = order[first:end]
        own = places[here]
        middle = 0.5 * (own.min(axis=0) + own.max(axis=0))
        reach = float(np.linalg.norm(own - middle, axis=1).max())
        from_middle = _distances(middle[None], segments)[0]
        left = segments[from_middle <= (from_middle.min() + 2 * reach) * (1 + 1e-12)]
        nearest[here] = _distances(own, left).min(axis=1)
    return nearest


def _cells(places: NDArray[np.float64], segments: int) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Sort places into square cells; return their order and where each cell starts."""
    low, extent = places.min(axis=0), np.ptp(places, axis=0).max()
    across = int(np.clip(np.sqrt(len(places) / 100), 1, 128)) if segments > 8 else 1
    across = max(across, int(np.sqrt(len(places) / 1e5)))  # keeps the table of a cell small
    cell = np.minimum((places - low) * (across / extent if extent > 0 else 0.0), across - 1).astype(np.int64)
    key = cell[:, 0] * across + cell[:, 1]
    order = np.argsort(key, kind="stable")
    return order, np.append(np.flatnonzero(np.diff(key[order], prepend=-1)), len(places))


def _distances(places: NDArray[np.float64], segments: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the distance of each place from each segment, shape (n, m)."""
    tail, along = segments[:, 0], segments[:, 1] - segments[:, 0]
    length = np.hypot(along[:, 0], along[:, 1])
    # one without length is a point: any direction will do
    unit = np.where(length[:, None] > 0, along, [1.0, 0.0]) / np.where(length > 0, length, 1)[:, None]
    x = places[:, :1] - tail[:, 0]
    y = places[:, 1:] - tail[:, 1]
    s = x * unit[:, 0] + y * unit[:, 1]
    beyond = s - np.clip(s, 0.0, length)
    across = y * unit[:, 0] - x * unit[:, 1]
    return np.asarray(np.hypot(across, beyond))


def wall_distance(patch: PortPatch, places: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the distance of places from the nearest wall that meets a port.

    Parameters
    ----------
    patch : PortPatch
        The port.
    places : ndarray, shape (n, 3), float64
        Places in the port, m; seen along its normal.

    Returns
    -------
    ndarray, shape (n,), float64
        m.

    Raises
    ------
    FieldError
        A port that no wall meets.
    """
    require_wall(patch)
    return distance_to_segments(plane_coordinates(patch, places), edge_segments(patch, patch.wall_edges))


def largest_wall_distance(patch: PortPatch, *, tolerance: float = 1e-3) -> float:
    """Return the largest distance from the wall within a port: the radius of a round one.

    Parameters
    ----------
    patch : PortPatch
        The port.
    tolerance : float, optional
        Share of the result that may be missed.

    Returns
    -------
    float
        m.

    Raises
    ------
    FieldError
        A port that no wall meets.

    Notes
    -----
    The distance changes no faster than the place, so that a triangle whose
    middle is too near to the wall for its size is left out; the others, up to
    some thousands, are divided.
    """
    require_wall(patch)
    walls = edge_segments(patch, patch.wall_edges)
    nodes = plane_coordinates(patch, patch.points)
    best = float(distance_to_segments(nodes[np.unique(patch.triangles)], walls).max())
    corners = nodes[patch.triangles[:, :3]]
    while len(corners):
        middle = corners.mean(axis=1)
        reach = np.linalg.norm(corners - middle[:, None], axis=2).max(axis=1)
        distance = distance_to_segments(middle, walls)
        best = max(best, float(distance.max()))
        bound = distance + reach
        promising = np.flatnonzero(bound > best * (1 + tolerance))
        # along a duct of one width all are as good: the most promising will do
        corners = _quarters(corners[promising[np.argsort(-bound[promising], kind="stable")[:_MOST_PROMISING]]])
    return best


def _quarters(corners: NDArray[np.float64]) -> NDArray[np.float64]:
    a, b, c = (corners[:, k] for k in range(3))
    ab, bc, ca = 0.5 * (a + b), 0.5 * (b + c), 0.5 * (c + a)
    rows = [(a, ab, ca), (ab, b, bc), (ca, bc, c), (bc, ca, ab)]
    return np.concatenate([np.stack(row, axis=1) for row in rows])
