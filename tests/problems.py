"""A whole problem as plain data, and the same told in another way: elsewhere, turned, mirrored, in other units.

Every quantity has a kind that says how it changes: ``""`` a scalar, ``"v"`` a vector, ``"a"`` an axial vector (a
moment, a rate of turning), ``"p"`` a number that a mirror turns round (a swirl), ``"x"`` a place, and ``"vv"``,
``"vvv"`` tensors; and a dimension as powers of (kg, m, s).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, fields, replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fluxmesh import Carried, Contents, Frame, Hardware, Outcome, Scalars, Storage, balance_of, lay_flow, lay_scalar
from fluxmesh.field.flow import Flow
from fluxmesh.field.pressure import PressureMeaning
from fluxmesh.surface.surface import ControlSurface
from tests.solids import Solid

Array = NDArray[np.float64]
Dimension = tuple[float, float, float]

NONE: Dimension = (0, 0, 0)
LENGTH: Dimension = (0, 1, 0)
SPEED: Dimension = (0, 1, -1)
ACCELERATION: Dimension = (0, 1, -2)
DENSITY: Dimension = (1, -3, 0)
STRESS: Dimension = (1, -1, -2)
FLOW: Dimension = (1, 0, -1)
FORCE: Dimension = (1, 1, -2)
MOMENT: Dimension = (1, 2, -2)
POWER: Dimension = (1, 2, -3)
MASS: Dimension = (1, 0, 0)
SPECIFIC: Dimension = (0, 2, -2)  # J/kg, and J/(kg K): kelvins stay

# ---- the same told in another way ------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class Change:
    """Turn (or mirror) about the origin, then shift, then write in other units, `units` for a kg, a m and a s."""

    turn: Array = field(default_factory=lambda: np.eye(3))
    shift: Array = field(default_factory=lambda: np.zeros(3))
    units: tuple[float, float, float] = (1.0, 1.0, 1.0)

    def __call__(self, value: Any, kind: str, dimension: Dimension) -> Any:
        """Return the quantity as it is after the change; None stays None."""
        if value is None:
            return None
        found = np.asarray(value, dtype=np.float64)
        rank = {"p": 0}.get(kind, len(kind))
        for axis in range(found.ndim - rank, found.ndim):
            found = np.moveaxis(np.tensordot(found, self.turn, axes=(axis, 1)), -1, axis)
        if kind in ("a", "p"):
            found = found * self.handed
        if kind == "x":
            found = found + self.shift
        factor = np.prod([unit**power for unit, power in zip(self.units, dimension)])
        found = found * factor
        return float(found) if found.ndim == 0 else found

    @property
    def handed(self) -> float:
        """-1 for a mirror."""
        return float(np.sign(np.linalg.det(self.turn)))


# ---- the problem ------------------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class Laid:
    """Values on ``nodes`` or ``faces``."""

    at: str
    values: Array


# kind and dimension of everything that is laid or supplied
QUANTITIES: Mapping[str, tuple[str, Dimension]] = {
    "velocity": ("v", SPEED),
    "pressure": ("", STRESS),
    "traction": ("v", STRESS),
    "density": ("", DENSITY),
    "mass flux": ("", FLOW),
    "temperature": ("", NONE),
    "enthalpy": ("", SPECIFIC),
    "salt": ("", NONE),
    "dye": ("", NONE),
}
STORAGE: Mapping[str, tuple[str, Dimension]] = {
    "mass": ("", FLOW),
    "momentum": ("v", FORCE),
    "angular_momentum": ("a", MOMENT),
    "energy": ("", POWER),
    "mass_moment": ("v", (1, 1, -1)),
    "inertia": ("vv", (1, 2, -1)),
}
CONTENTS: Mapping[str, tuple[str, Dimension]] = {
    "origin": ("x", LENGTH),
    "volume": ("", (0, 3, 0)),
    "centroid": ("x", LENGTH),
    "mass": ("", MASS),
    "mass_moment": ("v", (1, 1, 0)),
    "mass_inertia": ("vv", (1, 2, 0)),
    "momentum": ("v", (1, 1, -1)),
    "moment_of_velocity": ("vv", (1, 2, -1)),
    "kinetic_energy": ("", (1, 2, -2)),
    "internal_energy": ("", (1, 2, -2)),
}
CARRIED: Mapping[str, Dimension] = {"salt": FLOW, "dye": (0, 3, -1)}  # a second: per mass, and per volume
HEAT_CAPACITY = 3.0
GAS_CONSTANT = 1.7
RATIO = 1.4


@dataclass(frozen=True, eq=False)
class Problem:
    """A body in named groups with data on it; lengths, speeds, densities and stresses are of the size of one.

    `fields` and `supplied` have the names of `QUANTITIES`; `basis` is ``temperature``, ``enthalpy`` or empty.
    `origin` is where the table of integrals is taken about, in comparisons of tables.
    """

    solid: Solid
    roles: Mapping[str, str]
    fields: Mapping[str, Laid]
    density: float
    supplied: Mapping[str, Mapping[str, Any]] = field(default_factory=dict)
    kind: str = "gauge"
    head: str = "included"
    datum: Array = field(default_factory=lambda: np.zeros(3))
    ambient: float | None = None
    gravity: Array = field(default_factory=lambda: np.zeros(3))
    anchor: Array = field(default_factory=lambda: np.zeros(3))
    origin: Array = field(default_factory=lambda: np.zeros(3))
    hardware: Hardware | None = None
    frame: Frame | None = None
    velocity_frame: str = "absolute"
    storage: Storage | None = None
    contents: Contents | None = None
    basis: str = ""
    heat: float | None = None
    shaft_power: float | None = None
    sources: Mapping[str, float] = field(default_factory=lambda: {"salt": 0.0, "dye": 0.0})
    gas: bool = False
    capacity: float = HEAT_CAPACITY
    constant: float = GAS_CONSTANT

    def __repr__(self) -> str:
        """Say what kind of problem it is; the numbers follow from the seeds that hypothesis shows."""
        places = {name: one.at for name, one in self.fields.items()}
        kinds = np.unique([face.size for face in self.solid.faces]).tolist()
        groups = {name: len(members) for name, members in self.solid.groups.items()}
        rest = {name: getattr(self, name) for name in ("kind", "head", "gas", "basis", "frame", "velocity_frame")}
        given = [name for name in ("storage", "contents", "supplied") if getattr(self, name)]
        return f"Problem(faces of {kinds}, curved={self.solid.curved}, {groups}, {places}, {rest}, {given})"

    def _repr_pretty_(self, printer: Any, cycle: bool) -> None:
        printer.text(repr(self))

    # ---- in the words of the library ----------------------------------------------------------

    @cached_property
    def surface(self) -> ControlSurface:
        return self.solid.surface(self.roles)

    def laid(self) -> dict[str, Any]:
        """Arguments of `fluxmesh.lay_flow` that hold values."""
        names = [name for name in ("velocity", "pressure", "traction", "density", "mass flux") if name in self.fields]
        found: dict[str, Any] = {name.replace(" ", "_"): self.fields[name].values for name in names}
        found.setdefault("density", self.density)
        found["at"] = {name: self.fields[name].at for name in names}
        found["supplied"] = self.supplied
        return found

    @cached_property
    def flow(self) -> Flow:
        return lay_flow(
            self.surface,
            **self.laid(),
            meaning=PressureMeaning(self.kind, self.head, tuple(self.datum)),
            ambient=self.ambient,
            gravity=self.gravity,
            frame=self.frame,
            velocity_frame=self.velocity_frame,
        )

    @cached_property
    def scalars(self) -> Scalars:
        def lay(name: str) -> Any:
            return lay_scalar(self.surface, name, self.fields[name].values, at=self.fields[name].at)

        return Scalars(
            temperature=lay("temperature") if self.basis == "temperature" else None,
            enthalpy=lay("enthalpy") if self.basis == "enthalpy" else None,
            heat_capacity=self.capacity,
            gas=self.gas,
            carried=(
                Carried(lay("salt"), source=self.sources["salt"]),
                Carried(lay("dye"), per="volume", source=self.sources["dye"]),
            ),
            heat=self.heat,
            shaft_power=self.shaft_power,
        )

    def balanced(self, threads: int | None = 1) -> Outcome:
        return balance_of(
            self.surface,
            self.flow,
            anchor=self.anchor,
            hardware=self.hardware,
            heat_ratio=RATIO if self.gas else None,
            gas_constant=self.constant if self.gas else None,
            scalars=self.scalars,
            losses=[(("feed", "drain"), None)] if {"feed", "drain"} <= self.solid.groups.keys() else (),
            storage=self.storage,
            contents=self.contents,
            threads=threads,
        )

    @cached_property
    def outcome(self) -> Outcome:
        return self.balanced()

    # ---- told in another way ------------------------------------------------------------------

    def told(self, change: Change) -> Problem:
        """Return the same problem after a change."""
        solid = replace(self.solid, points=change(self.solid.points, "x", LENGTH))
        if change.handed < 0:
            solid = replace(solid, faces=[backward(face, solid.curved) for face in solid.faces])
        hardware, frame = self.hardware, self.frame
        if hardware is not None:
            hardware = Hardware(change(hardware.mass, "", MASS), tuple(change(hardware.centre, "x", LENGTH)))
        if frame is not None:
            frame = Frame(
                tuple(change(frame.velocity, "v", SPEED)),
                tuple(change(frame.acceleration, "v", ACCELERATION)),
                change(frame.rate, "", (0, 0, -1)),
                tuple(change(frame.axis, "a", NONE)),
                tuple(change(frame.through, "x", LENGTH)),
            )
        stress = SPECIFIC if self.kind == "kinematic" else STRESS
        return replace(
            self,
            solid=solid,
            fields={
                name: replace(one, values=change(one.values, *_of(name, stress))) for name, one in self.fields.items()
            },
            density=change(self.density, "", DENSITY),
            supplied={
                group: {name: change(value, *QUANTITIES[name]) for name, value in values.items()}
                for group, values in self.supplied.items()
            },
            datum=change(self.datum, "x", LENGTH),
            ambient=change(self.ambient, "", STRESS),
            gravity=change(self.gravity, "v", ACCELERATION),
            anchor=change(self.anchor, "x", LENGTH),
            origin=change(self.origin, "x", LENGTH),
            hardware=hardware,
            frame=frame,
            storage=None if self.storage is None else self._stored(change),
            contents=None if self.contents is None else _changed(self.contents, CONTENTS, change),
            heat=change(self.heat, "", POWER),
            shaft_power=change(self.shaft_power, "", POWER),
            sources={name: change(value, "", CARRIED[name]) for name, value in self.sources.items()},
            capacity=change(self.capacity, "", SPECIFIC),
            constant=change(self.constant, "", SPECIFIC),
        )

    def _stored(self, change: Change) -> Storage:
        assert self.storage is not None
        rates = {name: change(rate, "", CARRIED[name]) for name, rate in self.storage.carried.items()}
        return replace(_changed(self.storage, STORAGE, change), carried=rates)

    def with_field(self, name: str, values: ArrayLike, at: str | None = None) -> Problem:
        """Return the problem with other values of one field."""
        place = self.fields[name].at if at is None else at
        return replace(self, fields={**self.fields, name: Laid(place, np.asarray(values, dtype=np.float64))})

    def per_node(self, change: Callable[[Array], Array], solid: Solid) -> Problem:
        """Return the problem on another solid, arrays on nodes changed to those of its points."""
        return self._per("nodes", change, solid)

    def per_face(self, change: Callable[[Array], Array], solid: Solid) -> Problem:
        """Return the problem on another solid, arrays on faces changed to those of its faces."""
        return self._per("faces", change, solid)

    def _per(self, place: str, change: Callable[[Array], Array], solid: Solid) -> Problem:
        changed = {
            name: replace(one, values=change(one.values)) if one.at == place else one
            for name, one in self.fields.items()
        }
        return replace(self, solid=solid, fields=changed)


def _of(name: str, stress: Dimension) -> tuple[str, Dimension]:
    return ("", stress) if name == "pressure" else QUANTITIES[name]


def _changed(thing: Any, table: Mapping[str, tuple[str, Dimension]], change: Change) -> Any:
    names = {one.name for one in fields(thing)}
    return replace(thing, **{name: change(getattr(thing, name), *how) for name, how in table.items() if name in names})


def backward(face: NDArray[np.int64], curved: bool) -> NDArray[np.int64]:
    """Return a face run the other way; mid-side points follow their edges."""
    corners = {6: 3, 8: 4, 9: 4}.get(face.size) if curved else None
    if corners is None:
        return np.concatenate([face[:1], face[:0:-1]])
    ring, mids, rest = face[:corners], face[corners : 2 * corners], face[2 * corners :]
    return np.concatenate([ring[:1], ring[:0:-1], mids[::-1], rest])
