"""A load as printed by the solver against the same load from the integrals."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fluxmesh.assess.telling import LoadParts, telling_differences
from fluxmesh.balance.balance import Balance
from fluxmesh.balance.wrench import Vector
from fluxmesh.errors import GroupError

__all__ = ["Comparison", "compare_reported"]


@dataclass(frozen=True, eq=False)
class Comparison:
    """A reported load beside ours; compared, never used.

    Attributes
    ----------
    on : tuple of str
        Groups that the load was reported for.
    reported_force, reported_moment : ndarray, shape (3,), float64, or None
        Flow on hardware as reported, N and N m about the anchor.
    force, moment : ndarray, shape (3,), float64
        The same from the integrals over those groups.
    relative : float or None
        Length of the force's difference over that of the reported force.
    explanations : tuple of str
        What would explain the difference, best first; empty where the loads agree or nothing tells.
    """

    on: tuple[str, ...]
    reported_force: Vector | None
    reported_moment: Vector | None
    force: Vector
    moment: Vector
    relative: float | None
    explanations: tuple[str, ...] = ()


def compare_reported(
    balance: Balance,
    *,
    force: tuple[float, float, float] | None,
    moment: tuple[float, float, float] | None,
    on: tuple[str, ...] | None,
    density: float | None = None,
    doubt: Vector | None = None,
) -> Comparison:
    """Compare a reported load with the integrals over the same groups.

    Parameters
    ----------
    balance : Balance
        The balance.
    force, moment : tuple of 3 floats, or None
        As reported: flow on hardware, N, and N m about the anchor.
    on : tuple of str or None
        Groups; all walls by default.
    density : float, optional
        Uniform density of the fluid, kg/m³.
    doubt : ndarray, shape (3,), float64, optional
        Half width of the doubt of our force on these groups, N.

    Returns
    -------
    Comparison
        Both, and how far they are apart.

    Raises
    ------
    GroupError
        A group without pressure, so that there is nothing to compare with.
    """
    setting = balance.setting
    chosen = setting.walls() if on is None else np.array([group.name in on for group in setting.groups])
    names = tuple(group.name for group, there in zip(setting.groups, chosen) if there)
    lacking = [name for name, k in zip(names, np.flatnonzero(chosen)) if not setting.data.pressure[k]]
    if lacking or not names:
        raise GroupError(
            f"a load is reported on {', '.join(names) or 'walls that are not there'}, but no pressure is known there",
            where="reported",
            remedy="Name groups that carry pressure in reported.on, or drop [reported]",
        )
    ours = -(balance.momentum.pressure(chosen) + balance.momentum.viscous(chosen))
    turning = -(balance.angular.pressure(chosen) + balance.angular.viscous(chosen))
    theirs = None if force is None else np.asarray(force, dtype=np.float64)
    size = 0.0 if theirs is None else float(np.linalg.norm(theirs))
    turned = None if moment is None else np.asarray(moment, dtype=np.float64)
    parts = LoadParts(
        pressure=-balance.momentum.pressure(chosen),
        viscous=-balance.momentum.viscous(chosen),
        pressure_moment=-balance.angular.pressure(chosen),
        viscous_moment=-balance.angular.viscous(chosen),
        area_vector=balance.table.total("area_vector", chosen),
        weight=balance.momentum.weight,
        density=density,
        ambient=setting.ambient,
    )
    return Comparison(
        names,
        theirs,
        turned,
        ours,
        turning,
        float(np.linalg.norm(ours - theirs)) / size if theirs is not None and size > 0 else None,
        telling_differences(parts, theirs, turned, points=_other_points(balance), doubt=doubt),
    )


def _other_points(balance: Balance) -> dict[str, Vector]:
    """Points that a solver may take moments about, as seen from the anchor."""
    anchor = np.asarray(balance.setting.anchor, dtype=np.float64)
    points = {"the origin of the coordinates": -anchor}
    if balance.enclosed is not None:
        points["the centre of the volume"] = balance.enclosed.centroid - anchor
    if balance.setting.hardware is not None:
        points["the centre of the hardware"] = np.asarray(balance.setting.hardware.centre) - anchor
    area, position = balance.table.column("area"), balance.table.column("position")
    for k, group in enumerate(balance.setting.groups):
        if group.role.is_port and area[k] > 0:
            points[f"the middle of {group.name}"] = balance.table.origin + position[k] / area[k] - anchor
    return {name: arm for name, arm in points.items() if np.any(arm)}
