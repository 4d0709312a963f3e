"""Face integrals of `LANES` flat triangles (or quadrature points) at a time.

Their data stand side by side in one flat buffer of rows of `LANES` numbers, so
that the compiler turns each line below into vector instructions.
Everything here is a leaf of the compiled kernel: arrays in, arrays out.

Integrands that are at most quadratic on a flat triangle with linear data use
the exact moments ``∫ l_a dA = A/3`` and ``∫ l_a l_b dA = A (1 + d_ab)/12`` of
the barycentric coordinates (Zienkiewicz and Taylor, The Finite Element Method,
area coordinates; formula from memory, tested against quadrature).
Flow terms reach degree 4 and use Dunavant's six-point rule.
"""

from __future__ import annotations

from math import sqrt
from typing import Any, Final

from fluxmesh.compiling import compiled, compiled_inline
from fluxmesh.integral.rules import TRIANGLE_DEGREE4
from fluxmesh.integral.table import BASIS, BLOCKS, column_slice

__all__ = [
    "BUFFER_ROWS",
    "LANES",
    "absorb_points",
    "absorb_triangles",
    "two_sum_into",
]

LANES: Final = 32  # below 16 the compiler unrolls the loops and no longer makes vectors of them

# Rows of the input buffer, each LANES wide: per corner for triangles, corner 0 for points.
X: Final = 0  # position, 3 corners × 3
V: Final = 9 * LANES  # velocity, 3 × 3
T: Final = 18 * LANES  # traction on the fluid, 3 × 3
P: Final = 27 * LANES  # pressure, 3
R: Final = 30 * LANES  # density, 3
S: Final = 33 * LANES  # sign of the area (fans of concave polygons), 1
M: Final = 34 * LANES  # mass flow through the face, 1
N: Final = 35 * LANES  # area vector, 3
A: Final = 38 * LANES  # area, signed, 1
IA: Final = 39 * LANES  # one over the area, or 0, 1
G: Final = 40 * LANES  # at one quadrature point: mass flow, 1
Q: Final = 41 * LANES  # at one quadrature point: volume flow, 1
BUFFER_ROWS: Final = 42

# First column of each basis integral, in lanes.
_C: Final = {name: column_slice(name).start * LANES for name in BASIS}
AREA: Final = _C["area"]
AREA_VECTOR: Final = _C["area_vector"]
POSITION: Final = _C["position"]
POSITION_NORMAL: Final = _C["position_normal"]
SQUARE_NORMAL: Final = _C["square_normal"]
PRESSURE_FORCE: Final = _C["pressure_force"]
MOMENT_OF_PRESSURE: Final = _C["moment_of_pressure"]
PRESSURE_AREA: Final = _C["pressure_area"]
VISCOUS_FORCE: Final = _C["viscous_force"]
MOMENT_OF_VISCOUS: Final = _C["moment_of_viscous"]
MASS_FLOW: Final = _C["mass_flow"]
VOLUME_FLOW: Final = _C["volume_flow"]
MOMENTUM_FLUX: Final = _C["momentum_flux"]
MOMENT_OF_MOMENTUM_FLUX: Final = _C["moment_of_momentum_flux"]
KINETIC_ENERGY_FLUX: Final = _C["kinetic_energy_flux"]
REVERSED_MASS_FLOW: Final = _C["reversed_mass_flow"]
NORMAL_MOMENTUM: Final = _C["normal_momentum"]
VELOCITY_AREA: Final = _C["velocity_area"]
SPEED_AREA: Final = _C["speed_area"]
DENSITY_AREA: Final = _C["density_area"]
DYNAMIC_PRESSURE_AREA: Final = _C["dynamic_pressure_area"]
DYNAMIC_PRESSURE_FORCE: Final = _C["dynamic_pressure_force"]
MOMENT_OF_DYNAMIC_PRESSURE: Final = _C["moment_of_dynamic_pressure"]
DYNAMIC_PRESSURE_MASS_FLOW: Final = _C["dynamic_pressure_mass_flow"]
PRESSURE_VOLUME_FLOW: Final = _C["pressure_volume_flow"]
PRESSURE_MASS_FLOW: Final = _C["pressure_mass_flow"]
VISCOUS_POWER: Final = _C["viscous_power"]
MASS_FLOW_POSITION: Final = _C["mass_flow_position"]
MASS_FLOW_SQUARE: Final = _C["mass_flow_square"]

_GEOMETRY: Final = (BLOCKS["geometry"].start * LANES, BLOCKS["geometry"].stop * LANES)
_PRESSURE: Final = (BLOCKS["pressure"].start * LANES, BLOCKS["pressure"].stop * LANES)
_TRACTION: Final = (BLOCKS["traction"].start * LANES, BLOCKS["traction"].stop * LANES)
_DENSITY: Final = (BLOCKS["density"].start * LANES, BLOCKS["density"].stop * LANES)
_FLOW: Final = (BLOCKS["flow"].start * LANES, BLOCKS["flow"].stop * LANES)

_L0: Final = tuple(point[0] for point, _ in TRIANGLE_DEGREE4)
_L1: Final = tuple(point[1] for point, _ in TRIANGLE_DEGREE4)
_L2: Final = tuple(point[2] for point, _ in TRIANGLE_DEGREE4)
_W: Final = tuple(weight for _, weight in TRIANGLE_DEGREE4)
_POINTS: Final = len(_W)


@compiled
def two_sum_into(high: Any, low: Any, terms: Any, start: int, stop: int) -> None:
    """Add `terms` to the unevaluated sums ``high + low``, lane by lane, without loss.

    Knuth's branch-free two-sum (The Art of Computer Programming, vol. 2,
    section 4.2.2, theorem B; from memory); the errors gather in `low`.
    """
    for i in range(start, stop):
        term = terms[i]
        old = high[i]
        new = old + term
        part = new - old
        low[i] += (old - (new - part)) + (term - part)
        high[i] = new


@compiled
def _geometry(b: Any, o: Any) -> None:
    for i in range(LANES):
        x0, y0, z0 = b[X + i], b[X + LANES + i], b[X + 2 * LANES + i]
        x1, y1, z1 = b[X + 3 * LANES + i], b[X + 4 * LANES + i], b[X + 5 * LANES + i]
        x2, y2, z2 = b[X + 6 * LANES + i], b[X + 7 * LANES + i], b[X + 8 * LANES + i]
        ax, ay, az = x1 - x0, y1 - y0, z1 - z0
        bx, by, bz = x2 - x0, y2 - y0, z2 - z0
        nx = 0.5 * (ay * bz - az * by)
        ny = 0.5 * (az * bx - ax * bz)
        nz = 0.5 * (ax * by - ay * bx)
        area = b[S + i] * sqrt(nx * nx + ny * ny + nz * nz)
        b[N + i], b[N + LANES + i], b[N + 2 * LANES + i] = nx, ny, nz
        b[A + i] = area
        sx, sy, sz = x0 + x1 + x2, y0 + y1 + y2, z0 + z1 + z2
        o[AREA + i] = area
        o[AREA_VECTOR + i], o[AREA_VECTOR + LANES + i], o[AREA_VECTOR + 2 * LANES + i] = nx, ny, nz
        third = area / 3.0
        o[POSITION + i] = third * sx
        o[POSITION + LANES + i] = third * sy
        o[POSITION + 2 * LANES + i] = third * sz
        _spread(o, POSITION_NORMAL, i, sx / 3.0, nx, ny, nz)
        _spread(o, POSITION_NORMAL + 3 * LANES, i, sy / 3.0, nx, ny, nz)
        _spread(o, POSITION_NORMAL + 6 * LANES, i, sz / 3.0, nx, ny, nz)
        _spread(o, SQUARE_NORMAL, i, _product(sx, sx, x0, x1, x2, x0, x1, x2), nx, ny, nz)
        _spread(o, SQUARE_NORMAL + 3 * LANES, i, _product(sy, sy, y0, y1, y2, y0, y1, y2), nx, ny, nz)
        _spread(o, SQUARE_NORMAL + 6 * LANES, i, _product(sz, sz, z0, z1, z2, z0, z1, z2), nx, ny, nz)
        _spread(o, SQUARE_NORMAL + 9 * LANES, i, _product(sy, sz, y0, y1, y2, z0, z1, z2), nx, ny, nz)
        _spread(o, SQUARE_NORMAL + 12 * LANES, i, _product(sx, sz, x0, x1, x2, z0, z1, z2), nx, ny, nz)
        _spread(o, SQUARE_NORMAL + 15 * LANES, i, _product(sx, sy, x0, x1, x2, y0, y1, y2), nx, ny, nz)


@compiled_inline
def _product(sa: float, sb: float, a0: float, a1: float, a2: float, b0: float, b1: float, b2: float) -> float:
    # mean over a triangle of the product of two linear functions
    return (sa * sb + a0 * b0 + a1 * b1 + a2 * b2) / 12.0


@compiled_inline
def _spread(o: Any, row: int, i: int, factor: float, nx: float, ny: float, nz: float) -> None:
    o[row + i] = factor * nx
    o[row + LANES + i] = factor * ny
    o[row + 2 * LANES + i] = factor * nz


@compiled
def _pressure(b: Any, o: Any) -> None:
    for i in range(LANES):
        x0, y0, z0 = b[X + i], b[X + LANES + i], b[X + 2 * LANES + i]
        x1, y1, z1 = b[X + 3 * LANES + i], b[X + 4 * LANES + i], b[X + 5 * LANES + i]
        x2, y2, z2 = b[X + 6 * LANES + i], b[X + 7 * LANES + i], b[X + 8 * LANES + i]
        nx, ny, nz = b[N + i], b[N + LANES + i], b[N + 2 * LANES + i]
        p0, p1, p2 = b[P + i], b[P + LANES + i], b[P + 2 * LANES + i]
        total = p0 + p1 + p2
        _spread(o, PRESSURE_FORCE, i, -total / 3.0, nx, ny, nz)
        px = _product(total, x0 + x1 + x2, p0, p1, p2, x0, x1, x2)
        py = _product(total, y0 + y1 + y2, p0, p1, p2, y0, y1, y2)
        pz = _product(total, z0 + z1 + z2, p0, p1, p2, z0, z1, z2)
        o[MOMENT_OF_PRESSURE + i] = pz * ny - py * nz
        o[MOMENT_OF_PRESSURE + LANES + i] = px * nz - pz * nx
        o[MOMENT_OF_PRESSURE + 2 * LANES + i] = py * nx - px * ny
        o[PRESSURE_AREA + i] = total / 3.0 * b[A + i]


@compiled
def _traction(b: Any, o: Any) -> None:
    for i in range(LANES):
        x0, y0, z0 = b[X + i], b[X + LANES + i], b[X + 2 * LANES + i]
        x1, y1, z1 = b[X + 3 * LANES + i], b[X + 4 * LANES + i], b[X + 5 * LANES + i]
        x2, y2, z2 = b[X + 6 * LANES + i], b[X + 7 * LANES + i], b[X + 8 * LANES + i]
        u0, v0, w0 = b[T + i], b[T + LANES + i], b[T + 2 * LANES + i]
        u1, v1, w1 = b[T + 3 * LANES + i], b[T + 4 * LANES + i], b[T + 5 * LANES + i]
        u2, v2, w2 = b[T + 6 * LANES + i], b[T + 7 * LANES + i], b[T + 8 * LANES + i]
        area = b[A + i]
        su, sv, sw = u0 + u1 + u2, v0 + v1 + v2, w0 + w1 + w2
        sx, sy, sz = x0 + x1 + x2, y0 + y1 + y2, z0 + z1 + z2
        _spread(o, VISCOUS_FORCE, i, area / 3.0, su, sv, sw)
        yw = _product(sy, sw, y0, y1, y2, w0, w1, w2)
        zv = _product(sz, sv, z0, z1, z2, v0, v1, v2)
        zu = _product(sz, su, z0, z1, z2, u0, u1, u2)
        xw = _product(sx, sw, x0, x1, x2, w0, w1, w2)
        xv = _product(sx, sv, x0, x1, x2, v0, v1, v2)
        yu = _product(sy, su, y0, y1, y2, u0, u1, u2)
        _spread(o, MOMENT_OF_VISCOUS, i, area, yw - zv, zu - xw, xv - yu)


@compiled_inline
def _flow_at(
    o: Any,
    i: int,
    carried: float,
    volume: float,
    inverse_area: float,
    nx: float,
    ny: float,
    nz: float,
    area: float,
    x: float,
    y: float,
    z: float,
    u: float,
    v: float,
    w: float,
    p: float,
    r: float,
    tx: float,
    ty: float,
    tz: float,
) -> None:
    # one quadrature point: carried is rho V·n dA, volume is V·n dA, n already holds the weighted area
    square = u * u + v * v + w * w
    half = 0.5 * square
    dynamic = r * half
    gx, gy, gz = carried * u, carried * v, carried * w
    o[MASS_FLOW + i] += carried
    o[VOLUME_FLOW + i] += volume
    o[MOMENTUM_FLUX + i] += gx
    o[MOMENTUM_FLUX + LANES + i] += gy
    o[MOMENTUM_FLUX + 2 * LANES + i] += gz
    o[MOMENT_OF_MOMENTUM_FLUX + i] += y * gz - z * gy
    o[MOMENT_OF_MOMENTUM_FLUX + LANES + i] += z * gx - x * gz
    o[MOMENT_OF_MOMENTUM_FLUX + 2 * LANES + i] += x * gy - y * gx
    o[KINETIC_ENERGY_FLUX + i] += half * carried
    o[REVERSED_MASS_FLOW + i] += 0.5 * (abs(carried) - carried)
    o[NORMAL_MOMENTUM + i] += carried * volume * inverse_area
    o[VELOCITY_AREA + i] += area * u
    o[VELOCITY_AREA + LANES + i] += area * v
    o[VELOCITY_AREA + 2 * LANES + i] += area * w
    o[SPEED_AREA + i] += area * sqrt(square)
    o[DYNAMIC_PRESSURE_AREA + i] += dynamic * area
    o[DYNAMIC_PRESSURE_FORCE + i] -= dynamic * nx
    o[DYNAMIC_PRESSURE_FORCE + LANES + i] -= dynamic * ny
    o[DYNAMIC_PRESSURE_FORCE + 2 * LANES + i] -= dynamic * nz
    o[MOMENT_OF_DYNAMIC_PRESSURE + i] += dynamic * (z * ny - y * nz)
    o[MOMENT_OF_DYNAMIC_PRESSURE + LANES + i] += dynamic * (x * nz - z * nx)
    o[MOMENT_OF_DYNAMIC_PRESSURE + 2 * LANES + i] += dynamic * (y * nx - x * ny)
    o[DYNAMIC_PRESSURE_MASS_FLOW + i] += dynamic * carried
    o[PRESSURE_VOLUME_FLOW + i] += p * volume
    o[PRESSURE_MASS_FLOW + i] += p * carried
    o[VISCOUS_POWER + i] += area * (tx * u + ty * v + tz * w)
    cx, cy, cz = carried * x, carried * y, carried * z
    o[MASS_FLOW_POSITION + i] += cx
    o[MASS_FLOW_POSITION + LANES + i] += cy
    o[MASS_FLOW_POSITION + 2 * LANES + i] += cz
    o[MASS_FLOW_SQUARE + i] += cx * x
    o[MASS_FLOW_SQUARE + LANES + i] += cy * y
    o[MASS_FLOW_SQUARE + 2 * LANES + i] += cz * z
    o[MASS_FLOW_SQUARE + 3 * LANES + i] += cy * z
    o[MASS_FLOW_SQUARE + 4 * LANES + i] += cx * z
    o[MASS_FLOW_SQUARE + 5 * LANES + i] += cx * y


@compiled
def _inverse_area(b: Any) -> None:
    for i in range(LANES):
        area = b[A + i]
        b[IA + i] = 1.0 / area if area != 0.0 else 0.0


@compiled
def _carried(b: Any, l0: float, l1: float, l2: float, weight: float, mass_given: bool) -> None:
    # mass and volume flow at one quadrature point, before the long loop: a branch there would cost its vectors
    if mass_given:
        for i in range(LANES):
            given = weight * b[M + i]
            b[G + i] = given
            b[Q + i] = given / (l0 * b[R + i] + l1 * b[R + LANES + i] + l2 * b[R + 2 * LANES + i])
    else:
        for i in range(LANES):
            u = l0 * b[V + i] + l1 * b[V + 3 * LANES + i] + l2 * b[V + 6 * LANES + i]
            v = l0 * b[V + LANES + i] + l1 * b[V + 4 * LANES + i] + l2 * b[V + 7 * LANES + i]
            w = l0 * b[V + 2 * LANES + i] + l1 * b[V + 5 * LANES + i] + l2 * b[V + 8 * LANES + i]
            r = l0 * b[R + i] + l1 * b[R + LANES + i] + l2 * b[R + 2 * LANES + i]
            volume = weight * (u * b[N + i] + v * b[N + LANES + i] + w * b[N + 2 * LANES + i])
            b[Q + i] = volume
            b[G + i] = r * volume


@compiled
def _flow(b: Any, o: Any, mass_given: bool) -> None:
    for i in range(_FLOW[0], _FLOW[1]):
        o[i] = 0.0
    _inverse_area(b)
    for q in range(_POINTS):
        l0, l1, l2, weight = _L0[q], _L1[q], _L2[q], _W[q]
        over = 1.0 / weight
        _carried(b, l0, l1, l2, weight, mass_given)
        for i in range(LANES):
            u = l0 * b[V + i] + l1 * b[V + 3 * LANES + i] + l2 * b[V + 6 * LANES + i]
            v = l0 * b[V + LANES + i] + l1 * b[V + 4 * LANES + i] + l2 * b[V + 7 * LANES + i]
            w = l0 * b[V + 2 * LANES + i] + l1 * b[V + 5 * LANES + i] + l2 * b[V + 8 * LANES + i]
            x = l0 * b[X + i] + l1 * b[X + 3 * LANES + i] + l2 * b[X + 6 * LANES + i]
            y = l0 * b[X + LANES + i] + l1 * b[X + 4 * LANES + i] + l2 * b[X + 7 * LANES + i]
            z = l0 * b[X + 2 * LANES + i] + l1 * b[X + 5 * LANES + i] + l2 * b[X + 8 * LANES + i]
            p = l0 * b[P + i] + l1 * b[P + LANES + i] + l2 * b[P + 2 * LANES + i]
            r = l0 * b[R + i] + l1 * b[R + LANES + i] + l2 * b[R + 2 * LANES + i]
            tx = l0 * b[T + i] + l1 * b[T + 3 * LANES + i] + l2 * b[T + 6 * LANES + i]
            ty = l0 * b[T + LANES + i] + l1 * b[T + 4 * LANES + i] + l2 * b[T + 7 * LANES + i]
            tz = l0 * b[T + 2 * LANES + i] + l1 * b[T + 5 * LANES + i] + l2 * b[T + 8 * LANES + i]
            nx, ny, nz = weight * b[N + i], weight * b[N + LANES + i], weight * b[N + 2 * LANES + i]
            _flow_at(
                o, i, b[G + i], b[Q + i], b[IA + i] * over, nx, ny, nz, weight * b[A + i],
                x, y, z, u, v, w, p, r, tx, ty, tz,
            )  # fmt: skip


@compiled
def absorb_triangles(
    b: Any,
    o: Any,
    high: Any,
    low: Any,
    pressure: bool,
    traction: bool,
    density: bool,
    flow: bool,
    mass_given: bool,
) -> None:
    """Integrate one batch of triangles and add them to the sums ``high + low``."""
    _geometry(b, o)
    two_sum_into(high, low, o, _GEOMETRY[0], _GEOMETRY[1])
    if pressure:
        _pressure(b, o)
        two_sum_into(high, low, o, _PRESSURE[0], _PRESSURE[1])
    if traction:
        _traction(b, o)
        two_sum_into(high, low, o, _TRACTION[0], _TRACTION[1])
    if density:
        for i in range(LANES):
            o[DENSITY_AREA + i] = (b[R + i] + b[R + LANES + i] + b[R + 2 * LANES + i]) / 3.0 * b[A + i]
        two_sum_into(high, low, o, _DENSITY[0], _DENSITY[1])
    if flow:
        _flow(b, o, mass_given)
        two_sum_into(high, low, o, _FLOW[0], _FLOW[1])


@compiled
def absorb_points(
    b: Any, o: Any, high: Any, low: Any, pressure: bool, traction: bool, density: bool, flow: bool, mass_given: bool
) -> None:
    """Add one batch of quadrature points, whose area vectors hold their weights, to the sums ``high + low``.

    A field that is not there must be zero in the buffer; density must be positive.
    """
    for i in range(LANES):
        x, y, z = b[X + i], b[X + LANES + i], b[X + 2 * LANES + i]
        tx, ty, tz = b[T + i], b[T + LANES + i], b[T + 2 * LANES + i]
        nx, ny, nz = b[N + i], b[N + LANES + i], b[N + 2 * LANES + i]
        p, r, area = b[P + i], b[R + i], b[A + i]
        o[AREA + i] = area
        _spread(o, AREA_VECTOR, i, 1.0, nx, ny, nz)
        _spread(o, POSITION, i, area, x, y, z)
        _spread(o, POSITION_NORMAL, i, x, nx, ny, nz)
        _spread(o, POSITION_NORMAL + 3 * LANES, i, y, nx, ny, nz)
        _spread(o, POSITION_NORMAL + 6 * LANES, i, z, nx, ny, nz)
        _spread(o, SQUARE_NORMAL, i, x * x, nx, ny, nz)
        _spread(o, SQUARE_NORMAL + 3 * LANES, i, y * y, nx, ny, nz)
        _spread(o, SQUARE_NORMAL + 6 * LANES, i, z * z, nx, ny, nz)
        _spread(o, SQUARE_NORMAL + 9 * LANES, i, y * z, nx, ny, nz)
        _spread(o, SQUARE_NORMAL + 12 * LANES, i, x * z, nx, ny, nz)
        _spread(o, SQUARE_NORMAL + 15 * LANES, i, x * y, nx, ny, nz)
        _spread(o, PRESSURE_FORCE, i, -p, nx, ny, nz)
        _spread(o, MOMENT_OF_PRESSURE, i, p, z * ny - y * nz, x * nz - z * nx, y * nx - x * ny)
        o[PRESSURE_AREA + i] = p * area
        _spread(o, VISCOUS_FORCE, i, area, tx, ty, tz)
        _spread(o, MOMENT_OF_VISCOUS, i, area, y * tz - z * ty, z * tx - x * tz, x * ty - y * tx)
        o[DENSITY_AREA + i] = r * area
    two_sum_into(high, low, o, _GEOMETRY[0], _GEOMETRY[1])
    if pressure:
        two_sum_into(high, low, o, _PRESSURE[0], _PRESSURE[1])
    if traction:
        two_sum_into(high, low, o, _TRACTION[0], _TRACTION[1])
    if density:
        two_sum_into(high, low, o, _DENSITY[0], _DENSITY[1])
    if not flow:
        return
    for i in range(_FLOW[0], _FLOW[1]):
        o[i] = 0.0
    for i in range(3 * LANES, 9 * LANES):
        b[V + i] = 0.0
    _inverse_area(b)
    _carried(b, 1.0, 0.0, 0.0, 1.0, mass_given)
    for i in range(LANES):
        nx, ny, nz = b[N + i], b[N + LANES + i], b[N + 2 * LANES + i]
        _flow_at(
            o, i, b[G + i], b[Q + i], b[IA + i], nx, ny, nz, b[A + i],
            b[X + i], b[X + LANES + i], b[X + 2 * LANES + i],
            b[V + i], b[V + LANES + i], b[V + 2 * LANES + i], b[P + i], b[R + i],
            b[T + i], b[T + LANES + i], b[T + 2 * LANES + i],
        )  # fmt: skip
    two_sum_into(high, low, o, _FLOW[0], _FLOW[1])
