"""Notebook tables: figures of the balance, assumptions beside loads, names as text."""

from __future__ import annotations

import re
import subprocess
import sys
from html.parser import HTMLParser
from pathlib import Path
from xml.etree import ElementTree

import numpy as np
import pytest

import fluxmesh
from fluxmesh import balance_of, lay_flow
from fluxmesh.assess.assumptions import CAUTIONS
from fluxmesh.case.read import read_case
from fluxmesh.job.run import run_case
from fluxmesh.report.notebook import balance_html, html_of, outcome_html, surface_html
from fluxmesh.report.notebook_scene import scene_svg
from fluxmesh.report.sketch import scene_of, scene_of_surface
from fluxmesh.report.tables import row
from tests.conftest import CASE, Block
from tests.solids import odd_body, pipe

ROOT = Path(__file__).resolve().parent.parent
ODD = """<script>alert("1")</script><b onload='x()'>&amp; צינור"""
VOID = {"br", "hr", "img", "input", "meta", "link"}


class Page(HTMLParser):
    """Tags, attributes and rows of tables; complains where tags do not close."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.tags: list[str] = []
        self.attributes: set[str] = set()
        self.rows: list[list[str]] = []
        self.text = ""
        self._open: list[str] = []
        self.feed(text)
        self.close()
        assert self._open == []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append(tag)
        self.attributes |= {name for name, _ in attrs}
        self._open.append(tag)
        if tag == "tr":
            self.rows.append([])
        if tag in ("td", "th"):
            self.rows[-1].append("")

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append(tag)
        self.attributes |= {name for name, _ in attrs}

    def handle_endtag(self, tag: str) -> None:
        assert self._open.pop() == tag

    def handle_data(self, data: str) -> None:
        self.text += data
        if self._open and self._open[-1] in ("td", "th"):
            self.rows[-1][-1] += data


def odd_outcome(block: Block):
    name = ODD.replace("\\", "\\\\").replace('"', '\\"')
    block.write(CASE.replace("[groups.feed]", f'[groups."{name}"]').replace('title = "Block"', f'title = "{name}"'))
    return run_case(read_case(block.case))


def whole(done) -> str:
    return outcome_html(
        done.title, done.surface, done.flow, done.balance, done.verdict, done.assumptions, notes=done.notes
    )


def test_names_are_text_and_nothing_runs(block: Block) -> None:
    done = odd_outcome(block)
    for html in (whole(done), surface_html(done.surface), balance_html(done.balance)):
        page = Page(html)
        assert not {"script", "b", "iframe", "img", "foreignobject"} & set(page.tags)
        assert not [name for name in page.attributes if name.startswith("on") or name in ("href", "src")]
        assert any(cells[0] == ODD for cells in page.rows)
    assert f"{ODD}" in Page(whole(done)).text


def test_the_figures_are_those_of_the_balance(block: Block) -> None:
    done = odd_outcome(block)
    page = Page(whole(done))
    rows = {cells[0]: cells[1:] for cells in page.rows}
    size = done.balance.momentum.size()
    assert rows["anchor on hardware"][0] == row(done.balance.reaction.wrench.force, size)
    assert rows["flow on hardware (walls)"][0] == row(done.balance.load.from_walls.force, size)
    assert rows["drain"][1] == "2,000.0"
    assert rows["drain"][2] == row(done.balance.momentum.group_flux[1], size)
    assert rows["weight of fluid"][2] == row(done.balance.momentum.weight, size)
    # in the legend of the drawing momentum is turned
    assert rows["M2"][3] == row(-done.balance.momentum.group_flux[1])
    line = re.search(r"acts along the line through \(0\.5, 0\.5, \S+\) m, direction \(0, 0, 1\.0000\)", page.text)
    assert line


def test_assumptions_and_cautions_stand_beside_every_load(block: Block) -> None:
    done = run_case(read_case(block.case))
    for html in (whole(done), balance_html(done.balance)):
        text = Page(html).text
        for caution in CAUTIONS:
            assert caution in text
        assert "Pressure counts from ambient pressure 100000 Pa" in text
        # before anything else comes
        assert text.index("who on whom") < text.index("Assumed") < text.index("Mass and momentum")
    text = Page(whole(done)).text
    assert all(assumed in text for assumed in done.assumptions)
    assert all(reason in text for reason in done.verdict.reasons)


def test_what_is_not_known_is_said() -> None:
    done = run_case(read_case(ROOT / "meshes" / "header" / "header.toml"))
    page = Page(balance_html(done.balance))
    rows = {cells[0]: cells[1:] for cells in page.rows}
    assert rows["flow on hardware (walls)"][0] == "not known"
    assert rows["shell"][1] == "not given"
    done = run_case(read_case(ROOT / "meshes" / "impeller" / "impeller.toml"))
    rows = {cells[0]: cells[1:] for cells in Page(balance_html(done.balance)).rows}
    assert rows["flow on hardware (balance)"][2] == "not known"


def test_a_surface_is_a_table_of_its_groups() -> None:
    surface = pipe(0.5, 2.0, around=6).surface({"wall": "wall"})
    page = Page(surface_html(surface))
    assert f"closed surface, {surface.face_count} faces, {surface.point_count} points" in page.text
    rows = {cells[0]: cells[1:] for cells in page.rows}
    # a hexagon of radius 1/2: sides of 1/2, length 2
    assert rows["wall"][:3] == ["wall", "6", "6.0000"]
    ends = [cells for name, cells in rows.items() if name not in ("group", "wall")]
    assert {cells[2] for cells in ends} == {f"{1.5 * np.sqrt(3) * 0.25:.5f}"}
    with pytest.raises(TypeError, match="a int has no tables"):
        html_of(3)
    assert html_of(surface) == surface_html(surface)


def test_the_drawing_is_one_valid_element_with_its_words() -> None:
    done = run_case(read_case(ROOT / "meshes" / "header" / "header.toml"))
    svg, arrows = scene_svg(scene_of(done.title, done.surface, done.flow, done.balance))
    root = ElementTree.fromstring(svg)
    tag = "{http://www.w3.org/2000/svg}"
    words = {mark.text for mark in root.iter(f"{tag}text")}
    assert {item.tag for item in arrows if item.drawn} <= words
    assert {"1 feed", "2 left", "3 right", "4 top"} <= words
    assert root.find(f"{tag}title").text == "Rinse header, duty point"
    assert "on hardware: reaction, force (" in root.find(f"{tag}desc").text
    assert len(svg) < 400_000
    # all that is drawn lies in the picture
    numbers = [float(x) for path in root.iter(f"{tag}path") for x in re.findall(r"-?\d+\.?\d*", path.get("d"))]
    assert numbers
    assert min(numbers) >= 0.0
    assert max(numbers[::2]) <= 640.0
    assert max(numbers[1::2]) <= 420.0


def test_near_faces_are_drawn_over_far_ones() -> None:
    surface = odd_body(2).surface()
    scene = scene_of_surface(surface)
    svg, _ = scene_svg(scene)
    paths = [path.get("d") for path in ElementTree.fromstring(svg).iter("{http://www.w3.org/2000/svg}path")]
    assert sum(path.count("M") for path in paths) == len(scene.triangles)
    # the last triangle drawn is turned to the viewer: of a convex part seen from outside it runs one way round
    last = np.array(re.findall(r"-?\d+\.?\d*", paths[-1].split("M")[-1]), dtype=float).reshape(3, 2)
    first = np.array(re.findall(r"-?\d+\.?\d*", paths[0].split("M")[1]), dtype=float).reshape(3, 2)

    def turn(corners: np.ndarray) -> float:
        (ax, ay), (bx, by), (cx, cy) = corners
        return float((bx - ax) * (cy - ay) - (by - ay) * (cx - ax))

    # y runs down in SVG: outward faces turned to the viewer are negative there
    assert turn(last) <= 0.0 <= turn(first)


def test_objects_show_themselves() -> None:
    surface = odd_body(1).surface()
    flow = lay_flow(surface, density=1000.0, velocity=(1.0, 0.0, 0.0), pressure=10.0)
    done = balance_of(surface, flow, title=ODD)
    assert surface._repr_html_() == surface_html(surface)
    assert done.balance._repr_html_() == balance_html(done.balance)
    page = Page(done._repr_html_())
    assert ODD in page.text
    assert "script" not in page.tags
    assert fluxmesh.html_of(surface) == surface_html(surface)


def test_a_surface_alone_loads_no_report() -> None:
    code = (
        "import sys, fluxmesh.surface.surface, fluxmesh.balance.balance\n"
        "print([name for name in sys.modules if name.startswith('fluxmesh.report')])\n"
    )
    ran = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, cwd=ROOT)
    assert ran.stdout.strip() == "[]"
