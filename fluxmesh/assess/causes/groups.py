"""Slips that concern one group: turned round, counted twice, by half, or without its data."""

from __future__ import annotations

from collections.abc import Iterator
from math import log
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.causes.change import Change, GroupFactor
from fluxmesh.assess.causes.entries import HEAD, OWN, UNIT, Entries
from fluxmesh.assess.causes.evidence import flux_odds, flux_over_velocity, speed_odds
from fluxmesh.assess.causes.facts import Source
from fluxmesh.assess.causes.residuals import Residuals
from fluxmesh.assess.causes.suspect import COST, Suspect
from fluxmesh.assess.review.doubt import Setting
from fluxmesh.surface.surface import Role

__all__ = ["duplicate_group", "empty_group", "flipped_group"]

_SEEN: Final = 8.0  # that all data of a group are zero is in the table: the odds of that, a logarithm
_ZERO: Final = 1e-12
_KEYS: Final = {Source.FLOW_RATE: "flow_rate", Source.MASS_FLOW: "mass_flow", Source.VELOCITY: "velocity"}


def _choice(entries: Entries) -> float:
    """What it costs to point at one group among all."""
    return log(max(entries.count, 1)) / 2


def _fits_role(entries: Entries, k: int, sign: float) -> bool:
    """Whether the flow of a group, times a sign, goes the way of its role."""
    role, flow = entries.balance.setting.groups[k].role, sign * entries.mass[k]
    return (role is Role.INLET and flow < 0) or (role is Role.OUTLET and flow > 0)


def flipped_group(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Suspect one group that was laid the wrong way round.

    The surface itself is oriented from its edges, so pressure forces cannot flip; what can is a flow that was given
    with a direction, a mass flux that counts along the normal of the file's faces, and a traction made with it.

    Parameters
    ----------
    entries : Entries
        The laws.
    now : Residuals
        Residuals as they are; not used.

    Yields
    ------
    Suspect
        One for each such thing and group.
    """
    del now
    names, setting = entries.names(), entries.balance.setting
    several = int(np.count_nonzero(np.abs(entries.viscous).sum(axis=1))) > 1
    ratios = flux_over_velocity(entries)
    for k, source in enumerate(entries.facts.flow):
        name = names[k]
        if entries.mass[k] != 0.0 and source is not Source.CONTINUITY:
            odds = _choice(entries) + (0.0 if not _fits_role(entries, k, 1.0) else 1.0)
            odds -= 1.0 if _fits_role(entries, k, -1.0) else 0.0
            if source is Source.MASS_FLUX:
                yield Suspect(
                    "flipped-group",
                    Change(groups=(GroupFactor(k, mass=-1.0, flux=-1.0),)),
                    f"the mass flux of {name} counts the other way than the normal out of the fluid",
                    _turn_mass_flux(entries, name),
                    COST["common"] + odds + flux_odds(ratios, k, -1.0),
                    group=k,
                )
            else:
                yield Suspect(
                    "flipped-group",
                    Change(groups=(GroupFactor(k, mass=-1.0),)),
                    f"the flow through {name} goes the other way",
                    _turn_flow(entries, k),
                    COST["common" if source is not Source.ARRAY else "uncommon"] + odds,
                    group=k,
                )
        if several and entries.viscous[k].any():
            yield Suspect(
                "flipped-group",
                Change(groups=(GroupFactor(k, viscous=-1.0),)),
                f"the traction of {name} was made with a normal that points the other way than elsewhere",
                f"turn the sign of the array of flow.{entries.facts.traction_key or 'traction'} on {name}",
                COST["uncommon"] + _choice(entries),
                group=k,
            )
        if entries.open:
            yield Suspect(
                "flipped-group",
                Change(groups=(GroupFactor(k, -1.0, -1.0, -1.0, 1.0, -1.0),)),
                f"the faces of {name} are turned inward: with them turned round the area vectors add up to nothing",
                f"turn the faces of {name}",
                COST["common"] + _choice(entries),
                group=k,
            )
    del setting


def _turn_mass_flux(entries: Entries, name: str) -> str:
    if len({source for source in entries.facts.flow if source is not Source.ABSENT}) == 1:
        other = "out" if entries.facts.flux_key == "face-normal" else "face-normal"
        return f"{Setting(('flow', 'mass_flux', 'positive'), other).line()}, or turn the faces of {name} in the file"
    return f"turn the sign of the mass flux of {name}"


def _turn_flow(entries: Entries, k: int) -> str:
    name, source = entries.names()[k], entries.facts.flow[k]
    if source is Source.VELOCITY and name in entries.facts.velocities:
        turned = [-x + 0.0 for x in entries.facts.velocities[name]]
        return Setting(("groups", name, "velocity"), turned).line()
    role = entries.balance.setting.groups[k].role
    if source in _KEYS and role in (Role.INLET, Role.OUTLET):
        other = Role.OUTLET if role is Role.INLET else Role.INLET
        return Setting(("groups", name, "role"), other.value).line()
    return f"turn the velocity of {name}"


def duplicate_group(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Suspect a group that counts twice, or a port whose flow was doubled.

    Parameters
    ----------
    entries : Entries
        The laws.
    now : Residuals
        Residuals as they are; not used.

    Yields
    ------
    Suspect
        Whole groups only where the area vectors do not add up to nothing.
    """
    del now
    for k, source in enumerate(entries.facts.flow):
        name = entries.names()[k]
        if entries.open:
            yield Suspect(
                "duplicate-group",
                Change(groups=(GroupFactor(k, 0.5, 0.5, 0.5, 0.5, 0.5),)),
                f"the faces of {name} are in the table twice: counted once, the area vectors add up to nothing",
                f"leave one copy of the faces of {name} in the file",
                COST["common"] + _choice(entries),
                group=k,
            )
            same = [
                j for j in range(k) if np.allclose(entries.balance.table.values[j], entries.balance.table.values[k])
            ]
            if same:
                yield Suspect(
                    "duplicate-group",
                    Change(groups=(GroupFactor(k, 0.0, 0.0, 0.0, 0.0, 0.0),)),
                    f"{name} holds the same faces as {entries.names()[same[0]]}",
                    f"leave out the group {name}",
                    COST["classic"] + _choice(entries),
                    group=k,
                )
        yield from _half_or_double(entries, k, source, "duplicate-group", 0.5)


def _half_or_double(entries: Entries, k: int, source: Source, kind: str, factor: float) -> Iterator[Suspect]:
    """The flow of one port off by a factor of two."""
    if entries.mass[k] == 0.0 or source in (Source.ABSENT, Source.CONTINUITY):
        return
    name = entries.names()[k]
    twice = factor < 1
    how = "counts twice" if twice else "counts by half"
    fix = f"check the flow of {name}"
    cost = COST["uncommon"]
    if source is Source.ARRAY:
        cost = COST["rare"] + speed_odds(entries, k, factor)
    elif source is Source.MASS_FLUX:
        cost += flux_odds(flux_over_velocity(entries), k, factor)
    elif entries.facts.exported().any() and not entries.open:
        # a supplied flow does not depend on how often faces are counted, which beside would leave a surface open;
        # where others are exported, what was supplied belongs more likely to another share of the model
        cost = COST["rare"]
    if source is Source.MASS_FLUX:
        flux = factor
        reason = "its faces are in the export twice" if twice else "its faces lack half their flow"
        fix = f"{'halve' if twice else 'double'} the mass flux of {name}: {reason}"
    else:
        flux = factor * factor
        if source in _KEYS:
            fix = f"{'halve' if twice else 'double'} groups.{name}.{_KEYS[source]}"
    yield Suspect(
        kind,
        Change(groups=(GroupFactor(k, mass=factor, flux=flux),)),
        f"the flow through {name} {how}",
        fix,
        cost + _choice(entries),
        group=k,
    )


def empty_group(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Suspect a group whose data are missing: zero in the export, or of half its faces.

    Parameters
    ----------
    entries : Entries
        The laws.
    now : Residuals
        Residuals as they are; not used.

    Yields
    ------
    Suspect
        What is missing is fitted: a pressure, and for a port its flow and momentum.
    """
    del now
    table, setting = entries.balance.table, entries.balance.setting
    names = entries.names()
    own, level = np.abs(entries.pressure[:, OWN, 9]), np.abs(table.column("pressure_area"))
    # a head that was put back stands in the table, but not in the export
    nothing = own <= _ZERO * max(float(level.max()), 1e-300)
    bare = nothing & entries.facts.pressure_array & setting.data.pressure & (entries.area > 0)
    still = (table.column("speed_area") == 0.0) & (entries.mass == 0.0) & setting.data.flux & setting.ports()
    others = ~nothing
    for k in range(entries.count):
        if entries.facts.flow[k] is not Source.ABSENT and setting.groups[k].role.is_port:
            yield from _half_or_double(entries, k, entries.facts.flow[k], "missing-group", 2.0)
        if still[k] and np.any(entries.mass != 0.0):
            for directions, cost, expected in _passing(entries, k, empty=bool(bare[k])):
                yield Suspect(
                    "missing-group",
                    Change(),
                    f"the data of {names[k]} are missing: its flow is zero in the export, and what mass and momentum "
                    "lack passes there",
                    f"export the fields of {names[k]}, or supply its flow in [groups.{names[k]}]",
                    cost + _choice(entries),
                    group=k,
                    directions=directions,
                    expected=expected,
                    alone=True,
                )
        elif bare[k] and others.any():
            for rows, cost in ((slice(UNIT, UNIT + 1), 0.0), (slice(UNIT, HEAD + 3), 1.0)):
                directions = np.concatenate(
                    [np.zeros((rows.stop - rows.start, 1)), entries.pressure[k, rows, :9]], axis=1
                )
                yield Suspect(
                    "missing-group",
                    Change(),
                    f"the data of {names[k]} are missing: its pressure is zero in the export",
                    f"export the pressure of {names[k]}, or supply it as groups.{names[k]}.pressure",
                    COST["uncommon"] + cost + _choice(entries),
                    group=k,
                    directions=directions,
                    alone=len(directions) > 1,
                )


def _passing(entries: Entries, k: int, *, empty: bool) -> Iterator[tuple[NDArray[np.float64], float, float]]:
    """What may pass a group without flow: mass and a force at its middle, then couples; cost, and how expected."""
    setting, table = entries.balance.setting, entries.balance.table
    middle = table.column("position")[k] / entries.area[k]
    points = (table.origin - np.asarray(setting.anchor), np.zeros(3))
    rows = np.zeros((7, 10))
    rows[0, 0] = 1.0
    for axis in range(3):
        force = np.eye(3)[axis]
        rows[1 + axis, 1:] = np.concatenate([force, *(np.cross(middle + point, force) for point in points)])
    turns = np.linalg.svd(entries.area_vector[k][None])[2][[1, 2, 0]]
    rows[4:, 4:] = np.concatenate([turns, turns], axis=1)
    yield rows[:4], COST["uncommon"], 0.0
    yield rows[:6], COST["uncommon"] + 0.5, 0.0
    if empty:
        # that all its data are zero is in the table: nothing has to be assumed
        yield rows, COST["common"], _SEEN
