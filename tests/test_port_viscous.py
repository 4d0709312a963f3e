"""The estimate of a port's missing viscous force, against exact flows and a computed one."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh import lay_flow, read_case, run_case
from fluxmesh.errors import FieldError
from fluxmesh.field.field import absent_field, array_field, constant_field
from fluxmesh.field.flow import Flow, integrate_flow, still_flow
from fluxmesh.field.port_viscous import port_viscous_estimate
from fluxmesh.integral.layout import AT_NODE
from fluxmesh.surface.surface import ControlSurface
from tests.flows import landau_squire, poiseuille, velocity_gradient
from tests.measures import observed_order
from tests.solids import box, moved, pipe, prism, quadratic, rigid_motion

MANIFOLD = Path(__file__).resolve().parent.parent / "meshes" / "manifold"

JET = landau_squire(1.5, 1.2, 0.5)


def jet_port(cells: int) -> tuple[ControlSurface, Flow]:
    """A box off the jet's source; its side z+ is a port in the open flow."""
    surface = box((0.3, 0.2, 0.5), (1.1, 1.2, 1.4), cells).surface()
    return surface, JET.lay(surface)


def exact_port_parts() -> tuple[float, np.ndarray, np.ndarray]:
    """Of the side z+: normal viscous force, the fixed half of the shear force, the whole force; Gauss quadrature."""
    node, weight = np.polynomial.legendre.leggauss(24)
    x, y = np.meshgrid(0.7 + 0.4 * node, 0.7 + 0.5 * node, indexing="ij")
    at = np.stack([x, y, np.full_like(x, 1.4)], axis=-1).reshape(-1, 3)
    weights = np.outer(weight, weight).ravel() * 0.4 * 0.5 * JET.viscosity
    gradient = velocity_gradient(JET.velocity, at)
    half = np.array([weights @ gradient[:, 2, j] for j in range(2)])
    whole = weights @ (gradient[:, :, 2] + gradient[:, 2, :])
    return float(whole[2]), half, whole


def test_the_velocity_fixes_the_normal_force_and_half_of_the_shear_of_a_port_in_open_flow() -> None:
    normal, half, whole = exact_port_parts()
    errors, scales = [], []
    for cells in (4, 8, 16):
        surface, flow = jet_port(cells)
        k = [group.name for group in surface.groups].index("z+")
        found = port_viscous_estimate(surface, flow, k, JET.viscosity)
        errors.append(np.abs(found.force - [*half, normal]).max())
        scales.append(found.scale)
        for mu in (
            constant_field(surface, "viscosity", 1, JET.viscosity),
            array_field(
                surface, "viscosity", 1, np.full(surface.point_count, 1000 * JET.viscosity), at="nodes", scale=1e-3
            ),
            array_field(
                surface, "viscosity", 1, np.full(surface.face_count, 1000 * JET.viscosity), at="faces", scale=1e-3
            ),
        ):
            again = port_viscous_estimate(surface, flow, k, mu)
            assert_allclose([*again.force, again.scale], [*found.force, found.scale], rtol=1e-12)
    assert observed_order([4, 2, 1], errors) == pytest.approx(2.0, abs=0.1)
    assert errors[-1] < 2e-3 * np.linalg.norm(whole)
    assert f"fixes {np.linalg.norm(found.force):.2g} N;" in found.text
    # what is left open is within the scale here, and the scale within a factor of a few of the force
    open_part = np.linalg.norm(whole[:2] - half)
    assert open_part < scales[-1] < 10 * np.linalg.norm(whole)


def test_polygons_and_curved_faces_give_the_same_estimate_of_a_linear_velocity() -> None:
    rng = np.random.default_rng(8)
    slope = rng.standard_normal((3, 3))
    contour = np.array([[0, 0], [4, 0], [4, 3], [3.9, 0.1], [0.1, 0.1], [0, 3]])  # dented beyond its mean corner
    turn, shift = rigid_motion(rng)
    for body in (prism(contour, 0, 1), quadratic(box((0, 0, 0), (2, 1, 1))), box((0, 0, 0), (2, 1, 1), 2, quads=True)):
        surface = moved(body, turn, shift).surface()
        flow = lay_flow(surface, density=1.0, velocity=surface.points @ slope.T)
        k = [group.name for group in surface.groups].index("z+")
        vector = integrate_flow(surface, still_flow(surface)).column("area_vector")[k]
        normal = turn[:, 2]
        within = slope @ (np.eye(3) - np.outer(normal, normal))
        wanted = 0.4 * (-2 * np.trace(within) * vector + vector @ within)
        assert_allclose(port_viscous_estimate(surface, flow, k, 0.4).force, wanted, rtol=0, atol=1e-13)


def test_a_port_with_a_wall_at_rest_round_it_has_no_force_that_the_velocity_fixes() -> None:
    # developed flow: the whole viscous force on the port is zero, while its pieces are not
    profile = poiseuille(0.1, 2.0, 0.4, 870.0)
    body = pipe(0.1, 0.5, 24, 2, 6)
    surface = body.surface({"inlet": "inlet", "outlet": "outlet"}, rest="wall")
    flow = profile.lay(surface)
    found = port_viscous_estimate(surface, flow, 0, 0.4)
    # ∫ mu |du/dr| dA of u = 2 U (1 - r²/R²): 8/3 pi mu U R
    exact = 8 / 3 * np.pi * 0.4 * 2.0 * 0.1
    assert_allclose(found.force, 0, rtol=0, atol=1e-14 * exact)
    assert found.scale == pytest.approx(exact, rel=0.03)
    assert "fixes nothing;" in found.text
    assert f"would make {found.scale:.2g} N" in found.text
    assert "order of magnitude only" in found.text


def test_the_estimate_against_the_known_force_on_the_ports_of_the_manifold() -> None:
    # reference.json holds the viscous force by quadrature of the finite-element stress
    known = json.loads((MANIFOLD / "reference.json").read_text(encoding="utf-8"))
    outcome = run_case(read_case(MANIFOLD / "manifold_medium.toml"))
    for k, group in enumerate(outcome.surface.groups):
        if group.role.is_port:
            found = port_viscous_estimate(outcome.surface, outcome.flow, k, known["viscosity"])
            true = np.linalg.norm(known["meshes"]["medium"]["ports"][group.name]["viscous_force"])
            assert np.linalg.norm(found.force) < 1e-6 * found.scale  # walls at rest all round
            assert 5e-4 * found.scale < true < 0.03 * found.scale


def test_no_estimate_where_the_data_allow_none() -> None:
    surface, flow = jet_port(2)
    k = [group.name for group in surface.groups].index("z+")
    on_faces = lay_flow(surface, density=1.0, velocity=np.ones((surface.face_count, 3)))
    supplied = lay_flow(surface, density=1.0, velocity=(0, 0, 1.0))
    assert port_viscous_estimate(surface, on_faces, k, 0.4) is None
    assert port_viscous_estimate(surface, supplied, k, 0.4) is None
    assert port_viscous_estimate(surface, still_flow(surface), k, 0.4) is None
    assert port_viscous_estimate(surface, flow, k, absent_field(surface, "viscosity", 1)) is None
    assert flow.velocity.where[k] == AT_NODE
    assert port_viscous_estimate(surface, flow, k, 0.4) is not None
    with pytest.raises(FieldError, match="viscosity is inf"):
        port_viscous_estimate(surface, flow, k, float("inf"))
