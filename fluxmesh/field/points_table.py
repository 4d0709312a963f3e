"""Text tables of points: one row a point, read by NumPy's compiled parser.

Faults of a column are kept beside it and told when the column is asked for: a
column that nobody uses may hold text, gaps or NaN.
"""

from __future__ import annotations

from collections.abc import Collection, Iterator
from dataclasses import dataclass
from itertools import islice
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FileError
from fluxmesh.field.points_header import COMMENT_MARKS, TableLayout, find_layout, is_number, split_row
from fluxmesh.units.wording import quoted

__all__ = ["Table", "read_table"]

_HEAD_LINES = 400
_LOOKED_AT = 65536


@dataclass(frozen=True, eq=False)
class Table:
    """The columns of a text table.

    Attributes
    ----------
    names : tuple of str
        Every column that has a name, in the order of the file.
    columns : dict of str to ndarray, shape (n_rows,), float64
        Columns of finite numbers only.
    faults : dict of str to str
        What is wrong with each other column, with line and column.
    units : dict of str to str
        Units as the header gives them.
    rows : int
        Number of rows.
    """

    names: tuple[str, ...]
    columns: dict[str, NDArray[np.float64]]
    faults: dict[str, str]
    units: dict[str, str]
    rows: int


def read_table(path: Path, *, nameless: bool = False) -> Table:
    """Read a text table with a header line.

    Commas, semicolons, tabs or blanks separate the columns; commas, semicolons
    and tabs may stand within quotes. A decimal comma is read where the columns
    are not separated by commas and no decimal point occurs. Blank lines and lines
    that start with ``#`` or ``%`` are passed over; the last of these before the
    numbers may be the header. UTF-8, with or without a byte order mark.

    Parameters
    ----------
    path : Path
        An existing file.
    nameless : bool, optional
        Whether a table without a header is taken as x, y, z and further columns.

    Returns
    -------
    Table
        Columns, faults and units.

    Raises
    ------
    FileError
        Empty, no text, no header, rows of uneven length.
    """
    where = str(path)
    _require_text(path, where)
    try:
        with path.open(encoding="utf-8-sig") as stream:
            head = list(islice(stream, _HEAD_LINES))
        layout = find_layout(head, where, nameless=nameless)
        values, faults = _read(path, layout, where)
    except UnicodeDecodeError as error:
        raise FileError(
            f"line {_undecodable_line(path)} is no UTF-8 text ({error.reason})",
            where,
            "Save it as UTF-8, or export it without special signs",
        ) from error
    if not values:
        first = next(iter(faults.values()), "")
        raise FileError(
            f"has no column of numbers{'; ' if first else ''}{first}", where, "Export the points as numbers"
        )
    return Table(
        names=tuple(name for name in layout.names if name),
        columns={layout.names[k]: column for k, column in values.items() if layout.names[k] and k not in faults},
        faults={layout.names[k]: fault for k, fault in faults.items() if layout.names[k]},
        units=layout.units,
        rows=next(iter(values.values())).size,
    )


def _require_text(path: Path, where: str) -> None:
    with path.open("rb") as stream:
        start = stream.read(_LOOKED_AT)
    if not start.strip():
        raise FileError("is empty", where, "Export it again")
    if start.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise FileError("is UTF-16 text", where, "Save it as UTF-8")
    if b"\0" in start:
        raise FileError("holds binary data, not a table in text", where, "Export it as text, such as CSV")


def _undecodable_line(path: Path) -> int:
    with path.open("rb") as stream:
        for number, line in enumerate(stream, 1):
            if line.decode("utf-8", "replace").encode() != line:
                return number
    return 0


def _rows(path: Path, layout: TableLayout, swap: bool) -> Iterator[tuple[int, str]]:
    """Yield each row of numbers with the number of its line, counted from 1."""
    with path.open(encoding="utf-8-sig") as stream:
        for number, line in enumerate(islice(stream, layout.first_row, None), layout.first_row + 1):
            if line.isspace() or line.lstrip().startswith(COMMENT_MARKS):
                continue
            yield number, line.replace(",", ".") if swap else line


def _has_decimal_comma(path: Path, layout: TableLayout) -> bool:
    """Tell whether commas are decimal: where both occur, a comma is left to be told as a fault."""
    if layout.delimiter == ",":
        return False
    comma = False
    for _, line in _rows(path, layout, False):
        if "." in line:
            return False
        comma = comma or "," in line
    return comma


def _read(path: Path, layout: TableLayout, where: str) -> tuple[dict[int, NDArray[np.float64]], dict[int, str]]:
    """Return the columns of numbers and the faults of the others, by their place."""
    swap = _has_decimal_comma(path, layout)
    faults = {
        k: f"line {layout.first_row + 1}, column {k + 1}: {_said(field)}"
        for k, field in enumerate(layout.first_fields)
        if not is_number(field)
    }
    try:
        values = _load(path, layout, swap, faults)
    except UnicodeDecodeError:
        raise
    except ValueError as error:
        # the parser stops at the first fault and does not know the lines of the file: look again
        more = _first_faults(path, layout, swap, where)
        if more.keys() <= faults.keys():
            raise FileError(f"cannot be read as a table ({error})", where, "Export it again") from error
        faults = more | faults
        values = _load(path, layout, swap, faults)
    for k, column in values.items():
        finite = np.isfinite(column)
        if not finite.all():
            row = int(np.argmin(finite))
            line, _ = next(islice(_rows(path, layout, swap), row, None))
            count = f"{int((~finite).sum())} of {finite.size} values"
            faults[k] = f"{count} are not finite, the first in line {line}, column {k + 1}"
    return values, faults


def _load(path: Path, layout: TableLayout, swap: bool, without: Collection[int]) -> dict[int, NDArray[np.float64]]:
    """Return the columns of numbers by their place; the parser checks that rows are even."""
    tail = layout.delimiter if layout.trailing else None
    lines = (line.rstrip("\r\n ").removesuffix(tail) if tail else line for _, line in _rows(path, layout, swap))
    numeric = [k for k in range(len(layout.names)) if k not in without]
    options: dict[str, Any] = {"delimiter": layout.delimiter, "quotechar": '"', "comments": None}
    if not without:
        table = np.loadtxt(lines, ndmin=2, **options)
        return {k: np.ascontiguousarray(table[:, k]) for k in numeric}
    kinds = np.dtype([(f"f{k}", "U1" if k in without else "f8") for k in range(len(layout.names))])
    records = np.atleast_1d(np.loadtxt(lines, dtype=kinds, **options))
    return {k: np.ascontiguousarray(records[f"f{k}"]) for k in numeric}


def _first_faults(path: Path, layout: TableLayout, swap: bool, where: str) -> dict[int, str]:
    """Go through the rows one by one; return the first field of each column that is no number."""
    count = len(layout.names)
    faults: dict[int, str] = {}
    for number, line in _rows(path, layout, swap):
        fields = split_row(line, layout.delimiter)
        if layout.trailing and len(fields) == count + 1 and not fields[-1]:
            fields.pop()
        if len(fields) != count:
            raise FileError(
                f"line {number} has {len(fields)} values, where the header names {count} columns",
                where,
                "Each row needs one value a column",
            )
        for k, field in enumerate(fields):
            if k not in faults and ("," in field or not is_number(field)):
                faults[k] = f"line {number}, column {k + 1}: {_said(field)}"
    return faults


def _said(field: str) -> str:
    if not field:
        return "the value is missing"
    if "," in field and is_number(field):
        return f"{quoted(field)} has a decimal comma, where others have a decimal point"
    return f"{quoted(field)} is no number"
