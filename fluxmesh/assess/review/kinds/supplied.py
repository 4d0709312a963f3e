"""Supplied port flows that do not balance."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from fluxmesh.assess.review.doubt import Doubt, Setting
from fluxmesh.assess.review.evidence import Evidence
from fluxmesh.assess.review.toml import TomlValue

__all__ = ["supplied_doubts"]


def supplied_doubts(evidence: Evidence) -> Iterator[Doubt]:
    """Doubt supplied flows of which more enters than leaves, or less.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Yields
    ------
    Doubt
        One at most. Nothing is said where a port's flow is exported or not known.
    """
    mass, table = evidence.balance.mass, evidence.balance.table
    ports = [int(k) for k in np.flatnonzero(evidence.balance.setting.ports())]
    given = {k: evidence.supplied.get(evidence.groups[k].name) for k in ports}
    if mass is None or mass.relative is None or not ports or any(entry is None for entry in given.values()):
        return
    if mass.relative <= evidence.tolerance:
        return
    flows = table.column("mass_flow")
    # the port whose flow would change least in proportion
    k = max(ports, key=lambda port: abs(float(flows[port])))
    factor = 1.0 - mass.residual / float(flows[k])
    entry = given[k]
    assert entry is not None
    value: TomlValue
    if isinstance(entry.value, tuple):
        value = [_rounded(factor * part) for part in entry.value]
    else:
        unit = {"flow_rate": "m^3/s", "mass_flow": "kg/s", "speed": "m/s"}[entry.key]
        value = f"{_rounded(factor * entry.value)!r} {unit}"
    more, less = ("enters", "leaves") if mass.residual < 0 else ("leaves", "enters")
    yield Doubt(
        "supplied flows out of balance",
        f"Of the supplied flow {mass.inflow:.5g} kg/s enters and {mass.outflow:.5g} kg/s leaves",
        f"More {more} than {less}: the momentum that the difference carries is in the load",
        (Setting(("groups", evidence.groups[k].name, entry.key), value),),
        "or correct another port" if len(ports) > 1 else "or add the port that is missing",
    )


def _rounded(value: float) -> float:
    return float(f"{value:.9g}")
