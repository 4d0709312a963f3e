"""Supplied and solved ports: continuity, gases, profiles, and what cannot be."""

from __future__ import annotations

import json

import numpy as np
import pytest
from numpy.testing import assert_allclose

from tests.conftest import CASE

GAS = (
    CASE.replace('density = "1000 kg/m^3"\n', 'law = "ideal-gas"\ngas_constant = "287.05 J/(kg K)"\nheat_ratio = 1.4\n')
    .replace('velocity = { array = "U" }\npressure = { array = "p", head = "removed" }\n', "")
    .replace('traction = { array = "tau" }\n', "")
    .replace("[flow]\n", "")
    .replace("gravity = [0, 0, -9.80665]\n", "")
)
FEED, DRAIN = 'role = "inlet"\n', 'role = "outlet"\n'


@pytest.fixture
def result(fluxmesh, block):
    def run(code: int = 0) -> dict:
        ran = fluxmesh("balance", block.case, "--out", "out", "--no-pictures")
        assert ran.code == code, ran.out + ran.err
        return json.loads((block.folder.parent / "out" / "balance.json").read_text(encoding="utf-8"))

    return run


@pytest.fixture
def refused(fluxmesh, block):
    def run() -> str:
        ran = fluxmesh("balance", block.case, "--out", "out", "--no-pictures")
        assert ran.code == 2, ran.out
        return ran.err

    return run


def test_a_port_is_solved_from_continuity_with_exported_flow_at_the_other(result, block) -> None:
    # 2 m/s enter through 1 m² of a liquid: the outlet must give them back
    block.write(CASE.replace(DRAIN, DRAIN + "from_continuity = true\n"))
    data = result()
    assert data["groups"]["drain"]["mass_flow"] == pytest.approx(2000.0, rel=1e-14)
    assert data["groups"]["drain"]["momentum_flux"][0] == pytest.approx(4000.0, rel=1e-14)
    assert any("solved from continuity" in note for note in data["notes"])


def test_a_gas_has_a_density_of_its_own_at_each_port(result, block) -> None:
    block.write(
        GAS.replace(FEED, FEED + 'speed = "50 m/s"\npressure = "100 kPa"\ntemperature = "300 K"\n').replace(
            DRAIN, DRAIN + 'from_continuity = true\npressure = "20 kPa"\ntemperature = "280 K"\n'
        )
    )
    data = result()
    # rho = p / (R T), by hand; ambient 100 kPa
    one, two = 200e3 / (287.05 * 300), 120e3 / (287.05 * 280)
    assert_allclose(data["groups"]["feed"]["mass_flow"], -one * 50, rtol=1e-13)
    assert_allclose(data["groups"]["drain"]["volume_flow"], one * 50 / two, rtol=1e-13)
    assert_allclose(data["ports"]["feed"]["mach_number"], 50 / np.sqrt(1.4 * 287.05 * 300), rtol=1e-13)
    assert_allclose(data["ports"]["drain"]["mach_number"], one * 50 / two / np.sqrt(1.4 * 287.05 * 280), rtol=1e-13)
    assert any("Mach" in note for note in data["notes"])


def test_a_port_that_would_be_choked_is_named(refused, block) -> None:
    block.write(
        GAS.replace(FEED, FEED + 'speed = "300 m/s"\npressure = "500 kPa"\ntemperature = "300 K"\n').replace(
            DRAIN, DRAIN + 'from_continuity = true\npressure = "0 kPa"\ntemperature = "280 K"\n'
        )
    )
    message = refused()
    assert "groups.drain.from_continuity" in message
    assert "choked" in message
    assert "Mach" in message


def test_a_port_that_would_be_reversed_is_named(refused, block) -> None:
    block.write(CASE.replace(FEED, 'role = "outlet"\nfrom_continuity = true\n'))
    message = refused()
    assert "reversed" in message
    assert "'feed'" in message


def test_two_solved_ports_are_under_determined(refused, block) -> None:
    block.write(
        CASE.replace(FEED, FEED + "from_continuity = true\n").replace(DRAIN, DRAIN + "from_continuity = true\n")
    )
    assert "under-determined" in refused()


def test_a_solved_port_with_a_flow_is_over_determined(refused, block) -> None:
    block.write(CASE.replace(DRAIN, DRAIN + 'from_continuity = true\nspeed = "1 m/s"\n'))
    assert "over-determined" in refused()


def test_a_gas_without_temperature_or_constant_says_so(refused, block) -> None:
    block.write(GAS.replace(FEED, FEED + 'speed = "5 m/s"\npressure = 0\n'))
    message = refused()
    assert "groups.feed.temperature" in message
    block.write(GAS.replace('gas_constant = "287.05 J/(kg K)"\n', ""))
    assert "fluid.gas_constant" in refused()


def test_a_shaped_profile_carries_the_supplied_flow_to_round_off(result, block) -> None:
    # developed flow in a square duct: momentum factor 1.3784186918, energy factor 2.1541805191
    # (Shah and London 1978, Laminar Flow Forced Convection in Ducts, ch. VII; two routes recomputed)
    flow = 'flow_rate = "0.7 m^3/s"\nprofile = "laminar"\n'
    text = CASE.replace(FEED, FEED + flow).replace(DRAIN, DRAIN + flow).replace('velocity = { array = "U" }\n', "")
    block.write(text)
    data = result()
    assert data["groups"]["feed"]["mass_flow"] == pytest.approx(-700.0, rel=1e-14)
    # eight coarse triangles: the rule sees the profile at 48 points only
    assert data["ports"]["drain"]["momentum_factor"] == pytest.approx(1.3784186918, rel=0.01)
    assert data["ports"]["drain"]["kinetic_energy_factor"] == pytest.approx(2.1541805191, rel=0.02)
    short = data["short_form"]
    assert_allclose(short["rate"], 0, atol=1e-9)


def test_a_power_law_and_a_table_are_flatter(result, block) -> None:
    def factor(lines: str) -> float:
        flow = f'flow_rate = "0.7 m^3/s"\n{lines}'
        block.write(
            CASE.replace(FEED, FEED + flow).replace(DRAIN, DRAIN + flow).replace('velocity = { array = "U" }\n', "")
        )
        return result()["ports"]["drain"]["momentum_factor"]

    turbulent = factor('profile = "power-law"\nexponent = 7\n')
    assert 1.0 < turbulent < 1.1
    assert factor('profile = "power-law"\nexponent = 10\n') < turbulent
    flat = factor('profile = "table"\nprofile_table = { wall_distance = [0, 0.5], speed = [1, 1] }\n')
    assert flat == pytest.approx(1.0, rel=1e-12)
    assert (
        factor('profile = "table"\nprofile_table = { wall_distance = [0, 500], unit = "mm", speed = [0, 1] }\n') > 1.1
    )


def test_a_half_model_is_reported_whole(result, block) -> None:
    # the wall y = 0 becomes the cut of a block that is twice as wide; gravity lies in the cut
    mesh = block.mesh()
    region = np.array(mesh.cell_data["region"])
    centre = mesh.cell_centers().points
    region[np.isclose(centre[:, 1], 0.0)] = 4
    mesh.cell_data["region"] = region
    block.save(mesh)
    half = CASE + '[groups.cut]\nrole = "symmetry"\ntag = 4\n'
    block.write(half)
    one = result()
    block.write(half.replace("[fluid]", "mirror = true\n[fluid]"))
    two = result()
    assert two["geometry"]["volume"] == pytest.approx(2.0, rel=1e-13)
    assert_allclose(two["geometry"]["centroid"], [0.5, 0.0, 0.5], atol=1e-13)
    assert two["groups"]["feed"]["mass_flow"] == pytest.approx(2 * one["groups"]["feed"]["mass_flow"], rel=1e-13)
    assert "cut" not in two["groups"]
    assert_allclose(two["hardware_load"]["from_walls"]["force"], [0, 0, -2 * 9806.65], atol=1e-8)
    assert_allclose(two["hardware_load"]["from_balance"]["force"], [0, 0, -2 * 9806.65], atol=1e-8)
    # about the origin, which lies in the cut: the moments about x and z cancel
    assert_allclose(two["hardware_load"]["from_walls"]["moment"], [0, 9806.65, 0], atol=1e-8)
    assert any("mirrored" in line for line in two["assumptions"])


def test_a_port_too_coarse_for_its_profile_is_noted(result, block) -> None:
    # a square of eight triangles, with developed flow
    flow = 'flow_rate = "0.7 m^3/s"\nprofile = "power-law"\n'
    block.write(
        CASE.replace(FEED, FEED + flow).replace(DRAIN, DRAIN + flow).replace('velocity = { array = "U" }\n', "")
    )
    assert any("'drain' show its power-law profile coarsely" in note for note in result()["notes"])
