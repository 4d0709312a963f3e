"""What a run prints of a control surface that moves, and of what is stored."""

from __future__ import annotations

import numpy as np

from fluxmesh.balance.balance import Balance
from fluxmesh.report.tables import figure, place, row

__all__ = ["motion_lines"]

_BASES = {
    "given": "as the case gives it",
    "snapshots": "from the snapshots of the flow inside",
    "surface": "from the surfaces alone, for a fluid of one density",
}


def motion_lines(balance: Balance) -> list[str]:
    """Return how the surface moves, what the volume stores, and what moving hardware gains.

    Parameters
    ----------
    balance : Balance
        The balance.
    """
    return [*_frame(balance), *_storage(balance), *_power(balance)]


def _frame(balance: Balance) -> list[str]:
    frame = balance.setting.frame
    if frame is None:
        return []
    parts = []
    if any(frame.velocity):
        parts.append(f"moves at {row(np.asarray(frame.velocity))} m/s")
    if any(frame.acceleration):
        parts.append(f"accelerates at {row(np.asarray(frame.acceleration))} m/s²")
    if frame.turns:
        parts.append(
            f"turns at {figure(frame.rate)} rad/s ({figure(frame.rate * 30 / np.pi)} rpm) about "
            f"{row(np.asarray(frame.axis))} through {place(np.asarray(frame.through))} m"
        )
    return [
        f"The control surface {' and '.join(parts)}; mass flows are those through it, "
        "momentum is of the absolute velocity."
    ]


def _storage(balance: Balance) -> list[str]:
    rates = balance.storage
    lines = [f"Storage: {note}." for note in rates.notes]
    if rates.mass != 0.0 or np.any(rates.momentum) or np.any(rates.angular_momentum):
        lines.append(
            f"What the volume holds changes, {_BASES.get(rates.basis, rates.basis)}: "
            f"mass by {figure(rates.mass)} kg/s, momentum seen from the surface by {row(rates.momentum)} N."
        )
    return lines


def _power(balance: Balance) -> list[str]:
    power = balance.power
    if power is None:
        return []
    lines = []
    if power.torque_from_walls is not None or power.torque_from_balance is not None:
        lines.append(
            f"Torque of the flow on the hardware about the axis: {figure(power.torque_from_balance)} N m from the "
            f"balance, {figure(power.torque_from_walls)} N m from the walls."
        )
    lines.append(
        f"Power that the flow gives to the moving hardware: {figure(power.from_balance)} W from the balance, "
        f"{figure(power.from_walls)} W from the walls (negative: the hardware drives the flow)."
    )
    return lines
