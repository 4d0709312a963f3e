"""Half, quarter and eighth models, mirrored: every column of the table against the table of the whole model."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from itertools import product

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from fluxmesh import balance_of, lay_flow
from fluxmesh.balance.balance import balance_table
from fluxmesh.balance.mirror import Plane, about_origin, mirrored, symmetry_planes, whole_model
from fluxmesh.balance.setting import GroupData, Hardware, Setting
from fluxmesh.errors import GroupError, SurfaceError
from fluxmesh.field.flow import face_arrays_of, integrate_flow, near_origin, still_flow
from fluxmesh.integral.layout import AT_FACE, AT_NODE, FieldArrays, FlowArrays, PressureTerms, make_runs
from fluxmesh.integral.plain import integrate_plainly
from fluxmesh.integral.table import BASIS, WIDTH, IntegralTable, column_slice
from fluxmesh.surface.surface import ControlSurface, Group, Role
from tests.flows import face_frames, poiseuille
from tests.solids import Solid, box, moved, pipe, rigid_motion

CUTS = ("cut x", "cut y", "cut z")


# ---- bodies that are symmetric about some coordinate planes ---------------------------------


def star(seed: int, axes: tuple[int, ...]) -> Solid:
    """A rough body, star-shaped about the origin, symmetric about the planes across `axes` only; two groups."""
    rng = np.random.default_rng(seed)
    points = np.vstack([np.eye(3), -np.eye(3)])
    faces = np.array([[0, 1, 2], [1, 3, 2], [3, 4, 2], [4, 0, 2], [1, 0, 5], [3, 1, 5], [4, 3, 5], [0, 4, 5]])
    for _ in range(2):
        edges, number = np.unique(
            np.sort(np.concatenate([faces[:, [0, 1]], faces[:, [1, 2]], faces[:, [2, 0]]]), axis=1),
            axis=0,
            return_inverse=True,
        )
        middle = points[edges].mean(axis=1)
        ab, bc, ca = (len(points) + number.reshape(3, -1)).reshape(3, -1)
        a, b, c = faces.T
        faces = np.concatenate(
            [np.column_stack(part) for part in ((a, ab, ca), (b, bc, ab), (c, ca, bc), (ab, bc, ca))]
        )
        points = np.concatenate([points, middle])
    folded = points.copy()
    folded[:, axes] = np.abs(folded[:, axes])
    orbits, orbit = np.unique(np.round(folded, 9) + 0.0, axis=0, return_inverse=True)
    radius = rng.uniform(0.6, 1.4, len(orbits))[orbit.ravel()]
    points = points / np.linalg.norm(points, axis=1)[:, None] * radius[:, None]
    middle = folded[faces].mean(axis=1)
    lid = middle @ [0.3, 0.5, 0.7] > 0.4
    return Solid(points, list(faces), {"lid": np.flatnonzero(lid), "side": np.flatnonzero(~lid)})


def brick(seed: int, axes: tuple[int, ...]) -> Solid:
    """A box in quads; opposite sides across the planes are one group, for a group of the whole reaches over them."""
    high = np.array([1.0, 0.7, 0.5])
    low = -high
    low[[k for k in range(3) if k not in axes]] *= 0.4
    made = box(low, high, 2 + 2 * (seed % 2), quads=True)
    groups = {side[0] if "xyz".index(side[0]) in axes else side: faces for side, faces in made.groups.items()}
    for k in axes:
        groups["xyz"[k]] = np.concatenate([made.groups[f"{'xyz'[k]}{sign}"] for sign in "-+"])
    return replace(made, groups=groups)


def tube(seed: int, axes: tuple[int, ...]) -> Solid:
    """A pipe along z; its ends are one group where it is cut across z."""
    made = moved(pipe(0.5, 2.0, 8, 2, 2), np.eye(3), (0, 0, -1.0))
    ends = {name: made.groups[name] for name in ("inlet", "outlet")}
    if 2 in axes:
        ends = {"ends": np.concatenate(list(ends.values()))}
    return replace(made, groups={"wall": made.groups["wall"], **ends})


BODIES: dict[str, Callable[[int, tuple[int, ...]], Solid]] = {"brick": brick, "star": star, "tube": tube}


def part_of(body: Solid, axes: tuple[int, ...]) -> Solid:
    """The part where the coordinates `axes` are positive, closed by plane cuts.

    The cuts are fans from the origin to the edges that the skin ends at.
    """
    middle = np.array([body.points[face].mean(axis=0) for face in body.faces])
    kept = np.flatnonzero((middle[:, axes] > 0).all(axis=1))
    faces = [body.faces[f] for f in kept]
    edges = {(int(a), int(b)) for face in faces for a, b in zip(face, np.roll(face, -1))}
    centre = len(body.points)
    groups = {name: np.flatnonzero(np.isin(kept, members)) for name, members in body.groups.items()}
    groups = {name: members for name, members in groups.items() if members.size}
    for a, b in sorted(edges):
        if (b, a) in edges:
            continue
        axis = next(k for k in axes if np.abs(body.points[[a, b], k]).max() < 1e-12)
        groups[CUTS[axis]] = np.append(groups.get(CUTS[axis], np.empty(0, np.int64)), len(faces))
        faces.append(np.array([b, a, centre]))
    return Solid(np.vstack([body.points, np.zeros(3)]), faces, groups)


# ---- flows that are symmetric about the coordinate planes -----------------------------------


def symmetric(raw: np.ndarray, images: list[np.ndarray]) -> np.ndarray:
    """Mean of values at the images of places, reflected back: (images, n, 3) or (images, n)."""
    if raw.ndim == 3:
        raw = np.einsum("gni,gij->gnj", raw, np.array(images))
    return np.asarray(raw.mean(axis=0))


def smooth(rng: np.random.Generator, shape: tuple[int, ...]) -> Callable[[np.ndarray], np.ndarray]:
    """A random smooth function of position without any symmetry."""
    wave, phase = rng.standard_normal((*shape, 3)), rng.uniform(0, 6, shape)
    return lambda x: np.sin(np.einsum("...k,nk->n...", wave, x) + phase)


def flow_arrays(
    seed: int, axes: tuple[int, ...], nodes: np.ndarray, faces: np.ndarray, groups: int, steady: bool
) -> FlowArrays:
    """Fields at places in the body's own frame: velocity, pressure, density on points, traction, mass on faces."""
    rng = np.random.default_rng(seed + 1)
    images = [
        np.diag([s if k in axes else 1.0 for k, s in enumerate(signs)]) for signs in product((1.0, -1.0), repeat=3)
    ]

    def field(components: int, base: float, at: int, places: np.ndarray) -> FieldArrays:
        shape = (3,) if components == 3 else ()
        made = smooth(rng, shape)
        values = base + symmetric(np.array([made(places @ image) for image in images]), images)
        none = values[:0]
        node, face = (values, none) if at == AT_NODE else (none, values)
        return FieldArrays(np.full(groups, at, np.int8), node, face, np.zeros((groups, *shape)), none, 1.0)

    return FlowArrays(
        velocity=field(3, 0.0, AT_NODE, nodes),
        traction=field(3, 0.0, AT_FACE, faces),
        pressure=field(1, 1.0, AT_NODE, nodes),
        density=field(1, 3.0, AT_NODE, nodes),
        mass=field(1, 0.0, AT_FACE, faces)
        if steady
        else FieldArrays(np.zeros(groups, np.int8), np.empty(0), np.empty(0), np.zeros(groups), np.empty(0), 1.0),
        terms=PressureTerms(False, 0.0, 0.0, 0.0, 0.0),
        sample_start=np.empty(0, np.int64),
    )


def turned_fields(flow: FlowArrays, rotation: np.ndarray) -> FlowArrays:
    def turn(field: FieldArrays) -> FieldArrays:
        return field._replace(node=field.node @ rotation.T, face=field.face @ rotation.T)

    return flow._replace(velocity=turn(flow.velocity), traction=turn(flow.traction))


def integrated(surface: ControlSurface, flow: FlowArrays, origin: np.ndarray) -> IntegralTable:
    """The table by the plain twin of the kernel, which takes any origin."""
    return integrate_plainly(
        mesh=face_arrays_of(surface),
        flow=flow,
        runs=make_runs(surface.group_of_face, surface.kinds),
        origin=origin,
        still_groups=np.zeros(len(surface.groups), np.bool_),
    )


def face_middles(solid: Solid) -> np.ndarray:
    return np.array([solid.points[face].mean(axis=0) for face in solid.faces])


@settings(max_examples=60, deadline=None)
@given(
    seed=st.integers(0, 2**32 - 1),
    shape=st.sampled_from(sorted(BODIES)),
    axes=st.sampled_from([(0,), (1,), (0, 1), (1, 0), (0, 1, 2), (2, 1)]),
    far=st.sampled_from([0.0, 10.0, 1e5]),
    by_mass=st.booleans(),
)
def test_a_mirrored_part_has_every_integral_of_the_whole(
    seed: int, shape: str, axes: tuple[int, ...], far: float, by_mass: bool
) -> None:
    rng = np.random.default_rng(seed)
    body = BODIES[shape](seed, axes)
    part = part_of(body, axes)
    rotation, shift = rigid_motion(rng, far)
    tables, surfaces = [], []
    for solid in (body, part):
        surface = moved(solid, rotation, shift).surface({name: "symmetry" for name in CUTS if name in solid.groups})
        flow = flow_arrays(seed, axes, solid.points, face_middles(solid), len(surface.groups), by_mass)
        surfaces.append(surface)
        tables.append((surface, turned_fields(flow, rotation)))
    half = integrated(*tables[1], near_origin(surfaces[1]))
    planes = symmetry_planes(half, surfaces[1].groups)
    assert len(planes) == len(axes)
    cuts = np.array([group.role is Role.SYMMETRY for group in surfaces[1].groups])
    found = mirrored(half, planes, cuts)
    assert (found.values[cuts] == 0).all()
    # the origin is on the planes, still near
    for plane in planes:
        assert abs((found.origin - plane.point) @ plane.normal) < 1e-14 + 1e-15 * far
    assert np.linalg.norm(found.origin - shift) < 3.0
    whole = integrated(*tables[0], found.origin)
    # quantities are of order one over an area of about ten; points far off are rounded themselves
    noise = 3e-13 + 1e-14 * far
    rows = [[group.name for group in surfaces[1].groups].index(group.name) for group in surfaces[0].groups]
    for name in BASIS:
        ours, exact = found.column(name)[rows], whole.column(name)
        assert_allclose(ours, exact, rtol=0, atol=noise * (3 + np.abs(exact).max()), err_msg=name)
        if shape == "star" and len(axes) == 1 and name != "reversed_mass_flow":
            assert np.abs(exact).max() > 1e-4, name  # nothing is compared with nothing


@settings(max_examples=20, deadline=None)
@given(seed=st.integers(0, 2**32 - 1))
def test_a_table_about_another_origin_has_the_integrals_taken_there(seed: int) -> None:
    rng = np.random.default_rng(seed)
    body = star(seed, ())
    surface = body.surface()
    flow = flow_arrays(seed, (), body.points, face_middles(body), len(surface.groups), bool(seed % 2))
    one, two = rng.standard_normal((2, 3))
    found, exact = about_origin(integrated(surface, flow, one), two), integrated(surface, flow, two)
    for name in BASIS:
        assert_allclose(
            found.column(name), exact.column(name), rtol=0, atol=1e-12 * (3 + np.abs(exact.column(name)).max())
        )


def test_the_test_bodies_are_cut_right() -> None:
    # a guard of the test above: parts are closed, cuts are plane, and a quarter has a quarter of the volume
    for shape, make in BODIES.items():
        for axes in ((0,), (0, 1), (0, 1, 2)):
            body = make(3, axes)
            surface = part_of(body, axes).surface()
            assert surface.closed
            assert surface.notes == (), shape
            table = integrate_flow(surface, still_flow(surface))
            whole = integrate_flow(body.surface(), still_flow(body.surface()))
            volume = np.trace(table.total("position_normal").reshape(3, 3)) / 3
            assert_allclose(
                2 ** len(axes) * volume, np.trace(whole.total("position_normal").reshape(3, 3)) / 3, rtol=1e-12
            )


def test_every_integral_is_mirrored_by_its_kind() -> None:
    # a new vector or tensor in the table must say how it is mirrored; scalars stay
    rng = np.random.default_rng(0)
    table = IntegralTable(rng.standard_normal((2, WIDTH)), np.zeros(3))
    found = mirrored(table, [Plane(np.zeros(3), np.array([0.0, 0.0, 1.0]))])
    for name, (_, components, integrand, _) in BASIS.items():
        old, new = table.column(name), found.column(name)
        if components == 1:
            assert_allclose(new, 2 * old, rtol=1e-15)
        elif components == 3:
            # a moment keeps what lies across the plane, a vector what lies in it
            sign = -1.0 if integrand.startswith("x ×") or integrand.startswith("-x ×") else 1.0
            assert_allclose(new, old * (1 + sign * np.array([1, 1, -1.0])), rtol=1e-15, atol=0)


# ---- physics --------------------------------------------------------------------------------


def half_pipe(along: tuple[float, float, float] = (0, 0, 0)) -> tuple[ControlSurface, ControlSurface, tuple]:
    """A laminar pipe along z and its half x > 0, both with exact data."""
    profile = poiseuille(0.5, 2.0, 40.0, 870.0)
    body = pipe(0.5, 2.0, 16, 3, 3)
    part = part_of(moved(body, np.eye(3), (0, 0, -1.0)), (0,))
    part = moved(part, np.eye(3), (0, 0, 1.0))
    roles = {"inlet": "inlet", "outlet": "outlet", "cut x": "symmetry", "wall": "wall"}
    laid = []
    for solid in (body, part):
        surface = solid.surface(roles)
        middle, normal = face_frames(surface)
        head = 870.0 * surface.points @ np.array(along)
        flow = lay_flow(
            surface,
            density=870.0,
            velocity=profile.velocity(surface.points),
            pressure=5000.0 + profile.pressure(surface.points) + head,
            traction=profile.traction(middle, normal),
            gravity=along,
        )
        laid.append((surface, flow))
    return laid[0][0], laid[1][0], tuple(flow for _, flow in laid)


def test_a_half_pipe_reports_the_loads_of_the_whole_pipe() -> None:
    anchor, gravity = (0.3, -0.2, 0.1), (0.0, -4.0, -9.0)
    whole_surface, surface, flows = half_pipe(gravity)
    hardware = Hardware(30.0, (0.1, 0.2, 0.9))
    exact = balance_of(whole_surface, flows[0], anchor=anchor, hardware=hardware).balance
    part = balance_of(surface, flows[1], anchor=anchor, hardware=hardware).balance
    table, setting = whole_model(part.table, part.setting, head_restored=True)
    assert [group.name for group in setting.groups] == [g.name for g in part.setting.groups if g.name != "cut x"]
    assert setting.hardware == hardware
    found = balance_table(table, setting)
    assert found.complete
    assert_allclose(found.enclosed.volume, exact.enclosed.volume, rtol=1e-13)
    assert_allclose(found.fluid.centre, exact.fluid.centre, rtol=0, atol=1e-14)
    size = exact.momentum.size()
    for ours, other in (
        (found.load.from_walls, exact.load.from_walls),
        (found.load.from_balance, exact.load.from_balance),
    ):
        assert_allclose(ours.force, other.force, rtol=0, atol=1e-13 * size)
        assert_allclose(ours.moment, other.moment, rtol=0, atol=1e-13 * size)
    assert_allclose(found.reaction.wrench.moment, exact.reaction.wrench.moment, rtol=0, atol=1e-13 * size)
    assert found.momentum.relative() < 1e-13
    assert_allclose(found.mass.inflow, exact.mass.inflow, rtol=1e-13)
    for name, port in exact.ports.items():
        assert_allclose(found.ports[name].momentum_factor, port.momentum_factor, rtol=1e-12)
        assert_allclose(found.ports[name].mean_pressure_area, port.mean_pressure_area, rtol=1e-12)


def test_a_head_across_the_plane_is_refused_and_only_that() -> None:
    _, surface, flows = half_pipe((3.0, 0.0, -9.0))
    part = balance_of(surface, flows[1]).balance
    with pytest.raises(
        SurfaceError,
        match=r"surface\.mirror: gravity has a component of 3 m/s² across the symmetry plane with the "
        r"normal \(-1, 0, 0\), so the hydrostatic head .* not symmetric\. Mirror the mesh",
    ):
        whole_model(part.table, part.setting, head_restored=True)
    whole_model(part.table, part.setting, head_restored=False)
    tilted = replace(part.setting, gravity=(1e-6, 0.0, -9.0))  # rounding of the mesh
    whole_model(part.table, tilted, head_restored=True)


# ---- planes ---------------------------------------------------------------------------------


def cut_table(*cuts: tuple[np.ndarray, np.ndarray, float]) -> tuple[IntegralTable, list[Group]]:
    """A table of plane cuts (centroid, area vector, area), and a wall."""
    values = np.zeros((len(cuts) + 1, WIDTH))
    for k, (centroid, vector, area) in enumerate(cuts):
        values[k, column_slice("area")] = area
        values[k, column_slice("area_vector")] = vector
        values[k, column_slice("position")] = np.asarray(centroid) * area
    values[-1, column_slice("area")] = 10.0
    groups = [Group(f"cut {k}", Role.SYMMETRY) for k in range(len(cuts))]
    return IntegralTable(values, np.array([1.0, 2.0, 3.0])), [*groups, Group("shell", Role.WALL)]


def test_planes_go_through_the_centroids_and_merge() -> None:
    one = ((0.5, 0, 0), (2.0, 0, 0), 2.0)
    two = ((0.5, 3, 1), (1.0, 0, 0), 1.0)
    three = ((0.1, -1, 0.2), (0, -4.0, 0), 4.0)
    planes = symmetry_planes(*cut_table(one, three, two))
    assert len(planes) == 2
    assert_allclose(planes[0].normal, [1, 0, 0], rtol=0, atol=0)
    assert_allclose(planes[0].point, [1.5, 3, 3 + 1 / 3], rtol=1e-15)  # area-weighted
    assert_allclose(planes[1].normal, [0, -1, 0], rtol=0, atol=0)
    assert_allclose(planes[1].point, [1.1, 1, 3.2], rtol=1e-15)


def test_cuts_that_are_no_planes_are_named() -> None:
    with pytest.raises(GroupError, match=r"group 'cut 0': it is not a plane cut: its area vector is 0\.7071068 of its"):
        symmetry_planes(*cut_table(((0, 0, 0), (1.0, 1.0, 0), 2.0)))
    with pytest.raises(GroupError, match="group 'cut 1': it is not a plane cut: its area vector is 0 of its area of 0"):
        symmetry_planes(*cut_table(((0, 0, 0), (1.0, 0, 0), 1.0), ((0, 0, 0), (0, 0, 0), 0.0)))
    with pytest.raises(GroupError, match="nothing to mirror at: no group has the role symmetry"):
        symmetry_planes(*cut_table())
    symmetry_planes(*cut_table(((0, 0, 0), (1.0, 0, 0), 1.0 + 5e-7)))


@pytest.mark.parametrize(
    ("second", "message"),
    [
        (((0.2, 0, 0), (1.0, 0, 0)), r"normal \(1, 0, 0\) are parallel, 0\.2 m apart.*no end"),
        (((-3.0, 0, 0), (-1.0, 0, 0)), r"normal \(1, 0, 0\) are parallel, 3 m apart"),
        (((0.0, 0, 0), (-1.0, 0, 0)), r"are parallel, 0 m apart"),
        (((0, 0, 0), (0.5, 3**0.5 / 2, 0)), r"normals \(1, 0, 0\) and \(0\.5, 0\.866, 0\) meet at 60°.*right angles"),
    ],
)
def test_planes_not_at_right_angles_are_refused(second: tuple, message: str) -> None:
    table, groups = cut_table(((0, 0, 0), (1.0, 0, 0), 1.0), (*second, 1.0))
    planes = symmetry_planes(table, groups)
    with pytest.raises(SurfaceError, match=message):
        mirrored(table, planes)
    setting = Setting(tuple(groups), GroupData(*[np.ones(3, np.bool_)] * 3), closed=True)
    with pytest.raises(SurfaceError, match=message):
        whole_model(table, setting, head_restored=False)


def test_no_plane_and_no_normal_are_refused() -> None:
    table, _ = cut_table()
    with pytest.raises(SurfaceError, match="there is no plane to mirror at"):
        mirrored(table, [])
    with pytest.raises(SurfaceError, match="normal of a symmetry plane is"):
        mirrored(table, [Plane(np.zeros(3), np.zeros(3))])


def test_planes_that_lean_by_rounding_are_set_upright() -> None:
    table = IntegralTable(np.random.default_rng(4).standard_normal((1, WIDTH)), np.zeros(3))
    for lean in (0.0, 3e-7, 5e-5):
        planes = [Plane(np.zeros(3), np.array([2.0, lean, 0])), Plane(np.zeros(3), np.array([lean, 1.0, 0]))]
        found = mirrored(table, planes)
        # images of images fall on one another, whatever the order
        again = mirrored(table, planes[::-1])
        assert_allclose(found.values, again.values, rtol=0, atol=1e-13)
        force = found.column("pressure_force")[0]
        assert_allclose(force[:2], 0, rtol=0, atol=4 * np.abs(table.values).max() * lean + 1e-14)
    with pytest.raises(SurfaceError, match="meet at"):
        mirrored(table, [Plane(np.zeros(3), np.array([1.0, 0, 0])), Plane(np.zeros(3), np.array([3e-4, 1.0, 0]))])
