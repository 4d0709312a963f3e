"""How kernels are compiled and spread over threads."""

from __future__ import annotations

import hashlib
import itertools
import os
import pickle
import warnings
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from typing import Any, TypeVar, cast

from numba import njit

from fluxmesh.errors import FluxmeshWarning

__all__ = ["compiled", "compiled_inline", "run_parts", "thread_count"]

_MARK = b"with digest "  # files of numba alone, from before, begin otherwise
_DIGEST = 32  # bytes
_said: set[str] = set()
_OF_NUMBA = ("_load_index", "_save_index", "_data_path", "_data_name", "_dump", "_open_for_write", "flush")
_Kernel = TypeVar("_Kernel", bound=Callable[..., Any])


def compiled(function: _Kernel) -> _Kernel:
    """Compile a function on its first call and keep the machine code on disk.

    It runs without the interpreter's lock; no fast-math, so that sums keep
    their order.

    Parameters
    ----------
    function : callable
        A function within numba's language.

    Returns
    -------
    callable
        Same signature.
    """
    return _compiled(function)


def compiled_inline(function: _Kernel) -> _Kernel:
    """Compile a function into each place that calls it, so that loops around it stay vector loops.

    Parameters
    ----------
    function : callable
        A function within numba's language.

    Returns
    -------
    callable
        Same signature.
    """
    return _compiled(function, inline="always")


class _CheckedFiles:
    """Numba's cache files, whose machine code is run only if it is the same as was written.

    Numba trusts them: a damaged one ends in a traceback of its own, or in a wrong figure. Here each carries a
    digest; one that is damaged or cannot be written is passed over.
    """

    def __init__(self, files: Any) -> None:
        self._files = files

    def flush(self) -> None:
        self._files.flush()

    def load(self, key: Any) -> Any:
        try:
            name = self._files._load_index().get(key)
            if name is None:
                return None
            with open(self._files._data_path(name), "rb") as stream:
                stored = stream.read()
        except FileNotFoundError:
            return None
        except Exception:  # unpickling what is damaged raises anything
            return self._damaged()
        if not stored.startswith(_MARK):
            return None
        digest, content = stored[len(_MARK) :][:_DIGEST], stored[len(_MARK) + _DIGEST :]
        if hashlib.sha256(content).digest() != digest:
            return self._damaged()
        try:
            return pickle.loads(content)
        except Exception:
            return self._damaged()

    def save(self, key: Any, data: Any) -> None:
        try:
            self._save(key, data)
        except Exception:
            # a damaged index first, then a disk that takes no more
            try:
                self._files.flush()
                self._save(key, data)
            except OSError:
                _note("compiled code cannot be kept on disk, so the next run compiles anew (10 to 20 s)")

    def _save(self, key: Any, data: Any) -> None:
        entries = self._files._load_index()
        taken = set(entries.values())
        name = entries.get(key) or next(
            name for name in map(self._files._data_name, itertools.count(1)) if name not in taken
        )
        content = self._files._dump(data)
        with self._files._open_for_write(self._files._data_path(name)) as stream:
            stream.write(_MARK + hashlib.sha256(content).digest() + content)
        # the index comes last: what it names is there
        if key not in entries:
            self._files._save_index({**entries, key: name})

    def _damaged(self) -> None:
        _note("compiled code kept on disk was damaged: it is compiled anew (10 to 20 s)")


def _note(said: str) -> None:
    # every kernel may find the same, and numba resets what was warned of
    if said not in _said:
        _said.add(said)
        warnings.warn(said, FluxmeshWarning, stacklevel=2)


def _compiled(function: _Kernel, **options: str) -> _Kernel:
    try:
        kernel = njit(cache=True, nogil=True, error_model="numpy", **options)(function)
        # of numba's own make; a later version without it goes on with what it has
        files = getattr(getattr(kernel, "_cache", None), "_cache_file", None)
        if all(hasattr(files, name) for name in _OF_NUMBA):
            kernel._cache._cache_file = _CheckedFiles(files)
        return cast(_Kernel, kernel)
    except RuntimeError as error:
        # numba raises when neither its own cache, the user's nor the package's folder can be written
        if "cannot cache" not in str(error):
            raise
        warnings.warn(
            "compiled code cannot be kept, so every run compiles anew (10 to 20 s): "
            "set NUMBA_CACHE_DIR to a folder that can be written",
            FluxmeshWarning,
            stacklevel=2,
        )
        return cast(_Kernel, njit(nogil=True, error_model="numpy", **options)(function))


def thread_count() -> int:
    """Return how many threads to use: ``FLUXMESH_THREADS`` or the cores this process may use."""
    asked = os.environ.get("FLUXMESH_THREADS", "")
    if asked.isdecimal() and asked.strip("0"):
        return min(int(asked[:12]), 256)
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def run_parts(work: Callable[[int], None], parts: int, threads: int | None = None) -> None:
    """Call ``work(part)`` for every part, on threads when there are several.

    Parameters
    ----------
    work : callable
        Takes the number of a part; parts write to separate places, so that the
        result does not depend on the number of threads.
    parts : int
        How many parts.
    threads : int, optional
        Threads; `thread_count` by default.
    """
    workers = min(parts, threads or thread_count())
    if workers <= 1:
        for part in range(parts):
            work(part)
        return
    with ThreadPoolExecutor(workers) as pool:
        for done in [pool.submit(work, part) for part in range(parts)]:
            done.result()
