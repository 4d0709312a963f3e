"""Scalars that the flow carries: their integrals, their balances, and how a case lays them."""

from __future__ import annotations

import json
import os
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from fluxmesh import balance_of, lay_flow
from fluxmesh.balance.carried import CarriedBalance, carried_balance
from fluxmesh.balance.storage import Storage
from fluxmesh.case.read import read_case
from fluxmesh.errors import CaseError, FieldError, GroupError
from fluxmesh.field.field import absent_field
from fluxmesh.field.flow import Flow, face_arrays_of, integrate_flow
from fluxmesh.field.scalars import ScalarFlux, at_ports, integrate_scalar, lay_scalar
from fluxmesh.integral.layout import AT_SAMPLE
from fluxmesh.integral.samples import sample_places
from fluxmesh.job.laid import lay_case
from fluxmesh.job.scalars import Carried, Scalars, balance_scalars, scalars_of
from fluxmesh.job.shape import read_shape
from fluxmesh.report.laws import carried_data, carried_lines, carried_table
from fluxmesh.surface.surface import ControlSurface
from tests.conftest import CASE, Block
from tests.solids import any_polyhedron, box, pipe, sphere
from tests.test_classic_results import PORTS
from tests.verification import Verify

PLACES = {"density": "faces", "velocity": "nodes"}


def flowing(surface: ControlSurface, seed: int, **more: Any) -> Flow:
    rng = np.random.default_rng(seed)
    velocity = rng.standard_normal((surface.point_count, 3))
    density = rng.uniform(1, 2, surface.face_count)
    return lay_flow(surface, **{"density": density, "velocity": velocity, "at": PLACES, **more})


# ---- integrals ------------------------------------------------------------------------------


@settings(max_examples=30, deadline=None)
@given(seed=st.integers(0, 2**32 - 1), at=st.sampled_from(["nodes", "faces", "one"]))
def test_a_scalar_is_integrated_as_the_pressure_is(seed: int, at: str) -> None:
    # ∫p dA, ∫p ρV·n dA and ∫p V·n dA of the table, with the scalar as pressure
    surface = any_polyhedron(seed).surface()
    rng = np.random.default_rng(seed)
    count = {"nodes": surface.point_count, "faces": surface.face_count, "one": 1}[at]
    values = rng.standard_normal(count) if count > 1 else 0.7
    place = None if at == "one" else at
    places = {**PLACES, **({} if place is None else {"pressure": place})}
    flow = flowing(surface, seed, pressure=values, at=places)
    field = lay_scalar(surface, "dye", values, at=place)
    table = integrate_flow(surface, flow)
    found = integrate_scalar(surface, flow, field)
    assert found.known.all()
    for name, value in (("area", found.area), ("mass_flow", found.mass_flow), ("volume_flow", found.volume_flow)):
        assert_allclose(value, table.column(f"pressure_{name}"), rtol=1e-14, atol=1e-14 * float(table.total("area")))


def test_a_scalar_of_one_is_the_flow_itself_whatever_the_threads() -> None:
    surface = sphere(4).surface()
    flow = flowing(surface, 3)
    table = integrate_flow(surface, flow)
    one = lay_scalar(surface, "one", 1.0)
    found = [integrate_scalar(surface, flow, one, threads=n) for n in (1, 2)]
    assert found[0].mass_flow.tolist() == found[1].mass_flow.tolist()
    assert_allclose(found[0].mass_flow, table.column("mass_flow"), rtol=1e-13)
    assert_allclose(found[0].volume_flow, table.column("volume_flow"), rtol=1e-13)
    assert_allclose(found[0].area, table.column("area"), rtol=1e-13)


@pytest.mark.parametrize("quads", [False, True])
def test_other_groups_are_not_looked_at(quads: bool) -> None:
    # walls may hold anything: their values are never read, whatever the order of the faces
    surface = box((0, 0, 0), (1, 1, 1), 6, quads=quads).surface({"x-": "inlet", "x+": "outlet"}, rest="wall")
    flow = lay_flow(surface, density=1.5, velocity=(2.0, 0, 0))
    values = np.where(np.isin(surface.group_of_face, (0, 1)), 4.0, np.nan)
    found = integrate_scalar(surface, flow, lay_scalar(surface, "dye", values, at="faces"))
    assert_allclose(found.mass_flow, [-12.0, 12.0, 0, 0, 0, 0], rtol=1e-14)
    assert found.known.tolist() == [True, True, False, False, False, False]
    chosen = integrate_scalar(
        surface, flow, lay_scalar(surface, "dye", 2.0), groups=np.array([False, True, True, False, False, False])
    )
    assert_allclose(chosen.volume_flow, [0, 4.0, 0, 0, 0, 0], rtol=1e-14, atol=1e-15)
    assert_allclose(chosen.area, [0, 2.0, 2.0, 0, 0, 0], rtol=1e-14)


def test_values_at_quadrature_points_are_exact_for_products_of_degree_four(verify: Verify) -> None:
    # φ = x² y through the face x = 1 of the unit cube, with the speed z: ∫∫ y z dy dz = 1/4
    surface = box((0, 0, 0), (1, 1, 1), 2).surface({"x-": "inlet", "x+": "outlet"}, rest="wall")
    velocity = np.zeros((surface.point_count, 3))
    velocity[:, 0] = surface.points[:, 2]
    flow = lay_flow(surface, density=3.0, velocity=velocity)
    samples = sample_places(face_arrays_of(surface), np.ones(surface.face_count, np.bool_))
    at = samples.places
    field = replace(
        absent_field(surface, "dye", 1),
        where=np.full(6, AT_SAMPLE, np.int8),
        sample=at[:, 0] ** 2 * at[:, 1] / 5,
        scale=5.0,
    )
    found = integrate_scalar(surface, replace(flow, sample_start=samples.start), field)
    assert_allclose(found.volume_flow[:2], [0, 0.25], rtol=1e-13, atol=1e-15)
    assert_allclose(found.mass_flow[:2], [0, 0.75], rtol=1e-13, atol=1e-15)
    with pytest.raises(FieldError, match="are not at those of the flow"):
        integrate_scalar(surface, flow, field)
    verify(
        what="x² y carried with the speed z through the face x = 1 of the unit cube",
        source="by hand: the integral of y z is 1/4",
        expected=0.25,
        got=found.volume_flow[1],
        tolerance=1e-12,
        why="rule of degree four: round-off",
        kind="law",
        law="carried",
    )


def test_bad_values_are_named() -> None:
    surface = box((0, 0, 0), (1, 1, 1)).surface({"x-": "inlet", "x+": "outlet"}, rest="wall")
    flow = lay_flow(surface, density=1.0, velocity=(1.0, 0, 0))
    values = np.ones(surface.face_count)
    values[surface.group_of_face == 1] = np.inf
    field = lay_scalar(surface, "salt", values, at="faces")
    with pytest.raises(FieldError, match=r"integrals of the salt over group 'x\+' are not finite"):
        integrate_scalar(surface, flow, field)
    with pytest.raises(FieldError, match=r"2 of 12 face values are not finite, .* in group 'x\+'"):
        at_ports(surface, field)
    cold = lay_scalar(surface, "temperature", np.where(surface.group_of_face == 1, 0.0, 300.0), at="faces")
    with pytest.raises(FieldError, match="2 of 12 face values are zero or negative"):
        at_ports(surface, cold, positive=True)
    at_ports(surface, cold)
    with pytest.raises(GroupError, match="supplied for group 'lid'"):
        lay_scalar(surface, "salt", supplied={"lid": 1.0})
    with pytest.raises(FieldError, match="salt is nan"):
        lay_scalar(surface, "salt", supplied={"x-": float("nan")})


# ---- balances -------------------------------------------------------------------------------


def tee(values: dict[str, float], **more: Any) -> CarriedBalance:
    """Two streams, 2 and 1 kg/s, mix in a box and leave."""
    roles = {"x-": "inlet", "y-": "inlet", "x+": "outlet"}
    surface = box((0, 0, 0), (1, 1, 1)).surface(roles, rest="wall")
    supplied = {"x-": (2, 0, 0), "y-": (0, 1, 0), "x+": (3, 0, 0)}
    flow = lay_flow(surface, density=1.25, supplied={k: {"velocity": v} for k, v in supplied.items()})
    scalar = integrate_scalar(surface, flow, lay_scalar(surface, "salt", supplied=values))
    done = balance_of(surface, flow).balance
    return carried_balance(done.table, done.setting, scalar, **more)


def test_two_streams_mix(verify: Verify) -> None:
    mixed = {"x-": 30.0, "y-": 6.0, "x+": 22.0}  # (2·30 + 6) / 3
    found = tee(mixed, unit="g")
    assert_allclose(found.inflow, 1.25 * 66, rtol=1e-14)
    assert_allclose(found.outflow, 1.25 * 66, rtol=1e-14)
    assert found.relative < 1e-15
    assert_allclose(found.group_mean[[0, 2, 1]], [30, 6, 22], rtol=1e-14)
    assert np.isnan(found.group_mean[3:]).all()
    # an amount a volume does not know the density
    by_volume = tee(mixed, per="volume")
    assert_allclose(by_volume.outflow, 66, rtol=1e-14)
    assert by_volume.relative < 1e-15
    # less than enters: something eats it, and then it closes
    reacting = tee({**mixed, "x+": 20.0})
    assert_allclose(reacting.residual, -1.25 * 6, rtol=1e-13)
    assert_allclose(reacting.relative, 6 / (66 + 60), rtol=1e-13)
    assert tee({**mixed, "x+": 20.0}, source=-7.5).relative < 1e-15
    assert tee({**mixed, "x+": 20.0}, storage=Storage(carried={"salt": 7.5})).relative < 1e-15
    assert tee({**mixed, "x+": 20.0}, storage=Storage(carried={"salt": 3.5}), source=-4.0).relative < 1e-15
    verify(
        what="Two streams, 2 and 1 kg/s with 30 and 6 g/kg, mix: balance left over with 22 g/kg, relative",
        source="mixing rule: (2 · 30 + 6) / 3",
        expected=0,
        got=found.relative,
        tolerance=1e-12,
        why="round-off",
        kind="law",
        law="carried",
    )


def test_what_is_not_known_is_not_judged() -> None:
    found = tee({"x-": 30.0, "x+": 22.0})
    assert found.residual is None
    assert found.relative is None
    assert found.unknown == ("no salt is known at y-",)
    unsteady = tee({"x-": 30.0, "y-": 6.0, "x+": 22.0}, storage=Storage(mass=1.0))
    assert unsteady.storage is None
    assert unsteady.unknown == ("the rate of the amount inside is not known",)
    assert carried_lines([unsteady]) == [
        "Only what the flow carries is counted: diffusion through the ports is not.",
        "salt cannot be balanced: the rate of the amount inside is not known.",
    ]


def test_shape_of_profile_counts(verify: Verify) -> None:
    # dye φ = 1 - r² in a parabolic pipe flow w = 2U(1 - r²): ∫φ w dA = 2π U / 3, where the product of means gives π U/2
    errors = []
    for n in (24, 48):
        surface = pipe(1.0, 2.0, n, 1, n // 3).surface(PORTS, rest="wall")
        s = (surface.points[:, :2] ** 2).sum(axis=1)
        velocity = np.zeros((surface.point_count, 3))
        velocity[:, 2] = 3 * (1 - s)
        flow = lay_flow(surface, density=1.0, velocity=velocity)
        scalar = integrate_scalar(surface, flow, lay_scalar(surface, "dye", 1 - s, at="nodes"))
        errors.append(abs(scalar.volume_flow.max() / np.pi - 1))
        done = balance_of(surface, flow).balance
        assert carried_balance(done.table, done.setting, scalar).relative < 1e-13
    assert errors[1] < 0.01
    assert errors[0] / errors[1] > 3.5
    verify(
        what="Dye 1 - r² in a parabolic pipe flow: what passes over pi U R²",
        source="by hand: 2/3, where the product of the means gives 1/2",
        expected=2 / 3,
        got=scalar.volume_flow.max() / (np.pi * 1.5),
        tolerance=0.01,
        why="48 facets around; at least order 1.8 is asserted beside",
        kind="law",
        law="carried",
    )


def test_the_whole_of_a_half_model_carries_twice() -> None:
    surface = box((0, 0, 0), (1, 1, 1)).surface({"x-": "inlet", "x+": "outlet", "y-": "symmetry"}, rest="wall")
    flow = lay_flow(surface, density=1.0, velocity=(1.0, 0, 0), pressure=0.0)
    done = balance_of(surface, flow, mirror=True).balance
    dye = Carried(lay_scalar(surface, "dye", 4.0))
    energy, carried = balance_scalars(surface, flow, done, Scalars(carried=(dye,)), mirror=True)
    assert_allclose(carried[0].inflow, 8.0, rtol=1e-14)
    assert len(carried[0].group_flux) == len(done.setting.groups) == 5
    assert_allclose(energy.group_kinetic[:2], [-1.0, 1.0], rtol=1e-14)
    assert_allclose(energy.loss, 0, atol=1e-14)


def test_tables_and_data() -> None:
    from rich.console import Console

    roles = {"x-": "inlet", "y-": "inlet", "x+": "outlet"}
    surface = box((0, 0, 0), (1, 1, 1)).surface(roles, rest="wall")
    setting = balance_of(surface, lay_flow(surface)).balance.setting
    found = [tee({"x-": 30.0, "y-": 6.0, "x+": 22.0}, unit="g"), tee({"x-": 1.0}, source=0.5)]
    with open(os.devnull, "w", encoding="utf-8") as nowhere:
        console = Console(width=120, record=True, file=nowhere)
        console.print(carried_table(found, setting))
    text = console.export_text()
    for words in (
        "salt, g/s",
        "salt, 1/s",
        "mean 30.000",
        "not known",
        "arises inside (given)",
        "residual over entries",
    ):
        assert words in text
    data = carried_data(found[:1], setting)
    assert data["salt"]["groups"]["x-"]["mean"] == pytest.approx(30.0)
    assert set(data["salt"]["groups"]) == {"x-", "x+", "y-"}
    assert json.loads(json.dumps(data, default=float))["salt"]["residual"] == pytest.approx(0.0, abs=1e-12)


# ---- from a case ----------------------------------------------------------------------------


def laid(path: Path) -> tuple[Scalars, ControlSurface, Flow]:
    case = read_case(path)
    shape = read_shape(case)
    flow = lay_case(case, shape)
    return scalars_of(case, shape, flow, None), shape.surface, flow


def with_arrays(block: Block) -> None:
    mesh = block.mesh()
    mesh.point_data["T"] = 293.15 + mesh.points[:, 0]
    mesh.cell_data["S"] = np.where(mesh.cell_data["region"] == 3, np.nan, 35.0)
    block.save(mesh)


SALT = """
[[carried]]
name = "salt"
array = "S"
unit = "g"
source = 0.5
[[carried]]
name = "age"
per = "volume"
"""


def test_a_case_lays_its_scalars(block: Block) -> None:
    with_arrays(block)
    text = CASE.replace("[groups.feed]", 'temperature = { array = "T", unit = "K" }\n[groups.feed]')
    text = text.replace("[flow]", 'heat_capacity = "4184 J/(kg K)"\n[energy]\nheat = "8 MW"\n[flow]')
    text = text.replace('role = "inlet"', 'role = "inlet"\ncarried = { age = 2.0, salt = 30.0 }')
    text = text.replace('role = "outlet"', 'role = "outlet"\ncarried = { age = 2.5 }\ntemperature = "295 K"')
    found, surface, flow = laid(block.write(text + SALT))
    assert found.heat == 8e6
    assert found.shaft_power is None
    assert found.heat_capacity == 4184
    # groups before arrays, arrays before the fluid; walls have none
    temperature = integrate_scalar(surface, flow, found.temperature)
    assert_allclose(temperature.volume_flow, [-2 * 293.15, 2 * 295, 0], rtol=1e-14)
    salt, age = found.carried
    assert (salt.field.name, salt.per, salt.unit, salt.source) == ("salt", "mass", "g", 0.5)
    assert (age.field.name, age.per, age.source) == ("age", "volume", 0.0)
    done = balance_of(surface, flow).balance
    energy, carried = balance_scalars(surface, flow, done, found)
    assert energy.basis == "temperature"
    assert_allclose(energy.left, 2000 * 4184 * 1.85 - 8e6, rtol=1e-9)
    assert_allclose(carried[0].residual, 2000 * 5 - 0.5, rtol=1e-12)
    assert_allclose(carried[1].residual, 2 * 0.5, rtol=1e-12)


@pytest.mark.parametrize("source", ["volume", "points"])
def test_scalars_are_sampled_with_the_flow(block: Block, source: str) -> None:
    import pyvista

    grid = pyvista.ImageData(dimensions=(4, 4, 4), spacing=(1 / 3,) * 3).cast_to_unstructured_grid()
    grid.point_data["U"] = np.tile([2.0, 0, 0], (grid.n_points, 1))
    grid.point_data["p"] = np.full(grid.n_points, 500.0)
    grid.point_data["h"] = 1000 * grid.points[:, 0]
    grid.point_data["S"] = 3 + grid.points[:, 1]
    flow_table = 'velocity = { array = "U" }\npressure = { array = "p" }\nenthalpy = { array = "h", unit = "kJ/kg" }\n'
    if source == "volume":
        grid.save(block.folder / "inside.vtu")
        flow_table += 'volume = "inside.vtu"\n'
    else:
        rows = np.column_stack([grid.points, *(grid.point_data[name] for name in ("U", "p", "h", "S"))])
        np.savetxt(block.folder / "c.csv", rows, delimiter=",", header="x,y,z,Ux,Uy,Uz,p,h,S", comments="")
        flow_table += 'points = "c.csv"\n'
        flow_table = flow_table.replace('"U"', '["Ux", "Uy", "Uz"]')
    start, end = CASE.index('velocity = { array = "U" }'), CASE.index("[groups.feed]")
    text = CASE[:start] + flow_table + CASE[end:] + '[[carried]]\nname = "salt"\narray = "S"\n'
    from fluxmesh.job.laid import _samples
    from fluxmesh.job.sampled import sample_source

    case = read_case(block.write(text))
    shape = read_shape(case)
    flow = lay_case(case, shape)
    sampled = sample_source(case, shape, _samples(case, shape))
    found = scalars_of(case, shape, flow, sampled)
    done = balance_of(shape.surface, flow).balance
    energy, carried = balance_scalars(shape.surface, flow, done, found)
    assert energy.basis == "enthalpy"
    assert_allclose(energy.left, 2000 * 1e6, rtol=1e-5)
    assert_allclose(carried[0].outflow, 2000 * 3.5, rtol=1e-5)


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("[flow]", '[energy]\nheat = "1 kW"\n[flow]', "heat is given, but nothing says what heat the flow carries"),
        ("[flow]", '[[carried]]\nname = "salt"\narray = "salinity"\n[flow]', r"no array 'salinity' in block.vtp"),
        ("[flow]", '[[carried]]\nname = "salt"\narray = "U"\n[flow]', "has 3 components"),
        ("[flow]", 'heat_capacity = 4184\n[flow]\ntemperature = { array = "cold" }', "are zero or negative"),
    ],
)
def test_scalars_that_cannot_be_used_are_refused(block: Block, old: str, new: str, message: str) -> None:
    mesh = block.mesh()
    mesh.point_data["cold"] = mesh.points[:, 0] - 0.5
    block.save(mesh)
    with pytest.raises((FieldError, CaseError), match=message):
        laid(block.change(old, new))


def test_a_liquid_without_thermal_data_tells_its_loss_alone(block: Block) -> None:
    found, surface, flow = laid(block.write())
    done = balance_of(surface, flow).balance
    energy, carried = balance_scalars(surface, flow, done, found)
    assert energy.basis == "mechanical"
    assert carried == ()
    # what goes in by pressure, 500 Pa each side, comes out: the head was put back
    assert_allclose(energy.loss, 0, atol=1e-9 * energy.loss_size)
    # a fluid whose density varies has no such law
    vary = lay_flow(surface, density=np.linspace(1, 2, surface.face_count), velocity=(2.0, 0, 0), pressure=0.0)
    assert balance_scalars(surface, vary, balance_of(surface, vary).balance, Scalars())[0] is None


def test_fluxes_of_some_groups_are_taken_a_number_of_times() -> None:
    scalar = ScalarFlux("dye", *(np.arange(3.0) for _ in range(3)), np.array([True, False, True]))
    kept = scalar.of_groups(np.array([False, True, True]), 4.0)
    for values in (kept.area, kept.mass_flow, kept.volume_flow):
        assert values.tolist() == [4.0, 8.0]
    assert kept.known.tolist() == [False, True]
