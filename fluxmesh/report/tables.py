"""Numbers, vectors and tables as a terminal shows them."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from math import isnan
from typing import Any

import numpy as np

from fluxmesh.balance.wrench import Vector

__all__ = ["figure", "place", "row", "stack", "table"]


def figure(value: float | None, scale: float = 0.0) -> str:
    """Return a number to five significant digits.

    Parameters
    ----------
    value : float or None
        The number; None prints as a dash, NaN as not known.
    scale : float, optional
        Size of the quantities it stands among: what lies below 1e-12 of it is
        round-off, and prints as 0.

    Returns
    -------
    str
        As "-1,234.5" or "1.2345e-07".
    """
    if value is None:
        return "–"
    if isnan(value):
        return "not known"
    if value == 0.0 or abs(value) <= 1e-12 * scale:
        return "0"
    if 1e-3 <= abs(value) < 1e7:
        exponent = int(f"{abs(value):.4e}".partition("e")[2])  # of the rounded number
        return f"{value:,.{max(0, 4 - exponent)}f}"
    return f"{value:.4e}"


def stack(vector: Vector, scale: float) -> str:
    """Return the components of a vector below one another.

    Parameters
    ----------
    vector : ndarray, shape (3,), float64
        In any unit.
    scale : float
        As for `figure`.
    """
    return "\n".join(figure(float(x), scale) for x in vector)


def row(vector: Vector, scale: float | None = None) -> str:
    """Return a vector in brackets.

    Parameters
    ----------
    vector : ndarray, shape (3,), float64
        In any unit.
    scale : float, optional
        As for `figure`; the vector's own length by default.
    """
    if np.isnan(vector).all():
        return "not known"
    size = float(np.linalg.norm(vector)) if scale is None else scale
    return "(" + ", ".join(figure(float(x), size) for x in vector) + ")"


def place(point: Vector) -> str:
    """Return a point in brackets.

    Parameters
    ----------
    point : ndarray, shape (3,), float64
        m.
    """
    return "(" + ", ".join(f"{x if abs(x) > 1e-12 else 0.0:.5g}" for x in point.tolist()) + ")"


def table(title: str, columns: Sequence[tuple[str, str]], rows: Iterable[Sequence[str]]) -> Any:
    """Return a table for the terminal.

    Parameters
    ----------
    title : str
        Stands above it.
    columns : sequence of (str, str)
        Heading, and "left" or "right".
    rows : iterable of sequence of str
        Cells.

    Returns
    -------
    rich.table.Table
        Names from outside are shown as they are, never as markup.
    """
    from rich import box
    from rich.table import Table
    from rich.text import Text

    made = Table(title=title, title_justify="left", title_style="bold", box=box.HORIZONTALS, pad_edge=False)
    for heading, justify in columns:
        right = justify == "right"
        made.add_column(heading, justify="right" if right else "left", no_wrap=right, overflow="fold")
    for cells in rows:
        made.add_row(*(Text(cell) for cell in cells))
    return made
