"""Series: figures over time, every instant judged against the largest entries, and the shipped surge."""

from __future__ import annotations

import importlib.util
import io
import json
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
import pyvista
from numpy.testing import assert_allclose

import fluxmesh
from fluxmesh import balance_of, lay_flow
from fluxmesh.assess.series import series_verdict
from fluxmesh.balance.series import Instant, Series, statistics
from fluxmesh.balance.storage import Storage, rate_weights
from fluxmesh.case.model import Case
from fluxmesh.case.read import read_case
from fluxmesh.errors import CaseError, FieldError, SurfaceError
from fluxmesh.field.frame import Frame
from fluxmesh.job.series import SeriesOutcome, run_series
from fluxmesh.job.shape import read_shape
from fluxmesh.job.storage import frame_at, storage_of
from fluxmesh.report.picture_series import draw_series
from fluxmesh.report.result import write_json
from fluxmesh.report.series import print_series
from tests.solids import box

ROOT = Path(fluxmesh.__file__).parent.parent
SURGE = ROOT / "meshes" / "surge_bend" / "surge_bend.toml"


def script(name: str):
    spec = importlib.util.spec_from_file_location(name, ROOT / "scripts" / f"{name}.py")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


# ---- figures over time ----------------------------------------------------------------------

TIMES = np.array([0.0, 0.1, 0.3, 0.35, 0.6, 1.0])


def test_figures_of_a_straight_line_are_exact_on_uneven_steps() -> None:
    found = statistics(TIMES, np.column_stack([2 + 3 * TIMES, -TIMES]))
    assert_allclose(found.mean, [3.5, -0.5], rtol=1e-14)
    assert_allclose(found.impulse, [3.5, -0.5], rtol=1e-14)
    assert_allclose(found.impulse_error, 0, atol=1e-15)
    assert_allclose(found.least, [2, -1])
    assert_allclose(found.least_at, [0, 1])
    assert_allclose(found.greatest, [5, 0])
    assert_allclose(found.greatest_at, [1, 0])


def test_root_mean_squares_are_about_zero_and_about_the_mean() -> None:
    found = statistics([0.0, 1.0, 2.0], [5.0, 1.0, 5.0])
    # trapezoidal: mean 3, mean of squares (25/2 + 1 + 25/2) / 2 = 13, mean of (2, -2, 2)² = 4
    assert_allclose([found.mean, found.rms, found.deviation], [3, 13**0.5, 2], rtol=1e-15)


def test_the_impulse_of_a_known_pulse_is_of_second_order_and_its_error_is_told() -> None:
    # a pulse of half a sine wave, 40 N for 0.2 s: impulse 2/pi × 40 × 0.2 N s
    exact = 2 / np.pi * 40 * 0.2
    errors = []
    for count in (9, 17, 33):
        share = np.linspace(0, 1, count)
        times = 0.2 * (share + 0.1 * np.sin(2 * np.pi * share))  # uneven steps
        found = statistics(times, 40 * np.sin(np.pi * times / 0.2))
        errors.append(abs(float(found.impulse) - exact))
        assert_allclose(found.impulse_error, errors[-1], rtol=0.15)
    assert_allclose(np.log2(np.divide(errors[:-1], errors[1:])), 2, atol=0.1)


def test_the_error_of_an_impulse_needs_five_instants() -> None:
    assert statistics(TIMES[:4], TIMES[:4]).impulse_error is None
    assert statistics(TIMES[:5], TIMES[:5]).impulse_error is not None
    # an even number of instants: one step stays, at whichever end tells more
    pulse = np.array([0.0, 9.0, 0.0, 0.0, 0.0, 0.0])
    assert statistics(np.arange(6.0), pulse).impulse_error == pytest.approx(3.0)
    assert statistics(np.arange(6.0), pulse[::-1]).impulse_error == pytest.approx(3.0)


def test_what_is_not_known_at_one_instant_has_no_figures() -> None:
    rows = np.column_stack([TIMES, np.where(TIMES == 0.3, np.nan, TIMES)])
    found = statistics(TIMES, rows)
    for name in (
        "mean",
        "rms",
        "deviation",
        "least",
        "least_at",
        "greatest",
        "greatest_at",
        "impulse",
        "impulse_error",
    ):
        assert np.isfinite(getattr(found, name)).tolist() == [True, False], name


def test_times_of_a_series_must_rise() -> None:
    with pytest.raises(FieldError, match=r"number 2 is 0\.3 s and number 3 is 0\.2 s"):
        statistics([0.1, 0.3, 0.2], [1.0, 2.0, 3.0])
    with pytest.raises(FieldError, match="two instants or more"):
        statistics([0.1], [1.0])
    with pytest.raises(FieldError, match=r"3 times are given, and values of the shape \(2,\)"):
        statistics([0.1, 0.2, 0.3], [1.0, 2.0])


# ---- the judgement --------------------------------------------------------------------------


def pushed(speed: float, pull: float, *, fault: float = 0.0) -> fluxmesh.Balance:
    """A channel of 1 m² and 2 m length: water pushed along x at `speed`, and faster by `pull` m/s²."""
    surface = box((0, 0, 0), (2, 1, 1)).surface({"x-": "inlet", "x+": "outlet"}, rest="wall")
    through = {"velocity": (speed, 0.0, 0.0)}
    flow = lay_flow(
        surface,
        density=10.0,
        pressure=50.0 - 10.0 * pull * surface.points[:, 0] + fault * surface.points[:, 0] ** 2 / 4,
        supplied={"x-": through, "x+": through},
    )
    storage = Storage(momentum=np.array([20.0 * pull, 0, 0]), angular_momentum=20.0 * pull * np.array([0, 0.5, -0.5]))
    return balance_of(surface, flow, storage=storage).balance


def series_of(*balances: fluxmesh.Balance) -> Series:
    return Series(tuple(Instant(0.1 * k, f"{k}.vtp", balance) for k, balance in enumerate(balances)))


def test_a_fault_is_measured_against_the_largest_entries_of_the_series() -> None:
    still, fast = pushed(0.0, 0.0, fault=6.0), pushed(9.0, 1.0)
    alone = np.linalg.norm(still.momentum.residual()) / still.momentum.size()
    series = series_of(still, fast)
    found = series_verdict(series)
    assert_allclose(found.measure, 6.0 / fast.momentum.size(), rtol=1e-12)
    assert found.closes is True
    assert alone > 0.01 > found.measure
    assert "at 0 s" in "".join(found.reasons)
    assert series_verdict(series, tolerance=1e-3).closes is False


def test_mass_is_measured_against_the_largest_flow() -> None:
    series = series_of(pushed(0.0, 1.0), pushed(9.0, 1.0))
    assert series.mass_size() == pytest.approx(180.0)
    assert series_verdict(series).reasons[0].startswith("Mass: residual at most 0 of")


def test_a_rate_that_is_not_known_leaves_the_series_unjudged() -> None:
    good = pushed(3.0, 1.0)
    table, setting = good.table, good.setting
    from fluxmesh.balance.balance import balance_table

    blind = balance_table(table, setting, storage=Storage(momentum=np.full(3, np.nan)))
    found = series_verdict(series_of(good, blind, good))
    assert found.closes is None
    assert any("not known at 0.1 s" in reason for reason in found.reasons)
    none = series_verdict(series_of(blind, blind))
    assert none.closes is None
    assert any("not known" in reason for reason in none.reasons)


# ---- the shipped surge ----------------------------------------------------------------------


@pytest.fixture(scope="module")
def surge() -> SeriesOutcome:
    return run_series(read_case(SURGE))


def test_the_surge_closes_at_every_instant(surge: SeriesOutcome) -> None:
    assert surge.verdict.closes is True
    assert surge.verdict.measure < 0.01
    sizes = np.linalg.norm(surge.series.momentum_residual(), axis=1) / surge.series.momentum_size()
    assert np.isfinite(sizes).all()
    assert sizes.max() < 0.01


def test_the_surge_does_not_close_without_its_storage(surge: SeriesOutcome) -> None:
    rates = np.linalg.norm([one.balance.storage.momentum for one in surge.series.instants], axis=1)
    assert rates.max() > 0.05 * surge.series.momentum_size()


def test_the_rates_of_the_surge_are_those_of_the_exact_solution(surge: SeriesOutcome) -> None:
    made = script("make_surge")
    full = made.momentum(made.RISE)
    assert_allclose(made.INSTANTS, surge.series.times(), rtol=1e-12)
    for one in surge.series.instants:
        exact = made.ramp_rate(one.time) * full
        assert_allclose(one.balance.storage.momentum, exact, rtol=0, atol=0.04 * np.linalg.norm(full) / made.RISE)


def test_the_load_of_the_surge_is_that_of_the_exact_pressure(surge: SeriesOutcome) -> None:
    # by quadrature over the ports, and the volume between the streamlines: the curved shell takes what is left
    made = script("make_surge")
    points, weights = np.polynomial.legendre.leggauss(6)

    def port(low: float, high: float, axis: int, plane: float) -> tuple[np.ndarray, np.ndarray]:
        xyz = np.full((6, 3), made.DEPTH / 2)
        xyz[:, axis] = plane
        xyz[:, 1 - axis] = (low + high) / 2 + (high - low) / 2 * points
        return xyz, weights * (high - low) / 2 * made.DEPTH

    ports = [
        port(made.INNER / plane, made.OUTER / plane, axis, plane)
        for axis, plane in ((0, made.DELIVERY_X), (1, made.INTAKE_Y))
    ]
    stream = np.linspace(made.INNER, made.OUTER, 4001)
    between = np.trapezoid(np.log(made.INTAKE_Y * made.DELIVERY_X / stream), stream)
    weight = made.DENSITY * made.DEPTH * between * made.GRAVITY
    for one in surge.series.instants:
        time = one.time
        force = np.zeros(3)
        for axis, (xyz, area) in enumerate(ports):
            velocity = made.velocity(xyz, time)
            force[axis] -= area @ made.pressure(xyz, time)
            force -= made.DENSITY * area @ (velocity * velocity[:, axis : axis + 1])
        rate = made.ramp_rate(time) * made.momentum(made.RISE)
        exact = force + weight - rate
        for found in (one.balance.load.from_walls, one.balance.load.from_balance):
            assert_allclose(found.force, exact, rtol=0, atol=0.01 * surge.series.momentum_size())


# ---- a series of the user's own -------------------------------------------------------------

CASE = """
[surface]
groups = {{ array = "part" }}
[fluid]
{density}
[flow]
velocity = {{ array = "velocity" }}
pressure = {{ array = "pressure" }}
{more}
[groups.front]
role = "inlet"
tag = 1
[groups.back]
role = "outlet"
tag = 2
[groups.shell]
role = "wall"
tag = 3
[storage]
snapshots = [
{snapshots}
]
{frame}
"""
FRAME = """
[frame]
velocity = [1.5, 0.4, 0.0]
acceleration = [2.0, 0.0, -0.7]
"""


@pytest.fixture
def channel(tmp_path: Path) -> Callable[..., Path]:
    """Write a case of water in a channel of 2 m whose speed grows with the square of time: rates are exact."""
    grid = pyvista.ImageData(dimensions=(3, 3, 3), spacing=(1.0, 0.5, 0.5)).cast_to_unstructured_grid()

    def write(
        times: tuple[float, ...] = (0.0, 0.1, 0.3, 0.4),
        *,
        volumes: bool = True,
        one: bool = True,
        stretch: float = 0.0,
        moving: bool = False,
    ) -> Path:
        lines = []
        for number, time in enumerate(times):
            volume = grid.copy()
            if number == 1:
                volume.points[:, 0] *= 1 + stretch
            # with the channel, the velocity of the frame from the first instant on, and its push on the water
            lapse = time - times[0]
            drift = np.array([1.5 + 2.0 * lapse, 0.4, -0.7 * lapse]) * moving
            push = np.array([10.0 * time, 0.0, 0.0]) + np.array([2.0, 0.0, -0.7]) * moving
            volume.point_data["velocity"] = np.tile(np.array([3.0 + 5 * time**2, 0, 0]) + drift, (volume.n_points, 1))
            volume.point_data["pressure"] = 50.0 - 10.0 * volume.points @ push
            volume.point_data["rho"] = np.full(volume.n_points, 10.0)
            skin = volume.extract_surface(algorithm=None).triangulate()
            middle = skin.cell_centers().points[:, 0]
            length = 2 * (1 + (stretch if number == 1 else 0.0))
            skin.cell_data["part"] = np.select([middle < 1e-9, middle > length - 1e-9], [1, 2], 3)
            skin.save(tmp_path / f"{number}.vtp")
            volume.save(tmp_path / f"{number}.vtu")
            inside = f'volume = "{number}.vtu", ' if volumes else ""
            lines.append(f'{{ time = {time}, {inside}surface = "{number}.vtp" }},')
        text = CASE.format(
            density='density = "10 kg/m^3"' if one else "",
            more="" if one else 'density = { array = "rho" }',
            snapshots="\n".join(lines),
            frame=FRAME if moving else "",
        )
        (tmp_path / "channel.toml").write_text(text, encoding="utf-8")
        return tmp_path / "channel.toml"

    return write


def test_a_series_with_volumes_closes_to_round_off(channel: Callable[..., Path]) -> None:
    done = run_series(read_case(channel()))
    # of second order in time, and so exact for a speed that grows with its square
    for one in done.series.instants:
        assert_allclose(one.balance.storage.momentum, [20 * 10 * one.time, 0, 0], atol=1e-10)
        assert one.balance.storage.basis == "snapshots"
    assert done.verdict.measure < 1e-12
    assert done.verdict.closes is True
    assert any("Angular momentum: residual" in reason for reason in done.verdict.reasons)


def test_a_series_of_surfaces_alone_closes_too_but_for_the_moments(channel: Callable[..., Path]) -> None:
    done = run_series(read_case(channel(volumes=False)))
    for one in done.series.instants:
        assert_allclose(one.balance.storage.momentum, [20 * 10 * one.time, 0, 0], atol=1e-10)
        assert one.balance.storage.basis == "surface"
        assert not one.angular_known()
    assert done.verdict.measure < 1e-12
    assert done.verdict.closes is True
    assert any("not known" in note for note in done.notes)
    assert any("Angular momentum: its rate inside is not known" in reason for reason in done.verdict.reasons)


def test_a_series_of_surfaces_of_varying_density_has_no_balance(channel: Callable[..., Path]) -> None:
    done = run_series(read_case(channel(volumes=False, one=False)))
    assert done.verdict.closes is None
    assert all(one.balance.load.from_balance is None for one in done.series.instants)
    assert np.isfinite(done.series.load()).all()  # from the walls
    assert any("give every snapshot a volume" in note for note in done.notes)


def test_a_series_of_varying_density_with_volumes_closes(channel: Callable[..., Path]) -> None:
    done = run_series(read_case(channel(one=False)))
    assert done.verdict.measure < 1e-12


def test_two_instants_are_of_first_order_and_say_so(channel: Callable[..., Path]) -> None:
    done = run_series(read_case(channel((0.1, 0.3))))
    assert any("first order" in note for note in done.notes)
    assert_allclose(done.series.instants[0].balance.storage.momentum, [20 * 5 * 0.4, 0, 0], atol=1e-10)


@pytest.mark.parametrize("volumes", [True, False])
def test_an_accelerated_channel_closes_to_round_off(channel: Callable[..., Path], volumes: bool) -> None:
    # absolute velocities, those of the frame rise from the first instant on
    done = run_series(read_case(channel((0.2, 0.3, 0.5, 0.6), moving=True, volumes=volumes)))
    for one in done.series.instants:
        assert_allclose(one.balance.storage.momentum, [20 * 10 * one.time, 0, 0], atol=1e-10)
        assert_allclose(one.balance.momentum.storage, [20 * (10 * one.time + 2), 0, -20 * 0.7], atol=1e-10)
    assert done.verdict.measure < 1e-12
    assert "accelerated" in done.assumptions[0]


def test_the_motion_of_a_frame_later_on_is_seen_along_its_own_axes() -> None:
    frame = Frame(velocity=(2.0, 0.0, 1.0), acceleration=(0.0, 0.0, 3.0), rate=0.5, axis=(0.0, 0.0, 1.0))
    errors = []
    for lapse in (0.2, 0.1):
        turned = 0.5 * lapse
        exact = np.array([2 * np.cos(turned), -2 * np.sin(turned), 1 + 3 * lapse])
        errors.append(np.linalg.norm(np.array(frame_at(frame, lapse).velocity) - exact))
    assert errors[0] / errors[1] == pytest.approx(4, rel=0.05)


def test_the_flow_inside_a_series_belongs_to_its_snapshots(channel: Callable[..., Path]) -> None:
    path = channel(moving=True)
    path.write_text(path.read_text("utf-8") + 'volume = "0.vtu"\n', encoding="utf-8")
    with pytest.raises(CaseError, match=r"frame\.volume"):
        run_series(read_case(path))


def test_a_surface_that_turns_about_a_moving_axis_is_no_series(channel: Callable[..., Path]) -> None:
    path = channel(moving=True)
    text = path.read_text("utf-8") + 'rotation = { rate = "1 rad/s", axis = [0, 0, 1] }\n'
    path.write_text(text, encoding="utf-8")
    with pytest.raises(CaseError, match="moving axis"):
        run_series(read_case(path))


# ---- storage of a single case ---------------------------------------------------------------


def single(path: Path, storage: str) -> Case:
    """Return the case of the second instant alone, with a table of storage of its own."""
    text = path.read_text("utf-8")
    text = text[: text.index("[storage]")].replace("[surface]", '[surface]\nfile = "1.vtp"') + storage
    path.write_text(text, encoding="utf-8")
    return read_case(path)


SNAPSHOTS = """
[storage]
at = "100 ms"
snapshots = [{ time = 0.0, volume = "0.vtu" }, { time = 0.1, volume = "1.vtu" }, { time = 0.3, volume = "2.vtu" }]
"""


def test_snapshots_around_one_export_give_its_storage(channel: Callable[..., Path]) -> None:
    case = single(channel(), SNAPSHOTS)
    found = storage_of(case, read_shape(case))
    assert_allclose(found.momentum, [20.0, 0, 0], rtol=1e-12)
    # anchored at the origin, the middle of the channel at (1, 1/2, 1/2)
    assert_allclose(found.angular_momentum, [0, 10.0, -10.0], rtol=1e-12)
    times = np.array([0.0, 0.1, 0.3])
    assert_allclose(found.energy, rate_weights(times, 0.1) @ (10 * (3 + 5 * times**2) ** 2), rtol=1e-12)
    assert found.mass == 0.0
    assert "0, 0.1, 0.3 s" in found.notes[0]


def test_snapshots_of_another_volume_are_refused(channel: Callable[..., Path], tmp_path: Path) -> None:
    case = single(channel(), SNAPSHOTS)
    for number in range(3):
        volume = pyvista.read(tmp_path / f"{number}.vtu")
        volume.points[:, 1] *= 1.1
        volume.save(tmp_path / f"{number}.vtu")
    with pytest.raises(FieldError, match=r"0\.vtu: its cells fill 2\.2 m³, the surface encloses 2 m³"):
        storage_of(case, read_shape(case))


def test_snapshots_of_a_channel_that_moves_are_taken_relative_to_it(channel: Callable[..., Path]) -> None:
    # the motion is that at the time of the export: 0.1 s after the first snapshot
    case = single(channel(moving=True), SNAPSHOTS + FRAME.replace("[1.5,", "[1.7,").replace("0.0]\nacc", "-0.07]\nacc"))
    found = storage_of(case, read_shape(case))
    assert_allclose(found.momentum, [20.0, 0, 0], rtol=0, atol=1e-10)


def test_rates_that_are_given_are_taken_and_the_others_count_as_zero(channel: Callable[..., Path]) -> None:
    case = single(channel(), "[storage]\nmomentum_rate = [20, 0, 0]\n")
    found = storage_of(case, read_shape(case))
    assert_allclose(found.momentum, [20.0, 0, 0])
    assert found.mass == 0.0
    assert found.energy is None
    assert found.basis == "given"
    assert "mass and angular momentum" in found.notes[1]
    whole = "[storage]\nmass_rate = 2\nmomentum_rate = [20, 0, 0]\nangular_momentum_rate = [1, 2, 3]\nenergy_rate = 5\n"
    found = storage_of(case := single(channel(), whole), read_shape(case))
    assert (found.mass, found.energy, found.angular_momentum.tolist()) == (2.0, 5.0, [1.0, 2.0, 3.0])
    assert len(found.notes) == 1


def test_a_case_without_storage_is_steady() -> None:
    case = read_case(ROOT / "meshes" / "rotor" / "rotor.toml")
    assert storage_of(case, read_shape(case)) is None


# ---- series at fault ------------------------------------------------------------------------


def test_a_surface_that_changes_is_no_series(channel: Callable[..., Path]) -> None:
    with pytest.raises(SurfaceError, match=r"1\.vtp: it encloses 2\.02 m³"):
        run_series(read_case(channel(volumes=False, stretch=0.01)))


def test_volumes_that_differ_are_told(channel: Callable[..., Path]) -> None:
    with pytest.raises(FieldError, match=r"1\.vtu"):
        run_series(read_case(channel(stretch=0.01)))


def test_an_instant_at_fault_is_named(channel: Callable[..., Path], tmp_path: Path) -> None:
    path = channel()
    mesh = pyvista.read(tmp_path / "2.vtp")
    mesh.point_data.remove("pressure")
    mesh.save(tmp_path / "2.vtp")
    with pytest.raises(FieldError, match=r"at 0\.3 s"):
        run_series(read_case(path))


def test_a_case_without_surfaces_is_no_series(tmp_path: Path) -> None:
    with pytest.raises(CaseError, match="no series"):
        run_series(read_case(ROOT / "meshes" / "rotor" / "rotor.toml"))


def test_progress_is_told(channel: Callable[..., Path]) -> None:
    told: list[tuple[int, int]] = []
    run_series(read_case(channel()), progress=lambda done, of: told.append((done, of)))
    assert told == [(1, 4), (2, 4), (3, 4), (4, 4)]


# ---- what is handed on ----------------------------------------------------------------------


def printed(done: SeriesOutcome) -> str:
    from rich.console import Console

    stream = io.StringIO()
    console = Console(file=stream, width=120, highlight=False)
    print_series(console, done.series, done.verdict, title=done.title, assumptions=done.assumptions, notes=done.notes)
    return stream.getvalue()


def test_loads_are_printed_with_their_assumptions_and_cautions(surge: SeriesOutcome) -> None:
    text = printed(surge)
    assert "Cooling-water bend" in text
    assert "VERDICT: the series closes" in text
    assert "Assumed: unsteady flow at 9 instants from 0 s to 0.25 s" in text
    assert "licensed engineer" in text
    assert "steady flow through" not in text.replace("unsteady flow", "")
    for x in surge.series.load().ravel():
        assert abs(x) < 1e-6 or f"{x:.5g}" in text
    assert max(len(line) for line in text.splitlines()) <= 120


def test_the_data_of_a_series_are_complete_and_plain(surge: SeriesOutcome, tmp_path: Path) -> None:
    write_json(surge.data(), tmp_path / "series.json")
    data = json.loads((tmp_path / "series.json").read_text("utf-8"))
    assert data["schema"] == "fluxmesh-series/1"
    assert_allclose(data["times"], surge.series.times())
    assert len(data["instants"]) == 9
    for k, row in enumerate(data["instants"]):
        assert_allclose(row["hardware_load"]["force"], surge.series.load()[k])
        assert_allclose(row["reaction"]["force"], surge.series.reaction()[k])
        assert_allclose(row["momentum"]["residual"], surge.series.momentum_residual()[k])
    times, load = surge.series.times(), surge.series.load()
    steps = np.diff(times)[:, None]
    assert_allclose(data["impulse"]["hardware_load"]["value"], ((load[1:] + load[:-1]) / 2 * steps).sum(axis=0))
    assert data["verdict"]["closes"] is True
    assert data["assumptions"]
    assert data["cautions"]


def test_what_is_not_known_is_null_in_the_data(channel: Callable[..., Path], tmp_path: Path) -> None:
    done = run_series(read_case(channel(volumes=False)))
    write_json(done.data(), tmp_path / "series.json")  # which refuses NaN
    row = json.loads((tmp_path / "series.json").read_text("utf-8"))["instants"][0]
    assert row["angular_momentum"]["residual"] is None
    assert row["angular_momentum"]["storage"] == [None, None, None]
    assert row["momentum"]["residual"] is not None
    assert "–" in printed(run_series(read_case(channel(volumes=False, one=False))))


def test_the_chart_is_drawn_whole_and_shows_its_curves(surge: SeriesOutcome, tmp_path: Path) -> None:
    path = tmp_path / "series.png"
    draw_series(
        surge.series,
        path,
        title="A bend with a $strange^$ title",
        tolerance=surge.tolerance,
        notes=surge.assumptions,
        verdict=surge.verdict_words(),
    )
    from matplotlib.image import imread

    picture = imread(path)[..., :3]
    assert picture.shape == (1200, 1600, 3)
    for colour in ("#0072B2", "#D55E00", "#009E73", "#CC79A7", "#56B4E9"):
        rgb = np.array([int(colour[k : k + 2], 16) for k in (1, 3, 5)]) / 255
        assert (np.abs(picture - rgb).max(axis=2) < 0.01).sum() > 200, colour
    assert [file.name for file in tmp_path.iterdir()] == ["series.png"]


def test_the_chart_has_gaps_where_nothing_is_known(channel: Callable[..., Path], tmp_path: Path) -> None:
    done = run_series(read_case(channel(volumes=False, one=False)))
    draw_series(done.series, tmp_path / "series.png", title=done.title, tolerance=done.tolerance)
    assert (tmp_path / "series.png").stat().st_size > 10_000
