"""Volume cells as tables: the faces of each shape, in the point order of the open VTK file format."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final

from fluxmesh.surface.surface import FaceKind

__all__ = ["SHAPES", "CellShape", "plural"]

_STRAIGHT: Final = {3: FaceKind.POLYGON, 4: FaceKind.POLYGON, 5: FaceKind.POLYGON, 6: FaceKind.POLYGON}
_CURVED: Final = {6: FaceKind.TRIANGLE6, 8: FaceKind.QUAD8, 9: FaceKind.QUAD9}


@dataclass(frozen=True)
class CellShape:
    """One shape of volume cell.

    Attributes
    ----------
    name : str
        Plain word, singular.
    size : int
        Number of points.
    faces : tuple of tuple of int
        Local point indices of each face, corners first, in cyclic order;
        normals point out of a cell whose points are in the usual order.
    curved : bool
        Whether its faces are quadratic.
    """

    name: str
    size: int
    faces: tuple[tuple[int, ...], ...]
    curved: bool = False

    def kind(self, face: int) -> FaceKind:
        """Return the kind of one face.

        Parameters
        ----------
        face : int
            Local face number.

        Returns
        -------
        FaceKind
            By its number of points.
        """
        return (_CURVED if self.curved else _STRAIGHT)[len(self.faces[face])]


_TETRA = ((0, 1, 3), (1, 2, 3), (2, 0, 3), (0, 2, 1))
_HEXAHEDRON = ((0, 4, 7, 3), (1, 2, 6, 5), (0, 1, 5, 4), (3, 7, 6, 2), (0, 3, 2, 1), (4, 5, 6, 7))
_WEDGE = ((0, 2, 1), (3, 4, 5), (0, 1, 4, 3), (1, 2, 5, 4), (2, 0, 3, 5))
_PYRAMID = ((0, 3, 2, 1), (0, 1, 4), (1, 2, 4), (2, 3, 4), (3, 0, 4))

# edge of two corners -> its mid-side point, for each quadratic shape
_TETRA_EDGES = ((0, 1), (1, 2), (2, 0), (0, 3), (1, 3), (2, 3))
_HEXAHEDRON_EDGES = (
    *((0, 1), (1, 2), (2, 3), (3, 0)),
    *((4, 5), (5, 6), (6, 7), (7, 4)),
    *((0, 4), (1, 5), (2, 6), (3, 7)),
)
_WEDGE_EDGES = ((0, 1), (1, 2), (2, 0), (3, 4), (4, 5), (5, 3), (0, 3), (1, 4), (2, 5))
_PYRAMID_EDGES = ((0, 1), (1, 2), (2, 3), (3, 0), (0, 4), (1, 4), (2, 4), (3, 4))


def _quadratic(
    faces: tuple[tuple[int, ...], ...],
    edges: tuple[tuple[int, int], ...],
    centres: Mapping[int, int] | None = None,
) -> tuple[tuple[int, ...], ...]:
    """Add the mid-side points to the faces, and a centre where a face has one."""
    corners = 1 + max(max(face) for face in faces)
    middle = {frozenset(edge): corners + index for index, edge in enumerate(edges)}
    rows = []
    for number, face in enumerate(faces):
        mids = tuple(middle[frozenset(edge)] for edge in zip(face, face[1:] + face[:1]))
        centre = (centres or {}).get(number)
        rows.append(face + mids if centre is None else (*face, *mids, centre))
    return tuple(rows)


def _prism(sides: int) -> tuple[tuple[int, ...], ...]:
    around = tuple(range(sides))
    walls = tuple((i, (i + 1) % sides, (i + 1) % sides + sides, i + sides) for i in around)
    return ((0, *reversed(around[1:])), tuple(i + sides for i in around), *walls)


SHAPES: Final[Mapping[str, CellShape]] = {
    "tetra": CellShape("tetrahedron", 4, _TETRA),
    "hexahedron": CellShape("hexahedron", 8, _HEXAHEDRON),
    "wedge": CellShape("wedge", 6, _WEDGE),
    "pyramid": CellShape("pyramid", 5, _PYRAMID),
    "penta_prism": CellShape("pentagonal prism", 10, _prism(5)),
    "hexa_prism": CellShape("hexagonal prism", 12, _prism(6)),
    "tetra10": CellShape("quadratic tetrahedron", 10, _quadratic(_TETRA, _TETRA_EDGES), True),
    "hexahedron20": CellShape("quadratic hexahedron", 20, _quadratic(_HEXAHEDRON, _HEXAHEDRON_EDGES), True),
    "hexahedron27": CellShape(
        "quadratic hexahedron", 27, _quadratic(_HEXAHEDRON, _HEXAHEDRON_EDGES, {i: 20 + i for i in range(6)}), True
    ),
    "wedge15": CellShape("quadratic wedge", 15, _quadratic(_WEDGE, _WEDGE_EDGES), True),
    "wedge18": CellShape("quadratic wedge", 18, _quadratic(_WEDGE, _WEDGE_EDGES, {2: 15, 3: 16, 4: 17}), True),
    "pyramid13": CellShape("quadratic pyramid", 13, _quadratic(_PYRAMID, _PYRAMID_EDGES), True),
    "pyramid14": CellShape("quadratic pyramid", 14, _quadratic(_PYRAMID, _PYRAMID_EDGES, {0: 13}), True),
}
"""Shape by name; the names are those of the meshio package."""


def plural(name: str, count: int) -> str:
    """Return the name of a shape for a number of cells.

    Parameters
    ----------
    name : str
        Singular.
    count : int
        How many.

    Returns
    -------
    str
        Such as "1 wedge" or "12 tetrahedra".
    """
    if count == 1:
        return f"1 {name}"
    return f"{count} {name[:-2]}a" if name.endswith("hedron") else f"{count} {name}s"
