"""One flow in every form that exports and designers have it gives loads that agree."""

from __future__ import annotations

import numpy as np
import pytest

from tests.test_shipped_cases import MESHES, script


@pytest.fixture(scope="module")
def rows(tmp_path_factory) -> dict[str, dict]:
    return {row["form"]: row for row in script("forms_table").rows(tmp_path_factory.mktemp("forms"))}


def test_each_form_agrees_within_what_it_reports(rows) -> None:
    # what the export on nodes itself reports: how far its two loads are apart
    own = rows["nodes"]["residual"]
    for form, row in rows.items():
        reported = own if row["residual"] is None else row["residual"]
        assert row["apart"] < reported, form


def test_the_same_values_in_another_file_layout_give_the_same_load(rows) -> None:
    assert rows["multi-block"]["force"] == pytest.approx(rows["nodes"]["force"], rel=1e-12)
    # the skin of the volume is the surface that was exported, up to its single-precision coordinates
    assert rows["skin of a volume"]["force"] == pytest.approx(rows["volume, sampled"]["force"], rel=1e-5)


def test_a_mass_flux_carries_the_same_mass_as_the_velocity(rows) -> None:
    assert rows["mass flux through each face"]["mass"] == pytest.approx(rows["faces"]["mass"], rel=1e-6)


def test_sampling_says_how_far_to_trust_it(rows) -> None:
    assert "100.00% of the quadrature points lie inside" in rows["volume, sampled"]["told"]
    assert "points left out are predicted to" in rows["scattered points"]["told"]


def test_the_table_in_the_readme_is_the_one_computed(rows) -> None:
    text = (MESHES / "README.md").read_text(encoding="utf-8")
    for form, row in rows.items():
        line = next(line for line in text.splitlines() if line.startswith(f"| {form} |"))
        assert f"{row['force']:.5f}" in line
        assert np.isfinite(row["apart"])


@pytest.mark.parametrize("file", ["manifold/manifold_coarse.vtp", "manifold/manifold_fine.vtp", "rotor/rotor.vtp"])
def test_start_and_balance_work_untouched_on_shipped_files_with_all_data(fluxmesh, tmp_path, file: str) -> None:
    ran = fluxmesh("start", MESHES / file, "--to", tmp_path / "new.toml")
    assert ran.code == 0, ran.err
    ran = fluxmesh("balance", tmp_path / "new.toml", "--out", tmp_path / "out", "--no-pictures")
    assert ran.code == 0, ran.err
    assert "VERDICT: closes" in ran.out
