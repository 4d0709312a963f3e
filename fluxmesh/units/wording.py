"""Words for messages: what was found, what a dimension is called, what was meant."""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Mapping
from numbers import Real

from fluxmesh.units.table import Dimension

__all__ = [
    "described",
    "dimension_example",
    "dimension_name",
    "either",
    "nearest",
    "printable",
    "quoted",
    "with_article",
]

_LONGEST_SHOWN = 60
_SHORTEST_GUESSED = 3  # any two letters are similar to something

_NAMES: dict[Dimension, tuple[str, str]] = {
    (*exponents, 0, 0, 0): words
    for exponents, words in {
        (0, 0, 0, 0): ("plain number or angle", "0.5"),
        (1, 0, 0, 0): ("length", "25 mm"),
        (2, 0, 0, 0): ("area", "12 cm^2"),
        (3, 0, 0, 0): ("volume", "3 L"),
        (0, 1, 0, 0): ("mass", "12.5 kg"),
        (0, 0, 1, 0): ("time", "0.1 s"),
        (0, 0, -1, 0): ("rate or angular speed", "1450 rpm"),
        (0, 0, 0, 1): ("temperature", "20 degC"),
        (1, 0, -1, 0): ("speed", "2.5 m/s"),
        (1, 0, -2, 0): ("acceleration", "9.80665 m/s^2"),
        (3, 0, -1, 0): ("volume flow rate", "42 m^3/h"),
        (0, 1, -1, 0): ("mass flow rate", "1.2 kg/s"),
        (-3, 1, 0, 0): ("density", "998.2 kg/m^3"),
        (1, 1, -2, 0): ("force", "120 N"),
        (-1, 1, -2, 0): ("pressure or stress", "310 kPa"),
        (2, 1, -2, 0): ("moment or energy", "15 N m"),
        (2, 1, -3, 0): ("power", "1.5 kW"),
        (1, 1, -1, 0): ("momentum", "3 kg m/s"),
        (-1, 1, -1, 0): ("dynamic viscosity", "1.0 cP"),
        (2, 0, -1, 0): ("kinematic viscosity", "1.0 mm^2/s"),
        (2, 0, -2, 0): ("kinematic pressure (pressure over density)", "310 m^2/s^2"),
        (2, 0, -2, -1): ("specific heat or gas constant", "287.05 J/(kg K)"),
    }.items()
}
_BASE_UNITS = ("m", "kg", "s", "K", "A", "mol", "cd")


def dimension_name(dimension: Dimension) -> str:
    """Name a dimension, such as ``pressure or stress``.

    Parameters
    ----------
    dimension : tuple of 7 int
        Exponents of the base quantities.

    Returns
    -------
    str
        A name, or the SI unit where the dimension has no common name.
    """
    if dimension in _NAMES:
        return _NAMES[dimension][0]
    parts = [
        unit if exponent == 1 else f"{unit}^{exponent}" for unit, exponent in zip(_BASE_UNITS, dimension) if exponent
    ]
    return f"quantity in {' '.join(parts)}"


def with_article(noun: str) -> str:
    """Put the indefinite article before a noun.

    Parameters
    ----------
    noun : str
        Such as ``area``.

    Returns
    -------
    str
        Such as ``an area``.
    """
    return f"{'an' if noun[0] in 'aeio' else 'a'} {noun}"


def dimension_example(dimension: Dimension) -> str:
    """Give a quantity of a dimension as a case would write it.

    Parameters
    ----------
    dimension : tuple of 7 int
        Exponents of the base quantities.

    Returns
    -------
    str
        Such as ``310 kPa``; empty where the dimension has no common name.
    """
    return _NAMES[dimension][1] if dimension in _NAMES else ""


def quoted(text: str) -> str:
    """Put a text between quotes, shortened, with nothing that could upset a terminal.

    Parameters
    ----------
    text : str
        Any text.

    Returns
    -------
    str
        The text in double quotes; characters that do not print are escaped.
    """
    cut = text[:_LONGEST_SHOWN] + ("..." if len(text) > _LONGEST_SHOWN else "")
    return f'"{printable(cut)}"'


def printable(text: str) -> str:
    """Escape what could upset a terminal: controls, signs that turn the direction of a text.

    Parameters
    ----------
    text : str
        Any text, such as a name from a file.

    Returns
    -------
    str
        The same where all of it prints.
    """
    if text.isprintable():
        return text
    return "".join(c if c.isprintable() else f"\\u{ord(c):04x}" for c in text)


def described(value: object) -> str:
    """Describe a value of a case file for a message.

    Parameters
    ----------
    value : object
        Whatever was found.

    Returns
    -------
    str
        Its kind and, where that is short, the value itself.
    """
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return quoted(value)
    if isinstance(value, int) and abs(value) >= 10**_LONGEST_SHOWN:
        return "a number of many digits"
    if isinstance(value, Real):
        return f"the number {value}"
    if isinstance(value, (list, tuple)):
        return f"a list of {len(value)}"
    if isinstance(value, Mapping):
        return "a table"
    if value is None:
        return "nothing"
    return f"a {type(value).__name__}"


def either(words: Iterable[str], joint: str = "or") -> str:
    """Join words as in ``a, b or c``.

    Parameters
    ----------
    words : iterable of str
        At least one.
    joint : str, optional
        The word before the last.

    Returns
    -------
    str
        The enumeration.
    """
    *most, last = words
    return f"{', '.join(most)} {joint} {last}" if most else last


def nearest(word: str, candidates: Iterable[str]) -> str | None:
    """Find the name that was probably meant.

    Parameters
    ----------
    word : str
        What was written.
    candidates : iterable of str
        What is allowed.

    Returns
    -------
    str or None
        The candidate that differs in case only, else the most similar one;
        None when nothing comes close.
    """
    names = list(candidates)
    for name in names:
        if name.casefold() == word.casefold():
            return name
    if len(word) < _SHORTEST_GUESSED:
        return None
    # difflib is quadratic in the length of the words
    close = difflib.get_close_matches(word[:_LONGEST_SHOWN], names, n=1)
    return close[0] if close else None
