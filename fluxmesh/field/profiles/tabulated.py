"""A profile from a table of speed against radius or wall distance."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError
from fluxmesh.field.profiles.options import ProfileOptions, SpeedTable
from fluxmesh.field.profiles.port import PLANARITY, PortPatch, plane_coordinates, require_plane
from fluxmesh.field.profiles.wall_distance import (
    distance_to_segments,
    edge_segments,
    largest_wall_distance,
    wall_distance,
)

__all__ = ["tabulated_shape"]

_SLACK = 1e-3  # share of the largest distance that a table may fall short by; its end value stands there


def tabulated_shape(patch: PortPatch, options: ProfileOptions) -> NDArray[np.float64]:
    """Return the speeds of a table at the samples.

    Parameters
    ----------
    patch : PortPatch
        The port, planar.
    options : ProfileOptions
        `table`.

    Returns
    -------
    ndarray, shape (n_samples,), float64
        m/s as the table has them; 0 for samples outside.

    Raises
    ------
    FieldError
        No table, one that does not cover the distances that occur in the
        port, a port that is not planar, or one that no wall meets (for wall
        distances), or whose symmetry planes have no point in common (for
        radii).
    """
    table = options.table
    if table is None:
        raise FieldError(
            "a profile from a table has no table", f"group '{patch.name}'", "Give distances and speeds, two or more"
        )
    require_plane(patch)
    if table.quantity == "radius":
        middle = _middle(patch)
        low, high = _radius_range(patch, middle)
        distance = np.linalg.norm(plane_coordinates(patch, patch.samples.places) - middle, axis=1)
    else:
        low, high = 0.0, largest_wall_distance(patch)
        distance = wall_distance(patch, patch.samples.places)
    if table.relative:
        low, high, distance = low / high, 1.0, distance / high
    at, speed = table.rows()
    _require_cover(patch, table, at, low, high)
    inside = patch.sample_triangle >= 0
    distance = np.clip(distance, at[0], at[-1])
    return np.where(inside, _interpolated(table, at, speed, distance), 0.0)


def _interpolated(
    table: SpeedTable, at: NDArray[np.float64], speed: NDArray[np.float64], distance: NDArray[np.float64]
) -> NDArray[np.float64]:
    if table.interpolation == "linear":
        return np.asarray(np.interp(distance, at, speed))
    from scipy.interpolate import PchipInterpolator

    # no overshoot in theory; a rounded value just below zero is zero
    return np.asarray(np.maximum(PchipInterpolator(at, speed)(distance), 0.0))


def _middle(patch: PortPatch) -> NDArray[np.float64]:
    """Return the middle that radii are measured from, in the plane of a port.

    It is the centroid of the whole port: where the port is one half or one
    sector of it, the point of the symmetry planes nearest to its own centroid.
    """
    sides = edge_segments(patch, patch.symmetry_edges)
    if len(sides) == 0:
        return np.zeros(2)
    along = sides[:, 1] - sides[:, 0]
    across = np.column_stack([-along[:, 1], along[:, 0]])
    height = np.einsum("ij,ij->i", across, sides[:, 0])
    # the shortest way from the centroid, the origin; parallel sides count as one
    middle = np.asarray(np.linalg.lstsq(across, height, rcond=1e-4)[0])
    length = np.linalg.norm(along, axis=1)
    off = float((np.abs(across @ middle - height)[length > 0] / length[length > 0]).max(initial=0.0))
    if off > PLANARITY * patch.size:
        raise FieldError(
            f"the symmetry planes that meet the port have no common point in it: they miss by {off:.3g} m, "
            "so a radius has no middle to start from",
            where=f"group '{patch.name}'",
            remedy="Give the table by distance from the wall",
        )
    return middle


def _radius_range(patch: PortPatch, middle: NDArray[np.float64]) -> tuple[float, float]:
    """Return the least and the largest distance from the middle within a port."""
    corners = plane_coordinates(patch, patch.points[patch.triangles[:, :3]]) - middle
    following = np.roll(corners, -1, axis=1)
    turn = corners[:, :, 0] * following[:, :, 1] - corners[:, :, 1] * following[:, :, 0]
    rim = edge_segments(patch, np.concatenate([patch.wall_edges, patch.symmetry_edges, patch.shared_edges])) - middle
    largest = float(np.linalg.norm(rim, axis=2).max())
    # it lies within the triangle whose sides all turn the same way about it
    if (turn.min(axis=1) >= -1e-12 * patch.size**2).any():
        return 0.0, largest
    return float(distance_to_segments(np.zeros((1, 2)), rim)[0]), largest


def _require_cover(patch: PortPatch, table: SpeedTable, at: NDArray[np.float64], low: float, high: float) -> None:
    slack = _SLACK * high
    missing = []
    if at[0] > low + slack:
        missing.append(f"{low:.4g} to {at[0]:.4g}")
    if at[-1] < high - slack:
        missing.append(f"{at[-1]:.4g} to {high:.4g}")
    if not missing:
        return
    name = "radius" if table.quantity == "radius" else "distance from the wall"
    unit = " of the largest" if table.relative else " m"
    ends = "middle" if table.quantity == "radius" else "wall"
    raise FieldError(
        f"the table gives no speed for the {name} {' and '.join(missing)}{unit}; "
        f"{low:.4g} to {high:.4g}{unit} occur in the port",
        where=f"group '{patch.name}'",
        remedy=f"Add rows up to both ends, the {ends} (distance 0) among them if it lies in the port",
    )
