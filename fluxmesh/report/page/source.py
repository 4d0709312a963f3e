"""The plain result behind a page: figures looked up by key, each with the key it came from."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any, Final

from fluxmesh.report.page.digits import Digits, as_given, digits_of, percent_of, plus_minus
from fluxmesh.report.page.units import PageUnits

__all__ = ["Figure", "Source", "Term", "pointer"]

Term = tuple[float, tuple[str, ...]]
"""A factor, and the keys (JSON pointers) of the numbers that it multiplies."""


# A half width below this share of the figure, or of what it stands among, is not worth a line.
_NEGLIGIBLE: Final = 1e-6
_ENTRIES: Final = {
    "force": ("momentum_flux", "pressure_force", "viscous_force"),
    "moment": ("moment_of_momentum_flux", "moment_of_pressure", "moment_of_viscous"),
}


def pointer(*path: str | int) -> str:
    """Return a JSON pointer (RFC 6901) to a place in the result.

    Parameters
    ----------
    *path : str or int
        Keys and numbers, outermost first.
    """
    return "".join("/" + str(part).replace("~", "~0").replace("/", "~1") for part in path)


@dataclass(frozen=True)
class Figure:
    """A number of the page.

    Attributes
    ----------
    value : float or None
        SI; None where it is not known.
    quantity : str
        Decides the unit, see `fluxmesh.report.page.units`; a plain number by default.
    terms : tuple of Term
        The figure is the sum of these products of numbers of the result.
    norm : str
        Key of a vector whose length the figure is, in place of terms.
    size : float
        Size of what it stands among, SI: round-off beside it prints as 0.
    half : float or None
        Half width of the 95 % interval, SI.
    half_key : str
        Its key.
    form : {"number", "percent", "given"}
        How it is printed; ``given`` keeps all digits of a number that somebody chose.
    absent : str
        What is printed where the value is not known.
    """

    value: float | None
    quantity: str = ""
    terms: tuple[Term, ...] = ()
    norm: str = ""
    size: float = 0.0
    half: float | None = None
    half_key: str = ""
    form: str = "number"
    absent: str = "not known"

    @property
    def key(self) -> str:
        """Key of the number itself, where it stands in the result as it is."""
        whole = len(self.terms) == 1 and self.terms[0][0] == 1.0 and len(self.terms[0][1]) == 1
        return self.terms[0][1][0] if whole else ""

    @property
    def origin(self) -> str:
        """How the figure follows from the result, as JSON; empty where it stands there itself."""
        if self.key:
            return ""
        if self.norm:
            return json.dumps({"norm": self.norm}, ensure_ascii=False)
        if self.terms:
            return json.dumps({"terms": [[factor, *keys] for factor, keys in self.terms]}, ensure_ascii=False)
        return ""

    def written(self, units: PageUnits) -> Digits:
        """Return the number in the SI unit of the page.

        Parameters
        ----------
        units : PageUnits
            Of the page.
        """
        if self.value is None:
            return Digits(self.absent)
        if self.form == "percent":
            return percent_of(self.value)
        unit = units.si(self.quantity)
        if self.form == "given":
            return as_given(unit.of(self.value))
        return digits_of(unit.of(self.value), unit.width(self.size))

    def written_us(self, units: PageUnits) -> Digits | None:
        """Return the number in the US customary unit of the page, or None where that is not shown.

        Parameters
        ----------
        units : PageUnits
            Of the page.
        """
        unit = units.us(self.quantity)
        if unit is None or self.value is None or self.form == "percent":
            return None
        made = digits_of(unit.of(self.value), unit.width(self.size))
        # nothing is nothing in any unit
        return None if made.text == "0" and unit.offset == 0.0 else made

    def doubt(self, units: PageUnits) -> Digits | None:
        """Return the half width in the SI unit of the page, or None where it is not known.

        Parameters
        ----------
        units : PageUnits
            Of the page.
        """
        if self.half is None or self.value is None:
            return None
        scale = 100.0 if self.form == "percent" else 1.0
        return plus_minus(units.si(self.quantity).width(self.half) * scale, self.written(units).power)

    def doubt_us(self, units: PageUnits) -> Digits | None:
        """Return the half width in the US customary unit of the page, or None.

        Parameters
        ----------
        units : PageUnits
            Of the page.
        """
        unit = units.us(self.quantity)
        if unit is None or self.half is None or self.value is None or self.form == "percent":
            return None
        beside = self.written_us(units)
        return plus_minus(unit.width(self.half), 0 if beside is None else beside.power)

    def turned(self) -> Figure:
        """Return the figure with the other sign."""
        value = None if self.value is None else -self.value + 0.0
        return replace(self, value=value, terms=tuple((-factor, keys) for factor, keys in self.terms))


class Source:
    """Looks figures up in the plain result, and notes them for the choice of units.

    Parameters
    ----------
    data : mapping
        The content of ``balance.json``.
    units : PageUnits
        Of the page.
    """

    def __init__(self, data: Mapping[str, Any], units: PageUnits) -> None:
        self.data = data
        self.units = units
        # the largest entries of forces and moments: what is 1e-12 of them is round-off wherever it stands
        self._largest = {
            quantity: max((self.size(*path) or 0.0 for path in paths), default=0.0)
            for quantity, paths in self._entries().items()
        }

    def _entries(self) -> dict[str, list[tuple[str, ...]]]:
        groups = self.get("groups")
        names = list(groups) if isinstance(groups, Mapping) else []
        found: dict[str, list[tuple[str, ...]]] = {}
        for quantity, keys in _ENTRIES.items():
            found[quantity] = [("groups", name, key) for name in names for key in keys]
            found[quantity] += [("reaction", quantity), ("hardware_load", "from_balance", quantity)]
            found[quantity] += [("hardware_load", "from_walls", quantity)]
        return found

    def get(self, *path: str | int) -> Any:
        """Return what stands at a place of the result, or None where there is nothing.

        Parameters
        ----------
        *path : str or int
            Keys and numbers, outermost first.
        """
        here: Any = self.data
        for part in path:
            if isinstance(here, Mapping):
                here = here.get(str(part))
            elif isinstance(here, list | tuple) and isinstance(part, int) and -len(here) <= part < len(here):
                here = here[part]
            else:
                return None
        return here

    def figure(
        self,
        quantity: str,
        *path: str | int,
        size: float = 0.0,
        form: str = "number",
        absent: str = "not known",
        factor: float = 1.0,
    ) -> Figure:
        """Return the figure at a place of the result.

        Parameters
        ----------
        quantity : str
            Decides its unit.
        *path : str or int
            Where it stands.
        size : float, optional
            Size of what it stands among, SI; for forces and moments the largest entry where that is larger.
        form : {"number", "percent", "given"}, optional
            How it is printed.
        absent : str, optional
            What is printed where it is not there.
        factor : float, optional
            What it is multiplied with: -1 turns its sign.

        Returns
        -------
        Figure
            With the half width beside it, where the result has one.
        """
        value = _number(self.get(*path))
        value = None if value is None else factor * value + 0.0
        size = max(size, self._largest.get(quantity, 0.0))
        half_path = self._half_path(path)
        half = _number(self.get(*half_path)) if half_path else None
        if half is not None and abs(factor) * half <= _NEGLIGIBLE * max(size, abs(value or 0.0)):
            half = None  # round-off
        if value is not None:
            self.units.note(quantity, value)
        return Figure(
            value=value,
            quantity=quantity,
            terms=((factor, (pointer(*path),)),),
            size=size,
            half=None if half is None else abs(factor) * half,
            half_key=pointer(*half_path) if half is not None and half_path else "",
            form=form,
            absent=absent,
        )

    def vector(
        self, quantity: str, *path: str | int, size: float = 0.0, factor: float = 1.0, absent: str = "not known"
    ) -> tuple[Figure, Figure, Figure]:
        """Return the three components at a place of the result; parameters as for `figure`."""
        x, y, z = (self.figure(quantity, *path, k, size=size, factor=factor, absent=absent) for k in range(3))
        return x, y, z

    def length(self, quantity: str, *path: str | int) -> Figure:
        """Return the length of the vector at a place of the result.

        Parameters
        ----------
        quantity : str
            Decides its unit.
        *path : str or int
            Where it stands.

        Returns
        -------
        Figure
            With its own half width, where the result has the length beside the vector.
        """
        beside = (*path[:-1], f"{path[-1]}_size")
        if self.get(*beside) is not None:
            return self.figure(quantity, *beside)
        value = self.size(*path)
        if value is not None:
            self.units.note(quantity, value)
        return Figure(value, quantity, norm=pointer(*path), size=self._largest.get(quantity, 0.0))

    def size(self, *path: str | int) -> float | None:
        """Return the length of a vector as a number, or None where it is not known.

        Parameters
        ----------
        *path : str or int
            Where it stands.
        """
        found = self.get(*path)
        if not isinstance(found, Sequence) or isinstance(found, str):
            return None
        parts = [_number(part) for part in found]
        if any(part is None for part in parts):
            return None
        return math.hypot(*(part for part in parts if part is not None))

    def sum(self, quantity: str, parts: Sequence[Figure], size: float = 0.0) -> Figure:
        """Return the sum of figures; not known where one of them is not.

        Parameters
        ----------
        quantity : str
            Decides its unit.
        parts : sequence of Figure
            Of that quantity.
        size : float, optional
            Size of what the sum stands among, SI.
        """
        values = [part.value for part in parts]
        total = None if None in values else float(sum(value for value in values if value is not None))
        if total is not None:
            self.units.note(quantity, total)
        size = max(size, self._largest.get(quantity, 0.0))
        return Figure(total, quantity, tuple(term for part in parts for term in part.terms), size=size)

    def _half_path(self, path: tuple[str | int, ...]) -> tuple[str | int, ...]:
        """Where the half width of the figure at a place stands."""
        for last in range(len(path) - 1, -1, -1):
            if isinstance(path[last], str):
                return (*path[:last], f"{path[last]}_uncertainty", *path[last + 1 :])
        return ()


def _number(value: Any) -> float | None:
    if isinstance(value, bool) or not isinstance(value, int | float):
        return None
    number = float(value)
    return number if math.isfinite(number) else None
