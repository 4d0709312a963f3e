"""A chart of a series: load and reaction over time, with what is left of the balance below."""

from __future__ import annotations

import io
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from fluxmesh.balance.series import Series
from fluxmesh.balance.wrench import Vector
from fluxmesh.report.picture_text import Ruler, boxes_for_missing_letters, clean_text
from fluxmesh.report.series import SERIES_CAUTIONS
from fluxmesh.report.whole import write_whole

if TYPE_CHECKING:
    from matplotlib.figure import Figure

__all__ = ["draw_series"]

_FONT: Final = "DejaVu Sans"
_INK: Final = "#222222"
# Palette: Okabe and Ito, "Color Universal Design" (2002, revised 2008; from memory). Dashes and markers differ as
# well, for print in grey.
_CURVES: Final = (
    ("load x", "#0072B2", (0, ()), "o"),
    ("load y", "#D55E00", (0, (6, 2)), "s"),
    ("load z", "#009E73", (0, (2, 2)), "^"),
)
_REACTION: Final = ("reaction, size", "#000000", (0, (8, 2, 1.5, 2)), "D")
_MASS: Final = ("mass", "#56B4E9", (0, (6, 2)), "v")
_MOMENTUM: Final = ("momentum", "#CC79A7", (0, ()), "P")
_SIZE: Final = (1600, 1200)  # pixels
_MARGIN: Final = 60
_LINE: Final = 22
_MOST_LINES: Final = 9


def draw_series(
    series: Series, path: Path, *, title: str, tolerance: float, notes: Sequence[str] = (), verdict: str = ""
) -> None:
    """Draw a series as a PNG picture.

    Parameters
    ----------
    series : Series
        The balances.
    path : pathlib.Path
        Where to; the file is written whole or not at all.
    title : str
        Title of the case.
    tolerance : float
        Largest relative residual that closes, drawn as a limit.
    notes : sequence of str, optional
        What the figures assume, one sentence each.
    verdict : str, optional
        The judgement in a few words.

    Raises
    ------
    OutputError
        The file cannot be written.
    """
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=((_SIZE[0] + 1e-3) / 72, (_SIZE[1] + 1e-3) / 72), dpi=72, facecolor="white")
    canvas = FigureCanvasAgg(figure)
    ruler = Ruler()
    floor = _footer(figure, ruler, notes)
    room = _SIZE[0] - 2 * _MARGIN
    _say(figure, _MARGIN, _SIZE[1] - 56, ruler.cut(title, 30, room, True), 30, bold=True)
    heading = "Load of the flow on the hardware and reaction of the anchor" + (f". {verdict}" if verdict else "")
    _say(figure, _MARGIN, _SIZE[1] - 92, ruler.cut(heading, 20, room), 20)
    height = _SIZE[1] - 130 - floor
    below = floor + 64
    low = 0.26 * height
    lower = figure.add_axes((0.09, below / _SIZE[1], 0.73, low / _SIZE[1]))
    upper = figure.add_axes((0.09, (below + low + 26) / _SIZE[1], 0.73, (height - low - 90) / _SIZE[1]), sharex=lower)
    times = series.times()
    _forces(upper, times, series)
    _left(lower, times, series, tolerance)
    for axes in (upper, lower):
        _dress(axes)
        axes.legend(
            loc="upper left",
            bbox_to_anchor=(1.01, 1.0),
            frameon=False,
            handlelength=4.2,
            prop={"family": _FONT, "size": 17},
        )
    upper.tick_params(labelbottom=False)
    lower.set_xlabel("time, s", fontsize=18, family=_FONT, color=_INK)
    with boxes_for_missing_letters():
        buffer = io.BytesIO()
        canvas.print_png(buffer)
    write_whole(buffer.getvalue(), path)


def _forces(axes: Any, times: Vector, series: Series) -> None:
    load, reaction = series.load(), np.linalg.norm(series.reaction(), axis=1)
    rows = [*zip(_CURVES, load.T), (_REACTION, reaction)]
    largest = max((float(np.nanmax(np.abs(values))) for _, values in rows if np.isfinite(values).any()), default=0.0)
    factor, unit = (1e3, "kN") if largest >= 1e4 else (1.0, "N")
    for style, values in rows:
        # where a force is not known the line has a gap
        _curve(axes, times, values / factor, style)
    axes.axhline(0.0, color="#999999", linewidth=1.2, zorder=1)
    axes.set_ylabel(f"force, {unit}", fontsize=18, family=_FONT, color=_INK)


def _left(axes: Any, times: Vector, series: Series, tolerance: float) -> None:
    """Residuals as shares of the largest entries of the series."""
    flows, forces = series.mass_size(), series.momentum_size()
    if flows > 0:
        _curve(axes, times, np.abs(series.mass_residual()) / flows * 100, _MASS)
    if forces > 0:
        _curve(axes, times, np.linalg.norm(series.momentum_residual(), axis=1) / forces * 100, _MOMENTUM)
    axes.axhline(tolerance * 100, color=_INK, linewidth=1.6, linestyle=(0, (1, 3)), label="tolerance", zorder=1)
    axes.set_ylim(bottom=0.0)
    axes.set_ylabel("residual, %\nof largest", fontsize=18, family=_FONT, color=_INK)


def _curve(axes: Any, times: Vector, values: Vector, style: tuple[str, str, Any, str]) -> None:
    name, colour, dashes, marker = style
    axes.plot(
        times,
        values,
        color=colour,
        linestyle=dashes,
        linewidth=2.6,
        marker=marker,
        markersize=8,
        label=name,
        zorder=3,
        clip_on=False,
    )


def _dress(axes: Any) -> None:
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)
    for side in ("left", "bottom"):
        axes.spines[side].set_color("#777777")
    axes.grid(True, color="#dddddd", linewidth=1.0)
    axes.set_axisbelow(True)
    axes.tick_params(labelsize=16, colors=_INK, labelfontfamily=_FONT)


def _say(figure: Figure, x: float, y: float, text: str, size: float, *, bold: bool = False, colour: str = _INK) -> None:
    figure.text(
        x / _SIZE[0],
        y / _SIZE[1],
        text,
        fontsize=size,
        family=_FONT,
        fontweight="bold" if bold else "normal",
        color=colour,
        parse_math=False,
    )


def _footer(figure: Figure, ruler: Ruler, notes: Sequence[str]) -> float:
    """Write cautions and notes along the lower edge; return the pixel above which the sheet is free."""
    room = _SIZE[0] - 2 * _MARGIN
    lines = [line for text in SERIES_CAUTIONS for line in ruler.wrap(text, 16, room)]
    said = " ".join(f"{clean_text(text).rstrip(' .')}." for text in notes)
    more = ruler.wrap(f"Assumed: {said}", 15, room) if notes else []
    if len(more) > _MOST_LINES:
        more = [*more[: _MOST_LINES - 1], "… More stands in the result file."]
    y = 16 + _LINE * (len(lines) + len(more))
    top = float(y + 12)
    for text in lines:
        y -= _LINE
        _say(figure, _MARGIN, y, text, 16)
    for text in more:
        y -= _LINE
        _say(figure, _MARGIN, y, text, 15, colour="#444444")
    return top
