"""What is laid over the surface: lines of action, arrows, markers, and labels with leader lines."""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from fluxmesh.report.picture_arrows import ARROW_STYLES, DrawnArrow, chained, pulled_in
from fluxmesh.report.picture_labels import place_labels
from fluxmesh.report.picture_ports import Port
from fluxmesh.report.picture_sheet import Sheet
from fluxmesh.report.picture_text import clean_text
from fluxmesh.report.picture_view import View
from fluxmesh.report.scene import Scene

__all__ = ["clear_place", "draw_overlay"]

_TEXT = 18.0
_WIDEST_LABEL = 260.0
# With more ports than this, labels leave out the role: the tint tells it.
_MANY_PORTS = 8


@dataclass(frozen=True, eq=False)
class _Label:
    text: str
    anchor: NDArray[np.float64]
    wanted: NDArray[np.float64]
    size: NDArray[np.float64]
    bold: bool
    edge: str
    # what the label names, where that is more than its anchor: a leader may end anywhere on it
    extent: NDArray[np.float64] | None = None


def draw_overlay(
    sheet: Sheet,
    scene: Scene,
    ports: list[Port],
    arrows: list[DrawnArrow],
    view: View,
    busy: NDArray[np.bool_],
    area: tuple[float, float, float, float],
) -> None:
    """Draw arrows, markers and labels over the image of the surface.

    Parameters
    ----------
    sheet : Sheet
        The sheet that already holds the image.
    scene : Scene
        What is shown.
    ports : list of Port
        Its ports.
    arrows : list of DrawnArrow
        From `lay_out_arrows`.
    view : View
        The projection of the image.
    busy : ndarray, shape (height, width), bool
        Pixels of the area that the surface covers, first row at the bottom.
    area : tuple of float
        Left, bottom, right, top that all must stay in.
    """
    u = sheet.unit
    for port in ports:
        # the rim of a port on the far side shows through as a broken line, as in any technical drawing
        if float(port.normal @ view.axes[2]) < 0.0:
            for rim in port.rims:
                sheet.line(view.project(rim), 2.0 * u, dashes=(9 * u, 5 * u), halo=2.0 * u)
    shown = [item for item in arrows if item.drawn]
    chain = chained(arrows)
    line = None if chain is None or chain.line is None else _across(chain.line, sheet.size)
    if line is not None:
        dashes = (16 * u, 4 * u, 3 * u, 4 * u)
        sheet.line(line.reshape(2, 2), 1.6 * u, colour="#333333", dashes=dashes, halo=2.0 * u, clip=area)
    for item in shown:
        if not item.end_on:
            foot = _nearest_on(item.at, item.start, item.end)
            if float(np.linalg.norm(foot - item.at)) > 5.0 * u:
                sheet.line([item.at, foot], 1.5 * u, colour="#444444", dashes=(2 * u, 3 * u))
    # long ones first, so that a short one lies on top
    for item in sorted(shown, key=lambda item: -float(np.linalg.norm(item.end - item.start))):
        style = ARROW_STYLES[item.arrow.kind]
        if item.end_on:
            sheet.arrow_end_on(style, item.start, item.end_on > 0)
        else:
            sheet.arrow(style, item.start, item.end)
    markers = [(marker, view.project(pulled_in(scene, marker.at))) for marker in scene.markers]
    for marker, at in markers:
        sheet.marker(marker.kind, at)

    labels = [_tag_label(sheet, item) for item in shown]
    heart = view.project(0.5 * (scene.points.min(axis=0) + scene.points.max(axis=0)))
    rims = [view.project(rim) for port in ports for rim in port.rims]
    labels += [_port_label(sheet, port, view, heart, rims, len(ports) <= _MANY_PORTS) for port in ports]
    for marker, at in markers:
        far = pulled_in(scene, marker.at) is not marker.at
        text = f"{marker.label} (farther out this way)" if far else marker.label
        labels.append(_label(sheet, text, at, np.zeros(2), edge="#bbbbbb"))
    r = 12.0 * u
    boxes = [np.concatenate([at - r, at + r]) for _, at in markers]
    # arrows stay free
    boxes += [box for item in shown for box in _covering(item, u)]
    lines = [line for item in shown for line in _outline(item, u)]
    lines += [line for port in ports for line in _chords(port, view)]
    lines += [] if line is None else [line]
    _draw_labels(sheet, labels, boxes, lines, busy, area)


def _across(line: NDArray[np.float64], size: tuple[int, int]) -> NDArray[np.float64]:
    """Return the ends, shape (4,), of a line through two pixels that runs across the whole sheet."""
    ahead = (line[1] - line[0]) / np.linalg.norm(line[1] - line[0])
    reach = float(np.hypot(*size))
    return np.concatenate([line[0] - reach * ahead, line[0] + reach * ahead])


def _nearest_on(
    point: NDArray[np.float64], start: NDArray[np.float64], end: NDArray[np.float64]
) -> NDArray[np.float64]:
    step = end - start
    share = float(np.clip((point - start) @ step / (step @ step), 0.0, 1.0))
    return start + share * step


def _covering(item: DrawnArrow, unit: float) -> list[NDArray[np.float64]]:
    """Return small rectangles that cover an arrow."""
    style = ARROW_STYLES[item.arrow.kind]
    if item.end_on:
        half = 0.5 * style.head_width * unit
        return [np.concatenate([item.start - half, item.start + half])]
    length = float(np.linalg.norm(item.end - item.start))
    ahead = (item.end - item.start) / length
    half, tall = 0.5 * style.width * unit, 0.4 * style.head_width * unit
    stations = np.linspace(0.0, length, math.ceil(length / (2.0 * half)) + 1)
    boxes = [np.concatenate([at - half, at + half]) for at in item.start + stations[:, None] * ahead]
    middle = item.end - 0.5 * style.head_length * unit * ahead
    return [*boxes, np.concatenate([middle - tall, middle + tall])]


def _outline(item: DrawnArrow, unit: float) -> list[NDArray[np.float64]]:
    """Return the middle and both sides of an arrow as lines that labels should not cover."""
    half = 0.5 * ARROW_STYLES[item.arrow.kind].head_width * unit
    if item.end_on:
        return [np.concatenate([item.start - half, item.start + half])]
    ahead = (item.end - item.start) / np.linalg.norm(item.end - item.start)
    side = half * np.array([-ahead[1], ahead[0]])
    return [np.concatenate([item.start + s * side, item.end + s * side]) for s in (0.0, 1.0, -1.0)]


def _label(
    sheet: Sheet,
    text: str,
    anchor: NDArray[np.float64],
    wanted: NDArray[np.float64],
    *,
    bold: bool = False,
    edge: str,
    extent: NDArray[np.float64] | None = None,
) -> _Label:
    u = sheet.unit
    text = sheet.ruler.cut(text, _TEXT * u, _WIDEST_LABEL * u, bold)
    size = np.array([sheet.ruler.width(text, _TEXT * u, bold) + 12 * u, _TEXT * u + 8 * u])
    return _Label(text, anchor, wanted, size, bold, edge, extent)


def _tag_label(sheet: Sheet, item: DrawnArrow) -> _Label:
    """Make the tag of an arrow, at the end that is farther from its point of application."""
    ends = (item.start, item.end)
    free = max(ends, key=lambda end: float(np.linalg.norm(end - item.at)))
    other = ends[0] if free is ends[1] else ends[1]
    mark = "†" if item.enlarged else ""
    edge = ARROW_STYLES[item.arrow.kind].colour
    extent = np.linspace(item.start, item.end, 9)
    return _label(sheet, item.tag + mark, free, free - other, bold=True, edge=edge, extent=extent)


def _port_label(
    sheet: Sheet,
    port: Port,
    view: View,
    heart: NDArray[np.float64],
    rims: list[NDArray[np.float64]],
    with_role: bool,
) -> _Label:
    """Make number, name and role of a port, anchored inside of its rim on the side away from the middle."""
    u = sheet.unit
    middle = view.project(port.centroid)
    wanted = middle - heart
    anchor = middle
    if not port.normal.any() or (len(port.facing) and float((port.facing @ port.normal).min()) < 0.5):
        # a group that is not one plane: its outline encloses places that are none of its own
        anchor, wanted = clear_place(port, view, rims, middle), np.zeros(2)
    elif port.rims:
        rim = view.project(np.vstack(port.rims))
        # of the port's outline the part that lies outward, but not where an arrow along the normal would lie
        normal = view.axes[:2] @ port.normal
        sideways = np.array([-normal[1], normal[0]])
        sideways *= 1.0 if float(sideways @ wanted) >= 0.0 else -1.0
        outward = wanted / max(float(np.linalg.norm(wanted)), 1e-9) + 2.0 * sideways
        anchor = middle + 0.75 * (rim[int(np.argmax(rim @ outward))] - middle)
        wanted = outward
    role = f" · {port.role}"
    room = (_WIDEST_LABEL - 30.0) * u
    # a long name needs the room of the role more
    if not with_role or sheet.ruler.width(clean_text(port.name) + role, _TEXT * u) > room:
        role = ""
    short = sheet.ruler.shorten(port.name, _TEXT * u, room - sheet.ruler.width(role, _TEXT * u))
    return _label(sheet, f"{port.number} {short}{role}", anchor, wanted, edge="#888888")


def clear_place(
    port: Port, view: View, rims: list[NDArray[np.float64]], middle: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return the pixel of a port that is turned to the viewer and lies farthest from all rims.

    Parameters
    ----------
    port : Port
        The port.
    view : View
        The projection.
    rims : list of ndarray, shape (n, 2), float64
        Pixels of the rims of all ports.
    middle : ndarray, shape (2,), float64
        Pixel to take where there is no better.
    """
    turned = port.facing @ view.axes[2] > 0.05
    own = view.project(port.places[turned] if turned.any() else port.places)
    if not len(own):
        return middle
    if not rims:
        return np.asarray(own[int(np.argmin(np.linalg.norm(own - middle, axis=1)))])
    lines = np.vstack([rim[:: max(1, len(rim) // 100)] for rim in rims])
    clear = np.linalg.norm(own[:, None] - lines[None], axis=-1).min(axis=1)
    return np.asarray(own[int(np.argmax(clear))])


def _chords(port: Port, view: View) -> list[NDArray[np.float64]]:
    """Return lines across a port and along its rim that labels should not cover."""
    lines = []
    for rim in port.rims:
        stations = view.project(rim[np.linspace(0, len(rim) - 1, 9).astype(int)])
        lines += [np.concatenate(pair) for pair in pairwise(stations)]
        lines += [np.concatenate([stations[0], stations[4]]), np.concatenate([stations[2], stations[6]])]
    return lines


def _draw_labels(
    sheet: Sheet,
    labels: list[_Label],
    boxes: list[NDArray[np.float64]],
    lines: list[NDArray[np.float64]],
    busy: NDArray[np.bool_],
    area: tuple[float, float, float, float],
) -> None:
    if not labels:
        return
    u = sheet.unit
    places = place_labels(
        np.array([label.anchor for label in labels]),
        np.array([label.size for label in labels]),
        area,
        wanted=np.array([label.wanted for label in labels]),
        boxes=np.array(boxes).reshape(-1, 4),
        lines=np.array(lines).reshape(-1, 4),
        busy=busy,
        gap=4.0 * u,
    )
    for label, place in zip(labels, places):
        if not np.isfinite(place).all():
            continue
        ends = label.anchor[None] if label.extent is None else label.extent
        nears = np.clip(ends, place[:2], place[2:])
        shortest = int(np.argmin(np.linalg.norm(nears - ends, axis=1)))
        end, near = ends[shortest], nears[shortest]
        if float(np.linalg.norm(near - end)) > (3.0 if label.extent is None else 20.0) * u:
            sheet.line([end, near], 1.5 * u, colour="#444444", halo=2.5 * u)
            sheet.disc(end, 2.6 * u, "#444444", edge="white", width=1.0 * u)
    for label, place in zip(labels, places):
        if np.isfinite(place).all():
            sheet.box(place, fill=(1.0, 1.0, 1.0, 0.9), edge=label.edge, width=2.0 * u)
            middle = 0.5 * (place[0] + place[2])
            baseline = place[1] + 0.5 * (place[3] - place[1]) - 0.36 * _TEXT * u
            sheet.text(middle, baseline, label.text, _TEXT * u, bold=label.bold, across="center")
