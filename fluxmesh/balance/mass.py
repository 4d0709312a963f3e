"""Conservation of mass over the surface."""

from __future__ import annotations

from dataclasses import dataclass
from math import fsum

import numpy as np
from numpy.typing import NDArray

from fluxmesh.integral.table import IntegralTable

__all__ = ["MassBalance", "mass_balance"]


@dataclass(frozen=True)
class MassBalance:
    """``d/dt ∫ρ dv + ∮ρ V·n dA = 0``.

    Attributes
    ----------
    inflow, outflow : float
        What enters and what leaves, both positive, kg/s. A group counts with its
        net flow, but an open group, which flow may pass either way, with both.
    storage : float
        Rate of the mass contained, kg/s.
    residual : float
        Storage plus outflow minus inflow, kg/s; zero when mass closes.
    relative : float or None
        Residual over the sum of the sizes of all entries; None without any flow.
    """

    inflow: float
    outflow: float
    storage: float
    residual: float
    relative: float | None


def mass_balance(table: IntegralTable, both_ways: NDArray[np.bool_], storage: float = 0.0) -> MassBalance:
    """Return the mass balance of a table.

    Parameters
    ----------
    table : IntegralTable
        The table.
    both_ways : ndarray of bool, shape (n_groups,)
        Groups that count with what enters and what leaves, not with their net flow.
    storage : float, optional
        Rate of the mass contained, kg/s.
    """
    flows = table.column("mass_flow")
    backward = table.column("reversed_mass_flow")
    entering = np.where(both_ways, backward, np.maximum(-flows, 0.0))
    leaving = np.where(both_ways, flows + backward, np.maximum(flows, 0.0))
    inflow, outflow = fsum(entering.tolist()), fsum(leaving.tolist())
    size = inflow + outflow + abs(storage)
    residual = fsum([*flows.tolist(), storage])
    return MassBalance(
        inflow=inflow,
        outflow=outflow,
        storage=storage,
        residual=residual,
        relative=float(np.abs(residual)) / size if size > 0 else None,
    )
