"""How large a port's missing viscous force may be, from the velocity on the port alone."""

from __future__ import annotations

from typing import Final, NamedTuple

import numpy as np
from numpy.typing import NDArray

from fluxmesh.field.field import Field, constant_field
from fluxmesh.field.flow import Flow
from fluxmesh.integral.layout import AT_FACE, AT_NODE, PER_GROUP
from fluxmesh.surface.face_geometry import corners
from fluxmesh.surface.surface import ControlSurface

__all__ = ["ViscousEstimate", "port_viscous_estimate"]

Array = NDArray[np.float64]

# rims at rest leave this of a single-precision export: nothing worth a figure
_ROUND_OFF: Final = 1e-6


class ViscousEstimate(NamedTuple):
    """What the velocity on a port says of the viscous force there.

    Attributes
    ----------
    force : ndarray, shape (3,), float64
        The part that it fixes, on the fluid, N.
    scale : float
        What the part that it leaves open is to be compared with, N; not negative.
    text : str
        Both in a clause that follows the name of the port, with what they are worth.
    """

    force: Array
    scale: float
    text: str


def port_viscous_estimate(
    surface: ControlSurface, flow: Flow, group: int, viscosity: float | Field
) -> ViscousEstimate | None:
    """Estimate the viscous force on a port from the velocity on it.

    The traction of a Newtonian fluid without divergence, ``mu (du_i/dn + n_j du_j/dx_i)``
    (Batchelor, An Introduction to Fluid Dynamics, section 3.3; from memory), has three parts:

    - along the normal, ``2 mu n·du/dn``, which continuity turns into ``-2 mu div_s u``
      with the divergence within the surface;
    - within the surface, ``mu n_j grad_s u_j``;
    - within the surface, ``mu`` times the change along the normal of the tangential velocity.

    The velocity on the surface fixes the first two: `force` is their integral. Over a plane
    port it is an integral along the rim (Gauss), and zero where the rim is a wall at
    rest: the whole force then lies in the third part, of which the surface knows
    nothing. `scale` is ``∫ mu |grad_s u| dA``, the force if the velocity changed as quickly along
    the normal as it does within the port, and all one way. It is no bound, but generous
    where flow runs along a duct: at the ports of the shipped manifold, whose viscous
    force is known, that force is less than 3 % of it; in developed flow it is zero.

    Parameters
    ----------
    surface : ControlSurface
        The surface; curved faces count by their corners.
    flow : Flow
        The flow on it.
    group : int
        Index of the group.
    viscosity : float or Field
        Dynamic viscosity, Pa s.

    Returns
    -------
    ViscousEstimate or None
        None where the data allow none: the velocity is not on points, or the group has no viscosity
        on points, on faces or as one value.

    Raises
    ------
    FieldError
        A viscosity that is not a finite number.
    """
    velocity = flow.velocity
    known = viscosity if isinstance(viscosity, Field) else constant_field(surface, "viscosity", 1, viscosity)
    if velocity.where[group] != AT_NODE or known.where[group] not in (PER_GROUP, AT_FACE, AT_NODE):
        return None
    values = np.column_stack([surface.points, velocity.scale * velocity.node])
    if known.where[group] == AT_NODE:
        values = np.column_stack([values, known.scale * known.node])
    faces = np.flatnonzero(surface.group_of_face == group)
    triangles, owner = _triangles(surface, faces, values)
    if known.where[group] == AT_NODE:
        mu = triangles[:, :, 6].mean(axis=1)
    elif known.where[group] == AT_FACE:
        mu = known.scale * known.face[owner]
    else:
        mu = np.full(owner.size, float(known.group[group]))
    area_vectors, slopes = _surface_gradient(triangles[:, :, :3], triangles[:, :, 3:6])
    along = -2 * np.trace(slopes, axis1=1, axis2=2)[:, None] * area_vectors
    within = np.einsum("fi,fij->fj", area_vectors, slopes)
    force = (mu[:, None] * (along + within)).sum(axis=0)
    sizes = np.sqrt((slopes**2).sum(axis=(1, 2))) * np.linalg.norm(area_vectors, axis=1)
    scale = float((mu * sizes).sum())
    size = float(np.linalg.norm(force))
    fixed = f"{size:.2g} N" if size > _ROUND_OFF * scale else "nothing"
    text = (
        f"the velocity there, taken as free of divergence, fixes {fixed}; its unknown change along the normal would "
        f"make {scale:.2g} N if it were as large as that within the port (an order of magnitude only, and in a duct "
        "a generous one)"
    )
    return ViscousEstimate(force, scale, text)


def _triangles(surface: ControlSurface, faces: NDArray[np.int64], values: Array) -> tuple[Array, NDArray[np.int64]]:
    """Point values on triangles (n, 3, k), polygons as fans about their mean corner, and the face of each."""
    connectivity, offsets = corners(surface.connectivity, surface.offsets, surface.kinds)
    if offsets is None:
        return values[connectivity.reshape(-1, 3)[faces]], faces
    parts, owners = [], []
    sizes = offsets[faces + 1] - offsets[faces]
    for size in np.unique(sizes):
        some = faces[sizes == size]
        found = values[connectivity[offsets[some][:, None] + np.arange(size)]]
        if size > 3:
            middle = np.broadcast_to(found.mean(axis=1, keepdims=True), found.shape)
            found = np.stack([found, np.roll(found, -1, axis=1), middle], axis=2)
            some = np.repeat(some, size)
        parts.append(found.reshape(-1, 3, values.shape[1]))
        owners.append(some)
    return np.concatenate(parts), np.concatenate(owners)


def _surface_gradient(x: Array, u: Array) -> tuple[Array, Array]:
    """Area vectors of triangles (n, 3), and ``du_i/dx_j`` within them of linear values (n, 3, 3)."""
    edges = np.stack([x[:, 2] - x[:, 1], x[:, 0] - x[:, 2], x[:, 1] - x[:, 0]], axis=1)
    twice = np.cross(edges[:, 2], -edges[:, 1])
    square = np.einsum("fk,fk->f", twice, twice)
    square[square == 0.0] = np.inf  # no area, no weight
    # gradient of an area coordinate: normal × opposite edge over twice the area
    slopes = np.cross(twice[:, None], edges) / square[:, None, None]
    return twice / 2, np.einsum("fai,faj->fij", u, slopes)
