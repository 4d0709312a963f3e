"""A light drawing of a scene for a notebook: SVG made of its triangles, without a graphics driver."""

from __future__ import annotations

from html import escape
from itertools import pairwise
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.report.picture_arrows import ARROW_STYLES, DrawnArrow, Reach, lay_out_arrows, reach_of
from fluxmesh.report.picture_labels import place_labels
from fluxmesh.report.picture_legend import ROLE_TINTS
from fluxmesh.report.picture_overlay import clear_place
from fluxmesh.report.picture_ports import Port, find_ports
from fluxmesh.report.picture_text import clean_text
from fluxmesh.report.picture_view import View, axes_for, choose_direction, fit
from fluxmesh.report.scene import Scene, area_vectors, in_words, thin

__all__ = ["scene_svg"]

_MOST_TRIANGLES: Final = 6000
_SIZE: Final = (640, 420)
_WALL: Final = (222, 219, 212)
# Of a font of 13 pixels: width of a letter at most, and height of a line.
_LETTER: Final = 8.5
_LINE: Final = 18.0


def scene_svg(scene: Scene) -> tuple[str, list[DrawnArrow]]:
    """Return a scene as one SVG element.

    Parameters
    ----------
    scene : Scene
        What to show; large surfaces are thinned for the drawing.

    Returns
    -------
    svg : str
        Self-contained, names are text. Walls are grey, ports have the tint of their role and a
        number, the arrows their tags.
    arrows : list of DrawnArrow
        The arrows with their tags, for a legend.
    """
    scene = thin(scene, _MOST_TRIANGLES)
    ports = find_ports(scene)
    reach = reach_of(scene, ports)
    width, height = _SIZE
    view = _view(scene, ports, reach)
    arrows = lay_out_arrows(scene, reach, view, 0.6)
    parts = [
        f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {width} {height}" width="{width}" role="img" '
        'style="max-width:100%;background:#fff" font-family="DejaVu Sans,Verdana,sans-serif" font-size="13">',
        f"<title>{_text(scene.title or 'Control surface')}</title><desc>{_text(in_words(scene))}</desc>",
        _triangles(scene, view),
        *(_arrow(item) for item in arrows if item.drawn),
        _labels(ports, [item for item in arrows if item.drawn], view),
        "</svg>",
    ]
    return "".join(parts), arrows


def _text(text: str) -> str:
    return escape(clean_text(text))


def _view(scene: Scene, ports: list[Port], reach: Reach) -> View:
    centroids = np.array([port.centroid for port in ports]).reshape(-1, 3)
    normals = np.array([port.normal for port in ports]).reshape(-1, 3)
    vectors = reach.tip - reach.tail
    lengths = np.linalg.norm(vectors, axis=1)
    forces = vectors[lengths > 0.0] / lengths[lengths > 0.0, None]
    size = float(np.linalg.norm(np.ptp(scene.points, axis=0)))
    turned = np.linalg.norm(normals, axis=1) > 0.0
    toward = choose_direction(centroids, normals[turned], forces, size, scene.up)
    shown = np.vstack([scene.points, reach.tail, reach.tip])
    return fit(axes_for(toward, scene.up), shown, (50.0, 40.0, _SIZE[0] - 50.0, _SIZE[1] - 40.0))


def _down(pixels: NDArray[np.float64]) -> NDArray[np.float64]:
    """Pixels with y down, as SVG counts."""
    return np.asarray(pixels * [1.0, -1.0] + [0.0, _SIZE[1]])


def _triangles(scene: Scene, view: View) -> str:
    """Triangles from the farthest to the nearest, shaded by how they face the viewer."""
    corners = scene.points[scene.triangles]
    depth = corners.mean(axis=1) @ view.axes[2]
    vectors = area_vectors(scene.points, scene.triangles)
    facing = np.abs(vectors @ view.axes[2]) / np.maximum(np.linalg.norm(vectors, axis=1), np.finfo(np.float64).tiny)
    shade = np.round((0.62 + 0.38 * facing) * 24.0) / 24.0  # in steps, so that neighbours share one path
    tints = np.array([_WALL if role == "wall" else ROLE_TINTS[role] for _, role in scene.groups], dtype=np.float64)
    colours = np.round(tints[scene.group_of_triangle] * shade[:, None]).astype(np.int64)
    flat = np.round(_down(view.project(corners)), 1)
    paths: list[str] = []
    last = ""
    for index in np.argsort(depth, kind="stable").tolist():
        fill = "#{:02x}{:02x}{:02x}".format(*colours[index])
        if fill != last:
            paths.append(f'{chr(34) + "/>" if last else ""}<path fill="{fill}" stroke="{fill}" d="')
            last = fill
        (ax, ay), (bx, by), (cx, cy) = flat[index].tolist()
        paths.append(f"M{ax:g} {ay:g}L{bx:g} {by:g}L{cx:g} {cy:g}z")
    return f'<g stroke-width=".6" stroke-linejoin="round">{"".join(paths)}"/></g>'


def _arrow(item: DrawnArrow) -> str:
    style = ARROW_STYLES[item.arrow.kind]
    start, end = _down(item.start), _down(item.end)
    if item.end_on:
        mark = "\u2022" if item.end_on > 0 else "\u00d7"
        ring = f'fill="#fff" stroke="{style.colour}" stroke-width="2.5"'
        return (
            f'<circle cx="{end[0]:.1f}" cy="{end[1]:.1f}" r="8" {ring}/>'
            f'<text x="{end[0]:.1f}" y="{end[1] + 4.5:.1f}" text-anchor="middle">{mark}</text>'
        )
    ahead = (end - start) / np.linalg.norm(end - start)
    side, head = np.array([-ahead[1], ahead[0]]), 0.6 * style.head_length
    neck = end - ahead * head
    barbs = [end, neck + side * 0.3 * style.head_width, neck - side * 0.3 * style.head_width]
    corners = " ".join(f"{x:.1f},{y:.1f}" for x, y in barbs)
    ends = f'x1="{start[0]:.1f}" y1="{start[1]:.1f}" x2="{neck[0]:.1f}" y2="{neck[1]:.1f}"'
    width = 0.55 * style.width
    dashes = ' stroke-dasharray="7 3"' if style.shaft == "dashed" else ""
    return (
        f'<line {ends} stroke="#fff" stroke-width="{width + 3:.1f}"/>'
        f'<polygon points="{corners}" fill="{style.colour}" stroke="#fff" stroke-width="1.2"/>'
        f'<line {ends} stroke="{style.colour}" stroke-width="{width:.1f}"{dashes}/>'
    )


def _labels(ports: list[Port], arrows: list[DrawnArrow], view: View) -> str:
    """Tags of arrows and numbers with names of ports, none over another or over an arrow."""
    words = [item.tag for item in arrows]
    wanted = [item.end - item.at for item in arrows]
    rims = [view.project(rim) for port in ports for rim in port.rims]
    heart = np.array(_SIZE) / 2.0
    anchors = [max((item.start, item.end), key=lambda end: float(np.linalg.norm(end - item.at))) for item in arrows]
    for port in ports:
        name = clean_text(port.name)
        words.append(f"{port.number} {name if len(name) <= 22 else f'{name[:12]}…{name[-9:]}'}")
        anchors.append(clear_place(port, view, rims, view.project(port.centroid)))
        wanted.append(anchors[-1] - heart)
    if not words:
        return ""
    sizes = np.array([[_LETTER * len(word) + 6.0, _LINE] for word in words])
    lines = [np.concatenate([item.start, item.end]) for item in arrows]
    lines += [np.concatenate(pair) for rim in rims for pair in pairwise(rim[:: max(1, len(rim) // 8)])]
    places = place_labels(
        np.array(anchors),
        sizes,
        (2.0, 2.0, _SIZE[0] - 2.0, _SIZE[1] - 2.0),
        wanted=np.array(wanted),
        lines=np.array(lines).reshape(-1, 4),
        gap=2.0,
    )
    parts = []
    for word, anchor, place in zip(words, anchors, places):
        if not np.isfinite(place).all():
            continue
        (x0, y1), (x1, y0) = _down(place.reshape(2, 2)).tolist()
        near = _down(np.clip(anchor, place[:2], place[2:]))
        here = _down(anchor)
        parts.append(
            f'<line x1="{here[0]:.1f}" y1="{here[1]:.1f}" x2="{near[0]:.1f}" y2="{near[1]:.1f}" stroke="#444"/>'
            f'<rect x="{x0:.1f}" y="{y0:.1f}" width="{x1 - x0:.1f}" height="{y1 - y0:.1f}" fill="#fff" '
            f'fill-opacity=".9" stroke="#888"/><text x="{(x0 + x1) / 2:.1f}" y="{(y0 + y1) / 2 + 4.6:.1f}" '
            f'text-anchor="middle" fill="#222">{_text(word)}</text>'
        )
    return "".join(parts)
