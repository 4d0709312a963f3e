"""Several meshes put into one, a group each."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.faces import gather
from fluxmesh.surface.surface import Role

__all__ = ["JoinedMeshes", "join_meshes", "keep_faces"]


@dataclass(frozen=True, eq=False)
class JoinedMeshes:
    """One mesh made of several, and what came from which.

    Attributes
    ----------
    mesh : RawMesh
        All faces, mesh by mesh. An array that only some meshes have is NaN
        (text: empty) on the others.
    group_of_face : ndarray, shape (n_faces,), int32
        Index into `names`: the mesh each face came from.
    group_of_point : ndarray, shape (n_points,), int32
        The same for points.
    names : tuple of str
        Names of the meshes, in the order given.
    node_arrays, face_arrays : dict of str to frozenset of str
        Mesh name -> names of the arrays that mesh really has.
    """

    mesh: RawMesh
    group_of_face: NDArray[np.int32]
    group_of_point: NDArray[np.int32]
    names: tuple[str, ...]
    node_arrays: dict[str, frozenset[str]]
    face_arrays: dict[str, frozenset[str]]


def join_meshes(meshes: Mapping[str, RawMesh]) -> JoinedMeshes:
    """Put meshes one after the other; points are not merged.

    Parameters
    ----------
    meshes : mapping of str to RawMesh
        At least one.

    Returns
    -------
    JoinedMeshes
        Face sets of one name are united: such a set has the arrays that all
        its parts have, and the role that they agree on. Integer arrays become
        float64 only where a mesh lacks them or another one has floats.

    Raises
    ------
    FieldError
        An array has different numbers of components in two of them, or is
        text in one and numbers in another.
    """
    parts = list(meshes.values())
    point_counts = [part.points.shape[0] for part in parts]
    face_counts = [part.face_count for part in parts]
    first_points, first_faces = _firsts(point_counts), _firsts(face_counts)
    sets: dict[str, list[NDArray[np.int64]]] = {}
    skipped: dict[str, int] = {}
    for part, first in zip(parts, first_faces):
        for name, faces in part.face_sets.items():
            sets.setdefault(name, []).append(faces + first)
        for name, count in part.skipped.items():
            skipped[name] = skipped.get(name, 0) + count
    has = [frozenset(part.node_arrays) | frozenset(part.face_arrays) for part in parts]
    index = np.arange(len(parts), dtype=np.int32)
    mesh = RawMesh(
        source=", ".join(part.source for part in parts),
        points=np.concatenate([part.points for part in parts]),
        connectivity=np.concatenate([part.connectivity + first for part, first in zip(parts, first_points)]),
        offsets=_join_offsets(parts),
        kinds=_join_kinds(parts),
        node_arrays=_join_arrays([part.node_arrays for part in parts], point_counts, list(meshes)),
        face_arrays=_join_arrays([part.face_arrays for part in parts], face_counts, list(meshes)),
        face_sets={name: np.concatenate(faces) for name, faces in sets.items()},
        skipped=skipped,
        volume_cells=sum(part.volume_cells for part in parts),
        sets_have=_join_haves(parts, has),
        roles=_join_roles(parts),
        derived=" and ".join(part.derived for part in parts if part.derived),
        notes=tuple(dict.fromkeys(note for part in parts for note in part.notes)),
    )
    return JoinedMeshes(
        mesh=mesh,
        group_of_face=np.repeat(index, face_counts),
        group_of_point=np.repeat(index, point_counts),
        names=tuple(meshes),
        node_arrays={name: frozenset(part.node_arrays) for name, part in meshes.items()},
        face_arrays={name: frozenset(part.face_arrays) for name, part in meshes.items()},
    )


def keep_faces(mesh: RawMesh, kept: NDArray[np.int64]) -> RawMesh:
    """Take some faces of a mesh, and the points that they use.

    Parameters
    ----------
    mesh : RawMesh
        All faces.
    kept : ndarray, shape (k,), int64
        Faces to keep, each once, in this order.

    Returns
    -------
    RawMesh
        Those faces, with arrays and sets to match; sets that lose all their
        faces are gone. Points keep their order.
    """
    offsets = mesh.offsets
    if offsets is None:
        connectivity = mesh.connectivity.reshape(-1, 3)[kept].ravel()
    else:
        connectivity, offsets = gather(mesh.connectivity, offsets, kept)
    used = np.zeros(mesh.points.shape[0], dtype=np.bool_)
    used[connectivity] = True
    points = np.flatnonzero(used)
    place = np.zeros(used.size, dtype=np.int64)
    place[points] = np.arange(points.size)
    position = np.full(mesh.face_count, -1, dtype=np.int64)
    position[kept] = np.arange(kept.size)
    sets = {name: position[faces][position[faces] >= 0] for name, faces in mesh.face_sets.items()}
    sets = {name: faces for name, faces in sets.items() if faces.size}
    return replace(
        mesh,
        points=mesh.points[points],
        connectivity=place[connectivity],
        offsets=offsets,
        kinds=None if mesh.kinds is None else mesh.kinds[kept],
        node_arrays={name: values[points] for name, values in mesh.node_arrays.items()},
        face_arrays={name: values[kept] for name, values in mesh.face_arrays.items()},
        face_sets=sets,
        sets_have=None if mesh.sets_have is None else {name: mesh.sets_have[name] for name in sets},
        roles={name: role for name, role in mesh.roles.items() if name in sets},
    )


def _join_haves(parts: Sequence[RawMesh], has: Sequence[frozenset[str]]) -> dict[str, frozenset[str]] | None:
    """Return what each set has, or None when every set has all arrays."""
    if len(set(has)) == 1 and all(part.sets_have is None for part in parts):
        return None
    joined: dict[str, frozenset[str]] = {}
    for part, arrays in zip(parts, has):
        for name in part.face_sets:
            own = arrays if part.sets_have is None else part.sets_have[name]
            joined[name] = joined[name] & own if name in joined else own
    return joined


def _join_roles(parts: Sequence[RawMesh]) -> dict[str, Role]:
    """Return the role of each set, unless two parts of it differ."""
    said: dict[str, set[Role | None]] = {}
    for part in parts:
        for name in part.face_sets:
            said.setdefault(name, set()).add(part.roles.get(name))
    return {name: role for name, roles in said.items() if len(roles) == 1 and (role := next(iter(roles))) is not None}


def _firsts(counts: Sequence[int]) -> NDArray[np.int64]:
    return np.concatenate([[0], np.cumsum(counts)[:-1]]).astype(np.int64)


def _join_offsets(parts: Sequence[RawMesh]) -> NDArray[np.int64] | None:
    if all(part.offsets is None for part in parts):
        return None
    sizes = [
        np.full(part.face_count, 3, dtype=np.int64) if part.offsets is None else np.diff(part.offsets) for part in parts
    ]
    return np.concatenate([np.zeros(1, dtype=np.int64), np.cumsum(np.concatenate(sizes))])


def _join_kinds(parts: Sequence[RawMesh]) -> NDArray[np.int8] | None:
    if all(part.kinds is None for part in parts):
        return None
    return np.concatenate(
        [np.zeros(part.face_count, dtype=np.int8) if part.kinds is None else part.kinds for part in parts]
    )


def _join_arrays(
    arrays: Sequence[dict[str, NDArray[Any]]], counts: Sequence[int], names: Sequence[str]
) -> dict[str, NDArray[Any]]:
    joined = {}
    for name in dict.fromkeys(key for each in arrays for key in each):
        owners = [index for index, each in enumerate(arrays) if name in each]
        first = arrays[owners[0]][name]
        for index in owners[1:]:
            _require_alike(name, first, arrays[index][name], names[owners[0]], names[index])
        kind = np.result_type(*[arrays[index][name].dtype for index in owners])
        if len(owners) < len(arrays) and kind.kind in "biu":
            kind = np.dtype(np.float64)
        gap = "" if kind.kind in "SU" else np.nan
        joined[name] = np.concatenate(
            [
                each[name].astype(kind, copy=False) if name in each else np.full((count, *first.shape[1:]), gap, kind)
                for each, count in zip(arrays, counts)
            ]
        )
    return joined


def _require_alike(name: str, one: NDArray[Any], other: NDArray[Any], here: str, there: str) -> None:
    if one.shape[1:] != other.shape[1:]:
        raise FieldError(
            f"array {name!r} has {one[:1].size} components in {here!r} and {other[:1].size} in {there!r}",
            remedy="Export the same arrays for every group",
        )
    if (one.dtype.kind in "SU") != (other.dtype.kind in "SU"):
        raise FieldError(
            f"array {name!r} is text in one of {here!r} and {there!r} and numbers in the other",
            remedy="Export the same arrays for every group",
        )
