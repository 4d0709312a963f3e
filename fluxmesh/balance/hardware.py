"""Load of the flow on the hardware, two independent ways, and the reaction at the anchor."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluxmesh.balance.momentum import Ledger
from fluxmesh.balance.setting import Setting
from fluxmesh.balance.weight import weight_wrench
from fluxmesh.balance.wrench import CentralAxis, Vector, Wrench, central_axis

__all__ = ["HardwareLoad", "Reaction", "anchor_reaction", "hardware_load"]


@dataclass(frozen=True, eq=False)
class HardwareLoad:
    """Load of the flow on the hardware (flow on hardware), about the anchor.

    Attributes
    ----------
    from_walls : Wrench or None
        Pressure and viscous force integrated over the walls, with the sign
        turned; None when walls carry no pressure, or there are none.
    from_balance : Wrench or None
        What the momentum balance over all other groups demands; None when the
        surface is open or a group that is no wall lacks data. It holds the
        weight of the fluid.
    """

    from_walls: Wrench | None
    from_balance: Wrench | None

    def best(self) -> Wrench | None:
        """Return the load that the reaction rests on: from the balance where there is one."""
        return self.from_balance if self.from_balance is not None else self.from_walls


@dataclass(frozen=True, eq=False)
class Reaction:
    """What the anchor must give (anchor on hardware).

    Attributes
    ----------
    wrench : Wrench
        Force and moment about the anchor.
    line_of_action : CentralAxis
        Its central axis.
    basis : str
        ``"balance"`` or ``"walls"``: which load it rests on.
    """

    wrench: Wrench
    line_of_action: CentralAxis
    basis: str


def hardware_load(momentum: Ledger, angular: Ledger, setting: Setting) -> HardwareLoad:
    """Return the load of the flow on the hardware.

    Parameters
    ----------
    momentum, angular : Ledger
        Linear momentum, and angular momentum about the anchor.
    setting : Setting
        Roles, and what is known where.

    Returns
    -------
    HardwareLoad
        From the walls ``-(pressure + viscous)`` there; from the balance
        ``pressure + viscous`` of all other groups plus weight minus flux minus
        storage. The two differ by the residual.
    """
    at = np.asarray(setting.anchor, dtype=np.float64)
    walls = setting.walls()
    from_walls = None
    if walls.any() and setting.data.pressure[walls].all():
        from_walls = Wrench(_walls(momentum, walls), _walls(angular, walls), at)
    from_balance = None
    others = ~walls
    known = setting.data.pressure[others].all() and setting.data.flux[setting.ports()].all()
    if setting.closed and known:
        from_balance = Wrench(_demand(momentum, others), _demand(angular, others), at)
    return HardwareLoad(from_walls, from_balance)


def _walls(ledger: Ledger, walls: NDArray[np.bool_]) -> Vector:
    return -(ledger.pressure(walls) + ledger.viscous(walls))


def _demand(ledger: Ledger, others: NDArray[np.bool_]) -> Vector:
    return ledger.pressure(others) + ledger.viscous(others) + ledger.weight - ledger.flux() - ledger.storage


def anchor_reaction(load: HardwareLoad, setting: Setting) -> Reaction | None:
    """Return the reaction at the anchor.

    Parameters
    ----------
    load : HardwareLoad
        Load of the flow on the hardware.
    setting : Setting
        Anchor, gravity and hardware.

    Returns
    -------
    Reaction or None
        ``-(load + weight of the hardware)``; None when there is no load.
    """
    flow = load.best()
    if flow is None:
        return None
    total = flow
    if setting.hardware is not None:
        total = flow + weight_wrench(
            setting.hardware.mass, np.asarray(setting.hardware.centre), setting.gravity, flow.at
        )
    reaction = -total
    return Reaction(reaction, central_axis(reaction), "balance" if load.from_balance is not None else "walls")
