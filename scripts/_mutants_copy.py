"""A copy of the repository that mutants break, and runs of its tests in forked processes."""

from __future__ import annotations

import ast
import hashlib
import json
import multiprocessing
import os
import shutil
import signal
import subprocess
import sys
import time
from collections.abc import Iterator, Sequence
from contextlib import contextmanager, suppress
from dataclasses import dataclass
from pathlib import Path
from typing import Any

ROOT = Path(__file__).resolve().parent.parent
# Imported once; every run of the tests is forked from a process that has them. Hypothesis must not be: pytest looks
# at its plugin first.
AHEAD = ["numba", "numpy", "scipy.optimize", "scipy.spatial", "pydantic", "pyvista", "pytest"]
FORKS = multiprocessing.get_context("forkserver")


@dataclass(frozen=True)
class Mutant:
    """One way to break one file."""

    number: int
    file: str
    old: str
    new: str
    breaks: str
    interpreted: tuple[str, ...]
    tests: tuple[str, ...]
    equivalent: str | None = None

    def applied(self, text: str) -> str:
        return text.replace(self.old, self.new)


@dataclass(frozen=True)
class End:
    """How a run of tests ended: pytest's exit code (None: out of time), which failed, and the first's last words."""

    code: int | None
    failed: tuple[str, ...]
    words: str
    seconds: float
    interpreted: bool = False


class Halt(Exception):
    """There is no score to be had."""


# ---- compiled code ---------------------------------------------------------------------------


class Kernels:
    """Which files hold compiled functions, and what those are compiled from."""

    def __init__(self, root: Path) -> None:
        self.uses: dict[str, set[str]] = {}
        holders = set()
        for path in sorted((root / "fluxmesh").rglob("*.py")):
            file = path.relative_to(root).as_posix()
            text = path.read_text(encoding="utf-8")
            if "@compiled" in text:
                holders.add(file)
            self.uses[file] = {
                name
                for node in ast.walk(ast.parse(text))
                if isinstance(node, ast.ImportFrom) and node.module and node.module.startswith("fluxmesh")
                for name in [f"{node.module.replace('.', '/')}.py"]
            }
        self.holders = holders
        self.sources = set().union(*(self._under(file) for file in holders))

    def _under(self, file: str) -> set[str]:
        seen, left = set(), [file]
        while left:
            one = left.pop()
            if one not in seen and one in self.uses:
                seen.add(one)
                left += self.uses[one]
        return seen

    def made_from(self, file: str) -> set[str]:
        """Files whose compiled code a change of this file makes stale."""
        return {holder for holder in self.holders if file in self._under(holder)}

    def state(self, root: Path) -> str:
        text = b"".join((root / file).read_bytes() for file in sorted(self.sources))
        return hashlib.sha256(text).hexdigest()[:16]


# ---- a copy of the repository ----------------------------------------------------------------


class Copy:
    """A copy of the repository that one worker breaks and mends, with compiled code of its own."""

    def __init__(self, folder: Path) -> None:
        self.root, self.folder = folder / "repository", folder
        self._fill()
        self.kernels = Kernels(self.root)
        self.cache = folder / "kernels" / self.kernels.state(self.root)
        self.cache.mkdir(parents=True, exist_ok=True)
        self.ends = folder / "end.json"
        self.said = folder / "said.txt"
        self.whole = ""
        self.running: int | None = None

    def stop(self) -> None:
        """End the tests that run, and all that they have started."""
        if self.running is not None:
            with suppress(ProcessLookupError):
                os.killpg(self.running, signal.SIGKILL)

    def _fill(self) -> None:
        def names(*which: str) -> set[str]:
            run = subprocess.run(["git", "ls-files", "-z", *which], cwd=ROOT, capture_output=True, text=True)
            if run.returncode:
                raise Halt(f"git does not list the files of {ROOT}: {run.stderr.strip()}")
            return {name for name in run.stdout.split("\0") if name and (ROOT / name).is_file()}

        wanted = names() | names("--others", "--exclude-standard", "tests")
        for path in [path for path in self.root.rglob("*") if path.is_file()]:
            name = path.relative_to(self.root).as_posix()
            if name not in wanted and "__pycache__" not in name:
                path.unlink()
        for name in wanted:
            source, target = ROOT / name, self.root / name
            if target.is_file() and target.read_bytes() == source.read_bytes():
                continue  # its time stays, and with it what was compiled
            target.parent.mkdir(parents=True, exist_ok=True)
            shutil.copy2(source, target)

    @contextmanager
    def broken(self, mutant: Mutant) -> Iterator[Path]:
        """Break the copy, and mend it after; gives the folder of compiled code to be used meanwhile."""
        path = self.root / mutant.file
        text, times = path.read_text(encoding="utf-8"), path.stat()
        hurt, cache, self.whole = self.kernels.made_from(mutant.file), self.cache, text
        try:
            path.write_text(mutant.applied(text), encoding="utf-8")
            # Python and numba tell files by their time and size: each mutant has a time of its own
            os.utime(path, (times.st_atime, times.st_mtime + 10.0 * mutant.number))
            if hurt:
                cache = self._without(hurt)
            yield cache
        finally:
            path.write_text(text, encoding="utf-8")
            os.utime(path, (times.st_atime, times.st_mtime))
            if cache != self.cache:
                shutil.rmtree(cache, ignore_errors=True)

    @contextmanager
    def mended(self, mutant: Mutant) -> Iterator[None]:
        """Take a mutant out of the copy for a while."""
        path = self.root / mutant.file
        text, times = path.read_text(encoding="utf-8"), path.stat()
        path.write_text(self.whole, encoding="utf-8")
        os.utime(path, (times.st_atime, times.st_mtime - 10.0 * mutant.number))
        try:
            yield
        finally:
            path.write_text(text, encoding="utf-8")
            os.utime(path, (times.st_atime, times.st_mtime))

    def _without(self, hurt: set[str]) -> Path:
        """Compiled code but for that of some files: nothing else is compiled anew."""
        cache = self.folder / "kernels" / "mutant"
        shutil.rmtree(cache, ignore_errors=True)
        names = {(Path(file).parent.name, Path(file).stem) for file in hurt}
        for path in self.cache.rglob("*.nb[ic]"):
            if (path.parent.name.rpartition("_")[0], path.name.partition(".")[0]) not in names:
                target = cache / path.relative_to(self.cache)
                target.parent.mkdir(parents=True, exist_ok=True)
                os.link(path, target)
        cache.mkdir(parents=True, exist_ok=True)
        return cache

    def test(
        self, arguments: Sequence[str], limit: float, *, cache: Path | None = None, interpreted: bool = False
    ) -> End:
        """Run tests in a process of their own; kernels are compiled into a folder, or interpreted."""
        self.ends.unlink(missing_ok=True)
        start = time.monotonic()
        place = "" if interpreted else str(cache or self.cache)
        given = (str(self.root), place, list(arguments), str(self.ends), str(self.said))
        process = FORKS.Process(target=_tests, args=given)
        process.start()
        self.running = process.pid
        process.join(limit)
        late = process.is_alive()
        if late:
            self.stop()
            process.join()
        self.running = None
        seconds = time.monotonic() - start
        if late:
            return End(None, (), f"not done after {limit:g} s", seconds)
        if not self.ends.is_file():
            said = self.said.read_text(encoding="utf-8", errors="replace")[-2000:] if self.said.is_file() else ""
            return End(process.exitcode, (), f"the tests' process ended with {process.exitcode}: {said}", seconds)
        told = json.loads(self.ends.read_text(encoding="utf-8"))
        return End(told["code"], tuple(told["failed"]), told["words"], seconds, interpreted)


def _tests(root: str, cache: str, arguments: list[str], ends: str, said: str) -> None:
    """Run pytest in a forked process, and write how it ended."""
    os.setsid()
    with open(said, "w") as out:
        os.dup2(out.fileno(), 1)
        os.dup2(out.fileno(), 2)
    os.environ.update(PYTHONPATH=root, **({"NUMBA_CACHE_DIR": cache} if cache else {"NUMBA_DISABLE_JIT": "1"}))
    os.environ.pop("FLUXMESH_BROWSER", None)
    os.chdir(root)
    sys.path.insert(0, root)

    import pytest
    from numba.core import config

    config.reload_config()

    class Seen:
        def __init__(self) -> None:
            self.failed: list[str] = []
            self.words = ""

        def pytest_configure(self) -> None:
            import hypothesis  # not before: pytest looks at it first

            # the same examples in every run, no verdict by a clock, and no search for a smaller example
            hypothesis.settings.register_profile(
                "mutants",
                deadline=None,
                derandomize=True,
                database=None,
                phases=(hypothesis.Phase.explicit, hypothesis.Phase.generate),
            )
            hypothesis.settings.load_profile("mutants")

        def pytest_runtest_logreport(self, report: Any) -> None:
            if report.failed:
                self.failed.append(report.nodeid)
                self.words = self.words or str(report.longrepr)[-2000:]

        def pytest_collectreport(self, report: Any) -> None:
            if report.failed and not self.words:
                self.words = str(report.longrepr)[-2000:]

    seen = Seen()
    code = int(pytest.main(["-q", "-p", "no:cacheprovider", *arguments], plugins=[seen]))
    used = Path(sys.modules["fluxmesh"].__file__ or "") if "fluxmesh" in sys.modules else Path()
    if Path(root) not in used.parents:
        code, seen.words = 70, f"the tests ran {used} and not the copy in {root}"
    Path(ends).write_text(json.dumps({"code": code, "failed": seen.failed, "words": seen.words}), encoding="utf-8")
