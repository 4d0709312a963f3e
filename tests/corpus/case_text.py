"""Cases that are no TOML, or TOML of the wrong shape or size."""

from __future__ import annotations

import random
from collections.abc import Iterator
from functools import partial

from tests.corpus.entry import Content, Input, files
from tests.corpus.shapes import PICKED, obj, vtp

__all__ = ["inputs"]


def _with(case: Content) -> dict[str, Content]:
    return {"case.toml": case, "cube.vtp": vtp}


def _groups(count: int, alike: bool = False) -> str:
    head = PICKED.replace('file = "cube.vtp"', 'file = "cube.vtp"\ngroups = { array = "region" }').split("[groups")[0]
    return head + "".join(f'[groups.g{k}]\nrole = "wall"\ntag = {1 if alike else k}\n' for k in range(1, count + 1))


def _noise() -> bytes:
    return random.Random(7).randbytes(2000)


def inputs() -> Iterator[Input]:
    """Yield the inputs."""
    toml = "valid TOML"
    refused: list[tuple[str, str, Content, tuple[str, ...]]] = [
        ("empty", "has no bytes", "", ("surface", "missing")),
        ("blank", "has nothing but blanks and line ends", " \n\t\n\n", ("surface", "missing")),
        ("comments only", "has nothing but comments", "# to do\n# later\n", ("surface", "missing")),
        ("open quote", "a text does not end", PICKED.replace('"cube.vtp"', '"cube.vtp'), (toml, "line 2")),
        ("open bracket", "a list does not end", PICKED.replace("-9.80665]", "-9.80665"), (toml,)),
        ("open table", "the head of a table does not end", PICKED.replace("[fluid]", "[fluid"), (toml,)),
        ("no value", "a key has no value", PICKED.replace("density = 1000", "density ="), (toml,)),
        ("two equals", "a key has two", PICKED.replace("density = 1000", "density == 1000"), (toml,)),
        ("key twice", "a key stands twice", PICKED.replace("density = 1000", "density = 1\ndensity = 2"), (toml,)),
        ("table twice", "a table stands twice", PICKED + "[fluid]\ndensity = 2\n", (toml,)),
        ("table and key", "one name is a value and a table", "fluid = 3\n" + PICKED, (toml,)),
        ("bare text", "a text has no quotes", PICKED.replace('"inlet"', "inlet", 1), (toml,)),
        ("UTF-16", "is saved as UTF-16 with a mark", PICKED.encode("utf-16"), ("UTF-8",)),
        ("UTF-16 without mark", "is saved as UTF-16 without a mark", PICKED.encode("utf-16-le"), ()),
        ("UTF-32", "is saved as UTF-32", PICKED.encode("utf-32"), ("UTF-8",)),
        ("Latin-1", "has a letter in Latin-1", ('title = "Düse"\n' + PICKED).encode("latin-1"), ("line 1", "UTF-8")),
        ("surrogate", "has half a pair of UTF-16 in UTF-8", b'title = "\xed\xa0\x80"\n' + PICKED.encode(), ("UTF-8",)),
        ("overlong", "has a slash in two bytes of UTF-8", b'title = "\xc0\xaf"\n' + PICKED.encode(), ("UTF-8",)),
        ("escaped surrogate", "has an escape that is no character", 'title = "\\ud800"\n' + PICKED, (toml,)),
        ("NUL", "has a zero byte", PICKED.replace('"cube.vtp"', '"cube\0.vtp"'), (toml,)),
        ("escaped NUL", "has a zero byte by its escape", PICKED.replace('"cube.vtp"', '"cube\\u0000.vtp"'), ("file",)),
        ("escape sequence", "colours the terminal", PICKED.replace("[fluid]", "[fluid]\n# \x1b[31m"), (toml,)),
        ("Mac line ends", "has line ends of old", PICKED.replace("\n", "\r"), (toml,)),
        ("lists 100000 deep", "nests lists", "title = " + "[" * 100_000 + "]" * 100_000, ("nested",)),
        ("inline tables 50000 deep", "nests tables", "a = " + "{a = " * 50_000 + "1" + "}" * 50_000, ("nested",)),
        ("lists 500 deep", "nests lists", "title = " + "[" * 500 + "]" * 500 + "\n" + PICKED, ("nested",)),
        ("dotted key 20000 deep", "nests tables by points", ".".join("a" * 20_000) + " = 1\n" + PICKED, ()),
        ("head of table 5000 deep", "nests a table", PICKED + "[" + ".".join("b" * 5_000) + "]\nx = 1\n", ()),
        ("key of 1 MB", "has a very long key", "a" * 1_000_000 + " = 1\n" + PICKED, ("unknown",)),
        ("text of 3 MB", "a unit is 3 MB long", PICKED.replace("1000", f'"{"k" * 3_000_000}"'), ("fluid.density",)),
        ("number of 3 MB", "a number has 3 million digits", PICKED.replace("1000", "9" * 3_000_000), ()),
        ("float of 1 MB", "a number has a million digits", PICKED.replace("1000", "1." + "9" * 10**6 + "e999"), ()),
        ("5 MB", "is larger than a case", "# " + "x" * 5_000_000 + "\n" + PICKED, ("4 MB",)),
        ("100000 unknown keys", "has 100000", "".join(f"k{k} = 1\n" for k in range(100_000)) + PICKED, ("unknown",)),
        ("10000 groups", "has 10000 groups for 3 tags", partial(_groups, 10_000), ("no faces",)),
        ("10000 groups alike", "has 10000 groups of one tag", partial(_groups, 10_000, True), ("things are wrong",)),
        ("date", "a date stands for a number", PICKED.replace("1000", "1979-05-27T07:32:00Z"), ("fluid.density",)),
        ("JSON", "is JSON", '{"surface": {"file": "cube.vtp"}}\n', (toml,)),
        ("YAML", "is YAML", "surface:\n  file: cube.vtp\n", (toml,)),
        ("noise", "is noise", _noise, ("UTF-8",)),
        ("mesh for case", "is a mesh", obj, (toml,)),
        ("script", "is a script", "#!/bin/sh\nrm -rf ~\n", (toml,)),
        ("table list for table", "[[surface]]", PICKED.replace("[surface]", "[[surface]]"), ("surface", "table")),
        ("table for list", "[carried] for [[carried]]", PICKED + '[carried]\nname = "salt"\n', ("carried",)),
        ("groups is a list", "groups = []", "groups = []\n" + PICKED.split("[groups")[0], ("groups", "table")),
        ("no groups", "has no group", PICKED.split("[groups")[0], ("groups",)),
        ("unknown table", "[grups.x]", PICKED + '[grups.x]\nrole = "wall"\n', ("grups",)),
        ("markup for role", "a role is markup", PICKED.replace('"wall"', '"[red]<script>wall"'), ("role",)),
    ]
    for name, wrong, case, says in refused:
        yield Input(f"case/{name}", f"the case {wrong}", files(_with(case)), says=says)
    answered: list[tuple[str, str, Content]] = [
        ("mark of UTF-8", "starts with a byte order mark", b"\xef\xbb\xbf" + PICKED.encode()),
        ("DOS line ends", "has line ends of another system", PICKED.replace("\n", "\r\n")),
        ("no last line end", "does not end its last line", PICKED.rstrip("\n")),
        ("title of 100 kB", "has a very long title", f'title = "{"long " * 20_000}end"\n' + PICKED),
        ("title with markup", "has a title with markup", 'title = "[bold]<b>&amp;$x^2$ {{7*7}}[/]"\n' + PICKED),
        ("title in other scripts", "has a title of all kinds of signs", 'title = "水流 поток تدفق 🌊"\n' + PICKED),
    ]
    for name, wrong, case in answered:
        yield Input(f"case/{name}", f"the case {wrong}", files(_with(case)), end="answered")
    yield Input(
        "case/title that turns the text",
        "the title holds signs that turn the direction of a text",
        files(_with('title = "a\\u202eb\\u2066c"\n' + PICKED)),
        says=("title",),
    )
