"""A unit as text -> its value in SI and its dimension.

The text is split by a small grammar of our own, so that nothing in it is ever
evaluated; a registry only ever sees one plain word, and only when the table
does not hold it::

    expression = term { ("/" | product) term }       no product after a "/": "J/kg K" has two readings
    term       = "1" | word [exponent] | "(" expression ")" [exponent]
    product    = blank | "*" | "." | "-" | "·" | "×"
    exponent   = ["^" | "**"] ["-"] digits           so m3, m^3, m**3, m³ and s-1 are all understood
"""

from __future__ import annotations

import math
import re
from functools import lru_cache
from typing import Any

from fluxmesh.errors import UnitError
from fluxmesh.units.table import DIMENSIONLESS, UNITS, Dimension, Unit
from fluxmesh.units.wording import nearest, quoted

__all__ = ["parse_unit"]

_LONGEST_TEXT = 60
_LARGEST_EXPONENT = 9

_SUPERSCRIPTS = str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻⁺", "0123456789-+")
_SPELLINGS = (
    (re.compile("[⁰¹²³⁴⁵⁶⁷⁸⁹⁻⁺]+"), lambda match: "^" + match[0].translate(_SUPERSCRIPTS)),
    (re.compile("[−–‐‑]"), "-"),
    (re.compile("[·⋅∙×]"), "*"),
    (re.compile("[µμ]"), "u"),
    (re.compile(r"(?:℃|(?:°|\bdeg(?:rees?)?\.?) ?C\b)"), "degC"),
    (re.compile(r"(?:℉|(?:°|\bdeg(?:rees?)?\.?) ?F\b)"), "degF"),
    (re.compile("°"), "deg"),
)

_KIND_IN_UNIT = re.compile(
    r"((?:[hkM]|m(?=b))?(?:Pa|bar)|psi|ksi|psf|atm|(?:in|mm)Hg|(?:in|ft|mm|cm|m)H2O|inW[CG])"
    r"[ _-]?(?:g|a|d|\( ?(?:g|a|d|gauge|abs|absolute) ?\)|gauge|abs|absolute)\.?",
    re.IGNORECASE,
)
_REFERENCE_STATE = re.compile(r"(?:[NS]m(?:\^|\*\*)?3|N[lL]|(?i:scf|slp|scc)[mhdsMHDS]?)(?![A-Za-z])")
_TEMPERATURE_LETTERS = {"C": "degC", "F": "degF", "c": "degC"}

_TOKEN = re.compile(
    r"(?P<word>[A-Za-z_]*H2O(?![A-Za-z])|[A-Za-z_]+)"
    r"|(?P<exponent>(?:\^|\*\*) ?[+-]?[0-9]+|(?:\^|\*\*) ?\( ?[+-]?[0-9]+ ?\)|(?<=[A-Za-z)])[+-]?[0-9]+)"
    r"|(?P<one>1(?= ?/))|(?P<divide>/)|(?P<times>[*.-])|(?P<open>\()|(?P<close>\))|(?P<blank> +)"
)


@lru_cache(maxsize=512)
def parse_unit(text: str) -> Unit:
    """Read a unit.

    Parameters
    ----------
    text : str
        Such as ``kg/m^3``, ``m3/h``, ``J/(kg K)``, ``N.m``; an empty text is
        the unit of a plain number.

    Returns
    -------
    Unit
        Factor to SI, dimension, and the offset of a temperature scale if the
        text is that scale alone; inside a product a degree is an interval.

    Raises
    ------
    UnitError
        The text is no unit, names one that is not known, or has two readings.
        The message does not know the key: the caller adds where it was.
    """
    if len(text) > _LONGEST_TEXT:
        raise UnitError(f"{quoted(text)} is too long for a unit", remedy='Write a unit such as "kg/m^3"')
    plain = " ".join(text.split())
    for pattern, replacement in _SPELLINGS:
        plain = pattern.sub(replacement, plain)
    _refuse_more_than_a_unit(plain, text)
    if plain in UNITS:
        return UNITS[plain]
    return _Expression(plain, text).read()


def _refuse_more_than_a_unit(plain: str, text: str) -> None:
    """Refuse words that hold a unit and a statement about the quantity in one."""
    kind = _KIND_IN_UNIT.fullmatch(plain)
    if kind and plain not in UNITS:
        raise UnitError(
            f"{quoted(text)} is a unit and a kind of pressure in one",
            remedy=f"Write {kind[1]}; gauge or absolute goes with kind (array) or pressure_kind (group)",
        )
    if _REFERENCE_STATE.match(plain):
        raise UnitError(
            f"{quoted(text)} is an amount at a reference state, not a volume flow",
            remedy="Give the flow at actual conditions (m^3/h, cfm, ...), or the mass flow",
        )


class _Expression:
    """One pass over the tokens of a unit text."""

    def __init__(self, plain: str, text: str) -> None:
        self._text = text
        self._tokens: list[tuple[str, str]] = []
        position = 0
        while position < len(plain):
            match = _TOKEN.match(plain, position)
            if match is None or match.lastgroup is None:
                raise self._not_a_unit(f"at {quoted(plain[position:])}")
            if match.lastgroup != "blank":
                self._tokens.append((match.lastgroup, match[0]))
            position = match.end()
        self._next = 0

    def read(self) -> Unit:
        if not self._tokens:
            return Unit(1.0, DIMENSIONLESS)
        unit = self._expression()
        if self._next < len(self._tokens):
            raise self._not_a_unit(f"at {quoted(self._tokens[self._next][1])}")
        if not math.isfinite(unit.factor) or unit.factor <= 0.0:
            raise UnitError(f"{quoted(self._text)} is beyond the range of numbers")
        return unit

    def _not_a_unit(self, why: str) -> UnitError:
        return UnitError(f"{quoted(self._text)} is not a unit, {why}", remedy='Write it such as "kg/m^3" or "J/(kg K)"')

    def _peek(self) -> str:
        return self._tokens[self._next][0] if self._next < len(self._tokens) else ""

    def _take(self) -> str:
        self._next += 1
        return self._tokens[self._next - 1][1]

    def _expression(self) -> Unit:
        result = self._term()
        divided = False
        while self._peek() not in ("", "close"):
            if self._peek() == "divide":
                self._take()
                result, divided = _product(result, _power(self._term(), -1)), True
                continue
            if self._peek() == "times":
                self._take()
            if divided:
                raise UnitError(
                    f'{quoted(self._text)} has a product after "/", which can be read in two ways',
                    remedy='Put what is below the line in brackets, such as "J/(kg K)"',
                )
            result = _product(result, self._term())
        return result

    def _term(self) -> Unit:
        kind = self._peek()
        if kind == "one":
            self._take()
            return Unit(1.0, DIMENSIONLESS)
        if kind == "word":
            unit = self._word(self._take())
        elif kind == "open":
            self._take()
            unit = self._expression()
            if self._peek() != "close":
                raise self._not_a_unit("a bracket is not closed")
            self._take()
        else:
            raise self._not_a_unit(f"at {quoted(self._tokens[self._next][1])}" if kind else "it breaks off")
        return _power(unit, self._exponent()) if self._peek() == "exponent" else unit

    def _exponent(self) -> int:
        digits = self._take().strip("^*() ")
        # the length first: a number of a million digits is never converted
        if len(digits) > 3 or abs(int(digits)) > _LARGEST_EXPONENT:
            raise self._not_a_unit(f"exponents go from -{_LARGEST_EXPONENT} to {_LARGEST_EXPONENT}")
        return int(digits)

    def _word(self, word: str) -> Unit:
        unit = UNITS.get(word) or _registered(word)
        if unit is None:
            meant = _TEMPERATURE_LETTERS.get(word) or nearest(word, UNITS)
            hint = f" (did you mean {meant}?)" if meant else ""
            within = f" in {quoted(self._text)}" if word != self._text else ""
            raise UnitError(f"{quoted(word)}{within} is not a known unit{hint}")
        return unit


def _product(left: Unit, right: Unit) -> Unit:
    exponents = [a + b for a, b in zip(left.dimension, right.dimension)]
    return Unit(left.factor * right.factor, _dimension(exponents))


def _power(unit: Unit, exponent: int) -> Unit:
    try:
        factor = unit.factor**exponent
    except ArithmeticError:
        factor = math.inf
    return Unit(factor, _dimension([exponent * part for part in unit.dimension]))


def _dimension(exponents: list[int]) -> Dimension:
    length, mass, time, temperature, current, amount, intensity = exponents
    return (length, mass, time, temperature, current, amount, intensity)


_PINT_DIMENSIONS = (
    "[length]",
    "[mass]",
    "[time]",
    "[temperature]",
    "[current]",
    "[substance]",
    "[luminosity]",
)


@lru_cache(maxsize=1)
def _registry() -> Any:
    # imported here: pint takes longer to start than most cases take to read
    import pint

    return pint.UnitRegistry()


def _registered(word: str) -> Unit | None:
    """Look one plain word up in pint; None when it is no unit there or not a multiple of SI.

    Plain numbers under a name (``percent``, ``ppm``) are no units here: inside a
    product they would scale the quantity without a word.
    """
    from pint.errors import PintError

    try:
        one = _registry().Quantity(1.0, word).to_base_units()
        zero = _registry().Quantity(0.0, word).to_base_units()
    except (PintError, ValueError, ArithmeticError):
        # ValueError and ArithmeticError: "nan" and logarithmic units
        return None
    exponents = dict(one.dimensionality)
    if zero.magnitude != 0.0 or not exponents or not set(exponents) <= set(_PINT_DIMENSIONS):
        return None
    if any(float(power) != int(power) for power in exponents.values()):
        return None
    return Unit(float(one.magnitude), _dimension([int(exponents.get(name, 0)) for name in _PINT_DIMENSIONS]))
