"""Files that cannot be read: one clear error each, and nothing printed."""

from __future__ import annotations

import base64
import re
import sys
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from fluxmesh.errors import FieldError, FileError, InputError
from fluxmesh.surface.files import read_mesh
from tests.mesh_writing import (
    BOX_POINTS,
    BOX_TRIANGLES,
    PRESSURE,
    VTP_MODES,
    ascii_stl,
    box_polydata,
    write_meshio,
    write_ply,
    write_vtk_xml,
)

Refuse = Callable[..., InputError]


@pytest.fixture
def refuse(capfd: pytest.CaptureFixture[str]) -> Refuse:
    """Read a file, expect an error that names it and matches, and see that nothing was printed."""

    def refusing(path: Path, match: str | None = None, kind: type[InputError] = FileError) -> InputError:
        capfd.readouterr()
        with pytest.raises(kind, match=match) as caught:
            read_mesh(path)
        assert capfd.readouterr() == ("", "")
        assert caught.value.where.startswith(str(path))
        assert caught.value.remedy
        assert "\n" not in str(caught.value)
        return caught.value

    return refusing


def test_missing_file_hints_at_the_nearest_name(tmp_path: Path, refuse: Refuse) -> None:
    (tmp_path / "rinse_header.vtp").write_text("x")
    refuse(tmp_path / "rinse_haeder.vtp", r"there is no such file. Did you mean 'rinse_header.vtp'\?")
    refuse(tmp_path / "zzz.stl", "there is no such file. Check the path")
    refuse(tmp_path / "nowhere" / "box.stl", "there is no such file. There is no folder .*nowhere either")


def test_broken_link_is_a_missing_file(tmp_path: Path, refuse: Refuse) -> None:
    (tmp_path / "link.stl").symlink_to(tmp_path / "gone.stl")
    refuse(tmp_path / "link.stl", "there is no such file")


def test_folder(tmp_path: Path, refuse: Refuse) -> None:
    (tmp_path / "box.vtp").mkdir()
    refuse(tmp_path / "box.vtp", "is a folder, not a file")


def test_pipe_is_no_regular_file(tmp_path: Path, refuse: Refuse) -> None:
    import os

    os.mkfifo(tmp_path / "box.vtp")
    refuse(tmp_path / "box.vtp", "is no regular file")


@pytest.mark.parametrize(("name", "match"), [("box.docx", "suffix '.docx' tells no"), ("box", "has no suffix")])
def test_unknown_suffix_lists_the_known_ones(tmp_path: Path, refuse: Refuse, name: str, match: str) -> None:
    (tmp_path / name).write_text("x")
    assert re.search(r"\.msh, .*\.stl, .*\.vtp", refuse(tmp_path / name, match).remedy)


@pytest.mark.parametrize("suffix", [".vtp", ".vtu", ".vtk", ".stl", ".ply", ".obj", ".msh", ".off"])
def test_empty_file(tmp_path: Path, refuse: Refuse, suffix: str) -> None:
    (tmp_path / f"box{suffix}").touch()
    refuse(tmp_path / f"box{suffix}", "is empty")


def test_unreadable_file(tmp_path: Path, refuse: Refuse, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "box.stl"
    path.write_text("x")

    def denied(self: Path, *_: object, **__: object) -> None:
        raise PermissionError(13, "Permission denied", str(self))

    monkeypatch.setattr(Path, "open", denied)
    refuse(path, r"cannot be read \(Permission denied\)")


SUFFIXES = [".vtp", ".vtu", ".vtk", ".stl", ".ply", ".obj", ".msh", ".off", ".inp", ".mesh", ".dat", ".xdmf", ".bdf"]


@pytest.mark.parametrize("suffix", SUFFIXES)
@pytest.mark.parametrize(
    "content",
    [b"Dear all,\nhere is the mesh you asked for.\n", bytes(range(256)) * 8, b"<?xml version='1.0'?>\n<svg></svg>\n"],
    ids=["letter", "bytes", "svg"],
)
def test_file_that_is_no_mesh(tmp_path: Path, refuse: Refuse, suffix: str, content: bytes) -> None:
    (tmp_path / f"box{suffix}").write_bytes(content)
    refuse(tmp_path / f"box{suffix}")


def test_random_bytes_never_escape_as_another_error(tmp_path: Path, refuse: Refuse) -> None:
    bytes_ = np.random.default_rng(7).integers(0, 256, 3000, dtype=np.uint8).tobytes()
    for suffix in SUFFIXES:
        (tmp_path / f"box{suffix}").write_bytes(bytes_)
        refuse(tmp_path / f"box{suffix}")


FRACTIONS = [0.02, 0.1, 0.35, 0.6, 0.85, 0.97]


def assert_refused_when_cut(path: Path, refuse: Refuse, fractions: list[float] = FRACTIONS) -> None:
    read_mesh(path)  # whole, it is read
    whole = path.read_bytes()
    for fraction in fractions:
        path.write_bytes(whole[: int(len(whole) * fraction)])
        refuse(path)


@pytest.mark.parametrize("compressed", [False, True])
@pytest.mark.parametrize("mode", VTP_MODES)
@pytest.mark.parametrize("suffix", [".vtp", ".vtu"])
def test_vtk_xml_cut_short(tmp_path: Path, refuse: Refuse, suffix: str, mode: str, compressed: bool) -> None:
    data = box_polydata() if suffix == ".vtp" else box_polydata().cast_to_unstructured_grid()
    path = write_vtk_xml(data, tmp_path / f"box{suffix}", mode, compressed)
    assert_refused_when_cut(path, refuse, [*FRACTIONS, 0.99])
    refuse(path, "closing tag </VTKFile> is missing at its end .* cut short")


def test_appended_data_with_a_piece_missing_in_the_middle(tmp_path: Path, refuse: Refuse) -> None:
    path = write_vtk_xml(box_polydata(), tmp_path / "box.vtp")
    whole = path.read_bytes()
    middle = whole.index(b"_", whole.index(b"<AppendedData")) + 300
    path.write_bytes(whole[:middle] + whole[middle + 200 :])
    refuse(path, kind=InputError)


def test_appended_data_shorter_than_its_last_array_needs(tmp_path: Path, refuse: Refuse) -> None:
    path = write_vtk_xml(box_polydata(), tmp_path / "box.vtp")
    whole = path.read_bytes()
    end = whole.rindex(b"</AppendedData>")
    path.write_bytes(whole[: end - 150] + b"</AppendedData></VTKFile>")
    refuse(path, r"appended data end before array '.*' does: \d+ bytes are needed, \d+ are there. It was cut")


@pytest.mark.parametrize("binary", [True, False])
def test_legacy_vtk_cut_short(tmp_path: Path, refuse: Refuse, binary: bool) -> None:
    path = tmp_path / "box.vtk"
    box_polydata().save(path, binary=binary)
    if not binary:
        # VTK's own notes on an array may end the file: without them it is whole
        text = re.sub(r"METADATA\n(?:.*\n)*?\n", "", path.read_text())
        path.write_text(text)
    assert_refused_when_cut(path, refuse)


@pytest.mark.parametrize(
    ("last", "match"),
    [
        (
            "POINT_DATA 3\nSCALARS p double 2\nLOOKUP_TABLE default\n1 2 3 4 5\n",
            "'LOOKUP_TABLE default' holds 5 values of 6",
        ),
        ("POINT_DATA 3\nVECTORS U double\n1 2 3 4 5 6 7 8\n", "'VECTORS U double' holds 8 values of 9"),
        ("POINT_DATA 3\nVECTORS U double\n1 2 3\nnan 5 6\n7 8\n", "'VECTORS U double' holds 8 values of 9"),
        ("CELL_DATA 1\nFIELD FieldData 1\nS 9 1 double\n1 2 3\n", "'S 9 1 double' holds 3 values of 9"),
        ("CELL_DATA 1\nTENSORS S double\n1 2 3 4 -inf\n", "'TENSORS S double' holds 5 values of 9"),
        ("", "'POLYGONS 1 4' holds 3 values of 4"),
    ],
)
def test_last_block_of_a_legacy_file_is_counted(tmp_path: Path, refuse: Refuse, last: str, match: str) -> None:
    path = tmp_path / "plate.vtk"
    face = "3 0 1 2" if last else "3 0 1"
    path.write_text(
        "# vtk DataFile Version 3.0\nplate\nASCII\nDATASET POLYDATA\nPOINTS 3 double\n0 0 0 1 0 0 0 1 0\n"
        f"POLYGONS 1 4\n{face}\n{last}"
    )
    refuse(path, match)


def test_legacy_file_that_announces_more_than_memory(tmp_path: Path, refuse: Refuse) -> None:
    path = tmp_path / "huge.vtk"
    path.write_bytes(b"# vtk DataFile Version 3.0\nhuge\nBINARY\nDATASET POLYDATA\nPOINTS 99999999999 float\n\0\0\0\0")
    refuse(path, "its block 'POINTS 99999999999 float' needs 1199999999988 bytes, 4 are left. It is damaged")


def test_stl_cut_short(tmp_path: Path, refuse: Refuse) -> None:
    import trimesh

    path = tmp_path / "box.stl"
    trimesh.Trimesh(BOX_POINTS, BOX_TRIANGLES, process=False).export(path)
    assert_refused_when_cut(path, refuse)
    refuse(path, r"announces 12 triangles, 684 bytes, but it has 663 bytes")
    path.write_bytes(b"\0" * 40)
    refuse(path, "is no STL file: 40 bytes are too few")


def test_ascii_stl_cut_short(tmp_path: Path, refuse: Refuse) -> None:
    corners = BOX_POINTS[BOX_TRIANGLES]
    path = tmp_path / "box.stl"
    path.write_text(ascii_stl({"feed": corners[:2], "shell": corners[2:]}))
    assert_refused_when_cut(path, refuse)
    refuse(path, "solid 'shell' has no end")


@pytest.mark.parametrize(
    ("old", "new", "match"),
    [
        ("vertex 0.0 0.0 0.0", "vertex 0.0 x 0.0", "solid 'feed' has a vertex that is not three numbers"),
        ("vertex 0.0 0.0 0.0\n", "\n", "has 12 facets but 35 vertices where 36 are needed"),
        ("endsolid feed", "endsolid feed\nfacet normal 0 0 1", "has 'facet normal 0 0 1' after its last solid"),
    ],
)
def test_damaged_ascii_stl(tmp_path: Path, refuse: Refuse, old: str, new: str, match: str) -> None:
    path = tmp_path / "box.stl"
    path.write_text(ascii_stl({"feed": BOX_POINTS[BOX_TRIANGLES]}).replace(old, new, 1))
    refuse(path, match)


@pytest.mark.parametrize("mode", ["ascii", "binary_little_endian"])
@pytest.mark.parametrize("polygons", [[[0, 1, 2], [4, 5, 6, 7]], [[0, 1, 2], [4, 5, 6]]])
def test_ply_cut_short(tmp_path: Path, refuse: Refuse, mode: str, polygons: list[list[int]]) -> None:
    path = write_ply(tmp_path / "box.ply", BOX_POINTS, polygons, mode, PRESSURE, np.arange(2))
    assert_refused_when_cut(path, refuse)
    refuse(path, "ends within its 2 rows of 'face'")


@pytest.mark.parametrize(
    ("old", "new", "match"),
    [
        ("element vertex 8", "element vertex 7", "has 4 more numbers than its header announces"),
        ("element vertex 8", "element vertex many", "header line 'element vertex many' cannot be understood"),
        ("property double z\n", "property double w\n", "vertices have no z"),
        ("format ascii 1.0\n", "", "header names no format"),
        ("3 4 5 6", "2 4 5", "face 1 has 2 points"),
        ("3 4 5 6", "3 4 5 8", "face 1 uses point 8, but there are 8 points"),
        ("3 4 5 6", "-3 4 5 6", "row 1 of 'face' has a list of length -3"),
        ("3 4 5 6", "3 4 five 6", "has a word that is no number"),
    ],
)
def test_damaged_ply(tmp_path: Path, refuse: Refuse, old: str, new: str, match: str) -> None:
    path = write_ply(tmp_path / "box.ply", BOX_POINTS, [[0, 3, 2, 1], [4, 5, 6]], "ascii", PRESSURE, np.arange(2))
    text = path.read_text()
    if "more" in match:
        # one row of vertices too few is announced, and the faces are plain numbers too
        text = text.replace("element face 2", "element face 0")
    path.write_text(text.replace(old, new))
    if "more" in match:
        refuse(path, "has .* more numbers than its header announces")
    else:
        refuse(path, match)


OBJ = "v 0 0 0\nv 1 0 0\nv 1 1 0\nv 0 1 0\nf 1 2 3\nf 1 3 4\n"


@pytest.mark.parametrize(
    ("old", "new", "match"),
    [
        ("v 1 1 0\n", "v 1 1\n", "vertex 3 is '1 1', which is not three numbers"),
        ("v 1 1 0\n", "v 1 one 0\n", "vertex 3 is '1 one 0', which is not three numbers"),
        ("f 1 3 4\n", "f 1 3", "face 1 is 'f 1 3', fewer than three points"),
        ("f 1 3 4\n", "f 1 3 5\n", "face 1 uses point 4, but there are 4 points"),
        ("f 1 3 4\n", "f 1 3 -5\n", "face 1 uses point -1, but there are 4 points"),
        ("f 1 3 4\n", "f 1 3 0\n", "face 1 uses point 0, but points are counted from 1"),
        ("f 1 3 4\n", "f 1 3 x\n", "points are no whole numbers"),
        ("f 1 2 3\nf 1 3 4\n", "", "holds no faces"),
        ("f 1 2 3\nf 1 3 4\n", "l 1 2\n", "holds no faces, only cells of other kinds: 1 of type line"),
    ],
)
def test_damaged_obj(tmp_path: Path, refuse: Refuse, old: str, new: str, match: str) -> None:
    path = tmp_path / "plate.obj"
    path.write_text(OBJ.replace(old, new))
    refuse(path, match)


@pytest.mark.parametrize(
    "options", [{"file_format": "gmsh22"}, {"file_format": "gmsh22", "binary": False}, {"file_format": "gmsh"}]
)
def test_msh_cut_short(tmp_path: Path, refuse: Refuse, options: dict[str, object]) -> None:
    path = write_meshio(tmp_path / "box.msh", [("triangle", BOX_TRIANGLES)], **options)
    assert_refused_when_cut(path, refuse)


def test_msh_section_that_does_not_end(tmp_path: Path, refuse: Refuse) -> None:
    path = write_meshio(tmp_path / "box.msh", [("triangle", BOX_TRIANGLES)], file_format="gmsh22", binary=False)
    path.write_text(path.read_text().replace("$EndElements\n", ""))
    refuse(path, r"section \$Elements does not end. It was cut short")


@pytest.mark.parametrize("suffix", [".off", ".mesh", ".inp", ".avs", ".dat", ".xml"])
def test_other_formats_cut_short(tmp_path: Path, refuse: Refuse, suffix: str) -> None:
    path = write_meshio(tmp_path / f"box{suffix}", [("triangle", BOX_TRIANGLES)])
    assert_refused_when_cut(path, refuse, [0.1, 0.35, 0.6, 0.85])


def test_reader_that_would_wait_at_the_end_of_a_cut_file(tmp_path: Path, refuse: Refuse) -> None:
    path = write_meshio(tmp_path / "box.dat", [("triangle", BOX_TRIANGLES)])
    path.write_bytes(path.read_bytes()[:200])
    refuse(path, r"cannot be read as a .dat file \(EOFError: the file ends too early\)")


def test_package_that_is_not_installed_is_named(
    tmp_path: Path, refuse: Refuse, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setitem(sys.modules, "h5py", None)
    (tmp_path / "box.med").write_bytes(b"\x89HDF\r\n\x1a\n")
    refuse(tmp_path / "box.med", "needs the package h5py to be read. Install it: pip install h5py")


@pytest.mark.parametrize("suffix", [".vtu", ".vtk"])
def test_lines_alone_are_no_faces(tmp_path: Path, refuse: Refuse, suffix: str) -> None:
    import pyvista as pv

    path = tmp_path / f"lines{suffix}"
    pv.UnstructuredGrid([2, 0, 1], [3], BOX_POINTS).save(path)
    refuse(path, "holds no faces, only cells of other kinds: 1 of type line")


def test_polydata_without_any_cell(tmp_path: Path, refuse: Refuse) -> None:
    import pyvista as pv

    refuse(write_vtk_xml(pv.PolyData(), tmp_path / "none.vtp"), "holds no faces")
    path = write_meshio(tmp_path / "lines.msh", [("line", np.array([[0, 1]]))], file_format="gmsh22")
    refuse(path, "holds no faces, only cells of other kinds: 1 of type line")


def test_faces_of_unsupported_shape_are_refused_not_dropped(tmp_path: Path, refuse: Refuse) -> None:
    import pyvista as pv

    points = np.vstack([BOX_POINTS, BOX_POINTS + 5.0])
    for kind, count, match in [
        (36, 6, "has 1 faces of type quadratic polygon, which cannot be read"),
        (69, 10, "has a lagrange triangle of 10 points, where 3 or 6 can be read"),
    ]:
        grid = pv.UnstructuredGrid([count, *range(count)], [kind], points)
        refuse(write_vtk_xml(grid, tmp_path / "odd.vtu"), match)
    path = write_meshio(
        tmp_path / "odd.msh", [("triangle10", np.arange(10)[None])], points=points, file_format="gmsh22"
    )
    refuse(path, "has 1 faces of type triangle10, which cannot be read")


@pytest.mark.parametrize("suffix", [".vtp", ".vtk"])
def test_other_kind_of_data_set(tmp_path: Path, refuse: Refuse, suffix: str) -> None:
    import pyvista as pv

    image = pv.ImageData(dimensions=(2, 2, 2))
    image.save(tmp_path / "image.vtk")
    image.save(tmp_path / "image.vti")
    (tmp_path / "image.vti").rename(tmp_path / "image.vtp")
    refuse(tmp_path / f"image{suffix}", "holds a data set of kind (ImageData|StructuredPoints)")


def box_text(tmp_path: Path) -> str:
    return write_vtk_xml(box_polydata(), tmp_path / "box.vtp", "ascii").read_text()


def with_values(text: str, name: str, change: Callable[[list[str]], list[str]]) -> str:
    found = re.search(rf'(<DataArray [^>]*Name="{name}"[^>]*>)([^<]*)(?=<)', text)
    assert found
    return text[: found.end(1)] + " ".join(change(found[2].split())) + text[found.end() :]


@pytest.mark.parametrize(
    ("name", "count", "match"),
    [
        ("U", 21, "array 'U' holds 21 values, but there are 8 points of 3 components"),
        ("U", 27, "array 'U' holds 27 values, but there are 8 points of 3 components"),
        ("region", 11, "array 'region' holds 11 values, but there are 12 cells"),
        ("region", 24, "array 'region' holds 24 values, but there are 12 cells"),
    ],
)
def test_array_of_the_wrong_length_in_ascii(tmp_path: Path, refuse: Refuse, name: str, count: int, match: str) -> None:
    path = tmp_path / "box.vtp"
    path.write_text(with_values(box_text(tmp_path), name, lambda values: (values * 2)[:count]))
    refuse(path, match, FieldError)


@pytest.mark.parametrize("count", [7, 9])
@pytest.mark.parametrize("form", ["raw", "base64", "inline"])
def test_array_of_the_wrong_length_in_binary(tmp_path: Path, refuse: Refuse, form: str, count: int) -> None:
    block = np.array([8 * count], np.uint32).tobytes() + np.arange(count, dtype="<f8").tobytes()
    encoded = base64.b64encode(block).decode()
    tag = '<DataArray type="Float64" Name="T" NumberOfTuples="8" format='
    text = box_text(tmp_path).replace('header_type="UInt64"', 'header_type="UInt32"')
    inline = f'{tag}"binary">\n  {encoded}\n</DataArray>' if form == "inline" else f'{tag}"appended" offset="0"/>'
    text = text.replace("</PointData>", inline + "</PointData>")
    data = text.encode()
    if form != "inline":
        body = block if form == "raw" else encoded.encode()
        appended = f'<AppendedData encoding="{form}">_'.encode() + body + b"</AppendedData></VTKFile>"
        data = data.replace(b"</VTKFile>", appended)
    path = tmp_path / "box.vtp"
    path.write_bytes(data)
    refuse(path, f"array 'T' holds {count} values, but there are 8 points", FieldError)


def test_compressed_array_of_the_wrong_length(tmp_path: Path, refuse: Refuse) -> None:
    path = write_vtk_xml(box_polydata(), tmp_path / "box.vtp", "inline", compressed=True)
    # the values of a float array on the cells under the tag of a double one on the points
    text = path.read_text()
    found = re.search(r'<DataArray type="Float32" Name="p"[^>]*>([^<]*)<', text)
    assert found
    other = re.search(r'(<DataArray type="Float64" Name="p"[^>]*>)([^<]*)<', text)
    assert other
    path.write_text(text[: other.end(1)] + found[1] + text[other.end() - 1 :])
    refuse(path, "array 'p' holds 6 values, but there are 8 points", FieldError)


@pytest.mark.parametrize(
    ("name", "match"),
    [
        ("Points", "'Points' of Points holds 21 values, but there are 8 points of 3 components"),
        ("offsets", "'offsets' of Polys holds 11 values, but there are 12 cells"),
    ],
)
def test_mesh_itself_of_the_wrong_length(tmp_path: Path, refuse: Refuse, name: str, match: str) -> None:
    path = tmp_path / "box.vtp"
    text = box_text(tmp_path)
    head, tail = text.split("<Polys>")
    if name == "Points":
        head = with_values(head, name, lambda values: values[:21])
    else:
        tail = with_values(tail, name, lambda values: values[:11])
    path.write_text(f"{head}<Polys>{tail}")
    refuse(path, match)


def test_array_of_the_wrong_length_in_a_legacy_file(tmp_path: Path, refuse: Refuse) -> None:
    path = tmp_path / "plate.vtk"
    path.write_text(
        "# vtk DataFile Version 3.0\nplate\nASCII\nDATASET POLYDATA\nPOINTS 3 double\n0 0 0 1 0 0 0 1 0\n"
        "POLYGONS 1 4\n3 0 1 2\nCELL_DATA 1\nFIELD FieldData 1\nq 1 3 double\n1 2 3\n"
    )
    refuse(path, "array 'q' holds 3 values, but there are 1 cells", FieldError)


def test_array_of_the_wrong_length_through_meshio(tmp_path: Path, refuse: Refuse) -> None:
    path = tmp_path / "plate.msh"
    path.write_text(
        "$MeshFormat\n2.2 0 8\n$EndMeshFormat\n$Nodes\n3\n1 0 0 0\n2 1 0 0\n3 0 1 0\n$EndNodes\n"
        "$Elements\n1\n1 2 2 1 1 1 2 3\n$EndElements\n"
        '$NodeData\n1\n"p"\n1\n0.0\n3\n0\n1\n2\n1 0.5\n2 1.5\n$EndNodeData\n'
    )
    refuse(path, "array 'p' has the wrong length", FieldError)


def test_face_that_uses_a_point_that_is_not_there(tmp_path: Path, refuse: Refuse) -> None:
    import pyvista as pv

    for faces, match in [
        ([3, 0, 1, 2, 3, 4, 5, 9], "face 1 uses point 9, but there are 8 points"),
        ([4, 0, 1, 2, 3, 3, 0, -2, 5], "face 1 uses point -2, but there are 8 points"),
    ]:
        path = tmp_path / "damaged.vtp"
        data = pv.PolyData()
        data.points = BOX_POINTS
        data.SetPolys(pv.CellArray(faces))
        refuse(write_vtk_xml(data, path), match)


def test_messages_of_vtk_are_heard_again_afterwards(
    tmp_path: Path, refuse: Refuse, capfd: pytest.CaptureFixture[str]
) -> None:
    from vtkmodules.vtkIOXML import vtkXMLPolyDataReader

    path = tmp_path / "letter.vtp"
    path.write_bytes(b"<VTKFile type='PolyData'><PolyData><Piece></VTKFile>")
    refuse(path)
    reader = vtkXMLPolyDataReader()
    reader.SetFileName(str(path))
    reader.Update()
    assert "Error parsing" in capfd.readouterr().err
