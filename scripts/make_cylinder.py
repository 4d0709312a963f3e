"""Make the shipped benchmark: laminar flow past a cylinder in a channel, Reynolds number 20.

The flow (`_cylinder_flow.py`) is solved with scikit-fem; drag, lift and pressure difference are printed beside the
published ones. What is written is what a flow program hands on: one layer of hexahedra round the cylinder, 0.1 m thick,
with velocity, pressure and viscous stress at their corners (every other node of the quadratic velocity is left
out); the cylinder's wall with pressure and traction; and three closed control surfaces of different shapes that hold
no data of their own, with a case each that samples the volume.

Usage: python scripts/make_cylinder.py [--cells N] [--to FOLDER]     (20 seconds)
       python scripts/make_cylinder.py --table        prints what fluxmesh finds on three meshes (a minute)
"""

from __future__ import annotations

import argparse
import sys
import tempfile
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

sys.path.insert(0, str(Path(__file__).resolve().parent))
from _cylinder_flow import (
    CENTRE,
    DENSITY,
    DIAMETER,
    MEAN_SPEED,
    PUBLISHED,
    VISCOSITY,
    CylinderFlow,
    coefficients,
    solve_cylinder,
)

FOLDER = Path(__file__).resolve().parent.parent / "meshes" / "cylinder"
CELLS, THICKNESS, RINGS = 32, 0.1, 4  # a quarter of the way round; m; of faces on the front and the back of a surface

Array = NDArray[np.float64]


def box(turn: Array) -> Array:
    """Place on a rectangle, one side a quarter turn: nearer to the cylinder in front than behind."""
    corner = np.array([[0.33, 0.09], [0.33, 0.32], [0.08, 0.32], [0.08, 0.09], [0.33, 0.09]])
    side = np.minimum(turn.astype(int), 3)
    part = (turn - side)[:, None]
    return np.asarray((1 - part) * corner[side] + part * corner[side + 1])


def tube(turn: Array) -> Array:
    """Place on a circle, not quite about the cylinder's axis."""
    angle = (turn - 0.5) * np.pi / 2
    return np.array([0.21, 0.205]) + 0.125 * np.column_stack([np.cos(angle), np.sin(angle)])


def ellipse(turn: Array) -> Array:
    """Place on a slanted ellipse, far off the cylinder's axis."""
    angle, tilt = (turn - 0.5) * np.pi / 2, np.deg2rad(20.0)
    long, short = 0.145 * np.cos(angle - tilt), 0.1 * np.sin(angle - tilt)
    shape = np.column_stack(
        [long * np.cos(tilt) - short * np.sin(tilt), long * np.sin(tilt) + short * np.cos(tilt)],
    )
    return np.array([0.24, 0.195]) + shape


SHAPES: dict[str, tuple[Callable[[Array], Array], str]] = {
    "box": (box, "a box"),
    "tube": (tube, "a round tube"),
    "ellipse": (ellipse, "a slanted ellipse"),
}

CASE = """\
# Laminar flow past a cylinder in a channel at a Reynolds number of 20, the benchmark 2D-1 of Schaefer and Turek (1996).
# Made by scripts/make_cylinder.py. The control surface is {said} round the cylinder, one layer thick; it holds no
# data: all are sampled from the volume of the flow computation. Drag and lift of the cylinder are known from
# publications to many digits: with a layer of {thickness:g} m they are {drag:.6g} N along x and {lift:.4g} N along y.
title = "Cylinder in a channel, seen through {said}"

[surface]
file = "{name}.vtp"
groups = {{ array = "part" }}

[fluid]
density = "{density:g} kg/m^3"
viscosity = "{viscosity:g} Pa s"
ambient_pressure = "101325 Pa"

[flow]
volume = "flow.vtu"
velocity = {{ array = "velocity", unit = "m/s" }}
pressure = {{ array = "pressure", unit = "Pa" }}
stress = {{ array = "viscous_stress", unit = "Pa", order = "xx yy zz xy yz xz" }}

[groups.around]            # the fluid goes in and out through it
role = "open"
tag = 1

[groups.cylinder]
role = "wall"
tag = 2

[groups.front]             # the flow is plane: nothing passes the two ends of the layer
role = "symmetry"
tag = 3

[groups.back]
role = "symmetry"
tag = 4

[anchor]                   # on the cylinder's axis
at = [{x:g}, {y:g}, {z:g}]
"""


def turns(around: int) -> Array:
    """Where corners lie, in quarter turns from 45 degrees below the stream."""
    return np.arange(around) * 4.0 / around


def quads(columns: Array) -> tuple[Array, NDArray[np.int64]]:
    """Points and quadrilaterals of a lattice (round, m, 3), closed round its first direction."""
    n, m = columns.shape[:2]
    i, j = np.meshgrid(np.arange(n), np.arange(m - 1), indexing="ij")
    k = (i + 1) % n
    faces = np.stack([i * m + j, k * m + j, k * m + j + 1, i * m + j + 1], axis=-1).reshape(-1, 4)
    return columns.reshape(-1, 3), faces


def raised(places: Array, height: float) -> Array:
    """Plane places at a height."""
    return np.concatenate([places, np.full((*places.shape[:-1], 1), height)], axis=-1)


def control_surface(shape: Callable[[Array], Array], wall: Array) -> Any:
    """Closed surface between a shape and the cylinder's wall, parts 1 around, 2 wall, 3 front, 4 back."""
    import pyvista

    outer = shape(turns(len(wall)))
    share = (4.0 ** np.linspace(0, 1, RINGS + 1) - 1) / 3.0  # rings crowd at the cylinder
    rings = wall[:, None] + share[:, None] * (outer - wall)[:, None]
    rings[:, -1] = outer
    layer = [0.0, THICKNESS]
    lattices = [
        (np.stack([raised(outer, z) for z in layer], axis=1), False),
        (np.stack([raised(wall, z) for z in layer], axis=1), True),
        (raised(rings, THICKNESS), True),
        (raised(rings, 0.0), False),
    ]
    points, faces, parts, count = [], [], [], 0
    for part, (lattice, turn) in enumerate(lattices, start=1):
        here, there = quads(lattice)
        points.append(here)
        faces.append((there[:, ::-1] if turn else there) + count)
        parts.append(np.full(len(there), part, np.uint8))
        count += len(here)
    mesh = pyvista.PolyData.from_regular_faces(np.concatenate(points), np.concatenate(faces))
    mesh.cell_data["part"] = np.concatenate(parts)
    return mesh


def volume(flow: CylinderFlow) -> Any:
    """One layer of hexahedra in the rings round the cylinder, with the values at the corners of the cells."""
    import pyvista

    corners = corner_nodes(flow)
    low = flow.mesh.t[:, : flow.around * flow.rings].T  # the corners of the rings come first
    # both ends of the layer side by side, which packs well
    cells = np.concatenate([2 * low, 2 * low + 1], axis=1)
    grid = pyvista.UnstructuredGrid({pyvista.CellType.HEXAHEDRON: cells}, layered(flow.nodes[corners]))
    stress = flow.stress()[corners]
    nothing = np.zeros(len(corners))
    fields = {
        "velocity": np.column_stack([*flow.u[:, corners], nothing]),
        "pressure": flow.p[corners],
        "viscous_stress": np.column_stack([stress[:, 0], stress[:, 1], nothing, stress[:, 2], nothing, nothing]),
    }
    for name, values in fields.items():
        grid.point_data[name] = np.repeat(values, 2, axis=0).astype(np.float32)
    return grid


def corner_nodes(flow: CylinderFlow) -> NDArray[np.int64]:
    """Nodes at the corners of the rings of cells, ring by ring from the cylinder."""
    count = flow.around * (flow.rings + 1)
    return np.asarray(flow.velocity.nodal_dofs[0][:count], dtype=np.int64)


def layered(places: Array) -> Array:
    """Plane places on both ends of the layer, side by side, in single precision."""
    both = np.repeat(raised(places, 0.0), 2, axis=0)
    both[1::2, 2] = THICKNESS
    return np.asarray(both.astype(np.float32))


def wall_surface(flow: CylinderFlow) -> Any:
    """The cylinder's wall, with pressure and the viscous traction of the fluid on it at the corners."""
    import pyvista

    nodes = corner_nodes(flow)[: flow.around]
    places = flow.nodes[nodes]
    inward = (CENTRE - places) / (0.5 * DIAMETER)  # out of the fluid
    xx, yy, xy = flow.stress()[nodes].T
    on_fluid = np.column_stack([xx * inward[:, 0] + xy * inward[:, 1], xy * inward[:, 0] + yy * inward[:, 1]])
    _, faces = quads(np.stack([raised(places, z) for z in (0.0, THICKNESS)], axis=1))
    mesh = pyvista.PolyData.from_regular_faces(layered(places), faces[:, ::-1])
    mesh.point_data["pressure"] = np.repeat(flow.p[nodes], 2).astype(np.float32)
    mesh.point_data["wall_traction"] = np.repeat(raised(-on_fluid, 0.0), 2, axis=0).astype(np.float32)
    return mesh


def make(folder: Path, cells: int) -> CylinderFlow:
    """Solve the flow and write all files."""
    folder.mkdir(parents=True, exist_ok=True)
    flow = solve_cylinder(cells)
    volume(flow).save(folder / "flow.vtu", compression="zlib")
    wall_surface(flow).save(folder / "wall.vtp", compression="zlib")
    wall = np.asarray(layered(flow.nodes[corner_nodes(flow)[: flow.around]])[::2, :2], dtype=np.float64)
    force = 0.5 * DENSITY * MEAN_SPEED**2 * DIAMETER * THICKNESS
    for name, (shape, said) in SHAPES.items():
        control_surface(shape, wall).save(folder / f"{name}.vtp", compression="zlib")
        case = CASE.format(
            said=said,
            name=name,
            thickness=THICKNESS,
            drag=force * PUBLISHED["drag"],
            lift=force * PUBLISHED["lift"],
            density=DENSITY,
            viscosity=VISCOSITY,
            x=CENTRE[0],
            y=CENTRE[1],
            z=THICKNESS / 2,
        )
        (folder / f"{name}.toml").write_text(case, encoding="utf-8")
    return flow


HEAD = """\
| cells | load from | drag | off by | doubt | sharpened off by | lift | off by | doubt |
|---|---|---|---|---|---|---|---|---|"""


def rows(data: dict[str, Any], name: str, cells: int) -> list[str]:
    """Lines of a table: coefficients that ``balance.json`` has for one surface, beside their doubt."""
    force = 0.5 * DENSITY * MEAN_SPEED**2 * DIAMETER * THICKNESS
    lines = []
    for way in ("walls", "balance") if name == "box" else ("balance",):  # the wall is the same in all
        load = data["hardware_load"][f"from_{way}"]
        found, doubt = (np.array(load[key])[:2] / force for key in ("force", "force_uncertainty"))
        sharp = data["sharpened"]["hardware_load"][f"from_{way}"]["force"][0] / force
        published = np.array([PUBLISHED["drag"], PUBLISHED["lift"]])
        off, doubt = np.abs(found / published - 1.0), doubt / published
        place = "walls" if way == "walls" else f"balance, {name}"
        lines.append(
            f"| {4 * cells} by {round(1.25 * cells)} | {place} | {found[0]:.4f} | {off[0]:.2%} | {doubt[0]:.2%} "
            f"| {abs(sharp / PUBLISHED['drag'] - 1.0):.3%} | {found[1]:.5f} | {off[1]:.1%} | {doubt[1]:.0%} |"
        )
    return lines


def table(sizes: tuple[int, ...] = (16, 24, 32)) -> str:
    """Table of what is found on finer and finer meshes."""
    import fluxmesh
    from fluxmesh.job.doubted import with_budget

    lines = [HEAD]
    for cells in sizes:
        with tempfile.TemporaryDirectory() as folder:
            make(Path(folder), cells)
            for name in SHAPES:
                case = fluxmesh.read_case(Path(folder) / f"{name}.toml")
                lines += rows(with_budget(case, fluxmesh.run_case(case)).data(), name, cells)
    return "\n".join(lines)


def main() -> None:
    parser = argparse.ArgumentParser(description="Solve the flow past a cylinder and write the shipped case.")
    parser.add_argument("--cells", type=int, default=CELLS, help=f"cells in a quarter turn (default {CELLS})")
    parser.add_argument("--to", type=Path, default=FOLDER, help="folder to write to")
    parser.add_argument("--table", action="store_true", help="print what fluxmesh finds on three meshes instead")
    asked = parser.parse_args()
    if asked.table:
        print(table())
        return
    flow = make(asked.to, asked.cells)
    print(f"{flow.around} by {flow.rings} cells round the cylinder, {2 * flow.nodes.shape[0]} velocities")
    names = {"residual": "residual at the wall", "surface": "integral over the wall", "points": "at two points"}
    for form, found in coefficients(flow).items():
        for quantity, value in found.items():
            off = value / PUBLISHED[quantity] - 1.0
            print(f"  {quantity:8} {names[form]:22} {value:.9g}, published {PUBLISHED[quantity]:.9g}: {off:+.1e}")
    files = sorted(asked.to.iterdir())
    print(", ".join(f"{path.name} {path.stat().st_size / 1e3:.0f} kB" for path in files))


if __name__ == "__main__":
    main()
