"""What a text table looks like: its header line, delimiter, names and units, told from its first lines."""

from __future__ import annotations

import csv
import re
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

from fluxmesh.errors import FileError
from fluxmesh.units.wording import quoted

__all__ = ["COMMENT_MARKS", "TableLayout", "find_layout", "is_number", "split_row"]

COMMENT_MARKS = ("#", "%")
"""A line that starts with one of these is a comment; the last one before the numbers may be the header."""

_DELIMITERS = (";", "\t", ",", None)
_DELIMITER_NAMES = {";": "semicolons", "\t": "tabs", ",": "commas", None: "blanks"}
_NUMBER = re.compile(
    r"[+-]?(?:[0-9]+[.,]?[0-9]*|[.,][0-9]+)(?:[eE][+-]?[0-9]+)?|[+-]?(?:nan|inf|infinity)", re.IGNORECASE
)
# a word in quotes, or one with its unit in brackets behind it
_WORD = re.compile(r'(?:"[^"]*"|[^\s\[(]+)(?:\s*\[[^\]]*\]|\s*\([^)]*\))?|\S+')
_IN_SQUARE = re.compile(r"(.*?\S)\s*\[([^\]]*)\]")
_IN_ROUND = re.compile(r"(.*?\S)\s*\((.*)\)")
_LEAST_COLUMNS = 3


@dataclass(frozen=True)
class TableLayout:
    """How a text table is laid out.

    Attributes
    ----------
    names : tuple of str
        A name for each column, without its unit; "" for a column without one.
    units : dict of str to str
        Unit as the header gives it, by name; names without a unit are left out.
    delimiter : str or None
        None for blanks.
    first_row : int
        Line of the first row of numbers, counted from 0.
    first_fields : tuple of str
        The fields of that row.
    trailing : bool
        Whether rows end with a delimiter that closes no further column.
    """

    names: tuple[str, ...]
    units: dict[str, str]
    delimiter: str | None
    first_row: int
    first_fields: tuple[str, ...]
    trailing: bool = False


def is_number(field: str) -> bool:
    """Tell whether a field of a row is a number; a decimal comma counts as a point.

    Parameters
    ----------
    field : str
        Without quotes.

    Returns
    -------
    bool
        True also for "nan" and "inf".
    """
    return _NUMBER.fullmatch(field.strip()) is not None


def split_row(line: str, delimiter: str | None) -> list[str]:
    """Split one line into its fields.

    Parameters
    ----------
    line : str
        A row or a header.
    delimiter : str or None
        None for blanks, any number of them.

    Returns
    -------
    list of str
        Fields without quotes and outer blanks.
    """
    line = line.strip("\r\n")
    if delimiter is None:
        return [word.replace('"', "") for word in re.findall(r'"[^"]*"|\S+', line)]
    try:
        row = next(csv.reader([line], delimiter=delimiter, skipinitialspace=True), [])
    except csv.Error:
        # a line of a size that no table has
        return [line]
    return [field.strip() for field in row]


def find_layout(head: Sequence[str], where: str, *, nameless: bool = False) -> TableLayout:
    """Tell the layout of a table from its first lines.

    The header is the last line before the first row of numbers; a row of
    numbers has at least three fields, more than half of them numbers. The
    delimiter is the one that cuts both into equally many fields.

    Parameters
    ----------
    head : sequence of str
        The first lines of the file.
    where : str
        File, for messages.
    nameless : bool, optional
        Whether a table without a header is taken as x, y, z and further
        columns named "column 4" and so on.

    Returns
    -------
    TableLayout
        The layout.

    Raises
    ------
    FileError
        There is no row of numbers, no header, the header and the first row
        do not fit together, or two columns have one name.
    """
    first, header = -1, -1
    for number, line in enumerate(head):
        text = line.strip()
        if not text:
            continue
        if not text.startswith(COMMENT_MARKS) and any(_mostly_numbers(split_row(text, mark)) for mark in _DELIMITERS):
            first = number
            break
        header = number
    if first < 0:
        raise FileError(
            f"has no row of at least {_LEAST_COLUMNS} numbers in its first {len(head)} lines",
            where,
            'Give a header line and a row for each point, such as "x,y,z,p" and "0.1,0.2,0,1500"',
        )
    if header < 0:
        return _nameless(head[first], first, where, nameless)
    title = head[header].strip().lstrip("".join(COMMENT_MARKS)).strip("\r\n ")
    for delimiter in _DELIMITERS:
        names, fields = _header_fields(title, delimiter), split_row(head[first], delimiter)
        trailing = len(fields) > 1 and fields[-1] == "" and len(fields) - len(names) in (0, 1)
        if trailing:
            names, fields = (names[:-1] if len(names) == len(fields) else names), fields[:-1]
        if len(names) == len(fields) and _mostly_numbers(fields):
            plain, units = _names_and_units(names, header, where)
            return TableLayout(plain, units, delimiter, first, tuple(fields), trailing)
    raise _misfit(title, header, head[first], first, where)


def _mostly_numbers(fields: Sequence[str]) -> bool:
    return len(fields) >= _LEAST_COLUMNS and 2 * sum(map(is_number, fields)) > len(fields)


def _nameless(line: str, first: int, where: str, allowed: bool) -> TableLayout:
    if not allowed:
        raise FileError(
            f"has no header: line {first + 1} holds numbers already",
            where,
            'Name the columns in the first line, such as "x,y,z,p"',
        )
    delimiter = next(mark for mark in _DELIMITERS if _mostly_numbers(split_row(line, mark)))
    fields = split_row(line, delimiter)
    names = ("x", "y", "z", *(f"column {number + 1}" for number in range(3, len(fields))))
    return TableLayout(names, {}, delimiter, first, tuple(fields))


def _header_fields(title: str, delimiter: str | None) -> list[str]:
    return (
        [word.replace('"', "") for word in _WORD.findall(title)] if delimiter is None else split_row(title, delimiter)
    )


def _names_and_units(fields: Sequence[str], header: int, where: str) -> tuple[tuple[str, ...], dict[str, str]]:
    """Take the unit off each name, unless several columns would then be named alike."""
    parted = [_parted(field) for field in fields]
    often = Counter(name for name, _ in parted)
    names, units = [], {}
    for (name, unit), field in zip(parted, fields):
        if often[name] > 1:
            name, unit = field, ""
        names.append(name)
        if unit:
            units[name] = unit
    for name, count in Counter(names).items():
        if count > 1 and name:
            places = [str(number + 1) for number, other in enumerate(names) if other == name]
            raise FileError(
                f"line {header + 1} names columns {' and '.join(places)} alike: {quoted(name)}",
                where,
                "Give each column a name of its own",
            )
    return tuple(names), units


def _parted(field: str) -> tuple[str, str]:
    """Part a header such as "p [Pa]" or "p (Pa)" into name and unit."""
    match = _IN_SQUARE.fullmatch(field) or _IN_ROUND.fullmatch(field)
    return (match[1], match[2].strip()) if match else (field, "")


def _misfit(title: str, header: int, row: str, first: int, where: str) -> FileError:
    delimiter = next(mark for mark in _DELIMITERS if _mostly_numbers(split_row(row, mark)))
    names, fields = _header_fields(title, delimiter), split_row(row, delimiter)
    remedy = "Name each column once"
    if delimiter is None and len(names) > len(fields):
        remedy += "; put a name that has blanks between quotes"
    if delimiter == "," and len(fields) == 2 * len(names):
        remedy = "If the commas are decimal commas, separate the columns by semicolons or tabs"
    return FileError(
        f"line {header + 1} has {len(names)} names and line {first + 1} has {len(fields)} values "
        f"(separated by {_DELIMITER_NAMES[delimiter]})",
        where,
        remedy,
    )
