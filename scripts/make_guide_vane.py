"""Make the shipped compressible case: hot gas through a guide passage between two vanes.

Gas flows inward between two vanes of a ring. The plane flow is exact: an
isentropic, irrotational spiral of an ideal gas (a compressible sink and vortex; Shapiro, The
Dynamics and Thermodynamics of Compressible Fluid Flow, 1953; from memory),

    density × radial speed × radius = constant,   tangential speed × radius = constant,
    heat capacity × temperature + speed²/2 = constant,   pressure ~ density ** heat ratio,

subsonic throughout. The vanes follow streamlines; floor and cover are flat; entry and exit are planes
between the ends of the vanes, which the gas crosses aslant. The ring's axis is the z axis. Faces are
quadrilaterals; velocity, absolute pressure in kPa, temperature in K and a traction of zero (the gas is
without friction) sit on points, coordinates are in mm.

The load on the passage is known twice, to the last digits: by quadrature over the ports, and by
quadrature of the pressure along the vanes, which does without ports.

Usage: python scripts/make_guide_vane.py
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pyvista
from numpy.polynomial.legendre import leggauss
from scipy.optimize import brentq

FOLDER = Path(__file__).resolve().parent.parent / "meshes" / "guide_vane"
HEAT_RATIO, GAS_CONSTANT = 1.33, 287.5
TOTAL_TEMPERATURE, TOTAL_PRESSURE, AMBIENT = 900.0, 350e3, 101325.0
OUTER, INNER, HEIGHT = 0.120, 0.080, 0.030  # radii where the vanes start and end, their span, m
VANES = (0.72, 0.30)  # angles at which the two vanes start, rad
EXIT_SPEED = (-185.0, 375.0)  # radial and tangential where the vanes end, m/s
ANCHOR = (0.095, 0.085, -0.012)
ALONG, ACROSS, UP = 44, 20, 10

CAPACITY = HEAT_RATIO * GAS_CONSTANT / (HEAT_RATIO - 1)
TOTAL_DENSITY = TOTAL_PRESSURE / (GAS_CONSTANT * TOTAL_TEMPERATURE)
GROUPS = {"entry": 1, "exit": 2, "vane_ahead": 3, "vane_behind": 4, "floor": 5, "cover": 6}
NODES, WEIGHTS = (np.array(x) for x in leggauss(48))  # on smooth integrands exact to round-off


@dataclass(frozen=True)
class State:
    """The gas at radii of any shape."""

    radial: np.ndarray
    tangential: np.ndarray
    temperature: np.ndarray
    pressure: np.ndarray
    density: np.ndarray

    @property
    def mach(self) -> np.ndarray:
        """Mach number."""
        return np.hypot(self.radial, self.tangential) / np.sqrt(HEAT_RATIO * GAS_CONSTANT * self.temperature)


def thermal(radial: np.ndarray, tangential: np.ndarray) -> State:
    """State of the gas at a velocity: total temperature and pressure are the same everywhere."""
    temperature = TOTAL_TEMPERATURE - (radial**2 + tangential**2) / (2 * CAPACITY)
    density = TOTAL_DENSITY * (temperature / TOTAL_TEMPERATURE) ** (1 / (HEAT_RATIO - 1))
    return State(radial, tangential, temperature, density * GAS_CONSTANT * temperature, density)


def gas(radius: np.ndarray) -> State:
    """State of the gas at radii, m."""
    end = thermal(np.array(EXIT_SPEED[0]), np.array(EXIT_SPEED[1]))
    flow = end.density * EXIT_SPEED[0] * INNER
    tangential = EXIT_SPEED[1] * INNER / radius
    radial = flow / (TOTAL_DENSITY * radius)
    for _ in range(40):  # Newton, from the slow side: d(rho u)/du = rho (1 - u²/a²)
        here = thermal(radial, tangential)
        square = HEAT_RATIO * GAS_CONSTANT * here.temperature
        step = (here.density * radial - flow / radius) / (here.density * (1 - radial**2 / square))
        radial = radial - step
    assert np.all(np.abs(step) < 1e-13 * np.abs(radial))
    return thermal(radial, tangential)


def turned(radius: np.ndarray) -> np.ndarray:
    """Angle through which a streamline has turned since `OUTER`, rad: the integral of u_t / (r u_r) over r."""
    half = (np.asarray(radius) - OUTER)[..., None] / 2
    r = OUTER + half * (1 + NODES)
    here = gas(r)
    return (here.tangential / (r * here.radial) * WEIGHTS * half).sum(axis=-1)


def place(radius: np.ndarray, angle: np.ndarray) -> np.ndarray:
    """Plane position (..., 2)."""
    return np.stack(np.broadcast_arrays(radius * np.cos(angle), radius * np.sin(angle)), axis=-1)


def velocity(at: np.ndarray) -> np.ndarray:
    """Velocity (..., 2) at plane positions."""
    radius = np.hypot(at[..., 0], at[..., 1])[..., None]
    here = gas(radius)
    return (here.radial * at + here.tangential * np.stack([-at[..., 1], at[..., 0]], axis=-1)) / radius


def port(name: str) -> tuple[np.ndarray, np.ndarray]:
    """The ends of a port: on the vane ahead and on the one behind."""
    radius = OUTER if name == "entry" else INNER
    ends = [place(np.array(radius), start + turned(np.array(radius))) for start in VANES]
    return ends[0], ends[1]


def lattice(along: int, across: int, up: int) -> np.ndarray:
    """Points (along + 1, across + 1, up + 1, 3), first direction along streamlines from plane to plane."""
    first, last = port("entry")
    shares = np.linspace(0, 1, across + 1)[:, None]
    starts = first + shares * (last - first)
    entry = np.hypot(*starts.T)
    start = np.arctan2(starts[:, 1], starts[:, 0]) - turned(entry)
    one, two = port("exit")
    normal = np.array([one[1] - two[1], two[0] - one[0]])

    def beyond(radius: float, angle: float) -> float:
        return float(normal @ (place(np.array(radius), angle + turned(np.array(radius))) - one))

    exit_ = np.full(across + 1, INNER)
    for k in range(1, across):
        exit_[k] = brentq(beyond, 0.9 * INNER, 1.05 * INNER, args=(start[k],), xtol=1e-16, rtol=1e-14)
    radius = entry + np.linspace(0, 1, along + 1)[:, None] * (exit_ - entry)
    plane = place(radius, start + turned(radius))[:, :, None, :]
    height = np.linspace(0, HEIGHT, up + 1)
    x, y, z = np.broadcast_arrays(plane[..., 0], plane[..., 1], height)
    return np.stack([x, y, z], axis=-1)


def make(along: int = ALONG, across: int = ACROSS, up: int = UP) -> pyvista.PolyData:
    """The surface with the flow on its points."""
    # the parts are sides of one lattice, so that their rims are the same to the last bit
    nodes = lattice(along, across, up)
    sides = {
        "entry": (np.s_[0], False),
        "exit": (np.s_[-1], True),
        "vane_ahead": (np.s_[:, 0], True),
        "vane_behind": (np.s_[:, -1], False),
        "floor": (np.s_[:, :, 0], False),
        "cover": (np.s_[:, :, -1], True),
    }
    points, faces, region = [], [], []
    count = 0
    for name, (side, round_about) in sides.items():
        part = nodes[side]
        n, m = part.shape[:2]
        i, j = (grid.ravel() for grid in np.meshgrid(np.arange(n - 1), np.arange(m - 1), indexing="ij"))
        quads = np.stack([i * m + j, (i + 1) * m + j, (i + 1) * m + j + 1, i * m + j + 1], axis=1)
        faces.append((quads if round_about else quads[:, ::-1]) + count)
        region.append(np.full(len(quads), GROUPS[name], dtype=np.int32))
        # each part has points of its own, as an export by part has
        points.append(part.reshape(-1, 3))
        count += n * m
    xyz, quads = np.concatenate(points), np.concatenate(faces)
    here = gas(np.hypot(xyz[:, 0], xyz[:, 1]))
    mesh = pyvista.PolyData(1e3 * xyz, np.column_stack([np.full(len(quads), 4), quads]).ravel())
    mesh.point_data["velocity"] = np.column_stack([velocity(xyz[:, :2]), np.zeros(len(xyz))])
    mesh.point_data["pressure_kPa"] = here.pressure / 1e3
    mesh.point_data["temperature"] = here.temperature
    mesh.point_data["wall_traction"] = np.zeros_like(xyz)
    mesh.cell_data["region"] = np.concatenate(region)
    return mesh


def over_ports() -> dict[str, np.ndarray]:
    """Force and moment about the anchor, gas on passage, by quadrature over the ports; and the mass flow."""
    force, moment, mass = np.zeros(2), 0.0, 0.0
    for name, sign in (("entry", 1.0), ("exit", -1.0)):
        one, two = port(name)
        at = (one + two) / 2 + NODES[:, None] * (two - one) / 2
        # the normal out of the gas, times the area that a node stands for
        area = sign * HEIGHT / 2 * WEIGHTS[:, None] * np.array([one[1] - two[1], two[0] - one[0]])
        here, v = gas(np.hypot(*at.T)), velocity(at)
        out = here.density * (v * area).sum(axis=1)
        load = -(here.pressure - AMBIENT)[:, None] * area - out[:, None] * v
        force += load.sum(axis=0)
        moment += float((at[:, 0] * load[:, 1] - at[:, 1] * load[:, 0]).sum())
        mass += max(float(out.sum()), 0.0)
    return {**_about_anchor(force, moment), "mass_flow": np.array(mass)}


def over_vanes() -> dict[str, np.ndarray]:
    """The same load by quadrature of the pressure along the vanes; floor and cover cancel."""
    force, moment = np.zeros(2), 0.0
    half = (INNER - OUTER) / 2
    radius = OUTER + half * (1 + NODES)
    here = gas(radius)
    for start, sign in zip(VANES, (1.0, -1.0)):
        angle = start + turned(radius)
        at = place(radius, angle)
        bend = (here.tangential / here.radial)[:, None]  # r dtheta/dr
        along = place(np.array(1.0), angle) + bend * place(np.array(1.0), angle + np.pi / 2)
        # inward along the vane ahead the gas is on the left: the way to the right of it leads out
        normal = sign * np.stack([along[:, 1], -along[:, 0]], axis=-1) * half * WEIGHTS[:, None] * HEIGHT
        load = (here.pressure - AMBIENT)[:, None] * normal
        force += load.sum(axis=0)
        moment += float((at[:, 0] * load[:, 1] - at[:, 1] * load[:, 0]).sum())
    return _about_anchor(force, moment)


def _about_anchor(force: np.ndarray, about_axis: float) -> dict[str, np.ndarray]:
    """A load that acts at half the height, with its moment about the axis, carried to the anchor."""
    load = np.array([force[0], force[1], 0.0])
    at_origin = np.array([0.0, 0.0, about_axis]) + np.cross([0, 0, HEIGHT / 2], load) * [1, 1, 0]
    return {"force": load, "moment": at_origin - np.cross(ANCHOR, load)}


def main() -> None:
    FOLDER.mkdir(parents=True, exist_ok=True)
    path = FOLDER / "guide_vane.vtp"
    make().save(path, compression="zlib")
    ports, vanes = over_ports(), over_vanes()
    apart = max(np.linalg.norm(ports[key] - vanes[key]) / np.linalg.norm(ports[key]) for key in vanes)
    at_ends = {name: gas(np.array(radius)) for name, radius in (("entry", OUTER), ("exit", INNER))}
    reference = {
        "load_of_gas_on_passage": {"force": ports["force"].tolist(), "moment": ports["moment"].tolist()},
        "moment_about": ANCHOR,
        "quadrature_along_the_vanes_differs_by": float(f"{apart:.1e}"),
        "mass_flow": float(ports["mass_flow"]),
        "at_the_ends_of_the_vanes": {
            name: {
                "pressure": float(state.pressure),
                "temperature": float(state.temperature),
                "density": float(state.density),
                "mach_number": float(state.mach),
            }
            for name, state in at_ends.items()
        },
        "total_pressure": TOTAL_PRESSURE,
        "total_temperature": TOTAL_TEMPERATURE,
        "heat_capacity": CAPACITY,
    }
    text = json.dumps(reference, indent=2)
    (FOLDER / "reference.json").write_text(text + "\n", encoding="utf-8")
    print(f"{path.name}: {path.stat().st_size / 1e3:.0f} kB\n{text}")


if __name__ == "__main__":
    main()
