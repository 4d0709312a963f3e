"""What would explain a balance that does not close, ranked by what it explains against how much it assumes.

Under a cause the residuals that are left are taken for noise of a size that is not known. With ``n`` scalar
residuals, ``k`` numbers fitted and ``s`` the root mean square of what is left, minus the logarithm of the likelihood
is ``(n - k) log s`` and a constant, with the noise integrated out under the prior ``1/s`` (Jeffreys; from memory);
what the cause assumes is added to it. The mean square is no smaller than what the data may be trusted to.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from math import inf, log, sqrt
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.causes.change import Change, stacked
from fluxmesh.assess.causes.entries import entries_of
from fluxmesh.assess.causes.evidence import ATMOSPHERE
from fluxmesh.assess.causes.facts import Facts, plain_facts
from fluxmesh.assess.causes.registry import CAUSES, IDS
from fluxmesh.assess.causes.residuals import Residuals, evaluate
from fluxmesh.assess.causes.suspect import Cause, Suspect
from fluxmesh.assess.causes.threes import three_at_once
from fluxmesh.assess.causes.trial import Trial, measures, rms_of, trials
from fluxmesh.balance.balance import Balance

__all__ = ["CausesFound", "FoundCause", "find_causes"]

_DECISIVE: Final = (0.1, 0.02, 0.02)  # what is left of what there was, at most, under one cause, two and three
_SHARE: Final = 0.5  # a cause that only halves what there was explains nothing, tolerance or not
_BESIDE: Final = 0.3  # what is left, over the entry that a change of scale made to match, at most
_NOISE: Final = 1e-3  # of the tolerance: below, residuals count as equal
_TUNED: Final = 0.05  # of the tolerance: what fitted numbers, and pairs chosen among thousands, leave counts no less
_EQUAL: Final = 1.5  # ratio of what is left, of causes that explain equally
_FAR: Final = 15.0  # less likely than the best by this power of e: not worth saying
_MOST: Final = 10
_BOTH: Final = 4.0  # two slips at once, beyond what each assumes: seldom made, and chosen among thousands of pairs
_VACUUM: Final = 4.5  # that a pressure is below vacuum: the level of a gauge pressure may be any, but seldom is


@dataclass(frozen=True)
class FoundCause:
    """What would explain a balance that does not close.

    Attributes
    ----------
    ids : tuple of str
        One, or two or three that go together.
    groups : tuple of str
        Groups concerned, if any.
    residual_before, residual_after : float
        Largest relative residual of the laws that are judged, as the verdict has it.
    statement : str
        What would be so.
    fix : str
        The line of the case to change, or what else to do.
    score : float
        Minus the logarithm of how likely it is; only differences mean anything.
    equally : tuple of str
        Ids of the other causes that explain the residuals as well.
    """

    ids: tuple[str, ...]
    groups: tuple[str, ...]
    residual_before: float
    residual_after: float
    statement: str
    fix: str
    score: float
    equally: tuple[str, ...] = ()

    @property
    def id(self) -> str:
        """The ids, joined by a plus sign."""
        return "+".join(self.ids)

    @property
    def group(self) -> str | None:
        """The groups concerned, joined by a plus sign; None without any."""
        return "+".join(self.groups) or None


@dataclass(frozen=True)
class CausesFound:
    """What a search for causes gave.

    Attributes
    ----------
    causes : tuple of FoundCause
        Best first.
    residual : float or None
        Largest relative residual of the laws that are judged; None when none is.
    tolerance : float
        Largest that closes.
    tried : tuple of str
        Ids of the causes that were tried.
    untried : tuple of str
        Ids of those that the data cannot tell.
    pairs, threes : int
        Number of pairs that were tried, and of threes, where no pair explained anything.
    note : str
        Why there is nothing to explain, or that nothing explains it; empty otherwise.
    """

    causes: tuple[FoundCause, ...]
    residual: float | None
    tolerance: float
    tried: tuple[str, ...] = ()
    untried: tuple[str, ...] = ()
    pairs: int = 0
    threes: int = 0
    note: str = ""

    def residual_closes(self) -> bool:
        """Return whether there was nothing to explain."""
        return self.residual is None or self.residual <= self.tolerance


@dataclass(frozen=True, eq=False)
class _Now:
    """How things stand, and by what a trial is judged."""

    left: Residuals
    relative: tuple[float, float, float]
    measure: float
    strict: float
    rms: float
    count: int
    tolerance: float
    floor: float
    tuned: float
    open: bool
    vacuum: float


def find_causes(
    balance: Balance,
    facts: Facts | None = None,
    *,
    tolerance: float = 0.01,
    encloses_hardware: bool = True,
    noise: float | None = None,
    causes: Iterable[Cause] = CAUSES,
) -> CausesFound:
    """Find what would explain that a balance does not close, from its integrals alone.

    Parameters
    ----------
    balance : Balance
        The balance.
    facts : Facts, optional
        How its data were read; by default all as for a table that says nothing of it.
    tolerance : float, optional
        Largest relative residual that closes.
    encloses_hardware : bool, optional
        For a surface without walls: whether a body may be inside.
    noise : float, optional
        Relative residual that the data may leave at best; 1e-3 of the tolerance by default.
    causes : iterable of Cause, optional
        Which to try; all by default.

    Returns
    -------
    CausesFound
        No cause where the balance closes, or nothing can be judged.
    """
    known = plain_facts(balance.setting) if facts is None else facts
    entries = entries_of(balance, known, encloses_hardware=encloses_hardware)
    laws = entries.laws
    if laws.count() == 0:
        return CausesFound((), None, tolerance, note="No law can be judged, so there is nothing to explain")
    if not balance.setting.closed and not balance.setting.ports().any():
        return CausesFound((), None, tolerance, note="An open piece without ports: there is nothing to balance")
    left = evaluate(entries, stacked([Change()], entries.count))
    measure = float(measures(left, laws)[0])
    if measure <= tolerance and not entries.open:
        return CausesFound((), measure, tolerance, note="The balance closes: there is nothing to explain")
    now = _Now(
        left,
        _three(left.relative(strict=True)[0]),
        measure,
        float(measures(left, laws, strict=True)[0]),
        float(rms_of(left, laws)[0]),
        laws.count(),
        tolerance,
        _NOISE * tolerance if noise is None else noise,
        _TUNED * tolerance if noise is None else max(noise, _TUNED * tolerance),
        entries.open,
        -(ATMOSPHERE if known.ambient is None else known.ambient),
    )
    suspects = [suspect for cause in causes for suspect in cause(entries, left)]
    singles, pairs, count = trials(entries, suspects, keep=max(tolerance, _DECISIVE[1] * now.strict))
    ranked, threes = _ranked(singles, pairs, now, entries.names()), 0
    if not ranked and measure > tolerance:
        # what is left must close, and be a small part of what there was: so many are tried
        found, threes = three_at_once(entries, suspects, singles, keep=min(tolerance, _DECISIVE[2] * now.strict))
        ranked = _ranked(singles, found, now, entries.names())
    tried = {suspect.id for suspect in suspects}
    note = "" if ranked else "None of the causes that were tried explains it"
    return CausesFound(
        tuple(ranked),
        measure,
        tolerance,
        tuple(sorted(tried)),
        tuple(sorted(set(IDS) - tried)),
        count,
        threes,
        note,
    )


def _three(values: NDArray[np.float64]) -> tuple[float, float, float]:
    return float(values[0]), float(values[1]), float(values[2])


def _score(trial: Trial, now: _Now) -> float:
    """Minus the logarithm of the likelihood, and what is assumed."""
    cost = sum(suspect.cost for suspect in trial.suspects) + _BOTH * (len(trial.suspects) - 1)
    expected = sum(suspect.expected for suspect in trial.suspects)
    count = trial.laws.count()
    # laws that it leaves unjudged are taken to close just so
    cost += (now.count - count) * log(now.tolerance)
    if float(trial.left.lowest[0]) < now.vacuum <= float(now.left.lowest[0]):
        cost += _VACUUM
    if expected:
        return count * log(max(trial.unfitted_rms, now.floor)) - expected + cost
    free = count - sum(suspect.fitted for suspect in trial.suspects)
    if free < 1:
        return inf
    tuned = free < count or len(trial.suspects) > 1
    return free * log(max(trial.rms * sqrt(count / free), now.tuned if tuned else now.floor)) + cost


def _explains(trial: Trial, now: _Now) -> bool:
    """Whether what is left is decisively less, for the reason that the suspect states."""
    if now.open and trial.gap > 1e-6 and all(suspect.entries is None for suspect in trial.suspects):
        return False
    if any(suspect.expected and not suspect.directions.size for suspect in trial.suspects):
        return trial.unfitted_rms <= now.rms * (_SHARE if len(trial.suspects) > 1 else 1.0 + 1e-9)
    share = _DECISIVE[len(trial.suspects) - 1]
    if trial.strict > max(now.tolerance, share * now.strict):
        return False
    if trial.measure > min(max(now.tolerance, share * now.measure), _SHARE * now.measure):
        return False
    return all(_matched(trial, suspect, now) for suspect in trial.suspects if suspect.balances)


def _matched(trial: Trial, suspect: Suspect, now: _Now) -> bool:
    """Whether the entry that was scaled balances others, and did not only shrink or hide them."""
    # what a fitted wrench takes up proves nothing
    before, after = now.left, trial.unfitted
    if (
        len(trial.suspects) == 1
        and trial.laws.mass
        and float(before.mass_relative()[0]) > now.tolerance >= float(after.mass_relative()[0])
    ):
        return True
    entry = sum((after.nets[name][0] for name in suspect.balances), np.zeros(9))
    judged = (trial.laws.linear, trial.laws.angular, trial.laws.angular)
    for k, block in enumerate((slice(0, 3), slice(3, 6), slice(6, 9))):
        if judged[k] and now.relative[k] > now.tolerance / 2:
            size = float(np.linalg.norm(entry[block]))
            if float(np.linalg.norm(after.wrench[0, block])) < _BESIDE * size:
                return True
    return False


def _ranked(singles: list[Trial], together: list[Trial], now: _Now, names: tuple[str, ...]) -> list[FoundCause]:
    alone = {
        id(trial.suspects[0]): trial.unfitted_rms if trial.suspects[0].expected else trial.rms for trial in singles
    }
    nothing = now.count * log(max(now.rms, now.floor))
    found: list[tuple[float, Trial, FoundCause]] = []
    for trial in [*singles, *together]:
        if not _explains(trial, now):
            continue
        if len(trial.suspects) > 1 and not _both_needed(trial, alone, now):
            continue
        score = _score(trial, now)
        resort = all(suspect.expected for suspect in trial.suspects) and not trial.suspects[0].directions.size
        if score >= nothing - 1.0 and not resort:
            continue
        said = _said(trial)
        if said is not None and np.isfinite(score):
            found.append((score, trial, _told(trial, said, score, now, names)))
    others = [entry for entry in found if not any(s.id == "not-converged" for s in entry[1].suspects)]
    if others:  # not settled: only where nothing else explains
        found = others
    found.sort(key=lambda entry: entry[0])
    closing = {
        id(trial.suspects[0]): score
        for score, trial, cause in found
        if len(trial.suspects) == 1 and cause.residual_after <= now.tolerance
    }
    # beside a cause that closes the balance alone a second one only takes up noise, unless it is the likelier
    found = [
        entry
        for entry in found
        if len(entry[1].suspects) == 1 or all(entry[0] < closing.get(id(each), inf) for each in entry[1].suspects)
    ]
    kept: list[tuple[float, Trial, FoundCause]] = []
    seen: set[tuple[tuple[str, ...], tuple[str, ...]]] = set()
    for entry in found:
        key = (entry[2].ids, entry[2].groups)
        # a single cause that closes the balance is worth saying however far behind
        closes = len(entry[2].ids) == 1 and entry[2].residual_after <= now.tolerance
        if key not in seen and (closes or entry[0] <= found[0][0] + _FAR):
            seen.add(key)
            kept.append(entry)
    return _with_ties(kept[:_MOST], now)


def _both_needed(trial: Trial, alone: dict[int, float], now: _Now) -> bool:
    """Whether each of a few is needed: what is left is well below what any leaves alone."""
    least = min(alone[id(suspect)] for suspect in trial.suspects if not suspect.expected)
    if any(suspect.expected for suspect in trial.suspects):
        # what is expected explains what the other leaves, where that does not close by itself
        return least <= _SHARE * now.rms and float(measures(trial.unfitted, trial.laws)[0]) > now.tolerance
    return max(trial.rms, now.floor) <= _SHARE * least


def _said(trial: Trial) -> list[tuple[str, str]] | None:
    """Statement and fix of each suspect; None where a fitted number is absurd."""
    made = []
    for suspect in trial.suspects:
        if suspect.words is None:
            made.append((suspect.statement, suspect.fix))
            continue
        said = suspect.words(trial.fitted, trial.unfitted)
        if said is None:
            return None
        made.append(said)
    return made


def _told(trial: Trial, said: list[tuple[str, str]], score: float, now: _Now, names: tuple[str, ...]) -> FoundCause:
    after = trial.measure
    if any(suspect.id == "not-converged" for suspect in trial.suspects):
        # what mass lacks is what it explains
        after = float(measures(trial.unfitted, replace(trial.laws, mass=False))[0])
    groups = tuple(names[suspect.group] for suspect in trial.suspects if suspect.group is not None)
    statement = "; and ".join(text for text, _ in said)
    return FoundCause(
        tuple(suspect.id for suspect in trial.suspects),
        groups,
        now.measure,
        after,
        statement[:1].upper() + statement[1:],
        "; ".join(fix for _, fix in said),
        score,
    )


def _with_ties(kept: list[tuple[float, Trial, FoundCause]], now: _Now) -> list[FoundCause]:
    levels = [max(trial.rms, now.tuned) for _, trial, _ in kept]
    told = []
    for k, (_, trial, cause) in enumerate(kept):
        equal = [
            kept[j][2].id + (f" ({kept[j][2].group})" if kept[j][2].group else "")
            for j in range(len(kept))
            if j != k
            and len(kept[j][1].suspects) == len(trial.suspects)
            and max(levels[j], levels[k]) <= _EQUAL * min(levels[j], levels[k])
        ]
        told.append(replace(cause, equally=tuple(equal)))
    return told
