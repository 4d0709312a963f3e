"""Shells: volumes, nesting, and normals out of the fluid."""

from __future__ import annotations

import numpy as np
import pytest
import trimesh
from numpy.testing import assert_allclose

from fluxmesh.surface import shells
from tests import small_meshes as meshes
from tests.mending import assert_closed, mended, volume_of


@pytest.mark.parametrize("inward", [True, False])
def test_cavities_point_out_of_the_fluid(inward):
    points, faces = meshes.together(meshes.cube(), meshes.sphere(2, 0.2, (0.5, 0.5, 0.5)))
    if inward:
        faces[12:] = faces[12:, ::-1]
    result = mended(points, faces, [0] * 12 + [1] * 320)
    assert_closed(result, 1.0 - volume_of(*meshes.sphere(2, 0.2)))
    assert result.shells == 2
    expected = () if inward else ("shell 2 (a cavity: 320 faces, group 'core') was turned",)
    assert result.notes == expected


@pytest.mark.parametrize("seed", range(4))
def test_nested_and_separate_shells(seed):
    rng = np.random.default_rng(seed)
    parts = [meshes.sphere(1, r) for r in (4, 3, 2, 1)]
    parts += [meshes.cube(0.4, (-0.2, -0.2, 2.3)), meshes.cube(1, (9, 0, 0)), meshes.sphere(1, 0.1, (9.5, 0.5, 0.5))]
    signs = [1, -1, 1, -1, 1, 1, -1]
    # the small cube stands between the spheres of 3 and 2: within a body, so it holds fluid
    expected = sum(sign * volume_of(*part) for sign, part in zip(signs, parts))
    order = rng.permutation(len(parts))
    turned = [(points, faces[:, ::-1] if rng.random() < 0.5 else faces) for points, faces in (parts[i] for i in order)]
    result = mended(*meshes.together(*turned))
    assert result.shells == 7
    assert_closed(result, expected)


def test_a_thousand_bodies_in_a_large_shell():
    grid = np.stack(np.meshgrid(*[np.linspace(-0.5, 0.5, 10)] * 3), -1).reshape(-1, 3)
    body = meshes.sphere(1, 0.02)
    outer = meshes.sphere(6, 1.0)
    assert len(outer[1]) > shells._LARGE_SHELL
    parts = [outer, *((body[0] + place, body[1]) for place in grid)]
    result = mended(*meshes.together(*parts))
    assert result.shells == 1001
    assert_closed(result, volume_of(*outer) - 1000 * volume_of(*body))
    assert len(result.notes) == 6
    assert result.notes[0] == "shell 2 (a cavity: 80 faces, group 'shell') was turned"
    assert result.notes[5] == "995 more shells were turned"


def test_a_body_in_the_hole_of_a_ring_is_not_inside_it():
    ring = trimesh.creation.torus(1.0, 0.3)
    points, faces = np.array(ring.vertices), np.array(ring.faces)
    ball, dot = meshes.sphere(1, 0.2), meshes.sphere(1, 0.05, (1, 0, 0))
    result = mended(*meshes.together((points, faces), ball, dot))
    assert result.notes == ("shell 3 (a cavity: 80 faces, group 'shell') was turned",)
    assert_closed(result, volume_of(points, faces) + volume_of(*ball) - volume_of(*dot))


def test_volume_is_taken_about_a_near_point():
    points, faces = meshes.cube(0.1, (3e6, -5e6, 7e6))
    facets = shells.Facets(points, faces.ravel(), np.empty(0, np.int64), np.empty(0, np.int8))
    measures = shells.measure_shells(facets, np.zeros(12, np.int32), 1)
    # differences of coordinates are exact; about the far origin nine digits of the volume would be lost
    low, high = points.min(axis=0), points.max(axis=0)
    x, y, z = high - low
    assert_allclose(measures.volume, [x * y * z], rtol=1e-14)
    assert_allclose(measures.area, [2 * (x * y + y * z + z * x)], rtol=1e-14)
    assert measures.low.tolist() == [low.tolist()]
    assert measures.high.tolist() == [high.tolist()]


def test_lumped_winding_number_agrees_with_the_exact_one(monkeypatch):
    points, faces = meshes.sphere(4, 1.0)
    points = points * [1, 2, 0.5]
    facets = shells.Facets(points, faces.ravel(), np.empty(0, np.int64), np.empty(0, np.int8))
    rng = np.random.default_rng(2)
    places = rng.uniform(-1.2, 1.2, (200, 3)) * [1, 2, 0.5]
    inside = ((places / [1, 2, 0.5]) ** 2).sum(axis=1) < 1
    exact = shells._Winding(facets, np.arange(len(faces)))
    values = np.array([exact.number(place) for place in places])
    assert exact.cells is None
    clear = np.abs(((places / [1, 2, 0.5]) ** 2).sum(axis=1) - 1) > 0.05
    # a sum of 5120 angles
    assert_allclose(values[clear], inside[clear], atol=1e-11)
    monkeypatch.setattr(shells, "_LARGE_SHELL", 1)
    monkeypatch.setattr(shells, "_CLEAR", 1.0)  # never asks the exact one
    lumped = shells._Winding(facets, np.arange(len(faces)))
    values = np.array([lumped.number(place) for place in places])
    assert lumped.cells is not None
    # dipoles further off than three radii: well below the half that tells inside from outside
    assert_allclose(values[clear], inside[clear], atol=0.03)
    assert np.abs(values - inside)[clear].max() > 1e-9  # far cells were taken as dipoles
