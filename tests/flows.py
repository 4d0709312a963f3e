"""Exact flows to lay on surfaces: velocity, pressure and viscous stress as functions of position.

Positions are arrays (n, 3). Velocities are analytic functions that also take
complex positions, so that the viscous stress follows from them without error.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fluxmesh.field.flow import Flow, lay_flow
from fluxmesh.surface.surface import ControlSurface

Array = NDArray[np.float64]
Values = Callable[[Any], Any]


def velocity_gradient(velocity: Values, at: Array) -> Array:
    """Return ``du_i/dx_j``, shape (n, 3, 3), by the complex step (Squire and Trapp 1998, SIAM Rev. 40; from memory)."""
    step = 1e-30
    columns = [np.imag(velocity(at + 1j * step * np.eye(3)[j])) / step for j in range(3)]
    return np.stack(columns, axis=2)


def face_frames(surface: ControlSurface) -> tuple[Array, Array]:
    """Return the mean of the corners and the unit normal (by Newell's sum) of straight faces, shape (n, 3) each."""
    offsets = surface.offsets
    if offsets is None:
        offsets = np.arange(surface.face_count + 1) * 3
    sizes = np.diff(offsets)
    corners = surface.points[surface.connectivity]
    middle = np.add.reduceat(corners, offsets[:-1]) / sizes[:, None]
    about = corners - np.repeat(middle, sizes, axis=0)
    following = np.arange(corners.shape[0]) + 1
    following[offsets[1:] - 1] = offsets[:-1]
    normal = np.add.reduceat(np.cross(about, about[following]), offsets[:-1])
    return middle, normal / np.linalg.norm(normal, axis=1)[:, None]


@dataclass(frozen=True)
class ExactFlow:
    """A flow known everywhere; `viscosity` is dynamic, in Pa s."""

    density: float
    velocity: Values
    pressure: Values
    viscosity: float = 0.0

    def stress(self, at: Array) -> Array:
        """Return the viscous stress ``mu (grad u + grad u^T)``, shape (n, 3, 3), Pa."""
        gradient = velocity_gradient(self.velocity, at)
        return self.viscosity * (gradient + gradient.transpose(0, 2, 1))

    def traction(self, at: Array, normal: Array) -> Array:
        """Return the viscous traction on the fluid whose outward normals are given, shape (n, 3), Pa."""
        return np.einsum("nij,nj->ni", self.stress(at), normal)

    def lay(self, surface: ControlSurface, **options: Any) -> Flow:
        """Return the flow on a surface: velocity and pressure on points, traction on faces."""
        given: dict[str, Any] = {
            "density": self.density,
            "velocity": self.velocity(surface.points),
            "pressure": self.pressure(surface.points),
        }
        if self.viscosity:
            given["traction"] = self.traction(*face_frames(surface))
        return lay_flow(surface, **{**given, **options})


def _columns(*parts: Any) -> Any:
    return np.stack(np.broadcast_arrays(*parts), axis=-1)


def _radius(x: Any) -> Any:
    return np.sqrt((x * x).sum(axis=-1))


# ---- viscous flows --------------------------------------------------------------------------


def landau_squire(a: float, density: float, kinematic: float) -> ExactFlow:
    """Return the round jet from a point force along z (Landau 1944; Squire 1951; Landau and Lifshitz section 23)."""

    def velocity(x: Any) -> Any:
        r = _radius(x)
        c = x[..., 2] / r
        radial = 2 * kinematic / r * ((a * a - 1) / (a - c) ** 2 - 1)
        polar = -2 * kinematic / (r * (a - c))
        return _columns(
            (radial + polar * c) * x[..., 0] / r,
            (radial + polar * c) * x[..., 1] / r,
            radial * c + polar * (c * c - 1),
        )

    def pressure(x: Any) -> Any:
        r = _radius(x)
        c = x[..., 2] / r
        return 4 * density * kinematic**2 * (a * c - 1) / (r * (a - c)) ** 2

    return ExactFlow(density, velocity, pressure, density * kinematic)


def landau_force(a: float) -> float:
    """Return the force of the Landau-Squire jet over ``density × kinematic viscosity²``."""
    return 16 * np.pi * a * (1 + 4 / (3 * (a * a - 1)) - a / 2 * np.log((a + 1) / (a - 1)))


def stokes_sphere(radius: float, speed: float, viscosity: float, density: float) -> ExactFlow:
    """Return creeping flow along z past a sphere (Stokes 1851; Batchelor section 4.9)."""

    def velocity(x: Any) -> Any:
        r = _radius(x)
        k = radius / r
        along = speed * (1 - 0.75 * k - 0.25 * k**3)
        radial = speed * x[..., 2] / r * (-0.75 * k + 0.75 * k**3)
        return _columns(radial * x[..., 0] / r, radial * x[..., 1] / r, along + radial * x[..., 2] / r)

    def pressure(x: Any) -> Any:
        return -1.5 * viscosity * radius * speed * x[..., 2] / _radius(x) ** 3

    return ExactFlow(density, velocity, pressure, viscosity)


def rotlet(torque: ArrayLike, viscosity: float, density: float) -> ExactFlow:
    """Return creeping flow about a point torque (Batchelor section 4.10; from memory)."""
    axis = np.asarray(torque, dtype=float)

    def velocity(x: Any) -> Any:
        return np.cross(axis, x) / (8 * np.pi * viscosity * _radius(x)[..., None] ** 3)

    return ExactFlow(density, velocity, lambda x: 0.0 * x[..., 0], viscosity)


def couette(inner: float, outer: float, spin: tuple[float, float], viscosity: float, density: float) -> ExactFlow:
    """Return flow between cylinders that turn about z at the rates `spin` (Taylor 1923)."""
    a = (spin[1] * outer**2 - spin[0] * inner**2) / (outer**2 - inner**2)
    b = (spin[0] - spin[1]) * (inner * outer) ** 2 / (outer**2 - inner**2)

    def velocity(x: Any) -> Any:
        rate = a + b / (x[..., 0] ** 2 + x[..., 1] ** 2)
        return _columns(-rate * x[..., 1], rate * x[..., 0], 0 * x[..., 2])

    def pressure(x: Any) -> Any:
        s = x[..., 0] ** 2 + x[..., 1] ** 2
        return density * (a * a * s / 2 + a * b * np.log(s) - b * b / (2 * s))

    return ExactFlow(density, velocity, pressure, viscosity)


def kovasznay(reynolds: float) -> ExactFlow:
    """Return flow behind a plane grid, density 1 (Kovasznay 1948, Proc. Camb. Phil. Soc. 44; from memory)."""
    rate = reynolds / 2 - np.sqrt(reynolds**2 / 4 + 4 * np.pi**2)

    def velocity(x: Any) -> Any:
        wave, decay = 2 * np.pi * x[..., 1], np.exp(rate * x[..., 0])
        return _columns(1 - decay * np.cos(wave), rate / (2 * np.pi) * decay * np.sin(wave), 0 * x[..., 2])

    return ExactFlow(1.0, velocity, lambda x: (1 - np.exp(2 * rate * x[..., 0])) / 2, 1 / reynolds)


def burgers_vortex(strain: float, circulation: float, kinematic: float, density: float) -> ExactFlow:
    """Return the stretched vortex along z (Burgers 1948; pressure integrated in closed form)."""
    from scipy.special import expi

    k = strain / (4 * kinematic)
    swirl = circulation / (2 * np.pi)

    def velocity(x: Any) -> Any:
        s = x[..., 0] ** 2 + x[..., 1] ** 2
        rate = swirl * (1 - np.exp(-k * s)) / s
        return _columns(
            -strain / 2 * x[..., 0] - rate * x[..., 1], -strain / 2 * x[..., 1] + rate * x[..., 0], strain * x[..., 2]
        )

    def pressure(x: Any) -> Any:
        s = x[..., 0] ** 2 + x[..., 1] ** 2
        turning = -((1 - np.exp(-k * s)) ** 2) / (2 * s) + k * (expi(-k * s) - expi(-2 * k * s))
        return density * (-(strain**2) * (s / 8 + x[..., 2] ** 2 / 2) + swirl**2 * turning)

    return ExactFlow(density, velocity, pressure, density * kinematic)


def stagnation(rate: float, density: float, viscosity: float) -> ExactFlow:
    """Return ``u = (a x, -a y, 0)`` with ``p = -density a² (x² + y²) / 2``: exact Navier-Stokes, uniform stress."""
    return ExactFlow(
        density,
        lambda x: rate * _columns(x[..., 0], -x[..., 1], 0 * x[..., 2]),
        lambda x: -density * rate**2 * (x[..., 0] ** 2 + x[..., 1] ** 2) / 2,
        viscosity,
    )


def poiseuille(radius: float, mean: float, viscosity: float, density: float) -> ExactFlow:
    """Return developed laminar flow along z, with zero pressure at z = 0 (Hagen; Poiseuille; White ch. 6)."""
    slope = 8 * viscosity * mean / radius**2

    def velocity(x: Any) -> Any:
        s = (x[..., 0] ** 2 + x[..., 1] ** 2) / radius**2
        return _columns(0 * s, 0 * s, 2 * mean * (1 - s))

    return ExactFlow(density, velocity, lambda x: -slope * x[..., 2], viscosity)


# ---- inviscid flows -------------------------------------------------------------------------


def beltrami(a: float, b: float, c: float, density: float) -> ExactFlow:
    """Return the ABC flow, whose vorticity is its velocity (Arnold 1965; from memory)."""

    def velocity(x: Any) -> Any:
        sine, cosine = np.sin(x), np.cos(x)
        return _columns(
            a * sine[..., 2] + c * cosine[..., 1],
            b * sine[..., 0] + a * cosine[..., 2],
            c * sine[..., 1] + b * cosine[..., 0],
        )

    return ExactFlow(density, velocity, lambda x: -density / 2 * (velocity(x) ** 2).sum(axis=-1))


def hill_vortex(density: float) -> ExactFlow:
    """Return the inside of Hill's spherical vortex of radius 1 in a stream of 1 (Hill 1894), in its own frame."""

    def velocity(x: Any) -> Any:
        a, b, c = x[..., 0], x[..., 1], x[..., 2]
        return 1.5 * _columns(a * c, b * c, 1 - c * c - 2 * (a * a + b * b))

    def pressure(x: Any) -> Any:
        s, z = x[..., 0] ** 2 + x[..., 1] ** 2, x[..., 2] ** 2
        return density * 9 / 8 * (s * s - s - z * z + 2 * z)

    return ExactFlow(density, velocity, pressure)


def irrotational(density: float, velocity: Values, stream: ArrayLike) -> ExactFlow:
    """Return a potential flow with Bernoulli's pressure, zero where the speed is that of the stream."""
    head = float(np.dot(stream, stream))
    return ExactFlow(density, velocity, lambda x: density / 2 * (head - (velocity(x) ** 2).sum(axis=-1)))


def lifting_cylinder(density: float, speed: float, circulation: float, radius: float) -> ExactFlow:
    """Return flow along x past a cylinder about z, lift along +y (Batchelor section 6.6)."""

    def velocity(x: Any) -> Any:
        s = x[..., 0] ** 2 + x[..., 1] ** 2
        square = radius**2 / s
        swirl = circulation / (2 * np.pi * s)
        ratio = (x[..., 0] ** 2 - x[..., 1] ** 2) / s
        cross = 2 * x[..., 0] * x[..., 1] / s
        return _columns(
            speed * (1 - square * ratio) + swirl * x[..., 1],
            -speed * square * cross - swirl * x[..., 0],
            0 * s,
        )

    return irrotational(density, velocity, (speed, 0, 0))


def ideal_sphere(density: float, speed: float, radius: float) -> ExactFlow:
    """Return potential flow along z past a sphere (Batchelor section 6.8; from memory)."""

    def velocity(x: Any) -> Any:
        r = _radius(x)
        cube = speed * radius**3 / (2 * r**3)
        dipole = -3 * cube * x[..., 2] / (r * r)
        return _columns(dipole * x[..., 0], dipole * x[..., 1], speed + cube + dipole * x[..., 2])

    return irrotational(density, velocity, (0, 0, speed))


def sources(density: float, stream: ArrayLike, *placed: tuple[float, ArrayLike]) -> ExactFlow:
    """Return point sources (m³/s, place) in a uniform stream."""

    def velocity(x: Any) -> Any:
        total = x * 0 + np.asarray(stream)
        for strength, place in placed:
            away = x - np.asarray(place)
            total = total + strength / (4 * np.pi) * away / _radius(away)[..., None] ** 3
        return total

    return irrotational(density, velocity, stream)
