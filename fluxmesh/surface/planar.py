"""The planar regions a mesh falls into, and the one around a given face."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.surface.face_geometry import (
    FaceGeometry,
    bounding_diagonal,
    corner_entries,
    corners,
    face_geometry,
    face_starts,
)
from fluxmesh.surface.touching import edge_neighbours, region_of

__all__ = ["MERGE_SHARE", "PlanarRegion", "planar_region_around", "planar_regions"]

MERGE_SHARE = 1e-6
"""Points nearer than this share of the bounding diagonal count as one."""

# Shares of the angle between neighbours that are tried: a planar port that runs smoothly into a
# bend is a part of a bent chain at the full angle, and stands alone at a narrower one.
_NARROWER = (1.0, 0.1, 0.01)
_REFITS = 8
_SHARP = np.cos(np.radians(45.0))  # between neighbours: the edge of a step


@dataclass(frozen=True, eq=False)
class PlanarRegion:
    """A connected set of faces in one plane.

    Attributes
    ----------
    area : float
        In the square of the points' unit.
    normal : ndarray, shape (3,), float64
        Unit normal, by the right-hand rule of the faces.
    centroid : ndarray, shape (3,), float64
        Of the area.
    faces : ndarray, shape (n,), int64
        Indices of its faces, rising.
    """

    area: float
    normal: NDArray[np.float64]
    centroid: NDArray[np.float64]
    faces: NDArray[np.int64]


def planar_regions(
    points: NDArray[Any],
    connectivity: NDArray[np.int64],
    offsets: NDArray[np.int64] | None,
    *,
    kinds: NDArray[np.int8] | None = None,
    angle_deg: float = 1.0,
    tolerance: float = 1e-4,
    limit: int | None = 100,
) -> list[PlanarRegion]:
    """Find the planar regions of a mesh, the largest first.

    Parameters
    ----------
    points, connectivity, offsets, kinds
        As in `fluxmesh.surface.rawmesh.RawMesh`.
    angle_deg : float
        Largest angle between a face and its region's mean normal, degrees.
    tolerance : float
        Largest distance of a corner from its region's plane, over the
        diagonal of the bounding box.
    limit : int, optional
        How many regions to return at most; None for all.

    Returns
    -------
    list of PlanarRegion
        Every face belongs to one region at most; faces without area to none.
        A smoothly bent stretch that is planar nowhere falls into regions of
        one face each.
    """
    connectivity, offsets = corners(connectivity, offsets, kinds)
    geometry = face_geometry(points, connectivity, offsets)
    diagonal = bounding_diagonal(points, connectivity)
    faces = np.flatnonzero(geometry.areas > 0.0)
    pairs = edge_neighbours(points, connectivity, offsets, faces, MERGE_SHARE * diagonal)
    label = np.arange(faces.size)
    settled = np.zeros(faces.size, dtype=bool)
    for share in _NARROWER:
        if settled.all():
            break
        # faces of a chain that is bent as a whole are tried again with a narrower angle
        open_ = ~settled[pairs[:, 0]] & ~settled[pairs[:, 1]]
        cosine = np.einsum("ij,ij->i", *(geometry.normals[faces[pairs[open_, side]]] for side in (0, 1)))
        joined = pairs[open_][cosine >= np.cos(np.radians(share * angle_deg))]
        tried = region_of(joined, faces.size)
        planar = _planar(points, connectivity, offsets, geometry, faces, tried, angle_deg, tolerance * diagonal)
        new = planar[tried] & ~settled
        label[new] = tried[new] + faces.size * (1 + _NARROWER.index(share))
        settled |= new
    return _regions(geometry, faces, label, limit)


def planar_region_around(
    points: NDArray[Any],
    connectivity: NDArray[np.int64],
    offsets: NDArray[np.int64] | None,
    geometry: FaceGeometry,
    faces: NDArray[np.int64],
    seed: int,
    distance: float,
    merge: float,
) -> NDArray[np.int64]:
    """Return the connected faces that lie in one plane with a face, and those that go on smoothly from there.

    Only the normals of `faces` say how far it may be bent: across a sharp edge
    (45 degrees) a face must lie in the plane.

    Parameters
    ----------
    points, connectivity, offsets
        As `fluxmesh.surface.face_geometry.face_areas_normals`.
    geometry : FaceGeometry
        Of all faces.
    faces : ndarray, shape (k,), int64
        The faces to choose from, rising; the seed is one of them.
    seed : int
        The face to start from.
    distance : float
        How far a corner may be from the plane across a sharp edge, in the points' unit.
    merge : float
        Distance within which points coincide.

    Returns
    -------
    ndarray of int64
        Indices of the faces, rising.
    """
    pairs = edge_neighbours(points, connectivity, offsets, faces, merge)
    entries, starts = corner_entries(offsets, faces)
    place = points[connectivity[entries]].astype(np.float64)
    start = int(np.searchsorted(faces, seed))
    # A small face gives a poor normal: the first plane has the mean normal of all that hangs together
    # with the seed, the following ones that of what the plane before caught.
    label = region_of(pairs, faces.size)
    normal, origin = _mean_plane(geometry, faces[label == label[start]])[0], geometry.centroids[seed]
    region = np.zeros(faces.size, dtype=bool)
    for _ in range(_REFITS):
        level = np.maximum.reduceat(np.abs((place - origin) @ normal), starts[:-1]) <= distance
        label = region_of(pairs[level[pairs].all(axis=1)], faces.size)
        before, region = region, label == label[start]
        if np.array_equal(before, region):
            break
        normal, origin = _mean_plane(geometry, faces[region])
    smooth = np.einsum("ij,ij->i", *(geometry.normals[faces[pairs[:, side]]] for side in (0, 1))) >= _SHARP
    label = region_of(pairs[smooth | region[pairs].all(axis=1)], faces.size)
    taken: NDArray[np.int64] = faces[label == label[start]]
    return taken


def _mean_plane(geometry: FaceGeometry, faces: NDArray[np.int64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the mean normal and the centroid of some faces."""
    normals, centroids, _ = _means(geometry, faces, np.zeros(faces.size, dtype=np.int64))
    return normals[0], centroids[0]


def _planar(
    points: NDArray[Any],
    connectivity: NDArray[np.int64],
    offsets: NDArray[np.int64] | None,
    geometry: FaceGeometry,
    faces: NDArray[np.int64],
    label: NDArray[np.int64],
    angle_deg: float,
    distance: float,
) -> NDArray[np.bool_]:
    """Return which labelled regions lie in one plane as a whole."""
    normals, centroids, _ = _means(geometry, faces, label)
    count = normals.shape[0]
    aligned = np.einsum("ij,ij->i", geometry.normals[faces], normals[label]) >= np.cos(np.radians(angle_deg))
    entries, starts = corner_entries(offsets, faces)
    of_corner = np.repeat(label, np.diff(starts))
    height = np.einsum("ij,ij->i", points[connectivity[entries]] - centroids[of_corner], normals[of_corner])
    bad = np.zeros(count, dtype=bool)
    bad[label[~aligned]] = True
    bad[of_corner[np.abs(height) > distance]] = True
    return ~bad


def _means(
    geometry: FaceGeometry, faces: NDArray[np.int64], label: NDArray[np.int64]
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Return mean normals, centroids and areas of labelled regions."""
    areas = geometry.areas[faces]
    total = np.bincount(label, weights=areas).astype(np.float64, copy=False)
    vectors = np.column_stack([np.bincount(label, weights=areas * geometry.normals[faces, k]) for k in range(3)])
    lengths = np.linalg.norm(vectors, axis=1)
    normals = vectors / np.where(lengths > 0.0, lengths, 1.0)[:, None]
    moments = np.column_stack([np.bincount(label, weights=areas * geometry.centroids[faces, k]) for k in range(3)])
    return normals, moments / np.where(total > 0.0, total, 1.0)[:, None], total


def _regions(
    geometry: FaceGeometry, faces: NDArray[np.int64], label: NDArray[np.int64], limit: int | None
) -> list[PlanarRegion]:
    _, label = np.unique(label, return_inverse=True)
    if faces.size == 0:
        return []
    normals, centroids, areas = _means(geometry, faces, label)
    order = np.argsort(-areas, kind="stable")[:limit]
    by_label = np.argsort(label, kind="stable")
    starts = face_starts(np.bincount(label))
    return [
        PlanarRegion(
            float(areas[region]),
            normals[region],
            centroids[region],
            faces[by_label[starts[region] : starts[region + 1]]],
        )
        for region in order
    ]
