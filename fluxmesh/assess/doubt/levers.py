"""How the table of integrals answers to changed inputs: multipliers and shifts of its parts, group by group.

Every column is a product of powers of density and speed, or linear in the pressure. So a density that is one number
over a group, a supplied flow, a uniform pressure, a restored head or a viscosity changes the table
by algebra that is exact, whatever the fields are, and never touches the faces again.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.integral.table import BLOCKS, IntegralTable, column_slice, symmetric_index

__all__ = ["CHANNELS", "HeadOf", "Levers", "Parts", "parts_of", "pulled"]

Array = NDArray[np.float64]

_FLOW_COLUMNS: Final = {
    "mass": ("mass_flow", "reversed_mass_flow", "mass_flow_position", "mass_flow_square"),
    "volume": ("volume_flow",),
    "momentum": ("momentum_flux", "moment_of_momentum_flux"),
    "kinetic": ("kinetic_energy_flux",),
    "normal": ("normal_momentum",),
    "speed": ("velocity_area", "speed_area"),
    "dynamic": ("dynamic_pressure_area", "dynamic_pressure_force", "moment_of_dynamic_pressure"),
    "dynamic_flow": ("dynamic_pressure_mass_flow",),
    "viscous_power": ("viscous_power",),
}

CHANNELS: Final = (
    *("fixed", "pressure", "head", "added", "traction", "density"),
    *_FLOW_COLUMNS,
    *(f"{of}_{by}" for of in ("pressure", "head", "added") for by in ("volume", "mass")),
)
"""Parts of the table that answer alike."""


@dataclass(frozen=True, eq=False)
class Levers:
    """What changes at each group, shape (..., n_groups): one table of levers, or one a draw.

    Attributes
    ----------
    density : ndarray
        Factor of the density.
    speed : ndarray
        Factor of the velocity relative to the surface.
    pressure : ndarray
        Added to the pressure, Pa.
    scale : ndarray
        Factor of the pressure as exported, without the restored head.
    head : ndarray
        Factor of the restored head.
    traction : ndarray
        Factor of the viscous traction.
    """

    density: Array
    speed: Array
    pressure: Array
    scale: Array
    head: Array
    traction: Array

    @staticmethod
    def at_rest(shape: tuple[int, ...]) -> Levers:
        """Return levers that change nothing.

        Parameters
        ----------
        shape : tuple of int
            (..., n_groups).
        """
        one = np.ones(shape)
        return Levers(one, one, np.zeros(shape), one, one, one)

    def multipliers(self, mass_given: NDArray[np.bool_]) -> dict[str, Array]:
        """Return the factor of every channel.

        Parameters
        ----------
        mass_given : ndarray of bool, shape (n_groups,)
            Groups whose mass flow is an array of its own, which density and speed do not change.

        Returns
        -------
        dict of str to ndarray, shape (..., n_groups)
            By the names of `CHANNELS`.
        """
        mass = np.where(mass_given, 1.0, self.density * self.speed)
        volume = np.where(mass_given, 1.0 / self.density, self.speed)
        dynamic = self.density * self.speed**2
        return {
            "fixed": np.ones_like(self.density),
            "pressure": self.scale,
            "head": self.head,
            "added": self.pressure,
            "traction": self.traction,
            "density": self.density,
            "mass": mass,
            "volume": volume,
            "momentum": mass * self.speed,
            "kinetic": mass * self.speed**2,
            "normal": mass * volume,
            "speed": self.speed,
            "dynamic": dynamic,
            "dynamic_flow": dynamic * mass,
            "viscous_power": self.traction * self.speed,
            "pressure_volume": self.scale * volume,
            "pressure_mass": self.scale * mass,
            "head_volume": self.head * volume,
            "head_mass": self.head * mass,
            "added_volume": self.pressure * volume,
            "added_mass": self.pressure * mass,
        }


@dataclass(frozen=True, eq=False)
class HeadOf:
    """The hydrostatic head that was put back into an exported pressure, ``rho g·(x - datum)``.

    Attributes
    ----------
    density : float
        kg/m³.
    gravity, datum : tuple of 3 floats
        m/s² and m.
    groups : ndarray of bool, shape (n_groups,)
        Groups whose pressure has it.
    """

    density: float
    gravity: tuple[float, float, float]
    datum: tuple[float, float, float]
    groups: NDArray[np.bool_]


@dataclass(frozen=True, eq=False)
class Parts:
    """A table cut into what answers alike.

    Attributes
    ----------
    channels : dict of str to ndarray, shape (n_groups, WIDTH), float64
        Their sum is the table, but for ``added`` and its products, which count a
        pressure of 1 Pa added.
    origin : ndarray, shape (3,), float64
        Of the table.
    mass_given : ndarray of bool, shape (n_groups,)
        As in `Levers.multipliers`.
    """

    channels: dict[str, Array]
    origin: Array
    mass_given: NDArray[np.bool_]


def parts_of(table: IntegralTable, *, head: HeadOf | None = None, mass_given: NDArray[np.bool_] | None = None) -> Parts:
    """Cut a table into what answers alike.

    Parameters
    ----------
    table : IntegralTable
        The table.
    head : HeadOf, optional
        The head in its pressures; none by default.
    mass_given : ndarray of bool, shape (n_groups,), optional
        Groups whose mass flow is an array of its own; none by default.
    """
    values = table.values
    groups = values.shape[0]
    given = np.zeros(groups, np.bool_) if mass_given is None else mass_given
    channels = {name: np.zeros_like(values) for name in CHANNELS}
    channels["fixed"][:, BLOCKS["geometry"]] = values[:, BLOCKS["geometry"]]
    channels["traction"][:, BLOCKS["traction"]] = values[:, BLOCKS["traction"]]
    channels["density"][:, BLOCKS["density"]] = values[:, BLOCKS["density"]]
    for name, columns in _FLOW_COLUMNS.items():
        for column in columns:
            channels[name][:, column_slice(column)] = values[:, column_slice(column)]
    zero = np.zeros((groups, 3))
    _of_pressure(channels, table, "added", np.ones(groups), zero, 1.0)
    if head is not None:
        slope = np.where(head.groups[:, None], head.density * np.asarray(head.gravity), zero)
        level = slope @ (table.origin - np.asarray(head.datum))
        _of_pressure(channels, table, "head", level, slope, head.density)
    whole = channels["pressure"]
    whole[:, BLOCKS["pressure"]] = values[:, BLOCKS["pressure"]] - channels["head"][:, BLOCKS["pressure"]]
    for name, column in (("volume", "pressure_volume_flow"), ("mass", "pressure_mass_flow")):
        place = column_slice(column)
        channels[f"pressure_{name}"][:, place] = values[:, place] - channels[f"head_{name}"][:, place]
    return Parts(channels, table.origin, given)


def _of_pressure(
    channels: dict[str, Array], table: IntegralTable, name: str, level: Array, slope: Array, density: float
) -> None:
    """Fill the columns of a pressure ``level + slope · x``, x about the origin of the table."""
    normal = table.column("position_normal").reshape(-1, 3, 3)
    square = table.column("square_normal").reshape(-1, 6, 3)
    order = [[symmetric_index(k, m) for m in range(3)] for k in range(3)]
    tensor = square[:, order]  # ∫x_k x_m n_j
    area = table.column("area_vector")
    force = -(level[:, None] * area + np.einsum("gi,gij->gj", slope, normal))
    # ∫x_k n_j p, whose antisymmetric part is the moment
    arm = level[:, None, None] * normal + np.einsum("gi,gikj->gkj", slope, tensor)
    moment = -np.stack([arm[:, 1, 2] - arm[:, 2, 1], arm[:, 2, 0] - arm[:, 0, 2], arm[:, 0, 1] - arm[:, 1, 0]], axis=1)
    plain = channels[name]
    plain[:, column_slice("pressure_force")] = force
    plain[:, column_slice("moment_of_pressure")] = moment
    plain[:, column_slice("pressure_area")] = (
        level * table.column("area") + np.einsum("gi,gi->g", slope, table.column("position"))
    )[:, None]
    through = np.einsum("gi,gi->g", slope, table.column("mass_flow_position"))
    mass = level * table.column("mass_flow") + through
    volume = level * table.column("volume_flow") + through / density  # only a uniform density has a head
    channels[f"{name}_mass"][:, column_slice("pressure_mass_flow")] = mass[:, None]
    channels[f"{name}_volume"][:, column_slice("pressure_volume_flow")] = volume[:, None]


def pulled(parts: Parts, levers: Levers) -> IntegralTable:
    """Return the table that one set of levers makes.

    Parameters
    ----------
    parts : Parts
        The table, cut.
    levers : Levers
        Shape (n_groups,).

    Returns
    -------
    IntegralTable
        Exactly what the changed fields would give, to round-off.
    """
    factors = levers.multipliers(parts.mass_given)
    values = np.zeros_like(parts.channels["fixed"])
    for name, part in parts.channels.items():
        values += factors[name][:, None] * part
    turned = factors["mass"] < 0.0
    if turned.any():
        # where the flow turns over, what went back goes forth
        back, forth = column_slice("reversed_mass_flow"), column_slice("mass_flow")
        values[turned, back] = -values[turned, back] - values[turned, forth]
        speed = column_slice("speed_area")
        values[turned, speed] = np.abs(values[turned, speed])
    return IntegralTable(values, parts.origin)
