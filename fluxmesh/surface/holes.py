"""Open edges told as holes: how long, where, beside which groups, and whether they enclose anything."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluxmesh.surface.wording import counted, length_text, names_text, place_text

__all__ = ["Hole", "Openings", "describe_openings", "find_holes"]

_FLATNESS = 1e-6  # of the length squared; a circle encloses 1 / (4 pi)


@dataclass(frozen=True)
class Hole:
    """A connected set of open edges.

    Attributes
    ----------
    edges : int
        Number of open edges.
    length : float
        Of all its edges, m.
    centre : tuple of float
        Middle of its edges weighted by length, m.
    area : float
        Size of the area vector that the edges enclose, m².
    groups : tuple of str
        Groups of the faces beside it.
    """

    edges: int
    length: float
    centre: tuple[float, float, float]
    area: float
    groups: tuple[str, ...]

    @property
    def encloses_area(self) -> bool:
        """False for a slit: hanging points, or edges that nearly coincide."""
        return self.area > _FLATNESS * self.length**2

    def __str__(self) -> str:
        """Return a clause that says what and where it is."""
        return (
            f"a loop of {counted(self.edges, 'edge')}, length {length_text(self.length)}, "
            f"round {place_text(self.centre)}, at {names_text(self.groups)}"
        )


@dataclass(frozen=True)
class Openings:
    """All holes of a surface.

    Attributes
    ----------
    count : int
        Number of holes.
    edges : int
        Number of open edges.
    slits : int
        Holes that enclose no area.
    largest : tuple of Hole
        The longest of them, longest first.
    """

    count: int
    edges: int
    slits: int
    largest: tuple[Hole, ...]


def find_holes(
    points: NDArray[np.float64],
    open_edges: NDArray[np.int64],
    group_of_face: NDArray[np.int32],
    group_names: Sequence[str],
    *,
    most: int = 5,
) -> Openings:
    """Group open edges into holes and measure each.

    Parameters
    ----------
    points : ndarray, shape (n_points, 3), float64
        Coordinates, m.
    open_edges : ndarray, shape (m, 3), int64
        Half edges without a counterpart, ``[from, to, face]``; at least one.
    group_of_face : ndarray, shape (n_faces,), int32
        Index into `group_names`.
    group_names : sequence of str
        Names of the groups.
    most : int, optional
        How many holes are described singly.

    Returns
    -------
    Openings
        Edges hang together when they share a point.
    """
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    used, ends = np.unique(open_edges[:, :2], return_inverse=True)
    ends = ends.reshape(-1, 2)
    links = coo_array((np.ones(len(ends), np.int8), (ends[:, 0], ends[:, 1])), (used.size, used.size))
    count, label_of_point = connected_components(links, directed=False)
    label = label_of_point[ends[:, 0]]
    start, end = points[open_edges[:, 0]], points[open_edges[:, 1]]
    lengths = np.linalg.norm(end - start, axis=1)
    length = np.bincount(label, lengths, count)
    edges = np.bincount(label, minlength=count)
    # edges of no length have a centre too
    weights = np.where(length[label] > 0, lengths, 1.0)
    weight = np.bincount(label, weights, count)
    middle = 0.5 * (start + end) * weights[:, None]
    centre = np.column_stack([np.bincount(label, middle[:, axis], count) / weight for axis in range(3)])
    wedge = 0.5 * np.cross(start - centre[label], end - centre[label])
    area = np.linalg.norm([np.bincount(label, wedge[:, axis], count) for axis in range(3)], axis=0)
    longest = np.argsort(-length, kind="stable")[:most]
    largest = tuple(
        Hole(
            edges=int(edges[hole]),
            length=float(length[hole]),
            centre=(float(centre[hole, 0]), float(centre[hole, 1]), float(centre[hole, 2])),
            area=float(area[hole]),
            groups=tuple(group_names[group] for group in np.unique(group_of_face[open_edges[label == hole, 2]])),
        )
        for hole in longest
    )
    return Openings(
        count=int(count),
        edges=int(open_edges.shape[0]),
        slits=int(np.count_nonzero(area <= _FLATNESS * length**2)),
        largest=largest,
    )


def describe_openings(openings: Openings) -> str:
    """Return one clause on all holes and the largest.

    Parameters
    ----------
    openings : Openings
        From `find_holes`.

    Returns
    -------
    str
        Without a final full stop.
    """
    first = openings.largest[0]
    what = "it is" if openings.count == 1 else "the largest is"
    text = f"{counted(openings.count, 'hole')}, {counted(openings.edges, 'open edge')}; {what} {first}"
    if openings.slits:
        loops = counted(openings.slits, "loop encloses", "loops enclose")
        text += (
            f"; {loops} no area: a point of one face lies within an edge of its neighbour (a hanging point), "
            "or points nearly coincide without being one"
        )
    return text
