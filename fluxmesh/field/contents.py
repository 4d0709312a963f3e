"""What a volume holds: mass, momentum, energy and carried amounts, from the cells of a volume mesh."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from math import fsum, isfinite
from typing import Final, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fluxmesh.errors import FieldError
from fluxmesh.field.frame import Frame
from fluxmesh.field.volume import VolumeArray, array_of
from fluxmesh.field.volume_blocks import cell_kinds
from fluxmesh.field.volume_boxes import box_of
from fluxmesh.field.volume_cells import cell_points, used_nodes
from fluxmesh.integral.cells import CellTotals, integrate_cells
from fluxmesh.surface.readers.cell_shapes import plural
from fluxmesh.surface.readers.volume_grid import VolumeMesh

__all__ = ["Carried", "Contents", "contents_about", "contents_of", "relative_contents"]

Vector = NDArray[np.float64]
Array = NDArray[np.float64]
Source = tuple[str, ...] | VolumeArray

_LEVI_CIVITA: Final = np.zeros((3, 3, 3))
_LEVI_CIVITA[[0, 1, 2], [1, 2, 0], [2, 0, 1]] = 1.0
_LEVI_CIVITA[[0, 2, 1], [2, 1, 0], [1, 0, 2]] = -1.0


@dataclass(frozen=True, eq=False)
class Contents:
    """Integrals over a volume; None where a field that they need is not known.

    Attributes
    ----------
    origin : ndarray, shape (3,), float64
        Point that positions x are taken about, m.
    volume : float
        m^3.
    centroid : ndarray, shape (3,), float64
        Of the volume, as an absolute position, m.
    mass : float or None
        Integral of the density, kg.
    mass_moment : ndarray, shape (3,), float64, or None
        Integral of ``rho x``, kg m.
    mass_inertia : ndarray, shape (3, 3), float64, or None
        Integral of ``rho x_i x_j``, kg m².
    momentum : ndarray, shape (3,), float64, or None
        Integral of ``rho v``, kg m/s, with v as in the file: absolute or
        relative to a control surface, the caller knows.
    moment_of_velocity : ndarray, shape (3, 3), float64, or None
        Integral of ``rho x_i v_j``, kg m²/s.
    kinetic_energy : float or None
        Integral of ``rho v²/2``, J.
    internal_energy : float or None
        Integral of ``rho e``, J.
    carried : mapping of str to float
        By name the integral of ``rho phi`` (of an amount a mass) or of ``phi``
        (of an amount a volume).
    """

    origin: Vector
    volume: float
    centroid: Vector
    mass: float | None = None
    mass_moment: Vector | None = None
    mass_inertia: Array | None = None
    momentum: Vector | None = None
    moment_of_velocity: Array | None = None
    kinetic_energy: float | None = None
    internal_energy: float | None = None
    carried: Mapping[str, float] = field(default_factory=dict)

    @property
    def angular_momentum(self) -> Vector | None:
        """Integral of ``x × rho v`` about the origin, shape (3,), kg m²/s; None without a velocity."""
        if self.moment_of_velocity is None:
            return None
        return np.asarray(np.einsum("kij,ij->k", _LEVI_CIVITA, self.moment_of_velocity))


@dataclass(frozen=True, eq=False)
class Carried:
    """A scalar that the fluid carries, and where it is.

    Attributes
    ----------
    source : tuple of str, or VolumeArray
        Name of its array, or the array itself.
    per : {"mass", "volume"}
        What its values are an amount of.
    scale : float
        What takes them to the unit wanted.
    """

    source: Source
    per: Literal["mass", "volume"] = "mass"
    scale: float = 1.0


def contents_of(
    volume: VolumeMesh,
    *,
    scale: float = 1.0,
    origin: ArrayLike = (0.0, 0.0, 0.0),
    density: float | Source | None = None,
    density_scale: float = 1.0,
    velocity: Source | None = None,
    velocity_scale: float = 1.0,
    internal_energy: Source | None = None,
    internal_energy_per: Literal["mass", "volume"] = "volume",
    internal_energy_scale: float = 1.0,
    carried: Mapping[str, Carried] | None = None,
    at: Mapping[str, str] | None = None,
) -> Contents:
    """Integrate what a volume holds over its cells.

    Parameters
    ----------
    volume : VolumeMesh
        Volume cells and their arrays.
    scale : float, optional
        Length unit of its coordinates, m.
    origin : array_like, shape (3,), optional
        Point that moments are about, m.
    density : float, tuple of str or VolumeArray, optional
        One density in kg/m^3, or the name of its array, or an array that is
        looked up or computed. Without it there is the volume alone, and what
        is an amount a volume.
    density_scale : float, optional
        What takes the array to kg/m^3.
    velocity : tuple of str or VolumeArray, optional
        One array of three components, or three.
    velocity_scale : float, optional
        What takes it to m/s.
    internal_energy : tuple of str or VolumeArray, optional
        Internal energy.
    internal_energy_per : {"volume", "mass"}, optional
        Whether that is ``rho e`` or ``e``.
    internal_energy_scale : float, optional
        What takes it to J/m^3 or J/kg.
    carried : mapping of str to Carried, optional
        Scalars by name.
    at : mapping of str to str, optional
        "density", "velocity", "internal_energy" or "carried.NAME" -> "nodes"
        or "cells", where the name of the array occurs on both.

    Returns
    -------
    Contents
        To round-off of the fields that the cells carry: node values by their
        shape functions, cell values constant in each cell; density and
        velocity are interpolated each for itself, and multiplied after.

    Raises
    ------
    FieldError
        An array that is missing, on both nodes and cells, of the wrong number
        of components or not finite; a density that is not above zero; an
        amount a mass without a density; cells turned inside out, unless all of
        their type are; cells of a type that cannot be integrated over.
    """
    if not (isfinite(scale) and scale > 0):
        raise FieldError(f"the length unit is {scale!r} m", where=volume.source, remedy="A positive number is needed")
    origin = np.asarray(origin, dtype=np.float64)
    if origin.shape != (3,) or not np.isfinite(origin).all():
        raise FieldError(f"the origin is {origin.tolist()!r}", remedy="Give three finite numbers")
    columns = _Columns(volume, at or {})
    constant = density if isinstance(density, (int, float)) else None
    if constant is not None and not (isfinite(constant) and constant > 0):
        raise FieldError(f"the density is {constant!r} kg/m^3", where="fluid.density", remedy="It must be above zero")
    if density is not None and constant is None:
        assert not isinstance(density, (int, float))
        columns.add("density", density, 1, density_scale)
        columns.require_positive("density")
    if velocity is not None:
        columns.add("velocity", velocity, 3, velocity_scale)
    per_mass: dict[str, bool] = {}
    if internal_energy is not None:
        columns.add("internal_energy", internal_energy, 1, internal_energy_scale)
        per_mass["internal_energy"] = internal_energy_per == "mass"
    for name, entry in (carried or {}).items():
        columns.add(f"carried.{name}", entry.source, 1, entry.scale, key=f"carried.{name}")
        per_mass[f"carried.{name}"] = entry.per == "mass"
    for name, massive in per_mass.items():
        if massive and density is None:
            raise FieldError("it is an amount a mass, and no density is known", where=name, remedy="Give the density")
    near, first, second, place = columns.integrate(scale, products=density is not None)
    if constant is not None:
        second = second * constant
    total = float(first[0])
    centre = first[1:4] / total
    amounts = {name: float(second[0, place[name]] if per_mass[name] else first[place[name]]) for name in per_mass}
    held = Contents(
        near,
        total,
        near + centre,
        internal_energy=amounts.pop("internal_energy", None),
        carried={name.removeprefix("carried."): amount for name, amount in amounts.items()},
    )
    if density is not None:
        moments = second[0, 1:4], second[1:4, 1:4]
        held = replace(held, mass=float(second[0, 0]), mass_moment=moments[0], mass_inertia=moments[1])
        if velocity is not None:
            v = slice(place["velocity"], place["velocity"] + 3)
            energy = 0.5 * float(np.trace(second[v, v]))
            held = replace(held, momentum=second[0, v], moment_of_velocity=second[1:4, v], kinetic_energy=energy)
    return contents_about(held, origin)


class _Columns:
    """Fields of a volume, gathered to be integrated together."""

    def __init__(self, volume: VolumeMesh, at: Mapping[str, str]) -> None:
        self.volume, self.at = volume, at
        self.found: dict[str, VolumeArray] = {}

    def add(self, name: str, source: Source, components: int, scale: float, key: str | None = None) -> None:
        """Look up a field, or take it as it is, in SI units."""
        array = source
        if not isinstance(array, VolumeArray):
            array = array_of(self.volume, name, array, at=self.at.get(name), components=(components,), key=key)
        count = self.volume.grid.GetNumberOfPoints() if array.on == "nodes" else self.volume.grid.GetNumberOfCells()
        values = np.asarray(array.values, dtype=np.float64)
        if values.shape[0] != count or values.size != components * count:
            raise FieldError(
                f"array '{array.name}' has the shape {values.shape}, and {self.volume.source} has {count} {array.on}",
                where=key or f"flow.{name}",
                remedy=f"Give {components} for each",
            )
        self.found[name] = VolumeArray(array.on, values.reshape(count, components).T * scale, array.name)

    def require_positive(self, name: str) -> None:
        """Raise unless a field is above zero in all cells."""
        array = self.found[name]
        low = ~(array.values[0] > 0.0)
        if low.any() and array.on == "nodes":
            low &= used_nodes(self.volume.grid)
        bad = np.flatnonzero(low)
        if bad.size:
            raise FieldError(
                f"array '{array.name}' of {self.volume.source} gives a {name} of {array.values[0, bad[0]]:.6g} at "
                f"{array.on[:-1]} {bad[0]} ({bad.size} such)",
                where=f"flow.{name}",
                remedy="It must be above zero everywhere",
            )

    def integrate(self, scale: float, products: bool) -> tuple[Vector, Vector, Array, dict[str, int]]:
        """Return a near origin, the first and second integrals about it, and the column of each field."""
        from vtkmodules.util.numpy_support import vtk_to_numpy

        grid = self.volume.grid
        box = box_of(cell_points(grid))
        near = box.mean(axis=0)
        raw = vtk_to_numpy(grid.GetPoints().GetData())
        rounding = 0.5 * float(np.finfo(raw.dtype).eps) * float(np.abs(box).max()) * scale
        parts: dict[str, list[Array]] = {"nodes": [(raw.astype(np.float64) - near).T * scale], "cells": []}
        place: dict[str, int] = {}
        width = {"nodes": 4, "cells": 0}
        for name, array in self.found.items():
            place[name] = width[array.on]
            width[array.on] += array.values.shape[0]
            parts[array.on].append(array.values)
        for name, array in self.found.items():
            place[name] += width["nodes"] if array.on == "cells" else 0
        on_nodes = np.ascontiguousarray(np.concatenate(parts["nodes"]))
        on_cells = np.ascontiguousarray(np.concatenate([np.zeros((0, int(grid.GetNumberOfCells()))), *parts["cells"]]))
        totals = [
            _upright(
                integrate_cells(
                    kind.blocks, kind.rule, weight=place.get("density"), products=products, rounding=rounding
                ),
                kind.name,
                kind.directed,
                self.volume.source,
            )
            for kind in cell_kinds(self.volume, on_nodes, on_cells)
        ]
        first = _added([total.first for total in totals])
        if not first[0] > 0.0:
            raise FieldError("its cells have no volume", where=self.volume.source, remedy="Export the mesh again")
        second = _added([np.zeros((first.size, first.size)) if t.second is None else t.second for t in totals])
        return near * scale, first, second, place


def _upright(total: CellTotals, name: str, directed: bool, source: str) -> CellTotals:
    """Return totals with positive volume; raise if only some of the cells are turned."""
    if not directed or not total.turned:
        return total
    if total.sound:
        raise FieldError(
            f"{total.turned} of {plural(name, total.turned + total.sound)} are turned inside out",
            where=source,
            remedy="Order the points of all cells of a type in the same way, and untangle the mesh where it folds",
        )
    return CellTotals(-total.first, None if total.second is None else -total.second, total.turned, 0)


def _added(parts: Sequence[Array]) -> Array:
    stack = np.stack(parts)
    flat = stack.reshape(stack.shape[0], -1).T
    return np.array([fsum(row) for row in flat.tolist()]).reshape(stack.shape[1:])


def contents_about(contents: Contents, origin: ArrayLike) -> Contents:
    """Take the moments of contents about another point.

    Parameters
    ----------
    contents : Contents
        What a volume holds.
    origin : array_like, shape (3,)
        The other point, m.

    Returns
    -------
    Contents
        The same about it (the parallel-axis theorem).
    """
    origin = np.array(origin, dtype=np.float64)
    way = contents.origin - origin
    moved = replace(contents, origin=origin)
    if contents.mass is not None and contents.mass_moment is not None:
        across = np.outer(way, contents.mass_moment)
        moved = replace(moved, mass_moment=contents.mass_moment + contents.mass * way)
        if contents.mass_inertia is not None:
            inertia = contents.mass_inertia + across + across.T + contents.mass * np.outer(way, way)
            moved = replace(moved, mass_inertia=inertia)
    if contents.momentum is not None and contents.moment_of_velocity is not None:
        moved = replace(moved, moment_of_velocity=contents.moment_of_velocity + np.outer(way, contents.momentum))
    return moved


def relative_contents(contents: Contents, frame: Frame) -> Contents:
    """Turn contents of absolute velocity into those of the velocity relative to a moving frame.

    Parameters
    ----------
    contents : Contents
        What a volume holds, with the absolute velocity.
    frame : Frame
        The motion: ``W = U_o + Ω × x`` with U_o its velocity at the origin of the contents.

    Returns
    -------
    Contents
        With ``v - W`` in place of v in momentum, moment of velocity and
        kinetic energy; those that are None stay so.
    """
    mass, moment, inertia = contents.mass, contents.mass_moment, contents.mass_inertia
    momentum, matrix, energy = contents.momentum, contents.moment_of_velocity, contents.kinetic_energy
    if mass is None or moment is None or inertia is None or momentum is None or matrix is None or energy is None:
        return contents
    base = frame.at(contents.origin)
    # spin × x = turning @ x
    turning = np.einsum("ikj,k->ij", _LEVI_CIVITA, frame.spin)
    swept = turning @ moment
    dragged = 0.5 * (mass * base @ base + 2.0 * base @ swept + np.sum((turning @ inertia) * turning))
    shared = momentum @ base + np.sum(turning * matrix.T)
    return replace(
        contents,
        momentum=momentum - mass * base - swept,
        moment_of_velocity=matrix - np.outer(moment, base) - inertia @ turning.T,
        kinetic_energy=float(energy - shared + dragged),
    )
