"""What makes up a doubt, against definitions: levers on the table, inputs, draws and the budget."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh.assess.doubt.budget import (
    Budget,
    Contribution,
    left_after_sharpening,
    mesh_contributions,
    round_off,
)
from fluxmesh.assess.doubt.derived import derived_figures
from fluxmesh.assess.doubt.draws import draw_inputs, summarise
from fluxmesh.assess.doubt.figures import figures
from fluxmesh.assess.doubt.inputs import Input, covariance_of, propagate, sensitivity
from fluxmesh.assess.doubt.levers import HeadOf, Levers, parts_of, pulled
from fluxmesh.assess.doubt.model import BalanceModel
from fluxmesh.assess.doubt.off_facets import off_facets
from fluxmesh.assess.doubt.recipe import Given, GroupRecipe, Recipe
from fluxmesh.assess.doubt.sampling import SampledErrors, sampling_contributions
from fluxmesh.balance.balance import Balance, balance_table
from fluxmesh.balance.setting import Hardware
from fluxmesh.integral.table import IntegralTable, column_slice
from tests.test_core_sums import ANCHOR, GRAVITY, GROUPS, STORAGE, Array, Cloud, balanced, close, cloud, held, setting

N = len(GROUPS)
DATUM = (0.4, -0.1, 2.0)
SOME = np.array([True, True, False, True, True])


def headed(seed: int) -> Cloud:
    """A cloud of one density."""
    one = cloud(seed)
    return replace(one, rho=np.full(one.p.size, 1.3))


def changed(one: Cloud, levers: Levers) -> Cloud:
    """The cloud with its fields as the levers say."""
    g = one.group
    head = np.where(SOME[g], 1.3 * (one.x - np.array(DATUM)) @ np.array(GRAVITY), 0.0)
    pressure = levers.scale[g] * (one.p - head) + levers.head[g] * head + levers.pressure[g]
    return replace(
        one,
        rho=one.rho * levers.density[g],
        v=one.v * levers.speed[g][:, None],
        t=one.t * levers.traction[g][:, None],
        p=pressure,
    )


@dataclass(frozen=True, eq=False)
class Weighed(Cloud):
    """A cloud with a mass flow of its own, whatever its velocity."""

    carried: Array

    @property
    def through(self) -> Array:
        return self.carried / self.rho

    @property
    def mass(self) -> Array:
        return self.carried


LEVERS = Levers(
    density=np.array([1.1, 0.8, 1.3, 0.9, 1.2]),
    speed=np.array([0.9, 1.2, -0.7, 1.1, 0.6]),
    pressure=np.array([0.5, -0.4, 0.3, 0.2, -0.6]),
    scale=np.array([1.2, 0.7, 1.1, 0.9, 1.3]),
    head=np.array([0.8, 1.1, 1.2, 0.9, 1.4]),
    traction=np.array([1.5, 0.6, 0.9, 1.1, 0.7]),
)


@pytest.mark.parametrize("given", [False, True], ids=["by velocity", "mass given"])
def test_levers_pull_the_table_as_changed_fields_make_it(given: bool) -> None:
    one = headed(1)
    if given:
        one = Weighed(**vars(one), carried=np.random.default_rng(1).normal(size=one.p.size))
    head = HeadOf(1.3, GRAVITY, DATUM, SOME)
    parts = parts_of(one.table(), head=head, mass_given=np.full(N, given))
    close(pulled(parts, Levers.at_rest((N,))).values, one.table().values)
    levers = replace(LEVERS, speed=np.abs(LEVERS.speed)) if given else LEVERS
    close(pulled(parts, levers).values, changed(one, levers).table().values)


def test_inputs_and_their_standard_uncertainty() -> None:
    # GUM (JCGM 100:2008), 4.3.7 and table G.1: a/sqrt(3) of a rectangle, U95/1.96 of a normal distribution
    assert_allclose(Input("a", 1.0, 0.6, shape="rectangular").standard, 0.6 / 3**0.5, rtol=1e-14)
    assert_allclose(Input("a", 1.0, 0.6).standard, 0.6 / 1.959964, rtol=1e-7)


def test_propagation_with_correlation() -> None:
    # y = 3a - 2b: u² = 9 u_a² + 4 u_b² - 12 r u_a u_b (GUM 5.2.2)
    u, r = np.array([0.2, 0.5]), 0.6
    correlation = [[1.0, r], [r, 1.0]]
    close(covariance_of(u, correlation), [[0.04, 0.06], [0.06, 0.25]])
    slopes = sensitivity(lambda x: np.array([3 * x[0] - 2 * x[1], x[0] ** 2]), [1.0, 2.0], u)
    close(slopes.linear, [[0.6, 0.4], [-1.0, 0.0]])
    close(slopes.square, [[0.0, 0.04], [0.0, 0.0]])
    found = propagate(slopes.linear, correlation)
    close(found.standard[0], (9 * 0.04 + 4 * 0.25 - 12 * r * 0.1) ** 0.5)
    close(propagate(slopes.linear).standard[0], (9 * 0.04 + 4 * 0.25) ** 0.5)
    close(found.correlation[0, 1], (0.6 * 0.4 - r * 0.4) / (found.standard[0] * 0.4))


def test_draws_have_the_spread_and_the_correlation_that_were_asked_for() -> None:
    inputs = [Input("a", 3.0, 0.4), Input("b", -1.0, 0.9, shape="rectangular")]
    drawn = draw_inputs(inputs, 40_000, seed=1)
    # 40 000 draws: 1 % is three times what the deviation of a normal sample scatters by
    assert_allclose(drawn.std(axis=0), [0.4 / 1.959964, 0.9 / 3**0.5], rtol=0.011)
    assert_allclose([drawn[:, 1].min(), drawn[:, 1].max()], [-1.9, -0.1], atol=1e-3)
    pair = [Input("a", 3.0, 0.4), Input("b", -1.0, 0.9)]
    drawn = draw_inputs(pair, 40_000, seed=1, correlation=[[1.0, -0.7], [-0.7, 1.0]])
    assert_allclose(np.corrcoef(drawn.T)[0, 1], -0.7, atol=0.01)
    assert_allclose(drawn.std(axis=0), np.array([0.4, 0.9]) / 1.959964, rtol=0.011)


def test_summaries_of_draws() -> None:
    # squares lie closest at their small end; evenly spread draws alike everywhere (JCGM 101:2008, 7.7)
    rows = np.array([np.arange(1000.0) ** 2, 5.0 * np.arange(1000.0)[::-1]])
    found = summarise(rows.copy())
    close(found.mean, rows.mean(axis=1))
    close(found.standard, [np.sqrt(((row - row.mean()) ** 2).sum() / 999) for row in rows])
    close(found.symmetric, [[25.0**2, 975.0**2], [125.0, 4875.0]])
    close(found.shortest[0], [0.0, 950.0**2])
    close(found.shortest[1] @ [-1.0, 1.0], 4750.0)


def test_the_budget_adds_squares_and_lets_errors_cancel() -> None:
    plain = figures(balanced(cloud(2)))
    size = plain.values.size
    flat, curved = (replace(plain, values=plain.values + shift) for shift in (-2.0, -2.0 + 1.5))
    contributions = (
        *mesh_contributions(plain, flat, curved),
        Contribution("a", "input", np.full(size, 3.0)),
        Contribution("b", "input", np.full(size, 4.0)),
    )
    close([one.error[0] for one in contributions[:2]], [2.0, -1.5])
    budget = Budget(plain, contributions, left=0.2)
    path = ("mass", "residual")
    # 0.5 together, but no less than a quarter of 2 + 1.5; half more for safety (set by scripts/calibrate)
    mesh = 1.5 * 0.25 * 3.5
    close(budget.by_path()[path], (mesh**2 + 9 + 16) ** 0.5)
    close(budget.by_path(sharpened=True)[path], ((0.2 * mesh) ** 2 + 9 + 16) ** 0.5)
    shares = {share.name: share for share in budget.shares(path)}
    close(sum(share.share for share in shares.values()), 1.0)
    close(shares["b"].share, 16 / (mesh**2 + 25))
    assert budget.dominant(path).name == "b"
    lone = Budget(plain, contributions[:1])
    close(lone.by_path()[path], 3.0)
    # a doubt of a relative residual is that of the residual, over the same entries
    here = budget.by_path()
    relative, residual = plain["momentum", "relative"], plain["momentum", "residual"]
    expected = np.linalg.norm(here["momentum", "residual"]) * relative / np.linalg.norm(residual)
    close(here["momentum", "relative"], expected[0])


def test_a_component_that_seems_sound_has_a_tenth_of_the_error_of_its_vector() -> None:
    plain = figures(balanced(cloud(2)))
    error = np.zeros(plain.values.size)
    place = plain.spot(("momentum", "residual")).slice
    error[place] = [3.0, 0.0, 4.0]
    budget = Budget(plain, (Contribution("a", "interpolation", np.abs(error), error),))
    close(budget.by_path()["momentum", "residual"], 1.5 * np.array([3.0, 0.5, 4.0]))


def test_what_sharpening_leaves_grows_with_what_it_changes() -> None:
    plain = cloud(3).table()

    def times(factor: float, name: str) -> IntegralTable:
        values = plain.values.copy()
        values[:, column_slice(name)] *= factor
        return IntegralTable(values, plain.origin)

    # 18 times the relative change (set by scripts/calibrate), between 0.05 and 0.5
    left = [left_after_sharpening(plain, times(f, "dynamic_pressure_area"), None) for f in (1.001, 1.01, 1.1)]
    close(left, [0.05, 0.18, 0.5])
    close(left_after_sharpening(plain, plain, times(1.02, "area")), 0.36)


def test_rounding_of_all_that_cancels() -> None:
    one = cloud(4)
    # of a surface far from the anchor; its table is about a point near it
    table = replace(one, x=one.x + 1000.0).table((1000.5, 1000.2, 999.6))
    done = balance_table(table, setting(), storage=STORAGE, contents=held())
    found = figures(done)
    force = (np.abs(table.column("pressure_area")) + 2 * table.column("dynamic_pressure_area")).sum()
    force += np.abs(table.column("viscous_force")).sum()
    force += np.abs(done.momentum.weight).sum() + np.abs(STORAGE.momentum).sum()
    arm = one.area.sum() ** 0.5 + np.linalg.norm(np.array([1000.5, 1000.2, 999.6]) - np.array(ANCHOR))
    widths = round_off(found, done, digits=1e-3).half_widths
    close(widths[found.spot(("momentum", "residual")).slice], np.full(3, 1e-3 * force))
    close(widths[found.spot(("angular_momentum", "residual")).slice] / (1e-3 * force * arm), np.ones(3))
    double = 8 * np.finfo(float).eps  # eight roundings
    close(round_off(found, done).half_widths / widths, np.full(widths.size, double / 1e-3))


def recipe(one: Cloud) -> Recipe:
    table = one.table()
    groups = (
        GroupRecipe(density=Given(1.3, 1), flow=Given(2.0, 0)),
        GroupRecipe(density=Given(1.3, 1), pressure=Given(3.0, 4)),
        GroupRecipe(density=Given(1.3, 1), solved=True),
        GroupRecipe(density=Given(1.3, 1)),
        GroupRecipe(density=Given(1.3, 1)),
    )
    return Recipe(
        groups=groups,
        mass_flow=table.column("mass_flow"),
        density_area=table.column("density_area"),
        mass_given=np.zeros(N, np.bool_),
        density=Given(1.3, 1),
        hardware=Given(4.0, 2),
        mass_rate=Given(0.35, 3),
    )


def test_a_solved_group_carries_what_the_others_leave() -> None:
    one = headed(3)
    levers = recipe(one).levers(np.array([2.4, 1.5, 4.0, 0.35, 3.2]))
    close(levers.density, np.full(N, 1.5 / 1.3))
    close(levers.speed[[0, 1, 3, 4]], [1.2, 1.0, 1.0, 1.0])
    close(levers.pressure, [0.0, 0.2, 0.0, 0.0, 0.0])
    close((levers.density * levers.speed) @ one.table().column("mass_flow"), 0.0)


def test_density_of_a_gas_follows_its_pressure_and_temperature() -> None:
    one = cloud(3)
    table = one.table()
    gauge = GroupRecipe(gas=True, pressure=Given(20.0, 0), temperature=Given(300.0, 1))
    absolute = GroupRecipe(gas=True, pressure=Given(120.0, 4), temperature=Given(300.0, 1), absolute=True)
    rest = (GroupRecipe(),) * (N - 2)
    made = Recipe(
        groups=(gauge, absolute, *rest),
        mass_flow=table.column("mass_flow"),
        density_area=table.column("density_area"),
        mass_given=np.zeros(N, np.bool_),
        ambient=Given(100.0, 2),
        gas_constant=Given(287.0, 3),
    )
    draws = np.array([23.0, 310.0, 104.0, 290.0, 123.0])
    levers = made.levers(draws)
    # rho = p/(R T)
    close(levers.density[0], (23.0 + 104.0) / 120.0 * (287.0 / 290.0) * (300.0 / 310.0))
    close(levers.density[1], 123.0 / 120.0 * (287.0 / 290.0) * (300.0 / 310.0))
    # gauge pressure of an absolute one
    close(levers.pressure[:2], [3.0, 3.0 - 4.0])


def model(seed: int) -> BalanceModel:
    one = headed(seed)
    inputs = (
        Input("flow", 2.0, 0.2),
        Input("density", 1.3, 0.1),
        Input("hardware", 4.0, 0.5),
        Input("mass rate", 0.35, 0.1),
        Input("pressure", 3.0, 0.4),
    )
    base = balance_table(
        one.table(), setting(hardware=Hardware(4.0, (0.9, 0.8, -1.2))), storage=STORAGE, contents=held()
    )
    return BalanceModel(base, parts_of(one.table()), recipe(one), inputs)


def test_slopes_and_draws_of_figures_are_those_of_balances_done_anew() -> None:
    made = model(4)
    middle, slope = made.sensitivity()
    for k, one in enumerate(made.inputs):
        step = np.where(np.arange(len(made.inputs)) == k, one.standard, 0.0)
        up, down = (middle.like(made.figures(made.values + s * step)) for s in (1.0, -1.0))
        close(slope.linear[k], (up - down) / 2)
        close(slope.square[k], (up + down) / 2 - middle.values)
    draws = draw_inputs(made.inputs, 1000, seed=2)[:16]
    found = made.summary(draws, middle, slope)
    anew = np.array([middle.like(made.figures(row)) for row in draws])
    for path in (
        ("reaction", "force"),
        ("momentum", "residual"),
        ("mass", "residual"),
        ("mass", "relative"),
        ("momentum", "relative"),
        ("groups", "drain", "moment_of_momentum_flux"),
        ("reaction", "line_of_action", "point"),
        ("ports", "hole", "kinetic_energy_factor"),
        ("ports", "drain", "mean_total_pressure", "mass_flow"),
        ("ports", "feed", "mean_speed"),
    ):
        place = middle.spot(path).slice
        assert_allclose(found.mean[place], anew[:, place].mean(axis=0), rtol=1e-9, atol=1e-9)
        assert_allclose(found.standard[place], anew[:, place].std(axis=0, ddof=1), rtol=1e-9, atol=1e-9)


def test_figures_of_no_simple_form_are_expanded_to_second_order() -> None:
    # acceleration = force / (mass of hardware + fluid): curved in one, and in both together
    made = model(5)
    small = tuple(replace(one, half_width=one.half_width / 10) for one in made.inputs)
    made = replace(made, inputs=small)
    middle, slope = made.sensitivity()
    draws = draw_inputs(small, 1000, seed=3)[:24]
    found = made.summary(draws, middle, slope)
    anew = np.array([made.figures(row)["release", "acceleration"] for row in draws])
    place = middle.spot(("release", "acceleration")).slice
    size = anew.std(axis=0)
    # found 7e-5; without what two inputs do together 9e-4, without curvature 1e-2
    assert_allclose(found.mean[place] / size, anew.mean(axis=0) / size, rtol=0, atol=2e-4)
    assert_allclose(found.standard[place] / size, anew.std(axis=0, ddof=1) / size, rtol=0, atol=2e-4)


def test_rates_from_snapshots_grow_with_the_density() -> None:
    made = model(9)
    storage = replace(STORAGE, basis="snapshots", energy=2.0, mass_moment=np.array([0.1, -0.2, 0.3]), inertia=np.eye(3))
    base = balance_table(made.base.table, made.base.setting, storage=storage, contents=held())
    made = replace(made, base=base, recipe=replace(made.recipe, contents_by_density=True, mass_rate=None))
    found = made.balance(np.array([2.0, 1.69, 4.0, 0.35, 3.0]))
    for name in ("mass", "momentum", "angular_momentum", "energy", "mass_moment", "inertia"):
        close(getattr(found.storage, name), 1.3 * getattr(storage, name))
    close(found.contents.mass, 1.3 * 7.0)
    close(found.fluid.centre, base.fluid.centre)
    # what a case gives stays as given
    made = replace(made, base=balance_table(base.table, base.setting, storage=STORAGE, contents=held()))
    close(made.balance(np.array([2.0, 1.69, 4.0, 0.35, 3.0])).storage.momentum, STORAGE.momentum)


def test_derived_figures_of_draws_are_those_of_balances_done_anew() -> None:
    one = cloud(5)
    one = replace(one, v=np.where((one.group == 2)[:, None], 0.0, one.v))
    parts = parts_of(one.table())
    rest = Levers.at_rest((N,))
    # the second draw turns the flow of both ports over
    speeds = [np.ones(N), np.array([-0.8, -1.2, 1.0, 1.0, 1.0]), np.array([1.1, 0.9, 1.0, 1.0, 1.0])]
    tables = [pulled(parts, replace(rest, speed=speed)) for speed in speeds]
    done = [balanced_table(table) for table in tables]
    middle = figures(done[0])
    each = [middle.like(figures(other)) for other in done]

    def rows(path: tuple[str, ...]) -> Array:
        return np.array([values[middle.spot(path).slice] for values in each]).T

    def columns(name: str, component: int = 0) -> Array:
        found = np.array([table.values[:, column_slice(name).start + component] for table in tables]).T
        if name == "reversed_mass_flow":
            # as a sum of what the draws move it is negative where the flow turns over
            found[:2, 1] = np.array([-0.8, -1.2]) * one.table().column(name)[:2]
        return found

    found = derived_figures(middle, done[0], rows, columns)
    for path in (
        ("mass", "inflow"),
        ("mass", "outflow"),
        ("mass", "relative"),
        ("ports", "feed", "reversed_share"),
        ("ports", "drain", "kinetic_energy_factor"),
        ("ports", "drain", "momentum_factor"),
        ("reaction", "line_of_action", "point"),
        ("reaction", "line_of_action", "couple"),
        ("momentum", "relative"),
        ("angular_momentum", "relative"),
    ):
        keep = [0, 2] if path[-1] in ("kinetic_energy_factor",) else [0, 1, 2]
        assert_allclose(found[path][:, keep], rows(path)[:, keep], rtol=1e-10, atol=1e-10, err_msg=str(path))
    for key in ("mass_flow", "rate", "profile_effect"):
        keep = [0, 2]  # where the flow turns over, inlet and outlet change places
        assert_allclose(found["short_form", key][:, keep], rows(("short_form", key))[:, keep], rtol=1e-10, atol=1e-10)


def balanced_table(table: IntegralTable) -> Balance:
    return balance_table(table, setting(), storage=STORAGE, contents=held())


def test_errors_of_sampled_groups_add_up_at_their_worst() -> None:
    made = model(6)
    middle = made.figures_with(Levers.at_rest((N,)))
    sizes = np.array([0.1, 0.0, 0.0, 0.2, 0.0])
    (found,) = sampling_contributions(made, middle, SampledErrors({"pressure": sizes}))
    place = middle.spot(("momentum", "residual")).slice
    vectors = made.base.table.column("area_vector")
    close(found.half_widths[place], np.abs(0.1 * vectors[0]) + np.abs(0.2 * vectors[3]))


def test_even_fields_moved_to_flat_faces() -> None:
    # of fields that are the same all over a group nothing else is left: the table is that of the flat faces
    one = cloud(7)
    g = one.group
    even = replace(
        one, p=np.arange(1.0, N + 1)[g], rho=np.arange(2.0, N + 2)[g], v=cloud(8, N).v[g], t=cloud(8, N).t[g]
    )
    other = replace(even, n=1.2 * even.n + 0.1, x=even.x + 0.05)
    found = off_facets(even.table(), other.table())
    for name in ("pressure_force", "moment_of_pressure", "pressure_area", "mass_flow", "momentum_flux",
                 "moment_of_momentum_flux", "kinetic_energy_flux", "mass_flow_position"):  # fmt: skip
        close(found.column(name), even.table().column(name))
    close(found.column("viscous_force"), other.table().column("viscous_force"))
