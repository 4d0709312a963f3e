"""Values sampled from a volume to one order more than its cells have: exactness, order, where nothing is known."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

import fluxmesh
from fluxmesh.case.read import read_case
from fluxmesh.errors import FieldError
from fluxmesh.field.volume import sample_volume
from fluxmesh.job import doubt
from fluxmesh.job.doubt import doubt_of
from fluxmesh.job.run import run_case
from fluxmesh.surface.readers.volume_grid import volume_mesh
from tests.conftest import CASE
from tests.test_volume_sampling import places_in, unit_cube

MESHES = Path(fluxmesh.__file__).parent.parent / "meshes"
SHAPES = ["tetra", "voxel", "hexahedron", "wedge"]


def quadratic(x: np.ndarray) -> np.ndarray:
    """Two quadratic fields with all their terms."""
    a, b, c = x.T
    return np.column_stack([1 + a - b + a * a - 2 * b * c + 0.5 * c * c + a * b, 3 - c + b * b - a * c + 0.3 * a * a])


def smooth(x: np.ndarray) -> np.ndarray:
    return np.sin(2 * x[:, 0]) * np.cos(3 * x[:, 1]) + np.exp(x[:, 2])


def sampled(grid, places: np.ndarray, sharpen: bool = True, name: str = "q", **options):
    options = {"scale": 1.0, **options}
    return sample_volume(volume_mesh(grid), {"field": (name,)}, places, sharpen=sharpen, **options)


@pytest.mark.parametrize("shape", SHAPES)
def test_a_quadratic_field_is_exact_inside_a_regular_mesh(shape: str) -> None:
    # inside, every node has its cells on all sides alike, so that the mean of their slopes is that of the field
    grid = unit_cube(shape, n=6)
    grid.point_data["q"] = quadratic(np.asarray(grid.points))
    places = places_in(500, 0.17, 0.83)
    assert np.abs(sampled(grid, places, sharpen=False).values["field"] - quadratic(places)).max() > 5e-3
    found = sampled(grid, places)
    assert_allclose(found.values["field"], quadratic(places), rtol=0, atol=1e-12)
    assert found.sharpened == 1.0
    # the same in another unit
    again = sampled(grid, places * 1e-3, scale=1e-3)
    assert_allclose(again.values["field"], quadratic(places), rtol=0, atol=1e-12)


def test_far_from_the_origin_few_digits_are_lost() -> None:
    grid = unit_cube("hexahedron", n=6)
    grid.point_data["q"] = quadratic(np.asarray(grid.points))
    away = np.array([3e3, -2e3, 5e3])
    places = places_in(500, 0.17, 0.83)
    grid.points = np.asarray(grid.points) + away
    assert_allclose(sampled(grid, places + away).values["field"], quadratic(places), rtol=0, atol=1e-10)


@pytest.mark.parametrize("shape", [*SHAPES, "pyramid"])
def test_the_sharpened_error_is_smaller_and_falls_faster(shape: str) -> None:
    places, errors = places_in(1500), []
    for n in (6, 12):
        grid = unit_cube(shape, n=n, size=0.0 if shape == "voxel" else 0.01)
        grid.point_data["q"] = smooth(np.asarray(grid.points))
        exact = smooth(places)
        plain, sharp = (sampled(grid, places, sharpen=sharpen).values["field"] for sharpen in (False, True))
        errors.append([np.abs(one - exact).mean() for one in (plain, sharp)])
    (plain, sharp), (finer_plain, finer_sharp) = errors
    assert sharp < 0.5 * plain
    assert finer_sharp < 0.35 * finer_plain
    assert plain / finer_plain == pytest.approx(4.0, rel=0.1)


def test_on_the_skin_half_of_what_the_cells_leave_is_told() -> None:
    # u = z² in the lowest of four cells, z = 0 to 1/4: there joined to z/4. The slopes are 1/4 at its foot (that of
    # the cell alone) and 1/2 at its head, so 1/2 (N_0 z/4 + N_1 (z - 1/4)/2) with N_1 = 4z is added: -z/8 + z²/2.
    grid = unit_cube("hexahedron", n=4)
    grid.point_data["q"] = np.asarray(grid.points)[:, 2] ** 2
    places = np.column_stack([places_in(50, 0.3, 0.7)[:, :2], np.linspace(0.0, 0.25, 50)])
    z = places[:, 2]
    assert_allclose(sampled(grid, places).values["field"], z / 4 - z / 8 + z * z / 2, rtol=0, atol=1e-13)


def test_values_in_cells_are_joined_and_a_linear_field_is_exact() -> None:
    grid = unit_cube("hexahedron", n=6)
    grid.cell_data["q"] = grid.cell_centers().points @ [1.0, -2.0, 3.0]
    grid.point_data["T"] = quadratic(np.asarray(grid.points))[:, 0]
    places = places_in(500, 0.17, 0.83)
    both = sample_volume(
        volume_mesh(grid), {"velocity": ("q",), "temperature": ("T",)}, places, scale=1.0, sharpen=True
    )
    assert_allclose(both.values["velocity"], places @ [1.0, -2.0, 3.0], rtol=0, atol=1e-12)
    assert_allclose(both.values["temperature"], quadratic(places)[:, 0], rtol=0, atol=1e-12)
    assert both.location == {"velocity": "cells", "temperature": "nodes"}
    assert list(both.values) == ["velocity", "temperature"]
    # values in cells alone
    assert_array_equal(sampled(grid, places).values["field"], both.values["velocity"])


def test_quadratic_cells_keep_their_values_and_it_is_told() -> None:
    grid = unit_cube("tetra", quadratic=True)
    grid.point_data["q"] = smooth(np.asarray(grid.points))
    places = places_in(400)
    plain, sharp = (sampled(grid, places, sharpen=sharpen) for sharpen in (False, True))
    assert_array_equal(sharp.values["field"], plain.values["field"])
    assert sharp.sharpened == 0.0
    assert plain.sharpened is None


def test_what_is_positive_at_all_nodes_stays_positive() -> None:
    grid = unit_cube("hexahedron", n=5)
    x = np.asarray(grid.points)[:, 0]
    # a steep front: its slope, taken on to the nodes before it, leads below zero there
    grid.point_data["q"] = np.where(x > 0.5, 1.0, 1e-3)
    grid.point_data["signed"] = np.where(x > 0.5, 1.0, 1e-3) - 1e-3
    places = places_in(500, 0.02, 0.98)
    assert sampled(grid, places, name="signed").values["field"].min() < -1e-2
    assert sampled(grid, places).values["field"].min() > 0.0


def test_places_outside_take_the_nearest_value_sharpened_too() -> None:
    grid = unit_cube("hexahedron", n=4)
    grid.point_data["q"] = np.asarray(grid.points)[:, 0] ** 2
    inside = np.column_stack([np.full((20, 1), 0.0), places_in(20, 0.3, 0.7)[:, :2]])[:, [1, 2, 0]]
    below = inside - [0, 0, 5e-3]
    found = sampled(grid, below, reach=1e-2)
    assert not found.exact.any()
    assert_allclose(found.values["field"], sampled(grid, inside).values["field"], rtol=0, atol=1e-12)
    assert_allclose(found.values["field"], inside[:, 0] ** 2, rtol=0, atol=1e-12)


# ---- in the doubt of a case -------------------------------------------------------------------

LINEAR = MESHES / "cylinder" / "ellipse.toml"


def interpolation(told) -> float:
    path = ("hardware_load", "from_balance", "force")
    return sum(one.half_width for one in told.budget.shares(path) if one.kind == "interpolation")


def test_the_cells_of_a_volume_bring_a_doubt() -> None:
    case = read_case(LINEAR)
    told = doubt_of(case, run_case(case))
    assert interpolation(told) > 5e-7
    assert any("between their nodes" in note for note in told.notes)


@pytest.mark.parametrize("quadratic", [False, True])
def test_of_quadratic_cells_the_doubt_says_that_it_knows_nothing(block, quadratic: bool) -> None:
    volume = unit_cube("tetra", n=3, quadratic=quadratic)
    volume.point_data["U"] = np.column_stack([2 + smooth(np.asarray(volume.points)), *np.zeros((2, volume.n_points))])
    volume.save(block.folder / "volume.vtu")
    start, end = CASE.index("[flow]"), CASE.index("[groups.feed]")
    lines = '[flow]\nvolume = "volume.vtu"\nvelocity = { array = "U" }\n'
    case = read_case(block.write(CASE[:start] + lines + CASE[end:]))
    told = doubt_of(case, run_case(case))
    found = {one.kind: one.half_width for one in told.budget.shares(("groups", "feed", "mass_flow"))}
    assert (found["interpolation"] == 0.0) == quadratic
    said = [note for note in told.notes if "quadratic cells" in note]
    assert len(said) == quadratic
    assert not quadratic or said[0].startswith("100.00% of the quadrature points lie in quadratic cells")


def test_sharpened_values_that_are_no_flow_are_left_out_and_that_is_told(monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(case, shape):
        raise FieldError("an absolute pressure is below zero")

    monkeypatch.setattr(doubt, "lay_sharpened", refuse)
    case = read_case(LINEAR)
    told = doubt_of(case, run_case(case))
    assert interpolation(told) == 0.0
    assert any("without that of interpolation in the cells of the volume: an absolute" in note for note in told.notes)
