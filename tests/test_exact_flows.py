"""Exact solutions of the flow equations through closed surfaces: balances that must close, forces that are known.

Velocity and pressure are given on points and so vary linearly over a flat
facet: linear fields are integrated exactly, others with order two.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from fluxmesh import balance_of, lay_flow
from fluxmesh.balance.balance import Balance
from tests.flows import (
    ExactFlow,
    beltrami,
    burgers_vortex,
    couette,
    hill_vortex,
    kovasznay,
    landau_force,
    landau_squire,
    rotlet,
    stagnation,
    stokes_sphere,
)
from tests.measures import moments, observed_order
from tests.solids import (
    Solid,
    angle_block,
    any_polyhedron,
    box,
    in_triangles,
    mapped,
    moved,
    odd_body,
    quadratic,
    rigid_motion,
    ring,
    sphere,
    together,
    torus,
    turned,
    vertex_split,
)
from tests.verification import Verify

ANCHOR = np.array([0.3, -0.2, 0.5])
SIZES = (4.0, 2.0, 1.0)  # sides of three meshes, each halved


def balance(solid: Solid, flow: ExactFlow, **options: object) -> Balance:
    surface = solid.surface()
    return balance_of(surface, flow.lay(surface, **options), anchor=ANCHOR).balance


# ---- linear fields: exact on any polyhedron -------------------------------------------------


@settings(max_examples=60, deadline=None)
@given(seed=st.integers(0, 2**32 - 1), free=st.booleans())
def test_a_linear_velocity_equals_its_volume_integrals(seed: int, free: bool) -> None:
    # Gauss' theorem for u = u0 + G x: mass rho tr(G) V, momentum ∫ rho (G u + tr(G) u) dv, and x × the same;
    # kinetic energy ∫ rho (u·G u + tr(G) u²/2) dv. Integrands up to degree 3 on the facets, so round-off only.
    rng = np.random.default_rng(seed)
    body, held = (b := any_polyhedron(seed)), moments(b)
    density = 1.7
    start, gradient = rng.standard_normal(3), rng.standard_normal((3, 3))
    if free:
        gradient -= np.eye(3) * np.trace(gradient) / 3
    growth = np.trace(gradient)
    surface = body.surface()
    flow = lay_flow(surface, density=density, velocity=start + surface.points @ gradient.T)
    found = balance_of(surface, flow).balance  # moments about the coordinate origin
    carried = gradient + growth * np.eye(3)
    first, second = held.first, held.second
    momentum = density * carried @ (start * held.volume + gradient @ first)
    turning = np.cross(first, carried @ start)
    tensor = second @ (carried @ gradient).T  # ∫ x_i (B x)_j dv
    turning += np.array([tensor[1, 2] - tensor[2, 1], tensor[2, 0] - tensor[0, 2], tensor[0, 1] - tensor[1, 0]])
    square = held.volume * np.outer(start, start) + gradient @ second @ gradient.T
    square += np.outer(start, gradient @ first) + np.outer(gradient @ first, start)
    energy = density * (np.sum(gradient * square) + growth * np.trace(square) / 2)
    scale = density * found.table.total("area") * (1 + np.abs(surface.points).max()) ** 3 * 20
    assert_allclose(found.mass.residual, density * growth * held.volume, rtol=0, atol=1e-14 * scale)
    assert_allclose(found.momentum.flux(), momentum, rtol=0, atol=1e-14 * scale)
    assert_allclose(found.angular.flux(), density * turning, rtol=0, atol=1e-14 * scale)
    assert_allclose(found.table.total("kinetic_energy_flux"), energy, rtol=0, atol=1e-13 * scale)
    if free:
        assert abs(found.mass.residual) < 1e-13 * found.mass.outflow


@settings(max_examples=25, deadline=None)
@given(seed=st.integers(0, 2**32 - 1))
def test_a_linear_stress_equals_its_volume_integrals(seed: int) -> None:
    # ∮ tau·n dA = ∫ div tau dv and ∮ x × tau·n dA = ∫ x × div tau dv for a symmetric tau; points are split
    # by face, so that each corner carries the traction of its own facet
    rng = np.random.default_rng(seed)
    body = in_triangles(any_polyhedron(seed - seed % 5 + (0, 1, 2, 4)[seed % 4]))
    held = moments(body)
    surface = vertex_split(body).surface()
    base, slope = rng.standard_normal((3, 3)), rng.standard_normal((3, 3, 3))
    base, slope = base + base.T, slope + slope.transpose(1, 0, 2)
    rows = surface.connectivity.reshape(-1, 3)
    corners = surface.points[rows]
    normal = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    normal /= np.linalg.norm(normal, axis=1)[:, None]
    traction = np.zeros_like(surface.points)
    stress = base + np.einsum("ijk,fck->fcij", slope, corners)
    traction[rows] = np.einsum("fcij,fj->fci", stress, normal)
    found = balance_of(surface, lay_flow(surface, traction=traction)).balance
    divergence = np.einsum("ijj->i", slope)
    scale = 20 * found.table.total("area") * (1 + np.abs(surface.points).max()) ** 2
    assert_allclose(found.momentum.viscous(), held.volume * divergence, rtol=0, atol=1e-14 * scale)
    assert_allclose(found.angular.viscous(), np.cross(held.first, divergence), rtol=0, atol=1e-14 * scale)


def quadratic_polyhedron(seed: int) -> Solid:
    return quadratic(any_polyhedron(seed - seed % 5 + (0, 1, 2, 4)[seed % 4]))


@settings(max_examples=25, deadline=None)
@given(seed=st.integers(0, 2**32 - 1))
def test_rigid_rotation_closes_to_round_off_on_quadratic_faces(seed: int) -> None:
    # u = Omega × x, p = rho |Omega × x|²/2 + rho g·x: exact Navier-Stokes (Batchelor section 4.1), degree two, which
    # six-point triangles with straight sides carry exactly. With gravity it is the rotating tank.
    rng = np.random.default_rng(seed)
    spin, gravity, density = rng.standard_normal(3), 9.8 * rng.standard_normal(3), 1.3
    flow = ExactFlow(
        density,
        lambda x: np.cross(spin, x),
        lambda x: density * ((np.cross(spin, x) ** 2).sum(axis=1) / 2 + x @ gravity),
    )
    found = balance(quadratic_polyhedron(seed), flow, gravity=gravity)
    assert found.mass.relative < 1e-13
    assert found.momentum.relative() < 1e-14
    assert found.angular.relative() < 1e-14


@settings(max_examples=25, deadline=None)
@given(seed=st.integers(0, 2**32 - 1))
def test_stagnation_flow_closes_to_round_off_on_quadratic_faces(seed: int) -> None:
    # u = (a x, -a y, 0) with a uniform viscous stress; its power through the surface is the dissipation 4 mu a² V
    body = quadratic_polyhedron(seed)
    found = balance(body, ExactFlow(1.3, *_stagnation_fields()))
    assert found.mass.relative < 1e-13
    assert found.momentum.relative() < 1e-14
    assert found.angular.relative() < 1e-14


def _stagnation_fields() -> tuple[Callable[[np.ndarray], np.ndarray], Callable[[np.ndarray], np.ndarray]]:
    flow = stagnation(2.0, 1.3, 0.0)
    return flow.velocity, flow.pressure


def test_power_of_a_uniform_stress_is_its_dissipation(verify: Verify) -> None:
    # ∮ u·tau·n dA = ∫ tau : grad u dv = 4 mu a² V for the stagnation flow: linear on the facets, so exact
    rate, viscosity = 2.0, 0.4
    for seed in range(5):
        body = any_polyhedron(seed)
        if seed % 5 == 2:  # a twisted quad has no normal of its own
            body = in_triangles(body)
        held = moments(body)
        found = balance(body, stagnation(rate, 1.3, viscosity))
        expected = 4 * viscosity * rate**2 * held.volume
        assert_allclose(found.table.total("viscous_power"), expected, rtol=1e-11)
        shares = found.table.total("viscous_power") / expected
        assert_allclose(found.momentum.viscous(), 0, rtol=0, atol=1e-12 * expected)
    verify(
        what="Stagnation flow in a polyhedron: power of its stress over 4 mu a² V",
        source="exact Navier-Stokes (Batchelor, section 4.1): the dissipation",
        memory=True,
        expected=1,
        got=shares,
        tolerance=1e-11,
        why="linear on flat facets: round-off",
        kind="law",
        law="energy",
    )


def test_a_quadratic_flow_on_quadratic_faces_is_exact() -> None:
    # Hill's vortex (Hill 1894): quadratic velocity; momentum flux (degree four) equals -∮ p n dA, here by Gauss rules
    flow = hill_vortex(1.2)
    low, high = np.array([-0.5, -0.2, 0.1]), np.array([0.3, 0.4, 0.6])
    found = balance(quadratic(box(low, high)), flow)
    nodes, weights = np.polynomial.legendre.leggauss(4)
    push = np.zeros(3)
    for axis in range(3):
        others = [k for k in range(3) if k != axis]
        half = (high - low)[others] / 2
        u, v = np.meshgrid(*((low + high)[k] / 2 + (high - low)[k] / 2 * nodes for k in others), indexing="ij")
        weight = np.outer(weights, weights) * half[0] * half[1]
        for sign, level in ((-1, low[axis]), (1, high[axis])):
            at = np.zeros((*u.shape, 3))
            at[..., others[0]], at[..., others[1]], at[..., axis] = u, v, level
            push[axis] -= sign * np.sum(weight * flow.pressure(at))
    assert_allclose(found.mass.residual, 0, rtol=0, atol=1e-15)
    assert_allclose(found.momentum.flux(), push, rtol=0, atol=1e-14)


# ---- flows that close with order two --------------------------------------------------------

TURN, _ = rigid_motion(np.random.default_rng(11))
BODIES: dict[str, Callable[[int], Solid]] = {
    "box": lambda k: box((-0.5, -0.4, -0.6), (0.5, 0.6, 0.4), 2 * 2**k),
    "sphere": lambda k: sphere(k, 0.6),
    "L-shape": lambda k: angle_block(2 * 2**k, (-0.5, -0.5, -0.5), (0.5, 0.5, 0.5)),
    "odd body": lambda k: mapped(odd_body(k), lambda x: 0.5 * x),
    "torus": lambda k: in_triangles(torus(0.4, 0.2, 6 * 2**k, 4 * 2**k)),
}
NEAR, ASIDE = (0.1, 0.2, 0.15), (1.5, 0.1, 0.2)
FLOWS = {
    # name: (flow, where the bodies stand: clear of singular points)
    "Couette 1-2, Taylor 1923": (couette(1, 2, (3, -0.5), 0.7, 1.3), ASIDE),
    "Kovasznay 1948": (kovasznay(40.0), NEAR),
    "Burgers vortex 1948": (burgers_vortex(1.0, 2.0, 0.1, 1.2), ASIDE),
    "Beltrami, Arnold 1965": (beltrami(1, 0.7, 0.4, 1.1), NEAR),
    "Hill vortex 1894": (hill_vortex(1.2), NEAR),
    "Landau-Squire beside its origin": (landau_squire(1.5, 1.2, 0.5), ASIDE),
}


@pytest.mark.parametrize("body", BODIES)
@pytest.mark.parametrize("name", FLOWS)
def test_exact_flows_close_with_order_two(verify: Verify, name: str, body: str) -> None:
    flow, place = FLOWS[name]
    found = [balance(moved(BODIES[body](k), TURN, place), flow) for k in (2, 3, 4)]
    orders = []
    for ledgers in ([each.momentum for each in found], [each.angular for each in found]):
        left = [ledger.relative() for ledger in ledgers]
        assert observed_order(SIZES, left) == pytest.approx(2.0, abs=0.06)
        orders.append(observed_order(SIZES, left))
        assert left[-1] < 5e-3
    assert abs(found[-1].mass.residual) < 5e-3 * found[-1].mass.outflow
    if body in ("box", "L-shape") and abs(found[0].mass.residual) > 1e-12:
        assert observed_order(SIZES, [each.mass.residual for each in found]) == pytest.approx(2.0, abs=0.1)
    verify(
        what=f"{name}, closed {body}: what is left of force and moment, over the sum of their parts",
        source="an exact solution of the flow equations: nothing",
        memory=True,
        expected=(0, 0),
        got=(found[-1].momentum.relative(), found[-1].angular.relative()),
        tolerance=5e-3,
        why="linear data on the finest of three meshes",
        order=(orders[0], 2, 0.06),
        kind="law",
        law="angular" if body in ("sphere", "torus") else "momentum",
    )


def test_momentum_through_one_face_of_kovasznay_flow(verify: Verify) -> None:
    # flux of p n - tau·n + rho u (u·n) along x through x = 1, -0.5 < y < 0.75, 0 < z < 1: 1.9993490702404 (computed)
    errors = []
    for cells in (8, 16, 32):
        body = box((0.2, -0.5, 0), (1, 0.75, 1), (2, cells, 1))
        ledger = balance(body, kovasznay(40.0)).momentum
        row = list(body.groups).index("x+")
        through = ledger.group_flux[row] - ledger.group_pressure[row] - ledger.group_viscous[row]
        errors.append(through[0] - 1.9993490702404)
    assert abs(errors[-1]) < 2e-3
    assert observed_order(SIZES, errors) == pytest.approx(2.0, abs=0.1)
    verify(
        what="Kovasznay flow, Re 40: momentum out through x = 1, -0.5 < y < 0.75, a metre wide",
        source="Kovasznay 1948, Proc. Camb. Phil. Soc. 44; the figure by quadrature",
        memory=True,
        expected=1.9993490702404,
        got=1.9993490702404 + errors[-1],
        unit="N",
        tolerance=2e-3,
        why="32 cells across",
        order=(observed_order(SIZES, errors), 2, 0.1),
        kind="law",
        law="momentum",
    )


# ---- forces and torques of a singular point -------------------------------------------------


@pytest.mark.parametrize(
    ("a", "force"),
    [(1.01, 3282.50645255276), (1.1, 313.766737647607), (1.5, 64.8114258200402), (5, 10.5288053192180)],
)
def test_closed_form_of_the_landau_squire_force(a: float, force: float) -> None:
    # the figures come from quadrature over a sphere, a box and an offset sphere, not from the closed form
    assert_allclose(landau_force(a), force, rtol=1e-12)


ROUND_THE_ORIGIN: dict[str, Callable[[int], Solid]] = {
    "box": lambda k: box((-0.9, -1.1, -0.8), (1.2, 1.0, 1.3), 4 * 2**k),
    "sphere off centre": lambda k: sphere(k + 1, 1.0, (0.2, -0.1, 0.3)),
    "odd body": lambda k: odd_body(k + 1),
}


@pytest.mark.parametrize("body", ROUND_THE_ORIGIN)
@pytest.mark.parametrize("a", [1.5, 1.1])
def test_landau_squire_jet_has_one_force_through_every_surface(verify: Verify, body: str, a: float) -> None:
    # Landau 1944; Squire 1951; Landau and Lifshitz, Fluid Mechanics section 23; Batchelor section 4.6. Pressure,
    # momentum and traction are of one size, so a slip of sign in any cannot hide. The moment is (0 - x0) × F.
    density, kinematic = 1.2, 0.5
    flow = landau_squire(a, density, kinematic)
    exact = density * kinematic**2 * landau_force(a) * np.array([0, 0, 1.0])
    force, moment, mass = [], [], []
    for k in (2, 3, 4):
        found = balance(ROUND_THE_ORIGIN[body](k), flow)
        force.append(np.linalg.norm(found.momentum.residual() - exact))
        moment.append(np.linalg.norm(found.angular.residual() - np.cross(-ANCHOR, exact)))
        mass.append(abs(found.mass.relative))
        # what pushes the fluid holds the body: the load on what is inside is the opposite
        assert_allclose(found.load.from_balance.force, -found.momentum.residual(), rtol=1e-12, atol=1e-12)
    assert observed_order(SIZES, force) == pytest.approx(2.0, abs=0.1)
    assert observed_order(SIZES, moment) == pytest.approx(2.0, abs=0.1)
    assert force[-1] < 0.02 * exact[2]
    assert mass[-1] < 0.01
    verify(
        what=f"Landau-Squire jet, A = {a:g}, within this surface, {body}: force over rho nu²",
        source="Landau 1944, Squire 1951; Landau and Lifshitz, Fluid Mechanics, section 23",
        expected=landau_force(a),
        got=found.momentum.residual()[2] / (density * kinematic**2),
        tolerance=0.02,
        relative=True,
        why="linear data on the finest of three meshes",
        order=(observed_order(SIZES, force), 2, 0.1),
        kind="law",
        law="momentum",
    )
    verify(
        what=f"Landau-Squire jet, A = {a:g}, within this surface, {body}: moment about a far anchor, over rho nu²",
        source="Landau 1944, Squire 1951: the force acts at the origin",
        expected=landau_force(a) * np.cross(-ANCHOR, [0, 0, 1]),
        got=found.angular.residual() / (density * kinematic**2),
        tolerance=0.04,
        relative=True,
        why="linear data on the finest of three meshes",
        order=(observed_order(SIZES, moment), 2, 0.1),
        kind="law",
        law="angular",
    )


@pytest.mark.parametrize("name", ["momentum", "pressure", "viscous"])
def test_no_part_of_the_landau_squire_force_is_small(name: str) -> None:
    # the guard of the test above: leaving any part out, or turning its sign, moves the force by more than a tenth
    flow = landau_squire(1.5, 1.2, 0.5)
    ledger = balance(odd_body(4), flow).momentum
    part = {"momentum": ledger.flux, "pressure": ledger.pressure, "viscous": ledger.viscous}[name]()
    assert abs(part[2]) > 0.1 * ledger.residual()[2]


RADIUS, SPEED, VISCOSITY = 1.0, 1.0, 0.3
DRAG = 6 * np.pi * VISCOSITY * RADIUS * SPEED
# Stokes flow is the limit of no inertia: here Re = 3e-9, and the momentum flux 1e-9 of the drag
CREEPING = stokes_sphere(RADIUS, SPEED, VISCOSITY, 1e-9)


def test_drag_of_a_sphere_is_one_third_pressure_two_thirds_shear(verify: Verify) -> None:
    # Stokes 1851; Batchelor section 4.9: 2 pi mu a U and 4 pi mu a U; through the box round it as much again
    pressure, shear, walls, far = [], [], [], []
    for k in (1, 2, 3):
        outer = box((-2, -2.5, -2), (3, 2, 2.2), 5 * 2**k)
        surface = together(far=outer, body=turned(sphere(k + 1, RADIUS))).surface({"body": "wall"})
        found = balance_of(surface, CREEPING.lay(surface), anchor=ANCHOR).balance
        body = found.setting.walls()
        pressure.append(-found.momentum.pressure(body)[2] - DRAG / 3)
        shear.append(-found.momentum.viscous(body)[2] - DRAG * 2 / 3)
        walls.append(np.linalg.norm(found.load.from_walls.force - [0, 0, DRAG]))
        far.append(np.linalg.norm(found.load.from_balance.force - [0, 0, DRAG]))
        turning = np.cross(-ANCHOR, [0, 0, DRAG])
        assert_allclose(found.load.from_walls.moment, turning, rtol=0, atol=0.2 * DRAG / 4**k)
        assert_allclose(found.load.from_balance.moment, turning, rtol=0, atol=0.2 * DRAG / 4**k)
    for errors in (pressure, shear, walls, far):
        assert observed_order(SIZES, errors) == pytest.approx(2.0, abs=0.1)
        assert abs(errors[-1]) < 0.01 * DRAG
    figures = {"by pressure": (pressure, DRAG / 3), "by shear": (shear, DRAG * 2 / 3)}
    for part, (errors, exact) in figures.items():
        verify(
            what=f"Creeping flow past a sphere, mu 0.3, a = U = 1: drag {part}",
            source="Stokes 1851; Batchelor, section 4.9: 2 pi mu a U and 4 pi mu a U",
            memory=True,
            expected=exact,
            got=exact + errors[-1],
            unit="N",
            tolerance=0.01 * DRAG,
            why="5120 facets",
            order=(observed_order(SIZES, errors), 2, 0.1),
            kind="law",
            law="momentum",
        )
    verify(
        what="Creeping flow past a sphere, mu 0.3, a = U = 1: drag through a box round it",
        source="Stokes 1851; Batchelor, section 4.9: 6 pi mu a U",
        memory=True,
        expected=(0, 0, 5.6548667765),
        got=found.load.from_balance.force,
        unit="N",
        tolerance=0.05,
        why="linear data on 40 cells a side",
        order=(observed_order(SIZES, far), 2, 0.1),
        kind="law",
        law="momentum",
    )


@pytest.mark.parametrize("body", ["box", "sphere off centre", "odd body"])
def test_stokes_drag_passes_through_any_surface_round_the_sphere(body: str) -> None:
    errors = []
    for k in (1, 2, 3):
        found = balance(mapped(ROUND_THE_ORIGIN[body](k), lambda x: 2.5 * x), CREEPING)
        errors.append(np.linalg.norm(found.load.from_balance.force - [0, 0, DRAG]))
    assert observed_order(SIZES, errors) == pytest.approx(2.0, abs=0.1)
    assert errors[-1] < 0.01 * DRAG


def test_stokes_drag_on_quadratic_faces_has_order_four() -> None:
    errors = []
    for k in (1, 2, 3):
        surface = sphere(k, RADIUS, curved=True).surface(rest="wall")
        # the surface bounds the sphere; the fluid is outside, so its outward normal is the other way
        traction = CREEPING.traction(surface.points, -surface.points / RADIUS)
        flow = lay_flow(surface, pressure=CREEPING.pressure(surface.points), traction=traction)
        found = balance_of(surface, flow).balance.momentum
        drag = found.pressure()[2] - found.viscous()[2]
        errors.append(drag - DRAG)
    assert observed_order(SIZES, errors) == pytest.approx(4.0, abs=0.2)
    assert abs(errors[-1]) < 1e-4 * DRAG


@pytest.mark.parametrize("body", ROUND_THE_ORIGIN)
def test_a_point_torque_is_felt_about_every_point(verify: Verify, body: str) -> None:
    # Batchelor section 4.10 (from memory): the rotlet carries its torque and no force through any surface round it;
    # the flow turns back on what drives it
    torque = np.array([0.3, -0.5, 0.8])
    errors, force = [], []
    for k in (1, 2, 3):
        found = balance(ROUND_THE_ORIGIN[body](k), rotlet(torque, 0.7, 1e-9))
        errors.append(np.linalg.norm(found.load.from_balance.moment + torque))
        force.append(np.linalg.norm(found.load.from_balance.force))
    assert observed_order(SIZES, errors) == pytest.approx(2.0, abs=0.15)
    assert errors[-1] < 0.02
    assert force[-1] < 0.02
    verify(
        what=f"Rotlet within this surface, {body}: torque about an anchor elsewhere",
        source="Batchelor, section 4.10: T, about every point",
        memory=True,
        expected=-torque,
        got=found.load.from_balance.moment,
        unit="N m",
        tolerance=0.02,
        why="linear data on the finest of three meshes",
        order=(observed_order(SIZES, errors), 2, 0.15),
        kind="law",
        law="angular",
    )


def test_torque_and_dissipation_between_turning_cylinders(verify: Verify) -> None:
    # Taylor 1923: torque a length 4 pi mu (O1 - O2) r1² r2² / (r2² - r1²), dissipation torque × (O1 - O2)
    spin, viscosity = (3.0, -0.5), 0.7
    flow = couette(1, 2, spin, viscosity, 1.3)
    torque, power = [], []
    for around in (16, 32, 64):
        surface = ring(1, 2, 1.0, around).surface(rest="wall")
        found = balance_of(surface, flow.lay(surface)).balance
        rows = [[group.name for group in surface.groups].index(name) for name in ("inner", "outer")]
        inner, outer = found.angular.group_viscous[rows, 2]  # on the fluid: driven inside, held outside
        torque.append(inner - 41.050144006907)
        assert_allclose(outer, -inner, rtol=0, atol=0.15 * 64 / around)
        power.append(found.table.total("viscous_power") - 143.67550402417)
    assert observed_order(SIZES, torque) == pytest.approx(2.0, abs=0.1)
    assert observed_order(SIZES, power) == pytest.approx(2.0, abs=0.1)
    assert abs(torque[-1]) < 0.01 * 41
    verify(
        what="Circular Couette flow, r 1 and 2, 3 and -0.5 rad/s, mu 0.7: torque a metre",
        source="Taylor 1923: 4 pi mu (O1 - O2) r1² r2² / (r2² - r1²)",
        memory=True,
        expected=41.050144006907,
        got=41.050144006907 + torque[-1],
        unit="N m",
        tolerance=0.41,
        why="64 facets around",
        order=(observed_order(SIZES, torque), 2, 0.1),
        kind="law",
        law="angular",
    )
    verify(
        what="Circular Couette flow, r 1 and 2, 3 and -0.5 rad/s, mu 0.7: power of the cylinders",
        source="Taylor 1923: torque times (O1 - O2)",
        memory=True,
        expected=143.67550402417,
        got=143.67550402417 + power[-1],
        unit="W",
        tolerance=3,
        why="64 facets around",
        order=(observed_order(SIZES, power), 2, 0.1),
        kind="law",
        law="energy",
    )
