"""Files that list other files: multi-block and partitioned sets, pieces, and collections in time."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

from tests.corpus.damage import cut_short, damaged, mesh_case
from tests.corpus.entry import Content, Input, files
from tests.corpus.shapes import CUBE, PICKED, REGION, TRIANGLES, vtp, vtu

__all__ = ["inputs"]

_SETS = """[surface]
file = "cube.vtm"
groups = { sets = true }
""" + PICKED.split("\n", 2)[2]
for _rule in (
    "pick = { normal = [-1, 0, 0], near = [0, 0.5, 0.5] }\n",
    "pick = { normal = [1, 0, 0], near = [1, 0.5, 0.5] }\n",
):
    _SETS = _SETS.replace(_rule, "")
_SETS = _SETS.replace("rest = true\n", "")


def _part(region: int) -> str:
    return vtp(CUBE, TRIANGLES[region == REGION])


def _vtm(*blocks: tuple[str, str], kind: str = "vtkMultiBlockDataSet") -> str:
    rows = "".join(f'<DataSet index="{k}" name="{name}" file="{file}"/>' for k, (name, file) in enumerate(blocks))
    return f'<VTKFile type="{kind}" version="1.0" byte_order="LittleEndian"><{kind}>{rows}</{kind}></VTKFile>'


def _pieces(kind: str, *sources: str) -> str:
    rows = "".join(f'<Piece Source="{source}"/>' for source in sources)
    return f'<VTKFile type="{kind}" version="1.0"><{kind} GhostLevel="0">{rows}</{kind}></VTKFile>'


_BLOCKS = (("feed", "feed.vtp"), ("drain", "drain.vtp"), ("shell", "shell.vtp"))
_PARTS: dict[str, Content] = {
    "feed.vtp": lambda: _part(1),
    "drain.vtp": lambda: _part(2),
    "shell.vtp": lambda: _part(3),
}


def _nest(folder: Path) -> None:
    """Write sets that list sets, 60 deep."""
    files({"case.toml": _SETS})(folder)
    for level in range(60):
        name = "cube.vtm" if level == 0 else f"level{level}.vtm"
        (folder / name).write_text(_vtm(("a", f"level{level + 1}.vtm")), "utf-8")
    (folder / "level60.vtm").write_text(_vtm(("a", "b.vtp")), "utf-8")
    (folder / "b.vtp").write_text(vtp(), "utf-8")


def _doubling(folder: Path) -> None:
    """Write sets that list the next one ten times each, which makes 10^12 blocks."""
    files({"case.toml": _SETS, "b.vtp": vtp})(folder)
    for level in range(12):
        below = f"level{level + 1}.vtm" if level < 11 else "b.vtp"
        name = "cube.vtm" if level == 0 else f"level{level}.vtm"
        (folder / name).write_text(_vtm(*((f"n{k}", below) for k in range(10))), "utf-8")


def inputs() -> Iterator[Input]:
    """Yield the inputs."""
    good: dict[str, Content] = {"case.toml": _SETS, "cube.vtm": _vtm(*_BLOCKS), **_PARTS}
    yield Input("vtm/whole", "nothing", files(good), end="answered")
    for kind in ("vtkPartitionedDataSet", "vtkPartitionedDataSetCollection"):
        yield Input(
            f"vtm/{kind}",
            "the kind of the set does not fit its blocks",
            files(good | {"cube.vtm": _vtm(*_BLOCKS, kind=kind)}),
            end="either",
        )
    yield from cut_short("vtm", "cube.vtm", _vtm(*_BLOCKS), (0.1, 0.6, 0.97), _SETS)
    outside = "../outside/cube.vtp"
    for name, file in (
        ("itself", "cube.vtm"),
        ("the case", "case.toml"),
        ("a file above", outside),
        ("a file above, by another slash", "..\\outside\\cube.vtp"),
        ("a file above, through a folder", "./x/../../outside/cube.vtp"),
        ("a file of the system", "/etc/passwd"),
        ("an address", "http://127.0.0.1:9/cube.vtp"),
        ("a file address", "file:///etc/passwd"),
        ("a drive", "C:/cube.vtp"),
        ("nothing", ""),
        ("a folder", "."),
        ("a missing file", "gone.vtp"),
        ("a zero byte by its escape", "feed.vtp&#0;"),
        ("50000 letters", "f" * 50_000),
    ):
        yield Input(
            f"vtm/lists {name}",
            f"a block is {name}",
            files(good | {"cube.vtm": _vtm(("feed", file.replace("&", "&")), *_BLOCKS[1:])}),
            end="either" if name == "nothing" else "refused",
            alone=name == "itself",
        )

    def linked(folder: Path) -> None:
        files(good)(folder)
        (folder / "feed.vtp").unlink()
        (folder / "feed.vtp").symlink_to("/etc/passwd")

    yield Input("vtm/lists a link to a file of the system", "a block is a link", linked)

    def ring(folder: Path) -> None:
        files({"case.toml": _SETS, "cube.vtm": _vtm(("a", "b.vtm")), "b.vtm": _vtm(("a", "cube.vtm"))})(folder)

    yield Input("vtm/lists one that lists it", "two sets list each other", ring, alone=True)
    yield Input("vtm/60 deep", "sets list sets, 60 deep", _nest, end="refused", alone=True)
    yield Input("vtm/10^12 blocks", "sets list sets, ten each, 12 deep", _doubling, alone=True)
    yield Input(
        "vtm/blocks within blocks, 5000 deep",
        "blocks are nested",
        files(good | {"cube.vtm": _vtm().replace("></vtkM", ">" + "<Block>" * 5000 + "</Block>" * 5000 + "</vtkM")}),
        alone=True,
    )
    yield Input(
        "vtm/a block with an entity",
        "a block is named by an entity of a file",
        files(
            good | {"cube.vtm": '<!DOCTYPE v [<!ENTITY x SYSTEM "../outside/secret.txt">]>' + _vtm(("&x;", "feed.vtp"))}
        ),
    )
    laughs = "".join(f'<!ENTITY l{k} "{f"&l{k - 1};" * 10}">' for k in range(1, 12))
    yield Input(
        "vtm/entities that laugh",
        "entities grow tenfold, eleven times",
        files(good | {"cube.vtm": f'<!DOCTYPE v [<!ENTITY l0 "lol">{laughs}]>' + _vtm(("&l11;", "feed.vtp"))}),
        alone=True,
    )
    yield Input("vtm/no block", "the set is empty", files(good | {"cube.vtm": _vtm()}), says=("cube.vtm",))
    yield Input(
        "vtm/two blocks of one name",
        "two blocks have one name",
        files(good | {"cube.vtm": _vtm(("feed", "feed.vtp"), ("feed", "drain.vtp"), ("shell", "shell.vtp"))}),
    )
    yield Input(
        "vtm/a block called by an escape sequence",
        "a block's name colours the terminal",
        files(good | {"cube.vtm": _vtm(("&#x202e;f", "feed.vtp"), *_BLOCKS[1:])}),
    )
    yield from _in_pieces()
    for name in ("cube.pvd", "cube.series"):
        yield Input(
            f"pvd/{name}",
            "a collection in time is no mesh",
            files({"case.toml": mesh_case(name), name: '<VTKFile type="Collection"><Collection/></VTKFile>'}),
            says=(name,),
        )


def _in_pieces() -> Iterator[Input]:
    for suffix, kind, piece in (("pvtu", "PUnstructuredGrid", vtu), ("pvtp", "PPolyData", vtp)):
        name, part = f"cube.{suffix}", f"part.{suffix[1:]}"
        good: dict[str, Content] = {"case.toml": mesh_case(name), part: piece, name: _pieces(kind, part)}
        yield Input(f"{suffix}/whole", "nothing", files(good), end="answered")
        for fault, source in (
            ("a file above", f"../outside/cube.{suffix[1:]}"),
            ("a file of the system", "/etc/passwd"),
            ("itself", name),
            ("a missing file", "gone.vtu"),
            ("one piece twice", f'{part}"/><Piece Source="{part}'),
        ):
            yield Input(
                f"{suffix}/lists {fault}",
                f"a piece is {fault}",
                files(good | {name: _pieces(kind, source)}),
                says=(name,),
                alone=fault == "itself",
            )

        def absolute(folder: Path, name: str = name, kind: str = kind) -> None:
            there = folder.parent / "outside" / "cube.vtp"
            files({"case.toml": mesh_case(name), name: _pieces(kind, str(there))})(folder)

        yield Input(f"{suffix}/lists a file by its whole path", "a piece has an absolute path", absolute, says=(name,))
        yield from damaged(
            suffix,
            name,
            _pieces(kind, part),
            [
                ("a piece without source", f'Source="{part}"', ""),
                ("another kind", f'type="{kind}"', 'type="PImageData"'),
                ("a tag that does not end", "</VTKFile>", ""),
            ],
        )
        yield Input(f"{suffix}/an empty piece", "a piece has no bytes", files(good | {part: ""}), says=(name,))
