"""What stands for the enthalpy that flows through each group, from the data there are."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluxmesh.balance.setting import Setting
from fluxmesh.field.scalars import ScalarFlux
from fluxmesh.integral.table import IntegralTable

__all__ = [
    "Enthalpy",
    "enthalpy_given",
    "enthalpy_of_gas",
    "enthalpy_of_liquid",
    "gas_heat_capacity",
    "mechanical_enthalpy",
]

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Enthalpy:
    """The flux of enthalpy through each group, above zero where it leaves.

    Attributes
    ----------
    basis : {"enthalpy", "temperature", "mechanical"}
        What it is made of: enthalpies as they are given, temperatures, or pressures
        alone, so that what becomes internal energy is missing in the law.
    flux : ndarray, shape (n_groups,), float64
        ``∫ρ h Vr·n dA``, W; zero where it is not known.
    known : ndarray of bool, shape (n_groups,)
        Where it is known.
    quantity : str
        What a port must have for it, in words.
    said : str
        How it was made, one sentence.
    """

    basis: str
    flux: Array
    known: NDArray[np.bool_]
    quantity: str
    said: str


def gas_heat_capacity(gas_constant: float, heat_ratio: float) -> float:
    """Return the heat capacity at constant pressure of an ideal gas.

    Parameters
    ----------
    gas_constant : float
        J/(kg K).
    heat_ratio : float
        Ratio of the heat capacities, above 1.

    Returns
    -------
    float
        ``γ R / (γ - 1)``, J/(kg K) (NACA Report 1135, 1953).
    """
    return heat_ratio * gas_constant / (heat_ratio - 1.0)


def enthalpy_given(enthalpy: ScalarFlux) -> Enthalpy:
    """Return the flux of an enthalpy that is given.

    Parameters
    ----------
    enthalpy : ScalarFlux
        Of the specific enthalpy, J/kg.
    """
    said = "The specific enthalpy is taken as given"
    return Enthalpy("enthalpy", enthalpy.mass_flow, enthalpy.known, "enthalpy", said)


def enthalpy_of_gas(temperature: ScalarFlux, heat_capacity: float) -> Enthalpy:
    """Return the flux of enthalpy of a gas with one heat capacity.

    Parameters
    ----------
    temperature : ScalarFlux
        Of the absolute temperature, K.
    heat_capacity : float
        At constant pressure, J/(kg K).

    Returns
    -------
    Enthalpy
        Of ``h = cp T``: an ideal gas needs no pressure for it.
    """
    said = f"The enthalpy is that of an ideal gas: temperature times {heat_capacity:.6g} J/(kg K)"
    return Enthalpy("temperature", heat_capacity * temperature.mass_flow, temperature.known, "temperature", said)


def enthalpy_of_liquid(
    temperature: ScalarFlux, heat_capacity: float, table: IntegralTable, setting: Setting
) -> Enthalpy:
    """Return the flux of enthalpy of a liquid of one density.

    Parameters
    ----------
    temperature : ScalarFlux
        Of the absolute temperature, K.
    heat_capacity : float
        J/(kg K).
    table : IntegralTable
        The table, for the flow work of the gauge pressure.
    setting : Setting
        What is known where.

    Returns
    -------
    Enthalpy
        Of ``h = c T + p / rho`` (an incompressible fluid has one heat capacity;
        Batchelor, An Introduction to Fluid Dynamics, section 3.4, from memory).
    """
    known = temperature.known & setting.data.pressure & setting.data.flux
    flux = heat_capacity * temperature.mass_flow + table.column("pressure_volume_flow")
    said = f"The enthalpy is {heat_capacity:.6g} J/(kg K) times temperature, and gauge pressure over density (a liquid)"
    return Enthalpy("temperature", np.where(known, flux, 0.0), known, "temperature and pressure", said)


def mechanical_enthalpy(table: IntegralTable, setting: Setting) -> Enthalpy:
    """Return the flow work of the gauge pressure, for a liquid without thermal data.

    Parameters
    ----------
    table : IntegralTable
        The table.
    setting : Setting
        What is known where.

    Returns
    -------
    Enthalpy
        Of ``p / rho`` in place of the enthalpy.
    """
    known = setting.data.pressure & setting.data.flux
    flux = np.where(known, table.column("pressure_volume_flow"), 0.0)
    said = "No thermal data: the mechanical energy of a fluid of one density alone; what is lost of it becomes heat"
    return Enthalpy("mechanical", flux, known, "pressure", said)
