"""What a reader hands over: plain arrays as the file has them, no meaning yet."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.surface.surface import Role

__all__ = ["RawMesh"]


@dataclass(frozen=True, eq=False)
class RawMesh:
    """Faces and arrays of one file, in the file's own units.

    Attributes
    ----------
    source : str
        File name, for messages.
    points : ndarray, shape (n_points, 3), float32 or float64
        Coordinates in the file's unit.
    connectivity : ndarray, shape (n_entries,), int64
        Point indices of the faces, one after the other; curved faces list
        corners first, then mid-side points.
    offsets : ndarray, shape (n_faces + 1,), int64, or None
        Where each face starts; None when every face is a straight triangle.
    kinds : ndarray, shape (n_faces,), int8, or None
        `fluxmesh.surface.surface.FaceKind` of each face; None when all are
        straight-edged.
    node_arrays : dict of str to ndarray, shape (n_points,) or (n_points, k)
        Arrays that sit on points, in the file's units.
    face_arrays : dict of str to ndarray, shape (n_faces,) or (n_faces, k)
        Arrays that sit on faces; text arrays have a text dtype.
    face_sets : dict of str to ndarray of int64
        Named sets or blocks of faces: indices of their faces.
    skipped : dict of str to int
        Cells that are no faces (lines, vertices, volume cells), counted by
        their type's name.
    volume_cells : int
        How many of those skipped are volume cells, whose skin could be taken
        instead of the faces.
    sets_have : dict of str to frozenset of str, or None
        Names of the arrays that each of `face_sets` has values of, on faces or
        nodes: elsewhere they are NaN (text: empty). None: all have all.
    roles : dict of str to Role
        What the file says that a face set is to the flow, as far as it does.
    derived : str
        How the faces were made where the file does not list them, such as
        "the skin of 1200 tetrahedra"; "" where it does.
    notes : tuple of str
        What else was chosen on the way, one sentence each.
    """

    source: str
    points: NDArray[Any]
    connectivity: NDArray[np.int64]
    offsets: NDArray[np.int64] | None
    kinds: NDArray[np.int8] | None
    node_arrays: dict[str, NDArray[Any]] = field(default_factory=dict)
    face_arrays: dict[str, NDArray[Any]] = field(default_factory=dict)
    face_sets: dict[str, NDArray[np.int64]] = field(default_factory=dict)
    skipped: dict[str, int] = field(default_factory=dict)
    volume_cells: int = 0
    sets_have: dict[str, frozenset[str]] | None = None
    roles: dict[str, Role] = field(default_factory=dict)
    derived: str = ""
    notes: tuple[str, ...] = ()

    @property
    def face_count(self) -> int:
        """Number of faces."""
        return self.connectivity.size // 3 if self.offsets is None else self.offsets.size - 1
