"""Surfaces in VTK XML, as VTK's own writer writes them and by hand, and in legacy VTK."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

from tests.corpus.damage import cut_short, damaged, flipped, mesh_case, whole
from tests.corpus.entry import Input, files
from tests.corpus.shapes import CUBE, REGION, TAGGED, TRIANGLES, legacy, vtp, vtu
from tests.mesh_writing import write_vtk_xml

__all__ = ["inputs"]


def _polydata() -> Any:
    import pyvista

    data = pyvista.PolyData.from_regular_faces(CUBE, TRIANGLES)
    data.cell_data["region"] = REGION
    return data


def _written(mode: str, compressed: bool = False) -> bytes:
    with TemporaryDirectory() as folder:
        return write_vtk_xml(_polydata(), Path(folder) / "x.vtp", mode, compressed).read_bytes()


def _raw() -> bytes:
    return _written("raw")


def _compressed() -> bytes:
    return _written("raw", compressed=True)


def _inline() -> bytes:
    return _written("inline")


def _legacy_binary() -> bytes:
    with TemporaryDirectory() as folder:
        _polydata().save(Path(folder) / "x.vtk", binary=True)
        return (Path(folder) / "x.vtk").read_bytes()


def inputs() -> Iterator[Input]:
    """Yield the inputs."""
    yield from _ascii()
    for kind, made in (("raw vtp", _raw), ("packed vtp", _compressed), ("inline vtp", _inline)):
        yield whole(kind, "cube.vtp", made, TAGGED)
        yield from cut_short(kind, "cube.vtp", made, (0.1, 0.5, 0.8, 0.97), TAGGED)
        yield from flipped(kind, "cube.vtp", made, 5, slice(0, 2500), TAGGED, alone=True)
    yield from _doctypes()
    yield from _grids()
    yield from _legacy()


def _ascii() -> Iterator[Input]:
    text = vtp()
    yield whole("ascii vtp", "cube.vtp", text, TAGGED)
    yield from cut_short("ascii vtp", "cube.vtp", text, (0.02, 0.4, 0.7, 0.98), TAGGED)
    numbers = 'Name="Points" NumberOfComponents="3"'
    yield from damaged(
        "ascii vtp",
        "cube.vtp",
        text,
        [
            ("fewer points than announced", 'NumberOfPoints="8"', 'NumberOfPoints="9"'),
            ("more points than announced", 'NumberOfPoints="8"', 'NumberOfPoints="7"'),
            ("a huge count of points", 'NumberOfPoints="8"', 'NumberOfPoints="9000000000000000000"'),
            ("a count of points below zero", 'NumberOfPoints="8"', 'NumberOfPoints="-8"'),
            ("a count of words", 'NumberOfPoints="8"', 'NumberOfPoints="eight"'),
            ("fewer faces than announced", 'NumberOfPolys="12"', 'NumberOfPolys="13"'),
            ("a huge count of faces", 'NumberOfPolys="12"', 'NumberOfPolys="999999999999"'),
            ("points of two components", numbers, 'Name="Points" NumberOfComponents="2"'),
            ("points of no component", numbers, 'Name="Points" NumberOfComponents="0"'),
            ("points of a million components", numbers, 'Name="Points" NumberOfComponents="1000000"'),
            ("a word among the points", "1.0 1.0 0.0", "1.0 one 0.0"),
            ("a point that is NaN", "1.0 1.0 0.0", "1.0 nan 0.0"),
            ("a point at 1e400", "1.0 1.0 0.0", "1.0 1e400 0.0"),
            ("a point at 1e100", "1.0 1.0 0.0", "1.0 1e100 0.0"),
            ("a point at 1e308", "1.0 1.0 0.0", "1.0 1e308 0.0"),
            ("an index that is no point", ">0 3 2 ", ">0 3 8 "),
            ("an index below zero", ">0 3 2 ", ">0 3 -1 "),
            ("a huge index", ">0 3 2 ", ">0 3 9223372036854775807 "),
            ("an index beyond 64 bits", ">0 3 2 ", ">0 3 99999999999999999999999 "),
            ("offsets that fall", ">3 6 9 ", ">9 6 3 "),
            ("offsets below zero", ">3 6 9 ", ">-3 6 9 "),
            ("offsets beyond the end", " 36<", " 99<"),
            ("a type of its own", 'type="Float64"', 'type="Float128"'),
            ("points of texts", 'type="Float64" Name="Points"', 'type="String" Name="Points"'),
            ("no connectivity", 'Name="connectivity"', 'Name="other"'),
            ("no offsets", 'Name="offsets"', 'Name="other"'),
            ("a data set of another kind", 'type="PolyData"', 'type="ImageData"'),
            ("no kind", ' type="PolyData"', ""),
            ("a tag that does not end", "<CellData>", "<CellData"),
            ("tags that cross", "</Points>", "</Polys>"),
            ("a format of its own", 'format="ascii"', 'format="telegraph"'),
            ("appended data that are not there", 'format="ascii"', 'format="appended" offset="0"'),
            ("a huge offset of appended data", 'format="ascii"', 'format="appended" offset="99999999999999999999"'),
            ("appended data from below zero", 'format="ascii"', 'format="appended" offset="-5"'),
            ("an unknown encoding", "<VTKFile type", '<?xml version="1.0" encoding="klingon"?><VTKFile type'),
            ("a zero byte", "<CellData>", "<Cell\0Data>"),
        ],
        TAGGED,
    )
    yield from damaged(
        "ascii vtp",
        "cube.vtp",
        text,
        [
            ("points called otherwise", 'Name="Points"', 'Name="Punkte"'),
        ],
        TAGGED,
        end="either",
    )
    yield from damaged(
        "raw vtp",
        "cube.vtp",
        _raw,
        [
            ("a huge length of an array", b"_" + (192).to_bytes(8, "little"), b"_" + (2**62).to_bytes(8, "little")),
            ("a length of an array of 2^64-1", b"_" + (192).to_bytes(8, "little"), b"_" + b"\xff" * 8),
        ]
        if (b"_" + (192).to_bytes(8, "little")) in _raw()
        else [
            ("a length of an array of 2^64-1", b'encoding="raw">', b'encoding="raw">\n   _' + b"\xff" * 12),
        ],
        TAGGED,
        alone=True,
    )


def _doctypes() -> Iterator[Input]:
    """Yield XML that would make its parser read other files, or grow without end."""
    laughs = "".join(f'<!ENTITY l{k} "{f"&l{k - 1};" * 10}">' for k in range(1, 12))
    text = vtp(on_faces={"region": REGION, "extra": REGION})
    for name, head, new in (
        ("entity of a file", '<!DOCTYPE v [<!ENTITY x SYSTEM "../outside/secret.txt">]>', "&x;"),
        ("entity of the system", '<!DOCTYPE v [<!ENTITY x SYSTEM "file:///etc/passwd">]>', "&x;"),
        ("entity of a site", '<!DOCTYPE v [<!ENTITY x SYSTEM "http://127.0.0.1:9/x">]>', "&x;"),
        ("parameter entity", '<!DOCTYPE v [<!ENTITY % x SYSTEM "../outside/secret.txt"> %x;]>', "extra"),
        ("document type outside", '<!DOCTYPE v SYSTEM "../outside/secret.txt">', "extra"),
        ("entities that laugh", f'<!DOCTYPE v [<!ENTITY l0 "lol">{laughs}]>', "&l11;"),
        ("entity that holds itself", '<!DOCTYPE v [<!ENTITY a "&b;"><!ENTITY b "&a;">]>', "&a;"),
        ("large entity used often", f'<!DOCTYPE v [<!ENTITY a "{"a" * 100_000}">]>', "&a;" * 10_000),
        ("style sheet", '<?xml-stylesheet href="../outside/secret.txt"?>', "extra"),
    ):
        yield Input(
            f"xml/{name}",
            "the XML has entities, or names other files",
            files({"case.toml": TAGGED, "cube.vtp": '<?xml version="1.0"?>' + head + text.replace("extra", new)}),
            end="either",
            alone=True,
        )
    included = text.replace(
        "<CellData>",
        '<CellData><xi:include xmlns:xi="http://www.w3.org/2001/XInclude" href="../outside/secret.txt" parse="text"/>',
    )
    yield Input(
        "xml/include", "the XML includes a file", files({"case.toml": TAGGED, "cube.vtp": included}), end="either"
    )
    deep = text.replace("<CellData>", "<CellData>" + "<a>" * 200_000 + "</a>" * 200_000)
    yield Input(
        "xml/200000 deep",
        "the XML is 200000 tags deep",
        files({"case.toml": TAGGED, "cube.vtp": deep}),
        end="either",
        alone=True,
    )
    wide = text.replace("<VTKFile ", "<VTKFile " + "".join(f'a{k}="" ' for k in range(100_000)))
    yield Input(
        "xml/100000 attributes",
        "a tag has 100000 attributes",
        files({"case.toml": TAGGED, "cube.vtp": wide}),
        end="either",
        alone=True,
    )


def _grids() -> Iterator[Input]:
    text = vtu()
    yield whole("vtu", "cube.vtu", text)
    yield from cut_short("vtu", "cube.vtu", text, (0.1, 0.6, 0.97))
    yield from damaged(
        "vtu",
        "cube.vtu",
        text,
        [
            ("cells of a kind that is not there", ">12<", ">199<"),
            ("cells of kind 300", ">12<", ">300<"),
            ("cells that are points", ">12<", ">1<"),
            ("polyhedra without faces", ">12<", ">42<"),
            ("an index that is no point", ">0 1 2 3 ", ">0 1 2 8 "),
            ("an offset beyond the end", ">8<", ">80<"),
            ("an offset of 2^62", ">8<", f">{2**62}<"),
            ("a huge count of cells", 'NumberOfCells="1"', 'NumberOfCells="1000000000000"'),
            ("no cells", 'NumberOfCells="1"', 'NumberOfCells="0"'),
            ("no types", 'Name="types"', 'Name="kinds"'),
        ],
        alone=True,
    )
    yield from damaged(
        "vtu",
        "cube.vtu",
        text,
        [
            ("Lagrange cells of 8 points", ">12<", ">72<"),
        ],
        alone=True,
        end="either",
    )
    faces = vtu(kind=42).replace(
        "</Cells>",
        '<DataArray type="Int64" Name="faces" format="ascii">99999999999 3 0 1 2</DataArray>\n'
        '<DataArray type="Int64" Name="faceoffsets" format="ascii">5</DataArray>\n</Cells>',
    )
    yield Input(
        "vtu/polyhedron of 10^11 faces",
        "a polyhedron announces 10^11 faces",
        files({"case.toml": mesh_case("cube.vtu"), "cube.vtu": faces}),
        says=("cube.vtu",),
        alone=True,
    )
    yield Input(
        "vtu/flat cells",
        "all points of the cell lie in a plane",
        files({"case.toml": mesh_case("cube.vtu"), "cube.vtu": vtu(CUBE * [1, 1, 0])}),
    )
    yield Input(
        "vtu/one cell twice",
        "a cell stands twice",
        files({"case.toml": mesh_case("cube.vtu"), "cube.vtu": vtu(cells=[tuple(range(8))] * 2)}),
    )


def _legacy() -> Iterator[Input]:
    text = legacy()
    yield whole("legacy vtk", "cube.vtk", text, TAGGED)
    yield whole("binary legacy vtk", "cube.vtk", _legacy_binary, TAGGED)
    yield from cut_short("legacy vtk", "cube.vtk", text, (0.05, 0.4, 0.7, 0.97), TAGGED)
    yield from cut_short("binary legacy vtk", "cube.vtk", _legacy_binary, (0.2, 0.5, 0.8), TAGGED)
    yield from flipped("binary legacy vtk", "cube.vtk", _legacy_binary, 5, slice(0, 110), TAGGED, alone=True)
    yield from damaged(
        "legacy vtk",
        "cube.vtk",
        text,
        [
            ("a huge count of points", "POINTS 8 double", "POINTS 99999999999 double"),
            ("a count of points beyond 64 bits", "POINTS 8 double", f"POINTS {10**30} double"),
            ("a count of points below zero", "POINTS 8 double", "POINTS -8 double"),
            ("a count of words", "POINTS 8 double", "POINTS eight double"),
            ("too few points", "POINTS 8 double", "POINTS 9 double"),
            ("too many points", "POINTS 8 double", "POINTS 7 double"),
            ("a huge count of faces", "POLYGONS 12 48", "POLYGONS 99999999999 399999999996"),
            ("a size that does not fit", "POLYGONS 12 48", "POLYGONS 12 47"),
            ("points of a type of its own", "POINTS 8 double", "POINTS 8 quadruple"),
            ("another first line", "# vtk DataFile", "# vtc DataFile"),
            ("another kind of data set", "DATASET POLYDATA", "DATASET ORIGAMI"),
            ("a face of a million points", "3 0 3 2", "1000000 0 3 2"),
            ("a face of -1 points", "3 0 3 2", "-1 0 3 2"),
            ("an index that is no point", "3 0 3 2", "3 0 3 8"),
            ("a huge count of tags", "CELL_DATA 12", "CELL_DATA 99999999999"),
            ("tags of -1 components", "region int 1", "region int -1"),
            ("tags of a billion components", "region int 1", "region int 1000000000"),
            ("a coordinate that is NaN", "1.0 1.0 0.0", "1.0 nan 0.0"),
            ("a coordinate at 1e200", "1.0 1.0 0.0", "1.0 1e200 0.0"),
            ("BINARY for ASCII", "ASCII", "BINARY"),
        ],
        TAGGED,
        alone=True,
    )
    yield from damaged(
        "legacy vtk",
        "cube.vtk",
        text,
        [
            ("tags of a type of its own", "region int 1", "region integer 1"),
            ("a title of 100000 letters", "\ncube\n", "\n" + "c" * 100_000 + "\n"),
        ],
        TAGGED,
        alone=True,
        end="either",
    )
    many = legacy("FIELD more 99999999\n")
    yield Input(
        "legacy vtk/announces 10^8 arrays",
        "a field announces 10^8 arrays and has none",
        files({"case.toml": mesh_case("cube.vtk", TAGGED), "cube.vtk": many}),
        end="either",
        alone=True,
    )
