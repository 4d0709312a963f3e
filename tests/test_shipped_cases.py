"""The shipped cases: what they claim in meshes/README.md is what comes out."""

from __future__ import annotations

import importlib.util
import json
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

import fluxmesh

MESHES = Path(fluxmesh.__file__).parent.parent / "meshes"


def script(name: str):
    spec = importlib.util.spec_from_file_location(name, MESHES.parent / "scripts" / f"{name}.py")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="module")
def rows() -> list[dict]:
    return script("manifold_table").rows()


def test_mass_closes_on_the_finest_mesh(rows) -> None:
    assert rows[-1]["mass"] <= 1e-3


@pytest.mark.parametrize("name", ["force_walls", "force_balance", "moment_walls", "moment_balance"])
def test_loads_approach_the_reference_with_refinement(rows, name: str) -> None:
    # the reference is the assembled finite-element residual at the wall, which does not pass through fluxmesh
    errors = [row[name] for row in rows]
    assert errors[0] > errors[1] > errors[2]
    assert errors[2] < (0.005 if "force" in name else 0.01)


def test_the_walls_are_no_better_than_the_computed_stress_itself(rows) -> None:
    for row in rows:
        assert row["force_walls"] == pytest.approx(row["stress"], rel=0.1)


def test_the_table_in_the_readme_is_the_one_computed(rows) -> None:
    text = (MESHES / "README.md").read_text(encoding="utf-8")
    for row in rows:
        line = next(line for line in text.splitlines() if line.startswith(f"| {row['mesh']} |"))
        for name in ("force_walls", "force_balance", "moment_walls", "moment_balance"):
            assert f"{row[name]:.2%}" in line


@pytest.mark.parametrize("mesh", ["coarse", "medium", "fine"])
def test_port_integrals_agree_with_the_finite_element_solution(mesh: str) -> None:
    exact = json.loads((MESHES / "manifold" / "reference.json").read_text("utf-8"))["meshes"][mesh]["ports"]
    table = script("manifold_table").run(mesh).data()["groups"]
    for name, port in exact.items():
        assert_allclose(table[name]["mass_flow"], port["mass_flow"], rtol=0.02)
        size = np.linalg.norm(port["momentum_flux"])
        assert_allclose(table[name]["momentum_flux"], port["momentum_flux"], rtol=0, atol=0.04 * size)
        assert_allclose(table[name]["area_vector"], port["area_vector"], rtol=0, atol=1e-6)


def test_the_header_is_the_sum_over_its_ports() -> None:
    case = fluxmesh.read_case(MESHES / "header" / "header.toml")
    data = fluxmesh.run_case(case).data()
    # by hand from the case: rho Q²/A n + p A n at each port, out positive, and the weight of what is inside
    total = np.zeros(3)
    for name, section in case.groups.items():
        if section.flow_rate is None:
            continue
        area = np.array(data["groups"][name]["area_vector"])
        flow = float(section.flow_rate)
        size = np.linalg.norm(area)
        total -= (998.2 * (flow / size) ** 2 + float(section.pressure)) * area
    total[2] -= 998.2 * 9.80665 * data["geometry"]["volume"]
    assert_allclose(data["hardware_load"]["from_balance"]["force"], total, rtol=1e-12)
    assert data["hardware_load"]["from_walls"] is None
    assert data["verdict"]["closes"] is None
    assert_allclose(data["reaction"]["force"], -total - [0, 0, -11.4 * 9.80665], rtol=1e-12)
    assert data["mass"]["relative"] < 1e-14


def test_the_lift_of_the_rotor_is_that_of_kutta_and_joukowski() -> None:
    # lift = rho U G a length, no drag: Batchelor, An Introduction to Fluid Dynamics, section 6.6 (from memory)
    data = fluxmesh.run_case(fluxmesh.read_case(MESHES / "rotor" / "rotor.toml")).data()
    lift = 1.225 * 8.0 * 12.0
    assert_allclose(data["hardware_load"]["from_walls"]["force"], [0, lift, 0], rtol=0, atol=1e-3 * lift)
    assert_allclose(data["hardware_load"]["from_balance"]["force"], [0, lift, 0], rtol=0, atol=1e-3 * lift)
    assert data["verdict"]["closes"] is True


def test_the_shipped_files_are_small() -> None:
    assert sum(path.stat().st_size for path in MESHES.rglob("*")) < 10e6


@pytest.fixture(scope="module")
def sharpened_rows() -> list[dict]:
    return script("sharpened_table").rows()


def test_sharpened_port_flows_are_far_nearer_to_the_computed_ones(sharpened_rows) -> None:
    assert len(sharpened_rows) == 9
    for row in sharpened_rows:
        for column in ("mass_flow", "momentum_flux"):
            assert row[f"{column} sharpened"] < row[f"{column} plain"] / 5, row


def test_the_table_of_sharpened_flows_is_the_one_computed(sharpened_rows) -> None:
    text = (MESHES / "README.md").read_text(encoding="utf-8")
    for row in sharpened_rows:
        line = next(line for line in text.splitlines() if line.startswith(f"| {row['mesh']} | {row['port']} |"))
        for column in ("mass_flow", "momentum_flux"):
            assert f"{row[f'{column} plain']:.3%} | {row[f'{column} sharpened']:.3%}" in line
