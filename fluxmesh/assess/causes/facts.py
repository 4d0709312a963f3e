"""What a table of integrals does not tell of its own making: which numbers were exported, and how they were read."""

from __future__ import annotations

from dataclasses import dataclass, field
from enum import StrEnum

import numpy as np
from numpy.typing import NDArray

from fluxmesh.balance.setting import Setting
from fluxmesh.field.flow import Flow
from fluxmesh.field.pressure import Head, PressureKind
from fluxmesh.integral.layout import ABSENT, PER_GROUP

__all__ = ["Facts", "Source", "facts_of", "plain_facts"]

Triple = tuple[float, float, float]


class Source(StrEnum):
    """Where the flow through a group came from: that decides how it answers to another unit or density."""

    ABSENT = "absent"
    ARRAY = "array"  # an exported velocity
    MASS_FLUX = "mass_flux"  # an exported mass flow of each face, with an exported velocity
    VELOCITY = "velocity"  # supplied velocity or speed
    FLOW_RATE = "flow_rate"  # supplied volume flow
    MASS_FLOW = "mass_flow"  # supplied mass flow
    CONTINUITY = "from_continuity"  # solved from the other flows


@dataclass(frozen=True, eq=False)
class Facts:
    """How the data of a balance were read.

    Attributes
    ----------
    flow : tuple of Source
        One a group.
    pressure_array : ndarray of bool, shape (n_groups,)
        Groups whose pressure is an exported one, not a supplied value.
    kind : PressureKind
        As what the exported pressure was read.
    head : Head
        Whether the exported pressure was taken to hold the hydrostatic head.
    datum : tuple of 3 floats
        Where a removed head is zero, m.
    ambient : float or None
        Ambient absolute pressure, Pa.
    length_unit : str
        Unit of the file's coordinates.
    speed_unit, pressure_unit : str
        Units of the exported velocity and pressure; empty where none is stated.
    velocity_frame : {"absolute", "relative"}
        In which frame the exported velocity was taken to be.
    traction_key : str
        The key of ``[flow]`` that the traction comes from; empty where there is none.
    traction_on : {"wall", "fluid"}
        Which body the exported traction was taken to act on.
    mirrored : bool
        Whether a part model was made whole.
    flux_key : str
        The key of ``[flow]`` that says what sign a mass flux has.
    velocities : dict of str to tuple of 3 floats
        Velocities that are supplied, by group, m/s.
    """

    flow: tuple[Source, ...]
    pressure_array: NDArray[np.bool_]
    kind: PressureKind = PressureKind.GAUGE
    head: Head = Head.INCLUDED
    datum: Triple = (0.0, 0.0, 0.0)
    ambient: float | None = None
    length_unit: str = "m"
    speed_unit: str = "m/s"
    pressure_unit: str = ""
    velocity_frame: str = "absolute"
    traction_key: str = ""
    traction_on: str = "fluid"
    mirrored: bool = False
    flux_key: str = "face-normal"
    velocities: dict[str, Triple] = field(default_factory=dict)

    def supplied(self) -> NDArray[np.bool_]:
        """Return which groups have a supplied flow, shape (n_groups,)."""
        given = (Source.VELOCITY, Source.FLOW_RATE, Source.MASS_FLOW)
        return np.array([source in given for source in self.flow])

    def exported(self) -> NDArray[np.bool_]:
        """Return which groups have an exported velocity, shape (n_groups,)."""
        return np.array([source in (Source.ARRAY, Source.MASS_FLUX) for source in self.flow])


def plain_facts(setting: Setting) -> Facts:
    """Return the facts of a table that comes without a flow: gauge pressure, everything exported that is not supplied.

    Parameters
    ----------
    setting : Setting
        The setting of the balance.
    """
    flows = [
        Source.ABSENT if not known else Source.VELOCITY if group.name in setting.supplied else Source.ARRAY
        for group, known in zip(setting.groups, setting.data.flux)
    ]
    return Facts(
        tuple(flows),
        np.asarray(setting.data.pressure, dtype=np.bool_).copy(),
        ambient=setting.ambient,
        traction_key="traction" if setting.data.traction.any() else "",
    )


def facts_of(flow: Flow, setting: Setting, names: tuple[str, ...]) -> Facts:
    """Return the facts that a flow tells.

    Parameters
    ----------
    flow : Flow
        The flow that was integrated.
    setting : Setting
        The setting of its balance, whose groups may be fewer (of a part model made whole).
    names : tuple of str
        Names of the groups of the flow.
    """
    rows = [names.index(group.name) for group in setting.groups]
    flows = []
    for row in rows:
        velocity, mass = int(flow.velocity.where[row]), int(flow.mass_flux.where[row])
        if mass != ABSENT:
            flows.append(Source.MASS_FLUX)
        elif velocity == ABSENT:
            flows.append(Source.ABSENT)
        else:
            flows.append(Source.VELOCITY if velocity == PER_GROUP else Source.ARRAY)
    one_value = flow.velocity.where[rows] == PER_GROUP
    if one_value.all() and len({tuple(flow.velocity.group[row]) for row in rows}) == 1:
        # one velocity everywhere was laid as a whole, not supplied for a group
        flows = [Source.ARRAY if source is Source.VELOCITY else source for source in flows]
    present = flow.traction.present()
    return Facts(
        flow=tuple(flows),
        pressure_array=np.asarray(flow.pressure.where[rows] > PER_GROUP),
        kind=flow.meaning.kind,
        head=flow.meaning.head,
        datum=flow.meaning.datum,
        ambient=flow.ambient,
        traction_key="traction" if present.any() else "",
        traction_on="wall" if flow.traction.scale < 0 else "fluid",
        velocities={
            setting.groups[k].name: _triple(flow.velocity.group[row])
            for k, row in enumerate(rows)
            if flows[k] is Source.VELOCITY
        },
    )


def _triple(vector: NDArray[np.float64]) -> Triple:
    return float(vector[0]), float(vector[1]), float(vector[2])
