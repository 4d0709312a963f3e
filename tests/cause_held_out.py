"""More flows that close, on other bodies, kept apart: the search for causes was not shaped on them."""

from __future__ import annotations

from dataclasses import replace
from functools import cache
from typing import Any

import numpy as np

from tests.cause_flows import DOWN, TURN, Sound, laid
from tests.flows import ExactFlow, lifting_cylinder, sources
from tests.solids import Solid, angle_block, blocks, box, in_triangles, mapped

Array = np.ndarray
NONE = np.zeros(3)


def _carried(flow: ExactFlow, shift: Array) -> ExactFlow:
    """The same flow, turned and shifted."""
    return ExactFlow(
        flow.density,
        lambda x: flow.velocity((x - shift) @ TURN) @ TURN.T,
        lambda x: flow.pressure((x - shift) @ TURN),
        flow.viscosity,
    )


def _sector(radii: tuple[float, float], half: float, height: float, cells: Any) -> Solid:
    """A piece of a ring about z: groups x- and x+ at the radii, y- and y+ at the angles."""

    def bent(x: Array) -> Array:
        return np.column_stack([x[:, 0] * np.cos(x[:, 1]), x[:, 0] * np.sin(x[:, 1]), x[:, 2]])

    return mapped(box((radii[0], -half, 0.0), (radii[1], half, height), cells), bent)


def _wedge(gravity: Array) -> Sound:
    """Fluid that runs apart between two plane walls, as from a line source (Batchelor section 2.5, from memory)."""

    def velocity(x: Any) -> Any:
        s = x[..., 0] ** 2 + x[..., 1] ** 2
        return np.stack([2.4 * x[..., 0] / s, 2.4 * x[..., 1] / s, 0 * s], axis=-1)

    def pressure(x: Any) -> Any:
        return 4e3 - 870.0 / 2 * 2.4**2 / (x[..., 0] ** 2 + x[..., 1] ** 2)

    flow = _carried(ExactFlow(870.0, velocity, pressure, 90.0), np.array([0.4, 0.1, -0.3]))
    solid = _sector((0.8, 1.7), 0.35, 0.5, (14, 16, 6))
    solid = mapped(solid, lambda x: x @ TURN.T + np.array([0.4, 0.1, -0.3]))
    roles = {"x-": "inlet", "x+": "outlet", "z-": "symmetry", "z+": "symmetry"}
    return laid("wedge", solid, roles, "wall", flow, gravity)


def _spiral(gravity: Array) -> Sound:
    """Flow along and round between two cylinders that turn (Taylor 1923; Bird, Stewart, Lightfoot; from memory)."""
    inner, outer, spin, viscosity, density, slope = 0.5, 1.0, (2.0, -0.7), 60.0, 998.2, -1500.0
    a = (spin[1] * outer**2 - spin[0] * inner**2) / (outer**2 - inner**2)
    b = (spin[0] - spin[1]) * (inner * outer) ** 2 / (outer**2 - inner**2)

    def velocity(x: Any) -> Any:
        s = x[..., 0] ** 2 + x[..., 1] ** 2
        rate = a + b / s
        share = (outer**2 - inner**2) / np.log(outer / inner)
        along = slope / (4 * viscosity) * (s - inner**2 - share * np.log(s / inner**2) / 2)
        return np.stack([-rate * x[..., 1], rate * x[..., 0], along], axis=-1)

    def pressure(x: Any) -> Any:
        s = x[..., 0] ** 2 + x[..., 1] ** 2
        return density * (a * a * s / 2 + a * b * np.log(s) - b * b / (2 * s)) + slope * x[..., 2]

    flow = _carried(ExactFlow(density, velocity, pressure, viscosity), NONE)
    solid = mapped(_sector((inner, outer), 0.7, 0.9, (14, 22, 6)), lambda x: x @ TURN.T)
    roles = {"x-": "wall", "x+": "wall"}
    return laid("spiral", solid, roles, "open", flow, gravity)


def _spread(gravity: Array) -> Sound:
    """Two sources and a sink in a stream, about an L-shaped block."""
    placed = ((9.0, (-1.2, 0.3, 0.4)), (5.0, (0.9, 1.1, 0.8)), (-7.0, (0.4, -1.0, 1.3)))
    flow = sources(780.0, (1.1, -0.6, 0.4), *placed)
    return laid("sources about a block", angle_block(16), {}, "open", flow, gravity)


def _beside_a_cylinder(gravity: Array) -> Sound:
    """Beside a cylinder with lift, in the stream."""
    solid = box((0.2, 0.6, 0.0), (1.3, 1.5, 0.7), (18, 16, 6))
    roles = {"z-": "symmetry", "z+": "symmetry"}
    return laid("beside a cylinder", solid, roles, "open", lifting_cylinder(1.2, 9.0, -8.0, 0.5), gravity)


def _half_step(gravity: Array) -> Sound:
    """Half of a channel that widens at a step, its middle plane a symmetry (Borda and Carnot; data on faces)."""
    speed, density, share, first = 3.0, 930.0, 0.4, 8.0e3
    filled = np.ones((9, 5, 3), np.bool_)
    filled[:4, 2:] = False
    solid = in_triangles(blocks(filled, (0, 0, 0), (0.9, 0.5, 0.3), quads=True))
    middle = np.array([solid.points[face].mean(axis=0) for face in solid.faces])
    sides = {side: rows for side, rows in solid.groups.items() if side not in ("x-", "y+")}
    ahead, above = solid.groups["x-"], solid.groups["y+"]
    near = middle[ahead, 0] < 0.2
    low = middle[above, 0] < 0.4
    groups = {"inlet": ahead[near], "step": ahead[~near], "feed": above[low], "shell": above[~low]}
    groups |= {{"x+": "outlet", "y-": "cut", "z-": "floor", "z+": "roof"}[side]: rows for side, rows in sides.items()}
    solid = Solid(solid.points, solid.faces, groups)
    second = first + density * speed**2 * share * (1 - share)
    behind = middle[:, 0] > 0.4 - 1e-9
    pressure = np.where(behind, second, first)
    pressure[groups["step"]] = first
    pressure[groups["inlet"]] = first
    # of a half the moments close too: the pressure on the middle plane rises behind the step by as much
    part = groups["cut"][behind[groups["cut"]]]
    lever = middle[part, 0] - middle[part, 0].mean()
    areas = np.full(part.size, 0.5 * 0.3 / part.size)
    inflow, outflow = density * speed**2 * 0.2 * 0.3 * 0.1, density * (share * speed) ** 2 * 0.5 * 0.3 * 0.25
    turning = inflow - outflow - (second - first) * 0.5 * 0.3 * 0.25
    pressure[part] += turning * lever / (lever**2 * areas).sum()
    velocity = np.zeros_like(middle)
    velocity[groups["inlet"], 0], velocity[groups["outlet"], 0] = speed, share * speed
    roles = {"inlet": "inlet", "outlet": "outlet", "cut": "symmetry"}
    given = {
        "density": density,
        "velocity": velocity,
        "pressure": pressure + density * middle @ gravity,
        "gravity": tuple(gravity),
    }
    return Sound("half step", solid, roles, "wall", given, None if gravity.any() else "outlet")


@cache
def held_out() -> dict[str, Sound]:
    """Flows by name, each without and with weight."""
    made = {}
    for flow in (_wedge, _spiral, _spread, _beside_a_cylinder, _half_step):
        for gravity, mark in ((NONE, ""), (DOWN, ", heavy")):
            sound = flow(gravity)
            made[sound.name + mark] = replace(sound, name=sound.name + mark)
    return made
