"""The table of a flow from recovered quadratic patches: a second, higher-order value of every integral.

Straight faces become quadratic triangles and quadrilaterals. The mid-side values of node fields
come from recovered slopes, the mid-side points from recovered normals where the
facets stand for a curved surface. The same kernel then integrates them, so the table can be subtracted
from the plain one: the difference estimates the leading error of each integral.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from fluxmesh.field.bending import sound_faces
from fluxmesh.field.flow import Flow, gauge_terms, integrate_flow, require_finite_table
from fluxmesh.field.patch_kernel import PatchFields, PatchShape, integrate_patches
from fluxmesh.field.recovery import Columns, Recovered, columns_of, recover
from fluxmesh.integral.layout import ABSENT, AT_FACE, AT_SAMPLE, PER_GROUP, PressureTerms
from fluxmesh.integral.table import WIDTH, IntegralTable
from fluxmesh.surface.smooth import SmoothShape, smooth_shape
from fluxmesh.surface.surface import ControlSurface, FaceKind

__all__ = ["sharpened_table"]

_DENSITY = 7  # its column


def sharpened_table(
    surface: ControlSurface,
    flow: Flow,
    *,
    facets_are_geometry: bool,
    origin: NDArray[np.float64],
    threads: int | None = None,
) -> IntegralTable:
    """Return the table of a flow from quadratic patches.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    flow : Flow
        The flow on it.
    facets_are_geometry : bool
        True keeps the facets where they are (a flow computed within them knows no other
        surface); False bends them to the smooth shape they stand for. Creases stay.
    origin : ndarray, shape (3,), float64
        Point that positions and moments are taken about, m.
    threads : int, optional
        Threads; all cores by default. The result does not depend on it.

    Returns
    -------
    IntegralTable
        The same groups and columns as from `fluxmesh.field.flow.integrate_flow`.

    Raises
    ------
    FieldError
        Integrals that overflow.

    Notes
    -----
    Kept as they are, with straight edges to their neighbours: faces that are curved already, faces without area or
    turned over in themselves, and groups with values at quadrature points, which are
    integrated beyond linear already. Where facets are the geometry, a field that is linear in space stays so on
    curved walls too: hydrostatic pressure on facets is exact as it is. Fields with one value a group stay constant.
    Face values become linear about the face's centroid, so that the face keeps its mean: what a finite-volume
    export says of the flow through a face stands, and only products of fields and moments change. So does a mass
    flow given a face: it varies over the face, its sum stands.
    """
    chosen = _bendable(surface, flow, facets_are_geometry)
    if not chosen.any():
        return integrate_flow(surface, flow, threads=threads, origin=origin)
    shape = smooth_shape(surface, threads=threads)
    sound = np.empty(surface.face_count, np.bool_)
    sound_faces(surface.points, shape.halves.starts, shape.halves.place, shape.geometry.normals, sound)
    chosen &= sound
    columns = columns_of(flow, shape.geometry.areas)
    recovered = recover(surface, shape, columns, chosen, spatial=facets_are_geometry, threads=threads)
    values = np.zeros((len(surface.groups), WIDTH))
    faces, rest = np.flatnonzero(chosen), np.flatnonzero(~chosen)
    if rest.size:
        values += integrate_flow(surface, flow, threads=threads, origin=origin, faces=rest).values
    if faces.size:
        values += integrate_patches(
            faces,
            surface.group_of_face,
            _shape_arrays(surface, shape, chosen, origin, curved=not facets_are_geometry),
            _field_arrays(flow, columns, recovered, gauge_terms(flow, origin)),
            _present(flow),
            threads,
        )
    table = IntegralTable(values=values, origin=origin)
    require_finite_table(surface, table)
    return table


def _bendable(surface: ControlSurface, flow: Flow, facets_are_geometry: bool) -> NDArray[np.bool_]:
    """Faces whose integrals change when they are bent."""
    sampled = np.logical_or.reduce([field.where == AT_SAMPLE for field in flow.fields()])
    varying = np.logical_or.reduce([field.where > PER_GROUP for field in flow.fields()])
    groups = ~sampled & (varying if facets_are_geometry else True)
    chosen = groups[surface.group_of_face]
    return np.asarray(chosen if surface.kinds is None else chosen & (surface.kinds == FaceKind.POLYGON))


def _shape_arrays(
    surface: ControlSurface,
    shape: SmoothShape,
    chosen: NDArray[np.bool_],
    origin: NDArray[np.float64],
    *,
    curved: bool,
) -> PatchShape:
    halves, geometry = shape.halves, shape.geometry
    # the edges that bent faces share with faces that stay
    rigid = np.zeros(halves.twin.size, np.bool_)
    if not chosen.all():
        paired = halves.twin >= 0
        rigid[paired] = ~chosen[halves.face[halves.twin[paired]]]
    return PatchShape(
        surface.points - origin, halves.starts, halves.point, halves.place, shape.sharp, rigid, shape.sector,
        shape.normal, shape.along, geometry.centroids - origin, geometry.normals, curved,
    )  # fmt: skip


def _field_arrays(flow: Flow, columns: Columns, recovered: Recovered, terms: PressureTerms) -> PatchFields:
    fields = (flow.velocity, flow.traction, flow.pressure, flow.density, flow.mass_flux)
    groups = columns.where.shape[0]
    values = np.concatenate([field.group.reshape(groups, -1) for field in fields], axis=1)
    values[columns.where == ABSENT] = 0.0
    values[flow.density.where == ABSENT, _DENSITY] = 1.0  # a density that is not there must not divide by zero
    mass = flow.mass_flux
    return PatchFields(
        columns.where, columns.node, columns.node_column, recovered.sector, recovered.node, columns.face,
        columns.face_column, recovered.face, np.concatenate([np.full(f.components, f.scale) for f in fields]),
        values, mass.face * mass.scale, mass.where == AT_FACE, terms,
    )  # fmt: skip


def _present(flow: Flow) -> NDArray[np.bool_]:
    density = flow.density.present()
    moving = (flow.velocity.present() | (flow.mass_flux.where == AT_FACE)) & density
    return np.column_stack([flow.pressure.present(), flow.traction.present(), density, moving])
