"""Multi-block and partitioned VTK sets: blocks become sets, pieces are one surface, damage is named."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_array_equal

from fluxmesh.errors import FieldError, InputError
from fluxmesh.surface.files import known_suffixes, read_mesh
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.skin import corner_rows
from tests.mesh_writing import (
    BOX_POINTS,
    BOX_TRIANGLES,
    PRESSURE,
    REGION,
    VELOCITY,
    box_polydata,
    cut,
    lattice,
    write_vtk_xml,
)

Read = Callable[..., RawMesh]
Refuse = Callable[..., InputError]


def refused(path: Path) -> bool:
    """Read a damaged file; the only error there may be names it."""
    try:
        read_mesh(path)
    except InputError as error:
        return str(path) in str(error) or pytest.fail(str(error))
    return False


def blocks(tree: dict[str | None, Any]) -> Any:
    """Return a multi-block set; a nested dict is a block of blocks, a list one of pieces."""
    from vtkmodules.vtkCommonDataModel import vtkMultiBlockDataSet, vtkMultiPieceDataSet

    made = vtkMultiBlockDataSet()
    for index, (name, part) in enumerate(tree.items()):
        if isinstance(part, dict):
            part = blocks(part)
        elif isinstance(part, list):
            pieces = vtkMultiPieceDataSet()
            for number, piece in enumerate(part):
                pieces.SetPiece(number, piece)
            part = pieces
        made.SetBlock(index, part)
        if name is not None:
            made.GetMetaData(index).Set(made.NAME(), name)
    return made


def write_blocks(tree: dict[str | None, Any], path: Path) -> Path:
    """Write a multi-block set with VTK's own writer."""
    from vtkmodules.vtkIOXML import vtkXMLMultiBlockDataWriter

    writer = vtkXMLMultiBlockDataWriter()
    writer.SetInputDataObject(blocks(tree))
    writer.SetFileName(str(path))
    writer.Write()
    return path


def side(first: int, *arrays: str) -> Any:
    """Return two triangles of the box, from face `first` on, with their own points and some arrays."""
    import pyvista as pv

    used, faces = np.unique(BOX_TRIANGLES[first : first + 2], return_inverse=True)
    data = pv.PolyData.from_regular_faces(BOX_POINTS[used], faces.reshape(2, 3))
    if "p" in arrays:
        data.point_data["p"] = PRESSURE[used]
    if "U" in arrays:
        data.point_data["U"] = VELOCITY[used]
    if "region" in arrays:
        data.cell_data["region"] = REGION[first : first + 2]
    if "name" in arrays:
        data.cell_data["name"] = ["a", "b"]
    return data


def cubes(first: int, count: int, shape: str = "hexahedron") -> Any:
    """Return a row of unit cubes from x = `first` on as a grid, with arrays."""
    import pyvista as pv

    points, rows = cut(*lattice((count, 1, 1)), shape)
    points[:, 0] += first
    grid = pv.UnstructuredGrid({12 if shape == "hexahedron" else 10: rows}, points)
    grid.point_data["p"] = points @ [1.0, 10.0, 100.0]
    grid.cell_data["T"] = first + np.arange(len(rows)) / 8
    return grid


def corner_places(mesh: RawMesh) -> list[frozenset[tuple[float, ...]]]:
    entries, starts = corner_rows(mesh.connectivity, mesh.offsets, mesh.kinds)
    return [frozenset(map(tuple, mesh.points[entries[a:b]].tolist())) for a, b in pairwise(starts)]


def assert_closed_by_place(mesh: RawMesh) -> None:
    """Every edge between two places is passed once each way."""
    entries, starts = corner_rows(mesh.connectivity, mesh.offsets, mesh.kinds)
    edges: Counter[tuple[tuple[float, ...], tuple[float, ...]]] = Counter()
    for a, b in pairwise(starts):
        places = [tuple(place) for place in mesh.points[entries[a:b]].tolist()]
        edges.update(zip(places, places[1:] + places[:1]))
    assert set(edges.values()) == {1}
    assert all((end, start) in edges for start, end in edges)


def test_suffixes_are_known() -> None:
    assert {".vtm", ".vtmb", ".vtpc", ".pvtp", ".pvtu"} <= set(known_suffixes())


@pytest.mark.parametrize("suffix", [".vtm", ".vtmb"])
def test_blocks_become_sets_of_their_path(tmp_path: Path, read: Read, suffix: str) -> None:
    tree = {
        "feed": side(0, "p", "U", "region", "name"),
        "shell": {"left": side(2, "p", "U", "region"), None: side(4, "p", "region"), "gone": None},
        None: side(6, "p"),
        "cut": [side(8, "p"), side(10, "p", "region")],
    }
    mesh = read(write_blocks(tree, tmp_path / f"box{suffix}"))
    assert mesh.source == f"box{suffix}"
    assert {name: faces.tolist() for name, faces in mesh.face_sets.items()} == {
        "feed": [0, 1],
        "shell/left": [2, 3],
        "shell/block_1": [4, 5],
        "block_2": [6, 7],
        "cut": [8, 9, 10, 11],
    }
    # six blocks of four points each, not merged
    assert mesh.points.shape == (24, 3)
    assert_array_equal(mesh.points[mesh.connectivity], BOX_POINTS[BOX_TRIANGLES.ravel()])
    assert_array_equal(mesh.node_arrays["p"][mesh.connectivity], PRESSURE[BOX_TRIANGLES.ravel()])
    velocity = mesh.node_arrays["U"][mesh.connectivity]
    assert_array_equal(velocity[:12], VELOCITY[BOX_TRIANGLES[:4].ravel()])
    assert np.isnan(velocity[12:]).all()
    region = mesh.face_arrays["region"]
    assert_array_equal(region, [0, 0, 1, 1, 2, 2, *[np.nan] * 4, 5, 5])
    assert mesh.face_arrays["name"].tolist() == ["a", "b"] + [""] * 10
    assert mesh.sets_have == {
        "feed": {"p", "U", "region", "name"},
        "shell/left": {"p", "U", "region"},
        "shell/block_1": {"p", "region"},
        "block_2": {"p"},
        "cut": {"p"},
    }


def test_blocks_that_have_the_same_arrays_say_nothing_of_it(tmp_path: Path, read: Read) -> None:
    mesh = read(write_blocks({"a": side(0, "p", "region"), "b": side(2, "p", "region")}, tmp_path / "box.vtm"))
    assert mesh.sets_have is None
    assert mesh.face_arrays["region"].dtype == REGION.dtype
    assert_array_equal(mesh.face_arrays["region"], [0, 0, 1, 1])


def test_partitioned_collection(tmp_path: Path, read: Read) -> None:
    from vtkmodules.vtkCommonDataModel import vtkPartitionedDataSetCollection
    from vtkmodules.vtkIOParallelXML import vtkXMLPartitionedDataSetCollectionWriter

    data = vtkPartitionedDataSetCollection()
    for index, (name, parts) in enumerate([("feed", [0]), ("shell", [2, 4]), (None, [6, 8, 10])]):
        data.SetNumberOfPartitions(index, len(parts))
        for number, first in enumerate(parts):
            data.SetPartition(index, number, side(first, "p", "U"))
        if name:
            data.GetMetaData(index).Set(data.NAME(), name)
    writer = vtkXMLPartitionedDataSetCollectionWriter()
    writer.SetInputDataObject(data)
    writer.SetFileName(str(tmp_path / "box.vtpc"))
    writer.Write()
    mesh = read(tmp_path / "box.vtpc")
    assert {name: faces.tolist() for name, faces in mesh.face_sets.items()} == {
        "feed": [0, 1],
        "shell": [2, 3, 4, 5],
        "block_2": [6, 7, 8, 9, 10, 11],
    }
    assert_array_equal(mesh.points[mesh.connectivity], BOX_POINTS[BOX_TRIANGLES.ravel()])
    assert_array_equal(mesh.node_arrays["U"][mesh.connectivity], VELOCITY[BOX_TRIANGLES.ravel()])


def write_pieces(path: Path, pieces: list[Any]) -> Path:
    """Write a data set in pieces, the file that lists them by hand."""
    grid = path.suffix == ".pvtu"
    kind = "PUnstructuredGrid" if grid else "PPolyData"
    lines = []
    for number, piece in enumerate(pieces):
        name = f"{path.stem}_{number}.{path.suffix[2:]}"
        write_vtk_xml(piece, path.parent / name)
        lines.append(f'    <Piece Source="{name}"/>')
    path.write_text(
        f'<?xml version="1.0"?>\n<VTKFile type="{kind}" version="0.1">\n  <{kind} GhostLevel="0">\n'
        + "\n".join(lines)
        + f"\n  </{kind}>\n</VTKFile>\n"
    )
    return path


def test_pieces_are_one_surface_without_sets(tmp_path: Path, read: Read) -> None:
    import pyvista as pv

    parts = [side(0, "p", "region"), pv.PolyData(), side(2, "p", "region")]
    parts[2].cell_data["vtkGhostType"] = np.array([0, 1], dtype=np.uint8)
    mesh = read(write_pieces(tmp_path / "box.pvtp", parts))
    assert mesh.source == "box.pvtp"
    assert mesh.face_sets == {}
    assert mesh.skipped == {"ghost": 1}
    assert_array_equal(mesh.points[mesh.connectivity], BOX_POINTS[BOX_TRIANGLES[:3].ravel()])
    assert_array_equal(mesh.node_arrays["p"][mesh.connectivity], PRESSURE[BOX_TRIANGLES[:3].ravel()])
    assert_array_equal(mesh.face_arrays["region"], [0, 0, 1])


def test_pieces_written_by_vtk(tmp_path: Path, read: Read) -> None:
    from vtkmodules.vtkIOParallelXML import vtkXMLPPolyDataWriter

    writer = vtkXMLPPolyDataWriter()
    writer.SetInputDataObject(box_polydata())
    writer.SetFileName(str(tmp_path / "box.pvtp"))
    writer.Write()
    mesh = read(tmp_path / "box.pvtp")
    assert_array_equal(mesh.points, BOX_POINTS)
    assert_array_equal(mesh.node_arrays["U"], VELOCITY)
    assert_array_equal(mesh.face_arrays["region"], REGION)


@pytest.mark.parametrize("shape", ["hexahedron", "tetra"])
def test_skin_of_a_volume_in_pieces_is_that_of_the_whole(tmp_path: Path, read: Read, shape: str) -> None:
    whole = read(write_vtk_xml(cubes(0, 4, shape), tmp_path / "whole.vtu"))
    split = read(write_pieces(tmp_path / "split.pvtu", [cubes(0, 2, shape), cubes(2, 1, shape), cubes(3, 1, shape)]))
    assert split.face_sets == {}
    assert Counter(corner_places(split)) == Counter(corner_places(whole))
    assert_closed_by_place(split)
    assert_array_equal(split.node_arrays["p"], split.points @ [1.0, 10.0, 100.0])
    between = 2 if shape == "hexahedron" else 4
    assert split.notes[-1] == f"{between} faces between blocks of split.pvtu lie inside the volume"
    assert split.derived == f"the skin of {'4 hexahedra' if shape == 'hexahedron' else '24 tetrahedra'}"


def test_thin_wall_within_a_piece_stays(tmp_path: Path, read: Read) -> None:
    import pyvista as pv

    points, rows = lattice((2, 1, 1))
    doubled = pv.UnstructuredGrid({12: np.array([rows[0], rows[1] + len(points)])}, np.concatenate([points, points]))
    mesh = read(write_pieces(tmp_path / "split.pvtu", [doubled, cubes(2, 1)]))
    # two sides of the wall at x = 1, and no face at x = 2
    ends = Counter(float(next(iter(place))[0]) for place in corner_places(mesh) if len({x for x, _, _ in place}) == 1)
    assert ends == {0.0: 1, 1.0: 2, 3.0: 1}


def test_ghost_layers_of_pieces_do_not_count(tmp_path: Path, read: Read) -> None:
    left, right = cubes(0, 3), cubes(1, 3)
    left.cell_data["vtkGhostType"] = np.array([0, 0, 1], dtype=np.uint8)
    right.cell_data["vtkGhostType"] = np.array([1, 0, 0], dtype=np.uint8)
    split = read(write_pieces(tmp_path / "split.pvtu", [left, right]))
    whole = read(write_vtk_xml(cubes(0, 4), tmp_path / "whole.vtu"))
    assert Counter(corner_places(split)) == Counter(corner_places(whole))


def boundary(first: float, tag: float) -> Any:
    """Return the square x = `first` of the row of cubes, with a value on the face."""
    import pyvista as pv

    corners = np.array([[first, 0, 0], [first, 1, 0], [first, 1, 1], [first, 0, 1]], dtype=np.float64)
    square = pv.PolyData.from_regular_faces(corners, [[0, 1, 2, 3]])
    square.cell_data["tau"] = [tag]
    return square


def test_faces_of_some_blocks_are_taken_and_volumes_passed_over(tmp_path: Path, read: Read) -> None:
    tree = {"inside": cubes(0, 2), "edge": {"feed": boundary(0, 0.5), "drain": boundary(2, 1.5)}}
    mesh = read(write_blocks(tree, tmp_path / "case.vtm"))
    assert {name: faces.tolist() for name, faces in mesh.face_sets.items()} == {"edge/feed": [0], "edge/drain": [1]}
    assert mesh.volume_cells == 2
    assert mesh.skipped == {"hexahedron": 2}
    assert mesh.derived == ""
    assert list(mesh.face_arrays) == ["tau"]


def test_skin_of_blocks_takes_over_the_faces_of_the_others(tmp_path: Path, read: Read) -> None:
    tree = {"one": cubes(0, 2), "two": cubes(2, 1), "edge": {"feed": boundary(0, 0.5), "mid": boundary(1, 9.5)}}
    mesh = read(write_blocks(tree, tmp_path / "case.vtm"), skin=True)
    assert mesh.derived == "the skin of 3 hexahedra"
    assert mesh.face_count == 14
    assert_closed_by_place(mesh)
    assert {name: len(faces) for name, faces in mesh.face_sets.items()} == {"one": 8, "two": 5, "edge/feed": 1}
    feed = mesh.face_sets["edge/feed"]
    assert corner_places(mesh)[feed[0]] == frozenset([(0, 0, 0), (0, 1, 0), (0, 1, 1), (0, 0, 1)])
    assert mesh.face_arrays["tau"][feed].tolist() == [0.5]
    assert np.isnan(np.delete(mesh.face_arrays["tau"], feed)).all()
    assert mesh.skipped == {"face inside the volume": 1}
    assert mesh.sets_have == {"one": {"p", "T"}, "two": {"p", "T"}, "edge/feed": {"p", "T", "tau"}}
    # the value of the cell behind each face
    assert sorted(set(mesh.face_arrays["T"].tolist())) == [0.0, 0.125, 2.0]


def test_volumes_alone_become_sets_of_their_blocks(tmp_path: Path, read: Read) -> None:
    mesh = read(write_blocks({"one": cubes(0, 2), "two": cubes(2, 1)}, tmp_path / "case.vtm"))
    assert {name: len(faces) for name, faces in mesh.face_sets.items()} == {"one": 9, "two": 5}
    assert_closed_by_place(mesh)


def test_block_in_pieces(tmp_path: Path, read: Read) -> None:
    (tmp_path / "parts").mkdir()
    write_pieces(tmp_path / "parts" / "shell.pvtp", [side(2, "p"), side(4, "p")])
    write_vtk_xml(side(0, "p"), tmp_path / "parts" / "feed.vtp")
    (tmp_path / "box.vtm").write_text(
        '<VTKFile type="vtkMultiBlockDataSet"><vtkMultiBlockDataSet>'
        '<DataSet index="0" name="feed" file="parts\\feed.vtp"/>'
        '<DataSet index="1" name="shell" file="parts/shell.pvtp"/>'
        "</vtkMultiBlockDataSet></VTKFile>"
    )
    mesh = read(tmp_path / "box.vtm")
    assert {name: faces.tolist() for name, faces in mesh.face_sets.items()} == {"feed": [0, 1], "shell": [2, 3, 4, 5]}
    assert_array_equal(mesh.points[mesh.connectivity], BOX_POINTS[BOX_TRIANGLES[:6].ravel()])


def test_blocks_of_other_kinds_are_passed_over_and_said(tmp_path: Path, read: Read, refuse: Refuse) -> None:
    import pyvista as pv

    image = pv.ImageData(dimensions=(3, 3, 3))
    mesh = read(write_blocks({"feed": side(0, "p"), "far": {"grid": image}}, tmp_path / "box.vtm"))
    assert mesh.notes == ("block 'far/grid' holds a data set of kind ImageData and was passed over",)
    assert list(mesh.face_sets) == ["feed"]
    refuse(
        write_blocks({"grid": image}, tmp_path / "image.vtm"),
        "holds no faces in any of its blocks; block 'grid' holds a data set of kind ImageData and was passed over",
    )


def test_missing_block_is_named(tmp_path: Path, refuse: Refuse) -> None:
    path = write_blocks({"feed": side(0, "p"), "shell": {"left": side(2, "p")}}, tmp_path / "box.vtm")
    (tmp_path / "box" / "box_1.vtp").unlink()
    refuse(path, r"box.vtm: block 'shell/left': its part box/box_1.vtp is missing. Copy the whole set")
    (tmp_path / "box" / "box_1.vtp").touch()
    refuse(path, r"block 'shell/left': its part box/box_1.vtp is empty")
    (tmp_path / "box" / "box_1.vtp").unlink()
    (tmp_path / "box" / "box_1.vtp").mkdir()
    refuse(path, r"block 'shell/left': its part box/box_1.vtp is no file")


@pytest.mark.parametrize("fraction", [0.05, 0.3, 0.6, 0.9, 0.99])
def test_block_cut_short_is_named(tmp_path: Path, refuse: Refuse, fraction: float) -> None:
    path = write_blocks({"feed": side(0, "p"), "shell": side(2, "p")}, tmp_path / "box.vtm")
    part = tmp_path / "box" / "box_1.vtp"
    part.write_bytes(part.read_bytes()[: int(part.stat().st_size * fraction)])
    refuse(path, r"box.vtm: block 'shell' \(box/box_1.vtp\): ")


def test_missing_and_damaged_pieces_are_named(tmp_path: Path, refuse: Refuse) -> None:
    path = write_pieces(tmp_path / "box.pvtp", [side(0, "p"), side(2, "p")])
    part = tmp_path / "box_1.vtp"
    whole = part.read_bytes()
    part.write_bytes(whole[:-80])
    refuse(path, r"box.pvtp: piece '1' \(box_1.vtp\): the closing tag </VTKFile> is missing")
    part.unlink()
    refuse(path, r"box.pvtp: piece '1': its part box_1.vtp is missing")
    path.write_text(path.read_text().replace('Source="box_1.vtp"', ""))
    refuse(path, "its piece 1 names no file")


@pytest.mark.parametrize("fraction", [0.1, 0.5, 0.9, 0.97])
@pytest.mark.parametrize("suffix", [".vtm", ".pvtp"])
def test_list_cut_short(tmp_path: Path, refuse: Refuse, suffix: str, fraction: float) -> None:
    path = tmp_path / f"box{suffix}"
    if suffix == ".vtm":
        write_blocks({"feed": side(0, "p"), "shell": side(2, "p")}, path)
    else:
        write_pieces(path, [side(0, "p"), side(2, "p")])
    whole = path.read_bytes()
    path.write_bytes(whole[: int(len(whole) * fraction)])
    refuse(path, "its XML cannot be read .* damaged or cut short")


@pytest.mark.parametrize(
    "reference",
    [
        *("/tmp/box_0.vtp", "../box_0.vtp", "box/../../box_0.vtp", "..\\box_0.vtp", "C:\\box_0.vtp", "C:box_0.vtp"),
        *("file:///tmp/box_0.vtp", "http://example.org/box_0.vtp", "\\\\server\\share\\box_0.vtp", "", "."),
    ],
)
@pytest.mark.parametrize("suffix", [".vtm", ".pvtp", ".vtpc"])
def test_nothing_outside_the_folder_is_opened(
    tmp_path: Path, refuse: Refuse, monkeypatch: pytest.MonkeyPatch, suffix: str, reference: str
) -> None:
    folder = tmp_path / "inner"
    folder.mkdir()
    write_vtk_xml(side(0, "p"), tmp_path / "box_0.vtp")
    path = folder / f"box{suffix}"
    body = {
        ".vtm": '<VTKFile type="vtkMultiBlockDataSet"><vtkMultiBlockDataSet><DataSet name="a" file="{}"/>'
        "</vtkMultiBlockDataSet></VTKFile>",
        ".vtpc": '<VTKFile type="vtkPartitionedDataSetCollection"><vtkPartitionedDataSetCollection>'
        '<Partitions name="a"><DataSet file="{}"/></Partitions></vtkPartitionedDataSetCollection></VTKFile>',
        ".pvtp": '<VTKFile type="PPolyData"><PPolyData><Piece Source="{}"/></PPolyData></VTKFile>',
    }[suffix]
    path.write_text(body.format(reference))
    opened: list[Path] = []
    original = Path.open

    def watched(self: Path, *arguments: Any, **options: Any) -> Any:
        opened.append(self)
        return original(self, *arguments, **options)

    monkeypatch.setattr(Path, "open", watched)
    refuse(path, r"names the file '.*', which is not in its own folder. Put the parts beside")
    assert set(opened) == {path}


@pytest.mark.parametrize("encoding", ["utf-8", "utf-16"])
@pytest.mark.parametrize(
    "subset",
    [
        '<!DOCTYPE VTKFile [<!ENTITY part SYSTEM "file:///etc/hostname">]>',
        '<!DOCTYPE VTKFile SYSTEM "http://example.org/x.dtd">',
        '<!DOCTYPE VTKFile [<!ENTITY a "aaaaaaaaaa"><!ENTITY part "&a;&a;&a;&a;&a;&a;&a;&a;">]>',
    ],
)
def test_entities_are_never_resolved(tmp_path: Path, refuse: Refuse, subset: str, encoding: str) -> None:
    path = tmp_path / "box.vtm"
    text = (
        f'<?xml version="1.0" encoding="{encoding}"?>{subset}<VTKFile type="vtkMultiBlockDataSet">'
        '<vtkMultiBlockDataSet><DataSet name="a">&part;</DataSet></vtkMultiBlockDataSet></VTKFile>'
    )
    path.write_bytes(text.encode(encoding))
    refuse(path, r"its XML cannot be read \(a document type, which could name other files\)")


def test_entity_in_a_block_is_not_resolved(tmp_path: Path, refuse: Refuse) -> None:
    secret = tmp_path / "secret.txt"
    secret.write_text("0 0 0 1 0 0 1 1 0 0 1 0")
    path = write_blocks({"feed": side(0)}, tmp_path / "box.vtm")
    points = '<DataArray type="Float32" Name="Points" NumberOfComponents="3" format="ascii">&x;</DataArray>'
    (tmp_path / "box" / "box_0.vtp").write_text(
        f'<?xml version="1.0"?><!DOCTYPE VTKFile [<!ENTITY x SYSTEM "{secret}">]>'
        '<VTKFile type="PolyData" version="0.1"><PolyData>'
        f'<Piece NumberOfPoints="4" NumberOfPolys="1"><Points>{points}</Points><Polys>'
        '<DataArray type="Int64" Name="connectivity" format="ascii">0 1 2 3</DataArray>'
        '<DataArray type="Int64" Name="offsets" format="ascii">4</DataArray></Polys></Piece></PolyData></VTKFile>'
    )
    refuse(path, "'Points' of Points holds 1 values, but there are 4 points")


@pytest.mark.parametrize(
    ("text", "match"),
    [
        ("Dear all,\nhere is the mesh.\n", "its XML cannot be read"),
        ("<svg></svg>", "is no VTK XML file"),
        ('<VTKFile type="ImageData"><ImageData/></VTKFile>', "holds a data set of kind ImageData. Kinds that list"),
        ("<VTKFile/>", "holds a data set of kind nothing"),
        ('<VTKFile type="PPolyData"></VTKFile>', "holds a data set of kind PPolyData"),
        ('<VTKFile type="PPolyData"><PPolyData/></VTKFile>', "holds no faces in any of its blocks"),
        (
            '<VTKFile type="vtkMultiBlockDataSet"><vtkMultiBlockDataSet>'
            + '<Block name="a">' * 60
            + "</Block>" * 60
            + "</vtkMultiBlockDataSet></VTKFile>",
            "has blocks within blocks, more than 50 deep",
        ),
    ],
)
def test_list_of_another_kind(tmp_path: Path, refuse: Refuse, text: str, match: str) -> None:
    (tmp_path / "box.vtm").write_text(text)
    refuse(tmp_path / "box.vtm", match)


def test_list_that_lists_itself(tmp_path: Path, refuse: Refuse) -> None:
    (tmp_path / "box.vtm").write_text(
        '<VTKFile type="vtkMultiBlockDataSet"><vtkMultiBlockDataSet><DataSet name="a" file="box.vtm"/>'
        "</vtkMultiBlockDataSet></VTKFile>"
    )
    refuse(tmp_path / "box.vtm", "lists files that list files, more than 50 deep")


def test_list_that_is_too_large_to_be_one(tmp_path: Path, refuse: Refuse, monkeypatch: pytest.MonkeyPatch) -> None:
    from fluxmesh.surface.readers import xml_index

    monkeypatch.setattr(xml_index, "_MOST_BYTES", 200)
    refuse(write_blocks({"feed": side(0)}, tmp_path / "box.vtm"), "is larger than 200 bytes")


def test_arrays_that_differ_between_blocks(tmp_path: Path, refuse: Refuse) -> None:
    one, two = side(0), side(2)
    one.point_data["U"] = np.zeros((4, 3))
    two.point_data["U"] = np.zeros(4)
    path = write_blocks({"feed": one, "shell": two}, tmp_path / "box.vtm")
    with pytest.raises(FieldError, match=r"array 'U' has 3 components in 'feed.*' and 1 in 'shell"):
        read_mesh(path)


def test_array_of_the_wrong_length_names_the_block(tmp_path: Path, refuse: Refuse) -> None:
    path = write_blocks({"feed": side(0, "p")}, tmp_path / "box.vtm")
    write_vtk_xml(side(0, "p"), tmp_path / "box" / "box_0.vtp", "ascii")
    part = tmp_path / "box" / "box_0.vtp"
    part.write_text(part.read_text().replace('NumberOfPoints="4"', 'NumberOfPoints="3"'))
    refuse(path, r"block 'feed' \(box/box_0.vtp\): array 'p' holds 4 values, but there are 3 points", FieldError)


def test_random_damage_ends_in_one_message(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    rng = np.random.default_rng(11)
    path = write_blocks({"feed": side(0, "p", "region"), "shell": {"a": cubes(0, 1)}}, tmp_path / "box.vtm")
    whole = path.read_bytes()
    failed = 0
    for _ in range(60):
        damaged = bytearray(whole)
        for _ in range(rng.integers(1, 8)):
            damaged[rng.integers(len(damaged))] = rng.integers(256)
        path.write_bytes(damaged)
        failed += refused(path)
    assert failed > 30
    assert capfd.readouterr() == ("", "")
