"""Fields at the quadrature points of some faces, a cache-sized batch at a time.

Places, weights and the way from corners to points are those of the kernel, so that sums
over a batch agree with the table. Arrays lie point by point, ``(n_points, n_facets)``: the
values of a batch then follow from those at its corners by one matrix product.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Final, NamedTuple

import numpy as np
from numpy.typing import NDArray

from fluxmesh.field.field import Field
from fluxmesh.integral.layout import AT_FACE, AT_NODE, AT_SAMPLE, PER_GROUP
from fluxmesh.integral.rules import TRIANGLE_DEGREE4
from fluxmesh.integral.shapes import shape_tables
from fluxmesh.surface.surface import ControlSurface

__all__ = ["Batch", "Slab", "batch_of", "slabs_of"]

Array = NDArray[np.float64]
Indices = NDArray[np.int64]
_BARYCENTRIC: Final = np.array([point for point, _ in TRIANGLE_DEGREE4])
_RULE: Final = np.array([weight for _, weight in TRIANGLE_DEGREE4])
_POINTS_A_BATCH: Final = 50_000  # arrays of one batch stay in the cache: four times as fast as a million


@dataclass(frozen=True, eq=False)
class Batch:
    """Facets of one group and shape: triangles of straight faces, or whole curved faces.

    Attributes
    ----------
    group : int
        Their group.
    faces : ndarray, shape (n_faces,), int64
        The faces.
    entries : ndarray, shape (n_faces, size), int64
        Points of each face.
    places : ndarray, shape (n_corners, n_facets, 3), float64
        Corners of the facets, m; a polygon is a fan about the mean of its corners,
        and the triangles come piece by piece: all first ones, all second ones, ...
    blend : ndarray, shape (n_points, n_corners), float64
        From values at the corners to values at the quadrature points.
    weight : ndarray, shape (n_points, n_facets), float64
        Area of each point, m²; negative in a triangle that lies against its polygon.
    normal : ndarray, shape (n_facets, 3) or (n_points, n_facets, 3), float64
        Unit normal out of the fluid; of the polygon, in a triangle against it.
    """

    group: int
    faces: Indices
    entries: Indices
    places: Array
    blend: Array
    weight: Array
    normal: Array

    @property
    def pieces(self) -> int:
        """Facets a face."""
        return int(self.places.shape[1]) // self.faces.size

    @property
    def straight(self) -> bool:
        """Whether the facets are plane triangles."""
        return self.normal.ndim == 2

    def at_points(self, corner: Array) -> Array:
        """Return values at the quadrature points from those at the corners.

        Parameters
        ----------
        corner : ndarray, shape (n_corners, n_facets, ...), float64
            Any unit.

        Returns
        -------
        ndarray, shape (n_points, n_facets, ...), float64
            In the same unit.
        """
        flat: Array = np.einsum("qa,an->qn", self.blend, corner.reshape(corner.shape[0], -1))
        return flat.reshape(-1, *corner.shape[1:])

    def corner_values(self, field: Field) -> Array | None:
        """Return one field at the corners in SI units, or None where it is absent or sampled.

        Parameters
        ----------
        field : Field
            The field.

        Returns
        -------
        ndarray, shape (n_corners, n_facets) or (n_corners, n_facets, 3), float64, or None
            As the kernel takes it.
        """
        where = int(field.where[self.group])
        if where == AT_NODE:
            return _scaled(_spread(field.node[self.entries.T], self.straight), field.scale)
        if where == AT_FACE:
            one = _scaled(np.concatenate([field.face[self.faces]] * self.pieces), field.scale)
        elif where == PER_GROUP:
            one = np.asarray(field.group[self.group])
        else:
            return None
        return np.asarray(np.broadcast_to(one, (*self.places.shape[:2], *field.group.shape[1:])))

    def sampled_values(self, field: Field, start: Indices) -> Array | None:
        """Return one field at the quadrature points, or None where it is not sampled there.

        Parameters
        ----------
        field : Field
            The field.
        start : ndarray, shape (n_faces_of_surface + 1,), int64
            Where the samples of each face start.

        Returns
        -------
        ndarray, shape (n_points, n_facets) or (n_points, n_facets, 3), float64, or None
            SI units.
        """
        if field.where[self.group] != AT_SAMPLE:
            return None
        count = self.blend.shape[0]
        first = (start[self.faces] + count * np.arange(self.pieces)[:, None]).ravel()
        return _scaled(field.sample[first + np.arange(count)[:, None]], field.scale)

    def values(self, field: Field, start: Indices) -> Array | None:
        """Return one field at the quadrature points, wherever it sits; None where it is absent.

        Parameters
        ----------
        field, start
            As in `sampled_values`.

        Returns
        -------
        ndarray, shape (n_points, n_facets) or (n_points, n_facets, 3), float64, or None
            SI units.
        """
        if int(field.where[self.group]) == PER_GROUP:
            return np.broadcast_to(np.asarray(field.group[self.group]), (*self.weight.shape, *field.group.shape[1:]))
        corner = self.corner_values(field)
        return self.sampled_values(field, start) if corner is None else self.at_points(corner)

    def normal_part(self, vectors: Array) -> Array:
        """Return the component along the normal of vectors at corners (of straight facets) or points.

        Parameters
        ----------
        vectors : ndarray, shape (n, n_facets, 3), float64
            Any unit.

        Returns
        -------
        ndarray, shape (n, n_facets), float64
            In the same unit.
        """
        return np.asarray(np.einsum("qtk,tk->qt" if self.straight else "qtk,qtk->qt", vectors, self.normal))

    def face_area(self) -> Array:
        """Return the area of each facet's face, shape (n_facets,), m²."""
        own = self.weight.sum(axis=0)
        return np.tile(own.reshape(self.pieces, -1).sum(axis=0), self.pieces)


class Slab(NamedTuple):
    """Faces of one group, kind and number of points, few enough to stay in the cache.

    Attributes
    ----------
    group : int
        Their group.
    kind : int
        Their `fluxmesh.surface.surface.FaceKind`.
    faces : ndarray, shape (n_faces,), int64
        The faces.
    """

    group: int
    kind: int
    faces: Indices


def slabs_of(surface: ControlSurface, groups: NDArray[np.bool_]) -> list[Slab]:
    """Cut the faces of some groups into slabs, group by group.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    groups : ndarray of bool, shape (n_groups,)
        Groups wanted.

    Returns
    -------
    list of Slab
        In an order that depends on the surface alone.
    """
    wanted = np.flatnonzero(groups[surface.group_of_face])
    owner = surface.group_of_face[wanted]
    slabs = []
    for group in np.flatnonzero(groups).tolist():
        for kind, size, faces in _families(surface, wanted[owner == group]):
            each = shape_tables().weight.shape[1] if kind else _RULE.size * (1 if size == 3 else size)
            step = max(_POINTS_A_BATCH // each, 1)
            slabs += [Slab(group, kind, faces[first : first + step]) for first in range(0, faces.size, step)]
    return slabs


def _families(surface: ControlSurface, faces: Indices) -> Iterator[tuple[int, int, Indices]]:
    """Kind and size, and the faces that have it."""
    if surface.offsets is None:
        yield 0, 3, faces
        return
    size = surface.offsets[faces + 1] - surface.offsets[faces]
    kind = np.zeros(faces.size, np.int64) if surface.kinds is None else surface.kinds[faces].astype(np.int64)
    code = 4 * size + kind
    for shape in np.flatnonzero(np.bincount(code)).tolist():
        yield shape % 4, shape // 4, faces[code == shape]


def _scaled(values: Array, scale: float) -> Array:
    return values if scale == 1.0 else scale * values


def _spread(values: Array, straight: bool) -> Array:
    """From points of faces (size, n_faces, ...) to corners of facets."""
    size, count = values.shape[:2]
    if not straight or size == 3:
        return values
    middle = np.broadcast_to(values.mean(axis=0), values.shape)
    fan = np.stack([values, np.roll(values, -1, axis=0), middle])
    return fan.reshape(3, size * count, *values.shape[2:])


def batch_of(surface: ControlSurface, slab: Slab) -> Batch:
    """Return the facets and quadrature points of a slab.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    slab : Slab
        From `slabs_of`.

    Returns
    -------
    Batch
        Weights and places are those of the kernel.
    """
    group, kind, faces = slab
    if surface.offsets is None:
        entries = surface.connectivity.reshape(-1, 3)[faces]
    else:
        start = surface.offsets[faces]
        entries = surface.connectivity[start[:, None] + np.arange(surface.offsets[faces[0] + 1] - start[0])]
    size = entries.shape[1]
    corners = _spread(surface.points[entries.T], kind == 0)
    if kind > 0:
        tables = shape_tables()
        along_u, along_v = (
            np.tensordot(table[kind - 1, :, :size], corners, axes=1) for table in (tables.along_u, tables.along_v)
        )
        vectors = np.cross(along_u, along_v) * tables.weight[kind - 1][:, None, None]
        weight = np.linalg.norm(vectors, axis=2)
        normal = vectors / np.where(weight > 0, weight, 1.0)[:, :, None]
        return Batch(group, faces, entries, corners, tables.value[kind - 1, :, :size], weight, normal)
    a, b = corners[1] - corners[0], corners[2] - corners[0]
    vector = np.empty_like(a)
    for i, j, k in ((0, 1, 2), (1, 2, 0), (2, 0, 1)):
        vector[:, i] = 0.5 * (a[:, j] * b[:, k] - a[:, k] * b[:, j])
    area = np.sqrt(np.einsum("tk,tk->t", vector, vector))
    if size > 3:
        fan = vector.reshape(-1, faces.size, 3)
        against = np.einsum("pfk,fk->pf", fan, fan.sum(axis=0)) < 0
        area = np.where(against.ravel(), -area, area)
    normal = vector / np.where(area != 0, area, 1.0)[:, None]
    return Batch(group, faces, entries, corners, _BARYCENTRIC, _RULE[:, None] * area, normal)
