"""Arrays, tags and sets in the file that the case leaves aside."""

from __future__ import annotations

from collections.abc import Iterator

from fluxmesh.assess.guess import best_guess
from fluxmesh.assess.review.doubt import Doubt, Setting
from fluxmesh.assess.review.evidence import Evidence
from fluxmesh.assess.review.facts import PLANE
from fluxmesh.assess.review.kinds.coverage import array_table
from fluxmesh.units import unit_factor

__all__ = ["unused_doubts"]

_DIFFERS = 0.01
"""How far an array of density may be from the density of the case (common practice, no source)."""


def unused_doubts(evidence: Evidence) -> Iterator[Doubt]:
    """Doubt what the file has and the case does not use, where it says something else than the case.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Yields
    ------
    Doubt
        An array of density against the density of the case, plane regions with
        a tag of their own that are taken as the rest, and names of groups in
        the file where the case picks them.
    """
    yield from _density(evidence)
    yield from _tags(evidence)
    if evidence.other_groups:
        yield Doubt(
            "groups in file not used",
            f"The file names groups of faces, and the case picks them: {evidence.other_groups[0]}",
            "A pick takes one plane region, and may miss faces that the file has in the group",
            advice=f"in place of the picks: surface.{evidence.other_groups[0]}",
        )


def _tags(evidence: Evidence) -> Iterator[Doubt]:
    plane = [left for left in evidence.left_tags if left.flatness > PLANE]
    # one tag that is left is what the rest is for
    if not plane or len(evidence.left_tags) < 2:
        return
    taken = {group.name for group in evidence.groups}
    settle = []
    for left in plane:
        plain = isinstance(left.tag, str) and left.tag == left.tag.strip() and left.tag not in taken
        name = str(left.tag) if plain else f"group_{left.tag}"
        settle.append(Setting(("groups", name), {"role": "wall", "tag": left.tag}))
    listed = ", ".join(f"{left.tag!r} ({left.faces:,} faces)" for left in plane)
    yield Doubt(
        "tag not named",
        f"Faces with a tag that no group names, each in one plane, go to '{plane[0].rest}': {listed}",
        "A port that was not tagged in the case counts as a wall",
        tuple(settle),
        'or role = "inlet" or "outlet"',
    )


def _density(evidence: Evidence) -> Iterator[Doubt]:
    guess, density = best_guess(evidence.spare, "density"), evidence.flow.uniform_density()
    if guess is None or density is None or guess.names[0] not in evidence.ranges:
        return
    factor = unit_factor(guess.unit, "kg/m^3", "") if guess.unit else 1.0
    low, high = (factor * value for value in evidence.ranges[guess.names[0]])
    if abs(low / density - 1.0) <= _DIFFERS and abs(high / density - 1.0) <= _DIFFERS:
        return
    yield Doubt(
        "density array not used",
        f"The array '{guess.names[0]}' holds {low:.5g} to {high:.5g} kg/m³, and the case has {density:.5g}",
        "Momentum flux and weight are proportional to the density",
        (Setting(("flow", "density"), array_table(guess)),),
    )
