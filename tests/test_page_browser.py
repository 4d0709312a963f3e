"""The report page in a real browser: the scene, its switches, the widths, the paper, and everybody's access.

The browser is that of FLUXMESH_BROWSER or the Chromium of the machine, axe-core that which scripts/test fetches. A
page takes seconds to draw without a graphics card: what can be asked of one page is asked of one.
"""

from __future__ import annotations

import copy
import re
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from pypdf import PdfReader

from fluxmesh.report.page.page import page_html
from tests.page_browser import FLAGS, Opened, browser_path, differs, still, text_of
from tests.page_cases import SHIPPED, made
from tests.page_reading import expected
from tests.test_page import HOSTILE, hostile, later

pytestmark = pytest.mark.long

# of each: a result of every kind on paper, in both sizes and with both sets of units
ON_PAPER = {"surge_bend": "si", "header": "us", "impeller": "si"}


@pytest.fixture(scope="module")
def browser() -> Iterator[Any]:
    path = browser_path()
    from playwright.sync_api import sync_playwright

    with sync_playwright() as play:
        opened = play.chromium.launch(executable_path=path, args=FLAGS)
        yield opened
        opened.close()


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("pages")


# ---- the scene ------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def scene(browser: Any, folder: Path) -> Iterator[Opened]:
    one = made("manifold_coarse")
    traction = np.linspace(0.0, 4.0, len(one.scene.triangles))
    text = page_html(
        one.data, one.scene, pictures={"vectors": still()}, extra={"traction": lambda triangles: traction[triangles]}
    )
    opened = Opened(browser, folder / "scene.html", text, 700, 620).drawn()
    yield opened
    opened.close()


def home(scene: Opened) -> np.ndarray:
    scene.page.click("[data-deed=home]")
    return scene.shot()


def test_it_turns_by_keys_and_buttons_and_comes_back(scene: Opened) -> None:
    first = before = home(scene)
    for key in ("ArrowLeft", "ArrowUp", "+"):
        scene.page.focus("#stage")
        scene.page.keyboard.press(key)
        now = scene.shot()
        assert differs(now, before) > 0.01, key
        before = now
    assert differs(home(scene), first) < 0.02
    before = first
    for button in ("right", "down", "farther", "from-x", "from-y", "from-z"):
        scene.page.click(f"[data-deed={button}]")
        now = scene.shot()
        assert differs(now, before) > 0.01, button
        before = now
    scene.drag(140, 50)
    assert differs(scene.shot(), before) > 0.02
    assert differs(home(scene), first) < 0.02


def test_groups_and_vectors_are_switched(scene: Opened) -> None:
    first = home(scene)
    wall = scene.page.locator("[data-group]").last
    wall.focus()
    scene.page.keyboard.press("Space")
    assert not wall.is_checked()
    assert differs(scene.shot(), first) > 0.03
    scene.page.keyboard.press("Space")
    assert differs(scene.shot(), first) < 0.002
    tags = scene.page.locator("#marks .tagbox").count()
    scene.page.uncheck("[data-kind=weight]")
    assert differs(scene.shot(), first) > 0.001
    assert scene.page.locator("#marks .tagbox").count() < tags
    scene.page.check("[data-kind=weight]")
    assert differs(scene.shot(), first) < 0.002
    assert scene.page.locator("#marks .tagbox").count() == tags


def test_colours_are_switched_and_explained(scene: Opened) -> None:
    first = before = home(scene)
    for name in ("pressure", "traction"):
        scene.page.check(f"[name=colour][value={name}]")
        now = scene.shot()
        assert differs(now, before) > 0.03, name
        assert [bar.get_attribute("data-bar") for bar in scene.page.locator(".bar:visible").all()] == [name]
        before = now
    scene.page.check("[name=colour][value=plain]")
    assert differs(scene.shot(), first) < 0.002
    scene.page.uncheck("#through")
    assert differs(scene.shot(), first) > 0.01
    scene.page.check("#through")


def test_a_group_is_named_with_its_entries(scene: Opened) -> None:
    data = made("manifold_coarse").data
    number = list(data["groups"]).index("feed")
    scene.page.locator(f"[data-tell='{number}']").press("Enter")
    told = scene.page.locator("#told").inner_text()
    assert "feed" in told
    assert "inlet" in told
    pressure = data["groups"]["feed"]["pressure_force"][0]
    assert f"{pressure:.5f}"[:6] in told.replace("\u2212", "-")


def test_pointing_names_what_is_there(scene: Opened) -> None:
    home(scene)
    said = scene.page.locator("#said")
    box = scene.page.locator("#stage").bounding_box()
    seen = set()
    for x in (*np.linspace(0.4, 0.6, 5), *np.linspace(0.35, 0.65, 7)):
        scene.page.mouse.move(box["x"] + x * box["width"], box["y"] + 0.45 * box["height"])
        scene.page.wait_for_timeout(150)
        if said.is_visible():
            seen.add(said.locator("strong").inner_text())
        if any("housing" in name for name in seen):
            return
    raise AssertionError(seen)


# ---- every shipped case ------------------------------------------------------------------------


@pytest.mark.parametrize("name", SHIPPED)
def test_a_shipped_case(browser: Any, folder: Path, name: str) -> None:
    """One page, in both sets of units, looked at from all sides."""
    opened = Opened(browser, folder / f"{name}.html", text_of(name, "us"), 440, 420).drawn()
    assert len(np.unique(opened.canvas().reshape(-1, 3), axis=0)) > 200
    assert opened.page.locator("#marks text").count() > 5
    before = opened.shot()
    opened.drag(90, 40)
    turned = opened.shot()
    assert differs(turned, before) > 0.02
    opened.page.locator("[data-group]").first.click()
    assert differs(opened.shot(), turned) > 0.0005
    numbers_are_those_of(opened, name)
    # on paper and at other widths there is no need to draw
    opened.page.evaluate("document.getElementById('stage').remove()")
    assert [opened.sideways(width) for width in (1440, 1000, 768, 360)] == [0, 0, 0, 0]
    assert opened.serious(contrast=False) == ""
    opened.close()


def numbers_are_those_of(opened: Opened, name: str) -> None:
    one = made(name)
    found = opened.page.evaluate(
        "[...document.querySelectorAll('td [data-value], .big [data-value]')].map((e) => ({value: e.dataset.value, "
        "key: e.dataset.key, from: e.dataset.from, book: e.dataset.book, shown: e.getClientRects().length > 0}))"
    )
    assert len(found) > 100

    class Like:
        def __init__(self, found: dict[str, str]) -> None:
            pairs = {"data-key": found.get("key"), "data-from": found.get("from")}
            self.attributes = {key: value for key, value in pairs.items() if value}

    for number in found:
        assert number["shown"], number
        book = one.series if number.get("book") == "series" else one.data
        # a sum of forces may cancel to round-off
        right = pytest.approx(expected(book, Like(number)), rel=1e-12, abs=1e-11)
        assert float(number["value"]) == right, number


@pytest.mark.parametrize("units", ["si", "us"])
def test_the_first_screen_of_a_phone_holds_load_verdict_and_picture(browser: Any, folder: Path, units: str) -> None:
    opened = Opened(browser, folder / "phone.html", text_of("manifold_coarse", units), 360, 740).drawn()
    tops = {one: opened.page.locator(one).bounding_box() for one in (".big", ".answer table", ".verdict", "#stage")}
    for one in (".big", ".answer table", ".verdict"):
        assert tops[one]["y"] + tops[one]["height"] < 740, one
    assert tops["#stage"]["y"] + 80 < 740
    # no head of a row is broken within a word
    heads = opened.page.evaluate(
        "[...document.querySelectorAll('.answer tbody th > span:first-child')].map((e) => [e.textContent, "
        "e.getClientRects().length])"
    )
    assert heads == [["force", 1], ["moment", 1]]
    opened.close()


def test_without_webgl_the_pictures_serve(browser: Any, folder: Path) -> None:
    path = folder / "plain.html"
    opened = Opened(browser, path, "<title>nothing yet</title>")
    opened.page.add_init_script("HTMLCanvasElement.prototype.getContext = () => null")
    path.write_text(text_of("header"), "utf-8")
    opened.page.goto(opened.own)
    opened.page.wait_for_selector("#stage[data-ready=no]", state="attached")
    assert opened.page.locator(".picture .still img").first.is_visible()
    assert opened.page.locator("#no-scene").is_visible()
    assert not opened.page.locator("#stage").is_visible()
    opened.close()


# ---- names from outside ------------------------------------------------------------------------


def test_names_with_markup_are_shown_and_never_run(browser: Any, folder: Path) -> None:
    data, scene = hostile()
    extra = {"case_text": HOSTILE[0], "command": HOSTILE[1]}
    opened = Opened(browser, folder / "hostile.html", page_html(data, scene, extra=extra), 640, 480).drawn()
    for number in range(4):
        opened.page.locator(f"[data-tell='{number}']").click()
        assert HOSTILE[number] in opened.page.locator("#told").inner_text()
    assert opened.page.evaluate("window.ran") is None
    assert opened.page.locator("h1").inner_text() == HOSTILE[0]
    assert opened.page.locator("#told img, #told b, #marks img, td img").count() == 0
    opened.close()


def test_the_policy_forbids_what_is_not_of_the_page(browser: Any, folder: Path) -> None:
    opened = Opened(browser, folder / "policy.html", text_of("header", scene=False))
    opened.page.evaluate(
        "() => { const s = document.createElement('script'); s.textContent = 'window.ran = 1'; document.body.append(s);"
        "const i = new Image(); i.src = 'https://example.org/x.png'; document.body.append(i); }"
    )
    opened.page.wait_for_timeout(300)
    assert opened.page.evaluate("window.ran") is None
    assert len(opened.errors) == 2
    assert all("Content Security Policy" in error for error in opened.errors)
    opened.page.close()


# ---- on paper ------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", ON_PAPER)
def test_paper_holds_whole_tables(browser: Any, folder: Path, name: str) -> None:
    opened = Opened(browser, folder / "paper.html", text_of(name, ON_PAPER[name], scene=False))
    tables = opened.page.evaluate(
        "[...document.querySelectorAll('table')].map((t) => ({whole: t.classList.contains('whole'), "
        "caption: t.caption.firstElementChild ? t.caption.firstElementChild.textContent : t.caption.textContent, "
        "rows: [...t.rows].filter((r) => r.parentElement.tagName === 'TBODY')"
        ".map((r) => [...r.cells].map((c) => (c.querySelector('.num') || c).textContent))}))"
    )
    assert len(tables) > 10
    for paper in ("A4", "Letter"):
        opened.page.pdf(path=folder / "page.pdf", format=paper, print_background=True)
        pages = [squeezed(page.extract_text()) for page in PdfReader(folder / "page.pdf").pages]
        assert 4 < len(pages) < 17
        assert all(len(page) > 20 for page in pages[:-1])
        for table in tables:
            starts = [k for k, page in enumerate(pages) if squeezed(table["caption"]) in page]
            assert starts, table["caption"]
            assert table["rows"], table["caption"]
            if table["whole"]:
                assert any(all(present(row, pages[k]) for row in table["rows"]) for k in starts), table["caption"]
    fits_the_paper(opened)
    opened.close()


def squeezed(text: str) -> str:
    return re.sub(r"[\s\u2007\u2008\u202f\u00a0]+", "", text)


def present(row: list[str], page: str) -> bool:
    """Whether the figures of a row stand on a page."""
    return all(squeezed(cell) in page for cell in row if re.search(r"\d", cell) and "10" not in cell)


def fits_the_paper(opened: Opened) -> None:
    """What is to be kept whole must be no larger than a page: A4 less its margins, at 96 dots an inch."""
    width, height = (210 - 24) / 25.4 * 96, (297 - 27) / 25.4 * 96
    opened.page.set_viewport_size({"width": int(width), "height": int(height)})
    opened.page.emulate_media(media="print")
    sizes = opened.page.evaluate(
        "[...document.querySelectorAll('table.whole, tbody.block')].map((t) => [t.offsetWidth, t.offsetHeight])"
    )
    assert len(sizes) > 20
    assert max(w for w, _ in sizes) <= width + 1
    assert max(h for _, h in sizes) <= height


def test_the_first_page_holds_load_verdict_and_picture(browser: Any, folder: Path) -> None:
    opened = Opened(browser, folder / "first.html", text_of("header"), 640, 480).drawn()
    opened.page.pdf(path=folder / "first.pdf", format="A4", print_background=True, page_ranges="1")
    first = PdfReader(folder / "first.pdf").pages[0]
    text = squeezed(first.extract_text())
    assert "894.84±" in text
    assert "Cannotbejudgedinfull" in text
    # the still picture, in place of the scene
    assert any(min(image.image.size) >= 500 for image in first.images)
    opened.close()


# ---- for everybody ---------------------------------------------------------------------------------


@pytest.mark.parametrize("which", ["scene", "later", "series"])
def test_nothing_serious_stands_in_anybodys_way(browser: Any, folder: Path, which: str) -> None:
    text = {
        "scene": lambda: text_of("header"),
        "later": lambda: page_html(copy.deepcopy(later()), None, pictures={"vectors": still()}),
        "series": lambda: text_of("surge_bend", "us", scene=False),
    }[which]()
    opened = Opened(browser, folder / "access.html", text, 1440)
    if which == "scene":
        opened.drawn()
    for width in (1440, 360):
        opened.page.set_viewport_size({"width": width, "height": 740})
        assert opened.serious() == ""
    opened.close()
