"""What the edges of a port are: walls, symmetry planes or other ports, from the faces that share them."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from fluxmesh.field.profiles.vertices import Edges
from fluxmesh.surface.face_geometry import corner_entries, corners
from fluxmesh.surface.surface import ControlSurface, Role

__all__ = ["EdgeKinds", "edge_kinds"]


class EdgeKinds(NamedTuple):
    """What each edge of a port is, shape (n_edges,), bool; an edge within the port is none of them.

    Attributes
    ----------
    wall : ndarray
        A wall face shares it, also within the port (a splitter that ends
        there); or it lies on the rim and nothing else shares it.
    symmetry : ndarray
        On the rim, and a symmetry group goes on there.
    shared : ndarray
        On the rim, and another port goes on there.
    """

    wall: NDArray[np.bool_]
    symmetry: NDArray[np.bool_]
    shared: NDArray[np.bool_]


def edge_kinds(
    surface: ControlSurface, group: int, vertices: NDArray[np.float64], edges: Edges, tolerance: float
) -> EdgeKinds:
    """Return which edges of a port are walls, and which do not hold the flow back.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    group : int
        The port's group.
    vertices : ndarray, shape (n_vertices, 3), float64
        Vertices of the port, m.
    edges : Edges
        Its edges.
    tolerance : float
        Distance within which points coincide, m: exports split points where
        groups meet.

    Returns
    -------
    EdgeKinds
        Every edge of the rim is one of the three.
    """
    ends, owner = _touching_edges(surface, group, vertices, tolerance)
    base = len(vertices)
    keys = edges.ends[:, 0] * base + edges.ends[:, 1]
    others = ends.min(axis=1) * base + ends.max(axis=1)
    roles = np.array([each.role for each in surface.groups])[surface.group_of_face[owner]]
    rim = edges.uses == 1
    by_wall = np.isin(keys, others[roles == Role.WALL])
    by_symmetry = np.isin(keys, others[roles == Role.SYMMETRY])
    by_any = np.isin(keys, others)
    wall = by_wall | (rim & ~by_any)
    return EdgeKinds(wall, rim & ~wall & by_symmetry, rim & ~wall & ~by_symmetry)


def _touching_edges(
    surface: ControlSurface, group: int, vertices: NDArray[np.float64], tolerance: float
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return edges of other faces between two vertices of the port, and the face of each."""
    vertex = _vertex_of_point(surface, vertices, tolerance)
    connectivity, offsets = corners(surface.connectivity, surface.offsets, surface.kinds)
    hit = vertex[connectivity] >= 0
    if offsets is None:
        hits = hit.reshape(-1, 3).sum(axis=1)
    else:
        hits = np.add.reduceat(hit, offsets[:-1], dtype=np.int64)
    faces = np.flatnonzero((hits >= 2) & (surface.group_of_face != group))
    entries, starts = corner_entries(offsets, faces)
    tails = vertex[connectivity[entries]]
    following = np.arange(1, starts[-1] + 1)
    following[starts[1:] - 1] = starts[:-1]
    heads = tails[following]
    owner = np.repeat(faces, np.diff(starts))
    both = (tails >= 0) & (heads >= 0) & (tails != heads)
    return np.column_stack([tails, heads])[both], owner[both]


def _vertex_of_point(surface: ControlSurface, vertices: NDArray[np.float64], tolerance: float) -> NDArray[np.int64]:
    """Return the vertex that each point of the surface coincides with, or -1."""
    from scipy.spatial import cKDTree

    points = surface.points
    low, high = vertices.min(axis=0) - tolerance, vertices.max(axis=0) + tolerance
    near = np.ones(len(points), np.bool_)
    for k in range(3):
        near &= (points[:, k] >= low[k]) & (points[:, k] <= high[k])
    candidates = np.flatnonzero(near)
    found = np.full(len(points), -1)
    _, nearest = cKDTree(vertices).query(points[candidates], distance_upper_bound=max(tolerance, np.finfo(float).tiny))
    found[candidates] = np.where(nearest < len(vertices), nearest, -1)
    return found
