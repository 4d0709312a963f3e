"""Ports that are no clean cuts: flow both ways, or not plane."""

from __future__ import annotations

from collections.abc import Iterator

from fluxmesh.assess.review.doubt import Doubt, Setting
from fluxmesh.assess.review.evidence import Evidence
from fluxmesh.assess.review.facts import PLANE, flatness_of
from fluxmesh.surface.surface import Role

__all__ = ["port_doubts"]

_REVERSED = 0.01
"""Share of reversed flow that a reviewer would ask about (common practice, no source)."""


def port_doubts(evidence: Evidence) -> Iterator[Doubt]:
    """Doubt inlets and outlets that flow passes both ways, or that are not plane.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Yields
    ------
    Doubt
        Open groups are never doubted: flow may pass them either way, and they may be bent.
    """
    for k, group in enumerate(evidence.groups):
        if group.role not in (Role.INLET, Role.OUTLET):
            continue
        open_ = (Setting(("groups", group.name, "role"), "open"),)
        share = evidence.balance.ports[group.name].reversed_share
        if share is not None and share > _REVERSED:
            yield Doubt(
                "reversed flow",
                f"{share:.1%} of what passes the {group.role.value} '{group.name}' flows backward",
                "A cut through a recirculation is sensitive to interpolation, and its means say little",
                open_,
                "better: move the cut to where the flow is one way",
            )
        flat = flatness_of(evidence, k)
        if flat < PLANE:
            yield Doubt(
                "port not plane",
                f"The {group.role.value} '{group.name}' is not plane (its area vector is {flat:.3f} of its area)",
                "Faces of the wall may be in the port, or the other way round",
                open_,
                "that is for a port that is bent on purpose; else correct its tag or pick",
            )
