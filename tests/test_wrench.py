"""A force with its moment: moved, added, and brought to its central axis."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from fluxmesh.balance.wrench import Wrench, central_axis, moved
from tests.verification import Verify

vectors = st.tuples(*[st.floats(-10, 10)] * 3).map(np.array)


def test_central_axis_of_a_wrench(verify: Verify) -> None:
    # Poinsot 1803 (from memory): F = (3, -2, 6), M = (4, 5, -1): F·M = -4, |F| = 7, the axis passes F × M / 49
    axis = central_axis(Wrench(np.array([3.0, -2, 6]), np.array([4.0, 5, -1]), np.zeros(3)))
    assert_allclose(axis.point, [-0.57142857143, 0.55102040816, 0.46938775510], rtol=1e-10)
    assert_allclose(axis.direction, [3 / 7, -2 / 7, 6 / 7], rtol=1e-15)
    assert_allclose(axis.couple, -4 / 7, rtol=1e-15)
    couple = central_axis(Wrench(np.zeros(3), np.array([0.0, -2, 0]), np.ones(3)))
    assert_allclose(couple.direction, [0, -1, 0], rtol=0, atol=0)
    assert couple.couple == 2.0
    verify(
        what="Central axis of F = (3, -2, 6), M = (4, 5, -1): point and couple",
        source="Poinsot 1803: F × M / F² and F·M / F",
        memory=True,
        expected=(-0.57142857143, 0.55102040816, 0.46938775510, -0.57142857143),
        got=(*axis.point, axis.couple),
        tolerance=1e-10,
        why="figures of 11 digits",
        kind="wrench",
    )


@given(force=vectors, moment=vectors, at=vectors, to=vectors)
def test_invariants_of_a_moved_wrench(force: np.ndarray, moment: np.ndarray, at: np.ndarray, to: np.ndarray) -> None:
    # |F| and F·M do not know the point (Poinsot 1803, from memory); there and back again is the same wrench
    there = moved(Wrench(force, moment, at), to)
    assert_allclose(there.force, force, rtol=0, atol=0)
    assert_allclose(there.force @ there.moment, force @ moment, rtol=0, atol=1e-11)
    assert_allclose(moved(there, at).moment, moment, rtol=0, atol=1e-12)
    # M' = M + (at - to) × F: a force through the new point has no moment about it
    assert_allclose(moved(Wrench(force, np.zeros(3), to), to).moment, 0, rtol=0, atol=0)
    assert_allclose(there.moment, moment + np.cross(at, force) - np.cross(to, force), rtol=0, atol=1e-11)


@given(force=vectors, at=vectors, to=vectors)
def test_opposite_forces_make_a_couple(force: np.ndarray, at: np.ndarray, to: np.ndarray) -> None:
    pair = Wrench(force, np.zeros(3), at) + -Wrench(force, np.zeros(3), to)
    assert_allclose(pair.force, 0, rtol=0, atol=0)
    assert_allclose(pair.moment, np.cross(at - to, force), rtol=0, atol=1e-12)
