"""The proposal reviewed by the same eyes as `check`, and what these settle written into it."""

from __future__ import annotations

from pathlib import Path
from typing import Final

import numpy as np

from fluxmesh.assess.review import Doubt, Evidence, Setting, review_of
from fluxmesh.assess.review.kinds.alternatives import implied_density, momentum_totals
from fluxmesh.assess.review.kinds.ambient import ambient_doubts
from fluxmesh.assess.review.kinds.gravity import STANDARD_GRAVITY
from fluxmesh.assess.review.kinds.lengths import length_doubts
from fluxmesh.assess.review.kinds.traction import traction_doubts
from fluxmesh.errors import InputError
from fluxmesh.job.check import evidence_of_text
from fluxmesh.job.mesh import Loaded
from fluxmesh.starter.draft import Draft, Entry
from fluxmesh.starter.write import draft_text
from fluxmesh.surface.rawmesh import RawMesh

__all__ = ["settle_draft"]

_SETTLED: Final = frozenset({"pressure looks absolute", "head", "gravity in pressure", "length unit"})
"""Doubts whose line is taken as it is: each rests on the values of the file alone."""
_READINGS: Final = frozenset(
    {
        "pressure looks kinematic",
        "pressure unit",
        "pressure looks total",
        "traction sign",
        "traction unit",
        "velocity unit",
    }
)
"""Doubts that name another reading of an array: taken where there is one such reading only."""
_WITHOUT_DENSITY: Final = (length_doubts, ambient_doubts, traction_doubts)
"""What can be judged while the density is missing."""
_ROUNDS: Final = 6
_NO_HEAD: Final = 0.2
"""Gravity whose head the pressure holds, over that of the earth, below which it holds none (common practice)."""


def settle_draft(draft: Draft, mesh: RawMesh, path: Path, *, unit_given: bool) -> int:
    """Review a draft, and write into it what the data settle.

    Parameters
    ----------
    draft : Draft
        The case; it is changed.
    mesh : RawMesh
        Its mesh.
    path : pathlib.Path
        Where the case would be.
    unit_given : bool
        Whether the user stated the unit of length, which then stays.

    Returns
    -------
    int
        How many doubts are left; they are written at the head of the draft.
    """
    loaded = Loaded(mesh, mesh.source)
    evidence, error = _evidence(draft, loaded, path)
    if evidence is None:
        missing = list(draft.missing())
        if missing == [("fluid", "density")]:
            _settle_without_density(draft, loaded, path, unit_given)
        elif not missing and error is not None:
            draft.notes.append(f"As it stands, this case is refused: {error}")
        return 0
    left: tuple[Doubt, ...] = ()
    for _ in range(_ROUNDS):
        left = review_of(evidence).doubts
        if not _settle(draft, left, unit_given):
            break
        found, error = _evidence(draft, loaded, path)
        if found is None:
            break
        evidence = found
    _tell_head(draft, evidence)
    if left:
        draft.notes.append("What a review finds doubtful (see `fluxmesh check`):")
        draft.notes += [f"  - {doubt.seen}. To settle it: {doubt.remedy()}" for doubt in left]
    return len(left)


def _evidence(draft: Draft, loaded: Loaded, path: Path) -> tuple[Evidence | None, InputError | None]:
    try:
        return evidence_of_text(draft_text(draft).encode(), path, loaded=loaded), None
    except InputError as error:
        return None, error


def _settle(draft: Draft, doubts: tuple[Doubt, ...], unit_given: bool) -> bool:
    """Write the lines of doubts that the data settle; return whether there were any."""
    readings = [doubt for doubt in doubts if doubt.kind in _READINGS]
    taken = [doubt for doubt in doubts if doubt.kind in _SETTLED and not (doubt.kind == "length unit" and unit_given)]
    taken += readings if len(readings) == 1 else []
    changed = False
    for doubt in taken:
        for setting in doubt.settle:
            changed |= draft.put(setting, doubt.seen)
    return changed


def _tell_head(draft: Draft, evidence: Evidence) -> None:
    """Say beside the line for gravity that the pressure holds no head, where the balance without weight shows that."""
    totals, fluid, section = momentum_totals(evidence), evidence.balance.fluid, draft.section("fluid")
    entry = None if section is None else section.entry("gravity")
    if entry is None or entry.in_force or totals is None or fluid is None or fluid.mass <= 0.0:
        return
    held = float(np.linalg.norm(totals.residual + totals.weight)) / fluid.mass
    if held < _NO_HEAD * STANDARD_GRAVITY:
        entry.remark += '; the pressure holds no head: then write head = "removed" too'


def _settle_without_density(draft: Draft, loaded: Loaded, path: Path, unit_given: bool) -> None:
    fluid = draft.section("fluid")
    entry = None if fluid is None else fluid.entry("density")
    assert entry is not None
    example = Entry(entry.key, entry.value, entry.remark, entry.in_force, entry.fill_in)
    # with a density of 1 the momentum flux is that of a unit density, and nothing that rests on it is asked
    draft.put(Setting(("fluid", "density"), "1 kg/m^3"))
    evidence, _ = _evidence(draft, loaded, path)
    for _ in range(_ROUNDS):
        if evidence is None or not _settle(draft, review_of(evidence, _WITHOUT_DENSITY).doubts, unit_given):
            break
        evidence, _ = _evidence(draft, loaded, path)
    implied = None if evidence is None else implied_density(evidence)
    entry.value, entry.in_force = example.value, example.in_force
    if implied is not None:
        entry.remark += f"; the momentum of the arrays closes with about {float(f'{implied:.2g}'):g} kg/m³"
