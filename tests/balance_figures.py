"""All figures of a balance with their kinds and dimensions, and how much larger than a figure its terms may be."""

from __future__ import annotations

from typing import Any, Final

import numpy as np

from fluxmesh.balance.balance import Balance
from fluxmesh.field.port_samples import MEANS_AS_ONE, SECTION
from tests.invariants import ROUND, Figure, Scales, assert_alike, changed, scales_of, table_figures, table_of
from tests.problems import (
    CARRIED,
    FLOW,
    FORCE,
    LENGTH,
    MASS,
    MOMENT,
    NONE,
    POWER,
    RATIO,
    SPEED,
    STRESS,
    Change,
    Dimension,
    Problem,
)


def figures_of(problem: Problem, scales: Scales) -> dict[str, Figure]:
    """Return all figures of the balance of a problem, and its table."""
    found = table_figures(table_of(problem), scales)
    terms, outcome = scales.terms, problem.outcome
    done = outcome.balance

    def put(name: str, value: Any, kind: str, dimension: Dimension, hard: float = 1.0) -> None:
        found[name] = Figure(value, kind, dimension, terms[dimension], hard)

    volume = float(done.enclosed.volume)
    put("volume", volume, "", (0, 3, 0))
    spread = terms[0, 3, 0] / volume
    put("centroid", done.enclosed.centroid, "x", LENGTH, spread)
    if done.fluid is not None:
        put("fluid mass", done.fluid.mass, "", MASS)
        put("fluid weight", done.fluid.weight, "v", FORCE)
        put("fluid centre", done.fluid.centre, "x", LENGTH, spread * (1 + terms[MASS] / done.fluid.mass))
    for name in ("inflow", "outflow", "storage", "residual"):
        put(f"mass {name}", getattr(done.mass, name), "", FLOW)
    ledgers = [("momentum", done.momentum, "v", FORCE), ("angular", done.angular, "a", MOMENT)]
    if done.axial is not None:
        ledgers.append(("about the axis", done.axial, "a", MOMENT))
    for law, ledger, kind, dimension in ledgers:
        for name in (
            "group_flux",
            "group_pressure",
            "group_viscous",
            "weight",
            "storage",
            "drift_flux",
            "drift_storage",
        ):
            put(f"{law} {name}", getattr(ledger, name), kind, dimension)
        put(f"{law} residual", ledger.residual(), kind, dimension)
        put(f"{law} size", ledger.size(), "", dimension)
    for name in ("from_walls", "from_balance"):
        wrench = getattr(done.load, name)
        put(f"load {name} force", None if wrench is None else wrench.force, "v", FORCE)
        put(f"load {name} moment", None if wrench is None else wrench.moment, "a", MOMENT)
    if done.reaction is not None:
        _put_reaction(put, problem, terms)
    if done.power is not None:
        for name, dimension in (("from_walls", POWER), ("from_balance", POWER)):
            put(f"power {name}", getattr(done.power, name), "", dimension)
        for name in ("torque_from_walls", "torque_from_balance"):
            put(f"power {name}", getattr(done.power, name), "", MOMENT)
    if done.short_form is not None:
        short = done.short_form
        worst = terms[0, 2, 0] / float(done.table.column("area").min())
        put("short form flow", short.mass_flow, "", FLOW)
        for name in ("rate", "full_flux", "profile_effect"):
            put(f"short form {name}", getattr(short, name), "v", FORCE, worst)
        put("short form velocities", np.array([short.inlet_velocity, short.outlet_velocity]), "v", SPEED, worst)
    _put_scalars(put, problem, terms)
    _put_ports(put, problem, scales)
    return found


def _put_reaction(put: Any, problem: Problem, terms: dict[Dimension, float]) -> None:
    done = problem.outcome.balance
    wrench, line = done.reaction.wrench, done.reaction.line_of_action
    put("reaction force", wrench.force, "v", FORCE)
    put("reaction moment", wrench.moment, "a", MOMENT)
    put("reaction at", wrench.at, "x", LENGTH)
    # the line is a quotient by the force, which may be what is left of larger ones
    blunt = 1 + terms[FORCE] / max(float(np.linalg.norm(wrench.force)), 1e-60)
    put("line direction", line.direction, "v", NONE, blunt)
    put("line couple", line.couple, "p", MOMENT, blunt)
    put("line point", line.point, "x", LENGTH, blunt**2 * terms[MOMENT] / terms[FORCE] / terms[LENGTH])
    if done.release is not None:
        put("release direction", done.release.direction, "v", NONE, blunt)
        if done.release.acceleration is not None:
            mass = done.fluid.mass + done.setting.hardware.mass
            heavy = 1 + terms[MASS] / mass
            put("release acceleration", done.release.acceleration * mass, "v", FORCE, heavy)
            put("release moment", done.release.turning_moment, "a", MOMENT, heavy * (1 + terms[0, 3, 0]))


def _put_scalars(put: Any, problem: Problem, terms: dict[Dimension, float]) -> None:
    outcome = problem.outcome
    table = outcome.balance.table
    # means of what passes: quotients by the net flows
    passing = max(float(np.abs(table.column("mass_flow")).max()), 1e-60)
    thin = 1 + (terms[FLOW] / passing) ** 2
    energy = outcome.energy
    if energy is not None:
        for name in ("enthalpy", "kinetic", "potential", "pressure_work", "viscous"):
            put(f"energy group_{name}", getattr(energy, f"group_{name}"), "", POWER)
        for name in ("storage", "shaft_power_walls", "residual", "loss"):
            put(f"energy {name}", getattr(energy, name), "", POWER)
        for name in ("mass_share", "left", "size", "loss_size"):
            put(f"energy {name}", getattr(energy, name), "", POWER, thin)
    for one in outcome.carried:
        dimension = CARRIED[one.name]
        for name in ("group_flux", "inflow", "outflow", "storage", "residual"):
            put(f"{one.name} {name}", getattr(one, name), "", dimension)


def on_the_edge(done: Balance, k: int) -> bool:
    """Whether round-off decides if a port is the section of a duct, or has a mean of what passes."""
    table = done.table
    vector, area = float(np.linalg.norm(table.column("area_vector")[k])), float(table.column("area")[k])
    flow, back = abs(float(table.column("mass_flow")[k])), float(table.column("reversed_mass_flow")[k])
    passing = max(float(table.column("mass_flow")[k]) + 2 * back, 1e-60)
    return abs(vector / area - SECTION) < 1e-9 or abs(flow / passing - MEANS_AS_ONE) < 1e-9


def _put_ports(put: Any, problem: Problem, scales: Scales) -> None:
    done, terms = problem.outcome.balance, scales.terms
    table = done.table
    # quotients by the area, by what passes, and by its momentum: how much larger their terms may be
    small = float(terms[0, 2, 0] / table.column("area").min())
    passing = scales.column("mass_flow") / np.maximum(np.abs(table.column("mass_flow")), 1e-60)
    pushing = scales.column("normal_momentum") / np.maximum(table.column("normal_momentum"), 1e-60)
    for name, port in done.ports.items():
        k = [group.name for group in done.setting.groups].index(name)
        if on_the_edge(done, k):
            continue
        heavy, axial = 1 + float(passing[k]), 1 + float(pushing[k])
        hard = {"area": small, "mass_flow": heavy**2, "momentum": axial**2}
        for what, dimension in _MEANS.items():
            # a gas: powers of up to 3.5 of numbers of a size of one to twenty
            steep = (1 + terms[SPEED] ** 2) ** (RATIO / (RATIO - 1)) if problem.gas else 1.0
            warm = WARM if "temperature" in what else 1.0
            for how, quotient in hard.items():
                put(f"{name} {what} {how}", getattr(getattr(port, what), how), "", dimension, quotient * steep * warm)
        put(f"{name} mean speed", port.mean_speed, "", SPEED, small)
        put(f"{name} mach number", port.mach_number, "", NONE, small * (1 + terms[SPEED] ** 2))
        factors = {
            "momentum_factor": heavy**3,
            "kinetic_energy_factor": heavy**4,
            "uniformity": heavy**2,
            "reversed_share": heavy,
            "outflow_share": heavy**2,
        }
        for what, quotient in factors.items():
            put(f"{name} {what}", getattr(port, what), "", NONE, quotient)
        wide = 1 + scales.sizes["X"] / float(np.sqrt(table.column("area")[k]))
        put(f"{name} swirl", port.swirl, "p", NONE, axial**2 * wide * small)
    for loss in problem.outcome.losses:
        if loss.total_pressure_drop is not None:
            thin = float(1 + passing[done.setting.ports()].max()) ** 2
            put("loss of pressure", loss.total_pressure_drop, "", STRESS, thin * (1 + terms[0, 3, 0]))


WARM: Final = 20.0
"""Bound of temperatures in K; kelvins are in no system of units here."""
_MEANS: Final = {
    "mean_pressure": STRESS, "mean_total_pressure": STRESS, "mean_temperature": NONE, "mean_total_temperature": NONE,
    "speed": SPEED, "mean_mach_number": NONE,
}  # fmt: skip


def assert_told_alike(problem: Problem, change: Change, multiple: float = ROUND) -> None:
    """Hold a problem told in another way to the figures of the first, changed."""
    other = problem.told(change)
    scales, others = scales_of(problem), scales_of(other)
    found, before = figures_of(other, others), figures_of(problem, scales)
    assert found.keys() == before.keys()
    assert_alike(found, changed(before, change), max(scales.rounding, others.rounding), multiple)
