"""The flow near the walls, as far as a surface shows it: on the port faces along the rims."""

from __future__ import annotations

from typing import Final

import numpy as np

from fluxmesh.assess.review.evidence import Evidence
from fluxmesh.assess.review.faces import Floats, Indices, corner_faces
from fluxmesh.field.field import Field
from fluxmesh.field.flow import near_origin
from fluxmesh.integral.layout import PER_GROUP
from fluxmesh.surface.extent import used_box
from fluxmesh.surface.surface import ControlSurface
from fluxmesh.surface.touching import edge_neighbours

__all__ = ["rim_agreement"]

_NEAR: Final = 1e-6
"""Distance within which points coincide, over the diagonal of the box round the surface."""
_FEWEST: Final = 6
"""Pairs of faces below which nothing is said."""


def rim_agreement(evidence: Evidence) -> float | None:
    """Return the weighted mean cosine between the traction on the wall and the flow beside it.

    At each edge between a port and a wall, the velocity on the port's face,
    taken along the wall and relative to it, is that near the wall.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Returns
    -------
    float or None
        -1 to 1, weighted with speed times traction; None where no port with
        exported velocity touches a wall with exported traction.
    """
    flow, surface = evidence.flow, evidence.surface
    ports = [k for k in evidence.flowing if flow.velocity.where[k] > PER_GROUP]
    walls = [k for k in evidence.walls if flow.traction.where[k] > PER_GROUP]
    if not ports or not walls:
        return None
    port_faces = np.flatnonzero(np.isin(surface.group_of_face, ports))
    wall_faces = _touching(evidence, port_faces, np.flatnonzero(np.isin(surface.group_of_face, walls)))
    if wall_faces.size == 0:
        return None
    faces = np.concatenate([port_faces, wall_faces])
    connectivity, offsets = corner_faces(surface, faces)
    reach = _NEAR * _diagonal(surface)
    pairs = edge_neighbours(surface.points, connectivity, offsets, np.arange(faces.size), reach)
    pairs.sort(axis=1)
    across = (pairs[:, 0] < port_faces.size) & (pairs[:, 1] >= port_faces.size)
    at_port, at_wall = faces[pairs[across, 0]], faces[pairs[across, 1]]
    if at_port.size < _FEWEST:
        return None
    geometry = evidence.geometry(at_wall)
    velocity = _by_group(evidence, flow.velocity, at_port) - np.nan_to_num(_by_group(evidence, flow.velocity, at_wall))
    velocity -= np.einsum("ij,ij->i", velocity, geometry.normals)[:, None] * geometry.normals
    traction = -_by_group(evidence, flow.traction, at_wall)
    whole = float(np.linalg.norm(velocity, axis=1) @ np.linalg.norm(traction, axis=1))
    return float((velocity * traction).sum()) / whole if whole > 0.0 else None


def _touching(evidence: Evidence, port_faces: Indices, wall_faces: Indices) -> Indices:
    """Return the wall faces that have a corner where a port has one."""
    from scipy.spatial import cKDTree

    surface = evidence.surface
    # about a near origin: far from it a distance of 1e-6 of the size would drown
    points = surface.points - near_origin(surface)
    reach = _NEAR * _diagonal(surface)
    port = points[np.unique(corner_faces(surface, port_faces)[0])]
    connectivity, offsets = corner_faces(surface, wall_faces)
    used = np.unique(connectivity)
    low, high = port.min(axis=0) - reach, port.max(axis=0) + reach
    used = used[((points[used] >= low) & (points[used] <= high)).all(axis=1)]
    near = np.zeros(surface.point_count, np.bool_)
    if used.size:
        distance, _ = cKDTree(port).query(points[used], distance_upper_bound=max(reach, 1e-300))
        near[used[np.isfinite(distance)]] = True
    return np.asarray(wall_faces[np.logical_or.reduceat(near[connectivity], offsets[:-1])])


def _by_group(evidence: Evidence, of: Field, faces: Indices) -> Floats:
    """Return means of a vector field over faces of several groups, NaN where a group lacks it."""
    values = np.full((faces.size, 3), np.nan)
    owner = evidence.surface.group_of_face[faces]
    for k in np.unique(owner):
        values[owner == k] = evidence.values(of, faces[owner == k])
    return values


def _diagonal(surface: ControlSurface) -> float:
    low, high = used_box(surface.points, surface.connectivity)
    return float(np.linalg.norm(high - low))
