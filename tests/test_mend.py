"""What mending joins, what it says of holes and gaps, and what it refuses."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh.errors import GroupError, SurfaceError
from fluxmesh.surface.holes import find_holes
from fluxmesh.surface.mend import mend
from fluxmesh.surface.surface import FaceKind
from fluxmesh.surface.weld import join_equal_points, join_near_points
from tests import small_meshes as meshes
from tests.mending import NAMES, SHAPES, assert_closed, mended, triangles, volume_of


@pytest.mark.parametrize("name", SHAPES)
def test_closed_surface_stays_as_it_is(name):
    points, faces = SHAPES[name]
    result = mended(points, faces)
    assert result.closed
    assert result.shells == 1
    assert result.notes == ()
    assert result.points is points
    assert (result.kept_faces, result.turned, result.representative) == (None, None, None)
    np.testing.assert_array_equal(result.connectivity, faces.ravel())
    assert triangles(result).is_watertight


@pytest.mark.parametrize("name", SHAPES)
def test_soup_is_joined_but_keeps_its_own_points(name):
    points, faces = SHAPES[name]
    own_points, own_faces = meshes.soup(points, faces)
    own_points = np.where(own_points == 0, -0.0, own_points)
    own_points[::2] += 0.0  # -0.0 and 0.0 are the same place
    result = mended(own_points, own_faces)
    assert_closed(result, volume_of(points, faces))
    np.testing.assert_array_equal(result.connectivity, own_faces.ravel())
    np.testing.assert_array_equal(result.points, own_points)
    assert result.notes == (
        f"{faces.size} points at {len(points)} coincident places joined to close the surface "
        "(exactly equal coordinates)",
    )


def test_split_along_the_rim_of_a_group_is_joined():
    points, faces = meshes.cube_quads()
    cap = faces[1].copy()
    split = np.concatenate([points, points[cap]])
    faces[1] = np.arange(8, 12)
    result = mended(split, faces, [0, 2, 0, 0, 0, 0])
    assert result.notes == ("8 points at 4 coincident places joined to close the surface (exactly equal coordinates)",)
    assert result.representative is not None
    np.testing.assert_array_equal(result.representative, [*range(8), *cap])
    assert_closed(result, 1.0)


def test_closed_surface_with_coincident_points_stays_untouched():
    # two cubes that touch along an edge, and points within the tolerance of each other
    points, faces = meshes.together(meshes.cube(), meshes.cube(origin=(1, 1, 0)))
    points[8] += 1e-9
    result = mended(points, faces)
    assert result.closed
    assert result.shells == 2
    assert result.notes == ()
    assert result.representative is None
    assert result.points is points


def test_only_points_on_open_edges_are_joined():
    # a closed tetrahedron stands with one point exactly on a corner of a cube in pieces
    points, faces = meshes.together(meshes.soup(*meshes.cube()), meshes.tetrahedron())
    result = mended(points, faces)
    assert result.closed
    assert result.representative is not None
    assert (result.representative[36:] == np.arange(36, 40)).all()


def near_halves(gap: float) -> tuple[np.ndarray, np.ndarray]:
    points, faces = meshes.cube()
    return meshes.together((points, faces[:6]), (points + np.array([gap, 0, 0]), faces[6:]))


def test_near_points_are_joined_when_that_closes():
    points, faces = near_halves(1e-7)
    result = mended(points, faces)
    assert_closed(result, 1.0)
    assert result.points is not points
    (note,) = result.notes
    assert note.startswith("16 points at 8 coincident places joined to close the surface (within 1.732e-06 m")
    assert note.endswith("moved by up to 1e-07 m)")


def test_points_further_than_the_tolerance_stay_apart():
    points, faces = near_halves(1e-5)
    with pytest.raises(SurfaceError, match=r"the surface is open: \d holes?"):
        mended(points, faces)
    with pytest.raises(SurfaceError, match="the surface is open"):
        mended(*near_halves(1e-7), weld_tolerance=0)
    assert mended(points, faces, weld_tolerance=2e-5).closed


def test_joining_that_does_not_close_is_not_done():
    points, faces = near_halves(1e-7)
    result = mended(points, faces[:-1], require_closed=False)
    assert not result.closed
    assert result.representative is None
    assert result.points is points
    assert len(result.notes) == 1


def test_a_wide_tolerance_never_folds_a_face():
    points, faces = meshes.sphere(2)
    with pytest.raises(SurfaceError, match=r"3 open edges"):
        mended(points, faces[1:], weld_tolerance=0.4)
    with pytest.raises(SurfaceError, match=r"the tolerance for joining points is -1 m"):
        mended(points, faces, weld_tolerance=-1.0)


@pytest.mark.parametrize("name", ["cube", "sphere"])
def test_missing_face_is_described(name):
    points, faces = SHAPES[name]
    hole = points[faces[0]]
    length = np.linalg.norm(hole - np.roll(hole, 1, axis=0), axis=1).sum()
    with pytest.raises(SurfaceError) as caught:
        mended(points, faces[1:], source="a.stl")
    text = str(caught.value)
    assert text.startswith("a.stl: the surface is open: 1 hole, 3 open edges; it is a loop of 3 edges, length ")
    assert f"length {length:.4g} m, round (" in text
    assert "at group 'shell'. Add the missing faces (a port that was not exported?), or set closed = fal" in text
    result = mended(points, faces[1:], require_closed=False)
    assert not result.closed
    assert result.notes[0].startswith("the surface is open: 1 hole, 3 open edges; it is a loop of 3 edges")


def test_holes_are_measured_and_the_largest_comes_first():
    n = 64
    turn = np.arange(n) * 2 * np.pi / n
    rings = [np.column_stack([r * np.cos(turn), r * np.sin(turn), np.full(n, z)]) for r, z in ((1, 0), (2, 3))]
    around = np.roll(np.arange(n), -1)
    faces = np.stack([np.arange(n), around, around + n, np.arange(n) + n], axis=1)
    points = np.concatenate(rings)
    with pytest.raises(SurfaceError, match=r"2 holes, 128 open edges; the largest is a loop of 64 edges, length 12\.5"):
        mended(points, faces, [1] * 32 + [0] * 32)
    rows = np.concatenate(
        [
            np.stack([np.arange(n), around, np.arange(n)], 1),
            np.stack([around, np.arange(n), np.arange(n)], 1) + np.array([n, n, 0]),
        ]
    )
    found = find_holes(points, rows, np.repeat([1, 0], 32).astype(np.int32), NAMES)
    assert (found.count, found.edges, found.slits) == (2, 128, 0)
    large, small = found.largest
    assert large.groups == ("shell", "core")
    # perimeter and area of the regular polygon, closed forms
    for hole, radius in ((large, 2), (small, 1)):
        assert_allclose(hole.length, 2 * n * radius * np.sin(np.pi / n), rtol=1e-12)
        assert_allclose(hole.area, n / 2 * radius**2 * np.sin(2 * np.pi / n), rtol=1e-12)
    assert_allclose(large.centre, [0, 0, 3], atol=1e-12)
    assert "round (0, 0, 3) m, at groups 'shell' and 'core'" in str(large)


def test_hole_far_from_the_origin_and_uneven():
    corners = np.array([[0, 0, 0], [1, 0, 0], [2, 0, 0], [4, 0, 0], [4, 1, 0], [0, 1, 0]]) + np.array([100, 50, -70.0])
    rows = np.stack([np.arange(6), np.roll(np.arange(6), -1), np.zeros(6, int)], axis=1)
    (hole,) = find_holes(corners, rows, np.zeros(1, np.int32), ("a",)).largest
    # a rectangle of 4 m by 1 m
    assert_allclose((hole.area, hole.length), (4, 10), rtol=1e-12)
    assert_allclose(hole.centre, (102, 50.5, -70), rtol=1e-12)
    assert hole.encloses_area


def test_hole_beside_an_inner_wall():
    points, faces = meshes.together(meshes.cube_quads(), meshes.cube_quads(origin=(1, 0, 0)))
    merged = join_equal_points(points, np.ones(16, bool))[faces]
    # without the first cube's side of the wall, and without its bottom: three sides of it are open,
    # at the fourth the wall and the second bottom meet
    with pytest.raises(SurfaceError) as caught:
        mended(points, np.delete(merged, [0, 5], axis=0))
    text = str(caught.value)
    assert "1 hole, 3 open edges; it is a loop of 3 edges, length 3 m, round (0.3333, 0.5, 0) m" in text
    assert "; 3 edges join more than two faces (the first is at (1, " in text


def test_crowded_points_are_not_joined():
    rng = np.random.default_rng(4)
    points = np.concatenate([np.eye(3), 5 + 1e-3 * rng.random((100, 3))])
    own = np.arange(103)
    none = (np.empty(0, np.int64), np.empty(0, np.int8))
    arguments = (points, np.ones(103, bool), own, 1e-2, (np.array([0, 1, 2]), *none))
    assert join_near_points(*arguments) is own
    few = join_near_points(points, own < 6, *arguments[2:])
    assert few.tolist() == [0, 1, 2, 3, 3, 3, *range(6, 103)]


def test_hanging_point_is_named_as_a_slit():
    points, faces = meshes.cube_quads()
    points = np.concatenate([points, [[0.5, 0, 0]]])
    rows = [face.tolist() for face in faces]
    rows[0] = [0, 2, 3, 1, 8]  # the edge 0-1 has a point here and none in the other face
    with pytest.raises(
        SurfaceError, match=r"1 hole, 3 open edges;.*1 loop encloses no area.*a hanging point.*or raise weld"
    ):
        mended(points, rows)


def test_faces_without_area_are_told_and_kept():
    points, faces = meshes.cube_quads()
    points = np.concatenate([points, [[0.5, 0, 0]]])
    rows = [face.tolist() for face in faces]
    rows[0] = [0, 2, 3, 1, 8]
    result = mended(points, [*rows, [0, 8, 1], [3, 3, 1]], [0] * 6 + [1, 2])
    assert result.closed
    assert result.shells == 1
    assert result.notes == ("2 faces have no area: 1 in 'core', 1 in 'cap'",)
    assert result.offsets.size == 9


@pytest.mark.parametrize("kind", [FaceKind.TRIANGLE6, FaceKind.QUAD8, FaceKind.QUAD9])
def test_curved_soup_is_joined_with_its_midsides(kind):
    shape = meshes.tetrahedron() if kind is FaceKind.TRIANGLE6 else meshes.cube_quads()
    points, rows, kinds = meshes.curved(*shape, kind)
    own_points, own_rows = meshes.soup(points, rows)
    result = mended(own_points, own_rows, kinds=kinds)
    assert result.closed
    # corners and mid-side points, not the points within a face
    count = 2 * shape[1].size
    places = len(shape[0]) + shape[1].size // 2
    assert result.notes == (
        f"{count} points at {places} coincident places joined to close the surface (exactly equal coordinates)",
    )
    # a mid-side point out of place leaves a gap, and that is told
    own_points[own_rows[0, shape[1].shape[1]]] += [0, 0, 0.01]
    apart = mended(own_points, own_rows, kinds=kinds)
    assert apart.closed
    assert apart.notes[-1].startswith("curved faces part along 1 edge, by up to 0.01 m at (")


def test_midsides_of_their_own_in_one_place_are_no_gap():
    points, rows, kinds = meshes.curved(*meshes.tetrahedron(), FaceKind.TRIANGLE6)
    points = np.concatenate([points, points[rows[2, 3:4]]])
    rows[2, 3] = len(points) - 1
    assert mended(points, rows, kinds=kinds).notes == ()
    points[-1] += 1e-3
    (note,) = mended(points, rows, kinds=kinds).notes
    assert note.startswith("curved faces part along 1 edge, by up to 0.001732 m at (0")


@pytest.mark.parametrize(
    ("change", "error", "message"),
    [
        ({"points": np.zeros((4, 2))}, SurfaceError, r"points have shape \(4, 2\)"),
        (
            {"points": np.array([[0, 0, 0], [1, 0, np.nan], [0, 1, 0], [0, 0, np.inf]])},
            SurfaceError,
            r"m\.ply: 2 of 4 points have coordinates that are not finite, the first is point 1",
        ),
        ({"group_of_face": np.zeros(3, np.int32)}, GroupError, r"3 group numbers for 4 faces"),
        (
            {"group_of_face": np.array([0, 3, 0, -1], np.int32)},
            GroupError,
            r"2 of 4 faces belong to no group, the first is face 1",
        ),
        ({"connectivity": np.arange(12)}, SurfaceError, r"m\.ply: face 1 uses point 4, but there are 4 points"),
    ],
)
def test_arrays_that_do_not_fit(change, error, message):
    points, faces = meshes.tetrahedron()
    arguments = {
        "points": points,
        "connectivity": faces.ravel(),
        "offsets": None,
        "kinds": None,
        "group_of_face": np.zeros(4, np.int32),
        "group_names": NAMES,
    }
    with pytest.raises(error, match=message):
        mend(**(arguments | change), source="m.ply")
