"""Where each force arrow goes: tagged, to scale, and beside its neighbours, not over them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluxmesh.report.picture_ports import Port
from fluxmesh.report.picture_view import View
from fluxmesh.report.scene import ARROW_KINDS, Arrow, Scene

__all__ = ["ARROW_STYLES", "ArrowStyle", "DrawnArrow", "Reach", "chained", "lay_out_arrows", "pulled_in", "reach_of"]

# The longest arrow, as a share of the diagonal of the surface's box.
_LONGEST_SHARE = 0.34
# A force below this share of the largest is named in the legend but not drawn.
_LEAST_SHARE = 1e-6
# Points farther than this from the middle of the surface's box, in diagonals, may not shrink the picture.
_FARTHEST = 0.75
# Room around a marker that arrows keep clear of, in pixels of a picture 1600 wide.
_MARKER_ROOM = 12.0
# An arrow steps aside at most so many times.
_MOST_STEPS = 8
# An arrow that keeps less than this share of its length in the picture becomes a point or a cross in a ring.
_END_ON = 0.12


# Two ends and half a width, in pixels.
_Bar = tuple[NDArray[np.float64], NDArray[np.float64], float]


@dataclass(frozen=True)
class ArrowStyle:
    """Form and colour of a kind of arrow.

    Attributes
    ----------
    letter : str
        First letter of the tags.
    colour : str
        Fill, from the palette of Okabe and Ito.
    shaft : str
        ``solid``, ``dashed``, ``double``, ``block`` or ``hatched``.
    width, head_width, head_length : float
        In pixels of a picture 1600 wide.
    """

    letter: str
    colour: str
    shaft: str
    width: float
    head_width: float
    head_length: float


# Palette: Okabe and Ito, "Color Universal Design" (2002, revised 2008; from memory).
# The forms differ as well, for print in grey.
ARROW_STYLES = {
    "pressure": ArrowStyle("P", "#0072B2", "solid", 8.0, 24.0, 27.0),
    "momentum": ArrowStyle("M", "#D55E00", "dashed", 7.0, 26.0, 24.0),
    "weight": ArrowStyle("W", "#000000", "double", 8.0, 22.0, 22.0),
    "resultant": ArrowStyle("L", "#E69F00", "block", 15.0, 36.0, 34.0),
    "reaction": ArrowStyle("R", "#CC79A7", "hatched", 15.0, 36.0, 34.0),
}


@dataclass(frozen=True, eq=False)
class DrawnArrow:
    """An arrow as it lies in the picture.

    Attributes
    ----------
    tag : str
        Short name beside the arrow and in the legend.
    arrow : Arrow
        What it stands for.
    start, end : ndarray, shape (2,), float64
        Pixels of tail and tip.
    at : ndarray, shape (2,), float64
        Pixel of the point of application.
    end_on : int
        1 when it points at the viewer, -1 when away, 0 when seen from the side.
    enlarged : bool
        Drawn longer than the scale says, to be seen.
    moved : bool
        The point of application is too far off to be shown.
    drawn : bool
        False for a force too small to be drawn.
    line : ndarray, shape (2, 2), float64, or None
        Two pixels on the line of action, where that is known and near.
    """

    tag: str
    arrow: Arrow
    start: NDArray[np.float64]
    end: NDArray[np.float64]
    at: NDArray[np.float64]
    end_on: int
    enlarged: bool
    moved: bool
    drawn: bool
    line: NDArray[np.float64] | None


@dataclass(frozen=True, eq=False)
class Reach:
    """Arrows in space, before a view is chosen.

    Attributes
    ----------
    metres_per_newton : float
        The scale of the arrows.
    at : ndarray, shape (n, 3), float64
        Points of application, moved near the surface where they were far off.
    tail, tip : ndarray, shape (n, 3), float64
        Ends at that scale in metres.
    moved : ndarray, shape (n,), bool
        Whether the point had to be moved.
    through : ndarray, shape (n, 3), float64
        A point of the line of action; NaN where that is not known, or too far off to be shown.
    """

    metres_per_newton: float
    at: NDArray[np.float64]
    tail: NDArray[np.float64]
    tip: NDArray[np.float64]
    moved: NDArray[np.bool_]
    through: NDArray[np.float64]


def pulled_in(scene: Scene, point: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the point itself, or one towards it where it is too far from the surface to be shown."""
    low, high = scene.points.min(axis=0), scene.points.max(axis=0)
    middle, far = 0.5 * (low + high), _FARTHEST * float(np.linalg.norm(high - low))
    away = point - middle
    distance = float(np.linalg.norm(away))
    return point if distance <= far else middle + away * (far / distance)


def reach_of(scene: Scene, ports: Sequence[Port]) -> Reach:
    """Give the arrows a scale and set each in space.

    At a port, a force into the volume ends at the port and a force out of it
    starts there, so that neither crosses the surface. A weight hangs from its
    centre. A resultant starts on its line of action: at its own point, or,
    where that is far off, at the point of the line nearest to the surface. A
    reaction ends at the anchor when it pushes towards the surface, and starts
    there when it pulls.
    """
    low, high = scene.points.min(axis=0), scene.points.max(axis=0)
    middle, size = 0.5 * (low + high), float(np.linalg.norm(high - low))
    largest = max((arrow.magnitude for arrow in scene.arrows), default=0.0)
    scale = _LONGEST_SHARE * size / largest if largest > 0.0 else 0.0
    facing = {port.name: port.normal for port in ports}
    points, tails, moved, through = [], [], [], []
    for arrow in scene.arrows:
        at, vector = arrow.at, arrow.vector
        if arrow.kind == "resultant" and arrow.magnitude > 0.0:
            unit = vector / arrow.magnitude
            if float(np.linalg.norm(at - middle)) > 0.5 * size:
                at = at + ((middle - at) @ unit) * unit
        shown = pulled_in(scene, at)
        moved.append(shown is not at)
        points.append(shown)
        line = arrow.through
        through.append(line if line is not None and pulled_in(scene, line) is line else np.full(3, np.nan))
        if arrow.kind == "reaction":
            arrives = float(vector @ (middle - shown)) > 0.0
        else:
            arrives = arrow.group in facing and float(vector @ facing[arrow.group]) < 0.0
        tails.append(shown - scale * vector if arrives else shown)
    tail = np.array(tails).reshape(-1, 3)
    vectors = np.array([arrow.vector for arrow in scene.arrows]).reshape(-1, 3)
    return Reach(
        metres_per_newton=scale,
        at=np.array(points).reshape(-1, 3),
        tail=tail,
        tip=tail + scale * vectors,
        moved=np.array(moved, dtype=bool),
        through=np.array(through).reshape(-1, 3),
    )


def _tags(scene: Scene) -> list[str]:
    """Return a tag an arrow: letter of the kind, number of the port, or a running number."""
    ports = [name for name, role in scene.groups if role != "wall"]
    tags: list[str] = []
    for arrow in scene.arrows:
        letter = ARROW_STYLES[arrow.kind].letter
        if arrow.group in ports:
            tag = f"{letter}{ports.index(arrow.group) + 1}"
        elif sum(other.kind == arrow.kind for other in scene.arrows) == 1:
            tag = letter
        else:
            tag = f"{letter}{1 + sum(t.startswith(letter) for t in tags)}"
        while tag in tags:
            tag += "'"
        tags.append(tag)
    return tags


def chained(arrows: Sequence[DrawnArrow]) -> DrawnArrow | None:
    """Return the arrow whose line of action the picture shows: the reaction, or else the load, where they are drawn."""
    for kind in ("reaction", "resultant"):
        for item in arrows:
            if item.drawn and item.arrow.kind == kind:
                return item
    return None


def lay_out_arrows(scene: Scene, reach: Reach, view: View, unit: float) -> list[DrawnArrow]:
    """Place all arrows in the picture.

    Parameters
    ----------
    scene : Scene
        What is drawn.
    reach : Reach
        From `reach_of`.
    view : View
        The projection.
    unit : float
        Pixels of this picture for one of a picture 1600 wide.

    Returns
    -------
    list of DrawnArrow
        In the order of the scene's arrows. Arrows that would lie over one
        another, or over a marker that is not their own place, are shifted
        sideways by as little as will part them.
    """
    if not scene.arrows:
        return []
    tags = _tags(scene)
    largest = max(arrow.magnitude for arrow in scene.arrows)
    start, end, at = view.project(reach.tail), view.project(reach.tip), view.project(reach.at)
    drawn: dict[int, DrawnArrow] = {}
    placed: list[_Bar] = []
    room = _MARKER_ROOM * unit
    markers = [view.project(pulled_in(scene, marker.at)) for marker in scene.markers]
    # ports first, then long before short: what is placed first stays at its own point
    order = sorted(
        range(len(tags)),
        key=lambda i: (ARROW_KINDS.index(scene.arrows[i].kind) > 1, -scene.arrows[i].magnitude, i),
    )
    for i in order:
        arrow, style = scene.arrows[i], ARROW_STYLES[scene.arrows[i].kind]
        visible = largest > 0.0 and arrow.magnitude >= _LEAST_SHARE * largest
        tail, tip, end_on, enlarged = start[i], end[i], 0, False
        if visible:
            true = arrow.magnitude * reach.metres_per_newton * view.scale
            direction = view.axes @ (arrow.vector / arrow.magnitude)
            least = (style.head_length + 14.0) * unit
            fixed_tip = not np.array_equal(reach.at[i], reach.tail[i])
            if float(np.linalg.norm(direction[:2])) < _END_ON:
                end_on = 1 if direction[2] > 0.0 else -1
                tail = tip = at[i]
            elif true * float(np.linalg.norm(direction[:2])) < least:
                # foreshortening alone is no enlargement: only say so when the true length is too short
                enlarged = true < least
                step = direction[:2] / np.linalg.norm(direction[:2]) * least
                tail, tip = (at[i] - step, at[i]) if fixed_tip else (at[i], at[i] + step)
            strange = [(one, one, room) for one in markers if float(np.linalg.norm(one - at[i])) > 2.0 * room]
            shift = _sidestep(tail, tip, 0.5 * style.head_width * unit, [*placed, *strange], 6.0 * unit)
            tail, tip = tail + shift, tip + shift
            placed.append((tail, tip, 0.5 * style.head_width * unit))
        line = None
        if visible and not end_on and np.isfinite(reach.through[i]).all():
            on_it = view.project(reach.through[i])
            line = np.array([on_it, on_it + (tip - tail)])
        drawn[i] = DrawnArrow(tags[i], arrow, tail, tip, at[i], end_on, enlarged, bool(reach.moved[i]), visible, line)
    return [drawn[i] for i in range(len(tags))]


def _sidestep(
    tail: NDArray[np.float64],
    tip: NDArray[np.float64],
    half: float,
    placed: list[_Bar],
    gap: float,
) -> NDArray[np.float64]:
    """Return the smallest shift square to an arrow that frees it from those placed before."""
    length = float(np.linalg.norm(tip - tail))
    side = np.array([1.0, 0.0]) if length == 0.0 else np.array([tail[1] - tip[1], tip[0] - tail[0]]) / length
    stations = np.linspace(0.0, 1.0, 25)[:, None]
    best, least = np.zeros(2), np.inf
    # whatever lies farther off than the widest shift reaches cannot be in the way
    low, high = np.minimum(tail, tip), np.maximum(tail, tip)
    widest = half + gap + _MOST_STEPS * 0.7 * (half + gap)
    placed = [
        bar
        for bar in placed
        if (np.minimum(bar[0], bar[1]) < high + widest + bar[2]).all()
        and (np.maximum(bar[0], bar[1]) > low - widest - bar[2]).all()
    ]
    for step in range(_MOST_STEPS + 1):
        for sign in (1.0, -1.0) if step else (1.0,):
            shift = side * (sign * step * (half + gap) * 0.7)
            mine = tail + shift + stations * (tip - tail)
            cost = 0.02 * step
            for other_tail, other_tip, other_half in placed:
                reach = half + other_half + gap
                theirs = other_tail + stations * (other_tip - other_tail)
                away = np.linalg.norm(mine[:, None] - theirs[None, :], axis=-1)
                # Shares of each arrow that the other covers: a crossing costs little, lying alongside much.
                cost += float((away.min(axis=1) < reach).mean()) + float((away.min(axis=0) < reach).mean())
            if cost < least - 1e-9:
                best, least = shift, cost
    return best
