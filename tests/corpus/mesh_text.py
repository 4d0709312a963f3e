"""Surfaces in STL, OBJ, PLY and OFF."""

from __future__ import annotations

import struct
from collections.abc import Iterator

import numpy as np

from tests.corpus.damage import cut_short, damaged, flipped, mesh_case, whole
from tests.corpus.entry import Input, files
from tests.corpus.shapes import CUBE, PICKED, TRIANGLES, obj, off, ply, stl_binary, stl_text
from tests.mesh_writing import write_ply

__all__ = ["inputs"]

_SETS = PICKED.replace('file = "cube.vtp"', 'file = "cube.stl"\ngroups = { sets = true }')
for _rule, _tag in (
    ("pick = { normal = [-1, 0, 0], near = [0, 0.5, 0.5] }", 'tag = "a"'),
    ("pick = { normal = [1, 0, 0], near = [1, 0.5, 0.5] }", 'tag = "b"'),
):
    _SETS = _SETS.replace(_rule, _tag)


def inputs() -> Iterator[Input]:
    """Yield the inputs."""
    yield from _stl()
    yield from _stl_names()
    yield from _obj()
    yield from _ply()
    yield from _off()


def _stl() -> Iterator[Input]:
    yield whole("binary stl", "cube.stl", stl_binary)
    yield from cut_short("binary stl", "cube.stl", stl_binary, (0.05, 0.12, 0.5, 0.99))
    yield from flipped("binary stl", "cube.stl", stl_binary, 3, slice(0, 84))
    for count in (0, 11, 13, 2**31 - 1, 2**32 - 1):
        yield Input(
            f"binary stl/announces {count}",
            f"the header announces {count} of 12 triangles",
            files({"case.toml": mesh_case("cube.stl"), "cube.stl": stl_binary(count=count)}),
            says=("cube.stl",),
        )
    corners = np.array(CUBE[TRIANGLES])
    for name, value in (("nan", np.nan), ("inf", np.inf), ("1e38", 1e38), ("-1e38", -1e38)):
        spoilt = corners.copy()
        spoilt[5, 1, 2] = value
        yield Input(
            f"binary stl/corner at {name}",
            f"a coordinate is {name}",
            files({"case.toml": mesh_case("cube.stl"), "cube.stl": stl_binary(spoilt)}),
            says=("cube.stl",),
        )
    tiny = corners.copy()
    tiny[tiny == 0.0] = 1e-45
    yield Input(
        "binary stl/denormal corners",
        "zeros are the smallest number there is",
        files({"case.toml": mesh_case("cube.stl"), "cube.stl": stl_binary(tiny)}),
        end="either",
    )
    yield Input(
        "binary stl/starts as a text",
        "the header of a binary file starts with solid",
        files({"case.toml": mesh_case("cube.stl"), "cube.stl": b"solid" + stl_binary()[5:]}),
        end="answered",
    )
    text = stl_text()
    yield whole("ascii stl", "cube.stl", text)
    yield from cut_short("ascii stl", "cube.stl", text, (0.001, 0.3, 0.7, 0.995))
    yield from damaged(
        "ascii stl",
        "cube.stl",
        text,
        [
            ("a corner that is no number", "vertex 0.0 0.0 0.0", "vertex 0.0 x 0.0"),
            ("a corner of two numbers", "vertex 0.0 0.0 0.0", "vertex 0.0 0.0"),
            ("a corner of four numbers", "vertex 0.0 0.0 0.0", "vertex 0.0 0.0 0.0 0.0"),
            ("a corner that is NaN", "vertex 0.0 0.0 0.0", "vertex 0.0 nan 0.0"),
            ("a corner at 1e400", "vertex 0.0 0.0 0.0", "vertex 0.0 1e400 0.0"),
            ("a corner at 1e100", "vertex 0.0 0.0 0.0", "vertex 0.0 1e100 0.0"),
            ("a corner at 1e308", "vertex 0.0 0.0 0.0", "vertex 0.0 1e308 0.0"),
            ("a corner with a comma", "vertex 0.0 0.0 0.0", "vertex 0,0 0,0 0,0"),
            ("a zero byte", "facet", "fa\0cet"),
            ("no facets", text[len("solid cube\n") : -len("endsolid cube\n")], ""),
            ("a facet of two corners", "      vertex 0.0 0.0 0.0\n", ""),
            ("a second end", "endsolid cube", "endsolid cube\nendsolid cube"),
        ],
    )
    # normals are made of the corners, so what is said of them does not matter
    yield from damaged(
        "ascii stl",
        "cube.stl",
        text,
        [
            ("a normal that is no number", "normal 0 0 1", "normal 0 zero 1"),
            ("a normal of two numbers", "normal 0 0 1", "normal 0 0"),
            ("a normal of four numbers", "normal 0 0 1", "normal 0 0 1 1"),
            ("a facet without normal", "facet normal 0 0 1", "facet"),
            ("a loop that is not closed", "    endloop\n", ""),
        ],
        end="either",
    )


def _stl_names() -> Iterator[Input]:
    """Yield names of solids that upset a terminal, a page or a table."""
    for name, solid in (
        ("markup", "<script>alert(1)</script>[bold red]"),
        ("an escape sequence", "\x1b[2J\x1b[31mred"),
        ("bell and backspace", "a\x07b\x08c"),
        ("direction signs", "a\u202eb\u2066c"),
        ("quotes", "a\"b'c`d"),
        ("a template", "{{ 7 * 7 }}${HOME}%s{0}"),
        ("50000 letters", "n" * 50_000),
        ("the word solid", "solid solid"),
        ("an empty name", ""),
        ("another alphabet", "سطح 面"),
        ("bytes that are no UTF-8", "a\udcff\udcfeb"),
    ):
        text = stl_text({"a": 1, "b": 2, solid: 3}).encode("utf-8", "surrogateescape")
        yield Input(
            f"solid/called by {name}",
            f"a solid has {name} for its name",
            files({"case.toml": _SETS, "cube.stl": text}),
            end="answered",
        )
        yield Input(
            f"solid/told in a message: {name}",
            f"a solid has {name} for its name, and a group none",
            files({"case.toml": _SETS.replace('tag = "a"', 'tag = "c"'), "cube.stl": text}),
        )
        yield Input(
            f"solid/checked: {name}",
            f"a solid has {name} for its name",
            files({"case.toml": _SETS, "cube.stl": text}),
            end="answered",
            command=("check", "case.toml"),
        )
        yield Input(
            f"solid/started: {name}",
            f"a solid has {name} for its name",
            files({"cube.stl": text}),
            end="answered",
            command=("start", "cube.stl", "--unit", "m"),
        )


def _obj() -> Iterator[Input]:
    text = obj()
    yield whole("obj", "cube.obj", text)
    yield from cut_short("obj", "cube.obj", text, (0.02, 0.5, 0.97))
    yield from damaged(
        "obj",
        "cube.obj",
        text,
        [
            ("a point of two numbers", "v 1.0 1.0 0.0", "v 1.0 1.0"),
            ("a point that is no number", "v 1.0 1.0 0.0", "v 1.0 one 0.0"),
            ("a point that is NaN", "v 1.0 1.0 0.0", "v 1.0 nan 0.0"),
            ("a point at 1e400", "v 1.0 1.0 0.0", "v 1.0 1e400 0.0"),
            ("a point at 1e200", "v 1.0 1.0 0.0", "v 1.0 1e200 0.0"),
            ("point 0 in a face", "f 1 4 3", "f 0 4 3"),
            ("point 9 of 8", "f 1 4 3", "f 9 4 3"),
            ("point -9 of 8", "f 1 4 3", "f -9 4 3"),
            ("a huge index", "f 1 4 3", f"f {10**30} 4 3"),
            ("an index that is no number", "f 1 4 3", "f a/b/c 4 3"),
            ("a face of two points", "f 1 4 3", "f 1 4"),
            ("a face of one point thrice", "f 1 4 3", "f 1 1 1"),
            ("a zero byte", "f 1 4 3", "f 1\0 4 3"),
        ],
    )
    for name, line in (
        ("a library outside", "mtllib ../outside/secret.txt\nusemtl x\n"),
        ("a library of the system", "mtllib /etc/passwd\nmtllib |id\n"),
        ("a call", "call ../outside/secret.txt\ncsh touch hacked\n"),
        ("a long group", "g " + "x" * 200_000 + "\n"),
    ):
        yield Input(
            f"obj/{name}",
            "a line names other files or commands",
            files({"case.toml": mesh_case("cube.obj"), "cube.obj": line + text}),
            end="either",
        )


def _ply_binary(count: int | None = None) -> bytes:
    from pathlib import Path
    from tempfile import TemporaryDirectory

    with TemporaryDirectory() as folder:
        path = write_ply(
            Path(folder) / "x.ply", CUBE, TRIANGLES.tolist(), "binary_little_endian", np.zeros(8), np.zeros(12, int)
        )
        data = path.read_bytes()
    return data if count is None else data.replace(b"element face 12", f"element face {count}".encode())


def _ply() -> Iterator[Input]:
    text = ply()
    yield whole("ascii ply", "cube.ply", text)
    yield whole("binary ply", "cube.ply", _ply_binary)
    yield from cut_short("ascii ply", "cube.ply", text, (0.01, 0.3, 0.9))
    yield from cut_short("binary ply", "cube.ply", _ply_binary, (0.3, 0.6, 0.99))
    yield from flipped("binary ply", "cube.ply", _ply_binary, 6, slice(0, 250))
    yield from damaged(
        "ascii ply",
        "cube.ply",
        text,
        [
            ("a count below zero", "element face 12", "element face -12"),
            ("a count of words", "element face 12", "element face twelve"),
            ("a huge count of faces", "element face 12", "element face 4000000000000"),
            ("a huge count of points", "element vertex 8", f"element vertex {10**30}"),
            ("a huge list", "3 0 3 2", "2000000000 0 3 2"),
            ("a list below zero", "3 0 3 2", "-3 0 3 2"),
            ("no end of its header", "end_header\n", ""),
            ("a type of its own", "property double x", "property quaternion x"),
            ("two properties alike", "property double y", "property double x"),
            ("a format of its own", "ascii 1.0", "morse 9.9"),
            ("points without z", "property double z\n", ""),
            ("a coordinate that is NaN", "\n1.0 1.0 0.0\n", "\n1.0 nan 0.0\n"),
            ("a coordinate at 1e300", "\n1.0 1.0 0.0\n", "\n1.0 1e300 0.0\n"),
            ("an index that is no point", "3 0 3 2", "3 0 3 8"),
        ],
    )
    for count in (2**31 - 1, 2**62, 10**25):
        yield Input(
            f"binary ply/announces {count} faces",
            "the header announces far more than the file holds",
            files({"case.toml": mesh_case("cube.ply"), "cube.ply": _ply_binary(count)}),
            says=("cube.ply",),
        )
    huge_list = _ply_binary().replace(b"list uchar int", b"list uint int")
    head = huge_list.index(b"end_header\n") + 11
    body = huge_list[head : head + 8 * 28] + struct.pack("<hI", 0, 2**32 - 1) + bytes(64)
    yield Input(
        "binary ply/a list of 4 billion",
        "a face announces 4 billion points",
        files({"case.toml": mesh_case("cube.ply"), "cube.ply": huge_list[:head] + body}),
        says=("cube.ply",),
    )


def _off() -> Iterator[Input]:
    text = off()
    yield whole("off", "cube.off", text)
    yield from cut_short("off", "cube.off", text, (0.01, 0.4, 0.9))
    yield from damaged(
        "off",
        "cube.off",
        text,
        [
            ("another first word", "OFF", "FOFF"),
            ("a huge count of points", "8 12 0", "99999999999999 12 0"),
            ("a huge count of faces", "8 12 0", "8 99999999999999 0"),
            ("a count below zero", "8 12 0", "-8 12 0"),
            ("a count of words", "8 12 0", "eight 12 0"),
            ("an index that is no point", "3 0 3 2", "3 0 3 8"),
            ("an index below zero", "3 0 3 2", "3 0 3 -1"),
            ("a coordinate that is NaN", "\n1.0 1.0 0.0\n", "\n1.0 nan 0.0\n"),
        ],
    )
