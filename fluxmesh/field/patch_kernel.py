"""Integration over bent faces, face by face as they are bent: nothing the size of the mesh is laid out.

Sums are kept as in `fluxmesh.integral.kernel`: pairs ``high + low``, run by run, runs in their
fixed order, so that the result is the same for any number of threads.
"""

from __future__ import annotations

from math import fsum, sqrt
from typing import Any, Final, NamedTuple

import numpy as np
from numpy.typing import NDArray

from fluxmesh.compiling import compiled, run_parts
from fluxmesh.field.bending import bend_face
from fluxmesh.field.recovery import COLUMNS
from fluxmesh.integral.gather import clear
from fluxmesh.integral.lanes import BUFFER_ROWS, LANES, A, M, N, P, R, T, V, X, absorb_points
from fluxmesh.integral.layout import AT_FACE, AT_NODE, PressureTerms, make_runs
from fluxmesh.integral.rules import gauss_square
from fluxmesh.integral.shapes import quadratic_quad9, quadratic_triangle
from fluxmesh.integral.table import WIDTH

__all__ = ["PatchFields", "PatchShape", "integrate_patches"]

_PRESSURE: Final = 6
_DENSITY: Final = 7
_LEAST: Final = 0.1  # of the mean over the corners
_RUN_LENGTH: Final = 1024
_HELD: Final = 6 + COLUMNS  # a quadrature point: position, area vector, columns

# Dunavant 1985, Int. J. Numer. Methods Eng. 21:1129-1148, 12 points, exact to degree 6: the momentum flux of
# quadratic velocity through a quadratic face; more digits than printed, from the same equations.
_TWO_EQUAL = ((0.1167862757263793660, 0.2492867451709104213), (0.0508449063702068169, 0.0630890144915022283))
_ALL_DIFFERENT = (0.0828510756183735752, 0.0531450498448169474, 0.3103524510337844054)


class PatchShape(NamedTuple):
    """Arrays of the shape, as `fluxmesh.field.bending.bend_face` takes them; `points` about the origin."""

    points: NDArray[np.float64]
    starts: NDArray[np.int64]
    point: NDArray[np.int64]
    place: NDArray[np.int64]
    sharp: NDArray[np.bool_]
    rigid: NDArray[np.bool_]
    sector: NDArray[np.int32]
    normal: NDArray[np.float64]
    along: NDArray[np.float64]
    centroids: NDArray[np.float64]
    face_normals: NDArray[np.float64]
    curved: bool


class PatchFields(NamedTuple):
    """Arrays of the fields.

    `where` (n_groups, COLUMNS) and `scale` (COLUMNS,) say how columns are read, `group` holds the values of groups
    (or 0, density 1), `mass` the mass flow out through each face (or is empty) and `mass_given` the groups that use it.
    """

    where: NDArray[np.int8]
    node: NDArray[np.float64]
    node_column: NDArray[np.int64]
    sector: NDArray[np.int32]
    node_slopes: NDArray[np.float64]
    face: NDArray[np.float64]
    face_column: NDArray[np.int64]
    face_slopes: NDArray[np.float64]
    scale: NDArray[np.float64]
    group: NDArray[np.float64]
    mass: NDArray[np.float64]
    mass_given: NDArray[np.bool_]
    terms: PressureTerms


def integrate_patches(
    faces: NDArray[np.int64],
    group_of_face: NDArray[np.int32],
    shape: PatchShape,
    fields: PatchFields,
    present: NDArray[np.bool_],
    threads: int | None = None,
) -> NDArray[np.float64]:
    """Integrate all basis functions over some faces, bent.

    Parameters
    ----------
    faces : ndarray, shape (n,), int64
        The faces.
    group_of_face : ndarray, shape (n_faces,), int32
        Group of each face of the surface.
    shape : PatchShape
        The shape.
    fields : PatchFields
        The fields.
    present : ndarray, shape (n_groups, 4), bool
        Whether each group has pressure, traction, density, and a flow through it.
    threads : int, optional
        Threads; the result does not depend on it.

    Returns
    -------
    ndarray, shape (n_groups, WIDTH), float64
        Rows of `fluxmesh.integral.table.IntegralTable`.
    """
    runs = make_runs(group_of_face[faces], None, length=_RUN_LENGTH)
    order = faces[runs.order] if runs.order.size else faces
    count = runs.group.size
    high, low = np.zeros((count, WIDTH)), np.zeros((count, WIDTH))
    rules = (*_rule(triangle=True), *_rule(triangle=False))

    def work(run: int) -> None:
        some = order[runs.start[run] : runs.start[run + 1]]
        group = int(runs.group[run])
        _patch_run(some, group, *shape, *fields, *rules, present[group], high[run], low[run])

    work(0)  # compiles or loads the kernel once, before threads race for it
    run_parts(lambda run: work(run + 1), count - 1, threads)
    values = np.zeros((present.shape[0], WIDTH))
    for group in np.unique(runs.group):
        some = np.concatenate([high[runs.group == group], low[runs.group == group]])
        values[group] = [fsum(column) for column in some.T.tolist()]
    return values


def _rule(*, triangle: bool) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Weights for the reference area, shape (q,), and values and slopes of shape functions, (q, n) and (q, 2, n)."""
    if triangle:
        places, weights = [], []
        for weight, a in _TWO_EQUAL:
            places += [(a, a), (1 - 2 * a, a), (a, 1 - 2 * a)]
            weights += [0.5 * weight] * 3
        weight, a, b = _ALL_DIFFERENT
        c = 1 - a - b
        places += [(a, b), (b, a), (b, c), (c, b), (c, a), (a, c)]
        weights += [0.5 * weight] * 6
        tables, weigh = quadratic_triangle(*np.array(places).T), np.array(weights)
    else:
        square, weigh = gauss_square(4)
        tables = quadratic_quad9(*square.T)
    return weigh, np.ascontiguousarray(tables[0]), np.ascontiguousarray(tables[1:].transpose(1, 0, 2))


@compiled
def _patch_run(
    faces: Any, group: int, points: Any, starts: Any, point: Any, place: Any, sharp: Any, rigid: Any,
    shape_sector: Any, normal: Any, along: Any, centroids: Any, face_normals: Any, curved: bool, where: Any,
    node: Any, node_column: Any, sector: Any, node_slopes: Any, face_values: Any, face_column: Any, face_slopes: Any,
    scale: Any, group_values: Any, mass: Any, mass_given: Any, terms: Any, triangle_weight: Any, triangle_value: Any,
    triangle_slope: Any, quad_weight: Any, quad_value: Any, quad_slope: Any, present: Any, out_high: Any, out_low: Any,
) -> None:  # fmt: skip
    b = np.zeros(BUFFER_ROWS * LANES)
    o, high, low = np.zeros(WIDTH * LANES), np.zeros(WIDTH * LANES), np.zeros(WIDTH * LANES)
    most = 0
    for f in faces:
        most = max(most, starts[f + 1] - starts[f])
    flat, local = np.empty((3 * most + 1, 3)), np.empty((3 * most + 1, 3))
    field = np.zeros((3 * most + 1, COLUMNS))
    edge, t0, t1, middle = np.empty(3), np.empty(3), np.empty(3), np.empty((1, 3))
    held = np.empty((max(quad_weight.size, most * triangle_weight.size), _HELD))
    rows = np.empty(9, np.int64)
    at = where[group]
    weighs = bool(mass_given[group])
    times_density, offset, hx, hy, hz = terms
    clear(b)
    filled = 0
    for f in faces:
        n = starts[f + 1] - starts[f]
        bend_face(
            f, points, starts, point, place, sharp, rigid, shape_sector, normal, along, centroids, face_normals,
            curved, at, node, node_column, sector, node_slopes, face_values, face_column, face_slopes, flat, local,
            field, edge, t0, t1, middle,
        )  # fmt: skip
        _finish(at, n, group, scale, group_values, field)
        count = 0
        if n == 4:
            for a in range(9):
                rows[a] = a
            count = _sample(9, rows, local, field, quad_weight, quad_value, quad_slope, held, count)
        elif n == 3:
            for a in range(6):
                rows[a] = a
            count = _sample(6, rows, local, field, triangle_weight, triangle_value, triangle_slope, held, count)
        else:
            for a in range(n):
                after = a + 1 if a + 1 < n else 0
                rows[0], rows[1], rows[2] = a, after, 2 * n
                rows[3], rows[4], rows[5] = n + a, 2 * n + 1 + after, 2 * n + 1 + a
                count = _sample(6, rows, local, field, triangle_weight, triangle_value, triangle_slope, held, count)
        # the mass flow varies over the face, but its sum is the one given
        off = 0.0
        if weighs:
            whole, carried = 0.0, 0.0
            for q in range(count):
                area = sqrt(held[q, 3] ** 2 + held[q, 4] ** 2 + held[q, 5] ** 2)
                whole += area
                carried += area * held[q, 14]
            off = (mass[f] - carried) / whole if whole > 0.0 else 0.0
        for q in range(count):
            row = held[q]
            nx, ny, nz = row[3], row[4], row[5]
            area = sqrt(nx * nx + ny * ny + nz * nz)
            for k in range(3):
                b[X + k * LANES + filled] = row[k]
                b[N + k * LANES + filled] = row[3 + k]
                b[V + k * LANES + filled] = row[6 + k]
                b[T + k * LANES + filled] = row[9 + k]
            b[A + filled] = area
            pressure, density = row[12], row[13]
            if at[_PRESSURE] == AT_NODE or at[_PRESSURE] == AT_FACE:
                if times_density:
                    pressure *= density
                pressure += offset + hx * row[0] + hy * row[1] + hz * row[2]
            b[P + filled] = pressure
            b[R + filled] = density
            if weighs:
                b[M + filled] = area * (row[14] + off)
            filled += 1
            if filled == LANES:
                absorb_points(b, o, high, low, present[0], present[1], present[2], present[3], weighs)
                clear(b)
                filled = 0
    if filled:
        absorb_points(b, o, high, low, present[0], present[1], present[2], present[3], weighs)
    for j in range(WIDTH):
        total, rest = 0.0, 0.0
        for i in range(j * LANES, j * LANES + LANES):
            new = total + high[i]
            part = new - total
            rest += (total - (new - part)) + (high[i] - part)
            rest += low[i]
            total = new
        out_high[j], out_low[j] = total, rest


@compiled
def _finish(at: Any, n: int, group: int, scale: Any, group_values: Any, field: Any) -> None:
    """Bring what is read from arrays to SI, fill in what is not, and keep density positive where data jump."""
    count = 3 * n + 1
    for j in range(at.size):
        if at[j] == AT_NODE or at[j] == AT_FACE:
            for a in range(count):
                field[a, j] *= scale[j]
        else:
            for a in range(count):
                field[a, j] = group_values[group, j]
    least = 0.0
    for a in range(n):
        least += _LEAST * field[a, _DENSITY] / n
    for a in range(n if at[_DENSITY] == AT_NODE else 0, count):
        field[a, _DENSITY] = max(field[a, _DENSITY], least)


@compiled
def _sample(
    size: int, rows: Any, local: Any, field: Any, weight: Any, value: Any, slope: Any, held: Any, count: Any
) -> Any:
    """Position, weighted area vector and fields at the quadrature points of one piece; return how many are held."""
    for q in range(weight.size):
        row = held[count + q]
        row[:] = 0.0
        ux, uy, uz, vx, vy, vz = 0.0, 0.0, 0.0, 0.0, 0.0, 0.0
        for a in range(size):
            r = rows[a]
            h, hu, hv = value[q, a], slope[q, 0, a], slope[q, 1, a]
            x, y, z = local[r, 0], local[r, 1], local[r, 2]
            row[0] += h * x
            row[1] += h * y
            row[2] += h * z
            ux, uy, uz = ux + hu * x, uy + hu * y, uz + hu * z
            vx, vy, vz = vx + hv * x, vy + hv * y, vz + hv * z
            for j in range(field.shape[1]):
                row[6 + j] += h * field[r, j]
        w = weight[q]
        row[3], row[4], row[5] = w * (uy * vz - uz * vy), w * (uz * vx - ux * vz), w * (ux * vy - uy * vx)
    return count + weight.size
