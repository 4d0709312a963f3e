"""From a case and its surface to the flow on it."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from fluxmesh.case.model import Case
from fluxmesh.errors import FieldError, InputError
from fluxmesh.field.field import Field, absent_field, constant_field, supply
from fluxmesh.field.flow import Flow, face_arrays_of, require_flow
from fluxmesh.field.frame import Frame
from fluxmesh.field.gas import ideal_density
from fluxmesh.field.pressure import Head, PressureKind, PressureMeaning
from fluxmesh.field.relative import relative_velocity
from fluxmesh.integral.samples import Samples, sample_places
from fluxmesh.job.exported import exported_field
from fluxmesh.job.sampled import Sampled, sample_source, sampled_field
from fluxmesh.job.scalars import Scalars, scalars_of, temperature_of
from fluxmesh.job.shape import Shape
from fluxmesh.job.supplied import shaped_groups, supply_flow, supply_values
from fluxmesh.job.tractions import traction_of

__all__ = ["frame_of", "lay_case", "lay_sharpened", "lay_with_scalars"]


def frame_of(case: Case) -> Frame | None:
    """Return the motion of the control surface of a case; None where it stands.

    Parameters
    ----------
    case : Case
        The case.
    """
    asked = case.frame
    if asked is None:
        return None
    if asked.rotation is None:
        return Frame(asked.velocity, asked.acceleration)
    turn = asked.rotation
    return Frame(asked.velocity, asked.acceleration, float(turn.rate), turn.axis, turn.through)


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
    with _named(case):
        return _lay(case, shape)[0]


def lay_with_scalars(case: Case, shape: Shape) -> tuple[Flow, Scalars]:
    """Lay the flow data of a case on its surface, with all else that the flow carries.

    Parameters
    ----------
    case : Case
        The case.
    shape : Shape
        Its surface and arrays.

    Returns
    -------
    flow : Flow
        As `lay_case`.
    scalars : Scalars
        Temperature, enthalpy and carried scalars.

    Raises
    ------
    InputError
        Data that cannot be used; the message names them.
    """
    with _named(case):
        flow, sampled = _lay(case, shape)
        return flow, scalars_of(case, shape, flow, sampled)


def lay_sharpened(case: Case, shape: Shape) -> tuple[Flow, float | None]:
    """Lay the flow data of a case that samples a volume, to one order more than the volume's cells have.

    Parameters
    ----------
    case : Case
        The case.
    shape : Shape
        Its surface and arrays.

    Returns
    -------
    flow : Flow
        As `lay_case`, of values from `fluxmesh.field.volume_sharp`.
    share : float or None
        Share of the quadrature points at which values on nodes are sharpened; None without a volume.

    Raises
    ------
    InputError
        Data that cannot be used; the message names them.
    """
    with _named(case):
        flow, sampled = _lay(case, shape, sharpen=True)
        return flow, None if sampled is None else sampled.sharpened


@contextmanager
def _named(case: Case) -> Iterator[None]:
    """Name the case in the errors of a piece of work."""
    try:
        yield
    except InputError as error:
        name = case.path.name
        if error.where.startswith(name):
            raise
        raise type(error)(error.found, f"{name}: {error.where}" if error.where else name, error.remedy) from error


def _lay(case: Case, shape: Shape, *, sharpen: bool = False) -> tuple[Flow, Sampled | None]:
    surface = shape.surface
    samples = _samples(case, shape)
    sampled = None if samples is None else sample_source(case, shape, samples, sharpen=sharpen)
    flow = _fields(case, shape, samples, sampled)
    if sampled is not None:
        flow = replace(flow, notes=sampled.notes, sampling=sampled.data())
    flow = supply_values(case, flow)
    if case.fluid.law is not None:
        flow = replace(flow, density=_gas_density(case, shape, flow, sampled))
    flow, notes = supply_flow(case, surface, flow, samples)
    flow = replace(flow, notes=(*flow.notes, *notes))
    require_flow(surface, flow)
    return flow, sampled


def _samples(case: Case, shape: Shape) -> Samples | None:
    """Quadrature points of the faces that a field has to be evaluated at, or None."""
    surface = shape.surface
    asked = case.flow
    chosen = np.zeros(len(surface.groups), np.bool_)
    tensor = asked.stress or asked.velocity_gradient
    on_faces = tensor is not None and tensor.array in shape.arrays.face and surface.kinds is None
    if asked.volume is not None or asked.points is not None or (tensor is not None and not on_faces):
        chosen[:] = True
    chosen |= _turning_groups(case, shape)
    for name in shaped_groups(case):
        chosen[list(case.groups).index(name)] = True
    if not chosen.any():
        return None
    return sample_places(face_arrays_of(surface), chosen[surface.group_of_face])


def _turning_groups(case: Case, shape: Shape) -> NDArray[np.bool_]:
    """Groups with one absolute velocity a face or in all, on a surface that turns: relative to it that varies."""
    found = np.zeros(len(case.groups), np.bool_)
    if case.frame is None or case.frame.rotation is None:
        return found
    entry = case.flow.velocity
    if entry is not None and entry.frame == "absolute":
        found[:] = entry.at != "nodes" and entry.array[0] in shape.arrays.face
    for k, section in enumerate(case.groups.values()):
        if section.velocity is not None and section.velocity_frame == "absolute":
            found[k] = True
    return found


def _fields(case: Case, shape: Shape, samples: Samples | None, sampled: Sampled | None) -> Flow:
    surface, asked = shape.surface, case.flow
    density = _density(case, shape, sampled)
    velocity = absent_field(surface, "velocity", 3)
    if asked.velocity is not None:
        velocity = _field(
            shape, sampled, "velocity", 3, asked.velocity.array, asked.velocity.at, asked.velocity.unit.factor
        )
    frame = frame_of(case)
    if frame is not None and asked.velocity is not None and asked.velocity.frame == "absolute":
        velocity = relative_velocity(surface, velocity, frame, samples=samples)
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
        frame=frame,
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


def _gas_density(case: Case, shape: Shape, flow: Flow, sampled: Sampled | None) -> Field:
    """Density of an ideal gas, with the densities that groups supply in place of it."""
    surface, fluid = shape.surface, case.fluid
    temperature = temperature_of(case, shape, sampled)
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
