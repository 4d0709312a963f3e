"""Quadratic triangles in a plane: divided in four, and Poisson's equation solved on them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluxmesh.field.profiles.dissection import dissection_order
from fluxmesh.integral.rules import TRIANGLE_DEGREE4
from fluxmesh.integral.shapes import quadratic_triangle

__all__ = ["PlaneMesh", "child_of", "divided", "loose_parts", "quadratic_values", "solve_poisson"]

# Sine of the angle between the longest and the shortest side that a triangle counts with at least. In
# triangles flatter than that the elements lock (largest angle near 180°: Babuška and Aziz 1976, SIAM J.
# Numer. Anal. 13:214-226, from memory). Measured on a square with one such triangle across it: at worst
# 2e-4 of the momentum factor is lost at this value, 3e-3 at 1e-2, 5e-2 without a floor.
_FLATTEST = 2e-4
_THINNEST = 1e-9  # and twice its area over the square of the longest side: points that coincide but for round-off


@dataclass(frozen=True, eq=False)
class PlaneMesh:
    """Quadratic triangles in a plane.

    Attributes
    ----------
    nodes : ndarray, shape (n_nodes, 2), float64
        Coordinates.
    triangles : ndarray, shape (n_triangles, 6), int64
        Corners, then mid-side nodes 0-1, 1-2, 2-0. An edge has one mid-side node.
    fixed : ndarray, shape (n_nodes,), bool
        Nodes where the solution is zero; a fixed mid-side node means that its
        whole edge is fixed.
    """

    nodes: NDArray[np.float64]
    triangles: NDArray[np.int64]
    fixed: NDArray[np.bool_]


def divided(mesh: PlaneMesh) -> PlaneMesh:
    """Divide each triangle into four; the outline, curved or straight, stays what it is.

    Parameters
    ----------
    mesh : PlaneMesh
        The mesh.

    Returns
    -------
    PlaneMesh
        Triangle ``t`` becomes ``4 t`` to ``4 t + 2`` at its corners and
        ``4 t + 3`` in the middle (see `child_of`).
    """
    corner, middle = mesh.triangles[:, :3], mesh.triangles[:, 3:]
    count, parts = len(mesh.nodes), len(corner)
    following = np.roll(corner, -1, axis=1)
    edges, first, number = np.unique(middle.ravel(), return_index=True, return_inverse=True)
    low = np.minimum(corner, following).ravel()[first]
    high = np.maximum(corner, following).ravel()[first]
    x = mesh.nodes
    # the quadratic through the ends and the middle, a quarter of the way along
    near_low = 0.375 * x[low] + 0.75 * x[edges] - 0.125 * x[high]
    near_high = 0.375 * x[high] + 0.75 * x[edges] - 0.125 * x[low]
    c, m = x[corner], x[middle]
    # and within: between the middles of the sides that meet in corner k
    inner = 0.5 * (m + np.roll(m, 1, axis=1)) + 0.25 * np.roll(m, -1, axis=1)
    inner -= 0.125 * (np.roll(c, -1, axis=1) + np.roll(c, 1, axis=1))
    quarter = count + 2 * number.reshape(parts, 3)
    at_tail = quarter + (corner > following)
    at_head = quarter + (corner < following)
    within = count + 2 * len(edges) + np.arange(3 * parts).reshape(parts, 3)
    c0, c1, c2 = corner.T
    m01, m12, m20 = middle.T
    children = [
        (c0, m01, m20, at_tail[:, 0], within[:, 0], at_head[:, 2]),
        (m01, c1, m12, at_head[:, 0], at_tail[:, 1], within[:, 1]),
        (m20, m12, c2, within[:, 2], at_head[:, 1], at_tail[:, 2]),
        (m12, m20, m01, within[:, 2], within[:, 0], within[:, 1]),
    ]
    return PlaneMesh(
        np.concatenate([x, np.stack([near_low, near_high], axis=1).reshape(-1, 2), inner.reshape(-1, 2)]),
        np.stack([np.stack(child, axis=1) for child in children], axis=1).reshape(-1, 6),
        np.concatenate([mesh.fixed, np.repeat(mesh.fixed[edges], 2), np.zeros(3 * parts, np.bool_)]),
    )


def child_of(
    triangle: NDArray[np.int64], weights: NDArray[np.float64]
) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Return where places in triangles lie after `divided`.

    Parameters
    ----------
    triangle : ndarray, shape (n,), int64
        Triangle of each place.
    weights : ndarray, shape (n, 3), float64
        Barycentric coordinates there.

    Returns
    -------
    triangle : ndarray, shape (n,), int64
        Triangle of the divided mesh.
    weights : ndarray, shape (n, 3), float64
        Barycentric coordinates in that one.
    """
    corner = weights.argmax(axis=1)
    in_corner = np.take_along_axis(weights, corner[:, None], axis=1)[:, 0] >= 0.5
    child = np.where(in_corner, corner, 3)
    inside = np.where(in_corner[:, None], 2 * weights - np.eye(3)[corner], 1 - 2 * weights)
    return 4 * triangle + child, inside


def quadratic_values(weights: NDArray[np.float64], nodal: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return quadratics at places in triangles.

    Parameters
    ----------
    weights : ndarray, shape (n, 3), float64
        Barycentric coordinates.
    nodal : ndarray, shape (n, 6), float64
        Values at the six nodes of the triangle of each place.

    Returns
    -------
    ndarray, shape (n,), float64
        The interpolated values.
    """
    shape = quadratic_triangle(weights[:, 1], weights[:, 2])[0]
    return np.asarray(np.einsum("ni,ni->n", shape, nodal))


def loose_parts(mesh: PlaneMesh) -> int:
    """Return how many connected parts of a mesh have no fixed node.

    Parameters
    ----------
    mesh : PlaneMesh
        The mesh.
    """
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    tails, heads = mesh.triangles[:, [0, 0, 0, 1, 2]].ravel(), mesh.triangles[:, [1, 2, 3, 4, 5]].ravel()
    count = len(mesh.nodes)
    graph = coo_array((np.ones(tails.size, np.bool_), (tails, heads)), (count, count))
    parts, label = connected_components(graph, directed=False)
    used, held = np.zeros(parts, np.bool_), np.zeros(parts, np.bool_)
    used[label[mesh.triangles[:, 0]]] = True
    held[label[mesh.fixed]] = True
    return int((used & ~held).sum())


def solve_poisson(mesh: PlaneMesh, *, quadratic: bool = True) -> NDArray[np.float64]:
    """Solve ``-lap u = 1``, ``u = 0`` on fixed nodes and no slope across the rest of the rim.

    Parameters
    ----------
    mesh : PlaneMesh
        Each connected part has a fixed node (see `loose_parts`).
    quadratic : bool, optional
        Quadratic elements (isoparametric where sides are curved); else linear
        ones on the corners, with the mean of two corners halfway.

    Returns
    -------
    ndarray, shape (n_nodes,), float64
        The solution, in the square of the nodes' unit; 0 at nodes of no triangle.

    Notes
    -----
    Galerkin's method (Strang and Fix 1973, An Analysis of the Finite Element
    Method, from memory): the error of `u` falls with the third power of the
    size of the triangles, with the second for linear ones, and slower about
    corners that jut into the port.
    """
    from scipy.sparse import csc_array
    from scipy.sparse.linalg import splu

    columns = 6 if quadratic else 3
    rows = mesh.triangles[:, :columns]
    stiffness, load = _quadratic_terms(mesh) if quadratic else _linear_terms(mesh)
    count = len(mesh.nodes)
    used = np.zeros(count, np.bool_)
    used[rows] = True
    order = dissection_order(rows, mesh.nodes[mesh.triangles[:, :3]].mean(axis=1), count)
    free = order[(used & ~mesh.fixed)[order]]
    number = np.full(count, -1)
    number[free] = np.arange(free.size)
    own = number[rows]
    i, j = np.repeat(own, columns, axis=1).ravel(), np.tile(own, (1, columns)).ravel()
    both = (i >= 0) & (j >= 0)
    matrix = csc_array((stiffness.ravel()[both], (i[both], j[both])), shape=(free.size, free.size))
    right = np.bincount(rows.ravel(), weights=load.ravel(), minlength=count)[free]
    # symmetric and positive definite: no pivoting, and the order that it has
    factors = splu(matrix, permc_spec="NATURAL", diag_pivot_thresh=0.0, options={"SymmetricMode": True})
    solution = np.zeros(count)
    solution[free] = factors.solve(right)
    if not quadratic:
        solution[mesh.triangles[:, 3:]] = 0.5 * (
            solution[mesh.triangles[:, :3]] + solution[np.roll(mesh.triangles[:, :3], -1, axis=1)]
        )
    return solution


def _thickened(twice_area: NDArray[np.float64], mesh: PlaneMesh) -> NDArray[np.float64]:
    """Keep slivers from dividing by nothing.

    A triangle flattened onto its longest side (a node that hangs on the edge of
    its neighbour) becomes a thin layer that joins both sides; a needle, with one
    short side, stays what it is.
    """
    corner = mesh.nodes[mesh.triangles[:, :3]]
    lengths = np.linalg.norm(corner - np.roll(corner, -1, axis=1), axis=2)
    longest, shortest = lengths.max(axis=1), lengths.min(axis=1)
    floor = longest * np.maximum(_FLATTEST * shortest, _THINNEST * longest)
    return np.where(np.abs(twice_area) < floor, np.where(twice_area < 0, -floor, floor), twice_area)


def _linear_terms(mesh: PlaneMesh) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return stiffness (n, 3, 3) and load (n, 3) of linear elements."""
    corner = mesh.nodes[mesh.triangles[:, :3]]
    opposite = np.roll(corner, -2, axis=1) - np.roll(corner, -1, axis=1)
    twice = opposite[:, 0, 0] * opposite[:, 1, 1] - opposite[:, 0, 1] * opposite[:, 1, 0]
    twice = np.abs(_thickened(twice, mesh))
    stiffness = np.einsum("tik,tjk->tij", opposite, opposite) / (2 * twice)[:, None, None]
    return stiffness, np.repeat(twice[:, None] / 6, 3, axis=1)


def _quadratic_terms(mesh: PlaneMesh) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return stiffness (n, 6, 6) and load (n, 6) of quadratic elements."""
    x = mesh.nodes[mesh.triangles]
    halfway = 0.5 * (x[:, :3] + np.roll(x[:, :3], -1, axis=1))
    bend = np.abs(x[:, 3:] - halfway).max(initial=0.0)
    straight = bend <= 1e-12 * np.ptp(mesh.nodes, axis=0).max()
    if straight:  # three mid-side points integrate degree 2, all that straight elements need
        at, weights = np.array([[0.5, 0.0], [0.5, 0.5], [0.0, 0.5]]), np.full(3, 1 / 3)
    else:
        at = np.array([point[1:] for point, _ in TRIANGLE_DEGREE4])
        weights = np.array([weight for _, weight in TRIANGLE_DEGREE4])
    value, by_u, by_v = quadratic_triangle(at[:, 0], at[:, 1])
    stiffness, load = np.zeros((len(x), 6, 6)), np.zeros((len(x), 6))
    for k, weight in enumerate(weights):
        along_u, along_v = by_u[k] @ x, by_v[k] @ x
        twice = _thickened(along_u[:, 0] * along_v[:, 1] - along_u[:, 1] * along_v[:, 0], mesh)
        slope_x = (np.outer(along_v[:, 1], by_u[k]) - np.outer(along_u[:, 1], by_v[k])) / twice[:, None]
        slope_y = (np.outer(along_u[:, 0], by_v[k]) - np.outer(along_v[:, 0], by_u[k])) / twice[:, None]
        share = 0.5 * weight * np.abs(twice)
        stiffness += share[:, None, None] * (
            slope_x[:, :, None] * slope_x[:, None] + slope_y[:, :, None] * slope_y[:, None]
        )
        load += share[:, None] * value[k]
    return stiffness, load
