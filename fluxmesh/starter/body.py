"""The faces of a file oriented as the main job will orient them, with what is measured of each."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.guess import ArrayGuess
from fluxmesh.errors import SurfaceError
from fluxmesh.surface.face_geometry import corners, face_geometry
from fluxmesh.surface.mend import mend
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.surface import ControlSurface, Group, Role

__all__ = ["Body", "body_of", "face_values", "flux_along_normals"]

Floats = NDArray[np.float64]
Indices = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Body:
    """The faces of a file after mending.

    Attributes
    ----------
    points : ndarray, shape (n_points, 3), float64
        m.
    connectivity, offsets
        Corners of the faces that were kept, as in `RawMesh`.
    kept : ndarray, shape (n_kept,), int64
        Number in the file of each of these faces.
    areas : ndarray, shape (n_faces,), float64
        Of all faces of the file, m²; zero for copies that were dropped.
    vectors : ndarray, shape (n_faces, 3), float64
        Their area vectors, out of the fluid where the surface is closed.
    sign : ndarray, shape (n_faces,), float64
        -1 for faces that were turned, else 1.
    closed : bool
        Whether the surface is closed.
    fault : str
        Why it is not, or cannot be oriented; empty where it is closed.
    """

    points: Floats
    connectivity: Indices
    offsets: Indices | None
    kept: Indices
    areas: Floats
    vectors: Floats
    sign: Floats
    closed: bool
    fault: str

    @property
    def size(self) -> float:
        """Diagonal of the box round all points, m."""
        return float(np.linalg.norm(np.ptp(self.points, axis=0)))

    @property
    def middle(self) -> Floats:
        """Middle of that box, m."""
        return np.asarray((self.points.min(axis=0) + self.points.max(axis=0)) / 2)


def body_of(mesh: RawMesh, factor: float) -> Body:
    """Mend the faces of a file as far as that goes.

    Parameters
    ----------
    mesh : RawMesh
        The file.
    factor : float
        What takes its coordinates to metres.

    Returns
    -------
    Body
        With the file's own orientation where it cannot be mended.

    Raises
    ------
    SurfaceError
        Points that are not finite, or faces that use points that are not there.
    """
    points = np.ascontiguousarray(mesh.points, dtype=np.float64) * factor
    one = np.zeros(mesh.face_count, dtype=np.int32)
    whole = (Group("all", Role.WALL),)
    # the invariants first: mending trusts shapes and indices
    ControlSurface(points, mesh.connectivity, mesh.offsets, mesh.kinds, one, whole, closed=False)
    connectivity, offsets, kinds = mesh.connectivity, mesh.offsets, mesh.kinds
    kept, turned, closed, fault = np.arange(mesh.face_count), None, False, ""
    try:
        mended = mend(points, connectivity, offsets, kinds, one, ("all",), require_closed=False)
    except SurfaceError as error:
        fault = error.found
    else:
        connectivity, offsets, kinds = mended.connectivity, mended.offsets, mended.kinds
        points, turned, closed = mended.points, mended.turned, mended.closed
        kept = kept if mended.kept_faces is None else mended.kept_faces
        fault = "" if closed else next((note for note in mended.notes if "open" in note), mended.notes[-1])
    connectivity, offsets = corners(connectivity, offsets, kinds)
    geometry = face_geometry(points, connectivity, offsets)
    areas, vectors, sign = np.zeros(mesh.face_count), np.zeros((mesh.face_count, 3)), np.ones(mesh.face_count)
    areas[kept], vectors[kept] = geometry.areas, geometry.normals * geometry.areas[:, None]
    if turned is not None:
        sign[kept[turned]] = -1.0
    return Body(points, connectivity, offsets, kept, areas, vectors, sign, closed, fault)


def face_values(mesh: RawMesh, guess: ArrayGuess) -> Floats:
    """Return the mean of an array over each face of the file.

    Parameters
    ----------
    mesh : RawMesh
        The file.
    guess : ArrayGuess
        Which array, or arrays of components.

    Returns
    -------
    ndarray, shape (n_faces,) or (n_faces, components), float64
        In the file's unit.
    """
    pool = mesh.node_arrays if guess.at == "nodes" else mesh.face_arrays
    parts: Iterable[NDArray[np.float64]] = (np.asarray(pool[name], np.float64) for name in guess.names)
    values = np.column_stack(list(parts)) if len(guess.names) > 1 else next(iter(parts))
    if guess.at == "faces":
        return values
    connectivity, offsets = corners(mesh.connectivity, mesh.offsets, mesh.kinds)
    if offsets is None:
        return np.asarray((values[connectivity[0::3]] + values[connectivity[1::3]] + values[connectivity[2::3]]) / 3)
    sizes = np.diff(offsets).reshape((-1,) + (1,) * (values.ndim - 1))
    return np.asarray(np.add.reduceat(values[connectivity], offsets[:-1], axis=0) / sizes)


def flux_along_normals(flux: Floats, body: Body, carried: Floats | None) -> bool:
    """Return whether an exported flow through faces counts along the corner order in the file, and not outward.

    Parameters
    ----------
    flux : ndarray, shape (n_faces,), float64
        As exported.
    body : Body
        The faces.
    carried : ndarray, shape (n_faces,), float64, or None
        Volume flow out through each face by the velocity, which tells where it
        is known; else the way tells by which the sum over the surface is smaller.
    """
    turned = body.sign * flux
    if carried is not None and carried.any():
        return float(turned @ carried) > float(flux @ carried)
    return abs(float(turned.sum())) < abs(float(flux.sum()))
