"""A suspected slip: what undoes it, what it assumes, and the line of the case that puts it right."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.causes.change import Change
from fluxmesh.assess.causes.entries import Entries
from fluxmesh.assess.causes.residuals import Residuals
from fluxmesh.assess.review.doubt import Setting
from fluxmesh.assess.review.toml import TomlValue

__all__ = ["COST", "Cause", "Suspect", "Words", "lines"]

Words = Callable[[NDArray[np.float64], Residuals], "tuple[str, str] | None"]
"""From fitted numbers and the residuals that are left to a statement and a fix, or None where they are absurd."""

COST: Final = {
    "classic": 1.0,  # one key of the case is enough, and it happens every week
    "common": 2.0,  # one key or one choice
    "uncommon": 3.0,  # one among several values or groups
    "rare": 4.5,  # takes two things to go wrong, or an odd one
    "free": 6.0,  # a number that nothing but the residual supports
}
"""What a cause assumes: minus the logarithm of how often it is met. Common practice, no source; the order counts."""


@dataclass(frozen=True, eq=False)
class Suspect:
    """A slip that may have been made.

    Attributes
    ----------
    id : str
        Its kind, a short name that stays the same.
    change : Change
        What undoes it.
    statement : str
        What would be so, one clause without a final full stop.
    fix : str
        The line of the case to change, or what else to do.
    cost : float
        How much it assumes (see `COST`).
    group : int or None
        The group it concerns.
    balances : tuple of str
        For a change of scale: the entries it scales, among "flux", "pressure", "viscous" and
        "weight". What is left must be small beside them: an entry that only shrinks until it
        does not matter explains nothing.
    directions : ndarray, shape (k, 10), float64
        What may be added in any amount: mass flow and nine momentum columns. Each costs a fitted number.
    fits_density : bool
        Whether the factor on the density is fitted.
    entries : Entries or None
        Other entries to apply the change to, where the table itself would be another.
    judges_angular : bool
        Whether angular momentum can be judged under it.
    expected : float
        Above zero for what must leave a residual of this kind, but does not say which: how much
        more likely than not that makes it (a logarithm).
    words : callable or None
        From fitted numbers to statement and fix, in place of those above.
    alone : bool
        Whether it is tried alone only.
    """

    id: str
    change: Change
    statement: str
    fix: str
    cost: float
    group: int | None = None
    balances: tuple[str, ...] = ()
    directions: NDArray[np.float64] = field(default_factory=lambda: np.zeros((0, 10)))
    fits_density: bool = False
    entries: Entries | None = None
    judges_angular: bool = True
    expected: float = 0.0
    words: Words | None = None
    alone: bool = False

    @property
    def fitted(self) -> int:
        """How many numbers are fitted."""
        return int(self.fits_density) + len(self.directions)


Cause = Callable[[Entries, Residuals], Iterable[Suspect]]
"""From the entries and the residuals as they are to suspects of one kind."""


def lines(*settings: tuple[str, TomlValue]) -> str:
    """Return lines of a case as text.

    Parameters
    ----------
    *settings : (str, TomlValue)
        A dotted key, whose parts hold no dots, and its value.
    """
    return " and ".join(Setting(tuple(key.split(".")), value).line() for key, value in settings)
