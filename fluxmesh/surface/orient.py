"""Which faces must turn so that neighbours run opposite ways, and the turning itself."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import SurfaceError
from fluxmesh.surface import facet_kernels
from fluxmesh.surface.edges import relate_faces
from fluxmesh.surface.wording import counted, place_text

__all__ = ["faces_against_majority", "turn_faces"]

_NO_INDEX = np.empty(0, np.int64)
_NO_KIND = np.empty(0, np.int8)


def turn_faces(
    connectivity: NDArray[np.int64],
    offsets: NDArray[np.int64] | None,
    kinds: NDArray[np.int8] | None,
    mask: NDArray[np.bool_],
) -> NDArray[np.int64]:
    """Return the connectivity with some faces turned over.

    The first corner of a face stays first; the other corners, and the mid-side
    points with them, come in reverse order.

    Parameters
    ----------
    connectivity : ndarray, shape (n_entries,), int64
        Left as it is.
    offsets : ndarray, shape (n_faces + 1,), int64, or None
        Where each face starts; None when every face is a straight triangle.
    kinds : ndarray, shape (n_faces,), int8, or None
        `fluxmesh.surface.surface.FaceKind` of each face; None when all are
        straight-edged.
    mask : ndarray, shape (n_faces,), bool
        Faces to turn.

    Returns
    -------
    ndarray, shape (n_entries,), int64
        A new array.
    """
    turned = connectivity.copy()
    facet_kernels.reverse_faces(
        turned, _NO_INDEX if offsets is None else offsets, _NO_KIND if kinds is None else kinds, mask
    )
    return turned


def faces_against_majority(
    points: NDArray[np.float64],
    connectivity: NDArray[np.int64],
    offsets: NDArray[np.int64] | None,
    kinds: NDArray[np.int8] | None,
    representative: NDArray[np.int64] | None = None,
) -> NDArray[np.bool_]:
    """Find the faces to turn so that neighbours run opposite ways along their edge.

    In each sheet (faces joined over edges of exactly two faces) the orientation
    that covers the greater area stays; with equal areas that of the first face.

    Parameters
    ----------
    points : ndarray, shape (n_points, 3), float64
        Coordinates, m.
    connectivity, offsets, kinds, representative
        As for `fluxmesh.surface.edges.pair_edges`.

    Returns
    -------
    ndarray, shape (n_faces,), bool
        True for a face to turn.

    Raises
    ------
    SurfaceError
        A sheet is one-sided: no choice of orientation fits.
    """
    relation = relate_faces(connectivity, offsets, kinds, points.shape[0], representative)
    if relation.conflict is not None:
        low, high, face, _ = relation.conflict
        size = int(np.count_nonzero(relation.first_face == relation.first_face[face]))
        raise SurfaceError(
            f"{counted(size, 'face')} that hang together cannot be given one orientation: they form a one-sided "
            f"surface, like a Möbius band, through face {face} at {place_text((points[low] + points[high]) / 2)}",
            remedy="Repair the mesh: some faces there join parts that do not bound the same volume",
        )
    areas = np.empty(relation.against.size)
    facet_kernels.face_areas(
        points,
        connectivity,
        _NO_INDEX if offsets is None else offsets,
        _NO_KIND if kinds is None else kinds,
        areas,
    )
    # per sheet, area of the faces that run with its first face less area of those against it
    balance = np.bincount(relation.first_face, np.where(relation.against, -areas, areas))
    return np.asarray(relation.against ^ (balance[relation.first_face] < 0))
