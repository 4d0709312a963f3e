"""A case done as `balance` does it, for whatever else shows its result."""

from __future__ import annotations

from fluxmesh.case.model import Case
from fluxmesh.job.outcome import Outcome

__all__ = ["done_case"]


def done_case(case: Case, *, budget: bool = False) -> Outcome:
    """Do a case, with the doubts of `check` where the surface is small enough to be reviewed on the way.

    Parameters
    ----------
    case : Case
        A case that was read.
    budget : bool, optional
        Whether with the doubt of every figure too, as far as `balance` tells it.

    Returns
    -------
    Outcome
        Of a series, that of the instant with the largest reaction.

    Raises
    ------
    InputError
        The input is at fault; the message says where.
    """
    from fluxmesh.job.ahead import load_ahead
    from fluxmesh.job.check import with_doubts

    if case.storage is not None and case.storage.is_series():
        from fluxmesh.job.governing import governing_instant
        from fluxmesh.job.run import REVIEWED_FACES
        from fluxmesh.job.series import run_series

        at, done = governing_instant(case, run_series(case))
        small = done.surface.face_count <= REVIEWED_FACES
        return _told(at, with_doubts(at, done) if small else done, budget and small)
    loaded = load_ahead(case)
    from fluxmesh.job.run import REVIEWED_FACES, run_case

    done = run_case(case, loaded=loaded)
    small = done.surface.face_count <= REVIEWED_FACES
    done = with_doubts(case, done, loaded=loaded) if small else done
    return _told(case, done, budget and (small or case.flow.reconstruction == "quadratic"))


def _told(case: Case, done: Outcome, budget: bool) -> Outcome:
    if not budget:
        return done
    from fluxmesh.job.doubted import with_budget

    return with_budget(case, done)
