"""What would explain that a reported load differs from ours: ratios, signs, parts and points that tell."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from fluxmesh.balance.wrench import Vector

__all__ = ["LoadParts", "telling_differences"]

_NEAR = 0.01  # of the reported load; explanations must meet it within this or the doubt
_UNLIKE = 3.0  # times nearer than the plain comparison, or the explanation tells nothing

Candidate = tuple[str, Vector]


@dataclass(frozen=True, eq=False)
class LoadParts:
    """Our load on some groups, in parts that a solver may leave out or count otherwise.

    Attributes
    ----------
    pressure, viscous : ndarray, shape (3,), float64
        Flow on hardware, N.
    pressure_moment, viscous_moment : ndarray, shape (3,), float64
        About the anchor, N m.
    area_vector : ndarray, shape (3,), float64
        Of these groups, out of the fluid, m².
    weight : ndarray, shape (3,), float64
        Of the fluid held, N; zero where there is none.
    density, ambient : float or None
        Uniform density, kg/m³, and ambient absolute pressure, Pa.
    """

    pressure: Vector
    viscous: Vector
    pressure_moment: Vector
    viscous_moment: Vector
    area_vector: Vector
    weight: Vector
    density: float | None
    ambient: float | None

    @property
    def force(self) -> Vector:
        """All of the force."""
        return self.pressure + self.viscous

    @property
    def moment(self) -> Vector:
        """All of the moment."""
        return self.pressure_moment + self.viscous_moment


def telling_differences(
    parts: LoadParts,
    force: Vector | None,
    moment: Vector | None,
    *,
    points: Mapping[str, Vector],
    doubt: Vector | None = None,
) -> tuple[str, ...]:
    """Return what would explain a reported load that is not ours, one sentence each, best first.

    Parameters
    ----------
    parts : LoadParts
        Our load.
    force, moment : ndarray, shape (3,), float64, or None
        As reported: flow on hardware, N, and N m about the anchor.
    points : mapping of str to ndarray, shape (3,)
        Points that the reported moment may be about instead, from the anchor, m.
    doubt : ndarray, shape (3,), float64, optional
        Half width of the doubt of our force, N.

    Returns
    -------
    tuple of str
        Empty where the loads agree within one per cent and the doubt, or nothing tells.
    """
    said: list[str] = []
    allowed = 0.0 if doubt is None else float(np.linalg.norm(doubt))
    if force is not None:
        said += _matches(force, parts.force, _forces(parts), allowed)
    if moment is not None:
        reach = 0.0
        said += [
            text for text in _matches(moment, parts.moment, _moments(parts, force, points), reach) if text not in said
        ]
    return tuple(said)


def _matches(theirs: Vector, ours: Vector, candidates: Iterator[Candidate], allowed: float) -> list[str]:
    size = float(np.linalg.norm(theirs))
    near = max(_NEAR * size, allowed)
    plain = float(np.linalg.norm(theirs - ours))
    if plain <= near or size == 0.0:
        return []
    found = [(float(np.linalg.norm(theirs - value)), text) for text, value in candidates]
    kept = sorted((gap, text) for gap, text in found if gap <= near and _UNLIKE * gap < plain)
    return [text for _, text in kept]


def _forces(parts: LoadParts) -> Iterator[Candidate]:
    ours = parts.force
    yield from _ratios(ours, "force", parts.density)
    if np.any(parts.viscous):
        yield "The reported force is the pressure part alone: the viscous part is missing", parts.pressure
        yield "The reported force is the viscous part alone: the pressure part is missing", parts.viscous
        yield "The reported force has the viscous part with the other sign", parts.pressure - parts.viscous
    if np.any(parts.weight):
        yield "The reported force holds the weight of the fluid besides", ours + parts.weight
        yield "The reported force leaves out the weight of the fluid", ours - parts.weight
    if parts.ambient is not None:
        gauge = parts.ambient * parts.area_vector
        yield "The reported force is of absolute pressure: the ambient pressure acts on these groups too", ours + gauge
        yield "The reported force is of gauge pressure, and ours of a pressure that is taken for gauge", ours - gauge


def _ratios(ours: Vector, what: str, density: float | None) -> Iterator[Candidate]:
    yield f"The reported {what} has the other sign: it may be that of the hardware on the fluid", -ours
    for factor, text in (
        (0.5, "half of ours: it may be that of a half model"),
        (2.0, "twice ours: ours may be that of a half model"),
        (0.25, "a quarter of ours: it may be that of a quarter model"),
        (4.0, "four times ours: ours may be that of a quarter model"),
    ):
        yield f"The reported {what} is {text}", factor * ours
    if density is not None and abs(density - 1.0) > 0.05:
        yield f"The reported {what} is ours over the density: it may be of kinematic pressure", ours / density
        yield f"The reported {what} is ours times the density: ours may be of kinematic pressure", ours * density


def _moments(parts: LoadParts, force: Vector | None, points: Mapping[str, Vector]) -> Iterator[Candidate]:
    ours = parts.moment
    carrying = parts.force if force is None else force
    for name, arm in points.items():
        yield f"The reported moment is about {name}, not about the anchor", ours - np.cross(arm, carrying)
    yield from _ratios(ours, "moment", parts.density)
    if np.any(parts.viscous_moment):
        yield "The reported moment is of the pressure part alone: the viscous part is missing", parts.pressure_moment
