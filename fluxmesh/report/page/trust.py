"""How far to trust the figures: budget of the doubt, likely causes, and convergence over meshes."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from fluxmesh.report.page.grid import Block, Column, Grid, Line
from fluxmesh.report.page.source import Figure, Source

__all__ = ["Suspicion", "budget_grids", "causes_of", "convergence_grids", "quantity_of"]

_NAMES = {
    "hardware_load": "flow on hardware",
    "from_balance": "from the balance",
    "from_walls": "from the walls",
    "angular_momentum": "angular momentum",
    "mass_flow": "mass flow",
}


def quantity_of(path: str) -> str:
    """Return the quantity of a figure of the result from its key with dots.

    Parameters
    ----------
    path : str
        Such as "reaction.force", or "reaction.force.x".
    """
    parts = path.lower().split(".")
    if "angular_momentum" in parts or any("moment" in part and part != "momentum" and "flux" not in part
                                          for part in parts):  # fmt: skip
        return "moment"
    if any("force" in part or part in ("momentum", "momentum_flux", "difference") for part in parts):
        return "force"
    if "mass" in parts or any("mass_flow" in part for part in parts):
        return "mass flow"
    return "power" if "energy" in parts else ""


def _in_words(path: str) -> str:
    return ", ".join(_NAMES.get(part, part.replace("_", " ")) for part in path.split("."))


def budget_grids(source: Source) -> list[Grid]:
    """Return what the doubt of the main figures is made of, the largest part first.

    Parameters
    ----------
    source : Source
        The result.
    """
    place: tuple[str, ...] = ("doubt", "budget") if source.get("doubt", "budget") else ("budget",)
    budget = source.get(*place)
    if not isinstance(budget, Mapping) or not budget:
        return []
    blocks = []
    for path, parts in budget.items():
        quantity = quantity_of(path)
        lines = []
        for k, part in enumerate(parts):
            if not part.get("half_width"):
                continue
            half = source.figure(quantity, *place, path, k, "half_width")
            share = source.figure("", *place, path, k, "share", form="percent")
            lines.append(Line(str(part.get("name", "")), (str(part.get("kind", "")), half, share), quantity))
        if lines:
            blocks.append(Block(tuple(lines), head=_in_words(path)))
    if not blocks:
        return []
    return [
        Grid(
            caption="What the doubt is made of",
            corner="figure",
            columns=(Column("kind"), Column("half width at 95 %"), Column("share of the variance")),
            blocks=tuple(blocks),
            note="Of a vector: the length of the half widths of its components.",
            inner="source",
        ),
        *_inputs(source),
    ]


def _inputs(source: Source) -> list[Grid]:
    inputs = source.get("doubt", "inputs")
    if not isinstance(inputs, Mapping) or not inputs:
        return []
    lines = []
    for name, one in inputs.items():
        value = source.figure("", "doubt", "inputs", name, "value")
        half = source.figure("", "doubt", "inputs", name, "half_width")
        lines.append(Line(name, (value, half, str(one.get("unit") or "–"), str(one.get("shape") or "–"))))
    columns = (Column("value"), Column("half width at 95 %"), Column("unit"), Column("distribution"))
    return [Grid("Inputs with a doubt", "key of the case", columns, (Block(tuple(lines)),))]


@dataclass(frozen=True)
class Suspicion:
    """A likely cause of a balance that does not close.

    Attributes
    ----------
    name : str
        Its id, and the group if it has one.
    statement, fix : str
        What would be so, and the line to change.
    before, after : Figure
        Largest relative residual as it is, and with the change.
    equally : str
        Ids of the causes that explain it as well.
    """

    name: str
    statement: str
    fix: str
    before: Figure
    after: Figure
    equally: str = ""


def causes_of(source: Source) -> list[Suspicion]:
    """Return the likely causes, best first.

    Parameters
    ----------
    source : Source
        The result.
    """
    causes = source.get("causes")
    place: tuple[str, ...] = ("causes",)
    if isinstance(causes, Mapping):
        causes, place = causes.get("causes"), ("causes", "causes")
    found = []
    for k, cause in enumerate(causes or ()):
        group = cause.get("group")
        found.append(
            Suspicion(
                name=f"{cause.get('id', '')}{f', {group}' if group else ''}",
                statement=str(cause.get("statement", "")),
                fix=str(cause.get("fix", "")),
                before=source.figure("", *place, k, "residual_before", form="percent"),
                after=source.figure("", *place, k, "residual_after", form="percent"),
                equally=", ".join(map(str, cause.get("equally") or ())),
            )
        )
    return found


def convergence_grids(source: Source) -> list[Grid]:
    """Return a study of several meshes.

    Parameters
    ----------
    source : Source
        The result.
    """
    study = source.get("convergence")
    if not isinstance(study, Mapping):
        return []
    grids = []
    meshes = study.get("meshes") or ()
    if meshes:
        lines = [
            Line(
                str(mesh.get("case", "")),
                (
                    source.figure("", "convergence", "meshes", k, "faces"),
                    source.figure("length", "convergence", "meshes", k, "size"),
                ),
            )
            for k, mesh in enumerate(meshes)
        ]
        two = (Column("faces"), Column("size of a face", "length"))
        grids.append(Grid("Meshes, finest first", "case", two, (Block(tuple(lines)),)))
    lines = []
    for path, one in (study.get("figures") or {}).items():
        lines.append(_studied(source, path, one))
    if lines:
        columns = tuple(
            Column(word)
            for word in ("over the meshes", "finest", "extrapolated", "doubt", "order", "last change", "index")
        )
        grids.append(
            Grid(
                "Figures over the meshes",
                "figure",
                columns,
                (Block(tuple(lines)),),
                note="Index: grid convergence index with the factor 1.25; the doubt is its half width.",
            )
        )
    return grids


def _studied(source: Source, path: str, one: Mapping[str, Any]) -> Line:
    quantity, place = quantity_of(path), ("convergence", "figures", path)
    return Line(
        _in_words(path),
        (
            str(one.get("behaviour") or "–"),
            source.figure(quantity, *place, "values", 0),
            source.figure(quantity, *place, "extrapolated", absent="–"),
            source.figure(quantity, *place, "uncertainty", absent="–"),
            source.figure("", *place, "order", absent="–"),
            source.figure("", *place, "relative_error", form="percent", absent="–"),
            source.figure("", *place, "index", form="percent", absent="–"),
        ),
        quantity,
    )
