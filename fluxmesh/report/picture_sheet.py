"""The sheet a picture is laid out on, and the marks drawn on it: text, arrows, markers, bars, axes."""

from __future__ import annotations

import io
from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.report.picture_arrows import ArrowStyle
from fluxmesh.report.picture_text import Ruler, boxes_for_missing_letters, clean_text

__all__ = ["Sheet"]

_INK = "#222222"
_FONT = "DejaVu Sans"
# On paper a pixel of the sheet is this many millimetres: 1600 of them are 256 mm, and text of 15 is 6.8 points.
_PIXEL_MM = 0.16
# Distance of the lines of a hatching, in pixels of a sheet 1600 by 1200.
_HATCH = 6.0

_Pair = NDArray[np.float64] | tuple[float, float]


class Sheet:
    """A sheet in pixels, x to the right, y up; later marks lie over earlier ones.

    Parameters
    ----------
    size : tuple of int
        Width and height in pixels.
    paper : tuple of int or None
        Colour of the sheet, red, green and blue up to 255; None for no paper at all.

    Attributes
    ----------
    unit : float
        Pixels of this sheet for one of a sheet 1600 by 1200.
    ruler : Ruler
        Measures text.
    halo : str
        Colour of the rims that set a mark off from what lies below it.
    figure : matplotlib.figure.Figure
        All that was drawn, at its size on paper.
    """

    def __init__(self, size: tuple[int, int], paper: tuple[int, int, int] | None = (255, 255, 255)) -> None:
        """Lay out an empty sheet."""
        from matplotlib.backends.backend_agg import FigureCanvasAgg
        from matplotlib.figure import Figure

        self.size = size
        self.unit = min(size[0] / 1600.0, size[1] / 1200.0)
        self.ruler = Ruler()
        self.paper = paper
        self.halo = "white" if paper is None else "#{:02x}{:02x}{:02x}".format(*paper)
        # points on paper of a pixel; the small part keeps sizes from rounding down
        self._point = 72.0 * _PIXEL_MM / 25.4
        inches = [(pixels + 1e-3) * _PIXEL_MM / 25.4 for pixels in size]
        self.figure = Figure(
            figsize=(inches[0], inches[1]),
            dpi=25.4 / _PIXEL_MM,
            facecolor="none" if paper is None else self.halo,
        )
        self._canvas: Any = FigureCanvasAgg(self.figure)
        self._axes: Any = self.figure.add_axes((0.0, 0.0, 1.0, 1.0))
        self._axes.set_xlim(0, size[0])
        self._axes.set_ylim(0, size[1])
        self._axes.set_autoscale_on(False)
        self._axes.axis("off")
        self._order = 1

    def _next(self) -> int:
        self._order += 1
        return self._order

    def text(
        self,
        x: float,
        y: float,
        text: str,
        size: float,
        *,
        bold: bool = False,
        colour: str = _INK,
        across: str = "left",
        along: str = "baseline",
        halo: float = 0.0,
    ) -> None:
        """Write one line, taken literally: no markup is read."""
        from matplotlib import patheffects

        mark = self._axes.text(
            x,
            y,
            clean_text(text),
            fontsize=size * self._point,
            family=_FONT,
            weight="bold" if bold else "normal",
            color=colour,
            ha=across,
            va=along,
            parse_math=False,
            zorder=self._next(),
        )
        if halo:
            stroke = patheffects.withStroke(linewidth=halo * self._point, foreground=self.halo)
            mark.set_path_effects([stroke])

    def line(
        self,
        points: NDArray[np.float64] | Sequence[_Pair],
        width: float,
        *,
        colour: str = _INK,
        dashes: tuple[float, ...] | None = None,
        halo: float = 0.0,
        clip: tuple[float, float, float, float] | None = None,
    ) -> None:
        """Draw a line through points; dash lengths are in pixels."""
        from matplotlib.patches import Rectangle

        xy = np.asarray(points, dtype=np.float64)
        strokes = [(halo, self.halo, None)] if halo else []
        for extra, shade, pattern in (*strokes, (0.0, colour, dashes)):
            (mark,) = self._axes.plot(
                xy[:, 0],
                xy[:, 1],
                linewidth=(width + extra) * self._point,
                color=shade,
                linestyle=(0, tuple(dash / (width + extra) for dash in pattern)) if pattern else "solid",
                solid_capstyle="butt",
                dash_capstyle="butt",
                solid_joinstyle="miter",
                zorder=self._next(),
            )
            if clip is not None:
                frame = Rectangle(clip[:2], clip[2] - clip[0], clip[3] - clip[1], transform=self._axes.transData)
                mark.set_clip_path(frame)

    def polygon(
        self,
        points: NDArray[np.float64] | Sequence[_Pair],
        fill: str | tuple[float, ...],
        *,
        edge: str | None = _INK,
        width: float = 1.0,
        hatched: bool = False,
        halo: float = 0.0,
    ) -> None:
        """Fill a polygon."""
        from matplotlib.patches import Polygon

        xy = np.asarray(points, dtype=np.float64)
        if halo:
            around: dict[str, Any] = {"linewidth": (width + halo) * self._point, "zorder": self._next()}
            self._axes.add_patch(Polygon(xy, facecolor=self.halo, edgecolor=self.halo, **around))
        filled = Polygon(xy, facecolor=fill, edgecolor="none", linewidth=0.0, zorder=self._next())
        self._axes.add_patch(filled)
        if hatched:
            self._hatch(xy, filled)
        if edge:
            outline: dict[str, Any] = {"linewidth": width * self._point, "joinstyle": "miter", "zorder": self._next()}
            self._axes.add_patch(Polygon(xy, facecolor="none", edgecolor=edge, **outline))

    def _hatch(self, xy: NDArray[np.float64], within: Any) -> None:
        """Draw slanting lines within a shape: drawn as lines, they look alike in every kind of file."""
        low, high = xy.min(axis=0), xy.max(axis=0)
        rise = float(high[1] - low[1])
        starts = np.arange(low[0] - rise, high[0], _HATCH * self.unit)
        lines = np.full((len(starts), 3, 2), np.nan)
        lines[:, 0], lines[:, 1] = low[1], high[1]
        lines[:, 0, 0], lines[:, 1, 0] = starts, starts + rise
        flat = lines.reshape(-1, 2)
        (mark,) = self._axes.plot(
            flat[:, 0], flat[:, 1], linewidth=1.2 * self.unit * self._point, color="black", zorder=self._next()
        )
        mark.set_clip_path(within)

    def box(
        self,
        box: Sequence[float],
        *,
        fill: str | tuple[float, ...] = "white",
        edge: str | None = None,
        width: float = 1.0,
    ) -> None:
        """Fill the rectangle left, bottom, right, top."""
        left, bottom, right, top = box
        self.polygon([(left, bottom), (right, bottom), (right, top), (left, top)], fill, edge=edge, width=width)

    def disc(
        self,
        centre: NDArray[np.float64],
        radius: float,
        fill: str,
        *,
        edge: str = _INK,
        width: float = 1.0,
        dashed: bool = False,
        halo: float = 0.0,
    ) -> None:
        """Draw a disc."""
        from matplotlib.patches import Circle

        if halo:
            self._axes.add_patch(Circle(tuple(centre), radius + 0.5 * halo, color=self.halo, zorder=self._next()))
        self._axes.add_patch(
            Circle(
                tuple(centre),
                radius,
                facecolor=fill,
                edgecolor=edge,
                linewidth=width * self._point,
                linestyle=(0, (2.0, 1.2)) if dashed else "solid",
                zorder=self._next(),
            )
        )

    def image(self, pixels: NDArray[np.uint8], area: Sequence[float]) -> None:
        """Lay an image on an area: of its size, or some times finer for files that keep it so."""
        left, bottom, right, top = area
        same = pixels.shape[1] == round(right - left)
        self._axes.imshow(
            pixels,
            extent=(left, right, bottom, top),
            interpolation="nearest" if same else "none",
            aspect="auto",
            zorder=self._next(),
        )
        self._axes.set_xlim(0, self.size[0])
        self._axes.set_ylim(0, self.size[1])

    def arrow(
        self, style: ArrowStyle, tail: NDArray[np.float64], tip: NDArray[np.float64], shrink: float = 1.0
    ) -> None:
        """Draw an arrow in the form of its kind, on a white halo."""
        u = self.unit * shrink
        length = float(np.linalg.norm(tip - tail))
        ahead = (tip - tail) / length
        side = np.array([-ahead[1], ahead[0]])
        # a head never longer than most of the arrow
        squeeze = min(1.0, 0.75 * length / (style.head_length * u))
        head, half_head = style.head_length * u * squeeze, 0.5 * style.head_width * u * squeeze
        half = 0.5 * style.width * u * min(1.0, 2.0 * squeeze)
        neck = tip - ahead * head
        barbs = (neck + side * half_head, neck - side * half_head)
        whole = [
            tail + side * half,
            neck + side * half,
            barbs[0],
            tip,
            barbs[1],
            neck - side * half,
            tail - side * half,
        ]
        if style.shaft in ("block", "hatched"):
            hatched = style.shaft == "hatched"
            self.polygon(whole, style.colour, edge="black", width=1.8 * u, hatched=hatched, halo=5.0 * u)
            return
        self.polygon(whole, self.halo, edge=self.halo, width=5.0 * u)
        if style.shaft == "solid":
            self.polygon(whole, style.colour, edge=style.colour, width=0.5 * u)
        elif style.shaft == "dashed":
            self.line([tail, neck + ahead * 0.5 * head], 2.0 * half, colour=style.colour, dashes=(13.0 * u, 6.0 * u))
            inner = tip - ahead * 0.45 * head
            self.polygon([barbs[0], tip, barbs[1], inner], style.colour, edge=style.colour, width=1.5 * u)
        else:
            for sign in (1.0, -1.0):
                offset = side * (sign * 0.75 * half)
                self.line([tail + offset, neck + offset], 2.0 * u, colour=style.colour)
            self.polygon([barbs[0], tip, barbs[1]], "white", edge=style.colour, width=2.4 * u)

    def arrow_end_on(self, style: ArrowStyle, at: NDArray[np.float64], toward: bool) -> None:
        """Draw an arrow seen from its end: a dot in a ring towards the viewer, a cross away from him."""
        u = self.unit
        radius = 0.42 * style.head_width * u + 4.0 * u
        strong = style.shaft in ("block", "hatched")
        self.disc(
            at,
            radius,
            style.colour if strong else "white",
            edge="black" if strong else style.colour,
            width=3.0 * u,
            dashed=style.shaft == "dashed",
            halo=5.0 * u,
        )
        ink = "black" if strong else style.colour
        if toward:
            self.disc(at, 0.34 * radius, ink, edge=ink)
            return
        reach = 0.62 * radius
        for sign in (1.0, -1.0):
            diagonal = np.array([reach, sign * reach])
            self.line([at - diagonal, at + diagonal], 3.0 * u, colour=ink)

    def marker(self, kind: str, at: NDArray[np.float64]) -> None:
        """Draw a marker: a crossed square for an anchor, a quartered disc for a centroid."""
        u = self.unit
        r = 9.0 * u
        x, y = float(at[0]), float(at[1])
        if kind == "anchor":
            corners = [(x - r, y - r), (x + r, y - r), (x + r, y + r), (x - r, y + r)]
            self.polygon(corners, "white", edge="black", width=2.4 * u, halo=4.0 * u)
            self.line([corners[0], corners[2]], 2.0 * u, colour="black")
            self.line([corners[1], corners[3]], 2.0 * u, colour="black")
            return
        self.disc(at, r, "white", edge="black", width=1.8 * u, halo=4.0 * u)
        for first in (0.0, 180.0):
            turn = np.radians(np.linspace(first, first + 90.0, 12))
            quarter = np.vstack([at, at + r * np.stack([np.cos(turn), np.sin(turn)], axis=1)])
            self.polygon(quarter, "black", edge=None)

    def axes_sign(self, axes: NDArray[np.float64], at: NDArray[np.float64], length: float) -> None:
        """Show how x, y and z lie: full lines towards the viewer, dotted ones away, a letter at each end."""
        u = self.unit
        for number in np.argsort(axes[2]):
            flat = axes[:2, number]
            end = at + length * flat
            away = axes[2, number] < -0.05
            if float(np.linalg.norm(flat)) > 0.05:
                self.line([at, end], 3.0 * u, dashes=(3.0 * u, 3.0 * u) if away else None)
            beyond = flat / max(float(np.linalg.norm(flat)), 0.05) * 13.0 * u
            x, y = (end + beyond).tolist()
            self.text(x, y, "xyz"[number], 19.0 * u, bold=True, across="center", along="center", halo=4 * u)
        self.disc(at, 4.5 * u, "white", width=2.0 * u)

    def bar(self, x: float, y: float, length: float, label: str, under: str) -> None:
        """Draw a scale bar with its meaning above and a remark below."""
        u = self.unit
        self.line([(x, y), (x + length, y)], 3.0 * u)
        for end in (x, x + length):
            self.line([(end, y - 7 * u), (end, y + 7 * u)], 2.0 * u)
        self.text(x, y + 13 * u, label, 18.0 * u, bold=True)
        self.text(x, y - 25 * u, under, 15.0 * u, colour="#444444")

    def png(self) -> bytes:
        """Return the sheet as a PNG file's bytes."""
        from PIL import Image

        with boxes_for_missing_letters():
            self._canvas.draw()
        pixels = np.asarray(self._canvas.buffer_rgba())[..., : 3 if self.paper else 4]
        stream = io.BytesIO()
        dots = 25.4 / _PIXEL_MM
        Image.fromarray(np.ascontiguousarray(pixels)).save(stream, "PNG", dpi=(dots, dots))
        return stream.getvalue()
