"""Means and factors at each port."""

from __future__ import annotations

from dataclasses import dataclass
from math import sqrt

from fluxmesh.balance.setting import Setting
from fluxmesh.integral.table import IntegralTable

__all__ = ["PortFigures", "port_figures"]


@dataclass(frozen=True)
class PortFigures:
    """Figures of one port; None where data are missing or nothing flows.

    Attributes
    ----------
    mean_pressure_area, mean_pressure_mass_flow : float or None
        Gauge pressure weighted by area and by mass flow, Pa.
    mean_total_pressure_area, mean_total_pressure_mass_flow : float or None
        Pressure plus dynamic pressure ``rho V²/2``, Pa.
    mean_speed : float or None
        Size of the mean velocity through the port, volume flow over area, m/s.
    momentum_factor : float or None
        ``∫rho (V·n)² dA ∫rho dA / (∫rho V·n dA)²``; 1 for a uniform profile, 4/3 for
        developed laminar flow in a round pipe (White, Fluid Mechanics, ch. 3;
        from memory).
    kinetic_energy_factor : float or None
        ``∫rho V² (V·n) dA (∫rho dA)² / (∫rho V·n dA)³``; 1 uniform, 2 laminar.
    reversed_share : float or None
        Mass that flows against the port's net flow, over all that passes.
    mach_number : float or None
        Mean speed over the speed of sound ``sqrt(heat_ratio p / rho)`` at the
        mean absolute pressure and density, for an ideal gas.
    """

    mean_pressure_area: float | None
    mean_pressure_mass_flow: float | None
    mean_total_pressure_area: float | None
    mean_total_pressure_mass_flow: float | None
    mean_speed: float | None
    momentum_factor: float | None
    kinetic_energy_factor: float | None
    reversed_share: float | None
    mach_number: float | None


def _over(numerator: float, denominator: float) -> float | None:
    return numerator / denominator if denominator != 0.0 else None


def _mach_number(
    setting: Setting, pressure_area: float, volume_flow: float, density_area: float, area: float
) -> float | None:
    if setting.heat_ratio is None or setting.ambient is None or area <= 0.0 or density_area <= 0.0:
        return None
    pressure = pressure_area / area + setting.ambient
    if pressure <= 0.0:
        return None
    return abs(volume_flow) / area / sqrt(setting.heat_ratio * pressure / (density_area / area))


def port_figures(table: IntegralTable, setting: Setting) -> dict[str, PortFigures]:
    """Return the figures of every port.

    Parameters
    ----------
    table : IntegralTable
        The table.
    setting : Setting
        Groups, and what is known where.

    Returns
    -------
    dict of str to PortFigures
        By group name, in the order of the groups.
    """

    def at(name: str, k: int) -> float:
        return float(table.column(name)[k])

    figures = {}
    for k, group in enumerate(setting.groups):
        if not group.role.is_port:
            continue
        area, flow = at("area", k), at("mass_flow", k)
        pressure, flux = bool(setting.data.pressure[k]), bool(setting.data.flux[k])
        both = pressure and flux
        backward = at("reversed_mass_flow", k)
        forward = flow + backward
        density = at("density_area", k)
        # factors compare with the net flow: none where as much goes back as forth
        through = flux and abs(flow) > 0.01 * (forward + backward)
        figures[group.name] = PortFigures(
            mean_pressure_area=_over(at("pressure_area", k), area) if pressure else None,
            mean_pressure_mass_flow=_over(at("pressure_mass_flow", k), flow) if pressure and through else None,
            mean_total_pressure_area=_over(at("pressure_area", k) + at("dynamic_pressure_area", k), area)
            if both
            else None,
            mean_total_pressure_mass_flow=_over(at("pressure_mass_flow", k) + at("dynamic_pressure_mass_flow", k), flow)
            if pressure and through
            else None,
            mean_speed=_over(abs(at("volume_flow", k)), area) if flux else None,
            momentum_factor=_over(at("normal_momentum", k) * density, flow**2) if through else None,
            kinetic_energy_factor=_over(2 * at("kinetic_energy_flux", k) * density**2, flow**3) if through else None,
            reversed_share=_over(min(forward, backward), forward + backward) if flux else None,
            mach_number=_mach_number(setting, at("pressure_area", k), at("volume_flow", k), density, area)
            if both
            else None,
        )
    return figures
