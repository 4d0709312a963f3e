"""What a case does not say of its fluid, filled from a library."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from fluxmesh.errors import FieldError
from fluxmesh.field.substance import Substance, substance
from fluxmesh.units.wording import either

__all__ = ["FilledFluid", "fill_fluid"]

_WORTH_SAYING = 1e-3  # relative difference between a value given and that of the library
_UNITS = {
    "density": "kg/m³",
    "viscosity": "Pa s",
    "heat_capacity": "J/(kg K)",
    "gas_constant": "J/(kg K)",
    "heat_ratio": "",
}


@dataclass(frozen=True)
class FilledFluid:
    """The values of a fluid, those that were missing filled from a library.

    Attributes
    ----------
    values : mapping of str to float or None
        Every key that was asked, SI units; None where the library has no value or the law does not need it.
    filled : tuple of str
        Keys whose value came from the library.
    substance : Substance
        What they came from.
    notes : tuple of str
        What was taken and from where, one sentence each.
    """

    values: Mapping[str, float | None]
    filled: tuple[str, ...]
    substance: Substance
    notes: tuple[str, ...]


def fill_fluid(
    name: str,
    given: Mapping[str, float | None],
    *,
    temperature: float | None,
    pressure: float | None = None,
    ambient: float | None = None,
    ideal_gas: bool = False,
) -> FilledFluid:
    """Fill what a case does not say of its fluid.

    Of an ideal gas, gas constant, heat capacity and ratio of the heats hang together
    (``cp = heat_ratio R / (heat_ratio - 1)``, Mayer's relation): one that is given decides the others.

    Parameters
    ----------
    name : str
        One of `SUBSTANCES`.
    given : mapping of str to float or None
        ``density``, ``viscosity``, ``heat_capacity``, ``gas_constant``,
        ``heat_ratio`` in SI units, None to be filled; a key that is left out (a
        density that comes from an array, say) stays out.
    temperature : float or None
        K.
    pressure : float, optional
        Absolute, Pa; the ambient pressure by default.
    ambient : float, optional
        Ambient absolute pressure, Pa.
    ideal_gas : bool, optional
        Whether the density follows from the law of ideal gases: then gas constant,
        heat ratio and heat capacity are filled, else density and heat capacity. Viscosity always is.

    Returns
    -------
    FilledFluid
        Values given stay as they are.

    Raises
    ------
    FieldError
        No temperature or pressure, whatever `substance` raises, a liquid as an
        ideal gas, a ratio of the heats of 1 or less, or a heat capacity at or below the gas constant.
    """
    if temperature is None:
        raise FieldError(
            f"missing, and the properties of {name} depend on it",
            where="fluid.temperature",
            remedy='Give such as "20 degC"',
        )
    absolute = ambient if pressure is None else pressure
    if absolute is None:
        raise FieldError(
            f"missing, and the properties of {name} depend on it",
            where="fluid.pressure",
            remedy='Give the absolute pressure of the fluid, or ambient_pressure, such as "101325 Pa"',
        )
    found = substance(name, temperature, absolute)
    if ideal_gas:
        offered = _as_ideal_gas(found, given)
        own = _as_ideal_gas(found, {})
    else:
        offered = {"density": found.density, "viscosity": found.viscosity, "heat_capacity": found.heat_capacity}
        own = offered
    values = {key: offered.get(key) if value is None else value for key, value in given.items()}
    filled = tuple(key for key, value in given.items() if value is None and values[key] is not None)
    return FilledFluid(values, filled, found, tuple(_told(found, given, values, filled, own, ideal_gas)))


def _as_ideal_gas(found: Substance, given: Mapping[str, float | None]) -> dict[str, float | None]:
    if found.state == "liquid":
        raise FieldError(
            f"{found.name} at {found.temperature:.6g} K and {found.pressure:.6g} Pa absolute is liquid, "
            "and the law is that of ideal gases",
            where="fluid.law",
            remedy="Leave out law, or give the state of the gas",
        )
    constant = given.get("gas_constant") or found.gas_constant
    capacity, ratio = given.get("heat_capacity"), given.get("heat_ratio")
    if ratio is not None and ratio <= 1:
        raise FieldError(f"found {ratio:g}", where="fluid.heat_ratio", remedy="The ratio of the heats is above 1")
    if capacity is None:
        capacity = found.ideal_heat_capacity if ratio is None else ratio * constant / (ratio - 1)
    if capacity <= constant:
        raise FieldError(
            f"found {capacity:.6g} J/(kg K), and the gas constant is {constant:.6g} J/(kg K)",
            where="fluid.heat_capacity",
            remedy="The heat capacity of a gas at constant pressure is larger than its gas constant",
        )
    return {
        "gas_constant": constant,
        "heat_capacity": capacity,
        "heat_ratio": capacity / (capacity - constant),
        "viscosity": found.viscosity,
    }


def _told(
    found: Substance,
    given: Mapping[str, float | None],
    values: Mapping[str, float | None],
    filled: tuple[str, ...],
    own: Mapping[str, float | None],
    ideal_gas: bool,
) -> list[str]:
    said = [found.note()]
    if filled:
        taken = either([f"{_called(key)} {values[key]:.6g} {_UNITS[key]}".rstrip() for key in filled], "and")
        said.append(f"The case takes from there: {taken}")
    for key, value in given.items():
        theirs = own.get(key)
        if value is not None and theirs is not None and abs(value / theirs - 1) > _WORTH_SAYING:
            said.append(
                f"{_called(key)} is given as {value:.6g} {_UNITS[key]}".rstrip()
                + f", {value / theirs - 1:+.2%} from that of {found.name}"
            )
    if ideal_gas:
        off = found.compressibility - 1
        said.append(f"Real {found.name} is {abs(off):.2%} {'lighter' if off > 0 else 'denser'} there than an ideal gas")
    return said


def _called(key: str) -> str:
    return key.replace("_", " ")
