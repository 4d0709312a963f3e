"""`check`: each kind of doubt appears for a planted fault, and goes when its own line is written into the case."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh.assess.review import Doubt, Evidence, NamedArray, Setting, review_of
from fluxmesh.assess.review.kinds.density import is_some_fluid
from fluxmesh.assess.review.kinds.walls import rigid_motion
from fluxmesh.case.read import read_case
from fluxmesh.job.check import check_case
from fluxmesh.job.run import balance_of
from tests import solids
from tests.conftest import CASE
from tests.flows import poiseuille
from tests.planting import GRAVITY, ROOT, Plant, Planted, header, manifold

SHIPPED = sorted((ROOT / "meshes").glob("*/*.toml"))


@pytest.mark.parametrize("case", SHIPPED, ids=lambda path: path.stem)
def test_shipped_cases_raise_no_doubt(case: Path) -> None:
    review = check_case(read_case(case))
    assert review.doubts == ()
    assert len(review.facts) > 4


def _port_as_wall(case: Planted) -> None:
    case.set("groups", "gallery", "role", value="wall")


def _moving_frame(case: Planted) -> None:
    case.mesh.point_data["velocity_at_rest"] = case.velocity
    case.mesh.point_data["velocity"] = case.velocity + np.array([3.0, 1.0, 0.0])


def _turning_frame(case: Planted) -> None:
    places = np.array(case.mesh.points, dtype=np.float64) * 1e-3
    case.mesh.point_data["velocity_at_rest"] = case.velocity
    case.mesh.point_data["velocity"] = case.velocity + np.cross([0.0, 0.0, 30.0], places)


def _backflow(case: Planted) -> None:
    spindle = np.unique(case.mesh.faces.reshape(-1, 4)[case.region == 2, 1:])
    velocity = case.velocity
    velocity[spindle[::4]] *= -1.0
    case.mesh.point_data["velocity"] = velocity


def _wall_in_port(case: Planted) -> None:
    region = case.region
    feed = np.unique(case.mesh.faces.reshape(-1, 4)[region == 1, 1:])
    touching = np.isin(case.mesh.faces.reshape(-1, 4)[:, 1:], feed).any(axis=1)
    region[touching] = 1
    case.mesh.cell_data["region"] = region


def _mass_flux(case: Planted) -> None:
    flux = np.einsum("ij,ij->i", case.of_faces(case.velocity), case.area_vectors()) * 1e-6 * 880.0
    case.mesh.cell_data["mass_flow"] = flux
    case.set("flow", "mass_flux", value={"array": "mass_flow"})


def _mass_flux_in_cm(case: Planted) -> None:
    _mass_flux(case)
    case.set("surface", "length_unit", value="cm")


def _other_mass_flux(case: Planted) -> None:
    _mass_flux(case)
    case.mesh.cell_data["mass_flow"] = 3.0 * np.array(case.mesh.cell_data["mass_flow"])


def _mass_alone(case: Planted) -> None:
    _mass_flux(case)
    case.drop("flow", "velocity")


def _absolute(case: Planted) -> None:
    case.mesh.point_data["pressure"] = case.pressure + 101325.0


def _absolute_without_ambient(case: Planted) -> None:
    _absolute(case)
    case.drop("fluid", "ambient_pressure")


def _gauge(case: Planted) -> None:
    case.set("flow", "pressure", "kind", value="absolute")


def _kinematic(case: Planted) -> None:
    case.mesh.point_data["pressure"] = case.pressure / 880.0


def _not_kinematic(case: Planted) -> None:
    case.set("flow", "pressure", "kind", value="kinematic")
    case.set("flow", "pressure", "unit", value="m^2/s^2")


def _total(case: Planted) -> None:
    case.mesh.point_data["p"] = case.pressure
    case.mesh.point_data["pressure"] = case.pressure + 440.0 * (case.velocity**2).sum(axis=1)


def _kilopascal(case: Planted) -> None:
    case.mesh.point_data["pressure"] = case.pressure / 1000.0


def _traction_in_psi(case: Planted) -> None:
    case.mesh.cell_data["wall_traction"] = case.traction / 6894.757293168361


def _feet(case: Planted) -> None:
    case.mesh.point_data["velocity"] = case.velocity / 0.3048


def _millimetres_a_second(case: Planted) -> None:
    case.mesh.point_data["velocity"] = case.velocity * 1000.0


def _grams_a_litre(case: Planted) -> None:
    case.set("fluid", "density", value="0.88 kg/m^3")


def _with_head(case: Planted) -> None:
    case.mesh.point_data["pressure"] = case.pressure + case.head


def _without_gravity(case: Planted) -> None:
    _with_head(case)
    case.set("flow", "pressure", "head", value="included")
    case.drop("fluid", "gravity")


def _unstated_gravity(case: Planted) -> None:
    case.drop("fluid", "gravity")
    case.drop("flow", "pressure", "head")


def _unstated_kind(case: Planted) -> None:
    # pressures below zero would show that it is gauge
    case.mesh.point_data["pressure"] = case.pressure + 500.0
    case.drop("flow", "pressure", "kind")


def _unstated_head(case: Planted) -> None:
    _with_head(case)
    case.drop("flow", "pressure", "head")
    # a balance that does not close cannot confirm the default
    case.mesh.point_data["velocity"] = case.velocity * 3.0


def _unstated_acts_on(case: Planted) -> None:
    case.drop("flow", "traction", "acts_on")
    case.mesh.cell_data["wall_traction"] = np.tile([9.0, 7.0, -8.0], (case.mesh.n_cells, 1))


def _unstated_anchor(case: Planted) -> None:
    case.mesh.points = np.array(case.mesh.points, dtype=np.float64) + np.array([4000.0, 0, 0])
    case.drop("anchor")


def _far_away(case: Planted) -> None:
    case.mesh.points = np.array(case.mesh.points) + np.float32(1e5)


def _pounds(case: Planted) -> None:
    case.set("fluid", "density", value="62.4 kg/m^3")


def _density_array(case: Planted) -> None:
    case.mesh.cell_data["rho"] = np.full(case.mesh.n_cells, 0.88)
    case.drop("fluid", "density")
    case.set("flow", "density", value={"array": "rho", "unit": "lb/gal"})
    case.set("flow", "pressure", "head", value="included")
    case.drop("fluid", "gravity")


def _coefficient(case: Planted) -> None:
    case.mesh.cell_data["wall_shear"] = case.traction
    case.mesh.cell_data["wall_traction"] = case.traction * 1e-7


def _total_stress(case: Planted) -> None:
    vectors = case.area_vectors()
    normals = vectors / np.linalg.norm(vectors, axis=1)[:, None]
    case.mesh.cell_data["wall_shear"] = case.traction
    case.mesh.cell_data["wall_traction"] = case.traction + case.of_faces(case.pressure)[:, None] * normals


def _other_density(case: Planted) -> None:
    case.mesh.point_data["density [kg/m^3]"] = np.full(case.mesh.n_points, 850.0)
    case.set("flow", "pressure", "head", value="included")
    case.drop("fluid", "gravity")


def _tag_left(case: Planted) -> None:
    for name in ("spindle", "gallery"):
        case.drop("groups", name)
    case.drop("groups", "housing", "tag")
    case.set("groups", "housing", "rest", value=True)


def _label(old: str, new: str) -> Plant:
    def plant(case: Planted) -> None:
        data = case.mesh.cell_data if old == "wall_traction" else case.mesh.point_data
        data[new] = data[old]
        del data[old]
        case.set("flow", "traction" if old == "wall_traction" else old, "array", value=new)

    return plant


def _named_total(case: Planted) -> None:
    case.mesh.point_data["p"] = case.pressure
    _label("pressure", "total pressure")(case)


PLANTS: dict[str, tuple[str, Plant]] = {
    "inlet as outlet": ("role against flow", lambda case: case.set("groups", "feed", "role", value="outlet")),
    "port as wall": ("flow through wall", _port_as_wall),
    "moving frame": ("wrong frame", _moving_frame),
    "turning frame": ("wrong frame", _turning_frame),
    "backflow": ("reversed flow", _backflow),
    "wall faces in a port": ("port not plane", _wall_in_port),
    "millimetres as metres": ("length unit", lambda case: case.set("surface", "length_unit", value="m")),
    "mass flux tells millimetres": ("length unit", _mass_flux_in_cm),
    "absolute": ("pressure looks absolute", _absolute),
    "absolute, ambient missing": ("pressure looks absolute", _absolute_without_ambient),
    "gauge as absolute": ("pressure looks gauge", _gauge),
    "ambient in kPa": ("ambient pressure", lambda case: case.set("fluid", "ambient_pressure", value="101.325 Pa")),
    "kinematic": ("pressure looks kinematic", _kinematic),
    "pressure as kinematic": ("pressure not kinematic", _not_kinematic),
    "total pressure": ("pressure looks total", _total),
    "kilopascal": ("pressure unit", _kilopascal),
    "traction turned": ("traction sign", lambda case: case.set("flow", "traction", "acts_on", value="fluid")),
    "feet a second": ("velocity unit", _feet),
    "millimetres a second": ("speed too large", _millimetres_a_second),
    "density in g/cm^3": ("density unit", _grams_a_litre),
    "head not in the pressure": ("head", lambda case: case.set("flow", "pressure", "head", value="included")),
    "head in the pressure already": ("head", _with_head),
    "gravity missing": ("gravity in pressure", _without_gravity),
    "gravity not stated": ("gravity not stated", _unstated_gravity),
    "gravity in feet": ("gravity", lambda case: case.set("fluid", "gravity", value=[0, 0, -32.174])),
    "kind not stated": ("kind not stated", _unstated_kind),
    "head not stated": ("head not stated", _unstated_head),
    "acts_on not stated": ("acts_on not stated", _unstated_acts_on),
    "anchor not stated": ("anchor not stated", _unstated_anchor),
    "pounds a cubic foot": ("density of no fluid", _pounds),
    "coefficient": ("traction too small", _coefficient),
    "total stress": ("traction along normal", _total_stress),
    "traction not named": ("no traction", lambda case: case.drop("flow", "traction")),
    "velocity not named": ("mass flux without velocity", _mass_alone),
    "density array not named": ("density array not used", _other_density),
    "tag not named": ("tag not named", _tag_left),
    "kPa in name": ("unit in name", _label("pressure", "pressure [kPa]")),
    "mm/s in name": ("unit in name", _label("velocity", "velocity_mm_s")),
    "absolute in name": ("kind in name", _label("pressure", "absolute pressure")),
    "kinematic in name": ("kind in name", _label("pressure", "p_m2_s2")),
    "total in name": ("name of another quantity", _named_total),
}
RIGHT = {
    "absolute": 'flow.pressure.kind = "absolute"',
    "absolute, ambient missing": 'flow.pressure.kind = "absolute" and fluid.ambient_pressure = "101325 Pa"',
    "ambient in kPa": 'fluid.ambient_pressure = "101325 Pa"; unless the hardware stands in a vessel or in a vacuum',
    "density in g/cm^3": 'fluid.density = "0.88 g/cm^3"',
    "feet a second": 'flow.velocity.unit = "ft/s"',
    "gravity missing": "fluid.gravity = [0, 0, -9.80665]",
    "head in the pressure already": 'flow.pressure.head = "included"',
    "kilopascal": 'flow.pressure.unit = "kPa"',
    "kinematic": 'flow.pressure.kind = "kinematic" and flow.pressure.unit = "m^2/s^2"',
    "mass flux tells millimetres": 'surface.length_unit = "mm"',
    "moving frame": 'flow.velocity.array = "velocity_at_rest"',
    "total pressure": 'flow.pressure.array = "p"',
    "traction turned": 'flow.traction.acts_on = "wall"',
}
"""What the doubt of a plant must propose, word for word."""

CLEAN = {
    "kinematic",
    "absolute",
    "total pressure",
    "traction turned",
    "feet a second",
    "kilopascal",
    "gauge as absolute",
}
"""Plants after which the settled case raises no doubt at all: the fault itself is undone."""


def _of_kind(case: Planted, kind: str) -> list[Doubt]:
    return [doubt for doubt in case.review().doubts if doubt.kind == kind]


@pytest.mark.parametrize("name", PLANTS)
def test_a_planted_fault_is_doubted_until_the_line_that_settles_it_is_written(name: str, tmp_path: Path) -> None:
    kind, plant = PLANTS[name]
    case = manifold(tmp_path)
    plant(case)
    doubts = case.review().doubts
    found = [doubt for doubt in doubts if doubt.kind == kind]
    assert len(found) == 1, [doubt.kind for doubt in doubts]
    assert found[0].seen
    assert found[0].matters
    assert found[0].settle
    assert found[0].remedy() == RIGHT.get(name, found[0].remedy())
    case.apply(found[0])
    left = {doubt.kind for doubt in case.review().doubts}
    assert kind not in left
    assert not left or name not in CLEAN


@pytest.mark.parametrize(
    ("plant", "kind"), [(_far_away, "coordinates rounded"), (_other_mass_flux, "mass flux against velocity")]
)
def test_doubts_that_no_line_can_settle_give_advice(plant: Plant, kind: str, tmp_path: Path) -> None:
    case = manifold(tmp_path)
    plant(case)
    (doubt,) = _of_kind(case, kind)
    assert doubt.settle == ()
    assert len(doubt.advice) > 10


def test_a_density_array_in_another_unit_is_doubted_in_that_unit(tmp_path: Path) -> None:
    # 0.88 "lb/gal" is 105 kg/m³, which is neither a liquid nor a gas; as g/cm³ it is oil
    case = manifold(tmp_path)
    _density_array(case)
    (doubt,) = _of_kind(case, "density of no fluid")
    assert doubt.settle[0].line() == 'flow.density.unit = "g/cm^3"'


def test_kilopascal_and_kinematic_are_both_named_where_the_balance_cannot_tell(tmp_path: Path) -> None:
    # with a density of 1000 kg/m³ the two readings are one factor
    case = manifold(tmp_path)
    _kilopascal(case)
    case.set("fluid", "density", value="1000 kg/m^3")
    kinds = {doubt.kind for doubt in case.review().doubts}
    assert {"pressure looks kinematic", "pressure unit"} <= kinds


def _unbalanced(case: Planted) -> None:
    case.set("groups", "top", "flow_rate", value="12 m^3/h")


def _unbalanced_speed(case: Planted) -> None:
    for name in ("feed", "left", "right", "top"):
        case.drop("groups", name, "flow_rate")
        case.set("groups", name, "speed", value="3 m/s")


def _small_as_metres(case: Planted) -> None:
    case.set("surface", "length_unit", value="dm")
    for name in ("feed", "left", "right", "top"):
        case.set("groups", name, "flow_rate", value="2 m^3/h" if name == "feed" else "0.6667 m^3/h")


def _ambient_supplied(case: Planted) -> None:
    case.set("groups", "top", "pressure", value="101325 Pa")


@pytest.mark.parametrize(
    ("plant", "kind"),
    [
        (_unbalanced, "supplied flows out of balance"),
        (_unbalanced_speed, "supplied flows out of balance"),
        (_small_as_metres, "length unit"),
        (_ambient_supplied, "pressure looks absolute"),
    ],
)
def test_supplied_port_data_are_doubted(plant: Plant, kind: str, tmp_path: Path) -> None:
    case = header(tmp_path)
    plant(case)
    (doubt,) = _of_kind(case, kind)
    case.apply(doubt)
    assert _of_kind(case, kind) == []


def test_supplied_velocities_out_of_balance_are_scaled(tmp_path: Path) -> None:
    case = header(tmp_path)
    for name, section in case.tables["groups"].items():
        if name != "shell":
            case.drop("groups", name, "flow_rate")
            inward = -1.0 if name == "feed" else 1.0
            case.set("groups", name, "velocity", value=[2.0 * inward * x for x in section["pick"]["normal"]])
    (doubt,) = _of_kind(case, "supplied flows out of balance")
    assert doubt.settle[0].path == ("groups", "feed", "velocity")
    case.apply(doubt)
    assert _of_kind(case, "supplied flows out of balance") == []


def test_names_of_groups_in_the_file_are_doubted_where_the_case_picks_them(tmp_path: Path) -> None:
    case = manifold(tmp_path)
    case.drop("surface", "groups")
    for name in ("spindle", "gallery"):
        case.drop("groups", name)
    case.set(
        "groups", "feed", value={"role": "inlet", "pick": {"normal": [-0.9004, 0.125, -0.4166], "near": [0, 0, 0]}}
    )
    case.set("groups", "housing", value={"role": "wall", "rest": True})
    (doubt,) = _of_kind(case, "groups in file not used")
    assert doubt.advice == 'in place of the picks: surface.groups = { array = "region" }'


def test_an_error_in_the_flow_is_not_taken_for_a_unit() -> None:
    # a net flux that a fault alone makes would vanish with the velocity in mm/s; that explains nothing
    pipe, mean = poiseuille(0.1, 2.0, 0.4, 870.0), 870.0 * 2.0**2 * np.pi * 0.01
    surface = solids.pipe(0.1, 0.5, 24, 2, 4).surface({"inlet": "inlet", "outlet": "outlet"}, rest="wall")
    faster = pipe.velocity(surface.points) * np.where(surface.points[:, 2:] > 0.49, 1.05, 1.0)
    flow = pipe.lay(surface, velocity=faster)
    named = tuple(NamedArray(quantity, (quantity,), 1.0) for quantity in ("velocity", "pressure", "traction"))
    stated = frozenset({"flow.pressure.kind", "flow.pressure.head", "flow.traction.acts_on", "fluid.gravity"})
    balance = balance_of(surface, flow).balance
    assert np.linalg.norm(balance.momentum.residual()) > 0.05 * mean
    assert review_of(Evidence(surface, flow, balance, named=named, stated=stated)).doubts == ()


def test_arrays_whose_names_say_nothing_are_reviewed_too(tmp_path: Path) -> None:
    case = manifold(tmp_path)
    case.mesh.point_data["x9"] = np.zeros((case.mesh.n_points, 9))
    case.drop("flow", "traction")
    case.set("flow", "stress", value={"array": "x9"})
    assert case.review().doubts == ()


def test_a_flow_without_friction_needs_no_traction(fluxmesh, block) -> None:
    # the fluid slips along the walls of the block
    block.write(CASE.replace('traction = { array = "tau" }\n', ""))
    assert "No traction" not in fluxmesh("check", block.case).out


def test_doubts_count_with_strict_only(fluxmesh, block) -> None:
    assert fluxmesh("check", block.case, "--strict").code == 0
    block.write(CASE.replace('role = "inlet"', 'role = "outlet"'))
    ran = fluxmesh("check", block.case)
    assert ran.code == 0
    assert "1 doubt:" in ran.out
    assert "'feed' is an outlet, but its flow enters" in ran.out
    assert "Why it matters: Roles are swapped" in ran.out
    assert 'groups.feed.role = "inlet"' in ran.out
    assert fluxmesh("check", block.case, "--strict").code == 1


def test_names_are_never_read_as_markup(fluxmesh, block) -> None:
    mesh = block.mesh()
    mesh.cell_data["[bold]x[/] y"] = np.zeros(mesh.n_cells)
    block.save(mesh)
    text = CASE.replace("[groups.feed]", '[groups."[red]feed[/red]"]').replace('role = "inlet"', 'role = "outlet"')
    block.write(text)
    ran = fluxmesh("check", block.case)
    assert "'[red]feed[/red]' is an outlet" in ran.out
    assert 'groups."[red]feed[/red]".role = "inlet"' in ran.out
    assert "[bold]x[/] y" in ran.out


def test_a_line_to_copy_is_never_broken(fluxmesh, block) -> None:
    name = "a_group_with_a_very_long_name_" * 5
    block.write(CASE.replace("[groups.feed]", f"[groups.{name}]").replace('role = "inlet"', 'role = "outlet"'))
    assert f'groups.{name}.role = "inlet"' in fluxmesh("check", block.case).out


def test_a_rigid_motion_is_found_and_another_is_not() -> None:
    rng = np.random.default_rng(7)
    places, weights = rng.normal(loc=5.0, size=(200, 3)), rng.uniform(0.5, 1.5, 200)
    turn = np.array([0.0, 2.0, -1.0])
    velocities = np.array([1.0, 0, 3.0]) + np.cross(turn, places)
    motion = rigid_motion(places, velocities, weights)
    assert motion.misfit < 1e-12
    assert_allclose(motion.rotation, turn, atol=1e-12)
    centre = np.average(places, axis=0, weights=weights)
    assert_allclose(motion.velocity, np.array([1.0, 0, 3.0]) + np.cross(turn, centre), atol=1e-12)
    assert rigid_motion(places, places * [1.0, -1.0, 2.0], weights).misfit > 0.1


@pytest.mark.parametrize(
    ("density", "pressure", "fits"),
    [
        (998.0, 1e5, True),
        (13534.0, 1e5, True),
        (1.2, 1e5, True),
        (62.4, 1e5, False),
        (62.4, 8e6, True),
        (0.01, 1e5, False),
    ],
)
def test_densities_of_common_fluids(density: float, pressure: float, fits: bool) -> None:
    assert is_some_fluid(density, pressure) is fits


def test_a_doubt_reads_as_a_line_of_the_case() -> None:
    doubt = Doubt("k", "s", "m", (Setting(("groups", 'a "b"', "role"), "open"),), "or move it")
    assert doubt.remedy() == 'groups."a \\"b\\"".role = "open"; or move it'
    assert GRAVITY.shape == (3,)
