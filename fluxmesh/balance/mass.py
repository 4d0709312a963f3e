"""Conservation of mass over the surface."""

from __future__ import annotations

from dataclasses import dataclass
from math import fsum

import numpy as np

from fluxmesh.integral.table import IntegralTable

__all__ = ["MassBalance", "mass_balance"]


@dataclass(frozen=True)
class MassBalance:
    """``d/dt ∫ρ dv + ∮ρ V·n dA = 0``.

    Attributes
    ----------
    inflow, outflow : float
        Sums over the groups that mass enters and leaves by, both positive, kg/s.
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


def mass_balance(table: IntegralTable, storage: float = 0.0) -> MassBalance:
    """Return the mass balance of a table.

    Parameters
    ----------
    table : IntegralTable
        The table.
    storage : float, optional
        Rate of the mass contained, kg/s.
    """
    flows = table.column("mass_flow")
    entries = [*flows.tolist(), storage]
    size = fsum(abs(entry) for entry in entries)
    residual = fsum(entries)
    return MassBalance(
        inflow=-fsum(flow for flow in flows.tolist() if flow < 0),
        outflow=fsum(flow for flow in flows.tolist() if flow > 0),
        storage=storage,
        residual=residual,
        relative=float(np.abs(residual)) / size if size > 0 else None,
    )
