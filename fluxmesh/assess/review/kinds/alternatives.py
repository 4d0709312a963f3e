"""Readings of the export under which a balance that does not close would close.

All of it is algebra on the table of integrals: with the momentum flux F, the
pressure force P of the array, the viscous force T and the weight W, each summed
over the closed surface, the residual is F - P - T (- W), and another unit, kind
or sign multiplies one of them by a known factor.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import NamedTuple

import numpy as np

from fluxmesh.assess.review.doubt import Doubt, Setting
from fluxmesh.assess.review.evidence import Evidence
from fluxmesh.assess.review.faces import Floats
from fluxmesh.assess.review.kinds.labels import kind_settings, other_array
from fluxmesh.field.pressure import Head, PressureKind
from fluxmesh.units import unit_factor

Alternative = tuple[Floats, Floats, Doubt]
"""Residual and changed entry under another reading, and the doubt that names it."""

__all__ = ["Totals", "closing_alternatives", "implied_density", "momentum_totals"]

# common practice, no source
_BETTER = 0.1  # residual under the other reading, over that of the case
_EXPLAINS = 0.3  # residual under the other reading, over the entry that it changes
_RIVALS = 3.0  # readings this close to the best are named too
_PRESSURE_UNITS = ("kPa", "bar", "hPa", "MPa", "psi", "psf", "atm", "Pa")
_SPEED_UNITS = ("mm/s", "cm/s", "ft/s", "km/h", "in/s", "knot", "m/s")
_DENSITY_UNITS = ("g/cm^3", "lb/ft^3", "g/m^3")
_FITS = 0.05


class Totals(NamedTuple):
    """Entries of the momentum balance over the whole surface, N.

    Attributes
    ----------
    residual, flux, pressure, viscous, weight, dynamic : ndarray, shape (3,), float64
        The residual; the flux; the pressure force of the array alone, without a
        head that was put back; the viscous force; the weight of the fluid; and
        the force that the dynamic pressure would exert.
    head_in_array : bool
        Whether the array is said to hold the head.
    """

    residual: Floats
    flux: Floats
    pressure: Floats
    viscous: Floats
    weight: Floats
    dynamic: Floats
    head_in_array: bool


def momentum_totals(evidence: Evidence) -> Totals | None:
    """Return the entries of the momentum balance, or None where they cannot all be known.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.
    """
    balance = evidence.balance
    if not balance.complete:
        return None
    ledger, included = balance.momentum, evidence.flow.meaning.head is Head.INCLUDED
    pressure = ledger.pressure()
    return Totals(
        ledger.residual(),
        ledger.flux(),
        pressure if included else pressure + ledger.weight,
        ledger.viscous(),
        ledger.weight,
        balance.table.total("dynamic_pressure_force"),
        included,
    )


def implied_density(evidence: Evidence) -> float | None:
    """Return the density with which the momentum of arrays laid with density 1 closes best.

    Parameters
    ----------
    evidence : Evidence
        Of a flow whose density is one constant.

    Returns
    -------
    float or None
        In kg/m³ times the constant; None where the fit is poor, or no fluid.
    """
    totals = momentum_totals(evidence)
    if totals is None:
        return None
    flux, need = totals.flux, totals.pressure + totals.viscous
    square = float(flux @ flux)
    if square == 0.0:
        return None
    density = float(flux @ need) / square
    left = float(np.linalg.norm(density * flux - need))
    return density if density > 0.0 and left < _FITS * float(np.linalg.norm(need)) else None


def closing_alternatives(evidence: Evidence) -> Iterator[Doubt]:
    """Doubt the kind, unit or sign of an array where another would close the balance ten times better.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Yields
    ------
    Doubt
        The best alternative, and those nearly as good. None where the balance closes.
    """
    relative = evidence.balance.momentum.relative()
    totals = momentum_totals(evidence)
    if totals is None or relative is None or relative <= evidence.tolerance:
        return
    now = float(np.linalg.norm(totals.residual))
    tried = [
        (float(np.linalg.norm(residual)), float(np.linalg.norm(entry)), doubt)
        for source in (_pressures, _tractions, _speeds, _densities)
        for residual, entry, doubt in source(evidence, totals)
    ]
    # an entry that only shrinks until it does not matter explains nothing: what is left must be less than it, too
    better = [(left, doubt) for left, entry, doubt in tried if left < _BETTER * now and left < _EXPLAINS * entry]
    best = min((left for left, _ in better), default=0.0)
    for left, doubt in sorted(better, key=lambda entry: entry[0]):
        if left <= _RIVALS * best + 1e-12 * now:
            yield doubt


def _doubt(kind: str, seen: str, matters: str, settle: tuple[Setting, ...], advice: str = "") -> Doubt:
    return Doubt(kind, f"The momentum balance would close far better {seen}", matters, settle, advice)


def _factor_of(evidence: Evidence, quantity: str) -> float | None:
    return next((named.factor for named in evidence.named if named.quantity == quantity), None)


def _pressures(evidence: Evidence, totals: Totals) -> Iterator[Alternative]:
    flow = evidence.flow
    if not (flow.pressure.where > 1).all():
        return

    def times(factor: float) -> tuple[Floats, Floats]:
        return totals.residual + (1.0 - factor) * totals.pressure, factor * totals.pressure

    density = flow.uniform_density()
    small = "Kinematic pressure (p over density) read as pressure makes forces too small by the density"
    if density is not None and flow.meaning.kind is PressureKind.KINEMATIC:
        seen = "if the pressure were no kinematic one"
        yield *times(1.0 / density), _doubt("pressure not kinematic", seen, small, kind_settings(evidence, "gauge"))
    elif density is not None and flow.meaning.kind is PressureKind.GAUGE:
        seen = "with the pressure multiplied by the density"
        yield *times(density), _doubt("pressure looks kinematic", seen, small, kind_settings(evidence, "kinematic"))
    factor = _factor_of(evidence, "pressure")
    if factor is not None and flow.meaning.kind is not PressureKind.KINEMATIC:
        for unit in _PRESSURE_UNITS:
            ratio = unit_factor(unit, "Pa", "") / factor
            if abs(ratio - 1.0) > 1e-6:
                settle = (Setting(("flow", "pressure", "unit"), unit),)
                yield (
                    *times(ratio),
                    _doubt("pressure unit", f"with the pressure in {unit}", "Forces go with it", settle),
                )
    other = other_array(evidence, "pressure", frozenset({"total"}))
    yield (
        totals.residual + totals.dynamic,
        totals.dynamic,
        _doubt(
            "pressure looks total",
            "with the dynamic pressure taken off the pressure",
            "Total pressure holds the dynamic pressure, which is in the momentum flux already",
            other,
            "" if other else "export the static pressure",
        ),
    )


def _tractions(evidence: Evidence, totals: Totals) -> Iterator[Alternative]:
    factor = _factor_of(evidence, "traction")
    if factor is None or not totals.viscous.any():
        return

    def times(ratio: float) -> tuple[Floats, Floats]:
        return totals.residual + (1.0 - ratio) * totals.viscous, ratio * totals.viscous

    turned = (Setting(("flow", "traction", "acts_on"), "fluid" if evidence.flow.traction.scale < 0 else "wall"),)
    sign = "The reaction to the pull of the fluid on the wall has the opposite sign"
    yield *times(-1.0), _doubt("traction sign", "with the traction of the opposite sign", sign, turned)
    for unit in _PRESSURE_UNITS:
        ratio = unit_factor(unit, "Pa", "") / factor
        if abs(ratio - 1.0) > 1e-6:
            settle = (Setting(("flow", "traction", "unit"), unit),)
            yield (
                *times(ratio),
                _doubt("traction unit", f"with the traction in {unit}", "Friction goes with it", settle),
            )


def _speeds(evidence: Evidence, totals: Totals) -> Iterator[Alternative]:
    flow, factor = evidence.flow, _factor_of(evidence, "velocity")
    exported = all(flow.velocity.where[k] > 1 and not flow.mass_flux.present()[k] for k in evidence.flowing)
    if factor is None or not exported or evidence.supplied:
        return
    for unit in _SPEED_UNITS:
        ratio = unit_factor(unit, "m/s", "") / factor
        if abs(ratio - 1.0) > 1e-6:
            settle = (Setting(("flow", "velocity", "unit"), unit),)
            residual = totals.residual + (ratio * ratio - 1.0) * totals.flux
            matters = "The momentum flux goes with its square"
            yield (
                residual,
                ratio * ratio * totals.flux,
                _doubt("velocity unit", f"with the velocity in {unit}", matters, settle),
            )


def _densities(evidence: Evidence, totals: Totals) -> Iterator[Alternative]:
    density = evidence.flow.uniform_density()
    own = any(group.startswith("groups.") and group.endswith(".density") for group in evidence.stated)
    if density is None or own or "fluid.density" not in evidence.stated or evidence.supplied:
        return
    heavy = totals.flux - totals.weight if totals.head_in_array else totals.flux
    for unit in _DENSITY_UNITS:
        ratio = unit_factor(unit, "kg/m^3", "")
        settle = (Setting(("fluid", "density"), f"{density:.7g} {unit}"),)
        residual = totals.residual + (ratio - 1.0) * heavy
        matters = "Momentum flux and weight are proportional to it"
        yield residual, ratio * heavy, _doubt("density unit", f"with the density in {unit}", matters, settle)
