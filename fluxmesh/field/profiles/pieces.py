"""The faces of a port cut into quadratic triangles, and where each quadrature point lies in them."""

from __future__ import annotations

from functools import lru_cache
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from fluxmesh.integral.rules import TRIANGLE_DEGREE4, collapsed_triangle, gauss_square
from fluxmesh.integral.samples import Samples
from fluxmesh.integral.shapes import quadratic_quad8, quadratic_quad9, quadratic_triangle
from fluxmesh.surface.surface import ControlSurface, FaceKind

__all__ = ["Pieces", "cut_faces"]

_DEGREE4 = np.array([point for point, _ in TRIANGLE_DEGREE4])
_NEWTON_STEPS = 4  # the guess is off by a small share of the face already, and steps square what is left
_FARTHEST = 0.2
_MID_OF = np.array([[0.5, 0.5, 0.0], [0.0, 0.5, 0.5], [0.5, 0.0, 0.5]])


class Pieces(NamedTuple):
    """Triangles that make up some faces.

    Attributes
    ----------
    corners : ndarray, shape (n_pieces, 3), int64
        Vertex of each corner: a point of the surface or, with higher numbers, the
        middle of a face.
    places : ndarray, shape (n_pieces, 6, 3), float64
        Corners, then mid-side points 0-1, 1-2, 2-0, m.
    sample_piece : ndarray, shape (n_samples,), int64
        Piece that holds each quadrature point; -1 for one that lies outside its
        face, as happens in a polygon that its middle does not see all of.
    sample_weights : ndarray, shape (n_samples, 3), float64
        Barycentric coordinates in that piece.
    """

    corners: NDArray[np.int64]
    places: NDArray[np.float64]
    sample_piece: NDArray[np.int64]
    sample_weights: NDArray[np.float64]


class _Cut(NamedTuple):
    """How one kind of face is cut: `corner` −1 is the middle of the face."""

    corner: NDArray[np.int64]  # (pieces, 3)
    piece: NDArray[np.int64]  # (samples,)
    at: NDArray[np.float64]  # (samples, 3)


def cut_faces(
    surface: ControlSurface, faces: NDArray[np.int64], samples: Samples, normal: NDArray[np.float64]
) -> Pieces:
    """Cut faces into quadratic triangles.

    A straight triangle stays whole; another polygon becomes a fan about the mean
    of its corners, as the integration has it, or is cut ear by ear where that fan
    would fold over; a curved quadrilateral becomes a fan about its middle.

    Parameters
    ----------
    surface : ControlSurface
        The surface.
    faces : ndarray, shape (n,), int64
        Faces to cut, rising.
    samples : Samples
        Their quadrature points.
    normal : ndarray, shape (3,), float64
        Mean unit normal of the faces.

    Returns
    -------
    Pieces
        Pieces of one face stand together.
    """
    if surface.offsets is None:
        first, sizes = 3 * faces, np.full(faces.size, 3)
    else:
        first, sizes = surface.offsets[faces], surface.offsets[faces + 1] - surface.offsets[faces]
    kinds = np.zeros(faces.size, np.int8) if surface.kinds is None else surface.kinds[faces]
    corners: list[NDArray[np.int64]] = []
    places: list[NDArray[np.float64]] = []
    sample_piece = np.full(samples.face.size, -1)
    sample_weights = np.zeros((samples.face.size, 3))
    count = 0
    for kind, size in sorted(set(zip(kinds.tolist(), sizes.tolist()))):
        those = np.flatnonzero((kinds == kind) & (sizes == size))
        entries = surface.connectivity[first[those][:, None] + np.arange(size)]
        own = surface.points[entries]
        cut = _cutting(int(kind), int(size))
        rows = samples.start[faces[those]][:, None] + np.arange(cut.piece.size)
        middles = surface.point_count + faces[those]
        nodes = _nodes(own, int(kind))
        owner = np.where(cut.corner < 0, middles[:, None, None], entries[:, np.maximum(cut.corner, 0)])
        folded = np.zeros(those.size, np.bool_)
        if kind == FaceKind.POLYGON and size > 3:
            folded |= (_signed_areas(nodes, normal) < 0.0).any(axis=1)
        ears = {k: found for k in np.flatnonzero(folded).tolist() if len(found := _ears(own[k], normal)) == size - 2}
        plain = np.setdiff1d(np.arange(those.size), list(ears))
        numbers = count + len(cut.corner) * np.arange(plain.size)
        corners.append(owner[plain].reshape(-1, 3))
        places.append(nodes[plain].reshape(-1, 6, 3))
        sample_piece[rows[plain]] = numbers[:, None] + cut.piece
        sample_weights[rows[plain]] = cut.at
        if kind in (FaceKind.QUAD8, FaceKind.QUAD9):
            held = nodes[plain][:, cut.piece].reshape(-1, 6, 3)
            start = sample_weights[rows].reshape(-1, 3)
            settled = _settled(held, start, samples.places[rows].reshape(-1, 3), normal)
            sample_weights[rows] = settled.reshape(*rows.shape, 3)
        count += len(cut.corner) * plain.size
        for k, rows_of in ears.items():
            corners.append(entries[k][rows_of])
            places.append(_straight(own[k][rows_of]))
            inside, sample_weights[rows[k]] = _found_in(own[k][rows_of], samples.places[rows[k]], normal)
            sample_piece[rows[k]] = np.where(inside < 0, -1, count + inside)
            count += len(rows_of)
    return Pieces(np.concatenate(corners), np.concatenate(places), sample_piece, sample_weights)


def _straight(corners: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return corners and halfway points of triangles, shape (..., 6, 3)."""
    return np.concatenate([corners, _MID_OF @ corners], axis=-2)


def _nodes(own: NDArray[np.float64], kind: int) -> NDArray[np.float64]:
    """Return the corners and mid-side points of the pieces of faces, shape (faces, pieces, 6, 3)."""
    size = own.shape[1]
    if kind == FaceKind.TRIANGLE6:
        return own[:, None]
    if kind != FaceKind.POLYGON:
        return np.asarray(np.einsum("pna,fak->fpnk", _quadrilateral_weights(size), own))
    if size == 3:
        return _straight(own[:, None])
    middle = np.broadcast_to(own.mean(axis=1, keepdims=True), own.shape)
    return _straight(np.stack([own, np.roll(own, -1, axis=1), middle], axis=2))


def _signed_areas(nodes: NDArray[np.float64], normal: NDArray[np.float64]) -> NDArray[np.float64]:
    one, two = nodes[..., 1, :] - nodes[..., 0, :], nodes[..., 2, :] - nodes[..., 0, :]
    return np.asarray(0.5 * np.cross(one, two) @ normal)


@lru_cache(maxsize=64)
def _cutting(kind: int, size: int) -> _Cut:
    """Return the fan of a face with its samples in the order of `sample_places`."""
    here = np.arange(4 if kind in (FaceKind.QUAD8, FaceKind.QUAD9) else size)
    fan = np.column_stack([here, np.roll(here, -1), np.full(here.size, -1)])
    if kind == FaceKind.TRIANGLE6:
        uv, _ = collapsed_triangle(6)
        at = np.column_stack([1 - uv.sum(axis=1), uv])
        return _Cut(np.arange(3)[None], np.zeros(len(at), np.int64), at)
    if kind != FaceKind.POLYGON:
        return _Cut(fan, *_quadrilateral_samples())
    if size == 3:
        return _Cut(np.arange(3)[None], np.zeros(len(_DEGREE4), np.int64), _DEGREE4)
    return _Cut(fan, np.repeat(here, len(_DEGREE4)), np.tile(_DEGREE4, (size, 1)))


# the fan of the square [-1, 1]² about its middle
_SQUARE = np.array([[-1, -1], [1, -1], [1, 1], [-1, 1]], dtype=np.float64)
_FAN = np.stack([_SQUARE, np.roll(_SQUARE, -1, axis=0), np.zeros((4, 2))], axis=1)


@lru_cache(maxsize=2)
def _quadrilateral_weights(size: int) -> NDArray[np.float64]:
    """Return weights over a curved quadrilateral's points at the nodes of its fan, shape (4, 6, size)."""
    shape = quadratic_quad8 if size == 8 else quadratic_quad9
    nodes = np.concatenate([_FAN, _MID_OF @ _FAN], axis=1)
    return np.asarray(shape(nodes[..., 0].ravel(), nodes[..., 1].ravel())[0].reshape(4, 6, size))


def _quadrilateral_samples() -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Return the piece of each sample of a curved quadrilateral, and its barycentric coordinates there."""
    samples, _ = gauss_square(6)
    x, y = samples.T
    # the side of the square that a sample is nearest to owns it
    piece = np.argmin(np.stack([y, -x, -y, x], axis=1), axis=1)
    a, b = _FAN[piece, 0], _FAN[piece, 1]
    # the middle is the origin: sample = l0 a + l1 b
    turn = a[:, 0] * b[:, 1] - a[:, 1] * b[:, 0]
    l0 = (x * b[:, 1] - y * b[:, 0]) / turn
    l1 = (a[:, 0] * y - a[:, 1] * x) / turn
    return piece, np.column_stack([l0, l1, 1 - l0 - l1])


def _settled(
    nodes: NDArray[np.float64],
    weights: NDArray[np.float64],
    places: NDArray[np.float64],
    normal: NDArray[np.float64],
) -> NDArray[np.float64]:
    """Return where places lie in quadratic triangles, by Newton steps from a near guess.

    A quadratic triangle follows the map of a curved quadrilateral on its sides and
    nearly, not exactly, within.
    """
    guess = weights
    for _ in range(_NEWTON_STEPS):
        value, by_u, by_v = quadratic_triangle(weights[:, 1], weights[:, 2])
        at, along_u, along_v = (np.einsum("ni,nik->nk", table, nodes) for table in (value, by_u, by_v))
        twice = np.cross(along_u, along_v) @ normal
        off = places - at
        u = np.cross(off, along_v) @ normal / np.where(twice == 0.0, 1.0, twice)
        v = np.cross(along_u, off) @ normal / np.where(twice == 0.0, 1.0, twice)
        weights = weights + np.column_stack([-u - v, u, v])
    # on a face bent so far that the steps lead away, the guess stands
    led_away = ~(np.abs(weights - guess).max(axis=1) < _FARTHEST)
    weights[led_away] = guess[led_away]
    return weights


def _ears(corners: NDArray[np.float64], normal: NDArray[np.float64]) -> NDArray[np.int64]:
    """Cut any simple polygon into triangles without new points, shape (n - 2, 3); fewer if it crosses itself."""
    from vtkmodules.vtkCommonCore import vtkIdList
    from vtkmodules.vtkCommonDataModel import vtkPolygon

    polygon, found = vtkPolygon(), vtkIdList()
    polygon.GetPoints().SetNumberOfPoints(len(corners))
    polygon.GetPointIds().SetNumberOfIds(len(corners))
    scale = np.ptp(corners, axis=0).max()
    for k, place in enumerate(((corners - corners.mean(axis=0)) / scale).tolist()):
        polygon.GetPoints().SetPoint(k, *place)
        polygon.GetPointIds().SetId(k, k)
    polygon.EarCutTriangulation(found, 0)
    rows = np.array([found.GetId(k) for k in range(found.GetNumberOfIds())], dtype=np.int64).reshape(-1, 3)
    turned = _signed_areas(corners[rows], normal) < 0.0
    rows[turned] = rows[turned, ::-1]
    return rows


def _found_in(
    triangles: NDArray[np.float64], places: NDArray[np.float64], normal: NDArray[np.float64]
) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Return the triangle that holds each place, or -1, and the barycentric coordinates there."""
    inside, weights = np.full(len(places), -1), np.zeros((len(places), 3))
    for k, (a, b, c) in enumerate(triangles):
        twice = float(np.cross(b - a, c - a) @ normal)
        if twice <= 0.0:
            continue
        w0 = np.cross(b - places, c - places) @ normal / twice
        w1 = np.cross(c - places, a - places) @ normal / twice
        here = np.column_stack([w0, w1, 1 - w0 - w1])
        # a place on a shared side belongs to both: round-off must not lose it
        hit = (inside < 0) & (here.min(axis=1) >= -1e-12)
        inside[hit] = k
        weights[hit] = np.maximum(here[hit], 0.0)
    return inside, weights
