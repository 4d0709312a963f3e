"""Cases with numbers and units that no flow has, or that are no numbers or units."""

from __future__ import annotations

from collections.abc import Iterator

from tests.corpus.entry import LOAD, NO_LOAD, Input, files
from tests.corpus.shapes import PICKED, vtp

__all__ = ["inputs"]

_KEYS = {
    "fluid.density": ("density = 1000", "density = {}"),
    "fluid.ambient_pressure": ("density = 1000", "density = 1000\nambient_pressure = {}"),
    "fluid.gravity": ("-9.80665]", "{}]"),
    "fluid.viscosity": ("density = 1000", "density = 1000\nviscosity = {}"),
    "groups.feed.flow_rate": ("flow_rate = 2\npressure = 500", "flow_rate = {}\npressure = 500"),
    "groups.feed.pressure": ("pressure = 500", "pressure = {}"),
    "groups.feed.pick.near": ("near = [0, 0.5, 0.5]", "near = [{}, 0.5, 0.5]"),
    "groups.feed.pick.normal": ("normal = [-1, 0, 0]", "normal = [{}, 0, 0]"),
    "hardware.mass": ("[groups.feed]", "[hardware]\nmass = {}\ncentre = [0, 0, 0]\n[groups.feed]"),
    "hardware.centre": ("[groups.feed]", "[hardware]\nmass = 1\ncentre = [0, {}, 0]\n[groups.feed]"),
    "anchor.at": ("[groups.feed]", "[anchor]\nat = [{}, 0, 0]\n[groups.feed]"),
    "closure.tolerance": ("[groups.feed]", "[closure]\ntolerance = {}\n[groups.feed]"),
    "surface.weld": ('file = "cube.vtp"', 'file = "cube.vtp"\nweld = {}'),
    "reported.force": ("[groups.feed]", "[reported]\nforce = [{}, 0, 0]\n[groups.feed]"),
    "frame.rotation.rate": ("[groups.feed]", "[frame]\nrotation = { rate = {}, axis = [1, 0, 0] }\n[groups.feed]"),
    "frame.acceleration": ("[groups.feed]", "[frame]\nacceleration = [{}, 0, 0]\n[groups.feed]"),
    "storage.mass_rate": ("[groups.feed]", "[storage]\nmass_rate = {}\n[groups.feed]"),
    "energy.heat": ("[groups.feed]", "[energy]\nheat = {}\n[groups.feed]"),
}
_LARGE = {
    "fluid.density": (300.0, 0.0, -9.80665e19),
    "fluid.ambient_pressure": LOAD,
    "fluid.gravity": (300.0, 0.0, 1e22),
    "groups.feed.pressure": (1e19, 0.0, -9806.65),
    "hardware.mass": LOAD,
    "anchor.at": LOAD,
}
# Where the largest or the smallest number is a plain input: the load that is then right.
_TINY = {
    "groups.feed.flow_rate": (-3700.0, 0.0, -9806.65),
    "fluid.density": (300.0, 0.0, 0.0),
    "fluid.gravity": (300.0, 0.0, 0.0),
    "groups.feed.pressure": (-200.0, 0.0, -9806.65),
}


def _case(key: str, value: str) -> str:
    old, new = _KEYS[key]
    assert PICKED.count(old) == 1, key
    return PICKED.replace(old, new.replace("{}", value))


def _spoilt(name: str, wrong: str, text: str, **more: object) -> Input:
    return Input(f"value/{name}", wrong, files({"case.toml": text, "cube.vtp": vtp}), **more)  # type: ignore[arg-type]


def inputs() -> Iterator[Input]:
    """Yield the inputs."""
    for key in _KEYS:
        for value in ("nan", "inf"):
            yield _spoilt(f"{value} for {key}", f"{key} is {value}", _case(key, value), says=(key,))
        for value in ("1e308", "1e21"):
            yield _spoilt(f"{value} for {key}", f"{key} is {value}", _case(key, value), says=(key,))
        load = NO_LOAD if key.startswith(("frame", "storage")) else _TINY.get(key, LOAD)
        yield _spoilt(f"5e-324 for {key}", f"{key} is 5e-324", _case(key, "5e-324"), end="either", load=load)
        if key in _LARGE:
            yield _spoilt(f"1e19 for {key}", f"{key} is 1e19", _case(key, "1e19"), end="answered", load=_LARGE[key])
    yield from _kinds()
    yield from _units()


def _kinds() -> Iterator[Input]:
    """Yield values of another kind than the key has."""
    for key, value in (
        ("fluid.density", "true"),
        ("fluid.density", '"1000"'),
        ("fluid.density", '"a thousand kg/m^3"'),
        ("fluid.density", "[1000]"),
        ("fluid.density", "{ value = 1000 }"),
        ("fluid.density", "-0.0"),
        ("fluid.density", "1e999"),
        ("fluid.density", '"1_000 kg/m^3"'),
        ("fluid.density", '"0x3e8 kg/m^3"'),
        ("fluid.density", '"１０００ kg/m^3"'),
        ("fluid.density", '"1000 kg/m^3 +/- -5"'),
        ("fluid.density", '"1000 +/- 1e308 kg/m^3 %"'),
        ("fluid.density", '"1000 +/- nan kg/m^3"'),
        ("fluid.density", f'"{"9" * 150} kg/m^3"'),
        ("groups.feed.flow_rate", '"2 m^3/h of water"'),
        ("groups.feed.flow_rate", '""'),
        ("fluid.gravity", '"down"'),
        ("anchor.at", "[0, 0, 0]"),
        ("closure.tolerance", '"1 %%"'),
        ("groups.feed.pick.normal", "0"),
        ("groups.feed.pick.near", "9" * 400),
    ):
        shown = value if len(value) < 30 else f"{value[:12]}..."
        yield _spoilt(f"{shown} for {key}", f"{key} is {shown}", _case(key, value), says=(key,))
    for name, old, new in (
        ("length_unit is a number", 'file = "cube.vtp"', 'file = "cube.vtp"\nlength_unit = 3'),
        ("skin is a text", 'file = "cube.vtp"', 'file = "cube.vtp"\nskin = "yes"'),
        ("file is a list", '"cube.vtp"', '["cube.vtp"]'),
        ("file is a number", '"cube.vtp"', "7"),
        ("angle without unit", "near = [0, 0.5, 0.5]", "near = [0, 0.5, 0.5], angle = 1"),
        ("tag of 70 bits", "rest = true", f"tag = {2**70}"),
        ("tag is a float", "rest = true", "tag = 3.0"),
        (
            "profile table of one",
            "flow_rate = 2\npressure = 500",
            'flow_rate = 2\nprofile = "table"\nprofile_table = { radius = [0], speed = [1] }',
        ),
        (
            "profile table with a huge number",
            "flow_rate = 2\npressure = 500",
            f'flow_rate = 2\nprofile = "table"\nprofile_table = {{ radius = [0, {"9" * 400}], speed = [1, 0] }}',
        ),
        (
            "profile table that falls",
            "flow_rate = 2\npressure = 500",
            'flow_rate = 2\nprofile = "table"\nprofile_table = { radius = [0, 1, 0.5], speed = [1, 0.5, 0] }',
        ),
        (
            "profile table with both distances",
            "flow_rate = 2\npressure = 500",
            'flow_rate = 2\nprofile = "table"\n'
            "profile_table = { radius = [0, 1], wall_distance = [0, 1], speed = [1, 0] }",
        ),
        (
            "profile table of two lengths",
            "flow_rate = 2\npressure = 500",
            'flow_rate = 2\nprofile = "table"\nprofile_table = { radius = [0, 1], speed = [1, 0.5, 0] }',
        ),
    ):
        assert PICKED.count(old) == 1, old
        yield _spoilt(name, name, PICKED.replace(old, new))


def _units() -> Iterator[Input]:
    """Yield units that are attacks, or nonsense, and some odd ones that are right."""
    for unit in (
        "9**9**9**9 kg/m^3",
        "1 kg**999999999",
        "1 kg^" + "9" * 100,
        "1 " + "(" * 120,
        "1 " + "((" * 28,
        "1 kg^9^9^9",
        "1 __import__('os').system('touch hacked')",
        "1 {0.__class__.__mro__}",
        "1 kg/m^3; rm -rf .",
        "1 kg/0",
        "1 kg/(m^3",
        "1 yottakilogram/attometer^9/attometer^9/attometer^9",
        "1 dB",
        "1 kg/m^3 gauge",
        "1 Pa",
        "1 \u202ekg/m^3",
        "1 kg/m³³",
        "1 🌊/m^3",
    ):
        yield _spoilt(
            f"unit of {len(unit)} signs {unit[:40]!a}",
            "the unit of the density is nonsense, or an attack",
            _case("fluid.density", '"' + unit.replace("\\", "\\\\") + '"'),
            says=("fluid.density",),
        )
    for text in (
        "1 g/cm^3",
        "1000 kg m-3",
        "1 t·m⁻³",
        "1000000 µg/mL",
        "62.42796057614461 lb/ft^3",
        " 1000  kg / m^3 ",
    ):
        yield _spoilt(f"odd but right: {text}", "the unit is odd", _case("fluid.density", f'"{text}"'), end="answered")
