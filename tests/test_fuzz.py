"""A short run of the fuzzing: inputs drawn from fixed seeds, the same ones each time; `scripts/fuzz` runs on."""

from __future__ import annotations

import os
from functools import partial
from pathlib import Path
from random import Random

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from fluxmesh.errors import FileError, FluxmeshError
from fluxmesh.guarded import reading
from tests.fuzzing.oracle import Judged, judge, run_batch, write
from tests.fuzzing.targets import TARGETS, Target

_FEW = settings(max_examples=40, deadline=None, derandomize=True, suppress_health_check=[HealthCheck.too_slow])
_NAMED = {target.name: target for target in TARGETS}
_seeds = st.integers(0, 2**32 - 1)


def _fault(target: Target, seed: int, folder: Path) -> str:
    write(target, f"{target.name}/test/{seed}", folder)
    judged = judge(partial(target.run, folder))
    return f"{judged.what}\n{judged.detail}" if judged.end == "fault" else ""


@pytest.mark.parametrize("target", TARGETS, ids=lambda target: target.name)
def test_good_inputs_are_answered(target: Target, tmp_path: Path) -> None:
    # fuzzing says nothing where it starts from inputs that are refused
    ends = []
    for number, files in enumerate(target.good()[:1]):
        (tmp_path / str(number)).mkdir()
        for name, data in files.items():
            (tmp_path / str(number) / name).write_bytes(data)
        ends.append(judge(partial(target.run, tmp_path / str(number))))
    assert [judged for judged in ends if judged.end != "answered"] == []


@_FEW
@given(_seeds)
def test_cases(tmp_path_factory: pytest.TempPathFactory, seed: int) -> None:
    assert not _fault(_NAMED["case"], seed, tmp_path_factory.mktemp("case"))


@settings(_FEW, max_examples=80)
@given(_seeds)
def test_units(tmp_path_factory: pytest.TempPathFactory, seed: int) -> None:
    assert not _fault(_NAMED["units"], seed, tmp_path_factory.mktemp("units"))


@pytest.mark.parametrize("target", TARGETS[2:], ids=lambda target: target.name)
def test_files(target: Target) -> None:
    # in a fork: a reader in compiled code may end its process, which the guard of the command tells ("guarded")
    ends = run_batch(target, [f"{target.name}/test/{number}" for number in range(8)])
    assert [judged for judged in ends if judged.end == "fault"] == []
    assert {"refused", "answered"} & {judged.end for judged in ends}


@pytest.mark.parametrize(
    ("raised", "what"),
    [
        (ValueError("oh"), "ValueError"),
        (MemoryError(), "MemoryError"),
        (UserWarning("look"), "UserWarning"),
        (FileError("is odd"), "without where and remedy"),
        (FileError("is odd", "a.vtp", " "), "without remedy"),
        (FileError("is odd " * 600, "a.vtp", "Mend it"), "more than 4000 letters"),
        (AssertionError("a point is not finite"), "a point is not finite"),
    ],
)
def test_what_should_not_be_is_a_fault(raised: Exception, what: str) -> None:
    def run() -> None:
        raise raised

    judged = judge(run)
    assert judged.end == "fault"
    assert what in judged.what


def test_what_should_be_is_none() -> None:
    def refuse() -> None:
        raise FluxmeshError("is odd", "a.vtp", "Mend it")

    assert judge(refuse) == Judged("", "refused", "a.vtp: is odd. Mend it")
    assert judge(lambda: None).end == "answered"


def test_an_input_that_ends_the_process_is_a_fault_and_the_others_go_on() -> None:
    def run(folder: Path) -> None:
        if (folder / "x").read_bytes() == target.make(Random("2"))["x"]:
            os.abort()

    target = Target("x", lambda: [{}], lambda rng, files: {"x": str(rng.random()).encode()}, run)
    ends = run_batch(target, ["0", "1", "2", "3"])
    assert [judged.seed for judged in ends] == ["0", "1", "2", "3"]
    assert [judged.end for judged in ends] == ["answered", "answered", "fault", "answered"]
    assert ends[2].what == "ends the process (signal 6)"


def test_a_process_that_ends_while_a_file_is_read_is_what_the_guard_is_for() -> None:
    def run(folder: Path) -> None:
        with reading(folder / "x"):
            os.abort()

    target = Target("x", lambda: [{}], lambda rng, files: {"x": b"x"}, run)
    (judged,) = run_batch(target, ["0"])
    assert judged.end == "guarded"
