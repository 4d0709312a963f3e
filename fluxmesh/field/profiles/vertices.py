"""Which corners of a port's pieces are one vertex, and the edges between them."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from fluxmesh.surface.weld import join_equal_points, join_near_points

__all__ = ["Edges", "edges_of", "joined_corners"]


class Edges(NamedTuple):
    """The edges of triangles.

    Attributes
    ----------
    ends : ndarray, shape (n_edges, 2), int64
        Vertices, the lower first.
    of_corner : ndarray, shape (n_triangles, 3), int64
        Edge that runs from each corner to the next.
    uses : ndarray, shape (n_edges,), int64
        How many triangles have it; 1 on the rim.
    """

    ends: NDArray[np.int64]
    of_corner: NDArray[np.int64]
    uses: NDArray[np.int64]


def edges_of(corners: NDArray[np.int64]) -> Edges:
    """Return the edges of triangles.

    Parameters
    ----------
    corners : ndarray, shape (n_triangles, 3), int64
        Vertices, none negative.

    Returns
    -------
    Edges
        Each pair of vertices once.
    """
    following = np.roll(corners, -1, axis=1)
    low, high = np.minimum(corners, following), np.maximum(corners, following)
    base = int(corners.max(initial=0)) + 1
    keys, number, uses = np.unique((low * base + high).ravel(), return_inverse=True, return_counts=True)
    return Edges(np.column_stack(np.divmod(keys, base)), number.reshape(corners.shape), uses)


def joined_corners(
    corners: NDArray[np.int64], places: NDArray[np.float64], tolerance: float
) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Number vertices so that copies in one place, which exports make, become one.

    Exact copies are joined everywhere; points within the tolerance only where
    edges are still alone, so that a fine mesh never collapses.

    Parameters
    ----------
    corners : ndarray, shape (n_triangles, 3), int64
        Vertex numbers of any kind.
    places : ndarray, shape (n_triangles, 3, 3), float64
        Their coordinates, m.
    tolerance : float
        Distance within which points coincide, m.

    Returns
    -------
    corners : ndarray, shape (n_triangles, 3), int64
        Vertices, numbered from 0 without gaps.
    vertices : ndarray, shape (n_vertices, 3), float64
        Their coordinates.
    """
    _, first, number = np.unique(corners.ravel(), return_index=True, return_inverse=True)
    points = np.ascontiguousarray(places.reshape(-1, 3)[first])
    entries = number.astype(np.int64)
    representative = join_equal_points(points, np.ones(len(points), np.bool_))
    edges = edges_of(representative[entries].reshape(-1, 3))
    alone = edges.ends[edges.uses == 1]
    if alone.size:
        lengths = np.linalg.norm(points[alone[:, 0]] - points[alone[:, 1]], axis=1)
        # well below the spacing of the rim, whatever the size of the surface
        tolerance = min(tolerance, 0.25 * float(lengths[lengths > 0.0].min(initial=np.inf)))
        candidates = np.zeros(len(points), np.bool_)
        candidates[alone] = True
        no_kinds = np.empty(0, np.int64), np.empty(0, np.int8)
        representative = join_near_points(points, candidates, representative, tolerance, (entries, *no_kinds))
    kept, joined = np.unique(representative[entries], return_inverse=True)
    return joined.reshape(-1, 3).astype(np.int64), points[kept]
