"""The compiled kernel: one pass over the faces gives every basis integral.

Straight faces are gathered a batch of triangles at a time (polygons as the fan about
the mean of their corners, which keeps a linear field exact and does not depend on
the corner they start at); curved faces a batch of quadrature points at a time. Sums are
kept as unevaluated pairs of numbers, run by run, and the runs are added in their
fixed order: the result is the correctly rounded sum of the face integrals
in all but freak cases, and the same for any number of threads.
"""

from __future__ import annotations

from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.compiling import compiled, run_parts
from fluxmesh.integral.gather import (
    clear,
    fan_areas,
    finish_pressure,
    load_centre,
    load_centre_scalar,
    load_points,
    load_scalar,
    load_vector,
    share_of_fan,
    still,
)
from fluxmesh.integral.lanes import (
    BUFFER_ROWS,
    LANES,
    M,
    P,
    R,
    S,
    T,
    V,
    X,
    absorb_triangles,
)
from fluxmesh.integral.layout import AT_FACE, AT_NODE, PER_GROUP, FaceArrays, FlowArrays, Runs, sampled_groups
from fluxmesh.integral.pointwise import point_run
from fluxmesh.integral.shapes import ShapeTables, shape_tables
from fluxmesh.integral.table import WIDTH, IntegralTable

__all__ = ["flat_run", "integrate"]

_SPAN: Final = 16  # runs a thread takes at a time


@compiled
def flat_run(
    mesh: Any, flow: Any, order: Any, origin: Any, begin: int, end: int, g: int,
    b: Any, o: Any, high: Any, low: Any, nodes: Any, faces: Any, skip_still: bool,
) -> None:  # fmt: skip
    """Add the integrals over straight faces, a batch of triangles at a time, to ``high`` and ``low`` lane by lane."""
    points, connectivity, offsets, _ = mesh
    velocity, traction, pressure, density, mass, terms, _ = flow
    v_at, v_node, v_face, v_group, _, v_scale = velocity
    t_at, t_node, t_face, t_group, _, t_scale = traction
    p_at, p_node, p_face, p_group, _, p_scale = pressure
    r_at, r_node, r_face, r_group, _, r_scale = density
    m_at, _, m_face, _, _, m_scale = mass
    times_density, offset, hx, hy, hz = terms
    ox, oy, oz = origin[0], origin[1], origin[2]
    zero = np.zeros(3)
    has_pressure, has_traction, has_density = p_at[g] > 0, t_at[g] > 0, r_at[g] > 0
    mass_given = m_at[g] == AT_FACE
    moving = (v_at[g] > 0 or mass_given) and has_density
    triangles = offsets.size == 0
    ordered = order.size > 0
    areas = np.zeros(8)
    centre = np.zeros(3)
    # the fan of one polygon may be cut by the end of a batch, and goes on in the next
    place, piece = begin, 0
    first, last, size = 0, 0, 3
    while place < end:
        clear(b)
        filled = 0
        while filled < LANES and place < end:
            face = order[place] if ordered else place
            faces[filled] = face
            if triangles:
                for c in range(3):
                    nodes[c * LANES + filled] = connectivity[3 * face + c]
                b[S + filled] = 1.0
                place += 1
                filled += 1
                continue
            if piece == 0:
                first, last = offsets[face], offsets[face + 1]
                size = last - first
                if size > 3:
                    if areas.size < size:
                        areas = np.zeros(size)
                    for k in range(3):
                        total = 0.0
                        for e in range(first, last):
                            total += points[connectivity[e], k] - origin[k]
                        centre[k] = origin[k] + total / size
                    fan_areas(points, connectivity, first, last, centre, areas)
            nodes[filled] = connectivity[first + piece]
            nodes[LANES + filled] = connectivity[first + (piece + 1 if piece + 1 < size else 0)]
            nodes[2 * LANES + filled] = connectivity[first + 2] if size == 3 else connectivity[first]
            b[S + filled] = 1.0 if size == 3 or areas[piece] >= 0.0 else -1.0
            filled += 1
            piece += 1
            if size == 3 or piece == size:
                piece = 0
                place += 1
        load_points(b, points, ox, oy, oz, nodes, filled)
        load_vector(b, V, v_at[g], v_node, v_face, v_group, v_scale, g, nodes, faces, filled)
        load_vector(b, T, t_at[g], t_node, t_face, t_group, t_scale, g, nodes, faces, filled)
        load_scalar(b, R, r_at[g], r_node, r_face, r_group, r_scale, g, nodes, faces, filled)
        load_scalar(b, P, p_at[g], p_node, p_face, p_group, p_scale, g, nodes, faces, filled)
        if mass_given:
            for i in range(filled):
                b[M + i] = m_scale * m_face[faces[i]]
        if not triangles:
            for i in range(filled):
                low_entry, high_entry = offsets[faces[i]], offsets[faces[i] + 1]
                if high_entry - low_entry == 3:
                    continue
                load_centre(b, i, X, points, connectivity, low_entry, high_entry, 1.0, origin)
                if v_at[g] == AT_NODE:
                    load_centre(b, i, V, v_node, connectivity, low_entry, high_entry, v_scale, zero)
                if t_at[g] == AT_NODE:
                    load_centre(b, i, T, t_node, connectivity, low_entry, high_entry, t_scale, zero)
                if p_at[g] == AT_NODE:
                    load_centre_scalar(b, i, P, p_node, connectivity, low_entry, high_entry, p_scale)
                if r_at[g] == AT_NODE:
                    load_centre_scalar(b, i, R, r_node, connectivity, low_entry, high_entry, r_scale)
                if mass_given:
                    b[M + i] *= share_of_fan(points, connectivity, low_entry, high_entry, origin, nodes[i])
        if p_at[g] > PER_GROUP:
            finish_pressure(b, times_density, offset, hx, hy, hz)
        run_flow = moving and not (skip_still and still(b, mass_given))
        absorb_triangles(b, o, high, low, has_pressure, has_traction, has_density, run_flow, mass_given)


# Two kernels rather than one: the machine code for points is made only where a surface needs it.
@compiled
def _integrate_flat_runs(
    mesh: Any, flow: Any, runs: Any, origin: Any, skip_still: Any, sampled: Any, first: int, last: int,
    out_high: Any, out_low: Any,
) -> None:  # fmt: skip
    b = np.zeros(BUFFER_ROWS * LANES)
    o = np.zeros(WIDTH * LANES)
    high = np.zeros(WIDTH * LANES)
    low = np.zeros(WIDTH * LANES)
    nodes = np.zeros(3 * LANES, dtype=np.uint64)
    faces = np.zeros(LANES, dtype=np.uint64)
    order, start, group_of_run, curved = runs
    for run in range(first, last):
        group = group_of_run[run]
        if curved[run] or sampled[group]:
            continue
        high[:] = 0.0
        low[:] = 0.0
        flat_run(
            mesh, flow, order, origin, start[run], start[run + 1], group,
            b, o, high, low, nodes, faces, skip_still[group],
        )  # fmt: skip
        for j in range(WIDTH):
            _add_pairs(out_high, out_low, run, j, high, low, LANES * j, LANES)


@compiled
def _integrate_point_runs(
    mesh: Any, flow: Any, runs: Any, tables: Any, origin: Any, sampled: Any, first: int, last: int,
    out_high: Any, out_low: Any,
) -> None:  # fmt: skip
    b = np.zeros(BUFFER_ROWS * LANES)
    o = np.zeros(WIDTH * LANES)
    high = np.zeros(WIDTH * LANES)
    low = np.zeros(WIDTH * LANES)
    order, start, group_of_run, curved = runs
    for run in range(first, last):
        group = group_of_run[run]
        if not (curved[run] or sampled[group]):
            continue
        high[:] = 0.0
        low[:] = 0.0
        point_run(mesh, flow, order, tables, origin, start[run], start[run + 1], group, b, o, high, low)
        for j in range(WIDTH):
            _add_pairs(out_high, out_low, run, j, high, low, LANES * j, LANES)


@compiled
def _add_pairs(out_high: Any, out_low: Any, row: int, j: int, high: Any, low: Any, start: int, count: int) -> None:
    total, rest = out_high[row, j], out_low[row, j]
    for i in range(start, start + count):
        new = total + high[i]
        part = new - total
        rest += (total - (new - part)) + (high[i] - part)
        rest += low[i]
        total = new
    out_high[row, j] = total
    out_low[row, j] = rest


@compiled
def _add_runs(group: Any, run_high: Any, run_low: Any, groups: int) -> Any:
    high = np.zeros((groups, run_high.shape[1]))
    low = np.zeros((groups, run_high.shape[1]))
    for run in range(run_high.shape[0]):
        for j in range(run_high.shape[1]):
            _add_pairs(high, low, group[run], j, run_high[run], run_low[run], j, 1)
    return high + low


def integrate(
    *,
    mesh: FaceArrays,
    flow: FlowArrays,
    runs: Runs,
    origin: NDArray[np.float64],
    still_groups: NDArray[np.bool_],
    threads: int | None = None,
) -> IntegralTable:
    """Integrate all basis functions over all groups.

    Parameters
    ----------
    mesh : FaceArrays
        The faces.
    flow : FlowArrays
        The fields.
    runs : Runs
        From `fluxmesh.integral.layout.make_runs`.
    origin : ndarray, shape (3,), float64
        Near point that positions are taken about, m.
    still_groups : ndarray, shape (n_groups,), bool
        Groups whose faces without velocity may be passed over by the flow terms
        (they add nothing but zeros).
    threads : int, optional
        Threads; as `fluxmesh.compiling.thread_count` says by default. The result does not depend on it.

    Returns
    -------
    IntegralTable
        One row a group.
    """
    count = runs.group.size
    tables: ShapeTables = shape_tables()
    sampled = sampled_groups(flow)
    high, low = np.zeros((count, WIDTH)), np.zeros((count, WIDTH))
    parts = -(-count // _SPAN)
    by_points = runs.curved | sampled[runs.group]

    def work(part: int) -> None:
        first, last = part * _SPAN, min((part + 1) * _SPAN, count)
        if not by_points[first:last].all():
            _integrate_flat_runs(mesh, flow, runs, origin, still_groups, sampled, first, last, high, low)
        if by_points[first:last].any():
            _integrate_point_runs(mesh, flow, runs, tables, origin, sampled, first, last, high, low)

    work(0)  # compiles or loads the kernel once, before threads race for it
    run_parts(lambda part: work(part + 1), parts - 1, threads)
    values = _add_runs(runs.group, high, low, still_groups.size)
    return IntegralTable(values=values, origin=origin)
