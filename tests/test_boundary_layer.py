"""Layers of friction at walls: what the walls bear is what the stream loses, at rest, turning, starting and pulsing."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh import balance_of, lay_flow
from fluxmesh.balance.balance import Balance
from fluxmesh.balance.storage import Storage
from fluxmesh.field.flow import Flow
from fluxmesh.surface.surface import ControlSurface
from tests.flows import face_frames
from tests.measures import observed_order
from tests.solids import Station, box, mapped, pipe, swept
from tests.verification import Verify

SIZES = (4.0, 2.0, 1.0)
DENSITY = 1.2


def assert_order_two(errors: Any, *, below: float, tolerance: float = 0.12) -> None:
    """The errors fall as the square of the mesh size, and the last is small."""
    assert observed_order(SIZES, errors) == pytest.approx(2.0, abs=tolerance)
    assert abs(errors[-1]) < below


def solved(slope: Callable[[float, np.ndarray], Any], start: list[float], far: float) -> Callable[[Any], np.ndarray]:
    """Return the solution of an ordinary equation from known values at the wall, shape (..., n)."""
    from scipy.integrate import solve_ivp

    found = solve_ivp(slope, (0, far), start, method="DOP853", rtol=1e-12, atol=1e-13, dense_output=True)
    return lambda eta: np.moveaxis(found.sol(np.ravel(eta)).reshape(len(start), *np.shape(eta)), 0, -1)


# ---- flat plate -----------------------------------------------------------------------------

SPEED, VISCOSITY, LENGTH = 10.0, 1.5e-3, 2.0  # m/s, m²/s kinematic, m; Re = 13333
FAR = 10.0  # in units of sqrt(nu x / U): the layer ends at 5
# Blasius 1908, f''' + f f''/2 = 0 (White ch. 7, from memory): f''(0) = 0.3320573362, drag 4 f''(0)/sqrt(Re)
DRAG = 0.6641146724 * DENSITY * SPEED**2 * LENGTH / np.sqrt(SPEED * LENGTH / VISCOSITY)
AT_WALL = 0.3320573362


@cache
def blasius() -> Callable[[Any], np.ndarray]:
    """Return f, f', f'' of ``y sqrt(U / (nu x))``."""
    return solved(lambda _, f: [f[1], f[2], -f[0] * f[2] / 2], [0, 0, AT_WALL], 20 * FAR)


def plate_velocity(x: np.ndarray) -> np.ndarray:
    width = np.sqrt(VISCOSITY * x[:, 0] / SPEED)
    eta = x[:, 1] / width
    f = blasius()(eta)
    across = np.sqrt(VISCOSITY * SPEED / x[:, 0]) / 2 * (eta * f[:, 1] - f[:, 0])
    return np.column_stack([SPEED * f[:, 1], across, 0 * across])


def test_blasius_layer_has_its_published_thicknesses() -> None:
    f = blasius()(FAR)
    assert f[1] == pytest.approx(1, abs=1e-8)
    assert FAR - f[0] == pytest.approx(1.7207876575, abs=1e-8)  # displacement
    eta = np.linspace(0, FAR, 4001)
    u = blasius()(eta)[:, 1]
    from scipy.integrate import simpson

    assert simpson(u * (1 - u), x=eta) == pytest.approx(0.6641146724, abs=1e-9)  # momentum


def test_wake_of_a_plate_inside_a_streamline(verify: Verify) -> None:
    # from before the plate to its trailing edge, under the streamline that enters at the height h and leaves displaced:
    # no flow, no pressure and no friction but at the plate, whose drag is the lack of momentum in the last section
    width = np.sqrt(VISCOSITY * LENGTH / SPEED)
    high = FAR * width
    displaced = 1.7207876575 * width
    left = []
    for cells in (16, 32, 64):
        body = box((0, 0, 0), (LENGTH, 1, 0.5), (1, cells, 1), quads=True)
        body = mapped(body, lambda x: x * [1, high, 1] + np.outer(x[:, 0] / LENGTH * x[:, 1], [0, displaced, 0]))
        surface = body.surface(
            {"x-": "inlet", "x+": "outlet", "y+": "open", "z-": "symmetry", "z+": "symmetry"}, "wall"
        )
        velocity = np.tile([SPEED, 0.0, 0.0], (len(surface.points), 1))
        end = surface.points[:, 0] > LENGTH / 2
        velocity[end] = plate_velocity(surface.points[end])
        still = {"y+": {"velocity": (0, 0, 0)}}
        flow = lay_flow(surface, density=DENSITY, velocity=velocity, pressure=0.0, supplied=still)
        found = balance_of(surface, flow).balance
        assert abs(found.mass.relative) < 1e-3
        left.append(found.load.from_balance.force[0] / 0.5 - DRAG)
    assert_order_two(left, below=0.01 * DRAG)
    verify(
        what="Flat plate, Re 13333: drag from the wake over rho U² L / sqrt(Re)",
        source="Blasius 1908; White, Fluid Mechanics, ch. 7: 0.66411467",
        memory=True,
        expected=0.66411467,
        got=0.66411467 * (1 + left[-1] / DRAG),
        tolerance=0.0067,
        why="64 cells across the layer",
        order=(observed_order(SIZES, left), 2, 0.12),
        kind="law",
        law="momentum",
    )


def test_part_of_a_plate_under_a_side_that_the_stream_leaves(verify: Verify) -> None:
    # from a quarter of the plate to its end: the layer thickens and pushes the stream out through the upper side,
    # with its momentum; friction there is half of the whole, for drag goes as sqrt(x)
    high = FAR * np.sqrt(VISCOSITY * LENGTH / SPEED)
    demanded, on_plate, mass = [], [], []
    for cells in (16, 32, 64):
        body = box((LENGTH / 4, 0, 0), (LENGTH, high, 1), (cells // 2, cells, 1), quads=True)
        roles = {"x-": "inlet", "x+": "outlet", "y+": "outlet", "z-": "symmetry", "z+": "symmetry"}
        surface = body.surface(roles, "wall")
        middle, normal = face_frames(surface)
        plate = normal[:, 1] < -0.5
        traction = np.zeros_like(middle)
        # on the fluid: against the stream
        traction[plate, 0] = -AT_WALL * DENSITY * SPEED**2 * np.sqrt(VISCOSITY / (SPEED * middle[plate, 0]))
        flow = lay_flow(
            surface,
            density=DENSITY,
            velocity=plate_velocity(surface.points),
            pressure=0.0,
            traction=traction,
            at={"traction": "faces", "velocity": "nodes"},
        )
        found = balance_of(surface, flow).balance
        demanded.append(found.load.from_balance.force[0] - DRAG / 2)
        on_plate.append(found.load.from_walls.force[0] - DRAG / 2)
        mass.append(found.mass.residual / found.mass.outflow)
        side = list(body.groups).index("y+")
        assert found.momentum.group_flux[side, 0] > 0.5 * DRAG  # the side may not be left out
    assert_order_two(demanded, below=0.02 * DRAG)
    assert_order_two(on_plate, below=1e-3 * DRAG)
    assert_order_two(mass, below=1e-4)
    verify(
        what="Last three quarters of a plate under a side that the stream leaves: share of the drag",
        source="Blasius 1908: drag goes as sqrt(x), so one half",
        memory=True,
        expected=0.5,
        got=0.5 + demanded[-1] / DRAG,
        tolerance=0.02,
        why="64 cells across the layer",
        order=(observed_order(SIZES, demanded), 2, 0.12),
        kind="law",
        law="momentum",
    )
    verify(
        what="Last three quarters of a plate under a side that the stream leaves: mass left over, relative",
        source="Blasius 1908: the layer is continuous",
        memory=True,
        expected=0,
        got=mass[-1],
        tolerance=1e-4,
        why="64 cells across the layer",
        order=(observed_order(SIZES, mass), 2, 0.12),
        kind="law",
        law="mass",
    )


# ---- layers that are exact solutions --------------------------------------------------------


@dataclass(frozen=True)
class Layer:
    """An exact flow over the wall z = 0: velocity, its gradient ``du_i/dx_j``, and pressure; kinematic viscosity 1."""

    velocity: Callable[[np.ndarray], np.ndarray]
    gradient: Callable[[np.ndarray], np.ndarray]
    pressure: Callable[[np.ndarray], np.ndarray]

    def lay(self, surface: ControlSurface) -> Flow:
        middle, normal = face_frames(surface)
        gradient = self.gradient(middle)
        return lay_flow(
            surface,
            density=DENSITY,
            velocity=self.velocity(surface.points),
            pressure=self.pressure(surface.points),
            traction=DENSITY * np.einsum("nij,nj->ni", gradient + gradient.transpose(0, 2, 1), normal),
            at={"traction": "faces", "velocity": "nodes", "pressure": "nodes"},
        )


def stagnation_layer(planes: int, at_wall: float) -> Layer:
    """Plane (1) or round (2) flow against a wall, ``u = (x f', [y f'], -n f)``: f''' + n f f'' + 1 - f'² = 0."""
    f = solved(lambda _, f: [f[1], f[2], f[1] ** 2 - 1 - planes * f[0] * f[2]], [0, 0, at_wall], 4.0)
    along = np.array([1.0, planes - 1.0])

    def velocity(x: np.ndarray) -> np.ndarray:
        g = f(x[:, 2])
        return np.column_stack([x[:, :2] * along * g[:, 1:2], -planes * g[:, 0]])

    def gradient(x: np.ndarray) -> np.ndarray:
        g = f(x[:, 2])
        out = np.zeros((len(x), 3, 3))
        for k in range(2):
            out[:, k, k] = along[k] * g[:, 1]
            out[:, k, 2] = along[k] * x[:, k] * g[:, 2]
        out[:, 2, 2] = -planes * g[:, 1]
        return out

    def pressure(x: np.ndarray) -> np.ndarray:
        g = f(x[:, 2])
        return -DENSITY * ((x[:, :2] ** 2 @ along) / 2 + (planes * g[:, 0]) ** 2 / 2 + planes * g[:, 1])

    return Layer(velocity, gradient, pressure)


@pytest.mark.parametrize(("planes", "at_wall"), [(1, 1.2325876568), (2, 1.3119376939)], ids=["Hiemenz", "Homann"])
def test_flow_against_a_wall(verify: Verify, planes: int, at_wall: float) -> None:
    # Hiemenz 1911, Homann 1936 (White, Viscous Fluid Flow ch. 3, from memory): exact Navier-Stokes; friction
    # rho a x sqrt(a nu) f''(0) with a = nu = 1, integrated from x = 0.2 to 1.2 over one metre: 0.7 rho f''(0)
    layer = stagnation_layer(planes, at_wall)
    linear, angular, walls, demanded = [], [], [], []
    for cells in (4, 8, 16):
        body = box((0.2, -0.3, 0), (1.2, 0.7, 2.5), (cells, cells, 2 * cells))
        surface = body.surface({"z-": "wall"})
        found = balance_of(surface, layer.lay(surface), anchor=(0.3, 0.4, -0.2)).balance
        linear.append(found.momentum.relative())
        angular.append(found.angular.relative())
        walls.append(found.load.from_walls.force[0] - 0.7 * DENSITY * at_wall)
        demanded.append(found.load.from_balance.force[0] - 0.7 * DENSITY * at_wall)
    assert_order_two(linear, below=1e-3)
    assert_order_two(angular, below=1e-3)
    assert abs(walls[-1]) < 1e-9  # friction is linear in x
    assert_order_two(demanded, below=0.05)
    verify(
        what=f"{'Plane' if planes == 1 else 'Round'} flow against a wall: friction over rho a x sqrt(a nu)",
        source=f"{'Hiemenz 1911' if planes == 1 else 'Homann 1936'}; White, Viscous Fluid Flow, ch. 3: f''(0)",
        memory=True,
        expected=at_wall,
        got=found.load.from_balance.force[0] / (0.7 * DENSITY),
        tolerance=0.06,
        why="32 cells up",
        order=(observed_order(SIZES, demanded), 2, 0.12),
        kind="law",
        law="momentum",
    )


F_WALL, G_WALL = 0.5102326191, -0.6159220144


@cache
def turning_disk() -> Callable[[Any], np.ndarray]:
    """Return F, F', G, G', H of ``z sqrt(Omega / nu)``."""

    def slope(_: float, y: np.ndarray) -> list[float]:
        f, df, g, dg, h = y
        return [df, f * f - g * g + h * df, dg, 2 * f * g + h * dg, -2 * f]

    return solved(slope, [0, F_WALL, 1, G_WALL, 0], 10.0)


def disk_layer() -> Layer:
    """Flow over a disk that turns at 1 rad/s about z: ``u = (F x - G y, F y + G x, H)``, ``p = rho (H' - H²/2)``."""

    def velocity(x: np.ndarray) -> np.ndarray:
        f, _, g, _, h = turning_disk()(x[:, 2]).T
        a, b = x[:, 0], x[:, 1]
        return np.column_stack([f * a - g * b, f * b + g * a, h])

    def gradient(x: np.ndarray) -> np.ndarray:
        f, df, g, dg, _ = turning_disk()(x[:, 2]).T
        a, b = x[:, 0], x[:, 1]
        zero = 0 * a
        rows = [[f, -g, df * a - dg * b], [g, f, df * b + dg * a], [zero, zero, -2 * f]]
        return np.moveaxis(np.array(rows), 2, 0)

    def pressure(x: np.ndarray) -> np.ndarray:
        f, _, _, _, h = turning_disk()(x[:, 2]).T
        return -DENSITY * (2 * f + h**2 / 2)

    return Layer(velocity, gradient, pressure)


def test_torque_of_a_turning_disk(verify: Verify) -> None:
    # von Karman 1921, Cochran 1934 (White, Viscous Fluid Flow ch. 3, from memory): G'(0) = -0.6159220144; the wall's
    # torque pi/2 rho R⁴ sqrt(nu Omega³) 0.6159 leaves with the radial flow, C_M = 3.8699521512 / sqrt(Re) for two sides
    radius, height = 3.0, 8.0
    torque = np.pi / 2 * DENSITY * radius**4 * -G_WALL
    two_sides = 2 * torque / (DENSITY * radius**5 / 2) * np.sqrt(radius**2)
    assert two_sides == pytest.approx(3.8699521512, rel=1e-9)
    # far from the disk only the inflow is left
    assert turning_disk()(height) == pytest.approx([0, 0, 0, 0, -0.8844741], abs=2e-3)
    walls, demanded, carried, closing = [], [], [], []
    for k in (1, 2, 4):
        levels = height * np.linspace(0, 1, 8 * k + 1) ** 1.5
        body = swept([Station((0, 0, z), radius) for z in levels], 12 * k, 3 * k)
        surface = body.surface({"inlet": "wall"})  # its lower end is the disk
        found = balance_of(surface, disk_layer().lay(surface), anchor=(0.5, -0.3, 0.2)).balance
        walls.append(found.load.from_walls.moment[2] + torque)  # the fluid holds the disk back
        demanded.append(found.load.from_balance.moment[2] + torque)
        side = list(body.groups).index("wall")
        carried.append(found.angular.group_flux[side, 2] - torque)
        closing.append(found.momentum.relative())
    assert_order_two(walls, below=0.02 * torque)
    assert_order_two(demanded, below=0.02 * torque)
    assert_order_two(carried, below=0.02 * torque)
    assert_order_two(closing, below=5e-3, tolerance=0.2)
    verify(
        what="Turning disk: torque from the balance over pi/2 rho R⁴ sqrt(nu O³)",
        source="von Karman 1921, Cochran 1934; White, Viscous Fluid Flow, ch. 3: G'(0)",
        memory=True,
        expected=-0.6159220144,
        got=-0.6159220144 * (1 - demanded[-1] / torque),
        tolerance=0.013,
        why="48 facets around, 32 layers",
        order=(observed_order(SIZES, demanded), 2, 0.12),
        kind="law",
        law="angular",
    )


# ---- layers that change in time -------------------------------------------------------------


@pytest.mark.parametrize("time", [0.3, 2.0])
def test_a_plate_that_starts_at_once(verify: Verify, time: float) -> None:
    # Stokes 1851, Rayleigh 1911 (Batchelor section 4.3, from memory): u = U erfc(z / sqrt(4 nu t)); what the fluid
    # gains is what the plate gives, rho U sqrt(nu / (pi t)) a unit area. The gain is integrated here by itself.
    from scipy.special import erfc

    speed, kinematic = 3.0, 0.2
    depth = np.sqrt(4 * kinematic * time)
    body = box((0, 0, 0), (1.5, 0.8, 8 * depth), (2, 2, 12), quads=True)
    surface = body.surface({"z-": "wall", "x-": "inlet", "x+": "outlet"}, "symmetry")
    z = surface.points[:, 2]
    velocity = np.column_stack([speed * erfc(z / depth), 0 * z, 0 * z])
    friction = DENSITY * speed * np.sqrt(kinematic / (np.pi * time))
    traction = np.zeros((surface.face_count, 3))
    traction[body.groups["z-"], 0] = friction  # the plate drags the fluid along
    node, weight = np.polynomial.legendre.leggauss(60)
    at = 4 * depth * (node + 1)
    rate = speed * at / (np.sqrt(np.pi) * depth * time) * np.exp(-((at / depth) ** 2))  # du/dt
    gain, lever = (DENSITY * 1.2 * 4 * depth * (weight * rate * arm).sum() for arm in (1.0, at))
    kept = Storage(momentum=np.array([gain, 0, 0]), angular_momentum=np.array([0, lever, -0.4 * gain]))

    def found(storage: Storage) -> Balance:
        flow = lay_flow(
            surface,
            density=DENSITY,
            velocity=velocity,
            pressure=0.0,
            traction=traction,
            at={"traction": "faces", "velocity": "nodes"},
        )
        return balance_of(surface, flow, storage=storage).balance

    done = found(kept)
    assert done.load.from_walls.force[0] == pytest.approx(-1.2 * friction, rel=1e-12)
    assert_allclose(done.load.from_balance.force, done.load.from_walls.force, rtol=0, atol=1e-12 * friction)
    assert_allclose(done.momentum.residual(), 0, rtol=0, atol=1e-12 * friction)
    # friction at the other sides is left out, so of the moments only that about z must close
    assert done.angular.residual()[2] == pytest.approx(0, abs=1e-12 * friction)
    assert_allclose(found(Storage()).momentum.residual(), -kept.momentum, rtol=0, atol=1e-12 * friction)
    verify(
        what=f"Plate that starts at once, t = {time:g} s, with storage: friction over rho U sqrt(nu / (pi t))",
        source="Stokes 1851, Rayleigh 1911; Batchelor, section 4.3",
        memory=True,
        expected=-1,
        got=done.load.from_balance.force[0] / (1.2 * friction),
        tolerance=1e-11,
        why="the storage by 60 Gauss points: round-off",
        kind="law",
        law="momentum",
    )


@pytest.mark.parametrize(
    ("number", "size", "lead"),
    [(2, 0.41246790420, 56.738427), (5, 0.75560966811, 18.647152), (10, 0.86835067485, 8.693368)],
)
def test_pulsating_flow_in_a_pipe(verify: Verify, number: int, size: float, lead: float) -> None:
    # Womersley 1955: with -dp/dz = Re K e^(iwt) the flow is Re K pi R² / (i w rho) (1 - F10) e^(iwt); |1 - F10| and the
    # angle that the flow is short of a lag of 90 degrees, for three Womersley numbers. Momentum: what the pressure
    # gives, less what the walls bear, is rho L dQ/dt.
    from scipy.special import jv

    radius, long, omega, force = 0.1, 0.5, 4.0, 30.0
    viscosity = DENSITY * omega * (radius / number) ** 2
    root = 1j**1.5 * number
    factor = 1 - 2 * jv(1, root) / (root * jv(0, root))
    section = np.pi * radius**2
    amplitude, lag, closing, unsteady = [], [], [], []
    for k in (1, 2, 4):
        body = pipe(radius, long, 12 * k, 1, 6 * k)
        surface = body.surface({"inlet": "inlet", "outlet": "outlet"}, "wall")
        r = np.hypot(surface.points[:, 0], surface.points[:, 1]) / radius
        profile = force / (1j * omega * DENSITY) * (1 - jv(0, root * r) / jv(0, root))
        slope = force / (1j * omega * DENSITY) * root * jv(1, root) / jv(0, root) / radius
        flows = []
        for phase in (0.0, np.pi / 2, 2.1):
            turn = np.exp(1j * phase)
            along = np.real(profile * turn)
            traction = np.zeros((surface.face_count, 3))
            traction[body.groups["wall"], 2] = viscosity * np.real(slope * turn)
            flow = lay_flow(
                surface,
                density=DENSITY,
                velocity=np.column_stack([0 * along, 0 * along, along]),
                pressure=-np.real(force * turn) * surface.points[:, 2],
                traction=traction,
                at={"traction": "faces", "velocity": "nodes", "pressure": "nodes"},
            )
            gain = long * section * force * np.real(factor * turn)
            found = balance_of(surface, flow, storage=Storage(momentum=np.array([0, 0, gain]))).balance
            flows.append(found.table.column("mass_flow")[list(body.groups).index("outlet")] / DENSITY)
        closing.append(found.momentum.residual()[2] / (long * section * force))
        unsteady.append(found.momentum.storage[2] / (long * section * force))
        # at the phases 0 and 90 degrees the flow is Re and -Im of its complex amplitude
        measured = (flows[0] - 1j * flows[1]) * 1j * omega * DENSITY / (force * section)
        amplitude.append(abs(measured) - size)
        lag.append(np.degrees(np.angle(measured)) - lead)
    assert abs(unsteady[-1]) > 0.3  # the storage is no small part
    assert_order_two(closing, below=0.01)
    assert_order_two(amplitude, below=0.01)
    assert abs(lag[-1]) < 0.2
    assert abs(lag[-1]) < abs(lag[0]) / 10
    verify(
        what=f"Pulsating pipe flow, Womersley number {number}: size of the flow over K pi R² / (w rho)",
        source="Womersley 1955: |1 - F10|",
        memory=True,
        expected=size,
        got=size + amplitude[-1],
        tolerance=0.01,
        why="48 facets around",
        order=(observed_order(SIZES, amplitude), 2, 0.12),
        kind="law",
        law="mass",
    )
    verify(
        what=f"Pulsating pipe flow, Womersley number {number}, with storage: force left over, of the pressure's",
        source="Womersley 1955: rho dQ/dt = K A - 2 pi R tau",
        memory=True,
        expected=0,
        got=closing[-1],
        tolerance=0.01,
        why="48 facets around",
        order=(observed_order(SIZES, closing), 2, 0.12),
        kind="law",
        law="momentum",
    )
