"""The variables of an Exodus file as blocks, side sets and arrays."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError, FileError
from fluxmesh.surface.readers.exodus_shapes import BlockShape, shape_of_block
from fluxmesh.surface.readers.netcdf import Variables

__all__ = ["Block", "Model", "SideSet", "read_model"]


@dataclass(frozen=True, eq=False)
class Block:
    """A block of elements.

    Attributes
    ----------
    name : str
        Its name, or "block_7" by its number.
    shape : BlockShape
        What its elements are.
    rows : ndarray, shape (n, k), int64
        Points from 0, in our order.
    first : int
        Number of its first element in the file, from 0.
    """

    name: str
    shape: BlockShape
    rows: NDArray[np.int64]
    first: int


@dataclass(frozen=True, eq=False)
class SideSet:
    """A set of sides of elements.

    Attributes
    ----------
    name : str
        Its name, or "side_set_7" by its number.
    elements, sides : ndarray, shape (n,), int64
        Element and side of each, from 0.
    arrays : dict of str to ndarray, shape (n,)
        Its variables.
    """

    name: str
    elements: NDArray[np.int64]
    sides: NDArray[np.int64]
    arrays: dict[str, NDArray[Any]] = field(default_factory=dict)


@dataclass(frozen=True, eq=False)
class Model:
    """What an Exodus file holds.

    Attributes
    ----------
    points : ndarray, shape (n_points, 3)
        Coordinates; a plane mesh lies at z = 0.
    blocks : tuple of Block
        In their order.
    side_sets : tuple of SideSet
        In their order.
    node_arrays : dict of str to ndarray, shape (n_points,)
        Variables of nodes, at the last time step.
    element_arrays : dict of str to ndarray, shape (n_elements,)
        Variables of elements; NaN in blocks that have none.
    notes : tuple of str
        Which time step was taken.
    """

    points: NDArray[Any]
    blocks: tuple[Block, ...]
    side_sets: tuple[SideSet, ...]
    node_arrays: dict[str, NDArray[Any]]
    element_arrays: dict[str, NDArray[Any]]
    notes: tuple[str, ...]


def read_model(variables: Variables) -> Model:
    """Read the variables of an Exodus file.

    Parameters
    ----------
    variables : Variables
        The netCDF file below it.

    Returns
    -------
    Model
        At the last time step.

    Raises
    ------
    FileError
        A variable that is needed is missing or cut short.
    FieldError
        A variable has the wrong length.
    """
    points = _points(variables)
    blocks = _blocks(variables)
    step, notes = _last_step(variables)
    count = blocks[-1].first + len(blocks[-1].rows) if blocks else 0
    node_arrays: dict[str, NDArray[Any]] = {}
    element_arrays: dict[str, NDArray[Any]] = {}
    if step is not None:
        node_arrays = _node_variables(variables, step, len(points))
        element_arrays = _element_variables(variables, step, blocks, count)
    return Model(points, blocks, _side_sets(variables, count, step), node_arrays, element_arrays, notes)


def _points(variables: Variables) -> NDArray[Any]:
    if "coordx" in variables:
        dimension = variables.dimension("num_dim")
        columns = [variables.array(f"coord{axis}") for axis in "xyz"[: 3 if dimension is None else dimension]]
    else:
        columns = list(np.atleast_2d(variables.array("coord")))
    if len(columns) < 2 or any(column.shape != columns[0].shape for column in columns):
        raise FileError(
            f"has coordinates of the shapes {[column.shape for column in columns]}",
            variables.where,
            "Two or three of one length are needed",
        )
    if len(columns) == 2:
        columns.append(np.zeros_like(columns[0]))
    points = np.column_stack(columns[:3])
    return points if points.dtype in (np.float32, np.float64) else points.astype(np.float64)


def _blocks(variables: Variables) -> tuple[Block, ...]:
    blocks: list[Block] = []
    first = 0
    names = _names(variables, "eb_names", "eb_prop1", "block")
    for number, name in enumerate(names, start=1):
        key = f"connect{number}"
        if key not in variables:
            continue  # a block without elements
        rows = variables.array(key).astype(np.int64)
        kind = variables.attribute(key, "elem_type")
        if rows.ndim == 1 and kind.lower().startswith(("nsided", "nfaced")):
            rows = rows[:, None]
        if rows.ndim != 2:
            raise FileError(
                f"{key!r} has the shape {rows.shape}", variables.where, "The file is damaged; export it again"
            )
        shape = shape_of_block(kind, rows.shape[1])
        rows = rows - 1
        blocks.append(Block(name, shape, rows[:, list(shape.order)] if shape.order else rows, first))
        first += len(rows)
    return tuple(blocks)


def _side_sets(variables: Variables, element_count: int, step: int | None) -> tuple[SideSet, ...]:
    sets = []
    quantities = _texts(variables, "name_sset_var")
    for number, name in enumerate(_names(variables, "ss_names", "ss_prop1", "side_set"), start=1):
        if f"elem_ss{number}" not in variables:
            continue
        elements = variables.array(f"elem_ss{number}").astype(np.int64).ravel() - 1
        sides = variables.array(f"side_ss{number}").astype(np.int64).ravel() - 1
        if elements.shape != sides.shape:
            raise FileError(
                f"side set {name!r} has {elements.size} elements and {sides.size} sides",
                variables.where,
                "The file is damaged; export it again",
            )
        wrong = (elements < 0) | (elements >= element_count) | (sides < 0)
        if wrong.any():
            raise FileError(
                f"side set {name!r} uses side {sides[wrong][0] + 1} of element {elements[wrong][0] + 1}, "
                f"but there are {element_count} elements",
                variables.where,
                "The file is damaged; export it again",
            )
        arrays = {}
        for index, quantity in enumerate(quantities, start=1):
            key = f"vals_sset_var{index}ss{number}"
            if step is not None and key in variables:
                arrays[quantity] = _sized(
                    variables.array(key, step), elements.size, quantity, f"sides of {name!r}", variables
                )
        sets.append(SideSet(name, elements, sides, arrays))
    return tuple(sets)


def _last_step(variables: Variables) -> tuple[int | None, tuple[str, ...]]:
    if "time_whole" not in variables:
        return None, ()
    times = variables.array("time_whole").ravel()
    if times.size < 2:
        return (0 if times.size else None), ()
    return times.size - 1, (f"values are those of the last of {times.size} time steps, {times[-1]:.6g}",)


def _node_variables(variables: Variables, step: int, count: int) -> dict[str, NDArray[Any]]:
    arrays = {}
    for index, name in enumerate(_texts(variables, "name_nod_var"), start=1):
        key = f"vals_nod_var{index}"
        if key in variables:
            values = variables.array(key, step)
        elif "vals_nod_var" in variables:  # the older layout: time, variable, node
            values = variables.array("vals_nod_var", step)[index - 1]
        else:
            raise variables.missing(key)
        arrays[name] = _sized(values, count, name, "points", variables)
    return arrays


def _element_variables(variables: Variables, step: int, blocks: Sequence[Block], count: int) -> dict[str, NDArray[Any]]:
    arrays: dict[str, NDArray[Any]] = {}
    numbers = [number for number in range(1, 1 + _count(variables, "eb_prop1")) if f"connect{number}" in variables]
    for index, name in enumerate(_texts(variables, "name_elem_var"), start=1):
        for number, block in zip(numbers, blocks):
            key = f"vals_elem_var{index}eb{number}"
            if key in variables:
                values = _sized(
                    variables.array(key, step), len(block.rows), name, f"elements of {block.name!r}", variables
                )
                whole = arrays.setdefault(name, np.full(count, np.nan))
                whole[block.first : block.first + len(block.rows)] = values
    return arrays


def _sized(values: NDArray[Any], count: int, name: str, on: str, variables: Variables) -> NDArray[Any]:
    if values.shape != (count,):
        raise FieldError(
            f"array {name!r} holds {values.size} values, but there are {count} {on}", variables.where, "Export it again"
        )
    return values


def _count(variables: Variables, name: str) -> int:
    return variables.shape(name)[0] if name in variables and variables.shape(name) else 0


def _names(variables: Variables, texts: str, numbers: str, word: str) -> list[str]:
    """Return the name of each block or set, made from its number where it has none."""
    named = _texts(variables, texts)
    known = variables.array(numbers).ravel().tolist() if numbers in variables else []
    count = max(len(named), len(known))
    if not count:
        # a file that gives no numbers: count the entries
        key = "connect" if word == "block" else "elem_ss"
        while f"{key}{count + 1}" in variables:
            count += 1
    named += [""] * (count - len(named))
    known += list(range(len(known) + 1, count + 1))
    return [name or f"{word}_{number}" for name, number in zip(named, known)]


def _texts(variables: Variables, name: str) -> list[str]:
    """Return a table of characters as a list of words."""
    if name not in variables:
        return []
    table = np.atleast_2d(variables.array(name))
    if table.dtype.kind not in "SU":
        return []
    return [b"".join(row.astype("S1").tolist()).decode("utf-8", "replace").split("\0")[0].strip() for row in table]
