"""How the control surface moves, and how what it holds changes: ``[frame]`` and ``[storage]``."""

from __future__ import annotations

from typing import Annotated

from pydantic import BeforeValidator, Field

from fluxmesh.case.arrays import file_alone
from fluxmesh.case.values import (
    Acceleration,
    AngularRate,
    Direction,
    FilePath,
    Force,
    LengthUnit,
    MassRate,
    Moment,
    Place,
    Power,
    Table,
    Time,
    UnitScale,
    Velocity,
)

__all__ = ["Contained", "FrameSection", "Rotation", "Snapshot", "StorageSection"]


class Rotation(Table):
    """A steady turning of the control surface.

    Attributes
    ----------
    rate : Measured
        Angular speed in rad/s, by the right-hand rule about `axis`.
    axis : tuple of 3 float
        Unit vector along the axis.
    through : tuple of 3 float
        A point on the axis, m.
    """

    rate: AngularRate = Field(description='an angular speed, such as "1450 rpm"')
    axis: Direction = Field(description="the direction of the axis, such as [0, 0, 1]")
    through: Place = (0.0, 0.0, 0.0)


class Contained(Table):
    """A volume file that holds the flow inside the control surface.

    Attributes
    ----------
    file : Path
        The file; its arrays have the names that ``[flow]`` gives.
    unit : UnitScale
        Length unit of its coordinates.
    """

    file: FilePath = Field(description='the name of a volume file, such as "inside.vtu"')
    unit: LengthUnit = UnitScale("m", 1.0)


class FrameSection(Table):
    """``[frame]``: the motion of the control surface.

    Attributes
    ----------
    velocity : tuple of 3 float
        Of the surface (where it turns: of the axis), m/s.
    acceleration : tuple of 3 float
        Of the surface (where it turns: of the axis), m/s².
    rotation : Rotation or None
        How it turns.
    volume : Contained or None
        The flow inside, for what the surface alone cannot tell of a turning one.
    """

    velocity: Velocity = (0.0, 0.0, 0.0)
    acceleration: Acceleration = (0.0, 0.0, 0.0)
    rotation: Rotation | None = None
    volume: Annotated[Contained, BeforeValidator(file_alone)] | None = None


class Snapshot(Table):
    """The flow at one instant.

    Attributes
    ----------
    time : Measured
        s.
    volume : Contained or None
        The flow inside.
    surface : Path or None
        The export of the surface at that time.
    """

    time: Time = Field(description='a time, such as "0.1 s"')
    volume: Annotated[Contained, BeforeValidator(file_alone)] | None = None
    surface: FilePath | None = None


class StorageSection(Table):
    """``[storage]``: rates of what the volume holds, as seen from the control surface.

    Attributes
    ----------
    mass_rate : Measured or None
        kg/s.
    momentum_rate : tuple of 3 float, or None
        Rate of the momentum inside, N.
    angular_momentum_rate : tuple of 3 float, or None
        Rate of the angular momentum inside, about the anchor, N m.
    energy_rate : Measured or None
        Rate of the energy inside, W.
    at : Measured or None
        The time of the surface's export, where rates come from snapshots, s.
    snapshots : tuple of Snapshot
        The flow at several times; with a surface each, the case is a series.
    """

    mass_rate: MassRate | None = None
    momentum_rate: Force | None = None
    angular_momentum_rate: Moment | None = None
    energy_rate: Power | None = None
    at: Time | None = None
    snapshots: Annotated[tuple[Snapshot, ...], Field(strict=False)] = ()

    def is_series(self) -> bool:
        """Return whether the case is a series of instants, each with a surface of its own."""
        return bool(self.snapshots) and all(snapshot.surface is not None for snapshot in self.snapshots)

    def given_rates(self) -> tuple[str, ...]:
        """Return the keys of the rates that are given."""
        keys = ("mass_rate", "momentum_rate", "angular_momentum_rate", "energy_rate")
        return tuple(key for key in keys if getattr(self, key) is not None)
