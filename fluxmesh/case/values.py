"""The kinds of value that a key of the case may hold, as annotations for its models."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Annotated, Any

from pydantic import BaseModel, ConfigDict, ValidationInfo
from pydantic_core import CoreSchema, core_schema

from fluxmesh.errors import CaseError, UnitError
from fluxmesh.units import LARGEST, Measured, parse_quantity, parse_vector, unit_factor
from fluxmesh.units.wording import described, quoted

__all__ = [
    "AbsolutePressure",
    "Acceleration",
    "Angle",
    "AngularRate",
    "ArrayNames",
    "Density",
    "DensityUnit",
    "Direction",
    "EnthalpyUnit",
    "Exponent",
    "FilePath",
    "Force",
    "GasConstant",
    "HeatCapacity",
    "HeatRatio",
    "Length",
    "LengthUnit",
    "Mass",
    "MassFlowUnit",
    "MassRate",
    "Moment",
    "Numbers",
    "Place",
    "Power",
    "Pressure",
    "RateUnit",
    "Share",
    "SpecificEnergy",
    "Speed",
    "SpeedUnit",
    "StressUnit",
    "Table",
    "Tags",
    "Temperature",
    "TemperatureUnit",
    "Text",
    "Texts",
    "Time",
    "Title",
    "UnitScale",
    "Vector",
    "Velocity",
    "Viscosity",
    "VolumeRate",
]

Vector = tuple[float, float, float]
_LONGEST_PATH = 1000
_ABSURD = "No flow has that: check the number and its unit"


class Table(BaseModel):
    """A table of the case: frozen, and with no key but its own."""

    # built when a case is first read, not when a command only starts
    model_config = ConfigDict(frozen=True, extra="forbid", strict=True, defer_build=True)


@dataclass(frozen=True)
class UnitScale:
    """The unit of an array.

    Attributes
    ----------
    unit : str
        As written.
    factor : float
        What takes the array to SI.
    """

    unit: str
    factor: float


@dataclass(frozen=True)
class _Read:
    """Let a function read a value; its error becomes that of the key."""

    function: Callable[[Any], object]

    def __get_pydantic_core_schema__(self, _source: object, _handler: object) -> CoreSchema:
        return core_schema.no_info_plain_validator_function(self.function)


@dataclass(frozen=True)
class _Quantity:
    """Read a quantity of one dimension, within bounds."""

    unit: str
    least: float = -math.inf
    above: float = -math.inf

    def __get_pydantic_core_schema__(self, _source: object, _handler: object) -> CoreSchema:
        return core_schema.no_info_plain_validator_function(self._read)

    def _read(self, value: object) -> Measured:
        measured = parse_quantity(value, self.unit, "")
        if max(abs(measured.value), measured.half_width) > LARGEST:
            raise CaseError(f"found {described(value)}, which is beyond {LARGEST:g} in SI", remedy=_ABSURD)
        if measured.value < self.least:
            raise CaseError(f"found {described(value)}", remedy=f"It cannot be below {self.least:g} {self.unit}")
        if measured.value <= self.above:
            raise CaseError(f"found {described(value)}", remedy=f"It must be above {self.above:g} {self.unit}")
        return measured


def _bounded_vector(value: object, unit: str) -> Vector:
    vector = parse_vector(value, unit, "")
    if max(map(abs, vector)) > LARGEST:
        raise CaseError(f"a component is beyond {LARGEST:g} in SI", remedy=_ABSURD)
    return vector


def _vector(unit: str) -> _Read:
    return _Read(lambda value: _bounded_vector(value, unit))


def _scale(unit: str) -> _Read:
    def read(value: object) -> UnitScale:
        if isinstance(value, UnitScale):
            return value
        if not isinstance(value, str):
            raise UnitError(f"found {described(value)}, not a unit", remedy=f'Write a unit such as "{unit}"')
        return UnitScale(value, unit_factor(value, unit, ""))

    return _Read(read)


def _read_text(value: object) -> str:
    if not isinstance(value, str):
        raise CaseError(f"found {described(value)}, not a text", remedy="Write it between quotes")
    if not value.strip():
        raise CaseError("found an empty text", remedy="Write it between the quotes, or leave the key out")
    if not value.isprintable():
        raise CaseError(f"found {quoted(value)}, with characters that do not print", remedy="Leave them out")
    return value


def _read_title(value: object) -> str:
    return "" if value == "" else _read_text(value)


def _read_texts(value: object) -> tuple[str, ...]:
    if not isinstance(value, (list, tuple)) or not value:
        raise CaseError(f"found {described(value)}, not a list of names", remedy='Write such as ["shell", "flange"]')
    return tuple(_read_text(entry) for entry in value)


def _read_array_names(value: object) -> tuple[str, ...]:
    if isinstance(value, str):
        return (_read_text(value),)
    if not isinstance(value, (list, tuple)) or len(value) != 3:
        raise CaseError(
            f"found {described(value)}, not the name of an array",
            remedy='Write such as "U", or its three components ["VelocityX", "VelocityY", "VelocityZ"]',
        )
    return tuple(_read_text(entry) for entry in value)


def _read_tags(value: object) -> tuple[int | str, ...]:
    entries = value if isinstance(value, (list, tuple)) else (value,)
    remedy = 'Write the value of the group array, such as 3 or "feed", or a list of such'
    if not entries:
        raise CaseError("found an empty list", remedy=remedy)
    for entry in entries:
        if isinstance(entry, bool) or not isinstance(entry, (int, str)):
            raise CaseError(f"found {described(entry)}", remedy=remedy)
        if isinstance(entry, int) and not -(2**63) <= entry < 2**63:
            raise CaseError(f"found {described(entry)}, beyond 64 bits", remedy=remedy)
    return tuple(_read_text(entry) if isinstance(entry, str) else entry for entry in entries)


def _read_direction(value: object) -> Vector:
    direction = _bounded_vector(value, "")
    length = math.hypot(*direction)
    if not 0.0 < length < math.inf:
        raise CaseError("the direction has no length", remedy="Write such as [0, 0, 1]")
    x, y, z = (part / length for part in direction)
    return (x, y, z)


def _read_angle(value: object) -> float:
    if not isinstance(value, str):
        # a bare 1 could be a degree or a radian, and both would be a plausible tolerance
        raise UnitError(f"found {described(value)}", remedy='Write an angle with its unit, such as "1 deg"')
    angle = parse_quantity(value, "rad", "").value
    if not 0.0 < angle < math.pi / 2:
        raise CaseError(f"found {described(value)}", remedy="It must lie between 0 and 90 deg")
    return angle


def _read_numbers(value: object) -> tuple[float, ...]:
    if not isinstance(value, (list, tuple)) or len(value) < 2:
        raise CaseError(f"found {described(value)}, not a list of numbers", remedy="Write such as [0, 5, 10]")
    for entry in value:
        if isinstance(entry, bool) or not isinstance(entry, (int, float)) or not _finite(entry):
            raise CaseError(f"found {described(entry)} in a list of numbers", remedy="Write such as [0, 5, 10]")
    return tuple(float(entry) for entry in value)


def _finite(number: float) -> bool:
    try:
        return abs(float(number)) <= LARGEST
    except OverflowError:
        return False  # a whole number beyond the range of floats


def _read_share(value: object) -> float:
    share = parse_quantity(value, "", "").value
    if not 0.0 < share < 1.0:
        raise CaseError(f"found {described(value)}", remedy="It must lie between 0 and 1, such as 0.01")
    return share


def _read_path(value: object, info: ValidationInfo) -> Path:
    if isinstance(value, Path):
        return value
    folder = info.context["folder"] if isinstance(info.context, Mapping) else Path()
    text = _read_text(value)
    if len(text) > _LONGEST_PATH:
        raise CaseError(f"found a path of {len(text)} characters", remedy="Give the path of a file")
    return Path(folder) / text


class _ReadPath:
    def __get_pydantic_core_schema__(self, _source: object, _handler: object) -> CoreSchema:
        return core_schema.with_info_plain_validator_function(_read_path)


Text = Annotated[str, _Read(_read_text)]
Title = Annotated[str, _Read(_read_title)]
Texts = Annotated[tuple[str, ...], _Read(_read_texts)]
ArrayNames = Annotated[tuple[str, ...], _Read(_read_array_names)]
Tags = Annotated[tuple[int | str, ...], _Read(_read_tags)]
FilePath = Annotated[Path, _ReadPath()]
Share = Annotated[float, _Read(_read_share)]
Angle = Annotated[float, _Read(_read_angle)]
Numbers = Annotated[tuple[float, ...], _Read(_read_numbers)]

Length = Annotated[Measured, _Quantity("m", above=0.0)]
Mass = Annotated[Measured, _Quantity("kg", least=0.0)]
Density = Annotated[Measured, _Quantity("kg/m^3", above=0.0)]
Pressure = Annotated[Measured, _Quantity("Pa")]
AbsolutePressure = Annotated[Measured, _Quantity("Pa", least=0.0)]
Speed = Annotated[Measured, _Quantity("m/s")]
Temperature = Annotated[Measured, _Quantity("K", above=0.0)]
GasConstant = Annotated[Measured, _Quantity("J/(kg K)", above=0.0)]
HeatCapacity = Annotated[Measured, _Quantity("J/(kg K)", above=0.0)]
SpecificEnergy = Annotated[Measured, _Quantity("J/kg")]
Power = Annotated[Measured, _Quantity("W")]
Time = Annotated[Measured, _Quantity("s")]
AngularRate = Annotated[Measured, _Quantity("1/s")]
Viscosity = Annotated[Measured, _Quantity("Pa s", least=0.0)]
HeatRatio = Annotated[Measured, _Quantity("", above=1.0)]
Exponent = Annotated[Measured, _Quantity("", above=0.0)]
VolumeRate = Annotated[Measured, _Quantity("m^3/s")]
MassRate = Annotated[Measured, _Quantity("kg/s")]

Direction = Annotated[Vector, _Read(_read_direction)]
Place = Annotated[Vector, _vector("m")]
Velocity = Annotated[Vector, _vector("m/s")]
Acceleration = Annotated[Vector, _vector("m/s^2")]
Force = Annotated[Vector, _vector("N")]
Moment = Annotated[Vector, _vector("N m")]

LengthUnit = Annotated[UnitScale, _scale("m")]
SpeedUnit = Annotated[UnitScale, _scale("m/s")]
StressUnit = Annotated[UnitScale, _scale("Pa")]
DensityUnit = Annotated[UnitScale, _scale("kg/m^3")]
TemperatureUnit = Annotated[UnitScale, _scale("K")]
EnthalpyUnit = Annotated[UnitScale, _scale("J/kg")]
RateUnit = Annotated[UnitScale, _scale("1/s")]
MassFlowUnit = Annotated[UnitScale, _scale("kg/s")]
