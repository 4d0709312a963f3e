"""Quantities that a group lacks."""

from __future__ import annotations

from collections.abc import Iterator

from fluxmesh.assess.guess import ArrayGuess, best_guess
from fluxmesh.assess.review.doubt import Doubt, Setting
from fluxmesh.assess.review.evidence import Evidence
from fluxmesh.assess.review.toml import TomlValue
from fluxmesh.integral.layout import PER_GROUP
from fluxmesh.surface.surface import Role

__all__ = ["array_table", "coverage_doubts"]

_STICKS = 0.05
"""Mean speed on a wall over that at the ports, below which the fluid sticks to it (common practice, no source)."""


def array_table(guess: ArrayGuess, **more: TomlValue) -> dict[str, TomlValue]:
    """Return the table by which a case names an array.

    Parameters
    ----------
    guess : ArrayGuess
        The array.
    **more : TomlValue
        Further keys.

    Returns
    -------
    dict
        With its unit where the name states it, and its place where the name is on both.
    """
    table: dict[str, TomlValue] = {"array": guess.names[0] if len(guess.names) == 1 else list(guess.names)}
    if guess.unit:
        table["unit"] = guess.unit
    if guess.both:
        table["at"] = guess.at
    return {**table, **more}


def coverage_doubts(evidence: Evidence) -> Iterator[Doubt]:
    """Doubt ports without flow, boundaries without pressure, and walls without friction.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Yields
    ------
    Doubt
        One for each quantity that is missing; it names the groups.
    """
    data = evidence.balance.setting.data
    no_flow, no_pressure, no_traction, mass_alone = [], [], [], []
    for k, group in enumerate(evidence.groups):
        if group.role.is_port and not data.flux[k]:
            no_flow.append(group.name)
        if group.role.is_port and evidence.flow.mass_flux.present()[k] and not evidence.flow.velocity.present()[k]:
            mass_alone.append(group.name)
        if not data.pressure[k] and (group.role is not Role.WALL or evidence.has_array(evidence.flow.pressure)):
            no_pressure.append(group.name)
        if group.role is Role.WALL and data.pressure[k] and not data.traction[k] and not _slips(evidence, k):
            no_traction.append(group.name)
    if no_flow:
        settle = _array(evidence, "velocity", "velocity")
        yield Doubt(
            "no flow",
            f"No flow is known at {_named(no_flow)}",
            "Mass and momentum cannot be balanced without it",
            settle,
            "" if settle else f"give flow_rate in [groups.{no_flow[0]}]",
        )
    if mass_alone:
        settle = _array(evidence, "velocity", "velocity")
        yield Doubt(
            "mass flux without velocity",
            f"The mass flow at {_named(mass_alone)} comes without a velocity",
            "It carries mass alone: the momentum flux is missing in the load",
            settle,
            "" if settle else f"give flow_rate in [groups.{mass_alone[0]}], or export the velocity",
        )
    if no_pressure:
        settle = _array(evidence, "pressure", "pressure")
        yield Doubt(
            "no pressure",
            f"No pressure is known at {_named(no_pressure)}",
            "The load needs it on every face",
            settle,
            "" if settle else f"give pressure in [groups.{no_pressure[0]}]",
        )
    if no_traction:
        settle = _array(evidence, "traction", "traction", acts_on="wall") or _array(evidence, "stress", "stress")
        yield Doubt(
            "no traction",
            f"No traction is known on {_named(no_traction)}",
            "The load from the walls lacks friction, and the residual holds it",
            settle,
            "" if settle else "export the wall traction, or judge the load from the balance alone",
        )


def _slips(evidence: Evidence, k: int) -> bool:
    """Return whether a wall's velocity shows a flow without friction."""
    velocity, table = evidence.flow.velocity, evidence.balance.table
    area = float(table.column("area")[k])
    if velocity.where[k] <= PER_GROUP or area <= 0.0:
        return False
    return float(table.column("speed_area")[k]) / area > _STICKS * evidence.port_speed


def _array(evidence: Evidence, quantity: str, key: str, **more: TomlValue) -> tuple[Setting, ...]:
    guess = best_guess(evidence.spare, quantity)
    return () if guess is None else (Setting(("flow", key), array_table(guess, **more)),)


def _named(names: list[str]) -> str:
    quoted = [f"'{name}'" for name in names]
    return quoted[0] if len(quoted) == 1 else ", ".join(quoted[:-1]) + " and " + quoted[-1]
