"""The laws against plain sums over a cloud of surface elements: nothing but definitions on the other side.

A cloud need not be closed: every law is algebra on sums over elements, and holds for any of them.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh.balance.balance import Balance, balance_table
from fluxmesh.balance.mirror import Plane, about_origin, mirrored, whole_model
from fluxmesh.balance.setting import GroupData, Hardware, Setting
from fluxmesh.balance.storage import Storage, momentum_from_surface
from fluxmesh.balance.wrench import Wrench
from fluxmesh.field.contents import Contents
from fluxmesh.integral.table import BASIS, WIDTH, IntegralTable, column_slice
from fluxmesh.surface.surface import Group, Role

Array = np.ndarray
PAIRS = ((0, 0), (1, 1), (2, 2), (1, 2), (0, 2), (0, 1))
GROUPS = (
    Group("feed", Role.INLET),
    Group("drain", Role.OUTLET),
    Group("hole", Role.OPEN),
    Group("shell", Role.WALL),
    Group("cut", Role.SYMMETRY),
)
ANCHOR = (0.3, -0.7, 1.1)
GRAVITY = (0.4, -0.9, -9.7)


@dataclass(frozen=True, eq=False)
class Cloud:
    """Surface elements: group, place, area vector, relative velocity, traction, gauge pressure, density."""

    group: Array
    x: Array
    n: Array
    v: Array
    t: Array
    p: Array
    rho: Array

    @property
    def area(self) -> Array:
        return np.sqrt((self.n**2).sum(axis=1))

    @property
    def through(self) -> Array:
        """Volume flow out through each element."""
        return (self.v * self.n).sum(axis=1)

    @property
    def mass(self) -> Array:
        return self.rho * self.through

    def by_group(self, values: Array) -> Array:
        """Sums by group of one value, vector or matrix an element."""
        found = np.zeros((len(GROUPS), *values.shape[1:]))
        np.add.at(found, self.group, values)
        return found

    def table(self, origin: tuple[float, float, float] = (0.5, 0.2, -0.4)) -> IntegralTable:
        """The table of integrals, each by the words of its definition."""
        x, n, v, t, p, mass, area = self.x - np.array(origin), self.n, self.v, self.t, self.p, self.mass, self.area
        unit, square = n / area[:, None], (v**2).sum(axis=1)
        dynamic = self.rho * square / 2
        integrands = {
            "area": np.ones(p.size),
            "area_vector": unit,
            "position": x,
            "position_normal": x[:, :, None] * unit[:, None, :],
            "square_normal": np.stack([x[:, k] * x[:, m] for k, m in PAIRS], axis=1)[:, :, None] * unit[:, None, :],
            "pressure_force": -p[:, None] * unit,
            "moment_of_pressure": -np.cross(x, p[:, None] * unit),
            "pressure_area": p,
            "viscous_force": t,
            "moment_of_viscous": np.cross(x, t),
            "density_area": self.rho,
            "velocity_area": v,
            "speed_area": np.sqrt(square),
            "dynamic_pressure_area": dynamic,
            "dynamic_pressure_force": -dynamic[:, None] * unit,
            "moment_of_dynamic_pressure": -np.cross(x, dynamic[:, None] * unit),
            "viscous_power": (t * v).sum(axis=1),
        }
        passing = {
            "mass_flow": np.ones(p.size),
            "volume_flow": 1 / self.rho,
            "momentum_flux": v,
            "moment_of_momentum_flux": np.cross(x, v),
            "kinetic_energy_flux": square / 2,
            "reversed_mass_flow": -(mass < 0).astype(float),
            "normal_momentum": self.through / area,
            "dynamic_pressure_mass_flow": dynamic,
            "pressure_volume_flow": p / self.rho,
            "pressure_mass_flow": p,
            "mass_flow_position": x,
            "mass_flow_square": np.stack([x[:, k] * x[:, m] for k, m in PAIRS], axis=1),
        }
        values = np.zeros((len(GROUPS), WIDTH))
        for weights, terms in ((area, integrands), (mass, passing)):
            for name, term in terms.items():
                columns = self.by_group(term.reshape(p.size, -1) * weights[:, None])
                values[:, column_slice(name)] = columns
        assert {*integrands, *passing} == set(BASIS)
        return IntegralTable(values, np.array(origin))


def cloud(seed: int = 0, size: int = 40, *, still: bool = False) -> Cloud:
    """A random cloud; what goes into the feed and out of the drain does so everywhere, of the hole both ways."""
    rng = np.random.default_rng(seed)
    group = np.arange(size) % len(GROUPS)
    n, v = rng.normal(size=(size, 3)), rng.normal(size=(size, 3))
    way = np.sign((n * v).sum(axis=1))
    v *= np.where(group == 0, -way, np.where(group == 1, way, 1.0))[:, None]
    # walls and cuts let nothing through
    tight = group >= 3
    v[tight] = 0.0 if still else v[tight] - ((v * n).sum(axis=1) / (n**2).sum(axis=1))[tight, None] * n[tight]
    return Cloud(
        group,
        rng.normal(size=(size, 3)) + 2.0,
        n,
        v,
        rng.normal(size=(size, 3)),
        rng.normal(size=size) + 3.0,
        rng.uniform(0.5, 2.0, size),
    )


def setting(**changes: object) -> Setting:
    every = np.ones(len(GROUPS), np.bool_)
    known = GroupData(flux=every, pressure=every, traction=every)
    given = {"groups": GROUPS, "data": known, "closed": True, "gravity": GRAVITY, "anchor": ANCHOR, **changes}
    return Setting(**given)  # type: ignore[arg-type]


def held(mass: float = 7.0, centre: tuple[float, float, float] = (1.2, 0.4, -0.3)) -> Contents:
    """A fluid of some mass and centre of mass, and no more."""
    origin = np.array([0.2, 0.1, 0.6])
    return Contents(origin, 1.0, np.zeros(3), mass=mass, mass_moment=mass * (np.array(centre) - origin))


def close(one: object, two: object) -> None:
    assert_allclose(one, two, rtol=1e-11, atol=1e-11)


STORAGE = Storage(
    mass=0.35, momentum=np.array([1.5, -2.5, 0.75]), angular_momentum=np.array([-0.4, 3.1, 1.3]), basis="given"
)


def balanced(one: Cloud, **changes: object) -> Balance:
    return balance_table(one.table(), setting(**changes), storage=STORAGE, contents=held())


def test_ledgers_of_a_surface_at_rest() -> None:
    one = cloud()
    done = balanced(one)
    arm = one.x - np.array(ANCHOR)
    force, pull = one.mass[:, None] * one.v, 7.0 * np.array(GRAVITY)
    pressure, friction = -one.p[:, None] * one.n, one.t * one.area[:, None]
    close(done.momentum.group_flux, one.by_group(force))
    close(done.angular.group_flux, one.by_group(np.cross(arm, force)))
    close(done.angular.group_pressure, one.by_group(np.cross(arm, pressure)))
    close(done.angular.group_viscous, one.by_group(np.cross(arm, friction)))
    # rate + flux - pressure - friction - weight
    left = STORAGE.momentum + (force - pressure - friction).sum(axis=0) - pull
    turning = np.cross(np.array([1.2, 0.4, -0.3]) - np.array(ANCHOR), pull)
    left_angular = STORAGE.angular_momentum + np.cross(arm, force - pressure - friction).sum(axis=0) - turning
    close(done.momentum.residual(), left)
    close(done.angular.residual(), left_angular)
    sizes = [*one.by_group(force), *one.by_group(pressure), *one.by_group(friction), pull, STORAGE.momentum]
    whole = sum(float(np.linalg.norm(entry)) for entry in sizes)
    close(done.momentum.relative(), np.linalg.norm(left) / whole)


def test_load_reaction_and_first_motion() -> None:
    one = cloud(1)
    hardware = Hardware(4.0, (0.9, 0.8, -1.2))
    done = balanced(one, hardware=hardware)
    arm, anchor = one.x - np.array(ANCHOR), np.array(ANCHOR)
    force = one.mass[:, None] * one.v
    acting = one.t * one.area[:, None] - one.p[:, None] * one.n
    shell = one.group == 3
    pull = 7.0 * np.array(GRAVITY)
    # the fluid pushes the hardware as the hardware the fluid, turned round
    close(done.load.from_walls.force, -acting[shell].sum(axis=0))
    close(done.load.from_walls.moment, -np.cross(arm, acting)[shell].sum(axis=0))
    demanded = acting[~shell].sum(axis=0) + pull - force.sum(axis=0) - STORAGE.momentum
    turning = np.cross(np.array([1.2, 0.4, -0.3]) - anchor, pull) - STORAGE.angular_momentum
    turning = turning + np.cross(arm, acting)[~shell].sum(axis=0) - np.cross(arm, force).sum(axis=0)
    close(done.load.from_balance.force, demanded)
    close(done.load.from_balance.moment, turning)
    weight = 4.0 * np.array(GRAVITY)
    reaction = -(demanded + weight)
    moment = -(turning + np.cross(np.array(hardware.centre) - anchor, weight))
    close(done.reaction.wrench.force, reaction)
    close(done.reaction.wrench.moment, moment)
    line = done.reaction.line_of_action
    size = np.linalg.norm(reaction)
    close(line.direction, reaction / size)
    # about a point of the line only the couple is left
    close(moment - np.cross(line.point - anchor, reaction), line.couple * reaction / size)
    close((line.point - anchor) @ reaction, 0.0)
    # let go, hardware and fluid together start as one body
    centre = (4.0 * np.array(hardware.centre) + 7.0 * np.array([1.2, 0.4, -0.3])) / 11.0
    close(done.release.direction, -reaction / size)
    close(done.release.acceleration, -reaction / 11.0)
    close(done.release.turning_moment, -(moment + np.cross(anchor - centre, reaction)))


def test_mass_through_ports_and_an_open_group() -> None:
    one = cloud(2)
    done = balanced(one)
    feed, drain, hole = (one.mass[one.group == k] for k in range(3))
    close(done.mass.inflow, -feed.sum() - hole[hole < 0].sum())
    close(done.mass.outflow, drain.sum() + hole[hole > 0].sum())
    close(done.mass.residual, one.mass.sum() + STORAGE.mass)
    size = np.abs(one.mass).sum() + STORAGE.mass
    close(done.mass.relative, abs(one.mass.sum() + STORAGE.mass) / size)


def test_short_form_of_one_inlet_and_one_outlet() -> None:
    one = cloud(3)
    one = replace(one, v=np.where((one.group == 2)[:, None], 0.0, one.v))
    done = balance_table(one.table(), setting())
    feed, drain = (one.group == k for k in range(2))
    flow = (one.mass[drain].sum() - one.mass[feed].sum()) / 2
    mean = [(one.v * one.area[:, None])[port].sum(axis=0) / one.area[port].sum() for port in (feed, drain)]
    close(done.short_form.mass_flow, flow)
    close(done.short_form.rate, flow * (mean[1] - mean[0]))
    close(done.short_form.profile_effect, (one.mass[:, None] * one.v).sum(axis=0) - flow * (mean[1] - mean[0]))


def test_a_load_with_a_known_moment_is_preferred() -> None:
    # a moment inside that is not known leaves that of the balance open: the walls then tell both
    unknown = replace(STORAGE, angular_momentum=np.full(3, np.nan))
    done = balance_table(cloud(1).table(), setting(), storage=unknown, contents=held())
    assert np.isfinite(done.load.from_balance.force).all()
    assert done.load.best() is done.load.from_walls
    assert balanced(cloud(1)).load.best() is not balanced(cloud(1)).load.from_walls


def test_wrenches_about_two_points_add_about_the_first() -> None:
    here, there = np.array([0.1, 0.2, 0.3]), np.array([2.0, -1.0, 0.5])
    one = Wrench(np.array([1.0, 2.0, 3.0]), np.array([0.5, 0.1, -0.2]), here)
    two = Wrench(np.array([-2.0, 0.4, 1.0]), np.array([0.3, -0.6, 0.9]), there)
    close((one + two).force, one.force + two.force)
    close((one + two).moment, one.moment + two.moment + np.cross(there - here, two.force))
    close((one + two).at, here)


def test_a_whole_model_knows_what_its_half_knew() -> None:
    one = cloud(8)
    cut = one.group == 4
    # the cut lies in the plane z = 0.4
    n, x = one.n.copy(), one.x.copy()
    n[cut] = np.array([0.0, 0.0, 1.0]) * one.area[cut, None]
    x[cut, 2] = 0.4
    pressure = np.array([True, False, True, True, True])
    data = GroupData(np.array([True, True, False, True, True]), pressure, np.ones(5, np.bool_))
    table, whole = whole_model(replace(one, n=n, x=x).table(), setting(data=data), head_restored=False)
    assert [group.name for group in whole.groups] == ["feed", "drain", "hole", "shell"]
    assert whole.data.pressure.tolist() == [True, False, True, True]
    assert whole.data.flux.tolist() == [True, True, False, True]
    close(table.column("mass_flow"), 2 * one.by_group(one.mass)[:4])


def test_moments_move_with_the_origin_of_the_table() -> None:
    one = cloud(4)
    far = (3.0, -1.0, 0.7)
    close(about_origin(one.table(), np.array(far)).values, one.table(far).values)


@pytest.mark.parametrize("count", [1, 2])
def test_a_mirrored_table_is_that_of_the_mirrored_cloud(count: int) -> None:
    one = cloud(5)
    normals = np.array([[2.0, -1.0, 2.0], [1.0, 2.0, 0.0]])[:count] / np.sqrt([9.0, 5.0])[:count, None]
    planes = [Plane(np.array([0.3, 0.4, -0.2]) + k, normal) for k, normal in enumerate(normals)]
    cuts = np.array([group.role is Role.SYMMETRY for group in GROUPS])
    found = mirrored(one.table(), planes, cuts)
    whole = one
    for plane in planes:
        turn = np.eye(3) - 2 * np.outer(plane.normal, plane.normal)
        places = whole.x - 2 * np.outer((whole.x - plane.point) @ plane.normal, plane.normal)
        image = replace(whole, x=places, n=whole.n @ turn, v=whole.v @ turn, t=whole.t @ turn)
        whole = Cloud(*(np.concatenate([getattr(side, name) for side in (whole, image)]) for name in vars(whole)))
    expected = whole.table(tuple(found.origin)).values
    expected[cuts] = 0.0
    close(found.values, expected)


def test_momentum_inside_from_the_surface_about_a_centre() -> None:
    one = cloud(6)
    centre = np.array([0.4, 2.0, -1.0])
    close(momentum_from_surface(one.table(), centre), ((one.x - centre) * one.mass[:, None]).sum(axis=0))


@pytest.mark.parametrize(
    ("spoil", "known"),
    [
        (lambda lacking, port: lacking, ("walls", "balance")),
        (lambda lacking, port: replace(lacking, pressure=lacking.pressure & ~port), ("walls",)),
        (lambda lacking, port: replace(lacking, flux=lacking.flux & ~port), ("walls",)),
    ],
)
def test_a_load_needs_what_it_rests_on(spoil: Callable[..., GroupData], known: tuple[str, ...]) -> None:
    every = np.ones(len(GROUPS), np.bool_)
    data = spoil(GroupData(every, every, every), np.arange(len(GROUPS)) == 1)
    done = balanced(cloud(7), data=data)
    assert (done.load.from_walls is not None) == ("walls" in known)
    assert (done.load.from_balance is not None) == ("balance" in known)
    assert done.complete == ("balance" in known)
