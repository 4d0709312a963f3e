"""Fluid at rest: its pressure field is linear, so that flat facets integrate it exactly."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from fluxmesh import Hardware, PressureMeaning, balance_of, lay_flow
from fluxmesh.balance.hardware import HardwareLoad
from fluxmesh.errors import FieldError
from fluxmesh.field.pressure import Head, PressureKind
from tests.measures import Moments, moments, observed_order
from tests.solids import (
    Solid,
    any_polyhedron,
    box,
    disc,
    moved,
    odd_body,
    one_group,
    quadratic,
    rigid_motion,
    sphere,
    together,
    turned,
)
from tests.verification import Verify

DENSITY, GRAVITY, AMBIENT = 998.2, 9.80665, 101325.0
DOWN = np.array([0.0, 0.0, -GRAVITY])
ANCHOR = np.array([0.3, -1.2, 0.8])


def load_of(solid: Solid, pressure: Any, **options: Any) -> HardwareLoad:
    """Load of fluid at rest on walls all round it; it must close, both ways."""
    surface = solid.surface(rest="wall")
    flow = lay_flow(surface, density=DENSITY, pressure=pressure(surface.points), **options)
    outcome = balance_of(surface, flow, anchor=ANCHOR, tolerance=1e-12)
    assert outcome.verdict.closes is True
    return outcome.balance.load


def assert_weight(load: HardwareLoad, held: Moments, size: float, gravity: np.ndarray = DOWN) -> None:
    """The load is the weight of the fluid held, through its centroid."""
    weight = DENSITY * held.volume * gravity
    moment = np.cross(held.centroid - ANCHOR, weight)
    for found in (load.from_walls, load.from_balance):
        # entries as large as `size` cancel; 1e-13 of them is some hundred roundings
        assert_allclose(found.force, weight, rtol=0, atol=1e-13 * size)
        assert_allclose(found.moment, moment, rtol=0, atol=1e-12 * size)


def size_of(solid: Solid, level: float) -> float:
    """Pressure force of one sign on a body with gauge pressure up to `level`."""
    return level * float(np.prod(np.sort(np.ptp(solid.points, axis=0))[1:])) * 6


@settings(max_examples=60, deadline=None)
@given(seed=st.integers(0, 2**32 - 1), level=st.floats(-1e6, 1e6))
def test_load_on_any_polyhedron_is_the_weight_through_the_centroid(seed: int, level: float) -> None:
    # Archimedes; ∮ p n dA = ∫ grad p dv with grad p = rho g, and the same for moments (Batchelor 4.1, from memory)
    body = any_polyhedron(seed)
    load = load_of(body, lambda x: level + DENSITY * x @ DOWN, gravity=DOWN)
    assert_weight(load, moments(body), size_of(body, abs(level) + 1e5))


@settings(max_examples=25, deadline=None)
@given(seed=st.integers(0, 2**32 - 1))
def test_gravity_may_point_anywhere(seed: int) -> None:
    body = any_polyhedron(seed)
    gravity = rigid_motion(np.random.default_rng(seed))[0] @ DOWN
    load = load_of(body, lambda x: 2e4 + DENSITY * x @ gravity, gravity=gravity)
    assert_weight(load, moments(body), size_of(body, 1e5), gravity)


# Every way to say the same pressure: an array as exported, what it means, and the ambient pressure.
ASLANT = GRAVITY * np.array([0.48, -0.6, -0.64])
FAR = (5.0, 1.0, 7.0)
SAME = {
    "gauge with head": (lambda x: 3e4 + DENSITY * x @ ASLANT, PressureMeaning(), None),
    "absolute with head": (
        lambda x: AMBIENT + 3e4 + DENSITY * x @ ASLANT,
        PressureMeaning(PressureKind.ABSOLUTE),
        AMBIENT,
    ),
    "kinematic with head": (lambda x: 3e4 / DENSITY + x @ ASLANT, PressureMeaning(PressureKind.KINEMATIC), None),
    "gauge, head removed": (lambda x: np.full(len(x), 3e4), PressureMeaning(head=Head.REMOVED), None),
    "absolute, head removed": (
        lambda x: np.full(len(x), AMBIENT + 3e4),
        PressureMeaning(PressureKind.ABSOLUTE, Head.REMOVED),
        AMBIENT,
    ),
    "kinematic, head removed about a far datum": (
        lambda x: np.full(len(x), 3e4 / DENSITY + np.dot(FAR, ASLANT)),
        PressureMeaning(PressureKind.KINEMATIC, Head.REMOVED, FAR),
        None,
    ),
}
KINDS = {f"polyhedron {seed}": any_polyhedron(seed) for seed in range(5)}
ALIKE = {name: (body, body) for name, body in KINDS.items()}
ALIKE["quadratic faces"] = (quadratic(KINDS["polyhedron 0"]), KINDS["polyhedron 0"])


@pytest.mark.parametrize("name", SAME)
@pytest.mark.parametrize("shape", ALIKE)
def test_every_kind_of_pressure_gives_the_same_load(name: str, shape: str) -> None:
    pressure, meaning, ambient = SAME[name]
    body, straight = ALIKE[shape]
    load = load_of(body, pressure, gravity=ASLANT, meaning=meaning, ambient=ambient)
    assert_weight(load, moments(straight), size_of(body, 2e5), ASLANT)


@pytest.mark.parametrize("name", SAME)
@pytest.mark.parametrize("at", ["points", "faces"])
def test_every_kind_of_pressure_gives_the_same_force_on_an_open_wall(name: str, at: str) -> None:
    # on a wall alone the level counts: force (3e4 + rho g·x_c) A on the unit square x = 1, 0 < y, z < 1; a head that is
    # put back varies over the face also where the export has one value a face
    pressure, meaning, ambient = SAME[name]
    points = np.array([[1, 0, 0], [1, 1, 0], [1, 1, 1], [1, 0, 1.0]])
    surface = one_group(points, [[0, 1, 2, 3]]).surface(rest="wall", closed=False)
    centre = np.array([[1, 0.5, 0.5]])
    exported = pressure(points if at == "points" else centre)
    flow = lay_flow(surface, density=DENSITY, pressure=exported, gravity=ASLANT, meaning=meaning, ambient=ambient)
    load = balance_of(surface, flow, anchor=centre[0]).balance.load
    assert load.from_balance is None
    size = 3e4 + DENSITY * (centre @ ASLANT)[0]
    assert_allclose(load.from_walls.force, [size, 0, 0], rtol=1e-13, atol=1e-10)
    if at == "points" or meaning.head is Head.REMOVED:
        # moment about the middle of ∫ (x - c) rho g·(x - c) dA with ∫ y² = 1/12
        expected = DENSITY / 12 * np.array([0, ASLANT[2], -ASLANT[1]])
        assert_allclose(load.from_walls.moment, expected, rtol=1e-9, atol=1e-9)


@settings(max_examples=25, deadline=None)
@given(seed=st.integers(0, 2**32 - 1), datum=st.tuples(*[st.floats(-50, 50)] * 3))
def test_the_datum_of_a_removed_head_does_not_matter_on_a_closed_surface(
    seed: int, datum: tuple[float, float, float]
) -> None:
    body = any_polyhedron(seed)
    meaning = PressureMeaning(head=Head.REMOVED, datum=datum)
    load = load_of(body, lambda x: np.zeros(len(x)), gravity=DOWN, meaning=meaning)
    assert_weight(load, moments(body), size_of(body, 1e6))


def test_one_value_of_pressure_is_read_like_an_array() -> None:
    body = any_polyhedron(2)
    surface = body.surface(rest="wall")
    flow = lay_flow(surface, density=DENSITY, pressure=3e4, gravity=DOWN, meaning=PressureMeaning(head=Head.REMOVED))
    load = balance_of(surface, flow, anchor=ANCHOR).balance.load
    assert_weight(load, moments(body), size_of(body, 1e5))


def test_absolute_pressure_needs_the_ambient_pressure() -> None:
    with pytest.raises(FieldError, match="absolute, but no ambient pressure"):
        load_of(box((0, 0, 0), (1, 1, 1)), lambda x: 0 * x[:, 0], meaning=PressureMeaning(PressureKind.ABSOLUTE))


def test_quadratic_faces_are_exact_too() -> None:
    body = moved(box((0, 0, 0), (1, 2, 0.5), 2), *rigid_motion(np.random.default_rng(3)))
    load = load_of(quadratic(body), lambda x: 1e4 + DENSITY * x @ DOWN, gravity=DOWN)
    assert_weight(load, moments(body), size_of(body, 1e5))


def test_a_full_tank_rests_on_the_sum_of_its_weights() -> None:
    # fluid and hardware hang on one line: through their common centre of mass, up
    body = any_polyhedron(1)
    held, hardware = moments(body), Hardware(350.0, (0.4, -0.2, 0.7))
    surface = body.surface(rest="wall")
    pressure = 2e4 + DENSITY * surface.points @ DOWN
    flow = lay_flow(surface, density=DENSITY, pressure=pressure, gravity=DOWN)
    done = balance_of(surface, flow, anchor=ANCHOR, hardware=hardware).balance
    mass = DENSITY * held.volume + hardware.mass
    centre = (DENSITY * held.first + hardware.mass * np.array(hardware.centre)) / mass
    reaction = done.reaction
    assert_allclose(reaction.wrench.force, -mass * DOWN, rtol=0, atol=1e-12 * mass * GRAVITY)
    assert_allclose(reaction.wrench.moment, np.cross(centre - ANCHOR, -mass * DOWN), rtol=0, atol=1e-8)
    line = reaction.line_of_action
    assert_allclose(line.direction, [0, 0, 1], rtol=0, atol=1e-12)
    assert_allclose(line.point[:2], centre[:2], rtol=0, atol=1e-12)
    assert_allclose(line.couple, 0, rtol=0, atol=1e-8)
    # let go, it falls
    assert_allclose(done.release.acceleration, DOWN, rtol=0, atol=1e-10)
    assert_allclose(done.release.turning_moment, 0, rtol=0, atol=1e-8)


# ---- bodies in a fluid ----------------------------------------------------------------------


@pytest.mark.parametrize("seed", [0, 1, 2, 3])
def test_buoyancy_of_a_body_in_a_tank(seed: int) -> None:
    # Archimedes: the fluid lifts the body by the weight of what it displaces, through the body's centroid
    body, tank = any_polyhedron(seed), box((-9, -9, -9), (9, 9, 9))
    surface = together(tank=tank, body=turned(body)).surface({"body": "wall", "tank": "wall"}, rest="wall")
    pressure = 5e4 + DENSITY * surface.points @ DOWN
    flow = lay_flow(surface, density=DENSITY, pressure=pressure, gravity=DOWN)
    balance = balance_of(surface, flow, anchor=ANCHOR, tolerance=1e-12).balance
    row = [group.name for group in surface.groups].index("body")
    held = moments(body)
    lift = -DENSITY * held.volume * DOWN
    assert_allclose(-balance.momentum.group_pressure[row], lift, rtol=0, atol=1e-13 * size_of(body, 2e5))
    assert_allclose(
        -balance.angular.group_pressure[row],
        np.cross(held.centroid - ANCHOR, lift),
        rtol=0,
        atol=1e-12 * size_of(body, 2e5),
    )
    assert_allclose(balance.enclosed.volume, 18**3 - held.volume, rtol=1e-13)


def test_lift_of_a_sphere_converges_to_its_closed_form(verify: Verify) -> None:
    # sphere of 0.4 m at (1, 2, -3): F = 2624.2597800 N, moment about the origin (+5248.5195600, -2624.2597800, 0)
    errors = []
    for level in (1, 2, 3, 4):
        surface = sphere(level, 0.4, (1, 2, -3)).surface(rest="wall")
        pressure = 7e4 + DENSITY * surface.points @ DOWN
        outcome = balance_of(surface, lay_flow(surface, density=DENSITY, pressure=pressure))
        # without gravity nothing holds the fluid up: the residual is the lift
        lift, turn = -outcome.balance.load.from_walls.force, -outcome.balance.load.from_walls.moment
        errors.append(lift[2] - 2624.2597800)
        assert_allclose(turn, [2 * lift[2], -lift[2], 0], rtol=0, atol=1e-9)
    assert observed_order([8, 4, 2, 1], errors) == pytest.approx(2.0, abs=0.05)
    assert_allclose(errors[-1] + (errors[-1] - errors[-2]) / 3, 0, rtol=0, atol=2e-5 * 2624)
    verify(
        what="Sphere of 0.4 m in water at 998.2 kg/m³: lift, extrapolated from two meshes",
        source="Archimedes: rho g 4/3 pi R³",
        memory=True,
        expected=2624.25978,
        got=2624.25978 + errors[-1] + (errors[-1] - errors[-2]) / 3,
        unit="N",
        tolerance=2e-5 * 2624,
        why="terms of order four are left",
        order=(observed_order([8, 4, 2, 1], errors), 2, 0.05),
        kind="law",
        law="momentum",
    )
    verify(
        what="Sphere of 0.4 m at (1, 2, -3): moment of its lift about the origin, over the lift",
        source="Archimedes: the lift acts at the centre",
        memory=True,
        expected=(2, -1, 0),
        got=turn / lift[2],
        unit="m",
        tolerance=1e-11,
        why="symmetry of the mesh: round-off",
        kind="law",
        law="angular",
    )


def test_an_odd_body_of_quadratic_faces_is_lifted_to_round_off() -> None:
    # isoparametric faces map the linear pressure exactly, so the divergence theorem holds on the curved body itself
    body = odd_body(2, curved=True)
    surface = body.surface(rest="wall")
    flow = lay_flow(surface, density=DENSITY, pressure=2e4 + DENSITY * surface.points @ DOWN, gravity=DOWN)
    balance = balance_of(surface, flow, anchor=ANCHOR).balance
    weight = DENSITY * balance.enclosed.volume * DOWN
    assert_allclose(balance.load.from_walls.force, weight, rtol=0, atol=1e-13 * size_of(body, 1e5))
    assert_allclose(
        balance.load.from_walls.moment,
        np.cross(balance.enclosed.centroid - ANCHOR, weight),
        rtol=0,
        atol=1e-12 * size_of(body, 1e5),
    )


# ---- gates: open walls ----------------------------------------------------------------------


def gate(plane: np.ndarray, faces: Any, *, depth: float, slope: float, weight: float) -> tuple[float, np.ndarray]:
    """Size of the load on a flat gate, and its centre of pressure in the plane.

    The plane's second coordinate falls at `slope` to the level; its origin lies at `depth`.
    """
    across, down = plane.T
    points = np.column_stack([np.cos(slope) * down, across, -depth - np.sin(slope) * down])
    surface = one_group(points, faces).surface(rest="wall", closed=False)
    flow = lay_flow(surface, pressure=-weight * points[:, 2])
    load = balance_of(surface, flow, anchor=(0, 0, -depth)).balance.load.from_walls
    normal = load.force / np.linalg.norm(load.force)
    assert_allclose(normal, [-np.sin(slope), 0, -np.cos(slope)], rtol=0, atol=1e-12)  # out of the fluid
    foot = np.cross(load.force, load.moment) / (load.force @ load.force)  # where the force meets the plane
    return float(np.linalg.norm(load.force)), np.array([foot[1], foot @ [np.cos(slope), 0, -np.sin(slope)]])


def rectangle(width: float, length: float) -> np.ndarray:
    return np.array([[-width / 2, 0], [width / 2, 0], [width / 2, length], [-width / 2, length]])


@pytest.mark.parametrize("faces", [[[0, 1, 2, 3]], [[0, 1, 2], [0, 2, 3]]])
def test_inclined_rectangular_gate(verify: Verify, faces: list[list[int]]) -> None:
    # 1.5 m × 2 m at 60 degrees, top edge 3 m deep; centre of pressure I / (y_c A) below the centroid (White ch. 2)
    force, centre = gate(rectangle(1.5, 2.0), faces, depth=3.0, slope=np.radians(60), weight=DENSITY * GRAVITY)
    assert_allclose(force, 113533.54518, rtol=1e-10)
    assert_allclose(centre, [0, 1.0746697459], rtol=0, atol=1e-10)
    verify(
        what=f"Gate of 1.5 m × 2 m at 60 degrees, in {len(faces)} faces: load and depth of its centre along the gate",
        source="White, Fluid Mechanics, ch. 2: I / (y_c A) below the centroid",
        memory=True,
        expected=(1.1353354518, 1.0746697459),
        got=(force / 1e5, centre[1]),
        unit="(1e5 N, m)",
        tolerance=2e-10,
        why="linear pressure on flat faces; figures of 11 digits",
        kind="law",
        law="angular",
    )


def test_published_rectangular_gate(verify: Verify) -> None:
    # White, Fluid Mechanics, example 2.5 (number from memory): 5 ft × 10 ft (8 along, 6 down), centroid 12 ft deep,
    # 64 lbf/ft³: 38400 lbf, centre of pressure 0.417 ft below the centroid
    force, centre = gate(rectangle(5, 10), [[0, 1, 2, 3]], depth=9.0, slope=np.arcsin(0.6), weight=64.0)
    assert_allclose(force, 38400, rtol=1e-12)
    assert_allclose(centre[1] - 5, 0.417, rtol=0, atol=5e-4)
    verify(
        what="Gate of 5 ft × 10 ft, 64 lbf/ft³: load",
        source="White, Fluid Mechanics, example 2.5",
        memory=True,
        expected=38400,
        got=force,
        unit="lbf",
        tolerance=1e-6,
        why="exact in the data of the example",
        kind="law",
        law="momentum",
    )
    verify(
        what="Gate of 5 ft × 10 ft: centre of pressure below the centroid",
        source="White, Fluid Mechanics, example 2.5",
        memory=True,
        expected=0.417,
        got=centre[1] - 5,
        unit="ft",
        tolerance=5e-4,
        why="printed with three digits",
        kind="law",
        law="angular",
    )


def test_published_circular_gate(verify: Verify) -> None:
    # diameter 4 m at 60 degrees, shaft through its centre 10 m deep, 9.80 kN/m³: 1.23 MN, 1.07e5 N m about the shaft
    # (published textbook example, from memory)
    plane, faces = disc(128, 16)
    force, centre = gate(2 * plane, faces, depth=10.0, slope=np.radians(60), weight=9.80e3)
    assert_allclose(force, 1.23e6, rtol=0, atol=5e3)
    assert_allclose(force * centre[1], 1.07e5, rtol=0, atol=500)
    verify(
        what="Circular gate of 4 m at 60 degrees, shaft 10 m deep: moment about the shaft",
        source="published textbook example",
        memory=True,
        expected=1.07e5,
        got=force * centre[1],
        unit="N m",
        tolerance=500,
        why="printed with three digits",
        kind="law",
        law="angular",
    )


def test_vertical_circle_that_touches_the_surface(verify: Verify) -> None:
    # centre of pressure 5 R / 4 below the surface (White ch. 2, from memory)
    errors = []
    for n in (8, 16, 32, 64):
        plane, faces = disc(n, n // 4)
        _, centre = gate(plane, faces, depth=1.0, slope=np.pi / 2, weight=1.0)
        assert_allclose(centre[0], 0, rtol=0, atol=1e-13)
        errors.append(1 + centre[1] - 1.25)
    assert observed_order([8, 4, 2, 1], errors) == pytest.approx(2.0, abs=0.05)
    assert abs(errors[-1]) < 1e-3
    verify(
        what="Circle of radius 1 that touches the surface: depth of the centre of pressure",
        source="White, Fluid Mechanics, ch. 2: 5 R / 4",
        memory=True,
        expected=1.25,
        got=1.25 + errors[-1],
        unit="m",
        tolerance=1e-3,
        why="64 facets around",
        order=(observed_order([8, 4, 2, 1], errors), 2, 0.05),
        kind="law",
        law="angular",
    )
