"""The loads: what acts on what, the two ways to the load side by side, sharpened values, a reported load."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Final

from fluxmesh.report.page.grid import Block, Column, Grid, Line
from fluxmesh.report.page.source import Figure, Source
from fluxmesh.report.page.steps import AXES

__all__ = ["loads_grids", "reaction_grid", "reported_grids", "sharpened_grid"]


def reaction_grid(source: Source) -> Grid | None:
    """Return the reaction, or the load of the flow where there is no reaction; None where neither is known.

    Parameters
    ----------
    source : Source
        The result.
    """
    if source.get("reaction") is None:
        return None
    lines = [
        Line(head, (*source.vector(quantity, "reaction", quantity), _length(source, quantity, "reaction", quantity)),
             quantity)
        for head, quantity in (("force", "force"), ("moment", "moment"))
    ]  # fmt: skip
    return Grid(
        caption="Force and moment of the anchor on the hardware",
        corner="",
        columns=(*(Column(axis) for axis in AXES), Column("size")),
        blocks=(Block(tuple(lines)),),
    )


def _length(source: Source, quantity: str, *path: str) -> Figure | str:
    return source.length(quantity, *path) if source.get(*path) is not None else "not known"


def loads_grids(source: Source) -> list[Grid]:
    """Return the loads of flow and anchor, forces and moments, from the walls and from the balance.

    Parameters
    ----------
    source : Source
        The result.
    """
    if source.get("hardware_load") is None:
        return []
    grids = []
    for quantity, title in (("force", "Forces"), ("moment", "Moments about the anchor")):
        ways = {way: source.get("hardware_load", way, quantity) for way in ("from_walls", "from_balance")}
        size = max((source.size("hardware_load", way, quantity) or 0.0 for way in ways), default=0.0)
        blocks = []
        for head, path in (
            ("flow on hardware, from the walls", ("hardware_load", "from_walls", quantity)),
            ("flow on hardware, from the balance", ("hardware_load", "from_balance", quantity)),
        ):
            cells = (*source.vector(quantity, *path, size=size), _length(source, quantity, *path))
            blocks.append(Block((Line(head, cells),)))
        if all(ways.values()):
            gap = tuple(
                source.sum(
                    quantity,
                    [
                        source.figure(quantity, "hardware_load", "from_walls", quantity, k),
                        source.figure(quantity, "hardware_load", "from_balance", quantity, k, factor=-1.0),
                    ],
                    size=size,
                )
                for k in range(3)
            )
            if quantity == "force" and source.get("hardware_load", "difference") is not None:
                gap = source.vector(quantity, "hardware_load", "difference", size=size)
            length: Figure | str = ""
            if quantity == "force" and source.get("hardware_load", "difference") is not None:
                length = source.length(quantity, "hardware_load", "difference")
            blocks.append(Block((Line("difference of the two", (*gap, length), kind="total"),)))
        if source.get("reaction") is not None:
            cells = (
                *source.vector(quantity, "reaction", quantity, size=size),
                _length(source, quantity, "reaction", quantity),
            )
            blocks.append(Block((Line("anchor on hardware", cells, kind="result"),)))
        columns = (*(Column(axis, quantity) for axis in AXES), Column("size", quantity))
        grids.append(Grid(title, "who on whom", columns, tuple(blocks)))
    return grids


_SHARP: Final = (
    ("reaction, force", "force", ("reaction", "force")),
    ("reaction, moment", "moment", ("reaction", "moment")),
    ("flow on hardware, from the balance", "force", ("hardware_load", "from_balance", "force")),
    ("flow on hardware, from the walls", "force", ("hardware_load", "from_walls", "force")),
    ("residual of momentum", "force", ("momentum", "residual")),
    ("residual of angular momentum", "moment", ("angular_momentum", "residual")),
    ("residual of mass", "mass flow", ("mass", "residual")),
)


def sharpened_grid(source: Source) -> Grid | None:
    """Return the higher-order values beside the plain ones, or None where the result has none.

    Parameters
    ----------
    source : Source
        The result.
    """
    if not isinstance(source.get("sharpened"), Mapping):
        return None
    blocks = []
    for head, quantity, path in _SHARP:
        found = source.get("sharpened", *path)
        if found is None:
            continue
        places: list[tuple[str | int, ...]] = [(k,) for k in range(3)] if isinstance(found, list | tuple) else [()]
        lines = []
        for place in places:
            plain = source.figure(quantity, *path, *place)
            sharp = source.figure(quantity, "sharpened", *path, *place)
            change = source.sum(quantity, [sharp, plain.turned()])
            size = abs(plain.value or 0.0)
            change = Figure(change.value, quantity, change.terms, size=size)
            lines.append(Line(AXES[int(place[0])] if place else "", (plain, sharp, change), quantity))
        blocks.append(Block(tuple(lines), head=head))
    if not blocks:
        return None
    return Grid(
        caption="Sharpened values",
        corner="figure",
        columns=(Column("as the mesh has it"), Column("sharpened"), Column("change")),
        blocks=tuple(blocks),
        note="Of higher order: recovered quadratic patches of the fields and, where the facets are not the shape "
        "itself, of the surface.",
        inner="axis",
    )


def reported_grids(source: Source) -> list[Grid]:
    """Return a load as the solver reported it beside the same load from the integrals.

    Parameters
    ----------
    source : Source
        The result.
    """
    reported: Mapping[str, Any] | None = source.get("reported")
    if not isinstance(reported, Mapping):
        return []
    grids = []
    for quantity in ("force", "moment"):
        theirs, ours = reported.get(f"reported_{quantity}"), reported.get(quantity)
        if theirs is None or ours is None:
            continue
        lines = [
            Line("as reported", source.vector(quantity, "reported", f"reported_{quantity}")),
            Line("from the integrals", source.vector(quantity, "reported", quantity)),
        ]
        gap = []
        for k in range(3):
            one = source.figure(quantity, "reported", quantity, k)
            other = source.figure(quantity, "reported", f"reported_{quantity}", k, factor=-1.0)
            gap.append(source.sum(quantity, [one, other], size=abs(one.value or 0.0)))
        lines.append(Line("difference", tuple(gap), kind="total"))
        grids.append(
            Grid(
                f"Reported {quantity} of the flow on {', '.join(reported.get('on') or ())}",
                "",
                tuple(Column(axis, quantity) for axis in AXES),
                (Block(tuple(lines)),),
            )
        )
    return grids
