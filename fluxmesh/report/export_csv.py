"""The ledgers as CSV: units in the heads, every digit, and what the figures assume above them."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Final

from fluxmesh.report.export_text import one_line, writable

__all__ = ["csv_files", "csv_text"]

Cell = str | float | int | bool | None


@dataclass(frozen=True)
class _Told:
    """A figure with the half width of its 95 % interval."""

    value: Cell
    half: float


_Figure = Cell | _Told

# A cell that starts so is a formula to a spreadsheet.
_FORMULA: Final = ("=", "+", "-", "@")
_AXES: Final = ("x", "y", "z")
_PORT_UNITS: Final = {
    "mean_pressure": "Pa",
    "mean_total_pressure": "Pa",
    "mean_temperature": "K",
    "mean_total_temperature": "K",
    "mean_speed": "m/s",
    "speed": "m/s",
}


def csv_text(heads: Sequence[str], rows: Iterable[Sequence[Cell]], remarks: Sequence[str]) -> str:
    """Return a table as CSV.

    Parameters
    ----------
    heads : sequence of str
        Column heads, with units.
    rows : iterable of sequence of str, float, int, bool or None
        Cells; None stays empty: not known, or not there.
    remarks : sequence of str
        Lines above the table, each after "# ".

    Returns
    -------
    str
        Texts stand in quotes, numbers have all their digits. A text that a
        spreadsheet would run as a formula has an apostrophe before it.
    """
    stream = io.StringIO()
    for remark in remarks:
        stream.write(f"# {one_line(remark)}\n")
    writer = csv.writer(stream, quoting=csv.QUOTE_NONNUMERIC, lineterminator="\n")
    writer.writerow(heads)
    for row in rows:
        writer.writerow([_cell(value) for value in row])
    return stream.getvalue()


def _cell(value: Cell) -> Any:
    if value is None:
        return _NOTHING
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, str):
        text = writable(value)
        return f"'{text}" if text.lstrip().startswith(_FORMULA) else text
    return value


class _Nothing(float):
    """A number that is written as nothing: what is not known is no empty text, which has quotes."""

    def __repr__(self) -> str:
        return ""

    __str__ = __repr__


_NOTHING: Final = _Nothing()


def csv_files(data: Mapping[str, Any]) -> dict[str, str]:
    """Return the ledgers of a result as CSV files.

    Parameters
    ----------
    data : mapping
        What ``balance.json`` holds.

    Returns
    -------
    dict of str to str
        Contents by name of file: those that the result has figures for. Each has
        title, verdict, assumptions and cautions above it.
    """
    remarks = _remarks(data)
    tables = {
        "groups.csv": _groups(data),
        "mass.csv": _mass(data),
        "momentum.csv": _momentum(data, "momentum", "N"),
        "angular_momentum.csv": _momentum(data, "angular_momentum", "N m"),
        "energy.csv": _energy(data),
        "carried.csv": _carried(data),
        "ports.csv": _ports(data),
        "losses.csv": _losses(data),
        "loads.csv": _loads(data),
    }
    more = {
        "angular_momentum.csv": [f"Moments are about the anchor, {_point(data['inputs'].get('anchor'))} m"],
        "loads.csv": [f"Moments are about the anchor, {_point(data['inputs'].get('anchor'))} m"],
        "energy.csv": list((data.get("energy") or {}).get("notes", ())),
        "carried.csv": list(
            dict.fromkeys(note for scalar in (data.get("carried") or {}).values() for note in scalar.get("notes", ()))
        ),
    }
    return {
        name: csv_text(*_beside(*table), [*remarks, *more.get(name, ())])
        for name, table in tables.items()
        if table is not None
    }


_Table = tuple[list[str], list[list[_Figure]]]


def _beside(heads: list[str], rows: list[list[_Figure]]) -> tuple[list[str], list[list[Cell]]]:
    """Put the doubts of a column into one of their own after it, where it has any."""
    doubtful = [any(isinstance(row[k], _Told) for row in rows) for k in range(len(heads))]
    wide: list[str] = []
    for head, any_told in zip(heads, doubtful, strict=True):
        wide += [head, f"doubt at 95 % of {head}"] if any_told else [head]
    plain: list[list[Cell]] = []
    for row in rows:
        cells: list[Cell] = []
        for cell, any_told in zip(row, doubtful, strict=True):
            cells.append(cell.value if isinstance(cell, _Told) else cell)
            if any_told:
                cells.append(cell.half if isinstance(cell, _Told) else None)
        plain.append(cells)
    return wide, plain


def _figure(entries: Mapping[str, Any], key: str) -> _Figure:
    """A number of the result, with its doubt where that stands beside it."""
    value, half = entries.get(key), entries.get(f"{key}_uncertainty")
    return value if value is None or half is None else _Told(value, half)


def _remarks(data: Mapping[str, Any]) -> list[str]:
    closes = {True: "closes", False: "does not close", None: "cannot be judged in full"}[data["verdict"]["closes"]]
    return [
        data["title"] or "Balance",
        f"Verdict: the balance {closes}",
        *(f"Verdict: {reason}" for reason in data["verdict"]["reasons"]),
        *(f"Assumed: {text}" for text in data["assumptions"]),
        *(f"Note: {text}" for text in data["notes"]),
        *(f"Doubt: {doubt['seen']}" for doubt in data["doubts"] or ()),
        *(f"Caution: {text}" for text in data["cautions"]),
        "n points out of the fluid: flows and fluxes leave where they are above zero, forces are on the fluid",
        "A doubt is the half width of the 95 % interval of the figure before it, in its unit",
        "An empty cell is not known, or is not there; a text with an apostrophe before it would be a formula",
    ]


def _point(point: Sequence[float] | None) -> str:
    return "not given" if point is None else f"({', '.join(map(repr, point))})"


def _triple(entries: Mapping[str, Any], key: str) -> list[_Figure]:
    """The components of a vector of the result, each with its doubt where that stands beside it."""
    vector, halves = entries.get(key), entries.get(f"{key}_uncertainty")
    if vector is None:
        return [None, None, None]
    return [value if halves is None else _Told(value, halves[k]) for k, value in enumerate(vector)]


def _heads(what: str, unit: str) -> list[str]:
    return [f"{what} {axis}, {unit}" for axis in _AXES]


def _groups(data: Mapping[str, Any]) -> _Table:
    vectors = {
        "area_vector": ("area vector", "m^2"),
        "centroid": ("centroid", "m"),
        "momentum_flux": ("momentum flux out", "N"),
        "pressure_force": ("pressure force on fluid", "N"),
        "viscous_force": ("viscous force on fluid", "N"),
        "moment_of_momentum_flux": ("moment of momentum flux out", "N m"),
        "moment_of_pressure": ("moment of pressure on fluid", "N m"),
        "moment_of_viscous": ("moment of viscous force on fluid", "N m"),
    }
    singles = {
        "area": "area, m^2",
        "mass_flow": "mass flow out, kg/s",
        "volume_flow": "volume flow out, m^3/s",
    }
    heads = ["group", "role", *singles.values()]
    heads += [head for what, unit in vectors.values() for head in _heads(what, unit)]
    heads += ["flow known", "pressure known", "traction known"]
    rows: list[list[_Figure]] = []
    for name, group in data["groups"].items():
        row: list[_Figure] = [name, group["role"], *(_figure(group, key) for key in singles)]
        for key in vectors:
            row += _triple(group, key)
        row += [group["data"][key] for key in ("flux", "pressure", "traction")]
        rows.append(row)
    return heads, rows


def _mass(data: Mapping[str, Any]) -> _Table | None:
    law = data["mass"]
    if law is None:
        return None
    rows: list[list[_Figure]] = [
        ["flow out", name, _figure(group, "mass_flow")] for name, group in data["groups"].items()
    ]
    rows += [[key, "", _figure(law, key)] for key in ("inflow", "outflow", "storage", "residual")]
    rows.append(["residual over entries (no unit)", "", _figure(law, "relative")])
    return ["entry", "group", "mass rate, kg/s"], rows


def _momentum(data: Mapping[str, Any], key: str, unit: str) -> _Table | None:
    law = data[key]
    if law is None:
        return None
    moment = key == "angular_momentum"
    parts = {
        "flux": ("momentum flux out", "moment_of_momentum_flux" if moment else "momentum_flux"),
        "pressure": ("pressure on fluid", "moment_of_pressure" if moment else "pressure_force"),
        "viscous": ("viscous on fluid", "moment_of_viscous" if moment else "viscous_force"),
    }
    rows: list[list[_Figure]] = []
    for total, (word, entry) in parts.items():
        rows += [[word, name, *_triple(group, entry)] for name, group in data["groups"].items()]
        rows.append([f"{word}, all groups", "", *_triple(law, total)])
    rows.append(["weight of fluid", "", *_triple(law, "weight")])
    rows.append(["rate of what is inside", "", *_triple(law, "storage")])
    rows.append(["residual", "", *_triple(law, "residual")])
    rows.append(["residual over entries (no unit)", "", _figure(law, "relative"), None, None])
    return ["entry", "group", *_heads("moment" if moment else "force", unit)], rows


def _energy(data: Mapping[str, Any]) -> _Table | None:
    law = data.get("energy")
    if law is None:
        return None
    words = {
        "enthalpy": "flow work out" if law["basis"] == "mechanical" else "enthalpy flux out",
        "kinetic": "kinetic energy flux out",
        "potential": "potential energy flux out",
        "pressure_work": "pressure times speed of the surface",
        "viscous_power": "power of viscous traction on fluid",
    }
    rows: list[list[_Figure]] = []
    for key, word in words.items():
        rows += [[word, name, _figure(group, key)] for name, group in law["groups"].items()]
    whole = ("flux", "pressure_work", "viscous_power", "storage", "heat", "shaft_power", "shaft_power_walls")
    rest = ("residual", "residual_of_mass", "heat_minus_shaft_power", "loss")
    rows += [[key.replace("_", " "), "", _figure(law, key)] for key in (*whole, *rest)]
    rows.append(["residual over entries (no unit)", "", _figure(law, "relative")])
    return ["entry", "group", "power, W"], rows


def _carried(data: Mapping[str, Any]) -> _Table | None:
    scalars = data.get("carried")
    if not scalars:
        return None
    rows: list[list[_Figure]] = []
    for name, law in scalars.items():
        unit = f"{law['unit']}/s" if law["unit"] else "1/s"
        for group, entry in law["groups"].items():
            rows.append([name, "flux out", group, _figure(entry, "flux"), unit])
            rows.append([name, "mean over what passes", group, _figure(entry, "mean"), f"a unit of {law['per']}"])
        rows += [
            [name, key, "", _figure(law, key), unit] for key in ("inflow", "outflow", "storage", "source", "residual")
        ]
        rows.append([name, "residual over entries", "", _figure(law, "relative"), ""])
    return ["scalar", "entry", "group", "value", "unit"], rows


def _ports(data: Mapping[str, Any]) -> _Table | None:
    ports = data["ports"]
    if not ports:
        return None
    figures: dict[str, dict[str, _Figure]] = {}
    for name, port in ports.items():
        for key, value in port.items():
            if key.endswith("_uncertainty"):
                continue
            entries = (
                value if isinstance(value, Mapping) else {"": value, "_uncertainty": port.get(f"{key}_uncertainty")}
            )
            for weight in (one for one in entries if not one.endswith("_uncertainty")):
                number = _figure(entries, weight)
                said = key.replace("_", " ") + (f", by {weight.replace('_', ' ')}" if weight else "")
                unit = _PORT_UNITS.get(key, "")
                figures.setdefault(f"{said}, {unit}" if unit else said, {})[name] = number
    known = {head: row for head, row in figures.items() if any(value is not None for value in row.values())}
    return ["port", *known], [[name, *(row.get(name) for row in known.values())] for name in ports]


def _losses(data: Mapping[str, Any]) -> _Table | None:
    losses = data.get("losses")
    if not losses:
        return None
    rows: list[list[_Figure]] = [
        [
            *loss["between"],
            _figure(loss, "total_pressure_drop"),
            _figure(loss, "coefficient"),
            loss["speed_of"],
            loss["reason"] or "",
        ]
        for loss in losses
    ]
    return ["from", "to", "total head lost, Pa", "coefficient", "by the speed at", "why not"], rows


def _loads(data: Mapping[str, Any]) -> _Table:
    heads = ["who on whom", "basis", *_heads("force", "N"), *_heads("moment", "N m")]
    heads += ["size of force, N", "size of moment, N m"]
    heads += [*_heads("line of action through", "m"), *_heads("direction", "no unit"), "couple about the line, N m"]
    blank: list[_Figure] = [None] * 7
    rows: list[list[_Figure]] = []
    load = data["hardware_load"]
    for basis, key in (("walls", "from_walls"), ("balance", "from_balance")):
        if load[key] is not None:
            rows.append([load["body"], basis, *_wrench(load[key]), *blank])
    reaction = data["reaction"]
    if reaction is not None:
        line = reaction["line_of_action"] or {}
        rows.append(
            [
                reaction["body"],
                reaction["basis"],
                *_wrench(reaction),
                *_triple(line, "point"),
                *_triple(line, "direction"),
                _figure(line, "couple"),
            ]
        )
    return heads, rows


def _wrench(wrench: Mapping[str, Any]) -> list[_Figure]:
    vectors = [*_triple(wrench, "force"), *_triple(wrench, "moment")]
    return [*vectors, _figure(wrench, "force_size"), _figure(wrench, "moment_size")]
