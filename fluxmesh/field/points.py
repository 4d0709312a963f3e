"""Scattered points with values: read from a table or a point file, and checked."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError, FileError
from fluxmesh.field.points_files import PointArrays, read_ply_points, read_vtk_points
from fluxmesh.field.points_table import Table, read_table
from fluxmesh.units.wording import either, nearest, quoted

__all__ = ["PointCloud", "point_suffixes", "read_points"]

_POINT_FILES = {".ply": read_ply_points, ".vtk": read_vtk_points, ".vtp": read_vtk_points, ".vtu": read_vtk_points}
_TABLES = (".asc", ".csv", ".dat", ".prn", ".tsv", ".txt", ".xyz")
# with neither header nor names, this suffix says what the columns are
_NAMELESS = ".xyz"
_MOST_BYTES = 8 * 1024**3
_FEWEST_POINTS = 4
# A cloud that is thinner than this share of its length has no gradient across; coordinates
# written with six digits stray by about 1e-6 of it.
_FLAT_SHARE = 1e-5
_AXES = ("x", "y", "z")
_COORDINATE = re.compile(r"(?:coordinate)?([xyz])(?:coordinate)?")
_MOST_NAMED = 30


@dataclass(frozen=True, eq=False)
class PointCloud:
    """Scattered points and their values, in the file's own units.

    Attributes
    ----------
    source : str
        File, for messages.
    places : ndarray, shape (n_points, 3), float64
        Coordinates in the file's unit, finite, not all in one plane.
    columns : dict of str to ndarray, shape (n_points,) or (n_points, 3), float64
        Finite values by name, without the coordinates.
    units : dict of str to str
        Units as the header gives them ("x [mm]" -> "mm"), coordinates included;
        names without a unit are left out.
    coordinates : tuple of 3 str
        Names of the coordinates in the file.
    faults : dict of str to str
        Why each other column cannot be used.
    notes : tuple of str
        What to say of the file: that it may be cut within its last number.
    """

    source: str
    places: NDArray[np.float64]
    columns: dict[str, NDArray[np.float64]]
    units: dict[str, str] = field(default_factory=dict)
    coordinates: tuple[str, str, str] = _AXES
    faults: dict[str, str] = field(default_factory=dict)
    notes: tuple[str, ...] = ()

    def column(self, name: str) -> NDArray[np.float64]:
        """Return one column.

        Parameters
        ----------
        name : str
            As in the header, without the unit.

        Returns
        -------
        ndarray, shape (n_points,) or (n_points, 3), float64
            In the file's unit.

        Raises
        ------
        FieldError
            There is no such column, or it has text, gaps or values that are
            not finite.
        """
        if name in self.columns:
            return self.columns[name]
        if name in self.faults:
            raise FieldError(f"column {quoted(name)} cannot be used: {self.faults[name]}", self.source, _WHOLE)
        raise FieldError(f"there is no column {quoted(name)}", self.source, _hint(name, [*self.columns, *self.faults]))


_WHOLE = "Export a number for every point, or leave those points out"


def point_suffixes() -> tuple[str, ...]:
    """Return every suffix of a file that points can be read from.

    Returns
    -------
    tuple of str
        Sorted, lower case, with the dot.
    """
    return tuple(sorted({*_POINT_FILES, *_TABLES}))


def read_points(path: Path, *, coordinates: tuple[str, str, str] | None = None) -> PointCloud:
    """Read scattered points with values.

    Parameters
    ----------
    path : Path
        A text table (see `fluxmesh.field.points_table.read_table`), a VTK file
        (.vtp, .vtu, .vtk) or a PLY file whose points carry arrays.
    coordinates : tuple of 3 str, optional
        Names of the coordinate columns; by default x, y, z or CoordinateX,
        CoordinateY, CoordinateZ (CGNS/SIDS), in upper or lower case. Point
        files have coordinates of their own, and take no names.

    Returns
    -------
    PointCloud
        At least four points that span space.

    Raises
    ------
    FileError
        No such file, not readable as points, of a size beyond 8 GiB, rows of
        uneven length, fewer than four points, or all in one plane or line.
    FieldError
        A coordinate is missing, is no number or is not finite, or an array
        has the wrong length.
    """
    where, suffix = str(path), path.suffix.lower()
    _require_file(path, where, suffix)
    try:
        if suffix in _POINT_FILES:
            if coordinates is not None:
                raise FieldError(
                    f"coordinates {either(map(quoted, coordinates), 'and')} are named, but its points have their own",
                    where,
                    "Leave the names out",
                )
            cloud = _from_arrays(_POINT_FILES[suffix](path), where)
        else:
            cloud = _from_table(read_table(path, nameless=suffix == _NAMELESS), coordinates, where)
    except OSError as error:
        raise FileError(f"cannot be read ({error.strerror or error})", where, "Check that you may read it") from error
    except MemoryError as error:
        raise FileError("does not fit into memory", where, "Export fewer points: those near the surface do") from error
    _require_space(cloud.places, where)
    return cloud


def _require_file(path: Path, where: str, suffix: str) -> None:
    if not path.exists():
        near = nearest(path.name, [entry.name for entry in path.parent.iterdir()]) if path.parent.is_dir() else None
        remedy = f"Did you mean {quoted(near)}?" if near else "Check the path; it is relative to the case file"
        raise FileError("there is no such file", where, remedy)
    if not path.is_file():
        raise FileError("is a folder" if path.is_dir() else "is no regular file", where, "Name one file of points")
    if suffix not in point_suffixes():
        raise FileError(
            f"its suffix {quoted(path.suffix)} tells no known format of points" if suffix else "has no suffix",
            where,
            f"Known suffixes are {', '.join(point_suffixes())}",
        )
    size = path.stat().st_size
    if size == 0:
        raise FileError("is empty", where, "Export it again")
    if size > _MOST_BYTES:
        raise FileError(
            f"has {size / 1024**3:.3g} GiB, where at most {_MOST_BYTES / 1024**3:.3g} are read",
            where,
            "Export fewer points: those near the surface do",
        )


def _from_table(table: Table, coordinates: tuple[str, str, str] | None, where: str) -> PointCloud:
    names = coordinates or _found_coordinates(table.names, where)
    if len(set(names)) < len(names):
        raise FieldError(f"coordinates are named {either(map(quoted, names), 'and')}", where, "Name three columns")
    for name in names:
        if name in table.faults:
            raise FieldError(f"coordinate {quoted(name)} cannot be used: {table.faults[name]}", where, _WHOLE)
        if name not in table.columns:
            raise FieldError(f"there is no column {quoted(name)} for a coordinate", where, _hint(name, table.names))
    return PointCloud(
        source=where,
        places=np.column_stack([table.columns[name] for name in names]),
        columns={name: values for name, values in table.columns.items() if name not in names},
        units=table.units,
        coordinates=names,
        faults=table.faults,
    )


def _found_coordinates(names: tuple[str, ...], where: str) -> tuple[str, str, str]:
    found: dict[str, list[str]] = {axis: [] for axis in _AXES}
    for name in names:
        match = _COORDINATE.fullmatch(re.sub(r"[\s_-]", "", name).casefold())
        if match:
            found[match[1]].append(name)
    for axis, fitting in found.items():
        if len(fitting) != 1:
            several = f"columns {either(map(quoted, fitting), 'and')} could each be" if fitting else "no column is"
            raise FieldError(
                f"{several} the coordinate {axis}",
                where,
                f'Name them, such as coordinates = ["X", "Y", "Z"]. {_listed(names)}',
            )
    return found["x"][0], found["y"][0], found["z"][0]


def _from_arrays(found: PointArrays, where: str) -> PointCloud:
    if found.places.size and not np.isfinite(found.places).all():
        bad = np.flatnonzero(~np.isfinite(found.places).all(axis=1))
        raise FieldError(
            f"{bad.size} of {found.places.shape[0]} points have coordinates that are not finite, "
            f"the first is point {bad[0]}",
            where,
            "Export the points again",
        )
    columns: dict[str, NDArray[np.float64]] = {}
    faults: dict[str, str] = {}
    for name, values in found.arrays.items():
        if values.dtype.kind not in "fiub":
            faults[name] = "it holds text"
            continue
        flat = values[:, 0] if values.ndim == 2 and values.shape[1] == 1 else values
        if flat.ndim > 2 or (flat.ndim == 2 and flat.shape[1] != len(_AXES)):
            faults[name] = f"it has {int(np.prod(flat.shape[1:]))} components, where 1 or 3 are used"
            continue
        finite = np.isfinite(flat).reshape(flat.shape[0], -1).all(axis=1)
        if finite.all():
            columns[name] = np.ascontiguousarray(flat, dtype=np.float64)
        else:
            first = int(np.argmin(finite))
            faults[name] = f"{int((~finite).sum())} of {finite.size} values are not finite, the first at point {first}"
    if not columns and not faults:
        raise FieldError(
            "its points carry no arrays", where, f"Note that {found.hint}" if found.hint else "Export some"
        )
    return PointCloud(where, found.places, columns, faults=faults, notes=found.notes)


def _require_space(places: NDArray[np.float64], where: str) -> None:
    """Raise unless there are four points or more that span space."""
    if places.shape[0] < _FEWEST_POINTS:
        raise FileError(
            f"has {places.shape[0]} point{'s' if places.shape[0] != 1 else ''}",
            where,
            f"At least {_FEWEST_POINTS} that do not lie in one plane are needed",
        )
    from_first = places - places[0]
    centred = from_first - from_first.mean(axis=0)
    length = float(np.abs(centred).max())
    if length == 0:
        raise FileError(
            f"all its {places.shape[0]} points are at one place", where, "Points around the surface are needed"
        )
    _, axes = np.linalg.eigh(centred.T @ (centred / length))
    # measured along each axis, not taken from the eigenvalues: those lose half of the digits
    extent = np.ptp(centred @ axes, axis=0)
    flat = extent < _FLAT_SHARE * extent.max()
    if not flat.any():
        return
    if flat.sum() == 1:
        what = f"in one plane, with normal {_direction(axes[:, int(np.argmin(extent))])}"
    else:
        what = f"on one line, along {_direction(axes[:, int(np.argmax(extent))])}"
    raise FileError(
        f"all its {places.shape[0]} points lie {what}",
        where,
        "Values beside it cannot be told from them: points that span space are needed",
    )


def _direction(vector: NDArray[np.float64]) -> str:
    largest = vector[int(np.argmax(np.abs(vector)))]
    turned = np.round(vector * np.sign(largest), 4) + 0.0
    return "(" + ", ".join(f"{x:.4g}" for x in turned) + ")"


def _hint(name: str, names: Mapping[str, object] | list[str] | tuple[str, ...]) -> str:
    near = nearest(name, names)
    return (f"Did you mean {quoted(near)}? " if near else "") + _listed(tuple(names))


def _listed(names: tuple[str, ...]) -> str:
    if not names:
        return "The file has no columns with a name"
    more = f" and {len(names) - _MOST_NAMED} more" if len(names) > _MOST_NAMED else ""
    return f"Columns are {', '.join(map(quoted, names[:_MOST_NAMED]))}{more}"
