"""Files for the reader tests, written by other packages than the one that reads them, or by hand."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np

BOX_POINTS = np.array(
    [[0, 0, 0], [2, 0, 0], [2, 1, 0], [0, 1, 0], [0, 0, 3], [2, 0, 3], [2, 1, 3], [0, 1, 3]], dtype=np.float64
)
BOX_QUADS = np.array([[0, 3, 2, 1], [4, 5, 6, 7], [0, 1, 5, 4], [2, 3, 7, 6], [1, 2, 6, 5], [3, 0, 4, 7]])
"""A box of 2 x 1 x 3, normals outward: bottom, top, y = 0, y = 1, x = 2, x = 0."""
BOX_TRIANGLES = BOX_QUADS[:, [0, 1, 2, 0, 2, 3]].reshape(-1, 3)
PRESSURE = np.linspace(-1.0, 2.5, 8)
VELOCITY = np.arange(24, dtype=np.float64).reshape(8, 3) / 7.0
REGION = np.repeat(np.arange(6, dtype=np.int32), 2)

VTP_MODES = ["raw", "base64", "inline", "ascii"]


def box_polydata(names: bool = False) -> Any:
    """Return the box of triangles as polydata with arrays on points and cells of one name."""
    import pyvista as pv

    data = pv.PolyData.from_regular_faces(BOX_POINTS, BOX_TRIANGLES)
    data.point_data["p"] = PRESSURE
    data.point_data["U"] = VELOCITY
    data.cell_data["region"] = REGION
    data.cell_data["p"] = np.arange(12, dtype=np.float32)
    if names:
        data.cell_data["name"] = np.array([f"part {number}" for number in REGION])
    return data


def write_vtk_xml(data: Any, path: Path, mode: str = "raw", compressed: bool = False) -> Path:
    """Write a data set with VTK's own writer."""
    from vtkmodules.vtkIOXML import vtkXMLPolyDataWriter, vtkXMLUnstructuredGridWriter

    writer = (vtkXMLPolyDataWriter if path.suffix == ".vtp" else vtkXMLUnstructuredGridWriter)()
    writer.SetInputDataObject(data)
    writer.SetFileName(str(path))
    if mode in ("raw", "base64"):
        writer.SetDataModeToAppended()
        writer.SetEncodeAppendedData(mode == "base64")
    elif mode == "inline":
        writer.SetDataModeToBinary()
    else:
        writer.SetDataModeToAscii()
    if not compressed:
        writer.SetCompressorTypeToNone()
    writer.Write()
    return path


def write_ply(
    path: Path, points: np.ndarray, polygons: list[list[int]], mode: str, pressure: np.ndarray, part: np.ndarray
) -> Path:
    """Write a PLY file with a value on each vertex and on each face, by hand."""
    header = (
        f"ply\nformat {mode} 1.0\ncomment by hand\nelement vertex {len(points)}\n"
        "property double x\nproperty double y\nproperty double z\nproperty float pressure\n"
        f"element face {len(polygons)}\nproperty short part\nproperty list uchar int vertex_indices\n"
        "end_header\n"
    ).encode()
    if mode == "ascii":
        rows = [" ".join([*(repr(float(x)) for x in xyz), repr(float(p))]) for xyz, p in zip(points, pressure)]
        rows += [" ".join(map(str, [tag, len(face), *face])) for tag, face in zip(part, polygons)]
        path.write_bytes(header + "\n".join(rows).encode() + b"\n")
        return path
    order = ">" if "big" in mode else "<"
    body = b"".join(
        np.asarray(xyz, order + "f8").tobytes() + np.asarray(p, order + "f4").tobytes()
        for xyz, p in zip(points, pressure)
    )
    body += b"".join(
        np.asarray(tag, order + "i2").tobytes() + bytes([len(face)]) + np.asarray(face, order + "i4").tobytes()
        for tag, face in zip(part, polygons)
    )
    path.write_bytes(header + body)
    return path


def ascii_stl(solids: dict[str, np.ndarray]) -> str:
    """Return the text of an ASCII STL file; corners have shape (n, 3, 3)."""
    lines = []
    for name, corners in solids.items():
        lines.append(f"solid {name}")
        for triangle in corners:
            lines += ["  facet normal 0 0 1", "    outer loop"]
            lines += ["      vertex {!r} {!r} {!r}".format(*map(float, corner)) for corner in triangle]
            lines += ["    endloop", "  endfacet"]
        lines.append(f"endsolid {name}")
    return "\n".join(lines) + "\n"


def write_meshio(
    path: Path, cells: list[tuple[str, np.ndarray]], *, points: np.ndarray = BOX_POINTS, **more: Any
) -> Path:
    """Write a file with meshio."""
    import meshio

    options = {key: more.pop(key) for key in ("file_format", "binary", "data_format") if key in more}
    field_data = {name: np.array(entry) for name, entry in more.pop("field_data", {}).items()}
    meshio.Mesh(points.copy(), cells, field_data=field_data, **more).write(path, **options)
    return path


def lattice(cells: tuple[int, int, int], bend: float = 0.0) -> tuple[np.ndarray, np.ndarray]:
    """Return points and hexahedra, in VTK's order, of a box of unit cells, smoothly bent on request."""
    nx, ny, nz = cells
    z, y, x = np.meshgrid(*(np.arange(n + 1.0) for n in (nz, ny, nx)), indexing="ij")
    points = np.column_stack([x.ravel(), y.ravel(), z.ravel()])
    first = np.array(
        [i + (nx + 1) * (j + (ny + 1) * k) for k in range(nz) for j in range(ny) for i in range(nx)], dtype=np.int64
    )
    up, layer = nx + 1, (nx + 1) * (ny + 1)
    steps = np.array([0, 1, 1 + up, up])
    hexahedra = first[:, None] + np.concatenate([steps, steps + layer])
    x, y, z = points.T.copy()
    points = points + bend * np.column_stack([np.sin(y + z), np.sin(2 * x), np.sin(x - y)])
    return points, hexahedra


# A hexahedron cut into simpler cells that also fit its neighbours in a lattice.
_CUTS = {
    "hexahedron": [[0, 1, 2, 3, 4, 5, 6, 7]],
    "wedge": [[0, 1, 2, 4, 5, 6], [0, 2, 3, 4, 6, 7]],
    # six tetrahedra about the diagonal from corner 0 to corner 6
    "tetra": [[0, 1, 2, 6], [0, 2, 3, 6], [0, 3, 7, 6], [0, 7, 4, 6], [0, 4, 5, 6], [0, 5, 1, 6]],
}


def cut(points: np.ndarray, hexahedra: np.ndarray, shape: str) -> tuple[np.ndarray, np.ndarray]:
    """Cut hexahedra into cells of a simpler shape; pyramids meet at a new point in the middle of each."""
    if shape != "pyramid":
        return points, hexahedra[:, np.array(_CUTS[shape])].reshape(-1, len(_CUTS[shape][0]))
    tops = len(points) + np.arange(len(hexahedra))
    inward = np.array([[0, 3, 7, 4], [1, 5, 6, 2], [0, 4, 5, 1], [3, 2, 6, 7], [0, 1, 2, 3], [4, 7, 6, 5]])
    bases = hexahedra[:, inward]
    rows = np.concatenate([bases, np.broadcast_to(tops[:, None, None], (len(tops), 6, 1))], axis=2)
    return np.concatenate([points, points[hexahedra].mean(axis=1)]), rows.reshape(-1, 5)


def raised(
    points: np.ndarray,
    rows: np.ndarray,
    edges: np.ndarray,
    centres: tuple[tuple[int, ...], ...] = (),
    bulge: float = 0.0,
) -> tuple[np.ndarray, np.ndarray]:
    """Add a point on each edge, and in the middle of some corners, to linear cells; `bulge` moves them."""
    groups = [rows[:, edges].reshape(-1, edges.shape[1])] + [rows[:, list(centre)] for centre in centres]
    columns = []
    for group in groups:
        keys, inverse = np.unique(np.sort(group, axis=1), axis=0, return_inverse=True)
        middle = points[keys].mean(axis=1)
        middle = middle + bulge * np.sin(3.0 * middle[:, [1, 2, 0]])
        columns.append((len(points) + inverse).reshape(len(rows), -1))
        points = np.concatenate([points, middle])
    return points, np.column_stack([rows, *columns])


CgnsNode = tuple[str, str, Any, list[Any]]
"""Name, SIDS type, array (the first index of the SIDS last) or text or None, nodes below."""


def write_cgns(path: Path, nodes: list[CgnsNode], **options: Any) -> Path:
    """Write a CGNS file with h5py, laid out as the CGNS library lays it out."""
    import h5py

    def put(parent: Any, name: str, label: str, value: Any, below: list[CgnsNode]) -> None:
        group = parent.create_group(name, track_order=True)
        kind = "MT"
        if isinstance(value, str):
            value = np.frombuffer(value.encode(), dtype=np.int8)
            kind = "C1"
        elif value is not None:
            value = np.asarray(value)
            kind = {"i4": "I4", "i8": "I8", "f4": "R4", "f8": "R8"}[value.dtype.str[1:]]
        for key, text in (("label", label), ("name", name), ("type", kind)):
            group.attrs[key] = np.bytes_(text.encode().ljust(33 if key != "type" else 3, b"\0"))
        group.attrs["flags"] = np.array([1], dtype=np.int32)
        if value is not None:
            group.create_dataset(" data", data=value)
        for node in below:
            put(group, *node)

    with h5py.File(path, "w", **options) as file:
        for key, text in (("label", "Root Node of HDF5 File"), ("name", "HDF5 MotherNode"), ("type", "MT")):
            file.attrs[key] = np.bytes_(text)
        for key, text, size in ((" format", "IEEE_LITTLE_32", 15), (" hdf5version", "HDF5 Version 1.14.6", 33)):
            file.create_dataset(key, data=np.frombuffer(text.encode().ljust(size, b"\0"), dtype=np.int8))
        put(file, "CGNSLibraryVersion", "CGNSLibraryVersion_t", np.array([4.5], dtype=np.float32), [])
        for node in nodes:
            put(file, *node)
    return path


def cgns_section(name: str, kind: int, first: int, rows: np.ndarray, **below: np.ndarray) -> CgnsNode:
    """Return a section of elements; `rows` count points from 0, or are flat and as stored."""
    flat = rows.ravel() + 1 if rows.ndim == 2 else rows
    count = len(rows) if rows.ndim == 2 else int(below.pop("count"))
    span = np.array([first, first + count - 1])
    nodes = [("ElementRange", "IndexRange_t", span, []), ("ElementConnectivity", "DataArray_t", flat, [])]
    nodes += [(key, "DataArray_t", values, []) for key, values in below.items()]
    return name, "Elements_t", np.array([kind, 0], dtype=np.int32), nodes


def cgns_condition(name: str, kind: str, where: str, values: Any, location: str = "FaceCenter") -> CgnsNode:
    """Return a boundary condition; `where` names a list or a range, which has a row an index."""
    values = np.asarray(values)
    label = "IndexRange_t" if where.endswith("Range") else "IndexArray_t"
    nodes = [(where, label, values if values.ndim == 2 else values[:, None], [])]
    if location:
        nodes.append(("GridLocation", "GridLocation_t", location, []))
    return name, "BC_t", kind, nodes


def cgns_solution(name: str, location: str, arrays: dict[str, np.ndarray], *more: CgnsNode) -> CgnsNode:
    """Return a flow solution."""
    nodes = [(key, "DataArray_t", values, []) for key, values in arrays.items()]
    if location:
        nodes.append(("GridLocation", "GridLocation_t", location, []))
    return name, "FlowSolution_t", None, [*nodes, *more]


def cgns_zone(name: str, points: np.ndarray, sizes: np.ndarray, *below: CgnsNode, kind: str = "") -> CgnsNode:
    """Return a zone; `points` end with the three coordinates, before it the indices, the first last."""
    grid = [(f"Coordinate{'XYZ'[axis]}", "DataArray_t", points[..., axis].copy(), []) for axis in range(3)]
    kind = kind or ("Unstructured" if np.asarray(sizes).shape == (3, 1) else "Structured")
    nodes = [("ZoneType", "ZoneType_t", kind, []), ("GridCoordinates", "GridCoordinates_t", None, grid), *below]
    return name, "Zone_t", np.asarray(sizes), nodes


def cgns_base(*below: CgnsNode, cells: int = 3) -> list[CgnsNode]:
    """Return the nodes of a file of one base."""
    return [("Base", "CGNSBase_t", np.array([cells, 3], dtype=np.int32), list(below))]


def write_exodus(
    path: Path,
    points: np.ndarray,
    blocks: list[tuple[str, str, np.ndarray]],
    side_sets: list[tuple[str, list[int], list[int]]] = [],  # noqa: B006
    *,
    times: list[float] = [],  # noqa: B006
    nodes: dict[str, np.ndarray] | None = None,
    elements: dict[str, dict[int, np.ndarray]] | None = None,
    on_sets: dict[str, dict[int, np.ndarray]] | None = None,
    version: int = 2,
    old: bool = False,
) -> Path:
    """Write an Exodus file as netCDF, classic (`version` 1 or 2, by scipy) or netCDF-4 (4, as plain HDF5).

    Blocks are (name, type, points from 0), sets (name, elements, sides), both from 1; variables have a row a
    time step, and those of blocks and sets are given by their number. `old` is the layout before 1995.
    """
    sizes: dict[str, int | None] = {"time_step": None, "len_string": 33, "num_dim": 3, "num_nodes": len(points)}
    arrays: dict[str, tuple[tuple[str, ...], np.ndarray]] = {}
    attributes: dict[str, tuple[str, str]] = {}

    def texts(name: str, words: list[str], dimension: str) -> None:
        sizes[dimension] = len(words)
        table = np.array([list(word.ljust(33, "\0")) for word in words], dtype="S1").reshape(len(words), 33)
        arrays[name] = ((dimension, "len_string"), table)

    if old:
        arrays["coord"] = (("num_dim", "num_nodes"), points.T)
    else:
        arrays |= {f"coord{axis}": (("num_nodes",), points[:, k]) for k, axis in enumerate("xyz")}
    sizes |= {"num_elem": sum(len(rows) for _, _, rows in blocks), "num_el_blk": len(blocks), "four": 4, "len_line": 81}
    arrays["eb_status"] = (("num_el_blk",), np.ones(len(blocks), dtype=np.int32))
    arrays["eb_prop1"] = (("num_el_blk",), np.arange(1, 1 + len(blocks), dtype=np.int32) * 10)
    if not old:
        texts("eb_names", [name for name, _, _ in blocks], "num_el_blk")
    for number, (_, kind, rows) in enumerate(blocks, start=1):
        sizes |= {f"num_el_in_blk{number}": rows.shape[0], f"num_nod_per_el{number}": rows.shape[1]}
        key = f"connect{number}"
        arrays[key] = ((f"num_el_in_blk{number}", f"num_nod_per_el{number}"), (rows + 1).astype(np.int32))
        attributes[key] = ("elem_type", kind)
    if side_sets:
        sizes["num_side_sets"] = len(side_sets)
        arrays["ss_status"] = (("num_side_sets",), np.ones(len(side_sets), dtype=np.int32))
        arrays["ss_prop1"] = (("num_side_sets",), np.arange(1, 1 + len(side_sets), dtype=np.int32) * 100)
        if not old:
            texts("ss_names", [name for name, _, _ in side_sets], "num_side_sets")
    for number, (_, owners, sides) in enumerate(side_sets, start=1):
        sizes[f"num_side_ss{number}"] = len(owners)
        for key, values in (("elem", owners), ("side", sides)):
            arrays[f"{key}_ss{number}"] = ((f"num_side_ss{number}",), np.array(values, dtype=np.int32))
    if times:
        arrays["time_whole"] = (("time_step",), np.array(times))
    if nodes:
        texts("name_nod_var", list(nodes), "num_nod_var")
        if old:
            arrays["vals_nod_var"] = (("time_step", "num_nod_var", "num_nodes"), np.stack(list(nodes.values()), axis=1))
        else:
            for index, values in enumerate(nodes.values(), start=1):
                arrays[f"vals_nod_var{index}"] = (("time_step", "num_nodes"), values)
    for place, size, given in (("elem_var", "num_el_in_blk", elements), ("sset_var", "num_side_ss", on_sets)):
        if given:
            texts(f"name_{place}", list(given), f"num_{place}")
        for index, parts in enumerate((given or {}).values(), start=1):
            for number, values in parts.items():
                key = f"vals_{place}{index}{'eb' if place == 'elem_var' else 'ss'}{number}"
                arrays[key] = (("time_step", f"{size}{number}"), values)
    if version == 4:
        import h5py

        with h5py.File(path, "w") as file:
            for key, (_, values) in arrays.items():
                file.create_dataset(key, data=values)
                if key in attributes:
                    file[key].attrs[attributes[key][0]] = np.bytes_(attributes[key][1])
        return path
    from scipy.io import netcdf_file

    with netcdf_file(path, "w", version=version) as file:
        file.title, file.api_version = b"a box", np.float32(5.1)
        file.version, file.floating_point_word_size = np.float32(5.1), np.int32(8)
        file.file_size = np.int32(not old)
        for key, length in sizes.items():
            file.createDimension(key, length)
        for key, (dimensions, values) in arrays.items():
            variable = file.createVariable(key, values.dtype.char if values.dtype.kind != "S" else "c", dimensions)
            variable[:] = values
            if key in attributes:
                setattr(variable, attributes[key][0], attributes[key][1].encode())
    return path
