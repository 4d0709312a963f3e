"""From a mesh file to a commented case."""

from __future__ import annotations

import os
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from fluxmesh.assess.guess import ArrayGuess, best_guess, guess_arrays
from fluxmesh.assess.review.kinds.lengths import LARGEST
from fluxmesh.assess.review.toml import toml_key
from fluxmesh.errors import FileError
from fluxmesh.starter.body import Body, Floats, body_of, face_values, flux_along_normals
from fluxmesh.starter.draft import Draft
from fluxmesh.starter.found import FoundGroup, FoundGroups, find_groups
from fluxmesh.starter.roles import GroupShape, RoleGuess, guess_roles, shape_of
from fluxmesh.starter.settle import settle_draft
from fluxmesh.starter.tables import Facts, draft_of
from fluxmesh.starter.write import draft_text
from fluxmesh.surface.files import read_mesh
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.surface import Role
from fluxmesh.units import parse_quantity, parse_vector, unit_factor

__all__ = ["Proposal", "propose_case"]


@dataclass(frozen=True)
class Proposal:
    """A case proposed for a mesh.

    Attributes
    ----------
    text : str
        TOML with comments; lines that must be filled in are commented out and
        marked ``FILL IN``.
    missing : tuple of str
        The keys of these lines.
    doubts : int
        What is left to look at; it stands as comments at the head of the text.
    """

    text: str
    missing: tuple[str, ...]
    doubts: int


def propose_case(
    mesh_file: Path,
    *,
    unit: str | None = None,
    density: str | None = None,
    gravity: Sequence[float] | None = None,
    beside: Path | None = None,
) -> Proposal:
    """Return a commented case for a mesh.

    Parameters
    ----------
    mesh_file : pathlib.Path
        A file with a surface.
    unit : str, optional
        Length unit of its coordinates; guessed from the size by default.
    density : str, optional
        Density of the fluid, such as "998.2 kg/m^3"; that of an array by
        default, else it must be filled in.
    gravity : sequence of 3 floats, optional
        m/s²; by default that whose head the pressure holds, or none.
    beside : pathlib.Path, optional
        Where the case will be written, so that it names the mesh relative to
        there; the current folder by default.

    Returns
    -------
    Proposal
        Groups with their roles, arrays with their meaning, and what is missing.

    Raises
    ------
    InputError
        The file cannot be read, its name cannot stand in a case, or a unit does not fit.
    """
    if density is not None:
        parse_quantity(density, "kg/m^3", "--density")
    down = None if gravity is None else parse_vector(list(gravity), "m/s^2", "--gravity")
    if unit is not None:
        unit_factor(unit, "m", "--unit")
    folder = Path.cwd() if beside is None else beside.resolve().parent
    named = os.path.relpath(mesh_file.resolve(), folder)
    if not named.isprintable():
        raise FileError("has a name that does not print", repr(str(mesh_file)), "A case cannot name it: rename it")
    mesh = read_mesh(mesh_file)
    length = unit or _guess_unit(mesh)
    body = body_of(mesh, unit_factor(length, "m", "--unit"))
    guesses = guess_arrays(mesh.node_arrays, mesh.face_arrays)
    through, speeds, along = _flows(mesh, body, guesses)
    found = find_groups(mesh, body)
    shapes = [shape_of(group, body, through, speeds) for group in found.groups]
    roles = guess_roles(found.groups, shapes)
    if found.naming is None and through is not None:
        found, shapes, roles = _ports_only(found, body, through, speeds, roles)
    facts = Facts(mesh, named, length, unit is not None, body, guesses, found, shapes, roles, along, density, down)
    draft = draft_of(facts)
    doubts = settle_draft(draft, mesh, folder / "proposed.toml", unit_given=unit is not None)
    return Proposal(draft_text(draft), _missing(draft), doubts)


def _missing(draft: Draft) -> tuple[str, ...]:
    return tuple(toml_key(*path) for path in draft.missing())


def _guess_unit(mesh: RawMesh) -> str:
    points = np.asarray(mesh.points, dtype=np.float64)
    size = float(np.linalg.norm(np.ptp(points, axis=0))) if points.size else 0.0
    return "mm" if size >= LARGEST else "m"


def _flows(mesh: RawMesh, body: Body, guesses: tuple[ArrayGuess, ...]) -> tuple[Floats | None, Floats | None, bool]:
    """Return the flow out through each face, the speed on it, and whether a mass flow counts along normals."""
    velocity, flux = best_guess(guesses, "velocity"), best_guess(guesses, "mass_flux")
    through, speeds, along = None, None, False
    if velocity is not None:
        values = face_values(mesh, velocity)
        if np.isfinite(values).all():
            through, speeds = np.einsum("ij,ij->i", values, body.vectors), np.linalg.norm(values, axis=1)
    if flux is not None:
        values = face_values(mesh, flux)
        if np.isfinite(values).all():
            along = flux_along_normals(values, body, through)
            if through is None:
                through = body.sign * values if along else values
    return through, speeds, along


def _ports_only(
    found: FoundGroups, body: Body, through: Floats, speeds: Floats | None, roles: list[RoleGuess]
) -> tuple[FoundGroups, list[GroupShape], list[RoleGuess]]:
    """Keep the plane regions that flow passes, and symmetry cuts; all else is the rest."""
    kept = [
        group
        for group, guess in zip(found.groups, roles)
        if "pick" in group.keys and guess.role is not None and guess.role is not Role.WALL
    ]
    left = np.ones(body.areas.size, np.bool_)
    groups = []
    for number, group in enumerate(kept, 1):
        left[group.faces] = False
        groups.append(FoundGroup(f"port_{number}", group.keys, group.faces))
    if left.any():
        groups.append(FoundGroup("shell", {"rest": True}, np.flatnonzero(left)))
    shapes = [shape_of(group, body, through, speeds) for group in groups]
    return FoundGroups(None, groups, notes=found.notes), shapes, guess_roles(groups, shapes)
