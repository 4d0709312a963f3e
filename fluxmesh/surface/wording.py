"""How lengths, places, counts and names read in messages of the surface."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
from numpy.typing import ArrayLike

__all__ = ["counted", "length_text", "names_text", "place_text"]


def length_text(length: float) -> str:
    """Return a length in metres with at most four significant digits.

    Parameters
    ----------
    length : float
        m.

    Returns
    -------
    str
        "0.314 m".
    """
    return f"{length:.4g} m"


def place_text(place: ArrayLike) -> str:
    """Return a place with four significant digits of its largest coordinate.

    Parameters
    ----------
    place : array_like, shape (3,)
        m.

    Returns
    -------
    str
        "(0.1, 0, 0.25) m".
    """
    xyz = np.asarray(place, np.float64)
    largest = float(np.abs(xyz).max())
    if largest > 0:
        # adding 0.0 turns -0.0 into 0.0
        # more decimals than numbers have would give NaN
        xyz = np.round(xyz, min(3 - int(np.floor(np.log10(largest))), 300)) + 0.0
    return "(" + ", ".join(f"{x:.4g}" for x in xyz) + ") m"


def names_text(names: Iterable[str], most: int = 4) -> str:
    """Return quoted group names, shortened when there are many.

    Parameters
    ----------
    names : iterable of str
        Group names.
    most : int, optional
        How many are written out.

    Returns
    -------
    str
        "group 'shell'", "groups 'feed' and 'shell'", "groups 'a', 'b', 'c', 'd' and 3 more".
    """
    quoted = [f"'{name}'" for name in names]
    if len(quoted) == 1:
        return f"group {quoted[0]}"
    shown = quoted if len(quoted) <= most else [*quoted[:most], f"{len(quoted) - most} more"]
    return "groups " + ", ".join(shown[:-1]) + " and " + shown[-1]


def counted(count: int, noun: str, plural: str = "") -> str:
    """Return a count with its noun.

    Parameters
    ----------
    count : int
        How many.
    noun : str
        For one of them.
    plural : str, optional
        For several; `noun` with an s by default.

    Returns
    -------
    str
        "1 face", "3 faces".
    """
    return f"{count} {noun if count == 1 else plural or noun + 's'}"
