"""What must hold of every input, and batches of inputs in forks of this process."""

from __future__ import annotations

import contextlib
import gc
import json
import os
import resource
import select
import shutil
import signal
import tempfile
import time
import traceback
import warnings
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from random import Random

from fluxmesh import guarded
from fluxmesh.errors import FluxmeshError, FluxmeshWarning
from fluxmesh.field import volume_probe
from tests.fuzzing.targets import Target

__all__ = ["Judged", "judge", "run_batch", "write"]

SECONDS = 10.0
"""Most time of the processor that an input may take."""
GIGABYTES = 2.0
"""Most memory that it may take."""
_PATIENCE = 8
"""How many times more by the clock: the machine may be busy."""
_LONGEST = 4000


@dataclass(frozen=True)
class Judged:
    """How an input ended.

    Attributes
    ----------
    seed : str
        What its chance came from.
    end : {"refused", "answered", "guarded", "fault"}
        As it should, or not; "guarded": a library ended the process while it read a file,
        which the guard of the command tells in one message.
    what : str
        The message, or the fault in one line: faults with one cause read alike.
    detail : str
        The traceback, say.
    """

    seed: str
    end: str
    what: str
    detail: str = ""


def write(target: Target, seed: str, folder: Path) -> None:
    """Make the files of an input in a folder."""
    for name, data in target.make(Random(seed)).items():
        (folder / name).write_bytes(data)


def judge(run: Callable[[], None], seed: str = "") -> Judged:
    """Do something with an input, and judge how it ends.

    Parameters
    ----------
    run : callable
        What is done.
    seed : str, optional
        Named in the answer.
    """
    begun = time.process_time()
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("error")
            # those of fluxmesh itself are for the reader of the result
            warnings.simplefilter("ignore", FluxmeshWarning)
            run()
        judged = Judged(seed, "answered", "")
    except FluxmeshError as error:
        said = str(error)
        lacks = [part for part in ("found", "where", "remedy") if not getattr(error, part).strip()]
        if "\n" in said:  # a list of several, each with its place
            lacks = [] if said.strip() else ["found"]
        if lacks:
            judged = Judged(seed, "fault", f"message without {' and '.join(lacks)}, {_at(error)}", said)
        elif not all(sign == "\n" or sign.isprintable() for sign in said):
            judged = Judged(seed, "fault", f"message that upsets a terminal, {_at(error)}", said)
        elif len(said) > _LONGEST:
            judged = Judged(seed, "fault", f"message of more than {_LONGEST} letters, {_at(error)}", said)
        else:
            judged = Judged(seed, "refused", said)
    except Exception as error:
        judged = Judged(seed, "fault", f"{type(error).__name__}, {_at(error)}", traceback.format_exc())
    if (took := time.process_time() - begun) > SECONDS:
        judged = Judged(seed, "fault", "takes too long", f"{took:.1f} s, {judged.end}: {judged.what}")
    return judged


def _at(error: BaseException) -> str:
    """Return the last place within fluxmesh that an error passed."""
    frames = [
        frame for frame in traceback.extract_tb(error.__traceback__) if f"{os.sep}fluxmesh{os.sep}" in frame.filename
    ]
    if not frames:
        return "in the fuzzing itself" if not isinstance(error, AssertionError) else str(error)
    last = frames[-1]
    return f"{last.filename.rpartition(os.sep + 'fluxmesh' + os.sep)[2]}:{last.name}"


def run_batch(target: Target, seeds: Sequence[str]) -> list[Judged]:
    """Try inputs one after the other in forks of this process, a new one after each that takes it down.

    Parameters
    ----------
    target : Target
        What is fuzzed.
    seeds : sequence of str
        One an input.

    Returns
    -------
    list of Judged
        In the order of the seeds.
    """
    done: list[Judged] = []
    while len(done) < len(seeds):
        done += _fork(target, seeds[len(done) :])
    return done


def _fork(target: Target, seeds: Sequence[str]) -> list[Judged]:
    """Return how the inputs ended, up to the first that took the process down."""
    ear, mouth = os.pipe()
    root = Path(tempfile.mkdtemp(prefix="fuzz."))
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)  # of forks beside threads, which are idle here
        child = os.fork()
    if not child:
        os.close(ear)
        _work(target, seeds, root, mouth)
    os.close(mouth)
    done: list[Judged] = []
    rest, read, late = b"", b"", False
    end = time.monotonic() + _PATIENCE * SECONDS
    while True:
        ready, _, _ = select.select([ear], [], [], max(0.0, end - time.monotonic()))
        if not ready:
            late = True
            break
        got = os.read(ear, 1 << 16)
        if not got:
            break
        *lines, rest = (rest + got).split(b"\n")
        for line in lines:
            if line.startswith(b"["):
                done.append(Judged(*json.loads(line)))
            else:  # what a guard hears: seconds, and the file that is read
                read = line.partition(b" ")[2]
        if lines:
            end = time.monotonic() + _PATIENCE * SECONDS
    os.close(ear)
    if late:
        os.kill(child, signal.SIGKILL)
    _, status = os.waitpid(child, 0)
    shutil.rmtree(root, ignore_errors=True)
    code = os.waitstatus_to_exitcode(status)
    if len(done) < len(seeds):
        what = (
            "does not end"
            if late
            else f"ends the process (signal {-code})"
            if code < 0
            else f"ends the process (code {code})"
        )
        done.append(Judged(seeds[len(done)], "guarded" if read and code < 0 and not late else "fault", what))
    return done


def _work(target: Target, seeds: Sequence[str], root: Path, mouth: int) -> None:
    """Be the child: try inputs, tell how they ended, and never come back."""
    code = 99
    try:
        gc.disable()
        os.environ["FLUXMESH_THREADS"] = "1"  # many small inputs: to start threads costs more than they save
        # threads that VTK started before are not in a fork, and it would wait for them
        volume_probe._all_cores = contextlib.nullcontext
        pages = int(Path("/proc/self/statm").read_text().split()[0]) if Path("/proc/self/statm").exists() else 0
        limit = int(GIGABYTES * 2**30) + pages * resource.getpagesize()
        resource.setrlimit(resource.RLIMIT_AS, (limit, limit))
        guarded._State.reports = mouth
        resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
        nowhere = os.open(os.devnull, os.O_WRONLY)
        for stream in (1, 2):
            os.dup2(nowhere, stream)
        for number, seed in enumerate(seeds):
            folder = root / str(number)
            folder.mkdir()
            write(target, seed, folder)
            judged = judge(partial(target.run, folder), seed)
            shutil.rmtree(folder)
            line = json.dumps(
                [
                    judged.seed,
                    judged.end,
                    judged.what[-1000:] if judged.end == "refused" else judged.what,
                    judged.detail[-4000:],
                ]
            )
            data = line.encode("ascii") + b"\n"
            while data:
                data = data[os.write(mouth, data) :]
        code = 0
    finally:
        os._exit(code)
