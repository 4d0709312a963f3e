"""Means over ports that are no algebra on the table: of compressible totals, by momentum, and uniformity.

They are taken by quadrature at the points of the kernel, on the faces of ports alone. With
``w = Vr·n`` the speed through the port relative to the control surface, a mean of ``φ`` is
``∫φ g dA / ∫g dA`` with the weight ``g`` equal to 1 (by area), ``rho w`` (by mass flow)
or ``rho w²`` (by momentum).

What is still or moving at a port depends on who looks. Mass flow, the weights and the
uniformity belong to the port, and go by the velocity relative to the control surface. Speed,
Mach number, total pressure and total temperature go by the absolute velocity, ``Vr`` plus the
velocity of the surface: a body of fluid carries the energy of its motion wherever the surface
goes. Without a frame the two are one.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError
from fluxmesh.field.field import Field
from fluxmesh.field.flow import Flow
from fluxmesh.field.port_batches import Batch, batch_of, slabs_of
from fluxmesh.field.pressure import pressure_terms
from fluxmesh.integral.layout import ABSENT, AT_SAMPLE, PER_GROUP, PressureTerms
from fluxmesh.integral.table import IntegralTable
from fluxmesh.surface.surface import ControlSurface, Group, Role

__all__ = ["MEANS_AS_ONE", "NO_MEANS", "SECTION", "Means", "PortSample", "is_section", "sample_ports"]

Array = NDArray[np.float64]

SECTION: Final = 0.5
"""Least size of the area vector over the area for a group to be the section of a duct: that of a hemisphere."""

MEANS_AS_ONE: Final = 0.01
"""Least net mass flow over all that passes, either way, for means and factors that divide by it."""


@dataclass(frozen=True)
class Means:
    """Means of one quantity over a port, in its SI unit; None where it cannot be told.

    Attributes
    ----------
    area : float or None
        Weighted by area.
    mass_flow : float or None
        Weighted by mass flow; where some flows back, that counts off.
    momentum : float or None
        Weighted by axial momentum flux, ``rho w²``.
    """

    area: float | None = None
    mass_flow: float | None = None
    momentum: float | None = None

    def any(self) -> bool:
        """Return whether one of them is known."""
        return not (self.area is None and self.mass_flow is None and self.momentum is None)


_FROM_ABSOLUTE: Final = {"temperature", "total_temperature", "total_pressure", "mach_number"}

NO_MEANS: Final = Means()
"""Of what is not known at all."""


@dataclass(frozen=True)
class PortSample:
    """What quadrature says of one port; empty means and None where data are missing.

    Attributes
    ----------
    pressure : Means
        Gauge static pressure, Pa.
    total_pressure : Means
        Gauge, of the absolute velocity ``V``, Pa: ``p + rho V²/2``, or of an ideal gas
        ``p_abs (1 + (γ-1)/2 M²)^(γ/(γ-1)) - ambient`` (NACA Report 1135, 1953, eq. 44).
    temperature : Means
        K; of a gas without a temperature field, ``p_abs / (rho R)``.
    total_temperature : Means
        ``T (1 + (γ-1)/2 M²)`` of an ideal gas, K (NACA Report 1135, eq. 43).
    speed : Means
        ``|V|`` of the absolute velocity, m/s.
    mach_number : Means
        ``|V| / sqrt(γ p_abs / rho)``.
    uniformity : float or None
        ``1 - ∫|w - w̄| dA / (2 A |w̄|)`` with the mean ``w̄`` of the relative speed
        through the port: 1 for a uniform profile, 3/4 for developed laminar flow in a round
        pipe; below 0 is possible where more turns back than goes through. Common practice
        in exhaust and duct work, no source. None at an open group that is no
        section of a duct.
    notes : tuple of str
        Why something is missing that the data promise, one sentence each.
    """

    pressure: Means = NO_MEANS
    total_pressure: Means = NO_MEANS
    temperature: Means = NO_MEANS
    total_temperature: Means = NO_MEANS
    speed: Means = NO_MEANS
    mach_number: Means = NO_MEANS
    uniformity: float | None = None
    notes: tuple[str, ...] = ()


def is_section(group: Group, area: float, vector: Array) -> bool:
    """Return whether a group may be taken for the section of a duct.

    Parameters
    ----------
    group : Group
        A port.
    area : float
        Its area, m².
    vector : ndarray, shape (3,), float64
        Its area vector, m².

    Returns
    -------
    bool
        False for an ``open`` group whose area vector is short against its area: a box
        around a body, say.
    """
    return group.role is not Role.OPEN or float(np.linalg.norm(vector)) >= SECTION * area > 0.0


def sample_ports(
    surface: ControlSurface,
    flow: Flow,
    table: IntegralTable,
    *,
    temperature: Field | None = None,
    heat_ratio: float | None = None,
    gas_constant: float | None = None,
) -> dict[str, PortSample]:
    """Return means over every port by quadrature.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    flow : Flow
        The flow on it; pressure becomes gauge with its head, as in the table.
    table : IntegralTable
        Integrals of the same surface and flow, before any mirroring.
    temperature : Field, optional
        Static temperature, K.
    heat_ratio : float, optional
        Ratio γ of the specific heats: the fluid is an ideal gas.
    gas_constant : float, optional
        J/(kg K), for the temperature where there is no field of it.

    Returns
    -------
    dict of str to PortSample
        By group name, in the order of the groups.

    Raises
    ------
    FieldError
        A heat ratio that is not above 1, or temperatures at quadrature points that are
        not those of the flow.
    """
    if heat_ratio is not None and not heat_ratio > 1.0:
        raise FieldError(f"the heat ratio is {heat_ratio!r}", remedy="Give the ratio of the specific heats, above 1")
    ports = np.array([group.role.is_port for group in surface.groups])
    if temperature is not None:
        _require_same_places(temperature, flow, ports)
    terms = PressureTerms(False, 0.0, 0.0, 0.0, 0.0)
    if flow.pressure.present()[ports].any():
        terms = pressure_terms(
            flow.meaning,
            ambient=flow.ambient,
            density=flow.uniform_density(),
            gravity=np.asarray(flow.gravity),
            origin=table.origin,
        )
    gas = _Gas(heat_ratio, gas_constant, flow.ambient)
    area, vector, through = (table.column(name) for name in ("area", "area_vector", "volume_flow"))
    speeds: dict[int, float | None] = {}
    for k in np.flatnonzero(ports).tolist():
        whole = is_section(surface.groups[k], float(area[k]), vector[k])
        speeds[k] = float(through[k]) / float(area[k]) if whole and area[k] > 0.0 else None
    gains = temperature is not None or gas.heat_ratio is not None or gas.constant is not None or flow.frame is not None
    asked = ports.copy()
    for k, speed in speeds.items():
        asked[k] = gains or speed is not None
    sums = {k: _Sums() for k in speeds}
    for slab in slabs_of(surface, asked):
        batch = batch_of(surface, slab)
        point = _values(batch, flow, temperature, terms, table.origin)
        sums[slab.group].add(batch.weight, point, gas, speeds[slab.group])
    return {surface.groups[k].name: sums[k].sample(speed) for k, speed in speeds.items()}


def _require_same_places(temperature: Field, flow: Flow, ports: NDArray[np.bool_]) -> None:
    sampled = ports & (temperature.where == AT_SAMPLE)
    if sampled.any() and (flow.sample_start.size == 0 or temperature.sample.shape[0] != flow.sample_start[-1]):
        raise FieldError(
            "the temperatures at quadrature points are not at those of the flow",
            where=temperature.label or temperature.name,
            remedy="Sample both at the same places",
        )


# ---- values at points -----------------------------------------------------------------------


@dataclass(frozen=True)
class _Gas:
    """Constants of an ideal gas, as far as they are given."""

    heat_ratio: float | None
    constant: float | None
    ambient: float | None


@dataclass(frozen=True, eq=False)
class _Values:
    """Fields at the points of one batch, shape (n_points, n_facets), or None."""

    density: Array | None
    through: Array | None  # relative speed along the normal
    square: Array | None  # of the absolute velocity
    pressure: Array | None  # gauge
    temperature: Array | None


def _values(batch: Batch, flow: Flow, temperature: Field | None, terms: PressureTerms, origin: Array) -> _Values:
    start = flow.sample_start
    density = batch.values(flow.density, start)
    through = square = None
    corner = batch.corner_values(flow.velocity)
    at_points = batch.sampled_values(flow.velocity, start)
    if corner is not None:
        if batch.straight:
            through = batch.at_points(batch.normal_part(corner))
        if flow.frame is not None:
            full = batch.at_points(corner + flow.frame.at(batch.places))
        else:
            full = batch.at_points(corner)
        if through is None:
            through = batch.normal_part(batch.at_points(corner))
        square = np.einsum("qtk,qtk->qt", full, full)
    elif at_points is not None:
        through = batch.normal_part(at_points)
        if flow.frame is not None:
            at_points = at_points + flow.frame.at(batch.at_points(batch.places))
        square = np.einsum("qtk,qtk->qt", at_points, at_points)
    carried = batch.corner_values(flow.mass_flux)
    if carried is not None and density is not None:
        area = batch.face_area()
        through = carried[0] / np.where(area != 0, area, np.inf) / density
    return _Values(
        density=density,
        through=None if density is None else through,
        square=None if density is None else square,
        pressure=_gauge(batch, flow, density, terms, origin),
        temperature=None if temperature is None else batch.values(temperature, start),
    )


def _gauge(batch: Batch, flow: Flow, density: Array | None, terms: PressureTerms, origin: Array) -> Array | None:
    """Gauge pressure with its head: made at corners where the kernel makes it there, or at the points."""
    where = int(flow.pressure.where[batch.group])
    if where in (ABSENT, PER_GROUP):
        return batch.values(flow.pressure, flow.sample_start)
    slope = np.array([terms.head_x, terms.head_y, terms.head_z])
    fields = (flow.velocity, flow.traction, flow.pressure, flow.density)
    sampled = any(field.where[batch.group] == AT_SAMPLE for field in fields)
    corner = batch.corner_values(flow.pressure)
    if corner is not None and batch.straight and not sampled:
        known = batch.corner_values(flow.density) if terms.times_density else None
        corner = corner if known is None else corner * known
        if slope.any():
            corner = corner + (batch.places - origin) @ slope
        return batch.at_points(corner) + terms.offset
    value = batch.values(flow.pressure, flow.sample_start)
    assert value is not None
    if terms.times_density and density is not None:
        value = value * density
    if slope.any():
        value = value + (batch.at_points(batch.places) - origin) @ slope
    return value + terms.offset


# ---- sums -----------------------------------------------------------------------------------


def _dot(one: Array, two: Array) -> float:
    """Sum of products, by one thread: BLAS would share out rows this short, and wait for a busy machine."""
    return float(np.einsum("qt,qt->", one, two))


@dataclass(eq=False)
class _Sums:
    """Sums over some points of one port."""

    weights: Array = field(default_factory=lambda: np.zeros(3))  # area, mass flow, momentum
    passing: float = 0.0  # mass flow either way
    uneven: float = 0.0  # |w - mean| by area
    known: dict[str, Array] = field(default_factory=dict)  # a quantity times each weight
    lost: set[str] = field(default_factory=set)  # quantities that some points cannot have

    def add(self, area: Array, point: _Values, gas: _Gas, mean_speed: float | None) -> None:
        """Add points of these areas; a port without a mean speed is no section, and has no mean by momentum."""
        weights = [area]
        if point.through is not None and point.density is not None:
            carried = area * point.density * point.through
            weights.append(carried)
            self.passing += float(np.abs(carried).sum())
            if mean_speed is not None:
                weights.append(carried * point.through)
                self.uneven += _dot(area, np.abs(point.through - mean_speed))
        for k, weight in enumerate(weights):
            self.weights[k] += weight.sum()
        quantities, lost = _quantities(point, gas)
        self.lost |= lost
        for name, value in quantities.items():
            total = self.known.setdefault(name, np.zeros(3))
            for k, weight in enumerate(weights):
                total[k] += _dot(weight, value)

    def sample(self, mean_speed: float | None) -> PortSample:
        """Return the figures of the port."""
        area, flow, momentum = (float(x) for x in self.weights)
        goes = abs(flow) > MEANS_AS_ONE * self.passing
        means = {}
        for name in self.known.keys() - self.lost:
            by_area, by_flow, by_momentum = (float(x) for x in self.known[name])
            means[name] = Means(
                area=by_area / area if area > 0.0 else None,
                mass_flow=by_flow / flow if goes else None,
                momentum=by_momentum / momentum if momentum > 0.0 else None,
            )
        uniformity = 1.0 - self.uneven / (2.0 * area * abs(mean_speed)) if goes and mean_speed else None
        notes = ("its absolute pressure is not above zero everywhere, as a gas needs it",) if self.lost else ()
        return PortSample(**means, uniformity=uniformity, notes=notes)


def _quantities(point: _Values, gas: _Gas) -> tuple[dict[str, Array], set[str]]:
    """What is averaged, at the points, and what the points lack an absolute pressure above zero for."""
    found = {}
    pressure, density, square, temperature = point.pressure, point.density, point.square, point.temperature
    if pressure is not None:
        found["pressure"] = pressure
    if square is not None:
        found["speed"] = np.sqrt(square)
    if temperature is not None:
        found["temperature"] = temperature
    if gas.heat_ratio is None and pressure is not None and density is not None and square is not None:
        found["total_pressure"] = pressure + 0.5 * density * square
    if pressure is None or density is None or gas.ambient is None or (gas.heat_ratio is None and gas.constant is None):
        return found, set()
    absolute = pressure + gas.ambient
    if not absolute.min() > 0.0:
        return found, _FROM_ABSOLUTE - found.keys()
    if temperature is None and gas.constant is not None:
        temperature = found["temperature"] = absolute / (density * gas.constant)
    if gas.heat_ratio is not None and square is not None:
        mach_square = density * square / (gas.heat_ratio * absolute)
        rise = 1.0 + 0.5 * (gas.heat_ratio - 1.0) * mach_square
        found["mach_number"] = np.sqrt(mach_square)
        found["total_pressure"] = absolute * rise ** (gas.heat_ratio / (gas.heat_ratio - 1.0)) - gas.ambient
        if temperature is not None:
            found["total_temperature"] = temperature * rise
    return found, set()
