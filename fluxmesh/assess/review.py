"""What a reviewer would ask about a case: doubts, each with the line that would settle it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fluxmesh.balance.balance import Balance
from fluxmesh.field.flow import Flow
from fluxmesh.field.pressure import PressureKind
from fluxmesh.surface.surface import ControlSurface, Role

__all__ = ["Doubt", "Review", "review_of"]

# shares below which a reviewer would not ask (common practice, no source)
_LEAK = 1e-3
_REVERSED = 0.01
_PLANAR = 0.999


@dataclass(frozen=True)
class Doubt:
    """Something that may be wrong.

    Attributes
    ----------
    seen : str
        What was seen.
    matters : str
        Why it matters.
    settle : str
        What in the case would settle it.
    """

    seen: str
    matters: str
    settle: str


@dataclass(frozen=True)
class Review:
    """What `check` found.

    Attributes
    ----------
    facts : tuple of str
        What the case is, one sentence each.
    doubts : tuple of Doubt
        What may be wrong.
    """

    facts: tuple[str, ...]
    doubts: tuple[Doubt, ...]


def review_of(
    surface: ControlSurface, flow: Flow, balance: Balance, *, unused: tuple[str, ...] = (), length_unit: str = "m"
) -> Review:
    """Review a case that could be integrated.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    flow : Flow
        The flow on it.
    balance : Balance
        Its balance.
    unused : tuple of str, optional
        Arrays of the file that the case does not use.
    length_unit : str, optional
        Unit that the file's coordinates were read in.

    Returns
    -------
    Review
        Facts and doubts.
    """
    doubts = [
        *_direction_doubts(balance),
        *_leak_doubts(balance),
        *_port_doubts(balance),
        *_size_doubts(surface, length_unit),
        *_pressure_doubts(flow, balance),
        *_missing(balance),
    ]
    return Review(tuple(_facts(surface, balance, unused)), tuple(doubts))


def _facts(surface: ControlSurface, balance: Balance, unused: tuple[str, ...]) -> list[str]:
    table = balance.table
    lines = [
        f"The surface has {surface.face_count:,} faces and is {'closed' if surface.closed else 'open'}, in "
        f"{surface.shells} edge-connected piece{'s' if surface.shells != 1 else ''}"
    ]
    if balance.enclosed is not None:
        lines.append(f"It encloses {balance.enclosed.volume:.5g} m³")
    lines += surface.notes
    for k, group in enumerate(surface.groups):
        area = float(table.column("area")[k])
        faces = int(np.count_nonzero(surface.group_of_face == k))
        vector = table.column("area_vector")[k]
        flat = float(np.linalg.norm(vector)) / area if area > 0 else 0.0
        data = balance.setting.data
        known = [
            name
            for name, there in (
                ("flow", data.flux[k]),
                ("pressure", data.pressure[k]),
                ("traction", data.traction[k]),
            )
            if there
        ]
        facing = f", plane, normal ({', '.join(f'{x:.4g}' for x in vector / area)})" if flat > _PLANAR else ""
        lines.append(
            f"Group '{group.name}' ({group.role.value}): {faces:,} faces, {area:.5g} m²{facing}; "
            f"data: {', '.join(known) or 'none'}"
        )
    if unused:
        lines.append(f"Arrays that the case does not use: {', '.join(unused)}")
    return lines


def _direction_doubts(balance: Balance) -> list[Doubt]:
    doubts = []
    for group, flow in zip(balance.setting.groups, balance.table.column("mass_flow")):
        if (group.role is Role.INLET and flow > 0) or (group.role is Role.OUTLET and flow < 0):
            goes = "leaves" if flow > 0 else "enters"
            doubts.append(
                Doubt(
                    f"'{group.name}' is an {group.role.value}, but its flow {goes} ({abs(flow):.4g} kg/s)",
                    "Roles are swapped, or the velocity has the wrong sign",
                    f'groups.{group.name}.role = "{"outlet" if flow > 0 else "inlet"}", or "open"',
                )
            )
    return doubts


def _leak_doubts(balance: Balance) -> list[Doubt]:
    flows = balance.table.column("mass_flow")
    ports = balance.setting.ports()
    through = float(np.abs(flows[ports]).sum()) / 2
    # what the speeds along the surface could carry: a leak far below it is round-off
    table = balance.table
    sweep = float((table.column("density_area") * table.column("speed_area") / table.column("area").clip(1e-300)).sum())
    doubts = []
    for k, group in enumerate(balance.setting.groups):
        leak = abs(float(flows[k]))
        if not ports[k] and leak > _LEAK * through and leak > 1e-6 * sweep:
            share = f"{leak / through:.2%} of the flow through the ports" if through > 0 else f"{leak:.4g} kg/s"
            doubts.append(
                Doubt(
                    f"Flow passes the {group.role.value} '{group.name}': {share}",
                    "A wall lets nothing through; the velocity may be relative, or the group a port",
                    f'groups.{group.name}.role = "open", or another velocity array',
                )
            )
    return doubts


def _port_doubts(balance: Balance) -> list[Doubt]:
    doubts = []
    table = balance.table
    for k, group in enumerate(balance.setting.groups):
        if not group.role.is_port:
            continue
        share = balance.ports[group.name].reversed_share
        if share is not None and share > _REVERSED:
            doubts.append(
                Doubt(
                    f"{share:.1%} of what passes '{group.name}' flows backward",
                    "A control surface that cuts a recirculation is sensitive to interpolation",
                    "Move the cut to where the flow is one way",
                )
            )
        area = float(table.column("area")[k])
        flat = float(np.linalg.norm(table.column("area_vector")[k])) / area if area > 0 else 1.0
        if flat < _PLANAR and group.role is not Role.OPEN:
            doubts.append(
                Doubt(
                    f"'{group.name}' is not plane (its area vector is {flat:.3f} of its area)",
                    "Wall faces may be tagged as the port, or the other way round",
                    f"groups.{group.name}.tag, or surface.groups",
                )
            )
    return doubts


def _size_doubts(surface: ControlSurface, length_unit: str) -> list[Doubt]:
    size = float(np.linalg.norm(np.ptp(surface.points, axis=0)))
    if 1e-3 < size < 50.0:
        return []
    return [
        Doubt(
            f"The surface is {size:.3g} m across, its coordinates read as {length_unit}",
            "Lengths in millimetres read as metres make forces a million times too large",
            'surface.length_unit = "mm"' if size >= 50.0 else 'surface.length_unit = "m"',
        )
    ]


def _pressure_doubts(flow: Flow, balance: Balance) -> list[Doubt]:
    known = balance.setting.data.pressure
    area = float(balance.table.total("area", known)) if known.any() else 0.0
    if area == 0.0:
        return []
    mean = float(balance.table.total("pressure_area", known)) / area
    doubts = []
    if flow.meaning.kind is PressureKind.GAUGE and 0.8e5 < mean < 1.2e5:
        doubts.append(
            Doubt(
                f"The mean gauge pressure is {mean:.4g} Pa, near that of the atmosphere",
                "Absolute pressure read as gauge loads the ports with the atmosphere",
                'flow.pressure.kind = "absolute" and fluid.ambient_pressure',
            )
        )
    density = flow.uniform_density()
    comparable = balance.complete and bool(balance.setting.walls().any())
    if flow.meaning.kind is PressureKind.GAUGE and density is not None and density > 50.0 and comparable:
        pressure = balance.momentum.pressure()
        need = balance.momentum.flux() - balance.momentum.weight - balance.momentum.viscous()
        as_is = float(np.linalg.norm(pressure - need))
        if np.linalg.norm(pressure) > 0 and np.linalg.norm(density * pressure - need) < 0.1 * as_is:
            doubts.append(
                Doubt(
                    "The pressure closes the balance far better when multiplied by the density",
                    "Kinematic pressure (p over density) read as pressure makes forces too small by the density",
                    'flow.pressure.kind = "kinematic"',
                )
            )
    return doubts


def _missing(balance: Balance) -> list[Doubt]:
    doubts = []
    data = balance.setting.data
    for k, group in enumerate(balance.setting.groups):
        if group.role.is_port and not data.flux[k]:
            doubts.append(
                Doubt(
                    f"No flow is known at '{group.name}'",
                    "Mass and momentum cannot be balanced without it",
                    f"flow.velocity, or groups.{group.name}.flow_rate",
                )
            )
        if not data.pressure[k] and group.role is not Role.WALL:
            doubts.append(
                Doubt(
                    f"No pressure is known at '{group.name}'",
                    "The load from the balance needs it",
                    f"flow.pressure, or groups.{group.name}.pressure",
                )
            )
        if group.role is Role.WALL and data.pressure[k] and not data.traction[k]:
            doubts.append(
                Doubt(
                    f"No traction is known on '{group.name}'",
                    "The load from the walls lacks friction, and the residual holds it",
                    "flow.traction",
                )
            )
    return doubts
