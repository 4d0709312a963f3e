"""The review of a case."""

from __future__ import annotations

from fluxmesh.assess.review import Review, review_of
from fluxmesh.case.model import Case
from fluxmesh.job.laid import lay_case
from fluxmesh.job.run import balance_of, hardware_of
from fluxmesh.job.shape import Shape, read_shape

__all__ = ["check_case"]


def check_case(case: Case) -> Review:
    """Say all that is doubtful about a case.

    Parameters
    ----------
    case : Case
        A case that was read.

    Returns
    -------
    Review
        Facts and doubts.

    Raises
    ------
    InputError
        What is plainly wrong; the message says where.
    """
    shape = read_shape(case)
    flow = lay_case(case, shape)
    done = balance_of(shape.surface, flow, anchor=case.anchor.at, hardware=hardware_of(case))
    return review_of(
        shape.surface,
        flow,
        done.balance,
        unused=_unused(case, shape),
        length_unit=case.surface.length_unit.unit,
    )


def _unused(case: Case, shape: Shape) -> tuple[str, ...]:
    asked = case.flow
    used: set[str] = set()
    for entry in (asked.velocity, asked.traction):
        used |= set(entry.array) if entry is not None else set()
    for scalar in (asked.pressure, asked.density, asked.mass_flux):
        used |= {scalar.array} if scalar is not None else set()
    if case.surface.groups is not None and case.surface.groups.array is not None:
        used.add(case.surface.groups.array)
    return tuple(name for name in shape.arrays.names() if name not in used)
