"""Fields of a case that are sampled onto the surface from a volume or from scattered points."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from fluxmesh.case.arrays import PointSource, VolumeSource
from fluxmesh.case.model import Case
from fluxmesh.errors import FieldError, InputError
from fluxmesh.field.field import Field, absent_field
from fluxmesh.integral.layout import ABSENT, AT_SAMPLE
from fluxmesh.integral.samples import Samples
from fluxmesh.job.shape import Shape
from fluxmesh.surface.readers.ending import ending_notes
from fluxmesh.surface.surface import ControlSurface, Role
from fluxmesh.surface.wording import length_text
from fluxmesh.units import unit_factor

__all__ = ["Sampled", "carried_key", "sample_source", "sampled_field"]

_QUANTITIES = ("velocity", "pressure", "traction", "density", "temperature", "enthalpy", "stress", "velocity_gradient")
_TEXT_TABLES = (".csv", ".txt", ".dat", ".xyz")
_COMPONENTS = {"velocity": (3,), "traction": (3,), "stress": (6, 9), "velocity_gradient": (9,)}


@dataclass(frozen=True, eq=False)
class Sampled:
    """Quantities at the quadrature points of the surface.

    Attributes
    ----------
    source : str
        File name, for messages.
    values : dict of str to ndarray, shape (n_samples,) or (n_samples, k), float64
        By quantity, in the unit of the source.
    share_exact : float or None
        Share of the points that lie inside a cell of the volume; None for a cloud.
    farthest : float
        How far the farthest point lies from the source, m.
    leave_out : dict of str to float
        By quantity the root-mean-square error of points predicted from the
        others, over the range of the quantity; empty for a volume.
    ending : tuple of str
        That the file may be cut short, where it may be.
    sharpened : float or None
        Share of the points at which values on nodes are sharpened; None where that was not asked for, or nothing
        can be.
    """

    source: str
    values: dict[str, NDArray[np.float64]]
    share_exact: float | None
    farthest: float
    leave_out: dict[str, float] = field(default_factory=dict)
    ending: tuple[str, ...] = ()
    sharpened: float | None = None

    def data(self) -> dict[str, object]:
        """Return the same as plain data, for the result file."""
        return {
            "source": self.source,
            "share_exact": self.share_exact,
            "farthest": self.farthest,
            "leave_out_relative": dict(self.leave_out),
        }

    @property
    def notes(self) -> tuple[str, ...]:
        """What a reader should know of the sampling, one sentence each."""
        if self.share_exact is not None:
            outside = (
                "" if self.share_exact == 1.0 else f"; the others lie up to {length_text(self.farthest)} outside it"
            )
            inside = f"{self.share_exact:.2%} of the quadrature points lie inside the cells of {self.source}{outside}"
            return (inside, *self.ending)
        told = ", ".join(f"{quantity} {error:.2%}" for quantity, error in self.leave_out.items())
        said = f"Interpolated from {self.source}; points left out are predicted to (of the range): {told}"
        return (said, *self.ending)


def _wanted(case: Case) -> tuple[dict[str, tuple[str, ...]], dict[str, str]]:
    """Arrays of each quantity that the case names, and where to look for them if it says so."""
    names, places = {}, {}
    for quantity in _QUANTITIES:
        entry = getattr(case.flow, quantity)
        if entry is not None:
            names[quantity] = entry.array if isinstance(entry.array, tuple) else (entry.array,)
            if entry.at is not None:
                places[quantity] = entry.at
    for scalar in case.carried:
        if scalar.array is not None:
            names[carried_key(scalar.name)] = (scalar.array,)
            if scalar.at is not None:
                places[carried_key(scalar.name)] = scalar.at
    return names, places


def carried_key(name: str) -> str:
    """Return the key that a carried scalar is sampled under.

    Parameters
    ----------
    name : str
        Its name in the case.
    """
    return f"carried {name}"


def sample_source(case: Case, shape: Shape, samples: Samples, *, sharpen: bool = False) -> Sampled | None:
    """Sample the fields of a case, if they come from a volume or from points.

    Parameters
    ----------
    case : Case
        The case.
    shape : Shape
        Its surface.
    samples : Samples
        Quadrature points of all groups.
    sharpen : bool, optional
        Whether to take the values of a volume to one order more than its cells have.

    Returns
    -------
    Sampled or None
        None when the fields are in the file of the surface.

    Raises
    ------
    InputError
        A file that cannot be read, arrays that are missing, or points of the
        surface that lie too far from the source.
    """
    asked = case.flow
    source = asked.volume or asked.points
    if source is None:
        return None
    names, places = _wanted(case)
    reach = None if source.reach is None else float(source.reach)
    try:
        if isinstance(source, VolumeSource):
            return _from_volume(source, places, names, samples, reach, sharpen)
        return _from_points(source, names, samples, reach)
    except InputError as error:
        key = "flow.volume" if isinstance(source, VolumeSource) else "flow.points"
        if source.file.name in error.where:
            raise
        where = f"{key} ({source.file.name})" + (f": {error.where}" if error.where else "")
        raise type(error)(error.found, where, error.remedy) from error


def _from_volume(
    source: VolumeSource,
    places: Mapping[str, str],
    names: Mapping[str, tuple[str, ...]],
    samples: Samples,
    reach: float | None,
    sharpen: bool,
) -> Sampled:
    from fluxmesh.field.volume import sample_volume
    from fluxmesh.surface.readers.volume_grid import read_volume

    at = {quantity: "cells" if place == "faces" else place for quantity, place in places.items()}
    volume = read_volume(source.file)
    found = sample_volume(
        volume,
        names,
        samples.places,
        scale=source.unit.factor,
        reach=reach,
        at=at,
        components={quantity: _COMPONENTS.get(quantity, (1,)) for quantity in names},
        sharpen=sharpen,
    )
    inside = found.exact
    return Sampled(
        source.file.name,
        found.values,
        float(np.count_nonzero(inside)) / max(inside.size, 1),
        float(found.distance.max(initial=0.0)),
        ending=volume.notes,
        sharpened=found.sharpened,
    )


def _from_points(
    source: PointSource, names: Mapping[str, tuple[str, ...]], samples: Samples, reach: float | None
) -> Sampled:
    from fluxmesh.field.points import read_points
    from fluxmesh.field.points_sampling import sample_cloud

    for quantity in ("stress", "velocity_gradient"):
        if quantity in names:
            raise FieldError(
                "a tensor cannot be interpolated from points", where=f"flow.{quantity}", remedy="Give the traction"
            )
    coordinates = source.coordinates
    if coordinates is not None and len(coordinates) != 3:
        raise FieldError(
            f"coordinates names {len(coordinates)} column", where="flow.points.coordinates", remedy="Name three"
        )
    cloud = read_points(
        source.file, coordinates=None if coordinates is None else (coordinates[0], coordinates[1], coordinates[2])
    )
    scale = source.unit.factor
    told = cloud.units.get(cloud.coordinates[0])
    if told is not None:
        factor = unit_factor(told, "m", "flow.points.unit")
        if "unit" in source.model_fields_set and abs(factor / scale - 1.0) > 1e-9:
            raise FieldError(
                f"the case reads the coordinates in {source.unit.unit}, the heading says {told}",
                where="flow.points.unit",
                remedy="Make them agree",
            )
        scale = factor
    found = sample_cloud(cloud, names, samples.places, scale=scale, reach=reach)
    return Sampled(
        source.file.name,
        found.values,
        None,
        float(found.distance.max(initial=0.0)),
        {quantity: error.relative for quantity, error in found.leave_out.items()},
        ending_notes(source.file) if source.file.suffix.lower() in _TEXT_TABLES else cloud.notes,
    )


def sampled_field(surface: ControlSurface, sampled: Sampled, quantity: str, components: int, scale: float) -> Field:
    """Return a sampled quantity as a field.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    sampled : Sampled
        What was sampled, at the quadrature points of all groups.
    quantity : str
        A key of the case's [flow], or that of `carried_key`.
    components : int
        How many it has.
    scale : float
        Factor to SI and to our sign.

    Returns
    -------
    Field
        At quadrature points of all groups; a velocity is not laid on walls and
        symmetry cuts, which nothing passes.
    """
    name = quantity.replace("_", " ")
    where = np.full(len(surface.groups), AT_SAMPLE, np.int8)
    if quantity == "velocity":
        where[[group.role in (Role.WALL, Role.SYMMETRY) for group in surface.groups]] = ABSENT
    values = np.ascontiguousarray(sampled.values[quantity], dtype=np.float64)
    if components == 1:
        values = values.reshape(-1)
    return replace(
        absent_field(surface, name, components),
        where=where,
        sample=values,
        scale=scale,
        label=f"{name} sampled from {sampled.source}" + (f" (flow.{quantity})" if quantity in _QUANTITIES else ""),
    )
