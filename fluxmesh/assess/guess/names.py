"""The name of an array read: its words, the unit that stands in it, the component it holds."""

from __future__ import annotations

import re
from dataclasses import dataclass
from functools import lru_cache
from typing import Final

from fluxmesh.errors import UnitError
from fluxmesh.units.expression import parse_unit
from fluxmesh.units.table import UNITS, Unit

__all__ = ["NameReading", "known_unit", "name_readings", "name_words"]

_WORD: Final = re.compile(r"[A-Z]+(?=[A-Z][a-z])|[A-Z]?[a-z]+|[A-Z]+|[0-9]+")
_BRACKETED: Final = re.compile(r"(.*\S)\s*[\[({<](.*)[\])}>]\s*", re.DOTALL)
_UNIT_WORD: Final = re.compile(r"[^\W\d_]+(?:2O)?")
_SEPARATORS: Final = re.compile(r"[_\s,:;]+")
_NEGATIVE_POWER: Final = re.compile(r"[A-Za-z]+\^?-[0-9]")
# a unit of pressure and what the pressure counts from, written as one: psia, barg, kPa(abs)
_COUNTED_FROM: Final = re.compile(r"(.+?)[ _]?\(?(gauge|absolute|abs|g|a)\)?", re.IGNORECASE)
_LONGEST_NAME: Final = 200
_MOST_UNIT_WORDS: Final = 4


@dataclass(frozen=True)
class NameReading:
    """One way to read a name.

    Attributes
    ----------
    words : tuple of str
        Words of what is left without the unit, lower case.
    unit : str
        The unit, as `fluxmesh.units` reads it; empty when none was found.
    counted_from : str
        "absolute" or "gauge" where the unit says so, else empty.
    """

    words: tuple[str, ...]
    unit: str = ""
    counted_from: str = ""


def name_words(name: str) -> tuple[str, ...]:
    """Split a name into its words.

    Parameters
    ----------
    name : str
        Such as ``wallShearStress_X``.

    Returns
    -------
    tuple of str
        Lower case, cut at signs, at capitals and at digits; letters beyond
        ASCII are left out.
    """
    return tuple(word.lower() for word in _WORD.findall(name[:_LONGEST_NAME]))


@lru_cache(maxsize=512)
def known_unit(text: str) -> Unit | None:
    """Return the unit that a text is, or None.

    Parameters
    ----------
    text : str
        Any text. Only words of the project's own table count as units, so that
        no word of a name is taken for an exotic one.

    Returns
    -------
    Unit or None
        Its factor and dimension.
    """
    words = _UNIT_WORD.findall(text)
    if not words or not all(word in UNITS for word in words):
        return None
    try:
        return parse_unit(text)
    except UnitError:
        return None


def name_readings(name: str) -> tuple[NameReading, ...]:
    """Return every way to read a name, those with a unit first.

    Parameters
    ----------
    name : str
        Such as ``p [Pa]``, ``Velocity_m_s`` or ``static pressure, psia``.

    Returns
    -------
    tuple of NameReading
        At least one; the last is the one without a unit.
    """
    name = name[:_LONGEST_NAME]
    found: list[NameReading] = []
    bracketed = _BRACKETED.fullmatch(name)
    if bracketed:
        found += _with_unit(bracketed[1], bracketed[2].strip())
    parts = [part for part in _SEPARATORS.split(name) if part]
    for count in range(min(_MOST_UNIT_WORDS, len(parts) - 1), 0, -1):
        for text in _spelled(parts[-count:]):
            found += _with_unit(" ".join(parts[:-count]), text)
    plain = bracketed[1] if bracketed and not name_words(bracketed[2]) else name
    return (*found, NameReading(name_words(plain)))


def _with_unit(head: str, text: str) -> list[NameReading]:
    words = name_words(head)
    if not words:
        return []
    if known_unit(text) is not None:
        return [NameReading(words, text)]
    counted = _COUNTED_FROM.fullmatch(text)
    if counted and known_unit(counted[1]) is not None:
        return [NameReading(words, counted[1], "gauge" if counted[2].lower().startswith("g") else "absolute")]
    return []


def _spelled(parts: list[str]) -> list[str]:
    """Spell the last words of a name as a unit: ``m_s`` and ``m_per_s`` are ``m/s``, ``kg_m_s2`` is ``kg/(m s2)``."""
    words = [part for part in parts if part != "per"]
    if not words:
        return []
    if len(words) == 1:
        return words
    if any(_NEGATIVE_POWER.fullmatch(word) for word in words[1:]):
        return [" ".join(words)]
    below = words[1] if len(words) == 2 else f"({' '.join(words[1:])})"
    return [f"{words[0]}/{below}"]
