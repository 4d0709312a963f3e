"""Words and numbers of a picture: made safe to draw, measured, wrapped, in engineering units."""

from __future__ import annotations

import math
import re
import unicodedata
import warnings
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from typing import Any

__all__ = [
    "Ruler",
    "boxes_for_missing_letters",
    "clean_text",
    "engineering",
    "engineering_vector",
    "nice_step",
    "true_signs",
]

_PREFIXES = ((1e9, "G"), (1e6, "M"), (1e3, "k"), (1.0, ""), (1e-3, "m"), (1e-6, "µ"))
# Outside this range no prefix in common use helps: powers of ten are written.
_LEAST, _MOST = 1e-6, 1e12
_LEFT_TO_RIGHT = "\u200e"
_ELLIPSIS = "…"
_RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


def clean_text(text: str) -> str:
    """Return text in one line that can be drawn whatever was in it.

    Line breaks and tabs become spaces; other control characters, and marks
    that turn the reading direction of what follows, are left out; half
    surrogate pairs become the replacement character.
    """
    kept = []
    for char in text:
        category = unicodedata.category(char)
        if category in ("Zl", "Zp") or char in "\t\n\r\v\f":
            kept.append(" ")
        elif category == "Cs":
            kept.append("\ufffd")
        elif category not in ("Cc", "Cf"):
            kept.append(char)
    line = "".join(kept)
    # the line as a whole runs from left to right, whatever its first letter
    mixed = any(unicodedata.bidirectional(char) in ("R", "AL") for char in line)
    return _LEFT_TO_RIGHT + line if mixed else line


def true_signs(text: str) -> str:
    """Return text whose numbers have the minus sign and the product of units that figures in print have.

    Parameters
    ----------
    text : str
        Sentences with components in parentheses, as the terminal shows them.
    """
    text = re.sub(r"(?<=[(, ])-(?=\d)", "\u2212", text).replace(" N m", " N·m")
    return re.sub(r"(?<=\d)e([+-])0*(\d+)\b", _power_of_ten, text)


def _power_of_ten(found: re.Match[str]) -> str:
    return f"×10{(found[1] + found[2]).lstrip('+').translate(_RAISED)}"


def _scale(value: float) -> tuple[float, str]:
    for factor, prefix in _PREFIXES:
        # the largest prefix that leaves at least one digit before the point, after rounding to four
        if value >= factor * 0.99995:
            return factor, prefix
    return _PREFIXES[-1]


def _decimals(value: float, digits: int) -> int:
    return max(0, digits - 1 - math.floor(math.log10(value) + 1e-4)) if value > 0.0 else 0


def _number(value: float, decimals: int) -> str:
    text = f"{value:.{decimals}f}"
    # no minus before a zero; a true minus sign elsewhere
    return text.lstrip("-") if float(text) == 0.0 else text.replace("-", "\u2212")


def _power_form(value: float) -> str:
    return f"{value:.3e}".replace("-", "\u2212")


def engineering(value: float, unit: str, digits: int = 4) -> str:
    """Write a quantity with a prefix that keeps the number short.

    Parameters
    ----------
    value : float
        In the bare unit.
    unit : str
        Symbol that takes a prefix: "N", "Pa".
    digits : int
        Significant digits.

    Returns
    -------
    str
        Such as "1.204 kN".
    """
    if value == 0.0:
        return f"0 {unit}"
    if not _LEAST <= abs(value) < _MOST:
        return f"{_power_form(value)} {unit}"
    factor, prefix = _scale(abs(value))
    return f"{_number(value / factor, _decimals(abs(value) / factor, digits))} {prefix}{unit}"


def engineering_vector(vector: Sequence[float], unit: str, digits: int = 4) -> tuple[str, str]:
    """Write the length of a vector and its components in one unit, to the same decimals.

    Returns
    -------
    length, components : str
        Such as "1.204 kN" and "(−0.310, 0.020, −1.163) kN".
    """
    length = math.hypot(*vector)
    if length == 0.0:
        return f"0 {unit}", f"(0, 0, 0) {unit}"
    if not _LEAST <= length < _MOST:
        return f"{_power_form(length)} {unit}", f"({', '.join(map(_power_form, vector))}) {unit}"
    factor, prefix = _scale(length)
    decimals = _decimals(length / factor, digits)
    parts = ", ".join(_number(component / factor, decimals) for component in vector)
    return f"{_number(length / factor, decimals)} {prefix}{unit}", f"({parts}) {prefix}{unit}"


def nice_step(value: float) -> float:
    """Return the largest of 1, 2, 2.5, 5 times a power of ten that is not above a positive value."""
    power = 10.0 ** math.floor(math.log10(value))
    return max(step * power for step in (0.5, 1.0, 2.0, 2.5, 5.0, 10.0) if step * power <= value * (1.0 + 1e-9))


@contextmanager
def boxes_for_missing_letters() -> Iterator[None]:
    """Let a letter that no installed font has become an empty box, without a warning."""
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", message=".*[Gg]lyph", category=UserWarning)
        yield


def _without_middle(text: str, kept: int) -> str:
    """Return the ends of a text, so many letters in all, about an ellipsis."""
    last = kept // 2
    return text[: kept - last].rstrip() + _ELLIPSIS + (text[-last:].lstrip() if last else "")


class Ruler:
    """Measures text as it will be drawn, in pixels."""

    def __init__(self) -> None:
        """Load the font machinery."""
        from matplotlib.backends.backend_agg import RendererAgg

        # At 72 dots an inch a point is a pixel.
        self._renderer: Any = RendererAgg(8, 8, 72)
        self._widths: dict[tuple[str, float, bool], float] = {}

    def width(self, text: str, size: float, bold: bool = False) -> float:
        """Return the width of one line in pixels."""
        from matplotlib.font_manager import FontProperties

        key = (text, size, bold)
        if key not in self._widths:
            font = FontProperties(family="DejaVu Sans", size=size, weight="bold" if bold else "normal")
            with boxes_for_missing_letters():
                extent = self._renderer.get_text_width_height_descent(text, font, ismath=False)
            self._widths[key] = float(extent[0])
        return self._widths[key]

    def cut(self, text: str, size: float, room: float, bold: bool = False) -> str:
        """Return the text cleaned, and shortened with an ellipsis when it is wider than the room."""
        text = clean_text(text)
        if self.width(text, size, bold) <= room:
            return text
        low, high = 0, len(text)
        while low < high:
            middle = (low + high + 1) // 2
            if self.width(text[:middle].rstrip() + _ELLIPSIS, size, bold) <= room:
                low = middle
            else:
                high = middle - 1
        return text[:low].rstrip() + _ELLIPSIS

    def shorten(self, name: str, size: float, room: float, bold: bool = False) -> str:
        """Return a name cleaned, and with an ellipsis inside when it is wider than the room: its ends tell it apart."""
        text = clean_text(name)
        if self.width(text, size, bold) <= room:
            return text
        low, high = 0, len(text)
        while low < high:
            kept = (low + high + 1) // 2
            if self.width(_without_middle(text, kept), size, bold) <= room:
                low = kept
            else:
                high = kept - 1
        return _without_middle(text, low)

    def wrap(self, text: str, size: float, room: float) -> list[str]:
        """Break a sentence into lines that fit; a word wider than the room is cut."""
        lines: list[str] = []
        line = ""
        for word in clean_text(text).split():
            longer = f"{line} {word}" if line else word
            if self.width(longer, size) <= room:
                line = longer
                continue
            if line:
                lines.append(line)
            line = self.cut(word, size, room)
        return [*lines, line] if line else lines
