"""A load as printed by a solver beside ours: what explains the difference is named, and nothing else is."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

import fluxmesh
from fluxmesh.assess.comparison import compare_reported

CASE = Path(__file__).parents[1] / "meshes" / "manifold" / "manifold_coarse.toml"
Slip = Callable[..., tuple[np.ndarray | None, np.ndarray | None]]


@pytest.fixture(scope="module")
def outcome() -> fluxmesh.Outcome:
    case = fluxmesh.read_case(CASE)
    # an anchor off the flange, so that the points that moments may be about lie well apart
    return fluxmesh.run_case(
        case.model_copy(update={"anchor": case.anchor.model_copy(update={"at": (0.2, -0.1, 0.05)})})
    )


def loads(outcome):
    walls = outcome.balance.setting.walls()
    linear, angular = outcome.balance.momentum, outcome.balance.angular
    pressure, viscous = -linear.pressure(walls), -linear.viscous(walls)
    return pressure, viscous, -angular.pressure(walls) - angular.viscous(walls)


SLIPS = {
    "pressure part alone": lambda p, v, m, b: (p, None),
    "viscous part alone": lambda p, v, m, b: (v, None),
    "viscous part with the other sign": lambda p, v, m, b: (p - v, None),
    "other sign": lambda p, v, m, b: (-p - v, None),
    "half of ours": lambda p, v, m, b: ((p + v) / 2, None),
    "twice ours": lambda p, v, m, b: (2 * (p + v), None),
    "a quarter of ours": lambda p, v, m, b: ((p + v) / 4, None),
    "over the density": lambda p, v, m, b: ((p + v) / 880, None),
    "times the density": lambda p, v, m, b: ((p + v) * 880, None),
    "holds the weight": lambda p, v, m, b: (p + v + b.momentum.weight, None),
    "leaves out the weight": lambda p, v, m, b: (p + v - b.momentum.weight, None),
    "absolute pressure": lambda p, v, m, b: (
        p + v + 101325 * b.table.total("area_vector", b.setting.walls()),
        None,
    ),
    "about the origin": lambda p, v, m, b: (None, m + np.cross(b.setting.anchor, p + v)),
    "about the centre of the volume": lambda p, v, m, b: (
        None,
        m - np.cross(b.enclosed.centroid - np.asarray(b.setting.anchor), p + v),
    ),
}


@pytest.mark.parametrize("words", SLIPS)
def test_each_slip_is_named_first(outcome, words: str) -> None:
    force, moment = SLIPS[words](*loads(outcome), outcome.balance)
    # half a per cent of noise, as another quadrature would give
    found = compare_reported(
        outcome.balance,
        force=None if force is None else force * 1.003,
        moment=None if moment is None else moment * 1.003,
        on=None,
        density=880.0,
    )
    assert words in found.explanations[0]


def test_an_agreeing_load_is_not_explained(outcome) -> None:
    pressure, viscous, moment = loads(outcome)
    found = compare_reported(
        outcome.balance, force=1.005 * (pressure + viscous), moment=0.995 * moment, on=None, density=880.0
    )
    assert found.explanations == ()
    assert found.relative == pytest.approx(0.005, rel=0.02)


def test_a_difference_within_the_doubt_is_not_explained(outcome) -> None:
    pressure, viscous, _ = loads(outcome)
    ours = pressure + viscous
    close = compare_reported(outcome.balance, force=-ours, moment=None, on=None, doubt=2.5 * np.abs(ours))
    assert close.explanations == ()


def test_nothing_is_made_up(outcome) -> None:
    pressure, viscous, moment = loads(outcome)
    off = (pressure + viscous) @ np.array([[0.0, 1, 0], [0, 0, 1], [1, 0, 0]]) * 1.37
    assert compare_reported(outcome.balance, force=off, moment=1.9 * moment, on=None, density=880.0).explanations == ()
