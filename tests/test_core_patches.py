"""Quadratic patches on a ball and on a cube of few faces, so few that scripts/mutants can interpret the kernels."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fluxmesh.field.flow import integrate_flow, lay_flow, near_origin, still_flow
from fluxmesh.field.patches import sharpened_table
from fluxmesh.surface.build import control_surface
from fluxmesh.surface.surface import ControlSurface


def ball() -> ControlSurface:
    """An octahedron whose edges are halved twice, on the unit sphere."""
    points = list(np.vstack([np.eye(3), -np.eye(3)]))
    faces = [(a, b, c) for a in (0, 3) for b in (1, 4) for c in (2, 5)]
    faces = [(a, b, c) if np.linalg.det([points[a], points[b], points[c]]) > 0 else (a, c, b) for a, b, c in faces]
    place: dict[tuple[int, int], int] = {}

    def middle(a: int, b: int) -> int:
        key = (min(a, b), max(a, b))
        if key not in place:
            place[key] = len(points)
            points.append((points[a] + points[b]) / np.linalg.norm(points[a] + points[b]))
        return place[key]

    for _ in range(2):
        halved = []
        for a, b, c in faces:
            ab, bc, ca = middle(a, b), middle(b, c), middle(c, a)
            halved += [(a, ab, ca), (ab, b, bc), (ca, bc, c), (ab, bc, ca)]
        faces = halved
    return control_surface(np.array(points), faces, {"shell": ("wall", range(len(faces)))})


def volume(values: np.ndarray) -> float:
    return float(np.trace(values.reshape(3, 3))) / 3


@pytest.fixture(scope="module")
def sphere() -> ControlSurface:
    return ball()


def test_bent_faces_hold_more_of_the_ball_and_flat_ones_stay(sphere: ControlSurface) -> None:
    flow, origin = still_flow(sphere), near_origin(sphere)
    plain = volume(integrate_flow(sphere, flow).total("position_normal"))
    bent, flat = (
        volume(sharpened_table(sphere, flow, facets_are_geometry=facets, origin=origin).total("position_normal"))
        for facets in (False, True)
    )
    exact = 4 / 3 * np.pi
    assert_allclose(flat, plain, rtol=1e-14)
    # measured: 6 % of what flat faces lack is left
    assert abs(exact - bent) < 0.07 * (exact - plain)


def test_a_linear_field_on_bent_faces(sphere: ControlSurface) -> None:
    # a pressure of x on a closed surface pushes with the volume, whatever its shape; the field is not bent by it
    origin = near_origin(sphere)
    flow = lay_flow(sphere, density=1.0, pressure=sphere.points[:, 0], at="nodes")
    table = sharpened_table(sphere, flow, facets_are_geometry=False, origin=origin)
    held = volume(table.total("position_normal"))
    assert_allclose(table.total("pressure_force"), [-held, 0.0, 0.0], rtol=0.02, atol=0.02)


def test_a_given_mass_flux_is_kept_by_bent_faces(sphere: ControlSurface) -> None:
    given = np.random.default_rng(0).normal(size=sphere.face_count)
    flow = lay_flow(sphere, density=2.0, mass_flux=given)
    table = sharpened_table(sphere, flow, facets_are_geometry=False, origin=near_origin(sphere))
    assert_allclose(table.total("mass_flow"), given.sum(), rtol=1e-12)


def test_a_quadratic_field_on_plane_faces_is_exact() -> None:
    # the unit cube, each side cut into 3 x 3 squares with their diagonals
    points: list[tuple[int, int, int]] = []
    faces: list[tuple[int, int, int]] = []
    groups: dict[str, tuple[str, list[int]]] = {}

    def point(axis: int, end: int, i: int, j: int) -> int:
        place = [0, 0, 0]
        place[axis], place[(axis + 1) % 3], place[(axis + 2) % 3] = 3 * end, i, j
        if tuple(place) not in points:
            points.append((place[0], place[1], place[2]))
        return points.index((place[0], place[1], place[2]))

    for axis in range(3):
        for end in (0, 1):
            start = len(faces)
            for i in range(3):
                for j in range(3):
                    a, b, c, d = (point(axis, end, i + k, j + m) for k, m in ((0, 0), (1, 0), (1, 1), (0, 1)))
                    faces += [(a, b, c), (a, c, d)] if end else [(a, c, b), (a, d, c)]
            groups[f"side {axis} {end}"] = ("wall", list(range(start, len(faces))))
    cube = control_surface(np.array(points) / 3.0, faces, groups)
    x = cube.points
    flow = lay_flow(cube, density=1.0, pressure=x[:, 0] ** 2 - 2 * x[:, 1] * x[:, 2], at="nodes")
    table = sharpened_table(cube, flow, facets_are_geometry=True, origin=near_origin(cube))
    # over the sides x = 0 and 1, y, z: means of x² - 2 y z over a unit square
    assert_allclose(table.column("pressure_area"), [-0.5, 0.5, 1 / 3, -2 / 3, 1 / 3, -2 / 3], atol=1e-6)


def test_a_dented_quadrilateral_stays_as_it_is() -> None:
    # its map folds over: bent, it would count what lies in the dent twice
    base = np.array([[0.0, 0, 0], [2, 0, 0], [0.5, 0.5, 0], [0, 2, 0]])
    points = np.vstack([base, base + np.array([0, 0, 1])])
    sides = [(k, (k + 1) % 4, (k + 1) % 4 + 4, k + 4) for k in range(4)]
    faces = [(3, 2, 1, 0), (4, 5, 6, 7), *sides]
    groups = {"ends": ("wall", [0, 1]), "sides": ("wall", [2, 3, 4, 5])}
    prism = control_surface(points, faces, groups)
    flow = lay_flow(prism, density=1.0, pressure=1.0 + points[:, 0], at="nodes")
    table = sharpened_table(prism, flow, facets_are_geometry=True, origin=near_origin(prism))
    plain = integrate_flow(prism, flow)
    assert_allclose(table.column("area"), [2.0, 4.0 + 10**0.5], rtol=1e-13)
    assert_allclose(table.column("area")[0], plain.column("area")[0], rtol=1e-14)
    assert_allclose(table.column("pressure_area")[0], plain.column("pressure_area")[0], rtol=1e-13)
