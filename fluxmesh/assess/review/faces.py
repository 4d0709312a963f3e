"""Mean values and area vectors of some faces: enough to look at, without an array as long as the mesh."""

from __future__ import annotations

from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.field.field import Field
from fluxmesh.field.flow import Flow
from fluxmesh.integral.layout import ABSENT, AT_FACE, AT_NODE, PER_GROUP
from fluxmesh.surface.face_geometry import FaceGeometry, corner_entries, corners, face_geometry
from fluxmesh.surface.surface import ControlSurface

__all__ = ["corner_faces", "some_faces", "some_geometry", "some_values"]

Floats = NDArray[np.float64]
Indices = NDArray[np.int64]

_MOST: Final = 20_000


def some_faces(surface: ControlSurface, group: int, most: int = _MOST) -> Indices:
    """Return faces of a group, evenly spread over their order.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    group : int
        Number of the group.
    most : int, optional
        How many at most; all where there are no more.

    Returns
    -------
    ndarray, shape (k,), int64
        Rising.
    """
    faces = np.flatnonzero(surface.group_of_face == group)
    return faces[:: max(1, -(-faces.size // most))]


def corner_faces(surface: ControlSurface, faces: Indices) -> tuple[Indices, Indices]:
    """Return the corners of some faces.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    faces : ndarray of int64, shape (k,)
        The faces.

    Returns
    -------
    connectivity : ndarray of int64
        Their corner points, face by face.
    offsets : ndarray, shape (k + 1,), int64
        Where each starts.
    """
    entries, starts = corner_entries(surface.offsets, faces)
    kinds = None if surface.kinds is None else surface.kinds[faces]
    connectivity, offsets = corners(surface.connectivity[entries], starts, kinds)
    assert offsets is not None
    return connectivity, offsets


def some_geometry(surface: ControlSurface, faces: Indices) -> FaceGeometry:
    """Return areas, outward normals and centroids of some faces, in m² and m.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    faces : ndarray of int64, shape (k,)
        The faces.
    """
    return face_geometry(surface.points, *corner_faces(surface, faces))


def some_values(surface: ControlSurface, flow: Flow, field: Field, faces: Indices) -> Floats:
    """Return the mean of a field over each of some faces of one group.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    flow : Flow
        What the field is of.
    field : Field
        The field.
    faces : ndarray of int64, shape (k,), at least one
        Faces, all of one group.

    Returns
    -------
    ndarray, shape (k,) or (k, components), float64
        Scaled to SI and to the sign of `Field`: means over the corners, or over
        the samples. NaN where the group lacks the field.
    """
    group = int(surface.group_of_face[faces[0]])
    where = int(field.where[group])
    if where == ABSENT:
        return np.full((faces.size, field.components) if field.components > 1 else faces.size, np.nan)
    if where == PER_GROUP:
        return np.broadcast_to(field.group[group], (faces.size, *field.group.shape[1:])).copy()
    if where == AT_FACE:
        return np.asarray(field.scale * field.face[faces])
    if where == AT_NODE:
        connectivity, starts = corner_faces(surface, faces)
        values = field.node[connectivity]
    else:
        entries, starts = _rows(flow.sample_start, faces)
        values = field.sample[entries]
    sizes = np.diff(starts).reshape((-1,) + (1,) * (values.ndim - 1))
    return np.asarray(field.scale * np.add.reduceat(values, starts[:-1], axis=0) / sizes)


def _rows(start: Indices, faces: Indices) -> tuple[Indices, Indices]:
    return corner_entries(start, faces)
