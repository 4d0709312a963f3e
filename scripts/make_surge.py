"""Make the shipped unsteady case: the surge in a reducing bend while its flow is started.

A bend of rectangular section carries cooling water from above to the side; in a quarter of a
second the flow rises from rest to full. The scenario is invented. The flow is an exact
solution of the unsteady Euler equations: the potential of a corner flow times a ramp in time,

    phi = f(t) a (x² - y²) / 2,    velocity f a (x, -y, 0),    f = (1 - cos(pi t / T)) / 2,
    p = level(t) - rho (f' a (x² - y²) / 2 + f² a² (x² + y²) / 2 - g·x)

(Bernoulli's equation for unsteady potential flow; Batchelor, An Introduction to Fluid Dynamics, section
6.2, from memory). Its streamlines ``x y = const`` are the inner and outer wall; the two sides are flat.
The level holds the pressure in the middle of the delivery. For each of nine unevenly spaced
instants the script writes the wetted surface (VTK PolyData) and the volume (tetrahedra), both in
millimetres, and once the case file.

Usage: python scripts/make_surge.py
"""

from __future__ import annotations

import argparse
from itertools import permutations
from pathlib import Path

import numpy as np
import pyvista

__all__ = ["INSTANTS", "main", "momentum", "pressure", "ramp", "ramp_rate", "velocity"]

DENSITY, GRAVITY, LEVEL = 998.2, np.array([0.0, -9.80665, 0.0]), 8e3  # kg/m^3, m/s^2, Pa gauge
RATE, RISE = 6.0, 0.25  # 1/s of the corner flow at full speed; s
INTAKE_Y, DELIVERY_X = 0.50, 0.62  # m: planes of the ports
INNER, OUTER, DEPTH = 0.03, 0.09, 0.12  # m^2: x y on the two curved walls; m
CELLS = (26, 7, 5)  # along, across, through
INSTANTS = (0.0, 0.035, 0.065, 0.09, 0.118, 0.145, 0.175, 0.21, 0.25)  # s
MILLI = 1e-3

CASE = """\
# Start of a cooling-water bend: in {rise:g} s the flow rises from rest to {flow:.1f} L/s.
# Made by scripts/make_surge.py; the scenario is invented, the flow an exact solution for a fluid without friction.
# While it is started, the water in the bend must be accelerated, and that takes pressure from the intake.
title = "Cooling-water bend, surge at the start"

[surface]                               # no file here: every snapshot below brings one
length_unit = "mm"
groups = {{ array = "part" }}

[fluid]
density = "{density:g} kg/m^3"
ambient_pressure = "101325 Pa"
gravity = {gravity}

[flow]
velocity = {{ array = "velocity", unit = "m/s" }}
pressure = {{ array = "pressure", unit = "Pa", kind = "gauge", head = "included" }}

[groups.intake]                         # from above
role = "inlet"
tag = 1

[groups.delivery]                       # to the side, narrower
role = "outlet"
tag = 2

[groups.shell]
role = "wall"
tag = 3

[hardware]                              # the bend, empty
mass = "21 kg"
centre = [0.24, 0.21, 0.06]

[anchor]                                # the foot below the outer wall
at = [0.30, 0.10, 0.06]

[storage]                               # uneven steps in time: the rate at each is taken from the three nearest
snapshots = [
{snapshots}
]
"""


def ramp(time: float) -> float:
    """Share of the full flow."""
    return 0.5 * (1 - np.cos(np.pi * time / RISE))


def ramp_rate(time: float) -> float:
    """Rate of `ramp`, 1/s."""
    return 0.5 * np.pi / RISE * np.sin(np.pi * time / RISE)


def velocity(points: np.ndarray, time: float) -> np.ndarray:
    """Exact velocity, m/s."""
    return ramp(time) * RATE * points * [1.0, -1.0, 0.0]


def pressure(points: np.ndarray, time: float) -> np.ndarray:
    """Exact gauge pressure, Pa."""

    def without_level(at: np.ndarray) -> np.ndarray:
        x, y = at[..., 0], at[..., 1]
        surge = ramp_rate(time) * RATE * (x**2 - y**2) / 2
        return -DENSITY * (surge + ramp(time) ** 2 * RATE**2 * (x**2 + y**2) / 2 - at @ GRAVITY)

    middle = np.array([DELIVERY_X, (INNER + OUTER) / (2 * DELIVERY_X), DEPTH / 2])
    return LEVEL + without_level(points) - without_level(middle)


def momentum(time: float) -> np.ndarray:
    """Exact momentum of the water inside, kg m/s, for walls that are exactly curved."""
    # int x dA over INNER < x y < OUTER, with x y = c and x between c / INTAKE_Y and DELIVERY_X: dA = dc dx / x
    square = (OUTER**2 - INNER**2) / 2
    along = DELIVERY_X * (OUTER - INNER) - square / INTAKE_Y
    across = INTAKE_Y * (OUTER - INNER) - square / DELIVERY_X
    return DENSITY * DEPTH * ramp(time) * RATE * np.array([along, -across, 0.0])


def lattice() -> np.ndarray:
    """Points (n, m, k, 3) in metres: along the stream, from the inner to the outer wall, through the depth."""
    n, m, k = CELLS
    stream = np.linspace(INNER, OUTER, m + 1)
    share = np.linspace(0.0, 1.0, n + 1)[:, None]
    x = (stream / INTAKE_Y) ** (1 - share) * DELIVERY_X**share
    z = np.linspace(0.0, DEPTH, k + 1)
    shape = (n + 1, m + 1, k + 1)
    parts = [x[:, :, None], (stream / x)[:, :, None], z]
    return np.stack([np.broadcast_to(part, shape) for part in parts], axis=-1)


def tetrahedra() -> np.ndarray:
    """Six in every cell of the lattice, matching across its faces (Kuhn 1960), with positive volume."""
    n, m, k = CELLS
    number = np.arange((n + 1) * (m + 1) * (k + 1)).reshape(n + 1, m + 1, k + 1)

    def corner(step: np.ndarray) -> np.ndarray:
        return number[step[0] : n + step[0], step[1] : m + step[1], step[2] : k + step[2]].ravel()

    found = []
    for order in permutations(range(3)):
        path = [np.zeros(3, int)]
        for axis in order:
            path.append(path[-1] + np.eye(3, dtype=int)[axis])
        found.append(np.column_stack([corner(step) for step in path]))
    cells = np.concatenate(found)
    points = lattice().reshape(-1, 3)
    a, b, c, d = (points[cells[:, i]] for i in range(4))
    turned = np.einsum("ij,ij->i", np.cross(b - a, c - a), d - a) < 0
    cells[turned, :2] = cells[turned, 1::-1]
    return cells


def skin(cells: np.ndarray) -> np.ndarray:
    """Triangles that belong to one tetrahedron only, with normals outwards."""
    faces = np.concatenate([cells[:, [1, 2, 3]], cells[:, [0, 3, 2]], cells[:, [0, 1, 3]], cells[:, [0, 2, 1]]])
    _, first, count = np.unique(np.sort(faces, axis=1), axis=0, return_index=True, return_counts=True)
    return faces[np.sort(first[count == 1])]


def part_of(points: np.ndarray, faces: np.ndarray) -> np.ndarray:
    """1 on the intake, 2 on the delivery, 3 on the shell."""
    corners = points[faces]
    part = np.full(len(faces), 3, np.int32)
    part[np.isclose(corners[..., 1], INTAKE_Y).all(axis=1)] = 1
    part[np.isclose(corners[..., 0], DELIVERY_X).all(axis=1)] = 2
    return part


def write(folder: Path) -> None:
    points, cells = lattice().reshape(-1, 3), tetrahedra()
    faces = skin(cells)
    kept, compact = np.unique(faces, return_inverse=True)
    compact = compact.reshape(faces.shape)
    part = part_of(points, faces)
    lines = []
    for number, time in enumerate(INSTANTS):
        surface = pyvista.PolyData(
            (points[kept] / MILLI).astype(np.float32), np.column_stack([np.full(len(faces), 3), compact]).ravel()
        )
        surface.point_data["velocity"] = velocity(points[kept], time).astype(np.float32)
        surface.point_data["pressure"] = pressure(points[kept], time).astype(np.float32)
        surface.cell_data["part"] = part
        surface.save(folder / f"surge_{number}.vtp", compression="zlib")
        volume = pyvista.UnstructuredGrid(
            np.column_stack([np.full(len(cells), 4), cells]).ravel(),
            np.full(len(cells), pyvista.CellType.TETRA),
            (points / MILLI).astype(np.float32),
        )
        volume.point_data["velocity"] = velocity(points, time).astype(np.float32)
        volume.save(folder / f"surge_{number}.vtu", compression="zlib")
        files = f'volume = {{ file = "surge_{number}.vtu", unit = "mm" }}, surface = "surge_{number}.vtp"'
        lines.append(f'  {{ time = "{time * 1e3:g} ms", {files} }},')
    flow = RATE * (OUTER - INNER) * DEPTH * 1e3
    text = CASE.format(
        rise=RISE, flow=flow, density=DENSITY, gravity=[0, float(GRAVITY[1]), 0], snapshots="\n".join(lines)
    )
    (folder / "surge_bend.toml").write_text(text, encoding="utf-8")
    print(f"{len(points)} points, {len(cells)} tetrahedra, {len(faces)} faces")


def main() -> None:
    """Make all files of the case."""
    parser = argparse.ArgumentParser(description=(__doc__ or "").partition("\n")[0])
    default = Path(__file__).resolve().parent.parent / "meshes" / "surge_bend"
    parser.add_argument("--out", type=Path, default=default, help="folder to write to (default: %(default)s)")
    folder = parser.parse_args().out
    folder.mkdir(parents=True, exist_ok=True)
    write(folder)
    sizes = [path.stat().st_size for path in folder.iterdir()]
    print(f"{len(sizes)} files, {sum(sizes) / 1e6:.2f} MB, the largest {max(sizes) / 1e3:.0f} kB")


if __name__ == "__main__":
    main()
