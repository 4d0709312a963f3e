"""The verdict with the doubt of residuals: closes, closes within its doubt, does not close, cannot be judged."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

import fluxmesh
from fluxmesh.assess.verdict import State, verdict_of
from fluxmesh.job.doubted import with_budget

CASE = Path(__file__).parents[1] / "meshes" / "manifold" / "manifold_coarse.toml"


@pytest.fixture(scope="module")
def outcome() -> fluxmesh.Outcome:
    return fluxmesh.run_case(fluxmesh.read_case(CASE))


@pytest.mark.parametrize(
    ("tolerance", "times", "state", "closes"),
    [
        (1e-2, 0.1, State.CLOSES, True),
        (1e-2, 3.0, State.CLOSES, True),
        (1e-3, 0.1, State.OPEN, False),
        (1e-3, 1.5, State.WITHIN_DOUBT, True),
        (1e-3, 9.0, State.UNJUDGED, None),
    ],
)
def test_states(outcome, tolerance: float, times: float, state: State, closes: bool | None) -> None:
    balance = outcome.balance
    residual = float(np.linalg.norm(balance.momentum.residual()))
    verdict = verdict_of(balance, tolerance=tolerance, doubts={"momentum": times * residual})
    law = next(law for law in verdict.laws if law.law == "Linear momentum")
    assert law.state is state
    assert law.doubt == pytest.approx(times * law.relative)
    assert verdict.state is state
    assert verdict.closes is closes


def test_without_doubt_only_the_tolerance_counts(outcome) -> None:
    assert verdict_of(outcome.balance, tolerance=1e-3).closes is False
    assert all(law.doubt is None for law in verdict_of(outcome.balance).laws)


def test_an_open_law_outweighs_one_within_its_doubt(outcome) -> None:
    verdict = verdict_of(outcome.balance, tolerance=1e-5, doubts={"mass": 1.0})
    assert verdict.state is State.OPEN


def test_quadratic_patches_are_reported_where_asked(outcome) -> None:
    case = fluxmesh.read_case(CASE)
    plain = with_budget(case, outcome)
    asked = case.model_copy(update={"flow": case.flow.model_copy(update={"reconstruction": "quadratic"})})
    sharp = with_budget(asked, outcome)
    assert plain.data()["sharpened"]["mass"] == pytest.approx(
        {key: value for key, value in sharp.data()["mass"].items() if not key.endswith("_uncertainty")}
    )
    assert abs(sharp.data()["mass"]["residual"]) < abs(plain.data()["mass"]["residual"]) / 5
    # the doubt follows the choice
    assert sharp.data()["mass"]["residual_uncertainty"] < plain.data()["mass"]["residual_uncertainty"]


def test_a_sign_of_traction_is_no_matter_of_doubt(fluxmesh: Callable, tmp_path: Path) -> None:
    text = CASE.read_text("utf-8").replace('acts_on = "wall"', 'acts_on = "fluid"')
    text = text.replace('file = "manifold_coarse.vtp"', f'file = "{CASE.parent / "manifold_coarse.vtp"}"')
    (tmp_path / "case.toml").write_text(text, "utf-8")
    ran = fluxmesh("balance", tmp_path / "case.toml", "--out", tmp_path / "out", "--no-pictures")
    assert ran.code == 1, ran
    ran = fluxmesh("causes", tmp_path / "case.toml", "--json", tmp_path / "causes.json")
    assert ran.code == 1
    first = json.loads((tmp_path / "causes.json").read_text("utf-8"))["causes"][0]
    assert first["id"] == "traction-sign"
    assert first["fix"] == 'flow.traction.acts_on = "wall"'
    assert first["residual_after"] < first["residual_before"] / 10
