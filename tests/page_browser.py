"""A report page opened in a real browser: which browser, what it said and asked for, how it looks."""

from __future__ import annotations

import io
import json
import os
import shutil
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from fluxmesh.report.page.page import page_html
from tests.page_cases import MESHES, made

# in a container there is no sandbox to be had, and little shared memory
FLAGS = [
    "--no-sandbox",
    "--disable-dev-shm-usage",
    "--use-angle=swiftshader",
    "--enable-unsafe-swiftshader",
    "--ignore-gpu-blocklist",
]
NAMES = ("chromium", "chromium-browser", "google-chrome", "chrome")
AXE = MESHES.parent / ".venv-test" / "axe" / "node_modules" / "axe-core" / "axe.min.js"
SLOW = 90_000  # ms: a software renderer on a busy machine


def browser_path() -> str:
    """The browser of FLUXMESH_BROWSER, else the Chromium of this machine; without either the tests are left out."""
    asked = os.environ.get("FLUXMESH_BROWSER")
    if asked:
        found = asked if Path(asked).is_file() else shutil.which(asked)
        if found is None:
            pytest.fail(f"FLUXMESH_BROWSER names {asked}, which is no file: name a Chromium, or take it away")
        return found
    found = next(filter(None, map(shutil.which, NAMES)), None)
    if found is None:
        pytest.skip("no Chromium on the PATH to try the report page with: install one, or name it in FLUXMESH_BROWSER")
    return found


@cache
def axe_source() -> str:
    """The script of axe-core, which looks for what stands in somebody's way."""
    path = Path(os.environ.get("FLUXMESH_AXE") or AXE)
    if not path.is_file():
        pytest.fail(
            f"axe-core is lacking ({path.name}): run scripts/test, which fetches it, or `npm install --prefix "
            ".venv-test/axe axe-core`, or name its axe.min.js in FLUXMESH_AXE"
        )
    return path.read_text("utf-8")


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
        self.own = path.as_uri()
        self.page.goto(self.own)

    def drawn(self) -> Opened:
        self.page.wait_for_selector("#stage[data-ready=yes]", state="attached")
        return self

    def close(self) -> None:
        """Close it: whatever was done to it, it never complained and never asked."""
        self.page.close()
        assert self.errors == []
        assert [url for url in self.asked if url != self.own and not url.startswith(("data:", "blob:"))] == []

    def canvas(self) -> np.ndarray:
        return pixels(self.page.locator("#view canvas").first.screenshot())

    def shot(self) -> np.ndarray:
        """The stage as an array of pixels, once all that was asked for is drawn, and shown in a frame."""
        self.page.evaluate(
            "new Promise((done) => { const stage = document.getElementById('stage'); let left = 4;"
            "const look = () => { left = stage.hasAttribute('aria-busy') ? 4 : left - 1;"
            "if (left) requestAnimationFrame(look); else done(); }; requestAnimationFrame(look); })"
        )
        # what the pointer happens to lie over was not asked for
        return pixels(self.page.locator("#stage").screenshot(style="#said { visibility: hidden; }"))

    def drag(self, across: float, along: float) -> None:
        box = self.page.locator("#stage").bounding_box()
        x, y = box["x"] + 0.5 * box["width"], box["y"] + 0.5 * box["height"]
        self.page.mouse.move(x, y)
        self.page.mouse.down()
        self.page.mouse.move(x + across, y + along, steps=2)
        self.page.mouse.up()

    def sideways(self, width: int) -> int:
        """How many pixels the page is wider than the window, or the reaction wider than its place."""
        self.page.set_viewport_size({"width": width, "height": 740})
        return self.page.evaluate(
            "Math.max(...[document.documentElement, ...document.querySelectorAll('.answer .scroll')]"
            ".map((one) => one.scrollWidth - one.clientWidth))"
        )

    def serious(self, *, contrast: bool = True) -> str:
        """What axe-core calls serious or critical, as JSON; empty where there is nothing.

        To look at the contrast of every word takes most of the time; the colours are those of one style sheet.
        """
        if not self.page.evaluate("typeof window.axe === 'object'"):
            self.page.evaluate(axe_source())
        options = {"resultTypes": ["violations"], "rules": {"color-contrast": {"enabled": contrast}}}
        found = self.page.evaluate("(options) => axe.run(document, options)", options)
        assert len(found["passes"]) > 10
        serious = [
            (one["id"], one["impact"], [node["html"][:160] for node in one["nodes"][:3]])
            for one in found["violations"]
            if one["impact"] in ("serious", "critical")
        ]
        return json.dumps(serious, indent=1) if serious else ""


def pixels(png: bytes) -> np.ndarray:
    from PIL import Image

    return np.asarray(Image.open(io.BytesIO(png)).convert("RGB")).astype(int)


def differs(one: np.ndarray, other: np.ndarray) -> float:
    """Share of a picture that looks other than before."""
    return float((np.abs(one - other).max(axis=-1) > 12).mean())


def still() -> bytes:
    """Some picture: the shipped one."""
    return (MESHES / "manifold" / "vectors.png").read_bytes()


@cache
def text_of(name: str, units: str = "si", scene: bool = True) -> str:
    one = made(name)
    pictures = {"vectors": still(), "pressure": still()}
    return page_html(one.data, one.scene if scene else None, pictures=pictures, units=units, extra=one.extra())
