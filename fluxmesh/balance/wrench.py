"""A force with its moment: moving it to another point, and its central axis."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["CentralAxis", "Vector", "Wrench", "central_axis", "moved"]

Vector = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Wrench:
    """A force and its moment about a point.

    Attributes
    ----------
    force : ndarray, shape (3,), float64
        N.
    moment : ndarray, shape (3,), float64
        N m, about `at`.
    at : ndarray, shape (3,), float64
        m.
    """

    force: Vector
    moment: Vector
    at: Vector

    def __add__(self, other: Wrench) -> Wrench:
        """Return the sum, about this wrench's point."""
        other = moved(other, self.at)
        return Wrench(self.force + other.force, self.moment + other.moment, self.at)

    def __neg__(self) -> Wrench:
        """Return the opposite wrench, about the same point."""
        return Wrench(-self.force, -self.moment, self.at)


@dataclass(frozen=True, eq=False)
class CentralAxis:
    """The line that a wrench acts along.

    Attributes
    ----------
    point : ndarray, shape (3,), float64
        Its point nearest to the point that the moment was about, m.
    direction : ndarray, shape (3,), float64
        Unit vector of the force, or of the moment if there is no force; zero
        if there is neither.
    couple : float
        Moment that is left along `direction`, N m.
    """

    point: Vector
    direction: Vector
    couple: float


def moved(wrench: Wrench, to: Vector) -> Wrench:
    """Return the same wrench about another point.

    Parameters
    ----------
    wrench : Wrench
        A force and its moment.
    to : ndarray, shape (3,), float64
        The other point, m.

    Returns
    -------
    Wrench
        ``M' = M + (at - to) × F``.
    """
    return Wrench(wrench.force, wrench.moment + np.cross(wrench.at - to, wrench.force), to)


def central_axis(wrench: Wrench) -> CentralAxis:
    """Return the central axis of a wrench.

    Parameters
    ----------
    wrench : Wrench
        A force and its moment.

    Returns
    -------
    CentralAxis
        Point ``at + F × M / |F|²``, direction of the force, couple
        ``F·M / |F|`` (Poinsot 1803, Éléments de statique; from memory).
    """
    force, moment = wrench.force, wrench.moment
    size = float(np.linalg.norm(force))
    if size == 0.0:
        couple = float(np.linalg.norm(moment))
        direction = moment / couple if couple > 0.0 else np.zeros(3)
        return CentralAxis(wrench.at, direction, couple)
    direction = force / size
    return CentralAxis(wrench.at + np.cross(direction, moment) / size, direction, float(direction @ moment))
