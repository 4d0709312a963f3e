"""Roles against the way the flow goes."""

from __future__ import annotations

from collections.abc import Iterator

from fluxmesh.assess.review.doubt import Doubt, Setting
from fluxmesh.assess.review.evidence import Evidence
from fluxmesh.surface.surface import Role

__all__ = ["role_doubts"]

_NET = 1e-3
"""Share of the flow through the ports below which a net flow says nothing (common practice, no source)."""


def role_doubts(evidence: Evidence) -> Iterator[Doubt]:
    """Doubt inlets that flow leaves, and outlets that it enters.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Yields
    ------
    Doubt
        One a group.
    """
    flows = evidence.balance.table.column("mass_flow")
    for k in evidence.flowing:
        group, flow = evidence.groups[k], float(flows[k])
        against = (group.role is Role.INLET and flow > 0) or (group.role is Role.OUTLET and flow < 0)
        if not against or abs(flow) <= _NET * evidence.through:
            continue
        goes, role = ("leaves", "outlet") if flow > 0 else ("enters", "inlet")
        yield Doubt(
            "role against flow",
            f"'{group.name}' is an {group.role.value}, but its flow {goes} ({abs(flow):.4g} kg/s)",
            "Roles are swapped, or the velocity has the wrong sign",
            (Setting(("groups", group.name, "role"), role),),
            'or "open", if flow may pass either way',
        )
