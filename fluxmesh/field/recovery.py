"""Slopes of fields along the surface, recovered within smooth pieces of each group.

Node values: a quadratic through the node's own value, fitted to two rings of faces in the
tangent plane. It never looks across a group's border or a crease, so slopes at a
rim are one-sided, and still exact for a quadratic field on a plane.
Face values: a linear function through the face's own value at its centroid, fitted to the faces around.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from fluxmesh.compiling import run_parts
from fluxmesh.field.flow import Flow
from fluxmesh.integral.layout import AT_FACE, AT_NODE
from fluxmesh.surface.creases import sectors
from fluxmesh.surface.half_edges import sort_into
from fluxmesh.surface.smooth import SmoothShape, part_bounds
from fluxmesh.surface.stencils import fit_faces, fit_sectors
from fluxmesh.surface.surface import ControlSurface

__all__ = ["COLUMNS", "Columns", "Recovered", "columns_of", "recover"]

COLUMNS = 9
"""Velocity (3), traction (3), pressure, density, and mass flow through a face over its area, in this order."""


class Columns(NamedTuple):
    """The fields of a flow column by column, as exported.

    Attributes
    ----------
    where : ndarray, shape (n_groups, COLUMNS), int8
        Where each group takes each column from (see `fluxmesh.integral.layout`).
    node, face : ndarray, shape (n_points or n_faces, m), float64
        Columns that some group takes from points or faces.
    node_column, face_column : ndarray, shape (COLUMNS,), int64
        Where each column stands there, or -1.
    """

    where: NDArray[np.int8]
    node: NDArray[np.float64]
    face: NDArray[np.float64]
    node_column: NDArray[np.int64]
    face_column: NDArray[np.int64]


class Recovered(NamedTuple):
    """Slopes along the two vectors of `fluxmesh.surface.stencils.frame_of` for a normal, and along it.

    Attributes
    ----------
    sector : ndarray, shape (n_corners,), int32
        Sector of each corner within its group.
    node : ndarray, shape (n_sectors, m, 3), float64
        Of `Columns.node` in each sector, in the frame of the shape's normal there, per metre.
    face : ndarray, shape (n_faces, m, 3), float64
        Of `Columns.face` on each face, in the frame of the face's normal.
    """

    sector: NDArray[np.int32]
    node: NDArray[np.float64]
    face: NDArray[np.float64]


def columns_of(flow: Flow, areas: NDArray[np.float64]) -> Columns:
    """Return the fields of a flow column by column.

    Parameters
    ----------
    flow : Flow
        The flow.
    areas : ndarray, shape (n_faces,), float64
        Of the faces, m^2.
    """
    mass = flow.mass_flux
    if mass.face.size:
        mass = replace(mass, face=mass.face / np.where(areas > 0, areas, np.inf))
    fields = (flow.velocity, flow.traction, flow.pressure, flow.density, mass)
    where = np.concatenate([np.repeat(field.where[:, None], field.components, axis=1) for field in fields], axis=1)
    stacks, columns = [], []
    for at in (AT_NODE, AT_FACE):
        column = np.full(COLUMNS, -1)
        parts: list[NDArray[np.float64]] = []
        start = count = 0
        for field in fields:
            if (field.where == at).any():
                values = field.node if at == AT_NODE else field.face
                parts.append(values.reshape(values.shape[0], -1))
                column[start : start + field.components] = count + np.arange(field.components)
                count += field.components
            start += field.components
        stacks.append(np.ascontiguousarray(np.concatenate(parts, axis=1)) if parts else np.empty((0, 0)))
        columns.append(column)
    return Columns(np.ascontiguousarray(where), stacks[0], stacks[1], columns[0], columns[1])


def recover(
    surface: ControlSurface,
    shape: SmoothShape,
    columns: Columns,
    chosen: NDArray[np.bool_],
    *,
    spatial: bool,
    threads: int | None = None,
) -> Recovered:
    """Recover the slopes of fields.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    shape : SmoothShape
        Its shape.
    columns : Columns
        The fields.
    chosen : ndarray, shape (n_faces,), bool
        Faces that slopes are wanted on.
    spatial : bool
        Whether values between the points are wanted on the facets, not on the smooth
        surface: node fields that are linear in space then stay so.
    threads : int, optional
        Threads; the result does not depend on it.

    Returns
    -------
    Recovered
        Zero where nothing was wanted.
    """
    halves = shape.halves
    group = surface.group_of_face[halves.face]
    border = (halves.twin >= 0) & (group[halves.twin] != group)
    sector, count = sectors(halves, shape.sharp | border) if border.any() else (shape.sector, shape.normal.shape[0])
    around_start, around = sort_into(sector, count)
    first = around[around_start[:-1]]
    mesh = (halves.starts, halves.face, sector, around_start, around)

    node, face = np.empty((0, 0, 3)), np.empty((0, 0, 3))
    if columns.node.size:
        position = np.ascontiguousarray(surface.points[halves.place[first]])
        normal = np.ascontiguousarray(shape.normal[shape.sector[first]])
        # of any face of a sector: its first may be one that stays as it is
        wanted = np.zeros(count, np.bool_)
        wanted[sector[chosen[halves.face] & (columns.where == AT_NODE).any(axis=1)[group]]] = True
        values = _sector_values(columns.node, halves.point, halves.place, sector, first)
        node = _fitted(fit_sectors, (*mesh, position, normal, wanted, values, spatial), threads)
    if columns.face.size:
        geometry = shape.geometry
        wanted = chosen & (columns.where == AT_FACE).any(axis=1)[surface.group_of_face]
        face = _fitted(fit_faces, (*mesh, geometry.centroids, geometry.normals, wanted, columns.face, spatial), threads)
    return Recovered(sector, node, face)


def _fitted(kernel: Callable[..., None], arrays: tuple[Any, ...], threads: int | None) -> NDArray[np.float64]:
    """Slopes by a kernel of `fluxmesh.surface.stencils`, in parts on threads."""
    wanted, values = arrays[-3], arrays[-2]
    slopes = np.zeros((*values.shape, 3))
    bounds = part_bounds(wanted.size, threads)
    run_parts(lambda p: kernel(bounds[p], bounds[p + 1], *arrays, slopes), bounds.size - 1, threads)
    return slopes


def _sector_values(
    values: NDArray[np.float64],
    point: NDArray[np.int64],
    place: NDArray[np.int64],
    sector: NDArray[np.int32],
    first: NDArray[np.int32],
) -> NDArray[np.float64]:
    """Value in each sector: of its point, or the mean over the points that stand in one place there."""
    if point is place or np.array_equal(point, place):
        return np.ascontiguousarray(values[point[first]])
    count = np.bincount(sector, minlength=first.size)
    return np.stack(
        [np.bincount(sector, weights=column[point], minlength=first.size) / count for column in values.T], axis=1
    )
