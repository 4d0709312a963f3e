"""What stands at the head of the page: the load in words, and the verdict in a sentence."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from fluxmesh.report.page.digits import percent_of
from fluxmesh.report.page.grid import Block, Column, Grid, Line
from fluxmesh.report.page.source import Source

__all__ = ["Verdict", "basis_words", "laws_grid", "verdict_of"]


@dataclass(frozen=True)
class Verdict:
    """The judgement as the page says it.

    Attributes
    ----------
    state : {"closes", "doubtful", "open", "unjudged"}
        Sort: closes; closes, with doubts; does not close; cannot be judged in full.
    word : str
        In two or three words.
    sentence : str
        In a sentence.
    reasons : tuple of str
        What it rests on.
    """

    state: str
    word: str
    sentence: str
    reasons: tuple[str, ...]


def verdict_of(data: Mapping[str, Any]) -> Verdict:
    """Return the verdict of a result.

    Parameters
    ----------
    data : mapping
        The content of ``balance.json``.
    """
    verdict: Mapping[str, Any] = data.get("verdict") or {}
    closes, measure, tolerance = verdict.get("closes"), verdict.get("measure"), verdict.get("tolerance")
    reasons = tuple(str(reason) for reason in verdict.get("reasons") or ())
    doubts = data.get("doubts") or ()
    if closes is None:
        state, word = "unjudged", "Cannot be judged in full"
        sentence = "The balance cannot be judged in full"
    elif closes:
        state, word = ("doubtful", "Closes, with doubts") if doubts else ("closes", "Closes")
        within = " within its doubt" if "doubt" in str(verdict.get("state", "")) else ""
        word = word.replace("Closes", f"Closes{within}")
        sentence = f"The balance closes{within}"
    else:
        state, word, sentence = "open", "Does not close", "The balance does not close"
    if isinstance(measure, int | float) and isinstance(tolerance, int | float):
        judged = ", as far as it was judged," if closes is None else ""
        sentence += (
            f": the largest residual{judged} is {_percent(measure)} of the entries, "
            f"where up to {_percent(tolerance)} is allowed"
        )
    if doubts:
        many = f"are {len(doubts)} doubts" if len(doubts) > 1 else "is one doubt"
        sentence += f"; there {many} about the case"
    return Verdict(state, word, sentence + ".", reasons)


def _percent(share: float) -> str:
    """A share that is not broken at the end of a line."""
    return str(percent_of(share)).replace(" ", "\u00a0")


def laws_grid(source: Source) -> Grid | None:
    """Return the judgement law by law, or None where the result does not have it.

    Parameters
    ----------
    source : Source
        The result.
    """
    laws = source.get("verdict", "laws")
    if not isinstance(laws, list | tuple) or not laws:
        return None
    lines = []
    for k, law in enumerate(laws):
        cells = (
            source.figure("", "verdict", "laws", k, "relative", form="percent"),
            source.figure("", "verdict", "laws", k, "doubt", form="percent", absent="–"),
            str(law.get("state", "")),
        )
        lines.append(Line(str(law.get("law", "")), cells))
    columns = (Column("residual over entries"), Column("doubt of that, ±"), Column("judgement"))
    return Grid("Law by law", "law", columns, (Block(tuple(lines)),))


def basis_words(data: Mapping[str, Any]) -> str:
    """Return what the reaction rests on, or why there is none.

    Parameters
    ----------
    data : mapping
        The content of ``balance.json``.
    """
    reaction = data.get("reaction")
    if not isinstance(reaction, Mapping):
        return "No reaction: neither the walls nor the ports carry enough data for a load."
    if reaction.get("basis") == "walls":
        return "It rests on the load integrated over the walls."
    return "It rests on the load from the momentum balance."
