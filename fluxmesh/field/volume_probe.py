"""VTK's search for the cell at a place, and for the nearest point of a volume's skin."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.field.volume_boxes import box_of
from fluxmesh.surface.readers.faces import gather
from fluxmesh.surface.readers.vtk_cells import cell_arrays, cell_types
from fluxmesh.surface.readers.vtk_messages import captured_messages

__all__ = ["STRAIGHT", "CellSearch", "Probed", "farthest", "nearest_on_skin"]

_NUMBER, _VALUES = "cell number", "values"
_FACET_LEVEL: Final = 3  # a curved face becomes facets: its edges are halved so often
STRAIGHT: Final = (10, 11, 12, 13, 14, 15, 16, 42)
"""Straight-edged cells in the numbers of the open VTK file format; the others may have curved faces."""

Probed = tuple[NDArray[np.bool_], NDArray[np.int64], NDArray[np.float64]]
"""Whether something was found at each place; the number of its cell; the values there."""


class CellSearch:
    """The cells of a grid, ready to be searched and to interpolate a table of node values.

    Parameters
    ----------
    grid : vtkUnstructuredGrid
        Volume cells only; it stays as it is.
    table : ndarray, shape (n_points, 3 + k), float64
        Coordinates and values of its points.
    """

    def __init__(self, grid: Any, table: NDArray[np.float64]) -> None:
        from vtkmodules.util.numpy_support import numpy_to_vtk
        from vtkmodules.vtkCommonDataModel import vtkCellTreeLocator, vtkUnstructuredGrid

        self.grid = vtkUnstructuredGrid()
        self.grid.CopyStructure(grid)
        _set_values(self.grid, table)
        number = numpy_to_vtk(np.arange(grid.GetNumberOfCells(), dtype=np.int64))
        number.SetName(_NUMBER)
        self.grid.GetCellData().AddArray(number)
        # A tree, as the cells of one flow mesh differ in size by orders of magnitude: in equal boxes, thousands
        # of boundary-layer cells would share one.
        self._tree = vtkCellTreeLocator()
        self._tree.SetDataSet(self.grid)  # built by the first probe

    def at(self, places: NDArray[np.float64]) -> Probed:
        """Find the cell that holds each place; VTK grants some cells a margin around them.

        Parameters
        ----------
        places : ndarray, shape (n_places, 3), float64
            Places in the grid's unit.

        Returns
        -------
        Probed
            With the table interpolated by VTK.
        """
        from vtkmodules.vtkFiltersCore import vtkProbeFilter

        return _probe(vtkProbeFilter(), self.grid, places, self._tree)


def nearest_on_skin(search: CellSearch, places: NDArray[np.float64], reach: float) -> Probed:
    """Find the nearest point of the volume's skin within reach.

    Parameters
    ----------
    search : CellSearch
        The volume.
    places : ndarray, shape (n_places, 3), float64
        Places in the grid's unit; at least one.
    reach : float
        How far to look.

    Returns
    -------
    Probed
        Cell behind the skin, and the table at the nearest point; curved faces
        are taken as small flat facets.
    """
    from vtkmodules.vtkCommonDataModel import vtkStaticCellLocator
    from vtkmodules.vtkFiltersCore import vtkProbeFilter

    low, high = box_of(places)
    with captured_messages(), _all_cores():
        skin = _skin(search.grid, low - reach, high + reach)
    if skin is None:
        width = search.grid.GetPointData().GetArray(_VALUES).GetNumberOfComponents()
        count = places.shape[0]
        return np.zeros(count, np.bool_), np.zeros(count, np.int64), np.zeros((count, width))
    if not _can_snap():
        return _nearest_one_by_one(skin, places, reach)
    probe = vtkProbeFilter()
    probe.SnapToCellWithClosestPointOn()
    probe.SetSnappingRadius(reach)
    locator = vtkStaticCellLocator()
    locator.SetDataSet(skin)
    return _probe(probe, skin, places, locator)


def _can_snap() -> bool:
    """Return whether VTK's probe takes the nearest cell within a radius: since VTK 9.7, on all cores."""
    from vtkmodules.vtkFiltersCore import vtkProbeFilter

    return hasattr(vtkProbeFilter, "SetSnappingRadius")


def _nearest_one_by_one(skin: Any, places: NDArray[np.float64], reach: float) -> Probed:
    """Do the same place by place."""
    from vtkmodules.util.numpy_support import vtk_to_numpy
    from vtkmodules.vtkCommonCore import reference
    from vtkmodules.vtkCommonDataModel import vtkGenericCell, vtkStaticCellLocator

    locator: Any = vtkStaticCellLocator()
    locator.SetDataSet(skin)
    locator.BuildLocator()
    table = vtk_to_numpy(skin.GetPointData().GetArray(_VALUES))
    number = vtk_to_numpy(skin.GetCellData().GetArray(_NUMBER))
    count = places.shape[0]
    found, owner, values = np.zeros(count, np.bool_), np.zeros(count, np.int64), np.zeros((count, table.shape[1]))
    near: list[float] = [0.0] * 3
    cell: Any = vtkGenericCell()
    for index, place in enumerate(places.tolist()):
        face = reference(0)
        if locator.FindClosestPointWithinRadius(place, reach, near, cell, face, reference(0), reference(0.0)):
            weights = [0.0] * int(cell.GetNumberOfPoints())
            cell.EvaluatePosition(near, [0.0] * 3, reference(0), [0.0] * 3, reference(0.0), weights)
            rows = [cell.GetPointId(corner) for corner in range(len(weights))]
            found[index], owner[index], values[index] = True, number[int(face)], weights @ table[rows]
    return found, owner, values


def farthest(grid: Any, places: NDArray[np.float64], *, most: int = 2000) -> tuple[int, float]:
    """Return the place that is farthest from a volume, for messages.

    Parameters
    ----------
    grid : vtkUnstructuredGrid
        Volume cells only.
    places : ndarray, shape (n_places, 3), float64
        Places outside the volume, in the grid's unit; at least one.
    most : int, optional
        How many to look at: those farthest from the volume's box.

    Returns
    -------
    index : int
        Which place.
    distance : float
        Its distance from the nearest point of the skin, in the grid's unit.
    """
    from vtkmodules.util.numpy_support import vtk_to_numpy
    from vtkmodules.vtkCommonCore import reference
    from vtkmodules.vtkCommonDataModel import vtkGenericCell, vtkStaticCellLocator

    table = vtk_to_numpy(grid.GetPoints().GetData()).astype(np.float64)
    low, high = box_of(table[:, :3])
    over = np.maximum(np.maximum(low - places, places - high), 0.0)
    looked = np.argsort(-(over**2).sum(axis=1), kind="stable")[:most]
    near = np.empty((looked.size, 3))
    with captured_messages():
        locator: Any = vtkStaticCellLocator()
        locator.SetDataSet(_skin(CellSearch(grid, table).grid, low, high))
        locator.BuildLocator()
        held, cell = [0.0] * 3, vtkGenericCell()
        for row, place in zip(near, places[looked].tolist()):
            locator.FindClosestPoint(place, held, cell, reference(0), reference(0), reference(0.0))
            row[:] = held
    distances = np.sqrt(((near - places[looked]) ** 2).sum(axis=1))
    last = int(distances.argmax())
    return int(looked[last]), float(distances[last])


@contextmanager
def _all_cores() -> Iterator[None]:
    """Let VTK's filters use all cores; its own default is one. The result does not depend on it."""
    from vtkmodules.vtkCommonCore import vtkSMPTools

    before = vtkSMPTools.GetBackend()
    if before == "Sequential":
        vtkSMPTools.SetBackend("STDThread")
    try:
        yield
    finally:
        vtkSMPTools.SetBackend(before)


def _probe(probe: Any, source: Any, places: NDArray[np.float64], locator: Any) -> Probed:
    from vtkmodules.util.numpy_support import numpy_to_vtk, vtk_to_numpy
    from vtkmodules.vtkCommonCore import vtkPoints
    from vtkmodules.vtkCommonDataModel import vtkPolyData

    points, at = vtkPoints(), vtkPolyData()
    points.SetData(numpy_to_vtk(np.ascontiguousarray(places)))
    at.SetPoints(points)
    probe.SetInputData(at)
    probe.SetSourceData(source)
    if hasattr(probe, "SetCellLocator"):  # since VTK 9.7
        probe.SetCellLocator(locator)
    else:
        probe.SetCellLocatorPrototype(locator)
    # no tolerance on top of the margin that each cell has: a place outside all cells is told from one inside
    probe.ComputeToleranceOff()
    probe.SetTolerance(0.0)
    with captured_messages(), _all_cores():
        probe.Update()
    data = probe.GetOutput().GetPointData()
    found = vtk_to_numpy(data.GetArray(probe.GetValidPointMaskArrayName())) != 0
    cell = np.where(found, vtk_to_numpy(data.GetArray(_NUMBER)), 0).astype(np.int64)
    return found, cell, vtk_to_numpy(data.GetArray(_VALUES))


def _set_values(data: Any, table: NDArray[np.float64]) -> None:
    from vtkmodules.util.numpy_support import numpy_to_vtk

    values = numpy_to_vtk(np.ascontiguousarray(table))
    values.SetName(_VALUES)
    data.GetPointData().AddArray(values)


def _skin(grid: Any, low: NDArray[np.float64], high: NDArray[np.float64]) -> Any:
    """Return the faces of a volume's skin that meet a box, with values and cell numbers; None if there are none.

    Only those: the search is quick where its faces are of like size.
    """
    from vtkmodules.util.numpy_support import numpy_to_vtk, numpy_to_vtkIdTypeArray, vtk_to_numpy
    from vtkmodules.vtkCommonCore import vtkPoints
    from vtkmodules.vtkCommonDataModel import vtkCellArray, vtkPolyData
    from vtkmodules.vtkFiltersCore import vtkTriangleFilter
    from vtkmodules.vtkFiltersGeometry import vtkDataSetSurfaceFilter, vtkGeometryFilter

    if np.isin(np.unique(cell_types(grid)), STRAIGHT).all():
        outer: Any = vtkGeometryFilter()
        outer.MergingOff()
    else:
        outer = vtkDataSetSurfaceFilter()
        outer.SetNonlinearSubdivisionLevel(_FACET_LEVEL)
    outer.SetInputData(grid)
    outer.Update()
    skin = outer.GetOutput()
    if skin.GetPolys().GetMaxCellSize() > 4:
        # on triangles linear fields are exact; VTK weighs the corners of a polygon by their distance
        triangles = vtkTriangleFilter()
        triangles.SetInputData(skin)
        triangles.Update()
        skin = triangles.GetOutput()
    connectivity, starts = cell_arrays(skin.GetPolys())
    starts = np.arange(0, connectivity.size + 1, 3) if starts is None else starts
    values = vtk_to_numpy(skin.GetPointData().GetArray(_VALUES))
    corners = values[connectivity, :3]
    near = (np.maximum.reduceat(corners, starts[:-1]) >= low) & (np.minimum.reduceat(corners, starts[:-1]) <= high)
    kept = np.flatnonzero(near.all(axis=1))
    if not kept.size:
        return None
    connectivity, starts = gather(connectivity, starts.astype(np.int64), kept)
    used, connectivity = np.unique(connectivity, return_inverse=True)
    # two corners that no face uses: VTK looks at no place outside the box of all points
    table = np.zeros((used.size + 2, values.shape[1]))
    table[:-2], table[-2:, :3] = values[used], (low, high)
    points, polys, part = vtkPoints(), vtkCellArray(), vtkPolyData()
    points.SetData(numpy_to_vtk(np.ascontiguousarray(table[:, :3])))
    polys.SetData(numpy_to_vtkIdTypeArray(starts, deep=True), numpy_to_vtkIdTypeArray(connectivity.ravel(), deep=True))
    part.SetPolys(polys)
    part.SetPoints(points)
    _set_values(part, table)
    number = numpy_to_vtk(vtk_to_numpy(skin.GetCellData().GetArray(_NUMBER))[kept])
    number.SetName(_NUMBER)
    part.GetCellData().AddArray(number)
    return part
