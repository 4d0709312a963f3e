"""Published figures of devices, gases and doubt that no other test holds fluxmesh to."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from fluxmesh import Outcome, PressureMeaning, balance_of, lay_flow
from fluxmesh.assess.doubt.draws import draw_inputs, summarise
from fluxmesh.assess.doubt.inputs import NORMAL_95, Input, propagate, sensitivity
from fluxmesh.balance.carried import carried_balance
from fluxmesh.field.frame import Frame
from fluxmesh.field.scalars import integrate_scalar, lay_scalar
from tests.measures import observed_order
from tests.solids import Solid, box, elbow, pipe, prism, radius_of_area
from tests.verification import Verify

POUND_FORCE, PSI, INCH = 4.4482216152605, 6894.7572931684, 0.0254  # NIST SP 811, appendix B
AIR = 287.05287  # J/(kg K), ISO 2533
Array = np.ndarray


def demand(
    body: Solid, data: Mapping[str, Mapping[str, Any]], roles: Mapping[str, str], density: float, **options: Any
) -> Outcome:
    """Balance a body with data for its ports alone; the rest are walls."""
    surface = body.surface(roles, rest="wall")
    frame = options.pop("frame", None)
    return balance_of(surface, lay_flow(surface, density=density, supplied=data, frame=frame), **options)


def in_groups(body: Solid, **groups: Any) -> Solid:
    """Return the body with groups of faces; what is in none is ``shell``."""
    taken = {name: np.asarray(faces) for name, faces in groups.items()}
    rest = np.setdiff1d(np.arange(len(body.faces)), np.concatenate(list(taken.values())))
    return replace(body, groups={**taken, "shell": rest})


# ---- thrust ---------------------------------------------------------------------------------


def test_thrust_of_a_bellows(verify: Verify) -> None:
    # EJMA: pressure times the area of the mean diameter of the convolutions, 12 in.: a blind end bears it
    radius = radius_of_area(np.pi / 4 * (12 * INCH) ** 2, 24)
    found = demand(
        pipe(radius, 1.0, 24), {"inlet": {"velocity": (0, 0, 0), "pressure": 150 * PSI}}, {"inlet": "inlet"}, 1000.0
    )
    verify(
        what="Bellows of 113 in², 150 psi: thrust",
        source="data sheet of a manufacturer, after EJMA: 16 964 lb",
        expected=16964,
        got=found.balance.load.from_balance.force[2] / POUND_FORCE,
        unit="lbf",
        tolerance=1,
        why="printed in whole pounds",
        kind="wrench",
    )


def test_thrust_at_a_wye(verify: Verify) -> None:
    # AWWA M45, fig. 7-1: 2 P A2 cos(t/2) - P A1 away from the stem
    half, stem, branch, pressure = np.radians(30), 0.5, 0.4, 6e5
    way, across = np.array([np.cos(half), np.sin(half)]), np.array([-np.sin(half), np.cos(half)])
    middle = 2 * way
    upper = [middle - branch / 2 * across, middle + branch / 2 * across]
    contour = [(-1, -stem / 2), *[p * [1, -1] for p in upper[::-1]], *upper, (-1, stem / 2)]
    body = in_groups(prism(np.array(contour, dtype=float), 0, 1), left=[1], right=[3], stem=[5])
    names = ("stem", "left", "right")
    still = {name: {"velocity": (0, 0, 0), "pressure": pressure} for name in names}
    found = demand(body, still, {"stem": "inlet", "left": "outlet", "right": "outlet"}, 1000.0)
    areas = dict(zip([g.name for g in found.surface.groups], found.balance.table.column("area")))
    assert [areas[name] for name in names] == pytest.approx([stem, branch, branch], rel=1e-12)
    verify(
        what="Wye of 60 degrees, 0.5 m² and twice 0.4 m², 6 bar: thrust",
        source="AWWA M45, 1st ed., fig. 7-1: 2 P A2 cos(t/2) - P A1, towards the stem",
        expected=(-(2 * branch * np.cos(half) - stem) * pressure, 0),
        got=found.balance.load.from_balance.force[:2],
        unit="N",
        tolerance=1e-6,
        why="round-off of 3e5 N",
        kind="wrench",
    )


def test_published_bend_of_ninety_degrees(verify: Verify) -> None:
    area, speed = np.pi / 4 * 0.102**2, 5.0
    radius = radius_of_area(area, 16)
    data = {
        "inlet": {"velocity": (0, speed, 0), "pressure": 0.0},
        "outlet": {"velocity": (-speed, 0, 0), "pressure": 0.0},
    }
    ports = {"inlet": "inlet", "outlet": "outlet"}
    force = demand(elbow(0.5, (radius, radius), np.pi / 2, 16, 4), data, ports, 440.0).balance.load.from_balance.force
    verify(
        what="Bend of 90 degrees, 102 mm, 440 kg/m³ at 5 m/s, no pressure: force along both legs, and its size",
        source="Engineering note on pipe bends: 91, 91 and 128 N",
        expected=(91, 91, 128),
        got=(*force[:2], np.linalg.norm(force)),
        unit="N",
        tolerance=1.5,
        why="printed in whole newtons, of rounded steps: exact 89.9, 89.9, 127.1",
        kind="law",
        law="momentum",
    )


def test_reaction_of_a_fire_nozzle(verify: Verify) -> None:
    # water enters sideways, so that the jet alone pushes back; V² = 2 p / rho
    tip, pressure, density = 1.0, 50.0, 998.2
    area = np.pi / 4 * (tip * INCH) ** 2
    side = np.sqrt(area)
    speed = np.sqrt(2 * pressure * PSI / density)
    body = box((0, 0, 0), (side, side, side))
    body = in_groups(body, tip=body.groups["x+"], above=body.groups["y+"], below=body.groups["y-"])
    data = {
        "tip": {"velocity": (speed, 0, 0), "pressure": 0.0},
        "above": {"velocity": (0, -speed / 2, 0), "pressure": 0.0},
        "below": {"velocity": (0, speed / 2, 0), "pressure": 0.0},
    }
    found = demand(body, data, {"tip": "outlet", "above": "inlet", "below": "inlet"}, density).balance
    verify(
        what="Fire nozzle of 1 in., 50 psi: reaction over d² p",
        source="fire practice: NR = 1.57 d² p (lbf, in., psi)",
        expected=1.57,
        got=-found.load.from_balance.force[0] / POUND_FORCE / (tip**2 * pressure),
        unit="lbf/(in² psi)",
        tolerance=1e-3,
        why="printed with three digits: exact pi/2",
        kind="law",
        law="momentum",
    )
    gallons = found.mass.outflow / density / 6.30901964e-5
    verify(
        what="Fog nozzle: reaction over Q sqrt(p)",
        source="theory of the formula .0505 Q sqrt(p), which takes off 4 %",
        expected=0.0526209561,
        got=-found.load.from_balance.force[0] / POUND_FORCE / (gallons * np.sqrt(pressure)),
        unit="lbf/(gpm sqrt(psi))",
        tolerance=1e-8,
        why="the gallon has nine digits",
        kind="law",
        law="momentum",
    )


def test_thrust_of_a_hovering_disk(verify: Verify) -> None:
    # still air comes in sideways and leaves as a wake of twice the induced speed and half the area
    density, area, induced = 1.225, 1.0, 10.0
    body = box((0, 0, 0), (0.5, 1, 1))
    body = in_groups(body, wake=body.groups["z-"], left=body.groups["x-"], right=body.groups["x+"])
    data = {
        "wake": {"velocity": (0, 0, -2 * induced), "pressure": 0.0},
        "left": {"velocity": (induced / 2, 0, 0), "pressure": 0.0},
        "right": {"velocity": (-induced / 2, 0, 0), "pressure": 0.0},
    }
    found = demand(body, data, {"wake": "outlet", "left": "inlet", "right": "inlet"}, density).balance
    assert found.mass.outflow == pytest.approx(density * area * induced, rel=1e-14)
    verify(
        what="Hovering disk of 1 m² with 10 m/s through it, in air: thrust",
        source="Froude 1889; White, Fluid Mechanics, ch. 11: 2 rho A v²",
        memory=True,
        expected=245,
        got=found.load.from_balance.force[2],
        unit="N",
        tolerance=1e-9,
        why="round-off",
        kind="law",
        law="momentum",
    )


@pytest.mark.parametrize("stop", [1.0, 0.4])
def test_pressure_of_a_closing_valve(verify: Verify, stop: float) -> None:
    # a surface that goes with the front sees a steady flow: what comes at V + a has the density of the undisturbed
    # water, what leaves at V - stop + a is squeezed; the demanded force is the rise of pressure
    density, sound, speed = 998.20715, 1482.34617, 1.0
    front = -(sound - speed)  # upstream, at the speed of sound against the water
    squeezed = density * (speed - front) / (speed - stop - front)
    body = box((0, 0, 0), (2, 1, 1))
    body = in_groups(body, before=body.groups["x-"], behind=body.groups["x+"])
    data = {
        "before": {"velocity": (speed, 0, 0), "pressure": 0.0, "density": density},
        "behind": {"velocity": (speed - stop, 0, 0), "pressure": 0.0, "density": squeezed},
    }
    surface = body.surface({"before": "inlet", "behind": "outlet"}, rest="wall")
    flow = lay_flow(surface, supplied=data, frame=Frame(velocity=(front, 0, 0)))
    found = balance_of(surface, flow).balance
    verify(
        what=f"Front of a valve that takes {stop:g} m/s from water: rise of pressure",
        source="Joukowsky 1898: rho c dV; IAPWS-95 water at 20 °C",
        memory=True,
        expected=1479688.55 * stop,
        got=found.load.from_balance.force[0],
        unit="Pa",
        tolerance=0.01,
        why="figures of nine digits",
        kind="law",
        law="momentum",
    )
    verify(
        what=f"Front of a valve that takes {stop:g} m/s from water: mass left over, of what passes",
        source="continuity across a front",
        expected=0,
        got=found.mass.residual / found.mass.inflow,
        tolerance=1e-12,
        why="round-off",
        kind="law",
        law="mass",
    )


# ---- gas ------------------------------------------------------------------------------------

# NACA Report 1135 (1953), table I for 7/5, as printed: M, p/pt, rho/rhot, T/Tt
PRINTED = [(1.5, 0.2724, 0.3950, 0.6897), (2.0, 0.1278, 0.2300, 0.5556), (3.0, 0.02722, 0.07623, 0.3571)]


@pytest.mark.parametrize(("mach", "pressure", "density", "temperature"), PRINTED)
def test_totals_at_a_port(verify: Verify, mach: float, pressure: float, density: float, temperature: float) -> None:
    state, heat = 40e3, 250.0
    thick = state / (AIR * heat)
    speed = mach * np.sqrt(1.4 * AIR * heat)
    body = box((0, 0, 0), (1, 1, 1), quads=True)
    surface = body.surface({"x-": "inlet", "x+": "outlet"}, rest="wall")
    flow = lay_flow(
        surface,
        density=thick,
        velocity=(speed, 0, 0),
        pressure=state,
        meaning=PressureMeaning(kind="absolute"),
        ambient=101325.0,
    )
    port = balance_of(surface, flow, heat_ratio=1.4).balance.ports["x+"]
    total = port.mean_total_pressure.mass_flow
    assert total is not None
    verify(
        what=f"Port at M {mach:g}: Mach number, and p/pt",
        source="NACA Report 1135 (1953), table I for 7/5",
        memory=True,
        expected=(mach, pressure),
        got=(port.mach_number, state / (total + 101325.0)),
        tolerance=5.1e-5,
        why="printed with four digits",
        kind="gas",
    )
    # the density of the state at rest, from the total pressure and the enthalpy that the port's figures tell
    resting = heat + speed**2 / (2 * 3.5 * AIR)
    verify(
        what=f"Port at M {mach:g}: rho/rhot, and T/Tt",
        source="NACA Report 1135 (1953), table I for 7/5",
        memory=True,
        expected=(density, temperature),
        got=(thick * AIR * resting / (total + 101325.0), heat / resting),
        tolerance=5.1e-5,
        why="printed with four digits",
        kind="gas",
    )


@pytest.mark.parametrize(("mach", "printed"), [(1.5, 1.176), (2.0, 1.687), (3.0, 4.235)], ids=["M 1.5", "M 2", "M 3"])
def test_area_of_a_nozzle_for_its_mach_number(verify: Verify, mach: float, printed: float) -> None:
    # a duct from the throat to the area of the table, isentropic: what passes the throat leaves
    hot, chamber = 300.0, 5e5

    def state(m: float) -> dict[str, Any]:
        share = 1 / (1 + 0.2 * m**2)
        pressure = chamber * share**3.5
        speed = m * np.sqrt(1.4 * AIR * hot * share)
        return {"velocity": (speed, 0, 0), "density": pressure / (AIR * hot * share), "pressure": pressure - 101325.0}

    exact = (1 + 0.2 * mach**2) ** 3 / (1.2**3 * mach)  # NACA Report 1135, equation 80
    contour = np.array([(0, -0.5), (2, -exact / 2), (2, exact / 2), (0, 0.5)])
    body = in_groups(prism(contour, 0, 1), throat=[3], out=[1])
    found = demand(
        body, {"throat": state(1.0), "out": state(mach)}, {"throat": "inlet", "out": "outlet"}, 1.0, heat_ratio=1.4
    ).balance
    assert found.mass.residual == pytest.approx(0, abs=1e-12 * found.mass.inflow)
    areas = dict(zip([g.name for g in found.setting.groups], found.table.column("area")))
    leaving = float(found.table.column("mass_flow")[[g.name for g in found.setting.groups].index("out")])
    verify(
        what=f"Nozzle to M {mach:g}: area over that of the throat, by what passes a square metre of either",
        source="NACA Report 1135 (1953), table I for 7/5: A/A*",
        memory=True,
        expected=printed,
        got=found.mass.inflow / areas["throat"] / (leaving / areas["out"]),
        tolerance=6e-4,
        why="printed with four digits",
        kind="law",
        law="mass",
    )


# ---- carried --------------------------------------------------------------------------------


def bulk(body: Solid, speed: Array, heat: Array) -> float:
    """What the flow carries of a temperature, over the flow, where the flow goes along z."""
    surface = body.surface({"inlet": "inlet", "outlet": "outlet"}, rest="wall")
    flow = lay_flow(surface, density=1.0, velocity=speed[:, None] * [0.0, 0.0, 1.0])
    scalar = integrate_scalar(surface, flow, lay_scalar(surface, "heat", heat, at="nodes"))
    through = balance_of(surface, flow).balance
    found = carried_balance(through.table, through.setting, scalar)
    assert found.relative == pytest.approx(0, abs=1e-12)
    return float(found.outflow / through.mass.outflow)


def test_nusselt_number_of_a_pipe(verify: Verify) -> None:
    # uniform flux q: T - Tc = (q R/k)(s - s²/4) with s = (r/R)², of which the wall has 3/4; Nu = 2 R h/k
    found = []
    for n in (24, 48, 96):
        body = pipe(1.0, 1.0, n, 1, n // 3)
        s = (body.points[:, :2] ** 2).sum(axis=1)
        found.append(2 / (3 / 4 - bulk(body, 1 - s, s - s**2 / 4)))
    verify(
        what="Nusselt number of laminar flow in a pipe with a uniform flux, from the temperature carried",
        source="White, Viscous Fluid Flow, ch. 3: 48/11",
        memory=True,
        expected=48 / 11,
        got=found[-1],
        tolerance=2e-3,
        why="96 facets around",
        order=(observed_order((4, 2, 1), np.array(found) - 48 / 11), 2, 0.15),
        kind="law",
        law="carried",
    )


def test_nusselt_number_of_a_slot(verify: Verify) -> None:
    # uniform flux q from both sides: T - Tc = (q b/k)(3/4 y² - y⁴/8), of which the wall has 5/8; Nu = 4 b h/k
    found = []
    for cells in (8, 16, 32):
        body = box((0, -1, 0), (1, 1, 1), (1, cells, 1), quads=True)
        groups = {"inlet": body.groups["z-"], "outlet": body.groups["z+"]}
        y = body.points[:, 1]
        found.append(4 / (5 / 8 - bulk(in_groups(body, **groups), 1 - y**2, 3 / 4 * y**2 - y**4 / 8)))
    verify(
        what="Nusselt number of laminar flow in a slot with a uniform flux, from the temperature carried",
        source="White, Viscous Fluid Flow, ch. 3: 140/17",
        memory=True,
        expected=140 / 17,
        got=found[-1],
        tolerance=0.01,
        why="32 cells across",
        order=(observed_order((4, 2, 1), np.array(found) - 140 / 17), 2, 0.15),
        kind="law",
        law="carried",
    )


# ---- doubt ----------------------------------------------------------------------------------


def test_end_gauge_of_jcgm_100(verify: Verify) -> None:
    # l = ls + d - ls (da th + as dth), in nm and °C
    def length(x: Array) -> Array:
        standard, difference, expansion, warm, apart = x
        return np.asarray(standard + difference - standard * (expansion * warm + 11.5e-6 * apart))

    values = [50_000_623.0, 215.0, 0.0, -0.1, 0.0]
    standard = [25.0, 9.7, 1e-6 / np.sqrt(3), 0.41, 0.05 / np.sqrt(3)]
    slope = sensitivity(length, values, standard)
    verify(
        what="End gauge: length",
        source="JCGM 100:2008, H.1",
        memory=True,
        expected=50_000_838,
        got=slope.value,
        unit="nm",
        tolerance=0.5,
        why="printed in whole nanometres",
        kind="uncertainty",
    )
    verify(
        what="End gauge: combined standard uncertainty",
        source="JCGM 100:2008, H.1: 32 nm, of 25, 9.7, 2.9 and 16.6",
        memory=True,
        expected=31.71,
        got=propagate(slope.linear).standard,
        unit="nm",
        tolerance=0.05,
        why="the parts are printed with two or three digits",
        kind="uncertainty",
    )


def test_force_of_an_uncertain_speed(verify: Verify) -> None:
    drawn = draw_inputs([Input("V", 1.0, NORMAL_95 * 0.2)], 1_000_000, seed=5)[:, 0]
    told = summarise((drawn**2)[None])
    linear = np.abs(sensitivity(lambda x: x**2, [1.0], [0.2]).linear)
    verify(
        what="Force rho A V² of a speed known to 20 %: standard uncertainty by the linear law and by draws",
        source="moments of the normal distribution: 2 u, and sqrt(4 u² + 2 u⁴)",
        expected=(0.4, np.sqrt(0.16 + 0.0032)),
        got=(linear.item(), told.standard.item()),
        tolerance=2e-3,
        why="a million draws",
        kind="uncertainty",
    )


def test_order_of_a_known_error(verify: Verify) -> None:
    from fluxmesh.assess.convergence import convergence

    sizes = np.array([1.0, 1.5, 2.25])
    found = convergence(sizes, 2 + 0.1 * sizes**2)
    assert found.order is not None
    assert observed_order(sizes, 0.1 * sizes**2) == pytest.approx(2)
    verify(
        what="Three meshes with an error of second order: order, extrapolated value, uncertainty",
        source="Celik and others 2008, J. Fluids Eng. 130:078001: 1.25 times the error extrapolated",
        expected=(2, 2, 0.125),
        got=(found.order, found.extrapolated, found.uncertainty),
        tolerance=1e-9,
        why="solved to round-off",
        kind="uncertainty",
    )
