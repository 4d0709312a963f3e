"""Slips planted in the shipped manifold: in its export, or in the lines of its case."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np

import fluxmesh
from fluxmesh.assess.causes import CausesFound
from fluxmesh.case.read import read_case
from fluxmesh.job.causes import causes_of_case
from tests.planting import DENSITY, MANIFOLD, Planted, manifold


def _head_in(case: Planted) -> None:
    case.mesh.point_data["pressure"] = case.pressure + case.head
    case.set("flow", "pressure", "head", value="included")


def _port_points(case: Planted, tag: int) -> np.ndarray:
    return np.unique(case.mesh.faces.reshape(-1, 4)[:, 1:][case.region == tag])


def _port_speed(tag: int, factor: float) -> Callable[[Planted], None]:
    def plant(case: Planted) -> None:
        velocity = case.velocity
        velocity[_port_points(case, tag)] *= factor
        case.mesh.point_data["velocity"] = velocity

    return plant


def _pressure(change: Callable[[Planted], np.ndarray]) -> Callable[[Planted], None]:
    def plant(case: Planted) -> None:
        case.mesh.point_data["pressure"] = change(case)

    return plant


def _kinematic(case: Planted) -> None:
    case.mesh.point_data["pressure"] = case.pressure / DENSITY
    case.mesh.cell_data["wall_traction"] = case.traction / DENSITY


def _read_kinematic(case: Planted) -> None:
    case.set("flow", "pressure", "kind", value="kinematic")
    case.drop("flow", "pressure", "unit")


def _absolute(case: Planted) -> None:
    gauge = case.of_faces(case.pressure + case.head)[case.region == 2].mean()
    case.mesh.point_data["pressure"] = case.pressure + 101325.0
    case.set("groups", "spindle", "pressure", value=float(gauge))


def _empty(case: Planted) -> None:
    rows = _port_points(case, 2)
    for name in ("velocity", "pressure"):
        values = np.array(case.mesh.point_data[name], dtype=np.float64)
        values[rows] = 0.0
        case.mesh.point_data[name] = values


def _whole_flow(case: Planted) -> None:
    done = fluxmesh.run_case(read_case(MANIFOLD)).data()["groups"]["feed"]
    case.set("groups", "feed", "flow_rate", value=-2 * done["volume_flow"])
    case.set("groups", "feed", "profile", value="laminar")


def _lines(*changes: tuple[str, object], head: bool = False) -> Callable[[Planted], None]:
    def plant(case: Planted) -> None:
        if head:
            _head_in(case)
        for key, value in changes:
            case.set(*key.split("."), value=value)

    return plant


IN_MANIFOLD: dict[str, tuple[str, Callable[[Planted], None]]] = {
    "pressure over density": ("kinematic-pressure", _pressure(lambda case: case.pressure / DENSITY)),
    "pressure and traction over density": ("kinematic-pressure", _kinematic),
    "pressure read as kinematic": ("kinematic-pressure", _read_kinematic),
    "absolute beside gauge": ("absolute-as-gauge", _absolute),
    "total pressure": (
        "total-as-static",
        _pressure(lambda case: case.pressure + DENSITY / 2 * (case.velocity**2).sum(axis=1)),
    ),
    "head removed": ("head-removed", _lines(("flow.pressure.head", "included"))),
    "head twice": ("head-counted-twice", _pressure(lambda case: case.pressure + case.head)),
    "traction sign": ("traction-sign", _lines(("flow.traction.acts_on", "fluid"))),
    "no traction": ("traction-missing", lambda case: case.drop("flow", "traction")),
    "metres": ("length-unit", _lines(("surface.length_unit", "m"), head=True)),
    "centimetres": ("length-unit", _lines(("surface.length_unit", "cm"), head=True)),
    "density over a thousand": ("density", _lines(("fluid.density", 0.88))),
    "density times ten": ("density", _lines(("fluid.density", 8800.0))),
    "feet a second": ("velocity-unit", _lines(("flow.velocity.unit", "ft/s"))),
    "millimetres a second": ("velocity-unit", _lines(("flow.velocity.unit", "mm/s"))),
    "feed turned": ("flipped-group", _port_speed(1, -1.0)),
    "spindle turned": ("flipped-group", _port_speed(2, -1.0)),
    "gallery twice": ("duplicate-group", _port_speed(3, 2.0)),
    "gallery by half": ("missing-group", _port_speed(3, 0.5)),
    "spindle empty": ("missing-group", _empty),
    "flow of the whole": ("half-model", _whole_flow),
    "spindle 8 % short": ("not-converged", _port_speed(2, 0.92)),
    "gravity up": ("gravity-direction", _lines(("fluid.gravity", [0.0, 0.0, 9.80665]), head=True)),
    "gravity along y": ("gravity-direction", _lines(("fluid.gravity", [0.0, -9.80665, 0.0]), head=True)),
    "gravity in cm/s²": ("gravity-direction", _lines(("fluid.gravity", [0.0, 0.0, -980.665]), head=True)),
}
"""Slips by what they are: the id that must be found, and how they are planted."""


def causes_in_manifold(slip: str, folder: Path) -> CausesFound:
    """Plant a slip in the manifold, written to a folder, and search for its cause."""
    case = manifold(folder)
    IN_MANIFOLD[slip][1](case)
    return causes_of_case(read_case(case.write()))
