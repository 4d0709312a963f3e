"""Conservation of energy over the surface, in the inertial frame.

``d/dt ∫ρe dv + ∮ρ(h + V²/2 - g·x)(Vr·n) dA + ∮p(W·n) dA - ∮t·V dA = Q - P``

with the absolute velocity ``V = Vr + W``, the velocity ``W`` of the control surface, the
viscous traction ``t`` on the fluid, the heat ``Q`` given to it and the shaft power ``P``
taken from it (Reynolds' transport theorem on the first law; White, Fluid Mechanics,
ch. 3, from memory). The part of the surface integrals that lies on walls is the power
``P`` of moving walls: load of the flow on them times their velocity. ``x`` is about the anchor.

Pressure is gauge throughout. Beside the enthalpy it enters only through ``∮p W·n``,
walls and ports alike, and a constant pressure does no work on a closed surface that
keeps its shape: the ambient level drops out, while the power of the walls is what is
left with the ambient pressure on their other side.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import fsum, isfinite
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.balance.enthalpy import Enthalpy, mechanical_enthalpy
from fluxmesh.balance.frame import mass_flow_moments
from fluxmesh.balance.momentum import moments_about
from fluxmesh.balance.power import Power
from fluxmesh.balance.setting import Setting
from fluxmesh.balance.storage import Storage
from fluxmesh.balance.stored_energy import stored_energy
from fluxmesh.balance.weight import Fluid
from fluxmesh.balance.wrench import Vector
from fluxmesh.field.frame import Frame
from fluxmesh.integral.table import IntegralTable

__all__ = ["EnergyBalance", "energy_balance"]

# a group that as much enters as leaves has no mean of what passes
_NET_SHARE: Final = 0.01


@dataclass(frozen=True, eq=False)
class EnergyBalance:
    """Entries of the energy law, group by group, and what is left; all in W.

    ``storage + flux + pressure work - viscous power = heat - shaft power``.

    Enthalpy has no natural zero and pressure no natural level: both only add a
    constant times the mass residual to the law. Therefore the law is judged about
    the mean energy of what passes, ``residual - mass_share``, and against entries
    that are counted from their means: neither zero point counts, and an error in the mass is
    judged in the mass law alone.

    Attributes
    ----------
    basis : {"enthalpy", "temperature", "mechanical"}
        What the enthalpy is made of, see `fluxmesh.balance.enthalpy.Enthalpy`.
    group_enthalpy, group_kinetic, group_potential : ndarray, shape (n_groups,), float64
        Flux of enthalpy, of the kinetic energy of the absolute velocity and of ``-g·x`` (about the
        anchor) OUT through each port; zero where it is not known.
    group_pressure_work, group_viscous : ndarray, shape (n_groups,), float64
        ``∫p W·n dA``, and power of the viscous traction ON THE FLUID, ``∫t·V dA``, at
        each group but walls.
    storage : float or None
        Rate of the energy inside; None when it is not known.
    heat, shaft_power_given : float or None
        As given: into the fluid, and out of it beside what moving walls take.
    shaft_power_walls : float or None
        Power that the flow gives to the walls; zero when they rest, None when it
        is not known.
    residual : float or None
        Left side minus right side, where what is not given counts as zero. None when
        an entry is not known.
    mass_share : float
        The part of `residual` that the mass residual alone brings.
    size : float
        Sum of the sizes of the entries: enthalpy, potential and what the motion of the
        surface adds to the kinetic energy from their means; kinetic energy of the
        relative velocity, works, powers, heat and storage in full. So an adiabatic flow of
        one temperature is still measured against its kinetic energy. Only where mass is
        stored does the zero of the enthalpy count, with what is stored.
    loss : float or None
        Mechanical energy that is lost in a liquid of one density.
    loss_size : float
        Sum of the sizes of the mechanical entries.
    unknown : tuple of str
        What is missing for the law.
    notes : tuple of str
        What the figures rest on, one sentence each.
    """

    basis: str
    group_enthalpy: Vector
    group_kinetic: Vector
    group_potential: Vector
    group_pressure_work: Vector
    group_viscous: Vector
    storage: float | None
    heat: float | None
    shaft_power_given: float | None
    shaft_power_walls: float | None
    residual: float | None
    mass_share: float
    size: float
    loss: float | None
    loss_size: float
    unknown: tuple[str, ...]
    notes: tuple[str, ...]

    @property
    def group_flux(self) -> Vector:
        """Flux of energy out through each port, shape (n_groups,), W."""
        return self.group_enthalpy + self.group_kinetic + self.group_potential

    @property
    def flux(self) -> float:
        """Flux of energy out through all ports, W; of the ports that are known."""
        return fsum(np.concatenate([self.group_enthalpy, self.group_kinetic, self.group_potential]).tolist())

    @property
    def pressure_work(self) -> float:
        """``∫p W·n dA`` over all groups but walls, W."""
        return fsum(self.group_pressure_work.tolist())

    @property
    def viscous_power(self) -> float:
        """Power of the viscous traction on the fluid at all groups but walls, W."""
        return fsum(self.group_viscous.tolist())

    @property
    def judged(self) -> bool:
        """Whether the case says what must be left, so that the residual is an error."""
        given = self.heat is not None or self.shaft_power_given is not None
        return self.basis != "mechanical" and given and self.residual is not None and self.size > 0.0

    @property
    def relative(self) -> float | None:
        """Residual about the mean energy over `size`; None when the law is not judged."""
        return abs(self.left or 0.0) / self.size if self.judged else None

    @property
    def left(self) -> float | None:
        """What is left about the mean energy of what passes, ``residual - mass_share``, W.

        Where neither heat nor shaft power is given, it is the heat minus the shaft
        power (beside that of the walls) that the flow demands.
        """
        return None if self.residual is None else self.residual - self.mass_share

    def gains(self, tolerance: float) -> bool:
        """Return whether mechanical energy comes from nowhere: a loss that is negative beyond noise.

        Parameters
        ----------
        tolerance : float
            Share of the mechanical entries that counts as noise.
        """
        return self.loss is not None and self.loss < -tolerance * self.loss_size


@dataclass(frozen=True, eq=False)
class _Entries:
    """What the law is made of beside the enthalpy."""

    flows: Vector
    net: NDArray[np.bool_]
    kinetic: Vector
    drift: Vector
    potential: Vector
    work: Vector
    viscous: Vector
    mass_residual: float
    stored: float
    powers: tuple[float, float]

    def close(self, enthalpy: Vector, heat: float) -> tuple[float, float, float]:
        """Return the residual, the share of the mass residual in it, and the size of the entries."""
        shaft, walls = self.powers
        fluxes = (enthalpy, self.drift, self.potential, self.kinetic)
        means = [self._mean(flux) for flux in fluxes]
        mean = fsum(means)
        parts = np.concatenate([*fluxes, self.work, -self.viscous]).tolist()
        residual = fsum([*parts, self.stored, -heat, shaft, walls])
        apart = [np.abs(flux - level * self.flows) for flux, level in zip(fluxes[:3], means)]
        sizes = np.concatenate([*apart, np.abs(self.kinetic), np.abs(self.work), np.abs(self.viscous)]).tolist()
        size = fsum([*sizes, abs(self.stored), abs(heat), abs(shaft), abs(walls)])
        return residual, mean * self.mass_residual, size

    def _mean(self, flux: Vector) -> float:
        """Mean of what passes, J/kg: the slope of flux over mass flow, by least squares over the groups.

        It moves with the zero point of what is carried, and does not mind a group
        that nothing passes on balance.
        """
        flows = self.flows[self.net]
        square = fsum((flows**2).tolist())
        return fsum((flows * flux[self.net]).tolist()) / square if square > 0.0 else 0.0


def energy_balance(
    table: IntegralTable,
    setting: Setting,
    enthalpy: Enthalpy,
    *,
    storage: Storage | None = None,
    fluid: Fluid | None = None,
    power: Power | None = None,
    heat: float | None = None,
    shaft_power: float | None = None,
    liquid: bool = False,
) -> EnergyBalance:
    """Return the energy balance of a table.

    Parameters
    ----------
    table : IntegralTable
        The table, with the velocity relative to the control surface.
    setting : Setting
        Groups, gravity, anchor, motion, and what is known where.
    enthalpy : Enthalpy
        Flux of enthalpy, or of what stands for it.
    storage : Storage, optional
        Rates of what the volume holds, as seen from the control surface; steady by default.
    fluid : Fluid, optional
        Fluid held, for the power of its weight where the surface moves.
    power : Power, optional
        What the flow gives to moving walls: from the walls, or else the power that
        the momentum balance demands. Needed where walls move.
    heat : float, optional
        Heat given to the fluid, W.
    shaft_power : float, optional
        Power taken out of the fluid beside what moving walls take, W.
    liquid : bool, optional
        Whether the fluid is a liquid of one density, so that the loss of mechanical
        energy means something.

    Returns
    -------
    EnergyBalance
        With what is not known said in `unknown`.
    """
    about = np.asarray(setting.anchor, dtype=np.float64)
    ports, frame, data = setting.ports(), setting.frame, setting.data
    moving = frame is not None and (frame.turns or any(frame.velocity))
    mechanical = enthalpy.basis == "mechanical"
    through = table.column("mass_flow") + 2 * table.column("reversed_mass_flow")
    still = data.flux & (through == 0.0)
    notes, unknown = [enthalpy.said], []
    if not setting.closed:
        unknown.append("the surface is open")
    unknown += _lacking(setting, ports & ~data.flux, "flow")
    blind = moving and bool((~setting.walls() & ~data.pressure).any())
    if blind:
        lacking = ~setting.walls() & ~data.pressure
        unknown += _lacking(setting, lacking, "pressure, which does work where the surface moves,")
    silent = ports & ~data.traction
    if silent.any():
        notes.append(f"The power of viscous traction at {_names(setting, silent)} is not given, and counts as zero")
    walls, said = _wall_power(table, setting, moving, power)
    if walls is None:
        unknown.append(said)
    elif said:
        notes.append(said)
    stored, said = stored_energy(table, setting, storage, fluid)
    if stored is None:
        unknown.append(said)
    if mechanical and heat is not None:
        notes.append("The heat that is given does not enter the mechanical energy")
        heat = None
    elif not mechanical and (heat is None) != (shaft_power is None):
        notes.append(f"The {'heat' if heat is None else 'shaft power'} is not given, and counts as zero")
    sound = not unknown  # but for the enthalpy
    unknown += _lacking(setting, ports & data.flux & ~still & ~enthalpy.known, enthalpy.quantity)

    entries = _entries(table, setting, moving, about, storage, stored or 0.0, (shaft_power or 0.0, walls or 0.0))
    residual, share, size = entries.close(np.where(ports, enthalpy.flux, 0.0), heat or 0.0)
    loss, loss_size = None, 0.0
    alone = mechanical_enthalpy(table, setting)
    if liquid and sound and bool((still | alone.known)[ports].all()) and (storage is None or mechanical):
        # heat is no part of the mechanical energy
        left, free, loss_size = entries.close(np.where(ports, alone.flux, 0.0), 0.0)
        loss = free - left
    return EnergyBalance(
        basis=enthalpy.basis,
        group_enthalpy=np.where(ports, enthalpy.flux, 0.0),
        group_kinetic=entries.kinetic + entries.drift,
        group_potential=entries.potential,
        group_pressure_work=entries.work,
        group_viscous=entries.viscous,
        storage=stored,
        heat=heat,
        shaft_power_given=shaft_power,
        shaft_power_walls=walls,
        residual=None if unknown else residual,
        mass_share=share,
        size=size,
        loss=loss,
        loss_size=loss_size,
        unknown=tuple(unknown),
        notes=tuple(notes),
    )


def _entries(
    table: IntegralTable,
    setting: Setting,
    moving: bool,
    about: Vector,
    storage: Storage | None,
    stored: float,
    powers: tuple[float, float],
) -> _Entries:
    ports, walls = setting.ports(), setting.walls()
    flows = table.column("mass_flow")
    through = flows + 2 * table.column("reversed_mass_flow")
    mass_rate = 0.0 if storage is None or not isfinite(storage.mass) else storage.mass
    drift, work = np.zeros(flows.size), np.zeros(flows.size)
    viscous = table.column("viscous_power")
    if moving and setting.frame is not None:
        drift = _drift(table, setting.frame, about)
        work = -_power_of(table, setting.frame, about, "pressure_force", "moment_of_pressure")
        viscous = viscous + _power_of(table, setting.frame, about, "viscous_force", "moment_of_viscous")
    first, _ = mass_flow_moments(table, about)
    return _Entries(
        flows=np.where(ports, flows, 0.0),
        net=ports & (np.abs(flows) > _NET_SHARE * through),
        kinetic=np.where(ports, table.column("kinetic_energy_flux"), 0.0),
        drift=np.where(ports, drift, 0.0),
        potential=np.where(ports, -first @ np.asarray(setting.gravity, dtype=np.float64), 0.0),
        work=np.where(walls, 0.0, work),
        viscous=np.where(walls, 0.0, viscous),
        mass_residual=fsum([*flows.tolist(), mass_rate]),
        stored=stored,
        powers=powers,
    )


def _names(setting: Setting, chosen: NDArray[np.bool_]) -> str:
    return ", ".join(group.name for group, one in zip(setting.groups, chosen) if one)


def _lacking(setting: Setting, chosen: NDArray[np.bool_], what: str) -> list[str]:
    return [f"no {what} is known at {_names(setting, chosen)}"] if chosen.any() else []


def _drift(table: IntegralTable, frame: Frame, about: Vector) -> Vector:
    """What the motion of the frame adds to the flux of kinetic energy, W.

    ``∫ρ(Vr·W + W²/2) Vr·n dA`` with ``W = U + Ω × r``, r about the point.
    """
    speed, spin = frame.at(about), frame.spin
    first, second = mass_flow_moments(table, about)
    mixed = _power_of(table, frame, about, "momentum_flux", "moment_of_momentum_flux")
    square = float(speed @ speed) * table.column("mass_flow") / 2 + np.cross(spin, first) @ speed
    turning = (float(spin @ spin) * np.trace(second, axis1=1, axis2=2) - (second @ spin) @ spin) / 2
    return np.asarray(mixed + square + turning)


def _power_of(table: IntegralTable, frame: Frame, about: Vector, force: str, moment: str) -> Vector:
    """Power of an entry's forces at the velocity of the control surface, shape (n_groups,)."""
    turning = moments_about(table, moment, force, about) @ frame.spin
    return np.asarray(table.column(force) @ frame.at(about) + turning)


def _wall_power(table: IntegralTable, setting: Setting, moving: bool, power: Power | None) -> tuple[float | None, str]:
    """Power that the flow gives to the walls, with what is to be said of it."""
    walls = setting.walls()
    # walls that slide within the surface, such as a turning cylinder: -t·Vr
    sliding = 0.0 - fsum(table.column("viscous_power")[walls].tolist())
    if not moving or not walls.any():
        return sliding, ""
    if power is not None and power.from_walls is not None:
        silent = walls & ~setting.data.traction
        said = f"The power of the walls is without friction on {_names(setting, silent)}, which is not given"
        return sliding + power.from_walls, said if silent.any() else ""
    if power is not None and power.from_balance is not None:
        return sliding + power.from_balance, "The power of the walls is that which the momentum balance demands"
    lacking = walls & ~setting.data.pressure
    return None, f"the walls move, and their power is not known (pressure at {_names(setting, lacking)})"
