"""How well the search for causes names slips planted alone in sound flows: every slip in every flow, counted."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np

from fluxmesh.assess.causes import CausesFound
from fluxmesh.assess.causes.registry import IDS
from tests.cause_flows import Sound, sounds
from tests.cause_held_out import held_out
from tests.cause_manifold import IN_MANIFOLD, causes_in_manifold
from tests.cause_slips import IN_TABLE, PLANTS, busiest, of_table, times

TOLERANCE = 0.01

# ---- plants that no table can tell apart ----------------------------------------------------

TWIN_OF = {
    "velocity of a port twice": ("velocity of a port by half", 2.0),
    "velocity of a port by half": ("velocity of a port twice", 0.5),
}
"""The other slip, and how much faster the flow is in which it makes the very same table."""

TWIN_FLOWS = ("poiseuille pipe, inclined", "poiseuille pipe, weightless", "elliptic pipe, inclined")
"""Developed flow between two ports alike, along walls that hold the fluid.

Twice the velocity at the one end of such a flow, and half of it at the other end of a flow that is twice as fast and
half as viscous, give the same pressures, tractions and velocities everywhere: every integral is the same, and each of
the two flows closes by itself. Nothing made from the table can tell which end is at fault; that both are named is all
that can be asked.
"""


def twins(flow: str, slip: str) -> tuple[Sound, Sound, Sound]:
    """A flow with a slip at one end; the faster or slower flow that closes as well; that with the other slip."""
    sound = sounds()[flow]
    other, faster = TWIN_OF[slip]
    here = busiest(sound)
    assert here is not None
    there = {"inlet": "outlet", "outlet": "inlet"}[here]
    alike = sound.with_given(velocity=faster * np.asarray(sound.given["velocity"]))
    one, two = PLANTS[slip][1](sound), times(alike, there, "velocity", 1.0 / faster)
    assert one is not None
    assert PLANTS[other][0] != PLANTS[slip][0]
    return one, alike, two


# ---- judging what was found -----------------------------------------------------------------


def place_of(found: CausesFound, ids: set[str]) -> str:
    """How well the ids planted were found: "first", "equal" to the first, "listed", or "not".

    Causes that are the same algebra on a flow are equal: both must then be named.
    """
    causes = found.causes
    if not causes:
        return "not"
    if set(causes[0].ids) == ids:
        return "first"
    listed = any(set(cause.ids) == ids for cause in causes)
    equal = any(set(one.partition(" ")[0].split("+")) == ids for one in causes[0].equally)
    return "equal" if listed and equal else "listed" if listed else "not"


@dataclass(frozen=True)
class Case:
    """One slip planted in one flow, and how it was named; `place` is "unseen" where it leaves no residual."""

    kind: str
    slip: str
    flow: str
    place: str
    residual: float
    found: tuple[str, ...]

    @property
    def twin(self) -> bool:
        """Whether another slip in another flow makes the very same table."""
        return self.flow in TWIN_FLOWS and self.slip in TWIN_OF


def _case(kind: str, slip: str, flow: str, found: CausesFound) -> Case:
    residual = float("nan") if found.residual is None else found.residual
    seen = found.residual is not None and (found.residual > TOLERANCE or bool(found.causes))
    place = place_of(found, {kind}) if seen else "unseen"
    return Case(kind, slip, flow, place, residual, tuple(cause.id for cause in found.causes[:3]))


def planted(kind: str, *, apart: bool = False) -> tuple[Case, ...]:
    """Every slip of a kind in every flow where it can be made: those held out, or the others and the manifold."""
    return _planted(kind, apart)


@cache
def _planted(kind: str, apart: bool) -> tuple[Case, ...]:
    flows = (held_out() if apart else sounds()).values()
    made = []
    for slip, (id_, plant) in PLANTS.items():
        for sound in flows if id_ == kind else ():
            spoiled = plant(sound)
            if spoiled is not None:
                made.append(_case(kind, slip, sound.name, spoiled.causes()))
    for slip, (id_, how) in IN_TABLE.items():
        for sound in flows if id_ == kind else ():
            group = busiest(sound)
            if group is not None:
                made.append(_case(kind, slip, sound.name, of_table(sound, group, **how)))
    if not apart:
        for slip, (id_, _) in IN_MANIFOLD.items():
            if id_ == kind:
                with TemporaryDirectory() as folder:
                    made.append(_case(kind, slip, "manifold", causes_in_manifold(slip, Path(folder))))
    return tuple(made)


def counted(cases: Iterable[Case]) -> tuple[list[Case], list[Case], list[Case]]:
    """Cases that leave a residual; those of them that have a twin; and those that leave none."""
    made = list(cases)
    seen = [case for case in made if case.place != "unseen"]
    return seen, [case for case in seen if case.twin], [case for case in made if case.place == "unseen"]


def first_of(cases: Iterable[Case], *places: str) -> int:
    """How many come first, or in any of the places given."""
    return sum(case.place in (places or ("first",)) for case in cases)


WHY = {
    "kinematic-pressure": "the pressure, or pressure and traction, adds up to nothing by itself",
    "absolute-as-gauge": "the level is on all faces of a closed cylinder, where it adds up to nothing",
    "total-as-static": "the dynamic pressure is the same at both ends",
    "traction-sign": "the traction adds up to nothing by itself",
    "traction-missing": "the traction of the walls adds up to nothing by itself",
    "length-unit": "no weight: every entry goes with the area",
    "density": "what goes with the density adds up to nothing by itself, or to less than the tolerance",
    "relative-velocity": "what the motion adds is below the tolerance",
    "velocity-unit": "the momentum that enters leaves as it was",
}
"""Why a slip of a kind leaves no residual above the tolerance in some flows."""


def _rows(*, apart: bool) -> list[str]:
    rows, whole = [], []
    for kind in IDS:
        seen, twin, unseen = counted(planted(kind, apart=apart))
        whole += seen + unseen
        why = f"{len(unseen)}: {WHY.get(kind, 'not known')}" if unseen else "none"
        rows.append(_row(kind, seen, twin, why))
    seen, twin, unseen = counted(whole)
    return [*rows, _row("**all**", seen, twin, str(len(unseen)))]


def _row(name: str, seen: list[Case], twin: list[Case], why: str) -> str:
    plain = [case for case in seen if not case.twin]
    first, equal = first_of(plain), first_of(plain, "first", "equal")
    share = f"{first / len(plain):.1%}" if plain else ""
    beside = f"{len(twin)} ({first_of(twin, 'first', 'equal')} named)" if twin else ""
    flows = len({case.flow for case in seen})
    return f"| {name} | {flows} | {len(plain)} | {first} | {share} | {equal} | {beside} | {why} |"


def plants_table() -> str:
    """Return what was planted and how it was named, as tables in Markdown; takes a minute or two."""
    head = (
        "| id | flows | plants that show | first | share | first or equal "
        "| indistinguishable | not to be seen, and why |\n"
        "|---|---|---|---|---|---|---|---|"
    )
    parts = [
        "Exact flows and the shipped manifold:",
        "\n".join([head, *_rows(apart=False)]),
        "Exact flows on other bodies, held out:",
        "\n".join([head, *_rows(apart=True)]),
        f"Indistinguishable, counted apart: {', '.join(TWIN_OF)}; in {', '.join(TWIN_FLOWS)}.",
    ]
    return "\n\n".join(parts) + "\n"
