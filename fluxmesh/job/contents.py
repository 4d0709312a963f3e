"""What the volume files of a case hold."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike

from fluxmesh.case.arrays import DensityArray, EnthalpyArray, PressureArray, TemperatureArray, VelocityArray
from fluxmesh.case.budgets import CarriedSection
from fluxmesh.case.model import Case
from fluxmesh.case.values import UnitScale
from fluxmesh.errors import FieldError, InputError

if TYPE_CHECKING:
    from fluxmesh.field.contents import Carried, Contents
    from fluxmesh.field.volume import VolumeArray
    from fluxmesh.surface.readers.volume_grid import VolumeMesh

__all__ = ["read_contents"]

Entry = VelocityArray | DensityArray | PressureArray | TemperatureArray | EnthalpyArray
# no scalar of a case has a name that does not print
_ENTHALPY, _PRESSURE = "\0enthalpy", "\0pressure"


def read_contents(case: Case, file: Path, unit: UnitScale, origin: ArrayLike) -> Contents:
    """Integrate what a volume file holds, with its arrays read as the case says.

    Parameters
    ----------
    case : Case
        Names and units of the arrays, and the fluid.
    file : Path
        The volume file.
    unit : UnitScale
        Length unit of its coordinates.
    origin : array_like, shape (3,)
        Point that moments are about, m.

    Returns
    -------
    Contents
        The velocity is in the frame that ``flow.velocity.frame`` names. Fields
        that the case does not name are not known. The internal energy has the
        datum of the enthalpy: ``rho h - p`` of a given one, ``p cv / R`` of an
        ideal gas (``cv = cp - R``), ``rho c T`` of a liquid; for a head that was
        removed it lacks what does not change in time.

    Raises
    ------
    InputError
        A file that cannot be read, arrays that are missing or not finite,
        cells turned inside out, or an ideal gas without pressure or temperature.
    """
    from fluxmesh.surface.readers.volume_grid import read_volume

    try:
        return _Reading(case, read_volume(file)).contents(unit.factor, origin)
    except InputError as error:
        if file.name in error.where:
            raise
        where = f"{file.name}: {error.where}" if error.where else file.name
        raise type(error)(error.found, where, error.remedy) from error


class _Reading:
    """The arrays of one volume, by what a case says of them."""

    def __init__(self, case: Case, volume: VolumeMesh) -> None:
        self.case, self.volume = case, volume

    def contents(self, scale: float, origin: ArrayLike) -> Contents:
        """Integrate what the volume holds."""
        from fluxmesh.field.contents import Carried, contents_of

        density = self.density()
        velocity = self.case.flow.velocity
        carried = {
            entry.name: Carried(self.array(f"carried {entry.name}", entry), entry.per)
            for entry in self.case.carried
            if entry.array is not None
        }
        held = contents_of(
            self.volume,
            scale=scale,
            origin=origin,
            density=density,
            velocity=None if velocity is None else self.array("velocity", velocity, 3),
            carried={**carried, **(self.energies() if density is not None else {})},
        )
        return self.with_energy(held)

    def array(self, quantity: str, entry: Entry | CarriedSection, components: int = 1) -> VolumeArray:
        """Look up an array, in SI units."""
        from fluxmesh.field.volume import VolumeArray, array_of

        assert entry.array is not None
        names = entry.array if isinstance(entry.array, tuple) else (entry.array,)
        # where the surface has its array does not matter here, unless the volume has it on both
        both = names[0] in self.volume.node_arrays and names[0] in self.volume.cell_arrays
        at = None if entry.at is None or not both else {"faces": "cells"}.get(entry.at, entry.at)
        key = quantity if isinstance(entry, CarriedSection) else f"flow.{quantity}"
        found = array_of(self.volume, quantity, names, at=at, components=(components,), key=key)
        factor = 1.0 if isinstance(entry, CarriedSection) else entry.unit.factor
        return VolumeArray(found.on, found.values * factor, found.name)

    def density(self) -> float | VolumeArray | None:
        """Density of the fluid: an array, of an ideal gas, one value, or not known."""
        fluid, entry = self.case.fluid, self.case.flow.density
        if fluid.law is not None:
            return self.gas_density()
        if entry is not None:
            return self.array("density", entry)
        return None if fluid.density is None else float(fluid.density)

    def gas_density(self) -> VolumeArray:
        """Density of an ideal gas, ``p / (R T)``."""
        from fluxmesh.field.volume import VolumeArray
        from fluxmesh.field.volume_cells import used_nodes

        constant = self.case.fluid.gas_constant
        if constant is None:
            raise FieldError("missing, and the law of ideal gases needs it", where="fluid.gas_constant")
        pressure, temperature = self.absolute_pressure(), self.temperature()
        if temperature is None:
            raise FieldError(
                "missing, and the density inside follows from it",
                where="flow.temperature",
                remedy="Export the temperature in the volume and name it here, or give fluid.temperature",
            )
        kelvin: ArrayLike = temperature if isinstance(temperature, float) else temperature.values
        if not isinstance(temperature, float) and temperature.on != pressure.on:
            raise FieldError(
                f"the pressure sits on {pressure.on} of {self.volume.source}, the temperature on {temperature.on}",
                where="flow.temperature",
                remedy="Export both on nodes or both on cells",
            )
        for name, values, unit in (("pressure", pressure.values, "Pa"), ("temperature", np.asarray(kelvin), "K")):
            low = ~(np.broadcast_to(values, pressure.values.shape) > 0.0)
            if low.any() and pressure.on == "nodes":
                low &= used_nodes(self.volume.grid)
            if low.any():
                worst = float(np.broadcast_to(values, low.shape)[low].min())
                raise FieldError(
                    f"the absolute {name} in {self.volume.source} falls to {worst:.6g} {unit}",
                    where=f"flow.{name}",
                    remedy="It must be above zero: check its unit"
                    + (", kind, and fluid.ambient_pressure" if name == "pressure" else ""),
                )
        with np.errstate(divide="ignore", invalid="ignore"):  # at nodes that no cell uses
            values = np.asarray(pressure.values / (float(constant) * np.asarray(kelvin)))
        return VolumeArray(pressure.on, values, f"{pressure.name}, of an ideal gas")

    def absolute_pressure(self) -> VolumeArray:
        """Pressure inside; gauge where no ambient pressure is known."""
        from fluxmesh.field.volume import VolumeArray

        entry = self.case.flow.pressure
        if entry is None:
            raise FieldError(
                "missing, and what is inside depends on it",
                where="flow.pressure",
                remedy="Export the pressure in the volume and name it here",
            )
        if entry.kind == "kinematic" and self.case.fluid.law is not None:
            raise FieldError(
                "a kinematic pressure has no gas law", where="flow.pressure.kind", remedy="Export the pressure"
            )
        ambient = self.case.fluid.ambient_pressure
        shift = float(ambient) if ambient is not None and entry.kind == "gauge" else 0.0
        found = self.array("pressure", entry)
        return VolumeArray(found.on, found.values + shift, found.name)

    def temperature(self) -> VolumeArray | float | None:
        """Temperature inside: an array, or one value for all."""
        entry = self.case.flow.temperature
        if entry is not None:
            return self.array("temperature", entry)
        return None if self.case.fluid.temperature is None else float(self.case.fluid.temperature)

    def gas_capacity(self) -> float | None:
        """Heat capacity of an ideal gas at constant pressure, J/(kg K)."""
        fluid = self.case.fluid
        if fluid.heat_capacity is not None:
            return float(fluid.heat_capacity)
        if fluid.heat_ratio is None or fluid.gas_constant is None:
            return None
        ratio = float(fluid.heat_ratio)
        return ratio * float(fluid.gas_constant) / (ratio - 1.0)

    def energies(self) -> dict[str, Carried]:
        """What the internal energy is made of, to be integrated with the rest."""
        from fluxmesh.field.contents import Carried
        from fluxmesh.field.volume import VolumeArray

        fluid, flow = self.case.fluid, self.case.flow
        kinematic = flow.pressure is not None and flow.pressure.kind == "kinematic"
        if flow.enthalpy is not None:
            if flow.pressure is None:
                return {}
            # one pressure everywhere and always does not change the energy in a volume that keeps its shape
            return {
                _ENTHALPY: Carried(self.array("enthalpy", flow.enthalpy)),
                _PRESSURE: Carried(self.absolute_pressure(), "mass" if kinematic else "volume", -1.0),
            }
        if fluid.law is not None:
            capacity = self.gas_capacity()
            if capacity is None or fluid.gas_constant is None:
                return {}
            share = capacity / float(fluid.gas_constant) - 1.0
            return {_PRESSURE: Carried(self.absolute_pressure(), "volume", share)}
        temperature = self.temperature()
        if temperature is None or fluid.heat_capacity is None:
            return {}
        if isinstance(temperature, float):
            count = int(self.volume.grid.GetNumberOfCells())
            temperature = VolumeArray("cells", np.full(count, temperature), "fluid.temperature")
        return {_ENTHALPY: Carried(temperature, "mass", float(fluid.heat_capacity))}

    @staticmethod
    def with_energy(held: Contents) -> Contents:
        """Add up the internal energy."""
        parts = [amount for name, amount in held.carried.items() if name in (_ENTHALPY, _PRESSURE)]
        rest = {name: amount for name, amount in held.carried.items() if name not in (_ENTHALPY, _PRESSURE)}
        return replace(held, internal_energy=sum(parts) if parts else None, carried=rest)
