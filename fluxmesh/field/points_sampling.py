"""Quantities of a point cloud at the places where a surface is integrated, with the error to expect."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError
from fluxmesh.field.points import PointCloud
from fluxmesh.field.points_interpolation import NEIGHBOURS, CloudIndex, Interpolated, index_cloud, interpolate_cloud
from fluxmesh.surface.wording import length_text, place_text
from fluxmesh.units import LARGEST

__all__ = ["LeaveOut", "SampledCloud", "distinct_points", "leave_out_error", "sample_cloud"]

_FEWEST, _MOST = 100, 5000
_SEED = 20_117
_FEWEST_SPACINGS, _SPECK = 3.0, 10.0
# single precision, in which most exports are written
_ONE_PLACE = 2.0**-50  # of the extent
_SAME = 1e-6


@dataclass(frozen=True)
class LeaveOut:
    """How well points are predicted by the others around them.

    Attributes
    ----------
    rms : float
        Root-mean-square error, in the unit of the quantity. Errors of a vector
        are lengths.
    p95 : float
        What 95 % of the errors stay below, same unit.
    relative : float
        `rms` over the range of the quantity over all points (a vector: the
        length of the ranges of its components); 0 for a constant.
    count : int
        How many points were predicted; where it is 0, none could be, and the
        errors are infinite.
    factor : float
        What the measured errors have been multiplied by, 1 or more: how much more
        the fits at the places amplify errors than those at the points left out.
    """

    rms: float
    p95: float
    relative: float
    count: int
    factor: float = 1.0


@dataclass(frozen=True, eq=False)
class SampledCloud:
    """Quantities at places, sampled from scattered points.

    Attributes
    ----------
    values : dict of str to ndarray, shape (n_places,) or (n_places, 3), float64
        By quantity, in the unit of its columns.
    leave_out : dict of str to LeaveOut
        By quantity: the error to expect, in the unit of its columns.
    distance : ndarray, shape (n_places,), float64
        From each place to the nearest point, m.
    degree : ndarray, shape (n_places,), int8
        Of the polynomials that are given back exactly there: 2, 1, or 0.
    amplification : ndarray, shape (n_places,), float64
        How much noise in the values can grow there, 1 or more.
    merged : int
        Points left aside, as others stand at the same place with the same values.
    """

    values: dict[str, NDArray[np.float64]]
    leave_out: dict[str, LeaveOut]
    distance: NDArray[np.float64]
    degree: NDArray[np.int8]
    amplification: NDArray[np.float64]
    merged: int


def sample_cloud(
    cloud: PointCloud,
    names: Mapping[str, str | Sequence[str]],
    places: NDArray[np.float64],
    *,
    scale: float = 1.0,
    reach: float | None = None,
    neighbours: int = NEIGHBOURS,
    share: float = 0.05,
    seed: int = _SEED,
) -> SampledCloud:
    """Sample quantities from scattered points.

    Parameters
    ----------
    cloud : PointCloud
        The points and their columns.
    names : mapping of str to str or sequence of 3 str
        Quantity -> its column, or the columns of its components x, y, z.
    places : ndarray, shape (n_places, 3), float64
        Where values are wanted, m.
    scale : float, optional
        Metres in the unit of the points' coordinates.
    reach, neighbours : optional
        See `fluxmesh.field.points_interpolation.interpolate_cloud`; m.
    share, seed : optional
        See `leave_out_error`.

    Returns
    -------
    SampledCloud
        Values and the error to expect, in the units of the columns.

    Raises
    ------
    FieldError
        A column is missing or cannot be used, points at one place differ,
        places are beyond reach, or all of them lie between a few points.
    """
    quantities = {quantity: _gathered(cloud, chosen) for quantity, chosen in names.items()}
    for quantity, taken_from in quantities.items():
        largest = float(np.abs(taken_from).max(initial=0.0))
        if largest > LARGEST:
            raise FieldError(
                f"its {quantity} is {largest:.4g} at a point, beyond {LARGEST:g}", cloud.source, "Leave that point out"
            )
    points, kept = distinct_points(cloud.places * scale, quantities, cloud.source)
    quantities = {quantity: values[kept] for quantity, values in quantities.items()}
    index = index_cloud(points)
    try:
        found = interpolate_cloud(index, _side_by_side(quantities), places, neighbours=neighbours, reach=reach)
    except FieldError as error:
        raise FieldError(
            f"{error.found}. The points extend over {_extent(points)}, the places over {_extent(places)}",
            cloud.source,
            error.remedy,
        ) from error
    _require_detail(points, places, found, cloud.source)
    values, column = {}, 0
    for quantity, given in quantities.items():
        width = 1 if given.ndim == 1 else given.shape[1]
        taken = found.values[:, column : column + width]
        values[quantity] = np.ascontiguousarray(taken[:, 0] if given.ndim == 1 else taken)
        column += width
    return SampledCloud(
        values=values,
        leave_out=leave_out_error(index, quantities, share=share, seed=seed, neighbours=neighbours, like=found),
        distance=found.distance,
        degree=found.degree,
        amplification=found.amplification,
        merged=cloud.places.shape[0] - points.shape[0],
    )


def leave_out_error(
    cloud: CloudIndex,
    quantities: Mapping[str, NDArray[np.float64]],
    *,
    share: float = 0.05,
    seed: int = _SEED,
    neighbours: int = NEIGHBOURS,
    like: Interpolated | None = None,
) -> dict[str, LeaveOut]:
    """Predict some points from the others, and compare with what they carry.

    Each chosen point is predicted from all others (cross-validation, leave one
    out). With `like`, points that are nearest to those places are chosen, and
    for each the points about it are left out as far as its place was from it:
    the hole is then as wide as the gap the places lie in. That matters where
    points stand in dense rows (wall layers), whose next point in the row
    would predict far better than the gap between rows allows. Where the places lie
    outside the points (a wall half a cell off the cell centres), the errors are
    raised by `LeaveOut.factor`.

    Parameters
    ----------
    cloud : CloudIndex
        The points.
    quantities : mapping of str to ndarray, shape (n_points,) or (n_points, 3), float64
        Values by quantity, any unit.
    share : float, optional
        Share of the points that is predicted; but at least 100 and at most 5000.
    seed : int, optional
        Of the choice, which is the same at every call.
    neighbours : int, optional
        See `fluxmesh.field.points_interpolation.interpolate_cloud`.
    like : Interpolated, optional
        Places to choose points near to; by default all points are chosen from.

    Returns
    -------
    dict of str to LeaveOut
        By quantity.
    """
    generator = np.random.default_rng(seed)
    if like is None:
        candidates = np.arange(cloud.places.shape[0])
        gaps = np.zeros(candidates.size)
    else:
        order = generator.permutation(like.nearest.size)
        candidates, first = np.unique(like.nearest[order], return_index=True)
        gaps = like.distance[order][first]
    count = min(candidates.size, max(_FEWEST, min(_MOST, round(share * candidates.size))))
    chosen = np.sort(generator.choice(candidates.size, count, replace=False))
    points = candidates[chosen]
    predicted = interpolate_cloud(
        cloud,
        _side_by_side(quantities),
        cloud.places[points],
        neighbours=neighbours,
        reach=np.inf,
        hole=gaps[chosen],
    )
    # a hole that swallows every neighbour tells nothing
    told = np.isfinite(predicted.amplification)
    factor = 1.0
    if like is not None and told.any():
        # places off the rim are extrapolated to, left-out points mostly are not: the bound of the error
        # is one more than the amplification, times what the polynomial misses
        factor = max(1.0, float(np.mean(1.0 + like.amplification) / np.mean(1.0 + predicted.amplification[told])))
    found, column = {}, 0
    for quantity, values in quantities.items():
        table = values.reshape(values.shape[0], -1)
        misses = np.linalg.norm(predicted.values[:, column : column + table.shape[1]] - table[points], axis=1)[told]
        column += table.shape[1]
        found[quantity] = _summary(misses * factor, factor, float(np.linalg.norm(np.ptp(table, axis=0))))
    return found


def _summary(misses: NDArray[np.float64], factor: float, extent: float) -> LeaveOut:
    if misses.size == 0:
        return LeaveOut(np.inf, np.inf, np.inf, 0, factor)
    rms = float(np.sqrt(np.mean(misses**2)))
    return LeaveOut(rms, float(np.quantile(misses, 0.95)), rms / extent if extent > 0 else 0.0, misses.size, factor)


def distinct_points(
    places: NDArray[np.float64], quantities: Mapping[str, NDArray[np.float64]], source: str
) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    """Leave one of each set of points that stand at one place with the same values.

    Parameters
    ----------
    places : ndarray, shape (n_points, 3), float64
        m.
    quantities : mapping of str to ndarray, shape (n_points,) or (n_points, 3), float64
        Values by quantity.
    source : str
        File, for messages.

    Returns
    -------
    places : ndarray, shape (n_kept, 3), float64
        The points that are left, in their order.
    kept : ndarray, shape (n_kept,), int64
        Which they are.

    Raises
    ------
    FieldError
        Points at one place differ by more than 1e-6 of the range of a
        quantity: how many, where, and by what.
    """
    # what differs by rounding of the whole extent is one place: the square of its distance may be zero
    step = _ONE_PLACE * float(np.ptp(places, axis=0).max(initial=0.0)) if places.size else 0.0
    marks = np.rint((places - places.min(axis=0)) / step) if step > 0.0 else places
    order = np.lexsort(marks.T)
    ordered = marks[order]
    opens = np.ones(order.size, np.bool_)
    opens[1:] = (ordered[1:] != ordered[:-1]).any(axis=1)
    if opens.all():
        return places, np.arange(order.size)
    head = order[np.flatnonzero(opens)][np.cumsum(opens) - 1]
    for quantity, values in quantities.items():
        table = values.reshape(values.shape[0], -1)
        differs = (np.abs(table[order] - table[head]) > _SAME * np.ptp(table, axis=0)).any(axis=1)
        if differs.any():
            one = int(np.argmax(differs))
            both = [", ".join(f"{x:.6g}" for x in table[row]) for row in (head[one], order[one])]
            raise FieldError(
                f"{int(differs.sum())} of {order.size} points stand at the place of another and carry a different "
                f"{quantity}, the first at {place_text(places[order[one]])}: {both[0]} and {both[1]}",
                source,
                "Give each place one value: export the interior and the walls apart, or take the mean",
            )
    kept = np.sort(order[opens])
    return places[kept], kept


def _gathered(cloud: PointCloud, chosen: str | Sequence[str]) -> NDArray[np.float64]:
    if isinstance(chosen, str):
        return cloud.column(chosen)
    parts = [cloud.column(name) for name in chosen]
    for name, part in zip(chosen, parts):
        if part.ndim != 1:
            raise FieldError(
                f"column '{name}' has {part.shape[1]} components",
                cloud.source,
                "Name it alone, or three columns of one component each",
            )
    return np.column_stack(parts)


def _require_detail(points: NDArray[np.float64], places: NDArray[np.float64], found: Interpolated, source: str) -> None:
    """Raise if the whole surface is but a speck within the points: its unit is not theirs."""
    if places.shape[0] < 2:
        return
    across = float(np.linalg.norm(np.ptp(places, axis=0)))
    spacing = float(np.median(found.spacing))
    if 0 < across < _FEWEST_SPACINGS * spacing and float(np.linalg.norm(np.ptp(points, axis=0))) > _SPECK * across:
        raise FieldError(
            f"the points are {length_text(spacing)} apart, where the places extend over {length_text(across)} in all. "
            f"The points extend over {_extent(points)}",
            source,
            "Check the length unit of the points, or export more of them around the surface",
        )


def _side_by_side(quantities: Mapping[str, NDArray[np.float64]]) -> NDArray[np.float64]:
    return np.column_stack([values.reshape(values.shape[0], -1) for values in quantities.values()])


def _extent(places: NDArray[np.float64]) -> str:
    return length_text(float(np.linalg.norm(np.ptp(places, axis=0))))
