"""The table from recovered quadratic patches: its order, what it leaves alone, and what it does not depend on."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import replace
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose
from numpy.typing import NDArray

import fluxmesh
from fluxmesh.field.field import array_field
from fluxmesh.field.flow import Flow, integrate_flow, lay_flow, near_origin, still_flow
from fluxmesh.field.patch_kernel import _rule
from fluxmesh.field.patches import sharpened_table
from fluxmesh.field.pressure import PressureMeaning
from fluxmesh.integral.layout import AT_SAMPLE
from fluxmesh.integral.samples import sample_places
from fluxmesh.integral.table import IntegralTable, column_slice
from fluxmesh.surface.build import control_surface
from fluxmesh.surface.smooth import smooth_shape
from fluxmesh.surface.surface import ControlSurface
from tests.flows import landau_force, landau_squire, stokes_sphere
from tests.solids import (
    Solid,
    Station,
    angle_block,
    any_polyhedron,
    box,
    dome,
    elbow,
    hull,
    in_triangles,
    moved,
    odd_body,
    one_group,
    pipe,
    prism,
    rigid_motion,
    sphere,
    swept,
    together,
    torus,
    vertex_split,
)

Array = NDArray[np.float64]
MANIFOLD = Path(fluxmesh.__file__).parent.parent / "meshes" / "manifold"
# columns that are polynomials of the data: linear data on facets are integrated without error either way
ROUGH = ("speed_area", "reversed_mass_flow")


def tables(surface: ControlSurface, flow: Flow | None = None, *, facets: bool = False) -> tuple[Array, Array]:
    """Plain and sharpened values about one origin."""
    plain, sharp = both(surface, flow or still_flow(surface), facets=facets)
    return plain.values, sharp.values


def both(surface: ControlSurface, flow: Flow, *, facets: bool = False) -> tuple[IntegralTable, IntegralTable]:
    origin = near_origin(surface)
    return (
        integrate_flow(surface, flow, origin=origin),
        sharpened_table(surface, flow, facets_are_geometry=facets, origin=origin),
    )


def volume(table: IntegralTable) -> float:
    return float(table.total("position_normal")[::4].sum() / 3)


def force(table: IntegralTable) -> Array:
    """Flux of momentum out through the surface, with pressure and traction."""
    return table.total("momentum_flux") - table.total("pressure_force") - table.total("viscous_force")


def cross(u: Array, v: Array) -> Array:
    return np.asarray(u[..., 0] * v[..., 1] - u[..., 1] * v[..., 0])


def orders(errors: list[float], ratio: float = 2.0) -> list[float]:
    return [float(np.log(a / b) / np.log(ratio)) for a, b in pairwise(errors)]


def body_normals(level: int) -> Array:
    """Unit normals of `odd_body` at its points: from the derivatives of the map from the sphere, by finite steps."""
    ball, step = sphere(level).points, 1e-6
    one = np.cross(ball, np.where(np.abs(ball[:, :1]) < 0.9, [1.0, 0, 0], [0, 1.0, 0]))
    one /= np.linalg.norm(one, axis=1)[:, None]
    two = np.cross(ball, one)

    def bulge(x: Array) -> Array:
        a, b, c = x.T
        return x * (1 + 0.2 * a * b + 0.15 * c**3 - 0.2 * b * c + 0.12 * a + 0.1 * a**2 * c)[:, None]

    assert_allclose(bulge(ball), odd_body(level).points, atol=1e-14)
    along = [bulge(ball + step * d) - bulge(ball - step * d) for d in (one, two)]
    normal = np.cross(*along)
    return np.asarray(normal / np.linalg.norm(normal, axis=1)[:, None])


# ---- order on curved surfaces ---------------------------------------------------------------


def test_landau_squire_jet_through_an_odd_body() -> None:
    # reference 3.1: F = 16 pi A (1 + 4/(3(A²-1)) - A/2 ln((A+1)/(A-1))) rho nu², A = 1.5
    # (Landau 1944; Squire 1951; Landau and Lifshitz section 23)
    jet = landau_squire(1.5, 1.2, 0.3)
    exact = landau_force(1.5) * 1.2 * 0.3**2 * np.array([0, 0, 1])
    plain, sharp = [], []
    for level in (3, 4, 5):
        surface = odd_body(level).surface()
        flow = jet.lay(surface, traction=jet.traction(surface.points, body_normals(level)), at="nodes")
        errors = [float(np.linalg.norm(force(t) - exact) / exact[2]) for t in both(surface, flow)]
        plain.append(errors[0])
        sharp.append(errors[1])
    assert surface.face_count == 20480
    assert min(orders(sharp)) >= 3.3
    assert plain[-1] > 50 * sharp[-1]


def test_stokes_sphere_through_a_wide_sphere() -> None:
    # reference 3.3: drag 6 pi mu a U (Stokes 1851; Batchelor section 4.9); creeping flow carries no momentum here
    stokes = stokes_sphere(1.0, 0.4, 0.7, 1e-12)
    exact = 6 * np.pi * 0.7 * 0.4
    errors, flat = [], 0.0
    for level in (3, 4, 5):
        body = sphere(level, 1.3)
        surface = body.surface()
        flow = stokes.lay(surface, traction=stokes.traction(surface.points, surface.points / 1.3), at="nodes")
        plain, sharp = both(surface, flow)
        flat = abs(abs(force(plain)[2]) / exact - 1)
        errors.append(abs(abs(force(sharp)[2]) / exact - 1))
    assert min(orders(errors)) >= 3.3
    assert flat > 50 * errors[-1]


SMOOTH: dict[str, tuple[Callable[[int], Solid], float]] = {
    "sphere": (lambda k: sphere(k), 4 * np.pi / 3),
    "torus of quads": (lambda k: torus(1.0, 0.4, 8 * 2**k, 4 * 2**k), 2 * np.pi**2 * 0.16),
    "torus of triangles": (lambda k: in_triangles(torus(1.0, 0.4, 8 * 2**k, 4 * 2**k)), 2 * np.pi**2 * 0.16),
    # curved rims: the crease between wall and port follows a circle
    "pipe": (lambda k: pipe(1.0, 2.0, 8 * 2**k, 2 * 2**k, 2**k), 2 * np.pi),
    "elbow": (lambda k: elbow(2.0, (0.5, 0.5), 1.3, 8 * 2**k, 4 * 2**k, 2**k), 1.3 * 2.0 * np.pi * 0.25),
    "dome": (
        lambda k: dome(1.0, 1.0, 8 * 2**k, 4 * 2**k),
        np.pi / 3 * (1 - np.cos(1.0)) ** 2 * (2 + np.cos(1.0)),
    ),
}


@pytest.mark.parametrize("name", SMOOTH)
def test_volume_of_smooth_bodies(name: str) -> None:
    make, exact = SMOOTH[name]
    errors = []
    for level in (2, 3, 4):
        surface = make(level).surface()
        plain, sharp = both(surface, still_flow(surface))
        errors.append(abs(volume(sharp) / exact - 1))
        # watertight: positions of shared edges are the same on both sides
        assert_allclose(sharp.total("area_vector"), 0, atol=1e-13 * sharp.total("area"))
    assert min(orders(errors)) > 3.6
    assert abs(volume(plain) / exact - 1) > 50 * errors[-1]


def test_groups_that_meet_smoothly_share_their_edges() -> None:
    body = sphere(3)
    middle = body.points[np.array(body.faces)].mean(axis=1)
    halves = {"upper": np.flatnonzero(middle[:, 2] > 0.1), "lower": np.flatnonzero(middle[:, 2] <= 0.1)}
    whole, cut = body.surface(), replace(body, groups=halves).surface()
    origin = near_origin(whole)
    one = sharpened_table(whole, still_flow(whole), facets_are_geometry=False, origin=origin).values.sum(axis=0)
    two = sharpened_table(cut, still_flow(cut), facets_are_geometry=False, origin=origin).values.sum(axis=0)
    assert_allclose(one, two, atol=1e-13)


def test_points_of_each_face_alone_do_not_hide_the_shape() -> None:
    # an STL file joins nothing
    body = sphere(3)
    joined, split = body.surface(), vertex_split(body).surface()
    assert_allclose(tables(joined)[1], tables(split)[1], atol=1e-13)


# ---- what stays as it is --------------------------------------------------------------------


def divided(body: Solid, times: int = 2) -> Solid:
    """Every triangle in four, on its own plane."""
    for _ in range(times):
        rows = np.array(body.faces)
        edges = np.sort(np.concatenate([rows[:, [0, 1]], rows[:, [1, 2]], rows[:, [2, 0]]]), axis=1)
        unique, number = np.unique(edges, axis=0, return_inverse=True)
        d, e, f = len(body.points) + number.reshape(3, -1)
        a, b, c = rows.T
        pieces = [np.column_stack(piece) for piece in ((a, d, f), (d, b, e), (f, e, c), (d, e, f))]
        points = np.concatenate([body.points, body.points[unique].mean(axis=1)])
        body = one_group(points, np.concatenate(pieces))
    return body


def facetted(name: str) -> Solid:
    if name == "many facets":
        sites = np.random.default_rng(0).standard_normal((60, 3))
        return divided(hull(sites / np.linalg.norm(sites, axis=1)[:, None]))
    if name == "few facets":
        return divided(any_polyhedron(0))
    if name == "icosahedron":
        return sphere(0)
    if name == "wedge":
        angle = np.array([0.0, 0.9, 2.0, 3.3, 4.4, 5.2])
        return prism(np.column_stack([np.cos(angle), np.sin(angle)]), 0.0, 1.0, 3)
    return {
        "cube": box((0, 0, 0), (1, 1.3, 0.7), 3),
        "bare cube": box((0, 0, 0), (1, 1, 1)),
        "cube of quads": box((0, 0, 0), (1, 1, 1), 3, quads=True),
        "angle": angle_block(4),
        "hollow": any_polyhedron(4),
    }[name]


@pytest.mark.parametrize(
    "name",
    ["cube", "bare cube", "cube of quads", "angle", "hollow", "icosahedron", "wedge", "few facets", "many facets"],
)
@pytest.mark.parametrize("turn", [False, True])
def test_a_facetted_body_stays_itself(name: str, turn: bool) -> None:
    body = facetted(name)
    if turn:
        body = moved(body, *rigid_motion(np.random.default_rng(5)))
    plain, sharp = tables(body.surface())
    assert_allclose(sharp, plain, atol=1e-12 * np.abs(plain).max())


def test_creases_of_a_pipe_are_its_rims() -> None:
    body = pipe(1.0, 2.0, 12, 4, 3)
    surface = body.surface()
    shape = smooth_shape(surface)
    assert np.count_nonzero(shape.sharp) == 2 * 2 * 12
    # tangents of the rims run round
    rim = np.flatnonzero(np.abs(shape.along).sum(axis=1))
    assert rim.size == 24
    assert_allclose(np.abs(np.einsum("ik,ik->i", shape.along[rim], surface.points[rim])), 0, atol=1e-12)


def test_a_round_edge_is_no_crease_and_a_kink_among_flat_faces_is() -> None:
    # a plate bent by 20 degrees: once, or over five edges
    for bends in (1, 5):
        steps = np.concatenate(
            [np.zeros(6), np.full(bends, np.radians(20.0) / bends if bends > 1 else 0.35), np.zeros(6)]
        )
        heading = np.cumsum(steps)
        path = np.concatenate([[[0.0, 0.0]], np.cumsum(np.column_stack([np.cos(heading), np.sin(heading)]), axis=0)])
        count = len(path)
        points = np.concatenate([np.column_stack([path[:, 0], np.full(count, y), path[:, 1]]) for y in range(4)])
        here = np.concatenate([np.arange(count - 1) + row * count for row in range(3)])
        faces = np.column_stack([here, here + 1, here + 1 + count, here + count])
        surface = control_surface(points, faces, {"plate": ("wall", np.arange(len(faces)))}, closed=False)
        shape = smooth_shape(surface)
        sharp = np.count_nonzero(shape.sharp & (shape.halves.twin >= 0))
        assert sharp == (2 * 3 if bends == 1 else 0)


@pytest.mark.parametrize("seed", range(10))
def test_linear_fields_on_facets_are_integrated_as_before(seed: int) -> None:
    # every column against the plain pass, which is exact for linear data: fields on points, uniform density
    rng = np.random.default_rng(seed)
    body = any_polyhedron(seed)
    if seed % 5 == 2:
        body = in_triangles(body)  # on twisted quads the two differ in what lies between the corners
    surface = body.surface()
    slope, gradient = rng.standard_normal((3, 7)), rng.standard_normal(7)
    values = gradient + surface.points @ slope
    flow = lay_flow(
        surface,
        density=870.0,
        velocity=values[:, :3],
        traction=values[:, 3:6],
        pressure=values[:, 6],
        at="nodes",
        meaning=PressureMeaning("kinematic", "removed", (0.1, 0.2, 0.3)),
        gravity=(1.0, -2.0, -9.0),
    )
    plain, sharp = tables(surface, flow, facets=True)
    keep = np.ones(plain.shape[1], np.bool_)
    for name in ROUGH:
        keep[column_slice(name)] = False
    sizes = np.abs(plain).max(axis=0)
    assert_allclose(sharp[:, keep], plain[:, keep], rtol=1e-6, atol=1e-9 * sizes.max())
    # twisted or concave faces stay as they are; at least the convex bodies must have been bent
    if seed % 5 < 2:
        assert not np.array_equal(sharp, plain)


@pytest.mark.parametrize("quads", [False, True])
def test_uniform_fields_stay(quads: bool) -> None:
    body = angle_block(4, quads=quads)
    surface = body.surface()
    faces, points = surface.face_count, surface.point_count
    flow = lay_flow(
        surface,
        density=np.full(points, 1.2),
        velocity=np.tile([1.0, 2.0, 3.0], (faces, 1)),
        pressure=np.full(faces, 5e4),
        traction=np.tile([3.0, 2.0, 1.0], (points, 1)),
        at={"density": "nodes", "velocity": "faces", "pressure": "faces", "traction": "nodes"},
        meaning=PressureMeaning("absolute"),
        ambient=1e5,
    )
    plain, sharp = tables(surface, flow, facets=True)
    assert_allclose(sharp, plain, atol=1e-11 * np.abs(plain).max())


def test_face_values_keep_the_flow_through_each_face() -> None:
    # an incompressible flow exported on faces: ∑ V·A stands, while V V·n gets the spread over each face
    def velocity(x: Array) -> Array:
        a, b, c = x.T
        return np.column_stack([1 + a**2 * b + b * c, b**2 * (c - a), np.sin(2 * c) * a + a * b * c])

    rows = []
    for cells in (6, 12):
        body = box((0, 0, 0), (1, 1, 1), cells, quads=True)
        surface = body.surface()
        centre = body.points[np.array(body.faces)].mean(axis=1)
        # means over faces, by Simpson's rule in each direction
        steps = np.array([-1.0, 0.0, 1.0]) * 0.5 / cells
        weight = np.array([1.0, 4.0, 1.0]) / 6
        normal = np.zeros_like(centre)
        for k, faces in enumerate(body.groups.values()):
            normal[faces, k // 2] = 1.0
        mean = np.zeros_like(centre)
        for i, j, k in np.ndindex(3, 3, 3):
            shift = np.array([steps[i], steps[j], steps[k]]) * (1 - normal)
            mean += weight[i] * weight[j] * weight[k] * velocity(centre + shift)
        flow = lay_flow(surface, density=2.0, velocity=mean, at="faces")
        plain, sharp = both(surface, flow, facets=True)
        assert_allclose(sharp.column("mass_flow"), plain.column("mass_flow"), atol=1e-12)
        carried = lay_flow(
            surface, density=2.0, velocity=mean, at="faces", mass_flux=plain_mass(surface, body, mean, 2.0)
        )
        given = both(surface, carried, facets=True)
        assert_allclose(given[1].column("mass_flow"), plain.column("mass_flow"), atol=1e-12)
        assert_allclose(given[1].column("momentum_flux"), sharp.column("momentum_flux"), atol=1e-10)
        exact = 2.0 * exact_flux(velocity)
        rows.append([float(np.linalg.norm(t.total("momentum_flux") - exact)) for t in (plain, sharp)])
    assert rows[0][0] > 5 * rows[0][1]
    assert rows[1][0] > 10 * rows[1][1]


def plain_mass(surface: ControlSurface, body: Solid, velocity: Array, density: float) -> Array:
    corners = body.points[np.array(body.faces)]
    area = 0.5 * np.cross(corners[:, 2] - corners[:, 0], corners[:, 3] - corners[:, 1])
    return np.asarray(density * np.einsum("fk,fk->f", velocity, area))


def exact_flux(velocity: Callable[[Array], Array]) -> Array:
    """∮ V V·n over the unit cube by Gauss's rule."""
    nodes, weights = np.polynomial.legendre.leggauss(12)
    u, v = np.meshgrid((nodes + 1) / 2, (nodes + 1) / 2)
    weight = np.outer(weights, weights).ravel() / 4
    total = np.zeros(3)
    for axis in range(3):
        for side in (0.0, 1.0):
            place = np.full((u.size, 3), side)
            place[:, (axis + 1) % 3], place[:, (axis + 2) % 3] = u.ravel(), v.ravel()
            found = velocity(place)
            total += (2 * side - 1) * np.einsum("q,q,qk->k", weight, found[:, axis], found)
    return total


def test_curved_faces_and_sampled_groups_keep_their_values() -> None:
    body = odd_body(2, curved=True)
    surface = body.surface()
    flow = landau_squire(1.5, 1.2, 0.3).lay(surface, traction=None)
    plain, sharp = tables(surface, flow)
    assert_allclose(sharp, plain, rtol=0, atol=0)
    pipework = pipe(1.0, 2.0, 16, 4, 4)
    straight = pipework.surface({"inlet": "inlet", "outlet": "outlet"})
    chosen = np.array([group.name == "inlet" for group in straight.groups])
    mesh = fluxmesh.field.flow.face_arrays_of(straight)
    samples = sample_places(mesh, chosen[straight.group_of_face])
    laid = lay_flow(straight, density=1.0, velocity=straight.points**2)
    velocity = replace(
        laid.velocity,
        sample=samples.places**2,
        where=np.where(chosen, AT_SAMPLE, laid.velocity.where).astype(np.int8),
    )
    sampled = replace(laid, velocity=velocity, sample_start=samples.start)
    plain, sharp = tables(straight, sampled)
    assert_allclose(sharp[chosen], plain[chosen], rtol=0, atol=1e-13)
    assert np.abs(sharp[~chosen] - plain[~chosen]).max() > 1e-3
    # the rim of the sampled port is straight on its wall's side as well
    together_ = sharpened_table(straight, sampled, facets_are_geometry=False, origin=near_origin(straight))
    assert_allclose(together_.total("area_vector"), 0, atol=1e-13)


# ---- plane ports ----------------------------------------------------------------------------


@pytest.mark.parametrize("mesh", ["coarse", "medium", pytest.param("fine", marks=pytest.mark.long)])
def test_ports_of_a_computed_flow(mesh: str) -> None:
    # against quadrature of the finite-element solution itself (scripts/make_manifold.py)
    outcome = fluxmesh.run_case(fluxmesh.read_case(MANIFOLD / f"manifold_{mesh}.toml"))
    reference = json.loads((MANIFOLD / "reference.json").read_text(encoding="utf-8"))["meshes"][mesh]["ports"]
    plain, sharp = both(outcome.surface, outcome.flow, facets=True)
    names = [group.name for group in outcome.surface.groups]
    for port, values in reference.items():
        row = names.index(port)
        for column in ("mass_flow", "momentum_flux"):
            exact = np.array(values[column])
            errors = [float(np.linalg.norm(t.column(column)[row] - exact)) for t in (plain, sharp)]
            assert errors[0] > (8 if column == "mass_flow" else 20) * errors[1], (port, column, errors)


def port(shape: str, across: int, seed: int) -> tuple[Array, NDArray[np.int64]]:
    """Points (n, 2) and triangles of a round, square or L-shaped port, scattered inside, regular along the rim."""
    from scipy.spatial import Delaunay

    rng = np.random.default_rng(seed)
    step, line = 2 / across, np.linspace(-1, 1, across + 1)
    if shape == "round":
        angle = np.linspace(0, 2 * np.pi, round(np.pi * across), endpoint=False)
        rim = np.column_stack([np.cos(angle), np.sin(angle)])
    else:
        ones = np.ones_like(line)
        sides = [np.column_stack(pair) for pair in ((line, -ones), (line, ones), (-ones, line), (ones, line))]
        rim = np.concatenate(sides)
        if shape == "angle":
            rim = rim[(rim[:, 0] <= 0) | (rim[:, 1] <= 0)]
            inner = line[line >= 0]
            rim = np.concatenate([rim, np.column_stack([inner, 0 * inner]), np.column_stack([0 * inner, inner])])
        rim = np.unique(rim.round(12), axis=0)

    def inside(x: Array, margin: float) -> NDArray[np.bool_]:
        if shape == "round":
            return np.hypot(*x.T) < 1 - margin
        within = (np.abs(x) < 1 - margin).all(axis=1)
        return within & ((x < -margin).any(axis=1)) if shape == "angle" else within

    middles = line[:-1] + 0.5 * step
    scattered = np.stack(np.meshgrid(middles, middles), axis=-1).reshape(-1, 2)
    scattered += rng.uniform(-0.25, 0.25, scattered.shape) * step
    points = np.concatenate([rim, scattered[inside(scattered, 0.5 * step)]])
    rows = Delaunay(points).simplices.astype(np.int64)
    a, b, c = (points[rows[:, k]] for k in range(3))
    double = cross(b - a, c - a)
    rows[double < 0] = rows[double < 0][:, ::-1]
    good = (np.abs(double) > 1e-6 * step**2) & (inside(points[rows].mean(axis=1), 0.0))
    return points, rows[good]


PROFILES: dict[str, tuple[str, Callable[[Any, Any], Any], float, float, float]] = {
    # shape, speed along the normal, ∫V dA, ∫V² dA, least gain; integrals by hand
    "parabola": ("round", lambda x, y: 1 - x**2 - y**2, np.pi / 2, np.pi / 3, 100),
    "skewed": ("round", lambda x, y: (1 - x**2 - y**2) * (1 + x / 2), np.pi / 2, np.pi / 3 + np.pi / 96, 10),
    "cosine": ("square", lambda x, y: np.cos(np.pi * x / 2) * np.cos(np.pi * y / 2), 16 / np.pi**2, 1.0, 10),
    "quartic": ("square", lambda x, y: (1 - x**2) * (1 - y**2), 16 / 9, 256 / 225, 10),
    "ragged": (
        "angle",
        lambda x, y: (1 - x**2) * (1 - y**2) * x**2 * y**2,
        3 / 4 * (4 / 15) ** 2,
        # ∫(1-x²)² x⁴ over (-1, 1) is 16/315
        3 / 4 * (16 / 315) ** 2,
        3,
    ),
}


@pytest.mark.parametrize("name", PROFILES)
def test_smooth_profiles_on_scattered_meshes(name: str) -> None:
    shape, profile, flow_rate, momentum, gain = PROFILES[name]
    errors = np.zeros((2, 2))
    for seed in range(3):
        points, rows = port(shape, 16, seed)
        motion = rigid_motion(np.random.default_rng(seed))
        flat = np.column_stack([points, np.zeros(len(points))])
        axis = motion[0][:, 2]
        surface = control_surface(
            flat @ motion[0].T + motion[1], rows, {"port": ("outlet", np.arange(len(rows)))}, closed=False
        )
        speed = profile(points[:, 0], points[:, 1])
        flow = lay_flow(surface, density=1.0, velocity=speed[:, None] * axis, at="nodes")
        for k, table in enumerate(both(surface, flow, facets=shape != "round")):
            errors[k] += [
                (table.total("mass_flow") / flow_rate - 1) ** 2,
                (table.total("momentum_flux") @ axis / momentum - 1) ** 2,
            ]
    assert (np.sqrt(errors[0] / errors[1]) > gain).all(), np.sqrt(errors / 3)


def test_a_parabola_is_exact_up_to_the_rim_of_the_facets() -> None:
    # quadratic data on a plane: exact on the polygon, whose integrals follow from its triangles by the mid-edge rule
    points, rows = port("round", 10, 0)
    speed = 1 - (points**2).sum(axis=1)
    surface = control_surface(
        np.column_stack([points, 0 * speed]), rows, {"port": ("outlet", np.arange(len(rows)))}, closed=False
    )
    flow = lay_flow(surface, density=1.0, velocity=speed[:, None] * np.array([0, 0, 1.0]), at="nodes")
    table = sharpened_table(surface, flow, facets_are_geometry=True, origin=near_origin(surface))
    corners = points[rows]
    middles = (corners + np.roll(corners, -1, axis=1)) / 2
    area = cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0]) / 2
    exact = float((area[:, None] * (1 - (middles**2).sum(axis=2)) / 3).sum())
    assert table.total("mass_flow") == pytest.approx(exact, rel=1e-9)


@pytest.mark.parametrize("size", [4, 7])
def test_a_quadratic_field_on_polygons_is_exact(size: int) -> None:
    # a plane of quads, or one of strips of heptagons; the volume flow of u² + uv over a known rectangle
    if size == 4:
        body = box((0, 0, 0), (2, 1, 1), 4, quads=True)
        skew = np.array([[1, 0.3, 0], [0, 1, 0], [0, 0, 1.0]])
        body = replace(body, points=body.points @ skew)
    else:
        body = swept([Station((0, 0, 0), 1.0), Station((0, 0, 1), 1.0)], 6, 4)
        # every corner of the outer quads stays, a point more on each of their inner and outer sides makes hexagons
        body = prism(np.array([[0, 0], [1, 0], [2, 0.2], [2.2, 1], [1.5, 1.7], [0.6, 1.6], [-0.2, 1.0]]), 0.0, 1.0, 4)
    surface = body.surface()
    top = [group.name for group in surface.groups].index("z+")
    x, y = surface.points[:, 0], surface.points[:, 1]
    speed = 1 + x**2 + x * y - y
    flow = lay_flow(surface, density=1.0, velocity=speed[:, None] * np.array([0, 0, 1.0]), at="nodes")
    table = sharpened_table(surface, flow, facets_are_geometry=True, origin=near_origin(surface))
    exact = 0.0
    for face in body.groups["z+"]:
        corners = body.points[body.faces[face]][:, :2]
        for k in range(1, len(corners) - 1):
            a, b, c = corners[0], corners[k], corners[k + 1]
            for u, v in ((a + b) / 2, (b + c) / 2, (c + a) / 2):
                exact += float(cross(b - a, c - a)) / 6 * (1 + u**2 + u * v - v)
    assert table.column("mass_flow")[top] == pytest.approx(exact, rel=1e-8)


# ---- what it does not depend on -------------------------------------------------------------


def tee() -> tuple[Solid, Callable[[Array], Array]]:
    """An elbow with smooth walls, and a velocity on its points."""
    body = elbow(2.0, (0.5, 0.4), 1.1, 14, 7, 4)

    def velocity(x: Array) -> Array:
        return np.column_stack([-x[:, 1], x[:, 0], 0.3 + x[:, 2] ** 2]) * (1 + 0.2 * x[:, :1] ** 2)

    return body, velocity


def laid(body: Solid, velocity: Array, traction: Array | None = None) -> tuple[ControlSurface, Flow]:
    surface = body.surface({"inlet": "inlet", "outlet": "outlet", "wall": "wall"})
    pressure = (velocity**2).sum(axis=1)
    return surface, lay_flow(surface, density=1.3, velocity=velocity, pressure=pressure, traction=traction, at="nodes")


@pytest.mark.parametrize("facets", [False, True])
def test_it_turns_and_moves_with_the_surface(facets: bool) -> None:
    body, field = tee()
    velocity = field(body.points)
    rotation, shift = rigid_motion(np.random.default_rng(1), 3.0)
    here = both(*laid(body, velocity), facets=facets)[1]
    there = sharpened_table(
        *laid(moved(body, rotation, shift), velocity @ rotation.T),
        facets_are_geometry=facets,
        origin=rotation @ here.origin + shift,
    )
    for name in ("area_vector", "momentum_flux", "pressure_force", "moment_of_momentum_flux", "position"):
        assert_allclose(there.column(name), here.column(name) @ rotation.T, atol=1e-11)
    for name in ("area", "mass_flow", "kinetic_energy_flux", "reversed_mass_flow"):
        assert_allclose(there.column(name), here.column(name), atol=1e-11)


@pytest.mark.parametrize("facets", [False, True])
def test_it_does_not_depend_on_the_order_of_things(facets: bool) -> None:
    body, field = tee()
    velocity = field(body.points)
    rng = np.random.default_rng(2)
    here = both(*laid(body, velocity), facets=facets)[1]
    points, faces = rng.permutation(len(body.points)), rng.permutation(len(body.faces))
    number = np.argsort(points)
    where = np.argsort(faces)
    shuffled = Solid(
        body.points[points],
        [np.roll(number[body.faces[f]], rng.integers(4)) for f in faces],
        {name: where[body.groups[name]] for name in reversed(list(body.groups))},
    )
    there = sharpened_table(*laid(shuffled, velocity[points]), facets_are_geometry=facets, origin=here.origin)
    assert_allclose(there.values[::-1], here.values, atol=1e-11 * np.abs(here.values).max())


def test_a_mirror_image_has_the_mirrored_table() -> None:
    body, field = tee()
    velocity = field(body.points)
    flip = np.array([1.0, 1.0, -1.0])
    image = replace(body, points=body.points * flip, faces=[face[::-1] for face in body.faces])
    here = both(*laid(body, velocity))[1]
    there = sharpened_table(*laid(image, velocity * flip), facets_are_geometry=False, origin=here.origin * flip)
    for name in ("area_vector", "momentum_flux", "pressure_force"):
        assert_allclose(there.column(name), here.column(name) * flip, atol=1e-12)
    assert_allclose(there.column("moment_of_pressure"), -here.column("moment_of_pressure") * flip, atol=1e-12)
    assert_allclose(there.column("mass_flow"), here.column("mass_flow"), atol=1e-12)


def test_threads_do_not_change_a_bit() -> None:
    surface = odd_body(5).surface()
    flow = landau_squire(1.5, 1.2, 0.3).lay(surface)
    origin = near_origin(surface)
    one, two = (
        sharpened_table(surface, flow, facets_are_geometry=False, origin=origin, threads=count).values
        for count in (1, 3)
    )
    assert np.array_equal(one, two)


def test_other_bodies_near_by_have_no_say() -> None:
    one, two = sphere(2), sphere(2, 0.5, (1.6, 0, 0))
    alone = [both(body.surface(), still_flow(body.surface()))[1] for body in (one, two)]
    pair = together(one=one, two=two).surface()
    table = sharpened_table(pair, still_flow(pair), facets_are_geometry=False, origin=alone[0].origin)
    assert_allclose(table.column("area"), [t.total("area") for t in alone], rtol=1e-13)


def test_density_stays_positive_where_data_jump() -> None:
    surface = box((0, 0, 0), (1, 1, 1), 4).surface()
    density = np.where(surface.points[:, 0] > 0.6, 1000.0, 1e-3)
    for at in ("nodes", "faces"):
        values = density if at == "nodes" else density[surface.connectivity.reshape(-1, 3)[:, 0]]
        velocity = array_field(surface, "velocity", 3, np.ones((surface.point_count, 3)), at="nodes")
        flow = replace(lay_flow(surface, density=values, velocity=(1, 1, 1), at=at), velocity=velocity)
        _, sharp = both(surface, flow, facets=True)
        assert np.isfinite(sharp.values).all()
        assert (sharp.column("density_area") > 0).all()


@pytest.mark.parametrize(("triangle", "degree"), [(True, 6), (False, 7)])
def test_rules_are_exact_to_their_degree_and_no_further(triangle: bool, degree: int) -> None:
    weight, value, _ = _rule(triangle=triangle)
    # places from the shape functions of the corners and middles of the reference face
    if triangle:
        nodes = np.array([[0, 0], [1, 0], [0, 1], [0.5, 0], [0.5, 0.5], [0, 0.5]])
    else:
        nodes = np.array([[-1, -1], [1, -1], [1, 1], [-1, 1], [0, -1], [1, 0], [0, 1], [-1, 0], [0, 0]])
    u, v = (value @ nodes).T
    nodes_1d, weights_1d = np.polynomial.legendre.leggauss(12)

    def exact(i: int, j: int) -> float:
        if triangle:
            s, t = (nodes_1d + 1) / 2, weights_1d / 2
            return float(sum(t * s**i * (1 - s) ** (j + 1))) / (j + 1)
        return float((weights_1d @ nodes_1d**i) * (weights_1d @ nodes_1d**j))

    off = [
        max(abs(float(weight @ (u**i * v**j)) - exact(i, j)) for i in range(total + 1) for j in [total - i])
        for total in range(degree + 2)
    ]
    assert max(off[: degree + 1]) < 1e-15 * 4
    assert off[degree + 1] > 1e-7


def test_a_kink_at_the_border_of_two_groups_does_no_harm() -> None:
    # one plane, two groups: quadratic in each, with another slope on the far side of the border
    across = 8
    line = np.linspace(-1, 1, across + 1)
    points = np.stack(np.meshgrid(line, line, indexing="ij"), axis=-1).reshape(-1, 2)
    here = (np.arange(across)[:, None] * (across + 1) + np.arange(across)).ravel()
    rows = np.column_stack([here, here + across + 1, here + across + 2, here + 1])
    left = points[rows].mean(axis=1)[:, 0] < 0
    groups = {"left": ("open", left), "right": ("open", ~left)}
    surface = control_surface(np.column_stack([points, 0 * points[:, 0]]), rows, groups, closed=False)
    x, y = points.T
    speed = np.where(x < 0, 3 * x**2 - 5 * x, x**2 + 2 * x) * (1 + y)
    flow = lay_flow(surface, density=1.0, velocity=speed[:, None] * np.array([0, 0, 1.0]), at="nodes")
    table = sharpened_table(surface, flow, facets_are_geometry=True, origin=near_origin(surface))
    # ∫(3x² - 5x) over (-1, 0) and ∫(x² + 2x) over (0, 1), times 2; the cubic part in y is odd
    assert_allclose(table.column("mass_flow"), [2 * (1 + 2.5), 2 * (1 / 3 + 1)], rtol=1e-8)
