"""Flow that comes in another file than the surface: points in text, grids of cells, snapshots in time."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np

from tests.corpus.damage import cut_short
from tests.corpus.entry import CAUSES, CHECK, EXPORT, Content, Input, files
from tests.corpus.shapes import ARRAYS, CUBE, PICKED, vtp, vtu

__all__ = ["inputs"]

_FLOW = ARRAYS.replace('traction = { array = "tau" }\n', "").replace(
    'velocity = { array = "U" }', "velocity = { array = {} }"
)
_POINTS = _FLOW.replace("{}", '["u", "v", "w"]').replace("[flow]\n", '[flow]\npoints = "cloud.csv"\n')
_VOLUME = _FLOW.replace("{}", '"U"').replace("[flow]\n", '[flow]\nvolume = "flow.vtu"\n')


def _cloud() -> np.ndarray:
    ticks = np.linspace(-0.1, 1.1, 8)
    places = np.stack(np.meshgrid(ticks, ticks, ticks), axis=-1).reshape(-1, 3)
    return np.column_stack([places, np.tile([2.0, 0.0, 0.0], (512, 1)), 500.0 - 300.0 * places[:, 0]])


def _csv(rows: Any = None, head: str = "x,y,z,u,v,w,p", mark: str = ",") -> str:
    rows = _cloud() if rows is None else rows
    return (
        head.replace(",", mark) + "\n" + "\n".join(mark.join(map(str, row)) for row in np.asarray(rows).tolist()) + "\n"
    )


def _with(cloud: Content, case: str = _POINTS) -> dict[str, Content]:
    return {"case.toml": case, "cube.vtp": vtp, "cloud.csv": cloud}


def _spoilt(row: int, column: int, value: float) -> str:
    rows = _cloud()
    rows[row, column] = value
    return _csv(rows)


def inputs() -> Iterator[Input]:
    """Yield the inputs."""
    yield from _points()
    yield from _volumes()
    yield from _snapshots()
    yield from _commands()


def _points() -> Iterator[Input]:
    text = _csv()
    yield Input("points/whole", "nothing", files(_with(_csv)), "answered")
    answered = {
        "semicolons": _csv(mark=";"),
        "tabs": _csv(mark="\t"),
        "blanks": _csv(mark=" "),
        "a mark of UTF-8": "\ufeff" + text,
        "DOS line ends": text.replace("\n", "\r\n"),
        "comments": "# made\n" + text + "# end\n",
        "a column that is text": "\n".join(
            line + ("," + ("note" if k == 0 else "a b c")) for k, line in enumerate(text.splitlines())
        ),
    }
    for name, content in answered.items():
        yield Input(f"points/{name}", f"the table has {name}", files(_with(content)), "answered")
    lines = text.splitlines(keepends=True)
    refused: dict[str, Content] = {
        "no bytes": "",
        "only a header": lines[0],
        "no header": "".join(lines[1:]),
        "one row": "".join(lines[:2]),
        "a row too short": text.replace(lines[7], "1,2,3\n"),
        "a row too long": text.replace(lines[7], lines[7].strip() + ",1,2,3\n"),
        "two columns alike": text.replace("u,v,w", "u,u,w"),
        "no column of that name": text.replace("u,v,w", "u,v,ww"),
        "no coordinates": text.replace("x,y,z", "a,b,c"),
        "a word for a number": text.replace(lines[7].split(",")[6].strip(), "high", 1),
        "a gap": text.replace(lines[9], lines[9].rsplit(",", 1)[0] + ",\n"),
        "NaN for a pressure": _spoilt(20, 6, np.nan),
        "infinity for a speed": _spoilt(20, 3, np.inf),
        "1e300 for a pressure": _spoilt(20, 6, 1e300),
        "1e300 for a coordinate": _spoilt(20, 0, 1e300),
        "NaN for a coordinate": _spoilt(20, 0, np.nan),
        "all at one place": lambda: _csv(np.tile(_cloud()[:1], (512, 1))),
        "all in a line": lambda: _csv(np.column_stack([_cloud()[:, :1], np.zeros((512, 2)), _cloud()[:, 3:]])),
        "all in a plane": lambda: _csv(np.column_stack([_cloud()[:, :2], np.zeros((512, 1)), _cloud()[:, 3:]])),
        "another place": lambda: _csv(_cloud() + np.eye(7)[0] * 50),
        "UTF-16": text.encode("utf-16"),
        "zero bytes": text.replace("0", "\0", 3),
        "letters of Latin-1": ("# Düse\n" + text).encode("latin-1"),
        "a mesh": vtp,
        "a line of 10 MB": "x,y,z,p\n" + "1," * 5_000_000,
        "100000 columns": ",".join(f"c{k}" for k in range(100_000)) + "\n" + ",".join(["1"] * 100_000) + "\n",
        "an open quote": text.replace("x,y,z", 'x,"y,z'),
        "a formula": text.replace(lines[3], "=cmd|' /C calc'!A0,1,2,3,4,5,6\n"),
        "names that colour the terminal": text.replace("u,v,w", "\x1b[31mu,v,w"),
    }
    either = {"letters of Latin-1"}
    for name, content in refused.items():
        yield Input(
            f"points/{name}", f"the table has {name}", files(_with(content)), "either" if name in either else "refused"
        )
    yield from cut_points(text)
    for suffix in ("vtp", "ply", "vtk"):
        case = _POINTS.replace("cloud.csv", f"cloud.{suffix}")
        yield Input(
            f"points/noise in .{suffix}",
            "the points are noise",
            files({"case.toml": case, "cube.vtp": vtp, f"cloud.{suffix}": "noise\n" * 50}),
        )
    for key, value in (("reach", '"0 m"'), ("reach", "nan"), ("unit", '"kg"'), ("coordinates", '["x"]'), ("file", "3")):
        case = _POINTS.replace('points = "cloud.csv"', f'points = {{ file = "cloud.csv", {key} = {value} }}')
        yield Input(f"points/{key} = {value}", f"the case has {key} = {value}", files(_with(_csv, case)))


def cut_points(text: str) -> Iterator[Input]:
    """Yield the table cut within a row; one that ends with a row is whole."""
    for share in (0.01, 0.5, 0.9):
        end = text.rindex(",", 0, int(share * len(text))) + 1
        yield Input(f"points/cut at {share:.0%}", f"the table ends after {share:.0%}", files(_with(text[:end])))


def _volumes() -> Iterator[Input]:
    on_points = {"U": np.tile([2.0, 0.0, 0.0], (8, 1)), "p": 500.0 - 300.0 * CUBE[:, 0]}

    def grid(points: Any = CUBE, data: Any = on_points, **more: Any) -> dict[str, Content]:
        return {"case.toml": _VOLUME, "cube.vtp": vtp, "flow.vtu": lambda: vtu(points, on_points=data, **more)}

    yield Input("volume/whole", "nothing", files(grid()), "answered")
    for name, made in (
        ("another place", grid(CUBE + 7)),
        ("another unit", grid(CUBE * 1000)),
        ("a flat cell", grid(CUBE * [1, 1, 0])),
        ("a cell turned inside out", grid(CUBE[[4, 5, 6, 7, 0, 1, 2, 3]])),
        ("a point that is NaN", grid(np.where(np.arange(8)[:, None] == 3, np.nan, CUBE))),
        ("a point at 1e300", grid(np.where(np.arange(8)[:, None] == 3, 1e300, CUBE))),
        ("all points at one place", grid(CUBE * 0)),
        ("p that is NaN", grid(data=on_points | {"p": np.where(np.arange(8) == 3, np.nan, 1.0)})),
        ("p at 1e300", grid(data=on_points | {"p": np.where(np.arange(8) == 3, 1e300, 1.0)})),
        ("no p", grid(data={"U": on_points["U"]})),
        ("U of two components", grid(data=on_points | {"U": on_points["U"][:, :2]})),
        ("an index that is no point", grid(cells=[(0, 1, 2, 3, 4, 5, 6, 99)])),
        ("cells that are lines", grid(cells=[(0, 1)], kind=3)),
        ("cells of a kind that is not there", grid(kind=233)),
        ("no cells", grid(cells=[])),
    ):
        turned = name == "a cell turned inside out"
        yield Input(f"volume/{name}", f"the volume has {name}", files(made), "either" if turned else "refused")
    text = vtu(on_points=on_points)
    for one in cut_short("volume", "flow.vtu", text, (0.1, 0.5, 0.9), _VOLUME):
        yield Input(
            one.name, one.wrong, lambda at, one=one: (one.make(at), files({"cube.vtp": vtp})(at))[0], says=("flow.vtu",)
        )
    for name in ("gone.vtu", "case.toml", "cube.docx", "."):
        yield Input(
            f"volume/called {name}",
            "the volume is no such file",
            files(grid() | {"case.toml": _VOLUME.replace("flow.vtu", name)}),
        )


def _snapshots() -> Iterator[Input]:
    def case(rows: str, more: str = "at = 0.5\n") -> str:
        return PICKED + f"[storage]\n{more}snapshots = [{rows}]\n"

    one, two = '{ time = 0, volume = "a.vtu" }', '{ time = 1, volume = "b.vtu" }'
    moving = vtu(on_points={"U": np.zeros((8, 3))})
    for name, rows, more in (
        ("files that are missing", f"{one}, {two}", "at = 0.5\n"),
        ("one snapshot", one, "at = 0\n"),
        ("times that fall", f"{two}, {one}", "at = 0.5\n"),
        ("times that are NaN", f"{one}, {two}".replace("time = 1", "time = nan"), "at = 0.5\n"),
        ("times at 1e300", f"{one}, {two}".replace("time = 1", "time = 1e300"), "at = 0.5\n"),
        ("an instant outside", f"{one}, {two}", "at = 7\n"),
        ("no instant", f"{one}, {two}", ""),
        ("surfaces and volumes mixed", f'{one}, {{ time = 1, surface = "cube.vtp" }}', ""),
        ("a file of the system", f"{one}, {two}".replace("b.vtu", "/etc/passwd"), "at = 0.5\n"),
    ):
        yield Input(
            f"snapshots/{name}",
            f"the case has {name}",
            files({"case.toml": case(rows, more), "cube.vtp": vtp, "a.vtu": moving}),
        )
    series = PICKED.replace('file = "cube.vtp"\n', "").replace("[surface]\n", '[surface]\nlength_unit = "m"\n')
    for name, second in (("missing", "gone.vtp"), ("empty", "empty.vtp"), ("noise", "noise.vtp")):
        rows = f'{{ time = 0, surface = "cube.vtp" }}, {{ time = 1, surface = "{second}" }}'
        yield Input(
            f"series/second surface is {name}",
            f"the second surface is {name}",
            files(
                {
                    "case.toml": series + f"[storage]\nsnapshots = [{rows}]\n",
                    "cube.vtp": vtp,
                    "empty.vtp": "",
                    "noise.vtp": "noise",
                }
            ),
        )


def _commands() -> Iterator[Input]:
    """Yield inputs of the other commands."""
    good: dict[str, Content] = {"case.toml": ARRAYS, "cube.vtp": lambda: vtp()}
    for command in (CHECK, CAUSES, EXPORT):
        yield Input(f"command/{command[0]} without arrays", "the arrays are missing", files(good), command=command)
        yield Input(
            f"command/{command[0]} without mesh", "the mesh is missing", files({"case.toml": ARRAYS}), command=command
        )
        yield Input(
            f"command/{command[0]} of noise",
            "the case is noise",
            files({"case.toml": b"\xff\xfe\x00noise"}),
            command=command,
        )
        yield Input(f"command/{command[0]} of nothing", "there is no case", files({}), command=command)
    for name, content in (
        ("noise", "noise" * 100),
        ("empty", ""),
        ("cut", vtp()[:900]),
        ("open", vtp(CUBE, [[0, 1, 2]])),
        ("NaN", vtp(np.where(np.arange(8)[:, None] == 3, np.nan, CUBE))),
        ("1e300", vtp(CUBE * 1e300)),
        ("flat", vtp(CUBE * [1, 1, 0])),
        ("a point", vtp(CUBE * 0)),
        ("names", vtp(on_faces={"&#x202e;region": np.arange(12), 'quo"te'.replace('"', "&quot;"): np.arange(12)})),
    ):
        yield Input(
            f"command/start on {name}",
            f"the mesh is {name}",
            files({"cube.vtp": content}),
            "either",
            command=("start", "cube.vtp", "--to", "OUT/made.toml"),
        )
    yield Input(
        "command/start with a unit that is none",
        "the unit is none",
        files({"cube.vtp": lambda: vtp()}),
        command=("start", "cube.vtp", "--unit", "furlongs per kilogram"),
    )
    yield Input(
        "command/start with a density that is none",
        "the density is none",
        files({"cube.vtp": lambda: vtp()}),
        command=("start", "cube.vtp", "--density", "heavy"),
    )
    yield Input(
        "command/convergence of one case thrice",
        "the three cases are one",
        files(good | {"case.toml": PICKED}),
        command=("convergence", *["case.toml"] * 3),
    )
    yield Input(
        "command/convergence of nothing", "there are no cases", files({}), command=("convergence", *["case.toml"] * 3)
    )
