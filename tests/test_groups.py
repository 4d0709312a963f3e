"""Faces sorted into groups by array, by sets and by rule; the planar regions behind the rule."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp
from numpy.testing import assert_array_equal

from fluxmesh.errors import FieldError, FileError, GroupError
from fluxmesh.surface.files import read_meshes
from fluxmesh.surface.groups import Pick, by_array, by_pick, by_sets
from tests.mesh_writing import BOX_POINTS, BOX_QUADS, BOX_TRIANGLES, ascii_stl, box_polydata, write_ply, write_vtk_xml

REGION = np.array([3, 3, 7, -1, 7, 3])
WANTED = {"feed": (3,), "shell": (7, -1)}
OWNER = [0, 0, 1, 1, 1, 0]


@pytest.mark.parametrize("kind", [np.int8, np.int32, np.int64, np.float32, np.float64, object])
def test_integer_tags_of_every_type(kind: type) -> None:
    values = REGION.astype(str) if kind is object else REGION.astype(kind)
    owner = by_array(values, WANTED)
    assert owner.dtype == np.int32
    assert owner.tolist() == OWNER


def test_unsigned_and_column_shaped_and_boolean_tags() -> None:
    assert by_array(np.array([[0], [200]], dtype=np.uint8), {"a": (0,), "b": (200,)}).tolist() == [0, 1]
    high = np.array([2**64 - 1, 5], dtype=np.uint64)
    assert by_array(high, {"a": (5,)}, rest=True).tolist() == [-1, 0]
    with pytest.raises(GroupError, match="group 'b' has no faces: no face has the tag -1"):
        by_array(high, {"a": (5,), "b": (-1,)}, rest=True)
    assert by_array(np.array([True, False]), {"a": (0,), "b": (1,)}).tolist() == [1, 0]


def test_tags_far_apart_need_no_wide_table() -> None:
    values = np.array([2**50, -(2**40), 5, 2**50])
    assert by_array(values, {"a": (2**50,), "b": (5, -(2**40))}).tolist() == [0, 1, 1, 0]
    assert by_array(values, {"a": (2**50,), "b": (-(2**40),)}, rest=True).tolist() == [0, 1, -1, 0]


def test_text_tags_and_numbers_written_as_text() -> None:
    names = np.array(["feed", "shell", "drain", "shell"])
    assert by_array(names, {"in": ("feed",), "hull": ("shell", "drain")}).tolist() == [0, 1, 1, 1]
    assert by_array(names.astype("S"), {"in": "feed", "hull": ("shell", "drain")}).tolist() == [0, 1, 1, 1]
    assert by_array(REGION, {"3": ("3",), "shell": (7, -1)}).tolist() == OWNER


@given(
    hnp.arrays(np.int32, st.integers(1, 300), elements=st.integers(-5, 5)),
    st.dictionaries(st.sampled_from("abcd"), st.sets(st.integers(-6, 6), min_size=1), min_size=1),
)
def test_any_tags_agree_with_the_plain_loop(values: np.ndarray, wanted: dict[str, set[int]]) -> None:
    disjoint = wanted_in(values, wanted)
    if not disjoint:
        return
    owner = by_array(values, disjoint, rest=True)
    expected = [next((k for k, tags in enumerate(disjoint.values()) if value in tags), -1) for value in values]
    assert owner.tolist() == expected


def wanted_in(values: np.ndarray, wanted: dict[str, set[int]]) -> dict[str, list[int]]:
    """Return claims without overlap, of groups that have faces."""
    there = set(values.tolist())
    claimed: set[int] = set()
    result = {}
    for name, tags in wanted.items():
        own = tags - claimed
        claimed |= own
        if own & there:
            result[name] = sorted(own)
    return result


def test_blocks_join_without_a_seam() -> None:
    values = np.arange(200_000) % 11
    owner = by_array(values, {str(tag): (tag,) for tag in range(11)})
    assert_array_equal(owner, values)


@pytest.mark.parametrize(
    ("values", "wanted", "match"),
    [
        (REGION, {"feed": (3,), "drain": (4,), "shell": (7, -1)},
         r"group 'drain' has no faces: no face has the tag 4 in array 'region', which holds "
         r"3 \(3 faces\), 7 \(2 faces\), -1 \(1 face\)"),
        (REGION, {"feed": (3,)},
         r"3 faces in no group: array 'region' has 7 \(2 faces\), -1 \(1 face\) there. Add a group .*rest = true"),
        (REGION, {"feed": (3,), "shell": (7, 3)}, "groups 'feed' and 'shell' both claim the tag 3"),
        (REGION, {"feed": ("feed",)}, r"the tag 'feed' is no whole number, but array 'region' holds 3 \(3 faces\)"),
        (REGION + 0.25, {"feed": (3,)}, "no whole numbers on 6 faces, the first is 3.25 on face 0"),
        (np.where(REGION == 7, np.nan, REGION), {"feed": (3,)}, "numbers on 2 faces, the first is nan on face 2"),
        (np.array([1.0, np.inf]), {"feed": (1,)}, "no whole numbers on 1 face, the first is inf on face 1"),
        (np.zeros((6, 3)), {"feed": (0,)}, r"array 'region' has shape \(6, 3\) and type float64, which are no tags"),
        (np.array(["feed", "shell"]), {"fed": ("fed",)}, "the tag 'fed' in .* did you mean 'feed'"),
        (np.arange(30), {"feed": (99,)}, r"11 \(1 face\) and 18 more values"),
    ],
)  # fmt: skip
def test_tags_that_cannot_be_sorted(values: np.ndarray, wanted: dict[str, tuple[int | str, ...]], match: str) -> None:
    with pytest.raises(GroupError, match=match):
        by_array(values, wanted, array="region")


SETS = {"a": np.array([0, 1]), "b": np.array([2, 3]), "c": np.array([3, 4]), "none": np.zeros(0, dtype=np.int64)}


def test_sets_and_what_is_left_over() -> None:
    assert by_sets(SETS, {"feed": ("a",), "shell": ("b", "c")}, 5).tolist() == [0, 0, 1, 1, 1]
    assert by_sets(SETS, {"feed": "a"}, 5, rest=True).tolist() == [0, 0, -1, -1, -1]


@pytest.mark.parametrize(
    ("wanted", "match"),
    [
        ({"feed": ("b",), "shell": ("c",)}, r"face 3 is in group 'feed' and in group 'shell' \(set 'c'\), with 0 more"),
        ({"feed": ("aa",)}, r"asks for the set 'aa', and the file has 'a' \(2 faces\), .*did you mean 'a'"),
        ({"feed": ("none",)}, "group 'feed' has no faces"),
        ({"feed": ("a",)}, r"3 faces in no group; sets that have them: 'b' \(2 faces\), 'c' \(2 faces\). Add"),
    ],
)  # fmt: skip
def test_sets_that_do_not_fit(wanted: dict[str, tuple[str, ...]], match: str) -> None:
    with pytest.raises(GroupError, match=match):
        by_sets(SETS, wanted, 5)


QUADS = BOX_QUADS.ravel()
QUAD_STARTS = np.arange(0, 25, 4)
TOP = Pick((0, 0, 1), (1, 0.5, 3))
BOTTOM = Pick((0, 0, -2), (1, 0.5, 0))
TOP_FACES = [2, 3]
BOTTOM_FACES = [0, 1]


def picked(owner: np.ndarray, group: int) -> list[int]:
    return np.flatnonzero(owner == group).tolist()


def test_picks_on_triangles_quads_and_soups() -> None:
    soup = BOX_POINTS[BOX_TRIANGLES.ravel()]
    for points, faces in [
        (BOX_POINTS, BOX_TRIANGLES.ravel()),
        (soup, np.arange(36)),
        (soup.astype(np.float32), np.arange(36)),
    ]:
        owner, notes = by_pick(points, faces, None, {"drain": TOP, "feed": BOTTOM}, rest=True)
        assert (picked(owner, 0), picked(owner, 1), notes) == (TOP_FACES, BOTTOM_FACES, ())
    owner, _ = by_pick(BOX_POINTS, QUADS, QUAD_STARTS, {"drain": TOP, "feed": BOTTOM}, rest=True)
    assert owner.tolist() == [1, 0, -1, -1, -1, -1]


def test_points_that_nearly_coincide_hold_a_region_together() -> None:
    jitter = np.random.default_rng(3).uniform(-1e-7, 1e-7, (36, 3))
    owner, _ = by_pick(BOX_POINTS[BOX_TRIANGLES.ravel()] + jitter, np.arange(36), None, {"drain": TOP}, rest=True)
    assert picked(owner, 0) == TOP_FACES


def test_curved_faces_are_picked_by_their_corners() -> None:
    corners = BOX_POINTS[BOX_QUADS]
    middles = 0.5 * (corners + np.roll(corners, -1, axis=1))
    points = np.concatenate([corners, middles], axis=1).reshape(-1, 3)
    points[12:16, 2] += 0.3  # the top bulges between its corners
    owner, _ = by_pick(
        points, np.arange(48), np.arange(0, 49, 8), {"drain": TOP}, rest=True, kinds=np.full(6, 2, dtype=np.int8)
    )
    assert picked(owner, 0) == [1]


def plates(*heights_and_shifts: tuple[float, float]) -> tuple[np.ndarray, np.ndarray]:
    """Return unit squares of two triangles, each at a height and shifted along x."""
    square = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0]], dtype=float)
    points = np.concatenate([square + np.array([shift, 0, height]) for height, shift in heights_and_shifts])
    faces = np.concatenate([np.array([0, 1, 2, 0, 2, 3]) + 4 * k for k in range(len(heights_and_shifts))])
    return points, faces


def test_only_the_connected_part_of_a_plane_is_taken() -> None:
    points, faces = plates((0, 0), (0, 1), (0, 2.5))
    owner, _ = by_pick(points, faces, None, {"left": Pick((0, 0, 1), (0.2, 0.3, 0.1))}, rest=True)
    assert owner.tolist() == [0, 0, 0, 0, -1, -1]


def test_parallel_plane_that_is_connected_is_not_taken() -> None:
    points, faces = plates((0, 0), (0.01, 1.001))
    # the gap closed by a step whose normal is allowed too
    faces = np.concatenate([faces, [1, 4, 7, 1, 7, 2]])
    pick = Pick((0, 0, 1), (0.5, 0.5, 0), angle_deg=89.9)
    owner, _ = by_pick(points, faces, None, {"left": pick}, rest=True)
    assert picked(owner, 0) == [0, 1]
    owner, _ = by_pick(points, faces, None, {"left": pick}, rest=True, tolerance=0.02)
    assert picked(owner, 0) == [0, 1, 2, 3, 4, 5]


def test_small_crooked_face_still_finds_its_whole_region() -> None:
    # the face at the place is small and tilted by 0.46 degrees, its corners are level within 8e-6
    points = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [0.5, 0.5, 0], [0.501, 0.5, 0], [0.5, 0.501, 8e-6]])
    rows = [[4, 5, 6], [0, 1, 5], [0, 5, 4], [1, 2, 5], [5, 2, 6], [2, 3, 6], [3, 0, 4], [3, 4, 6]]
    owner, _ = by_pick(points, np.ravel(rows), None, {"plate": Pick((0, 0, 1), (0.5003, 0.5003, 0))}, rest=True)
    assert owner.tolist() == [0] * 8


def test_opposite_normal_is_taken_and_noted() -> None:
    points, faces = plates((0, 0))
    owner, notes = by_pick(points, faces, None, {"plate": Pick((0, 0, -1), (0.5, 0.5, 0))})
    assert owner.tolist() == [0, 0]
    assert notes == ("group 'plate': no face has normal (0, 0, -1); the region with the opposite normal was taken",)
    # on a box both normals are there, and the place tells which is meant
    owner, notes = by_pick(BOX_POINTS, QUADS, QUAD_STARTS, {"drain": Pick((0, 0, -1), (1, 0.5, 3))}, rest=True)
    assert picked(owner, 0) == [1]
    assert "the nearest face with normal (0, 0, -1) is 3 m from the place given" in notes[0]
    owner, notes = by_pick(
        BOX_POINTS, QUADS, QUAD_STARTS, {"drain": Pick((0, 0, -1), (1, 0.5, 3))}, rest=True, flipped=True
    )
    assert picked(owner, 0) == [1]
    assert notes == ()


def test_place_far_from_the_region_is_noted() -> None:
    owner, notes = by_pick(BOX_POINTS, QUADS, QUAD_STARTS, {"drain": Pick((0, 0, 1), (1, 0.5, 8))}, rest=True)
    assert picked(owner, 0) == [1]
    assert notes == ("group 'drain': the nearest face with normal (0, 0, 1) is 5 m from the place given",)


@pytest.mark.parametrize(
    ("picks", "match"),
    [
        ({"a": TOP, "b": Pick((0, 0, 1), (0, 0, 9))}, r"groups 'a' and 'b' both catch face 1 at \(1, 0.5, 3\) m"),
        ({"a": Pick((1, 1, 0), (2, 0.5, 1))},
         r"no face has a normal within 1 degrees of \(0.7071, 0.7071, 0\); the planar region nearest to \(2, 0.5, 1\) "
         r"m has normal \(1, 0, 0\), centroid \(2, 0.5, 1.5\) m and area 3 m²"),
        ({"a": Pick((0, 0, 0), (0, 0, 0))}, "the pick of group 'a' has normal .* the normal is not zero"),
        ({"a": Pick((0, 0, 1), (0, 0, np.nan))}, "three finite numbers"),
        ({"a": Pick((0, 0, 1), (0, 0, 3), 120.0)}, "an angle of 120 degrees"),
        ({"a": TOP}, "5 faces in no group: no pick caught them. .*rest = true"),
    ],
)  # fmt: skip
def test_picks_that_do_not_fit(picks: dict[str, Pick], match: str) -> None:
    with pytest.raises(GroupError, match=match):
        by_pick(BOX_POINTS, QUADS, QUAD_STARTS, picks)


def test_one_file_a_group(tmp_path: Path) -> None:
    corners = BOX_POINTS[BOX_TRIANGLES]
    (tmp_path / "feed.stl").write_text(ascii_stl({"inner": corners[:2]}))
    body = box_polydata()
    body.point_data["n"] = np.arange(8)
    write_vtk_xml(
        body.extract_cells(np.arange(4, 12)).extract_surface(algorithm="dataset_surface"), tmp_path / "shell.vtp"
    )
    write_ply(tmp_path / "drain.ply", BOX_POINTS, [[4, 5, 6, 7]], "ascii", np.arange(8.0), np.array([4]))
    suffixes = {"shell": "vtp", "feed": "stl", "drain": "ply"}
    joined = read_meshes({name: tmp_path / f"{name}.{suffix}" for name, suffix in suffixes.items()})
    mesh = joined.mesh
    assert joined.names == ("shell", "feed", "drain")
    assert joined.group_of_face.tolist() == [0] * 8 + [1] * 2 + [2]
    assert joined.group_of_face.dtype == np.int32
    assert np.bincount(joined.group_of_point).tolist() == [8, 6, 8]
    assert mesh.offsets is not None
    assert np.diff(mesh.offsets).tolist() == [3] * 10 + [4]
    # the same corners as the box, triangle by triangle and then the quad
    assert_array_equal(mesh.points[mesh.connectivity[:30]].reshape(-1, 3, 3), np.roll(corners, -4, axis=0)[:10])
    assert_array_equal(mesh.points[mesh.connectivity[30:]], BOX_POINTS[[4, 5, 6, 7]])
    assert {name: faces.tolist() for name, faces in mesh.face_sets.items()} == {"inner": [8, 9]}
    assert joined.node_arrays["feed"] == frozenset()
    assert {"p", "U", "n"} <= joined.node_arrays["shell"]
    assert joined.node_arrays["drain"] == {"pressure"}
    assert joined.face_arrays["drain"] == {"part"}
    assert sorted(mesh.node_arrays["n"][:8]) == list(range(8))
    assert np.isnan(mesh.node_arrays["n"][8:]).all()
    assert mesh.node_arrays["U"].shape == (22, 3)
    assert mesh.node_arrays["pressure"].dtype == np.float32
    assert_array_equal(mesh.node_arrays["pressure"][14:], np.arange(8))


def test_arrays_that_every_file_has_keep_their_type(tmp_path: Path) -> None:
    data = box_polydata(names=True)
    write_vtk_xml(data, tmp_path / "a.vtp")
    data.cell_data["region"] = data.cell_data["region"].astype(np.int64) + 6
    write_vtk_xml(data, tmp_path / "b.vtp")
    mesh = read_meshes({"a": tmp_path / "a.vtp", "b": tmp_path / "b.vtp"}).mesh
    assert mesh.offsets is None
    assert mesh.face_arrays["region"].dtype == np.int64
    assert mesh.face_arrays["region"].tolist() == np.repeat(np.arange(12), 2).tolist()
    assert mesh.face_arrays["name"][[0, 23]].tolist() == ["part 0", "part 5"]
    assert mesh.connectivity.max() == 15


def test_files_that_do_not_fit_together(tmp_path: Path) -> None:
    import pyvista as pv

    data = box_polydata()
    write_vtk_xml(data, tmp_path / "a.vtp")
    data.point_data["p"] = np.zeros((8, 2))
    write_vtk_xml(data, tmp_path / "b.vtp")
    with pytest.raises(FieldError, match="array 'p' has 1 components in 'feed' and 2 in 'shell'"):
        read_meshes({"feed": tmp_path / "a.vtp", "shell": tmp_path / "b.vtp"})
    words = pv.PolyData.from_regular_faces(BOX_POINTS, BOX_TRIANGLES)
    words.cell_data["region"] = np.array(["word"] * 12)
    write_vtk_xml(words, tmp_path / "b.vtp")
    with pytest.raises(
        FieldError, match="array 'region' is text in one of 'feed' and 'shell' and numbers in the other"
    ):
        read_meshes({"feed": tmp_path / "a.vtp", "shell": tmp_path / "b.vtp"})
    with pytest.raises(GroupError, match=r"groups 'feed' and 'shell' are the same file a\.vtp"):
        read_meshes({"feed": tmp_path / "a.vtp", "shell": tmp_path / "." / "a.vtp"})
    with pytest.raises(GroupError, match="no group has a file"):
        read_meshes({})
    with pytest.raises(FileError, match="no such file"):
        read_meshes({"feed": tmp_path / "a.vtp", "shell": tmp_path / "c.vtp"})


def test_a_place_in_the_wrong_unit_is_refused() -> None:
    points, faces = np.array([[0, 0, 0], [1, 0, 0], [0, 1, 0]], dtype=float), np.array([0, 1, 2])
    with pytest.raises(GroupError, match=r"near is in metres unless it says otherwise"):
        by_pick(points, faces, None, {"a": Pick((0, 0, 1), (300.0, 200.0, 0.0))})
