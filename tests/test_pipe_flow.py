"""Developed flow in pipes and ducts: factors of the profile, wall friction against pressure drop, the short form."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh import balance_of, lay_flow
from fluxmesh.balance.balance import Balance
from tests.flows import ExactFlow, face_frames, poiseuille
from tests.measures import observed_order
from tests.solids import Solid, box, mapped, moved, pipe, rigid_motion
from tests.verification import Verify

RADIUS, LENGTH, MEAN, VISCOSITY, DENSITY = 0.1, 0.5, 2.0, 0.4, 870.0
AREA = np.pi * RADIUS**2
FLOW = poiseuille(RADIUS, MEAN, VISCOSITY, DENSITY)
DROP = 8 * VISCOSITY * MEAN * LENGTH / RADIUS**2
FRICTION = 8 * np.pi * VISCOSITY * MEAN * LENGTH  # = DROP × AREA
PORTS = {"inlet": "inlet", "outlet": "outlet"}
SIZES = (4.0, 2.0, 1.0)


def segment(level: int) -> Solid:
    return pipe(RADIUS, LENGTH, 12 * 2**level, 2, 2 * 2**level)


def laminar(level: int, **options: object) -> Balance:
    surface = segment(level).surface(PORTS, rest="wall")
    return balance_of(surface, FLOW.lay(surface, **options)).balance


def test_factors_of_laminar_flow_in_a_round_pipe(verify: Verify) -> None:
    # momentum 4/3, kinetic energy 2 (White, Fluid Mechanics ch. 3 and 6, from memory)
    found = [laminar(level).ports for level in (0, 1, 2, 3)]
    for port in PORTS:
        for exact, values in (
            (4 / 3, [ports[port].momentum_factor for ports in found]),
            (2.0, [ports[port].kinetic_energy_factor for ports in found]),
            (MEAN, [ports[port].mean_speed for ports in found]),
        ):
            errors = np.array(values) - exact
            assert observed_order([8, 4, 2, 1], errors) == pytest.approx(2.0, abs=0.1)
            assert abs(errors[-1]) < 2e-3 * exact
        assert found[-1][port].reversed_share == 0.0
    verify(
        what="Laminar flow in a round pipe, velocities on points: momentum and kinetic-energy factor",
        source="White, Fluid Mechanics, ch. 3 and 6: 4/3 and 2",
        memory=True,
        expected=(4 / 3, 2),
        got=(found[-1]["outlet"].momentum_factor, found[-1]["outlet"].kinetic_energy_factor),
        tolerance=4e-3,
        why="96 facets around; second order is asserted beside",
        kind="profile",
    )


def test_pressure_drop_equals_wall_friction(verify: Verify) -> None:
    # Hagen-Poiseuille: (p1 - p2) pi R² = 8 pi mu U L, felt by the walls as much as the ports demand it
    walls, demand = [], []
    for level in (1, 2, 3):
        found = laminar(level)
        assert abs(found.mass.relative) < 1e-14
        assert_allclose(found.momentum.flux(), 0, rtol=0, atol=1e-12 * DENSITY * MEAN**2 * AREA)
        walls.append(found.load.from_walls.force[2] - FRICTION)
        demand.append(found.load.from_balance.force[2] - FRICTION)
        # the stress is linear in position, so on the faceted pipe too the two agree to round-off
        assert_allclose(found.momentum.residual(), 0, rtol=0, atol=1e-13 * FRICTION)
        for load in (found.load.from_walls, found.load.from_balance):
            assert_allclose(load.force[:2], 0, rtol=0, atol=1e-12 * FRICTION)
            assert_allclose(load.moment, 0, rtol=0, atol=1e-12 * FRICTION)
    for errors in (walls, demand):
        assert observed_order(SIZES, errors) == pytest.approx(2.0, abs=0.1)
        assert abs(errors[-1]) < 0.01 * FRICTION
    verify(
        what="Hagen-Poiseuille flow: friction on the walls, by them and by the ports, over 8 pi mu U L",
        source="Hagen 1839, Poiseuille 1840; White, Fluid Mechanics, ch. 6",
        memory=True,
        expected=(1, 1),
        got=(found.load.from_walls.force[2] / FRICTION, found.load.from_balance.force[2] / FRICTION),
        tolerance=0.01,
        why="96 facets around",
        order=(observed_order(SIZES, demand), 2, 0.1),
        kind="law",
        law="momentum",
    )


def test_the_same_pipe_laid_askew() -> None:
    turn, shift = rigid_motion(np.random.default_rng(4), 10.0)
    surface = moved(segment(1), turn, shift).surface(PORTS, rest="wall")
    home = (surface.points - shift) @ turn
    middle, normal = face_frames(surface)
    traction = FLOW.traction((middle - shift) @ turn, normal @ turn) @ turn.T
    flow = lay_flow(
        surface, density=DENSITY, velocity=FLOW.velocity(home) @ turn.T, pressure=FLOW.pressure(home), traction=traction
    )
    found, plain = balance_of(surface, flow, anchor=shift).balance, laminar(1)
    for one, two in (
        (found.load.from_walls, plain.load.from_walls),
        (found.load.from_balance, plain.load.from_balance),
    ):
        assert_allclose(one.force, turn @ two.force, rtol=0, atol=1e-11 * FRICTION)
        assert_allclose(one.moment, turn @ two.moment, rtol=0, atol=1e-10 * FRICTION)


def test_power_of_the_pressure_is_the_dissipation(verify: Verify) -> None:
    # (p1 - p2) Q = 8 pi mu U² L; the ports' viscous traction has no power, since it is across the flow
    errors = []
    for level in (1, 2, 3):
        table = laminar(level).table
        errors.append(-table.total("pressure_volume_flow") - 8 * np.pi * VISCOSITY * MEAN**2 * LENGTH)
        assert_allclose(table.total("viscous_power"), 0, rtol=0, atol=1e-10)
    assert observed_order(SIZES, errors) == pytest.approx(2.0, abs=0.1)
    verify(
        what="Hagen-Poiseuille flow: power of the pressure over 8 pi mu U² L",
        source="the dissipation (White, Fluid Mechanics, ch. 6)",
        memory=True,
        expected=1,
        got=1 + errors[-1] / (8 * np.pi * VISCOSITY * MEAN**2 * LENGTH),
        tolerance=0.01,
        why="96 facets around",
        order=(observed_order(SIZES, errors), 2, 0.1),
        kind="law",
        law="energy",
    )


def test_short_form_says_what_a_developing_profile_adds(verify: Verify) -> None:
    # from uniform to parabolic at the same area: (4/3 - 1) rho U² A beyond flow × (V2 - V1), which is zero
    effect, load = [], []
    for level in (1, 2, 3):
        surface = segment(level).surface(PORTS, rest="wall")
        flow = FLOW.lay(surface, supplied={"inlet": {"velocity": (0, 0, MEAN), "pressure": 100.0}})
        found = balance_of(surface, flow).balance
        short = found.short_form
        assert (short.inlet, short.outlet) == ("inlet", "outlet")
        assert_allclose(short.full_flux - short.rate, short.profile_effect, rtol=0, atol=1e-12)
        effect.append(short.full_flux[2] - DENSITY * MEAN**2 * AREA / 3)
        # the pipe is pushed by the pressure, less what the profile takes up
        exact = (100.0 + DROP) * AREA - DENSITY * MEAN**2 * AREA / 3
        load.append(found.load.from_balance.force[2] - exact)
    assert observed_order(SIZES, effect) == pytest.approx(2.0, abs=0.1)
    assert observed_order(SIZES, load) == pytest.approx(2.0, abs=0.1)
    # the mean velocities differ by what the facets lose of the flow, so the short form itself tends to zero
    assert abs(short.rate[2]) < 0.01 * DENSITY * MEAN**2 * AREA
    assert abs(effect[-1]) < 0.01 * DENSITY * MEAN**2 * AREA
    verify(
        what="Pipe with a developing profile, uniform to parabolic: momentum gained over rho U² A",
        source="White, Fluid Mechanics, ch. 3: 4/3 - 1",
        memory=True,
        expected=1 / 3,
        got=1 / 3 + effect[-1] / (DENSITY * MEAN**2 * AREA),
        tolerance=0.01,
        why="96 facets around",
        order=(observed_order(SIZES, effect), 2, 0.1),
        kind="law",
        law="momentum",
    )


def test_without_a_change_of_profile_the_short_form_is_the_whole() -> None:
    short = laminar(1).short_form
    assert_allclose(short.profile_effect, 0, rtol=0, atol=1e-11 * DENSITY * MEAN**2 * AREA)
    assert short.mass_flow == pytest.approx(laminar(1).mass.outflow, rel=1e-14)
    assert laminar(3).short_form.mass_flow == pytest.approx(DENSITY * MEAN * AREA, rel=4e-3)


def test_velocity_on_faces_loses_part_of_the_momentum_factor() -> None:
    # a mean over a face squared is never more than the mean of the square: the loss is of order two, always low
    errors = []
    for level in (1, 2, 3):
        surface = segment(level).surface(PORTS, rest="wall")
        middle, _ = face_frames(surface)
        flow = lay_flow(surface, density=DENSITY, velocity=FLOW.velocity(middle))
        errors.append(balance_of(surface, flow).balance.ports["outlet"].momentum_factor - 4 / 3)
    assert max(errors) < 0
    assert observed_order(SIZES, errors) == pytest.approx(2.0, abs=0.2)


# ---- other profiles -------------------------------------------------------------------------


def factors(solid: Solid, velocity: Callable[[np.ndarray], np.ndarray]) -> tuple[float, float]:
    """Momentum and kinetic-energy factor of an axial velocity on the outlet at the far end of z."""
    surface = solid.surface({"outlet": "outlet", "z+": "outlet"}, rest="wall")
    along = velocity(surface.points)
    flow = lay_flow(surface, density=1.2, velocity=along[:, None] * [0, 0, 1])
    name = "outlet" if "outlet" in solid.groups else "z+"
    port = balance_of(surface, flow).balance.ports[name]
    return port.momentum_factor, port.kinetic_energy_factor


@pytest.mark.parametrize(
    ("n", "momentum", "energy"),
    [(6, 1.0269097222, 1.0767761203), (7, 1.0204081633, 1.0583825367), (10, 1.0106250000, 1.0306346990)],
)
def test_factors_of_turbulent_power_laws(verify: Verify, n: int, momentum: float, energy: float) -> None:
    # u = Umax (1 - r/R)^(1/n): beta = (1+m)²(2+m)² / (2 (1+2m)(2+2m)), alpha = (1+m)³(2+m)³ / (4 (1+3m)(2+3m)),
    # m = 1/n (from memory). The gradient at the wall is infinite, so rings crowd there: 1 - r/R goes as a cube
    def crowded(x: np.ndarray) -> np.ndarray:
        radius = np.hypot(x[:, 0], x[:, 1])
        stretch = np.where(radius > 0, (1 - np.maximum(1 - radius, 0) ** 3) / np.where(radius > 0, radius, 1), 1)
        return x * np.column_stack([stretch, stretch, np.ones(len(x))])

    errors = []
    for rings in (8, 16, 32):
        body = mapped(pipe(1.0, 1.0, 12, 1, rings), crowded)
        found = factors(body, lambda x: np.maximum(1 - np.hypot(x[:, 0], x[:, 1]), 0) ** (1 / n))
        errors.append(np.array(found) - [momentum, energy])
    # the share of facets in the area cancels from the factors, so only the rings count
    assert (np.abs(errors[-1]) < [5e-4, 1e-3]).all()
    assert observed_order(SIZES, [e[0] for e in errors]) == pytest.approx(2.0, abs=0.4)
    assert observed_order(SIZES, [e[1] for e in errors]) == pytest.approx(2.0, abs=0.4)
    verify(
        what=f"Power law 1/{n} in a pipe, velocities on points: momentum and kinetic-energy factor",
        source="(1+m)²(2+m)²/(2(1+2m)(2+2m)), (1+m)³(2+m)³/(4(1+3m)(2+3m))",
        memory=True,
        expected=(momentum, energy),
        got=errors[-1] + (momentum, energy),
        tolerance=1e-3,
        why="infinite slope at the wall",
        order=(observed_order(SIZES, [e[0] for e in errors]), 2, 0.4),
        kind="profile",
    )


@pytest.mark.parametrize(
    ("aspect", "momentum", "energy"),
    [(1.0, 1.3784186918, 2.1541805191), (0.5, 1.3474586596, 2.0389181724), (0.25, 1.2875952156, 1.8255688659)],
)
def test_factors_of_laminar_flow_in_rectangular_ducts(
    verify: Verify, aspect: float, momentum: float, energy: float
) -> None:
    # Fourier series of Shah and London 1978, ch. VII; factors recomputed by two routes
    def velocity(x: np.ndarray) -> np.ndarray:
        y, z = x[:, 0], x[:, 1]  # |y| < aspect, |z| < 1
        total = np.zeros(len(x))
        for k in range(1, 80, 2):
            rate = k * np.pi / (2 * aspect)
            decay = (np.exp(rate * (z - 1)) + np.exp(-rate * (z + 1))) / (1 + np.exp(-2 * rate))
            total += (-1) ** ((k - 1) // 2) / k**3 * (1 - decay) * np.cos(rate * y)
        return total

    errors = []
    for cells in (8, 16, 32):
        body = box((-aspect, -1, 0), (aspect, 1, 1), (cells, round(cells / aspect**0.5), 1), quads=True)
        errors.append(np.array(factors(body, velocity)) - [momentum, energy])
    assert observed_order(SIZES, [e[0] for e in errors]) == pytest.approx(2.0, abs=0.2)
    assert observed_order(SIZES, [e[1] for e in errors]) == pytest.approx(2.0, abs=0.2)
    assert (np.abs(errors[-1]) < 0.01).all()
    verify(
        what=f"Laminar flow in a duct of {aspect:g} : 1, velocities on points: momentum and kinetic-energy factor",
        source="Shah and London 1978, Laminar Flow Forced Convection in Ducts, ch. VII",
        memory=True,
        expected=(momentum, energy),
        got=errors[-1] + (momentum, energy),
        tolerance=0.01,
        why="32 cells across",
        order=(observed_order(SIZES, [e[0] for e in errors]), 2, 0.2),
        kind="profile",
    )


def test_a_uniform_profile_has_factors_of_one_whatever_the_facets() -> None:
    momentum, energy = factors(pipe(1.0, 1.0, 7, 1, 3), lambda x: np.full(len(x), 3.0))
    assert_allclose([momentum, energy], 1.0, rtol=1e-14)


def test_the_exact_flow_is_checked_by_its_own_traction() -> None:
    # the helper's stress, by complex step, against mu du/dr = -4 mu U / R at the wall
    wall = np.array([[RADIUS, 0, 0.2]])
    flow: ExactFlow = FLOW
    assert_allclose(flow.traction(wall, np.array([[1.0, 0, 0]])), [[0, 0, -4 * VISCOSITY * MEAN / RADIUS]], rtol=1e-14)
