"""How the control surface moves: its velocity and acceleration at a place."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fluxmesh.errors import FieldError

__all__ = ["Frame"]

Vector = NDArray[np.float64]
Triple = tuple[float, float, float]


@dataclass(frozen=True)
class Frame:
    """The motion of a control surface that keeps its shape.

    Attributes
    ----------
    velocity, acceleration : tuple of 3 floats
        Of the surface, or where it turns of the points on its axis; m/s and m/s².
    rate : float
        Angular speed by the right-hand rule about `axis`, rad/s; steady.
    axis : tuple of 3 floats
        Unit vector along the axis.
    through : tuple of 3 floats
        A point on the axis, m.

    Raises
    ------
    FieldError
        A number that is not finite, or an axis that is no unit vector.
    """

    velocity: Triple = (0.0, 0.0, 0.0)
    acceleration: Triple = (0.0, 0.0, 0.0)
    rate: float = 0.0
    axis: Triple = (0.0, 0.0, 1.0)
    through: Triple = (0.0, 0.0, 0.0)

    def __post_init__(self) -> None:
        """Check the numbers at the door."""
        for name in ("velocity", "acceleration", "axis", "through"):
            value = np.asarray(getattr(self, name), dtype=np.float64)
            if value.shape != (3,) or not np.isfinite(value).all():
                raise FieldError(f"the frame's {name} is {getattr(self, name)!r}", remedy="Give three finite numbers")
        if not np.isfinite(self.rate):
            raise FieldError(f"the frame's rate is {self.rate!r}", remedy="Give a finite number in rad/s")
        if self.rate != 0.0 and abs(float(np.linalg.norm(self.axis)) - 1.0) > 1e-9:
            raise FieldError(f"the frame's axis is {self.axis!r}", remedy="Give a unit vector")

    @property
    def spin(self) -> Vector:
        """Angular velocity, shape (3,), rad/s."""
        return self.rate * np.asarray(self.axis, dtype=np.float64)

    @property
    def turns(self) -> bool:
        """Whether the surface rotates."""
        return self.rate != 0.0

    def at(self, places: ArrayLike) -> Vector:
        """Return the velocity of the control surface at some places.

        Parameters
        ----------
        places : array_like, shape (3,) or (n, 3)
            m.

        Returns
        -------
        ndarray, shape as `places`, float64
            ``U + Ω × (x - through)``, m/s.
        """
        arm = np.asarray(places, dtype=np.float64) - np.asarray(self.through)
        return np.asarray(np.asarray(self.velocity) + np.cross(self.spin, arm))

    def acceleration_at(self, place: ArrayLike) -> Vector:
        """Return the acceleration of a point that moves with the control surface.

        Parameters
        ----------
        place : array_like, shape (3,)
            m.

        Returns
        -------
        ndarray, shape (3,), float64
            ``a + Ω × (Ω × (x - through))``, m/s².
        """
        arm = np.asarray(place, dtype=np.float64) - np.asarray(self.through)
        return np.asarray(np.asarray(self.acceleration) + np.cross(self.spin, np.cross(self.spin, arm)))
