"""The work of the command in a child process, so that a crash in compiled code does not take the message with it.

Libraries that read meshes in compiled code may end the process on a damaged file, run on for ever, or ask for
all the memory there is. The command therefore works in a child, made by a fork before anything is loaded: that
costs milliseconds, and no file is read twice. The parent only listens, and turns a bad end into one message.

The child reports over a pipe what it reads (`reading`); it ends itself when the parent is gone.
"""

from __future__ import annotations

import contextlib
import io
import os
import select
import signal
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Final, NoReturn

__all__ = ["is_guarded", "reading", "run_guarded"]

# Time a file may take: one that is read at 0.2 MB/s is text read by Python on a busy machine.
_SECONDS: Final = 30.0
_BYTES_A_SECOND: Final = 2e5
# Memory that may come on top of what the process has when the reading starts; packed files unfold.
_BYTES: Final = 2 << 30
_UNFOLDED: Final = 100

_REMEDY: Final = "It is damaged, or not of the format its suffix tells; write it again, or in another format"


class _State:
    """What this process knows of its guard."""

    reports: int | None = None  # where the child writes what it reads
    under_way: list[tuple[str, float]] = []  # noqa: RUF012


def is_guarded() -> bool:
    """Return whether a parent process will tell when this one breaks down."""
    return _State.reports is not None


@contextlib.contextmanager
def reading(path: Path) -> Iterator[None]:
    """Tell the guard that a file is read for as long as the block runs, and bound its time and memory.

    Without a guard, it does nothing. The bounds are 30 s and 1 s for each 0.2 MB of the file, or
    ``FLUXMESH_READ_SECONDS``; and 2 GiB and 100 times its size, or ``FLUXMESH_READ_GIB``.

    Parameters
    ----------
    path : Path
        The file; one that lists others is counted with all of its folder.
    """
    if _State.reports is None:
        yield
        return
    size = _size(path)
    seconds = _asked("FLUXMESH_READ_SECONDS") or _SECONDS + size / _BYTES_A_SECOND
    gib = _asked("FLUXMESH_READ_GIB")
    _State.under_way.append((str(path), seconds))
    _report()
    try:
        with _bounded(int(gib * 2**30) if gib else _BYTES + _UNFOLDED * size), _last_words_unheard():
            yield
    finally:
        _State.under_way.pop()
        _report()


def run_guarded(work: Callable[[], None]) -> None:
    """Do the work in a child of this process; the parent ends here, with the child's exit code.

    A child that is ended by a signal leaves one message and exit code 2 if it was reading a file; after SIGINT
    the code is 130, and after any other signal 128 and its number. Where processes cannot be forked, the work
    is done in this one.

    Parameters
    ----------
    work : callable
        The command. Nothing may be loaded or threaded before that a fork does not take.
    """
    if not hasattr(os, "fork"):
        signal.signal(signal.SIGINT, lambda *_: _say_and_end("interrupted", 130))
        work()
        return
    passed_on = {signal.SIGINT, signal.SIGTERM, signal.SIGHUP}
    reports, report = os.pipe()
    life, alive = os.pipe()
    # a signal that comes in between waits until both sides are ready for it
    before = signal.pthread_sigmask(signal.SIG_BLOCK, passed_on)
    for stream in (sys.stdout, sys.stderr):
        if stream is not None:
            stream.flush()
    child = os.fork()
    if child:
        os.close(report)
        os.close(life)
        _watch(child, reports, passed_on, before)
    os.close(reports)
    os.close(alive)
    _State.reports = report
    # an interrupted child ends at once, wherever it is: results are moved into place, and the parent says the line
    if signal.getsignal(signal.SIGINT) is not signal.SIG_IGN:
        signal.signal(signal.SIGINT, signal.SIG_DFL)
    signal.pthread_sigmask(signal.SIG_SETMASK, before)
    _end_with(life)
    _keep_stderr()
    work()


def _end_with(life: int) -> None:
    """End this process when the other end of a pipe closes: its parent was killed."""
    from _thread import start_new_thread

    def wait() -> None:
        while True:
            with contextlib.suppress(InterruptedError):
                if not os.read(life, 1):
                    os.kill(os.getpid(), signal.SIGKILL)

    start_new_thread(wait, ())


def _watch(child: int, reports: int, passed_on: set[signal.Signals], mask: set[int]) -> NoReturn:
    """Wait for the child, pass signals on to it, and end as it does."""

    def pass_on(number: int, _frame: object) -> None:
        with contextlib.suppress(ProcessLookupError):
            os.kill(child, number)

    for each in passed_on:
        if signal.getsignal(each) is not signal.SIG_IGN:
            signal.signal(each, pass_on)
    signal.pthread_sigmask(signal.SIG_SETMASK, mask)
    under_way, late = _listen(child, reports)
    _, status = os.waitpid(child, 0)
    code = os.waitstatus_to_exitcode(status)
    if code >= 0:
        os._exit(code)
    number = -code
    if late:
        _say_and_end(f"{under_way}: could not be read in {late:.0f} s. {_REMEDY}, or set FLUXMESH_READ_SECONDS", 2)
    if number == signal.SIGINT:
        _say_and_end("interrupted", 130)
    if number == signal.SIGPIPE:
        # nobody reads on: end as any filter does
        signal.signal(signal.SIGPIPE, signal.SIG_DFL)
        os.kill(os.getpid(), signal.SIGPIPE)
    if number in passed_on:
        _say_and_end(f"ended by signal {number}", 128 + number)
    what = signal.Signals(number).name if number in set(signal.Signals) else str(number)
    if under_way:
        _say_and_end(f"{under_way}: its reader broke down (signal {number}, {what}). {_REMEDY}", 2)
    hint = ": the system may have run out of memory" if number == signal.SIGKILL else ""
    _say_and_end(f"broke down (signal {number}, {what}){hint}. Files that were written before are whole", 128 + number)


def _listen(child: int, reports: int) -> tuple[str, float]:
    """Follow what the child reads until it ends; return what was under way, and its time if that ran out."""
    under_way, limit, left, rest, killed = "", 0.0, 0.0, b"", False
    while True:
        start = time.monotonic()
        # in short steps, so that time in which the whole group of processes is stopped does not count
        ready, _, _ = select.select([reports], [], [], 1.0 if limit and not killed else None)
        left -= min(time.monotonic() - start, 2.0)
        if ready:
            got = os.read(reports, 65536)
            if not got:
                return under_way, limit if killed else 0.0
            *lines, rest = (rest + got).split(b"\n")
            for line in lines:
                seconds, _, name = line.decode("utf-8", "replace").partition(" ")
                under_way, limit = name, float(seconds)
                left = limit
        elif limit and left < 0 and not killed:
            killed = True
            os.kill(child, signal.SIGKILL)


def _keep_stderr() -> None:
    """Give Python's own messages a way that stays open while the libraries below are not listened to."""
    if isinstance(sys.stderr, io.TextIOWrapper):
        with contextlib.suppress(OSError):
            stream = os.fdopen(os.dup(2), "wb", buffering=0)
            sys.stderr = io.TextIOWrapper(
                stream, encoding=sys.stderr.encoding, errors="backslashreplace", write_through=True
            )


@contextlib.contextmanager
def _last_words_unheard() -> Iterator[None]:
    """Keep from the terminal what a library says as it breaks down: the guard says it better."""
    try:
        kept = os.dup(2)
        nowhere = os.open(os.devnull, os.O_WRONLY)
    except OSError:
        yield
        return
    os.dup2(nowhere, 2)
    os.close(nowhere)
    try:
        yield
    finally:
        os.dup2(kept, 2)
        os.close(kept)


def _report() -> None:
    name, seconds = _State.under_way[-1] if _State.under_way else ("", 0.0)
    # short enough for the pipe to take it in one piece
    line = f"{seconds:.3f} {name[-1000:]}".encode("utf-8", "replace").replace(b"\n", b" ") + b"\n"
    if _State.reports is not None:
        with contextlib.suppress(OSError):
            os.write(_State.reports, line)


def _say_and_end(said: str, code: int) -> NoReturn:
    with contextlib.suppress(OSError):
        os.write(2, f"fluxmesh: {said}\n".encode("utf-8", "backslashreplace"))
    os._exit(code)


def _asked(name: str) -> float | None:
    """Return a positive number from the environment, None if there is none."""
    try:
        value = float(os.environ.get(name, ""))
    except ValueError:
        return None
    return value if 0 < value < 1e9 else None


def _size(path: Path) -> int:
    """Return the bytes of a file, and of those beside it when it may list them."""
    try:
        if path.suffix.lower() not in (".vtm", ".vtmb", ".vtpc", ".pvtu", ".pvtp", ".xdmf", ".xmf", ".cgns"):
            return path.stat().st_size
        beside = (entry for entry in path.parent.rglob("*") if entry.is_file())
        return sum(entry.stat().st_size for _, entry in zip(range(100_000), beside))
    except OSError:
        return 0


@contextlib.contextmanager
def _bounded(more: int) -> Iterator[None]:
    """Let this process take no more than so many bytes on top of what it has."""
    try:
        import resource

        with open("/proc/self/statm", encoding="ascii") as stream:
            have = int(stream.read().split()[0]) * resource.getpagesize()
        soft, hard = resource.getrlimit(resource.RLIMIT_AS)
        limit = min([have + more, *(each for each in (soft, hard) if each != resource.RLIM_INFINITY)])
        resource.setrlimit(resource.RLIMIT_AS, (limit, hard))
    except (ImportError, OSError, ValueError):  # a system without such limits
        yield
        return
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_AS, (soft, hard))
