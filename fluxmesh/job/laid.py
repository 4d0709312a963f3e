"""From a case and its surface to the flow on it."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from fluxmesh.case.model import Case
from fluxmesh.errors import FieldError, InputError
from fluxmesh.field.field import Field, absent_field, constant_field, supply
from fluxmesh.field.flow import Flow, face_arrays_of, require_flow
from fluxmesh.field.gas import ideal_density
from fluxmesh.field.pressure import Head, PressureKind, PressureMeaning
from fluxmesh.integral.samples import Samples, sample_places
from fluxmesh.job.exported import exported_field
from fluxmesh.job.sampled import Sampled, sample_source, sampled_field
from fluxmesh.job.shape import Shape
from fluxmesh.job.supplied import shaped_groups, supply_flow, supply_values
from fluxmesh.job.tractions import traction_of

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
        Exported or sampled fields, with the supplied data of groups in place of them.

    Raises
    ------
    InputError
        Data that cannot be used; the message names them.
    """
    try:
        flow = _lay(case, shape)
        require_flow(shape.surface, flow)
    except InputError as error:
        name = case.path.name
        if error.where.startswith(name):
            raise
        raise type(error)(error.found, f"{name}: {error.where}" if error.where else name, error.remedy) from error
    return flow


def _lay(case: Case, shape: Shape) -> Flow:
    surface = shape.surface
    samples = _samples(case, shape)
    sampled = None if samples is None else sample_source(case, shape, samples)
    flow = _fields(case, shape, samples, sampled)
    if sampled is not None:
        flow = replace(flow, notes=sampled.notes, sampling=sampled.data())
    flow = supply_values(case, flow)
    if case.fluid.law is not None:
        flow = replace(flow, density=_gas_density(case, shape, flow, samples, sampled))
    flow, notes = supply_flow(case, surface, flow, samples)
    return replace(flow, notes=(*flow.notes, *notes))


def _samples(case: Case, shape: Shape) -> Samples | None:
    """Quadrature points of the faces that a field has to be evaluated at, or None."""
    surface = shape.surface
    asked = case.flow
    chosen = np.zeros(len(surface.groups), np.bool_)
    tensor = asked.stress or asked.velocity_gradient
    on_faces = tensor is not None and tensor.array in shape.arrays.face and surface.kinds is None
    if asked.volume is not None or asked.points is not None or (tensor is not None and not on_faces):
        chosen[:] = True
    for name in shaped_groups(case):
        chosen[list(case.groups).index(name)] = True
    if not chosen.any():
        return None
    return sample_places(face_arrays_of(surface), chosen[surface.group_of_face])


def _fields(case: Case, shape: Shape, samples: Samples | None, sampled: Sampled | None) -> Flow:
    surface, asked = shape.surface, case.flow
    density = _density(case, shape, sampled)
    velocity = absent_field(surface, "velocity", 3)
    if asked.velocity is not None:
        velocity = _field(
            shape, sampled, "velocity", 3, asked.velocity.array, asked.velocity.at, asked.velocity.unit.factor
        )
    pressure, meaning = absent_field(surface, "pressure", 1), PressureMeaning()
    if asked.pressure is not None:
        entry = asked.pressure
        pressure = _field(shape, sampled, "pressure", 1, (entry.array,), entry.at, entry.unit.factor)
        meaning = PressureMeaning(PressureKind(entry.kind), Head(entry.head), entry.datum)
    return Flow(
        density=density,
        velocity=velocity,
        pressure=pressure,
        traction=traction_of(case, shape, samples, sampled),
        mass_flux=_mass_flux(case, shape),
        meaning=meaning,
        ambient=None if case.fluid.ambient_pressure is None else float(case.fluid.ambient_pressure),
        gravity=case.fluid.gravity,
        viscosity=None if case.fluid.viscosity is None else float(case.fluid.viscosity),
        sample_start=np.empty(0, np.int64) if samples is None else samples.start,
    )


def _field(
    shape: Shape,
    sampled: Sampled | None,
    quantity: str,
    components: int,
    names: tuple[str, ...],
    at: str | None,
    scale: float,
) -> Field:
    """A field from the file of the surface, or from where it is sampled."""
    if sampled is not None:
        return sampled_field(shape.surface, sampled, quantity, components, scale)
    return exported_field(
        shape.surface, shape.arrays, quantity, components, names, key=f"flow.{quantity}", at=at, scale=scale
    )


def _density(case: Case, shape: Shape, sampled: Sampled | None) -> Field:
    surface, entry = shape.surface, case.flow.density
    density = absent_field(surface, "density", 1)
    if entry is not None:
        density = _field(shape, sampled, "density", 1, (entry.array,), entry.at, entry.unit.factor)
    if case.fluid.density is not None:
        constant = constant_field(surface, "density", 1, float(case.fluid.density))
        density = density if density.present().all() else _filled(density, constant)
    return density


def _gas_density(case: Case, shape: Shape, flow: Flow, samples: Samples | None, sampled: Sampled | None) -> Field:
    """Density of an ideal gas, with the densities that groups supply in place of it."""
    surface, fluid, entry = shape.surface, case.fluid, case.flow.temperature
    temperature = absent_field(surface, "temperature", 1)
    if entry is not None:
        temperature = _field(shape, sampled, "temperature", 1, (entry.array,), entry.at, entry.unit.factor)
    if fluid.temperature is not None:
        constant = constant_field(surface, "temperature", 1, float(fluid.temperature))
        temperature = constant if entry is None else _filled(temperature, constant)
    for k, section in enumerate(case.groups.values()):
        if section.temperature is not None:
            temperature = supply(temperature, k, float(section.temperature))
    assert fluid.gas_constant is not None
    assert flow.ambient is not None
    density = ideal_density(
        surface,
        flow.pressure,
        temperature,
        meaning=flow.meaning,
        ambient=flow.ambient,
        gas_constant=float(fluid.gas_constant),
    )
    for k, section in enumerate(case.groups.values()):
        if section.density is not None:
            density = supply(density, k, float(section.density))
    return density


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
        values: NDArray[np.float64] = arrays.face[asked.array]
        turned = np.where(shape.turned, -values, values)
        arrays = type(arrays)(arrays.source, arrays.node, {**arrays.face, asked.array: turned}, arrays.has)
    return exported_field(
        surface, arrays, "mass flux", 1, (asked.array,), key="flow.mass_flux", at="faces", scale=asked.unit.factor
    )
