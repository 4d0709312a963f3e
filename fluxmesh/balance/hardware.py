"""Load of the flow on the hardware, two independent ways, and the reaction at the anchor."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluxmesh.balance.momentum import Ledger
from fluxmesh.balance.setting import Setting
from fluxmesh.balance.weight import weight_wrench
from fluxmesh.balance.wrench import CentralAxis, Vector, Wrench, central_axis

__all__ = ["HardwareLoad", "Reaction", "anchor_reaction", "demanded", "hardware_load", "on_walls"]


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
        surface is open, a group that is no wall lacks data, or the rate of the
        momentum inside is not known. It holds the weight of the fluid. Its
        moment is NaN where only the torque about the axis of a turning surface
        is known.
    """

    from_walls: Wrench | None
    from_balance: Wrench | None

    def best(self) -> Wrench | None:
        """Return the load that the reaction rests on.

        That from the balance where there is one, but that from the walls where the
        balance does not tell all of the moment.
        """
        if self.from_balance is None:
            return self.from_walls
        whole = bool(np.isfinite(self.from_balance.moment).all())
        return self.from_balance if whole or self.from_walls is None else self.from_walls


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
        from_walls = Wrench(on_walls(momentum, walls), on_walls(angular, walls), at)
    from_balance = None
    others = ~walls
    known = setting.data.pressure[others].all() and setting.data.flux[setting.ports()].all()
    if setting.closed and known and momentum.known:
        from_balance = Wrench(demanded(momentum, others), demanded(angular, others), at)
    return HardwareLoad(from_walls, from_balance)


def on_walls(ledger: Ledger, walls: NDArray[np.bool_]) -> Vector:
    """Return what acts on the walls, shape (3,): pressure and viscous entries with the sign turned.

    Parameters
    ----------
    ledger : Ledger
        Linear or angular momentum.
    walls : ndarray of bool, shape (n_groups,)
        The hardware.
    """
    return -(ledger.pressure(walls) + ledger.viscous(walls))


def demanded(ledger: Ledger, others: NDArray[np.bool_]) -> Vector:
    """Return what the balance demands of the walls, shape (3,).

    Parameters
    ----------
    ledger : Ledger
        Linear or angular momentum.
    others : ndarray of bool, shape (n_groups,)
        All groups that are no hardware.
    """
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
        ``mass × acceleration of the hardware - (load + weight of the hardware)``; None
        when there is no load. Of a turning body the moment counts its mass at
        its centre; the products of inertia about that are not known.
    """
    flow = load.best()
    if flow is None:
        return None
    total = flow
    if setting.hardware is not None:
        mass, centre = setting.hardware.mass, np.asarray(setting.hardware.centre)
        pull = np.asarray(setting.gravity, dtype=np.float64)
        if setting.frame is not None:
            pull = pull - setting.frame.acceleration_at(centre)
        total = flow + weight_wrench(mass, centre, (pull[0], pull[1], pull[2]), flow.at)
    reaction = -total
    return Reaction(reaction, central_axis(reaction), "balance" if flow is load.from_balance else "walls")
