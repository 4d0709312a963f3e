"""Which face arrays tell groups of faces apart."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.guess.names import name_words

__all__ = ["TagArray", "tag_arrays", "tag_values"]


def _words(text: str) -> frozenset[str]:
    return frozenset(text.split())


# common practice, no source
_NAMED: Final = _words(
    "region regions group groups patch patches boundary boundaries part parts tag tags zone zones surface surfaces "
    "marker markers physical bc bcs family families block blocks attribute"
)
_NUMBERING: Final = _words(
    "original global index indices ids rank proc process partition ghost level node nodes cell cells element elements "
    "vertex connectivity type"
)
_MOST_UNNAMED: Final = 64
_MOST_NAMED: Final = 1000


@dataclass(frozen=True, eq=False)
class TagArray:
    """A face array that may tell groups apart.

    Attributes
    ----------
    name : str
        Name of the array.
    values : ndarray, shape (n_faces,)
        Whole numbers or text.
    tags : tuple of int or str
        Its values, sorted.
    named : bool
        Whether its name or its text says that it holds groups.
    """

    name: str
    values: NDArray[Any]
    tags: tuple[int | str, ...]
    named: bool


def tag_values(values: NDArray[Any]) -> NDArray[Any] | None:
    """Return tags as one whole number or text a face, or None if an array holds none.

    Parameters
    ----------
    values : ndarray
        Of integers, text, or floats that are whole numbers.
    """
    if values.ndim == 2 and values.shape[1] == 1:
        values = values[:, 0]
    if values.ndim != 1 or values.size == 0:
        return None
    if values.dtype.kind == "S":
        return np.char.decode(values, "utf-8", "replace")
    if values.dtype.kind == "f":
        whole = bool(np.isfinite(values).all()) and bool((values == np.rint(values)).all())
        return values.astype(np.int64) if whole and float(np.abs(values).max()) < 2.0**53 else None
    return values if values.dtype.kind in "iuUb" else None


def tag_arrays(face_arrays: Mapping[str, NDArray[Any]]) -> list[TagArray]:
    """Return the face arrays that may tell groups apart, the likeliest first.

    Parameters
    ----------
    face_arrays : mapping of str to ndarray
        Arrays on faces.

    Returns
    -------
    list of TagArray
        Those with two values or more and not too many; names of groups and
        text before other whole numbers, then those with fewer values.
    """
    found = []
    for name, given in face_arrays.items():
        words = set(name_words(name))
        says = bool(words & _NAMED)
        if not name.isprintable() or not name.strip() or (words & _NUMBERING and not says):
            continue
        if given.dtype.kind == "f" and not says:
            continue
        values = tag_values(given)
        if values is None:
            continue
        named = says or values.dtype.kind == "U"
        tags = np.unique(values)
        if 1 < tags.size <= (_MOST_NAMED if named else _MOST_UNNAMED):
            plain = tuple(str(tag) if values.dtype.kind == "U" else int(tag) for tag in tags)
            found.append(TagArray(name, values, plain, named))
    # a physical group is the analyst's, a geometrical entity the modeller's
    return sorted(
        found, key=lambda tag: (not tag.named, tag.values.dtype.kind != "U", "geometrical" in tag.name, len(tag.tags))
    )
