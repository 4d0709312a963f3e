"""Make the shipped port-data case: an odd-shaped rinse header as an STL without tags.

A squashed collector with one feed and three legs at odd angles, as a designer
has it before any flow is computed: millimetres, no groups, no fields. Needs
the packages of the "examples" extra.

Usage: python scripts/make_header.py
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import trimesh

FOLDER = Path(__file__).resolve().parent.parent / "meshes" / "header"

# name: (start in the body, end of the leg = centre of the port, radius), all in mm
LEGS = {
    "feed": ((-40.0, 0.0, 0.0), (-310.0, 20.0, 0.0), 40.0),
    "left": ((20.0, 15.0, 0.0), (140.0, 265.0, 60.0), 25.0),
    "right": ((40.0, -10.0, 0.0), (290.0, -120.0, -15.0), 30.0),
    "top": ((0.0, 0.0, 10.0), (-30.0, 25.0, 230.0), 17.5),
}


def leg(start: tuple[float, ...], end: tuple[float, ...], radius: float) -> trimesh.Trimesh:
    """A closed cylinder; its far cap becomes the port."""
    return trimesh.creation.cylinder(radius=radius, segment=[start, end], sections=72)


def make() -> trimesh.Trimesh:
    body = trimesh.creation.icosphere(subdivisions=4, radius=1.0)
    body.apply_scale([130.0, 85.0, 62.0])
    return trimesh.boolean.union([body, *(leg(*values) for values in LEGS.values())], engine="manifold")


def main() -> None:
    FOLDER.mkdir(parents=True, exist_ok=True)
    mesh = make()
    path = FOLDER / "header.stl"
    path.write_bytes(trimesh.exchange.stl.export_stl(mesh))
    print(f"{path.name}: {len(mesh.faces)} triangles, watertight {mesh.is_watertight}, {mesh.volume / 1e6:.4f} litres")
    for name, (start, end, radius) in LEGS.items():
        normal = np.subtract(end, start) / np.linalg.norm(np.subtract(end, start))
        print(f"  {name}: port centre {end} mm, radius {radius} mm, normal {np.round(normal, 6).tolist()}")


if __name__ == "__main__":
    main()
