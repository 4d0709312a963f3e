"""Where fields are sampled: the quadrature points of faces, in the order of the kernel."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from fluxmesh.integral.layout import FaceArrays
from fluxmesh.integral.rules import TRIANGLE_DEGREE4
from fluxmesh.integral.shapes import shape_tables

__all__ = ["sample_places"]

_BARYCENTRIC = np.array([point for point, _ in TRIANGLE_DEGREE4])


def sample_places(mesh: FaceArrays, chosen: NDArray[np.bool_]) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    """Return the quadrature points of some faces.

    Parameters
    ----------
    mesh : FaceArrays
        The faces.
    chosen : ndarray, shape (n_faces,), bool
        Faces to sample.

    Returns
    -------
    places : ndarray, shape (n_samples, 3), float64
        Points, face by face, m: six for each triangle of a straight face (a
        polygon is a fan about the mean of its corners), 36 for a curved face.
    start : ndarray, shape (n_faces + 1,), int64
        Where the samples of each face start; faces that are not chosen have none.
    """
    count = chosen.size
    offsets = mesh.offsets if mesh.offsets.size else np.arange(0, 3 * count + 1, 3)
    sizes = np.diff(offsets)
    kinds = mesh.kinds if mesh.kinds.size else np.zeros(count, np.int8)
    curved_count = shape_tables().weight.shape[1]
    each = np.where(kinds > 0, curved_count, np.where(sizes == 3, 1, sizes) * len(_BARYCENTRIC))
    start = np.concatenate([[0], np.cumsum(np.where(chosen, each, 0))]).astype(np.int64)
    places = np.empty((int(start[-1]), 3))
    for kind in np.unique(kinds[chosen]) if chosen.any() else ():
        for size in np.unique(sizes[chosen & (kinds == kind)]):
            faces = np.flatnonzero(chosen & (kinds == kind) & (sizes == size))
            corners = mesh.points[mesh.connectivity[offsets[faces][:, None] + np.arange(size)]]
            weights = _weights(int(kind), int(size))
            rows = start[faces][:, None] + np.arange(weights.shape[0])
            places[rows] = np.einsum("qa,fak->fqk", weights, corners)
    return places, start


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
