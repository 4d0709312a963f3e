"""Edge pairing against a plain dictionary, and on shapes whose answer is known."""

from __future__ import annotations

from collections import Counter, defaultdict
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fluxmesh.errors import SurfaceError
from fluxmesh.surface import edges
from fluxmesh.surface.edges import EdgePairing, pair_edges, relate_faces
from fluxmesh.surface.surface import FaceKind
from tests import small_meshes as meshes


def pair(points, faces, **options) -> EdgePairing:
    connectivity, offsets = meshes.flat(faces)
    return pair_edges(connectivity, offsets, None, len(points), **options)


def reduced(face: list[int]) -> list[int]:
    """Remove repeats and spikes from a cycle, one at a time, until there are none."""
    face = list(face)
    again = True
    while again and len(face) > 2:
        again = False
        for i in range(len(face)):
            if face[i] == face[i - 1]:
                del face[i]
                again = True
                break
            if face[i] == face[i - 2]:
                for gone in sorted({i % len(face), (i - 1) % len(face)}, reverse=True):
                    del face[gone]
                again = True
                break
    return face if len(face) > 2 else []


def half_edges(faces: list[list[int]]) -> dict[tuple[int, int], list[tuple[int, bool]]]:
    found = defaultdict(list)
    for number, face in enumerate(faces):
        corners = reduced(face)
        for a, b in zip(corners, corners[1:] + corners[:1]):
            found[min(a, b), max(a, b)].append((number, a > b))
    return dict(found)


def sets_of(count: int, links: list[tuple[int, int]]) -> list[int]:
    label = list(range(count))
    for a, b in links:
        low, high = sorted((label[a], label[b]))
        label = [low if x == high else x for x in label]
    return label


def shells_of(faces: list[list[int]]) -> list[int]:
    """Label shells by the definition: two-face edges first, then sheets with an odd number at a crowded edge."""
    found = half_edges(faces)
    sheet = sets_of(len(faces), [(on[0][0], on[1][0]) for on in found.values() if len(on) == 2])
    links = []
    for on in found.values():
        if len(on) > 2:
            odd = [s for s, n in Counter(sheet[face] for face, _ in on).items() if n % 2]
            links += list(pairwise(odd))
    label = sets_of(len(faces), links)
    return [label[s] if reduced(face) else -1 for s, face in zip(sheet, faces)]


def same_partition(ours: np.ndarray, theirs: list[int]) -> bool:
    return len(set(zip(ours.tolist(), theirs))) == len(set(ours.tolist())) == len(set(theirs))


@st.composite
def any_faces(draw, sizes=(3, 5)):
    count = draw(st.integers(1, 12))
    corner = st.integers(0, 6)
    return [draw(st.lists(corner, min_size=sizes[0], max_size=sizes[1])) for _ in range(count)]


def check_against_dictionary(faces: list[list[int]], pairing: EdgePairing) -> None:
    found = half_edges(faces)
    excess = {edge: sum(1 - 2 * back for _, back in on) for edge, on in found.items()}
    crowded = [edge for edge, on in found.items() if len(on) > 2]
    same_way = [edge for edge, on in found.items() if len(on) == 2 and excess[edge]]
    assert pairing.edge_count == len(found)
    assert pairing.odd_count == sum(len(on) % 2 for on in found.values())
    assert pairing.same_way_count == len(same_way)
    assert pairing.crowded_count == len(crowded)
    assert pairing.unbalanced_crowded_count == sum(excess[edge] != 0 for edge in crowded)
    assert pairing.closed == (not any(excess.values()))
    open_rows = Counter((min(a, b), max(a, b), a > b) for a, b, _ in pairing.open_edges.tolist())
    expected = {(*e, x < 0): abs(x) for e, x in excess.items() if x and len(found[e]) != 2}
    assert open_rows == expected
    for a, b, face in [*pairing.open_edges.tolist(), *pairing.crowded_edges.tolist()]:
        assert (face, a > b) in found[min(a, b), max(a, b)]
    assert sorted(tuple(row[:2]) for row in pairing.same_way_edges.tolist()) == sorted(same_way)
    for a, b, one, other in pairing.same_way_edges.tolist():
        assert [face for face, _ in found[a, b]] == [one, other]
    assert len(pairing.crowded_edges) == sum(len(found[edge]) for edge in crowded)
    odd_points = {point for edge, on in found.items() if len(on) % 2 for point in edge}
    assert set(np.flatnonzero(pairing.on_open_edge).tolist()) == odd_points
    shells = shells_of(faces)
    assert same_partition(pairing.shell_of_face, shells)
    assert pairing.shell_count == len(set(shells) - {-1})


@settings(max_examples=300, deadline=None)
@given(any_faces())
def test_polygons_agree_with_a_dictionary(faces):
    connectivity = np.concatenate([np.asarray(face) for face in faces])
    offsets = np.concatenate([[0], np.cumsum([len(face) for face in faces])])
    check_against_dictionary(faces, pair_edges(connectivity, offsets, None, 7))


@settings(max_examples=300, deadline=None)
@given(any_faces(sizes=(3, 3)), st.permutations(range(7)), st.integers(1, 7))
def test_triangles_on_joined_points_agree_with_a_dictionary(faces, order, count):
    representative = np.array([order[i % count] for i in range(7)])
    pairing = pair_edges(np.array(faces).ravel(), None, None, 7, representative)
    check_against_dictionary(representative[np.array(faces)].tolist(), pairing)


@settings(max_examples=200, deadline=None)
@given(any_faces(sizes=(3, 4)))
def test_relation_of_faces_leaves_no_two_the_same_way(faces):
    connectivity, offsets = meshes.flat(faces)
    relation = relate_faces(connectivity, offsets, None, 7)
    turned = [face[::-1] if turn else face for face, turn in zip(faces, relation.against)]
    left = [e for e, on in half_edges(turned).items() if len(on) == 2 and on[0][1] == on[1][1]]
    found = half_edges(faces)
    sheet = sets_of(len(faces), [(on[0][0], on[1][0]) for on in found.values() if len(on) == 2])
    assert relation.first_face.tolist() == sheet
    assert not relation.against[np.unique(relation.first_face)].any()
    if relation.conflict is None:
        assert left == []
    else:
        # the contradiction is real: no choice of the sheet's faces is consistent
        member = [f for f in range(len(faces)) if sheet[f] == sheet[relation.conflict[2]]]
        pairs = [on for on in found.values() if len(on) == 2 and on[0][0] in member]
        for choice in range(2 ** (len(member) - 1)):
            turn = {face: bool(choice >> i & 1) for i, face in enumerate(member)}
            assert any(a[1] ^ turn[a[0]] == b[1] ^ turn[b[0]] for a, b in pairs)


@pytest.mark.parametrize("shape", [meshes.cube(), meshes.cube_quads(), meshes.tetrahedron(), meshes.sphere()])
def test_closed_shapes(shape):
    points, faces = shape
    pairing = pair(points, faces)
    assert pairing.closed
    assert pairing.sealed
    assert pairing.consistent
    assert pairing.shell_count == 1
    assert not pairing.shell_of_face.any()
    assert pairing.shell_of_face.dtype == np.int32
    # Euler's formula for a polyhedron without handles: V - E + F = 2
    assert len(points) - pairing.edge_count + len(faces) == 2
    assert pairing.open_edges.shape == (0, 3)


def test_missing_face_leaves_its_edges_backward():
    points, faces = meshes.cube_quads()
    pairing = pair(points, faces[1:])
    gone = [tuple(edge) for edge in zip(np.roll(faces[0], -1).tolist(), faces[0].tolist())]
    assert not pairing.closed
    assert not pairing.sealed
    assert pairing.consistent
    assert sorted(tuple(row) for row in pairing.open_edges[:, :2].tolist()) == sorted(gone)
    assert np.flatnonzero(pairing.on_open_edge).tolist() == sorted(faces[0].tolist())


def test_flipped_face_runs_the_same_way_as_its_neighbours():
    points, faces = meshes.cube_quads()
    faces[2] = faces[2, ::-1]
    pairing = pair(points, faces)
    assert (pairing.closed, pairing.sealed, pairing.consistent) == (False, True, False)
    assert pairing.same_way_count == 4
    assert (pairing.same_way_edges[:, 2:] == 2).any(axis=1).all()
    assert len(pairing.open_edges) == 0


def test_shells_are_numbered_by_their_first_face():
    points, faces = meshes.together(meshes.cube(), meshes.tetrahedron(), meshes.sphere(1))
    order = np.random.default_rng(3).permutation(len(faces))
    owner = np.repeat([0, 1, 2], [12, 4, 80])[order]
    pairing = pair(points, faces[order])
    numbers = {shell: number for number, shell in enumerate(dict.fromkeys(owner.tolist()))}
    assert pairing.shell_count == 3
    assert pairing.shell_of_face.tolist() == [numbers[shell] for shell in owner.tolist()]


def test_cubes_that_share_an_edge_are_two_shells():
    points, faces = meshes.together(meshes.cube_quads(), meshes.cube_quads(origin=(1, 1, 0)))
    # points 3 and 7 of the first stand where 0 and 4 of the second do
    representative = np.arange(16)
    representative[[8, 12]] = [3, 7]
    pairing = pair(points, faces, representative=representative)
    assert pairing.closed
    assert (pairing.crowded_count, pairing.unbalanced_crowded_count) == (1, 0)
    assert len(pairing.crowded_edges) == 4
    assert pairing.shell_count == 2


def test_inner_wall_makes_an_odd_crowded_edge():
    points, faces = meshes.together(meshes.cube_quads(), meshes.cube_quads(origin=(1, 0, 0)))
    representative = np.arange(16)
    representative[[8, 10, 12, 14]] = [1, 3, 5, 7]
    # the second cube without the face it has in common with the first
    pairing = pair(points, np.delete(faces, 6 + 4, axis=0), representative=representative)
    assert not pairing.sealed
    assert (pairing.odd_count, pairing.crowded_count, pairing.unbalanced_crowded_count) == (4, 4, 4)
    assert len(pairing.open_edges) == 4
    assert pairing.shell_count == 1


def test_bucket_of_a_point_with_a_thousand_faces():
    rim = np.arange(2, 1002)
    around = np.roll(rim, -1)
    top, bottom = np.zeros(1000, int), np.ones(1000, int)
    faces = np.concatenate([np.stack([top, rim, around], 1), np.stack([bottom, around, rim], 1)])
    faces = faces[np.random.default_rng(1).permutation(2000)]
    pairing = pair(np.zeros((1002, 3)), faces)
    assert pairing.closed
    assert pairing.shell_count == 1
    assert pairing.edge_count == 3000
    assert pair(np.zeros((1002, 3)), faces[:-1]).odd_count == 3


def test_repeated_points_of_a_face_do_not_open_the_surface():
    points, faces = meshes.cube_quads()
    # a flat triangle (0, 0, 1) between two faces, and a quad with a doubled corner
    degenerate = [*faces.tolist(), [0, 0, 1]]
    pairing = pair(points, degenerate)
    assert pairing.closed
    assert pairing.shell_count == 1
    assert pairing.shell_of_face.tolist() == [0] * 6 + [-1]
    doubled = [[*face, face[0]] for face in faces.tolist()]
    assert pair(points, doubled).closed


def lists_of(pairing: EdgePairing) -> list[list[object]]:
    return [np.asarray(value).tolist() for value in vars(pairing).values()]


@pytest.mark.parametrize("kind", ["triangles", "polygons"])
def test_any_number_of_threads_gives_the_same(monkeypatch, kind):
    rng = np.random.default_rng(5)
    points, faces = meshes.together(meshes.sphere(3), meshes.cube(), meshes.cube())
    faces = faces[rng.permutation(len(faces))][:-40]
    faces[::9] = faces[::9, ::-1]
    faces = np.concatenate([faces, faces[:30]])
    if kind == "polygons":
        faces = [*faces.tolist(), [0, 1, 2, 3]]
    results = []
    for threads in ("1", "2", "3", "4", "7"):
        monkeypatch.setenv("FLUXMESH_THREADS", threads)
        results.append(lists_of(pair(points, faces)))
    assert results[0] == results[1] == results[2] == results[3] == results[4]
    assert len(results[0]) == 13


def test_wide_work_arrays_give_the_same(monkeypatch):
    points, faces = meshes.sphere(2)
    faces = np.concatenate([faces[3:], faces[40:50, ::-1], faces[60:61]])
    narrow = lists_of(pair(points, faces))
    monkeypatch.setattr(edges, "_NARROW_LIMIT", 0)
    assert lists_of(pair(points, faces)) == narrow


def test_without_listing_only_the_lists_are_empty():
    points, faces = meshes.cube()
    faces[3] = faces[3, ::-1]
    faces = np.concatenate([faces[1:], faces[5:6]])
    full, short = vars(pair(points, faces)), vars(pair(points, faces, listing=False))
    lists = {"open_edges", "same_way_edges", "crowded_edges"}
    for name in full:
        if name in lists:
            assert len(full[name]) > 0
            assert len(short[name]) == 0
        else:
            np.testing.assert_array_equal(full[name], short[name])


@pytest.mark.parametrize(
    ("kind", "shape"),
    [
        (FaceKind.TRIANGLE6, meshes.tetrahedron()),
        (FaceKind.QUAD8, meshes.cube_quads()),
        (FaceKind.QUAD9, meshes.cube_quads()),
    ],
)
def test_curved_faces_pair_by_corners_and_tell_midside_gaps(kind, shape):
    points, rows, kinds = meshes.curved(*shape, kind)
    corners = shape[1].shape[1]
    connectivity, offsets = meshes.flat(rows)
    pairing = pair_edges(connectivity, offsets, kinds, len(points))
    assert pairing.closed
    assert pairing.edge_count == rows.shape[0] * corners // 2
    assert len(pairing.midside_gaps) == 0
    # another mid-side point for one edge of one face
    own = rows[1, corners]
    rows[1, corners] = len(points)
    moved = pair_edges(rows.ravel(), offsets, kinds, len(points) + 1)
    a, b = sorted(rows[1, :2].tolist())
    assert moved.closed
    ((low, high, one, other, mid, mid_other),) = moved.midside_gaps.tolist()
    assert (low, high) == (a, b)
    assert {one: mid, other: mid_other}[1] == len(points)
    assert {mid, mid_other} == {len(points), own}
    # joined points are one mid-side point
    representative = np.arange(len(points) + 1)
    representative[-1] = own
    assert len(pair_edges(rows.ravel(), offsets, kinds, len(points) + 1, representative).midside_gaps) == 0


def test_curved_beside_straight_is_a_gap():
    points, faces = meshes.tetrahedron()
    more, rows, _ = meshes.curved(points, faces, FaceKind.TRIANGLE6)
    mixed = [rows[0].tolist(), *faces[1:].tolist()]
    connectivity, offsets = meshes.flat(mixed)
    pairing = pair_edges(connectivity, offsets, np.array([1, 0, 0, 0], np.int8), len(more))
    assert pairing.closed
    assert len(pairing.midside_gaps) == 3
    assert (pairing.midside_gaps[:, 4:] == -1).sum() == 3


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (([0, 1, 2, 0, 1, 9], None, None, 4), r"face 1 uses point 9, but there are 4 points.*damaged"),
        (([0, 1, -2], None, None, 4), r"face 0 uses point -2"),
        (([0, 1, 2, 0, 1, 2, 7], [0, 3, 7], None, 4), r"face 1 uses point 7"),
        (([], None, None, 4), r"the surface has no faces"),
        (([0, 1, 2, 3], None, None, 4), r"4 entries do not make whole triangles"),
        (([0, 1, 2, 3], [0, 3, 5], None, 4), r"offsets do not rise from 0 to the number of entries"),
        (([0, 1, 2, 3, 2], [0, 2, 5], None, 4), r"offsets do not rise"),
        (([0, 1, 2, 3], [0, 4], [1], 4), r"face 0 is a curved face of 6 points by its kind, but has 4"),
        (([0, 1, 2], [0, 3], [0, 0], 4), r"2 face kinds for 1 faces"),
        (([0, 1, 2], None, [1], 4), r"curved faces need offsets"),
        (([0, 1, 2], None, None, 4, [0, 1]), r"2 representatives for 4 points"),
        (([0, 1, 2], None, None, 3, [0, 1, 3]), r"a point is represented by point 3, but there are 3 points"),
    ],
)
def test_arrays_that_do_not_fit(arguments, message):
    types = (np.int64, np.int64, np.int8, None, np.int64)
    ready = [value if value is None or kind is None else np.array(value, kind) for value, kind in zip(arguments, types)]
    with pytest.raises(SurfaceError, match=message):
        pair_edges(*ready)
