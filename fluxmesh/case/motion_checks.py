"""What cannot stand together in the motion of the control surface, its storage, and the further budgets."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from itertools import pairwise

from fluxmesh.case.arrays import FlowSection
from fluxmesh.case.budgets import CarriedSection, EnergySection, LossSection
from fluxmesh.case.groups import GroupSection
from fluxmesh.case.motion import FrameSection, StorageSection
from fluxmesh.case.problems import Problem, dotted, meant
from fluxmesh.case.sections import FluidSection, SurfaceSection
from fluxmesh.units.wording import either, quoted

__all__ = ["budget_problems", "motion_problems"]

Groups = Mapping[str, GroupSection]


def motion_problems(
    surface: SurfaceSection,
    flow: FlowSection,
    groups: Groups,
    frame: FrameSection | None,
    storage: StorageSection | None,
) -> Iterator[Problem]:
    """Find faults in the motion of the control surface and in its storage.

    Parameters
    ----------
    surface : SurfaceSection
        The mesh.
    flow : FlowSection
        The arrays.
    groups : mapping of str to GroupSection
        The groups by name.
    frame : FrameSection or None
        The motion.
    storage : StorageSection or None
        The storage.

    Yields
    ------
    Problem
        One for each fault.
    """
    yield from _velocity_frames(flow, groups, frame)
    if frame is not None:
        yield from _frame(frame)
    if storage is not None:
        yield from _storage(storage)
    for key, table in (("frame", frame), ("storage", storage)):
        if table is not None and surface.mirror:
            yield Problem(
                "surface.mirror",
                f"a part model with a table [{key}] is not mirrored",
                "Give the whole model, or leave out mirror",
            )


def _velocity_frames(flow: FlowSection, groups: Groups, frame: FrameSection | None) -> Iterator[Problem]:
    if frame is None and flow.velocity is not None and flow.velocity.frame == "relative":
        yield Problem(
            "flow.velocity.frame",
            "the velocity is relative to the control surface, but nothing says how that moves",
            "Add a table [frame] with its velocity or rotation, or leave out frame",
        )
    for name, group in groups.items():
        if "velocity_frame" not in group.model_fields_set:
            continue
        key = dotted("groups", name, "velocity_frame")
        if group.velocity is None:
            yield Problem(key, "no velocity is given here", "Leave it out: it belongs to velocity")
        elif frame is None and group.velocity_frame == "relative":
            yield Problem(key, "nothing says how the control surface moves", "Add a table [frame], or leave it out")


def _frame(frame: FrameSection) -> Iterator[Problem]:
    moves = any(frame.velocity) or any(frame.acceleration)
    if frame.rotation is not None and float(frame.rotation.rate) == 0.0:
        yield Problem("frame.rotation.rate", "the rate is zero", "Leave out rotation")
    elif frame.rotation is None and not moves:
        yield Problem(
            "frame",
            "the control surface does not move",
            "Give velocity, acceleration or rotation, or leave out [frame]",
        )
    if frame.volume is not None and frame.rotation is None and not any(frame.acceleration):
        yield Problem(
            "frame.volume",
            "the flow inside has no use where the surface neither turns nor accelerates",
            "Leave it out",
        )


def _storage(storage: StorageSection) -> Iterator[Problem]:
    rates, snapshots = storage.given_rates(), storage.snapshots
    if not snapshots:
        if storage.at is not None:
            yield Problem("storage.at", "there are no snapshots", "Give snapshots, or leave it out")
        elif not rates:
            yield Problem("storage", "neither rates nor snapshots are given", "Give such as mass_rate, or snapshots")
        return
    if rates:
        yield Problem(
            "storage", f"{either(rates, 'and')} and snapshots are given", "Keep one: snapshots give the rates"
        )
    if len(snapshots) < 2:
        yield Problem("storage.snapshots", "there is only one", "A rate of change needs two or more")
        return
    times = [float(snapshot.time) for snapshot in snapshots]
    for k, (one, two) in enumerate(pairwise(times)):
        if not two > one:
            yield Problem(
                dotted("storage", "snapshots", k + 1, "time"),
                f"{two:g} s does not come after {one:g} s",
                "Times must rise from snapshot to snapshot",
            )
            return
    surfaces = [snapshot.surface is not None for snapshot in snapshots]
    volumes = [snapshot.volume is not None for snapshot in snapshots]
    if all(surfaces):
        if storage.at is not None:
            yield Problem("storage.at", "every snapshot has a surface, so all times are balanced", "Leave it out")
        if any(volumes) and not all(volumes):
            yield Problem(
                dotted("storage", "snapshots", volumes.index(False), "volume"),
                "missing, and other snapshots have one",
                "Give all of them or none",
            )
        return
    if any(surfaces):
        yield Problem(
            dotted("storage", "snapshots", surfaces.index(False), "surface"),
            "missing, and other snapshots have one",
            "Give all of them (a series), or none and the time of the surface as storage.at",
        )
        return
    if not all(volumes):
        yield Problem(dotted("storage", "snapshots", volumes.index(False), "volume"), "missing", "Give the volume file")
    if storage.at is None:
        yield Problem("storage.at", "missing", 'Give the time of the export of the surface, such as "0.1 s"')
    elif not times[0] <= float(storage.at) <= times[-1]:
        yield Problem(
            "storage.at",
            f"{float(storage.at):g} s lies outside the snapshots, which span {times[0]:g} to {times[-1]:g} s",
            "Give snapshots around it",
        )


def budget_problems(
    fluid: FluidSection,
    flow: FlowSection,
    groups: Groups,
    energy: EnergySection | None,
    carried: Sequence[CarriedSection],
    losses: Sequence[LossSection],
) -> Iterator[Problem]:
    """Find faults in energy, carried scalars and losses.

    Parameters
    ----------
    fluid : FluidSection
        The fluid.
    flow : FlowSection
        The arrays.
    groups : mapping of str to GroupSection
        The groups by name.
    energy : EnergySection or None
        Heat and shaft power.
    carried : sequence of CarriedSection
        Scalars.
    losses : sequence of LossSection
        Loss coefficients.

    Yields
    ------
    Problem
        One for each fault.
    """
    if fluid.pressure is not None and fluid.name is None:
        yield Problem("fluid.pressure", "no fluid is named, so it has no use", "Leave it out, or name the fluid")
    if energy is not None and energy.heat is None and energy.shaft_power is None:
        yield Problem(
            "energy", "neither heat nor shaft_power is given", 'Give such as heat = "0 W", or leave out [energy]'
        )
    if flow.enthalpy is not None and flow.temperature is not None and fluid.law is None:
        yield Problem("flow", "temperature and enthalpy are given", "Keep one: each gives the energy")
    yield from _carried(flow, groups, carried)
    for k, loss in enumerate(losses):
        yield from _loss(k, loss, groups)


def _carried(flow: FlowSection, groups: Groups, carried: Sequence[CarriedSection]) -> Iterator[Problem]:
    names = [entry.name for entry in carried]
    for k, name in enumerate(names):
        if name in names[:k]:
            yield Problem(dotted("carried", k, "name"), f"{quoted(name)} stands twice", "Give each scalar its own name")
        if carried[k].array is None and not any(name in group.carried for group in groups.values()):
            yield Problem(
                dotted("carried", k),
                f"nothing says how much {quoted(name)} there is",
                f"Give array here, or carried = {{ {name} = 0.1 }} in the groups of the ports",
            )
    for group, section in groups.items():
        for name in section.carried:
            if name not in names:
                yield Problem(
                    dotted("groups", group, "carried", name),
                    "there is no such entry of [[carried]]",
                    meant(name, names),
                )
        for key, given in (("carried", bool(section.carried)), ("enthalpy", section.enthalpy is not None)):
            if given and not section.role.is_port:
                yield Problem(dotted("groups", group, key), "no flow passes this group", f"Leave out {key}")


def _loss(k: int, loss: LossSection, groups: Groups) -> Iterator[Problem]:
    if len(loss.between) != 2 or loss.between[0] == loss.between[1]:
        yield Problem(dotted("loss", k, "between"), "not two ports", 'Write such as ["feed", "left"]')
        return
    for key, name in (("between", loss.between[0]), ("between", loss.between[1]), ("speed_of", loss.speed_of)):
        if name is None:
            continue
        if name not in groups:
            yield Problem(dotted("loss", k, key), f"there is no group {quoted(name)}", meant(name, groups))
        elif not groups[name].role.is_port:
            yield Problem(
                dotted("loss", k, key), f"group {quoted(name)} is no port", "Name an inlet, outlet or open group"
            )
