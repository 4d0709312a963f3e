"""Kinds of pressure, and what turns an exported one into gauge pressure with its head."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError
from fluxmesh.integral.layout import PressureTerms

__all__ = ["Head", "PressureKind", "PressureMeaning", "pressure_terms"]


class PressureKind(StrEnum):
    """What an exported pressure is measured from."""

    GAUGE = "gauge"
    ABSOLUTE = "absolute"
    KINEMATIC = "kinematic"


class Head(StrEnum):
    """Whether an exported pressure holds the hydrostatic head."""

    INCLUDED = "included"
    REMOVED = "removed"


@dataclass(frozen=True)
class PressureMeaning:
    """How the numbers of a pressure array are to be read.

    Attributes
    ----------
    kind : PressureKind
        ``gauge``: static minus ambient, Pa; ``absolute``: ambient is taken
        off; ``kinematic``: gauge pressure over density, m²/s².
    head : Head
        ``removed``: the export is ``p - rho g·(x - datum)``, or comes from a
        flow computed without gravity; the head is put back.
    datum : tuple of 3 floats
        Point where the removed head is zero, m.

    Raises
    ------
    FieldError
        A kind or head that is not known; their words may be given as text.
    """

    kind: PressureKind = PressureKind.GAUGE
    head: Head = Head.INCLUDED
    datum: tuple[float, float, float] = (0.0, 0.0, 0.0)

    def __post_init__(self) -> None:
        """Take the words of kind and head for what they mean."""
        for name, words in (("kind", PressureKind), ("head", Head)):
            try:
                object.__setattr__(self, name, words(getattr(self, name)))
            except ValueError as error:
                raise FieldError(
                    f"the {name} of the pressure is {getattr(self, name)!r}",
                    remedy=f"Allowed: {', '.join(word.value for word in words)}",
                ) from error


def pressure_terms(
    meaning: PressureMeaning,
    *,
    ambient: float | None,
    density: float | None,
    gravity: NDArray[np.float64],
    origin: NDArray[np.float64],
) -> PressureTerms:
    """Return the terms that make gauge pressure with its head out of an export.

    Parameters
    ----------
    meaning : PressureMeaning
        What the export holds.
    ambient : float or None
        Ambient absolute pressure, Pa.
    density : float or None
        Constant density, kg/m^3; None when density varies.
    gravity : ndarray, shape (3,), float64
        Acceleration of gravity, m/s².
    origin : ndarray, shape (3,), float64
        Origin of the integration, m.

    Returns
    -------
    PressureTerms
        ``p = exported (× density) + offset + head · x``, the hydrostatic law
        ``grad p = rho g`` (Batchelor, An Introduction to Fluid Dynamics,
        section 1.4; from memory).

    Raises
    ------
    FieldError
        Absolute pressure without an ambient pressure, or a head to put back
        without a constant density.
    """
    offset = 0.0
    if meaning.kind is PressureKind.ABSOLUTE:
        if ambient is None:
            raise FieldError(
                "the pressure is absolute, but no ambient pressure is given",
                remedy="Give fluid.ambient_pressure: forces are made of gauge pressure",
            )
        offset -= ambient
    head = np.zeros(3)
    if meaning.head is Head.REMOVED:
        if density is None:
            raise FieldError(
                "the hydrostatic head was removed from the pressure, but density is not one constant",
                remedy="Export the pressure with its head, or give one density",
            )
        head = density * gravity
        offset += float(head @ (origin - np.asarray(meaning.datum)))
    return PressureTerms(meaning.kind is PressureKind.KINEMATIC, offset, float(head[0]), float(head[1]), float(head[2]))
