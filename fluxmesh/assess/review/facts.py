"""What a case is, in sentences: what a reviewer reads before doubting."""

from __future__ import annotations

import numpy as np

from fluxmesh.assess.review.evidence import Evidence

__all__ = ["PLANE", "facts_of", "flatness_of"]

PLANE = 0.999
"""Length of a group's area vector over its area from which on it counts as plane: its normals
stray by about 2.5 degrees (common practice, no source)."""


def flatness_of(evidence: Evidence, group: int) -> float:
    """Return the length of a group's area vector over its area: 1 for a plane.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.
    group : int
        Number of the group.

    Returns
    -------
    float
        0 to 1; 1 for a group without area.
    """
    table = evidence.balance.table
    area = float(table.column("area")[group])
    return float(np.linalg.norm(table.column("area_vector")[group])) / area if area > 0 else 1.0


def facts_of(evidence: Evidence) -> list[str]:
    """Return what a case is, one sentence each.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.
    """
    surface, balance = evidence.surface, evidence.balance
    pieces = f"{surface.shells} edge-connected piece{'s' if surface.shells != 1 else ''}"
    lines = [
        f"The surface has {surface.face_count:,} faces and is {'closed' if surface.closed else 'open'}, in {pieces}"
    ]
    if balance.enclosed is not None:
        lines.append(f"It encloses {balance.enclosed.volume:.5g} m³")
    lines += [*surface.notes, *evidence.flow.notes]
    if balance.mass is not None and balance.mass.relative is not None:
        lines.append(f"What enters and what leaves differ by {balance.mass.relative:.2%} of all flow")
    relative = balance.momentum.relative()
    if balance.complete and relative is not None:
        lines.append(f"The residual of momentum is {relative:.2%} of all its entries")
    lines += [_group(evidence, k) for k in range(len(evidence.groups))]
    if evidence.unused:
        lines.append(f"Arrays that the case does not use: {', '.join(evidence.unused)}")
    tags = [f"{left.tag} ({left.faces:,} faces)" for left in evidence.left_tags]
    if tags:
        lines.append(f"Tags that no group names, taken as the rest: {', '.join(tags)}")
    return lines


def _group(evidence: Evidence, k: int) -> str:
    group, table, data = evidence.groups[k], evidence.balance.table, evidence.balance.setting.data
    area, vector = float(table.column("area")[k]), table.column("area_vector")[k]
    faces = int(np.count_nonzero(evidence.surface.group_of_face == k))
    has = (("flow", data.flux[k]), ("pressure", data.pressure[k]), ("traction", data.traction[k]))
    known = [name for name, there in has if there]
    flat = flatness_of(evidence, k)
    facing = ""
    if area > 0 and flat > PLANE:
        # adding zero makes -0 a 0
        facing = f", plane, normal ({', '.join(f'{x:g}' for x in np.round(vector / area, 4) + 0.0)})"
    return (
        f"Group '{group.name}' ({group.role.value}): {faces:,} faces, {area:.5g} m²{facing}; "
        f"data: {', '.join(known) or 'none'}"
    )
