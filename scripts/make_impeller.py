"""Make the shipped rotating case: one passage of a small pump wheel, an exact flow seen from the wheel.

Without friction, and without swirl in what it draws from, water stays irrotational: the absolute velocity is the
gradient of a potential, steady as seen from the wheel. With ``zeta = ln(z / r1) = x + i t`` in the plane of the wheel
(``x`` the logarithm of the radius, ``t`` the angle, both turning with the wheel) the potential is the real part of

    q zeta + (b - i c) zeta²     so that     r Vr = q + 2 b x + 2 c t,     r Vt = 2 c x - 2 b t,

and the stream function of the relative flow, ``q t + 2 b x t + c (t² - x²) + rate r²/2``, is a quadratic in ``t``:
the blades are two of its lines, known in closed form. Bernoulli's equation in the turning frame gives the pressure,
``p + density (W²/2 - rate² r²/2 + g z) = const`` (Batchelor, An Introduction to Fluid Dynamics, section 7.1, from
memory). The two blades carry different pressures, and so a torque; it is that of Euler's turbine equation.

The script writes the surface (`impeller.vtp`) and the volume (`passage.vtu`) with velocities relative to the wheel, as
pump computations export them, and exact figures by Gauss quadrature over the exact shape (`reference.json`).

Usage: python scripts/make_impeller.py
"""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pyvista

FOLDER = Path(__file__).resolve().parent.parent / "meshes" / "impeller"
DENSITY, GRAVITY, DATUM = 998.2, 9.80665, 20e3  # kg/m³, m/s², Pa
RATE = 1450 * 2 * np.pi / 60  # rad/s
INNER, OUTER, HEIGHT = 0.030, 0.060, 0.012  # m
Q, B, C = 0.12, 0.09, 0.06  # m²/s
EYE = np.radians(44.0)  # opening of the passage at the inner radius; 7 passages go round
PASSAGES = 7
ALONG, ACROSS, HIGH = 48, 28, 6
MILLIMETRE = 1e-3

Array = np.ndarray


def stream(radius: Array, angle: Array) -> Array:
    """Stream function of the relative flow, m²/s."""
    x = np.log(radius / INNER)
    return Q * angle + 2 * B * x * angle + C * (angle**2 - x**2) + RATE * radius**2 / 2


def blade(radius: Array, side: int) -> Array:
    """Angle of the blade at -1 (it pushes) or +1 (it sucks): the line of the relative flow through the eye's edge."""
    x = np.log(radius / INNER)
    rise = Q + 2 * B * x
    rest = RATE * radius**2 / 2 - C * x**2 - stream(INNER, side * EYE / 2)
    return (np.sqrt(rise**2 - 4 * C * rest) - rise) / (2 * C)


def place(radius: Array, share: Array, height: Array) -> Array:
    """Points (..., 3) at a radius, a share of the way from blade to blade, and a height."""
    radius, share, height = np.broadcast_arrays(radius, share, height)
    first = blade(radius, -1)
    angle = first + share * (blade(radius, 1) - first)
    return np.stack([radius * np.cos(angle), radius * np.sin(angle), height], axis=-1)


def flow(places: Array) -> tuple[Array, Array]:
    """Exact velocity relative to the wheel, and gauge pressure."""
    x, y = places[..., 0], places[..., 1]
    square = x * x + y * y
    log, angle = np.log(square) / 2 - np.log(INNER), np.arctan2(y, x)
    outward = (Q + 2 * B * log + 2 * C * angle) / square
    around = (2 * C * log - 2 * B * angle) / square - RATE
    relative = np.stack([outward * x - around * y, outward * y + around * x, 0 * x], axis=-1)
    speed = (outward**2 + around**2) * square
    return relative, DATUM - DENSITY * (speed / 2 - RATE**2 * square / 2 + GRAVITY * places[..., 2])


def momentum_left(places: Array, step: float = 1e-6) -> Array:
    """What the momentum equation in the turning frame leaves at points (n, 3), over the pressure gradient's size."""
    ahead = [flow(places + step * direction) for direction in np.eye(3)]
    behind = [flow(places - step * direction) for direction in np.eye(3)]
    gradient = np.stack([(a[0] - b[0]) / (2 * step) for a, b in zip(ahead, behind)], axis=2)
    push = np.stack([(a[1] - b[1]) / (2 * step) for a, b in zip(ahead, behind)], axis=1)
    velocity, spin = flow(places)[0], np.array([0, 0, RATE])
    turning = 2 * np.cross(spin, velocity) + np.cross(spin, np.cross(spin, places))
    left = DENSITY * (np.einsum("nij,nj->ni", gradient, velocity) + turning) + push + [0, 0, DENSITY * GRAVITY]
    return np.linalg.norm(left, axis=1) / np.linalg.norm(push, axis=1)


# ---- exact figures --------------------------------------------------------------------------


def gauss(low: float, high: float, count: int = 40) -> tuple[Array, Array]:
    """Places and weights of a Gauss rule on an interval."""
    at, weight = np.polynomial.legendre.leggauss(count)
    return (low + high) / 2 + (high - low) / 2 * at, (high - low) / 2 * weight


def inside() -> tuple[Array, Array]:
    """Points and weights (m³) of a rule over the exact passage."""
    (r, wr), (s, ws), (z, wz) = gauss(INNER, OUTER), gauss(0, 1), gauss(0, HEIGHT, 3)
    weight = (wr * r * (blade(r, 1) - blade(r, -1)))[:, None, None] * ws[:, None] * wz
    return place(r[:, None, None], s[:, None], z).reshape(-1, 3), weight.ravel()


def sides() -> dict[str, tuple[Array, Array]]:
    """Points and area vectors (m², out of the water) of a rule over each exact side."""
    (r, wr), (s, ws), (z, wz) = gauss(INNER, OUTER), gauss(0, 1), gauss(0, HEIGHT, 3)
    found = {}
    for name, radius, sign in (("eye", INNER, -1), ("rim", OUTER, 1)):
        points = place(radius, s[:, None], z)
        weight = sign * radius * (blade(radius, 1) - blade(radius, -1)) * ws[:, None] * wz
        found[name] = points, weight[..., None] * points * [1, 1, 0] / radius
    for name, side in (("pressure_side", -1), ("suction_side", 1)):
        points = place(r[:, None], (side + 1) / 2, z)
        relative = flow(points)[0]
        # along the blade the flow runs: dx/dr = W / Wr, and the normal lies across it
        tangent = relative / np.sum(relative * points * [1, 1, 0], axis=-1, keepdims=True) * r[:, None, None]
        found[name] = points, side * np.cross([0, 0, 1], tangent) * (wr[:, None] * wz)[..., None]
    for name, level, sign in (("back_plate", 0.0, -1), ("front_plate", HEIGHT, 1)):
        points = place(r[:, None], s, level)
        weight = (wr * r * (blade(r, 1) - blade(r, -1)))[:, None] * ws
        found[name] = points, sign * weight[..., None] * np.array([0.0, 0.0, 1.0])
    return {name: (points.reshape(-1, 3), area.reshape(-1, 3)) for name, (points, area) in found.items()}


def exact() -> dict[str, object]:
    """Figures of one passage; forces and moments (about the origin) are those of the water on the wheel."""
    load, moment = np.zeros(3), np.zeros(3)
    swirl = {}
    for name, (points, area) in sides().items():
        relative, pressure = flow(points)
        through = DENSITY * np.sum(relative * area, axis=1)
        if name in ("eye", "rim"):
            velocity = relative + np.cross([0, 0, RATE], points)
            swirl[name] = float(through @ np.cross(points, velocity)[:, 2])
            flow_out = float(through.sum())
        else:
            load += pressure @ area
            moment += np.sum(np.cross(points, pressure[:, None] * area), axis=0)
    points, weight = inside()
    velocity = flow(points)[0] + np.cross([0, 0, RATE], points)
    held = DENSITY * weight
    return {
        "rate": RATE,
        "passages": PASSAGES,
        "mass_flow": flow_out,
        "volume": float(weight.sum()),
        "centroid": (weight @ points / weight.sum()).tolist(),
        "load": {"force": load.tolist(), "moment": moment.tolist()},
        "swirl": swirl,
        "momentum": (held @ velocity).tolist(),
        "angular_momentum": (held @ np.cross(points, velocity)).tolist(),
        "power": -RATE * float(moment[2]),
    }


# ---- meshes ---------------------------------------------------------------------------------


def lattice(cells: int) -> Array:
    """Points (ALONG + 1, ACROSS + 1, HIGH + 1, 3), in metres; `cells` divides the numbers of cells."""
    radius = np.linspace(INNER, OUTER, ALONG // cells + 1)
    share = np.linspace(0, 1, ACROSS // cells + 1)
    height = np.linspace(0, HEIGHT, HIGH // cells + 1)
    return place(radius[:, None, None], share[:, None], height)


def surface(cells: int = 1) -> pyvista.PolyData:
    """Return the surface in millimetres, its parts with points of their own, as an export by part has them."""
    box = lattice(cells)
    # of each sheet the first direction crossed with the second points out of the water
    sheets = [
        (box[0].swapaxes(0, 1), 1),
        (box[-1], 2),
        (box[:, 0], 3),
        (box[:, -1].swapaxes(0, 1), 4),
        (box[:, :, 0].swapaxes(0, 1), 5),
        (box[:, :, -1], 5),
    ]
    points, faces, part = [], [], []
    count = 0
    for sheet, tag in sheets:
        n, m = sheet.shape[:2]
        i, j = (a.ravel() for a in np.meshgrid(np.arange(n - 1), np.arange(m - 1), indexing="ij"))
        faces.append(count + np.stack([i * m + j, (i + 1) * m + j, (i + 1) * m + j + 1, i * m + j + 1], axis=1))
        points.append(sheet.reshape(-1, 3))
        part.append(np.full(i.size, tag, dtype=np.int32))
        count += n * m
    places, quads = np.concatenate(points), np.concatenate(faces)
    mesh = pyvista.PolyData(places / MILLIMETRE, np.column_stack([np.full(len(quads), 4), quads]).ravel())
    mesh.point_data["relative velocity"], mesh.point_data["pressure"] = flow(places)
    mesh.point_data["wall shear"] = np.zeros_like(places, dtype=np.float32)  # the flow is without friction
    mesh.cell_data["part"] = np.concatenate(part)
    return mesh


def volume(cells: int = 2) -> pyvista.UnstructuredGrid:
    """Return the passage in hexahedra, in millimetres."""
    box = lattice(cells)
    grid = pyvista.StructuredGrid(*np.moveaxis(box / MILLIMETRE, -1, 0)).cast_to_unstructured_grid()
    places = np.array(grid.points, dtype=np.float64) * MILLIMETRE
    grid.point_data["relative velocity"] = flow(places)[0]
    return grid


def main() -> None:
    FOLDER.mkdir(parents=True, exist_ok=True)
    points, _ = inside()
    left = momentum_left(points[::7])
    assert left.max() < 1e-6, "the flow is no solution"
    for name, mesh in (("impeller.vtp", surface()), ("passage.vtu", volume())):
        mesh.save(FOLDER / name, compression="zlib")
        print(f"{name}: {mesh.n_cells} cells, {(FOLDER / name).stat().st_size / 1e3:.0f} kB")
    figures = exact()
    (FOLDER / "reference.json").write_text(json.dumps(figures, indent=2) + "\n", encoding="utf-8")
    print(
        f"momentum equation satisfied to {left.max():.1e}; torque of one passage {figures['load']['moment'][2]:.6f} N m"
    )


if __name__ == "__main__":
    main()
