"""The surface while it is being mended: its arrays, and what was done to them so far."""

from __future__ import annotations

from collections.abc import Sequence
from copy import copy
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import GroupError, SurfaceError
from fluxmesh.surface.edges import EdgePairing, pair_edges
from fluxmesh.surface.orient import turn_faces
from fluxmesh.surface.shells import Facets

__all__ = ["Workpiece"]


class Workpiece:
    """Arrays of a surface with the changes made so far.

    Parameters
    ----------
    points : ndarray, shape (n_points, 3), float64
        Coordinates, m.
    connectivity : ndarray, shape (n_entries,), int64
        Point indices of the faces.
    offsets : ndarray, shape (n_faces + 1,), int64, or None
        Where each face starts.
    kinds : ndarray, shape (n_faces,), int8, or None
        Kind of each face; None when none is curved.
    group_of_face : ndarray, shape (n_faces,), int32
        Index into `group_names`.
    group_names : sequence of str
        Names of the groups.

    Attributes
    ----------
    representative : ndarray, shape (n_points,), int64, or None
        Point that stands for each point; None when none were joined.
    kept_faces : ndarray, shape (n_faces,), int64, or None
        Number of each face in the file; None when all were kept.
    turned : ndarray, shape (n_faces,), bool, or None
        Faces turned so far; None when there are none.
    notes : list of str
        What was done so far.
    """

    def __init__(
        self,
        points: NDArray[np.float64],
        connectivity: NDArray[np.int64],
        offsets: NDArray[np.int64] | None,
        kinds: NDArray[np.int8] | None,
        group_of_face: NDArray[np.int32],
        group_names: Sequence[str],
    ) -> None:
        """Take the arrays as they are; they are replaced, never written to."""
        self.points = points
        self.connectivity = connectivity
        self.offsets = offsets
        self.kinds = kinds
        self.group_of_face = group_of_face
        self.group_names = group_names
        self.representative: NDArray[np.int64] | None = None
        self.kept_faces: NDArray[np.int64] | None = None
        self.turned: NDArray[np.bool_] | None = None
        self.notes: list[str] = []

    @classmethod
    def check(
        cls,
        points: NDArray[Any],
        connectivity: NDArray[Any],
        offsets: NDArray[Any] | None,
        kinds: NDArray[Any] | None,
        group_of_face: NDArray[Any],
        group_names: Sequence[str],
    ) -> Workpiece:
        """Return a workpiece after checking what the pairing of edges does not.

        Parameters
        ----------
        points, connectivity, offsets, kinds, group_of_face, group_names
            As for the class; converted to its types where they differ.

        Returns
        -------
        Workpiece
            Ready to be paired.

        Raises
        ------
        SurfaceError
            Points of the wrong shape or not finite.
        GroupError
            Faces without a group.
        """
        xyz = np.ascontiguousarray(points, np.float64)
        if xyz.ndim != 2 or xyz.shape[1] != 3:
            raise SurfaceError(f"points have shape {xyz.shape}", remedy="An array of shape (n, 3) is needed")
        # a finite sum means that every term is finite; only then is the slow look needed
        if not np.isfinite(xyz.sum()):
            bad = np.flatnonzero(~np.isfinite(xyz).all(axis=1))
            if bad.size:
                raise SurfaceError(
                    f"{bad.size} of {xyz.shape[0]} points have coordinates that are not finite, "
                    f"the first is point {bad[0]}",
                    remedy="Export the mesh again",
                )
        groups = np.ascontiguousarray(group_of_face, np.int32)
        faces = connectivity.size // 3 if offsets is None else offsets.size - 1
        if groups.shape != (faces,):
            raise GroupError(f"{groups.size} group numbers for {faces} faces")
        if groups.size and (int(groups.min()) < 0 or int(groups.max()) >= len(group_names)):
            bad = np.flatnonzero((groups < 0) | (groups >= len(group_names)))
            raise GroupError(
                f"{bad.size} of {faces} faces belong to no group, the first is face {bad[0]}",
                remedy="Give every face one of the groups",
            )
        return cls(
            xyz,
            np.ascontiguousarray(connectivity, np.int64),
            None if offsets is None else np.ascontiguousarray(offsets, np.int64),
            None if kinds is None or not kinds.any() else np.ascontiguousarray(kinds, np.int8),
            groups,
            group_names,
        )

    @property
    def facets(self) -> Facets:
        """The surface as the compiled passes take it."""
        return Facets(
            self.points,
            self.connectivity,
            np.empty(0, np.int64) if self.offsets is None else self.offsets,
            np.empty(0, np.int8) if self.kinds is None else self.kinds,
        )

    def copy(self) -> Workpiece:
        """Return a workpiece that can be tried on; the arrays are shared."""
        other = copy(self)
        other.notes = list(self.notes)
        return other

    def note(self, text: str) -> None:
        """Add a note."""
        self.notes.append(text)

    def pair(self, *, listing: bool = False) -> EdgePairing:
        """Pair the edges as things stand; gaps of curved faces are always listed."""
        return pair_edges(
            self.connectivity,
            self.offsets,
            self.kinds,
            self.points.shape[0],
            self.representative,
            listing=listing or self.kinds is not None,
        )

    def turn(self, mask: NDArray[np.bool_]) -> None:
        """Turn the marked faces over."""
        self.connectivity = turn_faces(self.connectivity, self.offsets, self.kinds, mask)
        turned = mask if self.turned is None else self.turned ^ mask
        self.turned = turned if turned.any() else None

    def drop(self, faces: NDArray[np.int64]) -> None:
        """Take faces out."""
        keep = np.ones(self.group_of_face.size, np.bool_)
        keep[faces] = False
        if self.offsets is None:
            self.connectivity = self.connectivity.reshape(-1, 3)[keep].ravel()
        else:
            sizes = np.diff(self.offsets)
            self.connectivity = self.connectivity[np.repeat(keep, sizes)]
            self.offsets = np.concatenate([[0], np.cumsum(sizes[keep])])
        self.group_of_face = self.group_of_face[keep]
        self.kinds = None if self.kinds is None else self.kinds[keep]
        self.turned = None if self.turned is None else self.turned[keep]
        self.kept_faces = np.flatnonzero(keep) if self.kept_faces is None else self.kept_faces[keep]

    def move_together(self) -> None:
        """Give every point the coordinates of its representative."""
        if self.representative is not None:
            self.points = self.points[self.representative]

    def number_in_file(self, face: int) -> int:
        """Return the number that a face had before any was dropped."""
        return face if self.kept_faces is None else int(self.kept_faces[face])

    def groups_of(self, mask: NDArray[np.bool_]) -> list[str]:
        """Return the names of the groups of the marked faces."""
        return [self.group_names[group] for group in np.unique(self.group_of_face[mask]).tolist()]

    def groups_text(self, mask: NDArray[np.bool_], most: int = 4) -> str:
        """Return how many of the marked faces are in which group: "2 in 'a', 1 in 'b'"."""
        counts = np.bincount(self.group_of_face[mask], minlength=1)
        groups = np.flatnonzero(counts).tolist()
        parts = [f"{counts[group]} in '{self.group_names[group]}'" for group in groups[:most]]
        if len(groups) > most:
            parts.append(f"the others in {len(groups) - most} more groups")
        return ", ".join(parts)
