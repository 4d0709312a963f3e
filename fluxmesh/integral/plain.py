"""The plain twin of the kernel: the same integrals in NumPy, for testing the compiled one.

It shares the rules and the table's layout with the kernel, but neither its
code nor its order of summation.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from fluxmesh.integral.layout import (
    ABSENT,
    AT_FACE,
    AT_NODE,
    AT_SAMPLE,
    PER_GROUP,
    FaceArrays,
    FieldArrays,
    FlowArrays,
    Runs,
    sampled_groups,
)
from fluxmesh.integral.rules import TRIANGLE_DEGREE4
from fluxmesh.integral.shapes import shape_tables
from fluxmesh.integral.table import WIDTH, IntegralTable, column_slice

__all__ = ["integrate_plainly"]

Array = NDArray[np.float64]
Indices = NDArray[np.int64]
_PAIRS = ((0, 0), (1, 1), (2, 2), (1, 2), (0, 2), (0, 1))


def integrate_plainly(
    *,
    mesh: FaceArrays,
    flow: FlowArrays,
    runs: Runs,
    origin: NDArray[np.float64],
    still_groups: NDArray[np.bool_],
    threads: int | None = None,
) -> IntegralTable:
    """Integrate all basis functions over all groups, plainly.

    Parameters
    ----------
    mesh, flow, runs, origin, still_groups, threads
        As for `fluxmesh.integral.kernel.integrate`; `threads` is not used.

    Returns
    -------
    IntegralTable
        One row a group, equal to the kernel's to round-off.
    """
    values = np.zeros((still_groups.size, WIDTH))
    for k in range(runs.group.size):
        places = np.arange(runs.start[k], runs.start[k + 1])
        faces = runs.order[places] if runs.order.size else places
        group = int(runs.group[k])
        if runs.curved[k]:
            for kind in np.unique(mesh.kinds[faces]):
                values[group] += _curved(mesh, flow, faces[mesh.kinds[faces] == kind], int(kind) - 1, group, origin)
        elif mesh.offsets.size == 0:
            corners = mesh.connectivity.reshape(-1, 3)[faces]
            values[group] += _triangles(mesh, flow, faces, corners, group, origin)
        else:
            sizes = mesh.offsets[faces + 1] - mesh.offsets[faces]
            for size in np.unique(sizes):
                some = faces[sizes == size]
                corners = mesh.connectivity[mesh.offsets[some][:, None] + np.arange(size)]
                values[group] += _triangles(mesh, flow, some, corners, group, origin)
    return IntegralTable(values=values, origin=origin)


def _corner_values(field: FieldArrays, group: int, faces: Indices, corners: Indices) -> Array | None:
    """Values of one field at the corners of faces, shape (faces, corners, k) or (faces, corners)."""
    where = int(field.where[group])
    if where in (ABSENT, AT_SAMPLE):
        return None
    if where == AT_NODE:
        return field.scale * field.node[corners]
    per_face = field.scale * field.face[faces] if where == AT_FACE else field.group[np.full(faces.size, group)]
    return np.repeat(per_face[:, None], corners.shape[1], axis=1)


def _at_point(field: FieldArrays, group: int, corner: Array | None, weights: Array, sample: Indices) -> Array | None:
    """Values of one field at one quadrature point of each triangle or face."""
    if field.where[group] == AT_SAMPLE:
        return field.scale * field.sample[sample]
    return None if corner is None else np.einsum("c,fc...->f...", weights, corner)


def _gauge(flow: FlowArrays, group: int, pressure: Array | None, density: Array | None, x: Array) -> Array | None:
    terms = flow.terms
    if pressure is None or flow.pressure.where[group] <= PER_GROUP:
        return pressure
    if terms.times_density and density is not None:
        pressure = pressure * density
    return np.asarray(pressure + terms.offset + x @ np.array([terms.head_x, terms.head_y, terms.head_z]))


def _fan(values: Array) -> Array:
    """From corners (faces, n, ...) to the triangles of the fan (faces * n, 3, ...)."""
    if values.shape[1] == 3:
        return values
    centre = np.broadcast_to(values.mean(axis=1, keepdims=True), values.shape)
    fan = np.stack([values, np.roll(values, -1, axis=1), centre], axis=2)
    return fan.reshape(-1, 3, *values.shape[2:])


def _triangles(
    mesh: FaceArrays, flow: FlowArrays, faces: Indices, corners: Indices, group: int, origin: Array
) -> Array:
    size = corners.shape[1]
    x = _fan(mesh.points[corners] - origin)
    fields = (flow.velocity, flow.traction, flow.density, flow.pressure)
    parts = [_corner_values(field, group, faces, corners) for field in fields]
    parts = [None if f is None else _fan(f) for f in parts]
    sampled = bool(sampled_groups(flow)[group])
    if not sampled:
        parts[3] = _gauge(flow, group, parts[3], parts[2], x)
    pieces = 1 if size == 3 else size
    first = np.zeros(faces.size * pieces, np.int64)
    if sampled:
        first = (flow.sample_start[faces][:, None] + len(TRIANGLE_DEGREE4) * np.arange(pieces)).ravel()
    normal = 0.5 * np.cross(x[:, 1] - x[:, 0], x[:, 2] - x[:, 0])
    area = np.linalg.norm(normal, axis=1)
    if size > 3:
        whole = normal.reshape(-1, size, 3).sum(axis=1)
        area = np.where((normal.reshape(-1, size, 3) * whole[:, None]).sum(axis=2).ravel() < 0, -area, area)
    mass = None
    if flow.mass.where[group] == AT_FACE:
        mass = flow.mass.scale * flow.mass.face[faces]
        if size > 3:
            pieces = area.reshape(-1, size)
            mass = (mass[:, None] * pieces / pieces.sum(axis=1, keepdims=True)).ravel()
    total = np.zeros(WIDTH)
    for q, (weights, weight) in enumerate(TRIANGLE_DEGREE4):
        point = np.array(weights)
        place = np.einsum("c,fck->fk", point, x)
        at = [_at_point(field, group, part, point, first + q) for field, part in zip(fields, parts)]
        if sampled:
            at[3] = _gauge(flow, group, at[3], at[2], place)
        total += _points(
            place, weight * normal, weight * area, at[0], at[1], at[2], at[3], None if mass is None else weight * mass
        )
    return total


def _curved(mesh: FaceArrays, flow: FlowArrays, faces: Indices, kind: int, group: int, origin: Array) -> Array:
    tables = shape_tables()
    size = int(tables.size[kind])
    corners = mesh.connectivity[mesh.offsets[faces][:, None] + np.arange(size)]
    x = mesh.points[corners] - origin
    fields = (flow.velocity, flow.traction, flow.density, flow.pressure)
    parts = [_corner_values(field, group, faces, corners) for field in fields]
    first = flow.sample_start[faces] if flow.sample_start.size else np.zeros(faces.size, np.int64)
    shape, by_u, by_v = (table[kind][:, :size] for table in (tables.value, tables.along_u, tables.along_v))
    normals = np.cross(np.einsum("qa,fak->qfk", by_u, x), np.einsum("qa,fak->qfk", by_v, x))
    normals *= tables.weight[kind][:, None, None]
    areas = np.linalg.norm(normals, axis=2)
    total = np.zeros(WIDTH)
    for q in range(shape.shape[0]):
        place = np.einsum("a,fak->fk", shape[q], x)
        at = [_at_point(field, group, part, shape[q], first + q) for field, part in zip(fields, parts)]
        at[3] = _gauge(flow, group, at[3], at[2], place)
        mass = None
        if flow.mass.where[group] == AT_FACE:
            mass = flow.mass.scale * flow.mass.face[faces] * areas[q] / areas.sum(axis=0)
        total += _points(place, normals[q], areas[q], at[0], at[1], at[2], at[3], mass)
    return total


def _points(
    x: Array,
    normal: Array,
    area: Array,
    velocity: Array | None,
    traction: Array | None,
    density: Array | None,
    pressure: Array | None,
    mass: Array | None,
) -> Array:
    """Sum all integrands over quadrature points whose areas hold the weights."""
    row = np.zeros(WIDTH)

    def put(name: str, terms: Array) -> None:
        row[column_slice(name)] = terms.sum(axis=0)

    put("area", area)
    put("area_vector", normal)
    put("position", x * area[:, None])
    put("position_normal", np.einsum("fi,fj->fij", x, normal).reshape(-1, 9))
    put("square_normal", np.concatenate([(x[:, k] * x[:, m])[:, None] * normal for k, m in _PAIRS], axis=1))
    if pressure is not None:
        force = -pressure[:, None] * normal
        put("pressure_force", force)
        put("moment_of_pressure", np.cross(x, force))
        put("pressure_area", pressure * area)
    if traction is not None:
        force = traction * area[:, None]
        put("viscous_force", force)
        put("moment_of_viscous", np.cross(x, force))
    if density is None:
        return row
    put("density_area", density * area)
    if velocity is None and mass is None:
        return row
    if velocity is None:
        velocity = np.zeros_like(x)
    volume = np.einsum("fk,fk->f", velocity, normal) if mass is None else mass / density
    carried = density * volume if mass is None else mass
    square = np.einsum("fk,fk->f", velocity, velocity)
    dynamic = density * square / 2
    put("mass_flow", carried)
    put("volume_flow", volume)
    put("momentum_flux", carried[:, None] * velocity)
    put("moment_of_momentum_flux", np.cross(x, carried[:, None] * velocity))
    put("mass_flow_position", carried[:, None] * x)
    put("mass_flow_square", np.stack([carried * x[:, k] * x[:, m] for k, m in _PAIRS], axis=1))
    put("kinetic_energy_flux", carried * square / 2)
    put("reversed_mass_flow", np.maximum(-carried, 0))
    put("normal_momentum", carried * np.divide(volume, area, out=np.zeros_like(area), where=area != 0))
    put("velocity_area", velocity * area[:, None])
    put("speed_area", np.sqrt(square) * area)
    put("dynamic_pressure_area", dynamic * area)
    put("dynamic_pressure_force", -dynamic[:, None] * normal)
    put("moment_of_dynamic_pressure", np.cross(x, -dynamic[:, None] * normal))
    put("dynamic_pressure_mass_flow", dynamic * carried)
    if pressure is not None:
        put("pressure_volume_flow", pressure * volume)
        put("pressure_mass_flow", pressure * carried)
    if traction is not None:
        put("viscous_power", np.einsum("fk,fk->f", traction, velocity) * area)
    return row
