"""The result file: a balance as plain JSON data, written whole or not at all."""

from __future__ import annotations

import json
from dataclasses import asdict
from math import isnan
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from fluxmesh.assess.assumptions import CAUTIONS
from fluxmesh.assess.comparison import Comparison
from fluxmesh.assess.verdict import Verdict, relative_without_mean_pressure
from fluxmesh.balance.balance import Balance
from fluxmesh.balance.carried import CarriedBalance
from fluxmesh.balance.energy import EnergyBalance
from fluxmesh.balance.losses import Loss
from fluxmesh.balance.momentum import Ledger
from fluxmesh.balance.wrench import Vector, Wrench
from fluxmesh.errors import FieldError
from fluxmesh.report.laws import carried_data, energy_data
from fluxmesh.report.ports import losses_data, ports_data
from fluxmesh.report.whole import write_whole

__all__ = ["SCHEMA", "json_bytes", "result_data", "write_json"]

if TYPE_CHECKING:
    from fluxmesh.assess.review import Doubt

SCHEMA: Final = "fluxmesh-balance/1"


def _plain(value: Any) -> Any:
    """From NumPy to what JSON has; numbers keep all their digits."""
    if isinstance(value, np.ndarray):
        return [_plain(item) for item in value.tolist()]
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    if isinstance(value, np.floating | np.integer | np.bool_):
        value = value.item()
    if isinstance(value, float) and isnan(value):
        return None  # what is not known
    return value


def _ledger(ledger: Ledger, complete: bool) -> dict[str, Any]:
    return {
        "flux": ledger.flux(),
        "pressure": ledger.pressure(),
        "viscous": ledger.viscous(),
        "weight": ledger.weight,
        "storage": _whole(ledger.storage),
        "residual": ledger.residual() if complete and ledger.known else None,
        "relative": ledger.relative() if complete else None,
    }


def _load(wrench: Wrench | None) -> dict[str, Any] | None:
    if wrench is None:
        return None
    return {
        "force": wrench.force,
        "moment": _whole(wrench.moment),
        "force_size": np.linalg.norm(wrench.force),
        "moment_size": np.linalg.norm(wrench.moment),
    }


def _whole(vector: Vector) -> Vector | None:
    """A vector, or None where it is not known."""
    return vector if np.isfinite(vector).all() else None


def _groups(balance: Balance) -> dict[str, Any]:
    table, angular = balance.table, balance.angular
    area = table.column("area")
    position = table.column("position")
    rows = {}
    for k, group in enumerate(balance.setting.groups):
        rows[group.name] = {
            "role": group.role.value,
            "area": area[k],
            "area_vector": table.column("area_vector")[k],
            "centroid": table.origin + (position[k] / area[k] if area[k] > 0 else 0.0),
            "mass_flow": table.column("mass_flow")[k],
            "volume_flow": table.column("volume_flow")[k],
            "momentum_flux": balance.momentum.group_flux[k],
            "pressure_force": balance.momentum.group_pressure[k],
            "viscous_force": balance.momentum.group_viscous[k],
            "moment_of_momentum_flux": angular.group_flux[k],
            "moment_of_pressure": angular.group_pressure[k],
            "moment_of_viscous": angular.group_viscous[k],
            "data": {
                "flux": balance.setting.data.flux[k],
                "pressure": balance.setting.data.pressure[k],
                "traction": balance.setting.data.traction[k],
            },
        }
    return rows


def _doubt(doubt: Doubt) -> dict[str, str]:
    return {"kind": doubt.kind, "seen": doubt.seen, "matters": doubt.matters, "settle": doubt.remedy()}


def result_data(
    balance: Balance,
    verdict: Verdict,
    *,
    title: str,
    assumptions: tuple[str, ...],
    notes: tuple[str, ...] = (),
    comparison: Comparison | None = None,
    inputs: dict[str, Any] | None = None,
    doubts: tuple[Doubt, ...] | None = None,
    energy: EnergyBalance | None = None,
    carried: tuple[CarriedBalance, ...] = (),
    losses: tuple[Loss, ...] = (),
    sharpened: Balance | None = None,
) -> dict[str, Any]:
    """Return a balance as plain data, SI units throughout.

    Parameters
    ----------
    balance : Balance
        The balance.
    verdict : Verdict
        Its judgement.
    title : str
        Title of the case.
    assumptions : tuple of str
        What the figures assume.
    notes : tuple of str, optional
        What was mended or noticed on the way.
    comparison : Comparison, optional
        A reported load beside ours.
    inputs : dict, optional
        What the figures were computed from.
    doubts : tuple of Doubt, optional
        What a review found; null in the file where there was none.
    energy : EnergyBalance, optional
        The energy law.
    carried : tuple of CarriedBalance, optional
        Carried scalars.
    losses : tuple of Loss, optional
        Losses between ports.
    sharpened : Balance, optional
        The balance of quadratic patches recovered from the data.

    Returns
    -------
    dict
        Ready for `write_json`. Moments are about the anchor, ``reaction.at``.
    """
    closed = balance.setting.closed
    load = balance.load
    difference = None
    if load.from_walls is not None and load.from_balance is not None:
        difference = load.from_walls.force - load.from_balance.force
    data: dict[str, Any] = {
        "schema": SCHEMA,
        "title": title,
        "geometry": {
            "volume": balance.enclosed.volume if balance.enclosed else None,
            "centroid": balance.enclosed.centroid if balance.enclosed else None,
            "area": balance.table.total("area"),
            "closed": closed,
            "area_vector": balance.table.total("area_vector"),
        },
        "groups": _groups(balance),
        "mass": asdict(balance.mass) if balance.mass else None,
        "momentum": None,
        "angular_momentum": None,
        "hardware_load": {
            "body": "flow on hardware",
            "from_walls": _load(load.from_walls),
            "from_balance": _load(load.from_balance),
            "difference": difference,
        },
        "reaction": None,
        "fluid": asdict(balance.fluid) if balance.fluid else None,
        "ports": ports_data(balance.ports),
        "verdict": asdict(verdict),
        "inputs": inputs or {},
        "assumptions": assumptions,
        "cautions": CAUTIONS,
        "notes": notes,
        "doubts": None if doubts is None else [_doubt(doubt) for doubt in doubts],
    }
    if closed:
        data["momentum"] = _ledger(balance.momentum, balance.complete)
        if balance.complete:
            data["momentum"]["relative_without_mean_pressure"] = relative_without_mean_pressure(balance)
        data["angular_momentum"] = {
            "about": balance.setting.anchor,
            **_ledger(balance.angular, balance.complete),
        }
    if balance.reaction is not None:
        axis = balance.reaction.line_of_action
        data["reaction"] = {
            "body": "anchor on hardware",
            "basis": balance.reaction.basis,
            "at": balance.reaction.wrench.at,
            **(_load(balance.reaction.wrench) or {}),
            "line_of_action": None
            if isnan(axis.couple)
            else {"point": axis.point, "direction": axis.direction, "couple": axis.couple},
        }
    frame = balance.setting.frame
    if frame is not None:
        data["frame"] = {**asdict(frame), "power_on_hardware": asdict(balance.power) if balance.power else None}
        if balance.axial is not None:
            data["frame"]["about_axis"] = _ledger(balance.axial, balance.axial.known)
    data["storage"] = {"basis": balance.storage.basis, "notes": balance.storage.notes}
    if balance.short_form is not None:
        data["short_form"] = asdict(balance.short_form)
    if balance.release is not None:
        data["release"] = asdict(balance.release)
    if sharpened is not None:
        data["sharpened"] = _sharpened(sharpened)
    if energy is not None:
        data["energy"] = energy_data(energy, balance.setting)
    if carried:
        data["carried"] = carried_data(carried, balance.setting)
    if losses:
        data["losses"] = losses_data(losses)
    if comparison is not None:
        data["reported"] = asdict(comparison)
    plain: dict[str, Any] = _plain(data)
    return plain


def _sharpened(balance: Balance) -> dict[str, Any]:
    """The higher-order values, in the shapes of the plain ones."""
    load = balance.load
    reaction = balance.reaction
    return {
        "groups": _groups(balance),
        "mass": asdict(balance.mass) if balance.mass else None,
        "momentum": _ledger(balance.momentum, balance.complete) if balance.setting.closed else None,
        "hardware_load": {"from_walls": _load(load.from_walls), "from_balance": _load(load.from_balance)},
        "reaction": None
        if reaction is None
        else {
            "at": reaction.wrench.at,
            **(_load(reaction.wrench) or {}),
        },
    }


def json_bytes(data: dict[str, Any], where: str = "") -> bytes:
    """Return plain data as JSON.

    Parameters
    ----------
    data : dict
        From `result_data`.
    where : str, optional
        File they are for, for messages.

    Returns
    -------
    bytes
        In UTF-8.

    Raises
    ------
    FieldError
        A figure that has overflowed.
    """
    try:
        text = json.dumps(data, indent=2, ensure_ascii=False, allow_nan=False) + "\n"
    except ValueError as error:
        raise FieldError(
            "a figure overflows",
            where=where,
            remedy="Check the numbers of the case and the fields for absurd sizes",
        ) from error
    return text.encode("utf-8")


def write_json(data: dict[str, Any], path: Path) -> None:
    """Write plain data as JSON, whole or not at all.

    Parameters
    ----------
    data : dict
        From `result_data`.
    path : pathlib.Path
        Where to; an older file stays until the new one is complete.

    Raises
    ------
    OutputError
        The folder or file cannot be written.
    FieldError
        A figure that has overflowed.
    """
    write_whole(json_bytes(data, str(path)), path)
