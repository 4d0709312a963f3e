"""The result file: a balance as plain JSON data, written whole or not at all."""

from __future__ import annotations

import json
from dataclasses import asdict
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from fluxmesh.assess.assumptions import CAUTIONS
from fluxmesh.assess.comparison import Comparison
from fluxmesh.assess.verdict import Verdict, relative_without_mean_pressure
from fluxmesh.balance.balance import Balance
from fluxmesh.balance.momentum import Ledger
from fluxmesh.balance.wrench import Wrench
from fluxmesh.report.whole import write_whole

__all__ = ["SCHEMA", "result_data", "write_json"]

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
        return value.item()
    return value


def _ledger(ledger: Ledger, complete: bool) -> dict[str, Any]:
    return {
        "flux": ledger.flux(),
        "pressure": ledger.pressure(),
        "viscous": ledger.viscous(),
        "weight": ledger.weight,
        "storage": ledger.storage,
        "residual": ledger.residual() if complete else None,
        "relative": ledger.relative() if complete else None,
    }


def _load(wrench: Wrench | None) -> dict[str, Any] | None:
    return None if wrench is None else {"force": wrench.force, "moment": wrench.moment}


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


def _ports(balance: Balance) -> dict[str, Any]:
    return {
        name: {
            "mean_pressure": {"area": port.mean_pressure_area, "mass_flow": port.mean_pressure_mass_flow},
            "mean_total_pressure": {
                "area": port.mean_total_pressure_area,
                "mass_flow": port.mean_total_pressure_mass_flow,
            },
            "mean_speed": port.mean_speed,
            "momentum_factor": port.momentum_factor,
            "kinetic_energy_factor": port.kinetic_energy_factor,
            "reversed_share": port.reversed_share,
            "mach_number": port.mach_number,
        }
        for name, port in balance.ports.items()
    }


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
        "ports": _ports(balance),
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
            "force": balance.reaction.wrench.force,
            "moment": balance.reaction.wrench.moment,
            "line_of_action": {"point": axis.point, "direction": axis.direction, "couple": axis.couple},
        }
    if balance.short_form is not None:
        data["short_form"] = asdict(balance.short_form)
    if balance.release is not None:
        data["release"] = asdict(balance.release)
    if comparison is not None:
        data["reported"] = asdict(comparison)
    plain: dict[str, Any] = _plain(data)
    return plain


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
    """
    text = json.dumps(data, indent=2, ensure_ascii=False, allow_nan=False) + "\n"
    write_whole(text.encode("utf-8"), path)
