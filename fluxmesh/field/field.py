"""One quantity over the surface: on points, on faces, or one value a group."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fluxmesh.errors import FieldError
from fluxmesh.integral.layout import ABSENT, AT_FACE, AT_NODE, PER_GROUP, FieldArrays
from fluxmesh.surface.surface import ControlSurface
from fluxmesh.units import LARGEST

__all__ = [
    "Field",
    "absent_field",
    "array_field",
    "constant_field",
    "require_finite",
    "require_positive",
    "supply",
]


@dataclass(frozen=True, eq=False)
class Field:
    """One quantity over the surface.

    Attributes
    ----------
    name : str
        What it is, for messages: "velocity", "pressure", ...
    components : int
        1 or 3.
    where : ndarray, shape (n_groups,), int8
        For each group ``ABSENT``, ``PER_GROUP``, ``AT_FACE``, ``AT_NODE`` or
        ``AT_SAMPLE`` (see `fluxmesh.integral.layout`).
    node, face : ndarray, shape (n_points or n_faces, components) or 1-D, float64
        As exported; empty where no group uses them. NaN marks places without
        a value, and must not lie in a group that uses the array.
    group : ndarray, shape (n_groups, components) or 1-D, float64
        SI values of groups that have one value.
    sample : ndarray, shape (n_samples, components) or 1-D, float64
        Values at the quadrature points of sampled groups, in the order of
        `fluxmesh.field.flow.Flow.sample_start`; empty where no group is sampled.
    scale : float
        Factor from the export's unit and sign to SI and ours.
    label : str
        Where it came from, for messages.
    """

    name: str
    components: int
    where: NDArray[np.int8]
    node: NDArray[np.float64]
    face: NDArray[np.float64]
    group: NDArray[np.float64]
    sample: NDArray[np.float64]
    scale: float = 1.0
    label: str = ""

    def arrays(self) -> FieldArrays:
        """Return the same as the plain arrays that the kernels take."""
        return FieldArrays(self.where, self.node, self.face, self.group, self.sample, float(self.scale))

    def present(self) -> NDArray[np.bool_]:
        """Return which groups have the quantity, shape (n_groups,)."""
        return np.asarray(self.where != ABSENT)

    def scaled(self, factor: float) -> Field:
        """Return the field with all values times `factor`."""
        return replace(self, group=self.group * factor, scale=self.scale * factor)


def _shape(count: int, components: int) -> tuple[int, ...]:
    return (count,) if components == 1 else (count, components)


def absent_field(surface: ControlSurface, name: str, components: int) -> Field:
    """Return a field that no group has."""
    groups = len(surface.groups)
    none = np.empty(_shape(0, components))
    return Field(name, components, np.zeros(groups, np.int8), none, none, np.zeros(_shape(groups, components)), none)


def constant_field(surface: ControlSurface, name: str, components: int, value: float | Sequence[float]) -> Field:
    """Return a field with one value everywhere.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    name : str
        What it is.
    components : int
        1 or 3.
    value : float or sequence of 3 floats
        SI value.

    Raises
    ------
    FieldError
        A value of another shape, or not finite.
    """
    field = absent_field(surface, name, components)
    for k in range(len(surface.groups)):
        field = supply(field, k, value)
    return field


def supply(field: Field, group: int, value: float | Sequence[float]) -> Field:
    """Return the field with one SI value for a group, whatever it had before."""
    given = np.asarray(value, dtype=np.float64)
    if given.shape != _shape(1, field.components)[1:] or not np.isfinite(given).all():
        wanted = "one finite number" if field.components == 1 else f"{field.components} finite numbers"
        raise FieldError(f"{field.name} is {value!r}", remedy=f"Give {wanted}")
    values, where = field.group.copy(), field.where.copy()
    values[group] = given
    where[group] = PER_GROUP
    return replace(field, group=values, where=where)


def array_field(
    surface: ControlSurface,
    name: str,
    components: int,
    values: ArrayLike,
    *,
    at: str | None = None,
    scale: float = 1.0,
    label: str = "",
    groups: NDArray[np.bool_] | None = None,
) -> Field:
    """Return a field from an array on points or faces.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    name : str
        What it is.
    components : int
        1 or 3.
    values : array_like, shape (n,) or (n, 3)
        One entry a point or a face, in the order of the surface.
    at : {"nodes", "faces"}, optional
        Where the entries sit; by default told from their number.
    scale : float, optional
        Factor to SI.
    label : str, optional
        Where the array came from, for messages.
    groups : ndarray of bool, shape (n_groups,), optional
        Groups that the array covers; all by default.

    Raises
    ------
    FieldError
        Wrong length or component count, not numbers, or a length that fits
        points and faces alike while `at` is not given.
    """
    what = label or name
    given: NDArray[Any] = np.asarray(values)
    if given.dtype.kind not in "fiub":
        raise FieldError(f"the array has type {given.dtype}", where=what, remedy="Numbers are needed")
    given = np.ascontiguousarray(given, dtype=np.float64)
    if given.ndim == 2 and given.shape[1] == 1 and components == 1:
        given = given[:, 0]
    found = 1 if given.ndim == 1 else (given.shape[1] if given.ndim == 2 else -1)
    if found != components:
        raise FieldError(
            f"the array has {'shape ' + str(given.shape) if found < 0 else str(found) + ' components'}",
            where=what,
            remedy=f"{components} needed for {name}",
        )
    at = at or _place(surface, given.shape[0], what)
    wanted = surface.point_count if at == "nodes" else surface.face_count
    if given.shape[0] != wanted:
        raise FieldError(
            f"the array has {given.shape[0]} entries",
            where=what,
            remedy=f"The surface has {wanted} {at}: one entry each is needed",
        )
    field = absent_field(surface, name, components)
    covered = np.ones(len(surface.groups), np.bool_) if groups is None else groups
    where = np.where(covered, AT_NODE if at == "nodes" else AT_FACE, ABSENT).astype(np.int8)
    node, face = (given, field.face) if at == "nodes" else (field.node, given)
    return Field(name, components, where, node, face, field.group, field.sample, scale, label)


def _place(surface: ControlSurface, count: int, what: str) -> str:
    points, faces = surface.point_count, surface.face_count
    if points == faces == count:
        raise FieldError(
            f"the array has {count} entries, and so many points and faces there are",
            where=what,
            remedy='Say where it sits: at = "nodes" or "faces"',
        )
    if count not in (points, faces):
        raise FieldError(
            f"the array has {count} entries",
            where=what,
            remedy=f"The surface has {points} points and {faces} faces: one entry each is needed",
        )
    return "nodes" if count == points else "faces"


def _used(surface: ControlSurface, field: Field, at: int) -> NDArray[np.bool_]:
    """Which points or faces lie in a group that takes the field from that array."""
    face_used: NDArray[np.bool_] = (field.where == at)[surface.group_of_face]
    if at == AT_FACE:
        return face_used
    sizes = 3 if surface.offsets is None else np.diff(surface.offsets)
    used = np.zeros(surface.point_count, np.bool_)
    used[surface.connectivity[np.repeat(face_used, sizes)]] = True
    return used


def _complain(
    surface: ControlSurface, field: Field, bad_of: Mapping[int, NDArray[np.bool_]], what: str, remedy: str
) -> None:
    for at, wrong in bad_of.items():
        bad = np.flatnonzero(wrong & _used(surface, field, at)) if wrong.size else wrong
        if bad.size:
            kind = "point" if at == AT_NODE else "face"
            faces = _faces_at(surface, int(bad[0]), at)
            group = surface.groups[int(surface.group_of_face[faces])].name
            raise FieldError(
                f"{bad.size} of {wrong.size} {kind} values {what}, the first at {kind} {bad[0]} in group '{group}'",
                where=field.label or field.name,
                remedy=remedy,
            )


def _faces_at(surface: ControlSurface, index: int, at: int) -> int:
    if at == AT_FACE:
        return index
    entry = int(np.flatnonzero(surface.connectivity == index)[0])
    return entry // 3 if surface.offsets is None else int(np.searchsorted(surface.offsets, entry, side="right")) - 1


def require_finite(surface: ControlSurface, field: Field) -> None:
    """Raise if a value that is used is not finite, or larger than any flow has.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    field : Field
        The field.

    Raises
    ------
    FieldError
        Says how many values, and where the first is.
    """
    bad: dict[int, NDArray[np.bool_]] = {}
    large: dict[int, NDArray[np.bool_]] = {}
    most = LARGEST / abs(field.scale) if field.scale else LARGEST
    for at, values in ((AT_NODE, field.node), (AT_FACE, field.face)):
        # NaN comes out of both: only where they are not within bounds is the slow look needed
        if values.size and (field.where == at).any() and not (values.max() <= most and values.min() >= -most):
            finite, small = np.isfinite(values), np.abs(values) <= most
            bad[at] = np.logical_not(finite if finite.ndim == 1 else finite.all(axis=1))
            large[at] = np.logical_not(small if small.ndim == 1 else small.all(axis=1))
    _complain(surface, field, bad, "are not finite", "Export the field again, without NaN or infinity")
    _complain(surface, field, large, f"are beyond {LARGEST:g} in SI", "Check the unit; or the file is damaged")


def require_positive(surface: ControlSurface, field: Field) -> None:
    """Raise if a value that is used is zero or negative.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    field : Field
        A field of scalars.

    Raises
    ------
    FieldError
        Says how many values, and where the first is.
    """
    for k, group in enumerate(surface.groups):
        if field.where[k] == PER_GROUP and not field.group[k] > 0:
            raise FieldError(
                f"{field.name} is {field.group[k]:g}",
                where=f"group '{group.name}'",
                remedy="It must be positive",
            )
    bad: dict[int, NDArray[np.bool_]] = {}
    for at, values in ((AT_NODE, field.node), (AT_FACE, field.face)):
        if values.size and (field.where == at).any() and not (values * np.sign(field.scale)).min() > 0:
            bad[at] = np.asarray(~(values * np.sign(field.scale) > 0))
    _complain(surface, field, bad, "are zero or negative", f"{field.name.capitalize()} must be positive")
