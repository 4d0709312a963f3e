"""The short form of the momentum balance for one inlet and one outlet."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fluxmesh.balance.setting import Setting
from fluxmesh.balance.wrench import Vector
from fluxmesh.integral.table import IntegralTable

__all__ = ["ShortForm", "short_form"]


@dataclass(frozen=True, eq=False)
class ShortForm:
    """``mass flow × (V2 - V1)`` with the mean velocities of the two ports.

    Attributes
    ----------
    inlet, outlet : str
        Names of the two ports.
    mass_flow : float
        Mean of what enters and what leaves, kg/s.
    inlet_velocity, outlet_velocity : ndarray, shape (3,), float64
        Area means V1 and V2, m/s.
    rate : ndarray, shape (3,), float64
        ``mass_flow (V2 - V1)``, N.
    full_flux : ndarray, shape (3,), float64
        Net flux of momentum out, from the integrals, N.
    profile_effect : ndarray, shape (3,), float64
        ``full_flux - rate``: what the shape of the profiles adds, N.
    """

    inlet: str
    outlet: str
    mass_flow: float
    inlet_velocity: Vector
    outlet_velocity: Vector
    rate: Vector
    full_flux: Vector
    profile_effect: Vector


def short_form(table: IntegralTable, setting: Setting) -> ShortForm | None:
    """Return the short form, if it applies.

    Parameters
    ----------
    table : IntegralTable
        The table.
    setting : Setting
        Groups, and what is known where.

    Returns
    -------
    ShortForm or None
        None unless exactly two ports carry flow, one in and one out, and where
        the control surface turns: it is not made for that.
    """
    if setting.frame is not None and setting.frame.turns:
        return None
    flows = table.column("mass_flow")
    carrying = [k for k in np.flatnonzero(setting.ports() & setting.data.flux) if flows[k] != 0.0]
    if len(carrying) != 2 or flows[carrying[0]] * flows[carrying[1]] >= 0:
        return None
    one, two = sorted(carrying, key=lambda k: float(flows[k]))
    means = table.column("velocity_area") / table.column("area")[:, None]
    flow = float(flows[two] - flows[one]) / 2
    rate = flow * (means[two] - means[one])
    full = table.total("momentum_flux")
    return ShortForm(
        setting.groups[one].name,
        setting.groups[two].name,
        flow,
        means[one],
        means[two],
        rate,
        full,
        full - rate,
    )
