"""How contributions add up to the load, and the load with weights to the reaction: steps from zero to the end."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

from fluxmesh.report.page.source import Figure, Source, Term, pointer

__all__ = ["AXES", "Staircase", "Step", "staircase"]

AXES = ("x", "y", "z")
# What is left out below this share of the entries is round-off.
_REST = 1e-9
# The way on to the reaction gets a scale of its own where it reaches this much farther.
_COARSER = 4.0

Three = tuple[Figure, Figure, Figure]


@dataclass(frozen=True)
class Step:
    """One contribution, or a sum.

    Attributes
    ----------
    label : str
        What it is.
    kind : {"pressure", "momentum", "shear", "weight", "storage", "rest", "resultant", "reaction"}
        What sort of force it is.
    figures : tuple of 3 Figure
        Along x, y, z.
    starts : tuple of 3 float
        Where its bars start, SI.
    group : str
        The group that it belongs to.
    total : bool
        Whether it is a sum, which starts at zero.
    """

    label: str
    kind: str
    figures: Three
    starts: tuple[float, float, float] = (0.0, 0.0, 0.0)
    group: str = ""
    total: bool = False

    @property
    def ends(self) -> tuple[float, float, float]:
        """Where its bars end, SI."""
        x, y, z = (start + (figure.value or 0.0) for start, figure in zip(self.starts, self.figures, strict=True))
        return x, y, z


@dataclass(frozen=True)
class Staircase:
    """Steps that lead to one load.

    Attributes
    ----------
    quantity : {"force", "moment"}
        What is added up.
    basis : {"balance", "walls"}
        Which of the two ways to the load the steps go.
    steps : tuple of Step
        In the order in which they are added, to the load of the flow.
    onward : tuple of Step
        From that load on to the reaction; the first is the load again where that part has a scale of its own.
    span, onward_span : tuple of float
        Least and most that the bars of each part reach, SI; zero is within.
    """

    quantity: str
    basis: str
    steps: tuple[Step, ...]
    onward: tuple[Step, ...]
    span: tuple[float, float]
    onward_span: tuple[float, float]

    @property
    def rescaled(self) -> bool:
        """Whether the second part has a scale of its own."""
        return self.span != self.onward_span


_ENTRIES = {
    "force": ("momentum", "momentum_flux", "pressure_force", "viscous_force"),
    "moment": ("angular_momentum", "moment_of_momentum_flux", "moment_of_pressure", "moment_of_viscous"),
}


def staircase(source: Source, quantity: str) -> Staircase | None:
    """Return the steps to the load of the flow and on to the reaction.

    From the balance the load is pressure and shear at all groups but walls, less the momentum that
    flows out, plus the weight of the fluid, less what is stored; from the walls it is pressure and
    shear there, turned.

    Parameters
    ----------
    source : Source
        The result.
    quantity : {"force", "moment"}
        What is added up; moments are about the anchor.

    Returns
    -------
    Staircase or None
        None where no load is known.
    """
    basis = "balance" if source.get("hardware_load", "from_balance", quantity) else "walls"
    if source.get("hardware_load", f"from_{basis}", quantity) is None:
        return None
    parts = _of_balance(source, quantity) if basis == "balance" else _of_walls(source, quantity)
    load = source.vector(quantity, "hardware_load", f"from_{basis}", quantity)
    size = max((abs(figure.value or 0.0) for part in parts for figure in part.figures), default=0.0)
    parts += _rest(source, quantity, "not told group by group", parts, load, size)
    steps = _one_after_another(parts)
    way = "from the momentum balance" if basis == "balance" else "from the walls"
    steps.append(Step(f"Flow on hardware, {way}", "resultant", load, total=True))
    if basis == "balance" and source.get("hardware_load", "from_walls", quantity):
        walls = source.vector(quantity, "hardware_load", "from_walls", quantity)
        steps.append(Step("Flow on hardware, from the walls", "resultant", walls, group="walls", total=True))
    onward = [replace(step, figures=_among(step.figures, size)) for step in _to_reaction(source, quantity, size)]
    steps = [replace(step, figures=_among(step.figures, size)) for step in steps]
    span, further = _span(steps), _span(onward)
    if further[1] - further[0] <= _COARSER * (span[1] - span[0]):
        span = further = min(span[0], further[0]), max(span[1], further[1])
    elif onward:
        base = steps[-1] if source.get("reaction", "basis") == "walls" and basis == "balance" else _last_load(steps)
        onward.insert(0, base)
    return Staircase(quantity, basis, tuple(steps), tuple(onward), span, further)


def _span(steps: list[Step]) -> tuple[float, float]:
    ends = [0.0, *(end for step in steps for end in (*step.starts, *step.ends))]
    return min(ends), max(ends)


def _last_load(steps: list[Step]) -> Step:
    """The load that the steps add up to."""
    return next(step for step in steps if step.kind == "resultant")


def _of_balance(source: Source, quantity: str) -> list[Step]:
    law, flux, pressure, shear = _ENTRIES[quantity]
    groups: Mapping[str, dict[str, object]] = source.get("groups") or {}
    steps: list[Step] = []
    for name, group in groups.items():
        if group.get("role") == "wall":
            continue
        for kind, entry, word, factor in (
            ("pressure", pressure, "Pressure at", 1.0),
            ("momentum", flux, "Momentum at", -1.0),
            ("shear", shear, "Shear at", 1.0),
        ):
            figures = source.vector(quantity, "groups", name, entry, factor=factor)
            given = source.get("groups", name, "data", {"pressure": "pressure", "momentum": "flux"}.get(kind, ""))
            if any(figure.value for figure in figures) or (given and kind != "shear"):
                steps.append(Step(f"{word} {name}", kind, figures, group=name))
    walls = [name for name, group in groups.items() if group.get("role") == "wall"]
    leaks = [source.vector(quantity, "groups", name, flux, factor=-1.0) for name in walls]
    through = [leak for leak in leaks if any(figure.value for figure in leak)]
    if through:
        steps.append(Step("Momentum through the walls", "momentum", _added(source, quantity, through)))
    weight = source.vector(quantity, law, "weight")
    if any(figure.value for figure in weight):
        steps.append(Step("Weight of the fluid", "weight", weight))
    storage = source.vector(quantity, law, "storage", factor=-1.0)
    if any(figure.value for figure in storage):
        steps.append(Step("Inertia of what is inside", "storage", storage))
    return steps


def _of_walls(source: Source, quantity: str) -> list[Step]:
    _, _, pressure, shear = _ENTRIES[quantity]
    steps = []
    for name, group in (source.get("groups") or {}).items():
        if group.get("role") != "wall":
            continue
        for kind, entry, word in (("pressure", pressure, "Pressure on"), ("shear", shear, "Shear on")):
            figures = source.vector(quantity, "groups", name, entry, factor=-1.0)
            if any(figure.value for figure in figures):
                steps.append(Step(f"{word} {name}", kind, figures, group=name))
    return steps


def _to_reaction(source: Source, quantity: str, size: float) -> list[Step]:
    """Weight and inertia of the hardware, and the reaction itself."""
    if source.get("reaction", quantity) is None:
        return []
    basis = "walls" if source.get("reaction", "basis") == "walls" else "balance"
    load = source.vector(quantity, "hardware_load", f"from_{basis}", quantity)
    steps = []
    weight = _hardware_weight(source, quantity)
    if weight is not None and any(figure.value for figure in weight):
        steps.append(Step("Weight of the hardware", "weight", weight, starts=_values(load)))
    reaction = source.vector(quantity, "reaction", quantity)
    turned = (reaction[0].turned(), reaction[1].turned(), reaction[2].turned())
    known = [Step("", "resultant", load), *steps]
    steps += [
        Step(part.label, "storage", part.figures, starts=known[-1].ends)
        for part in _rest(source, quantity, "Inertia of the hardware", known, turned, size)
    ]
    steps.append(Step("Anchor on hardware: the reaction", "reaction", reaction, total=True))
    return steps


def _hardware_weight(source: Source, quantity: str) -> Three | None:
    mass, gravity = source.get("inputs", "hardware", "mass"), source.get("inputs", "gravity")
    centre, anchor = source.get("inputs", "hardware", "centre"), source.get("inputs", "anchor")
    if not mass or gravity is None or centre is None or anchor is None:
        return None
    m, g = pointer("inputs", "hardware", "mass"), [pointer("inputs", "gravity", k) for k in range(3)]
    c = [pointer("inputs", "hardware", "centre", k) for k in range(3)]
    a = [pointer("inputs", "anchor", k) for k in range(3)]
    figures = []
    for k in range(3):
        i, j = (k + 1) % 3, (k + 2) % 3
        terms: tuple[Term, ...] = ((1.0, (m, g[k])),)
        value = mass * gravity[k]
        if quantity == "moment":
            # (centre - anchor) x m g
            value = mass * ((centre[i] - anchor[i]) * gravity[j] - (centre[j] - anchor[j]) * gravity[i])
            terms = ((1.0, (m, c[i], g[j])), (-1.0, (m, a[i], g[j])), (-1.0, (m, c[j], g[i])), (1.0, (m, a[j], g[i])))
        source.units.note(quantity, value)
        figures.append(Figure(value + 0.0, quantity, terms))
    return figures[0], figures[1], figures[2]


def _added(source: Source, quantity: str, vectors: list[Three]) -> Three:
    x, y, z = (source.sum(quantity, [vector[k] for vector in vectors]) for k in range(3))
    return x, y, z


def _rest(source: Source, quantity: str, label: str, parts: list[Step], whole: Three, size: float) -> list[Step]:
    """What the parts lack of the whole, where it is more than round-off."""
    figures = []
    for k in range(3):
        figures.append(source.sum(quantity, [whole[k], *(part.figures[k].turned() for part in parts)], size=size))
    small = _REST * max(size, *(abs(figure.value or 0.0) for figure in whole))
    if any(figure.value is None for figure in figures) or all(abs(figure.value or 0.0) <= small for figure in figures):
        return []
    return [Step(label[:1].upper() + label[1:], "rest", (figures[0], figures[1], figures[2]))]


def _one_after_another(parts: list[Step]) -> list[Step]:
    placed: list[Step] = []
    for part in parts:
        starts = placed[-1].ends if placed else (0.0, 0.0, 0.0)
        placed.append(Step(part.label, part.kind, part.figures, starts, part.group))
    return placed


def _among(figures: Three, size: float) -> Three:
    """The same figures, beside which round-off of the others is seen as such."""
    x, y, z = (replace(figure, size=size) for figure in figures)
    return x, y, z


def _values(figures: Three) -> tuple[float, float, float]:
    x, y, z = (figure.value or 0.0 for figure in figures)
    return x, y, z
