"""The table of verification: what a check needs, how it is printed, and that the committed file names the tests."""

from __future__ import annotations

import re
from dataclasses import asdict
from typing import Any

import pytest

from fluxmesh.field.points import point_suffixes
from fluxmesh.surface.files import known_suffixes
from tests.verification import COMMAND, LAWS, TABLE, Gathered, Row, Verify, defined_in_sources, natural, table, written

GOOD: dict[str, Any] = {
    "what": "Volume of a cube",
    "source": "Euclid",
    "expected": 8.0,
    "got": 8.0 + 3e-14,
    "tolerance": 1e-12,
    "why": "round-off",
    "kind": "geometry",
}


def row_of(**changes: Any) -> Row:
    properties: list[tuple[str, Any]] = []
    Verify("test_a.py::test_b", properties)(**{**GOOD, **changes})
    ((key, value),) = properties
    assert key == "verification"
    return Row(**value)


def test_a_check_within_tolerance_is_recorded() -> None:
    row = row_of(unit="m³", memory=True)
    assert asdict(row) == {
        "kind": "geometry",
        "law": "",
        "reader": "",
        "what": "Volume of a cube",
        "source": "Euclid [M]",
        "expected": "8 m³",
        "got": "8 m³",
        "tolerance": "1e-12 m³: round-off",
        "order": "",
        "test": "test_a.py::test_b",
    }


@pytest.mark.parametrize(
    ("changes", "match"),
    [
        ({"got": 8.0 + 2e-12}, "expected .8.0., got .8.000000000002"),
        ({"got": float("nan")}, "off by nan"),
        ({"expected": (1, 2, 3), "got": (1, 2, 3.1), "tolerance": 0.03, "relative": True}, "allowed 0.09"),
        ({"order": (1.7, 2.0, 0.1)}, "observed order 1.700, expected 2 ± 0.1"),
    ],
)
def test_a_check_beyond_its_tolerance_fails_and_leaves_no_row(changes: dict[str, Any], match: str) -> None:
    properties: list[tuple[str, Any]] = []
    with pytest.raises(AssertionError, match=match):
        Verify("test_a.py::test_b", properties)(**{**GOOD, **changes})
    assert properties == []


@pytest.mark.parametrize(
    "changes",
    [
        {"kind": "law"},
        {"kind": "geometry", "law": "mass"},
        {"kind": "reader"},
        {"kind": "guess"},
        {"source": ""},
        {"tolerance": 0.0},
        {"tolerance": float("inf")},
        {"expected": (1, 2)},
        {"expected": 0.0, "got": 0.0, "relative": True},
    ],
)
def test_a_check_says_all_that_its_row_needs(changes: dict[str, Any]) -> None:
    with pytest.raises(ValueError, match=r"section|says|tolerance|numbers"):
        Verify("test_a.py::test_b", [])(**{**GOOD, **changes})


@pytest.mark.parametrize(
    ("expected", "got", "tolerance", "printed"),
    [
        (8.0, 8.0 - 3e-14, 1e-12, ("8", "8")),
        (8.0, 8.00234, 0.01, ("8", "8.002")),
        (0.0, 2e-15, 1e-12, ("0", "0")),
        (0.0, -2.6e-13, 1e-12, ("0", "-3e-13")),
        (2 / 3, 2 / 3 + 1e-16, 1e-15, ("0.666666666667", "0.666666666667")),
        (101325.0, 101400.0, 200.0, ("101320", "101400")),
        (1.0015961431e-7, 1.0015961e-7, 1e-12, ("1.001596e-7", "1.001596e-7")),
        (-2.5e12, -2.51e12, 1e11, ("-2.5e12", "-2.51e12")),
        ((1.0, -0.5), (1.2, -0.5), 0.25, ("(1, -0.5)", "(1.2, -0.5)")),
    ],
)
def test_figures_are_printed_to_a_tenth_of_the_tolerance(
    expected: Any, got: Any, tolerance: float, printed: tuple[str, str]
) -> None:
    row = row_of(expected=expected, got=got, tolerance=tolerance)
    assert (row.expected, row.got) == printed


@pytest.mark.parametrize(("value", "place", "text"), [(-0.04, -1, "0"), (1200, 2, "1200"), (1e-5, -6, "1e-5")])
def test_numbers_are_written_without_zeros_at_their_end(value: float, place: int, text: str) -> None:
    assert written(value, place) == text


def test_rows_stand_in_sections_in_a_natural_order() -> None:
    rows = [
        row_of(what="n = 128"),
        row_of(what="n = 16"),
        row_of(what="a | b", kind="law", law="mass", order=(1.98, 2, 0.1)),
        row_of(what="a box", kind="reader", reader=".stl"),
    ]
    text = table(rows)
    assert text == table(rows[::-1])
    assert "4 checks." in text
    sections = re.findall(r"^## (.*)$", text, re.MULTILINE)
    assert sections == ["Geometry and quadrature", "Law: mass", "Readers", "Left out, and why"]
    assert text.index("n = 16") < text.index("n = 128")
    assert "| a \\| b | Euclid | 8 | 8 | 1e-12: round-off | 2.0 (2 ± 0.1) | `test_a.py::test_b` |" in text
    assert "| `.stl` a box |" in text
    assert sorted(["n = 128", "n = 16", "n = 16.5"], key=natural) == ["n = 16", "n = 16.5", "n = 128"]


def whole(monkeypatch: pytest.MonkeyPatch, *rows: Row) -> Gathered:
    """Return a run whose only checks are the rows, two nodes of one test."""
    monkeypatch.setattr("tests.verification.defined_in_sources", lambda: {"test_a.py::test_b"})
    run = Gathered({f"tests/test_a.py::test_b[{k}]" for k in range(len(rows))})
    for k, row in enumerate(rows):
        run.add(f"tests/test_a.py::test_b[{k}]", [("verification", asdict(row)), ("other", 1)])
    return run


def test_the_table_is_written_if_all_checks_passed_and_compared_else(
    monkeypatch: pytest.MonkeyPatch, tmp_path: Any
) -> None:
    monkeypatch.setattr("tests.verification.TABLE", tmp_path / "README.md")
    path = str(tmp_path / "README.md")
    rows = [row_of(what="one"), row_of(what="two")]
    run = whole(monkeypatch, *rows)
    assert COMMAND in run.complaint(None)  # there is none yet
    assert run.complaint(path) == ""
    assert (tmp_path / "README.md").read_text() == table(rows)
    assert [each.name for each in tmp_path.iterdir()] == ["README.md"]
    assert run.complaint(None) == ""
    stale = whole(monkeypatch, rows[0], row_of(what="two", expected=8.5, tolerance=1)).complaint(None)
    assert COMMAND in stale
    assert "+ | two | Euclid | 8.5 |" in stale
    assert "one" in whole(monkeypatch, rows[0], rows[0]).complaint(path)
    part = whole(monkeypatch, *rows)
    del part.rows["tests/test_a.py::test_b[1]"]  # failed, or was not selected
    assert part.complaint(None) == ""
    assert "not written" in part.complaint(path)
    other = whole(monkeypatch, *rows)
    monkeypatch.setattr("tests.verification.defined_in_sources", lambda: {"test_a.py::test_b", "test_c.py::test_d"})
    assert other.complaint(None) == ""  # a file of tests was not collected
    assert "not written" in other.complaint(path)
    assert (tmp_path / "README.md").read_text() == table(rows)


# ---- the committed file ---------------------------------------------------------------------


def test_the_committed_table_names_the_tests_that_hold_checks() -> None:
    # the rows themselves are compared at the end of a run that made all checks (tests/conftest.py)
    named = set(re.findall(r"`(test_\w+\.py::test_\w+)` \|$", TABLE.read_text(encoding="utf-8"), re.MULTILINE))
    assert named == defined_in_sources(), f"tests/README.md is stale: run {COMMAND}"


def test_each_law_is_checked_at_least_twice_and_each_reader_once() -> None:
    text = TABLE.read_text(encoding="utf-8")
    sections = dict(re.findall(r"^## (.*)\n((?:(?!## ).*\n)*)", text, re.MULTILINE))
    for title in LAWS.values():
        assert len(re.findall(r"\.py::test_", sections[title])) >= 2, title
    for kind, suffixes in (("mesh", known_suffixes()), ("points", point_suffixes())):
        read = set(re.findall(rf"^\| `(\.[\w.]+)` {kind}", sections["Readers"], re.MULTILINE))
        assert read == set(suffixes), kind
    for library in ("trimesh", "VTK", "SciPy", "mpmath", "CoolProp", "pint"):
        assert f"\n| {library}, " in sections["Against general-purpose libraries"]
