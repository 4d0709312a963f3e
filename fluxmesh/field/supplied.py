"""Supplied port data: a uniform velocity that carries the stated flow."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError, GroupError
from fluxmesh.surface.surface import Role

__all__ = ["outward_speed", "require_direction", "uniform_velocity"]


_ROUNDOFF = 1e-9
"""Share of the area of a group below which the sum of its area vectors is round-off."""


def _axis(name: str, area_vector: NDArray[np.float64], whole: float) -> tuple[float, NDArray[np.float64]]:
    size = float(np.linalg.norm(area_vector))
    if not size > _ROUNDOFF * whole:
        raise GroupError(
            "the faces enclose no net area, so a supplied flow has no direction",
            where=f"group '{name}'",
            remedy="Give the velocity as a vector",
        )
    return size, area_vector / size


def outward_speed(
    role: Role,
    *,
    flow_rate: float | None,
    mass_flow: float | None,
    speed: float | None,
    density: float | None,
    area: float,
) -> float:
    """Return the mean speed along the outward normal that a supplied flow means.

    Parameters
    ----------
    role : Role
        For an inlet the flow enters, else it leaves where it is positive.
    flow_rate, mass_flow, speed : float or None
        One of them: m³/s, kg/s, m/s.
    density : float or None
        kg/m³; needed for a mass flow.
    area : float
        Size of the group's area vector, m².

    Returns
    -------
    float
        m/s, positive out of the fluid.

    Raises
    ------
    FieldError
        A mass flow without a density.
    """
    if flow_rate is not None:
        size = flow_rate / area
    elif mass_flow is not None:
        if density is None:
            raise FieldError(
                "a mass flow is supplied, but no density", remedy="Give fluid.density or the group's density"
            )
        size = mass_flow / (density * area)
    else:
        size = speed or 0.0
    return -size if role is Role.INLET else size


def uniform_velocity(
    name: str,
    role: Role,
    area_vector: NDArray[np.float64],
    *,
    flow_rate: float | None = None,
    mass_flow: float | None = None,
    speed: float | None = None,
    density: float | None = None,
    whole: float = 0.0,
) -> tuple[float, float, float]:
    """Return the uniform velocity of a port with a supplied flow.

    Parameters
    ----------
    name : str
        Group name, for messages.
    role : Role
        Inlet, outlet or open.
    area_vector : ndarray, shape (3,), float64
        Sum of ``n A`` over the group, m².
    flow_rate, mass_flow, speed : float, optional
        One of them: m³/s, kg/s, m/s.
    density : float, optional
        kg/m³.
    whole : float, optional
        Sum of the areas of the group's faces, m²: an area vector below 1e-9 of it is round-off.

    Returns
    -------
    tuple of 3 floats
        Velocity along the mean normal, m/s; through the faces it carries the
        supplied flow exactly.

    Raises
    ------
    GroupError
        Faces whose area vectors cancel, to round-off of `whole`.
    FieldError
        A mass flow without a density.
    """
    area, normal = _axis(name, area_vector, whole)
    out = outward_speed(role, flow_rate=flow_rate, mass_flow=mass_flow, speed=speed, density=density, area=area)
    vector = out * normal
    return float(vector[0]), float(vector[1]), float(vector[2])


def require_direction(
    name: str, role: Role, area_vector: NDArray[np.float64], velocity: tuple[float, float, float]
) -> None:
    """Raise if a supplied velocity goes against the role of its group.

    Parameters
    ----------
    name : str
        Group name.
    role : Role
        Its role.
    area_vector : ndarray, shape (3,), float64
        Sum of ``n A`` over the group, m².
    velocity : tuple of 3 floats
        m/s.

    Raises
    ------
    FieldError
        An inlet whose flow leaves, or an outlet whose flow enters.
    """
    through = float(np.asarray(velocity) @ area_vector)
    if role is Role.INLET and through > 0.0:
        raise FieldError(
            f"it is an inlet, but its supplied velocity leaves the volume ({through:.4g} m³/s outward)",
            where=f"group '{name}'",
            remedy="Turn the velocity round, or make the group an outlet",
        )
    if role is Role.OUTLET and through < 0.0:
        raise FieldError(
            f"it is an outlet, but its supplied velocity enters the volume ({-through:.4g} m³/s inward)",
            where=f"group '{name}'",
            remedy="Turn the velocity round, or make the group an inlet",
        )
