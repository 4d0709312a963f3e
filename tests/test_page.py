"""The report page as text: what it holds, that its numbers are those of the result, that nothing in it runs."""

from __future__ import annotations

import copy
import hashlib
import json
import math
import re
from dataclasses import replace
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import fluxmesh
from fluxmesh.case.read import read_case
from fluxmesh.errors import OutputError
from fluxmesh.job.page import write_report
from fluxmesh.job.run import run_case
from fluxmesh.report.page import page as page_module
from fluxmesh.report.page.digits import digits_of, percent_of, plus_minus
from fluxmesh.report.page.grid import Block, Column, Grid, Line, shown_cells
from fluxmesh.report.page.page import MOST_BYTES, page_html, write_page
from fluxmesh.report.page.scene3d import pack_scene, thinned
from fluxmesh.report.page.source import Source
from fluxmesh.report.page.steps import staircase
from fluxmesh.report.page.traction import traction_sizes
from fluxmesh.report.page.units import PageUnits
from tests.page_cases import SHIPPED, made
from tests.page_reading import (
    FACTORS,
    Element,
    expected,
    is_plain_zero,
    look_up,
    numbers,
    printed,
    read_page,
    size_of_terms,
)
from tests.small_meshes import cube

PIXEL = b"\x89PNG\r\n\x1a\n" + b"\0" * 8
HOSTILE = [
    "</script><script>window.ran = 1</script>",
    '"><img src=x onerror="window.ran = 1">',
    "{{ 7 * 7 }} <b>bold</b> & 'quoted'",
    "\u05e9\u05dc\u05d5\u05dd \u202eevil",
]


def page(name: str, **options: Any) -> Element:
    one = made(name)
    return read_page(page_html(one.data, None, extra=one.extra(), **options))


def by_class(root: Element, word: str) -> list[Element]:
    return [one for one in root.all() if one.has("class", word)]


# ---- numbers --------------------------------------------------------------------------------


@pytest.mark.parametrize("name", SHIPPED)
def test_every_number_is_that_of_the_result(name: str) -> None:
    one = made(name)
    found = numbers(page(name))
    assert len(found) > 100
    for element in found:
        book = one.series if element.attributes.get("data-book") == "series" else one.data
        value = float(element.attributes["data-value"])
        round_off = 4e-16 * size_of_terms(book, element)
        assert value == pytest.approx(expected(book, element), rel=1e-15, abs=round_off), element.attributes


@pytest.mark.parametrize("name", SHIPPED)
def test_every_number_is_printed_to_its_digits(name: str) -> None:
    sizes = {"N": 0.0, "N·m": 0.0}
    found = numbers(page(name))
    for element in found:
        unit = element.attributes["data-unit"]
        sizes[unit] = max(sizes.get(unit, 0.0), abs(float(element.attributes["data-value"])))
    for element in found:
        value, unit, text = float(element.attributes["data-value"]), element.attributes["data-unit"], element.text()
        if text.startswith(("< ", "> ")):
            assert abs(value) < 1e-6
        elif is_plain_zero(text):
            # what is printed as nothing is round-off beside the largest of its kind
            assert abs(value) <= 1e-12 * max(sizes[unit], 1.0)
        else:
            digits = 5.1e-2 if element.has("class", "pm") else 5.1e-5 if unit != "%" else 5.1e-3
            assert printed(text) * FACTORS[unit] == pytest.approx(value, rel=digits)


@pytest.mark.parametrize("name", ["header", "impeller", "surge_bend"])
def test_us_units_stand_beside_and_agree(name: str) -> None:
    root = page(name, units="us")
    pairs = 0
    for element in root.all():
        if "data-us" not in element.attributes or not element.attributes["data-us"]:
            continue
        siblings = [one for one in element.parent.children if isinstance(one, Element)]
        mine = siblings[: siblings.index(element)]
        number = next(one for one in reversed(mine) if one.has("class", "num") and "data-value" in one.attributes)
        value, unit = float(number.attributes["data-value"]), element.attributes["data-us"]
        text = element.text().partition("±")[0].replace(unit, "")
        assert printed(text) * FACTORS[unit] == pytest.approx(value, rel=5.1e-5)
        pairs += 1
    assert pairs > 100
    assert "data-us" not in page_html(made(name).data, None)


def test_nothing_of_the_ledgers_is_left_out() -> None:
    one = made("manifold_coarse")
    there = {element.attributes.get("data-key") for element in numbers(page("manifold_coarse"))}
    for name in one.data["groups"]:
        assert f"/groups/{name}/mass_flow" in there
        for key in ("momentum_flux", "pressure_force", "viscous_force", "moment_of_momentum_flux"):
            assert {f"/groups/{name}/{key}/{k}" for k in range(3)} <= there
    for law in ("momentum", "angular_momentum"):
        assert {f"/{law}/residual/{k}" for k in range(3)} | {f"/{law}/relative"} <= there
    for port, figures in one.data["ports"].items():
        assert f"/ports/{port}/momentum_factor" in there
        assert figures["mean_pressure"]["area"] is not None
        assert f"/ports/{port}/mean_pressure/area" in there


def test_one_quantity_has_one_unit_on_the_page() -> None:
    for unit, others in (("N", ("kN", "MN")), ("kPa", ("Pa", "MPa")), ("mm", ("m",))):
        units = {element.attributes["data-unit"] for element in numbers(page("header"))}
        assert unit in units
        assert not units & set(others)


@pytest.mark.parametrize(
    ("value", "size", "text"),
    [
        (1552.0008866, 0.0, "1,552.0"),
        (-0.00101, 0.0, "\u22120.0010100"),
        (0.00018487425, 0.0, "184.87×10^\u22126"),
        (99999.6, 0.0, "100,000"),
        (9999999.7, 0.0, "10.000×10^6"),
        (0.00099999999, 0.0, "0.0010000"),
        (1e-300, 0.0, "1.0000×10^\u2212300"),
        (3e-16, 1.0, "0"),
        (0.0, 0.0, "0"),
        (math.inf, 0.0, "not known"),
    ],
)
def test_engineering_digits(value: float, size: float, text: str) -> None:
    assert str(digits_of(value, size)) == text


@pytest.mark.parametrize(
    ("half", "power", "text"),
    [(0.36125, 0, "0.36"), (1.8e-5, 0, "0.000018"), (1.8e-5, -6, "18×10^\u22126"), (2.5e3, 6, "0.0025×10^6")],
)
def test_a_doubt_has_the_power_of_ten_of_its_number(half: float, power: int, text: str) -> None:
    assert str(plus_minus(half, power)) == text


def test_the_size_of_the_reaction_has_its_doubt() -> None:
    root, data = page("header", units="us"), made("header").data
    big = by_class(root, "big")[0]
    number, half = numbers(big)
    assert float(number.attributes["data-value"]) == data["reaction"]["force_size"]
    assert math.hypot(*data["reaction"]["force"]) == pytest.approx(data["reaction"]["force_size"], rel=1e-15)
    assert half.attributes["data-key"] == "/reaction/force_size_uncertainty"
    assert float(half.attributes["data-value"]) == data["reaction"]["force_size_uncertainty"]
    # no more than all components together; where their errors cancel along the force, a tenth of it
    parts = data["reaction"]["force_uncertainty"]
    assert 0.099 * math.hypot(*parts) < data["reaction"]["force_size_uncertainty"] <= math.hypot(*parts)
    assert big.text().count("±") == 2
    sizes = {one.attributes.get("data-key") for one in numbers(root)}
    assert {"/hardware_load/from_balance/force_size_uncertainty", "/reaction/moment_size_uncertainty"} <= sizes
    # a result that does not have it yet still has its size
    older = copy.deepcopy(data)
    del older["reaction"]["force_size"], older["reaction"]["force_size_uncertainty"]
    number = numbers(by_class(read_page(page_html(older, None)), "big")[0])[0]
    assert number.text() == "894.84"


def test_shares() -> None:
    assert percent_of(0.01).text == "1.00 %"
    assert percent_of(1.0).text == "100 %"
    assert percent_of(6.5e-17).text == "< 0.0001 %"
    assert percent_of(1.69e-6).text == "0.000169 %"
    assert percent_of(0.0).text == "0 %"


def test_points_of_a_column_stand_in_one_line() -> None:
    source = Source({"a": 1234.5, "b": -0.5, "c": 12.0, "d": 0.0}, PageUnits())
    lines = tuple(Line(key, (source.figure("", key),)) for key in "abcd")
    grid = Grid("", "", (Column(""),), (Block(lines),))
    cells = [cell for block in shown_cells(grid, source.units) for line in block for cell in line]
    behind = []
    for cell in cells:
        _, point, part = cell.number.text.partition(".")
        behind.append(len(part) + len(point or "\u2008" * cell.pad.count("\u2008")) + cell.pad.count("\u2007"))
    assert len(set(behind)) == 1


# ---- the steps to the load --------------------------------------------------------------------


@pytest.mark.parametrize("name", SHIPPED)
@pytest.mark.parametrize("quantity", ["force", "moment"])
def test_the_steps_end_at_the_load(name: str, quantity: str) -> None:
    data = made(name).data
    stairs = staircase(Source(data, PageUnits()), quantity)
    load = data["hardware_load"][f"from_{stairs.basis}"][quantity]
    added = [step for step in stairs.steps if not step.total]
    size = max(abs(figure.value) for step in added for figure in step.figures)
    assert added[-1].ends == pytest.approx(load, rel=1e-12, abs=1e-12 * size)
    # each starts where the one before it ended; nothing had to be made up
    for one, following in pairwise(added):
        assert following.starts == one.ends
    assert all(step.kind != "rest" for step in added)


def test_what_groups_do_not_tell_is_said() -> None:
    data = copy.deepcopy(made("manifold_coarse").data)
    data["hardware_load"]["from_balance"]["force"][0] += 1.0
    stairs = staircase(Source(data, PageUnits()), "force")
    rest = next(step for step in stairs.steps if step.kind == "rest")
    assert rest.figures[0].value == pytest.approx(1.0)
    root = read_page(page_html(data, None))
    assert "Not told group by group" in root.text()


def test_bars_are_to_one_scale() -> None:
    root = page("header")
    table = by_class(root, "steps")[0]
    scales = []
    for row in table.all("tr"):
        for cell in [one for one in row.all("td") if one.all("rect")]:
            value = float(numbers(cell)[0].attributes["data-value"])
            width = float(cell.all("rect")[0].attributes["width"])
            left = float(cell.all("rect")[0].attributes["x"])
            assert 0.0 <= left <= left + width <= 1000.0
            if width > 20.0:
                scales.append(abs(value) / width)
    assert len(scales) > 8
    assert np.ptp(scales) < 0.01 * np.mean(scales)


def test_a_large_hardware_weight_gets_a_scale_of_its_own() -> None:
    stairs = staircase(Source(made("manifold_coarse").data, PageUnits()), "force")
    assert stairs.rescaled
    assert stairs.onward[0].kind == "resultant"
    assert "at a scale of its own" in page("manifold_coarse").text()
    assert not staircase(Source(made("header").data, PageUnits()), "force").rescaled


# ---- what may be lacking, and what comes later ---------------------------------------------------


@pytest.mark.long
@pytest.mark.parametrize("name", ["header", "impeller", "surge_bend"])
def test_whatever_the_result_lacks_is_left_out(name: str) -> None:
    data = made(name).data
    for key in data:
        without = {other: value for other, value in data.items() if other != key}
        read_page(page_html(without, None))
    read_page(page_html(dict.fromkeys(data), None))
    read_page(page_html({}, None))


def test_an_open_surface_has_group_integrals_and_no_residual() -> None:
    data = copy.deepcopy(made("rotor").data)
    data |= {"momentum": None, "angular_momentum": None, "mass": None, "fluid": None, "reaction": None}
    data["geometry"]["closed"] = False
    data["hardware_load"] |= {"from_balance": None, "difference": None}
    text = read_page(page_html(data, None)).text()
    assert "No reaction" in text
    assert "group integrals only" in text
    assert "to residual" not in text


def later() -> dict[str, Any]:
    """A result with all that further parts of the program add."""
    data = copy.deepcopy(made("header").data)
    data["reaction"]["force_uncertainty"] = [1.5, 0.75, 2.25]
    data["mass"]["residual_uncertainty"] = 0.0125
    data["reported"] = {
        "on": ["shell"], "reported_force": [600.0, -300.0, -400.0], "reported_moment": None,
        "force": [660.0, -328.0, -394.0], "moment": [1.0, 2.0, 3.0], "relative": 0.1,
        "explanations": ["The ratio is that of the densities"],
    }  # fmt: skip
    data["sharpened"] = {
        "reaction": {"force": [-661.0, 329.0, 507.0], "moment": [-16.0, -42.0, -4.0]},
        "mass": {"residual": 1e-3}, "hardware_load": {"from_balance": None, "from_walls": None}, "momentum": None,
    }  # fmt: skip
    data["doubt"] = {
        "inputs": {"fluid.density": {"value": 998.2, "half_width": 0.5, "unit": "kg/m^3", "shape": "normal"}},
        "budget": {"reaction.force": [
            {"name": "fluid.density", "kind": "input", "half_width": 1.25, "share": 0.875},
            {"name": "interpolation", "kind": "interpolation", "half_width": 0.5, "share": 0.125},
        ]},
        "notes": ["The facets are the shape"],
    }  # fmt: skip
    data["causes"] = {"causes": [
        {"id": "kinematic-pressure", "group": None, "residual_before": 0.4, "residual_after": 0.002,
         "statement": "The pressure is over density.", "fix": 'kind = "kinematic"', "equally": ["density"]},
    ]}  # fmt: skip
    data["convergence"] = {
        "meshes": [{"case": "fine", "faces": 47040, "size": 0.001}, {"case": "coarse", "faces": 8640, "size": 0.002}],
        "figures": {"reaction.force.x": {
            "values": [12.5, 12.25], "behaviour": "converging", "order": 1.9, "extrapolated": 12.625,
            "relative_error": 0.02, "index": 0.0125, "uncertainty": 0.15625, "reasons": [],
        }},
    }  # fmt: skip
    data["verdict"] |= {"laws": [{"law": "Mass", "state": "closes", "relative": 1e-4, "doubt": 2e-4}]}
    return data


def test_doubt_causes_convergence_and_comparison_are_shown() -> None:
    data = later()
    root = read_page(page_html(data, None))
    found = {element.attributes["data-key"]: element for element in numbers(root) if "data-key" in element.attributes}
    for key, text in {
        "/reaction/force_uncertainty/0": "± 1.5",
        "/mass/residual_uncertainty": "± 0.013",
        "/sharpened/reaction/force/2": "507.00",
        "/doubt/budget/reaction.force/0/half_width": "1.2500",
        "/doubt/budget/reaction.force/0/share": "87.5 %",
        "/doubt/inputs/fluid.density/half_width": "0.50000",
        "/causes/causes/0/residual_before": "40.0 %",
        "/convergence/meshes/0/faces": "47,040",
        "/convergence/figures/reaction.force.x/extrapolated": "12.625",
        "/convergence/figures/reaction.force.x/index": "1.25 %",
        "/verdict/laws/0/doubt": "0.0200 %",
        "/reported/reported_force/1": "\u2212300.00",
    }.items():
        assert found[key].text() == text, key
        assert float(found[key].attributes["data-value"]) == look_up(data, key)
    for words in ("kinematic-pressure", 'kind = "kinematic"', "density", "The facets are the shape", "converging",
                  "The ratio is that of the densities"):  # fmt: skip
        assert words in root.text()


def test_a_half_width_that_is_round_off_takes_no_line() -> None:
    data = later()
    data["reaction"]["force_uncertainty"] = [1e-7, 0.75, 2.25]
    keys = {element.attributes.get("data-key") for element in numbers(read_page(page_html(data, None)))}
    assert "/reaction/force_uncertainty/0" not in keys
    assert "/reaction/force_uncertainty/1" in keys


@pytest.mark.parametrize(
    ("verdict", "doubts", "state", "words"),
    [
        ({"closes": True, "measure": 2e-3, "tolerance": 0.01}, [], "closes", "The balance closes: the largest"),
        ({"closes": False, "measure": 0.2, "tolerance": 0.01}, [], "open", "The balance does not close"),
        ({"closes": None, "measure": None, "tolerance": 0.01}, [], "unjudged", "cannot be judged in full."),
        (
            {"closes": True, "measure": 0.02, "tolerance": 0.01, "state": "closes within its doubt"}, [],
            "closes", "closes within its doubt",
        ),
        (
            {"closes": True, "measure": 0.0, "tolerance": 0.01}, [{"seen": "a", "matters": "b", "settle": "c"}],
            "doubtful", "there is one doubt about the case",
        ),
    ],
)  # fmt: skip
def test_the_verdict_is_a_sentence(verdict: dict, doubts: list, state: str, words: str) -> None:
    root = read_page(page_html({**made("header").data, "verdict": verdict, "doubts": doubts}, None))
    box = next(one for one in by_class(root, "verdict"))
    assert box.has("class", state)
    assert words in box.text()


def test_loads_stand_beside_their_assumptions_and_cautions() -> None:
    data = made("header").data
    text = page("header").text()
    for said in (*data["assumptions"], *data["cautions"], *data["notes"], *data["verdict"]["reasons"]):
        assert said in text


def test_where_it_comes_from() -> None:
    one = made("header")
    extra = {
        "case_text": one.case_text, "command": "fluxmesh balance header.toml", "time": "2031-04-05 06:07 UTC",
        "versions": {"fluxmesh": "1.2.3"}, "files": [{"name": "header.stl", "size": 661484, "sha256": "ab" * 32}],
    }  # fmt: skip
    text = read_page(page_html(one.data, None, extra=extra)).text()
    for words in (one.data["inputs"]["case_sha256"], "661,484", "ab" * 32, "fluxmesh balance header.toml",
                  "2031-04-05 06:07 UTC", "1.2.3", one.case_text.strip()):  # fmt: skip
        assert words in text


# ---- one file, nothing runs, nothing is asked for ------------------------------------------------


def hostile() -> tuple[dict[str, Any], Any]:
    one = made("header")
    names = dict(zip(("feed", "left", "right", "top"), HOSTILE, strict=True))
    data = copy.deepcopy(one.data)
    data["groups"] = {names.get(name, name): group for name, group in data["groups"].items()}
    data["ports"] = {names.get(name, name): port for name, port in data["ports"].items()}
    data["energy"]["groups"] = {names.get(name, name): group for name, group in data["energy"]["groups"].items()}
    data |= {"title": HOSTILE[0], "assumptions": [HOSTILE[1]], "notes": [HOSTILE[2]]}
    data["doubts"] = [{"kind": "x", "seen": HOSTILE[0], "matters": HOSTILE[1], "settle": HOSTILE[2]}]
    scene = replace(
        one.scene,
        title=HOSTILE[0],
        groups=tuple((names.get(name, name), role) for name, role in one.scene.groups),
        arrows=tuple(
            replace(arrow, group=names.get(arrow.group, arrow.group), label=HOSTILE[0]) for arrow in one.scene.arrows
        ),
    )
    return data, scene


def test_names_with_markup_are_text() -> None:
    data, scene = hostile()
    extra = {"case_text": HOSTILE[0], "command": HOSTILE[1], "files": [{"name": HOSTILE[1]}]}
    root = read_page(page_html(data, scene, extra=extra))
    assert root.all("img") == []
    assert len(root.all("script")) == 4
    assert not [key for one in root.all() for key in one.attributes if key.startswith("on")]
    assert not root.all("b")
    text = root.text()
    assert all(name in text for name in HOSTILE)
    stored = json.loads(next(one for one in root.all("script") if one.attributes.get("id") == "scene-data").text())
    assert [group["name"] for group in stored["groups"]][:4] == HOSTILE
    assert root.all("h1")[0].attributes["dir"] == "auto"
    # a word that reads from right to left does not turn the line around it
    for one in root.all():
        if one.text() == HOSTILE[3] and not any(isinstance(child, Element) for child in one.children):
            assert one.attributes.get("dir") == "auto" or one.parent.attributes.get("dir") == "auto"


def test_the_page_asks_for_nothing() -> None:
    text = page_html(made("header").data, made("header").scene, pictures={"vectors": PIXEL})
    root = read_page(text)
    for one in root.all():
        for key in ("src", "href", "action", "data", "poster", "srcset"):
            if key in one.attributes:
                assert one.attributes[key].startswith(("#", "data:")), one.attributes
    policy = next(one for one in root.all("meta") if "http-equiv" in one.attributes).attributes["content"]
    assert policy.startswith("default-src 'none'")
    scripts = re.search(r"script-src ([^;]*)", policy).group(1).split()
    assert len(scripts) == 2
    assert all(word.startswith("'sha256-") for word in scripts)
    assert "url(" not in root.all("style")[0].text()


def test_a_page_without_a_scene_runs_no_script() -> None:
    root = page("header", pictures={"vectors": PIXEL})
    assert root.all("script") == []
    assert "script-src 'none'" in page_html(made("header").data, None)
    picture = root.all("img")[0]
    assert picture.attributes["src"].startswith("data:image/png;base64,iVBOR")
    assert picture.attributes["alt"]
    assert any(one.has("class", "picture") for one in parents(picture))


def parents(element: Element) -> list[Element]:
    found = []
    while element.parent is not None:
        element = element.parent
        found.append(element)
    return found


def test_without_the_drawing_library_the_pictures_serve(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(page_module, "drawing_script", lambda: None)
    root = read_page(page_html(made("header").data, made("header").scene, pictures={"vectors": PIXEL}))
    assert not [one for one in root.all() if one.attributes.get("id") == "stage"]
    assert any(one.has("class", "picture") for one in parents(root.all("img")[0]))
    nothing = read_page(page_html(made("header").data, made("header").scene))
    assert "No picture was drawn" in nothing.text()


def test_a_page_is_written_whole_or_not_at_all(tmp_path: Path) -> None:
    write_page(made("header").data, None, tmp_path / "report.html")
    assert (tmp_path / "report.html").read_text("utf-8").rstrip().endswith("</html>")
    (tmp_path / "file").write_text("")
    with pytest.raises(OutputError):
        write_page(made("header").data, None, tmp_path / "file" / "report.html")
    with pytest.raises(ValueError, match="furlongs"):
        write_page(made("header").data, None, tmp_path / "other.html", units="furlongs")
    assert sorted(path.name for path in tmp_path.iterdir()) == ["file", "report.html"]


# ---- for everybody --------------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["header", "surge_bend"])
def test_headings_go_down_in_order_and_tables_say_what_they_are(name: str) -> None:
    root = page(name, pictures={"vectors": PIXEL, "pressure": PIXEL, "series": PIXEL})
    levels = [int(one.name[1]) for one in root.all() if re.fullmatch("h[1-6]", one.name)]
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert all(below <= above + 1 for above, below in pairwise(levels))
    for table in root.all("table"):
        assert len(table.all("caption")) == 1
        assert table.all("caption")[0].text().strip()
        assert all(one.attributes.get("scope") for one in table.all("th"))
    for one in root.all("img"):
        assert one.attributes["alt"]
    ids = [one.attributes["id"] for one in root.all() if "id" in one.attributes]
    assert len(ids) == len(set(ids))
    for one in root.all("a"):
        assert one.attributes["href"].removeprefix("#") in ids


def test_rows_and_columns_fit() -> None:
    for table in page("impeller", units="us").all("table"):
        head = table.all("thead")
        if not head or table.has("class", "steps"):
            continue
        columns = len(head[0].all("th"))
        for body in table.all("tbody"):
            spans = 0
            for row in body.all("tr"):
                cells = [one for one in row.children if isinstance(one, Element)]
                count = len(cells) + (1 if spans > 0 else 0)
                spans = max([spans, *(int(one.attributes.get("rowspan", 1)) for one in cells)]) - 1
                assert count == columns, table.all("caption")[0].text()


# ---- the scene --------------------------------------------------------------------------------------


def test_thinning_keeps_each_value_with_its_triangle() -> None:
    scene = made("manifold_fine").scene
    heights = scene.points[scene.triangles].mean(axis=1)[:, 2]
    scene = replace(scene, pressure=heights.copy())
    coarse, kept = thinned(scene, 6_000)
    assert 1_000 < len(coarse.triangles) <= 6_000
    size = np.ptp(scene.points, axis=0).max()
    now = coarse.points[coarse.triangles].mean(axis=1)[:, 2]
    assert np.abs(coarse.pressure - now).max() < 0.05 * size
    np.testing.assert_array_equal(coarse.pressure, heights[kept])
    assert coarse.pressure_range == pytest.approx((heights.min(), heights.max()))


def test_a_scene_packs_what_it_shows() -> None:
    one = made("manifold_coarse")
    units = PageUnits()
    traction = np.full(len(one.scene.triangles), 2.5)
    traction[:100] = np.nan
    packed = pack_scene(one.scene, units, {}, traction=lambda triangles: traction[triangles])
    assert packed.triangles == len(one.scene.triangles)
    assert sum(piece["triangles"][1] for piece in packed.data["pieces"]) == 3 * packed.triangles
    assert set(packed.colours) == {"pressure", "traction"}
    without = sum(piece["triangles"][1] for piece in packed.data["pieces"] if "traction" not in piece)
    assert without == 300
    tags = [arrow["tag"] for arrow in packed.data["arrows"]]
    assert len(set(tags)) == len(one.scene.arrows)
    assert {"P1", "M1", "L", "R"} <= set(tags)


@pytest.mark.long
def test_a_large_surface_is_coarsened_until_the_page_is_small() -> None:
    rng = np.random.default_rng(5)
    side = 500
    x, y = np.meshgrid(np.linspace(0, 1, side), np.linspace(0, 1, side))
    points = np.stack([x, y, 0.1 * rng.random(x.shape)], axis=-1).reshape(-1, 3)
    corner = (np.arange(side - 1)[:, None] * side + np.arange(side - 1)).ravel()
    triangles = np.vstack([
        np.stack([corner, corner + 1, corner + side], axis=1),
        np.stack([corner + 1, corner + side + 1, corner + side], axis=1),
    ])  # fmt: skip
    base = made("header").scene
    scene = replace(
        base,
        points=points,
        triangles=triangles,
        group_of_triangle=np.zeros(len(triangles), np.int32),
        pressure=rng.random(len(triangles)),
    )
    text = page_html(made("header").data, scene, pictures={"vectors": b"x" * 4_200_000}, extra={})
    assert len(text.encode()) < MOST_BYTES
    assert f"of {len(triangles):,}" in text


# ---- of a case -----------------------------------------------------------------------------------------


def test_the_page_of_a_case_tells_where_it_comes_from(tmp_path: Path) -> None:
    path = SHIPPED["guide_vane"]
    case = read_case(path)
    done = run_case(case)
    write_report(case, done, tmp_path / "report.html", command="fluxmesh balance guide_vane.toml")
    root = read_page((tmp_path / "report.html").read_text("utf-8"))
    text = root.text()
    for file in (path, path.with_suffix(".vtp")):
        content = file.read_bytes()
        assert hashlib.sha256(content).hexdigest() in text
        assert f"{len(content):,}" in text
    assert path.read_text("utf-8").strip() in text
    assert "fluxmesh balance guide_vane.toml" in text
    assert [one.attributes["value"] for one in root.all("input") if one.attributes.get("name") == "colour"] == [
        "plain", "pressure", "traction"
    ]  # fmt: skip
    assert str(path.parent) not in text


def test_traction_sizes_add_up_to_the_drag_of_a_plane_wall() -> None:
    points, faces = cube()
    traction = np.tile([3.0, 0.0, 4.0], (len(faces), 1))
    surface = fluxmesh.control_surface(points, faces, {"all": ("wall", np.arange(len(faces)))})
    flow = fluxmesh.lay_flow(surface, density=1.0, pressure=0.0, traction=traction, at="faces")
    np.testing.assert_allclose(traction_sizes(surface, flow), 5.0)
    np.testing.assert_allclose(traction_sizes(surface, flow, np.array([7, 3])), 5.0)
    none = fluxmesh.lay_flow(surface, density=1.0, pressure=0.0)
    assert traction_sizes(surface, none) is None
