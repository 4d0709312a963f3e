"""The numbers of a case that have a plus-minus, and what each is to the table or to a run."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import Final, Literal, cast

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.doubt.figures import Figures, figures
from fluxmesh.assess.doubt.inputs import Input
from fluxmesh.assess.doubt.levers import Levers
from fluxmesh.assess.doubt.model import Further, Laws
from fluxmesh.assess.doubt.recipe import Given, GroupRecipe, Recipe
from fluxmesh.balance.balance import Balance
from fluxmesh.balance.carried import carried_balance
from fluxmesh.balance.energy import EnergyBalance, energy_balance
from fluxmesh.balance.enthalpy import Enthalpy, mechanical_enthalpy
from fluxmesh.balance.losses import port_losses
from fluxmesh.case.groups import GroupSection
from fluxmesh.case.model import Case
from fluxmesh.errors import FieldError, InputError
from fluxmesh.field.pressure import PressureKind
from fluxmesh.field.scalars import ScalarFlux
from fluxmesh.integral.layout import AT_FACE, PER_GROUP
from fluxmesh.job.fluid import named_fluid
from fluxmesh.job.laid import lay_with_scalars
from fluxmesh.job.measured import Keys, measured_in, moved_case
from fluxmesh.job.outcome import Outcome
from fluxmesh.job.run import balance_of, hardware_of
from fluxmesh.units import Measured

__all__ = ["DoubtfulInputs", "doubtful_inputs"]

Array = NDArray[np.float64]

_UNITS: Final = {
    "density": "kg/m^3", "ambient_pressure": "Pa", "pressure": "Pa", "temperature": "K", "gas_constant": "J/(kg K)",
    "heat_capacity": "J/(kg K)", "viscosity": "Pa s", "flow_rate": "m^3/s", "mass_flow": "kg/s", "speed": "m/s",
    "enthalpy": "J/kg", "mass": "kg", "rate": "rad/s", "mass_rate": "kg/s", "energy_rate": "W", "heat": "W",
    "shaft_power": "W", "at": "s", "time": "s",
}  # fmt: skip


@dataclass(frozen=True, eq=False)
class DoubtfulInputs:
    """The inputs of a case with a doubt.

    Attributes
    ----------
    inputs : tuple of Input
        In the order of the case.
    recipe : Recipe
        What those are to the table that algebra reaches.
    rerun : dict of int to callable
        For the others, a run of the case with that input moved.
    further : callable or None
        Makes energy, carried scalars and losses of a changed balance.
    notes : tuple of str
        What was run again, one sentence.
    """

    inputs: tuple[Input, ...]
    recipe: Recipe
    rerun: dict[int, Callable[[float], Figures]]
    further: Further | None
    notes: tuple[str, ...] = ()


def doubtful_inputs(
    case: Case | None, outcome: Outcome, rows: NDArray[np.int64], shapes: dict[str, str], threads: int | None = None
) -> DoubtfulInputs:
    """Find the inputs of a case with a doubt, and what they are to its table.

    Parameters
    ----------
    case : Case or None
        The case; None for an outcome from arrays.
    outcome : Outcome
        What was made of it.
    rows : ndarray, shape (n_groups,), int64
        For each group of the balance, which group of the surface it is.
    shapes : dict of str to str
        Distributions by name of the input; normal by default.
    threads : int, optional
        Threads for what is run again.

    Returns
    -------
    DoubtfulInputs

    Raises
    ------
    FieldError
        A distribution of something that has no plus-minus.
    """
    found = _Found(shapes, {} if case is None else measured_in(case))
    unknown = set(shapes) - {one.name for one in found.inputs}
    if unknown:
        raise FieldError(
            f"a distribution is given for '{min(unknown)}', which has no plus-minus in the case",
            remedy=f"Known: {', '.join(one.name for one in found.inputs) or 'none'}",
        )
    recipe = _recipe(case, outcome, rows, found)
    rerun: dict[int, Callable[[float], Figures]] = {}
    notes: tuple[str, ...] = ()
    if case is not None:
        apart = set(found.numbers.values()) - _reached(found, outcome, recipe, case)
        for keys, number in found.numbers.items():
            if number in apart:
                rerun[number] = _runner(case, outcome, keys, threads)
        if rerun:
            names = ", ".join(found.inputs[k].name for k in sorted(rerun))
            found.apart = apart
            recipe = _recipe(case, outcome, rows, found)
            notes = (f"The case was run again with {names} moved; draws take their effects as they are alone",)
    return DoubtfulInputs(found.inputs, recipe, rerun, _further(case, outcome, recipe), notes)


class _Found:
    """The inputs, numbered."""

    def __init__(self, shapes: Mapping[str, str], measured: Mapping[Keys, Measured]) -> None:
        self.numbers = {keys: k for k, keys in enumerate(measured)}
        self.used: set[int] = set()
        self.apart: set[int] = set()  # what is run again must not be counted by algebra too
        self.inputs = tuple(
            Input(
                ".".join(keys),
                one.value,
                one.half_width,
                _UNITS.get(keys[-1], ""),
                cast(Literal["normal", "rectangular"], shapes.get(".".join(keys), "normal")),
            )
            for keys, one in measured.items()
        )

    def given(self, value: Measured | None, *keys: str) -> Given | None:
        """A number of the case, with which input it is."""
        if value is None:
            return None
        number = self.numbers.get(keys)
        if number is not None:
            self.used.add(number)
        return Given(float(value), None if number in self.apart else number)


def _recipe(case: Case | None, outcome: Outcome, rows: NDArray[np.int64], found: _Found) -> Recipe:
    table, flow = outcome.balance.table, outcome.flow
    given = np.asarray(flow.mass_flux.where[rows] == AT_FACE)
    plain = Recipe(
        groups=tuple(GroupRecipe() for _ in rows),
        mass_flow=table.column("mass_flow"),
        density_area=table.column("density_area"),
        mass_given=given,
    )
    if case is None:
        return plain
    fluid, hardware, storage = case.fluid, case.hardware, case.storage
    gas = fluid.law is not None
    density = found.given(fluid.density, "fluid", "density")
    groups = [
        _group(case, outcome, int(k), group.name, density, found)
        for k, group in zip(rows, outcome.balance.setting.groups, strict=True)
    ]
    kept = hardware if outcome.balance.setting.hardware is not None else None
    return replace(
        plain,
        groups=tuple(groups),
        density=density,
        ambient=found.given(fluid.ambient_pressure, "fluid", "ambient_pressure"),
        gas_constant=found.given(fluid.gas_constant, "fluid", "gas_constant") if gas else None,
        viscosity=found.given(fluid.viscosity, "fluid", "viscosity") if case.flow.velocity_gradient else None,
        hardware=None if kept is None else found.given(kept.mass, "hardware", "mass"),
        mass_rate=None if storage is None else found.given(storage.mass_rate, "storage", "mass_rate"),
        kinematic=flow.meaning.kind is PressureKind.KINEMATIC,
        contents_by_density=not gas and case.flow.density is None and density is not None,
    )


def _group(case: Case, outcome: Outcome, k: int, name: str, density: Given | None, found: _Found) -> GroupRecipe:
    flow, section = outcome.flow, case.groups[name]
    gas = case.fluid.law is not None and section.density is None and bool(flow.density.present()[k])
    own: Given | None = None
    if section.density is not None:
        own = found.given(section.density, "groups", name, "density")
    elif not gas and flow.density.where[k] == PER_GROUP:
        own = density
    temperature = None
    if gas and section.temperature is not None:
        temperature = found.given(section.temperature, "groups", name, "temperature")
    elif gas and case.flow.temperature is None:
        temperature = found.given(case.fluid.temperature, "fluid", "temperature")
    exported = bool(flow.pressure.where[k] > PER_GROUP)
    absolute = flow.meaning.kind is PressureKind.ABSOLUTE if exported else section.pressure_kind == "absolute"
    key, supplied = _supplied(section)
    return GroupRecipe(
        density=own,
        gas=gas,
        temperature=temperature,
        pressure=found.given(section.pressure, "groups", name, "pressure"),
        absolute=absolute and bool(flow.pressure.present()[k]),
        exported=exported,
        flow=None if key is None else found.given(supplied, "groups", name, key),
        by_mass=key == "mass_flow",
        solved=section.from_continuity,
    )


def _supplied(section: GroupSection) -> tuple[str | None, Measured | None]:
    for key in ("flow_rate", "mass_flow", "speed"):
        value: Measured | None = getattr(section, key)
        if value is not None:
            return key, value
    return None, None


def _reached(found: _Found, outcome: Outcome, recipe: Recipe, case: Case) -> set[int]:
    """The inputs whose whole effect is algebra on the table."""
    reached = set(found.used)
    if case.flow.velocity_gradient is None:
        reached.add(found.numbers.get(("fluid", "viscosity"), -1))  # serves estimates only

    def drop(*keys: str) -> None:
        reached.discard(found.numbers.get(keys, -1))

    for name, section in case.groups.items():
        key, value = _supplied(section)
        if key is not None and value is not None and value.value == 0.0:
            drop("groups", name, key)  # nothing that a factor could change
    if any(group.gas and group.exported and not group.absolute for group in recipe.groups):
        drop("fluid", "ambient_pressure")  # it shifts a density that varies
    if case.fluid.name is not None:
        drop("fluid", "temperature")  # properties from the library hang on it
    solved = [k for k, group in enumerate(recipe.groups) if group.solved]
    if any(recipe.mass_flow[k] == 0.0 for k in solved):
        reached.clear()
    return reached


def _runner(case: Case, outcome: Outcome, keys: Keys, threads: int | None) -> Callable[[float], Figures]:
    def run(value: float) -> Figures:
        return _again(moved_case(case, keys, value), outcome, keys, threads)

    return run


def _again(case: Case, before: Outcome, keys: Keys, threads: int | None) -> Figures:
    """Figures of a case with one number moved, on the surface that it has already."""
    assert before.shape is not None
    case, _ = named_fluid(case)
    try:
        flow, scalars = lay_with_scalars(case, before.shape)
        fluid, series = case.fluid, case.storage is not None and case.storage.is_series()
        storage, contents = before.balance.storage, before.balance.contents
        if not series and keys[0] in ("storage", "frame", "fluid"):
            from fluxmesh.balance.storage import Storage
            from fluxmesh.job.inside import contents_in, storage_in

            storage, contents = storage_in(case, before.shape) or Storage(), contents_in(case, before.shape)
        done = balance_of(
            before.surface,
            flow,
            anchor=case.anchor.at,
            hardware=hardware_of(case),
            mirror=case.surface.mirror,
            heat_ratio=None if fluid.heat_ratio is None else float(fluid.heat_ratio),
            gas_constant=None if fluid.gas_constant is None else float(fluid.gas_constant),
            scalars=scalars,
            losses=[((loss.between[0], loss.between[1]), loss.speed_of) for loss in case.loss],
            storage=None if case.storage is None else storage,
            contents=contents,
            threads=threads,
        )
    except InputError as error:
        raise type(error)(
            error.found,
            f"{'.'.join(keys)}, moved within its doubt: {error.where}".rstrip(": "),
            error.remedy or "Check the plus-minus",
        ) from error
    return figures(done.balance, energy=done.energy, carried=done.carried, losses=done.losses)


def _further(case: Case | None, outcome: Outcome, recipe: Recipe) -> Further | None:
    """What makes the further laws of an outcome from a changed balance."""
    energy, carried = outcome.energy, outcome.carried
    if energy is None and not carried and not outcome.losses:
        return None
    given = np.asarray(outcome.flow.mass_flux.where == AT_FACE)
    names = [group.name for group in outcome.surface.groups]
    asked = [(loss.between, loss.speed_of) for loss in outcome.losses]
    stored = outcome.balance.storage if case is not None and case.storage is not None else None

    def further(balance: Balance, levers: Levers | None, values: Array) -> Laws:
        mass_given = given[[names.index(group.name) for group in balance.setting.groups]]
        losses = port_losses(balance.table, balance.setting, balance.ports, asked)
        factors = None if levers is None else levers.multipliers(mass_given)
        changed = None
        if energy is not None and (factors is not None or energy.basis == "mechanical"):
            heat = np.ones(len(mass_given)) if factors is None else factors["mass"]
            if energy.basis == "temperature":
                heat = heat * _warmth(case, recipe, values)
            changed = _energy(case, outcome, energy, balance, heat, stored is not None)
        scalars = []
        for scalar in carried if factors is not None else ():
            assert factors is not None
            flux = scalar.group_flux * factors["mass" if scalar.per == "mass" else "volume"]
            known = np.full(flux.size, scalar.residual is not None) | np.isfinite(scalar.group_mean)
            fluxes = ScalarFlux(scalar.name, np.zeros(flux.size), flux, flux, known)
            balanced = carried_balance(
                balance.table,
                balance.setting,
                fluxes,
                per=scalar.per,
                unit=scalar.unit,
                source=scalar.source,
                storage=None if stored is None else balance.storage,
            )
            scalars.append(balanced)
        return changed, scalars, losses

    return further


def _warmth(case: Case | None, recipe: Recipe, values: Array) -> Array:
    """Factor of the enthalpy of a gas: of its temperature, and of the constant that its heat capacity follows from."""
    constant = 1.0
    if case is not None and case.fluid.heat_capacity is None and recipe.gas_constant is not None:
        constant = float(recipe.gas_constant.factor(values))
    warmer = [group.temperature for group in recipe.groups]
    return np.array([constant * (1.0 if one is None else float(one.factor(values))) for one in warmer])


def _energy(
    case: Case | None, outcome: Outcome, energy: EnergyBalance, balance: Balance, heat: Array, stored: bool
) -> EnergyBalance:
    table, setting, before = balance.table, balance.setting, outcome.balance.table
    liquid = outcome.flow.uniform_density() is not None and (case is None or case.fluid.law is None)
    if energy.basis == "mechanical":
        enthalpy = mechanical_enthalpy(table, setting)
    else:
        work = "pressure_volume_flow"
        flux = energy.group_enthalpy
        if liquid and energy.basis == "temperature":
            # the heat that is carried goes with the mass, the flow work as the table says
            ports = setting.ports()
            flux = (flux - np.where(ports, before.column(work), 0.0)) * heat + np.where(ports, table.column(work), 0.0)
        else:
            flux = flux * heat
        enthalpy = Enthalpy(energy.basis, flux, np.ones(flux.size, np.bool_), "", "")
    asked = None if case is None else case.energy
    return energy_balance(
        table,
        setting,
        enthalpy,
        storage=balance.storage if stored else None,
        fluid=balance.fluid,
        power=balance.power,
        heat=energy.heat if asked is None or asked.heat is None else float(asked.heat),
        shaft_power=energy.shaft_power_given,
        liquid=liquid,
    )
