"""Gravity in the case against gravity in the pressure."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from fluxmesh.assess.review.doubt import Doubt, Setting
from fluxmesh.assess.review.evidence import Evidence
from fluxmesh.assess.review.faces import Floats
from fluxmesh.assess.review.kinds.alternatives import momentum_totals
from fluxmesh.field.pressure import Head

__all__ = ["STANDARD_GRAVITY", "gravity_doubts", "hydrostatic_gravity"]

STANDARD_GRAVITY = 9.80665
"""m/s², exact by definition (SI Brochure)."""

# common practice, no source
_LEFT = 0.2  # residual that may be left, over the weight
_SHARE = 1e-4  # of all entries: a smaller weight drowns in their errors
_EARTH = 0.01  # over what latitude and height do to gravity
_SAME = 0.05  # how far from standard gravity a fitted one may be
_UPRIGHT = 0.05  # components below this share are noise


def gravity_doubts(evidence: Evidence) -> Iterator[Doubt]:
    """Doubt a head that is said to be in the pressure and is not, or the reverse, or a gravity that is missing.

    The residual of momentum tells: over the closed surface the head that a
    pressure holds balances the weight of the fluid.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Yields
    ------
    Doubt
        Two at most.
    """
    pull = np.asarray(evidence.flow.gravity, dtype=np.float64)
    size = float(np.linalg.norm(pull))
    if size > 0.0 and abs(size / STANDARD_GRAVITY - 1.0) > _EARTH:
        yield Doubt(
            "gravity",
            f"Gravity is {size:.4g} m/s², where the earth has {STANDARD_GRAVITY:.4g}",
            "Every weight is off by the same factor; 32.17 would be ft/s²",
            (Setting(("fluid", "gravity"), (pull * (STANDARD_GRAVITY / size) + 0.0).tolist()),),
        )
    totals = momentum_totals(evidence)
    if totals is None or not evidence.has_array(evidence.flow.pressure):
        return
    size = evidence.balance.momentum.size()
    weight = totals.weight
    heavy = float(np.linalg.norm(weight))
    if heavy > _SHARE * size:
        removed = evidence.flow.meaning.head is Head.REMOVED
        off = totals.residual - weight if removed else totals.residual + weight
        if float(np.linalg.norm(off)) < _LEFT * heavy:
            held, other = (
                ("holds the head already", "included") if removed else ("holds no hydrostatic head", "removed")
            )
            yield Doubt(
                "head",
                f"The residual of momentum is the weight of the fluid ({heavy:.4g} N): the pressure {held}",
                "The weight of the fluid would count twice, or not at all, in the load from the walls",
                (Setting(("flow", "pressure", "head"), other),),
            )
        return
    gravity = hydrostatic_gravity(evidence)
    if gravity is not None and not any(evidence.flow.gravity):
        vector = ", ".join(f"{x:g}" for x in gravity)
        yield Doubt(
            "gravity in pressure",
            f"The pressure holds the hydrostatic head of a gravity of ({vector}) m/s², and the case has none",
            "The weight of the fluid is in the load from the walls, and missing in that from the balance",
            (Setting(("fluid", "gravity"), [float(x) for x in gravity]),),
        )


def _size_doubts(evidence: Evidence) -> Iterator[Doubt]:
    pull = np.asarray(evidence.flow.gravity, dtype=np.float64)
    size = float(np.linalg.norm(pull))
    if size > 0.0 and abs(size / STANDARD_GRAVITY - 1.0) > _EARTH:
        yield Doubt(
            "gravity",
            f"Gravity is {size:.4g} m/s², where the earth has {STANDARD_GRAVITY:.4g} m/s²",
            "Every weight is off by that factor; 32.17 would be ft/s²",
            (Setting(("fluid", "gravity"), [float(g) for g in pull * (STANDARD_GRAVITY / size) + 0.0]),),
        )


def hydrostatic_gravity(evidence: Evidence) -> Floats | None:
    """Return the gravity whose head the exported pressure holds, as the momentum balance without weight tells.

    Parameters
    ----------
    evidence : Evidence
        Of a case with a density.

    Returns
    -------
    ndarray, shape (3,), float64, or None
        m/s², along an axis where it nearly is; None where it is not that of the earth.
    """
    totals, fluid = momentum_totals(evidence), evidence.balance.fluid
    if totals is None or fluid is None or not totals.head_in_array or fluid.mass <= 0.0:
        return None
    found = (totals.residual + totals.weight) / fluid.mass
    strength = float(np.linalg.norm(found))
    if (
        abs(strength / STANDARD_GRAVITY - 1.0) > _SAME
        or strength * fluid.mass < _SHARE * evidence.balance.momentum.size()
    ):
        return None
    along = found / strength
    along[np.abs(along) < _UPRIGHT] = 0.0
    along /= np.linalg.norm(along)
    return np.array([float(f"{STANDARD_GRAVITY * x:.6g}") + 0.0 for x in along])
