"""Moving and accelerating control surfaces: what must not change with the observer, and classic results."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from numpy.typing import ArrayLike

from fluxmesh import Hardware, Outcome, balance_of, lay_flow
from fluxmesh.balance.storage import Storage
from fluxmesh.field.frame import Frame
from tests.measures import moments
from tests.solids import Solid, any_polyhedron, box, odd_body
from tests.verification import Verify

ROLES = {"feed": "inlet", "shell": "wall", "vent": "open"}
seeds = st.integers(0, 2**32 - 1)
quick = settings(max_examples=15, deadline=None)


def in_three_groups(solid: Solid, rng: np.random.Generator) -> Solid:
    """Return the body with its faces dealt out to an inlet, a wall and an open group."""
    owner = rng.permutation(np.arange(len(solid.faces)) % 3)
    return replace(solid, groups={name: np.flatnonzero(owner == k) for k, name in enumerate(ROLES)})


def triple(values: ArrayLike) -> tuple[float, float, float]:
    """Return three plain numbers."""
    x, y, z = np.asarray(values, dtype=float)
    return float(x), float(y), float(z)


def assert_same(one: Outcome, two: Outcome, tolerance: float = 1e-12) -> None:
    """The same mass flows, load, moment and residuals, to round-off of what they are made of."""
    a, b = one.balance, two.balance
    forces, couples = a.momentum.size(), a.angular.size()
    # round-off comes from fluxes as large as the drift of the moving surface, too
    forces += max(float(np.abs(x.momentum.group_flux).sum()) for x in (a, b))
    couples += max(float(np.abs(x.angular.group_flux).sum()) for x in (a, b))
    flows = a.table.column("mass_flow")
    assert_allclose(b.table.column("mass_flow"), flows, rtol=0, atol=tolerance * np.abs(flows).sum())
    assert_allclose(b.momentum.residual(), a.momentum.residual(), rtol=0, atol=tolerance * forces)
    assert_allclose(b.angular.residual(), a.angular.residual(), rtol=0, atol=tolerance * couples)
    for name in ("from_walls", "from_balance"):
        first, second = getattr(a.load, name), getattr(b.load, name)
        assert_allclose(second.force, first.force, rtol=0, atol=tolerance * forces)
        assert_allclose(second.moment, first.moment, rtol=0, atol=tolerance * couples)


# ---- one flow, several observers ------------------------------------------------------------


@quick
@given(seed=seeds, uniform=st.booleans())
def test_a_steady_flow_loads_the_same_for_every_observer(seed: int, uniform: bool) -> None:
    # (V, W) → (V + U, W + U): fluxes of momentum by groups change, their sum does not where mass closes
    # (moving surface: Batchelor, An Introduction to Fluid Dynamics, section 3.2, from memory)
    rng = np.random.default_rng(seed)
    solid = in_three_groups(any_polyhedron(seed), rng)
    surface = solid.surface(ROLES)
    slope = np.zeros((3, 3)) if uniform else rng.standard_normal((3, 3))
    slope -= np.trace(slope) / 3 * np.eye(3)
    velocity = rng.standard_normal(3) + solid.points @ slope.T
    data: dict[str, Any] = {"pressure": rng.standard_normal(len(solid.points)), "density": 1.3, "gravity": (0, 1, -9)}
    anchor = rng.standard_normal(3)
    still = balance_of(surface, lay_flow(surface, velocity=velocity, **data), anchor=anchor)
    drift = 10 * rng.standard_normal(3)
    moving = balance_of(
        surface,
        lay_flow(surface, velocity=velocity + drift, frame=Frame(velocity=triple(drift)), **data),
        anchor=anchor,
    )
    assert_same(still, moving)
    assert abs(still.balance.table.total("mass_flow")) < 1e-12 * np.abs(still.balance.table.column("mass_flow")).sum()
    # each group carries the momentum of the drift
    ledgers = moving.balance.momentum, still.balance.momentum
    added = np.outer(still.balance.table.column("mass_flow"), drift)
    assert_allclose(ledgers[0].group_flux - ledgers[1].group_flux, added, rtol=0, atol=1e-12 * np.abs(added).max())


@quick
@given(seed=seeds)
def test_any_flow_that_stores_mass_loads_the_same_for_every_observer(seed: int) -> None:
    # for velocities at random mass does not close: it is stored, and with it the momentum of the drift
    rng = np.random.default_rng(seed)
    solid = in_three_groups(any_polyhedron(seed), rng)
    surface = solid.surface(ROLES)
    velocity = rng.standard_normal((len(solid.points), 3))
    data: dict[str, Any] = {"pressure": rng.standard_normal(len(solid.points)), "density": 0.8, "gravity": (0, 1, -9)}
    alone = lay_flow(surface, velocity=velocity, **data)
    out = float(balance_of(surface, alone).balance.table.total("mass_flow"))
    rates = Storage(mass=-out, momentum=rng.standard_normal(3), angular_momentum=rng.standard_normal(3))
    drift = 5 * rng.standard_normal(3)
    moving = lay_flow(surface, velocity=velocity + drift, frame=Frame(velocity=triple(drift)), **data)
    anchor = rng.standard_normal(3)
    one, two = (balance_of(surface, flow, anchor=anchor, storage=rates) for flow in (alone, moving))
    assert_same(one, two)
    assert abs(out) < 1e-9 or one.balance.mass.relative < 1e-12
    # without the rate of the mass the observer would matter
    if abs(out) > 0.1:
        wrong = balance_of(surface, moving, anchor=anchor).balance.load.from_balance.force
        without = balance_of(surface, alone, anchor=anchor).balance.load.from_balance.force
        assert_allclose(wrong - without, -out * drift, rtol=0, atol=1e-11 * np.abs(drift).max() * (1 + abs(out)) * 100)


@quick
@given(seed=seeds)
def test_absolute_and_relative_velocities_tell_the_same(seed: int) -> None:
    rng = np.random.default_rng(seed)
    solid = in_three_groups(any_polyhedron(seed), rng)
    surface = solid.surface(ROLES)
    turning = rng.standard_normal(3)
    frame = Frame(
        velocity=triple(rng.standard_normal(3)),
        rate=float(rng.standard_normal()),
        axis=triple(turning / np.linalg.norm(turning)),
        through=triple(rng.standard_normal(3)),
    )
    relative = rng.standard_normal((len(solid.points), 3))
    data: dict[str, Any] = {"pressure": rng.standard_normal(len(solid.points)), "density": 1.1, "frame": frame}
    one = balance_of(surface, lay_flow(surface, velocity=relative, velocity_frame="relative", **data))
    two = balance_of(surface, lay_flow(surface, velocity=relative + frame.at(solid.points), **data))
    size = np.abs(one.balance.table.values).max()
    assert_allclose(two.balance.table.values, one.balance.table.values, rtol=0, atol=1e-13 * size)
    # one value a face of an absolute velocity varies over the face once the turning is taken off
    middle = rng.standard_normal((surface.face_count, 3))
    each = lay_flow(surface, velocity=middle, at="faces", **{**data, "pressure": 0.0})
    rows = balance_of(surface, each).balance
    # so the momentum that is carried is that of the constant velocity, face by face
    alone = Solid(solid.points, solid.faces, {str(k): np.array([k]) for k in range(len(solid.faces))}).surface()
    single = balance_of(alone, lay_flow(alone, velocity=middle, at="faces", density=1.1, frame=frame)).balance
    carried = single.table.column("mass_flow")[:, None] * middle
    assert_allclose(single.momentum.group_flux, carried, rtol=0, atol=1e-12 * np.abs(carried).max())
    assert_allclose(rows.momentum.flux(), carried.sum(axis=0), rtol=0, atol=1e-12 * np.abs(carried).sum())


@quick
@given(seed=seeds)
def test_a_surface_that_sweeps_through_a_uniform_stream_carries_nothing(seed: int) -> None:
    # the geometric conservation law: a constant state stays one whatever surface moves through it
    # (Thomas and Lombard 1979, AIAA J. 17; from memory)
    rng = np.random.default_rng(seed)
    solid = any_polyhedron(seed)
    surface = solid.surface()
    stream, drift = rng.standard_normal(3), 20 * rng.standard_normal(3)
    frame = Frame(velocity=triple(drift))
    for told in ({"velocity": stream}, {"velocity": stream - drift, "velocity_frame": "relative"}):
        flow = lay_flow(surface, density=1.2, pressure=7.0, frame=frame, **told)
        found = balance_of(surface, flow).balance
        size = found.table.total("area") * np.linalg.norm(drift) * 30
        assert_allclose(found.table.total("mass_flow"), 0, rtol=0, atol=1e-14 * size)
        assert_allclose(found.momentum.residual(), 0, rtol=0, atol=1e-13 * size)
        arm = 1 + np.abs(solid.points).max()
        assert_allclose(found.angular.residual(), 0, rtol=0, atol=1e-13 * size * arm)
        # the momentum carried through the faces is that of the stream, not of the relative velocity
        assert_allclose(
            found.momentum.group_flux, np.outer(found.table.column("mass_flow"), stream), rtol=0, atol=1e-13 * size
        )


# ---- vanes ----------------------------------------------------------------------------------


def deflected(
    area: float, out: ArrayLike, speed: float, *, density: float = 1000.0, frame: Frame | None = None
) -> Outcome:
    """A jet along x of a given section that leaves with the velocity `out` by a port of the size that mass asks for.

    `speed` and `out` are absolute.
    """
    moving = np.zeros(3) if frame is None else np.asarray(frame.velocity)
    side = area**0.5
    length = side * (speed - moving[0]) / (np.asarray(out) - moving)[1]
    body = box((0, 0, 0), (length, side, side))
    wall = np.concatenate([body.groups[name] for name in ("x+", "y-", "z-", "z+")])
    groups = {"jet": body.groups["x-"], "away": body.groups["y+"], "vane": wall}
    surface = replace(body, groups=groups).surface({"jet": "inlet", "away": "outlet"}, rest="wall")
    ports = {"jet": {"velocity": (speed, 0, 0), "pressure": 0.0}, "away": {"velocity": triple(out), "pressure": 0.0}}
    return balance_of(surface, lay_flow(surface, density=density, supplied=ports, frame=frame))


def vane(speed: float, running: float, turn: float, area: float = 0.01, density: float = 1000.0) -> Outcome:
    """One vane that runs before the jet: seen from it the jet keeps its speed, without friction."""
    out = np.array([running, 0, 0]) + (speed - running) * np.array([np.cos(turn), np.sin(turn), 0])
    return deflected(area, out, speed, density=density, frame=Frame(velocity=(running, 0, 0)))


@pytest.mark.parametrize("turn", [30.0, 60.0, 120.0, 170.0])
@pytest.mark.parametrize("running", [0.0, 4.0, -3.0])
def test_force_on_a_moving_vane(verify: Verify, turn: float, running: float) -> None:
    # rho A (V - U)² (1 - cos), rho A (V - U)² sin (White ch. 3, from memory)
    angle = np.radians(turn)
    found = vane(20.0, running, angle).balance
    push = 1000.0 * 0.01 * (20.0 - running) ** 2
    force = push * np.array([1 - np.cos(angle), -np.sin(angle), 0])
    assert_allclose(found.load.from_balance.force, force, rtol=1e-12, atol=1e-12 * push)
    assert_allclose(found.mass.outflow, 1000.0 * 0.01 * (20.0 - running), rtol=1e-12)
    assert abs(found.mass.relative) < 1e-14
    verify(
        what=f"Vane that runs at {running:g} m/s before a jet of 20 m/s and turns it by {turn:g} degrees: force",
        source="White, Fluid Mechanics, ch. 3: rho A (V - U)² (1 - cos, sin)",
        memory=True,
        expected=force[:2],
        got=found.load.from_balance.force[:2],
        unit="N",
        tolerance=1e-8,
        why="round-off of 5 kN",
        kind="law",
        law="momentum",
    )


def test_published_moving_vane(verify: Verify) -> None:
    # Fox and McDonald, moving vane (from memory): 999 kg/m³, 0.003 m², 30 and 10 m/s, 60 degrees: what holds the vane
    # is -599 N and 1.04 kN; exact -599.4 and 1038.1912541
    found = vane(30.0, 10.0, np.radians(60), 0.003, 999.0).balance
    assert_allclose(found.reaction.wrench.force, [-599.4, 1038.1912541, 0], rtol=0, atol=1e-6)
    verify(
        what="Vane at 10 m/s, jet of 30 m/s and 0.003 m², 60 degrees: what holds it",
        source="Fox and McDonald, moving vane: -599 N and 1.04 kN",
        memory=True,
        expected=(-599.4, 1038.1912541),
        got=found.reaction.wrench.force[:2],
        unit="N",
        tolerance=1e-6,
        why="the figures computed unrounded",
        kind="law",
        law="momentum",
    )


def best_speed(power: Any, highest: float) -> tuple[float, float]:
    """Return where a power is greatest, and what it is."""
    from scipy.optimize import minimize_scalar

    found = minimize_scalar(lambda u: -power(u), bounds=(0.05, highest), method="bounded", options={"xatol": 1e-9})
    return float(found.x), -float(found.fun)


def test_one_vane_takes_most_at_a_third_of_the_jet_and_a_wheel_of_vanes_at_half(verify: Verify) -> None:
    # one vane: 8/27 (1 - cos) of the jet's rho A V³/2; a wheel, whose vanes take over one from another: (1 - cos)/2
    # (White ch. 3 and 11, from memory); with 15 degrees short of a full turn: 0.98296291 for the wheel
    speed, turn, area = 24.0, np.radians(165), 0.002
    jet = 1000.0 * area * speed**3 / 2

    def one(running: float) -> float:
        return running * float(vane(speed, running, turn, area).balance.load.from_balance.force[0])

    def wheel(running: float) -> float:
        # a surface at rest around the whole wheel
        out = np.array([running, 0, 0]) + (speed - running) * np.array([np.cos(turn), np.sin(turn), 0])
        return running * float(deflected(area, out, speed).balance.load.from_balance.force[0])

    at, most = best_speed(one, 23.0)
    assert_allclose(at, speed / 3, rtol=1e-6)
    verify(
        what="One vane, 165 degrees: best speed over the jet's, and greatest share of its power",
        source="White, Fluid Mechanics, ch. 3: 1/3 and 8/27 (1 - cos)",
        memory=True,
        expected=(1 / 3, 8 / 27 * (1 - np.cos(turn))),
        got=(at / speed, most / jet),
        tolerance=1e-6,
        why="found by a search for the maximum",
        kind="law",
        law="energy",
    )
    assert_allclose(most / jet, 8 / 27 * (1 - np.cos(turn)), rtol=1e-10)
    at, most = best_speed(wheel, 23.0)
    assert_allclose(at, speed / 2, rtol=1e-6)
    assert_allclose(most / jet, 0.98296291, rtol=1e-8)
    verify(
        what="Wheel of vanes, 165 degrees: best speed over the jet's, and greatest share of its power",
        source="White, Fluid Mechanics, ch. 11: 1/2 and (1 + cos 15°)/2",
        memory=True,
        expected=(1 / 2, 0.98296291),
        got=(at / speed, most / jet),
        tolerance=1e-6,
        why="found by a search for the maximum",
        kind="law",
        law="energy",
    )
    # the wheel has V / (V - U) vanes at work at a time
    assert_allclose(wheel(7.0), one(7.0) * speed / (speed - 7.0), rtol=1e-12)


def test_power_on_a_vane_is_told() -> None:
    found = vane(20.0, 4.0, np.radians(120)).balance
    assert_allclose(found.power.from_balance, 4.0 * found.load.from_balance.force[0], rtol=1e-12)


# ---- acceleration ---------------------------------------------------------------------------


@quick
@given(seed=seeds)
def test_liquid_at_rest_in_an_accelerated_tank(seed: int) -> None:
    # grad p = density (g - a), whatever the speed (Batchelor section 1.4, from memory); the walls push the liquid along
    rng = np.random.default_rng(seed)
    solid = any_polyhedron(seed)
    gravity, pull, drift = 9.8 * rng.standard_normal(3), 5 * rng.standard_normal(3), 30 * rng.standard_normal(3)
    density, anchor = 870.0, rng.standard_normal(3)
    surface = solid.surface(rest="wall")
    case = Hardware(12.0, triple(rng.standard_normal(3)))
    held = moments(solid)
    apparent = density * held.volume * (gravity - pull)
    for told in ({"velocity": (0, 0, 0), "velocity_frame": "relative"}, {"velocity": drift}):
        flow = lay_flow(
            surface,
            density=density,
            pressure=5e3 + density * solid.points @ (gravity - pull),
            gravity=triple(gravity),
            frame=Frame(velocity=triple(drift), acceleration=triple(pull)),
            **told,
        )
        done = balance_of(surface, flow, anchor=anchor, hardware=case, tolerance=1e-9)
        found = done.balance
        size = found.momentum.size() + density * held.volume * np.linalg.norm(pull)
        arm = 1 + np.abs(anchor).max() + np.abs(solid.points).max()
        for load in (found.load.from_walls, found.load.from_balance):
            assert_allclose(load.force, apparent, rtol=0, atol=1e-12 * size)
            assert_allclose(load.moment, np.cross(held.centroid - anchor, apparent), rtol=0, atol=1e-12 * size * arm)
        assert_allclose(found.momentum.storage, density * held.volume * pull, rtol=0, atol=1e-12 * size)
        # the anchor drives the case along, too
        carried = case.mass * (gravity - pull)
        reaction = -apparent - carried
        assert_allclose(found.reaction.wrench.force, reaction, rtol=0, atol=1e-12 * (size + 1e3))
        couple = -np.cross(held.centroid - anchor, apparent) - np.cross(np.array(case.centre) - anchor, carried)
        assert_allclose(found.reaction.wrench.moment, couple, rtol=0, atol=1e-12 * (size + 1e3) * arm)
        assert done.verdict.closes is not False
    # a tank thought to run steadily does not close
    wrong = balance_of(
        surface,
        lay_flow(
            surface,
            density=density,
            velocity=drift,
            pressure=5e3 + density * solid.points @ (gravity - pull),
            gravity=triple(gravity),
            frame=Frame(velocity=triple(drift)),
        ),
    ).balance
    assert_allclose(wrong.momentum.residual(), -density * held.volume * pull, rtol=0, atol=1e-12 * size)


def test_free_fall_takes_the_weight_away() -> None:
    solid = odd_body(1)
    surface = solid.surface(rest="wall")
    flow = lay_flow(
        surface,
        density=1000.0,
        velocity=(0, 0, 0),
        velocity_frame="relative",
        pressure=4e4,
        gravity=(0, 0, -9.80665),
        frame=Frame(velocity=(0, 0, -7.0), acceleration=(0, 0, -9.80665)),
    )
    found = balance_of(surface, flow, hardware=Hardware(3.0, (0, 0, 0))).balance
    assert_allclose(found.load.from_balance.force, 0, rtol=0, atol=1e-10 * 4e4)
    assert_allclose(found.reaction.wrench.force, 0, rtol=0, atol=1e-10 * 4e4)


# ---- rocket sled ----------------------------------------------------------------------------


def test_speed_gained_by_a_rocket_sled(verify: Verify) -> None:
    # Tsiolkovsky: V ln(m0 / m) = 2500 ln(400 / 200) = 1732.8679514 m/s, however fast the charge burns. A sled of 100 kg
    # holds 300 kg of gas at rest to it; a third of that stays. Nothing holds the sled: its acceleration is the one
    # that asks for no reaction, and the gas that is left is pushed along.
    from scipy.integrate import solve_ivp

    body = box((0, 0, 0), (3, 1, 1))
    groups = {"nozzle": body.groups["x-"], "shell": np.setdiff1d(np.arange(len(body.faces)), body.groups["x-"])}
    surface = replace(body, groups=groups).surface({"nozzle": "outlet"}, rest="wall")

    def sled(mass: float, speed: float, pull: float) -> tuple[float, float]:
        """What holds the sled, and the rate of the gas."""
        jet = {"velocity": (-2500.0, 0, 0), "pressure": 0.0}
        frame = Frame(velocity=(speed, 0, 0), acceleration=(pull, 0, 0))
        flow = lay_flow(surface, density=mass / 3.0, supplied={"nozzle": jet}, frame=frame, velocity_frame="relative")
        rate = -(mass / 3.0) * 2500.0
        found = balance_of(surface, flow, hardware=Hardware(100.0, (1, 0, 0)), storage=Storage(mass=rate)).balance
        assert abs(found.mass.residual) < 1e-9 * abs(rate)
        return float(found.reaction.wrench.force[0]), -float(found.mass.outflow)

    def course(_time: float, state: Any) -> list[float]:
        mass, speed = (float(x) for x in state)
        none, rate = sled(mass, speed, 0.0)
        one, _ = sled(mass, speed, 1.0)
        assert_allclose(one - none, 100.0 + mass, rtol=1e-8)
        return [rate, -none / (one - none)]

    def burnt(_time: float, state: Any) -> float:
        return float(state[0]) - 100.0

    burnt.terminal = True
    run = solve_ivp(course, (0, 1), [300.0, 40.0], events=burnt, rtol=1e-9, atol=1e-9, method="DOP853")
    assert run.status == 1
    assert_allclose(run.y_events[0][0], [100.0, 40.0 + 1732.8679514], rtol=1e-8)
    verify(
        what="Sled of 400 kg that burns 200 kg at 2500 m/s: speed gained",
        source="Tsiolkovsky 1903: V ln(m0 / m)",
        memory=True,
        expected=1732.8679514,
        got=run.y_events[0][0][1] - 40,
        unit="m/s",
        tolerance=2e-5,
        why="steps of the time integration",
        kind="law",
        law="momentum",
    )
