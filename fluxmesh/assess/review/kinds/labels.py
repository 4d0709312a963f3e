"""What the names of arrays say, against what the case says."""

from __future__ import annotations

from collections.abc import Iterator

from fluxmesh.assess.guess.arrays import read_as
from fluxmesh.assess.guess.names import known_unit
from fluxmesh.assess.review.doubt import Doubt, Setting
from fluxmesh.assess.review.evidence import Evidence, NamedArray
from fluxmesh.field.pressure import PressureKind
from fluxmesh.units.expression import parse_unit

__all__ = ["kind_settings", "label_doubts", "other_array"]

_SAME = 1e-6
_TITLES = {
    "total": "total pressure, which holds the dynamic pressure besides",
    "coefficient": "a coefficient, which has no unit",
    "relative": "velocity relative to a moving frame",
}


def kind_settings(evidence: Evidence, kind: str) -> tuple[Setting, ...]:
    """Return the lines that make the exported pressure another kind.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.
    kind : str
        "gauge", "absolute" or "kinematic".

    Returns
    -------
    tuple of Setting
        With its unit where the case states one that would not fit the kind.
    """
    settings = [Setting(("flow", "pressure", "kind"), kind)]
    over_density = evidence.flow.meaning.kind is PressureKind.KINEMATIC
    if "flow.pressure.unit" in evidence.stated and over_density != (kind == "kinematic"):
        settings.append(Setting(("flow", "pressure", "unit"), "m^2/s^2" if kind == "kinematic" else "Pa"))
    return tuple(settings)


def other_array(evidence: Evidence, quantity: str, without: frozenset[str]) -> tuple[Setting, ...]:
    """Return the line that names another array of a quantity, if the file has a likely one.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.
    quantity : str
        Key in ``[flow]``.
    without : frozenset of str
        Hints that the other array's name must not give.
    """
    for guess in evidence.spare:
        if guess.quantity == quantity and guess.score > 0 and not guess.hints & without:
            value = guess.names[0] if len(guess.names) == 1 else guess.names
            return (Setting(("flow", quantity, "array"), value),)
    return ()


def label_doubts(evidence: Evidence) -> Iterator[Doubt]:
    """Doubt arrays whose name says another unit or kind than the case.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Yields
    ------
    Doubt
        One for each contradiction.
    """
    for named in evidence.named:
        unit, hints = read_as(named.quantity, named.names)
        called = f"The array '{', '.join(named.names)}' is read as {named.quantity.replace('_', ' ')}"
        if unit:
            yield from _unit_doubts(evidence, named, unit, called)
        if named.quantity == "pressure":
            yield from _kind_doubts(evidence, hints, called)
        for hint, title in _TITLES.items():
            if hint in hints and not (hint == "relative" and evidence.flow.frame is not None):
                settle = other_array(evidence, named.quantity, frozenset({hint}))
                yield Doubt(
                    "name of another quantity",
                    f"{called}, but its name is that of {title}",
                    "Forces are made of static pressure, traction in Pa, and velocity in the frame at rest",
                    settle,
                    "" if settle else f"export the {named.quantity.replace('_', ' ')} itself",
                )


def _unit_doubts(evidence: Evidence, named: NamedArray, unit: str, called: str) -> Iterator[Doubt]:
    found = known_unit(unit)
    assert found is not None
    kinematic = found.dimension == parse_unit("m^2/s^2").dimension
    if kinematic and named.quantity == "pressure" and evidence.flow.meaning.kind is not PressureKind.KINEMATIC:
        return  # that is the kind's doubt, with its unit
    if kinematic and named.quantity == "traction":
        yield Doubt(
            "unit in name",
            f"{called} in units of pressure, but its name says {unit}: traction over density",
            "Friction would be too small by the density",
            advice="multiply it by the density before export",
        )
    elif abs(found.factor / named.factor - 1.0) > _SAME:
        yield Doubt(
            "unit in name",
            f"{called} in another unit than its name says, {unit}",
            f"Its values would count {named.factor / found.factor:.4g} times",
            (Setting(("flow", named.quantity, "unit"), unit),),
        )


def _kind_doubts(evidence: Evidence, hints: frozenset[str], called: str) -> Iterator[Doubt]:
    now = evidence.flow.meaning.kind
    for kind in PressureKind:
        if kind.value not in hints or kind is now or (kind is PressureKind.GAUGE and now is PressureKind.KINEMATIC):
            continue
        lines = kind_settings(evidence, kind.value)
        if kind is PressureKind.ABSOLUTE and evidence.flow.ambient is None:
            lines = (*lines, Setting(("fluid", "ambient_pressure"), "101325 Pa"))
        yield Doubt(
            "kind in name",
            f"{called} of kind {now.value}, but its name says {kind.value}",
            "What pressure counts from is in every force on a surface that is not closed, such as the walls",
            lines,
        )
