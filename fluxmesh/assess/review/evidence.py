"""What a review looks at: the surface, the flow, its balance, and what the case says of them, as plain data."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from fluxmesh.assess.guess import ArrayGuess
from fluxmesh.assess.review.faces import Floats, Indices, some_faces, some_geometry, some_values
from fluxmesh.balance.balance import Balance
from fluxmesh.field.field import Field
from fluxmesh.field.flow import Flow
from fluxmesh.surface.extent import used_box
from fluxmesh.surface.face_geometry import FaceGeometry
from fluxmesh.surface.surface import ControlSurface, Group

__all__ = ["Evidence", "LeftTag", "NamedArray", "Supplied"]


@dataclass(frozen=True)
class NamedArray:
    """An array that the case names.

    Attributes
    ----------
    quantity : str
        "velocity", "pressure", ...: the key in ``[flow]``.
    names : tuple of str
        One name, or those of three components.
    factor : float
        What the unit in the case takes it to SI with.
    """

    quantity: str
    names: tuple[str, ...]
    factor: float


@dataclass(frozen=True)
class LeftTag:
    """A tag or set in the file that no group of the case names.

    Attributes
    ----------
    tag : int or str
        The value or name.
    rest : str
        The group that takes its faces as the rest.
    faces : int
        Their number.
    flatness : float
        Length of their area vector over their area: 1 for a plane.
    """

    tag: int | str
    rest: str
    faces: int
    flatness: float


@dataclass(frozen=True)
class Supplied:
    """The flow that the case supplies for a group.

    Attributes
    ----------
    key : str
        "flow_rate", "mass_flow", "speed" or "velocity".
    value : float or tuple of 3 floats
        In SI.
    """

    key: str
    value: float | tuple[float, float, float]


@dataclass(frozen=True, eq=False)
class Evidence:
    """All that a review looks at.

    Attributes
    ----------
    surface, flow, balance
        What was read, laid and integrated.
    length_unit : str
        Unit that the file's coordinates were read in.
    stated : frozenset of str
        Dotted keys that the case states, such as "flow.pressure.kind".
    named : tuple of NamedArray
        Arrays that the case names.
    spare : tuple of ArrayGuess
        What the arrays are that it does not name, the likeliest first.
    ranges : mapping of str to (float, float)
        Least and largest value of these arrays where they are scalars, in the file's unit.
    unused : tuple of str
        Names of all arrays that it does not name.
    left_tags : tuple of LeftTag
        Tags or sets that no group names.
    other_groups : tuple of str
        Lines of ``[surface]`` by which the file could name the groups, where
        the case picks them instead.
    supplied : mapping of str to Supplied
        Flow that is supplied for groups.
    single : bool
        Whether the file's coordinates have 32 bits.
    tolerance : float
        Largest relative residual that closes.
    """

    surface: ControlSurface
    flow: Flow
    balance: Balance
    length_unit: str = "m"
    stated: frozenset[str] = frozenset()
    named: tuple[NamedArray, ...] = ()
    spare: tuple[ArrayGuess, ...] = ()
    ranges: Mapping[str, tuple[float, float]] = field(default_factory=dict)
    unused: tuple[str, ...] = ()
    left_tags: tuple[LeftTag, ...] = ()
    other_groups: tuple[str, ...] = ()
    supplied: Mapping[str, Supplied] = field(default_factory=dict)
    single: bool = False
    tolerance: float = 0.01

    @property
    def groups(self) -> tuple[Group, ...]:
        """The groups of the surface."""
        return self.surface.groups

    @cached_property
    def box(self) -> tuple[Floats, Floats]:
        """Lowest and highest coordinates of the points that faces use, m."""
        return used_box(self.surface.points, self.surface.connectivity)

    @property
    def size(self) -> float:
        """Diagonal of that box, m."""
        return float(np.linalg.norm(self.box[1] - self.box[0]))

    @cached_property
    def walls(self) -> tuple[int, ...]:
        """Numbers of the groups that are hardware."""
        return tuple(int(k) for k in np.flatnonzero(self.balance.setting.walls()))

    @cached_property
    def flowing(self) -> tuple[int, ...]:
        """Numbers of the ports whose flow is known."""
        setting = self.balance.setting
        return tuple(int(k) for k in np.flatnonzero(setting.ports() & setting.data.flux))

    @cached_property
    def through(self) -> float:
        """Half of all mass that passes the ports, either way, kg/s."""
        ports = list(self.flowing)
        flow = np.abs(self.balance.table.column("mass_flow")[ports])
        backward = self.balance.table.column("reversed_mass_flow")[ports]
        forward = self.balance.table.column("mass_flow")[ports] + backward
        return float((flow + 2 * np.minimum(forward, backward)).sum()) / 2

    def port_mean(self, column: str) -> float:
        """Return the mean over the ports' area of a column of the table that is an area integral.

        Parameters
        ----------
        column : str
            Such as "speed_area" or "dynamic_pressure_area".

        Returns
        -------
        float
            0 when no flow is known at any port.
        """
        ports = list(self.flowing)
        area = float(self.balance.table.column("area")[ports].sum())
        return float(self.balance.table.column(column)[ports].sum()) / area if area > 0 else 0.0

    @cached_property
    def dynamic_pressure(self) -> float:
        """Mean of ``rho V²/2`` over the ports, Pa."""
        return self.port_mean("dynamic_pressure_area")

    @cached_property
    def port_speed(self) -> float:
        """Mean of ``|V|`` over the ports, m/s."""
        return self.port_mean("speed_area")

    def faces(self, group: int) -> Indices:
        """Return some faces of a group."""
        return some_faces(self.surface, group)

    def geometry(self, faces: Indices) -> FaceGeometry:
        """Return areas, normals and centroids of some faces."""
        return some_geometry(self.surface, faces)

    def values(self, of: Field, faces: Indices) -> Floats:
        """Return the mean of a field over some faces of one group."""
        return some_values(self.surface, self.flow, of, faces)

    def has_array(self, of: Field) -> bool:
        """Return whether any group takes a field from an exported array."""
        return bool((of.where > 1).any())
