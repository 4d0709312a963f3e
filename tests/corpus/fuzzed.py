"""What fuzzing found (`scripts/fuzz`): the inputs that were not ended well, brought down to their core."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from tests.corpus.damage import damaged, mesh_case
from tests.corpus.entry import Input, files
from tests.corpus.shapes import ARRAYS, CUBE, PICKED, TAGGED, TRIANGLES, legacy, ply, vtp, vtu
from tests.corpus.vtk_files import _compressed as packed_vtp

__all__ = ["inputs"]


def inputs() -> Iterator[Input]:
    """Yield the inputs."""
    yield from _legacy()
    yield from _ply()
    yield from _ghosts()
    yield from _sets()
    yield from _packed()
    yield from _gmsh()
    yield from _close()
    yield from _large()
    yield from _nested()


def _legacy() -> Iterator[Input]:
    # VTK writes such notes after an array whose values are all of one size: they are no array of two times two values
    notes = "METADATA\nINFORMATION 1\nNAME L2_NORM_RANGE LOCATION vtkDataArray\nDATA 2 2 2 \n\n"
    yield Input(
        "fuzzed/legacy vtk with notes at its end",
        "the notes on the last array look like an array",
        files({"case.toml": mesh_case("cube.vtk", TAGGED), "cube.vtk": legacy(notes)}),
        end="answered",
    )
    yield Input(
        "fuzzed/legacy vtk cut before its notes",
        "the last array ends early, and notes follow",
        files({"case.toml": mesh_case("cube.vtk", TAGGED), "cube.vtk": legacy().rsplit(" ", 2)[0] + "\n" + notes}),
        says=("cube.vtk",),
    )


def _ply() -> Iterator[Input]:
    yield from damaged(
        "fuzzed/ply",
        "cube.ply",
        ply(),
        [
            ("an index that is NaN", "3 0 3 2", "3 0 nan 2"),
            ("an index at infinity", "3 0 3 2", "3 0 inf 2"),
            ("an index beyond its type", "3 0 3 2", "3 0 4294967296 2"),
            ("an index between two points", "3 0 3 2", "3 0 2.5 2"),
            ("a length that is NaN", "3 0 3 2", "nan 0 3 2"),
            ("a length at infinity", "3 0 2 1", "inf 0 2 1"),
            ("a length of 1e300", "3 0 2 1", "1e300 0 2 1"),
            ("a length of 3.5", "3 0 2 1", "3.5 0 2 1"),
            ("a length beyond its type", "3 0 3 2", "259 0 3 2"),
        ],
    )
    small = ply().replace("double y", "float y").replace("1.0 1.0 0.0", "1.0 1e39 0.0")
    yield Input(
        "fuzzed/ply/a coordinate beyond its type",
        "a coordinate is 1e39, of type float",
        files({"case.toml": mesh_case("cube.ply"), "cube.ply": small}),
        says=("cube.ply",),
    )


def _ghosts() -> Iterator[Input]:
    # the name of an array that VTK gives a meaning to
    for name, marks, end in (
        ("floats", np.zeros(12), "refused"),
        ("three a cell", np.zeros((12, 3), int), "refused"),
        ("words", np.array(["no"] * 12), "refused"),
        ("whole numbers of 64 bits", np.zeros(12, int), "answered"),
    ):
        mesh = vtp(CUBE, TRIANGLES, on_faces={"vtkGhostType": marks})
        says = ("vtkGhostType",) if end == "refused" else ()
        yield Input(
            f"fuzzed/ghosts are {name}",
            f"marks of ghost cells are {name}",
            files({"case.toml": PICKED, "cube.vtp": mesh}),
            end,
            says=says,
            alone=True,
        )  # type: ignore[arg-type]


def _sets() -> Iterator[Input]:
    # kinds that are paths to a library that looks for the element
    for kind in ("[", "*[", "..", "./", "*", "", "{*}", "feed[@a=]"):
        index = f'<VTKFile type="{kind}" version="1.0"><Piece Source="part.vtu"/></VTKFile>'
        yield Input(
            f"fuzzed/a set of kind {kind!r}",
            "the kind of a set is no word",
            files({"case.toml": mesh_case("cube.pvtu"), "cube.pvtu": index, "part.vtu": vtu}),
            says=("cube.pvtu",),
        )


def _packed() -> Iterator[Input]:
    # an array is packed as: number of blocks, bytes of a block, bytes of the last one
    for full, last in ((0, 192), (0, 0), (16, 192), (32768, 2**32 - 1)):

        def made(full: int = full, last: int = last) -> bytes:
            data = packed_vtp()
            at = data.index(b"_", data.index(b"<AppendedData")) + 1
            return data[: at + 4] + full.to_bytes(4, "little") + last.to_bytes(4, "little") + data[at + 12 :]

        yield Input(
            f"fuzzed/packed in blocks of {full} and {last}",
            "the blocks of a packed array have odd sizes",
            files({"case.toml": mesh_case("cube.vtp", TAGGED), "cube.vtp": made}),
            says=("cube.vtp",),
            alone=True,
        )


def _gmsh() -> Iterator[Input]:
    corners = "\n".join(" ".join(map(str, corner)) for corner in CUBE.tolist())
    rows = "\n".join(f"{k + 1} {a + 1} {b + 1} {c + 1}" for k, (a, b, c) in enumerate(TRIANGLES.tolist()))
    text = (
        "$MeshFormat\n4.1 0 8\n$EndMeshFormat\n$Nodes\n1 8 1 8\n2 1 0 8\n1\n2\n3\n4\n5\n6\n7\n8\n"
        f"{corners}\n$EndNodes\n$Elements\n1 12 1 12\n2 1 2 12\n{rows}\n$EndElements\n"
    )
    yield Input(
        "fuzzed/msh 4.1/whole", "nothing", files({"case.toml": mesh_case("cube.msh"), "cube.msh": text}), "answered"
    )
    yield from damaged(
        "fuzzed/msh 4.1", "cube.msh", text, [("counts over two lines", "$Nodes\n1 8 1 8", "$Nodes\n1\n8 1 8")]
    )


def _close() -> Iterator[Input]:
    # points so close that the square of their distance is zero, with different values
    ticks = np.linspace(-0.1, 1.1, 5)
    places = np.stack(np.meshgrid(ticks, ticks, ticks), axis=-1).reshape(-1, 3)
    places = np.concatenate([places, 1e-185 * places[:40]])
    rows = [",".join(map(str, (*place, 2.0, 0.0, 0.0, k))) for k, place in enumerate(places.tolist())]
    case = ARRAYS.replace('traction = { array = "tau" }\n', "").replace('array = "U"', 'array = ["u", "v", "w"]')
    yield Input(
        "fuzzed/points all but at one place",
        "many points are 1e-186 m apart",
        files(
            {
                "case.toml": case.replace("[flow]\n", '[flow]\npoints = "cloud.csv"\n'),
                "cube.vtp": vtp,
                "cloud.csv": "\n".join(["x,y,z,u,v,w,p", *rows]) + "\n",
            }
        ),
        says=("at the place of another",),
    )


def _large() -> Iterator[Input]:
    # a value whose square is beyond numbers, at a point that no sampled place is near
    rows = [f"{x},{y},{z},2,0,0,5" for x in (-1, 0.3, 0.8, 2) for y in (-1, 0.2, 0.9, 2) for z in (-1, 0.4, 0.7, 2)]
    rows[-1] = "2,2,2,-1e308,0,0,5"
    case = ARRAYS.replace('traction = { array = "tau" }\n', "").replace('array = "U"', 'array = ["u", "v", "w"]')
    yield Input(
        "fuzzed/points with a speed of 1e308",
        "a point that is far off has a speed of 1e308",
        files(
            {
                "case.toml": case.replace("[flow]\n", '[flow]\npoints = "cloud.csv"\n'),
                "cube.vtp": vtp,
                "cloud.csv": "\n".join(["x,y,z,u,v,w,p", *rows]) + "\n",
            }
        ),
        says=("cloud.csv", "1e+308"),
    )


def _nested() -> Iterator[Input]:
    for name, more, says in (
        (
            "a snapshot's volume without a file",
            "[storage]\nat = 0\nsnapshots = [{ time = 0, volume = {} }]\n",
            "volume file",
        ),
        ("a volume without a file", "[flow]\nvolume = {}\n", "Give the name of a file"),
        ("a scalar without a name", '[[carried]]\nunit = "kg"\n', "Give a name"),
        ("a loss without ports", "[[loss]]\n", "Give two ports"),
        ("a scalar with an unknown key", '[[carried]]\nname = "salt"\nnam = 1\n', "Did you mean"),
    ):
        yield Input(
            f"fuzzed/{name}", f"the case has {name}", files({"case.toml": PICKED + more, "cube.vtp": vtp}), says=(says,)
        )
