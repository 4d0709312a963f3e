"""Conservation of scalars that the flow carries: ``d/dt ∫ρφ dv + ∮ρφ Vr·n dA = source``.

For a scalar per volume the density is left out. Only what the flow carries is counted:
what diffuses through a port is not known.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import fsum, isfinite
from typing import Final

import numpy as np

from fluxmesh.balance.setting import Setting
from fluxmesh.balance.storage import Storage
from fluxmesh.balance.wrench import Vector
from fluxmesh.field.scalars import ScalarFlux
from fluxmesh.integral.table import IntegralTable

__all__ = ["WITHOUT_DIFFUSION", "CarriedBalance", "carried_balance"]

WITHOUT_DIFFUSION: Final = "Only what the flow carries is counted: diffusion through the ports is not"
"""What every balance of a carried scalar leaves out."""


@dataclass(frozen=True, eq=False)
class CarriedBalance:
    """The balance of one scalar; in its own unit a second.

    ``storage + flux = source``.

    Attributes
    ----------
    name : str
        What it is.
    per : {"mass", "volume"}
        Whether the scalar is an amount a mass or an amount a volume.
    unit : str
        Unit of the amount, as the case says it.
    group_flux : ndarray, shape (n_groups,), float64
        Flux OUT through each port; zero where it is not known.
    group_mean : ndarray, shape (n_groups,), float64
        Mean of the scalar over what passes each port; NaN where nothing does on balance.
    inflow, outflow : float
        Sums of the fluxes that enter and that leave, both positive.
    storage : float or None
        Rate of the amount inside; None when it is not known.
    source : float
        Amount a second that arises inside, as given.
    residual : float or None
        Left side minus right side; None when something is not known.
    relative : float or None
        Residual over the sum of the sizes of all entries; None where there is no
        residual, or no entry.
    unknown : tuple of str
        What is missing.
    """

    name: str
    per: str
    unit: str
    group_flux: Vector
    group_mean: Vector
    inflow: float
    outflow: float
    storage: float | None
    source: float
    residual: float | None
    relative: float | None
    unknown: tuple[str, ...]


def carried_balance(
    table: IntegralTable,
    setting: Setting,
    scalar: ScalarFlux,
    *,
    per: str = "mass",
    unit: str = "",
    source: float = 0.0,
    storage: Storage | None = None,
) -> CarriedBalance:
    """Return the balance of a scalar that the flow carries.

    Parameters
    ----------
    table : IntegralTable
        The table, for what passes each group.
    setting : Setting
        Groups, and what is known where.
    scalar : ScalarFlux
        Its integrals.
    per : {"mass", "volume"}, optional
        Whether it is an amount a mass or an amount a volume.
    unit : str, optional
        Unit of the amount, for print.
    source : float, optional
        Amount a second that arises inside.
    storage : Storage, optional
        Rates of what the volume holds; steady by default.

    Returns
    -------
    CarriedBalance
        With a residual where all ports that something passes know the scalar.
    """
    ports, data = setting.ports(), setting.data
    flows = table.column("mass_flow" if per == "mass" else "volume_flow")
    through = table.column("mass_flow") + 2 * table.column("reversed_mass_flow")
    still = data.flux & (through == 0.0)
    flux = np.where(ports, scalar.mass_flow if per == "mass" else scalar.volume_flow, 0.0)
    unknown = []
    if not setting.closed:
        unknown.append("the surface is open")
    for lacking, what in ((ports & ~data.flux, "flow"), (ports & data.flux & ~still & ~scalar.known, scalar.name)):
        names = [group.name for group, one in zip(setting.groups, lacking) if one]
        if names:
            unknown.append(f"no {what} is known at {', '.join(names)}")
    stored = 0.0 if storage is None else storage.carried.get(scalar.name, float("nan"))
    if not isfinite(stored):
        unknown.append("the rate of the amount inside is not known")
    inflow, outflow = fsum(np.maximum(-flux, 0.0).tolist()), fsum(np.maximum(flux, 0.0).tolist())
    residual = fsum([*flux.tolist(), stored, -source]) if not unknown else None
    size = inflow + outflow + abs(stored) + abs(source)
    net = scalar.known & (np.abs(table.column("mass_flow")) > 0.01 * through)
    return CarriedBalance(
        name=scalar.name,
        per=per,
        unit=unit,
        group_flux=flux,
        group_mean=np.divide(flux, flows, out=np.full(flux.size, np.nan), where=net & (flows != 0.0)),
        inflow=inflow,
        outflow=outflow,
        storage=stored if isfinite(stored) else None,
        source=source,
        residual=residual,
        relative=abs(residual) / size if residual is not None and size > 0.0 else None,
        unknown=tuple(unknown),
    )
