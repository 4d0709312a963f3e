"""Slips to plant in sound flows, one at a time: in what is laid on the surface, or in the table made of it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from functools import lru_cache
from typing import Any

import numpy as np

from fluxmesh import PressureMeaning
from fluxmesh.assess.causes import CausesFound, facts_of, find_causes
from fluxmesh.balance.balance import balance_table
from fluxmesh.balance.setting import GroupData
from fluxmesh.field.frame import Frame
from fluxmesh.field.pressure import Head, PressureKind
from fluxmesh.integral.table import IntegralTable, column_slice
from fluxmesh.surface.surface import ControlSurface
from tests.cause_flows import Sound
from tests.flows import face_frames

Array = np.ndarray
AMBIENT = 101325.0

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
    if "traction" not in sound.given or "wall" not in (sound.rest, *sound.roles.values()):
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
        if "velocity" not in sound.given or sound.rest == "wall":
            return None
        table = sound.outcome().balance.table
        # of bent groups the table does not hold what a shift of the velocity takes
        if (np.linalg.norm(table.column("area_vector"), axis=1) < (1 - 1e-6) * table.column("area")).any():
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


@lru_cache(maxsize=64)
def busiest(sound: Sound) -> str | None:
    """The group that most mass passes; None where nothing flows."""
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
        group = busiest(sound)
        return None if group is None else times(sound, group, quantity, factor)

    return plant


def times(sound: Sound, group: str, quantity: str, factor: float) -> Sound:
    values = sound.given[quantity]
    if len(values) == len(sound.solid.faces) != len(sound.solid.points):
        rows = sound.solid.groups[group]
    else:
        sound = _own_group(sound, group)
        rows, values = sound.rows(group), sound.given[quantity]
    changed = values.copy()
    changed[rows] *= factor
    return sound.with_given(**{quantity: changed})


def mass_flux(factor: float) -> Plant:
    """An export of mass fluxes, that of one port times a factor."""

    def plant(sound: Sound) -> Sound | None:
        group = busiest(sound)
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
    group = busiest(sound)
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


def _supplied(sound: Sound, group: str, *others: str) -> dict[str, Array] | None:
    """Velocities to supply for groups in place of the exported ones; None where one velocity does not do there."""
    done = sound.outcome()
    names, table = [each.name for each in done.surface.groups], done.balance.table
    means = table.column("velocity_area") / table.column("area")[:, None]
    given = {name: means[names.index(name)] for name in (group, *others)}
    right = sound.with_given(supplied={name: {"velocity": tuple(mean)} for name, mean in given.items()}).outcome()
    return None if right.verdict.measure > 3e-3 else given


def _whole_supplied(sound: Sound) -> Sound | None:
    """The flow supplied for a port is that of the whole: twice what passes the half."""
    group = busiest(sound)
    given = None if group is None else _supplied(sound, group)
    if group is None or given is None:
        return None
    # a plane that nothing passes, and that holds nothing back along itself, is where a half may be cut
    done = sound.outcome()
    table, groups = done.balance.table, done.surface.groups
    if all(each.role.value != "symmetry" for each in groups):
        normal = table.column("area_vector") / table.column("area")[:, None]
        flat = np.linalg.norm(normal, axis=1) > 1 - 1e-9
        still = np.abs(table.column("mass_flow")) + table.column("reversed_mass_flow") < 1e-9
        dragged = table.column("viscous_force")
        along = np.linalg.norm(dragged - (dragged * normal).sum(axis=1)[:, None] * normal, axis=1)
        free = flat & still & (along <= 1e-9 * np.abs(table.column("viscous_force")).max(initial=1.0))
        for k in np.flatnonzero(free)[:1]:
            sound = replace(sound, roles={**sound.roles, groups[k].name: "symmetry"})
    return sound.with_given(supplied={group: {"velocity": tuple(2 * given[group])}})


def _one_of_two_supplied(sound: Sound) -> Sound | None:
    """The flows of two ports are supplied, and one of them is twice what it is."""
    group = busiest(sound)
    if group is None:
        return None
    done = sound.outcome()
    flows = np.abs(done.balance.table.column("mass_flow"))
    other = done.surface.groups[int(np.argsort(flows)[-2])].name
    given = _supplied(sound, group, other)
    if given is None or np.count_nonzero(flows > 1e-9) < 3:  # with two ports, twice the one is half the other
        return None
    given[group] = 2 * given[group]
    return sound.with_given(supplied={name: {"velocity": tuple(mean)} for name, mean in given.items()})


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
    "centimetres read as metres": ("length-unit", _length(100.0, "m")),
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
    "mass flux of a port turned round": ("flipped-group", mass_flux(-1.0)),
    "mass flux of a port twice": ("duplicate-group", mass_flux(2.0)),
    "velocity of a port twice": ("duplicate-group", _group_factor("velocity", 2.0)),
    "supplied flow of one of two ports twice": ("duplicate-group", _one_of_two_supplied),
    "velocity of a port by half": ("missing-group", _group_factor("velocity", 0.5)),
    "mass flux of a port by half": ("missing-group", mass_flux(0.5)),
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


IN_TABLE: dict[str, tuple[str, dict[str, Any]]] = {
    "faces of a port twice in the table": ("duplicate-group", {"factor": 2.0}),
    "faces of a port turned in the table": ("flipped-group", {"turned": True}),
    "a port left out of the table": ("missing-group", {"dropped": True}),
}
"""Slips in the row of one group: the id that must be found, and what is done to the row."""
