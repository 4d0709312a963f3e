"""Fields sampled from a volume: exactness, places outside, units, files."""

from __future__ import annotations

import contextlib
import itertools
import json
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from fluxmesh.errors import FieldError, FileError
from fluxmesh.field import volume_probe
from fluxmesh.field.volume import sample_volume
from fluxmesh.field.volume_shapes import cell_map
from fluxmesh.integral.layout import FaceArrays
from fluxmesh.integral.samples import sample_places
from fluxmesh.surface.files import read_mesh
from fluxmesh.surface.readers.volume_grid import VolumeMesh, read_volume, volume_mesh, volume_suffixes

SLOPE = np.array([[1.0, 2.0, 3.0], [-2.0, 1.0, 0.5], [0.3, -0.7, 2.0]])
VELOCITY = {"velocity": ("U",)}
MANIFOLD = Path(__file__).parents[1] / "meshes" / "manifold"


def linear_field(x: np.ndarray) -> np.ndarray:
    return x @ SLOPE.T + [1.0, -2.0, 0.5]


def bent(x: np.ndarray, size: float = 0.03) -> np.ndarray:
    """A smooth map that leaves no face of a cube plane."""
    return x + size * np.stack([np.sin(3 * x[:, 1]), np.sin(3 * x[:, 2]), np.sin(3 * x[:, 0])], axis=-1)


def unit_cube(shape: str, n: int = 4, size: float = 0.0, quadratic: bool = False):
    """A unit cube of cells of one shape, bent, with a linear velocity on its nodes."""
    import pyvista
    from vtkmodules.vtkFiltersGeometry import vtkLinearToQuadraticCellsFilter

    axis = np.linspace(0, 1, n + 1)
    points = np.stack(np.meshgrid(axis, axis, axis, indexing="ij"), axis=-1).reshape(-1, 3)
    index = np.arange((n + 1) ** 3).reshape(n + 1, n + 1, n + 1)
    corner = [index[i : n + i, j : n + j, k : n + k].ravel() for i, j, k in itertools.product((0, 1), repeat=3)]
    around = np.stack([corner[at] for at in (0, 4, 6, 2, 1, 5, 7, 3)], axis=-1)
    if shape == "tetra":
        paths = [np.cumsum((0, *order)) for order in itertools.permutations((4, 2, 1))]
        cells = {10: np.concatenate([np.stack([corner[at] for at in path], axis=-1) for path in paths])}
    elif shape == "voxel":
        cells = {11: np.stack([corner[at] for at in (0, 4, 2, 6, 1, 5, 3, 7)], axis=-1)}
    elif shape == "wedge":
        cells = {13: np.concatenate([around[:, [0, 1, 2, 4, 5, 6]], around[:, [0, 2, 3, 4, 6, 7]]])}
    elif shape == "pyramid":
        sides = [(0, 1, 2, 3), (4, 7, 6, 5), (0, 4, 5, 1), (3, 2, 6, 7), (0, 3, 7, 4), (1, 5, 6, 2)]
        tip = len(points) + np.arange(len(around))
        cells = {14: np.concatenate([np.column_stack([around[:, side], tip]) for side in sides])}
        points = np.concatenate([points, points[around].mean(axis=1)])
    else:
        cells = {12: around}
    grid = pyvista.UnstructuredGrid(cells, points)
    if quadratic:
        convert = vtkLinearToQuadraticCellsFilter()
        convert.SetInputData(grid)
        convert.Update()
        grid = pyvista.wrap(convert.GetOutput())
    grid.points = bent(np.array(grid.points, dtype=np.float64), size)
    grid.point_data["U"] = linear_field(np.asarray(grid.points))
    grid.cell_data["number"] = np.arange(grid.n_cells, dtype=np.float64)
    return grid


def places_in(count: int = 3000, low: float = 0.06, high: float = 0.97) -> np.ndarray:
    return np.random.default_rng(7).uniform(low, high, (count, 3))


def skin_places(grid, size: float = 0.03) -> np.ndarray:
    """Nodes on the skin, mid-side nodes included: points of the true, curved faces."""
    flat = np.array(list(itertools.product(np.linspace(0, 1, 9), repeat=3)))
    flat = flat[((flat == 0) | (flat == 1)).any(axis=1)]
    points = np.asarray(grid.points)
    skin = points[np.linalg.norm(points[:, None] - bent(flat, size)[None], axis=2).min(axis=1) < 1e-12]
    assert len(skin) > 90
    return skin


SHAPES = ["tetra", "voxel", "hexahedron", "wedge", "pyramid"]


@pytest.mark.parametrize("quadratic", [False, True])
@pytest.mark.parametrize("shape", SHAPES)
def test_a_linear_field_is_exact_in_every_cell_and_on_curved_skins(shape: str, quadratic: bool) -> None:
    if shape == "voxel" and quadratic:
        shape = "hexahedron"
    grid = unit_cube(shape, size=0.0 if shape == "voxel" else 0.03, quadratic=quadratic)
    skin = skin_places(grid, 0.0 if shape == "voxel" else 0.03)
    places = np.concatenate([places_in(), skin])
    sampled = sample_volume(volume_mesh(grid), VELOCITY, places, scale=1.0)
    # a few units in the last place of values of at most 6
    assert_allclose(sampled.values["velocity"], linear_field(places), rtol=0, atol=1e-13)
    assert sampled.exact.all()
    assert sampled.location == {"velocity": "nodes"}


def test_warped_hexahedra_are_inverted_to_round_off() -> None:
    grid = unit_cube("hexahedron")
    inner = ((np.asarray(grid.points) > 0) & (np.asarray(grid.points) < 1)).all(axis=1)
    grid.points[inner] += np.random.default_rng(3).uniform(-0.08, 0.08, (inner.sum(), 3))
    grid.point_data["U"] = linear_field(np.asarray(grid.points))
    places = places_in()
    sampled = sample_volume(volume_mesh(grid), VELOCITY, places, scale=1.0)
    # VTK alone stops at 1e-9; what is off by less than 1e-12 of the volume's size is left as it is
    assert_allclose(sampled.values["velocity"], linear_field(places), rtol=0, atol=1e-11)


def test_a_trilinear_field_is_exact_on_hexahedra_and_a_quadratic_one_on_quadratic_tetrahedra() -> None:
    places = places_in()
    x, y, z = places.T
    box = unit_cube("hexahedron")
    box.point_data["p"] = np.prod(box.points, axis=1)
    sampled = sample_volume(volume_mesh(box), {"pressure": ("p",)}, places, scale=1.0)
    assert_allclose(sampled.values["pressure"], x * y * z, rtol=0, atol=1e-15)
    curved = unit_cube("tetra", quadratic=True)
    a, b, c = np.asarray(curved.points).T
    curved.point_data["p"] = a * a - 2 * b * c + 0.3 * c * c
    sampled = sample_volume(volume_mesh(curved), {"pressure": ("p",)}, places, scale=1.0)
    assert_allclose(sampled.values["pressure"], x * x - 2 * y * z + 0.3 * z * z, rtol=0, atol=1e-13)


def test_scipy_agrees_on_its_own_triangulation() -> None:
    """Linear interpolation and cell search of scipy (LinearNDInterpolator, Delaunay) on the same tetrahedra."""
    import pyvista
    from scipy.interpolate import LinearNDInterpolator
    from scipy.spatial import Delaunay

    random = np.random.default_rng(11)
    points = random.uniform(-1, 1, (800, 3))
    values = random.normal(size=(800, 3))
    mesh = Delaunay(points)
    grid = pyvista.UnstructuredGrid({10: mesh.simplices.astype(np.int64)}, points)
    grid.point_data["U"] = values
    grid.cell_data["density"] = 1.0 + np.arange(grid.n_cells)
    places = random.uniform(-0.6, 0.6, (5000, 3))
    sampled = sample_volume(volume_mesh(grid), {**VELOCITY, "density": ("density",)}, places, scale=1.0)
    expected = LinearNDInterpolator(mesh, values)(places)
    # slivers lose digits to cancellation in both
    assert_allclose(sampled.values["velocity"], expected, rtol=0, atol=1e-12)
    assert_array_equal(sampled.values["density"], 1.0 + mesh.find_simplex(places))
    assert sampled.location == {"velocity": "nodes", "density": "cells"}


def test_polyhedra_reproduce_a_linear_field() -> None:
    import pyvista

    box = unit_cube("hexahedron", n=2)
    sides = [(0, 3, 2, 1), (4, 5, 6, 7), (0, 1, 5, 4), (2, 3, 7, 6), (1, 2, 6, 5), (3, 0, 4, 7)]
    cells: list[int] = []
    for cell in box.cells_dict[12]:
        faces = [entry for side in sides for entry in (4, *(int(cell[at]) for at in side))]
        cells += [len(faces) + 1, 6, *faces]
    grid = pyvista.UnstructuredGrid(cells, [42] * box.n_cells, box.points)
    grid.point_data["U"] = linear_field(np.asarray(grid.points))
    places = np.concatenate([places_in(300), [[0.3, 0.4, 1.0002]]])
    sampled = sample_volume(volume_mesh(grid), VELOCITY, places, scale=1.0)
    assert_allclose(sampled.values["velocity"][:-1], linear_field(places[:-1]), rtol=0, atol=1e-12)
    assert_allclose(sampled.values["velocity"][-1], linear_field(np.array([0.3, 0.4, 1.0])), rtol=0, atol=1e-12)
    assert_allclose(sampled.distance[-1], 2e-4, rtol=1e-9)


@pytest.mark.parametrize("polyhedral", [False, True])
def test_cells_of_several_shapes_in_one_volume(polyhedral: bool) -> None:
    """Wedges beside hexahedra or polyhedra: the values of each place come from the cell that holds it."""
    import pyvista

    cells = unit_cube("hexahedron", n=3).cells_dict[12]
    points = unit_cube("hexahedron", n=3).points
    stream: list[int] = []
    kinds: list[int] = []
    for k, cell in enumerate(cells.tolist()):
        if k % 2:
            halves = [[cell[at] for at in half] for half in ((0, 1, 2, 4, 5, 6), (0, 2, 3, 4, 6, 7))]
            stream += [entry for half in halves for entry in (6, *half)]
            kinds += [13, 13]
        elif polyhedral:
            sides = [(0, 3, 2, 1), (4, 5, 6, 7), (0, 1, 5, 4), (2, 3, 7, 6), (1, 2, 6, 5), (3, 0, 4, 7)]
            faces = [entry for side in sides for entry in (4, *(cell[at] for at in side))]
            stream += [len(faces) + 1, 6, *faces]
            kinds.append(42)
        else:
            stream += [8, *cell]
            kinds.append(12)
    grid = pyvista.UnstructuredGrid(stream, kinds, points)
    grid.point_data["U"] = linear_field(np.asarray(points))
    # the box that a cell lies in, told from its centre: each place lies in one of its cells
    grid.cell_data["box"] = np.floor(grid.cell_centers().points * 3) @ [9.0, 3.0, 1.0]
    places = places_in(5000)
    sampled = sample_volume(volume_mesh(grid), {**VELOCITY, "density": ("box",)}, places, scale=1.0)
    assert_allclose(sampled.values["velocity"], linear_field(places), rtol=0, atol=1e-12)
    wrong = sampled.values["density"] != np.floor(places * 3) @ [9.0, 3.0, 1.0]
    # VTK's margin around a wedge stays where a polyhedron begins
    assert wrong.mean() <= (0.02 if polyhedral else 0.0)


def test_the_skin_of_a_polyhedron_reproduces_a_linear_field() -> None:
    import pyvista

    angle = np.arange(6) * np.pi / 3 + 0.2
    ring = np.column_stack([np.cos(angle), 0.7 * np.sin(angle)])
    points = np.concatenate([np.column_stack([ring, np.full(6, z)]) for z in (0.0, 1.0)])
    walls = [(i, (i + 1) % 6, (i + 1) % 6 + 6, i + 6) for i in range(6)]
    faces = [tuple(range(5, -1, -1)), tuple(range(6, 12)), *walls]
    stream = [len(faces), *(entry for face in faces for entry in (len(face), *face))]
    grid = pyvista.UnstructuredGrid([len(stream), *stream], [42], points)
    grid.point_data["U"] = linear_field(points)
    places = np.column_stack([0.5 * places_in(50)[:, :2], np.full(50, 1.01)])
    sampled = sample_volume(volume_mesh(grid), VELOCITY, places, scale=1.0, reach=0.02)
    assert_allclose(sampled.values["velocity"], linear_field(places - [0, 0, 0.01]), rtol=0, atol=1e-12)


@pytest.mark.parametrize(("shape", "quadratic"), [("tetra", False), ("hexahedron", False), ("tetra", True)])
def test_places_outside_take_the_nearest_point_within_reach(shape: str, quadratic: bool) -> None:
    grid = unit_cube(shape, quadratic=quadratic)
    at, away = places_in(200)[:, :2], 4e-3
    above = np.column_stack([at, np.full(200, 1.0 + away)])
    places = np.concatenate([places_in(100), above])
    sampled = sample_volume(volume_mesh(grid), {**VELOCITY, "density": ("number",)}, places, scale=1.0, reach=5e-3)
    below = np.column_stack([at, np.ones(200)])
    assert_allclose(sampled.values["velocity"][100:], linear_field(below), rtol=0, atol=1e-12)
    assert_allclose(sampled.distance[100:], away, rtol=1e-9)
    assert_array_equal(sampled.exact, np.repeat([True, False], [100, 200]))
    assert_array_equal(sampled.distance[:100], 0.0)
    assert sampled.reach == 5e-3
    inner = sample_volume(volume_mesh(grid), {"density": ("number",)}, below - [0, 0, 1e-6], scale=1.0)
    # on an edge between two cells either may be the nearest
    assert np.mean(sampled.values["density"][100:] == inner.values["density"]) > 0.99


def test_rounding_to_single_precision_leaves_places_exact() -> None:
    grid = unit_cube("hexahedron", size=0.03)
    places = skin_places(grid) + 5.0
    grid.points = np.asarray(grid.points) + 5.0
    grid.point_data["U"] = linear_field(np.asarray(grid.points))
    rounded = places.astype(np.float32).astype(np.float64)
    sampled = sample_volume(volume_mesh(grid), VELOCITY, rounded, scale=1.0)
    assert sampled.exact.all()
    assert_allclose(sampled.values["velocity"], linear_field(places), rtol=0, atol=1e-5)
    off = sample_volume(volume_mesh(grid), VELOCITY, 5.5 + (places - 5.5) * 1.0002, scale=1.0)
    assert not off.exact.any()


def test_places_beyond_reach_are_counted_and_the_farthest_is_named() -> None:
    grid = unit_cube("tetra")
    places = np.concatenate([places_in(97), [[0.5, 0.5, 1.03], [0.25, 0.5, 1.25], [0.5, 0.5, 1.001]]])
    with pytest.raises(
        FieldError, match=r"2 of 100 places on the surface \(2 %\) lie outside the volume by more than"
    ) as e:
        sample_volume(volume_mesh(grid, "flow.vtu"), VELOCITY, places, scale=1.0)
    assert e.value.where == "flow.vtu"
    assert "the reach of 0.00173 m; the farthest is 0.25 m away, at (0.25, 0.5, 1.25) m" in str(e.value)
    assert 'reach = "0.25 m"' in e.value.remedy
    wide = sample_volume(volume_mesh(grid), VELOCITY, places, scale=1.0, reach=0.26)
    assert_allclose(wide.distance[-3:], [0.03, 0.25, 0.001], rtol=1e-9)


@pytest.mark.parametrize("shape", ["tetra", "hexahedron", "wedge"])
def test_the_nearest_point_is_the_same_found_one_by_one(shape: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """What older versions of VTK need, against the search on all cores."""
    grid = unit_cube(shape, size=0.03)
    middle = np.asarray(grid.points).mean(axis=0)
    places = np.concatenate([places_in(100), middle + (skin_places(grid) - middle) * 1.01, [[0.3, 0.4, 1.5]]])
    names = {**VELOCITY, "density": ("number",)}
    together = sample_volume(volume_mesh(grid), names, places, scale=1.0, reach=0.6)
    monkeypatch.setattr(volume_probe, "_can_snap", lambda: False)
    alone = sample_volume(volume_mesh(grid), names, places, scale=1.0, reach=0.6)
    assert (together.distance > 1e-3).sum() > 90
    # the nearest point of a warped quad is found through its mean plane
    assert_allclose(alone.distance, together.distance, rtol=0, atol=1e-13 if shape == "tetra" else 1e-5)
    assert_allclose(
        alone.values["velocity"], together.values["velocity"], rtol=0, atol=1e-12 if shape == "tetra" else 1e-4
    )
    with pytest.raises(FieldError, match="lie outside the volume"):
        sample_volume(volume_mesh(grid), names, places, scale=1.0, reach=0.4)


def test_a_hole_in_the_volume_is_outside() -> None:
    grid = unit_cube("hexahedron", n=5)
    centre = grid.cell_centers().points
    hollow = grid.extract_cells(np.flatnonzero(np.abs(centre - 0.5).max(axis=1) > 0.15))
    with pytest.raises(FieldError, match=r"1 of 51 places .* the farthest is 0\.1 m away, at \(0\.5, 0\.5, 0\.5\) m"):
        sample_volume(volume_mesh(hollow), VELOCITY, np.vstack([places_in(50) * 0.3, [[0.5] * 3]]), scale=1.0)


def test_a_volume_elsewhere_or_in_another_unit_is_named_as_such() -> None:
    volume = volume_mesh(unit_cube("tetra"), "flow.vtu")
    with pytest.raises(
        FieldError, match=r"misses the surface: it spans \(0, 0, 0\) to \(1, 1, 1\) m, the surface"
    ) as e:
        sample_volume(volume, VELOCITY, places_in() + 3.0, scale=1.0)
    assert "in the same axes and unit" in e.value.remedy
    box = np.array(list(itertools.product([0.0, 1.0], repeat=3)))
    # the file is in millimetres, and was read as metres: the small surface lies in a corner cell of it
    with pytest.raises(
        FieldError, match=r"the volume is 1000 times as large as the surface.*flow.volume.unit = \"mm\""
    ):
        sample_volume(volume, VELOCITY, box * 1e-3, scale=1.0)
    # the other way round: all of the volume lies in a corner of the surface
    with pytest.raises(FieldError, match=r"places on the surface .*lie outside.*flow.volume.unit = \"m\""):
        sample_volume(volume, VELOCITY, box, scale=1e-3)
    with pytest.raises(FieldError, match=r"misses the surface.*flow.volume.unit = \"mm\""):
        sample_volume(volume_mesh(unit_cube("tetra").translate((2, 2, 2))), VELOCITY, (box + 2) * 1e-3, scale=1.0)
    assert sample_volume(volume, VELOCITY, box * 1e-3, scale=1e-3).exact.all()
    # a large volume around a small surface is no slip
    assert sample_volume(volume, VELOCITY, 0.4 + 0.01 * box, scale=1.0).exact.all()


def test_lengths_are_converted() -> None:
    places = places_in(50) * 0.0254
    sampled = sample_volume(volume_mesh(unit_cube("tetra")), VELOCITY, places, scale=0.0254)
    assert_allclose(sampled.values["velocity"], linear_field(places / 0.0254), rtol=0, atol=1e-13)
    away = np.array([[0.5, 0.5, 1.001]]) * 0.0254
    assert_allclose(
        sample_volume(volume_mesh(unit_cube("tetra")), VELOCITY, away, scale=0.0254).distance, 2.54e-5, rtol=1e-9
    )


def test_far_from_the_origin_and_small_cells_keep_their_digits() -> None:
    grid = unit_cube("hexahedron", size=0.03)
    shift = np.array([4096.0, -2048.0, 8192.0])
    grid.points = np.asarray(grid.points) + shift
    places = places_in() + shift
    grid.point_data["U"] = linear_field(np.asarray(grid.points) - shift)
    sampled = sample_volume(volume_mesh(grid), VELOCITY, places, scale=1.0)
    # coordinates near 8192 are known to 1e-12
    assert_allclose(sampled.values["velocity"], linear_field(places - shift), rtol=0, atol=2e-11)


def test_components_in_arrays_of_their_own() -> None:
    grid = unit_cube("tetra")
    for k, name in enumerate("uvw"):
        grid.point_data[name] = np.asarray(grid.point_data["U"])[:, k].astype(np.float32)
    places = places_in(200)
    sampled = sample_volume(volume_mesh(grid), {"velocity": ("u", "v", "w")}, places, scale=1.0)
    assert_allclose(sampled.values["velocity"], linear_field(places), rtol=0, atol=1e-6)
    assert sampled.values["velocity"].dtype == np.float64
    numbers = {"gradient": ("number", "number")}
    assert sample_volume(volume_mesh(grid), numbers, places, scale=1.0).values["gradient"].shape == (200, 2)


def test_arrays_that_cannot_be_used_are_named() -> None:
    grid = unit_cube("tetra")
    grid.cell_data["U"] = np.zeros((grid.n_cells, 3))
    grid.point_data["Pressure"] = np.zeros(grid.n_points)
    volume, places = volume_mesh(grid, "flow.vtu"), places_in(5)
    with pytest.raises(
        FieldError, match=r"flow\.pressure: there is no array 'pressure' in flow\.vtu\. Did you mean 'Pressure'"
    ):
        sample_volume(volume, {"pressure": ("pressure",)}, places, scale=1.0)
    with pytest.raises(FieldError, match=r"'U' is on nodes and on cells of flow\.vtu\. Say which one"):
        sample_volume(volume, VELOCITY, places, scale=1.0)
    assert sample_volume(volume, VELOCITY, places, scale=1.0, at={"velocity": "nodes"}).values["velocity"].all()
    assert not sample_volume(volume, VELOCITY, places, scale=1.0, at={"velocity": "cells"}).values["velocity"].any()
    with pytest.raises(FieldError, match=r"'Pressure' is on nodes of flow\.vtu, not on cells"):
        sample_volume(volume, {"pressure": ("Pressure",)}, places, scale=1.0, at={"pressure": "cells"})
    allowed = {"velocity": (3,), "stress": (6, 9), "pressure": (1,)}
    with pytest.raises(FieldError, match=r"flow\.velocity: 'Pressure' of flow\.vtu has 1 component\. 3 needed for vel"):
        sample_volume(volume, {"velocity": ("Pressure",)}, places, scale=1.0, components=allowed)
    with pytest.raises(FieldError, match=r"has 3 components\. 6 or 9 needed for stress"):
        sample_volume(volume, {"stress": ("U",)}, places, scale=1.0, at={"stress": "nodes"}, components=allowed)
    with pytest.raises(FieldError, match=r"component array 'U' of flow\.vtu has 3 components\. 1 is needed"):
        sample_volume(volume, {"velocity": ("Pressure", "U", "U")}, places, scale=1.0)
    with pytest.raises(FieldError, match="the length unit is 0"):
        sample_volume(volume, {"pressure": ("Pressure",)}, places, scale=0.0)
    with pytest.raises(FieldError, match="the reach is -1"):
        sample_volume(volume, {"pressure": ("Pressure",)}, places, scale=1.0, reach=-1.0)


@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf])
def test_values_that_are_not_finite_matter_only_where_they_are_used(bad: float) -> None:
    grid = unit_cube("tetra")
    corner = int(np.argmin(np.linalg.norm(np.asarray(grid.points), axis=1)))
    grid.point_data["U"][corner, 1] = bad
    grid.cell_data["density"] = np.where(grid.cell_centers().points.max(axis=1) < 0.25, bad, 1.0)
    volume, away = volume_mesh(grid, "flow.vtu"), places_in(100, 0.3)
    names = {**VELOCITY, "density": ("density",)}
    assert sample_volume(volume, names, away, scale=1.0).exact.all()
    near = np.vstack([away, [[0.1, 0.12, 0.14]]])
    with pytest.raises(
        FieldError, match=r"'U' on nodes of flow\.vtu gives 1 of 101 .*first at \(0\.1, 0\.12, 0\.14\) m"
    ):
        sample_volume(volume, VELOCITY, near, scale=1.0)
    with pytest.raises(FieldError, match=r"flow\.density: array 'density' on cells of flow\.vtu gives 1 of 101"):
        sample_volume(volume, {"density": ("density",)}, near, scale=1.0)


def test_the_same_bits_for_any_order_and_any_number_of_threads(monkeypatch: pytest.MonkeyPatch) -> None:
    from vtkmodules.vtkCommonCore import vtkSMPTools

    grid = unit_cube("hexahedron", size=0.03)
    names = {**VELOCITY, "density": ("number",)}
    places = np.concatenate([places_in(20000), np.column_stack([places_in(500)[:, :2], np.full(500, 1.05)])])
    before = vtkSMPTools.GetBackend()
    vtkSMPTools.SetBackend("Sequential")
    first = sample_volume(volume_mesh(grid), names, places, scale=1.0, reach=0.1)
    assert vtkSMPTools.GetBackend() == "Sequential"
    order = np.random.default_rng(5).permutation(len(places))
    turned = sample_volume(volume_mesh(grid), names, places[order], scale=1.0, reach=0.1)
    monkeypatch.setattr(volume_probe, "_all_cores", contextlib.nullcontext)
    alone = sample_volume(volume_mesh(grid), names, places, scale=1.0, reach=0.1)
    vtkSMPTools.SetBackend(before)
    inside = first.distance == 0
    assert 20000 <= inside.sum() < len(places)
    for name in names:
        assert_array_equal(turned.values[name][inside[order]], first.values[name][order][inside[order]])
        assert_array_equal(alone.values[name][inside], first.values[name][inside])
    # beyond the skin the nearest point may lie on the edge of two faces: the same point to round-off
    assert_allclose(turned.values["velocity"], first.values["velocity"][order], rtol=0, atol=1e-14)
    assert_allclose(alone.values["velocity"], first.values["velocity"], rtol=0, atol=1e-14)
    assert_allclose(turned.distance, first.distance[order], rtol=0, atol=1e-15)
    assert first.distance.max() > 0.01


def test_the_volume_is_left_as_it_was() -> None:
    grid = unit_cube("hexahedron", size=0.03)
    volume = volume_mesh(grid)
    points, values, names = np.array(grid.points), np.array(grid.point_data["U"]), list(grid.array_names)
    sample_volume(volume, VELOCITY, places_in(50), scale=1.0)
    assert_array_equal(grid.points, points)
    assert_array_equal(grid.point_data["U"], values)
    assert list(grid.array_names) == names


def test_no_places_give_no_values() -> None:
    sampled = sample_volume(
        volume_mesh(unit_cube("tetra")), {**VELOCITY, "p": ("number",)}, np.empty((0, 3)), scale=1.0
    )
    assert sampled.values["velocity"].shape == (0, 3)
    assert sampled.values["p"].shape == sampled.exact.shape == (0,)


@pytest.mark.parametrize("number", [10, 11, 12, 13, 14, 24, 25, 26, 27, 29, 31, 32, 33])
def test_shape_functions_are_those_of_vtk(number: int) -> None:
    """Kronecker property at the nodes that VTK states, partition of unity, slopes against differences."""
    from vtkmodules.vtkCommonDataModel import vtkGenericCell

    cell, shape = vtkGenericCell(), cell_map(number)
    cell.SetCellType(number)
    assert shape.size == cell.GetNumberOfPoints()
    random = np.random.default_rng(1)
    at = random.uniform(0, 1, (20, 3))
    identity = np.broadcast_to(np.eye(shape.size), (20, shape.size, shape.size))
    weights = shape.values(at, identity)
    held = [0.0] * shape.size
    for row, place in zip(weights, at):
        cell.InterpolateFunctions(place.tolist(), held)
        assert_allclose(row, held, rtol=0, atol=1e-13)
    assert_allclose(weights.sum(axis=1), 1.0, atol=1e-13)
    slopes = (shape._terms(at) @ shape.factors).reshape(20, 4, shape.size)[:, 1:]
    for along, step in enumerate(1e-6 * np.eye(3)):
        # central differences of quadratic terms are exact but for round-off over the step
        difference = (shape.values(at + step, identity) - shape.values(at - step, identity)) / 2e-6
        assert_allclose(slopes[:, along], difference, rtol=0, atol=1e-8)


def test_cells_without_polynomial_shapes_have_no_map() -> None:
    assert [cell_map(number) for number in (5, 15, 37, 42, 71)] == [None] * 5


def test_parametric_distance_outside() -> None:
    at = np.array([[0.2, 0.2, 0.2], [0.5, 0.4, 0.3], [0.6, 0.6, 0.5], [-0.1, 0.2, 0.3], [0.1, 0.2, 1.3]])
    assert_allclose(cell_map(10).outside(at), [0.0, 0.2, 0.7, 0.1, 0.6], atol=1e-15)
    assert_allclose(cell_map(13).outside(at), [0.0, 0.0, 0.2, 0.1, 0.3], atol=1e-15)
    assert_allclose(cell_map(12).outside(at), [0.0, 0.0, 0.0, 0.1, 0.3], atol=1e-15)


# --- the shipped flow --------------------------------------------------------------------------------


def as_quadratic(volume: VolumeMesh):
    """The shipped nodes as the quadratic tetrahedra that they came from: eight linear ones are cut from each."""
    import pyvista

    grid = pyvista.wrap(volume.grid)
    if 24 in grid.cells_dict:
        return volume
    points = np.asarray(grid.points, dtype=np.float64)
    nodes = np.sort(grid.cells_dict[10].reshape(-1, 32), axis=1)
    same = np.pad(nodes[:, 1:] == nodes[:, :-1], ((0, 0), (1, 1)))
    corners = nodes[~same[:, 1:] & ~same[:, :-1]].reshape(-1, 4)
    mids = nodes[same[:, 1:] & ~same[:, :-1]].reshape(-1, 6)
    middle = points[corners][:, [(0, 1), (1, 2), (0, 2), (0, 3), (1, 3), (2, 3)]].mean(axis=2)
    order = np.linalg.norm(points[mids][:, None] - middle[:, :, None], axis=3).argmin(axis=2)
    cells = np.concatenate([corners, np.take_along_axis(mids, order, axis=1)], axis=1)
    made = pyvista.UnstructuredGrid({24: cells}, points)
    for name, values in volume.node_arrays.items():
        made.point_data[name] = values
    return volume_mesh(made)


def test_the_shipped_flow_gives_its_reference_port_flow_when_sampled() -> None:
    """`reference.json` holds the flow computation's own quadrature over the ports."""
    mesh, volume = read_mesh(MANIFOLD / "manifold_coarse.vtp"), read_volume(MANIFOLD / "manifold_coarse.vtu")
    reference = json.loads((MANIFOLD / "reference.json").read_text())
    ports = reference["meshes"]["coarse"]["ports"]
    region = mesh.face_arrays["region"]
    points = np.asarray(mesh.points, dtype=np.float64) * 1e-3
    faces = FaceArrays(points, mesh.connectivity, np.empty(0, np.int64), np.empty(0, np.int8))
    samples = sample_places(faces, region < 4)
    names = {"velocity": ("velocity",), "pressure": ("pressure",)}
    linear = sample_volume(volume, names, samples.places, scale=1e-3)
    quadratic = as_quadratic(volume)
    curved = sample_volume(quadratic, names, samples.places, scale=1e-3)
    assert linear.exact.all()
    assert curved.exact.all()
    for number, name in enumerate(("feed", "spindle", "gallery"), 1):
        here = region[samples.face] == number
        vectors = samples.area_vectors[here]
        flux, force = {}, {}
        for which, sampled in (("linear", linear), ("curved", curved)):
            u = sampled.values["velocity"][here]
            carried = reference["density"] * np.einsum("ij,ij->i", u, vectors)
            flux[which] = np.append(carried.sum(), carried @ u)
            force[which] = -(sampled.values["pressure"][here] @ vectors)
        port = ports[name]
        wanted = np.array([port["mass_flow"], *port["momentum_flux"]])
        # nodes are shipped in single precision
        assert_allclose(flux["curved"], wanted, rtol=1e-6, atol=1e-8)
        # the pressure was computed linear in each large tetrahedron
        assert_allclose(force["curved"], port["pressure_force"], rtol=1e-6, atol=1e-8)
        if quadratic is not volume:
            assert 1e-3 < abs(flux["linear"][0] / wanted[0] - 1) < 0.03


# --- files -------------------------------------------------------------------------------------------


def check_sound(volume: VolumeMesh) -> None:
    places = places_in(300)
    sampled = sample_volume(volume, VELOCITY, places, scale=1.0)
    assert_allclose(sampled.values["velocity"], linear_field(places), rtol=0, atol=1e-12)


@pytest.mark.parametrize("suffix", [".vtu", ".vtk", ".msh", ".inp", ".med", ".xdmf", ".mesh"])
@pytest.mark.parametrize("shape", ["tetra", "hexahedron", "wedge", "quadratic tetra"])
def test_volume_files(tmp_path: Path, suffix: str, shape: str) -> None:
    import meshio
    import pyvista

    path = tmp_path / f"flow{suffix}"
    if suffix == ".mesh" and shape == "quadratic tetra":
        shape = "tetra"
    grid = unit_cube(shape.split()[-1], n=3, size=0.02, quadratic=" " in shape)
    if suffix in (".vtu", ".vtk"):
        grid.save(path)
    else:
        made = pyvista.to_meshio(grid)
        made.cell_data.clear()
        if suffix in (".inp", ".mesh"):  # these formats carry no values
            made.point_data.clear()
        meshio.write(path, made, file_format="gmsh" if suffix == ".msh" else None)
    volume = read_volume(path)
    assert volume.source == path.name
    if "U" not in volume.node_arrays:
        nodes = linear_field(np.asarray(pyvista.wrap(volume.grid).points, dtype=np.float64))
        volume = VolumeMesh(volume.source, volume.grid, {"U": nodes}, {})
    check_sound(volume)


def test_structured_grids_are_volumes_too(tmp_path: Path) -> None:
    import pyvista

    axis = np.linspace(0, 1, 5)
    grid = pyvista.StructuredGrid(*np.meshgrid(axis, axis, axis, indexing="ij"))
    grid.point_data["U"] = linear_field(np.asarray(grid.points))
    grid.save(tmp_path / "flow.vtk")
    check_sound(read_volume(tmp_path / "flow.vtk"))
    image = pyvista.ImageData(dimensions=(5, 5, 5), spacing=(0.25, 0.25, 0.25))
    image.point_data["U"] = linear_field(np.asarray(image.points))
    check_sound(volume_mesh(image))


def test_faces_lines_and_ghosts_are_no_part_of_the_volume() -> None:
    import pyvista

    box = unit_cube("hexahedron", n=2)
    cells = box.cells_dict[12]
    mixed = pyvista.UnstructuredGrid(
        {9: cells[:3, :4], 3: cells[:2, :2], 12: np.concatenate([cells, cells[:1]])},
        np.vstack([box.points, [[50.0, 50.0, 50.0]]]),
    )
    mixed.point_data["U"] = np.vstack([box.point_data["U"], [[np.nan] * 3]])
    kinds = mixed.celltypes
    number = np.full(mixed.n_cells, -1.0)
    number[kinds == 12] = np.arange(9)
    mixed.cell_data["number"] = number
    ghost = np.zeros(mixed.n_cells, np.uint8)
    ghost[np.flatnonzero(kinds == 12)[-1]] = 1
    mixed.cell_data["vtkGhostType"] = ghost
    volume = volume_mesh(mixed)
    assert_array_equal(volume.cell_arrays["number"], np.arange(8.0))
    assert set(volume.cell_arrays) == {"number"}
    check_sound(volume)
    with pytest.raises(FieldError, match=r"it spans \(0, 0, 0\) to \(1, 1, 1\) m"):
        sample_volume(volume, VELOCITY, np.full((1, 3), 49.0), scale=1.0)


def save_pieces(folder: Path) -> Path:
    """A partitioned set of two halves."""
    grid = unit_cube("hexahedron")
    left = grid.cell_centers().points[:, 0] < 0.5
    for k, half in enumerate((left, ~left)):
        grid.extract_cells(np.flatnonzero(half)).save(folder / f"flow_{k}.vtu")
    pieces = "".join(f'<Piece Source="flow_{k}.vtu"/>' for k in range(2))
    path = folder / "flow.pvtu"
    path.write_text(
        '<?xml version="1.0"?><VTKFile type="PUnstructuredGrid" version="1.0" byte_order="LittleEndian" '
        'header_type="UInt64"><PUnstructuredGrid GhostLevel="0">'
        '<PPointData><PDataArray type="Float64" Name="U" NumberOfComponents="3"/></PPointData>'
        '<PCellData><PDataArray type="Float64" Name="number"/></PCellData>'
        '<PPoints><PDataArray type="Float64" Name="Points" NumberOfComponents="3"/></PPoints>'
        f"{pieces}</PUnstructuredGrid></VTKFile>"
    )
    return path


def test_partitioned_sets_and_a_missing_or_damaged_piece(tmp_path: Path) -> None:
    path = save_pieces(tmp_path)
    check_sound(read_volume(path))
    whole = (tmp_path / "flow_1.vtu").read_bytes()
    (tmp_path / "flow_1.vtu").write_bytes(whole[: len(whole) // 2])
    with pytest.raises(FileError, match=r"flow_1\.vtu: the closing tag </VTKFile> is missing"):
        read_volume(path)
    (tmp_path / "flow_1.vtu").unlink()
    with pytest.raises(FileError, match=r"flow\.pvtu: 1 of its 2 pieces are missing, the first is flow_1\.vtu"):
        read_volume(path)
    path.write_text(path.read_text()[:-30])
    with pytest.raises(FileError, match=r"flow\.pvtu: its XML cannot be read"):
        read_volume(path)


def test_blocks_become_one_volume(tmp_path: Path) -> None:
    import pyvista

    grid = unit_cube("hexahedron")
    left = grid.cell_centers().points[:, 0] < 0.5
    halves = [grid.extract_cells(np.flatnonzero(half)) for half in (left, ~left)]
    for half in halves:
        half.clear_cell_data()
    halves[0].point_data["Y"] = np.zeros(halves[0].n_points)
    pyvista.MultiBlock(
        {"a": halves[0], "b": halves[1], "skin": grid.extract_surface(algorithm="dataset_surface")}
    ).save(tmp_path / "flow.vtm")
    volume = read_volume(tmp_path / "flow.vtm")
    check_sound(volume)
    assert "Y" in volume.partial
    with pytest.raises(FieldError, match=r"only some blocks of flow\.vtm have the array 'Y'\. Export it on all blocks"):
        sample_volume(volume, {"density": ("Y",)}, places_in(5), scale=1.0)
    (tmp_path / "flow" / "flow_1.vtu").unlink()
    with pytest.raises(FileError, match="1 of its 3 pieces are missing"):
        read_volume(tmp_path / "flow.vtm")


@pytest.mark.parametrize("share", [0.02, 0.3, 0.6, 0.95])
@pytest.mark.parametrize("suffix", [".vtu", ".vtk", ".msh"])
def test_files_cut_short_are_told(tmp_path: Path, suffix: str, share: float) -> None:
    import meshio
    import pyvista

    path = tmp_path / f"flow{suffix}"
    grid = unit_cube("tetra", n=3)
    if suffix == ".msh":
        meshio.write(path, pyvista.to_meshio(grid), file_format="gmsh")
    else:
        grid.save(path)
    whole = path.read_bytes()
    path.write_bytes(whole[: int(len(whole) * share)])
    with pytest.raises((FileError, FieldError), match=r"flow"):
        read_volume(path)


def test_files_that_are_no_volumes_are_told(tmp_path: Path) -> None:
    import meshio
    import pyvista

    skin = unit_cube("tetra").extract_surface(algorithm="dataset_surface")
    skin.save(tmp_path / "skin.vtk")
    with pytest.raises(FileError, match=r"skin\.vtk: holds a data set of kind PolyData, which has no volume cells"):
        read_volume(tmp_path / "skin.vtk")
    skin.cast_to_unstructured_grid().save(tmp_path / "skin.vtu")
    with pytest.raises(FileError, match=r"has no volume cells \(its cells: 192 of type triangle\)"):
        read_volume(tmp_path / "skin.vtu")
    meshio.write(tmp_path / "skin.msh", pyvista.to_meshio(skin), file_format="gmsh")
    with pytest.raises(FileError, match=r"has no volume cells \(its cells: 192 of type triangle\)"):
        read_volume(tmp_path / "skin.msh")
    (tmp_path / "flow.xyz").write_text("0 0 0")
    with pytest.raises(FileError, match=r"suffix '\.xyz' tells no known volume format\. Known suffixes are .*\.pvtu"):
        read_volume(tmp_path / "flow.xyz")
    (tmp_path / "empty.vtu").touch()
    with pytest.raises(FileError, match=r"empty\.vtu: is empty"):
        read_volume(tmp_path / "empty.vtu")
    with pytest.raises(FileError, match="there is no such file"):
        read_volume(tmp_path / "gone.vtu")
    with pytest.raises(FileError, match="is a folder"):
        read_volume(tmp_path)
    assert {".vtu", ".vtk", ".pvtu", ".vtm", ".msh"} <= set(volume_suffixes())


def test_grids_that_would_lead_vtk_astray_are_told() -> None:
    import pyvista

    grid = unit_cube("tetra", n=2)
    cells = np.array(grid.cells_dict[10])
    points = np.array(grid.points)
    cells[3, 2] = 999
    with pytest.raises(FileError, match="a cell uses point 999, but there are 27 points"):
        volume_mesh(pyvista.UnstructuredGrid(np.insert(cells, 0, 4, axis=1).ravel(), [10] * len(cells), points))
    short = pyvista.UnstructuredGrid(np.array([3, 0, 1, 2]), np.array([10], np.uint8), points)
    with pytest.raises(FileError, match="cell 0 is a tetra of 3 points, where 4 are needed"):
        volume_mesh(short)
    points[4] = np.nan
    with pytest.raises(FileError, match="the coordinates of point 4 are not finite"):
        volume_mesh(pyvista.UnstructuredGrid({10: grid.cells_dict[10]}, points))
