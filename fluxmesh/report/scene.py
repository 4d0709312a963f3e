"""What a picture shows, as plain data: a surface with groups, force arrows, markers, words.

Nothing here draws. A `Scene` is in SI units and in the coordinates of the
surface; every arrow names the body that acts and the body acted upon.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

__all__ = [
    "ARROW_KINDS",
    "MARKER_KINDS",
    "Arrow",
    "Marker",
    "Scene",
    "area_vectors",
    "in_words",
    "merge_points",
    "only_kinds",
    "thin",
]

#: Kinds of arrow, in the order in which they are tagged and listed.
ARROW_KINDS = ("pressure", "momentum", "weight", "resultant", "reaction")

#: Kinds of marker.
MARKER_KINDS = ("anchor", "centroid")

# Cells a side of the finest grid: three of these fit in one 63-bit key.
_FINEST_GRID = 1 << 20


@dataclass(frozen=True, eq=False)
class Arrow:
    """One force, to be drawn with its length to scale.

    Attributes
    ----------
    kind : str
        One of `ARROW_KINDS`: ``pressure``, the pressure force at a port on the
        control volume; ``momentum``, the rate of momentum through a port as
        the force it exerts (minus the outward flux), or the inertia of what
        is inside; ``weight``, of the fluid or of the hardware at its centre;
        ``resultant``, the load of the flow on the hardware; ``reaction``, the
        force of the anchor on the hardware.
    label : str
        Name for the legend.
    body : str
        Which body acts on which: "flow on hardware", "anchor on hardware".
    at : ndarray, shape (3,), float64
        Point where it is drawn, in metres: of a resultant on its line of action, where
        that is known, and of a reaction the anchor.
    vector : ndarray, shape (3,), float64
        Force in newtons.
    group : str or None
        The port that the force belongs to.
    through : ndarray, shape (3,), float64, or None
        A point of the line of action near the surface, for a resultant or a
        reaction whose line is known, in metres.
    couple : float
        Moment about that line that is left with the force, in newton metres.
    """

    kind: str
    label: str
    body: str
    at: NDArray[np.float64]
    vector: NDArray[np.float64]
    group: str | None = None
    through: NDArray[np.float64] | None = None
    couple: float = 0.0

    def __post_init__(self) -> None:
        """Refuse a kind that no drawing knows, and numbers that are no force."""
        if self.kind not in ARROW_KINDS:
            raise ValueError(f"arrow kind {self.kind!r} is none of {', '.join(ARROW_KINDS)}")
        _require_vectors(f"arrow {self.label!r}", self.at, self.vector)
        if self.through is not None:
            _require_vectors(f"the line of {self.label!r}", self.through)

    @property
    def magnitude(self) -> float:
        """Length of the force vector in newtons."""
        return float(np.linalg.norm(self.vector))


@dataclass(frozen=True, eq=False)
class Marker:
    """A point worth showing.

    Attributes
    ----------
    kind : str
        One of `MARKER_KINDS`.
    label : str
        Name shown beside it.
    at : ndarray, shape (3,), float64
        Where, in metres.
    """

    kind: str
    label: str
    at: NDArray[np.float64]

    def __post_init__(self) -> None:
        """Refuse a kind that no drawing knows."""
        if self.kind not in MARKER_KINDS:
            raise ValueError(f"marker kind {self.kind!r} is none of {', '.join(MARKER_KINDS)}")
        _require_vectors(f"marker {self.label!r}", self.at)


@dataclass(frozen=True, eq=False)
class Scene:
    """A surface of triangles with the forces on it.

    Attributes
    ----------
    title : str
        Heading of the pictures.
    points : ndarray, shape (n_points, 3), float64
        Coordinates in metres.
    triangles : ndarray, shape (n_triangles, 3), int64
        Point indices; normals point out of the fluid.
    group_of_triangle : ndarray, shape (n_triangles,), int32
        Index into `groups`.
    groups : tuple of (str, str)
        Name and role (``inlet``, ``outlet``, ``open``, ``wall``, ``symmetry``).
    pressure : ndarray, shape (n_triangles,), float64, or None
        Gauge pressure of each triangle in pascals, NaN where none is known.
    arrows : tuple of Arrow
        The forces.
    markers : tuple of Marker
        Anchor point, centroids.
    notes : tuple of str
        Sentences that must stand beside the loads.
    pressure_range : tuple of float, or None
        Least and largest pressure in pascals, where thinning may have left out their triangles.
    up : ndarray, shape (3,), float64
        Direction that points up in a picture: against gravity.

    Raises
    ------
    ValueError
        Arrays that do not fit together.
    """

    title: str
    points: NDArray[np.float64]
    triangles: NDArray[np.int64]
    group_of_triangle: NDArray[np.int32]
    groups: tuple[tuple[str, str], ...]
    pressure: NDArray[np.float64] | None = None
    arrows: tuple[Arrow, ...] = ()
    markers: tuple[Marker, ...] = ()
    notes: tuple[str, ...] = ()
    pressure_range: tuple[float, float] | None = None
    up: NDArray[np.float64] = field(default_factory=lambda: np.array([0.0, 0.0, 1.0]))

    def __post_init__(self) -> None:
        """Check that the arrays fit together."""
        count = len(self.triangles)
        if self.points.ndim != 2 or self.points.shape[1] != 3 or self.triangles.shape != (count, 3) or not count:
            raise ValueError(f"points {self.points.shape} and triangles {self.triangles.shape} make no surface")
        if not np.isfinite(self.points).all():
            raise ValueError("points have coordinates that are not finite")
        if self.triangles.min() < 0 or self.triangles.max() >= len(self.points):
            raise ValueError(f"triangles use points outside 0 to {len(self.points) - 1}")
        if self.group_of_triangle.shape != (count,):
            raise ValueError(f"{self.group_of_triangle.size} group numbers for {count} triangles")
        if self.group_of_triangle.min() < 0 or self.group_of_triangle.max() >= len(self.groups):
            raise ValueError(f"group numbers outside 0 to {len(self.groups) - 1}")
        if self.pressure is not None and self.pressure.shape != (count,):
            raise ValueError(f"{self.pressure.size} pressures for {count} triangles")
        _require_vectors("up", self.up)


def _require_vectors(name: str, *vectors: NDArray[np.float64]) -> None:
    for vector in vectors:
        if np.shape(vector) != (3,) or not np.isfinite(vector).all():
            raise ValueError(f"{name} needs three finite numbers, found {vector}")


def only_kinds(scene: Scene, kinds: Iterable[str]) -> Scene:
    """Return the scene with some kinds of arrows alone; a note says what is left out.

    Parameters
    ----------
    scene : Scene
        With all its arrows.
    kinds : iterable of str
        Some of `ARROW_KINDS`.
    """
    chosen = set(kinds)
    left = [arrow for arrow in scene.arrows if arrow.kind not in chosen]
    if not left:
        return scene
    names = ", ".join(dict.fromkeys(arrow.label for arrow in left))
    note = f"By choice not all forces are shown. Left out: {names}"
    return replace(
        scene,
        arrows=tuple(arrow for arrow in scene.arrows if arrow.kind in chosen),
        notes=(note, *scene.notes),
    )


def in_words(scene: Scene) -> str:
    """Return what a picture of the scene shows, for those who do not see it."""
    ports = ", ".join(f"{name} ({role})" for name, role in scene.groups if role != "wall")
    said = [f"A control surface with the ports {ports}." if ports else "A control surface without ports."]
    for arrow in scene.arrows:
        force = ", ".join(f"{x:.4g}" for x in arrow.vector)
        said.append(f"{arrow.body}: {arrow.label}, force ({force}) N.")
    return " ".join([*said, *(f"{note.rstrip(' .')}." for note in scene.notes)])


def area_vectors(points: NDArray[np.float64], triangles: NDArray[np.int64]) -> NDArray[np.float64]:
    """Return the area of each triangle times its unit normal, shape (n, 3), in square metres."""
    first = points[triangles[:, 0]]
    one, two = points[triangles[:, 1]] - first, points[triangles[:, 2]] - first
    return np.asarray(0.5 * np.cross(one, two))


def merge_points(
    points: NDArray[np.float64], triangles: NDArray[np.int64], cell: float = 0.0
) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    """Give points in one cell of a cubic grid one number.

    Parameters
    ----------
    points : ndarray, shape (n_points, 3), float64
        Coordinates in metres.
    triangles : ndarray, shape (n_triangles, 3), int64
        Point indices.
    cell : float
        Edge of a grid cell in metres. It is never taken below the bounding
        box over 2**20, which joins exact duplicates and hardly anything else.

    Returns
    -------
    points : ndarray, shape (n_merged, 3), float64
        Mean of the points of each cell, unused points left out.
    triangles : ndarray, shape (n_triangles, 3), int64
        The same triangles on the merged points; some may have shrunk to a
        line or a point.
    """
    used = np.zeros(len(points), dtype=bool)
    used[triangles.ravel()] = True
    kept = points[used]
    low = kept.min(axis=0)
    span = float((kept.max(axis=0) - low).max())
    cell = max(cell, span / (_FINEST_GRID - 1), np.finfo(np.float64).tiny)
    grid = ((kept - low) / cell).astype(np.int64)
    keys = (grid[:, 0] * _FINEST_GRID + grid[:, 1]) * _FINEST_GRID + grid[:, 2]
    _, cluster = np.unique(keys, return_inverse=True)
    share = np.bincount(cluster).astype(np.float64)
    merged = np.stack([np.bincount(cluster, weights=kept[:, i]) / share for i in range(3)], axis=1)
    number = np.full(len(points), -1, dtype=np.int64)
    number[used] = cluster
    return merged, number[triangles]


def _single(triangles: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return the first of all triangles on the same three points, whichever way they face."""
    corners = np.sort(triangles, axis=1)
    count = int(corners.max(initial=0)) + 1
    if count < 2_000_000:  # three indices then fit in one 63-bit key
        key = (corners[:, 0] * count + corners[:, 1]) * count + corners[:, 2]
        return np.sort(np.unique(key, return_index=True)[1])
    return np.sort(np.unique(corners, axis=0, return_index=True)[1])


def thin(scene: Scene, most: int = 400_000) -> Scene:
    """Leave out unused points, and coarsen a surface that has more triangles than a picture can show.

    Points that share a cell of a cubic grid become one, and triangles that
    shrink to a line or a point vanish: vertex clustering after Rossignac and
    Borrel, "Multi-resolution 3D approximations for rendering complex scenes"
    (1993; from memory). It is linear in the number of triangles and opens no
    gap between groups. A kept triangle keeps its own pressure. For drawing
    only: no integral may be taken from the result.

    Parameters
    ----------
    scene : Scene
        What is to be drawn; it is not changed.
    most : int
        Largest number of triangles to keep.

    Returns
    -------
    Scene
        The scene itself when there is nothing to do; else a coarser one that
        remembers the range of the pressure.
    """
    if len(scene.triangles) <= most:
        used = np.unique(scene.triangles)
        if used.size == len(scene.points):
            return scene
        return replace(scene, points=scene.points[used], triangles=np.searchsorted(used, scene.triangles))
    # every so many triangles are enough to estimate the area
    step = max(1, len(scene.triangles) // most)
    some = scene.triangles[::step]
    area = step * float(np.linalg.norm(area_vectors(scene.points, some), axis=1).sum())
    # A surface of area A crosses about 1.5 A/h^2 cells of edge h (the mean of |n_x| + |n_y| + |n_z| over all
    # directions is 1.5), and has about two triangles a point: start where that gives the number wanted.
    cell = (3.0 * area / most) ** 0.5
    for _ in range(30):
        points, triangles = merge_points(scene.points, scene.triangles, cell)
        a, b, c = triangles.T
        kept = np.flatnonzero((a != b) & (b != c) & (c != a))
        kept = kept[_single(triangles[kept])]
        if 0 < kept.size <= most:
            break
        cell *= 0.3 if kept.size == 0 else 1.2
    else:
        # Slivers all the way down: show some of the triangles as they are.
        points, triangles = scene.points, scene.triangles
        kept = np.linspace(0, len(triangles) - 1, most).astype(np.int64)
    used, numbered = np.unique(triangles[kept], return_inverse=True)
    extremes = scene.pressure_range
    if scene.pressure is not None and extremes is None and not np.isnan(scene.pressure).all():
        extremes = float(np.nanmin(scene.pressure)), float(np.nanmax(scene.pressure))
    return replace(
        scene,
        points=points[used],
        triangles=numbered.reshape(-1, 3),
        group_of_triangle=scene.group_of_triangle[kept],
        pressure=None if scene.pressure is None else scene.pressure[kept],
        pressure_range=extremes,
    )
