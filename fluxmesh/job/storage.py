"""Rates of what the volume of a case holds: as given, or from its snapshots."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from fluxmesh.balance.storage import Storage, storage_from_contents
from fluxmesh.balance.weight import Enclosed, enclosed_volume
from fluxmesh.case.model import Case
from fluxmesh.case.motion import StorageSection
from fluxmesh.errors import CaseError
from fluxmesh.field.contents import Contents, relative_contents
from fluxmesh.field.domain import require_same_domain
from fluxmesh.field.flow import integrate_flow, still_flow
from fluxmesh.field.frame import Frame
from fluxmesh.job.contents import read_contents
from fluxmesh.job.laid import frame_of
from fluxmesh.job.shape import Shape

__all__ = ["contents_over_time", "frame_at", "has_one_density", "is_mechanical", "storage_of"]


def frame_at(frame: Frame, lapse: float) -> Frame:
    """Return the motion of a control surface some time later, in its own axes.

    Parameters
    ----------
    frame : Frame
        The motion.
    lapse : float
        How much later, s; below zero for earlier.

    Returns
    -------
    Frame
        With the velocity ``U + (a - Ω × U) lapse``: the second term is there because
        the components are those along axes that turn with the surface. It leaves
        out what is of second order in the lapse, which a rate of second order does not see.
    """
    velocity, acceleration = np.asarray(frame.velocity), np.asarray(frame.acceleration)
    changed = velocity + (acceleration - np.cross(frame.spin, velocity)) * lapse
    return replace(frame, velocity=(float(changed[0]), float(changed[1]), float(changed[2])))


def has_one_density(case: Case) -> bool:
    """Return whether the fluid of a case has one and the same density everywhere and always.

    Parameters
    ----------
    case : Case
        The case.
    """
    own = any(section.density is not None for section in case.groups.values())
    return case.flow.density is None and case.fluid.law is None and not own


def is_mechanical(case: Case) -> bool:
    """Return whether the energy of a case is that of motion and pressure only: the internal one does not matter.

    Parameters
    ----------
    case : Case
        The case.
    """
    heated = any(section.enthalpy is not None or section.temperature is not None for section in case.groups.values())
    arrays = case.flow.enthalpy is not None or case.flow.temperature is not None
    return has_one_density(case) and not (heated or arrays or case.fluid.temperature is not None)


def contents_over_time(
    case: Case, storage: StorageSection, at: float, enclosed: Enclosed | None
) -> tuple[Contents, ...]:
    """Read what the volume holds at every snapshot.

    Parameters
    ----------
    case : Case
        The case.
    storage : StorageSection
        Its snapshots, each with a volume.
    at : float
        When the motion of the control surface is the one that the case gives, s.
    enclosed : Enclosed or None
        What the control surface encloses; None where it is open.

    Returns
    -------
    tuple of Contents
        Of velocities relative to the control surface, about the anchor.

    Raises
    ------
    InputError
        A volume that cannot be read, lacks an array, or is not what the control
        surface encloses.
    """
    frame = frame_of(case)
    absolute = case.flow.velocity is not None and case.flow.velocity.frame == "absolute"
    found: list[Contents] = []
    names: list[str] = []
    for number, snapshot in enumerate(storage.snapshots):
        if snapshot.volume is None:
            raise CaseError(
                "missing", where=f"storage.snapshots.{number + 1}.volume", remedy="Give the file of the flow inside"
            )
        held = read_contents(case, snapshot.volume.file, snapshot.volume.unit, case.anchor.at)
        if frame is not None and absolute:
            held = relative_contents(held, frame_at(frame, float(snapshot.time) - at))
        found.append(held)
        names.append(snapshot.volume.file.name)
        # a wrong unit is told after one file, not after all
        _require_domain(found, names, enclosed)
    return tuple(found)


def _require_domain(found: Sequence[Contents], names: Sequence[str], enclosed: Enclosed | None) -> None:
    last = [0, len(found) - 1] if len(found) > 1 else [0]
    require_same_domain(
        [found[k] for k in last],
        None if enclosed is None else enclosed.volume,
        None if enclosed is None else enclosed.centroid,
        [names[k] for k in last],
    )


def storage_of(case: Case, shape: Shape) -> Storage | None:
    """Return the rates that a case gives, or that its snapshots tell.

    Parameters
    ----------
    case : Case
        The case; not a series, see `fluxmesh.job.series.run_series`.
    shape : Shape
        Its surface: the volumes must fill it.

    Returns
    -------
    Storage or None
        None where the case has no table ``[storage]``: the flow is steady.

    Raises
    ------
    InputError
        A volume that cannot be read, lacks an array, or is not what the control
        surface encloses.
    """
    asked = case.storage
    if asked is None:
        return None
    if not asked.snapshots:
        return _given(asked)
    if asked.at is None:
        raise CaseError("missing", where="storage.at", remedy="Give the time of the export of the surface")
    at = float(asked.at)
    enclosed = None
    if shape.surface.closed:
        enclosed = enclosed_volume(integrate_flow(shape.surface, still_flow(shape.surface)))
    held = contents_over_time(case, asked, at, enclosed)
    times = [float(snapshot.time) for snapshot in asked.snapshots]
    return storage_from_contents(times, held, at, case.anchor.at, mechanical=is_mechanical(case))


def _given(asked: StorageSection) -> Storage:
    keys = asked.given_rates()
    lacking = [
        word
        for key, word in (
            ("mass_rate", "mass"),
            ("momentum_rate", "momentum"),
            ("angular_momentum_rate", "angular momentum"),
        )
        if key not in keys
    ]
    notes = [f"Rates of storage are as given: {', '.join(keys)}"]
    if lacking:
        notes.append(f"No rate of {' and '.join(lacking)} is given, and it counts as zero")
    return Storage(
        mass=0.0 if asked.mass_rate is None else float(asked.mass_rate),
        momentum=np.array(asked.momentum_rate or (0.0, 0.0, 0.0)),
        angular_momentum=np.array(asked.angular_momentum_rate or (0.0, 0.0, 0.0)),
        energy=None if asked.energy_rate is None else float(asked.energy_rate),
        basis="given",
        notes=tuple(notes),
    )
