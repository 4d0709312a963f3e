"""The report page: one HTML file that holds all that it shows and asks nothing of any network."""

from __future__ import annotations

import base64
import gzip
import hashlib
import json
from collections.abc import Mapping
from functools import cache
from pathlib import Path
from typing import Any, Final

from fluxmesh.report.page.chart import chart_rows
from fluxmesh.report.page.facts import (
    Fact,
    action_facts,
    input_facts,
    motion_facts,
    release_facts,
    shape_facts,
    short_form_facts,
    storage_words,
)
from fluxmesh.report.page.grid import shown, shown_cells
from fluxmesh.report.page.headline import basis_words, laws_grid, verdict_of
from fluxmesh.report.page.instants import series_grids
from fluxmesh.report.page.ledgers import carried_grid, energy_grid, law_grid, mass_grid
from fluxmesh.report.page.loads import loads_grids, reaction_grid, reported_grids, sharpened_grid
from fluxmesh.report.page.origin import origin_of
from fluxmesh.report.page.ports import losses_grid, ports_grid
from fluxmesh.report.page.scene3d import MOST_TRIANGLES, PackedScene, drawing_script, pack_scene, tags_of
from fluxmesh.report.page.source import Figure, Source
from fluxmesh.report.page.steps import staircase
from fluxmesh.report.page.trust import budget_grids, causes_of, convergence_grids
from fluxmesh.report.page.units import PageUnits
from fluxmesh.report.picture_arrows import ARROW_STYLES
from fluxmesh.report.scene import ARROW_KINDS, Scene
from fluxmesh.report.whole import write_whole

__all__ = ["MOST_BYTES", "page_html", "write_page"]

MOST_BYTES: Final = 8_000_000
"""The scene is coarsened until the page stays below this size."""

_HEADINGS: Final = {
    "rests": "What the load rests on",
    "steps": "How the load adds up",
    "time": "Over time",
    "ledgers": "Ledgers",
    "ports": "Ports",
    "trust": "How far to trust it",
    "shape": "Shape and contents",
    "pictures": "Pictures",
    "origin": "Where it comes from",
}
_KINDS: Final = {
    "pressure": "pressure at ports, on fluid",
    "momentum": "momentum at ports, on fluid",
    "weight": "weights",
    "resultant": "load of the flow, on hardware",
    "reaction": "reaction, on hardware",
}
_STEP_KINDS: Final = {
    "pressure": "pressure",
    "momentum": "momentum",
    "shear": "shear",
    "weight": "weight",
    "storage": "inertia",
    "rest": "rest",
    "resultant": "load of the flow",
    "reaction": "reaction",
}
_PICTURES: Final = {
    "vectors": "Force vectors on the control volume and on the hardware, to scale, with their legend.",
    "pressure": "Gauge pressure on the surface, with the same force vectors.",
}


def write_page(
    outcome_data: Mapping[str, Any],
    scene: Scene | None,
    path: str | Path,
    *,
    pictures: Mapping[str, bytes] | None = None,
    units: str = "si",
    extra: Mapping[str, Any] | None = None,
) -> None:
    """Write the report page of a balance, whole or not at all.

    Parameters
    ----------
    outcome_data : mapping
        The content of ``balance.json``; what it lacks is left out.
    scene : Scene or None
        For the turnable scene; without it, or without the drawing library, the pictures serve.
    path : str or Path
        File to write.
    pictures : mapping of str to bytes, optional
        PNG files by name: ``vectors``, ``pressure``, ``series``.
    units : {"si", "us"}, optional
        ``us`` shows US customary units beside SI.
    extra : mapping, optional
        As for `page_html`.

    Raises
    ------
    OutputError
        The file cannot be written.
    """
    text = page_html(outcome_data, scene, pictures=pictures, units=units, extra=extra)
    write_whole(text.encode("utf-8", errors="replace"), Path(path))


def page_html(
    outcome_data: Mapping[str, Any],
    scene: Scene | None,
    *,
    pictures: Mapping[str, bytes] | None = None,
    units: str = "si",
    extra: Mapping[str, Any] | None = None,
) -> str:
    """Return the report page of a balance.

    Parameters
    ----------
    outcome_data, scene, pictures, units
        As for `write_page`.
    extra : mapping, optional
        What else is known: ``case_text`` (str), ``files`` (a sequence of mappings with ``name``,
        ``size`` in bytes, ``sha256``), ``versions`` (name to version), ``command``, ``time`` (str),
        ``series`` (the content of ``series.json``), ``convergence`` (that of a study of meshes),
        ``causes`` (a sequence as in ``causes`` of the result), ``traction`` (gives the size of
        the viscous traction on triangles of the scene, see `fluxmesh.report.page.scene3d.pack_scene`).

    Returns
    -------
    str
        HTML below `MOST_BYTES`, unless the pictures alone are larger. Text from outside is shown as it is, never run.
    """
    extra = dict(extra or {})
    data = {**outcome_data, **{key: extra[key] for key in ("convergence", "causes") if extra.get(key)}}
    page_units = PageUnits(units)
    context = _context(data, page_units, pictures or {}, extra)
    drawing = drawing_script() if scene is not None else None
    if scene is None or drawing is None:
        return _rendered(context, scene, None, "")
    most = MOST_TRIANGLES
    while True:
        packed = pack_scene(scene, page_units, _entries(data, page_units), traction=extra.get("traction"), most=most)
        text = _rendered(context, scene, packed, drawing)
        if len(text.encode("utf-8", errors="replace")) < MOST_BYTES or most < 2_000:
            return text
        most = min(most, packed.triangles) // 2


def _context(
    data: Mapping[str, Any], units: PageUnits, pictures: Mapping[str, bytes], extra: Mapping[str, Any]
) -> dict[str, Any]:
    """All parts of the page but the scene, as plain data for the template."""
    source = Source(data, units)
    series = series_grids(Source(extra["series"], units)) if extra.get("series") else []
    steps = [stairs for stairs in (staircase(source, quantity) for quantity in ("force", "moment")) if stairs]
    axial = source.get("frame", "about_axis")
    ledgers = [mass_grid(source), law_grid(source, "momentum"), law_grid(source, "angular_momentum")]
    ledgers += [grid for grid in (energy_grid(source), carried_grid(source)) if grid]
    reaction = reaction_grid(source)
    unbalanced = [
        f"{name}: {'; '.join(one.get('unknown') or ())}"
        for name, one in [("Energy", data.get("energy") or {}), *(data.get("carried") or {}).items()]
        if one.get("unknown")
    ]
    energy_notes = [f"{note}." for note in source.get("energy", "notes") or ()]
    reasons = [str(loss["reason"]) for loss in data.get("losses") or () if loss.get("reason")]
    return {
        "title": str(data.get("title") or "Balance"),
        "origin": origin_of(data.get("inputs") or {}, extra),
        "reaction": reaction,
        "reaction_size": source.length("force", "reaction", "force") if reaction else None,
        "action": action_facts(source),
        "basis": basis_words(data),
        "verdict": verdict_of(data),
        "laws": laws_grid(source),
        "cautions": list(data.get("cautions") or ()),
        "assumptions": list(data.get("assumptions") or ()),
        "doubts": data.get("doubts", ()),
        "stairs": steps,
        "loads": loads_grids(source),
        "release": release_facts(source),
        "short_form": short_form_facts(source),
        "reported": reported_grids(source),
        "reported_words": list(source.get("reported", "explanations") or ()),
        "series": series,
        "series_words": _series_words(extra.get("series")),
        "series_picture": base64.b64encode(pictures["series"]).decode("ascii") if pictures.get("series") else "",
        "ledgers": ledgers,
        "ledger_words": [*storage_words(source), *energy_notes, *unbalanced, *reasons],
        "motion": [*motion_facts(source), *(_axial_facts(source) if axial else ())],
        "ports": [grid for grid in (ports_grid(source), losses_grid(source)) if grid],
        "sharpened": sharpened_grid(source),
        "budget": budget_grids(source),
        "trust_words": list(source.get("doubt", "notes") or ()),
        "causes": causes_of(source),
        "convergence": convergence_grids(source),
        "shape": shape_facts(source),
        "notes": list(data.get("notes") or ()),
        "inputs": input_facts(source),
        "pictures": [
            (name, words, base64.b64encode(pictures[name]).decode("ascii"))
            for name, words in _PICTURES.items()
            if pictures.get(name)
        ],
        "headings": _HEADINGS,
        "units": units,
    }


def _axial_facts(source: Source) -> list[Any]:
    return [Fact("residual of angular momentum about the axis, over entries",
                 (source.figure("", "frame", "about_axis", "relative", form="percent"),))]  # fmt: skip


def _series_words(series: Mapping[str, Any] | None) -> list[str]:
    if not series:
        return []
    verdict = series.get("verdict") or {}
    closes = verdict.get("closes")
    word = "The series cannot be judged in full" if closes is None else "The series closes"
    word = "The series does not close" if closes is False else word
    reasons = "; ".join(verdict.get("reasons") or ())
    return [f"{word}: {reasons}.", *(series.get("assumptions") or ()),
            *(series.get("cautions") or ()), *(series.get("notes") or ())]  # fmt: skip


def _entries(data: Mapping[str, Any], units: PageUnits) -> dict[str, list[tuple[str, str]]]:
    """What is said of each group when it is pointed at."""
    source = Source(data, units)
    told: dict[str, list[tuple[str, str]]] = {}
    for name, group in (data.get("groups") or {}).items():
        given = group.get("data") or {}
        rows = [("area", source.figure("area", "groups", name, "area"))]
        if given.get("flux", True) or group.get("role") == "wall":
            rows.append(("mass out", source.figure("mass flow", "groups", name, "mass_flow")))
        size = max(source.size("groups", name, key) or 0.0 for key in ("momentum_flux", "pressure_force"))
        for key, words, known in (
            ("momentum_flux", "momentum out", given.get("flux", True)),
            ("pressure_force", "pressure on fluid", given.get("pressure", True)),
            ("viscous_force", "shear on fluid", given.get("traction", True)),
        ):
            if known and source.size("groups", name, key):
                rows += [
                    (f"{words} {axis}", source.figure("force", "groups", name, key, k, size=size))
                    for k, axis in enumerate("xyz")
                ]
        told[name] = [(words, _line(figure, units)) for words, figure in rows]
    return told


def _line(figure: Figure, units: PageUnits) -> str:
    us, unit = figure.written_us(units), units.us(figure.quantity)
    si = f"{figure.written(units)} {units.si(figure.quantity).symbol}"
    return si if us is None or unit is None else f"{si} | {us} {unit.symbol}"


@cache
def _templates() -> tuple[Any, dict[str, str]]:
    """The environment of the templates, and the style and scripts beside them."""
    from jinja2 import Environment, PackageLoader, StrictUndefined

    loader = PackageLoader("fluxmesh.report.page")
    room = Environment(loader=loader, autoescape=True, undefined=StrictUndefined, auto_reload=False)
    return room, {name: loader.get_source(room, name)[0] for name in ("page.css", "marks.js", "scene.js")}


def _rendered(context: Mapping[str, Any], scene: Scene | None, packed: PackedScene | None, drawing: str) -> str:
    from markupsafe import Markup

    units: PageUnits = context["units"]
    room, assets = _templates()
    script = assets["marks.js"] + assets["scene.js"]
    tags = tags_of(scene) if scene is not None else []
    arrows = list(zip(tags, scene.arrows, strict=True)) if scene is not None else []
    # a momentum of no port is the inertia of what is inside
    by_step = {
        ("storage" if arrow.kind == "momentum" and arrow.group is None else arrow.kind, arrow.group or ""): tag
        for tag, arrow in arrows
        if arrow.kind != "weight"
    }
    chart = [
        (
            {"force": "Steps to the force", "moment": "Steps to the moment about the anchor"}[stairs.quantity],
            stairs.quantity,
            chart_rows(stairs, units, by_step),
        )
        for stairs in context["stairs"]
    ]
    used = {row.kind for _, _, parts in chart for rows in parts for row in rows}
    marks = {kind: [tag for tag, arrow in arrows if arrow.kind == kind] for kind in ARROW_KINDS}
    contents = [(anchor, words) for anchor, words in _HEADINGS.items() if _there(anchor, context, packed is not None)]
    hashes = [script, drawing] if packed is not None else []
    made: str = room.get_template("page.html").render(
        **context,
        allowed=Markup(" ".join(_hash(text) for text in hashes) or "'none'"),
        css=Markup(assets["page.css"]),
        script=Markup(script),
        drawing=Markup(_packed_text(drawing)) if packed is not None else "",
        scene=packed,
        scene_json=Markup(_safe_json(packed.data)) if packed is not None else "",
        whole_triangles=len(scene.triangles) if scene is not None else 0,
        kinds=[
            (kind, _KINDS[kind], ARROW_STYLES[kind].colour, _range(marks[kind])) for kind in ARROW_KINDS if marks[kind]
        ],
        tags={"reaction": next(iter(marks["reaction"]), "")},
        steps=chart,
        step_kinds=[(kind, words) for kind, words in _STEP_KINDS.items() if kind in used],
        contents=contents,
        block=_title_block(context),
        cell=lambda figure: shown(figure, units),
        vector=lambda figures: [shown(figure, units) for figure in figures],
        cells=lambda grid: shown_cells(grid, units),
    )
    return made


def _there(anchor: str, context: Mapping[str, Any], with_scene: bool) -> bool:
    """Whether a section is on the page."""
    needs = {
        "steps": ("stairs", "loads"),
        "time": ("series",),
        "ports": ("ports",),
        "trust": ("sharpened", "budget", "causes", "convergence"),
    }
    if anchor == "pictures":
        return len(context["pictures"]) > (0 if with_scene else 1)
    return anchor not in needs or any(context[key] for key in needs[anchor])


def _title_block(context: Mapping[str, Any]) -> list[tuple[str, str]]:
    origin = context["origin"]
    system = "SI, US customary beside" if context["units"].system == "us" else "SI"
    cells = [("Units", system), ("Case", origin.case), ("Made", origin.time)]
    version = dict(origin.versions).get("fluxmesh")
    cells.append(("By", f"fluxmesh {version}" if version else "fluxmesh"))
    return [(label, words) for label, words in cells if words]


def _range(tags: list[str]) -> str:
    return tags[0] if len(tags) == 1 else f"{tags[0]} to {tags[-1]}"


def _hash(text: str) -> str:
    return f"'sha256-{base64.b64encode(hashlib.sha256(text.encode()).digest()).decode()}'"


def _packed_text(text: str) -> str:
    return base64.b64encode(gzip.compress(text.encode(), 9, mtime=0)).decode("ascii")


def _safe_json(data: Mapping[str, Any]) -> str:
    """JSON in which nothing ends or starts an element of the page."""
    text = json.dumps(data, ensure_ascii=True, allow_nan=False)
    return text.replace("<", "\\u003c").replace(">", "\\u003e").replace("&", "\\u0026")
