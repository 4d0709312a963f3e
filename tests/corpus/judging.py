"""What must hold of every run of the corpus."""

from __future__ import annotations

import hashlib
import json
import math
import os
import re
import site
import stat
import sys
import sysconfig
from pathlib import Path

import fluxmesh
from tests.corpus.entry import Input
from tests.corpus.running import SECRET, Place, Ran

__all__ = ["faults_of", "snapshot"]

# what was found, where, what to do; a list of several problems has a line for each
_MESSAGE = re.compile(r"fluxmesh: .*\S: .*\S\. \S.*|fluxmesh: \S+: \d+ things are wrong(\n  \S.*)+")
_TOLERANCE = 1e-6
_ETC = ("/etc/ld.so.cache", "/etc/ld.so.preload", "/etc/localtime", "/etc/mime.types", "/etc/OpenCL")
_WORST_LENGTH = 4000
"""Longest message: a screen or two."""


def snapshot(folder: Path) -> dict[str, str]:
    """Return what a folder holds: a mark for each path below it."""
    found = {}
    for path in sorted(folder.rglob("*")):
        status = path.lstat()
        mark = f"{stat.S_IFMT(status.st_mode):o}"
        if stat.S_ISREG(status.st_mode):
            mark += f" {status.st_size} {status.st_mtime_ns} {hashlib.sha256(path.read_bytes()).hexdigest()}"
        found[str(path.relative_to(folder))] = mark
    return found


def faults_of(one: Input, place: Place, ran: Ran, before: dict[str, dict[str, str]]) -> list[str]:
    """Return what is wrong with how a run ended.

    Parameters
    ----------
    one, place, ran : Input, Place, Ran
        What was run, where, and how it ended.
    before : dict of str to dict
        Snapshots of "case" and "outside" from before.

    Returns
    -------
    list of str
        One clause each; nothing for a run that is as it should be.
    """
    faults = []
    if ran.code == 124:
        return ["did not end in time"]
    if "Traceback" in ran.err + ran.out:
        faults.append(f"a traceback: {ran.err.strip().splitlines()[-1][:300]}")
    if not _plain(ran.out + ran.err):
        faults.append("prints characters that upset a terminal")
    if SECRET in ran.out + ran.err:
        faults.append("prints what lies outside the case")
    if ran.code == 2:
        faults += _refusal(one, place, ran)
    elif ran.code in (0, 1) and not faults:
        faults += _answer(one, place, ran)
    elif ran.code not in (0, 1):
        faults.append(f"ends with code {ran.code}: {ran.err.strip()[-200:]}")
    faults += _left(one, place, before)
    faults += _strangers(one, place, ran)
    return faults


def _plain(text: str) -> bool:
    return all(sign == "\n" or sign.isprintable() for sign in text)


def _refusal(one: Input, place: Place, ran: Ran) -> list[str]:
    faults = []
    if one.end == "answered":
        faults.append(f"refused: {ran.err.strip()[:300]}")
    if ran.out:
        faults.append("prints results and refuses")
    message = ran.err.strip("\n")
    if not _MESSAGE.fullmatch(message):
        faults.append(f"is no message of what, where and what to do: {message[:400]!r}")
    if len(message) > _WORST_LENGTH:
        faults.append(f"a message of {len(message)} characters")
    faults += [f"says nothing of {word!r}: {message[:400]}" for word in one.says if word not in message]
    if place.out.exists() and any(place.out.rglob("*")):
        faults.append("leaves a result though it refuses")
    return faults


def _answer(one: Input, place: Place, ran: Ran) -> list[str]:
    if one.end == "refused":
        return [f"answers with code {ran.code}"]
    faults = []
    if ran.err and not ran.err.startswith("fluxmesh: "):
        faults.append(f"prints to the terminal: {ran.err.strip()[:300]!r}")
    for path in place.out.rglob("*"):
        if path.is_file() and SECRET.encode() in path.read_bytes():
            faults.append(f"{path.name} holds what lies outside the case")
        if path.name.endswith(".part"):
            faults.append(f"leaves {path.name}")
    if one.command[0] == "balance" and one.load is not None:
        # without --out the results go to a folder of the working folder
        folder = place.out if "--out" in one.command else place.here / "results" / "case"
        faults += _load_faults(one.load, folder / "balance.json")
    return faults


def _load_faults(load: tuple[float, float, float], path: Path) -> list[str]:
    told = json.loads(path.read_text("utf-8"), parse_constant=_no_number)["hardware_load"]
    force = told["from_balance"]["force"]
    size = max(math.hypot(*load), 1.0)
    off = max(abs(one - two) for one, two in zip(force, load))
    return [] if off <= _TOLERANCE * size else [f"the load is {force}, not {load}"]


def _no_number(word: str) -> float:
    raise AssertionError(f"{word} in balance.json")


def _left(one: Input, place: Place, before: dict[str, dict[str, str]]) -> list[str]:
    faults = []
    for name, folder in (("case", place.case), ("outside", place.outside)):
        after = snapshot(folder)
        if after != before[name]:
            changed = sorted(
                key for key in after.keys() | before[name].keys() if after.get(key) != before[name].get(key)
            )
            faults.append(f"changes {', '.join(changed[:5])} in the folder {name}")
    for name, folder in (("temporary files", place.temporary), ("working folder", place.here)):
        results = folder / "results" if folder == place.here and "--out" not in one.command else None
        left = [path.name for path in folder.rglob("*") if results is None or not path.is_relative_to(results)]
        if left:
            faults.append(f"leaves {', '.join(left[:5])} in the {name}")
    return faults


def _allowed() -> tuple[str, ...]:
    """Return the folders of the interpreter and the system, from which anybody reads."""
    own = {sys.prefix, sys.base_prefix, str(Path(fluxmesh.__file__).parent), *site.getsitepackages()}
    own |= {str(Path(sys.executable).resolve().parent.parent), sysconfig.get_path("stdlib")}
    own |= {os.environ[key] for key in ("NUMBA_CACHE_DIR",) if key in os.environ}
    own |= {str(Path(fluxmesh.__file__).parent.parent / "fluxmesh.egg-info")}
    return (*own, "/usr", "/lib", "/lib64", "/proc", "/sys", "/dev/null", "/dev/urandom", *_ETC)


def _strangers(one: Input, place: Place, ran: Ran) -> list[str]:
    """Tell files that were opened though the case does not name them."""
    allowed = (*_allowed(), str(place.case), str(place.out), str(place.temporary), str(place.here))
    if one.reads_outside:
        allowed += (str(place.outside),)
    strange = []
    for path in ran.opened:
        whole = os.path.normpath(place.here / path) if not path.startswith("socket") else path
        # looking for a module lists the folders where modules may be
        if (
            any(whole == folder or whole.startswith(folder + "/") for folder in allowed)
            or whole in sys.path
            or whole == str(Path(fluxmesh.__file__).parent.parent)
        ):
            continue
        strange.append(path)
    return [f"opens {', '.join(sorted(set(strange))[:5])}"] if strange else []
