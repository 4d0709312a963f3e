"""Slips in the hydrostatic head and in gravity."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.causes.change import Change
from fluxmesh.assess.causes.entries import Entries
from fluxmesh.assess.causes.evidence import STANDARD, gravity_odds
from fluxmesh.assess.causes.residuals import Residuals
from fluxmesh.assess.causes.suspect import COST, Suspect, lines
from fluxmesh.field.pressure import Head

__all__ = ["gravity_direction", "head_counted_twice", "head_removed"]

_SAME: Final = 0.03  # a fitted gravity must have the size of the one given
_TILT: Final = 0.97  # cosine: a tilt of less than some 14 degrees is no slip
_UNITS: Final = (("cm/s^2", 0.01), ("mm/s^2", 0.001), ("ft/s^2", 0.3048), ("in/s^2", 0.0254))


def _has_head(entries: Entries) -> bool:
    return bool(entries.gravity().any() and entries.held > 0 and entries.facts.pressure_array.any())


def head_removed(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Suspect an export without the hydrostatic head, read as if it held it.

    Parameters
    ----------
    entries : Entries
        The laws.
    now : Residuals
        Residuals as they are; not used.

    Yields
    ------
    Suspect
        None without gravity, or where the head was put back.
    """
    del now
    if _has_head(entries) and entries.facts.head is Head.INCLUDED:
        yield Suspect(
            "head-removed",
            Change(head=1),
            "the exported pressure lacks the hydrostatic head, while the weight of the fluid counts",
            lines(("flow.pressure.head", "removed")),
            COST["classic"],
        )


def head_counted_twice(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Suspect an export that holds the hydrostatic head, to which it was added again.

    Parameters
    ----------
    entries : Entries
        The laws.
    now : Residuals
        Residuals as they are; not used.

    Yields
    ------
    Suspect
        None without gravity, or where no head was put back.
    """
    del now
    if _has_head(entries) and entries.facts.head is Head.REMOVED:
        yield Suspect(
            "head-counted-twice",
            Change(head=-1),
            "the exported pressure holds the hydrostatic head, and it was added once more",
            lines(("flow.pressure.head", "included")),
            COST["classic"],
        )


def gravity_direction(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Suspect gravity along another axis, the other way, in another unit, or left out.

    Parameters
    ----------
    entries : Entries
        The laws.
    now : Residuals
        Residuals as they are; not used.

    Yields
    ------
    Suspect
        None without a density of the fluid held.
    """
    del now
    gravity = entries.gravity()
    size = float(np.linalg.norm(gravity))
    if entries.held <= 0:
        return
    if size == 0.0:
        for text, value in _axes(STANDARD, np.zeros(3)):
            yield _gravity(value, f"the fluid is pulled along {text}, and the case has no gravity", COST["uncommon"])
        return
    turned = (-gravity[0], -gravity[1], -gravity[2])
    yield _gravity(turned, "gravity points the other way", COST["common"])
    for text, value in _axes(size, gravity):
        yield _gravity(value, f"gravity points along {text}", COST["uncommon"])
    if entries.facts.head is Head.INCLUDED:
        yield _turned(entries, gravity, size)
    for unit, factor in _UNITS:
        value = (factor * gravity[0], factor * gravity[1], factor * gravity[2])
        if 0.01 < factor * size < 100:
            # a length unit may leave the very same: what gravity would be, and what it is, tells which is likelier
            odds = gravity_odds(factor * size) - gravity_odds(size)
            yield _gravity(value, f"gravity was given in {unit}, and read in m/s²", COST["uncommon"] + odds)


def _turned(entries: Entries, gravity: NDArray[np.float64], size: float) -> Suspect:
    """Gravity of the same size in a direction that is fitted."""
    directions = np.concatenate([np.zeros((3, 1)), entries.held * entries.weight.sum(axis=0)], axis=1)

    def words(fitted: NDArray[np.float64], _left: Residuals) -> tuple[str, str] | None:
        found = gravity + fitted[4:7]
        length = float(np.linalg.norm(found))
        if abs(length / size - 1.0) > _SAME or float(found @ gravity) > _TILT * length * size:
            return None
        written = [float(f"{x:.5g}") + 0.0 for x in found]
        return f"gravity points along ({written[0]:g}, {written[1]:g}, {written[2]:g})", lines(
            ("fluid.gravity", written)
        )

    return Suspect(
        "gravity-direction", Change(), "gravity points elsewhere", "", COST["rare"], directions=directions,
        words=words, alone=True,
    )  # fmt: skip


def _axes(size: float, gravity: NDArray[np.float64]) -> Iterator[tuple[str, tuple[float, float, float]]]:
    """The six axes that are neither along gravity nor against it."""
    for k, name in enumerate("xyz"):
        for sign, mark in ((-1, "-"), (1, "+")):
            value = [0.0, 0.0, 0.0]
            value[k] = sign * size
            if np.linalg.norm(np.cross(value, gravity)) > 1e-6 * size * size or not gravity.any():
                yield f"{mark}{name}", (value[0], value[1], value[2])


def _gravity(value: tuple[float, float, float], statement: str, cost: float) -> Suspect:
    written = [float(f"{x:.7g}") + 0.0 for x in value]
    return Suspect(
        "gravity-direction",
        Change(gravity=value),
        statement,
        lines(("fluid.gravity", written)),
        cost,
    )
