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
    if not given and flow.velocity is None and flow.mass_flux is None:
        yield Problem(
            dotted("groups", name),
            f"{_called(name, group)} but nothing says how much flow passes",
            "Give flow_rate, mass_flow, speed or velocity here, or a velocity array in [flow]",
        )
    if "profile" in group.model_fields_set and not given:
        yield Problem(
            dotted("groups", name, "profile"),
            "no flow is supplied that it could spread",
            "Add a flow or leave it out",
        )


def _not_a_port(name: str, group: GroupSection) -> Iterator[Problem]:
    given = list(group.supplied_flow())
    given += ["profile"] if "profile" in group.model_fields_set else []
    given += ["density"] if group.density is not None else []
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


def _lacks_density(group: GroupSection, fluid: FluidSection, flow: FlowSection) -> bool:
    if fluid.density is not None or flow.density is not None or group.density is not None:
        return False
    if group.supplied_flow():
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
    pressure = flow.pressure
    if pressure is None:
        return
    if pressure.kind == "absolute" and fluid.ambient_pressure is None:
        yield Problem(
            "flow.pressure.kind",
            "the pressure is absolute, but the ambient pressure is not known",
            'Add ambient_pressure to [fluid], such as "101325 Pa"',
        )
    if pressure.kind == "kinematic" and fluid.density is None and flow.density is None:
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
    if fluid.density is None:
        yield Problem(
            "flow.pressure.head",
            "the head was removed, but there is no constant density to put it back with",
            'Add density to [fluid], or export the pressure with its head and write head = "included"',
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
