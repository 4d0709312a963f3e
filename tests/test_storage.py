"""Storage: rates out of snapshots, and the unsteady laws that they close."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh import balance_of, lay_flow
from fluxmesh.balance.balance import Balance
from fluxmesh.balance.storage import (
    Storage,
    momentum_from_surface,
    rate_order,
    rate_weights,
    storage_from_contents,
    storage_from_momentum,
    unknown_storage,
)
from fluxmesh.errors import FieldError
from fluxmesh.field.contents import Contents
from fluxmesh.field.flow import integrate_flow
from tests.flows import ExactFlow, velocity_gradient
from tests.measures import observed_order
from tests.solids import box

UNEVEN = np.array([0.0, 0.11, 0.17, 0.4, 0.45, 0.9])


# ---- weights --------------------------------------------------------------------------------


@pytest.mark.parametrize("at", [0.0, 0.05, 0.17, 0.3, 0.45, 0.9])
def test_the_rate_of_a_parabola_is_exact_on_uneven_steps(at: float) -> None:
    weights = rate_weights(UNEVEN, at)
    assert_allclose(weights @ (3 - 2 * UNEVEN + 5 * UNEVEN**2), -2 + 10 * at, rtol=0, atol=1e-12)
    assert np.count_nonzero(weights) <= 3
    assert abs(weights.sum()) < 1e-14 * np.abs(weights).sum()


@pytest.mark.parametrize(("at", "used"), [(0.0, [0, 1, 2]), (0.17, [0, 1, 2]), (0.45, [2, 3, 4]), (0.9, [3, 4, 5])])
def test_the_three_nearest_times_are_used(at: float, used: list[int]) -> None:
    assert np.flatnonzero(rate_weights(UNEVEN, at)).tolist() == used


@pytest.mark.parametrize("at", [1.3, 1.0, 1.37])
def test_the_rate_is_of_second_order_on_uneven_steps(at: float) -> None:
    errors = []
    for step in (0.1, 0.05, 0.025):
        times = at + step * np.array([-2.2, -1.0, 0.0, 0.7, 1.9])
        errors.append(abs(rate_weights(times, at) @ np.sin(times) - np.cos(at)))
    assert_allclose(np.log2(np.divide(errors[:-1], errors[1:])), 2, atol=0.1)


def test_the_rate_is_of_second_order_at_either_end() -> None:
    for end in (0, -1):
        errors = []
        for step in (0.04, 0.02, 0.01):
            times = 1.0 + step * np.array([0.0, 0.8, 2.0])
            errors.append(abs(rate_weights(times, times[end]) @ np.sin(times) - np.cos(times[end])))
        assert_allclose(np.log2(np.divide(errors[:-1], errors[1:])), 2, atol=0.15)


def test_two_times_give_the_slope_between_them_of_second_order_in_the_middle_only() -> None:
    assert_allclose(rate_weights([0.2, 0.6], 0.4), [-2.5, 2.5], rtol=1e-15)
    assert rate_order([0.2, 0.6], 0.4) == 2
    assert rate_order([0.2, 0.6], 0.2) == 1
    assert rate_order([0.2, 0.6, 0.7], 0.2) == 2
    errors = {at: [] for at in (0.5, 0.8)}
    for at, found in errors.items():
        for step in (0.1, 0.05, 0.025):
            times = 1.0 + step * np.array([0.0, 1.0])
            found.append(abs(rate_weights(times, 1 + at * step) @ np.sin(times) - np.cos(1 + at * step)))
    assert_allclose(np.log2(np.divide(errors[0.5][:-1], errors[0.5][1:])), 2, atol=0.1)
    assert_allclose(np.log2(np.divide(errors[0.8][:-1], errors[0.8][1:])), 1, atol=0.2)


def test_times_that_do_not_rise_are_named() -> None:
    with pytest.raises(FieldError, match=r"number 2 is 0\.3 s and number 3 is 0\.2 s"):
        rate_weights([0.1, 0.3, 0.2, 0.1], 0.2)
    with pytest.raises(FieldError, match=r"number 1 is 0\.1 s and number 2 is 0\.1 s"):
        rate_weights([0.1, 0.1], 0.1)


@pytest.mark.parametrize(
    ("times", "at", "said"),
    [
        ([0.1], 0.1, "two instants or more"),
        ([], 0.1, "no instants"),
        ([0.1, 0.2], 0.25, "reach from 0.1 s to 0.2 s"),
        ([0.1, np.nan], 0.1, "no finite number"),
        ([0.1, 0.2], np.nan, "nan s is asked for"),
    ],
)
def test_a_rate_that_cannot_be_had_is_refused(times: list[float], at: float, said: str) -> None:
    with pytest.raises(FieldError, match=said):
        rate_weights(times, at)


# ---- contents -------------------------------------------------------------------------------


def held(places: np.ndarray, masses: np.ndarray, velocity: np.ndarray, origin: np.ndarray, **more) -> Contents:
    """Contents of a cloud of point masses: what an integral over a volume is a sum of."""
    x = places - origin
    given = {
        "origin": origin,
        "volume": 1.0,
        "centroid": places.mean(axis=0),
        "mass": float(masses.sum()),
        "mass_moment": masses @ x,
        "mass_inertia": np.einsum("n,ni,nj->ij", masses, x, x),
        "momentum": masses @ velocity,
        "moment_of_velocity": np.einsum("n,ni,nj->ij", masses, x, velocity),
        "kinetic_energy": float(masses @ (velocity**2).sum(axis=1)) / 2,
        "internal_energy": 7.0 * float(masses.sum()),
        "carried": {"salt": 0.03 * float(masses.sum())},
    }
    return Contents(**{**given, **more})


@pytest.fixture
def cloud() -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    rng = np.random.default_rng(7)
    return rng.normal(size=(20, 3)), rng.uniform(1, 2, 20), rng.normal(size=(20, 3))


TIMES = np.array([0.2, 0.5, 0.6])


def snapshots(cloud, origins, **more) -> list[Contents]:
    # masses change in the first power of time, velocities too: all but the energy are parabolas
    places, masses, velocity = cloud
    return [
        held(places, masses * (1 + 0.3 * t), velocity * (2 - t), np.asarray(origin, float), **more)
        for t, origin in zip(TIMES, origins)
    ]


def test_rates_of_contents_are_those_of_the_point_masses(cloud) -> None:
    places, masses, velocity = cloud
    anchor, at = np.array([0.4, -0.2, 3.0]), 0.53
    found = storage_from_contents(TIMES, snapshots(cloud, [[1.0, 2, 3]] * 3), at, anchor)
    r = places - anchor
    rate = 0.3 * (2 - at) - (1 + 0.3 * at)  # of (1 + 0.3 t)(2 - t)
    assert_allclose(found.mass, 0.3 * masses.sum(), rtol=1e-12)
    assert_allclose(found.momentum, rate * masses @ velocity, rtol=1e-12)
    assert_allclose(found.angular_momentum, rate * masses @ np.cross(r, velocity), rtol=1e-11)
    assert_allclose(found.mass_moment, 0.3 * masses @ r, rtol=1e-11)
    assert_allclose(found.inertia, 0.3 * np.einsum("n,ni,nj->ij", masses, r, r), rtol=1e-11)
    assert_allclose(found.carried["salt"], 0.03 * 0.3 * masses.sum(), rtol=1e-11)
    assert found.basis == "snapshots"
    assert "0.2, 0.5, 0.6 s" in found.notes[0]


def test_rates_do_not_depend_on_the_points_that_snapshots_count_from(cloud) -> None:
    anchor = np.array([0.4, -0.2, 3.0])
    one = storage_from_contents(TIMES, snapshots(cloud, [[0.0, 0, 0]] * 3), 0.5, anchor)
    two = storage_from_contents(TIMES, snapshots(cloud, [[1.0, 2, 3], [-1, 0, 2], [4, 4, 0]]), 0.5, anchor)
    for name in ("momentum", "angular_momentum", "mass_moment", "inertia"):
        assert_allclose(getattr(two, name), getattr(one, name), rtol=1e-11, atol=1e-11)


def test_energy_is_kinetic_and_internal_and_without_the_internal_one_only_for_a_fluid_that_has_no_other(cloud) -> None:
    same = [[0.0, 0, 0]] * 3
    both = storage_from_contents(TIMES, snapshots(cloud, same), 0.5, np.zeros(3)).energy
    lacking = snapshots(cloud, same, internal_energy=None)
    assert storage_from_contents(TIMES, lacking, 0.5, np.zeros(3)).energy is None
    kinetic = storage_from_contents(TIMES, lacking, 0.5, np.zeros(3), mechanical=True).energy
    assert_allclose(both - kinetic, 7 * 0.3 * cloud[1].sum(), rtol=1e-10)


def test_what_snapshots_do_not_tell_is_not_known(cloud) -> None:
    nothing = dict.fromkeys(("mass", "mass_moment", "mass_inertia", "momentum", "moment_of_velocity", "kinetic_energy"))
    found = storage_from_contents(TIMES, snapshots(cloud, [[0.0, 0, 0]] * 3, **nothing, carried={}), 0.5, np.zeros(3))
    assert np.isnan([found.mass, *found.momentum, *found.angular_momentum]).all()
    assert found.mass_moment is None
    assert found.inertia is None
    assert found.energy is None
    assert not found.carried


def test_a_first_order_rate_says_so(cloud) -> None:
    two = snapshots(cloud, [[0.0, 0, 0]] * 3)[:2]
    assert "first order" in storage_from_contents(TIMES[:2], two, 0.2, np.zeros(3)).notes[0]
    assert "first order" not in storage_from_contents(TIMES[:2], two, 0.35, np.zeros(3)).notes[0]


def test_as_many_contents_as_times(cloud) -> None:
    with pytest.raises(FieldError, match="3 times are given, and the contents at 2"):
        storage_from_contents(TIMES, snapshots(cloud, [[0.0, 0, 0]] * 3)[:2], 0.5, np.zeros(3))


def test_an_unknown_storage_is_nan_and_says_why() -> None:
    found = unknown_storage("No volumes are given")
    assert np.isnan([found.mass, *found.momentum, *found.angular_momentum]).all()
    assert found.notes == ("No volumes are given",)


# ---- momentum from the surface --------------------------------------------------------------


def gauss_box(low: np.ndarray, high: np.ndarray, count: int = 8) -> tuple[np.ndarray, np.ndarray]:
    """Places and weights of the product of Gauss-Legendre rules over a box."""
    point, weight = np.polynomial.legendre.leggauss(count)
    axes = [(a + b) / 2 + (b - a) / 2 * point for a, b in zip(low, high)]
    places = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, 3)
    weights = np.einsum("i,j,k->ijk", weight, weight, weight).ravel() * np.prod((high - low) / 2)
    return places, weights


LOW, HIGH = np.array([0.3, -0.2, 0.1]), np.array([1.4, 0.7, 0.6])


@pytest.mark.parametrize("centre", [(0.0, 0.0, 0.0), (0.85, 0.25, 0.35)])
def test_the_surface_tells_the_momentum_of_a_solenoidal_flow(centre: tuple[float, float, float]) -> None:
    gradient = np.array([[0.4, 1.2, -0.7], [0.3, -0.9, 0.2], [1.1, 0.6, 0.5]])  # its trace is zero
    drift = np.array([0.2, -0.4, 1.0])
    surface = box(LOW, HIGH, (3, 2, 2)).surface()
    flow = lay_flow(surface, density=870.0, velocity=surface.points @ gradient.T + drift, pressure=0.0)
    found = momentum_from_surface(integrate_flow(surface, flow), np.array(centre))
    places, weights = gauss_box(LOW, HIGH, 2)
    assert_allclose(found, 870.0 * weights @ (places @ gradient.T + drift), rtol=1e-12)


def test_a_mass_balance_that_does_not_close_costs_least_in_the_middle() -> None:
    surface = box(LOW, HIGH, 2).surface()
    spread = 1e-3 * surface.points  # a divergence of 3e-3 1/s where there should be none
    flow = lay_flow(surface, density=870.0, velocity=spread + np.array([0.0, 0.0, 1.0]), pressure=0.0)
    table = integrate_flow(surface, flow)
    mass = 870.0 * np.prod(HIGH - LOW)
    exact = mass * (1e-3 * (LOW + HIGH) / 2 + [0, 0, 1.0])
    middle = np.abs(momentum_from_surface(table, (LOW + HIGH) / 2) - exact).max()
    far = np.abs(momentum_from_surface(table, np.array([50.0, 0, 0])) - exact).max()
    assert middle < 1e-10 * mass
    assert far > 0.1 * mass


def test_rates_from_the_surface_do_not_know_what_it_cannot_tell() -> None:
    momenta = np.outer(TIMES**2, [1.0, -2.0, 3.0])
    found = storage_from_momentum(TIMES, momenta, 0.5)
    assert_allclose(found.momentum, [1.0, -2.0, 3.0], rtol=1e-12)
    assert np.isnan(found.angular_momentum).all()
    assert found.energy is None
    assert found.mass == 0.0
    assert found.basis == "surface"
    assert "not known" in found.notes[0]
    with pytest.raises(FieldError, match=r"3 times are given, and momenta of the shape \(2, 3\)"):
        storage_from_momentum(TIMES, momenta[:2], 0.5)


# ---- a decaying vortex ----------------------------------------------------------------------

DENSITY, KINEMATIC = 1.3, 0.25


def decaying(time: float) -> ExactFlow:
    """Return Taylor's decaying vortices (Taylor and Green 1937; the sign of the pressure goes with this phase)."""
    fading = np.exp(-2 * KINEMATIC * time)

    def velocity(x):
        still = 0 * x[..., 2]
        return fading * np.stack(
            [np.sin(x[..., 0]) * np.cos(x[..., 1]), -np.cos(x[..., 0]) * np.sin(x[..., 1]), still], axis=-1
        )

    def pressure(x):
        return DENSITY / 4 * (np.cos(2 * x[..., 0]) + np.cos(2 * x[..., 1])) * fading**2

    return ExactFlow(DENSITY, velocity, pressure, DENSITY * KINEMATIC)


def vortex_contents(time: float) -> Contents:
    places, weights = gauss_box(LOW, HIGH)
    return held(places, DENSITY * weights, decaying(time).velocity(places), LOW, internal_energy=None, carried={})


ANCHOR, NOW = (0.2, 0.5, -0.4), 0.6


def storages() -> list[tuple[float, Storage]]:
    found = []
    for step in (0.4, 0.2, 0.1):
        times = NOW + step * np.array([-1.3, 0.0, 0.8])
        contents = [vortex_contents(t) for t in times]
        found.append((step, storage_from_contents(times, contents, NOW, ANCHOR, mechanical=True)))
    return found


def test_momentum_of_a_decaying_vortex_closes_with_its_storage_of_second_order_in_time() -> None:
    surface = box(LOW, HIGH, 16, quads=True).surface()
    flow = decaying(NOW).lay(surface)

    def balance(storage: Storage | None) -> Balance:
        return balance_of(surface, flow, anchor=ANCHOR, storage=storage).balance

    steady = balance(None)
    # exactly: momentum fades at the rate 2 nu
    now = vortex_contents(NOW)
    rate = -2 * KINEMATIC
    turning = rate * (now.angular_momentum + np.cross(now.origin - np.array(ANCHOR), now.momentum))
    exact = balance(Storage(momentum=rate * now.momentum, angular_momentum=turning))
    for law in ("momentum", "angular"):
        assert getattr(exact, law).relative() < 1.5e-3  # what flat faces with linear data leave
        assert getattr(steady, law).relative() > 0.05
    for law in ("momentum", "angular"):
        left = getattr(exact, law).residual()
        found = [(step, getattr(balance(storage), law).residual()) for step, storage in storages()]
        errors = [np.linalg.norm(residual - left) for _, residual in found]
        assert 1.8 < observed_order([step for step, _ in found], errors) < 2.2
        assert errors[-1] < 2e-3 * getattr(exact, law).size()


def test_energy_of_a_decaying_vortex_closes_with_its_storage_of_second_order_in_time() -> None:
    # what flows in and is worked in, less what friction takes (by quadrature), is what the volume gains
    flow = decaying(NOW)
    places, weights = gauss_box(LOW, HIGH)
    gradient = velocity_gradient(flow.velocity, places)
    friction = weights @ np.einsum("nij,nij->n", flow.stress(places), gradient)
    surface = box(LOW, HIGH, 32, quads=True).surface()
    table = integrate_flow(surface, flow.lay(surface))
    names = ("viscous_power", "pressure_volume_flow", "kinetic_energy_flux")
    work, pressure, kinetic = (float(table.total(name)) for name in names)
    gained = work - pressure - kinetic - friction
    scale = abs(work) + abs(pressure) + abs(kinetic) + friction
    exact = -4 * KINEMATIC * vortex_contents(NOW).kinetic_energy
    assert abs(gained - exact) < 1e-3 * scale
    steps, errors = zip(*((step, abs(storage.energy - exact)) for step, storage in storages()))
    assert 1.8 < observed_order(steps, errors) < 2.2
    assert errors[-1] < 0.01 * abs(exact)


def test_mass_of_a_filling_vessel_closes_with_its_storage() -> None:
    surface = box(LOW, HIGH, 2).surface({"x-": "inlet"}, rest="wall")
    area = float((HIGH - LOW)[1] * (HIGH - LOW)[2])
    flow = lay_flow(surface, density=2.0, supplied={"x-": {"velocity": (3.0, 0.0, 0.0)}}, pressure=0.0)
    filling = balance_of(surface, flow, storage=Storage(mass=6.0 * area)).balance.mass
    assert_allclose(filling.residual, 0.0, atol=1e-14)
    assert filling.storage == 6.0 * area
    assert_allclose(balance_of(surface, flow).balance.mass.residual, -6.0 * area, rtol=1e-14)
