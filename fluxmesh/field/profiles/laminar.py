"""Developed laminar flow through an outline of any shape."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError
from fluxmesh.field.profiles.options import ProfileOptions
from fluxmesh.field.profiles.plane_mesh import (
    PlaneMesh,
    child_of,
    divided,
    loose_parts,
    quadratic_values,
    solve_poisson,
)
from fluxmesh.field.profiles.port import PortPatch, plane_coordinates, require_plane, require_wall

__all__ = ["laminar_shape", "laminar_solution"]

_ENOUGH = 4000
_MOST_QUADRATIC = 100_000


def laminar_shape(patch: PortPatch, options: ProfileOptions) -> NDArray[np.float64]:
    """Return the developed laminar profile at the samples.

    Parameters
    ----------
    patch : PortPatch
        The port, planar, of any outline, with holes or in several parts (which
        then share one pressure gradient).
    options : ProfileOptions
        None applies.

    Returns
    -------
    ndarray, shape (n_samples,), float64
        ``u`` of ``-lap u = 1`` over its largest value; 0 for samples outside.

    Raises
    ------
    FieldError
        A port that is not planar, or a part of it that no wall meets.
    """
    return laminar_solution(patch)


def laminar_solution(
    patch: PortPatch, *, enough: int = _ENOUGH, most_quadratic: int = _MOST_QUADRATIC
) -> NDArray[np.float64]:
    """Return the developed laminar profile at the samples, with the size of the mesh to choose.

    Parameters
    ----------
    patch : PortPatch
        The port.
    enough : int, optional
        Triangles are divided in four until there are so many; the outline
        stays as it is.
    most_quadratic : int, optional
        A port of more triangles gets linear elements: then their error, the
        square of the size of a triangle against that of the port, is small too,
        and the time stays short.

    Returns
    -------
    ndarray, shape (n_samples,), float64
        As `laminar_shape`.

    Raises
    ------
    FieldError
        As `laminar_shape`.

    Notes
    -----
    Developed flow in a straight duct: ``mu lap u = dp/dx``, no slip at the wall
    (White, Viscous Fluid Flow, ch. 3; from memory). Across a symmetry plane the
    slope is zero.
    """
    require_plane(patch)
    require_wall(patch)
    # in units of the port, so that tolerances and round-off do not depend on its size
    mesh = PlaneMesh(
        plane_coordinates(patch, patch.points) / patch.size, patch.triangles, np.zeros(len(patch.points), np.bool_)
    )
    mesh.fixed[patch.wall_edges] = True
    loose = loose_parts(mesh)
    if loose:
        raise FieldError(
            f"{loose} separate part{'s' if loose > 1 else ''} of the port meet no wall, so nothing holds the flow back",
            where=f"group '{patch.name}'",
            remedy="Check the roles of the groups around it, or supply a uniform profile",
        )
    inside = np.flatnonzero(patch.sample_triangle >= 0)
    triangle, weights = patch.sample_triangle[inside], patch.sample_weights[inside]
    while len(mesh.triangles) < enough:
        mesh = divided(mesh)
        triangle, weights = child_of(triangle, weights)
    solution = solve_poisson(mesh, quadratic=len(mesh.triangles) <= most_quadratic)
    speed = np.zeros(patch.sample_triangle.size)
    # a quadratic may dip below zero by a trifle in the corners of an outline
    speed[inside] = np.maximum(quadratic_values(weights, solution[mesh.triangles[triangle]]), 0.0)
    return speed / float(solution.max())
