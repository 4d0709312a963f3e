"""Power and torque that the flow gives to hardware that moves."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fluxmesh.balance.hardware import HardwareLoad, demanded, on_walls
from fluxmesh.balance.momentum import Ledger
from fluxmesh.balance.setting import Setting

__all__ = ["Power", "delivered_power"]


@dataclass(frozen=True)
class Power:
    """What the flow gives to moving hardware; negative where the hardware drives the flow.

    Attributes
    ----------
    from_walls, from_balance : float or None
        ``F·U + T Ω`` with the force and torque of the flow on the hardware, W; None
        where that load is not known.
    torque_from_walls, torque_from_balance : float or None
        About the axis, by the right-hand rule, N m; None without rotation.
    """

    from_walls: float | None
    from_balance: float | None
    torque_from_walls: float | None
    torque_from_balance: float | None


def delivered_power(load: HardwareLoad, axial: Ledger | None, setting: Setting) -> Power | None:
    """Return power and torque on the hardware.

    Parameters
    ----------
    load : HardwareLoad
        Flow on hardware.
    axial : Ledger or None
        Angular momentum about the axis; None where the surface does not turn.
    setting : Setting
        With the frame.

    Returns
    -------
    Power or None
        None where the surface does not move. About the axis this is Euler's
        equation of turbomachines.
    """
    frame = setting.frame
    if frame is None or not (frame.turns or any(frame.velocity)):
        return None
    drift, axis = np.asarray(frame.velocity, dtype=np.float64), np.asarray(frame.axis, dtype=np.float64)
    walls = setting.walls()
    torques: list[float | None] = [None, None]
    if axial is not None:
        torques[0] = float(on_walls(axial, walls) @ axis) if load.from_walls is not None else None
        torques[1] = float(demanded(axial, ~walls) @ axis) if load.from_balance is not None and axial.known else None
        if load.from_balance is None and axial.known and _torque_known(setting):
            torques[1] = float(demanded(axial, ~walls) @ axis)
    powers: list[float | None] = []
    for wrench, torque in zip((load.from_walls, load.from_balance), torques):
        if frame.turns:
            moving = bool(drift.any())
            known = torque is not None and (wrench is not None or not moving)
            power = None if not known or torque is None else torque * frame.rate
            if power is not None and moving and wrench is not None:
                power += float(wrench.force @ drift)
        else:
            power = None if wrench is None else float(wrench.force @ drift)
        powers.append(power)
    return Power(powers[0], powers[1], torques[0], torques[1])


def _torque_known(setting: Setting) -> bool:
    """Whether the torque is known where the force is not: pressure and flow at all groups but walls."""
    others = ~setting.walls()
    return bool(setting.closed and setting.data.pressure[others].all() and setting.data.flux[setting.ports()].all())
