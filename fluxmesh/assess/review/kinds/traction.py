"""Traction that looks like a coefficient, holds the pressure, or points against the flow near the wall."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from fluxmesh.assess.review.doubt import Doubt, Setting
from fluxmesh.assess.review.evidence import Evidence
from fluxmesh.assess.review.kinds.labels import other_array
from fluxmesh.assess.review.rim import rim_agreement
from fluxmesh.integral.layout import PER_GROUP

__all__ = ["slip_agreement", "traction_agreement", "traction_doubts"]

# common practice, no source
_COEFFICIENT = 1e-4  # largest traction over the dynamic pressure at the ports: friction coefficients are above 1e-3
_LARGEST = 99.0  # the percentile that stands for the largest
_NORMAL = 0.3  # root mean square of the normal part over that of the whole
_CLEAR = 0.5  # mean cosine, weighted, from which on a direction is clear
_MOVES = 0.01


def traction_doubts(evidence: Evidence) -> Iterator[Doubt]:
    """Doubt the exported traction.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Yields
    ------
    Doubt
        At most one each for its size, its normal part and its sign.
    """
    named = [array for array in evidence.named if array.quantity == "traction"]
    walls = [k for k in evidence.walls if evidence.flow.traction.where[k] > PER_GROUP]
    if not named or not walls:
        return
    sizes, normal_square, square = [], 0.0, 0.0
    for k in walls:
        faces = evidence.faces(k)
        geometry, values = evidence.geometry(faces), evidence.values(evidence.flow.traction, faces)
        across = np.einsum("ij,ij->i", values, geometry.normals)
        normal_square += float((across**2) @ geometry.areas)
        square += float((values**2).sum(axis=1) @ geometry.areas)
        sizes.append(np.linalg.norm(values, axis=1))
    if square == 0.0:
        return
    largest = float(np.percentile(np.concatenate(sizes), _LARGEST))
    if evidence.dynamic_pressure > 0.0 and largest < _COEFFICIENT * evidence.dynamic_pressure:
        other = other_array(evidence, "traction", frozenset({"coefficient"}))
        yield Doubt(
            "traction too small",
            f"The largest traction on the walls is {largest:.3g} Pa, {largest / evidence.dynamic_pressure:.1g} of the "
            f"dynamic pressure at the ports ({evidence.dynamic_pressure:.4g} Pa)",
            "It may be a friction coefficient, or traction over density; friction would be missing in the load",
            other,
            "" if other else "export the traction in units of pressure",
        )
    share = float(np.sqrt(normal_square / square))
    if share > _NORMAL:
        other = other_array(evidence, "traction", frozenset({"coefficient"}))
        yield Doubt(
            "traction along normal",
            f"Of the traction on the walls {share:.0%} is along the normal (root mean square)",
            "Friction lies in the wall: the array may be the total stress, and the pressure would count twice",
            other,
            "" if other else "export the viscous part of the traction",
        )
    agreement = traction_agreement(evidence)
    if agreement is not None and agreement < 0.0:
        turned = "fluid" if evidence.flow.traction.scale < 0 else "wall"
        yield Doubt(
            "traction sign",
            "The traction points against the flow near the wall (at the rims of the ports)",
            "The fluid drags the wall along; the reaction, which acts on the fluid, has the opposite sign",
            (Setting(("flow", "traction", "acts_on"), turned),),
        )


def traction_agreement(evidence: Evidence) -> float | None:
    """Return whether the traction on the wall points along the flow near it.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Returns
    -------
    float or None
        From -1 (against) to 1 (along), at the rims of the ports or else by the
        slip on the walls; None where neither is clear.
    """
    for found in (rim_agreement(evidence), slip_agreement(evidence)):
        if found is not None and abs(found) > _CLEAR:
            return found
    return None


def slip_agreement(evidence: Evidence) -> float | None:
    """Return the weighted mean cosine between the traction on the wall and the velocity exported there.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Returns
    -------
    float or None
        None where the fluid sticks to the walls.
    """
    flow, along, whole = evidence.flow, 0.0, 0.0
    for k in evidence.walls:
        if flow.traction.where[k] <= PER_GROUP or flow.velocity.where[k] <= PER_GROUP:
            continue
        faces = evidence.faces(k)
        areas = evidence.geometry(faces).areas
        velocity, traction = evidence.values(flow.velocity, faces), -evidence.values(flow.traction, faces)
        speed = np.linalg.norm(velocity, axis=1)
        weights = areas * (speed > _MOVES * evidence.port_speed)
        along += float(np.einsum("ij,ij->i", velocity, traction) @ weights)
        whole += float((speed * np.linalg.norm(traction, axis=1)) @ weights)
    return along / whole if whole > 0.0 else None
