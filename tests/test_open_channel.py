"""Water with a free surface: the momentum of open channels, closed over box-like meshes under the air."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh import Outcome, balance_of, lay_flow
from fluxmesh.balance.storage import Storage
from fluxmesh.field.frame import Frame
from tests.solids import Solid, blocks, box, one_group
from tests.verification import Verify

DENSITY = 1000.0
STILL = {"velocity": (0, 0, 0), "pressure": 0.0}


def conjugate_depth(depth: float, speed: float, gravity: float) -> float:
    """Return the depth after a hydraulic jump (Bélanger 1828; White, Fluid Mechanics, ch. 10, from memory)."""
    return float(depth / 2 * (np.sqrt(1 + 8 * speed**2 / (gravity * depth)) - 1))


def reach(ends: Sequence[np.ndarray], length: float) -> Solid:
    """Return the water between two like cross-sections (n, 2) in (y, z), free surface between corners 2 and 3."""
    count = len(ends[0])
    points = np.concatenate([np.column_stack([np.full(count, x), end]) for x, end in zip((0.0, length), ends)])
    here = np.arange(count)
    there = np.roll(here, -1)
    # flat bottom and top, upright or sloping banks; bank faces stay in the plane of the bank
    sides = np.column_stack([here, here + count, there + count, there])
    solid = one_group(points, [here, here[::-1] + count, *sides])
    names = {"in": [0], "out": [1], "free": [4], "bed": [k for k in range(2, 2 + count) if k != 4]}
    return replace(solid, groups={name: np.array(faces) for name, faces in names.items()})


def rectangle(depth: float) -> np.ndarray:
    return np.array([[0, 0], [1, 0], [1, depth], [0, depth]])


def trapezoid(bottom: float, slope: float, depth: float) -> np.ndarray:
    half = bottom / 2
    return np.array([[-half, 0], [half, 0], [half + slope * depth, depth], [-half - slope * depth, depth]])


def flow_between(
    body: Solid,
    depths: tuple[float, float],
    speeds: tuple[float, float],
    gravity: float,
    supplied: Mapping[str, Mapping[str, Any]] | None = None,
    frame: Frame | None = None,
    storage: Storage | None = None,
) -> Outcome:
    """Balance water that is hydrostatic below its depth at both ends; walls get no pressure of their own."""
    roles = {"in": "inlet", "out": "outlet", "free": "open", "sides": "symmetry"}
    surface = body.surface({name: role for name, role in roles.items() if name in body.groups}, rest="wall")
    x, _, level = surface.points.T
    depth = np.where(x < x.mean(), *depths)
    data: dict[str, Any] = {
        "in": {"velocity": (speeds[0], 0, 0)},
        "out": {"velocity": (speeds[1], 0, 0)},
        "free": STILL,
    }
    flow = lay_flow(
        surface,
        density=DENSITY,
        pressure=DENSITY * gravity * np.maximum(depth - level, 0),
        supplied={**data, **(supplied or {})},
        gravity=(0, 0, -gravity),
        frame=frame,
    )
    return balance_of(surface, flow, storage=storage)


# ---- hydraulic jump -------------------------------------------------------------------------


def test_published_jump_and_its_loss(verify: Verify) -> None:
    # White's example (from memory): 10 m²/s, 1.25 m deep, g = 9.81: y2 = 3.46 m, V2 = 2.89 m/s, hf = 0.625 m;
    # exact 3.4616260986, 2.8888157517 and 0.6250071100 = (y2 - y1)³ / (4 y1 y2)
    gravity, rate, first = 9.81, 10.0, 1.25
    second = conjugate_depth(first, rate / first, gravity)
    assert second == pytest.approx(3.46, abs=5e-3)
    assert second == pytest.approx(3.4616260986, abs=1e-10)
    depths, speeds = (first, second), (rate / first, rate / second)
    ends = [rectangle(y) for y in depths]
    found = flow_between(reach(ends, 16.0), depths, speeds, gravity).balance
    assert found.ports["out"].mean_speed == pytest.approx(2.8888157517, rel=1e-10)
    # nothing but the walls' upright push is left along the stream
    assert_allclose(found.load.from_balance.force[:2], 0, rtol=0, atol=1e-9 * 1e5)
    # momentum function y²/2 + q²/(g y), 87.6640625 kN with density and g, at both ends
    ledger = found.momentum
    for k, sign in ((0, -1), (1, 1)):
        through = sign * (ledger.group_flux[k, 0] - ledger.group_pressure[k, 0])
        assert through == pytest.approx(87664.0625, rel=1e-12)
    # head: mean total pressure of what passes, and the height it passes at
    middle = [y / 2 for y in depths]
    total = [found.ports[name].mean_total_pressure_mass_flow for name in ("in", "out")]
    head = [(p or 0) / (DENSITY * gravity) + z for p, z in zip(total, middle)]
    assert head[0] - head[1] == pytest.approx(0.625, abs=5e-4)
    assert head[0] - head[1] == pytest.approx((second - first) ** 3 / (4 * first * second), rel=1e-12)
    verify(
        what="Hydraulic jump, 10 m²/s, 1.25 m: momentum function at both ends, with rho and g",
        source="Bélanger 1828; White, Fluid Mechanics, ch. 10",
        memory=True,
        expected=(87664.0625, 87664.0625),
        got=[s * (ledger.group_flux[k, 0] - ledger.group_pressure[k, 0]) for k, s in ((0, -1), (1, 1))],
        unit="N",
        tolerance=1e-6,
        why="round-off",
        kind="law",
        law="momentum",
    )
    verify(
        what="Hydraulic jump, 10 m²/s, 1.25 m: depth and speed behind",
        source="White, Fluid Mechanics, ch. 10, example: 3.46 m, 2.89 m/s",
        memory=True,
        expected=(3.46, 2.89),
        got=(second, found.ports["out"].mean_speed),
        tolerance=5e-3,
        why="printed with three digits",
        kind="law",
        law="mass",
    )
    verify(
        what="Hydraulic jump, 10 m²/s, 1.25 m: loss of head",
        source="White, Fluid Mechanics, ch. 10, example: 0.625 m",
        memory=True,
        expected=0.625,
        got=head[0] - head[1],
        unit="m",
        tolerance=5e-4,
        why="printed with three digits",
        kind="law",
        law="energy",
    )


@pytest.mark.parametrize(("bottom", "slope"), [(3.0, 1.5), (0.6, 0.5), (2.0, 0.0)])
def test_jump_in_a_trapezoidal_channel(verify: Verify, bottom: float, slope: float) -> None:
    # Chow, Open-Channel Hydraulics 1959, section 3-7 (from memory): Q²/(g A) + A z is the same before and after,
    # A z = b y²/2 + m y³/3. The banks widen the stream, but they run along it: the water leans on them sideways only
    from scipy.optimize import brentq

    gravity, rate, first = 9.80665, 12.0, 0.4

    def function(y: float) -> float:
        return rate**2 / (gravity * (bottom + slope * y) * y) + bottom * y**2 / 2 + slope * y**3 / 3

    def area(y: float) -> float:
        return (bottom + slope * y) * y

    critical = brentq(lambda y: rate**2 * (bottom + 2 * slope * y) - gravity * area(y) ** 3, 0.1, 10)
    second = brentq(lambda y: function(y) - function(first), critical, 20)
    assert first < critical < second
    depths = (first, second)
    body = reach((trapezoid(bottom, slope, first), trapezoid(bottom, slope, second)), 9.0)

    def found(last: float) -> float:
        speeds = (rate / area(first), rate / area(last))
        done = flow_between(body, depths, speeds, gravity).balance
        return float(done.load.from_balance.force[0]) / (DENSITY * gravity * function(first))

    assert found(second) == pytest.approx(0, abs=1e-12)
    assert abs(found(1.02 * second)) > 1e-3
    verify(
        what=f"Jump in a trapezoid {bottom:g} m wide with banks 1:{slope:g}: force left over, of the momentum function",
        source="Chow, Open-Channel Hydraulics 1959, section 3-7: none",
        memory=True,
        expected=0,
        got=found(second),
        tolerance=1e-11,
        why="round-off",
        kind="law",
        law="momentum",
    )


def test_blocks_on_the_bed_shorten_the_jump() -> None:
    # momentum of a forced jump: what the momentum function loses, the blocks bear (White ch. 10, from memory);
    # with F the share of the first function that they take, tail water y2 satisfies M(y2) = (1 - F) M(y1)
    gravity, rate, first, share = 9.80665, 10.0, 1.25, 0.2
    from scipy.optimize import brentq

    def function(y: float) -> float:
        return rate**2 / (gravity * y) + y**2 / 2

    critical = (rate**2 / gravity) ** (1 / 3)
    second = brentq(lambda y: function(y) - (1 - share) * function(first), critical, 10)
    assert second < conjugate_depth(first, rate / first, gravity)
    # the fluid leaves out the blocks: a row of cells at the bed, in the middle of the reach
    filled = np.ones((5, 3, 5), np.bool_)
    filled[2, 1, 0] = False
    body = blocks(filled, (0, 0, 0), (10, 1, 1), quads=True)
    x, _, z = body.points.T
    top = np.where(z > 0.9, first + (second - first) * x / 10, 0.0)
    points = body.points.copy()
    points[:, 2] = np.where(z > 0.9, top, z * first * 0.8)
    outside = {"in": "x-", "out": "x+"}
    middle = np.array([points[face].mean(axis=0) for face in body.faces])
    groups = {
        name: body.groups[side][np.isclose(middle[body.groups[side], 0], k * 10.0)]
        for (name, side), k in zip(outside.items(), (0, 1))
    }
    groups["free"] = body.groups["z+"][middle[body.groups["z+"], 2] > 1.2]
    groups["sides"] = np.concatenate(
        [body.groups[s][np.isclose(middle[body.groups[s], 1], y)] for s, y in (("y-", 0), ("y+", 1))]
    )
    taken = np.concatenate(list(groups.values()))
    groups["bed"] = np.setdiff1d(np.arange(len(body.faces)), taken)
    done = flow_between(
        replace(body, points=points, groups=groups), (first, second), (rate / first, rate / second), gravity
    )
    force = done.balance.load.from_balance.force
    assert force[0] == pytest.approx(share * DENSITY * gravity * function(first), rel=1e-12)


def test_free_overfall(verify: Verify) -> None:
    # critical flow towards a brink where the pressure is that of the air: yb = 2/3 yc (Rouse 1936; Henderson,
    # Open Channel Flow 1966, from memory: momentum gives 0.667, measurements 0.715 with what pressure is left)
    gravity, rate = 9.80665, 4.0
    critical = (rate**2 / gravity) ** (1 / 3)

    def push(brink: float) -> float:
        body = reach([rectangle(y) for y in (critical, brink)], 3.0)
        air = {"out": {"velocity": (rate / brink, 0, 0), "pressure": 0.0}}
        done = flow_between(body, (critical, brink), (rate / critical, rate / brink), gravity, air)
        return float(done.balance.load.from_balance.force[0])

    scale = DENSITY * gravity * critical**2
    assert push(2 / 3 * critical) == pytest.approx(0, abs=1e-12 * scale)
    assert push(0.715 * critical) > 0.05 * scale  # the rest of the pressure
    verify(
        what="Free overfall with a brink of two thirds of the critical depth: force left over, of rho g yc²",
        source="Rouse 1936; Henderson, Open Channel Flow 1966",
        memory=True,
        expected=0,
        got=push(2 / 3 * critical) / scale,
        tolerance=1e-11,
        why="round-off",
        kind="law",
        law="momentum",
    )


# ---- surges ---------------------------------------------------------------------------------


def surge(depth: float, speed: float, gravity: float) -> tuple[float, float]:
    """Return depth and celerity of the surge that a shut gate sends up the stream (White ch. 10, from memory)."""
    from scipy.optimize import brentq

    def off(after: float) -> float:  # continuity gives the celerity, momentum must agree with it
        celerity = speed * depth / (after - depth)
        return (speed + celerity) ** 2 - gravity * after * (depth + after) / (2 * depth)

    after = float(brentq(off, depth * (1 + 1e-9), 20 * depth, xtol=1e-14))
    return after, speed * depth / (after - depth)


def canal(first: float, second: float) -> Solid:
    """A reach as high as the surge: water comes in below `first`, above it is air."""
    body = box((0, 0, 0), (10, 1, 2), (2, 1, 2), quads=True)
    level = np.array([0.0, first, second])
    points = body.points.copy()
    points[:, 2] = level[np.round(points[:, 2]).astype(int)]
    height = np.array([points[body.faces[f], 2].mean() for f in body.groups["x-"]])
    groups = {
        "in": body.groups["x-"][height < first],
        "free": np.concatenate([body.groups["x-"][height > first], body.groups["z+"]]),
        "out": body.groups["x+"],
        "sides": np.concatenate([body.groups["y-"], body.groups["y+"]]),
        "bed": body.groups["z-"],
    }
    return replace(body, points=points, groups=groups)


@pytest.mark.parametrize(("depth", "speed"), [(2.0, 3.0), (0.5, 0.4)])
def test_a_gate_that_shuts_bears_the_surge(verify: Verify, depth: float, speed: float) -> None:
    # the surge fills the reach with still water at c (y2 - y1): the momentum that dies there, c V1 y1, and what comes
    # in are borne by the gate, which holds the depth y2: rho g y2²/2
    gravity = 9.80665
    second, celerity = surge(depth, speed, gravity)
    kept = Storage(
        mass=DENSITY * celerity * (second - depth), momentum=np.array([-DENSITY * celerity * speed * depth, 0, 0])
    )
    body = canal(depth, second)
    found = flow_between(body, (depth, second), (speed, 0.0), gravity, storage=kept).balance
    assert found.mass.residual == pytest.approx(0, abs=1e-12 * found.mass.inflow)
    push = DENSITY * gravity * second**2 / 2
    # nothing is left for the bed ...
    assert found.load.from_balance.force[0] == pytest.approx(0, abs=1e-9 * push)
    assert found.momentum.group_pressure[2, 0] == pytest.approx(-push, rel=1e-12)
    # ... which it would be without the storage
    steady = flow_between(body, (depth, second), (speed, 0.0), gravity).balance
    assert steady.load.from_balance.force[0] == pytest.approx(kept.momentum[0], rel=1e-9)
    assert steady.mass.residual == pytest.approx(-kept.mass, rel=1e-12)
    verify(
        what=f"Gate that shuts on {depth:g} m at {speed:g} m/s: push over the hydrostatic one after it",
        source="White, Fluid Mechanics, ch. 10: surge with storage",
        memory=True,
        expected=1,
        got=-(found.momentum.group_pressure[2, 0] + found.load.from_balance.force[0]) / push,
        tolerance=1e-9,
        why="round-off of the solved depth",
        kind="law",
        law="momentum",
    )
    verify(
        what=f"Gate that shuts on {depth:g} m at {speed:g} m/s: mass left over, of what comes in",
        source="continuity with storage rho c (y2 - y1)",
        expected=0,
        got=found.mass.residual / found.mass.inflow,
        tolerance=1e-11,
        why="round-off",
        kind="law",
        law="mass",
    )


def test_a_surge_is_a_jump_to_those_who_go_with_it() -> None:
    # from a reach that travels with the front the flow is steady, and depths are those of the hydraulic jump
    gravity, depth, speed = 9.80665, 2.0, 3.0
    second, celerity = surge(depth, speed, gravity)
    assert second == pytest.approx(conjugate_depth(depth, speed + celerity, gravity), rel=1e-12)
    moving = Frame(velocity=(-celerity, 0.0, 0.0))
    # nothing passes where the air is: there the velocity is that of the reach
    air = {"free": {"velocity": moving.velocity, "pressure": 0.0}}
    found = flow_between(canal(depth, second), (depth, second), (speed, 0.0), gravity, air, moving).balance
    through = DENSITY * (speed + celerity) * depth
    assert found.mass.residual == pytest.approx(0, abs=1e-12 * through)
    assert found.mass.outflow == pytest.approx(through, rel=1e-12)
    assert found.load.from_balance.force[0] == pytest.approx(0, abs=1e-9 * DENSITY * gravity * second**2)
