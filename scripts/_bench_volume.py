"""Speed of sampling a volume, against pyvista's own `sample` at the same places.

Usage: python scripts/_bench_volume.py [cells] [faces]   (default 1,000,000 and 200,000)
"""

from __future__ import annotations

import itertools
import sys
import time
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager

import numpy as np

from fluxmesh.field.volume import sample_volume
from fluxmesh.integral.layout import FaceArrays
from fluxmesh.integral.samples import sample_places
from fluxmesh.surface.readers.volume_grid import volume_mesh

Row = tuple[str, str, str]


def ball_of_tetrahedra(cells: int, power: int = 1):
    """A ball of radius 1 with velocity and pressure; a high power crowds the cells in the middle."""
    import pyvista

    n = max(round((cells / 6) ** (1 / 3)), 2)
    axis = np.linspace(-1, 1, n + 1)
    cube = np.stack(np.meshgrid(axis, axis, axis, indexing="ij"), axis=-1).reshape(-1, 3)
    index = np.arange((n + 1) ** 3).reshape(n + 1, n + 1, n + 1)
    corner = [index[i : n + i, j : n + j, k : n + k].ravel() for i, j, k in itertools.product((0, 1), repeat=3)]
    paths = [np.cumsum((0, *order)) for order in itertools.permutations((4, 2, 1))]
    tetrahedra = np.stack([np.stack([corner[at] for at in path], axis=-1) for path in paths], axis=1).reshape(-1, 4)
    # each cube shell becomes a sphere
    shell, length = np.abs(cube).max(axis=1), np.linalg.norm(cube, axis=1)
    points = cube * np.divide(shell**power, length, out=np.zeros_like(length), where=length > 0)[:, None]
    grid = pyvista.UnstructuredGrid({10: tetrahedra}, points)
    x, y, z = points.T
    grid.point_data["velocity"] = np.stack([y + 0.1, z - x, 0.5 * x + 0.2], axis=-1)
    grid.point_data["pressure"] = 5000 - 9800 * z + 300 * x * y
    return grid


def places_on_sphere(faces: int, radius: float) -> np.ndarray:
    """Quadrature points of a sphere of triangles whose corners lie at a radius."""
    import trimesh

    level = max(round(np.log(faces / 20) / np.log(4) + 0.4), 1)
    sphere = trimesh.creation.icosphere(subdivisions=level, radius=radius)
    triangles = np.asarray(sphere.faces, dtype=np.int64)[:faces]
    surface = FaceArrays(
        np.asarray(sphere.vertices, dtype=np.float64), triangles.ravel(), np.empty(0, np.int64), np.empty(0, np.int8)
    )
    return sample_places(surface, np.ones(len(triangles), np.bool_)).places


def places_on_skin(grid, faces: int) -> np.ndarray:
    """Quadrature points of the faces of a grid's own skin, each cut until there are about so many."""
    skin = grid.extract_surface(algorithm="dataset_surface")
    corners = np.asarray(skin.points, dtype=np.float64)[skin.faces.reshape(-1, 4)[:, 1:]]
    while len(corners) < faces / 2:
        a, b, c = corners.transpose(1, 0, 2)
        ab, bc, ca = (a + b) / 2, (b + c) / 2, (c + a) / 2
        parts = ((a, ab, ca), (ab, b, bc), (ca, bc, c), (ab, bc, ca))
        corners = np.stack([np.stack(part, axis=1) for part in parts], axis=1).reshape(-1, 3, 3)
    points = corners[:faces].reshape(-1, 3)
    triangles = np.arange(len(points)).reshape(-1, 3)
    surface = FaceArrays(points, triangles.ravel(), np.empty(0, np.int64), np.empty(0, np.int8))
    return sample_places(surface, np.ones(len(triangles), np.bool_)).places


def least(works: Sequence[Callable[[object], object]], grid, times: int) -> tuple[list[float], list[object]]:
    """Least time of each of several works, s, taken in turns, and what each gave.

    Each run has a grid of its own: VTK keeps search trees with a grid.
    """
    spent = [np.inf] * len(works)
    results: list[object] = [None] * len(works)
    for _ in range(times):
        for k, work in enumerate(works):
            given = grid.copy()
            start = time.perf_counter()
            results[k] = work(given)
            spent[k] = min(spent[k], time.perf_counter() - start)
    return spent, results


@contextmanager
def all_cores() -> Iterator[None]:
    from vtkmodules.vtkCommonCore import vtkSMPTools

    before = vtkSMPTools.GetBackend()
    vtkSMPTools.SetBackend("STDThread")
    try:
        yield
    finally:
        vtkSMPTools.SetBackend(before)


def measure_volume(cells: int = 1_000_000, faces: int = 200_000, times: int = 3) -> Iterator[Row]:
    """Yield what was measured, the value, and the aim."""
    import pyvista

    names = {"velocity": ("velocity",), "pressure": ("pressure",)}
    ball = ball_of_tetrahedra(cells)
    scenes = (
        ("inside the volume", ball, places_on_sphere(faces, 0.8), False),
        ("on its skin", ball, places_on_skin(ball, faces), False),
        ("off its skin, nearest points taken", ball, places_on_sphere(faces, 1.0), True),
        ("around a small body, where cells crowd", ball_of_tetrahedra(cells, 5), places_on_sphere(faces, 0.03), False),
    )
    for what, grid, places, snapped in scenes:
        cloud = pyvista.PolyData(places)

        def ours(given, places=places):
            return sample_volume(volume_mesh(given), names, places, scale=1.0, reach=0.01)

        def theirs(given, cloud=cloud, snapped=snapped):
            return cloud.sample(given, snap_to_closest_point=snapped)

        def threaded(given, theirs=theirs):
            with all_cores():
                return theirs(given)

        spent, (sampled, probed, _) = least((ours, theirs, threaded), grid, times)
        valued = np.count_nonzero(probed["vtkValidPointMask"]) / len(places)
        name = f"volume of {grid.n_cells:,} tetrahedra at {len(places):,} places {what}"
        yield name, f"{spent[0]:.2f} s", "aim: seconds"
        yield "  pyvista's sample over ours", f"{spent[1] / spent[0]:.2f}", "aim >= 1"
        yield "  the same when it is told to use all cores", f"{spent[2] / spent[0]:.2f}", ""
        yield "  share of places in a cell (the others take the nearest point)", f"{sampled.exact.mean():.1%}", ""
        yield "  share of places that pyvista's sample gives a value", f"{valued:.1%}", ""


if __name__ == "__main__":
    for name, value, aim in measure_volume(*map(int, sys.argv[1:3])):
        print(f"{name:<90}{value:>10}   {aim}")
