"""Volume, area and centroid against closed forms, to round-off for polyhedra and with their order for curved bodies.

Closed forms that name no source are those of CRC Standard Mathematical Tables
(from memory); their figures were recomputed on two routes.
"""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.special import elliprg

from fluxmesh.balance.weight import Enclosed, enclosed_volume
from fluxmesh.field.flow import integrate_flow, still_flow
from fluxmesh.integral.table import IntegralTable
from tests.measures import moments, observed_order
from tests.solids import (
    Solid,
    angle_block,
    any_polyhedron,
    box,
    dome,
    elbow,
    frustum,
    hull,
    in_triangles,
    mapped,
    moved,
    odd_body,
    one_group,
    pipe,
    prism,
    quadratic,
    rigid_motion,
    sphere,
    torus,
    vertex_split,
)
from tests.verification import Verify


def table_of(solid: Solid, **options: object) -> IntegralTable:
    surface = solid.surface(**options)
    return integrate_flow(surface, still_flow(surface))


def enclosed(solid: Solid) -> Enclosed:
    return enclosed_volume(table_of(solid))


# Tonon 2005, J. Math. Stat. 1(1):8-11: corners and centroid as printed; the volume recomputed from the corners
TONON = [[8.33220, -11.86875, 0.93355], [0.75523, 5, 16.37072], [52.61236, 5, -5.38580], [2, 5, 3]]
OCTAHEDRON = np.vstack([np.eye(3), -np.eye(3)]) / np.sqrt(2)
EDGE = 4 / np.sqrt(10 + 2 * np.sqrt(5))  # of the regular icosahedron in the unit sphere

POLYHEDRA = {
    # name: (body, volume, centroid)
    "box in triangles": (box((1, 2, 3), (3, 5, 4), 3), 6.0, (2, 3.5, 3.5)),
    "box in quads": (box((1, 2, 3), (3, 5, 4), 3, quads=True), 6.0, (2, 3.5, 3.5)),
    "box in six-point triangles": (quadratic(box((1, 2, 3), (3, 5, 4))), 6.0, (2, 3.5, 3.5)),
    "octahedron of edge 1": (hull(OCTAHEDRON), np.sqrt(2) / 3, (0, 0, 0)),
    "icosahedron of edge 1": (sphere(0, 1 / EDGE), 5 * (3 + np.sqrt(5)) / 12, (0, 0, 0)),
    # square frustum of sides 2 and 1, height 3
    "frustum of a pyramid": (frustum(np.sqrt(2), np.sqrt(0.5), 3, 4), 7.0, (0, 0, 33 / 28)),
    "L-shape": (angle_block(2), 0.75, (5 / 12, 5 / 12, 0.5)),
    "L-shape with hexagons": (
        prism(np.array([[0, 0], [2, 0], [2, 1], [1, 1], [1, 2], [0, 2.0]]), -1, 2, 3),
        9.0,
        (5 / 6, 5 / 6, 0.5),
    ),
    "Tonon's tetrahedron": (hull(np.array(TONON)), 1873.2333642165, np.mean(TONON, axis=0)),
}


@pytest.mark.parametrize("name", POLYHEDRA)
def test_polyhedra_are_exact(verify: Verify, name: str) -> None:
    body, volume, centroid = POLYHEDRA[name]
    found = enclosed(body)
    size = np.ptp(body.points, axis=0).max()
    assert_allclose(found.volume, volume, rtol=1e-12)
    assert_allclose(found.centroid, centroid, rtol=0, atol=1e-12 * size)
    verify(
        what=f"{name[0].upper()}{name[1:]}: volume",
        source="recomputed from the corners of Tonon 2005" if "Tonon" in name else "CRC Standard Mathematical Tables",
        memory=True,
        expected=volume,
        got=found.volume,
        unit="m³",
        tolerance=1e-12,
        relative=True,
        why="flat faces: round-off",
        kind="geometry",
    )
    verify(
        what=f"{name[0].upper()}{name[1:]}: centroid",
        source="recomputed from the corners of Tonon 2005" if "Tonon" in name else "CRC Standard Mathematical Tables",
        memory=True,
        expected=centroid,
        got=found.centroid,
        unit="m",
        tolerance=1e-12 * size,
        why="flat faces: round-off",
        kind="geometry",
    )


def test_tonon_centroid_as_printed(verify: Verify) -> None:
    # Tonon 2005; the printed x is 2.75e-5 off the mean of the printed corners, the rest agrees to its five decimals
    found = enclosed(hull(np.array(TONON)))
    assert_allclose(found.centroid[0], 15.92492, rtol=0, atol=2.8e-5)
    assert_allclose(found.centroid[1:], [0.78281, 3.72962], rtol=0, atol=5e-6)
    verify(
        what="Tonon's tetrahedron: centroid as printed",
        source="Tonon 2005, J. Math. Stat. 1(1):8-11",
        expected=(15.92492, 0.78281, 3.72962),
        got=found.centroid,
        tolerance=2.8e-5,
        why="the printed x is that far from the mean of the printed corners",
        kind="geometry",
    )


@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 2**32 - 1))
def test_any_polyhedron_equals_its_signed_tetrahedra(seed: int) -> None:
    body = any_polyhedron(seed)
    expected = moments(body)
    found = enclosed(body)
    assert_allclose(found.volume, expected.volume, rtol=1e-12)
    assert_allclose(found.centroid, expected.centroid, rtol=0, atol=1e-12)


@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 2**32 - 1))
def test_integral_identities_of_a_closed_surface(seed: int) -> None:
    # Gauss: sum n dA = 0; x_i n_j integrates to the volume on the diagonal and to nothing off it
    table = table_of(any_polyhedron(seed))
    area, volume = table.total("area"), enclosed_volume(table).volume
    assert_allclose(table.total("area_vector"), 0, rtol=0, atol=1e-14 * area)
    assert_allclose(table.total("position_normal").reshape(3, 3), volume * np.eye(3), rtol=0, atol=1e-13 * area)


@pytest.mark.parametrize("name", POLYHEDRA)
def test_a_rigid_motion_a_thousand_bodies_away_loses_no_digits(name: str) -> None:
    body, volume, centroid = POLYHEDRA[name]
    size = np.ptp(body.points, axis=0).max()
    rotation, _ = rigid_motion(np.random.default_rng(5))
    shift = 1e3 * size * np.array([1.0, -0.7, 0.4])
    found = enclosed(moved(body, rotation, shift))
    # coordinates of 1e3 sizes are themselves rounded by 1e3 × 1.1e-16 of the size; about a far origin
    # the cubes of coordinates would lose nine digits
    assert_allclose(found.volume, volume, rtol=3e-12)
    assert_allclose(found.centroid, rotation @ np.asarray(centroid) + shift, rtol=0, atol=3e-12 * size)


def test_vertex_split_exports_have_the_same_volume() -> None:
    body = moved(angle_block(4), *rigid_motion(np.random.default_rng(0)))
    one, two = enclosed(body), enclosed(vertex_split(body))
    assert_allclose(two.volume, one.volume, rtol=1e-14)
    assert_allclose(two.centroid, one.centroid, rtol=0, atol=1e-14)


def test_a_cavity_is_taken_off() -> None:
    outer, inner = box((0, 0, 0), (4, 2, 2)), box((0.5, 0.5, 0.5), (1.5, 1.5, 1.5))
    # given with outward normals: it must be found to lie inside, and be turned
    count = len(outer.points)
    body = one_group(
        np.concatenate([outer.points, inner.points]), [*outer.faces, *(face + count for face in inner.faces)]
    )
    found = enclosed(body)
    assert_allclose(found.volume, 15.0, rtol=1e-14)
    assert_allclose(found.centroid, (16 * np.array([2, 1, 1]) - 1.0) / 15, rtol=1e-14)


# ---- curved bodies --------------------------------------------------------------------------

MAJOR, MINOR = 0.3, 0.1
BEND = (MAJOR**2 + MINOR**2 / 4) / MAJOR * np.sin(np.pi / 4) / (np.pi / 4) / np.sqrt(2)
CAP = 0.3  # height of a spherical cap of radius 1


def oblique(around: int) -> Solid:
    """Cylinder of radius 0.5, cut so that its height rises from 1 to 2 along x (mean 1.5)."""
    return mapped(pipe(0.5, 1, around), lambda x: x * np.column_stack([*np.ones((2, len(x))), 1.5 + x[:, 0]]))


def ellipsoid(level: int) -> Solid:
    return mapped(sphere(level), lambda x: x * [3, 2, 1])


CURVED = {
    # name: (body of a level: each halves the sides of the one before, volume, centroid)
    # R = 0.1, r = 0.04, h = 0.25; centroid h (R² + 2Rr + 3r²) / (4 (R² + Rr + r²))
    "cone frustum": (lambda k: frustum(0.1, 0.04, 0.25, 6 * 2**k), 4.0840704497e-3, (0, 0, 0.091346153846)),
    # R = 0.5, mean height h = 1.5, slope a = 1: centroid R² a / (4 h), h/2 + R² a² / (8 h)
    "cylinder cut obliquely": (lambda k: oblique(8 * 2**k), 1.1780972451, (0.041666666667, 0, 0.77083333333)),
    # V = π h² (3R - h) / 3, centroid 3 (2R - h)² / (4 (3R - h))
    "spherical cap": (
        lambda k: dome(1, np.arccos(1 - CAP), 8 * 2**k, 2 * 2**k),
        0.25446900494,
        (0, 0, 0.80277777778),
    ),
    # Pappus and Guldin: V = 2 π² R r²
    "torus": (lambda k: torus(MAJOR, MINOR, 12 * 2**k, 6 * 2**k), 0.059217626407, (0, 0, 0)),
    # sector of a torus: the centroid stands (R² + r²/4)/R sin(θ/2)/(θ/2) from the centre of the bend
    "elbow": (
        lambda k: elbow(MAJOR, (MINOR, MINOR), np.pi / 2, 6 * 2**k, 3 * 2**k),
        0.014804406602,
        (BEND, BEND, 0),
    ),
    "ellipsoid": (ellipsoid, 25.132741229, (0, 0, 0)),
}
LEVELS = (1, 2, 3, 4)
SIZES = [2.0**-k for k in LEVELS]


@pytest.mark.parametrize("name", CURVED)
def test_flat_facets_on_curved_bodies_converge_with_order_two(verify: Verify, name: str) -> None:
    body_of, volume, centroid = CURVED[name]
    found = [enclosed(body_of(level)) for level in LEVELS]
    assert observed_order(SIZES, [each.volume - volume for each in found]) == pytest.approx(2.0, abs=0.05)
    # what the two finest extrapolate to is the exact value, to the next order
    extrapolated = found[-1].volume + (found[-1].volume - found[-2].volume) / 3
    assert_allclose(extrapolated, volume, rtol=2e-5)
    offset = [np.linalg.norm(each.centroid - centroid) for each in found]
    if name in ("elbow", "spherical cap", "cylinder cut obliquely"):
        assert observed_order(SIZES, offset) == pytest.approx(2.0, abs=0.05)
    else:  # exact by symmetry, or since all sections shrink alike (the closed form has 11 digits)
        assert_allclose(offset, 0, rtol=0, atol=1e-11)
    verify(
        what=f"{name[0].upper()}{name[1:]} of flat facets: volume, extrapolated from two meshes",
        source="CRC Standard Mathematical Tables",
        memory=True,
        expected=volume,
        got=extrapolated,
        unit="m³",
        tolerance=2e-5,
        relative=True,
        why="terms of order four are left",
        order=(observed_order(SIZES, [each.volume - volume for each in found]), 2, 0.05),
        kind="geometry",
    )
    moved_off = name in ("elbow", "spherical cap", "cylinder cut obliquely")
    verify(
        what=f"{name[0].upper()}{name[1:]} of flat facets: centroid",
        source="CRC Standard Mathematical Tables",
        memory=True,
        expected=centroid,
        got=found[-1].centroid,
        unit="m",
        tolerance=max(2 * offset[-1], 1e-4) if moved_off else 1e-11,
        why="the finest of four meshes" if moved_off else "symmetry: round-off",
        order=(observed_order(SIZES, offset), 2, 0.05) if moved_off else None,
        kind="geometry",
    )


def test_an_elbow_does_not_balance_on_its_centre_line(verify: Verify) -> None:
    # sections further out are longer: 0.27759753082 from the bend centre, not R sin(θ/2)/(θ/2) = 0.2700949
    found = enclosed(elbow(MAJOR, (MINOR, MINOR), np.pi / 2, 96, 48)).centroid
    assert_allclose(np.linalg.norm(found), 0.27759753082, rtol=3e-4)
    assert_allclose(found[0], found[1], rtol=1e-12)
    verify(
        what="Elbow of 90 degrees, 0.3 and 0.1 m: distance of the centroid from the centre of the bend",
        source="Pappus and Guldin: (R² + r²/4)/R sin(t/2)/(t/2)",
        memory=True,
        expected=0.27759753082,
        got=np.linalg.norm(found),
        unit="m",
        tolerance=8e-5,
        why="96 facets around; the centre line would give 0.2700949",
        kind="geometry",
    )


AREAS = {
    # name: (group, area)
    "cone frustum": ("wall", 0.11307813528),  # π (R + r) sqrt((R - r)² + h²)
    "spherical cap": ("dome", 1.8849555922),  # 2 π R h
    "torus": ("skin", 1.1843525281),  # 4 π² R r
    "elbow": ("wall", 0.29608813203),  # θ R 2 π r
    # 4 π R_G(a²b², a²c², b²c²), Carlson's symmetric integral (DLMF 19.33.1, from memory)
    "ellipsoid": ("skin", 4 * np.pi * elliprg(36, 9, 4)),
}


@pytest.mark.parametrize("name", AREAS)
def test_areas_converge_with_order_two(verify: Verify, name: str) -> None:
    group, area = AREAS[name]
    errors = []
    for level in LEVELS:
        body = CURVED[name][0](level)
        errors.append(table_of(body).column("area")[list(body.groups).index(group)] - area)
    assert abs(errors[-1]) < 4e-3 * area
    assert observed_order(SIZES, errors) == pytest.approx(2.0, abs=0.1)
    verify(
        what=f"{name[0].upper()}{name[1:]} of flat facets: area of the {group}",
        source="Carlson's R_G (DLMF 19.33.1)" if name == "ellipsoid" else "CRC Standard Mathematical Tables",
        memory=True,
        expected=area,
        got=area + errors[-1],
        unit="m²",
        tolerance=4e-3,
        relative=True,
        why="the finest of four meshes",
        order=(observed_order(SIZES, errors), 2, 0.1),
        kind="geometry",
    )


@pytest.mark.parametrize(
    ("level", "deficit"), [(3, 8.6061574e-3), (4, 2.1608284e-3), (5, 5.4078992e-4), (6, 1.3523394e-4)]
)
def test_facet_bias_of_the_icosphere(verify: Verify, level: int, deficit: float) -> None:
    # recomputed with a general-purpose mesh library; the ratio of 4 is order two
    assert_allclose(1 - enclosed(sphere(level)).volume / (4 / 3 * np.pi), deficit, rtol=1e-7)
    verify(
        what=f"Icosphere of {20 * 4**level} facets: what its volume lacks of the sphere's",
        source="recomputed with a general-purpose mesh library",
        expected=deficit,
        got=1 - enclosed(sphere(level)).volume / (4 / 3 * np.pi),
        tolerance=1e-7,
        relative=True,
        why="figures of eight digits",
        kind="geometry",
    )


@pytest.mark.parametrize(
    ("around", "ratio"), [(16, 0.97449535840), (32, 0.99358685114), (64, 0.99839439304), (128, 0.99959845315)]
)
def test_facet_bias_of_a_round_port(verify: Verify, around: int, ratio: float) -> None:
    # area of the regular polygon over that of its circle: sin(2π/n) / (2π/n)
    body = pipe(0.7, 1, around, 1, 2)
    area = table_of(body).column("area")[list(body.groups).index("outlet")]
    assert_allclose(area / (np.pi * 0.49), ratio, rtol=1e-10)
    verify(
        what=f"Round port of {around} sides: area over that of the circle",
        source="sin(2 pi/n) / (2 pi/n)",
        expected=ratio,
        got=area / (np.pi * 0.49),
        tolerance=1e-10,
        why="figures of 11 digits",
        kind="geometry",
    )


QUADRATIC = {
    "sphere in six-point triangles": (lambda n: sphere(n, curved=True), (0, 1, 2, 3), 4 / 3 * np.pi),
    "torus in eight-point quads": (lambda n: torus(0.3, 0.1, 2**n, 2**n, quadratic=8), (3, 4, 5), 0.059217626407),
    "torus in nine-point quads": (lambda n: torus(0.3, 0.1, 2**n, 2**n, quadratic=9), (3, 4, 5), 0.059217626407),
}


@pytest.mark.parametrize("name", QUADRATIC)
def test_quadratic_faces_converge_with_order_four(verify: Verify, name: str) -> None:
    # isoparametric quadratic faces: superconvergent volume of order four (standard interpolation theory)
    body_of, levels, volume = QUADRATIC[name]
    errors = [enclosed(body_of(n)).volume - volume for n in levels]
    assert observed_order([2.0**-n for n in levels], errors) == pytest.approx(4.0, abs=0.2)
    verify(
        what=f"{name[0].upper()}{name[1:]}: volume",
        source="CRC Standard Mathematical Tables",
        memory=True,
        expected=volume,
        got=volume + errors[-1],
        unit="m³",
        tolerance=1e-3,
        relative=True,
        why="the finest mesh",
        order=(observed_order([2.0**-n for n in levels], errors), 4, 0.2),
        kind="geometry",
    )


def test_the_centroid_of_an_odd_body_has_order_two_flat_and_four_curved() -> None:
    # no closed form: the finest quadratic mesh stands for the exact one
    best = enclosed(odd_body(5, curved=True))
    flat = [np.linalg.norm(enclosed(odd_body(n)).centroid - best.centroid) for n in (2, 3, 4)]
    curved = [np.linalg.norm(enclosed(odd_body(n, curved=True)).centroid - best.centroid) for n in (1, 2, 3)]
    assert observed_order([4, 2, 1], flat) == pytest.approx(2.0, abs=0.1)
    assert observed_order([4, 2, 1], curved) == pytest.approx(4.0, abs=0.4)


def test_cutting_planar_faces_into_triangles_changes_nothing() -> None:
    for body in (angle_block(4, quads=True), prism(np.array([[0, 0], [3, 0], [4, 2], [1, 3.0]]), 0, 1)):
        one, two = enclosed(body), enclosed(in_triangles(body))
        assert_allclose(two.volume, one.volume, rtol=1e-14)
        assert_allclose(two.centroid, one.centroid, rtol=0, atol=1e-14)


def test_lengths_scale_as_powers() -> None:
    body = odd_body(2)
    one, two = enclosed(body), enclosed(mapped(body, lambda x: 1e-3 * x))
    assert_allclose(two.volume, 1e-9 * one.volume, rtol=1e-13)
    assert_allclose(two.centroid, 1e-3 * one.centroid, rtol=0, atol=1e-15)
