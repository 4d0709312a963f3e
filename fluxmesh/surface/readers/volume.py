"""Volume cells of a file, as a reader hands them to the one that takes their skin."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from fluxmesh.surface.readers.cell_shapes import SHAPES, plural

__all__ = ["CellBlock", "Polyhedra", "Volume", "described"]


@dataclass(frozen=True, eq=False)
class CellBlock:
    """Volume cells of one shape.

    Attributes
    ----------
    shape : str
        A key of `SHAPES`.
    rows : ndarray, shape (n, size of the shape), int64
        Point indices of each cell, in the order of the open VTK file format.
    cells : ndarray, shape (n,), int64
        Number of each cell in the file: its row in the arrays on cells.
    """

    shape: str
    rows: NDArray[np.int64]
    cells: NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Polyhedra:
    """Polyhedral cells, each with its own list of faces.

    Attributes
    ----------
    connectivity : ndarray, shape (n_entries,), int64
        Point indices of all faces of all cells, in cyclic order, direction
        free.
    offsets : ndarray, shape (n_faces + 1,), int64
        Where each face starts.
    cells : ndarray, shape (n_faces,), int64
        Number in the file of the cell that each face belongs to.
    """

    connectivity: NDArray[np.int64]
    offsets: NDArray[np.int64]
    cells: NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Volume:
    """All volume cells of a file.

    Attributes
    ----------
    blocks : tuple of CellBlock
        Cells of the known shapes.
    polyhedra : Polyhedra or None
        The others.
    names : frozenset of str
        What `RawMesh.skipped` calls these cells, where those are not the plain
        names of the shapes.
    unknown : dict of str to int
        Volume cells of shapes whose skin cannot be taken, counted by name.
    """

    blocks: tuple[CellBlock, ...]
    polyhedra: Polyhedra | None = None
    names: frozenset[str] = frozenset()
    unknown: dict[str, int] = field(default_factory=dict)

    def counts(self) -> dict[str, int]:
        """Count the cells of each shape.

        Returns
        -------
        dict of str to int
            By the plain name of the shape.
        """
        counts: dict[str, int] = {}
        for block in self.blocks:
            name = SHAPES[block.shape].name
            counts[name] = counts.get(name, 0) + len(block.cells)
        if self.polyhedra is not None:
            counts["polyhedron"] = int(np.unique(self.polyhedra.cells).size)
        return {name: count for name, count in counts.items() if count}


def described(volumes: Iterable[Volume]) -> str:
    """Say how many cells of which shape there are.

    Parameters
    ----------
    volumes : iterable of Volume
        Counted together.

    Returns
    -------
    str
        Such as "12 tetrahedra and 3 wedges".
    """
    total: dict[str, int] = {}
    for volume in volumes:
        for name, count in volume.counts().items():
            total[name] = total.get(name, 0) + count
    said = [plural(name, count) for name, count in total.items()]
    return " and ".join([", ".join(said[:-1]), said[-1]] if len(said) > 1 else said)
