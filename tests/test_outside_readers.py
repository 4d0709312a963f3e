"""Each reader of meshes, volumes and points against one box whose volume and flows are known exactly.

The box is 2 × 1 × 3 with a corner at the origin, the velocity (x, 2y, -z): what passes its side x = 2 is 6, what
leaves the whole is its divergence times the volume, 12. The files are written by other packages, or by hand.
"""

from __future__ import annotations

from collections.abc import Callable
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from fluxmesh import lay_flow
from fluxmesh.balance.weight import enclosed_volume
from fluxmesh.field.contents import contents_of
from fluxmesh.field.flow import integrate_flow
from fluxmesh.field.points import point_suffixes, read_points
from fluxmesh.field.points_sampling import sample_cloud
from fluxmesh.field.volume import sample_volume
from fluxmesh.surface.build import control_surface
from fluxmesh.surface.files import known_suffixes, read_mesh
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.skin import corner_rows
from fluxmesh.surface.readers.volume_grid import read_volume
from tests.mesh_writing import (
    BOX_POINTS,
    BOX_TRIANGLES,
    ascii_stl,
    cgns_base,
    cgns_section,
    cgns_solution,
    cgns_zone,
    lattice,
    write_cgns,
    write_exodus,
    write_meshio,
    write_ply,
    write_vtk_xml,
)
from tests.verification import Verify

VOLUME, THROUGH, NET = 6.0, 6.0, 12.0
BY_HAND = "by hand: 2 × 1 × 3, and Gauss' theorem for the velocity (x, 2y, -z)"
ALL, ALONE = ", flow through one side, net flow", "; the file holds no values"
Writer = Callable[[Path], object]


def velocity_at(x: np.ndarray) -> np.ndarray:
    return np.asarray(x, dtype=np.float64) * [1, 2, -1]


# ---- writers --------------------------------------------------------------------------------


def polydata() -> Any:
    import pyvista

    data = pyvista.PolyData.from_regular_faces(BOX_POINTS, BOX_TRIANGLES)
    data.point_data["U"] = velocity_at(BOX_POINTS)
    return data


def grid() -> Any:
    """Six unit cubes as hexahedra."""
    import pyvista

    points, rows = lattice((2, 1, 3))
    made = pyvista.UnstructuredGrid({12: rows}, points)
    made.point_data["U"] = velocity_at(points)
    return made


def halves(path: Path) -> None:
    """A set of two pieces, listed by hand."""
    suffix = path.suffix[2:]
    kind = "PPolyData" if suffix == "vtp" else "PUnstructuredGrid"
    whole = polydata() if suffix == "vtp" else grid()
    half = whole.n_cells // 2
    for name, cells in (("a", range(half)), ("b", range(half, whole.n_cells))):
        part = whole.extract_cells(list(cells))
        write_vtk_xml(part.extract_surface(algorithm="dataset_surface") if suffix == "vtp" else part, piece(path, name))
    listed = "".join(f'<Piece Source="{piece(path, name).name}"/>' for name in "ab")
    path.write_text(
        f'<VTKFile type="{kind}" version="0.1"><{kind} GhostLevel="0">'
        '<PPointData><PDataArray type="Float64" Name="U" NumberOfComponents="3"/></PPointData>'
        f'<PPoints><PDataArray type="Float64" NumberOfComponents="3"/></PPoints>{listed}</{kind}></VTKFile>'
    )


def piece(path: Path, name: str) -> Path:
    return path.with_name(f"{path.stem}_{name}.{path.suffix[2:]}")


def blocks(path: Path) -> None:
    from vtkmodules.vtkCommonDataModel import vtkMultiBlockDataSet
    from vtkmodules.vtkIOXML import vtkXMLMultiBlockDataWriter

    made = vtkMultiBlockDataSet()
    made.SetBlock(0, polydata())
    written(vtkXMLMultiBlockDataWriter(), made, path)


def collection(path: Path) -> None:
    from vtkmodules.vtkCommonDataModel import vtkPartitionedDataSetCollection
    from vtkmodules.vtkIOParallelXML import vtkXMLPartitionedDataSetCollectionWriter

    made = vtkPartitionedDataSetCollection()
    made.SetNumberOfPartitions(0, 1)
    made.SetPartition(0, 0, polydata())
    written(vtkXMLPartitionedDataSetCollectionWriter(), made, path)


def written(writer: Any, data: Any, path: Path) -> None:
    writer.SetInputDataObject(data)
    writer.SetFileName(str(path))
    assert writer.Write() == 1


def zone(path: Path) -> None:
    points, rows = lattice((2, 1, 3))
    values = {f"Velocity{axis}": velocity_at(points)[:, k] for k, axis in enumerate("XYZ")}
    cells = cgns_section("Cells", 17, 1, rows)
    sizes = np.array([[len(points)], [len(rows)], [0]])
    write_cgns(path, cgns_base(cgns_zone("Zone", points, sizes, cells, cgns_solution("Flow", "", values))))


def exodus(path: Path) -> None:
    points, rows = lattice((2, 1, 3))
    nodes = {f"U_{axis}": velocity_at(points)[None, :, k] for k, axis in enumerate("xyz")}
    write_exodus(path, points, [("fluid", "HEX8", rows)], times=[0.0], nodes=nodes)


def triangles(with_values: bool, **options: Any) -> Writer:
    values = {"point_data": {"U": velocity_at(BOX_POINTS)}} if with_values else {}
    return lambda path: write_meshio(path, [("triangle", BOX_TRIANGLES)], **values, **options)


def binary_stl(path: Path) -> None:
    record = np.zeros(len(BOX_TRIANGLES), [("normal", "<f4", 3), ("corners", "<f4", (3, 3)), ("attribute", "<u2")])
    record["corners"] = BOX_POINTS[BOX_TRIANGLES]
    path.write_bytes(bytes(80) + np.uint32(len(record)).tobytes() + record.tobytes())


def text(*lines: Any) -> Writer:
    return lambda path: path.write_text("\n".join(map(str, lines)) + "\n")


def rows_of(head: str, table: np.ndarray, first: int = 0) -> list[str]:
    return [head + " ".join(map(str, row)) for row in (table + first).tolist()]


SU2 = text(
    "NDIME= 3", "NELEM= 12", *rows_of("5 ", BOX_TRIANGLES), "NPOIN= 8", *rows_of("", BOX_POINTS), "NMARK= 0"
)  # fmt: skip
UGRID = text("8 12 0 0 0 0 0", *rows_of("", BOX_POINTS), *rows_of("", BOX_TRIANGLES, 1), *[1] * 12)
F3GRID = text(
    *[f"G {k} {x} {y} {z}" for k, (x, y, z) in enumerate(lattice((2, 1, 3))[0], start=1)],
    # the order of the format's bricks: along x, y and z from the first corner, then the others
    *[
        f"Z B8 {k} " + " ".join(map(str, 1 + row[[0, 1, 3, 4, 2, 7, 5, 6]]))
        for k, row in enumerate(lattice((2, 1, 3))[1], start=1)
    ],
)

WRITERS: dict[str, Writer] = {
    ".vtp": lambda path: write_vtk_xml(polydata(), path),
    ".vtu": lambda path: write_vtk_xml(grid(), path),
    ".vtk": lambda path: polydata().save(path),
    **dict.fromkeys([".pvtp", ".pvtu"], halves),
    **dict.fromkeys([".vtm", ".vtmb"], blocks),
    ".vtpc": collection,
    ".cgns": zone,
    **dict.fromkeys([".e", ".ex2", ".exii", ".exo", ".exodus", ".g", ".gen"], exodus),
    ".stl": binary_stl,
    ".obj": text(*rows_of("v ", BOX_POINTS), *rows_of("f ", BOX_TRIANGLES, 1)),
    ".ply": lambda path: write_ply(
        path, BOX_POINTS, BOX_TRIANGLES.tolist(), "binary_little_endian", np.zeros(8), np.zeros(12)
    ),
    ".msh": triangles(True, file_format="gmsh"),
    **dict.fromkeys([".avs", ".dat", ".h5m", ".hmf", ".med", ".tec", ".xdmf", ".xmf"], triangles(True)),
    **dict.fromkeys([".bdf", ".dato", ".dato.gz", ".fem", ".inp", ".mdpa", ".mesh", ".meshb"], triangles(False)),
    **dict.fromkeys([".nas", ".off", ".post", ".post.gz", ".vol", ".vol.gz", ".xml"], triangles(False)),
    ".su2": SU2,
    ".ugrid": UGRID,
    ".f3grid": F3GRID,
}
EXODUS = (".e", ".ex2", ".exii", ".exo", ".exodus", ".g", ".gen")
CARRYING = {
    *(".vtp", ".vtu", ".vtk", ".pvtp", ".pvtu", ".vtm", ".vtmb", ".vtpc", ".cgns", *EXODUS),
    *(".msh", ".avs", ".dat", ".h5m", ".hmf", ".med", ".tec", ".xdmf", ".xmf"),
}


# ---- meshes ---------------------------------------------------------------------------------


def velocity_of(mesh: RawMesh) -> np.ndarray | None:
    arrays = {name.lower(): values for name, values in mesh.node_arrays.items()}
    for name in ("u", "velocity"):
        if name in arrays:
            return np.asarray(arrays[name], dtype=np.float64)
    parts = [arrays.get(f"u_{k}") for k in range(3)]
    return None if parts[0] is None else np.column_stack([np.asarray(part, dtype=np.float64) for part in parts])


def figures(mesh: RawMesh) -> list[float]:
    """Volume inside; and where there are velocities, what passes x = 2, and what leaves."""
    entries, starts = corner_rows(mesh.connectivity, mesh.offsets, mesh.kinds)
    faces = [entries[a:b] for a, b in pairwise(starts)]
    points = np.asarray(mesh.points, dtype=np.float64)
    right = np.array([points[face, 0].min() > 1.99 for face in faces])
    groups = {"right": ("open", np.flatnonzero(right)), "rest": ("open", np.flatnonzero(~right))}
    surface = control_surface(points, faces, groups)
    velocity = velocity_of(mesh)
    flow = lay_flow(surface, density=1.0, velocity=(0, 0, 0) if velocity is None else velocity)
    table = integrate_flow(surface, flow)
    volume = enclosed_volume(table).volume
    flows = table.column("volume_flow")
    return [volume] if velocity is None else [volume, flows[0], float(flows.sum())]


@pytest.mark.parametrize("suffix", sorted(WRITERS))
def test_each_mesh_reader_gives_the_volume_and_flows_of_a_box(verify: Verify, tmp_path: Path, suffix: str) -> None:
    path = tmp_path / f"box{suffix}"
    WRITERS[suffix](path)
    found = figures(read_mesh(path))
    with_flow = suffix in CARRYING
    assert len(found) == (3 if with_flow else 1)
    verify(
        what=f"mesh of a box: volume{ALL if with_flow else ALONE}",
        source=BY_HAND,
        expected=[VOLUME, THROUGH, NET][: len(found)],
        got=found,
        tolerance=1e-11,
        why="whole numbers in the file: round-off",
        kind="reader",
        reader=suffix,
    )


def test_every_suffix_of_a_mesh_is_checked() -> None:
    assert set(WRITERS) == set(known_suffixes())


def test_a_text_stl_is_read_as_the_binary_one(tmp_path: Path) -> None:
    (tmp_path / "box.stl").write_text(ascii_stl({"box": BOX_POINTS[BOX_TRIANGLES]}))
    assert figures(read_mesh(tmp_path / "box.stl")) == pytest.approx([VOLUME], rel=1e-14)


# ---- volumes --------------------------------------------------------------------------------


def hexahedra(with_values: bool, **options: Any) -> Writer:
    points, rows = lattice((2, 1, 3))
    values = {"point_data": {"U": velocity_at(points)}} if with_values else {}
    return lambda path: write_meshio(path, [("hexahedron", rows)], points=points, **values, **options)


VOLUMES: dict[str, Writer] = {
    ".vtu": lambda path: write_vtk_xml(grid(), path),
    ".vtk": lambda path: grid().save(path),
    ".pvtu": halves,
    ".vtm": lambda path: volume_block(path),
    ".msh": hexahedra(True, file_format="gmsh"),
    **dict.fromkeys([".avs", ".hmf", ".med", ".tec", ".xdmf", ".xmf"], hexahedra(True)),
    **dict.fromkeys([".bdf", ".fem", ".inp", ".mesh", ".nas"], hexahedra(False)),
    ".f3grid": F3GRID,
}


def volume_block(path: Path) -> None:
    from vtkmodules.vtkCommonDataModel import vtkMultiBlockDataSet
    from vtkmodules.vtkIOXML import vtkXMLMultiBlockDataWriter

    made = vtkMultiBlockDataSet()
    made.SetBlock(0, grid())
    written(vtkXMLMultiBlockDataWriter(), made, path)


def laid(velocity: np.ndarray) -> list[float]:
    """What passes x = 2 and what leaves the box, with velocities at its corners."""
    right = BOX_POINTS[BOX_TRIANGLES, 0].min(axis=1) > 1.99
    groups = {"right": ("open", np.flatnonzero(right)), "rest": ("open", np.flatnonzero(~right))}
    surface = control_surface(BOX_POINTS, BOX_TRIANGLES, groups)
    flows = integrate_flow(surface, lay_flow(surface, density=1.0, velocity=velocity)).column("volume_flow")
    return [float(flows[0]), float(flows.sum())]


@pytest.mark.parametrize("suffix", sorted(VOLUMES))
def test_each_volume_reader_gives_the_volume_and_flows_of_a_box(verify: Verify, tmp_path: Path, suffix: str) -> None:
    path = tmp_path / f"box{suffix}"
    VOLUMES[suffix](path)
    volume = read_volume(path)
    found = [contents_of(volume).volume]
    names = [("U",), ("U_0", "U_1", "U_2")]
    there = [each for each in names if set(each) <= set(volume.node_arrays)]
    if there:
        sampled = sample_volume(volume, {"velocity": there[0]}, BOX_POINTS, scale=1.0)
        found += laid(sampled.values["velocity"])
    assert bool(there) is (suffix in CARRYING)
    verify(
        what=f"volume in a box: volume{ALL if there else ALONE}",
        source=BY_HAND,
        expected=[VOLUME, THROUGH, NET][: len(found)],
        got=found,
        tolerance=1e-11,
        why="whole numbers in the file: round-off",
        kind="reader",
        reader=suffix,
    )


# ---- points ---------------------------------------------------------------------------------


def cloud_of(path: Path) -> None:
    """Points half a metre apart, within the box and on it."""
    places = lattice((4, 2, 6))[0] / 2
    values = velocity_at(places)
    if path.suffix in (".vtp", ".vtu", ".vtk"):
        import pyvista

        data = pyvista.PolyData(places)
        data.point_data["U"] = values
        (data if path.suffix == ".vtp" else data.cast_to_unstructured_grid()).save(path)
    elif path.suffix == ".ply":
        names = ("x", "y", "z", "U_x", "U_y", "U_z")
        head = ["ply", "format ascii 1.0", f"element vertex {len(places)}", *(f"property double {n}" for n in names)]
        rows = [" ".join(map(str, row)) for row in np.column_stack([places, values]).tolist()]
        path.write_text("\n".join([*head, "end_header", *rows]) + "\n")
    else:
        between = {".csv": ",", ".tsv": "\t"}.get(path.suffix, " ")
        table = np.column_stack([places, values]).tolist()
        lines = [between.join(["x", "y", "z", "U_x", "U_y", "U_z"]), *(between.join(map(str, row)) for row in table)]
        path.write_text("\n".join(lines) + "\n")


@pytest.mark.parametrize("suffix", point_suffixes())
def test_each_point_reader_gives_the_flows_of_a_box(verify: Verify, tmp_path: Path, suffix: str) -> None:
    path = tmp_path / f"cloud{suffix}"
    cloud_of(path)
    cloud = read_points(path)
    columns = next(each for each in (("U",), ("U_x", "U_y", "U_z")) if set(each) <= set(cloud.columns))
    sampled = sample_cloud(cloud, {"velocity": columns if len(columns) > 1 else columns[0]}, BOX_POINTS)
    verify(
        what="points in a box: flow through one side, net flow",
        source=BY_HAND,
        expected=[THROUGH, NET],
        got=laid(sampled.values["velocity"]),
        tolerance=1e-10,
        why="linear fields are exact: round-off",
        kind="reader",
        reader=suffix,
    )
