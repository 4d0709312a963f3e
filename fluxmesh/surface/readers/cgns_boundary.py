"""Boundary conditions of a CGNS zone: names, roles, and which points or faces they name."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FileError
from fluxmesh.surface.readers.cgns_nodes import Node
from fluxmesh.surface.surface import Role

__all__ = ["Boundary", "PointSet", "boundaries", "family_types", "location_of", "point_set", "role_of_type"]

_FAMILY: Final = "FamilySpecified"
# SIDS BCType_t (AIAA R-101A-2005): a type that starts with the word has the role
_ROLES: Final = (
    ("BCInflow", Role.INLET),
    ("BCTunnelInflow", Role.INLET),
    ("BCOutflow", Role.OUTLET),
    ("BCTunnelOutflow", Role.OUTLET),
    ("BCFarfield", Role.OPEN),
    ("BCWall", Role.WALL),
    ("BCSymmetryPlane", Role.SYMMETRY),
)


@dataclass(frozen=True, eq=False)
class PointSet:
    """A PointRange, PointList, ElementRange or ElementList.

    Attributes
    ----------
    location : str
        SIDS GridLocation: "Vertex", "FaceCenter", "IFaceCenter", ...
    is_range : bool
        Whether `values` are the first and the last of a range.
    values : ndarray, shape (n, index dimension), int64
        Numbers from 1, as in the file.
    """

    location: str
    is_range: bool
    values: NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Boundary:
    """One boundary condition.

    Attributes
    ----------
    name : str
        Name of the condition, or of its family where the family specifies it.
    role : Role or None
        By its type.
    points : PointSet
        What it covers.
    arrays : dict of str to ndarray
        Dirichlet data that hold a value for each face it covers, or one for
        all.
    where : str
        File and path, for messages.
    """

    name: str
    role: Role | None
    points: PointSet
    where: str
    arrays: dict[str, NDArray[Any]] = field(default_factory=dict)


def role_of_type(bc_type: str) -> Role | None:
    """Return the role that a type of boundary condition means.

    Parameters
    ----------
    bc_type : str
        A SIDS BCType_t.

    Returns
    -------
    Role or None
        None for types that leave it open, such as BCDirichlet.
    """
    return next((role for word, role in _ROLES if bc_type.startswith(word)), None)


def family_types(base: Node) -> dict[str, str]:
    """Return the type of boundary condition of each family of a base.

    Parameters
    ----------
    base : Node
        A CGNSBase_t node.

    Returns
    -------
    dict of str to str
        Family name -> BCType_t; families without one are left out.
    """
    types = {}
    for family in base.children("Family_t"):
        for condition in family.children("FamilyBC_t"):
            types[family.name] = condition.text()
    return types


def boundaries(zone: Node, dimension: int, families: Mapping[str, str]) -> Iterator[Boundary]:
    """Read the boundary conditions of a zone.

    Parameters
    ----------
    zone : Node
        A Zone_t node.
    dimension : int
        Its index dimension: 1 when unstructured.
    families : mapping of str to str
        As `family_types` gives.

    Yields
    ------
    Boundary
        In the order of their names; those without points are left out.

    Raises
    ------
    FileError
        A condition that is damaged.
    """
    for listed in zone.children("ZoneBC_t"):
        for node in listed.children("BC_t"):
            points = point_set(node, dimension)
            if points is None:
                continue
            name, bc_type = node.name, node.text()
            family = node.child("FamilyName")
            if family is not None:
                # the name may be a path from the base
                called = family.text().rpartition("/")[2]
                if bc_type == _FAMILY and called:
                    name, bc_type = called, families.get(called, bc_type)
            yield Boundary(name, role_of_type(bc_type), points, node.where, _dirichlet(node))


def location_of(node: Node) -> str:
    """Return where the data of a node sit.

    Parameters
    ----------
    node : Node
        A node that may have a GridLocation.

    Returns
    -------
    str
        The SIDS GridLocation, "Vertex" where none is given.
    """
    location = node.child("GridLocation")
    return "Vertex" if location is None else location.text()


def point_set(node: Node, dimension: int) -> PointSet | None:
    """Read the points or faces that a node covers.

    Parameters
    ----------
    node : Node
        A BC_t or FlowSolution_t node.
    dimension : int
        Index dimension of its zone.

    Returns
    -------
    PointSet or None
        None when it names none.

    Raises
    ------
    FileError
        A list that is no table of indices.
    """
    for name in ("PointRange", "PointList", "ElementRange", "ElementList"):
        child = node.child(name)
        if child is None:
            continue
        values = child.integers()
        is_range = name.endswith("Range")
        wide = 1 if name.startswith("Element") else dimension
        if values.size % wide or (is_range and values.size != 2 * wide):
            raise FileError(
                f"its {name} holds {values.size} numbers for an index of {wide}",
                node.where,
                "The file is damaged; export it again",
            )
        location = "FaceCenter" if name.startswith("Element") else location_of(node)
        return PointSet(location, is_range, values.reshape(-1, wide)) if values.size else None
    return None


def _dirichlet(node: Node) -> dict[str, NDArray[Any]]:
    arrays: dict[str, NDArray[Any]] = {}
    for dataset in node.children("BCDataSet_t"):
        if location_of(dataset) not in ("Vertex", "FaceCenter") or dataset.child("PointList") is not None:
            continue
        for data in dataset.children("BCData_t"):
            if data.name == "DirichletData":
                arrays |= {array.name: array.values().ravel() for array in data.children("DataArray_t")}
    return arrays
