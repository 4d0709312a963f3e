"""Figures at each port, and losses between ports: figures down, ports across."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Final

from fluxmesh.report.page.grid import Block, Column, Grid, Line
from fluxmesh.report.page.source import Source

__all__ = ["losses_grid", "ports_grid"]

_MEANS: Final = (
    ("mean_pressure", "static pressure, gauge", "pressure"),
    ("mean_total_pressure", "total pressure, gauge", "pressure"),
    ("mean_temperature", "temperature", "temperature"),
    ("mean_total_temperature", "total temperature", "temperature"),
    ("speed", "speed", "speed"),
    ("mean_mach_number", "Mach number", ""),
)
_WEIGHTS: Final = (("area", "mean by area"), ("mass_flow", "mean by mass flow"), ("momentum", "mean by momentum"))
_SINGLE: Final = (
    ("mean_speed", "flow over area", "speed", "number"),
    ("mach_number", "Mach number of that", "", "number"),
    ("momentum_factor", "momentum factor", "", "number"),
    ("kinetic_energy_factor", "kinetic-energy factor", "", "number"),
    ("uniformity", "uniformity", "", "number"),
    ("swirl", "swirl number", "", "number"),
    ("reversed_share", "flows back", "", "percent"),
    ("outflow_share", "share of the outflow", "", "percent"),
)


def ports_grid(source: Source) -> Grid | None:
    """Return the figures of all ports, or None where there are no ports.

    Parameters
    ----------
    source : Source
        The result.
    """
    ports: Mapping[str, Mapping[str, Any]] = source.get("ports") or {}
    if not ports:
        return None
    blocks = []
    for key, head, quantity in _MEANS:
        lines = []
        for weight, words in _WEIGHTS:
            if all((port.get(key) or {}).get(weight) is None for port in ports.values()):
                continue
            cells = tuple(
                source.figure(quantity, "ports", name, key, weight, size=_pressure(port) if "pressure" in key else 0.0,
                              absent="–")
                for name, port in ports.items()
            )  # fmt: skip
            lines.append(Line(words, cells, quantity))
        if lines:
            blocks.append(Block(tuple(lines), head=head))
    lines = []
    for key, head, quantity, form in _SINGLE:
        if any(port.get(key) is not None for port in ports.values()):
            # factors and shares are of the order of one
            cells = tuple(
                source.figure(quantity, "ports", name, key, size=0.0 if quantity else 1.0, form=form, absent="–")
                for name in ports
            )
            lines.append(Line(head, cells, quantity))
    if lines:
        blocks.append(Block(tuple(lines), head="profile and shares"))
    columns = tuple(Column(name) for name in ports)
    return Grid("Figures at each port", "figure", columns, tuple(blocks), inner="how")


def _pressure(port: Mapping[str, Any]) -> float:
    """Largest pressure at a port, beside which round-off is seen as such."""
    found = [(port.get(key) or {}).get("area") or 0.0 for key in ("mean_pressure", "mean_total_pressure")]
    return max(abs(float(pressure)) for pressure in found)


def losses_grid(source: Source) -> Grid | None:
    """Return the losses between ports, or None where none was asked for.

    Parameters
    ----------
    source : Source
        The result.
    """
    losses = source.get("losses")
    if not isinstance(losses, list | tuple) or not losses:
        return None
    lines = []
    for k, loss in enumerate(losses):
        cells = (
            source.figure("pressure", "losses", k, "total_pressure_drop", absent="–"),
            source.figure("", "losses", k, "coefficient", absent="–"),
            str(loss.get("speed_of") or "–"),
        )
        lines.append(Line(" to ".join(map(str, loss.get("between") or ())), cells))
    columns = (Column("total head lost", "pressure"), Column("coefficient"), Column("by the speed at"))
    return Grid("Losses between ports", "between", columns, (Block(tuple(lines)),))
