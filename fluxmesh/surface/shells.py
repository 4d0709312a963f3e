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
from fluxmesh.surface.extent import used_box
from fluxmesh.surface.wording import counted

__all__ = ["Facets", "ShellMeasures", "measure_shells", "nesting_depths"]

_PARTS = 16  # fixed, so that sums do not depend on the threads
_MANY_SHELLS = 4096  # beyond, one part only: each keeps a row a shell
_THINNESS = 1e-12  # a face below this times its longest side squared has no area
_EMPTINESS = 1e-12  # a shell below this times area times diagonal has no volume
_FARNESS = 3.0  # cells further off than this times their radius are seen as dipoles
_LARGE_SHELL = 20_000  # faces, from which cells pay for a second query
_CLEAR = 0.1  # how far a winding number may lie from a whole number
_TRIED = ((16, 256), (128, 32))  # points tried in a box, by the number of shells there are at most
_FEW = 4  # points tried for each of even more shells
_SLIVER = 0.05  # share of points: less is the gap between two meshes of one curved interface
_ALIKE = 0.05  # shells whose boxes and volumes differ by less may be one shell given twice
_ADDENDS = 1.2207440846057596 ** -np.arange(1.0, 4.0)


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
        return np.asarray((np.abs(self.volume) <= _EMPTINESS * self.area * self.diagonal) | (self.area <= 0.0))

    @property
    def diagonal(self) -> NDArray[np.float64]:
        """Diagonal of the box round each shell, m."""
        return np.asarray(np.linalg.norm(self.high - self.low, axis=1))

    @property
    def rounding(self) -> NDArray[np.float64]:
        """What rounding 64-bit coordinates to their last digit may change in each volume, m³: that digit times area."""
        largest = np.maximum(np.abs(self.low), np.abs(self.high)).max(axis=1)
        return np.asarray(0.5 * float(np.finfo(np.float64).eps) * largest * self.area)


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
        low, high = used_box(facets.points, facets.connectivity)
        return ShellMeasures(total[:, 0], total[:, 1], low[None], high[None], flat)
    return ShellMeasures(total[:, 0], total[:, 1], lows.min(axis=0), highs.max(axis=0), flat)


def nesting_depths(facets: Facets, shell_of_face: NDArray[np.int32], measures: ShellMeasures) -> NDArray[np.int64]:
    """Count the shells round each shell of a closed surface.

    A shell lies within another when its box does and the points tried inside it
    lie inside the other, by their winding numbers. The depth is one more than
    that of the smallest shell round it. Shells that overlap are refused as far
    as the points tried show it: a set spread evenly over the common box, of
    which a share of 0.05 must tell.

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
        A shell lies on another (faces given twice), or two shells overlap.
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
    tried = next((points for most, points in _TRIED if count <= most), _FEW)
    for place in range(1, by_size.size):
        common = np.all((low[:place] < high[place]) & (high[:place] > low[place]), axis=1)
        shell = int(by_size[place])
        # the smallest first: what overlaps one further out overlaps the one round it too
        for at in np.flatnonzero(common)[::-1].tolist():
            outer = int(by_size[at])
            pair = _Pair(windings[outer], windings[shell], outer, shell)
            if not (np.all(low[at] <= low[place]) and np.all(high[at] >= high[place])):
                pair.require_apart(np.maximum(low[at], low[place]), np.minimum(high[at], high[place]), tried)
            elif pair.nested(low[place], high[place], tried):
                if _alike(measures, outer, shell):
                    pair.require_distinct()
                depths[shell] = depths[outer] + 1
                break
    return depths


def _alike(measures: ShellMeasures, one: int, other: int) -> bool:
    most = _ALIKE * measures.diagonal[one]
    return bool(
        np.abs(measures.low[one] - measures.low[other]).max() < most
        and np.abs(measures.high[one] - measures.high[other]).max() < most
        and abs(measures.volume[other]) > (1.0 - _ALIKE) * abs(measures.volume[one])
    )


class _Pair(NamedTuple):
    """Two shells, the second no larger than the first."""

    outer: _Winding
    inner: _Winding
    outer_shell: int
    inner_shell: int

    def nested(self, low: NDArray[np.float64], high: NDArray[np.float64], tried: int) -> bool:
        """Return whether the second lies within the first; `low` and `high` are the corners of its box."""
        inside = [place for place in _spread(low, high, tried) if self.inner.holds(place)]
        held = [held for place in inside if (held := self.outer.holds(place)) is not None]
        if held:
            share = sum(held) / len(held)
            if _SLIVER < share < 1.0 - _SLIVER:
                raise self._overlap(f"{sum(held)} of {len(held)} points tried within the one lie within the other")
            return share > 0.5
        # too thin for any point to fall inside
        for place in self.inner.sample_points():
            within = self.outer.holds(place)
            if within is not None:
                return within
        raise self._doubled()

    def require_apart(self, low: NDArray[np.float64], high: NDArray[np.float64], tried: int) -> None:
        """Raise if the two hold a part of a box, the common one of both, together."""
        shared = sum(bool(self.inner.holds(place) and self.outer.holds(place)) for place in _spread(low, high, tried))
        if shared > max(2.0, _SLIVER * tried):
            raise self._overlap(f"{shared} of {tried} points tried in the box common to both lie within both")

    def require_distinct(self) -> None:
        """Raise if the second, as large as the first, does not lie wholly within it: a narrow gap is no copy."""
        held = [self.outer.holds(place) for place in self.inner.sample_points(corners=True)]
        # of two meshes of one body, one may lie within the other but for the points they share
        if False in held or 4 * held.count(None) >= len(held):
            raise self._doubled()

    def _names(self) -> tuple[str, str]:
        sizes = (counted(winding.faces.size, "face") for winding in (self.inner, self.outer))
        inner, outer = (f"shell {n + 1} ({size})" for n, size in zip((self.inner_shell, self.outer_shell), sizes))
        return inner, outer

    def _doubled(self) -> SurfaceError:
        return SurfaceError(
            "{} lies on {}: the same faces seem to be there twice".format(*self._names()),
            remedy="Export each face once",
        )

    def _overlap(self, seen: str) -> SurfaceError:
        return SurfaceError(
            "{} and {} overlap ({seen}): fluid there would count twice".format(*self._names(), seen=seen),
            remedy="Unite the bodies before the export, or export the wetted surface only",
        )


def _spread(low: NDArray[np.float64], high: NDArray[np.float64], count: int) -> Iterator[NDArray[np.float64]]:
    """Yield points spread evenly over a box: multiples of irrational steps, modulo one.

    The steps are powers of the root of x⁴ = x + 1, the extension of the golden ratio to three axes (from memory).
    """
    for number in range(1, count + 1):
        yield low + np.mod(0.5 + number * _ADDENDS, 1.0) * (high - low)


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

    def holds(self, place: NDArray[np.float64]) -> bool | None:
        """Return whether a point lies inside the shell; None where it is too near to it to tell."""
        winding = self.number(place)
        return bool(round(winding)) if abs(winding - round(winding)) < _CLEAR else None

    def sample_points(self, *, corners: bool = False) -> Iterator[NDArray[np.float64]]:
        """Yield points on faces that reach furthest and on faces spread over the shell, m; corners too, if asked."""
        first = self.facets.first_points(self.faces)
        spread = np.linspace(0, self.faces.size - 1, min(8, self.faces.size)).astype(np.int64)
        chosen = np.concatenate([spread[:1], first.argmin(axis=0), first.argmax(axis=0), spread[1:]])
        for face in self.faces[chosen].tolist():
            centre = np.empty(3)
            facet_kernels.face_centre(face, *self.facets, centre)
            yield centre
        if corners:
            yield from first[chosen]

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
