"""Where a picture is seen from: a parallel projection, and the choice of a telling direction."""

from __future__ import annotations

import re
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import PictureError

__all__ = ["View", "axes_for", "choose_direction", "direction_from", "fit"]

# Elevations and the step of azimuth, in degrees, of the directions that are tried.
_ELEVATIONS = (12.0, 22.0, 32.0, 45.0, 60.0, -20.0)
_AZIMUTH_STEP = 10.0


@dataclass(frozen=True, eq=False)
class View:
    """A parallel projection onto pixels; x to the right, y up.

    Attributes
    ----------
    axes : ndarray, shape (3, 3), float64
        Unit vectors to the right, up in the picture, and towards the viewer.
    centre : ndarray, shape (3,), float64
        Point in metres that falls on `middle`.
    middle : ndarray, shape (2,), float64
        Pixel of the centre.
    scale : float
        Pixels a metre.
    """

    axes: NDArray[np.float64]
    centre: NDArray[np.float64]
    middle: NDArray[np.float64]
    scale: float

    def project(self, points: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return pixels, shape (..., 2), of points in metres, shape (..., 3)."""
        flat = (np.asarray(points) - self.centre) @ self.axes[:2].T
        return np.asarray(self.middle + self.scale * flat)

    def lift(self, pixels: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return points in metres, shape (..., 3), that fall on pixels, shape (..., 2)."""
        return np.asarray(self.centre + (pixels - self.middle) / self.scale @ self.axes[:2])


def axes_for(toward: NDArray[np.float64], up: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the axes of a view: right, up in the picture, towards the viewer.

    Parameters
    ----------
    toward : ndarray, shape (3,), float64
        Direction from the surface to the viewer.
    up : ndarray, shape (3,), float64
        Direction that shall point up. Seen along it, the axis of coordinates that lies
        most square to it points up in its place, y before x.

    Returns
    -------
    ndarray, shape (3, 3), float64
        Rows are unit vectors.
    """
    toward = toward / np.linalg.norm(toward)
    right = np.cross(up, toward)
    if float(np.linalg.norm(right)) < 1e-6 * float(np.linalg.norm(up)):
        right = np.cross(min(np.eye(3)[[1, 0, 2]], key=lambda axis: round(abs(float(axis @ toward)), 6)), toward)
    right /= np.linalg.norm(right)
    return np.array([right, np.cross(toward, right), toward])


def direction_from(words: str, up: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the direction to the viewer that somebody asked for in words or numbers.

    Parameters
    ----------
    words : str
        "from +x" or "+x" (any axis and sign), "from above", "from below", or three
        numbers, from the surface towards the viewer: "1, -2, 0.5".
    up : ndarray, shape (3,), float64
        Direction that is up.

    Returns
    -------
    ndarray, shape (3,), float64
        Unit vector from the surface to the viewer.

    Raises
    ------
    PictureError
        Words that are none of these, or numbers that are no direction.
    """
    said = words.strip().lower().removeprefix("from").strip()
    if said in ("above", "below"):
        return up / np.linalg.norm(up) * (1.0 if said == "above" else -1.0)
    if re.fullmatch(r"[+-]?[xyz]", said):
        return np.asarray(np.eye(3)["xyz".index(said[-1])] * (-1.0 if said[0] == "-" else 1.0))
    try:
        numbers = np.array([float(part) for part in re.split(r"[,;\s]+", said.strip("()[] "))])
    except ValueError:
        numbers = np.empty(0)
    size = float(np.linalg.norm(numbers)) if numbers.size == 3 else 0.0
    if not np.isfinite(size) or size == 0.0:
        raise PictureError(
            f"the view is {words!r}",
            remedy='Give "automatic", "from +x" (or another axis), "from above", "from below", or three numbers '
            'that point to the viewer, such as "1, -2, 0.5"',
        )
    return numbers / size


def choose_direction(
    centroids: NDArray[np.float64],
    normals: NDArray[np.float64],
    forces: NDArray[np.float64],
    size: float,
    up: NDArray[np.float64],
) -> NDArray[np.float64]:
    """Choose the direction that shows ports and forces best.

    Each candidate is scored by the port that is shown worst (its face turned
    to the viewer counts in full, its back a third), by how far the
    centroids of ports stay apart in the picture, and by how much the forces
    are foreshortened. The weights are our own choice.

    Parameters
    ----------
    centroids, normals : ndarray, shape (n_ports, 3), float64
        Centroid in metres and outward unit normal of each port.
    forces : ndarray, shape (n_forces, 3), float64
        Unit vectors of the forces that are drawn.
    size : float
        Diagonal of the surface's bounding box in metres.
    up : ndarray, shape (3,), float64
        Direction that shall point up.

    Returns
    -------
    ndarray, shape (3,), float64
        Unit vector from the surface to the viewer.
    """
    up = up / np.linalg.norm(up)
    # A level frame with the first axis near +x, so that a picture turns only when it gains by it.
    start = np.eye(3)[0] if abs(up[0]) < 0.9 else np.eye(3)[1]
    east = start - (start @ up) * up
    east /= np.linalg.norm(east)
    north = np.cross(up, east)
    angles = np.radians([(a, e) for e in _ELEVATIONS for a in np.arange(0.0, 360.0, _AZIMUTH_STEP)])
    azimuth, elevation = angles.T[:, :, None]
    candidates = np.cos(elevation) * (np.cos(azimuth) * east + np.sin(azimuth) * north) + np.sin(elevation) * up

    # a view from below is harder to read
    score = np.where(elevation[:, 0] < 0.0, -0.25, 0.0)
    if len(normals):
        facing = candidates @ normals.T
        shown = np.where(facing > 0.0, np.minimum(facing, 0.55), np.minimum(-facing, 0.55) / 3.0)
        score += 2.0 * shown.min(axis=1) + 0.6 * shown.mean(axis=1)
    if len(centroids) > 1:
        first, second = np.triu_indices(len(centroids), 1)
        apart = centroids[first] - centroids[second]
        along = candidates @ apart.T
        seen = np.sqrt(np.maximum((apart**2).sum(axis=1) - along**2, 0.0)) / size
        score += 1.2 * np.minimum(seen, 0.25).min(axis=1) + 0.3 * np.minimum(seen, 0.6).mean(axis=1)
    if len(forces):
        # length that remains in the picture; what is above 0.8 is as good as whole
        remains = np.minimum(np.sqrt(np.maximum(1.0 - (candidates @ forces.T) ** 2, 0.0)), 0.8)
        score += 1.0 * remains.min(axis=1) + 0.6 * remains.mean(axis=1)
    # the first of equals, whatever the last bits say
    return np.asarray(candidates[int(np.argmax(np.round(score, 9)))])


def fit(
    axes: NDArray[np.float64],
    points: NDArray[np.float64],
    area: tuple[float, float, float, float],
) -> View:
    """Return the view in which all points fill an area of the picture.

    Parameters
    ----------
    axes : ndarray, shape (3, 3), float64
        From `axes_for`.
    points : ndarray, shape (n, 3), float64
        All that must be seen, in metres.
    area : tuple of float
        Left, bottom, right, top in pixels.

    Returns
    -------
    View
        Centred, with the largest scale at which everything fits.
    """
    flat = points @ axes[:2].T
    low, high = flat.min(axis=0), flat.max(axis=0)
    left, bottom, right, top = area
    room = np.array([right - left, top - bottom])
    extent = np.maximum(high - low, np.finfo(np.float64).tiny)
    centre = axes[:2].T @ (0.5 * (low + high)) + axes[2] * float(points.mean(axis=0) @ axes[2])
    return View(
        axes=axes,
        centre=centre,
        middle=np.array([0.5 * (left + right), 0.5 * (bottom + top)]),
        scale=float((room / extent).min()),
    )
