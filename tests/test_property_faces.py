"""The same surface otherwise written down: order, orientation, faces and groups cut in smaller ones."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from fluxmesh.integral.table import BASIS
from tests.balance_figures import figures_of
from tests.invariants import Figure, assert_alike, scales_of, table_figures, table_of
from tests.problems import Laid, Problem, backward
from tests.solids import Solid, blocks, prism, quadratic
from tests.strategies import BODIES, STRAIGHT, bounded, placed, problems, seeds, split

Array = NDArray[np.float64]
ROUGH = {"speed_area", "reversed_mass_flow"}
"""Integrands that are no polynomials of the data: a finer mesh has another value of them."""
FIFTH = {"dynamic_pressure_mass_flow"}
"""``rho² V² V·n``, of the fifth degree where density varies, while the rule is exact to the fourth."""
QUOTIENT = {"volume_flow", "normal_momentum", "pressure_volume_flow"}
"""Where a mass flow is given, these are divided by the density, which makes no polynomial where that varies."""


def of_groups(figures: dict[str, Figure], order: NDArray[np.int64]) -> dict[str, Figure]:
    """Figures whose rows are those of groups, in another order."""
    return {
        name: replace(one, value=one.value[order])
        if one.value is not None and (name in BASIS or "group_" in name or "drift_flux" in name)
        else one
        for name, one in figures.items()
    }


# ---- order and orientation --------------------------------------------------------------------


def begun_elsewhere(face: NDArray[np.int64], curved: bool, by: int) -> NDArray[np.int64]:
    """The same face from another of its corners, but a quadratic triangle: its rule is collapsed to the first one."""
    corners = {6: 3, 8: 4, 9: 4}.get(face.size) if curved else None
    if corners == 3:
        return face
    if corners is None:
        return np.roll(face, by)
    return np.concatenate([np.roll(face[:corners], by), np.roll(face[corners : 2 * corners], by), face[2 * corners :]])


@bounded
@given(problem=problems(), seed=seeds)
def test_no_order_matters(problem: Problem, seed: int) -> None:
    # of points, of faces, of the corners of each from the first on, and of groups
    rng, solid = np.random.default_rng(seed), problem.solid
    points, faces = rng.permutation(len(solid.points)), rng.permutation(len(solid.faces))
    place, where = np.argsort(points), np.argsort(faces)
    names = list(solid.groups)
    order = rng.permutation(len(names))
    rows = [begun_elsewhere(place[solid.faces[f]], solid.curved, int(rng.integers(9))) for f in faces]
    groups = {names[k]: rng.permutation(where[solid.groups[names[k]]]) for k in order}
    other = problem.per_node(lambda values: values[points], Solid(solid.points[points], rows, groups, solid.curved))
    other = other.per_face(lambda values: values[faces], other.solid)
    scales, others = scales_of(problem), scales_of(other)
    before, after = figures_of(problem, scales), figures_of(other, others)
    assert_alike(after, of_groups(before, order), max(scales.rounding, others.rounding))


@bounded
@given(problem=problems(), seed=seeds, share=st.sampled_from([0.2, 0.5, 1.0]))
def test_faces_given_the_wrong_way_are_turned_and_said(problem: Problem, seed: int, share: float) -> None:
    solid = problem.solid
    wrong = np.random.default_rng(seed).random(len(solid.faces)) < share
    rows = [backward(face, solid.curved) if turn else face for face, turn in zip(solid.faces, wrong)]
    other = replace(problem, solid=replace(solid, faces=rows))
    scales = scales_of(problem)
    assert_alike(figures_of(other, scales), figures_of(problem, scales), scales.rounding)
    if wrong.any():
        assert any("turned" in note for note in other.surface.notes)


# ---- faces cut in smaller ones ----------------------------------------------------------------


def cut_problem(
    problem: Problem, pieces: list[list[NDArray[np.int64]]], extra: list[tuple[NDArray[np.int64], ...]]
) -> Problem:
    """The problem with every face in pieces, on further points: each the mean of some of the old ones.

    Values on nodes are means too; those on faces stay, but for the mass flow, which pieces share by their area.
    """
    solid = problem.solid
    means = [np.asarray(one) for one in extra]
    counts = np.array([len(part) for part in pieces])
    parent = np.repeat(np.arange(len(pieces)), counts)
    starts = np.concatenate([[0], np.cumsum(counts)])
    rows = [face for part in pieces for face in part]
    groups = {
        name: np.concatenate([np.arange(starts[f], starts[f + 1]) for f in faces])
        for name, faces in solid.groups.items()
    }

    def averaged(values: Array) -> Array:
        return np.concatenate([values, [values[one].mean(axis=0) for one in means]]) if means else values

    fine = Solid(averaged(solid.points), rows, groups, solid.curved)
    other = problem.per_node(averaged, fine).per_face(lambda values: values[parent], fine)
    if "mass flux" in problem.fields:
        area = np.array([flat_area(fine.points[face]) for face in rows])
        share = area / np.bincount(parent, area)[parent]
        other = other.with_field("mass flux", other.fields["mass flux"].values * share)
    return other


def flat_area(ring: Array) -> float:
    centre = ring.mean(axis=0)
    return float(np.linalg.norm(np.cross(ring - centre, np.roll(ring, -1, axis=0) - centre), axis=1).sum() / 2)


def without(problem: Problem, *, rough: bool) -> list[str]:
    """Columns that a finer mesh keeps."""
    left = set(BASIS)
    if rough:
        varies = "density" in problem.fields
        left -= ROUGH | (FIFTH if varies else set())
        left -= QUOTIENT if varies and "mass flux" in problem.fields else set()
    return sorted(left)


def linear(problem: Problem) -> Problem:
    """The problem without a product of two fields: a kinematic pressure times a density that varies."""
    dropped = {"density"} if problem.kind == "kinematic" else set()
    return replace(problem, fields={name: one for name, one in problem.fields.items() if name not in dropped})


def assert_table_kept(problem: Problem, other: Problem, columns: list[str]) -> None:
    scales, others = scales_of(problem), scales_of(other)
    before, after = table_figures(table_of(problem), scales), table_figures(table_of(other), others)
    assert_alike(after, {name: before[name] for name in columns}, max(scales.rounding, others.rounding))


@bounded
@given(problem=problems({name: BODIES[name] for name in ("ball", "globe", "crate", "torus", "two shells")}))
def test_a_polygon_is_the_fan_about_the_mean_of_its_corners(problem: Problem) -> None:
    # twisted or not, and whatever the data: the same triangles, the same points of the rule, so every column
    count, extra, pieces = len(problem.solid.points), [], []
    for face in problem.solid.faces:
        if face.size == 3:
            pieces.append([face])
            continue
        pieces.append([np.array([a, b, count + len(extra)]) for a, b in zip(face, np.roll(face, -1))])
        extra.append(tuple(face))
    assert_table_kept(problem, cut_problem(problem, pieces, extra), without(problem, rough=False))


@bounded
@given(problem=problems({name: BODIES[name] for name in ("ball", "two shells")}), ways=st.sampled_from([3, 4]))
def test_a_triangle_in_three_or_four_keeps_what_is_a_polynomial(problem: Problem, ways: int) -> None:
    problem = linear(problem)
    count, extra, pieces = len(problem.solid.points), [], []
    mids: dict[tuple[int, int], int] = {}

    def middle(*corners: int) -> int:
        key = (min(corners), max(corners)) if len(corners) == 2 else (len(extra), -1)
        if key not in mids:
            mids[key] = count + len(extra)
            extra.append(corners)
        return mids[key]

    for face in problem.solid.faces:
        if face.size > 3:
            continue
        a, b, c = face.tolist()
        if ways == 3:
            m = middle(a, b, c)
            pieces.append([np.array(row) for row in ([a, b, m], [b, c, m], [c, a, m])])
        else:
            d, e, f = middle(a, b), middle(b, c), middle(c, a)
            pieces.append([np.array(row) for row in ([a, d, f], [d, b, e], [f, e, c], [d, e, f])])
    if len(pieces) < len(problem.solid.faces):
        return  # a quad beside the triangles would be left with hanging points
    assert_table_kept(problem, cut_problem(problem, pieces, extra), without(problem, rough=True))


@bounded
@given(seed=seeds, flat=st.booleans(), problem=problems({"ball": STRAIGHT["ball"]}))
def test_planar_faces_cut_in_triangles_keep_linear_data(seed: int, flat: bool, problem: Problem) -> None:
    # quads of a box, and polygons of a prism, convex so that all diagonals lie inside
    rng = np.random.default_rng(seed)
    if flat:
        body = blocks(np.ones(tuple(rng.integers(1, 4, 3)), np.bool_), (0, 0, 0), (1, 1.4, 0.8), quads=True)
    else:
        angle = np.sort(rng.uniform(0, 2 * np.pi, 7)) + 1e-3 * np.arange(7)
        body = prism(np.column_stack([np.cos(angle), np.sin(angle)]), -0.5, 0.6, 2)
    solid = split(placed(body, rng), rng, scattered=True, groups=3)
    problem = linear_on(linear(problem), solid, rng)
    pieces = [[np.array([f[0], f[k], f[k + 1]]) for k in range(1, f.size - 1)] for f in solid.faces]
    assert_table_kept(problem, cut_problem(problem, pieces, []), without(problem, rough=True))


@bounded
@given(seed=seeds, problem=problems({"ball": STRAIGHT["ball"]}))
def test_quadratic_triangles_with_straight_edges_are_triangles(seed: int, problem: Problem) -> None:
    problem, solid = linear(problem), problem.solid
    fine = quadratic(solid)
    edges = [tuple(face[[k, (k + 1) % 3]]) for face in fine.faces for k in range(3)]
    mids = {int(face[3 + k]): edges[3 * f + k] for f, face in enumerate(fine.faces) for k in range(3)}
    means = [mids[number] for number in range(len(solid.points), len(fine.points))]
    other = problem.per_node(
        lambda values: np.concatenate([values, [values[list(m)].mean(axis=0) for m in means]]), fine
    )
    assert_table_kept(problem, other, without(problem, rough=True))


def linear_on(problem: Problem, solid: Solid, rng: np.random.Generator) -> Problem:
    """The problem on another body, its fields on nodes and linear in space, but for a mass flow of faces."""
    found = {}
    for name, one in problem.fields.items():
        width = one.values.shape[1:]
        slope, base = 0.3 * rng.standard_normal((3, *width)), one.values.mean(axis=0)
        spread = 0.05 if name in ("density", "temperature") else 1.0
        found[name] = Laid("nodes", base + spread * np.tensordot(solid.points, slope, axes=1))
    if "mass flux" in found:
        found["mass flux"] = Laid("faces", rng.standard_normal(len(solid.faces)))
    return replace(problem, solid=solid, fields=found, supplied={})


# ---- groups cut in smaller ones ---------------------------------------------------------------


@bounded
@given(problem=problems(), seed=seeds)
def test_two_wall_groups_weigh_the_same_as_one(problem: Problem, seed: int) -> None:
    groups = dict(problem.solid.groups)
    shell = groups.pop("shell", np.empty(0, np.int64))
    if shell.size < 2 or problem.supplied:
        return
    rng = np.random.default_rng(seed)
    one = rng.permutation(shell)
    part = int(rng.integers(1, one.size))
    parts = {**groups, "shell": one[:part], "jacket": one[part:]}
    other = replace(problem, solid=replace(problem.solid, groups=parts), roles={**problem.roles, "jacket": "wall"})
    scales = scales_of(problem)
    before, after = figures_of(problem, scales), figures_of(other, scales)
    # what goes in and out of one wall counts net
    rows = ("group", "size", "inflow", "outflow", "drift_flux")
    whole = {n: f for n, f in before.items() if n not in BASIS and not any(word in n for word in rows)}
    assert_alike(after, whole, scales.rounding)
    # and the rows of the table add up
    for name in BASIS:
        rows = dict(zip(parts, after[name].value))
        added = np.array([rows["shell"] + rows["jacket"] if n == "shell" else rows[n] for n in problem.solid.groups])
        assert_alike({name: replace(after[name], value=added)}, {name: before[name]}, scales.rounding)
