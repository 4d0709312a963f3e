"""Whether the numbers close, and why one may say so."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Final

import numpy as np

from fluxmesh.balance.balance import Balance
from fluxmesh.balance.carried import CarriedBalance
from fluxmesh.balance.energy import EnergyBalance

__all__ = ["Verdict", "relative_without_mean_pressure", "verdict_of"]

# far above the rounding of a single-precision export (6e-8), far below any load worth anchoring
_SMALLEST_SHARE: Final = 1e-4


@dataclass(frozen=True)
class Verdict:
    """The judgement over a balance.

    Attributes
    ----------
    closes : bool or None
        None when nothing speaks against it, but the momentum balance cannot
        be compared with anything.
    measure : float or None
        The largest relative residual of the laws judged.
    tolerance : float
        Largest relative residual that closes.
    reasons : tuple of str
        What the judgement rests on, one sentence each.
    """

    closes: bool | None
    measure: float | None
    tolerance: float
    reasons: tuple[str, ...]


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


def _judged(balance: Balance) -> list[tuple[str, float]]:
    """Momentum laws with the measure that they are judged by.

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
    return [(law, float(np.linalg.norm(ledger.residual())) / size) for law, ledger, size in laws if size > 0]


def _compare(law: str, relative: float, tolerance: float) -> str:
    word = "within" if relative <= tolerance else "MORE than"
    return f"{law}: residual {relative:.3g} of the entries, {word} the tolerance {tolerance:g}"


def verdict_of(
    balance: Balance,
    *,
    tolerance: float = 0.01,
    encloses_hardware: bool = True,
    energy: EnergyBalance | None = None,
    carried: Sequence[CarriedBalance] = (),
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
    measures: list[float] = []
    if balance.mass is not None and balance.mass.relative is not None:
        lacking = [g.name for g, known in zip(setting.groups, setting.data.flux) if g.role.is_port and not known]
        if lacking:
            reasons.append(f"Mass: cannot be judged, no flow is known at {', '.join(lacking)}")
        else:
            measures.append(balance.mass.relative)
            reasons.append(_compare("Mass", balance.mass.relative, tolerance))
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
        for law, relative in _judged(balance):
            measures.append(relative)
            reasons.append(_compare(law, relative, tolerance))
        reasons += _momentum_doubts(balance, tolerance)
    elif balance.complete and not walls.any():
        reasons.append("Momentum: no wall group, so its residual is the load on whatever the surface encloses")
    elif balance.momentum.known:
        reasons.append(_incomparable(balance))
    further = [("Energy", energy.relative)] if energy is not None and energy.judged else []
    further += [(f"Carried {scalar.name}", scalar.relative) for scalar in carried]
    for law, share in further:
        if share is not None:
            measures.append(share)
            reasons.append(_compare(law, share, tolerance))
    if energy is not None and energy.gains(tolerance):
        reasons.append("Doubt: the flow gains mechanical energy from nowhere: a drive is missing, or data are at fault")
    measure = max(measures) if measures else None
    closes: bool | None = None
    if measure is not None and measure > tolerance:
        closes = False
    elif measure is not None and compared:
        closes = True
    return Verdict(closes, measure, tolerance, tuple(reasons))


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
