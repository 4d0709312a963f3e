"""The kernel's integrals on a few faces, against quadrature over the definitions that knows nothing of the package.

The meshes are so small that scripts/mutants can run this file with the kernels interpreted.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from fluxmesh.integral.each_face import integrate_each_face
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
    runs_over,
)
from fluxmesh.integral.samples import sample_places
from fluxmesh.integral.table import BASIS, column_slice
from tests.test_core_sums import GROUPS, Array, Cloud

N = len(GROUPS)
ORIGIN = (0.5, 0.2, -0.4)
TERMS = PressureTerms(True, 0.3, 0.1, -0.2, 0.4)
_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(7)
_S, _H = (_NODES + 1) / 2, _WEIGHTS / 2
# on the triangle (0, 0), (1, 0), (0, 1): area coordinates and weights, for polynomials of degree 12
TRIANGLE = np.array([(1 - u - v * (1 - u), u, v * (1 - u)) for u in _S for v in _S])
TRIANGLE_WEIGHTS = np.array([2 * a * b * (1 - u) for u, a in zip(_S, _H) for b in _H])
SQUARE = [(u, v, a * b) for u, a in zip(_NODES, _WEIGHTS) for v, b in zip(_NODES, _WEIGHTS)]


@dataclass(frozen=True, eq=False)
class Points(Cloud):
    """Quadrature points of faces, with their signed areas, and the mass flow of each where it is given."""

    carried: Array
    given: Array
    signed: Array

    @property
    def area(self) -> Array:
        return self.signed

    @property
    def through(self) -> Array:
        return np.where(self.given, self.carried / self.rho, (self.v * self.n).sum(axis=1))

    @property
    def mass(self) -> Array:
        return np.where(self.given, self.carried, self.rho * self.through)


def faces_of(family: str) -> tuple[list[list[int]], Array]:
    """Faces and places of points; each face has points of its own."""
    rng = np.random.default_rng(5)
    rings = {
        "triangles": [3] * 7,
        "polygons": [3, 4, 5, 3, 6, 4],
        "curved": [6, 8, 3, 9, 6, 4],
    }[family]
    faces, points = [], []
    for size in rings:
        corners = {6: 3, 8: 4, 9: 4}.get(size, size) if family == "curved" else size
        angle = 2 * np.pi * np.arange(corners) / corners
        ring = np.column_stack([np.cos(angle), np.sin(angle), np.zeros(corners)])
        rows = np.concatenate([ring, (ring + np.roll(ring, -1, axis=0)) / 2, np.zeros((1, 3))])[:size]
        faces.append(list(range(len(points), len(points) + size)))
        points += list(rows + 0.1 * rng.normal(size=rows.shape) + rng.normal(size=3))
    if family == "polygons":
        # a dent: the third corner of the pentagon is drawn beyond the middle
        middle = np.mean([points[k] for k in faces[2]], axis=0)
        points[faces[2][2]] = middle - 0.3 * (points[faces[2][2]] - middle)
    return faces, np.array(points)


def shapes(size: int, u: float, v: float) -> tuple[Array, Array, Array]:
    """Shape functions of a curved face and their derivatives, solved for from their values at its points."""
    if size == 6:
        corner, powers = (
            [(0, 0), (1, 0), (0, 1), (0.5, 0), (0.5, 0.5), (0, 0.5)],
            [(0, 0), (1, 0), (0, 1), (2, 0), (1, 1), (0, 2)],
        )
    else:
        corner = [(-1, -1), (1, -1), (1, 1), (-1, 1), (0, -1), (1, 0), (0, 1), (-1, 0), (0, 0)][:size]
        powers = [(i, j) for i in range(3) for j in range(3)][:9]
        powers = [pair for pair in powers if size == 9 or pair != (2, 2)]
    basis = np.array([[a**i * b**j for i, j in powers] for a, b in corner])
    turn = np.linalg.inv(basis)

    def at(monomials: list[float]) -> Array:
        return np.array(monomials) @ turn

    return (
        at([u**i * v**j for i, j in powers]),
        at([i * u ** max(i - 1, 0) * v**j for i, j in powers]),
        at([j * u**i * v ** max(j - 1, 0) for i, j in powers]),
    )


def pieces(face: list[int], points: Array, curved: bool) -> list[tuple[Array, Array, Array]]:
    """Quadrature points of a face: weights over its points, area vectors, and signed areas."""
    size = len(face)
    x = points[face]
    found = []
    if curved and size >= 6:
        rule = SQUARE if size > 6 else [(b, c, w / 2) for (_, b, c), w in zip(TRIANGLE, TRIANGLE_WEIGHTS)]
        for u, v, weight in rule:
            value, by_u, by_v = shapes(size, u, v)
            vector = weight * np.cross(by_u @ x, by_v @ x)
            found.append((value, vector, np.linalg.norm(vector)))
        return found
    fans = [np.eye(3)]
    if size > 3:
        fans = [np.array([np.eye(size)[k], np.eye(size)[(k + 1) % size], np.full(size, 1 / size)]) for k in range(size)]
    vectors = [np.cross(*(fan[1:] @ x - fan[0] @ x)) / 2 for fan in fans]
    whole = np.sum(vectors, axis=0)
    for fan, vector in zip(fans, vectors):
        sign = -1.0 if vector @ whole < 0 else 1.0
        for area, weight in zip(TRIANGLE, TRIANGLE_WEIGHTS):
            found.append((area @ fan, weight * vector, sign * weight * np.linalg.norm(vector)))
    return found


def values(rng: np.random.Generator, count: int, components: int, base: float) -> Array:
    return base + 0.3 * rng.normal(size=count if components == 1 else (count, components))


def case(family: str, code: int, mass: bool) -> tuple[FaceArrays, FlowArrays, Array]:
    faces, points = faces_of(family)
    sizes = [len(face) for face in faces]
    curved = family == "curved"
    mesh = FaceArrays(
        points,
        np.concatenate(faces).astype(np.int64),
        np.empty(0, np.int64) if family == "triangles" else np.cumsum([0, *sizes]).astype(np.int64),
        np.array([{6: 1, 8: 2, 9: 3}.get(s, 0) for s in sizes], np.int8) if curved else np.empty(0, np.int8),
    )
    rng = np.random.default_rng(11)
    owner = (np.arange(len(faces)) % 2).astype(np.int32)
    start = sample_places(mesh, np.ones(len(faces), np.bool_)).start if code == AT_SAMPLE else np.zeros(1, np.int64)
    counts = {AT_NODE: len(points), AT_FACE: len(faces), PER_GROUP: N, AT_SAMPLE: int(start[-1])}

    def field(components: int, base: float, where: int) -> FieldArrays:
        stores = {at: values(rng, count, components, base) for at, count in counts.items()}
        # two groups of faces: the second always has one value a group, to try both in one table
        at = np.full(N, PER_GROUP, np.int8)
        at[0] = where
        if where in (ABSENT, AT_SAMPLE):
            at[1:] = where
        return FieldArrays(at, stores[AT_NODE], stores[AT_FACE], stores[PER_GROUP], stores[AT_SAMPLE], 1.25)

    flow = FlowArrays(
        velocity=field(3, 0.5, code),
        traction=field(3, 0.0, code),
        pressure=field(1, 2.0, code),
        density=field(1, 3.0, PER_GROUP if code == AT_SAMPLE else code),
        mass=field(1, 0.2, AT_FACE if mass else ABSENT),
        terms=TERMS,
        sample_start=start if code == AT_SAMPLE else np.empty(0, np.int64),
    )
    if mass:
        flow = flow._replace(mass=flow.mass._replace(where=np.array([AT_FACE, *[ABSENT] * (N - 1)], np.int8)))
    return mesh, flow, owner


def at_points(field: FieldArrays, group: int, number: int, face: list[int]) -> Array:
    """Values of a field at the points of a face."""
    if field.where[group] == AT_NODE:
        return field.scale * field.node[face]
    one = field.scale * field.face[number] if field.where[group] == AT_FACE else field.group[group]
    return np.repeat(np.asarray(one)[None], len(face), axis=0)


def gauge(value: Array, pressure: Array, density: Array, head: Array, straight: bool) -> float:
    """Density times kinematic pressure, and the head, where the weights over a face's points are `value`."""
    if not straight:
        return float((value @ pressure) * (value @ density) + value @ head)
    if value.size == 3:
        return float(value @ (pressure * density + head))
    # made at the corners of a piece of the fan, and linear between them; the centre has the mean of all points
    centre = value.min() * value.size
    corner = value - value.min()
    return float(corner @ (pressure * density + head) + centre * (pressure.mean() * density.mean() + head.mean()))


def expected(mesh: FaceArrays, flow: FlowArrays, owner: Array, faces: list[list[int]], curved: bool) -> Points:
    """Every face as quadrature points with the values that fields have there."""
    rows: list[tuple[object, ...]] = []
    for number, face in enumerate(faces):
        group, some = int(owner[number]), pieces(face, mesh.points, curved)
        v, t, p, rho = (
            at_points(field, group, number, face)
            for field in (flow.velocity, flow.traction, flow.pressure, flow.density)
        )
        head = TERMS.offset + (mesh.points[face] - np.array(ORIGIN)) @ np.array([0.1, -0.2, 0.4])
        whole = sum(area for _, _, area in some)
        given = flow.mass.where[group] == AT_FACE
        for value, vector, area in some:
            straight, supplied = not curved or len(face) < 6, flow.pressure.where[group] == PER_GROUP
            pressure = float(p[0]) if supplied else gauge(value, p, rho, head, straight)
            share = area / whole * flow.mass.scale * flow.mass.face[number] if given else 0.0
            place = value @ mesh.points[face]
            rows.append((group, place, vector, value @ v, value @ t, pressure, value @ rho, share, given, area))
    columns = [np.array(column) for column in zip(*rows)]
    return Points(*columns)


# what is no polynomial of a degree that six points on a triangle can do
ROUGH = ("speed_area", "reversed_mass_flow", "dynamic_pressure_mass_flow")


@pytest.mark.parametrize("mass", [False, True], ids=["by velocity", "mass given"])
@pytest.mark.parametrize("code", [AT_NODE, AT_FACE], ids=["nodes", "faces"])
@pytest.mark.parametrize("family", ["triangles", "polygons", "curved"])
def test_the_table_is_quadrature_over_its_definitions(family: str, code: int, mass: bool) -> None:
    mesh, flow, owner = case(family, code, mass)
    faces, _ = faces_of(family)
    runs = make_runs(owner, mesh.kinds if mesh.kinds.size else None, length=2)
    still = np.zeros(N, np.bool_)
    found = integrate(mesh=mesh, flow=flow, runs=runs, origin=np.array(ORIGIN), still_groups=still, threads=1)
    cloud = expected(mesh, flow, owner, faces, family == "curved")
    table = cloud.table(ORIGIN)
    # over the density between two densities there is no polynomial; sizes of curved area vectors are roots
    rough = (*ROUGH, "volume_flow", "pressure_volume_flow", "normal_momentum") if mass and code == AT_NODE else ROUGH
    for name in BASIS:
        place = column_slice(name)
        exact = not (name in rough and (code == AT_NODE or family == "curved"))
        # on curved faces both rules are of high degree, and lengths of normals no polynomials
        tolerance = 0.02 if not exact else 3e-5 if family == "curved" else 2e-11
        scale = np.abs(table.values[:2, place]).max() + 1.0
        assert_allclose(
            found.values[:2, place] / scale, table.values[:2, place] / scale, rtol=0, atol=tolerance, err_msg=name
        )
    assert_array_equal(found.values[2:], 0.0)


@pytest.mark.parametrize("family", ["triangles", "polygons", "curved"])
def test_samples_of_linear_fields_are_those_fields(family: str) -> None:
    # evaluated at the quadrature points, or interpolated there: the same numbers in another way
    mesh, flow, owner = case(family, AT_SAMPLE, False)
    places = sample_places(mesh, np.ones(owner.size, np.bool_)).places
    rng = np.random.default_rng(2)
    slope, level = rng.normal(size=(3, 3)), rng.normal(size=3)
    at = np.full(N, AT_SAMPLE, np.int8)
    plain = PressureTerms(False, 0.3, 0.1, -0.2, 0.4)
    sampled = flow._replace(
        velocity=flow.velocity._replace(where=at, sample=places @ slope + level),
        traction=flow.traction._replace(where=at, sample=places @ slope[::-1]),
        pressure=flow.pressure._replace(where=at, sample=places @ level),
        terms=plain,
    )
    nodes = np.full(N, AT_NODE, np.int8)
    x = mesh.points
    on_points = sampled._replace(
        velocity=flow.velocity._replace(where=nodes, node=x @ slope + level),
        traction=flow.traction._replace(where=nodes, node=x @ slope[::-1]),
        pressure=flow.pressure._replace(where=nodes, node=x @ level),
        sample_start=np.empty(0, np.int64),
    )
    runs = make_runs(owner, mesh.kinds if mesh.kinds.size else None)
    shared = {"mesh": mesh, "runs": runs, "origin": np.array(ORIGIN), "still_groups": np.zeros(N, np.bool_)}
    one, two = (integrate(flow=which, **shared).values for which in (sampled, on_points))
    assert_allclose(one, two, rtol=1e-11, atol=1e-11)


def test_a_mass_flux_needs_no_velocity() -> None:
    mesh, flow, owner = case("triangles", AT_FACE, True)
    bare = flow._replace(velocity=flow.velocity._replace(where=np.zeros(N, np.int8)))
    runs = make_runs(owner, None)
    found = integrate(mesh=mesh, flow=bare, runs=runs, origin=np.zeros(3), still_groups=np.zeros(N, np.bool_))
    assert_allclose(found.column("mass_flow")[0], 1.25 * flow.mass.face[owner == 0].sum(), rtol=1e-14)
    assert_array_equal(found.column("momentum_flux"), 0.0)


@pytest.mark.parametrize("corner", range(3))
def test_walls_count_as_still_only_where_all_corners_are(corner: int) -> None:
    mesh, flow, _ = case("triangles", AT_NODE, False)
    velocity = np.zeros_like(flow.velocity.node)
    velocity[corner::3] = [1.0, 2.0, 3.0]
    flow = flow._replace(velocity=flow.velocity._replace(node=velocity))
    shared = {"mesh": mesh, "flow": flow, "origin": np.zeros(3), "runs": make_runs(np.zeros(7, np.int32), None)}
    one, two = (integrate(still_groups=np.full(N, still), **shared).values for still in (True, False))
    assert_array_equal(one, two)
    assert np.abs(one[0, column_slice("mass_flow")]) > 0.1


def test_a_part_of_the_faces_and_each_face_alone() -> None:
    mesh, flow, _ = case("curved", AT_NODE, False)
    owner = np.zeros(6, np.int32)
    kinds, still = mesh.kinds, np.zeros(N, np.bool_)
    shared = {"mesh": mesh, "flow": flow, "origin": np.array(ORIGIN), "still_groups": still}
    some = np.array([5, 1, 3])
    alone = [integrate(runs=runs_over(owner, kinds, np.array([k])), **shared).values[0] for k in range(owner.size)]
    part = integrate(runs=runs_over(owner, kinds, some), **shared).values[0]
    assert_allclose(part, sum(alone[k] for k in some), rtol=1e-12, atol=1e-12)
    each = integrate_each_face(mesh=mesh, flow=flow, group_of_face=owner, origin=np.array(ORIGIN), still_groups=still)
    assert_allclose(each.values, alone, rtol=1e-12, atol=1e-12)
    flat, flow, owner = case("triangles", AT_FACE, True)
    found = integrate_each_face(
        mesh=flat, flow=flow, group_of_face=owner, origin=np.zeros(3), still_groups=still, faces=np.array([4, 0, 2])
    )
    corners = flat.points[flat.connectivity.reshape(-1, 3)[[4, 0, 2]]]
    normal = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0]) / 2
    assert_allclose(found.column("area_vector"), normal, rtol=1e-13, atol=1e-15)
    assert_allclose(found.column("mass_flow"), 1.25 * flow.mass.face[[4, 0, 2]], rtol=1e-13)
    assert_allclose(found.column("position"), found.column("area")[:, None] * corners.mean(axis=1), rtol=1e-13)


@pytest.mark.parametrize(("between", "length"), [(1, 1), (1, 3), (32, 2048)], ids=["runs", "lanes", "batches"])
def test_sums_are_as_good_as_of_twice_the_digits(between: int, length: int) -> None:
    # large areas that cancel leave the last face's: across runs, side by side, and one batch after another
    tall = np.array([[0, 0, 0], [2e16, 0, 0], [0, 1, 0]], dtype=float)
    small = np.array([[0, 0, 0], [2, 0, 0], [0, 1, 0]], dtype=float)
    faces = np.zeros((3 * between, 3), np.int64)  # those without area fill the lanes
    faces[::between] = [[0, 1, 2], [3, 4, 5], [0, 2, 1]]
    _, flow, _ = case("triangles", AT_FACE, False)
    none = np.zeros(N, np.int8)
    names = ("velocity", "traction", "pressure", "density", "mass")
    still = {name: getattr(flow, name)._replace(where=none) for name in names}
    mesh = FaceArrays(np.concatenate([tall, small]), faces.ravel(), np.empty(0, np.int64), np.empty(0, np.int8))
    found = integrate(
        mesh=mesh,
        flow=flow._replace(**still),
        runs=make_runs(np.zeros(len(faces), np.int32), None, length=length),
        origin=np.zeros(3),
        still_groups=np.zeros(N, np.bool_),
    )
    assert_array_equal(found.column("area_vector")[0], [0.0, 0.0, 1.0])
