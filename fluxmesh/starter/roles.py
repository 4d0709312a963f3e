"""What each group probably is to the flow."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.guess import name_words
from fluxmesh.starter.body import Body
from fluxmesh.starter.found import FoundGroup
from fluxmesh.surface.surface import Role

__all__ = ["GroupShape", "RoleGuess", "guess_roles", "shape_of"]

Floats = NDArray[np.float64]

# words that name a boundary (common practice, no source); of several the first kind in this order counts
_WORDS: Final = {
    Role.SYMMETRY: "symmetry symmetric sym symm mirror symmetryplane",
    Role.WALL: "wall walls shell skin noslip",
    Role.INLET: "inlet inlets in inflow feed supply intake entry entrance suction",
    Role.OUTLET: "outlet outlets out outflow exit exhaust discharge drain outfall return",
    Role.OPEN: "open opening farfield far freestream environment atmosphere",
}
_HARDWARE: Final = (
    "housing casing body hull solid rotor stator impeller blade blades vane vanes shroud hub shaft pipe tube duct "
    "case vessel nozzle valve disc cover surface"
)
# kinds of boundary of the open CGNS/SIDS standard (AIAA R-101; from memory), by how their names begin
_STANDARD: Final = {
    "BCInflow": Role.INLET,
    "BCTunnelInflow": Role.INLET,
    "BCOutflow": Role.OUTLET,
    "BCTunnelOutflow": Role.OUTLET,
    "BCWall": Role.WALL,
    "BCSymmetry": Role.SYMMETRY,
    "BCFarfield": Role.OPEN,
    "BCExtrapolate": Role.OPEN,
}
# common practice, no source
_PLANE: Final = 0.999
_PASSES: Final = 0.05  # flow through the faces over what their speeds could carry
_CARRIES: Final = 1e-3  # flow through a group over the largest of a group
_BOTH_WAYS: Final = 0.1  # reversed over all flow, from which on a port is open
_SLIPS: Final = 0.05  # speed on a group over the largest of a group


@dataclass(frozen=True, eq=False)
class GroupShape:
    """What is measured of a group.

    Attributes
    ----------
    area : float
        m².
    normal : ndarray, shape (3,), float64
        Mean unit normal; zero for a group that faces all ways.
    flatness : float
        Length of the area vector over the area: 1 for one plane.
    sheets : bool
        Whether it consists of planes of one direction, such as the two ends of a slice.
    entering, leaving : float or None
        Volume or mass flow in and out, face by face; None where it is not known.
    speed : float or None
        Mean speed on it.
    """

    area: float
    normal: Floats
    flatness: float
    sheets: bool
    entering: float | None = None
    leaving: float | None = None
    speed: float | None = None


@dataclass(frozen=True)
class RoleGuess:
    """A role with its reason.

    Attributes
    ----------
    role : Role or None
        None where nothing tells.
    reason : str
        Why, as a remark.
    """

    role: Role | None
    reason: str


def shape_of(group: FoundGroup, body: Body, through: Floats | None, speeds: Floats | None) -> GroupShape:
    """Measure a group.

    Parameters
    ----------
    group : FoundGroup
        The group.
    body : Body
        The faces of its file.
    through : ndarray, shape (n_faces,), float64, or None
        Flow out through each face of the file.
    speeds : ndarray, shape (n_faces,), float64, or None
        Speed on each.

    Returns
    -------
    GroupShape
        In metres, and in the unit of the flow.
    """
    areas, vectors = body.areas[group.faces], body.vectors[group.faces]
    area, vector = float(areas.sum()), vectors.sum(axis=0)
    length = float(np.linalg.norm(vector))
    normal = vector / length if length > 1e-9 * area else np.zeros(3)
    # the normals of parallel planes span one direction, whatever their sense
    spread = np.linalg.eigvalsh(vectors.T @ (vectors / np.where(areas > 0, areas, 1.0)[:, None]))
    sheets = bool(area > 0 and spread[-1] > _PLANE * area)
    flows = None if through is None else through[group.faces]
    return GroupShape(
        area,
        normal,
        length / area if area > 0 else 0.0,
        sheets,
        None if flows is None else float(np.abs(flows[flows < 0]).sum()),
        None if flows is None else float(flows[flows > 0].sum()),
        None if speeds is None or area <= 0 else float(speeds[group.faces] @ areas) / area,
    )


def guess_roles(groups: list[FoundGroup], shapes: list[GroupShape]) -> list[RoleGuess]:
    """Guess the roles of all groups.

    Parameters
    ----------
    groups : list of FoundGroup
        The groups.
    shapes : list of GroupShape
        What is measured of each.

    Returns
    -------
    list of RoleGuess
        By the kind that the file states, else by the name, else by the flow
        and the shape. Which way a port's flow goes is the flow's to say.
    """
    said = [_stated(group) or _by_name(group) for group in groups]
    flows = [0.0 if shape.entering is None else shape.entering + (shape.leaving or 0.0) for shape in shapes]
    most, fastest = max(flows, default=0.0), max((shape.speed or 0.0 for shape in shapes), default=0.0)
    guesses = [_guess(word, shape, most, fastest) for word, shape in zip(said, shapes)]
    if any(guess.role is Role.WALL for guess in guesses) or len(groups) < 2:
        return guesses
    # a case without any wall has no hardware: planes that the flow slips along are then its walls
    slipping = [guess.role is Role.SYMMETRY and word is None for guess, word in zip(guesses, said)]
    return [RoleGuess(Role.WALL, guess.reason) if slips else guess for guess, slips in zip(guesses, slipping)]


def _stated(group: FoundGroup) -> tuple[Role, str] | None:
    if not group.kind:
        return None
    for kind, role in _STANDARD.items():
        if group.kind.startswith(kind):
            return role, f"{group.kind} in the file"
    try:
        return Role(group.kind), "stated in the file"
    except ValueError:
        return None


def _by_name(group: FoundGroup) -> tuple[Role, str] | None:
    words = set(name_words(group.label))
    for role, names in _WORDS.items():
        if words & set(names.split()):
            return role, "by its name"
    return (Role.WALL, "by its name") if words & set(_HARDWARE.split()) else None


def _guess(said: tuple[Role, str] | None, shape: GroupShape, most: float, fastest: float) -> RoleGuess:
    measured = _by_flow(shape, most, fastest)
    if said is None:
        if measured is not None:
            return measured
        if shape.flatness > _PLANE:
            return RoleGuess(None, "a plane")
        return RoleGuess(Role.WALL, "not plane")
    role, reason = said
    if measured is None or measured.role is None or measured.role is role:
        return RoleGuess(role, reason)
    if role in (Role.INLET, Role.OUTLET) and measured.role.is_port:
        return RoleGuess(measured.role, f"{measured.reason}, though {role.value} {reason}")
    if not role.is_port and measured.role.is_port:
        return RoleGuess(role, f"{reason}, though flow passes it")
    return RoleGuess(role, reason)


def _by_flow(shape: GroupShape, most: float, fastest: float) -> RoleGuess | None:
    """Return what the flow through a group says, or None where no flow is known."""
    if shape.entering is None or shape.leaving is None or most <= 0.0:
        return None
    passing = shape.entering + shape.leaving
    could = shape.area * shape.speed if shape.speed is not None else passing
    if passing <= _CARRIES * most or passing <= _PASSES * could:
        if shape.sheets and (shape.speed or 0.0) > _SLIPS * fastest:
            return RoleGuess(
                Role.SYMMETRY, "plane, the flow slips along it: a symmetry cut, or a wall without friction"
            )
        return RoleGuess(Role.WALL, "no flow passes it")
    if min(shape.entering, shape.leaving) > _BOTH_WAYS * passing:
        return RoleGuess(Role.OPEN, "flow enters and leaves")
    if shape.leaving > shape.entering:
        return RoleGuess(Role.OUTLET, "flow leaves")
    return RoleGuess(Role.INLET, "flow enters")
