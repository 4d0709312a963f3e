"""Balances over time: the tables that a run prints, and the plain data of ``series.json``."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict, fields
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from fluxmesh.assess.assumptions import CAUTIONS
from fluxmesh.assess.verdict import Verdict
from fluxmesh.balance.momentum import Ledger
from fluxmesh.balance.series import Instant, Series, Statistics, statistics
from fluxmesh.balance.wrench import Vector, Wrench
from fluxmesh.report.tables import figure

if TYPE_CHECKING:
    from rich.console import Console

__all__ = ["SCHEMA", "SERIES_CAUTIONS", "print_series", "series_data"]

SCHEMA: Final = "fluxmesh-series/1"

SERIES_CAUTIONS: Final = (
    "These are the loads at the instants given: a peak between them, before or after is not seen. They hold the surge "
    "that is in the flow data, and leave out water hammer that is not, vibration of the hardware, thermal "
    "growth, bolt-up, seismic and wind loads, two-phase flow, and pressure tests or blocked outlets, which often "
    "govern.",
    *CAUTIONS[1:],
)
"""What every load of a series leaves out, and who decides."""


# ---- what is printed ------------------------------------------------------------------------


def _known(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None


def _figures(values: Sequence[float] | Vector, scale: float) -> list[str]:
    return [figure(_known(value), scale) for value in values]


def _size(rows: Vector) -> Vector:
    return np.asarray(np.linalg.norm(rows, axis=1))


def _table(title: str, columns: Sequence[str], rows: Sequence[Sequence[str]]) -> Any:
    from rich import box
    from rich.table import Table
    from rich.text import Text

    table = Table(title=title, title_justify="left", title_style="bold", box=box.HORIZONTALS, pad_edge=False)
    for k, heading in enumerate(columns):
        table.add_column(heading, justify="right" if k else "left", no_wrap=True)
    for row in rows:
        table.add_row(*(Text(cell) for cell in row))
    return table


def _over_time(series: Series) -> Any:
    load, reaction = series.load(), _size(series.reaction())
    forces, flows = series.momentum_size(), series.mass_size()
    moment, mass = _size(series.momentum_residual()), series.mass_residual()
    rows = [
        [
            f"{one.time:.6g}",
            *_figures([*load[k], reaction[k]], forces),
            *_figures([mass[k]], flows),
            *_figures([moment[k]], forces),
        ]
        for k, one in enumerate(series.instants)
    ]
    columns = [
        "time, s",
        "load x, N",
        "load y, N",
        "load z, N",
        "reaction, N",
        "mass left, kg/s",
        "momentum left, N",
    ]
    return _table("Over time: flow on hardware, size of anchor on hardware, residuals", columns, rows)


def _figures_over_time(series: Series) -> Any:
    times, forces, reaction = series.times(), series.momentum_size(), series.reaction()
    found = statistics(times, np.column_stack([series.load(), reaction, _size(reaction)]))

    def extreme(values: Vector, at: Vector) -> list[str]:
        texts = _figures(values, forces)
        return [text if text in ("–", "0") else f"{text}\nat {when:.4g} s" for text, when in zip(texts, at)]

    impulse = _figures(found.impulse, forces * float(times[-1] - times[0]))
    if found.impulse_error is not None:
        impulse = [
            text if text in ("–", "0") else f"{text}\n± {error:.1g}"
            for text, error in zip(impulse, found.impulse_error.tolist())
        ]
    rows = [
        ["mean, N", *_figures(found.mean, forces)],
        ["r.m.s., N", *_figures(found.rms, forces)],
        ["r.m.s. off mean, N", *_figures(found.deviation, forces)],
        ["least, N", *extreme(found.least, found.least_at)],
        ["greatest, N", *extreme(found.greatest, found.greatest_at)],
        # the integral of a size over time is no impulse
        ["impulse, N s", *impulse[:-1], ""],
    ]
    columns = ["", "load x", "load y", "load z", "reaction x", "reaction y", "reaction z", "its size"]
    return _table(f"Figures from {times[0]:.6g} s to {times[-1]:.6g} s", columns, rows)


def _verdict_line(verdict: Verdict) -> tuple[str, str]:
    if verdict.closes is None:
        return "VERDICT: the series cannot be judged in full", "bold yellow"
    if verdict.closes:
        return "VERDICT: the series closes", "bold green"
    return "VERDICT: the series DOES NOT CLOSE", "bold red"


def print_series(
    console: Console,
    series: Series,
    verdict: Verdict,
    *,
    title: str,
    assumptions: Sequence[str],
    notes: Sequence[str] = (),
) -> None:
    """Print a series: loads and residuals over time, their figures, what they assume, and the verdict.

    Parameters
    ----------
    console : rich.console.Console
        Where to.
    series : Series
        The balances.
    verdict : Verdict
        Their judgement.
    title : str
        Title of the case.
    assumptions : sequence of str
        What the figures assume.
    notes : sequence of str, optional
        What was mended, sampled or solved on the way.
    """
    from rich.text import Text

    def say(line: str, style: str = "") -> None:
        console.print(Text(line, style=style))

    say(title, "bold")
    for note in notes:
        say(f"Note: {note}")
    console.print()
    console.print(_over_time(series))
    console.print(_figures_over_time(series))
    say(
        "Load: force of the flow on the hardware; reaction: force of the anchor on the hardware. Means and impulse "
        "by the trapezoidal rule; ± is what the spacing of the instants leaves open, estimated by leaving out "
        "every other one."
    )
    say("Assumed: " + "; ".join(text[0].lower() + text[1:] for text in assumptions) + ".")
    for caution in SERIES_CAUTIONS:
        say(f"Caution: {caution}")
    console.print()
    say(*_verdict_line(verdict))
    for reason in verdict.reasons:
        say(f"  - {reason}")


# ---- what is written ------------------------------------------------------------------------


def _plain(value: Any) -> Any:
    """From NumPy to what JSON has; what is not known (NaN) becomes null."""
    if isinstance(value, np.ndarray):
        return _plain(value.tolist())
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    if isinstance(value, np.floating | np.integer | np.bool_):
        return _plain(value.item())
    if isinstance(value, float) and not np.isfinite(value):
        return None
    return value


def _wrench(wrench: Wrench | None) -> dict[str, Any] | None:
    return None if wrench is None else {"force": wrench.force, "moment": wrench.moment}


def _ledger(ledger: Ledger, known: bool) -> dict[str, Any]:
    return {
        "flux": ledger.flux(),
        "pressure": ledger.pressure(),
        "viscous": ledger.viscous(),
        "weight": ledger.weight,
        "storage": ledger.storage,
        "residual": ledger.residual() if known else None,
    }


def _instant(one: Instant) -> dict[str, Any]:
    balance = one.balance
    reaction = balance.reaction
    return {
        "time": one.time,
        "file": one.source,
        "hardware_load": {
            **(_wrench(balance.load.best()) or {"force": None, "moment": None}),
            "from_walls": _wrench(balance.load.from_walls),
            "from_balance": _wrench(balance.load.from_balance),
        },
        "reaction": None if reaction is None else {**(_wrench(reaction.wrench) or {}), "basis": reaction.basis},
        "mass": None if balance.mass is None else asdict(balance.mass),
        "momentum": _ledger(balance.momentum, balance.complete),
        "angular_momentum": _ledger(balance.angular, one.angular_known()),
    }


def _statistics(found: Statistics) -> dict[str, Any]:
    kept = {item.name: getattr(found, item.name) for item in fields(found)}
    return {name: value for name, value in kept.items() if not name.startswith("impulse")}


def series_data(
    series: Series,
    verdict: Verdict,
    *,
    title: str,
    assumptions: Sequence[str],
    notes: Sequence[str] = (),
    inputs: dict[str, Any] | None = None,
) -> dict[str, Any]:
    """Return a series as plain data, SI units throughout.

    Parameters
    ----------
    series : Series
        The balances.
    verdict : Verdict
        Their judgement.
    title : str
        Title of the case.
    assumptions : sequence of str
        What the figures assume.
    notes : sequence of str, optional
        What was mended, sampled or solved on the way.
    inputs : dict, optional
        What the figures were computed from.

    Returns
    -------
    dict
        Ready for `fluxmesh.report.result.write_json`; what is not known is null.
        Moments are about the anchor, ``about``.
    """
    times = series.times()
    load, reaction = series.load(), series.reaction()
    quantities = {
        "hardware_load": load,
        "hardware_load_size": _size(load),
        "hardware_load_moment": series.load_moment(),
        "reaction": reaction,
        "reaction_size": _size(reaction),
        "reaction_moment": series.reaction_moment(),
        "mass_residual": series.mass_residual(),
        "momentum_residual": series.momentum_residual(),
    }
    found = {name: statistics(times, values) for name, values in quantities.items()}
    data = {
        "schema": SCHEMA,
        "title": title,
        "about": series.instants[0].balance.setting.anchor,
        "times": times,
        "instants": [_instant(one) for one in series.instants],
        "scales": {
            "mass": series.mass_size(),
            "momentum": series.momentum_size(),
            "angular_momentum": series.angular_size(),
        },
        "statistics": {name: _statistics(one) for name, one in found.items()},
        "impulse": {
            name: {"value": found[name].impulse, "error": found[name].impulse_error}
            for name in ("hardware_load", "hardware_load_moment", "reaction", "reaction_moment")
        },
        "verdict": asdict(verdict),
        "inputs": inputs or {},
        "assumptions": assumptions,
        "cautions": SERIES_CAUTIONS,
        "notes": notes,
    }
    plain: dict[str, Any] = _plain(data)
    return plain
