"""From the velocity in the inertial frame to that relative to a moving control surface."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError
from fluxmesh.field.field import Field
from fluxmesh.field.frame import Frame
from fluxmesh.integral.layout import AT_FACE, AT_NODE, AT_SAMPLE, PER_GROUP
from fluxmesh.integral.samples import Samples
from fluxmesh.surface.surface import ControlSurface

__all__ = ["needs_samples", "relative_velocity"]


def needs_samples(velocity: Field, frame: Frame) -> NDArray[np.bool_]:
    """Return which groups can hold their relative velocity at quadrature points only.

    One value a face or a group, less the velocity of a surface that turns, varies
    over the face.

    Parameters
    ----------
    velocity : Field
        Absolute velocity.
    frame : Frame
        Motion of the control surface.

    Returns
    -------
    ndarray of bool, shape (n_groups,)
    """
    even = (velocity.where == AT_FACE) | (velocity.where == PER_GROUP)
    return np.asarray(even & frame.turns)


def relative_velocity(
    surface: ControlSurface,
    velocity: Field,
    frame: Frame,
    *,
    groups: NDArray[np.bool_] | None = None,
    samples: Samples | None = None,
) -> Field:
    """Return the velocity relative to a moving control surface.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    velocity : Field
        Absolute velocity.
    frame : Frame
        Motion of the control surface.
    groups : ndarray of bool, shape (n_groups,), optional
        Groups to change; all by default. Groups that share an array with one
        that is changed must be changed too.
    samples : Samples, optional
        Quadrature points; of all groups that `needs_samples` names at least.

    Returns
    -------
    Field
        ``V - (U + Ω × (x - through))``, exact for what each place holds.

    Raises
    ------
    FieldError
        A group that needs quadrature points, and they are not given.
    """
    chosen = np.ones(len(surface.groups), np.bool_) if groups is None else groups
    where, scale = velocity.where.copy(), velocity.scale
    node, face, group, sample = velocity.node, velocity.face, velocity.group.copy(), velocity.sample
    if (chosen & (where == AT_NODE)).any():
        node = node - frame.at(surface.points) / scale
    owner = None if samples is None else surface.group_of_face[samples.face]
    present = chosen & (where == AT_SAMPLE)
    moved = needs_samples(velocity, frame) & chosen
    if present.any() or moved.any():
        if samples is None or owner is None:
            names = ", ".join(surface.groups[k].name for k in np.flatnonzero(present | moved))
            raise FieldError(f"the velocity of {names} varies over its faces, and they are not sampled")
        if sample.shape[0] != samples.places.shape[0]:
            sample = np.full(samples.places.shape, np.nan)
        sample = sample.copy()
        rows = np.flatnonzero(moved[owner])
        even = np.where(
            (where == AT_FACE)[owner[rows], None],
            face[samples.face[rows]] if face.size else 0.0,
            group[owner[rows]] / scale,
        )
        sample[rows] = even
        rows = np.flatnonzero((present | moved)[owner])
        sample[rows] -= frame.at(samples.places[rows]) / scale
        where[moved] = AT_SAMPLE
    if not frame.turns:
        still = np.asarray(frame.velocity)
        if (chosen & (where == AT_FACE)).any():
            face = face - still / scale
        group[chosen & (where == PER_GROUP)] -= still
    return replace(velocity, where=where, node=node, face=face, group=group, sample=sample)
