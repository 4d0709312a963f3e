"""Fields sampled from a volume mesh at places on the surface."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError
from fluxmesh.field.volume_boxes import box_of, require_same_place, unit_that_fits
from fluxmesh.field.volume_cells import Located, cell_points, locate, used_nodes
from fluxmesh.field.volume_probe import farthest
from fluxmesh.field.volume_sharp import sharpen as sharpened_values
from fluxmesh.surface.readers.volume_grid import VolumeMesh

__all__ = ["Sampled", "VolumeArray", "array_of", "sample_volume"]

_REACH: Final = 1e-3  # of the volume's bounding diagonal
# How far off a place may lie and still count as inside: single-precision files round coordinates to 6e-8 of them.
_ROUNDED: Final = 2.5e-7


@dataclass(frozen=True, eq=False)
class Sampled:
    """Values of a volume's arrays at places.

    Attributes
    ----------
    values : dict of str to ndarray, shape (n_places,) or (n_places, k), float64
        By quantity, in the units of the volume's arrays.
    location : dict of str to str
        By quantity, "nodes" (interpolated in the cell) or "cells" (constant
        in the cell).
    exact : ndarray, shape (n_places,), bool
        Whether the place lies in a cell, or so near to one that rounding of
        coordinates to single precision explains it. The other values are
        those of the nearest point of the volume.
    distance : ndarray, shape (n_places,), float64
        How far that nearest point is, m; 0 in a cell.
    reach : float
        How far it was allowed to be, m.
    sharpened : float or None
        Share of the places at which values on nodes are sharpened; None where that was not asked for.
    """

    values: dict[str, NDArray[np.float64]]
    location: dict[str, str]
    exact: NDArray[np.bool_]
    distance: NDArray[np.float64]
    reach: float
    sharpened: float | None = None


@dataclass(frozen=True, eq=False)
class VolumeArray:
    """One quantity on a volume mesh.

    Attributes
    ----------
    on : {"nodes", "cells"}
        Where its values sit.
    values : ndarray, shape (n,) or (n, k), float64
        One row a node or a cell.
    name : str
        Of its array, for messages.
    """

    on: str
    values: NDArray[np.float64]
    name: str


def array_of(
    volume: VolumeMesh,
    quantity: str,
    names: tuple[str, ...],
    *,
    at: str | None = None,
    components: tuple[int, ...] | None = None,
    key: str | None = None,
) -> VolumeArray:
    """Look up the array of a quantity.

    Parameters
    ----------
    volume : VolumeMesh
        Volume cells and their arrays.
    quantity : str
        What it is, for messages.
    names : tuple of str
        Its array, or the arrays of its components.
    at : {"nodes", "cells"}, optional
        Where it is, if its name occurs on both.
    components : tuple of int, optional
        Numbers of components it may have; any by default.
    key : str, optional
        Key of the case that names it, for messages; ``flow.QUANTITY`` by default.

    Returns
    -------
    VolumeArray
        In the unit of the file.

    Raises
    ------
    FieldError
        An array that is missing, on both nodes and cells, of the wrong number
        of components, or not finite at a node that a cell uses or on a cell.
    """
    key = f"flow.{quantity}" if key is None else key
    on, parts = _columns(volume, key, names, at)
    _require_components(volume, quantity, names, parts, components, key)
    found = VolumeArray(on, _joined(parts).astype(np.float64), ", ".join(names))
    bad = np.flatnonzero(~np.isfinite(found.values.reshape(found.values.shape[0], -1)).all(axis=1))
    if bad.size and on == "nodes":
        bad = bad[used_nodes(volume.grid)[bad]]
    if bad.size:
        raise FieldError(
            f"array '{found.name}' on {on} of {volume.source} holds {bad.size} values that are not finite, first at "
            f"{on[:-1]} {bad[0]}",
            where=key,
            remedy="Export the field again, without NaN or infinity",
        )
    return found


def sample_volume(
    volume: VolumeMesh,
    names: Mapping[str, tuple[str, ...]],
    places: NDArray[np.float64],
    *,
    scale: float,
    reach: float | None = None,
    at: Mapping[str, str] | None = None,
    components: Mapping[str, tuple[int, ...]] | None = None,
    sharpen: bool = False,
) -> Sampled:
    """Sample arrays of a volume mesh at places.

    Parameters
    ----------
    volume : VolumeMesh
        Volume cells and their arrays.
    names : mapping of str to tuple of str
        Quantity -> its array, or the arrays of its components.
    places : ndarray, shape (n_places, 3), float64
        Where, m.
    scale : float
        Length unit of the volume's coordinates, m.
    reach : float, optional
        How far from the volume a place may lie, m: it takes the value at the
        nearest point of the volume. 0.001 of the volume's bounding diagonal by
        default.
    at : mapping of str to str, optional
        Quantity -> "nodes" or "cells", where its name occurs on both.
    components : mapping of str to tuple of int, optional
        Quantity -> numbers of components it may have; any by default.
    sharpen : bool, optional
        Whether to take values to one order more than the cells have, by `fluxmesh.field.volume_sharp`; those of
        node arrays in quadratic cells stay.

    Returns
    -------
    Sampled
        Node arrays are interpolated with the shape functions of the cell at
        the place, cell arrays are constant in each cell. A place on a face
        between two cells belongs to either of them. The result depends neither
        on the order of the places nor on the number of threads but for
        round-off, and but for cell arrays at places on such a face.

    Raises
    ------
    FieldError
        An array that is missing, on both nodes and cells, of the wrong number
        of components, or not finite where it is used; places beyond reach; a
        volume that misses the surface, or is the same in another unit.
    """
    where = volume.source
    if not (np.isfinite(scale) and scale > 0):
        raise FieldError(f"the length unit is {scale!r} m", where=where, remedy="A positive number is needed")
    if reach is not None and not (np.isfinite(reach) and reach >= 0):
        raise FieldError(f"the reach is {reach!r} m", where=where, remedy="Zero or a positive number is needed")
    places = np.ascontiguousarray(places, dtype=np.float64)
    columns = {
        quantity: _columns(volume, f"flow.{quantity}", names[quantity], (at or {}).get(quantity)) for quantity in names
    }
    for quantity, (_, parts) in columns.items():
        allowed = (components or {}).get(quantity)
        _require_components(volume, quantity, names[quantity], parts, allowed, f"flow.{quantity}")
    location = {quantity: on for quantity, (on, _) in columns.items()}
    box = box_of(cell_points(volume.grid))
    if reach is None:
        reach = _REACH * scale * float(np.linalg.norm(box[1] - box[0]))
    if not places.shape[0]:
        none = {quantity: _joined(parts)[:0].astype(np.float64) for quantity, (_, parts) in columns.items()}
        return Sampled(none, location, np.zeros(0, np.bool_), np.zeros(0), reach)
    surface = box_of(places)
    require_same_place(box, scale, surface, reach, where)
    on_nodes = [quantity for quantity, on in location.items() if on == "nodes"]
    tables = [_joined(columns[quantity][1]).astype(np.float64) for quantity in on_nodes]
    tables = [table.reshape(table.shape[0], -1) for table in tables]
    count = int(volume.grid.GetNumberOfPoints())
    located = locate(
        volume.grid, np.concatenate([np.zeros((count, 0)), *tables], axis=1), places / scale, reach / scale
    )
    distance = np.zeros(places.shape[0])
    outside = np.flatnonzero(~located.inside)
    distance[outside] = np.linalg.norm(located.nearest[outside] * scale - places[outside], axis=1)
    _require_reached(volume, located, places, reach, scale, unit_that_fits(box, scale, surface))
    values: dict[str, NDArray[np.float64]] = {}
    on_cells = [quantity for quantity, on in location.items() if on == "cells"]
    if sharpen:
        in_cells = [_joined(columns[quantity][1]).astype(np.float64) for quantity in on_cells]
        in_cells = [table.reshape(table.shape[0], -1) for table in in_cells]
        sharp = sharpened_values(
            volume.grid,
            np.concatenate([np.zeros((count, 0)), *tables], axis=1),
            np.concatenate([np.zeros((int(volume.grid.GetNumberOfCells()), 0)), *in_cells], axis=1),
            located,
        )
        share = float(np.count_nonzero(sharp.known)) / places.shape[0]
        tables, there = [*tables, *in_cells], np.concatenate([sharp.on_nodes, sharp.on_cells], axis=1)
    else:
        share, there = None, located.values
    first = 0
    for quantity, table in zip([*on_nodes, *on_cells], tables):
        taken = there[:, first : first + table.shape[1]]
        first += table.shape[1]
        scalar = _joined(columns[quantity][1]).ndim == 1
        values[quantity] = np.ascontiguousarray(taken[:, 0] if scalar else taken)
    for quantity, (on, parts) in columns.items():
        if quantity not in values:
            values[quantity] = _joined([part[located.cell] for part in parts]).astype(np.float64)
        _require_finite(values[quantity], quantity, names[quantity], on, places, where)
    rounded = _ROUNDED * max(float(np.abs(box).max()) * scale, float(np.abs(surface).max()))
    return Sampled(
        {quantity: values[quantity] for quantity in names}, location, distance <= rounded, distance, float(reach), share
    )


def _columns(volume: VolumeMesh, key: str, names: tuple[str, ...], at: str | None) -> tuple[str, list[NDArray[Any]]]:
    """Return where the arrays of a quantity sit, and them."""
    where = volume.source
    pools = {"nodes": volume.node_arrays, "cells": volume.cell_arrays}
    both = all(names[0] in pool for pool in pools.values())
    if at is None and both:
        raise FieldError(
            f"the array '{names[0]}' is on nodes and on cells of {where}",
            where=key,
            remedy='Say which one: at = "nodes" or at = "cells"',
        )
    on = at or ("cells" if names[0] in volume.cell_arrays else "nodes")
    other = "cells" if on == "nodes" else "nodes"
    listed = sorted({*volume.node_arrays, *volume.cell_arrays})
    for name in names:
        if name in pools[on]:
            continue
        if name in pools[other]:
            raise FieldError(f"the array '{name}' is on {other} of {where}, not on {on}", where=key)
        if name in volume.partial:
            raise FieldError(
                f"only some blocks of {where} have the array '{name}'", where=key, remedy="Export it on all blocks"
            )
        near = difflib.get_close_matches(name, listed, n=1)
        hint = f"Did you mean '{near[0]}'? " if near else ""
        has = f"{hint}It has {', '.join(listed[:20]) or 'none'}"
        raise FieldError(f"there is no array '{name}' in {where}", where=key, remedy=has)
    return on, [pools[on][name] for name in names]


def _require_components(
    volume: VolumeMesh,
    quantity: str,
    names: tuple[str, ...],
    parts: list[NDArray[Any]],
    allowed: tuple[int, ...] | None,
    key: str,
) -> None:
    if len(parts) > 1:
        for name, part in zip(names, parts):
            if part.ndim != 1:
                raise FieldError(
                    f"component array '{name}' of {volume.source} has {part.shape[1]} components",
                    where=key,
                    remedy="1 is needed",
                )
    count = len(parts) if len(parts) > 1 else (1 if parts[0].ndim == 1 else parts[0].shape[1])
    if allowed is not None and count not in allowed:
        plural = "s" if count > 1 else ""
        raise FieldError(
            f"'{', '.join(names)}' of {volume.source} has {count} component{plural}",
            where=key,
            remedy=f"{' or '.join(map(str, allowed))} needed for {quantity}",
        )


def _joined(parts: list[NDArray[Any]]) -> NDArray[Any]:
    return np.column_stack(parts) if len(parts) > 1 else parts[0]


def _require_reached(
    volume: VolumeMesh,
    located: Located,
    places: NDArray[np.float64],
    reach: float,
    scale: float,
    unit: str | None,
) -> None:
    beyond = np.flatnonzero(located.cell < 0)
    if not beyond.size:
        return
    index, away = farthest(volume.grid, places[beyond] / scale)
    away *= scale
    at = ", ".join(f"{x:.6g}" for x in places[beyond[index]])
    share = f"{100 * beyond.size / places.shape[0]:.2g} %"
    raise FieldError(
        f"{beyond.size} of {places.shape[0]} places on the surface ({share}) lie outside the volume by more than the "
        f"reach of {reach:.3g} m; the farthest is {away:.3g} m away, at ({at}) m",
        where=volume.source,
        remedy=f'In {unit} the volume would span the same as the surface: write flow.volume.unit = "{unit}"'
        if unit is not None
        else "Export the volume that fills this surface; where their facets differ by that much and no more, write "
        f'reach = "{_up(away)} m"',
    )


def _up(value: float) -> str:
    """Return a number rounded up to two figures."""
    step = 10.0 ** (np.floor(np.log10(value)) - 1)
    return f"{np.ceil(value / step) * step:.2g}"


def _require_finite(
    values: NDArray[np.float64],
    quantity: str,
    names: tuple[str, ...],
    on: str,
    places: NDArray[np.float64],
    where: str,
) -> None:
    finite = np.isfinite(values)
    bad = np.flatnonzero(~(finite if finite.ndim == 1 else finite.all(axis=1)))
    if bad.size:
        at = ", ".join(f"{x:.6g}" for x in places[bad[0]])
        raise FieldError(
            f"array '{', '.join(names)}' on {on} of {where} gives {bad.size} of {values.shape[0]} values that are not "
            f"finite, the first at ({at}) m",
            where=f"flow.{quantity}",
            remedy="Export the field again, without NaN or infinity where the surface lies",
        )
