"""Every reader gives back exactly what was written."""

from __future__ import annotations

import gc
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fluxmesh.surface.files import known_suffixes, read_mesh
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.faces import strip_triangles
from fluxmesh.surface.surface import FaceKind
from tests.mesh_writing import (
    BOX_POINTS,
    BOX_QUADS,
    BOX_TRIANGLES,
    PRESSURE,
    REGION,
    VELOCITY,
    VTP_MODES,
    ascii_stl,
    box_polydata,
    write_meshio,
    write_ply,
    write_vtk_xml,
)

Read = Callable[[Path], RawMesh]


@pytest.fixture
def read(capfd: pytest.CaptureFixture[str]) -> Read:
    """Read a file, and see that nothing was printed meanwhile."""

    def reading(path: Path) -> RawMesh:
        capfd.readouterr()
        mesh = read_mesh(path)
        assert capfd.readouterr() == ("", "")
        return mesh

    return reading


def faces_of(mesh: RawMesh) -> list[list[int]]:
    if mesh.offsets is None:
        return mesh.connectivity.reshape(-1, 3).tolist()
    return [mesh.connectivity[start:stop].tolist() for start, stop in zip(mesh.offsets[:-1], mesh.offsets[1:])]


def assert_box(mesh: RawMesh) -> None:
    np.testing.assert_array_equal(mesh.points, BOX_POINTS)
    np.testing.assert_array_equal(mesh.connectivity, BOX_TRIANGLES.ravel())
    assert mesh.connectivity.dtype == np.int64
    assert mesh.offsets is None
    assert mesh.kinds is None
    assert mesh.skipped == {}
    assert mesh.face_count == 12


def assert_arrays(found: dict[str, np.ndarray], wanted: dict[str, np.ndarray]) -> None:
    assert sorted(found) == sorted(wanted)
    for name, values in wanted.items():
        assert found[name].dtype == values.dtype, name
        np.testing.assert_array_equal(found[name], values)


@pytest.mark.parametrize("compressed", [False, True])
@pytest.mark.parametrize("mode", VTP_MODES)
def test_vtp_gives_points_faces_and_arrays_exactly(tmp_path: Path, read: Read, mode: str, compressed: bool) -> None:
    mesh = read(write_vtk_xml(box_polydata(), tmp_path / "box.vtp", mode, compressed))
    assert_box(mesh)
    assert mesh.source == "box.vtp"
    assert_arrays(mesh.node_arrays, {"p": PRESSURE, "U": VELOCITY})
    assert_arrays(mesh.face_arrays, {"region": REGION, "p": np.arange(12, dtype=np.float32)})


@pytest.mark.parametrize("mode", VTP_MODES)
def test_values_that_are_not_finite_are_read_as_they_are(tmp_path: Path, read: Read, mode: str) -> None:
    # telling where they stand is for the one who uses the array
    data = box_polydata()
    data.point_data["p"] = values = np.array([1, np.nan, np.inf, 2, 3, 4, 5, 6])
    data.cell_data["only_nan"] = np.full(12, np.nan)
    mesh = read(write_vtk_xml(data, tmp_path / "box.vtp", mode))
    np.testing.assert_array_equal(mesh.node_arrays["p"], values)
    assert np.isnan(mesh.face_arrays["only_nan"]).all()


def test_vtp_arrays_are_views_that_outlive_the_reader(tmp_path: Path, read: Read) -> None:
    mesh = read(write_vtk_xml(box_polydata(), tmp_path / "box.vtp"))
    gc.collect()
    for array in (mesh.points, mesh.connectivity, mesh.node_arrays["U"], mesh.face_arrays["region"]):
        assert not array.flags.owndata
    np.testing.assert_array_equal(mesh.node_arrays["U"], VELOCITY)


@pytest.mark.parametrize("suffix", [".vtp", ".vtk"])
def test_text_arrays_of_vtk_become_text(tmp_path: Path, read: Read, suffix: str) -> None:
    path = tmp_path / f"box{suffix}"
    box_polydata(names=True).save(path)
    names = read(path).face_arrays["name"]
    assert names.dtype.kind == "U"
    assert names.tolist() == [f"part {number}" for number in REGION]


def test_polydata_of_all_kinds_keeps_cell_values_with_their_faces(tmp_path: Path, read: Read) -> None:
    import pyvista as pv

    data = pv.PolyData(
        BOX_POINTS,
        verts=[1, 0, 1, 5],
        lines=[3, 0, 1, 2],
        faces=[4, 0, 3, 2, 1, 3, 4, 5, 6, 5, 0, 1, 5, 6, 4],
        strips=[5, 0, 1, 2, 3, 4, 3, 5, 6, 7],
    )
    data.cell_data["tag"] = np.arange(10, 18)
    mesh = read(write_vtk_xml(data, tmp_path / "kinds.vtp"))
    assert faces_of(mesh) == [
        [0, 3, 2, 1],
        [4, 5, 6],
        [0, 1, 5, 6, 4],
        [0, 1, 2],
        [2, 1, 3],
        [2, 3, 4],
        [5, 6, 7],
    ]
    assert mesh.skipped == {"vertex": 2, "line": 1}
    assert mesh.face_arrays["tag"].tolist() == [13, 14, 15, 16, 16, 16, 17]


def test_polydata_polygons_of_fewer_than_three_points_are_skipped(tmp_path: Path, read: Read) -> None:
    import pyvista as pv

    data = pv.PolyData(BOX_POINTS, faces=[3, 0, 1, 2, 2, 4, 5, 3, 4, 5, 6])
    data.cell_data["tag"] = [7, 8, 9]
    mesh = read(write_vtk_xml(data, tmp_path / "small.vtp"))
    assert faces_of(mesh) == [[0, 1, 2], [4, 5, 6]]
    assert mesh.offsets is None
    assert mesh.face_arrays["tag"].tolist() == [7, 9]
    assert mesh.skipped == {"polygon of fewer than 3 points": 1}


GRID_CELLS = [
    (5, [0, 1, 2]),
    (10, [0, 1, 2, 4]),  # tetra
    (9, [0, 3, 2, 1]),
    (8, [4, 5, 7, 6]),  # pixel: row by row
    (6, [0, 1, 2, 3]),  # strip
    (7, [0, 1, 5, 6, 4]),
    (3, [0, 1]),  # line
    (22, [0, 1, 2, 3, 4, 5]),
    (23, [0, 1, 2, 3, 4, 5, 6, 7]),
    (28, [0, 1, 2, 3, 4, 5, 6, 7, 8]),
    (69, [2, 1, 0, 5, 4, 3]),  # Lagrange triangle of order 2
    (70, [4, 5, 6, 7]),  # Lagrange quadrilateral of order 1
    (10, [4, 5, 6, 0]),
]


@pytest.mark.parametrize("suffix", [".vtu", ".vtk"])
def test_grid_of_all_cell_types_gives_its_faces_with_their_values(tmp_path: Path, read: Read, suffix: str) -> None:
    import pyvista as pv

    cells = [entry for _, points in GRID_CELLS for entry in (len(points), *points)]
    grid = pv.UnstructuredGrid(cells, [kind for kind, _ in GRID_CELLS], np.vstack([BOX_POINTS, [[1, 1, 1]]]))
    grid.cell_data["tag"] = np.arange(len(GRID_CELLS))
    path = tmp_path / f"grid{suffix}"
    grid.save(path)
    mesh = read(path)
    assert faces_of(mesh) == [
        [0, 1, 2],
        [0, 3, 2, 1],
        [4, 5, 6, 7],
        [0, 1, 5, 6, 4],
        [0, 1, 2, 3, 4, 5],
        [0, 1, 2, 3, 4, 5, 6, 7],
        [0, 1, 2, 3, 4, 5, 6, 7, 8],
        [2, 1, 0, 5, 4, 3],
        [4, 5, 6, 7],
        [0, 1, 2],
        [2, 1, 3],
    ]
    assert mesh.kinds is not None
    straight = FaceKind.POLYGON
    assert mesh.kinds.tolist() == [
        *[straight] * 4,
        FaceKind.TRIANGLE6,
        FaceKind.QUAD8,
        FaceKind.QUAD9,
        FaceKind.TRIANGLE6,
        *[straight] * 3,
    ]
    assert mesh.face_arrays["tag"].tolist() == [0, 2, 3, 5, 7, 8, 9, 10, 11, 4, 4]
    assert mesh.skipped == {"line": 1, "tetra": 2}


@pytest.mark.parametrize("mode", VTP_MODES)
def test_grid_of_triangles_has_no_offsets(tmp_path: Path, read: Read, mode: str) -> None:
    grid = box_polydata().cast_to_unstructured_grid()
    mesh = read(write_vtk_xml(grid, tmp_path / "box.vtu", mode))
    assert_box(mesh)
    assert_arrays(mesh.node_arrays, {"p": PRESSURE, "U": VELOCITY})


def test_triangles_among_volume_cells_have_no_offsets_either(tmp_path: Path, read: Read) -> None:
    import pyvista as pv

    grid = pv.UnstructuredGrid([4, 0, 1, 2, 4, 3, 0, 1, 2, 3, 0, 2, 4], [10, 5, 5], BOX_POINTS)
    mesh = read(write_vtk_xml(grid, tmp_path / "mixed.vtu"))
    assert mesh.offsets is None
    assert faces_of(mesh) == [[0, 1, 2], [0, 2, 4]]


def test_ghost_cells_of_a_partitioned_export_are_left_out(tmp_path: Path, read: Read) -> None:
    data = box_polydata()
    ghosts = np.zeros(12, dtype=np.uint8)
    ghosts[[1, 4]] = 1, 32
    data.cell_data["vtkGhostType"] = ghosts
    mesh = read(write_vtk_xml(data, tmp_path / "part.vtp"))
    kept = np.delete(np.arange(12), [1, 4])
    assert faces_of(mesh) == BOX_TRIANGLES[kept].tolist()
    np.testing.assert_array_equal(mesh.face_arrays["region"], REGION[kept])
    assert mesh.skipped == {"ghost": 2}
    assert "vtkGhostType" not in mesh.face_arrays


@pytest.mark.parametrize("binary", [True, False])
def test_legacy_polydata_gives_every_array(tmp_path: Path, read: Read, binary: bool) -> None:
    path = tmp_path / "box.vtk"
    data = box_polydata()
    # the writer gives ASCII numbers eleven digits: a value that has fewer comes back exactly
    velocity = np.arange(24, dtype=np.float64).reshape(8, 3) / 8.0
    data.point_data["U"] = velocity
    data.save(path, binary=binary)
    mesh = read(path)
    assert_box(mesh)
    assert_arrays(mesh.node_arrays, {"p": PRESSURE, "U": velocity})
    np.testing.assert_array_equal(mesh.face_arrays["region"], REGION)


def test_legacy_file_of_an_old_version_gives_every_scalar(tmp_path: Path, read: Read) -> None:
    path = tmp_path / "old.vtk"
    path.write_text(
        "# vtk DataFile Version 2.0\nby hand, ASCII\nASCII\nDATASET POLYDATA\nPOINTS 4 float\n"
        "0 0 0 1 0 0\n1 1 0 0 1 0\nPOLYGONS 2 8\n3 0 1 2\n3 0 2 3\nPOINT_DATA 4\n"
        "SCALARS p double 1\nLOOKUP_TABLE default\n1 2 nan\n4\nSCALARS T double\nLOOKUP_TABLE default\n5 6 7 8\n"
        "VECTORS U float\n0 0 1 0 0 2 0 0 3 0 0 4\n"
    )
    mesh = read(path)
    assert faces_of(mesh) == [[0, 1, 2], [0, 2, 3]]
    np.testing.assert_array_equal(mesh.node_arrays["p"], [1, 2, np.nan, 4])
    np.testing.assert_array_equal(mesh.node_arrays["T"], [5, 6, 7, 8])
    np.testing.assert_array_equal(mesh.node_arrays["U"][:, 2], [1, 2, 3, 4])


def test_binary_stl_is_a_soup_of_its_triangles(tmp_path: Path, read: Read) -> None:
    import trimesh

    path = tmp_path / "box.stl"
    trimesh.Trimesh(BOX_POINTS, BOX_TRIANGLES, process=False).export(path)
    mesh = read(path)
    np.testing.assert_array_equal(mesh.points[mesh.connectivity], BOX_POINTS[BOX_TRIANGLES.ravel()])
    assert mesh.points.dtype == np.float32
    assert mesh.offsets is None
    assert mesh.face_arrays == {}


def test_free_bytes_of_a_binary_stl_are_an_array(tmp_path: Path, read: Read) -> None:
    record = np.zeros(12, dtype=[("normal", "<f4", 3), ("corners", "<f4", (3, 3)), ("free", "<u2")])
    record["corners"] = BOX_POINTS[BOX_TRIANGLES]
    record["free"] = REGION
    path = tmp_path / "solid.stl"
    # a header that starts like an ASCII file must not mislead
    path.write_bytes(b"solid box".ljust(80) + np.uint32(12).tobytes() + record.tobytes())
    mesh = read(path)
    np.testing.assert_array_equal(mesh.face_arrays["attribute"], REGION)


def test_solids_of_an_ascii_stl_are_sets_of_their_names(tmp_path: Path, read: Read) -> None:
    corners = BOX_POINTS[BOX_TRIANGLES] / 3.0
    solids = {"feed": corners[:2], "solid facet vertex wall": corners[2:11], "": corners[11:]}
    path = tmp_path / "box.stl"
    path.write_text(ascii_stl(solids))
    mesh = read(path)
    np.testing.assert_array_equal(mesh.points.reshape(-1, 3, 3), corners)
    assert {name: faces.tolist() for name, faces in mesh.face_sets.items()} == {
        "feed": [0, 1],
        "solid facet vertex wall": list(range(2, 11)),
        "solid 3": [11],
    }


POLYGONS = [[0, 3, 2, 1], [4, 5, 6], [4, 6, 7], [0, 1, 5, 6, 4]]
PLY_MODES = ["ascii", "binary_little_endian", "binary_big_endian"]


@pytest.mark.parametrize("mode", PLY_MODES)
@pytest.mark.parametrize("polygons", [POLYGONS, BOX_QUADS.tolist(), BOX_TRIANGLES.tolist()])
def test_ply_keeps_polygons_and_every_property(
    tmp_path: Path, read: Read, mode: str, polygons: list[list[int]]
) -> None:
    part = np.arange(len(polygons), dtype=np.int16) - 2
    mesh = read(write_ply(tmp_path / "box.ply", BOX_POINTS, polygons, mode, PRESSURE, part))
    np.testing.assert_array_equal(mesh.points, BOX_POINTS)
    assert faces_of(mesh) == polygons
    assert (mesh.offsets is None) == (polygons == BOX_TRIANGLES.tolist())
    assert_arrays(mesh.node_arrays, {"pressure": PRESSURE.astype(np.float32)})
    assert_arrays(mesh.face_arrays, {"part": part})


def test_ply_of_another_writer_with_list_properties(tmp_path: Path, read: Read) -> None:
    import trimesh

    path = tmp_path / "box.ply"
    box = trimesh.Trimesh(BOX_POINTS, BOX_TRIANGLES, process=False)
    box.vertex_attributes["U"] = VELOCITY
    box.face_attributes["region"] = REGION
    box.export(path)
    mesh = read(path)
    np.testing.assert_array_equal(mesh.connectivity, BOX_TRIANGLES.ravel())
    assert_arrays(mesh.node_arrays, {"U": VELOCITY})
    assert_arrays(mesh.face_arrays, {"region": REGION})


@settings(deadline=None)
@given(
    st.lists(st.lists(st.integers(0, 7), min_size=3, max_size=7), min_size=1, max_size=12), st.sampled_from(PLY_MODES)
)
def test_any_polygons_come_back_from_ply(polygons: list[list[int]], mode: str) -> None:
    import tempfile

    part = np.arange(len(polygons), dtype=np.int16)
    with tempfile.TemporaryDirectory() as folder:
        mesh = read_mesh(write_ply(Path(folder) / "any.ply", BOX_POINTS, polygons, mode, PRESSURE, part))
    assert faces_of(mesh) == polygons
    np.testing.assert_array_equal(mesh.face_arrays["part"], part)


def test_obj_of_another_writer(tmp_path: Path, read: Read) -> None:
    import trimesh

    path = tmp_path / "box.obj"
    trimesh.Trimesh(BOX_POINTS, BOX_TRIANGLES, process=False).export(path)
    assert_box(read(path))


def test_obj_keeps_polygons_points_and_names(tmp_path: Path, read: Read) -> None:
    vertices = "".join("v {!r} {!r} {!r} 1.0\n".format(*map(float, xyz)) for xyz in BOX_POINTS)
    path = tmp_path / "box.obj"
    path.write_text(
        f"# by hand\nmtllib none.mtl\no box\n{vertices}vt 0 0\nvn 0 0 1\n"
        "g feed ports\nusemtl steel\nf 1/1/1 4/1/1 3/1/1 2/1/1\ng drain ports\nf 5//1 6//1 \\\n 7//1\n"
        "g\nusemtl feed\nf\t-8 -7 -3\nl 1 2\ng feed\nusemtl steel\nf 3 4 8 7\n"
    )
    mesh = read(path)
    np.testing.assert_array_equal(mesh.points, BOX_POINTS)
    assert faces_of(mesh) == [[0, 3, 2, 1], [4, 5, 6], [0, 1, 5], [2, 3, 7, 6]]
    assert {name: faces.tolist() for name, faces in mesh.face_sets.items()} == {
        "feed": [0, 3],
        "ports": [0, 1],
        "drain": [1],
        "box": [0, 1, 2, 3],
        "steel": [0, 1, 3],
        "material feed": [2],
    }
    assert mesh.skipped == {"line": 1}


@pytest.mark.parametrize("options", [{"file_format": "gmsh22"}, {"file_format": "gmsh22", "binary": False}])
def test_physical_names_of_a_msh_file_are_face_sets(tmp_path: Path, read: Read, options: dict[str, object]) -> None:
    tags = np.array([1, 1, 2, 2, 3, 3])
    path = write_meshio(
        tmp_path / "box.msh",
        [("tetra", np.array([[0, 1, 2, 4]])), ("quad", BOX_QUADS[:2]), ("triangle", BOX_TRIANGLES[4:8])],
        cell_data={"gmsh:physical": [np.array([1]), tags[:2], tags[2:]], "gmsh:geometrical": [[1], tags[:2], tags[2:]]},
        field_data={"feed": [1, 2], "shell": [2, 2], "fluid": [1, 3], "nobody": [9, 2]},
        **options,
    )
    mesh = read(path)
    assert faces_of(mesh) == [*BOX_QUADS[:2].tolist(), *BOX_TRIANGLES[4:8].tolist()]
    np.testing.assert_array_equal(mesh.points, BOX_POINTS)
    assert {name: faces.tolist() for name, faces in mesh.face_sets.items()} == {"feed": [0, 1], "shell": [2, 3]}
    assert mesh.face_arrays["gmsh:physical"].tolist() == tags.tolist()
    assert mesh.skipped == {"tetra": 1}


def test_version_4_msh_file_with_named_entities_and_node_data(tmp_path: Path, read: Read) -> None:
    path = tmp_path / "plate.msh"
    path.write_text(
        '$MeshFormat\n4.1 0 8\n$EndMeshFormat\n$PhysicalNames\n2\n2 1 "feed"\n2 2 "shell"\n$EndPhysicalNames\n'
        "$Entities\n0 1 2 0\n1 0 0 0 1 0 0 0 0\n1 0 0 0 1 1 0 1 1 1 1\n2 0 0 0 1 1 1 1 2 1 1\n$EndEntities\n"
        "$Nodes\n1 4 1 4\n2 1 0 4\n1\n2\n3\n4\n0 0 0\n1 0 0\n1 1 0\n0 1 0\n$EndNodes\n"
        "$Elements\n2 2 1 2\n2 1 2 1\n1 1 2 3\n2 2 2 1\n2 1 3 4\n$EndElements\n"
        '$NodeData\n1\n"p"\n1\n0.0\n3\n0\n1\n4\n1 0.5\n2 1.5\n3 2.5\n4 3.5\n$EndNodeData\n'
    )
    mesh = read(path)
    assert faces_of(mesh) == [[0, 1, 2], [0, 2, 3]]
    assert {name: faces.tolist() for name, faces in mesh.face_sets.items()} == {"feed": [0], "shell": [1]}
    np.testing.assert_array_equal(mesh.node_arrays["p"], [0.5, 1.5, 2.5, 3.5])


def test_element_sets_of_an_inp_file_are_face_sets(tmp_path: Path, read: Read) -> None:
    path = tmp_path / "plate.inp"
    path.write_text(
        "*NODE\n1, 0, 0, 0\n2, 1, 0, 0\n3, 1, 1, 0\n4, 0, 1, 0\n5, 2, 0, 0\n6, 2, 1, 0\n"
        "*ELEMENT, TYPE=S3\n1, 1, 2, 3\n2, 1, 3, 4\n*ELEMENT, TYPE=S4\n3, 2, 5, 6, 3\n"
        "*ELSET, ELSET=feed\n2, 3\n*ELSET, ELSET=shell\n1\n"
    )
    mesh = read(path)
    assert faces_of(mesh) == [[0, 1, 2], [0, 2, 3], [1, 4, 5, 2]]
    assert {name.lower(): faces.tolist() for name, faces in mesh.face_sets.items()} == {"feed": [1, 2], "shell": [0]}


def test_quadratic_blocks_keep_their_kind(tmp_path: Path, read: Read) -> None:
    points = np.vstack([BOX_POINTS, [[1, 1, 1]]])
    blocks = [
        ("triangle6", np.array([[0, 1, 2, 3, 4, 5]])),
        ("quad8", np.arange(8)[None]),
        ("quad9", np.arange(9)[None]),
    ]
    mesh = read(write_meshio(tmp_path / "curved.msh", blocks, points=points, file_format="gmsh22"))
    assert mesh.kinds is not None
    assert mesh.kinds.tolist() == [FaceKind.TRIANGLE6, FaceKind.QUAD8, FaceKind.QUAD9]
    assert faces_of(mesh) == [list(range(6)), list(range(8)), list(range(9))]


@pytest.mark.parametrize("suffix", [".off", ".mesh", ".avs", ".vol", ".post", ".mdpa", ".inp", ".xml"])
def test_other_formats_give_points_and_faces(tmp_path: Path, read: Read, suffix: str) -> None:
    mesh = read(write_meshio(tmp_path / f"box{suffix}", [("triangle", BOX_TRIANGLES)]))
    np.testing.assert_array_equal(mesh.points, BOX_POINTS)
    np.testing.assert_array_equal(mesh.connectivity, BOX_TRIANGLES.ravel())
    assert mesh.offsets is None


def test_plane_mesh_lies_at_z_zero(tmp_path: Path, read: Read) -> None:
    path = tmp_path / "plane.mesh"
    path.write_text(
        "MeshVersionFormatted 2\nDimension 2\nVertices\n3\n0 0 1\n2 0 1\n0 1 1\nTriangles\n1\n1 2 3 7\nEnd\n"
    )
    mesh = read(path)
    np.testing.assert_array_equal(mesh.points, [[0, 0, 0], [2, 0, 0], [0, 1, 0]])
    assert mesh.face_arrays["medit:ref"].tolist() == [7]


def test_families_of_a_salome_style_mesh_are_face_sets() -> None:
    import meshio

    from fluxmesh.surface.readers.meshio_formats import _named_by_tag

    mesh = meshio.Mesh(BOX_POINTS, [("quad", BOX_QUADS)], cell_data={"cell_tags": [np.array([-1, -2, -1, -3, -3, -3])]})
    mesh.cell_tags = {-1: ["feed", "ports"], -2: ["ports"], -3: ["shell"], -4: ["nobody"]}
    sets = _named_by_tag(mesh, {"cell_tags": mesh.cell_data["cell_tags"][0]})
    assert {name: sorted(faces.tolist()) for name, faces in sets.items()} == {
        "feed": [0, 2],
        "ports": [0, 1, 2],
        "shell": [3, 4, 5],
    }


def test_suffix_counts_in_any_case_and_all_are_listed(tmp_path: Path, read: Read) -> None:
    path = write_vtk_xml(box_polydata(), tmp_path / "box.vtp").rename(tmp_path / "BOX.VTP")
    assert_box(read(path))
    assert {".vtp", ".vtu", ".vtk", ".stl", ".ply", ".obj", ".msh", ".med", ".off"} <= set(known_suffixes())
    assert list(known_suffixes()) == sorted(set(known_suffixes()))


@given(st.lists(st.integers(3, 9), min_size=1, max_size=6))
def test_strips_give_triangles_of_one_orientation(sizes: list[int]) -> None:
    # a strip laid out as a zigzag in the plane: every triangle must have the same positive area
    offsets = np.concatenate([[0], np.cumsum(sizes)])
    step = np.concatenate([np.arange(size) for size in sizes])
    place = np.column_stack([step, -(step % 2.0)])
    triangles, strip = strip_triangles(np.arange(offsets[-1]), offsets)
    a, b, c = (place[triangles[:, k]] for k in range(3))
    twice = (b - a)[:, 0] * (c - a)[:, 1] - (b - a)[:, 1] * (c - a)[:, 0]
    np.testing.assert_array_equal(twice, 2.0)
    np.testing.assert_array_equal(np.bincount(strip), np.array(sizes) - 2)
