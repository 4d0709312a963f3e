"""Speeds that no such flow has."""

from __future__ import annotations

from collections.abc import Iterator

from fluxmesh.assess.review.doubt import Doubt, Setting
from fluxmesh.assess.review.evidence import Evidence
from fluxmesh.assess.review.kinds.density import is_liquid
from fluxmesh.integral.layout import PER_GROUP
from fluxmesh.units import unit_factor

__all__ = ["speed_doubts"]

# mean speeds at the ports in m/s (common practice, no source)
_LIQUID = 100.0
_GAS = 1500.0
_UNITS = ("mm/s", "cm/s", "ft/s", "ft/min")


def speed_doubts(evidence: Evidence) -> Iterator[Doubt]:
    """Doubt exported velocities that are too large for the fluid.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Yields
    ------
    Doubt
        One at most.
    """
    velocity = evidence.flow.velocity
    named = next((named for named in evidence.named if named.quantity == "velocity"), None)
    table = evidence.balance.table
    exported = [
        k
        for k in evidence.flowing
        if velocity.where[k] > PER_GROUP and evidence.groups[k].name not in evidence.supplied
    ]
    area = float(table.column("area")[exported].sum())
    if named is None or area <= 0.0:
        return
    speed = float(table.column("speed_area")[exported].sum()) / area
    density = float(table.column("density_area")[exported].sum()) / area
    fluid, most = ("a liquid", _LIQUID) if is_liquid(density) else ("a gas", _GAS)
    if speed <= most:
        return
    unit = next((unit for unit in _UNITS if speed / named.factor * unit_factor(unit, "m/s", "") <= most), "mm/s")
    yield Doubt(
        "speed too large",
        f"The mean speed at the ports is {speed:.4g} m/s, much for {fluid}",
        "The momentum flux goes with its square",
        (Setting(("flow", "velocity", "unit"), unit),),
    )
