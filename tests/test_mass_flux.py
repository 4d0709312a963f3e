"""Mass flow exported a face: where it is there, it carries mass and momentum in place of density times velocity."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh import balance_of, lay_flow
from fluxmesh.errors import FieldError
from tests.flows import face_frames, poiseuille
from tests.solids import any_polyhedron, box, in_triangles, mapped, one_group, pipe, prism, quadratic, sphere, torus

DENSITY = 870.0
PORTS = {"inlet": "inlet", "outlet": "outlet"}


def areas(points: np.ndarray, rows: np.ndarray) -> np.ndarray:
    a, b, c = (points[rows[:, k]] for k in range(3))
    return np.linalg.norm(np.cross(b - a, c - a), axis=1) / 2


@pytest.mark.parametrize("seed", range(5))
def test_each_face_carries_its_mass_with_the_mean_velocity_over_it(seed: int) -> None:
    # momentum ∑ m V̄ and its moment ∑ m (mean of x × V over the face); the mean of a product of two linear functions
    # over a triangle is that over its mid-edge points (Strang and Fix, degree 2; from memory)
    rng = np.random.default_rng(seed)
    body = in_triangles(any_polyhedron(seed))
    rows = np.array(body.faces)
    surface = body.surface()
    velocity, mass = rng.standard_normal((len(body.points), 3)), rng.standard_normal(len(rows))
    flow = lay_flow(surface, density=DENSITY, velocity=velocity, mass_flux=mass)
    found = balance_of(surface, flow).balance
    assert_allclose(found.mass.residual, mass.sum(), rtol=1e-12)
    assert_allclose(found.mass.outflow, mass[mass > 0].sum(), rtol=1e-12)
    assert_allclose(found.mass.inflow, -mass[mass < 0].sum(), rtol=1e-12)
    moment, momentum = np.zeros(3), np.zeros(3)
    for a, b in ((0, 1), (1, 2), (2, 0)):
        x = (body.points[rows[:, a]] + body.points[rows[:, b]]) / 2
        v = (velocity[rows[:, a]] + velocity[rows[:, b]]) / 2
        momentum += (mass[:, None] * v).sum(axis=0) / 3
        moment += (mass[:, None] * np.cross(x, v)).sum(axis=0) / 3
    size = np.abs(mass).sum()
    assert_allclose(found.momentum.flux(), momentum, rtol=0, atol=1e-13 * size)
    assert_allclose(found.angular.flux(), moment, rtol=0, atol=1e-12 * size)


@pytest.mark.parametrize("seed", range(10))
def test_a_uniform_velocity_says_the_same_as_its_mass_flow(seed: int) -> None:
    # twisted quads and polygons too: the flow through a face is rho V · (area vector)
    body = any_polyhedron(seed)
    surface = body.surface()
    velocity = np.array([1.3, -0.4, 0.7])
    vectors = []
    for face in body.faces:
        corners = body.points[face] - body.points[face].mean(axis=0)
        vectors.append(np.cross(corners, np.roll(corners, -1, axis=0)).sum(axis=0) / 2)
    mass = DENSITY * np.array(vectors) @ velocity
    found = [
        balance_of(surface, lay_flow(surface, density=DENSITY, velocity=velocity, mass_flux=carried)).balance
        for carried in (None, mass)
    ]
    size = DENSITY * found[0].table.total("area") * 5
    for name in ("mass_flow", "volume_flow", "momentum_flux"):
        assert_allclose(found[1].table.total(name), found[0].table.total(name), rtol=0, atol=1e-13 * size)
    if seed % 5 != 2:  # a twisted quad spreads its mass evenly over its area, not by the way its parts look
        assert_allclose(found[1].angular.flux(), found[0].angular.flux(), rtol=0, atol=1e-12 * size)
        assert_allclose(
            found[1].table.total("kinetic_energy_flux"),
            found[0].table.total("kinetic_energy_flux"),
            rtol=0,
            atol=1e-13 * size,
        )


def test_the_mass_of_a_polygon_is_spread_over_its_area() -> None:
    # uniform velocity: the moment is centroid × m V, with the centroid of a lopsided pentagon by its own triangles
    contour = np.array([[0, 0], [3, 0], [4, 2], [2, 3.5], [-0.5, 2.0]])
    body = prism(contour, 0, 1)
    surface = body.surface({"z+": "outlet"}, rest="wall")
    velocity = np.array([0.5, -0.2, 2.0])
    mass = np.zeros(len(body.faces))
    mass[body.groups["z+"]] = 7.0
    found = balance_of(surface, lay_flow(surface, density=DENSITY, velocity=velocity, mass_flux=mass)).balance
    fan = np.array([[0, k, k + 1] for k in range(1, 4)])
    points = np.column_stack([contour, np.ones(5)])
    weights = areas(points, fan)
    centroid = weights @ points[fan].mean(axis=1) / weights.sum()
    assert_allclose(found.angular.flux(), np.cross(centroid, 7 * velocity), rtol=1e-13)
    assert_allclose(found.ports["z+"].mean_speed, 7 / (DENSITY * weights.sum()), rtol=1e-13)


def test_curved_faces_carry_their_mass_whole() -> None:
    rng = np.random.default_rng(1)
    for body in (sphere(1, curved=True), quadratic(box((0, 0, 0), (1, 2, 3)))):
        surface = body.surface()
        mass = rng.standard_normal(len(body.faces))
        velocity = np.array([1.3, -0.4, 0.7])
        found = balance_of(surface, lay_flow(surface, density=DENSITY, velocity=velocity, mass_flux=mass)).balance
        assert_allclose(found.mass.residual, mass.sum(), rtol=0, atol=1e-13 * np.abs(mass).sum())
        assert_allclose(found.momentum.flux(), mass.sum() * velocity, rtol=0, atol=1e-12 * np.abs(mass).sum())


def test_exported_mass_flow_closes_where_interpolated_velocity_does_not() -> None:
    # a finite-volume flow closes face by face; velocities read off at points only do so with the mesh
    radius, mean = 0.1, 2.0
    body = pipe(radius, 0.5, 16, 2, 3)
    surface = body.surface(PORTS, rest="wall")
    profile = poiseuille(radius, mean, 0.4, DENSITY)
    velocity = profile.velocity(surface.points)
    uniform = {"inlet": {"velocity": (0, 0, mean)}}
    plain = balance_of(surface, lay_flow(surface, density=DENSITY, velocity=velocity, supplied=uniform)).balance
    assert abs(plain.mass.relative) > 0.01
    middle, _ = face_frames(surface)
    mass = np.zeros(len(body.faces))
    for name, sign in (("inlet", -1), ("outlet", 1)):
        share = profile.velocity(middle[body.groups[name]])[:, 2]
        mass[body.groups[name]] = sign * share / share.sum() * 55.0
    carried = balance_of(surface, lay_flow(surface, density=DENSITY, velocity=velocity, mass_flux=mass)).balance
    assert abs(carried.mass.relative) < 1e-15
    assert_allclose([carried.mass.inflow, carried.mass.outflow], 55.0, rtol=1e-13)
    assert_allclose(carried.short_form.mass_flow, 55.0, rtol=1e-13)


def test_mass_flow_without_velocity_carries_mass_alone() -> None:
    body = in_triangles(torus(0.3, 0.1, 8, 6))
    surface = body.surface()
    mass = np.where(np.arange(len(body.faces)) % 2, 1.0, -1.0)
    found = balance_of(surface, lay_flow(surface, density=DENSITY, mass_flux=mass)).balance
    assert_allclose(found.mass.inflow, len(mass) / 2, rtol=1e-14)
    assert_allclose(found.mass.residual, 0, rtol=0, atol=1e-12)
    assert_allclose(found.momentum.flux(), 0, rtol=0, atol=0)


def test_flow_out_is_positive() -> None:
    body = box((0, 0, 0), (1, 1, 1), quads=True)
    surface = body.surface({"x-": "inlet", "x+": "outlet"}, rest="wall")
    mass = np.zeros(6)
    mass[body.groups["x-"]], mass[body.groups["x+"]] = -3.0, 3.0
    found = balance_of(surface, lay_flow(surface, density=DENSITY, velocity=(1, 0, 0), mass_flux=mass)).balance
    flows = dict(zip([g.name for g in surface.groups], found.table.column("mass_flow")))
    assert (flows["x-"], flows["x+"]) == (-3.0, 3.0)
    assert_allclose(found.momentum.flux(), 0, rtol=0, atol=1e-15)


def test_mass_flow_needs_a_density_and_a_value_for_every_face() -> None:
    body = mapped(box((0, 0, 0), (1, 1, 1)), lambda x: 2 * x)
    surface = body.surface()
    with pytest.raises(FieldError, match="mass flux, but no density"):
        lay_flow(surface, mass_flux=np.zeros(12))
    with pytest.raises(FieldError, match="8 entries"):
        lay_flow(surface, density=1.0, mass_flux=np.zeros(8))
    with pytest.raises(FieldError, match="1 of 12 face values are not finite"):
        lay_flow(surface, density=1.0, mass_flux=np.where(np.arange(12) == 5, np.nan, 0.0))


def test_a_tetrahedron_has_as_many_faces_as_points_and_mass_flow_sits_on_faces() -> None:
    body = one_group([[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1]], [[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]])
    surface = body.surface()
    found = balance_of(surface, lay_flow(surface, density=1.0, mass_flux=np.array([1.0, 2.0, -4.0, 1.0]))).balance
    assert (found.mass.inflow, found.mass.outflow) == (4.0, 4.0)
