"""The flow on a surface: density, velocity, pressure, traction and mass flux."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fluxmesh.errors import FieldError, GroupError
from fluxmesh.field.field import (
    Field,
    absent_field,
    array_field,
    constant_field,
    require_finite,
    require_positive,
    supply,
)
from fluxmesh.field.frame import Frame
from fluxmesh.field.pressure import PressureMeaning, pressure_terms
from fluxmesh.field.relative import needs_samples, relative_velocity
from fluxmesh.integral.kernel import integrate
from fluxmesh.integral.layout import ABSENT, AT_SAMPLE, PER_GROUP, FaceArrays, FlowArrays, PressureTerms, runs_over
from fluxmesh.integral.samples import sample_places
from fluxmesh.integral.table import IntegralTable
from fluxmesh.surface.extent import used_box
from fluxmesh.surface.surface import ControlSurface, Role
from fluxmesh.units import LARGEST

__all__ = [
    "Flow",
    "face_arrays_of",
    "gauge_terms",
    "integrate_flow",
    "lay_flow",
    "near_origin",
    "require_finite_table",
    "require_flow",
    "still_flow",
]


@dataclass(frozen=True, eq=False)
class Flow:
    """Flow data laid on a surface.

    Attributes
    ----------
    density : Field
        kg/m^3.
    velocity : Field
        Velocity relative to the control surface, m/s; where that stands (no
        `frame`), the velocity itself.
    pressure : Field
        As exported; `meaning` says how to read it. Values supplied for a group
        are gauge pressure in Pa.
    traction : Field
        Viscous traction on the FLUID, Pa.
    mass_flux : Field
        Mass flow OUT through each face of the (moving) surface, kg/s; where it is there, it carries the
        mass and momentum flux in place of density times velocity.
    meaning : PressureMeaning
        Kind of the exported pressure, and its head.
    ambient : float or None
        Ambient absolute pressure, Pa.
    gravity : tuple of 3 floats
        m/s².
    sample_start : ndarray, shape (n_faces + 1,), int64
        Where the samples of each face start; empty when no field is sampled.
    viscosity : float or None
        Dynamic viscosity, Pa s, where it is known: for estimates.
    sampling : mapping or None
        Where fields were sampled from, and how well, as plain data.
    notes : tuple of str
        What was solved, sampled or restored on the way, one sentence each.
    frame : Frame or None
        How the control surface moves; None where it stands.
    """

    density: Field
    velocity: Field
    pressure: Field
    traction: Field
    mass_flux: Field
    meaning: PressureMeaning = field(default_factory=PressureMeaning)
    ambient: float | None = None
    gravity: tuple[float, float, float] = (0.0, 0.0, 0.0)
    sample_start: NDArray[np.int64] = field(default_factory=lambda: np.empty(0, np.int64))
    viscosity: float | None = None
    sampling: Mapping[str, object] | None = None
    notes: tuple[str, ...] = ()
    frame: Frame | None = None

    def fields(self) -> tuple[Field, ...]:
        """Return all fields."""
        return (self.density, self.velocity, self.pressure, self.traction, self.mass_flux)

    def uniform_density(self) -> float | None:
        """Return the density if it is one constant, else None."""
        values = self.density.group[self.density.where == PER_GROUP]
        if values.size == 0 or (self.density.where > PER_GROUP).any() or np.ptp(values) > 0:
            return None
        return float(values[0])


def still_flow(surface: ControlSurface) -> Flow:
    """Return a flow without any data, for the geometry alone."""
    return Flow(
        density=absent_field(surface, "density", 1),
        velocity=absent_field(surface, "velocity", 3),
        pressure=absent_field(surface, "pressure", 1),
        traction=absent_field(surface, "traction", 3),
        mass_flux=absent_field(surface, "mass flux", 1),
    )


Value = ArrayLike | float | Sequence[float] | None


def lay_flow(
    surface: ControlSurface,
    *,
    density: Value = None,
    velocity: Value = None,
    pressure: Value = None,
    traction: Value = None,
    mass_flux: Value = None,
    at: str | Mapping[str, str] | None = None,
    supplied: Mapping[str, Mapping[str, float | Sequence[float]]] | None = None,
    meaning: PressureMeaning | None = None,
    ambient: float | None = None,
    gravity: Sequence[float] = (0.0, 0.0, 0.0),
    viscosity: float | None = None,
    frame: Frame | None = None,
    velocity_frame: str = "absolute",
) -> Flow:
    """Lay flow data on a surface.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    density, pressure : float or array_like, shape (n,), optional
        One value, or one a point or face: kg/m^3 and Pa (see `meaning`).
    velocity, traction : 3 floats or array_like, shape (n, 3), optional
        m/s, and viscous traction on the FLUID in Pa.
    mass_flux : array_like, shape (n_faces,), optional
        Mass flow out through each face, kg/s.
    at : {"nodes", "faces"} or mapping of str to these, optional
        Where arrays sit, for all or by quantity (``{"pressure": "faces"}``);
        by default told from their length, which needs it where there are as
        many points as faces.
    supplied : mapping, optional
        ``{group: {"velocity": (..), "pressure": .., "density": .., "traction": (..)}}``:
        one value for a group, in place of the arrays; pressure is gauge.
    meaning : PressureMeaning, optional
        How to read the pressure array; gauge with head by default.
    ambient : float, optional
        Ambient absolute pressure, Pa.
    gravity : sequence of 3 floats, optional
        m/s².
    viscosity : float, optional
        Dynamic viscosity, Pa s: for an estimate of what a missing traction leaves out.
    frame : Frame, optional
        How the control surface moves; it stands by default.
    velocity_frame : {"absolute", "relative"}, optional
        Whether all velocities given are those in the inertial frame, or relative
        to the control surface.

    Returns
    -------
    Flow
        Checked: lengths fit, values are finite, density is positive.

    Raises
    ------
    FieldError
        An array of the wrong length or component count, a value that is not
        finite, or a density that is not positive.
    GroupError
        A supplied group that the surface does not have.
    """

    places = [at] if isinstance(at, str) else list((at or {}).values())
    if any(place not in ("nodes", "faces") for place in places):
        raise FieldError(f"at is {at!r}", remedy='Give "nodes" or "faces", for all arrays or by quantity')

    def lay(name: str, components: int, value: Value) -> Field:
        if value is None:
            return absent_field(surface, name, components)
        given = np.asarray(value)
        if given.ndim == 0 or (components == 3 and given.shape == (3,)):
            constant = float(given) if components == 1 else [float(x) for x in given]
            return constant_field(surface, name, components, constant)
        place = at if isinstance(at, str) or at is None else at.get(name)
        return array_field(surface, name, components, given, at="faces" if name == "mass flux" else place)

    fields = {
        "density": lay("density", 1, density),
        "velocity": lay("velocity", 3, velocity),
        "pressure": lay("pressure", 1, pressure),
        "traction": lay("traction", 3, traction),
    }
    if pressure is not None and np.ndim(pressure) == 0:
        # one value everywhere is read like an array, so that `meaning` applies to it too
        fields["pressure"] = array_field(
            surface, "pressure", 1, np.full(surface.face_count, float(np.asarray(pressure))), at="faces"
        )
    names = [group.name for group in surface.groups]
    for group, values in (supplied or {}).items():
        if group not in names:
            raise GroupError(f"data are supplied for group '{group}'", remedy=f"The surface has {', '.join(names)}")
        for name, value in values.items():
            if name not in fields:
                raise FieldError(f"'{name}' is supplied for group '{group}'", remedy=f"Allowed: {', '.join(fields)}")
            fields[name] = supply(fields[name], names.index(group), value)
    down = [float(g) for g in gravity]
    if len(down) != 3 or not np.isfinite(down).all():
        raise FieldError(f"gravity is {gravity!r}", remedy="Three finite numbers in m/s² are needed")
    if velocity_frame not in ("absolute", "relative"):
        raise FieldError(f"velocity_frame is {velocity_frame!r}", remedy='Give "absolute" or "relative"')
    samples = None
    if frame is not None and velocity_frame == "absolute":
        needs = needs_samples(fields["velocity"], frame)
        if needs.any():
            samples = sample_places(face_arrays_of(surface), needs[surface.group_of_face])
        fields["velocity"] = relative_velocity(surface, fields["velocity"], frame, samples=samples)
    flow = Flow(
        density=fields["density"],
        velocity=fields["velocity"],
        pressure=fields["pressure"],
        traction=fields["traction"],
        mass_flux=lay("mass flux", 1, mass_flux),
        meaning=meaning or PressureMeaning(),
        ambient=ambient,
        gravity=(down[0], down[1], down[2]),
        sample_start=np.empty(0, np.int64) if samples is None else samples.start,
        viscosity=viscosity,
        frame=frame,
    )
    require_flow(surface, flow)
    return flow


def require_flow(surface: ControlSurface, flow: Flow) -> None:
    """Raise if the values of a flow cannot be used.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    flow : Flow
        The flow.

    Raises
    ------
    FieldError
        A value that is not finite, a density that is not positive, or a group
        with velocity or mass flux but no density.
    """
    for each in flow.fields():
        require_finite(surface, each)
        _require_samples(surface, flow, each, positive=each is flow.density)
    require_positive(surface, flow.density)
    moving = flow.velocity.present() | flow.mass_flux.present()
    for k, group in enumerate(surface.groups):
        if moving[k] and flow.density.where[k] == ABSENT:
            raise FieldError(
                "there is a velocity or mass flux, but no density",
                where=f"group '{group.name}'",
                remedy="Give the density",
            )


def _require_samples(surface: ControlSurface, flow: Flow, each: Field, *, positive: bool) -> None:
    """Look at values at quadrature points, where a group takes the field from there."""
    sampled = each.where == AT_SAMPLE
    if not sampled.any():
        return
    used = sampled[np.repeat(surface.group_of_face, np.diff(flow.sample_start))]
    values = each.sample.reshape(used.size, -1)
    bad = used & ~np.isfinite(values).all(axis=1)
    what = "are not finite"
    if not bad.any() and values.size and (np.abs(values * each.scale) > LARGEST).any():
        bad = used & ~(np.abs(values * each.scale) <= LARGEST).all(axis=1)
        what = f"are beyond {LARGEST:g} in SI"
    if positive and not bad.any():
        bad = used & ~(values * each.scale > 0).all(axis=1)
        what = "are zero or negative"
    if bad.any():
        raise FieldError(
            f"{np.count_nonzero(bad)} of {np.count_nonzero(used)} values at quadrature points {what}",
            where=each.label or each.name,
            remedy="Check the source of the field",
        )


def near_origin(surface: ControlSurface) -> NDArray[np.float64]:
    """Return the middle of the box round the points that faces use, shape (3,), m."""
    low, high = used_box(surface.points, surface.connectivity)
    return np.asarray(low + (high - low) / 2)


def face_arrays_of(surface: ControlSurface) -> FaceArrays:
    """Return the faces of a surface as the plain arrays that the kernels take.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    """
    return FaceArrays(
        surface.points,
        surface.connectivity,
        np.empty(0, np.int64) if surface.offsets is None else surface.offsets,
        np.empty(0, np.int8) if surface.kinds is None else surface.kinds,
    )


def gauge_terms(flow: Flow, origin: NDArray[np.float64]) -> PressureTerms:
    """Return what makes gauge pressure with its head out of the pressure of a flow.

    Parameters
    ----------
    flow : Flow
        The flow.
    origin : ndarray, shape (3,), float64
        Origin of the integration, m.
    """
    if not flow.pressure.present().any():
        return PressureTerms(False, 0.0, 0.0, 0.0, 0.0)
    return pressure_terms(
        flow.meaning,
        ambient=flow.ambient,
        density=flow.uniform_density(),
        gravity=np.asarray(flow.gravity),
        origin=origin,
    )


def integrate_flow(
    surface: ControlSurface,
    flow: Flow,
    *,
    threads: int | None = None,
    origin: NDArray[np.float64] | None = None,
    faces: NDArray[np.int64] | None = None,
) -> IntegralTable:
    """Return the table of basis integrals of a flow on a surface.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    flow : Flow
        The flow; pressure becomes gauge with its head on the way.
    threads : int, optional
        Threads; all cores by default. The result does not depend on it.
    origin : ndarray, shape (3,), float64, optional
        Point that positions are taken about, m; the middle of the bounding box by default.
    faces : ndarray, shape (n,), int64, optional
        Faces to integrate over; all by default.

    Returns
    -------
    IntegralTable
        One row a group.

    Raises
    ------
    FieldError
        Integrals that overflow.
    """
    origin = near_origin(surface) if origin is None else origin
    terms = gauge_terms(flow, origin)
    mesh = face_arrays_of(surface)
    arrays = FlowArrays(
        velocity=flow.velocity.arrays(),
        traction=flow.traction.arrays(),
        pressure=flow.pressure.arrays(),
        density=flow.density.arrays(),
        mass=flow.mass_flux.arrays(),
        terms=terms,
        sample_start=flow.sample_start,
    )
    table = integrate(
        mesh=mesh,
        flow=arrays,
        runs=runs_over(surface.group_of_face, surface.kinds, faces),
        origin=origin,
        still_groups=np.array([group.role in (Role.WALL, Role.SYMMETRY) for group in surface.groups]),
        threads=threads,
    )
    require_finite_table(surface, table)
    return table


def require_finite_table(surface: ControlSurface, table: IntegralTable) -> None:
    """Raise a `FieldError` if integrals overflow.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    table : IntegralTable
        Its integrals.
    """
    if not np.isfinite(table.values).all():
        group = surface.groups[int(np.flatnonzero(~np.isfinite(table.values).all(axis=1))[0])].name
        raise FieldError(
            "the integrals overflow",
            where=f"group '{group}'",
            remedy="Check coordinates and field values for absurd sizes",
        )
