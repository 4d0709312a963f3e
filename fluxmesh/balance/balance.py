"""All laws of one table, put together."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

import fluxmesh
from fluxmesh.balance.frame import frame_terms, held_in, storage_about
from fluxmesh.balance.hardware import HardwareLoad, Reaction, anchor_reaction, hardware_load
from fluxmesh.balance.mass import MassBalance, mass_balance
from fluxmesh.balance.momentum import Ledger, angular_ledger, momentum_ledger
from fluxmesh.balance.ports import PortFigures, port_figures
from fluxmesh.balance.power import Power, delivered_power
from fluxmesh.balance.release import Release, release
from fluxmesh.balance.setting import Setting
from fluxmesh.balance.shortform import ShortForm, short_form
from fluxmesh.balance.storage import Storage
from fluxmesh.balance.weight import Enclosed, Fluid, enclosed_volume, fluid_held, weight_wrench
from fluxmesh.balance.wrench import Wrench, moved
from fluxmesh.field.contents import Contents
from fluxmesh.field.port_samples import PortSample
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
        First motion if the anchor let go; None where the surface accelerates.
    storage : Storage
        Rates of what the volume holds, seen from the control surface.
    axial : Ledger or None
        Angular momentum about the axis of a control surface that turns.
    power : Power or None
        What the flow gives to hardware that moves.
    contents : Contents or None
        What the volume holds, where a volume file tells it.
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
    storage: Storage
    axial: Ledger | None = None
    power: Power | None = None
    contents: Contents | None = None

    def _repr_html_(self) -> str:
        """Show loads, mass and momentum in a notebook; the package's door loads what that needs."""
        return fluxmesh.html_of(self)


def balance_table(
    table: IntegralTable,
    setting: Setting,
    *,
    storage: Storage | None = None,
    contents: Contents | None = None,
    ports: Mapping[str, PortSample] | None = None,
) -> Balance:
    """Apply every law to a table of integrals.

    Parameters
    ----------
    table : IntegralTable
        One row a group; fluxes by the velocity relative to the control surface.
    setting : Setting
        Groups, what is known where, body forces, reference points and motion.
    storage : Storage, optional
        Rates of what the volume holds, seen from the control surface; steady by default.
    contents : Contents, optional
        What the volume holds, of relative velocity.
    ports : mapping of str to PortSample, optional
        Means over ports that are not in the table.

    Returns
    -------
    Balance
        Signs and units as in the classes it is made of.
    """
    about = np.asarray(setting.anchor, dtype=np.float64)
    rates = Storage() if storage is None else storage
    enclosed = enclosed_volume(table) if setting.closed else None
    fluid = _fluid(enclosed, contents, setting)
    weight = Wrench(np.zeros(3), np.zeros(3), about)
    if fluid is not None:
        weight = weight_wrench(fluid.mass, fluid.centre, setting.gravity, about)
    terms = None
    if setting.frame is not None:
        terms = frame_terms(table, setting.frame, held_in(table, setting, fluid, rates, contents, about), rates)
    momentum = momentum_ledger(table, weight.force, rates.momentum, terms)
    angular = angular_ledger(table, weight, rates.angular_momentum, terms)
    axial = _axial(table, setting, fluid, rates, contents, weight)
    both_ways = np.array([group.role is Role.OPEN for group in setting.groups])
    load = hardware_load(momentum, angular, setting)
    reaction = anchor_reaction(load, setting)
    data = setting.data
    known = setting.closed and data.pressure.all() and data.flux[setting.ports()].all() and momentum.known
    still = setting.frame is None or not (setting.frame.turns or any(setting.frame.acceleration))
    return Balance(
        table=table,
        setting=setting,
        enclosed=enclosed,
        fluid=fluid,
        mass=mass_balance(table, both_ways, rates.mass) if setting.closed else None,
        momentum=momentum,
        angular=angular,
        complete=bool(known),
        load=load,
        reaction=reaction,
        ports=port_figures(table, setting, ports),
        short_form=short_form(table, setting) if setting.closed else None,
        release=None if reaction is None or not still else release(reaction, fluid, setting),
        storage=rates,
        axial=axial,
        power=delivered_power(load, axial, setting),
        contents=contents,
    )


def _fluid(enclosed: Enclosed | None, contents: Contents | None, setting: Setting) -> Fluid | None:
    """The fluid held: as its contents say, or the enclosed volume full of one density."""
    if contents is not None and contents.mass is not None and contents.mass_moment is not None:
        centre = contents.origin + contents.mass_moment / contents.mass
        return Fluid(contents.mass, contents.mass * np.asarray(setting.gravity), centre)
    if enclosed is None or setting.fluid_density is None:
        return None
    return fluid_held(enclosed, setting.fluid_density, setting.gravity)


def _axial(
    table: IntegralTable,
    setting: Setting,
    fluid: Fluid | None,
    rates: Storage,
    contents: Contents | None,
    weight: Wrench,
) -> Ledger | None:
    """The ledger of angular momentum about the axis of a surface that turns."""
    frame = setting.frame
    if frame is None or not frame.turns:
        return None
    at, axis = np.asarray(frame.through, dtype=np.float64), np.asarray(frame.axis, dtype=np.float64)
    there = storage_about(rates, np.asarray(setting.anchor, dtype=np.float64), at)
    terms = frame_terms(table, frame, held_in(table, setting, fluid, there, contents, at), there)
    whole = angular_ledger(table, moved(weight, at), there.angular_momentum, terms)
    return whole.along(axis, float(there.angular_momentum @ axis) + terms.axial)
