"""How kernels are compiled: with a place for their machine code, and without one."""

from __future__ import annotations

import pytest

from fluxmesh import compiling
from fluxmesh.errors import FluxmeshWarning


def test_without_a_place_for_machine_code_the_kernel_runs_and_the_user_is_told(monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(*_args: object, **_options: object) -> None:
        raise RuntimeError("cannot cache function 'half': no locator available for file 'x.py'")

    monkeypatch.setattr("numba.core.dispatcher.Dispatcher.enable_caching", refuse)
    with pytest.warns(FluxmeshWarning, match="set NUMBA_CACHE_DIR to a folder that can be written"):
        half = compiling.compiled(lambda x: x / 2)
    assert half(3.0) == 1.5


def test_other_faults_of_the_compiler_are_not_swallowed(monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(*_args: object, **_options: object) -> None:
        raise RuntimeError("no such compiler")

    monkeypatch.setattr("numba.core.dispatcher.Dispatcher.enable_caching", refuse)
    with pytest.raises(RuntimeError, match="no such compiler"):
        compiling.compiled(lambda x: x / 2)


@pytest.mark.parametrize(("asked", "threads"), [("3", 3), ("100000", 256), ("0", None), ("-1", None), ("abc", None)])
def test_the_number_of_threads_that_is_asked_for(monkeypatch, asked: str, threads: int | None) -> None:
    monkeypatch.delenv("FLUXMESH_THREADS", raising=False)
    default = compiling.thread_count()
    monkeypatch.setenv("FLUXMESH_THREADS", asked)
    assert compiling.thread_count() == (default if threads is None else threads)
