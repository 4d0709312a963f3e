"""Bodies and fields from formulas, with the exact table of integrals: by fine quadrature over the formulas.

Nothing of the integration of fluxmesh is used here: a body is a set of maps from the unit square, whose
derivatives come by the complex step, and the integrals are written out below.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.integral.table import WIDTH, IntegralTable, column_slice
from fluxmesh.surface.surface import ControlSurface

Array = NDArray[np.float64]
Map = Callable[[Any, Any], Any]
"""From u and v in [0, 1] to points (..., 3); u × v is the normal out of the body, and complex u, v are understood."""


@dataclass(frozen=True)
class Patch:
    """A part of a body: its group, its map, and how many pieces the coarsest mesh has along u and v."""

    group: str
    place: Map
    along: int
    across: int


@dataclass(frozen=True)
class Body:
    """A closed body: its patches, and the roles of its groups in their order."""

    kind: str
    patches: tuple[Patch, ...]
    roles: dict[str, str]


@dataclass(frozen=True)
class Fields:
    """Smooth fields: density (a number), velocity, pressure and traction as functions of place."""

    density: float
    velocity: Callable[[Array], Array]
    pressure: Callable[[Array], Array]
    traction: Callable[[Array], Array]


# ---- bodies -----------------------------------------------------------------------------------


def _stack(*parts: Any) -> Any:
    return np.stack(np.broadcast_arrays(*parts), axis=-1)


def ball(rng: np.random.Generator) -> Body:
    """An odd body about the origin, cut at its equator into two open groups or an open one and a wall."""
    bumps = rng.uniform(-0.12, 0.12, 3)
    size, stretch = rng.uniform(0.3, 1.5), rng.uniform(0.7, 1.3, 3)
    lobes = rng.integers(1, 4)

    def part(low: float, high: float) -> Map:
        def place(u: Any, v: Any) -> Any:
            polar, around = np.pi * (low + (high - low) * u), 2 * np.pi * v
            radius = 1 + bumps[0] * np.cos(polar) + np.sin(polar) ** 2 * (
                bumps[1] * np.cos(2 * around) + bumps[2] * np.sin(lobes * around) * np.cos(polar)
            )  # fmt: skip
            x = _stack(np.sin(polar) * np.cos(around), np.sin(polar) * np.sin(around), np.cos(polar))
            return size * radius[..., None] * x * stretch

        return place

    wall = bool(rng.integers(0, 2))
    return Body(
        "odd body",
        (Patch("top", part(0.0, 0.5), 4, 12), Patch("rest", part(0.5, 1.0), 4, 12)),
        {"top": "open", "rest": "wall" if wall else "open"},
    )


def tube(rng: np.random.Generator, *, bent: bool) -> Body:
    """A pipe or elbow, round or odd in section, wide or narrow along its way, with flat ends as ports."""
    radius, reach = rng.uniform(0.05, 0.3), rng.uniform(2.0, 5.0)
    wave, swell, lobes = rng.uniform(0.0, 0.15), rng.uniform(-0.3, 0.3), int(rng.integers(2, 4))
    turn = rng.uniform(0.4, 1.8) if bent else 0.0
    bend = radius * reach

    def section(s: Any, rim: Any, around: Any) -> Any:
        return rim * radius * (1 + swell * s * s) * (1 + wave * np.sin(lobes * around))

    def put(s: Any, rim: Any, around: Any) -> Any:
        size = section(s, rim, around)
        side, up = size * np.cos(around), size * np.sin(around)
        if not bent:
            return _stack(side, up, bend * s)
        angle = turn * s
        return _stack((bend + side) * np.cos(angle) - bend, up, (bend + side) * np.sin(angle))

    pieces = max(int(3 * (turn if bent else 1.0) * reach / 4), 2)
    return Body(
        "elbow" if bent else "pipe",
        (
            Patch("feed", lambda u, v: put(0 * u, v, 2 * np.pi * u), 12, 3),
            Patch("wall", lambda u, v: put(v, 0 * v + 1, 2 * np.pi * u), 12, pieces),
            Patch("drain", lambda u, v: put(0 * u + 1, u, 2 * np.pi * v), 4, 12),
        ),
        {"feed": "inlet", "drain": "outlet", "wall": "wall"},
    )


def mesh(body: Body, fineness: float) -> tuple[Array, NDArray[np.int64], dict[str, NDArray[np.int64]]]:
    """Points, triangles and the faces of each group, points welded where patches meet."""
    points, faces, owner = [], [], []
    count = 0
    for patch in body.patches:
        n, m = (max(round(fineness * k), 2) for k in (patch.along, patch.across))
        u, v = np.meshgrid(np.arange(n + 1) / n, np.arange(m + 1) / m, indexing="ij")
        points.append(np.asarray(patch.place(u, v), dtype=np.float64).reshape(-1, 3))
        i, j = np.meshgrid(np.arange(n), np.arange(m), indexing="ij")
        a, b = (i * (m + 1) + j).ravel(), ((i + 1) * (m + 1) + j).ravel()
        odd = ((i + j) % 2 == 1).ravel()[:, None]
        one = np.where(odd, np.column_stack([a, b, a + 1]), np.column_stack([a, b, b + 1]))
        two = np.where(odd, np.column_stack([b, b + 1, a + 1]), np.column_stack([a, b + 1, a + 1]))
        rows = np.concatenate([one, two]) + count
        faces.append(rows)
        owner += [patch.group] * len(rows)
        count += len(points[-1])
    all_points = np.concatenate(points)
    size = float(np.ptp(all_points, axis=0).max())
    _, first, weld = np.unique(np.round(all_points / size, 10) + 0.0, axis=0, return_index=True, return_inverse=True)
    rows = weld.ravel()[np.concatenate(faces)]
    sound = (rows[:, 0] != rows[:, 1]) & (rows[:, 1] != rows[:, 2]) & (rows[:, 2] != rows[:, 0])
    names = np.array(owner)[sound]
    return all_points[first], rows[sound], {name: np.flatnonzero(names == name) for name in body.roles}


# ---- fields -----------------------------------------------------------------------------------


def smooth_fields(rng: np.random.Generator, body: Body, *, rough: float = 1.0) -> Fields:
    """Smooth fields that vary over the size of the body; they obey no law, so a residual is a figure like any other."""
    corners = np.concatenate([np.asarray(p.place(*np.meshgrid(*[np.linspace(0, 1, 5)] * 2))) for p in body.patches])
    size = float(np.ptp(corners.reshape(-1, 3), axis=0).max())
    waves = rng.normal(0.0, rough * 1.5 / size, (3, 3))
    phases, mean = rng.uniform(0, 2 * np.pi, (2, 3)), rng.normal(0.0, 1.0, 3) + np.array([0.0, 0.0, 2.0])
    level, swing, slope = rng.uniform(1e3, 1e5), rng.uniform(5e2, 1e4), rng.normal(0.0, 3e3 / size, 3)

    def velocity(x: Array) -> Array:
        return mean + np.sin(x @ waves.T + phases[0])

    def pressure(x: Array) -> Array:
        return np.asarray(level + x @ slope + swing * np.cos(x @ waves[0] + phases[1, 0]))

    def traction(x: Array) -> Array:
        return np.asarray(40.0 * np.cos(x @ waves[1:].T @ np.ones((2, 3)) + phases[1]))

    return Fields(float(rng.uniform(1.0, 1200.0)), velocity, pressure, traction)


# ---- integrals --------------------------------------------------------------------------------


def exact_table(
    body: Body, fields: Mapping[str, Fields], origin: Array, *, cells: int = 12, order: int = 8
) -> IntegralTable:
    """The table over the body itself."""
    nodes, weights = np.polynomial.legendre.leggauss(order)
    grid = ((np.arange(cells)[:, None] + (nodes + 1) / 2) / cells).ravel()
    weight = np.tile(weights / 2 / cells, cells)
    u, v = np.meshgrid(grid, grid, indexing="ij")
    rows = {name: np.zeros(WIDTH) for name in body.roles}
    for patch in body.patches:
        x, normal = frame(patch.place, u, v)
        area = np.outer(weight, weight)[..., None] * normal
        rows[patch.group] += integrals(x.reshape(-1, 3), area.reshape(-1, 3), fields[patch.group], origin)
    return IntegralTable(np.array(list(rows.values())), origin)


def frame(place: Map, u: Any, v: Any) -> tuple[Array, Array]:
    """Points, and the vector areas of their surroundings, by the complex step."""
    step = 1e-30
    along = np.imag(place(u + 1j * step, v + 0j)) / step
    across = np.imag(place(u + 0j, v + 1j * step)) / step
    return np.asarray(place(u, v), dtype=np.float64), np.cross(along, across)


def facet_table(surface: ControlSurface, fields: Fields, origin: Array) -> IntegralTable:
    """The table of the fields over the facets of a mesh, by a product rule of high order on each."""
    nodes, weights = np.polynomial.legendre.leggauss(6)
    s, w = (nodes + 1) / 2, weights / 2
    a, b = np.meshgrid(s, s, indexing="ij")
    first, second = a.ravel()[:, None], ((1 - a) * b).ravel()[:, None]
    share = (np.outer(w, w) * (1 - a)).ravel()[:, None]
    triangles = surface.connectivity.reshape(-1, 3)
    rows = []
    for k in range(len(surface.groups)):
        p, q, r = (surface.points[triangles[surface.group_of_face == k, c]][:, None] for c in range(3))
        x = p + first * (q - p) + second * (r - p)
        rows.append(integrals(x.reshape(-1, 3), (share * np.cross(q - p, r - p)).reshape(-1, 3), fields, origin))
    return IntegralTable(np.array(rows), origin)


def integrals(x: Array, vector: Array, fields: Fields, origin: Array) -> Array:
    """One row of the table from quadrature points and their vector areas."""
    area = np.linalg.norm(vector, axis=1)
    normal = vector / np.where(area > 0, area, 1.0)[:, None]
    p, t, rho, u = fields.pressure(x), fields.traction(x), fields.density, fields.velocity(x)
    y = x - origin
    volume = (u * vector).sum(axis=1)
    mass, speed = rho * volume, np.linalg.norm(u, axis=1)
    dynamic = rho * speed**2 / 2
    pairs = ((0, 0), (1, 1), (2, 2), (1, 2), (0, 2), (0, 1))
    entries: dict[str, Any] = {
        "area": area,
        "area_vector": vector,
        "position": y * area[:, None],
        "position_normal": (y[:, :, None] * vector[:, None, :]).reshape(-1, 9),
        "square_normal": np.stack([y[:, k] * y[:, m] for k, m in pairs], axis=1)[:, :, None] * vector[:, None, :],
        "pressure_force": -p[:, None] * vector,
        "moment_of_pressure": -np.cross(y, p[:, None] * vector),
        "pressure_area": p * area,
        "viscous_force": t * area[:, None],
        "moment_of_viscous": np.cross(y, t * area[:, None]),
        "density_area": rho * area,
        "mass_flow": mass,
        "volume_flow": volume,
        "momentum_flux": u * mass[:, None],
        "moment_of_momentum_flux": np.cross(y, u * mass[:, None]),
        "kinetic_energy_flux": mass * speed**2 / 2,
        "reversed_mass_flow": np.maximum(-mass, 0.0),
        "normal_momentum": mass * (u * normal).sum(axis=1),
        "velocity_area": u * area[:, None],
        "speed_area": speed * area,
        "dynamic_pressure_area": dynamic * area,
        "dynamic_pressure_mass_flow": dynamic * mass,
        "pressure_volume_flow": p * volume,
        "pressure_mass_flow": p * mass,
        "viscous_power": (t * u).sum(axis=1) * area,
        "mass_flow_position": y * mass[:, None],
        "mass_flow_square": np.stack([y[:, k] * y[:, m] * mass for k, m in pairs], axis=1),
    }
    row = np.zeros(WIDTH)
    for name, values in entries.items():
        row[column_slice(name)] = values.reshape(len(x), -1).sum(axis=0)
    return row
