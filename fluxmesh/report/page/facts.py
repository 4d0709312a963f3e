"""Single facts of a page: a name, and a number, a vector or words."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Final

from fluxmesh.report.page.source import Figure, Source, pointer

__all__ = [
    "Fact",
    "action_facts",
    "input_facts",
    "motion_facts",
    "release_facts",
    "shape_facts",
    "short_form_facts",
    "storage_words",
]


@dataclass(frozen=True)
class Fact:
    """A fact.

    Attributes
    ----------
    label : str
        What it is.
    figures : tuple of Figure
        One number, or the three of a vector; none for words.
    words : str
        Said in place of figures.
    """

    label: str
    figures: tuple[Figure, ...] = ()
    words: str = ""

    @property
    def quantity(self) -> str:
        """Quantity of the figures."""
        return self.figures[0].quantity if self.figures else ""


class _Facts:
    """Facts of one list, those that the result has."""

    def __init__(self, source: Source) -> None:
        self._source = source
        self.made: list[Fact] = []

    def number(self, label: str, quantity: str, *path: str | int, form: str = "number") -> None:
        """Add a number, where it is there."""
        if isinstance(self._source.get(*path), int | float):
            self.made.append(Fact(label, (self._source.figure(quantity, *path, form=form),)))

    def vector(self, label: str, quantity: str, *path: str | int, form: str = "number") -> None:
        """Add a vector, where it is there."""
        found = self._source.get(*path)
        if isinstance(found, list | tuple) and len(found) == 3:
            size = self._source.size(*path) or 0.0
            parts = (self._source.figure(quantity, *path, k, size=size, form=form) for k in range(3))
            self.made.append(Fact(label, tuple(parts)))

    def words(self, label: str, said: Any) -> None:
        """Add words, where there are any."""
        if said not in (None, "", [], (), {}):
            self.made.append(Fact(label, words=str(said)))


def shape_facts(source: Source) -> list[Fact]:
    """Return what is known of the surface and of the fluid in it.

    Parameters
    ----------
    source : Source
        The result.
    """
    facts = _Facts(source)
    closed = source.get("geometry", "closed")
    if closed is not None:
        facts.words("control surface", "closed" if closed else "open, as the case says")
    facts.number("area", "area", "geometry", "area")
    facts.number("volume inside", "volume", "geometry", "volume")
    facts.vector("centre of the volume", "length", "geometry", "centroid")
    facts.number("mass of the fluid held", "mass", "fluid", "mass")
    facts.vector("weight of the fluid held", "force", "fluid", "weight")
    facts.vector("centre of the fluid held", "length", "fluid", "centre")
    facts.number("mass of the hardware", "mass", "inputs", "hardware", "mass", form="given")
    facts.vector("centre of the hardware", "length", "inputs", "hardware", "centre", form="given")
    return facts.made


def action_facts(source: Source) -> list[Fact]:
    """Return where the reaction acts.

    Parameters
    ----------
    source : Source
        The result.
    """
    facts = _Facts(source)
    facts.vector("acts at the anchor", "length", "reaction", "at")
    facts.vector("line of action through", "length", "reaction", "line_of_action", "point")
    facts.vector("along", "", "reaction", "line_of_action", "direction")
    facts.number("couple about that line", "moment", "reaction", "line_of_action", "couple")
    if facts.made and source.get("reaction", "line_of_action") is None:
        facts.words("line of action", "not known, as the moment is not")
    return facts.made


def release_facts(source: Source) -> list[Fact]:
    """Return what would happen if the anchor let go.

    Parameters
    ----------
    source : Source
        The result.
    """
    facts = _Facts(source)
    facts.vector("hardware and fluid would start along", "", "release", "direction")
    facts.vector("with an acceleration of", "acceleration", "release", "acceleration")
    facts.vector("turned, about their common centre, by", "moment", "release", "turning_moment")
    return facts.made


def short_form_facts(source: Source) -> list[Fact]:
    """Return the momentum balance in its short form, for one inlet and one outlet.

    Parameters
    ----------
    source : Source
        The result.
    """
    facts = _Facts(source)
    inlet, outlet = source.get("short_form", "inlet"), source.get("short_form", "outlet")
    facts.number("mass flow", "mass flow", "short_form", "mass_flow")
    facts.vector(f"mean velocity at {inlet}", "speed", "short_form", "inlet_velocity")
    facts.vector(f"mean velocity at {outlet}", "speed", "short_form", "outlet_velocity")
    facts.vector("mass flow × (outlet less inlet velocity)", "force", "short_form", "rate")
    facts.vector("added by the shape of the profiles", "force", "short_form", "profile_effect")
    return facts.made


def motion_facts(source: Source) -> list[Fact]:
    """Return how the control surface moves, and what moving hardware gains.

    Parameters
    ----------
    source : Source
        The result.
    """
    facts = _Facts(source)
    frame = source.get("frame")
    if not isinstance(frame, dict):
        return []
    if any(frame.get("velocity") or ()):
        facts.vector("moves at", "speed", "frame", "velocity")
    if any(frame.get("acceleration") or ()):
        facts.vector("accelerates at", "acceleration", "frame", "acceleration")
    if frame.get("rate"):
        facts.number("turns at", "turning", "frame", "rate")
        turns = float(frame["rate"])
        source.units.note("rotation", turns)
        facts.made.append(Fact("that is", (Figure(turns, "rotation", ((1.0, (pointer("frame", "rate"),)),)),)))
        facts.vector("about the axis", "", "frame", "axis")
        facts.vector("through", "length", "frame", "through")
    for way, word in (("balance", "from the balance"), ("walls", "from the walls")):
        facts.number(f"torque on the hardware about the axis, {word}", "moment", "frame", "power_on_hardware",
                     f"torque_from_{way}")  # fmt: skip
    for way, word in (("balance", "from the balance"), ("walls", "from the walls")):
        facts.number(f"power to the moving hardware, {word}", "power", "frame", "power_on_hardware", f"from_{way}")
    return facts.made


_BASES: Final = {
    "given": "as the case gives it",
    "snapshots": "from the snapshots of the flow inside",
    "surface": "from the surfaces alone, for a fluid of one density",
}


def storage_words(source: Source) -> list[str]:
    """Return what is said of the storage, one sentence each; nothing for a steady flow.

    Parameters
    ----------
    source : Source
        The result.
    """
    notes = [f"{note}." for note in source.get("storage", "notes") or ()]
    stored = [source.get("mass", "storage"), *(source.get("momentum", "storage") or ())]
    if any(stored) and source.get("frame") is None:
        basis = str(source.get("storage", "basis"))
        notes.insert(0, f"What the volume holds changes, {_BASES.get(basis, basis)}.")
    return notes


def input_facts(source: Source) -> list[Fact]:
    """Return the numbers of the case that the figures rest on.

    Parameters
    ----------
    source : Source
        The result.
    """
    facts = _Facts(source)
    inputs = source.get("inputs") or {}
    facts.number("density", "density", "inputs", "density", form="given")
    if inputs.get("density_of_fluid_held") != inputs.get("density"):
        facts.number("density of the fluid held", "density", "inputs", "density_of_fluid_held")
    facts.number("ambient pressure", "pressure", "inputs", "ambient_pressure", form="given")
    facts.vector("gravity", "acceleration", "inputs", "gravity", form="given")
    facts.vector("anchor", "length", "inputs", "anchor", form="given")
    pressure = inputs.get("pressure") or {}
    if pressure:
        facts.words("pressure as exported", f"{pressure.get('kind')}, head {pressure.get('head')}")
    facts.words("unit of the file's coordinates", inputs.get("length_unit"))
    return facts.made
