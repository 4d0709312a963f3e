"""Where fields are sampled: the quadrature points of faces, in the order of the kernel."""

from __future__ import annotations

from collections.abc import Iterator
from math import prod
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from fluxmesh.integral.layout import FaceArrays
from fluxmesh.integral.rules import TRIANGLE_DEGREE4
from fluxmesh.integral.shapes import shape_tables

__all__ = ["Samples", "interpolate_at_samples", "mean_normals", "sample_normals", "sample_places"]

_BARYCENTRIC = np.array([point for point, _ in TRIANGLE_DEGREE4])
_RULE_WEIGHTS = np.array([weight for _, weight in TRIANGLE_DEGREE4])


class Samples(NamedTuple):
    """The quadrature points of some faces.

    Attributes
    ----------
    places : ndarray, shape (n_samples, 3), float64
        Points, face by face, m: six for each triangle of a straight face (a
        polygon is a fan about the mean of its corners), 36 for a curved face.
    area_vectors : ndarray, shape (n_samples, 3), float64
        Normal times weighted area, m²: summed over a face they give its area vector.
    face : ndarray, shape (n_samples,), int64
        Face of each sample.
    start : ndarray, shape (n_faces + 1,), int64
        Where the samples of each face start; faces that are not chosen have none.
    """

    places: NDArray[np.float64]
    area_vectors: NDArray[np.float64]
    face: NDArray[np.int64]
    start: NDArray[np.int64]


def sample_places(mesh: FaceArrays, chosen: NDArray[np.bool_]) -> Samples:
    """Return the quadrature points of some faces, in the order of the kernel.

    Parameters
    ----------
    mesh : FaceArrays
        The faces.
    chosen : ndarray, shape (n_faces,), bool
        Faces to sample.

    Returns
    -------
    Samples
        Their quadrature points.
    """
    start = _starts(mesh, chosen)
    places, vectors = np.empty((int(start[-1]), 3)), np.empty((int(start[-1]), 3))
    for kind, faces, entries in _families(mesh, chosen):
        corners = mesh.points[entries]
        weights = _weights(kind, entries.shape[1])
        rows = start[faces][:, None] + np.arange(weights.shape[0])
        places[rows] = np.einsum("qa,fak->fqk", weights, corners)
        vectors[rows] = _area_vectors(corners, kind)
    return Samples(places, vectors, np.repeat(np.arange(chosen.size), np.diff(start)), start)


def interpolate_at_samples(
    mesh: FaceArrays, chosen: NDArray[np.bool_], node_values: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return values on points as the kernel sees them at the quadrature points of some faces.

    Parameters
    ----------
    mesh : FaceArrays
        The faces.
    chosen : ndarray, shape (n_faces,), bool
        Faces to sample.
    node_values : ndarray, shape (n_points,) or (n_points, k), float64
        Values on points, in any unit.

    Returns
    -------
    ndarray, shape (n_samples,) or (n_samples, k), float64
        In the order of `sample_places` for the same faces.
    """
    start = _starts(mesh, chosen)
    tail = node_values.shape[1:]
    values = np.ascontiguousarray(node_values.reshape(node_values.shape[0], prod(tail)))
    found = np.empty((int(start[-1]), values.shape[1]))
    for kind, faces, entries in _families(mesh, chosen):
        weights = _weights(kind, entries.shape[1])
        rows = start[faces][:, None] + np.arange(weights.shape[0])
        found[rows] = np.matmul(weights, values[entries])
    return found.reshape(found.shape[0], *tail)


def sample_normals(mesh: FaceArrays, samples: Samples) -> NDArray[np.float64]:
    """Return the unit normals at quadrature points.

    Parameters
    ----------
    mesh : FaceArrays
        The faces.
    samples : Samples
        Their quadrature points.

    Returns
    -------
    ndarray, shape (n_samples, 3), float64
        Out of the fluid; zero where there is no area. Where a triangle of the
        fan over a non-convex polygon lies the other way round, the kernel takes
        its area as negative, so the normal is still that of the polygon.
    """
    vectors = samples.area_vectors
    size = np.linalg.norm(vectors, axis=1)
    normals = vectors / np.where(size > 0, size, 1.0)[:, None]
    if mesh.offsets.size == 0:
        return normals
    polygons = np.diff(mesh.offsets) > 3
    if mesh.kinds.size:
        polygons &= mesh.kinds == 0
    faces = np.flatnonzero(polygons & (np.diff(samples.start) > 0))
    rows = np.flatnonzero(polygons[samples.face])
    if faces.size:
        counts = samples.start[faces + 1] - samples.start[faces]
        whole = np.add.reduceat(vectors[rows], np.cumsum(counts) - counts, axis=0)
        against = np.einsum("sk,sk->s", vectors[rows], np.repeat(whole, counts, axis=0)) < 0
        normals[rows[against]] *= -1.0
    return normals


def mean_normals(mesh: FaceArrays, chosen: NDArray[np.bool_]) -> NDArray[np.float64]:
    """Return the mean normal over each of some straight faces.

    Parameters
    ----------
    mesh : FaceArrays
        The faces.
    chosen : ndarray, shape (n_faces,), bool
        Faces wanted; none of them curved.

    Returns
    -------
    ndarray, shape (n_chosen, 3), float64
        ``∫n dA / ∫dA`` out of the fluid, in the order of the faces: a unit normal,
        shorter on a twisted polygon, zero for a face without area.
    """
    normals = np.empty((chosen.size, 3))
    for _, faces, entries in _families(mesh, chosen):
        pieces = _pieces(mesh.points[entries])
        whole = pieces.sum(axis=1)
        # signed like the kernel's areas: what lies the other way round counts off
        signs = np.where(np.einsum("fpk,fk->fp", pieces, whole) < 0, -1.0, 1.0)
        area = (signs * np.linalg.norm(pieces, axis=2)).sum(axis=1)
        normals[faces] = whole / np.where(area > 0, area, np.inf)[:, None]
    return normals[chosen]


def _starts(mesh: FaceArrays, chosen: NDArray[np.bool_]) -> NDArray[np.int64]:
    """Where the quadrature points of each face start, shape (faces + 1,)."""
    sizes = np.diff(mesh.offsets) if mesh.offsets.size else np.full(chosen.size, 3)
    kinds = mesh.kinds if mesh.kinds.size else np.zeros(chosen.size, np.int8)
    curved_count = shape_tables().weight.shape[1]
    each = np.where(chosen, np.where(kinds > 0, curved_count, np.where(sizes == 3, 1, sizes) * len(_BARYCENTRIC)), 0)
    return np.concatenate([[0], np.cumsum(each)]).astype(np.int64)


def _families(
    mesh: FaceArrays, chosen: NDArray[np.bool_]
) -> Iterator[tuple[int, NDArray[np.int64], NDArray[np.int64]]]:
    """Chosen faces by kind and size: kind, faces, and their points (faces, size)."""
    offsets = mesh.offsets if mesh.offsets.size else np.arange(0, 3 * chosen.size + 1, 3)
    sizes = np.diff(offsets)
    kinds = mesh.kinds if mesh.kinds.size else np.zeros(chosen.size, np.int8)
    for kind in np.unique(kinds[chosen]):
        for size in np.unique(sizes[chosen & (kinds == kind)]):
            faces = np.flatnonzero(chosen & (kinds == kind) & (sizes == size))
            yield int(kind), faces, mesh.connectivity[offsets[faces][:, None] + np.arange(size)]


def _weights(kind: int, size: int) -> NDArray[np.float64]:
    """Weights over a face's points at its quadrature points, shape (points, size)."""
    if kind > 0:
        return np.asarray(shape_tables().value[kind - 1, :, :size])
    if size == 3:
        return _BARYCENTRIC
    weights = np.full((size, len(_BARYCENTRIC), size), 0.0)
    for piece in range(size):
        weights[piece] = _BARYCENTRIC[:, 2:] / size
        weights[piece, :, piece] += _BARYCENTRIC[:, 0]
        weights[piece, :, (piece + 1) % size] += _BARYCENTRIC[:, 1]
    return weights.reshape(-1, size)


def _area_vectors(corners: NDArray[np.float64], kind: int) -> NDArray[np.float64]:
    """Weighted area vectors at the quadrature points of faces, shape (faces, points, 3)."""
    if kind > 0:
        tables, size = shape_tables(), corners.shape[1]
        along_u = np.einsum("qa,fak->fqk", tables.along_u[kind - 1, :, :size], corners)
        along_v = np.einsum("qa,fak->fqk", tables.along_v[kind - 1, :, :size], corners)
        return np.asarray(np.cross(along_u, along_v) * tables.weight[kind - 1][:, None])
    weighted = _pieces(corners)[:, :, None] * _RULE_WEIGHTS[:, None]
    return np.asarray(weighted.reshape(corners.shape[0], -1, 3))


def _pieces(corners: NDArray[np.float64]) -> NDArray[np.float64]:
    """Area vectors of the triangles that straight faces are integrated by, shape (faces, triangles, 3)."""
    pieces = corners[:, None]
    if corners.shape[1] > 3:
        centre = np.broadcast_to(corners.mean(axis=1, keepdims=True), corners.shape)
        pieces = np.stack([corners, np.roll(corners, -1, axis=1), centre], axis=2)
    return np.asarray(0.5 * np.cross(pieces[:, :, 1] - pieces[:, :, 0], pieces[:, :, 2] - pieces[:, :, 0]))
