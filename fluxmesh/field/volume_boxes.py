"""Whether a volume and a surface lie at the same place: the boxes around them, and slips of unit."""

from __future__ import annotations

from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError

__all__ = ["LENGTH_UNITS", "box_of", "require_same_place", "unit_that_fits"]

LENGTH_UNITS: Final = {"m": 1.0, "mm": 1e-3, "cm": 1e-2, "um": 1e-6, "inch": 0.0254, "ft": 0.3048}
"""Metres in the units that meshes come in."""

# Two boxes are taken for the same when no corner is off by more than this part of their size.
_SAME: Final = 0.02
# A volume that holds the surface may be of any size, but one that is the same in another unit of this ratio is a slip.
_SLIP: Final = 1000.0


def box_of(points: NDArray[np.floating[Any]]) -> NDArray[np.float64]:
    """Return the lowest and the highest coordinates of points.

    Parameters
    ----------
    points : ndarray, shape (n, 3)
        At least one.

    Returns
    -------
    ndarray, shape (2, 3), float64
        In the same unit.
    """
    # column by column: NumPy is several times slower along the short axis
    low, high = ([float(f(points[:, k])) for k in range(3)] for f in (np.min, np.max))
    return np.array([low, high])


def unit_that_fits(volume: NDArray[np.float64], scale: float, surface: NDArray[np.float64]) -> str | None:
    """Return the unit in which a volume would span the same box as the surface.

    Parameters
    ----------
    volume : ndarray, shape (2, 3), float64
        Lowest and highest coordinates of the volume, in its own unit.
    scale : float
        That unit as it was read, m.
    surface : ndarray, shape (2, 3), float64
        The same of the surface, m.

    Returns
    -------
    str or None
        None when no other unit fits.
    """
    size = float(np.linalg.norm(surface[1] - surface[0]))
    for unit, factor in LENGTH_UNITS.items():
        other = abs(factor / scale - 1.0) > 1e-6
        if other and np.abs(volume * factor - surface).max() <= _SAME * size:
            return unit
    return None


def require_same_place(
    volume: NDArray[np.float64], scale: float, surface: NDArray[np.float64], reach: float, source: str
) -> None:
    """Raise if a volume cannot be the one around the surface.

    Parameters
    ----------
    volume : ndarray, shape (2, 3), float64
        Lowest and highest coordinates of the volume, in its own unit.
    scale : float
        That unit, m.
    surface : ndarray, shape (2, 3), float64
        The same of the places on the surface, m.
    reach : float
        How far they may lie from the volume, m.
    source : str
        File of the volume, for messages.

    Raises
    ------
    FieldError
        The boxes do not touch, or they are the same but for a factor of 1000.
    """
    box = volume * scale
    apart = bool((np.maximum(box[0] - surface[1], surface[0] - box[1]) > reach).any())
    unit = unit_that_fits(volume, scale, surface)
    slip = unit is not None and abs(scale / LENGTH_UNITS[unit] / _SLIP - 1.0) < 1e-6
    if not apart and not slip:
        return
    found = "the volume misses the surface" if apart else "the volume is 1000 times as large as the surface"
    remedy = (
        f'In {unit} both span the same: write flow.volume.unit = "{unit}", or check length_unit of the surface'
        if unit is not None
        else "Export the volume around this surface, in the same axes and unit"
    )
    raise FieldError(f"{found}: it spans {_span(box)}, the surface {_span(surface)}", where=source, remedy=remedy)


def _span(box: NDArray[np.float64]) -> str:
    low, high = (f"({', '.join(f'{x:.4g}' for x in corner)})" for corner in box)
    return f"{low} to {high} m"
