"""One bad input: what is wrong with it, how it is made, and how fluxmesh may end on it."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

__all__ = ["BALANCE", "CAUSES", "CHECK", "EXPORT", "LOAD", "NO_LOAD", "START", "Content", "Input", "files"]

Make = Callable[[Path], None]
Content = str | bytes | Callable[[], str | bytes]

LOAD = (300.0, 0.0, -9806.65)
"""Force on the hardware of the good case, in N: 1 m² at 500 Pa in, at 200 Pa out, and 1 m³ of water."""
NO_LOAD = None
"""Answered, but with no load to be compared: the command prints none, or it cannot be known."""

BALANCE = ("balance", "case.toml", "--out", "OUT", "--no-pictures")
CHECK = ("check", "case.toml")
CAUSES = ("causes", "case.toml", "--json", "OUT/causes.json")
EXPORT = ("export", "case.toml", "--out", "OUT")
START = ("start", "cube.vtp", "--to", "OUT/made.toml")


@dataclass(frozen=True)
class Input:
    """One input.

    Attributes
    ----------
    name : str
        Kind and fault, such as "stl/cut short".
    wrong : str
        What is wrong with it.
    make : callable
        Writes its files into a folder that is there and empty. Beside that
        folder lies another, "outside", which holds a good mesh and a secret.
    end : {"refused", "answered", "either"}
        How it may end: exit code 2 with one message; the right answer; or one of the two.
    load : tuple of 3 float, or None
        The right answer: force of the flow on the hardware in N.
    says : tuple of str
        What the message must hold.
    command : tuple of str
        Arguments; "case.toml" and other names are in the folder, "OUT" is that of the results.
    alone : bool
        Whether it may take the process with it, or much memory or time if something
        goes wrong: never run within the process of the tests.
    reads_outside : bool
        Whether the case names a file in the folder "outside".
    """

    name: str
    wrong: str
    make: Make
    end: Literal["refused", "answered", "either"] = "refused"
    load: tuple[float, float, float] | None = LOAD
    says: tuple[str, ...] = ()
    command: tuple[str, ...] = BALANCE
    alone: bool = False
    reads_outside: bool = False


def files(contents: Mapping[str, Content]) -> Make:
    """Return a maker that writes files, by name."""

    def make(folder: Path) -> None:
        for name, content in contents.items():
            value = content() if callable(content) else content
            data = value.encode() if isinstance(value, str) else value
            (folder / name).parent.mkdir(parents=True, exist_ok=True)
            (folder / name).write_bytes(data)

    return make
