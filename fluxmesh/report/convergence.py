"""What a study of several meshes prints and writes."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING, Any

from fluxmesh.assess.assumptions import CAUTIONS
from fluxmesh.assess.convergence import Convergence
from fluxmesh.report.tables import figure, table

if TYPE_CHECKING:
    from rich.console import Console

__all__ = ["StudiedFigure", "print_study", "study_data"]


@dataclass(frozen=True)
class StudiedFigure:
    """One figure over the meshes.

    Attributes
    ----------
    name : str
        Its key in ``balance.json``, with the component.
    values : tuple of float
        On each mesh, finest first, SI.
    found : Convergence
        What they say.
    """

    name: str
    values: tuple[float, ...]
    found: Convergence


def _share(value: float | None) -> str:
    return "–" if value is None else f"{value:.2%}"


def print_study(
    console: Console,
    cases: Sequence[str],
    faces: Sequence[int],
    sizes: Sequence[float],
    figures: Sequence[StudiedFigure],
    assumptions: Sequence[str],
) -> None:
    """Print how figures converge over several meshes.

    Parameters
    ----------
    console : rich.console.Console
        Where to.
    cases : sequence of str
        Names of the cases, finest first.
    faces : sequence of int
        Faces of each.
    sizes : sequence of float
        Representative size of a face of each, m.
    figures : sequence of StudiedFigure
        What was looked at.
    assumptions : sequence of str
        What the figures of the finest mesh assume.
    """
    from rich.text import Text

    console.print(
        table(
            "Meshes, finest first",
            [("case", "left"), ("faces", "right"), ("size of a face, m", "right")],
            [[name, f"{count:,}", figure(size)] for name, count, size in zip(cases, faces, sizes)],
        )
    )
    rows = []
    for each in figures:
        found = each.found
        rows.append(
            [
                each.name,
                found.behaviour.value,
                figure(each.values[0]),
                "–" if found.uncertainty is None else f"± {figure(found.uncertainty)}",
                "–" if found.order is None else f"{found.order:.2f}",
                figure(found.extrapolated),
                _share(found.relative_error),
                _share(found.index),
            ]
        )
    console.print(
        table(
            "Figures on the finest mesh, SI units, with the doubt that the meshes leave",
            [
                ("figure", "left"),
                ("over the meshes", "left"),
                ("value", "right"),
                ("doubt", "right"),
                ("order", "right"),
                ("extrapolated", "right"),
                ("last change", "right"),
                ("index", "right"),
            ],
            rows,
        )
    )
    for each in figures:
        for reason in each.found.reasons:
            console.print(Text(f"  - {each.name}: {reason}"))
    console.print(
        Text(
            "Index: grid convergence index with the factor 1.25 (J. Fluids Eng. 130, 2008, 078001); the doubt is its "
            "half width. It holds the discretisation only, and only where all cases are the same flow."
        )
    )
    console.print(Text("Assumed: " + "; ".join(text[0].lower() + text[1:] for text in assumptions) + "."))
    for caution in CAUTIONS:
        console.print(Text(f"Caution: {caution}"))


def study_data(
    cases: Sequence[str],
    faces: Sequence[int],
    sizes: Sequence[float],
    figures: Sequence[StudiedFigure],
    assumptions: Sequence[str],
) -> dict[str, Any]:
    """Return a study as plain data, SI units.

    Parameters
    ----------
    cases, faces, sizes, figures, assumptions
        As for `print_study`.
    """
    return {
        "schema": "fluxmesh-convergence/1",
        "meshes": [{"case": name, "faces": count, "size": size} for name, count, size in zip(cases, faces, sizes)],
        "figures": {
            each.name: {
                "values": each.values,
                **{**asdict(each.found), "behaviour": each.found.behaviour.value},
            }
            for each in figures
        },
        "assumptions": tuple(assumptions),
        "cautions": CAUTIONS,
    }
