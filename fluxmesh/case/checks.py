"""What cannot stand together in the data of a case whose keys are each valid alone.

Every function yields all it finds; none of them knows where the case came from.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from fluxmesh.case.arrays import FlowSection
from fluxmesh.case.groups import GroupSection
from fluxmesh.case.problems import Problem, dotted, meant
from fluxmesh.case.sections import (
    ClosureSection,
    FluidSection,
    HardwareSection,
    ReportedSection,
)
from fluxmesh.surface.surface import Role
from fluxmesh.units.wording import either, quoted, with_article

__all__ = ["flow_problems", "group_problems", "section_problems"]

Groups = Mapping[str, GroupSection]


def group_problems(fluid: FluidSection, flow: FlowSection, groups: Groups) -> Iterator[Problem]:
    """Find faults in what is supplied for the groups.

    Parameters
    ----------
    fluid : FluidSection
        The fluid.
    flow : FlowSection
        The arrays.
    groups : mapping of str to GroupSection
        The groups by name.

    Yields
    ------
    Problem
        One for each fault.
    """
    for name, group in groups.items():
        if group.role.is_port:
            yield from _port(name, group, flow)
        else:
            yield from _not_a_port(name, group)
        yield from _supplied_pressure(name, group, fluid)
    solved = [name for name, group in groups.items() if group.from_continuity]
    if len(solved) > 1:
        yield Problem(
            "groups",
            f"under-determined: {either(map(quoted, solved), 'and')} are all to be solved from continuity",
            "One mass balance gives the flow of one group; supply the others",
        )
    yield from _gas(fluid, flow, groups)
    without = [name for name, group in groups.items() if group.role.is_port and _lacks_density(group, fluid, flow)]
    if without:
        yield Problem(
            "fluid.density",
            f"missing, and flow passes {either(map(quoted, without), 'and')}",
            "Give density in [fluid], an array for it in [flow], or density in each of these groups",
        )


def _called(name: str, group: GroupSection) -> str:
    noun = {Role.OPEN: "open boundary", Role.SYMMETRY: "symmetry cut"}.get(group.role, group.role.value)
    return f"group {quoted(name)} is {with_article(noun)}"


def _port(name: str, group: GroupSection, flow: FlowSection) -> Iterator[Problem]:
    given = group.supplied_flow()
    if len(given) > 1:
        yield Problem(
            dotted("groups", name),
            f"group {quoted(name)} is given {either(given, 'and')}",
            "Keep one: it sets the others",
        )
    if group.role is not Role.OPEN:
        way = "leave" if group.role is Role.INLET else "enter"
        for key in ("flow_rate", "mass_flow", "speed"):
            measured = getattr(group, key)
            if measured is not None and measured.value < 0.0:
                yield Problem(
                    dotted("groups", name, key),
                    f"{_called(name, group)} but its {key} is negative, so it would {way}",
                    "Give the magnitude, or change the role",
                )
    if group.from_continuity and given:
        yield Problem(
            dotted("groups", name),
            f"over-determined: the flow is to be solved from continuity, and {either(given, 'and')} is given",
            "Keep one of them",
        )
    solved = group.from_continuity
    if not given and not solved and flow.velocity is None and flow.mass_flux is None:
        yield Problem(
            dotted("groups", name),
            f"{_called(name, group)} but nothing says how much flow passes",
            "Give flow_rate, mass_flow, speed or velocity here, a velocity array in [flow], "
            "or from_continuity = true in one group",
        )
    yield from _profile(name, group, bool(given) or solved)


def _profile(name: str, group: GroupSection, flows: bool) -> Iterator[Problem]:
    if group.velocity is not None and group.profile != "uniform":
        yield Problem(
            dotted("groups", name, "profile"),
            f"the velocity is a vector, and the profile {quoted(group.profile)} lies along the normal",
            "Give flow_rate, mass_flow or speed in place of velocity",
        )
    if group.exponent is not None and group.profile != "power-law":
        yield Problem(dotted("groups", name, "exponent"), "only a power law has one", 'Add profile = "power-law"')
    if (group.profile_table is None) != (group.profile != "table"):
        yield Problem(
            dotted("groups", name, "profile_table"),
            'missing, and profile is "table"' if group.profile_table is None else 'profile is not "table"',
            'Give both profile = "table" and profile_table = { radius = [..], speed = [..] }',
        )
    table = group.profile_table
    if table is not None and (table.radius is None) == (table.wall_distance is None):
        yield Problem(
            dotted("groups", name, "profile_table"),
            "neither radius nor wall_distance is given"
            if table.radius is None
            else "radius and wall_distance are given",
            "Give one of them: the distance from the middle of the port, or from its wall",
        )
    if "profile" in group.model_fields_set and not flows:
        yield Problem(
            dotted("groups", name, "profile"),
            "no flow is supplied that it could spread",
            "Add a flow or leave it out",
        )


def _not_a_port(name: str, group: GroupSection) -> Iterator[Problem]:
    given = list(group.supplied_flow())
    given += ["profile"] if "profile" in group.model_fields_set else []
    given += ["density"] if group.density is not None else []
    given += ["from_continuity"] if group.from_continuity else []
    for key in given:
        yield Problem(
            dotted("groups", name, key),
            f"{_called(name, group)}, which no flow passes",
            f"Leave out {key}, or make the role inlet, outlet or open",
        )


def _supplied_pressure(name: str, group: GroupSection, fluid: FluidSection) -> Iterator[Problem]:
    if group.pressure is None:
        if "pressure_kind" in group.model_fields_set:
            yield Problem(
                dotted("groups", name, "pressure_kind"),
                "no pressure is given",
                "Add pressure or leave it out",
            )
        return
    absolute = group.pressure_kind == "absolute"
    if absolute and fluid.ambient_pressure is None:
        yield Problem(
            dotted("groups", name, "pressure_kind"),
            "the pressure is absolute, but the ambient pressure is not known",
            'Add ambient_pressure to [fluid], such as "101325 Pa"',
        )
    ambient = fluid.ambient_pressure.value if fluid.ambient_pressure is not None and not absolute else 0.0
    if (absolute or fluid.ambient_pressure is not None) and group.pressure.value + ambient < 0.0:
        yield Problem(
            dotted("groups", name, "pressure"),
            f"the pressure would be {group.pressure.value + ambient:g} Pa absolute, below vacuum",
            "Check its sign, its unit and pressure_kind",
        )


def _gas(fluid: FluidSection, flow: FlowSection, groups: Groups) -> Iterator[Problem]:
    if fluid.law is None:
        for key in ("gas_constant", "heat_ratio"):
            if getattr(fluid, key) is not None:
                yield Problem(dotted("fluid", key), "only a gas has it", 'Add law = "ideal-gas", or leave it out')
        if fluid.heat_capacity is not None or fluid.name is not None:
            return
        idle = [] if fluid.temperature is None else ["fluid.temperature"]
        idle += [] if flow.temperature is None else ["flow.temperature"]
        idle += [
            dotted("groups", name, "temperature") for name, group in groups.items() if group.temperature is not None
        ]
        for key in idle:
            yield Problem(
                key,
                "a temperature has no use here",
                'Add law = "ideal-gas" to [fluid], or heat_capacity for the energy, or leave it out',
            )
        return
    if fluid.density is not None or flow.density is not None:
        where = "fluid.density" if fluid.density is not None else "flow.density"
        yield Problem(where, "a density is given, and the law of ideal gases too", "Keep one")
    for key, example in (("gas_constant", "287.05 J/(kg K)"), ("ambient_pressure", "101325 Pa")):
        if getattr(fluid, key) is None and not (fluid.name is not None and key == "gas_constant"):
            yield Problem(
                dotted("fluid", key), "missing, and the law of ideal gases needs it", f'Give such as "{example}"'
            )
    if fluid.temperature is None and flow.temperature is None:
        for name, group in groups.items():
            if group.role.is_port and group.temperature is None and group.density is None:
                yield Problem(
                    dotted("groups", name, "temperature"),
                    "missing, and the law of ideal gases needs it",
                    "Give it here, in [fluid], or as an array in [flow]",
                )


def _lacks_density(group: GroupSection, fluid: FluidSection, flow: FlowSection) -> bool:
    if fluid.law is not None or fluid.name is not None:
        return False
    if fluid.density is not None or flow.density is not None or group.density is not None:
        return False
    if group.supplied_flow() or group.from_continuity:
        return True
    # an exported mass flux carries mass and momentum by itself, given the velocity
    return flow.velocity is not None if flow.mass_flux is None else flow.velocity is None


def flow_problems(fluid: FluidSection, flow: FlowSection) -> Iterator[Problem]:
    """Find what the arrays need and the fluid does not say.

    Parameters
    ----------
    fluid : FluidSection
        The fluid.
    flow : FlowSection
        The arrays.

    Yields
    ------
    Problem
        One for each fault.
    """
    yield from _sources(fluid, flow)
    pressure = flow.pressure
    if pressure is None:
        return
    if pressure.kind == "absolute" and fluid.ambient_pressure is None:
        yield Problem(
            "flow.pressure.kind",
            "the pressure is absolute, but the ambient pressure is not known",
            'Add ambient_pressure to [fluid], such as "101325 Pa"',
        )
    named = fluid.name is not None and fluid.law is None
    if pressure.kind == "kinematic" and fluid.density is None and flow.density is None and not named:
        yield Problem(
            "flow.pressure.kind",
            "the pressure is kinematic, but the density is not known",
            'Add density to [fluid], such as "998.2 kg/m^3"',
        )
    if pressure.head == "included":
        if "datum" in pressure.model_fields_set:
            yield Problem("flow.pressure.datum", 'it has no use while head is "included"', "Leave out one of the two")
        return
    if not any(fluid.gravity):
        yield Problem(
            "flow.pressure.head",
            "the head was removed, but there is no gravity",
            "Add gravity = [x, y, z] to [fluid]",
        )
    if fluid.density is None and not named:
        yield Problem(
            "flow.pressure.head",
            "the head was removed, but there is no constant density to put it back with",
            'Add density to [fluid], or export the pressure with its head and write head = "included"',
        )


def _sources(fluid: FluidSection, flow: FlowSection) -> Iterator[Problem]:
    if flow.volume is not None and flow.points is not None:
        yield Problem("flow", "both volume and points are given", "Keep one: the arrays are in one of them")
    sampled = flow.volume is not None or flow.points is not None
    if sampled and flow.mass_flux is not None:
        yield Problem(
            "flow.mass_flux", "a mass flux belongs to faces, and the arrays are sampled", "Leave one of them out"
        )
    given = [key for key in ("traction", "stress", "velocity_gradient") if getattr(flow, key) is not None]
    if len(given) > 1:
        yield Problem("flow", f"{either(given, 'and')} are given", "Keep one: each gives the traction")
    if flow.velocity_gradient is not None and fluid.viscosity is None and fluid.name is None:
        yield Problem(
            "fluid.viscosity",
            "missing, and the traction is to be made from the velocity gradient",
            'Give it, such as "1.0 mPa s"',
        )


def section_problems(
    fluid: FluidSection,
    groups: Groups,
    hardware: HardwareSection | None,
    closure: ClosureSection,
    reported: ReportedSection | None,
) -> Iterator[Problem]:
    """Find faults between the small tables and the groups.

    Parameters
    ----------
    fluid : FluidSection
        The fluid.
    groups : mapping of str to GroupSection
        The groups by name.
    hardware : HardwareSection or None
        Mass of the hardware.
    closure : ClosureSection
        When a balance counts as closed.
    reported : ReportedSection or None
        What the solver printed.

    Yields
    ------
    Problem
        One for each fault.
    """
    if hardware is not None and hardware.mass is None:
        yield Problem("hardware.mass", "missing", 'Give the mass, such as "12.5 kg", or leave out [hardware]')
    elif hardware is not None and hardware.centre is None and any(fluid.gravity):
        yield Problem("hardware.centre", "missing, and the weight needs a point to act at", "Give centre = [x, y, z]")
    walls = [name for name, group in groups.items() if group.role is Role.WALL]
    if walls and "encloses_hardware" in closure.model_fields_set:
        yield Problem(
            "closure.encloses_hardware",
            f"group {quoted(walls[0])} is a wall, so the hardware is on the surface, not inside it",
            "Leave it out; it is for surfaces without walls",
        )
    if reported is None:
        return
    if reported.force is None and reported.moment is None:
        yield Problem("reported", "neither force nor moment is given", "Give one of them, or leave out [reported]")
    for name in reported.on or ():
        if name not in groups:
            yield Problem("reported.on", f"there is no group {quoted(name)}", meant(name, groups))
