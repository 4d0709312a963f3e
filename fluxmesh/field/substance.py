"""Properties of a fluid by its name, from a library: density, viscosity, heat capacity."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from math import isfinite
from typing import Any

from fluxmesh.errors import FieldError
from fluxmesh.units.wording import either, nearest, quoted

__all__ = ["SUBSTANCES", "Substance", "substance"]

SUBSTANCES: Mapping[str, str] = {
    "acetone": "Acetone",
    "air": "Air",
    "ammonia": "Ammonia",
    "argon": "Argon",
    "benzene": "Benzene",
    "butane": "n-Butane",
    "carbon dioxide": "CarbonDioxide",
    "carbon monoxide": "CarbonMonoxide",
    "cyclohexane": "CycloHexane",
    "decane": "n-Decane",
    "dodecane": "n-Dodecane",
    "ethane": "Ethane",
    "ethanol": "Ethanol",
    "ethylene": "Ethylene",
    "heavy water": "HeavyWater",
    "helium": "Helium",
    "heptane": "n-Heptane",
    "hexane": "n-Hexane",
    "hydrogen": "Hydrogen",
    "hydrogen sulfide": "HydrogenSulfide",
    "isobutane": "IsoButane",
    "krypton": "Krypton",
    "methane": "Methane",
    "methanol": "Methanol",
    "neon": "Neon",
    "nitrogen": "Nitrogen",
    "nitrous oxide": "NitrousOxide",
    "nonane": "n-Nonane",
    "octane": "n-Octane",
    "oxygen": "Oxygen",
    "pentane": "n-Pentane",
    "propane": "n-Propane",
    "propylene": "Propylene",
    "R1234yf": "R1234yf",
    "R134a": "R134a",
    "R22": "R22",
    "R32": "R32",
    "steam": "Water",
    "sulfur dioxide": "SulfurDioxide",
    "sulfur hexafluoride": "SulfurHexafluoride",
    "toluene": "Toluene",
    "water": "Water",
    "xenon": "Xenon",
}
"""Trade words, and what the library calls them. ``steam`` is water that must not be liquid."""

_EDGE = 1e-5  # how near the saturation pressure, relative, counts as both phases: the library itself gives up at 1e-6


@dataclass(frozen=True)
class Substance:
    """A fluid in one state, SI units.

    Attributes
    ----------
    name : str
        The trade word.
    temperature, pressure : float
        K, and absolute pressure in Pa.
    state : str
        ``"liquid"``, ``"gas"`` or ``"supercritical"`` (above the critical
        temperature and the critical pressure).
    density : float
        kg/m³.
    heat_capacity : float
        At constant pressure, J/(kg K).
    viscosity : float or None
        Dynamic, Pa s; None where the library has no model of it.
    heat_ratio : float
        Ratio of the heats of the real fluid in this state.
    gas_constant : float
        Universal gas constant over molar mass, J/(kg K).
    ideal_heat_capacity : float
        Heat capacity at constant pressure in the limit of no pressure: that of
        the ideal gas at this temperature, J/(kg K).
    sound_speed : float
        m/s, of the real fluid in this state.
    source : str
        Name and version of the library.
    """

    name: str
    temperature: float
    pressure: float
    state: str
    density: float
    heat_capacity: float
    viscosity: float | None
    heat_ratio: float
    gas_constant: float
    ideal_heat_capacity: float
    sound_speed: float
    source: str

    @property
    def ideal_heat_ratio(self) -> float:
        """Ratio of the heats of the ideal gas, ``cp0 / (cp0 - R)``: with R and cp0 it obeys Mayer's relation."""
        return self.ideal_heat_capacity / (self.ideal_heat_capacity - self.gas_constant)

    @property
    def compressibility(self) -> float:
        """``p / (rho R T)``; 1 for an ideal gas."""
        return self.pressure / (self.density * self.gas_constant * self.temperature)

    def note(self) -> str:
        """Return one sentence that says what was taken, in what state, and from where."""
        thickness = "no viscosity" if self.viscosity is None else f"viscosity {self.viscosity:.6g} Pa s"
        return (
            f"{self.name} at {self.temperature:.6g} K and {self.pressure:.6g} Pa absolute is {self.state}: "
            f"density {self.density:.6g} kg/m³, {thickness}, heat capacity {self.heat_capacity:.6g} J/(kg K), "
            f"from {self.source}"
        )


def substance(name: str, temperature: float, pressure: float) -> Substance:
    """Return the properties of a fluid at a temperature and a pressure.

    The library is CoolProp (Bell et al. 2014, Ind. Eng. Chem. Res. 53, 2498; from
    memory), which evaluates published reference equations: for water that of IAPWS-95
    and the viscosity of IAPWS R12-08.

    Parameters
    ----------
    name : str
        One of `SUBSTANCES`; case does not matter.
    temperature : float
        K.
    pressure : float
        Absolute, Pa.

    Returns
    -------
    Substance
        SI units.

    Raises
    ------
    FieldError
        An unknown name, a library that is not installed, a temperature or
        pressure outside its range, a solid, a state of two phases, or steam that is liquid.
    """
    word = _word(name)
    equations, library = _library()
    for key, value, unit in (("temperature", temperature, "K"), ("pressure", pressure, "Pa")):
        if not (isfinite(value) and value > 0):
            raise FieldError(
                f"found {value:g} {unit}", where=f"fluid.{key}", remedy=f"The absolute {key} must be above zero"
            )
    state = equations.AbstractState("HEOS", SUBSTANCES[word])
    _require_range(equations, state, word, temperature, pressure)
    here = f"{word} at {temperature:.6g} K and {pressure:.6g} Pa absolute"
    try:
        state.update(equations.PT_INPUTS, pressure, temperature)
    except ValueError as error:
        raise _no_state(equations, state, here, temperature, pressure, str(error)) from error
    phase = {
        equations.iphase_liquid: "liquid",
        equations.iphase_supercritical_liquid: "liquid",
        equations.iphase_gas: "gas",
        equations.iphase_supercritical_gas: "gas",
        equations.iphase_supercritical: "supercritical",
    }.get(state.phase())
    if phase is None:
        raise _two_phases(here)
    if word == "steam" and phase == "liquid":
        raise FieldError(f"{here} is liquid", where="fluid.name", remedy='Write name = "water", or heat it')
    try:
        viscosity = float(state.viscosity())
    except ValueError:  # no model of it, or none that reaches so far
        viscosity = None
    return Substance(
        name=word,
        temperature=float(temperature),
        pressure=float(pressure),
        state=phase,
        density=float(state.rhomass()),
        heat_capacity=float(state.cpmass()),
        viscosity=viscosity,
        heat_ratio=float(state.cpmass() / state.cvmass()),
        gas_constant=float(state.gas_constant() / state.molar_mass()),
        ideal_heat_capacity=float(state.cp0mass()),
        sound_speed=float(state.speed_sound()),
        source=library,
    )


def _word(name: str) -> str:
    for word in SUBSTANCES:
        if word.casefold() == name.strip().casefold():
            return word
    near = nearest(name, SUBSTANCES)
    meant = f"Did you mean {quoted(near)}? " if near else ""
    raise FieldError(
        f"found {quoted(name)}, which no properties are known of",
        where="fluid.name",
        remedy=f"{meant}Known are {either(SUBSTANCES, 'and')}. Of any other fluid give density and viscosity",
    )


def _library() -> tuple[Any, str]:
    """Return the module of equations, and the library's name with its version."""
    try:
        import CoolProp
        from CoolProp import CoolProp as equations
    except ImportError as error:
        raise FieldError(
            "properties by name come from the library CoolProp, which is not installed",
            where="fluid.name",
            remedy='Install it with: pip install "fluxmesh[properties]". Or leave out name, and give the values',
        ) from error
    return equations, f"CoolProp {CoolProp.__version__}"


def _require_range(equations: Any, state: Any, word: str, temperature: float, pressure: float) -> None:
    # the library extrapolates above its range without a word
    if temperature > state.Tmax():
        raise FieldError(
            f"{temperature:.6g} K is outside the range of {word}",
            where="fluid.temperature",
            remedy=f"The library knows it up to {state.Tmax():.6g} K",
        )
    if pressure > state.pmax():
        raise FieldError(
            f"{pressure:.6g} Pa is outside the range of {word}",
            where="fluid.pressure",
            remedy=f"The library knows it up to {state.pmax():.6g} Pa",
        )
    lowest = _lowest(equations, state, pressure)
    if temperature < lowest:
        raise FieldError(
            f"{temperature:.6g} K is outside the range of {word}",
            where="fluid.temperature",
            remedy=f"It is fluid from {lowest:.6g} K at this pressure",
        )


def _lowest(equations: Any, state: Any, pressure: float) -> float:
    """Temperature at which it freezes at a pressure, K; where the library has no melting line its lowest."""
    if state.has_melting_line():
        try:
            return float(state.melting_line(equations.iT, equations.iP, pressure))
        except ValueError:  # below the triple point
            pass
    return float(state.Tmin())


def _no_state(equations: Any, state: Any, here: str, temperature: float, pressure: float, message: str) -> FieldError:
    """Why the library gives no state: both phases, or else in its own words."""
    try:
        state.update(equations.QT_INPUTS, 1.0, temperature)
        dew = state.p()
        state.update(equations.QT_INPUTS, 0.0, temperature)
        bubble = state.p()
    except ValueError:
        dew = bubble = 0.0  # above the critical point
    if dew * (1 - _EDGE) <= pressure <= bubble * (1 + _EDGE):
        return _two_phases(here)
    return FieldError(
        f"the library has no state of {here} ({message})",
        where="fluid.name",
        remedy="Give density and viscosity instead",
    )


def _two_phases(here: str) -> FieldError:
    return FieldError(
        f"{here} may be liquid, gas, or both",
        where="fluid.name",
        remedy="Give a temperature or pressure away from boiling, or density and viscosity instead of name",
    )
