"""Checks against published figures, gathered from the tests that make them into one table.

A test that takes the fixture ``verify`` states what it checks, whose figure it is held to, and how near it must
come; each call asserts, and is one row of ``tests/README.md``. ``scripts/verification`` writes that file.
"""

from __future__ import annotations

import ast
import math
import os
import re
from collections.abc import Iterable
from dataclasses import asdict, dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.typing import ArrayLike

from tests.left_out import LEFT_OUT

HERE = Path(__file__).parent
TABLE = HERE / "README.md"
COMMAND = "scripts/verification"

LAWS = {
    "mass": "Law: mass",
    "momentum": "Law: momentum",
    "angular": "Law: angular momentum",
    "energy": "Law: energy",
    "carried": "Law: what is carried",
}
KINDS = {
    "geometry": "Geometry and quadrature",
    "profile": "Velocity profiles at ports",
    "law": "",
    "gas": "Gas relations",
    "property": "Properties and units",
    "wrench": "Wrench and thrust",
    "uncertainty": "Uncertainty",
    "reader": "Readers",
    "library": "Against general-purpose libraries",
    "benchmark": "Benchmarks",
}
SECTIONS = [key for kind in KINDS for key in ([("law", law) for law in LAWS] if kind == "law" else [(kind, "")])]
MOST_DIGITS = 12  # more would show how machines round, not what was found

# ---- one check ------------------------------------------------------------------------------


@dataclass(frozen=True)
class Row:
    """One check as it is printed; the test is ``file.py::test_name``."""

    kind: str
    law: str
    reader: str
    what: str
    source: str
    expected: str
    got: str
    tolerance: str
    order: str
    test: str

    @property
    def section(self) -> tuple[str, str]:
        return self.kind, self.law


class Verify:
    """Hold figures to their source and keep a row of each.

    `test` is where, as ``file.py::test_name``; `properties` is the list of the test's report, which pytest-xdist
    carries from one process to another.
    """

    def __init__(self, test: str, properties: list[tuple[str, object]]) -> None:
        self.test = test
        self.properties = properties

    def __call__(
        self,
        *,
        what: str,
        source: str,
        expected: ArrayLike,
        got: ArrayLike,
        tolerance: float,
        why: str,
        kind: str,
        law: str = "",
        relative: bool = False,
        unit: str = "",
        order: tuple[float, float, float] | None = None,
        memory: bool = False,
        reader: str = "",
    ) -> None:
        """Assert that ``|got - expected| <= tolerance``, and record the check.

        Parameters
        ----------
        what
            What is checked, in words that no other check of its section has.
        source
            The published source of the expected figure.
        expected, got
            A number each, or up to six of them.
        tolerance
            Largest difference; with `relative`, in parts of the largest entry of `expected`.
        why
            Why the tolerance is what it is: rounding of the source, mesh width, round-off.
        kind
            A key of ``KINDS``; it chooses the section of the table.
        law
            A key of ``LAWS``, for the kind ``law`` only.
        relative
            Whether the tolerance is relative.
        unit
            Unit of the two figures, empty for a pure number.
        order
            Observed order of convergence, the order expected, and how far they may differ.
        memory
            Whether the source is quoted from memory.
        reader
            Suffix of the files read, for the kind ``reader`` only.
        """
        __tracebackhide__ = True
        if kind not in KINDS or (kind == "law") != (law in LAWS) or (kind == "reader") != bool(reader):
            raise ValueError(f"no section for kind={kind!r}, law={law!r}, reader={reader!r}")
        if not (what and source and why):
            raise ValueError("a check says what it checks, after which source, and why its tolerance is right")
        if not (math.isfinite(tolerance) and tolerance > 0):
            raise ValueError(f"a tolerance is a finite number above zero, not {tolerance}")
        wanted, found = (np.atleast_1d(np.asarray(each, dtype=np.float64)) for each in (expected, got))
        if wanted.shape != found.shape or wanted.ndim != 1 or not 1 <= wanted.size <= 6:
            raise ValueError(f"one to six numbers on each side, not {wanted.shape} and {found.shape}")
        size = float(np.abs(wanted).max())
        if relative and size == 0:
            raise ValueError("a tolerance relative to zero says nothing")
        allowed = tolerance * size if relative else tolerance
        off = float(np.abs(found - wanted).max())  # NaN is not within any tolerance
        if not off <= allowed:
            raise AssertionError(
                f"{what}: expected {wanted.tolist()}, got {found.tolist()} {unit}: off by {off:.3g}, "
                f"allowed {allowed:.3g} ({why}). Source: {source}"
            )
        if order is not None and not abs(order[0] - order[1]) <= order[2]:
            raise AssertionError(f"{what}: observed order {order[0]:.3f}, expected {order[1]:g} ± {order[2]:g}")
        printed = printed_pair(wanted, found, allowed)
        row = Row(
            kind,
            law,
            reader,
            what,
            source + (" [M]" if memory else ""),
            *(f"{text} {unit}".strip() for text in printed),
            f"{tolerance:.2g}{' relative' if relative else f' {unit}'.rstrip()}: {why}",
            "" if order is None else f"{order[0]:.1f} ({order[1]:g} ± {order[2]:g})",
            self.test,
        )
        self.properties.append(("verification", asdict(row)))


def printed_pair(wanted: np.ndarray, found: np.ndarray, allowed: float) -> tuple[str, str]:
    """Return both sides to a tenth of the tolerance.

    It is the difference that is rounded, so that the last bits, which vary from machine to machine, are not seen.
    """
    size = float(np.abs(wanted).max())
    place = math.floor(math.log10(allowed) + 1e-9) - 1
    if size > 0:
        place = max(place, math.floor(math.log10(size)) + 1 - MOST_DIGITS)
    step = 10.0**place
    steps = np.rint((found - wanted) / step)
    texts = [
        [written(w, place), written(w + k * step, place) if k else written(w, place)] for w, k in zip(wanted, steps)
    ]
    first, second = zip(*texts)
    if len(first) == 1:
        return first[0], second[0]
    return f"({', '.join(first)})", f"({', '.join(second)})"


def written(value: float, place: int) -> str:
    """Return a number rounded to ``10^place``, without zeros at its end."""
    rounded = round(value / 10.0**place)
    if rounded == 0:
        return "0"
    magnitude = len(str(abs(rounded))) - 1 + place
    if -4 <= magnitude < 9:
        text = f"{rounded * 10**place}" if place >= 0 else f"{value:.{-place}f}"
        return text.rstrip("0").rstrip(".") if "." in text else text
    digits = str(abs(rounded)).rstrip("0")
    tail = f".{digits[1:]}" if digits[1:] else ""
    return f"{'-' if rounded < 0 else ''}{digits[0]}{tail}e{magnitude}"


# ---- all checks of a run --------------------------------------------------------------------


def defined_in_sources(folder: Path = HERE) -> set[str]:
    """Return the tests that take the fixture, as ``file.py::test_name``, from the sources alone."""
    found = set()
    for path in sorted(folder.glob("test_*.py")):
        text = path.read_text(encoding="utf-8")
        if not re.search(r"\bverify\b", text):
            continue
        for node in ast.walk(ast.parse(text)):
            if isinstance(node, ast.FunctionDef) and node.name.startswith("test_"):
                names = [each.arg for each in (*node.args.posonlyargs, *node.args.args, *node.args.kwonlyargs)]
                if "verify" in names:
                    found.add(f"{path.name}::{node.name}")
    return found


def test_of(nodeid: str) -> str:
    """Return ``file.py::test_name`` of a pytest node."""
    return nodeid.split("[", 1)[0].rsplit("/", 1)[-1]


@dataclass
class Gathered:
    """What a run collected: the nodes that take the fixture, and the rows of those that passed."""

    collected: set[str] = field(default_factory=set)
    rows: dict[str, list[Row]] = field(default_factory=dict)

    def add(self, nodeid: str, properties: Iterable[tuple[str, Any]]) -> None:
        """Take the rows of a test that passed."""
        if nodeid not in self.rows:
            kept = [Row(**value) for key, value in properties if key == "verification"]
            if kept:
                self.rows[nodeid] = kept

    @property
    def whole(self) -> bool:
        """Whether each check of the sources was run, and passed."""
        return (
            bool(self.rows)
            and self.collected <= set(self.rows)
            and defined_in_sources() <= {test_of(nodeid) for nodeid in self.collected}
        )

    def complaint(self, write: str | None) -> str:
        """Write the table where that is asked, else compare it; return what is wrong, or nothing."""
        if not self.whole:
            return f"{write} is not written: not all checks ran and passed" if write else ""
        rows = [row for each in self.rows.values() for row in each]
        twice = sorted({f"{a.what!r} ({a.test})" for a in rows for b in rows if a is not b and names(a) == names(b)})
        if twice:
            return f"several checks of one section have the same name: {'; '.join(twice)}"
        text = table(rows)
        if write:
            beside = Path(f"{write}.part")
            beside.write_text(text, encoding="utf-8")
            os.replace(beside, write)
            return ""
        committed = TABLE.read_text(encoding="utf-8") if TABLE.exists() else ""
        if committed == text:
            return ""
        old, new = set(committed.splitlines()), set(text.splitlines())
        shown = [f"+ {line}" for line in sorted(new - old)[:5]] + [f"- {line}" for line in sorted(old - new)[:5]]
        return "\n".join([f"tests/README.md is stale: run {COMMAND} and commit what it writes", *shown])


def names(row: Row) -> tuple[str, str, str, str]:
    return row.kind, row.law, row.reader, row.what


class Gathering:
    """The part of a pytest run that marks the checks, gathers their rows, and writes or compares the table."""

    def __init__(self, config: pytest.Config) -> None:
        self.config = config
        self.gathered = Gathered()
        self.wrong = ""

    @pytest.hookimpl(tryfirst=True)
    def pytest_collection_modifyitems(self, items: list[pytest.Item]) -> None:
        """Mark before ``-m`` selects."""
        for item in items:
            if "verify" in getattr(item, "fixturenames", ()):
                item.add_marker(pytest.mark.verification)
                self.gathered.collected.add(item.nodeid)

    def pytest_runtest_logreport(self, report: pytest.TestReport) -> None:
        """Take rows; with pytest-xdist the process that gathers sees the reports of all workers."""
        if report.when == "call" and report.passed:
            self.gathered.add(report.nodeid, report.user_properties)

    @pytest.hookimpl(optionalhook=True)
    def pytest_testnodedown(self, node: Any) -> None:
        """Learn from a worker of pytest-xdist what it collected: the process that gathers collects nothing."""
        self.gathered.collected.update(getattr(node, "workeroutput", {}).get("verification", ()))

    def pytest_sessionfinish(self, session: pytest.Session) -> None:
        """Write or compare the table."""
        if hasattr(self.config, "workeroutput"):
            self.config.workeroutput["verification"] = sorted(self.gathered.collected)
        else:
            write = self.config.getoption("--verification")
            if session.exitstatus == pytest.ExitCode.OK or write:
                self.wrong = self.gathered.complaint(write)
            if self.wrong and session.exitstatus == pytest.ExitCode.OK:
                session.exitstatus = pytest.ExitCode.TESTS_FAILED

    def pytest_terminal_summary(self, terminalreporter: Any) -> None:
        """Say what is wrong with the table."""
        if self.wrong:
            terminalreporter.section("verification", red=True)
            terminalreporter.write_line(self.wrong)


# ---- the table ------------------------------------------------------------------------------

HEAD = f"""# Table of verification

What the tests hold fluxmesh to that does not come from fluxmesh: published figures, exact solutions, and other
libraries. The tests make this table themselves. Each row is one assertion of the test it names: if it did not hold,
there would be no table. `{COMMAND}` runs these checks and writes this file (two minutes); an ordinary run of
all tests fails if the file is not what they find.

- **What**: the figure checked; for readers, the suffix of the file comes first.
- **Source**: whose figure it is. **[M]** says that the reference (author, edition, number of an example) is quoted from
  memory; the figure itself was computed anew.
- **Expected**, **got**: the source's figure and that of fluxmesh, to a tenth of the tolerance or less; a smaller
  difference is not printed. Numbers in brackets are compared one by one.
- **Tolerance**: the largest difference allowed, in the unit of the figures or, where it says so, relative to the
  largest number expected; and why it is not smaller.
- **Order**: observed order of convergence as the mesh gets finer, and in brackets the order expected.
- **Test**: the file in this folder, and the test in it.
"""


def natural(text: str) -> list[tuple[int, float, str]]:
    """Return a key that sorts 16 before 128."""
    return [
        (0, float(part), "") if re.fullmatch(r"\d+(?:\.\d+)?", part) else (1, 0.0, part.lower())
        for part in re.split(r"(\d+(?:\.\d+)?)", text)
        if part
    ]


def cell(text: str) -> str:
    return " ".join(text.split()).replace("|", "\\|")


def table(rows: Iterable[Row]) -> str:
    """Return the file: all checks in sections, and what is left out."""
    rows = list(rows)
    parts = [HEAD, f"{len(rows)} checks.\n"]
    for key in SECTIONS:
        chosen = sorted(
            (row for row in rows if row.section == key), key=lambda row: (natural(row.what), row.reader, row.test)
        )
        if not chosen:
            continue
        lines = [
            f"## {LAWS[key[1]] if key[1] else KINDS[key[0]]}",
            "",
            "| what | source | expected | got | tolerance | order | test |",
            "|---|---|---|---|---|---|---|",
        ]
        for row in chosen:
            what = f"`{row.reader}` {row.what}" if row.reader else row.what
            texts = [what, row.source, row.expected, row.got, row.tolerance, row.order]
            lines.append(f"| {' | '.join(map(cell, texts))} | `{row.test}` |")
        parts.append("\n".join(lines) + "\n")
    parts.append("## Left out, and why\n\n" + "\n".join(f"- {line}" for line in LEFT_OUT) + "\n")
    return "\n".join(parts)
