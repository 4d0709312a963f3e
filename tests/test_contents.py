"""What a volume holds: exactness on every cell shape, frames, domains, cases, faults."""

from __future__ import annotations

import itertools
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from fluxmesh.case.read import parse_case
from fluxmesh.case.values import UnitScale
from fluxmesh.errors import FieldError, FileError
from fluxmesh.field.contents import Carried, Contents, contents_about, contents_of, relative_contents
from fluxmesh.field.domain import require_same_domain
from fluxmesh.field.frame import Frame
from fluxmesh.field.volume import VolumeArray
from fluxmesh.field.volume_blocks import cell_rule
from fluxmesh.integral.cells import reference_rule
from fluxmesh.job.contents import read_contents
from fluxmesh.surface.readers.volume_grid import volume_mesh

SHEAR = np.array([[1.0, 0.3, -0.2], [0.1, 0.8, 0.25], [-0.15, 0.2, 1.2]])
SHIFT = np.array([0.4, -0.7, 0.2])
SLOPE = np.array([[1.0, 2.0, 3.0], [-2.0, 1.0, 0.5], [0.3, -0.7, 2.0]])
ORIGIN = (0.3, -0.2, 0.5)
FIELDS = {"density": ("rho",), "velocity": ("U",)}
CARRIED = {"salt": Carried(("phi",)), "dye": Carried(("phi",), "volume", 2.0)}


def density_at(x: np.ndarray) -> np.ndarray:
    return 3.0 + x @ [0.4, -0.5, 0.3]


def velocity_at(x: np.ndarray) -> np.ndarray:
    return x @ SLOPE.T + [1.0, -2.0, 0.5]


def scalar_at(x: np.ndarray) -> np.ndarray:
    return 0.7 + x @ [0.1, 0.2, -0.3]


def sheared(u: np.ndarray) -> np.ndarray:
    return u @ SHEAR.T + SHIFT


def cube(shape: str, n: int = 3, *, quadratic: bool = False, shaken: float = 0.06, mapped=sheared):
    """A cube of cells of one shape: its inner nodes shaken, then mapped, with linear fields on nodes."""
    import pyvista
    from vtkmodules.vtkFiltersGeometry import vtkLinearToQuadraticCellsFilter

    axis = np.linspace(0, 1, n + 1)
    points = np.stack(np.meshgrid(axis, axis, axis, indexing="ij"), axis=-1).reshape(-1, 3)
    inner = ((points > 0) & (points < 1)).all(axis=1)
    points[inner] += np.random.default_rng(3).uniform(-shaken, shaken, (inner.sum(), 3)) if shape != "voxel" else 0.0
    index = np.arange((n + 1) ** 3).reshape(n + 1, n + 1, n + 1)
    corner = [index[i : n + i, j : n + j, k : n + k].ravel() for i, j, k in itertools.product((0, 1), repeat=3)]
    around = np.stack([corner[at] for at in (0, 4, 6, 2, 1, 5, 7, 3)], axis=-1)
    if shape == "tetra":
        paths = []
        for order in itertools.permutations((0, 1, 2)):
            path = np.cumsum([0, *(4 >> axis for axis in order)])
            even = np.linalg.det(np.eye(3)[list(order)]) > 0
            paths.append(path if even else path[[1, 0, 2, 3]])
        cells = {10: np.concatenate([np.stack([corner[at] for at in path], axis=-1) for path in paths])}
    elif shape == "voxel":
        cells = {11: np.stack([corner[at] for at in (0, 4, 2, 6, 1, 5, 3, 7)], axis=-1)}
    elif shape == "wedge":
        cells = {13: np.concatenate([around[:, [0, 1, 2, 4, 5, 6]], around[:, [0, 2, 3, 4, 6, 7]]])}
    elif shape == "pyramid":
        sides = [(0, 1, 2, 3), (4, 7, 6, 5), (0, 4, 5, 1), (3, 2, 6, 7), (0, 3, 7, 4), (1, 5, 6, 2)]
        tip = len(points) + np.arange(len(around))
        cells = {14: np.concatenate([np.column_stack([around[:, side], tip]) for side in sides])}
        points = np.concatenate([points, points[around].mean(axis=1)])
    else:
        cells = {12: around}
    grid = pyvista.UnstructuredGrid(cells, points)
    if quadratic:
        convert = vtkLinearToQuadraticCellsFilter()
        convert.SetInputData(grid)
        convert.Update()
        grid = pyvista.wrap(convert.GetOutput())
    grid.points = mapped(np.array(grid.points, dtype=np.float64))
    return with_fields(grid)


def with_fields(grid):
    x = np.asarray(grid.points)
    grid.point_data["rho"] = density_at(x)
    grid.point_data["U"] = velocity_at(x)
    grid.point_data["phi"] = scalar_at(x)
    return grid


def as_polyhedra(grid, *, mixed: bool):
    """The same hexahedra as polyhedra, the directions of their faces at random or all outward."""
    import pyvista

    rng = np.random.default_rng(5)
    faces = ((0, 4, 7, 3), (1, 2, 6, 5), (0, 1, 5, 4), (3, 7, 6, 2), (0, 3, 2, 1), (4, 5, 6, 7))
    stream: list[int] = []
    for row in grid.cells.reshape(grid.n_cells, -1)[:, 1:]:
        cell = [len(faces)]
        for face in faces:
            corners = row[list(face)]
            cell += [4, *(corners[::-1] if mixed and rng.integers(2) else corners)]
        stream += [len(cell), *cell]
    return with_fields(pyvista.UnstructuredGrid(np.array(stream), np.full(grid.n_cells, 42), np.array(grid.points)))


def by_gauss(place, jacobian, weights, origin=ORIGIN) -> Contents:
    """The exact contents of the fields above, from points that integrate them exactly."""
    dv = weights * jacobian
    rho, v, x = density_at(place), velocity_at(place), place - origin
    return Contents(
        np.array(origin),
        dv.sum(),
        dv @ place / dv.sum(),
        (dv * rho).sum(),
        (dv * rho) @ x,
        np.einsum("q,qi,qj->ij", dv * rho, x, x),
        (dv * rho) @ v,
        np.einsum("q,qi,qj->ij", dv * rho, x, v),
        0.5 * float((dv * rho) @ (v**2).sum(axis=1)),
        None,
        {"salt": (dv * rho) @ scalar_at(place), "dye": 2.0 * dv @ scalar_at(place)},
    )


def gauss_cube(count: int = 4) -> tuple[np.ndarray, np.ndarray]:
    node, weight = np.polynomial.legendre.leggauss(count)
    u = np.array(list(itertools.product((node + 1) / 2, repeat=3)))
    return u, np.array([np.prod(w) for w in itertools.product(weight / 2, repeat=3)])


def exact(origin=ORIGIN) -> Contents:
    u, weight = gauss_cube()
    return by_gauss(sheared(u), np.full(len(u), np.linalg.det(SHEAR)), weight, origin)


def assert_alike(found: Contents, wanted: Contents, rtol: float = 2e-14) -> None:
    for name in ("volume", "centroid", "mass", "mass_moment", "mass_inertia", "momentum", "moment_of_velocity"):
        value = np.asarray(getattr(wanted, name))
        # zeros among the components are zero to the size of the others
        assert_allclose(getattr(found, name), value, rtol=0, atol=rtol * 10 * np.abs(value).max(), err_msg=name)
    assert_allclose(found.kinetic_energy, wanted.kinetic_energy, rtol=10 * rtol)
    for name, amount in wanted.carried.items():
        assert_allclose(found.carried[name], amount, rtol=10 * rtol)


def of(grid, **options) -> Contents:
    return contents_of(volume_mesh(grid), origin=ORIGIN, **{**FIELDS, "carried": CARRIED, **options})


# ---- exact integrals ------------------------------------------------------------------------

SHAPES = ["tetra", "hexahedron", "wedge", "pyramid"]


@pytest.mark.parametrize(("shape", "quadratic"), [("voxel", False), *itertools.product(SHAPES, (False, True))])
def test_linear_fields_are_exact_on_every_shape(shape: str, quadratic: bool) -> None:
    assert_alike(of(cube(shape, 2 if quadratic else 3, quadratic=quadratic)), exact())


@pytest.mark.parametrize("mixed", [False, True])
def test_linear_fields_are_exact_on_polyhedra(mixed: bool) -> None:
    # plane faces, and warped ones inside, which neighbours cut alike; so many that they come in two blocks
    assert_alike(of(as_polyhedra(cube("hexahedron", 6, shaken=0.03), mixed=mixed)), exact())


@pytest.mark.parametrize(("number", "sides"), [(15, 5), (16, 6)])
def test_prisms_of_many_sides_are_those_of_wedges(number: int, sides: int) -> None:
    import pyvista

    angle = 2 * np.pi * np.arange(sides) / sides
    ring = np.column_stack([np.cos(angle), 1.3 * np.sin(angle), 0 * angle])
    points = sheared(np.concatenate([ring, ring + np.array([0.2, 0.1, 0.9])]))
    fan = [[0, k, k + 1, sides, k + sides, k + 1 + sides] for k in range(1, sides - 1)]
    prism = with_fields(pyvista.UnstructuredGrid(np.array([2 * sides, *range(2 * sides)]), [number], points))
    wedges = with_fields(pyvista.UnstructuredGrid({13: np.array(fan)}, points))
    assert_alike(of(prism), of(wedges))


@pytest.mark.parametrize(("number", "plain"), [(31, 13), (33, 12)])
def test_shapes_between_linear_and_quadratic(number: int, plain: int) -> None:
    import pyvista
    from vtkmodules.vtkCommonDataModel import vtkGenericCell

    def one(kind: int):
        cell = vtkGenericCell()
        cell.SetCellType(kind)
        count, flat = cell.GetNumberOfPoints(), cell.GetParametricCoords()
        points = sheared(np.array([[flat[3 * k + axis] for axis in range(3)] for k in range(count)]))
        return with_fields(pyvista.UnstructuredGrid(np.array([count, *range(count)]), [kind], points))

    assert_alike(of(one(number)), of(one(plain)))


def test_a_unit_cube_by_hand() -> None:
    grid = cube("tetra", 2, mapped=lambda u: u)
    x, y, z = np.asarray(grid.points).T
    grid.point_data["rho"] = 1.0 + x
    grid.point_data["U"] = np.column_stack([y, z, x])
    held = contents_of(volume_mesh(grid), **FIELDS)
    assert_allclose(held.mass, 3 / 2, rtol=1e-14)
    assert_allclose(held.mass_moment, [5 / 6, 3 / 4, 3 / 4], rtol=1e-14)
    assert_allclose(np.diag(held.mass_inertia), [7 / 12, 1 / 2, 1 / 2], rtol=1e-14)
    assert_allclose(held.momentum, [3 / 4, 3 / 4, 5 / 6], rtol=1e-14)
    assert_allclose(held.moment_of_velocity[0], [5 / 12, 5 / 12, 7 / 12], rtol=1e-14)
    assert_allclose(held.kinetic_energy, (1 / 2 + 1 / 2 + 7 / 12) / 2, rtol=1e-14)


def test_a_warped_hexahedron_is_integrated_on_its_own_map() -> None:
    import pyvista

    rng = np.random.default_rng(11)
    corner = np.array(list(itertools.product((0, 1), repeat=3)), dtype=float)
    node = corner + rng.uniform(-0.2, 0.2, (8, 3))
    grid = with_fields(pyvista.UnstructuredGrid({12: np.array([[0, 4, 6, 2, 1, 5, 7, 3]])}, node))
    u, weight = gauss_cube(6)
    linear = np.where(corner[None] == 1, u[:, None], 1 - u[:, None])
    place = linear.prod(axis=2) @ node
    slope = np.empty((len(u), 3, 3))
    for k in range(3):
        other = np.delete(linear, k, axis=2).prod(axis=2)
        slope[:, k] = (other * np.where(corner[:, k] == 1, 1.0, -1.0)) @ node
    assert_alike(of(grid), by_gauss(place, np.linalg.det(slope), weight))


def test_a_curved_tetrahedron_is_integrated_on_its_own_map() -> None:
    import pyvista

    rng = np.random.default_rng(12)
    corner = np.array([[0.0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1]])
    edges = [(0, 1), (1, 2), (2, 0), (0, 3), (1, 3), (2, 3)]
    node = np.concatenate([corner, [corner[list(edge)].mean(axis=0) for edge in edges]])
    node += rng.uniform(-0.05, 0.05, node.shape)
    grid = with_fields(pyvista.UnstructuredGrid({24: np.arange(10)[None]}, node))
    u, weight = gauss_cube(8)
    a, b, c = u.T
    share = np.stack([a, b * (1 - a), c * (1 - a) * (1 - b)], axis=-1)
    weight = weight * (1 - a) ** 2 * (1 - b)
    four = np.column_stack([1 - share.sum(axis=1), share])
    turn = np.array([[-1.0, -1, -1], [1, 0, 0], [0, 1, 0], [0, 0, 1]])
    shape = np.column_stack([four * (2 * four - 1), *[4 * four[:, i] * four[:, j] for i, j in edges]])
    slope = np.concatenate(
        [
            (4 * four - 1)[:, :, None] * turn,
            np.stack([4 * (four[:, [i]] * turn[j] + four[:, [j]] * turn[i]) for i, j in edges], axis=1),
        ],
        axis=1,
    )
    jacobian = np.linalg.det(np.einsum("qnk,nx->qkx", slope, node))
    assert_alike(of(grid), by_gauss(shape @ node, jacobian, weight))


@pytest.mark.parametrize("shape", SHAPES)
def test_cell_data_are_constant_in_each_cell(shape: str) -> None:
    grid = cube(shape)
    rng = np.random.default_rng(2)
    rho, v = rng.uniform(1, 2, grid.n_cells), rng.uniform(-1, 1, (grid.n_cells, 3))
    grid.cell_data["rho"], grid.cell_data["U"] = rho, v
    grid.cell_data["number"] = np.arange(grid.n_cells)
    at = {"density": "cells", "velocity": "cells"}
    held = of(grid, at=at)
    # the volumes of the cells, one by one
    size = np.array([contents_of(volume_mesh(grid.extract_cells(k))).volume for k in range(grid.n_cells)])
    assert_allclose(held.mass, size @ rho, rtol=1e-13)
    assert_allclose(held.momentum, (size * rho) @ v, rtol=0, atol=1e-13)
    assert_allclose(held.kinetic_energy, 0.5 * (size * rho) @ (v**2).sum(axis=1), rtol=1e-13)
    one = of(grid, at=at, carried={"number": Carried(("number",), "volume")})
    assert_allclose(one.carried["number"], size @ np.arange(grid.n_cells), rtol=1e-13)


@pytest.mark.parametrize(("number", "degree"), [(10, 3), (24, 9), (13, 4), (26, 10), (12, 5), (25, 11), (14, 5)])
def test_rules_are_exact_to_their_degree(number: int, degree: int) -> None:
    rule = cell_rule(number)
    summed = {10: 3, 24: 3, 13: 2, 26: 2}.get(number, 0)
    alone = {13: 5, 26: 11}.get(number, degree)
    place, weight = reference_rule(summed, degree if summed else 0, 0 if summed == 3 else alone)
    assert_allclose(rule.weights, weight, rtol=0, atol=0)
    u, fine = gauss_cube(9)
    a, b, c = u.T
    if summed == 3:
        u, fine = np.stack([a, b * (1 - a), c * (1 - a) * (1 - b)], axis=-1), fine * (1 - a) ** 2 * (1 - b)
    elif summed == 2:
        u, fine = np.stack([a, b * (1 - a), c], axis=-1), fine * (1 - a)
    for power in ((degree, 0, 0), (1, degree - 1, 0), (0, 0, degree), (degree - 2, 1, 1 if summed == 3 else alone)):
        assert_allclose(weight @ np.prod(place**power, axis=1), fine @ np.prod(u**power, axis=1), rtol=1e-13)


@pytest.mark.parametrize("shape", ["tetra", "hexahedron"])
def test_the_energy_of_a_vortex_array_converges_with_second_order(shape: str) -> None:
    # the array of G. I. Taylor and A. E. Green, 1937, in a box that is no whole number of waves
    size = np.array([1.1, 1.4, 0.9])

    def vortices(x: np.ndarray) -> np.ndarray:
        a, b, c = x.T
        return np.column_stack([np.sin(a) * np.cos(b) * np.cos(c), -np.cos(a) * np.sin(b) * np.cos(c), 0 * a])

    sine = size / 2 - np.sin(2 * size) / 4
    cosine = size / 2 + np.sin(2 * size) / 4
    energy = 0.5 * 1.2 * (sine[0] * cosine[1] + cosine[0] * sine[1]) * cosine[2]
    errors = []
    for n in (4, 8, 16):
        grid = cube(shape, n, shaken=0.0, mapped=lambda u: u * size)
        grid.point_data["U"] = vortices(np.asarray(grid.points))
        errors.append(abs(of(grid, density=1.2).kinetic_energy / energy - 1))
    orders = np.log2(np.array(errors[:-1]) / errors[1:])
    assert_allclose(orders, 2.0, rtol=0, atol=0.05)
    assert errors[-1] < 4e-3


# ---- where it lies --------------------------------------------------------------------------


def test_a_body_far_away_keeps_its_digits() -> None:
    # coordinates of 1e6 are held to 1e-10: what is integrated about a near point is as good as that
    far = np.array([1e6, -2e6, 3e6])
    grid = cube("tetra")
    grid.points = np.asarray(grid.points) + far
    found = contents_of(volume_mesh(grid), origin=np.array(ORIGIN) + far, carried=CARRIED, **FIELDS)
    wanted = exact()
    assert_allclose(found.volume, wanted.volume, rtol=1e-9)
    assert_allclose(found.mass_inertia, wanted.mass_inertia, rtol=0, atol=3e-9 * np.abs(wanted.mass_inertia).max())
    assert_allclose(found.centroid, wanted.centroid + far, rtol=0, atol=1e-9)


def test_moments_about_another_point() -> None:
    held = of(cube("tetra"))
    assert_alike(contents_about(held, (5.0, -3.0, 2.0)), exact((5.0, -3.0, 2.0)), rtol=1e-13)
    assert_alike(contents_about(contents_about(held, (5.0, -3.0, 2.0)), ORIGIN), held, rtol=1e-13)
    assert_array_equal(held.origin, ORIGIN)


def test_lengths_and_arrays_come_in_their_units() -> None:
    grid = cube("hexahedron")
    grid.points = np.asarray(grid.points) * 1e3
    grid.point_data["rho"] /= 1e3
    grid.point_data["U"] *= 100
    assert_alike(of(grid, scale=1e-3, density_scale=1e3, velocity_scale=1e-2), exact())


def test_single_precision_files_are_read_as_they_are() -> None:
    grid = cube("hexahedron")
    grid.points = np.asarray(grid.points).astype(np.float32)
    grid.point_data["rho"] = grid.point_data["rho"].astype(np.float32)
    assert_allclose(of(grid).mass, exact().mass, rtol=1e-6)


# ---- motion ---------------------------------------------------------------------------------

FRAME = Frame(velocity=(1.5, -0.4, 0.8), rate=2.3, axis=(0.6, 0.0, 0.8), through=(0.2, 0.1, -0.5))


def test_a_rigid_rotation_has_the_momentum_and_energy_of_a_rigid_body() -> None:
    grid = cube("wedge")
    turn = Frame(rate=3.0, axis=(0.0, 0.6, 0.8), through=ORIGIN)
    grid.point_data["U"] = turn.at(np.asarray(grid.points))
    held = of(grid)
    inertia = np.trace(held.mass_inertia) * np.eye(3) - held.mass_inertia
    assert_allclose(held.angular_momentum, inertia @ turn.spin, rtol=1e-13)
    assert_allclose(held.kinetic_energy, 0.5 * turn.spin @ inertia @ turn.spin, rtol=1e-13)


def test_what_moves_with_the_frame_rests_in_it() -> None:
    grid = cube("tetra")
    grid.point_data["U"] = FRAME.at(np.asarray(grid.points))
    held = of(grid)
    rest = relative_contents(held, FRAME)
    assert_allclose(rest.momentum, 0, atol=1e-13 * np.abs(held.momentum).max())
    assert_allclose(rest.moment_of_velocity, 0, atol=1e-13 * np.abs(held.moment_of_velocity).max())
    assert_allclose(rest.kinetic_energy, 0, atol=1e-13 * held.kinetic_energy)
    assert rest.mass == held.mass


def test_relative_contents_are_those_of_the_relative_velocity() -> None:
    grid = cube("hexahedron")
    found = relative_contents(of(grid), FRAME)
    grid.point_data["U"] = velocity_at(np.asarray(grid.points)) - FRAME.at(np.asarray(grid.points))
    assert_alike(found, of(grid), rtol=1e-13)


def test_without_a_velocity_nothing_is_made_relative() -> None:
    held = of(cube("tetra"), velocity=None)
    assert relative_contents(held, FRAME) is held
    assert held.momentum is None
    assert held.angular_momentum is None


def test_without_a_density_there_is_the_volume_and_what_is_an_amount_a_volume() -> None:
    held = of(cube("tetra"), density=None, carried={"dye": CARRIED["dye"]})
    assert held.mass is None
    assert held.kinetic_energy is None
    assert_allclose(held.volume, exact().volume, rtol=1e-13)
    assert_allclose(held.carried["dye"], exact().carried["dye"], rtol=1e-13)


def test_internal_energy_is_a_volume_or_a_mass() -> None:
    grid, wanted = cube("pyramid"), exact()
    held = of(grid, internal_energy=("phi",), internal_energy_per="mass", internal_energy_scale=1e3)
    assert_allclose(held.internal_energy, 1e3 * wanted.carried["salt"], rtol=1e-13)
    made = VolumeArray("nodes", scalar_at(np.asarray(grid.points)), "made")
    assert_allclose(of(grid, internal_energy=made).internal_energy, wanted.carried["dye"] / 2, rtol=1e-13)


# ---- orientation ----------------------------------------------------------------------------


def turned(grid, rows, order):
    cells = grid.cells.reshape(grid.n_cells, -1).copy()
    cells[rows, 1:] = cells[rows, 1:][:, order]
    grid.cells = cells.ravel()
    return grid


@pytest.mark.parametrize(
    ("shape", "order"),
    [
        ("tetra", [1, 0, 2, 3]),
        ("hexahedron", [4, 5, 6, 7, 0, 1, 2, 3]),
        ("wedge", [3, 4, 5, 0, 1, 2]),
        ("pyramid", [0, 3, 2, 1, 4]),
    ],
)
def test_cells_that_are_all_turned_count_as_positive_and_some_are_told(shape: str, order: list[int]) -> None:
    assert_alike(of(turned(cube(shape), slice(None), order)), exact())
    grid = turned(cube(shape), slice(0, 2), order)
    with pytest.raises(FieldError, match=rf"2 of {grid.n_cells} \w+ are turned inside out"):
        of(grid)


def test_a_mirrored_mesh_is_the_mirror_image() -> None:
    grid = cube("tetra")
    grid.points = np.asarray(grid.points) * [-1, 1, 1]
    grid.point_data["U"] = np.asarray(grid.point_data["U"]) * [-1, 1, 1]
    held, wanted = contents_of(volume_mesh(grid), **FIELDS), contents_about(exact(), (0, 0, 0))
    assert_allclose(held.momentum, wanted.momentum * [-1, 1, 1], rtol=1e-13)
    assert_allclose(held.angular_momentum, wanted.angular_momentum * [1, -1, -1], rtol=1e-12)
    assert_allclose(held.kinetic_energy, wanted.kinetic_energy, rtol=1e-13)


def test_flat_cells_are_not_called_turned() -> None:
    import pyvista

    grid = cube("tetra")
    cells = grid.cells.reshape(grid.n_cells, -1)[:, 1:]
    flat = np.array([[cells[0, 0], cells[0, 1], cells[0, 2], grid.n_points]])
    points = np.concatenate([grid.points, [np.asarray(grid.points)[cells[0, :3]].mean(axis=0)]])
    both = np.concatenate([cells, flat, flat[:, [1, 0, 2, 3]]])
    assert_alike(of(with_fields(pyvista.UnstructuredGrid({10: both}, points))), exact())


def test_a_polyhedron_that_its_middle_does_not_see_all_of() -> None:
    import pyvista

    # a horseshoe, extruded: its middle lies in the gap
    ring = [(0, 0), (3, 0), (3, 3), (2, 3), (2, 1), (1, 1), (1, 3), (0, 3)]
    points = np.array([(x, y, z) for z in (0.0, 1.0) for x, y in ring])
    sides = [[k, (k + 1) % 8, (k + 1) % 8 + 8, k + 8] for k in range(8)]
    faces = [*sides, list(range(7, -1, -1)), list(range(8, 16))]
    cell = [len(faces), *itertools.chain.from_iterable([len(face), *face] for face in faces)]
    grid = with_fields(pyvista.UnstructuredGrid(np.array([len(cell), *cell]), [42], points))
    held = contents_of(volume_mesh(grid))
    # three bars: 3 x 1 below, two of 1 x 2 above
    assert_allclose(held.volume, 7.0, rtol=1e-13)
    assert_allclose(held.centroid, [1.5, (3 * 0.5 + 4 * 2.0) / 7, 0.5], rtol=1e-13)


# ---- faults ---------------------------------------------------------------------------------


def spoiled(name: str, value: float, row: int = 5):
    grid = cube("tetra")
    values = np.array(grid.point_data[name])
    values[row] = value
    grid.point_data[name] = values
    return grid


@pytest.mark.parametrize(("name", "key"), [("rho", "flow.density"), ("U", "flow.velocity"), ("phi", "carried.salt")])
def test_values_that_are_not_finite_are_refused(name: str, key: str) -> None:
    with pytest.raises(FieldError, match=rf"{key}: array '{name}' on nodes of volume holds 1 .*not finite.* node 5"):
        of(spoiled(name, np.nan))


def test_values_at_points_that_no_cell_uses_do_not_matter() -> None:
    import pyvista

    grid = cube("tetra")
    more = pyvista.UnstructuredGrid(
        {10: grid.cells.reshape(grid.n_cells, -1)[:, 1:]}, np.concatenate([grid.points, [[50, 0, 0]]])
    )
    with_fields(more)
    for name in ("rho", "U", "phi"):
        values = np.array(more.point_data[name])
        values[-1] = np.nan
        more.point_data[name] = values
    assert_alike(of(more), exact())


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"velocity": ("rho",)}, "flow.velocity: 'rho' of volume has 1 component. 3 needed for velocity"),
        ({"density": ("U",)}, "flow.density: 'U' of volume has 3 components"),
        ({"velocity": ("rho", "phi", "U")}, "component array 'U' of volume has 3 components"),
        ({"density": ("Rho",)}, "flow.density: there is no array 'Rho' in volume. Did you mean 'rho'"),
        ({"carried": {"salt": Carried(("psi",))}}, "carried.salt: there is no array 'psi' in volume"),
        ({"density": ("both",)}, "flow.density: the array 'both' is on nodes and on cells"),
        ({"density": None}, "carried.salt: it is an amount a mass, and no density is known"),
        ({"density": -1.0}, "fluid.density: the density is -1.0 kg/m"),
        ({"density": ("low",)}, r"array 'low' of volume gives a density of -1 at node 0 \(64 such\)"),
        (
            {"density": VolumeArray("cells", np.ones(3), "made")},
            r"array 'made' has the shape \(3,\), and volume has 1",
        ),
        ({"scale": 0.0}, "the length unit is 0.0 m"),
        ({"origin": (0.0, np.nan, 0.0)}, "the origin is"),
    ],
)
def test_faults_are_named(options: dict, message: str) -> None:
    grid = cube("tetra")
    grid.point_data["both"] = grid.point_data["rho"]
    grid.cell_data["both"] = np.ones(grid.n_cells)
    grid.point_data["low"] = np.full(grid.n_points, -1.0)
    with pytest.raises(FieldError, match=message):
        contents_of(volume_mesh(grid), **{"carried": CARRIED, **FIELDS, "origin": ORIGIN, **options})


def test_cells_of_unknown_shape_functions_are_refused() -> None:
    import pyvista

    steps = [(i, j, k) for k in range(4) for j in range(4 - k) for i in range(4 - j - k)]
    points = np.array(steps) / 3.0
    grid = pyvista.UnstructuredGrid(np.array([20, *range(20)]), [71], points)
    with pytest.raises(FieldError, match="cannot be integrated over: 1 of type lagrange tetra"):
        contents_of(volume_mesh(grid))


# ---- the domain -----------------------------------------------------------------------------


def held_by(volume: float, centroid=(0.0, 0.0, 0.0)) -> Contents:
    return Contents(np.zeros(3), volume, np.array(centroid))


def test_the_same_domain_passes() -> None:
    require_same_domain([], 1.0, (0, 0, 0), [])
    require_same_domain([held_by(8.0), held_by(8.0 + 4e-6, (1e-6, 0, 0))], 8.05, (0.015, 0, 0), ["a.vtu", "b.vtu"])
    require_same_domain([held_by(8.0)], None, None, ["a.vtu"])


@pytest.mark.parametrize(
    ("second", "enclosed", "message"),
    [
        (held_by(8.0 + 1e-5), 8.0, "b.vtu: its cells fill 8.00001 m³, those of a.vtu 8 m³"),
        (held_by(8.0, (3e-6, 0, 0)), 8.0, "b.vtu: the centroid of its cells is .*, that of a.vtu"),
        (
            held_by(8.0),
            8.1,
            "a.vtu: its cells fill 8 m³, the surface encloses 8.1 m³. .* fill the control surf",
        ),
        (held_by(8.0), 8.0e-9, "differ as units of length do"),
    ],
)
def test_another_domain_is_told(second: Contents, enclosed: float, message: str) -> None:
    with pytest.raises(FieldError, match=message) as caught:
        require_same_domain([held_by(8.0), second], enclosed, (0.0, 0.0, 0.0), ["a.vtu", "b.vtu"])
    assert ("units of length" in str(caught.value)) == (enclosed < 1)


def test_a_volume_beside_the_surface_is_told() -> None:
    with pytest.raises(FieldError, match=r"a.vtu: the centroid of its cells is \(0, 0, 0\) m, that of the surface"):
        require_same_domain([held_by(8.0)], 8.0, (0.0, 0.03, 0.0), ["a.vtu"])


# ---- from a case ----------------------------------------------------------------------------

GAS = """
[fluid]
law = "ideal-gas"
gas_constant = 287.0
heat_ratio = 1.4
ambient_pressure = 100000.0
[flow]
velocity = { array = "U", unit = "cm/s" }
pressure = { array = "p", unit = "kPa" }
temperature = { array = "T" }
"""
WATER = """
[fluid]
density = 1000.0
heat_capacity = 4180.0
[flow]
velocity = { array = "U", at = "faces" }
temperature = { array = "T" }
[[carried]]
name = "salt"
array = "phi"
[[carried]]
name = "dye"
per = "volume"
array = "phi"
"""


def case_of(text: str, folder: Path):
    surface = '[surface]\nfile = "a.vtp"\ngroups = { array = "region" }\n'
    feed = '\n[groups.feed]\nrole = "inlet"\nspeed = 1.0\n' + ("temperature = 300.0\n" if "law" in text else "")
    shell = '[groups.shell]\nrole = "wall"\n'
    return parse_case(f"{surface}{text}{feed}{shell}".encode(), folder / "case.toml")


def saved(folder: Path, **arrays):
    grid = cube("hexahedron")
    for name, values in arrays.items():
        grid.point_data[name] = values(np.asarray(grid.points))
    grid.save(folder / "inside.vtu")
    return folder / "inside.vtu"


METRE = UnitScale("m", 1.0)


def test_a_gas_of_a_case(tmp_path: Path) -> None:
    file = saved(tmp_path, p=lambda x: 20 + 3 * x[:, 0], T=lambda x: 300 + 0 * x[:, 0])
    held = read_contents(case_of(GAS, tmp_path), file, METRE, ORIGIN)
    volume, centroid = exact().volume, exact().centroid
    pressure = (120e3 + 3e3 * centroid[0]) * volume
    assert_allclose(held.mass, pressure / (287.0 * 300.0), rtol=1e-13)
    # internal energy of an ideal gas: p/(γ - 1) a volume (NACA Report 1135, 1953)
    assert_allclose(held.internal_energy, pressure / 0.4, rtol=1e-13)
    x, weight = gauss_cube()
    x = sheared(x)
    rho = weight * (120e3 + 3e3 * x[:, 0]) / (287.0 * 300.0) * np.linalg.det(SHEAR)
    assert_allclose(held.momentum, rho @ velocity_at(x) / 100, rtol=1e-12)
    assert held.carried == {}


def test_a_liquid_of_a_case_in_millimetres(tmp_path: Path) -> None:
    file = saved(tmp_path, T=scalar_at)
    held = read_contents(case_of(WATER, tmp_path), file, UnitScale("mm", 1e-3), (0, 0, 0))
    wanted = contents_of(volume_mesh(cube("hexahedron")), scale=1e-3, density=1000.0, velocity=("U",), carried=CARRIED)
    assert_allclose(held.mass, 1000.0 * exact().volume * 1e-9, rtol=1e-13)
    assert_allclose(held.momentum, wanted.momentum, rtol=1e-13)
    assert_allclose(held.carried["salt"], wanted.carried["salt"], rtol=1e-13)
    assert_allclose(held.carried["dye"], wanted.carried["dye"] / 2, rtol=1e-13)
    # rho c T, where T is the same as the scalar
    assert_allclose(held.internal_energy, 4180.0 * wanted.carried["salt"], rtol=1e-13)


@pytest.mark.parametrize("kind", ["absolute", "gauge", "kinematic"])
def test_an_enthalpy_loses_the_flow_work(tmp_path: Path, kind: str) -> None:
    text = f"""
[fluid]
density = 800.0
ambient_pressure = 90000.0
[flow]
enthalpy = {{ array = "h", unit = "kJ/kg" }}
pressure = {{ array = "p", kind = "{kind}" }}
"""
    file = saved(tmp_path, h=lambda x: 50 + x[:, 1], p=lambda x: 2e5 + 1e4 * x[:, 2])
    held = read_contents(case_of(text, tmp_path), file, METRE, ORIGIN)
    volume, centroid = exact().volume, exact().centroid
    pressure = (2e5 + 1e4 * centroid[2] + (90e3 if kind == "gauge" else 0)) * (800.0 if kind == "kinematic" else 1)
    assert_allclose(held.internal_energy, volume * (800 * 1e3 * (50 + centroid[1]) - pressure), rtol=1e-12)
    assert held.carried == {}
    assert held.momentum is None


@pytest.mark.parametrize(
    ("text", "arrays", "message"),
    [
        (GAS, {"T": lambda x: 300 + 0 * x[:, 0]}, "inside.vtu: flow.pressure: there is no array 'p'"),
        (GAS, {"p": lambda x: 0 * x[:, 0], "T": lambda x: 0 * x[:, 0]}, "inside.vtu: flow.temperature: .*falls to 0 K"),
        (
            GAS,
            {"p": lambda x: -101 + 0 * x[:, 0], "T": lambda x: 1 + 0 * x[:, 0]},
            "absolute pressure in inside.vtu falls to -1000 Pa. .*ambient_pressure",
        ),
        (GAS.replace('temperature = { array = "T" }', ""), {"p": lambda x: 0 * x[:, 0]}, "give fluid.temperature"),
        (WATER.replace('array = "phi"', 'array = "psi"'), {"T": scalar_at}, "carried salt: there is no array 'psi'"),
        (WATER.replace('"U"', '"T"'), {"T": scalar_at}, "flow.velocity: 'T' of inside.vtu has 1 component"),
    ],
)
def test_a_volume_that_lacks_what_the_case_names(tmp_path: Path, text: str, arrays: dict, message: str) -> None:
    file = saved(tmp_path, **arrays)
    with pytest.raises(FieldError, match=message):
        read_contents(case_of(text, tmp_path), file, METRE, ORIGIN)


def test_a_volume_that_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(FileError, match=r"gone.vtu: there is no such file"):
        read_contents(case_of(WATER, tmp_path), tmp_path / "gone.vtu", METRE, ORIGIN)
