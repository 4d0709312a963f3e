"""Which faces mending turns and which copies it drops."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from fluxmesh.errors import GroupError, SurfaceError
from fluxmesh.surface.orient import turn_faces
from fluxmesh.surface.surface import FaceKind
from fluxmesh.surface.weld import join_equal_points
from tests import small_meshes as meshes
from tests.mending import NAMES, SHAPES, assert_closed, mended, triangles, volume_of


@pytest.mark.parametrize("name", SHAPES)
def test_inward_surface_is_turned(name):
    points, faces = SHAPES[name]
    result = mended(points, faces[:, ::-1])
    assert result.turned is not None
    assert result.turned.all()
    assert result.notes == ("all faces pointed into the fluid and were turned",)
    assert_closed(result, volume_of(points, faces))


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
