"""A control surface that moves, against mass points that change as seen from it: nothing but definitions.

Inside there are mass points at rest in the frame, with a mass, a relative velocity, and the rates of both. What flows
through the surface is a cloud of elements. Both together keep the mass law, which is all that ties them.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pytest

from fluxmesh.balance.balance import balance_table
from fluxmesh.balance.energy import energy_balance
from fluxmesh.balance.enthalpy import mechanical_enthalpy
from fluxmesh.balance.setting import GroupData, Hardware, Setting
from fluxmesh.balance.storage import Storage, storage_from_contents
from fluxmesh.field.contents import Contents, contents_about, relative_contents
from fluxmesh.field.frame import Frame
from tests.test_core_sums import ANCHOR, GRAVITY, GROUPS, Array, Cloud, close, cloud, setting

AXIS = np.array([2.0, 1.0, -2.0]) / 3.0
THROUGH = (0.7, 0.2, -0.9)
TURNS = Frame(rate=1.7, axis=tuple(AXIS), through=THROUGH)
MOVES = Frame(velocity=(0.8, -0.5, 0.3), acceleration=(-1.1, 0.4, 0.9))
BOTH = Frame(velocity=(0.8, -0.5, 0.3), acceleration=(-1.1, 0.4, 0.9), rate=-0.9, axis=tuple(AXIS), through=THROUGH)
FRAMES = pytest.mark.parametrize("frame", [TURNS, MOVES, BOTH], ids=["turns", "moves", "both"])


@dataclass(frozen=True, eq=False)
class Inside:
    """Mass points: place, mass, relative velocity, internal energy a mass, and the rates of the last three."""

    x: Array
    m: Array
    v: Array
    e: Array
    m_rate: Array
    v_rate: Array
    e_rate: Array

    def contents(self, origin: Array) -> Contents:
        x, mv = self.x - origin, self.m[:, None] * self.v
        return Contents(
            origin,
            1.0,
            np.zeros(3),
            mass=float(self.m.sum()),
            mass_moment=self.m @ x,
            mass_inertia=np.einsum("n,ni,nj->ij", self.m, x, x),
            momentum=mv.sum(axis=0),
            moment_of_velocity=np.einsum("ni,nj->ij", x, mv),
            kinetic_energy=float((self.m * (self.v**2).sum(axis=1)).sum()) / 2,
            internal_energy=float(self.m @ self.e),
        )

    def storage(self, basis: str = "snapshots") -> Storage:
        """Rates as seen from the frame, about the anchor."""
        arm = self.x - np.array(ANCHOR)
        pushed = self.m_rate[:, None] * self.v + self.m[:, None] * self.v_rate
        energy = self.m_rate * (self.e + (self.v**2).sum(axis=1) / 2)
        energy = energy + self.m * (self.e_rate + (self.v * self.v_rate).sum(axis=1))
        return Storage(
            mass=float(self.m_rate.sum()),
            momentum=pushed.sum(axis=0),
            angular_momentum=np.cross(arm, pushed).sum(axis=0),
            energy=float(energy.sum()),
            mass_moment=self.m_rate @ arm,
            inertia=np.einsum("n,ni,nj->ij", self.m_rate, arm, arm),
            basis=basis,
        )


def inside(one: Cloud, seed: int = 0) -> Inside:
    """Mass points whose momentum and change of mass fit what flows through the surface."""
    rng = np.random.default_rng(100 + seed)
    x, m = rng.normal(size=(6, 3)) + 1.0, rng.uniform(0.5, 2.0, 6)
    m_rate = rng.normal(size=6)
    m_rate += (-one.mass.sum() - m_rate.sum()) / 6
    v = rng.normal(size=(6, 3))
    # ∫ρV dv = ∮ρ x V·n dA + d/dt ∫ρ x dv
    v += (one.x.T @ one.mass + x.T @ m_rate - m @ v) / m.sum()
    e, v_rate, e_rate = rng.normal(size=6), rng.normal(size=(6, 3)), rng.normal(size=6)
    return Inside(x, m, v, e, m_rate, v_rate, e_rate)


def absolute(frame: Frame, x: Array, v: Array) -> tuple[Array, Array]:
    """Velocity of the frame, and absolute velocity, at places."""
    spin = frame.rate * np.array(frame.axis)
    moving = np.array(frame.velocity) + np.cross(spin, x - np.array(frame.through))
    return moving, moving + v


def changing(frame: Frame, held: Inside) -> tuple[Array, Array, Array]:
    """Velocity of the frame at each mass point, absolute velocity, and its rate as the point moves with the frame."""
    spin = frame.rate * np.array(frame.axis)
    moving, whole = absolute(frame, held.x, held.v)
    towards = np.cross(spin, np.cross(spin, held.x - np.array(frame.through)))
    return moving, whole, held.v_rate + np.cross(spin, held.v) + np.array(frame.acceleration) + towards


def rates(frame: Frame, held: Inside) -> tuple[Array, Array]:
    """Rate of momentum and of angular momentum about the anchor, in the inertial frame."""
    moving, whole, rate = changing(frame, held)
    force = held.m_rate[:, None] * whole + held.m[:, None] * rate
    moment = np.cross(held.x - np.array(ANCHOR), force) + np.cross(moving, held.m[:, None] * whole)
    return force.sum(axis=0), moment.sum(axis=0)


@FRAMES
@pytest.mark.parametrize("turned", [0, 1])
def test_ledgers_of_a_surface_that_moves(frame: Frame, turned: int) -> None:
    one = cloud(turned)
    held = inside(one, turned)
    done = balance_table(
        one.table(), setting(frame=frame), storage=held.storage(), contents=held.contents(np.array([0.4, 0.8, -0.2]))
    )
    arm = one.x - np.array(ANCHOR)
    _, whole = absolute(frame, one.x, one.v)
    carried = one.mass[:, None] * whole
    close(done.momentum.group_flux, one.by_group(carried))
    close(done.angular.group_flux, one.by_group(np.cross(arm, carried)))
    force, moment = rates(frame, held)
    close(done.momentum.storage, force)
    close(done.angular.storage, moment)
    # what a steady velocity carries does not count in sizes
    drift, mass = np.array(frame.velocity), held.m_rate.sum()
    rows = [*one.by_group(carried - one.mass[:, None] * drift), *done.momentum.group_pressure]
    rows += [*done.momentum.group_viscous, done.momentum.weight, force - drift * mass]
    close(done.momentum.size(), sum(float(np.linalg.norm(row)) for row in rows))
    if frame.turns:
        axis = np.array(frame.axis)
        about = one.x - np.array(THROUGH)
        left = np.cross(about, carried + one.p[:, None] * one.n - one.t * one.area[:, None]).sum(axis=0)
        moving, inner, rate = changing(frame, held)
        pushed = held.m_rate[:, None] * inner + held.m[:, None] * rate
        turning = np.cross(held.x - np.array(THROUGH), pushed) + np.cross(moving, held.m[:, None] * inner)
        weight = np.cross(held.x - np.array(THROUGH), held.m[:, None] * np.array(GRAVITY))
        close(done.axial.residual(), (left + turning.sum(axis=0) - weight.sum(axis=0)) @ axis * axis)


@FRAMES
def test_the_surface_alone_tells_the_rates_that_it_can(frame: Frame) -> None:
    # without a volume file the momentum inside follows from the mass law, if its density is one
    one = cloud(2)
    held = inside(one, 2)
    bare = held.contents(np.zeros(3))
    bare = replace(bare, mass_inertia=None, momentum=None, moment_of_velocity=None, kinetic_energy=None)
    done = balance_table(one.table(), setting(frame=frame), storage=held.storage(), contents=bare)
    force, moment = rates(frame, held)
    close(done.momentum.storage, force)
    assert done.angular.known == (not frame.turns)
    if not frame.turns:
        close(done.angular.storage, moment)


@FRAMES
def test_power_on_hardware_that_moves(frame: Frame) -> None:
    one = cloud(3)
    held = inside(one, 3)
    done = balance_table(one.table(), setting(frame=frame), storage=held.storage(), contents=held.contents(np.ones(3)))
    shell = one.group == 3
    moving, _ = absolute(frame, one.x, one.v)
    load = one.p[:, None] * one.n - one.t * one.area[:, None]
    close(done.power.from_walls, (load * moving)[shell].sum())
    if frame.turns:
        about = one.x - np.array(THROUGH)
        close(done.power.torque_from_walls, np.cross(about, load)[shell].sum(axis=0) @ np.array(frame.axis))
    missing = done.power.from_balance - done.power.from_walls
    # what walls and balance tell differ by the residuals at the velocities of the frame
    spin, left = frame.rate * np.array(frame.axis), done.momentum.residual()
    turning = done.axial.residual() if done.axial is not None else np.zeros(3)
    close(missing, -(left @ np.array(frame.velocity)) - turning @ spin)


@pytest.mark.parametrize("frame", [TURNS, BOTH], ids=["turns", "both"])
def test_about_the_axis_more_is_known_than_across(frame: Frame) -> None:
    # angular momentum and inertia inside only turn round the axis: their part along it needs no volume file
    one = cloud(9)
    held = inside(one, 9)
    bare = replace(held.contents(np.zeros(3)), mass_inertia=None, momentum=None, moment_of_velocity=None)
    full, part = (
        balance_table(one.table(), setting(frame=frame), storage=held.storage(), contents=contents)
        for contents in (held.contents(np.zeros(3)), bare)
    )
    assert part.axial.known
    assert not part.angular.known
    close(part.axial.residual(), full.axial.residual())


def test_a_torque_needs_no_density() -> None:
    # steady, and without a fluid held: no load is demanded, but the torque about the axis is
    one = cloud(10)
    done = balance_table(one.table(), setting(frame=TURNS, gravity=(0.0, 0.0, 0.0)))
    assert done.load.from_balance is None
    assert done.power.from_balance == pytest.approx(TURNS.rate * done.power.torque_from_balance)
    torque = done.power.torque_from_walls - done.axial.residual() @ AXIS
    assert done.power.torque_from_balance == pytest.approx(torque, rel=1e-10)


def test_reaction_of_accelerated_hardware() -> None:
    one = cloud(4)
    held = inside(one, 4)
    hardware = Hardware(3.0, (0.1, 1.4, -0.6))
    done = balance_table(
        one.table(), setting(frame=BOTH, hardware=hardware), storage=held.storage(), contents=held.contents(np.ones(3))
    )
    spin, arm = BOTH.rate * AXIS, np.array(hardware.centre) - np.array(THROUGH)
    change = np.array(BOTH.acceleration) + np.cross(spin, np.cross(spin, arm))
    # what holds it: its mass times its acceleration, less its weight and the load of the flow
    close(done.reaction.wrench.force, 3.0 * (change - np.array(GRAVITY)) - done.load.from_balance.force)
    assert done.release is None


@FRAMES
def test_contents_relative_to_a_frame(frame: Frame) -> None:
    held = inside(cloud(5), 5)
    origin = np.array([0.4, 0.8, -0.2])
    _, whole = absolute(frame, held.x, held.v)
    found = relative_contents(replace(held, v=whole).contents(origin), frame)
    expected = held.contents(origin)
    close(found.momentum, expected.momentum)
    close(found.moment_of_velocity, expected.moment_of_velocity)
    close(found.kinetic_energy, expected.kinetic_energy)
    close(found.angular_momentum, np.cross(held.x - origin, held.m[:, None] * held.v).sum(axis=0))


def test_contents_about_another_point() -> None:
    held = inside(cloud(6), 6)
    near, far = np.array([0.4, 0.8, -0.2]), np.array([-2.0, 3.0, 1.0])
    found, expected = contents_about(held.contents(near), far), held.contents(far)
    for name in ("mass_moment", "mass_inertia", "moment_of_velocity", "angular_momentum", "centroid"):
        close(getattr(found, name), getattr(expected, name))


def test_rates_from_snapshots_about_the_anchor() -> None:
    held = inside(cloud(7), 7)
    origin, times = np.array([0.4, 0.8, -0.2]), np.array([0.3, 0.5, 1.1])

    def at(t: float) -> Inside:
        # quadratic in time: three instants tell its rate exactly, momentum is a product and needs a steady factor
        m = held.m + t * held.m_rate + 0.3 * t * t
        return replace(held, m=m, v_rate=np.zeros((6, 3)), e_rate=np.zeros(6))

    now = 0.6
    found = storage_from_contents(times, [at(t).contents(origin) for t in times], now, ANCHOR)
    expected = replace(at(now), m_rate=held.m_rate + 0.6 * now).storage()
    for name in ("mass", "momentum", "angular_momentum", "energy", "mass_moment", "inertia"):
        close(getattr(found, name), getattr(expected, name))


def known_setting(frame: Frame | None) -> Setting:
    every = np.ones(len(GROUPS), np.bool_)
    return setting(frame=frame, data=GroupData(every, every, every), fluid_density=1.0)


@pytest.mark.parametrize("frame", [None, TURNS, MOVES, BOTH], ids=["rests", "turns", "moves", "both"])
@pytest.mark.parametrize("basis", ["given", "snapshots"])
def test_energy_of_a_surface_that_moves(frame: Frame | None, basis: str) -> None:
    one = cloud(8)
    held = inside(one, 8)
    place, anchor, gravity = known_setting(frame), np.array(ANCHOR), np.array(GRAVITY)
    storage = held.storage(basis)
    done = balance_table(one.table(), place, storage=storage, contents=held.contents(np.ones(3)))
    law = energy_balance(
        one.table(), place, mechanical_enthalpy(one.table(), place), storage=storage, fluid=done.fluid,
        power=done.power, shaft_power=2.5,
    )  # fmt: skip
    still = Frame() if frame is None else frame
    moving, whole = absolute(still, one.x, one.v)
    ports, walls = np.array([group.role.is_port for group in GROUPS]), one.group == 3
    arm = one.x - anchor
    close(law.group_kinetic, one.by_group(one.mass * (whole**2).sum(axis=1) / 2) * ports)
    close(law.group_potential, one.by_group(-one.mass * (arm @ gravity)) * ports)
    close(law.group_pressure_work, one.by_group(one.p * (moving * one.n).sum(axis=1) * ~walls))
    close(law.group_viscous, one.by_group((one.t * whole).sum(axis=1) * one.area * ~walls))
    load = one.p[:, None] * one.n - one.t * one.area[:, None]
    sliding = (one.t * one.v).sum(axis=1) * one.area
    close(law.shaft_power_walls, ((load * moving).sum(axis=1) - sliding)[walls].sum())
    inner_moving, inner, rate = changing(still, held)
    height = -(held.x - anchor) @ gravity
    stored = held.m_rate * (held.e + (inner**2).sum(axis=1) / 2 + height)
    stored = stored + held.m * (held.e_rate + (inner * rate).sum(axis=1) - inner_moving @ gravity)
    # what a case gives has its potential energy in it already
    given = held.m_rate @ height if basis == "given" else 0.0
    close(law.storage, stored.sum() - given)
    enthalpy = one.by_group(one.p * one.through) * ports
    entries = enthalpy + law.group_kinetic + law.group_potential + law.group_pressure_work - law.group_viscous
    close(law.residual, entries.sum() + law.storage + 2.5 + law.shaft_power_walls)
    close(law.left, law.residual - law.mass_share)
