"""Gauge pressure in bands of colour, and the bar that explains them."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluxmesh.report.picture_sheet import Sheet
from fluxmesh.report.picture_text import engineering, nice_step
from fluxmesh.report.scene import Scene, area_vectors

__all__ = ["Bands", "draw_bar", "pressure_bands"]

_FEWEST_BANDS = 7
# Share of the area at either end that may fall off the bar where a few faces stretch its range.
_TAIL = 0.002
# Pressures below this many pascals everywhere are zero; finer steps would run out of exponents.
_NOTHING = 1e-100
_UNITS = ((1e9, "GPa"), (1e6, "MPa"), (1e3, "kPa"), (1.0, "Pa"), (1e-3, "mPa"))


@dataclass(frozen=True, eq=False)
class Bands:
    """Pressure levels and their colours.

    Attributes
    ----------
    levels : ndarray, shape (n_bands + 1,), float64
        Limits of the bands in pascals, rising.
    palette : ndarray, shape (n_bands, 3), uint8
        Colour of each band.
    least, most : float
        Extremes of the pressure in pascals; they may lie beyond the levels.
    """

    levels: NDArray[np.float64]
    palette: NDArray[np.uint8]
    least: float
    most: float


def pressure_bands(scene: Scene) -> Bands:
    """Choose round levels that cover the pressure of the scene.

    Where less than half of the range holds nearly all of the area (a singular
    corner or a damaged face stretches it), the levels cover that part only, the
    ends of the bar are pointed, and the extremes are named beside it.

    Parameters
    ----------
    scene : Scene
        With a pressure that is finite somewhere.

    Returns
    -------
    Bands
        Levels, colours, extremes.
    """
    import matplotlib

    pressure = np.asarray(scene.pressure, dtype=np.float64)
    known = np.isfinite(pressure)
    values = pressure[known]
    least, most = scene.pressure_range or (float(values.min()), float(values.max()))
    areas = np.linalg.norm(area_vectors(scene.points, scene.triangles[known]), axis=1)
    low, high = _weighted_range(values, areas)
    if high - low >= 0.5 * (most - least):
        low, high = least, most
    magnitude = max(abs(low), abs(high))
    if high - low <= 1e-9 * magnitude or magnitude < _NOTHING:
        # one pressure everywhere: a band around it
        step = nice_step(0.02 * magnitude) if magnitude >= _NOTHING else 1.0
        first = math.floor(low / step)
        numbers = np.arange(first, first + 2)
    else:
        step = nice_step((high - low) / _FEWEST_BANDS)
        numbers = np.arange(math.floor(low / step + 1e-6), math.ceil(high / step - 1e-6) + 1)
    count = len(numbers) - 1
    shades = matplotlib.colormaps["cividis"]((np.arange(count) + 0.5) / count)
    palette = np.round(255.0 * shades[:, :3]).astype(np.uint8)
    return Bands(step * numbers.astype(np.float64), palette, least, most)


def _weighted_range(values: NDArray[np.float64], weights: NDArray[np.float64]) -> tuple[float, float]:
    """Return the pressures that leave a small share of the area below and above."""
    order = np.argsort(values, kind="stable")
    total = np.cumsum(weights[order])
    ends = np.searchsorted(total, [_TAIL * total[-1], (1.0 - _TAIL) * total[-1]])
    low, high = values[order][np.minimum(ends, len(values) - 1)]
    return float(low), float(high)


def draw_bar(sheet: Sheet, bands: Bands, area: tuple[float, float, float, float]) -> None:
    """Draw the colour bar, its levels, the ambient pressure and the extremes."""
    u = sheet.unit
    left, _, right, top = area
    factor, unit = next(
        (pair for pair in _UNITS if max(abs(bands.levels[0]), abs(bands.levels[-1])) >= 0.99 * pair[0]),
        _UNITS[-1],
    )
    x0, x1 = left + 24 * u, right - 24 * u
    y0, y1 = top - 52 * u, top - 30 * u
    edges = x0 + (x1 - x0) * (bands.levels - bands.levels[0]) / (bands.levels[-1] - bands.levels[0])
    for number, colour in enumerate(bands.palette):
        box = (edges[number], y0, edges[number + 1], y1)
        sheet.box(box, fill=tuple(colour / 255.0), edge="white", width=0.8 * u)
    head = f"gauge pressure, {unit} (0 is ambient)"
    sheet.text(x0, y1 + 9 * u, head, 18 * u, bold=True)
    span = f"on this surface: {engineering(bands.least, 'Pa')} to {engineering(bands.most, 'Pa')}"
    sheet.text(x1, y1 + 9 * u, span, 16 * u, across="right", colour="#444444")
    step = (bands.levels[1] - bands.levels[0]) / factor
    decimals = max(0, 1 - math.floor(math.log10(step) + 1e-6))
    if round(step, decimals - 1) == round(step, decimals) and decimals:
        decimals -= 1
    zero = np.abs(bands.levels) < 1e-9 * (bands.levels[-1] - bands.levels[0])
    words = [f"{level / factor:.{decimals}f}".replace("-", "\u2212") for level in bands.levels]
    words = ["0" if at_zero else word for word, at_zero in zip(words, zero)]
    # every word, every second, ... counted from zero where it is on the bar
    wide = max(sheet.ruler.width(word, 16 * u, True) for word in words) + 10 * u
    every = math.ceil(wide / (edges[1] - edges[0]))
    first = int(np.argmax(zero)) if zero.any() else 0
    for number, (x, word) in enumerate(zip(edges, words)):
        bold = bool(zero[number])
        sheet.line([(x, y0), (x, y0 - (11 if bold else 6) * u)], (3.5 if bold else 1.5) * u)
        if (number - first) % every == 0:
            sheet.text(x, y0 - 26 * u, word, 16 * u, across="center", bold=bold)
    # pointed ends say that some faces lie beyond the bar
    height = y1 - y0
    for beyond, x, away, colour in (
        (bands.least < bands.levels[0], x0, -1.0, bands.palette[0]),
        (bands.most > bands.levels[-1], x1, 1.0, bands.palette[-1]),
    ):
        if beyond:
            tip = (x + away * 0.8 * height, y0 + 0.5 * height)
            sheet.polygon([(x, y0), tip, (x, y1)], tuple(colour / 255.0), edge="white", width=0.8 * u)
