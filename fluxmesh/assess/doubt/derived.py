"""Figures that are no sums of parts of the table, from those that are, for many draws at once.

The formulas are those of `fluxmesh.balance`, on arrays with one entry a draw.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.doubt.figures import Figures, Path
from fluxmesh.balance.balance import Balance
from fluxmesh.surface.surface import Role

__all__ = ["derived_figures"]

Array = NDArray[np.float64]
_Rows = Callable[[Path], Array]


class _Columns(Protocol):
    """From the name of a basis integral to draws of one of its components, shape (n_groups, count)."""

    def __call__(self, name: str, component: int = 0) -> Array: ...


def derived_figures(middle: Figures, balance: Balance, rows: _Rows, columns: _Columns) -> dict[Path, Array]:
    """Return draws of figures that follow from sums.

    Parameters
    ----------
    middle : Figures
        The figures that are known.
    balance : Balance
        At the numbers of the case.
    rows : callable
        From the path of a sum to its draws, shape (n_components, count).
    columns : callable
        From the name of a basis integral to draws of one of its components, shape (n_groups, count).

    Returns
    -------
    dict of tuple of str to ndarray, shape (n_components, count)
        By path; figures that are not among `middle` are left out.
    """
    known = {spot.path for spot in middle.spots}
    flows = _flows(columns)
    found: dict[Path, Array] = {}
    if balance.mass is not None:
        found.update(_mass(balance, rows, flows))
    if balance.setting.frame is None:
        for law in ("momentum", "angular_momentum"):
            if (law, "residual") in known:
                found[law, "relative"] = _relative(balance, rows, law)
    if ("reaction", "line_of_action", "couple") in known:
        found.update(_line(balance, rows))
    for path in known:
        if path[-1] in ("force_size", "moment_size"):
            vector = rows((*path[:-1], path[-1].removesuffix("_size")))
            found[path] = np.asarray(np.linalg.norm(vector, axis=0))[None]
    found.update(_ports(balance, columns, flows))
    found.update(_short_form(balance, rows, columns))
    return {path: samples for path, samples in found.items() if path in known}


def _flows(columns: _Columns) -> tuple[Array, Array]:
    """Mass flow of each group, and what of it goes back; where a draw turns a flow over, that goes forth."""
    flow, back = columns("mass_flow"), columns("reversed_mass_flow")
    return flow, np.where(flow + 2 * back < 0.0, -flow - back, back)


def _mass(balance: Balance, rows: _Rows, flows: tuple[Array, Array]) -> dict[Path, Array]:
    flow, back = flows
    both = np.array([group.role is Role.OPEN for group in balance.setting.groups])[:, None]
    inflow = np.where(both, back, np.maximum(-flow, 0.0)).sum(axis=0)
    outflow = np.where(both, flow + back, np.maximum(flow, 0.0)).sum(axis=0)
    residual, storage = rows(("mass", "residual"))[0], rows(("mass", "storage"))[0]
    relative = np.abs(residual) / (inflow + outflow + np.abs(storage))
    found = {"inflow": inflow, "outflow": outflow, "relative": relative}
    return {("mass", key): samples[None] for key, samples in found.items()}


def _relative(balance: Balance, rows: _Rows, law: str) -> Array:
    keys = {
        "momentum": ("momentum_flux", "pressure_force", "viscous_force"),
        "angular_momentum": ("moment_of_momentum_flux", "moment_of_pressure", "moment_of_viscous"),
    }[law]
    size = np.zeros(rows((law, "residual")).shape[1])
    for group in balance.setting.groups:
        for key in keys:
            size += np.linalg.norm(rows(("groups", group.name, key)), axis=0)
    for key in ("weight", "storage"):
        size += np.linalg.norm(rows((law, key)), axis=0)
    return np.asarray(np.linalg.norm(rows((law, "residual")), axis=0) / size)[None]


def _line(balance: Balance, rows: _Rows) -> dict[Path, Array]:
    assert balance.reaction is not None
    force, moment = rows(("reaction", "force")), rows(("reaction", "moment"))
    size = np.linalg.norm(force, axis=0)
    with np.errstate(divide="ignore", invalid="ignore"):
        direction = force / size
        point = balance.reaction.wrench.at[:, None] + np.cross(direction, moment, axis=0) / size
    couple = (direction * moment).sum(axis=0)
    path = ("reaction", "line_of_action")
    found = {"point": point, "direction": direction, "couple": couple[None]}
    return {(*path, key): samples for key, samples in found.items() if np.isfinite(samples).all()}


def _ports(balance: Balance, columns: _Columns, flows: tuple[Array, Array]) -> dict[Path, Array]:
    setting, table = balance.setting, balance.table
    names = (
        "area", "volume_flow", "density_area", "pressure_area", "pressure_mass_flow", "dynamic_pressure_area",
        "dynamic_pressure_mass_flow", "kinetic_energy_flux", "normal_momentum", "speed_area",
    )  # fmt: skip
    all_of = {name: columns(name) for name in names}
    out = np.flatnonzero(setting.ports() & (table.column("mass_flow") > 0.0)).tolist()
    leaving: dict[int, Array] = {k: np.maximum(flows[0][k], 0.0) for k in out}
    outflow = np.sum(list(leaving.values()), axis=0)
    found: dict[Path, Array] = {}
    for k, group in enumerate(setting.groups):
        if not group.role.is_port:
            continue
        at = {name: samples[k] for name, samples in all_of.items()}
        flow, back = flows[0][k], flows[1][k]
        forth = flow + back
        with np.errstate(divide="ignore", invalid="ignore"):
            figures: dict[tuple[str, ...], Array] = {
                ("mean_pressure", "area"): at["pressure_area"] / at["area"],
                ("mean_pressure", "mass_flow"): at["pressure_mass_flow"] / flow,
                ("mean_speed",): np.abs(at["volume_flow"]) / at["area"],
                ("momentum_factor",): at["normal_momentum"] * at["density_area"] / flow**2,
                ("kinetic_energy_factor",): 2 * at["kinetic_energy_flux"] * at["density_area"] ** 2 / flow**3,
                ("reversed_share",): np.minimum(forth, back) / (forth + back),
            }
            if k in leaving:
                figures[("outflow_share",)] = leaving[k] / outflow
            if setting.frame is None:
                figures["speed", "area"] = np.abs(at["speed_area"]) / at["area"]
                if setting.heat_ratio is None:
                    total = at["pressure_area"] + at["dynamic_pressure_area"]
                    passing = at["pressure_mass_flow"] + at["dynamic_pressure_mass_flow"]
                    figures["mean_total_pressure", "area"] = total / at["area"]
                    figures["mean_total_pressure", "mass_flow"] = passing / flow
        for key, samples in figures.items():
            if np.isfinite(samples).all():
                found[("ports", group.name, *key)] = samples[None]
    return found


def _short_form(balance: Balance, rows: _Rows, columns: _Columns) -> dict[Path, Array]:
    short = balance.short_form
    if short is None:
        return {}
    names = [group.name for group in balance.setting.groups]
    one, two = names.index(short.inlet), names.index(short.outlet)
    mass, area = columns("mass_flow"), columns("area")
    speeds = np.stack([columns("velocity_area", k) for k in range(3)]) / area
    flow = (mass[two] - mass[one]) / 2
    rate = flow * (speeds[:, two] - speeds[:, one])
    found = {
        "mass_flow": flow[None],
        "inlet_velocity": speeds[:, one],
        "outlet_velocity": speeds[:, two],
        "rate": rate,
        "profile_effect": rows(("short_form", "full_flux")) - rate,
    }
    return {("short_form", key): samples for key, samples in found.items()}
