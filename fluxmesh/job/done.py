"""A case done as `balance` does it, for whatever else shows its result."""

from __future__ import annotations

from fluxmesh.case.model import Case
from fluxmesh.job.outcome import Outcome

__all__ = ["done_case"]


def done_case(case: Case) -> Outcome:
    """Do a case, with the doubts of `check` where the surface is small enough to be reviewed on the way.

    Parameters
    ----------
    case : Case
        A case that was read.

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
        return with_doubts(at, done) if done.surface.face_count <= REVIEWED_FACES else done
    loaded = load_ahead(case)
    from fluxmesh.job.run import REVIEWED_FACES, run_case

    done = run_case(case, loaded=loaded)
    return with_doubts(case, done, loaded=loaded) if done.surface.face_count <= REVIEWED_FACES else done
