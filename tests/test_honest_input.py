"""Input that would have given wrong numbers in silence: it is refused, or noted."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh.errors import FileError, GroupError, InputError, SurfaceError
from fluxmesh.field.flow import near_origin
from fluxmesh.field.supplied import uniform_velocity
from fluxmesh.surface.extent import used_box
from fluxmesh.surface.groups import Pick, by_pick
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.surface import ControlSurface, Group, Role
from tests import small_meshes as meshes
from tests import solids
from tests.mending import assert_closed, mended, volume_of
from tests.mesh_writing import BOX_POINTS, BOX_TRIANGLES, box_polydata, write_meshio, write_ply

Read = Callable[..., RawMesh]
Refuse = Callable[..., InputError]

PIPE = solids.pipe(0.1, 1.0, 48, 10, 12)
CAP = np.isclose(PIPE.points[:, 2], 1.0)
RADIUS = np.hypot(PIPE.points[:, 0], PIPE.points[:, 1])


def pick_outlet(
    solid: solids.Solid, points: np.ndarray, angle: float = 1.0, normal: tuple[float, ...] = (0, 0, 1), near=(0, 0, 1)
) -> tuple[int, tuple[str, ...]]:
    """Return how many faces a pick takes of the outlet, all of which must be outlet, and its notes."""
    connectivity, offsets = meshes.flat(solid.faces)
    owner, notes = by_pick(points, connectivity, offsets, {"out": Pick(normal, near, angle)}, rest=True)
    return int(np.isin(np.flatnonzero(owner == 0), solid.groups["outlet"]).sum()), notes


# --- caps that are not quite plane


def domed(height: float) -> np.ndarray:
    points = PIPE.points.copy()
    points[CAP, 2] += height * (1 - (RADIUS[CAP] / 0.1) ** 2)
    return points


@pytest.mark.parametrize("height", [1e-3, 3e-3, 1e-2])
def test_a_domed_cap_is_not_taken_in_part(height: float) -> None:
    with pytest.raises(GroupError, match=r"the pick of group 'out' takes only a part .* go on nearly in its plane"):
        pick_outlet(PIPE, domed(height))
    # the parabola is steepest at its rim: 2 h / R
    rim = np.degrees(np.arctan(2 * height / 0.1))
    assert pick_outlet(PIPE, domed(height), angle=rim) == (576, ())


def test_the_angle_that_the_message_names_takes_the_whole_cap() -> None:
    with pytest.raises(
        GroupError, match=r"480 faces, while 96 faces with 44 % of that area .*angle of the pick to 4 deg"
    ):
        pick_outlet(PIPE, domed(3e-3), angle=3.0)
    assert pick_outlet(PIPE, domed(3e-3), angle=4.0) == (576, ())


@pytest.mark.parametrize("height", [0.0, 1e-4, 5e-4])
def test_a_cap_within_the_angle_is_taken_whole(height: float) -> None:
    # 5e-4 lies beyond the distance that a step may have: the normals alone say what belongs to it
    assert pick_outlet(PIPE, domed(height)) == (576, ())


@pytest.mark.parametrize("noise", [1e-4, 1e-3])
def test_a_rough_cap_is_not_taken_in_part(noise: float) -> None:
    points = PIPE.points.copy()
    points[CAP, 2] += noise * np.random.default_rng(1).uniform(-1, 1, CAP.sum())
    with pytest.raises(GroupError, match="takes only a part of what it names"):
        pick_outlet(PIPE, points)


@pytest.mark.parametrize("far", [1e4, 3e4])
def test_plant_coordinates_of_32_bits_do_not_cut_a_port(far: float) -> None:
    turn, _ = solids.rigid_motion(np.random.default_rng(3))
    shift = np.array([far, -far, 0.3 * far])
    points = (PIPE.points @ turn.T + shift).astype(np.float32).astype(np.float64)
    normal, near = tuple(turn[:, 2]), tuple(turn[:, 2] + shift)
    with pytest.raises(GroupError, match="takes only a part of what it names"):
        pick_outlet(PIPE, points, normal=normal, near=near)
    # near the origin the same cap is plane to 32 bits
    assert pick_outlet(PIPE, PIPE.points.astype(np.float32).astype(np.float64)) == (576, ())


@pytest.mark.parametrize(("steps", "left"), [(6, 64), (20, 4 * 64)])
def test_a_rounded_rim_is_noted(steps: int, left: int) -> None:
    turn = np.linspace(0, np.pi / 2, steps + 1)[1:]
    rounded = [solids.Station((0, 0, 0.5 + 0.005 * np.sin(t)), 0.095 + 0.005 * np.cos(t)) for t in turn]
    straight = [solids.Station((0, 0, z), 0.1) for z in (0.0, 0.5)]
    solid = solids.swept([*straight, *rounded], 64, 3)
    taken, notes = pick_outlet(solid, solid.points, near=(0, 0, 0.5))
    assert taken == 192
    assert len(notes) == 1
    assert notes[0].startswith(f"group 'out': {left} faces beside it, with ")
    assert "(a rounded edge?)" in notes[0]
    # a chamfer of 45 degrees is no part of it and needs no word
    solid = solids.swept([*straight, solids.Station((0, 0, 0.505), 0.095)], 64, 3)
    assert pick_outlet(solid, solid.points, near=(0, 0, 0.5)) == (192, ())


def test_neighbours_that_another_pick_takes_are_not_left_out() -> None:
    ramp = np.radians(2.5)
    points = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [2, 0, np.tan(ramp)], [2, 1, np.tan(ramp)]], float)
    faces, starts = np.array([0, 1, 2, 3, 1, 4, 5, 2]), np.array([0, 4, 8])
    level, sloping = Pick((0, 0, 1), (0.5, 0.5, 0)), Pick((-np.sin(ramp), 0, np.cos(ramp)), (1.5, 0.5, 0.02))
    owner, notes = by_pick(points, faces, starts, {"a": level, "b": sloping})
    assert (owner.tolist(), notes) == ([0, 1], ())
    with pytest.raises(GroupError, match="the pick of group 'a' takes only a part"):
        by_pick(points, faces, starts, {"a": level}, rest=True)
    # a narrower angle says that the crease is meant
    owner, notes = by_pick(points, faces, starts, {"a": Pick((0, 0, 1), (0.5, 0.5, 0), 0.5)}, rest=True)
    assert owner.tolist() == [0, -1]
    assert "are left out" in notes[0] or "is left out" in notes[0]


# --- points that no face uses


def test_stray_points_do_not_stretch_the_box() -> None:
    points = np.concatenate([[[1e9, 0, 0]], BOX_POINTS, [[0, -1e12, 3]]])
    low, high = used_box(points, 1 + BOX_TRIANGLES.ravel())
    assert (low.tolist(), high.tolist()) == (BOX_POINTS.min(axis=0).tolist(), BOX_POINTS.max(axis=0).tolist())
    groups = np.zeros(12, np.int32)
    wall = (Group("wall", Role.WALL),)
    surface = ControlSurface(points, 1 + BOX_TRIANGLES.ravel(), None, None, groups, wall, closed=True)
    assert near_origin(surface).tolist() == (BOX_POINTS.max(axis=0) / 2).tolist()


def test_stray_points_do_not_widen_the_joining() -> None:
    # a slit of 1e-4: a hundred times the default of 1e-6 of the diagonal, far below that of the stray points
    points, faces = meshes.soup(*meshes.cube())
    points[:18, 0] += 1e-4 * (points[:18, 0] > 0.5)
    points = np.concatenate([points, [[500, 0, 0], [-500, 0, 0]]])
    assert mended(points, faces, weld_tolerance=1e-3).closed
    with pytest.raises(SurfaceError, match="the surface is open"):
        mended(points, faces)


def test_a_stray_point_does_not_make_a_surface_empty() -> None:
    points, faces = meshes.cube()
    assert_closed(mended(np.concatenate([points, [[1e14, 0, 0]]]), faces), 1.0)


# --- volumes that are nothing, or lost


def test_volume_lost_in_rounding_is_refused() -> None:
    points, faces = meshes.sphere(2)
    with pytest.raises(SurfaceError, match=r"lost in rounding: coordinates of 1e\+20 m are known to 8192 m only"):
        mended(1e5 * points + 1e20, faces)
    assert mended(1e5 * points + 1e9, faces).closed
    with pytest.raises(SurfaceError, match="areas and volumes overflow"):
        mended(1e110 * points, faces)


def test_a_surface_that_encloses_nothing_is_refused() -> None:
    square = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0]], float)
    sheet = np.array([[0, 1, 2], [0, 2, 3], [2, 1, 0], [3, 2, 0]])
    with pytest.raises(SurfaceError, match=r"the surface encloses no volume: it is flat.*or set closed = false"):
        mended(square, sheet)
    assert "the surface encloses no volume" in mended(square, sheet, require_closed=False).notes
    # squashed flat: distinct points, but no thickness
    points, faces = meshes.sphere(2)
    with pytest.raises(SurfaceError, match="the surface encloses no volume"):
        mended(points * [1, 1, 0], faces)


# --- shells that overlap


def moved(shift: tuple[float, float, float], level: int = 2) -> tuple[np.ndarray, np.ndarray]:
    return meshes.sphere(level, 1.0, shift)


@pytest.mark.parametrize(
    "pair",
    [
        (moved((0, 0, 0)), moved((0.5, 0, 0))),
        (moved((0, 0, 0)), moved((1.2, 0.3, 0))),
        # within the box of the other, not within the other
        (moved((0, 0, 0)), meshes.sphere(2, 0.3, (0.6, 0.6, 0.3))),
        # the same ball meshed twice
        (moved((0, 0, 0), 3), moved((0, 0, 0), 2)),
        (moved((0, 0, 0), 3), moved((1e-3, 2e-3, -1e-3), 3)),
        # two bars across each other: no corner of one lies within the other
        (
            (meshes.cube()[0] * [9, 1, 1], meshes.cube()[1]),
            (meshes.cube()[0] * [1, 9, 1] + [4, -4, 0], meshes.cube()[1]),
        ),
    ],
)
def test_overlapping_shells_are_refused(pair: tuple[tuple[np.ndarray, np.ndarray], ...]) -> None:
    with pytest.raises(SurfaceError, match=r"overlap|the same faces seem to be there twice"):
        mended(*meshes.together(*pair))


def test_shells_that_do_not_overlap_are_kept() -> None:
    # beside each other and touching, one round the other with a narrow gap, and boxes that overlap alone
    side = meshes.together(meshes.cube(), meshes.cube(origin=(1.0, 0.0, 0.0)))
    assert_closed(mended(*side), 2.0)
    shell = meshes.sphere(2), meshes.sphere(2, 0.999)
    assert_closed(mended(*meshes.together(*shell)), volume_of(*shell[0]) - volume_of(*shell[1]))
    near = meshes.sphere(2), meshes.sphere(2, 1.0, (1.3, 1.3, 1.3))
    assert_closed(mended(*meshes.together(*near)), 2 * volume_of(*near[0]))


# --- supplied flow


def test_area_vectors_that_cancel_to_round_off_give_no_direction() -> None:
    with pytest.raises(GroupError, match="the faces enclose no net area"):
        uniform_velocity("skin", Role.INLET, np.array([1e-17, 0, 0]), flow_rate=1.0, whole=6.0)
    # a small port is no round-off
    velocity = uniform_velocity("feed", Role.OUTLET, np.array([1e-17, 0, 0]), flow_rate=1e-17, whole=1e-17)
    assert_allclose(velocity, (1, 0, 0), rtol=1e-15)


# --- files cut within their last number

OFF = "OFF\n4 4 0\n0 0 0\n1 0 0\n0 1 0\n0 0 1\n3 0 2 1\n3 0 1 3\n3 1 2 3\n3 0 3 2\n"
OBJ = "v 0 0 0\nv 1 0 0\nv 0 1 0\nv 0 0 1\nf 1 3 2\nf 1 2 4\nf 2 3 4\nf 1 4 3\n"
VTK = (
    "# vtk DataFile Version 3.0\nplate\nASCII\nDATASET POLYDATA\nPOINTS 3 double\n0 0 0 1 0 0 0 1 0\n"
    "POLYGONS 1 4\n3 0 1 2\nPOINT_DATA 3\nSCALARS p double\nLOOKUP_TABLE default\n10 20 30\n"
)


@pytest.mark.parametrize(("name", "text"), [("a.off", OFF), ("a.obj", OBJ), ("a.vtk", VTK)])
def test_a_text_file_without_its_last_newline_is_noted(tmp_path: Path, read: Read, name: str, text: str) -> None:
    path = tmp_path / name
    path.write_text(text)
    assert read(path).notes == ()
    path.write_text(text.rstrip("\n"))
    last = text.split()[-1]
    expected = f"{name} does not end with a newline: it may be cut short within its last number '{last}'"
    assert read(path).notes == (expected,)


def test_ascii_ply_without_its_last_newline_is_noted(tmp_path: Path, read: Read) -> None:
    rows = [list(map(int, face)) for face in BOX_TRIANGLES]
    path = write_ply(tmp_path / "box.ply", BOX_POINTS, rows, "ascii", np.zeros(8), np.zeros(12, np.int64))
    whole = path.read_bytes()
    assert read(path).notes == ()
    path.write_bytes(whole.rstrip())
    assert "box.ply does not end with a newline" in read(path).notes[0]
    raw = write_ply(tmp_path / "raw.ply", BOX_POINTS, rows, "binary_little_endian", np.zeros(8), np.zeros(12, np.int64))
    assert read(raw).notes == ()


def test_a_closing_word_needs_no_newline(tmp_path: Path, read: Read) -> None:
    path = write_meshio(tmp_path / "box.mesh", [("triangle", BOX_TRIANGLES)])
    text = path.read_text()
    assert text.endswith("End\n")
    path.write_text(text.rstrip("\n"))
    assert read(path).notes == ()


# --- .msh files that lost elements


def msh(tmp_path: Path, binary: bool, version: str = "gmsh") -> Path:
    tags = [np.full(6, 1), np.full(6, 2)]
    options = {"gmsh:geometrical": tags, "gmsh:physical": tags}
    nodes = {} if version == "gmsh22" else {"gmsh:dim_tags": np.column_stack([np.full(8, 2), np.arange(8) % 2 + 1])}
    return write_meshio(
        tmp_path / "box.msh",
        [("triangle", BOX_TRIANGLES[:6]), ("triangle", BOX_TRIANGLES[6:])],
        file_format=version,
        binary=binary,
        cell_data=options,
        point_data=nodes,
    )


@pytest.mark.parametrize("binary", [True, False])
def test_msh_of_version_4_is_counted(tmp_path: Path, read: Read, refuse: Refuse, binary: bool) -> None:
    path = msh(tmp_path, binary)
    whole = path.read_bytes()
    assert read(path).face_count == 12
    at = whole.index(b"$Elements\n") + len(b"$Elements\n")
    two = (2).to_bytes(8, "little") if binary else b"2"
    one = (1).to_bytes(8, "little") if binary else b"1"
    assert whole[at : at + len(two)] == two
    # a block less: its faces would be passed over
    path.write_bytes(whole[:at] + one + whole[at + len(two) :])
    refuse(path, "announces 12 of its Elements, 6 were read")
    # both counts lowered: then the section is too long
    second = at + len(two) + (0 if binary else 1)
    six = (6).to_bytes(8, "little") if binary else b"6 "
    path.write_bytes(whole[:at] + one + whole[at + len(two) : second] + six + whole[second + len(six) :])
    refuse(path, r"its section \$Elements holds \d+ (numbers|bytes) where \d+ are needed")


def test_msh_of_version_2_is_counted(tmp_path: Path, read: Read, refuse: Refuse) -> None:
    path = msh(tmp_path, False, "gmsh22")
    whole = path.read_text()
    assert read(path).face_count == 12
    path.write_text(whole.replace("$Elements\n12\n", "$Elements\n10\n"))
    refuse(path, "announces 10 of its Elements, and lists 12")


# --- legacy VTK files that would end the process


@pytest.mark.parametrize(
    ("old", "new", "match"),
    [
        ("3 0 1 2", "6755562 0 1 2", "a list of cells whose lengths do not add up"),
        ("3 0 1 2", "-3 0 1 2", "a list of cells whose lengths do not add up"),
        ("POLYGONS 1 4", "POLYGONS -1 4", "announces -1 of something"),
        ("POLYGONS 1 4", "POLYGONS 1 x4", "its line 'POLYGONS 1 x4' cannot be understood"),
        ("POINT_DATA 3", "POINT_DATA -3", "announces -3 of something"),
        ("SCALARS p double\nLOOKUP_TABLE default\n", "FIELD f 88888888\np 1 3 double\n", "'FIELD f 88888888' needs"),
        ("POINTS 3 ", "POINTS 333333333 ", "'POINTS 333333333 double' needs"),
        ("Version 3.0", "Version 3.x", "does not tell the version"),
    ],
)
def test_damaged_legacy_vtk_is_refused_before_it_is_read(
    tmp_path: Path, refuse: Refuse, old: str, new: str, match: str
) -> None:
    path = tmp_path / "plate.vtk"
    assert VTK.count(old) == 1
    path.write_text(VTK.replace(old, new))
    refuse(path, match)


@pytest.mark.parametrize("version", [42, 51])
def test_damaged_binary_legacy_vtk_is_refused_before_it_is_read(
    tmp_path: Path, read: Read, refuse: Refuse, version: int
) -> None:
    from vtkmodules.vtkIOLegacy import vtkPolyDataWriter

    path = tmp_path / "box.vtk"
    writer = vtkPolyDataWriter()
    writer.SetInputData(box_polydata(names=True))
    writer.SetFileName(str(path))
    writer.SetFileTypeToBinary()
    writer.SetFileVersion(version)
    writer.Write()
    whole = path.read_bytes()
    assert read(path).face_count == 12
    # the second length, or offset, in the list of cells
    start = whole.index(b"\n", whole.index(b"OFFSETS" if version == 51 else b"POLYGONS")) + 1
    place = start + (8 if version == 51 else 16)
    path.write_bytes(whole[:place] + b"\x7f" + whole[place + 1 :])
    refuse(path, "a list of cells whose lengths do not add up")
    kind = whole.index(b"POINTS ") + len(b"POINTS ")
    path.write_bytes(whole[:kind] + b"99" + whole[kind:])
    refuse(path, r"its block 'POINTS 998 \w+' needs \d+ bytes, \d+ are left")


def test_names_in_latin_1_are_read(tmp_path: Path, read: Read) -> None:
    path = tmp_path / "plate.vtk"
    text = VTK.replace("SCALARS p ", "SCALARS größe ") + "CELL_DATA 1\nFIELD f 1\nzone 1 1 string\nEinläufe\n"
    path.write_bytes(text.encode("latin-1"))
    mesh = read(path)
    assert mesh.node_arrays["größe"].tolist() == [10, 20, 30]
    assert mesh.face_arrays["zone"].tolist() == ["Einläufe"]


# --- what is no file


def test_a_pipe_is_no_mesh_file(tmp_path: Path, refuse: Refuse) -> None:
    path = tmp_path / "box.vtp"
    os.mkfifo(path)
    refuse(path, "is no regular file", kind=FileError)
