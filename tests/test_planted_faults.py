"""The classic slips, planted one at a time in a flow that closes: the verdict must see them, or the limit is written.

Two exact flows serve: developed laminar flow down an inclined pipe, where weight, pressure and friction
balance; and the sudden expansion of Borda and Carnot, where momentum changes against pressure.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh import Outcome, PressureMeaning, balance_of, lay_flow
from fluxmesh.field.pressure import Head, PressureKind
from tests.flows import face_frames, poiseuille
from tests.solids import Solid, Station, box, moved, one_group, pipe, rigid_motion, swept

DENSITY, AMBIENT = 870.0, 101325.0
PORTS = {"inlet": "inlet", "outlet": "outlet"}
ANCHOR = (0.4, -0.3, 0.2)

# ---- the sound pipe -------------------------------------------------------------------------

TURN, _ = rigid_motion(np.random.default_rng(3))
DOWN = np.array([0.0, 0.0, -9.80665])
LAMINAR = poiseuille(0.1, 2.0, 2.0, DENSITY)


def pipe_job(*, scale: float = 1.0, anchor: Any = ANCHOR, body: Solid | None = None, **changed: Any) -> Outcome:
    """Laminar flow in an inclined pipe with its head; `changed` replaces what is laid, `scale` the length unit."""
    solid = moved(body or pipe(0.1, 0.5, 16, 3, 3), TURN, (0, 0, 0))
    surface = solid.surface(PORTS, rest="wall")
    middle, normal = face_frames(surface)
    home = surface.points @ TURN
    sound: dict[str, Any] = {
        "density": DENSITY,
        "velocity": LAMINAR.velocity(home) @ TURN.T,
        "pressure": 500.0 + LAMINAR.pressure(home) + DENSITY * surface.points @ DOWN,
        "traction": LAMINAR.traction(middle @ TURN, normal @ TURN) @ TURN.T,
        "gravity": DOWN,
    }
    if scale != 1.0:
        scaled = Solid(solid.points * scale, solid.faces, solid.groups)
        surface = scaled.surface(PORTS, rest="wall")
    given = {**sound, **{key: change(sound) if callable(change) else change for key, change in changed.items()}}
    return balance_of(surface, lay_flow(surface, **given), anchor=scale * np.asarray(anchor))


def test_the_sound_pipe_closes_to_round_off() -> None:
    verdict = pipe_job().verdict
    assert verdict.closes is True
    assert verdict.measure < 1e-12


PIPE_FAULTS: dict[str, dict[str, Any]] = {
    "traction that acts on the wall": {"traction": lambda s: -s["traction"]},
    "traction left out": {"traction": None},
    "traction over the dynamic pressure (a coefficient)": {"traction": lambda s: s["traction"] / (DENSITY * 2.0)},
    "gravity the other way": {"gravity": -DOWN},
    "gravity left out": {"gravity": (0, 0, 0)},
    "head counted twice": {"meaning": PressureMeaning(head=Head.REMOVED)},
    "head removed and not put back": {"pressure": lambda s: s["pressure"] * 0 + 500.0},
    "pressure with the other sign": {"pressure": lambda s: -s["pressure"]},
    "pressure over density, read as pressure": {"pressure": lambda s: s["pressure"] / DENSITY},
    "pressure read as kinematic": {"meaning": PressureMeaning(PressureKind.KINEMATIC)},
    "density in g/cm³": {"density": DENSITY / 1000},
    "velocity of one port turned round": {"supplied": {"outlet": {"velocity": tuple(-2 * TURN[:, 2])}}},
    "coordinates in millimetres": {"scale": 1000.0},
}


@pytest.mark.parametrize("fault", PIPE_FAULTS)
def test_a_fault_in_the_pipe_is_seen(fault: str) -> None:
    verdict = pipe_job(**PIPE_FAULTS[fault]).verdict
    assert verdict.closes is False
    assert verdict.measure > verdict.tolerance
    assert any("MORE than the tolerance" in reason for reason in verdict.reasons)


# ---- the sound expansion --------------------------------------------------------------------

SHARE, SPEED, FIRST = 0.25, 6.0, 2.0e4
SECOND = FIRST + DENSITY * SPEED**2 * SHARE * (1 - SHARE)  # Borda-Carnot


def expansion_job(*, scale: float = 1.0, **changed: Any) -> Outcome:
    """Uniform flow from a narrow into a wide pipe, data on faces."""
    stations = [Station((0, 0, 0), 0.05), Station((0, 0, 0.2), 0.05), Station((0, 0, 0.2), 0.1)]
    solid = swept([*stations, Station((0, 0, 0.7), 0.1)], 16, 2, ("feed", "step", "shell"))
    solid = Solid(scale * solid.points, solid.faces, solid.groups)
    surface = solid.surface(PORTS, rest="wall")
    velocity, pressure = np.zeros((len(solid.faces), 3)), np.full(len(solid.faces), SECOND)
    for name in ("inlet", "feed", "step"):
        pressure[solid.groups[name]] = FIRST
    velocity[solid.groups["inlet"], 2] = SPEED
    velocity[solid.groups["outlet"], 2] = SHARE * SPEED
    sound: dict[str, Any] = {"density": DENSITY, "velocity": velocity, "pressure": pressure}
    given = {**sound, **{key: change(sound) if callable(change) else change for key, change in changed.items()}}
    return balance_of(surface, lay_flow(surface, **given), anchor=scale * np.asarray(ANCHOR))


def test_the_sound_expansion_closes_to_round_off() -> None:
    verdict = expansion_job().verdict
    assert verdict.closes is True
    assert verdict.measure < 1e-14


EXPANSION_FAULTS: dict[str, dict[str, Any]] = {
    "density of water by mistake for that of air": {"density": DENSITY / 830},
    "pressure over density, read as pressure": {"pressure": lambda s: s["pressure"] / DENSITY},
    "pressure read as kinematic": {"meaning": PressureMeaning(PressureKind.KINEMATIC)},
    "pressure in kPa": {"pressure": lambda s: s["pressure"] / 1000},
    "velocity in feet a second": {"velocity": lambda s: s["velocity"] / 0.3048},
    "mass flow half lost on the way": {"velocity": lambda s: s["velocity"] * np.where(s["velocity"] < 2, 0.5, 1)},
    "total pressure for static": {"pressure": lambda s: s["pressure"] + DENSITY / 2 * (s["velocity"] ** 2).sum(axis=1)},
}


@pytest.mark.parametrize("fault", EXPANSION_FAULTS)
def test_a_fault_in_the_expansion_is_seen(fault: str) -> None:
    verdict = expansion_job(**EXPANSION_FAULTS[fault]).verdict
    assert verdict.closes is False
    assert verdict.measure > verdict.tolerance


def test_a_small_fault_is_judged_by_the_tolerance() -> None:
    # 0.1 % more pressure at the inlet alone: residual 20 Pa × A1 against entries some thirty times 20 kPa × A1
    def nudged(sound: dict[str, Any]) -> np.ndarray:
        return sound["pressure"] * np.where(sound["velocity"][:, 2] == SPEED, 1.001, 1)

    job = expansion_job(pressure=nudged)
    assert job.verdict.closes is True
    area = job.balance.table.column("area")[0]
    assert_allclose(np.linalg.norm(job.balance.momentum.residual()), 0.001 * FIRST * area, rtol=1e-9)


# ---- what no closed balance can see ---------------------------------------------------------


def test_without_gravity_a_length_unit_cannot_be_seen() -> None:
    # every entry goes as the area, so the balance closes at any scale; the load is off by the square
    sound, wrong = expansion_job(), expansion_job(scale=1000.0)
    assert wrong.verdict.closes is True
    assert_allclose(
        wrong.balance.load.from_walls.force, 1e6 * sound.balance.load.from_walls.force, rtol=1e-9, atol=1e-3
    )


def test_absolute_pressure_read_as_gauge_closes_but_loads_the_walls_wrongly() -> None:
    # a level cancels over the closed surface; on the walls it is the ambient pressure times their area vector
    sound, wrong = expansion_job(), expansion_job(pressure=lambda s: s["pressure"] + AMBIENT)
    assert wrong.verdict.closes is True
    walls = sound.balance.setting.walls()
    extra = AMBIENT * sound.balance.table.total("area_vector", walls)
    for name in ("from_walls", "from_balance"):
        change = getattr(wrong.balance.load, name).force - getattr(sound.balance.load, name).force
        assert_allclose(change, extra, rtol=0, atol=1e-9 * AMBIENT)
    right = expansion_job(
        pressure=lambda s: s["pressure"] + AMBIENT, meaning=PressureMeaning(PressureKind.ABSOLUTE), ambient=AMBIENT
    )
    assert_allclose(
        right.balance.load.from_walls.force, sound.balance.load.from_walls.force, rtol=0, atol=1e-9 * AMBIENT
    )


def test_a_high_level_of_pressure_hides_a_residual_and_that_is_said() -> None:
    # 3000 Pa too much at the inlet is 15 % of its pressure, but little beside 10 MPa everywhere
    def off(sound: dict[str, Any]) -> np.ndarray:
        return sound["pressure"] + 1e7 + np.where(sound["velocity"][:, 2] == SPEED, 3000.0, 0)

    verdict = expansion_job(pressure=off).verdict
    assert verdict.closes is True
    assert any("level of pressure makes it look smaller" in reason for reason in verdict.reasons)


# ---- what cannot be judged ------------------------------------------------------------------


def port_job(outlet_speed: float) -> Outcome:
    surface = pipe(0.1, 0.5, 12).surface(PORTS, rest="wall")
    data = {
        "inlet": {"velocity": (0, 0, 2.0), "pressure": 3e3},
        "outlet": {"velocity": (0, 0, outlet_speed), "pressure": 1e3},
    }
    return balance_of(surface, lay_flow(surface, density=DENSITY, supplied=data), anchor=ANCHOR)


def test_port_data_alone_have_nothing_to_compare_with() -> None:
    job = port_job(2.0)
    assert job.verdict.closes is None
    assert job.balance.load.from_walls is None
    area = job.balance.table.column("area")[0]
    assert_allclose(job.balance.load.from_balance.force, [0, 0, 2e3 * area], rtol=1e-12, atol=1e-9)
    assert any("cannot be compared" in reason for reason in job.verdict.reasons)


def test_port_data_whose_mass_does_not_close_are_refused() -> None:
    verdict = port_job(2.2).verdict
    assert verdict.closes is False
    assert any(reason.startswith("Mass: residual") and "MORE than" in reason for reason in verdict.reasons)


def test_a_surface_round_a_body_is_not_judged_by_its_momentum() -> None:
    surface = box((0, 0, 0), (1, 1, 1), 2).surface()
    pressure = surface.points[:, 0]
    flow = lay_flow(surface, density=1.0, velocity=(1, 0, 0), pressure=pressure)
    assert balance_of(surface, flow).verdict.closes is None
    assert balance_of(surface, flow, encloses_hardware=False).verdict.closes is False


def test_an_open_surface_is_not_judged() -> None:
    whole = pipe(0.1, 0.5, 12)
    faces = whole.groups["wall"]
    surface = Solid(whole.points, [whole.faces[f] for f in faces], {"wall": np.arange(faces.size)}).surface(
        rest="wall", closed=False
    )
    job = balance_of(surface, lay_flow(surface, pressure=5e3))
    assert job.verdict.closes is None
    assert job.balance.enclosed is None
    assert job.balance.load.from_balance is None


# ---- entries that all vanish ----------------------------------------------------------------


@pytest.mark.parametrize("noise", [0.0, 1e-4])
def test_a_pipe_anchored_on_its_axis_closes(noise: float) -> None:
    # no entry has a moment about the axis: what is left is round-off, or the noise of the data, on both sides
    # of the fraction, and says nothing against a balance whose forces close
    body = pipe(0.1, 0.5, 16, 3, 3)
    surface = body.surface(PORTS, rest="wall")
    middle, normal = face_frames(surface)
    rng = np.random.default_rng(0)
    pressure = LAMINAR.pressure(surface.points) + 4e3 * noise * rng.standard_normal(len(surface.points))
    flow = lay_flow(
        surface,
        density=DENSITY,
        velocity=LAMINAR.velocity(surface.points),
        pressure=pressure,
        traction=LAMINAR.traction(middle, normal),
    )
    job = balance_of(surface, flow, anchor=(0, 0, 0.25))
    assert job.balance.momentum.relative() < 1e-3
    assert job.verdict.closes is True


@pytest.mark.parametrize("groups", [6, 1])
def test_a_tank_under_a_uniform_pressure_closes(groups: int) -> None:
    # no weight and nothing flows: with one group all round, all that is left of its entries is round-off
    solid = moved(box((0, 0, 0), (1, 2, 3), 2), TURN, (0.1, 0.2, 0.3))
    if groups == 1:
        solid = one_group(solid.points, solid.faces)
    surface = solid.surface(rest="wall")
    job = balance_of(surface, lay_flow(surface, pressure=5e5), anchor=ANCHOR)
    assert_allclose(job.balance.momentum.residual(), 0, rtol=0, atol=1e-9)  # of 5e5 Pa on 22 m²
    assert job.verdict.closes is True
