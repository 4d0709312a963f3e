"""Streams that mix, contract or pass a disk: momentum theory, where much of the surface need not be known."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh import Outcome, balance_of, lay_flow
from tests.solids import Solid, Station, box, radius_of_area, swept
from tests.verification import Verify


def sorted_faces(body: Solid, side: str, inside: Callable[[np.ndarray], bool], names: tuple[str, str]) -> Solid:
    """Part one side of a body in two groups, by where the middle of a face is."""
    members = body.groups[side]
    chosen = np.array([inside(body.points[body.faces[f]].mean(axis=0)) for f in members], dtype=np.bool_)
    groups = {name: faces for name, faces in body.groups.items() if name != side}
    return replace(body, groups={**groups, names[0]: members[chosen], names[1]: members[~chosen]})


def demand(
    body: Solid, data: Mapping[str, Mapping[str, Any]], density: float, roles: Mapping[str, str], **options: Any
) -> Outcome:
    """Balance a body with data for groups alone."""
    surface = body.surface(roles, rest="wall")
    return balance_of(surface, lay_flow(surface, density=density, supplied=data), tolerance=1e-9, **options)


# ---- contraction ----------------------------------------------------------------------------


@pytest.mark.parametrize(("width", "height"), [(4, 2), (2, 4), (8, 2)])
def test_borda_mouthpiece_contracts_to_one_half(verify: Verify, width: int, height: int) -> None:
    # Borda 1766; Batchelor section 6.3 (from memory): a tube that reaches into the tank leaves the walls at rest under
    # the full head, so that p A = rho V² Aj with p = rho V²/2: the jet has exactly half of the hole's area
    density, head = 998.2, 3e4
    speed = np.sqrt(2 * head / density)
    body = box((-2, 0, 0), (0, 12, 12), (1, 12, 12), quads=True)  # faces of 1 m² in front
    hole = sorted_faces(
        body, "x+", lambda m: abs(m[1] - 6) < width / 2 and abs(m[2] - 6) < height / 2, ("hole", "front")
    )

    def push(share: float, jet: Callable[[np.ndarray], bool]) -> tuple[float, float]:
        parted = sorted_faces(hole, "hole", jet, ("jet", "gap"))
        # the tank is fed from above, so that the feed brings no momentum along x
        feed = speed * share * width * height / 24
        data: dict[str, Any] = {name: {"pressure": head} for name in parted.groups}
        data["jet"] = {"velocity": (speed, 0, 0), "pressure": 0.0}
        data["gap"] = {"pressure": 0.0}
        data["z+"] = {"velocity": (0, 0, -feed), "pressure": head}
        found = demand(parted, data, density, {"jet": "outlet", "z+": "inlet"}).balance
        assert abs(found.mass.residual) < 1e-12 * found.mass.outflow
        return float(found.momentum.residual()[0]), float(found.momentum.flux()[0])

    push_of_walls = head * width * height
    left, through = push(1 / 2, lambda m: m[2] > 6)
    assert left == pytest.approx(0, abs=1e-12 * head * 144)
    assert through == pytest.approx(push_of_walls, rel=1e-12)
    verify(
        what=f"Borda's mouthpiece of {width} m × {height} m: momentum of a jet of half its area over p A",
        source="Borda 1766; Batchelor, section 6.3: contraction 1/2",
        memory=True,
        expected=1,
        got=through / push_of_walls,
        tolerance=1e-11,
        why="round-off",
        kind="law",
        law="momentum",
    )
    # a jet of a quarter carries half of the momentum that the walls give
    left, _ = push(1 / 4, lambda m: m[2] > 6 and m[1] > 6)
    assert left == pytest.approx(-push_of_walls / 2, rel=1e-9)


# ---- disks ----------------------------------------------------------------------------------

TUBE = {"inlet": "inlet", "outlet": "outlet"}
AROUND = 16


@pytest.mark.parametrize("induction", [1 / 3, 0.2, 0.1])
def test_actuator_disk_in_its_stream_tube(verify: Verify, induction: float) -> None:
    # Rankine 1865; Froude 1889; Betz 1920 (White ch. 11, from memory): with V = U (1 - a) at the disk and U (1 - 2 a)
    # in the wake CT = 4 a (1 - a) and CP = 4 a (1 - a)²; at a = 1/3 CT = 8/9 and CP = 16/27 = 0.59259259259
    density, speed, area = 1.225, 10.0, 3.0
    at_disk, wake = speed * (1 - induction), speed * (1 - 2 * induction)
    radii = [radius_of_area(area * at_disk / each, AROUND) for each in (speed, at_disk, wake)]
    body = swept([Station((0, 0, z), r) for z, r in zip((-4, 0, 6), radii)], AROUND, 2)
    data = {
        "inlet": {"velocity": (0, 0, speed), "pressure": 0.0},
        "outlet": {"velocity": (0, 0, wake), "pressure": 0.0},
        "wall": {"velocity": (0, 0, 0), "pressure": 0.0},
    }
    found = demand(body, data, density, {**TUBE, "wall": "open"}).balance
    assert abs(found.mass.relative) < 1e-14
    thrust = found.load.from_balance.force
    dynamic = density * speed**2 / 2 * area
    assert_allclose(thrust / dynamic, [0, 0, 4 * induction * (1 - induction)], rtol=0, atol=1e-12)
    ports = found.ports
    loss = (ports["inlet"].mean_total_pressure_mass_flow or 0) - (ports["outlet"].mean_total_pressure_mass_flow or 0)
    power = loss * found.mass.outflow / density
    assert power / (dynamic * speed) == pytest.approx(4 * induction * (1 - induction) ** 2, rel=1e-12)
    # Froude: the disk sees the mean of the speeds far before and far behind it
    assert power / thrust[2] == pytest.approx((speed + wake) / 2, rel=1e-12)
    verify(
        what=f"Actuator disk in its stream tube, induction {induction:.3g}: thrust and power coefficient",
        source="Rankine 1865, Froude 1889, Betz 1920: 4 a (1 - a), 4 a (1 - a)²",
        memory=True,
        expected=(4 * induction * (1 - induction), 4 * induction * (1 - induction) ** 2),
        got=(thrust[2] / dynamic, power / (dynamic * speed)),
        tolerance=1e-11,
        why="round-off",
        kind="law",
        law="energy",
    )


@pytest.mark.parametrize("around", [3, 5])
def test_actuator_disk_in_a_box_that_the_stream_leaves_sideways(verify: Verify, around: int) -> None:
    # the same thrust 8/9 from a box: what the wake lacks in mass leaves through the sides, with the stream's momentum
    density, speed, area = 1.225, 10.0, 3.0
    at_disk, wake = speed * 2 / 3, speed / 3
    side = np.sqrt(area * at_disk / wake)  # of the wake, one cell wide
    body = box((0, 0, 0), (8, side * around, side * around), (3, around, around), quads=True)
    centre = side * around / 2
    body = sorted_faces(body, "x+", lambda m: bool(np.abs(m[1:] - centre).max() < side / 2), ("wake", "stream"))
    aside = side**2 * (speed - wake) / (4 * 8 * side * around)
    data = {
        "x-": {"velocity": (speed, 0, 0), "pressure": 0.0},
        "wake": {"velocity": (wake, 0, 0), "pressure": 0.0},
        "stream": {"velocity": (speed, 0, 0), "pressure": 0.0},
        "y-": {"velocity": (speed, -aside, 0), "pressure": 0.0},
        "y+": {"velocity": (speed, aside, 0), "pressure": 0.0},
        "z-": {"velocity": (speed, 0, -aside), "pressure": 0.0},
        "z+": {"velocity": (speed, 0, aside), "pressure": 0.0},
    }
    found = demand(body, data, density, {"x-": "inlet", "wake": "outlet", "stream": "outlet"}).balance
    assert found.mass.residual == pytest.approx(0, abs=1e-13 * found.mass.inflow)
    thrust = found.load.from_balance.force
    assert_allclose(thrust / (density * speed**2 / 2 * area), [8 / 9, 0, 0], rtol=0, atol=1e-11)
    verify(
        what=f"Actuator disk in a box of {around} wakes, which the stream leaves sideways: thrust coefficient",
        source="Betz 1920: 8/9",
        memory=True,
        expected=8 / 9,
        got=thrust[0] / (density * speed**2 / 2 * area),
        tolerance=1e-10,
        why="round-off",
        kind="law",
        law="momentum",
    )
    # sides taken as streamlines leave out that momentum
    for name in ("y-", "y+", "z-", "z+"):
        data[name] = {"velocity": (speed, 0, 0), "pressure": 0.0}
    unfed = demand(body, data, density, {"x-": "inlet", "wake": "outlet", "stream": "outlet"}).balance
    missed = density * side**2 * (speed - wake) * speed
    assert unfed.mass.residual == pytest.approx(-missed / speed, rel=1e-12)
    assert unfed.load.from_balance.force[0] == pytest.approx(thrust[0] + missed, rel=1e-12)


def test_hovering_rotor() -> None:
    # T = 2 rho A vi² (Rankine and Froude; Leishman ch. 2, from memory): 1.225 kg/m³, 1 m², 10 m/s: 245 N; the wake of
    # half the area runs at twice the speed. Air comes in from all sides without any upright momentum.
    density, area, induced = 1.225, 1.0, 10.0
    side = np.sqrt(area / 2)
    body = box((0, 0, 0), (5 * side, 5 * side, 4.0), (5, 5, 2), quads=True)
    centre = 2.5 * side
    body = sorted_faces(body, "z-", lambda m: bool(np.abs(m[:2] - centre).max() < side / 2), ("wake", "rest"))
    inward = 2 * induced * (area / 2) / (4 * 5 * side * 4.0)
    data: dict[str, Any] = {
        "wake": {"velocity": (0, 0, -2 * induced), "pressure": 0.0},
        "rest": {"velocity": (0, 0, 0), "pressure": 0.0},
        "z+": {"velocity": (0, 0, 0), "pressure": 0.0},
        "x-": {"velocity": (inward, 0, 0), "pressure": 0.0},
        "x+": {"velocity": (-inward, 0, 0), "pressure": 0.0},
        "y-": {"velocity": (0, inward, 0), "pressure": 0.0},
        "y+": {"velocity": (0, -inward, 0), "pressure": 0.0},
    }
    found = demand(body, data, density, {"wake": "outlet"}, anchor=(0.1, 0.2, 0.3)).balance
    assert found.mass.residual == pytest.approx(0, abs=1e-13 * found.mass.outflow)
    assert_allclose(found.load.from_balance.force, [0, 0, 245], rtol=0, atol=1e-10)
    # the lift stands over the middle of the wake
    assert_allclose(found.load.from_balance.moment, np.cross([centre - 0.1, centre - 0.2, 0], [0, 0, 245]), atol=1e-9)
    assert found.ports["wake"].mean_total_pressure_mass_flow == pytest.approx(2 * density * induced**2, rel=1e-12)
