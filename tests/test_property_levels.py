"""Levels and factors of the data: a constant on the pressure, twice the density, a flow the other way, sums of data."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from fluxmesh.integral.table import BASIS
from tests.balance_figures import figures_of
from tests.invariants import ROUND, assert_alike, powers, scales_of, table_figures, table_of, written_out
from tests.problems import FORCE, MOMENT, Problem
from tests.strategies import bounded, problems, seeds

EVEN = {"normal_momentum", "speed_area", "reversed_mass_flow"}  # in the velocity, or neither odd nor even


@bounded
@given(problem=problems(), level=st.floats(-50, 50))
def test_the_level_of_pressure_cancels_over_the_closed_surface(problem: Problem, level: float) -> None:
    # entries change by -c A and what follows from it, groups that have pressure of their own but not; residuals stay
    kind = "absolute" if problem.kind == "absolute" else "gauge"
    problem = replace(problem, supplied={}, gas=False, kind=kind, ambient=20.0 if kind == "absolute" else None)
    other = problem.with_field("pressure", problem.fields["pressure"].values + level)
    scales, others = scales_of(problem), scales_of(other)
    rounding = max(scales.rounding, others.rounding)
    before, after = figures_of(problem, scales), figures_of(other, others)
    arms = before["position_normal"].value
    turned = np.stack(
        [arms[:, 1, 2] - arms[:, 2, 1], arms[:, 2, 0] - arms[:, 0, 2], arms[:, 0, 1] - arms[:, 1, 0]], axis=1
    )
    more = {
        "pressure_force": -before["area_vector"].value,
        "moment_of_pressure": -turned,
        "pressure_area": before["area"].value,
        "pressure_volume_flow": before["volume_flow"].value,
        "pressure_mass_flow": before["mass_flow"].value,
    }
    expected = {name: replace(before[name], value=before[name].value + level * more.get(name, 0.0)) for name in BASIS}
    stays = ("residual", "group_flux", "group_viscous", "weight", "storage")
    expected |= {f"{law} {name}": before[f"{law} {name}"] for law in ("momentum", "angular") for name in stays}
    expected |= {name: one for name, one in before.items() if name.startswith("mass ")}
    assert_alike(after, expected, rounding)
    # on the walls alone it counts, and both loads see it alike
    setting = problem.outcome.balance.setting
    if before["load from_walls force"].value is not None:
        extra = level * before["area_vector"].value[setting.walls()].sum(axis=0)
        for name in ("load from_walls force", "load from_balance force"):
            if before[name].value is not None:
                change = after[name].value - before[name].value
                assert_allclose(change, extra, rtol=0, atol=ROUND * rounding * others.terms[FORCE])


@bounded
@given(problem=problems())
def test_the_two_loads_differ_by_what_is_left(problem: Problem) -> None:
    scales = scales_of(problem)
    figures = figures_of(problem, scales)
    for entry, law in (("force", "momentum"), ("moment", "angular")):
        walls, balance = (figures[f"load {name} {entry}"] for name in ("from_walls", "from_balance"))
        if walls.value is not None and balance.value is not None:
            apart = replace(walls, value=walls.value - balance.value)
            assert_alike({entry: apart}, {entry: figures[f"{law} residual"]}, scales.rounding)


@bounded
@given(problem=problems())
def test_twice_the_density_doubles_to_the_bit_what_it_carries(problem: Problem) -> None:
    # a factor of two moves exponents only: each column by the power of the density in it, nothing else
    fields = {name: one for name, one in problem.fields.items() if name != "mass flux"}
    kind = "absolute" if problem.kind == "absolute" else "gauge"
    problem = replace(problem, fields=fields, head="included", kind=kind)
    other = replace(problem, density=2 * problem.density)
    if "density" in problem.fields:
        other = other.with_field("density", 2 * problem.fields["density"].values)
    one, two = table_of(problem), table_of(other)
    for name in BASIS:
        assert_array_equal(two.column(name), 2.0 ** powers(name)["rho"] * one.column(name), err_msg=name)


@bounded
@given(problem=problems(frames=("still",)))
def test_a_flow_the_other_way_turns_to_the_bit_what_is_odd_in_it(problem: Problem) -> None:
    other = problem.with_field("velocity", -problem.fields["velocity"].values)
    if "mass flux" in problem.fields:
        other = other.with_field("mass flux", -problem.fields["mass flux"].values)
    supplied = {
        g: {n: -v if n == "velocity" else v for n, v in values.items()} for g, values in problem.supplied.items()
    }
    one, two = table_of(problem), table_of(replace(other, supplied=supplied))
    for name in set(BASIS) - EVEN:
        sign = -1.0 if powers(name)["V"] % 2 else 1.0
        assert_array_equal(two.column(name), sign * one.column(name), err_msg=name)
    for name in ("normal_momentum", "speed_area"):
        assert_array_equal(two.column(name), one.column(name), err_msg=name)
    # what came back goes forth
    scales = scales_of(problem)
    forth = one.column("reversed_mass_flow") + one.column("mass_flow")
    limit = ROUND * scales.rounding * scales.column("mass_flow")
    assert_allclose(two.column("reversed_mass_flow"), forth, rtol=0, atol=limit)


@bounded
@given(problem=problems())
def test_pressure_and_traction_add_up(problem: Problem) -> None:
    # without a flow, weight or hardware every force and moment is linear in them
    bare = replace(
        problem, gravity=np.zeros(3), hardware=None, frame=None, storage=None, contents=None, supplied={}, gas=False,
        ambient=None, kind="gauge", head="included",
    )  # fmt: skip
    fields = {name: bare.fields[name] for name in bare.fields if name != "mass flux"}
    bare = replace(bare, fields=fields).with_field("velocity", 0 * bare.fields["velocity"].values)
    first = bare.with_field("traction", 0 * bare.fields["traction"].values)
    second = bare.with_field("pressure", 0 * bare.fields["pressure"].values)
    scales = scales_of(bare)
    parts = [figures_of(one, scales) for one in (first, second, bare)]
    for name, whole in parts[2].items():
        is_sum = whole.dimension in (FORCE, MOMENT) and whole.kind in ("v", "a") and "line" not in name
        if is_sum and whole.value is not None:
            added = replace(whole, value=parts[0][name].value + parts[1][name].value)
            assert_alike({name: added}, {name: whole}, scales.rounding)


@bounded
@given(problem=problems(frames=("still",)), seed=seeds)
def test_a_uniform_stream_passes_any_body_of_fluid_unchanged(problem: Problem, seed: int) -> None:
    stream = np.random.default_rng(seed).standard_normal(3)
    fields = {name: one for name, one in problem.fields.items() if name not in ("mass flux", "density")}
    quiet = replace(
        problem, fields=fields, gravity=np.zeros(3), storage=None, contents=None, supplied={}, gas=False,
        ambient=None, kind="gauge", head="included", sources={"salt": 0.0, "dye": 0.0}, heat=0.0, shaft_power=0.0,
    )  # fmt: skip
    level = {"velocity": stream, "traction": np.zeros(3), "pressure": 3.0}
    for name, one in fields.items():
        quiet = quiet.with_field(name, np.broadcast_to(level.get(name, 1.5), one.values.shape))
    scales = scales_of(quiet)
    figures = figures_of(quiet, scales)
    names = ["mass residual", "momentum residual", "angular residual"]
    if not problem.solid.groups.keys() & {"shell", "lid"}:
        # what is carried passes ports only
        names += ["salt residual", "dye residual", "energy residual"]
    for name in names:
        if name in figures:
            assert_alike(
                {name: figures[name]}, {name: replace(figures[name], value=0 * figures[name].value)}, scales.rounding
            )


@bounded
@given(problem=problems(), seed=seeds)
def test_a_table_about_another_point_is_algebra_on_the_first(problem: Problem, seed: int) -> None:
    step = np.random.default_rng(seed).standard_normal(3)
    other = replace(problem, origin=problem.origin + step)
    scales, others = scales_of(problem), scales_of(other)
    table = table_of(problem)
    before = {name: written_out(table, name) for name in BASIS}
    vector, arms = before["area_vector"], before["position_normal"]
    crossed = np.einsum("i,gkj->gikj", step, arms)
    outer = np.outer(step, step)
    first, flow = before["mass_flow_position"], before["mass_flow"]
    mixed = np.einsum("i,gj->gij", step, first)
    less = {
        "position": before["area"][:, None] * step,
        "position_normal": np.einsum("i,gj->gij", step, vector),
        "square_normal": crossed + crossed.transpose(0, 2, 1, 3) - np.einsum("ik,gj->gikj", outer, vector),
        "mass_flow_position": flow[:, None] * step,
        "mass_flow_square": mixed + mixed.transpose(0, 2, 1) - flow[:, None, None] * outer,
    }
    for moment, force in (
        ("moment_of_pressure", "pressure_force"),
        ("moment_of_viscous", "viscous_force"),
        ("moment_of_momentum_flux", "momentum_flux"),
        ("moment_of_dynamic_pressure", "dynamic_pressure_force"),
    ):
        less[moment] = np.cross(step, before[force])
    figures = table_figures(table, scales)
    expected = {name: replace(one, value=one.value - less.get(name, 0.0)) for name, one in figures.items()}
    assert_alike(table_figures(table_of(other), others), expected, max(scales.rounding, others.rounding))
