"""Paths that lead to no file, to another kind of file, or out of the folder."""

from __future__ import annotations

import os
import socket
from collections.abc import Callable, Iterator
from pathlib import Path

from tests.corpus.entry import BALANCE, CHECK, Input, files
from tests.corpus.shapes import PICKED, stl_binary, vtp

__all__ = ["inputs"]

_GOOD = {"case.toml": PICKED, "cube.vtp": vtp}


def _named(path: str) -> str:
    return PICKED.replace('"cube.vtp"', f'"{path}"')


def _with(act: Callable[[Path], object], **contents: str) -> Callable[[Path], None]:
    def make(folder: Path) -> None:
        files({"case.toml": PICKED, **contents})(folder)
        act(folder)

    return make


def _absolute(folder: Path) -> None:
    files({"case.toml": _named(str(folder.parent / "outside" / "cube.vtp"))})(folder)


def _socket(folder: Path) -> None:
    # its name may have 100 bytes only, so it is made from within the folder
    here = Path.cwd()
    os.chdir(folder)
    try:
        with socket.socket(socket.AF_UNIX) as made:
            made.bind("cube.vtp")
    finally:
        os.chdir(here)


def _loop(name: str) -> Callable[[Path], None]:
    def act(folder: Path) -> None:
        (folder / name).unlink(missing_ok=True)
        (folder / "other").symlink_to(folder / name)
        (folder / name).symlink_to(folder / "other")

    return act


def _fifo_case(folder: Path) -> None:
    files({"cube.vtp": vtp})(folder)
    os.mkfifo(folder / "case.toml")


def inputs() -> Iterator[Input]:
    """Yield the inputs."""
    no_file = "no such file"
    yield Input("path/no case", "there is no case", files({"cube.vtp": vtp}), says=("case.toml", no_file))
    yield Input(
        "path/case is a folder", "the case is a folder", lambda at: (at / "case.toml").mkdir(), says=("folder",)
    )
    yield Input("path/case is a pipe", "the case is a pipe", _fifo_case, says=("no regular file",), alone=True)
    yield Input("path/case is a loop", "the case is a link to itself", _with(_loop("case.toml")), says=("case.toml",))
    yield Input("path/no mesh", "there is no mesh", files({"case.toml": PICKED}), says=("cube.vtp", no_file))
    yield Input(
        "path/mesh is a folder", "the mesh is a folder", _with(lambda at: (at / "cube.vtp").mkdir()), says=("folder",)
    )
    yield Input(
        "path/mesh is a pipe",
        "the mesh is a pipe",
        _with(lambda at: os.mkfifo(at / "cube.vtp")),
        says=("no regular file",),
        alone=True,
    )
    yield Input("path/mesh is a socket", "the mesh is a socket", _with(_socket), says=("no regular file",))
    yield Input("path/mesh is a loop", "the mesh is a link to itself", _with(_loop("cube.vtp")), says=("cube.vtp",))
    for device in ("zero", "null", "full", "random", "tty", "stdin", "fd/0"):
        yield Input(
            f"path/mesh is /dev/{device}",
            "the mesh is a link to a device",
            _with(lambda at, device=device: (at / "cube.vtp").symlink_to(f"/dev/{device}")),
            says=("cube.vtp",),
            alone=True,
        )
    yield Input(
        "path/case is /dev/zero",
        "the case is a link to a device without end",
        lambda at: (at / "case.toml").symlink_to("/dev/zero"),
        says=("case.toml",),
        alone=True,
    )
    yield Input(
        "path/case is /dev/tty",
        "the case is a link to a terminal",
        lambda at: (at / "case.toml").symlink_to("/dev/tty"),
        says=("case.toml",),
        alone=True,
    )
    yield Input("path/mesh is empty", "the mesh has no bytes", files(_GOOD | {"cube.vtp": ""}), says=("empty",))
    for name, path in (
        ("zero byte", "cube\\u0000.vtp"),
        ("5000 characters", "a" * 5000 + ".vtp"),
        ("5000 folders", "a/" * 5000 + "cube.vtp"),
        ("no name", "."),
        ("parent", ".."),
        ("root", "/"),
        ("blank", " "),
        ("only a suffix", ".vtp"),
        ("no suffix", "cube"),
        ("unknown suffix", "cube.docx"),
        ("home of a user", "~/cube.vtp"),
        ("variable", "$HOME/cube.vtp"),
        ("address", "https://example.org/cube.vtp"),
        ("file address", "file:///etc/passwd"),
        ("pattern", "*.vtp"),
        ("line end", "cube\\n.vtp"),
        ("file taken for a folder", "cube.vtp/cube.vtp"),
        ("system file", "/etc/passwd"),
        ("system file from here", "../../../../../../../../../../../etc/passwd"),
        ("case itself", "case.toml"),
        ("other drive", "C:\\\\cube.vtp"),
        ("escape sequence", "\\u001b[31mcube.vtp"),
    ):
        yield Input(
            f"path/mesh: {name}", "the path of the mesh leads nowhere", files(_GOOD | {"case.toml": _named(path)})
        )
    yield Input("path/absolute", "the case names a mesh elsewhere", _absolute, end="answered", reads_outside=True)
    yield Input(
        "path/upward",
        "the case names a mesh beside its folder",
        files({"case.toml": _named("../outside/cube.vtp")}),
        end="answered",
        reads_outside=True,
    )
    yield Input(
        "path/link",
        "the mesh is a link to one beside the folder",
        _with(lambda at: (at / "cube.vtp").symlink_to("../outside/cube.vtp")),
        end="answered",
        reads_outside=True,
    )
    yield Input(
        "path/capitals",
        "the suffix is in capitals",
        files({"case.toml": _named("CUBE.VTP"), "CUBE.VTP": vtp}),
        end="answered",
    )
    for name, mesh in (("VTP in STL", "cube.stl"), ("STL in VTP", "cube.vtp")):
        content = vtp if mesh.endswith("stl") else stl_binary
        yield Input(
            f"path/{name}",
            "the suffix is that of another format",
            files({"case.toml": _named(mesh), mesh: content}),
            says=(mesh,),
        )
    for name in ("...toml", ".toml", "..toml", "-case.toml", "case", "a b c.toml", "Fälle.toml", "case.toml.bak"):
        yield Input(
            f"path/case called {name}",
            "the case has an odd name",
            files({name: PICKED, "cube.vtp": vtp}),
            end="answered",
            command=("balance", f"CASE/{name}", *BALANCE[2:]),
        )
    yield Input(
        "path/results by default for ...toml",
        "the folder of the results would be named by dots",
        files({"...toml": PICKED, "cube.vtp": vtp}),
        end="answered",
        command=("balance", "CASE/...toml", "--no-pictures"),
    )
    yield Input(
        "path/results in a file",
        "the folder for results is a file",
        files(_GOOD),
        says=("--out",),
        command=("balance", "case.toml", "--out", "CASE/cube.vtp", "--no-pictures"),
    )
    yield Input(
        "path/results below a file",
        "the folder for results is below a file",
        files(_GOOD),
        says=("--out",),
        command=("balance", "case.toml", "--out", "CASE/cube.vtp/deeper", "--no-pictures"),
    )
    yield Input(
        "path/results in a loop",
        "the folder for results is a link to itself",
        _with(_loop("res"), **{"cube.vtp": vtp()}),
        says=("--out",),
        command=("balance", "case.toml", "--out", "CASE/res", "--no-pictures"),
    )
    yield Input(
        "path/result is a folder",
        "balance.json is a folder",
        files(_GOOD | {"results/balance.json/keep": "me"}),
        says=("balance.json",),
        command=("balance", "case.toml", "--out", "CASE/results", "--no-pictures"),
    )
    one_file = PICKED.replace(
        'file = "cube.vtp"', 'files = { feed = "cube.vtp", drain = "cube.vtp", shell = "cube.vtp" }'
    )
    for rule in (
        "pick = { normal = [-1, 0, 0], near = [0, 0.5, 0.5] }\n",
        "rest = true\n",
        "pick = { normal = [1, 0, 0], near = [1, 0.5, 0.5] }\n",
    ):
        one_file = one_file.replace(rule, "")
    yield Input(
        "path/one file for all groups",
        "three groups name one file",
        files(_GOOD | {"case.toml": one_file}),
        says=("the same file",),
    )
    yield Input(
        "path/link to the file of another group",
        "two groups name one file by two names",
        _with(
            lambda at: [(at / f"{name}.vtp").symlink_to("cube.vtp") for name in ("feed", "drain")],
            **{
                "cube.vtp": vtp(),
                "case.toml": one_file.replace('feed = "cube', 'feed = "feed').replace(
                    'drain = "cube', 'drain = "drain'
                ),
            },
        ),
        says=("the same file",),
    )
    yield Input(
        "path/check without mesh", "there is no mesh", files({"case.toml": PICKED}), says=(no_file,), command=CHECK
    )
