"""The compiled kernel on random closed surfaces: equal to its plain twin, and to itself however the work is shared."""

from __future__ import annotations

import json
from typing import Any

import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from fluxmesh.field.flow import face_arrays_of, gauge_terms
from fluxmesh.integral.kernel import integrate
from fluxmesh.integral.layout import FlowArrays, make_runs
from fluxmesh.integral.plain import integrate_plainly
from fluxmesh.integral.table import BASIS
from fluxmesh.report.export_faces import face_tables
from tests.invariants import EPS, ROUND, assert_alike, scales_of, table_figures
from tests.problems import Problem
from tests.strategies import bounded, problems

RUNS = 8
"""Multiple of machine epsilon, of the terms: sums are correctly rounded but where, rarely, the low part rounds."""


def arguments(problem: Problem, length: int = 2048) -> dict[str, Any]:
    """What the kernel takes, with runs of so many faces at most."""
    surface, flow, origin = problem.surface, problem.flow, np.asarray(problem.origin)
    return {
        "mesh": face_arrays_of(surface),
        "flow": FlowArrays(
            velocity=flow.velocity.arrays(),
            traction=flow.traction.arrays(),
            pressure=flow.pressure.arrays(),
            density=flow.density.arrays(),
            mass=flow.mass_flux.arrays(),
            terms=gauge_terms(flow, origin),
            sample_start=flow.sample_start,
        ),
        "runs": make_runs(surface.group_of_face, surface.kinds, length=length),
        "origin": origin,
        "still_groups": np.zeros(len(surface.groups), np.bool_),
    }


@bounded
@given(problem=problems())
def test_the_kernel_equals_its_plain_twin(problem: Problem) -> None:
    scales = scales_of(problem)
    found, plain = integrate(**arguments(problem)), integrate_plainly(**arguments(problem))
    # no coordinate was moved, so that only the operations round
    assert_alike(table_figures(found, scales), table_figures(plain, scales), EPS)


@bounded
@given(problem=problems(), length=st.integers(1, 3))
def test_the_number_of_threads_changes_no_bit(problem: Problem, length: int) -> None:
    # runs so short that there are several parts for the threads to take
    one, *others = (integrate(**arguments(problem, length), threads=threads) for threads in (1, 2, 5))
    for other in others:
        assert_array_equal(other.values, one.values)
    told = [json.dumps(problem.balanced(threads).data()) for threads in (1, 3)]
    assert told[0] == told[1]


@bounded
@given(problem=problems(), length=st.integers(1, 50))
def test_the_length_of_runs_changes_at_most_the_last_bit(problem: Problem, length: int) -> None:
    scales = scales_of(problem)
    whole, cut = integrate(**arguments(problem)), integrate(**arguments(problem, length))
    assert_alike(table_figures(cut, scales), table_figures(whole, scales), EPS, multiple=RUNS)


@bounded
@given(problem=problems())
def test_faces_add_up_to_their_groups(problem: Problem) -> None:
    faces, scales = face_tables(problem.surface, problem.flow, threads=1), scales_of(problem)
    done, owner = problem.outcome.balance.table, problem.surface.group_of_face
    for name in BASIS:
        rows = faces.column(name)
        added = np.zeros_like(done.column(name))
        np.add.at(added, owner, rows)
        limit = ROUND * EPS * scales.column(name) * np.sqrt(owner.size)  # plain sums of so many rows
        assert_allclose(added, done.column(name), rtol=0, atol=limit, err_msg=name)
