"""The mesh files of a case, read."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluxmesh.case.model import Case
from fluxmesh.surface.files import read_mesh, read_meshes
from fluxmesh.surface.rawmesh import RawMesh

__all__ = ["Loaded", "load_mesh"]


@dataclass(frozen=True, eq=False)
class Loaded:
    """What the mesh files of a case hold.

    Attributes
    ----------
    mesh : RawMesh
        All faces and arrays, in the files' units.
    where : str
        File name, for messages.
    owner : ndarray, shape (n_faces,), int32, or None
        Group of each face where each group has a file of its own.
    has : dict of str to frozenset of str, or None
        The arrays that each group's file has, likewise.
    """

    mesh: RawMesh
    where: str
    owner: NDArray[np.int32] | None = None
    has: dict[str, frozenset[str]] | None = None


def load_mesh(case: Case) -> Loaded:
    """Read the mesh files of a case.

    Parameters
    ----------
    case : Case
        The case.

    Returns
    -------
    Loaded
        As the files have it.

    Raises
    ------
    InputError
        A file that cannot be read; the message names it.
    """
    skin = True if case.surface.skin else None
    if case.surface.files is None:
        assert case.surface.file is not None
        mesh = read_mesh(case.surface.file, skin=skin)
        return Loaded(mesh, case.surface.file.name, has=_arrays_of_groups(case, mesh))
    joined = read_meshes(case.surface.files, skin=skin)
    order = list(case.groups)
    to_case = np.array([order.index(name) for name in joined.names], dtype=np.int32)
    has = {name: joined.node_arrays[name] | joined.face_arrays[name] for name in joined.names}
    return Loaded(joined.mesh, case.path.name, to_case[joined.group_of_face], has)


def _arrays_of_groups(case: Case, mesh: RawMesh) -> dict[str, frozenset[str]] | None:
    """Names of the arrays that each group has, where named sets of the file differ in them."""
    naming = case.surface.groups
    if mesh.sets_have is None or naming is None or not naming.sets:
        return None
    tags = {name: [str(tag) for tag in section.tag or (name,)] for name, section in case.groups.items()}
    named = {tag for name, section in case.groups.items() if not section.rest for tag in tags[name]}
    left = [tag for tag in mesh.sets_have if tag not in named]
    everything = frozenset({*mesh.node_arrays, *mesh.face_arrays})
    has = {}
    for name, section in case.groups.items():
        sets = left if section.rest else [tag for tag in tags[name] if tag in mesh.sets_have]
        has[name] = frozenset.intersection(everything, *(mesh.sets_have[tag] for tag in sets))
    return has
