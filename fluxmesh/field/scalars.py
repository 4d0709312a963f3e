"""What the flow carries through each group: integrals of one scalar."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

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
from fluxmesh.field.flow import Flow, face_arrays_of, near_origin
from fluxmesh.integral.kernel import integrate
from fluxmesh.integral.layout import ABSENT, AT_SAMPLE, FlowArrays, PressureTerms, Runs, make_runs
from fluxmesh.surface.surface import ControlSurface

__all__ = ["ScalarFlux", "at_ports", "integrate_scalar", "lay_scalar"]

Array = NDArray[np.float64]
_AS_IT_IS = PressureTerms(False, 0.0, 0.0, 0.0, 0.0)


@dataclass(frozen=True, eq=False)
class ScalarFlux:
    """Integrals of one scalar φ over every group; ``n`` points out of the fluid.

    Attributes
    ----------
    name : str
        What the scalar is.
    area : ndarray, shape (n_groups,), float64
        ``∫φ dA``, unit of φ times m²; zero where it is not known.
    mass_flow : ndarray, shape (n_groups,), float64
        ``∫φ ρ Vr·n dA``, unit of φ times kg/s; above zero where it leaves.
    volume_flow : ndarray, shape (n_groups,), float64
        ``∫φ Vr·n dA``, unit of φ times m³/s; above zero where it leaves.
    known : ndarray of bool, shape (n_groups,)
        Groups that were asked for and where φ and the flow are known.
    """

    name: str
    area: Array
    mass_flow: Array
    volume_flow: Array
    known: NDArray[np.bool_]

    def of_groups(self, kept: NDArray[np.bool_], times: float = 1.0) -> ScalarFlux:
        """Return the integrals of some groups, each a number of times.

        Parameters
        ----------
        kept : ndarray of bool, shape (n_groups,)
            Groups to keep.
        times : float, optional
            Factor: 2 for the whole of a half model, 4 for that of a quarter.
        """
        return ScalarFlux(
            self.name,
            times * self.area[kept],
            times * self.mass_flow[kept],
            times * self.volume_flow[kept],
            self.known[kept],
        )


def lay_scalar(
    surface: ControlSurface,
    name: str,
    values: ArrayLike | float | None = None,
    *,
    at: str | None = None,
    supplied: Mapping[str, float] | None = None,
) -> Field:
    """Lay a scalar on a surface.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    name : str
        What it is.
    values : float or array_like, shape (n,), optional
        One value, or one a point or face, SI.
    at : {"nodes", "faces"}, optional
        Where an array sits; by default told from its length.
    supplied : mapping of str to float, optional
        Values of groups, in place of the others.

    Raises
    ------
    FieldError
        An array of the wrong length, or values that are not finite.
    GroupError
        A group that the surface does not have.
    """
    if values is None:
        field = absent_field(surface, name, 1)
    elif np.ndim(values) == 0:
        field = constant_field(surface, name, 1, float(np.asarray(values)))
    else:
        field = array_field(surface, name, 1, values, at=at)
    names = [group.name for group in surface.groups]
    for group, value in (supplied or {}).items():
        if group not in names:
            raise GroupError(f"{name} is supplied for group '{group}'", remedy=f"The surface has {', '.join(names)}")
        field = supply(field, names.index(group), value)
    return field


def at_ports(surface: ControlSurface, field: Field, *, positive: bool = False) -> Field:
    """Return a scalar where flow may pass alone, its values looked at.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    field : Field
        The scalar; other groups may hold anything, such as the values of a fluid
        at rest on the wall, or none.
    positive : bool, optional
        Whether its values must be above zero.

    Raises
    ------
    FieldError
        A value at a port that is not finite, or not positive.
    """
    ports = np.array([group.role.is_port for group in surface.groups])
    kept = replace(field, where=np.where(ports, field.where, ABSENT).astype(np.int8))
    require_finite(surface, kept)
    if positive:
        require_positive(surface, kept)
        if (kept.where == AT_SAMPLE).any() and not (kept.sample * np.sign(kept.scale)).min() > 0:
            raise FieldError(
                "values at quadrature points are zero or negative",
                where=field.label or field.name,
                remedy=f"{field.name.capitalize()} must be positive",
            )
    return kept


def integrate_scalar(
    surface: ControlSurface,
    flow: Flow,
    field: Field,
    *,
    groups: NDArray[np.bool_] | None = None,
    threads: int | None = None,
) -> ScalarFlux:
    """Integrate a scalar with the flow that carries it, by the kernel of the balance itself.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    flow : Flow
        The flow on it.
    field : Field
        The scalar, with one component; on points it is linear over a facet.
    groups : ndarray of bool, shape (n_groups,), optional
        Groups to integrate over; by default those that flow may pass. Other
        faces are not looked at.
    threads : int, optional
        Threads; all cores by default. The result does not depend on it.

    Returns
    -------
    ScalarFlux
        Of the groups where scalar and flow are known; zero elsewhere.

    Raises
    ------
    FieldError
        Values at quadrature points that are not those of the flow, or integrals
        that are not finite.
    """
    chosen = np.array([group.role.is_port for group in surface.groups]) if groups is None else groups
    moving = (flow.velocity.present() | flow.mass_flux.present()) & flow.density.present()
    known = chosen & field.present() & moving
    sampled = known & (field.where == AT_SAMPLE)
    if sampled.any() and (flow.sample_start.size == 0 or field.sample.shape[0] != flow.sample_start[-1]):
        raise FieldError(
            "the values at quadrature points are not at those of the flow",
            where=field.label or field.name,
            remedy="Sample both at the same places",
        )
    # the scalar takes the place of the pressure, whose integrals with the flow the kernel makes;
    # nothing else of the pressure, and no traction, is looked at
    arrays = FlowArrays(
        velocity=flow.velocity.arrays(),
        traction=absent_field(surface, "traction", 3).arrays(),
        pressure=field.arrays(),
        density=flow.density.arrays(),
        mass=flow.mass_flux.arrays(),
        terms=_AS_IT_IS,
        sample_start=flow.sample_start,
    )
    table = integrate(
        mesh=face_arrays_of(surface),
        flow=arrays,
        runs=_runs_of(surface, known),
        origin=near_origin(surface),
        still_groups=np.zeros(len(surface.groups), np.bool_),
        threads=threads,
    )
    area, by_mass, by_volume = (
        np.where(known, table.column(name), 0.0)
        for name in ("pressure_area", "pressure_mass_flow", "pressure_volume_flow")
    )
    wrong = ~(np.isfinite(area) & np.isfinite(by_mass) & np.isfinite(by_volume))
    if wrong.any():
        group = surface.groups[int(np.flatnonzero(wrong)[0])].name
        raise FieldError(
            f"the integrals of the {field.name} over group '{group}' are not finite",
            where=field.label or field.name,
            remedy="Check its values there: they hold NaN, infinity or absurd sizes",
        )
    return ScalarFlux(field.name, area, by_mass, by_volume, known)


def _runs_of(surface: ControlSurface, groups: NDArray[np.bool_]) -> Runs:
    """The runs of the faces of some groups alone."""
    if groups.all():
        return make_runs(surface.group_of_face, surface.kinds)
    faces = np.flatnonzero(groups[surface.group_of_face])
    runs = make_runs(surface.group_of_face[faces], None if surface.kinds is None else surface.kinds[faces])
    return runs._replace(order=faces[runs.order] if runs.order.size else faces)
