"""What to compare with: volume moments from signed tetrahedra, and the observed order of convergence."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from tests.solids import Solid

Array = NDArray[np.float64]


def observed_order(sizes: ArrayLike, errors: ArrayLike) -> float:
    """Return the slope of log(error) over log(size), by least squares."""
    return float(np.polyfit(np.log(np.asarray(sizes)), np.log(np.abs(np.asarray(errors))), 1)[0])


@dataclass(frozen=True)
class Moments:
    """Volume, first moment (3,) and second moment (3, 3) about the coordinate origin."""

    volume: float
    first: Array
    second: Array

    @property
    def centroid(self) -> Array:
        """Centroid, m."""
        return self.first / self.volume


def moments(solid: Solid) -> Moments:
    """Return volume moments of a straight-faced body from signed tetrahedra, each in closed form.

    Polygons are cut at the mean of their corners. A tetrahedron with the corners
    ``v`` has ``∫x_i x_j = V/20 (Σ_a v_a v_a + Σ_a v_a Σ_b v_b)``: the formula for
    powers of barycentric coordinates (Zienkiewicz and Taylor; from memory).
    """
    apex = solid.points.mean(axis=0)
    volume, first, second = 0.0, np.zeros(3), np.zeros((3, 3))
    for face in solid.faces:
        corners = solid.points[face] - apex
        middle = corners.mean(axis=0)
        for a, b in zip(corners, np.roll(corners, -1, axis=0)):
            tet = np.array([a, b, middle])  # the fourth corner is the apex, now the origin
            part = float(np.linalg.det(tet)) / 6
            total = tet.sum(axis=0)
            volume += part
            first += part * total / 4
            second += part / 20 * (tet.T @ tet + np.outer(total, total))
    return Moments(
        volume,
        first + volume * apex,
        second + np.outer(first, apex) + np.outer(apex, first) + volume * np.outer(apex, apex),
    )
