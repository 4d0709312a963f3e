"""A series of instants: loads and residuals over time, and their figures."""

from __future__ import annotations

from collections.abc import Mapping

from fluxmesh.report.page.grid import Block, Column, Grid, Line
from fluxmesh.report.page.source import Source

__all__ = ["series_grids"]


def series_grids(source: Source) -> list[Grid]:
    """Return the tables of a series.

    Parameters
    ----------
    source : Source
        The content of ``series.json``, in place of the result of one instant.
    """
    instants = source.get("instants") or ()
    if not instants:
        return []
    forces = source.get("scales", "momentum") or 0.0
    flows = source.get("scales", "mass") or 0.0
    lines = []
    for k, instant in enumerate(instants):
        place = ("instants", k)
        cells = (
            *source.vector("force", *place, "hardware_load", "force", size=forces),
            source.length("force", *place, "reaction", "force") if instant.get("reaction") else "not known",
            source.figure("mass flow", *place, "mass", "residual", size=flows),
            source.length("force", *place, "momentum", "residual"),
        )
        time = source.figure("time", *place, "time")
        lines.append(Line("", (time, *cells)))
    columns = (
        Column("time", "time"),
        Column("load x", "force"),
        Column("load y", "force"),
        Column("load z", "force"),
        Column("reaction, size", "force"),
        Column("mass left", "mass flow"),
        Column("momentum left", "force"),
    )
    over = Grid(
        "Over time: flow on hardware, size of the reaction, residuals",
        "",
        columns,
        tuple(Block((line,)) for line in lines),
    )
    return [over, *_figures(source, forces)]


def _figures(source: Source, forces: float) -> list[Grid]:
    found = source.get("statistics")
    if not isinstance(found, Mapping) or "hardware_load" not in found:
        return []
    lines = []
    for key, head in (
        ("mean", "mean"),
        ("rms", "root mean square"),
        ("deviation", "root mean square off the mean"),
        ("least", "least"),
        ("least_at", "  at"),
        ("greatest", "greatest"),
        ("greatest_at", "  at"),
    ):
        quantity = "time" if key.endswith("_at") else "force"
        size = 0.0 if quantity == "time" else forces
        cells = (
            *source.vector(quantity, "statistics", "hardware_load", key, size=size),
            *source.vector(quantity, "statistics", "reaction", key, size=size),
            source.figure(quantity, "statistics", "reaction_size", key),
        )
        lines.append(Line(head.strip(), cells, quantity, "within" if quantity == "time" else ""))
    span = (source.get("times") or [0.0])[-1] or 1.0
    impulse = (
        *source.vector("impulse", "impulse", "hardware_load", "value", size=forces * span),
        *source.vector("impulse", "impulse", "reaction", "value", size=forces * span),
        "",
    )
    lines.append(Line("impulse", impulse, "impulse"))
    words = ("load x", "load y", "load z", "reaction x", "reaction y", "reaction z", "its size")
    return [Grid("Figures over the series", "", tuple(map(Column, words)), (Block(tuple(lines)),))]
