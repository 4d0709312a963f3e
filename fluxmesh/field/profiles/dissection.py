"""An order of unknowns that keeps the factors of a plane mesh's matrix sparse."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

__all__ = ["dissection_order"]

_LEAF = 8  # elements that are not parted further


def dissection_order(elements: NDArray[np.int64], middles: NDArray[np.float64], nodes: int) -> NDArray[np.int64]:
    """Return an order of nodes for elimination.

    Parameters
    ----------
    elements : ndarray, shape (n, k), int64
        Nodes of each element.
    middles : ndarray, shape (n, 2), float64
        A place within each element.
    nodes : int
        Number of nodes.

    Returns
    -------
    ndarray, shape (nodes,), int64
        All nodes; those of no element stand first.

    Notes
    -----
    Nested dissection (George 1973, SIAM J. Numer. Anal. 10:345-363, from memory):
    elements are parted in halves again and again, and the nodes between two
    halves come after those within either. Unlike orders by minimum degree its
    time does not depend on how nodes happen to be numbered; those took up to a
    hundred times as long on divided fans.
    """
    order, starts, depth = np.arange(len(elements)), np.array([0, len(elements)]), 0
    while len(elements) > _LEAF << depth:
        part = np.repeat(np.arange(len(starts) - 1), np.diff(starts))
        own = middles[order]
        extent = np.maximum.reduceat(own, starts[:-1]) - np.minimum.reduceat(own, starts[:-1])
        along = np.where((extent[:, 0] >= extent[:, 1])[part], own[:, 0], own[:, 1])
        order = order[np.lexsort((along, part))]
        cuts = (starts[:-1] + starts[1:]) // 2
        starts = np.append(np.column_stack([starts[:-1], cuts]).ravel(), starts[-1])
        depth += 1
    code = np.empty(len(elements), np.int64)
    code[order] = np.repeat(np.arange(len(starts) - 1), np.diff(starts))
    # bit by bit a code says which halves an element lies in: the first bit in which the elements
    # about a node differ is the cut that the node lies on
    lowest, highest = np.full(nodes, 1 << depth), np.full(nodes, -1)
    np.minimum.at(lowest, elements.ravel(), np.repeat(code, elements.shape[1]))
    np.maximum.at(highest, elements.ravel(), np.repeat(code, elements.shape[1]))
    unused = highest < 0
    above = np.where(unused, 0, np.frexp((lowest ^ highest).astype(np.float64))[1])
    last = np.where(unused, -1, ((highest >> above) + 1) << above)
    # after all that lies within the same part, the deepest cuts first
    return np.lexsort((above, last))
