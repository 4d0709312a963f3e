"""Viscous traction from what was exported: a stress tensor, or a velocity gradient with the viscosity.

The traction on the fluid is ``t = tau · n``, with ``n`` out of the fluid. Each face that
meets at a point has its own normal, so tensors on points give no traction on points: they
are interpolated to the quadrature points of the kernel, and dotted with the normal there.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Final, NamedTuple

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError
from fluxmesh.field.field import Field, absent_field, constant_field, require_finite, require_positive
from fluxmesh.field.flow import Flow, face_arrays_of
from fluxmesh.integral.layout import ABSENT, AT_FACE, AT_NODE, AT_SAMPLE, PER_GROUP
from fluxmesh.integral.samples import Samples, interpolate_at_samples, mean_normals, sample_normals
from fluxmesh.surface.face_geometry import corners
from fluxmesh.surface.surface import ControlSurface

__all__ = [
    "ViscousEstimate",
    "groups_to_sample",
    "isotropic_share",
    "port_viscous_estimate",
    "traction_from_gradient",
    "traction_from_stress",
]

Array = NDArray[np.float64]

# where S_ij stands in an array of 6 components
_ORDERS: Final = {
    "xx yy zz xy yz xz": np.array([[0, 3, 5], [3, 1, 4], [5, 4, 2]]),
    "xx yy zz yz xz xy": np.array([[0, 5, 4], [5, 1, 3], [4, 3, 2]]),
}
# far above the rounding of a single-precision export (6e-8), far below any velocity gradient taken for a stress
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
    present = np.logical_and.reduce([part.present() for part in parts])
    pointwise = np.logical_or.reduce([(part.where == AT_NODE) | (part.where == AT_SAMPLE) for part in parts])
    if surface.kinds is not None:
        pointwise[surface.group_of_face[surface.kinds > 0]] = True
    return np.asarray(present & pointwise)


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
        The quadrature points that the flow has; at least all those of the groups
        that `groups_to_sample` names.

    Returns
    -------
    Field
        ``t_i = S_ij n_j`` (Cauchy; Batchelor, An Introduction to Fluid Dynamics,
        section 1.3; from memory), Pa: on faces, or at quadrature points in the order of
        `samples`, with NaN at those of other groups. A face of constant stress has the
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
    tensor = _matrices(stress, np.arange(9).reshape(3, 3) if stress.components == 9 else _ORDERS[order])
    _require_symmetric(tensor)
    return _traction(surface, tensor, None, samples)


def traction_from_gradient(
    surface: ControlSurface,
    gradient: Field,
    viscosity: float | Field,
    *,
    rows: str = "components",
    dilatation: bool = True,
    samples: Samples | None = None,
) -> Field:
    """Return the traction on the fluid of a velocity gradient in a Newtonian fluid.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    gradient : Field
        9 components, row by row, 1/s. On points, on faces, one value a group, or at
        the quadrature points of `samples`.
    viscosity : float or Field
        Dynamic viscosity, Pa s; of a turbulent mean flow the effective one, molecular
        plus eddy viscosity.
    rows : {"components", "directions"}, optional
        ``components``: a row is the gradient of one velocity component, ``G_ij =
        du_i/dx_j``, as VTK's own gradients are; ``directions``: a row is the
        derivative of all components along one direction, its transpose.
    dilatation : bool, optional
        Whether to take the stress that goes with a change of volume, ``-2/3 mu div u``;
        without divergence it vanishes.
    samples : Samples, optional
        The quadrature points that the flow has; at least all those of the groups
        that `groups_to_sample` names.

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
    if rows not in ("components", "directions"):
        raise FieldError(f"the rows of the gradient are '{rows}'", remedy="Allowed: components or directions")
    factor = viscosity if isinstance(viscosity, Field) else _one_viscosity(surface, viscosity)
    for part in (gradient, factor):
        require_finite(surface, part)
    require_positive(surface, factor)
    lacking = np.flatnonzero(gradient.present() & ~factor.present())
    if lacking.size:
        raise FieldError(
            "there is a velocity gradient, but no viscosity",
            where=f"group '{surface.groups[int(lacking[0])].name}'",
            remedy="Give the viscosity",
        )
    # the sum with the transpose is the same for either meaning of the rows
    matrices = _matrices(gradient, np.arange(9).reshape(3, 3))
    return _traction(surface, _mapped(matrices, lambda g: _rates(g, dilatation)), factor, samples)
