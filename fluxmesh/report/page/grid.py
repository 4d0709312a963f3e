"""A table of the page as plain data, and its cells made ready for the template."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from fluxmesh.report.page.digits import Digits
from fluxmesh.report.page.source import Figure
from fluxmesh.report.page.units import PageUnits

__all__ = ["Block", "Cell", "Column", "Grid", "Line", "shown", "shown_cells"]

Content = Figure | str


@dataclass(frozen=True)
class Column:
    """A column of figures.

    Attributes
    ----------
    heading : str
        What it holds.
    quantity : str
        Its quantity, whose unit is put beside the heading.
    unit : str
        A unit in words, where the quantity has none of its own.
    """

    heading: str
    quantity: str = ""
    unit: str = ""


@dataclass(frozen=True)
class Line:
    """A row.

    Attributes
    ----------
    head : str
        Its name.
    cells : tuple of Figure or str
        One a column.
    quantity : str
        Quantity of the whole row, whose unit is put beside its name.
    kind : {"", "total", "result", "within"}
        How it looks: a sum, what the table is about, or a row below a heading of its own.
    """

    head: str
    cells: tuple[Content, ...]
    quantity: str = ""
    kind: str = ""


@dataclass(frozen=True)
class Block:
    """Rows that stay together on paper.

    Attributes
    ----------
    lines : tuple of Line
        The rows.
    head : str
        Name of them all, in a column of its own; none by default.
    under : str
        Said below that name.
    mark : str
        A short sign before the name: the tag of an arrow.
    kind : str
        As for a `Line`.
    """

    lines: tuple[Line, ...]
    head: str = ""
    under: str = ""
    mark: str = ""
    kind: str = ""


@dataclass(frozen=True)
class Grid:
    """A table.

    Attributes
    ----------
    caption : str
        What it shows.
    corner : str
        Heading of the names of rows.
    columns : tuple of Column
        The columns of figures.
    blocks : tuple of Block
        The rows.
    note : str
        Said below the caption.
    inner : str
        Heading of the names of rows within blocks that have a name of their own; empty where none has.
    """

    caption: str
    corner: str
    columns: tuple[Column, ...]
    blocks: tuple[Block, ...]
    note: str = ""
    inner: str = ""


@dataclass(frozen=True)
class Cell:
    """A cell as the template prints it.

    Attributes
    ----------
    number : Digits or None
        In SI; None for a cell of words.
    words : str
        Of a cell without a number.
    pad : str
        Blanks behind the number that line its point up with the others of the column.
    doubt, us, us_doubt : Digits or None
        Half width, and both in US customary units.
    value : str
        The number in SI with all its digits; empty where it is not known.
    key, origin : str
        Where it stands in the result, or how it follows from it.
    half, half_key : str
        The half width with all its digits, and its key.
    unit, us_unit : str
        Symbols.
    """

    number: Digits | None = None
    words: str = ""
    pad: str = ""
    doubt: Digits | None = None
    us: Digits | None = None
    us_doubt: Digits | None = None
    value: str = ""
    key: str = ""
    origin: str = ""
    half: str = ""
    half_key: str = ""
    unit: str = ""
    us_unit: str = ""


def shown(content: Content, units: PageUnits, decimals: int = 0) -> Cell:
    """Make a cell ready for the template.

    Parameters
    ----------
    content : Figure or str
        What it holds.
    units : PageUnits
        Of the page.
    decimals : int, optional
        Digits after the point of the finest number of the column.
    """
    if isinstance(content, str):
        return Cell(words=content)
    if content.value is None:
        return Cell(words=content.absent)
    number = content.written(units)
    us = units.us(content.quantity)
    pad = "" if number.power or content.form == "percent" else _blanks(decimals - number.decimals, number.decimals)
    return Cell(
        number=number,
        pad=pad,
        doubt=content.doubt(units),
        us=content.written_us(units),
        us_doubt=content.doubt_us(units),
        value=repr(content.value),
        key=content.key,
        origin=content.origin,
        half="" if content.half is None else repr(content.half),
        half_key=content.half_key,
        unit="%" if content.form == "percent" else units.si(content.quantity).symbol,
        us_unit="" if us is None else us.symbol,
    )


def _blanks(count: int, decimals: int) -> str:
    # U+2007 is as wide as a digit, U+2008 as a point
    return ("\u2008" if decimals == 0 and count > 0 else "") + "\u2007" * max(0, count)


def shown_cells(grid: Grid, units: PageUnits) -> list[list[list[Cell]]]:
    """Return all cells of a table, by block and row, with the points of each column in one line.

    Parameters
    ----------
    grid : Grid
        The table.
    units : PageUnits
        Of the page.
    """
    finest = [0] * len(grid.columns)
    # rows of several quantities in one column have no point in common
    alike = all(not line.quantity for block in grid.blocks for line in block.lines)
    if alike:
        for block in grid.blocks:
            for line in block.lines:
                for k, content in enumerate(line.cells):
                    finest[k] = max(finest[k], _decimals(content, units))
    return [[_cells(line.cells, units, finest) for line in block.lines] for block in grid.blocks]


def _cells(contents: Sequence[Content], units: PageUnits, finest: Sequence[int]) -> list[Cell]:
    return [shown(content, units, finest[k]) for k, content in enumerate(contents)]


def _decimals(content: Content, units: PageUnits) -> int:
    if isinstance(content, str) or content.value is None or content.form == "percent":
        return 0
    return content.written(units).decimals
