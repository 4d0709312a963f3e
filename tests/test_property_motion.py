"""The same problem elsewhere, turned, mirrored, on a moving ship, or about another point: every figure goes along."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from hypothesis import assume, given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from numpy.typing import NDArray

from fluxmesh import Frame, Storage
from fluxmesh.balance.frame import mass_flow_moments, storage_about
from fluxmesh.integral.table import BASIS
from tests.balance_figures import assert_told_alike, figures_of
from tests.invariants import ROUND, assert_alike, scales_of
from tests.problems import FLOW, FORCE, MOMENT, POWER, Change, Problem
from tests.solids import rigid_motion
from tests.strategies import BODIES, bounded, problems, seeds

FAR = 1e6
"""Sizes of the body that it is moved by. Coordinates there are known to 1e-10 of the body: so many digits are lost at
the door, nine or ten remain of areas, forces, and moments about a point that moves along, and nothing more is lost."""
LEFT_FAR = 1e-8
"""Relative change of the volume of a body that far: 1e-10 times the girth of its faces over their area, and the terms
of the volume over it."""


@bounded
@given(problem=problems(), seed=seeds)
def test_a_rotation_turns_every_figure(problem: Problem, seed: int) -> None:
    turn, _ = rigid_motion(np.random.default_rng(seed))
    assert_told_alike(problem, Change(turn=turn))


@bounded
@given(problem=problems(), seed=seeds, far=st.sampled_from([1.0, 100.0, FAR]))
def test_a_translation_leaves_every_figure(problem: Problem, seed: int, far: float) -> None:
    heading = np.random.default_rng(seed).standard_normal(3)
    change = Change(shift=far * heading / np.linalg.norm(heading))
    assert_told_alike(problem, change)
    volume, moved = (one.outcome.balance.enclosed.volume for one in (problem, problem.told(change)))
    assert abs(moved / volume - 1) < LEFT_FAR


# of quadratic triangles more: their rule is not alike in all corners
rounded = problems({"quadratic ball": BODIES["quadratic ball"]})


@bounded
@given(problem=st.one_of(problems(), rounded), seed=seeds, flat=st.booleans())
def test_a_mirror_turns_axial_figures_the_other_way(problem: Problem, seed: int, flat: bool) -> None:
    turn, shift = rigid_motion(np.random.default_rng(seed))
    mirror = np.diag([-1.0, 1.0, 1.0])
    assert_told_alike(problem, Change(turn=mirror if flat else turn @ mirror @ turn.T, shift=shift))


# ---- an observer who moves --------------------------------------------------------------------


def faster(problem: Problem, drift: NDArray[np.float64]) -> Problem:
    """The surface and the flow on it, moved along by a velocity more."""
    frame = Frame() if problem.frame is None else problem.frame
    moved = replace(problem, frame=replace(frame, velocity=tuple(np.asarray(frame.velocity) + drift)))
    if problem.velocity_frame == "relative" and problem.frame is not None:
        return moved
    supplied = {
        group: {name: value + drift if name == "velocity" else value for name, value in values.items()}
        for group, values in problem.supplied.items()
    }
    moved = replace(moved, supplied=supplied, velocity_frame="absolute")
    return moved.with_field("velocity", problem.fields["velocity"].values + drift)


@bounded
@given(problem=problems(), seed=seeds)
def test_surface_and_flow_that_move_along_take_their_mass_along(problem: Problem, seed: int) -> None:
    # Galilei: what passes the surface is as before, and its momentum has the drift times its mass more
    drift = 3 * np.random.default_rng(seed).standard_normal(3)
    other = faster(problem, drift)
    scales, others = scales_of(problem), scales_of(other)
    rounding = max(scales.rounding, others.rounding)
    before, after = figures_of(problem, scales), figures_of(other, others)
    expected = {name: before[name] for name in [*BASIS, "mass residual", "mass inflow", "mass storage"]}
    flow, lost = before["mass_flow"].value, before["mass residual"].value
    moments, _ = mass_flow_moments(problem.outcome.balance.table, np.asarray(problem.anchor))
    added = {
        "momentum group_flux": np.outer(flow, drift),
        "angular group_flux": np.cross(moments, drift),
        "momentum residual": lost * drift,
    }
    for law in ("momentum", "angular"):
        for entry in ("group_flux", "group_pressure", "group_viscous", "weight", "residual"):
            name = f"{law} {entry}"
            expected[name] = replace(before[name], value=before[name].value + added.get(name, 0.0))
    assert_alike(after, expected, rounding)


@bounded
@given(problem=problems(frames=("still", "moves")), seed=seeds)
def test_the_energy_law_holds_for_every_observer(problem: Problem, seed: int) -> None:
    # seen from where all moves by U more, the law has U·(law of momentum) + U²/2 (law of mass) more
    problem = replace(problem, storage=None, contents=None, gravity=np.zeros(3))
    if problem.frame is not None:
        problem = replace(problem, frame=replace(problem.frame, acceleration=(0.0, 0.0, 0.0)))
    drift = np.random.default_rng(seed).standard_normal(3)
    other = faster(problem, drift)
    first, then = problem.outcome, other.outcome
    assume(first.energy is not None and first.energy.residual is not None)
    # what passes walls, if anything, is in the laws of mass and momentum, and not in that of energy
    laws, walls = first.balance, first.balance.setting.walls()
    force = laws.momentum.residual() - laws.momentum.group_flux[walls].sum(axis=0)
    more = float(drift @ force) + float(drift @ drift) / 2 * laws.table.column("mass_flow")[~walls].sum()
    others = scales_of(other)
    limit = ROUND * others.rounding * others.terms[POWER]
    assert_allclose(then.energy.residual - first.energy.residual, more, rtol=0, atol=limit)


# ---- another anchor ---------------------------------------------------------------------------

ANCHORED = {"angular size", "reaction at", "line point", "energy left", "energy mass_share", "energy size",
            "energy loss", "energy loss_size"}  # fmt: skip


def closed(problem: Problem) -> Problem:
    """The problem with rates that close the law of mass and its first moment, ``∮ r ρVr·n dA = P - dS/dt``.

    The rate of angular momentum seen from a moving surface rests on both: it moves with the anchor where they hold.
    """
    table = problem.outcome.balance.table
    moments, _ = mass_flow_moments(table, np.asarray(problem.anchor))
    rates = problem.storage or Storage(energy=0.3, inertia=np.diag([0.1, 0.4, -0.2]), carried={"salt": 0.0, "dye": 0.0})
    held = np.array([0.3, -0.2, 0.5]) if problem.contents is None else problem.contents.momentum - moments.sum(axis=0)
    return replace(problem, storage=replace(rates, mass=-table.column("mass_flow").sum(), mass_moment=held))


@bounded
@given(problem=problems(), seed=seeds)
def test_moments_move_with_the_anchor(problem: Problem, seed: int) -> None:
    problem = closed(problem)
    # M(x1) = M(x0) + (x0 - x1) × F for every entry, potential energy by g·(x1 - x0); nothing else knows the anchor
    step = 3 * np.random.default_rng(seed).standard_normal(3)
    lift = float(problem.gravity @ step)
    other = replace(problem, anchor=problem.anchor + step)
    about = storage_about(problem.storage, problem.anchor, other.anchor)
    stored = lift * about.mass
    other = replace(other, storage=replace(about, energy=about.energy + stored))
    scales, others = scales_of(problem), scales_of(other)
    before, after = figures_of(problem, scales), figures_of(other, others)
    flow = before["mass_flow"].value * problem.outcome.balance.setting.ports()
    lifted = {
        "energy group_potential": lift * flow,
        "energy storage": stored,
        "energy residual": lift * flow.sum() + stored,
    }
    expected = {}
    for name, one in before.items():
        law, _, entry = name.rpartition(" ")
        arm = None
        if law == "angular":
            arm = before[f"momentum {entry}"].value
        elif entry == "moment" and law != "release":
            arm = before[f"{law} force"].value
        if one.value is None or name in ANCHORED:
            continue
        more = lifted.get(name, 0.0) if arm is None else np.cross(-step, arm)
        expected[name] = replace(one, value=one.value + more)
    rounding = max(scales.rounding, others.rounding)
    assert_alike(after, expected, rounding)
    if "line point" in before and np.isfinite(before["reaction moment"].value).all():
        # the line of action is the same line, whichever of its points is told
        force = before["reaction force"].value
        apart = np.cross(after["line point"].value - before["line point"].value, force)
        blunt = 1 + others.terms[FORCE] / float(np.linalg.norm(force))
        assert_allclose(apart, 0, rtol=0, atol=ROUND * rounding * others.terms[MOMENT] * blunt)
        # and force and couple on it are the reaction (Poinsot 1803, from memory)
        wrench = other.outcome.balance.reaction.wrench
        line = other.outcome.balance.reaction.line_of_action
        again = np.cross(line.point - wrench.at, wrench.force) + line.couple * line.direction
        assert_allclose(again, wrench.moment, rtol=0, atol=ROUND * rounding * others.terms[MOMENT] * blunt)


@bounded
@given(problem=problems(), seed=seeds)
def test_what_passes_a_closed_surface_does_not_mind_a_drift(problem: Problem, seed: int) -> None:
    # a velocity added everywhere carries as much in as out where the density is one: ∮ n dA = 0
    fields = {name: one for name, one in problem.fields.items() if name not in ("density", "mass flux")}
    problem = replace(problem, fields=fields, supplied={})
    drift = 3 * np.random.default_rng(seed).standard_normal(3)
    other = problem.with_field("velocity", problem.fields["velocity"].values + drift)
    scales, others = scales_of(problem), scales_of(other)
    rounding = max(scales.rounding, others.rounding)
    first, then = problem.outcome.balance, other.outcome.balance
    limit = ROUND * rounding * others.terms[FLOW]
    assert_allclose(then.mass.residual, first.mass.residual, rtol=0, atol=limit)
    change = then.table.column("mass_flow") - first.table.column("mass_flow")
    assert_allclose(change, problem.density * first.table.column("area_vector") @ drift, rtol=0, atol=limit)
