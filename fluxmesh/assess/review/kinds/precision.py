"""Coordinates with too few digits for where they lie."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from fluxmesh.assess.review.doubt import Doubt
from fluxmesh.assess.review.evidence import Evidence

__all__ = ["precision_doubts"]

_COARSE = 1e-3
"""Rounding of a coordinate over the size of a face that a reviewer would ask about (common practice, no source)."""


def precision_doubts(evidence: Evidence) -> Iterator[Doubt]:
    """Doubt coordinates of 32 bits far from the origin.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Yields
    ------
    Doubt
        One at most.
    """
    if not evidence.single:
        return
    far = float(np.abs(evidence.box).max())
    face = float(np.sqrt(float(evidence.balance.table.total("area")) / evidence.surface.face_count))
    rounding = far * float(np.finfo(np.float32).eps) / 2
    if face > 0.0 and rounding > _COARSE * face:
        yield Doubt(
            "coordinates rounded",
            f"The file's coordinates have 32 bits and lie up to {far:.4g} m from the origin: "
            f"they are rounded to {rounding:.2g} m, with faces of about {face:.2g} m",
            "Areas and normals lose digits, and small faces may fold",
            advice="export with 64 bits, or near the origin",
        )
