"""A number as a page prints it: five significant digits, powers of ten in steps of three."""

from __future__ import annotations

from dataclasses import dataclass
from math import floor, isfinite, log10

__all__ = ["Digits", "as_given", "digits_of", "percent_of", "plus_minus"]

_SIGNIFICANT = 5
_PLAIN_LEAST, _PLAIN_MOST = 1e-3, 1e7
# What lies below this share of what it stands among is round-off.
_ROUND_OFF = 1e-12
_MINUS = "\u2212"


@dataclass(frozen=True)
class Digits:
    """A printed number.

    Attributes
    ----------
    text : str
        With a true minus sign, commas between thousands.
    power : int
        Power of ten that multiplies it; 0 for none.
    decimals : int
        Digits after the point, to line up a column.
    """

    text: str
    power: int = 0
    decimals: int = 0

    @property
    def exponent(self) -> str:
        """The power of ten as text, with a true minus sign."""
        return str(self.power).replace("-", _MINUS)

    def __str__(self) -> str:
        """Return the number in one line of plain text."""
        return f"{self.text}×10^{self.exponent}" if self.power else self.text


def digits_of(
    value: float, size: float = 0.0, significant: int = _SIGNIFICANT, plain_least: float = _PLAIN_LEAST
) -> Digits:
    """Write a number to five significant digits.

    Parameters
    ----------
    value : float
        In any unit.
    size : float, optional
        Size of what it stands among: what is 1e-12 of that or less is round-off, and prints as 0.
    significant : int, optional
        Number of significant digits.
    plain_least : float, optional
        Least number that is written without a power of ten; the largest is ten million.

    Returns
    -------
    Digits
        Powers of ten go in steps of three.
    """
    if not isfinite(value):
        return Digits("not known")
    if value == 0.0 or abs(value) <= _ROUND_OFF * size:
        return Digits("0")
    rounded = float(f"{value:.{significant - 1}e}")
    power = 0
    if not plain_least <= abs(rounded) < _PLAIN_MOST:
        power = 3 * floor(floor(log10(abs(rounded)) + 1e-12) / 3)
    front = rounded / 10.0**power if abs(power) < 300 else float(f"{rounded:e}".partition("e")[0])
    decimals = max(0, significant - 1 - floor(log10(abs(front)) + 1e-12))
    return Digits(f"{front:,.{decimals}f}".replace("-", _MINUS), power, 0 if power else decimals)


def as_given(value: float) -> Digits:
    """Write a number that somebody chose, with all the digits that it was given.

    Parameters
    ----------
    value : float
        In any unit.
    """
    text = f"{value:.10g}"
    if "e" in text or not isfinite(value):
        return digits_of(value)
    whole, point, part = text.partition(".")
    return Digits(f"{_MINUS if value < 0 else ''}{int(whole.lstrip('-')):,}{point}{part}")


def plus_minus(half: float, power: int = 0) -> Digits:
    """Write a half width to two significant digits.

    Parameters
    ----------
    half : float
        In any unit, 0 or more.
    power : int, optional
        Power of ten of the number that it stands beside, which it takes too.
    """
    if power and isfinite(half):
        front = digits_of(half / 10.0**power, significant=2, plain_least=1e-6)
        if not front.power:
            return Digits(front.text, power, 0)
    return digits_of(half, significant=2, plain_least=1e-6)


def percent_of(share: float) -> Digits:
    """Write a share in per cent, to three significant digits and no finer than a ten-thousandth of a per cent.

    Parameters
    ----------
    share : float
        1 for the whole.
    """
    value = 100.0 * share
    if 0.0 < abs(value) < 1e-4:
        return Digits("< 0.0001 %" if value > 0.0 else f"> {_MINUS}0.0001 %")
    made = digits_of(value, significant=3, plain_least=1e-4)
    return Digits(f"{made} %", 0, 0)
