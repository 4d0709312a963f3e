"""The corpus of bad inputs: each ends with one message or the right answer, in bounded time and memory.

Here each sixth runs, in a fork of one process; `scripts/corpus` runs all of them through the installed command.
"""

from __future__ import annotations

import subprocess
import sys
from collections import Counter
from dataclasses import replace
from pathlib import Path

import pytest

from tests.corpus import inputs
from tests.corpus.entry import Input, files
from tests.corpus.judging import faults_of, snapshot
from tests.corpus.running import SECRET, Place, Ran, lay_out, run_alone
from tests.corpus.shapes import PICKED, vtp

ROOT = Path(__file__).resolve().parent.parent
GOOD = Input("good", "nothing", files({"case.toml": PICKED, "cube.vtp": vtp}), "answered")
MESSAGE = "fluxmesh: case.toml: fluid.density: missing. Give it\n"


def _run(*arguments: str) -> str:
    ran = subprocess.run(
        [sys.executable, "scripts/corpus.py", "--forks", "--quiet", *arguments],
        cwd=ROOT, capture_output=True, text=True, timeout=1500,
    )  # fmt: skip
    assert ran.returncode == 0, ran.stdout[-8000:] + ran.stderr[-2000:]
    return ran.stdout


def test_there_are_many_of_every_kind() -> None:
    names = [one.name for one in inputs()]
    assert len(names) >= 900
    assert [name for name, count in Counter(names).items() if count > 1] == []


@pytest.mark.skipif(sys.platform != "linux", reason="the run is bounded and watched by means of Linux")
def test_each_sixth_ends_as_it_should() -> None:
    assert " 0 others" in _run("--every", "6")


@pytest.fixture
def place(tmp_path: Path) -> Place:
    return lay_out(GOOD, tmp_path)


def _judged(one: Input, place: Place, ran: Ran) -> list[str]:
    before = {"case": snapshot(place.case), "outside": snapshot(place.outside)}
    return faults_of(one, place, ran, before)


REFUSED = replace(GOOD, end="refused")
ENDED = Ran(2, "", MESSAGE, 0.1, 100.0, ())


@pytest.mark.parametrize(
    ("ran", "fault"),
    [
        (replace(ENDED, code=0), "answers with code 0"),
        (replace(ENDED, code=124), "did not end in time"),
        (replace(ENDED, code=-11), "ends with code -11"),
        (replace(ENDED, out="Loads\n"), "prints results and refuses"),
        (replace(ENDED, err=MESSAGE * 2), "is no message"),
        (replace(ENDED, err="oops\n"), "is no message"),
        (replace(ENDED, err="fluxmesh: x.toml: wrong\n"), "is no message"),
        (replace(ENDED, err=MESSAGE + 'Traceback (most recent call last):\n  File "x"\nKeyError: 3\n'), "a traceback"),
        (replace(ENDED, err=MESSAGE.replace("missing", "\x1b[31mmissing")), "upset a terminal"),
        (replace(ENDED, err=MESSAGE.replace("missing", "\u202emissing")), "upset a terminal"),
        (replace(ENDED, err=MESSAGE.replace("missing", SECRET)), "lies outside the case"),
        (replace(ENDED, err=MESSAGE.replace("missing", "m" * 5000)), "a message of"),
        (replace(ENDED, opened=("/etc/passwd",)), "opens /etc/passwd"),
        (replace(ENDED, opened=("../outside/secret.txt",)), "opens ../outside/secret.txt"),
        (replace(ENDED, opened=("socket ('127.0.0.1', 80)",)), "opens socket"),
    ],
)
def test_the_judge_sees_each_fault(place: Place, ran: Ran, fault: str) -> None:
    assert _judged(REFUSED, place, ENDED) == []
    assert any(fault in told for told in _judged(REFUSED, place, ran))


def test_the_judge_sees_what_is_left_behind(place: Place) -> None:
    before = {"case": snapshot(place.case), "outside": snapshot(place.outside)}
    for folder, name in ((place.out, "balance.json"), (place.temporary, "x"), (place.here, "y"), (place.case, "z")):
        folder.mkdir(exist_ok=True)
        (folder / name).write_text("", "utf-8")
    (place.outside / "secret.txt").unlink()
    faults = faults_of(REFUSED, place, ENDED, before)
    assert len(faults) == 5, faults


def test_the_judge_compares_the_load(place: Place) -> None:
    ran = run_alone(GOOD, place, seconds=300.0, trace=False)
    assert ran.code == 0, ran.err
    assert _judged(GOOD, place, ran) == []
    other = replace(GOOD, load=(300.0, 0.1, -9806.65))
    assert any("the load is" in fault for fault in _judged(other, place, ran))
    said = replace(GOOD, end="refused")
    assert _judged(said, place, ran) == ["answers with code 0"]
