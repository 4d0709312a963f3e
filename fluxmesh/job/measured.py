"""The numbers of a case that have a plus-minus, and the case with another number in the place of one."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any, Final

from pydantic import BaseModel

from fluxmesh.case.model import Case
from fluxmesh.units import Measured

__all__ = ["Keys", "measured_in", "moved_case"]

Keys = tuple[str, ...]
"""Keys from the top of a case to a number."""

_NO_FIGURE: Final = {"weld", "reach", "angle"}  # how a mesh is taken, not what is measured


def measured_in(case: Case) -> dict[Keys, Measured]:
    """Return all numbers of a case that have a plus-minus, by their keys.

    Parameters
    ----------
    case : Case
        The case.
    """
    return {keys: value for keys, value in _walk(case, ()) if value.half_width > 0.0 and keys[-1] not in _NO_FIGURE}


def _walk(value: Any, above: Keys) -> Iterator[tuple[Keys, Measured]]:
    if isinstance(value, Measured):
        yield above, value
    elif isinstance(value, BaseModel):
        for key in type(value).model_fields:
            yield from _walk(getattr(value, key), (*above, key))
    elif isinstance(value, Mapping):
        for key, one in value.items():
            yield from _walk(one, (*above, str(key)))
    elif isinstance(value, tuple):
        for number, one in enumerate(value):
            yield from _walk(one, (*above, str(number)))


def moved_case(case: Case, keys: Keys, value: float) -> Case:
    """Return a case with another number at some keys, without a plus-minus.

    Parameters
    ----------
    case : Case
        The case; it is not checked anew.
    keys : tuple of str
        Such as from `measured_in`.
    value : float
        SI.
    """
    moved: Case = _put(case, keys, Measured(value))
    return moved


def _put(value: Any, keys: Keys, measured: Measured) -> Any:
    """The same tables with one number in place of another."""
    if not keys:
        return measured
    first, rest = keys[0], keys[1:]
    if isinstance(value, BaseModel):
        return value.model_copy(update={first: _put(getattr(value, first), rest, measured)})
    if isinstance(value, Mapping):
        return {key: _put(one, rest, measured) if key == first else one for key, one in value.items()}
    return tuple(_put(one, rest, measured) if str(k) == first else one for k, one in enumerate(value))
