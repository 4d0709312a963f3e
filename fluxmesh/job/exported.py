"""Arrays of the mesh file as fields on the surface."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError
from fluxmesh.field.field import Field, array_field
from fluxmesh.surface.surface import ControlSurface

__all__ = ["ExportedArrays", "exported_field"]


@dataclass(frozen=True, eq=False)
class ExportedArrays:
    """Arrays that lie on a surface, by name, in the file's units.

    Attributes
    ----------
    source : str
        File name, for messages.
    node, face : dict of str to ndarray
        Arrays on points and on the faces that were kept.
    has : dict of str to frozenset of str, or None
        For each group the names of the arrays that its file has; None when all
        groups come from one file.
    """

    source: str
    node: dict[str, NDArray[Any]]
    face: dict[str, NDArray[Any]]
    has: Mapping[str, frozenset[str]] | None = None

    def names(self) -> list[str]:
        """Return the names of all arrays, sorted."""
        return sorted({*self.node, *self.face})


def exported_field(
    surface: ControlSurface,
    arrays: ExportedArrays,
    quantity: str,
    components: int,
    names: tuple[str, ...],
    *,
    key: str,
    at: str | None = None,
    scale: float = 1.0,
) -> Field:
    """Return the field that the case names.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    arrays : ExportedArrays
        What the file has.
    quantity : str
        "velocity", "pressure", ...
    components : int
        1 or 3.
    names : tuple of str
        One array, or three that hold a component each.
    key : str
        Key of the case that names them, for messages.
    at : {"nodes", "faces"}, optional
        Where to look when a name occurs on both.
    scale : float, optional
        Factor to SI and to our sign.

    Returns
    -------
    Field
        Groups whose file lacks the arrays are without the quantity.

    Raises
    ------
    FieldError
        An array that is missing, on both places, or of the wrong shape.
    """
    place = at or _place(arrays, names[0], key)
    pool = arrays.node if place == "nodes" else arrays.face
    found = [_pick(pool, name, place, arrays, key) for name in names]
    label = f"array '{', '.join(names)}' on {place} of {arrays.source} ({key})"
    if len(found) > 1:
        for name, part in zip(names, found):
            if part.ndim != 1:
                raise FieldError(
                    f"component array '{name}' has {part.shape[1]} components", where=label, remedy="1 is needed"
                )
        values = np.column_stack(found)
    else:
        values = found[0]
    covered = None
    if arrays.has is not None:
        covered = np.array([set(names) <= arrays.has[group.name] for group in surface.groups])
    return array_field(surface, quantity, components, values, at=place, scale=scale, label=label, groups=covered)


def _place(arrays: ExportedArrays, name: str, key: str) -> str:
    on_nodes, on_faces = name in arrays.node, name in arrays.face
    if on_nodes and on_faces:
        raise FieldError(
            f"the array '{name}' is on nodes and on faces of {arrays.source}",
            where=key,
            remedy='Say which one: at = "nodes" or at = "faces"',
        )
    return "nodes" if on_nodes else "faces"


def _pick(pool: dict[str, NDArray[Any]], name: str, place: str, arrays: ExportedArrays, key: str) -> NDArray[Any]:
    if name in pool:
        return pool[name]
    other = "faces" if place == "nodes" else "nodes"
    if name in (arrays.face if place == "nodes" else arrays.node):
        raise FieldError(f"the array '{name}' is on {other} of {arrays.source}, not on {place}", where=key)
    near = difflib.get_close_matches(name, arrays.names(), n=1)
    hint = f"Did you mean '{near[0]}'? " if near else ""
    listed = ", ".join(arrays.names()[:20]) or "none"
    raise FieldError(f"there is no array '{name}' in {arrays.source}", where=key, remedy=f"{hint}It has {listed}")
