"""From a case and its surface to the flow on it."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from fluxmesh.case.model import Case
from fluxmesh.errors import FieldError, InputError
from fluxmesh.field.field import Field, absent_field, constant_field, supply
from fluxmesh.field.flow import Flow, integrate_flow, require_flow, still_flow
from fluxmesh.field.pressure import Head, PressureKind, PressureMeaning
from fluxmesh.field.supplied import require_direction, uniform_velocity
from fluxmesh.integral.layout import PER_GROUP
from fluxmesh.job.exported import exported_field
from fluxmesh.job.shape import Shape

__all__ = ["lay_case"]


def lay_case(case: Case, shape: Shape) -> Flow:
    """Lay the flow data of a case on its surface.

    Parameters
    ----------
    case : Case
        The case.
    shape : Shape
        Its surface and arrays.

    Returns
    -------
    Flow
        Exported arrays, with the supplied data of groups in place of them.

    Raises
    ------
    FieldError, GroupError
        Arrays or supplied data that cannot be used; the message names them.
    """
    try:
        flow = _supplied(case, shape, _exported(case, shape))
        require_flow(shape.surface, flow)
    except InputError as error:
        name = case.path.name
        if error.where.startswith(name):
            raise
        raise type(error)(error.found, f"{name}: {error.where}" if error.where else name, error.remedy) from error
    return flow


def _exported(case: Case, shape: Shape) -> Flow:
    surface, arrays, asked = shape.surface, shape.arrays, case.flow
    density = absent_field(surface, "density", 1)
    if asked.density is not None:
        density = exported_field(
            surface, arrays, "density", 1, (asked.density.array,), key="flow.density", at=asked.density.at,
            scale=asked.density.unit.factor,
        )  # fmt: skip
    if case.fluid.density is not None:
        constant = constant_field(surface, "density", 1, float(case.fluid.density))
        density = density if density.present().all() else _filled(density, constant)
    velocity = absent_field(surface, "velocity", 3)
    if asked.velocity is not None:
        velocity = exported_field(
            surface, arrays, "velocity", 3, asked.velocity.array, key="flow.velocity", at=asked.velocity.at,
            scale=asked.velocity.unit.factor,
        )  # fmt: skip
    pressure = absent_field(surface, "pressure", 1)
    meaning = PressureMeaning()
    if asked.pressure is not None:
        pressure = exported_field(
            surface, arrays, "pressure", 1, (asked.pressure.array,), key="flow.pressure", at=asked.pressure.at,
            scale=asked.pressure.unit.factor,
        )  # fmt: skip
        meaning = PressureMeaning(PressureKind(asked.pressure.kind), Head(asked.pressure.head), asked.pressure.datum)
    traction = absent_field(surface, "traction", 3)
    if asked.traction is not None:
        sign = -1.0 if asked.traction.acts_on == "wall" else 1.0
        traction = exported_field(
            surface, arrays, "traction", 3, asked.traction.array, key="flow.traction", at=asked.traction.at,
            scale=sign * asked.traction.unit.factor,
        )  # fmt: skip
    return Flow(
        density=density,
        velocity=velocity,
        pressure=pressure,
        traction=traction,
        mass_flux=_mass_flux(case, shape),
        meaning=meaning,
        ambient=None if case.fluid.ambient_pressure is None else float(case.fluid.ambient_pressure),
        gravity=case.fluid.gravity,
    )


def _filled(field: Field, constant: Field) -> Field:
    """Give the groups that lack a field its constant value."""
    for k in np.flatnonzero(~field.present()):
        field = supply(field, int(k), constant.group[k])
    return field


def _mass_flux(case: Case, shape: Shape) -> Field:
    asked, surface = case.flow.mass_flux, shape.surface
    if asked is None:
        return absent_field(surface, "mass flux", 1)
    arrays = shape.arrays
    if asked.array in arrays.node and asked.array not in arrays.face:
        raise FieldError(
            f"the array '{asked.array}' sits on points", where="flow.mass_flux", remedy="A mass flux belongs to faces"
        )
    if asked.positive == "face-normal" and shape.turned is not None and asked.array in arrays.face:
        values = np.where(shape.turned, -arrays.face[asked.array], arrays.face[asked.array])
        arrays = type(arrays)(arrays.source, arrays.node, {**arrays.face, asked.array: values}, arrays.has)
    return exported_field(
        surface, arrays, "mass flux", 1, (asked.array,), key="flow.mass_flux", at="faces", scale=asked.unit.factor
    )


def _supplied(case: Case, shape: Shape, flow: Flow) -> Flow:
    surface = shape.surface
    density, velocity, pressure, mass_flux = flow.density, flow.velocity, flow.pressure, flow.mass_flux
    moving = [name for name, section in case.groups.items() if section.supplied_flow()]
    areas = integrate_flow(surface, still_flow(surface)).column("area_vector") if moving else None
    for k, (name, section) in enumerate(case.groups.items()):
        if section.density is not None:
            density = supply(density, k, float(section.density))
        if section.pressure is not None:
            gauge = float(section.pressure)
            if section.pressure_kind == "absolute":
                gauge -= flow.ambient or 0.0
            pressure = supply(pressure, k, gauge)
        if areas is None or not section.supplied_flow():
            continue
        if section.velocity is not None:
            require_direction(name, section.role, areas[k], section.velocity)
            vector = section.velocity
        else:
            known = float(density.group[k]) if density.where[k] == PER_GROUP else None
            vector = uniform_velocity(
                name,
                section.role,
                areas[k],
                flow_rate=None if section.flow_rate is None else float(section.flow_rate),
                mass_flow=None if section.mass_flow is None else float(section.mass_flow),
                speed=None if section.speed is None else float(section.speed),
                density=known,
            )
        velocity = supply(velocity, k, vector)
        mass_flux = _without(mass_flux, k)
    return replace(flow, density=density, velocity=velocity, pressure=pressure, mass_flux=mass_flux)


def _without(field: Field, group: int) -> Field:
    where = field.where.copy()
    where[group] = 0
    return replace(field, where=where)
