"""Meshes in Gmsh's and in other formats that come in through meshio."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import redirect_stderr, redirect_stdout
from io import StringIO
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

from tests.corpus.damage import cut_short, damaged, flipped, mesh_case, whole
from tests.corpus.entry import Input, files
from tests.corpus.shapes import CUBE, PICKED, TRIANGLES, msh
from tests.mesh_writing import write_meshio

__all__ = ["inputs"]


def _written(name: str, **options: Any) -> bytes:
    with TemporaryDirectory() as folder, redirect_stdout(StringIO()), redirect_stderr(StringIO()):
        write_meshio(Path(folder) / name, [("triangle", TRIANGLES)], points=CUBE, **options)
        return (Path(folder) / name).read_bytes()


def inputs() -> Iterator[Input]:
    """Yield the inputs."""
    text = msh()
    yield whole("msh", "cube.msh", text)
    yield from cut_short("msh", "cube.msh", text, (0.02, 0.3, 0.6, 0.95))
    yield from damaged(
        "msh",
        "cube.msh",
        text,
        [
            ("a huge count of points", "$Nodes\n8\n", "$Nodes\n99999999999\n"),
            ("a count of points below zero", "$Nodes\n8\n", "$Nodes\n-8\n"),
            ("too few points", "$Nodes\n8\n", "$Nodes\n9\n"),
            ("a huge count of elements", "$Elements\n12\n", "$Elements\n99999999999\n"),
            ("too many elements", "$Elements\n12\n", "$Elements\n11\n"),
            ("a count of words", "$Elements\n12\n", "$Elements\ntwelve\n"),
            ("an element of a kind that is not there", "1 2 2 3 3 ", "1 999 2 3 3 "),
            ("an element of -1 tags", "1 2 2 3 3 ", "1 2 -1 3 3 "),
            ("an index that is no point", " 1 4 3\n", " 1 4 9\n"),
            ("an index of zero", " 1 4 3\n", " 0 4 3\n"),
            ("a point twice", "\n2 1.0 0.0 0.0\n", "\n1 1.0 0.0 0.0\n"),
            ("a coordinate that is NaN", "\n2 1.0 0.0 0.0\n", "\n2 nan 0.0 0.0\n"),
            ("a coordinate at 1e200", "\n2 1.0 0.0 0.0\n", "\n2 1e200 0.0 0.0\n"),
            ("a version that is not there", "2.2 0 8", "9.9 0 8"),
            ("binary data announced", "2.2 0 8", "2.2 1 8"),
            ("no end of a section", "$EndElements\n", ""),
            ("a section in another", "$EndNodes\n", ""),
            ("a count of names that is huge", "$PhysicalNames\n3\n", "$PhysicalNames\n999999999\n"),
        ],
        alone=True,
    )
    yield from damaged(
        "msh",
        "cube.msh",
        text,
        [
            ("an element of a million tags", "1 2 2 3 3 ", "1 2 1000000 3 3 "),
            ("words of 3 bytes", "2.2 0 8", "2.2 0 3"),
            ("a name of a group without quotes", '2 1 "feed"', "2 1 feed"),
        ],
        alone=True,
        end="either",
    )
    for version in ("gmsh22", "gmsh"):

        def binary(version: str = version) -> bytes:
            return _written("cube.msh", file_format=version)

        yield whole(f"binary {version}", "cube.msh", binary)
        yield from cut_short(f"binary {version}", "cube.msh", binary, (0.1, 0.5, 0.9))
        yield from flipped(f"binary {version}", "cube.msh", binary, 4, slice(0, 60), alone=True)
    for suffix in (".inp", ".mesh", ".avs", ".nas", ".vol", ".xml", ".tec"):

        def made(suffix: str = suffix) -> bytes:
            return _written(f"cube{suffix}")

        yield whole(suffix, f"cube{suffix}", made)
        yield from cut_short(suffix, f"cube{suffix}", made, (0.2, 0.7), alone=True)
        yield from flipped(suffix, f"cube{suffix}", made, 2, slice(0, 40), alone=True)
    for suffix in (".med", ".h5m", ".xdmf"):
        yield Input(
            f"{suffix}/noise",
            "the file is noise",
            files({"case.toml": mesh_case(f"cube{suffix}"), f"cube{suffix}": "x" * 99}),
            says=(f"cube{suffix}",),
            alone=True,
        )
    yield from _xdmf()


def _xdmf() -> Iterator[Input]:
    """Yield XML that takes its numbers from another file."""
    points = " ".join(map(str, CUBE.ravel().tolist()))
    rows = " ".join(map(str, TRIANGLES.ravel().tolist()))

    def text(coordinates: str, head: str = "", form: str = "XML") -> str:
        return (
            f'<?xml version="1.0"?>{head}<Xdmf Version="3.0"><Domain><Grid Name="Grid">'
            f'<Geometry GeometryType="XYZ"><DataItem DataType="Float" Dimensions="8 3" Format="{form}" Precision="8">'
            f"{coordinates}</DataItem></Geometry>"
            '<Topology TopologyType="Triangle" NumberOfElements="12"><DataItem DataType="Int" Dimensions="12 3" '
            f'Format="XML" Precision="8">{rows}</DataItem></Topology></Grid></Domain></Xdmf>'
        )

    yield whole("xdmf", "cube.xdmf", text(points))
    yield from damaged(
        "xdmf", "cube.xdmf", text(points), [("dimensions below zero", "8 3", "-8 3")], alone=True, end="either"
    )
    for name, content in (
        ("numbers in a binary file outside", text("../outside/secret.txt", form="Binary")),
        ("numbers in a binary file of the system", text("/etc/passwd", form="Binary")),
        ("numbers in an HDF5 file outside", text("../outside/secret.h5:/x", form="HDF")),
        ("numbers in an HDF5 file of the system", text("/etc/passwd:/x", form="HDF")),
        ("an entity of a file", text("&x;", '<!DOCTYPE v [<!ENTITY x SYSTEM "../outside/secret.txt">]>')),
        (
            "a file that is included",
            text('<xi:include xmlns:xi="http://www.w3.org/2001/XInclude" href="../outside/secret.txt" parse="text"/>'),
        ),
        ("huge dimensions", text(points).replace("8 3", "99999999999 3")),
        ("numbers of 3 bytes", text(points).replace('"8">', '"3">')),
    ):
        yield Input(
            f"xdmf/{name}",
            f"the file has {name}",
            files({"case.toml": mesh_case("cube.xdmf"), "cube.xdmf": content}),
            end="refused",
            says=("cube.xdmf",),
            alone=True,
        )
    laughs = "".join(f'<!ENTITY l{k} "{f"&l{k - 1};" * 10}">' for k in range(1, 12))
    for suffix in (".xdmf", ".xml", ".vtu", ".vtp"):
        yield Input(
            f"{suffix}/entities that laugh",
            "entities grow tenfold, eleven times",
            files(
                {
                    "case.toml": mesh_case(f"cube{suffix}", PICKED),
                    f"cube{suffix}": f'<!DOCTYPE v [<!ENTITY l0 "lol">{laughs}]>' + text("&l11;"),
                }
            ),
            alone=True,
        )
