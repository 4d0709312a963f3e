"""What would explain that the balance of a case does not close."""

from __future__ import annotations

from dataclasses import replace
from typing import Final

from fluxmesh.assess.causes import CausesFound, Facts, Source, facts_of, find_causes
from fluxmesh.case.groups import GroupSection
from fluxmesh.case.model import Case
from fluxmesh.job.mesh import Loaded
from fluxmesh.job.outcome import Outcome

__all__ = ["case_facts", "causes_of_case", "causes_of_outcome"]

_SUPPLIED: Final = {
    "flow_rate": Source.FLOW_RATE,
    "mass_flow": Source.MASS_FLOW,
    "speed": Source.VELOCITY,
    "velocity": Source.VELOCITY,
}


def causes_of_case(case: Case, *, loaded: Loaded | None = None) -> CausesFound:
    """Do the main job for a case, and find what would explain that its balance does not close.

    Parameters
    ----------
    case : Case
        A case that was read; of a series the instant with the largest reaction counts.
    loaded : Loaded, optional
        Its mesh, if it was read before.

    Returns
    -------
    CausesFound
        Best first; none where the balance closes.

    Raises
    ------
    InputError
        The input is at fault; the message says where.
    """
    if case.storage is not None and case.storage.is_series():
        from fluxmesh.job.governing import governing_instant
        from fluxmesh.job.series import run_series

        at, outcome = governing_instant(case, run_series(case))
        return causes_of_outcome(at, outcome)
    from fluxmesh.job.run import run_case

    return causes_of_outcome(case, run_case(case, loaded=loaded))


def causes_of_outcome(case: Case, outcome: Outcome) -> CausesFound:
    """Find what would explain that a balance does not close, when it was done.

    Parameters
    ----------
    case : Case
        The case.
    outcome : Outcome
        What it gave.
    """
    return find_causes(
        outcome.balance,
        case_facts(case, outcome),
        tolerance=case.closure.tolerance,
        encloses_hardware=case.closure.encloses_hardware,
    )


def case_facts(case: Case, outcome: Outcome) -> Facts:
    """Return how the data of a case were read.

    Parameters
    ----------
    case : Case
        The case.
    outcome : Outcome
        What it gave.
    """
    setting, flow = outcome.balance.setting, case.flow
    facts = facts_of(outcome.flow, setting, tuple(group.name for group in outcome.surface.groups))
    sources = []
    for known, group in zip(facts.flow, setting.groups):
        section = case.groups.get(group.name)
        sources.append(known if section is None else _source(section, known))
    key = next((name for name in ("traction", "stress", "velocity_gradient") if getattr(flow, name) is not None), "")
    stated = flow.pressure is not None and "unit" in flow.pressure.model_fields_set
    return replace(
        facts,
        flow=tuple(sources),
        length_unit=case.surface.length_unit.unit,
        speed_unit=flow.velocity.unit.unit if flow.velocity is not None else facts.speed_unit,
        pressure_unit=flow.pressure.unit.unit if stated and flow.pressure is not None else "",
        velocity_frame=flow.velocity.frame if flow.velocity is not None else facts.velocity_frame,
        traction_key=key,
        traction_on=flow.traction.acts_on if flow.traction is not None else "fluid",
        mirrored=case.surface.mirror,
        flux_key=flow.mass_flux.positive if flow.mass_flux is not None else facts.flux_key,
        velocities={name: section.velocity for name, section in case.groups.items() if section.velocity is not None},
    )


def _source(section: GroupSection, known: Source) -> Source:
    """Where the flow of a group comes from, as its table says."""
    if section.from_continuity:
        return Source.CONTINUITY
    for key in section.supplied_flow():
        return _SUPPLIED[key]
    return known
