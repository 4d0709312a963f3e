"""The ledger of each law as a table: groups down, contributions across, totals, residual."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Final

from fluxmesh.report.page.grid import Block, Column, Grid, Line
from fluxmesh.report.page.source import Figure, Source
from fluxmesh.report.page.steps import AXES

__all__ = ["carried_grid", "energy_grid", "law_grid", "mass_grid"]

_NOT_GIVEN: Final = "not given"


def mass_grid(source: Source) -> Grid:
    """Return what passes through each group.

    Parameters
    ----------
    source : Source
        The result.
    """
    through = _size(source, "mass", "inflow") + _size(source, "mass", "outflow")
    volumes = sum(abs(group.get("volume_flow") or 0.0) for group in _groups(source).values())
    blocks = []
    for name, group in _groups(source).items():
        given = group.get("data", {}).get("flux", True) or group.get("role") == "wall"
        cells: tuple[Figure | str, ...] = (
            source.figure("area", "groups", name, "area"),
            source.figure("mass flow", "groups", name, "mass_flow", size=through) if given else _NOT_GIVEN,
            source.figure("volume flow", "groups", name, "volume_flow", size=volumes) if given else _NOT_GIVEN,
        )
        blocks.append(Block((Line(f"{name}", cells),), under=str(group.get("role", ""))))
    lines = []
    if source.get("mass") is not None:
        for head, key in (("flows in", "inflow"), ("flows out", "outflow"), ("stored inside", "storage")):
            if key != "storage" or source.get("mass", key):
                lines.append(Line(head, ("", source.figure("mass flow", "mass", key, size=through), ""), kind="total"))
        residual = source.figure("mass flow", "mass", "residual", size=through)
        lines.append(Line("residual", ("", residual, ""), kind="result"))
        share = source.figure("", "mass", "relative", form="percent")
        lines.append(Line("residual over entries", ("", share, ""), kind="result"))
    if lines:
        blocks.append(Block(tuple(lines)))
    return Grid(
        caption="Mass through each group",
        corner="group",
        columns=(Column("area", "area"), Column("mass out", "mass flow"), Column("volume out", "volume flow")),
        blocks=tuple(blocks),
        note="What leaves the volume is above zero.",
    )


_LAWS: Final = {
    "momentum": (
        "Linear momentum",
        "force",
        ("momentum_flux", "pressure_force", "viscous_force"),
        ("momentum out", "pressure on fluid", "shear on fluid"),
    ),
    "angular_momentum": (
        "Angular momentum about the anchor",
        "moment",
        ("moment_of_momentum_flux", "moment_of_pressure", "moment_of_viscous"),
        ("its moment out", "moment of pressure", "moment of shear"),
    ),
}


def law_grid(source: Source, law: str) -> Grid:
    """Return the ledger of linear or of angular momentum.

    The last column is what each row adds to the residual: flux less forces.

    Parameters
    ----------
    source : Source
        The result.
    law : {"momentum", "angular_momentum"}
        Which.
    """
    title, quantity, keys, words = _LAWS[law]
    closed = source.get(law) is not None
    sizes = [source.size("groups", name, key) or 0.0 for name in _groups(source) for key in keys]
    size = max(sizes, default=0.0)
    blocks = []
    for name, group in _groups(source).items():
        data = group.get("data", {})
        given = (data.get("flux", True) or group.get("role") == "wall", data.get("pressure", True))
        shear = data.get("traction", True)
        lines = []
        for k, axis in enumerate(AXES):
            figures = [source.figure(quantity, "groups", name, key, k, size=size) for key in keys]
            left = source.sum(quantity, [figures[0], figures[1].turned(), figures[2].turned()], size=size)
            told: list[Figure | str] = [
                figure if known else _NOT_GIVEN for figure, known in zip(figures, (*given, shear), strict=True)
            ]
            adds: Figure | str = left if all(given) else "not known"
            lines.append(Line(axis, (*told, adds) if closed else tuple(told)))
        blocks.append(Block(tuple(lines), head=name, under=str(group.get("role", ""))))
    if closed:
        blocks += _totals(source, law, quantity, size)
    columns = [Column(word, quantity) for word in words]
    if closed:
        columns.append(Column("to residual", quantity))
    return Grid(
        caption=title,
        corner="group",
        columns=tuple(columns),
        blocks=tuple(blocks),
        note="To residual: what the row adds to it, momentum out less the forces on the fluid."
        if closed
        else "The surface is open, as the case says: group integrals only.",
        inner="axis",
    )


def _totals(source: Source, law: str, quantity: str, size: float) -> list[Block]:
    """Sums over all groups, what belongs to no group, and the residual."""
    rows: dict[str, list[Line]] = {"all groups": [], "weight of fluid": [], "stored inside": [], "residual": []}
    for k, axis in enumerate(AXES):
        whole = [source.figure(quantity, law, key, k, size=size) for key in ("flux", "pressure", "viscous")]
        left = source.sum(quantity, [whole[0], whole[1].turned(), whole[2].turned()], size=size)
        adds: Figure | str = left if source.get(law, "residual") is not None else "not known"
        rows["all groups"].append(Line(axis, (*whole, adds)))
        for head, key, factor in (("weight of fluid", "weight", -1.0), ("stored inside", "storage", 1.0)):
            entry = source.figure(quantity, law, key, k, size=size, factor=factor)
            rows[head].append(Line(axis, ("", "", "", entry)))
        residual = source.figure(quantity, law, "residual", k, size=size)
        rows["residual"].append(Line(axis, ("", "", "", residual), kind="result"))
    blocks = [Block(tuple(rows["all groups"]), head="all groups", kind="total")]
    for head, key in (("weight of fluid", "weight"), ("stored inside", "storage")):
        entry = source.get(law, key)
        if entry is None or any(entry):
            blocks.append(Block(tuple(rows[head]), head=head))
    share = source.figure("", law, "relative", form="percent")
    lines = (*rows["residual"], Line("over entries", ("", "", "", share), kind="result"))
    if source.get(law, "residual") is None:
        lines = (Line("", ("", "", "", "not known"), kind="result"),)
    blocks.append(Block(lines, head="residual", kind="result"))
    return blocks


_ENERGY: Final = (
    ("enthalpy", "enthalpy out"),
    ("kinetic", "kinetic out"),
    ("potential", "potential out"),
    ("pressure_work", "pressure on moving surface"),
    ("viscous_power", "shear on fluid"),
)


def energy_grid(source: Source) -> Grid | None:
    """Return the ledger of energy, or None where the result has none.

    Parameters
    ----------
    source : Source
        The result.
    """
    energy = source.get("energy")
    if not isinstance(energy, Mapping):
        return None
    size = _size(source, "energy", "size")
    groups: Mapping[str, Any] = energy.get("groups") or {}
    mechanical = energy.get("basis") == "mechanical"
    keys = [
        (key, "flow work out" if mechanical and key == "enthalpy" else word)
        for key, word in _ENERGY
        if key in ("enthalpy", "kinetic", "potential") or any(group.get(key) for group in groups.values())
    ]
    blocks = [
        Block((Line(name, tuple(source.figure("power", "energy", "groups", name, key, size=size) for key, _ in keys)),))
        for name, group in groups.items()
        if any(group.get(key) for key, _ in keys)
    ]
    blank = ("",) * (len(keys) - 1)
    lines = []
    for head, key in (
        ("leaves all ports", "flux"),
        ("stored inside", "storage"),
        ("moving walls take", "shaft_power_walls"),
        ("shaft takes, given", "shaft_power"),
        ("heat into fluid, given", "heat"),
        ("mechanical energy lost", "loss"),
        ("heat less shaft power that it demands", "heat_minus_shaft_power"),
        ("residual", "residual"),
    ):
        # without heat or shaft power the mechanical law leaves a loss, not a residual
        if (mechanical and key == "residual") or not energy.get(key):
            continue
        kind = "result" if key in ("loss", "residual", "heat_minus_shaft_power") else "total"
        lines.append(Line(head, (source.figure("power", "energy", key, size=size), *blank), kind=kind))
    if energy.get("relative") is not None:
        share = source.figure("", "energy", "relative", form="percent")
        lines.append(Line("residual over entries", (share, *blank), kind="result"))
    if lines:
        blocks.append(Block(tuple(lines)))
    return Grid(
        caption="Energy, of the absolute velocity",
        corner="group",
        columns=tuple(Column(word, "power") for _, word in keys),
        blocks=tuple(blocks),
    )


def carried_grid(source: Source) -> Grid | None:
    """Return the ledger of the scalars that the flow carries, or None where there are none.

    Parameters
    ----------
    source : Source
        The result.
    """
    carried = source.get("carried")
    if not isinstance(carried, Mapping) or not carried:
        return None
    columns: list[Column] = []
    for name, scalar in carried.items():
        unit = scalar.get("unit") or ""
        columns += [Column(f"{name} out", unit=f"{unit}/s" if unit else "1/s"), Column(f"{name}, mean", unit=unit)]
    sizes = {name: (scalar.get("inflow") or 0.0) + (scalar.get("outflow") or 0.0) for name, scalar in carried.items()}
    groups = list(dict.fromkeys(group for scalar in carried.values() for group in scalar.get("groups", {})))
    blocks = []
    for group in groups:
        cells: list[Figure | str] = []
        for name in carried:
            place = ("carried", name, "groups", group)
            cells += [
                source.figure("", *place, "flux", size=sizes[name]),
                source.figure("", *place, "mean", absent="–"),
            ]
        blocks.append(Block((Line(group, tuple(cells)),)))
    lines = []
    for head, key, kind in (
        ("stored inside", "storage", "total"),
        ("arises inside, given", "source", "total"),
        ("residual", "residual", "result"),
        ("residual over entries", "relative", "result"),
    ):
        if kind == "total" and not any(scalar.get(key) for scalar in carried.values()):
            continue
        cells = []
        for name in carried:
            form = "percent" if key == "relative" else "number"
            size = 0.0 if key == "relative" else sizes[name]
            cells += [source.figure("", "carried", name, key, size=size, form=form), ""]
        lines.append(Line(head, tuple(cells), kind=kind))
    blocks.append(Block(tuple(lines)))
    return Grid("Carried by the flow, out of each port", "group", tuple(columns), tuple(blocks))


def _groups(source: Source) -> Mapping[str, dict[str, Any]]:
    return source.get("groups") or {}


def _size(source: Source, *path: str) -> float:
    found = source.get(*path)
    return abs(float(found)) if isinstance(found, int | float) else 0.0
