"""The shape of the manifold and its tetrahedra: a junction block with three bent, tapering arms.

Every block is a structured lattice of hexahedra, each cut into six tetrahedra
whose diagonals mirror from cell to cell. The lattice is then mapped: the
junction bulges, each arm follows a curved axis while its section turns from the
rectangle of the junction into a rounded bore. Section planes stay planar, so the
ports do. The mapping does not depend on the mesh: finer lattices approach one shape.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import permutations

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import RegularGridInterpolator

__all__ = ["ARMS", "INLET", "WALL_TAG", "Arm", "Bend", "Lattice", "build_lattice", "carry_over", "map_points"]

Array = NDArray[np.float64]

MILLIMETRE = 1e-3
JUNCTION_HALF_SIZE = np.array([17.0, 15.0, 15.0]) * MILLIMETRE
JUNCTION_BULGE = 0.22  # of the half size, at the middle of the closed sides
JUNCTION_CENTRE = np.array([62.0, 8.0, 48.0]) * MILLIMETRE  # from the origin, the foot of the block's bracket


@dataclass(frozen=True)
class Bend:
    """A smooth bend of the axis between two fractions of the arm's length."""

    start: float
    end: float
    angle: float  # rad, in total
    toward: tuple[float, float]  # direction in the section's own axes


@dataclass(frozen=True)
class Arm:
    """One arm: where it leaves the junction, how long it is, how it bends and tapers.

    ``leaves`` is the lattice axis (0 to 2) and side (-1 or +1); ``half_section``
    the half widths of the rounded port; ``taper`` the fraction of the length over
    which the section changes; ``roundness`` 1 for an ellipse, 0 for a rectangle;
    ``turn`` the angle (rad) by which the section turns about the axis.
    """

    name: str
    tag: int
    leaves: tuple[int, int]
    length: float
    half_section: tuple[float, float]
    taper: float
    roundness: float
    turn: float
    bends: tuple[Bend, ...]


ARMS = (
    Arm(
        name="feed",
        tag=1,
        leaves=(0, -1),
        length=50 * MILLIMETRE,
        half_section=(15 * MILLIMETRE, 15 * MILLIMETRE),
        taper=0.6,
        roundness=1.0,
        turn=0.0,
        bends=(Bend(0.15, 0.75, 0.45, (0.3, -1.0)),),
    ),
    Arm(
        name="spindle",
        tag=2,
        leaves=(2, 1),
        length=70 * MILLIMETRE,
        half_section=(10.5 * MILLIMETRE, 10.5 * MILLIMETRE),
        taper=0.7,
        roundness=1.0,
        turn=0.0,
        bends=(Bend(0.05, 0.45, 0.45, (1.0, 0.6)), Bend(0.4, 0.9, 0.5, (0.2, 1.0))),
    ),
    Arm(
        name="gallery",
        tag=3,
        leaves=(0, 1),
        length=85 * MILLIMETRE,
        half_section=(15 * MILLIMETRE, 9.5 * MILLIMETRE),
        taper=0.8,
        roundness=0.75,
        turn=0.5,
        bends=(Bend(0.0, 0.5, 0.85, (-1.0, -0.35)), Bend(0.4, 0.9, 0.55, (0.1, -1.0))),
    ),
)
INLET = ARMS[0]
WALL_TAG = 4


@dataclass(frozen=True)
class Lattice:
    """Tetrahedra with the lattice coordinates of their corners.

    Attributes
    ----------
    cells : int
        Hexahedra across the junction and across each arm (even).
    layers : dict of str to int
        Hexahedra along each arm (even).
    nodes : ndarray, shape (n_nodes, 3), int64
        Lattice coordinates; the junction runs from 0 to ``cells``.
    tetrahedra : ndarray, shape (n_tetrahedra, 4), int64
        Node indices.
    """

    cells: int
    layers: dict[str, int]
    nodes: NDArray[np.int64]
    tetrahedra: NDArray[np.int64]


def build_lattice(cells: int) -> Lattice:
    """Lay the lattice of hexahedra through all blocks and cut it into tetrahedra.

    Each hexahedron is cut along the paths from its all-even corner to its all-odd
    corner. Block boundaries lie at even coordinates, so every tetrahedron has a
    corner inside the fluid: the Taylor-Hood pair needs that (D. Boffi, "Three-dimensional
    finite element methods for the Stokes problem", SIAM J. Numer. Anal. 34, 1997).
    """
    if cells % 2 or cells < 2:
        raise SystemExit(f"cells across must be even and positive, not {cells}")
    layers = {arm.name: _layers(arm, cells) for arm in ARMS}
    corners = [_box(np.zeros(3, int), np.full(3, cells))]
    for arm in ARMS:
        axis, side = arm.leaves
        low, high = np.zeros(3, int), np.full(3, cells)
        low[axis], high[axis] = (cells, cells + layers[arm.name]) if side > 0 else (-layers[arm.name], 0)
        corners.append(_box(low, high))
    corner = np.concatenate(corners)
    even = corner + corner % 2  # the all-even corner of each hexahedron
    direction = np.where(corner % 2 == 0, 1, -1)
    pieces = []
    for order in permutations(range(3)):
        path = [even]
        for axis in order:
            step = np.zeros_like(even)
            step[:, axis] = direction[:, axis]
            path.append(path[-1] + step)
        pieces.append(np.stack(path, axis=1))
    flat = np.concatenate(pieces).reshape(-1, 3)
    nodes, inverse = np.unique(flat, axis=0, return_inverse=True)
    return Lattice(cells, layers, nodes, inverse.reshape(-1, 4))


def map_points(coordinates: Array, lattice: Lattice) -> Array:
    """Map lattice coordinates, shape (n, 3), to points in metres, shape (n, 3)."""
    local = 2.0 * coordinates / lattice.cells - 1.0  # the junction is the cube from -1 to 1
    points = _map_junction(np.clip(local, -1.0, 1.0))
    for arm in ARMS:
        axis, side = arm.leaves
        beyond = side * local[:, axis] > 1.0
        depth = (side * local[beyond, axis] - 1.0) * lattice.cells / 2 / lattice.layers[arm.name]
        first, second = _section_axes(axis)
        points[beyond] = _map_arm(arm, depth, local[beyond, first], local[beyond, second])
    return points


def carry_over(values: Array, old: Lattice, old_halves: Array, new: Lattice, new_halves: Array) -> Array:
    """Interpolate values, shape (n_old, k), from one lattice to another, linearly between nodes.

    The ``halves`` are twice the lattice coordinates of corners and mid-edges, which together
    fill a grid of half the spacing.
    """
    here, there = _relative(old_halves, old), _relative(new_halves, new)
    result = np.full((there.shape[0], values.shape[1]), np.nan)
    for inside_old, inside_new in zip(_blocks(here), _blocks(there)):
        order = np.lexsort(here[inside_old].T[::-1])
        axes = [np.unique(column) for column in here[inside_old].T]
        grid = values[inside_old][order].reshape(*(axis.size for axis in axes), -1)
        result[inside_new] = RegularGridInterpolator(axes, grid)(there[inside_new])
    return result


def _relative(halves: Array, lattice: Lattice) -> Array:
    """Coordinates in which the junction runs from 0 to 1 and each arm is 1 long."""
    relative = halves / (2.0 * lattice.cells)
    for arm in ARMS:
        axis, side = arm.leaves
        column = relative[:, axis]
        end = 1.0 if side > 0 else 0.0
        beyond = side * (column - end) > 0
        column[beyond] = end + (column[beyond] - end) * lattice.cells / lattice.layers[arm.name]
    # equal coordinates must be equal to the last bit, to be one grid line
    return np.round(relative, 12)


def _blocks(relative: Array) -> list[NDArray[np.bool_]]:
    within = (relative >= 0) & (relative <= 1)
    blocks = [np.all(within, axis=1)]
    for arm in ARMS:
        axis, side = arm.leaves
        section = np.all(np.delete(within, axis, axis=1), axis=1)
        blocks.append(section & (side * (relative[:, axis] - 0.5) >= 0.5))
    return blocks


def _layers(arm: Arm, cells: int) -> int:
    # Cells along an arm are 1.4 times as long as they are wide, on the average.
    width = 2 * float(np.mean(arm.half_section)) / cells
    return max(2, 2 * round(arm.length / width / 1.4 / 2))


def _box(low: NDArray[np.int64], high: NDArray[np.int64]) -> NDArray[np.int64]:
    grid = np.meshgrid(*(np.arange(a, b) for a, b in zip(low, high)), indexing="ij")
    return np.stack([g.ravel() for g in grid], axis=1)


def _section_axes(axis: int) -> tuple[int, int]:
    return ((axis + 1) % 3, (axis + 2) % 3)


def _map_junction(local: Array) -> Array:
    """Bulge the closed sides; the three open sides stay flat with their rims in place."""
    x, y, z = local.T
    hump_y = JUNCTION_BULGE * ((1 - x**2) * (1 - z**2)) ** 2
    hump_z = JUNCTION_BULGE * ((1 - x**2) * (1 - y**2)) ** 2 * (1 - z) / 2  # the top is open
    stretched = np.stack([x, y * (1 + hump_y), z - hump_z], axis=1)
    return np.asarray(JUNCTION_CENTRE + JUNCTION_HALF_SIZE * stretched)


def _map_arm(arm: Arm, depth: Array, a: Array, b: Array) -> Array:
    """Map depth (0 at the junction, 1 at the port) and section coordinates (-1 to 1)."""
    axis, _ = arm.leaves
    root = JUNCTION_HALF_SIZE[list(_section_axes(axis))]
    # The section narrows from the junction on (a flare), and is constant before the port.
    fade = np.clip(1 - depth / arm.taper, 0.0, 1.0) ** 3
    half_a = arm.half_section[0] + (root[0] - arm.half_section[0]) * fade
    half_b = arm.half_section[1] + (root[1] - arm.half_section[1]) * fade
    rounding = arm.roundness * _smooth_step(depth / arm.taper)
    # Lines of equal max(|a|, |b|) go from squares at the axis to the rounded bore at the wall.
    ring = np.maximum(np.abs(a), np.abs(b))
    radius = np.hypot(a, b)
    shrink = 1 - rounding * ring * (1 - ring / np.where(radius > 0, radius, 1.0))
    centre, first, second = _axis(arm, depth)
    turn = arm.turn * _smooth_step(depth / arm.taper)
    across, up = a * shrink * half_a, b * shrink * half_b
    u = np.cos(turn) * across - np.sin(turn) * up
    v = np.sin(turn) * across + np.cos(turn) * up
    return np.asarray(centre + u[:, None] * first + v[:, None] * second)


def _axis(arm: Arm, depth: Array) -> tuple[Array, Array, Array]:
    """Centre and the two section directions of the curved axis, by a table fine enough for round-off."""
    axis, side = arm.leaves
    steps = 2000
    fraction = (np.arange(steps) + 0.5) / steps
    bend = np.zeros((steps, 2))  # curvature times arm length, in the section's axes
    for part in arm.bends:
        inside = np.clip((fraction - part.start) / (part.end - part.start), 0, 1)
        toward = np.asarray(part.toward) / np.hypot(*part.toward)
        bend += (part.angle * 2 * np.sin(np.pi * inside) ** 2 / (part.end - part.start))[:, None] * toward
    frame = np.zeros((steps + 1, 3, 3))  # rows: tangent, first, second section direction
    first, second = _section_axes(axis)
    frame[0, 0, axis], frame[0, 1, first], frame[0, 2, second] = side, 1.0, 1.0
    for k in range(steps):
        frame[k + 1] = _rotate_frame(frame[k], bend[k] / steps)
    centre = np.zeros((steps + 1, 3))
    centre[1:] = np.cumsum((frame[:-1, 0] + frame[1:, 0]) / 2, axis=0) * arm.length / steps
    centre += JUNCTION_CENTRE
    centre[:, axis] += side * JUNCTION_HALF_SIZE[axis]
    table = np.concatenate([centre, frame[:, 1], frame[:, 2]], axis=1)
    at = np.stack([np.interp(depth * steps, np.arange(steps + 1), column) for column in table.T], axis=1)
    return at[:, :3], at[:, 3:6], at[:, 6:]


def _rotate_frame(frame: Array, bend: Array) -> Array:
    """Turn the frame (rows) by the small angles ``bend`` of its tangent toward the two section directions."""
    angle = float(np.hypot(*bend))
    if angle == 0.0:
        return frame
    tangent, toward = frame[0], (bend[0] * frame[1] + bend[1] * frame[2]) / angle
    turned = np.empty_like(frame)
    turned[0] = np.cos(angle) * tangent + np.sin(angle) * toward
    new_toward = np.cos(angle) * toward - np.sin(angle) * tangent
    for row in (1, 2):
        along = frame[row] @ toward
        turned[row] = frame[row] + along * (new_toward - toward)
    return turned


def _smooth_step(x: Array) -> Array:
    x = np.clip(x, 0.0, 1.0)
    return np.asarray(x**3 * (10 - 15 * x + 6 * x**2))
