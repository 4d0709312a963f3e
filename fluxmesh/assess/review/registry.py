"""All kinds of doubt, and the review that asks each."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from typing import Final

from fluxmesh.assess.review.doubt import Doubt, Review
from fluxmesh.assess.review.evidence import Evidence
from fluxmesh.assess.review.facts import facts_of
from fluxmesh.assess.review.kinds.alternatives import closing_alternatives
from fluxmesh.assess.review.kinds.ambient import ambient_doubts
from fluxmesh.assess.review.kinds.coverage import coverage_doubts
from fluxmesh.assess.review.kinds.defaults import default_doubts
from fluxmesh.assess.review.kinds.density import density_doubts
from fluxmesh.assess.review.kinds.gravity import gravity_doubts
from fluxmesh.assess.review.kinds.labels import label_doubts
from fluxmesh.assess.review.kinds.lengths import length_doubts
from fluxmesh.assess.review.kinds.ports import port_doubts
from fluxmesh.assess.review.kinds.precision import precision_doubts
from fluxmesh.assess.review.kinds.roles import role_doubts
from fluxmesh.assess.review.kinds.speeds import speed_doubts
from fluxmesh.assess.review.kinds.supplied import supplied_doubts
from fluxmesh.assess.review.kinds.traction import traction_doubts
from fluxmesh.assess.review.kinds.unused import unused_doubts
from fluxmesh.assess.review.kinds.walls import wall_doubts

__all__ = ["KINDS", "Reviewer", "review_of"]

Reviewer = Callable[[Evidence], Iterable[Doubt]]

# A new kind of doubt is one file in `kinds` and one line here; the order is that of the printed list.
KINDS: Final[tuple[Reviewer, ...]] = (
    length_doubts,
    density_doubts,
    speed_doubts,
    role_doubts,
    wall_doubts,
    port_doubts,
    supplied_doubts,
    ambient_doubts,
    label_doubts,
    closing_alternatives,
    gravity_doubts,
    traction_doubts,
    coverage_doubts,
    default_doubts,
    unused_doubts,
    precision_doubts,
)
"""Every kind of doubt, each a function from the evidence to its doubts."""


def review_of(evidence: Evidence, kinds: Iterable[Reviewer] = KINDS) -> Review:
    """Review a case that could be integrated.

    Parameters
    ----------
    evidence : Evidence
        What to look at.
    kinds : iterable of Reviewer, optional
        Which kinds of doubt to ask for; all by default.

    Returns
    -------
    Review
        Facts and doubts. Of several doubts about one key of fluid, flow or
        surface the first stands for all: it rests on the strongest sign.
    """
    doubts: list[Doubt] = []
    asked: set[tuple[str, ...]] = set()
    for kind in kinds:
        for doubt in kind(evidence):
            about = {setting.path for setting in doubt.settle[:1] if setting.path[0] != "groups"}
            if not about & asked:
                doubts.append(doubt)
            asked |= about
    return Review(tuple(facts_of(evidence)), tuple(doubts))
