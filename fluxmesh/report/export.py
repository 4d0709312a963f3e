"""A result for other programs: the surface with all its face fields, the force vectors, and the ledgers."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any, Final

import numpy as np

from fluxmesh.balance.balance import Balance
from fluxmesh.field.flow import Flow
from fluxmesh.report.export_csv import csv_files
from fluxmesh.report.export_faces import FaceScalar, face_fields
from fluxmesh.report.export_vtp import Numbers, PolygonData, outlines, vtp_bytes
from fluxmesh.report.sketch import arrows_of
from fluxmesh.report.whole import require_writable, write_together
from fluxmesh.surface.surface import ControlSurface, Role

__all__ = ["EXPORTED", "surface_file", "vectors_file", "write_export"]

EXPORTED: Final = (
    "surface.vtp",
    "vectors.vtp",
    "groups.csv",
    "mass.csv",
    "momentum.csv",
    "angular_momentum.csv",
    "energy.csv",
    "carried.csv",
    "ports.csv",
    "losses.csv",
    "loads.csv",
)
"""All files that an export may have."""

_MEANING: Final = (
    "SI units; n points out of the fluid: flows and fluxes leave where they are above zero, forces are on the fluid",
    "Means over a face are NaN where its group has no such data; integrals are zero there, as in the ledgers",
    "The arrays in N, kg/s and m3/s are integrals over each face: they add up to the entries of its group",
)


def surface_file(
    surface: ControlSurface,
    flow: Flow,
    balance: Balance,
    data: Mapping[str, Any],
    scalars: Sequence[FaceScalar] = (),
    *,
    remarks: Sequence[str] = (),
    threads: int | None = None,
) -> bytes:
    """Return the surface with all derived fields of its faces as a VTK XML file.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    flow : Flow
        The flow on it.
    balance : Balance
        The balance of that flow.
    data : mapping
        What ``balance.json`` holds: title, assumptions, cautions, verdict.
    scalars : sequence of FaceScalar, optional
        What else the flow carries.
    remarks : sequence of str, optional
        What else must be known to read the arrays.
    threads : int, optional
        Threads; all cores by default. The result does not depend on it.

    Returns
    -------
    bytes
        One cell a face, in the order of the surface.
    """
    connectivity, offsets = outlines(surface)
    roles = list(Role)
    role_of_group = np.array([roles.index(group.role) for group in surface.groups], dtype=np.int32)
    texts = _texts(data)
    if surface.groups != balance.setting.groups:
        texts["meaning"].append(
            "The surface is a part that was cut at its symmetry groups; the ledgers are those of the whole"
        )
    texts["meaning"] += remarks
    if surface.kinds is not None and surface.kinds.any():
        texts["meaning"].append("Curved faces are drawn as polygons through their mid-side points; figures are exact")
    texts |= {
        "group_names": [group.name for group in surface.groups],
        "group_roles": [group.role.value for group in surface.groups],
        "role_names": [role.value for role in roles],
    }
    cells: dict[str, Numbers] = {
        "group_number": surface.group_of_face.astype(np.int32),
        "role_number": role_of_group[surface.group_of_face],
        **face_fields(surface, flow, balance.setting, scalars, threads=threads),
    }
    return vtp_bytes(PolygonData(surface.points, connectivity, offsets, cells=cells, texts=texts))


def vectors_file(balance: Balance, data: Mapping[str, Any]) -> bytes:
    """Return the force vectors as points with arrays, a VTK XML file.

    Parameters
    ----------
    balance : Balance
        The balance.
    data : mapping
        What ``balance.json`` holds.

    Returns
    -------
    bytes
        A point a force, with ``force_N``, ``size_N``, ``name``, ``kind``, ``who_on_whom`` and ``group``; the
        line of action and the moment of the reaction stand with the file as a whole.
    """
    arrows = arrows_of(balance)
    numbers = {"anchor_m": np.array([balance.setting.anchor], dtype=np.float64)}
    if balance.reaction is not None:
        axis = balance.reaction.line_of_action
        numbers |= {
            "reaction_moment_about_anchor_N_m": balance.reaction.wrench.moment[None],
            "reaction_line_through_m": np.asarray(axis.point)[None],
            "reaction_line_direction": np.asarray(axis.direction)[None],
            "reaction_couple_about_line_N_m": np.array([axis.couple]),
        }
    count = np.arange(len(arrows), dtype=np.int64)
    forces = np.array([arrow.vector for arrow in arrows], dtype=np.float64).reshape(-1, 3)
    return vtp_bytes(
        PolygonData(
            np.array([arrow.at for arrow in arrows], dtype=np.float64).reshape(-1, 3),
            count,
            count + 1,
            vertices=True,
            at_points={"force_N": forces, "size_N": np.linalg.norm(forces, axis=1)},
            texts=_texts(data),
            numbers=numbers,
            words_at_points={
                "name": [arrow.label for arrow in arrows],
                "kind": ["load" if arrow.kind == "resultant" else arrow.kind for arrow in arrows],
                "who_on_whom": [arrow.body for arrow in arrows],
                "group": [arrow.group or "" for arrow in arrows],
            },
        )
    )


def _texts(data: Mapping[str, Any]) -> dict[str, list[str]]:
    return {
        "title": [data["title"] or ""],
        "verdict": list(data["verdict"]["reasons"]),
        "assumptions": list(data["assumptions"]),
        "notes": list(data["notes"]),
        "cautions": list(data["cautions"]),
        "meaning": list(_MEANING),
    }


def write_export(
    folder: Path,
    surface: ControlSurface,
    flow: Flow,
    balance: Balance,
    data: Mapping[str, Any],
    scalars: Sequence[FaceScalar] = (),
    *,
    remarks: Sequence[str] = (),
) -> list[Path]:
    """Write all files of an export; each appears whole or not at all.

    Parameters
    ----------
    folder : pathlib.Path
        Where to; it is made if it is not there.
    surface : ControlSurface
        The surface.
    flow : Flow
        The flow on it.
    balance : Balance
        The balance of that flow.
    data : mapping
        What ``balance.json`` holds.
    scalars : sequence of FaceScalar, optional
        What else the flow carries.
    remarks : sequence of str, optional
        What else must be known to read the arrays of the surface.

    Returns
    -------
    list of pathlib.Path
        The files that were written. All are made before the first is written; files of an
        earlier export that this one does not have are taken away.

    Raises
    ------
    OutputError
        The folder cannot be written to.
    FieldError
        Integrals that overflow.
    """
    require_writable(folder)
    contents = {
        "surface.vtp": surface_file(surface, flow, balance, data, scalars, remarks=remarks),
        "vectors.vtp": vectors_file(balance, data),
        **{name: text.encode() for name, text in csv_files(data).items()},
    }
    write_together({folder / name: content for name, content in contents.items()}, [folder / old for old in EXPORTED])
    return [folder / name for name in contents]
