"""How the levers of a table follow from the numbers of a case, for one set of numbers or for many draws of them.

A number that serves in several places, such as the density of the fluid, is one input: what
it moves, it moves everywhere at once.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.doubt.levers import Levers

__all__ = ["Given", "GroupRecipe", "Moved", "Recipe"]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Given:
    """A number of the case.

    Attributes
    ----------
    value : float
        As given, SI.
    number : int or None
        Which input it is; None where it has no doubt.
    """

    value: float
    number: int | None = None

    def at(self, draws: Array) -> Array:
        """Return its value in each draw, shape (...).

        Parameters
        ----------
        draws : ndarray, shape (..., n_inputs), float64
            Values of the inputs.
        """
        return np.full(draws.shape[:-1], self.value) if self.number is None else draws[..., self.number]

    def factor(self, draws: Array) -> Array:
        """Return its value in each draw over that of the case, shape (...).

        Parameters
        ----------
        draws : ndarray, shape (..., n_inputs), float64
            Values of the inputs.
        """
        if self.number is None:
            return np.ones(draws.shape[:-1])
        return np.asarray(draws[..., self.number] / self.value)


@dataclass(frozen=True)
class GroupRecipe:
    """What the numbers of the case are to one group.

    Attributes
    ----------
    density : Given or None
        The one density of the group; None where it is an array, or that of a gas.
    gas : bool
        Whether the density follows from the gas law.
    temperature : Given or None
        Of the gas; None where it is an array.
    pressure : Given or None
        Supplied; None where it is an array, or not known.
    absolute : bool
        Whether the ambient pressure is taken off it, or off the array.
    exported : bool
        Whether the pressure is an array.
    flow : Given or None
        Supplied flow: what the velocity is proportional to.
    by_mass : bool
        Whether that is a mass flow.
    solved : bool
        Whether the flow follows from those of the other groups.
    """

    density: Given | None = None
    gas: bool = False
    temperature: Given | None = None
    pressure: Given | None = None
    absolute: bool = False
    exported: bool = False
    flow: Given | None = None
    by_mass: bool = False
    solved: bool = False


@dataclass(frozen=True, eq=False)
class Moved:
    """What a balance is made of beside the table, in each draw, shape (...).

    Attributes
    ----------
    held : ndarray
        Factor of the density of the fluid held.
    contents : ndarray
        Factor of contents and rates that come from volumes.
    hardware : ndarray
        Factor of the mass of the hardware.
    mass_rate : ndarray
        Added to the rate of mass inside, kg/s.
    ambient : ndarray
        Added to the ambient pressure, Pa.
    """

    held: Array
    contents: Array
    hardware: Array
    mass_rate: Array
    ambient: Array


@dataclass(frozen=True, eq=False)
class Recipe:
    """What the numbers of a case are to its table.

    Attributes
    ----------
    groups : tuple of GroupRecipe
        One a row of the table.
    mass_flow, density_area : ndarray, shape (n_groups,), float64
        Columns of the table at the numbers of the case.
    mass_given : ndarray of bool, shape (n_groups,)
        Groups whose mass flow is an array of its own.
    density : Given or None
        Of the fluid.
    ambient : Given or None
        Ambient pressure, Pa.
    gas_constant : Given or None
        J/(kg K).
    viscosity : Given or None
        Where the viscous traction is proportional to it.
    hardware : Given or None
        Mass, kg.
    mass_rate : Given or None
        Rate of the mass inside, as given, kg/s.
    kinematic : bool
        Whether exported pressures are multiplied by the density of the fluid.
    contents_by_density : bool
        Whether contents and rates from volumes are proportional to the density of the fluid.
    """

    groups: tuple[GroupRecipe, ...]
    mass_flow: Array
    density_area: Array
    mass_given: NDArray[np.bool_]
    density: Given | None = None
    ambient: Given | None = None
    gas_constant: Given | None = None
    viscosity: Given | None = None
    hardware: Given | None = None
    mass_rate: Given | None = None
    kinematic: bool = False
    contents_by_density: bool = False

    def levers(self, draws: Array) -> Levers:
        """Return the levers that values of the inputs pull.

        Parameters
        ----------
        draws : ndarray, shape (..., n_inputs), float64
            Values of the inputs, SI.

        Returns
        -------
        Levers
            Shape (..., n_groups).
        """
        one = np.ones(draws.shape[:-1])
        fluid = one if self.density is None else self.density.factor(draws)
        ambient = self._ambient(draws)
        density = np.stack([self._density(group, draws, ambient) for group in self.groups], axis=-1)
        speed = np.stack(
            [
                one if group.flow is None else group.flow.factor(draws) / (density[..., k] if group.by_mass else 1.0)
                for k, group in enumerate(self.groups)
            ],
            axis=-1,
        )
        self._solve(density, speed)
        added = np.stack([self._added(group, draws, ambient) for group in self.groups], axis=-1)
        traction = one if self.viscosity is None else self.viscosity.factor(draws)
        spread = np.ones(len(self.groups))
        # a kinematic pressure is multiplied by the density that the group has
        scale = density if self.kinematic else np.ones_like(density)
        exported = np.array([group.exported for group in self.groups])
        return Levers(
            density=density,
            speed=speed,
            pressure=added,
            scale=np.where(exported, scale, 1.0),
            head=fluid[..., None] * spread,
            traction=traction[..., None] * spread,
        )

    def moved(self, draws: Array, levers: Levers) -> Moved:
        """Return what else the inputs move.

        Parameters
        ----------
        draws : ndarray, shape (..., n_inputs), float64
            Values of the inputs, SI.
        levers : Levers
            From `levers`.
        """
        one = np.ones(draws.shape[:-1])
        whole = float(self.density_area.sum())
        held = levers.density @ self.density_area / whole if whole > 0.0 else one
        fluid = one if self.density is None else self.density.factor(draws)
        rate = np.zeros(draws.shape[:-1])
        if self.mass_rate is not None:
            rate = self.mass_rate.at(draws) - self.mass_rate.value
        return Moved(
            held=held,
            contents=fluid if self.contents_by_density else one,
            hardware=one if self.hardware is None else self.hardware.factor(draws),
            mass_rate=rate,
            ambient=self._ambient(draws),
        )

    def _ambient(self, draws: Array) -> Array:
        zero = np.zeros(draws.shape[:-1])
        return zero if self.ambient is None else self.ambient.at(draws) - self.ambient.value

    def _density(self, group: GroupRecipe, draws: Array, ambient: Array) -> Array:
        if group.density is not None:
            return group.density.factor(draws)
        if not group.gas:
            return np.ones(draws.shape[:-1])
        found = np.ones(draws.shape[:-1])
        if group.pressure is not None and self.ambient is not None:
            level = group.pressure.value + (0.0 if group.absolute else self.ambient.value)
            moved = group.pressure.at(draws) - group.pressure.value + (0.0 if group.absolute else ambient)
            found = (level + moved) / level
        for number in (self.gas_constant, group.temperature):
            if number is not None:
                found = found / number.factor(draws)
        return np.asarray(found)

    @staticmethod
    def _added(group: GroupRecipe, draws: Array, ambient: Array) -> Array:
        added = np.zeros(draws.shape[:-1])
        if group.pressure is not None:
            added = added + group.pressure.at(draws) - group.pressure.value
        if group.absolute:
            added = added - ambient
        return added

    def _solve(self, density: Array, speed: Array) -> None:
        """Let the solved group carry what the others leave, in place."""
        for k, group in enumerate(self.groups):
            if group.solved:
                mass = np.where(self.mass_given, 1.0, density * speed)
                mass[..., k] = 0.0
                speed[..., k] = -(mass @ self.mass_flow) / self.mass_flow[k] / density[..., k]
