"""Break the numeric core in the ways that scripts/mutants_*.toml list, and count how many the tests notice.

Each mutant changes one place of one file in a copy of the repository. The tests nearest to that file run first; what
they let pass meets the whole suite, but for tests marked long and those that need a browser. The exit code is 1 where
less than 95 % are caught, and 2 where some do not fit the sources any more or the tests fail without any mutant.
"""

from __future__ import annotations

import argparse
import ast
import os
import queue
import signal
import sys
import tempfile
import threading
import time
import tomllib
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

from _mutants_copy import AHEAD, FORKS, ROOT, Copy, End, Halt, Mutant

LISTS = "mutants_*.toml"
ENOUGH = 0.95
LEFT_OUT = ["tests/test_page_browser.py"]
SUITE = ["-m", "not long", *(f"--ignore={one}" for one in LEFT_OUT), "tests"]
LIMIT, SUITE_LIMIT = 600.0, 5400.0  # seconds; what takes longer runs without end


# ---- the list --------------------------------------------------------------------------------


def listed() -> list[Mutant]:
    """Read the mutants; a table a source file, an entry ``[old, new, what it breaks]``, or with a fourth
    string that says why it changes nothing."""
    found: list[Mutant] = []
    for path in sorted((ROOT / "scripts").glob(LISTS)):
        for file, table in tomllib.loads(path.read_text(encoding="utf-8")).items():
            near, tests = (tuple(f"tests/{one}" for one in table.get(key, ())) for key in ("interpreted", "tests"))
            for old, new, breaks, *equivalent in table["mutants"]:
                found.append(Mutant(len(found) + 1, file, old, new, breaks, near, tests, *equivalent))
    return found


def chosen(mutants: Sequence[Mutant], only: Sequence[str]) -> list[Mutant]:
    if not only:
        return list(mutants)
    numbers = {int(one) for one in only if one.isdecimal()}
    files = [one for one in only if not one.isdecimal()]
    found = [one for one in mutants if one.number in numbers or any(file in one.file for file in files)]
    if not found:
        raise Halt(f"no mutant has the number or the file {' or '.join(only)}; --list shows all")
    return found


def stale(mutants: Sequence[Mutant]) -> dict[int, str]:
    """Return, by number, which mutants do not fit the sources any more, and why."""
    found = {}
    for one in mutants:
        path = ROOT / one.file
        text = path.read_text(encoding="utf-8") if path.is_file() else ""
        count = text.count(one.old)
        if count != 1:
            found[one.number] = f"its old text stands {count} times in {one.file}: {one.old!r}"
        elif one.old == one.new:
            found[one.number] = f"it changes nothing: {one.old!r}"
        else:
            try:
                ast.parse(one.applied(text))
            except SyntaxError as error:
                found[one.number] = f"its new text makes no Python of {one.file}: {error}"
    return found


def require_tests(mutants: Sequence[Mutant]) -> None:
    wanted = {test.partition("::")[0] for one in mutants for test in (*one.interpreted, *one.tests)}
    missing = sorted(test for test in wanted if not (ROOT / test).is_file())
    if missing:
        raise Halt(f"the lists name tests that are not there: {', '.join(missing)}")


# ---- the work --------------------------------------------------------------------------------


def judge(copy: Copy, mutant: Mutant, *, nearest: bool) -> tuple[str, End]:
    """Return "caught", "survived" or "does not run", and how the tests ended."""
    spent = 0.0
    end = End(0, (), "", 0.0)
    with copy.broken(mutant) as cache:
        for tests, interpreted in ((mutant.interpreted, True), (mutant.tests, False)):
            if end.code == 0 and tests:
                end = copy.test(["-x", *tests], LIMIT, cache=cache, interpreted=interpreted)
                spent += end.seconds
        if end.code == 0 and not nearest and mutant.equivalent is None:
            skipped: list[str] = []
            while (end := copy.test(["-x", *SUITE, *skipped], SUITE_LIMIT, cache=cache)).code == 1:
                spent += end.seconds
                skipped.append(f"--deselect={end.failed[0]}")
                # only a test that passes without the mutant says something of it
                with copy.mended(mutant):
                    if copy.test(end.failed, LIMIT).code == 0:
                        break
            else:
                spent += end.seconds
    end = replace(end, seconds=spent)
    if end.code == 0:
        return "survived", end
    return ("caught" if end.code in (1, None) else "does not run"), end


def sound(copy: Copy, mutants: Sequence[Mutant]) -> None:
    """See that the nearest tests pass without a mutant; what they compile on the way is kept."""
    for interpreted in (True, False):
        nearest = [one.interpreted or one.tests for one in mutants if bool(one.interpreted) == interpreted]
        first = list(dict.fromkeys(tests[0] for tests in nearest))
        if first:
            end = copy.test(["-x", *first], SUITE_LIMIT, interpreted=interpreted)
            if end.code != 0:
                raise Halt(f"without any mutant the tests do not pass: {' '.join(end.failed)}\n{end.words}")


def sure(copy: Copy, found: dict[int, tuple[str, End]]) -> None:
    """See that each test that caught a mutant passes without it; else the mutant survived."""
    by = {number: end for number, (verdict, end) in found.items() if verdict == "caught" and end.failed}
    shy: set[tuple[str, bool]] = set()
    for interpreted in (True, False):
        tests = sorted({end.failed[0] for end in by.values() if end.interpreted == interpreted})
        if tests:
            shy.update((test, interpreted) for test in copy.test(tests, SUITE_LIMIT, interpreted=interpreted).failed)
    for number, end in by.items():
        if (end.failed[0], end.interpreted) in shy:
            found[number] = "survived", end
            print(f"{number:4d}  is not caught: {end.failed[0]} fails without it too")


def run(mutants: Sequence[Mutant], copies: Sequence[Copy], *, nearest: bool) -> dict[int, tuple[str, End]]:
    """Judge all mutants, one a copy at a time, and print each as it is done."""
    left: queue.SimpleQueue[Mutant] = queue.SimpleQueue()
    for one in mutants:
        left.put(one)
    found: dict[int, tuple[str, End]] = {}
    printing = threading.Lock()

    def work(copy: Copy) -> None:
        while True:
            try:
                one = left.get_nowait()
            except queue.Empty:
                return
            verdict, end = judge(copy, one, nearest=nearest)
            found[one.number] = verdict, end
            shown = "equivalent" if verdict == "survived" and one.equivalent else verdict
            by = " ".join(end.failed[:1]).removeprefix("tests/") or (end.words if verdict != "survived" else "")
            with printing:
                print(f"{one.number:4d}  {shown:12}  {end.seconds:5.0f} s  {one.file}: {one.breaks}", flush=True)
                if by:
                    print(f"{'':28}{by}", flush=True)

    threads = [threading.Thread(target=work, args=(copy,), daemon=True) for copy in copies]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    return found


def summed(mutants: Sequence[Mutant], found: dict[int, tuple[str, End]], seconds: float) -> bool:
    """Print the score and the survivors; return whether enough were caught."""
    harmless = [one for one in mutants if one.equivalent and found[one.number][0] == "survived"]
    counted = [one for one in mutants if one not in harmless]
    caught = [one for one in counted if found[one.number][0] == "caught"]
    missed = [one for one in counted if one not in caught]
    share = len(caught) / len(counted) if counted else 1.0
    print(
        f"\n{len(counted)} mutants: {len(caught)} caught, {len(missed)} survived ({100 * share:.1f} %), in "
        f"{seconds / 60:.0f} min; {len(harmless)} more change no result"
    )
    for one in missed:
        print(f"  {found[one.number][0]}: {one.number} {one.file}: {one.breaks}\n      {one.old!r} -> {one.new!r}")
    for one in harmless:
        print(f"  no change: {one.number} {one.file}: {one.breaks}, because {one.equivalent}")
    for one in mutants:
        if one.equivalent and one not in harmless:
            print(f"  said to change nothing, but it {found[one.number][0]}: {one.number}")
    return share >= ENOUGH


def main() -> int:
    parser = argparse.ArgumentParser(prog="scripts/mutants", description=(__doc__ or "").split("\n\n")[0])
    parser.add_argument("--only", action="append", default=[], metavar="FILE_OR_NUMBER", help="only these; may repeat")
    parser.add_argument("--list", action="store_true", help="show the mutants and stop")
    parser.add_argument("--workers", type=int, default=2, metavar="N", help="mutants tried at a time (2)")
    parser.add_argument("--nearest", action="store_true", help="do not go on to the whole suite")
    parser.add_argument("--folder", type=Path, help="where copies and compiled code stay for another run (none stay)")
    asked = parser.parse_args()
    mutants = chosen(listed(), asked.only)
    require_tests(mutants)
    faults = stale(mutants)
    for number, fault in faults.items():
        print(f"{number:4d}  stale: {fault}", flush=True)
    mutants = [one for one in mutants if one.number not in faults]
    if asked.list:
        for one in mutants:
            print(f"{one.number:4d}  {one.file}: {one.breaks}{' (changes no result)' if one.equivalent else ''}")
        return 2 if faults else 0
    os.environ.update(OPENBLAS_NUM_THREADS="1", OMP_NUM_THREADS="1")  # a process that forks has one thread
    FORKS.set_forkserver_preload(AHEAD)
    start = time.monotonic()
    signal.signal(signal.SIGTERM, lambda *_: sys.exit("stopped"))
    with tempfile.TemporaryDirectory(prefix="mutants-", ignore_cleanup_errors=True) as passing:
        folder = asked.folder.resolve() if asked.folder else Path(passing)
        copies = [Copy(folder / f"worker-{k + 1}") for k in range(max(1, min(asked.workers, len(mutants))))]
        try:
            sound(copies[0], mutants)
            print(f"The tests pass without a mutant ({time.monotonic() - start:.0f} s)", flush=True)
            found = run(mutants, copies, nearest=asked.nearest)
            sure(copies[0], found)
        finally:
            for copy in copies:
                copy.stop()
    enough = summed(mutants, found, time.monotonic() - start)
    return 2 if faults else 0 if enough else 1


if __name__ == "__main__":
    try:
        sys.exit(main())
    except Halt as halt:
        print(halt, file=sys.stderr)
        sys.exit(2)
