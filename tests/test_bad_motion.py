"""Moving, unsteady and gas cases that cannot be: exit code 2, one clear message, no result file."""

from __future__ import annotations

import shutil
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
import pyvista

from tests.conftest import Ran

MESHES = Path(__file__).parents[1] / "meshes"


class Spoilt:
    """A shipped case in a folder of its own, to be changed and run."""

    def __init__(self, folder: Path, run: Callable[..., Ran]) -> None:
        self.folder, self.run = folder, run

    def of(self, name: str, *edits: tuple[str, str]) -> Path:
        shutil.copytree(MESHES / name, self.folder, dirs_exist_ok=True)
        path = self.folder / f"{name}.toml"
        text = path.read_text("utf-8")
        for old, new in edits:
            assert old in text, old
            text = text.replace(old, new, 1)
        path.write_text(text, "utf-8")
        return path

    def message(self, path: Path) -> str:
        out = self.folder / "out"
        ran = self.run("balance", path, "--out", out, "--no-pictures")
        assert ran.code == 2, ran
        assert ran.err.startswith("fluxmesh: ")
        assert "Traceback" not in ran.err
        assert not out.exists() or not list(out.iterdir())
        return ran.err


@pytest.fixture
def spoilt(tmp_path: Path, fluxmesh: Callable[..., Ran]) -> Spoilt:
    return Spoilt(tmp_path / "case", fluxmesh)


ROTATION = 'rotation = { rate = "1450 rpm", axis = [0, 0, 1], through = [0, 0, 0] }'

FRAMES = {
    "at no rate": ([('rate = "1450 rpm"', 'rate = "0 rpm"')], ["frame.rotation.rate", "zero"]),
    "about no axis": ([("axis = [0, 0, 1]", "axis = [0, 0, 0]")], ["frame.rotation.axis", "no length"]),
    "axis missing": ([("axis = [0, 0, 1], ", "")], ["frame.rotation.axis", "missing"]),
    "a rate in metres": ([('"1450 rpm"', '"1450 m"')], ["frame.rotation.rate", "length"]),
    "that stands": ([(ROTATION, "velocity = [0, 0, 0]")], ["frame", "does not move"]),
    "volume without use": ([(ROTATION, 'velocity = [1, 0, 0]\nvolume = "passage.vtu"')], ["frame.volume", "no use"]),
    "relative to nothing": ([("[frame]\n" + ROTATION, "")], ["flow.velocity.frame", "[frame]"]),
    "neither": ([('frame = "relative"', 'frame = "rotating"')], ["flow.velocity.frame", '"absolute" or "relative"']),
    "relative group velocity": (
        [("[groups.eye]", '[groups.eye]\nvelocity_frame = "relative"')],
        ["groups.eye.velocity_frame", "no velocity"],
    ),
    "mirrored": ([("[surface]", "[surface]\nmirror = true")], ["surface.mirror", "[frame]"]),
    "volume that does not fill": ([(ROTATION, ROTATION + '\nvolume = "passage.vtu"')], ["passage.vtu", "m³"]),
}


@pytest.mark.parametrize("name", FRAMES)
def test_contradictory_frames(spoilt: Spoilt, name: str) -> None:
    edits, parts = FRAMES[name]
    path = spoilt.of("impeller", *edits)
    if name == "volume that does not fill":
        volume = pyvista.read(spoilt.folder / "passage.vtu")
        volume.points = volume.points * [1.0, 1.0, 1.1]
        volume.save(spoilt.folder / "passage.vtu")
    said = spoilt.message(path)
    for part in parts:
        assert part in said, said


TIMES = {
    "that fall": ([('time = "65 ms"', 'time = "25 ms"')], ["storage.snapshots.2.time", "0.025 s", "0.035 s"]),
    "that stay": ([('time = "35 ms"', 'time = "0 ms"')], ["storage.snapshots.1.time", "0 s"]),
    "in metres": ([('time = "35 ms"', 'time = "35 mm"')], ["storage.snapshots", "time"]),
    "with at": ([("[storage]", '[storage]\nat = "35 ms"')], ["storage.at"]),
    "with rates": ([("[storage]", '[storage]\nmass_rate = "1 kg/s"')], ["storage", "mass_rate", "snapshots"]),
    "a surface missing": ([(', surface = "surge_1.vtp"', "")], ["storage.snapshots.1.surface", "missing"]),
    "a volume missing": ([('volume = { file = "surge_1.vtu", unit = "mm" }, ', "")], ["storage.snapshots.1.volume"]),
    "two surfaces": ([("[surface]", '[surface]\nfile = "surge_0.vtp"')], ["surface", "every snapshot"]),
    "another unit": ([('"surge_1.vtu", unit = "mm"', '"surge_1.vtu", unit = "cm"')], ["surge_1.vtu", "m³"]),
}


@pytest.mark.parametrize("name", TIMES)
def test_snapshots_that_cannot_be(spoilt: Spoilt, name: str) -> None:
    edits, parts = TIMES[name]
    said = spoilt.message(spoilt.of("surge_bend", *edits))
    for part in parts:
        assert part in said, said


def test_snapshots_on_different_domains(spoilt: Spoilt) -> None:
    path = spoilt.of("surge_bend")
    volume = pyvista.read(spoilt.folder / "surge_4.vtu")
    volume.points = volume.points * [1.0, 1.0, 1.001]
    volume.save(spoilt.folder / "surge_4.vtu")
    assert "surge_4.vtu" in spoilt.message(path)


def test_surfaces_of_different_shape(spoilt: Spoilt) -> None:
    path = spoilt.of("surge_bend")
    surface = pyvista.read(spoilt.folder / "surge_5.vtp")
    surface.points = surface.points * [1.0, 1.0, 1.02]
    surface.save(spoilt.folder / "surge_5.vtp")
    assert "surge_5.vtp" in spoilt.message(path)


@pytest.mark.parametrize(
    ("array", "to", "said"),
    [
        ("pressure_kPa", -5.0, "pressure"),
        ("temperature", -20.0, "temperature"),
        ("temperature", 0.0, "temperature"),
    ],
)
def test_gas_below_nothing(spoilt: Spoilt, array: str, to: float, said: str) -> None:
    path = spoilt.of("guide_vane")
    surface = pyvista.read(spoilt.folder / "guide_vane.vtp")
    values = np.array(surface.point_data[array])
    values[7] = to
    surface.point_data[array] = values
    surface.save(spoilt.folder / "guide_vane.vtp")
    assert said in spoilt.message(path)


@pytest.mark.parametrize(
    ("edit", "part"),
    [
        (("[energy]", '[[loss]]\nbetween = ["up", "down"]\n[energy]'), "loss.0.between"),
        (("[energy]", '[[carried]]\nname = "dye"\n[energy]'), "carried.0"),
        (("shaft_power =", "heat_loss = 3\nshaft_power ="), "energy.heat_loss"),
    ],
)
def test_budgets_that_cannot_be(spoilt: Spoilt, edit: tuple[str, str], part: str) -> None:
    assert part in spoilt.message(spoilt.of("guide_vane", edit))
