"""Viscous traction of a case, from whichever form it was exported in."""

from __future__ import annotations

from fluxmesh.case.arrays import GradientArray, StressArray
from fluxmesh.case.model import Case
from fluxmesh.errors import FieldError
from fluxmesh.field.field import Field, absent_field
from fluxmesh.integral.samples import Samples
from fluxmesh.job.exported import exported_field
from fluxmesh.job.sampled import Sampled, sampled_field
from fluxmesh.job.shape import Shape

__all__ = ["traction_of"]


def traction_of(case: Case, shape: Shape, samples: Samples | None, sampled: Sampled | None) -> Field:
    """Return the viscous traction on the fluid.

    Parameters
    ----------
    case : Case
        The case.
    shape : Shape
        Its surface and arrays.
    samples : Samples or None
        Quadrature points of the sampled groups.
    sampled : Sampled or None
        Fields sampled there from a volume or from points.

    Returns
    -------
    Field
        Pa; absent where nothing was exported.

    Raises
    ------
    FieldError
        An array that is missing, or of the wrong shape.
    """
    asked, surface = case.flow, shape.surface
    if asked.traction is not None:
        sign = -1.0 if asked.traction.acts_on == "wall" else 1.0
        scale = sign * asked.traction.unit.factor
        if sampled is not None:
            return sampled_field(surface, sampled, "traction", 3, scale)
        return exported_field(
            surface, shape.arrays, "traction", 3, asked.traction.array, key="flow.traction", at=asked.traction.at,
            scale=scale,
        )  # fmt: skip
    if asked.stress is not None:
        from fluxmesh.field.traction import traction_from_stress

        stress = _tensor(shape, sampled, "stress", asked.stress, (6, 9))
        return traction_from_stress(surface, stress, order=asked.stress.order, samples=samples)
    if asked.velocity_gradient is not None:
        from fluxmesh.field.traction import traction_from_gradient

        assert case.fluid.viscosity is not None
        gradient = _tensor(shape, sampled, "velocity_gradient", asked.velocity_gradient, (9,))
        return traction_from_gradient(
            surface,
            gradient,
            float(case.fluid.viscosity),
            samples=samples,
        )
    return absent_field(surface, "traction", 3)


def _tensor(
    shape: Shape,
    sampled: Sampled | None,
    quantity: str,
    entry: StressArray | GradientArray,
    allowed: tuple[int, ...],
) -> Field:
    if sampled is not None:
        found = sampled.values[quantity].shape[-1]
    else:
        values = shape.arrays.node.get(entry.array, shape.arrays.face.get(entry.array))
        found = allowed[0] if values is None else (values.shape[1] if values.ndim == 2 else 1)
    if found not in allowed:
        raise FieldError(
            f"the array '{entry.array}' has {found} components",
            where=f"flow.{quantity}",
            remedy=f"{' or '.join(map(str, allowed))} needed",
        )
    if sampled is not None:
        return sampled_field(shape.surface, sampled, quantity, found, entry.unit.factor)
    return exported_field(
        shape.surface, shape.arrays, quantity, found, (entry.array,), key=f"flow.{quantity}", at=entry.at,
        scale=entry.unit.factor,
    )  # fmt: skip
