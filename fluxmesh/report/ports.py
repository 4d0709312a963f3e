"""What is said at each port and between ports: tables for the terminal, and plain data."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import asdict
from typing import Any, Final

from fluxmesh.balance.losses import Loss
from fluxmesh.balance.ports import PortFigures
from fluxmesh.field.port_samples import Means
from fluxmesh.report.tables import figure, table

__all__ = ["losses_data", "losses_lines", "losses_table", "ports_data", "ports_tables"]

_SPACE: Final = 3  # between columns, and at the edges together

_WEIGHTS: Final = (("area", "by area"), ("mass_flow", "by mass flow"), ("momentum", "by momentum"))
_MEANS: Final[tuple[tuple[str, Callable[[PortFigures], Means]], ...]] = (
    ("static pressure, gauge, Pa", lambda port: port.mean_pressure),
    ("total pressure, gauge, Pa", lambda port: port.mean_total_pressure),
    ("temperature, K", lambda port: port.mean_temperature),
    ("total temperature, K", lambda port: port.mean_total_temperature),
    ("speed, m/s", lambda port: port.speed),
    ("Mach number", lambda port: port.mean_mach_number),
)
_PRESSURES: Final = (_MEANS[0][1], _MEANS[1][1])
_SINGLE: Final[tuple[tuple[str, Callable[[PortFigures], float | None], bool], ...]] = (
    ("flow over area, m/s", lambda port: port.mean_speed, False),
    ("Mach number of that", lambda port: port.mach_number, False),
    ("momentum factor", lambda port: port.momentum_factor, False),
    ("kinetic-energy factor", lambda port: port.kinetic_energy_factor, False),
    ("uniformity", lambda port: port.uniformity, False),
    ("swirl number", lambda port: port.swirl, False),
    ("flows back", lambda port: port.reversed_share, True),
    ("share of the outflow", lambda port: port.outflow_share, True),
)


def ports_tables(ports: Mapping[str, PortFigures], *, width: int = 100) -> list[Any]:
    """Return the figures of all ports as tables for the terminal: figures down, ports across.

    Parameters
    ----------
    ports : mapping of str to PortFigures
        By name.
    width : int, optional
        Columns of the terminal; ports that do not fit side by side go to further tables.

    Returns
    -------
    list of rich.table.Table
        Rows that no port has are left out; a dash where one port has none.
    """
    shown = _rows(ports.values())
    columns = {name: [cell(port) for _, cell in shown] for name, port in ports.items()}
    heads = [head for head, _ in shown]
    tables: list[Any] = []
    for names in _side_by_side(columns, width - _longest("", heads)):
        cells = [list(row) for row in zip(heads, *(columns[name] for name in names), strict=True)]
        title = "Ports" if not tables else "Ports, continued"
        tables.append(table(title, [("", "left"), *((name, "right") for name in names)], cells))
    return tables


def _longest(head: str, cells: Sequence[str]) -> int:
    return max(len(head), *map(len, cells), 0) + _SPACE


def _side_by_side(columns: Mapping[str, Sequence[str]], room: int) -> list[list[str]]:
    """Names in rows whose columns fit the room, at least one a row."""
    rows: list[list[str]] = []
    left = 0
    for name, cells in columns.items():
        wide = _longest(name, cells)
        if not rows or wide > left:
            rows.append([])
            left = room
        rows[-1].append(name)
        left -= wide
    return rows


def _rows(ports: Iterable[PortFigures]) -> list[tuple[str, Callable[[PortFigures], str]]]:
    """Row heads, and what makes the cells; only rows that some port has."""
    rows: list[tuple[str, Callable[[PortFigures], str]]] = []

    def by_weight(means: Callable[[PortFigures], Means], weight: str) -> Callable[[PortFigures], str]:
        return lambda port: figure(getattr(means(port), weight), _pressure_size(port) if means in _PRESSURES else 0.0)

    def single(value: Callable[[PortFigures], float | None], percent: bool) -> Callable[[PortFigures], str]:
        # factors and shares are of the order of one
        return lambda port: _percent(value(port)) if percent else figure(value(port), 1.0)

    every = list(ports)
    for head, means in _MEANS:
        known = [(key, word) for key, word in _WEIGHTS if any(getattr(means(port), key) is not None for port in every)]
        if known:
            rows.append((head, lambda _: ""))
            rows += [(f"  {word}", by_weight(means, key)) for key, word in known]
    for head, value, percent in _SINGLE:
        if any(value(port) is not None for port in every):
            rows.append((head, single(value, percent)))
    return rows


def _pressure_size(port: PortFigures) -> float:
    """Largest pressure at a port, beside which round-off is seen as such."""
    pressures = (port.mean_pressure.area, port.mean_total_pressure.area, port.mean_total_pressure.mass_flow)
    return max(abs(value or 0.0) for value in pressures)


def _percent(value: float | None) -> str:
    return "–" if value is None else f"{value:.2%}"


def ports_data(ports: Mapping[str, PortFigures]) -> dict[str, Any]:
    """Return the figures of all ports as plain data, SI units.

    Parameters
    ----------
    ports : mapping of str to PortFigures
        By name.

    Returns
    -------
    dict
        By name, the keys of `PortFigures`; means have ``area``, ``mass_flow`` and ``momentum``.
    """
    return {name: asdict(port) for name, port in ports.items()}


def losses_table(losses: Sequence[Loss]) -> Any:
    """Return losses as a table for the terminal.

    Parameters
    ----------
    losses : sequence of Loss
        From `fluxmesh.balance.losses.port_losses`.

    Returns
    -------
    rich.table.Table
        One row a pair; a dash where a figure is missing, see `losses_lines`.
    """
    rows = []
    for loss in losses:
        pair = f"{loss.between[0]} to {loss.between[1]}"
        rows.append([pair, figure(loss.total_pressure_drop), figure(loss.coefficient), loss.speed_of])
    heads = [("", "left"), ("total head lost, Pa", "right"), ("coefficient", "right"), ("by the speed at", "left")]
    return table("Losses between ports", heads, rows)


def losses_lines(losses: Sequence[Loss]) -> list[str]:
    """Return what is to be said of losses that could not be made, one sentence each.

    Parameters
    ----------
    losses : sequence of Loss
        From `fluxmesh.balance.losses.port_losses`.
    """
    return [f"No loss from {loss.between[0]} to {loss.between[1]}: {loss.reason}." for loss in losses if loss.reason]


def losses_data(losses: Sequence[Loss]) -> list[dict[str, Any]]:
    """Return losses as plain data, SI units.

    Parameters
    ----------
    losses : sequence of Loss
        From `fluxmesh.balance.losses.port_losses`.
    """
    return [asdict(loss) for loss in losses]
