"""Viscous traction from what was exported: a stress tensor, or a velocity gradient with the viscosity.

The traction on the fluid is ``t = tau · n``, with ``n`` out of the fluid. Each face that
meets at a point has its own normal, so tensors on points give no traction on points: they
are interpolated to the quadrature points of the kernel, and dotted with the normal there.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError
from fluxmesh.field.field import Field, absent_field, constant_field, require_finite, require_positive
from fluxmesh.field.flow import face_arrays_of
from fluxmesh.integral.layout import ABSENT, AT_FACE, AT_NODE, AT_SAMPLE, PER_GROUP, FaceArrays, FieldArrays
from fluxmesh.integral.samples import Samples, interpolate_at_samples, mean_normals, sample_normals
from fluxmesh.surface.surface import ControlSurface

__all__ = ["groups_to_sample", "isotropic_share", "traction_from_gradient", "traction_from_stress"]

Array = NDArray[np.float64]

# where S_ij stands in an array of 6 components
_ORDERS: Final = {
    "xx yy zz xy yz xz": np.array([[0, 3, 5], [3, 1, 4], [5, 4, 2]]),
    "xx yy zz yz xz xy": np.array([[0, 5, 4], [5, 1, 3], [4, 3, 2]]),
}
_ROW_BY_ROW: Final = np.arange(9).reshape(3, 3)
# far above the rounding of a single-precision export (6e-8), far below a velocity gradient taken for a stress
_LARGEST_ANTISYMMETRY: Final = 1e-3


def groups_to_sample(surface: ControlSurface, *parts: Field) -> NDArray[np.bool_]:
    """Return the groups whose traction must be taken at quadrature points.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    *parts : Field
        What the traction is made of: a stress, or a gradient and a viscosity.

    Returns
    -------
    ndarray, shape (n_groups,), bool
        Groups that have all parts, and have one of them on points or at
        quadrature points, or have curved faces.
    """
    return _pointwise(surface, [part.where for part in parts])


def traction_from_stress(
    surface: ControlSurface, stress: Field, *, order: str = "xx yy zz xy yz xz", samples: Samples | None = None
) -> Field:
    """Return the traction on the fluid of a viscous stress tensor.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    stress : Field
        Viscous part of the stress, tension positive, without the pressure, Pa: 6
        components, or 9 row by row. On points, on faces, one value a group, or at the
        quadrature points of `samples`.
    order : {"xx yy zz xy yz xz", "xx yy zz yz xz xy"}, optional
        Order of 6 components: as VTK writes symmetric tensors, or the other usual one.
    samples : Samples, optional
        The quadrature points that the flow has: those of all groups that
        `groups_to_sample` names, or more.

    Returns
    -------
    Field
        ``t_i = S_ij n_j`` (Cauchy; Batchelor, An Introduction to Fluid Dynamics,
        section 1.3; from memory), Pa: on faces, or at quadrature points in the order of
        `samples`, with NaN at those of other groups. A straight face of one stress has the
        mean of its traction.

    Raises
    ------
    FieldError
        A tensor of neither 6 nor 9 components or that is not symmetric, values that are
        not finite, an unknown order, or quadrature points that are missing.
    """
    if stress.components not in (6, 9):
        raise FieldError(
            f"the stress has {stress.components} components",
            where=stress.label or stress.name,
            remedy="Give 6 of a symmetric tensor, or 9",
        )
    if order not in _ORDERS:
        raise FieldError(f"the order of components is '{order}'", remedy=f"Allowed: {' or '.join(_ORDERS)}")
    require_finite(surface, stress)
    if stress.components == 9:
        _require_symmetric(stress)
    index = _ROW_BY_ROW if stress.components == 9 else _ORDERS[order]
    return _traction(surface, _each(stress, lambda s: s[:, index]), None, samples, stress)


def traction_from_gradient(
    surface: ControlSurface,
    gradient: Field,
    viscosity: float | Field,
    *,
    dilatation: bool = True,
    samples: Samples | None = None,
) -> Field:
    """Return the traction on the fluid of a velocity gradient in a Newtonian fluid.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    gradient : Field
        9 components, 1/s: ``du_i/dx_j`` row by row, or column by column, for the
        stress is the same. On points, on faces, one value a group, or at the
        quadrature points of `samples`.
    viscosity : float or Field
        Dynamic viscosity, Pa s; of a turbulent mean flow the effective one, molecular
        plus eddy viscosity.
    dilatation : bool, optional
        Whether to take the stress that goes with a change of volume, ``-2/3 mu div u``;
        without divergence it vanishes.
    samples : Samples, optional
        The quadrature points that the flow has: those of all groups that
        `groups_to_sample` names, or more.

    Returns
    -------
    Field
        ``t_i = mu (du_i/dx_j + du_j/dx_i - 2/3 div u delta_ij) n_j`` (Batchelor, An Introduction
        to Fluid Dynamics, section 3.3; from memory), Pa: where `traction_from_stress` has it.

    Raises
    ------
    FieldError
        A gradient without 9 components, values that are not finite, a viscosity that
        is missing or not positive, or quadrature points that are missing.
    """
    if gradient.components != 9:
        raise FieldError(
            f"the velocity gradient has {gradient.components} components",
            where=gradient.label or gradient.name,
            remedy="9 are needed",
        )
    known = viscosity if isinstance(viscosity, Field) else constant_field(surface, "viscosity", 1, viscosity)
    for part in (gradient, known):
        require_finite(surface, part)
    require_positive(surface, known)
    lacking = np.flatnonzero(gradient.present() & ~known.present())
    if lacking.size:
        raise FieldError(
            "there is a velocity gradient, but no viscosity",
            where=f"group '{surface.groups[int(lacking[0])].name}'",
            remedy="Give the viscosity",
        )

    def rates(values: Array) -> Array:
        matrices = values[:, _ROW_BY_ROW]
        rate = matrices + matrices.transpose(0, 2, 1)
        if dilatation:
            rate -= (2 / 3 * np.trace(matrices, axis1=1, axis2=2))[:, None, None] * np.eye(3)
        return rate

    return _traction(surface, _each(gradient, rates), _each(known, lambda m: m), samples, gradient)


def isotropic_share(stress: Field) -> float | None:
    """Return how much of a stress is the same in all directions, as a pressure is.

    Parameters
    ----------
    stress : Field
        6 components that start with xx, yy, zz, or 9 row by row.

    Returns
    -------
    float or None
        Root mean square of the isotropic part ``tr(S)/3`` over that of the tensor: 0 for the viscous
        stress of a flow without divergence, near 1 where the pressure was left in;
        None for a stress that is zero everywhere.
    """
    nine = stress.components == 9
    diagonal = [0, 4, 8] if nine else [0, 1, 2]
    weights = np.ones(9) if nine else np.array([1.0, 1, 1, 2, 2, 2])
    isotropic, whole = 0.0, 0.0
    for values in _stores(stress):
        isotropic += float((values[:, diagonal].sum(axis=1) ** 2).sum()) / 3
        whole += float((values**2 @ weights).sum())
    return (isotropic / whole) ** 0.5 if whole > 0 else None


def _stores(field: Field) -> list[Array]:
    """Values of a field that are used and finite, as exported."""
    stores = ((AT_NODE, field.node), (AT_FACE, field.face), (AT_SAMPLE, field.sample))
    used = [values for at, values in stores if (field.where == at).any()]
    used.append(field.group[field.where == PER_GROUP])
    return [values[np.isfinite(values).all(axis=1)] for values in used]


def _require_symmetric(stress: Field) -> None:
    odd, whole = 0.0, 0.0
    for values in _stores(stress):
        odd += float(((values - values[:, _ROW_BY_ROW.T.ravel()]) ** 2).sum()) / 4
        whole += float((values**2).sum())
    if odd > _LARGEST_ANTISYMMETRY**2 * whole:
        raise FieldError(
            f"the stress is not symmetric: its antisymmetric part is {(odd / whole) ** 0.5:.2g} of it",
            where=stress.label or stress.name,
            remedy="A viscous stress is symmetric; give a velocity gradient as such, with the viscosity",
        )


def _each(field: Field, change: Callable[[Array], Array]) -> FieldArrays:
    """Every array of a field in SI units, changed alike."""
    found = field.arrays()
    node, face, sample = (change(values * found.scale) for values in (found.node, found.face, found.sample))
    return FieldArrays(found.where, node, face, change(found.group), sample, 1.0)


def _pointwise(surface: ControlSurface, places: list[NDArray[np.int8]]) -> NDArray[np.bool_]:
    present = np.logical_and.reduce([where != ABSENT for where in places])
    pointwise = np.logical_or.reduce([np.isin(where, (AT_NODE, AT_SAMPLE)) for where in places])
    if surface.kinds is not None:
        pointwise[surface.group_of_face[surface.kinds > 0]] = True
    return np.asarray(present & pointwise)


def _traction(
    surface: ControlSurface, tensor: FieldArrays, factor: FieldArrays | None, samples: Samples | None, source: Field
) -> Field:
    """Factor times tensor times normal, at quadrature points where needed, else on faces."""
    mesh = face_arrays_of(surface)
    parts = [tensor] if factor is None else [tensor, factor]
    present = tensor.where != ABSENT
    pointwise = _pointwise(surface, [part.where for part in parts])
    where = np.where(pointwise, AT_SAMPLE, np.where(present, AT_FACE, ABSENT)).astype(np.int8)
    found = replace(absent_field(surface, "traction", 3), where=where, label=source.label)
    if (where == AT_FACE).any():
        chosen = (where == AT_FACE)[surface.group_of_face]
        faces = np.flatnonzero(chosen)
        traction = np.einsum("fij,fj->fi", _on_faces(surface, tensor, faces), mean_normals(mesh, chosen))
        if factor is not None:
            traction *= _on_faces(surface, factor, faces)[:, None]
        face = np.full((surface.face_count, 3), np.nan)
        face[faces] = traction
        found = replace(found, face=face)
    if pointwise.any():
        at = _require_samples(surface, parts, pointwise, samples, source)
        normals = sample_normals(mesh, at)
        # one column of the tensor at a time: no array at quadrature points is larger than the traction
        sample = np.zeros_like(normals)
        for j in range(3):
            column = FieldArrays(
                where=tensor.where,
                node=tensor.node[:, :, j],
                face=tensor.face[:, :, j],
                group=tensor.group[:, :, j],
                sample=tensor.sample[:, :, j],
                scale=1.0,
            )
            sample += _at_samples(surface, mesh, column, pointwise, at) * normals[:, j, None]
        if factor is not None:
            sample *= _at_samples(surface, mesh, factor, pointwise, at)[:, None]
        broken = np.flatnonzero(~np.isfinite(sample).all(axis=1) & pointwise[surface.group_of_face[at.face]])
        if broken.size:
            face_number = int(at.face[broken[0]])
            group = surface.groups[int(surface.group_of_face[face_number])].name
            raise FieldError(
                f"{broken.size} tractions are not finite, the first on face {face_number} in group '{group}'",
                where=source.label or source.name,
                remedy="Export the field again, without NaN or infinity",
            )
        found = replace(found, sample=sample)
    return found


def _require_samples(
    surface: ControlSurface,
    parts: list[FieldArrays],
    pointwise: NDArray[np.bool_],
    samples: Samples | None,
    source: Field,
) -> Samples:
    where = source.label or source.name
    name = surface.groups[int(np.flatnonzero(pointwise)[0])].name
    if samples is None:
        raise FieldError(
            f"the traction on group '{name}' must be taken at quadrature points, and the flow has none",
            where=where,
            remedy="Give the samples of the groups that groups_to_sample names",
        )
    missing = np.flatnonzero(pointwise[surface.group_of_face] & (np.diff(samples.start) == 0))
    if missing.size:
        name = surface.groups[int(surface.group_of_face[missing[0]])].name
        raise FieldError(
            f"{missing.size} faces have no quadrature points, the first is face {missing[0]} in group '{name}'",
            where=where,
            remedy="Give the samples of the groups that groups_to_sample names",
        )
    for part in parts:
        if (part.where == AT_SAMPLE).any() and part.sample.shape[0] != samples.face.size:
            raise FieldError(
                f"there are {part.sample.shape[0]} sampled values, and {samples.face.size} quadrature points",
                where=where,
                remedy="Both must belong to the same faces",
            )
    return samples


def _on_faces(surface: ControlSurface, field: FieldArrays, faces: NDArray[np.int64]) -> Array:
    """Values on faces whose groups have one a face or one a group."""
    group = surface.group_of_face[faces]
    values = field.group[group]
    own = field.where[group] == AT_FACE
    values[own] = field.face[faces[own]]
    return values


def _at_samples(
    surface: ControlSurface, mesh: FaceArrays, field: FieldArrays, wanted: NDArray[np.bool_], samples: Samples
) -> Array:
    """Values at quadrature points in the groups wanted, NaN at others."""
    where = np.where(wanted, field.where, ABSENT)
    values = np.full((samples.face.size, *field.group.shape[1:]), np.nan)
    code = where[surface.group_of_face[samples.face]]
    values[code == AT_NODE] = interpolate_at_samples(mesh, (where == AT_NODE)[surface.group_of_face], field.node)
    for at in (AT_FACE, PER_GROUP):
        rows = np.flatnonzero(code == at)
        values[rows] = _on_faces(surface, field, samples.face[rows])
    values[code == AT_SAMPLE] = field.sample[code == AT_SAMPLE] if (code == AT_SAMPLE).any() else 0.0
    return values
