"""Slips of the frame in which velocities were exported: absolute read as relative, or no frame where there is one."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.causes.change import Change
from fluxmesh.assess.causes.entries import Entries, entries_of
from fluxmesh.assess.causes.facts import Source
from fluxmesh.assess.causes.residuals import Residuals
from fluxmesh.assess.causes.shifted import shifted_contents, shifted_table
from fluxmesh.assess.causes.suspect import COST, Suspect, lines
from fluxmesh.balance.balance import Balance, balance_table
from fluxmesh.balance.frame import frame_terms, held_in
from fluxmesh.balance.momentum import momentum_ledger
from fluxmesh.field.frame import Frame
from fluxmesh.integral.table import IntegralTable

__all__ = ["relative_velocity"]

_AXES: Final = ((1.0, 0.0, 0.0), (0.0, 1.0, 0.0), (0.0, 0.0, 1.0))
_FASTEST: Final = 30.0  # speed of the rim, or of the surface, over that of the flow, at most


def relative_velocity(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Suspect velocities in another frame than they were taken to be.

    Parameters
    ----------
    entries : Entries
        The laws.
    now : Residuals
        Residuals as they are.

    Yields
    ------
    Suspect
        With the motion that the case gives, or, where it gives none, with one that is fitted: a rotation
        about an axis through the origin, or a steady velocity.
    """
    setting = entries.balance.setting
    if not entries.facts.exported().any():
        return
    if setting.frame is None:
        yield from _unsaid_rotation(entries, now)
        yield from _unsaid_velocity(entries, now)
        return
    absolute = entries.facts.velocity_frame == "absolute"
    # relative velocities read as absolute had that of the surface taken off, and get it back
    sign = 1.0 if absolute else -1.0
    given = np.array([source is Source.MASS_FLUX for source in entries.facts.flow])
    table, exact = shifted_table(entries.balance.table, setting, entries.density, entries.facts.exported(), sign, given)
    exact = exact or bool((given | ~entries.facts.exported())[setting.ports()].all())
    contents = entries.balance.contents
    if contents is not None:
        contents = shifted_contents(contents, setting.frame, sign)
    other = balance_table(table, setting, storage=entries.balance.storage, contents=contents)
    yield Suspect(
        "relative-velocity",
        Change(),
        "the exported velocity is relative to the moving surface, and was taken as absolute"
        if absolute
        else "the exported velocity is absolute, and was taken as relative to the moving surface",
        lines(("flow.velocity.frame", "relative" if absolute else "absolute")),
        COST["classic"],
        entries=replace(
            entries_of(other, replace(entries.facts, velocity_frame="relative" if absolute else "absolute")),
            laws=entries.laws,
        ),
        judges_angular=exact,
    )


def _residual(balance: Balance, table: IntegralTable, frame: Frame) -> NDArray[np.float64]:
    """The residual of linear momentum of another table and frame."""
    setting = replace(balance.setting, frame=frame)
    about = np.asarray(setting.anchor, dtype=np.float64)
    held = held_in(table, setting, balance.fluid, balance.storage, balance.contents, about)
    terms = frame_terms(table, frame, held, balance.storage)
    return momentum_ledger(table, balance.momentum.weight, balance.storage.momentum, terms).residual()


def _speed(entries: Entries) -> float:
    table = entries.balance.table
    area = float(entries.area[table.column("speed_area") > 0].sum())
    return float(table.total("speed_area")) / area if area > 0 else 0.0


def _unsaid_rotation(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Relative velocities on a surface that turns, in a case without a frame: the rate is fitted."""
    balance = entries.balance
    size = float(entries.area.sum()) ** 0.5
    speed = _speed(entries)
    if not entries.laws.linear or speed == 0.0 or entries.open:
        return
    weights = 1.0 / now.sizes[0, :1]
    for axis in _AXES:
        unit = speed / size
        rows = []
        for turns in (-1.0, 1.0):
            residual = _residual(balance, balance.table, Frame(rate=turns * unit, axis=axis))
            if not np.isfinite(residual).all():
                return
            rows.append(residual * weights)
        base = balance.momentum.residual() * weights
        odd, even = (rows[1] - rows[0]) / 2, (rows[1] + rows[0]) / 2 - base
        rate = _least(base, odd, even)
        if rate is None or abs(rate) > _FASTEST:
            continue
        frame = Frame(rate=rate * unit, axis=axis)
        turning = balance_table(balance.table, replace(balance.setting, frame=frame), storage=balance.storage)
        facts = replace(entries.facts, velocity_frame="relative")
        yield Suspect(
            "relative-velocity",
            Change(),
            f"the surface turns at {frame.rate:.4g} rad/s about the {'xyz'[_AXES.index(axis)]} axis, and the exported "
            "velocity is relative to it",
            lines(
                ("frame.rotation", {"rate": f"{frame.rate:.6g} rad/s", "axis": list(axis)}),
                ("flow.velocity.frame", "relative"),
            ),
            COST["rare"],
            entries=entries_of(turning, facts, encloses_hardware=False),
            directions=np.zeros((1, 10)),
            alone=True,
        )


def _least(base: NDArray[np.float64], odd: NDArray[np.float64], even: NDArray[np.float64]) -> float | None:
    """Where ``|base + odd w + even w²|²`` is least; None where it does not depend on w."""
    polynomial = np.array(
        [even @ even, 2 * odd @ even, odd @ odd + 2 * base @ even, 2 * base @ odd, base @ base], dtype=np.float64
    )
    if not np.abs(polynomial[:4]).max() > 1e-12 * polynomial[4]:
        return None
    roots = np.roots(np.polyder(polynomial))
    real = roots[np.abs(roots.imag) < 1e-6 * (1 + np.abs(roots.real))].real
    real = real[real != 0.0]
    if real.size == 0:
        return None
    best = float(real[np.argmin(np.polyval(polynomial, real))])
    return best if np.polyval(polynomial, best) < 0.3 * polynomial[4] else None


def _unsaid_velocity(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Absolute velocities of a flow that is steady only as seen from a moving surface: its velocity is fitted."""
    balance, array = entries.balance, np.array([source is Source.ARRAY for source in entries.facts.flow])
    through = entries.mass_size > 0
    speed = _speed(entries)
    if not entries.laws.linear or entries.open or speed == 0.0 or not (array & entries.flat())[through].all():
        return
    still = now.wrench[0, :3]
    columns = []
    for axis in np.eye(3):
        # mass closes as well without the frame, so the residual is linear in the velocity
        moved = Frame(velocity=(float(speed * axis[0]), float(speed * axis[1]), float(speed * axis[2])))
        table, _ = shifted_table(balance.table, replace(balance.setting, frame=moved), entries.density, array, -1.0)
        columns.append(_residual(balance, table, moved) - still)
    matrix = np.stack(columns, axis=1)
    found, *_ = np.linalg.lstsq(matrix, -still, rcond=1e-6)
    velocity = speed * found
    fast = float(np.linalg.norm(found))
    if not 1e-3 < fast < _FASTEST:
        return
    frame = Frame(velocity=(float(velocity[0]), float(velocity[1]), float(velocity[2])))
    setting = replace(balance.setting, frame=frame)
    table, _ = shifted_table(balance.table, setting, entries.density, array, -1.0)
    other = balance_table(table, setting, storage=balance.storage)
    written = [float(f"{x:.4g}") for x in velocity]
    yield Suspect(
        "relative-velocity",
        Change(),
        f"the surface moves at ({', '.join(f'{x:g}' for x in written)}) m/s, and the exported velocity is absolute",
        lines(("frame.velocity", written)),
        COST["rare"],
        entries=replace(entries_of(other, entries.facts), laws=entries.laws),
        directions=np.zeros((3, 10)),
        judges_angular=False,
        alone=True,
    )
