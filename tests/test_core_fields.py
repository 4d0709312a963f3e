"""What makes the fields of the integrals: gauge pressure, gases, frames, traction, and the geometry of single faces."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh.field.field import Field, array_field, constant_field, supply
from fluxmesh.field.flow import integrate_flow, lay_flow
from fluxmesh.field.frame import Frame
from fluxmesh.field.gas import ideal_density, sound_speed
from fluxmesh.field.port_viscous import port_viscous_estimate
from fluxmesh.field.pressure import Head, PressureKind, PressureMeaning, pressure_terms
from fluxmesh.field.relative import relative_velocity
from fluxmesh.field.scalars import integrate_scalar
from fluxmesh.field.traction import traction_from_gradient, traction_from_stress
from fluxmesh.integral.layout import AT_NODE, AT_SAMPLE, FaceArrays
from fluxmesh.integral.samples import mean_normals, sample_normals, sample_places
from fluxmesh.surface.build import control_surface
from fluxmesh.surface.face_geometry import face_geometry, nearest_face
from fluxmesh.surface.surface import ControlSurface

GRAVITY = np.array([0.4, -0.9, -9.7])
POINTS = np.array([[0.0, 0, 0], [1.2, 0.1, 0], [0.2, 0.9, 0.1], [0.1, 0.2, 1.1]])
FACES = [[0, 2, 1], [0, 1, 3], [1, 2, 3], [2, 0, 3]]
GROUPS = {"feed": ("inlet", [0]), "drain": ("outlet", [1]), "shell": ("wall", [2, 3])}


@pytest.fixture(scope="module")
def body() -> ControlSurface:
    """A tetrahedron with two ports."""
    return control_surface(POINTS, FACES, GROUPS)


def test_gauge_pressure_with_its_head() -> None:
    origin, datum = np.array([1.0, 2.0, 3.0]), (0.5, -1.0, 0.2)
    meaning = PressureMeaning(PressureKind.ABSOLUTE, Head.REMOVED, datum)
    terms = pressure_terms(meaning, ambient=1e5, density=800.0, gravity=GRAVITY, origin=origin)
    place = np.array([0.3, -0.8, 2.0])
    # a fluid at rest: pressure grows by rho g·dx from the datum, where it is what was exported, less the ambient
    found = 101_000.0 + terms.offset + np.array([terms.head_x, terms.head_y, terms.head_z]) @ (place - origin)
    assert_allclose(found, 1_000.0 + 800.0 * GRAVITY @ (place - np.array(datum)), rtol=1e-12)
    plain = pressure_terms(PressureMeaning(), ambient=1e5, density=800.0, gravity=GRAVITY, origin=origin)
    assert tuple(plain) == (False, 0.0, 0.0, 0.0, 0.0)


def test_speed_of_sound_of_air() -> None:
    # 340.294 m/s at 101 325 Pa and 1.2250 kg/m^3 (ISO 2533, Standard Atmosphere)
    assert_allclose(sound_speed(101_325.0, 1.2250, 1.4), 340.294, rtol=2e-6)


@pytest.mark.parametrize("kind", ["gauge", "absolute"])
def test_density_of_an_ideal_gas(body: ControlSurface, kind: str) -> None:
    absolute = np.array([1.0e5, 1.1e5, 1.2e5, 1.3e5])
    kelvin = np.array([290.0, 300.0, 310.0, 320.0])
    exported = (absolute - (1e5 if kind == "gauge" else 0.0)) / 1000.0  # kPa
    pressure = replace(array_field(body, "pressure", 1, exported, at="nodes"), scale=1000.0)
    pressure = supply(pressure, 1, 2.0e4)  # gauge, as all that is supplied
    temperature = supply(array_field(body, "temperature", 1, kelvin, at="nodes"), 1, 305.0)
    found = ideal_density(
        body, pressure, temperature, meaning=PressureMeaning(PressureKind(kind)), ambient=1e5, gas_constant=287.0
    )
    assert_allclose(found.node, absolute / (287.0 * kelvin), rtol=1e-13)
    assert_allclose(found.group[1], 1.2e5 / (287.0 * 305.0), rtol=1e-13)


def test_velocity_relative_to_a_frame(body: ControlSurface) -> None:
    frame = Frame(velocity=(0.8, -0.5, 0.3), rate=1.4, axis=(0.6, 0.0, 0.8), through=(0.7, 0.2, -0.9))

    def moving(places: np.ndarray) -> np.ndarray:
        return np.array([0.8, -0.5, 0.3]) + np.cross([0.84, 0.0, 1.12], places - np.array([0.7, 0.2, -0.9]))

    assert_allclose(frame.at(POINTS), moving(POINTS), rtol=1e-14)
    at, arm, spin = POINTS[3], POINTS[3] - np.array([0.7, 0.2, -0.9]), np.array([0.84, 0.0, 1.12])
    # towards the axis
    assert_allclose(frame.acceleration_at(at), spin * (spin @ arm) - (spin @ spin) * arm, rtol=1e-13)
    velocity = np.random.default_rng(0).normal(size=(4, 3))
    field = replace(array_field(body, "velocity", 3, 1000.0 * velocity, at="nodes"), scale=1e-3)
    field = supply(field, 1, (1.0, 2.0, 3.0))
    mesh = FaceArrays(body.points, body.connectivity, np.empty(0, np.int64), np.empty(0, np.int8))
    samples = sample_places(mesh, body.group_of_face == 1)
    found = relative_velocity(body, field, frame, samples=samples)
    assert_allclose(1e-3 * found.node, velocity - moving(POINTS), rtol=1e-12)
    assert list(found.where) == [AT_NODE, AT_SAMPLE, AT_NODE]
    assert_allclose(1e-3 * found.sample, np.array([1.0, 2.0, 3.0]) - moving(samples.places), rtol=1e-12)
    # what only moves on takes the same from all
    on = Frame(velocity=(0.8, -0.5, 0.3))
    found = relative_velocity(body, field, on)
    assert_allclose(found.group[1], [0.2, 2.5, 2.7], rtol=1e-13)
    each = replace(array_field(body, "velocity", 3, 1000.0 * velocity, at="faces"), scale=1e-3)
    assert_allclose(1e-3 * relative_velocity(body, each, on).face, velocity - np.array([0.8, -0.5, 0.3]), rtol=1e-12)


def normals() -> np.ndarray:
    a, b, c = (POINTS[np.array(FACES)[:, k]] for k in range(3))
    vectors = np.cross(b - a, c - a)
    return vectors / np.linalg.norm(vectors, axis=1)[:, None]


def on_faces(body: ControlSurface, values: np.ndarray) -> Field:
    """A tensor on faces; `array_field` lays those of any number of components."""
    return array_field(body, "stress", values.shape[1], values, at="faces")


def test_traction_of_a_stress_and_of_a_gradient(body: ControlSurface) -> None:
    rng = np.random.default_rng(1)
    half = rng.normal(size=(4, 3, 3))
    stress = half + half.transpose(0, 2, 1)
    wanted = np.einsum("fij,fj->fi", stress, normals())
    for order, places in (("xx yy zz xy yz xz", [(0, 0), (1, 1), (2, 2), (0, 1), (1, 2), (0, 2)]),
                          ("xx yy zz yz xz xy", [(0, 0), (1, 1), (2, 2), (1, 2), (0, 2), (0, 1)])):  # fmt: skip
        six = np.array([[s[i, j] for i, j in places] for s in stress])
        assert_allclose(traction_from_stress(body, on_faces(body, six), order=order).face, wanted, rtol=1e-12)
    gradient = rng.normal(size=(4, 3, 3))
    rate = (
        gradient + gradient.transpose(0, 2, 1) - 2 / 3 * np.trace(gradient, axis1=1, axis2=2)[:, None, None] * np.eye(3)
    )
    found = traction_from_gradient(body, on_faces(body, gradient.reshape(4, 9)), 0.7)
    assert_allclose(found.face, 0.7 * np.einsum("fij,fj->fi", rate, normals()), rtol=1e-12)


@pytest.mark.parametrize("place", ["group", "nodes"])
def test_viscous_force_of_a_linear_velocity_on_a_port(body: ControlSurface, place: str) -> None:
    slope = np.random.default_rng(2).normal(size=(3, 3))  # du_i/dx_j
    flow = lay_flow(body, density=1.0, velocity=POINTS @ slope.T, at="nodes")
    mu = np.array([0.3, 0.5, 0.8, 5.0])
    viscosity = array_field(body, "viscosity", 1, mu, at="nodes") if place == "nodes" else 0.4
    found = port_viscous_estimate(body, flow, 0, viscosity)
    n = normals()[0]
    area = np.linalg.norm(np.cross(POINTS[2] - POINTS[0], POINTS[1] - POINTS[0])) / 2
    mean = mu[[0, 2, 1]].mean() if place == "nodes" else 0.4
    within = slope @ (np.eye(3) - np.outer(n, n))
    # -2 mu div_s u n + mu n_j grad_s u_j
    wanted = mean * area * (-2 * np.trace(within) * n + n @ within)
    assert_allclose(found.force, wanted, rtol=1e-11)
    assert_allclose(found.scale, mean * area * np.linalg.norm(within), rtol=1e-11)


def test_fluxes_of_a_scalar_by_mass_and_by_volume(body: ControlSurface) -> None:
    flow = lay_flow(body, density=2.5, velocity=(1.0, -2.0, 0.5))
    found = integrate_scalar(body, flow, constant_field(body, "salt", 1, 3.0))
    vector = integrate_flow(body, flow).column("area_vector")
    through = vector @ np.array([1.0, -2.0, 0.5])
    assert_allclose(found.volume_flow[:2], 3.0 * through[:2], rtol=1e-13)
    assert_allclose(found.mass_flow[:2], 7.5 * through[:2], rtol=1e-13)


def test_ambient_and_kinematic_pressure_reach_the_integrals(body: ControlSurface) -> None:
    data: dict[str, Any] = {"density": 2.0, "velocity": (1.0, 0.0, 0.0), "at": "nodes"}
    vector = integrate_flow(body, lay_flow(body, **data)).column("area_vector")
    meaning = PressureMeaning(PressureKind.KINEMATIC)
    kinematic = lay_flow(body, pressure=np.full(4, 30.0), meaning=meaning, **data)
    assert_allclose(integrate_flow(body, kinematic).column("pressure_force"), -60.0 * vector, rtol=1e-12)
    meaning = PressureMeaning(PressureKind.ABSOLUTE)
    data["supplied"] = {"drain": {"pressure": 7.0}}
    absolute = lay_flow(body, pressure=np.full(4, 130.0), meaning=meaning, ambient=100.0, **data)
    gauge = np.array([30.0, 7.0, 30.0])[:, None]  # what is supplied for a group is gauge already
    assert_allclose(integrate_flow(body, absolute).column("pressure_force"), -gauge * vector, rtol=1e-12)


# ---- single faces -----------------------------------------------------------------------------

# an L of three unit squares: centroid (5/6, 5/6); its first corner is chosen so that a fan about it turns back
CORNERS = np.array([[0.0, 0, 0], [2, 0, 0], [2, 1, 0], [1, 1, 0], [1, 2, 0], [0, 2, 0]])


@pytest.mark.parametrize("first", range(6))
def test_area_and_centroid_of_a_dented_polygon(first: int) -> None:
    order = np.roll(np.arange(6), -first)
    found = face_geometry(CORNERS + 3.0, order, np.array([0, 6]))
    assert_allclose(found.areas, [3.0], rtol=1e-14)
    assert_allclose(found.normals, [[0, 0, 1]], atol=1e-15)
    assert_allclose(found.centroids, [[5 / 6 + 3, 5 / 6 + 3, 3.0]], rtol=1e-14)


def test_area_and_centroid_of_triangles() -> None:
    found = face_geometry(POINTS, np.array(FACES).ravel(), None)
    assert_allclose(found.centroids, POINTS[np.array(FACES)].mean(axis=1), rtol=1e-14)
    assert_allclose(found.normals, normals(), rtol=1e-14)


@pytest.mark.parametrize(
    ("place", "face", "distance"),
    [
        ((0.2, 0.2, 0.5), 0, 0.5),  # above it
        ((-3.0, -4.0, 0.0), 0, 5.0),  # beyond a corner
        ((0.3, -0.4, 0.3), 0, 0.5),  # beside an edge
        ((5.0, 0.0, 0.0), 1, 0.5),  # in line with an edge
        ((4.0, 2.0, 0.0), 1, 1.0),
    ],
)
def test_nearest_face(place: tuple[float, float, float], face: int, distance: float) -> None:
    points = np.array([[0.0, 0, 0], [1, 0, 0], [0, 1, 0], [4, 0, 0], [4.5, 0, 0], [4, 1, 0]])
    geometry = face_geometry(points, np.arange(6), None)
    found = nearest_face(points, np.arange(6), None, geometry, np.arange(2), np.array(place))
    assert found[0] == face
    assert found[1] == pytest.approx(distance, rel=1e-14)


def test_the_nearest_face_may_have_a_far_centre() -> None:
    points = np.array([[0.0, 0, 0], [30, 0, 0], [0, 30, 0], [0.2, 0.2, 1], [0.4, 0.2, 1], [0.2, 0.4, 1]])
    geometry = face_geometry(points, np.arange(6), None)
    assert nearest_face(points, np.arange(6), None, geometry, np.arange(2), np.array([0.3, 0.3, 0.4])) == (0, 0.4)


def test_normals_at_samples_of_a_dented_and_of_a_twisted_polygon() -> None:
    twisted = np.array([[5.0, 0, 0], [6, 0, 0.4], [6, 1, 0], [5, 1, 0.4]])
    dented = CORNERS.copy()
    dented[3] = [0.4, 0.4, 0.0]  # beyond the mean of the corners: two triangles of the fan lie the other way round
    mesh = FaceArrays(np.concatenate([dented, twisted]), np.arange(10), np.array([0, 6, 10]), np.empty(0, np.int8))
    samples = sample_places(mesh, np.ones(2, np.bool_))
    at = sample_normals(mesh, samples)
    assert_allclose(at[samples.face == 0], np.tile([0.0, 0, 1], (36, 1)), atol=1e-14)
    middle = twisted.mean(axis=0)
    vectors = np.cross(twisted - middle, np.roll(twisted, -1, axis=0) - middle) / 2
    mean = vectors.sum(axis=0) / np.linalg.norm(vectors, axis=1).sum()
    assert_allclose(mean_normals(mesh, np.ones(2, np.bool_)), [[0, 0, 1], mean], atol=1e-14)
    assert np.linalg.norm(mean) < 0.95
    # samples of a polygon are those of its fan about the mean of its corners, with 6 points a triangle
    places = samples.places[samples.face == 1].reshape(4, 6, 3).mean(axis=1)
    assert places.shape == (4, 3)
    for k in range(4):
        corner = (twisted[k], twisted[(k + 1) % 4], middle)
        inside = np.linalg.lstsq(np.vstack([np.array(corner).T, np.ones(3)]), np.append(places[k], 1.0), rcond=None)
        assert (inside[0] > 0.2).all()
        assert_allclose(np.array(corner).T @ inside[0], places[k], atol=1e-12)
