"""The doubt of figures: against hand formulas, against the case run again, and against draws."""

from __future__ import annotations

import json
from dataclasses import replace
from math import sqrt
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh import balance_of, lay_flow, run_case
from fluxmesh.assess.doubt import Budget, Contribution, figures, with_uncertainties
from fluxmesh.assess.doubt.budget import left_after_sharpening
from fluxmesh.assess.doubt.draws import draw_inputs
from fluxmesh.assess.doubt.inputs import NORMAL_95
from fluxmesh.assess.doubt.levers import parts_of
from fluxmesh.assess.doubt.model import BalanceModel
from fluxmesh.assess.doubt.off_facets import off_facets
from fluxmesh.assess.doubt.sampling import SampledErrors, sampling_contributions
from fluxmesh.balance.balance import balance_table
from fluxmesh.case.model import Case
from fluxmesh.case.read import parse_case, read_case
from fluxmesh.errors import FieldError
from fluxmesh.field.patches import sharpened_table
from fluxmesh.integral.table import IntegralTable, column_slice
from fluxmesh.job.doubt import DoubtOfFigures, doubt_of
from fluxmesh.job.doubtful import doubtful_inputs
from fluxmesh.job.measured import measured_in, moved_case
from fluxmesh.job.outcome import Outcome
from tests.conftest import CASE
from tests.flows import beltrami
from tests.solids import frustum, odd_body, pipe

MESHES = Path(__file__).parent.parent / "meshes"
FEED, DRAIN, SHELL = 'role = "inlet"\n', 'role = "outlet"\n', 'role = "wall"\n'
NO_ARRAYS = (
    CASE.replace('velocity = { array = "U" }\npressure = { array = "p", head = "removed" }\n', "")
    .replace('traction = { array = "tau" }\n', "")
    .replace("[flow]\n", "")
)
GAS = 'law = "ideal-gas"\ngas_constant = "287 +/- 3 J/(kg K)"\nheat_ratio = 1.4\ntemperature = "300 +/- 6 K"\n'
DENSITY = '"1000 kg/m^3"'
DOUBTFUL = '"1000 +/- 40 kg/m^3"'


def supplied(feed: str, drain: str, text: str = NO_ARRAYS) -> str:
    return text.replace(DENSITY, DOUBTFUL).replace(FEED, FEED + feed).replace(DRAIN, DRAIN + drain)


@pytest.fixture
def rough(block):
    """The block with fields that vary, so that no integral is like another."""
    mesh = block.mesh()
    rng = np.random.default_rng(3)
    nodes, faces = mesh.n_points, mesh.n_cells
    mesh.point_data["U"] = rng.normal([2.0, 0.3, -0.2], 0.4, (nodes, 3))
    mesh.point_data["p"] = rng.normal(500.0, 200.0, nodes)
    mesh.point_data["p_abs"] = rng.normal(100_500.0, 200.0, nodes)
    mesh.point_data["T"] = rng.normal(310.0, 9.0, nodes)
    mesh.point_data["grad"] = rng.normal(0.0, 3.0, (nodes, 9))
    mesh.cell_data["tau"] = rng.normal(0.0, 5.0, (faces, 3))
    mesh.cell_data["rate"] = rng.normal(0.0, 20.0, faces)
    block.save(mesh)
    return block


def done(block: Any, text: str) -> tuple[Case, Outcome]:
    block.write(text)
    case = read_case(block.case)
    return case, run_case(case)


def doubted(block: Any, text: str, **options: Any) -> tuple[Outcome, DoubtOfFigures]:
    case, outcome = done(block, text)
    return outcome, doubt_of(case, outcome, sharpen=False, **options)


def model_of(case: Case, outcome: Outcome) -> BalanceModel:
    from fluxmesh.job.doubt import _head

    rows = np.arange(len(outcome.balance.setting.groups))
    found = doubtful_inputs(case, outcome, rows, {})
    parts = parts_of(outcome.balance.table, head=_head(outcome.flow, rows), mass_given=outcome.flow.mass_flux.present())
    return BalanceModel(outcome.balance, parts, found.recipe, found.inputs, found.further, found.rerun)


# ---- algebra on the table against the case run again ------------------------------------------

ARRAYS = CASE.replace(DENSITY, DOUBTFUL).replace('mass = "2 kg"', 'mass = "2 +/- 0.3 kg"')
KINEMATIC = 'pressure = { array = "p", head = "removed", kind = "kinematic", datum = [0.1, 0.2, 0.3] }'
PRESSURE = 'pressure = { array = "p", head = "removed" }'
BY_HAND = {
    "arrays with the head removed": ARRAYS,
    "kinematic pressure": ARRAYS.replace(PRESSURE, KINEMATIC),
    "absolute pressure and viscosity": ARRAYS.replace(
        PRESSURE, 'pressure = { array = "p_abs", kind = "absolute" }'
    )
    .replace('"100 kPa"', '"100 +/- 0.1 kPa"')
    .replace('traction = { array = "tau" }', 'velocity_gradient = { array = "grad" }')
    .replace("[flow]", 'viscosity = "1 +/- 0.2 Pa s"\n[flow]'),
    "mass flux of faces": ARRAYS.replace("[flow]\n", '[flow]\nmass_flux = { array = "rate" }\n'),
    "rates of storage": ARRAYS + '[storage]\nmass_rate = "30 +/- 4 kg/s"\nmomentum_rate = [1, 2, 3]\n',
    "flow and pressure of ports": supplied(
        'flow_rate = "2 +/- 0.1 m^3/s"\npressure = "30 +/- 2 kPa"\n',
        'mass_flow = "1900 +/- 80 kg/s"\npressure = "110 +/- 3 kPa"\npressure_kind = "absolute"\n',
    ).replace('"100 kPa"', '"100 +/- 1 kPa"'),
    "a port solved from continuity": supplied(
        'speed = "2 +/- 0.1 m/s"\npressure = "30 kPa"\n', 'from_continuity = true\ndensity = "900 +/- 30 kg/m^3"\n'
    ),
    "profiles": supplied(
        'flow_rate = "2 +/- 0.1 m^3/s"\nprofile = "laminar"\n',
        'speed = "2 +/- 0.3 m/s"\nprofile = "power-law"\npressure = 0\n',
    ),
    "gas in ports": supplied(
        'speed = "50 +/- 2 m/s"\npressure = "100 +/- 4 kPa"\n',
        'from_continuity = true\npressure = "120 +/- 2 kPa"\npressure_kind = "absolute"\ntemperature = "280 +/- 5 K"\n',
        NO_ARRAYS.replace(f"density = {DENSITY}\n", GAS).replace('"100 kPa"', '"100 +/- 1 kPa"'),
    ),
    "gas in arrays": CASE.replace(f"density = {DENSITY}\n", GAS).replace(
        PRESSURE, 'pressure = { array = "p_abs", kind = "absolute" }'
    ).replace('"100 kPa"', '"100 +/- 0.1 kPa"'),
    "temperatures in an array": CASE.replace(f"density = {DENSITY}\n", GAS.replace('temperature = "300 +/- 6 K"\n', ""))
    .replace(PRESSURE, 'pressure = { array = "p_abs", kind = "absolute" }\ntemperature = { array = "T" }'),
    "a moving surface": ARRAYS + "[frame]\nvelocity = [0.5, 0.2, 0]\nacceleration = [1, 0, 2]\n",
}  # fmt: skip


@pytest.mark.parametrize("name", BY_HAND)
def test_algebra_gives_what_the_case_with_other_numbers_gives(rough, name: str) -> None:
    case, outcome = done(rough, BY_HAND[name])
    model = model_of(case, outcome)
    assert model.inputs
    assert not model.rerun
    rng = np.random.default_rng(5)
    values = model.values + rng.uniform(-1, 1, len(model.inputs)) * [one.half_width for one in model.inputs]
    moved = case
    for keys, value in zip(measured_in(case), values, strict=True):
        moved = moved_case(moved, keys, float(value))
    again = run_case(moved)
    assert_allclose(
        model.balance(values).table.values, again.balance.table.values, rtol=1e-11,
        atol=1e-12 * np.abs(again.balance.table.values).max(axis=0).max(),
    )  # fmt: skip
    told = model.figures(values)
    wanted = figures(again.balance, energy=again.energy, carried=again.carried, losses=again.losses)
    for spot in told.spots:
        size = np.abs(wanted[spot.path]).max() + np.abs(outcome.balance.momentum.size()) * (spot.unit in ("N", "N m"))
        assert_allclose(told[spot.path], wanted[spot.path], rtol=1e-9, atol=1e-11 * size + 1e-11, err_msg=spot.name)


def test_contents_of_a_volume_go_with_the_density_of_the_fluid() -> None:
    path = MESHES / "impeller" / "impeller_volume.toml"
    text = path.read_text("utf-8").replace('"998.2 kg/m^3"', '"998.2 +/- 50 kg/m^3"')
    case = parse_case(text.encode(), path)
    outcome = run_case(case)
    model = model_of(case, outcome)
    told = model.figures(np.array([950.0]))
    again = run_case(moved_case(case, ("fluid", "density"), 950.0))
    wanted = figures(again.balance, energy=again.energy)
    for spot in told.spots:
        assert_allclose(told[spot.path], wanted[spot.path], rtol=1e-9, atol=1e-12, err_msg=spot.name)


@pytest.mark.parametrize(
    ("text", "inputs"),
    [
        (
            CASE.replace(f"density = {DENSITY}\n", GAS)
            .replace(PRESSURE, 'pressure = { array = "p" }')
            .replace('"100 kPa"', '"100 +/- 1 kPa"'),
            {"fluid.ambient_pressure"},
        ),
        (
            ARRAYS + '[frame]\nrotation = { rate = "2 +/- 0.1 rad/s", axis = [1, 0, 0] }\n',
            {"frame.rotation.rate"},
        ),
        (
            supplied(
                'flow_rate = "0 +/- 0.1 m^3/s"\npressure = 0\n',
                'speed = "1 m/s"\nprofile = "power-law"\nexponent = "7 +/- 1"\npressure = 0\n',
            ),
            {"groups.feed.flow_rate", "groups.drain.exponent"},
        ),
    ],
    ids=["ambient pressure of a gas", "rate of turning", "no flow, and an exponent"],
)
def test_what_no_algebra_reaches_is_run_again(rough, text: str, inputs: set[str]) -> None:
    case, outcome = done(rough, text)
    model = model_of(case, outcome)
    assert {model.inputs[k].name for k in model.rerun or {}} == inputs
    middle, slope = model.sensitivity()
    for keys, measured in measured_in(case).items():
        if ".".join(keys) not in inputs:
            continue
        k = [one.name for one in model.inputs].index(".".join(keys))
        step = model.inputs[k].standard
        up, down = (run_case(moved_case(case, keys, measured.value + s * step)).balance for s in (1, -1))
        path = ("groups", "drain", "momentum_flux")
        if "flow_rate" in keys:
            path = ("groups", "feed", "mass_flow")
        wanted = (figures(up)[path] - figures(down)[path]) / 2
        assert_allclose(slope.linear[k][middle.spot(path).slice], wanted, rtol=1e-9, atol=1e-12)
        assert np.abs(wanted).max() > 0.0
    told = doubt_of(case, outcome, sharpen=False, draws=2000)
    assert any("run again" in note for note in told.notes)
    assert told.drawn is not None


def test_every_number_with_a_plus_minus_is_an_input(rough) -> None:
    text = BY_HAND["flow and pressure of ports"].replace("[surface]\n", '[surface]\nweld = "1 +/- 0.1 mm"\n')
    case, _ = done(rough, text)
    names = {".".join(keys) for keys in measured_in(case)}
    assert names == {
        "fluid.density", "fluid.ambient_pressure", "groups.feed.flow_rate", "groups.feed.pressure",
        "groups.drain.mass_flow", "groups.drain.pressure",
    }  # fmt: skip


# ---- against formulas by hand -------------------------------------------------------------------

PLATE = (
    NO_ARRAYS.replace(DENSITY, '"1000 +/- 10 kg/m^3"')
    .replace('groups = { array = "region" }\n', "")
    .replace("gravity = [0, 0, -9.80665]\n", "")
    .replace("tag = 1\n", 'pick = { normal = [-1, 0, 0], near = [0, 0.5, 0.5] }\nflow_rate = "3 +/- 0.06 m^3/s"\n')
    .replace("tag = 2\n", "pick = { normal = [0, 1, 0], near = [0.5, 1, 0.5] }\nfrom_continuity = true\n")
    .replace("tag = 3\n", "rest = true\n")
    .replace(FEED, FEED + "pressure = 0\n")
    .replace(DRAIN, DRAIN + "pressure = 0\n")
)


def test_a_jet_turned_by_a_plate(block) -> None:
    # F = rho Q² / A in both directions: u_r² = u_r(rho)² + (2 u_r(Q))²
    outcome, told = doubted(block, PLATE)
    force = outcome.balance.load.from_balance.force
    assert_allclose(force, [9000.0, -9000.0, 0.0], atol=1e-9)
    share = sqrt(0.01**2 + (2 * 0.02) ** 2)
    widths = told.half_widths()
    assert_allclose(widths["hardware_load", "from_balance", "force"], [9000 * share, 9000 * share, 0], atol=1e-6)
    # the second port is solved, so mass closes whatever the flow is
    assert widths["groups", "drain", "mass_flow"] == pytest.approx(3000 * sqrt(0.01**2 + 0.02**2), rel=1e-9)
    assert widths["mass", "residual"] < 1e-10
    # the force acts at the middle of each port: the moment about the origin is 0.5 (F_y + F_x)
    shares = told.budget.shares(("hardware_load", "from_balance", "force"))
    assert [one.name for one in shares[:2]] == ["groups.feed.flow_rate", "fluid.density"]
    assert shares[0].share == pytest.approx(0.04**2 / share**2, rel=1e-9)
    assert shares[1].share == pytest.approx(0.01**2 / share**2, rel=1e-9)
    assert sum(one.share for one in shares) == pytest.approx(1.0, rel=1e-12)


def test_draws_of_the_jet_are_exact_not_linear(block) -> None:
    # with 20 % on the flow, E(Q²) = Q² (1 + u²) and the force is skewed
    _, told = doubted(block, PLATE.replace("0.06", "1.2"), draws=400_000, seed=1)
    drawn = told.drawn
    at = told.figures.spot(("hardware_load", "from_balance", "force")).start
    u, r = 0.4 / NORMAL_95, 0.01 / NORMAL_95
    exact = sqrt((1 + r**2) * (1 + 6 * u**2 + 3 * u**4) - (1 + u**2) ** 2)
    assert_allclose(drawn.mean[at], 9000 * (1 + u**2), rtol=4 * exact / sqrt(400_000))
    assert_allclose(drawn.standard[at], 9000 * exact, rtol=0.01)
    low, high = drawn.symmetric[at]
    assert_allclose(low, 9000 * (1 - 0.4) ** 2, rtol=0.02)
    assert_allclose(high, 9000 * (1 + 0.4) ** 2, rtol=0.02)


def test_a_density_used_in_many_places_is_one_input(block) -> None:
    text = supplied('speed = "2 m/s"\npressure = 0\n', 'speed = "2 m/s"\npressure = 0\n')
    _, told = doubted(block, text)
    widths = told.half_widths()
    # what enters and what leaves go up and down together: 4 % of 4000 N each, and nothing is left of it
    for name in ("feed", "drain"):
        assert_allclose(widths["groups", name, "momentum_flux"][0], 160.0, rtol=1e-9)
        assert_allclose(widths["groups", name, "mass_flow"], 80.0, rtol=1e-9)
    assert widths["mass", "residual"] < 1e-9
    load = widths["hardware_load", "from_balance", "force"]
    assert load[0] < 1e-6
    assert_allclose(load[2], 40 * 9.80665, rtol=1e-9)  # only the weight of the water held
    assert_allclose(widths["fluid", "mass"], 40.0, rtol=1e-9)
    apart = sqrt(2) * 160.0
    assert load[0] < apart / 1e6


def test_a_common_ambient_pressure_cancels_over_a_closed_surface(rough) -> None:
    _, told = doubted(rough, BY_HAND["absolute pressure and viscosity"])
    shares = {one.name: one for one in told.budget.shares(("hardware_load", "from_walls", "force"))}
    assert shares["fluid.ambient_pressure"].half_width == pytest.approx(0.0, abs=1e-9)
    # but not at one port: 100 Pa on 1 m²
    port = {one.name: one for one in told.budget.shares(("groups", "feed", "pressure_force"))}
    assert port["fluid.ambient_pressure"].half_width == pytest.approx(100.0, rel=1e-9)


def test_hardware_mass_is_in_the_reaction_only(block) -> None:
    _, told = doubted(block, CASE.replace('mass = "2 kg"', 'mass = "2 +/- 0.1 kg"'))
    widths = told.half_widths()
    assert_allclose(widths["reaction", "force"], [0, 0, 0.980665], atol=1e-8)
    assert_allclose(widths["reaction", "moment"], [0.980665 / 2, 0.980665 / 2, 0], atol=1e-8)
    assert_allclose(widths["hardware_load", "from_balance", "force"], 0, atol=1e-8)


def test_linear_law_and_draws_agree_where_doubts_are_small(rough) -> None:
    text = BY_HAND["flow and pressure of ports"].replace('"2 kg"', '"2 +/- 0.01 kg"')
    for wide, narrow in (("+/- 0.1 m^3", "+/- 0.002 m^3"), ("+/- 80", "+/- 2"), ("+/- 40", "+/- 0.5")):
        assert wide in text
        text = text.replace(wide, narrow)
    text = text.replace("+/- 2 kPa", "+/- 20 Pa").replace("+/- 3 kPa", "+/- 30 Pa").replace("+/- 1 kPa", "+/- 10 Pa")
    _, told = doubted(rough, text, draws=100_000, seed=2)
    linear, drawn = told.budget.half_widths, told.drawn
    checked = 0
    for ends in (drawn.symmetric, drawn.shortest):
        assert (ends[:, 0] <= ends[:, 1])[np.isfinite(drawn.mean)].all()
    for spot in told.figures.spots:
        if "relative" in spot.path[-1]:
            continue  # cannot fall below zero
        for k in range(spot.start, spot.start + spot.count):
            half = np.ptp(drawn.symmetric[k]) / 2
            floor = 1e-9 * np.abs(told.figures.values[spot.slice]).max() + 1e-9
            assert abs(linear[k] - half) < 0.02 * half + floor, spot.name
            checked += half > floor
    assert checked > 60


def test_draws_are_those_of_the_model_figure_by_figure(rough) -> None:
    for name in ("flow and pressure of ports", "gas in ports", "kinematic pressure", "rates of storage"):
        case, outcome = done(rough, BY_HAND[name])
        model = model_of(case, outcome)
        middle, slope = model.sensitivity()
        for values in draw_inputs(model.inputs, 1000, seed=9)[:3]:
            drawn = model.summary(np.repeat(values[None], 2, axis=0), middle, slope)
            wanted = middle.like(model.figures(values))
            for spot in middle.spots:
                expanded = spot.path[0] in ("energy", "release", "losses") or spot.path[-1] in (
                    "swirl", "mach_number", "relative_without_mean_pressure",
                )  # fmt: skip
                size = np.abs(wanted[spot.slice]).max() + 1e-6 * model.base.momentum.size()
                if spot.path[0] == "energy":
                    size += wanted[middle.spot(("energy", "size")).start]
                assert_allclose(
                    drawn.mean[spot.slice], wanted[spot.slice], rtol=2e-3 if expanded else 1e-9,
                    atol=(2e-3 if expanded else 1e-9) * size, err_msg=f"{name}: {spot.name}",
                )  # fmt: skip


def test_the_same_seed_gives_the_same_draws(block) -> None:
    one, same, other = (doubted(block, PLATE, draws=2000, seed=seed)[1].drawn for seed in (1, 1, 2))
    assert_allclose(one.mean, same.mean, rtol=0, atol=0)
    assert (one.standard != other.standard).any()


def test_a_rectangular_input_counts_as_its_bounds(block) -> None:
    _, normal = doubted(block, PLATE)
    _, told = doubted(block, PLATE, shapes={"fluid.density": "rectangular"}, draws=100_000)
    share = {one.name: one.half_width for one in told.budget.shares(("fluid", "mass"))}
    before = {one.name: one.half_width for one in normal.budget.shares(("fluid", "mass"))}
    assert share["fluid.density"] == pytest.approx(before["fluid.density"] * NORMAL_95 / sqrt(3), rel=1e-9)
    mass = told.figures.spot(("fluid", "mass")).start
    assert_allclose(told.drawn.symmetric[mass], [990.5, 1009.5], atol=0.1)
    with pytest.raises(FieldError, match=r"fluid\.viscosity"):
        doubted(block, PLATE, shapes={"fluid.viscosity": "rectangular"})


# ---- beside the figures in the result -------------------------------------------------------------

SHIPPED = [
    "header/header.toml",
    "manifold/manifold_coarse.toml",
    "guide_vane/guide_vane.toml",
    "impeller/impeller.toml",
    "impeller/impeller_volume.toml",
    "rotor/rotor.toml",
]
_OF_THE_CASE = {  # no figures: the case says them, or they are judged, not measured
    "verdict", "inputs", "storage", "reported", "doubts", "notes", "assumptions", "cautions",
}  # fmt: skip


def numbers(data: Any, above: tuple[str, ...] = ()) -> dict[tuple[str, ...], Any]:
    """Numbers and vectors of a result by path."""
    if isinstance(data, dict):
        return {k: v for key, value in data.items() for k, v in numbers(value, (*above, key)).items()}
    if isinstance(data, list) and data and isinstance(data[0], dict):
        return {k: v for n, value in enumerate(data) for k, v in numbers(value, (*above, str(n))).items()}
    known = isinstance(data, float) or (isinstance(data, list) and data and isinstance(data[0], float))
    return {above: data} if known else {}


@pytest.mark.parametrize("file", SHIPPED)
def test_every_reported_figure_is_in_the_vector_at_its_place(file: str) -> None:
    outcome = run_case(read_case(MESHES / file))
    told = figures(outcome.balance, energy=outcome.energy, carried=outcome.carried, losses=outcome.losses)
    reported = numbers(outcome.data())
    for spot in told.spots:
        assert_allclose(told[spot.path], np.atleast_1d(reported[spot.path]), rtol=0, atol=0, err_msg=spot.name)
        assert spot.vector == isinstance(reported[spot.path], list)
    given = {("angular_momentum", "about"), ("reaction", "at")}
    missing = {
        path for path in reported
        if path[0] not in _OF_THE_CASE and path not in given and (path[0] != "frame" or path[1] == "about_axis")
    } - {spot.path for spot in told.spots}  # fmt: skip
    assert missing == set()


def test_doubts_stand_beside_their_figures_in_the_same_shape(rough) -> None:
    outcome, told = doubted(rough, BY_HAND["flow and pressure of ports"])
    before = outcome.data()
    data = told.beside(before)
    json.dumps(data, allow_nan=False)
    found = 0

    def look(table: dict[str, Any]) -> None:
        nonlocal found
        for key, value in table.items():
            if isinstance(value, dict):
                look(value)
            elif key.endswith("_uncertainty"):
                found += 1
                figure = table[key.removesuffix("_uncertainty")]
                assert np.shape(value) == np.shape(figure)
                assert np.min(value) >= 0.0

    look(data)
    known = {spot.path for spot in told.figures.spots}
    assert found >= len(known) - 5  # what is null in the result has none
    assert "force_uncertainty" in data["reaction"]
    assert data["doubt"]["budget"]["reaction.force"][0]["share"] > 0.3
    # without the new keys the result is what it was
    assert with_uncertainties(before, {}) == before


def test_a_list_of_tables_keeps_its_doubts_in_place() -> None:
    data = {"losses": [{"coefficient": 1.0}, {"coefficient": None}]}
    told = with_uncertainties(data, {("losses", "0", "coefficient"): 0.1, ("losses", "1", "coefficient"): 0.1})
    assert told == {"losses": [{"coefficient": 1.0, "coefficient_uncertainty": 0.1}, {"coefficient": None}]}


# ---- the budget -------------------------------------------------------------------------------------


def test_errors_of_the_mesh_add_with_their_signs_and_all_else_in_quadrature(block) -> None:
    _, outcome = done(block, CASE)
    told = figures(outcome.balance)
    count = told.values.size

    def both(first: float, second: float) -> float:
        parts = (
            Contribution("a", "interpolation", np.full(count, abs(first)), np.full(count, first)),
            Contribution("b", "geometry", np.full(count, abs(second)), np.full(count, second)),
            Contribution("c", "input", np.full(count, 3.0)),
            Contribution("d", "input", np.full(count, 4.0)),
        )
        return float(Budget(told, parts).half_widths[told.spot(("mass", "residual")).start])

    assert both(0.0, 0.0) == pytest.approx(5.0)
    assert both(8.0, 4.0) == pytest.approx(sqrt(25 + (1.5 * 12) ** 2))
    assert both(8.0, -4.0) == pytest.approx(sqrt(25 + (1.5 * 4) ** 2))
    # errors that seem to cancel are not believed to do so wholly
    assert both(8.0, -8.0) == pytest.approx(sqrt(25 + (1.5 * 0.25 * 16) ** 2))


def test_shares_are_of_what_the_sources_make_together(block) -> None:
    _, outcome = done(block, CASE)
    told = figures(outcome.balance)
    count = told.values.size
    parts = (
        Contribution("a", "interpolation", np.full(count, 12.0), np.full(count, 8.0)),
        Contribution("b", "geometry", np.full(count, 6.0), np.full(count, -4.0)),
        Contribution("c", "input", np.full(count, 3.0)),
    )
    # interpolation and geometry leave 1.5 × 4 = 6 together, which they share as 12² : 6²
    shares = {one.name: one for one in Budget(told, parts).shares(("mass", "residual"))}
    whole = 36.0 + 9.0
    assert [shares[name].share for name in "abc"] == pytest.approx([0.8 * 36 / whole, 0.2 * 36 / whole, 9 / whole])
    assert shares["a"].half_width == pytest.approx(sqrt(0.8 * 36))
    sharp = Budget(told, parts, 0.25)
    assert sharp.sharpened[told.spot(("mass", "residual")).start] == pytest.approx(sqrt((0.25 * 6) ** 2 + 9))


def test_a_mesh_that_sharpening_changes_much_is_little_the_better_for_it(rough) -> None:
    _, outcome = done(rough, CASE)
    table = outcome.balance.table

    def changed(share: float) -> IntegralTable:
        values = table.values.copy()
        values[0, column_slice("dynamic_pressure_area")] *= 1 + share
        return IntegralTable(values, table.origin)

    assert left_after_sharpening(table, changed(0.01), None) == pytest.approx(0.18, rel=1e-9)
    assert left_after_sharpening(table, changed(1e-6), None) == 0.05
    assert left_after_sharpening(table, changed(0.3), None) == 0.5
    larger = table.values.copy()
    larger[:, column_slice("area")] *= 1.02
    assert left_after_sharpening(table, changed(0.01), IntegralTable(larger, table.origin)) == pytest.approx(0.36)
    values = table.values.copy()
    values[:, column_slice("dynamic_pressure_area")] = 0.0
    still = IntegralTable(values, table.origin)
    assert left_after_sharpening(still, still, None) == 0.5


def test_plane_facets_tell_all_of_their_fields_and_uniform_fields_nothing_new(rough) -> None:
    _, outcome = done(rough, CASE)
    flat = outcome.balance.table
    values = flat.values.copy()
    values[:, column_slice("mass_flow")] += 7.0
    bent = IntegralTable(values, flat.origin)
    found = off_facets(flat, bent).column("mass_flow") - flat.column("mass_flow")
    assert_allclose(found, [0.0, 0.0, 7.0], atol=1e-9)  # the ports are plane, the shell is not
    # a bent surface under fields that are uniform differs by its geometry alone, and that does not count
    surface = frustum(0.5, 0.7, 1.0, 12, 2).surface({"wall": "wall"})
    origin = np.zeros(3)
    flow = lay_flow(surface, density=900.0, velocity=(1.0, 2.0, -0.5), pressure=3000.0)
    patches = [sharpened_table(surface, flow, facets_are_geometry=flat, origin=origin) for flat in (True, False)]
    for name in ("area", "pressure_force", "momentum_flux"):
        assert np.abs(patches[0].column(name) - patches[1].column(name)).max() > 0.01
    mixed = off_facets(*patches)
    for name in ("pressure_force", "moment_of_pressure", "mass_flow", "momentum_flux", "moment_of_momentum_flux"):
        assert_allclose(mixed.column(name), patches[0].column(name), rtol=1e-9, atol=1e-6, err_msg=name)


def test_a_component_without_error_of_its_own_is_not_believed_to_have_none(block) -> None:
    _, outcome = done(block, CASE)
    told = figures(outcome.balance)
    error = np.zeros(told.values.size)
    place = told.spot(("momentum", "residual")).slice
    error[place] = [10.0, 0.0, 0.0]
    widths = Budget(told, (Contribution("a", "interpolation", np.abs(error), error),)).half_widths[place]
    assert_allclose(widths, [15.0, 1.5, 1.5])


def test_the_relative_residual_has_the_doubt_of_the_residual(block) -> None:
    text = supplied('flow_rate = "2 +/- 0.1 m^3/s"\npressure = 0\n', 'speed = "2 m/s"\npressure = 0\n')
    _, told = doubted(block, text.replace('speed = "2 m/s"', 'speed = "2.00001 m/s"'))
    widths = told.half_widths()
    # 100 kg/s of 4000 kg/s; a derivative of |x| at almost zero would say the same here, at zero nothing
    assert widths["mass", "relative"] == pytest.approx(100 / 4000, rel=1e-4)


def test_rounding_is_told_and_small(rough) -> None:
    _, told = doubted(rough, CASE)
    for spot in told.figures.spots:
        widths = told.budget.half_widths[spot.slice]
        assert (widths > 0.0).all() or not np.any(told.figures.values[spot.slice]), spot.name
    assert told.half_widths()["reaction", "force"].max() < 1e-9
    assert told.budget.dominant(("reaction", "force")).kind == "round-off"


def test_data_in_single_precision_are_known_by_their_digits(rough) -> None:
    mesh = rough.mesh()
    mesh.point_data["p"] = mesh.point_data["p"].astype(np.float32)
    rough.save(mesh)
    _, told = doubted(rough, CASE)
    assert told.half_widths()["reaction", "force"].max() > 1e-6


def test_sampling_errors_add_up_at_their_worst(rough) -> None:
    case, outcome = done(rough, CASE)
    model = model_of(case, outcome)
    middle, _ = model.sensitivity()
    errors = SampledErrors({"pressure": np.array([7.0, 5.0, 0.0]), "velocity": np.array([0.02, 0.0, 0.0])})
    pressure, velocity = sampling_contributions(model, middle, errors)
    place = middle.spot(("momentum", "pressure")).slice
    assert_allclose(pressure.half_widths[place], [12.0, 0.0, 0.0], atol=1e-9)  # 1 m² each, facing one another
    flow = middle.spot(("groups", "feed", "mass_flow")).slice
    assert_allclose(velocity.half_widths[flow], 0.02 * np.abs(middle.values[flow]), rtol=1e-9)
    assert_allclose(velocity.half_widths[middle.spot(("groups", "drain", "mass_flow")).slice], 0.0)


def test_scattered_points_bring_the_doubt_of_their_interpolation(block) -> None:
    rng = np.random.default_rng(8)
    places = rng.uniform(-0.05, 1.05, (1500, 3))
    waves = np.sin(5 * places)
    table = np.column_stack([places, 2 + waves, 500 + 100 * waves[:, 0] * waves[:, 1]])
    np.savetxt(block.folder / "cloud.csv", table, delimiter=",", header="x,y,z,u,v,w,p", comments="")
    lines = (
        '[flow]\npoints = { file = "cloud.csv", coordinates = ["x", "y", "z"] }\n'
        'velocity = { array = ["u", "v", "w"] }\npressure = { array = "p" }\n'
    )
    start, end = CASE.index("[flow]"), CASE.index("[groups.feed]")
    case, outcome = done(block, CASE[:start] + lines + CASE[end:])
    told = doubt_of(case, outcome)
    shares = {one.name: one for one in told.budget.shares(("groups", "feed", "pressure_force"))}
    error = outcome.flow.sampling["leave_out_relative"]["pressure"]
    # the share of the range that left-out points are off, over the 1 m² of the port
    spread = np.ptp(outcome.flow.pressure.sample)
    assert shares["sampling of the pressure"].half_width == pytest.approx(error * spread, rel=1e-9)
    flow = {one.name: one for one in told.budget.shares(("groups", "feed", "mass_flow"))}
    assert flow["sampling of the velocity"].share > 0.99
    assert any("left out" in note for note in told.notes)


HALF = (
    NO_ARRAYS.replace(DENSITY, DOUBTFUL)
    .replace('groups = { array = "region" }\n', "mirror = true\n")
    .replace("gravity = [0, 0, -9.80665]\n", "gravity = [0, -9.80665, 0]\n")
    .replace("tag = 1\n", 'pick = { normal = [-1, 0, 0], near = [0, 0.5, 0.5] }\nflow_rate = "3 +/- 0.06 m^3/s"\n')
    .replace("tag = 2\n", "pick = { normal = [0, 1, 0], near = [0.5, 1, 0.5] }\nfrom_continuity = true\n")
    .replace("tag = 3\n", "rest = true\n")
    .replace(FEED, FEED + 'pressure = "3 +/- 0.2 kPa"\n')
    .replace(DRAIN, DRAIN + "pressure = 0\n")
) + '[groups.cut]\nrole = "symmetry"\npressure = 0\npick = { normal = [0, 0, -1], near = [0.5, 0.5, 0] }\n'


def test_the_doubt_of_a_half_model_is_that_of_the_whole(block) -> None:
    case, outcome = done(block, HALF)
    told = doubt_of(case, outcome)
    assert [group.name for group in outcome.balance.setting.groups] == ["feed", "drain", "shell"]
    widths = told.half_widths()
    assert_allclose(widths["fluid", "mass"], 80.0, rtol=1e-6)  # 2 m³, 40 kg/m³
    assert_allclose(widths["groups", "feed", "mass_flow"], 6000 * np.hypot(0.04, 0.02), rtol=1e-6)
    assert_allclose(widths["groups", "feed", "pressure_force"][0], 400.0, rtol=1e-6)  # 200 Pa on 2 m²
    assert told.sharpened is not None
    assert_allclose(told.sharpened.momentum.flux(), outcome.balance.momentum.flux(), rtol=1e-9, atol=1e-9)
    again = run_case(moved_case(case, ("fluid", "density"), 1020.0))
    names = [one.name for one in told.inputs]
    rows = np.array([0, 1, 2])
    found = doubtful_inputs(case, outcome, rows, {})
    values = np.array([one.value for one in found.inputs])
    values[names.index("fluid.density")] = 1020.0
    model = BalanceModel(outcome.balance, parts_of(outcome.balance.table), found.recipe, found.inputs)
    size = np.abs(again.balance.table.values).max()
    assert_allclose(model.balance(values).table.values, again.balance.table.values, rtol=1e-10, atol=1e-13 * size)


def test_what_the_doubt_leaves_out_is_said() -> None:
    case = read_case(MESHES / "impeller" / "impeller_volume.toml")
    told = doubt_of(case, run_case(case), sharpen=False)
    assert any("volume holds" in note for note in told.notes)
    assert any("without that of interpolation" in note for note in told.notes)


def test_outcomes_from_arrays_have_no_inputs(rough) -> None:
    _, outcome = done(rough, CASE)
    told = doubt_of(None, replace(outcome, shape=None), sharpen=False, draws=1000)
    assert told.inputs == ()
    assert told.drawn is None
    assert told.half_widths()["mass", "residual"] >= 0.0


def test_the_uncut_table_is_the_sum_of_its_parts(rough) -> None:
    case, outcome = done(rough, BY_HAND["kinematic pressure"])
    model = model_of(case, outcome)
    whole = sum(part for name, part in model.parts.channels.items() if not name.startswith("added"))
    assert_allclose(whole, outcome.balance.table.values, rtol=1e-14, atol=1e-9)
    assert figures(balance_table(outcome.balance.table, outcome.balance.setting)).spots


# ---- the mesh ------------------------------------------------------------------------------------------


@pytest.mark.parametrize("level", [2, 3, 4])
@pytest.mark.parametrize("facets", [False, True])
def test_the_residual_of_an_exact_flow_is_within_its_doubt_and_not_far(level: int, facets: bool) -> None:
    exact = beltrami(1.0, 0.7, 0.4, 1000.0)
    surface = odd_body(level, (0.3, 0.1, 0.2)).surface()
    told = doubt_of(None, balance_of(surface, exact.lay(surface)), facets_are_geometry=facets)
    for path in (("mass", "residual"), ("momentum", "residual")):
        width, error = told.budget.half_widths[told.figures.spot(path).slice], told.figures[path]
        # the flow closes over any surface: facets or smooth, the residual is the error
        assert (np.abs(error) <= width).all()
        assert np.linalg.norm(width) < 3 * np.linalg.norm(error)
        assert told.budget.dominant(path).kind in ("interpolation", "geometry")
    assert (told.half_widths()["geometry", "volume"] < 1e-10) == facets
    assert told.sharpened is not None
    if not facets and level == 4:
        sharp = np.linalg.norm(told.sharpened.momentum.residual())
        assert sharp < 0.05 * np.linalg.norm(told.figures["momentum", "residual"])


def test_a_supplied_flow_does_not_hang_on_the_area_of_its_port(block) -> None:
    # the blunt pipe's ends have a smaller area than the round ones that they stand for
    import pyvista

    solid = pipe(0.5, 2.0, 10, 4, 2)
    mesh = pyvista.PolyData.from_irregular_faces(solid.points, [list(map(int, face)) for face in solid.faces])
    region = np.full(len(solid.faces), 3, np.int32)
    for number, name in ((1, "inlet"), (2, "outlet")):
        region[solid.groups[name]] = number
    mesh.cell_data["region"] = region
    block.save(mesh)
    flow = 'flow_rate = "2 m^3/s"\npressure = 0\n'
    case, outcome = done(block, NO_ARRAYS.replace(FEED, FEED + flow).replace(DRAIN, DRAIN + flow))
    told = doubt_of(case, outcome)
    widths = told.half_widths()
    assert widths["groups", "feed", "area"] > 1e-3
    assert widths["groups", "feed", "mass_flow"] < 1e-9
    # the same flow through a larger area is slower
    assert np.linalg.norm(widths["groups", "feed", "momentum_flux"]) > 1.0
