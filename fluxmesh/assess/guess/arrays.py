"""Which arrays of a file are probably which quantity."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.guess.names import NameReading, known_unit, name_readings
from fluxmesh.assess.guess.words import QUANTITIES, match_words
from fluxmesh.units.expression import parse_unit

__all__ = ["ArrayGuess", "best_guess", "guess_arrays", "read_as"]

Arrays = Mapping[str, NDArray[Any]]

_AXES: Final = ("xyz", "uvw", "012", "123")


@dataclass(frozen=True)
class ArrayGuess:
    """What an array, or three that hold a component each, may be.

    Attributes
    ----------
    quantity : str
        "velocity", "pressure", "traction", "density", "mass_flux",
        "temperature" or "stress".
    names : tuple of str
        One name, or those of the three components in order.
    at : {"nodes", "faces"}
        Where it sits.
    both : bool
        Whether an array of that name sits on the other place as well.
    unit : str
        Unit that the name states and that fits the quantity; else empty.
    hints : frozenset of str
        What the name says about the kind: "total", "absolute", "gauge",
        "kinematic", "relative", "coefficient".
    score : int
        Larger is likelier.
    """

    quantity: str
    names: tuple[str, ...]
    at: str
    both: bool
    unit: str
    hints: frozenset[str]
    score: int


def guess_arrays(node: Arrays, face: Arrays) -> tuple[ArrayGuess, ...]:
    """Guess what the arrays of a file are.

    Parameters
    ----------
    node, face : mapping of str to ndarray
        Arrays on points and on faces.

    Returns
    -------
    tuple of ArrayGuess
        The likeliest first; an array may be guessed as more than one quantity.
    """
    found = []
    for at, pool, other in (("nodes", node, face), ("faces", face, node)):
        for names, components, readings in _candidates(pool):
            for quantity, known in QUANTITIES.items():
                if components not in known.components or (quantity == "mass_flux" and at == "nodes"):
                    continue
                read = _best_reading(quantity, readings)
                if read is None or not _possible(quantity, [pool[name] for name in names]):
                    continue
                score, unit, hints = read
                found.append(ArrayGuess(quantity, names, at, names[0] in other, unit, hints, score))
    return tuple(sorted(found, key=lambda guess: -guess.score))


def best_guess(guesses: Iterable[ArrayGuess], quantity: str) -> ArrayGuess | None:
    """Return the likeliest array of a quantity, or None.

    Parameters
    ----------
    guesses : iterable of ArrayGuess
        As `guess_arrays` gives them.
    quantity : str
        The quantity.

    Returns
    -------
    ArrayGuess or None
        Coefficients are never it.
    """
    return next((guess for guess in guesses if guess.quantity == quantity and guess.score > 0), None)


def read_as(quantity: str, names: tuple[str, ...]) -> tuple[str, frozenset[str]]:
    """Return what names say about an array that is known to hold a quantity.

    Parameters
    ----------
    quantity : str
        The quantity.
    names : tuple of str
        Names of the array, or of its three components.

    Returns
    -------
    unit : str
        The unit in the name, where it fits the quantity; else empty.
    hints : frozenset of str
        As in `ArrayGuess`.
    """
    if quantity not in QUANTITIES:
        return "", frozenset()
    read = _best_reading(quantity, _component(names[0])[1] if len(names) > 1 else name_readings(names[0]))
    return (read[1], read[2]) if read is not None else ("", frozenset())


def _candidates(pool: Arrays) -> Iterator[tuple[tuple[str, ...], int, tuple[NameReading, ...]]]:
    """Yield single arrays, and scalars that make up the components of a vector."""
    stems: dict[tuple[Any, ...], dict[str, str]] = {}
    for name, values in pool.items():
        if values.dtype.kind != "f" or values.ndim > 2 or not name.isprintable() or not name.strip():
            continue
        components = 1 if values.ndim == 1 else values.shape[1]
        yield (name,), components, name_readings(name)
        axis, readings = _component(name)
        if components == 1 and axis:
            stems.setdefault((readings, next(axes for axes in _AXES if axis in axes)), {})[axis] = name
            if axis in "12":
                stems.setdefault((readings, "123"), {})[axis] = name
    for (readings, axes), names in stems.items():
        if all(axis in names for axis in axes):
            yield tuple(names[axis] for axis in axes), 3, readings


def _component(name: str) -> tuple[str, tuple[NameReading, ...]]:
    """Return the axis that a name ends or starts with, and the readings of what is left of it."""
    axis, readings = "", []
    for reading in name_readings(name):
        words, found = _without_axis(reading.words)
        if found:
            axis = found
            readings.append(NameReading(words, reading.unit, reading.counted_from))
    return axis, tuple(readings)


def _without_axis(words: tuple[str, ...]) -> tuple[tuple[str, ...], str]:
    if len(words) == 1 and words[0] in ("u", "v", "w"):
        return ("velocity",), words[0]
    if len(words) > 1 and words[-1] in ("x", "y", "z", "0", "1", "2", "3"):
        return words[:-1], words[-1]
    if len(words) > 1 and words[0] in ("x", "y", "z"):
        return words[1:], words[0]
    if words and len(words[-1]) > 1 and words[-1][-1] in "xyz":
        # Ux, velx, tauwx
        stem = words[-1][:-1]
        if any(stem in known.words | known.letters for known in QUANTITIES.values()):
            return (*words[:-1], stem), words[-1][-1]
    return words, ""


def _best_reading(quantity: str, readings: tuple[NameReading, ...]) -> tuple[int, str, frozenset[str]] | None:
    known = QUANTITIES[quantity]
    best = None
    for reading in readings:
        match = match_words(quantity, reading.words)
        if match is None:
            continue
        score, hints, unit = match.score, match.hints, ""
        if reading.unit:
            found = known_unit(reading.unit)
            assert found is not None
            fits = [text for text in (known.unit, known.over_density) if text]
            fitting = [text for text in fits if parse_unit(text).dimension == found.dimension]
            if not fitting or found.offset:
                continue
            unit, score = reading.unit, score + 2
            hints |= {"kinematic"} if fitting[0] == known.over_density else set()
            hints |= {reading.counted_from} if reading.counted_from else set()
        if best is None or score > best[0]:
            best = (score, unit, hints)
    return best


def _possible(quantity: str, parts: list[NDArray[Any]]) -> bool:
    """Return whether the values can be those of the quantity."""
    if any(part.shape[0] == 0 for part in parts):
        return False
    if quantity in ("density", "temperature"):
        return bool(np.nanmin(parts[0]) > 0) if not np.isnan(parts[0]).all() else False
    return True
