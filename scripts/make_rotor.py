"""Make the shipped exact-flow case: a control surface around a spinning rotor in a wind.

One metre of a long rotor of circular section stands in a uniform wind; its
spin gives the air a circulation. The plane potential flow is exact, and so is the lift per
length ``rho U G`` (Kutta and Joukowski; Batchelor, An Introduction to Fluid
Dynamics, section 6.6, from memory), whatever surface it is taken over. The
control surface is an odd closed contour, drawn along the rotor and capped; the rotor's skin is
its inner wall. Faces are quadrilaterals; velocity and gauge pressure sit on points.

Usage: python scripts/make_rotor.py
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pyvista

FOLDER = Path(__file__).resolve().parent.parent / "meshes" / "rotor"
DENSITY, WIND, CIRCULATION, RADIUS, LENGTH = 1.225, 8.0, 12.0, 0.35, 1.0
AROUND, ACROSS, ALONG = 144, 36, 10


def contour(angle: np.ndarray) -> np.ndarray:
    """Distance of the outer surface from the rotor's axis: no symmetry at all."""
    return 1.1 + 0.25 * np.cos(angle - 0.4) + 0.16 * np.cos(2 * angle + 1.0) + 0.07 * np.sin(3 * angle)


def flow(points: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Exact velocity and gauge pressure."""
    place = points[:, 0] + 1j * points[:, 1]
    # the wind blows along +x; a clockwise circulation lifts along +y
    conjugate = WIND * (1 - RADIUS**2 / place**2) + 1j * CIRCULATION / (2 * np.pi * place)
    velocity = np.column_stack([conjugate.real, -conjugate.imag, np.zeros(len(points))])
    return velocity, DENSITY * (WIND**2 - np.abs(conjugate) ** 2) / 2


def grid(first: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Points and quadrilaterals of a lattice (n, m, 3), closed round its first direction."""
    n, m = first.shape[:2]
    i, j = np.meshgrid(np.arange(n), np.arange(m - 1), indexing="ij")
    k = (i + 1) % n
    quads = np.stack([i * m + j, k * m + j, k * m + j + 1, i * m + j + 1], axis=-1).reshape(-1, 4)
    return first.reshape(-1, 3), quads


def make() -> pyvista.PolyData:
    angle = np.linspace(0, 2 * np.pi, AROUND, endpoint=False)
    ring = np.column_stack([np.cos(angle), np.sin(angle)])
    # rings crowd towards the rotor, where the flow changes fastest
    share = np.linspace(0, 1, ACROSS + 1) ** 1.6
    height = np.linspace(0, LENGTH, ALONG + 1)
    outer, inner = ring * contour(angle)[:, None], ring * RADIUS

    def wall(profile: np.ndarray) -> np.ndarray:
        return np.stack([np.column_stack([profile, np.full(AROUND, z)]) for z in height], axis=1)

    def cap(z: float) -> np.ndarray:
        # the last ring is the outer contour to the last bit
        rings = [*(inner + s * (outer - inner) for s in share[:-1]), outer]
        return np.stack([np.column_stack([r, np.full(AROUND, z)]) for r in rings], axis=1)

    points, faces, region = [], [], []
    count = 0
    # each part has points of its own, as an export by part has
    for tag, (lattice, turn) in enumerate(
        [(wall(outer), False), (wall(inner), True), (cap(0.0), False), (cap(LENGTH), True)], start=1
    ):
        here, quads = grid(lattice)
        faces.append((quads[:, ::-1] if turn else quads) + count)
        region.append(np.full(len(quads), min(tag, 3), dtype=np.int32))
        points.append(here)
        count += len(here)
    xyz = np.concatenate(points)
    quads = np.concatenate(faces)
    mesh = pyvista.PolyData(xyz, np.column_stack([np.full(len(quads), 4), quads]).ravel())
    mesh.point_data["velocity"], mesh.point_data["pressure"] = flow(xyz)
    mesh.cell_data["part"] = np.concatenate(region)
    mesh.cell_data["density"] = np.full(len(quads), DENSITY)
    return mesh


def main() -> None:
    FOLDER.mkdir(parents=True, exist_ok=True)
    path = FOLDER / "rotor.vtp"
    make().save(path, compression="zlib")
    lift = DENSITY * WIND * CIRCULATION * LENGTH
    print(f"{path.name}: {path.stat().st_size / 1e3:.0f} kB; lift of one metre {lift:.4f} N")


if __name__ == "__main__":
    main()
