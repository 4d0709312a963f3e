"""The units that the trade writes, with their values in SI.

A table rather than a registry for two reasons. Reading a case must not cost the
start-up time of a registry, and a registry that glues prefixes to names reads
some trade words as something else (``cfm`` as a centi-femtometre, ``Nm`` as a
yarn count). Names that are not here are looked up in pint.

Sources
-------
SI Brochure, 9th edition (2019), tables 4, 7 and 8, for SI and units used with it;
NIST Special Publication 811 (2008), appendix B, for the inch-pound units. The
foot, pound, standard gravity, atmosphere, litre and US gallon are exact by
definition, and so is every value derived from them here. Columns of water and
mercury are the conventional ones of SP 811 (1000 kg/m³ and 13 595.1 kg/m³ at
standard gravity). A ``gpm`` is a US gallon a minute.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

__all__ = ["DIMENSIONLESS", "UNITS", "Dimension", "Unit"]

Dimension = tuple[int, int, int, int, int, int, int]
"""Exponents of length, mass, time, temperature, current, amount and luminous intensity."""

DIMENSIONLESS: Dimension = (0, 0, 0, 0, 0, 0, 0)


@dataclass(frozen=True)
class Unit:
    """A unit in terms of SI base units.

    Attributes
    ----------
    factor : float
        Value of one unit in SI.
    dimension : tuple of 7 int
        Exponents of the base quantities, see `Dimension`.
    offset : float
        What is added after scaling; not zero only for temperatures on a
        scale whose zero is not absolute zero.
    """

    factor: float
    dimension: Dimension
    offset: float = 0.0


_INCH, _FOOT, _POUND, _GRAVITY = 0.0254, 0.3048, 0.45359237, 9.80665
_GALLON = 231 * _INCH**3
_POUND_FORCE = _POUND * _GRAVITY
_WATER, _MERCURY = 1000.0 * _GRAVITY, 13595.1 * _GRAVITY
_TURN = 2 * math.pi

# dimension: {name: value in SI}
_BY_DIMENSION: dict[tuple[int, int, int, int], dict[str, float]] = {
    (0, 0, 0, 0): {"%": 0.01, "rad": 1.0, "deg": _TURN / 360, "rev": _TURN},
    (1, 0, 0, 0): {
        "m": 1.0, "dm": 0.1, "cm": 0.01, "mm": 1e-3, "um": 1e-6, "km": 1e3,
        "in": _INCH, "inch": _INCH, "ft": _FOOT, "yd": 3 * _FOOT, "mi": 5280 * _FOOT,
        "meter": 1.0, "metre": 1.0, "foot": _FOOT, "feet": _FOOT, "yard": 3 * _FOOT, "mile": 5280 * _FOOT,
    },
    (3, 0, 0, 0): {"L": 1e-3, "l": 1e-3, "mL": 1e-6, "ml": 1e-6, "gal": _GALLON},
    (0, 1, 0, 0): {
        "kg": 1.0, "g": 1e-3, "mg": 1e-6, "t": 1e3, "tonne": 1e3,
        "lb": _POUND, "lbs": _POUND, "lbm": _POUND, "oz": _POUND / 16, "slug": _POUND_FORCE / _FOOT,
    },
    (0, 0, 1, 0): {
        "s": 1.0, "sec": 1.0, "ms": 1e-3, "us": 1e-6, "min": 60.0,
        "h": 3600.0, "hr": 3600.0, "d": 86400.0, "day": 86400.0,
        "second": 1.0, "minute": 60.0, "hour": 3600.0,
    },
    (0, 0, -1, 0): {"Hz": 1.0, "rpm": _TURN / 60},
    (0, 0, 0, 1): {"K": 1.0, "degR": 5 / 9},
    (1, 0, -1, 0): {"mph": 5280 * _FOOT / 3600, "knot": 1852 / 3600},
    (3, 0, -1, 0): {
        "gpm": _GALLON / 60, "GPM": _GALLON / 60, "lpm": 1e-3 / 60, "LPM": 1e-3 / 60,
        "cfm": _FOOT**3 / 60, "CFM": _FOOT**3 / 60,
    },
    (1, 1, -2, 0): {
        "N": 1.0, "mN": 1e-3, "kN": 1e3, "MN": 1e6,
        "kgf": _GRAVITY, "lbf": _POUND_FORCE, "kip": 1e3 * _POUND_FORCE,
    },
    (-1, 1, -2, 0): {
        "Pa": 1.0, "hPa": 100.0, "kPa": 1e3, "MPa": 1e6, "GPa": 1e9,
        "bar": 1e5, "mbar": 100.0, "atm": 101325.0,
        "psi": _POUND_FORCE / _INCH**2, "ksi": 1e3 * _POUND_FORCE / _INCH**2, "psf": _POUND_FORCE / _FOOT**2,
        "inH2O": _WATER * _INCH, "inWC": _WATER * _INCH, "inWG": _WATER * _INCH, "ftH2O": _WATER * _FOOT,
        "mmH2O": _WATER * 1e-3, "cmH2O": _WATER * 0.01, "mH2O": _WATER,
        "mmHg": _MERCURY * 1e-3, "inHg": _MERCURY * _INCH, "torr": 101325.0 / 760, "Torr": 101325.0 / 760,
    },
    (2, 1, -2, 0): {"Nm": 1.0, "J": 1.0, "kJ": 1e3, "MJ": 1e6},
    (2, 1, -3, 0): {"W": 1.0, "kW": 1e3, "MW": 1e6},
    (-1, 1, -1, 0): {"P": 0.1, "cP": 1e-3},
    (2, 0, -1, 0): {"St": 1e-4, "cSt": 1e-6},
}  # fmt: skip

UNITS: dict[str, Unit] = {
    name: Unit(factor, (*dimension, 0, 0, 0))
    for dimension, names in _BY_DIMENSION.items()
    for name, factor in names.items()
}
"""Unit by name; the values agree with pint where pint has the unit (tested)."""

UNITS["degC"] = Unit(1.0, UNITS["K"].dimension, offset=273.15)
UNITS["degF"] = Unit(5 / 9, UNITS["K"].dimension, offset=459.67 * 5 / 9)
