"""Cases drawn from the model of a case: its own keys, with values that fit, nearly fit, or do not."""

from __future__ import annotations

import copy
import datetime
import math
import tomllib
from collections.abc import Iterator, Mapping
from pathlib import Path
from random import Random
from typing import Any, Literal, get_args, get_origin

from pydantic import BaseModel

from fluxmesh.case.model import CaseTables
from fluxmesh.surface.surface import Role
from fluxmesh.units.table import UNITS
from tests.corpus.shapes import ARRAYS, PICKED, TAGGED
from tests.fuzzing.mutate import NUMBERS, SIGNS, spoil_text

__all__ = ["WORDS", "as_toml", "base_cases", "quantity", "spoil_case", "unit"]

_CASES = Path(__file__).resolve().parent.parent / "cases"
_MORE = (
    """
[frame]
velocity = [1, 0, 0]
acceleration = { value = [0, 0, 1], unit = "m/s^2" }
rotation = { rate = "1450 rpm", axis = [0, 0, 1], through = [0, 0, 0] }
[storage]
mass_rate = "0 kg/s"
momentum_rate = [0, 0, 0]
angular_momentum_rate = [0, 0, 0]
energy_rate = 0
[energy]
heat = "1 kW"
shaft_power = 0
[[carried]]
name = "salt"
array = "p"
per = "volume"
unit = "g"
source = 0.5
[[loss]]
between = ["feed", "drain"]
speed_of = "feed"
""",
    """
[storage]
at = "0.1 s"
snapshots = [{ time = 0, volume = "a.vtu" }, { time = "0.1 s", volume = { file = "b.vtu", unit = "mm" } }]
""",
)
_PROFILE = 'profile = "table"\nprofile_table = { radius = [0, 1000], unit = "mm", speed = [1, 0.5] }\n'
_GAS = """
law = "ideal-gas"
gas_constant = "287 J/(kg K)"
heat_ratio = 1.4
temperature = "20 degC"
ambient_pressure = "1 atm"
viscosity = "1 cP"
"""


def _models(model: type[BaseModel]) -> Iterator[type[BaseModel]]:
    yield model
    for field in model.model_fields.values():
        yield from (found for inner in _inner(field.annotation) for found in _models(inner))


def _inner(annotation: Any) -> list[type[BaseModel]]:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return [annotation]
    return [found for part in get_args(annotation) for found in _inner(part)]


def _choices(annotation: Any) -> list[str]:
    if get_origin(annotation) is Literal:
        return [str(value) for value in get_args(annotation)]
    return [found for part in get_args(annotation) for found in _choices(part)]


_TABLES = {model.__name__: model for model in _models(CaseTables)}
_KEYS = sorted({key for model in _TABLES.values() for key in model.model_fields})
_CHOICES = sorted(
    {word for model in _TABLES.values() for f in model.model_fields.values() for word in _choices(f.annotation)}
)
WORDS = tuple(
    _KEYS + _CHOICES + [role.value for role in Role] + ["feed", "drain", "shell", "value", "unit", "+/-", "%"]
)
"""Keys and words of the model."""
_UNITS = (
    *UNITS,
    "kg/m^3",
    "m^3/h",
    "J/(kg K)",
    "N m",
    "m/s^2",
    "Pa s",
    "1/s",
    "°C",
    "lb/ft³",
    "ppm",
    "dB",
    "nan",
    "yottagram",
)
_OPERATORS = (
    "/",
    "*",
    " ",
    ".",
    "-",
    "·",
    "^2",
    "**3",
    "³",
    "^-1",
    "(",
    ")",
    "^99",
    "^",
    "1/",
    "⁻²",
    "−1",
    "2",
    "\u202e",
    "^(2)",
)


def base_cases() -> list[str]:
    """Return good cases that use all tables between them."""
    full = (_CASES / "full.toml").read_text("utf-8")
    texts = [(_CASES / f"{name}.toml").read_text("utf-8") for name in ("full", "picked", "separate")]
    gas = PICKED.replace("density = 1000\n", _GAS.lstrip()).replace(
        "pressure = 500\n", "pressure = 500\ntemperature = 300\n"
    )
    gas = gas.replace("pressure = 200\n", 'pressure = "200 Pa"\ntemperature = "25 degC"\nenthalpy = "1 kJ/kg"\n')
    profile = PICKED.replace("pressure = 500\n", "pressure = 500\n" + _PROFILE)
    texts += [PICKED, TAGGED, ARRAYS, gas, profile, PICKED + _MORE[0], TAGGED + _MORE[1], full.split("[hardware]")[0]]
    return texts


def as_toml(document: Mapping[str, Any]) -> str:
    """Write a document as TOML, tables one by one."""
    lines: list[str] = []
    for key, value in document.items():
        if not isinstance(value, dict):
            lines.append(f"{_key(key)} = {_value(value)}")
    for key, value in document.items():
        if isinstance(value, dict):
            if key == "groups" and value and all(isinstance(one, dict) for one in value.values()):
                for name, one in value.items():
                    lines += [f"[groups.{_key(name)}]", *_rows(one)]
            else:
                lines += [f"[{_key(key)}]", *_rows(value)]
    return "\n".join(lines) + "\n"


def _rows(table: Mapping[str, Any]) -> list[str]:
    return [f"{_key(key)} = {_value(value)}" for key, value in table.items()]


def _key(key: str) -> str:
    return key if key.isascii() and key.replace("_", "a").replace("-", "a").isalnum() else _text(key)


def _text(text: str) -> str:
    plain = text.replace("\\", "\\\\").replace('"', '\\"')
    return '"' + "".join(c if c.isprintable() or "\ud800" <= c < "\ue000" else f"\\u{ord(c):04x}" for c in plain) + '"'


def _value(value: Any) -> str:
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, float):
        return "nan" if math.isnan(value) else repr(value)
    if isinstance(value, str):
        return _text(value)
    if isinstance(value, list | tuple):
        return f"[{', '.join(map(_value, value))}]"
    if isinstance(value, dict):
        return f"{{ {', '.join(_rows(value))} }}"
    return str(value)


def unit(rng: Random) -> str:
    """Draw a unit, or something like one."""
    text = rng.choice(_UNITS)
    for _ in range(rng.choice((0, 0, 0, 1, 2, 5))):
        text += rng.choice(_OPERATORS) + rng.choice((*_UNITS, "", ""))
    return text


def quantity(rng: Random) -> str:
    """Draw a quantity, or something like one."""
    text = (
        f"{rng.choice(NUMBERS)} {unit(rng)}"
        if rng.randrange(4)
        else f"{rng.randint(-9, 900) / 10}{rng.choice((' ', ''))}{unit(rng)}"
    )
    if rng.randrange(4) == 0:
        text += f" +/- {rng.choice(NUMBERS)} {rng.choice(('', '%', unit(rng)))}"
    return text + rng.choice(("", "", "", "", rng.choice(SIGNS)))


def _number(rng: Random) -> int | float:
    return rng.choice(
        (
            0,
            1,
            -1,
            2,
            3,
            1000,
            10**19,
            -(10**19),
            10**30,
            2**63,
            10**400,
            0.0,
            -0.0,
            0.5,
            1e-9,
            5e-324,
            1e-200,
            1e150,
            1e300,
            1.7e308,
            -1e308,
            math.inf,
            -math.inf,
            math.nan,
            rng.uniform(-10, 10),
            rng.uniform(-10, 10),
            float(rng.randint(-5, 5)),
        )
    )


def _drawn(rng: Random, depth: int = 0) -> Any:
    """Draw a value of any kind."""
    kind = rng.randrange(11 if depth < 3 else 6)
    if kind <= 1:
        return _number(rng)
    if kind == 2:
        return quantity(rng)
    if kind == 3:
        return rng.choice(WORDS)
    if kind == 4:
        return rng.choice(
            (True, False, "", "U", "p", "region", "cube.vtp", unit(rng), "x" * 2000, datetime.date(1979, 5, 27))
        )
    if kind == 5:
        return "".join(rng.choice(SIGNS + WORDS) for _ in range(rng.randrange(4)))
    if kind <= 8:
        size = rng.choice((0, 1, 2, 3, 3, 3, 3, 4, 9))
        one = rng.choice((_number, quantity, lambda rng: _drawn(rng, depth + 1)))
        return [one(rng) for _ in range(size)]
    if kind == 9:
        return {"value": [_number(rng) for _ in range(rng.choice((3, 3, 2)))], "unit": unit(rng)}
    return {rng.choice(WORDS): _drawn(rng, depth + 1) for _ in range(rng.randrange(4))}


def _places(table: Any, above: tuple[Any, ...] = ()) -> Iterator[tuple[Any, ...]]:
    for key, value in table.items() if isinstance(table, dict) else enumerate(table):
        yield (*above, key)
        if isinstance(value, dict | list):
            yield from _places(value, (*above, key))


def _at(document: Any, place: tuple[Any, ...]) -> Any:
    for key in place:
        document = document[key]
    return document


def spoil_case(rng: Random, text: str) -> bytes:
    """Return a case with one to five things changed: keys, values, tables, and at times its text."""
    document = copy.deepcopy(tomllib.loads(text))
    for _ in range(rng.choice((1, 1, 1, 2, 5))):
        places = list(_places(document))
        if not places:
            break
        place = rng.choice(places)
        table, key = _at(document, place[:-1]), place[-1]
        act = rng.randrange(7)
        if act == 0:
            del table[key]
        elif act == 1 and isinstance(table, dict):
            table[rng.choice(_KEYS)] = _drawn(rng)
        elif act == 2 and isinstance(table, dict):
            table[rng.choice((*_KEYS, *SIGNS))] = table.pop(key)
        elif act == 3:
            table[key] = copy.deepcopy(_at(document, rng.choice(places)))
        elif isinstance(table[key], str) and act == 4:
            table[key] = spoil_text(rng, table[key].encode(), WORDS).decode("utf-8", "replace")
        elif isinstance(table[key], int | float) and not isinstance(table[key], bool) and act <= 5:
            table[key] = rng.choice((_number, quantity))(rng)
        else:
            table[key] = _drawn(rng)
    data = as_toml(document).encode("utf-8", "surrogatepass")
    return spoil_text(rng, data, WORDS) if rng.randrange(5) == 0 else data
