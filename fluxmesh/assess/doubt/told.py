"""The doubt of every figure of a balance, as it is handed on."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.doubt.budget import Budget
from fluxmesh.assess.doubt.draws import Drawn
from fluxmesh.assess.doubt.figures import Figures, Path, with_uncertainties
from fluxmesh.assess.doubt.inputs import COVERAGE, Input
from fluxmesh.balance.balance import Balance

__all__ = ["DoubtOfFigures"]

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class DoubtOfFigures:
    """The doubt of every figure of an outcome.

    Attributes
    ----------
    figures : Figures
        The figures that a doubt is told of.
    budget : Budget
        What it is made of.
    inputs : tuple of Input
        The numbers of the case that have one.
    sharpened : Balance or None
        The balance of the sharpened table; None where none was made.
    drawn : Drawn or None
        What draws of the inputs make of each figure; None where none were asked for.
    notes : tuple of str
        What the doubt leaves out, or how it was reached; one sentence each.
    """

    figures: Figures
    budget: Budget
    inputs: tuple[Input, ...]
    sharpened: Balance | None
    drawn: Drawn | None
    notes: tuple[str, ...]

    def half_widths(self, *, sharpened: bool = False) -> dict[Path, float | Array]:
        """Return the half widths of the 95 % intervals by path, in the shape of each figure.

        Parameters
        ----------
        sharpened : bool, optional
            Whether those of the sharpened values.
        """
        return self.budget.by_path(sharpened=sharpened)

    def beside(self, data: dict[str, Any], *, sharpened: bool = False) -> dict[str, Any]:
        """Return a result with the doubt of each figure beside it, and the budget of the doubt.

        Parameters
        ----------
        data : dict
            The content of ``balance.json``.
        sharpened : bool, optional
            Whether its figures are the sharpened ones.
        """
        told = with_uncertainties(data, self.half_widths(sharpened=sharpened))
        told["doubt"] = self.data()
        return told

    def data(self) -> dict[str, Any]:
        """Return the budget as plain data: what dominates the figures that matter most."""
        return {
            "coverage": COVERAGE,
            "inputs": {
                one.name: {"value": one.value, "half_width": one.half_width, "unit": one.unit, "shape": one.shape}
                for one in self.inputs
            },
            "budget": {
                ".".join(path): [
                    {"name": part.name, "kind": part.kind, "half_width": part.half_width, "share": part.share}
                    for part in shares
                ]
                for path, shares in self.budget.headlines().items()
            },
            "monte_carlo": None if self.drawn is None else self._drawn(self.drawn),
            "notes": list(self.notes),
        }

    def _drawn(self, drawn: Drawn) -> dict[str, Any]:
        told = {}
        for path in self.budget.headlines():
            place = self.figures.spot(path).slice
            told[".".join(path)] = {
                "mean": drawn.mean[place].tolist(),
                "standard": drawn.standard[place].tolist(),
                "shortest": drawn.shortest[place].tolist(),
                "symmetric": drawn.symmetric[place].tolist(),
            }
        return {"draws": drawn.count, "figures": told}
