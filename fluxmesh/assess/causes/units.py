"""Slips of a unit: of the coordinates, of the velocity, of the density."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.causes.change import Change
from fluxmesh.assess.causes.entries import Entries
from fluxmesh.assess.causes.facts import Source
from fluxmesh.assess.causes.residuals import Residuals
from fluxmesh.assess.causes.suspect import COST, Suspect, lines
from fluxmesh.units import unit_factor

__all__ = ["density", "length_unit", "velocity_unit"]

_LENGTHS: Final = ("mm", "m", "cm", "in", "ft")
_SPEEDS: Final = ("m/s", "mm/s", "cm/s", "ft/s", "km/h", "in/s", "knot", "mile/hour")
_USUAL: Final = ("mm", "m", "m/s", "mm/s", "ft/s", "km/h")
# factors that a density is off by when its unit or its very meaning was mistaken
_TELLING: Final = (
    (1000.0, "1000 times: given in g/cm³, or as specific gravity"),
    (0.001, "a thousandth"),
    (unit_factor("lb/ft^3", "kg/m^3", ""), "16.02 times: given in lb/ft³"),
    (1 / unit_factor("lb/ft^3", "kg/m^3", ""), "1/16.02"),
    (1 / 9.80665, "1/9.81: a specific weight in N/m³"),
    (9.80665, "9.81 times"),
)
_FLUIDS: Final = ((998.2, "that of water"), (1.2, "that of air"), (1.0, "that of a computation per unit of density"))
_SAME: Final = 1e-6
_DENSITIES: Final = (0.02, 2.5e4)  # kg/m³: of gases not far from ambient, and of the densest metals


def length_unit(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Suspect coordinates in another unit.

    Parameters
    ----------
    entries : Entries
        The laws.
    now : Residuals
        Residuals as they are; not used.

    Yields
    ------
    Suspect
        One a unit. Where every entry goes with the area (no weight but that borne by a restored head, nothing
        supplied, nothing stored) no unit can be told. None for a surface that moves.
    """
    del now
    if entries.balance.setting.frame is not None:
        return
    here = unit_factor(entries.facts.length_unit, "m", "")
    fixed = any(source in (Source.FLOW_RATE, Source.MASS_FLOW, Source.MASS_FLUX) for source in entries.facts.flow)
    for unit in _LENGTHS:
        ratio = unit_factor(unit, "m", "") / here
        if abs(ratio - 1.0) > _SAME:
            yield Suspect(
                "length-unit",
                Change(length=ratio),
                f"the coordinates of the file are in {unit}, and were read in {entries.facts.length_unit}",
                lines(("surface.length_unit", unit)),
                COST["common"] if unit in _USUAL else COST["uncommon"],
                balances=("flux", "weight") if fixed else ("weight",),
            )


def velocity_unit(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Suspect an exported velocity in another unit.

    Parameters
    ----------
    entries : Entries
        The laws.
    now : Residuals
        Residuals as they are; not used.

    Yields
    ------
    Suspect
        One a unit; none where no velocity was exported, or where a surface moves and the velocity of
        its own was taken off.
    """
    del now
    facts = entries.facts
    taken_off = entries.balance.setting.frame is not None
    if not facts.exported().any() or taken_off:
        return
    here = unit_factor(facts.speed_unit, "m/s", "")
    for unit in _SPEEDS:
        ratio = unit_factor(unit, "m/s", "") / here
        if abs(ratio - 1.0) > _SAME:
            yield Suspect(
                "velocity-unit",
                Change(speed=ratio),
                f"the exported velocity is in {unit}, and was read in {facts.speed_unit}",
                lines(("flow.velocity.unit", unit)),
                COST["common"] if unit in _USUAL else COST["uncommon"],
                balances=("flux",),
            )


def density(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Suspect another density, by a factor that tells its reason or by one that is fitted.

    Parameters
    ----------
    entries : Entries
        The laws.
    now : Residuals
        Residuals as they are; not used.

    Yields
    ------
    Suspect
        None without a density. Mass alone does not tell it, where all flows go with it.
    """
    del now
    held = entries.held or float(np.mean(entries.density))
    if held <= 0:
        return
    uniform = bool(np.allclose(entries.density, held, rtol=1e-9))
    for factor, reason in _TELLING:
        if _DENSITIES[0] <= factor * held <= _DENSITIES[1]:
            said = f"the density is {factor * held:.5g} kg/m³, {reason}, not {held:.5g}"
            yield _density(factor, said, held, COST["uncommon"])
    for value, name in _FLUIDS:
        factor = value / held
        if uniform and abs(factor - 1.0) > 0.05 and all(abs(factor / other - 1.0) > 0.01 for other, _ in _TELLING):
            yield _density(factor, f"the density is {value:g} kg/m³, {name}, not {held:.5g}", held, COST["rare"])

    def words(fitted: NDArray[np.float64], _left: Residuals) -> tuple[str, str] | None:
        factor = float(fitted[0])
        if not _DENSITIES[0] <= factor * held <= _DENSITIES[1] or abs(factor - 1.0) < 1e-3:
            return None
        text = f"{factor * held:.4g} kg/m^3"
        return f"the density is {factor * held:.4g} kg/m³, {factor:.4g} times that given", lines(
            ("fluid.density", text)
        )

    yield Suspect(
        "density", Change(), "the density is another", "", COST["free"], balances=("flux", "weight"),
        fits_density=True, words=words,
    )  # fmt: skip


def _density(factor: float, said: str, held: float, cost: float) -> Suspect:
    return Suspect(
        "density",
        Change(density=factor),
        said,
        lines(("fluid.density", f"{factor * held:.6g} kg/m^3")),
        cost,
        balances=("flux", "weight"),
    )
