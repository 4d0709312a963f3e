"""The report page in a real browser: the scene, its switches, the widths, the paper, and everybody's access.

The browser is that of FLUXMESH_BROWSER, and axe-core that of FLUXMESH_AXE (its axe.min.js, from npm). Without a
browser the tests are left out.
"""

from __future__ import annotations

import copy
import json
import os
import re
import shutil
from collections.abc import Iterator
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from pypdf import PdfReader

from fluxmesh.report.page.page import page_html
from tests.page_cases import MESHES, SHIPPED, made
from tests.page_reading import expected
from tests.test_page import HOSTILE, hostile, later

pytestmark = pytest.mark.long

# in a container there is no sandbox to be had, and little shared memory
CONTAINED = ["--no-sandbox", "--disable-dev-shm-usage"]
DRAWING = [*CONTAINED, "--use-angle=swiftshader", "--enable-unsafe-swiftshader", "--ignore-gpu-blocklist"]
AXE = MESHES.parent / ".venv-test" / "axe" / "node_modules" / "axe-core" / "axe.min.js"
SLOW = 90_000  # ms: a software renderer on a busy machine


def browser_path() -> str:
    asked = os.environ.get("FLUXMESH_BROWSER")
    found = asked if asked is None or Path(asked).is_file() else shutil.which(asked)
    if asked is not None and found is None:
        pytest.fail(f"FLUXMESH_BROWSER names {asked}, which is no file")
    if found is None:
        pytest.skip("no browser to try the report page with: set FLUXMESH_BROWSER to a Chromium")
    return found


@cache
def axe_source() -> str:
    path = Path(os.environ.get("FLUXMESH_AXE", AXE))
    if not path.is_file():
        pytest.fail(
            f"axe-core is lacking at {path.name}: run scripts/test, which fetches it with npm, or set FLUXMESH_AXE"
        )
    return path.read_text("utf-8")


@pytest.fixture(scope="module")
def chromium() -> Iterator[Any]:
    from playwright.sync_api import sync_playwright

    with sync_playwright() as play:
        yield play.chromium


@pytest.fixture(scope="module")
def browser(chromium: Any) -> Iterator[Any]:
    opened = chromium.launch(executable_path=browser_path(), args=DRAWING)
    yield opened
    opened.close()


class Opened:
    """A page with all that it said and asked for."""

    def __init__(self, browser: Any, path: Path, text: str, width: int = 1100, height: int = 760) -> None:
        path.write_text(text, "utf-8")
        self.page = browser.new_page(viewport={"width": width, "height": height})
        self.page.set_default_timeout(SLOW)
        self.errors: list[str] = []
        self.asked: list[str] = []
        self.page.on("console", lambda message: self.errors.append(message.text) if message.type == "error" else None)
        self.page.on("pageerror", lambda error: self.errors.append(str(error)))
        self.page.on("request", lambda request: self.asked.append(request.url))
        self.page.goto(path.as_uri())
        self.own = path.as_uri()

    def drawn(self) -> Opened:
        self.page.wait_for_selector("#stage[data-ready=yes]", state="attached")
        return self

    def shot(self) -> np.ndarray:
        """The stage as an array of pixels, once it stands still."""
        before = None
        for _ in range(40):
            self.page.wait_for_timeout(250)
            now = self.page.locator("#stage").screenshot()
            if now == before:
                break
            before = now
        return pixels(now)

    def changed(self, one: np.ndarray) -> float:
        """Share of the stage that looks other than it did."""
        return float((np.abs(self.shot().astype(int) - one).max(axis=-1) > 12).mean())


def pixels(png: bytes) -> np.ndarray:
    import io

    from PIL import Image

    return np.asarray(Image.open(io.BytesIO(png)).convert("RGB")).astype(int)


def still(name: str) -> bytes:
    """Some picture: the shipped one."""
    del name
    return (MESHES / "manifold" / "vectors.png").read_bytes()


@cache
def text_of(name: str, units: str = "si", scene: bool = True) -> str:
    one = made(name)
    pictures = {"vectors": still(name), "pressure": still(name)}
    return page_html(one.data, one.scene if scene else None, pictures=pictures, units=units, extra=one.extra())


# ---- the scene ------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def scene(browser: Any, tmp_path_factory: pytest.TempPathFactory) -> Iterator[Opened]:
    one = made("manifold_coarse")
    traction = np.linspace(0.0, 4.0, len(one.scene.triangles))
    text = page_html(
        one.data, one.scene, pictures={"vectors": still("")}, extra={"traction": lambda triangles: traction[triangles]}
    )
    opened = Opened(browser, tmp_path_factory.mktemp("page") / "scene.html", text).drawn()
    yield opened
    # whatever was done to it, it never complained and never asked
    assert opened.errors == []
    assert [url for url in opened.asked if url != opened.own and not url.startswith(("data:", "blob:"))] == []
    opened.page.close()


def home(scene: Opened) -> np.ndarray:
    scene.page.click("[data-deed=home]")
    return scene.shot()


def test_the_canvas_is_not_blank(scene: Opened) -> None:
    view = pixels(scene.page.locator("#view canvas").first.screenshot())
    assert len(np.unique(view.reshape(-1, 3), axis=0)) > 200
    assert scene.page.locator("#marks text").count() > 12


def test_it_turns_when_dragged(scene: Opened) -> None:
    first = home(scene)
    box = scene.page.locator("#stage").bounding_box()
    x, y = box["x"] + 0.5 * box["width"], box["y"] + 0.5 * box["height"]
    scene.page.mouse.move(x, y)
    scene.page.mouse.down()
    scene.page.mouse.move(x + 140, y + 50, steps=8)
    scene.page.mouse.up()
    assert scene.changed(first) > 0.02
    assert np.abs(home(scene) - first).max(axis=-1).astype(bool).mean() < 0.02


@pytest.mark.parametrize("key", ["ArrowLeft", "ArrowUp", "+"])
def test_it_turns_by_keys(scene: Opened, key: str) -> None:
    first = home(scene)
    scene.page.focus("#stage")
    scene.page.keyboard.press(key)
    assert scene.changed(first) > 0.01


@pytest.mark.parametrize("button", ["right", "down", "farther", "from-x", "from-y", "from-z"])
def test_it_turns_by_buttons(scene: Opened, button: str) -> None:
    first = home(scene)
    scene.page.click(f"[data-deed={button}]")
    assert scene.changed(first) > 0.01


def test_groups_are_switched_by_keyboard(scene: Opened) -> None:
    first = home(scene)
    wall = scene.page.locator("[data-group]").last
    wall.focus()
    scene.page.keyboard.press("Space")
    assert not wall.is_checked()
    assert scene.changed(first) > 0.03
    scene.page.keyboard.press("Space")
    assert scene.changed(first) < 0.002


def test_vectors_are_switched(scene: Opened) -> None:
    first = home(scene)
    tags = scene.page.locator("#marks .tagbox").count()
    scene.page.uncheck("[data-kind=weight]")
    assert scene.changed(first) > 0.001
    assert scene.page.locator("#marks .tagbox").count() < tags
    scene.page.check("[data-kind=weight]")
    assert scene.page.locator("#marks .tagbox").count() == tags


@pytest.mark.parametrize("name", ["pressure", "traction"])
def test_colours_are_switched_and_explained(scene: Opened, name: str) -> None:
    first = home(scene)
    scene.page.check(f"[name=colour][value={name}]")
    assert scene.changed(first) > 0.03
    assert [bar.get_attribute("data-bar") for bar in scene.page.locator(".bar:visible").all()] == [name]
    scene.page.check("[name=colour][value=plain]")
    assert scene.changed(first) < 0.002


def test_one_can_see_through_it_or_not(scene: Opened) -> None:
    first = home(scene)
    scene.page.uncheck("#through")
    assert scene.changed(first) > 0.01
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
    box = scene.page.locator("#stage").bounding_box()
    seen = set()
    for x in np.linspace(0.35, 0.65, 7):
        scene.page.mouse.move(box["x"] + x * box["width"], box["y"] + 0.45 * box["height"])
        scene.page.wait_for_timeout(400)
        if scene.page.locator("#said").is_visible():
            seen.add(scene.page.locator("#said strong").inner_text())
    assert any("housing" in name for name in seen), seen


# ---- every shipped case ------------------------------------------------------------------------


@pytest.mark.parametrize("name", SHIPPED)
def test_shipped_cases_open_without_an_error(browser: Any, tmp_path: Path, name: str) -> None:
    opened = Opened(browser, tmp_path / "page.html", text_of(name), 640, 480).drawn()
    view = pixels(opened.page.locator("#view canvas").first.screenshot())
    assert len(np.unique(view.reshape(-1, 3), axis=0)) > 200
    assert opened.errors == []
    assert [url for url in opened.asked if url != opened.own and not url.startswith(("data:", "blob:"))] == []
    opened.page.close()


@pytest.mark.parametrize("name", SHIPPED)
def test_shipped_cases_fit_any_width(browser: Any, tmp_path: Path, name: str) -> None:
    opened = Opened(browser, tmp_path / "page.html", text_of(name, "us", scene=False))
    for width in (1440, 768, 360):
        opened.page.set_viewport_size({"width": width, "height": 740})
        assert opened.page.evaluate("document.documentElement.scrollWidth") <= width
    opened.page.close()


def test_the_first_screen_of_a_phone_holds_load_verdict_and_picture(browser: Any, tmp_path: Path) -> None:
    opened = Opened(browser, tmp_path / "page.html", text_of("manifold_coarse"), 360, 740).drawn()
    tops = {one: opened.page.locator(one).bounding_box() for one in (".big", ".answer table", ".verdict", "#stage")}
    for one in (".big", ".answer table", ".verdict"):
        assert tops[one]["y"] + tops[one]["height"] < 740, one
    assert tops["#stage"]["y"] + 100 < 740
    opened.page.close()


@pytest.mark.parametrize("units", ["si", "us"])
def test_numbers_in_the_browser_are_those_of_the_result(browser: Any, tmp_path: Path, units: str) -> None:
    data = made("header").data
    opened = Opened(browser, tmp_path / "page.html", text_of("header", units, scene=False))
    found = opened.page.evaluate(
        "[...document.querySelectorAll('td [data-value]')].map((e) => ({value: e.dataset.value, "
        "key: e.dataset.key, from: e.dataset.from, book: e.dataset.book, shown: e.getClientRects().length > 0}))"
    )
    assert len(found) > 150

    class Like:
        def __init__(self, one: dict[str, str]) -> None:
            pairs = {"data-key": one.get("key"), "data-from": one.get("from")}
            self.attributes = {key: value for key, value in pairs.items() if value}

    for one in found:
        assert one["shown"]
        assert float(one["value"]) == pytest.approx(expected(data, Like(one)), rel=1e-12, abs=1e-12)
    opened.page.close()


def test_without_webgl_the_pictures_serve(chromium: Any, tmp_path: Path) -> None:
    plain = chromium.launch(executable_path=browser_path(), args=[*CONTAINED, "--disable-3d-apis"])
    opened = Opened(plain, tmp_path / "page.html", text_of("header"))
    opened.page.wait_for_selector("#stage[data-ready=no]", state="attached")
    assert opened.page.locator(".picture .still img").first.is_visible()
    assert opened.page.locator("#no-scene").is_visible()
    assert not opened.page.locator("#stage").is_visible()
    assert opened.errors == []
    plain.close()


# ---- names from outside ------------------------------------------------------------------------


def test_names_with_markup_are_shown_and_never_run(browser: Any, tmp_path: Path) -> None:
    data, scene = hostile()
    extra = {"case_text": HOSTILE[0], "command": HOSTILE[1]}
    opened = Opened(browser, tmp_path / "page.html", page_html(data, scene, extra=extra)).drawn()
    for number in range(4):
        opened.page.locator(f"[data-tell='{number}']").click()
        assert HOSTILE[number] in opened.page.locator("#told").inner_text()
    assert opened.page.evaluate("window.ran") is None
    assert opened.page.locator("h1").inner_text() == HOSTILE[0]
    assert opened.page.locator("#told img, #told b, #marks img, td img").count() == 0
    assert opened.errors == []
    opened.page.close()


def test_the_policy_forbids_what_is_not_of_the_page(browser: Any, tmp_path: Path) -> None:
    opened = Opened(browser, tmp_path / "page.html", text_of("header", scene=False))
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


@pytest.mark.parametrize("paper", ["A4", "Letter"])
@pytest.mark.parametrize(("name", "units"), [("surge_bend", "si"), ("header", "us"), ("impeller", "si")])
def test_paper_holds_whole_tables(browser: Any, tmp_path: Path, name: str, units: str, paper: str) -> None:
    opened = Opened(browser, tmp_path / "page.html", text_of(name, units, scene=False))
    opened.page.pdf(path=tmp_path / "page.pdf", format=paper, print_background=True)
    tables = opened.page.evaluate(
        "[...document.querySelectorAll('table')].map((t) => ({whole: t.classList.contains('whole'), "
        "caption: t.caption.firstElementChild ? t.caption.firstElementChild.textContent : t.caption.textContent, "
        "heads: t.tHead ? [...t.tHead.rows[0].cells].map((c) => c.textContent) : [],"
        "rows: [...t.rows].filter((r) => r.parentElement.tagName === 'TBODY')"
        ".map((r) => [...r.cells].map((c) => (c.querySelector('.num') || c).textContent))}))"
    )
    pages = [squeezed(page.extract_text()) for page in PdfReader(tmp_path / "page.pdf").pages]
    assert 4 < len(pages) < 16
    assert all(len(page) > 20 for page in pages[:-1])
    for table in tables:
        rows = [squeezed("".join(cell for cell in row)) for row in table["rows"]]
        starts = [k for k, page in enumerate(pages) if squeezed(table["caption"]) in page]
        assert starts, table["caption"]
        if table["whole"]:
            assert any(all(present(row, pages[k]) for row in table["rows"]) for k in starts), table["caption"]
        assert rows
    opened.page.close()


def squeezed(text: str) -> str:
    return re.sub(r"[\s\u2007\u2008\u202f\u00a0]+", "", text)


def present(row: list[str], page: str) -> bool:
    """Whether the figures of a row stand on a page."""
    return all(squeezed(cell) in page for cell in row if re.search(r"\d", cell) and "10" not in cell)


def test_tables_fit_the_paper_so_that_they_can_be_kept_whole(browser: Any, tmp_path: Path) -> None:
    opened = Opened(browser, tmp_path / "page.html", text_of("surge_bend", scene=False))
    # A4 less its margins, at 96 dots an inch
    width, height = (210 - 24) / 25.4 * 96, (297 - 27) / 25.4 * 96
    opened.page.set_viewport_size({"width": int(width), "height": int(height)})
    opened.page.emulate_media(media="print")
    sizes = opened.page.evaluate(
        "[...document.querySelectorAll('table.whole, tbody.block')].map((t) => [t.offsetWidth, t.offsetHeight])"
    )
    assert len(sizes) > 20
    assert max(w for w, _ in sizes) <= width + 1
    assert max(h for _, h in sizes) <= height
    opened.page.close()


def test_the_first_page_holds_load_verdict_and_picture(browser: Any, tmp_path: Path) -> None:
    opened = Opened(browser, tmp_path / "page.html", text_of("header")).drawn()
    opened.page.pdf(path=tmp_path / "page.pdf", format="A4", print_background=True)
    first = PdfReader(tmp_path / "page.pdf").pages[0]
    text = squeezed(first.extract_text())
    assert "894.84" in text
    assert "Cannotbejudgedinfull" in text
    # the still picture, in place of the scene
    assert any(min(image.image.size) >= 500 for image in first.images)
    opened.page.close()


# ---- for everybody ---------------------------------------------------------------------------------


@pytest.mark.parametrize("which", ["scene", "later", "series"])
@pytest.mark.parametrize("width", [360, 1440])
def test_nothing_serious_stands_in_anybodys_way(browser: Any, tmp_path: Path, which: str, width: int) -> None:
    text = {
        "scene": lambda: text_of("header"),
        "later": lambda: page_html(copy.deepcopy(later()), None, pictures={"vectors": still("")}),
        "series": lambda: text_of("surge_bend", "us", scene=False),
    }[which]()
    opened = Opened(browser, tmp_path / "page.html", text, width)
    if which == "scene":
        opened.drawn()
    opened.page.evaluate(axe_source())
    found = opened.page.evaluate("axe.run(document, {resultTypes: ['violations']})")
    serious = [
        (one["id"], one["impact"], [node["html"][:160] for node in one["nodes"][:3]])
        for one in found["violations"]
        if one["impact"] in ("serious", "critical")
    ]
    assert serious == [], json.dumps(serious, indent=1)
    opened.page.close()
