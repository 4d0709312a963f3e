"""``[groups.NAME]``: which faces a group has, what it is to the flow, and what is supplied for it."""

from __future__ import annotations

import math
from typing import Annotated, Literal

from pydantic import Field

from fluxmesh.case.values import (
    Angle,
    Density,
    Direction,
    Exponent,
    LengthUnit,
    MassRate,
    Numbers,
    Place,
    Pressure,
    SpecificEnergy,
    Speed,
    Table,
    Tags,
    Temperature,
    UnitScale,
    Velocity,
    VolumeRate,
)
from fluxmesh.surface.surface import Role

__all__ = ["SUPPLIED_FLOW", "GroupSection", "Pick", "ProfileTable"]

SUPPLIED_FLOW = ("flow_rate", "mass_flow", "speed", "velocity")
"""Keys that say how much flow passes; a group may have one of them."""


class Pick(Table):
    """A rule that picks a planar region of a mesh without tags.

    Attributes
    ----------
    normal : tuple of 3 float
        Unit normal of the region, out of the fluid.
    near : tuple of 3 float
        A point in metres; of the planar regions with that normal the nearest
        is taken.
    angle : float
        How far in radians the normal of a face may be off; default 1 degree.
    """

    normal: Direction = Field(description="the normal of the plane, out of the fluid, such as [0, 0, 1]")
    near: Place = Field(description="a point in or near the region, such as [0.1, 0, 0.25] in metres")
    angle: Angle = math.radians(1.0)


class ProfileTable(Table):
    """A measured or computed profile across a port.

    Attributes
    ----------
    radius, wall_distance : tuple of float, or None
        One of them, rising: distance from the middle of the port, or from its wall.
    unit : UnitScale
        Unit of these distances.
    speed : tuple of float
        Speed at each distance, in any unit: the profile is scaled to the flow.
    """

    radius: Numbers | None = None
    wall_distance: Numbers | None = None
    unit: LengthUnit = UnitScale("m", 1.0)
    speed: Numbers = Field(description="a list of speeds, such as [2.0, 1.8, 0.9]")


class GroupSection(Table):
    """A named set of faces.

    Attributes
    ----------
    role : Role
        What the group is to the flow.
    tag : tuple of int or str, or None
        Values of the group array, or names of sets, that make the group; None
        stands for the group's own name.
    pick : Pick or None
        A rule instead.
    rest : bool
        Whether the group takes the faces that no other one has.
    flow_rate, mass_flow, speed : Measured or None
        Volume flow in m³/s, mass flow in kg/s, mean speed along the normal in
        m/s. A magnitude for an inlet or outlet; for an open group above zero
        where the flow leaves.
    velocity : tuple of 3 float, or None
        Velocity in m/s instead.
    velocity_frame : {"absolute", "relative"}
        Whether `velocity` is that in the inertial frame, or relative to the
        control surface; the other keys are through the surface, so relative.
    from_continuity : bool
        Whether the flow is solved from the mass balance; one group at most.
    profile : {"uniform", "laminar", "power-law", "table"}
        How the supplied flow is spread over the group.
    exponent : Measured or None
        n of the power law, speed ~ (distance from the wall)^(1/n); default 7.
    profile_table : ProfileTable or None
        The table, for profile = "table".
    pressure : Measured or None
        Static pressure in Pa.
    pressure_kind : {"gauge", "absolute"}
        What `pressure` is.
    density : Measured or None
        Density in kg/m³ where it differs from that of the fluid.
    temperature : Measured or None
        In K: of an ideal gas, or for the energy.
    enthalpy : Measured or None
        In J/kg, for the energy.
    carried : dict of str to float
        Values of the scalars of ``[[carried]]``, by name.
    """

    role: Role = Field(strict=False, description="a role: inlet, outlet, open, wall or symmetry")
    tag: Tags | None = None
    pick: Pick | None = None
    rest: bool = False
    flow_rate: VolumeRate | None = None
    mass_flow: MassRate | None = None
    speed: Speed | None = None
    velocity: Velocity | None = None
    velocity_frame: Literal["absolute", "relative"] = "absolute"
    from_continuity: bool = False
    profile: Literal["uniform", "laminar", "power-law", "table"] = "uniform"
    exponent: Exponent | None = None
    profile_table: ProfileTable | None = None
    pressure: Pressure | None = None
    pressure_kind: Literal["gauge", "absolute"] = "gauge"
    density: Density | None = None
    temperature: Temperature | None = None
    enthalpy: SpecificEnergy | None = None
    carried: dict[str, Annotated[float, Field(strict=False, allow_inf_nan=False)]] = Field(default_factory=dict)

    def supplied_flow(self) -> tuple[str, ...]:
        """Return the keys of the supplied flow that are given.

        Returns
        -------
        tuple of str
            From `SUPPLIED_FLOW`; in a case that was read, at most one.
        """
        return tuple(key for key in SUPPLIED_FLOW if getattr(self, key) is not None)
