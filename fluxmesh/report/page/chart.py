"""The chart of the steps to the load: one bar a contribution and axis, each starting where the last one ended.

Rows are contributions, columns the axes; all bars share one scale. The chart is a table whose
cells hold the number and its bar, so that the text of the table is the alternative of the chart.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

from fluxmesh.report.page.grid import Cell, shown
from fluxmesh.report.page.steps import AXES, Staircase, Step
from fluxmesh.report.page.units import PageUnits

__all__ = ["WIDTH", "Bar", "ChartRow", "chart_rows"]

WIDTH = 1000.0
"""Width of a bar's drawing; it is stretched to that of its column."""

# Room at either side, so that no bar touches the edge of its column.
_MARGIN = 12.0
# A bar shorter than this is drawn as a line.
_LEAST = 2.5


@dataclass(frozen=True)
class Bar:
    """Where things lie in the drawing of one cell.

    Attributes
    ----------
    zero : float
        The line of zero.
    left, width : float
        The bar.
    start, end : float
        Where the step starts and ends: the lines that join it to the rows above and below.
    """

    zero: float
    left: float
    width: float
    start: float
    end: float


@dataclass(frozen=True)
class ChartRow:
    """A row of the chart.

    Attributes
    ----------
    label, kind, tag : str
        What it is, its sort, and the tag of its arrow in the pictures.
    total : bool
        Whether it is a sum.
    joined : tuple of bool
        Whether lines join it to the row above, and to the row below.
    cells : tuple of (str, Cell, Bar)
        Axis, number and bar.
    """

    label: str
    kind: str
    tag: str
    total: bool
    joined: tuple[bool, bool]
    cells: tuple[tuple[str, Cell, Bar], ...]


def chart_rows(stairs: Staircase, units: PageUnits, tags: Mapping[tuple[str, str], str]) -> list[list[ChartRow]]:
    """Return the rows of the chart, of its one or two parts.

    Parameters
    ----------
    stairs : Staircase
        The steps.
    units : PageUnits
        Of the page.
    tags : mapping of (str, str) to str
        Tags of the arrows in the pictures, by kind and group; what has no arrow is not in it.
    """
    every = (*stairs.steps, *stairs.onward)
    finest = [max(step.figures[k].written(units).decimals for step in every) for k in range(3)]
    tags = tags if stairs.quantity == "force" else {}
    if not stairs.rescaled:
        return [_part((*stairs.steps, *stairs.onward), stairs.span, units, finest, tags)]
    return [
        _part(stairs.steps, stairs.span, units, finest, tags),
        _part(stairs.onward, stairs.onward_span, units, finest, tags),
    ]


def _part(
    steps: Sequence[Step],
    span: tuple[float, float],
    units: PageUnits,
    finest: Sequence[int],
    tags: Mapping[tuple[str, str], str],
) -> list[ChartRow]:
    scale = (WIDTH - 2 * _MARGIN) / (span[1] - span[0] or 1.0)

    def across(value: float) -> float:
        return round(_MARGIN + scale * (value - span[0]), 2)

    rows = []
    for number, step in enumerate(steps):
        cells = []
        for k, axis in enumerate(AXES):
            start, end = across(step.starts[k]), across(step.ends[k])
            width = max(abs(end - start), _LEAST)
            left = min(start, end) if abs(end - start) >= _LEAST else 0.5 * (start + end - width)
            bar = Bar(across(0.0), round(left, 2), round(width, 2), start, end)
            # the doubt of contributions stands in the ledgers: here it would part the bars
            figure = step.figures[k] if step.total else replace(step.figures[k], half=None)
            cells.append((axis, shown(figure, units, finest[k]), bar))
        before = steps[number - 1] if number else None
        after = steps[number + 1] if number + 1 < len(steps) else None
        above = before is not None and _joined(before, step)
        below = after is not None and _joined(step, after)
        tag = tags.get((step.kind, step.group), "")
        rows.append(ChartRow(step.label, step.kind, tag, step.total, (above, below), tuple(cells)))
    return rows


def _joined(one: Step, following: Step) -> bool:
    """Whether a step starts, or a sum of steps ends, where the step before it ended."""
    if following.total:
        return following.kind == "resultant" and not one.total
    return following.starts == one.ends
