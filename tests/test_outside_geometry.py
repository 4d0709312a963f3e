"""Bodies whose volume, centroid and inertia stand in tables, and quadrature rules that stand in print."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from itertools import pairwise
from math import factorial
from typing import Any

import numpy as np
import pytest

from fluxmesh.balance.weight import enclosed_volume
from fluxmesh.field.contents import contents_of
from fluxmesh.field.flow import integrate_flow, still_flow
from fluxmesh.integral.cells import reference_rule
from fluxmesh.integral.rules import TRIANGLE_DEGREE4, collapsed_triangle, gauss_square
from fluxmesh.surface.readers.volume_grid import volume_mesh
from tests.flows import hill_vortex
from tests.measures import observed_order
from tests.solids import Solid, mapped, one_group, sphere
from tests.verification import Verify

Array = np.ndarray
SIZES = (4.0, 2.0, 1.0)
TABLES = "CRC Standard Mathematical Tables"


# ---- cylinders that are cut -----------------------------------------------------------------


def hoof(around: int, radius: float, height: float) -> Solid:
    """Half a cylinder about z under the plane that rises from its diameter: groups ``base``, ``top`` and ``side``."""
    angle = np.linspace(-np.pi / 2, np.pi / 2, around + 1)
    x, y = radius * np.cos(angle), radius * np.sin(angle)
    x[[0, -1]] = 0.0
    low, high = np.column_stack([x, y, 0 * x]), np.column_stack([x, y, height * x / radius])[1:-1]
    count = around + 1
    base = np.arange(count)[::-1]
    top = np.concatenate([[0], np.arange(count, 2 * count - 2), [around]])
    side = [[0, 1, count], [around - 1, around, 2 * count - 3]]
    side += [[k, k + 1, count + k, count + k - 1] for k in range(1, around - 1)]
    solid = one_group(np.concatenate([low, high]), [base, top, *side])
    return replace(solid, groups={"base": np.array([0]), "top": np.array([1]), "side": np.arange(2, len(solid.faces))})


def test_cylindrical_hoof(verify: Verify) -> None:
    radius, height = 0.5, 1.2
    exact = np.array([0.2, 1.2, 0.29452431127, 0.35342917353])
    found = []
    for around in (24, 48, 96):
        surface = hoof(around, radius, height).surface()
        table = integrate_flow(surface, still_flow(surface))
        held = enclosed_volume(table)
        found.append([held.volume, table.column("area")[2], held.centroid[0], held.centroid[2]])
        assert held.centroid[1] == pytest.approx(0, abs=1e-13)
    errors = np.array(found) - exact
    for one in errors.T:
        assert observed_order(SIZES, one) == pytest.approx(2, abs=0.1)
    verify(
        what="Hoof cut from a cylinder of 0.5 m, 1.2 m high: volume, lateral area, centroid x and z",
        source=f"{TABLES}: 2R²h/3, 2Rh, 3 pi R/16, 3 pi h/32",
        memory=True,
        expected=exact,
        got=found[-1],
        tolerance=1e-3,
        why="96 facets around the half",
        order=(observed_order(SIZES, errors[:, 0]), 2, 0.1),
        kind="geometry",
    )


def bicylinder(along: int, radius: float) -> Solid:
    """What two cylinders about x and y have in common: squares across z, whose sides shrink to a point at the ends."""
    polar = np.linspace(0, np.pi, along + 1)[1:-1]
    corner = radius * np.array([[1, -1], [1, 1], [-1, 1], [-1, -1]])
    rings = [np.column_stack([corner * np.sin(a), np.full(4, -radius * np.cos(a))]) for a in polar]
    tips = radius * np.array([[0, 0, -1], [0, 0, 1.0]])
    points = np.concatenate([*rings, tips])
    here, there = np.arange(4), np.roll(np.arange(4), -1)
    last, low, high = 4 * (len(rings) - 1), len(points) - 2, len(points) - 1
    faces = [[low, b, a] for a, b in zip(here, there)] + [[high, last + a, last + b] for a, b in zip(here, there)]
    for k in range(len(rings) - 1):
        faces += [[4 * k + a, 4 * k + b, 4 * k + 4 + b, 4 * k + 4 + a] for a, b in zip(here, there)]
    return one_group(points, faces)


def test_two_pipes_that_cross(verify: Verify) -> None:
    errors = []
    for along in (16, 32, 64):
        surface = bicylinder(along, 0.1).surface()
        errors.append(enclosed_volume(integrate_flow(surface, still_flow(surface))).volume - 16e-3 / 3)
    verify(
        what="What two pipes of 0.1 m that cross have in common: volume",
        source="Steinmetz's bicylinder: 16 r³/3",
        memory=True,
        expected=5.3333333333e-3,
        got=16e-3 / 3 + errors[-1],
        unit="m³",
        tolerance=1e-3,
        relative=True,
        why="64 facets along",
        order=(observed_order(SIZES, errors), 2, 0.1),
        kind="geometry",
    )


# ---- inertia --------------------------------------------------------------------------------


def inertia(grid: Any, centre: Array) -> Array:
    """Tensor of inertia of unit density about a point."""
    moments = contents_of(volume_mesh(grid), density=1.0, origin=centre).mass_inertia
    assert moments is not None
    return np.asarray(np.trace(moments) * np.eye(3) - moments)


def test_inertia_of_tonons_tetrahedron(verify: Verify) -> None:
    import pyvista

    corners = np.array([[8.33220, -11.86875, 0.93355], [0.75523, 5, 16.37072], [52.61236, 5, -5.38580], [2, 5, 3]])
    right = np.linalg.det(corners[1:] - corners[0]) > 0
    grid = pyvista.UnstructuredGrid({10: np.array([[0, 1, 2, 3] if right else [0, 2, 1, 3]])}, corners)
    tensor = inertia(grid, corners.mean(axis=0))
    # the paper puts two of the products into swapped places of its matrix; here they are compared as integrals
    verify(
        what="Tonon's tetrahedron: moments of inertia, and integrals of yz, xz and xy, about its centroid",
        source="Tonon 2005, J. Math. Stat. 1(1):8-11",
        expected=(43520.33257, 194711.28938, 191168.76173, 4417.66150, -46343.16662, 11996.20119),
        got=(*np.diag(tensor), -tensor[1, 2], -tensor[0, 2], -tensor[0, 1]),
        tolerance=2e-8,
        relative=True,
        why="the corners are printed with five decimals",
        kind="geometry",
    )


def ball(level: int) -> Any:
    """An ellipsoid with half axes 3, 2, 1 of tetrahedra about its centre."""
    import pyvista

    skin = mapped(sphere(level), lambda x: x * [3, 2, 1])
    faces = np.array(skin.faces)
    rows = np.column_stack([faces, np.full(len(faces), len(skin.points))])
    return pyvista.UnstructuredGrid({10: rows}, np.vstack([skin.points, np.zeros(3)]))


def solid_torus(level: int) -> Any:
    """A torus of 0.3 and 0.1 m of wedges about its centre line."""
    import pyvista

    around, across = 16 * 2**level, 8 * 2**level
    u, v = (np.arange(n) * 2 * np.pi / n for n in (around, across))
    distance = 0.3 + 0.1 * np.cos(v)
    rings = [
        np.vstack([np.column_stack([distance * np.cos(a), distance * np.sin(a), 0.1 * np.sin(v)]), middle])
        for a in u
        for middle in [[[0.3 * np.cos(a), 0.3 * np.sin(a), 0]]]
    ]
    here = np.arange(across)
    there = np.roll(here, -1)
    size = across + 1
    section = np.column_stack([np.full(across, across), there, here])
    rows = [np.column_stack([section + k * size, section + (k + 1) % around * size]) for k in range(around)]
    return pyvista.UnstructuredGrid({13: np.concatenate(rows)}, np.concatenate(rings))


INERTIA: dict[str, tuple[Callable[[int], Any], tuple[float, float, float], str]] = {
    "Ellipsoid 3, 2, 1": (lambda k: ball(k + 2), (25.132741229, 50.265482457, 65.345127195), "m (b² + c²)/5"),
    "Torus 0.3, 0.1": (
        solid_torus,
        (3.0349033533e-3, 3.0349033533e-3, 5.7737185746e-3),
        "m (R²/2 + 5r²/8), m (R² + 3r²/4)",
    ),
}


@pytest.mark.parametrize("name", INERTIA)
def test_inertia_of_round_bodies(verify: Verify, name: str) -> None:
    grid_of, exact, formula = INERTIA[name]
    found = [np.diag(inertia(grid_of(level), np.zeros(3))) for level in (0, 1, 2)]
    errors = np.array(found) - exact
    orders = [observed_order(SIZES, one) for one in errors.T]
    verify(
        what=f"{name}, filled: moments of inertia, extrapolated from two meshes",
        source=f"{TABLES}: {formula}",
        memory=True,
        expected=exact,
        got=found[-1] + (found[-1] - found[-2]) / 3,
        tolerance=3e-4,
        relative=True,
        why="terms of order four are left",
        order=(min(orders), 2, 0.1),
        kind="geometry",
    )


def nested_wedges(level: int) -> Any:
    """A ball of 2^level shells of wedges round a core of tetrahedra."""
    import pyvista

    skin = sphere(level)
    faces = np.array(skin.faces)
    shells = np.linspace(0, 1, 2**level + 1)[1:]
    points = np.concatenate([np.zeros((1, 3)), *[skin.points * r for r in shells]])
    first = [1 + k * len(skin.points) for k in range(len(shells))]
    wedges = np.concatenate([np.column_stack([faces + b, faces + a]) for a, b in pairwise(first)])
    core = np.column_stack([faces + 1, np.zeros(len(faces), np.int64)])
    return pyvista.UnstructuredGrid({10: core, 13: wedges}, points)


def test_energy_in_hills_vortex(verify: Verify) -> None:
    # of the fluid at rest far away Lamb's 10 pi/7 is the energy inside and outside together; outside it is that of a
    # sphere that moves, half the added mass: pi/3
    found = []
    for level in (2, 3, 4):
        grid = nested_wedges(level)
        grid.point_data["U"] = hill_vortex(1.0).velocity(np.asarray(grid.points)) + np.array([0, 0, 1])
        energy = contents_of(volume_mesh(grid), density=1.0, velocity=("U",)).kinetic_energy
        assert energy is not None
        found.append(energy + np.pi / 3)
    verify(
        what="Hill's vortex: kinetic energy of a volume mesh, and of the flow outside, extrapolated from two meshes",
        source="Lamb, Hydrodynamics, section 165: 10 pi/7 rho a³ U²",
        memory=True,
        expected=4.4879895051,
        got=found[-1] + (found[-1] - found[-2]) / 3,
        unit="J",
        tolerance=1e-3,
        relative=True,
        why="terms of order four are left",
        order=(observed_order(SIZES, np.array(found) - 4.4879895051), 2, 0.1),
        kind="law",
        law="energy",
    )


# ---- quadrature -----------------------------------------------------------------------------


def monomial(a: int, b: int) -> float:
    """Integral of x^a y^b over the triangle (0, 0), (1, 0), (0, 1) (Stroud 1971; from memory)."""
    return factorial(a) * factorial(b) / factorial(a + b + 2)


def test_rule_of_degree_four_on_a_triangle(verify: Verify) -> None:
    places = np.array([point[1:] for point, _ in TRIANGLE_DEGREE4])
    weights = np.array([weight for _, weight in TRIANGLE_DEGREE4]) / 2
    verify(
        what="Rule of six points on a triangle: both weights, and one coordinate of either kind of points",
        source="Dunavant 1985, Int. J. Numer. Methods Eng. 21:1129-1148",
        expected=(0.223381589678011, 0.109951743655322, 0.108103018168070, 0.816847572980459),
        got=(
            *sorted({round(2 * w, 15) for w in weights}, reverse=True),
            1 - 2 * min(p for p in places[2 * weights > 0.2].ravel() if p > 0.2),
            places[2 * weights < 0.2].max(),
        ),
        tolerance=1e-14,
        why="printed with 15 digits",
        kind="geometry",
    )

    def off(degree: int) -> float:
        return max(
            abs(weights @ (places[:, 0] ** a * places[:, 1] ** (degree - a)) / monomial(a, degree - a) - 1)
            for a in range(degree + 1)
        )

    verify(
        what="Rule of six points on a triangle: largest relative error to degree four",
        source="Dunavant 1985, Int. J. Numer. Methods Eng. 21:1129-1148: none",
        expected=0,
        got=max(off(degree) for degree in range(5)),
        tolerance=1e-13,
        why="round-off",
        kind="geometry",
    )
    verify(
        what="Rule of six points on a triangle: largest relative error of degree five, where it must fail",
        source="computed from the rule in print",
        expected=0.0132,
        got=off(5),
        tolerance=5e-5,
        why="three digits",
        kind="geometry",
    )


def test_products_of_rules(verify: Verify) -> None:
    places, weights = collapsed_triangle(4)
    verify(
        what="Collapsed square of 4 × 4 points on a triangle: x² y³",
        source="Stroud 1971, Approximate Calculation of Multiple Integrals: 2! 3! / 7! = 1/420",
        memory=True,
        expected=1 / 420,
        got=weights @ (places[:, 0] ** 2 * places[:, 1] ** 3) / 2,
        tolerance=1e-15,
        why="round-off",
        kind="geometry",
    )
    places, weights = reference_rule(3, 3, 0)
    verify(
        what="Rule of degree three on a tetrahedron: x y z",
        source="Stroud 1971, Approximate Calculation of Multiple Integrals: 1/720",
        memory=True,
        expected=1 / 720,
        got=weights @ np.prod(places, axis=1),
        tolerance=1e-15,
        why="round-off",
        kind="geometry",
    )
    places, weights = gauss_square(3)
    verify(
        what="Gauss rule of 3 × 3 points on the square: x⁴ y⁴",
        source="Gauss 1814: (2/5)²",
        memory=True,
        expected=4 / 25,
        got=weights @ (places[:, 0] ** 4 * places[:, 1] ** 4),
        tolerance=1e-13,
        why="round-off",
        kind="geometry",
    )
