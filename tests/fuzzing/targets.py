"""What is fuzzed: how an input is made from chance, and what is done with it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache, partial
from pathlib import Path
from random import Random
from tempfile import TemporaryDirectory
from typing import Any

import numpy as np

from tests.corpus.shapes import (
    ARRAYS,
    CUBE,
    PICKED,
    TAGGED,
    TRIANGLES,
    cube_arrays,
    legacy,
    msh,
    obj,
    off,
    ply,
    stl_text,
    vtp,
    vtu,
)
from tests.corpus.vtk_sets import inputs as sets_of_corpus
from tests.fuzzing.cases import base_cases, quantity, spoil_case, unit
from tests.fuzzing.mutate import spoil_binary, spoil_text, spoil_xml
from tests.fuzzing.words import LEGACY_WORDS, TEXT_WORDS, VTK_WORDS
from tests.mesh_writing import cut, lattice, write_vtk_xml

__all__ = ["TARGETS", "Target"]

Files = dict[str, bytes]
_Spoil = Callable[[Random, bytes, tuple[str, ...]], bytes]


@dataclass(frozen=True)
class Target:
    """One way into fluxmesh.

    Attributes
    ----------
    name : str
        Of what is fuzzed.
    good : callable
        Good inputs: files, by name.
    spoil : callable
        Changes one by chance.
    run : callable
        What is done with the folder that the files lie in.
    native : bool
        Whether compiled libraries read the input, so that a process may end.
    """

    name: str
    good: Callable[[], list[Files]]
    spoil: Callable[[Random, Files], Files]
    run: Callable[[Path], None]
    native: bool = False

    def make(self, rng: Random) -> Files:
        """Return the files of a spoilt input."""
        return self.spoil(rng, rng.choice(self.good()))


# ---- what is done with an input -------------------------------------------------------------


def _parse(folder: Path) -> None:
    from fluxmesh.case.read import read_case

    read_case(folder / "case.toml")


def _read_quantity(folder: Path) -> None:
    from fluxmesh.units import parse_quantity, parse_vector, unit_factor

    kind, needed, text = (folder / "quantity.txt").read_bytes().decode("utf-8", "surrogatepass").split("\n", 2)
    if kind == "unit":
        factor = unit_factor(text, needed, "fluid.density")
        assert 0.0 < factor < np.inf, f"factor {factor}"
    elif kind == "vector":
        vector = parse_vector({"value": [1.0, -2.0, 1e15], "unit": text}, needed, "fluid.gravity")
        assert np.isfinite(vector).all(), f"vector {vector}"
    else:
        measured = parse_quantity(text, needed, "fluid.density")
        assert np.isfinite(measured.value), f"value {measured}"


def _balance(folder: Path) -> None:
    """Do all that `balance` does, up to the bytes of its result."""
    from fluxmesh.case.read import read_case
    from fluxmesh.job.check import with_doubts
    from fluxmesh.job.mesh import load_mesh
    from fluxmesh.job.run import run_case
    from fluxmesh.report.result import json_bytes

    case = read_case(folder / "case.toml")
    if case.storage is not None and case.storage.is_series():
        return
    loaded = load_mesh(case)
    done = with_doubts(case, run_case(case, loaded=loaded), loaded=loaded)
    json_bytes(done.data(), "balance.json")
    surface = done.surface
    assert np.isfinite(surface.points).all(), "a point is not finite"
    assert ((surface.connectivity >= 0) & (surface.connectivity < len(surface.points))).all(), "a corner is no point"
    faces = surface.connectivity.size // 3 if surface.offsets is None else surface.offsets.size - 1
    assert surface.group_of_face.shape == (faces,), "faces and groups differ"
    assert ((surface.group_of_face >= 0) & (surface.group_of_face < len(surface.groups))).all(), "a face is in no group"


def _read_cloud(folder: Path) -> None:
    from fluxmesh.field.points import read_points
    from fluxmesh.field.points_sampling import sample_cloud

    (path,) = folder.glob("cloud.*")
    cloud = read_points(path)
    count = len(cloud.places)
    assert cloud.places.shape == (count, 3), "places are no points"
    assert np.isfinite(cloud.places).all(), "a place is not finite"
    for name, column in cloud.columns.items():
        assert column.shape in ((count,), (count, 3)), f"column {name!r} is no column"
        assert np.isfinite(column).all(), f"column {name!r} is not finite"
    names: dict[str, Any] = {name: name for name in sorted(cloud.columns)[:3]}
    sampled = sample_cloud(cloud, names, CUBE)
    assert all(np.isfinite(values).all() for values in sampled.values.values()), "a sampled value is not finite"


# ---- what inputs are made from --------------------------------------------------------------


def _case(name: str, case: str = PICKED) -> bytes:
    return case.replace('"cube.vtp"', f'"{name}"').encode()


def _export() -> str:
    points, faces = cube_arrays()
    return vtp(
        CUBE, TRIANGLES, on_points=points, on_faces={**faces, "name": np.array([f"part {k}" for k in faces["region"]])}
    )


@cache
def _good() -> Files:
    return {"cube.vtp": _export().encode()}


@cache
def _surfaces() -> dict[str, list[bytes]]:
    """Return the cube in every way that VTK's own writers write it, by suffix."""
    import pyvista as pv

    points, faces = cube_arrays()
    skin = pv.PolyData.from_regular_faces(CUBE, TRIANGLES)
    skin.point_data.update(points)
    skin.cell_data.update(faces)
    skin.cell_data["name"] = np.array([f"part {k}" for k in faces["region"]])
    corners, cells = lattice((2, 1, 1))
    grids = []
    for shape, kind in (("hexahedron", 12), ("tetra", 10), ("wedge", 13)):
        at, rows = (corners, cells) if shape == "hexahedron" else cut(corners, cells, shape)
        grid = pv.UnstructuredGrid(
            np.column_stack([np.full(len(rows), rows.shape[1]), rows]).ravel(), np.full(len(rows), kind), at
        )
        grid.point_data["p"] = 500.0 - 300.0 * at[:, 0]
        grid.point_data["U"] = np.tile([2.0, 0.0, 0.0], (len(at), 1))
        grids.append(grid)
    cube = [8, *range(8)]
    polyhedron = pv.UnstructuredGrid(np.array(cube), np.array([12]), CUBE)
    with TemporaryDirectory() as folder:
        made: dict[str, list[bytes]] = {
            "vtp": [_export().encode()],
            "vtu": [vtu().encode(), _polyhedra()],
            "vtk": [legacy().encode()],
        }
        for mode in ("raw", "base64", "inline", "ascii"):
            for packed in (False, True):
                made["vtp"].append(write_vtk_xml(skin, Path(folder) / "x.vtp", mode, packed).read_bytes())
                made["vtu"] += [
                    write_vtk_xml(each, Path(folder) / "x.vtu", mode, packed).read_bytes()
                    for each in (*grids, polyhedron)
                ]
        for data in (skin, *grids):
            for binary in (False, True):
                data.save(Path(folder) / "x.vtk", binary=binary)
                made["vtk"].append((Path(folder) / "x.vtk").read_bytes())
    return made


def _polyhedra() -> bytes:
    sides = [[0, 3, 2, 1], [4, 5, 6, 7], [0, 1, 5, 4], [2, 3, 7, 6], [1, 2, 6, 5], [3, 0, 4, 7]]
    stream = " ".join(["6", *(f"4 {' '.join(map(str, side))}" for side in sides)])
    lists = (
        f'<DataArray type="Int64" Name="faces" format="ascii">{stream}</DataArray>\n'
        '<DataArray type="Int64" Name="faceoffsets" format="ascii">31</DataArray>\n</Cells>'
    )
    return vtu(kind=42).replace("</Cells>", lists).encode()


@cache
def _cloud_rows() -> list[str]:
    ticks = np.linspace(-0.1, 1.1, 5)
    places = np.stack(np.meshgrid(ticks, ticks, ticks), axis=-1).reshape(-1, 3)
    rows = np.column_stack([places, np.tile([2.0, 0.0, 0.0], (len(places), 1)), 500.0 - 300.0 * places[:, 0]])
    return [",".join(f"{value:.6g}" for value in row) for row in rows.tolist()]


@cache
def _clouds() -> list[tuple[str, bytes]]:
    import pyvista as pv

    text = "x,y,z,u,v,w,p\n" + "\n".join(_cloud_rows()) + "\n"
    table = np.array([list(map(float, row.split(","))) for row in _cloud_rows()])
    cloud = pv.PolyData(table[:, :3])
    cloud.point_data["U"], cloud.point_data["p"] = table[:, 3:6], table[:, 6]
    head = (
        "ply\nformat ascii 1.0\nelement vertex 125\n"
        + "".join(f"property float {name}\n" for name in "xyzuvwp")
        + "end_header\n"
    )
    names = "X [ m ],Y [ m ],Z [ m ],Velocity u [ m s^-1 ],v,w,Pressure [ Pa ]"
    found = [
        ("csv", text.encode()),
        ("csv", text.replace(",", ";").replace(".", ",").encode()),
        ("dat", text.replace(",", " ").encode()),
        ("txt", text.replace(",", "\t").encode()),
        ("csv", ("# made\n[Data]\n" + text.replace("x,y,z,u,v,w,p", names)).encode()),
        ("ply", (head + text.split("\n", 1)[1].replace(",", " ")).encode()),
    ]
    with TemporaryDirectory() as folder:
        for mode in ("raw", "inline", "ascii"):
            found.append(("vtp", write_vtk_xml(cloud, Path(folder) / "x.vtp", mode).read_bytes()))
        cloud.save(Path(folder) / "x.vtk", binary=False)
        found.append(("vtk", (Path(folder) / "x.vtk").read_bytes()))
    return found


@cache
def _sets() -> list[Files]:
    """Return the good sets of the corpus, and one that is a collection in time."""
    found = []
    for one in sets_of_corpus():
        if one.name in ("vtm/whole", "pvtu/whole", "pvtp/whole", "pvd/cube.pvd"):
            with TemporaryDirectory() as folder:
                one.make(Path(folder))
                found.append({path.name: path.read_bytes() for path in Path(folder).iterdir()})
    assert len(found) == 4
    return found


# ---- how they are spoilt --------------------------------------------------------------------


@cache
def _texts() -> dict[str, list[bytes]]:
    """Return surfaces and volumes in plain text, by suffix; where other packages write them, by these."""
    found = {
        "stl": [stl_text().encode(), stl_text({"feed": 1, "drain": 2, "shell": 3}).encode()],
        "obj": [obj().encode(), (obj() + "g lid\nf 5//1 6//2 7//3\n").encode()],
        "ply": [ply().encode()],
        "off": [off().encode()],
        "msh": [msh().encode()],
    }
    import meshio

    surface = meshio.Mesh(CUBE, [("triangle", TRIANGLES)])
    corners, cells = lattice((2, 1, 1))
    at, rows = cut(corners, cells, "tetra")
    volume = meshio.Mesh(at, [("tetra", rows)])
    tagged = meshio.Mesh(
        CUBE,
        [("triangle", TRIANGLES)],
        cell_data={"gmsh:physical": [np.repeat([3, 2, 1], 4)], "gmsh:geometrical": [np.repeat([3, 2, 1], 4)]},
    )
    with TemporaryDirectory() as folder:
        for suffix, kind, data in (
            ("msh", "gmsh", tagged),
            ("mesh", "medit", surface),
            ("mesh", "medit", volume),
            ("su2", "su2", volume),
            ("inp", "abaqus", volume),
            ("inp", "abaqus", surface),
        ):
            path = Path(folder) / f"x.{suffix}"
            more = {"binary": False} if kind == "gmsh" else {}
            meshio.write(path, data, file_format=kind, **more)
            found.setdefault(suffix, []).append(path.read_bytes())
    return found


def _with(name: str, case: str, data: bytes) -> Files:
    return {"case.toml": _case(name, case), name: data}


@cache
def _mesh_texts(suffix: str) -> list[Files]:
    return [_with(f"cube.{suffix}", PICKED, data) for data in _texts()[suffix]]


@cache
def _vtk_surfaces(suffix: str) -> list[Files]:
    found = []
    for data in _surfaces()[suffix]:
        cases = [PICKED] + ([TAGGED] if b"region" in data else []) + ([ARRAYS] if b"tau" in data else [])
        found += [_with(f"cube.{suffix}", case, data) for case in cases]
    return found


@cache
def _volumes() -> list[Files]:
    """The surface is good, and so is the grid that its flow is taken from, as long as it is not spoilt."""
    found = []
    for suffix in ("vtu", "vtk"):
        case = ARRAYS.replace('traction = { array = "tau" }\n', "").replace(
            "[flow]\n", f'[flow]\nvolume = "flow.{suffix}"\n'
        )
        pool = [
            data
            for data in _surfaces()[suffix]
            if b"tau" not in data and (b'"U"' in data or b"U 3" in data or b"VECTORS U" in data)
        ]
        found += [{"case.toml": case.encode(), **_good(), f"flow.{suffix}": data} for data in pool]
    whole = found[0]["flow.vtu"]
    for kind, suffix, part in (
        ("PUnstructuredGrid", "pvtu", '<Piece Source="part.vtu"/>'),
        ("vtkMultiBlockDataSet", "vtm", '<DataSet index="0" name="a" file="part.vtu"/>'),
    ):
        case = found[0]["case.toml"].replace(b"flow.vtu", f"flow.{suffix}".encode())
        index = f'<VTKFile type="{kind}" version="1.0"><{kind}>{part}</{kind}></VTKFile>'.encode()
        found += [{"case.toml": case, **_good(), f"flow.{suffix}": index, "part.vtu": whole}] * 4
    return found


def _spoil_files(rng: Random, files: Files) -> Files:
    """Spoil the file that is not the case, by the ways of its format."""
    chosen = [name for name in files if name != "case.toml" and (len(files) < 3 or not name.endswith("cube.vtp"))]
    index = [name for name in chosen if name.startswith("cube.")]
    name = index[0] if index and rng.randrange(3) else rng.choice(chosen)
    data, suffix = files[name], name.rpartition(".")[2]
    if suffix in ("vtp", "vtu", "vtm", "pvtu", "pvtp", "pvd"):
        data = spoil_xml(rng, data, VTK_WORDS)
    elif suffix == "vtk":
        spoil: _Spoil = spoil_binary if b"BINARY" in data[:300] else spoil_text
        data = spoil(rng, data, LEGACY_WORDS)
    else:
        data = spoil_text(rng, data, TEXT_WORDS.get(suffix, ()))
    return {**files, name: data}


def _cases() -> list[Files]:
    return [{"case.toml": text.encode()} for text in base_cases()]


def _jobs() -> list[Files]:
    return [{"case.toml": text.encode(), **_good()} for text in (PICKED, TAGGED, ARRAYS, ARRAYS, *base_cases()[6:10])]


def _spoil_case(rng: Random, files: Files) -> Files:
    return {**files, "case.toml": spoil_case(rng, files["case.toml"].decode())}


def _spoil_quantity(rng: Random, files: Files) -> Files:
    kind = rng.choice(("unit", "vector", "quantity", "quantity"))
    needed = rng.choice(("kg/m^3", "m", "Pa", "m^3/s", "K", "J/(kg K)", "", "m/s^2"))
    text = quantity(rng) if kind == "quantity" else unit(rng)
    if rng.randrange(4) == 0:
        text = spoil_text(rng, text.encode("utf-8", "surrogatepass")).decode("utf-8", "replace")
    return {"quantity.txt": f"{kind}\n{needed}\n{text}".encode("utf-8", "surrogatepass")}


TARGETS = (
    Target("case", _cases, _spoil_case, _parse),
    Target("units", lambda: [{"quantity.txt": b"quantity\nkg/m^3\n1 g/cm^3 +/- 1 %"}], _spoil_quantity, _read_quantity),
    Target("job", _jobs, _spoil_case, _balance),
    *(Target(suffix, partial(_mesh_texts, suffix), _spoil_files, _balance) for suffix in sorted(TEXT_WORDS)),
    Target(
        "points",
        lambda: [{f"cloud.{suffix}": data} for suffix, data in _clouds()],
        _spoil_files,
        _read_cloud,
        native=True,
    ),
    *(
        Target(suffix, partial(_vtk_surfaces, suffix), _spoil_files, _balance, native=True)
        for suffix in ("vtp", "vtu", "vtk")
    ),
    Target("volume", _volumes, _spoil_files, _balance, native=True),
    Target("sets", _sets, _spoil_files, _balance, native=True),
)
"""All of them."""
