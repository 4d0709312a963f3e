"""`fluxmesh convergence`: the shipped meshes, and what cannot be studied."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import pytest

from fluxmesh.assess.convergence import convergence
from tests.conftest import Ran

MESHES = Path(__file__).parents[1] / "meshes" / "manifold"
CASES = [MESHES / f"manifold_{name}.toml" for name in ("medium", "coarse", "fine")]


@pytest.fixture
def study(fluxmesh: Callable[..., Ran], tmp_path: Path) -> Callable[..., dict]:
    def run(*options: str) -> dict:
        ran = fluxmesh("convergence", *CASES, *options, "--json", tmp_path / "study.json")
        assert ran.code == 0, ran
        assert "Caution: Local codes" in ran.out
        return json.loads((tmp_path / "study.json").read_text("utf-8"))

    return run


def test_the_shipped_meshes_converge_at_the_order_of_their_export(study) -> None:
    data = study()
    assert [mesh["case"] for mesh in data["meshes"]] == ["manifold_fine", "manifold_medium", "manifold_coarse"]
    sizes = [mesh["size"] for mesh in data["meshes"]]
    assert sizes == sorted(sizes)
    for name in ("groups.feed.mass_flow", "groups.gallery.mass_flow", "reaction.force.z", "geometry.volume"):
        figure = data["figures"][name]
        assert figure["order"] == pytest.approx(2, abs=0.3)
        found = convergence(sizes, figure["values"])
        assert (figure["index"], figure["extrapolated"]) == (found.index, found.extrapolated)


def test_the_extrapolated_flow_is_nearer_to_the_computed_one(study) -> None:
    exact = json.loads((MESHES / "reference.json").read_text("utf-8"))["meshes"]["fine"]["ports"]
    data = study("--figure", "groups.*.mass_flow")
    for name, port in exact.items():
        figure = data["figures"][f"groups.{name}.mass_flow"]
        plain = abs(figure["values"][0] - port["mass_flow"])
        assert abs(figure["extrapolated"] - port["mass_flow"]) < plain / 3
        assert plain < figure["uncertainty"]


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (CASES[:2], "2 cases"),
        ([*CASES, "--figure", "reaction.forse"], "reaction.forse"),
        ([*CASES, "--figure", "title"], "title"),
        ([CASES[0], CASES[0], CASES[2]], "size"),
    ],
)
def test_what_cannot_be_studied(fluxmesh, arguments, said) -> None:
    ran = fluxmesh("convergence", *arguments)
    assert ran.code == 2
    assert said in ran.err
    assert ran.err.count("\n") == 1
