"""Loss coefficients between two ports: drop of total head over the dynamic pressure of one of them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from fluxmesh.balance.frame import mass_flow_moments
from fluxmesh.balance.ports import PortFigures
from fluxmesh.balance.setting import Setting
from fluxmesh.errors import GroupError
from fluxmesh.integral.table import IntegralTable

__all__ = ["Loss", "port_losses"]


@dataclass(frozen=True)
class Loss:
    """What is lost from one port to another.

    Attributes
    ----------
    between : tuple of 2 str
        The upstream and the downstream port.
    speed_of : str
        The port whose mean speed the coefficient refers to.
    coefficient : float or None
        `total_pressure_drop` over ``rho U²/2`` with density and mean speed ``U`` of `speed_of`;
        below zero where the second port has more. None where data are missing.
    total_pressure_drop : float or None
        Total head of the first port less that of the second, weighted by mass flow and
        with the height of the ports, Pa: without friction and mixing, zero.
    reason : str or None
        Why a figure is None, one clause.
    """

    between: tuple[str, str]
    speed_of: str
    coefficient: float | None
    total_pressure_drop: float | None
    reason: str | None = None


def port_losses(
    table: IntegralTable,
    setting: Setting,
    ports: Mapping[str, PortFigures],
    asked: Sequence[tuple[tuple[str, str], str | None]],
) -> tuple[Loss, ...]:
    """Return the loss between each pair of ports that is asked for.

    With ``P`` the total pressure the head is ``P - rho g·x``, weighted by mass flow at each port.
    Where the control surface moves, a loss is what an observer on it sees: ``P`` is that of
    the relative velocity, and the head has the terms of the frame, ``P + rho (a - g)·x -
    rho |Ω × r|²/2`` with ``r`` from the axis (the relative form of Bernoulli's law; Batchelor
    1967, An Introduction to Fluid Dynamics, §3.2, from memory). Work that the moving hardware does
    is then no loss and no gain. The density in these terms is the mean of those of both ports.

    Parameters
    ----------
    table : IntegralTable
        The table.
    setting : Setting
        Groups, what is known where, gravity and frame.
    ports : mapping of str to PortFigures
        From `fluxmesh.balance.ports.port_figures`.
    asked : sequence of ((str, str), str or None)
        The two ports, and the one whose speed is meant: the first by default.

    Returns
    -------
    tuple of Loss
        In the order asked for.

    Raises
    ------
    GroupError
        A name that is no port.
    """
    return tuple(_loss(table, setting, ports, between, speed_of or between[0]) for between, speed_of in asked)


def _loss(
    table: IntegralTable,
    setting: Setting,
    ports: Mapping[str, PortFigures],
    between: tuple[str, str],
    speed_of: str,
) -> Loss:
    for name in (*between, speed_of):
        if name not in ports:
            raise GroupError(f"a loss is asked for at '{name}'", remedy=f"The ports are {', '.join(ports)}")
    rows = {group.name: k for k, group in enumerate(setting.groups)}
    totals = []
    for name in between:
        total = _total_pressure(table, setting, ports[name], rows[name])
        if total is None:
            return Loss(between, speed_of, None, None, _missing(setting, name, rows[name]))
        totals.append(total)
    first, second = (rows[name] for name in between)
    density = [_density(table, k) for k in (first, second)]
    heads = [_potential(table, setting, k) for k in (first, second)]
    drop = totals[0] - totals[1] + (density[0] + density[1]) / 2 * (heads[0] - heads[1])
    speed = ports[speed_of].mean_speed
    if not speed:
        return Loss(between, speed_of, None, drop, f"no flow is known through {speed_of}")
    return Loss(between, speed_of, drop / (0.5 * _density(table, rows[speed_of]) * speed**2), drop)


def _missing(setting: Setting, name: str, k: int) -> str:
    if not setting.data.pressure[k]:
        return f"the pressure at {name} is not given"
    if not setting.data.flux[k]:
        return f"the flow through {name} is not given"
    if setting.frame is not None and setting.heat_ratio is not None:
        return "the total pressure of a gas as seen from a moving surface is not made"
    return f"at {name} there is no total pressure weighted by mass flow: nothing goes through, or data are missing"


def _total_pressure(table: IntegralTable, setting: Setting, port: PortFigures, k: int) -> float | None:
    """Mean by mass flow, of the velocity relative to the surface."""
    if setting.frame is None:
        return port.mean_total_pressure.mass_flow
    if setting.heat_ratio is not None or port.mean_pressure.mass_flow is None or port.kinetic_energy_factor is None:
        return None
    dynamic = float(table.column("dynamic_pressure_mass_flow")[k]) / float(table.column("mass_flow")[k])
    return port.mean_pressure.mass_flow + dynamic


def _density(table: IntegralTable, k: int) -> float:
    return float(table.column("density_area")[k]) / float(table.column("area")[k])


def _potential(table: IntegralTable, setting: Setting, k: int) -> float:
    """Mean by mass flow of the potential of gravity and of the frame, J/kg; the flow must not be zero."""
    flow, frame = float(table.column("mass_flow")[k]), setting.frame
    place = table.origin + table.column("mass_flow_position")[k] / flow
    pull = np.asarray(setting.gravity, dtype=np.float64)
    if frame is None:
        return -float(pull @ place)
    spin = frame.spin
    second = mass_flow_moments(table, np.asarray(frame.through, dtype=np.float64))[1][k] / flow
    turning = float(spin @ spin * np.trace(second) - spin @ second @ spin)
    return float((np.asarray(frame.acceleration) - pull) @ place) - turning / 2
