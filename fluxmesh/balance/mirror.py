"""The whole of a half or quarter model: the table of its mirror images, added.

A reflection ``x' = x - 2 n (n·x)`` about a point of the plane keeps scalars and reflects
vectors. A moment is a product of two reflected vectors, so it is reflected and changes
its sign. The cuts themselves lie inside the whole, and drop out.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fluxmesh.balance.setting import GroupData, Setting
from fluxmesh.balance.wrench import Vector
from fluxmesh.errors import GroupError, SurfaceError
from fluxmesh.integral.table import BASIS, IntegralTable, column_slice, symmetric_index
from fluxmesh.surface.surface import Group, Role

__all__ = ["Plane", "about_origin", "mirrored", "symmetry_planes", "whole_model"]

_FORCE_OF: Final = {
    "moment_of_pressure": "pressure_force",
    "moment_of_viscous": "viscous_force",
    "moment_of_momentum_flux": "momentum_flux",
    "moment_of_dynamic_pressure": "dynamic_pressure_force",
}
_VECTORS: Final = ("area_vector", "velocity_area", *_FORCE_OF.values())
_PAIRS: Final = ((0, 0), (1, 1), (2, 2), (1, 2), (0, 2), (0, 1))
_PAIR_OF: Final = np.array([[symmetric_index(k, m) for m in range(3)] for k in range(3)])
_FLATTEST: Final = 0.999999
_SAME_DIRECTION: Final = 1e-4  # sine of the angle; a single-precision mesh far from the origin keeps this
_SAME_PLACE: Final = 1e-4  # of the size of the surface


@dataclass(frozen=True, eq=False)
class Plane:
    """A plane.

    Attributes
    ----------
    point : ndarray, shape (3,), float64
        A point of it, m.
    normal : ndarray, shape (3,), float64
        Unit vector, out of the fluid that is modelled.
    """

    point: Vector
    normal: Vector


def symmetry_planes(table: IntegralTable, groups: Sequence[Group]) -> list[Plane]:
    """Return the planes of the symmetry cuts.

    Parameters
    ----------
    table : IntegralTable
        One row a group.
    groups : sequence of Group
        Those with the role ``symmetry`` are cuts; cuts on one plane count once.

    Returns
    -------
    list of Plane
        In the order of the groups.

    Raises
    ------
    GroupError
        No cut, or one that has no area or is not plane.
    """
    size = float(table.total("area")) ** 0.5
    found: list[tuple[Vector, Vector, float]] = []  # area vector, first moment about the origin, area
    for k, group in enumerate(groups):
        if group.role is not Role.SYMMETRY:
            continue
        vector, first, area = table.column("area_vector")[k], table.column("position")[k], table.column("area")[k]
        flatness = float(np.linalg.norm(vector)) / area if area > 0.0 else 0.0
        if flatness < _FLATTEST:
            raise GroupError(
                f"it is not a plane cut: its area vector is {flatness:.7g} of its area of {area:.4g} m²",
                where=f"group '{group.name}'",
                remedy="Give the faces of each symmetry plane a group of their own",
            )
        for n, (other, moment, covered) in enumerate(found):
            normal = other / np.linalg.norm(other)
            apart = float(normal @ (first / area - moment / covered))
            aligned = np.linalg.norm(np.cross(normal, vector / area)) < _SAME_DIRECTION and normal @ vector > 0.0
            if aligned and abs(apart) < _SAME_PLACE * size:
                found[n] = (other + vector, moment + first, covered + area)
                break
        else:
            found.append((vector, first, float(area)))
    if not found:
        raise GroupError(
            "there is nothing to mirror at: no group has the role symmetry",
            remedy='Give the faces of the cut a group with role = "symmetry"',
        )
    return [Plane(table.origin + first / area, vector / np.linalg.norm(vector)) for vector, first, area in found]


def about_origin(table: IntegralTable, origin: Vector) -> IntegralTable:
    """Return the same integrals about another origin.

    Parameters
    ----------
    table : IntegralTable
        A table.
    origin : ndarray, shape (3,), float64
        The other origin, m; near the surface, or digits are lost.

    Returns
    -------
    IntegralTable
        A new table, positions and moments about `origin`.
    """
    shift = table.origin - origin  # what positions grow by
    values, changed = table.values, table.values.copy()

    def at(name: str) -> Vector:
        return values[:, column_slice(name)]

    vector, tensor = at("area_vector"), at("position_normal").reshape(-1, 3, 3)
    changed[:, column_slice("position")] += at("area") * shift
    changed[:, column_slice("position_normal")] += (shift[:, None] * vector[:, None, :]).reshape(-1, 9)
    flow, first = at("mass_flow"), at("mass_flow_position")
    changed[:, column_slice("mass_flow_position")] += flow * shift
    changed[:, column_slice("mass_flow_square")] += np.stack(
        [shift[k] * first[:, m] + shift[m] * first[:, k] + shift[k] * shift[m] * flow[:, 0] for k, m in _PAIRS],
        axis=1,
    )
    crossed = [shift[k] * tensor[:, m] + shift[m] * tensor[:, k] + shift[k] * shift[m] * vector for k, m in _PAIRS]
    changed[:, column_slice("square_normal")] += np.stack(crossed, axis=1).reshape(-1, 18)
    for moment, force in _FORCE_OF.items():
        changed[:, column_slice(moment)] += np.cross(shift, at(force))
    return IntegralTable(changed, origin)


def mirrored(table: IntegralTable, planes: Sequence[Plane], cuts: NDArray[np.bool_] | None = None) -> IntegralTable:
    """Return the table of the whole of which a part was modelled.

    Parameters
    ----------
    table : IntegralTable
        Table of the part.
    planes : sequence of Plane
        One, or two or three at right angles to one another: the whole is two,
        four or eight times the part.
    cuts : ndarray of bool, shape (n_groups,), optional
        Groups on the planes. They lie inside the whole: their rows become zero.

    Returns
    -------
    IntegralTable
        Each row is the sum over a group and its images; its origin is that of `table`, dropped onto
        the planes, so that what must cancel does so to round-off.

    Raises
    ------
    SurfaceError
        No plane, or two that are not at right angles.
    """
    normals = _right_angled(planes)
    drop = np.zeros(3)
    for plane, normal in zip(planes, normals):
        drop += normal * float(normal @ (table.origin - np.asarray(plane.point)))
    dropped = about_origin(table, table.origin - drop)
    values = dropped.values
    if cuts is not None:
        values[cuts] = 0.0
    for normal in normals:
        values = values + _reflected(values, normal)
    return IntegralTable(values, dropped.origin)


def whole_model(table: IntegralTable, setting: Setting, *, head_restored: bool) -> tuple[IntegralTable, Setting]:
    """Return the table and the setting of the whole of which a part was modelled.

    Parameters
    ----------
    table : IntegralTable
        Table of the part.
    setting : Setting
        Its setting. Anchor and hardware are those of the whole device, and stay.
    head_restored : bool
        Whether the hydrostatic head was put back into the pressure. It is symmetric
        only where gravity lies in the planes.

    Returns
    -------
    table : IntegralTable
        As `mirrored`, without the rows of the cuts.
    setting : Setting
        Without the cuts.

    Raises
    ------
    GroupError
        No cut, or one that is not plane.
    SurfaceError
        Planes that are not at right angles, or a head that is not symmetric.
    """
    planes = symmetry_planes(table, setting.groups)
    gravity = np.asarray(setting.gravity, dtype=np.float64)
    for plane in planes:
        across = float(gravity @ plane.normal)
        if head_restored and abs(across) > _SAME_DIRECTION * float(np.linalg.norm(gravity)):
            raise SurfaceError(
                f"gravity has a component of {abs(across):.4g} m/s² across the symmetry plane with the normal "
                f"{_words(plane.normal)}, so the hydrostatic head in the pressure is not symmetric",
                where="surface.mirror",
                remedy="Mirror the mesh before the export, or leave gravity out",
            )
    cuts = np.array([group.role is Role.SYMMETRY for group in setting.groups])
    whole = mirrored(table, planes, cuts)
    data = GroupData(setting.data.flux[~cuts], setting.data.pressure[~cuts], setting.data.traction[~cuts])
    groups = tuple(group for group in setting.groups if group.role is not Role.SYMMETRY)
    return IntegralTable(whole.values[~cuts], whole.origin), replace(setting, groups=groups, data=data)


def _words(vector: ArrayLike) -> str:
    return "(" + ", ".join(f"{part + 0.0:.4g}" for part in np.round(np.asarray(vector, dtype=np.float64), 12)) + ")"


def _right_angled(planes: Sequence[Plane]) -> list[Vector]:
    """Unit normals of planes at right angles, made so to the last bits."""
    if not planes:
        raise SurfaceError("there is no plane to mirror at", remedy="Give one, or two or three at right angles")
    normals = []
    for plane in planes:
        normal = np.asarray(plane.normal, dtype=np.float64)
        length = float(np.linalg.norm(normal))
        if normal.shape != (3,) or not np.isfinite(length) or length == 0.0:
            raise SurfaceError(f"the normal of a symmetry plane is {plane.normal!r}", remedy="Give a direction")
        normals.append(normal / length)
    for k, one in enumerate(normals):
        for m in range(k):
            other = normals[m]
            if np.linalg.norm(np.cross(one, other)) < _SAME_DIRECTION:
                apart = abs(float(other @ (np.asarray(planes[k].point) - np.asarray(planes[m].point))))
                raise SurfaceError(
                    f"two symmetry planes with the normal {_words(other)} are parallel, {apart:.4g} m apart",
                    remedy="Images between parallel planes have no end; give the planes of one half or quarter model",
                )
            if abs(float(one @ other)) > _SAME_DIRECTION:
                angle = float(np.degrees(np.arccos(min(abs(float(one @ other)), 1.0))))
                raise SurfaceError(
                    f"the symmetry planes with the normals {_words(other)} and {_words(one)} meet at {angle:.4g}°",
                    remedy="Only planes at right angles are mirrored at",
                )
    pairs = [(k, m) for k in range(len(normals)) for m in range(k)]
    for k, m in 2 * pairs:  # what is left of a lean is its third power
        lean = float(normals[k] @ normals[m]) / 2
        normals[k], normals[m] = normals[k] - lean * normals[m], normals[m] - lean * normals[k]
    return [normal / np.linalg.norm(normal) for normal in normals]


def _reflected(values: Vector, normal: Vector) -> Vector:
    """Rows of the mirror image at a plane through the origin."""
    turn = np.eye(3) - 2 * np.outer(normal, normal)
    changed = values.copy()  # scalars stay
    for name, (_, components, _, _) in BASIS.items():
        columns = column_slice(name)
        piece = values[:, columns]
        if name in _VECTORS or name in ("position", "mass_flow_position"):
            changed[:, columns] = piece @ turn
        elif name in _FORCE_OF:
            changed[:, columns] = -(piece @ turn)
        elif name == "position_normal":
            changed[:, columns] = np.einsum("ai,gij,bj->gab", turn, piece.reshape(-1, 3, 3), turn).reshape(-1, 9)
        elif name == "square_normal":
            full = np.einsum("ai,bj,ck,gijk->gabc", turn, turn, turn, piece.reshape(-1, 6, 3)[:, _PAIR_OF])
            changed[:, columns] = np.stack([full[:, k, m] for k, m in _PAIRS], axis=1).reshape(-1, 18)
        elif name == "mass_flow_square":
            tensor = np.einsum("ai,bj,gij->gab", turn, turn, piece[:, _PAIR_OF])
            changed[:, columns] = np.stack([tensor[:, k, m] for k, m in _PAIRS], axis=1)
        else:
            assert components == 1, name
    return changed
