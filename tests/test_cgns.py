"""CGNS files: boundary conditions become sets with roles, solutions become arrays, damage is one message."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from fluxmesh.errors import FieldError, InputError
from fluxmesh.surface.files import read_mesh
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.cell_shapes import SHAPES
from fluxmesh.surface.readers.cgns_boundary import role_of_type
from fluxmesh.surface.readers.components import with_vectors
from fluxmesh.surface.readers.skin import corner_rows
from fluxmesh.surface.surface import FaceKind, Role
from tests.mesh_writing import (
    cgns_base,
    cgns_condition,
    cgns_section,
    cgns_solution,
    cgns_zone,
    lattice,
    raised,
    write_cgns,
)

Read = Callable[..., RawMesh]
Refuse = Callable[..., InputError]

TRI_3, TRI_6, QUAD_4, QUAD_8, QUAD_9, HEXA_8, MIXED, NGON, NFACE = 5, 6, 7, 8, 9, 17, 20, 22, 23

POINTS, HEXES = lattice((2, 1, 1))
FEED, DRAIN = np.array([[0, 6, 9, 3]]), np.array([[2, 5, 11, 8]])
WALLS = np.array(
    [
        [0, 3, 4, 1],
        [6, 7, 10, 9],
        [0, 1, 7, 6],
        [3, 9, 10, 4],
        [1, 4, 5, 2],
        [7, 8, 11, 10],
        [1, 2, 8, 7],
        [4, 10, 11, 5],
    ]
)
"""The hull of two unit cubes side by side along x, normals outward."""
ARRAYS = {
    name: np.arange(12.0) / 7.0 + 100 * k for k, name in enumerate(["Pressure", "VelocityX", "VelocityY", "VelocityZ"])
}


def refused(path: Path) -> bool:
    """Read a damaged file; the only error there may be names it."""
    try:
        read_mesh(path)
    except InputError as error:
        return str(path) in str(error) or pytest.fail(str(error))
    return False


def faces_of(mesh: RawMesh) -> list[list[int]]:
    entries, starts = corner_rows(mesh.connectivity, mesh.offsets, mesh.kinds)
    return [entries[a:b].tolist() for a, b in pairwise(starts)]


def assert_closed(mesh: RawMesh, volume: float) -> None:
    """Every edge between two places is passed once each way, and the volume inside is as told."""
    edges: Counter[Any] = Counter()
    total = 0.0
    for face in faces_of(mesh):
        corners = np.asarray(mesh.points, float)[face]
        places = [tuple(place) for place in corners.tolist()]
        edges.update(zip(places, places[1:] + places[:1]))
        total += np.cross(corners, np.roll(corners, -1, axis=0)).sum(axis=0) @ corners.mean(axis=0) / 6
    assert set(edges.values()) == {1}
    assert all((end, start) in edges for start, end in edges)
    assert total == pytest.approx(volume)


def conditions(*nodes: Any) -> Any:
    return "ZoneBC", "ZoneBC_t", None, list(nodes)


SECTIONS = [
    cgns_section("Hexes", HEXA_8, 1, HEXES),
    cgns_section("A", QUAD_4, 3, FEED),
    cgns_section("B", QUAD_4, 4, DRAIN),
    cgns_section("C", QUAD_4, 5, WALLS),
]
SIZES = np.array([[12], [2], [0]])
FAMILY = ("Shell", "Family_t", None, [("FamBC", "FamilyBC_t", "BCWallViscous", [])])
SHELL = cgns_condition("patch_17", "FamilySpecified", "PointRange", [5, 12])
SHELL[3].append(("FamilyName", "FamilyName_t", "Shell", []))


def plain(tmp_path: Path, *more: Any, sections: list[Any] = SECTIONS, name: str = "box.cgns") -> Path:
    zone = cgns_zone(
        "Zone",
        POINTS,
        SIZES,
        *sections,
        conditions(
            cgns_condition("feed", "BCInflowSubsonic", "PointRange", [3, 3]),
            cgns_condition("drain", "BCOutflow", "PointList", [4]),
            SHELL,
        ),
        *more,
    )
    return write_cgns(tmp_path / name, cgns_base(FAMILY, zone))


def test_boundary_conditions_become_sets_with_roles(tmp_path: Path, read: Read) -> None:
    mesh = read(plain(tmp_path, cgns_solution("Sol", "", ARRAYS)))
    assert mesh.source == "box.cgns"
    assert_array_equal(mesh.points, POINTS)
    assert faces_of(mesh) == [*FEED.tolist(), *DRAIN.tolist(), *WALLS.tolist()]
    assert_closed(mesh, 2.0)
    assert {name: faces.tolist() for name, faces in mesh.face_sets.items()} == {
        "drain": [1],
        "feed": [0],
        "Shell": list(range(2, 10)),
    }
    assert mesh.roles == {"feed": Role.INLET, "drain": Role.OUTLET, "Shell": Role.WALL}
    assert mesh.sets_have is None
    assert mesh.skipped == {"hexahedron": 2}
    assert mesh.volume_cells == 2
    assert mesh.derived == ""
    for name, values in ARRAYS.items():
        assert_array_equal(mesh.node_arrays[name], values)
    assert_array_equal(mesh.node_arrays["Velocity"], np.column_stack([ARRAYS[f"Velocity{x}"] for x in "XYZ"]))


def test_vtk_reads_the_same_from_the_file(tmp_path: Path, read: Read) -> None:
    # an outside look at the layout of the files that these tests write
    from vtkmodules.vtkIOCGNSReader import vtkCGNSReader

    from fluxmesh.surface.readers.vtk_messages import captured_messages

    path = plain(
        tmp_path, cgns_solution("Sol", "", ARRAYS), cgns_solution("Cells", "CellCenter", {"T": np.array([1.5, 2.5])})
    )
    mesh = read(path)
    with captured_messages():
        reader = vtkCGNSReader()
        reader.SetFileName(str(path))
        reader.UpdateInformation()
        reader.EnableAllBases()
        reader.EnableAllFamilies()
        reader.EnableAllPointArrays()
        reader.EnableAllCellArrays()
        reader.LoadBndPatchOn()
        reader.Update()
    zone = reader.GetOutput().GetBlock(0).GetBlock(0)
    inside, patch = zone.GetBlock(0), zone.GetBlock(1).GetBlock(0)
    assert inside.GetNumberOfCells() == 2
    assert_array_equal([inside.GetPoint(i) for i in range(12)], mesh.points)
    velocity = inside.GetPointData().GetArray("Velocity")
    assert_array_equal([velocity.GetTuple3(i) for i in range(12)], mesh.node_arrays["Velocity"])
    cells = inside.GetCellData().GetArray("T")
    assert [cells.GetValue(i) for i in range(2)] == [1.5, 2.5]
    quads = [[patch.GetCell(c).GetPointId(k) for k in range(4)] for c in range(patch.GetNumberOfCells())]
    assert quads == [faces_of(mesh)[face] for face in mesh.face_sets["Shell"]]


@pytest.mark.parametrize(
    ("bc_type", "role"),
    [
        ("BCInflow", Role.INLET),
        ("BCInflowSubsonic", Role.INLET),
        ("BCInflowSupersonic", Role.INLET),
        ("BCTunnelInflow", Role.INLET),
        ("BCOutflow", Role.OUTLET),
        ("BCOutflowSubsonic", Role.OUTLET),
        ("BCOutflowSupersonic", Role.OUTLET),
        ("BCTunnelOutflow", Role.OUTLET),
        ("BCFarfield", Role.OPEN),
        ("BCWall", Role.WALL),
        ("BCWallInviscid", Role.WALL),
        ("BCWallViscousIsothermal", Role.WALL),
        ("BCSymmetryPlane", Role.SYMMETRY),
        *[(name, None) for name in ("BCDirichlet", "BCGeneral", "BCSymmetryPolar", "FamilySpecified", "Null", "")],
    ],
)
def test_types_of_conditions_are_roles(bc_type: str, role: Role | None) -> None:
    assert role_of_type(bc_type) == role


@pytest.mark.parametrize("whole", [np.int32, np.int64])
@pytest.mark.parametrize("real", [np.float32, np.float64])
def test_any_precision(tmp_path: Path, read: Read, whole: Any, real: Any) -> None:
    zone = cgns_zone(
        "Zone",
        (POINTS / 3).astype(real),
        SIZES.astype(whole),
        cgns_section("Hexes", HEXA_8, 1, HEXES.astype(whole)),
        cgns_section("A", QUAD_4, 3, FEED.astype(whole)),
        cgns_solution(
            "Sol", "Vertex", {"Pressure": (np.arange(12) / 7).astype(real), "Tag": np.arange(12, dtype=whole)}
        ),
    )
    mesh = read(write_cgns(tmp_path / "box.cgns", cgns_base(zone)))
    assert mesh.points.dtype == real
    assert_array_equal(mesh.points, (POINTS / 3).astype(real))
    assert mesh.node_arrays["Pressure"].dtype == real
    assert mesh.node_arrays["Tag"].dtype == whole
    assert_array_equal(mesh.node_arrays["Tag"], np.arange(12))


def test_sections_are_sets_where_there_are_no_conditions(tmp_path: Path, read: Read) -> None:
    zone = cgns_zone("Zone", POINTS, SIZES, *SECTIONS)
    path = write_cgns(tmp_path / "box.cgns", cgns_base(zone))
    mesh = read(path)
    assert {name: faces.tolist() for name, faces in mesh.face_sets.items()} == {
        "A": [0],
        "B": [1],
        "C": list(range(2, 10)),
    }
    skin = read(path, skin=True)
    assert skin.derived == "the skin of 2 hexahedra"
    assert {name: len(faces) for name, faces in skin.face_sets.items()} == {"A": 1, "B": 1, "C": 8}
    assert_closed(skin, 2.0)


def test_faces_in_no_condition_are_counted(tmp_path: Path, read: Read) -> None:
    listed = conditions(
        cgns_condition("feed", "BCInflow", "ElementList", [3], ""),
        cgns_condition("w", "BCWall", "ElementRange", [6, 7], ""),
    )
    path = write_cgns(tmp_path / "box.cgns", cgns_base(cgns_zone("Zone", POINTS, SIZES, *SECTIONS, listed)))
    mesh = read(path)
    assert faces_of(mesh) == [FEED[0].tolist(), *WALLS[1:3].tolist()]
    assert mesh.skipped == {"hexahedron": 2, "face in no boundary condition": 7}


def test_a_face_of_two_conditions_is_there_once(tmp_path: Path, read: Read) -> None:
    listed = conditions(
        cgns_condition("all", "BCWall", "PointRange", [3, 12]), cgns_condition("two", "BCWall", "PointList", [12, 5])
    )
    mesh = read(write_cgns(tmp_path / "box.cgns", cgns_base(cgns_zone("Zone", POINTS, SIZES, *SECTIONS, listed))))
    assert mesh.face_count == 10
    assert mesh.face_sets["two"].tolist() == [2, 9]


def test_conditions_that_list_vertices(tmp_path: Path, read: Read) -> None:
    listed = conditions(
        cgns_condition("feed", "BCInflow", "PointList", FEED[0][::-1] + 1, ""),
        cgns_condition("low", "BCWall", "PointRange", [1, 6], "Vertex"),
        cgns_condition("seam", "BCDegenerateLine", "PointList", [1, 2], ""),
    )
    mesh = read(write_cgns(tmp_path / "box.cgns", cgns_base(cgns_zone("Zone", POINTS, SIZES, *SECTIONS, listed))))
    sets = {name: [faces_of(mesh)[face] for face in faces] for name, faces in mesh.face_sets.items()}
    assert sets == {"feed": FEED.tolist(), "low": [WALLS[0].tolist(), WALLS[4].tolist()]}


def test_values_of_cells_lie_on_the_faces_before_them(tmp_path: Path, read: Read) -> None:
    # the faces are numbered before and after the cells, which does not matter to the order of cell values
    sections = [
        cgns_section("A", QUAD_4, 1, FEED),
        cgns_section("Hexes", HEXA_8, 2, HEXES),
        cgns_section("B", QUAD_4, 4, np.array([DRAIN[0], [1, 4, 10, 7]])),
    ]
    cells = cgns_solution("Cells", "CellCenter", {"Temperature": np.array([300.25, 310.5])})
    path = write_cgns(tmp_path / "box.cgns", cgns_base(cgns_zone("Zone", POINTS, SIZES, *sections, cells)))
    mesh = read(path)
    # the last face lies between the cells: no cell is behind it alone
    assert_array_equal(mesh.face_arrays["Temperature"], [300.25, 310.5, np.nan])
    assert mesh.notes == ("values of 'Temperature' on the faces of Zone are those of the cell behind each face",)
    skin = read(path, skin=True)
    assert sorted(skin.face_arrays["Temperature"]) == [300.25] * 5 + [310.5] * 5
    assert skin.skipped == {"face inside the volume": 1}


def test_values_on_listed_faces(tmp_path: Path, read: Read) -> None:
    at_faces = cgns_solution(
        "Walls", "FaceCenter", {f"SkinFriction{x}": np.array([1.0, 2.0]) + k for k, x in enumerate("XYZ")}
    )
    at_faces[3].append(("PointList", "IndexArray_t", np.array([[12], [3]]), []))
    data = cgns_condition("feed", "BCInflow", "PointRange", [3, 4])
    names = {"Pressure": np.array([5.5, 6.5]), "Uniform": np.array([7.5])}
    arrays = [(name, "DataArray_t", values, []) for name, values in names.items()]
    data[3].append(("Set", "BCDataSet_t", "Null", [("DirichletData", "BCData_t", None, arrays)]))
    listed = conditions(data, cgns_condition("wall", "BCWall", "PointRange", [5, 12]))
    cells = cgns_solution("Cells", "CellCenter", {"Pressure": np.array([1.5, 2.5])})
    zone = cgns_zone("Zone", POINTS, SIZES, *SECTIONS, listed, at_faces, cells)
    mesh = read(write_cgns(tmp_path / "box.cgns", cgns_base(zone)))
    gap = [np.nan] * 8
    assert_array_equal(mesh.face_arrays["SkinFriction"][[0, 9]], [[2, 3, 4], [1, 2, 3]])
    assert np.isnan(mesh.face_arrays["SkinFriction"][1:9]).all()
    assert_array_equal(mesh.face_arrays["DirichletData/Pressure"], [5.5, 6.5, *gap])
    assert_array_equal(mesh.face_arrays["Uniform"], [7.5, 7.5, *gap])
    assert_array_equal(mesh.face_arrays["Pressure"], [1.5, 2.5] + [1.5] * 4 + [2.5] * 4)
    assert mesh.sets_have == {"feed": {"Pressure", "DirichletData/Pressure", "Uniform"}, "wall": {"Pressure"}}


def test_arrays_of_one_name_in_two_solutions_are_told_apart(tmp_path: Path, read: Read) -> None:
    more = [
        cgns_solution(name, "", {"Pressure": np.arange(12.0) + k, f"Own{k}": np.ones(12)})
        for k, name in enumerate("ab")
    ]
    mesh = read(plain(tmp_path, *more))
    assert sorted(mesh.node_arrays) == ["Own0", "Own1", "a/Pressure", "b/Pressure"]
    assert_array_equal(mesh.node_arrays["b/Pressure"], np.arange(12.0) + 1)


def test_vectors_are_joined_from_their_components() -> None:
    one, two, three = (np.array([float(k), 2.0 * k]) for k in (1, 2, 3))
    found = with_vectors({"VelocityX": one, "VelocityY": two, "VelocityZ": three, "Velocity_z": one, "tau_x": one})
    assert_array_equal(found["Velocity"], np.column_stack([one, two, three]))
    assert len(found) == 6
    assert "v" in with_vectors({"v_x": one, "v_y": one, "v_z": one})
    taken = {"AX": one, "AY": one, "AZ": one, "A": two}
    assert with_vectors(taken)["A"] is two


@pytest.mark.parametrize("offsets", [True, False])
def test_mixed_sections(tmp_path: Path, read: Read, offsets: bool) -> None:
    triangles = [[0, 6, 9], [0, 9, 3]]
    stream: list[int] = []
    starts = [0]
    for kind, row in [
        (TRI_3, triangles[0]),
        (HEXA_8, HEXES[1]),
        (QUAD_4, DRAIN[0]),
        (TRI_3, triangles[1]),
        (HEXA_8, HEXES[0]),
    ]:
        stream += [kind, *(int(point) + 1 for point in row)]
        starts.append(len(stream))
    more = {"ElementStartOffset": np.array(starts)} if offsets else {}
    zone = cgns_zone(
        "Zone",
        POINTS,
        SIZES,
        cgns_section("All", MIXED, 1, np.array(stream), count=5, **more),
        conditions(
            cgns_condition("f", "BCInflow", "PointList", [1, 4]), cgns_condition("d", "BCOutflow", "PointList", [3])
        ),
        cgns_solution("Cells", "CellCenter", {"T": np.array([1.5, 2.5])}),
    )
    mesh = read(write_cgns(tmp_path / "box.cgns", cgns_base(zone)))
    assert faces_of(mesh) == [triangles[0], DRAIN[0].tolist(), triangles[1]]
    assert {name: faces.tolist() for name, faces in mesh.face_sets.items()} == {"f": [0, 2], "d": [1]}
    # cell values go by element number: the second element is the first cell, at x from 1 to 2
    assert_array_equal(mesh.face_arrays["T"], [np.nan, 1.5, np.nan])


@pytest.mark.parametrize("old", [True, False])
@pytest.mark.parametrize("listed", [True, False])
def test_polygons_and_polyhedra(tmp_path: Path, read: Read, old: bool, listed: bool) -> None:
    quads = [*FEED.tolist(), [1, 7, 10, 4], *DRAIN.tolist(), *WALLS.tolist()]
    # faces 1 ... 11, cells 12 and 13; a minus turns a face
    cells = [[1, -2, 4, 5, 6, 7], [2, 3, 8, 9, 10, 11]]

    def section(name: str, kind: int, first: int, rows: list[list[int]], step: int) -> Any:
        if old:
            return cgns_section(
                name,
                kind,
                first,
                np.array([e for row in rows for e in (len(row), *(x + step for x in row))]),
                count=len(rows),
            )
        starts = np.cumsum([0, *map(len, rows)])
        flat = np.array([x + step for row in rows for x in row])
        return cgns_section(name, kind, first, flat, count=len(rows), ElementStartOffset=starts)

    below = [section("Faces", NGON, 1, quads, 1), section("Cells", NFACE, 12, cells, 0)]
    if listed:
        below.append(
            conditions(
                cgns_condition("feed", "BCInflow", "PointList", [1]),
                cgns_condition("drain", "BCOutflow", "PointList", [3]),
                cgns_condition("wall", "BCWall", "PointRange", [4, 11]),
            )
        )
    below.append(cgns_solution("Cells2", "CellCenter", {"T": np.array([1.5, 2.5])}))
    mesh = read(write_cgns(tmp_path / "box.cgns", cgns_base(cgns_zone("Zone", POINTS, SIZES, *below))))
    assert mesh.face_count == 10
    assert_closed(mesh, 2.0)
    assert sorted(mesh.face_arrays["T"]) == [1.5] * 5 + [2.5] * 5
    if listed:
        assert {name: len(faces) for name, faces in mesh.face_sets.items()} == {"drain": 1, "feed": 1, "wall": 8}
        assert mesh.derived == ""
    else:
        assert mesh.derived == "the skin of 2 polyhedra"
        assert mesh.face_sets == {}


def test_polygons_with_parents_tell_the_inner_ones(tmp_path: Path, read: Read) -> None:
    quads = np.array([*FEED, [1, 7, 10, 4], *DRAIN, *WALLS])
    parents = np.array([[1, 1, 2, *[1] * 4, *[2] * 4], [0, 2, *[0] * 9]])
    section = cgns_section(
        "Faces", NGON, 1, quads.ravel() + 1, count=11, ElementStartOffset=4 * np.arange(12), ParentElements=parents
    )
    mesh = read(write_cgns(tmp_path / "box.cgns", cgns_base(cgns_zone("Zone", POINTS, SIZES, section))))
    assert mesh.face_count == 10
    assert_closed(mesh, 2.0)


def edges_of(*pairs: str) -> np.ndarray:
    return np.array([[int(a) - 1, int(b) - 1] for a, b in pairs])


# The points on edges and faces in the order of the SIDS, corners from 1
# (CGNS documentation, "Unstructured Grid Element Numbering Conventions"; from memory).
SIDS = {
    "tetra10": (11, edges_of("12", "23", "31", "14", "24", "34"), ()),
    "pyramid13": (21, edges_of("12", "23", "34", "41", "15", "25", "35", "45"), ()),
    "pyramid14": (13, edges_of("12", "23", "34", "41", "15", "25", "35", "45"), ((0, 1, 2, 3),)),
    "wedge15": (15, edges_of("12", "23", "31", "14", "25", "36", "45", "56", "64"), ()),
    "wedge18": (
        16,
        edges_of("12", "23", "31", "14", "25", "36", "45", "56", "64"),
        ((0, 1, 4, 3), (1, 2, 5, 4), (2, 0, 3, 5)),
    ),
    "hexahedron20": (18, edges_of("12", "23", "34", "41", "15", "26", "37", "48", "56", "67", "78", "85"), ()),
    "hexahedron27": (
        19,
        edges_of("12", "23", "34", "41", "15", "26", "37", "48", "56", "67", "78", "85"),
        ((0, 1, 2, 3), (0, 1, 5, 4), (1, 2, 6, 5), (2, 3, 7, 6), (0, 4, 7, 3), (4, 5, 6, 7), tuple(range(8))),
    ),
}


@pytest.mark.parametrize("shape", sorted(SIDS))
def test_quadratic_cells_are_read_in_the_order_of_the_sids(tmp_path: Path, read: Read, shape: str) -> None:
    from tests.mesh_writing import cut

    linear = shape.rstrip("0123456789")
    points, rows = cut(*lattice((2, 1, 1)), linear)
    kind, edges, centres = SIDS[shape]
    points, rows = raised(points, rows, edges, centres)
    assert rows.shape[1] == SHAPES[shape].size
    zone = cgns_zone("Zone", points, np.array([[len(points)], [len(rows)], [0]]), cgns_section("Cells", kind, 1, rows))
    mesh = read(write_cgns(tmp_path / "box.cgns", cgns_base(zone)))
    assert_closed(mesh, 2.0)
    assert mesh.offsets is not None
    assert mesh.kinds is not None
    # every mid-side point lies at its edge, every centre in its face: the mesh is straight
    for kind, start, stop in zip(mesh.kinds, mesh.offsets[:-1], mesh.offsets[1:]):
        face = mesh.points[mesh.connectivity[start:stop]]
        count = 3 if kind == FaceKind.TRIANGLE6 else 4
        assert_allclose(face[count : 2 * count], 0.5 * (face[:count] + np.roll(face[:count], -1, axis=0)), atol=1e-14)
        if kind == FaceKind.QUAD9:
            assert_allclose(face[8], face[:4].mean(axis=0), atol=1e-14)
    whole = {"hexahedron27": FaceKind.QUAD9, "hexahedron20": FaceKind.QUAD8, "wedge18": FaceKind.QUAD9}
    assert (
        whole.get(shape, FaceKind.TRIANGLE6 if shape != "wedge15" else FaceKind.QUAD8) in mesh.kinds or shape[0] == "p"
    )


@pytest.mark.parametrize(
    ("kind", "size", "face"), [(TRI_6, 6, FaceKind.TRIANGLE6), (QUAD_8, 8, FaceKind.QUAD8), (QUAD_9, 9, FaceKind.QUAD9)]
)
def test_quadratic_faces(tmp_path: Path, read: Read, kind: int, size: int, face: FaceKind) -> None:
    points = np.random.default_rng(2).random((size, 3))
    zone = cgns_zone("Patch", points, np.array([[size], [1], [0]]), cgns_section("S", kind, 1, np.arange(size)[None]))
    mesh = read(write_cgns(tmp_path / "patch.cgns", cgns_base(zone, cells=2)))
    assert mesh.kinds is not None
    assert mesh.kinds.tolist() == [face]
    assert_array_equal(mesh.connectivity, np.arange(size))
    assert list(mesh.face_sets) == ["Patch"]


def test_zones_of_surface_elements_are_sets(tmp_path: Path, read: Read) -> None:
    square = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0]], dtype=np.float64)
    zones = [
        cgns_zone(
            name,
            square + np.array([0, 0, k]),
            np.array([[4], [2], [0]]),
            cgns_section("S", TRI_3, 1, np.array([[0, 1, 2], [0, 2, 3]])),
            cgns_solution("Sol", "CellCenter", {"Pressure": np.array([1.5, 2.5]) + k}),
            cgns_solution("At nodes", "Vertex", {"T": np.arange(4.0) + k} if k else {}),
        )
        for k, name in enumerate(["feed", "shell"])
    ]
    two = cgns_zone(
        "cap",
        square,
        np.array([[4], [2], [0]]),
        cgns_section("one", TRI_3, 1, np.array([[0, 1, 2]])),
        cgns_section("two", TRI_3, 2, np.array([[0, 2, 3]])),
    )
    mesh = read(write_cgns(tmp_path / "hull.cgns", cgns_base(*zones, two, cells=2)))
    assert {name: faces.tolist() for name, faces in mesh.face_sets.items()} == {
        "feed": [0, 1],
        "shell": [2, 3],
        "cap/one": [4],
        "cap/two": [5],
    }
    assert_array_equal(mesh.face_arrays["Pressure"], [1.5, 2.5, 2.5, 3.5, np.nan, np.nan])
    assert_array_equal(mesh.node_arrays["T"], [np.nan] * 4 + [1.0, 2.0, 3.0, 4.0] + [np.nan] * 4)
    assert mesh.sets_have == {"cap/one": set(), "cap/two": set(), "feed": {"Pressure"}, "shell": {"Pressure", "T"}}


def structured(shape: tuple[int, int, int], turned: bool = False) -> tuple[np.ndarray, np.ndarray]:
    """Return points (k, j, i, 3) of a box and the sizes of its zone; `turned` swaps two axes of space."""
    i, j, k = (np.arange(n, dtype=np.float64) for n in shape)
    z, y, x = np.meshgrid(k, j, i, indexing="ij")
    points = np.stack([y, x, z] if turned else [x, y, z], axis=-1)
    return points, np.array([shape, [n - 1 for n in shape], [0, 0, 0]])


def ranges(shape: tuple[int, int, int], location: str) -> dict[str, list[list[int]]]:
    """Return the six sides of a zone as ranges, from 1, of vertices or faces."""
    found = {}
    for axis, letter in enumerate("ijk"):
        for end in ("min", "max"):
            low = [1, 1, 1]
            high = list(shape) if location == "Vertex" else [n - (index != axis) for index, n in enumerate(shape)]
            low[axis] = high[axis] = 1 if end == "min" else shape[axis]
            found[f"{letter}{end}"] = [low, high]
    return found


@pytest.mark.parametrize("turned", [False, True])
@pytest.mark.parametrize("location", ["Vertex", "FaceCenter", "own"])
def test_structured_zone(tmp_path: Path, read: Read, location: str, turned: bool) -> None:
    shape = (4, 3, 2)
    points, sizes = structured(shape, turned)
    listed = [
        cgns_condition(
            name, "BCWall", "PointRange", span, f"{name[0].upper()}FaceCenter" if location == "own" else location
        )
        for name, span in ranges(shape, location).items()
    ]
    cell = np.arange(6.0).reshape(1, 2, 3)  # k, j, i
    zone = cgns_zone(
        "Zone",
        points,
        sizes,
        conditions(*listed),
        cgns_solution("Sol", "Vertex", {"Pressure": points @ [1.0, 10.0, 100.0]}),
        cgns_solution("Cells", "CellCenter", {"T": cell}),
    )
    mesh = read(write_cgns(tmp_path / "block.cgns", cgns_base(zone)))
    assert mesh.face_count == 22
    assert_closed(mesh, 6.0)
    assert_array_equal(mesh.node_arrays["Pressure"], mesh.points @ [1.0, 10.0, 100.0])
    assert {name: len(faces) for name, faces in mesh.face_sets.items()} == {
        **{"imin": 2, "imax": 2, "jmin": 3, "jmax": 3, "kmin": 6, "kmax": 6}
    }
    assert set(mesh.roles.values()) == {Role.WALL}
    where = {"i": 1 if turned else 0, "j": 0 if turned else 1, "k": 2}
    for name, faces in mesh.face_sets.items():
        axis = where[name[0]]
        for face in faces:
            corners = mesh.points[faces_of(mesh)[face]]
            assert_array_equal(corners[:, axis], 0.0 if name.endswith("min") else shape["ijk".index(name[0])] - 1.0)
            middle = corners.mean(axis=0)
            i, j = (int(min(middle[where[letter]], shape["ijk".index(letter)] - 1.5)) for letter in "ij")
            assert mesh.face_arrays["T"][face] == cell[0, j, i]


def test_structured_arrays_with_planes_beyond_the_zone(tmp_path: Path, read: Read) -> None:
    shape = (3, 3, 2)
    points, sizes = structured(shape)
    padded = np.full((1 + 1, 2 + 1, 2 + 2), np.nan)
    padded[:1, 1:, 1:3] = np.arange(4.0).reshape(1, 2, 2)
    solution = cgns_solution("Cells", "CellCenter", {"T": padded}, ("Rind", "Rind_t", np.array([1, 1, 1, 0, 0, 1]), []))
    zone = cgns_zone("Zone", points, sizes, solution)
    mesh = read(write_cgns(tmp_path / "block.cgns", cgns_base(zone)))
    assert mesh.derived == "the skin of 4 hexahedra"
    assert_closed(mesh, 4.0)
    for face, value in zip(faces_of(mesh), mesh.face_arrays["T"]):
        i, j = (int(min(x, 1.5)) for x in mesh.points[face].mean(axis=0)[:2])
        assert value == i + 2 * j


def test_structured_zones_that_touch(tmp_path: Path, read: Read) -> None:
    points, sizes = structured((3, 2, 2))
    left, right = (cgns_zone(name, points + np.array([x, 0, 0]), sizes) for name, x in (("left", 0), ("right", 2)))
    skin = read(write_cgns(tmp_path / "two.cgns", cgns_base(left, right)))
    assert skin.derived == "the skin of 4 hexahedra"
    assert skin.notes == ("1 faces between blocks of two.cgns lie inside the volume",)
    assert_closed(skin, 4.0)

    def ends(name: str, x: float) -> Any:
        sides = ranges((3, 2, 2), "Vertex")
        inner = "imax" if name == "left" else "imin"
        listed = [
            cgns_condition("end" if side[0] == "i" else "wall_" + side, "BCWall", "PointRange", span, "")
            for side, span in sides.items()
            if side != inner
        ]
        return cgns_zone(name, points + np.array([x, 0, 0]), sizes, conditions(*listed))

    mesh = read(write_cgns(tmp_path / "two.cgns", cgns_base(ends("left", 0), ends("right", 2))))
    assert_closed(mesh, 4.0)
    assert {name: len(faces) for name, faces in mesh.face_sets.items()} == {
        **{"end": 2, "wall_jmin": 4, "wall_jmax": 4, "wall_kmin": 4, "wall_kmax": 4}
    }


def test_zones_must_agree_on_the_role_of_a_set(tmp_path: Path, read: Read) -> None:
    points, sizes = structured((3, 2, 2))
    sides = ranges((3, 2, 2), "Vertex")
    zones = [
        cgns_zone(
            f"zone {x}",
            points + np.array([x, 0, 0]),
            sizes,
            conditions(
                cgns_condition("end", kind, "PointRange", sides["imin"], "Vertex"),
                cgns_condition("floor", "BCWall", "PointRange", sides["kmin"], "Vertex"),
            ),
        )
        for x, kind in ((0, "BCInflow"), (2, "BCOutflow"))
    ]
    mesh = read(write_cgns(tmp_path / "two.cgns", cgns_base(*zones)))
    assert mesh.roles == {"floor": Role.WALL}
    assert {name: len(faces) for name, faces in mesh.face_sets.items()} == {"end": 2, "floor": 4}


def test_structured_surface_zone(tmp_path: Path, read: Read) -> None:
    x, y = np.meshgrid(np.arange(4.0), np.arange(3.0))
    points = np.stack([x, y, x * y], axis=-1)
    zone = cgns_zone(
        "sheet",
        points,
        np.array([[4, 3], [3, 2], [0, 0]]),
        cgns_solution("Sol", "Vertex", {"Pressure": x + 10 * y}),
        cgns_solution("Cells", "CellCenter", {"T": np.arange(6.0).reshape(2, 3)}),
    )
    mesh = read(write_cgns(tmp_path / "sheet.cgns", cgns_base(zone, cells=2)))
    assert_array_equal(mesh.node_arrays["Pressure"], mesh.points[:, 0] + 10 * mesh.points[:, 1])
    assert list(mesh.face_sets) == ["sheet"]
    for face, value in zip(faces_of(mesh), mesh.face_arrays["T"]):
        i, j, _ = mesh.points[face].min(axis=0)
        assert value == i + 3 * j
        corners = mesh.points[face][:, :2]
        assert_array_equal(corners - corners[0], [[0, 0], [1, 0], [1, 1], [0, 1]])


def link(path: Path, name: str, target: str, file: str = "") -> None:
    """Make a child of the zone a link, as the CGNS library does."""
    import h5py

    with h5py.File(path, "a") as opened:
        zone = opened["Base/Zone"]
        if name in zone:
            del zone[name]
        group = zone.create_group(name)
        group.attrs["label"], group.attrs["name"], group.attrs["type"] = (np.bytes_(x) for x in ("", name, "LK"))
        group.create_dataset(" path", data=np.frombuffer(target.encode() + b"\0", dtype=np.int8))
        if file:
            group.create_dataset(" file", data=np.frombuffer(file.encode() + b"\0", dtype=np.int8))


def test_links_within_the_file_and_beside_it(tmp_path: Path, read: Read) -> None:
    path = plain(tmp_path, cgns_solution("Sol", "", ARRAYS))
    plain(tmp_path, name="grid.cgns")
    link(path, "GridCoordinates", "/Base/Zone/GridCoordinates", "grid.cgns")
    link(path, "Again", "/Base/Zone/Sol")
    mesh = read(path)
    assert_array_equal(mesh.points, POINTS)
    assert_array_equal(mesh.node_arrays["Again/Pressure"], ARRAYS["Pressure"])


@pytest.mark.parametrize("file", ["../grid.cgns", "/tmp/grid.cgns"])
def test_links_out_of_the_folder_are_not_followed(tmp_path: Path, refuse: Refuse, file: str) -> None:
    import h5py

    folder = tmp_path / "inner"
    folder.mkdir()
    path = plain(folder)
    plain(tmp_path, name="grid.cgns")
    link(path, "GridCoordinates", "/Base/Zone/GridCoordinates", file)
    refuse(path, "link 'GridCoordinates': names the file '.*grid.cgns', which is not in its own folder")
    with h5py.File(path, "a") as opened:
        del opened["Base/Zone/GridCoordinates"]
        opened["Base/Zone/GridCoordinates"] = h5py.ExternalLink(file, "/Base/Zone/GridCoordinates")
    refuse(path, "link 'GridCoordinates': names the file '.*grid.cgns', which is not in its own folder")


def test_links_that_lead_nowhere(tmp_path: Path, refuse: Refuse) -> None:
    path = plain(tmp_path)
    link(path, "GridCoordinates", "/Base/Zone/Grid", "")
    refuse(path, "links to '/Base/Zone/Grid', which is not there")
    link(path, "GridCoordinates", "/Base/Zone/GridCoordinates", "gone.cgns")
    refuse(path, "its part gone.cgns is missing")
    link(path, "GridCoordinates", "/Base/Zone/GridCoordinates")
    refuse(path, "is a link to a link, more than 8 deep")
    link(path, "GridCoordinates", "/Base/Zone/GridCoordinates", "box.cgns")
    refuse(path, "links to files that link to files, more than 8 deep")


@pytest.mark.parametrize("kind", ["external", "virtual"])
def test_arrays_kept_in_another_file_are_not_read(tmp_path: Path, refuse: Refuse, kind: str) -> None:
    import h5py

    path = plain(tmp_path)
    (tmp_path / "secret.bin").write_bytes(bytes(96))
    with h5py.File(path, "a") as opened:
        node = opened["Base/Zone/GridCoordinates/CoordinateX"]
        del node[" data"]
        if kind == "external":
            node.create_dataset(" data", shape=(12,), dtype="f8", external=[(str(tmp_path / "secret.bin"), 0, 96)])
        else:
            layout = h5py.VirtualLayout(shape=(12,), dtype="f8")
            layout[:] = h5py.VirtualSource(tmp_path / "other.h5", "x", shape=(12,))
            node.create_virtual_dataset(" data", layout)
    refuse(path, r"CoordinateX: keeps its data in another file")


def test_array_that_would_fill_the_memory(tmp_path: Path, refuse: Refuse) -> None:
    import h5py

    path = plain(tmp_path)
    with h5py.File(path, "a") as opened:
        node = opened["Base/Zone/GridCoordinates/CoordinateX"]
        del node[" data"]
        node.create_dataset(" data", shape=(10**12,), dtype="f8", chunks=(1024,))
    refuse(path, "announces 8000000000000 bytes, but 0 are stored")


def test_older_form_is_named(tmp_path: Path, refuse: Refuse) -> None:
    path = tmp_path / "old.cgns"
    path.write_bytes(b"\xc0\xa8\xa3\xa9ADF Database Version B02012>" + bytes(300))
    refuse(path, "is a CGNS file in the older ADF form, which cannot be read. Convert it")


def test_file_that_is_no_cgns_file(tmp_path: Path, refuse: Refuse) -> None:
    import h5py

    path = tmp_path / "box.cgns"
    path.write_bytes(b"Dear all,\nhere is the mesh.\n")
    refuse(path, "is no CGNS file")
    with h5py.File(path, "w") as opened:
        opened["x"] = [1, 2, 3]
    refuse(path, "holds no zone")


def test_package_that_is_not_installed_is_named(
    tmp_path: Path, refuse: Refuse, monkeypatch: pytest.MonkeyPatch
) -> None:
    import sys

    path = plain(tmp_path)
    monkeypatch.setitem(sys.modules, "h5py", None)
    refuse(path, "needs the package h5py to be read. Install it: pip install h5py")


@pytest.mark.parametrize(
    ("sections", "match"),
    [
        ([cgns_section("S", 60, 1, FEED)], "has elements of the type number 60, which cannot be read"),
        ([cgns_section("S", QUAD_4, 1, FEED.ravel()[:3], count=1)], "3 point numbers, but there are 1 elements of 4"),
        ([cgns_section("S", QUAD_4, 0, FEED)], r"has the type \[7, 0\] and the range \[0, 0\]"),
        ([("S", "Elements_t", np.array([7, 0]), [])], r"has the type \[7, 0\] and the range \[\]"),
        ([cgns_section("S", MIXED, 1, np.array([7, 1, 2, 5]), count=1)], "holds 4 numbers, but its 1 elements need 5"),
        ([cgns_section("S", MIXED, 1, np.array([7, 1, 2, 5, 4]), count=2)], "ends within its 2 elements"),
        ([cgns_section("S", NGON, 1, np.array([0, 0, 1]), count=3)], "holds 3 numbers, but its 3 elements need 4"),
        ([cgns_section("S", NGON, 1, np.array([-3, 1, 2]), count=1)], "has an element of -3 points"),
        (
            [cgns_section("S", NGON, 1, np.array([1, 2, 3]), count=1, ElementStartOffset=np.array([0, 2]))],
            "has offsets that do not cut 3 numbers into 1 elements",
        ),
        ([cgns_section("S", QUAD_4, 1, FEED + 20)], "face 0 uses point 20, but there are 12 points"),
        ([cgns_section("S", HEXA_8, 1, HEXES + 9)], "a hexahedron uses point 20, but there are 12 points"),
        (
            [
                cgns_section("F", NGON, 1, np.array([4, 1, 2, 5, 4]), count=1),
                cgns_section("S", NFACE, 2, np.array([2, 1, 9]), count=1),
            ],
            "polyhedra of section 'S' use faces that are not there",
        ),
    ],
)  # fmt: skip
def test_damaged_sections(tmp_path: Path, refuse: Refuse, sections: list[Any], match: str) -> None:
    zone = cgns_zone("Zone", POINTS, SIZES, *sections)
    refuse(write_cgns(tmp_path / "box.cgns", cgns_base(zone)), match)


@pytest.mark.parametrize(
    ("condition", "match"),
    [
        (cgns_condition("x", "BCWall", "PointList", [1]), "names the element 1, which is no face of its zone"),
        (cgns_condition("x", "BCWall", "PointRange", [3, 2**40]), "names the element 13, which is no face of its zone"),
        (cgns_condition("x", "BCWall", "PointRange", [3, 4, 5]), "its PointRange holds 3 numbers for an index of 1"),
        (cgns_condition("x", "BCWall", "PointList", [0, 1, 2], "Vertex"), "names vertex 0 of 12"),
        (cgns_condition("x", "BCWall", "PointList", [99], "Vertex"), "names vertex 99 of 12"),
        (cgns_condition("x", "BCWall", "PointList", np.array([0.5])), "holds values of type float64. Whole numbers"),
    ],
)
def test_damaged_conditions(tmp_path: Path, refuse: Refuse, condition: Any, match: str) -> None:
    zone = cgns_zone("Zone", POINTS, SIZES, *SECTIONS, conditions(condition))
    refuse(write_cgns(tmp_path / "box.cgns", cgns_base(zone)), match)


@pytest.mark.parametrize(
    ("condition", "match"),
    [
        (cgns_condition("x", "BCWall", "PointList", [[1, 1, 1]]), "lists single points of a structured zone"),
        (cgns_condition("x", "BCWall", "PointRange", [[1, 1, 1], [4, 3, 2]], ""), "at Vertex is no face of the zone"),
        (cgns_condition("x", "BCWall", "PointRange", [[1, 1, 1], [1, 9, 2]], ""), "leaves the zone of"),
        (cgns_condition("x", "BCWall", "PointRange", [[1, 1, 1], [1, 3, 3]], "IFaceCenter"), "leaves the zone of"),
    ],
)
def test_damaged_conditions_of_structured_zones(tmp_path: Path, refuse: Refuse, condition: Any, match: str) -> None:
    points, sizes = structured((4, 3, 2))
    zone = cgns_zone("Zone", points, sizes, conditions(condition))
    refuse(write_cgns(tmp_path / "box.cgns", cgns_base(zone)), match)


@pytest.mark.parametrize(
    ("zone", "match"),
    [
        (cgns_zone("Zone", POINTS, np.array([[12], [2], [0]]) - 13, kind="Unstructured"), r"has the sizes \[-1"),
        (cgns_zone("Zone", POINTS, np.array([[12]]), kind="Unstructured"), r"has the sizes \[12\]"),
        (cgns_zone("Zone", POINTS, np.array([[12], [2], [0]]), kind="Structured"), r"has the sizes \[12, 2, 0\]"),
        (
            ("Zone", "Zone_t", SIZES, [("ZoneType", "ZoneType_t", "Unstructured", [])]),
            "has no Cartesian coordinates, but none",
        ),
        (("Zone", "Zone_t", None, []), "Zone: has no data"),
        (
            cgns_zone("Zone", structured((4, 3, 2))[0], np.array([[4, 3, 1], [3, 2, 0], [0, 0, 0]])),
            "has 4 x 3 x 1 points",
        ),
    ],
)
def test_damaged_zones(tmp_path: Path, refuse: Refuse, zone: Any, match: str) -> None:
    refuse(write_cgns(tmp_path / "box.cgns", cgns_base(zone)), match)


def test_arrays_of_the_wrong_length(tmp_path: Path, refuse: Refuse) -> None:
    refuse(
        plain(tmp_path, cgns_solution("S", "", {"p": np.ones(11)})),
        "array 'p' holds 11 values, but there are 12",
        FieldError,
    )
    refuse(
        plain(tmp_path, cgns_solution("S", "CellCenter", {"T": np.ones(3)})),
        "array 'T' holds 3 values, but there are 2",
        FieldError,
    )
    wrong = cgns_zone(
        "Zone",
        POINTS,
        SIZES + np.array([[0], [1], [0]]),
        *SECTIONS,
        cgns_solution("S", "CellCenter", {"T": np.ones(3)}),
    )
    refuse(write_cgns(tmp_path / "box.cgns", cgns_base(wrong)), "has 2 volume cells, but announces 3")


@pytest.mark.parametrize("libver", ["earliest", "latest"])
@pytest.mark.parametrize("fraction", [0.02, 0.1, 0.35, 0.6, 0.85, 0.99])
def test_file_cut_short(tmp_path: Path, refuse: Refuse, fraction: float, libver: str) -> None:
    zone = cgns_zone("Zone", POINTS, SIZES, *SECTIONS, cgns_solution("Sol", "", ARRAYS))
    path = write_cgns(tmp_path / "box.cgns", cgns_base(zone), libver=libver)
    read_mesh(path)
    whole = path.read_bytes()
    path.write_bytes(whole[: int(len(whole) * fraction)])
    refuse(path)


@pytest.mark.parametrize("libver", ["earliest", "latest"])
def test_random_damage_ends_in_one_message(tmp_path: Path, capfd: pytest.CaptureFixture[str], libver: str) -> None:
    rng = np.random.default_rng(4)
    zone = cgns_zone(
        "Zone",
        POINTS,
        SIZES,
        *SECTIONS,
        conditions(cgns_condition("feed", "BCInflow", "PointRange", [3, 3]), SHELL),
        cgns_solution("Sol", "", ARRAYS),
        cgns_solution("Cells", "CellCenter", {"T": np.array([1.5, 2.5])}),
    )
    path = write_cgns(tmp_path / "box.cgns", cgns_base(FAMILY, zone), libver=libver)
    whole = path.read_bytes()
    capfd.readouterr()
    failed = 0
    for _ in range(60):
        damaged = bytearray(whole)
        start = int(rng.integers(len(whole)))
        for _ in range(rng.integers(1, 30)):
            damaged[min(len(whole) - 1, start + int(rng.integers(200)))] = rng.integers(256)
        path.write_bytes(damaged)
        failed += refused(path)
    assert failed > 5
    assert capfd.readouterr() == ("", "")
