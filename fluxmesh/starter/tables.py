"""The tables of a proposed case, from what was found."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np

from fluxmesh.assess.guess import ArrayGuess, best_guess
from fluxmesh.assess.guess.words import QUANTITIES
from fluxmesh.assess.review.kinds.ambient import ATMOSPHERE
from fluxmesh.assess.review.kinds.coverage import array_table
from fluxmesh.assess.review.kinds.gravity import STANDARD_GRAVITY
from fluxmesh.assess.review.toml import TomlValue
from fluxmesh.starter.body import Body
from fluxmesh.starter.draft import Draft, Entry, Section
from fluxmesh.starter.found import FoundGroup, FoundGroups
from fluxmesh.starter.roles import GroupShape, RoleGuess
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.surface import Role

__all__ = ["Facts", "draft_of"]

_PLANE = 0.999
_ORDER, _OTHER_ORDER = "xx yy zz xy yz xz", "xx yy zz yz xz xy"
_CONSTANT = 1e-6  # spread of an array of density that is one constant
_FAR = 2.0  # distance of the origin from the middle, over the size, from which on it is no anchor


@dataclass(frozen=True, eq=False)
class Facts:
    """All that a proposal rests on.

    Attributes
    ----------
    mesh : RawMesh
        The file.
    named : str
        Its path as the case names it.
    length_unit : str
        Unit of its coordinates.
    unit_given : bool
        Whether the user stated it.
    body : Body
        Its faces, mended.
    guesses : tuple of ArrayGuess
        What its arrays are.
    found : FoundGroups
        Its groups.
    shapes : list of GroupShape
        What is measured of each group.
    roles : list of RoleGuess
        What each is.
    flux_along_normals : bool
        Whether an exported mass flow counts along the corner order of the file.
    density : str or None
        As the user gave it.
    gravity : tuple of 3 floats, or None
        As the user gave it, m/s².
    """

    mesh: RawMesh
    named: str
    length_unit: str
    unit_given: bool
    body: Body
    guesses: tuple[ArrayGuess, ...]
    found: FoundGroups
    shapes: list[GroupShape]
    roles: list[RoleGuess]
    flux_along_normals: bool
    density: str | None
    gravity: tuple[float, float, float] | None

    def best(self, quantity: str) -> ArrayGuess | None:
        """Return the likeliest array of a quantity, or None.

        Parameters
        ----------
        quantity : str
            The quantity.
        """
        return best_guess(self.guesses, quantity)


def draft_of(facts: Facts) -> Draft:
    """Return the case as it is first proposed.

    Parameters
    ----------
    facts : Facts
        What was found.

    Returns
    -------
    Draft
        To be reviewed and written.
    """
    mesh, stem = facts.mesh, Path(facts.named).stem
    notes = [
        f"Proposed for {Path(facts.named).name}: {mesh.face_count:,} faces, {mesh.points.shape[0]:,} points. "
        "Check every line.",
        f"Arrays on points: {', '.join(sorted(mesh.node_arrays)) or 'none'}",
        f"Arrays on faces: {', '.join(sorted(mesh.face_arrays)) or 'none'}",
        *facts.found.notes,
    ]
    top = Section((), entries=[Entry("title", stem if stem.strip() else "case")])
    flow = _flow(facts)
    sections = [top, _surface(facts), _fluid(facts), *([flow] if flow.entries else [])]
    sections += [
        _group(facts, group, shape, guess) for group, shape, guess in zip(facts.found.groups, facts.shapes, facts.roles)
    ]
    hardware = Section(("hardware",), "its weight enters the reaction", in_force=False)
    hardware.entries = [Entry("mass", "10 kg"), Entry("centre", [0.0, 0.0, 0.0], "m")]
    return Draft(notes, [*sections, hardware, _anchor(facts)])


def _surface(facts: Facts) -> Section:
    section, size = Section(("surface",)), facts.body.size
    section.entries.append(Entry("file", facts.named))
    why = "as given" if facts.unit_given else f"guessed from the size: {size:.4g} m across"
    section.entries.append(Entry("length_unit", facts.length_unit, why))
    if facts.best("velocity") is not None or facts.best("pressure") is not None:
        remark = "a flow was computed within these facets; false where they only stand for a curved wall"
        section.entries.append(Entry("facets_are_geometry", True, remark))
    if facts.found.naming is not None:
        section.entries.append(Entry("groups", facts.found.naming))
    if not facts.body.closed:
        section.notes.append(f"Not closed: {facts.body.fault}")
        remark = "then integrals of each group only: add the missing faces for a balance"
        section.entries.append(Entry("closed", False, remark))
    return section


def _fluid(facts: Facts) -> Section:
    section = Section(("fluid",))
    array = facts.best("density")
    constant = None if array is None else _constant(facts.mesh, array)
    if facts.density is not None:
        section.entries.append(Entry("density", facts.density, "as given"))
    elif array is not None and constant is not None:
        value = f"{constant:.10g} {array.unit or 'kg/m^3'}"
        section.entries.append(Entry("density", value, f"the array '{array.names[0]}' holds this value throughout"))
    elif array is None:
        remark = "the file has none"
        if facts.best("temperature") is not None:
            remark += '; for a gas law = "ideal-gas", gas_constant = "287.05 J/(kg K)" instead'
        section.entries.append(Entry("density", "998.2 kg/m^3", remark, in_force=False, fill_in=True))
    section.entries.append(Entry("ambient_pressure", f"{ATMOSPHERE:g} Pa", "the standard atmosphere"))
    if facts.gravity is not None:
        section.entries.append(Entry("gravity", list(facts.gravity), "m/s², as given"))
    else:
        down = [0.0, 0.0, -STANDARD_GRAVITY]
        remark = "m/s²: in force, it puts the weights of fluid and hardware in the loads"
        section.entries.append(Entry("gravity", down, remark, in_force=False))
    return section


def _constant(mesh: RawMesh, guess: ArrayGuess) -> float | None:
    values = (mesh.node_arrays if guess.at == "nodes" else mesh.face_arrays)[guess.names[0]]
    low, high = float(values.min()), float(values.max())
    return (low + high) / 2 if high - low <= _CONSTANT * abs(high) else None


def _flow(facts: Facts) -> Section:
    section = Section(("flow",))
    more: dict[str, tuple[dict[str, TomlValue], str]] = {
        "velocity": ({"frame": "absolute"}, "in the frame at rest"),
        "pressure": (
            {"kind": "gauge", "head": "included"},
            "kind: gauge, absolute, kinematic; head: included, removed",
        ),
        "traction": ({"acts_on": "wall"}, "viscous part only; acts_on: wall, fluid"),
        "mass_flux": ({}, "through each face; positive: out, face-normal"),
    }
    for quantity, (keys, remark) in more.items():
        guess = facts.best(quantity)
        if guess is None:
            continue
        table = {"unit": _unit(quantity, guess), **array_table(guess, **keys)}
        table = {"array": table.pop("array"), **table}
        if quantity == "pressure":
            table["kind"] = next((kind for kind in ("kinematic", "absolute") if kind in guess.hints), "gauge")
        if quantity == "mass_flux":
            table["positive"] = "face-normal" if facts.flux_along_normals else "out"
        section.entries.append(Entry(quantity, table, remark))
    density = facts.best("density")
    if density is not None and facts.density is None and _varies(facts, density):
        section.entries.append(Entry("density", array_table(density)))
    stress = facts.best("stress")
    if stress is not None and facts.best("traction") is None:
        table = array_table(stress)
        table["order"] = _ORDER
        section.entries.append(Entry("stress", table, f"viscous part only; order of six components, or {_OTHER_ORDER}"))
    return section


def _unit(quantity: str, guess: ArrayGuess) -> str:
    known = QUANTITIES[quantity]
    return guess.unit or (known.over_density if "kinematic" in guess.hints else known.unit)


def _varies(facts: Facts, density: ArrayGuess) -> bool:
    """Return whether an array of density holds more than one value."""
    return _constant(facts.mesh, density) is None


def _group(facts: Facts, group: FoundGroup, shape: GroupShape, guess: RoleGuess) -> Section:
    section = Section(("groups", group.name), _described(facts, group, shape))
    known = guess.role is not None
    role = guess.role.value if guess.role is not None else "inlet"
    reason = guess.reason if known else f"inlet, outlet, open, wall or symmetry ({guess.reason})"
    section.entries.append(Entry("role", role, reason, in_force=known, fill_in=not known))
    section.entries += [Entry(key, value) for key, value in group.keys.items()]
    if known and not Role(role).is_port:
        return section
    if facts.best("velocity") is None and facts.best("mass_flux") is None:
        remark = "or mass_flow, speed, velocity" + ("" if known else "; for a port only")
        section.entries.append(Entry("flow_rate", "10 m^3/h", remark, in_force=False, fill_in=True))
    if facts.best("pressure") is None:
        remark = "gauge" + ("" if known else "; for a port only")
        section.entries.append(Entry("pressure", "200 kPa", remark, in_force=False, fill_in=True))
    return section


def _described(facts: Facts, group: FoundGroup, shape: GroupShape) -> str:
    said = f"{group.faces.size:,} faces, {shape.area:.4g} m²"
    if shape.flatness > _PLANE:
        normal = np.round(shape.normal, 4) + 0.0
        facing = "out of the fluid" if facts.body.closed else "as in the file"
        said += f", plane, normal ({', '.join(f'{x:g}' for x in normal)}) {facing}"
    elif shape.sheets:
        said += ", parallel planes"
    else:
        said += f", not plane (area vector {shape.flatness:.2f} of the area)"
    if shape.entering is not None and shape.leaving is not None and shape.entering + shape.leaving > 0.0:
        unit = "m³/s" if facts.best("velocity") is not None else "kg/s"
        said += f"; enters {shape.entering + 0.0:.4g}, leaves {shape.leaving + 0.0:.4g} {unit}"
    return said


def _anchor(facts: Facts) -> Section:
    at, remark = [0.0, 0.0, 0.0], "m: moments and the reaction are about this point"
    if float(np.linalg.norm(facts.body.middle)) > _FAR * facts.body.size:
        at = [float(f"{x:.6g}") for x in facts.body.middle]
        remark += "; the middle of the surface, far from the origin"
    return Section(("anchor",), entries=[Entry("at", at, remark)])
