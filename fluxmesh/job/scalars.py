"""What the flow carries beside mass and momentum: heat and other scalars, from a case to their balances."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from fluxmesh.balance.balance import Balance
from fluxmesh.balance.carried import CarriedBalance, carried_balance
from fluxmesh.balance.energy import EnergyBalance, energy_balance
from fluxmesh.balance.enthalpy import (
    Enthalpy,
    enthalpy_given,
    enthalpy_of_gas,
    enthalpy_of_liquid,
    gas_heat_capacity,
    mechanical_enthalpy,
)
from fluxmesh.balance.mirror import symmetry_planes
from fluxmesh.balance.storage import Storage
from fluxmesh.case.model import Case
from fluxmesh.errors import FieldError
from fluxmesh.field.field import Field, absent_field, supply
from fluxmesh.field.flow import Flow, integrate_flow, still_flow
from fluxmesh.field.scalars import ScalarFlux, at_ports, integrate_scalar
from fluxmesh.job.exported import exported_field
from fluxmesh.job.sampled import Sampled, carried_key, sampled_field
from fluxmesh.job.shape import Shape
from fluxmesh.surface.surface import ControlSurface, Role

__all__ = ["Carried", "Scalars", "balance_scalars", "scalars_of", "temperature_of"]


@dataclass(frozen=True, eq=False)
class Carried:
    """A scalar that the flow carries.

    Attributes
    ----------
    field : Field
        Its values; the name of the field is that of the scalar.
    per : {"mass", "volume"}
        Whether they are an amount a mass or an amount a volume.
    unit : str
        Unit of the amount, for print.
    source : float
        Amount a second that arises inside.
    """

    field: Field
    per: str = "mass"
    unit: str = ""
    source: float = 0.0


@dataclass(frozen=True, eq=False)
class Scalars:
    """What further balances are made of.

    Attributes
    ----------
    temperature, enthalpy : Field or None
        K and J/kg.
    heat_capacity : float or None
        At constant pressure, J/(kg K).
    gas : bool
        Whether the fluid is an ideal gas, whose enthalpy is of the temperature alone; so
        is that of any fluid whose density varies here.
    carried : tuple of Carried
        Scalars.
    heat, shaft_power : float or None
        Heat given to the fluid, and power taken out of it beside what moving
        walls take, W; with one of them the energy is judged.
    """

    temperature: Field | None = None
    enthalpy: Field | None = None
    heat_capacity: float | None = None
    gas: bool = False
    carried: tuple[Carried, ...] = ()
    heat: float | None = None
    shaft_power: float | None = None


def scalars_of(case: Case, shape: Shape, flow: Flow, sampled: Sampled | None) -> Scalars:
    """Lay the scalars that a case asks for on its surface.

    Parameters
    ----------
    case : Case
        The case.
    shape : Shape
        Its surface and arrays.
    flow : Flow
        The flow on it.
    sampled : Sampled or None
        What was sampled, at the quadrature points of the flow.

    Returns
    -------
    Scalars
        At the ports, without what nothing is given of.

    Raises
    ------
    FieldError
        Arrays that are missing or cannot be used, or heat and shaft power that no
        law could use.
    """
    surface, fluid, asked = shape.surface, case.fluid, case.flow
    gas = fluid.law is not None
    capacity = None if fluid.heat_capacity is None else float(fluid.heat_capacity)
    if capacity is None and gas and fluid.gas_constant is not None and fluid.heat_ratio is not None:
        capacity = gas_heat_capacity(float(fluid.gas_constant), float(fluid.heat_ratio))
    enthalpy = None
    if asked.enthalpy is not None or any(section.enthalpy is not None for section in case.groups.values()):
        enthalpy = absent_field(surface, "enthalpy", 1)
        if asked.enthalpy is not None:
            entry = asked.enthalpy
            enthalpy = _array(shape, sampled, "enthalpy", entry.array, "flow.enthalpy", entry.at, entry.unit.factor)
        for k, section in enumerate(case.groups.values()):
            if section.enthalpy is not None:
                enthalpy = supply(enthalpy, k, float(section.enthalpy))
        enthalpy = at_ports(surface, enthalpy)
    temperature = None
    told = asked.temperature is not None or any(section.temperature is not None for section in case.groups.values())
    # one temperature for all of a liquid says nothing of its energy
    if capacity is not None and (gas or told):
        temperature = at_ports(surface, temperature_of(case, shape, sampled), positive=True)
    carried = []
    for number, scalar in enumerate(case.carried):
        field = absent_field(surface, scalar.name, 1)
        if scalar.array is not None:
            key = f"carried.{number}.array"
            field = _array(shape, sampled, carried_key(scalar.name), scalar.array, key, scalar.at, 1.0, scalar.name)
        for k, section in enumerate(case.groups.values()):
            if scalar.name in section.carried:
                field = supply(field, k, section.carried[scalar.name])
        carried.append(Carried(at_ports(surface, field), scalar.per, scalar.unit, scalar.source))
    energy = case.energy
    found = Scalars(
        temperature=temperature,
        enthalpy=enthalpy,
        heat_capacity=capacity,
        gas=gas,
        carried=tuple(carried),
        heat=None if energy is None or energy.heat is None else float(energy.heat),
        shaft_power=None if energy is None or energy.shaft_power is None else float(energy.shaft_power),
    )
    if energy is not None:
        _require_basis(found, flow)
    return found


def temperature_of(case: Case, shape: Shape, sampled: Sampled | None) -> Field:
    """Return the temperature of a case: of groups, else of the array, else of the fluid.

    Parameters
    ----------
    case : Case
        The case.
    shape : Shape
        Its surface and arrays.
    sampled : Sampled or None
        What was sampled.

    Returns
    -------
    Field
        K; a group of which nothing says it is without.

    Raises
    ------
    FieldError
        An array that is missing or of the wrong shape.
    """
    surface, entry = shape.surface, case.flow.temperature
    temperature = absent_field(surface, "temperature", 1)
    if entry is not None:
        factor = entry.unit.factor
        temperature = _array(shape, sampled, "temperature", entry.array, "flow.temperature", entry.at, factor)
    for k, section in enumerate(case.groups.values()):
        if section.temperature is not None:
            temperature = supply(temperature, k, float(section.temperature))
        elif case.fluid.temperature is not None and not temperature.present()[k]:
            temperature = supply(temperature, k, float(case.fluid.temperature))
    return temperature


def _array(
    shape: Shape,
    sampled: Sampled | None,
    quantity: str,
    array: str,
    key: str,
    at: str | None,
    scale: float,
    name: str | None = None,
) -> Field:
    """A scalar from the file of the surface, or from where it is sampled."""
    if sampled is not None:
        field = sampled_field(shape.surface, sampled, quantity, 1, scale)
    else:
        field = exported_field(shape.surface, shape.arrays, quantity, 1, (array,), key=key, at=at, scale=scale)
    return field if name is None else replace(field, name=name)


def _require_basis(scalars: Scalars, flow: Flow) -> None:
    """Raise if heat or shaft power are given and no energy law can use them."""
    thermal = scalars.enthalpy is not None or (scalars.temperature is not None and scalars.heat_capacity is not None)
    if thermal:
        return
    if scalars.gas:
        raise FieldError(
            "heat or shaft power of a gas are given, but no heat capacity",
            where="energy",
            remedy="Give fluid.heat_ratio or fluid.heat_capacity, or an enthalpy",
        )
    if scalars.shaft_power is None:
        raise FieldError(
            "heat is given, but nothing says what heat the flow carries",
            where="energy.heat",
            remedy="Give flow.temperature or groups.NAME.temperature with fluid.heat_capacity, or an enthalpy",
        )
    if flow.uniform_density() is None:
        raise FieldError(
            "shaft power is given, but the density varies and nothing says what heat the flow carries",
            where="energy.shaft_power",
            remedy="Give temperatures with fluid.heat_capacity, or an enthalpy",
        )


def balance_scalars(
    surface: ControlSurface,
    flow: Flow,
    balance: Balance,
    scalars: Scalars,
    *,
    storage: Storage | None = None,
    mirror: bool = False,
    threads: int | None = None,
) -> tuple[EnergyBalance | None, tuple[CarriedBalance, ...]]:
    """Return the balances of energy and of what else the flow carries.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    flow : Flow
        The flow on it.
    balance : Balance
        Its balance of mass and momentum.
    scalars : Scalars
        What is known beside.
    storage : Storage, optional
        Rates of what the volume holds; steady by default.
    mirror : bool, optional
        Whether the balance is that of the whole of which `surface` is a part.
    threads : int, optional
        Threads; all cores by default. The result does not depend on it.

    Returns
    -------
    energy : EnergyBalance or None
        None where neither thermal data nor one density and pressures give an energy law.
    carried : tuple of CarriedBalance
        One a scalar.

    Raises
    ------
    FieldError
        Fields that cannot be integrated.
    """
    kept, times = np.ones(len(surface.groups), np.bool_), 1.0
    if mirror:
        kept = np.array([group.role is not Role.SYMMETRY for group in surface.groups])
        times = 2.0 ** len(symmetry_planes(integrate_flow(surface, still_flow(surface)), surface.groups))

    def integral(field: Field) -> ScalarFlux:
        return integrate_scalar(surface, flow, field, threads=threads).of_groups(kept, times)

    liquid = flow.uniform_density() is not None and not scalars.gas
    enthalpy = _enthalpy(balance, scalars, liquid, integral)
    energy = None
    if enthalpy is not None:
        energy = energy_balance(
            balance.table,
            balance.setting,
            enthalpy,
            storage=storage,
            fluid=balance.fluid,
            power=balance.power,
            heat=scalars.heat,
            shaft_power=scalars.shaft_power,
            liquid=liquid,
        )
    carried = tuple(
        carried_balance(
            balance.table,
            balance.setting,
            integral(scalar.field),
            per=scalar.per,
            unit=scalar.unit,
            source=scalar.source,
            storage=storage,
        )
        for scalar in scalars.carried
    )
    return energy, carried


def _enthalpy(
    balance: Balance, scalars: Scalars, liquid: bool, integral: Callable[[Field], ScalarFlux]
) -> Enthalpy | None:
    """The enthalpy from the best data there are, or what stands for it."""
    table, setting = balance.table, balance.setting
    if not setting.closed:
        return None
    if scalars.enthalpy is not None:
        return enthalpy_given(integral(scalars.enthalpy))
    if scalars.temperature is not None and scalars.heat_capacity is not None:
        temperature = integral(scalars.temperature)
        if liquid:
            return enthalpy_of_liquid(temperature, scalars.heat_capacity, table, setting)
        return enthalpy_of_gas(temperature, scalars.heat_capacity)
    ports = setting.ports()
    if liquid and ports.any() and (setting.data.pressure & setting.data.flux)[ports].all():
        return mechanical_enthalpy(table, setting)
    return None
