"""Scalars that are the components of one vector, offered joined as well."""

from __future__ import annotations

import re
from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = ["with_vectors"]

_COMPONENT = re.compile(r"^(.+?)([ _]?)([xyz]|[XYZ])$")


def with_vectors(arrays: dict[str, NDArray[Any]]) -> dict[str, NDArray[Any]]:
    """Add the vector that three scalars make.

    Parameters
    ----------
    arrays : dict of str to ndarray
        Arrays of one place: all on nodes, or all on cells.

    Returns
    -------
    dict of str to ndarray
        All of them, and for names that differ only in a last letter X, Y and
        Z (or x, y, z; an underscore before it is dropped) their join, shape
        (n, 3), under the name without it, unless that name is taken: the
        SIDS names VelocityX, VelocityY, VelocityZ make Velocity.
    """
    found: dict[tuple[str, str, bool], dict[str, str]] = {}
    for name, values in arrays.items():
        match = _COMPONENT.match(name)
        if match and values.ndim == 1 and values.dtype.kind in "fiu":
            stem, gap, letter = match.groups()
            found.setdefault((stem, gap, letter.isupper()), {})[letter.lower()] = name
    joined = dict(arrays)
    for (stem, _, _), letters in found.items():
        if len(letters) == 3 and stem not in joined:
            joined[stem] = np.column_stack([arrays[letters[letter]] for letter in "xyz"])
    return joined
