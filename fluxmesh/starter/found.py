"""The groups of faces that a file offers: a tag on each face, named sets, or plane regions that end at a sharp rim."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.guess.tags import tag_arrays
from fluxmesh.assess.review.toml import TomlValue
from fluxmesh.starter.body import Body
from fluxmesh.surface.face_geometry import face_geometry
from fluxmesh.surface.planar import MERGE_SHARE, planar_regions
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.touching import edge_neighbours

__all__ = ["FoundGroup", "FoundGroups", "find_groups"]

Indices = NDArray[np.int64]

# common practice, no source
_SHARP: Final = float(np.cos(np.radians(20.0)))
_SMALLEST_PORT: Final = 1e-4  # area over that of the whole surface
_MOST_PORTS: Final = 24
_MOST_GROUPS: Final = 1000


@dataclass(frozen=True, eq=False)
class FoundGroup:
    """A group as it was found.

    Attributes
    ----------
    name : str
        Name that a case may give it.
    keys : dict of str to TomlValue
        How the case says which faces it has: tag, pick, rest, or nothing.
    faces : ndarray of int64
        Its faces, by their number in the file.
    label : str
        Its name in the file; empty where it has none.
    kind : str
        Kind of boundary that the file states for it; empty where it states none.
    """

    name: str
    keys: dict[str, TomlValue]
    faces: Indices
    label: str = ""
    kind: str = ""


@dataclass(frozen=True, eq=False)
class FoundGroups:
    """All groups of a file.

    Attributes
    ----------
    naming : dict of str to TomlValue, or None
        Value of ``surface.groups``; None where the groups are picked.
    groups : list of FoundGroup
        Every face is in one of them.
    array : str
        The face array that tells them apart; empty where none does.
    notes : list of str
        What the user should know of how they were found.
    """

    naming: dict[str, TomlValue] | None
    groups: list[FoundGroup]
    array: str = ""
    notes: list[str] = field(default_factory=list)


def find_groups(mesh: RawMesh, body: Body) -> FoundGroups:
    """Find the groups of a file.

    Parameters
    ----------
    mesh : RawMesh
        The file.
    body : Body
        Its faces, mended.

    Returns
    -------
    FoundGroups
        By named sets, else by a face array, else by plane regions.
    """
    kinds: Mapping[str, object] = getattr(mesh, "roles", None) or {}
    notes: list[str] = []
    sets = _apart(mesh.face_sets, mesh.face_count, notes)
    if sets:
        return FoundGroups({"sets": True}, _labelled(sets, mesh.face_count, kinds, notes), notes=notes)
    arrays = tag_arrays(mesh.face_arrays)
    if arrays:
        chosen = arrays[0]
        tagged = {tag: np.flatnonzero(chosen.values == tag) for tag in chosen.tags}
        if len(arrays) > 1:
            notes.append(f"Other arrays that may tell groups apart: {', '.join(tag.name for tag in arrays[1:])}")
        groups = _labelled(tagged, mesh.face_count, kinds, notes)
        return FoundGroups({"array": chosen.name}, groups, chosen.name, notes)
    return FoundGroups(None, list(_planes(body, mesh.face_count)), notes=notes)


def _apart(sets: Mapping[str, Indices], count: int, notes: list[str]) -> dict[int | str, Indices]:
    """Return sets that have no face in common, the small ones first; none where one set holds everything."""
    taken = np.zeros(count, np.bool_)
    chosen: dict[int | str, Indices] = {}
    for name in sorted(sets, key=lambda name: sets[name].size):
        faces = sets[name]
        if faces.size == 0 or len(chosen) >= _MOST_GROUPS:
            continue
        if taken[faces].any():
            notes.append(f"The set {name!r} shares faces with smaller ones, and was left out")
            continue
        taken[faces] = True
        chosen[name] = faces
    if len(chosen) == 1 and taken.all():
        notes.clear()
        return {}
    order = {name: place for place, name in enumerate(sets)}
    return dict(sorted(chosen.items(), key=lambda entry: order[str(entry[0])]))


def _labelled(
    tagged: Mapping[int | str, Indices], count: int, kinds: Mapping[str, object], notes: list[str]
) -> list[FoundGroup]:
    left = np.ones(count, np.bool_)
    groups: list[FoundGroup] = []
    names: set[str] = set()
    for tag, faces in tagged.items():
        label = tag if isinstance(tag, str) else ""
        if isinstance(tag, str) and (not tag.strip() or not tag.isprintable()):
            notes.append(f"A case cannot name the tag {tag!r}, which is blank or does not print: rename it in the file")
            continue
        left[faces] = False
        name = _unique(label.strip() if label else f"group_{tag}", names)
        kind = kinds.get(label)
        groups.append(
            FoundGroup(name, {} if name == label else {"tag": tag}, faces, label, "" if kind is None else str(kind))
        )
    if left.any():
        groups.append(FoundGroup(_unique("rest", names), {"rest": True}, np.flatnonzero(left)))
    return groups


def _unique(name: str, names: set[str]) -> str:
    unique, number = name, 2
    while unique in names:
        unique, number = f"{name}_{number}", number + 1
    names.add(unique)
    return unique


def _planes(body: Body, count: int) -> Iterator[FoundGroup]:
    """Yield plane regions with a sharp rim, the largest first, and the rest."""
    connectivity, offsets = body.connectivity, body.offsets
    geometry = face_geometry(body.points, connectivity, offsets)
    every = np.arange(body.kept.size)
    pairs = edge_neighbours(body.points, connectivity, offsets, every, MERGE_SHARE * body.size)
    blunt = np.einsum("ij,ij->i", geometry.normals[pairs[:, 0]], geometry.normals[pairs[:, 1]]) > _SHARP
    left = np.ones(count, np.bool_)
    number = 0
    for region in planar_regions(body.points, connectivity, offsets):
        if number == _MOST_PORTS or region.area < _SMALLEST_PORT * body.areas.sum():
            break
        inside = np.zeros(every.size, np.bool_)
        inside[region.faces] = True
        # a port ends at a sharp edge all round; a strip of a bent wall goes on smoothly
        if (inside[pairs[:, 0]] != inside[pairs[:, 1]])[blunt].any():
            continue
        number += 1
        faces = body.kept[region.faces]
        left[faces] = False
        pick = {"normal": _digits(region.normal, 6), "near": _digits(region.centroid, 6)}
        yield FoundGroup(f"port_{number}", {"pick": pick}, faces)
    if left.any():
        yield FoundGroup("shell", {"rest": True}, np.flatnonzero(left))


def _digits(values: NDArray[np.float64], digits: int) -> list[float]:
    # rounded as one vector: a component that is round-off beside the others is zero
    largest = float(np.abs(values).max())
    place = digits - 1 - int(np.floor(np.log10(largest))) if largest > 0 else 0
    return [float(x) for x in np.round(values, place) + 0.0]
