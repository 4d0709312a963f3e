"""How kernels are compiled and spread over threads."""

from __future__ import annotations

import os
import warnings
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from typing import Any, TypeVar, cast

from numba import njit

from fluxmesh.errors import FluxmeshWarning

__all__ = ["compiled", "compiled_inline", "run_parts", "thread_count"]

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


def _compiled(function: _Kernel, **options: str) -> _Kernel:
    try:
        return cast(_Kernel, njit(cache=True, nogil=True, error_model="numpy", **options)(function))
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
