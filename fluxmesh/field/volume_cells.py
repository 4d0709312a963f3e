"""Places located in the cells of a grid, and node values there."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.field.volume_boxes import box_of
from fluxmesh.field.volume_probe import STRAIGHT, CellSearch, nearest_on_skin
from fluxmesh.field.volume_shapes import CellMap, cell_map, outside_tetrahedra
from fluxmesh.surface.readers.faces import gather
from fluxmesh.surface.readers.vtk_cells import cell_arrays, cell_types

__all__ = ["Located", "cell_points", "locate", "used_nodes"]

_TETRA: Final = 10
_BOXES: Final = (11, 12)  # VTK grants these no margin, and mostly inverts them to round-off
_OFF: Final = 1e-12  # of the volume's size: a value that belongs to a place farther off is put right
_ROUND_OFF: Final = 1e-9  # of a cell: a place outside by no more is inside
# VTK takes a place up to a thousandth of a cell outside it for inside, of a wedge up to six hundredths. By so
# much of its distance from the middle of the cell a place is moved away, and by more where that was too little.
_MOVE: Final = 0.01
_LONGER: Final = 5.0
_STEPS: Final = 4
_RUN: Final = 6  # quadrature points of a straight triangle
_BLOCK: Final = 8192


@dataclass(frozen=True, eq=False)
class Located:
    """Where places lie in a grid, and node values there.

    Attributes
    ----------
    cell : ndarray, shape (n_places,), int64
        Cell that holds the place or is nearest to it; -1 beyond reach.
    inside : ndarray, shape (n_places,), bool
        Whether a cell holds the place.
    nearest : ndarray, shape (n_places, 3), float64
        The place itself, to round-off, or the nearest point of the volume, in
        the grid's unit; anything where `cell` is -1.
    values : ndarray, shape (n_places, k), float64
        Node values there.
    """

    cell: NDArray[np.int64]
    inside: NDArray[np.bool_]
    nearest: NDArray[np.float64]
    values: NDArray[np.float64]


def locate(grid: Any, node_values: NDArray[np.float64], places: NDArray[np.float64], reach: float) -> Located:
    """Locate places in the cells of a grid and interpolate node values there.

    Parameters
    ----------
    grid : vtkUnstructuredGrid
        Volume cells only.
    node_values : ndarray, shape (n_points, k), float64
        Values on points; k may be 0.
    places : ndarray, shape (n_places, 3), float64
        Places in the grid's unit; at least one.
    reach : float
        How far from the volume a place may lie, in the grid's unit.

    Returns
    -------
    Located
        Inside a cell its own shape functions at the place; within reach of
        the volume the same at the nearest point of its skin.
    """
    from vtkmodules.util.numpy_support import vtk_to_numpy

    points = vtk_to_numpy(grid.GetPoints().GetData()).astype(np.float64, copy=False)
    table = np.concatenate([points, node_values], axis=1)
    order = _along_curve(places)
    places = places[order]
    search, cells = CellSearch(grid, table), _Cells(grid, table)
    inside, cell, there = search.at(places)
    left = _put_right(search, cells, places, cell, there, inside)
    found = inside.copy()
    inside[left] = False
    missed = np.flatnonzero(~inside)
    if missed.size:
        _take_nearest(search, cells, places, reach, missed, cell, there, found)
    cell[~found] = -1
    back = np.empty_like(order)
    back[order] = np.arange(order.size)
    there = there[back]
    return Located(cell[back], inside[back], there[:, :3], there[:, 3:])


def _along_curve(places: NDArray[np.float64]) -> NDArray[np.intp]:
    """Return the order of places along a space-filling curve (G. M. Morton's, 1966, from memory), run by run.

    Neighbours in space become neighbours in time: the search stays in the processor's cache, however the faces are
    ordered. The quadrature points of one triangle stay together: they often lie in one cell, which VTK tries first.
    """
    heads = places[::_RUN]
    low, high = box_of(heads)
    size = float((high - low).max())
    scale = 1023.0 / size if size > 0 else 0.0
    key = np.zeros(heads.shape[0], dtype=np.uint32)
    for axis in range(3):
        bits = ((heads[:, axis] - low[axis]) * scale).astype(np.uint32)
        for shift, mask in ((16, 0x030000FF), (8, 0x0300F00F), (4, 0x030C30C3), (2, 0x09249249)):
            bits = (bits | (bits << np.uint32(shift))) & np.uint32(mask)
        key |= bits << np.uint32(axis)
    order = (np.argsort(key)[:, None] * _RUN + np.arange(_RUN)).ravel()
    return np.asarray(order[order < places.shape[0]])


def cell_points(grid: Any) -> NDArray[np.floating[Any]]:
    """Return the points that cells use.

    Parameters
    ----------
    grid : vtkUnstructuredGrid
        Cells.

    Returns
    -------
    ndarray, shape (n, 3), float32 or float64
        In the grid's unit.
    """
    from vtkmodules.util.numpy_support import vtk_to_numpy

    points: NDArray[Any] = vtk_to_numpy(grid.GetPoints().GetData())
    used = used_nodes(grid)
    return points if used.all() else points[used]


def used_nodes(grid: Any) -> NDArray[np.bool_]:
    """Return which points cells use.

    Parameters
    ----------
    grid : vtkUnstructuredGrid
        Cells.

    Returns
    -------
    ndarray, shape (n_points,), bool
        True where at least one cell does.
    """
    used = np.zeros(int(grid.GetNumberOfPoints()), dtype=np.bool_)
    used[cell_arrays(grid.GetCells())[0]] = True
    return used


class _Cells:
    """The cells of a grid by their shape functions."""

    def __init__(self, grid: Any, table: NDArray[np.float64]) -> None:
        self.table = table
        self.types = cell_types(grid)
        self.connectivity, starts = cell_arrays(grid.GetCells())
        self.starts = np.arange(0, self.connectivity.size + 1, 3) if starts is None else starts
        self.known = np.zeros(256, dtype=np.bool_)
        for number in np.unique(self.types):
            self.known[number] = cell_map(int(number)) is not None

    def blocks(self, cell: NDArray[np.int64]) -> Iterator[tuple[CellMap, NDArray[np.intp], NDArray[np.int64]]]:
        """Yield the shape functions, some of the places, and the nodes of their cells."""
        types = self.types[cell]
        for number in np.unique(types):
            shape = cell_map(int(number))
            if shape is None:
                continue
            every = np.flatnonzero(types == number)
            for first in range(0, every.size, _BLOCK):
                some = every[first : first + _BLOCK]
                yield shape, some, self.connectivity[self.starts[cell[some]][:, None] + np.arange(shape.size)]

    def inverse(
        self, cell: NDArray[np.int64], places: NDArray[np.float64]
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Return parametric coordinates of places in cells, and how far outside each lies (infinite: not known)."""
        at, outside = np.zeros((cell.size, 3)), np.full(cell.size, np.inf)
        for shape, some, rows in self.blocks(cell):
            at[some], found = shape.invert(self.table[rows, :3], places[some])
            outside[some] = np.where(found, shape.outside(at[some]), np.inf)
        return at, outside

    def outside_tetrahedra(self, cell: NDArray[np.int64], places: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return how far outside straight tetrahedra places lie."""
        outside = np.zeros(cell.size)
        points = np.ascontiguousarray(self.table[:, :3].T)
        for first in range(0, cell.size, _BLOCK):
            some = slice(first, first + _BLOCK)
            rows = self.connectivity[self.starts[cell[some]][:, None] + np.arange(4)]
            outside[some] = outside_tetrahedra(points, rows, places[some])
        return outside

    def values(self, cell: NDArray[np.int64], at: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the table at parametric coordinates of cells."""
        values = np.zeros((cell.size, self.table.shape[1]))
        for shape, some, rows in self.blocks(cell):
            values[some] = shape.values(at[some], self.table[rows])
        return values

    def middle(self, cell: NDArray[np.int64]) -> NDArray[np.float64]:
        """Return the mean of the nodes of cells."""
        middle = np.zeros((cell.size, 3))
        for _, some, rows in self.blocks(cell):
            middle[some] = self.table[rows, :3].mean(axis=1)
        return middle

    def neighbours(self, cell: NDArray[np.int64]) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        """Return pairs of an index into `cell` and a cell that shares a node with it, itself included."""
        some = np.unique(cell)
        own, firsts = gather(self.connectivity, self.starts, some)
        near = np.zeros(self.table.shape[0], dtype=np.bool_)
        near[own] = True
        entries = np.flatnonzero(near[self.connectivity])
        entries = entries[np.argsort(self.connectivity[entries], kind="stable")]
        node, owner = self.connectivity[entries], np.searchsorted(self.starts, entries, side="right") - 1
        low, high = (np.searchsorted(node, own, side=side) for side in ("left", "right"))
        count = high - low
        # for each cell of `some` the owners at its nodes, one node after the other
        ends = np.concatenate([[0], np.cumsum(count)])
        found = owner[np.repeat(low - ends[:-1], count) + np.arange(ends[-1])]
        taken, ends = gather(found, ends[firsts], np.searchsorted(some, cell))
        return np.repeat(np.arange(cell.size), np.diff(ends)), taken

    def clamped(self, cell: NDArray[np.int64], at: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return parametric coordinates moved into the cell."""
        clamped = at.copy()
        for shape, some, _ in self.blocks(cell):
            clamped[some] = shape.clamp(at[some])
        return clamped


def _put_right(
    search: CellSearch,
    cells: _Cells,
    places: NDArray[np.float64],
    cell: NDArray[np.int64],
    there: NDArray[np.float64],
    inside: NDArray[np.bool_],
) -> NDArray[np.intp]:
    """Make the cells and values that VTK found those at the very places; return the places that lie in no cell.

    VTK takes a place a little outside a cell for inside it, and inverts warped and curved cells to a few digits.
    """
    near = _OFF * float(np.linalg.norm(np.subtract(*box_of(cells.table[:, :3]))))
    types = cells.types[cell]
    doubtful = inside & cells.known[types] & (types != _TETRA)
    boxes = np.flatnonzero(doubtful & np.isin(types, _BOXES))
    off = there[boxes, :3] - places[boxes]
    doubtful[boxes] = np.einsum("ij,ij->i", off, off) > near**2
    chosen = np.flatnonzero(doubtful)
    at, outside = cells.inverse(cell[chosen], places[chosen])
    renewed = np.isfinite(outside)
    # on tetrahedra VTK's values are right to round-off, whether the place is in the cell or only just not
    tetra = np.flatnonzero(inside & (types == _TETRA))
    beside = cells.outside_tetrahedra(cell[tetra], places[tetra])
    tetra, beside = tetra[beside > _ROUND_OFF], beside[beside > _ROUND_OFF]
    chosen = np.concatenate([chosen, tetra])
    at, outside = np.concatenate([at, np.zeros((tetra.size, 3))]), np.concatenate([outside, beside])
    renewed = np.concatenate([renewed, np.zeros(tetra.size, np.bool_)])
    # walk from cell to cell: a place moved away from the middle of one that does not hold it lies in the next
    lost = np.zeros(chosen.size, dtype=np.bool_)
    last, move = cell[chosen], np.full(chosen.size, _MOVE)
    for _ in range(_STEPS):
        # those whose inverse came to no rest keep what VTK says, and so do those beside a polyhedron
        some = np.flatnonzero((outside > _ROUND_OFF) & np.isfinite(outside) & ~lost & cells.known[cells.types[last]])
        if not some.size:
            break
        place = places[chosen[some]]
        hit, other, _ = search.at(place + move[some, None] * (place - cells.middle(last[some])))
        lost[some[~hit]] = True
        some, other, place = some[hit], other[hit], place[hit]
        move[some] = np.where(other == last[some], move[some] * _LONGER, _MOVE)
        last[some] = other
        there_at, there_outside = cells.inverse(other, place)
        better = there_outside < outside[some]
        taken = some[better]
        cell[chosen[taken]] = other[better]
        at[taken], outside[taken] = there_at[better], there_outside[better]
        renewed[taken] = True
    some = np.flatnonzero((outside > _ROUND_OFF) & np.isfinite(outside) & ~lost)
    if some.size:
        # past a thin corner of a cell the walk may step over it: look at all neighbours
        of, other = cells.neighbours(cell[chosen[some]])
        there_at, there_outside = cells.inverse(other, places[chosen[some[of]]])
        first = np.lexsort((there_outside, of))
        first = first[np.searchsorted(of[first], np.arange(some.size))]
        better = there_outside[first] < outside[some]
        taken, first = some[better], first[better]
        cell[chosen[taken]] = other[first]
        at[taken], outside[taken] = there_at[first], there_outside[first]
        renewed[taken] = True
    kept = chosen[renewed]
    there[kept] = cells.values(cell[kept], at[renewed])
    return chosen[lost & (outside > _ROUND_OFF)]


def _take_nearest(
    search: CellSearch,
    cells: _Cells,
    places: NDArray[np.float64],
    reach: float,
    missed: NDArray[np.intp],
    cell: NDArray[np.int64],
    there: NDArray[np.float64],
    found: NDArray[np.bool_],
) -> None:
    """Give places outside all cells the values at the nearest point of the volume, in place."""
    hit, owner, values = nearest_on_skin(search, places[missed], reach)
    missed, owner, values = missed[hit], owner[hit], values[hit]
    place = places[missed]
    curved = np.flatnonzero(~np.isin(cells.types[owner], STRAIGHT) & cells.known[cells.types[owner]])
    if curved.size:
        # the skin of curved cells was searched as small facets: now the cell itself tells the nearest point, from
        # where the facet has it, or from the parametric coordinates of the place when they are only just outside
        some, target = owner[curved], place[curved]
        at, outside = cells.inverse(some, target)
        on_facet, beside = cells.inverse(some, values[curved, :3])
        candidates = np.stack([cells.values(some, cells.clamped(some, where)) for where in (at, on_facet)])
        away = np.linalg.norm(candidates[..., :3] - target, axis=2)
        away[0, ~np.isfinite(outside)] = np.inf
        away[1, ~np.isfinite(beside)] = np.inf
        best = away.argmin(axis=0)
        sound = np.isfinite(away.min(axis=0))
        values[curved[sound]] = candidates[best, np.arange(curved.size)][sound]
    cell[missed], there[missed], found[missed] = owner, values, True
