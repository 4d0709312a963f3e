"""Figures of ports, losses and carried scalars against plain sums over surface elements."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fluxmesh.balance.carried import carried_balance
from fluxmesh.balance.energy import EnergyBalance, energy_balance
from fluxmesh.balance.enthalpy import Enthalpy, enthalpy_of_liquid, gas_heat_capacity, mechanical_enthalpy
from fluxmesh.balance.losses import port_losses
from fluxmesh.balance.ports import port_figures
from fluxmesh.balance.storage import Storage
from fluxmesh.field.frame import Frame
from fluxmesh.field.scalars import ScalarFlux
from tests.test_core_sums import ANCHOR, GRAVITY, GROUPS, Array, Cloud, close, cloud, setting

AXIS = np.array([2.0, 1.0, -2.0]) / 3.0


def flat(seed: int, *, frame: Frame | None = None) -> Cloud:
    """A cloud whose ports are plane sections across one axis, each of one density."""
    one = cloud(seed, 60)
    rng = np.random.default_rng(50 + seed)
    port = one.group < 3
    across = np.outer(rng.uniform(0.3, 0.9, one.p.size), AXIS)
    along = one.v @ AXIS
    way = np.where(one.group == 0, -1.0, np.where(one.group == 1, 1.0, np.sign(along)))
    v = one.v + (way * np.abs(along) - along)[:, None] * AXIS
    x = one.x - np.outer(one.x @ AXIS, AXIS) + np.outer(one.group, AXIS)
    rho = np.array([0.8, 1.3, 1.1, 1.0, 1.0])[one.group]
    return replace(one, n=np.where(port[:, None], across, one.n), v=np.where(port[:, None], v, one.v), x=x, rho=rho)


FRAME = Frame(velocity=(0.8, -0.5, 0.3), rate=1.4, axis=(0.6, 0.0, 0.8), through=(0.7, 0.2, -0.9))


@pytest.mark.parametrize("frame", [None, FRAME], ids=["rests", "moves"])
def test_figures_of_plane_ports(frame: Frame | None) -> None:
    one = flat(1)
    found = port_figures(one.table(), setting(frame=frame, heat_ratio=1.4, ambient=20.0))
    whole = one.v
    if frame is not None:
        whole = one.v + frame.velocity + np.cross(1.4 * np.array(frame.axis), one.x - np.array(frame.through))
    leaving = sum(one.mass[one.group == k].sum() for k in range(3) if one.mass[one.group == k].sum() > 0)
    for k in range(3):
        at = one.group == k
        area, mass, rho = one.area[at], one.mass[at], one.rho[at][0]
        port, flow, normal = found[GROUPS[k].name], one.mass[at].sum(), one.v[at] @ AXIS
        forth, back = mass[mass > 0].sum(), -mass[mass < 0].sum()
        close(port.mean_pressure.area, (one.p[at] * area).sum() / area.sum())
        close(port.mean_pressure.mass_flow, (one.p[at] * mass).sum() / flow)
        close(port.mean_speed, abs((normal * area).sum()) / area.sum())
        # over what a uniform flow of the same mass would have
        mean = flow / (rho * area.sum())
        close(port.momentum_factor, (rho * normal**2 * area).sum() / (rho * mean**2 * area.sum()))
        kinetic = (mass * (one.v[at] ** 2).sum(axis=1) / 2).sum()
        close(port.kinetic_energy_factor, kinetic / (flow * mean**2 / 2))
        close(port.reversed_share, min(forth, back) / (forth + back))
        close(port.outflow_share or 0.0, max(flow, 0.0) / leaving)
        pressure = (one.p[at] * area).sum() / area.sum() + 20.0
        close(port.mach_number, abs(mean) / np.sqrt(1.4 * pressure / rho))
        centre = (one.x[at] * area[:, None]).sum(axis=0) / area.sum()
        spinning = np.cross(one.x[at] - centre, mass[:, None] * whole[at]).sum(axis=0) @ AXIS
        radius = np.sqrt(area.sum() / np.pi)
        close(port.swirl, spinning / (radius * (mass * normal).sum()))


def test_total_pressure_and_speed_of_a_liquid_at_rest() -> None:
    one = flat(2)
    found = port_figures(one.table(), setting())
    for k in range(3):
        at = one.group == k
        total = one.p[at] + one.rho[at] * (one.v[at] ** 2).sum(axis=1) / 2
        area, mass = one.area[at], one.mass[at]
        port = found[GROUPS[k].name]
        close(port.mean_total_pressure.area, (total * area).sum() / area.sum())
        close(port.mean_total_pressure.mass_flow, (total * mass).sum() / mass.sum())
        close(port.speed.area, (np.sqrt((one.v[at] ** 2).sum(axis=1)) * area).sum() / area.sum())


@pytest.mark.parametrize("frame", [None, FRAME], ids=["rests", "turns"])
def test_loss_between_ports(frame: Frame | None) -> None:
    one = flat(3)
    place = setting(frame=frame)
    ports = port_figures(one.table(), place)
    (loss,) = port_losses(one.table(), place, ports, [(("feed", "drain"), "drain")])
    feed, drain = one.group == 0, one.group == 1

    def mean(values: Array, at: Array) -> float:
        return float((values * one.mass)[at].sum() / one.mass[at].sum())

    # along a streamline of a steady relative flow p + ρ Vr²/2 + ρ (-g·x - |Ω×r|²/2) keeps its value
    potential = -one.x @ np.array(GRAVITY)
    if frame is not None:
        swept = np.cross(1.4 * np.array(frame.axis), one.x - np.array(frame.through))
        potential = potential - (swept**2).sum(axis=1) / 2
    total = one.p + one.rho * (one.v**2).sum(axis=1) / 2
    drop = mean(total, feed) - mean(total, drain)
    drop += (one.rho[feed][0] + one.rho[drain][0]) / 2 * (mean(potential, feed) - mean(potential, drain))
    speed = one.through[drain].sum() / one.area[drain].sum()
    close(loss.total_pressure_drop, drop)
    close(loss.coefficient, drop / (0.5 * one.rho[drain][0] * speed**2))


@pytest.mark.parametrize("per", ["mass", "volume"])
def test_a_carried_scalar(per: str) -> None:
    one = cloud(4)
    phi = np.random.default_rng(4).uniform(1.0, 2.0, one.p.size)
    ports = np.array([group.role.is_port for group in GROUPS])
    scalar = ScalarFlux(
        "salt",
        one.by_group(phi * one.area) * ports,
        one.by_group(phi * one.mass) * ports,
        one.by_group(phi * one.through) * ports,
        ports,
    )
    storage = Storage(carried={"salt": 0.7})
    found = carried_balance(one.table(), setting(), scalar, per=per, source=0.4, storage=storage)
    flow = one.mass if per == "mass" else one.through
    flux = one.by_group(phi * flow) * ports
    close(found.group_flux, flux)
    close(found.residual, flux.sum() + 0.7 - 0.4)
    close(found.group_mean[:2], (flux / one.by_group(flow))[:2])
    close(found.inflow, -flux[flux < 0].sum())
    close(found.relative, abs(flux.sum() + 0.3) / (np.abs(flux).sum() + 1.1))


def law(one: Cloud, enthalpy: Enthalpy, **given: float) -> EnergyBalance:
    return energy_balance(one.table(), setting(gravity=(0.0, 0.0, 0.0)), enthalpy, **given)


def test_heat_and_shaft_power_in_the_energy_law() -> None:
    one = cloud(5)
    table, place = one.table(), setting(gravity=(0.0, 0.0, 0.0))
    kelvin = np.random.default_rng(5).uniform(280.0, 300.0, one.p.size)
    ports = np.array([group.role.is_port for group in GROUPS])
    flux = one.by_group(kelvin * one.mass) * ports
    enthalpy = enthalpy_of_liquid(ScalarFlux("temperature", flux, flux, flux, ports), 10.0, table, place)
    close(enthalpy.flux, (10.0 * flux + one.by_group(one.p * one.through)) * ports)
    alone, heated, driven = (
        law(one, enthalpy),
        law(one, enthalpy, heat=3.0),
        law(one, enthalpy, heat=0.0, shaft_power=2.0),
    )
    close(heated.residual - alone.residual, -3.0)
    close(driven.residual - alone.residual, 2.0)
    # what a mass residual carries is judged in the mass law: a new zero of the enthalpy changes nothing
    raised = replace(enthalpy, flux=enthalpy.flux + 1e3 * table.column("mass_flow") * ports)
    close(law(one, raised, heat=3.0).left / heated.left, 1.0)
    assert abs(heated.mass_share) > 1.0
    # nor does it change what the residual is compared with
    close(law(one, raised, heat=3.0).size / heated.size, 1.0)


def nearly_even(share: float) -> Cloud:
    """Ports as planes, and a hole that lets as much in as out, but for a share of what goes through."""
    one = flat(8)
    hole = one.group == 2
    forth, back = one.mass[hole & (one.mass > 0)].sum(), -one.mass[hole & (one.mass < 0)].sum()
    grown = np.where(hole & (one.mass > 0), (1 + share) / (1 - share) * back / forth, 1.0)
    return replace(one, v=one.v * grown[:, None])


@pytest.mark.parametrize(("share", "told"), [(0.005, False), (0.02, True)])
def test_a_port_that_lets_as_much_in_as_out_has_no_mean_of_what_passes(share: float, told: bool) -> None:
    one = nearly_even(share)
    table, place = one.table(), setting(gravity=(0.0, 0.0, 0.0))
    hole = port_figures(table, place)["hole"]
    for figure in (hole.mean_pressure.mass_flow, hole.momentum_factor, hole.kinetic_energy_factor, hole.swirl):
        assert (figure is not None) == told
    assert hole.mean_pressure.area is not None
    ports = np.array([group.role.is_port for group in GROUPS])
    flux = table.column("mass_flow") * ports
    found = carried_balance(table, place, ScalarFlux("salt", flux, flux, flux, ports))
    assert np.isfinite(found.group_mean[2]) == told
    # the mean energy of what passes leaves it out too, however much it carries
    heat = np.array([100.0, 300.0, 1e7, 0.0, 0.0])
    law = energy_balance(table, place, Enthalpy("enthalpy", heat, ports, "enthalpy", ""), heat=0.0)
    whole = heat + one.by_group(one.mass * (one.v**2).sum(axis=1) / 2)
    some, flows = np.array([True, True, told, False, False]), table.column("mass_flow")
    mean = (flows * whole)[some].sum() / (flows**2)[some].sum()
    close(law.mass_share / (mean * one.mass.sum()), 1.0)


def test_a_loss_is_no_gain() -> None:
    # through a straight duct at one speed pressure falls or rises
    one = flat(6)
    rho, v = np.ones(one.p.size), np.where((one.group < 2)[:, None], AXIS, 0.0)
    n = np.where((one.group < 2)[:, None], np.where(one.group == 0, -0.5, 0.5)[:, None] * AXIS, one.n)
    for feed, drain in ((5.0, 2.0), (2.0, 5.0)):
        p = np.where(one.group == 0, feed, drain)
        duct = replace(one, rho=rho, v=v, n=n, p=p, t=0 * one.t)
        table = duct.table()
        place = setting(gravity=(0.0, 0.0, 0.0))
        found = energy_balance(table, place, mechanical_enthalpy(table, place), liquid=True)
        flow = duct.mass[duct.group == 1].sum()
        close(found.loss, (feed - drain) * flow)
        assert found.gains(0.01) == (drain > feed)


def test_heat_capacity_of_an_ideal_gas() -> None:
    # of air: R = 287.05 J/(kg K), gamma = 1.4 (ISO 2533, Standard Atmosphere)
    close(gas_heat_capacity(287.05, 1.4), 3.5 * 287.05)


def test_anchor_is_where_potential_energy_is_zero() -> None:
    one = cloud(7)
    table, place = one.table(), setting()
    found = energy_balance(table, place, mechanical_enthalpy(table, place))
    ports = np.array([group.role.is_port for group in GROUPS])
    close(found.group_potential, one.by_group(-one.mass * ((one.x - np.array(ANCHOR)) @ np.array(GRAVITY))) * ports)
