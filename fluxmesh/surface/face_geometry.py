"""Areas, normals and centroids of faces, and the face nearest to a point.

Curved faces count by their corners here: these functions tell faces apart, no
integral is taken from them.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.surface.surface import FaceKind

__all__ = [
    "FaceGeometry",
    "bounding_diagonal",
    "corner_entries",
    "corners",
    "face_areas_normals",
    "face_geometry",
    "face_starts",
    "nearest_face",
]

_CORNERS = {FaceKind.TRIANGLE6: 3, FaceKind.QUAD8: 4, FaceKind.QUAD9: 4}


@dataclass(frozen=True, eq=False)
class FaceGeometry:
    """What is known of each face, in the points' unit.

    Attributes
    ----------
    areas : ndarray, shape (n_faces,), float64
        Length of the area vector.
    normals : ndarray, shape (n_faces, 3), float64
        Unit normals; zero for a face without area.
    centroids : ndarray, shape (n_faces, 3), float64
        Of the area; of the corners for a face without area.
    """

    areas: NDArray[np.float64]
    normals: NDArray[np.float64]
    centroids: NDArray[np.float64]


def corners(
    connectivity: NDArray[np.int64], offsets: NDArray[np.int64] | None, kinds: NDArray[np.int8] | None
) -> tuple[NDArray[np.int64], NDArray[np.int64] | None]:
    """Return faces as polygons of their corners.

    Parameters
    ----------
    connectivity, offsets, kinds
        As in `fluxmesh.surface.rawmesh.RawMesh`.

    Returns
    -------
    connectivity : ndarray, shape (n_entries,), int64
        Without mid-side and centre points.
    offsets : ndarray, shape (n_faces + 1,), int64, or None
        None when every face is a triangle.
    """
    if kinds is None or offsets is None:
        return connectivity, offsets
    sizes = np.diff(offsets)
    counts = sizes.copy()
    for kind, number in _CORNERS.items():
        counts[kinds == kind] = number
    starts = face_starts(counts)
    within = np.arange(starts[-1]) - np.repeat(starts[:-1], counts)
    return connectivity[np.repeat(offsets[:-1], counts) + within], starts


def face_areas_normals(
    points: NDArray[Any], connectivity: NDArray[np.int64], offsets: NDArray[np.int64] | None
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return areas and unit normals of polygons.

    The area vector of a polygon is half the sum of the cross products of
    neighbouring corners, seen from its first corner; it does not depend on
    that choice, nor on the polygon being convex or plane.

    Parameters
    ----------
    points : ndarray, shape (n_points, 3)
        Coordinates.
    connectivity : ndarray, shape (n_entries,), int64
        Corners of the polygons, one polygon after the other.
    offsets : ndarray, shape (n_faces + 1,), int64, or None
        Where each starts; None for triangles.

    Returns
    -------
    areas : ndarray, shape (n_faces,), float64
        Lengths of the area vectors.
    normals : ndarray, shape (n_faces, 3), float64
        By the right-hand rule; zero for a face without area.
    """
    geometry = face_geometry(points, connectivity, offsets)
    return geometry.areas, geometry.normals


def face_geometry(
    points: NDArray[Any], connectivity: NDArray[np.int64], offsets: NDArray[np.int64] | None
) -> FaceGeometry:
    """Return areas, normals and centroids of polygons.

    Parameters
    ----------
    points, connectivity, offsets
        As `face_areas_normals`.

    Returns
    -------
    FaceGeometry
        One entry a face.
    """
    if offsets is None:
        return _triangle_geometry(points, connectivity)
    (first, second, third), owner = _fan(offsets)
    if owner.size == 0:
        return FaceGeometry(np.zeros(0), np.zeros((0, 3)), np.zeros((0, 3)))
    runs = np.searchsorted(owner, np.arange(offsets.size - 1))
    apex = points[connectivity[first]].astype(np.float64, copy=False)
    one, two = points[connectivity[second]] - apex, points[connectivity[third]] - apex
    vectors = 0.5 * np.cross(one, two)
    total = np.add.reduceat(vectors, runs, axis=0)
    areas = np.linalg.norm(total, axis=1)
    flat = areas <= 0.0
    normals = total / np.where(flat, 1.0, areas)[:, None]
    # signed triangle areas, so that what a dent takes away counts off
    weights = np.einsum("ij,ij->i", vectors, normals[owner])
    weights[flat[owner]] = 1.0
    moments = np.add.reduceat(weights[:, None] * (one + two), runs, axis=0)
    centroids = points[connectivity[offsets[:-1]]] + moments / (3.0 * np.add.reduceat(weights, runs)[:, None])
    return FaceGeometry(areas, normals, centroids)


def _triangle_geometry(points: NDArray[Any], connectivity: NDArray[np.int64]) -> FaceGeometry:
    a, b, c = (points[connectivity[corner::3]].astype(np.float64, copy=False) for corner in range(3))
    vectors = 0.5 * np.cross(b - a, c - a)
    areas = np.linalg.norm(vectors, axis=1)
    vectors /= np.where(areas > 0.0, areas, 1.0)[:, None]
    return FaceGeometry(areas, vectors, (a + b + c) / 3.0)


def bounding_diagonal(points: NDArray[Any], connectivity: NDArray[np.int64]) -> float:
    """Return the diagonal of the box around the points that faces use.

    Parameters
    ----------
    points : ndarray, shape (n_points, 3)
        Coordinates.
    connectivity : ndarray, shape (n_entries,), int64
        Points that faces use.

    Returns
    -------
    float
        In the points' unit; 0 when there are no faces.
    """
    used = np.zeros(points.shape[0], dtype=bool)
    used[connectivity] = True
    spread = points[used].astype(np.float64)
    return float(np.linalg.norm(spread.max(axis=0) - spread.min(axis=0))) if spread.size else 0.0


def face_starts(sizes: NDArray[Any]) -> NDArray[np.int64]:
    """Return offsets of rows from their sizes.

    Parameters
    ----------
    sizes : ndarray of int, shape (n,)
        Entries of each row.

    Returns
    -------
    ndarray, shape (n + 1,), int64
        Where each row starts, and where the last one ends.
    """
    starts = np.zeros(len(sizes) + 1, dtype=np.int64)
    np.cumsum(sizes, out=starts[1:])
    return starts


def corner_entries(
    offsets: NDArray[np.int64] | None, faces: NDArray[np.int64]
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return where the corners of some faces stand in the connectivity.

    Parameters
    ----------
    offsets : ndarray, shape (n_faces + 1,), int64, or None
        Where each face starts; None for triangles.
    faces : ndarray, shape (k,), int64
        The faces.

    Returns
    -------
    entries : ndarray, shape (m,), int64
        Positions in the connectivity, face by face.
    starts : ndarray, shape (k + 1,), int64
        Where each face starts in `entries`.
    """
    if offsets is None:
        return (3 * faces[:, None] + np.arange(3)).ravel(), 3 * np.arange(faces.size + 1, dtype=np.int64)
    sizes = offsets[faces + 1] - offsets[faces]
    starts = face_starts(sizes)
    return np.repeat(offsets[faces] - starts[:-1], sizes) + np.arange(starts[-1]), starts


def nearest_face(
    points: NDArray[Any],
    connectivity: NDArray[np.int64],
    offsets: NDArray[np.int64] | None,
    geometry: FaceGeometry,
    faces: NDArray[np.int64],
    place: NDArray[np.float64],
) -> tuple[int, float]:
    """Return the face that comes nearest to a place.

    Parameters
    ----------
    points, connectivity, offsets
        As `face_areas_normals`.
    geometry : FaceGeometry
        Of all faces.
    faces : ndarray, shape (k,), int64
        The faces to choose from, at least one.
    place : ndarray, shape (3,), float64
        In the points' unit.

    Returns
    -------
    face : int
        The nearest; the first of several at one distance.
    distance : float
        From the place to the nearest point on it, not to its centroid.
    """
    entries, starts = corner_entries(offsets, faces)
    centroids = geometry.centroids[faces]
    away = np.linalg.norm(centroids - place, axis=1)
    spread = np.linalg.norm(points[connectivity[entries]] - np.repeat(centroids, np.diff(starts), axis=0), axis=1)
    radius = np.maximum.reduceat(spread, starts[:-1])
    # a face lies within its radius about its centroid: most cannot be the nearest
    left = np.flatnonzero(away - radius <= (away + radius).min())
    entries, starts = corner_entries(offsets, faces[left])
    fan, owner = _fan(starts)
    a, b, c = (points[connectivity[entries[column]]].astype(np.float64) for column in fan)
    distances = _distances(a, b, c, place)
    best = int(np.argmin(distances))
    return int(faces[left[owner[best]]]), float(distances[best])


def _fan(offsets: NDArray[np.int64]) -> tuple[tuple[NDArray[np.int64], ...], NDArray[np.int64]]:
    """Cut polygons into triangles about their first corner; return the three entries and the polygon of each."""
    counts = np.diff(offsets) - 2
    owner = np.repeat(np.arange(counts.size), counts)
    step = np.arange(owner.size) - np.repeat(face_starts(counts)[:-1], counts)
    first = offsets[:-1][owner]
    return (first, first + step + 1, first + step + 2), owner


def _distances(
    a: NDArray[np.float64], b: NDArray[np.float64], c: NDArray[np.float64], place: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return the distances of triangles, each of shape (n, 3), from one place."""
    normal = np.cross(b - a, c - a)
    length = np.linalg.norm(normal, axis=1)
    inside = length > 0.0
    nearest = np.full(len(a), np.inf)
    for tail, head in ((a, b), (b, c), (c, a)):
        edge, to_place = head - tail, place - tail
        square = np.einsum("ij,ij->i", edge, edge)
        along = np.einsum("ij,ij->i", edge, to_place) / np.where(square > 0.0, square, 1.0)
        off = to_place - np.clip(along, 0.0, 1.0)[:, None] * edge
        nearest = np.minimum(nearest, np.linalg.norm(off, axis=1))
        inside &= np.einsum("ij,ij->i", np.cross(edge, to_place), normal) >= 0.0
    height = np.abs(np.einsum("ij,ij->i", place - a, normal)) / np.where(length > 0.0, length, 1.0)
    return np.where(inside, height, nearest)
