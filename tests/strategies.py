"""Random problems for property tests: closed bodies of every kind of face, split at random, with random data.

Hypothesis draws what kind of problem it is, and the seed of its numbers; so a failure comes down to the plainest kind
that still fails. `FLUXMESH_EXAMPLES` asks for more examples, drawn anew each time; without it a few, always the same.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Mapping
from dataclasses import replace
from typing import Any

import numpy as np
import trimesh.creation  # noqa: F401  here, since it draws random numbers when it is imported
from hypothesis import HealthCheck, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from fluxmesh import Contents, Frame, Hardware, Storage
from tests.problems import Laid, Problem, backward
from tests.solids import Solid, blocks, hull, in_triangles, mapped, one_group, prism, quadratic, rigid_motion, torus
from tests.solids import sphere as icosphere

__all__ = ["BODIES", "STRAIGHT", "bodies", "bounded", "problems", "seeds", "split"]

Array = NDArray[np.float64]
_LONG = os.environ.get("FLUXMESH_EXAMPLES")
EXAMPLES = int(_LONG or 12)

bounded = settings(
    max_examples=EXAMPLES,
    deadline=None,
    derandomize=_LONG is None,
    print_blob=True,
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large],
)
"""Few examples and always the same ones, unless more are asked for."""

seeds = st.integers(0, 2**32 - 1)

# ---- bodies of a size of about one ------------------------------------------------------------


def _ball(rng: np.random.Generator) -> Solid:
    """A star-shaped body of triangles."""
    ball = icosphere(1)
    return replace(ball, points=ball.points * rng.uniform(0.6, 1.4, len(ball.points))[:, None])


def _hull(rng: np.random.Generator) -> Solid:
    """A convex polyhedron, every point a corner."""
    sites = rng.standard_normal((int(rng.integers(5, 20)), 3))
    return hull(sites / np.linalg.norm(sites, axis=1)[:, None] * [1.5, 1.0, 0.8])


def _globe(rng: np.random.Generator) -> Solid:
    """A star-shaped body of twisted quads between triangles at two poles."""
    around, across = (int(n) for n in rng.integers((5, 3), (9, 6)))
    u, v = np.arange(around) * 2 * np.pi / around, np.linspace(0, np.pi, across + 1)[1:-1]
    ring = np.array([[np.sin(b) * np.cos(a), np.sin(b) * np.sin(a), np.cos(b)] for b in v for a in u])
    points = np.concatenate([ring, [[0, 0, 1], [0, 0, -1]]])
    here = np.arange(around)
    there, top, bottom = np.roll(here, -1), len(ring), len(ring) + 1
    faces = [*np.column_stack([here, there, np.full(around, top)])]
    for k in range(across - 2):
        a, b = k * around, (k + 1) * around
        faces += list(np.column_stack([here + a, here + b, there + b, there + a]))
    last = (across - 2) * around
    faces += list(np.column_stack([there + last, here + last, np.full(around, bottom)]))
    return one_group(points * rng.uniform(0.7, 1.3, len(points))[:, None], faces)


def _crate(rng: np.random.Generator) -> Solid:
    """A box of quads, twisted, some of them cut in triangles."""
    cells = tuple(rng.integers(1, 4, 3))
    crate = blocks(np.ones(cells, np.bool_), (-1, -0.7, -0.5), (1, 0.7, 0.5), quads=True)
    crate = mapped(crate, lambda x: x + 0.06 * rng.standard_normal(x.shape))
    faces: list[NDArray[np.int64]] = []
    for face in crate.faces:
        faces += [face[[0, 1, 2]], face[[0, 2, 3]]] if rng.random() < 0.4 else [face]
    return one_group(crate.points, faces)


def _prism(rng: np.random.Generator) -> Solid:
    """An extruded contour that is not convex; each end is one polygon."""
    angle = np.linspace(0, 2 * np.pi, int(rng.integers(5, 12)), endpoint=False)
    contour = rng.uniform(0.4, 1.3, angle.size)[:, None] * np.column_stack([np.cos(angle), np.sin(angle)])
    return prism(contour, -0.6, 0.7, int(rng.integers(1, 4)))


def _frame(rng: np.random.Generator) -> Solid:
    """A plate with a hole through it."""
    filled = np.ones((3, 3, 1), np.bool_)
    filled[1, 1] = False
    return blocks(filled, (-1, -1, -0.4), (1, 1.2, 0.4), quads=bool(rng.integers(2)))


def _torus(rng: np.random.Generator) -> Solid:
    return torus(1.0, 0.45, int(rng.integers(5, 8)), int(rng.integers(3, 6)))


def _round_torus(rng: np.random.Generator) -> Solid:
    """Quadratic quads of 8 or 9 points."""
    return torus(1.0, 0.45, int(rng.integers(4, 7)), 4, quadratic=int(rng.choice([8, 9])))


def _round_ball(rng: np.random.Generator) -> Solid:
    """A star-shaped body of quadratic triangles."""
    ball = icosphere(int(rng.integers(0, 2)), curved=True)
    return replace(ball, points=ball.points * rng.uniform(0.9, 1.15, len(ball.points))[:, None])


def _mixed(rng: np.random.Generator) -> Solid:
    """Straight quads beside quadratic triangles with straight edges."""
    plate = _frame(rng)
    cut = in_triangles(plate)
    fine = quadratic(cut)
    rows = [bent if rng.random() < 0.5 else flat for bent, flat in zip(fine.faces, cut.faces)]
    return replace(one_group(fine.points, rows), curved=True)


def _two(rng: np.random.Generator) -> Solid:
    """Two shells apart."""
    return joined(_ball(rng), mapped(_crate(rng), lambda x: 0.8 * x + [2.6, 0.3, -0.2]))


def _hollow(rng: np.random.Generator) -> Solid:
    """A body with a cavity, and a body within that."""
    inner = mapped(_globe(rng), lambda x: 0.35 * x)
    core = mapped(_prism(rng), lambda x: 0.08 * x)
    return joined(mapped(_ball(rng), lambda x: 1.3 * x), inside_out(inner), core)


def _torn(rng: np.random.Generator) -> Solid:
    """Points of its own for every face, and points that no face uses."""
    crate = _crate(rng)
    sizes = [face.size for face in crate.faces]
    starts = np.concatenate([[0], np.cumsum(sizes)])
    points = np.concatenate([crate.points[np.concatenate(crate.faces)], rng.standard_normal((3, 3))])
    return one_group(points, [np.arange(first, first + size) for first, size in zip(starts, sizes)])


STRAIGHT: Mapping[str, Callable[[np.random.Generator], Solid]] = {
    "ball": _ball,
    "hull": _hull,
    "globe": _globe,
    "crate": _crate,
    "prism": _prism,
    "plate with a hole": _frame,
    "torus": _torus,
    "two shells": _two,
    "a cavity": _hollow,
    "torn points": _torn,
}
BODIES: Mapping[str, Callable[[np.random.Generator], Solid]] = {
    **STRAIGHT,
    "quadratic torus": _round_torus,
    "quadratic ball": _round_ball,
    "straight and quadratic": _mixed,
}


def inside_out(solid: Solid) -> Solid:
    """Return a body with all its faces run the other way."""
    return replace(solid, faces=[backward(face, solid.curved) for face in solid.faces])


def joined(*parts: Solid) -> Solid:
    """Return bodies as one, their groups of one name together."""
    starts = np.cumsum([0, *(len(part.points) for part in parts)])
    firsts = np.cumsum([0, *(len(part.faces) for part in parts)])
    groups: dict[str, NDArray[np.int64]] = {}
    for part, first in zip(parts, firsts):
        for name, members in part.groups.items():
            groups[name] = np.concatenate([groups.get(name, np.empty(0, np.int64)), members + first])
    return Solid(
        np.concatenate([part.points for part in parts]),
        [face + start for part, start in zip(parts, starts) for face in part.faces],
        groups,
        any(part.curved for part in parts),
    )


def placed(solid: Solid, rng: np.random.Generator) -> Solid:
    """Return a body somewhere, turned anyhow."""
    turn, shift = rigid_motion(rng)
    return mapped(solid, lambda x: x @ turn.T + shift)


@st.composite
def bodies(draw: st.DrawFn, kinds: Mapping[str, Callable[[np.random.Generator], Solid]] = BODIES) -> Solid:
    """Return one closed body in one group, ``skin``."""
    name, seed = draw(st.sampled_from(list(kinds))), draw(seeds)
    rng = np.random.default_rng(seed)
    return placed(one_group_of(kinds[name](rng)), rng)


def one_group_of(solid: Solid) -> Solid:
    return replace(solid, groups={"skin": np.arange(len(solid.faces))})


# ---- groups -----------------------------------------------------------------------------------

ROLES = {"feed": "inlet", "drain": "outlet", "shell": "wall", "vent": "open", "lid": "wall"}


def split(solid: Solid, rng: np.random.Generator, *, scattered: bool, groups: int = 4) -> Solid:
    """Return the body in `groups` (up to 5) of `ROLES`: faces scattered over them, or slices along some direction."""
    count = len(solid.faces)
    if scattered:
        order = rng.permutation(count)
    else:
        middles = np.array([solid.points[face].mean(axis=0) for face in solid.faces])
        order = np.argsort(middles @ rng.standard_normal(3), kind="stable")
    cuts = np.sort(rng.choice(np.arange(1, count), groups - 1, replace=False))
    names = rng.permutation(list(ROLES)[:groups]).tolist()
    return replace(solid, groups={name: np.sort(part) for name, part in zip(names, np.split(order, cuts))})


# ---- data -------------------------------------------------------------------------------------


def _frame_of(rng: np.random.Generator, how: str) -> Frame | None:
    axis = rng.standard_normal(3)
    axis /= np.linalg.norm(axis)
    moves = {"velocity": tuple(rng.standard_normal(3)), "acceleration": tuple(rng.standard_normal(3))}
    turns = {"rate": float(rng.uniform(-2, 2)), "axis": tuple(axis), "through": tuple(rng.standard_normal(3))}
    return {"still": None, "moves": Frame(**moves), "turns": Frame(**turns), "both": Frame(**moves, **turns)}[how]


def _storage_of(rng: np.random.Generator) -> Storage:
    inertia = rng.standard_normal((3, 3))
    return Storage(
        mass=float(rng.standard_normal()),
        momentum=rng.standard_normal(3),
        angular_momentum=rng.standard_normal(3),
        energy=float(rng.standard_normal()),
        mass_moment=rng.standard_normal(3),
        inertia=inertia + inertia.T,
        carried={"salt": float(rng.standard_normal()), "dye": float(rng.standard_normal())},
    )


def _contents_of(rng: np.random.Generator) -> Contents:
    middle, inertia = rng.standard_normal(3), rng.standard_normal((3, 3))
    return Contents(
        origin=middle,
        volume=float(rng.uniform(1, 3)),
        centroid=middle + 0.1 * rng.standard_normal(3),
        mass=float(rng.uniform(1, 3)),
        mass_moment=rng.standard_normal(3),
        mass_inertia=inertia @ inertia.T,
        momentum=rng.standard_normal(3),
        moment_of_velocity=rng.standard_normal((3, 3)),
        kinetic_energy=1.0,
        internal_energy=2.0,
    )


@st.composite
def problems(
    draw: st.DrawFn,
    kinds: Mapping[str, Callable[[np.random.Generator], Solid]] = BODIES,
    *,
    frames: tuple[str, ...] = ("still", "moves", "turns", "both"),
    plain: bool = False,
) -> Problem:
    """Return one problem; `plain` leaves out what is not an array on nodes or faces, and rates and contents."""
    solid = draw(bodies(kinds))
    rng = np.random.default_rng(draw(seeds))
    solid = split(solid, rng, scattered=draw(st.booleans()), groups=draw(st.integers(2, 5)))
    place = st.sampled_from(["nodes", "faces"])

    def values(name: str, base: float, spread: float, components: int = 1) -> Laid:
        at = draw(place, label=f"place of {name}")
        count = len(solid.points) if at == "nodes" else len(solid.faces)
        return Laid(at, base + spread * rng.standard_normal(count if components == 1 else (count, components)))

    kind = draw(st.sampled_from(["gauge", "absolute", "kinematic"]))
    head = draw(st.sampled_from(["included", "removed"]))
    gas = head == "included" and kind != "kinematic" and draw(st.booleans())
    fields = {
        "velocity": values("velocity", 0.0, 1.0, 3),
        "pressure": values("pressure", 20.0 if kind == "absolute" else 0.0, 1.0),
        "traction": values("traction", 0.0, 0.3, 3),
        "salt": values("salt", 1.0, 0.3),
        "dye": values("dye", 1.0, 0.3),
        "temperature": values("temperature", 10.0, 0.5),
        "enthalpy": values("enthalpy", 10.0, 1.0),
    }
    if head == "included" and draw(st.booleans(), label="density varies"):
        fields["density"] = values("density", 1.5, 0.1)
    if draw(st.booleans(), label="mass flux of faces"):
        fields["mass flux"] = Laid("faces", 0.1 * rng.standard_normal(len(solid.faces)))
    supplied: dict[str, dict[str, Any]] = {}
    if not plain and draw(st.booleans(), label="one port is supplied"):
        supplied["feed" if "feed" in solid.groups else "drain"] = {
            "velocity": rng.standard_normal(3),
            "pressure": float(rng.standard_normal()),
            "traction": rng.standard_normal(3),
        }
    problem = Problem(
        solid,
        ROLES,
        fields,
        density=float(rng.uniform(0.5, 2)),
        supplied=supplied,
        kind=kind,
        head=head,
        datum=rng.standard_normal(3),
        ambient=20.0 if kind == "absolute" or gas else None,
        gravity=rng.standard_normal(3),
        anchor=rng.standard_normal(3),
        origin=rng.standard_normal(3),
        hardware=Hardware(float(rng.uniform(0.5, 2)), tuple(rng.standard_normal(3))),
        frame=_frame_of(rng, draw(st.sampled_from(frames))),
        basis=draw(st.sampled_from(["", "temperature", "enthalpy"])),
        heat=float(rng.standard_normal()),
        shaft_power=float(rng.standard_normal()),
        sources={"salt": float(rng.standard_normal()), "dye": float(rng.standard_normal())},
        gas=gas,
    )
    if plain:
        return problem
    return replace(
        problem,
        velocity_frame=draw(st.sampled_from(["absolute", "relative"])),
        storage=_storage_of(rng) if draw(st.booleans(), label="rates") else None,
        contents=_contents_of(rng) if draw(st.booleans(), label="contents") else None,
    )
