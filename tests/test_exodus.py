"""Exodus files: side sets become sets, variables come from the last time step, damage is one message."""

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
from fluxmesh.surface.readers.netcdf import opened_netcdf
from fluxmesh.surface.readers.skin import corner_rows
from fluxmesh.surface.surface import FaceKind
from tests.mesh_writing import cut, lattice, raised, write_exodus

Read = Callable[..., RawMesh]
Refuse = Callable[..., InputError]

POINTS, HEXES = lattice((2, 1, 1))
# sides of a hexahedron: 1 y = 0, 2 x = 1, 3 y = 1, 4 x = 0, 5 z = 0, 6 z = 1
SETS = [("feed", [1], [4]), ("drain", [2], [2]), ("shell", [1, 1, 1, 1, 2, 2, 2, 2], [6, 5, 3, 1] * 2)]
TIMES = [0.0, 0.5, 0.75]
NODES = {name: np.arange(36.0).reshape(3, 12) / 7 + 100 * k for k, name in enumerate(["p", "vel_x", "vel_y", "vel_z"])}
VERSIONS = [1, 2, 4]


def faces_of(mesh: RawMesh) -> list[list[int]]:
    entries, starts = corner_rows(mesh.connectivity, mesh.offsets, mesh.kinds)
    return [entries[a:b].tolist() for a, b in pairwise(starts)]


def assert_closed(mesh: RawMesh, volume: float) -> None:
    """Every edge is passed once each way, and the volume inside is as told."""
    edges = Counter((a, b) for face in faces_of(mesh) for a, b in zip(face, face[1:] + face[:1]))
    assert set(edges.values()) == {1}
    assert all((b, a) in edges for a, b in edges)
    total = 0.0
    for face in faces_of(mesh):
        corners = np.asarray(mesh.points, float)[face]
        total += np.cross(corners, np.roll(corners, -1, axis=0)).sum(axis=0) @ corners.mean(axis=0) / 6
    assert total == pytest.approx(volume)


def box(path: Path, **more: Any) -> Path:
    return write_exodus(path, POINTS, [("fluid", "HEX8", HEXES)], SETS, **more)


@pytest.mark.parametrize("version", VERSIONS)
def test_side_sets_become_sets(tmp_path: Path, read: Read, version: int) -> None:
    mesh = read(box(tmp_path / "box.exo", times=TIMES, nodes=NODES, version=version))
    assert mesh.source == "box.exo"
    assert_array_equal(mesh.points, POINTS)
    assert_closed(mesh, 2.0)
    assert {name: len(faces) for name, faces in mesh.face_sets.items()} == {"feed": 1, "drain": 1, "shell": 8}
    assert_array_equal(mesh.points[faces_of(mesh)[mesh.face_sets["feed"][0]]][:, 0], 0.0)
    assert_array_equal(mesh.points[faces_of(mesh)[mesh.face_sets["drain"][0]]][:, 0], 2.0)
    for name, values in NODES.items():
        assert_array_equal(mesh.node_arrays[name], values[-1])
    assert_array_equal(mesh.node_arrays["vel"], np.column_stack([NODES[f"vel_{x}"][-1] for x in "xyz"]))
    assert mesh.notes == ("values are those of the last of 3 time steps, 0.75",)
    assert mesh.skipped == {"hex8": 2}
    assert mesh.volume_cells == 2
    assert mesh.derived == ""
    assert mesh.roles == {}
    assert mesh.sets_have is None


@pytest.mark.parametrize("suffix", [".e", ".ex2", ".exii", ".exo", ".exodus", ".g", ".gen"])
def test_suffixes(tmp_path: Path, read: Read, suffix: str) -> None:
    assert read(box(tmp_path / f"box{suffix}")).face_count == 10


def test_vtk_reads_the_same_from_the_file(tmp_path: Path, read: Read) -> None:
    # an outside look at the layout of the files that these tests write, and at the numbers of sides
    from vtkmodules.vtkIOExodus import vtkExodusIIReader

    from fluxmesh.surface.readers.vtk_messages import captured_messages

    pieces = [
        ("hex", "HEX8", "hexahedron"),
        ("tet", "TETRA4", "tetra"),
        ("wedge", "WEDGE6", "wedge"),
        ("pyr", "PYRAMID5", "pyramid"),
    ]
    points, blocks, sets, first = [], [], [], 1
    for number, (name, kind, shape) in enumerate(pieces):
        place, rows = cut(*lattice((1, 1, 1)), shape)
        blocks.append((name, kind, rows[:1] + sum(map(len, points))))
        points.append(place + np.array([3.0 * number, 0, 0]))
        sides = {"hexahedron": 6, "tetra": 4, "wedge": 5, "pyramid": 5}[shape]
        sets += [(f"{name}{side}", [first], [side]) for side in range(1, 1 + sides)]
        first += 1
    path = write_exodus(
        tmp_path / "all.exo",
        np.concatenate(points),
        blocks,
        sets,
        times=[0.0],
        nodes={"p": np.concatenate(points)[None, :, 0]},
    )
    mesh = read(path)
    with captured_messages():
        reader = vtkExodusIIReader()
        reader.SetFileName(str(path))
        reader.UpdateInformation()
        for index in range(len(sets)):
            reader.SetObjectStatus(vtkExodusIIReader.SIDE_SET, index, 1)
        reader.SetObjectArrayStatus(vtkExodusIIReader.NODAL, "p", 1)
        reader.Update()
    theirs = reader.GetOutput().GetBlock(4)
    assert theirs.GetNumberOfBlocks() == len(sets)
    for index, (name, _, _) in enumerate(sets):
        patch = theirs.GetBlock(index)
        assert theirs.GetMetaData(index).Get(theirs.NAME()) == name
        assert (patch.GetNumberOfCells(), patch.GetNumberOfPoints() > 0) == (1, True)
        cell = patch.GetCell(0)
        ids = [cell.GetPointId(k) for k in range(cell.GetNumberOfPoints())]
        wanted = [patch.GetPoint(point) for point in ids]
        face = faces_of(mesh)[mesh.face_sets[name][0]]
        assert {tuple(place) for place in mesh.points[face].tolist()} == set(wanted)
        values = patch.GetPointData().GetArray("p")
        assert sorted(values.GetValue(point) for point in ids) == sorted(mesh.node_arrays["p"][face])


@pytest.mark.parametrize("version", VERSIONS)
def test_variables_of_elements_and_sets(tmp_path: Path, read: Read, version: int) -> None:
    path = box(
        tmp_path / "box.exo",
        times=TIMES,
        nodes={"T": np.arange(36.0).reshape(3, 12)},
        elements={"rho": {1: np.arange(6.0).reshape(3, 2) + 0.25}, "tau": {1: np.ones((3, 2))}},
        on_sets={
            "tau": {3: np.arange(24.0).reshape(3, 8) + 0.5},
            "q": {1: np.array([[7.0], [8.0], [9.5]]), 3: -np.arange(24.0).reshape(3, 8)},
        },
        version=version,
    )
    mesh = read(path)
    cell = np.where(mesh.points[mesh.connectivity].reshape(-1, 4, 3).mean(axis=1)[:, 0] < 1.0, 0, 1)
    assert_array_equal(mesh.face_arrays["rho"], np.array([4.25, 5.25])[cell])
    shell = {(1, 6): 0, (1, 5): 1, (1, 3): 2, (1, 1): 3, (2, 6): 4, (2, 5): 5, (2, 3): 6, (2, 1): 7}
    # faces are in the order of elements and sides
    order = sorted(shell)
    own = mesh.face_arrays["side set/tau"]
    assert_array_equal(own[mesh.face_sets["shell"]], [16.5 + shell[key] for key in order])
    assert np.isnan(own[[*mesh.face_sets["feed"], *mesh.face_sets["drain"]]]).all()
    assert mesh.face_arrays["q"][mesh.face_sets["feed"]].tolist() == [9.5]
    assert_array_equal(mesh.face_arrays["q"][mesh.face_sets["shell"]], [-16.0 - shell[key] for key in order])
    everywhere = {"T", "rho", "tau"}
    assert mesh.sets_have == {
        "feed": everywhere | {"q"},
        "drain": everywhere,
        "shell": everywhere | {"q", "side set/tau"},
    }
    assert mesh.notes[-1] == "values of 'rho', 'tau' on the faces of box.exo are those of the element behind each face"


def test_side_sets_that_overlap_share_their_faces(tmp_path: Path, read: Read) -> None:
    sets = [*SETS, ("all walls", [2, 1], [6, 4]), ("shell", [1], [4])]
    mesh = read(write_exodus(tmp_path / "box.exo", POINTS, [("fluid", "HEX8", HEXES)], sets))
    assert mesh.face_count == 10
    assert mesh.face_sets["feed"][0] in mesh.face_sets["all walls"]
    assert len(mesh.face_sets["shell"]) == 9


def test_file_without_names_is_named_by_number(tmp_path: Path, read: Read) -> None:
    path = write_exodus(tmp_path / "old.exo", POINTS, [("", "HEX", HEXES)], SETS, times=TIMES, nodes=NODES, old=True)
    mesh = read(path)
    assert list(mesh.face_sets) == ["side_set_100", "side_set_200", "side_set_300"]
    for name, values in NODES.items():
        assert_array_equal(mesh.node_arrays[name], values[-1])


def test_shells_are_faces_where_there_are_no_side_sets(tmp_path: Path, read: Read) -> None:
    points, triangles = POINTS, np.array([[0, 3, 4], [0, 4, 1]])
    quads = np.array([[0, 6, 9, 3], [2, 5, 11, 8]])
    path = write_exodus(
        tmp_path / "shells.exo",
        points,
        [("floor", "TRI3", triangles), ("ends", "SHELL4", quads), ("wire", "TRUSS", np.array([[0, 1]]))],
        times=[1.0],
        elements={"q": {1: np.array([[1.5, 2.5]]), 2: np.array([[3.5, 4.5]])}, "only": {2: np.array([[5.0, 6.0]])}},
    )
    mesh = read(path)
    assert faces_of(mesh) == [*triangles.tolist(), *quads.tolist()]
    assert {name: faces.tolist() for name, faces in mesh.face_sets.items()} == {"floor": [0, 1], "ends": [2, 3]}
    assert_array_equal(mesh.face_arrays["q"], [1.5, 2.5, 3.5, 4.5])
    assert_array_equal(mesh.face_arrays["only"], [np.nan, np.nan, 5.0, 6.0])
    assert mesh.skipped == {"truss": 1}
    assert mesh.notes == ()


def test_sides_of_shells_have_two_faces_and_edges(tmp_path: Path, read: Read) -> None:
    shell = ("sheet", "SHELL4", np.array([[0, 6, 9, 3]]))
    sets = [("front", [3], [1]), ("back", [3], [2]), ("rim", [3, 3], [3, 4])]
    mesh = read(write_exodus(tmp_path / "sheet.exo", POINTS, [("fluid", "HEX8", HEXES), shell], sets))
    assert faces_of(mesh) == [[0, 6, 9, 3], [0, 3, 9, 6]]
    assert mesh.skipped == {"hex8": 2, "side that is no face": 2, "shell": 1}
    assert list(mesh.face_sets) == ["front", "back"]


def test_volume_alone_gives_its_skin(tmp_path: Path, read: Read) -> None:
    points, rows = cut(*lattice((2, 1, 1)), "wedge")
    path = write_exodus(
        tmp_path / "box.exo",
        points,
        [("one", "WEDGE", rows[:2]), ("two", "WEDGE6", rows[2:])],
        times=[0.0],
        nodes={"p": points[None, :, 0] + 0.5},
        elements={"T": {1: np.array([[1.5, 2.5]]), 2: np.array([[3.5, 4.5]])}},
    )
    mesh = read(path)
    assert mesh.derived == "the skin of 4 wedges"
    assert_closed(mesh, 2.0)
    assert_array_equal(mesh.node_arrays["p"], mesh.points[:, 0] + 0.5)
    for face, value in zip(faces_of(mesh), mesh.face_arrays["T"]):
        assert set(face) <= set(rows[int(value - 1.5)].tolist())
    assert mesh.skipped == {}


def test_skin_takes_over_side_sets(tmp_path: Path, read: Read) -> None:
    path = write_exodus(
        tmp_path / "box.exo",
        POINTS,
        [("fluid", "HEX8", HEXES)],
        [("feed", [1], [4]), ("between", [1], [2])],
        times=[0.0],
        on_sets={"tau": {1: np.array([[7.5]])}},
    )
    mesh = read(path, skin=True)
    assert_closed(mesh, 2.0)
    assert list(mesh.face_sets) == ["feed"]
    assert_array_equal(mesh.face_arrays["tau"][mesh.face_sets["feed"]], [7.5])
    assert np.isnan(mesh.face_arrays["tau"]).sum() == 9
    assert mesh.skipped == {"face inside the volume": 1}


# Mid-points in the order of the Exodus manual: bottom, upright, top edges; then centres (from memory).
HEX_EDGES = ["12", "23", "34", "41", "15", "26", "37", "48", "56", "67", "78", "85"]
WEDGE_EDGES = ["12", "23", "31", "14", "25", "36", "45", "56", "64"]
HEX_CENTRES = ((*range(8),), (0, 1, 2, 3), (4, 5, 6, 7), (0, 4, 7, 3), (1, 2, 6, 5), (0, 1, 5, 4), (3, 7, 6, 2))
QUADRATIC = {
    "HEX20": ("hexahedron", HEX_EDGES, ()),
    "HEX27": ("hexahedron", HEX_EDGES, HEX_CENTRES),
    "TETRA10": ("tetra", ["12", "23", "31", "14", "24", "34"], ()),
    "WEDGE15": ("wedge", WEDGE_EDGES, ()),
    "PYRAMID13": ("pyramid", ["12", "23", "34", "41", "15", "25", "35", "45"], ()),
}


def quadratic(kind: str) -> tuple[np.ndarray, np.ndarray]:
    shape, edges, centres = QUADRATIC[kind]
    points, rows = cut(*lattice((1, 1, 1)), shape)
    return raised(points, rows, np.array([[int(a) - 1, int(b) - 1] for a, b in edges]), centres)


@pytest.mark.parametrize("kind", sorted(QUADRATIC))
@pytest.mark.parametrize("skin", [True, False])
def test_quadratic_elements(tmp_path: Path, read: Read, kind: str, skin: bool) -> None:
    points, rows = quadratic(kind)
    sides = [[], []] if skin else [[1] * 4, [1, 2, 3, 4]]
    sets = [] if skin else [("walls", *sides)]
    mesh = read(write_exodus(tmp_path / "box.exo", points, [("fluid", kind, rows)], sets))
    if skin:
        assert_closed(mesh, 1.0)
    assert mesh.offsets is not None
    assert mesh.kinds is not None
    for face_kind, (start, stop) in zip(mesh.kinds, pairwise(mesh.offsets)):
        face = mesh.points[mesh.connectivity[start:stop]]
        count = 3 if face_kind == FaceKind.TRIANGLE6 else 4
        assert_allclose(face[count : 2 * count], 0.5 * (face[:count] + np.roll(face[:count], -1, axis=0)), atol=1e-14)
        if face_kind == FaceKind.QUAD9:
            assert_allclose(face[8], face[:4].mean(axis=0), atol=1e-14)
    assert (FaceKind.QUAD9 in mesh.kinds) == (kind == "HEX27")


@pytest.mark.parametrize("kind", ["HEX20", "HEX27", "WEDGE15", "TETRA10"])
def test_vtk_has_the_same_order_of_points(tmp_path: Path, kind: str) -> None:
    from vtkmodules.vtkIOExodus import vtkExodusIIReader

    from fluxmesh.surface.readers.exodus_shapes import shape_of_block
    from fluxmesh.surface.readers.vtk_messages import captured_messages

    points, rows = quadratic(kind)
    path = write_exodus(tmp_path / "box.exo", points, [("fluid", kind, rows[:1])])
    with captured_messages():
        reader = vtkExodusIIReader()
        reader.SetFileName(str(path))
        reader.Update()
    theirs = reader.GetOutput().GetBlock(0).GetBlock(0)
    assert (theirs.GetNumberOfCells(), theirs.GetNumberOfPoints()) == (1, rows.shape[1])
    cell = theirs.GetCell(0)
    places = [theirs.GetPoint(cell.GetPointId(k)) for k in range(cell.GetNumberOfPoints())]
    order = shape_of_block(kind, rows.shape[1]).order or range(rows.shape[1])
    assert_allclose(places, points[rows[0, list(order)]], atol=0.0)


def test_file_with_64_bit_data(tmp_path: Path) -> None:
    # by hand after the specification of CDF-5: two variables, one with records
    def number(value: int, size: int = 8) -> bytes:
        return value.to_bytes(size, "big")

    def name(text: str) -> bytes:
        return number(len(text)) + text.encode().ljust(-(-len(text) // 4) * 4, b"\0")

    def variable(text: str, dims: list[int], kind: int, size: int, begin: int) -> bytes:
        head = name(text) + number(len(dims)) + b"".join(map(number, dims))
        return head + number(0, 4) + number(0) + number(kind, 4) + number(size) + number(begin)

    def header(begin: int) -> bytes:
        dims = number(10, 4) + number(2) + name("t") + number(0) + name("n") + number(3)
        variables = (
            number(11, 4) + number(2) + variable("id", [1], 10, 24, begin) + variable("x", [0, 1], 6, 24, begin + 24)
        )
        return b"CDF\x05" + number(2) + dims + number(0, 4) + number(0) + variables

    path = tmp_path / "wide.nc"
    begin = len(header(0))
    ids, x = np.array([5, -6, 2**40], dtype=">i8"), np.arange(6.0).astype(">f8")
    path.write_bytes(header(begin) + ids.tobytes() + x.tobytes())
    with opened_netcdf(path) as variables:
        assert_array_equal(variables.array("id"), ids)
        assert_array_equal(variables.array("x"), x.reshape(2, 3))
        assert_array_equal(variables.array("x", 1), x[3:])
        assert variables.array("id").dtype == np.dtype("i8")
        assert "y" not in variables


@pytest.mark.parametrize("version", [1, 2])
def test_classic_variables_are_those_that_scipy_wrote(tmp_path: Path, version: int) -> None:
    from scipy.io import netcdf_file

    path = tmp_path / "some.nc"
    wanted: dict[str, np.ndarray] = {}
    rng = np.random.default_rng(1)
    with netcdf_file(path, "w", version=version) as file:
        file.createDimension("t", None)
        for key, size in (("a", 3), ("b", 5)):
            file.createDimension(key, size)
        file.note = "a note"
        for index, (kind, dims) in enumerate(
            [
                ("b", ("a",)),
                ("h", ("t", "a")),
                ("i", ("a", "b")),
                ("f", ("t", "b")),
                ("d", ("t",)),
                ("h", ("t", "a", "b")),
            ]
        ):
            shape = tuple({"t": 4, "a": 3, "b": 5}[dim] for dim in dims)
            values = (rng.random(shape) * 100).astype(kind)
            variable = file.createVariable(f"v{index}", kind, dims)
            variable.units, variable.factor = "m", 2.5
            variable[:] = values
            wanted[f"v{index}"] = values
    with opened_netcdf(path) as variables:
        for key, values in wanted.items():
            assert_array_equal(variables.array(key), values)
            assert variables.shape(key) == values.shape
            assert variables.attribute(key, "units") == "m"
            assert variables.attribute(key, "factor") == ""
            if values.ndim and len(values) > 2:
                assert_array_equal(variables.array(key, 2), values[2])


@pytest.mark.parametrize("version", VERSIONS)
@pytest.mark.parametrize("fraction", [0.01, 0.1, 0.35, 0.6, 0.85, 0.99])
def test_file_cut_short(tmp_path: Path, refuse: Refuse, fraction: float, version: int) -> None:
    path = box(tmp_path / "box.exo", times=TIMES, nodes=NODES, version=version)
    whole = path.read_bytes()
    path.write_bytes(whole[: int(len(whole) * fraction)])
    error = refuse(path)
    if version != 4 and fraction > 0.02:
        assert "It was cut short" in error.remedy


def test_file_that_is_no_exodus_file(tmp_path: Path, refuse: Refuse) -> None:
    import h5py
    from scipy.io import netcdf_file

    path = tmp_path / "box.exo"
    path.write_bytes(b"Dear all,\nhere is the mesh.\n")
    refuse(path, "is no netCDF file")
    with h5py.File(path, "w") as file:
        file["x"] = [1, 2, 3]
    refuse(path, "has no variable 'coord'")
    with netcdf_file(path, "w") as file:
        file.createDimension("n", 2)
        file.createVariable("n", "d", ("n",))[:] = [1.0, 2.0]
    refuse(path, "has no variable 'coord'")


def test_package_that_is_not_installed_is_named(
    tmp_path: Path, refuse: Refuse, monkeypatch: pytest.MonkeyPatch
) -> None:
    import sys

    path = box(tmp_path / "box.exo", version=4)
    monkeypatch.setitem(sys.modules, "h5py", None)
    refuse(path, "is a netCDF-4 file, which needs the package h5py to be read. Install it: pip install h5py")


@pytest.mark.parametrize(
    ("blocks", "sets", "match"),
    [
        ([("a", "HEX8", HEXES + 9)], SETS, "face 0 uses point 16, but there are 12 points"),
        ([("a", "HEX8", HEXES + 9)], [], "a hexahedron uses point 20, but there are 12 points"),
        ([("a", "HEX8", HEXES)], [("x", [3], [1])], "side set 'x' uses side 1 of element 3, but there are 2 elements"),
        ([("a", "HEX8", HEXES)], [("x", [1], [0])], "side set 'x' uses side 0 of element 1"),
        ([("a", "BLOB", HEXES)], SETS, "side set 'feed' has sides of elements of type blob, which cannot be read"),
        ([("a", "BLOB", HEXES)], [], "volume cells whose skin cannot be taken: 2 of type blob"),
        ([("a", "SHELL5", HEXES[:, :5])], [], "has 2 faces of type shell5 with 5 points, which cannot be read"),
        ([("a", "TRUSS", HEXES[:, :2])], [], "holds no faces, only cells of other kinds: 2 of type truss"),
    ],
)
def test_damaged_elements(tmp_path: Path, refuse: Refuse, blocks: Any, sets: Any, match: str) -> None:
    refuse(write_exodus(tmp_path / "box.exo", POINTS, blocks, sets), match)


def test_variables_of_the_wrong_length(tmp_path: Path, refuse: Refuse) -> None:
    import h5py

    path = box(tmp_path / "box.exo", times=TIMES, nodes=NODES, version=4)
    with h5py.File(path, "a") as file:
        del file["vals_nod_var2"]
        file["vals_nod_var2"] = np.ones((3, 11))
    refuse(path, "array 'vel_x' holds 11 values, but there are 12 points", FieldError)
    with h5py.File(path, "a") as file:
        del file["vals_nod_var2"]
    refuse(path, "has no variable 'vals_nod_var2'")
    with h5py.File(path, "a") as file:
        del file["side_ss3"]
        file["side_ss3"] = [1, 2]
        file["vals_nod_var2"] = np.ones((3, 12))
    refuse(path, "side set 'shell' has 8 elements and 2 sides")


def test_plane_mesh_lies_at_zero(tmp_path: Path, read: Read) -> None:
    from scipy.io import netcdf_file

    with netcdf_file(tmp_path / "flat.exo", "w") as file:
        for name, size in (("num_dim", 2), ("n", 3), ("one", 1)):
            file.createDimension(name, size)
        for name, values in (("coordx", [0.0, 1.0, 1.0]), ("coordy", [0.0, 0.0, 1.0])):
            file.createVariable(name, "d", ("n",))[:] = values
        file.createVariable("eb_prop1", "i", ("one",))[:] = [4]
        rows = file.createVariable("connect1", "i", ("one", "n"))
        rows[:] = [[1, 2, 3]]
        rows.elem_type = b"TRI"
    mesh = read(tmp_path / "flat.exo")
    assert_array_equal(mesh.points, [[0, 0, 0], [1, 0, 0], [1, 1, 0]])
    assert list(mesh.face_sets) == ["block_4"]


@pytest.mark.parametrize("kind", ["link", "external", "virtual", "huge"])
def test_variables_kept_elsewhere_are_not_read(tmp_path: Path, refuse: Refuse, kind: str) -> None:
    import h5py

    path = box(tmp_path / "box.exo", version=4)
    other = box(tmp_path / "other.exo", version=4)
    with h5py.File(path, "a") as file:
        del file["coordy"]
        if kind == "link":
            file["coordy"] = h5py.ExternalLink(str(other), "coordy")
        elif kind == "external":
            file.create_dataset("coordy", shape=(12,), dtype="f8", external=[(str(other), 0, 96)])
        elif kind == "virtual":
            layout = h5py.VirtualLayout(shape=(12,), dtype="f8")
            layout[:] = h5py.VirtualSource(other, "coordy", shape=(12,))
            file.create_virtual_dataset("coordy", layout)
        else:
            file.create_dataset("coordy", shape=(10**12,), dtype="f8", chunks=(1024,))
    if kind == "link":
        # a variable that is not in the file is not there
        refuse(path, "has no variable 'coordy'")
    elif kind == "huge":
        refuse(path, "variable 'coordy' announces 8000000000000 bytes, but 0 are stored")
    else:
        refuse(path, "variable 'coordy' keeps its data in another file")


def refused(path: Path) -> bool:
    """Read a damaged file; the only error there may be names it."""
    try:
        read_mesh(path)
    except InputError as error:
        return str(path) in str(error) or pytest.fail(str(error))
    return False


@pytest.mark.parametrize("version", VERSIONS)
def test_random_damage_ends_in_one_message(tmp_path: Path, capfd: pytest.CaptureFixture[str], version: int) -> None:
    rng = np.random.default_rng(4)
    path = box(tmp_path / "box.exo", times=TIMES, nodes=NODES, version=version)
    whole = path.read_bytes()
    capfd.readouterr()
    failed = 0
    for _ in range(80):
        damaged = bytearray(whole)
        start = int(rng.integers(len(whole)))
        for _ in range(rng.integers(1, 30)):
            damaged[min(len(whole) - 1, start + int(rng.integers(200)))] = rng.integers(256)
        path.write_bytes(damaged)
        failed += refused(path)
    assert failed > 5
    assert capfd.readouterr() == ("", "")
