"""Another set of units: every figure follows its dimension (Buckingham 1914, Phys. Rev. 4; from memory)."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from tests.balance_figures import assert_told_alike, figures_of
from tests.invariants import EPS, changed, scales_of
from tests.problems import Change, Problem
from tests.strategies import bounded, problems

factors = st.tuples(st.floats(1e-3, 1e3), st.floats(1e-3, 1e3), st.floats(1e-2, 1e2))
doublings = st.tuples(st.integers(-20, 20), st.integers(-20, 20), st.integers(-20, 20))
POWERS = ("factor", "total_pressure", "total_temperature", "mach", "loss of pressure")
"""Figures with a power in them, which the C library does not round in the same way for every exponent."""


@bounded
@given(problem=problems(), units=factors)
def test_every_figure_follows_its_dimension(problem: Problem, units: tuple[float, float, float]) -> None:
    assert_told_alike(problem, Change(units=units))


@bounded
@given(problem=problems(), powers=doublings)
def test_units_that_are_powers_of_two_change_no_bit(problem: Problem, powers: tuple[int, int, int]) -> None:
    # such a factor moves the exponents of numbers and nothing else, so no operation rounds in another way:
    # no figure may differ by anything, unless something in it has a size of its own, or by the last bit of a power
    change = Change(units=(2.0 ** powers[0], 2.0 ** powers[1], 2.0 ** powers[2]))
    other = problem.told(change)
    before, after = figures_of(problem, scales_of(problem)), figures_of(other, scales_of(other))
    for name, one in changed(before, change).items():
        if one.value is None:
            assert after[name].value is None
        elif any(word in name for word in POWERS):
            assert_allclose(after[name].value, one.value, rtol=8 * EPS, err_msg=name)
        else:
            assert_array_equal(after[name].value, np.asarray(one.value), err_msg=name)
