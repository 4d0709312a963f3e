"""Bodies to test with, as plain arrays: points, faces in cyclic order, and named groups.

Faces run so that normals point out of the body. Nothing here uses the library's
own geometry, except to make a `ControlSurface` of the arrays in the end.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fluxmesh.surface.build import control_surface
from fluxmesh.surface.surface import ControlSurface

Array = NDArray[np.float64]
Face = NDArray[np.int64]

SIDES = ("x-", "x+", "y-", "y+", "z-", "z+")


@dataclass(frozen=True, eq=False)
class Solid:
    """A closed surface: points (n, 3), faces as rows of point numbers, and the faces of each named group."""

    points: Array
    faces: list[Face]
    groups: dict[str, Face]
    curved: bool = False

    def surface(self, roles: Mapping[str, str] | None = None, rest: str = "open", **options: Any) -> ControlSurface:
        """Return the control surface; groups without a role of their own get the role `rest`."""
        named = {name: ((roles or {}).get(name, rest), faces) for name, faces in self.groups.items()}
        return control_surface(self.points, self.faces, named, curved=self.curved, **options)


def one_group(points: ArrayLike, faces: Sequence[ArrayLike] | NDArray[Any], *, curved: bool = False) -> Solid:
    """Return a body whose faces all lie in the group ``skin``."""
    rows = [np.asarray(face, dtype=np.int64) for face in faces]
    return Solid(np.asarray(points, dtype=np.float64), rows, {"skin": np.arange(len(rows))}, curved)


# ---- changes that keep the shape ------------------------------------------------------------


def mapped(solid: Solid, place: Callable[[Array], Array]) -> Solid:
    """Return the body with every point put where `place` says."""
    return replace(solid, points=np.asarray(place(solid.points)))


def moved(solid: Solid, rotation: Array, shift: ArrayLike) -> Solid:
    """Return the body turned about the origin, then shifted."""
    return mapped(solid, lambda x: x @ rotation.T + np.asarray(shift))


def rigid_motion(rng: np.random.Generator, size: float = 1.0) -> tuple[Array, Array]:
    """Return a random rotation (evenly spread over all) and a random shift."""
    w, x, y, z = (q := rng.standard_normal(4)) / np.linalg.norm(q)
    rotation = np.array(
        [
            [1 - 2 * (y * y + z * z), 2 * (x * y - w * z), 2 * (x * z + w * y)],
            [2 * (x * y + w * z), 1 - 2 * (x * x + z * z), 2 * (y * z - w * x)],
            [2 * (x * z - w * y), 2 * (y * z + w * x), 1 - 2 * (x * x + y * y)],
        ]
    )
    return rotation, size * rng.standard_normal(3)


def in_triangles(solid: Solid) -> Solid:
    """Return the body with every straight face cut into triangles from its first corner."""
    pieces = [np.column_stack([np.full(f.size - 2, f[0]), f[1:-1], f[2:]]) for f in solid.faces]
    counts = np.array([len(piece) for piece in pieces])
    starts = np.concatenate([[0], np.cumsum(counts)])
    groups = {
        name: np.concatenate([np.arange(starts[f], starts[f + 1]) for f in faces])
        for name, faces in solid.groups.items()
    }
    return Solid(solid.points, list(np.concatenate(pieces)), groups)


def vertex_split(solid: Solid) -> Solid:
    """Return the body with points of its own for every face, as programs export it that cut at sharp edges."""
    sizes = [face.size for face in solid.faces]
    starts = np.concatenate([[0], np.cumsum(sizes)])
    faces = [np.arange(start, start + size) for start, size in zip(starts, sizes)]
    return replace(solid, points=solid.points[np.concatenate(solid.faces)], faces=faces)


def turned(solid: Solid, which: NDArray[np.bool_] | None = None) -> Solid:
    """Return the body with all faces, or some, run the other way (straight faces only)."""
    chosen = np.ones(len(solid.faces), np.bool_) if which is None else which
    return replace(solid, faces=[face[::-1] if turn else face for face, turn in zip(solid.faces, chosen)])


def together(**parts: Solid) -> Solid:
    """Return several bodies as one surface; group ``skin`` of the part ``a`` becomes ``a``, others ``a:name``."""
    points: list[Array] = []
    faces: list[Face] = []
    groups: dict[str, Face] = {}
    count = 0
    for part, solid in parts.items():
        for name, members in solid.groups.items():
            groups[part if name == "skin" else f"{part}:{name}"] = members + len(faces)
        faces += [face + count for face in solid.faces]
        points.append(solid.points)
        count += len(solid.points)
    return Solid(np.concatenate(points), faces, groups)


def quadratic(solid: Solid) -> Solid:
    """Return the same shape in six-point triangles, mid-side points halfway along the straight edges."""
    flat = in_triangles(solid)
    points, rows = _with_midsides(flat.points, np.array(flat.faces))
    return Solid(points, list(rows), flat.groups, curved=True)


# ---- polyhedra ------------------------------------------------------------------------------


def blocks(filled: NDArray[np.bool_], low: ArrayLike, high: ArrayLike, *, quads: bool = False) -> Solid:
    """Return the body of the filled cells of a grid between two corners, with a group for each of `SIDES`."""
    shape = np.array(filled.shape)
    padded = np.pad(filled, 1)
    corners: list[Array] = []
    owner: list[NDArray[Any]] = []
    for k, side in enumerate(SIDES):
        axis, up = divmod(k, 2)
        beyond = np.roll(padded, -1 if up else 1, axis=axis)[1:-1, 1:-1, 1:-1]
        cells = np.argwhere(filled & ~beyond)
        one, two = np.eye(3, dtype=np.int64)[[(axis + 1) % 3, (axis + 2) % 3]]
        base = cells + up * np.eye(3, dtype=np.int64)[axis]
        quad = np.stack([base, base + one, base + one + two, base + two], axis=1)
        corners.append(quad if up else quad[:, ::-1])
        owner.append(np.full(len(cells), side))
    lattice = np.concatenate(corners)
    nodes, flat = np.unique(lattice.reshape(-1, 3), axis=0, return_inverse=True)
    low, high = np.asarray(low, dtype=float), np.asarray(high, dtype=float)
    names = np.concatenate(owner)
    groups = {side: np.flatnonzero(names == side) for side in SIDES if (names == side).any()}
    solid = Solid(low + nodes / shape * (high - low), list(flat.reshape(-1, 4)), groups)
    return solid if quads else in_triangles(solid)


def box(low: ArrayLike, high: ArrayLike, cells: int | Sequence[int] = 1, *, quads: bool = False) -> Solid:
    """Return a box with `cells` a side."""
    counts = [cells] * 3 if isinstance(cells, int) else list(cells)
    return blocks(np.ones(counts, np.bool_), low, high, quads=quads)


def angle_block(cells: int, low: ArrayLike = (0, 0, 0), high: ArrayLike = (1, 1, 1), *, quads: bool = False) -> Solid:
    """Return an L-shaped (non-convex) body: a box without one quarter, `cells` (even) a side."""
    filled = np.ones([cells] * 3, np.bool_)
    filled[cells // 2 :, cells // 2 :, :] = False
    return blocks(filled, low, high, quads=quads)


def prism(contour: Array, low: float, high: float, layers: int = 1) -> Solid:
    """Return a plane contour (n, 2), counter-clockwise, extruded along z; each end is one polygon."""
    count = len(contour)
    levels = np.linspace(low, high, layers + 1)
    points = np.concatenate([np.column_stack([contour, np.full(count, z)]) for z in levels])
    here = np.arange(count)
    there = np.roll(here, -1)
    sides = np.concatenate(
        [np.column_stack([here, there, there + count, here + count]) + k * count for k in range(layers)]
    )
    faces = [*sides, here[::-1], here + layers * count]
    last = len(faces)
    return Solid(points, faces, {"side": np.arange(last - 2), "z-": np.array([last - 2]), "z+": np.array([last - 1])})


def any_polyhedron(seed: int) -> Solid:
    """Return a random closed polyhedron: convex, star-shaped, warped, extruded or hollow, moved at random."""
    rng = np.random.default_rng(seed)
    kind = seed % 5
    if kind == 0:
        sites = rng.standard_normal((int(rng.integers(5, 20)), 3))
        solid = hull(sites / np.linalg.norm(sites, axis=1)[:, None] * [1.5, 1.0, 0.8])  # every point is a corner
    elif kind == 1:
        ball = sphere(1)
        solid = replace(ball, points=ball.points * rng.uniform(0.4, 1.6, len(ball.points))[:, None])
    elif kind == 2:
        cube = box((0, 0, 0), (1, 1.3, 0.7), 2, quads=True)  # its quads become twisted
        solid = replace(cube, points=cube.points + 0.08 * rng.standard_normal(cube.points.shape))
    elif kind == 3:
        angle = np.linspace(0, 2 * np.pi, int(rng.integers(5, 12)), endpoint=False)
        ring = rng.uniform(0.3, 1.5, angle.size)[:, None] * np.column_stack([np.cos(angle), np.sin(angle)])
        solid = prism(ring, -0.5, 0.8, 2)  # its ends are non-convex polygons
    else:
        filled = np.ones((3, 3, 3), np.bool_)
        filled[1, 1, 1] = False
        solid = blocks(filled, (-1, -1, -1), (1, 2, 1), quads=bool(rng.integers(2)))
    return one_group(moved(solid, *rigid_motion(rng)).points, solid.faces)


def hull(points: Array) -> Solid:
    """Return the convex hull of points, in triangles."""
    from scipy.spatial import ConvexHull

    found = ConvexHull(points)
    rows = found.simplices.astype(np.int64)
    inward = np.einsum("fk,fk->f", _normals(points, rows), found.equations[:, :3]) < 0
    rows[inward] = rows[inward, ::-1]
    return one_group(points, rows)


def _normals(points: Array, rows: Face) -> Array:
    a, b, c = (points[rows[:, k]] for k in range(3))
    return np.cross(b - a, c - a)


# ---- curved bodies --------------------------------------------------------------------------


def _icosphere(level: int) -> tuple[Array, Face]:
    from trimesh.creation import icosphere

    ball = icosphere(subdivisions=level)
    points = np.array(ball.vertices)
    return points / np.linalg.norm(points, axis=1)[:, None], np.array(ball.faces, dtype=np.int64)


def _with_midsides(points: Array, rows: Face) -> tuple[Array, Face]:
    """Return points and six-point triangles, mid-side points halfway for now."""
    edges = np.sort(np.concatenate([rows[:, [0, 1]], rows[:, [1, 2]], rows[:, [2, 0]]]), axis=1)
    unique, number = np.unique(edges, axis=0, return_inverse=True)
    mids = points[unique].mean(axis=1)
    count = len(rows)
    extra = len(points) + number.reshape(3, count).T
    return np.concatenate([points, mids]), np.concatenate([rows, extra], axis=1)


def sphere(level: int, radius: float = 1.0, centre: ArrayLike = (0, 0, 0), *, curved: bool = False) -> Solid:
    """Return a sphere of 20 × 4**level triangles with points on it, straight or quadratic."""
    points, rows = _icosphere(level)
    if curved:
        points, rows = _with_midsides(points, rows)
        points /= np.linalg.norm(points, axis=1)[:, None]
    return one_group(np.asarray(centre) + radius * points, rows, curved=curved)


def odd_body(level: int, centre: ArrayLike = (0, 0, 0), *, curved: bool = False) -> Solid:
    """Return a smooth body without any symmetry, of radius 0.7 to 1.5 about its centre."""

    def bulge(x: Array) -> Array:
        a, b, c = x.T
        return x * (1 + 0.2 * a * b + 0.15 * c**3 - 0.2 * b * c + 0.12 * a + 0.1 * a**2 * c)[:, None]

    ball = mapped(sphere(level, curved=curved), bulge)
    return replace(ball, points=ball.points + np.asarray(centre))


def torus(major: float, minor: float, around: int, across: int, *, quadratic: int = 0) -> Solid:
    """Return a torus about z, in quads: straight, or quadratic with 8 or 9 points a face."""
    step = 2 if quadratic else 1
    u = np.arange(step * around) * (2 * np.pi / (step * around))
    v = np.arange(step * across) * (2 * np.pi / (step * across))
    u, v = (a.ravel() for a in np.meshgrid(u, v, indexing="ij"))
    distance = major + minor * np.cos(v)
    points = np.column_stack([distance * np.cos(u), distance * np.sin(u), minor * np.sin(v)])
    number = np.arange(points.shape[0]).reshape(step * around, step * across)

    def at(i: int, j: int) -> NDArray[np.int64]:
        return np.roll(number, (-i, -j), axis=(0, 1))[::step, ::step].ravel()

    s = step
    columns = [at(0, 0), at(s, 0), at(s, s), at(0, s)]
    if quadratic:
        columns += [at(1, 0), at(2, 1), at(1, 2), at(0, 1), at(1, 1)]
    rows = np.column_stack(columns[: quadratic or 4])
    return one_group(points, rows, curved=bool(quadratic))


def ring(inner: float, outer: float, height: float, around: int) -> Solid:
    """Return the space between two cylinders about z, in triangles: groups ``inner``, ``outer``, ``low``, ``high``."""
    angle = np.arange(around) * (2 * np.pi / around)
    section = ((inner, 0.0), (outer, 0.0), (outer, height), (inner, height))
    points = np.concatenate(
        [np.column_stack([r * np.cos(angle), r * np.sin(angle), 0 * angle + z]) for r, z in section]
    )
    here = np.arange(around)
    there = np.roll(here, -1)
    faces = []
    for k in range(4):
        a, b = k * around, (k + 1) % 4 * around
        faces += list(np.column_stack([here + a, there + a, there + b, here + b]))
    names = ("low", "outer", "high", "inner")
    return in_triangles(Solid(points, faces, {name: here + k * around for k, name in enumerate(names)}))


# ---- pipes ----------------------------------------------------------------------------------


def disc(around: int, rings: int) -> tuple[Array, list[Face]]:
    """Return a unit disc (n, 2) in triangles at the middle and quads round it; the rim comes last."""
    angle = np.arange(around) * (2 * np.pi / around)
    ring = np.column_stack([np.cos(angle), np.sin(angle)])
    points = np.concatenate([np.zeros((1, 2)), *[ring * (k + 1) / rings for k in range(rings)]])
    here = 1 + np.arange(around)
    there = np.roll(here, -1)
    faces = list(np.column_stack([np.zeros(around, np.int64), here, there]))
    for k in range(rings - 1):
        a, b = k * around, (k + 1) * around
        faces += list(np.column_stack([here + a, here + b, there + b, there + a]))
    return points, faces


@dataclass(frozen=True)
class Station:
    """A round cross-section of a pipe: `across` × `up` points along the pipe."""

    centre: ArrayLike
    radius: float
    across: ArrayLike = (1, 0, 0)
    up: ArrayLike = (0, 1, 0)


def swept(stations: Sequence[Station], around: int, rings: int = 1, walls: Sequence[str] = ()) -> Solid:
    """Return the pipe through round sections, ports ``inlet`` and ``outlet``, its walls named or all ``wall``."""
    flat, flat_faces = disc(around, rings)
    inner = len(flat) - around

    def place(station: Station, plane: Array) -> Array:
        frame = np.array([station.across, station.up], dtype=float)
        return np.asarray(station.centre) + station.radius * plane @ frame

    first, last = stations[0], stations[-1]
    rims = [place(station, flat[inner:]) for station in stations]
    # order: inner points of the inlet, rims one after the other, inner points of the outlet
    points = np.concatenate([place(first, flat[:inner]), *rims, place(last, flat[:inner])])
    end_rim, end_inner = inner + (len(rims) - 1) * around, inner + len(rims) * around
    faces = [face[::-1] for face in flat_faces]
    groups = {"inlet": np.arange(len(faces))}
    here = inner + np.arange(around)
    there = np.roll(here, -1)
    for k, _ in enumerate(pairwise(stations)):
        a, b = k * around, (k + 1) * around
        name = walls[k] if walls else "wall"
        side = np.arange(len(faces), len(faces) + around)
        groups[name] = np.concatenate([groups[name], side]) if name in groups else side
        faces += list(np.column_stack([here + a, there + a, there + b, here + b]))
    groups["outlet"] = np.arange(len(faces), len(faces) + len(flat_faces))
    faces += [np.where(face < inner, face + end_inner, face - inner + end_rim) for face in flat_faces]
    return Solid(points, faces, groups)


def pipe(radius: float, length: float, around: int, along: int = 1, rings: int = 1) -> Solid:
    """Return a straight pipe along z from 0 to `length`."""
    return swept([Station((0, 0, z), radius) for z in np.linspace(0, length, along + 1)], around, rings)


def frustum(first: float, second: float, height: float, around: int, rings: int = 1) -> Solid:
    """Return a cone frustum along z, with the radius `first` at 0 and `second` at `height`."""
    return swept([Station((0, 0, 0), first), Station((0, 0, height), second)], around, rings)


def elbow(
    bend: float,
    radii: tuple[float, float],
    angle: float,
    around: int,
    along: int,
    rings: int = 1,
) -> Solid:
    """Return a pipe elbow about the origin in the plane z = 0, from (bend, 0, 0) along +y, turning left by `angle`."""
    stations = []
    for share in np.linspace(0, 1, along + 1):
        out = np.array([np.cos(share * angle), np.sin(share * angle), 0.0])
        radius = radii[0] + share * (radii[1] - radii[0])
        stations.append(Station(bend * out, radius, out, (0, 0, -1)))
    return swept(stations, around, rings)


def radius_of_area(area: float, around: int) -> float:
    """Return the corner radius of the regular polygon of that area (a faceted pipe of a true area)."""
    return float(np.sqrt(area / (around / 2 * np.sin(2 * np.pi / around))))


def dome(radius: float, opening: float, around: int, rings: int) -> Solid:
    """Return a spherical cap about z up to the polar angle `opening`, with a flat ``lid``."""
    flat, flat_faces = disc(around, rings)
    inner = len(flat) - around
    distance = np.linalg.norm(flat, axis=1)
    polar = distance * opening
    heading = flat / np.where(distance > 0, distance, 1)[:, None]
    curved = radius * np.column_stack([heading * np.sin(polar)[:, None], np.cos(polar)])
    level = radius * np.cos(opening)
    lid = np.column_stack([flat[:inner] * radius * np.sin(opening), np.full(inner, level)])
    points = np.concatenate([curved, lid])
    below = [np.where(face < inner, face + len(flat), face)[::-1] for face in flat_faces]
    count = len(flat_faces)
    return Solid(points, flat_faces + below, {"dome": np.arange(count), "lid": np.arange(count, 2 * count)})
