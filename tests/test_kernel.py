"""The compiled kernel against its plain twin, and both against exact integrals."""

from __future__ import annotations

from math import factorial

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from fluxmesh.integral.kernel import integrate
from fluxmesh.integral.layout import (
    ABSENT,
    AT_FACE,
    AT_NODE,
    AT_SAMPLE,
    PER_GROUP,
    FaceArrays,
    FieldArrays,
    FlowArrays,
    PressureTerms,
    make_runs,
)
from fluxmesh.integral.plain import integrate_plainly
from fluxmesh.integral.rules import TRIANGLE_DEGREE4, collapsed_triangle, gauss_square
from fluxmesh.integral.samples import sample_places
from fluxmesh.integral.shapes import quadratic_quad8, quadratic_quad9, quadratic_triangle
from fluxmesh.integral.table import BASIS, WIDTH, column_slice

CODES = (ABSENT, PER_GROUP, AT_FACE, AT_NODE, AT_SAMPLE)


def random_mesh(rng: np.random.Generator, sizes: list[int], kinds: list[int] | None) -> FaceArrays:
    """Faces of the given sizes, each on points of its own, loosely polygon-shaped."""
    points, connectivity = [], []
    for k, size in enumerate(sizes):
        start = len(points)
        if kinds and kinds[k]:
            corners = 3 if kinds[k] == 1 else 4
            angle = np.linspace(0, 2 * np.pi, corners, endpoint=False)
            ring = np.column_stack([np.cos(angle), np.sin(angle), np.zeros(corners)])
            mids = (ring + np.roll(ring, -1, axis=0)) / 2
            rows = np.concatenate([ring, mids, np.zeros((1, 3))])[:size]
        else:
            angle = np.linspace(0, 2 * np.pi, size, endpoint=False)
            rows = np.column_stack([np.cos(angle), np.sin(angle), np.zeros(size)])
        points += list(rows + 0.1 * rng.standard_normal(rows.shape) + rng.standard_normal(3))
        connectivity += list(range(start, start + size))
    offsets = np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64)
    triangles = kinds is None and set(sizes) == {3}
    return FaceArrays(
        np.array(points),
        np.array(connectivity, dtype=np.int64),
        np.empty(0, np.int64) if triangles else offsets,
        np.empty(0, np.int8) if kinds is None else np.array(kinds, dtype=np.int8),
    )


def random_flow(
    rng: np.random.Generator,
    mesh: FaceArrays,
    owner: np.ndarray,
    groups: int,
    *,
    mass: bool,
    codes: tuple[int, ...] = CODES,
) -> FlowArrays:
    places, _, _, start = sample_places(mesh, np.ones(owner.size, np.bool_))

    def field(components: int, base: float, codes: tuple[int, ...]) -> FieldArrays:
        def values(count: int) -> np.ndarray:
            return base + rng.standard_normal(count if components == 1 else (count, components)) / 3

        where = rng.choice(codes, groups).astype(np.int8)
        counts = (len(mesh.points), owner.size, groups, len(places))
        return FieldArrays(where, *(values(count) for count in counts), 1.25)

    return FlowArrays(
        velocity=field(3, 0.5, codes),
        traction=field(3, 0.0, codes),
        pressure=field(1, 2.0, codes),
        density=field(1, 3.0, codes),
        mass=field(1, 0.0, (ABSENT, AT_FACE) if mass else (ABSENT,)),
        terms=PressureTerms(bool(rng.integers(2)), 0.3, 0.1, -0.2, 0.4),
        sample_start=start,
    )


def assert_same(one: np.ndarray, two: np.ndarray, scale: np.ndarray) -> None:
    # 64 units in the last place of the sum of sizes: some hundred operations a face, few faces
    assert_allclose(one / scale, two / scale, rtol=0, atol=64 * np.finfo(float).eps)


@settings(max_examples=60, deadline=None)
@given(
    seed=st.integers(0, 2**32 - 1),
    sizes=st.lists(st.integers(3, 9), min_size=1, max_size=70),
    family=st.sampled_from(["triangles", "polygons", "curved"]),
    mass=st.booleans(),
)
def test_the_kernel_equals_its_plain_twin(seed: int, sizes: list[int], family: str, mass: bool) -> None:
    rng = np.random.default_rng(seed)
    kinds = None
    if family == "triangles":
        sizes = [3] * len(sizes)
    elif family == "curved":
        kinds = [int(rng.integers(0, 4)) for _ in sizes]
        sizes = [{0: size, 1: 6, 2: 8, 3: 9}[kind] for size, kind in zip(sizes, kinds)]
    mesh = random_mesh(rng, sizes, kinds)
    groups = 3
    owner = rng.integers(0, groups, len(sizes)).astype(np.int32)
    flow = random_flow(rng, mesh, owner, groups, mass=mass)
    arguments = {
        "mesh": mesh,
        "flow": flow,
        "runs": make_runs(owner, mesh.kinds if kinds else None, length=16),
        "origin": rng.standard_normal(3),
        "still_groups": np.zeros(groups, np.bool_),
    }
    scale = 100.0 * (1 + np.bincount(owner, minlength=groups))[:, None]
    assert_same(integrate(**arguments).values, integrate_plainly(**arguments).values, scale)


@settings(max_examples=30, deadline=None)
@given(seed=st.integers(0, 2**32 - 1), family=st.sampled_from(["triangles", "polygons", "curved"]))
def test_sampling_a_linear_field_equals_the_field_on_points(seed: int, family: str) -> None:
    # a field linear in space is the same at quadrature points, whether interpolated or evaluated there;
    # curved faces too, since positions and values have the same shape functions
    rng = np.random.default_rng(seed)
    kinds = [1, 2, 3, 1, 0] if family == "curved" else None
    sizes = {"triangles": [3] * 5, "polygons": [3, 4, 5, 6, 4], "curved": [6, 8, 9, 6, 4]}[family]
    mesh = random_mesh(rng, sizes, kinds)
    owner = np.zeros(5, np.int32)
    slope, level = rng.standard_normal((3, 3)), rng.standard_normal(3)
    places, vectors, face, start = sample_places(mesh, np.ones(5, np.bool_))
    on_points = random_flow(rng, mesh, owner, 1, mass=False, codes=(AT_NODE,))
    # one density: products of two interpolated fields are not the same as those of point values
    on_points = on_points._replace(
        velocity=on_points.velocity._replace(node=mesh.points @ slope + level),
        density=on_points.density._replace(where=np.array([PER_GROUP], np.int8)),
    )
    sampled = on_points._replace(
        velocity=on_points.velocity._replace(
            where=np.array([AT_SAMPLE], np.int8), sample=places @ slope + level, node=np.full((1, 3), np.nan)
        )
    )
    shared = {
        "mesh": mesh,
        "runs": make_runs(owner, mesh.kinds if kinds else None),
        "origin": np.zeros(3),
        "still_groups": np.zeros(1, np.bool_),
    }
    one, two = integrate(flow=on_points, **shared).values, integrate(flow=sampled, **shared).values
    # round-off of sums of some hundred point values of size up to about a hundred
    assert_allclose(two, one, rtol=1e-12, atol=1e-11)
    assert start[-1] == len(places)
    # places and area vectors are those of the kernel: they add up to its integrals, face by face
    whole = integrate(flow=sampled, **shared)
    assert_allclose(vectors.sum(axis=0), whole.column("area_vector")[0], rtol=0, atol=1e-13)
    moments = np.einsum("si,sj->ij", places, vectors).ravel()
    assert_allclose(moments, whole.column("position_normal")[0], rtol=0, atol=1e-13)
    assert_array_equal(np.bincount(face, minlength=5), np.diff(start))


def test_the_bits_do_not_depend_on_threads_nor_on_still_groups() -> None:
    rng = np.random.default_rng(7)
    mesh = random_mesh(rng, [3] * 9000, None)
    owner = np.repeat(np.arange(3, dtype=np.int32), 3000)
    flow = random_flow(rng, mesh, owner, 3, mass=False, codes=(AT_FACE, AT_NODE))
    velocity = flow.velocity.node.copy()
    velocity[:3000] = 0.0
    flow = flow._replace(velocity=flow.velocity._replace(where=np.full(3, AT_NODE, np.int8), node=velocity))
    runs = make_runs(owner, None, length=128)
    tables = [
        integrate(
            mesh=mesh,
            flow=flow,
            runs=runs,
            origin=np.zeros(3),
            still_groups=np.full(3, still),
            threads=threads,
        )
        for threads in (1, 2, 5)
        for still in (False, True)
    ]
    for table in tables[1:]:
        assert_array_equal(table.values, tables[0].values)


def test_sums_lose_nothing_to_cancellation() -> None:
    # faces of area 1e16, -1e16 (turned) and 1 in one group: the area vector must be that of the last
    tall = np.array([[0, 0, 0], [2e16, 0, 0], [0, 1, 0]], dtype=float)
    small = np.array([[0, 0, 0], [2, 0, 0], [0, 1, 0]], dtype=float)
    points = np.concatenate([tall, small])
    mesh = FaceArrays(points, np.array([0, 1, 2, 3, 4, 5, 0, 2, 1]), np.empty(0, np.int64), np.empty(0, np.int8))
    flow = random_flow(np.random.default_rng(0), mesh, np.zeros(3, np.int32), 1, mass=False)
    table = integrate(
        mesh=mesh,
        flow=flow,
        runs=make_runs(np.zeros(3, np.int32), None),
        origin=np.zeros(3),
        still_groups=np.zeros(1, np.bool_),
    )
    assert_array_equal(table.column("area_vector")[0], [0.0, 0.0, 1.0])


def test_runs_cover_every_face_once_and_never_mix_groups() -> None:
    rng = np.random.default_rng(3)
    for owner in (rng.integers(0, 9, 5000), np.repeat(np.arange(5), 1000)):
        runs = make_runs(owner.astype(np.int32), None, length=64)
        order = runs.order if runs.order.size else np.arange(owner.size)
        assert_array_equal(np.sort(order), np.arange(owner.size))
        for k in range(runs.group.size):
            assert_array_equal(owner[order[runs.start[k] : runs.start[k + 1]]], runs.group[k])


@pytest.mark.parametrize("power", [(p, q, r) for p in range(5) for q in range(5 - p) for r in range(5 - p - q)])
def test_the_six_point_rule_is_exact_to_degree_four(power: tuple[int, int, int]) -> None:
    # Int. l1^p l2^q l3^r dA = 2A p! q! r! / (p+q+r+2)!: Zienkiewicz and Taylor, area coordinates (from memory)
    p, q, r = power
    exact = 2 * factorial(p) * factorial(q) * factorial(r) / factorial(p + q + r + 2)
    found = sum(w * a**p * b**q * c**r for (a, b, c), w in TRIANGLE_DEGREE4)
    assert found == pytest.approx(exact, rel=4e-16 * 8)


def test_the_six_point_rule_fails_at_degree_five() -> None:
    # Dunavant 1985, Int. J. Numer. Methods Eng. 21:1129-1148: degree 4, not 5
    exact = 2 * factorial(5) / factorial(7)
    assert abs(sum(w * a**5 for (a, _, _), w in TRIANGLE_DEGREE4) / exact - 1) > 1e-3


def test_collapsed_and_square_rules_are_exact_to_their_degree() -> None:
    points, weights = collapsed_triangle(4)
    exact = 2 * factorial(2) * factorial(4) / factorial(8)
    assert_allclose(np.sum(weights * points[:, 0] ** 2 * points[:, 1] ** 4), exact, rtol=1e-14)
    points, weights = gauss_square(4)
    assert_allclose(np.sum(weights * points[:, 0] ** 6 * points[:, 1] ** 4), (2 / 7) * (2 / 5), rtol=1e-14)


@pytest.mark.parametrize("shape", [quadratic_triangle, quadratic_quad8, quadratic_quad9])
def test_shape_functions_interpolate_and_their_derivatives_are_theirs(shape) -> None:
    corners = {
        quadratic_triangle: [(0, 0), (1, 0), (0, 1), (0.5, 0), (0.5, 0.5), (0, 0.5)],
        quadratic_quad8: [(-1, -1), (1, -1), (1, 1), (-1, 1), (0, -1), (1, 0), (0, 1), (-1, 0)],
        quadratic_quad9: [(-1, -1), (1, -1), (1, 1), (-1, 1), (0, -1), (1, 0), (0, 1), (-1, 0), (0, 0)],
    }[shape]
    at = np.array(corners, dtype=float)
    assert_allclose(shape(*at.T)[0], np.eye(len(at)), rtol=0, atol=1e-15)
    u, v = np.array([0.21]), np.array([0.34])
    value, by_u, by_v = shape(u, v)
    assert_allclose(value.sum(), 1.0, rtol=1e-15)
    step = 1e-6
    assert_allclose(by_u, (shape(u + step, v)[0] - shape(u - step, v)[0]) / (2 * step), rtol=0, atol=1e-9)
    assert_allclose(by_v, (shape(u, v + step)[0] - shape(u, v - step)[0]) / (2 * step), rtol=0, atol=1e-9)


def test_columns_follow_one_another() -> None:
    stops = 0
    for name, (_, components, _, _) in BASIS.items():
        assert column_slice(name) == slice(stops, stops + components)
        stops += components
    assert stops == WIDTH
