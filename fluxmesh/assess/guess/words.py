"""The words that exports use for each quantity.

Common practice, no source, except for the capitalised names of the open
CGNS/SIDS standard (``VelocityX``, ``SkinFrictionX``, ``PressureStagnation``, ...), whose words are among these.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from itertools import pairwise
from typing import Final

__all__ = ["HINTS", "QUANTITIES", "Quantity", "WordMatch", "match_words"]


@dataclass(frozen=True)
class Quantity:
    """How a quantity is named and shaped.

    Attributes
    ----------
    components : frozenset of int
        Numbers of components it may have.
    words : frozenset of str
        Words, or whole names run together, that stand for it.
    letters : frozenset of str
        Single letters that stand for it, where nothing else says more.
    unit : str
        SI unit.
    over_density : str
        SI unit of the same over density, or empty.
    foreign : frozenset of str
        Words that make it something else.
    """

    components: frozenset[int]
    words: frozenset[str]
    letters: frozenset[str]
    unit: str
    over_density: str = ""
    foreign: frozenset[str] = field(default_factory=frozenset)


QUANTITIES: Final = {
    "velocity": Quantity(
        frozenset({3}),
        frozenset({"velocity", "vel", "velocities", "uvw"}),
        frozenset({"u", "v", "w"}),
        "m/s",
        foreign=frozenset({"friction", "angular", "sound", "mesh", "grid", "wall", "tau", "vorticity", "pressure"}),
    ),
    "pressure": Quantity(
        frozenset({1}),
        frozenset({"pressure", "press", "pres", "pstatic", "pstat", "ps", "ptotal", "ptot", "pt", "p0", "cp", "pabs"}),
        frozenset({"p"}),
        "Pa",
        "m^2/s^2",
        foreign=frozenset({"dynamic", "velocity", "temperature", "partial", "vapour", "vapor"}),
    ),
    "traction": Quantity(
        frozenset({3}),
        frozenset({"traction", "shear", "skinfriction", "wallshear", "tauw", "tau", "wss", "cf", "viscousstress"}),
        frozenset(),
        "Pa",
        "m^2/s^2",
        foreign=frozenset({"velocity", "rate", "strain", "modulus", "yield", "reynolds", "turbulent"}),
    ),
    "density": Quantity(
        frozenset({1}),
        frozenset({"density", "dens", "rho"}),
        frozenset(),
        "kg/m^3",
        foreign=frozenset({"stagnation", "total", "number", "energy", "flux", "velocity", "u", "v", "w", "e"}),
    ),
    "mass_flux": Quantity(
        frozenset({1}),
        frozenset({"massflux", "massflow", "massflowrate", "mdot", "faceflux"}),
        frozenset(),
        "kg/s",
        foreign=frozenset({"volume", "heat"}),
    ),
    "temperature": Quantity(
        frozenset({1}),
        frozenset({"temperature", "temp"}),
        frozenset({"t"}),
        "K",
        foreign=frozenset({"stagnation", "total", "wall"}),
    ),
    "stress": Quantity(
        frozenset({6, 9}),
        frozenset({"stress", "viscousstress", "tau"}),
        frozenset(),
        "Pa",
        foreign=frozenset({"reynolds", "turbulent", "total", "solid", "gradient", "grad"}),
    ),
}
"""Quantities that a case can name an array for."""

HINTS: Final = {
    "total": frozenset({"total", "tot", "stagnation", "stag", "ptotal", "ptot", "pt", "p0"}),
    "absolute": frozenset({"absolute", "abs", "pabs"}),
    "gauge": frozenset({"gauge"}),
    "kinematic": frozenset({"kinematic"}),
    "relative": frozenset({"relative", "rel", "rotating", "w"}),
    "coefficient": frozenset({"coefficient", "coef", "coeff", "cp", "cf"}),
}
"""Words that say which kind of a quantity an array holds."""

_NEUTRAL: Final = frozenset(
    [
        "static",
        "stat",
        "mean",
        "avg",
        "average",
        "averaged",
        "time",
        "fluid",
        "wall",
        "surface",
        "field",
        "vector",
        "node",
        "nodal",
        "point",
        "cell",
        "face",
        "vertex",
        "stress",
        "skin",
        "viscous",
        "flow",
        "gas",
        "liquid",
        "mixture",
        "export",
        "exported",
        "value",
        "values",
        "of",
        "at",
        "on",
        "in",
        "the",
    ]
)
_SPOILING: Final = frozenset(
    [
        "magnitude",
        "mag",
        "norm",
        "gradient",
        "grad",
        "rms",
        "prime",
        "std",
        "variance",
        "deviation",
        "fluctuation",
        "error",
        "residual",
        "uncertainty",
        "potential",
        "log",
        "id",
        "old",
        "previous",
        "prev",
        "target",
        "ratio",
        "correction",
    ]
)
_PENALTY: Final = {"total": 4, "relative": 3, "coefficient": 20}


@dataclass(frozen=True)
class WordMatch:
    """How well words fit a quantity.

    Attributes
    ----------
    score : int
        Larger is better; above zero for what a person would take it for.
    hints : frozenset of str
        Keys of `HINTS` that the words give.
    """

    score: int
    hints: frozenset[str]


def match_words(quantity: str, words: tuple[str, ...]) -> WordMatch | None:
    """Return how well the words of a name fit a quantity.

    Parameters
    ----------
    quantity : str
        A key of `QUANTITIES`.
    words : tuple of str
        As `fluxmesh.assess.guess.names.name_words` gives them, without unit and component.

    Returns
    -------
    WordMatch or None
        None when they are no name of it.
    """
    known = QUANTITIES[quantity]
    given = set(words)
    if not words or given & (_SPOILING | known.foreign):
        return None
    letters = [word for word in words if not word.isdigit()]
    pairs = {first + second for first, second in pairwise(letters)}
    named = {"".join(letters), "".join(words), *pairs, *given} & known.words
    hints = frozenset(hint for hint, signs in HINTS.items() if signs & (given | named))
    hinting = frozenset().union(*(HINTS[hint] for hint in hints)) if hints else frozenset()
    spent = _NEUTRAL | hinting | known.words
    extra = sum(1 for word in letters if word not in spent and not any(word in name for name in named))
    if named:
        score = 10 - 2 * extra
    elif given & known.letters and not [word for word in letters if word not in spent | known.letters]:
        score = 8
    else:
        return None
    score -= sum(_PENALTY.get(hint, 0) for hint in hints)
    return WordMatch(score, hints - ({"absolute"} if quantity == "velocity" else set()))
