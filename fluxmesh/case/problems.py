"""What is wrong with a case, as data: a key, what was found there, and what to do."""

from __future__ import annotations

import re
from collections.abc import Iterable
from dataclasses import dataclass

from fluxmesh.units.wording import either, nearest, quoted

__all__ = ["Problem", "ProblemList", "dotted", "meant"]

_BARE_KEY = re.compile("[A-Za-z0-9_-]{1,60}")
_MOST_PARTS = 8


@dataclass(frozen=True)
class Problem:
    """One thing that is wrong.

    Attributes
    ----------
    key : str
        Dotted key, such as ``groups.feed.flow_rate``; empty for the whole case.
    found : str
        What was found, one clause without a final full stop.
    remedy : str
        What is allowed, or what to do; may be empty.
    """

    key: str
    found: str
    remedy: str = ""

    def __str__(self) -> str:
        """Return the problem in one line."""
        head = f"{self.key}: {self.found}" if self.key else self.found
        return f"{head}. {self.remedy}" if self.remedy else head


class ProblemList(ValueError):
    """Several problems at once, on their way through the validation of a model.

    Parameters
    ----------
    problems : iterable of Problem
        At least one.

    Attributes
    ----------
    problems : tuple of Problem
        As given.
    """

    def __init__(self, problems: Iterable[Problem]) -> None:
        """Keep the problems, and their text for whoever prints the error itself."""
        self.problems = tuple(problems)
        super().__init__("; ".join(map(str, self.problems)))


def dotted(*parts: str | int) -> str:
    """Write a key as TOML does.

    Parameters
    ----------
    *parts : str or int
        From the outermost table inwards.

    Returns
    -------
    str
        The parts joined by points, between quotes where TOML needs them; shortened
        where they are too long to be read.
    """
    words = [str(part) if _BARE_KEY.fullmatch(str(part)) else quoted(str(part)) for part in parts]
    return ".".join(words) if len(words) <= _MOST_PARTS else ".".join([*words[:_MOST_PARTS], "..."])


def meant(name: str, candidates: Iterable[str]) -> str:
    """Point from a name that is not there to those that are.

    Parameters
    ----------
    name : str
        What was written.
    candidates : iterable of str
        The names that exist.

    Returns
    -------
    str
        The name that was probably meant, or the first dozen that exist.
    """
    names = list(candidates)
    close = nearest(name, names)
    if close:
        return f"Did you mean {quoted(close)}?"
    return f"There are {either([quoted(name) for name in names[:12]], 'and')}" if names else "There are none"
