"""What would explain a balance that does not close: on the terminal, and as plain data."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Final

from fluxmesh.assess.causes import CausesFound, FoundCause

if TYPE_CHECKING:
    from rich.console import Console

__all__ = ["SCHEMA", "causes_data", "print_causes"]

SCHEMA: Final = "fluxmesh-causes/1"


def causes_data(found: CausesFound, *, title: str = "") -> dict[str, Any]:
    """Return what was found as plain data, ready for `fluxmesh.report.result.write_json`.

    Parameters
    ----------
    found : CausesFound
        What was found.
    title : str, optional
        Title of the case.

    Returns
    -------
    dict
        ``causes`` holds one entry each, best first: ``id`` (two or three at once joined by plus signs; each stands in
        ``ids``), ``group``, ``residual_before``, ``residual_after``, ``statement``, ``fix``, ``score`` (minus
        the logarithm of how likely it is, of which only differences mean anything) and ``equally`` (what
        explains the residuals as well).
    """
    return {
        "schema": SCHEMA,
        "title": title,
        "residual": found.residual,
        "tolerance": found.tolerance,
        "causes": [
            {
                "id": cause.id,
                "ids": list(cause.ids),
                "group": cause.group,
                "residual_before": cause.residual_before,
                "residual_after": cause.residual_after,
                "statement": cause.statement,
                "fix": cause.fix,
                "score": cause.score,
                "equally": list(cause.equally),
            }
            for cause in found.causes
        ],
        "tried": list(found.tried),
        "untried": list(found.untried),
        "pairs": found.pairs,
        "threes": found.threes,
        "note": found.note,
    }


def print_causes(console: Console, found: CausesFound, *, title: str = "") -> None:
    """Print what was found.

    Parameters
    ----------
    console : rich.console.Console
        Where to.
    found : CausesFound
        What was found.
    title : str, optional
        Title of the case.
    """
    from rich.text import Text

    if title:
        console.print(Text(title, style="bold"))
    if found.residual is not None:
        console.print(
            Text(f"Largest residual {found.residual:.3g} of the entries of its law; tolerance {found.tolerance:g}")
        )
    if found.note:
        console.print(Text(f"{found.note}.", style="bold green" if found.residual_closes() else "bold yellow"))
    for number, cause in enumerate(found.causes, 1):
        _print_cause(console, number, cause)
    if found.tried:
        console.print()
        together = (
            f"alone, in {found.pairs} pairs and {found.threes} threes"
            if found.threes
            else (f"alone and in {found.pairs} pairs")
        )
        console.print(Text(f"Tried, {together}: {', '.join(found.tried)}."))
        if found.untried:
            console.print(Text(f"Cannot be told from these data: {', '.join(found.untried)}."))
    if found.causes:
        console.print(
            Text("A cause fits the numbers; whether it is so, the export and its origin must say.", style="italic")
        )


def _print_cause(console: Console, number: int, cause: FoundCause) -> None:
    from rich.text import Text

    console.print()
    where = f" ({cause.group})" if cause.group else ""
    console.print(
        Text(f"{number}. {cause.id}{where}: residual {cause.residual_before:.3g} -> {cause.residual_after:.3g}", "bold")
    )
    console.print(Text(f"   {cause.statement}."))
    # not wrapped: a line of a case is copied as a whole
    console.print(Text(f"   To put it right: {cause.fix}"), soft_wrap=True)
    if cause.equally:
        console.print(Text(f"   Fits as well: {', '.join(cause.equally)}; the order is by what each assumes."))
