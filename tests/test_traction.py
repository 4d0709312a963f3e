"""Traction from a stress tensor, or from a velocity gradient with the viscosity."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from fluxmesh import balance_of, lay_flow
from fluxmesh.errors import FieldError
from fluxmesh.field.field import Field, absent_field, array_field, constant_field
from fluxmesh.field.flow import face_arrays_of, integrate_flow, still_flow
from fluxmesh.field.traction import groups_to_sample, isotropic_share, traction_from_gradient, traction_from_stress
from fluxmesh.integral.layout import ABSENT, AT_FACE, AT_SAMPLE
from fluxmesh.integral.samples import Samples, interpolate_at_samples, sample_places
from fluxmesh.integral.table import IntegralTable
from fluxmesh.surface.surface import ControlSurface
from tests.flows import face_frames, landau_force, landau_squire, velocity_gradient
from tests.measures import moments, observed_order
from tests.solids import (
    Solid,
    any_polyhedron,
    box,
    in_triangles,
    odd_body,
    prism,
    quadratic,
    sphere,
    torus,
)

VTK_ORDER, OTHER_ORDER = "xx yy zz xy yz xz", "xx yy zz yz xz xy"
EPSILON = np.zeros((3, 3, 3))
for _i, _j, _k in ((0, 1, 2), (1, 2, 0), (2, 0, 1)):
    EPSILON[_i, _j, _k], EPSILON[_i, _k, _j] = 1.0, -1.0


def any_body(seed: int) -> Solid:
    """Any polyhedron, or a curved, twisted or deeply dented body."""
    curved = (
        quadratic(box((0, 0, 0), (1, 2, 3))),
        sphere(1, 1.3, (0.2, 0.1, 0), curved=True),
        torus(1.0, 0.4, 6, 5, quadratic=8),
        torus(1.0, 0.4, 6, 5, quadratic=9),
        torus(1.0, 0.4, 6, 5),  # twisted quads
        # a fan about the mean corner of the end has triangles the other way round
        prism(np.array([[0, 0], [4, 0], [4, 3], [3.9, 0.1], [0.1, 0.1], [0, 3]]), 0, 1),
    )
    return curved[seed // 2 % 6] if seed % 2 else any_polyhedron(seed // 2)


def symmetric(rng: np.random.Generator, *shape: int) -> np.ndarray:
    part = rng.standard_normal((*shape, 3, 3))
    return part + np.swapaxes(part, -1, -2)


def six(tensor: np.ndarray, order: str) -> np.ndarray:
    """Components of symmetric tensors (n, 3, 3) in an order that is spelt out."""
    return np.stack([tensor[..., "xyz".index(a), "xyz".index(b)] for a, b in order.split()], axis=-1)


def laid(surface: ControlSurface, values: Any, at: str, name: str = "stress", **options: Any) -> Field:
    values = np.asarray(values)
    return array_field(surface, name, values.shape[-1], values, at=at, **options)


def sampled_all(surface: ControlSurface) -> Samples:
    return sample_places(face_arrays_of(surface), np.ones(surface.face_count, np.bool_))


def sampled_for(surface: ControlSurface, *parts: Field) -> Samples:
    """What a caller does: sample the groups that need it."""
    return sample_places(face_arrays_of(surface), groups_to_sample(surface, *parts)[surface.group_of_face])


def table_of(surface: ControlSurface, traction: Field, samples: Samples | None = None) -> IntegralTable:
    flow = replace(still_flow(surface), traction=traction)
    if samples is not None:
        flow = replace(flow, sample_start=samples.start)
    return integrate_flow(surface, flow)


def twisted(seed: int) -> bool:
    """Whether `any_body` is one of quads that are not plane."""
    return seed // 2 % 6 == 4 if seed % 2 else seed // 2 % 5 == 2


def assert_uniform_stress(table: IntegralTable, stress: np.ndarray, *, moment: bool = True) -> None:
    # ∫ S n dA = S A and ∫ x × S n dA = eps_ijk S_kl ∫ x_j n_l dA for each group, to round-off
    size = float(np.abs(stress).sum() * table.total("area"))
    force = table.column("area_vector") @ stress.T
    assert_allclose(table.column("viscous_force"), force, rtol=0, atol=1e-13 * size)
    if not moment:
        return
    firsts = table.column("position_normal").reshape(-1, 3, 3)
    about = np.einsum("ijk,kl,gjl->gi", EPSILON, stress, firsts)
    assert_allclose(table.column("moment_of_viscous"), about, rtol=0, atol=1e-12 * size)


# ---- interpolation at the kernel's points ---------------------------------------------------


@settings(max_examples=30, deadline=None)
@given(seed=st.integers(0, 2**32 - 1))
def test_values_interpolated_at_samples_are_those_the_kernel_takes_from_points(seed: int) -> None:
    surface = any_body(seed).surface()
    values = np.random.default_rng(seed).standard_normal((surface.point_count, 3))
    on_points = array_field(surface, "traction", 3, values, at="nodes")
    samples = sampled_all(surface)
    sample = interpolate_at_samples(face_arrays_of(surface), np.ones(surface.face_count, np.bool_), values)
    where = np.full(len(surface.groups), AT_SAMPLE, np.int8)
    at_samples = replace(absent_field(surface, "traction", 3), where=where, sample=sample)
    one, two = table_of(surface, on_points), table_of(surface, at_samples, samples)
    size = float(np.abs(values).max() * one.total("area"))
    for name in ("viscous_force", "moment_of_viscous"):
        assert_allclose(two.column(name), one.column(name), rtol=0, atol=1e-12 * size)
    # one column at a time is the same, but for the order of its sums
    single = interpolate_at_samples(face_arrays_of(surface), np.ones(surface.face_count, np.bool_), values[:, 1])
    assert_allclose(single, sample[:, 1], rtol=0, atol=4e-15 * np.abs(values).max())


# ---- stress ---------------------------------------------------------------------------------


@settings(max_examples=60, deadline=None)
@given(
    seed=st.integers(0, 2**32 - 1),
    at=st.sampled_from(["nodes", "faces", "group", "samples"]),
    form=st.sampled_from([VTK_ORDER, OTHER_ORDER, "rows"]),
)
def test_a_uniform_stress_pulls_with_the_area_vector(seed: int, at: str, form: str) -> None:
    # non-convex and twisted polygons and curved faces too
    rng = np.random.default_rng(seed)
    surface = any_body(seed).surface()
    stress, unit = symmetric(rng), 1000.0  # exported in kPa
    parts = (stress.reshape(9) if form == "rows" else six(stress, form)) / unit
    if at == "group":
        field = constant_field(surface, "stress", parts.size, list(parts * unit))
    elif at == "samples":
        samples = sampled_all(surface)
        field = constant_field(surface, "stress", parts.size, [0.0] * parts.size)
        field = replace(
            field,
            where=np.full(len(surface.groups), AT_SAMPLE, np.int8),
            scale=unit,
            sample=np.tile(parts, (samples.face.size, 1)),
        )
    else:
        count = surface.point_count if at == "nodes" else surface.face_count
        field = laid(surface, np.tile(parts, (count, 1)), at, scale=unit)
    samples = sampled_for(surface, field)
    found = traction_from_stress(surface, field, order=VTK_ORDER if form == "rows" else form, samples=samples)
    # one traction on a face that is not plane has the force of the stress, but not its moment
    whole = not (twisted(seed) and at in ("faces", "group"))
    assert_uniform_stress(table_of(surface, found, samples), stress, moment=whole)


@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 2**32 - 1))
def test_a_linear_stress_equals_its_volume_integrals(seed: int) -> None:
    # Gauss: ∮ S n dA = (dS_ij/dx_j) V, and ∮ x × S n dA = ∫ x × div S dv (S symmetric) = first moment × div S
    rng = np.random.default_rng(seed)
    body = any_polyhedron(seed)
    surface, held = body.surface(), moments(body)
    slope = symmetric(rng, 3)  # dS/dx_k
    stress = symmetric(rng) + np.einsum("nk,kij->nij", surface.points, slope)
    field = laid(surface, six(stress, VTK_ORDER), "nodes")
    samples = sampled_for(surface, field)
    ledger = table_of(surface, traction_from_stress(surface, field, samples=samples), samples)
    divergence = np.einsum("jij->i", slope)
    size = float(np.abs(stress).max() * ledger.total("area"))
    assert_allclose(ledger.total("viscous_force"), held.volume * divergence, rtol=0, atol=1e-13 * size)
    moment = ledger.total("moment_of_viscous") + np.cross(ledger.origin, ledger.total("viscous_force"))
    reach = 1 + np.abs(surface.points).max()
    assert_allclose(moment, np.cross(held.first, divergence), rtol=0, atol=1e-12 * size * reach)


def test_six_components_are_read_as_vtk_reads_them() -> None:
    # outside check: VTK's own filter takes single components out of a symmetric tensor
    from vtkmodules.util.numpy_support import numpy_to_vtk, vtk_to_numpy
    from vtkmodules.vtkCommonCore import vtkPoints
    from vtkmodules.vtkCommonDataModel import vtkPolyData
    from vtkmodules.vtkFiltersExtraction import vtkExtractTensorComponents

    parts = np.array([2.0, 3.0, 5.0, 7.0, 11.0, 13.0])
    point, cloud = vtkPoints(), vtkPolyData()
    point.InsertNextPoint(0, 0, 0)
    cloud.SetPoints(point)
    cloud.GetPointData().SetTensors(numpy_to_vtk(parts[None], deep=True))
    stress = np.zeros((3, 3))
    for i in range(3):
        for j in range(3):
            taken = vtkExtractTensorComponents()
            taken.SetInputData(cloud)
            taken.ExtractScalarsOn()
            taken.SetScalarComponents(i, j)
            taken.Update()
            stress[i, j] = vtk_to_numpy(taken.GetOutput().GetPointData().GetScalars())[0]
    surface = box((0, 0, 0), (1, 2, 3)).surface()
    found = traction_from_stress(surface, constant_field(surface, "stress", 6, list(parts)))
    assert_uniform_stress(table_of(surface, found), stress)


def test_each_face_at_an_edge_has_its_own_traction() -> None:
    surface = box((0, 0, 0), (1, 1, 1), quads=True).surface()
    stress = np.diag([1.0, 2.0, 4.0])
    field = laid(surface, np.tile(six(stress, VTK_ORDER), (8, 1)), "nodes")
    samples = sampled_for(surface, field)
    found = traction_from_stress(surface, field, samples=samples)
    _, normals = face_frames(surface)
    assert_allclose(found.sample, (normals @ stress)[samples.face], rtol=0, atol=1e-15)
    assert found.where.tolist() == [AT_SAMPLE] * 6


def test_groups_without_data_stay_without_and_faces_without_samples_are_nan() -> None:
    body = box((0, 0, 0), (1, 1, 1), 2)
    surface = body.surface({"x-": "inlet", "x+": "outlet"}, rest="wall")
    covered = np.array([name in ("x-", "y+") for name in body.groups])
    values = np.full((surface.point_count, 6), np.nan)
    used = np.unique(np.concatenate([np.array(body.faces)[body.groups[name]].ravel() for name in ("x-", "y+")]))
    values[used] = [1.0, 2.0, 3.0, 0.5, 0.25, 0.125]
    field = laid(surface, values, "nodes", groups=covered)
    assert groups_to_sample(surface, field).tolist() == covered.tolist()
    chosen = covered.copy()
    chosen[list(body.groups).index("z-")] = True  # sampled for another field
    samples = sample_places(face_arrays_of(surface), chosen[surface.group_of_face])
    found = traction_from_stress(surface, field, samples=samples)
    assert found.where.tolist() == [AT_SAMPLE if there else ABSENT for there in covered]
    mine = covered[surface.group_of_face[samples.face]]
    assert np.isfinite(found.sample[mine]).all()
    assert np.isnan(found.sample[~mine]).all()
    forces = table_of(surface, found, samples).column("viscous_force")
    stress = np.array([[1, 0.5, 0.125], [0.5, 2, 0.25], [0.125, 0.25, 3]])
    for name, force in zip(body.groups, forces):
        wanted = {"x-": -stress[0], "y+": stress[1]}.get(name, np.zeros(3))
        assert_allclose(force, wanted, rtol=0, atol=1e-15)


def test_face_stress_on_straight_faces_needs_no_samples() -> None:
    surface = box((0, 0, 0), (1, 2, 3), 2).surface()
    rng = np.random.default_rng(1)
    stress = symmetric(rng, surface.face_count)
    found = traction_from_stress(surface, laid(surface, six(stress, OTHER_ORDER), "faces"), order=OTHER_ORDER)
    assert found.where.tolist() == [AT_FACE] * 6
    _, normals = face_frames(surface)
    assert_allclose(found.face, np.einsum("fij,fj->fi", stress, normals), rtol=0, atol=1e-14)


def test_a_stress_with_the_pressure_left_in_shows() -> None:
    rng = np.random.default_rng(2)
    surface = box((0, 0, 0), (1, 1, 1)).surface()
    viscous = symmetric(rng, 8)
    viscous -= np.trace(viscous, axis1=1, axis2=2)[:, None, None] / 3 * np.eye(3)
    whole = viscous - 50 * np.eye(3)
    for form in (lambda s: six(s, VTK_ORDER), lambda s: s.reshape(-1, 9)):
        assert isotropic_share(laid(surface, form(viscous), "nodes")) < 1e-15
        assert 0.99 < isotropic_share(laid(surface, form(whole), "nodes")) < 1.0
    # by hand: S = diag(3, 0, 0) has the isotropic part diag(1, 1, 1), 3 of its square 9; off-diagonal parts count twice
    assert_allclose(isotropic_share(constant_field(surface, "stress", 6, [3.0, 0, 0, 0, 0, 0])) ** 2, 1 / 3)
    assert_allclose(isotropic_share(constant_field(surface, "stress", 6, [3.0, 0, 0, 0, 3, 0])) ** 2, 3 / 27)
    assert isotropic_share(constant_field(surface, "stress", 6, [0.0] * 6)) is None


# ---- velocity gradient ----------------------------------------------------------------------


@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 2**32 - 1), at=st.sampled_from(["nodes", "faces"]), turned=st.booleans())
def test_a_uniform_gradient_has_the_newtonian_stress(seed: int, at: str, turned: bool) -> None:
    rng = np.random.default_rng(seed)
    surface = any_body(seed).surface()
    gradient, mu = rng.standard_normal((3, 3)), 0.7
    exported = gradient.T if turned else gradient  # rows or columns: the stress is the same
    count = surface.point_count if at == "nodes" else surface.face_count
    field = laid(surface, np.tile(exported.reshape(9) / 60, (count, 1)), at, scale=60.0)  # exported per minute
    samples = sampled_for(surface, field)
    growth = np.trace(gradient)
    for dilatation, bulk in ((True, 2 / 3 * growth), (False, 0.0)):
        found = traction_from_gradient(surface, field, mu, dilatation=dilatation, samples=samples)
        stress = mu * (gradient + gradient.T - bulk * np.eye(3))
        assert_uniform_stress(table_of(surface, found, samples), stress, moment=at == "nodes" or not twisted(seed))


def test_gradient_as_vtk_computes_it() -> None:
    # du_i/dx_j of a linear velocity, by VTK's own filter on a volume mesh
    import pyvista

    slope = np.array([[1.0, 2, 3], [4, 5, 6], [7, 8, 10]])
    grid = pyvista.ImageData(dimensions=(3, 3, 3))
    grid["u"] = np.asarray(grid.points) @ slope.T
    nine = np.asarray(grid.compute_derivative("u", gradient=True)["gradient"], dtype=float)
    assert_allclose(nine, np.tile(slope.reshape(9), (27, 1)), rtol=1e-6)
    surface = box((0, 0, 0), (2, 2, 2)).surface()
    field = laid(surface, nine[:8], "nodes")
    samples = sampled_for(surface, field)
    table = table_of(surface, traction_from_gradient(surface, field, 1.5, samples=samples), samples)
    stress = 1.5 * (slope + slope.T - 2 / 3 * 16 * np.eye(3))
    assert_allclose(table.column("viscous_force"), table.column("area_vector") @ stress, rtol=0, atol=1e-4)


@pytest.mark.parametrize("where", ["nodes", "faces", "group"])
def test_a_viscosity_field_multiplies_point_by_point(where: str) -> None:
    # mu times a linear gradient: quadratic where both are linear; the mean of a quadratic over a triangle is that over
    # its mid-edge points (Strang and Fix, degree 2; from memory)
    rng = np.random.default_rng(5)
    body = in_triangles(odd_body(1))
    surface, rows = body.surface(), np.array(body.faces)
    gradient = rng.standard_normal((surface.point_count, 3, 3))
    counts = {"nodes": surface.point_count, "faces": surface.face_count}
    if where == "group":
        mu = constant_field(surface, "viscosity", 1, 0.3)
        corner = np.full((len(rows), 3), 0.3)
    else:
        values = rng.uniform(0.1, 2.0, counts[where])
        mu = array_field(surface, "viscosity", 1, values / 1000, at=where, scale=1000.0)
        corner = values[rows] if where == "nodes" else np.repeat(values[:, None], 3, axis=1)
    field = laid(surface, gradient.reshape(-1, 9), "nodes")
    samples = sampled_for(surface, field, mu)
    found = table_of(surface, traction_from_gradient(surface, field, mu, samples=samples), samples)
    a, b, c = (body.points[rows[:, k]] for k in range(3))
    vectors = np.cross(b - a, c - a) / 2
    stress = gradient + gradient.transpose(0, 2, 1)
    stress -= 2 / 3 * np.trace(gradient, axis1=1, axis2=2)[:, None, None] * np.eye(3)
    force = np.zeros(3)
    for k, m in ((0, 1), (1, 2), (2, 0)):
        at = (corner[:, k] + corner[:, m])[:, None, None] / 2 * (stress[rows[:, k]] + stress[rows[:, m]]) / 2
        force += np.einsum("fij,fj->i", at, vectors) / 3
    size = np.abs(stress).max() * found.total("area")
    assert_allclose(found.total("viscous_force"), force, rtol=0, atol=1e-13 * size)


def test_a_face_gradient_with_a_viscosity_on_points_is_sampled() -> None:
    surface = box((0, 0, 0), (1, 1, 1)).surface()
    field = laid(surface, np.tile(np.arange(9.0), (12, 1)), "faces")
    assert not groups_to_sample(surface, field).any()
    mu = array_field(surface, "viscosity", 1, surface.points[:, 0] + 1, at="nodes")
    samples = sampled_for(surface, field, mu)
    table = table_of(surface, traction_from_gradient(surface, field, mu, dilatation=False, samples=samples), samples)
    rate = np.arange(9.0).reshape(3, 3) + np.arange(9.0).reshape(3, 3).T
    mean = 1 + table.origin[0] + table.column("position")[:, :1]  # of 1 + x over sides of area 1
    wanted = mean * (table.column("area_vector") @ rate)
    assert_allclose(table.column("viscous_force"), wanted, rtol=0, atol=1e-13)


@pytest.mark.parametrize(
    "body", [lambda k: box((-0.9, -1.1, -0.8), (1.2, 1.0, 1.3), 4 * 2**k), lambda k: odd_body(k + 1)]
)
def test_the_landau_squire_jet_has_its_force_from_gradient_and_from_stress(body: Any) -> None:
    # as tests/test_exact_flows.py, where the traction is exact on each face: the force of the jet, order two
    density, kinematic = 1.2, 0.5
    jet = landau_squire(1.5, density, kinematic)
    exact = density * kinematic**2 * landau_force(1.5) * np.array([0, 0, 1.0])
    errors = []
    for k in (2, 3, 4):
        surface = body(k).surface()
        gradient = laid(surface, velocity_gradient(jet.velocity, surface.points).reshape(-1, 9), "nodes")
        stress = laid(surface, six(jet.stress(surface.points), VTK_ORDER), "nodes")
        samples = sampled_for(surface, gradient)
        by_gradient = traction_from_gradient(surface, gradient, density * kinematic, samples=samples)
        by_stress = traction_from_stress(surface, stress, samples=samples)
        assert_allclose(by_gradient.sample, by_stress.sample, rtol=0, atol=1e-12 * np.abs(by_stress.sample).max())
        flow = lay_flow(
            surface, density=density, velocity=jet.velocity(surface.points), pressure=jet.pressure(surface.points)
        )
        found = balance_of(surface, replace(flow, traction=by_gradient, sample_start=samples.start)).balance
        errors.append(np.linalg.norm(found.momentum.residual() - exact))
    assert observed_order([4, 2, 1], errors) == pytest.approx(2.0, abs=0.15)
    assert errors[-1] < 0.02 * exact[2]


# ---- faults ---------------------------------------------------------------------------------


def test_faulty_tensors_are_named() -> None:
    surface = box((0, 0, 0), (1, 1, 1)).surface()
    nodes, samples = np.ones((8, 6)), sampled_all(surface)
    with pytest.raises(FieldError, match=r"array 'S': the stress has 3 components\. Give 6"):
        traction_from_stress(surface, laid(surface, nodes[:, :3], "nodes", label="array 'S'"), samples=samples)
    with pytest.raises(FieldError, match=r"order of components is 'xx xy xz yy yz zz'\. Allowed: xx yy zz xy yz xz or"):
        traction_from_stress(surface, laid(surface, nodes, "nodes"), order="xx xy xz yy yz zz", samples=samples)
    with pytest.raises(FieldError, match=r"not symmetric: its antisymmetric part is 0\.\d+ of it. A viscous stress"):
        traction_from_stress(surface, laid(surface, np.tile(np.arange(9.0), (8, 1)), "nodes"), samples=samples)
    nearly = np.tile(np.arange(9.0).reshape(3, 3) + np.arange(9.0).reshape(3, 3).T, (8, 1, 1)).reshape(8, 9)
    traction_from_stress(surface, laid(surface, nearly.astype(np.float32) * (1 + 1e-6), "nodes"), samples=samples)
    with pytest.raises(FieldError, match="1 of 8 point values are not finite, the first at point 3"):
        traction_from_stress(surface, laid(surface, np.where(np.arange(8)[:, None] == 3, np.nan, nodes), "nodes"))
    with pytest.raises(FieldError, match=r"gradient has 6 components\. 9 are needed"):
        traction_from_gradient(surface, laid(surface, nodes, "nodes"), 1.0, samples=samples)


def test_faulty_viscosities_are_named() -> None:
    body = box((0, 0, 0), (1, 1, 1))
    surface = body.surface()
    gradient, samples = laid(surface, np.ones((8, 9)), "nodes"), sampled_all(surface)
    with pytest.raises(FieldError, match=r"viscosity is 0\. It must be positive"):
        traction_from_gradient(surface, gradient, 0.0, samples=samples)
    with pytest.raises(FieldError, match="viscosity is nan"):
        traction_from_gradient(surface, gradient, float("nan"), samples=samples)
    eddy = array_field(surface, "viscosity", 1, np.r_[0.0, np.ones(7)], at="nodes")  # eddy viscosity alone, 0 at a wall
    with pytest.raises(FieldError, match="1 of 8 point values are zero or negative"):
        traction_from_gradient(surface, gradient, eddy, samples=samples)
    part = array_field(surface, "viscosity", 1, np.ones(8), at="nodes", groups=np.arange(6) != 2)
    with pytest.raises(FieldError, match=f"group '{list(body.groups)[2]}': there is a velocity gradient, but no visc"):
        traction_from_gradient(surface, gradient, part, samples=samples)


def test_missing_samples_are_named() -> None:
    body = box((0, 0, 0), (1, 1, 1))
    surface = body.surface()
    stress = laid(surface, np.ones((8, 6)), "nodes")
    with pytest.raises(FieldError, match="must be taken at quadrature points, and the flow has none"):
        traction_from_stress(surface, stress)
    some = sample_places(face_arrays_of(surface), surface.group_of_face != 4)
    with pytest.raises(FieldError, match=f"2 faces have no quadrature points, .* in group '{list(body.groups)[4]}'"):
        traction_from_stress(surface, stress, samples=some)
    loose = replace(stress, where=np.full(6, AT_SAMPLE, np.int8), sample=np.ones((5, 6)))
    with pytest.raises(FieldError, match="there are 5 sampled values, and 72 quadrature points"):
        traction_from_stress(surface, loose, samples=sampled_all(surface))
    holed = np.ones((72, 6))
    holed[10] = np.nan
    with pytest.raises(FieldError, match="1 tractions are not finite, the first on face 1 in group"):
        traction_from_stress(surface, replace(loose, sample=holed), samples=sampled_all(surface))
