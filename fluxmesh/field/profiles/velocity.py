"""The velocity of a supplied flow spread over a port."""

from __future__ import annotations

import math
from collections.abc import Mapping
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError
from fluxmesh.field.profiles.laminar import laminar_shape
from fluxmesh.field.profiles.options import DEFAULT_EXPONENT, ProfileOptions, ProfileShape, SpeedTable
from fluxmesh.field.profiles.port import PortPatch
from fluxmesh.field.profiles.power_law import power_law_shape
from fluxmesh.field.profiles.tabulated import tabulated_shape
from fluxmesh.field.profiles.uniform import uniform_shape

__all__ = ["PROFILES", "kinetic_energy_factor", "momentum_factor", "profile_velocity"]

PROFILES: Mapping[str, ProfileShape] = MappingProxyType(
    {
        "uniform": uniform_shape,
        "laminar": laminar_shape,
        "power-law": power_law_shape,
        "table": tabulated_shape,
    }
)
"""From the name of a profile to the function that shapes it."""


def profile_velocity(
    patch: PortPatch,
    kind: str,
    flow_rate: float | None,
    *,
    exponent: float | None = None,
    table: SpeedTable | None = None,
    outward: bool = True,
) -> NDArray[np.float64]:
    """Return the velocity at the samples of a port.

    Parameters
    ----------
    patch : PortPatch
        The port.
    kind : str
        A name of `PROFILES`.
    flow_rate : float or None
        Volume flow out of the fluid, m³/s, negative for an inlet. None leaves
        a table the flow of its own speeds.
    exponent : float, optional
        n of the power law; `DEFAULT_EXPONENT` by default.
    table : SpeedTable, optional
        For a profile from a table.
    outward : bool, optional
        Which way a table's own flow goes; a flow rate says it by its sign.

    Returns
    -------
    ndarray, shape (n_samples, 3), float64
        Along the port's mean normal, m/s. The sum of its products with
        ``patch.samples.area_vectors`` is the flow rate to round-off.

    Raises
    ------
    FieldError
        A name that is not known, an option that the profile does not take, a
        flow that is not finite or is missing, a profile that carries no flow,
        and what the profile itself finds wrong.
    """
    where = f"group '{patch.name}'"
    shape = PROFILES.get(kind)
    if shape is None:
        raise FieldError(f"the profile '{kind}' is not known", where, f"Allowed: {', '.join(PROFILES)}")
    for given, owner, option in ((exponent, "power-law", "an exponent"), (table, "table", "a table")):
        if given is not None and kind != owner:
            raise FieldError(f"the profile '{kind}' takes no {option.split()[1]}", where, f"'{owner}' takes {option}")
    if flow_rate is not None and not math.isfinite(flow_rate):
        raise FieldError(f"the flow rate is {flow_rate}", where, "Give a finite volume flow")
    if flow_rate is None and kind != "table":
        raise FieldError(f"the profile '{kind}' has no flow rate", where, "Give the flow of the port")
    speed = shape(patch, ProfileOptions(DEFAULT_EXPONENT if exponent is None else exponent, table))
    if flow_rate is None:
        return np.outer(speed if outward else -speed, patch.normal)
    through = patch.samples.area_vectors @ patch.normal
    # the exact sum: the scaled flow is then off by the rounding of the products alone
    carried = math.fsum(speed * through)
    if not carried > 1e-9 * float(speed.max()) * patch.area:
        raise FieldError(
            f"the profile '{kind}' carries no flow through the faces, so it cannot be scaled to one",
            where,
            "Give speeds above zero within the port",
        )
    return np.outer(speed * (flow_rate / carried), patch.normal)


def momentum_factor(patch: PortPatch, velocity: NDArray[np.float64]) -> float:
    """Return the momentum factor ``A ∫V_n² dA / (∫V_n dA)²``, summed over the samples.

    Parameters
    ----------
    patch : PortPatch
        The port; `V_n` is the velocity along its mean normal.
    velocity : ndarray, shape (n_samples, 3), float64
        m/s; its flow is not zero.

    Returns
    -------
    float
        1 for a uniform profile, 4/3 for developed laminar flow in a round pipe
        (White, Fluid Mechanics, ch. 3; from memory).
    """
    through, speed = _through(patch, velocity)
    return math.fsum(through) * math.fsum(through * speed**2) / math.fsum(through * speed) ** 2


def kinetic_energy_factor(patch: PortPatch, velocity: NDArray[np.float64]) -> float:
    """Return the kinetic-energy factor ``A² ∫V_n³ dA / (∫V_n dA)³``, summed over the samples.

    Parameters
    ----------
    patch : PortPatch
        The port; `V_n` is the velocity along its mean normal.
    velocity : ndarray, shape (n_samples, 3), float64
        m/s; its flow is not zero.

    Returns
    -------
    float
        1 for a uniform profile, 2 for developed laminar flow in a round pipe
        (White, Fluid Mechanics, ch. 3; from memory).
    """
    through, speed = _through(patch, velocity)
    return math.fsum(through) ** 2 * math.fsum(through * speed**3) / math.fsum(through * speed) ** 3


def _through(patch: PortPatch, velocity: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    return patch.samples.area_vectors @ patch.normal, velocity @ patch.normal
