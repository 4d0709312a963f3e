"""The review of a case: what it says, gathered as plain evidence."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Final

import numpy as np
from pydantic import BaseModel

from fluxmesh.assess.guess import ArrayGuess, guess_arrays
from fluxmesh.assess.guess.tags import tag_arrays, tag_values
from fluxmesh.assess.review import Evidence, Review, review_of
from fluxmesh.assess.review.evidence import LeftTag, NamedArray, Supplied
from fluxmesh.assess.review.toml import toml_text
from fluxmesh.case.model import Case
from fluxmesh.case.read import parse_case
from fluxmesh.case.values import UnitScale
from fluxmesh.job.fluid import named_fluid
from fluxmesh.job.inside import contents_in, storage_in
from fluxmesh.job.laid import lay_case
from fluxmesh.job.mesh import Loaded, load_mesh
from fluxmesh.job.outcome import Outcome
from fluxmesh.job.run import balance_of, hardware_of, run_case
from fluxmesh.job.shape import Shape, read_shape
from fluxmesh.surface.face_geometry import corners, face_geometry
from fluxmesh.surface.rawmesh import RawMesh

__all__ = ["check_case", "evidence_of", "evidence_of_text", "with_doubts"]

_MOST_TAGS: Final = 50


def check_case(case: Case, *, loaded: Loaded | None = None) -> Review:
    """Say all that is doubtful about a case.

    Parameters
    ----------
    case : Case
        A case that was read.
    loaded : Loaded, optional
        Its mesh, if it was read before.

    Returns
    -------
    Review
        Facts and doubts.

    Raises
    ------
    InputError
        What is plainly wrong; the message says where.
    """
    if case.storage is not None and case.storage.is_series():
        from fluxmesh.job.governing import governing_instant
        from fluxmesh.job.series import run_series

        at, outcome = governing_instant(case, run_series(case))
        return review_of(evidence_of(at, outcome=outcome))
    # all that the balance would refuse is told here too
    loaded = loaded or load_mesh(case)
    return review_of(evidence_of(case, loaded=loaded, outcome=run_case(case, loaded=loaded)))


def with_doubts(case: Case, outcome: Outcome, *, loaded: Loaded | None = None) -> Outcome:
    """Return an outcome with the doubts of a review.

    Parameters
    ----------
    case : Case
        The case.
    outcome : Outcome
        What `fluxmesh.job.run.run_case` made of it.
    loaded : Loaded, optional
        Its mesh, if it was read before.

    Returns
    -------
    Outcome
        With its doubts.
    """
    return replace(outcome, doubts=review_of(evidence_of(case, loaded=loaded, outcome=outcome)).doubts)


def evidence_of_text(content: bytes, path: Path, *, loaded: Loaded) -> Evidence:
    """Gather what a review looks at, for a case that is not in a file yet.

    Parameters
    ----------
    content : bytes
        The case as TOML in UTF-8.
    path : pathlib.Path
        Where it would be.
    loaded : Loaded
        Its mesh.

    Returns
    -------
    Evidence
        As `evidence_of`.

    Raises
    ------
    InputError
        What is plainly wrong; the message says where.
    """
    return evidence_of(parse_case(content, path), loaded=loaded)


def evidence_of(case: Case, *, loaded: Loaded | None = None, outcome: Outcome | None = None) -> Evidence:
    """Gather what a review looks at.

    Parameters
    ----------
    case : Case
        A case that was read.
    loaded : Loaded, optional
        Its mesh, if it was read before.
    outcome : Outcome, optional
        Its balance, if it was done before.

    Returns
    -------
    Evidence
        The surface, the flow, its balance, and what the case says of them.

    Raises
    ------
    InputError
        What is plainly wrong; the message says where.
    """
    loaded = loaded or load_mesh(case)
    case = named_fluid(case)[0]
    if outcome is not None and outcome.shape is not None:
        shape, flow = outcome.shape, outcome.flow
    else:
        shape = read_shape(case, loaded)
        flow = lay_case(case, shape)
    # a mirrored outcome is that of the whole: what is reviewed is the part
    done = outcome if outcome is not None and not case.surface.mirror else None
    done = done or balance_of(
        shape.surface,
        flow,
        anchor=case.anchor.at,
        hardware=hardware_of(case),
        storage=storage_in(case, shape),
        contents=contents_in(case, shape),
    )
    named = tuple(_named(case))
    used = {name for array in named for name in array.names}
    if case.surface.groups is not None and case.surface.groups.array is not None:
        used.add(case.surface.groups.array)
    spare = tuple(_spare(case, shape, used))
    return Evidence(
        shape.surface,
        flow,
        done.balance,
        length_unit=case.surface.length_unit.unit,
        stated=frozenset(_stated(case, "")),
        named=named,
        spare=spare,
        ranges={guess.names[0]: _range(shape, guess) for guess in spare if len(guess.names) == 1},
        unused=tuple(name for name in shape.arrays.names() if name not in used),
        left_tags=tuple(_left_tags(case, loaded.mesh)),
        other_groups=tuple(_other_groups(case, loaded.mesh)),
        supplied=dict(_supplied(case)),
        single=loaded.mesh.points.dtype.itemsize == 4,
        tolerance=case.closure.tolerance,
    )


def _named(case: Case) -> Iterator[NamedArray]:
    for quantity in type(case.flow).model_fields:
        entry = getattr(case.flow, quantity)
        names = getattr(entry, "array", None)
        if names is None:
            continue
        unit = getattr(entry, "unit", None)
        factor = unit.factor if isinstance(unit, UnitScale) else 1.0
        yield NamedArray(quantity, (names,) if isinstance(names, str) else tuple(names), factor)


def _spare(case: Case, shape: Shape, used: set[str]) -> Iterator[ArrayGuess]:
    # arrays that lie in another file than the surface say nothing about those of the surface file
    if any(getattr(case.flow, source, None) is not None for source in ("volume", "points")):
        return
    node = {name: values for name, values in shape.arrays.node.items() if name not in used}
    face = {name: values for name, values in shape.arrays.face.items() if name not in used}
    yield from guess_arrays(node, face)


def _range(shape: Shape, guess: ArrayGuess) -> tuple[float, float]:
    values = (shape.arrays.node if guess.at == "nodes" else shape.arrays.face)[guess.names[0]]
    return float(np.nanmin(values)), float(np.nanmax(values))


def _stated(table: BaseModel, path: str) -> Iterator[str]:
    """Yield the dotted keys that a case states; those of groups bear the group's name."""
    for key in table.model_fields_set:
        here, value = f"{path}{key}", getattr(table, key)
        yield here
        entries = value.items() if isinstance(value, dict) else [("", value)]
        for name, entry in entries:
            if isinstance(entry, BaseModel):
                yield from _stated(entry, f"{here}.{name}." if name else f"{here}.")


def _left_tags(case: Case, mesh: RawMesh) -> Iterator[LeftTag]:
    naming = case.surface.groups
    rest = next((name for name, section in case.groups.items() if section.rest), None)
    if naming is None or rest is None:
        return
    named = {str(tag) for name, section in case.groups.items() if not section.rest for tag in section.tag or (name,)}
    connectivity, offsets = corners(mesh.connectivity, mesh.offsets, mesh.kinds)
    geometry = face_geometry(mesh.points, connectivity, offsets)
    for tag, faces in _tagged(naming.array, mesh):
        if str(tag) in named or faces.size == 0:
            continue
        area = float(geometry.areas[faces].sum())
        vector = np.linalg.norm((geometry.normals[faces] * geometry.areas[faces, None]).sum(axis=0))
        yield LeftTag(tag, rest, int(faces.size), float(vector) / area if area > 0 else 0.0)


def _tagged(array: str | None, mesh: RawMesh) -> Iterator[tuple[int | str, np.ndarray[tuple[int], np.dtype[np.int64]]]]:
    if array is None:
        yield from mesh.face_sets.items()
        return
    values = tag_values(mesh.face_arrays[array]) if array in mesh.face_arrays else None
    tags = () if values is None else np.unique(values)
    if values is None or len(tags) > _MOST_TAGS:
        return
    for tag in tags:
        yield (str(tag) if values.dtype.kind == "U" else int(tag)), np.flatnonzero(values == tag)


def _other_groups(case: Case, mesh: RawMesh) -> Iterator[str]:
    """Yield lines by which the file could name the groups, where the case picks them."""
    if case.surface.files is not None or case.surface.groups is not None or len(case.groups) < 2:
        return
    if len(mesh.face_sets) > 1:
        yield "groups = { sets = true }"
    for tag in tag_arrays(mesh.face_arrays):
        if tag.named:
            yield f"groups = {{ array = {toml_text(tag.name)} }}"


def _supplied(case: Case) -> Iterator[tuple[str, Supplied]]:
    for name, section in case.groups.items():
        for key in section.supplied_flow():
            value = getattr(section, key)
            yield name, Supplied(key, value if isinstance(value, tuple) else float(value))
