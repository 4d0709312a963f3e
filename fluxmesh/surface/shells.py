"""Shells of a closed surface: volume, nesting, and which must turn to point out of the fluid.

A shell at even depth bounds fluid on its inside and needs a positive volume;
one at odd depth is a cavity, or a body within the fluid, and needs a negative
one, since normals point out of the fluid.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from fluxmesh.compiling import run_parts
from fluxmesh.errors import SurfaceError
from fluxmesh.surface import facet_kernels
from fluxmesh.surface.wording import counted

__all__ = ["Facets", "ShellMeasures", "measure_shells", "nesting_depths"]

_PARTS = 16  # fixed, so that sums do not depend on the threads
_MANY_SHELLS = 4096  # beyond, one part only: each keeps a row a shell
_THINNESS = 1e-12  # a face below this times its longest side squared has no area
_EMPTINESS = 1e-12  # a shell below this times area times diagonal has no volume
_FARNESS = 3.0  # cells further off than this times their radius are seen as dipoles
_LARGE_SHELL = 20_000  # faces, from which cells pay for a second query
_CLEAR = 0.1  # how far a winding number may lie from a whole number


class Facets(NamedTuple):
    """A surface as the compiled passes take it: absent arrays have size 0.

    Attributes
    ----------
    points : ndarray, shape (n_points, 3), float64
        Coordinates, m.
    connectivity : ndarray, shape (n_entries,), int64
        Point indices of the faces.
    offsets : ndarray, shape (n_faces + 1,) or (0,), int64
        Where each face starts.
    kinds : ndarray, shape (n_faces,) or (0,), int8
        `fluxmesh.surface.surface.FaceKind` of each face.
    """

    points: NDArray[np.float64]
    connectivity: NDArray[np.int64]
    offsets: NDArray[np.int64]
    kinds: NDArray[np.int8]

    def first_points(self, faces: NDArray[np.int64]) -> NDArray[np.float64]:
        """Return the coordinates of the first corner of each of the faces, m."""
        first = self.offsets[faces] if self.offsets.size else 3 * faces
        return self.points[self.connectivity[first]]


@dataclass(frozen=True, eq=False)
class ShellMeasures:
    """Size of each shell; curved faces count as flat facets through their points.

    Attributes
    ----------
    volume : ndarray, shape (n_shells,), float64
        Positive when normals point away from the inside, m³.
    area : ndarray, shape (n_shells,), float64
        m².
    low, high : ndarray, shape (n_shells, 3), float64
        Corners of the box round each, m.
    flat_faces : ndarray, shape (n_faces,), bool
        Faces without area.
    """

    volume: NDArray[np.float64]
    area: NDArray[np.float64]
    low: NDArray[np.float64]
    high: NDArray[np.float64]
    flat_faces: NDArray[np.bool_]

    @property
    def empty(self) -> NDArray[np.bool_]:
        """Shells that enclose no volume: thin walls of no thickness."""
        diagonal = np.linalg.norm(self.high - self.low, axis=1)
        return np.asarray(np.abs(self.volume) <= _EMPTINESS * self.area * diagonal)


def measure_shells(facets: Facets, shell_of_face: NDArray[np.int32], shell_count: int) -> ShellMeasures:
    """Add up volume, area and box of every shell.

    Volumes are taken about the first point of each shell: about a far origin
    they would drown in round-off.

    Parameters
    ----------
    facets : Facets
        The surface.
    shell_of_face : ndarray, shape (n_faces,), int32
        From `fluxmesh.surface.edges.pair_edges`.
    shell_count : int
        Number of shells.

    Returns
    -------
    ShellMeasures
        The same for any number of threads. Volumes of open shells depend on the
        choice of origin.
    """
    parts = _PARTS if shell_count <= _MANY_SHELLS else 1
    boxed = shell_count != 1
    lows = np.full((parts, shell_count, 3), np.inf)
    highs = np.full((parts, shell_count, 3), -np.inf)
    sums = np.zeros((parts, shell_count, 2))
    flat = np.zeros(shell_of_face.size, np.bool_)
    first = np.empty(shell_count, np.int64)
    facet_kernels.first_of_label(shell_of_face, first)
    origins = facets.first_points(first)
    run_parts(
        lambda part: facet_kernels.measure_shells(
            part, *facets, shell_of_face, origins, _THINNESS, boxed, lows, highs, sums, flat
        ),
        parts,
    )
    total = sums.sum(axis=0)
    if not boxed:
        return ShellMeasures(total[:, 0], total[:, 1], *_box_of_points(facets), flat)
    return ShellMeasures(total[:, 0], total[:, 1], lows.min(axis=0), highs.max(axis=0), flat)


def _box_of_points(facets: Facets) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    # of a single shell the box serves as a length only, so points that no face uses do no harm
    columns = facets.points.T
    return np.array([[c.min() for c in columns]]), np.array([[c.max() for c in columns]])


def nesting_depths(facets: Facets, shell_of_face: NDArray[np.int32], measures: ShellMeasures) -> NDArray[np.int64]:
    """Count the shells round each shell of a closed surface.

    A shell lies within another when its box does and a point of it has a
    winding number other than zero there. Shells do not cut one another, so the
    depth is one more than that of the smallest shell round it.

    Parameters
    ----------
    facets : Facets
        The surface, closed and consistently oriented.
    shell_of_face : ndarray, shape (n_faces,), int32
        Shell of each face.
    measures : ShellMeasures
        Of its shells.

    Returns
    -------
    ndarray, shape (n_shells,), int64
        0 for the outermost. Shells without volume contain nothing.

    Raises
    ------
    SurfaceError
        All points tried of a shell lie on another: faces given twice.
    """
    count = measures.volume.size
    depths = np.zeros(count, np.int64)
    if count == 1:
        return depths
    starts = np.zeros(count + 2, np.int64)
    order = np.empty(shell_of_face.size, np.int64)
    facet_kernels.order_by_label(shell_of_face, starts, order)
    windings = [_Winding(facets, order[a:b]) for a, b in pairwise(starts[: count + 1])]
    # what contains another has the greater volume
    by_size = np.argsort(-np.abs(measures.volume), kind="stable")
    by_size = by_size[~measures.empty[by_size]]
    low, high = measures.low[by_size], measures.high[by_size]
    for place in range(1, by_size.size):
        around = np.flatnonzero(low[:place, 0] <= low[place, 0])
        around = around[np.all(low[around] <= low[place], axis=1) & np.all(high[around] >= high[place], axis=1)]
        shell = int(by_size[place])
        for outer in by_size[around[::-1]].tolist():
            if _contains(windings[outer], windings[shell], outer, shell):
                depths[shell] = depths[outer] + 1
                break
    return depths


def _contains(outer: _Winding, inner: _Winding, outer_shell: int, inner_shell: int) -> bool:
    for place in inner.sample_points():
        winding = outer.number(place)
        if abs(winding - round(winding)) < _CLEAR:
            return round(winding) != 0
    raise SurfaceError(
        f"shell {inner_shell + 1} ({counted(inner.faces.size, 'face')}) lies on shell {outer_shell + 1} "
        f"({counted(outer.faces.size, 'face')}): the same faces seem to be there twice",
        remedy="Export each face once",
    )


class _Winding:
    """Winding number of one shell, with far faces lumped when it is large and asked often."""

    def __init__(self, facets: Facets, faces: NDArray[np.int64]) -> None:
        self.facets = facets
        self.faces = faces
        self.queries = 0
        self.cells: tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.float64]] | None = None

    def number(self, at: NDArray[np.float64]) -> float:
        """Return how often the shell winds round a point."""
        self.queries += 1
        if self.faces.size >= _LARGE_SHELL and self.queries > 1:
            if self.cells is None:
                self.cells = self._lump()
            starts, order, sums = self.cells
            lumped = facet_kernels.near_winding(starts, order, *self.facets, sums, _FARNESS, at)
            if abs(lumped - round(lumped)) < _CLEAR:
                return float(lumped)
        return float(facet_kernels.solid_angle(0, self.faces.size, self.faces, *self.facets, at)) / (4 * np.pi)

    def sample_points(self) -> Iterator[NDArray[np.float64]]:
        """Yield points on faces that reach furthest and on faces spread over the shell, m."""
        corners = self.facets.first_points(self.faces)
        spread = np.linspace(0, self.faces.size - 1, min(8, self.faces.size)).astype(np.int64)
        chosen = np.concatenate([spread[:1], corners.argmin(axis=0), corners.argmax(axis=0), spread[1:]])
        for face in self.faces[chosen].tolist():
            centre = np.empty(3)
            facet_kernels.face_centre(face, *self.facets, centre)
            yield centre

    def _lump(self) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.float64]]:
        """Sort the faces into the cells of a grid, about as many cells as faces in the near ones."""
        most = int(np.clip((6.0 * self.faces.size) ** 0.25, 2, 128))
        corners = self.facets.first_points(self.faces)
        low = corners.min(axis=0)
        step = (corners.max(axis=0) - low) / most
        numbers = np.empty(self.faces.size, np.int64)
        facet_kernels.cell_numbers(*self.facets, self.faces, low, step, most, numbers)
        starts = np.zeros(most**3 + 2, np.int64)
        order = np.empty(self.faces.size, np.int64)
        facet_kernels.order_by_label(numbers, starts, order)
        starts = np.unique(starts[: most**3 + 1])
        sums = np.zeros((starts.size - 1, 7))
        order = self.faces[order]
        facet_kernels.cell_sums(starts, order, *self.facets, sums)
        return starts, order, sums
