"""Offscreen pictures of a balance: the forces, and the gauge pressure with the forces.

VTK draws the surface; text, arrows, legend and bars are laid over it.
Distances and forces are to stated scales, and the caution stands on the sheet.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import OutputError, PictureError
from fluxmesh.report.picture_arrows import Reach, lay_out_arrows, pulled_in, reach_of
from fluxmesh.report.picture_legend import ROLE_TINTS, draw_footer, draw_legend
from fluxmesh.report.picture_overlay import draw_overlay
from fluxmesh.report.picture_ports import Port, find_ports
from fluxmesh.report.picture_pressure import Bands, draw_bar, pressure_bands
from fluxmesh.report.picture_print import pdf_of, svg_of
from fluxmesh.report.picture_sheet import Sheet
from fluxmesh.report.picture_surface import Layer, draw_surface, require_offscreen
from fluxmesh.report.picture_text import engineering, nice_step
from fluxmesh.report.picture_view import View, axes_for, choose_direction, direction_from, fit
from fluxmesh.report.scene import Scene, area_vectors, in_words, thin
from fluxmesh.report.whole import write_whole

__all__ = ["FORMATS", "Look", "draw_picture", "draw_pressure", "draw_vectors", "require_drawable"]

FORMATS: Final = (".png", ".svg", ".pdf")
"""Suffixes of the files that a picture can be."""

_WALL_TINT = (214, 210, 202)
_WALL_OPACITY = 0.35
_MOST_FIT_POINTS = 20_000
# In files for print the surface is drawn finer than the sheet by this factor: about 320 dots an inch.
_PRINT_FINER = 2
# Most pixels at a side: a window of the driver is up to four times as wide.
_LARGEST = 4000
# A pixel that differs from the paper by less is paper.
_SPECK = 5
# Contrast of text on its paper (Web Content Accessibility Guidelines 2.2, level AA), and our palest ink.
_LEAST_CONTRAST = 4.5
_PALEST_INK = (0x44, 0x44, 0x44)


@dataclass(frozen=True)
class Look:
    """How a picture is to look.

    Attributes
    ----------
    pressure : bool
        Whether the surface shows the gauge pressure, or its groups.
    view : str
        "automatic", or as `fluxmesh.report.picture_view.direction_from` takes it.
    size : tuple of int
        Width and height in pixels; on paper a pixel is 0.16 mm.
    background : str
        "white", "transparent", or a light colour as "#rrggbb".
    """

    pressure: bool = False
    view: str = "automatic"
    size: tuple[int, int] = (1600, 1200)
    background: str = "white"

    def paper(self) -> tuple[int, int, int] | None:
        """Return the colour of the paper, red, green and blue up to 255; None for no paper.

        Raises
        ------
        PictureError
            A background that is no such word or colour, or on which text cannot be read.
        """
        said = self.background.strip().lower()
        if said == "transparent":
            return None
        if said == "white":
            return 255, 255, 255
        if not re.fullmatch(r"#[0-9a-f]{6}", said):
            raise PictureError(
                f"the background is {self.background!r}",
                remedy='Give "white", "transparent", or a light colour such as "#f4f1ea"',
            )
        paper = int(said[1:3], 16), int(said[3:5], 16), int(said[5:7], 16)
        if _contrast(paper, _PALEST_INK) < _LEAST_CONTRAST:
            raise PictureError(
                f"the background {self.background} is too dark for the text on it", remedy="Give a lighter colour"
            )
        return paper


def _contrast(one: tuple[int, int, int], two: tuple[int, int, int]) -> float:
    """Return the contrast of two colours, 1 to 21 (Web Content Accessibility Guidelines 2.2; from memory)."""

    def luminance(colour: tuple[int, int, int]) -> float:
        shares = [value / 255.0 for value in colour]
        linear = [x / 12.92 if x <= 0.04045 else ((x + 0.055) / 1.055) ** 2.4 for x in shares]
        return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]

    high, low = sorted((luminance(one), luminance(two)), reverse=True)
    return (high + 0.05) / (low + 0.05)


def draw_vectors(scene: Scene, path: str | Path, size: tuple[int, int] = (1600, 1200)) -> None:
    """Draw the forces over a pale, translucent surface with its ports tinted by role.

    Parameters
    ----------
    scene : Scene
        What to show; large surfaces are thinned for the drawing.
    path : str or Path
        File to write, see `draw_picture`.
    size : tuple of int
        Width and height in pixels, 800 by 600 at least.

    Raises
    ------
    PictureError, OutputError
        As `draw_picture`.
    """
    draw_picture(scene, path, Look(size=size))


def draw_pressure(scene: Scene, path: str | Path, size: tuple[int, int] = (1600, 1200)) -> None:
    """Draw the gauge pressure on the surface, with the same forces.

    Pressure is shown in bands of the colour map cividis (Nuñez, Anderton and
    Renslow, PLoS ONE 13, 2018), which reads alike with any colour vision and
    grows steadily lighter when printed in grey.

    Parameters
    ----------
    scene : Scene
        What to show; triangles whose pressure is NaN stay pale.
    path : str or Path
        File to write, see `draw_picture`.
    size : tuple of int
        Width and height in pixels, 800 by 600 at least.

    Raises
    ------
    PictureError, OutputError
        As `draw_picture`.
    """
    draw_picture(scene, path, Look(pressure=True, size=size))


def draw_picture(scene: Scene, path: str | Path, look: Look | None = None) -> None:
    """Draw a scene to a file: PNG, or for print SVG or PDF, by its suffix.

    Parameters
    ----------
    scene : Scene
        What to show; large surfaces are thinned for the drawing.
    path : str or Path
        File to write. It appears whole or not at all.
    look : Look, optional
        How it is to look.

    Raises
    ------
    PictureError
        A suffix, view, size or background that cannot be had, a scene without the
        pressure that is asked for, or no offscreen window to draw in.
    OutputError
        The file cannot be written.
    """
    path, look = Path(path), look or Look()
    require_drawable(path, look)
    if look.pressure and (scene.pressure is None or not np.isfinite(scene.pressure).any()):
        raise PictureError("the surface carries no pressure to draw", remedy="Draw the force vectors alone")
    if not path.parent.is_dir():
        raise OutputError("there is no such folder", where=str(path.parent), remedy="Make it first, or choose another")
    suffix = path.suffix.lower()
    sheet = _drawn(scene, look, 1 if suffix == ".png" else _PRINT_FINER)
    if suffix == ".png":
        content = sheet.png()
    elif suffix == ".pdf":
        content = pdf_of(sheet, scene.title)
    else:
        content = svg_of(sheet, scene.title, in_words(scene))
    write_whole(content, path)


def require_drawable(path: Path, look: Look) -> None:
    """Raise, before any work, if a picture cannot be had as it is asked for.

    Parameters
    ----------
    path : Path
        File to write; its folder is not looked at.
    look : Look
        How it is to look.

    Raises
    ------
    PictureError
        A suffix, view, size or background that cannot be had.
    """
    if path.suffix.lower() not in FORMATS:
        found = f"a picture cannot be written as '{path.name}'"
        raise PictureError(found, remedy=f"Name a file that ends in {', '.join(FORMATS)}")
    size = f"a picture of {look.size[0]} by {look.size[1]} pixels"
    if look.size[0] < 800 or look.size[1] < 600:
        raise PictureError(f"{size} has no room for its legend", remedy="Ask for 800 by 600 or more")
    if max(look.size) > _LARGEST:
        raise PictureError(
            f"{size} is too large to draw",
            remedy=f"Ask for {_LARGEST} by {_LARGEST} at most; SVG and PDF can be enlarged without loss",
        )
    look.paper()
    if look.view.strip().lower() != "automatic":
        direction_from(look.view, np.array([0.0, 0.0, 1.0]))


def _drawn(scene: Scene, look: Look, finer: int) -> Sheet:
    size, paper = look.size, look.paper()
    toward = None if look.view.strip().lower() == "automatic" else direction_from(look.view, scene.up)
    require_offscreen()
    scene = thin(scene)
    bands = pressure_bands(scene) if look.pressure else None
    sheet = Sheet(size, paper)
    u = sheet.unit
    margin, panel = 30.0 * u, 540.0 * u
    top = size[1] - 96.0 * u
    _draw_heading(sheet, scene.title, look.pressure, margin)
    bottom = draw_footer(sheet, scene.notes, margin)
    # from below: scale bars, colour bar, view; the panel stands to the right of all
    left, right = round(margin), round(size[0] - panel - 2.0 * margin)
    scales = bottom + 100.0 * u
    base = round(scales + (90.0 * u if bands else 0.0))
    area = (left, base, right, round(top))

    ports = find_ports(scene)
    reach = reach_of(scene, ports)
    view = _view(scene, ports, reach, toward, u, (left + 76 * u, base + 66 * u, right - 76 * u, top - 60 * u))
    window, hidden = _looked_through(scene, bands, view)
    layers = _layers(scene, bands, window, hidden)
    fine = replace(view, middle=finer * view.middle, scale=finer * view.scale)
    within = (finer * area[0], finer * area[1], finer * area[2], finer * area[3])
    image = draw_surface(scene.points, scene.triangles, layers, fine, within, finer * 1.1 * u, paper)
    sheet.image(image, area)
    arrows = lay_out_arrows(scene, reach, view, u)
    draw_overlay(sheet, scene, ports, arrows, view, _covered(image[::finer, ::finer], paper), area)
    _draw_scales(sheet, view, reach, (left, bottom))
    if bands:
        draw_bar(sheet, bands, (left, scales, right, base))
    column = (size[0] - panel - margin, bottom, size[0] - margin, top)
    draw_legend(sheet, scene, arrows, column, bands, window, bool(hidden.any()))
    return sheet


def _covered(image: NDArray[np.uint8], paper: tuple[int, int, int] | None) -> NDArray[np.bool_]:
    """Return which pixels are not paper, first row at the bottom."""
    if paper is None:
        return np.asarray(image[::-1, :, 3] > _SPECK)
    return np.asarray((np.abs(image.astype(np.int16) - np.array(paper)) > _SPECK).any(axis=2)[::-1])


def _draw_heading(sheet: Sheet, title: str, with_pressure: bool, margin: float) -> None:
    u = sheet.unit
    width, height = sheet.size
    text = sheet.ruler.cut(title, 30 * u, width - 2 * margin, bold=True)
    sheet.text(margin, height - 50 * u, text, 30 * u, bold=True)
    what = "Gauge pressure on the surface, and the forces"
    if not with_pressure:
        what = "Forces on the control volume and on the hardware"
    sheet.text(margin, height - 80 * u, what, 19 * u, colour="#444444")


def _view(
    scene: Scene,
    ports: list[Port],
    reach: Reach,
    toward: NDArray[np.float64] | None,
    unit: float,
    area: tuple[float, float, float, float],
) -> View:
    """Choose the direction where none is asked for, and fit surface, arrows and markers into the area."""
    centroids = np.array([port.centroid for port in ports]).reshape(-1, 3)
    normals = np.array([port.normal for port in ports]).reshape(-1, 3)
    vectors = reach.tip - reach.tail
    lengths = np.linalg.norm(vectors, axis=1)
    forces = vectors[lengths > 0.0] / lengths[lengths > 0.0, None]
    size = float(np.linalg.norm(scene.points.max(axis=0) - scene.points.min(axis=0)))
    turned = np.linalg.norm(normals, axis=1) > 0.0
    if toward is None:
        toward = choose_direction(centroids, normals[turned], forces, size, scene.up)
    # the corners of the box would do, but would leave room for what is not there
    some = scene.points[:: max(1, len(scene.points) // _MOST_FIT_POINTS)]
    markers = np.array([pulled_in(scene, marker.at) for marker in scene.markers]).reshape(-1, 3)
    axes = axes_for(toward, scene.up)
    through = reach.through[np.isfinite(reach.through).all(axis=1)]
    shown = np.vstack([some, reach.tail, reach.tip, markers, through])
    view = fit(axes, shown, area)
    # once more, with the arrows that are enlarged or set aside where they really lie
    ends = [end for item in lay_out_arrows(scene, reach, view, unit) for end in (item.start, item.end)]
    return fit(axes, np.vstack([shown, *(view.lift(end) for end in ends)]), area) if ends else view


def _layers(scene: Scene, bands: Bands | None, window: float, hidden: NDArray[np.bool_]) -> list[Layer]:
    """Say how each group, or each kind of triangle, is drawn.

    `window` is the opacity of ports without a pressure, `hidden` marks
    triangles that are left out.
    """
    layers = []
    for number, (_, role) in enumerate(scene.groups):
        whole = np.flatnonzero(scene.group_of_triangle == number)
        members = whole[~hidden[whole]]
        tint = _WALL_TINT if role == "wall" else ROLE_TINTS[role]
        rim = None if role == "wall" else _darker(tint)
        if rim is not None and members.size < whole.size:
            layers.append(Layer(whole, np.array(tint, dtype=np.uint8), 0.0, rim=rim))
        if bands is not None and scene.pressure is not None:
            known = np.isfinite(scene.pressure[members])
            coloured, members = members[known], members[~known]
            if coloured.size:
                limits = (float(bands.levels[0]), float(bands.levels[-1]))
                values = scene.pressure[coloured]
                layers.append(Layer(coloured, bands.palette, 1.0, values=values, limits=limits, rim=rim))
            tint = _WALL_TINT
        if members.size:
            opacity = _WALL_OPACITY if role == "wall" or bands is not None else window
            layers.append(Layer(members, np.array(tint, dtype=np.uint8), opacity, rim=rim))
    return layers


def _looked_through(scene: Scene, bands: Bands | None, view: View) -> tuple[float, NDArray[np.bool_]]:
    """Return the opacity of ports, and the triangles that must go for the walls to be seen.

    Where ports make up most of the surface (a control surface around a body),
    they would hide the walls: they are drawn fainter, and in a picture of
    pressure those turned to the viewer are left out.
    """
    vectors = area_vectors(scene.points, scene.triangles)
    areas = np.linalg.norm(vectors, axis=1)
    port = np.array([role != "wall" for _, role in scene.groups])[scene.group_of_triangle]
    nothing = np.zeros(len(areas), dtype=bool)
    if float(areas[port].sum()) <= float(areas[~port].sum()) or port.all():
        return 0.75, nothing
    if bands is None or scene.pressure is None or not np.isfinite(scene.pressure[~port]).any():
        return 0.35, nothing
    return 0.35, port & (vectors @ view.axes[2] > 0.0)


def _darker(tint: tuple[int, int, int]) -> tuple[int, int, int]:
    red, green, blue = (int(0.55 * value) for value in tint)
    return red, green, blue


def _draw_scales(sheet: Sheet, view: View, reach: Reach, corner: tuple[float, float]) -> None:
    """Draw the axes and the two scale bars in the lower left corner."""
    u = sheet.unit
    x, y = corner
    sheet.axes_sign(view.axes, np.array([x + 52 * u, y + 42 * u]), 38.0 * u)
    metres = nice_step(230.0 * u / view.scale)
    sheet.bar(
        x + 150 * u,
        y + 40 * u,
        metres * view.scale,
        engineering(metres, "m", 1),
        "distance, square to the view",
    )
    if reach.metres_per_newton > 0.0:
        pixels = reach.metres_per_newton * view.scale
        newtons = nice_step(230.0 * u / pixels)
        sheet.bar(
            x + 480 * u,
            y + 40 * u,
            newtons * pixels,
            engineering(newtons, "N", 1),
            "force, by length of arrow in space",
        )
