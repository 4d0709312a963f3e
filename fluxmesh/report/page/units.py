"""One unit a quantity for a whole page: chosen by the largest figure, SI and US customary."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Final

from fluxmesh.units.expression import parse_unit

__all__ = ["QUANTITIES", "PageUnit", "PageUnits"]


@dataclass(frozen=True)
class PageUnit:
    """A unit as a page shows it.

    Attributes
    ----------
    symbol : str
        As printed.
    factor : float
        Value of one unit in SI.
    offset : float
        SI value of its zero; not 0 for temperatures only.
    """

    symbol: str
    factor: float
    offset: float = 0.0

    def of(self, value: float) -> float:
        """Return a value in SI in this unit."""
        return (value - self.offset) / self.factor

    def width(self, value: float) -> float:
        """Return a difference in SI in this unit."""
        return value / self.factor


# A unit: symbol, how the table of units writes it, and the least that the largest figure must be in it.
# The last of each list takes what is smaller.
_Choice = tuple[str, str, float]

_SI: Final[Mapping[str, tuple[_Choice, ...]]] = {
    "force": (("MN", "MN", 20.0), ("kN", "kN", 20.0), ("N", "N", 0.0)),
    "moment": (("MN·m", "MN m", 20.0), ("kN·m", "kN m", 20.0), ("N·m", "N m", 0.0)),
    "impulse": (("kN·s", "kN s", 20.0), ("N·s", "N s", 0.0)),
    "angular impulse": (("kN·m·s", "kN m s", 20.0), ("N·m·s", "N m s", 0.0)),
    "mass flow": (("kg/s", "kg/s", 0.1), ("g/s", "g/s", 0.0)),
    "volume flow": (("m³/s", "m^3/s", 1.0), ("L/s", "L/s", 0.1), ("mL/s", "mL/s", 0.0)),
    "pressure": (("MPa", "MPa", 20.0), ("kPa", "kPa", 10.0), ("Pa", "Pa", 0.0)),
    "area": (("m²", "m^2", 1.0), ("cm²", "cm^2", 1.0), ("mm²", "mm^2", 0.0)),
    "volume": (("m³", "m^3", 1.0), ("L", "L", 0.1), ("mL", "mL", 0.0)),
    "length": (("m", "m", 10.0), ("mm", "mm", 0.0)),
    "mass": (("t", "t", 20.0), ("kg", "kg", 0.1), ("g", "g", 0.0)),
    "power": (("MW", "MW", 20.0), ("kW", "kW", 20.0), ("W", "W", 0.0)),
    "speed": (("m/s", "m/s", 0.0),),
    "acceleration": (("m/s²", "m/s^2", 0.0),),
    "density": (("kg/m³", "kg/m^3", 0.0),),
    "temperature": (("K", "K", 0.0),),
    "turning": (("rad/s", "rad/s", 0.0),),
    "rotation": (("rev/min", "rpm", 0.0),),
    "time": (("s", "s", 0.0),),
}
_US: Final[Mapping[str, tuple[_Choice, ...]]] = {
    "force": (("lbf", "lbf", 0.0),),
    "moment": (("lbf·ft", "lbf ft", 0.0),),
    "impulse": (("lbf·s", "lbf s", 0.0),),
    "angular impulse": (("lbf·ft·s", "lbf ft s", 0.0),),
    "mass flow": (("lb/s", "lb/s", 0.0),),
    "volume flow": (("gal/min", "gal/min", 0.0),),
    "pressure": (("psi", "psi", 0.0),),
    "area": (("ft²", "ft^2", 10.0), ("in²", "in^2", 0.0)),
    "volume": (("ft³", "ft^3", 1.0), ("in³", "in^3", 0.0)),
    "length": (("ft", "ft", 30.0), ("in", "in", 0.0)),
    "mass": (("lb", "lb", 0.0),),
    "power": (("hp", "hp", 1.0), ("ft·lbf/s", "ft lbf/s", 0.0)),
    "speed": (("ft/s", "ft/s", 0.0),),
    "acceleration": (("ft/s²", "ft/s^2", 0.0),),
    "density": (("lb/ft³", "lb/ft^3", 0.0),),
    "temperature": (("°F", "degF", 0.0),),
}

QUANTITIES: Final = tuple(_SI)
"""Quantities that have units; others are printed as plain numbers."""


@dataclass
class PageUnits:
    """The units of one page.

    Figures are noted first, then the units stand: the largest figure of a
    quantity decides, so that a quantity has one unit wherever it is printed.

    Attributes
    ----------
    system : {"si", "us"}
        ``us`` shows US customary units beside SI.
    largest : dict
        Largest size noted of each quantity, SI.
    """

    system: str = "si"
    largest: dict[str, float] = field(default_factory=dict)

    def __post_init__(self) -> None:
        """Refuse a system that is not known."""
        if self.system not in ("si", "us"):
            raise ValueError(f'units are "si" or "us", not {self.system!r}')

    def note(self, quantity: str, value: float) -> None:
        """Take a figure into account.

        Parameters
        ----------
        quantity : str
            One of `QUANTITIES`, or any other word, which has no unit.
        value : float
            SI.
        """
        if quantity in _SI:
            self.largest[quantity] = max(self.largest.get(quantity, 0.0), abs(value))

    def si(self, quantity: str) -> PageUnit:
        """Return the SI unit of a quantity; without a symbol for a plain number."""
        return self._chosen(_SI, quantity)

    def us(self, quantity: str) -> PageUnit | None:
        """Return the US customary unit of a quantity; None where it is not shown or there is none."""
        if self.system != "us" or quantity not in _US:
            return None
        return self._chosen(_US, quantity)

    def symbols(self, quantity: str) -> str:
        """Return the symbols that stand in a heading: "kPa", or "kPa · psi" side by side."""
        us = self.us(quantity)
        si = self.si(quantity).symbol
        return si if us is None else f"{si} | {us.symbol}"

    def _chosen(self, lists: Mapping[str, tuple[_Choice, ...]], quantity: str) -> PageUnit:
        choices = lists.get(quantity)
        if choices is None:
            return PageUnit("", 1.0)
        largest = self.largest.get(quantity, 0.0)
        for symbol, written, least in choices:
            unit = parse_unit(written)
            # a page that shows nothing but zeros gets the unit of the middle of the road
            if largest >= least * unit.factor and (largest > 0.0 or least <= 1.0):
                return PageUnit(symbol, unit.factor, unit.offset)
        raise AssertionError(f"the units of {quantity} leave out small figures")
