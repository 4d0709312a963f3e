"""Coordinates and flow solutions of a CGNS zone as plain arrays."""

from __future__ import annotations

from collections import Counter
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError, FileError
from fluxmesh.surface.readers.cgns_boundary import PointSet, location_of, point_set
from fluxmesh.surface.readers.cgns_nodes import Node

__all__ = ["ListedArrays", "read_coordinates", "read_solutions"]

ListedArrays = list[tuple[PointSet, dict[str, NDArray[Any]]]]
"""Arrays that sit on listed faces only."""


def read_coordinates(zone: Node, shape: tuple[int, ...]) -> NDArray[Any]:
    """Read the points of a zone.

    Parameters
    ----------
    zone : Node
        A Zone_t node.
    shape : tuple of int
        Number of points along each index.

    Returns
    -------
    ndarray, shape (n_points, 3), float32 or float64
        The first index runs fastest. A plane zone lies at z = 0.

    Raises
    ------
    FileError
        No Cartesian coordinates, or not one for each point.
    """
    grids = zone.children("GridCoordinates_t")
    grid = next((node for node in grids if node.name == "GridCoordinates"), grids[0] if grids else None)
    arrays = {} if grid is None else {node.name: node for node in grid.children("DataArray_t")}
    if "CoordinateX" not in arrays or "CoordinateY" not in arrays:
        raise FileError(
            f"has no Cartesian coordinates, but {', '.join(sorted(arrays)) or 'none'}",
            zone.where,
            "Export CoordinateX, CoordinateY and CoordinateZ",
        )
    assert grid is not None
    columns = [_core(arrays[name], grid, shape) for name in ("CoordinateX", "CoordinateY")]
    columns.append(_core(arrays["CoordinateZ"], grid, shape) if "CoordinateZ" in arrays else np.zeros_like(columns[0]))
    points = np.column_stack(columns)
    return points if points.dtype in (np.float32, np.float64) else points.astype(np.float64)


def read_solutions(
    zone: Node, vertices: tuple[int, ...], cells: tuple[int, ...]
) -> tuple[dict[str, NDArray[Any]], dict[str, NDArray[Any]], ListedArrays]:
    """Read the flow solutions of a zone.

    Parameters
    ----------
    zone : Node
        A Zone_t node.
    vertices, cells : tuple of int
        Number of points and of cells along each index.

    Returns
    -------
    nodes : dict of str to ndarray, shape (n_points,)
        Arrays at vertices.
    cells : dict of str to ndarray, shape (n_cells,)
        Arrays at cell centres.
    faces : ListedArrays
        Arrays at the centres of listed faces.

        A name that several solutions of one place have is given as
        "solution/name".

    Raises
    ------
    FieldError
        An array has the wrong length.
    FileError
        A solution is damaged.
    """
    solutions = zone.children("FlowSolution_t")
    counts = Counter(
        (location_of(solution), array.name) for solution in solutions for array in solution.children("DataArray_t")
    )
    at_nodes: dict[str, NDArray[Any]] = {}
    at_cells: dict[str, NDArray[Any]] = {}
    at_faces: ListedArrays = []
    for solution in solutions:
        location = location_of(solution)
        covered = point_set(solution, len(vertices))
        arrays = {}
        for array in solution.children("DataArray_t"):
            name = array.name if counts[location, array.name] == 1 else f"{solution.name}/{array.name}"
            if covered is not None or location not in ("Vertex", "CellCenter"):
                arrays[name] = array.values().ravel()
            else:
                arrays[name] = _core(array, solution, vertices if location == "Vertex" else cells)
        if covered is not None:
            if location.endswith("FaceCenter"):
                at_faces.append((covered, arrays))
        elif location == "Vertex":
            at_nodes |= arrays
        elif location == "CellCenter":
            at_cells |= arrays
    return at_nodes, at_cells, at_faces


def _core(array: Node, owner: Node, shape: tuple[int, ...]) -> NDArray[Any]:
    """Return an array in one row, first index fastest, without the planes beyond the zone."""
    values = array.values()
    rind = owner.child("Rind")
    planes = np.zeros(2 * len(shape), dtype=np.int64) if rind is None else rind.integers()
    if planes.size != 2 * len(shape) or bool((planes < 0).any()):
        raise FileError(f"has the rind {planes.tolist()}", owner.where, "The file is damaged; export it again")
    full = tuple(int(n + a + b) for n, a, b in zip(shape, planes[::2], planes[1::2]))
    if values.size != int(np.prod(full)):
        raise FieldError(
            f"array {array.name!r} holds {values.size} values, but there are {int(np.prod(full))} places",
            array.where,
            "Export it again",
        )
    if not planes.any():
        return values.ravel()
    inside = tuple(slice(int(a), int(a) + n) for n, a in zip(shape, planes[::2]))
    # stored with the first index last
    return values.reshape(full[::-1])[inside[::-1]].ravel()
