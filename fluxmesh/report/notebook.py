"""Results as a notebook shows them: tables and a light drawing, names as text and never as markup."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from html import escape
from math import isnan
from typing import Final

import numpy as np

from fluxmesh.assess.assumptions import CAUTIONS, assumptions_of
from fluxmesh.assess.verdict import Verdict
from fluxmesh.balance.balance import Balance
from fluxmesh.balance.wrench import Wrench
from fluxmesh.field.flow import Flow, integrate_flow, still_flow
from fluxmesh.report.export_text import one_line
from fluxmesh.report.notebook_scene import scene_svg
from fluxmesh.report.picture_arrows import DrawnArrow
from fluxmesh.report.sketch import scene_of, scene_of_surface
from fluxmesh.report.tables import figure, place, row
from fluxmesh.surface.surface import ControlSurface

__all__ = ["balance_html", "html_of", "outcome_html", "surface_html"]

_STYLE: Final = (
    "<style>.fm-tables table{border-collapse:collapse;margin:.6em 0}.fm-tables caption{text-align:left;font-weight:600}"
    ".fm-tables th,.fm-tables td{padding:.15em .7em;border-bottom:1px solid #8888;text-align:right;"
    "white-space:nowrap}.fm-tables th:first-child{text-align:left}.fm-wide{overflow-x:auto}"
    ".fm-tables ul{margin:.2em 0 .6em 1.2em}</style>"
)
_BY_ITSELF: Final = "What the flow was made of (its head, sampling, supplied data) is told by the outcome, not here"


def html_of(thing: object) -> str:
    """Return a surface or a balance as HTML.

    Parameters
    ----------
    thing : ControlSurface or Balance
        What a notebook shows.

    Raises
    ------
    TypeError
        Anything else.
    """
    if isinstance(thing, ControlSurface):
        return surface_html(thing)
    if isinstance(thing, Balance):
        return balance_html(thing)
    raise TypeError(f"a {type(thing).__name__} has no tables of its own")


def surface_html(surface: ControlSurface) -> str:
    """Return a surface as a table of its groups, with a drawing.

    Parameters
    ----------
    surface : ControlSurface
        The surface.

    Returns
    -------
    str
        One self-contained HTML element, without script.
    """
    table = integrate_flow(surface, still_flow(surface))
    counts = np.bincount(surface.group_of_face, minlength=len(surface.groups))
    rows = []
    for k, group in enumerate(surface.groups):
        area = float(table.column("area")[k])
        middle = table.origin + (table.column("position")[k] / area if area > 0 else 0.0)
        vector = row(table.column("area_vector")[k], area)
        rows.append([group.name, group.role.value, f"{counts[k]:,}", figure(area), vector, place(middle)])
    closed = "closed" if surface.closed else "open"
    shells = "" if surface.shells == 1 else f", {surface.shells} shells"
    said = f"{closed} surface, {surface.face_count:,} faces, {surface.point_count:,} points{shells}"
    heads = ["group", "role", "faces", "area, m²", "area vector, m² (out of the fluid)", "centroid, m"]
    drawing, _ = scene_svg(scene_of_surface(surface))
    return _whole(drawing, _table(f"Control surface: {said}", heads, rows), _list("Noticed", surface.notes))


def balance_html(balance: Balance) -> str:
    """Return a balance as tables: loads with what they assume, mass, and momentum by group.

    Parameters
    ----------
    balance : Balance
        The balance.

    Returns
    -------
    str
        One self-contained HTML element, without script.
    """
    ambient = balance.setting.ambient
    assumed = assumptions_of(balance, ambient=ambient, estimated_density=False, head_restored=False)
    return _whole(_loads(balance, (*assumed, _BY_ITSELF)), *_laws(balance))


def outcome_html(
    title: str,
    surface: ControlSurface,
    flow: Flow,
    balance: Balance,
    verdict: Verdict,
    assumptions: Sequence[str],
    *,
    notes: Sequence[str] = (),
    doubts: Sequence[str] = (),
) -> str:
    """Return a job done: verdict, loads with what they assume, a drawing of the forces, and the laws.

    Parameters
    ----------
    title : str
        Heading.
    surface : ControlSurface
        The surface.
    flow : Flow
        The flow on it.
    balance : Balance
        Its balance.
    verdict : Verdict
        Whether it closes.
    assumptions : sequence of str
        What the figures assume.
    notes, doubts : sequence of str, optional
        What was mended or noticed, and what a review found.

    Returns
    -------
    str
        One self-contained HTML element, without script.
    """
    closes = {True: "the balance closes", False: "THE BALANCE DOES NOT CLOSE", None: "cannot be judged in full"}
    drawing, arrows = scene_svg(scene_of(title, surface, flow, balance))
    return _whole(
        f"<p><strong>{_text(title)}</strong></p>" if title else "",
        _list(f"Verdict: {closes[verdict.closes]}", verdict.reasons),
        _list("Doubts", doubts),
        _loads(balance, assumptions),
        drawing,
        _legend(arrows),
        *_laws(balance),
        _list("Noticed", notes),
    )


def _text(text: str) -> str:
    return escape(one_line(text), quote=True)


def _whole(*parts: str) -> str:
    return f'<div class="fm-tables">{_STYLE}{"".join(parts)}</div>'


def _table(caption: str, heads: Sequence[str], rows: Iterable[Sequence[str]]) -> str:
    head = "".join(f'<th scope="col">{_text(text)}</th>' for text in heads)
    body = "".join(
        f'<tr><th scope="row">{_text(cells[0])}</th>{"".join(f"<td>{_text(cell)}</td>" for cell in cells[1:])}</tr>'
        for cells in rows
    )
    inside = f"<caption>{_text(caption)}</caption><thead><tr>{head}</tr></thead><tbody>{body}</tbody>"
    return f'<div class="fm-wide"><table>{inside}</table></div>'


def _list(heading: str, lines: Sequence[str]) -> str:
    if not lines:
        return ""
    items = "".join(f"<li>{_text(line)}</li>" for line in lines)
    return f"<p>{_text(heading)}</p><ul>{items}</ul>"


def _loads(balance: Balance, assumptions: Sequence[str]) -> str:
    """The loads and the reaction, with assumptions and cautions beside them."""
    load, reaction = balance.load, balance.reaction
    # what lies below this is round-off
    force, moment = balance.momentum.size(), balance.angular.size()

    def line(name: str, wrench: Wrench | None) -> list[str]:
        if wrench is None:
            return [name, "not known", "", ""]
        size = figure(float(np.linalg.norm(wrench.force)), force)
        return [name, row(wrench.force, force), size, row(wrench.moment, moment)]

    rows = [
        line("flow on hardware (walls)", load.from_walls),
        line("flow on hardware (balance)", load.from_balance),
        line("anchor on hardware", None if reaction is None else reaction.wrench),
    ]
    heads = ["who on whom", "force (x, y, z), N", "size, N", "moment (x, y, z), N m"]
    anchor = place(np.asarray(balance.setting.anchor, dtype=np.float64))
    said = ""
    if reaction is not None:
        axis = reaction.line_of_action
        where = (
            "the line that it acts along is not known"
            if isnan(axis.couple)
            else f"it acts along the line through {place(axis.point)} m, direction {row(axis.direction)}, "
            f"with a couple of {figure(axis.couple, moment)} N m about it"
        )
        said = f"<p>The reaction rests on the load from the {reaction.basis}; {_text(where)}.</p>"
    return (
        _table(f"Loads, moments about the anchor {anchor} m", heads, rows)
        + said
        + _list("Assumed", assumptions)
        + _list("Cautions", CAUTIONS)
    )


def _laws(balance: Balance) -> list[str]:
    momentum, table = balance.momentum, balance.table
    size = momentum.size()
    flows = table.column("mass_flow")
    through = float(np.abs(flows).max(initial=0.0))
    rows = []
    for k, group in enumerate(balance.setting.groups):
        entries = (momentum.group_flux[k], momentum.group_pressure[k], momentum.group_viscous[k])
        known = (balance.setting.data.flux[k], balance.setting.data.pressure[k], balance.setting.data.traction[k])
        flow = figure(float(flows[k]), through) if known[0] else "not given"
        cells = [row(entry, size) if told else "not given" for entry, told in zip(entries, known)]
        rows.append([group.name, group.role.value, flow, *cells])
    blank = ["", ""]
    rows.append(["weight of fluid", *blank, row(momentum.weight, size), "", ""])
    if not momentum.known or np.any(momentum.storage):
        rows.append(["rate of what is inside", *blank, row(momentum.storage, size), "", ""])
    mass = balance.mass
    if mass is not None:
        left = row(momentum.residual(), size) if balance.complete else "not known"
        rows.append(["residual", "", figure(mass.residual, mass.inflow + mass.outflow), left, "", ""])
    heads = ["group", "role", "mass out, kg/s", "momentum out, N", "pressure on fluid, N", "viscous on fluid, N"]
    return [_table("Mass and momentum", heads, rows)]


def _legend(arrows: Sequence[DrawnArrow]) -> str:
    rows = []
    for item in arrows:
        arrow = item.arrow
        mark = "" if item.drawn else " (too small to draw)"
        mark += " (enlarged to be seen)" if item.enlarged else ""
        size, parts = figure(arrow.magnitude), row(arrow.vector)
        rows.append([item.tag, arrow.label + mark, arrow.body, size, parts])
    heads = ["arrow", "force", "who on whom", "size, N", "components (x, y, z), N"]
    return _table("Arrows of the drawing: pressure and momentum as forces on the fluid", heads, rows) if rows else ""
