"""All laws of one table, put together."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fluxmesh.balance.hardware import HardwareLoad, Reaction, anchor_reaction, hardware_load
from fluxmesh.balance.mass import MassBalance, mass_balance
from fluxmesh.balance.momentum import Ledger, angular_ledger, momentum_ledger
from fluxmesh.balance.ports import PortFigures, port_figures
from fluxmesh.balance.release import Release, release
from fluxmesh.balance.setting import Setting
from fluxmesh.balance.shortform import ShortForm, short_form
from fluxmesh.balance.weight import Enclosed, Fluid, enclosed_volume, fluid_held, weight_wrench
from fluxmesh.balance.wrench import Wrench
from fluxmesh.integral.table import IntegralTable
from fluxmesh.surface.surface import Role

__all__ = ["Balance", "balance_table"]


@dataclass(frozen=True, eq=False)
class Balance:
    """Every law on one surface, in SI units.

    Attributes
    ----------
    table : IntegralTable
        The integrals that all else is algebra on.
    setting : Setting
        Groups, body forces and reference points.
    enclosed : Enclosed or None
        Volume and centroid; None for an open surface.
    fluid : Fluid or None
        Fluid held; None for an open surface or without a density.
    mass : MassBalance or None
        None for an open surface.
    momentum, angular : Ledger
        Entries of linear momentum, and of angular momentum about the anchor.
    complete : bool
        Whether all groups carry what the momentum balance needs, so that its
        residual means something.
    load : HardwareLoad
        Flow on hardware.
    reaction : Reaction or None
        Anchor on hardware.
    ports : dict of str to PortFigures
        By port name.
    short_form : ShortForm or None
        For one inlet and one outlet.
    release : Release or None
        First motion if the anchor let go.
    """

    table: IntegralTable
    setting: Setting
    enclosed: Enclosed | None
    fluid: Fluid | None
    mass: MassBalance | None
    momentum: Ledger
    angular: Ledger
    complete: bool
    load: HardwareLoad
    reaction: Reaction | None
    ports: dict[str, PortFigures]
    short_form: ShortForm | None
    release: Release | None


def balance_table(table: IntegralTable, setting: Setting) -> Balance:
    """Apply every law to a table of integrals.

    Parameters
    ----------
    table : IntegralTable
        One row a group.
    setting : Setting
        Groups, what is known where, body forces and reference points.

    Returns
    -------
    Balance
        Signs and units as in the classes it is made of.
    """
    about = np.asarray(setting.anchor, dtype=np.float64)
    enclosed = enclosed_volume(table) if setting.closed else None
    fluid = None
    weight = Wrench(np.zeros(3), np.zeros(3), about)
    if enclosed is not None and setting.fluid_density is not None:
        fluid = fluid_held(enclosed, setting.fluid_density, setting.gravity)
        weight = weight_wrench(fluid.mass, fluid.centre, setting.gravity, about)
    momentum = momentum_ledger(table, weight.force)
    angular = angular_ledger(table, weight)
    both_ways = np.array([group.role is Role.OPEN for group in setting.groups])
    load = hardware_load(momentum, angular, setting)
    reaction = anchor_reaction(load, setting)
    data = setting.data
    return Balance(
        table=table,
        setting=setting,
        enclosed=enclosed,
        fluid=fluid,
        mass=mass_balance(table, both_ways) if setting.closed else None,
        momentum=momentum,
        angular=angular,
        complete=bool(setting.closed and data.pressure.all() and data.flux[setting.ports()].all()),
        load=load,
        reaction=reaction,
        ports=port_figures(table, setting),
        short_form=short_form(table, setting) if setting.closed else None,
        release=None if reaction is None else release(reaction, fluid, setting),
    )
