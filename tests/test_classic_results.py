"""Textbook control-volume results and published worked examples, each built as a closed surface with ports."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh import Outcome, balance_of, lay_flow
from tests.measures import observed_order
from tests.solids import Solid, Station, box, elbow, frustum, moved, pipe, prism, radius_of_area, ring, swept
from tests.verification import Verify

PORTS = {"inlet": "inlet", "outlet": "outlet"}
POUND_FORCE, PSI, INCH = 4.4482216152605, 6894.7572931684, 0.0254  # NIST SP 811, appendix B


def job(
    solid: Solid,
    supplied: Mapping[str, Mapping[str, Any]],
    *,
    density: float,
    roles: Mapping[str, str] = PORTS,
    anchor: Any = (0.3, -0.4, 0.2),
    **fields: Any,
) -> Outcome:
    """Balance a body whose groups without a role are walls."""
    surface = solid.surface(roles, rest="wall")
    flow = lay_flow(surface, density=density, supplied=supplied, **fields)
    return balance_of(surface, flow, anchor=anchor, tolerance=1e-9)


def assert_same_load(outcome: Outcome, size: float) -> None:
    """The walls carry what the ports demand."""
    walls, demand = outcome.balance.load.from_walls, outcome.balance.load.from_balance
    assert_allclose(walls.force, demand.force, rtol=0, atol=1e-12 * size)
    assert_allclose(walls.moment, demand.moment, rtol=0, atol=1e-12 * size)
    assert outcome.verdict.closes is True


# ---- sudden expansion, mixing ---------------------------------------------------------------


@pytest.mark.parametrize("share", [0.25, 0.5, 0.81])
def test_sudden_expansion(verify: Verify, share: float) -> None:
    # Borda-Carnot: pressure p1 on the step, p2 - p1 = rho V1² s (1 - s), loss (1 - s)² of the first dynamic pressure;
    # s = 1/4: loss 0.5625, recovery 0.375 of it. A faceted pipe keeps the ratio of areas, so it is exact.
    density, speed, first = 998.2, 3.0, 2.0e4
    second = first + density * speed**2 * share * (1 - share)
    narrow, wide = 0.05, 0.05 / np.sqrt(share)
    stations = [Station((0, 0, 0), narrow), Station((0, 0, 0.2), narrow), Station((0, 0, 0.2), wide)]
    body = swept([*stations, Station((0, 0, 0.9), wide)], 16, 2, ("feed", "step", "shell"))
    data = {
        "inlet": {"velocity": (0, 0, speed), "pressure": first},
        "outlet": {"velocity": (0, 0, share * speed), "pressure": second},
        "feed": {"pressure": first},
        "step": {"pressure": first},
        "shell": {"pressure": second},
    }
    done = job(body, data, density=density)
    area = {g.name: a for g, a in zip(done.surface.groups, done.balance.table.column("area"))}
    assert_same_load(done, second * area["outlet"])
    assert_allclose(done.balance.load.from_balance.force, [0, 0, -first * area["step"]], rtol=1e-12, atol=1e-9)
    ports = done.balance.ports
    loss = ports["inlet"].mean_total_pressure_mass_flow - ports["outlet"].mean_total_pressure_mass_flow
    dynamic = density * speed**2 / 2
    assert_allclose(loss / dynamic, (1 - share) ** 2, rtol=1e-12)
    rise = ports["outlet"].mean_pressure_area - ports["inlet"].mean_pressure_area
    assert_allclose(rise / dynamic, 2 * share * (1 - share), rtol=1e-12)
    verify(
        what=f"Sudden expansion, areas 1 to {1 / share:.3g}: loss and recovery over the first dynamic pressure",
        source="Borda 1766 and Carnot: (1 - s)² and 2 s (1 - s)",
        memory=True,
        expected=((1 - share) ** 2, 2 * share * (1 - share)),
        got=(loss / dynamic, rise / dynamic),
        tolerance=1e-11,
        why="facets keep the ratio of areas, so round-off only",
        kind="law",
        law="energy",
    )
    # any other pressure on the step does not close
    data["step"] = {"pressure": second}
    assert job(body, data, density=density).verdict.closes is False


def test_jet_pump_of_one_area(verify: Verify) -> None:
    # mixing in a straight duct: V3 = a Vp + (1 - a) Vs, p3 - p1 = rho a (1 - a)(Vp - Vs)²:
    # a = 0.25, 30 and 3 m/s, 1000 kg/m³ give 9.75 m/s and 136687.5 Pa (White's problem family, from memory)
    duct = box((0, 0, 0), (2, 0.4, 0.4), (1, 4, 4), quads=True)
    entry = duct.groups["x-"]
    middle = np.array([np.abs(duct.points[duct.faces[f], 1:].mean(axis=0) - 0.2).max() < 0.1 for f in entry])
    body = replace(
        duct,
        groups={
            "jet": entry[middle],
            "stream": entry[~middle],
            "mixed": duct.groups["x+"],
            "duct": np.concatenate([duct.groups[side] for side in ("y-", "y+", "z-", "z+")]),
        },
    )
    data = {
        "jet": {"velocity": (30.0, 0, 0), "pressure": 5e4},
        "stream": {"velocity": (3.0, 0, 0), "pressure": 5e4},
        "mixed": {"velocity": (9.75, 0, 0), "pressure": 5e4 + 136687.5},
        "duct": {"pressure": 7e4},
    }
    roles = {"jet": "inlet", "stream": "inlet", "mixed": "outlet"}
    done = job(body, data, density=1000.0, roles=roles)
    assert abs(done.balance.mass.relative) < 1e-15
    assert_allclose(done.balance.load.from_balance.force, 0, rtol=0, atol=1e-9 * 5e4)
    verify(
        what="Jet pump of one area, 30 and 3 m/s mix to 9.75 m/s with 136687.5 Pa: pull on the duct",
        source="White, Fluid Mechanics, ch. 3: p3 - p1 = rho a (1 - a) (Vp - Vs)²",
        memory=True,
        expected=0,
        got=done.balance.load.from_balance.force[0],
        unit="N",
        tolerance=1e-6,
        why="the pressures push with 8000 and 30000 N: round-off",
        kind="law",
        law="momentum",
    )
    assert done.verdict.closes is True
    data["mixed"]["pressure"] = 5e4 + 0.98 * 136687.5
    assert job(body, data, density=1000.0, roles=roles).verdict.closes is False


# ---- bends ----------------------------------------------------------------------------------


@pytest.mark.parametrize("degrees", [22.5, 45.0, 90.0, 180.0])
@pytest.mark.parametrize("speed", [0.0, 3.0])
def test_thrust_at_a_bend(verify: Verify, degrees: float, speed: float) -> None:
    # AWWA M45, 1st ed., fig. 7-1: 2 P A sin(D/2) at rest, with flow 2 (P A + rho A V²) sin(D/2), along the bisector,
    # away from the bend's centre; D = 0.5 m, 1 MPa, 3 m/s, 90 degrees: 277680.18 N and 2499.12 N
    turn, density, pressure = np.radians(degrees), 1000.0, 1e6
    area = np.pi * 0.25**2
    radius = radius_of_area(area, 16)
    body = elbow(1.2, (radius, radius), turn, 16, 6)
    exit_way = np.array([-np.sin(turn), np.cos(turn), 0])
    data = {
        "inlet": {"velocity": (0, speed, 0), "pressure": pressure},
        "outlet": {"velocity": tuple(speed * exit_way), "pressure": pressure},
        "wall": {"pressure": pressure},
    }
    done = job(body, data, density=density)
    thrust = 2 * (pressure * area + density * area * speed**2) * np.sin(turn / 2)
    outward = np.array([np.cos(turn / 2), np.sin(turn / 2), 0])
    assert_allclose(done.balance.load.from_balance.force, thrust * outward, rtol=0, atol=1e-12 * thrust)
    assert_allclose(done.balance.reaction.wrench.force, -thrust * outward, rtol=0, atol=1e-12 * thrust)
    verify(
        what=f"Bend of {degrees:g} degrees, 0.5 m, 1 MPa, {speed:g} m/s: thrust",
        source="AWWA M45, 1st ed., fig. 7-1: 2 (P A + rho A V²) sin(D/2)",
        expected=thrust,
        got=np.linalg.norm(done.balance.load.from_balance.force),
        unit="N",
        tolerance=1e-11,
        relative=True,
        why="flat ports of the true area: round-off",
        kind="wrench",
    )
    if degrees == 90:
        static, dynamic = 277680.18, 2499.12
        assert_allclose(thrust, static + (dynamic if speed else 0), rtol=0, atol=0.01)
    if degrees < 180:
        # it acts through the point where the two centre lines meet
        corner = 1.2 / np.cos(turn / 2) * outward
        line = done.balance.reaction.line_of_action
        assert_allclose(np.cross(corner - line.point, line.direction), 0, rtol=0, atol=1e-12)
        assert_allclose(line.couple, 0, rtol=0, atol=1e-9 * thrust)
    if speed == 0:  # with flow a uniform pressure on the walls is not that of a bend
        assert_same_load(done, thrust)


def test_published_thrust_of_a_plastic_main(verify: Verify) -> None:
    # AWWA C900, 8 in. (outside diameter 9.05 in.), 150 psi, 45 degrees: 7385 lbf
    turn = np.radians(45)
    radius = radius_of_area(np.pi / 4 * (9.05 * INCH) ** 2, 24)
    data = {name: {"velocity": (0, 0, 0), "pressure": 150 * PSI} for name in PORTS}
    load = job(elbow(0.5, (radius, radius), turn, 24, 4), data, density=1000.0).balance.load.from_balance
    assert_allclose(np.linalg.norm(load.force) / POUND_FORCE, 7385, rtol=0, atol=0.5)
    verify(
        what="PVC main, 8 in., 150 psi, 45 degrees: thrust",
        source="AWWA C900 pipe, published table of thrusts",
        expected=7385,
        got=np.linalg.norm(load.force) / POUND_FORCE,
        unit="lbf",
        tolerance=0.5,
        why="printed in whole pounds",
        kind="wrench",
    )


@pytest.mark.parametrize(("first", "second"), [(0.3, 0.2), (0.25, 0.25)])
def test_thrust_at_a_reducer(verify: Verify, first: float, second: float) -> None:
    # AWWA M45, 1st ed., fig. 7-1: P (A1 - A2), toward the narrow end
    body = frustum(first, second, 0.4, 12)
    data = {name: {"velocity": (0, 0, 0), "pressure": 6e5} for name in PORTS}
    done = job(body, {**data, "wall": {"pressure": 6e5}}, density=1000.0)
    areas = dict(zip([g.name for g in done.surface.groups], done.balance.table.column("area")))
    assert_same_load(done, 6e5 * areas["inlet"])
    expected = 6e5 * (areas["inlet"] - areas["outlet"])
    assert_allclose(done.balance.load.from_walls.force, [0, 0, expected], rtol=0, atol=1e-6)
    verify(
        what=f"Reducer from {first:g} to {second:g} m radius, 6 bar: thrust",
        source="AWWA M45, 1st ed., fig. 7-1: P (A1 - A2)",
        expected=expected,
        got=done.balance.load.from_balance.force[2],
        unit="N",
        tolerance=1e-6,
        why="round-off of 1e5 N",
        kind="wrench",
    )


def test_thrust_at_a_dead_end(verify: Verify) -> None:
    # AWWA M45, 1st ed., fig. 7-1: P A
    body = pipe(0.2, 1.0, 12)
    data = {"inlet": {"velocity": (0, 0, 0), "pressure": 6e5}}
    walls = {name: {"pressure": 6e5} for name in ("wall", "outlet")}
    done = job(body, {**data, **walls}, density=1000.0, roles={"inlet": "inlet"})
    area = done.balance.table.column("area")[0]
    assert_same_load(done, 6e5 * area)
    assert_allclose(done.balance.load.from_balance.force, [0, 0, 6e5 * area], rtol=1e-13, atol=1e-9)
    verify(
        what="Dead end of 0.2 m radius, 6 bar: thrust over P A",
        source="AWWA M45, 1st ed., fig. 7-1: P A",
        expected=1,
        got=done.balance.load.from_balance.force[2] / (6e5 * area),
        tolerance=1e-12,
        why="round-off",
        kind="wrench",
    )


# ---- published worked examples --------------------------------------------------------------

# from the builder's axes (in along +y, turning to -x) to those of the examples: in along +x, turning to +z, -y, +y
TO_Z = np.array([[0, 1, 0], [0, 0, -1], [-1, 0, 0]])
TO_MINUS_Y = np.array([[0, 1, 0], [1, 0, 0], [0, 0, -1]])
TO_Y = np.array([[0, 1, 0], [-1, 0, 0], [0, 0, 1]])


def reducing_elbow(areas: tuple[float, float], degrees: float, axes: np.ndarray) -> Solid:
    radii = (radius_of_area(areas[0], 16), radius_of_area(areas[1], 16))
    return moved(elbow(0.3, radii, np.radians(degrees), 16, 5, 2), axes, (0, 0, 0))


@pytest.mark.parametrize(
    ("degrees", "forces"), [(30.0, (-2052.687, 144.2)), (180.0, (-2590.849, 0.0))], ids=["upward", "reversing"]
)
def test_published_reducing_elbow(verify: Verify, degrees: float, forces: tuple[float, float]) -> None:
    # Cengel and Cimbala, Fluid Mechanics, examples 6-2 and 6-3 (numbers from memory): 14 kg/s, 113 to 7 cm²,
    # momentum factor 1.03, exit to the air 0.3 m higher; 202.2 kPa, -2053 N and 144 N, reversing -2591 N.
    # Faces of a port take turns at V (1 ± sqrt(0.03)), which has exactly that factor.
    flow, areas, density = 14.0, (113e-4, 7e-4), 1000.0
    speeds = [flow / (density * area) for area in areas]
    pressure = density * ((speeds[1] ** 2 - speeds[0] ** 2) / 2 + 9.81 * 0.3)
    assert_allclose(pressure, 202175.516, rtol=1e-7)
    body = reducing_elbow(areas, degrees, TO_Z)
    turn = np.radians(degrees)
    ways = {"inlet": np.array([1.0, 0, 0]), "outlet": np.array([np.cos(turn), 0, np.sin(turn)])}
    velocity = np.zeros((len(body.faces), 3))
    for name, speed in zip(PORTS, speeds):
        members = body.groups[name]
        uneven = 1 + np.sqrt(0.03) * (-1.0) ** np.arange(members.size)
        velocity[members] = speed * uneven[:, None] * ways[name]
    data = {"inlet": {"pressure": pressure}, "outlet": {"pressure": 0.0}}
    done = job(body, data, density=density, velocity=velocity)
    for name in PORTS:
        assert_allclose(done.balance.ports[name].momentum_factor, 1.03, rtol=1e-12)
    assert_allclose(done.balance.mass.outflow, flow, rtol=1e-12)
    force = done.balance.reaction.wrench.force
    assert_allclose(force[[0, 2]], forces, rtol=0, atol=6e-4)
    verify(
        what=f"Reducing elbow, {degrees:g} degrees, 14 kg/s, 113 to 7 cm²: anchoring force along and up",
        source=f"Cengel and Cimbala, Fluid Mechanics, example 6-{2 if degrees == 30 else 3}: "
        f"{'-2053 and 144 N' if degrees == 30 else '-2591 N'}",
        memory=True,
        expected=forces,
        got=force[[0, 2]],
        unit="N",
        tolerance=1e-3,
        why="the figures computed unrounded from the same data, to their last digit",
        kind="law",
        law="momentum",
    )
    assert_allclose(force[1], 0, rtol=0, atol=1e-9)


def test_published_right_angled_reducing_elbow(verify: Verify) -> None:
    # Fox and McDonald, Introduction to Fluid Mechanics, ch. 4 (from memory): 220 kPa absolute, 0.01 to 0.0025 m²,
    # 16 m/s out to the air: Rx = -1.35 kN, Ry = -639 N; with 101 kPa and 999 kg/m³ -1349.84 N and -639.36 N
    body = reducing_elbow((0.01, 0.0025), 90, TO_MINUS_Y)
    data = {
        "inlet": {"velocity": (4.0, 0, 0), "pressure": 220e3 - 101e3},
        "outlet": {"velocity": (0, -16.0, 0), "pressure": 0.0},
    }
    force = job(body, data, density=999.0).balance.reaction.wrench.force
    assert_allclose(force, [-1349.84, -639.36, 0], rtol=0, atol=1e-9)
    verify(
        what="Reducing elbow of 90 degrees, 220 kPa absolute, 0.01 to 0.0025 m², 16 m/s: anchoring force",
        source="Fox and McDonald, Introduction to Fluid Mechanics, ch. 4: -1.35 kN and -639 N",
        memory=True,
        expected=(-1349.84, -639.36),
        got=force[:2],
        unit="N",
        tolerance=0.005,
        why="the figures computed unrounded from the same data, to their last digit",
        kind="law",
        law="momentum",
    )


def test_published_bend_without_pressure(verify: Verify) -> None:
    # an engineering note on pipe bends: 45 degrees, 114 mm, water at 20 m/s, change of direction alone:
    # 1196 N, 2887 N, together 3125 N; exact 1195.828, 2886.985, 3124.850
    area, turn, speed = np.pi / 4 * 0.114**2, np.radians(45), 20.0
    body = reducing_elbow((area, area), 45, TO_Y)
    data = {
        "inlet": {"velocity": (speed, 0, 0), "pressure": 0.0},
        "outlet": {"velocity": (speed * np.cos(turn), speed * np.sin(turn), 0), "pressure": 0.0},
    }
    done = job(body, data, density=1000.0)
    force = done.balance.load.from_balance.force
    assert_allclose(force, [1195.828, -2886.985, 0], rtol=0, atol=6e-4)
    assert_allclose(np.linalg.norm(force), 3124.850, rtol=0, atol=6e-4)
    verify(
        what="Bend of 45 degrees, 114 mm, water at 20 m/s, no pressure: force, across it, and its size",
        source="Engineering note on pipe bends: 1196, 2887 and 3125 N",
        expected=(1196, -2887, 3125),
        got=(*force[:2], np.linalg.norm(force)),
        unit="N",
        tolerance=0.5,
        why="printed in whole newtons",
        kind="law",
        law="momentum",
    )
    # with no pressure the short form is all there is
    assert_allclose(-done.balance.short_form.rate, force, rtol=0, atol=1e-9)


# ---- jets and open channels: plane contours, one metre wide ---------------------------------


def plane_body(edges: Mapping[str, list[int]], contour: Any, width: float = 1.0) -> Solid:
    """Extrude a contour; its edges are sorted into groups, the two ends are ``ends``."""
    solid = prism(np.asarray(contour, dtype=float), 0, width)
    count = len(solid.groups["side"])
    groups = {name: np.array(members) for name, members in edges.items()}
    return replace(solid, groups={**groups, "ends": np.array([count, count + 1])})


STILL = {"velocity": (0, 0, 0), "pressure": 0.0}


def test_jet_on_an_inclined_plate(verify: Verify) -> None:
    # no loss: the jet splits as (1 ± cos)/2 and pushes along the normal with rho A V² sin (Batchelor 6.3, from memory)
    slope, speed, depth, density = np.radians(60), 8.0, 0.1, 999.0
    way, side = np.array([np.cos(slope), -np.sin(slope)]), np.array([np.sin(slope), np.cos(slope)])
    right, left = depth * (1 + np.cos(slope)) / 2, depth * (1 - np.cos(slope)) / 2
    start = -1.5 * way
    contour = [(-1, 0), (1, 0), (1, right), start + depth / 2 * side, start - depth / 2 * side, (-1, left)]
    body = plane_body({"plate": [0], "right": [1], "free": [2, 4], "jet": [3], "left": [5]}, contour)
    data = {
        "jet": {"velocity": (*(speed * way), 0), "pressure": 0.0},
        "right": {"velocity": (speed, 0, 0), "pressure": 0.0},
        "left": {"velocity": (-speed, 0, 0), "pressure": 0.0},
        "free": STILL,
        "ends": {"pressure": 0.0},
    }
    roles = {"jet": "inlet", "right": "outlet", "left": "outlet", "free": "open", "ends": "symmetry"}
    done = job(body, data, density=density, roles=roles)
    assert abs(done.balance.mass.relative) < 1e-14
    push = density * depth * speed**2 * np.sin(slope)
    assert_allclose(done.balance.load.from_balance.force, [0, -push, 0], rtol=0, atol=1e-12 * push)
    verify(
        what="Jet on a plate inclined by 60 degrees, 8 m/s, 0.1 m²: force along and across the plate",
        source="Batchelor, An Introduction to Fluid Dynamics, section 6.3: rho A V² sin",
        memory=True,
        expected=(0, -push),
        got=done.balance.load.from_balance.force[:2],
        unit="N",
        tolerance=1e-9,
        why="round-off of 5.5 kN",
        kind="law",
        law="momentum",
    )


def test_published_moving_vane() -> None:
    # Fox and McDonald, ch. 4 (from memory): 999 kg/m³, 0.003 m², jet 30 m/s, vane 10 m/s, turned by 60 degrees:
    # -599 N and 1.04 kN hold the vane; exact -599.4 and 1038.1912541. Steady in the frame of the vane.
    body = reducing_elbow((0.003, 0.003), 60, TO_Y)
    speed = 30.0 - 10.0
    data = {
        "inlet": {"velocity": (speed, 0, 0), "pressure": 0.0},
        "outlet": {"velocity": (speed / 2, speed * np.sqrt(0.75), 0), "pressure": 0.0},
    }
    force = job(body, data, density=999.0).balance.reaction.wrench.force
    assert_allclose(force, [-599.4, 1038.1912541, 0], rtol=0, atol=1e-6)


def channel(
    contour: Any, edges: Mapping[str, list[int]], depths: tuple[float, float], rate: float, gravity: float
) -> Outcome:
    """Water over a level bottom, hydrostatic at both ends, free to the air."""
    body = plane_body(edges, contour)
    x, y = body.points[:, 0], body.points[:, 1]
    pressure = 1000.0 * gravity * np.maximum(np.where(x < x.mean(), depths[0], depths[1]) - y, 0)
    data = {
        "in": {"velocity": (rate / depths[0], 0, 0)},
        "out": {"velocity": (rate / depths[1], 0, 0)},
        "free": STILL,
    }
    roles = {"in": "inlet", "out": "outlet", "free": "open", "ends": "symmetry"}
    return job(body, data, density=1000.0, roles=roles, pressure=pressure, gravity=(0, -gravity, 0))


def test_sluice_gate(verify: Verify) -> None:
    # no loss: q² = 2 g y1² y2² / (y1 + y2), F = rho g (y1 - y2)³ / (2 (y1 + y2)): y = 2 and 0.5 m,
    # 1000 kg/m³, g = 9.80665: 2.8009498389 m²/s and 6619.48875 N/m (White ch. 10, from memory)
    contour = [(-3, 0), (3, 0), (3, 0.5), (0, 0.5), (0, 2), (-3, 2)]
    edges = {"bottom": [0], "out": [1], "free": [2, 4], "gate": [3], "in": [5]}
    done = channel(contour, edges, (2.0, 0.5), 2.8009498389, 9.80665)
    force = done.balance.load.from_balance.force
    assert abs(done.balance.mass.relative) < 1e-14
    assert_allclose(force[0], 6619.48875, rtol=1e-9)
    verify(
        what="Sluice gate, depths 2 and 0.5 m: push on a metre of the gate",
        source="White, Fluid Mechanics, ch. 10: rho g (y1 - y2)³ / (2 (y1 + y2))",
        memory=True,
        expected=6619.48875,
        got=force[0],
        unit="N",
        tolerance=1e-5,
        why="the flow has 11 digits",
        kind="law",
        law="momentum",
    )
    assert_allclose(force[1], -1000 * 9.80665 * 7.5, rtol=1e-12)  # the bottom bears the weight


def test_hydraulic_jump() -> None:
    # y2/y1 = (sqrt(1 + 8 Fr²) - 1) / 2; White's example (from memory): 10 m²/s, 1.25 m, g = 9.81: 3.46 m;
    # exact 3.4616260986, where the momentum function is the same on both sides
    contour = [(-9, 0), (9, 0), (9, 3.4616260986), (-9, 1.25)]
    edges = {"bottom": [0], "out": [1], "free": [2], "in": [3]}
    done = channel(contour, edges, (1.25, 3.4616260986), 10.0, 9.81)
    force = done.balance.load.from_balance.force
    # flux and pressure are each some 1e5 N; the depth has 11 digits
    assert_allclose(force[0], 0, rtol=0, atol=1e-4)
    assert_allclose(done.balance.momentum.group_flux[3, 0], -1000 * 10**2 / 1.25, rtol=1e-12)


# ---- shock, wheel ---------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("mach", "pressure", "density", "thrust"),
    [(1.5, 2.4583333333, 1.8620689655, 4.15), (2.0, 4.5, 2.6666666667, 6.6), (3.0, 10.333333333, 3.8571428571, 13.6)],
)
def test_normal_shock(verify: Verify, mach: float, pressure: float, density: float, thrust: float) -> None:
    # NACA Report 1135 (1953), tables for 7/5, with p1 = rho1 = 1: mass flow and p + rho u² are the same on both sides
    solid = box((-1, 0, 0), (1, 1, 1), (2, 1, 1), quads=True)
    after = np.array([solid.points[face, 0].mean() > 0 for face in solid.faces])
    speed = mach * np.sqrt(1.4)
    velocity = np.zeros((len(solid.faces), 3))
    velocity[:, 0] = np.where(after, speed / density, speed)
    surface = solid.surface()
    flow = lay_flow(
        surface,
        density=np.where(after, density, 1.0),
        velocity=velocity,
        pressure=np.where(after, pressure, 1.0),
    )
    found = balance_of(surface, flow, encloses_hardware=False, tolerance=1e-9)
    assert found.verdict.closes is True
    ledger = found.balance.momentum
    for k, sign in ((0, -1), (1, 1)):
        through = ledger.group_flux[k, 0] - ledger.group_pressure[k, 0]
        assert_allclose(sign * through, thrust, rtol=1e-9)
        if k == 1:
            verify(
                what=f"Normal shock at M {mach:g}, p1 = rho1 = 1: p + rho u² behind",
                source="NACA Report 1135 (1953), table II for 7/5",
                memory=True,
                expected=thrust,
                got=through,
                tolerance=1e-8,
                why="table values computed to 11 digits",
                kind="gas",
            )
    assert_allclose(found.balance.mass.outflow, speed, rtol=1e-9)


def test_torque_of_a_radial_wheel(verify: Verify) -> None:
    # Euler: torque = flow × (r2 Vt2 - r1 Vt1), work torque × rate / flow = U2 Vt2 - U1 Vt1;
    # U2 = 40, Vt2 = 30, no swirl before: 1200 J/kg (White ch. 11, from memory)
    inner, outer, height, density, through = 0.1, 0.25, 0.04, 1000.0, 2.0
    work = []
    for around in (24, 48, 96):
        surface = ring(inner, outer, height, around).surface({"inner": "inlet", "outer": "outlet"}, rest="wall")
        radius = np.hypot(surface.points[:, 0], surface.points[:, 1])
        out = surface.points * [1, 1, 0] / radius[:, None]
        around_axis = np.cross([0, 0, 1], out)
        swirl = np.where(radius > 0.2, 30.0, 0.0)
        velocity = through * (inner / radius)[:, None] * out + swirl[:, None] * around_axis
        found = balance_of(surface, lay_flow(surface, density=density, velocity=velocity)).balance
        torque = found.angular.flux()[2]
        work.append(torque * (40 / outer) / found.mass.outflow - 1200)
        assert_allclose(found.mass.relative, 0, rtol=0, atol=1e-14)
        assert_allclose(found.momentum.flux(), 0, rtol=0, atol=1e-10 * torque)
    assert observed_order([4, 2, 1], work) == pytest.approx(2.0, abs=0.1)
    assert abs(work[-1]) < 0.01 * 1200
    verify(
        what="Radial wheel, U2 40 and Vt2 30 m/s, no swirl before: work a kilogram",
        source="Euler's equation of turbomachines; White, Fluid Mechanics, ch. 11: U2 Vt2 - U1 Vt1",
        memory=True,
        expected=1200,
        got=1200 + work[-1],
        unit="J/kg",
        tolerance=12,
        why="96 facets around",
        order=(observed_order([4, 2, 1], work), 2, 0.1),
        kind="law",
        law="angular",
    )
