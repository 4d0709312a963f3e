"""Ports as the profiles see them: triangles, walls, planes and distances."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from fluxmesh.errors import FieldError, GroupError
from fluxmesh.field.flow import face_arrays_of
from fluxmesh.field.profiles.dissection import dissection_order
from fluxmesh.field.profiles.plane_mesh import PlaneMesh, child_of, divided, loose_parts, quadratic_values
from fluxmesh.field.profiles.port import PortPatch, plane_coordinates, require_plane, require_wall
from fluxmesh.field.profiles.vertices import edges_of, joined_corners
from fluxmesh.field.profiles.wall_distance import (
    distance_to_segments,
    edge_segments,
    largest_wall_distance,
    wall_distance,
)
from fluxmesh.integral.samples import sample_places
from fluxmesh.surface.build import control_surface
from fluxmesh.surface.surface import ControlSurface, Group, Role
from tests.port_sections import (
    annulus_section,
    curved_duct,
    duct,
    grid_section,
    kept,
    polygon_section,
    round_section,
)
from tests.solids import box, sphere, together, vertex_split

IN, OUT = 0, 1
U_SHAPE = [[0, 0], [3, 0], [3, 3], [2, 3], [2, 1], [1, 1], [1, 3], [0, 3]]
EXACT = 1e-13  # coordinates of size 1, a few operations


def square(cells: int, side: Callable[[Any], str] = lambda middle: "wall", **options: Any) -> ControlSurface:
    line = np.linspace(0, 1, cells + 1)
    return duct(grid_section(line, line), side, **options)


def mid_sides(patch: PortPatch, edges: np.ndarray) -> np.ndarray:
    return patch.points[edges[:, 2]]


def placed(patch: PortPatch) -> np.ndarray:
    """Where triangle and barycentric coordinates say that the samples are."""
    nodes = patch.points[patch.triangles[patch.sample_triangle]]
    return np.column_stack([quadratic_values(patch.sample_weights, nodes[:, :, k]) for k in range(3)])


SHAPES = {
    "triangles": lambda: square(3, askew=True),
    "quads and triangles": lambda: duct(round_section(10, 3), askew=True),
    "quads": lambda: duct(annulus_section(0.5, 1.0, 12, 2)),
    "one polygon": lambda: duct(polygon_section([[0, 0], [2, 0], [2, 1], [1.2, 1.1], [1, 2], [0, 2]]), askew=True),
    "curved triangles": lambda: curved_duct(round_section(6, 1), 8),
    "curved quads of 8": lambda: curved_duct(annulus_section(0.5, 1.0, 8, 1), 8),
    "curved quads of 9": lambda: curved_duct(annulus_section(0.5, 1.0, 8, 2), 9),
}


@pytest.mark.parametrize("name", SHAPES)
def test_samples_are_those_of_the_kernel_and_lie_where_the_triangles_say(name: str) -> None:
    surface = SHAPES[name]()
    for group in (IN, OUT):
        patch = PortPatch.of(surface, group)
        kernel = sample_places(face_arrays_of(surface), surface.group_of_face == group)
        assert_array_equal(patch.samples.places, kernel.places)
        assert_array_equal(patch.samples.area_vectors, kernel.area_vectors)
        assert_allclose(placed(patch), patch.samples.places, rtol=0, atol=EXACT)
        assert_allclose(patch.sample_weights.sum(axis=1), 1, rtol=EXACT)
        assert patch.sample_weights.min() > -0.05  # curved sides may reach a little over


@pytest.mark.parametrize("name", SHAPES)
def test_plane_area_and_middle(name: str) -> None:
    surface = SHAPES[name]()
    first, second = (PortPatch.of(surface, group) for group in (IN, OUT))
    assert_allclose(first.normal, -second.normal, atol=EXACT)
    assert_allclose(np.linalg.norm(first.normal), 1, rtol=EXACT)
    assert_allclose(second.centroid - first.centroid, second.normal, atol=EXACT)  # the duct is 1 long
    assert_allclose(first.area, second.area, rtol=EXACT)
    for patch in (first, second):
        assert patch.departure < 1e-12
        assert patch.overlap == 0.0
        require_plane(patch)
        flat = plane_coordinates(patch, patch.points)
        assert_allclose(np.linalg.norm(flat, axis=1), np.linalg.norm(patch.points - patch.centroid, axis=1), atol=EXACT)
        assert_allclose(patch.size, np.linalg.norm(np.ptp(patch.points, axis=0)), rtol=EXACT)


def test_known_areas_and_centroids() -> None:
    angle = PortPatch.of(duct(kept(grid_section([0, 1, 2], [0, 1, 2], quads=True), lambda m: m.min() < 1)), OUT)
    assert_allclose(angle.area, 3, rtol=EXACT)
    assert_allclose(angle.centroid, [5 / 6, 5 / 6, 1], rtol=EXACT)
    assert_allclose(angle.normal, [0, 0, 1], atol=EXACT)
    # quadratic arcs enclose the circle to fourth order
    assert_allclose(PortPatch.of(curved_duct(round_section(12, 1), 8), OUT).area, np.pi, rtol=2e-4)


def test_walls_are_told_from_symmetry_planes() -> None:
    surface = square(4, lambda middle: "symmetry" if middle.min() == 0 else "wall")
    patch = PortPatch.of(surface, OUT)
    assert_allclose(mid_sides(patch, patch.wall_edges)[:, :2].max(axis=1), 1, rtol=EXACT)
    assert_allclose(mid_sides(patch, patch.symmetry_edges)[:, :2].min(axis=1), 0, atol=EXACT)
    assert (len(patch.wall_edges), len(patch.symmetry_edges), len(patch.shared_edges)) == (8, 8, 0)


def test_where_two_ports_meet_is_no_wall() -> None:
    line = np.linspace(0, 1, 3)
    plain = duct(grid_section(line, line))
    # the faces of the outlet beyond x = 1/2 become a port of their own
    middle = np.add.reduceat(plain.points[plain.connectivity], plain.offsets[:-1]) / np.diff(plain.offsets)[:, None]
    groups = np.where((plain.group_of_face == OUT) & (middle[:, 0] > 0.5), len(plain.groups), plain.group_of_face)
    surface = replace(plain, group_of_face=groups.astype(np.int32), groups=(*plain.groups, Group("next", Role.OUTLET)))
    for group in (OUT, len(plain.groups)):
        patch = PortPatch.of(surface, group)
        assert_allclose(mid_sides(patch, patch.shared_edges)[:, 0], 0.5, rtol=EXACT)
        assert (len(patch.wall_edges), len(patch.symmetry_edges), len(patch.shared_edges)) == (4, 0, 2)


@pytest.mark.parametrize("off", [0.0, 2e-7, -2e-7])
def test_groups_with_points_of_their_own_still_meet(off: float) -> None:
    surface = square(4, lambda middle: "symmetry" if middle[0] == 0 else "wall", split=True)
    points = surface.points.copy()
    points[len(points) // 2 :] += off  # the sides, exported in another precision
    patch = PortPatch.of(replace(surface, points=points), OUT)
    assert (len(patch.wall_edges), len(patch.symmetry_edges)) == (12, 4)


def test_a_rim_that_nothing_meets_counts_as_wall() -> None:
    surface = square(4, lambda middle: "symmetry", split=True)
    points = surface.points.copy()
    points[len(points) // 2 :] += 1e-3
    patch = PortPatch.of(replace(surface, points=points), OUT)
    assert (len(patch.wall_edges), len(patch.symmetry_edges), len(patch.shared_edges)) == (16, 0, 0)


def test_copies_of_points_within_a_port_are_joined() -> None:
    solid = box((0, 0, 0), (1, 1, 1), 3)
    whole = PortPatch.of(solid.surface({"z+": "outlet"}, rest="wall"), 5)
    apart = PortPatch.of(vertex_split(solid).surface({"z+": "outlet"}, rest="wall"), 5)
    assert whole.name == apart.name == "z+"
    assert len(apart.points) == len(whole.points) == 16 + 33
    assert len(apart.wall_edges) == len(whole.wall_edges) == 12


def test_only_coincident_corners_are_joined() -> None:
    # two triangles of a square with points of their own; one copy is off by 1e-6
    places = np.array([[[0, 0, 0], [1, 0, 0], [1, 1, 0]], [[0, 0, 0], [1, 1, 1e-6], [0, 1, 0]]], float)
    for tolerance, count in ((0.0, 5), (1e-7, 5), (2e-6, 4), (10.0, 4)):  # the last is capped by the spacing
        corners, vertices = joined_corners(np.arange(6).reshape(2, 3), places, tolerance)
        assert len(vertices) == count
        assert_array_equal(np.unique(corners), np.arange(count))
        assert_allclose(vertices[corners], places, rtol=0, atol=1.1e-6)
    assert edges_of(corners).uses.sum() == 6
    assert_array_equal(np.bincount(edges_of(corners).uses), [0, 4, 1])


def test_a_splitter_that_ends_in_the_port_is_a_wall() -> None:
    # two boxes side by side, with one outlet over both: the walls between them end in it
    both = together(a=box((0, 0, 0), (1, 1, 1), 2), b=box((1, 0, 0), (2, 1, 1), 2))
    groups = {"out": ("outlet", np.concatenate([both.groups["a:z+"], both.groups["b:z+"]]))}
    rest = np.setdiff1d(np.arange(len(both.faces)), groups["out"][1])
    surface = control_surface(both.points, both.faces, {**groups, "rest": ("wall", rest)})
    patch = PortPatch.of(surface, 0)
    assert len(patch.wall_edges) == 12 + 2
    assert_allclose(largest_wall_distance(patch), 0.5, rtol=1e-3)


def test_a_dented_polygon_is_cut_without_folding() -> None:
    surface = duct(polygon_section(U_SHAPE), askew=True)
    patch = PortPatch.of(surface, OUT)
    assert len(patch.triangles) == len(U_SHAPE) - 2
    assert patch.overlap == 0.0
    assert_allclose(patch.area, 7, rtol=EXACT)
    assert len(patch.wall_edges) == 8
    outside = patch.sample_triangle < 0
    assert 0 < outside.sum() < outside.size
    inside = ~outside
    assert_allclose(placed(patch)[inside], patch.samples.places[inside], rtol=0, atol=EXACT)
    # the middle of the corners lies in the gap between the arms: the samples near it are outside
    away = np.linalg.norm(patch.samples.places - surface.points[8:16].mean(axis=0), axis=1)
    assert outside[np.argmin(away)]


def test_faces_of_another_shape_stay_whole_next_to_a_dented_one() -> None:
    points = np.array([*U_SHAPE, [1.5, 2.0]], float)
    faces = [np.arange(8), np.array([4, 3, 8]), np.array([5, 4, 8]), np.array([6, 5, 8])]
    surface = duct((points, faces))
    patch = PortPatch.of(surface, OUT)
    assert len(patch.triangles) == 6 + 3
    inside = patch.sample_triangle >= 0
    assert_allclose(placed(patch)[inside], patch.samples.places[inside], rtol=0, atol=EXACT)


def test_a_bent_port_says_how_far() -> None:
    # size 5; a ridge of height h over half of it: by least moments the plane lies h/2 below its top
    plane, faces = grid_section([0, 1, 2, 3, 4], [0, 3])
    surface = duct((plane, faces))
    points = surface.points.copy()
    ridge = (points[:, 2] == 1) & (points[:, 0] == 2)
    points[ridge, 2] += 0.0101
    with pytest.raises(
        FieldError,
        match=r"group 'out': the port is not planar: points lie up to 0\.00\d+ m off .* 0\.1\d* % of its size, and",
    ):
        require_plane(PortPatch.of(replace(surface, points=points), OUT))
    points[ridge, 2] = 1 + 0.003
    require_plane(PortPatch.of(replace(surface, points=points), OUT))


def test_a_port_folded_over_itself_is_named() -> None:
    line = np.linspace(0, 1, 5)
    plane, faces = grid_section(line, line)
    plane[12] = [1.3, 0.5]  # its middle vertex beyond the rim
    with pytest.raises(FieldError, match="group 'out': the faces of the port fold over one another"):
        require_plane(PortPatch.of(duct((plane, faces)), OUT))


def test_groups_without_faces_or_without_net_area_are_errors() -> None:
    surface = square(2)
    more = replace(surface, groups=(*surface.groups, Group("none", Role.INLET)))
    with pytest.raises(GroupError, match="group 'none': the group has no faces"):
        PortPatch.of(more, len(surface.groups))
    with pytest.raises(GroupError, match="group 'skin': the faces enclose no net area"):
        PortPatch.of(sphere(1).surface(), 0)


def test_a_port_without_walls_is_an_error_for_distances() -> None:
    patch = PortPatch.of(square(2, lambda middle: "symmetry"), OUT)
    with pytest.raises(FieldError, match="group 'out': no wall meets the rim of the port"):
        require_wall(patch)
    for measure in (largest_wall_distance, lambda p: wall_distance(p, p.points)):
        with pytest.raises(FieldError, match="no wall meets the rim"):
            measure(patch)


# ---- distances --------------------------------------------------------------------------------


def plain_distance(places: np.ndarray, segments: np.ndarray) -> np.ndarray:
    """One at a time, by the foot of the perpendicular."""
    found = []
    for place in places:
        best = np.inf
        for a, b in segments:
            square_ = (b - a) @ (b - a)
            share = 0.0 if square_ == 0 else min(1.0, max(0.0, (place - a) @ (b - a) / square_))
            best = min(best, float(np.linalg.norm(place - a - share * (b - a))))
        found.append(best)
    return np.array(found)


@settings(max_examples=25, deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(1, 40), st.sampled_from([1, 7, 500]), st.sampled_from([1e-3, 1.0]))
def test_distances_to_segments_are_those_of_each_segment(seed: int, count: int, places: int, spread: float) -> None:
    rng = np.random.default_rng(seed)
    segments = rng.normal(size=(count, 1, 2)) + spread * rng.normal(size=(count, 2, 2))
    segments[0, 1] = segments[0, 0]  # one without length
    at = rng.normal(size=(places, 2)) * [3.0, 0.2]
    few = min(places, 40)
    assert_allclose(distance_to_segments(at, segments)[:few], plain_distance(at[:few], segments), rtol=0, atol=1e-13)


def test_no_places_have_no_distances() -> None:
    assert distance_to_segments(np.empty((0, 2)), np.zeros((1, 2, 2))).shape == (0,)


@pytest.mark.parametrize("turned", [False, True])
def test_distance_in_a_round_port_is_radius_less_radius(turned: bool) -> None:
    patch = PortPatch.of(curved_duct(round_section(24, 2), 8), OUT)
    radius = np.linalg.norm(patch.samples.places[:, :2], axis=1)
    # the rim is 24 parabolas for arcs, each in 32 chords
    assert_allclose(wall_distance(patch, patch.samples.places), 1 - radius, rtol=0, atol=3e-5)
    straight = PortPatch.of(duct(round_section(24, 2), askew=turned), OUT)
    inner = np.cos(np.pi / 24)  # the nearest that a polygon's side comes to the middle
    assert_allclose(largest_wall_distance(straight), inner, rtol=1e-3)


def test_largest_distances_of_known_outlines() -> None:
    line = np.linspace(0, 1, 2)
    assert_allclose(largest_wall_distance(PortPatch.of(duct(grid_section(line, 3 * line)), OUT)), 0.5, rtol=1e-3)
    assert_allclose(largest_wall_distance(PortPatch.of(square(3), OUT)), 0.5, rtol=1e-3)
    ring = PortPatch.of(duct(annulus_section(0.5, 1.0, 200, 1)), OUT)
    assert_allclose(largest_wall_distance(ring), 0.25, rtol=2e-3)
    # in an L of arms 1 wide, the circle at the bend touches both outer walls and the inner corner
    angle = PortPatch.of(duct(kept(grid_section([0, 1, 2], [0, 1, 2]), lambda m: m.min() < 1)), OUT)
    assert_allclose(largest_wall_distance(angle), np.sqrt(2) / (1 + np.sqrt(2)), rtol=1e-3)
    # with a symmetry plane for a side, that side is the farthest
    half = PortPatch.of(square(2, lambda middle: "symmetry" if middle[0] == 0 else "wall"), OUT)
    assert_allclose(largest_wall_distance(half), 0.5, rtol=1e-3)


def test_segments_of_straight_and_curved_edges() -> None:
    patch = PortPatch.of(curved_duct(round_section(8, 1), 8), OUT)
    segments = edge_segments(patch, patch.wall_edges)
    assert segments.shape == (8 * 32, 2, 2)
    assert_allclose(np.linalg.norm(segments, axis=2), 1, rtol=2e-3)  # parabolas for arcs of 45°
    assert_allclose(np.linalg.norm(segments[:, 1] - segments[:, 0], axis=1).sum(), 2 * np.pi, rtol=1e-3)
    assert edge_segments(PortPatch.of(square(3), OUT), patch.wall_edges[:4] * 0).shape == (4, 2, 2)


# ---- divided triangles --------------------------------------------------------------------------


def bent_mesh() -> PlaneMesh:
    patch = PortPatch.of(curved_duct(annulus_section(0.5, 1.0, 6, 1, quads=False), 8), OUT)
    fixed = np.zeros(len(patch.points), np.bool_)
    fixed[patch.wall_edges] = True
    return PlaneMesh(plane_coordinates(patch, patch.points), patch.triangles, fixed)


def at(mesh: PlaneMesh, triangle: np.ndarray, weights: np.ndarray) -> np.ndarray:
    nodes = mesh.nodes[mesh.triangles[triangle]]
    return np.column_stack([quadratic_values(weights, nodes[:, :, k]) for k in range(2)])


def test_divided_triangles_keep_every_place() -> None:
    mesh = bent_mesh()
    rng = np.random.default_rng(1)
    triangle, weights = rng.integers(len(mesh.triangles), size=400), rng.dirichlet([1, 1, 1], size=400)
    before = at(mesh, triangle, weights)
    for _ in range(3):
        count = len(mesh.triangles)
        mesh = divided(mesh)
        triangle, weights = child_of(triangle, weights)
        assert len(mesh.triangles) == 4 * count
        assert weights.min() > -1e-12
        assert_allclose(at(mesh, triangle, weights), before, rtol=0, atol=EXACT)
    assert len(np.unique(mesh.triangles)) == len(mesh.nodes)
    # neighbours share their nodes: each edge within has two triangles
    _, uses = np.unique(mesh.triangles[:, 3:], return_counts=True)
    assert (uses == 1).sum() == 12 * 2**3
    rim = np.unique(mesh.triangles[:, 3:])[uses == 1]
    assert mesh.fixed[rim].all()
    assert mesh.fixed.sum() == 2 * rim.size  # middles and corners, nothing within
    # fixed nodes stay on the arcs
    radius = np.linalg.norm(mesh.nodes[mesh.fixed], axis=1)
    assert_allclose(np.minimum(np.abs(radius - 1), np.abs(radius - 0.5)), 0, atol=0.01)


@settings(max_examples=20, deadline=None)
@given(st.integers(1, 60), st.integers(0, 2**32 - 1))
def test_dissection_puts_the_nodes_of_a_cut_after_both_halves(count: int, seed: int) -> None:
    rng = np.random.default_rng(seed)
    elements = rng.integers(0, 2 * count, size=(count, 3))
    order = dissection_order(elements, rng.random((count, 2)), 2 * count + 3)
    assert_array_equal(np.sort(order), np.arange(2 * count + 3))
    unused = np.setdiff1d(np.arange(2 * count + 3), elements)
    assert_array_equal(np.sort(order[: unused.size]), unused)


def test_dissection_keeps_factors_sparse() -> None:
    from scipy.sparse import csc_array
    from scipy.sparse.linalg import splu

    x, y = np.meshgrid(np.arange(40.0), np.arange(40.0), indexing="ij")
    number = np.random.default_rng(2).permutation(1600).reshape(40, 40)
    cells = np.stack([number[:-1, :-1], number[1:, :-1], number[1:, 1:], number[:-1, 1:]], axis=-1).reshape(-1, 4)
    middles = np.column_stack([x[:-1, :-1].ravel(), y[:-1, :-1].ravel()])
    rows, columns = np.repeat(cells, 4, axis=1).ravel(), np.tile(cells, (1, 4)).ravel()
    matrix = csc_array((np.where(rows == columns, 9.0, -1.0), (rows, columns)), shape=(1600, 1600))

    def fill(order: np.ndarray) -> int:
        options = {"permc_spec": "NATURAL", "diag_pivot_thresh": 0.0, "options": {"SymmetricMode": True}}
        return int(splu(csc_array(matrix[order][:, order]), **options).L.nnz)

    # about 31/4 n log2 n entries (George 1973) against n^1.5 of rows after one another
    assert fill(dissection_order(cells, middles, 1600)) < 1600 * 31 / 4 * np.log2(1600) / 2
    assert fill(number.ravel()) > 1600**1.5 * 0.9


def test_parts_that_nothing_holds_are_counted() -> None:
    mesh = bent_mesh()
    assert loose_parts(mesh) == 0
    assert loose_parts(replace(mesh, fixed=np.zeros_like(mesh.fixed))) == 1
    count = len(mesh.nodes)
    two = PlaneMesh(
        np.concatenate([mesh.nodes, mesh.nodes + 3]),
        np.concatenate([mesh.triangles, mesh.triangles + count]),
        np.concatenate([mesh.fixed, 0 * mesh.fixed]),
    )
    assert loose_parts(two) == 1
