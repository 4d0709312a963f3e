"""Ways to spoil a file of any format: cut short, bytes changed, words changed."""

from __future__ import annotations

import random
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Literal

from tests.corpus.entry import Content, Input, files
from tests.corpus.shapes import PICKED

__all__ = ["cut_short", "damaged", "flipped", "mesh_case", "whole"]


def mesh_case(name: str, case: str = PICKED) -> str:
    """Return the case for a mesh of another name."""
    return case.replace('"cube.vtp"', f'"{name}"')


def _bytes(content: Content) -> bytes:
    value = content() if callable(content) else content
    return value.encode() if isinstance(value, str) else value


def whole(kind: str, name: str, content: Content, case: str = PICKED) -> Input:
    """Return the good file itself: the corpus means nothing if that were refused."""
    return Input(f"{kind}/whole", "nothing", files({"case.toml": mesh_case(name, case), name: content}), end="answered")


def cut_short(
    kind: str,
    name: str,
    content: Content,
    shares: Sequence[float] = (0.02, 0.3, 0.6, 0.95),
    case: str = PICKED,
    alone: bool = False,
) -> Iterator[Input]:
    """Yield the file cut at some shares of its length."""
    for share in shares:

        def make(folder: Path, share: float = share) -> None:
            data = _bytes(content)
            files({"case.toml": mesh_case(name, case), name: data[: int(share * len(data))]})(folder)

        yield Input(
            f"{kind}/cut at {share:.0%}",
            f"the file ends after {share:.0%} of its bytes",
            make,
            says=(name,),
            alone=alone,
        )


def flipped(
    kind: str,
    name: str,
    content: Content,
    count: int = 6,
    part: slice = slice(None),
    case: str = PICKED,
    alone: bool = False,
) -> Iterator[Input]:
    """Yield the file with three bits turned, at places by chance but always the same.

    Where a bit that says something else of the flow is turned, nobody can know: `part`
    should be that of names, counts and marks. A file that is read all the same has the right answer.
    """
    for seed in range(count):

        def make(folder: Path, seed: int = seed) -> None:
            data = bytearray(_bytes(content))
            chance = random.Random(seed)
            places = range(len(data))[part]
            for place in chance.sample(places, 3):
                data[place] ^= 1 << chance.randrange(8)
            files({"case.toml": mesh_case(name, case), name: bytes(data)})(folder)

        yield Input(f"{kind}/bits turned, {seed}", "three bits are turned", make, end="either", alone=alone)


def damaged(
    kind: str,
    name: str,
    content: str | bytes,
    changes: Sequence[tuple[str, str | bytes, str | bytes]],
    case: str = PICKED,
    alone: bool = False,
    end: Literal["refused", "either"] = "refused",
) -> Iterator[Input]:
    """Yield the file with one place changed, which must stand in it."""
    for fault, old, new in changes:

        def make(folder: Path, old: str | bytes = old, new: str | bytes = new, fault: str = fault) -> None:
            data, one, two = _bytes(content), _bytes(old), _bytes(new)
            assert one in data, f"{one!r} is not in {kind}, for {fault}"
            files({"case.toml": mesh_case(name, case), name: data.replace(one, two, 1)})(folder)

        says = (name,) if end == "refused" else ()
        yield Input(f"{kind}/{fault}", f"the file has {fault}", make, end, says=says, alone=alone)
