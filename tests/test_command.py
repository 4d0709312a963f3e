"""The commands as a user meets them: tables, result file, exit codes."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

from tests.conftest import CASE

ROOT = Path(__file__).resolve().parent.parent
WEIGHT = 1000 * 9.80665  # N, of the unit cube of water that the small case holds


@pytest.fixture
def result(fluxmesh, block):
    def run(code: int = 0) -> dict:
        ran = fluxmesh("balance", block.case, "--out", "out", "--no-pictures")
        assert ran.code == code, ran.out + ran.err
        return json.loads((block.folder.parent / "out" / "balance.json").read_text(encoding="utf-8"))

    return run


def test_the_result_file_keeps_the_contract(result) -> None:
    data = result()
    assert data["schema"] == "fluxmesh-balance/1"
    assert set(data["geometry"]) >= {"volume", "centroid", "area", "closed", "area_vector"}
    keys = {
        "role", "area", "area_vector", "centroid", "mass_flow", "volume_flow", "momentum_flux", "pressure_force",
        "viscous_force", "moment_of_momentum_flux", "moment_of_pressure", "moment_of_viscous",
    }  # fmt: skip
    assert all(set(group) >= keys for group in data["groups"].values())
    assert set(data["mass"]) >= {"inflow", "outflow", "storage", "residual", "relative"}
    entries = {"flux", "pressure", "viscous", "weight", "storage", "residual", "relative"}
    assert set(data["momentum"]) >= entries
    assert set(data["angular_momentum"]) >= entries | {"about"}
    assert set(data["hardware_load"]) >= {"from_walls", "from_balance", "difference"}
    assert set(data["reaction"]) >= {"at", "force", "moment", "line_of_action"}
    assert set(data["reaction"]["line_of_action"]) >= {"point", "direction", "couple"}
    assert set(data["fluid"]) >= {"mass", "weight", "centre"}
    assert set(data["ports"]["feed"]["mean_pressure"]) >= {"area", "mass_flow"}
    assert set(data["verdict"]) >= {"closes", "measure", "tolerance", "reasons"}
    # the doubt of a figure stands beside it, in the same shape
    for table, key in ((data["mass"], "residual"), (data["momentum"], "residual"), (data["reaction"], "force")):
        assert np.shape(table[f"{key}_uncertainty"]) == np.shape(table[key])
    assert set(data["sharpened"]) == {"groups", "mass", "momentum", "hardware_load", "reaction"}
    assert set(data["sharpened"]["groups"]) == set(data["groups"])


def test_the_figures_of_the_small_case_are_those_by_hand(result) -> None:
    # uniform flow of 2 m/s through a unit cube of water at rest pressure 500 Pa without head: the head is put
    # back, so that the walls bear the weight; momentum in and out cancel
    data = result()
    assert_allclose(data["groups"]["feed"]["mass_flow"], -2000.0, rtol=1e-14)
    assert_allclose(data["groups"]["drain"]["momentum_flux"], [4000.0, 0, 0], atol=1e-9)
    for way in ("from_walls", "from_balance"):
        assert_allclose(data["hardware_load"][way]["force"], [0, 0, -WEIGHT], atol=1e-9)
        # about the origin: r × F with the weight at (1/2, 1/2, 1/2)
        assert_allclose(data["hardware_load"][way]["moment"], [-WEIGHT / 2, WEIGHT / 2, 0], atol=1e-9)
    total = WEIGHT + 2 * 9.80665
    assert_allclose(data["reaction"]["force"], [0, 0, total], rtol=1e-13, atol=1e-9)
    assert_allclose(data["reaction"]["line_of_action"]["point"][:2], [0.5, 0.5], rtol=1e-12)
    assert_allclose(data["release"]["acceleration"], [0, 0, -9.80665], atol=1e-12)
    assert data["verdict"]["closes"] is True
    assert data["verdict"]["measure"] < 1e-14


def test_planted_faults_are_seen(result, block) -> None:
    mesh = block.mesh()
    outlet = mesh.points[:, 0] > 0.9
    pressure = np.array(mesh.point_data["p"])
    mesh.point_data["p"] = np.where(outlet, pressure - 1000.0, pressure)
    block.save(mesh)
    data = result(code=1)
    assert data["verdict"]["closes"] is False
    # 1000 Pa too little on the whole outlet, and on the rim of the walls, where it balances itself
    assert_allclose(data["momentum"]["residual"], [-1000.0, 0, 0], atol=1e-9)
    assert data["mass"]["relative"] < 1e-14
    mesh.point_data["p"] = pressure
    mesh.point_data["U"] = np.where(outlet[:, None], 1.5, 1.0) * np.array(mesh.point_data["U"])
    block.save(mesh)
    data = result(code=1)
    assert data["mass"]["residual"] == pytest.approx(1000.0)
    assert data["mass"]["relative"] == pytest.approx(0.2)


def test_an_open_piece_gives_group_integrals_and_says_so(fluxmesh, block) -> None:
    mesh = block.mesh()
    walls = mesh.extract_cells(np.flatnonzero(mesh.cell_data["region"] == 3))
    block.save(walls.extract_surface(algorithm="dataset_surface"))
    text = CASE.replace("[fluid]", "closed = false\n[fluid]").replace('groups = { array = "region" }\n', "")
    text = text.replace('[groups.feed]\nrole = "inlet"\ntag = 1\n[groups.drain]\nrole = "outlet"\ntag = 2\n', "")
    text = text.replace("tag = 3", "rest = true")
    block.write(text)
    ran = fluxmesh("balance", block.case, "--out", "out", "--no-pictures")
    assert ran.code == 0, ran.err
    data = json.loads((block.folder.parent / "out" / "balance.json").read_text(encoding="utf-8"))
    assert data["geometry"]["closed"] is False
    assert data["geometry"]["volume"] is None
    assert data["mass"] is None
    assert data["momentum"] is None
    assert data["hardware_load"]["from_balance"] is None
    assert data["verdict"]["closes"] is None
    assert_allclose(data["hardware_load"]["from_walls"]["force"], [0, 0, -WEIGHT], atol=1e-9)
    assert "OPEN" in ran.out


def test_every_load_is_printed_with_who_acts_on_whom_and_its_assumptions(fluxmesh, block) -> None:
    ran = fluxmesh("balance", block.case, "--out", "out", "--no-pictures")
    for words in ("flow on hardware (walls)", "flow on hardware (balance)", "ANCHOR ON HARDWARE"):
        assert words in ran.out
    assert "Assumed:" in ran.out
    assert "Caution:" in ran.out
    assert "water hammer" in ran.out
    assert "licensed engineer" in ran.out


def test_a_reported_load_is_compared_and_not_used(fluxmesh, block) -> None:
    before = fluxmesh("balance", block.case, "--out", "plain", "--no-pictures")
    block.write(CASE + "[reported]\nforce = [0, 0, -9000]\n")
    ran = fluxmesh("balance", block.case, "--out", "out", "--no-pictures")
    assert "8.96% apart" in ran.out  # 9806.65 / 9000 - 1
    folder = block.folder.parent
    plain, compared = (json.loads((folder / name / "balance.json").read_text("utf-8")) for name in ("plain", "out"))
    assert compared.pop("reported")["on"] == ["shell"]
    # the hash of the case is another, and nothing else
    assert plain.pop("inputs") | {"case_sha256": compared["inputs"]["case_sha256"]} == compared.pop("inputs")
    assert plain == compared
    assert before.code == ran.code == 0


@pytest.mark.parametrize("command", ["balance", "check", "start"])
def test_each_command_has_help_with_an_example(fluxmesh, command: str) -> None:
    ran = fluxmesh(command, "--help")
    assert ran.code == 0
    assert "Example" in ran.out


@pytest.mark.long
def test_the_bits_of_a_run_do_not_depend_on_threads() -> None:
    case = ROOT / "meshes" / "rotor" / "rotor.toml"
    results = []
    for threads in ("1", "2", "3"):
        out = subprocess.run(
            [sys.executable, "-c", "import sys, json, fluxmesh; from pathlib import Path\n"
             "print(json.dumps(fluxmesh.run_case(fluxmesh.read_case(Path(sys.argv[1]))).data()))", str(case)],
            capture_output=True, text=True, check=True, cwd=ROOT, env={**os.environ, "FLUXMESH_THREADS": threads},
        )  # fmt: skip
        results.append(out.stdout)
    assert results[0] == results[1] == results[2]


def test_without_a_gl_library_the_numbers_still_come(fluxmesh, block, monkeypatch) -> None:
    monkeypatch.setattr("fluxmesh.report.picture_surface.offscreen_problem", lambda *_: "no GL library was found")
    ran = fluxmesh("balance", block.case, "--out", "out")
    assert ran.code == 0
    assert "VERDICT: closes" in ran.out
    assert "No pictures" in ran.err
    assert len(ran.err.strip().splitlines()) == 1
    assert [path.name for path in (block.folder.parent / "out").iterdir() if path.suffix != ".html"] == ["balance.json"]


def test_a_reader_that_leaves_early_does_not_look_like_a_balance_that_fails(block) -> None:
    command = (
        f'"{sys.executable}" -m fluxmesh balance "{block.case}" --out out --no-pictures | true; echo ${{PIPESTATUS[0]}}'
    )
    ran = subprocess.run(["bash", "-c", command], capture_output=True, text=True, check=True, cwd=block.folder.parent)
    # ended by the closed pipe, or done before it closed
    assert ran.stdout.strip() in ("141", "0")
    assert ran.stderr == ""
    assert (block.folder.parent / "out" / "balance.json").is_file()
