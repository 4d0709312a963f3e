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
