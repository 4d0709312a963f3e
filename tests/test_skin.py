"""The skin of a volume mesh: which faces, which way they point, and which values they carry."""

from __future__ import annotations

from collections import Counter
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from fluxmesh.errors import FileError, InputError
from fluxmesh.surface.files import read_mesh, read_meshes, skin_hint
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.cell_shapes import SHAPES
from fluxmesh.surface.readers.same_faces import coincident_points, face_labels, lone_rows
from fluxmesh.surface.readers.skin import corner_rows, take_skin
from fluxmesh.surface.readers.volume import CellBlock, Volume
from fluxmesh.surface.readers.vtk_volume import volume_of_grid
from fluxmesh.surface.surface import FaceKind
from tests.mesh_writing import BOX_POINTS, cut, lattice, raised, write_meshio, write_vtk_xml

VTK_NUMBER = {
    **{"tetra": 10, "hexahedron": 12, "wedge": 13, "pyramid": 14, "penta_prism": 15, "hexa_prism": 16},
    **{"tetra10": 24, "hexahedron20": 25, "wedge15": 26, "pyramid13": 27, "hexahedron27": 29, "wedge18": 32},
}
LINEAR = {"tetra10": "tetra", "hexahedron20": "hexahedron", "hexahedron27": "hexahedron", "wedge15": "wedge"}
LINEAR |= {"wedge18": "wedge", "pyramid13": "pyramid", "pyramid14": "pyramid"}


def vtk_cell(shape: str):
    from vtkmodules.vtkCommonDataModel import vtkGenericCell

    cell = vtkGenericCell()
    cell.SetCellType(VTK_NUMBER[shape])
    for index in range(cell.GetNumberOfPoints()):
        cell.GetPointIds().SetId(index, index)
    return cell.GetRepresentativeCell()


def vtk_face(cell, number: int) -> tuple[int, ...]:
    face = cell.GetFace(number)
    return tuple(face.GetPointId(index) for index in range(face.GetNumberOfPoints()))


def cells_of(shape: str, size: tuple[int, int, int] = (2, 1, 2), bulge: float = 0.0) -> tuple[np.ndarray, np.ndarray]:
    """Return a box of unit cells filled with cells of one shape."""
    points, rows = cut(*lattice(size), LINEAR.get(shape, shape))
    if shape in LINEAR:
        cell = vtk_cell("pyramid13" if shape == "pyramid14" else shape)
        mid = {}
        for number in range(cell.GetNumberOfEdges()):
            ids = cell.GetEdge(number).GetPointIds()
            mid[ids.GetId(2)] = (ids.GetId(0), ids.GetId(1))
        edges = np.array([mid[index] for index in sorted(mid)])
        centres: tuple[tuple[int, ...], ...] = ()
        if shape in ("hexahedron27", "wedge18"):
            faces = [vtk_face(cell, number) for number in range(cell.GetNumberOfFaces())]
            nine = sorted((face for face in faces if len(face) == 9), key=lambda face: face[8])
            centres = tuple(face[:4] for face in nine)
        if shape == "hexahedron27":
            centres = (*centres, tuple(range(8)))
        if shape == "pyramid14":
            centres = ((0, 1, 2, 3),)
        points, rows = raised(points, rows, edges, centres, bulge)
    assert rows.shape[1] == SHAPES[shape].size
    return points, rows


def skin_of(shape: str, points: np.ndarray, rows: np.ndarray) -> RawMesh:
    faces = take_skin(Volume((CellBlock(shape, rows, np.arange(len(rows))),)), points, "box")
    return RawMesh(
        "box", points, faces.connectivity, faces.offsets, faces.kinds, face_arrays={"cell": faces.cell_of_face}
    )


def corner_faces(mesh: RawMesh) -> list[list[int]]:
    entries, starts = corner_rows(mesh.connectivity, mesh.offsets, mesh.kinds)
    return [entries[a:b].tolist() for a, b in pairwise(starts)]


def assert_closed(mesh: RawMesh) -> None:
    """Every edge is passed once each way."""
    edges = Counter((a, b) for face in corner_faces(mesh) for a, b in zip(face, face[1:] + face[:1]))
    assert set(edges.values()) == {1}
    assert all((b, a) in edges for a, b in edges)


def straight_volume(mesh: RawMesh) -> float:
    """Volume inside straight faces by the divergence theorem; negative when they point inward."""
    total = 0.0
    for face in corner_faces(mesh):
        corners = np.asarray(mesh.points, float)[face]
        twice = np.cross(corners, np.roll(corners, -1, axis=0)).sum(axis=0)
        total += twice @ corners.mean(axis=0) / 6
    return total


@pytest.mark.parametrize("shape", sorted(VTK_NUMBER))
def test_faces_of_each_shape_are_those_of_vtk(shape: str) -> None:
    cell = vtk_cell(shape)
    assert cell.GetNumberOfPoints() == SHAPES[shape].size
    theirs = [vtk_face(cell, number) for number in range(cell.GetNumberOfFaces())]

    def turned(face: tuple[int, ...]) -> tuple[int, ...]:
        """Return the corners of a face, its lowest first."""
        corners = face if not SHAPES[shape].curved else face[: 3 if len(face) == 6 else 4]
        least = corners.index(min(corners))
        return corners[least:] + corners[:least]

    assert sorted(map(turned, SHAPES[shape].faces)) == sorted(map(turned, theirs))
    if SHAPES[shape].curved:
        assert sorted(SHAPES[shape].faces) == sorted(theirs)


@pytest.mark.parametrize("shape", [shape for shape in SHAPES if "prism" not in shape])
def test_skin_of_a_box_of_any_cells_is_the_box(shape: str) -> None:
    points, rows = cells_of(shape)
    mesh = skin_of(shape, points, rows)
    assert_closed(mesh)
    # lattice points are whole numbers: sums are exact to a few units of the last place
    assert_allclose(straight_volume(mesh), 4.0, rtol=1e-13)
    quads, triangles = 16, 0
    if "tetra" in shape:
        quads, triangles = 0, 32
    elif "wedge" in shape:
        quads, triangles = 12, 8
    sizes = Counter(len(face) for face in corner_faces(mesh))
    assert (sizes[4], sizes[3]) == (quads, triangles)
    # each face lies on the hull and its cell has all its points
    for face, cell in zip(corner_faces(mesh), mesh.face_arrays["cell"]):
        assert set(face) <= set(rows[cell].tolist())
    assert (np.diff(mesh.face_arrays["cell"]) >= 0).all()


@pytest.mark.parametrize("shape", sorted(LINEAR))
def test_quadratic_skin_keeps_its_mid_side_points(shape: str) -> None:
    points, rows = cells_of(shape, bulge=0.03)
    mesh = skin_of(shape, points, rows)
    assert_closed(mesh)
    assert mesh.offsets is not None
    assert mesh.kinds is not None
    kinds = {"hexahedron27": FaceKind.QUAD9, "wedge18": FaceKind.QUAD9, "pyramid14": FaceKind.QUAD9}
    for kind, start, stop in zip(mesh.kinds, mesh.offsets[:-1], mesh.offsets[1:]):
        face = mesh.connectivity[start:stop]
        count = 3 if kind == FaceKind.TRIANGLE6 else 4
        assert kind == (FaceKind.TRIANGLE6 if count == 3 else kinds.get(shape, FaceKind.QUAD8))
        ends = points[face[:count]], points[np.roll(face[:count], -1)]
        middle = 0.5 * (ends[0] + ends[1])
        # `raised` moved each middle by a known bulge
        assert_allclose(points[face[count : 2 * count]], middle + 0.03 * np.sin(3 * middle[:, [1, 2, 0]]), rtol=1e-14)
        if kind == FaceKind.QUAD9:
            centre = points[face[:4]].mean(axis=0)
            assert_allclose(points[face[8]], centre + 0.03 * np.sin(3 * centre[[1, 2, 0]]), rtol=1e-14)


@pytest.mark.parametrize("shape", ["tetra", "hexahedron", "wedge", "pyramid"])
def test_skin_has_the_faces_that_vtk_finds(shape: str) -> None:
    import pyvista as pv

    points, rows = cut(*lattice((3, 2, 2), bend=0.08), shape)
    grid = pv.UnstructuredGrid({VTK_NUMBER[shape]: rows}, points)
    theirs = grid.extract_surface(algorithm="geometry", pass_pointid=True, pass_cellid=True)
    original = np.asarray(theirs.point_data["vtkOriginalPointIds"])
    wanted = Counter(
        (int(cell), frozenset(original[face].tolist()))
        for cell, face in zip(theirs.cell_data["vtkOriginalCellIds"], theirs.irregular_faces)
    )
    mesh = skin_of(shape, points, rows)
    found = Counter((int(c), frozenset(face)) for c, face in zip(mesh.face_arrays["cell"], corner_faces(mesh)))
    assert found == wanted
    assert_closed(mesh)


@given(st.data())
def test_direction_does_not_depend_on_the_order_of_a_cells_points(data: st.DataObject) -> None:
    shape = data.draw(st.sampled_from(["tetra", "hexahedron", "wedge", "pyramid", "tetra10", "hexahedron20"]))
    points, rows = cells_of(shape)
    # the mirror image of each order: the same cell, turned inside out
    mirror = {
        "tetra": [1, 0, 2, 3],
        "hexahedron": [4, 5, 6, 7, 0, 1, 2, 3],
        "wedge": [3, 4, 5, 0, 1, 2],
        "pyramid": [1, 0, 3, 2, 4],
        "tetra10": [1, 0, 2, 3, 4, 6, 5, 8, 7, 9],
        "hexahedron20": [4, 5, 6, 7, 0, 1, 2, 3, 12, 13, 14, 15, 8, 9, 10, 11, 16, 17, 18, 19],
    }[shape]
    inverted = np.array(data.draw(st.lists(st.booleans(), min_size=len(rows), max_size=len(rows))))
    rows = np.where(inverted[:, None], rows[:, mirror], rows)
    far = points + data.draw(st.sampled_from([0.0, 1e4]))
    mesh = skin_of(shape, far, rows)
    assert_closed(mesh)
    assert straight_volume(RawMesh("box", points, mesh.connectivity, mesh.offsets, mesh.kinds)) == pytest.approx(4.0)


def test_collapsed_hexahedra_join_the_simpler_cells_they_are() -> None:
    # two unit cubes: one a hexahedron, one two wedges that are written as hexahedra with a doubled edge
    points, rows = lattice((2, 1, 1))
    a, b, c, d, e, f, g, h = rows[1]
    wedges = np.array([[a, b, c, c, e, f, g, g], [a, c, d, d, e, g, h, h]])
    mesh = skin_of("hexahedron", points, np.concatenate([rows[:1], wedges]))
    assert_closed(mesh)
    assert straight_volume(mesh) == pytest.approx(2.0)
    assert Counter(map(len, corner_faces(mesh))) == {4: 8, 3: 4}


def test_hexahedra_collapsed_to_pyramids_leave_no_face_without_area() -> None:
    points, rows = cells_of("pyramid", (1, 1, 1))
    collapsed = rows[:, [0, 1, 2, 3, 4, 4, 4, 4]]
    mesh = skin_of("hexahedron", points, collapsed)
    assert_closed(mesh)
    assert straight_volume(mesh) == pytest.approx(1.0)
    assert Counter(map(len, corner_faces(mesh))) == {4: 6}


def test_cavity_points_into_itself() -> None:
    points, rows = lattice((3, 3, 3))
    mesh = skin_of("hexahedron", points, np.delete(rows, 13, axis=0))
    assert mesh.face_count == 54 + 6
    assert_closed(mesh)
    assert straight_volume(mesh) == pytest.approx(26.0)


def test_thin_wall_of_doubled_points_keeps_both_sides() -> None:
    points, rows = lattice((2, 1, 1))
    # the second cube gets points of its own: the two touch, and no cell face is shared
    doubled = np.concatenate([points, points])
    rows = np.array([rows[0], rows[1] + len(points)])
    mesh = skin_of("hexahedron", doubled, rows)
    assert mesh.face_count == 12


def polyhedra(points: np.ndarray, hexahedra: np.ndarray):
    """Return a grid of polyhedra, every second face turned."""
    import pyvista as pv

    cells = []
    for row in hexahedra:
        faces = [row[list(face)] for face in SHAPES["hexahedron"].faces]
        stream = [len(faces)]
        for number, face in enumerate(faces):
            stream += [len(face), *(face[::-1] if number % 2 else face)]
        cells += [len(stream), *map(int, stream)]
    return pv.UnstructuredGrid(cells, [42] * len(hexahedra), points)


def test_polyhedra_give_the_skin_of_the_hexahedra_they_are(tmp_path: Path) -> None:
    points, rows = lattice((2, 2, 1))
    grid = polyhedra(points, rows)
    grid.cell_data["T"] = np.arange(4) + 0.25
    path = tmp_path / "poly.vtu"
    grid.save(path)
    mesh = read_mesh(path)
    assert mesh.derived == "the skin of 4 polyhedra"
    assert_closed(mesh)
    assert straight_volume(mesh) == pytest.approx(4.0)
    plain = skin_of("hexahedron", points, rows)
    assert_array_equal(np.sort(mesh.face_arrays["T"]), np.sort(plain.face_arrays["cell"] + 0.25))


def test_polyhedra_whose_faces_are_not_there() -> None:
    points, rows = lattice((2, 1, 1))
    grid = polyhedra(points, rows)
    assert len(volume_of_grid(grid, None, "box").polyhedra.cells) == 12
    grid.GetPolyhedronFaceLocations().GetConnectivityArray().SetValue(3, 77)
    with pytest.raises(FileError, match="box: has 2 polyhedra, but not the faces they name"):
        volume_of_grid(grid, None, "box")


def test_reader_that_ends_its_process_is_one_message(
    tmp_path: Path, capfd: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    from fluxmesh.surface.readers import vtk_guard

    points, rows = lattice((2, 2, 1))
    path = write_vtk_xml(polyhedra(points, rows), tmp_path / "poly.vtu", "raw")
    whole = path.read_bytes()
    # among the last arrays, which say where the faces of each cell start: a count beyond the memory
    place = whole.rindex(b"</AppendedData>") - 64
    path.write_bytes(whole[:place] + (2**61).to_bytes(8, "little") + whole[place + 8 :])
    with pytest.raises(
        FileError, match=r"poly.vtu: cannot be read \(its lists of polyhedron faces are damaged\). It is"
    ):
        read_mesh(path)
    path.write_bytes(whole)
    monkeypatch.setattr(vtk_guard, "_SECONDS", 0.0)
    with pytest.raises(FileError, match=r"poly.vtu: cannot be read \(its reader did not end within 0 s\). It is"):
        read_mesh(path)
    assert capfd.readouterr() == ("", "")


def refused(path: Path) -> bool:
    """Read a damaged file; the only error there may be names it."""
    try:
        read_mesh(path)
    except InputError as error:
        return str(path) in str(error) or pytest.fail(str(error))
    return False


@pytest.mark.parametrize("kind", ["hexahedra", "polyhedra"])
@pytest.mark.parametrize("suffix", [".vtu", ".vtk"])
def test_random_damage_ends_in_one_message(
    tmp_path: Path, capfd: pytest.CaptureFixture[str], suffix: str, kind: str
) -> None:
    import pyvista as pv

    rng = np.random.default_rng(2)
    points, rows = lattice((2, 2, 1))
    grid = pv.UnstructuredGrid({12: rows}, points) if kind == "hexahedra" else polyhedra(points, rows)
    grid.point_data["p"] = points[:, 0]
    path = tmp_path / f"box{suffix}"
    grid.save(path)
    whole = path.read_bytes()
    read_mesh(path)
    capfd.readouterr()
    failed = 0
    # polyhedra are tried in a process of their own, which takes its time
    for _ in range(30 if kind == "hexahedra" else 3):
        damaged = bytearray(whole)
        start = int(rng.integers(len(whole)))
        for _ in range(rng.integers(1, 20)):
            damaged[min(len(whole) - 1, start + int(rng.integers(100)))] = rng.integers(256)
        path.write_bytes(damaged)
        failed += refused(path)
    assert failed > 0
    assert capfd.readouterr() == ("", "")


def volume_file(tmp_path: Path, suffix: str) -> tuple[Path, np.ndarray, np.ndarray]:
    """Write a bent box of tetrahedra with values on points and cells, and one point that nothing uses."""
    points, rows = cut(*lattice((2, 2, 1), bend=0.1), "tetra")
    points = np.concatenate([[[9.0, 9.0, 9.0]], points])
    rows = rows + 1
    path = tmp_path / f"box{suffix}"
    write_meshio(
        path,
        [("tetra", rows)],
        points=points,
        point_data={"p": points[:, 0] / 3.0, "U": points / 7.0},
        cell_data={"rho": [np.arange(len(rows)) / 7.0]},
        **({"file_format": "gmsh22"} if suffix == ".msh" else {}),
    )
    return path, points, rows


@pytest.mark.parametrize("suffix", [".vtu", ".vtk", ".msh", ".xdmf"])
def test_volume_file_gives_its_skin_with_the_values_of_points_and_cells(tmp_path: Path, suffix: str) -> None:
    if suffix == ".xdmf":
        path, points, rows = volume_file(tmp_path, ".vtu")
        path = tmp_path / "box.xdmf"
        write_meshio(
            path,
            [("tetra", rows)],
            points=points,
            point_data={"p": points[:, 0] / 3.0, "U": points / 7.0},
            cell_data={"rho": [np.arange(len(rows)) / 7.0]},
            data_format="XML",
        )
        close = {"rtol": 1e-15, "atol": 1e-15}  # sixteen digits of text
    else:
        path, points, rows = volume_file(tmp_path, suffix)
        close = {"rtol": 0.0}
    mesh = read_mesh(path)
    assert mesh.derived == "the skin of 24 tetrahedra"
    assert len(mesh.notes) == 1
    assert f"'rho' on the skin of {path.name} are those of the cell behind each face" in mesh.notes[0]
    assert mesh.skipped == {}
    assert mesh.volume_cells == 0
    assert_closed(mesh)
    assert straight_volume(mesh) > 3.0
    # every point of the box lies on its skin; the one that nothing uses is gone
    assert_allclose(mesh.points, points[1:], **close)
    assert_allclose(mesh.node_arrays["p"], points[1:, 0] / 3.0, **close)
    assert_allclose(mesh.node_arrays["U"], points[1:] / 7.0, **close)
    cells = np.round(mesh.face_arrays["rho"] * 7.0).astype(int)
    assert_allclose(mesh.face_arrays["rho"], cells / 7.0, **close)
    for face, cell in zip(corner_faces(mesh), cells):
        assert set(np.array(face) + 1) <= set(rows[cell].tolist())


def test_voxels_are_hexahedra(tmp_path: Path) -> None:
    import pyvista as pv

    path = tmp_path / "box.vtu"
    pv.ImageData(dimensions=(3, 2, 2)).cast_to_unstructured_grid().save(path)
    mesh = read_mesh(path)
    assert mesh.derived == "the skin of 2 hexahedra"
    assert_closed(mesh)
    assert straight_volume(mesh) == pytest.approx(2.0)


def test_ghost_cells_have_no_part_in_the_skin(tmp_path: Path) -> None:
    import pyvista as pv

    points, rows = lattice((3, 1, 1))
    grid = pv.UnstructuredGrid({12: rows}, points)
    grid.cell_data["vtkGhostType"] = np.array([0, 0, 1], dtype=np.uint8)
    mesh = read_mesh(write_vtk_xml(grid, tmp_path / "part.vtu"))
    assert straight_volume(mesh) == pytest.approx(2.0)
    assert mesh.derived == "the skin of 2 hexahedra"


def mixed_file(tmp_path: Path, faces: np.ndarray, tags: list[int], suffix: str = ".vtu") -> Path:
    """Write two unit cubes with some tagged faces."""
    points, rows = lattice((2, 1, 1))
    tau = np.concatenate([[100.5, 200.5], np.arange(len(faces)) + 0.25])
    return write_meshio(
        tmp_path / f"mixed{suffix}",
        [("hexahedron", rows), ("quad", faces)],
        points=points,
        point_data={"p": points[:, 0]},
        cell_data={"tag": [np.array([1, 1]), np.array(tags)], "tau": [tau[:2], tau[2:]]},
    )


FEED, DRAIN, INNER = [0, 6, 9, 3], [2, 5, 11, 8], [1, 4, 10, 7]
"""Faces of two cubes side by side: x = 0 and x = 2 turned outward, and x = 1 between the cubes."""


def test_faces_of_a_mixed_file_are_taken_as_they_are(tmp_path: Path) -> None:
    mesh = read_mesh(mixed_file(tmp_path, np.array([FEED, DRAIN]), [1, 2]))
    assert corner_faces(mesh) == [FEED, DRAIN]
    assert mesh.derived == ""
    assert mesh.volume_cells == 2
    assert mesh.skipped == {"hexahedron": 2}
    assert_array_equal(mesh.face_arrays["tag"], [1, 2])
    assert_array_equal(mesh.face_arrays["tau"], [0.25, 1.25])
    assert read_mesh(mixed_file(tmp_path, np.array([FEED, DRAIN]), [1, 2]), skin=False).face_count == 2


def test_hint_at_the_skin(tmp_path: Path) -> None:
    path = mixed_file(tmp_path, np.array([FEED, DRAIN]), [1, 2])
    assert skin_hint(read_mesh(path)) == (
        "mixed.vtu also holds 2 volume cells: 'skin = true' under [surface] takes their skin, "
        "with the tags of the faces on it"
    )
    assert skin_hint(read_mesh(path, skin=True)) == ""


def test_skin_of_a_mixed_file_takes_over_the_tags_of_the_faces(tmp_path: Path) -> None:
    # one face turned and started elsewhere, one twice, one between the cells
    faces = np.array([FEED, DRAIN[::-1], INNER, FEED])
    mesh = read_mesh(mixed_file(tmp_path, faces, [3, 4, 5, 6]), skin=True)
    assert mesh.derived == "the skin of 2 hexahedra"
    assert mesh.face_count == 10
    assert_closed(mesh)
    assert mesh.volume_cells == 0
    assert mesh.skipped == {"face inside the volume": 1}
    tags = {frozenset(face): tag for face, tag in zip(corner_faces(mesh), mesh.face_arrays["tag"])}
    assert tags.pop(frozenset(FEED)) == 3
    assert tags.pop(frozenset(DRAIN)) == 4
    # a tag of the cells is no tag of their faces
    assert np.isnan(list(tags.values())).all()
    values = {frozenset(face): value for face, value in zip(corner_faces(mesh), mesh.face_arrays["tau"])}
    assert values.pop(frozenset(FEED)) == 0.25
    assert values.pop(frozenset(DRAIN)) == 1.25
    # a field of the cells is the best there is on their faces
    assert sorted(values.values()) == [100.5] * 4 + [200.5] * 4


def test_tags_stay_whole_numbers_where_every_face_has_one(tmp_path: Path) -> None:
    points, rows = lattice((2, 1, 1))
    bare = skin_of("hexahedron", points, rows)
    faces = np.array(corner_faces(bare))[::-1]
    mesh = read_mesh(mixed_file(tmp_path, faces, list(range(10, 20))), skin=True)
    assert mesh.face_arrays["tag"].dtype.kind == "i"
    assert_array_equal(mesh.face_arrays["tag"], np.arange(10, 20)[::-1])
    assert corner_faces(mesh) == corner_faces(bare)


def test_named_sets_lie_on_the_skin_that_they_coincide_with(tmp_path: Path) -> None:
    points, rows = lattice((2, 1, 1))
    tags = [np.array([7, 7]), np.array([1, 2, 5])]
    path = write_meshio(
        tmp_path / "mixed.msh",
        [("hexahedron", rows), ("quad", np.array([FEED, DRAIN, INNER]))],
        points=points,
        file_format="gmsh22",
        field_data={"feed": [1, 2], "drain": [2, 2], "inner": [5, 2], "fluid": [7, 3]},
        cell_data={"gmsh:physical": tags, "gmsh:geometrical": tags},
    )
    listed = read_mesh(path)
    assert {name: faces.tolist() for name, faces in listed.face_sets.items()} == {
        "feed": [0],
        "drain": [1],
        "inner": [2],
    }
    mesh = read_mesh(path, skin=True)
    faces = corner_faces(mesh)
    assert set(mesh.face_sets) == {"feed", "drain"}
    assert [set(faces[index]) for index in mesh.face_sets["feed"]] == [set(FEED)]
    assert [set(faces[index]) for index in mesh.face_sets["drain"]] == [set(DRAIN)]


def test_skin_where_there_is_no_volume(tmp_path: Path) -> None:
    import pyvista as pv

    plate = pv.PolyData.from_regular_faces(BOX_POINTS, [[0, 1, 2]])
    for name in ("plate.vtp", "plate.stl", "plate.ply"):
        plate.save(tmp_path / name)
    with pytest.raises(FileError, match=r"plate.vtp: has no volume cells whose skin could be taken. Leave out skin"):
        read_mesh(tmp_path / "plate.vtp", skin=True)
    for name in ("plate.stl", "plate.ply"):
        with pytest.raises(FileError, match=r"a \.\w+ file has no volume cells. Leave out skin"):
            read_mesh(tmp_path / name, skin=True)


def test_skins_of_two_files_are_put_side_by_side(tmp_path: Path) -> None:
    (tmp_path / "a").mkdir()
    one, _, _ = volume_file(tmp_path, ".vtu")
    two, _, _ = volume_file(tmp_path / "a", ".vtk")
    joined = read_meshes({"left": one, "right": two})
    assert joined.mesh.derived == "the skin of 24 tetrahedra and the skin of 24 tetrahedra"
    assert joined.mesh.notes == (*read_mesh(one).notes, *read_mesh(two).notes)
    with pytest.raises(FileError, match="holds no faces"):
        read_meshes({"left": one, "right": two}, skin=False)


def test_no_skin_on_demand(tmp_path: Path) -> None:
    path, _, _ = volume_file(tmp_path, ".vtu")
    with pytest.raises(FileError, match="holds no faces, only cells of other kinds: 24 of type tetra"):
        read_mesh(path, skin=False)


def test_cells_whose_skin_cannot_be_taken(tmp_path: Path) -> None:
    import pyvista as pv

    points = np.random.default_rng(3).random((24, 3))
    pv.UnstructuredGrid([24, *range(24)], [33], points).save(tmp_path / "odd.vtu")
    with pytest.raises(FileError, match="volume cells whose skin cannot be taken: 1 of type bi quadratic"):
        read_mesh(tmp_path / "odd.vtu")


def test_points_in_the_order_of_another_format_are_noticed(tmp_path: Path) -> None:
    import pyvista as pv

    points, rows = cells_of("hexahedron20")
    # the order of CGNS: edges along the third direction before those of the top
    rows = rows[:, [*range(12), *range(16, 20), *range(12, 16)]]
    pv.UnstructuredGrid({25: rows}, points).save(tmp_path / "odd.vtu")
    with pytest.raises(FileError, match=r"mid-side points of \d+ quadratic faces lie away from their edges, .* cell 0"):
        read_mesh(tmp_path / "odd.vtu")


def test_cell_that_uses_a_point_that_is_not_there() -> None:
    with pytest.raises(FileError, match="box: a tetrahedron uses point 9, but there are 4 points"):
        skin_of("tetra", BOX_POINTS[:4], np.array([[0, 1, 2, 9]]))


def test_cells_that_all_lie_twice_have_no_skin() -> None:
    points, rows = lattice((1, 1, 1))
    with pytest.raises(FileError, match="its 2 hexahedra have no face that belongs to one cell only"):
        skin_of("hexahedron", points, np.concatenate([rows, rows]))


def test_collapsed_quadratic_cells_are_refused() -> None:
    points, rows = cells_of("tetra10", (1, 1, 1))
    rows[0, 1] = rows[0, 0]
    with pytest.raises(FileError, match="collapsed faces of cells of type quadratic tetrahedron"):
        skin_of("tetra10", points, rows)


@given(
    st.lists(st.lists(st.integers(0, 6), min_size=3, max_size=5, unique=True), min_size=1, max_size=30), st.randoms()
)
def test_labels_are_equal_exactly_where_the_corners_are(faces: list[list[int]], random) -> None:
    for face in faces:
        random.shuffle(face)
    starts = np.concatenate([[0], np.cumsum([len(face) for face in faces])])
    labels = face_labels(np.array([corner for face in faces for corner in face]), starts)
    for one, first in zip(faces, labels):
        assert [set(one) == set(other) for other in faces] == [first == second for second in labels]


def test_equal_sums_do_not_make_faces_equal(monkeypatch: pytest.MonkeyPatch) -> None:
    from fluxmesh.surface.readers import same_faces

    rows = np.array([[0, 1, 2], [3, 4, 5], [2, 1, 0], [1, 2, 3], [5, 3, 4]])
    second = same_faces._tables(6)[1]
    # the first sums are equal for all faces of three corners
    monkeypatch.setattr(same_faces, "_tables", lambda count: (np.ones(count, dtype=np.uint64), second))
    labels = face_labels(rows.ravel(), np.arange(0, 16, 3))
    assert labels[0] == labels[2]
    assert labels[1] == labels[4]
    assert len(set(labels.tolist())) == 3
    assert [part.tolist() for part in lone_rows([rows[:2], rows[2:]], 6)] == [[False, False], [False, True, False]]


def test_points_coincide_only_at_exactly_one_place() -> None:
    points = np.array([[0.0, 1, 2], [-0.0, 1, 2], [0, 1, np.nextafter(2, 3)], [0, 1, 2]])
    same = coincident_points(points)
    assert same[0] == same[1] == same[3] != same[2]
