"""The skin of a volume mesh: the faces that belong to one cell only, normals out of the volume."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FileError
from fluxmesh.surface.readers.cell_shapes import SHAPES
from fluxmesh.surface.readers.faces import Faces, gather, join_blocks
from fluxmesh.surface.readers.same_faces import lone_rows
from fluxmesh.surface.readers.volume import Polyhedra, Volume, described
from fluxmesh.surface.surface import FaceKind

__all__ = ["corner_rows", "take_skin"]

# How far a mid-side point may lie from the middle of its edge, over the length of the edge. A half circle
# reaches 0.5; points in the order of another format lie at the middle of another edge, 0.7 away on a square.
_FAR_MIDDLE = 0.6
# Kind of a curved face -> the points of the same face seen from its other side.
_TURNED = {
    FaceKind.TRIANGLE6: [0, 2, 1, 5, 4, 3],
    FaceKind.QUAD8: [0, 3, 2, 1, 7, 6, 5, 4],
    FaceKind.QUAD9: [0, 3, 2, 1, 7, 6, 5, 4, 8],
}
_CORNERS = {FaceKind.TRIANGLE6: 3, FaceKind.QUAD8: 4, FaceKind.QUAD9: 4}


@dataclass(frozen=True, eq=False)
class _Sheet:
    """The faces of one local number of one block of cells, or polyhedron faces of one size."""

    kind: FaceKind
    rows: NDArray[np.int64]  # (n, k): corners, then mid-side points
    cells: NDArray[np.int64]  # (n,): number of the owning cell in the file
    places: NDArray[np.int64]  # (n,): number of the face within its cell
    loose: bool = False  # whether the direction of each face is free: a polyhedron

    @property
    def corners(self) -> NDArray[np.int64]:
        return self.rows[:, : _CORNERS.get(self.kind, self.rows.shape[1])]


def take_skin(volume: Volume, points: NDArray[Any], where: str) -> Faces:
    """Return the faces that belong to one cell only.

    Parameters
    ----------
    volume : Volume
        Cells.
    points : ndarray, shape (n_points, 3)
        Their points.
    where : str
        File, for messages.

    Returns
    -------
    Faces
        In the order of the owning cells, `Faces.cell_of_face` names them.
        Normals point out of the cells by geometry, whatever the order of
        their points: a cell of negative volume has its faces turned. A
        polyhedron must be star-shaped about the mean of its points for that.

    Raises
    ------
    FileError
        Cells of a shape that is not known, points out of range, mid-side
        points away from their edges, or no face that belongs to one cell only.
    """
    if volume.unknown:
        listed = ", ".join(f"{count} of type {name}" for name, count in volume.unknown.items())
        raise FileError(
            f"has volume cells whose skin cannot be taken: {listed}",
            where,
            "Export the surface of the mesh, or linear or quadratic tetrahedra, hexahedra, wedges and pyramids",
        )
    sheets = [sheet for sheet in _sheets(volume, points.shape[0], where) if len(sheet.cells)]
    alone = lone_rows([sheet.corners for sheet in sheets], points.shape[0])
    lone = [_picked(sheet, mask) for sheet, mask in zip(sheets, alone)]
    lone = [sheet for sheet in lone if len(sheet.cells)]
    if not lone:
        raise FileError(
            f"its {described([volume]) or 'cells'} have no face that belongs to one cell only",
            where,
            "Export the surface of the mesh as triangles, quads or polygons",
        )
    with np.errstate(invalid="ignore", over="ignore"):  # points that are not finite are told later
        lone = _outward(sheets, lone, points)
        for sheet in lone:
            _require_middles(sheet, points, where)
    connectivity, offsets, kinds = join_blocks([(sheet.kind, sheet.rows) for sheet in lone])
    cells = np.concatenate([sheet.cells for sheet in lone])
    order = np.lexsort((np.concatenate([sheet.places for sheet in lone]), cells))
    if offsets is None:
        connectivity = connectivity.reshape(-1, 3)[order].ravel()
    else:
        connectivity, offsets = gather(connectivity, offsets, order)
    return Faces(connectivity, offsets, None if kinds is None else kinds[order], cells[order])


def corner_rows(
    connectivity: NDArray[np.int64], offsets: NDArray[np.int64] | None, kinds: NDArray[np.int8] | None
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return the corners of faces, without mid-side points.

    Parameters
    ----------
    connectivity, offsets, kinds
        As in `fluxmesh.surface.rawmesh.RawMesh`.

    Returns
    -------
    connectivity : ndarray, shape (n_entries,), int64
        Corners of the faces, one after the other.
    offsets : ndarray, shape (n_faces + 1,), int64
        Where each face starts.
    """
    if offsets is None:
        return connectivity, np.arange(0, connectivity.size + 1, 3, dtype=np.int64)
    if kinds is None:
        return connectivity, offsets
    sizes = np.diff(offsets)
    for kind, corners in _CORNERS.items():
        sizes[kinds == kind] = corners
    starts = np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64)
    entries = np.repeat(offsets[:-1] - starts[:-1], sizes) + np.arange(starts[-1])
    return connectivity[entries], starts


def _sheets(volume: Volume, point_count: int, where: str) -> Iterator[_Sheet]:
    """Yield all faces of all cells, a local face number at a time."""
    for block in volume.blocks:
        _require_points(block.rows, point_count, SHAPES[block.shape].name, where)
        shape = SHAPES[block.shape]
        for place, face in enumerate(shape.faces):
            rows = block.rows[:, list(face)]
            sheet = _Sheet(shape.kind(place), rows, block.cells, np.full(len(rows), place, dtype=np.int64))
            yield from _without_collapsed(sheet, shape.name, where)
    if volume.polyhedra is not None:
        _require_points(volume.polyhedra.connectivity, point_count, "polyhedron", where)
        yield from _polyhedron_sheets(volume.polyhedra)


def _require_points(rows: NDArray[np.int64], count: int, name: str, where: str) -> None:
    if rows.size and (int(rows.min()) < 0 or int(rows.max()) >= count):
        low, high = int(rows.min()), int(rows.max())
        raise FileError(
            f"a {name} uses point {low if low < 0 else high}, but there are {count} points",
            where,
            "The file is damaged or cut short; export it again",
        )


def _without_collapsed(sheet: _Sheet, name: str, where: str) -> Iterator[_Sheet]:
    """Yield a sheet with collapsed faces put right: a quad with a doubled corner is a triangle, or no face."""
    corners = sheet.corners
    collapsed = np.zeros(len(corners), dtype=np.bool_)
    for one in range(corners.shape[1]):
        for two in range(one):
            collapsed |= corners[:, one] == corners[:, two]
    if not collapsed.any():
        yield sheet
        return
    if sheet.kind is not FaceKind.POLYGON or sheet.rows.shape[1] > 4:
        raise FileError(
            f"has {int(collapsed.sum())} collapsed faces of cells of type {name}, two corners at one point",
            where,
            "Export the surface of the mesh, or collapse such cells to simpler shapes",
        )
    yield _picked(sheet, ~collapsed)
    bad = _picked(sheet, collapsed)
    if bad.rows.shape[1] == 4:
        nexts = np.roll(bad.rows, -1, axis=1)
        doubled = bad.rows == nexts
        one = doubled.sum(axis=1) == 1
        if one.any():
            rest = bad.rows[one][~doubled[one]].reshape(-1, 3)
            distinct = (np.diff(np.sort(rest, axis=1), axis=1) != 0).all(axis=1)
            kept = np.flatnonzero(one)[distinct]
            yield _Sheet(FaceKind.POLYGON, rest[distinct], bad.cells[kept], bad.places[kept])


def _polyhedron_sheets(polyhedra: Polyhedra) -> Iterator[_Sheet]:
    """Yield the faces of polyhedra, a number of corners at a time."""
    sizes = np.diff(polyhedra.offsets)
    for size in np.unique(sizes[sizes >= 3]):
        faces = np.flatnonzero(sizes == size)
        rows = polyhedra.connectivity[polyhedra.offsets[faces][:, None] + np.arange(size)]
        yield _Sheet(FaceKind.POLYGON, rows, polyhedra.cells[faces], faces.astype(np.int64), loose=True)


def _picked(sheet: _Sheet, mask: NDArray[np.bool_]) -> _Sheet:
    return _Sheet(sheet.kind, sheet.rows[mask], sheet.cells[mask], sheet.places[mask], sheet.loose)


def _outward(sheets: list[_Sheet], lone: list[_Sheet], points: NDArray[Any]) -> list[_Sheet]:
    """Turn the lone faces that point into their cells."""
    owners, index = _owners(sheets, lone)
    middle = _middles(sheets, owners, index, points)
    # six times the volume of each owner, by the divergence theorem about the mean of its points
    volume = np.zeros(owners.size)
    for sheet in sheets:
        if not sheet.loose:
            part = _picked(sheet, index[sheet.cells] >= 0)
            position = index[part.cells]
            np.add.at(volume, position, _reach(part, middle[position], points))
    turned = []
    for sheet in lone:
        position = index[sheet.cells]
        inward = (_reach(sheet, middle[position], points) if sheet.loose else volume[position]) < 0
        rows = sheet.rows.copy()
        order = _TURNED.get(sheet.kind, [0, *range(rows.shape[1] - 1, 0, -1)])
        rows[inward] = rows[inward][:, order]
        turned.append(_Sheet(sheet.kind, rows, sheet.cells, sheet.places, sheet.loose))
    return turned


def _owners(sheets: list[_Sheet], lone: list[_Sheet]) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return the cells that own a lone face, and the position of every cell among them (-1: none)."""
    owners = np.unique(np.concatenate([sheet.cells for sheet in lone]))
    index = np.full(1 + max(int(sheet.cells.max()) for sheet in sheets), -1, dtype=np.int64)
    index[owners] = np.arange(owners.size)
    return owners, index


def _middles(
    sheets: list[_Sheet], owners: NDArray[np.int64], index: NDArray[np.int64], points: NDArray[Any]
) -> NDArray[np.float64]:
    """Return a place inside each owning cell: the mean of its faces' corners."""
    total = np.zeros((owners.size, 3))
    count = np.zeros(owners.size)
    for sheet in sheets:
        part = _picked(sheet, index[sheet.cells] >= 0)
        position = index[part.cells]
        np.add.at(total, position, points[part.corners].sum(axis=1, dtype=np.float64))
        np.add.at(count, position, part.corners.shape[1])
    return total / count[:, None]


def _reach(sheet: _Sheet, middle: NDArray[np.float64], points: NDArray[Any]) -> NDArray[np.float64]:
    """Return twice the area vector of each face times the way to it from the middle of its cell."""
    corners = points[sheet.corners].astype(np.float64) - middle[:, None, :]
    twice = np.cross(corners, np.roll(corners, -1, axis=1)).sum(axis=1)
    reach: NDArray[np.float64] = np.einsum("ij,ij->i", twice, corners.mean(axis=1))
    return reach


def _require_middles(sheet: _Sheet, points: NDArray[Any], where: str) -> None:
    """Check that mid-side points lie at their edges: formats differ in the order of them."""
    if sheet.kind is FaceKind.POLYGON:
        return
    corners = points[sheet.corners].astype(np.float64)
    nexts = np.roll(corners, -1, axis=1)
    middles = points[sheet.rows[:, corners.shape[1] : 2 * corners.shape[1]]].astype(np.float64)
    off = np.linalg.norm(middles - 0.5 * (corners + nexts), axis=2)
    far = off > _FAR_MIDDLE * np.linalg.norm(nexts - corners, axis=2)
    if far.any():
        face = int(np.flatnonzero(far.any(axis=1))[0])
        raise FileError(
            f"the mid-side points of {int(far.any(axis=1).sum())} quadratic faces lie away from their edges, "
            f"the first at cell {sheet.cells[face]}",
            where,
            "The points of its cells are in the order of another format; export it as VTK, or with linear cells",
        )
