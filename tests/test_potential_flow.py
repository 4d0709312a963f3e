"""Ideal flow with Bernoulli's pressure: bodies and singular points inside give the force, all else gives none."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from fluxmesh import balance_of, lay_flow
from fluxmesh.balance.balance import Balance
from tests.flows import ExactFlow, ideal_sphere, lifting_cylinder, sources
from tests.measures import observed_order
from tests.solids import (
    Solid,
    angle_block,
    box,
    dome,
    mapped,
    moved,
    odd_body,
    prism,
    rigid_motion,
    sphere,
    together,
    turned,
)
from tests.verification import Verify

ANCHOR = np.array([0.4, -0.3, 0.2])
SIZES = (4.0, 2.0, 1.0)
LEVELS = (1, 2, 3)


def balance(solid: Solid, flow: ExactFlow) -> Balance:
    surface = solid.surface()
    return balance_of(surface, flow.lay(surface), anchor=ANCHOR).balance


def assert_order_two(errors: list[float], *, below: float, tolerance: float = 0.12) -> None:
    """The errors fall as the square of the mesh size, and the last is small."""
    assert observed_order(SIZES, errors) == pytest.approx(2.0, abs=tolerance)
    assert abs(errors[-1]) < below


# ---- lift: plane flow past a circular cylinder ----------------------------------------------

DENSITY, SPEED, CIRCULATION, RADIUS = 1.2, 2.0, 3.0, 0.5
LIFT = DENSITY * SPEED * CIRCULATION  # 7.2 a metre of span
CYLINDER = lifting_cylinder(DENSITY, SPEED, CIRCULATION, RADIUS)


def polar(radius: Callable[[np.ndarray], np.ndarray], count: int) -> np.ndarray:
    angle = np.arange(count) * (2 * np.pi / count)
    return radius(angle)[:, None] * np.column_stack([np.cos(angle), np.sin(angle)])


def rectangle(count: int) -> np.ndarray:
    """2.4 × 1.5 about an off-centre point, its sides in `count` pieces each."""
    step = np.linspace(0, 1, count, endpoint=False)
    corners = np.array([[-1.0, -0.7], [1.4, -0.7], [1.4, 0.8], [-1.0, 0.8]])
    return np.concatenate([a + step[:, None] * (b - a) for a, b in zip(corners, np.roll(corners, -1, axis=0))])


CONTOURS: dict[str, Callable[[int], np.ndarray]] = {
    "circle of 1": lambda k: polar(lambda a: 1 + 0 * a, 24 * 2**k),
    "ellipse off centre": lambda k: polar(lambda a: 1 + 0 * a, 24 * 2**k) * [1.4, 0.9] + [0.3, -0.1],
    "rectangle": lambda k: rectangle(6 * 2**k),
    "clover": lambda k: polar(lambda a: 1.1 + 0.25 * np.cos(3 * a + 0.4) + 0.1 * np.sin(a), 32 * 2**k),
}


@pytest.mark.parametrize("name", CONTOURS)
def test_kutta_joukowski_on_any_contour(verify: Verify, name: str) -> None:
    # Batchelor section 6.6; Milne-Thomson (from memory): lift rho U G across the stream, no drag. The ends of the
    # extruded metre cancel, and nothing flows through them.
    force, moment, mass = [], [], []
    for k in LEVELS:
        found = balance(prism(CONTOURS[name](k), 0, 1), CYLINDER)
        load = found.load.from_balance
        force.append(np.linalg.norm(load.force - [0, LIFT, 0]))
        # through the axis at mid-span: Blasius' second theorem gives no moment about the axis
        moment.append(np.linalg.norm(load.moment - np.cross([0, 0, 0.5] - ANCHOR, [0, LIFT, 0])))
        mass.append(abs(found.mass.residual))
    assert_order_two(force, below=0.03 * LIFT)
    assert_order_two(moment, below=0.03 * LIFT, tolerance=0.2)
    assert mass[-1] < 0.01 * DENSITY * SPEED
    verify(
        what=f"Lift on a cylinder through this contour, {name}: drag and lift a metre",
        source="Kutta 1902, Joukowski 1906; Batchelor, section 6.6: 0 and rho U G",
        memory=True,
        expected=(0, 7.2),
        got=load.force[:2],
        unit="N",
        tolerance=0.03 * LIFT,
        why="linear data on 48 to 256 facets",
        order=(observed_order(SIZES, force), 2, 0.12),
        kind="law",
        law="momentum",
    )


@pytest.mark.parametrize(("radius", "pressure", "momentum"), [(0.5, 7.2, 0.0), (1.0, 4.5, 2.7), (2.0, 3.825, 3.375)])
def test_how_lift_is_shared_by_pressure_and_momentum(
    verify: Verify, radius: float, pressure: float, momentum: float
) -> None:
    # on a circle rho U G (1 ± a²/r²) / 2; on the cylinder itself all is pressure
    push, carried = [], []
    for k in LEVELS:
        ledger = balance(prism(polar(lambda a: radius + 0 * a, 24 * 2**k), 0, 1), CYLINDER).momentum
        push.append(ledger.pressure()[1] - pressure)
        carried.append(-ledger.flux()[1] - momentum)
    assert_order_two(push, below=0.01 * LIFT)
    assert_order_two(carried, below=0.01 * LIFT)
    verify(
        what=f"Lift on a cylinder of 0.5 m through a circle of {radius:g} m: share of pressure and of momentum",
        source="Batchelor, section 6.6: rho U G (1 ± a²/r²) / 2",
        memory=True,
        expected=(pressure, momentum),
        got=(pressure + push[-1], momentum + carried[-1]),
        unit="N",
        tolerance=0.01 * LIFT,
        why="192 facets",
        order=(observed_order(SIZES, push), 2, 0.12),
        kind="law",
        law="momentum",
    )


def test_no_lift_without_the_cylinder_inside() -> None:
    contour = polar(lambda a: 0.4 + 0.1 * np.cos(3 * a + 0.4), 128) + np.array([1.5, 0.6])
    found = balance(prism(contour, 0, 1), CYLINDER)
    assert np.linalg.norm(found.load.from_balance.force) < 1e-3 * LIFT
    assert found.momentum.relative() < 1e-3


# ---- sphere ---------------------------------------------------------------------------------

SPHERE = ideal_sphere(1.0, 1.0, 1.0)
TURN, _ = rigid_motion(np.random.default_rng(2))


def test_a_sphere_has_no_drag() -> None:
    # d'Alembert; the body in the middle of an odd-shaped control surface, turned so that no symmetry helps
    walls, far = [], []
    for k in LEVELS:
        body = moved(sphere(k + 1), TURN, (0, 0, 0))
        outer = mapped(odd_body(k + 1), lambda x: 2.2 * x)
        surface = together(far=outer, body=turned(body)).surface({"body": "wall"})
        found = balance_of(surface, SPHERE.lay(surface), anchor=ANCHOR).balance
        walls.append(np.linalg.norm(found.load.from_walls.force))
        far.append(np.linalg.norm(found.load.from_balance.force))
    assert walls[0] < 1e-12  # by the icosahedral symmetry of the mesh, at any orientation
    # of the flux's pieces, rho U² A = 15 N
    assert_order_two(far, below=0.05, tolerance=0.3)


ROUND_THE_SPHERE: dict[str, Callable[[int], Solid]] = {
    "box": lambda k: box((-1.5, -1.8, -1.4), (1.7, 1.5, 2.0), 4 * 2**k),
    "sphere off centre": lambda k: sphere(k + 1, 1.8, (0.3, -0.2, 0.4)),
    "odd body": lambda k: mapped(odd_body(k + 1), lambda x: 2.2 * x),
}


@pytest.mark.parametrize("name", ROUND_THE_SPHERE)
def test_no_drag_through_any_surface_round_the_sphere(verify: Verify, name: str) -> None:
    errors, turning = [], []
    for k in LEVELS:
        load = balance(ROUND_THE_SPHERE[name](k), SPHERE).load.from_balance
        errors.append(np.linalg.norm(load.force))
        turning.append(np.linalg.norm(load.moment))
    assert_order_two(errors, below=0.05, tolerance=0.3)
    assert_order_two(turning, below=0.05, tolerance=0.3)
    verify(
        what=f"Ideal flow past a sphere through this surface, {name}: force",
        source="d'Alembert 1752: none",
        memory=True,
        expected=(0, 0, 0),
        got=load.force,
        unit="N",
        tolerance=0.05,
        why="rho U² A is 15 N; linear data on the finest of three meshes",
        order=(observed_order(SIZES, errors), 2, 0.3),
        kind="law",
        law="momentum",
    )


def test_each_half_of_a_sphere_is_sucked_outward(verify: Verify) -> None:
    # axial force (pi/16) rho U² a² = 0.19634954085 away from the middle (computed by two routes): a part of a surface,
    # with the pressure counted from the far stream. The dome faces downstream here; both halves are alike.
    errors = []
    for k in LEVELS:
        body = dome(1.0, np.pi / 2, 12 * 2**k, 3 * 2**k)
        cut = turned(body)  # the fluid is outside the sphere
        points, faces = cut.points, [cut.faces[f] for f in cut.groups["dome"]]
        surface = Solid(points, faces, {"dome": np.arange(len(faces))}).surface(rest="wall", closed=False)
        flow = lay_flow(surface, pressure=SPHERE.pressure(surface.points))
        force = balance_of(surface, flow).balance.load.from_walls.force
        errors.append(force[2] - np.pi / 16)
    assert_order_two(errors, below=0.01)
    verify(
        what="Ideal flow past a sphere: axial pressure force on one half over rho U² a²",
        source="the potential of a sphere (Batchelor, section 6.8): pi/16",
        memory=True,
        expected=0.19634954085,
        got=np.pi / 16 + errors[-1],
        tolerance=0.01,
        why="96 × 24 facets",
        order=(observed_order(SIZES, errors), 2, 0.12),
        kind="law",
        law="momentum",
    )


def test_impulsive_pressure_on_a_sphere_is_its_added_mass(verify: Verify) -> None:
    # p = rho a³ A·x / (2 r³) on a sphere with the acceleration A: force -(2/3) pi rho a³ A (Batchelor 6.8, from memory)
    acceleration = np.array([0.3, -0.5, 0.8])
    errors = []
    for k in LEVELS:
        surface = sphere(k + 1).surface(rest="wall")  # normals out of the sphere: -∮ p n dA is the force on it
        pressure = surface.points @ acceleration / 2
        force = balance_of(surface, lay_flow(surface, pressure=pressure)).balance.momentum.pressure()
        errors.append(np.linalg.norm(force + 2 / 3 * np.pi * acceleration))
    assert_order_two(errors, below=0.02)
    verify(
        what="Sphere that starts: impulsive pressure on it, over the acceleration",
        source="Batchelor, section 6.8: added mass (2/3) pi rho a³",
        memory=True,
        expected=-2 / 3 * np.pi * acceleration,
        got=force,
        unit="N",
        tolerance=0.02,
        why="5120 facets",
        order=(observed_order(SIZES, errors), 2, 0.12),
        kind="law",
        law="momentum",
    )


# ---- sources --------------------------------------------------------------------------------

STRENGTH = 3.5
ROUND: dict[str, Callable[[int], Solid]] = {
    "box": lambda k: box((-0.9, -1.1, -0.8), (1.2, 1.0, 1.3), 4 * 2**k),
    "sphere off centre": lambda k: sphere(k + 1, 1.0, (0.2, -0.1, 0.3)),
    "odd body": lambda k: odd_body(k + 1),
}


@pytest.mark.parametrize("name", ROUND)
def test_a_source_in_a_stream(verify: Verify, name: str) -> None:
    # Lagally (Milne-Thomson, from memory): mass rho Q and momentum rho Q U leave through any surface round the
    # source; the force on the source is -rho Q U
    stream = np.array([1.2, -1.0, 1.25])
    flow = sources(DENSITY, stream, (STRENGTH, (0, 0, 0)))
    thrust = DENSITY * STRENGTH * stream
    mass, force, moment = [], [], []
    for k in LEVELS:
        found = balance(ROUND[name](k), flow)
        mass.append(found.mass.residual - DENSITY * STRENGTH)
        force.append(np.linalg.norm(found.load.from_balance.force + thrust))
        moment.append(np.linalg.norm(found.load.from_balance.moment + np.cross(-ANCHOR, thrust)))
    assert_order_two(mass, below=0.01 * DENSITY * STRENGTH, tolerance=0.2)
    assert_order_two(force, below=0.02 * np.linalg.norm(thrust), tolerance=0.2)
    assert_order_two(moment, below=0.02 * np.linalg.norm(thrust), tolerance=0.2)
    verify(
        what=f"Source of 3.5 m³/s within this surface, {name}: mass out",
        source="definition of a source: rho Q",
        expected=4.2,
        got=4.2 + mass[-1],
        unit="kg/s",
        tolerance=0.01 * 4.2,
        why="linear data on the finest of three meshes",
        order=(observed_order(SIZES, mass), 2, 0.2),
        kind="law",
        law="mass",
    )
    verify(
        what=f"Source of 3.5 m³/s in a stream, within this surface, {name}: force on it",
        source="Lagally 1922; Milne-Thomson, Theoretical Hydrodynamics: -rho Q U",
        memory=True,
        expected=-thrust,
        got=found.load.from_balance.force,
        unit="N",
        tolerance=0.02,
        relative=True,
        why="linear data on the finest of three meshes",
        order=(observed_order(SIZES, force), 2, 0.2),
        kind="law",
        law="momentum",
    )


def test_how_a_source_shares_its_force_on_a_sphere(verify: Verify) -> None:
    # Q = 3.5, U = 2: mass 4.2; momentum 11.2 (4/3 of 8.4) and pressure -2.8, computed by two routes
    flow = sources(DENSITY, (0, 0, 2.0), (STRENGTH, (0, 0, 0)))
    mass, carried, push = [], [], []
    for k in LEVELS:
        found = balance(sphere(k + 1, 0.8), flow)
        mass.append(found.mass.residual - 4.2)
        carried.append(found.momentum.flux()[2] - 11.2)
        push.append(-found.momentum.pressure()[2] + 2.8)
    for errors in (mass, carried, push):
        assert_order_two(errors, below=0.1)
    verify(
        what="Source of 3.5 m³/s in a stream of 2 m/s, in a sphere: mass, momentum, pressure",
        source="Lagally 1922: rho Q, 4/3 and -1/3 of rho Q U",
        memory=True,
        expected=(4.2, 11.2, -2.8),
        got=(4.2 + mass[-1], 11.2 + carried[-1], push[-1] - 2.8),
        tolerance=0.1,
        why="5120 facets",
        order=(observed_order(SIZES, carried), 2, 0.12),
        kind="law",
        law="momentum",
    )


def test_two_sources_attract(verify: Verify) -> None:
    # force rho Q1 Q2 / (4 pi d²) on each, toward the other: 0.29708922710 for 3.5, 2 and 1.5 m
    flow = sources(DENSITY, (0, 0, 0), (STRENGTH, (0, 0, 0)), (2.0, (0, 0, 1.5)))
    errors = []
    for k in (2, 3, 4):
        load = balance(mapped(odd_body(k), lambda x: 0.6 * x), flow).load.from_balance
        errors.append(np.linalg.norm(load.force - [0, 0, 0.29708922710]))
    assert_order_two(errors, below=0.05, tolerance=0.2)
    verify(
        what="Two sources, 3.5 and 2 m³/s, 1.5 m apart: force on the first towards the second",
        source="Lagally 1922: rho Q1 Q2 / (4 pi d²)",
        memory=True,
        expected=0.29708922710,
        got=load.force[2],
        unit="N",
        tolerance=0.05,
        why="the odd body passes near the source",
        order=(observed_order(SIZES, errors), 2, 0.2),
        kind="law",
        law="momentum",
    )


def test_nothing_comes_from_sources_outside() -> None:
    flow = sources(DENSITY, (1, 0, 0), (STRENGTH, (0, 0, 0)))
    errors = []
    for k in LEVELS:
        found = balance(angle_block(4 * 2**k, (1, 0.5, 0.2), (2, 1.5, 1.2)), flow)
        errors.append(found.momentum.relative())
        assert abs(found.mass.relative) < 1e-2
    assert_order_two(errors, below=1e-3)
