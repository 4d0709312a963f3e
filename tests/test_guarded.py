"""Readers that break down, run on or fill the memory: one message, exit code 2, and limits that are lifted again."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest

from fluxmesh.errors import FieldError, FileError, InputError
from fluxmesh.field.points_files import read_vtk_points
from fluxmesh.surface.files import read_mesh
from fluxmesh.surface.readers.volume_grid import read_volume
from tests.mesh_writing import BOX_POINTS, BOX_QUADS, box_polydata, write_vtk_xml

pytestmark = pytest.mark.skipif(not hasattr(os, "fork"), reason="the guard is a fork")

HEAD = """
import os, signal, sys, time
from pathlib import Path
from fluxmesh.guarded import is_guarded, reading, run_guarded
MESH = Path("mesh.vtk")
def work():
    {work}
run_guarded(work)
"""


def start(work: str, **env: str) -> subprocess.Popen[str]:
    """Run a few lines as the command would run."""
    code = HEAD.format(work="\n    ".join(work.strip().splitlines()))
    return subprocess.Popen(
        [sys.executable, "-c", code],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        env={**os.environ, **env},
        start_new_session=True,
    )


def ended(process: subprocess.Popen[str]) -> tuple[int, str, str]:
    out, err = process.communicate(timeout=60)
    return process.returncode, out, err


def test_work_that_ends_well_ends_as_it_would_alone() -> None:
    assert ended(start("print(is_guarded()); sys.exit(1)")) == (1, "True\n", "")
    assert ended(start("with reading(MESH): print('read')")) == (0, "read\n", "")


@pytest.mark.parametrize("number", [signal.SIGSEGV, signal.SIGABRT])
def test_a_reader_that_breaks_down_leaves_one_message(number: signal.Signals) -> None:
    dying = f"""
with reading(MESH):
    os.write(2, b"terminate called after throwing an instance\\n")
    os.kill(os.getpid(), {int(number)})
"""
    code, out, err = ended(start(dying))
    assert (code, out) == (2, "")
    assert err.startswith(f"fluxmesh: mesh.vtk: its reader broke down (signal {int(number)}, {number.name}). It is")
    assert err.count("\n") == 1


def test_a_break_down_elsewhere_does_not_blame_a_file() -> None:
    code, _, err = ended(start("with reading(MESH): pass\nos.kill(os.getpid(), signal.SIGSEGV)"))
    assert code == 128 + signal.SIGSEGV
    assert "mesh.vtk" not in err
    assert "broke down (signal 11" in err


def test_a_reader_that_does_not_end_is_ended() -> None:
    code, _, err = ended(start("with reading(MESH): time.sleep(100)", FLUXMESH_READ_SECONDS="0.3"))
    assert code == 2
    assert "mesh.vtk: could not be read in 0 s" in err


def test_memory_is_bounded_while_a_file_is_read_and_no_longer() -> None:
    asking = """
with reading(MESH):
    try: bytearray(1 << 29); print("too much")
    except MemoryError: print("refused")
print(len(bytearray(1 << 29)))
"""
    assert ended(start(asking, FLUXMESH_READ_GIB="0.25")) == (0, f"refused\n{1 << 29}\n", "")


@pytest.mark.parametrize(("number", "code"), [(signal.SIGINT, 130), (signal.SIGTERM, 143)])
@pytest.mark.parametrize("whole_group", [False, True])
def test_signals_reach_the_work_and_leave_one_line(number: signal.Signals, code: int, whole_group: bool) -> None:
    process = start("print(os.getpid(), flush=True)\nwith reading(MESH): time.sleep(100)")
    child = int(process.stdout.readline())
    (os.killpg if whole_group else os.kill)(process.pid, number)
    got, _, err = ended(process)
    assert got == code
    assert err.startswith("fluxmesh: ")
    assert err.count("\n") == 1
    assert gone(child)


def test_the_work_ends_when_its_guard_is_killed() -> None:
    process = start("print(os.getpid(), flush=True); time.sleep(100)")
    child = int(process.stdout.readline())
    process.kill()
    process.wait()
    assert gone(child)
    process.stdout.close()
    process.stderr.close()


def gone(process: int) -> bool:
    for _ in range(500):
        try:
            state = Path(f"/proc/{process}/stat").read_text().rsplit(")", 1)[1].split()[0]
        except OSError:
            return True
        if state == "Z":
            return True
        time.sleep(0.02)
    return False


def box_of_polyhedra(path: Path) -> Path:
    import vtk

    grid, points, ids = vtk.vtkUnstructuredGrid(), vtk.vtkPoints(), vtk.vtkIdList()
    for place in BOX_POINTS:
        points.InsertNextPoint(*place)
    grid.SetPoints(points)
    for number in (6, *(int(k) for quad in BOX_QUADS for k in (4, *quad))):
        ids.InsertNextId(number)
    grid.InsertNextCell(42, ids)
    return write_vtk_xml(grid, path, "ascii")


def test_a_grid_that_ends_its_reader_leaves_one_message_of_the_command(tmp_path: Path) -> None:
    path = box_of_polyhedra(tmp_path / "box.vtu")
    text = path.read_text()
    at = text.index(">", text.index('Name="polyhedron_to_faces"'))
    path.write_text(text[:at] + text[at:].replace("0 1 2 3 4 5", "0 1 2 3 1099511627780 5", 1))
    assert path.read_text() != text
    ran = subprocess.run([sys.executable, "-m", "fluxmesh", "start", path], capture_output=True, text=True, timeout=100)
    assert ran.returncode == 2, ran
    assert ran.stderr.startswith(f"fluxmesh: {path}: its reader broke down (signal")
    assert ran.stderr.count("\n") == 1


@pytest.mark.parametrize("read", [read_mesh, read_volume, read_vtk_points])
def test_without_a_guard_a_process_of_its_own_tries_what_may_end_it(tmp_path: Path, monkeypatch, read) -> None:
    tried = []
    for module in ("surface.readers.vtk", "surface.readers.volume_grid", "field.points_files"):
        monkeypatch.setattr(f"fluxmesh.{module}.try_reader", lambda reader, path: tried.append(path))
    path = box_of_polyhedra(tmp_path / "box.vtu")
    read(path)
    assert tried == [path]


@pytest.mark.parametrize("mode", ["ascii", "inline", "base64", "raw"])
def test_more_words_than_places_never_reach_the_reader(tmp_path: Path, mode: str) -> None:
    """VTK writes the words that are too many beyond its memory."""
    path = write_vtk_xml(box_polydata(names=True), tmp_path / "box.vtp", mode)
    content = path.read_bytes()
    old, new = {
        "ascii": (b" 112 97 114 116 32 48 ", b" 112 97 114 116 0 48 "),
        "inline": (b"cGFydCAw", b"cGFydAAw"),
        "base64": (b"cGFydCAw", b"cGFydAAw"),
        "raw": (b"part 0", b"part\x000"),
    }[mode]
    if old not in content:  # the words may stand elsewhere among the threes of base64
        old, new = b"BhcnQgMA", b"BhcnQAMA"
    assert old in content
    path.write_bytes(content.replace(old, new, 1))
    with pytest.raises(FieldError, match="holds 13 words, but there are 12 places"):
        read_mesh(path)


@pytest.mark.parametrize("mode", ["inline", "base64", "raw"])
def test_more_words_than_places_are_found_in_packed_data_too(tmp_path: Path, mode: str) -> None:
    data = box_polydata(names=True)
    path = write_vtk_xml(data, tmp_path / "box.vtp", mode, compressed=True)
    assert set(read_mesh(path).face_arrays["name"]) == {f"part {number}" for number in range(6)}
    data.clear_point_data()
    for name in ("region", "p"):
        data.cell_data.remove(name)
    content = write_vtk_xml(data, path, mode, compressed=True).read_bytes()
    # the words of twelve cells on eight points
    swapped = content.replace(b"PointData", b"Other").replace(b"CellData", b"PointData").replace(b"Other", b"CellData")
    path.write_bytes(swapped)
    with pytest.raises(FieldError, match="holds 12 words, but there are 8 places"):
        read_mesh(path)


def test_packed_data_that_would_fill_the_memory(tmp_path: Path) -> None:
    import struct

    path = write_vtk_xml(box_polydata(), tmp_path / "box.vtp", "raw", compressed=True)
    content = path.read_bytes()
    start = content.index(b"_", content.index(b"<AppendedData")) + 1
    tag = content.index(b'Name="connectivity"', content.index(b"<Polys>"))
    offset = int(content[content.index(b'offset="', tag) + 8 :].split(b'"')[0])
    word = "<Q" if b'header_type="UInt64"' in content else "<I"
    size = struct.calcsize(word)
    # the length of the last block: 2 GiB once unfolded
    at = start + offset + 2 * size
    path.write_bytes(content[:at] + struct.pack(word, 1 << 31) + content[at + size :])
    with pytest.raises(FileError, match="2147483648"):
        read_mesh(path)


FLAT = {
    "mesh.off": "OFF\n300000000 300000000 0\n0 0 0\n1 0 0\n0 1 0\n3 0 1 2\n",
    "mesh.su2": "NDIME= 3\nNPOIN= 300000000\n0 0 0\n1 0 0\n0 1 0\nNELEM= 1\n5 0 1 2\n",
    "mesh.mesh": "MeshVersionFormatted 2\nDimension 3\nVertices\n300000000\n0 0 0 0\nEnd\n",
    "mesh.vol": "mesh3d\ndimension\n3\nsurfaceelements\n300000000\n1 1 1 0 3 1 2 3\npoints\n3\n0 0 0\n1 0 0\n0 1 0\n",
    "mesh.msh": "$MeshFormat\n2.2 0 8\n$EndMeshFormat\n$Nodes\n300000000\n1 0 0 0\n$EndNodes\n",
    "mesh.avs": "300000000 1 0 0 0\n1 0 0 0\n",
    "mesh.xml": '<dolfin><mesh celltype="triangle" dim="3"><vertices size="300000000"></vertices></mesh></dolfin>\n',
}


@pytest.mark.parametrize("name", FLAT)
def test_counts_that_the_length_of_the_file_rules_out(tmp_path: Path, name: str) -> None:
    path = tmp_path / name
    path.write_text(FLAT[name])
    with pytest.raises(FileError, match=f"announces 300000000 of something, more than its {len(FLAT[name])} bytes"):
        read_mesh(path)


def test_arrays_that_are_not_stored_and_files_elsewhere(tmp_path: Path) -> None:
    import h5py

    with h5py.File(tmp_path / "mesh.h5m", "w") as file:
        file.create_dataset("tstt/nodes/coordinates", (1 << 40, 3), "f8", chunks=(1024, 3))
    with pytest.raises(FileError, match=r"announces [0-9]+ bytes, 0 are stored"):
        read_mesh(tmp_path / "mesh.h5m")
    with h5py.File(tmp_path / "linked.med", "w") as file:
        file["there"] = h5py.ExternalLink("mesh.h5m", "/tstt")
    with pytest.raises(FileError, match="kept in another file"):
        read_mesh(tmp_path / "linked.med")
    item = '<Xdmf><Domain><Grid><DataItem Format="HDF" Dimensions="3 3">{}</DataItem></Grid></Domain></Xdmf>'
    (tmp_path / "mesh.xdmf").write_text(item.format("../elsewhere.h5:/data"))
    with pytest.raises(FileError, match="not in its own folder"):
        read_mesh(tmp_path / "mesh.xdmf")


def test_volumes_in_pieces_stay_in_their_folder(tmp_path: Path) -> None:
    box_of_polyhedra(tmp_path / "outside.vtu")
    (tmp_path / "set").mkdir()
    path = tmp_path / "set" / "set.pvtu"
    piece = '<VTKFile type="PUnstructuredGrid"><PUnstructuredGrid><Piece Source="{}"/></PUnstructuredGrid></VTKFile>'
    path.write_text(piece.format("../outside.vtu"))
    with pytest.raises(FileError, match="not in its own folder"):
        read_volume(path)


NODES_22 = "$Nodes\n4\n10 0 0 0\n20 1 0 0\n30 0 1 0\n40 0 0 1\n$EndNodes\n"
CELLS_22 = "$Elements\n4\n7 2 0 10 30 20\n8 2 0 10 20 40\n9 2 0 20 30 40\n6 2 0 10 40 30\n$EndElements\n"
NODES_41 = "$Nodes\n1 4 10 40\n2 1 0 4\n10\n20\n30\n40\n0 0 0\n1 0 0\n0 1 0\n0 0 1\n$EndNodes\n"
CELLS_41 = "$Elements\n1 4 6 9\n2 1 2 4\n7 10 30 20\n8 10 20 40\n9 20 30 40\n6 10 40 30\n$EndElements\n"


def values(kind: str, rows: dict[int, float]) -> str:
    listed = "".join(f"{number} {value}\n" for number, value in rows.items())
    name = {"Node": "p", "Element": "q"}[kind]
    return f'${kind}Data\n1\n"{name}"\n1\n0.0\n3\n0\n1\n{len(rows)}\n{listed}$End{kind}Data\n'


@pytest.mark.parametrize(("version", "body"), [("2.2", NODES_22 + CELLS_22), ("4.1", NODES_41 + CELLS_41)])
def test_values_of_msh_files_go_to_the_numbers_they_name(tmp_path: Path, version: str, body: str) -> None:
    path = tmp_path / "mesh.msh"
    head = f"$MeshFormat\n{version} 0 8\n$EndMeshFormat\n"
    on_nodes, on_cells = {40: 4.0, 10: 1.0, 30: 3.0, 20: 2.0}, {6: 0.6, 7: 0.7, 8: 0.8, 9: 0.9}
    path.write_text(head + body + values("Node", on_nodes) + values("Element", on_cells))
    mesh = read_mesh(path)
    np.testing.assert_array_equal(mesh.node_arrays["p"], [1.0, 2.0, 3.0, 4.0])
    np.testing.assert_array_equal(mesh.face_arrays["q"], [0.7, 0.8, 0.9, 0.6])
    path.write_text(head + body + values("Node", {11: 1.0, 20: 2.0, 30: 3.0, 40: 4.0}))
    with pytest.raises(InputError, match="'p' has no value of node 10, and of 1 in all"):
        read_mesh(path)
    twice = values("Node", on_nodes).replace("20 2.0", "30 2.0")
    path.write_text(head + body + twice)
    with pytest.raises(InputError, match="'p' lists node 30 twice"):
        read_mesh(path)


def test_values_of_binary_msh_files_go_to_the_numbers_they_name(tmp_path: Path) -> None:
    """Version 4.1, whose nodes may come in any order; its values come in the order of the numbers."""
    import struct

    nodes, cells = [2, 1, 3, 4], [(1, 1, 3, 2), (2, 1, 2, 4), (3, 2, 3, 4), (4, 1, 4, 3)]
    places = [(1, 0, 0), (0, 0, 0), (0, 1, 0), (0, 0, 1)]
    content = b"$MeshFormat\n4.1 1 8\n" + struct.pack("<i", 1) + b"\n$EndMeshFormat\n$Nodes\n"
    content += struct.pack("<4Q", 1, 4, 1, 4) + struct.pack("<3iQ", 2, 1, 0, 4) + struct.pack("<4Q", *nodes)
    content += np.array(places, dtype="<f8").tobytes() + b"\n$EndNodes\n$Elements\n"
    content += struct.pack("<4Q", 1, 4, 1, 4) + struct.pack("<3iQ", 2, 1, 2, 4) + np.array(cells, "<u8").tobytes()
    content += b'\n$EndElements\n$NodeData\n1\n"p"\n1\n0.0\n3\n0\n1\n4\n'
    content += b"".join(struct.pack("<id", number, 10.0 * number) for number in (1, 2, 3, 4)) + b"\n$EndNodeData\n"
    path = tmp_path / "mesh.msh"
    path.write_bytes(content)
    np.testing.assert_array_equal(read_mesh(path).node_arrays["p"], [20.0, 10.0, 30.0, 40.0])


def test_a_volume_whose_values_do_not_fit_its_cells(tmp_path: Path) -> None:
    path = tmp_path / "grid.bdf"
    nodes = "".join(f"GRID,{k},,{x}.,{y}.,{z}.\n" for k, (x, y, z) in enumerate(((0, 0, 0), (1, 0, 0), (0, 1, 0)), 1))
    # a coordinate system that only one of the points names
    path.write_text(f"BEGIN BULK\n{nodes}GRID,4,0,0.,0.,1.\nCTETRA,1,1,1,2,3,4\nENDDATA\n")
    with pytest.raises(FileError, match="do not fit together"):
        read_volume(path)
    path.write_text(path.read_text().replace("GRID,4,0,", "GRID,4,,"))
    assert read_volume(path).grid.GetNumberOfCells() == 1


def test_volumes_and_points_note_that_a_file_may_be_cut(tmp_path: Path) -> None:
    path = tmp_path / "grid.vtk"
    path.write_text(
        "# vtk DataFile Version 3.0\ngrid\nASCII\nDATASET UNSTRUCTURED_GRID\nPOINTS 4 double\n"
        "0 0 0 1 0 0 0 1 0 0 0 1\nCELLS 1 5\n4 0 1 2 3\nCELL_TYPES 1\n10\n"
        "POINT_DATA 4\nSCALARS p double 1\nLOOKUP_TABLE default\n1 2 3 4"
    )
    for notes in (read_volume(path).notes, read_vtk_points(path).notes):
        assert len(notes) == 1
        assert "may be cut short within its last number '4'" in notes[0]
    path.write_text(path.read_text() + "\n")
    assert read_volume(path).notes == read_vtk_points(path).notes == ()
