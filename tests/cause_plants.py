"""Sound flows that close, and the slips planted in them, for the search for causes."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from functools import cache
from typing import Any

import numpy as np

from fluxmesh import Outcome, PressureMeaning, balance_of, lay_flow
from fluxmesh.assess.causes import CausesFound, facts_of, find_causes
from fluxmesh.balance.balance import balance_table
from fluxmesh.balance.setting import GroupData
from fluxmesh.field.frame import Frame
from fluxmesh.field.pressure import Head, PressureKind
from fluxmesh.integral.table import IntegralTable, column_slice
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
from tests.solids import Solid, Station, box, moved, pipe, rigid_motion, ring, swept

Array = np.ndarray
ANCHOR = (0.3, -0.2, 0.5)
DOWN = np.array([0.0, 0.0, -9.80665])
AMBIENT = 101325.0
TURN, _ = rigid_motion(np.random.default_rng(3))


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
        return self.solid.surface(self.roles, rest=self.rest)

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


def _boxed(name: str, flow: ExactFlow, place: Any, *, gravity: Array, scale: float, cells: int = 12) -> Sound:
    """A box of six plane groups in an exact flow."""
    low, high = np.array([-0.5, -0.4, -0.6]) * scale, np.array([0.5, 0.6, 0.4]) * scale
    solid = moved(box(low, high, cells), np.eye(3), place)
    return _laid(name, solid, {}, "open", flow, gravity)


def _laid(name: str, solid: Solid, roles: dict[str, str], rest: str, flow: ExactFlow, gravity: Array,
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
        _boxed("landau-squire jet", landau_squire(1.5, 1.2, 0.5), ASIDE, gravity=none, scale=1.0),
        _boxed("landau-squire jet, heavy", landau_squire(1.5, 1.2, 0.5), ASIDE, gravity=some, scale=1.0),
        _boxed("couette", couette(1, 2, (3, -0.5), 470.0, 880.0), ASIDE, gravity=none, scale=0.8),
        _boxed("couette, heavy", couette(1, 2, (3, -0.5), 470.0, 880.0), ASIDE, gravity=some, scale=0.8),
        _boxed("burgers vortex", burgers_vortex(1.0, 2.0, 0.1, 998.2), ASIDE, gravity=none, scale=1.0),
        _boxed("burgers vortex, heavy", burgers_vortex(1.0, 2.0, 0.1, 998.2), ASIDE, gravity=some, scale=1.0),
        _boxed("beltrami", beltrami(1, 0.7, 0.4, 1.1), NEAR, gravity=none, scale=1.0),
        _boxed("beltrami, heavy", beltrami(1, 0.7, 0.4, 1.1), NEAR, gravity=some, scale=1.0),
        _boxed("hill vortex", hill_vortex(998.2), NEAR, gravity=none, scale=1.0),
        _boxed("hill vortex, heavy", hill_vortex(998.2), NEAR, gravity=some, scale=1.0),
        _boxed("kovasznay", _dense(kovasznay(40.0), 998.2), NEAR, gravity=none, scale=0.8, cells=18),
        _boxed("kovasznay, heavy", _dense(kovasznay(40.0), 998.2), NEAR, gravity=some, scale=0.8, cells=18),
        _boxed("stagnation", stagnation(2.0, 870.0, 260.0), (0.6, 0.9, 0.2), gravity=none, scale=1.0),
        _boxed("stagnation, heavy", stagnation(2.0, 870.0, 260.0), (0.6, 0.9, 0.2), gravity=some, scale=1.0),
        _pipe(),
        _level_pipe(),
        _expansion(),
        _expansion(gravity=True),
        _tank(),
        *(
            replace(
                _boxed(name, flow, (0.1, 1.2, 0.2), gravity=pull, scale=1.0),
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
        replace(_boxed("suction layer", _suction(998.2, 1.5, 0.4), (0.1, 1.2, 0.2), gravity=none, scale=1), level="y-"),
        _laid("couette ring", ring(1, 2, 1.0, 96), {}, "open", couette(1, 2, (3, -0.5), 470.0, 880.0), none, "outer"),
    ]  # fmt: skip
    kova = made[10]
    made[10] = replace(kova, level="x+")
    return {sound.name: sound for sound in made}


# ---- plants ---------------------------------------------------------------------------------

Plant = Callable[[Sound], "Sound | None"]
"""From a sound flow to the same with a slip in it; None where it cannot be made there."""


def _scaled(name: str, factor: Any) -> Plant:
    def plant(sound: Sound) -> Sound | None:
        by = factor(sound) if callable(factor) else factor
        return None if name not in sound.given else sound.with_given(**{name: by * np.asarray(sound.given[name])})

    return plant


def _kinematic(sound: Sound) -> Sound | None:
    return sound.with_given(pressure=sound.given["pressure"] / sound.density)


def _read_kinematic(sound: Sound) -> Sound | None:
    return sound.with_given(meaning=PressureMeaning(PressureKind.KINEMATIC))


def _all_kinematic(sound: Sound) -> Sound | None:
    if "traction" not in sound.given:
        return None
    return sound.with_given(
        pressure=sound.given["pressure"] / sound.density, traction=sound.given["traction"] / sound.density
    )


def _level_value(sound: Sound) -> float:
    """The pressure on the group where it is one value."""
    assert sound.level is not None
    pressure = sound.given["pressure"]
    if len(pressure) == len(sound.solid.faces) != len(sound.solid.points):
        return float(pressure[sound.solid.groups[sound.level]].mean())
    return float(pressure[sound.rows(sound.level)].mean())


def _absolute(sound: Sound) -> Sound | None:
    if sound.level is None:
        return None
    return sound.with_given(
        pressure=sound.given["pressure"] + AMBIENT, supplied={sound.level: {"pressure": _level_value(sound)}}
    )


def _gauge_read_absolute(sound: Sound) -> Sound | None:
    if sound.level is None:
        return None
    return sound.with_given(
        meaning=PressureMeaning(PressureKind.ABSOLUTE),
        ambient=AMBIENT,
        supplied={sound.level: {"pressure": _level_value(sound)}},
    )


def _supplied_absolute(sound: Sound) -> Sound | None:
    if sound.level is None:
        return None
    return sound.with_given(ambient=AMBIENT, supplied={sound.level: {"pressure": _level_value(sound) + AMBIENT}})


def _total(sound: Sound) -> Sound | None:
    if "velocity" not in sound.given:
        return None
    dynamic = sound.density / 2 * (np.asarray(sound.given["velocity"]) ** 2).sum(axis=1)
    return sound.with_given(pressure=sound.given["pressure"] + dynamic)


def _places(sound: Sound) -> Array:
    """Where the pressure sits."""
    if len(sound.given["pressure"]) == len(sound.solid.points):
        return sound.solid.points
    return face_frames(sound.surface)[0]


def _head_removed(sound: Sound) -> Sound | None:
    if not sound.heavy:
        return None
    head = sound.density * _places(sound) @ np.asarray(sound.given["gravity"])
    return sound.with_given(pressure=sound.given["pressure"] - head)


def _head_twice(sound: Sound) -> Sound | None:
    return sound.with_given(meaning=PressureMeaning(head=Head.REMOVED)) if sound.heavy else None


def _traction_sign(sound: Sound) -> Sound | None:
    return None if "traction" not in sound.given else sound.with_given(traction=-sound.given["traction"])


def _traction_missing(sound: Sound) -> Sound | None:
    if "traction" not in sound.given or sound.rest != "wall":
        return None
    return sound.with_given(traction=None)


def _length(factor: float, unit: str) -> Plant:
    """Coordinates in another unit than they are read in: `factor` times as large in number."""

    def plant(sound: Sound) -> Sound | None:
        solid = replace(sound.solid, points=sound.solid.points * factor)
        anchor = tuple(factor * x for x in sound.anchor)
        return replace(sound, solid=solid, anchor=anchor, facts={**sound.facts, "length_unit": unit})

    return plant


def _frame(velocity: Any, taken: str) -> Plant:
    """A surface that moves along with the flow, its velocity read in the wrong frame."""

    def plant(sound: Sound) -> Sound | None:
        # of bent groups the table does not hold what a shift of the velocity takes
        if "velocity" not in sound.given or sound.rest == "wall" or sound.name == "couette ring":
            return None
        speed = float(np.linalg.norm(np.asarray(sound.given["velocity"]), axis=1).mean())
        drift = speed * np.asarray(velocity)
        frame = Frame(velocity=tuple(drift))
        # what is steady for the surface is the given flow; the absolute one is faster by the drift
        exported = sound.given["velocity"] + (drift if taken == "relative" else 0.0)
        return replace(
            sound.with_given(velocity=exported, frame=frame, velocity_frame=taken),
            facts={**sound.facts, "velocity_frame": taken},
        )

    return plant


def _flow_port(sound: Sound) -> str | None:
    """A group through which much flows, one way."""
    if "velocity" not in sound.given:
        return None
    done = sound.outcome()
    flows = np.abs(done.balance.table.column("mass_flow"))
    return None if flows.max() < 1e-6 else done.surface.groups[int(np.argmax(flows))].name


def _own_group(sound: Sound, group: str) -> Sound:
    """The same with points of its own for a group, so that its data can differ from those of its neighbours."""
    chosen = set(sound.solid.groups[group].tolist())
    used = np.unique(np.concatenate([sound.solid.faces[f] for f in sorted(chosen)]))
    number = np.arange(len(sound.solid.points))
    number[used] = len(number) + np.arange(used.size)
    faces = [number[face] if f in chosen else face for f, face in enumerate(sound.solid.faces)]
    solid = replace(sound.solid, points=np.concatenate([sound.solid.points, sound.solid.points[used]]), faces=faces)
    count = len(sound.solid.points)
    given = {
        name: np.concatenate([value, np.asarray(value)[used]])
        if isinstance(value, np.ndarray) and value.ndim and len(value) == count and name != "traction"
        else value
        for name, value in sound.given.items()
    }
    return replace(sound, solid=solid, given=given)


def _group_factor(quantity: str, factor: float) -> Plant:
    """A field of one port times a factor."""

    def plant(sound: Sound) -> Sound | None:
        group = _flow_port(sound)
        if group is None:
            return None
        values = sound.given[quantity]
        if len(values) == len(sound.solid.faces) != len(sound.solid.points):
            rows = sound.solid.groups[group]
        else:
            sound = _own_group(sound, group)
            rows, values = sound.rows(group), sound.given[quantity]
        changed = values.copy()
        changed[rows] *= factor
        return replace(sound.with_given(**{quantity: changed}), facts={**sound.facts})

    return plant


def _mass_flux(factor: float) -> Plant:
    """An export of mass fluxes, that of one port times a factor."""

    def plant(sound: Sound) -> Sound | None:
        group = _flow_port(sound)
        if group is None:
            return None
        surface = sound.surface
        changed = _face_flows(sound, surface)
        changed[sound.solid.groups[group]] *= factor
        return sound.with_given(mass_flux=changed)

    return plant


def _face_flows(sound: Sound, surface: ControlSurface) -> Array:
    """Mass flow out of each face."""
    offsets = np.arange(surface.face_count + 1) * 3 if surface.offsets is None else surface.offsets
    sizes = np.diff(offsets)
    following = np.arange(surface.connectivity.size) + 1
    following[offsets[1:] - 1] = offsets[:-1]
    corners = surface.points[surface.connectivity]
    middle, _ = face_frames(surface)
    about = corners - np.repeat(middle, sizes, axis=0)
    vectors = np.add.reduceat(np.cross(about, about[following]), offsets[:-1]) / 2
    velocity = np.asarray(sound.given["velocity"])
    if not (len(velocity) == len(sound.solid.faces) != len(sound.solid.points)):
        velocity = np.add.reduceat(velocity[surface.connectivity], offsets[:-1]) / sizes[:, None]
    return sound.density * np.einsum("fk,fk->f", velocity, vectors)


def _zeroed(sound: Sound) -> Sound | None:
    """All fields of one port are zero in the export."""
    group = _flow_port(sound)
    if group is None:
        return None
    sound = _own_group(sound, group) if len(sound.given["pressure"]) == len(sound.solid.points) else sound
    faces = sound.solid.groups[group]
    changed = {}
    for name in ("velocity", "pressure", "traction"):
        values = sound.given.get(name)
        if values is None:
            continue
        values = np.array(values)
        values[faces if len(values) == len(sound.solid.faces) else sound.rows(group)] = 0.0
        changed[name] = values
    return sound.with_given(**changed)


def _whole_supplied(sound: Sound) -> Sound | None:
    """The flow supplied for a port is that of the whole: twice what passes the half."""
    group = _flow_port(sound)
    if group is None:
        return None
    done = sound.outcome()
    k = [each.name for each in done.surface.groups].index(group)
    table = done.balance.table
    mean = table.column("velocity_area")[k] / table.column("area")[k]
    right = sound.with_given(supplied={group: {"velocity": tuple(mean)}}).outcome()
    if right.verdict.measure > 3e-3:  # one velocity does not do there
        return None
    cut = next((k for k, flow in enumerate(np.abs(table.column("reversed_mass_flow"))) if flow < 1e-9), None)
    if cut is not None and done.surface.groups[cut].name != group and not table.column("mass_flow")[cut]:
        sound = replace(sound, roles={**sound.roles, done.surface.groups[cut].name: "symmetry"})
    return sound.with_given(supplied={group: {"velocity": tuple(2 * mean)}})


def _unsettled(share: float) -> Plant:
    """Velocities at the port with the most flow are off by a share."""
    return _group_factor("velocity", 1 - share)


def _gravity(change: Callable[[Array], Array]) -> Plant:
    def plant(sound: Sound) -> Sound | None:
        return None if not sound.heavy else sound.with_given(gravity=tuple(change(np.asarray(sound.given["gravity"]))))

    return plant


PLANTS: dict[str, tuple[str, Plant]] = {
    "pressure over density": ("kinematic-pressure", _kinematic),
    "pressure read as kinematic": ("kinematic-pressure", _read_kinematic),
    "pressure and traction over density": ("kinematic-pressure", _all_kinematic),
    "absolute pressure beside a supplied gauge one": ("absolute-as-gauge", _absolute),
    "gauge pressure read as absolute": ("absolute-as-gauge", _gauge_read_absolute),
    "absolute pressure supplied": ("absolute-as-gauge", _supplied_absolute),
    "total pressure": ("total-as-static", _total),
    "head removed": ("head-removed", _head_removed),
    "head counted twice": ("head-counted-twice", _head_twice),
    "traction of the other sign": ("traction-sign", _traction_sign),
    "traction left out": ("traction-missing", _traction_missing),
    "millimetres read as metres": ("length-unit", _length(1000.0, "m")),
    "metres read as millimetres": ("length-unit", _length(0.001, "mm")),
    "inches read as millimetres": ("length-unit", _length(1 / 25.4, "mm")),
    "density in g/cm³": ("density", _scaled("density", 0.001)),
    "density of water for that of the fluid": ("density", _scaled("density", lambda s: 998.2 / s.density * 0.8)),
    "density by half": ("density", _scaled("density", 0.5)),
    "relative velocity taken as absolute": ("relative-velocity", _frame((0.5, -0.3, 0.4), "absolute")),
    "absolute velocity taken as relative": ("relative-velocity", _frame((0.5, -0.3, 0.4), "relative")),
    "velocity in mm/s": ("velocity-unit", _scaled("velocity", 1000.0)),
    "velocity in ft/s": ("velocity-unit", _scaled("velocity", 1 / 0.3048)),
    "velocity in km/h": ("velocity-unit", _scaled("velocity", 3.6)),
    "flow of a port turned round": ("flipped-group", _group_factor("velocity", -1.0)),
    "mass flux of a port turned round": ("flipped-group", _mass_flux(-1.0)),
    "mass flux of a port twice": ("duplicate-group", _mass_flux(2.0)),
    "velocity of a port twice": ("duplicate-group", _group_factor("velocity", 2.0)),
    "mass flux of a port by half": ("missing-group", _mass_flux(0.5)),
    "fields of a port zero": ("missing-group", _zeroed),
    "flow of the whole for a half": ("half-model", _whole_supplied),
    "a port 6 % short": ("not-converged", _unsettled(0.06)),
    "gravity the other way": ("gravity-direction", _gravity(lambda g: -g)),
    "gravity along another axis": ("gravity-direction", _gravity(lambda g: np.linalg.norm(g) * np.array([0, -1.0, 0]))),
    "gravity in cm/s²": ("gravity-direction", _gravity(lambda g: 100.0 * g)),
}
"""Slips by what they are: the id that must be found, and how they are planted."""


# ---- plants in the table itself -------------------------------------------------------------

_ODD = (
    "area_vector", "position_normal", "square_normal", "pressure_force", "moment_of_pressure", "mass_flow",
    "volume_flow", "momentum_flux", "moment_of_momentum_flux", "mass_flow_position", "mass_flow_square",
)  # fmt: skip


def of_table(sound: Sound, group: str, *, factor: float = 1.0, turned: bool = False, dropped: bool = False,
             closed: bool = True) -> CausesFound:  # fmt: skip
    """Causes for the table of a sound flow with one row spoiled or left out."""
    done = sound.outcome()
    setting, table = done.balance.setting, done.balance.table
    names = [each.name for each in setting.groups]
    facts = facts_of(done.flow, setting, tuple(names))
    values, k = table.values.copy(), names.index(group)
    values[k] *= factor
    for name in _ODD if turned else ():
        values[k, column_slice(name)] *= -1
    if dropped:
        keep = np.array([j for j in range(len(names)) if j != k])
        data = GroupData(*(known[keep] for known in (setting.data.flux, setting.data.pressure, setting.data.traction)))
        setting = replace(setting, groups=tuple(setting.groups[j] for j in keep), data=data)
        facts = replace(facts, flow=tuple(facts.flow[j] for j in keep), pressure_array=facts.pressure_array[keep])
        values = values[keep]
    made = balance_table(IntegralTable(values, table.origin), replace(setting, closed=closed))
    return find_causes(made, facts, encloses_hardware=False)


def busiest(sound: Sound) -> str | None:
    """The group that most mass passes; None where nothing flows."""
    return _flow_port(sound)


# ---- judging what was found -----------------------------------------------------------------


def place_of(found: CausesFound, ids: set[str]) -> str:
    """How well the ids planted were found: "first", "equal" to the first, "listed", or "not".

    Causes that are the same algebra on a flow are equal: both must then be named.
    """
    causes = found.causes
    if not causes:
        return "not"
    if set(causes[0].ids) == ids:
        return "first"
    listed = any(set(cause.ids) == ids for cause in causes)
    equal = any(set(one.partition(" ")[0].split("+")) == ids for one in causes[0].equally)
    return "equal" if listed and equal else "listed" if listed else "not"
