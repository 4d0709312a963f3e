"""`export`: face fields that add up to the ledgers, files that other programs read, names that never run."""

from __future__ import annotations

import csv
import io
import json
import re
from collections.abc import Callable
from dataclasses import replace
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh import balance_of, lay_flow
from fluxmesh.case.read import read_case
from fluxmesh.errors import FluxmeshError, OutputError
from fluxmesh.field.flow import Flow, integrate_flow
from fluxmesh.field.frame import Frame
from fluxmesh.field.pressure import PressureMeaning
from fluxmesh.integral import each_face
from fluxmesh.integral.plain import integrate_plainly
from fluxmesh.job.done import done_case
from fluxmesh.job.export import export_case
from fluxmesh.job.outcome import Outcome
from fluxmesh.report import export_faces
from fluxmesh.report.export import EXPORTED, surface_file, vectors_file, write_export
from fluxmesh.report.export_csv import csv_files, csv_text
from fluxmesh.report.export_faces import face_fields, face_tables
from fluxmesh.report.export_text import one_line, writable
from fluxmesh.report.export_vtp import PolygonData, outlines, vtp_bytes
from fluxmesh.surface.surface import ControlSurface
from tests.conftest import CASE, Block
from tests.solids import odd_body, pipe

ROOT = Path(__file__).resolve().parent.parent
# markup, quotes, a comma, a formula, an entity, a remark, letters that run from right to left
ODD = '=1+1,<b onload="x()">\'f\'&amp;</b>;# "צינור"'

SUMS = {
    "area_m2": "area",
    "area_vector_m2": "area_vector",
    "mass_flow_out_kg_per_s": "mass_flow",
    "volume_flow_out_m3_per_s": "volume_flow",
    "momentum_flux_out_N": "momentum_flux",
    "pressure_force_on_fluid_N": "pressure_force",
    "viscous_force_on_fluid_N": "viscous_force",
}


def require_sums(surface: ControlSurface, fields: dict[str, np.ndarray], groups: dict[str, Any]) -> None:
    for k, (name, entries) in enumerate(groups.items()):
        mine = surface.group_of_face == k
        for array, entry in SUMS.items():
            values = fields[array][mine]
            # a sum of n numbers rounds n times at most, and these are rounded once each
            noise = 4e-16 * values.shape[0] * np.abs(values).sum(axis=0).max()
            assert_allclose(values.sum(axis=0), entries[entry], rtol=0, atol=noise, err_msg=f"{array} of {name}")


def read_vtp(content: bytes, path: Path) -> Any:
    import pyvista

    path.write_bytes(content)
    return pyvista.read(path)


def rows_of(text: str) -> tuple[list[str], list[dict[str, str]]]:
    """Remarks and rows of a CSV file."""
    lines = text.split("\n")
    remarks = [line[2:] for line in lines if line.startswith("# ")]
    body = "\n".join(line for line in lines if not line.startswith("# "))
    return remarks, list(csv.DictReader(io.StringIO(body)))


# ---- face fields


@pytest.mark.parametrize(
    "case",
    [
        "manifold/manifold_coarse.toml",
        "header/header.toml",
        "rotor/rotor.toml",
        "guide_vane/guide_vane.toml",
        "impeller/impeller.toml",
    ],
)
def test_the_faces_of_shipped_cases_add_up_to_their_groups(case: str) -> None:
    done = done_case(read_case(ROOT / "meshes" / case))
    fields = face_fields(done.surface, done.flow, done.balance.setting)
    require_sums(done.surface, fields, done.data()["groups"])


def varied(surface: ControlSurface, at: str, frame: Frame | None = None) -> Flow:
    """A flow that varies over the surface, with a pressure that is absolute and without its head."""
    rng = np.random.default_rng(5)
    count = surface.point_count if at == "nodes" else surface.face_count
    flux = rng.standard_normal(surface.face_count) if at == "faces" else None
    return lay_flow(
        surface,
        density=998.2,
        velocity=rng.standard_normal((count, 3)),
        pressure=1e5 + 1e3 * rng.standard_normal(count),
        traction=rng.standard_normal((count, 3)),
        mass_flux=flux,
        at=at,
        meaning=PressureMeaning("absolute", "removed"),
        ambient=101325.0,
        gravity=(1.0, 2.0, -9.0),
        frame=frame,
    )


@pytest.mark.parametrize("at", ["nodes", "faces"])
@pytest.mark.parametrize("curved", [False, True])
@pytest.mark.parametrize("moving", [False, True])
def test_faces_add_up_whatever_they_are_and_however_they_move(at: str, curved: bool, moving: bool) -> None:
    surface = odd_body(2, centre=(3.0, 0.0, 0.0), curved=curved).surface()
    frame = Frame((1.0, -2.0, 0.5), (0.0, 0.0, 3.0), 20.0, (0.0, 0.6, 0.8), (1.0, 1.0, 0.0)) if moving else None
    flow = varied(surface, at, frame)
    done = balance_of(surface, flow, anchor=(0.3, 0.2, 0.1))
    fields = face_fields(surface, flow, done.balance.setting)
    require_sums(surface, fields, done.data()["groups"])
    assert np.isfinite(np.concatenate([values.ravel() for values in fields.values()])).all()


def test_polygons_and_quads_add_up_too() -> None:
    surface = pipe(0.3, 1.0, around=7, along=2).surface({"wall": "wall"})
    assert surface.offsets is not None
    flow = varied(surface, "nodes")
    done = balance_of(surface, flow)
    require_sums(surface, face_fields(surface, flow, done.balance.setting), done.data()["groups"])


def test_each_face_is_what_the_plain_twin_says(monkeypatch: pytest.MonkeyPatch) -> None:
    surface = odd_body(1).surface()
    flow = varied(surface, "nodes")
    compiled = face_tables(surface, flow)
    # in other pieces it is the same to the last bit
    monkeypatch.setattr(each_face, "_SPAN", 50)
    assert (face_tables(surface, flow, threads=3).values == compiled.values).all()
    # and so it is where each face is a group of its own, as polygons and curved faces are
    monkeypatch.setattr(each_face, "_quick", lambda mesh, flow, faces, groups: np.zeros(faces.size, bool))
    monkeypatch.setattr(each_face, "_CHUNK", 7)
    assert (face_tables(surface, flow).values == compiled.values).all()
    monkeypatch.setattr(each_face, "integrate", integrate_plainly)
    plain = face_tables(surface, flow)
    assert_allclose(compiled.values, plain.values, rtol=1e-12, atol=1e-12 * np.abs(plain.values).max())
    # one face alone, by the way its group goes
    one = integrate_flow(surface, flow, faces=np.array([11]))
    assert_allclose(one.values.sum(axis=0), compiled.values[11], rtol=1e-13, atol=1e-13)


def test_fields_in_pieces_are_the_same_fields(monkeypatch: pytest.MonkeyPatch) -> None:
    surface = odd_body(1).surface()
    flow = varied(surface, "nodes", Frame((1.0, -2.0, 0.5), (0.0, 0.0, 3.0), 20.0))
    setting = balance_of(surface, flow).balance.setting
    whole = face_fields(surface, flow, setting)
    monkeypatch.setattr(export_faces, "_CHUNK", 33)
    pieces = face_fields(surface, flow, setting)
    assert list(pieces) == list(whole)
    for name, values in whole.items():
        assert (pieces[name] == values).all(), name


def test_means_over_a_face_by_hand() -> None:
    surface = pipe(0.3, 1.0, around=6).surface({"wall": "wall"})
    flow = lay_flow(
        surface,
        density=2.0,
        supplied={"wall": {"pressure": 7.0, "traction": (1.0, 2.0, 3.0)}},
        velocity=None,
    )
    flow = replace(flow, ambient=1.0)
    frame = Frame((0.0, 0.0, 0.0), rate=2.0)
    still = balance_of(surface, replace(flow, frame=frame))
    fields = face_fields(surface, replace(flow, frame=frame), still.balance.setting)
    walls = surface.group_of_face == [group.name for group in surface.groups].index("wall")
    assert_allclose(fields["gauge_pressure_Pa"][walls], 7.0, rtol=1e-14)
    assert np.isnan(fields["gauge_pressure_Pa"][~walls]).all()
    assert_allclose(fields["traction_on_fluid_Pa"][walls], [[1.0, 2.0, 3.0]] * walls.sum(), rtol=1e-13)
    assert_allclose(fields["density_kg_per_m3"], 2.0, rtol=1e-14)
    # no velocity is given: none is made up, but nothing flows in the sums
    assert np.isnan(fields["velocity_relative_m_per_s"]).all()
    assert np.isnan(fields["velocity_absolute_m_per_s"]).all()
    assert (fields["mass_flow_out_kg_per_s"] == 0.0).all()
    assert_allclose(np.linalg.norm(fields["normal"], axis=1), 1.0, rtol=1e-14)
    assert_allclose(fields["normal"] * fields["area_m2"][:, None], fields["area_vector_m2"], atol=1e-15)
    # at rest in the inertial frame: the relative velocity is that of the surface, turned
    resting = lay_flow(surface, density=2.0, velocity=(0.0, 0.0, 0.0), frame=frame)
    fields = face_fields(surface, resting, balance_of(surface, resting).balance.setting)
    assert_allclose(fields["velocity_absolute_m_per_s"], 0.0, atol=1e-15)
    assert np.abs(fields["velocity_relative_m_per_s"]).max() > 0.3


SCALARS = """
[energy]
heat = "1 W"
[[carried]]
name = "salt <&>"
array = "S"
unit = "g"
[[carried]]
name = "age"
per = "volume"
"""


def scalar_case(block: Block) -> Path:
    mesh = block.mesh()
    mesh.point_data["T"] = 293.15 + mesh.points[:, 0] + mesh.points[:, 1] ** 2
    mesh.cell_data["S"] = np.where(mesh.cell_data["region"] == 3, np.nan, 30.0 + np.arange(mesh.n_cells))
    block.save(mesh)
    text = CASE.replace("[groups.feed]", 'temperature = { array = "T", unit = "K" }\n[groups.feed]')
    text = text.replace("[flow]", 'heat_capacity = "4184 J/(kg K)"\n[flow]')
    text = text.replace('role = "inlet"', 'role = "inlet"\ncarried = { age = 2.0 }')
    text = text.replace('role = "outlet"', 'role = "outlet"\ncarried = { age = 2.5 }')
    return block.write(text + SCALARS)


def test_carried_scalars_and_enthalpy_add_up(block: Block, tmp_path: Path) -> None:
    import pyvista

    made = export_case(scalar_case(block), out=tmp_path / "out")
    mesh = pyvista.read(made[0])
    done = done_case(read_case(block.case))
    data = done.data()
    group = np.array(mesh.cell_data["group_number"])
    for k, name in enumerate(("feed", "drain")):
        mine = group == k
        for array, entry in (
            ("enthalpy_flow_out_W", data["energy"]["groups"][name]["enthalpy"]),
            ("carried_salt <&>_flow_out", data["carried"]["salt <&>"]["groups"][name]["flux"]),
            ("carried_age_flow_out", data["carried"]["age"]["groups"][name]["flux"]),
        ):
            values = np.array(mesh.cell_data[array])[mine]
            assert_allclose(values.sum(), entry, rtol=1e-13)
    ports = group != 2
    assert np.isfinite(mesh.cell_data["temperature_K"][ports]).all()
    assert np.isnan(mesh.cell_data["temperature_K"][~ports]).all()
    assert_allclose(mesh.cell_data["carried_age_mean"][group == 1], 2.5)
    assert {path.name for path in made} == set(EXPORTED) - {"losses.csv"}


# ---- the surface and the vectors as files


def outcome(block: Block) -> Outcome:
    return done_case(read_case(block.case))


def odd_case(block: Block) -> None:
    name = json.dumps(ODD, ensure_ascii=False)
    block.write(CASE.replace("[groups.feed]", f"[groups.{name}]").replace('title = "Block"', f"title = {name}"))


def test_the_surface_is_read_back_whole(block: Block, tmp_path: Path) -> None:
    odd_case(block)
    done = outcome(block)
    mesh = read_vtp(surface_file(done.surface, done.flow, done.balance, done.data()), tmp_path / "a.vtp")
    assert (mesh.points == done.surface.points).all()
    assert (mesh.regular_faces.ravel() == done.surface.connectivity).all()
    assert (mesh.cell_data["group_number"] == done.surface.group_of_face).all()
    assert [str(name) for name in mesh.field_data["group_names"]] == [ODD, "drain", "shell"]
    assert [str(name) for name in mesh.field_data["group_roles"]] == ["inlet", "outlet", "wall"]
    roles = [str(name) for name in mesh.field_data["role_names"]]
    seen = [roles[number] for number in mesh.cell_data["role_number"]]
    assert seen == [done.surface.groups[k].role.value for k in done.surface.group_of_face]
    assert [str(text) for text in mesh.field_data["assumptions"]] == list(done.assumptions)
    assert len(mesh.field_data["cautions"]) == len(done.data()["cautions"]) > 1
    assert str(mesh.field_data["title"][0]) == ODD
    fields = face_fields(done.surface, done.flow, done.balance.setting)
    for name, values in fields.items():
        assert (np.array(mesh.cell_data[name]) == values)[~np.isnan(values)].all(), name
    require_sums(done.surface, {name: np.array(mesh.cell_data[name]) for name in fields}, done.data()["groups"])


def test_our_own_reader_takes_the_surface_too(block: Block, tmp_path: Path) -> None:
    from fluxmesh.surface.files import read_mesh

    done = outcome(block)
    (tmp_path / "a.vtp").write_bytes(surface_file(done.surface, done.flow, done.balance, done.data()))
    mesh = read_mesh(tmp_path / "a.vtp")
    assert (mesh.points == done.surface.points).all()
    assert (mesh.face_arrays["group_number"] == done.surface.group_of_face).all()


def test_polygons_and_curved_faces_keep_one_cell_a_face(tmp_path: Path) -> None:
    mixed = pipe(0.3, 1.0, around=7, along=2).surface({"wall": "wall"})
    connectivity, ends = outlines(mixed)
    assert (connectivity == mixed.connectivity).all()
    assert (ends == mixed.offsets[1:]).all()
    curved = odd_body(1, curved=True).surface()
    connectivity, ends = outlines(curved)
    assert (np.diff(ends) == 6).all()
    first = curved.connectivity[:6]
    assert connectivity[:6].tolist() == first[[0, 3, 1, 4, 2, 5]].tolist()
    flow = varied(curved, "nodes")
    done = balance_of(curved, flow)
    mesh = read_vtp(surface_file(curved, flow, done.balance, done.data()), tmp_path / "a.vtp")
    assert mesh.n_cells == curved.face_count
    # corners and mid-sides in turn lie on the body: the polygons cover more of it than flat triangles would
    assert mesh.area > 0.97 * done.data()["geometry"]["area"]
    assert "mid-side" in " ".join(map(str, mesh.field_data["meaning"]))


def test_quadratic_quads_leave_out_the_middle() -> None:
    points = np.array([(0, 0), (2, 0), (2, 2), (0, 2), (1, 0), (2, 1), (1, 2), (0, 1), (1, 1)], dtype=float)
    from fluxmesh.surface.surface import Group, Role

    surface = ControlSurface(
        np.column_stack([points, np.zeros(9)]),
        np.concatenate([np.arange(9), [0, 1, 2], np.arange(8)]),
        np.array([0, 9, 12, 20]),
        np.array([3, 0, 2], np.int8),
        np.zeros(3, np.int32),
        (Group("skin", Role.OPEN),),
        closed=False,
    )
    connectivity, ends = outlines(surface)
    assert connectivity[:8].tolist() == [0, 4, 1, 5, 2, 6, 3, 7]
    assert connectivity[8:11].tolist() == [0, 1, 2]
    assert connectivity[11:].tolist() == [0, 4, 1, 5, 2, 6, 3, 7]
    assert ends.tolist() == [8, 11, 19]


def test_the_vectors_name_who_acts_on_whom(block: Block, tmp_path: Path) -> None:
    odd_case(block)
    done = outcome(block)
    points = read_vtp(vectors_file(done.balance, done.data()), tmp_path / "a.vtp")
    assert points.n_verts == points.n_points == points.n_cells
    names = [str(name) for name in points.point_data["name"]]
    who = dict(zip(names, map(str, points.point_data["who_on_whom"])))
    assert who["reaction"] == "anchor on hardware"
    assert who["load of the flow, weight of fluid included"] == "flow on hardware"
    assert who[f"pressure at {ODD}"] == "surroundings on fluid"
    assert set(map(str, points.point_data["kind"])) == {"pressure", "momentum", "weight", "load", "reaction"}
    assert str(points.point_data["group"][names.index(f"momentum at {ODD}")]) == ODD
    reaction = done.balance.reaction
    at = names.index("reaction")
    assert (points.point_data["force_N"][at] == reaction.wrench.force).all()
    assert (points.points[at] == reaction.wrench.at).all()
    assert points.point_data["size_N"][at] == np.linalg.norm(reaction.wrench.force)
    assert (np.ravel(points.field_data["reaction_line_through_m"]) == reaction.line_of_action.point).all()
    assert (np.ravel(points.field_data["reaction_moment_about_anchor_N_m"]) == reaction.wrench.moment).all()
    momentum = points.point_data["force_N"][names.index(f"momentum at {ODD}")]
    assert (momentum == -done.balance.momentum.group_flux[0]).all()
    assert len(points.field_data["assumptions"]) == len(done.assumptions)


def test_a_file_of_nothing_is_still_a_file(tmp_path: Path) -> None:
    empty = PolygonData(np.empty((0, 3)), np.empty(0, np.int64), np.empty(0, np.int64), vertices=True)
    assert read_vtp(vtp_bytes(empty), tmp_path / "a.vtp").n_points == 0


# ---- the ledgers


def test_ledgers_hold_what_the_result_holds_to_the_last_digit(block: Block) -> None:
    odd_case(block)
    data = outcome(block).data()
    files = csv_files(data)
    assert set(files) <= set(EXPORTED)
    shown = f"'{ODD}"
    remarks, groups = rows_of(files["groups.csv"])
    assert [row["group"] for row in groups] == [shown, "drain", "shell"]
    for row, entries in zip(groups, data["groups"].values()):
        assert float(row["area, m^2"]) == entries["area"]
        assert float(row["mass flow out, kg/s"]) == entries["mass_flow"]
        for axis, value in zip("xyz", entries["moment_of_pressure"]):
            assert float(row[f"moment of pressure on fluid {axis}, N m"]) == value
    for name, key, what, unit in (
        ("momentum.csv", "momentum", "force", "N"),
        ("angular_momentum.csv", "angular_momentum", "moment", "N m"),
    ):
        _, rows = rows_of(files[name])
        for entry, word in (
            ("flux", "momentum flux out, all groups"),
            ("weight", "weight of fluid"),
            ("residual", "residual"),
        ):
            row = next(row for row in rows if row["entry"] == word)
            assert [float(row[f"{what} {axis}, {unit}"]) for axis in "xyz"] == data[key][entry]
        assert sum(row["group"] == shown for row in rows) == 3
    _, mass = rows_of(files["mass.csv"])
    assert {row["entry"]: row["mass rate, kg/s"] for row in mass}["inflow"] == repr(data["mass"]["inflow"])
    remarks, loads = rows_of(files["loads.csv"])
    reaction = next(row for row in loads if row["who on whom"] == "anchor on hardware")
    assert [float(reaction[f"force {axis}, N"]) for axis in "xyz"] == data["reaction"]["force"]
    line = data["reaction"]["line_of_action"]
    assert [float(reaction[f"line of action through {axis}, m"]) for axis in "xyz"] == line["point"]
    assert float(reaction["couple about the line, N m"]) == line["couple"]
    said = "\n".join(remarks)
    for text in (*data["assumptions"], *data["cautions"], *data["verdict"]["reasons"]):
        assert text in said
    assert "about the anchor, (0.0, 0.0, 0.0) m" in said
    _, energy = rows_of(files["energy.csv"])
    assert float(energy[0]["power, W"]) == next(iter(data["energy"]["groups"].values()))["enthalpy"]
    _, ports = rows_of(files["ports.csv"])
    figures = data["ports"]["drain"]
    assert float(ports[1]["mean total pressure, by mass flow, Pa"]) == figures["mean_total_pressure"]["mass_flow"]
    assert "mean temperature, by area, K" not in ports[1]  # of no port


def test_a_doubt_stands_beside_each_figure_that_has_one(block: Block) -> None:
    block.change('density = "1000 kg/m^3"', 'density = "1000 +/- 4 kg/m^3"')
    data = done_case(read_case(block.case), budget=True).data()
    files = csv_files(data)
    _, groups = rows_of(files["groups.csv"])
    for row, entries in zip(groups, data["groups"].values()):
        for key, head in (("area", "area, m^2"), ("mass_flow", "mass flow out, kg/s")):
            assert float(row[f"doubt at 95 % of {head}"]) == entries[f"{key}_uncertainty"]
        for axis, half in zip("xyz", entries["pressure_force_uncertainty"]):
            assert float(row[f"doubt at 95 % of pressure force on fluid {axis}, N"]) == half
    assert not [head for head in groups[0] if head.startswith("doubt") and "known" in head]
    remarks, loads = rows_of(files["loads.csv"])
    reaction, wrench = next(row for row in loads if row["who on whom"] == "anchor on hardware"), data["reaction"]
    for axis, half in zip("xyz", wrench["force_uncertainty"]):
        assert float(reaction[f"doubt at 95 % of force {axis}, N"]) == half
    assert float(reaction["size of force, N"]) == wrench["force_size"] == np.linalg.norm(wrench["force"])
    assert float(reaction["doubt at 95 % of size of force, N"]) == wrench["force_size_uncertainty"]
    assert float(reaction["doubt at 95 % of size of moment, N m"]) == wrench["moment_size_uncertainty"]
    _, rows = rows_of(files["momentum.csv"])
    residual = next(row for row in rows if row["entry"] == "residual")
    assert [float(residual[f"doubt at 95 % of force {axis}, N"]) for axis in "xyz"] == data["momentum"][
        "residual_uncertainty"
    ]
    _, mass = rows_of(files["mass.csv"])
    inflow = next(row for row in mass if row["entry"] == "inflow")
    assert float(inflow["doubt at 95 % of mass rate, kg/s"]) == data["mass"]["inflow_uncertainty"]
    _, ports = rows_of(files["ports.csv"])
    first = next(iter(data["ports"].values()))
    assert float(ports[0]["doubt at 95 % of mean pressure, by area, Pa"]) == first["mean_pressure"]["area_uncertainty"]
    # in every file a doubt stands in the column after its figure
    for text in files.values():
        heads = next(csv.reader([line for line in text.split("\n") if not line.startswith("# ")]))
        for before, head in pairwise(heads):
            assert not head.startswith("doubt") or head == f"doubt at 95 % of {before}"
    assert "half width of the 95 % interval" in "\n".join(remarks)


def test_an_export_comes_with_its_doubts(block: Block, tmp_path: Path) -> None:
    block.change("[flow]", '[flow]\nreconstruction = "quadratic"')
    import pyvista

    made = export_case(block.case, out=tmp_path / "out")
    text = (tmp_path / "out" / "loads.csv").read_text("utf-8")
    assert "doubt at 95 % of size of force, N" in text
    assert "arrays here are the plain ones" in str(list(pyvista.read(made[0]).field_data["meaning"]))


def test_every_file_has_assumptions_and_cautions_above_it(block: Block) -> None:
    data = outcome(block).data()
    for text in csv_files(data).values():
        assert all(f"# Assumed: {one}" in text for one in data["assumptions"])
        assert all(f"# Caution: {one}" in text for one in data["cautions"])


def test_what_is_not_known_is_empty_and_no_formula_runs() -> None:
    rows = [
        ["=cmd()", None, 0.1 + 0.2, True],
        ["+1", "-x", -0.0, False],
        [" @a", 'quo"te', 1e-300, None],
        ["a;\n=b\0", "#", 3, None],
    ]
    text = csv_text(["a", "b", "c", "d"], rows, ["two\nlines", "\ud800"])
    lines = text.split("\n")
    assert lines[:3] == ["# two lines", "# \ufffd", '"a","b","c","d"']
    assert lines[3] == '"\'=cmd()",,0.30000000000000004,"yes"'
    assert lines[4] == '"\'+1","\'-x",-0.0,"no"'
    assert lines[5] == '"\' @a","quo""te",1e-300,'
    assert next(csv.reader(io.StringIO("\n".join(lines[6:])))) == ["a;\n=b", "#", "3", ""]


def test_an_open_surface_has_no_laws_and_its_old_files_go(block: Block, tmp_path: Path) -> None:
    first = export_case(block.case, out=tmp_path / "out")
    assert {"momentum.csv", "energy.csv"} <= {path.name for path in first}
    (tmp_path / "out" / "mine.txt").write_text("kept")
    block.change('file = "block.vtp"', 'file = "block.vtp"\nclosed = false')
    export_case(block.case, out=tmp_path / "out")
    there = {path.name for path in (tmp_path / "out").iterdir()}
    assert not there & {"momentum.csv", "angular_momentum.csv", "mass.csv", "energy.csv"}
    assert {"surface.vtp", "vectors.vtp", "groups.csv", "loads.csv", "mine.txt"} <= there


def test_a_moment_that_is_not_known_stays_empty(tmp_path: Path) -> None:
    done = done_case(read_case(ROOT / "meshes" / "impeller" / "impeller.toml"))
    data = done.data()
    assert data["hardware_load"]["from_balance"]["moment"] is None
    _, rows = rows_of(csv_files(data)["loads.csv"])
    balance = next(row for row in rows if row["basis"] == "balance")
    assert balance["moment x, N m"] == ""
    assert float(balance["force x, N"]) == data["hardware_load"]["from_balance"]["force"][0]


def test_a_mirrored_part_says_that_the_ledgers_are_of_the_whole(block: Block, tmp_path: Path) -> None:
    text = CASE.replace('groups = { array = "region" }', 'groups = { array = "region" }\nmirror = true')
    mesh = block.mesh()
    middle = mesh.cell_centers().points
    region = np.array(mesh.cell_data["region"])
    region[middle[:, 1] < 1e-9] = 4
    mesh.cell_data["region"] = region
    block.save(mesh)
    block.write(text.replace("[hardware]", '[groups.cut]\nrole = "symmetry"\ntag = 4\n[hardware]'))
    mesh = read_vtp(export_case(block.case, out=tmp_path / "o")[0].read_bytes(), tmp_path / "a.vtp")
    assert "ledgers are those of the whole" in " ".join(map(str, mesh.field_data["meaning"]))
    data = outcome(block).data()
    flow = np.array(mesh.cell_data["mass_flow_out_kg_per_s"])[mesh.cell_data["group_number"] == 0].sum()
    assert_allclose(2 * flow, data["groups"]["feed"]["mass_flow"], rtol=1e-14)


# ---- files whole or not at all


def test_a_failure_leaves_what_was_there(block: Block, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    done = outcome(block)
    folder = tmp_path / "out"
    write_export(folder, done.surface, done.flow, done.balance, done.data())
    before = {path.name: path.read_bytes() for path in folder.iterdir()}

    def broken(data: object) -> dict[str, str]:
        raise RuntimeError("no ledgers")

    monkeypatch.setattr("fluxmesh.report.export.csv_files", broken)
    other = replace(done.flow, density=done.flow.density.scaled(2.0))
    with pytest.raises(RuntimeError):
        write_export(folder, done.surface, other, done.balance, done.data())
    assert {path.name: path.read_bytes() for path in folder.iterdir()} == before


def test_a_folder_that_cannot_be_is_said_before_the_work(block: Block, tmp_path: Path) -> None:
    (tmp_path / "taken").write_text("a file")
    with pytest.raises(OutputError, match="taken"):
        export_case(block.case, out=tmp_path / "taken")
    block.change('array = "p"', 'array = "q"')
    with pytest.raises(FluxmeshError, match="'q'"):
        export_case(block.case, out=tmp_path / "new")
    assert list((tmp_path / "new").iterdir()) == []


def test_names_are_left_as_they_are_where_a_file_can_hold_them() -> None:
    assert writable("a\0b\ud800\u200fצ\n") == "ab\ufffd\u200fצ\n"
    assert one_line("a\tb\u2028c\r\n") == "a b c  "


def test_the_same_case_gives_the_same_bytes(block: Block, tmp_path: Path) -> None:
    for name in ("a", "b"):
        export_case(block.case, out=tmp_path / name)
    for path in (tmp_path / "a").iterdir():
        assert path.read_bytes() == (tmp_path / "b" / path.name).read_bytes(), path.name


def test_the_command_as_it_is_called(fluxmesh: Callable[..., Any], block: Block, tmp_path: Path) -> None:
    odd_case(block)
    ran = fluxmesh("export", block.case, "--out", tmp_path / "out")
    assert ran.code == 0, ran.err
    written = re.findall(r"^Written: (.*)$", ran.out, re.M)
    assert {Path(line).name for line in written} == {path.name for path in (tmp_path / "out").iterdir()}
    ran = fluxmesh("export", block.case)
    assert (tmp_path / "results" / "block" / "export" / "surface.vtp").exists()
    ran = fluxmesh("export", tmp_path / "none.toml")
    assert ran.code == 2
    assert "Traceback" not in ran.err
