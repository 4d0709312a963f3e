"""Whether a series closes: every instant against the largest entries of all."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Final

import numpy as np

from fluxmesh.assess.verdict import Verdict
from fluxmesh.balance.series import Series
from fluxmesh.balance.setting import Setting
from fluxmesh.balance.wrench import Vector

__all__ = ["series_verdict"]

# as for a single balance: below this share of pressure times area a force is noise of the data
_SMALLEST_SHARE: Final = 1e-4


def series_verdict(series: Series, *, tolerance: float = 0.01, encloses_hardware: bool = True) -> Verdict:
    """Judge a series: each instant against the largest entries of all.

    While a flow starts or reverses, the entries of one instant may nearly vanish, and what
    is left of them is noise of the data; a share of the largest is what matters for the hardware.

    Parameters
    ----------
    series : Series
        The balances.
    tolerance : float, optional
        Largest residual that closes, as a share of the largest entries of the series.
    encloses_hardware : bool, optional
        For a surface without walls: whether a body may be inside, so that the
        momentum residual is the load on it and not an error.

    Returns
    -------
    Verdict
        With reasons; `closes` is None when nothing speaks against it, but momentum
        cannot be compared at every instant.
    """
    first = series.instants[0].balance
    if not first.setting.closed:
        said = "The surface is open: integrals of each group only, nothing is balanced"
        return Verdict(None, None, tolerance, (said,))
    reasons: list[str] = []
    measures: list[float] = []

    def judge(law: str, sizes: Vector, scale: float) -> None:
        known = np.isfinite(sizes)
        if not known.any() or scale <= 0.0:
            reasons.append(f"{law}: " + ("nothing is known" if not known.any() else "there is nothing to balance"))
            return
        k = int(np.nanargmax(sizes))
        worst = float(sizes[k]) / scale
        measures.append(worst)
        word = "within" if worst <= tolerance else "MORE than"
        reasons.append(
            f"{law}: residual at most {worst:.3g} of the largest entries, at {series.instants[k].time:g} s; {word} the "
            f"tolerance {tolerance:g}"
        )
        if not known.all():
            lacking = ", ".join(f"{one.time:g} s" for one, there in zip(series.instants, known) if not there)
            reasons.append(f"{law}: not known at {lacking}")

    lacking = _without_flow(one.balance.setting for one in series.instants)
    if lacking:
        reasons.append(f"Mass: cannot be judged, no flow is known at {', '.join(lacking)}")
    else:
        judge("Mass", np.abs(series.mass_residual()), series.mass_size())
    walls = bool(first.setting.walls().any())
    complete = all(one.balance.complete for one in series.instants)
    if not walls and encloses_hardware:
        reasons.append("Momentum: no wall group, so its residual is the load on whatever the surface encloses")
    elif not any(one.balance.complete for one in series.instants):
        reasons.append("Momentum: " + _why_incomplete(series))
    else:
        forces, arm = _smallest_force(series), (float(first.table.total("area")) / (4 * np.pi)) ** 0.5
        forces = max(forces, series.momentum_size())
        judge("Linear momentum", np.linalg.norm(series.momentum_residual(), axis=1), forces)
        if any(one.angular_known() for one in series.instants):
            moments = max(series.angular_size(), arm * forces)
            judge("Angular momentum", np.linalg.norm(series.angular_residual(), axis=1), moments)
        else:
            reasons.append("Angular momentum: its rate inside is not known, so it is not judged")
    measure = max(measures) if measures else None
    closes: bool | None = None
    if measure is not None and measure > tolerance:
        closes = False
    elif measure is not None and complete and (walls or not encloses_hardware):
        closes = True
    return Verdict(closes, measure, tolerance, tuple(reasons))


def _without_flow(settings: Iterable[Setting]) -> list[str]:
    """Ports whose flow is not known at some instant."""
    found: dict[str, None] = {}
    for setting in settings:
        pairs = zip(setting.groups, setting.data.flux)
        found.update({group.name: None for group, known in pairs if group.role.is_port and not known})
    return list(found)


def _why_incomplete(series: Series) -> str:
    first = series.instants[0].balance
    if not first.momentum.known:
        return "the rate of the momentum inside is not known, so no load is demanded; give volumes"
    setting = first.setting
    names = [group.name for group, known in zip(setting.groups, setting.data.pressure) if not known]
    if names:
        return f"no pressure is known at {', '.join(names)}, so nothing can be compared"
    return "data are missing at a port, so nothing can be compared"


def _smallest_force(series: Series) -> float:
    """Share of pressure times area below which a force is noise, at the instant where it is largest."""
    tables = [one.balance.table for one in series.instants]
    acting = [
        float((np.abs(table.column("pressure_area")) + 2 * np.abs(table.column("dynamic_pressure_area"))).sum())
        for table in tables
    ]
    return _SMALLEST_SHARE * max(acting)
