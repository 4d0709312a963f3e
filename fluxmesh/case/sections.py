"""The small tables of a case: surface, fluid, hardware, anchor, closure, reported."""

from __future__ import annotations

from typing import Literal

from fluxmesh.case.values import (
    AbsolutePressure,
    Acceleration,
    Density,
    FilePath,
    Force,
    GasConstant,
    HeatCapacity,
    HeatRatio,
    Length,
    LengthUnit,
    Mass,
    Moment,
    Place,
    Share,
    Table,
    Temperature,
    Text,
    Texts,
    UnitScale,
    Viscosity,
)

__all__ = [
    "AnchorSection",
    "ClosureSection",
    "FluidSection",
    "GroupNames",
    "HardwareSection",
    "ReportedSection",
    "SurfaceSection",
]


class GroupNames(Table):
    """Where the names of the groups are in the file; one of the two.

    Attributes
    ----------
    array : str or None
        A face array whose values tell the groups apart.
    sets : bool
        Whether named sets or blocks in the file are the groups.
    """

    array: Text | None = None
    sets: bool = False


class SurfaceSection(Table):
    """``[surface]``: the mesh.

    Attributes
    ----------
    file : Path or None
        One file with all faces.
    files : dict of str to Path, or None
        Instead: one file a group.
    length_unit : UnitScale
        Unit of the coordinates in the file.
    closed : bool
        False for an open piece: integrals of each group, no volume, no balance.
    groups : GroupNames or None
        How the file tells the groups apart; None where it does not.
    weld : Measured or None
        Points closer than this, in metres, may be joined to close gaps.
    skin : bool
        Whether the skin of the file's volume cells is the surface.
    mirror : bool
        Whether a part model cut at its symmetry groups is reported whole.
    facets_are_geometry : bool
        Whether the flow was computed within these very facets, so that they stand
        for no curved surface.
    """

    file: FilePath | None = None
    files: dict[str, FilePath] | None = None
    length_unit: LengthUnit = UnitScale("m", 1.0)
    closed: bool = True
    groups: GroupNames | None = None
    weld: Length | None = None
    skin: bool = False
    mirror: bool = False
    facets_are_geometry: bool = False


class FluidSection(Table):
    """``[fluid]``: its properties.

    Attributes
    ----------
    name : str or None
        A fluid whose properties are taken from a library, where they are not given.
    density : Measured or None
        In kg/m³; None where an array or each group has it. Beside an array
        it serves for the removed head and the weight only.
    ambient_pressure : Measured or None
        In Pa, absolute.
    gravity : tuple of 3 float
        Acceleration of gravity in m/s²; default none.
    law : {"ideal-gas"} or None
        Density from absolute pressure and temperature; None for a density
        that is given.
    gas_constant, heat_ratio : Measured or None
        Of the gas: J/(kg K), and the ratio of the heats, which Mach number and
        energy need.
    temperature : Measured or None
        In K, where an array or a group does not have it.
    pressure : Measured or None
        Absolute, in Pa, at which the properties of a named fluid are taken; that of
        the surroundings by default.
    heat_capacity : Measured or None
        At constant pressure, in J/(kg K), for the energy.
    viscosity : Measured or None
        In Pa s; for a traction from the velocity gradient.
    """

    name: Text | None = None
    pressure: AbsolutePressure | None = None
    density: Density | None = None
    ambient_pressure: AbsolutePressure | None = None
    gravity: Acceleration = (0.0, 0.0, 0.0)
    law: Literal["ideal-gas"] | None = None
    gas_constant: GasConstant | None = None
    temperature: Temperature | None = None
    heat_ratio: HeatRatio | None = None
    heat_capacity: HeatCapacity | None = None
    viscosity: Viscosity | None = None


class HardwareSection(Table):
    """``[hardware]``: what the flow loads.

    Attributes
    ----------
    mass : Measured or None
        In kg, without the fluid.
    centre : tuple of 3 float, or None
        Centre of gravity in metres.
    """

    mass: Mass | None = None
    centre: Place | None = None


class AnchorSection(Table):
    """``[anchor]``: where the hardware is held.

    Attributes
    ----------
    at : tuple of 3 float
        Point in metres about which the reaction moment is taken.
    """

    at: Place = (0.0, 0.0, 0.0)


class ClosureSection(Table):
    """``[closure]``: when a balance counts as closed.

    Attributes
    ----------
    tolerance : float
        Largest relative residual.
    encloses_hardware : bool
        For a surface without walls: whether hardware is inside, so that the
        balance gives the load on it.
    """

    tolerance: Share = 0.01
    encloses_hardware: bool = True


class ReportedSection(Table):
    """``[reported]``: the load that the solver printed.

    Attributes
    ----------
    force : tuple of 3 float, or None
        In N, of the flow on the hardware.
    moment : tuple of 3 float, or None
        In N m, about the anchor point.
    on : tuple of str, or None
        Groups it was printed for; None stands for all walls.
    """

    force: Force | None = None
    moment: Moment | None = None
    on: Texts | None = None
