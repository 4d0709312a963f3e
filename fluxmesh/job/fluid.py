"""The fluid of a case that names it: what the case does not say comes from a library of properties."""

from __future__ import annotations

from fluxmesh.case.model import Case
from fluxmesh.errors import FieldError
from fluxmesh.units import Measured

__all__ = ["named_fluid"]


def named_fluid(case: Case) -> tuple[Case, tuple[str, ...]]:
    """Return a case with the properties of the fluid that it names.

    Parameters
    ----------
    case : Case
        The case.

    Returns
    -------
    case : Case
        The same where no fluid is named; what was given stays.
    notes : tuple of str
        What was taken from where.

    Raises
    ------
    FieldError
        A fluid, temperature or pressure that the library does not have, or no library.
    """
    fluid = case.fluid
    if fluid.name is None:
        return case, ()
    from fluxmesh.field.fill import fill_fluid

    gas = fluid.law is not None
    keys = ["viscosity", "heat_capacity"]
    if gas:
        keys += ["gas_constant", "heat_ratio"]
    elif case.flow.density is None:
        keys.append("density")
    given = {key: _number(getattr(fluid, key)) for key in keys}
    try:
        filled = fill_fluid(
            fluid.name,
            given,
            temperature=_number(fluid.temperature),
            pressure=_number(fluid.pressure),
            ambient=_number(fluid.ambient_pressure),
            ideal_gas=gas,
        )
    except FieldError as error:
        raise FieldError(error.found, f"{case.path.name}: {error.where or 'fluid.name'}", error.remedy) from error
    update = {key: Measured(value) for key, value in filled.values.items() if given[key] is None and value is not None}
    return case.model_copy(update={"fluid": fluid.model_copy(update=update)}), filled.notes


def _number(value: Measured | None) -> float | None:
    return None if value is None else float(value)
