"""What tells two slips apart that leave the same residual, and where nothing can."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh import Outcome
from fluxmesh.assess.causes import facts_of
from fluxmesh.assess.causes.entries import Entries, entries_of
from fluxmesh.assess.causes.evidence import flux_odds, flux_over_velocity, gravity_odds, speed_odds
from fluxmesh.case.read import read_case
from fluxmesh.integral.table import BASIS
from fluxmesh.job.causes import causes_of_case
from tests.cause_flows import sounds
from tests.cause_plants import TWIN_FLOWS, TWIN_OF, twins
from tests.cause_slips import PLANTS, mass_flux
from tests.planting import ROOT


def _entries(done: Outcome) -> Entries:
    facts = facts_of(done.flow, done.balance.setting, tuple(each.name for each in done.surface.groups))
    return entries_of(done.balance, facts, encloses_hardware=False)


# ---- nothing can ----------------------------------------------------------------------------


@pytest.mark.parametrize("flow", TWIN_FLOWS)
@pytest.mark.parametrize("slip", TWIN_OF)
def test_two_slips_in_two_flows_that_close_make_the_same_table(slip: str, flow: str) -> None:
    one, alike, two = twins(flow, slip)
    assert alike.outcome().verdict.measure < 1e-9
    tables = [sound.outcome().balance.table for sound in (one, two)]
    for name in BASIS:
        first, second = (table.column(name) for table in tables)
        assert_allclose(first, second, rtol=1e-12, atol=1e-12 * max(float(np.abs(first).max()), 1.0), err_msg=name)
    kinds = {PLANTS[slip][0], PLANTS[TWIN_OF[slip][0]][0]}
    # each is found as a cause of either, and neither is said without the other
    for sound in (one, two):
        causes = sound.causes().causes[:2]
        assert {cause.id for cause in causes} == kinds
        assert all(len(cause.equally) == 1 for cause in causes)


# ---- what tells two slips apart ---------------------------------------------------------------


def test_the_velocity_tells_which_mass_flux_is_off() -> None:
    # in a pipe momentum flux does not say which end is at fault, but the velocities beside the mass fluxes do
    for factor, kind, group in ((2.0, "duplicate-group", "inlet"), (0.5, "missing-group", "inlet")):
        sound = mass_flux(factor)(sounds()["poiseuille pipe, inclined"])
        done = sound.outcome()
        ratios = flux_over_velocity(_entries(done))
        ports = {each.name: ratio for each, ratio in zip(done.surface.groups, ratios)}
        assert_allclose([ports["inlet"], ports["outlet"], ports["wall"]], [factor, 1.0, np.nan], rtol=0.05)
        causes = sound.causes().causes
        assert (causes[0].id, causes[0].group) == (kind, group)
        assert causes[1].score - causes[0].score == pytest.approx(6.0, abs=0.5)  # for the one, against the other


def test_without_velocities_that_agree_a_mass_flux_is_not_told_by_them() -> None:
    ratios = np.array([2.0, 1.0, np.nan, 1.02])
    assert flux_odds(ratios, 0, 0.5) < 0.0 < flux_odds(ratios, 1, 0.5)
    assert flux_odds(ratios, 0, -1.0) == flux_odds(ratios, 2, 0.5) == 0.0
    assert flux_odds(1000.0 * ratios, 0, 0.5) == flux_odds(1000.0 * ratios, 1, 0.5) == 0.0  # a unit is off
    assert flux_odds(np.array([2.0, 2.0, np.nan, 2.04]), 0, 0.5) == 0.0  # the density is


def test_gravity_that_cannot_be_tells_its_unit_from_that_of_length() -> None:
    assert gravity_odds(9.81) == gravity_odds(9.78) == 0.0
    assert 0.0 < gravity_odds(1.62) < gravity_odds(980.665) == gravity_odds(0.0980665)
    tank = sounds()["tank"]
    one, two = PLANTS["gravity in cm/s²"][1](tank).causes(), PLANTS["centimetres read as metres"][1](tank).causes()
    assert [one.causes[0].id, two.causes[0].id] == ["gravity-direction", "length-unit"]
    assert "length-unit" in one.causes[0].equally
    assert "gravity-direction" in two.causes[0].equally


def test_a_pressure_below_vacuum_counts_against_a_cause() -> None:
    # in a flow without losses the total pressure is even, so that velocities of any size seem to go with it
    spoiled = PLANTS["velocity in mm/s"][1](sounds()["stagnation"])
    found = spoiled.causes()
    assert found.causes[0].id == "velocity-unit"
    assert "total-as-static" in found.causes[0].equally
    # a high ambient pressure makes it possible again
    other = spoiled.with_given(ambient=1e12).causes()
    assert other.causes[0].score - other.causes[1].score == pytest.approx(0.0, abs=2.0)
    total = {cause.id: cause.score for cause in found.causes}["total-as-static"]
    assert total - {cause.id: cause.score for cause in other.causes}["total-as-static"] == pytest.approx(4.5, abs=0.1)


def test_where_fluid_slides_along_walls_its_speed_tells_which_port_is_off() -> None:
    sound = sounds()["plane couette"]
    done = PLANTS["velocity of a port twice"][1](sound).outcome()
    entries = _entries(done)
    names = list(entries.names())
    assert speed_odds(entries, names.index("x-"), 0.5) == pytest.approx(-np.log(2.0), abs=0.2)
    assert speed_odds(entries, names.index("x+"), 2.0) == pytest.approx(np.log(2.0), abs=0.2)
    pipe = sounds()["poiseuille pipe, inclined"].outcome()  # nothing slides there
    assert speed_odds(_entries(pipe), 0, 2.0) == 0.0


def test_a_supplied_flow_that_is_double_is_that_of_the_whole_where_others_are_exported() -> None:
    found = PLANTS["flow of the whole for a half"][1](sounds()["burgers vortex"]).causes()
    assert found.causes[0].id == "half-model"
    assert found.causes[0].equally == ("duplicate-group (x+)",)
    # but not where another one was supplied, which is right
    names = [name for name, sound in sounds().items() if PLANTS["supplied flow of one of two ports twice"][1](sound)]
    other = PLANTS["supplied flow of one of two ports twice"][1](sounds()[names[0]]).causes()
    assert other.causes[0].id == "duplicate-group"
    assert "half-model" not in [cause.id for cause in other.causes]


def test_a_total_pressure_that_is_even_does_not_bear_out_another_density() -> None:
    # the momentum flux of a flow without losses goes with its own dynamic pressure, whatever the density is
    found = PLANTS["density by half"][1](sounds()["beltrami"]).causes()
    assert found.causes[0].id == "density"
    assert {"total-as-static", "density"} not in [set(cause.ids) for cause in found.causes]


def test_an_open_piece_without_ports_has_no_cause(tmp_path: Path) -> None:
    case = tmp_path / "wall.toml"
    case.write_text(
        f"""
[surface]
file = {json.dumps(str(ROOT / "meshes" / "cylinder" / "wall.vtp"))}
closed = false
[fluid]
density = 1.0
gravity = [0, 0, -9.80665]
[flow]
pressure = {{ array = "pressure" }}
traction = {{ array = "wall_traction", acts_on = "wall" }}
[groups.skin]
role = "wall"
rest = true
""",
        encoding="utf-8",
    )
    found = causes_of_case(read_case(case))
    assert found.causes == ()
    assert found.residual is None
    assert "without ports" in found.note
