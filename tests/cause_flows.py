"""Sound flows that close, to plant slips in for the search for causes."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from functools import cache, lru_cache
from typing import Any

import numpy as np

from fluxmesh import Outcome, balance_of, lay_flow
from fluxmesh.assess.causes import CausesFound, facts_of, find_causes
from fluxmesh.surface.surface import ControlSurface
from tests.flows import (
    ExactFlow,
    beltrami,
    burgers_vortex,
    couette,
    face_frames,
    hill_vortex,
    kovasznay,
    landau_squire,
    poiseuille,
    stagnation,
)
from tests.solids import Solid, Station, box, mapped, moved, pipe, rigid_motion, ring, swept

Array = np.ndarray
ANCHOR = (0.3, -0.2, 0.5)
DOWN = np.array([0.0, 0.0, -9.80665])
TURN, _ = rigid_motion(np.random.default_rng(3))


@lru_cache(maxsize=64)
def _surface(solid: Solid, roles: tuple[tuple[str, str], ...], rest: str) -> ControlSurface:
    return solid.surface(dict(roles), rest=rest)


@dataclass(frozen=True, eq=False)
class Sound:
    """A flow that closes: a body, and what is laid on its surface.

    `level` is a group on which the pressure is one value; `hardware` whether the surface has walls.
    """

    name: str
    solid: Solid
    roles: dict[str, str]
    rest: str
    given: dict[str, Any]
    level: str | None = None
    anchor: tuple[float, float, float] = ANCHOR
    facts: dict[str, Any] = field(default_factory=dict)

    @property
    def surface(self) -> ControlSurface:
        return _surface(self.solid, tuple(self.roles.items()), self.rest)

    @property
    def density(self) -> float:
        return float(self.given["density"])

    @property
    def heavy(self) -> bool:
        return bool(np.any(self.given.get("gravity", 0)))

    def with_given(self, **changed: Any) -> Sound:
        return replace(self, given={**self.given, **changed})

    def outcome(self) -> Outcome:
        surface = self.surface
        return balance_of(
            surface, lay_flow(surface, **self.given), anchor=self.anchor, encloses_hardware=False, title=self.name
        )

    def causes(self) -> CausesFound:
        done = self.outcome()
        names = tuple(group.name for group in done.surface.groups)
        facts = replace(facts_of(done.flow, done.balance.setting, names), **self.facts)
        return find_causes(done.balance, facts, encloses_hardware=False)

    # ---- faces of a group -----------------------------------------------------------------------

    def rows(self, group: str) -> Array:
        """Points of a group."""
        return np.unique(np.concatenate([self.solid.faces[f] for f in self.solid.groups[group]]))


def _dense(flow: ExactFlow, density: float) -> ExactFlow:
    """The same flow of a denser fluid: all forces go with the density."""
    return ExactFlow(density, flow.velocity, lambda x: density * flow.pressure(x), density * flow.viscosity)


def _heads(flow: ExactFlow, x: Array, gravity: Array) -> Array:
    return flow.pressure(x) + flow.density * x @ gravity


def boxed(name: str, flow: ExactFlow, place: Any, *, gravity: Array, scale: float, cells: int = 12) -> Sound:
    """A box of six plane groups in an exact flow."""
    low, high = np.array([-0.5, -0.4, -0.6]) * scale, np.array([0.5, 0.6, 0.4]) * scale
    solid = moved(box(low, high, cells), np.eye(3), place)
    return laid(name, solid, {}, "open", flow, gravity)


def laid(name: str, solid: Solid, roles: dict[str, str], rest: str, flow: ExactFlow, gravity: Array,
          level: str | None = None) -> Sound:  # fmt: skip
    given: dict[str, Any] = {
        "density": flow.density,
        "velocity": flow.velocity(solid.points),
        "pressure": _heads(flow, solid.points, gravity),
        "gravity": tuple(gravity),
    }
    if flow.viscosity:
        surface = solid.surface(roles, rest=rest)
        middle, normal = face_frames(surface)
        given["traction"] = flow.traction(middle, normal)
    return Sound(name, solid, roles, rest, given, level)


def _pipe() -> Sound:
    flow = poiseuille(0.1, 2.0, 2.0, 870.0)
    solid = moved(pipe(0.1, 0.5, 16, 3, 3), TURN, (0, 0, 0))
    roles = {"inlet": "inlet", "outlet": "outlet"}
    middle, normal = face_frames(solid.surface(roles, rest="wall"))
    home = solid.points @ TURN
    given = {
        "density": 870.0,
        "velocity": flow.velocity(home) @ TURN.T,
        "pressure": 500.0 + flow.pressure(home) + 870.0 * solid.points @ DOWN,
        "traction": flow.traction(middle @ TURN, normal @ TURN) @ TURN.T,
        "gravity": tuple(DOWN),
    }
    return Sound("poiseuille pipe, inclined", solid, roles, "wall", given, anchor=(0.4, -0.3, 0.2))


def _elliptic_pipe() -> Sound:
    """Developed laminar flow in an inclined elliptic pipe (Boussinesq 1868; White ch. 3; from memory)."""
    first, second, fastest, viscosity, density = 0.09, 0.06, 3.0, 1.6, 905.0
    slope = 2 * viscosity * fastest * (1 / first**2 + 1 / second**2)

    def velocity(x: Any) -> Any:
        s = (x[..., 0] / first) ** 2 + (x[..., 1] / second) ** 2
        return np.stack([0 * s, 0 * s, fastest * (1 - s)], axis=-1)

    flow = ExactFlow(density, velocity, lambda x: 8e2 - slope * x[..., 2], viscosity)
    solid = mapped(pipe(1.0, 0.4, 20, 3, 4), lambda x: x * np.array([first, second, 1.0]))
    turned = ExactFlow(
        density, lambda x: flow.velocity(x @ TURN) @ TURN.T, lambda x: flow.pressure(x @ TURN), viscosity
    )
    roles = {"inlet": "inlet", "outlet": "outlet"}
    return laid("elliptic pipe, inclined", moved(solid, TURN, (0, 0, 0)), roles, "wall", turned, DOWN)


def _level_pipe() -> Sound:
    """Without gravity, so that the pressure is one value at each port."""
    sound = _pipe()
    pressure = sound.given["pressure"] - 870.0 * sound.solid.points @ DOWN
    return replace(
        sound.with_given(pressure=pressure, gravity=(0, 0, 0)), name="poiseuille pipe, weightless", level="outlet"
    )


def _expansion(gravity: bool = False) -> Sound:
    """The sudden expansion of Borda and Carnot, data on faces."""
    share, speed, first, density = 0.25, 6.0, 2.0e4, 870.0
    second = first + density * speed**2 * share * (1 - share)
    stations = [Station((0, 0, 0), 0.05), Station((0, 0, 0.2), 0.05), Station((0, 0, 0.2), 0.1)]
    solid = swept([*stations, Station((0, 0, 0.7), 0.1)], 16, 2, ("feed", "step", "shell"))
    solid = moved(solid, TURN, (0.1, 0.2, 0))
    velocity, pressure = np.zeros((len(solid.faces), 3)), np.full(len(solid.faces), second)
    for name in ("inlet", "feed", "step"):
        pressure[solid.groups[name]] = first
    velocity[solid.groups["inlet"]] = speed * TURN[:, 2]
    velocity[solid.groups["outlet"]] = share * speed * TURN[:, 2]
    roles = {"inlet": "inlet", "outlet": "outlet"}
    given: dict[str, Any] = {"density": density, "velocity": velocity, "pressure": pressure, "gravity": (0, 0, 0)}
    level: str | None = "outlet"
    if gravity:
        middle, _ = face_frames(solid.surface(roles, rest="wall"))
        given |= {"pressure": pressure + density * middle @ DOWN, "gravity": tuple(DOWN)}
        level = None
    return Sound("expansion" + (", with weight" if gravity else ""), solid, roles, "wall", given, level)


def _tank() -> Sound:
    """Water at rest in a box."""
    solid = moved(box((0, 0, 0), (1, 2, 3), 2), TURN, (0.1, 0.2, 0.3))
    density = 998.2
    given = {"density": density, "pressure": 5e3 + density * solid.points @ DOWN, "gravity": tuple(DOWN)}
    return Sound("tank", solid, {}, "wall", given)


def _shear(density: float, viscosity: float, *, curved: bool) -> ExactFlow:
    """Flow along x between plates (Couette; Poiseuille; Batchelor section 4.2, from memory)."""

    def velocity(x: Any) -> Any:
        y = x[..., 1]
        return np.stack([3 * y - (y * y if curved else 0 * y), 0 * y, 0 * y], axis=-1)

    slope = 2 * viscosity if curved else 0.0
    return ExactFlow(density, velocity, lambda x: 2e3 - slope * x[..., 0], viscosity)


def _suction(density: float, speed: float, suction: float) -> ExactFlow:
    """The layer on a plate that fluid is drawn through (Griffith and Meredith 1936; from memory)."""
    kinematic = 0.3

    def velocity(x: Any) -> Any:
        y = x[..., 1]
        return np.stack([speed * (1 - np.exp(-suction * y / kinematic)), 0 * y - suction, 0 * y], axis=-1)

    return ExactFlow(density, velocity, lambda x: 1.5e3 + 0 * x[..., 0], density * kinematic)


ASIDE, NEAR = (1.5, 0.1, 0.2), (0.1, 0.2, 0.15)


@cache
def sounds() -> dict[str, Sound]:
    """Flows that close, by name."""
    none, some = np.zeros(3), np.array([0.3, -0.4, -2.0])
    made = [
        boxed("landau-squire jet", landau_squire(1.5, 1.2, 0.5), ASIDE, gravity=none, scale=1.0),
        boxed("landau-squire jet, heavy", landau_squire(1.5, 1.2, 0.5), ASIDE, gravity=some, scale=1.0),
        boxed("couette", couette(1, 2, (3, -0.5), 470.0, 880.0), ASIDE, gravity=none, scale=0.8),
        boxed("couette, heavy", couette(1, 2, (3, -0.5), 470.0, 880.0), ASIDE, gravity=some, scale=0.8),
        boxed("burgers vortex", burgers_vortex(1.0, 2.0, 0.1, 998.2), ASIDE, gravity=none, scale=1.0),
        boxed("burgers vortex, heavy", burgers_vortex(1.0, 2.0, 0.1, 998.2), ASIDE, gravity=some, scale=1.0),
        boxed("beltrami", beltrami(1, 0.7, 0.4, 1.1), NEAR, gravity=none, scale=1.0),
        boxed("beltrami, heavy", beltrami(1, 0.7, 0.4, 1.1), NEAR, gravity=some, scale=1.0),
        boxed("hill vortex", hill_vortex(998.2), NEAR, gravity=none, scale=1.0),
        boxed("hill vortex, heavy", hill_vortex(998.2), NEAR, gravity=some, scale=1.0),
        boxed("kovasznay", _dense(kovasznay(40.0), 998.2), NEAR, gravity=none, scale=0.8, cells=18),
        boxed("kovasznay, heavy", _dense(kovasznay(40.0), 998.2), NEAR, gravity=some, scale=0.8, cells=18),
        boxed("stagnation", stagnation(2.0, 870.0, 260.0), (0.6, 0.9, 0.2), gravity=none, scale=1.0),
        boxed("stagnation, heavy", stagnation(2.0, 870.0, 260.0), (0.6, 0.9, 0.2), gravity=some, scale=1.0),
        _pipe(),
        _level_pipe(),
        _elliptic_pipe(),
        _expansion(),
        _expansion(gravity=True),
        _tank(),
        *(
            replace(
                boxed(name, flow, (0.1, 1.2, 0.2), gravity=pull, scale=1.0),
                level=None if pull.any() else "x+",
                roles={"x-": "inlet", "x+": "outlet"},
                rest="wall",
            )
            for name, flow, pull in (
                ("plane couette", _shear(880.0, 300.0, curved=False), none),
                ("plane poiseuille", _shear(880.0, 300.0, curved=True), none),
                ("plane poiseuille, heavy", _shear(880.0, 300.0, curved=True), some),
            )
        ),
        replace(boxed("suction layer", _suction(998.2, 1.5, 0.4), (0.1, 1.2, 0.2), gravity=none, scale=1), level="y-"),
        laid("couette ring", ring(1, 2, 1.0, 96), {}, "open", couette(1, 2, (3, -0.5), 470.0, 880.0), none, "outer"),
    ]  # fmt: skip
    kova = made[10]
    made[10] = replace(kova, level="x+")
    return {sound.name: sound for sound in made}
