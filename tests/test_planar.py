"""Areas, normals and centroids of faces, nearest faces, and planar regions."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from fluxmesh.surface.face_geometry import (
    bounding_diagonal,
    corners,
    face_areas_normals,
    face_geometry,
    nearest_face,
)
from fluxmesh.surface.planar import planar_regions
from fluxmesh.surface.surface import FaceKind
from fluxmesh.surface.touching import edge_neighbours
from tests.mesh_writing import BOX_POINTS, BOX_QUADS, BOX_TRIANGLES

QUADS, QUAD_STARTS = BOX_QUADS.ravel(), np.arange(0, 25, 4)
BOX_NORMALS = [[0, 0, -1], [0, 0, 1], [0, -1, 0], [0, 1, 0], [1, 0, 0], [-1, 0, 0]]
BOX_AREAS = [2, 2, 6, 6, 3, 3]
# One rounding of a sum of a few products of numbers of order one.
ROUND_OFF = 1e-14


def rotation(seed: int) -> np.ndarray:
    """Return a proper rotation from the QR factors of a random matrix."""
    turn = np.linalg.qr(np.random.default_rng(seed).normal(size=(3, 3)))[0]
    return turn * np.sign(np.linalg.det(turn))


def test_box_of_quads_and_of_triangles() -> None:
    areas, normals = face_areas_normals(BOX_POINTS, QUADS, QUAD_STARTS)
    assert_allclose(actual=areas, desired=BOX_AREAS, rtol=ROUND_OFF)
    assert_allclose(actual=normals, desired=BOX_NORMALS, atol=ROUND_OFF)
    areas, normals = face_areas_normals(BOX_POINTS.astype(np.float32), BOX_TRIANGLES.ravel(), None)
    assert areas.dtype == normals.dtype == np.float64
    assert_allclose(actual=areas, desired=np.repeat(BOX_AREAS, 2) / 2, rtol=ROUND_OFF)
    assert_allclose(actual=normals, desired=np.repeat(BOX_NORMALS, 2, axis=0), atol=ROUND_OFF)


@given(st.integers(0, 10**6), st.integers(0, 5))
def test_bent_in_polygon_by_hand_in_any_position(seed: int, first: int) -> None:
    # an L of three unit squares: area 3, centroid (5/6, 5/6); the fan leaves it from some corners
    shape = np.array([[0, 0, 0], [2, 0, 0], [2, 1, 0], [1, 1, 0], [1, 2, 0], [0, 2, 0]], dtype=float)
    turn, shift = rotation(seed), np.random.default_rng(seed).normal(size=3)
    points = np.roll(shape, first, axis=0) @ turn.T + shift
    geometry = face_geometry(points, np.arange(6), np.array([0, 6]))
    # positions of order 10 lose a digit to the shift
    assert_allclose(actual=geometry.areas, desired=[3.0], rtol=1e-13)
    assert_allclose(actual=geometry.normals[0], desired=turn[:, 2], atol=1e-13)
    assert_allclose(actual=geometry.centroids[0], desired=turn @ [5 / 6, 5 / 6, 0] + shift, atol=1e-13)


def test_faces_without_area_have_no_normal() -> None:
    points = np.array([[0, 0, 0], [1, 0, 0], [3, 0, 0], [0, 1, 0]], dtype=float)
    triangles = face_geometry(points, np.array([0, 1, 2, 0, 1, 3]), None)
    assert_array_equal(triangles.areas, [0, 0.5])
    assert_array_equal(triangles.normals, [[0, 0, 0], [0, 0, 1]])
    assert np.isfinite(triangles.centroids).all()
    polygons = face_geometry(points, np.array([0, 1, 2, 1, 0, 1, 3]), np.array([0, 4, 7]))
    assert_array_equal(polygons.areas, [0, 0.5])
    assert np.isfinite(polygons.centroids).all()
    assert face_geometry(points, np.zeros(0, dtype=np.int64), np.array([0])).areas.size == 0


def test_corners_drop_middle_points() -> None:
    kinds = np.array([FaceKind.POLYGON, FaceKind.TRIANGLE6, FaceKind.QUAD8, FaceKind.QUAD9], dtype=np.int8)
    offsets = np.array([0, 5, 11, 19, 28])
    entries, starts = corners(np.arange(28), offsets, kinds)
    assert entries.tolist() == [0, 1, 2, 3, 4, 5, 6, 7, 11, 12, 13, 14, 19, 20, 21, 22]
    assert starts is not None
    assert starts.tolist() == [0, 5, 8, 12, 16]


@given(st.integers(0, 10**6))
def test_nearest_face_agrees_with_trimesh(seed: int) -> None:
    import trimesh

    random = np.random.default_rng(seed)
    points = random.normal(size=(30, 3))
    faces = random.permuted(np.tile(np.arange(30), (20, 1)), axis=1)[:, :3]
    place = 2.0 * random.normal(size=3)
    some = np.flatnonzero(random.random(20) < 0.7)
    if some.size == 0:
        return
    near = trimesh.triangles.closest_point(points[faces[some]], np.tile(place, (some.size, 1)))
    distances = np.linalg.norm(near - place, axis=1)
    geometry = face_geometry(points, faces.ravel(), None)
    face, distance = nearest_face(points, faces.ravel(), None, geometry, some, place)
    # both lose digits where the nearest point is on an edge of a thin triangle
    assert_allclose(actual=distance, desired=distances.min(), rtol=1e-9)
    # faces that share the nearest point are equally near: any of them will do
    assert_allclose(actual=distances[np.flatnonzero(some == face)], desired=distances.min(), rtol=1e-9)


def test_large_face_is_nearer_than_its_centroid_tells() -> None:
    points = np.array([[0, 0, 0], [100, 0, 0], [0, 100, 0], [3, 0, 1], [4, 0, 1], [3, 1, 1]], dtype=float)
    geometry = face_geometry(points, np.arange(6), None)
    assert nearest_face(points, np.arange(6), None, geometry, np.arange(2), np.array([1.0, 1.0, 0.1]))[0] == 0


@pytest.mark.parametrize("soup", [False, True])
def test_regions_of_a_box(soup: bool) -> None:
    points = BOX_POINTS[BOX_TRIANGLES.ravel()] if soup else BOX_POINTS
    regions = planar_regions(points, np.arange(36) if soup else BOX_TRIANGLES.ravel(), None)
    assert [region.area for region in regions] == pytest.approx([6, 6, 3, 3, 2, 2])
    assert [region.faces.tolist() for region in regions] == [[4, 5], [6, 7], [8, 9], [10, 11], [0, 1], [2, 3]]
    assert_allclose(actual=regions[0].normal, desired=[0, -1, 0], atol=ROUND_OFF)
    assert_allclose(actual=regions[0].centroid, desired=[1, 0, 1.5], atol=ROUND_OFF)
    assert len(planar_regions(BOX_POINTS, QUADS, QUAD_STARTS, limit=4)) == 4


def stadium(segments: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return a prism on a stadium: two flat sides that run smoothly into half cylinders, and two ends."""
    arc = np.linspace(-np.pi / 2, np.pi / 2, segments + 1)
    half = np.column_stack([1.0 + np.cos(arc), np.sin(arc)])
    outline = np.concatenate([half, -half])
    count = len(outline)
    points = np.concatenate([np.column_stack([outline, np.full(count, z)]) for z in (0.0, 4.0)])
    ring = np.arange(count)
    sides = np.column_stack([ring, np.roll(ring, -1), np.roll(ring, -1) + count, ring + count])
    sides = sides[:, [0, 1, 2, 0, 2, 3]]
    faces = np.concatenate([sides.ravel(), ring[::-1], ring + count])
    offsets = np.concatenate([np.arange(0, sides.size + 1, 3), sides.size + count * np.arange(1, 3)])
    return points, faces, offsets


def test_flat_sides_that_run_smoothly_into_a_bend_are_found() -> None:
    # steps of 0.45 degrees: at the full angle the whole outline is one chain
    points, faces, offsets = stadium(400)
    regions = planar_regions(points, faces, offsets)
    assert [round(region.area, 3) for region in regions[:4]] == [8.0, 8.0, 7.142, 7.142]
    assert sorted(np.round(region.normal, 6).tolist() for region in regions[:2]) == [[0, -1, 0], [0, 1, 0]]
    assert regions[4].area < 0.05


def test_small_curl_at_the_rim_is_no_part_of_the_plane() -> None:
    # steps of 0.8 degrees, each within the angle of the one before, rising by far less than the tolerance
    turn = np.radians(0.8 * np.arange(6))
    along = np.concatenate([[0, 1], 1 + np.cumsum(1e-5 * np.cos(turn[1:]))])
    rise = np.concatenate([[0, 0], np.cumsum(1e-5 * np.sin(turn[1:]))])
    points = np.concatenate([np.column_stack([along, np.full(7, y), rise]) for y in (0.0, 1.0)])
    rows = np.array([[k, k + 1, k + 8, k + 7] for k in range(6)])
    regions = planar_regions(points, rows.ravel(), np.arange(0, 25, 4))
    assert regions[0].faces.tolist() == [0]


def test_copies_of_points_count_as_one_without_any_tolerance() -> None:
    points = BOX_POINTS[BOX_TRIANGLES.ravel()]
    points[points == 0.0] = -0.0
    points[:18][points[:18] == 0.0] = 0.0
    pairs = edge_neighbours(points, np.arange(36), None, np.arange(12), 0.0)
    # a closed surface of 12 triangles has 18 edges
    assert len(pairs) == 18
    assert len(np.unique(np.sort(pairs, axis=1), axis=0)) == 18


def test_every_face_with_area_is_in_one_region_at_most() -> None:
    points, faces, offsets = stadium(60)
    points = np.vstack([points, points[:1]])
    regions = planar_regions(points, faces, offsets, limit=None)
    members = np.concatenate([region.faces for region in regions])
    assert_array_equal(np.sort(members), np.arange(offsets.size - 1))
    assert sum(region.area for region in regions) == pytest.approx(face_areas_normals(points, faces, offsets)[0].sum())
    areas = [region.area for region in regions]
    assert areas == sorted(areas, reverse=True)


def test_no_faces_no_regions() -> None:
    none = np.zeros(0, dtype=np.int64)
    assert planar_regions(BOX_POINTS, none, None) == []
    assert bounding_diagonal(BOX_POINTS, none) == 0.0
