"""What a run prints: ledger, loads with the bodies they act between, verdict, assumptions."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from fluxmesh.assess.assumptions import CAUTIONS
from fluxmesh.assess.comparison import Comparison
from fluxmesh.assess.verdict import State, Verdict, verdict_words
from fluxmesh.balance.balance import Balance
from fluxmesh.balance.carried import CarriedBalance
from fluxmesh.balance.energy import EnergyBalance
from fluxmesh.balance.losses import Loss
from fluxmesh.balance.weight import weight_wrench
from fluxmesh.balance.wrench import Wrench
from fluxmesh.report.doubt import DoubtShown, doubt_lines, doubt_table
from fluxmesh.report.laws import carried_lines, carried_table, energy_lines, energy_table
from fluxmesh.report.motion import motion_lines
from fluxmesh.report.ports import losses_lines, losses_table, ports_tables
from fluxmesh.report.tables import figure, place, row, stack, table
from fluxmesh.surface.surface import ControlSurface

if TYPE_CHECKING:
    from rich.console import Console

    from fluxmesh.assess.review import Doubt

__all__ = ["print_balance"]


def _surface_lines(balance: Balance, surface: ControlSurface) -> list[str]:
    area = float(balance.table.total("area"))
    shells = "" if surface.shells == 1 else f", {surface.shells} separate shells"
    state = "closed" if balance.setting.closed else "OPEN (as the case says)"
    lines = [f"Surface: {surface.face_count:,} faces, {state}{shells}, area {figure(area)} m²"]
    if balance.enclosed is not None:
        lines.append(
            f"Volume inside: {figure(balance.enclosed.volume)} m³, centroid {place(balance.enclosed.centroid)} m"
        )
    if balance.fluid is not None:
        lines.append(f"Fluid held: {figure(balance.fluid.mass)} kg, weight {row(balance.fluid.weight)} N")
    return lines


def _ledger(balance: Balance) -> Any:
    flows = balance.table.column("mass_flow")
    ledger = balance.momentum
    size = max(ledger.size(), 0.0)
    through = float(np.abs(flows).sum())
    rows = []
    for k, group in enumerate(balance.setting.groups):
        data = balance.setting.data
        rows.append(
            [
                f"{group.name}\n{group.role.value}",
                figure(float(flows[k]), through) if data.flux[k] or not group.role.is_port else "not given",
                "x\ny\nz",
                stack(ledger.group_flux[k], size),
                stack(ledger.group_pressure[k], size) if data.pressure[k] else "not given",
                stack(ledger.group_viscous[k], size) if data.traction[k] else "not given",
            ]
        )
    if balance.mass is not None:
        rows.append(["weight of fluid", "", "x\ny\nz", "", stack(ledger.weight, size), ""])
        if np.any(ledger.storage) or balance.mass.storage != 0.0:
            stored = stack(ledger.storage, size) if ledger.known else "not known"
            rows.append(["stored inside", figure(balance.mass.storage, through), "x\ny\nz", stored, "", ""])
        residual = stack(ledger.residual(), size) if balance.complete else "not known"
        rows.append(["residual", figure(balance.mass.residual, through), "x\ny\nz", residual, "", ""])
    return table(
        "Through and on each group",
        [
            ("group", "left"),
            ("mass out, kg/s", "right"),
            ("", "left"),
            ("momentum out, N", "right"),
            ("pressure on fluid, N", "right"),
            ("shear on fluid, N", "right"),
        ],
        rows,
    )


def _wrench_row(name: str, wrench: Wrench | None, scale: tuple[float, float]) -> list[str]:
    if wrench is None:
        return [name, "not known", "", ""]
    size = float(np.linalg.norm(wrench.force))
    return [name, row(wrench.force, scale[0]), figure(size, scale[0]), row(wrench.moment, scale[1])]


def _loads(balance: Balance) -> Any:
    load = balance.load
    scale = (balance.momentum.size(), balance.angular.size() + balance.momentum.size())
    rows = [
        _wrench_row("flow on hardware (walls)", load.from_walls, scale),
        _wrench_row("flow on hardware (balance)", load.from_balance, scale),
    ]
    if load.from_walls is not None and load.from_balance is not None:
        gap = Wrench(
            load.from_walls.force - load.from_balance.force,
            load.from_walls.moment - load.from_balance.moment,
            load.from_walls.at,
        )
        rows.append(_wrench_row("difference", gap, scale))
    if balance.reaction is not None:
        if balance.setting.hardware is not None:
            held = balance.setting.hardware
            at = np.asarray(balance.setting.anchor, dtype=np.float64)
            weight = weight_wrench(held.mass, np.asarray(held.centre), balance.setting.gravity, at)
            rows.append(_wrench_row("weight of hardware", weight, scale))
            frame = balance.setting.frame
            if frame is not None and frame.acceleration_at(held.centre).any():
                pull = -frame.acceleration_at(held.centre)
                inertia = weight_wrench(held.mass, np.asarray(held.centre), (pull[0], pull[1], pull[2]), at)
                rows.append(_wrench_row("inertia of hardware", inertia, scale))
        rows.append(_wrench_row("ANCHOR ON HARDWARE", balance.reaction.wrench, scale))
    return table(
        f"Loads, moments about the anchor {place(np.asarray(balance.setting.anchor))} m",
        [
            ("who on whom", "left"),
            ("force (x, y, z), N", "right"),
            ("size, N", "right"),
            ("moment (x, y, z), N m", "right"),
        ],
        rows,
    )


def _reaction_lines(balance: Balance) -> list[str]:
    reaction = balance.reaction
    if reaction is None:
        return ["No reaction: neither the walls nor the ports carry enough data for a load."]
    axis = reaction.line_of_action
    # what lies below round-off of force times size of the device prints as 0
    reach = (
        float(np.nan_to_num(np.linalg.norm(reaction.wrench.moment))) + balance.angular.size() + balance.momentum.size()
    )
    basis = "from the momentum balance" if reaction.basis == "balance" else "from the walls"
    if np.isfinite(axis.couple):
        lines = [
            f"The reaction rests on the load {basis}; it acts along the line through {place(axis.point)} m, "
            f"direction {row(axis.direction, 1e3)}, with a couple of {figure(axis.couple, reach)} N m about it."
        ]
    else:
        lines = [f"The reaction rests on the load {basis}; its moment and line of action are not known."]
    release = balance.release
    if release is not None:
        line = f"If the anchor let go, hardware and fluid would start along {row(release.direction, 1e3)}"
        if release.acceleration is not None:
            line += f" at {figure(float(np.linalg.norm(release.acceleration)))} m/s²"
        if release.turning_moment is not None:
            line += f", turned by {row(release.turning_moment, reach)} N m about their common centre"
        lines.append(line + ".")
    short = balance.short_form
    if short is not None:
        effect = float(np.linalg.norm(short.profile_effect))
        rate = float(np.linalg.norm(short.rate))
        share = f", {effect / rate:.2%} of it" if rate > 0 else ""
        lines.append(
            f"Short form, {short.inlet} to {short.outlet}: mass flow × (V2 - V1) = {figure(short.mass_flow)} kg/s × "
            f"{row(short.outlet_velocity - short.inlet_velocity)} m/s = {row(short.rate)} N; "
            f"the shape of the profiles adds {row(short.profile_effect, effect + rate)} N{share}."
        )
    return lines


def _comparison_lines(comparison: Comparison | None) -> list[str]:
    if comparison is None:
        return []
    lines = []
    on = ", ".join(comparison.on)
    if comparison.reported_force is not None:
        apart = "" if comparison.relative is None else f", {comparison.relative:.2%} apart"
        lines.append(
            f"Reported by the solver on {on}: force {row(comparison.reported_force)} N, "
            f"here {row(comparison.force)} N{apart} (compared, not used)."
        )
    if comparison.reported_moment is not None:
        lines.append(
            f"Reported by the solver on {on}: moment {row(comparison.reported_moment)} N m, "
            f"here {row(comparison.moment)} N m (compared, not used)."
        )
    lines += [f"Telling: {text}." for text in comparison.explanations]
    return lines


def _verdict_line(verdict: Verdict) -> tuple[str, str]:
    styles = {None: "bold yellow", True: "bold green", False: "bold red"}
    style = "bold yellow" if verdict.state is State.WITHIN_DOUBT else styles[verdict.closes]
    return f"VERDICT: {verdict_words(verdict)}", style


def print_balance(
    console: Console,
    balance: Balance,
    verdict: Verdict,
    *,
    title: str,
    surface: ControlSurface,
    assumptions: Sequence[str],
    notes: Sequence[str] = (),
    comparison: Comparison | None = None,
    doubts: Sequence[Doubt] | None = None,
    energy: EnergyBalance | None = None,
    carried: Sequence[CarriedBalance] = (),
    losses: Sequence[Loss] = (),
    budget: DoubtShown | None = None,
) -> None:
    """Print a balance, its loads beside their assumptions, and its verdict.

    Parameters
    ----------
    console : rich.console.Console
        Where to.
    balance : Balance
        The balance.
    verdict : Verdict
        Its judgement.
    title : str
        Title of the case.
    surface : ControlSurface
        The surface.
    assumptions : sequence of str
        What the figures assume.
    notes : sequence of str, optional
        What was mended, sampled or solved on the way.
    comparison : Comparison, optional
        A reported load beside ours.
    doubts : sequence of Doubt, optional
        What a review found; None when there was no review.
    energy : EnergyBalance, optional
        The energy law.
    carried : sequence of CarriedBalance, optional
        Carried scalars.
    losses : sequence of Loss, optional
        Losses between ports.
    budget : DoubtShown, optional
        The doubt of the figures, and what it is made of.
    """
    from rich.text import Text

    def say(line: str, style: str = "") -> None:
        console.print(Text(line, style=style))

    say(title, "bold")
    for line in [*_surface_lines(balance, surface), *(f"Note: {note}" for note in notes)]:
        say(line)
    console.print()
    console.print(_ledger(balance))
    for ports in ports_tables(balance.ports, width=min(console.width, 120)):
        console.print(ports)
    if losses:
        console.print(losses_table(losses))
        for line in losses_lines(losses):
            say(line)
    if energy is not None:
        console.print(energy_table(energy, balance.setting))
        for line in energy_lines(energy, verdict.tolerance):
            say(line)
    if carried:
        console.print(carried_table(carried, balance.setting))
        for line in carried_lines(carried):
            say(line)
    console.print(_loads(balance))
    if budget is not None:
        console.print(doubt_table(budget))
        for line in doubt_lines(budget):
            say(line)
    for line in [*_reaction_lines(balance), *motion_lines(balance), *_comparison_lines(comparison)]:
        say(line)
    say("Assumed: " + "; ".join(text[0].lower() + text[1:] for text in assumptions) + ".")
    for caution in CAUTIONS:
        say(f"Caution: {caution}")
    console.print()
    line, style = _verdict_line(verdict)
    if doubts:
        count = len(doubts)
        line += f", with {count} DOUBT{'S' if count > 1 else ''} about the case"
        style = style.replace("green", "yellow")
    say(line, style)
    for reason in verdict.reasons:
        say(f"  - {reason}")
    for doubt in doubts or ():
        say(f"  - Doubt: {doubt.seen}. {doubt.matters}. To settle it: {doubt.remedy()}")
    if doubts is None:
        say("  - The case was not reviewed for doubts: `fluxmesh check` does it")
