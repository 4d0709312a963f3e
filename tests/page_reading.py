"""Reading a report page without a browser: its elements, its numbers, and what they must equal."""

from __future__ import annotations

import json
import math
import re
from dataclasses import dataclass, field
from html.parser import HTMLParser
from typing import Any

VOID = {"meta", "link", "br", "img", "input", "col", "hr"}
# Values of one unit in SI: SI Brochure (9th edition), tables 4 and 7; NIST SP 811 (2008), appendix B
FACTORS = {
    "": 1.0, "%": 0.01, "N": 1.0, "kN": 1e3, "MN": 1e6, "N·m": 1.0, "kN·m": 1e3, "N·s": 1.0, "kN·s": 1e3,
    "kg/s": 1.0, "g/s": 1e-3, "m³/s": 1.0, "L/s": 1e-3, "mL/s": 1e-6, "Pa": 1.0, "kPa": 1e3, "MPa": 1e6,
    "m²": 1.0, "cm²": 1e-4, "mm²": 1e-6, "m³": 1.0, "L": 1e-3, "mL": 1e-6, "m": 1.0, "mm": 1e-3,
    "kg": 1.0, "g": 1e-3, "t": 1e3, "W": 1.0, "kW": 1e3, "MW": 1e6, "m/s": 1.0, "m/s²": 1.0, "kg/m³": 1.0,
    "K": 1.0, "rad/s": 1.0, "rev/min": math.pi / 30, "s": 1.0,
    "lbf": 4.4482216152605, "lbf·ft": 4.4482216152605 * 0.3048, "psi": 4.4482216152605 / 0.0254**2,
    "lb/s": 0.45359237, "gal/min": 231 * 0.0254**3 / 60, "in": 0.0254, "ft": 0.3048, "in²": 0.0254**2,
    "ft²": 0.3048**2, "in³": 0.0254**3, "ft³": 0.3048**3, "lb": 0.45359237, "ft/s": 0.3048, "ft/s²": 0.3048,
    "lb/ft³": 0.45359237 / 0.3048**3, "hp": 550 * 4.4482216152605 * 0.3048, "ft·lbf/s": 4.4482216152605 * 0.3048,
    "lbf·s": 4.4482216152605,
}  # fmt: skip


@dataclass
class Element:
    name: str
    attributes: dict[str, str]
    parent: Element | None = None
    children: list[Element | str] = field(default_factory=list)

    def text(self) -> str:
        return "".join(child if isinstance(child, str) else child.text() for child in self.children)

    def all(self, name: str = "") -> list[Element]:
        found = []
        for child in self.children:
            if isinstance(child, Element):
                if not name or child.name == name:
                    found.append(child)
                found += child.all(name)
        return found

    def has(self, name: str, word: str) -> bool:
        return word in self.attributes.get(name, "").split()


class _Reader(HTMLParser):
    def __init__(self) -> None:
        super().__init__(convert_charrefs=True)
        self.root = Element("", {})
        self.here = self.root
        self.problems: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        made = Element(tag, {key: value or "" for key, value in attrs}, self.here)
        self.here.children.append(made)
        if tag not in VOID:
            self.here = made

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.here.children.append(Element(tag, {key: value or "" for key, value in attrs}, self.here))

    def handle_endtag(self, tag: str) -> None:
        if self.here.name != tag:
            self.problems.append(f"</{tag}> closes <{self.here.name}>")
        if self.here.parent is not None:
            self.here = self.here.parent

    def handle_data(self, data: str) -> None:
        self.here.children.append(data)


def read_page(text: str) -> Element:
    """The elements of a page; fails where an end tag does not fit."""
    reader = _Reader()
    reader.feed(text)
    reader.close()
    assert reader.problems == []
    assert reader.here is reader.root
    return reader.root


def numbers(root: Element) -> list[Element]:
    return [one for one in root.all() if "data-value" in one.attributes]


def look_up(data: Any, pointer: str) -> Any:
    """RFC 6901."""
    here = data
    for part in pointer.split("/")[1:]:
        part = part.replace("~1", "/").replace("~0", "~")
        here = here[int(part)] if isinstance(here, list | tuple) else here[part]
    return here


def expected(data: Any, element: Element) -> float:
    """What the number of an element must be, from the result alone."""
    if "data-key" in element.attributes:
        return float(look_up(data, element.attributes["data-key"]))
    origin = json.loads(element.attributes["data-from"])
    if "norm" in origin:
        return math.hypot(*look_up(data, origin["norm"]))
    return math.fsum(factor * math.prod(float(look_up(data, key)) for key in keys) for factor, *keys in origin["terms"])


def printed(text: str) -> float:
    """The number that a text shows, "−60.195 × 10−6" among others."""
    plain = text.replace("\u2212", "-").replace("\u202f", "").replace(",", "").replace("±", "").replace("%", "").strip()
    front, times, power = plain.partition("×10")
    return float(front) * 10.0 ** int(power) if times else float(front)


def size_of_terms(data: Any, element: Element) -> float:
    """What the round-off of a sum is to be compared with."""
    if "data-from" not in element.attributes or "terms" not in element.attributes["data-from"]:
        return 0.0
    terms = json.loads(element.attributes["data-from"])["terms"]
    return sum(abs(factor * math.prod(float(look_up(data, key)) for key in keys)) for factor, *keys in terms)


def is_plain_zero(text: str) -> bool:
    return re.fullmatch(r"[\u2212-]?0", text.strip()) is not None
