"""The sharpened table and the doubt of figures: they go along with every change that plain figures go along with."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from fluxmesh import lay_flow
from fluxmesh.field.flow import integrate_flow
from fluxmesh.field.patches import sharpened_table
from fluxmesh.job.doubt import doubt_of
from tests.balance_figures import on_the_edge
from tests.invariants import UNITS, Figure, assert_alike, changed, scales_of, table_figures
from tests.problems import ACCELERATION, CARRIED, LENGTH, MASS, NONE, SPEED, STRESS, Change, Problem
from tests.solids import Solid, box, mapped, rigid_motion
from tests.strategies import BODIES, bounded, problems, seeds

RECOVERED = 2.0**26
"""Multiple of round-off for what is made of recovered slopes and normals: each solves a small system, whose condition
is bounded by its damping (1e-8 of the weights) alone where neighbours tell little; plain integrals only add up."""
LEFT = 1e-5
"""Relative difference of half widths: differences of two tables, of which rounding leaves so many digits at least."""


def sharpened(problem: Problem, facets: bool) -> dict[str, Figure]:
    table = sharpened_table(
        problem.surface, problem.flow, facets_are_geometry=facets, origin=np.asarray(problem.origin), threads=1
    )
    return table_figures(table, scales_of(problem))


@bounded
@given(
    problem=problems(),
    seed=seeds,
    facets=st.booleans(),
    how=st.sampled_from(["turned", "mirrored", "shifted", "in other units"]),
)
def test_the_sharpened_table_goes_along(problem: Problem, seed: int, facets: bool, how: str) -> None:
    rng = np.random.default_rng(seed)
    turn, shift = rigid_motion(rng, 5.0)
    change = {
        "turned": Change(turn=turn),
        "mirrored": Change(turn=np.diag([1.0, -1.0, 1.0])),
        "shifted": Change(shift=shift),
        "in other units": Change(units=tuple(10 ** rng.uniform(-2, 2, 3))),
    }[how]
    other = problem.told(change)
    rounding = max(scales_of(problem).rounding, scales_of(other).rounding)
    assert_alike(sharpened(other, facets), changed(sharpened(problem, facets), change), rounding, RECOVERED)


# of faces of both kinds more, since those that stay as they are stand beside those that are bent
mixed = problems({"straight and quadratic": BODIES["straight and quadratic"]})


@bounded
@given(problem=st.one_of(problems(), mixed), seed=seeds, facets=st.booleans())
def test_the_sharpened_table_does_not_mind_the_order(problem: Problem, seed: int, facets: bool) -> None:
    rng, solid = np.random.default_rng(seed), problem.solid
    points, faces = rng.permutation(len(solid.points)), rng.permutation(len(solid.faces))
    place, where = np.argsort(points), np.argsort(faces)
    groups = {name: where[members] for name, members in solid.groups.items()}
    body = Solid(solid.points[points], [place[solid.faces[f]] for f in faces], groups, solid.curved)
    other = problem.per_node(lambda values: values[points], body).per_face(lambda values: values[faces], body)
    rounding = max(scales_of(problem).rounding, scales_of(other).rounding)
    assert_alike(sharpened(other, facets), sharpened(problem, facets), rounding, RECOVERED)


@bounded
@given(problem=problems(), facets=st.booleans())
def test_the_sharpened_table_does_not_mind_threads(problem: Problem, facets: bool) -> None:
    one, two = (
        sharpened_table(problem.surface, problem.flow, facets_are_geometry=facets, origin=np.zeros(3), threads=n).values
        for n in (1, 3)
    )
    np.testing.assert_array_equal(two, one)


@bounded
@given(seed=seeds, cells=st.integers(2, 4))
def test_a_port_of_one_row_of_faces_tells_no_slope_across(seed: int, cells: int) -> None:
    # a mesh one cell deep: neighbours lie on a line, and off it by rounding alone, which must not count
    rng = np.random.default_rng(seed)
    turn, shift = rigid_motion(rng)
    body = mapped(box((0, 0, 0), (1, 1.3, 0.1), (cells, cells, 1), quads=True), lambda x: x @ turn.T + shift)
    velocity = rng.standard_normal((len(body.faces), 3))
    surface = body.surface()
    flow = lay_flow(surface, density=1.0, velocity=velocity, at="faces")
    origin = np.asarray(shift)
    plain = integrate_flow(surface, flow, origin=origin)
    sharp = sharpened_table(surface, flow, facets_are_geometry=True, origin=origin)
    assert_allclose(sharp.column("mass_flow"), plain.column("mass_flow"), rtol=0, atol=1e-12)
    # slopes along the row change the flux of kinetic energy, but by no more than their size
    most = np.abs(velocity).max() ** 3 * 3**1.5 * plain.column("area")
    assert (np.abs(sharp.column("kinetic_energy_flux")) < 8 * most).all()


# ---- doubt ------------------------------------------------------------------------------------


def quarter_turn(seed: int) -> np.ndarray:
    """A rotation that takes axes to axes, so that half widths of components stay those of components."""
    rng = np.random.default_rng(seed)
    turn = np.eye(3)[rng.permutation(3)] * rng.choice([-1.0, 1.0], 3)
    return turn if np.linalg.det(turn) > 0 else -turn


def dimension_of(path: tuple[str, ...], unit: str) -> tuple[float, float, float]:
    if path[0] == "carried":
        return NONE if path[-1] in ("relative", "mean") else CARRIED[path[1]]
    return {**UNITS, "": NONE, "m": LENGTH, "kg": MASS, "Pa": STRESS, "m/s": SPEED, "m/s^2": ACCELERATION, "K": NONE}[
        unit
    ]


@bounded
@given(
    problem=problems(), seed=seeds, how=st.sampled_from(["turned", "shifted", "in other units"]), facets=st.booleans()
)
def test_the_doubt_of_figures_goes_along(problem: Problem, seed: int, how: str, facets: bool) -> None:
    change = {
        "turned": Change(turn=quarter_turn(seed)),
        "shifted": Change(shift=np.random.default_rng(seed).standard_normal(3)),
        "in other units": Change(units=(2.0**5, 2.0**-4, 2.0**3)),
    }[how]
    one, two = (
        doubt_of(None, told.outcome, facets_are_geometry=facets, threads=1) for told in (problem, problem.told(change))
    )
    done = problem.outcome.balance
    names = [group.name for group in done.setting.groups]
    edgy = {name for name in done.ports if on_the_edge(done, names.index(name))}
    before, after = (
        {path: width for path, width in told.half_widths().items() if not (path[0] == "ports" and path[1] in edgy)}
        for told in (one, two)
    )
    assert before.keys() == after.keys()
    sizes: dict[str, float] = {}
    for spot in one.figures.spots:
        found = np.abs(np.nan_to_num(one.figures[spot.path])).max()
        sizes[spot.unit] = max(sizes.get(spot.unit, 0.0), float(found))
    turn = np.abs(change.turn)
    for path, width in before.items():
        spot = one.figures.spot(path)
        factor = Change(units=change.units)(1.0, "", dimension_of(path, spot.unit))
        wanted = np.asarray(width) * factor
        if spot.vector:
            wanted = turn @ wanted
        least = 1e-9 * sizes[spot.unit] * factor
        assert_allclose(after[path], wanted, rtol=LEFT, atol=least, err_msg=spot.name)
