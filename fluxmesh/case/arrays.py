"""``[flow]``: which array of the file is what."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import BeforeValidator, Field, ValidationInfo
from pydantic_core import CoreSchema, core_schema

from fluxmesh.case.values import (
    ArrayNames,
    DensityUnit,
    EnthalpyUnit,
    FilePath,
    Length,
    LengthUnit,
    MassFlowUnit,
    Place,
    RateUnit,
    SpeedUnit,
    StressUnit,
    Table,
    TemperatureUnit,
    Text,
    UnitScale,
)
from fluxmesh.errors import UnitError
from fluxmesh.units import unit_factor
from fluxmesh.units.wording import described

__all__ = [
    "DensityArray",
    "EnthalpyArray",
    "FlowSection",
    "GradientArray",
    "MassFluxArray",
    "PointSource",
    "PressureArray",
    "StressArray",
    "TemperatureArray",
    "TractionArray",
    "VelocityArray",
    "VolumeSource",
    "file_alone",
]

_KINEMATIC_UNIT = "m^2/s^2"
_ARRAY = Field(description='the name of an array in the file, such as "U"')


class VelocityArray(Table):
    """The velocity of the fluid.

    Attributes
    ----------
    array : tuple of str
        One vector array, or the arrays of the three components.
    unit : UnitScale
        Its unit.
    frame : {"absolute", "relative"}
        In which frame the velocity was exported: the inertial one, or that of
        the control surface.
    at : {"nodes", "faces"} or None
        Where to look when the name occurs on both.
    """

    array: ArrayNames = _ARRAY
    unit: SpeedUnit = UnitScale("m/s", 1.0)
    frame: Literal["absolute", "relative"] = "absolute"
    at: Literal["nodes", "faces"] | None = None


class _ReadPressureUnit:
    """The unit of a pressure array: its dimension depends on the kind read just before."""

    def __get_pydantic_core_schema__(self, _source: object, _handler: object) -> CoreSchema:
        return core_schema.with_info_plain_validator_function(self._read)

    @staticmethod
    def _read(value: object, info: ValidationInfo) -> UnitScale:
        if isinstance(value, UnitScale):
            return value
        kind = info.data.get("kind")
        needed = _KINEMATIC_UNIT if kind == "kinematic" else "Pa"
        text = needed if value is None else value
        if not isinstance(text, str):
            raise UnitError(f"found {described(text)}, not a unit", remedy=f'Write a unit such as "{needed}"')
        if kind is None:
            # the kind is at fault and gets the message; which unit fits is not known
            return UnitScale(text, 1.0)
        try:
            return UnitScale(text, unit_factor(text, needed, ""))
        except UnitError as error:
            remedy = f'{error.remedy}, while kind is "{kind}"'
            raise UnitError(error.found, remedy=remedy) from error


class PressureArray(Table):
    """The static pressure of the fluid.

    Attributes
    ----------
    array : str
        Name of a scalar array.
    kind : {"gauge", "absolute", "kinematic"}
        Static minus ambient; static; or gauge over density.
    unit : UnitScale
        Its unit: of a pressure, or for a kinematic one of pressure over density.
    head : {"included", "removed"}
        Whether the hydrostatic head is in the array, or was taken out of it
        and must be added again.
    datum : tuple of 3 float
        Point in metres where the removed head is zero.
    at : {"nodes", "faces"} or None
        Where to look when the name occurs on both.
    """

    array: Text = _ARRAY
    kind: Literal["gauge", "absolute", "kinematic"] = "gauge"
    unit: Annotated[UnitScale, _ReadPressureUnit()] = Field(default=None, validate_default=True)
    head: Literal["included", "removed"] = "included"
    datum: Place = (0.0, 0.0, 0.0)
    at: Literal["nodes", "faces"] | None = None


class TractionArray(Table):
    """The viscous traction.

    Attributes
    ----------
    array : tuple of str
        One vector array, or the arrays of the three components.
    unit : UnitScale
        Its unit.
    acts_on : {"wall", "fluid"}
        The body that the exported traction acts on.
    at : {"nodes", "faces"} or None
        Where to look when the name occurs on both.
    """

    array: ArrayNames = _ARRAY
    unit: StressUnit = UnitScale("Pa", 1.0)
    acts_on: Literal["wall", "fluid"] = "wall"
    at: Literal["nodes", "faces"] | None = None


class DensityArray(Table):
    """The density of the fluid, where it is not one constant.

    Attributes
    ----------
    array : str
        Name of a scalar array.
    unit : UnitScale
        Its unit.
    at : {"nodes", "faces"} or None
        Where to look when the name occurs on both.
    """

    array: Text = _ARRAY
    unit: DensityUnit = UnitScale("kg/m^3", 1.0)
    at: Literal["nodes", "faces"] | None = None


class TemperatureArray(Table):
    """Where the temperature is.

    Attributes
    ----------
    array : str
        Name of a scalar array.
    unit : UnitScale
        Its unit: of an absolute temperature.
    at : {"nodes", "faces"} or None
        Where to look when the name occurs on both.
    """

    array: Text = _ARRAY
    unit: TemperatureUnit = UnitScale("K", 1.0)
    at: Literal["nodes", "faces"] | None = None


class EnthalpyArray(Table):
    """Where the specific enthalpy is.

    Attributes
    ----------
    array : str
        Name of a scalar array.
    unit : UnitScale
        Its unit.
    at : {"nodes", "faces"} or None
        Where to look when the name occurs on both.
    """

    array: Text = _ARRAY
    unit: EnthalpyUnit = UnitScale("J/kg", 1.0)
    at: Literal["nodes", "faces"] | None = None


class StressArray(Table):
    """Where the viscous stress tensor is.

    Attributes
    ----------
    array : str
        An array of 6 or 9 components: the viscous part, without pressure.
    unit : UnitScale
        Its unit.
    order : {"xx yy zz xy yz xz", "xx yy zz yz xz xy"}
        Order of 6 components; 9 are row by row.
    at : {"nodes", "faces"} or None
        Where to look when the name occurs on both.
    """

    array: Text = _ARRAY
    unit: StressUnit = UnitScale("Pa", 1.0)
    order: Literal["xx yy zz xy yz xz", "xx yy zz yz xz xy"] = "xx yy zz xy yz xz"
    at: Literal["nodes", "faces"] | None = None


class GradientArray(Table):
    """Where the velocity gradient is.

    Attributes
    ----------
    array : str
        An array of 9 components; rows and columns may be exchanged, for the
        stress that is made of it is symmetric.
    unit : UnitScale
        Its unit.
    at : {"nodes", "faces"} or None
        Where to look when the name occurs on both.
    """

    array: Text = _ARRAY
    unit: RateUnit = UnitScale("1/s", 1.0)
    at: Literal["nodes", "faces"] | None = None


class VolumeSource(Table):
    """A volume file that the fields are sampled from.

    Attributes
    ----------
    file : Path
        The file.
    unit : UnitScale
        Length unit of its coordinates.
    reach : Measured or None
        How far outside all cells a place may lie, m.
    """

    file: FilePath = Field(description='the name of a file, such as "flow.vtu"')
    unit: LengthUnit = UnitScale("m", 1.0)
    reach: Length | None = None


class PointSource(Table):
    """A file of scattered points that the fields are interpolated from.

    Attributes
    ----------
    file : Path
        The file.
    coordinates : tuple of str, or None
        Names of the three columns; found by their names where not given.
    unit : UnitScale
        Length unit of the coordinates.
    reach : Measured or None
        How far from the points a place may lie, m.
    """

    file: FilePath = Field(description='the name of a file, such as "cloud.csv"')
    coordinates: ArrayNames | None = None
    unit: LengthUnit = UnitScale("m", 1.0)
    reach: Length | None = None


class MassFluxArray(Table):
    """The mass flow through each face.

    Attributes
    ----------
    array : str
        Name of a scalar array on faces, in mass a time through the face.
    unit : UnitScale
        Its unit.
    positive : {"out", "face-normal"}
        Above zero where mass leaves the volume, or where it passes along the
        normal that the corner order of the face has in the file.
    """

    array: Text = _ARRAY
    unit: MassFlowUnit = UnitScale("kg/s", 1.0)
    positive: Literal["out", "face-normal"] = "out"


def file_alone(value: object) -> object:
    """Let a bare file name stand for a table that holds nothing else.

    Parameters
    ----------
    value : object
        As read from the case.
    """
    return {"file": value} if isinstance(value, str) else value


class FlowSection(Table):
    """Which exported array is what; each may be left out.

    Attributes
    ----------
    velocity : VelocityArray or None
        Velocity.
    pressure : PressureArray or None
        Static pressure.
    traction : TractionArray or None
        Viscous traction.
    density : DensityArray or None
        Density.
    mass_flux : MassFluxArray or None
        Mass flow through each face.
    temperature : TemperatureArray or None
        Temperature: of an ideal gas, or for the energy.
    enthalpy : EnthalpyArray or None
        Specific enthalpy, for the energy.
    stress, velocity_gradient : StressArray or GradientArray, or None
        What the viscous traction is made of, in place of `traction`.
    reconstruction : {"linear", "quadratic"}
        Whether the values reported are those of the fields as exported, or of
        quadratic patches recovered from them.
    volume : VolumeSource or None
        Where the arrays are: in a volume file. By default in the file of the surface.
    points : PointSource or None
        Or at scattered points.
    """

    velocity: VelocityArray | None = None
    pressure: PressureArray | None = None
    traction: TractionArray | None = None
    density: DensityArray | None = None
    mass_flux: MassFluxArray | None = None
    temperature: TemperatureArray | None = None
    enthalpy: EnthalpyArray | None = None
    stress: StressArray | None = None
    velocity_gradient: GradientArray | None = None
    reconstruction: Literal["linear", "quadratic"] = "linear"
    volume: Annotated[VolumeSource, BeforeValidator(file_alone)] | None = None
    points: Annotated[PointSource, BeforeValidator(file_alone)] | None = None
