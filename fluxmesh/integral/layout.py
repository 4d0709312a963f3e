"""The plain arrays that the kernels take: faces, fields and runs of faces."""

from __future__ import annotations

from typing import Final, NamedTuple

import numpy as np
from numpy.typing import NDArray

__all__ = [
    "ABSENT",
    "AT_FACE",
    "AT_NODE",
    "AT_SAMPLE",
    "PER_GROUP",
    "FaceArrays",
    "FieldArrays",
    "FlowArrays",
    "PressureTerms",
    "Runs",
    "make_runs",
    "runs_over",
    "sampled_groups",
]

ABSENT: Final = 0
PER_GROUP: Final = 1
AT_FACE: Final = 2
AT_NODE: Final = 3
AT_SAMPLE: Final = 4

_RUN_LENGTH: Final = 2048


class FieldArrays(NamedTuple):
    """One field over the surface.

    Attributes
    ----------
    where : ndarray, shape (n_groups,), int8
        For each group `ABSENT`, `PER_GROUP`, `AT_FACE`, `AT_NODE` or `AT_SAMPLE`.
    node, face, group : ndarray, shape (n, k) or (n,), float64
        Values on points, faces and groups; empty where no group needs them.
    sample : ndarray, shape (n_samples, k) or (n_samples,), float64
        Values at quadrature points, in the order of
        `fluxmesh.integral.samples.sample_places`; empty where no group needs them.
    scale : float
        Factor that brings `node`, `face` and `sample` to SI and to the sign wanted;
        `group` holds SI values already.
    """

    where: NDArray[np.int8]
    node: NDArray[np.float64]
    face: NDArray[np.float64]
    group: NDArray[np.float64]
    sample: NDArray[np.float64]
    scale: float


class PressureTerms(NamedTuple):
    """What turns an exported pressure into gauge pressure with its head.

    ``p = scale * exported * (density if times_density else 1) + offset + head · x``,
    with ``x`` about the origin of the integration. Applied to arrays only.
    """

    times_density: bool
    offset: float
    head_x: float
    head_y: float
    head_z: float


class FlowArrays(NamedTuple):
    """All fields of one integration.

    Attributes
    ----------
    velocity, traction : FieldArrays with k = 3
        m/s, and Pa on the fluid.
    pressure, density : FieldArrays of scalars
        As exported (see `terms`), and kg/m^3.
    mass : FieldArrays of scalars
        Mass flow out through each face in kg/s; `AT_FACE` or `ABSENT`.
    terms : PressureTerms
        From exported to gauge pressure.
    sample_start : ndarray, shape (n_faces + 1,), int64
        Where the samples of each face start; empty when no field is sampled.
    """

    velocity: FieldArrays
    traction: FieldArrays
    pressure: FieldArrays
    density: FieldArrays
    mass: FieldArrays
    terms: PressureTerms
    sample_start: NDArray[np.int64]


class FaceArrays(NamedTuple):
    """Faces, as in `fluxmesh.surface.surface.ControlSurface`.

    Attributes
    ----------
    points : ndarray, shape (n_points, 3), float64
        Metres.
    connectivity : ndarray, shape (n_entries,), int64
        Point indices.
    offsets : ndarray, shape (n_faces + 1,), int64
        Empty when all faces are straight triangles.
    kinds : ndarray, shape (n_faces,), int8
        Empty when all faces have straight edges.
    """

    points: NDArray[np.float64]
    connectivity: NDArray[np.int64]
    offsets: NDArray[np.int64]
    kinds: NDArray[np.int8]


class Runs(NamedTuple):
    """Runs of faces of one group and one family (straight or curved), in order.

    Sums are made run by run; since runs do not depend on the number of
    threads, neither do the sums.

    Attributes
    ----------
    order : ndarray, shape (n_faces,), int64
        Order that faces are taken in; empty for the order they are stored in.
    start : ndarray, shape (n_runs + 1,), int64
        Run ``k`` holds the places ``start[k]`` to ``start[k + 1]`` of that order.
    group : ndarray, shape (n_runs,), int32
        Group of each run.
    curved : ndarray, shape (n_runs,), bool
        Whether its faces are curved.
    """

    order: NDArray[np.int64]
    start: NDArray[np.int64]
    group: NDArray[np.int32]
    curved: NDArray[np.bool_]


def make_runs(group_of_face: NDArray[np.int32], kinds: NDArray[np.int8] | None, *, length: int = _RUN_LENGTH) -> Runs:
    """Cut the faces into runs of one group and one family.

    Parameters
    ----------
    group_of_face : ndarray, shape (n_faces,), int32
        Group of each face.
    kinds : ndarray, shape (n_faces,), int8, or None
        Face kinds; None when all have straight edges.
    length : int, optional
        Most faces a run.

    Returns
    -------
    Runs
        Faces keep the order they are stored in, unless groups alternate so
        often that sorting them first is cheaper.
    """
    count = group_of_face.size
    key = group_of_face
    if kinds is not None:
        key = group_of_face * np.int32(2) + (kinds > 0)
    change = np.flatnonzero(key[1:] != key[:-1]) + 1
    order = np.empty(0, dtype=np.int64)
    if change.size > count // 64 + 64:
        order = np.argsort(key, kind="stable")
        key = key[order]
        change = np.flatnonzero(key[1:] != key[:-1]) + 1
    start = np.union1d(np.arange(0, count, length), change).astype(np.int64)
    heads = key[start]
    curved = (heads % 2 == 1) if kinds is not None else np.zeros(start.size, dtype=np.bool_)
    group = (heads // 2 if kinds is not None else heads).astype(np.int32)
    return Runs(order, np.append(start, count), group, curved)


def runs_over(
    group_of_face: NDArray[np.int32], kinds: NDArray[np.int8] | None, faces: NDArray[np.int64] | None
) -> Runs:
    """Cut some of the faces into runs of one group and one family.

    Parameters
    ----------
    group_of_face, kinds
        As for `make_runs`.
    faces : ndarray, shape (n,), int64, or None
        Faces wanted; None for all.

    Returns
    -------
    Runs
        With the numbers that the faces have in the whole surface.
    """
    if faces is None:
        return make_runs(group_of_face, kinds)
    runs = make_runs(group_of_face[faces], None if kinds is None else kinds[faces])
    return runs._replace(order=faces[runs.order] if runs.order.size else faces)


def sampled_groups(flow: FlowArrays) -> NDArray[np.bool_]:
    """Return which groups have a field at quadrature points.

    Parameters
    ----------
    flow : FlowArrays
        The fields.

    Returns
    -------
    ndarray, shape (n_groups,), bool
        These groups are integrated point by point.
    """
    fields = (flow.velocity, flow.traction, flow.pressure, flow.density)
    return np.asarray(np.logical_or.reduce([field.where == AT_SAMPLE for field in fields]))
