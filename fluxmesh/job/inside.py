"""What a case says of the flow inside the control surface, loaded only where it says something."""

from __future__ import annotations

from fluxmesh.balance.storage import Storage
from fluxmesh.case.model import Case
from fluxmesh.field.contents import Contents
from fluxmesh.job.shape import Shape

__all__ = ["contents_in", "storage_in"]


def storage_in(case: Case, shape: Shape) -> Storage | None:
    """Return the rates of what the volume holds; None where the flow is steady.

    Parameters
    ----------
    case : Case
        The case.
    shape : Shape
        Its surface.

    Raises
    ------
    InputError
        Snapshots that cannot be read, or that do not fill the surface.
    """
    if case.storage is None:
        return None
    from fluxmesh.job.storage import storage_of

    return storage_of(case, shape)


def contents_in(case: Case, shape: Shape) -> Contents | None:
    """Return what the volume of ``[frame]`` holds; None where there is none.

    Parameters
    ----------
    case : Case
        The case.
    shape : Shape
        Its surface.

    Raises
    ------
    InputError
        A volume that cannot be read, or that does not fill the surface.
    """
    if case.frame is None or case.frame.volume is None:
        return None
    from fluxmesh.balance.weight import enclosed_volume
    from fluxmesh.field.contents import relative_contents
    from fluxmesh.field.domain import require_same_domain
    from fluxmesh.field.flow import integrate_flow, near_origin, still_flow
    from fluxmesh.job.contents import read_contents
    from fluxmesh.job.laid import frame_of

    inside = case.frame.volume
    held = read_contents(case, inside.file, inside.unit, near_origin(shape.surface))
    enclosed = enclosed_volume(integrate_flow(shape.surface, still_flow(shape.surface)))
    if shape.surface.closed:
        require_same_domain([held], enclosed.volume, enclosed.centroid, [inside.file.name])
    frame = frame_of(case)
    relative = case.flow.velocity is not None and case.flow.velocity.frame == "relative"
    return held if relative or frame is None else relative_contents(held, frame)
