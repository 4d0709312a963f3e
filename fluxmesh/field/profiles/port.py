"""A port as the profiles see it: its triangles, its plane, its walls and its quadrature points."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError, GroupError
from fluxmesh.field.flow import face_arrays_of
from fluxmesh.field.profiles.pieces import Pieces, cut_faces
from fluxmesh.field.profiles.rim import edge_kinds
from fluxmesh.field.profiles.vertices import edges_of, joined_corners
from fluxmesh.integral.samples import Samples, sample_places
from fluxmesh.surface.face_geometry import bounding_diagonal
from fluxmesh.surface.surface import ControlSurface

__all__ = ["PLANARITY", "PortPatch", "plane_coordinates", "require_plane", "require_wall"]

PLANARITY = 1e-3
"""How far points of a planar port may lie off its plane, over its size; also the share of its area that may fold."""

_MERGE_SHARE = 1e-6  # of the surface's bounding diagonal: points nearer than this coincide


@dataclass(frozen=True, eq=False)
class PortPatch:
    """One face group, ready for a profile.

    Attributes
    ----------
    name : str
        Of the group, for messages.
    points : ndarray, shape (n_points, 3), float64
        Corners and mid-side points of the triangles, m; copies are joined.
    triangles : ndarray, shape (n_triangles, 6), int64
        Corners, then mid-side points 0-1, 1-2, 2-0. A polygon is a fan about the
        mean of its corners, or cut ear by ear where that would fold over; on
        curved faces the mid-side points follow the curve.
    normal : ndarray, shape (3,), float64
        Unit mean normal, out of the fluid.
    centroid : ndarray, shape (3,), float64
        Of the area, m.
    area : float
        Length of the area vector, m².
    size : float
        Diagonal of the bounding box, m.
    wall_edges : ndarray, shape (n_walls, 3), int64
        Ends and mid-side point of each edge where a wall meets the port.
    symmetry_edges, shared_edges : ndarray, shape (n, 3), int64
        The rest of the rim: a symmetry group, or another port, goes on there.
    samples : Samples
        Quadrature points of the group's faces, in the order of the kernel.
    sample_triangle : ndarray, shape (n_samples,), int64
        Triangle that holds each of them; -1 for one that lies outside the port,
        as some do in polygons that the mean of their corners does not see all of.
    sample_weights : ndarray, shape (n_samples, 3), float64
        Barycentric coordinates in that triangle.
    departure : float
        Largest distance of a point from the mean plane, m.
    overlap : float
        Area of the triangles that face the other way, over `area`.
    """

    name: str
    points: NDArray[np.float64]
    triangles: NDArray[np.int64]
    normal: NDArray[np.float64]
    centroid: NDArray[np.float64]
    area: float
    size: float
    wall_edges: NDArray[np.int64]
    symmetry_edges: NDArray[np.int64]
    shared_edges: NDArray[np.int64]
    samples: Samples
    sample_triangle: NDArray[np.int64]
    sample_weights: NDArray[np.float64]
    departure: float
    overlap: float

    @classmethod
    def of(cls, surface: ControlSurface, group: int) -> PortPatch:
        """Return the patch of one group.

        Parameters
        ----------
        surface : ControlSurface
            The surface; the groups around the port tell which of its edges are walls.
        group : int
            Index into its groups.

        Returns
        -------
        PortPatch
            It may be bent: only shaped profiles need a plane.

        Raises
        ------
        GroupError
            A group without faces, or whose area vectors cancel.
        """
        name = surface.groups[group].name
        chosen = surface.group_of_face == group
        if not chosen.any():
            raise GroupError("the group has no faces", where=f"group '{name}'", remedy="Check what selects them")
        samples = sample_places(face_arrays_of(surface), chosen)
        vector = samples.area_vectors.sum(axis=0)
        area = float(np.linalg.norm(vector))
        # a closed group cancels to round-off, never to nothing
        if area <= 1e-12 * float(np.linalg.norm(samples.area_vectors, axis=1).sum()):
            raise GroupError(
                "the faces enclose no net area, so a supplied flow has no direction",
                where=f"group '{name}'",
                remedy="Give the velocity as a vector",
            )
        normal = vector / area
        weights = samples.area_vectors @ normal
        origin = samples.places[0]
        centroid = origin + weights @ (samples.places - origin) / weights.sum()
        tolerance = _MERGE_SHARE * bounding_diagonal(surface.points, surface.connectivity)
        pieces = cut_faces(surface, np.flatnonzero(chosen), samples, normal)
        corners, vertices = joined_corners(pieces.corners, pieces.places[:, :3], tolerance)
        # a sliver that joining has closed up holds no area
        kept = (corners != np.roll(corners, -1, axis=1)).all(axis=1)
        corners = corners[kept]
        edges = edges_of(corners)
        triangles = np.concatenate([corners, len(vertices) + edges.of_corner], axis=1)
        middles = np.empty((len(edges.ends), 3))
        middles[edges.of_corner.ravel()] = pieces.places[kept, 3:].reshape(-1, 3)
        points = np.concatenate([vertices, middles])
        kinds = edge_kinds(surface, group, vertices, edges, tolerance)
        with_middle = np.column_stack([edges.ends, len(vertices) + np.arange(len(edges.ends))])
        sides = vertices[corners[:, 1:]] - vertices[corners[:, :1]]
        turned = np.minimum(0.5 * np.cross(sides[:, 0], sides[:, 1]) @ normal, 0.0)
        return cls(
            name=name,
            points=points,
            triangles=triangles,
            normal=normal,
            centroid=centroid,
            area=area,
            size=float(np.linalg.norm(np.ptp(points, axis=0))),
            wall_edges=with_middle[kinds.wall],
            symmetry_edges=with_middle[kinds.symmetry],
            shared_edges=with_middle[kinds.shared],
            samples=samples,
            sample_triangle=_renumbered(pieces, kept),
            sample_weights=pieces.sample_weights,
            departure=float(np.abs((points - centroid) @ normal).max()),
            overlap=-float(turned.sum()) / area,
        )


def plane_coordinates(patch: PortPatch, places: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return coordinates in the plane of a port.

    Parameters
    ----------
    patch : PortPatch
        The port.
    places : ndarray, shape (..., 3), float64
        Points, m.

    Returns
    -------
    ndarray, shape (..., 2), float64
        About the centroid, m; right-handed as seen against the normal.
    """
    across = np.cross(patch.normal, np.eye(3)[np.abs(patch.normal).argmin()])
    across /= np.linalg.norm(across)
    frame = np.stack([across, np.cross(patch.normal, across)])
    return np.asarray((places - patch.centroid) @ frame.T)


def require_plane(patch: PortPatch) -> None:
    """Raise if a port cannot bear a shaped profile.

    Parameters
    ----------
    patch : PortPatch
        The port.

    Raises
    ------
    FieldError
        Points too far off the plane, or faces folded over one another.
    """
    where, remedy = f"group '{patch.name}'", "Cut the port with a plane, or supply a uniform profile"
    if patch.departure > PLANARITY * patch.size:
        raise FieldError(
            f"the port is not planar: points lie up to {patch.departure:.3g} m off its mean plane, "
            f"{100 * patch.departure / patch.size:.2g} % of its size, and {100 * PLANARITY:g} % is allowed",
            where,
            remedy,
        )
    if patch.overlap > PLANARITY:
        raise FieldError(
            f"the faces of the port fold over one another: {100 * patch.overlap:.2g} % of its area is turned round",
            where,
            "Mend the mesh of the port, or supply a uniform profile",
        )


def require_wall(patch: PortPatch) -> None:
    """Raise if no wall meets a port.

    Parameters
    ----------
    patch : PortPatch
        The port.

    Raises
    ------
    FieldError
        A port all of whose rim is free.
    """
    if patch.wall_edges.size == 0:
        raise FieldError(
            "no wall meets the rim of the port, so there is no distance from a wall and no developed flow",
            where=f"group '{patch.name}'",
            remedy="Check the roles of the groups around it, or supply a uniform profile",
        )


def _renumbered(pieces: Pieces, kept: NDArray[np.bool_]) -> NDArray[np.int64]:
    """Return the triangle of each sample after some pieces are gone."""
    number = np.where(kept, np.cumsum(kept) - 1, -1)
    return np.where(pieces.sample_piece < 0, -1, number[pieces.sample_piece])
