"""The good case that the corpus spoils, and the text of its mesh in plain formats, written by hand."""

from __future__ import annotations

import struct
from collections.abc import Iterable, Mapping, Sequence
from typing import Any

import numpy as np

from tests.mesh_writing import BOX_POINTS, BOX_TRIANGLES, ascii_stl

__all__ = [
    "ARRAYS", "CUBE", "PICKED", "REGION", "TAGGED", "TRIANGLES", "U", "cube_arrays", "legacy", "msh", "obj", "off",
    "ply", "stl_binary", "stl_text", "vtp", "vtu",
]  # fmt: skip

CUBE = BOX_POINTS / np.array([2.0, 1.0, 3.0])
"""The corners of a unit cube."""
TRIANGLES = BOX_TRIANGLES
REGION = np.repeat([3, 3, 3, 3, 2, 1], 2)
"""1 at x = 0, 2 at x = 1, 3 elsewhere."""

_FLUID = """[fluid]
density = 1000
gravity = [0, 0, -9.80665]
"""
_PORTS = """[groups.feed]
role = "inlet"
{feed}
flow_rate = 2
pressure = 500
[groups.drain]
role = "outlet"
{drain}
flow_rate = 2
pressure = 200
[groups.shell]
role = "wall"
{shell}
"""
PICKED = f"""[surface]
file = "cube.vtp"
{_FLUID}""" + _PORTS.format(
    feed="pick = { normal = [-1, 0, 0], near = [0, 0.5, 0.5] }",
    drain="pick = { normal = [1, 0, 0], near = [1, 0.5, 0.5] }",
    shell="rest = true",
)
"""Port data on a surface without groups: its load is `LOAD`."""
TAGGED = f"""[surface]
file = "cube.vtp"
groups = {{ array = "region" }}
{_FLUID}""" + _PORTS.format(feed="tag = 1", drain="tag = 2", shell="tag = 3")
"""The same by the values of a face array."""
ARRAYS = """[surface]
file = "cube.vtp"
groups = { array = "region" }
[fluid]
density = 1000
gravity = [0, 0, -9.80665]
[flow]
velocity = { array = "U" }
pressure = { array = "p", head = "removed" }
traction = { array = "tau" }
[groups.feed]
role = "inlet"
tag = 1
[groups.drain]
role = "outlet"
tag = 2
[groups.shell]
role = "wall"
tag = 3
"""
"""An export: pressure falls along x and drags the four walls; the same load comes twice."""

U = np.tile([2.0, 0.0, 0.0], (8, 1))


def cube_arrays() -> tuple[dict[str, np.ndarray], dict[str, np.ndarray]]:
    """Return the arrays of `ARRAYS`, on points and on faces."""
    tau = np.where((REGION == 3)[:, None], [75.0, 0.0, 0.0], 0.0)
    return {"U": U, "p": 500.0 - 300.0 * CUBE[:, 0]}, {"region": REGION, "tau": tau}


def _numbers(values: Any) -> str:
    return " ".join(map(str, np.asarray(values).ravel().tolist()))


def _array(name: str, values: Any, components: int | None = None) -> str:
    values = np.asarray(values)
    kind = {"i": "Int64", "u": "UInt8", "f": "Float64", "U": "String"}[values.dtype.kind]
    count = values.shape[1] if values.ndim == 2 else 1
    text = _numbers(values)
    if kind == "String":
        text = " ".join(" ".join([*map(str, str(word).encode()), "0"]) for word in values)
    return (
        f'<DataArray type="{kind}" Name="{name}" NumberOfComponents="{components or count}" format="ascii">'
        f"{text}</DataArray>\n"
    )


def vtp(
    points: Any = CUBE,
    faces: Iterable[Sequence[int]] = TRIANGLES,
    on_points: Mapping[str, Any] | None = None,
    on_faces: Mapping[str, Any] | None = None,
) -> str:
    """Return VTK XML polydata in ASCII; without faces of its own, a cube with regions."""
    if on_faces is None:
        on_faces = {"region": REGION} if faces is TRIANGLES else {}
    rows = [list(map(int, face)) for face in faces]
    ends = np.cumsum([len(row) for row in rows]) if rows else np.zeros(0, int)
    corners = np.array([corner for row in rows for corner in row], dtype=np.int64)
    return (
        '<VTKFile type="PolyData" version="1.0" byte_order="LittleEndian" header_type="UInt64">\n<PolyData>\n'
        f'<Piece NumberOfPoints="{len(points)}" NumberOfVerts="0" NumberOfLines="0" NumberOfStrips="0" '
        f'NumberOfPolys="{len(rows)}">\n'
        f"<PointData>\n{''.join(_array(*entry) for entry in (on_points or {}).items())}</PointData>\n"
        f"<CellData>\n{''.join(_array(*entry) for entry in on_faces.items())}</CellData>\n"
        f"<Points>\n{_array('Points', np.asarray(points, dtype=np.float64))}</Points>\n"
        f"<Polys>\n{_array('connectivity', corners)}{_array('offsets', ends)}</Polys>\n"
        "</Piece>\n</PolyData>\n</VTKFile>\n"
    )


def vtu(
    points: Any = CUBE,
    cells: Sequence[Sequence[int]] = (tuple(range(8)),),
    kind: int = 12,
    on_points: Mapping[str, Any] | None = None,
    on_cells: Mapping[str, Any] | None = None,
) -> str:
    """Return a VTK XML unstructured grid in ASCII; by default one hexahedron."""
    ends = np.cumsum([len(row) for row in cells])
    corners = np.array([corner for row in cells for corner in row], dtype=np.int64)
    return (
        '<VTKFile type="UnstructuredGrid" version="1.0" byte_order="LittleEndian" header_type="UInt64">\n'
        f'<UnstructuredGrid>\n<Piece NumberOfPoints="{len(points)}" NumberOfCells="{len(cells)}">\n'
        f"<PointData>\n{''.join(_array(*entry) for entry in (on_points or {}).items())}</PointData>\n"
        f"<CellData>\n{''.join(_array(*entry) for entry in (on_cells or {}).items())}</CellData>\n"
        f"<Points>\n{_array('Points', np.asarray(points, dtype=np.float64))}</Points>\n"
        f"<Cells>\n{_array('connectivity', corners)}{_array('offsets', ends)}"
        f"{_array('types', np.full(len(cells), kind, np.uint8))}</Cells>\n"
        "</Piece>\n</UnstructuredGrid>\n</VTKFile>\n"
    )


def legacy(more: str = "") -> str:
    """Return the cube as legacy VTK polydata in ASCII, with its regions."""
    rows = "\n".join("3 " + _numbers(face) for face in TRIANGLES)
    return (
        f"# vtk DataFile Version 3.0\ncube\nASCII\nDATASET POLYDATA\nPOINTS 8 double\n{_numbers(CUBE)}\n"
        f"POLYGONS 12 48\n{rows}\nCELL_DATA 12\nSCALARS region int 1\nLOOKUP_TABLE default\n{_numbers(REGION)}\n{more}"
    )


def obj(points: Any = CUBE, faces: Iterable[Sequence[int]] = TRIANGLES) -> str:
    """Return a Wavefront OBJ text."""
    lines = ["v " + _numbers(point) for point in np.asarray(points)]
    lines += ["f " + _numbers(np.asarray(face) + 1) for face in faces]
    return "\n".join(lines) + "\n"


def off() -> str:
    """Return an OFF text."""
    rows = [_numbers(point) for point in CUBE] + ["3 " + _numbers(face) for face in TRIANGLES]
    return "OFF\n8 12 0\n" + "\n".join(rows) + "\n"


def ply() -> str:
    """Return a PLY text."""
    rows = [_numbers(point) for point in CUBE] + ["3 " + _numbers(face) for face in TRIANGLES]
    return (
        "ply\nformat ascii 1.0\nelement vertex 8\nproperty double x\nproperty double y\nproperty double z\n"
        "element face 12\nproperty list uchar int vertex_indices\nend_header\n" + "\n".join(rows) + "\n"
    )


def stl_text(names: Mapping[str, int] | None = None) -> str:
    """Return an ASCII STL text: a solid of all faces, or of the faces of a region under each name."""
    corners = CUBE[TRIANGLES]
    if names is None:
        return ascii_stl({"cube": corners})
    return ascii_stl({name: corners[region == REGION] for name, region in names.items()})


def stl_binary(corners: Any = None, count: int | None = None) -> bytes:
    """Return a binary STL file; `count` is what its header announces."""
    corners = np.asarray(CUBE[TRIANGLES] if corners is None else corners, dtype="<f4")
    body = b"".join(bytes(12) + corner.tobytes() + bytes(2) for corner in corners)
    return b"binary".ljust(80, b" ") + struct.pack("<I", len(corners) if count is None else count) + body


def msh() -> str:
    """Return a Gmsh 2.2 text whose physical groups are the regions."""
    nodes = "\n".join(f"{k + 1} {_numbers(point)}" for k, point in enumerate(CUBE))
    rows = "\n".join(
        f"{k + 1} 2 2 {tag} {tag} {_numbers(face + 1)}" for k, (tag, face) in enumerate(zip(REGION, TRIANGLES))
    )
    names = "\n".join(f'2 {tag} "{name}"' for tag, name in ((1, "feed"), (2, "drain"), (3, "shell")))
    return (
        f"$MeshFormat\n2.2 0 8\n$EndMeshFormat\n$PhysicalNames\n3\n{names}\n$EndPhysicalNames\n"
        f"$Nodes\n8\n{nodes}\n$EndNodes\n$Elements\n12\n{rows}\n$EndElements\n"
    )
