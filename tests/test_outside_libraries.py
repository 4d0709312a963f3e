"""Figures of fluxmesh against those of general-purpose libraries: trimesh, VTK, SciPy, mpmath, CoolProp, pint."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from fluxmesh import PressureMeaning, balance_of, lay_flow
from fluxmesh.balance.weight import enclosed_volume
from fluxmesh.field.contents import Carried, contents_of
from fluxmesh.field.field import array_field
from fluxmesh.field.flow import integrate_flow, still_flow
from fluxmesh.field.gas import ideal_density, sound_speed
from fluxmesh.field.points import PointCloud
from fluxmesh.field.points_sampling import sample_cloud
from fluxmesh.field.profiles.options import ProfileOptions, SpeedTable
from fluxmesh.field.profiles.port import PortPatch
from fluxmesh.field.profiles.resolution import profile_factors
from fluxmesh.field.profiles.tabulated import tabulated_shape
from fluxmesh.field.volume import sample_volume
from fluxmesh.surface.readers.volume_grid import volume_mesh
from fluxmesh.units.table import UNITS
from tests.port_sections import duct, grid_section, round_section
from tests.solids import Solid, angle_block, hull, in_triangles, mapped, moved, odd_body, rigid_motion, sphere, torus
from tests.test_units import FOR_PINT, REGISTRY
from tests.verification import Verify

TURN, SHIFT = rigid_motion(np.random.default_rng(8), 5.0)
BODIES: dict[str, Solid] = {
    "L-shape": angle_block(4),
    "odd body": odd_body(3),
    "torus": in_triangles(torus(0.3, 0.1, 32, 16)),
    "ellipsoid a thousand sizes away": mapped(sphere(3), lambda x: x * [3, 2, 1] + [4e3, -2e3, 1e3]),
    "body turned and shifted": moved(odd_body(2), TURN, SHIFT),
}
Array = np.ndarray


# ---- volume, area, centroid, inertia --------------------------------------------------------


def figures(body: Solid) -> Array:
    """Volume, area and centroid."""
    surface = body.surface()
    table = integrate_flow(surface, still_flow(surface))
    held = enclosed_volume(table)
    return np.array([held.volume, float(table.total("area")), *held.centroid])


@pytest.mark.parametrize("name", BODIES)
def test_trimesh_has_the_same_volume_area_and_centroid(verify: Verify, name: str) -> None:
    import trimesh

    body = BODIES[name]
    middle = body.points.mean(axis=0)  # its formulas lose digits far from the origin
    mesh = trimesh.Trimesh(body.points - middle, np.array(body.faces), process=False)
    verify(
        what=f"trimesh, {name}: volume, area, centroid",
        source="trimesh: volume, area, center_mass",
        expected=(mesh.volume, mesh.area, *(mesh.center_mass + middle)),
        got=figures(body),
        tolerance=1e-10,
        relative=True,
        why="round-off of both, and of coordinates a thousand sizes away",
        kind="library",
    )


@pytest.mark.parametrize("name", BODIES)
def test_vtk_has_the_same_volume_and_area(verify: Verify, name: str) -> None:
    import pyvista
    from vtkmodules.vtkFiltersCore import vtkMassProperties

    body = BODIES[name]
    data = pyvista.PolyData.from_regular_faces(body.points - body.points.mean(axis=0), np.array(body.faces))
    properties = vtkMassProperties()
    properties.SetInputData(data)
    verify(
        what=f"VTK, {name}: volume and area",
        source="VTK: vtkMassProperties",
        expected=(properties.GetVolume(), properties.GetSurfaceArea()),
        got=figures(body)[:2],
        tolerance=1e-6 if name == "ellipsoid a thousand sizes away" else 1e-10,
        relative=True,
        why="round-off; VTK counts the volume along three axes and weighs them",
        kind="library",
    )


def test_scipy_has_the_same_convex_hull(verify: Verify) -> None:
    from scipy.spatial import ConvexHull

    sites = np.random.default_rng(3).standard_normal((60, 3))
    found = ConvexHull(sites)
    verify(
        what="SciPy, convex hull of 60 points: volume and area",
        source="scipy.spatial.ConvexHull",
        expected=(found.volume, found.area),
        got=figures(hull(sites))[:2],
        tolerance=1e-11,
        relative=True,
        why="round-off",
        kind="library",
    )


def cone(body: Solid, apex: Array) -> Any:
    """Return the body as tetrahedra from its faces to one point."""
    import pyvista

    faces = np.array(body.faces)
    rows = np.column_stack([faces[:, [0, 2, 1]], np.full(len(faces), len(body.points))])[:, [0, 2, 1, 3]]
    return pyvista.UnstructuredGrid({10: rows}, np.vstack([body.points, apex]))


@pytest.mark.parametrize("name", ["odd body", "body turned and shifted"])
def test_trimesh_has_the_same_inertia(verify: Verify, name: str) -> None:
    import trimesh

    body = BODIES[name]
    mesh = trimesh.Trimesh(body.points, np.array(body.faces), process=False)
    held = contents_of(volume_mesh(cone(body, mesh.center_mass)), density=1.0, origin=mesh.center_mass)
    moments = held.mass_inertia
    assert moments is not None
    tensor = np.trace(moments) * np.eye(3) - moments
    verify(
        what=f"trimesh, {name}, filled with tetrahedra: moments of inertia xx yy zz yz xz xy about the centroid",
        source="trimesh: moment_inertia",
        expected=mesh.moment_inertia[[0, 1, 2, 1, 0, 0], [0, 1, 2, 2, 2, 1]],
        got=tensor[[0, 1, 2, 1, 0, 0], [0, 1, 2, 2, 2, 1]],
        tolerance=1e-11,
        relative=True,
        why="round-off",
        kind="library",
    )


@pytest.mark.parametrize("shape", ["tetrahedra", "hexahedra"])
def test_vtk_integrates_the_same_over_a_volume(verify: Verify, shape: str) -> None:
    import pyvista
    from vtkmodules.vtkFiltersParallel import vtkIntegrateAttributes

    made: Any = pyvista.ImageData(dimensions=(4, 5, 3), spacing=(0.3, 0.2, 0.5)).cast_to_unstructured_grid()
    made = made.triangulate() if shape == "tetrahedra" else made
    made.point_data["phi"] = np.asarray(made.points) @ [0.3, -0.2, 0.7] + 2
    integral = vtkIntegrateAttributes()
    integral.SetInputData(made)
    integral.Update()
    out = pyvista.wrap(integral.GetOutput())
    held = contents_of(volume_mesh(made), carried={"phi": Carried(("phi",), "volume")})
    verify(
        what=f"VTK, box of {shape}: volume and integral of a linear field",
        source="VTK: vtkIntegrateAttributes",
        expected=(out.cell_data["Volume"][0], out.point_data["phi"][0]),
        got=(held.volume, held.carried["phi"]),
        tolerance=1e-11,
        relative=True,
        why="linear: round-off",
        kind="library",
    )


# ---- interpolation --------------------------------------------------------------------------


def wavy(x: Array) -> Array:
    return np.asarray(np.sin(3 * x[..., 0]) * np.cos(2 * x[..., 1]) + x[..., 2] ** 2 * x[..., 0])


def test_scipy_interpolates_alike_on_a_grid(verify: Verify) -> None:
    import pyvista
    from scipy.interpolate import RegularGridInterpolator

    axes = [np.linspace(0, 1, n) for n in (6, 5, 7)]
    grid = pyvista.RectilinearGrid(*axes)
    grid.point_data["p"] = wavy(np.asarray(grid.points))
    values = wavy(np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1))
    places = np.random.default_rng(2).uniform(0, 1, (500, 3))
    expected = RegularGridInterpolator(axes, values)(places)
    found = sample_volume(volume_mesh(grid), {"pressure": ("p",)}, places, scale=1.0).values["pressure"]
    verify(
        what="SciPy, 500 places in a grid of 5 × 4 × 6 cells: largest difference of the values",
        source="scipy.interpolate.RegularGridInterpolator",
        expected=0,
        got=np.abs(found - expected).max(),
        tolerance=1e-12,
        why="trilinear in both: round-off",
        kind="library",
    )


def test_scipy_interpolates_alike_in_tetrahedra(verify: Verify) -> None:
    import pyvista
    from scipy.interpolate import LinearNDInterpolator
    from scipy.spatial import Delaunay

    random = np.random.default_rng(11)
    points = random.uniform(-1, 1, (400, 3))
    mesh = Delaunay(points)
    grid = pyvista.UnstructuredGrid({10: mesh.simplices.astype(np.int64)}, points)
    grid.point_data["p"] = wavy(points)
    places = random.uniform(-0.6, 0.6, (1000, 3))
    found = sample_volume(volume_mesh(grid), {"pressure": ("p",)}, places, scale=1.0).values["pressure"]
    verify(
        what="SciPy, 1000 places in tetrahedra: largest difference of the values",
        source="scipy.interpolate.LinearNDInterpolator on scipy.spatial.Delaunay",
        expected=0,
        got=np.abs(found - LinearNDInterpolator(mesh, wavy(points))(places)).max(),
        tolerance=1e-11,
        why="linear in both: round-off, which slivers enlarge",
        kind="library",
    )


def test_scipy_is_near_between_scattered_points(verify: Verify) -> None:
    from scipy.interpolate import RBFInterpolator

    random = np.random.default_rng(5)
    points = random.uniform(0, 1, (4000, 3))
    places = random.uniform(0.1, 0.9, (300, 3))
    cloud = PointCloud("cloud", points, {"p": wavy(points)})
    found = sample_cloud(cloud, {"pressure": "p"}, places).values["pressure"]
    expected = RBFInterpolator(points, wavy(points), neighbors=60)(places)
    verify(
        what="SciPy, 300 places between 4000 scattered points: root mean square of the difference",
        source="scipy.interpolate.RBFInterpolator, thin plates, 60 neighbours",
        expected=0,
        got=np.sqrt(np.mean((found - expected) ** 2)),
        tolerance=1e-3,
        why="two approximations of a field of size 1, of third order each",
        kind="library",
    )


# ---- profiles -------------------------------------------------------------------------------


def factors_by_mpmath(speed: Callable[[Any], Any], ways: int) -> tuple[float, float]:
    """Momentum and kinetic-energy factor over a pipe (2) or a slot (1), with the wall at 1."""
    import mpmath

    def mean(power: int) -> Any:
        return mpmath.quad(lambda r: speed(r) ** power * ways * r ** (ways - 1), [0, 0.5, 1])

    one = mean(1)
    return float(mean(2) / one**2), float(mean(3) / one**3)


def round_table(speed: Callable[[Array], Array], around: int = 64) -> tuple[float, float]:
    """The same of a table of speeds over the radius, laid on a round port."""
    share = np.linspace(0, 1, 201)
    table = SpeedTable(share, speed(share), "radius", relative=True)
    patch = PortPatch.of(duct(round_section(around, around // 8)), 1)
    found = profile_factors(patch, "table", table=table)
    return found.fine_momentum, found.fine_kinetic_energy


@pytest.mark.parametrize(
    ("n", "published"), [(0.5, (1.25, 1.7045454545)), (2.0, (1.4, 2.2615384615))], ids=["thinning", "thickening"]
)
def test_power_law_fluid_in_a_pipe(verify: Verify, n: float, published: tuple[float, float]) -> None:
    m = 1 + 1 / n
    verify(
        what=f"Power-law fluid of index {n:g} in a pipe, as a table: momentum and kinetic-energy factor",
        source="(3n+1)/(2n+1) and 3(3n+1)²/((2n+1)(5n+3))",
        expected=published,
        got=round_table(lambda r: 1 - r**m),
        tolerance=1e-2,
        why="64 facets around: a table over the radius is cut off at their corners",
        memory=True,
        kind="profile",
    )


@pytest.mark.parametrize("name", ["cosine", "Bingham plug"])
def test_mpmath_integrates_a_table_alike(verify: Verify, name: str) -> None:
    import mpmath

    def cosine(r: Any) -> Any:
        return mpmath.cos(mpmath.pi * r / 2)

    def plug(r: Any) -> Any:
        return mpmath.mpf(1) if r < 0.5 else 1 - ((r - 0.5) / 0.5) ** 2

    exact = {"cosine": cosine, "Bingham plug": plug}[name]
    shape: dict[str, Callable[[Array], Array]] = {
        "cosine": lambda r: np.cos(np.pi * r / 2),
        "Bingham plug": lambda r: np.where(r < 0.5, 1, 1 - ((r - 0.5) / 0.5) ** 2),
    }
    verify(
        what=f"mpmath, {name} profile in a pipe, as a table: momentum and kinetic-energy factor",
        source="mpmath.quad",
        expected=factors_by_mpmath(exact, 2),
        got=round_table(shape[name]),
        tolerance=1e-2,
        why="64 facets around: a table over the radius is cut off at their corners",
        kind="library",
    )


def test_scipy_integrates_a_rectangle_alike(verify: Verify) -> None:
    from scipy.integrate import dblquad

    # Fourier series of Shah and London 1978, ch. VII, half sides 1/2 and 3/2
    odd = np.arange(1, 60, 2)
    sign = (-1.0) ** ((odd - 1) // 2) / odd**3

    def speed(z: float, y: float) -> float:
        grown = np.exp(odd * np.pi * (z - 1.5)) + np.exp(-odd * np.pi * (z + 1.5))
        return float(np.sum(sign * (1 - grown / (1 + np.exp(-3 * odd * np.pi))) * np.cos(odd * np.pi * y)))

    one, two, three = (
        dblquad(lambda z, y, k=k: speed(z, y) ** k, 0, 0.5, 0, 1.5, epsabs=1e-7, epsrel=1e-6)[0] / 0.75
        for k in (1, 2, 3)
    )
    patch = PortPatch.of(duct(grid_section(np.linspace(0, 3, 13), np.linspace(0, 1, 5))), 1)
    found = profile_factors(patch, "laminar")
    verify(
        what="SciPy, laminar profile of a 3 : 1 duct: momentum and kinetic-energy factor",
        source="scipy.integrate.dblquad of the series of Shah and London 1978",
        expected=(two / one**2, three / one**3),
        got=(found.fine_momentum, found.fine_kinetic_energy),
        tolerance=3e-5,
        why="thousands of quadratic triangles",
        kind="library",
    )


def test_scipy_joins_the_rows_of_a_table_alike(verify: Verify) -> None:
    from scipy.interpolate import PchipInterpolator

    patch = PortPatch.of(duct(grid_section(np.linspace(0, 1, 7), np.linspace(0, 1, 7))), 1)
    at, speed = np.array([0, 0.1, 0.2, 0.5]), np.array([0, 1, 1.1, 1.2])
    shape = tabulated_shape(patch, ProfileOptions(table=SpeedTable(at, speed, "wall-distance")))
    x, y, _ = patch.samples.places.T
    distance = np.minimum(np.minimum(x, 1 - x), np.minimum(y, 1 - y))
    verify(
        what="SciPy, rows of a table of speeds over the distance from the wall: largest difference between them",
        source="scipy.interpolate.PchipInterpolator",
        expected=0,
        got=np.abs(shape - PchipInterpolator(at, speed)(distance)).max(),
        tolerance=1e-12,
        why="monotone cubics in both: round-off",
        kind="library",
    )


# ---- gas ------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("name", "pressure", "temperature"), [("nitrogen", 2e3, 300.0), ("argon", 1e3, 400.0), ("air", 2e3, 300.0)]
)
def test_coolprop_has_the_same_thin_gas(verify: Verify, name: str, pressure: float, temperature: float) -> None:
    from CoolProp.CoolProp import PropsSI

    def property_of(what: str) -> float:
        return float(PropsSI(what, "P", pressure, "T", temperature, name))

    constant = property_of("gas_constant") / property_of("molar_mass")
    ratio = property_of("CP0MASS") / (property_of("CP0MASS") - constant)
    surface = angle_block(2).surface()
    state = {"pressure": pressure, "temperature": temperature}
    fields = [
        array_field(surface, key, 1, np.full(surface.point_count, value), at="nodes") for key, value in state.items()
    ]
    density = ideal_density(
        surface, *fields, meaning=PressureMeaning(kind="absolute"), ambient=101325.0, gas_constant=constant
    )
    # a square metre takes in 1 m³/s
    flow = replace(lay_flow(surface, density=1.0, velocity=(1.0, 0, 0)), density=density)
    found = balance_of(surface, flow, encloses_hardware=False).balance.mass.outflow
    shared: dict[str, Any] = {
        "source": "CoolProp: the equation of state of the real gas",
        "relative": True,
        "kind": "library",
    }
    verify(
        what=f"CoolProp, {name} at {pressure:g} Pa and {temperature:g} K: density",
        expected=property_of("D"),
        got=found,
        unit="kg/m³",
        tolerance=2e-5,
        why="so thin a gas is nearly ideal",
        **shared,
    )
    verify(
        what=f"CoolProp, {name} at {pressure:g} Pa and {temperature:g} K: speed of sound",
        expected=property_of("A"),
        got=sound_speed(pressure, found, ratio),
        unit="m/s",
        tolerance=2e-5,
        why="so thin a gas is nearly ideal",
        **shared,
    )


# ---- units ----------------------------------------------------------------------------------


def test_pint_has_the_same_factors(verify: Verify) -> None:
    off = []
    for name in sorted(set(UNITS) - {"degC", "degF"}):
        theirs = REGISTRY.Quantity(FOR_PINT.get(name, name)).to_base_units().magnitude
        off.append(abs(UNITS[name].factor / theirs - 1))
    verify(
        what=f"pint, {len(off)} units: largest relative difference of their factors",
        source="pint: its registry",
        expected=0,
        got=max(off),
        tolerance=1e-12,
        why="round-off",
        kind="library",
    )
