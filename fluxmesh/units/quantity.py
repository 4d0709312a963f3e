"""Quantities as a person writes them -> numbers in SI, with their plus-minus."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from numbers import Real

from fluxmesh.errors import UnitError
from fluxmesh.units.expression import parse_unit
from fluxmesh.units.table import DIMENSIONLESS, UNITS, Unit
from fluxmesh.units.wording import described, dimension_example, dimension_name, nearest, quoted, with_article

__all__ = ["LARGEST", "Measured", "parse_quantity", "parse_vector", "unit_factor"]

LARGEST = 1e20
"""Largest size in SI that a number of a case, a mesh or a field may have: products of several, squared, are floats."""

_LONGEST_TEXT = 160
_NUMBER = r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?"
_WITH_UNIT = re.compile(rf" *({_NUMBER}) *(.*?) *", re.DOTALL)
_PLUS_MINUS = re.compile(r"\+/-|\+-|±")
_BRACKETED = re.compile(r" *\(([^()]*)\)(.*)", re.DOTALL)


@dataclass(frozen=True, slots=True)
class Measured:
    """A number in SI with its doubt.

    Attributes
    ----------
    value : float
        In SI, finite.
    half_width : float
        Half width of the 95 % interval around the value, in SI, 0 or more;
        0 where none was given.
    """

    value: float
    half_width: float = 0.0

    def __post_init__(self) -> None:
        """Check once, at the door."""
        if not (math.isfinite(self.value) and math.isfinite(self.half_width) and self.half_width >= 0.0):
            raise UnitError(
                f"{self.value} +/- {self.half_width} is no measured value",
                remedy="Both numbers must be finite, and the half width not negative",
            )

    def __float__(self) -> float:
        """Return the value without its doubt."""
        return self.value


def parse_quantity(text_or_number: object, dimension_unit: str, key: str) -> Measured:
    """Read a quantity.

    Parameters
    ----------
    text_or_number : str, int, float or Measured
        Such as ``"310 kPa"``, ``"998.2 +/- 0.5 kg/m^3"``, ``"310 kPa ± 1 %"``
        or a bare number in SI. What stands after the plus-minus is the half
        width of the 95 % interval; a unit written once, at the end, serves
        both. A temperature may be on a scale (``"20 degC"``).
    dimension_unit : str
        An SI unit with the dimension that is needed, such as ``Pa``.
    key : str
        Where the quantity stands, for the message.

    Returns
    -------
    Measured
        In SI.

    Raises
    ------
    UnitError
        Not a quantity, not finite, of an unknown unit or another dimension.
    """
    needed = parse_unit(dimension_unit)
    if isinstance(text_or_number, Measured):
        return text_or_number
    try:
        if isinstance(text_or_number, str):
            return _from_text(text_or_number, needed, dimension_unit)
        return Measured(_number(text_or_number))
    except UnitError as error:
        raise UnitError(error.found, where=key, remedy=error.remedy or _allowed(needed, dimension_unit)) from error


def parse_vector(value: object, dimension_unit: str, key: str) -> tuple[float, float, float]:
    """Read a vector.

    Parameters
    ----------
    value : sequence or mapping
        ``[x, y, z]`` as bare numbers in SI, or
        ``{"value": [x, y, z], "unit": "ft/s"}``.
    dimension_unit : str
        An SI unit with the dimension that is needed, such as ``m/s``.
    key : str
        Where the vector stands, for the message.

    Returns
    -------
    tuple of 3 float
        Components in SI.

    Raises
    ------
    UnitError
        Not three finite numbers, or a unit that does not fit.
    """
    example = f'Write [x, y, z] in {dimension_unit}, or {{value = [x, y, z], unit = "{dimension_unit}"}}'
    if not dimension_unit:
        example = "Write [x, y, z]"
    factor = 1.0
    if isinstance(value, Mapping):
        if set(value) != {"value", "unit"}:
            raise UnitError(f"found a table with {', '.join(map(quoted, value)) or 'nothing'}", key, example)
        unit, value = value["unit"], value["value"]
        if not isinstance(unit, str):
            raise UnitError(f"the unit is {described(unit)}", key, example)
        factor = unit_factor(unit, dimension_unit, key)
    if not isinstance(value, (list, tuple)) or len(value) != 3:
        raise UnitError(f"found {described(value)}, not a vector of 3 components", key, example)
    for part in value:
        if isinstance(part, bool) or not isinstance(part, Real):
            raise UnitError(f"a component is {described(part)}, not a number", key, example)
    try:
        x, y, z = (float(part) * factor for part in value)
    except OverflowError:
        x = y = z = math.inf
    if not (math.isfinite(x) and math.isfinite(y) and math.isfinite(z)):
        raise UnitError("a component is not finite", key, example)
    return (x, y, z)


def unit_factor(unit: str, dimension_unit: str, key: str) -> float:
    """Give the factor that takes numbers in a unit to SI.

    Parameters
    ----------
    unit : str
        The unit of an array, such as ``mm`` or ``psi``.
    dimension_unit : str
        An SI unit with the dimension that is needed, such as ``m``.
    key : str
        Where the unit stands, for the message.

    Returns
    -------
    float
        Above zero.

    Raises
    ------
    UnitError
        Unknown unit, another dimension, or a temperature scale whose zero is
        not absolute zero, for which there is no such factor.
    """
    needed = parse_unit(dimension_unit)
    try:
        found = parse_unit(unit)
    except UnitError as error:
        raise UnitError(error.found, where=key, remedy=error.remedy or _allowed_unit(needed, dimension_unit)) from error
    if found.dimension != needed.dimension:
        raise UnitError(
            f"found {quoted(unit)}, a unit of {dimension_name(found.dimension)}{_slip(unit, needed)}",
            where=key,
            remedy=_allowed_unit(needed, dimension_unit),
        )
    if found.offset:
        raise UnitError(
            f"{quoted(unit)} starts from another zero, so no factor takes it to {dimension_unit}",
            where=key,
            remedy=f"Export in {dimension_unit}",
        )
    return found.factor


def _from_text(text: str, needed: Unit, dimension_unit: str) -> Measured:
    if len(text) > _LONGEST_TEXT:
        raise UnitError(f"{quoted(text)} is too long for a quantity")
    plain = " ".join(text.replace("−", "-").split())
    # "(998.2 +/- 0.5) kg/m^3" says the same as "998.2 +/- 0.5 kg/m^3"
    bracketed = _BRACKETED.fullmatch(plain)
    parts = _PLUS_MINUS.split(f"{bracketed[1]} {bracketed[2]}" if bracketed else plain)
    if len(parts) > 2:
        raise UnitError(f"{quoted(text)} has more than one plus-minus")
    number, unit_text = _split(parts[0], text)
    if len(parts) == 1:
        return Measured(_scaled(number, _fitting(unit_text, text, needed, dimension_unit), text))
    half_width, width_text = _split(parts[1], text)
    if half_width < 0.0:
        raise UnitError(f"{quoted(text)} has a negative half width")
    if unit_text and not width_text:
        raise UnitError(
            f"{quoted(text)} does not say the unit of its half width",
            remedy=f'Write the unit last, such as "{number:g} +/- {half_width:g} {unit_text}"',
        )
    unit = _fitting(unit_text or width_text, text, needed, dimension_unit)
    value = _scaled(number, unit, text)
    if unit_text != "%" and unit_text and width_text == "%":
        if unit.offset:
            raise UnitError(f"{quoted(text)} has a share of a temperature as its half width", remedy="Give it in K")
        return Measured(value, _finite(abs(number * unit.factor) * half_width / 100.0, text))
    width_unit = _fitting(width_text, text, needed, dimension_unit)
    # a width is an interval: the zero of a temperature scale does not enter
    return Measured(value, _finite(half_width * width_unit.factor, text))


def _split(part: str, text: str) -> tuple[float, str]:
    """Split one side of a plus-minus into number and unit text."""
    match = _WITH_UNIT.fullmatch(part)
    if match is None:
        raise UnitError(
            f"{quoted(text)} does not start with a number" if part.strip() else f"{quoted(text)} breaks off"
        )
    if match[2].startswith(","):
        raise UnitError(
            f"{quoted(text)} has a comma in a number",
            remedy="Write a point for the decimals, and no thousands marks",
        )
    return float(match[1]), match[2]


def _fitting(unit_text: str, text: str, needed: Unit, dimension_unit: str) -> Unit:
    unit = parse_unit(unit_text)
    if unit.dimension != needed.dimension:
        if not unit_text:
            raise UnitError(f"{quoted(text)} has no unit", remedy=_allowed(needed, dimension_unit))
        raise UnitError(f"{quoted(text)} is {with_article(dimension_name(unit.dimension))}{_slip(unit_text, needed)}")
    return unit


def _scaled(number: float, unit: Unit, text: str) -> float:
    return _finite(number * unit.factor + unit.offset, text)


def _finite(number: float, text: str) -> float:
    if not math.isfinite(number):
        raise UnitError(f"{quoted(text)} is not a finite number")
    return number


def _number(value: object) -> float:
    if isinstance(value, bool) or not isinstance(value, Real):
        raise UnitError(f"found {described(value)}")
    try:
        number = float(value)
    except OverflowError:
        number = math.inf
    if not math.isfinite(number):
        raise UnitError(f"found {described(value)}, which is not finite")
    return number


def _slip(unit_text: str, needed: Unit) -> str:
    """Name the unit that was probably meant when a known one has the wrong dimension."""
    fitting = [name for name, unit in UNITS.items() if unit.dimension == needed.dimension]
    meant = nearest(unit_text, [name for name in fitting if name.casefold() == unit_text.casefold()])
    if meant is None and unit_text in ("lb", "lbs", "lbm", "kg"):
        meant = {"kg": "kgf"}.get(unit_text, "lbf") if needed.dimension == UNITS["N"].dimension else None
    if meant is None and unit_text in ("C", "F") and needed.dimension == UNITS["K"].dimension:
        meant = f"deg{unit_text}"
    return f" (did you mean {meant}?)" if meant else ""


def _allowed(needed: Unit, dimension_unit: str) -> str:
    if needed.dimension == DIMENSIONLESS and dimension_unit:
        return f'An angle is needed, such as "5 deg" or "0.1 {dimension_unit}"'
    if needed.dimension == DIMENSIONLESS:
        return "A plain number is needed, such as 0.5"
    example = dimension_example(needed.dimension) or f"2.5 {dimension_unit}"
    name = with_article(dimension_name(needed.dimension))
    return f'{name[0].upper()}{name[1:]} is needed, such as "{example}" or a bare number in {dimension_unit}'


def _allowed_unit(needed: Unit, dimension_unit: str) -> str:
    return f'A unit of {dimension_name(needed.dimension)} is needed, such as "{dimension_unit}"'
