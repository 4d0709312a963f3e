"""Sampled values of a volume to one order more than its cells interpolate them.

Where node values are joined linearly, the slopes of all cells that meet at a node have the mean ``g_i``, and with the
shape functions ``N_i`` of a cell

    sum N_i (u_i + g_i·(x - x_i) / 2)

is a quadratic field exactly, if the slopes are: of ``sum N_i u_i`` and ``sum N_i (u_i + g_i·(x - x_i))`` the one is as
much too large as the other is too small, by Taylor's theorem and because the shape functions carry linear fields
(averaged slopes: O. C. Zienkiewicz, J. Z. Zhu, Int. J. Numer. Methods Eng. 24, 1987, from memory). Where
values belong to cells, the mean of the cells at each node is joined instead, which carries a linear field.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.field.volume_boxes import box_of
from fluxmesh.field.volume_cells import Located, cell_points, locate, used_nodes
from fluxmesh.field.volume_probe import STRAIGHT
from fluxmesh.surface.readers.vtk_cells import cell_arrays, cell_types
from fluxmesh.surface.readers.vtk_messages import captured_messages

__all__ = ["Sharpened", "sharpen"]

Array = NDArray[np.float64]

_NODES, _CELLS, _NEAR = "values on nodes", "values on cells", "near"
_ROUNDED = 1e-6  # of the volume's size: so far off a place on its skin may seem to be


@dataclass(frozen=True, eq=False)
class Sharpened:
    """Sampled values to one order more.

    Attributes
    ----------
    on_nodes : ndarray, shape (n_places, k), float64
        Of node arrays; as interpolated in cells that are quadratic already.
    on_cells : ndarray, shape (n_places, l), float64
        Of cell arrays.
    known : ndarray, shape (n_places,), bool
        Whether those of node arrays are sharpened there.
    """

    on_nodes: Array
    on_cells: Array
    known: NDArray[np.bool_]


def sharpen(grid: Any, node_values: Array, cell_values: Array, located: Located) -> Sharpened:
    """Sharpen values sampled from a volume.

    Parameters
    ----------
    grid : vtkUnstructuredGrid
        Volume cells only; it stays as it is.
    node_values : ndarray, shape (n_points, k), float64
        Values on points.
    cell_values : ndarray, shape (n_cells, l), float64
        Values in cells.
    located : Located
        Where the places lie in the grid, and the node values there.

    Returns
    -------
    Sharpened
        At a skin the slopes are those of its inner side, so that what is added is up to twice too small there.
    """
    plain, width = located.values, node_values.shape[1]
    held = located.cell >= 0
    cell = np.where(held, located.cell, 0)
    near = _near(grid, node_values, cell_values, located.cell[held])
    size = float(np.linalg.norm(np.ptp(box_of(cell_points(near)), axis=0)))
    found = locate(near, _columns(near, width), located.nearest, _ROUNDED * size)
    slopes = found.values[:, : 3 * width].reshape(plain.shape[0], width, 3)
    added = 0.5 * (np.einsum("pkd,pd->pk", slopes, found.nearest) - found.values[:, 3 * width : 4 * width])
    known = held & (found.cell >= 0) & np.isfinite(added).all(axis=1)
    joined = np.where(known[:, None], found.values[:, 4 * width :], cell_values[cell])
    known &= np.isin(cell_types(grid)[cell], STRAIGHT)
    sharp = plain + np.where(known[:, None], added, 0.0)
    # a density, a temperature or an absolute pressure must not fall below zero beside a steep front
    positive = (node_values > 0.0).all(axis=0, where=used_nodes(grid)[:, None])
    return Sharpened(np.where(positive & (sharp <= 0.0), plain, sharp), joined, known)


def _near(grid: Any, node_values: Array, cell_values: Array, cells: NDArray[np.int64]) -> Any:
    """The cells that share a node with those that hold a place, with their values."""
    from vtkmodules.util.numpy_support import numpy_to_vtk
    from vtkmodules.vtkCommonDataModel import vtkDataObject, vtkUnstructuredGrid
    from vtkmodules.vtkFiltersCore import vtkThreshold

    connectivity, starts = cell_arrays(grid.GetCells())
    starts = np.arange(0, connectivity.size + 1, 3) if starts is None else starts
    holds = np.zeros(starts.size - 1, np.bool_)
    holds[cells] = True
    touched = np.zeros(int(grid.GetNumberOfPoints()), np.bool_)
    touched[connectivity[np.repeat(holds, np.diff(starts))]] = True
    near = np.logical_or.reduceat(touched[connectivity], starts[:-1])
    whole = vtkUnstructuredGrid()
    whole.CopyStructure(grid)
    for data, name, values in (
        (whole.GetPointData(), _NODES, node_values),
        (whole.GetCellData(), _CELLS, cell_values),
        (whole.GetCellData(), _NEAR, near.astype(np.uint8)),
    ):
        if values.size:
            array = numpy_to_vtk(np.ascontiguousarray(values))
            array.SetName(name)
            data.AddArray(array)
    part = vtkThreshold()
    part.SetInputData(whole)
    part.SetInputArrayToProcess(0, 0, 0, vtkDataObject.FIELD_ASSOCIATION_CELLS, _NEAR)
    part.SetUpperThreshold(0.5)
    part.SetThresholdFunction(vtkThreshold.THRESHOLD_UPPER)
    with captured_messages():
        part.Update()
    return part.GetOutput()


def _columns(near: Any, width: int) -> Array:
    """On each point the slopes of the node values, those times where it lies, and the mean of the cells' values."""
    from vtkmodules.util.numpy_support import vtk_to_numpy
    from vtkmodules.vtkCommonDataModel import vtkDataObject
    from vtkmodules.vtkFiltersCore import vtkCellDataToPointData
    from vtkmodules.vtkFiltersGeneral import vtkGradientFilter

    points = vtk_to_numpy(near.GetPoints().GetData()).astype(np.float64)
    slopes = np.zeros((points.shape[0], width, 3))
    if width:
        gradient = vtkGradientFilter()
        gradient.SetInputData(near)
        gradient.SetInputArrayToProcess(0, 0, 0, vtkDataObject.FIELD_ASSOCIATION_POINTS, _NODES)
        gradient.SetResultArrayName("slopes")
        with captured_messages():
            gradient.Update()
        slopes = vtk_to_numpy(gradient.GetOutput().GetPointData().GetArray("slopes")).reshape(-1, width, 3)
    means = np.zeros((points.shape[0], 0))
    if near.GetCellData().GetArray(_CELLS) is not None:
        to_points = vtkCellDataToPointData()
        to_points.SetInputData(near)
        with captured_messages():
            to_points.Update()
        means = vtk_to_numpy(to_points.GetOutput().GetPointData().GetArray(_CELLS)).reshape(points.shape[0], -1)
    along = np.einsum("pkd,pd->pk", slopes, points)
    return np.concatenate([slopes.reshape(points.shape[0], -1), along, means], axis=1).astype(np.float64)
