"""What a run prints of doubt: half widths beside the figures that matter most, and what they are made of."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from fluxmesh.assess.doubt.budget import Budget, Share
from fluxmesh.assess.doubt.figures import Figures
from fluxmesh.balance.wrench import Vector
from fluxmesh.report.tables import figure, stack, table

__all__ = ["DoubtShown", "doubt_lines", "doubt_table"]

_WORDS = {
    ("mass", "residual"): "mass left",
    ("momentum", "residual"): "momentum left",
    ("angular_momentum", "residual"): "angular momentum left",
    ("hardware_load", "from_walls", "force"): "flow on hardware (walls), force",
    ("hardware_load", "from_walls", "moment"): "flow on hardware (walls), moment",
    ("hardware_load", "from_balance", "force"): "flow on hardware (balance), force",
    ("hardware_load", "from_balance", "moment"): "flow on hardware (balance), moment",
    ("reaction", "force"): "ANCHOR ON HARDWARE, force",
    ("reaction", "moment"): "ANCHOR ON HARDWARE, moment",
}


@dataclass(frozen=True, eq=False)
class DoubtShown:
    """The doubt of a balance, as it is shown.

    Attributes
    ----------
    budget : Budget
        What it is made of.
    half_widths : ndarray, shape (n_figures,), float64
        Of the 95 % intervals of the figures reported.
    other : Figures or None
        The sharpened values beside plain figures, or the plain ones beside sharpened.
    sharpened_reported : bool
        Which of the two the figures reported are.
    notes : tuple of str
        How the doubt was reached, and what it leaves out.
    """

    budget: Budget
    half_widths: Vector
    other: Figures | None
    sharpened_reported: bool
    notes: tuple[str, ...]

    @classmethod
    def of(
        cls, budget: Budget, sharpened: Figures | None, sharpened_reported: bool, notes: Sequence[str]
    ) -> DoubtShown:
        """Return the doubt of plain or of sharpened figures.

        Parameters
        ----------
        budget : Budget
            Of the plain figures.
        sharpened : Figures or None
            The sharpened ones.
        sharpened_reported : bool
            Which of the two are reported.
        notes : sequence of str
            How the doubt was reached.
        """
        widths = budget.sharpened if sharpened_reported else budget.half_widths
        return cls(budget, widths, sharpened, sharpened_reported, tuple(notes))


def doubt_table(shown: DoubtShown) -> Any:
    """Return the figures that matter most with their doubt, for the terminal.

    Parameters
    ----------
    shown : DoubtShown
        The doubt.

    Returns
    -------
    rich.table.Table
    """
    budget, half_widths = shown.budget, shown.half_widths
    rows = []
    for path, shares in budget.headlines().items():
        spot = budget.figures.spot(path)
        values, widths = budget.figures[path], half_widths[spot.slice]
        if not np.isfinite(values).all():
            continue
        scale = float(np.linalg.norm(values) + np.linalg.norm(widths))
        better = None if shown.other is None else budget.figures.like(shown.other)[spot.slice]
        rows.append(
            [
                f"{_WORDS.get(path, spot.name)}, {spot.unit}" if spot.unit else _WORDS.get(path, spot.name),
                stack(values, scale),
                "\n".join(f"± {figure(float(width))}" for width in widths),
                "" if better is None else stack(better, scale),
                _made_of(shares),
            ]
        )
    return table(
        "Doubt, half widths at 95 %",
        [
            ("figure", "left"),
            ("as exported", "right"),
            ("doubt", "right"),
            ("sharpened", "right"),
            ("made of, by variance", "left"),
        ],
        rows,
    )


def _made_of(shares: Sequence[Share]) -> str:
    told = [share for share in shares[:3] if share.share >= 0.01]
    return "\n".join(f"{share.name} {share.share:.0%}" for share in told)


def doubt_lines(shown: DoubtShown) -> list[str]:
    """Return what stands under the table, one sentence each.

    Parameters
    ----------
    shown : DoubtShown
        The doubt.
    """
    lines = []
    if shown.sharpened_reported:
        lines.append("All figures are the sharpened ones: of quadratic patches recovered from the data.")
    elif shown.other is not None:
        lines.append(
            'Sharpened: the same from quadratic patches recovered from the data; [flow] reconstruction = "quadratic" '
            "reports them."
        )
    lines += [f"{note}." for note in shown.notes]
    return lines
