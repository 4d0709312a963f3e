"""What sampling from a volume or from scattered points contributes to the doubt."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.doubt.budget import Contribution
from fluxmesh.assess.doubt.figures import Figures
from fluxmesh.assess.doubt.levers import Levers
from fluxmesh.assess.doubt.model import BalanceModel

__all__ = ["SampledErrors", "sampling_contributions"]

Array = NDArray[np.float64]

_LEVERS: Final = {"velocity": "speed", "pressure": "pressure", "density": "density", "traction": "traction"}


@dataclass(frozen=True, eq=False)
class SampledErrors:
    """How far sampled fields may be off at each group.

    Attributes
    ----------
    by_quantity : mapping of str to ndarray, shape (n_groups,), float64
        Half widths: of pressure in Pa, of ``velocity``, ``density`` and ``traction`` as shares of what they are
        at the group; zero where a group is not sampled.
    """

    by_quantity: Mapping[str, Array]


def sampling_contributions(model: BalanceModel, figures: Figures, errors: SampledErrors) -> tuple[Contribution, ...]:
    """Return what errors of sampled fields do to the figures.

    An error is taken to be the same over all of a group, and the errors of the groups to add up at
    their worst: nothing tells how neighbouring points err together, and this is the safe side of
    both "independent" and "all alike", of which each is too small for some figures.

    Parameters
    ----------
    model : BalanceModel
        The balance.
    figures : Figures
        Its figures.
    errors : SampledErrors
        Half widths of the fields.

    Returns
    -------
    tuple of Contribution
        One a quantity.
    """
    groups = len(model.base.setting.groups)
    found = []
    for quantity, sizes in errors.by_quantity.items():
        if quantity not in _LEVERS or not sizes.any():
            continue
        width = np.zeros(figures.values.size)
        for k in np.flatnonzero(sizes):
            rest = Levers.at_rest((groups,))
            name = _LEVERS[quantity]
            lever = getattr(rest, name) + np.where(np.arange(groups) == k, sizes[k], 0.0)
            pulled = Levers(**{**vars(rest), name: lever})
            width += np.abs(figures.like(model.figures_with(pulled)) - figures.values)
        found.append(Contribution(f"sampling of the {quantity}", "sampling", width))
    return tuple(found)
