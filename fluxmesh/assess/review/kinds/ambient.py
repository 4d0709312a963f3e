"""What pressures are counted from."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from fluxmesh.assess.review.doubt import Doubt, Setting
from fluxmesh.assess.review.evidence import Evidence
from fluxmesh.field.pressure import PressureKind
from fluxmesh.integral.layout import PER_GROUP

__all__ = ["ATMOSPHERE", "ambient_doubts", "exported_pressure"]

ATMOSPHERE = 101325.0
"""Standard atmosphere in Pa (ISO 2533; from memory)."""

# common practice, no source
_NEAR = 0.2
_VERY_NEAR = 0.005
_AMBIENT = (2e4, 1.2e5)


def exported_pressure(evidence: Evidence) -> tuple[float, float] | None:
    """Return mean and least value of the exported pressure, as exported but in SI.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Returns
    -------
    tuple of 2 floats, or None
        None when no group takes pressure from an array.
    """
    pressure = evidence.flow.pressure
    total, area, least = 0.0, 0.0, np.inf
    for k in np.flatnonzero(pressure.where > PER_GROUP):
        faces = evidence.faces(int(k))
        values, areas = evidence.values(pressure, faces), evidence.geometry(faces).areas
        # each sampled face stands for as many as were left out beside it
        weight = float(evidence.balance.table.column("area")[k]) / max(float(areas.sum()), 1e-300)
        total, area = total + weight * float(values @ areas), area + weight * float(areas.sum())
        least = min(least, float(values.min()))
    return (total / area, least) if area > 0.0 else None


def ambient_doubts(evidence: Evidence) -> Iterator[Doubt]:
    """Doubt gauge pressures that look absolute, absolute ones that look gauge, and an odd ambient pressure.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Yields
    ------
    Doubt
        At most one for the exported pressure, one for the ambient one, and one for each supplied one.
    """
    flow = evidence.flow
    reference = flow.ambient or ATMOSPHERE
    needed = () if flow.ambient is not None else (Setting(("fluid", "ambient_pressure"), f"{ATMOSPHERE:g} Pa"),)
    if flow.ambient and not _AMBIENT[0] <= flow.ambient <= _AMBIENT[1]:
        yield _odd_ambient(flow.ambient)
        reference = ATMOSPHERE
    found = exported_pressure(evidence)
    if found is not None:
        mean, least = found
        if flow.meaning.kind is PressureKind.GAUGE and least > 0.0 and abs(mean / reference - 1.0) < _NEAR:
            yield Doubt(
                "pressure looks absolute",
                f"The exported gauge pressure is {mean:.4g} Pa in the mean, near that of the atmosphere",
                "Absolute pressure read as gauge loads the hardware with the atmosphere",
                (Setting(("flow", "pressure", "kind"), "absolute"), *needed),
            )
        if flow.meaning.kind is PressureKind.ABSOLUTE and (least < 0.0 or mean < _NEAR * reference):
            yield Doubt(
                "pressure looks gauge",
                f"The exported absolute pressure is {mean:.4g} Pa in the mean and {least:.4g} Pa at the least",
                "Gauge pressure read as absolute loads the hardware with a vacuum",
                (Setting(("flow", "pressure", "kind"), "gauge"),),
            )
    for k in np.flatnonzero(flow.pressure.where == PER_GROUP):
        name, value = evidence.groups[int(k)].name, float(flow.pressure.group[k])
        if f"groups.{name}.pressure_kind" not in evidence.stated and abs(value / reference - 1.0) < _VERY_NEAR:
            yield Doubt(
                "pressure looks absolute",
                f"The gauge pressure supplied for '{name}' is {value:.6g} Pa, that of the atmosphere",
                "Absolute pressure read as gauge loads the port with the atmosphere",
                (Setting(("groups", name, "pressure_kind"), "absolute"), *needed),
                'or "gauge", to confirm it',
            )


def _odd_ambient(ambient: float) -> Doubt:
    meant = next((ambient * f for f in (1e3, 1e-3, 1e5, 1e2) if _AMBIENT[0] <= ambient * f <= _AMBIENT[1]), ATMOSPHERE)
    return Doubt(
        "ambient pressure",
        f"The ambient pressure is {ambient:.6g} Pa, which is no pressure of an atmosphere",
        "It is taken from every absolute pressure, and acts on the outside of the hardware",
        (Setting(("fluid", "ambient_pressure"), f"{meant:g} Pa"),),
        "unless the hardware stands in a vessel or in a vacuum",
    )
