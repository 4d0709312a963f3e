"""The table that another frame of the exported velocity would have given, as far as the table tells."""

from __future__ import annotations

from dataclasses import replace
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.balance.setting import Setting
from fluxmesh.balance.wrench import Vector
from fluxmesh.field.contents import Contents
from fluxmesh.field.frame import Frame
from fluxmesh.integral.table import IntegralTable, column_slice, symmetric_index

__all__ = ["shifted_contents", "shifted_table"]

_EVEN: Final = 1e-6
_PAIRS: Final = ((0, 0), (1, 1), (2, 2), (1, 2), (0, 2), (0, 1))


def shifted_table(
    table: IntegralTable,
    setting: Setting,
    density: NDArray[np.float64],
    array: NDArray[np.bool_],
    sign: float,
    given: NDArray[np.bool_] | None = None,
) -> tuple[IntegralTable, bool]:
    """Add the velocity of the control surface to the exported one, or take it off.

    With ``v`` as in the table and ``W`` the velocity of the surface, the momentum flux of ``v + s W`` is
    ``∫ρ(v + sW)(v + sW)·n``. All of it is in the table but ``∫ρ v (W·n)``, for which the mean
    of the velocity over the group serves; its part along the normal of a plane group is exact, and so is all
    of it where the surface moves along itself (a surface of revolution about the axis).

    Parameters
    ----------
    table : IntegralTable
        The table.
    setting : Setting
        With the frame.
    density : ndarray, shape (n_groups,), float64
        Mean density of each group, kg/m³.
    array : ndarray of bool, shape (n_groups,)
        Groups with an exported velocity.
    sign : float
        +1 to add, -1 to take off.
    given : ndarray of bool, shape (n_groups,), optional
        Those of them whose mass flow is exported itself, and stays.

    Returns
    -------
    table : IntegralTable
        Flow columns that the laws use are changed; at walls nothing flows.
    exact : bool
        Whether moments are exact too.
    """
    frame = setting.frame
    assert frame is not None
    spin, here = frame.spin, frame.at(table.origin)
    values = table.values.copy()
    area, vector = table.column("area"), table.column("area_vector")
    normal = table.column("position_normal").reshape(-1, 3, 3)
    square = table.column("square_normal").reshape(-1, 6, 3)
    flow, first = table.column("mass_flow"), table.column("mass_flow_position")
    second = table.column("mass_flow_square")[:, [[0, 5, 4], [5, 1, 3], [4, 3, 2]]]
    inverse = np.divide(1.0, area, out=np.zeros_like(area), where=area > 0)[:, None]
    middle, mean = table.column("position") * inverse, table.column("velocity_area") * inverse
    # ∫ W·n, ∫ x_k W·n
    across = vector @ here + _turned(normal) @ spin
    lever = np.stack(
        [
            normal[:, k] @ here + _turned(np.stack([square[:, symmetric_index(k, m)] for m in range(3)], axis=1)) @ spin
            for k in range(3)
        ],
        axis=1,
    )
    carried = sign * density * across
    swept = across[:, None] * here + np.cross(spin, lever)  # ∫ W (W·n)
    mixed = density[:, None] * across[:, None] * mean  # ∫ρ v (W·n)
    flat = np.linalg.norm(vector, axis=1) > (1 - _EVEN) * area
    unit = vector * inverse
    along = (unit @ here) * flow + np.einsum("gk,gk->g", np.cross(unit, spin), first)
    mixed = np.where(flat[:, None], mixed + (along - np.einsum("gk,gk->g", mixed, unit))[:, None] * unit, mixed)
    own = flow[:, None] * here + np.cross(spin, first)  # ∫ρ W (v·n)
    force = sign * (mixed + own) + density[:, None] * swept
    turning = np.cross(first, here) + np.trace(second, axis1=1, axis2=2)[:, None] * spin - second @ spin
    moment = np.cross(middle, sign * mixed + density[:, None] * swept) + sign * turning
    if given is not None:
        stays = given[:, None]
        carried, across = np.where(given, 0.0, carried), np.where(given, 0.0, across)
        lever = np.where(stays, 0.0, lever)
        force, moment = np.where(stays, sign * own, force), np.where(stays, sign * turning, moment)
    # of the dynamic pressure, with the velocity of the surface in the middle of each group
    local = here + np.cross(spin, middle)
    more = density * (sign * np.einsum("gk,gk->g", mean, local) + np.einsum("gk,gk->g", local, local) / 2)
    ports = setting.ports()
    chosen = array & ports

    def add(name: str, more: Vector) -> None:
        values[:, column_slice(name)] += np.where(chosen[:, None], more, 0.0)

    add("mass_flow", carried[:, None])
    add("volume_flow", sign * across[:, None])
    add("momentum_flux", force)
    add("moment_of_momentum_flux", moment)
    add("mass_flow_position", sign * density[:, None] * lever)
    shares = np.stack([square[:, p] @ here + (middle[:, k] * middle[:, m]) * (across - vector @ here)
                       for p, (k, m) in enumerate(_PAIRS)], axis=1)  # fmt: skip
    add("mass_flow_square", sign * density[:, None] * shares)
    add("dynamic_pressure_force", -more[:, None] * vector)
    add("moment_of_dynamic_pressure", -more[:, None] * np.cross(middle, vector))
    add("dynamic_pressure_area", (more * area)[:, None])
    add("velocity_area", sign * (area[:, None] * here + np.cross(spin, table.column("position"))))
    for name in ("mass_flow", "volume_flow", "momentum_flux", "moment_of_momentum_flux", "mass_flow_position",
                 "mass_flow_square", "reversed_mass_flow"):  # fmt: skip
        values[array & ~ports, column_slice(name)] = 0.0
    speed = float(np.linalg.norm(here)) + float(np.linalg.norm(spin)) * float(area.sum()) ** 0.5
    slides = np.abs(lever[chosen]).max(initial=0.0) <= _EVEN * speed * float(area.sum()) ** 1.5
    return IntegralTable(values, table.origin), bool(slides)


def _turned(tensor: NDArray[np.float64]) -> NDArray[np.float64]:
    return np.stack([tensor[:, i, j] - tensor[:, j, i] for i, j in ((1, 2), (2, 0), (0, 1))], axis=1)


def shifted_contents(contents: Contents, frame: Frame, sign: float) -> Contents:
    """Add the velocity of the surface to that of what it holds, or take it off.

    Parameters
    ----------
    contents : Contents
        Integrals over the volume.
    frame : Frame
        The motion.
    sign : float
        +1 to add, -1 to take off.
    """
    if contents.mass is None or contents.mass_moment is None or contents.mass_inertia is None:
        return replace(contents, momentum=None, moment_of_velocity=None)
    if contents.momentum is None or contents.moment_of_velocity is None:
        return contents
    here, spin = frame.at(contents.origin), frame.spin
    turn = np.array([[0.0, -spin[2], spin[1]], [spin[2], 0.0, -spin[0]], [-spin[1], spin[0], 0.0]])
    momentum = contents.mass * here + turn @ contents.mass_moment
    moment = np.outer(contents.mass_moment, here) + contents.mass_inertia @ turn.T
    return replace(
        contents,
        momentum=contents.momentum + sign * momentum,
        moment_of_velocity=contents.moment_of_velocity + sign * moment,
    )
