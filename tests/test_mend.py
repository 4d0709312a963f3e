"""What mending joins, drops and turns, what it says of it, and what it refuses."""

from __future__ import annotations

import numpy as np
import pytest
import trimesh
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from fluxmesh.errors import GroupError, SurfaceError
from fluxmesh.surface import shells
from fluxmesh.surface.holes import find_holes
from fluxmesh.surface.mend import Mended, mend
from fluxmesh.surface.orient import turn_faces
from fluxmesh.surface.surface import FaceKind
from fluxmesh.surface.weld import join_equal_points, join_near_points
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
def test_inward_surface_is_turned(name):
    points, faces = SHAPES[name]
    result = mended(points, faces[:, ::-1])
    assert result.turned is not None
    assert result.turned.all()
    assert result.notes == ("all faces pointed into the fluid and were turned",)
    assert_closed(result, volume_of(points, faces))


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
    with pytest.raises(SurfaceError, match=r"1 hole, 3 open edges;.*1 loop encloses no area.*a hanging point"):
        mended(points, rows)


@pytest.mark.parametrize("flipped", [[0], [5], [0, 7, 100, 319], list(range(100))])
def test_faces_that_run_against_their_neighbours_are_turned(flipped):
    points, faces = SHAPES["sphere"]
    wrong = faces.copy()
    wrong[flipped] = wrong[flipped, ::-1]
    groups = np.arange(len(faces)) % 2
    result = mended(points, wrong, groups)
    assert_closed(result, volume_of(points, faces))
    assert np.flatnonzero(result.turned).tolist() == flipped
    count = np.bincount(groups[flipped], minlength=2)
    text = ", ".join(f"{n} in '{name}'" for n, name in zip(count.tolist(), NAMES) if n)
    assert result.notes[0].endswith(f"turned to match the neighbours: {text}")
    assert result.notes[0].startswith(f"{len(flipped)} face")


def test_majority_goes_by_area():
    # 7 of 12 triangles run inward, but they are slivers on the side walls of a flat box
    points, faces = meshes.cube()
    points = points * [1, 1, 0.01]
    sides = np.flatnonzero(np.ptp(points[faces][:, :, 2], axis=1) > 0)[:7]
    faces[sides] = faces[sides, ::-1]
    result = mended(points, faces)
    assert np.flatnonzero(result.turned).tolist() == sides.tolist()
    assert len(result.notes) == 1


def test_open_pieces_are_oriented_too():
    points, faces = meshes.sphere(2)
    piece = faces[40:]
    wrong = piece.copy()
    wrong[10] = wrong[10, ::-1]
    result = mended(points, wrong, require_closed=False)
    np.testing.assert_array_equal(np.flatnonzero(result.turned), [10])
    assert not result.closed
    assert [note.split(":")[0] for note in result.notes] == [
        "1 face was turned to match the neighbours",
        "the surface is open",
    ]


@pytest.mark.parametrize("require_closed", [True, False])
def test_one_sided_surfaces_are_refused(require_closed):
    points, faces = meshes.moebius()
    message = r"24 faces that hang together cannot be given one orientation: .* one-sided surface"
    with pytest.raises(SurfaceError, match=message):
        mended(points, faces, require_closed=require_closed)
    grid = meshes.twisted_grid(8, 6)
    cloud = np.random.default_rng(0).normal(size=(48, 3))
    with pytest.raises(SurfaceError, match=r"96 faces that hang together .*Möbius band, through face \d+ at \("):
        mended(cloud, grid, require_closed=require_closed)


@pytest.mark.parametrize("opposite", [False, True])
@pytest.mark.parametrize("joined", [False, True])
def test_copies_in_one_group_are_dropped(opposite, joined):
    points, faces = SHAPES["sphere"]
    copies = faces[[3, 200]]
    all_faces = np.concatenate([faces, copies[:, ::-1] if opposite else np.roll(copies, 1, axis=1)])
    if not joined:
        points, all_faces = meshes.soup(points, all_faces)
    result = mended(points, all_faces)
    assert_closed(result, volume_of(*SHAPES["sphere"]))
    assert result.kept_faces.tolist() == list(range(320))
    assert "2 faces are copies of others and were dropped: 2 in 'shell'" in result.notes


def test_whole_surface_given_twice():
    points, faces = SHAPES["quads"]
    result = mended(points, np.concatenate([faces, faces]))
    assert_closed(result, 1.0)
    assert result.kept_faces.tolist() == list(range(6))
    assert result.offsets.tolist() == list(range(0, 25, 4))
    assert result.group_of_face.shape == (6,)
    # with points of its own the second is a closed shell on the first
    with pytest.raises(SurfaceError, match=r"shell 2 \(6 faces\) lies on shell 1 \(6 faces\): the same faces"):
        mended(*meshes.together((points, faces), (points, faces)))


def test_a_face_in_two_groups_is_refused():
    points, faces = SHAPES["cube"]
    doubled = np.concatenate([faces[:1], faces, faces[4:6]])
    message = r"b\.vtp: face 13 lies in groups 'shell' and 'cap': it is face 5 again; so do 1 more face"
    with pytest.raises(GroupError, match=message):
        mended(points, doubled, [0] * 13 + [2] * 2, source="b.vtp")


def baffle() -> tuple[np.ndarray, np.ndarray]:
    """Return a cube round a square wall given from both sides."""
    points, faces = meshes.cube(4.0)
    wall = np.array([[1, 1, 1], [2, 1, 1], [2, 2, 1], [1, 2, 1]], float)
    front = np.array([[8, 9, 10], [8, 10, 11]])
    return np.concatenate([points, wall]), np.concatenate([faces, front, front[:, ::-1]])


def test_wall_of_no_thickness_is_kept():
    points, faces = baffle()
    result = mended(points, faces, [0] * 12 + [1, 1, 2, 2])
    assert result.closed
    assert result.shells == 1
    assert (result.kept_faces, result.turned) == (None, None)
    assert result.notes == (
        "4 faces lie on another with the opposite normal (a thin wall of no thickness) and were kept",
        "4 faces form shells that enclose no volume: 2 in 'core', 2 in 'cap'",
    )


def test_full_width_wall_between_two_halves():
    # faces of two cubes that share a wall, each with its own side of it: crowded edges, all balanced
    points, faces = meshes.together(meshes.cube_quads(), meshes.cube_quads(origin=(1, 0, 0)))
    merged = join_equal_points(points, np.ones(16, bool))[faces]
    result = mended(points, merged)
    assert result.closed
    assert result.shells == 1
    assert result.notes == (
        "2 faces lie on another with the opposite normal (a thin wall of no thickness) and were kept",
    )
    assert_allclose(triangles(result).volume, 2.0, rtol=1e-14)
    inner = np.delete(merged, 5, axis=0)
    # with one cube inside out the two sides of the wall run the same way
    inverted = np.concatenate([merged[:6], merged[6:, ::-1]])
    for broken in (inner, inverted):
        with pytest.raises(SurfaceError, match=r"4 edges join more than two faces \(the first is at .*group 'shell'\)"):
            mended(points, broken)


@pytest.mark.parametrize("inward", [True, False])
def test_cavities_point_out_of_the_fluid(inward):
    points, faces = meshes.together(meshes.cube(), meshes.sphere(2, 0.2, (0.5, 0.5, 0.5)))
    if inward:
        faces[12:] = faces[12:, ::-1]
    result = mended(points, faces, [0] * 12 + [1] * 320)
    assert_closed(result, 1.0 - volume_of(*meshes.sphere(2, 0.2)))
    assert result.shells == 2
    expected = () if inward else ("shell 2 (a cavity: 320 faces, group 'core') was turned",)
    assert result.notes == expected


@pytest.mark.parametrize("seed", range(4))
def test_nested_and_separate_shells(seed):
    rng = np.random.default_rng(seed)
    parts = [meshes.sphere(1, r) for r in (4, 3, 2, 1)]
    parts += [meshes.cube(0.4, (-0.2, -0.2, 2.3)), meshes.cube(1, (9, 0, 0)), meshes.sphere(1, 0.1, (9.5, 0.5, 0.5))]
    signs = [1, -1, 1, -1, 1, 1, -1]
    # the small cube stands between the spheres of 3 and 2: within a body, so it holds fluid
    expected = sum(sign * volume_of(*part) for sign, part in zip(signs, parts))
    order = rng.permutation(len(parts))
    turned = [(points, faces[:, ::-1] if rng.random() < 0.5 else faces) for points, faces in (parts[i] for i in order)]
    result = mended(*meshes.together(*turned))
    assert result.shells == 7
    assert_closed(result, expected)


def test_a_thousand_bodies_in_a_large_shell():
    grid = np.stack(np.meshgrid(*[np.linspace(-0.5, 0.5, 10)] * 3), -1).reshape(-1, 3)
    body = meshes.sphere(1, 0.02)
    outer = meshes.sphere(6, 1.0)
    assert len(outer[1]) > shells._LARGE_SHELL
    parts = [outer, *((body[0] + place, body[1]) for place in grid)]
    result = mended(*meshes.together(*parts))
    assert result.shells == 1001
    assert_closed(result, volume_of(*outer) - 1000 * volume_of(*body))
    assert len(result.notes) == 6
    assert result.notes[0] == "shell 2 (a cavity: 80 faces, group 'shell') was turned"
    assert result.notes[5] == "995 more shells were turned"


def test_a_body_in_the_hole_of_a_ring_is_not_inside_it():
    ring = trimesh.creation.torus(1.0, 0.3)
    points, faces = np.array(ring.vertices), np.array(ring.faces)
    ball, dot = meshes.sphere(1, 0.2), meshes.sphere(1, 0.05, (1, 0, 0))
    result = mended(*meshes.together((points, faces), ball, dot))
    assert result.notes == ("shell 3 (a cavity: 80 faces, group 'shell') was turned",)
    assert_closed(result, volume_of(points, faces) + volume_of(*ball) - volume_of(*dot))


def test_volume_is_taken_about_a_near_point():
    points, faces = meshes.cube(0.1, (3e6, -5e6, 7e6))
    facets = shells.Facets(points, faces.ravel(), np.empty(0, np.int64), np.empty(0, np.int8))
    measures = shells.measure_shells(facets, np.zeros(12, np.int32), 1)
    # differences of coordinates are exact; about the far origin nine digits of the volume would be lost
    low, high = points.min(axis=0), points.max(axis=0)
    x, y, z = high - low
    assert_allclose(measures.volume, [x * y * z], rtol=1e-14)
    assert_allclose(measures.area, [2 * (x * y + y * z + z * x)], rtol=1e-14)
    assert measures.low.tolist() == [low.tolist()]
    assert measures.high.tolist() == [high.tolist()]


def test_lumped_winding_number_agrees_with_the_exact_one(monkeypatch):
    points, faces = meshes.sphere(4, 1.0)
    points = points * [1, 2, 0.5]
    facets = shells.Facets(points, faces.ravel(), np.empty(0, np.int64), np.empty(0, np.int8))
    rng = np.random.default_rng(2)
    places = rng.uniform(-1.2, 1.2, (200, 3)) * [1, 2, 0.5]
    inside = ((places / [1, 2, 0.5]) ** 2).sum(axis=1) < 1
    exact = shells._Winding(facets, np.arange(len(faces)))
    values = np.array([exact.number(place) for place in places])
    assert exact.cells is None
    clear = np.abs(((places / [1, 2, 0.5]) ** 2).sum(axis=1) - 1) > 0.05
    # a sum of 5120 angles
    assert_allclose(values[clear], inside[clear], atol=1e-11)
    monkeypatch.setattr(shells, "_LARGE_SHELL", 1)
    monkeypatch.setattr(shells, "_CLEAR", 1.0)  # never asks the exact one
    lumped = shells._Winding(facets, np.arange(len(faces)))
    values = np.array([lumped.number(place) for place in places])
    assert lumped.cells is not None
    # dipoles further off than three radii: well below the half that tells inside from outside
    assert_allclose(values[clear], inside[clear], atol=0.03)
    assert np.abs(values - inside)[clear].max() > 1e-9  # far cells were taken as dipoles


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
def test_curved_faces_are_turned_with_their_midsides(kind):
    shape = meshes.tetrahedron() if kind is FaceKind.TRIANGLE6 else meshes.cube_quads()
    points, rows, kinds = meshes.curved(*shape, kind)
    connectivity, offsets = meshes.flat(rows)
    turned = turn_faces(connectivity, offsets, kinds, np.ones(len(rows), bool)).reshape(rows.shape)
    size = shape[1].shape[1]
    assert (turned[:, 0] == rows[:, 0]).all()
    corners = points[turned[:, :size]]
    assert_allclose(points[turned[:, size : 2 * size]], (corners + np.roll(corners, -1, axis=1)) / 2, atol=0)
    back = {FaceKind.TRIANGLE6: [0, 2, 1, 5, 4, 3], FaceKind.QUAD8: [0, 3, 2, 1, 7, 6, 5, 4]}
    order = back.get(kind, [0, 3, 2, 1, 7, 6, 5, 4, 8])
    np.testing.assert_array_equal(turned, rows[:, order])
    inward = mended(points, turned, kinds=kinds)
    assert inward.notes == ("all faces pointed into the fluid and were turned",)
    np.testing.assert_array_equal(inward.connectivity.reshape(rows.shape), rows)


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


@st.composite
def disturbed_solid(draw):
    """Draw a closed solid with points and faces renumbered, rows rotated and some of them turned."""
    name = draw(st.sampled_from(["cube", "quads", "tetrahedron", "ball"]))
    points, faces = meshes.sphere(1) if name == "ball" else SHAPES[name]
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    shape = np.eye(3) + rng.uniform(-0.3, 0.3, (3, 3))
    points = points @ shape
    volume = volume_of(points, faces)
    number = rng.permutation(len(points))
    moved = np.empty_like(points)
    moved[number] = points
    rows = number[faces][rng.permutation(len(faces))]
    rows = np.array([np.roll(row, rng.integers(len(row))) for row in rows])
    turned = rng.random(len(rows)) < draw(st.sampled_from([0, 0.1, 0.5, 0.9, 1]))
    rows[turned] = rows[turned, ::-1]
    if draw(st.booleans()):
        moved, rows = meshes.soup(moved, rows)
    return moved, rows, volume


@settings(max_examples=100, deadline=None)
@given(disturbed_solid())
def test_any_numbering_and_any_turned_faces_give_the_same_solid(solid):
    points, faces, volume = solid
    result = mended(points, faces)
    assert volume > 0
    assert_closed(result, volume)
    # the mask says which rows run the other way now
    rows = result.connectivity.reshape(faces.shape)
    ahead = [tuple(np.roll(row, -int(np.argmin(row)))) for row in faces]
    now = [tuple(np.roll(row, -int(np.argmin(row)))) for row in rows]
    changed = [a != b for a, b in zip(ahead, now)]
    assert changed == (result.turned.tolist() if result.turned is not None else [False] * len(faces))
