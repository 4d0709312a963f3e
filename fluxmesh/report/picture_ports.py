"""Ports as a picture needs them: number, centroid, normal and rim."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluxmesh.report.scene import Scene, area_vectors, merge_points

__all__ = ["Port", "find_ports"]

# A net area below this share of the whole is the sign of a group that closes on itself.
_CLOSED = 1e-6
# Shorter rims, as shares of the longest, are flaws of the mesh or of its thinning.
_LEAST_RIM = 0.05
# Most places of a port that are kept to hang its label on.
_MOST_PLACES = 400


@dataclass(frozen=True, eq=False)
class Port:
    """A group that is no wall.

    Attributes
    ----------
    number : int
        From 1, in the order of the scene's groups; shared by label and tags.
    name, role : str
        As in the scene.
    centroid : ndarray, shape (3,), float64
        Mean over the area, in metres.
    normal : ndarray, shape (3,), float64
        Unit normal out of the fluid; zero for a group that closes on itself.
    rims : tuple of ndarray, shape (n, 3), float64
        Closed lines around the group, in metres; the last point repeats the first.
    places, facing : ndarray, shape (n, 3), float64
        Middles of some of its triangles, in metres, and the unit normals there.
    """

    number: int
    name: str
    role: str
    centroid: NDArray[np.float64]
    normal: NDArray[np.float64]
    rims: tuple[NDArray[np.float64], ...]
    places: NDArray[np.float64]
    facing: NDArray[np.float64]


def find_ports(scene: Scene) -> list[Port]:
    """Return all groups of the scene that are no wall and have triangles."""
    ports: list[Port] = []
    number = 0
    for group, (name, role) in enumerate(scene.groups):
        if role == "wall":
            continue
        number += 1
        triangles = scene.triangles[scene.group_of_triangle == group]
        if not len(triangles):
            continue
        vectors = area_vectors(scene.points, triangles)
        areas = np.linalg.norm(vectors, axis=1)
        total = float(areas.sum())
        middles = scene.points[triangles].mean(axis=1)
        vector = vectors.sum(axis=0)
        length = float(np.linalg.norm(vector))
        some = np.flatnonzero(areas > 0.0)
        some = some[:: max(1, some.size // _MOST_PLACES)]
        ports.append(
            Port(
                number=number,
                name=name,
                role=role,
                centroid=areas @ middles / total if total > 0.0 else middles.mean(axis=0),
                normal=vector / length if length > _CLOSED * total else np.zeros(3),
                rims=_rims(scene.points, triangles),
                places=middles[some],
                facing=vectors[some] / areas[some, None],
            )
        )
    return ports


def _rims(points: NDArray[np.float64], triangles: NDArray[np.int64]) -> tuple[NDArray[np.float64], ...]:
    """Return the closed lines of edges that belong to one triangle only."""
    merged, joined = merge_points(points, triangles)
    starts = joined.ravel()
    ends = joined[:, [1, 2, 0]].ravel()
    key = np.minimum(starts, ends) * len(merged) + np.maximum(starts, ends)
    _, first, count = np.unique(key, return_index=True, return_counts=True)
    single = first[(count == 1) & (starts[first] != ends[first])]
    following: dict[int, list[int]] = {}
    for start, end in zip(starts[single].tolist(), ends[single].tolist()):
        following.setdefault(start, []).append(end)
    rims = []
    while following:
        start = next(iter(following))
        chain = [start]
        # Each step uses up one edge, so this ends; a line that breaks off is kept as far as it goes.
        while chain[-1] in following:
            onward = following[chain[-1]]
            step = onward.pop()
            if not onward:
                del following[chain[-1]]
            chain.append(step)
            if step == start:
                break
        rims.append(merged[chain])
    lengths = [float(np.linalg.norm(np.diff(rim, axis=0), axis=1).sum()) for rim in rims]
    longest = max(lengths, default=0.0)
    return tuple(rim for rim, length in zip(rims, lengths) if length > _LEAST_RIM * longest)
