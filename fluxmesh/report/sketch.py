"""From a balance to the scene that its pictures show."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from fluxmesh.balance.balance import Balance
from fluxmesh.balance.wrench import CentralAxis, central_axis
from fluxmesh.field.field import Field
from fluxmesh.field.flow import Flow
from fluxmesh.field.pressure import pressure_terms
from fluxmesh.integral.layout import AT_FACE, AT_NODE, AT_SAMPLE, PER_GROUP
from fluxmesh.report.scene import Arrow, Marker, Scene
from fluxmesh.surface.surface import ControlSurface

__all__ = ["arrows_of", "fan_triangles", "scene_of", "scene_of_surface"]


def fan_triangles(surface: ControlSurface) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return the triangles that a scene draws for the faces of a surface: fans about the first corner.

    Parameters
    ----------
    surface : ControlSurface
        The surface.

    Returns
    -------
    triangles : ndarray, shape (n_triangles, 3), int64
        Point indices.
    face : ndarray, shape (n_triangles,), int64
        The face that each belongs to.
    """
    if surface.offsets is None:
        return surface.connectivity.reshape(-1, 3), np.arange(surface.face_count)
    sizes = np.diff(surface.offsets)
    if surface.kinds is not None:
        corners = np.array([0, 3, 4, 4])[surface.kinds]
        sizes = np.where(surface.kinds > 0, corners, sizes)
    face = np.repeat(np.arange(surface.face_count), sizes - 2)
    starts = np.concatenate([[0], np.cumsum(sizes - 2)[:-1]])
    step = np.arange(face.size) - starts[face]
    first = surface.offsets[:-1][face]
    triangles = np.stack([first, first + step + 1, first + step + 2], axis=1)
    return surface.connectivity[triangles], face


def _pressure_of(
    surface: ControlSurface,
    flow: Flow,
    triangles: NDArray[np.int64],
    face: NDArray[np.int64],
    origin: NDArray[np.float64],
) -> NDArray[np.float64] | None:
    field = flow.pressure
    if not field.present().any():
        return None
    terms = pressure_terms(
        flow.meaning,
        ambient=flow.ambient,
        density=flow.uniform_density(),
        gravity=np.asarray(flow.gravity),
        origin=origin,
    )
    group = surface.group_of_face[face]
    values = _mean_values(flow, field, triangles, face, group)
    if terms.times_density:
        exported = field.where[group] > PER_GROUP
        values = np.where(exported, values * _mean_values(flow, flow.density, triangles, face, group), values)
    centre = surface.points[triangles].mean(axis=1) - origin
    shift = terms.offset + centre @ np.array([terms.head_x, terms.head_y, terms.head_z])
    return np.asarray(np.where(field.where[group] > PER_GROUP, values + shift, values))


def _mean_values(
    flow: Flow, field: Field, triangles: NDArray[np.int64], face: NDArray[np.int64], group: NDArray[np.int32]
) -> NDArray[np.float64]:
    values = np.full(face.size, np.nan)
    where = field.where[group]
    at = where == AT_NODE
    if at.any():
        values[at] = field.scale * field.node[triangles[at]].mean(axis=1)
    at = where == AT_FACE
    if at.any():
        values[at] = field.scale * field.face[face[at]]
    at = where == AT_SAMPLE
    if at.any():
        start = flow.sample_start
        counts = np.diff(start)
        sums = np.concatenate([[0.0], np.cumsum(np.nan_to_num(field.sample))])
        means = (sums[start[1:]] - sums[start[:-1]]) / np.maximum(counts, 1)
        values[at] = field.scale * means[face[at]]
    at = where == PER_GROUP
    values[at] = field.group[group[at]]
    return values


def _line(axis: CentralAxis, middle: NDArray[np.float64], noise: float) -> tuple[NDArray[np.float64] | None, float]:
    """Return the point of a line of action nearest to another, and the couple; no point where it is not known."""
    if not np.isfinite([*axis.point, *axis.direction, axis.couple]).all():
        return None, 0.0
    nearest = axis.point + axis.direction * float((middle - axis.point) @ axis.direction)
    return nearest, axis.couple if abs(axis.couple) > noise else 0.0


def arrows_of(balance: Balance) -> list[Arrow]:
    """Return the forces of a balance as arrows: at ports and of weight, inertia, load and reaction.

    Parameters
    ----------
    balance : Balance
        The balance.
    """
    table, setting = balance.table, balance.setting
    arrows = []
    for k, group in enumerate(setting.groups):
        if not group.role.is_port:
            continue
        centre = table.origin + table.column("position")[k] / table.column("area")[k]
        if setting.data.pressure[k]:
            arrows.append(
                Arrow(
                    "pressure",
                    f"pressure at {group.name}",
                    "surroundings on fluid",
                    centre,
                    balance.momentum.group_pressure[k],
                    group.name,
                )
            )
        if setting.data.flux[k]:
            arrows.append(
                Arrow(
                    "momentum",
                    f"momentum at {group.name}",
                    "flow through the port on fluid",
                    centre,
                    -balance.momentum.group_flux[k],
                    group.name,
                )
            )
    if balance.fluid is not None and np.any(balance.fluid.weight):
        arrows.append(
            Arrow("weight", "weight of fluid", "gravity on fluid", balance.fluid.centre, balance.fluid.weight)
        )
    stored = balance.momentum.storage
    if balance.momentum.known and np.any(stored) and balance.enclosed is not None:
        inside = balance.fluid.centre if balance.fluid is not None else balance.enclosed.centroid
        arrows.append(Arrow("momentum", "inertia of what is inside", "its own inertia on fluid", inside, -stored))
    hardware = setting.hardware
    if hardware is not None and np.any(setting.gravity):
        weight = hardware.mass * np.asarray(setting.gravity)
        arrows.append(Arrow("weight", "weight of hardware", "gravity on hardware", np.asarray(hardware.centre), weight))
    load = balance.load.best()
    weighed = balance.fluid is not None and bool(np.any(balance.fluid.weight)) and balance.load.from_balance is load
    heavy = ", weight of fluid included" if weighed else ""
    # nearest to the body, not to the anchor: the line of action may pass far from it
    middle = table.origin if balance.enclosed is None else balance.enclosed.centroid
    # a couple below round-off on a lever of the size of the surface is none
    noise = 1e-12 * float(np.sqrt(table.total("area")))
    if load is not None:
        through, couple = _line(central_axis(load), middle, noise * float(np.linalg.norm(load.force)))
        at = middle if through is None else through
        label, body = "load of the flow" + heavy, "flow on hardware"
        arrows.append(Arrow("resultant", label, body, at, load.force, through=through, couple=couple))
    if balance.reaction is not None:
        wrench = balance.reaction.wrench
        small = noise * float(np.linalg.norm(wrench.force))
        through, couple = _line(balance.reaction.line_of_action, middle, small)
        label, body = "reaction", "anchor on hardware"
        arrows.append(Arrow("reaction", label, body, wrench.at, wrench.force, through=through, couple=couple))
    return arrows


def scene_of(title: str, surface: ControlSurface, flow: Flow, balance: Balance, *, notes: Sequence[str] = ()) -> Scene:
    """Return what the pictures of a balance show.

    Parameters
    ----------
    title : str
        Heading.
    surface : ControlSurface
        The surface.
    flow : Flow
        The flow on it.
    balance : Balance
        The balance.
    notes : sequence of str, optional
        Sentences that must stand beside the loads.

    Returns
    -------
    Scene
        Triangles, gauge pressure and force arrows, SI units.
    """
    triangles, face = fan_triangles(surface)
    markers = [Marker("anchor", "anchor", np.asarray(balance.setting.anchor, dtype=np.float64))]
    if balance.enclosed is not None:
        markers.append(Marker("centroid", "centre of volume", balance.enclosed.centroid))
    gravity = np.asarray(balance.setting.gravity)
    size = float(np.linalg.norm(gravity))
    return Scene(
        title=title,
        points=surface.points,
        triangles=triangles,
        group_of_triangle=surface.group_of_face[face],
        groups=tuple((group.name, group.role.value) for group in surface.groups),
        pressure=_pressure_of(surface, flow, triangles, face, balance.table.origin),
        arrows=tuple(arrows_of(balance)),
        markers=tuple(markers),
        notes=tuple(notes),
        up=-gravity / size if size > 0 else np.array([0.0, 0.0, 1.0]),
    )


def scene_of_surface(surface: ControlSurface, title: str = "") -> Scene:
    """Return what a picture of a surface alone shows: its groups.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    title : str, optional
        Heading.
    """
    triangles, face = fan_triangles(surface)
    return Scene(
        title=title,
        points=surface.points,
        triangles=triangles,
        group_of_triangle=surface.group_of_face[face],
        groups=tuple((group.name, group.role.value) for group in surface.groups),
    )
