"""Surfaces that are whole files and no sound surfaces, and groups that upset the work."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np

from tests.corpus.entry import CHECK, EXPORT, NO_LOAD, Content, Input, files
from tests.corpus.shapes import ARRAYS, CUBE, PICKED, REGION, TAGGED, TRIANGLES, cube_arrays, obj, vtp

__all__ = ["inputs"]

_OPEN = PICKED.replace('file = "cube.vtp"', 'file = "cube.vtp"\nclosed = false')


def _mesh(
    points: Any = CUBE, faces: Any = TRIANGLES, case: str = PICKED, **data: Mapping[str, Any]
) -> dict[str, Content]:
    return {"case.toml": case, "cube.vtp": lambda: vtp(points, faces, **data)}


def _moved(corner: int, place: Any) -> np.ndarray:
    points = CUBE.copy()
    points[corner] = place
    return points


def _shells(count: int) -> Content:
    """Return the cube, and small ones beside it."""

    def made() -> str:
        side = int(np.ceil(count ** (1 / 3)))
        at = np.stack(np.meshgrid(*[np.arange(side)] * 3), -1).reshape(-1, 3)[:count] + 5.0
        points = [CUBE, *(CUBE * 0.25 + place for place in at)]
        faces = [TRIANGLES + 8 * k for k in range(count + 1)]
        return vtp(np.concatenate(points), np.concatenate(faces), on_faces={})

    return made


def _plate(cells: int) -> tuple[np.ndarray, np.ndarray]:
    """Return the cube with its top cut into many faces."""
    ticks = np.linspace(0, 1, cells + 1)
    x, y = np.meshgrid(ticks, ticks, indexing="ij")
    top = np.stack([x, y, np.ones_like(x)], -1).reshape(-1, 3)
    number = np.arange(top.shape[0]).reshape(x.shape) + 8
    a, b, c, d = number[:-1, :-1], number[1:, :-1], number[1:, 1:], number[:-1, 1:]
    faces = np.stack([a, b, c, a, c, d], -1).reshape(-1, 3)
    return np.concatenate([CUBE, top]), faces


def _many_tags() -> str:
    """Return 60,000 faces, a tag each: two sheets that close, with all rims joined by polygons."""
    points, top = _plate(173)
    rim = [np.flatnonzero(points[8:, axis] == end) + 8 for axis, end in ((0, 0.0), (0, 1.0), (1, 0.0), (1, 1.0))]
    x0, x1, y0, y1 = rim
    faces: list[Any] = [*top.tolist(), [0, 3, 2, 1]]
    faces += [[0, *x0.tolist(), 3], [2, *x1[::-1].tolist(), 1], [1, *y0[::-1].tolist(), 0], [3, *y1.tolist(), 2]]
    return vtp(points, faces, on_faces={"region": np.arange(len(faces)) + 1})


def inputs() -> Iterator[Input]:
    """Yield the inputs."""
    yield from _shapes()
    yield from _tags()
    yield from _arrays()


def _shapes() -> Iterator[Input]:
    two = np.concatenate([CUBE, CUBE + np.array([1.0, 1.0, 0.0])])
    shared = np.concatenate([TRIANGLES, TRIANGLES + 8])
    by_edge = shared.copy()
    by_edge[by_edge == 8] = 2
    by_edge[by_edge == 12] = 6
    flipped = TRIANGLES.copy()
    flipped[::2] = flipped[::2, ::-1]
    circle = np.exp(2j * np.pi * np.arange(500) / 500)
    ring = np.column_stack([circle.real, circle.imag, np.zeros(500)])
    strip = np.concatenate([0.9 * ring, 1.1 * ring])
    strip[500:, 2] = 0.1
    turn = np.arange(500)
    nxt = (turn + 1) % 500
    belt = np.concatenate([np.column_stack([turn, nxt, 500 + turn]), np.column_stack([nxt, 500 + nxt, 500 + turn])])
    belt[belt[:, 1] == 0] = belt[belt[:, 1] == 0][:, ::-1]
    refused: list[tuple[str, dict[str, Content]]] = [
        ("a point that is NaN", _mesh(_moved(2, np.nan))),
        ("a point at infinity", _mesh(_moved(2, [np.inf, 1, 0]))),
        ("a point at 1e308", _mesh(_moved(2, [1e308, 1, 0]))),
        ("a point at 1e100", _mesh(_moved(2, [1e100, 1, 0]))),
        ("a point at 1e21", _mesh(_moved(2, [1e21, 1, 0]))),
        ("all points at 1e100", _mesh(CUBE * 1e100)),
        ("all points at one place", _mesh(CUBE * 0.0)),
        ("all points in a line", _mesh(CUBE * [1, 0, 0])),
        ("all points in a plane", _mesh(CUBE * [1, 1, 0])),
        ("a size of 1e-170", _mesh(CUBE * 1e-170)),
        ("a size of denormals", _mesh(CUBE * 5e-324)),
        ("a size of rounding beside its place", _mesh(CUBE * 1e-9 + 1e9)),
        ("one face", _mesh(CUBE, TRIANGLES[:1])),
        ("two faces", _mesh(CUBE, TRIANGLES[:2])),
        ("two faces back to back", _mesh(CUBE, np.array([[0, 1, 2], [2, 1, 0]]))),
        ("no points", _mesh(np.zeros((0, 3)), np.zeros((0, 3), int))),
        ("no faces", _mesh(CUBE, np.zeros((0, 3), int))),
        ("a face missing", _mesh(CUBE, TRIANGLES[1:])),
        ("a face twice", _mesh(CUBE, np.concatenate([TRIANGLES, TRIANGLES[:1]]))),
        ("a face thrice", _mesh(CUBE, np.concatenate([TRIANGLES, *[TRIANGLES[:1]] * 2]))),
        ("a fin", _mesh(np.concatenate([CUBE, [[0.5, 0.5, 2.0]]]), np.concatenate([TRIANGLES, [[4, 5, 8]]]))),
        ("a wall inside", _mesh(CUBE, np.concatenate([TRIANGLES, [[0, 2, 6], [0, 6, 4]]]))),
        ("a face of one corner thrice", _mesh(CUBE, np.concatenate([TRIANGLES[:-1], [[0, 0, 0]]]))),
        ("a face of two corners", _mesh(CUBE, [*TRIANGLES.tolist(), [0, 1]], on_faces={})),
        ("a Moebius strip", _mesh(strip, belt)),
        (
            "gaps between all faces",
            _mesh(
                np.concatenate([0.99 * CUBE[face] + 0.01 * CUBE[face].mean(axis=0) for face in TRIANGLES]),
                np.arange(36).reshape(-1, 3),
            ),
        ),
        ("every face twice, turned", _mesh(CUBE, np.concatenate([TRIANGLES, TRIANGLES[:, ::-1]]))),
    ]
    either = {"a face of two corners", "a face thrice", "a face twice", "a size of rounding beside its place"}
    for name, made in refused:
        yield Input(f"shape/{name}", f"the surface has {name}", files(made), "either" if name in either else "refused")
    sliver = np.concatenate([CUBE, [[0.5, 0.0, 0.0]]])
    split = [face for face in TRIANGLES.tolist() if face != [0, 1, 5]]
    polygon = np.concatenate([ring, ring + np.array([0.0, 0.0, 1.0])])
    walls = [[k, (k + 1) % 500, 500 + (k + 1) % 500, 500 + k] for k in range(500)]
    drum = _mesh(
        polygon,
        [list(range(500))[::-1], list(range(500, 1000)), *walls],
        TAGGED,
        on_faces={"region": np.array([1, 2, *[3] * 500])},
    )
    answered: list[tuple[str, dict[str, Content], tuple[float, float, float] | None]] = [
        ("inside out", _mesh(CUBE, TRIANGLES[:, ::-1]), (300.0, 0.0, -9806.65)),
        ("every second face turned", _mesh(CUBE, flipped), (300.0, 0.0, -9806.65)),
        (
            "a place 1e6 m away",
            {
                **_mesh(CUBE + 1e6),
                "case.toml": PICKED.replace("near = [0, ", "near = [1e6, ")
                .replace("near = [1, ", "near = [1000001, ")
                .replace("0.5, 0.5]", "1e6, 1e6]"),
            },
            (300.0, 0.0, -9806.65),
        ),
        (
            "a face without area",
            _mesh(sliver, [*split, [0, 8, 5], [8, 1, 5], [0, 1, 8]], on_faces={}),
            (300.0, 0.0, -9806.65),
        ),
        ("faces of 500 corners", drum, NO_LOAD),
        ("a thousand shells beside it", {"case.toml": PICKED, "cube.vtp": _shells(1000)}, NO_LOAD),
        ("a twin that touches along an edge", _mesh(two, by_edge), NO_LOAD),
        ("a twin that lies over it", _mesh(np.concatenate([CUBE, CUBE + 0.5]), shared, on_faces={}), NO_LOAD),
        ("a shell within it", _mesh(np.concatenate([CUBE, CUBE * 0.5 + 0.25]), shared), NO_LOAD),
        (
            "an open piece",
            _mesh(
                CUBE,
                TRIANGLES[:-4],
                _OPEN.replace(
                    "pick = { normal = [-1, 0, 0], near = [0, 0.5, 0.5] }",
                    "pick = { normal = [0, 0, 1], near = [0, 0, 1] }",
                ).replace("normal = [1, 0, 0], near = [1,", "normal = [0, 0, -1], near = [1,"),
            ),
            NO_LOAD,
        ),
    ]
    for name, made, load in answered:
        end = "answered" if load else "either"
        yield Input(f"shape/{name}", f"the surface has {name}", files(made), end, load)  # type: ignore[arg-type]
    twice = _mesh(CUBE, np.concatenate([TRIANGLES, TRIANGLES[:1]]), TAGGED, on_faces={"region": np.array([*REGION, 2])})
    for command in (CHECK, EXPORT):
        yield Input(
            f"shape/a face twice, in two groups: {command[0]}",
            "a face stands twice, in two groups",
            files(twice),
            command=command,
        )
    mirrored = PICKED.replace('"wall"', '"symmetry"').replace('file = "cube.vtp"', 'file = "cube.vtp"\nmirror = true')
    for command in (CHECK, EXPORT, ("balance", "case.toml", "--out", "OUT", "--no-pictures")):
        yield Input(
            f"shape/a mirror that is no plane: {command[0]}",
            "the symmetry cut is four planes",
            files(_mesh(case=mirrored)),
            command=command,
        )


def _tags() -> Iterator[Input]:
    def tagged(values: Any, case: str = TAGGED) -> dict[str, Content]:
        return _mesh(CUBE, TRIANGLES, case, on_faces={"region": values})

    names = np.array(["shell", "feed", "drain"])[REGION % 3]
    words = TAGGED.replace("tag = 1\n", "").replace("tag = 2\n", "").replace("tag = 3\n", "")
    yield Input("tag/words", "the tags are words", files(tagged(names, words)), "answered")
    odd = {
        "markup": "<b>shell</b>",
        "a quote": 'she"ll',
        "an escape sequence": "\x1b[31mshell",
        "a tab": "she\tll",
        "a line end": "she\nll",
        "a direction sign": "\u202eshell",
        "10000 letters": "s" * 10_000,
    }
    for name, word in odd.items():
        spoilt = np.where(names == "shell", word, names)
        end: Any = "either" if name == "10000 letters" else "answered"
        yield Input(f"tag/a word with {name}", f"a tag is a word with {name}", files(tagged(spoilt, words)))
        yield Input(
            f"tag/checked: a word with {name}",
            f"a tag is a word with {name}",
            files(tagged(spoilt, words)),
            command=CHECK,
        )
        yield Input(
            f"tag/rest: a word with {name}",
            f"a tag is a word with {name}",
            files(tagged(spoilt, words + "rest = true\n")),
            end,
        )
        yield Input(
            f"tag/rest checked: a word with {name}",
            f"a tag is a word with {name}",
            files(tagged(spoilt, words + "rest = true\n")),
            end,
            command=CHECK,
        )
    values = REGION.astype(float)
    for name, spoilt, end in (
        ("all alike", np.full(12, 3), "refused"),
        ("none of the case's", REGION + 10, "refused"),
        ("whole floats", values, "answered"),
        ("halves", values + 0.5, "refused"),
        ("one NaN", np.where(np.arange(12) == 4, np.nan, values), "refused"),
        ("all infinite", np.full(12, np.inf), "refused"),
        ("1e300", values * 1e300, "refused"),
        ("of 63 bits", REGION.astype(np.int64) + 2**62, "refused"),
        ("of three components", np.tile(REGION[:, None], (1, 3)), "refused"),
        ("below zero", -REGION, "refused"),
    ):
        yield Input(f"tag/{name}", f"the tags are {name}", files(tagged(spoilt)), end)  # type: ignore[arg-type]
    yield Input(
        "tag/on points",
        "the tags sit on points",
        files(_mesh(CUBE, TRIANGLES, TAGGED, on_faces={}, on_points={"region": np.arange(8)})),
    )
    yield Input(
        "tag/no array", "there are no tags", files(_mesh(CUBE, TRIANGLES, TAGGED, on_faces={})), says=("region",)
    )
    many = TAGGED.replace("tag = 3\n", "rest = true\n")
    yield Input(
        "tag/60000",
        "each of 60000 faces has a tag of its own",
        files({"case.toml": many, "cube.vtp": _many_tags}),
        "either",
        NO_LOAD,
    )
    yield Input(
        "tag/60000, checked",
        "each of 60000 faces has a tag of its own",
        files({"case.toml": many, "cube.vtp": _many_tags}),
        "either",
        command=CHECK,
    )
    sets = "".join(f"g s{k}\nf 1 2 3\n" for k in range(30_000)) + obj()
    yield Input(
        "tag/30000 sets of one face",
        "a file has 30000 groups of one face",
        files({"case.toml": PICKED.replace("cube.vtp", "cube.obj"), "cube.obj": sets}),
        "either",
        NO_LOAD,
    )
    picks = PICKED.replace("near = [0, 0.5, 0.5]", "near = [1e19, -1e19, 1e19]")
    yield Input("tag/a pick from afar", "a plane is picked from 1e19 m away", files(_mesh(case=picks)), "either")


def _arrays() -> Iterator[Input]:
    points, faces = cube_arrays()

    def laid(
        on_points: Mapping[str, Any], on_faces: Mapping[str, Any] = faces, case: str = ARRAYS
    ) -> dict[str, Content]:
        return _mesh(CUBE, TRIANGLES, case, on_points=on_points, on_faces=on_faces)

    def one(name: str, value: float) -> dict[str, Any]:
        values = np.array(points[name], dtype=float)
        values[5] = value
        return points | {name: values}

    yield Input("array/whole", "nothing", files(laid(points)), "answered")
    for value in (np.nan, np.inf, 1e308, -1e308, 1e21):
        for name in ("U", "p"):
            yield Input(
                f"array/{name} is {value} at a point",
                f"{name} is {value} at one point",
                files(laid(one(name, value))),
                says=("point 5",),
            )
        spoilt = faces["tau"].copy()
        spoilt[7, 1] = value
        yield Input(
            f"array/tau is {value} on a face",
            f"tau is {value} on one face",
            files(laid(points, faces | {"tau": spoilt})),
            says=("face 7",),
        )
    yield Input(
        "array/U is denormal at a point",
        "U is the smallest number at a point",
        files(laid(one("U", 5e-324))),
        "either",
        NO_LOAD,
    )
    for name, spoilt_points, spoilt_faces in (
        ("U of two components", points | {"U": points["U"][:, :2]}, faces),
        ("U of four components", points | {"U": np.zeros((8, 4))}, faces),
        ("U of one component", points | {"U": points["p"]}, faces),
        ("p of three components", points | {"p": points["U"]}, faces),
        ("p of texts", points | {"p": np.array(list("abcdefgh"))}, faces),
        ("U of texts", points | {"U": np.array(["fast"] * 8)}, faces),
        ("no p", {"U": points["U"]}, faces),
        ("p by another name", {"U": points["U"], "P": points["p"]}, faces),
        ("p on points and on faces", points, faces | {"p": np.zeros(12)}),
        ("tau on points and on faces", points | {"tau": np.zeros((8, 3))}, faces),
        ("p called by an escape sequence", {"U": points["U"], "&#27;[31mp": points["p"]}, faces),
        ("p called by a direction sign", {"U": points["U"], "\u202ep": points["p"]}, faces),
        ("p without a name", {"U": points["U"], "": points["p"]}, faces),
        ("a million names", points | {f"q{k}": points["p"] for k in range(2000)}, faces),
    ):
        end = "answered" if name == "a million names" else "refused"
        yield Input(
            f"array/{name.replace('a million', '2000')}",
            f"the file has {name}",
            files(laid(spoilt_points, spoilt_faces)),
            end,
        )  # type: ignore[arg-type]
    yield Input(
        "array/whole numbers",
        "the arrays are whole numbers",
        files(laid(points | {"U": points["U"].astype(int), "p": points["p"].astype(int)})),
        "answered",
    )
    gas = (
        ARRAYS.replace("density = 1000", "ambient_pressure = 100000")
        .replace(', head = "removed"', "")
        .replace("[flow]\n", '[flow]\ndensity = { array = "rho" }\n')
    )
    for value in (0.0, -1.0, np.nan, 1e300):
        rho = np.full(8, 1000.0)
        rho[5] = value
        yield Input(
            f"array/density is {value} at a point",
            f"the density is {value} at a point",
            files(laid(points | {"rho": rho}, case=gas)),
            says=("point 5",),
        )
