"""Spoil good inputs by chance, and look for one that fluxmesh does not end well on.

Arguments: minutes (10), a seed (1), and `--only` the names of targets. `--again SEED` makes the one input of that
seed, as the list of faults names it ("vtp/1/2345"), below results/fuzz, and says how it ends.
"""

from __future__ import annotations

import argparse
import sys
import tempfile
import time
from collections import Counter
from functools import partial
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))

from tests.fuzzing.oracle import Judged, judge, run_batch, write
from tests.fuzzing.targets import TARGETS, Target

_BATCH, _QUICK = 50, 400
_KEPT = Path("results") / "fuzz"


def main() -> int:
    """Return 1 where an input ended as it should not."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("minutes", nargs="?", type=float, default=10.0)
    parser.add_argument("seed", nargs="?", type=int, default=1)
    parser.add_argument("--only", nargs="+", choices=[target.name for target in TARGETS], default=[])
    parser.add_argument("--again", metavar="SEED")
    given = parser.parse_args()
    if given.again:
        return _again(given.again)
    targets = [target for target in TARGETS if not given.only or target.name in given.only]
    _warm(targets)
    tried: dict[str, Counter[str]] = {target.name: Counter() for target in targets}
    spent: Counter[str] = Counter()
    faults: dict[tuple[str, str], list[Judged]] = {}
    end = time.monotonic() + 60.0 * given.minutes
    while time.monotonic() < end:
        # the one that had the least time so far
        target = min(targets, key=lambda one: spent[one.name])
        begun = time.monotonic()
        first = tried[target.name].total()
        count = _QUICK if target.name in ("case", "units") else _BATCH
        for judged in run_batch(target, [f"{target.name}/{given.seed}/{first + k}" for k in range(count)]):
            tried[target.name][judged.end] += 1
            if judged.end in ("fault", "guarded"):
                alike = faults.setdefault((target.name, judged.what), [])
                alike.append(judged)
                if len(alike) == 1:
                    print(f"{judged.end.upper()} {judged.seed}: {judged.what}\n{judged.detail}", flush=True)
                    _keep(target, judged.seed)
        spent[target.name] += time.monotonic() - begun  # type: ignore[assignment]
    print(f"\n{'target':8}{'inputs':>9}{'refused':>9}{'answered':>9}{'guarded':>8}{'faults':>8}{'s':>7}")
    for name, counts in tried.items():
        print(
            f"{name:8}{counts.total():9}{counts['refused']:9}{counts['answered']:9}{counts['guarded']:8}{counts['fault']:8}{spent[name]:7.0f}"
        )
    print(f"{'all':8}{sum(counts.total() for counts in tried.values()):9}")
    for (name, what), alike in sorted(faults.items()):
        print(f"{name}: {what}: {len(alike)} times, such as {', '.join(one.seed for one in alike[:3])}")
    return 1 if any(counts["fault"] for counts in tried.values()) else 0


def _warm(targets: list[Target]) -> None:
    """Do the good inputs in this process, so that forks of it have loaded all that there is to load."""
    for target in targets:
        for files in target.good():
            with tempfile.TemporaryDirectory() as folder:
                for name, data in files.items():
                    (Path(folder) / name).write_bytes(data)
                judge(partial(target.run, Path(folder)))


def _keep(target: Target, seed: str) -> Path:
    folder = _KEPT / seed.replace("/", "-")
    folder.mkdir(parents=True, exist_ok=True)
    write(target, seed, folder)
    return folder


def _again(seed: str) -> int:
    target = next(one for one in TARGETS if one.name == seed.split("/")[0])
    folder = _keep(target, seed)
    (judged,) = run_batch(target, [seed])
    print(f"{folder}: {judged.end}, {judged.what}\n{judged.detail}")
    return int(judged.end == "fault")


if __name__ == "__main__":
    raise SystemExit(main())
