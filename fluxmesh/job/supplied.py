"""Supplied port data of a case: values of groups, solved ports, profiles."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from fluxmesh.case.groups import GroupSection
from fluxmesh.case.model import Case
from fluxmesh.errors import FieldError
from fluxmesh.field.field import Field, supply
from fluxmesh.field.flow import Flow, integrate_flow, still_flow
from fluxmesh.field.gas import sound_speed
from fluxmesh.field.relative import relative_velocity
from fluxmesh.field.supplied import require_direction, uniform_velocity
from fluxmesh.integral.layout import ABSENT, AT_SAMPLE, PER_GROUP
from fluxmesh.integral.samples import Samples
from fluxmesh.surface.surface import ControlSurface, Role

__all__ = ["shaped_groups", "supply_flow", "supply_values"]

if TYPE_CHECKING:
    from fluxmesh.field.profiles.options import SpeedTable
    from fluxmesh.field.profiles.port import PortPatch

Vector = tuple[float, float, float]
_FINE_ENOUGH = 20_000  # triangles of a port that need no second look
_WORTH_SAYING = 2e-3


def shaped_groups(case: Case) -> list[str]:
    """Return the groups whose supplied flow has a profile that is not uniform.

    Parameters
    ----------
    case : Case
        The case.
    """
    return [name for name, section in case.groups.items() if section.profile != "uniform"]


def supply_values(case: Case, flow: Flow) -> Flow:
    """Lay supplied pressures and densities of groups over the exported arrays.

    Parameters
    ----------
    case : Case
        The case.
    flow : Flow
        What was exported.

    Returns
    -------
    Flow
        With the groups' own values in place of arrays.
    """
    density, pressure = flow.density, flow.pressure
    for k, section in enumerate(case.groups.values()):
        if section.density is not None:
            density = supply(density, k, float(section.density))
        if section.pressure is not None:
            gauge = float(section.pressure)
            if section.pressure_kind == "absolute":
                gauge -= flow.ambient or 0.0
            pressure = supply(pressure, k, gauge)
    return replace(flow, density=density, pressure=pressure)


def supply_flow(
    case: Case, surface: ControlSurface, flow: Flow, samples: Samples | None
) -> tuple[Flow, tuple[str, ...]]:
    """Lay supplied and solved port flows over the exported velocity.

    Parameters
    ----------
    case : Case
        The case.
    surface : ControlSurface
        Its surface.
    flow : Flow
        The flow so far, density and pressure included.
    samples : Samples or None
        Quadrature points of the groups that are sampled, those with a shaped
        profile among them; None when there are none.

    Returns
    -------
    flow : Flow
        With the supplied velocities.
    notes : tuple of str
        What was solved.

    Raises
    ------
    FieldError
        A flow that goes against its group's role, or a port that would be choked.
    """
    moving = [k for k, section in enumerate(case.groups.values()) if section.supplied_flow()]
    solved = [k for k, section in enumerate(case.groups.values()) if section.from_continuity]
    if not moving and not solved:
        return flow, ()
    still = integrate_flow(surface, still_flow(surface))
    areas, sizes = still.column("area_vector"), still.column("area")
    middles = still.origin + still.column("position") / np.where(sizes > 0, sizes, 1.0)[:, None]
    names = list(case.groups)
    sections = list(case.groups.values())
    for k in moving:
        flow = _lay(surface, flow, k, sections[k], areas[k], samples, middle=middles[k], whole=float(sizes[k]))
    notes: list[str] = []
    for k in solved:
        flow = replace(flow, velocity=_without(flow.velocity, k), mass_flux=_without(flow.mass_flux, k))
        lacking = _lacking(surface, flow, k)
        if lacking:
            raise FieldError(
                f"under-determined: the flow of '{names[k]}' is to be solved, "
                f"and that of {', '.join(lacking)} is not known",
                where=f"groups.{names[k]}.from_continuity",
                remedy="Supply the flow of every other port",
            )
        outflow = -float(integrate_flow(surface, flow).total("mass_flow"))
        _require_way(names[k], sections[k].role, outflow)
        density = _one_density(flow, k, names[k])
        flow = _lay(surface, flow, k, sections[k], areas[k], samples, outflow / density, whole=float(sizes[k]))
        notes.append(_told(case, flow, k, names[k], outflow, density, float(np.linalg.norm(areas[k]))))
    return flow, tuple(notes)


def _lay(
    surface: ControlSurface,
    flow: Flow,
    k: int,
    section: GroupSection,
    area: NDArray[np.float64],
    samples: Samples | None,
    solved: float | None = None,
    middle: NDArray[np.float64] | None = None,
    whole: float = 0.0,
) -> Flow:
    name = surface.groups[k].name
    velocity: Vector
    absolute = flow.frame is not None and section.velocity is not None and section.velocity_frame == "absolute"
    if section.velocity is not None:
        velocity = section.velocity
        through = np.asarray(velocity)
        if absolute and flow.frame is not None and middle is not None:
            through = through - flow.frame.at(middle)
        require_direction(name, section.role, area, (float(through[0]), float(through[1]), float(through[2])))
    elif solved is not None:
        size = float(np.linalg.norm(area))
        velocity = uniform_velocity(name, Role.OPEN, area, speed=solved / size if size > 0 else 0.0, whole=whole)
    else:
        velocity = uniform_velocity(
            name,
            section.role,
            area,
            flow_rate=None if section.flow_rate is None else float(section.flow_rate),
            mass_flow=None if section.mass_flow is None else float(section.mass_flow),
            speed=None if section.speed is None else float(section.speed),
            density=_one_density(flow, k, name) if section.mass_flow is not None else None,
            whole=whole,
        )
    flow = replace(flow, mass_flux=_without(flow.mass_flux, k))
    if absolute and flow.frame is not None:
        one = np.arange(len(surface.groups)) == k
        even = supply(flow.velocity, k, velocity)
        return replace(flow, velocity=relative_velocity(surface, even, flow.frame, groups=one, samples=samples))
    if section.profile == "uniform" or samples is None:
        return replace(flow, velocity=supply(flow.velocity, k, velocity))
    from fluxmesh.field.profiles.port import PortPatch
    from fluxmesh.field.profiles.velocity import profile_velocity

    patch = PortPatch.of(surface, k)
    shaped = profile_velocity(
        patch,
        section.profile,
        float(np.dot(velocity, area)),
        exponent=None if section.exponent is None else float(section.exponent),
        table=_table(section),
    )
    rows = np.flatnonzero(surface.group_of_face[samples.face] == k)
    values = flow.velocity.sample
    if values.shape[0] != samples.places.shape[0]:
        values = np.full(samples.places.shape, np.nan)
    values = values.copy()
    values[rows] = shaped / flow.velocity.scale
    where = flow.velocity.where.copy()
    where[k] = AT_SAMPLE
    return replace(
        flow,
        velocity=replace(flow.velocity, where=where, sample=values),
        sample_start=samples.start,
        notes=(*flow.notes, *_resolution(patch, section)),
    )


def _resolution(patch: PortPatch, section: GroupSection) -> list[str]:
    """What the port's own faces lose of the profile, where that is worth saying."""
    from fluxmesh.field.profiles.resolution import profile_factors

    if len(patch.triangles) > _FINE_ENOUGH:
        return []
    exponent = None if section.exponent is None else float(section.exponent)
    factors = profile_factors(patch, section.profile, exponent=exponent, table=_table(section))
    if abs(factors.momentum_error) < _WORTH_SAYING:
        return []
    return [
        f"The faces of '{patch.name}' show its {section.profile} profile coarsely: momentum factor "
        f"{factors.momentum:.4g}, on fine faces {factors.fine_momentum:.4g}"
    ]


def _table(section: GroupSection) -> SpeedTable | None:
    table = section.profile_table
    if table is None:
        return None
    from fluxmesh.field.profiles.options import SpeedTable

    distance = table.radius if table.radius is not None else table.wall_distance
    return SpeedTable(
        at=[table.unit.factor * x for x in distance or ()],
        speed=table.speed,
        quantity="radius" if table.radius is not None else "wall-distance",
    )


def _without(field: Field, group: int) -> Field:
    where = field.where.copy()
    where[group] = ABSENT
    return replace(field, where=where)


def _one_density(flow: Flow, k: int, name: str) -> float:
    if flow.density.where[k] != PER_GROUP:
        raise FieldError(
            "a mass flow is supplied or solved, but the density of the group is not one value",
            where=f"group '{name}'",
            remedy="Give the group a density (or pressure and temperature of a gas), or a flow_rate",
        )
    return float(flow.density.group[k])


def _lacking(surface: ControlSurface, flow: Flow, solved: int) -> list[str]:
    known = (flow.velocity.present() & flow.density.present()) | flow.mass_flux.present()
    return [group.name for k, group in enumerate(surface.groups) if group.role.is_port and k != solved and not known[k]]


def _require_way(name: str, role: Role, outflow: float) -> None:
    if (role is Role.INLET and outflow > 0) or (role is Role.OUTLET and outflow < 0):
        raise FieldError(
            f"the other ports leave {abs(outflow):.4g} kg/s to {'leave' if outflow > 0 else 'enter'} by '{name}', "
            f"an {role.value}: it would have to be reversed",
            where=f"groups.{name}.from_continuity",
            remedy="Check the other flows, or change the role",
        )


def _told(case: Case, flow: Flow, k: int, name: str, outflow: float, density: float, area: float) -> str:
    speed = abs(outflow) / (density * area)
    said = (
        f"The flow of '{name}' was solved from continuity: {abs(outflow):.5g} kg/s "
        f"{'out' if outflow > 0 else 'in'}, {speed:.5g} m/s"
    )
    ratio = case.fluid.heat_ratio
    if case.fluid.law is None or ratio is None or flow.pressure.where[k] != PER_GROUP or flow.ambient is None:
        return said
    mach = speed / sound_speed(float(flow.pressure.group[k]) + flow.ambient, density, float(ratio))
    if mach > 1.0 + 1e-9:
        raise FieldError(
            f"{abs(outflow):.4g} kg/s would have to pass '{name}' at Mach {mach:.3g}: it would be choked",
            where=f"groups.{name}.from_continuity",
            remedy="At that pressure and temperature less can pass: raise the pressure, or check the other flows",
        )
    return f"{said}, Mach {mach:.4g}"
