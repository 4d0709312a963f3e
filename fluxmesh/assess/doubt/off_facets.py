"""How far fields on facets may be from what they are on the bent surface through the corners of the facets."""

from __future__ import annotations

from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.integral.table import BLOCKS, IntegralTable, column_slice

__all__ = ["off_facets"]

Array = NDArray[np.float64]

_PLANE: Final = 1e-6  # relative lack of an area vector that is round-off in a plane group


def off_facets(flat: IntegralTable, curved: IntegralTable) -> IntegralTable:
    """Return a table on the facets, with fields as they vary over the bent surface.

    The geometry is that of the facets, and what uniform fields with the means of each group would make of
    the bent surface instead of the facets is taken out. What is left, compared with the table of the facets, has the
    size of the sagitta times a gradient: that of what the values at the corners of a bent surface cannot tell.

    Parameters
    ----------
    flat, curved : IntegralTable
        Sharpened, with the facets as they are, and bent.

    Returns
    -------
    IntegralTable
        Plane groups as in `flat`: over a plane the corners tell all.
    """
    values = curved.values.copy()
    values[:, BLOCKS["geometry"]] = flat.values[:, BLOCKS["geometry"]]
    for name, here, there in zip(_EVEN, _even_fields(flat, curved), _even_fields(curved, curved), strict=True):
        place = column_slice(name)
        values[:, place] += (here - there).reshape(len(values), -1)
    area = flat.column("area")
    plane = np.linalg.norm(flat.column("area_vector"), axis=1) >= (1.0 - _PLANE) * area
    values[plane] = flat.values[plane]
    return IntegralTable(values, flat.origin)


_EVEN: Final = (
    "pressure_force", "moment_of_pressure", "pressure_area", "mass_flow", "volume_flow", "momentum_flux",
    "moment_of_momentum_flux", "kinetic_energy_flux", "mass_flow_position",
)  # fmt: skip


def _even_fields(shape: IntegralTable, means: IntegralTable) -> tuple[Array, ...]:
    """What the mean fields of each group of one table make of the geometry of another, in the order of `_EVEN`."""
    area = means.column("area")
    over = np.divide(1.0, area, out=np.zeros(area.size), where=area > 0.0)
    pressure, density = over * means.column("pressure_area"), over * means.column("density_area")
    speed = over[:, None] * means.column("velocity_area")
    vector, arm = shape.column("area_vector"), shape.column("position_normal").reshape(-1, 3, 3)
    twist = np.stack([arm[:, 1, 2] - arm[:, 2, 1], arm[:, 2, 0] - arm[:, 0, 2], arm[:, 0, 1] - arm[:, 1, 0]], axis=1)
    volume = (vector * speed).sum(axis=1)
    mass = density * volume
    carried = density[:, None] * np.einsum("gij,gj->gi", arm, speed)
    return (
        -pressure[:, None] * vector,
        -pressure[:, None] * twist,
        pressure * shape.column("area"),
        mass,
        volume,
        mass[:, None] * speed,
        np.cross(carried, speed),
        mass * (speed**2).sum(axis=1) / 2,
        carried,
    )
