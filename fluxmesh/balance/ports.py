"""Means, factors and shares at each port.

What is linear in the basis integrals is algebra on the table; the rest comes from
quadrature over the ports (`fluxmesh.field.port_samples`). Mass flow, factors, uniformity,
shares and `mean_speed` go by the velocity relative to the control surface; speed, swirl,
Mach number means and totals by the absolute velocity. Without a frame they are one.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from math import fsum, pi, sqrt
from typing import Final

import numpy as np

from fluxmesh.balance.frame import mass_flow_moments
from fluxmesh.balance.setting import Setting
from fluxmesh.field.gas import sound_speed
from fluxmesh.field.port_samples import MEANS_AS_ONE, NO_MEANS, SECTION, Means, PortSample
from fluxmesh.integral.table import IntegralTable

__all__ = ["PortFigures", "port_figures"]

_UNSAMPLED: Final = PortSample()


@dataclass(frozen=True)
class PortFigures:
    """Figures of one port; None, or means of None, where data are missing or nothing flows.

    Attributes
    ----------
    mean_pressure : Means
        Gauge static pressure, Pa.
    mean_total_pressure : Means
        Gauge, Pa: ``p + rho V²/2``, or of an ideal gas what it would have if brought to rest
        without loss, see `fluxmesh.field.port_samples.PortSample`.
    mean_temperature, mean_total_temperature : Means
        K.
    mean_speed : float or None
        Size of the mean velocity through the port, volume flow over area, m/s.
    speed : Means
        Of ``|V|``, m/s.
    mean_mach_number : Means
        Of the Mach number at each place.
    momentum_factor : float or None
        ``∫rho (V·n)² dA ∫rho dA / (∫rho V·n dA)²``; 1 for a uniform profile, 4/3 for
        developed laminar flow in a round pipe (White, Fluid Mechanics, ch. 3;
        from memory).
    kinetic_energy_factor : float or None
        ``∫rho V² (V·n) dA (∫rho dA)² / (∫rho V·n dA)³``; 1 uniform, 2 laminar.
    uniformity : float or None
        ``1 - ∫|w - w̄| dA / (2 A |w̄|)``, see `fluxmesh.field.port_samples.PortSample`.
    swirl : float or None
        Swirl number: flux of angular momentum about the axis of the port over its radius
        times the flux of axial momentum (Gupta, Lilley and Syred, Swirl Flows, 1984; from
        memory). The axis is the area vector through the centroid of the area, the radius
        ``sqrt(A / pi)``, the axial momentum ``∫rho (Vr·n)² dA``. Above zero where the flow
        turns right-handed about the way it goes, so that a duct keeps its sign from inlet
        to outlet; a body turning at the rate ω that goes through at the speed U has ``ωR / 2U``.
        None where the area vector is short against the area: no axis.
    reversed_share : float or None
        Mass that flows against the port's net flow, over all that passes.
    outflow_share : float or None
        Share of what leaves by all ports, by net mass flow; None where a port takes in, or
        the flow of some port is not known.
    mach_number : float or None
        Mean speed over the speed of sound ``sqrt(heat_ratio p / rho)`` at the
        mean absolute pressure and density, for an ideal gas.
    """

    mean_pressure: Means
    mean_total_pressure: Means
    mean_temperature: Means
    mean_total_temperature: Means
    mean_speed: float | None
    speed: Means
    mean_mach_number: Means
    momentum_factor: float | None
    kinetic_energy_factor: float | None
    uniformity: float | None
    swirl: float | None
    reversed_share: float | None
    outflow_share: float | None
    mach_number: float | None

    @property
    def mean_pressure_area(self) -> float | None:
        """Gauge static pressure weighted by area, Pa."""
        return self.mean_pressure.area

    @property
    def mean_pressure_mass_flow(self) -> float | None:
        """Gauge static pressure weighted by mass flow, Pa."""
        return self.mean_pressure.mass_flow

    @property
    def mean_total_pressure_area(self) -> float | None:
        """Gauge total pressure weighted by area, Pa."""
        return self.mean_total_pressure.area

    @property
    def mean_total_pressure_mass_flow(self) -> float | None:
        """Gauge total pressure weighted by mass flow, Pa."""
        return self.mean_total_pressure.mass_flow


def port_figures(
    table: IntegralTable, setting: Setting, samples: Mapping[str, PortSample] | None = None
) -> dict[str, PortFigures]:
    """Return the figures of every port.

    Parameters
    ----------
    table : IntegralTable
        The table.
    setting : Setting
        Groups, and what is known where.
    samples : mapping of str to PortSample, optional
        From `fluxmesh.field.port_samples.sample_ports`, by group name. Without them there are no
        means by momentum, no uniformity and no temperatures; for a gas or a moving surface
        no totals either.

    Returns
    -------
    dict of str to PortFigures
        By group name, in the order of the groups.
    """
    shares = _outflow_shares(table, setting)
    return {
        group.name: _figures(table, setting, k, (samples or {}).get(group.name, _UNSAMPLED), shares.get(k))
        for k, group in enumerate(setting.groups)
        if group.role.is_port
    }


def _figures(
    table: IntegralTable, setting: Setting, k: int, sample: PortSample, outflow_share: float | None
) -> PortFigures:
    def at(name: str) -> float:
        return float(table.column(name)[k])

    area, flow, density = at("area"), at("mass_flow"), at("density_area")
    pressure, flux = bool(setting.data.pressure[k]), bool(setting.data.flux[k])
    backward = at("reversed_mass_flow")
    forward = flow + backward
    # factors compare with the net flow: none where as much goes back as forth
    through = flux and abs(flow) > MEANS_AS_ONE * (forward + backward)
    # a mass flux without a velocity says what goes through, but not how fast across
    moving = flux and (at("speed_area") > 0.0 or forward + backward == 0.0)

    def means(area_integral: float, flow_integral: float, known: bool) -> Means:
        return Means(
            _over(area_integral, area) if known else None, _over(flow_integral, flow) if known and through else None
        )

    static = means(at("pressure_area"), at("pressure_mass_flow"), pressure)
    total, speed = NO_MEANS, NO_MEANS
    if setting.frame is None:
        speed = Means(area=_over(at("speed_area"), area) if moving else None)
        if setting.heat_ratio is None:
            total = means(
                at("pressure_area") + at("dynamic_pressure_area"),
                at("pressure_mass_flow") + at("dynamic_pressure_mass_flow"),
                pressure and moving,
            )
    energy = 2 * at("kinetic_energy_flux") * density**2
    return PortFigures(
        mean_pressure=_filled(static, sample.pressure),
        mean_total_pressure=_filled(total, sample.total_pressure),
        mean_temperature=sample.temperature,
        mean_total_temperature=sample.total_temperature,
        mean_speed=_over(abs(at("volume_flow")), area) if flux else None,
        speed=_filled(speed, sample.speed),
        mean_mach_number=sample.mach_number,
        momentum_factor=_over(at("normal_momentum") * density, flow**2) if through else None,
        kinetic_energy_factor=_over(energy, flow**3) if through and moving else None,
        uniformity=sample.uniformity,
        swirl=_swirl(table, setting, k) if through and moving else None,
        reversed_share=_over(min(forward, backward), forward + backward) if flux else None,
        outflow_share=outflow_share,
        mach_number=_mach_number(setting, at("pressure_area"), at("volume_flow"), density, area)
        if pressure and flux
        else None,
    )


def _over(numerator: float, denominator: float) -> float | None:
    return numerator / denominator if denominator != 0.0 else None


def _filled(exact: Means, sampled: Means) -> Means:
    """Take the means of the table where it has them."""
    return Means(
        sampled.area if exact.area is None else exact.area,
        sampled.mass_flow if exact.mass_flow is None else exact.mass_flow,
        sampled.momentum,
    )


def _swirl(table: IntegralTable, setting: Setting, k: int) -> float | None:
    """Swirl number of one port, of the absolute velocity."""
    area, vector = float(table.column("area")[k]), table.column("area_vector")[k]
    length, axial = float(np.linalg.norm(vector)), float(table.column("normal_momentum")[k])
    if length < SECTION * area or area <= 0.0 or axial <= 0.0:
        return None
    axis, centre = vector / length, table.column("position")[k] / area
    moment = table.column("moment_of_momentum_flux")[k] - np.cross(centre, table.column("momentum_flux")[k])
    frame = setting.frame
    if frame is not None:
        # r × (W + Ω × r) with W the velocity of the surface at the centroid, r from there
        at = table.origin + centre
        first, second = (moments[k] for moments in mass_flow_moments(table, at))
        moment = moment + np.cross(first, frame.at(at)) + np.trace(second) * frame.spin - second @ frame.spin
    return float(axis @ moment) / (sqrt(area / pi) * axial)


def _outflow_shares(table: IntegralTable, setting: Setting) -> dict[int, float]:
    """Share of the outflow of each port that lets out."""
    ports = setting.ports()
    if not setting.data.flux[ports].all():
        return {}
    flows = {k: float(table.column("mass_flow")[k]) for k in np.flatnonzero(ports).tolist()}
    whole = fsum(flow for flow in flows.values() if flow > 0.0)
    return {k: flow / whole for k, flow in flows.items() if flow > 0.0}


def _mach_number(
    setting: Setting, pressure_area: float, volume_flow: float, density_area: float, area: float
) -> float | None:
    if setting.heat_ratio is None or setting.ambient is None or area <= 0.0 or density_area <= 0.0:
        return None
    pressure = pressure_area / area + setting.ambient
    if pressure <= 0.0:
        return None
    return abs(volume_flow) / area / sound_speed(pressure, density_area / area, setting.heat_ratio)
