"""Odd paths and streams that cannot be written: one message, exit code 2, or a right answer; never a traceback."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest

MESHES = Path(__file__).parents[1] / "meshes"
CASE = MESHES / "rotor" / "rotor.toml"


def run(*arguments: object, cwd: Path, redirect: str = "", **env: str) -> subprocess.CompletedProcess[str]:
    command = " ".join(f'"{part}"' for part in (sys.executable, "-m", "fluxmesh", *arguments)) + f" {redirect}"
    return subprocess.run(
        ["bash", "-c", command],
        capture_output=True,
        text=True,
        cwd=cwd,
        env={**os.environ, **env},
        timeout=120,
        errors="replace",
    )


def refused(ran: subprocess.CompletedProcess[str], *parts: str) -> None:
    assert ran.returncode == 2, ran
    assert ran.stderr.startswith("fluxmesh: ")
    assert ran.stderr.count("\n") == 1
    for part in parts:
        assert part in ran.stderr


def test_a_name_that_no_system_takes(tmp_path: Path) -> None:
    refused(run("balance", "x" * 300 + ".toml", cwd=tmp_path), "name too long")


def test_a_folder_that_no_system_takes(tmp_path: Path) -> None:
    refused(run("balance", CASE, "--no-pictures", "--out", "y" * 300, cwd=tmp_path), "name too long")


def test_a_pipe_for_a_case(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "case.toml")
    refused(run("balance", "case.toml", cwd=tmp_path), "case.toml", "no regular file")


def test_a_link_to_itself(tmp_path: Path) -> None:
    (tmp_path / "case.toml").symlink_to("case.toml")
    refused(run("balance", "case.toml", cwd=tmp_path), "case.toml")


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="the system has no full device")
def test_a_terminal_that_takes_nothing(tmp_path: Path) -> None:
    refused(run("balance", CASE, "--no-pictures", cwd=tmp_path, redirect="> /dev/full"), "No space left")


def test_a_closed_output_leaves_the_files(tmp_path: Path) -> None:
    ran = run("balance", CASE, "--no-pictures", "--out", "out", cwd=tmp_path, redirect=">&-")
    assert ran.returncode == 0, ran
    assert ran.stderr == ""
    assert (tmp_path / "out" / "balance.json").is_file()


def test_a_terminal_without_our_letters(tmp_path: Path) -> None:
    ran = run("balance", CASE, "--no-pictures", cwd=tmp_path, PYTHONIOENCODING="ascii")
    assert ran.returncode == 0, ran
    assert "VERDICT: closes" in ran.stdout


def test_a_number_of_threads_beyond_all_numbers(tmp_path: Path) -> None:
    assert run("balance", CASE, "--no-pictures", cwd=tmp_path, FLUXMESH_THREADS="9" * 5000).returncode == 0
