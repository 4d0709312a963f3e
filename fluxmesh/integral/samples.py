"""Where fields are sampled: the quadrature points of faces, in the order of the kernel."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from fluxmesh.integral.layout import FaceArrays
from fluxmesh.integral.rules import TRIANGLE_DEGREE4
from fluxmesh.integral.shapes import shape_tables

__all__ = ["Samples", "sample_places"]

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
    count = chosen.size
    offsets = mesh.offsets if mesh.offsets.size else np.arange(0, 3 * count + 1, 3)
    sizes = np.diff(offsets)
    kinds = mesh.kinds if mesh.kinds.size else np.zeros(count, np.int8)
    curved_count = shape_tables().weight.shape[1]
    each = np.where(chosen, np.where(kinds > 0, curved_count, np.where(sizes == 3, 1, sizes) * len(_BARYCENTRIC)), 0)
    start = np.concatenate([[0], np.cumsum(each)]).astype(np.int64)
    places, vectors = np.empty((int(start[-1]), 3)), np.empty((int(start[-1]), 3))
    for kind in np.unique(kinds[chosen]):
        for size in np.unique(sizes[chosen & (kinds == kind)]):
            faces = np.flatnonzero(chosen & (kinds == kind) & (sizes == size))
            corners = mesh.points[mesh.connectivity[offsets[faces][:, None] + np.arange(size)]]
            weights = _weights(int(kind), int(size))
            rows = start[faces][:, None] + np.arange(weights.shape[0])
            places[rows] = np.einsum("qa,fak->fqk", weights, corners)
            vectors[rows] = _area_vectors(corners, int(kind))
    return Samples(places, vectors, np.repeat(np.arange(count), each), start)


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
    size = corners.shape[1]
    if kind > 0:
        tables = shape_tables()
        along_u = np.einsum("qa,fak->fqk", tables.along_u[kind - 1, :, :size], corners)
        along_v = np.einsum("qa,fak->fqk", tables.along_v[kind - 1, :, :size], corners)
        return np.asarray(np.cross(along_u, along_v) * tables.weight[kind - 1][:, None])
    pieces = corners[:, None]
    if size > 3:
        centre = np.broadcast_to(corners.mean(axis=1, keepdims=True), corners.shape)
        pieces = np.stack([corners, np.roll(corners, -1, axis=1), centre], axis=2)
    normal = 0.5 * np.cross(pieces[:, :, 1] - pieces[:, :, 0], pieces[:, :, 2] - pieces[:, :, 0])
    weighted = normal[:, :, None] * _RULE_WEIGHTS[:, None]
    return np.asarray(weighted.reshape(corners.shape[0], -1, 3))
