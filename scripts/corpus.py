"""Run the corpus of bad inputs, and print how each ended: refused with one message, answered right, or otherwise."""

from __future__ import annotations

import argparse
import os
import shutil
import sys
import tempfile
from collections import Counter
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from functools import partial
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))

from tests.corpus import inputs
from tests.corpus.entry import Input
from tests.corpus.judging import faults_of, snapshot
from tests.corpus.running import Ran, lay_out, run_alone, run_forked, warm

_SECONDS = 30.0
_MEGABYTES = 2048.0  # beyond what the good case takes
_LONGEST = 170
_WORDS = {"refused": "refused", "answered": "answered right", "OTHER": "others"}


@dataclass(frozen=True)
class _Ended:
    """How one input ended."""

    one: Input
    ran: Ran
    faults: list[str]
    message: str

    @property
    def word(self) -> str:
        return "OTHER" if self.faults else "refused" if self.ran.code == 2 else "answered"


def _end_of(one: Input, root: Path, forks: bool) -> _Ended:
    place = lay_out(one, root)
    before = {"case": snapshot(place.case), "outside": snapshot(place.outside)}
    ran = (run_forked if forks else run_alone)(one, place, seconds=_SECONDS)
    faults = faults_of(one, place, ran, before)
    if ran.megabytes > _MEGABYTES:
        faults.append(f"takes {ran.megabytes:.0f} MB")
    said = " ".join(ran.err.split()).removeprefix("fluxmesh: ").replace(f"{place.case}/", "")
    if one.command[0] != "balance" and not said:
        said = f"{one.command[0]}: code {ran.code}"
    return _Ended(one, ran, faults, said)


def _chosen(words: list[str], every: int) -> list[Input]:
    found = [one for one in inputs() if not words or any(word in one.name for word in words)]
    # the good files first: their kernels are compiled before a bound on time counts
    whole = [one for one in found if one.name.endswith("/whole")]
    return whole + [one for one in found if one not in whole][::every]


def _ends(chosen: list[Input], root: Path, forks: bool, jobs: int) -> Iterator[_Ended]:
    if forks:
        warm()
        yield from (_end_of(one, root, True) for one in chosen)
        return
    with ThreadPoolExecutor(jobs) as pool:
        yield from pool.map(partial(_end_of, root=root, forks=False), chosen)


def main() -> int:
    """Return 1 where an input ended as it should not."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("words", nargs="*", help='words that names must hold, such as "stl/"; all by default')
    parser.add_argument(
        "--forks", action="store_true", help="in forks of one process, in place of the installed command"
    )
    parser.add_argument("--every", type=int, default=1, metavar="N", help="each N-th, and all good files")
    parser.add_argument("--jobs", type=int, default=os.cpu_count() or 1, help="processes at a time")
    parser.add_argument("--keep", type=Path, help="an empty folder for the inputs and what was printed")
    parser.add_argument("--quiet", action="store_true", help="print those alone that ended as they should not")
    given = parser.parse_args()
    chosen = _chosen(given.words, given.every)
    root = given.keep or Path(tempfile.mkdtemp(prefix="corpus."))
    counts: Counter[str] = Counter()
    runs: list[_Ended] = []
    try:
        for end in _ends(chosen, root, given.forks, given.jobs):
            runs.append(end)
            counts[end.word] += 1
            if end.faults or not given.quiet:
                size = f"{end.ran.megabytes:5.0f} MB"
                said = "; ".join(end.faults) if end.faults else end.message[:_LONGEST]
                print(f"{end.word:8} {end.ran.seconds:6.2f} s {size}  {end.one.name}: {said}", flush=True)
    finally:
        if given.keep is None:
            shutil.rmtree(root, ignore_errors=True)
    told = ", ".join(f"{counts[word]} {name}" for word, name in _WORDS.items())
    print(f"\n{len(runs)} inputs: {told}")
    for name, key in (("slowest", "seconds"), ("largest", "megabytes")):
        first = sorted(runs, key=lambda end, key=key: -getattr(end.ran, key))[:5]  # type: ignore[misc]
        unit = "s" if key == "seconds" else "MB"
        print(f"{name}: " + ", ".join(f"{end.one.name} {getattr(end.ran, key):.1f} {unit}" for end in first))
    return 1 if counts["OTHER"] or not runs else 0


if __name__ == "__main__":
    raise SystemExit(main())
