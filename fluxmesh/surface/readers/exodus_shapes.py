"""Element types of Exodus files: shapes, order of points, and numbers of sides.

Names, orders and side numbers are those of the Exodus manual ("EXODUS II: A Finite
Element Data Model", SAND92-2137, figures of element numbering; from memory, and
compared with VTK's own reader in the tests).
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Final

from fluxmesh.surface.surface import FaceKind

__all__ = ["BlockShape", "shape_of_block"]

# side 1, 2, ... -> local face of our table of shapes
_SIDES: Final = {
    "tetra": (0, 1, 2, 3),
    "hexahedron": (2, 1, 3, 0, 4, 5),
    "wedge": (2, 3, 4, 0, 1),
    "pyramid": (1, 2, 3, 4, 0),
}
# Exodus numbers the mid-points of upright edges before those of the top, and centres from the inside out.
_ORDERS: Final = {
    "wedge15": (*range(9), 12, 13, 14, 9, 10, 11),
    "wedge18": (*range(9), 12, 13, 14, 9, 10, 11, 15, 16, 17),
    "hexahedron20": (*range(12), 16, 17, 18, 19, 12, 13, 14, 15),
    "hexahedron27": (*range(12), 16, 17, 18, 19, 12, 13, 14, 15, 23, 24, 25, 26, 21, 22, 20),
}
_SOLIDS: Final = (
    ("HEX", {8: "hexahedron", 20: "hexahedron20", 27: "hexahedron27"}),
    ("TET", {4: "tetra", 10: "tetra10"}),
    ("WED", {6: "wedge", 15: "wedge15", 18: "wedge18"}),
    ("PYR", {5: "pyramid", 13: "pyramid13", 14: "pyramid14"}),
)
_SHEETS: Final = {
    3: FaceKind.POLYGON,
    4: FaceKind.POLYGON,
    6: FaceKind.TRIANGLE6,
    8: FaceKind.QUAD8,
    9: FaceKind.QUAD9,
}
_FLAT: Final = ("SHELL", "QUAD", "TRI")
_THIN: Final = ("TRUSS", "BEAM", "BAR", "EDGE", "ROD", "SPHERE", "CIRCLE", "NULL")


@dataclass(frozen=True)
class BlockShape:
    """What the elements of a block are.

    Attributes
    ----------
    name : str
        The type in the file, in small letters.
    dimension : int
        3: volume cells; 2: faces; 0: points or lines.
    solid : str
        Key of `fluxmesh.surface.readers.cell_shapes.SHAPES`, "" if it is none
        of them.
    sheet : FaceKind or None
        Kind of the faces, None if they cannot be read.
    order : tuple of int
        Which point of the file each point of our order is; empty: the same.
    sides : tuple of int
        Side number less one -> local face.
    """

    name: str
    dimension: int
    solid: str = ""
    sheet: FaceKind | None = None
    order: tuple[int, ...] = ()
    sides: tuple[int, ...] = ()


def shape_of_block(element_type: str, points: int) -> BlockShape:
    """Tell what the elements of a block are.

    Parameters
    ----------
    element_type : str
        Its attribute "elem_type", such as "HEX8".
    points : int
        Points of an element.

    Returns
    -------
    BlockShape
        With ``solid`` and ``sheet`` empty where the elements cannot be read.
    """
    word = element_type.strip().upper()
    name = word.lower() or "element without a type"
    if word.startswith(_THIN):
        return BlockShape(name, 0)
    # TETRA and TRIANGLE share their first letter only
    for prefix, sizes in _SOLIDS:
        if word.startswith(prefix):
            solid = sizes.get(points, "")
            plain = re.sub(r"\d+$", "", solid)
            return BlockShape(name, 3, solid, None, _ORDERS.get(solid, ()), _SIDES.get(plain, ()))
    if word.startswith(_FLAT):
        return BlockShape(name, 2, "", _SHEETS.get(points))
    return BlockShape(name, 3)
