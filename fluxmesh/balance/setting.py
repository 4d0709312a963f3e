"""What a balance needs beside the table of integrals."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError
from fluxmesh.field.frame import Frame
from fluxmesh.surface.surface import Group, Role

__all__ = ["GroupData", "Hardware", "Setting"]


@dataclass(frozen=True, eq=False)
class GroupData:
    """Which quantities each group has.

    Attributes
    ----------
    flux, pressure, traction : ndarray of bool, shape (n_groups,)
        Whether mass and momentum flux, pressure, and viscous traction are known.
    """

    flux: NDArray[np.bool_]
    pressure: NDArray[np.bool_]
    traction: NDArray[np.bool_]


@dataclass(frozen=True)
class Hardware:
    """The device that the walls belong to.

    Attributes
    ----------
    mass : float
        kg.
    centre : tuple of 3 floats
        Centre of mass, m.

    Raises
    ------
    FieldError
        A mass that is negative or no number, or a centre that is no point.
    """

    mass: float
    centre: tuple[float, float, float]

    def __post_init__(self) -> None:
        """Check mass and centre at the door."""
        centre = self.centre if isinstance(self.centre, (tuple, list, np.ndarray)) else ()
        numbers = [self.mass, *centre]
        sound = len(numbers) == 4 and all(isinstance(x, (int, float)) and np.isfinite(x) for x in numbers)
        if not sound or self.mass < 0:
            raise FieldError(
                f"hardware has mass {self.mass!r} and centre {self.centre!r}",
                remedy="Give a mass in kg, not negative, and three coordinates in metres",
            )


@dataclass(frozen=True, eq=False)
class Setting:
    """Groups, body forces and reference points of a balance.

    Attributes
    ----------
    groups : tuple of Group
        One a row of the table.
    data : GroupData
        What is known where.
    closed : bool
        Whether the surface is closed.
    gravity : tuple of 3 floats
        m/s².
    fluid_density : float or None
        Density that the enclosed volume is weighed with, kg/m^3; None when
        there is none.
    anchor : tuple of 3 floats
        Point that moments and the reaction are about, m.
    hardware : Hardware or None
        None when its mass is not given.
    supplied : tuple of str
        Groups whose pressure or flow was supplied as one value, not exported.
    heat_ratio, ambient : float or None
        Of an ideal gas, and the ambient absolute pressure in Pa: for Mach numbers.
    frame : Frame or None
        How the control surface moves; None where it stands.
    """

    groups: tuple[Group, ...]
    data: GroupData
    closed: bool
    gravity: tuple[float, float, float] = (0.0, 0.0, 0.0)
    fluid_density: float | None = None
    anchor: tuple[float, float, float] = (0.0, 0.0, 0.0)
    hardware: Hardware | None = field(default=None)
    supplied: tuple[str, ...] = ()
    heat_ratio: float | None = None
    ambient: float | None = None
    frame: Frame | None = None

    def walls(self) -> NDArray[np.bool_]:
        """Return which groups are hardware, shape (n_groups,)."""
        return np.array([group.role is Role.WALL for group in self.groups])

    def ports(self) -> NDArray[np.bool_]:
        """Return which groups flow may pass, shape (n_groups,)."""
        return np.array([group.role.is_port for group in self.groups])
