"""A load as printed by the solver against the same load from the integrals."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

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
    """

    on: tuple[str, ...]
    reported_force: Vector | None
    reported_moment: Vector | None
    force: Vector
    moment: Vector
    relative: float | None


def compare_reported(
    balance: Balance,
    *,
    force: tuple[float, float, float] | None,
    moment: tuple[float, float, float] | None,
    on: tuple[str, ...] | None,
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
    return Comparison(
        names,
        theirs,
        None if moment is None else np.asarray(moment, dtype=np.float64),
        ours,
        turning,
        float(np.linalg.norm(ours - theirs)) / size if theirs is not None and size > 0 else None,
    )
