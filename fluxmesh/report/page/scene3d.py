"""The turnable scene as plain data for the script of the page: numbers in one packed block, the rest as JSON.

The drawing library is plotly: its script comes with its wheel, makes no request, and lights and
hides groups without a new page. On the shipped manifold (47,040 triangles) it was tried beside
the export of pyvista through trame-pyvista. That gave 2.4 MB in 3.3 s, but needs fourteen further
packages with a server among them, asks a foreign host for icons when the page opens (five requests,
five errors in the console), and its viewer cannot hide a group, name one under the pointer, or
change colours. plotly's script is 4.8 MB, 2.0 MB once packed; its own export of the same surface is
9.5 MB in 0.5 s, and ours 1.4 MB beside the script. It loads from a file, offline, under a content policy that
forbids all requests.
"""

from __future__ import annotations

import base64
import gzip
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.report.page.arrows3d import solid_arrows
from fluxmesh.report.page.source import Figure
from fluxmesh.report.page.units import PageUnits
from fluxmesh.report.picture_arrows import ARROW_STYLES, lay_out_arrows, reach_of
from fluxmesh.report.picture_legend import ROLE_TINTS
from fluxmesh.report.picture_ports import Port, find_ports
from fluxmesh.report.picture_pressure import pressure_bands
from fluxmesh.report.picture_view import axes_for, choose_direction, fit
from fluxmesh.report.scene import Scene, merge_points, thin

__all__ = [
    "MOST_TRIANGLES",
    "Named",
    "PackedScene",
    "Traction",
    "drawing_script",
    "pack_scene",
    "tags_of",
    "thinned",
]

MOST_TRIANGLES: Final = 100_000
"""A surface with more triangles is coarsened for the scene."""

_WALL: Final = (214, 210, 202)
# Facets that turn by more than this angle in degrees keep an edge between them.
_CREASE: Final = 38.0

Array = NDArray[np.float64]
Traction = Callable[[NDArray[np.int64]], Array | None]
"""Gives the size of the viscous traction on triangles of a scene, Pa, from their numbers."""


@dataclass(frozen=True)
class Named:
    """A colour scale of the surface.

    Attributes
    ----------
    label : str
        What it shows.
    bands : tuple of (str, str)
        Colour as "#rrggbb", and the range of values with its unit, from the least on.
    """

    label: str
    bands: tuple[tuple[str, str], ...]


@dataclass(frozen=True)
class PackedScene:
    """The scene as the page holds it.

    Attributes
    ----------
    data : dict
        Ready for JSON.
    block : str
        Base64 of the gzipped words of four bytes that `data` points into.
    colours : mapping of str to Named
        Colour scales by name: ``pressure``, ``traction``.
    triangles : int
        How many are drawn.
    coarsened : bool
        Whether the surface has more.
    """

    data: dict[str, Any]
    block: str
    colours: Mapping[str, Named]
    triangles: int
    coarsened: bool


def drawing_script() -> str | None:
    """Return the script of the drawing library, or None where it is not installed."""
    try:
        from plotly.offline import get_plotlyjs
    except ImportError:
        return None
    return str(get_plotlyjs())


def tags_of(scene: Scene) -> list[str]:
    """Return the tag of each arrow, as in the still pictures.

    Parameters
    ----------
    scene : Scene
        With its arrows.
    """
    ports = find_ports(thin(scene, 20_000))
    reach = reach_of(scene, ports)
    view = fit(axes_for(np.array([1.0, 0.5, 0.4]), scene.up), scene.points[:1000], (0.0, 0.0, 1000.0, 1000.0))
    return [item.tag for item in lay_out_arrows(scene, reach, view, 1.0)]


def thinned(scene: Scene, most: int) -> tuple[Scene, NDArray[np.int64]]:
    """Coarsen a scene that has more triangles than wanted.

    Parameters
    ----------
    scene : Scene
        The scene.
    most : int
        Triangles to keep at most.

    Returns
    -------
    scene : Scene
        Its pressures those of the triangles that are left.
    kept : ndarray, shape (n_left,), int64
        Their numbers in the scene that was given.
    """
    count = len(scene.triangles)
    if count <= most:
        return scene, np.arange(count)
    # numbers in place of pressures come back as the numbers of the triangles that are left
    numbered = thin(replace(scene, pressure=np.arange(count, dtype=np.float64)), most)
    kept = np.asarray(numbered.pressure).astype(np.int64)
    extremes = scene.pressure_range
    if scene.pressure is None:
        return replace(numbered, pressure=None, pressure_range=extremes), kept
    if extremes is None and np.isfinite(scene.pressure).any():
        extremes = float(np.nanmin(scene.pressure)), float(np.nanmax(scene.pressure))
    return replace(numbered, pressure=scene.pressure[kept], pressure_range=extremes), kept


class _Block:
    """Words of four bytes, one behind another."""

    def __init__(self) -> None:
        self._parts: list[bytes] = []
        self._words = 0

    def put(self, values: NDArray[Any]) -> list[int]:
        """Add floats as float32, integers as uint32; return where they start, and how many they are."""
        flat = np.ascontiguousarray(values).ravel()
        packed = flat.astype("<f4") if flat.dtype.kind == "f" else flat.astype("<u4")
        place = [self._words, int(flat.size)]
        self._parts.append(packed.tobytes())
        self._words += int(flat.size)
        return place

    def text(self) -> str:
        """Return it packed."""
        return base64.b64encode(gzip.compress(b"".join(self._parts), 9, mtime=0)).decode("ascii")


def pack_scene(
    scene: Scene,
    units: PageUnits,
    entries: Mapping[str, Sequence[tuple[str, str]]],
    *,
    traction: Traction | None = None,
    most: int = MOST_TRIANGLES,
) -> PackedScene:
    """Return a scene as data for the script.

    Parameters
    ----------
    scene : Scene
        What to show.
    units : PageUnits
        Of the page, settled.
    entries : mapping of str to sequence of (str, str)
        What is said of each group: name and text.
    traction : callable, optional
        Gives the size of the viscous traction on triangles of the scene from their numbers, shape (n,):
        ndarray, shape (n,), float64, Pa, NaN where it is not known, or None.
    most : int, optional
        Triangles to show at most.

    Returns
    -------
    PackedScene
        Single precision: for drawing only.
    """
    tags = tags_of(scene)
    whole = len(scene.triangles)
    scene, kept = thinned(scene, most)
    ports = find_ports(scene)
    reach = reach_of(scene, ports)
    block = _Block()
    numbers = {port.name: port.number for port in ports}
    groups = [
        {
            "name": name,
            "role": role,
            "number": numbers.get(name, 0),
            "tint": list(_WALL if role == "wall" else ROLE_TINTS[role]),
            "entries": [list(pair) for pair in entries.get(name, ())],
        }
        for name, role in scene.groups
    ]
    fields: dict[str, Array] = {}
    for name, values in (("pressure", scene.pressure), ("traction", traction(kept) if traction else None)):
        if values is not None and np.isfinite(values).any():
            fields[name] = values
    pieces = _pieces(scene, fields, block)
    colours, scales = {}, {}
    for name, values in fields.items():
        told = {"pressure": "gauge pressure", "traction": "size of the viscous traction"}[name]
        extremes = scene.pressure_range if name == "pressure" else None
        bands = pressure_bands(replace(scene, pressure=values, pressure_range=extremes))
        paints = ["#{:02x}{:02x}{:02x}".format(*shade) for shade in bands.palette]
        scales[name] = {"levels": [float(bands.levels[0]), float(bands.levels[-1])], "colours": paints}
        spans = [_span(low, high, units) for low, high in zip(bands.levels[:-1], bands.levels[1:])]
        colours[name] = Named(told, tuple(zip(paints, spans)))
    solids = solid_arrows(scene, reach)
    arrows = []
    for tag, arrow, solid in zip(tags, scene.arrows, solids, strict=True):
        arrows.append(
            {
                "tag": tag,
                "kind": arrow.kind,
                "label": arrow.label,
                "body": arrow.body,
                "group": arrow.group,
                "colour": ARROW_STYLES[arrow.kind].colour,
                "size": _text(arrow.magnitude, units),
                "parts": [_text(float(part), units, arrow.magnitude) for part in arrow.vector],
                "points": block.put(solid.points),
                "triangles": block.put(solid.triangles),
                "tagAt": solid.outer.tolist(),
                "middle": (0.5 * (solid.tail + solid.tip)).tolist(),
                "tip": solid.tip.tolist(),
                "enlarged": solid.enlarged,
                "drawn": solid.drawn,
            }
        )
    ends = [end for solid in solids if solid.drawn for end in (solid.tail, solid.tip, solid.outer)]
    shown = np.vstack([scene.points, *(end[None] for end in ends)])
    order = [name for name, _ in scene.groups]
    toward = _toward(scene, ports, reach.tip - reach.tail)
    data = {
        "groups": groups,
        "pieces": pieces,
        "rims": [{"group": order.index(port.name), "points": block.put(rim)} for port in ports for rim in port.rims],
        "scales": scales,
        "arrows": arrows,
        "ports": [
            {"group": order.index(port.name), "number": port.number, "at": port.centroid.tolist()} for port in ports
        ],
        "metresPerNewton": reach.metres_per_newton,
        "force": {"symbol": units.si("force").symbol, "factor": units.si("force").factor},
        "length": {"symbol": units.si("length").symbol, "factor": units.si("length").factor},
        "markers": [{"label": mark.label, "kind": mark.kind, "at": mark.at.tolist()} for mark in scene.markers],
        "low": shown.min(axis=0).tolist(),
        "high": shown.max(axis=0).tolist(),
        "hull": _outermost(shown).tolist(),
        "toward": toward.tolist(),
        "up": (scene.up / np.linalg.norm(scene.up)).tolist(),
    }
    return PackedScene(data, block.text(), colours, len(scene.triangles), len(scene.triangles) < whole)


def _pieces(scene: Scene, fields: Mapping[str, Array], block: _Block) -> list[dict[str, Any]]:
    """Each group as one mesh for all triangles on which the same values are known."""
    points, triangles = merge_points(scene.points, scene.triangles)
    known = np.zeros(len(triangles), dtype=np.int64)
    for bit, values in enumerate(fields.values()):
        known += np.isfinite(values).astype(np.int64) << bit
    pieces = []
    for number in range(len(scene.groups)):
        of_group = scene.group_of_triangle == number
        for state in np.unique(known[of_group]):
            members = np.flatnonzero(of_group & (known == state))
            corners, count, source = _creased(points, triangles[members])
            piece: dict[str, Any] = {
                "group": number,
                "points": block.put(points[source]),
                "triangles": block.put(corners),
            }
            for bit, (name, values) in enumerate(fields.items()):
                if state >> bit & 1:
                    # the mean of the triangles around each corner
                    weights = np.repeat(values[members], 3)
                    share = np.bincount(corners.ravel(), minlength=count)
                    piece[name] = block.put(np.bincount(corners.ravel(), weights, minlength=count) / share)
            pieces.append(piece)
    return pieces


def _creased(points: Array, triangles: NDArray[np.int64]) -> tuple[NDArray[np.int64], int, NDArray[np.int64]]:
    """Give triangles that meet at an edge points of their own, so that light does not smooth the edge.

    Around a point, triangles whose normals lie within the crease angle of the mean there share it;
    the others go with those that face most nearly as they do, along the axes of coordinates.

    Returns
    -------
    corners : ndarray, shape (n, 3), int64
        On the new points.
    count : int
        How many there are.
    source : ndarray, shape (count,), int64
        The old point of each.
    """
    first, second, third = points[triangles.T]
    normals = np.cross(second - first, third - first)
    sizes = np.linalg.norm(normals, axis=1, keepdims=True)
    corner = triangles.ravel()
    used, local = np.unique(corner, return_inverse=True)
    sums = np.stack([np.bincount(local, np.repeat(normals[:, k], 3), minlength=used.size) for k in range(3)], axis=1)
    means = sums / np.maximum(np.linalg.norm(sums, axis=1, keepdims=True), np.finfo(np.float64).tiny)
    units = normals / np.maximum(sizes, np.finfo(np.float64).tiny)
    facing = np.repeat(units, 3, axis=0)
    smooth = (facing * means[local]).sum(axis=1) >= np.cos(np.radians(_CREASE))
    axis = np.abs(facing).argmax(axis=1)
    side = 1 + 2 * axis + (np.take_along_axis(facing, axis[:, None], axis=1)[:, 0] > 0.0)
    keys = local * 7 + np.where(smooth, 0, side)
    distinct, renumbered = np.unique(keys, return_inverse=True)
    return renumbered.reshape(-1, 3), int(distinct.size), used[distinct // 7]


def _outermost(points: Array) -> Array:
    """The points that lie farthest out in some direction, to fit a view to."""
    steps = np.linspace(0.0, np.pi, 13)[:, None], np.linspace(0.0, 2 * np.pi, 24, endpoint=False)[None, :]
    directions = np.stack(
        [np.sin(steps[0]) * np.cos(steps[1]), np.sin(steps[0]) * np.sin(steps[1]), np.cos(steps[0] + 0 * steps[1])],
        axis=-1,
    ).reshape(-1, 3)
    farthest = {int((points @ direction).argmax()) for direction in directions}
    return points[sorted(farthest)]


def _toward(scene: Scene, ports: Sequence[Port], vectors: Array) -> Array:
    """The direction to the viewer that shows ports and forces best, as in the still pictures."""
    lengths = np.linalg.norm(vectors, axis=1)
    forces = vectors[lengths > 0.0] / lengths[lengths > 0.0, None]
    normals = np.array([port.normal for port in ports]).reshape(-1, 3)
    centroids = np.array([port.centroid for port in ports]).reshape(-1, 3)
    size = float(np.linalg.norm(scene.points.max(axis=0) - scene.points.min(axis=0)))
    turned = np.linalg.norm(normals, axis=1) > 0.0
    return choose_direction(centroids, normals[turned], forces, size, scene.up)


def _text(value: float, units: PageUnits, size: float = 0.0) -> str:
    figure = Figure(value, "force", size=size)
    si = f"{figure.written(units)} {units.si('force').symbol}"
    us, unit = figure.written_us(units), units.us("force")
    return si if us is None or unit is None else f"{si} | {us} {unit.symbol}"


def _span(low: float, high: float, units: PageUnits) -> str:
    unit, us = units.si("pressure"), units.us("pressure")
    si = f"{unit.of(float(low)):.6g} to {unit.of(float(high)):.6g} {unit.symbol}".replace("-", "\u2212")
    if us is None:
        return si
    other = f"{us.of(float(low)):.4g} to {us.of(float(high)):.4g} {us.symbol}".replace("-", "\u2212")
    return f"{si} | {other}"
