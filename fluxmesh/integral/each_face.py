"""The kernel's integrals face by face: what adds up to the table of the groups."""

from __future__ import annotations

from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.compiling import compiled, run_parts
from fluxmesh.integral.kernel import flat_run, integrate
from fluxmesh.integral.lanes import BUFFER_ROWS, LANES
from fluxmesh.integral.layout import FaceArrays, FieldArrays, FlowArrays, Runs, sampled_groups
from fluxmesh.integral.table import WIDTH, IntegralTable

__all__ = ["integrate_each_face"]

# Faces that a thread takes at a time, and faces whose tables are made at a time where each is a group of its own.
_SPAN: Final = 1 << 12
_CHUNK: Final = 1 << 15


@compiled
def _triangles(
    mesh: Any,
    flow: Any,
    order: Any,
    rows: Any,
    origin: Any,
    begin: int,
    end: int,
    group: int,
    skip_still: bool,
    out: Any,
) -> None:
    b = np.zeros(BUFFER_ROWS * LANES)
    o = np.zeros(WIDTH * LANES)
    high = np.zeros(WIDTH * LANES)
    low = np.zeros(WIDTH * LANES)
    nodes = np.zeros(3 * LANES, dtype=np.uint64)
    faces = np.zeros(LANES, dtype=np.uint64)
    for start in range(begin, end, LANES):
        stop = min(start + LANES, end)
        high[:] = 0.0
        low[:] = 0.0
        # one batch of triangles: each lane holds the integrals of one of them
        flat_run(
            mesh, flow, order, origin, start, stop, group, b, o, high, low, nodes, faces, skip_still
        )  # fmt: skip
        for i in range(stop - start):
            row = rows[start + i]
            for j in range(WIDTH):
                out[row, j] = high[LANES * j + i] + low[LANES * j + i]


def integrate_each_face(
    *,
    mesh: FaceArrays,
    flow: FlowArrays,
    group_of_face: NDArray[np.int32],
    origin: NDArray[np.float64],
    still_groups: NDArray[np.bool_],
    faces: NDArray[np.int64] | None = None,
    threads: int | None = None,
) -> IntegralTable:
    """Integrate all basis functions over every face, or over each of some.

    Parameters
    ----------
    mesh : FaceArrays
        The faces.
    flow : FlowArrays
        The fields, by group.
    group_of_face : ndarray, shape (n_faces,), int32
        Group of each face.
    origin : ndarray, shape (3,), float64
        Near point that positions are taken about, m.
    still_groups : ndarray, shape (n_groups,), bool
        As for `fluxmesh.integral.kernel.integrate`.
    faces : ndarray, shape (n,), int64, optional
        Faces to integrate over; all by default. A row takes 0.8 kB.
    threads : int, optional
        Threads; as `fluxmesh.compiling.thread_count` says by default. The result does not depend on it.

    Returns
    -------
    IntegralTable
        One row a face, by the same rule as its group: the rows of a group add up to
        its row of `fluxmesh.integral.kernel.integrate` but for the rounding of that sum.
    """
    chosen = np.arange(group_of_face.size) if faces is None else faces
    group = group_of_face[chosen]
    values = np.empty((chosen.size, WIDTH))
    quick = _quick(mesh, flow, chosen, group)
    for number in range(still_groups.size):
        rows = np.flatnonzero(quick & (group == number))
        if rows.size:
            _fill(mesh, flow, chosen, rows, number, origin, bool(still_groups[number]), values, threads)
    rest = np.flatnonzero(~quick)
    for first in range(0, rest.size, _CHUNK):
        rows = rest[first : first + _CHUNK]
        values[rows] = _one_by_one(mesh, flow, chosen[rows], group[rows], origin, still_groups, threads)
    return IntegralTable(values=values, origin=origin)


def _quick(mesh: FaceArrays, flow: FlowArrays, faces: NDArray[np.int64], group: NDArray[np.int32]) -> NDArray[np.bool_]:
    """Which faces are triangles that fill one lane each."""
    found = ~sampled_groups(flow)[group]
    if mesh.offsets.size:
        found &= mesh.offsets[faces + 1] - mesh.offsets[faces] == 3
    if mesh.kinds.size:
        found &= mesh.kinds[faces] == 0
    return found


def _fill(
    mesh: FaceArrays,
    flow: FlowArrays,
    faces: NDArray[np.int64],
    rows: NDArray[np.int64],
    group: int,
    origin: NDArray[np.float64],
    skip_still: bool,
    values: NDArray[np.float64],
    threads: int | None,
) -> None:
    parts, order = -(-rows.size // _SPAN), faces[rows]

    def work(part: int) -> None:
        end = min((part + 1) * _SPAN, rows.size)
        _triangles(mesh, flow, order, rows, origin, part * _SPAN, end, group, skip_still, values)

    work(0)  # compiles or loads the kernel once, before threads race for it
    run_parts(lambda part: work(part + 1), parts - 1, threads)


def _one_by_one(
    mesh: FaceArrays,
    flow: FlowArrays,
    faces: NDArray[np.int64],
    group: NDArray[np.int32],
    origin: NDArray[np.float64],
    still_groups: NDArray[np.bool_],
    threads: int | None,
) -> NDArray[np.float64]:
    """Integrals of faces of any shape, each of them a group of its own with what its group has."""

    def spread(field: FieldArrays) -> FieldArrays:
        return field._replace(where=field.where[group], group=field.group[group])

    alone = flow._replace(
        velocity=spread(flow.velocity),
        traction=spread(flow.traction),
        pressure=spread(flow.pressure),
        density=spread(flow.density),
        mass=spread(flow.mass),
    )
    runs = Runs(
        order=faces,
        start=np.arange(faces.size + 1),
        group=np.arange(faces.size, dtype=np.int32),
        curved=mesh.kinds[faces] > 0 if mesh.kinds.size else np.zeros(faces.size, np.bool_),
    )
    return integrate(
        mesh=mesh, flow=alone, runs=runs, origin=origin, still_groups=still_groups[group], threads=threads
    ).values
