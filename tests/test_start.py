"""`start`: what is found in a file, what is proposed from it, and that the proposal can be checked and balanced."""

from __future__ import annotations

import json
import tomllib
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from fluxmesh.assess.review.toml import toml_key, toml_value
from fluxmesh.case.read import read_case
from fluxmesh.errors import CaseError, FileError, InputError, UnitError
from fluxmesh.job.check import check_case
from fluxmesh.starter import Proposal, propose_case
from fluxmesh.starter.body import body_of
from fluxmesh.starter.found import FoundGroup, find_groups
from fluxmesh.starter.roles import GroupShape, guess_roles
from fluxmesh.starter.write import comment
from fluxmesh.surface.files import read_mesh
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.surface import Role
from tests.conftest import CASE
from tests.mesh_writing import BOX_POINTS, BOX_QUADS, BOX_TRIANGLES, REGION, ascii_stl, box_polydata, write_meshio
from tests.planting import ROOT, Planted, manifold

MANIFOLDS = sorted((ROOT / "meshes" / "manifold").glob("*.vtp"))
ROTOR, HEADER = ROOT / "meshes" / "rotor" / "rotor.vtp", ROOT / "meshes" / "header" / "header.stl"
OIL = "880 kg/m^3"


def tables(proposal: Proposal) -> dict[str, Any]:
    return tomllib.loads(proposal.text)


def saved(case: Planted) -> Path:
    path = case.folder / "export.vtp"
    case.mesh.save(path)
    return path


def written(proposal: Proposal, folder: Path) -> Path:
    path = folder / "new.toml"
    path.write_text(proposal.text, encoding="utf-8")
    return path


@pytest.mark.parametrize(
    ("mesh", "density", "gravity"),
    [
        *((mesh, OIL, None) for mesh in MANIFOLDS),
        (MANIFOLDS[0], OIL, (0, 0, -9.80665)),
        (ROTOR, "1.225 kg/m^3", None),
    ],
    ids=lambda value: value.stem if isinstance(value, Path) else None,
)
def test_a_shipped_export_balances_untouched(fluxmesh, tmp_path, mesh, density, gravity) -> None:
    down = () if gravity is None else ("--gravity", *gravity)
    ran = fluxmesh("start", mesh, "--density", density, *down, "--to", tmp_path / "new.toml")
    assert ran.code == 0, ran.err
    assert "To be filled in" not in ran.out
    ran = fluxmesh("balance", tmp_path / "new.toml", "--out", tmp_path / "out", "--no-pictures")
    assert ran.code == 0, ran.out + ran.err
    data = json.loads((tmp_path / "out" / "balance.json").read_text("utf-8"))
    assert data["verdict"]["closes"] is True
    roles = sorted(group["role"] for group in data["groups"].values())
    assert roles == (["open", "symmetry", "wall"] if mesh == ROTOR else ["inlet", "outlet", "outlet", "wall"])


def test_the_roles_of_the_shipped_export_are_those_of_its_case() -> None:
    found = tables(propose_case(MANIFOLDS[0], density=OIL))["groups"]
    asked = tomllib.loads(MANIFOLDS[0].with_suffix(".toml").read_text("utf-8"))["groups"]
    assert {group["tag"]: group["role"] for group in found.values()} == {
        group["tag"]: group["role"] for group in asked.values()
    }


def test_gravity_given_tells_that_the_head_is_not_in_the_pressure(tmp_path: Path) -> None:
    proposal = propose_case(MANIFOLDS[0], density=OIL, gravity=(0, 0, -9.80665), beside=tmp_path / "new.toml")
    assert tables(proposal)["flow"]["pressure"]["head"] == "removed"
    assert proposal.doubts == 0
    assert check_case(read_case(written(proposal, tmp_path))).doubts == ()


def test_without_a_density_the_case_says_so_and_gives_what_the_momentum_tells(fluxmesh, tmp_path: Path) -> None:
    case = manifold(tmp_path)
    del case.mesh.cell_data["density"]
    ran = fluxmesh("start", saved(case), "--to", tmp_path / "new.toml")
    assert ran.code == 0, ran.err
    assert "To be filled in: fluid.density" in ran.out
    text = (tmp_path / "new.toml").read_text("utf-8")
    line = next(line for line in text.splitlines() if "density =" in line)
    assert line.startswith('# density = "998.2 kg/m^3"')
    assert "FILL IN" in line
    implied = float(line.split("closes with about ")[1].split()[0])
    assert implied == pytest.approx(880.0, rel=0.05)
    ran = fluxmesh("check", tmp_path / "new.toml")
    assert ran.code == 2
    assert "fluid.density: missing" in ran.err


@pytest.mark.parametrize("sits", ["nodes", "faces"])
@pytest.mark.parametrize("unit", ["", " [g/cm^3]"])
def test_a_constant_density_in_the_file_is_taken(fluxmesh, tmp_path: Path, sits: str, unit: str) -> None:
    case = manifold(tmp_path)
    data = case.mesh.point_data if sits == "nodes" else case.mesh.cell_data
    data[f"density{unit}"] = np.full(
        case.mesh.n_points if sits == "nodes" else case.mesh.n_cells, 0.88 if unit else 880.0
    )
    path = saved(case)
    ran = fluxmesh("start", path, "--to", tmp_path / "new.toml")
    assert "To be filled in" not in ran.out
    done = read_case(tmp_path / "new.toml")
    assert done.fluid.density.value == pytest.approx(880.0)
    ran = fluxmesh("balance", tmp_path / "new.toml", "--out", tmp_path / "out", "--no-pictures")
    assert ran.code == 0, ran.out + ran.err


def test_a_density_that_varies_is_named_as_an_array(tmp_path: Path) -> None:
    case = manifold(tmp_path)
    case.mesh.point_data["rho"] = np.linspace(870.0, 890.0, case.mesh.n_points)
    found = tables(propose_case(saved(case), beside=tmp_path / "new.toml"))
    assert found["flow"]["density"] == {"array": "rho"}
    assert "density" not in found["fluid"]


def test_the_unit_of_length_is_guessed_from_the_size_and_kept_where_given() -> None:
    assert tables(propose_case(MANIFOLDS[0], density=OIL))["surface"]["length_unit"] == "mm"
    assert tables(propose_case(ROTOR))["surface"]["length_unit"] == "m"
    kept = propose_case(MANIFOLDS[0], density=OIL, unit="m")
    assert tables(kept)["surface"]["length_unit"] == "m"
    assert "The surface is 217 m across" in kept.text


def _reverse(case: Planted, which: np.ndarray) -> None:
    faces = case.mesh.faces.reshape(-1, 4).copy()
    faces[which, 1:] = faces[which, 1:][:, ::-1]
    case.mesh.faces = faces.ravel()


@pytest.mark.parametrize("which", ["all", "some"])
def test_flow_directions_do_not_depend_on_the_orientation_in_the_file(tmp_path: Path, which: str) -> None:
    case = manifold(tmp_path)
    count = case.mesh.n_cells
    _reverse(case, np.ones(count, bool) if which == "all" else np.arange(count) % 3 == 0)
    groups = tables(propose_case(saved(case), density=OIL, beside=tmp_path / "new.toml"))["groups"]
    assert {group["tag"]: group["role"] for group in groups.values()} == {
        1: "inlet",
        2: "outlet",
        3: "outlet",
        4: "wall",
    }


def test_velocities_on_faces_and_component_arrays_are_used(tmp_path: Path) -> None:
    case = manifold(tmp_path)
    for axis, values in zip("XYZ", case.of_faces(case.velocity).T):
        case.mesh.cell_data[f"Velocity{axis}"] = values
    del case.mesh.point_data["velocity"]
    proposal = propose_case(saved(case), density=OIL, beside=tmp_path / "new.toml")
    found = tables(proposal)
    assert found["flow"]["velocity"]["array"] == ["VelocityX", "VelocityY", "VelocityZ"]
    assert [group["role"] for group in found["groups"].values()] == ["inlet", "outlet", "outlet", "wall"]
    written(proposal, tmp_path)
    assert check_case(read_case(tmp_path / "new.toml")).facts


@pytest.mark.parametrize("turned", [False, True])
def test_an_exported_mass_flow_tells_which_way_it_counts(tmp_path: Path, turned: bool) -> None:
    case = manifold(tmp_path)
    flux = np.einsum("ij,ij->i", case.of_faces(case.velocity), case.area_vectors()) * 1e-6 * 880.0
    if turned:
        which = np.arange(case.mesh.n_cells) % 3 == 0
        _reverse(case, which)
        flux[which] *= -1.0
    case.mesh.cell_data["mass flow [kg/s]"] = flux
    proposal = propose_case(saved(case), density=OIL, beside=tmp_path / "new.toml")
    found = tables(proposal)["flow"]["mass_flux"]
    assert found["positive"] == ("face-normal" if turned else "out")
    assert found["unit"] == "kg/s"
    review = check_case(read_case(written(proposal, tmp_path)))
    assert {doubt.kind for doubt in review.doubts} <= {"gravity not stated"}


def _absolute(case: Planted) -> None:
    case.mesh.point_data["pressure"] = case.pressure + 101325.0


def _kinematic(case: Planted) -> None:
    case.mesh.point_data["pressure"] = case.pressure / 880.0


def _on_fluid(case: Planted) -> None:
    case.mesh.cell_data["wall_traction"] = -case.traction


def _with_head(case: Planted) -> None:
    case.mesh.point_data["pressure"] = case.pressure + case.head


def _psi(case: Planted) -> None:
    case.mesh.point_data["pressure [psi]"] = case.pressure / 6894.757293168361
    del case.mesh.point_data["pressure"]


@pytest.mark.parametrize(
    ("plant", "key", "value", "without_density"),
    [
        (_absolute, ("flow", "pressure", "kind"), "absolute", True),
        (_kinematic, ("flow", "pressure", "kind"), "kinematic", False),
        (_on_fluid, ("flow", "traction", "acts_on"), "fluid", True),
        (_with_head, ("fluid", "gravity"), [0, 0, -9.80665], False),
        (_psi, ("flow", "pressure", "unit"), "psi", True),
    ],
)
def test_what_the_values_tell_is_proposed(tmp_path: Path, plant, key, value, without_density: bool) -> None:
    case = manifold(tmp_path)
    plant(case)
    path = saved(case)
    for density in (OIL, None) if without_density else (OIL,):
        proposal = propose_case(path, density=density, beside=tmp_path / "new.toml")
        found: Any = tables(proposal)
        for part in key:
            found = found[part]
        assert found == value
        if density is not None:
            review = check_case(read_case(written(proposal, tmp_path)))
            assert {doubt.kind for doubt in review.doubts} <= {"gravity not stated"}


def test_ports_of_a_mesh_without_tags_are_those_that_flow_passes(fluxmesh, tmp_path: Path) -> None:
    case = manifold(tmp_path)
    del case.mesh.cell_data["region"]
    saved(case)
    ran = fluxmesh("start", tmp_path / "export.vtp", "--density", OIL, "--to", tmp_path / "new.toml")
    assert ran.code == 0, ran.err
    found = tomllib.loads((tmp_path / "new.toml").read_text("utf-8"))["groups"]
    assert sorted(group["role"] for group in found.values()) == ["inlet", "outlet", "outlet", "wall"]
    assert sum("pick" in group for group in found.values()) == 3
    ran = fluxmesh("balance", tmp_path / "new.toml", "--out", tmp_path / "out", "--no-pictures")
    assert ran.code == 0, ran.out + ran.err


def test_a_mesh_alone_lists_port_candidates_to_be_filled_in(fluxmesh, tmp_path: Path) -> None:
    proposal = propose_case(HEADER, beside=tmp_path / "new.toml")
    assert len([key for key in proposal.missing if key.endswith(".role")]) == 4
    assert "fluid.density" in proposal.missing
    assert "groups.port_1.flow_rate" in proposal.missing
    written(proposal, tmp_path)
    ran = fluxmesh("check", tmp_path / "new.toml")
    assert ran.code == 2
    assert "groups.port_1.role" in ran.err
    text = (
        proposal.text.replace("# density", "density")
        .replace("# flow_rate", "flow_rate")
        .replace("# pressure", "pressure")
    )
    head, *ports = text.split("# role")
    text = (
        head
        + "role"
        + '\nrole = "outlet" #'.join(ports[:1])
        + "".join('role = "outlet" #' + port for port in ports[1:])
    )
    text = text.replace('flow_rate = "10 m^3/h"', 'flow_rate = "30 m^3/h"', 1)
    written(Proposal(text, (), 0), tmp_path)
    ran = fluxmesh("balance", tmp_path / "new.toml", "--out", tmp_path / "out", "--no-pictures")
    assert ran.code == 0, ran.err


def test_an_open_surface_is_proposed_as_such(fluxmesh, block) -> None:
    mesh = block.mesh()
    block.save(
        mesh.extract_cells(np.flatnonzero(mesh.cell_data["region"] != 2)).extract_surface(algorithm="dataset_surface")
    )
    new = block.folder / "new.toml"
    assert fluxmesh("start", block.folder / "block.vtp", "--density", OIL, "--to", new).code == 0
    text = new.read_text("utf-8")
    assert "closed = false" in text
    assert "# Not closed: the surface is open" in text
    assert fluxmesh("check", new).code == 0


def test_a_surface_that_cannot_be_oriented_is_listed_and_said_to_be_so(tmp_path: Path) -> None:
    import pyvista

    turn = np.linspace(0, 2 * np.pi, 25)[:-1]
    middle = np.column_stack([np.cos(turn), np.sin(turn), 0 * turn])
    across = np.column_stack([np.cos(turn / 2) * np.cos(turn), np.cos(turn / 2) * np.sin(turn), np.sin(turn / 2)])
    points = np.concatenate([middle - 0.2 * across, middle + 0.2 * across])
    low, high = np.arange(24), np.arange(24) + 24
    following = np.roll(low, -1)
    quads = np.column_stack([low, following, np.roll(high, -1), high])
    # after half a turn the two edges change places
    quads[-1] = [23, 24, 0, 47]
    path = tmp_path / "strip.vtp"
    pyvista.PolyData.from_regular_faces(points, quads).save(path)
    text = propose_case(path).text
    assert "# Not closed: " in text
    assert "one-sided" in text
    assert tomllib.loads(text)["surface"]["closed"] is False


def test_named_solids_are_the_groups(tmp_path: Path) -> None:
    corners = BOX_POINTS[BOX_TRIANGLES]
    solids = {"inlet": corners[:2], 'odd "name"': corners[2:4], "wall of block": corners[4:]}
    path = tmp_path / "box.stl"
    path.write_text(ascii_stl(solids), encoding="utf-8")
    found = tables(propose_case(path, unit="m"))
    assert found["surface"]["groups"] == {"sets": True}
    assert list(found["groups"]) == list(solids)
    assert found["groups"]["inlet"]["role"] == "inlet"
    assert found["groups"]["wall of block"]["role"] == "wall"
    # a plane with no name that tells: the user must say
    assert "role" not in found["groups"]['odd "name"']


def test_physical_names_of_a_mesh_generator_are_the_groups(tmp_path: Path) -> None:
    tags = np.where(REGION == 1, 11, np.where(REGION == 4, 12, 13))
    path = write_meshio(
        tmp_path / "box.msh", [("triangle", BOX_TRIANGLES)], file_format="gmsh22", binary=False,
        cell_data={"gmsh:physical": [tags], "gmsh:geometrical": [REGION + 1]},
        field_data={"feed": [11, 2], "drain": [12, 2], "casing": [13, 2]},
    )  # fmt: skip
    found = tables(propose_case(path))
    assert found["surface"]["groups"] == {"sets": True}
    assert {name: group["role"] for name, group in found["groups"].items()} == {
        "feed": "inlet", "drain": "outlet", "casing": "wall",
    }  # fmt: skip


def _raw(face_sets: dict[str, list[int]], **more: Any) -> RawMesh:
    sets = {name: np.array(faces, dtype=np.int64) for name, faces in face_sets.items()}
    return RawMesh("box", BOX_POINTS, BOX_TRIANGLES.ravel(), None, None, face_sets=sets, **more)


def test_sets_that_overlap_leave_out_the_larger_and_take_the_rest(tmp_path: Path) -> None:
    mesh = _raw({"everything": list(range(12)), "ports": [0, 1, 2, 3], "inlet": [0, 1], "out": [2, 3]})
    found = find_groups(mesh, body_of(mesh, 1.0))
    assert [group.name for group in found.groups] == ["inlet", "out", "rest"]
    assert found.groups[-1].keys == {"rest": True}
    assert found.groups[-1].faces.tolist() == list(range(4, 12))
    assert len(found.notes) == 2


def test_one_set_of_all_faces_tells_nothing_apart() -> None:
    mesh = _raw({"solid": list(range(12))})
    found = find_groups(mesh, body_of(mesh, 1.0))
    assert found.naming is None
    assert sum("pick" in group.keys for group in found.groups) == 6


@pytest.mark.parametrize(
    ("kind", "role"),
    [
        (Role.INLET, Role.INLET),
        (Role.OPEN, Role.OPEN),
        ("BCInflowSubsonic", Role.INLET),
        ("BCTunnelOutflow", Role.OUTLET),
        ("BCWallViscous", Role.WALL),
        ("BCSymmetryPlane", Role.SYMMETRY),
        ("BCFarfield", Role.OPEN),
    ],
)
def test_the_kind_of_boundary_in_the_file_is_the_role(kind: str, role: Role) -> None:
    mesh = _raw({"a": [0, 1], "wall": list(range(2, 12))}, roles={"a": kind})
    groups = find_groups(mesh, body_of(mesh, 1.0)).groups
    shapes = [GroupShape(1.0, np.zeros(3), 1.0, True)] * 2
    assert [guess.role for guess in guess_roles(groups, shapes)] == [role, Role.WALL]


def _named(label: str) -> FoundGroup:
    return FoundGroup(label, {}, np.arange(2), label)


@pytest.mark.parametrize(
    ("label", "role"),
    [
        ("inlet_1", Role.INLET), ("IN", Role.INLET), ("feed", Role.INLET), ("pressureOutlet", Role.OUTLET),
        ("exit", Role.OUTLET), ("out-2", Role.OUTLET), ("Shell", Role.WALL), ("inlet wall", Role.WALL),
        ("housing", Role.WALL), ("sym", Role.SYMMETRY), ("symmetry-plane", Role.SYMMETRY), ("farfield", Role.OPEN),
        ("inner part", None), ("part 7", None),
    ],
)  # fmt: skip
def test_roles_by_name(label: str, role: Role | None) -> None:
    shape = GroupShape(1.0, np.array([1.0, 0, 0]), 1.0, True)
    assert guess_roles([_named(label)], [shape])[0].role is role


def _flows(entering: float, leaving: float, speed: float, sheets: bool = True) -> GroupShape:
    return GroupShape(1.0, np.array([1.0, 0, 0]), 1.0 if sheets else 0.1, sheets, entering, leaving, speed)


def test_roles_by_flow_and_what_a_name_says_against_it() -> None:
    shapes = [
        _flows(2.0, 0.0, 2.1),
        _flows(0.0, 2.0, 2.1),
        _flows(1.0, 0.9, 2.0),
        _flows(0.0, 0.0, 2.0),
        _flows(0.01, 0.01, 2.0, sheets=False),
        _flows(0.0, 0.0, 0.0),
    ]
    labels = ["p1", "p2", "p3", "p4", "p5", "p6"]
    guesses = guess_roles([_named(label) for label in labels], shapes)
    roles = [Role.INLET, Role.OUTLET, Role.OPEN, Role.SYMMETRY, Role.WALL, Role.WALL]
    assert [guess.role for guess in guesses] == roles
    against = guess_roles([_named("outlet"), _named("shell")], [_flows(2.0, 0.0, 2.0), _flows(0.0, 2.0, 2.0)])
    assert [guess.role for guess in against] == [Role.INLET, Role.WALL]
    assert "though outlet by its name" in against[0].reason
    assert "though flow passes it" in against[1].reason


def test_planes_that_the_flow_slips_along_are_walls_where_nothing_else_is() -> None:
    shapes = [_flows(2.0, 0.0, 2.0), _flows(0.0, 2.0, 2.0), _flows(0.0, 0.0, 2.0)]
    roles = [guess.role for guess in guess_roles([_named(label) for label in "abc"], shapes)]
    assert roles == [Role.INLET, Role.OUTLET, Role.WALL]


HOSTILE = [
    'a"b',
    "a'b",
    "a\\b",
    "naïve ✓",
    "#x = 1",
    "[x]",
    "x.y",
    " padded ",
    "tab\there",
    "new\nline",
    "",
    "\x7f",
    "𝛑",
]


def test_hostile_names_come_back_as_they_were_or_are_said_to_be_unfit(tmp_path: Path) -> None:
    case = manifold(tmp_path)
    region = case.region
    for tag, name in enumerate(HOSTILE, 1):
        names = np.where(region == 1, "inlet", np.where(region == 4, "shell", name))
        faces = {f"set {tag}": np.flatnonzero(region == 1), name: np.flatnonzero(region != 1)}
        mesh = RawMesh(
            "x.vtp",
            np.array(case.mesh.points),
            case.mesh.faces.reshape(-1, 4)[:, 1:].astype(np.int64).ravel(),
            None,
            None,
            face_sets=faces,
            face_arrays={"n": names},
        )
        groups = find_groups(mesh, body_of(mesh, 1.0))
        for group in groups.groups:
            line = f"[{toml_key('groups', group.name)}]\n" + "\n".join(
                f"{key} = {toml_value(value)}" for key, value in group.keys.items()
            )
            assert tomllib.loads(line)["groups"][group.name] == group.keys
        if not name.isprintable() or not name.strip():
            assert groups.groups[-1].keys == {"rest": True}
            assert "rename it" in groups.notes[0]
        else:
            assert groups.groups[-1].keys == ({} if name == name.strip() else {"tag": name})


@pytest.mark.parametrize("name", HOSTILE)
def test_arrays_and_files_of_odd_names_give_a_case_that_reads(tmp_path: Path, monkeypatch, name: str) -> None:
    fits = name.isprintable() and bool(name.strip())
    arrays = {f"p {name}": np.ones(8), f"region {name}": REGION}
    mesh = _raw({}, node_arrays={f"p {name}": np.ones(8)}, face_arrays={f"region {name}": REGION})
    monkeypatch.setattr("fluxmesh.starter.propose.read_mesh", lambda path: mesh)
    path = tmp_path / f"{name if fits else 'box'}.vtp"
    found = tables(propose_case(path, beside=tmp_path / "new.toml"))
    assert found["surface"]["file"] == path.name
    assert found["title"] == path.stem
    named = found["surface"].get("groups", {}).get("array")
    assert named == (f"region {name}" if name.isprintable() else None)
    assert named in (None, *arrays)


def test_a_file_name_that_no_case_can_hold_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "two\nlines.vtp"
    box_polydata().save(tmp_path / "box.vtp")
    (tmp_path / "box.vtp").rename(path)
    with pytest.raises(FileError, match="rename it"):
        propose_case(path, beside=tmp_path / "new.toml")


texts = st.text(st.characters(exclude_categories=["Cs"]))
values = st.recursive(
    st.one_of(texts, st.booleans(), st.integers(-(2**62), 2**62), st.floats(allow_nan=False)),
    lambda inner: st.one_of(st.lists(inner, max_size=4), st.dictionaries(texts, inner, max_size=4)),
    max_leaves=12,
)


@given(texts, values)
def test_any_value_comes_back_from_its_toml(key: str, value: Any) -> None:
    assert tomllib.loads(f"{toml_key('a', key)} = {toml_value(value)}") == {"a": {key: value}}


@given(texts)
def test_any_comment_is_one_line_that_toml_ignores(text: str) -> None:
    assert tomllib.loads(f"a = 1 {comment(text)}\nb = 2") == {"a": 1, "b": 2}


@pytest.mark.parametrize(
    "suffix", [".vtp", ".vtu", ".vtk", ".stl", ".ply", ".obj", ".msh", ".inp", ".off", ".mesh", ".xdmf", ".bdf"]
)
def test_any_readable_file_gives_a_case_that_check_takes_or_names_what_is_missing(tmp_path: Path, suffix: str) -> None:
    path = tmp_path / f"box{suffix}"
    if suffix in (".vtp", ".vtu", ".vtk"):
        data = box_polydata(names=True)
        (data.cast_to_unstructured_grid() if suffix == ".vtu" else data).save(path)
    elif suffix == ".stl":
        path.write_text(ascii_stl({"all": BOX_POINTS[BOX_TRIANGLES]}))
    else:
        write_meshio(path, [("triangle", BOX_TRIANGLES)])
    proposal = propose_case(path, beside=tmp_path / "new.toml")
    areas = [float(line.split(" faces, ")[1].split(" m²")[0]) for line in proposal.text.splitlines() if " m²" in line]
    assert sum(areas) == pytest.approx(22.0, rel=1e-3)  # the whole surface of the box
    with pytest.raises(CaseError) as refused:
        read_case(written(proposal, tmp_path))
    said = [key for key in proposal.missing if key in str(refused.value)]
    assert said


def test_quads_and_polygons_are_listed_too(tmp_path: Path) -> None:
    import pyvista

    path = tmp_path / "box.vtp"
    data = pyvista.PolyData(BOX_POINTS, faces=[n for quad in BOX_QUADS for n in (4, *quad)])
    data.point_data["U"] = np.tile([0.0, 0.0, 2.0], (8, 1))
    data.point_data["p"] = np.full(8, 300.0)
    data.save(path)
    found = tables(propose_case(path, density=OIL))["groups"]
    assert sorted(group["role"] for group in found.values()) == ["inlet", "outlet", "wall"]


def test_a_field_with_holes_gives_no_directions_but_a_case(tmp_path: Path) -> None:
    case = manifold(tmp_path)
    velocity = case.velocity
    velocity[5] = np.nan
    case.mesh.point_data["velocity"] = velocity
    proposal = propose_case(saved(case), density=OIL, beside=tmp_path / "new.toml")
    assert len(proposal.missing) == 3
    assert "role" not in tables(proposal)["groups"]["group_1"]


def test_a_case_that_would_be_refused_says_why(tmp_path: Path) -> None:
    case = manifold(tmp_path)
    pressure = case.pressure
    pressure[5] = np.nan
    case.mesh.point_data["pressure"] = pressure
    text = propose_case(saved(case), density=OIL, beside=tmp_path / "new.toml").text
    assert "# As it stands, this case is refused: " in text
    assert "not finite" in text


def test_a_far_surface_is_anchored_at_its_middle(tmp_path: Path) -> None:
    case = manifold(tmp_path)
    case.mesh.points = np.array(case.mesh.points, dtype=np.float64) + np.array([5000.0, 0, 0])
    at = tables(propose_case(saved(case), density=OIL, beside=tmp_path / "new.toml"))["anchor"]["at"]
    assert at[0] == pytest.approx(5.08, abs=0.01)


def test_nothing_is_ever_overwritten(fluxmesh, block) -> None:
    before = block.case.read_text("utf-8")
    ran = fluxmesh("start", block.folder / "block.vtp", "--to", block.case)
    assert ran.code == 2
    assert "exists already" in ran.err
    assert block.case.read_text("utf-8") == before == CASE
    ran = fluxmesh("start", block.folder / "block.vtp", "--to", block.folder / "none" / "new.toml")
    assert ran.code == 2
    assert "cannot be written" in ran.err


@pytest.mark.parametrize(
    ("options", "error", "said"),
    [
        ({"unit": "kg"}, UnitError, "--unit"),
        ({"density": "880 Pa"}, UnitError, "--density"),
        ({"density": "about 880"}, UnitError, "--density"),
        ({"gravity": (0.0, float("nan"), 0.0)}, UnitError, "--gravity"),
    ],
)
def test_options_that_do_not_fit_are_named(options: dict[str, Any], error: type[InputError], said: str) -> None:
    with pytest.raises(error, match=said):
        propose_case(ROTOR, **options)


def test_the_file_is_read_as_it_is() -> None:
    before = read_mesh(ROTOR)
    propose_case(ROTOR, density="1.225 kg/m^3")
    after = read_mesh(ROTOR)
    np.testing.assert_array_equal(before.points, after.points)
