"""The ideal gas: density from pressure and temperature, and the speed of sound."""

from __future__ import annotations

from dataclasses import replace
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError
from fluxmesh.field.field import Field, absent_field, supply
from fluxmesh.field.pressure import PressureKind, PressureMeaning
from fluxmesh.integral.layout import ABSENT, AT_FACE, AT_NODE, AT_SAMPLE, PER_GROUP
from fluxmesh.surface.surface import ControlSurface

__all__ = ["ideal_density", "sound_speed"]

_PLACES = {PER_GROUP: "one value", AT_FACE: "faces", AT_NODE: "nodes", AT_SAMPLE: "quadrature points"}


def sound_speed(pressure: float, density: float, heat_ratio: float) -> float:
    """Return the speed of sound in an ideal gas.

    Parameters
    ----------
    pressure : float
        Absolute pressure, Pa.
    density : float
        kg/m^3.
    heat_ratio : float
        Ratio of the specific heats.

    Returns
    -------
    float
        ``sqrt(heat_ratio * pressure / density)``, m/s (NACA Report 1135, 1953).
    """
    return sqrt(heat_ratio * pressure / density)


def ideal_density(
    surface: ControlSurface,
    pressure: Field,
    temperature: Field,
    *,
    meaning: PressureMeaning,
    ambient: float,
    gas_constant: float,
) -> Field:
    """Return the density of an ideal gas, ``p / (R T)``, wherever both are known.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    pressure : Field
        As exported, to be read by `meaning`; values of groups are gauge.
    temperature : Field
        Absolute temperature, K.
    meaning : PressureMeaning
        Gauge or absolute.
    ambient : float
        Ambient absolute pressure, Pa.
    gas_constant : float
        J/(kg K).

    Returns
    -------
    Field
        kg/m^3, where the pressure sits; a group that lacks one of the two has no density.

    Raises
    ------
    FieldError
        Pressure and temperature of a group that sit on different places, a
        kinematic pressure, or an absolute pressure or temperature that is not positive.
    """
    if meaning.kind is PressureKind.KINEMATIC:
        raise FieldError(
            "a kinematic pressure has no gas law", where="flow.pressure.kind", remedy="Export the pressure"
        )
    field = absent_field(surface, "density", 1)
    where = field.where.copy()
    one_temperature = _shared_temperature(pressure, temperature)
    for k, group in enumerate(surface.groups):
        p_at, t_at = int(pressure.where[k]), int(temperature.where[k])
        if ABSENT in (p_at, t_at):
            continue
        if p_at == PER_GROUP and t_at == PER_GROUP:
            density = (float(pressure.group[k]) + ambient) / (gas_constant * float(temperature.group[k]))
            field = supply(field, k, density)
            where[k] = PER_GROUP
            continue
        if t_at not in (p_at, PER_GROUP) or (t_at == PER_GROUP and one_temperature is None):
            raise FieldError(
                f"pressure sits on {_PLACES[p_at]}, temperature on {_PLACES[t_at]}",
                where=f"group '{group.name}'",
                remedy="Export both on nodes or both on faces, or give one temperature for all groups",
            )
        where[k] = p_at
    shift = ambient if meaning.kind is PressureKind.GAUGE else 0.0

    def law(p: NDArray[np.float64], t: NDArray[np.float64], code: int) -> NDArray[np.float64]:
        if not (where == code).any():
            return np.empty(0)
        kelvin = temperature.scale * t if t.size == p.size else one_temperature
        return np.asarray((pressure.scale * p + shift) / (gas_constant * np.asarray(kelvin)))

    return replace(
        field,
        where=where,
        node=law(pressure.node, temperature.node, AT_NODE),
        face=law(pressure.face, temperature.face, AT_FACE),
        sample=law(pressure.sample, temperature.sample, AT_SAMPLE),
        label="density from pressure and temperature (ideal gas)",
    )


def _shared_temperature(pressure: Field, temperature: Field) -> float | None:
    """The one temperature of all groups whose pressure is an array, or None if they differ."""
    chosen = (pressure.where > PER_GROUP) & (temperature.where == PER_GROUP)
    values = np.unique(temperature.group[chosen])
    return float(values[0]) if values.size == 1 else None
