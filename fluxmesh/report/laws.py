"""The balances of energy and of carried scalars: their tables, lines and plain data."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, Final

from fluxmesh.balance.carried import WITHOUT_DIFFUSION, CarriedBalance
from fluxmesh.balance.energy import EnergyBalance
from fluxmesh.balance.setting import Setting
from fluxmesh.report.tables import figure, table

__all__ = ["carried_data", "carried_lines", "carried_table", "energy_data", "energy_lines", "energy_table"]

_HEADINGS: Final = {"enthalpy": "enthalpy out, W", "temperature": "enthalpy out, W", "mechanical": "flow work out, W"}


def energy_table(energy: EnergyBalance, setting: Setting) -> Any:
    """Return the entries of the energy law as a table for the terminal.

    Parameters
    ----------
    energy : EnergyBalance
        The law.
    setting : Setting
        Its groups.

    Returns
    -------
    rich.table.Table
        One row a group that takes part, then what is not of one group.
    """
    size = max(energy.size, energy.loss_size)
    moving = setting.frame is not None and (setting.frame.turns or any(setting.frame.velocity))
    columns = [
        ("group", "left"),
        (_HEADINGS[energy.basis], "right"),
        ("kinetic out, W", "right"),
        ("potential out, W", "right"),
        ("shear on fluid, W", "right"),
    ]
    entries = [energy.group_enthalpy, energy.group_kinetic, energy.group_potential, energy.group_viscous]
    if moving:
        columns.append(("pressure × surface speed, W", "right"))
        entries.append(energy.group_pressure_work)
    rows = []
    for k, group in enumerate(setting.groups):
        if group.role.is_port or any(entry[k] != 0.0 for entry in entries):
            rows.append([group.name, *(figure(float(entry[k]), size) for entry in entries)])
    blank = [""] * (len(entries) - 1)

    def whole(name: str, value: float | None) -> None:
        rows.append([name, figure(value, size) if value is not None else "not known", *blank])

    if energy.storage != 0.0:
        whole("stored", energy.storage)
    if energy.shaft_power_walls != 0.0:
        whole("moving walls take", energy.shaft_power_walls)
    if energy.shaft_power_given is not None:
        whole("shaft takes (given)", energy.shaft_power_given)
    if energy.heat is not None:
        whole("heat into fluid (given)", energy.heat)
    if energy.basis == "mechanical":
        whole("lost", energy.loss)
    elif energy.judged:
        whole("residual", energy.left)
    else:
        whole("heat minus shaft power that it demands", energy.left)
    return table("Energy, of the absolute velocity", columns, rows)


def energy_lines(energy: EnergyBalance, tolerance: float) -> list[str]:
    """Return what must stand beside the energy table, one sentence each.

    Parameters
    ----------
    energy : EnergyBalance
        The law.
    tolerance : float
        Share of the entries that counts as noise.
    """
    lines = [f"{note}." for note in energy.notes]
    if energy.unknown:
        lines.append(f"The energy law cannot be closed: {'; '.join(energy.unknown)}.")
    if abs(energy.mass_share) > tolerance * energy.size and not energy.unknown:
        lines.append(
            f"The mass residual alone brings {figure(energy.mass_share)} W into the law; what is left is told "
            "without it, about the mean energy of what passes."
        )
    if energy.gains(tolerance):
        lines.append(
            f"DOUBT: the flow gains {figure(-(energy.loss or 0.0))} W of mechanical energy from nowhere: something "
            "drives it that the case does not give (energy.shaft_power, moving walls), or pressures or flows are wrong."
        )
    elif energy.loss is not None and energy.basis != "mechanical":
        lines.append(f"Of the mechanical energy {figure(energy.loss, energy.loss_size)} W are lost.")
    return lines


def energy_data(energy: EnergyBalance, setting: Setting) -> dict[str, Any]:
    """Return the energy law as plain data, W.

    Parameters
    ----------
    energy : EnergyBalance
        The law.
    setting : Setting
        Its groups.

    Returns
    -------
    dict
        ``energy`` of ``balance.json``.
    """
    thermal = energy.basis != "mechanical"
    return {
        "basis": energy.basis,
        "flux": energy.flux,
        "pressure_work": energy.pressure_work,
        "viscous_power": energy.viscous_power,
        "storage": energy.storage,
        "heat": energy.heat,
        "shaft_power": energy.shaft_power_given,
        "shaft_power_walls": energy.shaft_power_walls,
        "residual": energy.residual,
        "residual_of_mass": energy.mass_share,
        "heat_minus_shaft_power": energy.left if thermal and not energy.judged else None,
        "relative": energy.relative,
        "size": energy.size,
        "loss": energy.loss,
        "groups": {
            group.name: {
                "enthalpy": energy.group_enthalpy[k],
                "kinetic": energy.group_kinetic[k],
                "potential": energy.group_potential[k],
                "pressure_work": energy.group_pressure_work[k],
                "viscous_power": energy.group_viscous[k],
            }
            for k, group in enumerate(setting.groups)
        },
        "unknown": energy.unknown,
        "notes": energy.notes,
    }


def _unit(scalar: CarriedBalance) -> str:
    return f"{scalar.unit}/s" if scalar.unit else "1/s"


def carried_table(carried: Sequence[CarriedBalance], setting: Setting) -> Any:
    """Return the balances of carried scalars as a table for the terminal.

    Parameters
    ----------
    carried : sequence of CarriedBalance
        One a scalar.
    setting : Setting
        Their groups.

    Returns
    -------
    rich.table.Table
        One column a scalar; fluxes leave where they are above zero.
    """
    ports = [k for k, group in enumerate(setting.groups) if group.role.is_port]
    sizes = [scalar.inflow + scalar.outflow for scalar in carried]
    rows = []
    for k in ports:
        cells = []
        for scalar, size in zip(carried, sizes):
            mean = scalar.group_mean[k]
            told = figure(float(scalar.group_flux[k]), size)
            cells.append(told if mean != mean else f"{told}\nmean {figure(float(mean))}")
        rows.append([setting.groups[k].name, *cells])

    def whole(name: str, values: Sequence[float | None]) -> None:
        rows.append(
            [name, *("not known" if value is None else figure(value, size) for value, size in zip(values, sizes))]
        )

    if any(scalar.storage != 0.0 for scalar in carried):
        whole("stored", [scalar.storage for scalar in carried])
    if any(scalar.source != 0.0 for scalar in carried):
        whole("arises inside (given)", [scalar.source for scalar in carried])
    whole("residual", [scalar.residual for scalar in carried])
    shares = ["–" if scalar.relative is None else f"{scalar.relative:.3g}" for scalar in carried]
    rows.append(["residual over entries", *shares])
    return table(
        "Carried by the flow, out of each port",
        [("group", "left"), *((f"{scalar.name}, {_unit(scalar)}", "right") for scalar in carried)],
        rows,
    )


def carried_lines(carried: Sequence[CarriedBalance]) -> list[str]:
    """Return what must stand beside the table of carried scalars, one sentence each.

    Parameters
    ----------
    carried : sequence of CarriedBalance
        One a scalar.
    """
    lines = [f"{WITHOUT_DIFFUSION}."] if carried else []
    lines += [f"{scalar.name} cannot be balanced: {'; '.join(scalar.unknown)}." for scalar in carried if scalar.unknown]
    return lines


def carried_data(carried: Sequence[CarriedBalance], setting: Setting) -> dict[str, Any]:
    """Return the balances of carried scalars as plain data, by name.

    Parameters
    ----------
    carried : sequence of CarriedBalance
        One a scalar.
    setting : Setting
        Their groups.

    Returns
    -------
    dict
        ``carried`` of ``balance.json``, each in the unit of the scalar a second.
    """
    return {
        scalar.name: {
            "per": scalar.per,
            "unit": scalar.unit,
            "inflow": scalar.inflow,
            "outflow": scalar.outflow,
            "storage": scalar.storage,
            "source": scalar.source,
            "residual": scalar.residual,
            "relative": scalar.relative,
            "groups": {
                group.name: {
                    "flux": scalar.group_flux[k],
                    "mean": None if scalar.group_mean[k] != scalar.group_mean[k] else scalar.group_mean[k],
                }
                for k, group in enumerate(setting.groups)
                if group.role.is_port
            },
            "unknown": scalar.unknown,
            "notes": (WITHOUT_DIFFUSION,),
        }
        for scalar in carried
    }
