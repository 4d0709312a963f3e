"""Lengths that look as if they were read in the wrong unit."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from fluxmesh.assess.review.doubt import Doubt, Setting
from fluxmesh.assess.review.evidence import Evidence
from fluxmesh.integral.layout import AT_FACE
from fluxmesh.units import unit_factor

__all__ = ["LARGEST", "length_doubts"]

# common practice, no source
LARGEST = 50.0
"""Size of a surface, in metres, from which on a reviewer asks."""
_SMALLEST = 1e-3
_SLOW, _FAST = 1e-3, 500.0  # mean speeds of a supplied flow, m/s
_USUAL = (0.02, 100.0)
_AGREE = 0.1
_UNITS = ("mm", "cm", "in", "m", "ft")


def length_doubts(evidence: Evidence) -> Iterator[Doubt]:
    """Doubt the unit of length.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Yields
    ------
    Doubt
        One at most, from the strongest sign: exported mass flow against velocity times area, the speed that a
        supplied flow would have, or the size.
    """
    for sign in (_by_mass_flux, _by_supplied_flow, _by_size):
        doubt = sign(evidence)
        if doubt is not None:
            yield doubt
            return


def _unit_doubt(seen: str, unit: str) -> Doubt:
    return Doubt(
        "length unit",
        seen,
        "Lengths in millimetres read as metres make forces a million times too large",
        (Setting(("surface", "length_unit"), unit),),
    )


def _by_mass_flux(evidence: Evidence) -> Doubt | None:
    flow = evidence.flow
    exported, carried = 0.0, 0.0
    for k in evidence.flowing:
        if flow.mass_flux.where[k] != AT_FACE or not flow.velocity.present()[k]:
            continue
        faces = evidence.faces(k)
        geometry = evidence.geometry(faces)
        normal = np.einsum("ij,ij->i", evidence.values(flow.velocity, faces), geometry.normals)
        carried += float(np.abs(normal * geometry.areas * evidence.values(flow.density, faces)).sum())
        exported += float(np.abs(evidence.values(flow.mass_flux, faces)).sum())
    if exported <= 0.0 or carried <= 0.0 or 0.5 < exported / carried < 2.0:
        return None
    ratio = exported / carried
    seen = f"The exported mass flow is {ratio:.3g} times density, velocity and area of the ports"
    now = unit_factor(evidence.length_unit, "m", "")
    for unit in _UNITS:
        if abs((unit_factor(unit, "m", "") / now) ** 2 / ratio - 1.0) < _AGREE:
            return _unit_doubt(f"{seen}, as if lengths were in {unit}", unit)
    return Doubt(
        "mass flux against velocity",
        seen,
        "One of mass flow, velocity, density and length has another unit than the case says",
        advice="check flow.mass_flux.unit, flow.velocity.unit, fluid.density and surface.length_unit",
    )


def _by_supplied_flow(evidence: Evidence) -> Doubt | None:
    table, groups = evidence.balance.table, evidence.groups
    for k in evidence.flowing:
        given = evidence.supplied.get(groups[k].name)
        area = float(table.column("area")[k])
        if given is None or given.key not in ("flow_rate", "mass_flow") or area <= 0.0:
            continue
        speed = abs(float(table.column("volume_flow")[k])) / area
        if speed == 0.0 or _SLOW < speed < _FAST:
            continue
        now = unit_factor(evidence.length_unit, "m", "")
        for unit in _UNITS:
            meant = speed * (now / unit_factor(unit, "m", "")) ** 2
            if _USUAL[0] < meant < _USUAL[1]:
                seen = f"The flow supplied for '{groups[k].name}' would have a mean speed of {speed:.3g} m/s"
                return _unit_doubt(f"{seen}, with lengths in {unit} one of {meant:.3g} m/s", unit)
    return None


def _by_size(evidence: Evidence) -> Doubt | None:
    size = float(evidence.size)
    seen = f"The surface is {size:.3g} m across, its coordinates read as {evidence.length_unit}"
    if size >= LARGEST and evidence.length_unit != "mm":
        return _unit_doubt(seen, "mm")
    if 0.0 < size < _SMALLEST and evidence.length_unit != "m":
        return _unit_doubt(seen, "m")
    return None
