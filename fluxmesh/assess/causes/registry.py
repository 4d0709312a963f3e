"""All causes: one file each, or a few that are alike, and one line here."""

from __future__ import annotations

from typing import Final

from fluxmesh.assess.causes.frames import relative_velocity
from fluxmesh.assess.causes.groups import duplicate_group, empty_group, flipped_group
from fluxmesh.assess.causes.heads import gravity_direction, head_counted_twice, head_removed
from fluxmesh.assess.causes.models import half_model, not_converged
from fluxmesh.assess.causes.pieces import missing_piece
from fluxmesh.assess.causes.pressures import absolute_pressure, kinematic_pressure, total_pressure
from fluxmesh.assess.causes.suspect import Cause
from fluxmesh.assess.causes.tractions import traction_missing, traction_sign
from fluxmesh.assess.causes.units import density, length_unit, velocity_unit

__all__ = ["CAUSES", "IDS"]

CAUSES: Final[tuple[Cause, ...]] = (
    kinematic_pressure,
    absolute_pressure,
    total_pressure,
    head_removed,
    head_counted_twice,
    traction_sign,
    traction_missing,
    length_unit,
    density,
    relative_velocity,
    velocity_unit,
    flipped_group,
    missing_piece,
    empty_group,
    duplicate_group,
    half_model,
    not_converged,
    gravity_direction,
)
"""Every cause, a function from entries and residuals to suspects."""

IDS: Final = (
    "kinematic-pressure",
    "absolute-as-gauge",
    "total-as-static",
    "head-removed",
    "head-counted-twice",
    "traction-sign",
    "traction-missing",
    "length-unit",
    "density",
    "relative-velocity",
    "velocity-unit",
    "flipped-group",
    "missing-group",
    "duplicate-group",
    "half-model",
    "not-converged",
    "gravity-direction",
)
"""Their ids."""
