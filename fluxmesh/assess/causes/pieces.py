"""A surface whose area vectors do not add up to nothing: the piece that would close it."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.causes.change import Change
from fluxmesh.assess.causes.entries import UNIT, Entries, entries_of
from fluxmesh.assess.causes.facts import Source
from fluxmesh.assess.causes.residuals import Residuals
from fluxmesh.assess.causes.suspect import COST, Suspect
from fluxmesh.balance.balance import balance_table
from fluxmesh.balance.setting import GroupData
from fluxmesh.balance.wrench import Vector
from fluxmesh.integral.table import IntegralTable, column_slice
from fluxmesh.surface.surface import Group, Role

__all__ = ["closing_piece", "missing_piece"]

_FITS: Final = 1e-3  # misfit of the first moments of area over area times size, of a piece that is plane
_SEEN: Final = 8.0  # that a flat piece is lacking is in the geometry: the odds of that, a logarithm
_PAIRS: Final = ((0, 0), (1, 1), (2, 2), (1, 2), (0, 2), (0, 1))


def closing_piece(table: IntegralTable) -> tuple[Vector, Vector] | None:
    """Return the flat piece that would close a surface.

    Parameters
    ----------
    table : IntegralTable
        Its integrals.

    Returns
    -------
    vector, middle : ndarray, shape (3,), float64
        Area vector out of the fluid, m², and centroid about the table's origin, m. For a closed surface
        ``∮ n dA = 0`` and ``∮ x_i n_j dA = V δ_ij`` (Gauss); a flat piece adds ``c_i A_j`` to the second. None
        where no flat piece does so.
    """
    vector = -table.total("area_vector")
    tensor = table.total("position_normal").reshape(3, 3)
    matrix = np.zeros((9, 4))
    for i in range(3):
        for j in range(3):
            matrix[3 * i + j, i] = vector[j]
            matrix[3 * i + j, 3] = -float(i == j)
    size = float(np.linalg.norm(vector))
    scale = size * float(table.total("area")) ** 0.5
    if size <= 1e-6 * float(table.total("area")):
        return None
    found, *_ = np.linalg.lstsq(matrix, -tensor.ravel(), rcond=None)
    left = float(np.linalg.norm(matrix @ found + tensor.ravel()))
    return (vector, np.asarray(found[:3])) if left <= _FITS * scale else None


def missing_piece(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Suspect a group of faces that is not in the surface: a port, a wall, or the plane of a half model.

    Parameters
    ----------
    entries : Entries
        The laws.
    now : Residuals
        Residuals as they are; not used.

    Yields
    ------
    Suspect
        None where the area vectors add up to nothing. Where no flat piece would close the surface, only the sum of
        the missing area vectors is said.
    """
    del now
    if not entries.open or entries.balance.setting.frame is not None:
        return
    table = entries.balance.table
    found = closing_piece(table)
    if found is None:
        yield from _bent_piece(entries)
        return
    vector, middle = found
    size = float(np.linalg.norm(vector))
    whole = _with_piece(entries, vector, middle)
    normal = vector / size
    place = middle + table.origin
    where = (
        f"a flat piece of {size:.4g} m² with the normal ({_three(normal)}) and its middle at ({_three(place)}) m "
        "would close the surface"
    )
    fix = "export the faces that are missing, or name them in [groups.NAME] with a role and their data"
    plane = 'add the faces of the plane as [groups.NAME] with role = "symmetry"'
    forces = np.zeros((3, 10))
    row = whole.count - 1
    points = (table.origin - np.asarray(entries.balance.setting.anchor), np.zeros(3))
    for k, axis in enumerate(np.eye(3)):
        forces[k, 1:] = np.concatenate([axis, *(np.cross(middle + point, axis) for point in points)])
    push = np.concatenate([[0.0], whole.pressure[row, UNIT, :9]])[None]
    tangents = np.linalg.svd(normal[None])[2][1:]
    couples = np.concatenate([np.zeros((2, 4)), tangents, tangents], axis=1)
    mass = np.zeros((1, 10))
    mass[0, 0] = 1.0
    dry, cut = "a group is missing that nothing passes", "the symmetry plane of a half model is missing"
    port = "a group is missing, through which the lacking mass passes"
    any_wrench = np.concatenate([forces, couples, np.concatenate([np.zeros(4), normal, normal])[None]])
    for directions, kind, said, cost, expected in (
        (push, "missing-group", dry, COST["uncommon"], 0.0),
        (push, "half-model", cut, COST["uncommon"], 0.0),
        (
            np.concatenate([push, couples]),
            "half-model",
            "the symmetry plane of a half model is missing",
            COST["rare"],
            0.0,
        ),
        (np.concatenate([push, couples]), "missing-group", dry, COST["rare"], 0.0),
        (np.concatenate([mass, push]), "missing-group", port, COST["uncommon"], 0.0),
        (np.concatenate([mass, forces]), "missing-group", port, COST["rare"], 0.0),
        (np.concatenate([mass, forces, couples]), "missing-group", port, COST["rare"] + 0.5, 0.0),
        (np.concatenate([mass, any_wrench]), "missing-group", port, COST["common"], _SEEN),
        (any_wrench, "half-model", cut, COST["uncommon"], _SEEN),
        (any_wrench, "missing-group", dry, COST["uncommon"], _SEEN),
    ):
        if entries.laws.mass or kind == "half-model" or not directions[0, 0]:
            yield Suspect(
                kind,
                Change(),
                f"{said}: {where}",
                fix if kind == "missing-group" else plane,
                cost,
                directions=directions,
                entries=whole,
                expected=expected,
                alone=True,
            )


def _bent_piece(entries: Entries) -> Iterator[Suspect]:
    """What is missing is not plane, or not one piece: only the sum of its area vectors is known."""
    vector = -entries.area_vector.sum(axis=0)
    whole = _with_piece(entries, vector, np.zeros(3))
    about = entries.balance.table.origin - np.asarray(entries.balance.setting.anchor)
    wrench = np.zeros((6, 10))
    for k, axis in enumerate(np.eye(3)):
        wrench[k, 1:] = np.concatenate([axis, np.cross(about, axis), np.zeros(3)])
        wrench[3 + k, 4:] = np.concatenate([axis, axis])
    mass = np.zeros((1, 10))
    mass[0, 0] = 1.0
    where = f"faces that are not one plane piece; their area vectors add up to ({_three(vector)}) m²"
    for directions, said, cost in (
        (np.concatenate([mass, wrench]), "through which the lacking mass passes", COST["common"]),
        (wrench, "that nothing passes", COST["uncommon"]),
    ):
        if entries.laws.mass or not directions[0, 0]:
            yield Suspect(
                "missing-group",
                Change(),
                f"a group is missing {said}: {where}",
                "export the faces that are missing, or name them in [groups.NAME] with a role and their data",
                cost,
                directions=directions,
                entries=whole,
                expected=_SEEN,
                alone=True,
            )


def _with_piece(entries: Entries, vector: Vector, middle: Vector) -> Entries:
    """The same laws with a row for the piece, which carries no data."""
    table, setting = entries.balance.table, entries.balance.setting
    row = np.zeros((1, table.values.shape[1]))

    def put(name: str, value: NDArray[np.float64]) -> None:
        row[0, column_slice(name)] = value

    size = float(np.linalg.norm(vector))
    put("area", np.array([size]))
    put("area_vector", vector)
    put("position", size * middle)
    put("position_normal", np.outer(middle, vector).ravel())
    put("square_normal", np.concatenate([middle[i] * middle[j] * vector for i, j in _PAIRS]))
    data = setting.data
    name = "missing piece"
    while name in entries.names():
        name += "'"
    more = GroupData(*(np.append(known, False) for known in (data.flux, data.pressure, data.traction)))
    # no port, so that what is not known of it does not bar the mass from being judged
    groups = (*setting.groups, Group(name, Role.SYMMETRY))
    whole = replace(setting, groups=groups, data=more, closed=True)
    facts = replace(
        entries.facts,
        flow=(*entries.facts.flow, Source.ABSENT),
        pressure_array=np.append(entries.facts.pressure_array, False),
    )
    balance = balance_table(IntegralTable(np.concatenate([table.values, row]), table.origin), whole,
                            storage=entries.balance.storage)  # fmt: skip
    return replace(entries_of(balance, facts), laws=entries.laws)


def _three(vector: Vector) -> str:
    return ", ".join(f"{x if abs(x) > 1e-9 else 0.0:.4g}" for x in vector)
