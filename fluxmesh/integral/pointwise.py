"""Integration point by point: curved faces, and faces with fields sampled at the points.

Every quadrature point is a set of weights over its face's points: shape functions
on a curved face; on a straight triangle its area coordinates; on a polygon those
of a triangle of the fan about the mean of its corners.
"""

from __future__ import annotations

from math import sqrt
from typing import Any, Final

import numpy as np

from fluxmesh.compiling import compiled
from fluxmesh.integral.gather import clear, fan_areas
from fluxmesh.integral.lanes import LANES, A, M, N, P, R, T, V, X, absorb_points
from fluxmesh.integral.layout import AT_FACE, AT_NODE, AT_SAMPLE, PER_GROUP
from fluxmesh.integral.rules import TRIANGLE_DEGREE4

__all__ = ["point_run"]

_L0: Final = tuple(point[0] for point, _ in TRIANGLE_DEGREE4)
_L1: Final = tuple(point[1] for point, _ in TRIANGLE_DEGREE4)
_L2: Final = tuple(point[2] for point, _ in TRIANGLE_DEGREE4)
_W: Final = tuple(weight for _, weight in TRIANGLE_DEGREE4)
_POINTS: Final = len(_W)


@compiled
def _load_vector(
    b: Any, i: int, row: int, field: Any, group: int, face: int, sample: int, entries: Any, weights: Any, size: int
) -> None:
    where = field.where[group]
    for k in range(3):
        value = 0.0
        if where == AT_NODE:
            for a in range(size):
                value += weights[a] * field.node[entries[a], k]
            value *= field.scale
        elif where == AT_FACE:
            value = field.scale * field.face[face, k]
        elif where == AT_SAMPLE:
            value = field.scale * field.sample[sample, k]
        elif where == PER_GROUP:
            value = field.group[group, k]
        b[row + k * LANES + i] = value


@compiled
def _scalar(
    field: Any, group: int, face: int, sample: int, entries: Any, weights: Any, size: int, absent: float
) -> float:
    where = field.where[group]
    value = absent
    if where == AT_NODE:
        value = 0.0
        for a in range(size):
            value += weights[a] * field.node[entries[a]]
        value *= field.scale
    elif where == AT_FACE:
        value = field.scale * field.face[face]
    elif where == AT_SAMPLE:
        value = field.scale * field.sample[sample]
    elif where == PER_GROUP:
        value = field.group[group]
    return value


@compiled
def _load_fields(
    b: Any, i: int, flow: Any, group: int, face: int, sample: int, entries: Any, weights: Any, size: int
) -> None:
    _load_vector(b, i, V, flow.velocity, group, face, sample, entries, weights, size)
    _load_vector(b, i, T, flow.traction, group, face, sample, entries, weights, size)
    density = _scalar(flow.density, group, face, sample, entries, weights, size, 1.0)
    pressure = _scalar(flow.pressure, group, face, sample, entries, weights, size, 0.0)
    if flow.pressure.where[group] > PER_GROUP:
        terms = flow.terms
        if terms.times_density:
            pressure *= density
        pressure += (
            terms.offset
            + terms.head_x * b[X + i]
            + terms.head_y * b[X + LANES + i]
            + terms.head_z * b[X + 2 * LANES + i]
        )
    b[P + i] = pressure
    b[R + i] = density


@compiled
def _load_curved(b: Any, i: int, mesh: Any, origin: Any, entries: Any, kind: int, q: int, tables: Any) -> None:
    ux, uy, uz, vx, vy, vz = 0.0, 0.0, 0.0, 0.0, 0.0, 0.0
    for a in range(tables.size[kind]):
        f, fu, fv = tables.value[kind, q, a], tables.along_u[kind, q, a], tables.along_v[kind, q, a]
        x = mesh.points[entries[a], 0] - origin[0]
        y = mesh.points[entries[a], 1] - origin[1]
        z = mesh.points[entries[a], 2] - origin[2]
        b[X + i] += f * x
        b[X + LANES + i] += f * y
        b[X + 2 * LANES + i] += f * z
        ux, uy, uz = ux + fu * x, uy + fu * y, uz + fu * z
        vx, vy, vz = vx + fv * x, vy + fv * y, vz + fv * z
    weight = tables.weight[kind, q]
    nx, ny, nz = weight * (uy * vz - uz * vy), weight * (uz * vx - ux * vz), weight * (ux * vy - uy * vx)
    b[N + i], b[N + LANES + i], b[N + 2 * LANES + i] = nx, ny, nz
    b[A + i] = sqrt(nx * nx + ny * ny + nz * nz)


@compiled
def _weigh_flat(weights: Any, size: int, piece: int, q: int) -> None:
    if size == 3:
        weights[0], weights[1], weights[2] = _L0[q], _L1[q], _L2[q]
        return
    for a in range(size):
        weights[a] = _L2[q] / size
    weights[piece] += _L0[q]
    weights[piece + 1 if piece + 1 < size else 0] += _L1[q]


@compiled
def _load_flat(
    b: Any, i: int, mesh: Any, origin: Any, entries: Any, size: int, piece: int, weights: Any, centre: Any,
    sign: float, weight: float,
) -> None:  # fmt: skip
    for k in range(3):
        value = 0.0
        for a in range(size):
            value += weights[a] * (mesh.points[entries[a], k] - origin[k])
        b[X + k * LANES + i] = value
    one = entries[piece]
    two = entries[piece + 1 if piece + 1 < size else 0]
    cx, cy, cz = centre[0], centre[1], centre[2]
    if size == 3:
        cx, cy, cz = mesh.points[entries[2], 0], mesh.points[entries[2], 1], mesh.points[entries[2], 2]
    # edges from the first corner, as in the kernel for flat faces
    ax, ay, az = (
        mesh.points[two, 0] - mesh.points[one, 0],
        mesh.points[two, 1] - mesh.points[one, 1],
        mesh.points[two, 2] - mesh.points[one, 2],
    )
    bx, by, bz = cx - mesh.points[one, 0], cy - mesh.points[one, 1], cz - mesh.points[one, 2]
    half = 0.5 * weight
    nx, ny, nz = half * (ay * bz - az * by), half * (az * bx - ax * bz), half * (ax * by - ay * bx)
    b[N + i], b[N + LANES + i], b[N + 2 * LANES + i] = nx, ny, nz
    b[A + i] = sign * sqrt(nx * nx + ny * ny + nz * nz)


@compiled
def point_run(
    mesh: Any, flow: Any, order: Any, tables: Any, origin: Any, begin: int, end: int, group: int,
    b: Any, o: Any, high: Any, low: Any,
) -> None:  # fmt: skip
    """Integrate a run of faces of one group point by point."""
    pressure, traction = flow.pressure.where[group] > 0, flow.traction.where[group] > 0
    density = flow.density.where[group] > 0
    mass_given = flow.mass.where[group] == AT_FACE
    moving = (flow.velocity.where[group] > 0 or mass_given) and density
    triangles = mesh.offsets.size == 0
    straight = mesh.kinds.size == 0
    sampled = flow.sample_start.size > 0
    weights = np.zeros(16)
    areas = np.zeros(16)
    centre = np.zeros(3)
    for place in range(begin, end):
        face = order[place] if order.size else place
        first = 3 * face if triangles else mesh.offsets[face]
        last = 3 * face + 3 if triangles else mesh.offsets[face + 1]
        entries = mesh.connectivity[first:last]
        size = last - first
        kind = 0 if straight else mesh.kinds[face]
        if weights.size < size:
            weights, areas = np.zeros(size), np.zeros(size)
        if kind > 0:
            count = tables.weight.shape[1]
        elif size == 3:
            count = _POINTS
        else:
            count = _POINTS * size
            for k in range(3):
                total = 0.0
                for a in range(size):
                    total += mesh.points[entries[a], k] - origin[k]
                centre[k] = origin[k] + total / size
            fan_areas(mesh.points, mesh.connectivity, first, last, centre, areas)
        whole = 0.0
        for sweep in range(2 if mass_given else 1):
            last_sweep = sweep == (1 if mass_given else 0)
            for q0 in range(0, count, LANES):
                clear(b)
                for i in range(min(LANES, count - q0)):
                    q = q0 + i
                    if kind > 0:
                        _load_curved(b, i, mesh, origin, entries, kind - 1, q, tables)
                        for a in range(size):
                            weights[a] = tables.value[kind - 1, q, a]
                    else:
                        piece, at = q // _POINTS, q % _POINTS
                        sign = 1.0 if size == 3 or areas[piece] >= 0.0 else -1.0
                        _weigh_flat(weights, size, piece, at)
                        _load_flat(b, i, mesh, origin, entries, size, piece, weights, centre, sign, _W[at])
                    if not last_sweep:
                        whole += b[A + i]
                        continue
                    sample = flow.sample_start[face] + q if sampled else 0
                    _load_fields(b, i, flow, group, face, sample, entries, weights, size)
                    if mass_given:
                        b[M + i] = b[A + i] / whole * flow.mass.scale * flow.mass.face[face] if whole != 0.0 else 0.0
                if last_sweep:
                    absorb_points(b, o, high, low, pressure, traction, density, moving, mass_given)
