"""Whether volumes are one and the same, and fill the control surface."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

import numpy as np
from numpy.typing import ArrayLike

from fluxmesh.errors import FieldError
from fluxmesh.field.contents import Contents
from fluxmesh.field.volume_boxes import LENGTH_UNITS

__all__ = ["require_same_domain"]

_SAME: Final = 1e-6
_FILLS: Final = 0.01


def require_same_domain(
    contents: Sequence[Contents],
    enclosed_volume: float | None,
    enclosed_centroid: ArrayLike | None,
    names: Sequence[str],
    *,
    same: float = _SAME,
    fills: float = _FILLS,
) -> None:
    """Raise unless volumes are the same, and the one that a surface encloses.

    Parameters
    ----------
    contents : sequence of Contents
        What each holds.
    enclosed_volume : float or None
        Volume that the control surface encloses, m^3; None where it is open.
    enclosed_centroid : array_like, shape (3,), or None
        Its centroid, m.
    names : sequence of str
        Where each volume comes from, for messages.
    same : float, optional
        Largest difference among volumes, of their volume, and of their
        centroids, of its cube root.
    fills : float, optional
        Largest difference from what the surface encloses, in the same parts.

    Raises
    ------
    FieldError
        Volumes or centroids that differ by more.
    """
    if not contents:
        return
    for held, name in zip(contents[1:], names[1:]):
        _require_alike(contents[0], held, names[0], name, same)
    for held, name in zip(contents, names):
        if enclosed_volume is not None:
            _require_filled(held, name, enclosed_volume, enclosed_centroid, fills)


def _require_alike(one: Contents, two: Contents, first: str, name: str, same: float) -> None:
    size = one.volume ** (1 / 3)
    if abs(two.volume - one.volume) > same * one.volume:
        found = f"its cells fill {two.volume:.9g} m³, those of {first} {one.volume:.9g} m³"
    elif np.linalg.norm(two.centroid - one.centroid) > same * size:
        found = f"the centroid of its cells is {_place(two.centroid)}, that of {first} {_place(one.centroid)}"
    else:
        return
    raise FieldError(
        found,
        where=name,
        remedy="All volume files must fill the same volume: export them in the same axes and unit, with the same cells",
    )


def _require_filled(held: Contents, name: str, enclosed: float, centroid: ArrayLike | None, fills: float) -> None:
    remedy = "The volume file must fill the control surface exactly: export the cells inside it, all and no others"
    if abs(held.volume - enclosed) > fills * abs(enclosed):
        # volumes that differ as two units cubed are a slip of the unit
        ratio = abs(enclosed) / held.volume
        slip = any(
            abs(ratio / (one / two) ** 3 - 1.0) < fills
            for one in LENGTH_UNITS.values()
            for two in LENGTH_UNITS.values()
            if one != two
        )
        if slip:
            remedy += ". The two differ as units of length do: check unit of the volume, and length_unit of the surface"
        raise FieldError(
            f"its cells fill {held.volume:.6g} m³, the surface encloses {enclosed:.6g} m³", where=name, remedy=remedy
        )
    if centroid is None:
        return
    place = np.asarray(centroid, dtype=np.float64)
    if np.linalg.norm(held.centroid - place) > fills * held.volume ** (1 / 3):
        raise FieldError(
            f"the centroid of its cells is {_place(held.centroid)}, that of the surface {_place(place)}",
            where=name,
            remedy=remedy,
        )


def _place(point: np.ndarray[tuple[int, ...], np.dtype[np.float64]]) -> str:
    return f"({', '.join(f'{x:.9g}' for x in point)}) m"
