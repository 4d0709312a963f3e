"""Three slips at once: tried only where neither one nor two explain anything, and held to more."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import combinations
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.causes.change import clash, paired, stacked
from fluxmesh.assess.causes.entries import Entries
from fluxmesh.assess.causes.residuals import evaluate
from fluxmesh.assess.causes.suspect import Suspect
from fluxmesh.assess.causes.trial import Trial, attempt, rms_of

__all__ = ["three_at_once"]

_MOST_GROUPS: Final = 12  # suspects that concern one group, the likeliest, that are tried
_NEEDED: Final = 0.2  # what is left of what any two of them leave, at most
_CHUNK: Final = 4096


def three_at_once(
    entries: Entries, suspects: Sequence[Suspect], singles: Sequence[Trial], *, keep: float
) -> tuple[list[Trial], int]:
    """Try suspects in threes: those that fit nothing and work on the table itself.

    Parameters
    ----------
    entries : Entries
        The laws.
    suspects : sequence of Suspect
        All suspects.
    singles : sequence of Trial
        Each of them alone.
    keep : float
        What leaves a larger relative residual is not returned.

    Returns
    -------
    found : list of Trial
        Those where each of the three is needed.
    count : int
        Number of threes that were tried.
    """
    leaves = {id(trial.suspects[0]): trial.rms for trial in singles}
    plain = [each for each in suspects if each.entries is None and not each.alone and not each.fitted
             and not each.expected and each.judges_angular]  # fmt: skip
    of_groups = sorted((each for each in plain if each.group is not None), key=lambda each: leaves[id(each)])
    chosen = [each for each in plain if each.group is None] + of_groups[:_MOST_GROUPS]
    if len(chosen) < 3:
        return [], 0
    knobs = stacked([each.change for each in chosen], entries.count)
    threes = _together(chosen)
    found: list[Trial] = []
    for start in range(0, len(threes), _CHUNK):
        one, two, three = threes[start : start + _CHUNK].T
        at_once = paired(knobs, one, two)
        at_once = paired(at_once, np.arange(one.size), np.arange(one.size), knobs.rows(three))
        members = [(chosen[i], chosen[j], chosen[k]) for i, j, k in zip(one, two, three)]
        found += attempt(entries, members, at_once, keep)
    number = {id(each): k for k, each in enumerate(chosen)}
    needed = []
    for trial in found:
        rows = [number[id(each)] for each in trial.suspects]
        first, second = np.array(list(combinations(rows, 2)), dtype=np.int64).T
        least = float(rms_of(evaluate(entries, paired(knobs, first, second)), trial.laws).min())
        if trial.rms <= _NEEDED * least:
            needed.append(trial)
    return needed, len(threes)


def _together(suspects: Sequence[Suspect]) -> NDArray[np.int64]:
    """Threes of different kinds that do not touch the same thing, shape (n, 3)."""
    ids = np.array([each.id for each in suspects])
    allowed = ~clash([each.change for each in suspects]) & (ids[:, None] != ids[None])
    first, second = np.nonzero(np.triu(allowed, 1))
    made = [np.zeros((0, 3), dtype=np.int64)]
    for i, j in zip(first, second):
        third = np.flatnonzero(allowed[i] & allowed[j])
        third = third[third > j]
        made.append(np.stack([np.full_like(third, i), np.full_like(third, j), third], axis=1))
    return np.concatenate(made)
