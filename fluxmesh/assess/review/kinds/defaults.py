"""Defaults that the case did not state, where they change the load."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from fluxmesh.assess.review.doubt import Doubt, Setting
from fluxmesh.assess.review.evidence import Evidence
from fluxmesh.assess.review.kinds.alternatives import momentum_totals
from fluxmesh.assess.review.kinds.ambient import exported_pressure
from fluxmesh.assess.review.kinds.density import is_liquid
from fluxmesh.assess.review.kinds.gravity import STANDARD_GRAVITY
from fluxmesh.assess.review.kinds.traction import traction_agreement
from fluxmesh.balance.hardware import HardwareLoad

__all__ = ["default_doubts"]

# common practice, no source
_OPEN = 1e-3  # area vector of the walls over their area, above which a constant pressure loads them
_CLOSES = 0.3  # residual over the weight, below which the head is where the case says
_OUTSIDE = 2.0  # distance of the anchor from the middle of the surface, over its diagonal


def default_doubts(evidence: Evidence) -> Iterator[Doubt]:
    """Doubt defaults that were taken silently.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Yields
    ------
    Doubt
        One for each; none where the default changes nothing, or the data confirm it.
    """
    for look in (_kind, _head, _acts_on, _gravity, _anchor):
        doubt = look(evidence)
        if doubt is not None:
            yield doubt


def _kind(evidence: Evidence) -> Doubt | None:
    flow, walls, table = evidence.flow, list(evidence.walls), evidence.balance.table
    if not evidence.has_array(flow.pressure) or "flow.pressure.kind" in evidence.stated or not walls:
        return None
    vector = float(np.linalg.norm(table.column("area_vector")[walls].sum(axis=0)))
    if vector <= _OPEN * float(table.column("area")[walls].sum()) or _is_gauge(evidence):
        return None
    return Doubt(
        "kind not stated",
        "The kind of the exported pressure is not stated: gauge was taken",
        f"If it is absolute, the load is off by the ambient pressure times {vector:.4g} m², the opening of the walls",
        (Setting(("flow", "pressure", "kind"), "gauge"),),
        'or "absolute" or "kinematic"',
    )


def _is_gauge(evidence: Evidence) -> bool:
    """Return whether the data show that the pressure is gauge: a negative value is not absolute, and it closes."""
    exported, relative = exported_pressure(evidence), evidence.balance.momentum.relative()
    closes = evidence.balance.complete and relative is not None and relative <= evidence.tolerance
    return closes and exported is not None and exported[1] < 0.0


def _head(evidence: Evidence) -> Doubt | None:
    flow = evidence.flow
    if not evidence.has_array(flow.pressure) or "flow.pressure.head" in evidence.stated:
        return None
    fluid = evidence.balance.fluid
    heavy = 0.0 if fluid is None else float(np.linalg.norm(fluid.weight))
    if heavy <= evidence.tolerance * _load_size(evidence):
        return None
    totals = momentum_totals(evidence)
    if totals is not None and float(np.linalg.norm(totals.residual)) < _CLOSES * heavy:
        return None
    return Doubt(
        "head not stated",
        "Whether the exported pressure holds the hydrostatic head is not stated: included was taken",
        f"The weight of the fluid ({heavy:.4g} N) acts on the walls through it",
        (Setting(("flow", "pressure", "head"), "included"),),
        'or "removed", if the flow was computed without gravity',
    )


def _acts_on(evidence: Evidence) -> Doubt | None:
    named = any(array.quantity == "traction" for array in evidence.named)
    if not named or "flow.traction.acts_on" in evidence.stated:
        return None
    walls = evidence.balance.setting.walls()
    friction = float(np.linalg.norm(evidence.balance.momentum.viscous(walls)))
    if friction <= evidence.tolerance * _load_size(evidence) or traction_agreement(evidence) is not None:
        return None
    return Doubt(
        "acts_on not stated",
        "The body that the exported traction acts on is not stated: wall was taken",
        f"With the other one the load from the walls changes by {2 * friction:.4g} N",
        (Setting(("flow", "traction", "acts_on"), "wall"),),
        'or "fluid"',
    )


def _gravity(evidence: Evidence) -> Doubt | None:
    fluid, density = evidence.balance.fluid, evidence.balance.setting.fluid_density
    if fluid is None or density is None or "fluid.gravity" in evidence.stated or not is_liquid(density):
        return None
    heavy = fluid.mass * STANDARD_GRAVITY
    if heavy <= evidence.tolerance * _load_size(evidence):
        return None
    return Doubt(
        "gravity not stated",
        "No gravity is given: no weight is in the load or the reaction",
        f"The fluid held weighs {heavy:.4g} N",
        (Setting(("fluid", "gravity"), [0.0, 0.0, -STANDARD_GRAVITY]),),
        "if z points up; [0, 0, 0] to leave weights out on purpose",
    )


def _anchor(evidence: Evidence) -> Doubt | None:
    if "anchor.at" in evidence.stated or evidence.balance.reaction is None or not evidence.walls:
        return None
    low, high = evidence.box
    away, size = float(np.linalg.norm((low + high) / 2)), float(np.linalg.norm(high - low))
    if away <= _OUTSIDE * size:
        return None
    middle = [float(f"{x:.4g}") for x in (low + high) / 2]
    return Doubt(
        "anchor not stated",
        f"The anchor is not stated: the origin was taken, {away:.4g} m from a surface {size:.4g} m across",
        "Moments are about the anchor, and grow with that distance",
        (Setting(("anchor", "at"), middle),),
        "or where the hardware is held",
    )


def _load_size(evidence: Evidence) -> float:
    """Size of the load that the defaults are compared with, N."""
    load: HardwareLoad = evidence.balance.load
    best = load.best()
    return 0.0 if best is None else float(np.linalg.norm(best.force))
