"""A density that fits no fluid."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from fluxmesh.assess.review.doubt import Doubt, Setting
from fluxmesh.assess.review.evidence import Evidence
from fluxmesh.assess.review.kinds.ambient import ATMOSPHERE
from fluxmesh.units import unit_factor

__all__ = ["density_doubts", "is_liquid", "is_some_fluid"]

# common practice, no source: liquids from liquefied gas to acids, mercury, gases at the pressure of the atmosphere
_LIQUIDS = (400.0, 2000.0)
_MERCURY = (13000.0, 14000.0)
_GASES = (0.05, 10.0)
_UNITS = ("g/cm^3", "lb/ft^3", "g/m^3", "lb/gal")


def is_liquid(density: float) -> bool:
    """Return whether a density in kg/m³ is that of a liquid."""
    return _LIQUIDS[0] <= density <= _LIQUIDS[1] or _MERCURY[0] <= density <= _MERCURY[1]


def is_some_fluid(density: float, pressure: float = ATMOSPHERE) -> bool:
    """Return whether some common fluid has a density.

    Parameters
    ----------
    density : float
        kg/m³.
    pressure : float, optional
        Absolute pressure, Pa: the density of a gas rises with it.
    """
    return is_liquid(density) or _GASES[0] <= density <= _GASES[1] * max(1.0, pressure / ATMOSPHERE)


def density_doubts(evidence: Evidence) -> Iterator[Doubt]:
    """Doubt a density that no common fluid has.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Yields
    ------
    Doubt
        One at most.
    """
    table, data = evidence.balance.table, evidence.balance.setting.data
    known = evidence.flow.density.present() & (table.column("area") > 0)
    if not known.any():
        return
    means = table.column("density_area")[known] / table.column("area")[known]
    pressed = data.pressure & (table.column("area") > 0)
    highest = 0.0
    if pressed.any():
        highest = float((table.column("pressure_area")[pressed] / table.column("area")[pressed]).max())
    pressure = highest + (evidence.flow.ambient or ATMOSPHERE)
    odd = [float(mean) for mean in means if not is_some_fluid(float(mean), pressure)]
    if not odd:
        return
    one, uniform = odd[0], evidence.flow.uniform_density()
    array = next((named for named in evidence.named if named.quantity == "density"), None)
    number = one if array is None else one / array.factor
    fitting = [unit for unit in _UNITS if is_liquid(number * unit_factor(unit, "kg/m^3", ""))]
    settle: tuple[Setting, ...] = ()
    advice = "give the density of your fluid at its pressure and temperature"
    if fitting and array is not None:
        settle = (Setting(("flow", "density", "unit"), fitting[0]),)
    elif fitting and uniform is not None and "fluid.density" in evidence.stated:
        settle = (Setting(("fluid", "density"), f"{np.format_float_positional(one, 7, trim='-')} {fitting[0]}"),)
    yield Doubt(
        "density of no fluid",
        f"The density is {one:.4g} kg/m³: neither a liquid nor a gas at {pressure:.3g} Pa",
        "Momentum flux and weight are proportional to it",
        settle,
        "or " + advice if settle else advice,
    )
