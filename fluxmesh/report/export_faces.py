"""Every figure of every face, by the kernel of the balance itself: what it adds up to the groups' entries."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.balance.frame import Held, frame_terms
from fluxmesh.balance.setting import Setting
from fluxmesh.balance.storage import Storage
from fluxmesh.field.field import Field, absent_field
from fluxmesh.field.flow import Flow, face_arrays_of, near_origin
from fluxmesh.field.pressure import pressure_terms
from fluxmesh.integral.each_face import integrate_each_face
from fluxmesh.integral.layout import FlowArrays, PressureTerms
from fluxmesh.integral.table import IntegralTable
from fluxmesh.surface.surface import ControlSurface, Role

__all__ = ["FaceScalar", "face_fields", "face_tables"]

Array = NDArray[np.float64]
# Faces at a time: their tables take a hundred megabytes.
_CHUNK: Final = 1 << 17
_AS_IT_IS: Final = PressureTerms(False, 0.0, 0.0, 0.0, 0.0)


@dataclass(frozen=True, eq=False)
class FaceScalar:
    """A scalar that the flow carries, as it is to be exported.

    Attributes
    ----------
    field : Field
        Its values.
    mean : str
        Name of the array of its means over each face.
    flow : str
        Name of the array of what the flow carries of it out through each face; empty for none.
    per : {"mass", "volume"}
        Whether it is an amount a mass or an amount a volume.
    with_flow_work : bool
        Whether `flow` holds the flow work of the gauge pressure too: the enthalpy of a liquid
        from its temperature.
    factor : float
        Of `flow`: a heat capacity, say.
    """

    field: Field
    mean: str
    flow: str = ""
    per: str = "mass"
    with_flow_work: bool = False
    factor: float = 1.0


def face_tables(
    surface: ControlSurface,
    flow: Flow,
    *,
    scalar: Field | None = None,
    faces: NDArray[np.int64] | None = None,
    threads: int | None = None,
) -> IntegralTable:
    """Return the table of basis integrals with one row a face.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    flow : Flow
        The flow on it.
    scalar : Field, optional
        A scalar that takes the place of the pressure (as in
        `fluxmesh.field.scalars.integrate_scalar`); traction then counts as absent.
    faces : ndarray, shape (n,), int64, optional
        Faces to integrate over; all by default.
    threads : int, optional
        Threads; all cores by default. The result does not depend on it.

    Returns
    -------
    IntegralTable
        A row a face, in their order, by the same rule as its group; the rows of a group add up to the
        group's row of `fluxmesh.field.flow.integrate_flow` but for the rounding of that sum.
    """
    origin = near_origin(surface)
    terms = _AS_IT_IS
    if scalar is None and flow.pressure.present().any():
        terms = pressure_terms(
            flow.meaning,
            ambient=flow.ambient,
            density=flow.uniform_density(),
            gravity=np.asarray(flow.gravity),
            origin=origin,
        )
    traction = flow.traction if scalar is None else absent_field(surface, "traction", 3)
    still = np.array([scalar is None and group.role in (Role.WALL, Role.SYMMETRY) for group in surface.groups])
    arrays = FlowArrays(
        velocity=flow.velocity.arrays(),
        traction=traction.arrays(),
        pressure=(flow.pressure if scalar is None else scalar).arrays(),
        density=flow.density.arrays(),
        mass=flow.mass_flux.arrays(),
        terms=terms,
        sample_start=flow.sample_start,
    )
    return integrate_each_face(
        mesh=face_arrays_of(surface),
        flow=arrays,
        group_of_face=surface.group_of_face,
        origin=origin,
        still_groups=still,
        faces=faces,
        threads=threads,
    )


def face_fields(
    surface: ControlSurface,
    flow: Flow,
    setting: Setting,
    scalars: Sequence[FaceScalar] = (),
    *,
    threads: int | None = None,
) -> dict[str, Array]:
    """Return all derived fields of the faces, SI units.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    flow : Flow
        The flow on it.
    setting : Setting
        Of its balance: for the motion of the surface and the anchor.
    scalars : sequence of FaceScalar, optional
        What else the flow carries.
    threads : int, optional
        Threads; all cores by default. The result does not depend on it.

    Returns
    -------
    dict of str to ndarray, shape (n_faces,) or (n_faces, 3), float64
        By name, with the unit in it. Means over a face (pressure, density, velocity, traction,
        scalars) are NaN where the group has no such data; integrals (flows, fluxes, forces) are
        zero there, as in the ledgers. Forces are on the fluid, flows are out of it; the momentum
        is that of the absolute velocity.
    """
    parts = [
        _some_fields(
            surface, flow, setting, scalars, np.arange(first, min(first + _CHUNK, surface.face_count)), threads
        )
        for first in range(0, surface.face_count, _CHUNK)
    ]
    return {name: np.concatenate([part[name] for part in parts]) for name in parts[0]}


def _some_fields(
    surface: ControlSurface,
    flow: Flow,
    setting: Setting,
    scalars: Sequence[FaceScalar],
    faces: NDArray[np.int64],
    threads: int | None,
) -> dict[str, Array]:
    """The fields of some faces."""
    table = face_tables(surface, flow, faces=faces, threads=threads)
    area = table.column("area")
    share = np.divide(1.0, area, out=np.zeros_like(area), where=area > 0.0)
    group = surface.group_of_face[faces]

    def mean(name: str, field: Field, source: IntegralTable = table) -> Array:
        column = source.column(name)
        values = column * (share if column.ndim == 1 else share[:, None])
        values[~field.present()[group] | (area <= 0.0)] = np.nan
        return np.asarray(values)

    momentum = table.column("momentum_flux")
    velocity = mean("velocity_area", flow.velocity)
    absolute = velocity
    if setting.frame is not None:
        about = np.asarray(setting.anchor, dtype=np.float64)
        nothing = np.full(3, np.nan)
        held = Held(np.nan, nothing, nothing, nothing, np.full((3, 3), np.nan), about)
        momentum = momentum + frame_terms(table, setting.frame, held, Storage()).flux
        # over a flat face the mean velocity of the surface is that at the middle
        absolute = velocity + setting.frame.at(table.origin + table.column("position") * share[:, None])
    vector = table.column("area_vector")
    fields = {
        "area_m2": area,
        "area_vector_m2": vector,
        "normal": vector / np.maximum(np.linalg.norm(vector, axis=1), np.finfo(np.float64).tiny)[:, None],
        "gauge_pressure_Pa": mean("pressure_area", flow.pressure),
        "density_kg_per_m3": mean("density_area", flow.density),
        "velocity_absolute_m_per_s": absolute,
        "velocity_relative_m_per_s": velocity,
        "traction_on_fluid_Pa": mean("viscous_force", flow.traction),
        "mass_flow_out_kg_per_s": table.column("mass_flow"),
        "volume_flow_out_m3_per_s": table.column("volume_flow"),
        "momentum_flux_out_N": momentum,
        "pressure_force_on_fluid_N": table.column("pressure_force"),
        "viscous_force_on_fluid_N": table.column("viscous_force"),
    }
    for scalar in scalars:
        own = face_tables(surface, flow, scalar=scalar.field, faces=faces, threads=threads)
        fields[scalar.mean] = mean("pressure_area", scalar.field, own)
        if scalar.flow:
            carried = own.column("pressure_mass_flow" if scalar.per == "mass" else "pressure_volume_flow")
            amount = scalar.factor * carried
            if scalar.with_flow_work:
                amount = amount + table.column("pressure_volume_flow")
            known = scalar.field.present() & np.array([each.role.is_port for each in surface.groups])
            fields[scalar.flow] = np.where(known[group], amount, 0.0)
    return fields
