"""Whether the numbers close, and why one may say so."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from enum import StrEnum
from typing import Final

import numpy as np

from fluxmesh.balance.balance import Balance
from fluxmesh.balance.carried import CarriedBalance
from fluxmesh.balance.energy import EnergyBalance

__all__ = ["LawVerdict", "State", "Verdict", "relative_without_mean_pressure", "verdict_of", "verdict_words"]

# far above the rounding of a single-precision export (6e-8), far below any load worth anchoring
_SMALLEST_SHARE: Final = 1e-4
_TELLING: Final = 5.0  # times the tolerance: a doubt beyond that closes nothing


class State(StrEnum):
    """How the judgement over a law, or over all, ends."""

    CLOSES = "closes"
    WITHIN_DOUBT = "closes within its doubt"
    OPEN = "does not close"
    UNJUDGED = "cannot be judged"


@dataclass(frozen=True)
class LawVerdict:
    """The judgement over one law.

    Attributes
    ----------
    law : str
        Its name.
    state : State
        Within the tolerance; above it, but no more than the doubt of the residual;
        above both; or not told.
    relative : float or None
        Residual over the size of the entries.
    doubt : float or None
        Half width at 95 % of the residual over the same size; None where it was not computed.
    """

    law: str
    state: State
    relative: float | None
    doubt: float | None


@dataclass(frozen=True)
class Verdict:
    """The judgement over a balance.

    Attributes
    ----------
    closes : bool or None
        Whether every law that is judged closes, be it within its doubt; None when
        nothing speaks against it, but the momentum balance cannot be compared with anything.
    measure : float or None
        The largest relative residual of the laws judged.
    tolerance : float
        Largest relative residual that closes.
    reasons : tuple of str
        What the judgement rests on, one sentence each.
    state : State
        The same in words.
    laws : tuple of LawVerdict
        Law by law.
    """

    closes: bool | None
    measure: float | None
    tolerance: float
    reasons: tuple[str, ...]
    state: State = State.UNJUDGED
    laws: tuple[LawVerdict, ...] = ()


def verdict_words(verdict: Verdict) -> str:
    """Return the judgement as it stands in print.

    Parameters
    ----------
    verdict : Verdict
        The judgement.
    """
    if verdict.closes is None:
        return "cannot be judged in full"
    return "DOES NOT CLOSE" if verdict.closes is False else verdict.state.value


def relative_without_mean_pressure(balance: Balance) -> float | None:
    """Return the momentum residual relative to entries freed of the mean pressure.

    A pressure that is the same everywhere cancels over a closed surface; a high
    one makes every residual look small. Here the area mean over the surface is
    taken off each group's pressure entry first.

    Parameters
    ----------
    balance : Balance
        A balance of a closed surface.

    Returns
    -------
    float or None
        None when nothing is left to compare with.
    """
    table, ledger = balance.table, balance.momentum
    area = float(table.total("area"))
    if area == 0.0:
        return None
    mean = float(table.total("pressure_area")) / area
    pressure = ledger.group_pressure + mean * table.column("area_vector")
    size = replace(ledger, group_pressure=pressure).size()
    return float(np.linalg.norm(ledger.residual())) / size if size > 0 else None


def _judged(balance: Balance) -> list[tuple[str, str, float, float]]:
    """Momentum laws with the size of their residual and what it is compared with.

    Where all entries of a law vanish (no force on a tank under one pressure, no
    moment about the axis of a straight pipe), what is left of them is round-off or noise of
    the data on both sides of the fraction. Forces are therefore compared with no
    less than a ten-thousandth of pressure times area, moments with no less than
    the forces at the arm of a sphere of the same area.
    """
    table, linear, angular = balance.table, balance.momentum, balance.angular
    acting = np.abs(table.column("pressure_area")) + 2 * np.abs(table.column("dynamic_pressure_area"))
    forces = max(linear.size(), _SMALLEST_SHARE * float(acting.sum()))
    arm = (float(table.total("area")) / (4 * np.pi)) ** 0.5
    laws = [("Linear momentum", linear, forces)]
    if angular.known:
        laws.append(("Angular momentum", angular, max(angular.size(), arm * forces)))
    elif balance.axial is not None and balance.axial.known:
        laws.append(("Angular momentum about the axis", balance.axial, max(balance.axial.size(), arm * forces)))
    return [
        (law, "angular" if ledger is not linear else "momentum", float(np.linalg.norm(ledger.residual())), size)
        for law, ledger, size in laws
        if size > 0
    ]


def _law(law: str, relative: float, tolerance: float, doubt: float | None) -> LawVerdict:
    state = State.OPEN
    if relative <= tolerance:
        state = State.CLOSES
    elif doubt is not None and relative <= doubt:
        # a doubt far beyond the tolerance tells nothing
        state = State.WITHIN_DOUBT if doubt <= _TELLING * tolerance else State.UNJUDGED
    return LawVerdict(law, state, relative, doubt)


def _told(law: LawVerdict, tolerance: float) -> str:
    said = f"{law.law}: residual {law.relative:.3g} of the entries"
    if law.doubt is not None:
        said += f" ± {law.doubt:.3g}"
    if law.state is State.CLOSES:
        return f"{said}, within the tolerance {tolerance:g}"
    if law.state is State.WITHIN_DOUBT:
        return f"{said}, more than the tolerance {tolerance:g}, but within its doubt"
    if law.state is State.UNJUDGED:
        return f"{said}: the data are too coarse to tell whether it closes within {tolerance:g}; a finer export would"
    return f"{said}, MORE than the tolerance {tolerance:g}"


def verdict_of(
    balance: Balance,
    *,
    tolerance: float = 0.01,
    encloses_hardware: bool = True,
    energy: EnergyBalance | None = None,
    carried: Sequence[CarriedBalance] = (),
    doubts: Mapping[str, float] | None = None,
) -> Verdict:
    """Judge a balance.

    Parameters
    ----------
    balance : Balance
        The balance.
    tolerance : float, optional
        Largest relative residual that closes.
    encloses_hardware : bool, optional
        For a surface without walls: whether a body may be inside, so that the
        momentum residual is the load on it and not an error.
    energy : EnergyBalance, optional
        Judged where heat or shaft power are given.
    carried : sequence of CarriedBalance, optional
        Each is judged where it is known at all ports.
    doubts : mapping of str to float, optional
        Half widths at 95 % of the residuals, by "mass" (kg/s), "momentum" (N), "angular" (N m) and "energy" (W).

    Returns
    -------
    Verdict
        With reasons.
    """
    setting = balance.setting
    if not setting.closed:
        return Verdict(
            None, None, tolerance, ("The surface is open: integrals of each group only, nothing is balanced",)
        )
    reasons: list[str] = []
    laws: list[LawVerdict] = []
    known = doubts or {}

    def judge(name: str, key: str, residual: float, size: float) -> None:
        width = known.get(key)
        law = _law(name, residual / size, tolerance, None if width is None else width / size)
        laws.append(law)
        reasons.append(_told(law, tolerance))

    if balance.mass is not None and balance.mass.relative is not None:
        lacking = [g.name for g, known in zip(setting.groups, setting.data.flux) if g.role.is_port and not known]
        if lacking:
            reasons.append(f"Mass: cannot be judged, no flow is known at {', '.join(lacking)}")
        else:
            size = balance.mass.inflow + balance.mass.outflow + abs(balance.mass.storage)
            judge("Mass", "mass", abs(balance.mass.residual), size)
    else:
        reasons.append("Mass: nothing flows")
    if not balance.momentum.known:
        reasons.append(
            "Momentum: the rate of the momentum inside is not known, so no load is demanded; "
            "give the density, or the flow inside as a volume file"
        )
    elif not balance.angular.known:
        reasons.append(
            "Angular momentum: across the axis it cannot be known from the surface alone, only about the axis; "
            "the flow inside as a volume file in [frame] or [storage] would tell it"
            if balance.axial is not None
            else "Angular momentum: its rate inside is not known, so it is not judged"
        )
    walls = setting.walls()
    compared = balance.complete and (bool(walls.any()) or not encloses_hardware)
    if compared:
        for name, key, residual, size in _judged(balance):
            judge(name, key, residual, size)
        reasons += _momentum_doubts(balance, tolerance)
    elif balance.complete and not walls.any():
        reasons.append("Momentum: no wall group, so its residual is the load on whatever the surface encloses")
    elif balance.momentum.known:
        reasons.append(_incomparable(balance))
    if energy is not None and energy.relative is not None:
        judge("Energy", "energy", energy.relative * energy.size, energy.size)
    for scalar in carried:
        if scalar.relative is not None:
            judge(f"Carried {scalar.name}", scalar.name, scalar.relative, 1.0)
    if energy is not None and energy.gains(tolerance):
        reasons.append("Doubt: the flow gains mechanical energy from nowhere: a drive is missing, or data are at fault")
    measure = max((law.relative for law in laws if law.relative is not None), default=None)
    state = _of_all(laws, compared)
    closes = {State.OPEN: False, State.UNJUDGED: None}.get(state, True)
    return Verdict(closes, measure, tolerance, tuple(reasons), state, tuple(laws))


def _of_all(laws: Sequence[LawVerdict], compared: bool) -> State:
    states = {law.state for law in laws}
    if State.OPEN in states:
        return State.OPEN
    if not compared or not laws or State.UNJUDGED in states:
        return State.UNJUDGED
    return State.WITHIN_DOUBT if State.WITHIN_DOUBT in states else State.CLOSES


def _incomparable(balance: Balance) -> str:
    setting = balance.setting
    lacking = [g.name for g, known in zip(setting.groups, setting.data.pressure) if not known]
    if balance.load.best() is None:
        return f"Momentum: no load can be given, for no pressure is known at {', '.join(lacking) or 'the walls'}"
    if balance.load.from_balance is None:
        return "Momentum: data are missing at a port, so the load rests on the walls alone and cannot be compared"
    return (
        f"Momentum: no pressure is known at {', '.join(lacking)}, "
        "so the load rests on the balance alone and cannot be compared"
    )


def _momentum_doubts(balance: Balance, tolerance: float) -> list[str]:
    setting = balance.setting
    doubts = []
    walls = setting.walls()
    if walls.any() and not setting.data.traction[walls].all():
        names = [g.name for g, wall, known in zip(setting.groups, walls, setting.data.traction) if wall and not known]
        doubts.append(
            f"Wall friction is not given on {', '.join(names)}, and counts as zero in the load from the walls"
        )
    relative = balance.momentum.relative()
    stricter = relative_without_mean_pressure(balance)
    if relative is not None and stricter is not None and relative <= tolerance < stricter:
        doubts.append(
            f"Doubt: measured against the forces without the mean pressure, the momentum residual is {stricter:.3g}; "
            "the level of pressure makes it look smaller"
        )
    return doubts
