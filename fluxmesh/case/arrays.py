"""``[flow]``: which array of the file is what."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, ValidationInfo
from pydantic_core import CoreSchema, core_schema

from fluxmesh.case.values import (
    ArrayNames,
    DensityUnit,
    MassFlowUnit,
    Place,
    SpeedUnit,
    StressUnit,
    Table,
    Text,
    UnitScale,
)
from fluxmesh.errors import UnitError
from fluxmesh.units import unit_factor
from fluxmesh.units.wording import described

__all__ = ["DensityArray", "FlowSection", "MassFluxArray", "PressureArray", "TractionArray", "VelocityArray"]

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
    frame : {"absolute"}
        In which frame the velocity was exported: the inertial one.
    at : {"nodes", "faces"} or None
        Where to look when the name occurs on both.
    """

    array: ArrayNames = _ARRAY
    unit: SpeedUnit = UnitScale("m/s", 1.0)
    frame: Literal["absolute"] = Field(
        default="absolute", description='"absolute", and the velocity in the inertial frame'
    )
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
    """

    velocity: VelocityArray | None = None
    pressure: PressureArray | None = None
    traction: TractionArray | None = None
    density: DensityArray | None = None
    mass_flux: MassFluxArray | None = None
