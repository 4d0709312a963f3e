"""The power law of turbulent flow in distance from the wall."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError
from fluxmesh.field.profiles.options import ProfileOptions
from fluxmesh.field.profiles.port import PortPatch, require_plane
from fluxmesh.field.profiles.wall_distance import wall_distance

__all__ = ["power_law_shape"]

_SMALLEST = 0.05  # below it, nothing but the very middle of the port would flow


def power_law_shape(patch: PortPatch, options: ProfileOptions) -> NDArray[np.float64]:
    """Return ``(d/d_max)^(1/n)`` at the samples, `d` the distance from the nearest wall.

    Parameters
    ----------
    patch : PortPatch
        The port, planar, of any outline.
    options : ProfileOptions
        `exponent` is n, 0.05 or more.

    Returns
    -------
    ndarray, shape (n_samples,), float64
        1 at the sample farthest from the wall; 0 for samples outside.

    Raises
    ------
    FieldError
        An exponent below 0.05, a port that is not planar or that
        no wall meets.

    Notes
    -----
    In a round pipe ``d/R = 1 - r/R`` (Schlichting, Boundary-Layer Theory,
    ch. XX, after Nikuradse; from memory). The slope at the wall is infinite:
    quadrature over the faces there errs with about the power 1 + 1/n of their
    size, in the factors of momentum and kinetic energy; the flow is scaled to
    the supplied one and does not err.
    """
    n = options.exponent
    if not (math.isfinite(n) and n >= _SMALLEST):
        raise FieldError(
            f"the exponent of the power law is {n:g}",
            where=f"group '{patch.name}'",
            remedy="Give n of u ~ d^(1/n), such as 7",
        )
    require_plane(patch)
    distance = wall_distance(patch, patch.samples.places)
    distance[patch.sample_triangle < 0] = 0.0
    return np.asarray((distance / distance.max()) ** (1.0 / n))
