"""Where the verdict changes: residuals set to a hair within or beyond each limit."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fluxmesh.assess.verdict import State, relative_without_mean_pressure, verdict_of
from fluxmesh.balance.balance import Balance, balance_table
from fluxmesh.balance.energy import EnergyBalance, energy_balance
from fluxmesh.balance.enthalpy import mechanical_enthalpy
from fluxmesh.balance.storage import Storage
from fluxmesh.surface.surface import Group, Role
from tests.test_core_sums import ANCHOR, Cloud, close, cloud, setting


def done(one: Cloud, off: tuple[float, float, float] = (0.0, 0.0, 0.0), turned: float = 0.0) -> Balance:
    """A balance whose residuals are what is asked for; rates inside take up the rest."""
    table = one.table()
    place = setting(gravity=(0.0, 0.0, 0.0))
    bare = balance_table(table, place)
    storage = Storage(
        mass=-bare.mass.residual,
        momentum=np.array(off) - bare.momentum.residual(),
        angular_momentum=np.array([0.0, turned, 0.0]) - bare.angular.residual(),
    )
    return balance_table(table, place, storage=storage)


def state(balance: Balance, law: str, **options: object) -> State:
    return next(one.state for one in verdict_of(balance, **options).laws if one.law == law)  # type: ignore[arg-type]


HAIR = 1.001


def test_the_tolerance_is_the_limit() -> None:
    balance = done(cloud(), (3.0, 0.0, 4.0))
    relative = 5.0 / balance.momentum.size()
    for tolerance, expected in ((relative * HAIR, State.CLOSES), (relative / HAIR, State.OPEN)):
        assert state(balance, "Linear momentum", tolerance=tolerance) is expected


def test_a_doubt_is_believed_up_to_five_times_the_tolerance() -> None:
    balance = done(cloud(), (3.0, 0.0, 4.0))
    relative = 5.0 / balance.momentum.size()
    for doubt, tolerance, expected in (
        (5.0 * HAIR, relative / 4, State.WITHIN_DOUBT),
        (5.0 / HAIR, relative / 4, State.OPEN),
        (5.0 * HAIR, relative / 5.1, State.UNJUDGED),
    ):
        found = state(balance, "Linear momentum", tolerance=tolerance, doubts={"momentum": doubt})
        assert found is expected


def test_one_law_that_does_not_close_decides() -> None:
    balance = done(cloud(), (3.0, 0.0, 4.0))
    found = verdict_of(balance, tolerance=0.5 * 5.0 / balance.momentum.size())
    assert {law.law: law.state for law in found.laws} == {
        "Mass": State.CLOSES,
        "Linear momentum": State.OPEN,
        "Angular momentum": State.CLOSES,
    }
    assert found.state is State.OPEN
    assert found.closes is False


def test_small_moments_are_compared_with_forces_at_an_arm() -> None:
    one = cloud()
    one = replace(one, x=np.array(ANCHOR) + 1e-3 * one.x)
    balance = done(one, turned=0.2)
    # the arm is the radius of a sphere of that area
    arm = (one.area.sum() / (4 * np.pi)) ** 0.5
    law = next(law for law in verdict_of(balance).laws if law.law == "Angular momentum")
    close(law.relative, 0.2 / (arm * balance.momentum.size()))
    assert balance.angular.size() < 0.5 * arm * balance.momentum.size()
    wide = done(cloud(), turned=0.2)
    law = next(law for law in verdict_of(wide).laws if law.law == "Angular momentum")
    close(law.relative, 0.2 / wide.angular.size())


def closed(level: float) -> Cloud:
    """A cloud whose area vectors add up to nothing, under a high pressure."""
    one = cloud(still=True)
    n = one.n.copy()
    n[3] -= n.sum(axis=0)
    return replace(one, n=n, p=one.p + level)


def test_a_high_pressure_that_hides_a_residual_is_told() -> None:
    low, high = done(closed(0.0), (3.0, 0.0, 4.0)), done(closed(1e4), (3.0, 0.0, 4.0))
    one = closed(1e4)
    mean = (one.p * one.area).sum() / one.area.sum()
    size = high.momentum.size() - np.linalg.norm(high.momentum.group_pressure, axis=1).sum()
    size += np.linalg.norm(one.by_group((one.p - mean)[:, None] * one.n), axis=1).sum()
    assert relative_without_mean_pressure(high) == pytest.approx(5.0 / size, rel=1e-9)
    tolerance = 2 * high.momentum.relative()
    told = [
        any("level of pressure" in line for line in verdict_of(one, tolerance=tolerance).reasons) for one in (low, high)
    ]
    assert told == [False, True]
    assert state(high, "Linear momentum", tolerance=tolerance) is State.CLOSES


def test_no_force_at_all_is_compared_with_pressure_on_the_area() -> None:
    # single plane elements in pairs that cancel: a tank under one pressure, with noise in one wall
    one = cloud(still=True)
    n = np.where(np.arange(one.p.size) % 2 == 0, 1.0, -1.0)[:, None] * one.n[np.arange(one.p.size) // 2]
    group = np.full(one.p.size, 3)
    tank = replace(one, group=group, n=n, v=0 * one.v, t=0 * one.t, p=np.full(one.p.size, 7.0))
    balance = done(tank, (3e-3, 0.0, 4e-3))
    law = next(law for law in verdict_of(balance).laws if law.law == "Linear momentum")
    close(law.relative, 5e-3 / (1e-4 * 7.0 * tank.area.sum()))


def test_without_walls_the_residual_may_be_the_load() -> None:
    balance = done(cloud(), (3.0, 0.0, 4.0))
    assert verdict_of(balance).state is not State.UNJUDGED
    # the same with ports all round
    around = replace(
        balance,
        setting=replace(
            balance.setting, groups=tuple(Group(group.name, Role.OPEN) for group in balance.setting.groups)
        ),
    )
    assert [law.law for law in verdict_of(around).laws] == ["Mass"]
    assert len(verdict_of(around, encloses_hardware=False).laws) == 3
    data = replace(balance.setting.data, pressure=np.arange(5) != 3)
    blind = balance_table(balance.table, replace(balance.setting, data=data), storage=balance.storage)
    found = verdict_of(blind)
    assert found.state is State.UNJUDGED
    assert found.closes is None


def test_gained_mechanical_energy_is_told() -> None:
    one = cloud()
    balance = done(one)
    table, place = balance.table, balance.setting
    law = energy_balance(table, place, mechanical_enthalpy(table, place), liquid=True)

    def reasons(loss: float) -> bool:
        energy: EnergyBalance = replace(law, loss=loss * law.loss_size)
        return any("gains mechanical energy" in line for line in verdict_of(balance, energy=energy).reasons)

    assert [reasons(-0.02), reasons(-0.005), reasons(0.02)] == [True, False, False]
