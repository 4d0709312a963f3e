"""What several meshes of one flow say of the discretisation: any figure of the result file over mesh size."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from fluxmesh.assess.convergence import convergence, representative_size
from fluxmesh.case.model import Case
from fluxmesh.errors import CaseError
from fluxmesh.job.run import run_case
from fluxmesh.report.convergence import StudiedFigure, study_data

__all__ = ["DEFAULT_FIGURES", "MeshStudy", "study_of"]

DEFAULT_FIGURES: Final = (
    "reaction.force",
    "reaction.moment",
    "hardware_load.from_walls.force",
    "hardware_load.from_balance.force",
    "groups.*.mass_flow",
    "geometry.volume",
)
"""Figures that are looked at where none is named: keys of ``balance.json``, ``*`` for every name."""

_AXES = ("x", "y", "z")
_NEGLIGIBLE = 1e-6  # of the length of its vector: a component that is zero but for errors has no order


@dataclass(frozen=True)
class MeshStudy:
    """Figures over several meshes.

    Attributes
    ----------
    cases : tuple of str
        Names of the cases, finest first.
    faces : tuple of int
        Faces of each.
    sizes : tuple of float
        Representative size of a face, the square root of area over faces, m.
    figures : tuple of StudiedFigure
        Those asked for.
    assumptions : tuple of str
        What the figures of the finest mesh assume.
    """

    cases: tuple[str, ...]
    faces: tuple[int, ...]
    sizes: tuple[float, ...]
    figures: tuple[StudiedFigure, ...]
    assumptions: tuple[str, ...]

    def data(self) -> dict[str, Any]:
        """Return everything as plain data."""
        return study_data(self.cases, self.faces, self.sizes, self.figures, self.assumptions)


def study_of(cases: Sequence[Case], *, figures: Sequence[str] = (), threads: int | None = None) -> MeshStudy:
    """Balance the same flow on several meshes, and see how its figures converge.

    Parameters
    ----------
    cases : sequence of Case
        Three or more, in any order.
    figures : sequence of str, optional
        Keys of ``balance.json``, such as ``"reaction.force.x"`` or ``"groups.*.mass_flow"``.
    threads : int, optional
        Threads; all cores by default.

    Returns
    -------
    MeshStudy
        By the published procedure, see `fluxmesh.assess.convergence.convergence`.

    Raises
    ------
    InputError
        A case at fault, fewer than three meshes, or a key that the results do not have.
    """
    if len(cases) < 3:
        raise CaseError(f"{len(cases)} cases are given", remedy="An order needs three meshes of the same flow, or more")
    outcomes = [run_case(case, threads=threads) for case in cases]
    size = [
        representative_size(done.surface.face_count, dimension=2, extent=float(done.balance.table.total("area")))
        for done in outcomes
    ]
    order = [int(k) for k in np.argsort(size)]
    data = [outcomes[k].data() for k in order]
    sizes = [size[k] for k in order]
    found = []
    for name in _names(data[0], figures or DEFAULT_FIGURES, strict=bool(figures)):
        values = [_value(one, name) for one in data]
        lacking = [cases[k].name for k, value in zip(order, values) if value is None]
        if lacking and figures:
            raise CaseError(f"there is no {name} in the result of {', '.join(lacking)}", remedy="Name another figure")
        known = tuple(value for value in values if value is not None)
        if not lacking and not (not figures and _vanishes(data, name)):
            found.append(StudiedFigure(name, known, convergence(sizes, known)))
    return MeshStudy(
        tuple(cases[k].name for k in order),
        tuple(outcomes[k].surface.face_count for k in order),
        tuple(sizes),
        tuple(found),
        outcomes[order[0]].assumptions,
    )


def _names(data: Mapping[str, Any], wanted: Sequence[str], *, strict: bool) -> list[str]:
    """Dotted names of all numbers that keys stand for."""
    names: list[str] = []
    for key in wanted:
        found = list(_expand(data, key.split("."), ""))
        if not found and strict:
            raise CaseError(
                f"there is no number {key!r} in the results",
                remedy='Give a key of balance.json, such as "reaction.force.x"',
            )
        names += found
    return list(dict.fromkeys(names))


def _expand(node: Any, parts: Sequence[str], path: str) -> list[str]:
    if isinstance(node, (int, float)) and not isinstance(node, bool):
        return [path] if not parts else []
    if isinstance(node, list) and len(node) == 3 and all(isinstance(x, float) for x in node):
        axes = _AXES if not parts else tuple(axis for axis in _AXES if parts == [axis])
        return [f"{path}.{axis}" for axis in axes]
    if not isinstance(node, Mapping) or not parts:
        return []
    names = node if parts[0] == "*" else [parts[0]] if parts[0] in node else []
    return [found for name in names for found in _expand(node[name], parts[1:], f"{path}.{name}" if path else name)]


def _value(data: Mapping[str, Any], name: str) -> float | None:
    node: Any = data
    for part in name.split("."):
        if isinstance(node, list):
            node = node[_AXES.index(part)]
        elif isinstance(node, Mapping):
            node = node.get(part)
        else:
            return None
    return float(node) if isinstance(node, (int, float)) else None


def _vanishes(data: Sequence[Mapping[str, Any]], name: str) -> bool:
    """Whether a component, or a flow, is nothing but error on every mesh."""
    parent, _, last = name.rpartition(".")
    if last in _AXES:
        around = [[_value(one, f"{parent}.{axis}") or 0.0 for axis in _AXES] for one in data]
    else:
        head = name.split(".")
        others = data[0].get(head[0], {})
        around = [[_value(one, ".".join([head[0], other, *head[2:]])) or 0.0 for other in others] for one in data]
    values = [abs(_value(one, name) or 0.0) for one in data]
    return all(value <= _NEGLIGIBLE * float(np.linalg.norm(row)) for value, row in zip(values, around))
