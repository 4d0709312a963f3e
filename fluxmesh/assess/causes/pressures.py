"""Slips in what an exported pressure is: over density, from vacuum, or total."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from fluxmesh.assess.causes.change import Change
from fluxmesh.assess.causes.entries import Entries
from fluxmesh.assess.causes.evidence import ATMOSPHERE
from fluxmesh.assess.causes.residuals import Residuals
from fluxmesh.assess.causes.suspect import COST, Suspect, lines
from fluxmesh.assess.review.doubt import Setting
from fluxmesh.field.pressure import PressureKind

__all__ = ["absolute_pressure", "kinematic_pressure", "total_pressure"]


def kinematic_pressure(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Suspect pressure over density read as pressure, or the other way round; the traction may share it.

    Parameters
    ----------
    entries : Entries
        The laws.
    now : Residuals
        Residuals as they are.

    Yields
    ------
    Suspect
        None where no pressure was exported or no density is known.
    """
    facts = entries.facts
    if not facts.pressure_array.any() or not (entries.density > 0).all():
        return
    kinematic = facts.kind is PressureKind.KINEMATIC
    power = -1 if kinematic else 1
    kind = "gauge" if kinematic else "kinematic"
    settings: list[tuple[str, str]] = [("flow.pressure.kind", kind)]
    if facts.pressure_unit:
        settings.append(("flow.pressure.unit", "Pa" if kinematic else "m^2/s^2"))
    if facts.kind is PressureKind.ABSOLUTE:
        return  # an array that was read as absolute and is kinematic would be far off for its sign alone
    said = (
        "the pressure is in pascals, and was multiplied by the density"
        if kinematic
        else "the exported pressure is pressure over density, and was read as pressure"
    )
    yield Suspect(
        "kinematic-pressure",
        Change(over_density=power),
        said,
        lines(*settings),
        COST["classic"],
        balances=("pressure",),
    )
    if not kinematic and facts.traction_key and now.nets["viscous"].any():
        yield Suspect(
            "kinematic-pressure",
            Change(over_density=1, traction_over_density=1),
            "the exported pressure and traction are both over density, and were read as they are",
            lines(*settings) + f"; multiply the array of flow.{facts.traction_key} by the density",
            COST["common"],
            balances=("pressure", "viscous"),
        )


def absolute_pressure(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Suspect pressure from vacuum read as gauge, or the other way round, of the export or of a group.

    Parameters
    ----------
    entries : Entries
        The laws.
    now : Residuals
        Residuals as they are; not used.

    Yields
    ------
    Suspect
        One for the export, one for each group with a supplied pressure. Where every pressure is exported, its
        level cancels.
    """
    del now
    facts, setting = entries.facts, entries.balance.setting
    ambient = ATMOSPHERE if facts.ambient is None else facts.ambient
    exported = np.flatnonzero(facts.pressure_array & setting.data.pressure)
    if exported.size == entries.count:
        return  # a level cancels over the whole surface
    said = f"{ambient:.7g} Pa" + ("" if facts.ambient is not None else ", the standard atmosphere,")
    if exported.size and facts.kind is not PressureKind.KINEMATIC:
        absolute = facts.kind is PressureKind.ABSOLUTE
        settings: list[tuple[str, str]] = [("flow.pressure.kind", "gauge" if absolute else "absolute")]
        if facts.ambient is None:
            settings.append(("fluid.ambient_pressure", "101325 Pa"))
        statement = (
            f"the exported pressure counts from the ambient pressure already; {said} was taken off it a second time"
            if absolute
            else f"the exported pressure counts from vacuum: {said} is in it"
        )
        yield Suspect(
            "absolute-as-gauge",
            Change(levels=tuple((int(k), ambient if absolute else -ambient) for k in exported)),
            statement,
            lines(*settings),
            COST["classic"],
        )
    for k in np.flatnonzero(~facts.pressure_array & setting.data.pressure):
        name = setting.groups[k].name
        yield Suspect(
            "absolute-as-gauge",
            Change(levels=((int(k), -ambient),)),
            f"the pressure supplied for {name} counts from vacuum: {said} is in it",
            Setting(("groups", name, "pressure_kind"), "absolute").line(),
            COST["common"],
            group=int(k),
        )


def total_pressure(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Suspect total pressure read as static.

    Parameters
    ----------
    entries : Entries
        The laws.
    now : Residuals
        Residuals as they are; not used.

    Yields
    ------
    Suspect
        None where nothing moves at a group with an exported pressure.
    """
    del now
    moving = entries.balance.table.column("dynamic_pressure_area") > 0
    if (moving & entries.facts.pressure_array).any():
        yield Suspect(
            "total-as-static",
            Change(dynamic=-1.0),
            "the exported pressure is the total one: it holds the dynamic pressure, which the momentum flux counts too",
            'flow.pressure.array = "..." with the name of the static pressure',
            COST["common"],
        )
