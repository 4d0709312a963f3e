"""The benchmark 2D-1 of Schaefer and Turek: drag, lift, pressure difference through control surfaces of three shapes.

What is published is known far better than any export tells it: the doubt that fluxmesh reports must hold it.
"""

from __future__ import annotations

from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose

import fluxmesh
from fluxmesh.case.read import read_case
from fluxmesh.field.volume import sample_volume
from fluxmesh.job.doubted import with_budget
from fluxmesh.job.run import run_case
from fluxmesh.surface.readers.volume_grid import read_volume
from tests.test_shipped_cases import script

FOLDER = Path(fluxmesh.__file__).parent.parent / "meshes" / "cylinder"
SHAPES = ["box", "tube", "ellipse"]
SOURCE = "Schaefer & Turek 1996, 2D-1; figures of Nabh 1998, John & Matthies 2001 (IJNMF 37:885-903)"
DRAG, LIFT, DROP = 5.57953523384, 0.010618948146, 0.11752016697
FORCE = 0.5 * 1.0 * 0.2**2 * 0.1 * 0.1  # rho U² D / 2 times the layer of 0.1 m, N: the coefficients are over it
DOUBT = "the doubt that fluxmesh itself reports"

Loads = dict[str, tuple[np.ndarray, np.ndarray]]


@cache
def result(folder: Path, name: str) -> dict[str, Any]:
    case = read_case(folder / f"{name}.toml")
    return with_budget(case, run_case(case)).data()


def loads(folder: Path, name: str) -> Loads:
    """Drag and lift coefficient and their doubt, by what they rest on."""
    data = result(folder, name)
    found = {way: data["hardware_load"][way] for way in ("from_walls", "from_balance")}
    found = {way: (np.array(load["force"]), np.array(load["force_uncertainty"])) for way, load in found.items()}
    found["reaction"] = (-np.array(data["reaction"]["force"]), np.array(data["reaction"]["force_uncertainty"]))
    return {way: (force[:2] / FORCE, doubt[:2] / FORCE) for way, (force, doubt) in found.items()}


# ---- through three surfaces -------------------------------------------------------------------


@pytest.mark.parametrize("name", SHAPES)
def test_drag_and_lift_through_the_surface_are_those_published(name: str, verify) -> None:
    (drag, lift), (drag_doubt, lift_doubt) = loads(FOLDER, name)["from_balance"]
    verify(
        what=f"Drag coefficient of a cylinder in a channel, Re = 20, from the balance through a {name}",
        source=SOURCE,
        expected=DRAG,
        got=drag,
        tolerance=drag_doubt,
        why=DOUBT,
        kind="benchmark",
    )
    assert drag_doubt < 0.005 * DRAG  # a twentieth would already say little
    assert drag == pytest.approx(DRAG, rel=2.5e-3)
    # the lift is 500 times less: what linear cells leave of the drag is nearly as large
    verify(
        what=f"Lift coefficient of a cylinder in a channel, Re = 20, from the balance through a {name}",
        source=SOURCE,
        expected=LIFT,
        got=lift,
        tolerance=lift_doubt,
        why=f"{DOUBT}: the drag is 500 times larger",
        kind="benchmark",
    )
    assert 0.05 * LIFT < lift_doubt < 0.25 * LIFT


@pytest.mark.parametrize("name", SHAPES)
def test_what_is_reported_is_the_load_from_the_balance_with_its_doubt(name: str) -> None:
    found = loads(FOLDER, name)
    for reaction, load in zip(found["reaction"], found["from_balance"]):
        assert_allclose(reaction, load, rtol=1e-12)
    shares = result(FOLDER, name)["doubt"]["budget"]["hardware_load.from_balance.force"]
    assert shares[0]["kind"] == "interpolation"
    assert shares[0]["share"] > 0.99


@pytest.mark.parametrize("name", SHAPES)
def test_what_must_vanish_does_so_within_its_doubt(name: str) -> None:
    data = result(FOLDER, name)
    assert abs(data["mass"]["residual"]) <= data["mass"]["residual_uncertainty"]
    left, doubt = (np.array(data["momentum"][key]) for key in ("residual", "residual_uncertainty"))
    assert (np.abs(left[:2]) <= doubt[:2]).all()
    assert abs(left[2]) < 1e-12 * FORCE
    assert data["verdict"]["closes"] is True
    front, back = (np.array(data["groups"][side]["pressure_force"]) for side in ("front", "back"))
    assert_allclose(front[2], -back[2], rtol=1e-12)
    assert abs(front[2]) > FORCE


@pytest.mark.parametrize("name", SHAPES)
def test_sharpened_the_drag_is_several_times_nearer(name: str) -> None:
    sharp = np.array(result(FOLDER, name)["sharpened"]["hardware_load"]["from_balance"]["force"])[0] / FORCE
    (drag, _), _ = loads(FOLDER, name)["from_balance"]
    assert abs(sharp - DRAG) < abs(drag - DRAG) / 5
    assert sharp == pytest.approx(DRAG, rel=5e-4)


# ---- at the wall, and at two points -----------------------------------------------------------


def test_drag_and_lift_from_the_sampled_wall_are_those_published(verify) -> None:
    (drag, lift), (drag_doubt, lift_doubt) = loads(FOLDER, "box")["from_walls"]
    for what, expected, got, doubt in (("Drag", DRAG, drag, drag_doubt), ("Lift", LIFT, lift, lift_doubt)):
        verify(
            what=f"{what} coefficient of a cylinder in a channel, Re = 20, from stresses sampled at its wall",
            source=SOURCE,
            expected=expected,
            got=got,
            tolerance=doubt,
            why=DOUBT,
            kind="benchmark",
        )
    assert drag_doubt < 1e-3 * DRAG
    assert lift_doubt < 0.05 * LIFT
    # the wall is the same in all three
    for name in SHAPES[1:]:
        assert_allclose(loads(FOLDER, name)["from_walls"][0], [drag, lift], rtol=1e-9)


WALL = """
[surface]
file = "wall.vtp"
closed = false
[fluid]
density = "1 kg/m^3"
[flow]
pressure = { array = "pressure" }
traction = { array = "wall_traction", acts_on = "wall" }
[groups.cylinder]
role = "wall"
rest = true
[anchor]
at = [0.2, 0.2, 0.05]
"""


def test_drag_and_lift_from_the_exported_wall_are_those_published(tmp_path: Path, verify) -> None:
    (tmp_path / "wall.vtp").write_bytes((FOLDER / "wall.vtp").read_bytes())
    (tmp_path / "wall.toml").write_text(WALL, encoding="utf-8")
    load = result(tmp_path, "wall")["hardware_load"]["from_walls"]
    found, doubt = (np.array(load[key])[:2] / FORCE for key in ("force", "force_uncertainty"))
    for k, (what, expected) in enumerate((("Drag", DRAG), ("Lift", LIFT))):
        verify(
            what=f"{what} coefficient of a cylinder in a channel, Re = 20, from the exported wall alone",
            source=SOURCE,
            expected=expected,
            got=found[k],
            tolerance=doubt[k],
            why=f"{DOUBT}, of 128 flat facets for a round wall",
            kind="benchmark",
        )
    assert doubt[0] < 1e-3 * DRAG
    assert doubt[1] < 0.05 * LIFT


def test_the_pressure_difference_is_that_published(verify) -> None:
    places = np.array([[0.15, 0.2, 0.05], [0.25, 0.2, 0.05]])
    volume = read_volume(FOLDER / "flow.vtu")
    front, back = sample_volume(volume, {"pressure": ("pressure",)}, places, scale=1.0).values["pressure"]
    verify(
        what="Pressure difference over a cylinder in a channel, Re = 20: p(0.15, 0.2) - p(0.25, 0.2)",
        source=SOURCE,
        expected=DROP,
        got=front - back,
        unit="Pa",
        tolerance=8e-5,
        why="the computed pressure is bilinear: 5.3e-5 Pa off itself, as scripts/make_cylinder.py prints",
        kind="benchmark",
    )
    assert 0.1172 < front - back < 0.1176  # the interval of 1996


def test_the_table_in_the_readme_is_the_one_computed() -> None:
    pytest.importorskip("skfem")
    text = (FOLDER.parent / "README.md").read_text(encoding="utf-8").splitlines()
    made = script("make_cylinder")
    lines = [line for name in SHAPES for line in made.rows(result(FOLDER, name), name, made.CELLS)]
    assert len(lines) == 4
    assert set(lines) <= set(text)
    assert set(made.HEAD.splitlines()) <= set(text)


# ---- the flow itself, and refinement ----------------------------------------------------------


@pytest.mark.long
def test_the_flow_is_the_published_one_and_half_as_many_cells_bring_four_times_the_doubt(tmp_path: Path) -> None:
    pytest.importorskip("skfem")
    flow = script("make_cylinder").make(tmp_path, 16)
    found = script("_cylinder_flow").coefficients(flow)
    assert found["residual"]["drag"] == pytest.approx(DRAG, rel=1e-4)
    assert found["residual"]["lift"] == pytest.approx(LIFT, rel=1e-3)
    assert found["surface"]["drag"] == pytest.approx(DRAG, rel=1e-3)
    assert found["points"]["pressure"] == pytest.approx(DROP, rel=3e-3)
    for way in ("from_walls", "from_balance"):
        (drag, lift), coarse = loads(tmp_path, "ellipse")[way]
        fine = loads(FOLDER, "ellipse")[way][1]
        assert abs(drag - DRAG) <= coarse[0] < 0.05 * DRAG
        assert abs(lift - LIFT) <= coarse[1]
        assert 2.5 < coarse[0] / fine[0] < 6.0, way
        assert coarse[1] > 1.5 * fine[1], way


def test_the_script_writes_what_is_shipped() -> None:
    volume = read_volume(FOLDER / "flow.vtu")
    assert sorted(volume.node_arrays) == ["pressure", "velocity", "viscous_stress"]
    assert sum(path.stat().st_size for path in FOLDER.iterdir()) < 1.5e6
    assert {path.stem for path in FOLDER.glob("*.toml")} == set(SHAPES)
