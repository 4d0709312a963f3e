"""What is said at ports and between them, held to profiles, gas laws and mixing known in closed form."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from numpy.typing import NDArray

from fluxmesh import lay_flow
from fluxmesh.balance.losses import Loss, port_losses
from fluxmesh.balance.ports import PortFigures, port_figures
from fluxmesh.balance.setting import GroupData, Setting
from fluxmesh.errors import FieldError, GroupError
from fluxmesh.field.field import Field, array_field, constant_field
from fluxmesh.field.flow import Flow, face_arrays_of, integrate_flow
from fluxmesh.field.frame import Frame
from fluxmesh.field.port_samples import Means, PortSample, sample_ports
from fluxmesh.field.pressure import PressureMeaning
from fluxmesh.integral.layout import AT_SAMPLE
from fluxmesh.integral.samples import interpolate_at_samples, sample_places
from fluxmesh.report.ports import losses_data, losses_lines, losses_table, ports_data, ports_tables
from fluxmesh.surface.surface import ControlSurface
from tests.flows import poiseuille
from tests.measures import observed_order
from tests.solids import (
    Solid,
    any_polyhedron,
    box,
    in_triangles,
    moved,
    one_group,
    pipe,
    prism,
    quadratic,
    rigid_motion,
    sphere,
)

Array = NDArray[np.float64]
PORTS = {"inlet": "inlet", "outlet": "outlet"}
MEANS = ("mean_pressure", "mean_total_pressure", "mean_temperature", "mean_total_temperature", "speed")
seeds = st.integers(0, 2**32 - 1)
quick = settings(max_examples=25, deadline=None)


def setting_of(surface: ControlSurface, flow: Flow, heat_ratio: float | None = None) -> Setting:
    moving = (flow.velocity.present() | flow.mass_flux.present()) & flow.density.present()
    return Setting(
        groups=surface.groups,
        data=GroupData(moving, flow.pressure.present(), flow.traction.present()),
        closed=surface.closed,
        gravity=flow.gravity,
        heat_ratio=heat_ratio,
        ambient=flow.ambient,
        frame=flow.frame,
    )


def figures(
    surface: ControlSurface, flow: Flow, *, heat_ratio: float | None = None, **gas: Any
) -> dict[str, PortFigures]:
    table = integrate_flow(surface, flow)
    samples = sample_ports(surface, flow, table, heat_ratio=heat_ratio, **gas)
    return port_figures(table, setting_of(surface, flow, heat_ratio), samples)


def losses(surface: ControlSurface, flow: Flow, *asked: Any, heat_ratio: float | None = None) -> tuple[Loss, ...]:
    table, setting = integrate_flow(surface, flow), setting_of(surface, flow, heat_ratio)
    samples = sample_ports(surface, flow, table, heat_ratio=heat_ratio)
    return port_losses(table, setting, port_figures(table, setting, samples), asked)


def means(value: Means) -> list[float | None]:
    return [value.area, value.mass_flow, value.momentum]


def channel(cells: int = 4, **roles: str) -> ControlSurface:
    """A straight duct along x with a square section of 1 m², its ends in quads."""
    return box((0, 0, 0), (2, 1, 1), (1, cells, cells), quads=True).surface(
        {"x-": "inlet", "x+": "outlet", **roles}, rest="wall"
    )


def by_face(surface: ControlSurface, jet: Any, stream: Any) -> Array:
    """One value on faces whose middle has y below 1/4, another on the rest."""
    middle = np.array(
        [surface.points[surface.connectivity[surface.offsets[f] : surface.offsets[f + 1]]].mean(axis=0)
         for f in range(surface.face_count)]
    )  # fmt: skip
    low = middle[:, 1] < 0.25
    jet, stream = np.asarray(jet, float), np.asarray(stream, float)
    return np.where(low if jet.ndim == 0 else low[:, None], jet, stream)


# ---- profiles -------------------------------------------------------------------------------


def test_uniformity_of_laminar_flow_in_a_round_pipe() -> None:
    # w = 2 w̄ (1 - s) with s = r²/R², which is even in area: ∫|w - w̄| dA / (A w̄) = ∫|1 - 2 s| ds = 1/2, index 3/4
    flow, found = poiseuille(0.1, 2.0, 0.4, 870.0), []
    for level in (1, 2, 3):
        surface = pipe(0.1, 0.5, 12 * 2**level, 1, 4 * 2**level).surface(PORTS, rest="wall")
        found.append(figures(surface, flow.lay(surface)))
    for port in PORTS:
        errors = np.array([ports[port].uniformity for ports in found]) - 0.75
        assert observed_order([4, 2, 1], errors) == pytest.approx(2.0, abs=0.2)
        assert abs(errors[-1]) < 1e-3
        # momentum 4/3 and energy 2 (White, Fluid Mechanics ch. 3, from memory); so the speed weighted by mass flow is
        # ∫w²/∫w = 4/3 w̄, and by momentum ∫w³/∫w² = (2 w̄³) / (4/3 w̄²) = 1.5 w̄
        assert_allclose(found[-1][port].momentum_factor, 4 / 3, rtol=2e-3)
        assert_allclose(found[-1][port].kinetic_energy_factor, 2, rtol=4e-3)
        assert_allclose(means(found[-1][port].speed), [2.0, 2.0 * 4 / 3, 3.0], rtol=4e-3)
        assert found[-1][port].swirl == pytest.approx(0, abs=1e-14)
        assert found[-1][port].reversed_share == 0.0


@pytest.mark.parametrize("around", [5, 12, 96])
def test_swirl_number_of_a_body_that_turns(around: int) -> None:
    # V = W along the axis plus ω × r: S = ω ∫r² dA W / (R W² A) = ω I / (R W A), which is ω R / 2W for a circle; here
    # for the polygon, whose polar moment is A c² (2 + cos(2π/n)) / 6 with c its corner radius
    corner, turning, along = 0.2, 7.0, 3.0
    area = around / 2 * np.sin(2 * np.pi / around) * corner**2
    polar = area * corner**2 / 6 * (2 + np.cos(2 * np.pi / around))
    exact = turning * polar / (np.sqrt(area / np.pi) * along * area)
    body = pipe(corner, 0.5, around, 1, 2)
    home = body.surface(PORTS, rest="wall").points
    velocity = np.column_stack([-turning * home[:, 1], turning * home[:, 0], np.full(len(home), along)])
    turn, shift = rigid_motion(np.random.default_rng(around), 20.0)
    for rotation, move in ((np.eye(3), np.zeros(3)), (turn, shift)):
        surface = moved(body, rotation, move).surface(PORTS, rest="wall")
        found = figures(surface, lay_flow(surface, density=870.0, velocity=velocity @ rotation.T))
        # a duct keeps its sign from the inlet to the outlet; the other way round it changes
        assert_allclose([found[name].swirl for name in PORTS], exact, rtol=1e-11)
        back = figures(surface, lay_flow(surface, density=870.0, velocity=velocity @ rotation.T * [-1, -1, -1]))
        assert_allclose([back[name].swirl for name in PORTS], exact, rtol=1e-11)
    if around == 96:
        assert_allclose(exact, turning * corner / (2 * along), rtol=2e-3)


def test_swirl_turns_with_the_hand_of_the_flow() -> None:
    surface = pipe(0.2, 0.5, 12, 1, 2).surface(PORTS, rest="wall")
    x, y, _ = surface.points.T
    left = figures(surface, lay_flow(surface, density=1.0, velocity=np.column_stack([y, -x, 1 + 0 * x])))
    assert left["inlet"].swirl < -0.05
    assert_allclose(left["outlet"].swirl, left["inlet"].swirl, rtol=1e-12)


# ---- two streams through one port, by hand --------------------------------------------------

SHARE, FAST, SLOW, RHO = 0.25, 30.0, 3.0, 1000.0


def streams(p_fast: float, p_slow: float) -> tuple[ControlSurface, Flow, Field]:
    surface = channel()
    flow = lay_flow(
        surface,
        density=RHO,
        velocity=by_face(surface, (FAST, 0, 0), (SLOW, 0, 0)),
        pressure=by_face(surface, p_fast, p_slow),
    )
    warm = array_field(surface, "temperature", 1, by_face(surface, 350.0, 300.0), at="faces")
    return surface, flow, warm


def test_means_of_two_streams() -> None:
    # weights of the fast stream: its share of area, of mass flow, of momentum flux
    surface, flow, warm = streams(8e4, 2e4)
    mass = SHARE * FAST / (SHARE * FAST + (1 - SHARE) * SLOW)
    momentum = SHARE * FAST**2 / (SHARE * FAST**2 + (1 - SHARE) * SLOW**2)
    weights = np.array([SHARE, mass, momentum])
    totals = 8e4 + RHO * FAST**2 / 2, 2e4 + RHO * SLOW**2 / 2
    table = integrate_flow(surface, flow)
    found = port_figures(table, setting_of(surface, flow), sample_ports(surface, flow, table, temperature=warm))
    for port in (found["x-"], found["x+"]):
        for value, fast, slow in (
            (port.mean_pressure, 8e4, 2e4),
            (port.mean_total_pressure, *totals),
            (port.mean_temperature, 350.0, 300.0),
            (port.speed, FAST, SLOW),
        ):
            assert_allclose(means(value), weights * fast + (1 - weights) * slow, rtol=1e-13)
        mean = SHARE * FAST + (1 - SHARE) * SLOW
        assert_allclose(port.mean_speed, mean, rtol=1e-13)
        assert_allclose(port.momentum_factor, (SHARE * FAST**2 + (1 - SHARE) * SLOW**2) / mean**2, rtol=1e-13)
        assert_allclose(port.kinetic_energy_factor, (SHARE * FAST**3 + (1 - SHARE) * SLOW**3) / mean**3, rtol=1e-13)
        # deviations of both streams are equal: 1 - 2 a (1 - a) |V1 - V2| / 2 w̄
        assert_allclose(port.uniformity, 1 - SHARE * (1 - SHARE) * (FAST - SLOW) / mean, rtol=1e-13)
        assert not port.mean_total_temperature.any()
        assert not port.mean_mach_number.any()


def test_mixing_in_a_duct_of_one_area() -> None:
    # jet pump: V3 = a Vp + (1 - a) Vs, p3 - p1 = rho a (1 - a)(Vp - Vs)²: 9.75 m/s and 136687.5 Pa (momentum
    # theorem; White's problem family, from memory); what is lost follows from the flux of kinetic energy
    surface, flow, _ = streams(5e4, 5e4)
    mixed = lay_flow(
        surface,
        density=RHO,
        velocity=flow.velocity.face,
        pressure=flow.pressure.face,
        supplied={"x+": {"velocity": (9.75, 0, 0), "pressure": 5e4 + 136687.5}},
    )
    found = figures(surface, mixed)
    entry, after = found["x-"], found["x+"]
    assert_allclose(after.mean_speed, entry.mean_speed, rtol=1e-14)
    rise = (entry.momentum_factor - after.momentum_factor) * RHO * 9.75**2
    assert_allclose(after.mean_pressure.area - entry.mean_pressure.area, rise, rtol=1e-12)
    energy = RHO / 2 * (SHARE * FAST**3 + (1 - SHARE) * SLOW**3) / 9.75
    (loss,) = losses(surface, mixed, (("x-", "x+"), None))
    assert_allclose(loss.total_pressure_drop, energy - RHO / 2 * 9.75**2 - 136687.5, rtol=1e-12)
    assert_allclose(loss.coefficient, loss.total_pressure_drop / (RHO / 2 * 9.75**2), rtol=1e-12)
    assert after.outflow_share == 1.0
    assert entry.outflow_share is None


def test_flow_that_turns_back() -> None:
    # of 30 × 1/4 out and 3 × 3/4 back: 2.25 of 9.75
    surface = channel()
    flow = lay_flow(surface, density=RHO, velocity=by_face(surface, (FAST, 0, 0), (-SLOW, 0, 0)), pressure=0.0)
    port = figures(surface, flow)["x+"]
    assert_allclose(port.reversed_share, 2.25 / 9.75, rtol=1e-13)
    assert_allclose(port.mean_speed, 7.5 - 2.25, rtol=1e-13)
    assert_allclose(port.speed.area, 7.5 + 2.25, rtol=1e-13)
    assert_allclose(port.uniformity, 1 - SHARE * (1 - SHARE) * (FAST + SLOW) / 5.25, rtol=1e-13)
    # as much back as forth: nothing that divides by the net flow
    flow = lay_flow(surface, density=RHO, velocity=by_face(surface, (9.0, 0, 0), (-3.0, 0, 0)), pressure=1.0)
    port = figures(surface, flow)["x+"]
    assert_allclose(port.reversed_share, 0.5, rtol=1e-13)
    assert (port.uniformity, port.swirl, port.momentum_factor) == (None, None, None)
    assert port.mean_pressure.mass_flow is None
    assert_allclose(port.mean_pressure.momentum, 1.0, rtol=1e-13)


def test_split_between_three_outlets() -> None:
    surface = channel(**{"y-": "outlet", "y+": "outlet", "z-": "open", "z+": "inlet"})
    speeds = {"x-": (9.0, 0, 0), "x+": (2.0, 0, 0), "y-": (0, -1.5, 0), "y+": (0, 2.5, 0), "z+": (0, 0, -0.5)}
    still = {"z-": (0, 0, 0.25)}  # an open group that takes in
    supplied: Mapping[str, Any] = {name: {"velocity": v} for name, v in {**speeds, **still}.items()}
    found = figures(surface, lay_flow(surface, density=RHO, supplied=supplied))
    # areas 1 at the ends, 2 at the sides: 2, 3 and 5 of 10
    assert_allclose([found[name].outflow_share for name in ("x+", "y-", "y+")], [0.2, 0.3, 0.5], rtol=1e-13)
    assert [found[name].outflow_share for name in ("x-", "z-", "z+")] == [None] * 3
    unknown = figures(surface, lay_flow(surface, density=RHO, supplied={n: supplied[n] for n in ("x-", "x+")}))
    assert unknown["x+"].outflow_share is None
    assert unknown["x+"].mean_speed == pytest.approx(2.0)


# ---- gas ------------------------------------------------------------------------------------

HEAT, GAS = 1.4, 287.05


@pytest.mark.parametrize(
    ("mach", "pressure_ratio", "temperature_ratio"),
    [(1.5, 0.27240306648, 0.68965517241), (2, 0.12780452546, 0.55555555556), (3, 0.02722368370, 0.35714285714)],
)
def test_isentropic_relations(mach: float, pressure_ratio: float, temperature_ratio: float) -> None:
    # NACA Report 1135, Table I and II: p/pt and T/Tt (printed .2724, .1278, .02722 and .6897, .5556, .3571)
    surface, ambient, p, kelvin = channel(), 101325.0, 4.0e4, 250.0
    flow = lay_flow(
        surface,
        density=p / (GAS * kelvin),
        velocity=(mach * np.sqrt(HEAT * GAS * kelvin), 0, 0),
        pressure=p,
        meaning=PressureMeaning("absolute"),
        ambient=ambient,
    )
    warm = constant_field(surface, "temperature", 1, kelvin)
    for gas in ({"gas_constant": GAS}, {"temperature": warm}):
        for port in figures(surface, flow, heat_ratio=HEAT, **gas).values():
            total = np.array(means(port.mean_total_pressure), float) + ambient
            assert_allclose(p / total, pressure_ratio, rtol=2e-10)
            assert_allclose(kelvin / np.array(means(port.mean_total_temperature), float), temperature_ratio, rtol=1e-10)
            assert_allclose(means(port.mean_temperature), kelvin, rtol=1e-12)
            assert_allclose(means(port.mean_mach_number), mach, rtol=1e-12)
            assert_allclose(port.mach_number, mach, rtol=1e-12)
    # without quadrature a gas has no totals, rather than those of a liquid
    bare = port_figures(integrate_flow(surface, flow), setting_of(surface, flow, HEAT))["x+"]
    assert not bare.mean_total_pressure.any()
    assert_allclose(bare.mean_pressure.area, p - ambient, rtol=1e-12)


def test_slow_gas_is_like_a_liquid() -> None:
    # pt - p = rho V²/2 (1 + M²/4 + ...): the next term of the series, (2 - γ) M⁴/24, is 2e-9 of it at M = 0.02
    surface, p, kelvin, mach = channel(), 101325.0, 300.0, 0.02
    density = p / (GAS * kelvin)
    speed = mach * np.sqrt(HEAT * GAS * kelvin)
    flow = lay_flow(surface, density=density, velocity=(speed, 0, 0), pressure=0.0, ambient=p)
    total = figures(surface, flow, heat_ratio=HEAT)["x+"].mean_total_pressure.area
    assert_allclose(total, density * speed**2 / 2 * (1 + mach**2 / 4), rtol=1e-8)


def test_means_of_two_gas_streams() -> None:
    surface, ambient = channel(), 1e5
    density, kelvin = (1.0, 1.25), (350.0, 280.0)
    speed = (200.0, 100.0)
    flow = lay_flow(
        surface,
        density=by_face(surface, *density),
        velocity=by_face(surface, (speed[0], 0, 0), (speed[1], 0, 0)),
        pressure=by_face(surface, *(r * GAS * t - ambient for r, t in zip(density, kelvin))),
        ambient=ambient,
    )
    port = figures(surface, flow, heat_ratio=HEAT, gas_constant=GAS)["x+"]
    part = np.array([SHARE, 1 - SHARE])
    mass = part * density * speed / np.sum(part * density * speed)
    momentum = mass * speed / np.sum(mass * speed)
    rise = 1 + 0.2 * np.square(speed) / (HEAT * GAS * np.array(kelvin))
    total = np.array(density) * GAS * kelvin * rise**3.5 - ambient
    for value, each in (
        (port.mean_total_pressure, total),
        (port.mean_total_temperature, kelvin * rise),
        (port.mean_temperature, np.array(kelvin)),
        (port.mean_mach_number, np.array(speed) / np.sqrt(HEAT * GAS * np.array(kelvin))),
    ):
        assert_allclose(means(value), [w @ each for w in (part, mass, momentum)], rtol=1e-12)


def test_a_gas_below_vacuum_has_no_totals_and_says_so() -> None:
    surface = channel()
    flow = lay_flow(surface, density=1.0, velocity=(1.0, 0, 0), pressure=by_face(surface, -2e5, 0.0), ambient=1e5)
    table = integrate_flow(surface, flow)
    sample = sample_ports(surface, flow, table, heat_ratio=HEAT, gas_constant=GAS)["x+"]
    assert "absolute pressure is not above zero" in sample.notes[0]
    assert not any(m.any() for m in (sample.total_pressure, sample.temperature, sample.mach_number))
    assert_allclose(sample.pressure.area, -5e4, rtol=1e-13)
    with pytest.raises(FieldError, match=r"heat ratio is 1\.0"):
        sample_ports(surface, flow, table, heat_ratio=1.0)


# ---- losses ---------------------------------------------------------------------------------


@pytest.mark.parametrize("share", [0.25, 0.5, 0.81])
def test_loss_of_a_sudden_expansion(share: float) -> None:
    # Borda-Carnot: (1 - s)² of the first dynamic pressure, 0.5625 at s = 1/4; by the second speed (1/s - 1)²
    narrow = channel(4, **{"y-": "outlet"})
    speed, p = 3.0, 2.0e4
    after = p + RHO * speed**2 * share * (1 - share)
    supplied = {
        "x-": {"velocity": (speed, 0, 0), "pressure": p},
        "x+": {"velocity": (share * speed, 0, 0), "pressure": after},
    }
    flow = lay_flow(narrow, density=RHO, supplied=supplied)
    by_first, by_second, back, unknown = losses(
        narrow, flow, (("x-", "x+"), None), (("x-", "x+"), "x+"), (("x+", "x-"), "x-"), (("x-", "y-"), "x-")
    )
    assert_allclose(by_first.coefficient, (1 - share) ** 2, rtol=1e-12)
    assert_allclose(by_second.coefficient, (1 / share - 1) ** 2, rtol=1e-12)
    assert_allclose(by_first.total_pressure_drop, (1 - share) ** 2 * RHO * speed**2 / 2, rtol=1e-12)
    assert by_first.speed_of == "x-"
    assert_allclose(back.coefficient, -((1 - share) ** 2), rtol=1e-12)
    assert (unknown.coefficient, unknown.reason) == (None, "the pressure at y- is not given")
    with pytest.raises(GroupError, match="asked for at 'shell'"):
        losses(narrow, flow, (("x-", "shell"), None))


def test_losses_that_cannot_be_made_say_why() -> None:
    surface = channel(4, **{"y-": "open"})
    still = {"y-": {"velocity": (0.0, 0.0, 0.0), "pressure": 0.0}}
    moving = {name: {"velocity": (1.0, 0, 0), "pressure": 1.0} for name in ("x-", "x+")}
    flow = lay_flow(surface, density=RHO, supplied={**moving, **still})
    by_still, from_still = losses(surface, flow, (("x-", "x+"), "y-"), (("y-", "x+"), None))
    assert (by_still.coefficient, by_still.total_pressure_drop) == (None, 0.0)
    assert by_still.reason == "no flow is known through y-"
    assert "nothing goes through" in from_still.reason
    flow = lay_flow(surface, density=RHO, pressure=0.0, supplied={"x-": moving["x-"]})
    assert losses(surface, flow, (("x-", "x+"), None))[0].reason == "the flow through x+ is not given"
    flow = lay_flow(surface, density=1.2, supplied=moving, ambient=1e5, frame=Frame(velocity=(1, 0, 0)))
    assert "gas" in losses(surface, flow, (("x-", "x+"), None), heat_ratio=HEAT)[0].reason


def test_height_and_acceleration_are_no_loss() -> None:
    # with p = rho (g - a)·x along a duct of one area nothing is lost, whichever way it lies
    turn, shift = rigid_motion(np.random.default_rng(3), 5.0)
    body = moved(box((0, 0, 0), (2, 1, 1), (1, 4, 4), quads=True), turn, shift)
    surface = body.surface({"x-": "inlet", "x+": "outlet"}, rest="wall")
    gravity, pull = np.array([1.0, -2.0, -9.0]), np.array([4.0, 0.5, 3.0])
    for frame, force in (
        (None, gravity),
        (Frame(acceleration=tuple(pull)), gravity - pull),
        (Frame(velocity=(5, -1, 2)), gravity),
    ):
        flow = lay_flow(
            surface,
            density=RHO,
            velocity=3.0 * turn[:, 0],
            pressure=RHO * surface.points @ force + 700.0,
            gravity=gravity,
            frame=frame,
            velocity_frame="relative",
        )
        (loss,) = losses(surface, flow, (("x-", "x+"), None))
        assert_allclose(loss.total_pressure_drop, 0, rtol=0, atol=1e-9 * RHO * 50)


def test_a_rotor_without_friction_loses_nothing() -> None:
    # a radial channel from x = 1 to 3 turns about z, and what goes through slows down: p + rho w²/2 - rho Ω² r²/2 is
    # the same at both ends (relative Bernoulli), with r² larger by 8 all over. A loss on top comes out as it went in
    surface = box((1, -0.5, 0), (3, 0.5, 1), (1, 4, 4), quads=True).surface(
        {"x-": "inlet", "x+": "outlet"}, rest="wall"
    )
    spin, entry, leaving = 6.0, 4.0, 1.5
    frame = Frame(rate=spin, axis=(0, 0, 1))
    gain = RHO / 2 * (spin**2 * 8 + entry**2 - leaving**2)
    for lost in (0.0, 2500.0):
        supplied = {
            "x-": {"velocity": (entry, 0, 0), "pressure": 7e3},
            "x+": {"velocity": (leaving, 0, 0), "pressure": 7e3 + gain - lost},
        }
        flow = lay_flow(surface, density=RHO, supplied=supplied, frame=frame, velocity_frame="relative")
        (loss,) = losses(surface, flow, (("x-", "x+"), None))
        assert_allclose(loss.total_pressure_drop, lost, rtol=0, atol=1e-9 * gain)
        assert_allclose(loss.coefficient, lost / (RHO * entry**2 / 2), rtol=0, atol=1e-9)


# ---- who looks ------------------------------------------------------------------------------


def test_totals_depend_on_the_frame_and_factors_do_not() -> None:
    surface, flow, _ = streams(8e4, 2e4)
    drift = np.array([-5.0, 2.0, 1.0])
    seen = figures(surface, replace(flow, frame=Frame(velocity=tuple(drift))))["x+"]
    home = figures(surface, flow)["x+"]
    for name in ("momentum_factor", "kinetic_energy_factor", "uniformity", "mean_speed", "reversed_share"):
        assert getattr(seen, name) == getattr(home, name)
    assert seen.mean_pressure == home.mean_pressure
    area = np.array([SHARE, 1 - SHARE])
    through = np.array([FAST, SLOW])
    totals = [8e4, 2e4] + RHO / 2 * np.array([np.sum(np.square(drift + np.array([speed, 0, 0]))) for speed in through])
    for value, weight in zip(means(seen.mean_total_pressure), (area, area * through, area * through**2)):
        assert_allclose(value, weight @ totals / weight.sum(), rtol=1e-12)
    # moments about the middle at y = 1/2: the streams go at -3/8 and 1/8 of it, both drift by 1 along z
    moment = SHARE * FAST * -0.375 + (1 - SHARE) * SLOW * 0.125
    assert_allclose(seen.swirl, moment * drift[2] / (np.sqrt(1 / np.pi) * (area @ through**2)), rtol=1e-12)
    assert home.swirl == pytest.approx(0, abs=1e-13)
    # the same told by the absolute velocity
    told = lay_flow(
        surface,
        density=RHO,
        velocity=flow.velocity.face + drift,
        pressure=flow.pressure.face,
        frame=Frame(velocity=tuple(drift)),
    )
    assert_allclose(means(figures(surface, told)["x+"].speed), means(seen.speed), rtol=1e-13)


@pytest.mark.parametrize("curved", [False, True])
def test_the_swirl_of_a_rotor_is_that_of_the_flow_at_rest(curved: bool) -> None:
    # what turns with the surface goes straight through it as seen from there, and has all its swirl at rest; off the
    # axis too, since r × W is taken about the port's own centre
    along, spin = 3.0, 7.0
    body = pipe(0.2, 0.5, 12, 1, 2)
    body = moved(quadratic(body) if curved else body, np.eye(3), (0.7, -0.4, 0.1))
    surface = body.surface(PORTS, rest="wall")
    frame = Frame(rate=spin, through=(0.1, 0.2, 0))
    told = lay_flow(surface, density=RHO, velocity=(0, 0, along), pressure=0.0, frame=frame, velocity_frame="relative")
    rest = lay_flow(surface, density=RHO, velocity=frame.at(surface.points) + np.array([0, 0, along]), pressure=0.0)
    area = 6 * np.sin(np.pi / 6) * 0.2**2
    exact = spin * 0.2**2 * (2 + np.cos(np.pi / 6)) / 6 / (np.sqrt(area / np.pi) * along)
    one, two = figures(surface, told), figures(surface, rest)
    for name in PORTS:
        assert_allclose([one[name].swirl, two[name].swirl], exact, rtol=1e-11)
        for value in ("speed", "mean_total_pressure"):
            assert_allclose(means(getattr(one[name], value)), means(getattr(two[name], value)), rtol=1e-11)
        assert one[name].uniformity == pytest.approx(1, abs=1e-13)


def test_a_uniform_stream_is_one_from_a_turning_surface_too() -> None:
    # told by one absolute velocity a group, which seen from the surface varies over each face
    surface, ambient = pipe(0.2, 0.5, 7, 1, 2).surface(PORTS, rest="wall"), 1e5
    frame = Frame(velocity=(0.5, 0, 0), rate=9.0, axis=(0.6, 0, 0.8), through=(0.3, 0, 0))
    flow = lay_flow(surface, density=1.2, velocity=(3, -2, 6), pressure=4.0, ambient=ambient, frame=frame)
    assert (flow.velocity.where == AT_SAMPLE).all()
    for heat, total in (
        (None, 4.0 + 0.6 * 49),
        (HEAT, (ambient + 4) * (1 + 0.2 * 1.2 * 49 / 1.4 / 100004) ** 3.5 - 1e5),
    ):
        for port in figures(surface, flow, heat_ratio=heat).values():
            assert_allclose(means(port.speed), 7.0, rtol=1e-12)
            assert_allclose(means(port.mean_total_pressure), total, rtol=1e-9)
            assert 0 < port.uniformity < 1


# ---- the same sums as the table -------------------------------------------------------------


def any_body(seed: int, kind: str) -> Solid:
    if kind == "curved":
        return sphere(1, 0.7, (1, 2, 3), curved=True)
    if kind == "polygons":
        # quads round two caps that are not convex, one of them with triangles of its fan the other way round
        around = np.array([(0, 0), (3, 0), (3, 1), (0.3, 0.4), (2, 2), (0.2, 3), (-1, 1.2)], float)
        body = moved(prism(around, 0, 1), *rigid_motion(np.random.default_rng(seed), 2.0))
        return one_group(body.points, body.faces)
    solid = any_polyhedron(seed)
    return in_triangles(solid) if kind == "triangles" else quadratic(solid)


def sampled(surface: ControlSurface, field: Field, start: NDArray[np.int64]) -> Field:
    """The values on points of a field, at all quadrature points."""
    every = np.ones(surface.face_count, np.bool_)
    values = interpolate_at_samples(face_arrays_of(surface), every, field.node)
    assert values.shape[0] == start[-1]
    return replace(field, where=np.full(len(surface.groups), AT_SAMPLE, np.int8), sample=values)


@pytest.mark.parametrize("place", ["nodes", "faces", "samples", "mass flux"])
@pytest.mark.parametrize("kind", ["polygons", "triangles", "curved", "flat curved"])
def test_means_by_quadrature_are_those_of_the_table(kind: str, place: str) -> None:
    rng = np.random.default_rng(8)
    solid = any_body(31, kind)
    surface = replace(solid, groups={"one": solid.groups["skin"][::2], "two": solid.groups["skin"][1::2]}).surface(
        {"one": "outlet", "two": "inlet"}
    )
    count = surface.face_count if place == "faces" else surface.point_count
    meaning = PressureMeaning("kinematic", "removed", datum=(3.0, -1.0, 2.0))
    flow = lay_flow(
        surface,
        density=1.7,
        velocity=rng.standard_normal((count, 3)) + np.array([0.2, 0.1, 0.4]),
        pressure=rng.standard_normal(count),
        at="faces" if place == "faces" else "nodes",
        meaning=meaning,
        gravity=(1.0, -2.0, -5.0),
        mass_flux=rng.standard_normal(surface.face_count) + 0.3 if place == "mass flux" else None,
    )
    if place == "samples":
        start = sample_places(face_arrays_of(surface), np.ones(surface.face_count, np.bool_)).start
        velocity, pressure = (sampled(surface, field, start) for field in (flow.velocity, flow.pressure))
        # pressure still on points, but made gauge at the quadrature points
        uneven = array_field(surface, "density", 1, rng.uniform(0.5, 2, count), at="nodes")
        plain = PressureMeaning("kinematic")
        compare_with_table(surface, replace(flow, velocity=velocity, density=uneven, sample_start=start, meaning=plain))
        flow = replace(flow, velocity=velocity, pressure=pressure, sample_start=start)
    compare_with_table(surface, flow)
    if place in ("nodes", "faces"):
        density = rng.uniform(0.5, 2, count)
        varying = array_field(surface, "density", 1, density, at=place)
        compare_with_table(surface, replace(flow, density=varying, meaning=PressureMeaning("kinematic")))


def compare_with_table(surface: ControlSurface, flow: Flow) -> None:
    table = integrate_flow(surface, flow)
    found = sample_ports(surface, flow, table)
    for k, group in enumerate(surface.groups):
        area, mass = table.column("area")[k], table.column("mass_flow")[k]
        sample: PortSample = found[group.name]
        for value, name in ((sample.pressure, "pressure"), (sample.total_pressure, "total")):
            by_area, by_mass = table.column("pressure_area")[k], table.column("pressure_mass_flow")[k]
            if name == "total":
                by_area = by_area + table.column("dynamic_pressure_area")[k]
                by_mass = by_mass + table.column("dynamic_pressure_mass_flow")[k]
            size = abs(by_area / area) + abs(by_mass / mass)
            assert_allclose([value.area, value.mass_flow], [by_area / area, by_mass / mass], rtol=0, atol=1e-12 * size)
        assert_allclose(sample.speed.area, table.column("speed_area")[k] / area, rtol=1e-12)
        # (∫w rho w dA) / (∫rho w² dA) of what goes straight through; momentum is above zero
        assert sample.speed.momentum > 0


@quick
@given(seed=seeds)
def test_a_rigid_motion_changes_no_figure(seed: int) -> None:
    rng = np.random.default_rng(seed)
    body, (turn, shift) = any_polyhedron(seed), rigid_motion(rng, 5.0)
    count = len(body.points)
    velocity, pressure = rng.standard_normal((count, 3)), rng.standard_normal(count)
    density, kelvin = rng.uniform(0.5, 2, count), rng.uniform(250, 350, count)
    found = []
    for solid, v in ((body, velocity), (moved(body, turn, shift), velocity @ turn.T)):
        half = solid.groups["skin"]
        roles = replace(solid, groups={"one": half[: len(half) // 2], "two": half[len(half) // 2 :]})
        surface = roles.surface({"one": "inlet", "two": "open"})
        flow = lay_flow(surface, density=density, velocity=v, pressure=pressure, ambient=20.0)
        warm = array_field(surface, "temperature", 1, kelvin, at="nodes")
        found.append(figures(surface, flow, heat_ratio=HEAT, temperature=warm))
    for name in ("one", "two"):
        for key, value in ports_data(found[0])[name].items():
            other = ports_data(found[1])[name][key]
            for a, b in zip(np.atleast_1d(flat(value)), np.atleast_1d(flat(other))):
                assert (a is None) == (b is None), key
                if a is not None:
                    # means by mass flow divide by as little as 1/100 of what passes
                    assert b == pytest.approx(a, rel=1e-9, abs=1e-9), key


def flat(value: Any) -> Any:
    return list(value.values()) if isinstance(value, dict) else [value]


@quick
@given(seed=seeds)
def test_cutting_faces_changes_no_figure(seed: int) -> None:
    # linear fields over flat quads: the rule is exact for both; uniformity is left out, for |w - w̄| has a kink
    rng = np.random.default_rng(seed)
    whole = box((0, 0, 0), (2, 1, 1), (1, 3, 2), quads=True)
    slope, shift = rng.standard_normal((3, 3)), rng.standard_normal(3)
    pressures = rng.standard_normal(3)
    found = []
    for solid in (whole, in_triangles(whole)):
        surface = solid.surface({"x-": "inlet", "x+": "outlet"}, rest="wall")
        flow = lay_flow(
            surface,
            density=1.3,
            velocity=surface.points @ slope.T + shift,
            pressure=surface.points @ pressures,
        )
        found.append(figures(surface, flow))
    for name in ("x-", "x+"):
        one, two = (ports[name] for ports in found)
        for key in ("mean_pressure", "mean_total_pressure"):
            a, b = (means(getattr(port, key)) for port in (one, two))
            for x, y in zip(a, b):
                assert (x is None) == (y is None)
                if x is not None:
                    assert y == pytest.approx(x, rel=1e-9, abs=1e-9)
        for key in ("momentum_factor", "kinetic_energy_factor", "swirl", "mean_speed", "outflow_share"):
            x, y = (getattr(port, key) for port in (one, two))
            assert (x is None) == (y is None)
            assert x is None or y == pytest.approx(x, rel=1e-9, abs=1e-9)


def test_batches_do_not_show() -> None:
    # 15,000 facets in several batches, with values that differ from one to the next
    surface = channel(61)
    x, y, z = surface.points.T
    flow = lay_flow(surface, density=1.0, velocity=np.column_stack([1 + 0 * x, 0 * x, 0 * x]), pressure=y + 10 * z)
    for port in figures(surface, flow).values():
        assert_allclose(means(port.mean_pressure), 5.5, rtol=1e-12)


# ---- what has no figure ---------------------------------------------------------------------


def test_a_box_around_a_body_is_no_section() -> None:
    surface = box((0, 0, 0), (1, 1, 1), 2).surface({"x-": "inlet"}, rest="open")
    owner = np.where(surface.group_of_face == 0, 0, 1).astype(np.int32)
    around = replace(surface, group_of_face=owner, groups=surface.groups[:2])
    flow = lay_flow(around, density=1.2, velocity=(3.0, 1.0, 0), pressure=5.0)
    found = figures(around, flow)
    open_group = found[around.groups[1].name]
    assert (open_group.uniformity, open_group.swirl, open_group.mean_pressure.momentum) == (None, None, None)
    assert_allclose([open_group.mean_pressure.area, open_group.speed.area], [5.0, np.sqrt(10)], rtol=1e-12)
    assert found["x-"].uniformity == pytest.approx(1.0)
    # a moving box is looked at, for what the table cannot give
    moving = figures(around, replace(flow, frame=Frame(velocity=(1, 0, 0))))[around.groups[1].name]
    assert_allclose(moving.speed.area, np.sqrt(17), rtol=1e-12)
    assert moving.uniformity is None


def test_a_mass_flux_alone_gives_no_speeds() -> None:
    surface = channel()
    table = integrate_flow(
        surface, flow := lay_flow(surface, density=2.0, pressure=3.0, mass_flux=by_face(surface, 4, 1))
    )
    port = port_figures(table, setting_of(surface, flow), sample_ports(surface, flow, table))["x+"]
    assert not port.mean_total_pressure.any()
    assert not port.speed.any()
    assert (port.kinetic_energy_factor, port.swirl) == (None, None)
    assert_allclose(means(port.mean_pressure), 3.0, rtol=1e-13)
    # 16 faces of 1/16 m²: 4 carry 4, 12 carry 1
    assert_allclose(port.mean_speed, 28 / 2.0, rtol=1e-13)
    assert_allclose(port.momentum_factor, (4 * 16 + 12) * 16 / 28**2, rtol=1e-13)
    assert_allclose(port.uniformity, 1 - 0.25 * 0.75 * 3 / 1.75, rtol=1e-13)


def test_temperatures_elsewhere_are_refused() -> None:
    surface = channel()
    flow = lay_flow(surface, density=1.0, velocity=(1.0, 0, 0), pressure=0.0)
    warm = array_field(surface, "temperature", 1, np.full(surface.point_count, 300.0), at="nodes")
    astray = replace(warm, where=np.full(len(surface.groups), AT_SAMPLE, np.int8), sample=np.full(7, 300.0))
    with pytest.raises(FieldError, match="not at those of the flow"):
        sample_ports(surface, flow, integrate_flow(surface, flow), temperature=astray)


# ---- what is shown --------------------------------------------------------------------------


def shown(tables: list[Any], width: int) -> list[str]:
    from io import StringIO

    from rich.console import Console

    console = Console(file=StringIO(), width=width, color_system=None)
    for each in tables:
        console.print(each)
    return console.file.getvalue().splitlines()


@pytest.mark.parametrize("width", [80, 100, 120])
def test_tables_fit_the_terminal(width: int) -> None:
    surface, flow, warm = streams(8e4, 2e4)
    found = figures(surface, replace(flow, ambient=1e5), heat_ratio=HEAT, temperature=warm)
    many = {f"a port [{k}] of {'x' * (k % 9)}": found["x-" if k % 2 else "x+"] for k in range(13)}
    lines = shown(ports_tables(many, width=width), width)
    assert max(len(line) for line in lines) <= width
    text = "\n".join(lines)
    # every name whole, and nothing cut or folded
    assert all(name in text for name in many)
    assert "…" not in text
    assert sum("static pressure, gauge, Pa" in line for line in lines) == len(ports_tables(many, width=width)) > 1
    for head in ("by mass flow", "total temperature, K", "Mach number of that", "share of the outflow", "flows back"):
        assert head in text
    assert "350" not in text


def test_rows_that_no_port_has_are_left_out() -> None:
    surface, flow, _ = streams(8e4, 2e4)
    lines = shown(ports_tables(figures(surface, flow)), 100)
    assert not any("temperature" in line or "Mach" in line for line in lines)
    row = next(line for line in lines if "by momentum" in line)
    # rho w² weights 225 and 6.75 of 231.75
    assert row.split()[-1] == "78,252"
    assert next(line for line in lines if "share of the outflow" in line).split()[-2:] == ["–", "100.00%"]


def test_plain_data() -> None:
    surface, flow, _ = streams(8e4, 2e4)
    data = json.loads(json.dumps(ports_data(figures(surface, flow)), allow_nan=False))["x+"]
    assert set(data["mean_pressure"]) == {"area", "mass_flow", "momentum"}
    assert set(data) == {
        "mean_pressure", "mean_total_pressure", "mean_temperature", "mean_total_temperature", "mean_speed", "speed",
        "mean_mach_number", "momentum_factor", "kinetic_energy_factor", "uniformity", "swirl", "reversed_share",
        "outflow_share", "mach_number",
    }  # fmt: skip
    made = losses(surface, lay_flow(surface, density=RHO, velocity=(1.0, 0, 0)), (("x-", "x+"), None))
    assert losses_lines(made) == ["No loss from x- to x+: the pressure at x- is not given."]
    assert json.loads(json.dumps(losses_data(made)))[0]["between"] == ["x-", "x+"]
    assert any("x- to x+" in line and "–" in line for line in shown([losses_table(made)], 80))
