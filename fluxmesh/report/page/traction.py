"""How strongly the flow drags at each triangle of a scene."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from fluxmesh.field.flow import Flow
from fluxmesh.report.export_faces import face_tables
from fluxmesh.report.sketch import fan_triangles
from fluxmesh.surface.surface import ControlSurface

__all__ = ["traction_sizes"]


def traction_sizes(
    surface: ControlSurface,
    flow: Flow,
    triangles: NDArray[np.int64] | None = None,
    *,
    threads: int | None = None,
) -> NDArray[np.float64] | None:
    """Return the size of the mean viscous traction on each triangle of the scene of a surface.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    flow : Flow
        The flow on it.
    triangles : ndarray, shape (n,), int64, optional
        Numbers of triangles of the scene of the surface (`fluxmesh.report.sketch.scene_of`); all by default.
    threads : int, optional
        Threads; all cores by default.

    Returns
    -------
    ndarray, shape (n,), float64, or None
        Pa, that of the face that the triangle belongs to, NaN where no traction is known; None where
        it is known nowhere.
    """
    known = flow.traction.present()
    if not known.any():
        return None
    face = fan_triangles(surface)[1]
    faces, place = np.unique(face if triangles is None else face[triangles], return_inverse=True)
    table = face_tables(surface, flow, faces=faces, threads=threads)
    area = table.column("area")
    force = np.linalg.norm(table.column("viscous_force"), axis=1)
    sizes = np.divide(force, area, out=np.zeros_like(force), where=area > 0.0)
    sizes[~known[surface.group_of_face[faces]]] = np.nan
    return np.asarray(sizes[place])
