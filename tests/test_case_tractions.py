"""Traction of a case from a stress tensor and from the velocity gradient: the same load as the traction itself."""

from __future__ import annotations

import json

import numpy as np
import pytest
from numpy.testing import assert_allclose

from tests.conftest import CASE

VISCOSITY = 0.02
# a linear velocity without divergence: its viscous stress is constant, and its tractions add up to nothing
SLOPE = np.array([[0.3, 1.2, -0.5], [0.4, -0.1, 0.7], [0.9, -0.2, -0.2]])
STRESS = VISCOSITY * (SLOPE + SLOPE.T)


@pytest.fixture
def walls(fluxmesh, block):
    """Viscous force on the walls, with the traction made as a case says."""
    mesh = block.mesh()
    mesh.point_data["G"] = np.tile(SLOPE.ravel(), (mesh.n_points, 1))
    mesh.cell_data["Gf"] = np.tile(SLOPE.ravel(), (mesh.n_cells, 1))
    mesh.point_data["S9"] = np.tile(STRESS.ravel(), (mesh.n_points, 1))
    six = STRESS[[0, 1, 2, 0, 1, 0], [0, 1, 2, 1, 2, 2]]
    mesh.cell_data["S6"] = np.tile(six, (mesh.n_cells, 1))
    mesh.point_data["S6b"] = np.tile(six[[0, 1, 2, 4, 5, 3]], (mesh.n_points, 1))
    block.save(mesh)

    def run(line: str) -> np.ndarray:
        text = CASE.replace('traction = { array = "tau" }', line)
        block.write(text.replace("[flow]", f"viscosity = {VISCOSITY}\n[flow]"))
        ran = fluxmesh("balance", block.case, "--out", "out", "--no-pictures")
        assert ran.code in (0, 1), ran.err
        data = json.loads((block.folder.parent / "out" / "balance.json").read_text("utf-8"))
        return np.array([data["groups"][name]["viscous_force"] for name in ("feed", "drain", "shell")])

    return run


@pytest.mark.parametrize(
    "line",
    [
        'velocity_gradient = { array = "G" }',
        'velocity_gradient = { array = "Gf" }',
        'stress = { array = "S9" }',
        'stress = { array = "S6" }',
        'stress = { array = "S6b", order = "xx yy zz yz xz xy" }',
    ],
)
def test_every_form_gives_the_traction_of_the_same_stress(walls, line: str) -> None:
    # t = tau · n: on the faces x = 0 and x = 1 of area 1, and opposite ones cancel
    expected = np.array([-STRESS[:, 0], STRESS[:, 0], np.zeros(3)])
    assert_allclose(walls(line), expected, rtol=0, atol=1e-15)


def test_a_gradient_needs_a_viscosity(fluxmesh, block) -> None:
    block.write(CASE.replace('traction = { array = "tau" }', 'velocity_gradient = { array = "U" }'))
    ran = fluxmesh("balance", block.case)
    assert ran.code == 2
    assert "fluid.viscosity" in ran.err


def test_one_form_at_a_time(fluxmesh, block) -> None:
    block.write(CASE.replace("[flow]\n", '[flow]\nstress = { array = "tau" }\n'))
    ran = fluxmesh("balance", block.case)
    assert ran.code == 2
    assert "traction and stress are given" in ran.err
