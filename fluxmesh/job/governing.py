"""The instant of a series that governs: the one with the largest reaction, or load."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from fluxmesh.assess.verdict import verdict_of
from fluxmesh.case.model import Case
from fluxmesh.job.outcome import Outcome
from fluxmesh.job.run import run_case
from fluxmesh.job.series import SeriesOutcome, instant_case

__all__ = ["governing_instant"]


def governing_instant(case: Case, done: SeriesOutcome) -> tuple[Case, Outcome]:
    """Return the instant with the largest reaction as a case of its own, done.

    Parameters
    ----------
    case : Case
        The case of the series.
    done : SeriesOutcome
        From `fluxmesh.job.series.run_series`.

    Returns
    -------
    case : Case
        That instant's.
    outcome : Outcome
        With the rates of the series.
    """
    sizes = np.nan_to_num(np.linalg.norm(done.series.reaction(), axis=1), nan=-1.0)
    number = int(np.argmax(sizes))
    one = done.series.instants[number]
    at = instant_case(case, number)
    outcome = run_case(at, storage=one.balance.storage)
    verdict = verdict_of(
        one.balance,
        tolerance=case.closure.tolerance,
        encloses_hardware=case.closure.encloses_hardware,
        energy=outcome.energy,
        carried=outcome.carried,
    )
    chosen = f"The instant at {one.time:g} s of {len(done.series.instants)}, that with the largest reaction"
    return at, replace(
        outcome,
        title=f"{outcome.title}, at {one.time:g} s",
        balance=replace(one.balance, ports=outcome.balance.ports),
        verdict=verdict,
        said=(chosen, *outcome.said),
    )
