"""What is left under suspects, alone or together: changes applied, free numbers fitted, all at once."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.causes.change import Knobs, clash, paired, stacked
from fluxmesh.assess.causes.entries import Entries, Laws
from fluxmesh.assess.causes.residuals import Residuals, evaluate
from fluxmesh.assess.causes.suspect import Suspect

__all__ = ["Trial", "attempt", "measures", "rms_of", "trials"]

Array = NDArray[np.float64]

_SMALLEST_FACTOR: Final = 1e-9
_MOST_GROUPS: Final = 40  # suspects that concern one group, the likeliest, that are tried in pairs too
_CHUNK: Final = 4096


@dataclass(frozen=True, eq=False)
class Trial:
    """What is left under one suspect, or a few together.

    Attributes
    ----------
    suspects : tuple of Suspect
        One, two or three.
    laws : Laws
        Which are judged.
    rms : float
        Root mean square of all judged scalar residuals over their strict sizes.
    measure, strict : float
        Largest relative residual of the laws: as the verdict has it, and over the strict sizes.
    gap : float
        Length of the sum of area vectors over the area.
    left : Residuals
        The residuals, of one.
    fitted : ndarray, shape (k,), float64
        The fitted numbers: factor on the density first, then what was added.
    unfitted : Residuals
        The residuals before what was added.
    unfitted_rms : float
        Their `rms`.
    """

    suspects: tuple[Suspect, ...]
    laws: Laws
    rms: float
    measure: float
    strict: float
    gap: float
    left: Residuals
    fitted: Array
    unfitted: Residuals
    unfitted_rms: float


def rms_of(left: Residuals, laws: Laws) -> Array:
    """Return the root mean square of the judged residuals over their strict sizes, shape (n,).

    Parameters
    ----------
    left : Residuals
        Residuals.
    laws : Laws
        Which are judged.
    """
    square = np.zeros(left.mass.shape)
    if laws.mass:
        square += left.mass_relative() ** 2
    parts = left.relative(strict=True) ** 2
    if laws.linear:
        square += parts[:, 0]
    if laws.angular:
        square += (parts[:, 1] + parts[:, 2]) / 2
    return np.asarray(np.sqrt(square / max(laws.count(), 1)))


def measures(left: Residuals, laws: Laws, *, strict: bool = False) -> Array:
    """Return the largest relative residual of the judged laws, moments about the anchor, shape (n,).

    Parameters
    ----------
    left : Residuals
        Residuals.
    laws : Laws
        Which are judged.
    strict : bool, optional
        Whether they are measured without the mean pressure, and moments about both points.
    """
    parts = left.relative(strict=strict)
    found = np.zeros(left.mass.shape)
    if laws.mass:
        found = np.maximum(found, left.mass_relative())
    if laws.linear:
        found = np.maximum(found, parts[:, 0])
    if laws.angular:
        found = np.maximum(found, parts[:, 1])
        if strict:
            found = np.maximum(found, parts[:, 2])
    return np.asarray(found)


def _laws(laws: Laws, suspects: Sequence[Suspect]) -> Laws:
    angular = laws.angular and all(suspect.judges_angular for suspect in suspects)
    return Laws(laws.mass, laws.linear, angular, laws.axial)


def _weights(left: Residuals, laws: Laws) -> Array:
    """What each column of mass and wrench is multiplied with to be judged, shape (n, 10)."""
    made = np.zeros((left.mass.size, 10))
    made[:, 0] = float(laws.mass) / np.where(left.mass_size > 0, left.mass_size, 1.0)
    made[:, 1:4] = float(laws.linear) / left.strict[:, :1]
    for k in (1, 2):
        made[:, 1 + 3 * k : 4 + 3 * k] = float(laws.angular) * np.sqrt(0.5) / left.strict[:, k : k + 1]
    return made


def _columns(left: Residuals) -> Array:
    return np.concatenate([left.mass[:, None], left.wrench], axis=1)


def _density(entries: Entries, knobs: Knobs, laws: Laws) -> Array:
    """The factor on the density that leaves least, shape (n,): residuals are linear in it."""
    base = knobs.scalars[:, 0]
    one, two = evaluate(entries, knobs), evaluate(entries, knobs.with_density(2 * base))
    weights = _weights(one, laws)
    slope, start = (_columns(two) - _columns(one)) * weights, _columns(one) * weights
    rest = start - slope
    best, least = base.copy(), np.full(base.shape, np.inf)
    for columns in (slice(1, 4), slice(4, 10), slice(1, 10), slice(0, 10)):
        square = (slope[:, columns] ** 2).sum(axis=1)
        factor = -(slope[:, columns] * rest[:, columns]).sum(axis=1) / np.where(square > 0, square, np.inf)
        factor = np.maximum(factor, _SMALLEST_FACTOR)
        rms = rms_of(evaluate(entries, knobs.with_density(factor * base)), laws)
        best = np.where(rms < least, factor * base, best)
        least = np.minimum(rms, least)
    return best


def _added(left: Residuals, laws: Laws, directions: Array) -> tuple[Array, Array]:
    """Amounts of what may be added that leave least (n, k), and what they add to all columns (n, 10)."""
    weights = _weights(left, laws)
    matrix = directions.T[None] * weights[:, :, None]
    scale = np.linalg.norm(matrix, axis=1, keepdims=True)
    scale = np.where(scale > 0, scale, 1.0)
    amounts = -np.matmul(np.linalg.pinv(matrix / scale, rcond=1e-9), (_columns(left) * weights)[:, :, None])
    amounts = (amounts / scale.transpose(0, 2, 1))[:, :, 0]
    return amounts, amounts @ directions


def _row(left: Residuals, k: int) -> Residuals:
    one = slice(k, k + 1)
    return Residuals(
        left.mass[one],
        left.wrench[one],
        left.mass_size[one],
        left.sizes[one],
        left.strict[one],
        {name: net[one] for name, net in left.nets.items()},
        left.gap[one],
        left.dynamic[one],
        left.lowest[one],
    )


def attempt(entries: Entries, members: Sequence[tuple[Suspect, ...]], knobs: Knobs, keep: float) -> list[Trial]:
    """Try hypotheses that fit the same things, side by side.

    Parameters
    ----------
    entries : Entries
        The laws.
    members : sequence of tuple of Suspect
        What is suspected together.
    knobs : Knobs
        What undoes each.
    keep : float
        Those that leave a larger relative residual are dropped.
    """
    laws = _laws(entries.laws, members[0])
    factors = np.zeros((len(members), 0))
    if any(suspect.fits_density for suspect in members[0]):
        density = _density(entries, knobs, laws)
        factors = (density / knobs.scalars[:, 0])[:, None]
        knobs = knobs.with_density(density)
    unfitted = evaluate(entries, knobs)
    directions = np.concatenate([suspect.directions for suspect in members[0]])
    amounts, left = np.zeros((len(members), 0)), unfitted
    if directions.any():
        amounts, added = _added(unfitted, laws, directions)
        left = unfitted.plus(added[:, 0], added[:, 1:])
        # a force that is fitted is told by its wrench, not by the amounts of what it was put together from
        amounts = np.concatenate([added[:, 1:4], added[:, :1], amounts], axis=1)
    rms, raw = rms_of(left, laws), rms_of(unfitted, laws)
    measure, strict = measures(left, laws), measures(left, laws, strict=True)
    fitted = np.concatenate([factors, amounts], axis=1)
    return [
        Trial(
            members[k],
            laws,
            float(rms[k]),
            float(measure[k]),
            float(strict[k]),
            float(left.gap[k]),
            _row(left, k),
            fitted[k],
            _row(unfitted, k),
            float(raw[k]),
        )
        for k in np.flatnonzero(strict <= keep).tolist()
    ]


def trials(entries: Entries, suspects: Sequence[Suspect], *, keep: float) -> tuple[list[Trial], list[Trial], int]:
    """Try all suspects, alone and in pairs that go together.

    Parameters
    ----------
    entries : Entries
        The laws.
    suspects : sequence of Suspect
        All suspects.
    keep : float
        Pairs that leave a larger relative residual are not returned.

    Returns
    -------
    singles, pairs : list of Trial
    count : int
        Number of pairs that were tried.
    """
    singles = _singles(entries, suspects)
    # those that work on the table itself, and may go with any other
    plain = [k for k, suspect in enumerate(suspects) if suspect.entries is None and not suspect.alone]
    leaves = {id(trial.suspects[0]): trial.rms for trial in singles}
    of_groups = sorted((k for k in plain if suspects[k].group is not None), key=lambda k: leaves[id(suspects[k])])
    likely = set(of_groups[:_MOST_GROUPS])
    plain = [k for k in plain if suspects[k].group is None or k in likely]
    changes = [suspects[k].change for k in plain]
    if not changes:
        return singles, [], 0
    knobs = stacked(changes, entries.count)
    clashing = clash(changes)
    ids = np.array([suspects[k].id for k in plain])
    free = np.array([suspects[k].fitted > 0 for k in plain], dtype=np.bool_)
    allowed = ~clashing & (ids[:, None] != ids[None]) & ~(free[:, None] & free[None])
    first, second = np.nonzero(np.triu(allowed, 1))
    pairs: list[Trial] = []
    count = int(first.size)
    # hypotheses that fit the same are tried side by side
    kinds = np.full(len(plain), -1)
    kinds[free] = np.flatnonzero(free)
    kind = np.maximum(kinds[first], kinds[second])
    for each in np.unique(kind):
        rows = np.flatnonzero(kind == each)
        for start in range(0, rows.size, _CHUNK):
            some = rows[start : start + _CHUNK]
            members = [(suspects[plain[i]], suspects[plain[j]]) for i, j in zip(first[some], second[some])]
            pairs += attempt(entries, members, paired(knobs, first[some], second[some]), keep)
    for other in suspects:
        if other.entries is not None and not other.alone:
            members = [(other, suspects[k]) for i, k in enumerate(plain) if not free[i] and ids[i] != other.id]
            some = np.array([i for i, k in enumerate(plain) if not free[i] and ids[i] != other.id], dtype=np.int64)
            count += len(members)
            pairs += attempt(other.entries, members, knobs.rows(some), keep)
    return singles, pairs, count


def _singles(entries: Entries, suspects: Sequence[Suspect]) -> list[Trial]:
    """Every suspect alone, those side by side that fit nothing and work on the table itself."""
    batches: list[list[Suspect]] = [[], []]
    alone = []
    for suspect in suspects:
        if suspect.entries is None and suspect.fitted == 0:
            batches[int(suspect.judges_angular)].append(suspect)
        else:
            alone.append(suspect)
    made = []
    for batch in [*(batch for batch in batches if batch), *([suspect] for suspect in alone)]:
        there = entries if batch[0].entries is None else batch[0].entries
        changes = stacked([suspect.change for suspect in batch], there.count)
        made += attempt(there, [(suspect,) for suspect in batch], changes, np.inf)
    return made
