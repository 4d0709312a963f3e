"""What a profile may be told."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fluxmesh.errors import FieldError
from fluxmesh.field.profiles.port import PortPatch

__all__ = ["DEFAULT_EXPONENT", "ProfileOptions", "ProfileShape", "SpeedTable"]

DEFAULT_EXPONENT = 7.0
"""n of the power law ``u ~ d^(1/n)`` (common practice for Reynolds numbers about 1e5; from memory)."""


@dataclass(frozen=True, eq=False)
class SpeedTable:
    """Speed against the distance from the middle or from the wall of a port.

    Parameters
    ----------
    at : array_like, shape (n,)
        Distances, rising: m, or shares of the largest one in the port.
    speed : array_like, shape (n,)
        Speeds along the port's normal, m/s, none negative.
    quantity : {"radius", "wall-distance"}
        What `at` is: distance from the centroid of the port (of the whole, where
        symmetry planes cut it), or from the nearest wall that meets it.
    relative : bool, optional
        Whether `at` is a share: 1 is the largest distance that occurs.
    interpolation : {"monotone", "linear"}, optional
        Piecewise cubic without overshoot (Fritsch and Carlson 1980, SIAM J.
        Numer. Anal. 17:238-246), or straight lines.

    Raises
    ------
    FieldError
        Fewer than two rows, lengths that differ, values that are not finite,
        distances that do not rise or are negative, or negative speeds.
    """

    at: ArrayLike
    speed: ArrayLike
    quantity: Literal["radius", "wall-distance"]
    relative: bool = False
    interpolation: Literal["monotone", "linear"] = "monotone"

    def __post_init__(self) -> None:
        """Check the rows once, at the door."""
        self.rows()
        for value, allowed in (
            (self.quantity, ("radius", "wall-distance")),
            (self.interpolation, ("monotone", "linear")),
        ):
            if value not in allowed:
                raise FieldError(f"'{value}' is not known", _TABLE, f"Allowed: {', '.join(allowed)}")

    def rows(self) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Return distances and speeds as float64.

        Returns
        -------
        tuple of ndarray, shape (n,), float64
            `at` and `speed`.

        Raises
        ------
        FieldError
            As the class.
        """
        try:
            at, speed = (np.asarray(column, dtype=np.float64) for column in (self.at, self.speed))
        except (TypeError, ValueError) as error:
            raise FieldError("the rows are not numbers", _TABLE, "Give distances and speeds as numbers") from error
        if at.ndim != 1 or at.shape != speed.shape:
            raise FieldError(
                f"there are {at.size} distances and {speed.size} speeds", _TABLE, "Give one speed for each distance"
            )
        if at.size < 2:
            raise FieldError(f"the table has {at.size} row{'s' * (at.size != 1)}", _TABLE, "Give two rows or more")
        bad = np.flatnonzero(~(np.isfinite(at) & np.isfinite(speed)))
        if bad.size:
            raise FieldError(f"row {bad[0] + 1} is not finite", _TABLE, "Give finite distances and speeds")
        falling = np.flatnonzero(np.diff(at) <= 0.0)
        if falling.size:
            row = int(falling[0]) + 1
            raise FieldError(
                f"distances do not rise: {at[row]:g} follows {at[row - 1]:g} in row {row + 1}",
                _TABLE,
                "Sort the rows by distance and give each distance once",
            )
        if at[0] < 0.0:
            raise FieldError(f"the distance {at[0]:g} is negative", _TABLE, "Distances start at 0")
        if speed.min() < 0.0:
            row = int(speed.argmin())
            raise FieldError(
                f"the speed {speed[row]:g} in row {row + 1} is negative",
                _TABLE,
                "Give speeds along the flow; the role of the group says which way it goes",
            )
        return at, speed


_TABLE = "profile table"


@dataclass(frozen=True, eq=False)
class ProfileOptions:
    """Options of all profiles; each takes what it knows.

    Attributes
    ----------
    exponent : float
        n of the power law.
    table : SpeedTable or None
        For the table.
    """

    exponent: float = DEFAULT_EXPONENT
    table: SpeedTable | None = None


ProfileShape = Callable[[PortPatch, ProfileOptions], NDArray[np.float64]]
"""Takes a port and options; returns speeds along the normal at its samples, shape (n_samples,), none negative."""
