"""An outcome with the doubt of its figures: the verdict looks again, and reports what the case asks for."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from fluxmesh.assess.comparison import compare_reported
from fluxmesh.assess.doubt.told import DoubtOfFigures
from fluxmesh.assess.verdict import verdict_of
from fluxmesh.case.model import Case
from fluxmesh.job.doubt import doubt_of
from fluxmesh.job.outcome import Outcome

__all__ = ["with_budget"]

_RESIDUALS = {"mass": "mass", "momentum": "momentum", "angular": "angular_momentum", "energy": "energy"}


def with_budget(case: Case, outcome: Outcome, *, draws: int = 0, seed: int = 0, threads: int | None = None) -> Outcome:
    """Return an outcome with the doubt of every figure.

    Parameters
    ----------
    case : Case
        The case.
    outcome : Outcome
        What `fluxmesh.job.run.run_case` made of it.
    draws : int, optional
        Draws of the inputs for a Monte Carlo run; none by default.
    seed : int, optional
        The same seed gives the same draws.
    threads : int, optional
        Threads; all cores by default.

    Returns
    -------
    Outcome
        With its doubt, and judged again with it. Where the case asks for
        quadratic patches the balance is the sharpened one.

    Raises
    ------
    InputError
        A case that cannot be run with an input moved within its own doubt.
    """
    doubt = doubt_of(
        case,
        outcome,
        draws=draws,
        seed=seed,
        facets_are_geometry=case.surface.facets_are_geometry,
        threads=threads,
    )
    quadratic = case.flow.reconstruction == "quadratic" and doubt.sharpened is not None
    balance = outcome.balance
    if quadratic and doubt.sharpened is not None:
        balance = replace(doubt.sharpened, ports=balance.ports)
    verdict = verdict_of(
        balance,
        tolerance=case.closure.tolerance,
        encloses_hardware=case.closure.encloses_hardware,
        energy=outcome.energy,
        carried=outcome.carried,
        doubts=_of_residuals(doubt, sharpened=quadratic),
    )
    done = replace(outcome, balance=balance, verdict=verdict, doubt=doubt, sharpened_reported=quadratic)
    asked = case.reported
    if asked is None:
        return done
    comparison = compare_reported(
        balance,
        force=asked.force,
        moment=asked.moment,
        on=asked.on,
        density=outcome.flow.uniform_density(),
        doubt=_of_walls(doubt, sharpened=quadratic),
    )
    return replace(done, comparison=comparison)


def _of_residuals(doubt: DoubtOfFigures, *, sharpened: bool) -> dict[str, float]:
    """Half widths of the residuals, by law."""
    widths = doubt.half_widths(sharpened=sharpened)
    found = {}
    for law, key in _RESIDUALS.items():
        width = widths.get((key, "residual"))
        if width is not None and np.isfinite(width).all():
            found[law] = float(np.linalg.norm(width))
    return found


def _of_walls(doubt: DoubtOfFigures, *, sharpened: bool) -> np.ndarray[tuple[int], np.dtype[np.float64]] | None:
    width = doubt.half_widths(sharpened=sharpened).get(("hardware_load", "from_walls", "force"))
    return None if width is None else np.asarray(width, dtype=np.float64)
