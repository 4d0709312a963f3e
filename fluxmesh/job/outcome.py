"""What a job gives: the balance, its verdict, and all that is printed and written of them."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from fluxmesh.assess.comparison import Comparison
from fluxmesh.assess.verdict import Verdict, verdict_words
from fluxmesh.balance.balance import Balance
from fluxmesh.balance.carried import CarriedBalance
from fluxmesh.balance.energy import EnergyBalance
from fluxmesh.balance.losses import Loss
from fluxmesh.field.flow import Flow
from fluxmesh.job.shape import Shape
from fluxmesh.report.result import result_data
from fluxmesh.surface.surface import ControlSurface

__all__ = ["Outcome"]

if TYPE_CHECKING:
    from fluxmesh.assess.doubt.told import DoubtOfFigures
    from fluxmesh.assess.review import Doubt


@dataclass(frozen=True, eq=False)
class Outcome:
    """A job done.

    Attributes
    ----------
    title : str
        Title of the case.
    surface : ControlSurface
        The surface.
    flow : Flow
        The flow on it.
    balance : Balance
        Every law.
    verdict : Verdict
        Whether the numbers close.
    assumptions : tuple of str
        What the figures assume.
    comparison : Comparison or None
        A reported load beside ours.
    source : dict
        Names and hashes of the files that it came from.
    shape : Shape or None
        The surface with the arrays of its file; None without a case.
    doubts : tuple of Doubt or None
        What a review found; None where there was none.
    energy : EnergyBalance or None
        None where nothing tells the energy.
    carried : tuple of CarriedBalance
        One a scalar.
    losses : tuple of Loss
        Those that were asked for.
    doubt : DoubtOfFigures or None
        The doubt of every figure; None where it was not looked for.
    sharpened_reported : bool
        Whether the balance is that of quadratic patches.
    said : tuple of str
        Further notes: of the fluid's properties, say.
    """

    title: str
    surface: ControlSurface
    flow: Flow
    balance: Balance
    verdict: Verdict
    assumptions: tuple[str, ...]
    comparison: Comparison | None = None
    source: dict[str, Any] = field(default_factory=dict)
    shape: Shape | None = None
    doubts: tuple[Doubt, ...] | None = None
    energy: EnergyBalance | None = None
    carried: tuple[CarriedBalance, ...] = ()
    losses: tuple[Loss, ...] = ()
    doubt: DoubtOfFigures | None = None
    sharpened_reported: bool = False
    said: tuple[str, ...] = ()

    @property
    def notes(self) -> tuple[str, ...]:
        """What was mended, sampled or solved on the way, one sentence each."""
        return (*self.said, *self.surface.notes, *self.flow.notes)

    def picture_notes(self) -> tuple[str, ...]:
        """Return what must stand in a picture: verdict, moment of the reaction, assumptions."""
        said = [f"Verdict: the balance {verdict_words(self.verdict)}"]
        said += [f"DOUBT: {doubt.seen}" for doubt in self.doubts or ()]
        if self.balance.reaction is not None:
            turning = self.balance.reaction.wrench.moment
            least = 1e-12 * (self.balance.angular.size() + self.balance.momentum.size())
            moment = ", ".join(f"{x if abs(x) > least else 0.0:.4g}" for x in turning)
            known = bool(np.isfinite(turning).all())
            said.append(
                f"With the reaction at the anchor goes a moment of ({moment}) N m"
                if known
                else "The moment that goes with the reaction is not known"
            )
        return (*said, *self.assumptions)

    def _repr_html_(self) -> str:
        """Show all of it in a notebook."""
        from fluxmesh.report.notebook import outcome_html

        return outcome_html(
            self.title,
            self.surface,
            self.flow,
            self.balance,
            self.verdict,
            self.assumptions,
            notes=self.notes,
            doubts=[doubt.seen for doubt in self.doubts or ()],
        )

    def data(self) -> dict[str, Any]:
        """Return everything as plain data, the content of ``balance.json``."""
        data = result_data(
            self.balance,
            self.verdict,
            title=self.title,
            assumptions=self.assumptions,
            notes=self.notes,
            comparison=self.comparison,
            inputs=self.inputs(),
            doubts=self.doubts,
            energy=self.energy,
            carried=self.carried,
            losses=self.losses,
            sharpened=None if self.doubt is None else self.doubt.sharpened,
        )
        return data if self.doubt is None else self.doubt.beside(data, sharpened=self.sharpened_reported)

    def inputs(self) -> dict[str, Any]:
        """Return what the figures were computed from, SI units."""
        setting = self.balance.setting
        hardware = setting.hardware
        return {
            "density": self.flow.uniform_density(),
            "density_of_fluid_held": setting.fluid_density,
            "ambient_pressure": self.flow.ambient,
            "gravity": setting.gravity,
            "pressure": {"kind": self.flow.meaning.kind.value, "head": self.flow.meaning.head.value},
            "anchor": setting.anchor,
            "hardware": None if hardware is None else {"mass": hardware.mass, "centre": hardware.centre},
            "sampling": self.flow.sampling,
            **self.source,
        }
