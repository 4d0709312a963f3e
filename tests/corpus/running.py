"""Run the command on one input, in a fork of this process or from anew, and see what it touched."""

from __future__ import annotations

import contextlib
import gc
import hashlib
import os
import re
import resource
import shutil
import signal
import subprocess
import sys
import tempfile
import threading
import time
import traceback
import warnings
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any, NoReturn

from tests.corpus.entry import CHECK, Input
from tests.corpus.shapes import vtp

__all__ = ["SECRET", "Place", "Ran", "lay_out", "run_alone", "run_forked", "warm"]

SECRET = "xyzzy-7131-plugh"
"""What no result and no message may hold: it lies outside the case."""
_OPENED = re.compile(r'^(?:\d+ +)?(?:open|openat|openat2|creat)\((?:[^,"]*, )?"((?:[^"\\]|\\.)*)"[^)]*\)?.*= \d+', re.M)


@dataclass(frozen=True)
class Place:
    """Folders of one run.

    Attributes
    ----------
    case, outside, out, temporary, here : Path
        The input; what it must not touch; results; for temporary files; the working folder.
    """

    case: Path
    outside: Path
    out: Path
    temporary: Path
    here: Path


@dataclass(frozen=True)
class Ran:
    """How a run ended.

    Attributes
    ----------
    code : int
        Exit code; that of the signal below zero; 124 where the time was up.
    out, err : str
        What was printed.
    seconds : float
        How long it took.
    megabytes : float
        Largest memory of its process, 0 where that is not known.
    opened : tuple of str
        Files that were opened, as they were named.
    """

    code: int
    out: str
    err: str
    seconds: float
    megabytes: float
    opened: tuple[str, ...]


def lay_out(one: Input, root: Path) -> Place:
    """Make the files of an input in a new folder below `root`."""
    mark = hashlib.sha256(one.name.encode()).hexdigest()[:8]
    base = root / f"{re.sub(r'[^a-z0-9]+', '-', one.name.lower()).strip('-')[:50]}-{mark}"
    place = Place(*(base / name for name in ("case", "outside", "out", "temporary", "here")))
    for folder in (place.case, place.outside, place.temporary, place.here):
        folder.mkdir(parents=True)
    (place.outside / "cube.vtp").write_text(vtp(), "utf-8")
    (place.outside / "secret.txt").write_text(f"{SECRET}\n", "utf-8")
    if one.command[0] == "start":
        place.out.mkdir()  # which it does not make
    one.make(place.case)
    return place


def _arguments(one: Input, place: Place) -> list[str]:
    words = []
    for word in one.command:
        head, _, tail = word.partition("/")
        if head == "OUT":
            words.append(str(place.out / tail) if tail else str(place.out))
        elif head == "CASE":
            words.append(str(place.case / tail))
        elif "." in word and not word.startswith("-"):
            words.append(str(place.case / word))
        else:
            words.append(word)
    return words


_EVENTS = frozenset(
    ("open", "os.listdir", "os.scandir", "os.remove", "os.rename", "os.mkdir", "os.symlink", "os.truncate", "os.link")
)


def warm() -> None:
    """Load all that the command loads and compile its kernels, so that forks of this process have them."""
    from fluxmesh.cli import main
    from tests.corpus.every import inputs

    wanted = ("ascii vtp/whole", "array/whole", "cgns/whole", "vtu/whole", "ascii stl/cut")
    argv, folder = sys.argv, Path.cwd()
    with tempfile.TemporaryDirectory() as root, open(os.devnull, "w") as null:
        for one in inputs():
            if one.name.startswith(wanted):
                place = lay_out(one, Path(root))
                os.chdir(place.here)
                for command in (one.command, CHECK):
                    sys.argv = ["fluxmesh", *_arguments(replace(one, command=command), place)]
                    with (
                        warnings.catch_warnings(),
                        contextlib.redirect_stdout(null),
                        contextlib.redirect_stderr(null),
                        contextlib.suppress(SystemExit),
                    ):
                        main()
        os.chdir(folder)
    sys.argv = argv
    gc.enable()
    assert threading.active_count() == 1, "a fork takes one thread only"


def _work(one: Input, place: Place, bounds: tuple[int, int] | None) -> NoReturn:
    """Be the command: in a process of its own, that never comes back."""
    try:
        os.setsid()
        null = os.open(os.devnull, os.O_RDONLY)
        os.dup2(null, 0)
        for number, name in ((1, "out.txt"), (2, "err.txt")):
            os.dup2(os.open(place.here.parent / name, os.O_WRONLY | os.O_CREAT | os.O_TRUNC), number)
        told = os.open(place.here.parent / "opened.txt", os.O_WRONLY | os.O_CREAT | os.O_APPEND)
        sys.stdout = sys.__stdout__ = open(1, "w", encoding="utf-8", closefd=False)  # type: ignore[misc]  # noqa: SIM115
        sys.stderr = sys.__stderr__ = open(2, "w", encoding="utf-8", closefd=False)  # type: ignore[misc]  # noqa: SIM115
        sys.argv = ["fluxmesh", *_arguments(one, place)]
        os.chdir(place.here)
        os.environ |= {"TMPDIR": str(place.temporary), "COLUMNS": "120"}
        tempfile.tempdir = str(place.temporary)
        if bounds is not None:
            resource.setrlimit(resource.RLIMIT_CPU, (bounds[0], bounds[0]))
            resource.setrlimit(resource.RLIMIT_AS, (bounds[1], bounds[1]))
        resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
        warnings.resetwarnings()

        def hear(event: str, arguments: tuple[Any, ...]) -> None:
            if event in _EVENTS and arguments and isinstance(arguments[0], str | bytes | os.PathLike):
                os.write(told, os.fsencode(arguments[0]) + b"\0")
            elif event in ("socket.connect", "socket.getaddrinfo"):
                os.write(told, f"socket {arguments[1:]}".encode() + b"\0")

        sys.addaudithook(hear)
        from fluxmesh.__main__ import main

        main()
        os._exit(0)
    except SystemExit as ended:
        with contextlib.suppress(Exception):
            sys.stdout.flush()
        os._exit(ended.code if isinstance(ended.code, int) else 0)
    except BaseException:
        traceback.print_exc()
        os._exit(99)


def run_forked(one: Input, place: Place, *, seconds: float = 30.0, gigabytes: float = 4.0) -> Ran:
    """Call the command in a fork of this process, which should be `warm`: that takes a tenth of a second.

    What C libraries open by themselves is not heard.

    Parameters
    ----------
    one, place : Input, Place
        What is run.
    seconds : float, optional
        Time of the processor that it may take, and six times as much by the clock: the machine may be busy.
    gigabytes : float, optional
        Address space that it may take beyond that of this process.
    """
    pages = int(Path("/proc/self/statm").read_text().split()[0])
    begun = time.monotonic()
    child = os.fork()
    if not child:
        _work(one, place, (int(seconds), int(gigabytes * 2**30) + pages * resource.getpagesize()))
    code, used = _waited(child, 6.0 * seconds)
    said = [(place.here.parent / name).read_text("utf-8", "replace") for name in ("out.txt", "err.txt")]
    told = place.here.parent / "opened.txt"
    opened = tuple(os.fsdecode(name) for name in told.read_bytes().split(b"\0") if name)
    return Ran(code, said[0], said[1], time.monotonic() - begun, used / 1024.0, opened)


def run_alone(
    one: Input, place: Place, *, seconds: float = 30.0, gigabytes: float | None = None, trace: bool = True
) -> Ran:
    """Call the installed command in a process of its own.

    Parameters
    ----------
    one, place : Input, Place
        What is run.
    seconds : float, optional
        It is ended after that.
    gigabytes : float, optional
        Address space that it may take; no bound by default.
    trace : bool, optional
        Whether the files that it opens are heard by strace, where that is installed.
    """
    told = place.here.parent / "trace.txt"
    watch = ["strace", "--seccomp-bpf", "-f", "-qq", "-e", "trace=open,openat,openat2,creat,connect", "-o", str(told)]
    # the interpreter's own folder holds the command of this installation
    command = [str(Path(sys.executable).parent / "fluxmesh"), *_arguments(one, place)]
    traced = trace and shutil.which("strace") is not None

    def bound() -> None:
        if gigabytes is not None:
            size = int(gigabytes * 2**30)
            resource.setrlimit(resource.RLIMIT_AS, (size, size))
        resource.setrlimit(resource.RLIMIT_CORE, (0, 0))

    begun = time.monotonic()
    with (place.here.parent / "out.txt").open("wb") as out, (place.here.parent / "err.txt").open("wb") as err:
        child = subprocess.Popen(
            [*watch, *command] if traced else command,
            stdin=subprocess.DEVNULL,
            stdout=out,
            stderr=err,
            cwd=place.here,
            env={**os.environ, "TMPDIR": str(place.temporary), "COLUMNS": "120"},
            preexec_fn=bound,
            start_new_session=True,
        )
        code, usage = _waited(child.pid, seconds)
        child.returncode = code
    said = [(place.here.parent / f"{name}.txt").read_text("utf-8", "replace") for name in ("out", "err")]
    opened = _opened(told) if traced else ()
    return Ran(code, said[0], said[1], time.monotonic() - begun, usage / 1024.0, opened)


def _waited(child: int, seconds: float) -> tuple[int, float]:
    """Return the exit code of a child and its largest memory in kilobytes."""
    end = time.monotonic() + seconds
    while True:
        ended, status, used = os.wait4(child, os.WNOHANG)
        if ended:
            code = os.waitstatus_to_exitcode(status)
            return (124 if code == -signal.SIGXCPU else code), float(used.ru_maxrss)
        if time.monotonic() > end:
            with contextlib.suppress(ProcessLookupError):
                os.killpg(child, signal.SIGKILL)
            os.wait4(child, 0)
            return 124, 0.0
        time.sleep(0.005)


def _opened(told: Path) -> tuple[str, ...]:
    if not told.exists():
        return ()
    text = told.read_text("utf-8", "replace")
    found = [match[1] for match in _OPENED.finditer(text)]
    found += [f"socket {line}" for line in text.splitlines() if "connect(" in line and "AF_INET" in line]
    return tuple(found)
