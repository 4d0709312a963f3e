"""What must not change, or change as it must, when the same problem is told in another way."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from numpy.typing import NDArray

from fluxmesh import Hardware, Outcome, balance_of, lay_flow
from fluxmesh.balance.wrench import Wrench
from tests.solids import Solid, any_polyhedron, blocks, box, in_triangles, mapped, prism, rigid_motion, turned

Array = NDArray[np.float64]
ROLES = {"feed": "inlet", "shell": "wall", "vent": "open"}
seeds = st.integers(0, 2**32 - 1)
quick = settings(max_examples=25, deadline=None)


@dataclass(frozen=True)
class Problem:
    """A body in three groups with arbitrary data on its points."""

    solid: Solid
    velocity: Array
    pressure: Array
    traction: Array
    density: float
    gravity: Array
    anchor: Array
    hardware: Hardware

    def outcome(self) -> Outcome:
        surface = self.solid.surface(ROLES)
        flow = lay_flow(
            surface,
            density=self.density,
            velocity=self.velocity,
            pressure=self.pressure,
            traction=self.traction,
            gravity=self.gravity,
        )
        return balance_of(surface, flow, anchor=self.anchor, hardware=self.hardware)


def any_problem(seed: int) -> Problem:
    rng = np.random.default_rng(seed)
    solid = any_polyhedron(seed)
    owner = rng.permutation(np.arange(len(solid.faces)) % 3)
    count = len(solid.points)
    return Problem(
        replace(solid, groups={name: np.flatnonzero(owner == k) for k, name in enumerate(ROLES)}),
        velocity=rng.standard_normal((count, 3)),
        pressure=rng.standard_normal(count),
        traction=0.3 * rng.standard_normal((count, 3)),
        density=float(rng.uniform(0.5, 2)),
        gravity=rng.standard_normal(3),
        anchor=rng.standard_normal(3),
        hardware=Hardware(float(rng.uniform(0.5, 2)), tuple(rng.standard_normal(3))),
    )


@dataclass(frozen=True)
class Figures:
    """Numbers of an outcome by how they change: scalars, points, forces (n, 3) and moments (n, 3)."""

    volume: float
    mass: Array
    centroid: Array
    forces: Array
    moments: Array
    size: float


def figures(outcome: Outcome) -> Figures:
    done = outcome.balance
    wrenches: list[Wrench] = [done.load.from_walls, done.load.from_balance, done.reaction.wrench]
    forces = [w.force for w in wrenches] + [done.momentum.residual(), done.fluid.weight]
    moments = [w.moment for w in wrenches] + [done.angular.residual(), done.angular.weight]
    for rows, ledger in ((forces, done.momentum), (moments, done.angular)):
        rows += [*ledger.group_flux, *ledger.group_pressure, *ledger.group_viscous]
    mass = np.array([done.mass.residual, done.mass.inflow, done.mass.outflow, *done.table.column("mass_flow")])
    size = done.momentum.size() + done.angular.size() + done.mass.inflow + done.enclosed.volume
    return Figures(done.enclosed.volume, mass, done.enclosed.centroid, np.array(forces), np.array(moments), size)


def assert_figures(found: Figures, expected: Figures, tolerance: float = 1e-12) -> None:
    # a few hundred faces and operations on numbers of the size of the entries, at 1.1e-16 each
    limit = tolerance * max(found.size, expected.size)
    assert_allclose(found.volume, expected.volume, rtol=tolerance)
    for name in ("mass", "centroid", "forces", "moments"):
        assert_allclose(getattr(found, name), getattr(expected, name), rtol=0, atol=limit, err_msg=name)


# ---- the same thing elsewhere, or otherwise written -----------------------------------------


@quick
@given(seed=seeds)
def test_a_rigid_motion_moves_everything_along(seed: int) -> None:
    one = any_problem(seed)
    turn, shift = rigid_motion(np.random.default_rng(seed + 1), 5.0)
    two = replace(
        one,
        solid=mapped(one.solid, lambda x: x @ turn.T + shift),
        velocity=one.velocity @ turn.T,
        traction=one.traction @ turn.T,
        gravity=turn @ one.gravity,
        anchor=turn @ one.anchor + shift,
        hardware=Hardware(one.hardware.mass, tuple(turn @ np.array(one.hardware.centre) + shift)),
    )
    before = figures(one.outcome())
    expected = replace(
        before,
        centroid=turn @ before.centroid + shift,
        forces=before.forces @ turn.T,
        moments=before.moments @ turn.T,
    )
    assert_figures(figures(two.outcome()), expected)


@quick
@given(seed=seeds)
def test_a_mirror_turns_moments_the_other_way(seed: int) -> None:
    one = any_problem(seed)
    flip = np.array([-1.0, 1.0, 1.0])
    two = replace(
        one,
        solid=turned(mapped(one.solid, lambda x: x * flip)),
        velocity=one.velocity * flip,
        traction=one.traction * flip,
        gravity=one.gravity * flip,
        anchor=one.anchor * flip,
        hardware=Hardware(one.hardware.mass, tuple(np.array(one.hardware.centre) * flip)),
    )
    before = figures(one.outcome())
    expected = replace(
        before, centroid=before.centroid * flip, forces=before.forces * flip, moments=before.moments * -flip
    )
    assert_figures(figures(two.outcome()), expected)


@quick
@given(seed=seeds)
def test_the_order_of_points_and_faces_does_not_matter(seed: int) -> None:
    one = any_problem(seed)
    rng = np.random.default_rng(seed + 1)
    points, faces = rng.permutation(len(one.solid.points)), rng.permutation(len(one.solid.faces))
    place = np.argsort(points)
    solid = Solid(
        one.solid.points[points],
        # each face may begin at another corner, too
        [np.roll(place[one.solid.faces[f]], rng.integers(9)) for f in faces],
        {name: np.flatnonzero(np.isin(faces, members)) for name, members in one.solid.groups.items()},
    )
    two = replace(
        one, solid=solid, velocity=one.velocity[points], pressure=one.pressure[points], traction=one.traction[points]
    )
    assert_figures(figures(two.outcome()), figures(one.outcome()), 1e-13)


@quick
@given(seed=seeds, share=st.sampled_from([0.3, 1.0]))
def test_faces_given_the_wrong_way_are_turned_and_said(seed: int, share: float) -> None:
    one = any_problem(seed)
    rng = np.random.default_rng(seed + 1)
    which = rng.random(len(one.solid.faces)) < share
    two = replace(one, solid=turned(one.solid, which)).outcome()
    assert_figures(figures(two), figures(one.outcome()), 1e-13)
    if which.any():
        assert any("turned" in note for note in two.surface.notes)


@quick
@given(seed=seeds)
def test_two_wall_groups_weigh_the_same_as_one(seed: int) -> None:
    one = any_problem(seed)
    members = one.solid.groups["shell"]
    parts = {**one.solid.groups, "shell": members[::2], "lid": members[1::2]}
    if members.size < 2:
        return
    roles = {**ROLES, "lid": "wall"}
    surface = replace(one.solid, groups=parts).surface(roles)
    flow = lay_flow(
        surface,
        density=one.density,
        velocity=one.velocity,
        pressure=one.pressure,
        traction=one.traction,
        gravity=one.gravity,
    )
    two = balance_of(surface, flow, anchor=one.anchor, hardware=one.hardware).balance
    before = one.outcome().balance
    for name in ("from_walls", "from_balance"):
        found, expected = getattr(two.load, name), getattr(before.load, name)
        assert_allclose(found.force, expected.force, rtol=0, atol=1e-13 * before.momentum.size())
        assert_allclose(found.moment, expected.moment, rtol=0, atol=1e-13 * before.angular.size())


@pytest.mark.parametrize(
    "solid",
    [
        box((0, 0, 0), (1, 2, 1.5), 2, quads=True),
        prism(np.array([[0, 0], [3, 0], [4, 2], [2, 3.5], [-0.5, 2.0]]), -1, 1, 2),
    ],
    ids=["box", "pentagon"],
)
def test_cutting_planar_faces_changes_nothing_for_linear_data(solid: Solid) -> None:
    rng = np.random.default_rng(8)
    turn, shift = rigid_motion(rng)
    solid = mapped(solid, lambda x: x @ turn.T + shift)
    owner = np.arange(len(solid.faces)) % 3
    solid = replace(solid, groups={name: np.flatnonzero(owner == k) for k, name in enumerate(ROLES)})
    slope, flat = rng.standard_normal((7, 3)), rng.standard_normal(7)
    fields = solid.points @ slope.T + flat
    one = Problem(
        solid,
        fields[:, :3],
        fields[:, 3],
        fields[:, 4:],
        1.3,
        np.array([0.1, 0.2, -9]),
        shift,
        Hardware(2.0, (0, 0, 1)),
    )
    two = replace(one, solid=in_triangles(solid))
    before, after = figures(one.outcome()), figures(two.outcome())
    # what enters and what leaves through one open group is told apart point by point, so only the net is exact
    net = [0, 3, 4, 5]
    assert_figures(replace(after, mass=after.mass[net]), replace(before, mass=before.mass[net]), 1e-13)


# ---- units ----------------------------------------------------------------------------------


@quick
@given(seed=seeds, length=st.floats(1e-3, 1e3), speed=st.floats(1e-2, 1e2), density=st.floats(1e-2, 1e3))
def test_numbers_follow_their_units(seed: int, length: float, speed: float, density: float) -> None:
    # another set of consistent units: stress goes as density × speed², gravity as speed² / length
    one = any_problem(seed)
    stress = density * speed**2
    two = replace(
        one,
        solid=mapped(one.solid, lambda x: length * x),
        velocity=speed * one.velocity,
        pressure=stress * one.pressure,
        traction=stress * one.traction,
        density=density * one.density,
        gravity=speed**2 / length * one.gravity,
        anchor=length * one.anchor,
        hardware=Hardware(density * length**3 * one.hardware.mass, tuple(length * np.array(one.hardware.centre))),
    )
    before, after = figures(one.outcome()), figures(two.outcome())
    back = replace(
        after,
        volume=after.volume / length**3,
        mass=after.mass / (density * speed * length**2),
        centroid=after.centroid / length,
        forces=after.forces / (stress * length**2),
        moments=after.moments / (stress * length**3),
        size=before.size,
    )
    assert_figures(back, before)


# ---- moments about other points, levels of pressure, moving observers -----------------------


@quick
@given(seed=seeds)
def test_moments_shift_with_the_anchor(seed: int) -> None:
    # M(x1) = M(x0) + (x0 - x1) × F; forces do not know the anchor, nor does the line of action
    one = any_problem(seed)
    step = np.random.default_rng(seed + 1).standard_normal(3) * 3
    two = replace(one, anchor=one.anchor + step)
    before = figures(one.outcome())
    expected = replace(before, moments=before.moments + np.cross(-step, before.forces))
    assert_figures(figures(two.outcome()), expected)
    lines = [problem.outcome().balance.reaction.line_of_action for problem in (one, two)]
    limit = 1e-11 * before.size
    assert_allclose(lines[1].direction, lines[0].direction, rtol=0, atol=1e-10)
    assert_allclose(lines[1].couple, lines[0].couple, rtol=0, atol=limit)
    apart = np.cross(lines[1].point - lines[0].point, lines[0].direction)
    force = np.linalg.norm(before.forces[2])
    assert_allclose(apart * force, 0, rtol=0, atol=limit)
    # the force on that line and the couple along it are the reaction (Poinsot 1803, from memory)
    wrench, line = one.outcome().balance.reaction.wrench, lines[0]
    again = np.cross(line.point - wrench.at, wrench.force) + line.couple * line.direction
    assert_allclose(again, wrench.moment, rtol=0, atol=limit)


@quick
@given(seed=seeds, level=st.floats(-100, 100))
def test_the_level_of_pressure_cancels_over_the_closed_surface(seed: int, level: float) -> None:
    one = any_problem(seed)
    two = replace(one, pressure=one.pressure + level)
    before, after = one.outcome().balance, two.outcome().balance
    area = before.table.total("area")
    limit = 1e-13 * (before.momentum.size() + before.angular.size() + (1 + abs(level)) * area * 5)
    assert_allclose(after.momentum.residual(), before.momentum.residual(), rtol=0, atol=limit)
    assert_allclose(after.angular.residual(), before.angular.residual(), rtol=0, atol=limit)
    # on the walls alone it counts, and both loads see it alike
    walls = before.setting.walls()
    extra = level * before.table.total("area_vector", walls)
    for name in ("from_walls", "from_balance"):
        change = getattr(after.load, name).force - getattr(before.load, name).force
        assert_allclose(change, extra, rtol=0, atol=limit)


@quick
@given(seed=seeds)
def test_a_moving_observer_sees_the_same_mass_balance(seed: int) -> None:
    # a velocity added everywhere carries as much in as out through a closed surface: ∮ n dA = 0
    one = any_problem(seed)
    drift = np.random.default_rng(seed + 1).standard_normal(3) * 10
    before, after = one.outcome().balance, replace(one, velocity=one.velocity + drift).outcome().balance
    limit = 1e-13 * one.density * 20 * before.table.total("area")
    assert_allclose(after.mass.residual, before.mass.residual, rtol=0, atol=limit)
    change = after.table.column("mass_flow") - before.table.column("mass_flow")
    assert_allclose(change, one.density * before.table.column("area_vector") @ drift, rtol=0, atol=limit)


@quick
@given(seed=seeds)
def test_a_uniform_stream_passes_any_body_of_fluid_unchanged(seed: int) -> None:
    one = any_problem(seed)
    stream = np.random.default_rng(seed + 1).standard_normal(3)
    two = replace(
        one,
        velocity=np.tile(stream, (len(one.velocity), 1)),
        pressure=np.full_like(one.pressure, 3.0),
        traction=0 * one.traction,
        gravity=np.zeros(3),
    )
    done = two.outcome().balance
    assert abs(done.mass.residual) < 1e-13 * one.density * 3 * done.table.total("area")
    assert_allclose(done.momentum.residual(), 0, rtol=0, atol=1e-13 * 30 * done.table.total("area"))
    assert_allclose(done.angular.residual(), 0, rtol=0, atol=1e-12 * 30 * done.table.total("area"))


@quick
@given(seed=seeds)
def test_pressure_and_traction_add_up(seed: int) -> None:
    one = any_problem(seed)
    rng = np.random.default_rng(seed + 1)
    still = replace(one, velocity=0 * one.velocity, gravity=np.zeros(3))
    first = replace(still, traction=0 * one.traction)
    second = replace(still, pressure=0 * one.pressure, traction=rng.standard_normal(one.traction.shape))
    both = replace(still, traction=second.traction)
    parts = [figures(problem.outcome()) for problem in (first, second, both)]
    limit = 1e-13 * sum(part.size for part in parts)
    assert_allclose(parts[2].forces, parts[0].forces + parts[1].forces, rtol=0, atol=limit)
    assert_allclose(parts[2].moments, parts[0].moments + parts[1].moments, rtol=0, atol=limit)


# ---- pieces ---------------------------------------------------------------------------------


def _pieces(kind: str, cut: int) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
    part = np.zeros((4, 4, 4), np.bool_)
    if kind == "slabs":
        part[:cut] = True
    else:  # an L-shape and the quarter that it lacks
        part[:cut, :cut, :] = True
    return part, ~part


@quick
@given(seed=seeds, kind=st.sampled_from(["slabs", "corner"]), cut=st.integers(1, 3))
def test_the_residuals_of_two_parts_add_up_to_the_whole(seed: int, kind: str, cut: int) -> None:
    # the cut carries the same data on both sides, out of the one and into the other
    rng = np.random.default_rng(seed)
    turn, shift = rigid_motion(rng)
    waves, phase = rng.uniform(-3, 3, (7, 3)), rng.uniform(0, 6, 7)
    found = []
    one, two = _pieces(kind, cut)
    for filled in (one, two, one | two):
        solid = mapped(blocks(filled, (0, 0, 0), (1, 1.5, 0.8), quads=True), lambda x: x @ turn.T + shift)
        surface = solid.surface()
        fields = np.sin(surface.points @ waves.T + phase)
        flow = lay_flow(surface, density=1.2, velocity=fields[:, :3], pressure=fields[:, 3], gravity=(0.3, -0.4, -9))
        done = balance_of(surface, flow, anchor=(0.2, 0.1, -0.3)).balance
        found.append(
            np.concatenate(
                [
                    [done.enclosed.volume, done.mass.residual, done.fluid.mass],
                    done.momentum.residual(),
                    done.angular.residual(),
                    done.fluid.weight,
                    done.angular.weight,
                    done.load.from_balance.force,
                ]
            )
        )
    assert_allclose(found[0] + found[1], found[2], rtol=0, atol=1e-12)
