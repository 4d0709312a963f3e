"""Mend a mesh and look at what came out through an independent library."""

from __future__ import annotations

import numpy as np
import trimesh
from numpy.testing import assert_allclose

from fluxmesh.surface.mend import Mended, mend
from tests import small_meshes as meshes

NAMES = ("shell", "core", "cap")


def mended(points, faces, groups=None, *, kinds=None, names=NAMES, **options) -> Mended:
    connectivity, offsets = meshes.flat(faces)
    group_of_face = np.zeros(len(faces), np.int32) if groups is None else np.asarray(groups, np.int32)
    before = [None if a is None else a.copy() for a in (points, connectivity, offsets, group_of_face)]
    result = mend(points, connectivity, offsets, kinds, group_of_face, names, **options)
    # what was given stays as it was
    for array, old in zip((points, connectivity, offsets, group_of_face), before):
        np.testing.assert_array_equal(array, old)
    return result


def triangles(result: Mended) -> trimesh.Trimesh:
    """Return a mesh of an independent library: polygons as fans."""
    if result.offsets is None:
        rows = result.connectivity.reshape(-1, 3)
    else:
        parts = np.split(result.connectivity, result.offsets[1:-1])
        rows = np.array([[p[0], p[i], p[i + 1]] for p in parts for i in range(1, len(p) - 1)])
    if result.representative is not None:
        rows = result.representative[rows]
    # far from the origin its volume would lose digits
    return trimesh.Trimesh(result.points - result.points.mean(axis=0), rows, process=False)


def assert_closed(result: Mended, volume: float) -> None:
    mesh = triangles(result)
    assert result.closed
    assert mesh.is_watertight
    assert mesh.is_winding_consistent
    # sums of a few thousand terms of the size of the volume
    assert_allclose(mesh.volume, volume, rtol=1e-11)


SHAPES = {
    "cube": meshes.cube(),
    "quads": meshes.cube_quads(),
    "tetrahedron": meshes.tetrahedron(),
    "sphere": meshes.sphere(2),
    "far": meshes.sphere(1, 0.3, (2e5, -3e5, 4e5)),
}


def volume_of(points, faces) -> float:
    rows = np.array(faces)
    if rows.shape[1] == 4:
        rows = np.concatenate([rows[:, [0, 1, 2]], rows[:, [0, 2, 3]]])
    corners = (points - points.mean(axis=0))[rows]
    return float(np.linalg.det(corners).sum() / 6)
