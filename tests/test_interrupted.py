"""Work that is ended at any moment, a full disk, a folder that goes away: the earlier result stays whole."""

from __future__ import annotations

import contextlib
import errno
import json
import os
import random
import resource
import shutil
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import pytest

from fluxmesh import compiling
from fluxmesh.errors import FluxmeshWarning, OutputError
from fluxmesh.report import whole
from fluxmesh.report.whole import write_together, write_whole

MESHES = Path(__file__).parents[1] / "meshes"
ROTOR = MESHES / "rotor" / "rotor.toml"
SURGE = MESHES / "surge_bend" / "surge_bend.toml"


def parts(folder: Path) -> list[str]:
    return sorted(entry.name for entry in folder.rglob("*") if entry.name.endswith(".part"))


# ---- one file, several files ------------------------------------------------------------------


@pytest.fixture(params=["without a name", "with a name of its own"])
def route(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> str:
    """Both ways to fill a file before it takes its place."""
    if request.param != "without a name":
        monkeypatch.setattr(whole, "_without_name", lambda folder: None)
    return request.param


def test_files_take_their_place_whole(tmp_path: Path, route: str) -> None:
    for content in (b"one", b"two"):
        write_whole(content, tmp_path / "deep" / "a.json")
        assert (tmp_path / "deep" / "a.json").read_bytes() == content
    assert os.listdir(tmp_path / "deep") == ["a.json"]
    mask = os.umask(0)
    os.umask(mask)
    assert (tmp_path / "deep" / "a.json").stat().st_mode & 0o777 == 0o666 & ~mask


def test_a_file_that_is_there_stays_where_it_must(tmp_path: Path, route: str) -> None:
    write_whole(b"new", tmp_path / "case.toml", replace=False)
    with pytest.raises(OutputError, match=r"case\.toml: exists already"):
        write_whole(b"other", tmp_path / "case.toml", replace=False)
    assert (tmp_path / "case.toml").read_bytes() == b"new"
    assert parts(tmp_path) == []


def test_a_disk_that_fills_up_between_two_files_leaves_both(tmp_path: Path, route: str, monkeypatch) -> None:
    names = ("a.json", "b.json", "old.png")
    for name in names:
        (tmp_path / name).write_bytes(b"earlier")
    filled = []

    def full(handle: int, content: bytes) -> int:
        if filled:
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
        filled.append(handle)
        return len(content)

    monkeypatch.setattr(whole.os, "write", full)
    new = {tmp_path / name: b"later" for name in names[:2]}
    with pytest.raises(OutputError, match=r"b\.json: cannot be written \(No space left on device\)\. Make room there"):
        write_together(new, [tmp_path / "old.png"])
    monkeypatch.undo()
    assert {(tmp_path / name).read_bytes() for name in names} == {b"earlier"}
    assert parts(tmp_path) == []
    write_together(new, [tmp_path / "old.png"])
    assert sorted(os.listdir(tmp_path)) == ["a.json", "b.json"]


def test_a_system_that_gives_files_no_name_afterwards(tmp_path: Path, monkeypatch) -> None:
    def refuse(self: object, name: Path) -> None:
        raise PermissionError(errno.EPERM, "Operation not permitted")

    monkeypatch.setattr(whole._Part, "_link", refuse)
    for content in (b"one", b"two"):
        write_whole(content, tmp_path / "a.json")
        assert (tmp_path / "a.json").read_bytes() == content
    assert os.listdir(tmp_path) == ["a.json"]


def test_what_a_killed_run_left_is_cleared_and_what_another_run_holds_is_not(tmp_path: Path) -> None:
    import fcntl

    (tmp_path / ".a.json.12-ab.part").write_bytes(b"half")
    (tmp_path / ".other.json.12-ab.part").write_bytes(b"of another file")
    with (tmp_path / ".a.json.13-cd.part").open("wb") as held:
        held.write(b"half")
        held.flush()
        fcntl.flock(held, fcntl.LOCK_EX)
        write_whole(b"whole", tmp_path / "a.json")
        assert parts(tmp_path) == [".a.json.13-cd.part", ".other.json.12-ab.part"]
    write_whole(b"whole", tmp_path / "a.json")
    assert parts(tmp_path) == [".other.json.12-ab.part"]


# ---- the commands -----------------------------------------------------------------------------


@contextlib.contextmanager
def full_disk(size: int) -> Iterator[None]:
    """Let no file of this process grow beyond a size, as a disk would that is nearly full."""
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (size, hard))
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))


def state(folder: Path) -> dict[str, bytes]:
    return {str(path.relative_to(folder)): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


COMMANDS = {
    "balance": ("balance", "{case}", "--out", "{out}", "--no-pictures"),
    "causes": ("causes", "{case}", "--json", "{out}/causes.json"),
    "export": ("export", "{case}", "--out", "{out}"),
    "picture": ("picture", "{case}", "--to", "{out}/picture.png", "--size", "800x600"),
}


@pytest.mark.parametrize(
    "name", [pytest.param(name, marks=[pytest.mark.long] if name == "picture" else []) for name in COMMANDS]
)
def test_a_full_disk_leaves_the_earlier_result(tmp_path: Path, fluxmesh, block, name: str) -> None:
    out = tmp_path / "out"
    out.mkdir()
    asked = [part.format(case=block.case, out=out) for part in COMMANDS[name]]
    assert fluxmesh(*asked).code in (0, 1)
    (out / "vectors.png").write_bytes(b"a picture of the earlier result")
    before = state(out)
    block.change('title = "Block"', 'title = "Another block"')
    with full_disk(50):
        ran = fluxmesh(*asked)
    assert ran.code == 2, ran
    assert "cannot be written (File too large)" in ran.err
    assert ran.err.count("\n") == 1
    assert state(out) == before
    assert fluxmesh(*asked).code in (0, 1)
    assert parts(out) == []


def test_a_full_disk_leaves_no_half_of_a_proposed_case(tmp_path: Path, fluxmesh, block) -> None:
    with full_disk(100):
        ran = fluxmesh("start", block.folder / "block.vtp", "--to", block.folder / "new.toml")
    assert ran.code == 2
    assert "new.toml: cannot be written (File too large)" in ran.err
    assert sorted(os.listdir(block.folder)) == ["block.toml", "block.vtp"]


@pytest.mark.long
def test_a_full_disk_leaves_the_earlier_series(tmp_path: Path, fluxmesh) -> None:
    for old in ("series.json", "balance.json", "series.png"):
        (tmp_path / old).write_bytes(b"earlier")
    before = state(tmp_path)
    with full_disk(300):
        ran = fluxmesh("balance", SURGE, "--no-pictures", "--out", tmp_path)
    assert ran.code == 2
    assert state(tmp_path) == before
    assert fluxmesh("balance", SURGE, "--no-pictures", "--out", tmp_path).code in (0, 1)
    assert sorted(os.listdir(tmp_path)) == ["balance.json", "series.json"]


@pytest.mark.long
def test_a_full_disk_leaves_the_earlier_study(tmp_path: Path, fluxmesh) -> None:
    cases = [MESHES / "manifold" / f"manifold_{name}.toml" for name in ("coarse", "medium", "fine")]
    (tmp_path / "study.json").write_bytes(b"earlier")
    with full_disk(300):
        ran = fluxmesh("convergence", *cases, "--figure", "reaction.force.x", "--json", tmp_path / "study.json")
    assert ran.code == 2
    assert state(tmp_path) == {"study.json": b"earlier"}


@pytest.mark.parametrize("becomes", ["nothing", "a file"])
def test_an_output_folder_that_goes_away_meanwhile(tmp_path: Path, fluxmesh, block, monkeypatch, becomes: str) -> None:
    from fluxmesh.job import run

    out = tmp_path / "out"
    honest = run.run_case

    def removing(*arguments, **options):
        done = honest(*arguments, **options)
        shutil.rmtree(out)
        if becomes == "a file":
            out.write_bytes(b"in the way")
        return done

    monkeypatch.setattr(run, "run_case", removing)
    ran = fluxmesh("balance", block.case, "--out", out, "--no-pictures")
    if becomes == "nothing":
        assert ran.code == 0, ran
        assert json.loads((out / "balance.json").read_bytes())["title"] == "Block"
        return
    assert ran.code == 2
    assert ran.err.count("\n") == 1
    assert "balance.json: cannot be written (" in ran.err
    assert out.read_bytes() == b"in the way"


# ---- ended from outside -----------------------------------------------------------------------


def begin(*arguments: object) -> subprocess.Popen[bytes]:
    """Start the command, and wait until its guard is up."""
    process = subprocess.Popen(
        [sys.executable, "-m", "fluxmesh", *map(str, arguments)],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        start_new_session=True,
    )
    below = Path(f"/proc/{process.pid}/task/{process.pid}/children")
    until = time.monotonic() + 30
    while time.monotonic() < until and process.poll() is None:
        if not below.exists() or below.read_bytes().strip():
            break
        time.sleep(0.002)
    return process


@pytest.mark.skipif(not hasattr(os, "fork"), reason="the guard is a fork")
@pytest.mark.parametrize("whole_group", [False, True])
@pytest.mark.parametrize("share", [0.0, 0.3])
def test_an_interrupt_while_packages_load_leaves_one_line(tmp_path: Path, whole_group: bool, share: float) -> None:
    process = begin("balance", ROTOR, "--out", tmp_path / "out", "--no-pictures")
    time.sleep(share)
    (os.killpg if whole_group else os.kill)(process.pid, signal.SIGINT)
    _, err = process.communicate(timeout=60)
    assert (process.returncode, err) == (130, b"fluxmesh: interrupted\n")


def test_killed_at_any_moment_the_result_is_the_earlier_or_the_later_one(tmp_path: Path, fluxmesh, block) -> None:
    out = tmp_path / "out"
    asked = ("balance", block.case, "--out", out, "--no-pictures")
    assert fluxmesh(*asked).code == 0
    earlier = (out / "balance.json").read_bytes()
    block.change('title = "Block"', 'title = "Another block"')
    start = time.monotonic()
    process = begin(*asked)
    process.communicate(timeout=120)
    assert process.returncode == 0
    took = time.monotonic() - start
    later = (out / "balance.json").read_bytes()
    assert later != earlier
    chance = random.Random(20)
    for number in (signal.SIGKILL, signal.SIGTERM, signal.SIGINT):
        (out / "balance.json").write_bytes(earlier)
        process = begin(*asked)
        # most of what can go wrong lies in the last part
        time.sleep(took * chance.uniform(0.5, 1.0))
        if process.poll() is None:
            os.kill(process.pid, number)
        _, err = process.communicate(timeout=60)
        assert err.count(b"\n") <= 1
        assert (out / "balance.json").read_bytes() in (earlier, later)
    assert fluxmesh(*asked).code == 0
    assert os.listdir(out) == ["balance.json"]


# ---- compiled code that is kept ---------------------------------------------------------------


def test_machine_code_that_was_damaged_is_compiled_anew(tmp_path: Path, monkeypatch) -> None:
    source = tmp_path / "halving.py"
    source.write_text("def half(x):\n    return x / 2\n", encoding="utf-8")
    monkeypatch.syspath_prepend(tmp_path)
    monkeypatch.setattr(compiling, "_said", set())
    import halving

    def call() -> float:
        return compiling.compiled(halving.half)(3.0)

    def kept(suffix: str) -> Path:
        return next((tmp_path / "__pycache__").glob(f"halving.half*{suffix}"))

    monkeypatch.setattr("numba.core.config.CACHE_DIR", "")
    assert call() == 1.5
    whole_code = kept(".nbc").read_bytes()
    assert call() == 1.5  # quietly, from disk
    for suffix, damage in (
        (".nbc", lambda content: content[:400] + bytes([content[400] ^ 1]) + content[401:]),
        (".nbi", lambda content: content[: len(content) // 2]),
        (".nbi", lambda content: b""),
    ):
        monkeypatch.setattr(compiling, "_said", set())
        kept(suffix).write_bytes(damage(kept(suffix).read_bytes()))
        with pytest.warns(FluxmeshWarning, match="was damaged: it is compiled anew") as said:
            assert call() == 1.5
        assert len(said) == 1
        assert call() == 1.5  # it is whole again
    assert len(kept(".nbc").read_bytes()) == len(whole_code)


def test_a_disk_that_keeps_no_machine_code_does_not_stop_the_work(tmp_path: Path, monkeypatch) -> None:
    source = tmp_path / "doubling.py"
    source.write_text("def double(x):\n    return 2 * x\n", encoding="utf-8")
    monkeypatch.syspath_prepend(tmp_path)
    monkeypatch.setattr(compiling, "_said", set())
    monkeypatch.setattr("numba.core.config.CACHE_DIR", "")
    import doubling

    with full_disk(50), pytest.warns(FluxmeshWarning, match="cannot be kept on disk"):
        assert compiling.compiled(doubling.double)(3.0) == 6.0
