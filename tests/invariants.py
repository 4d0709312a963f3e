"""All figures of an outcome with their kinds and dimensions, and how far round-off may move them.

What is computed twice, the problem told in two ways, differs by round-off alone. Its size is not that of the figure,
which may be what is left of large terms, but of the terms: `Scales` bounds them from the data (area times the largest
speed and so on), and `Scales.rounding` is the largest relative rounding of what goes in: machine epsilon, and more
where coordinates are large beside the faces they tell apart.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Any, Final

import numpy as np
from numpy.testing import assert_allclose
from numpy.typing import NDArray

from fluxmesh.field.flow import integrate_flow
from fluxmesh.integral.table import BASIS, IntegralTable
from tests.problems import (
    ACCELERATION,
    CARRIED,
    DENSITY,
    FLOW,
    FORCE,
    LENGTH,
    MASS,
    MOMENT,
    NONE,
    POWER,
    SPECIFIC,
    SPEED,
    STRESS,
    Change,
    Dimension,
    Problem,
)

Array = NDArray[np.float64]
EPS: Final = float(np.finfo(np.float64).eps)

ROUND: Final = 64
"""Multiple of round-off that two ways to the same figure may differ by. Some tens of operations lie between the data
and a face's integral (six quadrature points, three corners); sums over faces are exact, whatever their number."""

AXIAL: Final = ("moment_of_pressure", "moment_of_viscous", "moment_of_momentum_flux", "moment_of_dynamic_pressure")
UNITS: Final[dict[str, Dimension]] = {
    "m^2": (0, 2, 0), "m^3": (0, 3, 0), "m^4": (0, 4, 0), "N": FORCE, "N m": MOMENT, "kg/m": (1, -1, 0), "kg/s": FLOW,
    "m^3/s": (0, 3, -1), "W": POWER, "Pa kg/s": (2, -1, -3), "kg m/s": (1, 1, -1), "kg m^2/s": (1, 2, -1),
}  # fmt: skip
_PAIRS: Final = [[0, 5, 4], [5, 1, 3], [4, 3, 2]]  # where the pairs kl of a 3 × 3 stand in xx yy zz yz xz xy

# ---- the table --------------------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class Figure:
    """One figure, or one a group; `hard` is how much worse than its terms it is known, for a quotient."""

    value: Any
    kind: str
    dimension: Dimension
    size: float
    hard: float = 1.0


def column_kind(name: str) -> str:
    """Return the kind of one basis integral, its pairs written out."""
    count = BASIS[name][1]
    return "a" if name in AXIAL else {1: "", 3: "v", 6: "vv", 9: "vv", 18: "vvv"}[count]


def written_out(table: IntegralTable, name: str) -> Array:
    """Return one basis integral of all groups as a full tensor."""
    values = table.column(name)
    if name == "square_normal":
        return values.reshape(-1, 6, 3)[:, _PAIRS]
    if name == "mass_flow_square":
        return values[:, _PAIRS]
    return values.reshape(-1, 3, 3) if name == "position_normal" else values


@lru_cache
def powers(name: str) -> dict[str, int]:
    """Return which data an integrand is a product of, told by its name and dimension."""
    _, _, integrand, unit = BASIS[name]
    mass, _, time = UNITS[unit]
    if name.startswith(("pressure_", "moment_of_pressure", "viscous", "moment_of_viscous")):
        stress = {"t": 1} if "viscous" in name else {"p": 1}
        mass, time = mass - 1, time + 2
    else:
        stress = {}
    arms = integrand.count("x_") if "x_" in integrand else int("x" in integrand)
    return {**stress, "rho": int(mass), "V": -int(time), "X": arms}


# ---- how large the terms are ------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class Scales:
    """Bounds of the data of a problem; of every group where they are arrays."""

    area: Array
    sizes: dict[str, float]
    rounding: float
    terms: dict[Dimension, float]

    def column(self, name: str) -> float:
        """Bound of one basis integral over any group."""
        found = float(self.area.max())
        for key, power in powers(name).items():
            found *= self.sizes[key] ** power
        return found


def scales_of(problem: Problem) -> Scales:
    """Return bounds of the terms of a problem."""
    surface, frame, sizes = problem.surface, problem.frame, {}
    used = surface.points[np.unique(surface.connectivity)]
    starts = np.arange(0, surface.connectivity.size + 1, 3) if surface.offsets is None else surface.offsets
    ring = surface.points[surface.connectivity]
    after = np.arange(1, ring.shape[0] + 1)
    after[starts[1:] - 1] = starts[:-1]
    middle = np.add.reduceat(ring, starts[:-1]) / np.diff(starts)[:, None]
    about_middle = ring - np.repeat(middle, np.diff(starts), axis=0)
    doubled = np.linalg.norm(np.cross(about_middle, about_middle[after]), axis=1)  # areas twice
    faces = np.add.reduceat(doubled, starts[:-1])
    sides = np.add.reduceat(np.linalg.norm(ring[after] - ring, axis=1), starts[:-1])
    groups = len(surface.groups)
    area = np.bincount(surface.group_of_face, faces, groups)
    girth = np.bincount(surface.group_of_face, sides, groups)
    reach = float(np.abs(np.concatenate([used, [problem.anchor, problem.origin, problem.datum]])).max())
    about = [problem.anchor, problem.origin, used.min(axis=0), used.max(axis=0)]
    if problem.hardware is not None:
        about.append(np.asarray(problem.hardware.centre))
    if problem.contents is not None:
        about.append(problem.contents.origin)
    rate = 0.0 if frame is None else abs(frame.rate)
    if frame is not None and frame.turns:
        about.append(np.asarray(frame.through))
    arm = float(np.linalg.norm(np.ptp(np.array(about), axis=0)))

    def largest(name: str) -> float:
        given = [np.atleast_2d(values[name]) for values in problem.supplied.values() if name in values]
        if name in problem.fields:
            values = problem.fields[name].values
            given.append(values.reshape(len(values), -1))
        return max((float(np.linalg.norm(one, axis=-1).max()) for one in given), default=0.0)

    drift = 0.0 if frame is None else float(np.linalg.norm(frame.velocity)) + rate * arm
    rho = max(largest("density"), problem.density)
    speed = largest("velocity") + drift
    through = largest("mass flux") / (rho * float(faces.min()) / 4)  # what passes a small face is fast
    pull = float(np.linalg.norm(problem.gravity))
    given = largest("pressure") * (rho if problem.kind == "kinematic" else 1.0) + (problem.ambient or 0.0)
    pressure = given + rho * pull * arm
    sizes = {"X": arm, "V": speed + through, "rho": rho, "p": pressure, "t": largest("traction")}
    loose = [
        float((girth / area).max()) * reach,
        reach / arm,
        rate * reach / max(sizes["V"], 1e-60),
        rho * pull * reach / max(pressure, 1e-60),
    ]
    rounding = EPS * max(1.0, *loose)
    return Scales(area, sizes, rounding, _terms(problem, float(area.sum()), sizes, drift, rate, pull))


def _terms(
    problem: Problem, area: float, sizes: dict[str, float], drift: float, rate: float, pull: float
) -> dict[Dimension, float]:
    """Sums of the sizes of the terms of the laws, by dimension."""
    x, v, rho, p, t = (sizes[key] for key in ("X", "V", "rho", "p", "t"))
    v += drift
    push = (
        pull if problem.frame is None else pull + float(np.linalg.norm(problem.frame.acceleration)) + rate * (v + drift)
    )
    volume = area * x
    mass, flow, held = rho * volume, rho * v * area, 0.0
    if problem.contents is not None:
        mass += float(problem.contents.mass or 0.0) * 2
        held = max(float(np.abs(np.asarray(getattr(problem.contents, n))).max()) for n in _HELD)
    rates = 0.0
    if problem.storage is not None:
        flow += abs(problem.storage.mass)
        rates = max(float(np.abs(np.asarray(getattr(problem.storage, n))).max()) for n in _RATES)
    hardware = 0.0 if problem.hardware is None else problem.hardware.mass
    force = area * (p + t + rho * v**2) + (mass + hardware) * push + flow * (v + drift)
    # what is held and its rates are of the size of one, and come with powers of the rate of turning and of speeds
    force += (rates + held) * (1 + rate + v) ** 2 * (1 + rate + push)
    moment = force * (x + 1)
    heat = (
        max([float(np.abs(problem.fields[name].values).max()) for name in (problem.basis,) if name] or [0.0])
        * problem.capacity
    )
    power = (
        force * v
        + moment * rate
        + flow * heat
        + flow * pull * x
        + abs(problem.heat or 0)
        + abs(problem.shaft_power or 0)
    )
    power += rates * (1 + v + rate) ** 2
    carried = 2 * (1 + max(float(np.abs(problem.fields[n].values).max()) for n in CARRIED))
    return {
        NONE: 1.0, LENGTH: x, SPEED: v, (0, 2, 0): area, (0, 3, 0): volume, MASS: mass, FLOW: flow * carried,
        (0, 3, -1): (flow / problem.density + 1) * carried, FORCE: force, MOMENT: moment, POWER: power,
        STRESS: p + rho * v**2, SPECIFIC: heat + v**2, DENSITY: rho, ACCELERATION: push,
    }  # fmt: skip


_HELD: Final = ("mass_moment", "mass_inertia", "momentum", "moment_of_velocity")
_RATES: Final = ("mass", "momentum", "angular_momentum", "energy", "mass_moment", "inertia")

# ---- figures of the table ----------------------------------------------------------------------


def table_of(problem: Problem) -> IntegralTable:
    """Return the table of a problem about its own origin."""
    return integrate_flow(problem.surface, problem.flow, origin=np.asarray(problem.origin), threads=1)


def table_figures(table: IntegralTable, scales: Scales) -> dict[str, Figure]:
    """Return all columns of a table."""
    return {
        name: Figure(written_out(table, name), column_kind(name), UNITS[BASIS[name][3]], scales.column(name))
        for name in BASIS
    }


# ---- comparing --------------------------------------------------------------------------------


def changed(figures: dict[str, Figure], change: Change) -> dict[str, Figure]:
    """Return figures as they are after a change."""
    return {
        name: replace(
            one,
            value=change(one.value, one.kind, one.dimension),
            size=Change(units=change.units)(one.size, "", one.dimension),
        )
        for name, one in figures.items()
    }


def assert_alike(
    found: dict[str, Figure], expected: dict[str, Figure], rounding: float, multiple: float = ROUND
) -> None:
    """Hold figures to those expected, to a multiple of the rounding of their terms."""
    wrong = []
    for name, wanted in expected.items():
        one = found[name]
        if one.value is None or wanted.value is None:
            assert one.value is None, name
            assert wanted.value is None, name
            continue
        limit = multiple * rounding * max(one.size, wanted.size) * max(one.hard, wanted.hard)
        try:
            assert_allclose(one.value, wanted.value, rtol=0, atol=limit, err_msg=name)
        except AssertionError as error:
            wrong.append(f"{error}\nlimit {limit:.3g}")
    assert not wrong, "\n".join(wrong)
