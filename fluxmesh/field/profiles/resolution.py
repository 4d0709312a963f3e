"""How well the quadrature points of a port resolve a profile."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from fluxmesh.field.profiles.options import SpeedTable
from fluxmesh.field.profiles.port import PortPatch
from fluxmesh.field.profiles.velocity import kinetic_energy_factor, momentum_factor, profile_velocity
from fluxmesh.integral.rules import TRIANGLE_DEGREE4
from fluxmesh.integral.samples import Samples
from fluxmesh.integral.shapes import quadratic_triangle

__all__ = ["ProfileFactors", "profile_factors", "resampled"]

_ENOUGH = 4000


@dataclass(frozen=True)
class ProfileFactors:
    """Factors of a profile on the faces as they are, and finely resolved.

    Attributes
    ----------
    momentum, kinetic_energy : float
        As the integration over the faces of the port has them.
    fine_momentum, fine_kinetic_energy : float
        Of the same profile on the divided triangles of the same port.
    """

    momentum: float
    kinetic_energy: float
    fine_momentum: float
    fine_kinetic_energy: float

    @property
    def momentum_error(self) -> float:
        """What the faces miss of the momentum flux, as a share of it."""
        return self.momentum / self.fine_momentum - 1.0


def resampled(patch: PortPatch, *, enough: int = _ENOUGH) -> PortPatch:
    """Return a port with quadrature points on its divided triangles.

    Parameters
    ----------
    patch : PortPatch
        The port.
    enough : int, optional
        Triangles are divided in four once, then until there are so many.

    Returns
    -------
    PortPatch
        The same port; its samples are no longer those of the kernel (`face` and
        `start` count triangles), none lies outside.
    """
    parts, levels = len(patch.triangles), 1
    while parts * 4**levels < enough:
        levels += 1
    pieces = np.eye(3)[None]
    for _ in range(levels):
        a, b, c = (pieces[:, k] for k in range(3))
        ab, bc, ca = (a + b) / 2, (b + c) / 2, (c + a) / 2
        rows = [(a, ab, ca), (ab, b, bc), (ca, bc, c), (bc, ca, ab)]
        pieces = np.concatenate([np.stack(row, axis=1) for row in rows])
    rule = np.array([point for point, _ in TRIANGLE_DEGREE4])
    weights = np.einsum("qa,pab->pqb", rule, pieces).reshape(-1, 3)
    share = np.tile([weight for _, weight in TRIANGLE_DEGREE4], len(pieces)) / len(pieces)
    value, by_u, by_v = quadratic_triangle(weights[:, 1], weights[:, 2])
    nodes = patch.points[patch.triangles]
    places, along_u, along_v = (np.einsum("qi,tik->tqk", table, nodes) for table in (value, by_u, by_v))
    vectors = 0.5 * np.cross(along_u, along_v) * share[:, None]
    owner = np.repeat(np.arange(parts), len(share))
    samples = Samples(
        places.reshape(-1, 3), vectors.reshape(-1, 3), owner, len(share) * np.arange(parts + 1, dtype=np.int64)
    )
    return replace(patch, samples=samples, sample_triangle=owner, sample_weights=np.tile(weights, (parts, 1)))


def profile_factors(
    patch: PortPatch, kind: str, *, exponent: float | None = None, table: SpeedTable | None = None
) -> ProfileFactors:
    """Return the factors of a profile, and how far the faces of the port resolve them.

    Parameters
    ----------
    patch : PortPatch
        The port.
    kind, exponent, table
        As `fluxmesh.field.profiles.velocity.profile_velocity`.

    Returns
    -------
    ProfileFactors
        They do not depend on the flow rate.

    Raises
    ------
    FieldError
        As `profile_velocity`.
    """
    # one call for both sets of places, so that the profile is worked out once
    fine, own = resampled(patch), patch.samples.face.size
    places = np.concatenate([patch.samples.places, fine.samples.places])
    vectors = np.concatenate([patch.samples.area_vectors, fine.samples.area_vectors])
    faces = np.concatenate([patch.samples.face, fine.samples.face])
    both = replace(
        patch,
        samples=Samples(places, vectors, faces, patch.samples.start),
        sample_triangle=np.concatenate([patch.sample_triangle, fine.sample_triangle]),
        sample_weights=np.concatenate([patch.sample_weights, fine.sample_weights]),
    )
    velocity: NDArray[np.float64] = profile_velocity(both, kind, patch.area, exponent=exponent, table=table)
    return ProfileFactors(
        momentum_factor(patch, velocity[:own]),
        kinetic_energy_factor(patch, velocity[:own]),
        momentum_factor(fine, velocity[own:]),
        kinetic_energy_factor(fine, velocity[own:]),
    )
