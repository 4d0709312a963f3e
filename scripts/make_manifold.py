"""Make the shipped case of a three-port manifold with a computed flow.

An oil distribution block: oil enters by ``feed``, leaves by ``spindle`` (a small
round bore, up and aside) and ``gallery`` (a flattened bore, down and aside). The scenario and
its numbers are invented. The flow is steady, laminar and incompressible, computed on three meshes without
gravity. For each mesh the script writes to ``meshes/manifold/``

- the wetted surface (VTK PolyData, millimetres, linear triangles): each boundary face of
  the computation is split in four, so that the quadratic velocity is exact at every node written;
- a case file that reads it;

and once ``reference.json`` (what the computation itself says, SI units) and the volume of the coarse mesh.

Usage: ``python scripts/make_manifold.py`` (needs scikit-fem; some minutes, about 5 GB).
"""

from __future__ import annotations

import argparse
import json
import os
import time
from dataclasses import dataclass
from pathlib import Path
from typing import Any

# Set before NumPy loads: threads cost the short vector operations of the solver more than they give.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

import numpy as np
from _manifold_flow import Domain, Flow, add_midpoints, head_load, port_quadrature, solve, wall_reaction
from _manifold_shape import ARMS, INLET, WALL_TAG, Lattice, build_lattice, carry_over, map_points
from numpy.typing import NDArray
from skfem import MeshTet

__all__ = ["main"]

Array = NDArray[np.float64]
Integers = NDArray[np.int64]

MESHES = {"coarse": 6, "medium": 10, "fine": 14}  # hexahedra across each section
VOLUME_MESH = "coarse"
DENSITY = 880.0  # kg/m^3
VISCOSITY = 0.15  # Pa s
GRAVITY = np.array([0.0, 0.0, -9.80665])  # m/s^2, of the case files; the flow is computed without
FLOW_RATE = 20e-3 / 60  # m^3/s
DIAMETER = 2 * INLET.half_section[0]  # m
SPEED = FLOW_RATE / (np.pi / 4 * DIAMETER**2)  # m/s, mean over the round inlet
REYNOLDS = DENSITY * SPEED * DIAMETER / VISCOSITY
STRESS = DENSITY * SPEED**2  # Pa

CASE = """\
# Oil distribution block, {level} mesh. Made by scripts/make_manifold.py; the scenario is invented.
# A steady laminar flow was computed (Reynolds number {reynolds:.0f}) and its wetted surface exported.
title = "Oil distribution block, {level} mesh"

[surface]
file = "manifold_{level}.vtp"
length_unit = "mm"                      # the export is in millimetres; all else is SI
facets_are_geometry = true              # the flow was computed within these very facets
groups = {{ array = "region" }}           # one integer a face

[fluid]
density = "{density:g} kg/m^3"
ambient_pressure = "101325 Pa"          # printed for absolute pressures; the exported one is gauge
gravity = {gravity}          # weight of oil and block, head in the oil

[flow]
velocity = {{ array = "velocity", unit = "m/s", frame = "absolute" }}
# The flow was computed without gravity: its pressure holds no hydrostatic head, so "removed".
# The head is put back, zero at the origin: a hose from each port down to that height.
pressure = {{ array = "pressure", unit = "Pa", kind = "gauge", head = "removed" }}
# Viscous part only, the pull of the oil on the wall; the ports carry it with the same sign.
traction = {{ array = "wall_traction", unit = "Pa", acts_on = "wall" }}

[groups.feed]                           # round, 30 mm
role = "inlet"
tag = 1

[groups.spindle]                        # round, 21 mm
role = "outlet"
tag = 2

[groups.gallery]                        # flattened, 30 mm by 19 mm
role = "outlet"
tag = 3

[groups.housing]                        # all that the oil wets
role = "wall"
tag = 4

[hardware]                              # the aluminium block, empty
mass = "1.15 kg"
centre = [0.074, 0.005, 0.057]

[anchor]                                # the foot of the bracket
at = [0, 0, 0]

# What the flow computation itself found for the load on the housing, from its assembled residual, with
# the hydrostatic head added (both are in reference.json). Set it beside the result by removing the comment signs:
# [reported]
# force = {force}
# moment = {moment}
# on = ["housing"]
"""


@dataclass(frozen=True, eq=False)
class Solution:
    """One mesh and the flow on it, with the lattice that the next mesh starts from."""

    lattice: Lattice
    domain: Domain
    flow: Flow

    def halves(self) -> Array:
        """Twice the lattice coordinates of each velocity node, shape (n_nodes, 3)."""
        space, mesh = self.domain.velocity, self.domain.mesh
        result = np.empty((space.N, 3))
        result[space.nodal_dofs[0]] = 2 * self.lattice.nodes
        result[space.edge_dofs[0]] = self.lattice.nodes[mesh.edges].sum(axis=0)
        return result


def main() -> None:
    """Make all files of the case."""
    parser = argparse.ArgumentParser(description=(__doc__ or "").partition("\n")[0])
    default = Path(__file__).resolve().parent.parent / "meshes" / "manifold"
    parser.add_argument("--out", type=Path, default=default, help="folder to write to (default: %(default)s)")
    folder = parser.parse_args().out
    folder.mkdir(parents=True, exist_ok=True)
    begin = time.perf_counter()
    print(f"Reynolds number {REYNOLDS:.1f}, mean inlet speed {SPEED:.4f} m/s", flush=True)
    results: dict[str, Any] = {}
    solution = None
    for level, cells in MESHES.items():
        start = time.perf_counter()
        solution = _solve_level(level, cells, solution)
        results[level] = _describe(solution)
        _write_surface(folder / f"manifold_{level}.vtp", solution)
        printed = {
            key: [float(f"{x:.5g}") for x in np.add(results[level]["reaction"][key], results[level]["head"][key])]
            for key in ("force", "moment")
        }
        text = CASE.format(level=level, reynolds=REYNOLDS, density=DENSITY, gravity=GRAVITY.tolist(), **printed)
        (folder / f"manifold_{level}.toml").write_text(text, encoding="utf-8")
        if level == VOLUME_MESH:
            _write_volume(folder / f"manifold_{level}.vtu", solution)
        print(f"{level}: {time.perf_counter() - start:.0f} s", flush=True)
    (folder / "reference.json").write_text(json.dumps(_reference(results), indent=1) + "\n", encoding="utf-8")
    print(f"written to {folder} in {time.perf_counter() - begin:.0f} s")


def _solve_level(level: str, cells: int, coarser: Solution | None) -> Solution:
    lattice = build_lattice(cells)
    points = map_points(lattice.nodes.astype(float), lattice) / DIAMETER
    mesh = MeshTet(np.ascontiguousarray(points.T), np.ascontiguousarray(lattice.tetrahedra.T))
    boundary = mesh.boundary_facets()
    corners = lattice.nodes[mesh.facets[:, boundary]]
    ports = {}
    for arm in ARMS:
        axis, side = arm.leaves
        end = cells + lattice.layers[arm.name] if side > 0 else -lattice.layers[arm.name]
        ports[arm.name] = boundary[np.all(corners[..., axis] == end, axis=0)]
    domain = Domain.build(mesh, ports, INLET.name)
    unknowns = 3 * domain.velocity.N + domain.pressure.N
    print(f"{level}: {mesh.nelements} tetrahedra, {unknowns} unknowns", flush=True)
    unsolved = Solution(lattice, domain, Flow(np.zeros((3, 0)), np.zeros(0), REYNOLDS, 0))
    guess = None
    if coarser is not None:
        values = np.vstack([coarser.flow.velocity, add_midpoints(coarser.domain, coarser.flow.pressure)])
        guess = carry_over(values.T, coarser.lattice, coarser.halves(), lattice, unsolved.halves()).T
    # the flow rate is given, so that the three meshes carry the same flow through their own polygons
    flow = solve(domain, REYNOLDS, np.pi / 4, guess, lambda text: print(text, flush=True))
    return Solution(lattice, domain, flow)


def _describe(solution: Solution) -> dict[str, Any]:
    domain, flow = solution.domain, solution.flow
    force, moment = wall_reaction(domain, flow)
    other_force, other_moment = wall_reaction(domain, flow, whole_inlet=True)
    direct = port_quadrature(domain, flow, domain.wall)
    head_force, head_moment = head_load(domain, domain.wall, DENSITY * GRAVITY * DIAMETER)
    ports = {}
    for name, facets in domain.ports.items():
        values = port_quadrature(domain, flow, facets)
        ports[name] = {
            "mass_flow": _rounded(values["flow"] * DENSITY * SPEED * DIAMETER**2),
            "area_vector": _rounded(values["area_vector"] * DIAMETER**2),
            "momentum_flux": _rounded(values["momentum_flux"] * STRESS * DIAMETER**2),
            "pressure_force": _rounded(values["pressure_force"] * STRESS * DIAMETER**2),
            "viscous_force": _rounded(values["viscous_force"] * STRESS * DIAMETER**2),
        }
        if name != INLET.name and values["reversed_flow"] < 0:
            raise SystemExit(f"flow comes back in through {name}: lengthen that arm")
    return {
        "cells_across": solution.lattice.cells,
        "tetrahedra": int(domain.mesh.nelements),
        "unknowns": int(3 * domain.velocity.N + domain.pressure.N),
        "reynolds": _rounded(REYNOLDS),
        "reaction": {
            "force": _rounded(force * STRESS * DIAMETER**2),
            "moment": _rounded(moment * STRESS * DIAMETER**3),
            "force_spread": _rounded(np.linalg.norm(other_force - force) * STRESS * DIAMETER**2),
            "moment_spread": _rounded(np.linalg.norm(other_moment - moment) * STRESS * DIAMETER**3),
        },
        "head": {
            "force": _rounded(head_force * DIAMETER**2),
            "moment": _rounded(head_moment * DIAMETER**3),
        },
        "wall_stress_force": _rounded(-(direct["pressure_force"] + direct["viscous_force"]) * STRESS * DIAMETER**2),
        "ports": ports,
    }


def _reference(results: dict[str, Any]) -> dict[str, Any]:
    return {
        "about": "What the flow computation itself says, in SI units; made by scripts/make_manifold.py",
        "reaction": "force and moment of the flow on the housing from the assembled momentum residual at the wall "
        "nodes; spread: length of the difference to the same from another test field, which tells how well it is known",
        "head": "what hydrostatic head, zero at the origin, adds to the load on the housing (reaction: without)",
        "wall_stress_force": "the same force by quadrature of the finite-element stress over the wall, less accurate",
        "ports": "quadrature of the finite-element solution, with the normal out of the fluid: mass flow is positive "
        "where it leaves, forces act on the fluid",
        "density": DENSITY,
        "gravity": GRAVITY.tolist(),
        "viscosity": VISCOSITY,
        "flow_rate": _rounded(FLOW_RATE),
        "inlet_diameter": DIAMETER,
        "moment_about": [0.0, 0.0, 0.0],
        "meshes": results,
    }


def _rounded(value: Any) -> Any:
    # nine digits: more would differ from machine to machine
    if isinstance(value, np.ndarray):
        return [_rounded(float(entry)) for entry in value]
    return float(f"{value:.9g}")


def _midpoint_finder(solution: Solution) -> Any:
    """A function from pairs of corners to the velocity node midway."""
    space, mesh = solution.domain.velocity, solution.domain.mesh
    keys = np.sort(mesh.edges, axis=0)
    keys = keys[0].astype(np.int64) * mesh.nvertices + keys[1]
    order = np.argsort(keys)
    nodes = space.edge_dofs[0][order]

    def find(a: Integers, b: Integers) -> Integers:
        wanted = np.minimum(a, b).astype(np.int64) * mesh.nvertices + np.maximum(a, b)
        return np.asarray(nodes[np.searchsorted(keys[order], wanted)])

    return find


def _write_surface(path: Path, solution: Solution) -> None:
    from vtkmodules.util.numpy_support import numpy_to_vtk
    from vtkmodules.vtkCommonDataModel import vtkCellArray, vtkPolyData
    from vtkmodules.vtkIOXML import vtkXMLPolyDataWriter

    domain, flow, mesh = solution.domain, solution.flow, solution.domain.mesh
    groups = {arm.tag: domain.ports[arm.name] for arm in ARMS} | {WALL_TAG: domain.wall}
    facets = np.concatenate(list(groups.values()))
    region = np.repeat(list(groups), [4 * part.size for part in groups.values()])
    a, b, c = mesh.facets[:, facets]
    find = _midpoint_finder(solution)
    ab, bc, ca = find(a, b), find(b, c), find(c, a)
    a, b, c = (domain.velocity.nodal_dofs[0][corner] for corner in (a, b, c))
    parts = [(a, ab, ca), (b, bc, ab), (c, ca, bc), (ab, bc, ca)]
    faces = np.stack([np.stack(part, axis=1) for part in parts], axis=1)

    # one quadrature point at the centroid of each part, where its traction is taken
    at = np.array([[1, 4, 1, 2], [1, 1, 4, 2]]) / 6.0
    basis = domain.facet_basis(facets, (at, np.full(4, 0.125)))
    position = domain.velocity.doflocs.T
    centroid = np.moveaxis(np.asarray(basis.global_coordinates()), 0, -1)
    if not np.allclose(position[faces].mean(axis=2), centroid, rtol=0, atol=1e-9):
        raise RuntimeError("the parts of the faces do not match the points of the quadrature")
    normal = np.asarray(basis.normals)
    slope = np.stack([np.asarray(basis.interpolate(u).grad) for u in flow.velocity])
    on_fluid = np.einsum("kjfq,jfq->fqk", slope + np.swapaxes(slope, 0, 1), normal) / flow.reynolds

    triangles = faces.reshape(-1, 3)
    corners = position[triangles]
    area = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    inward = np.einsum("fk,fk->f", area, np.moveaxis(normal, 0, -1).reshape(-1, 3)) < 0
    triangles[inward] = triangles[inward][:, ::-1]

    used, connectivity = np.unique(triangles, return_inverse=True)
    cells = vtkCellArray()
    offsets = np.arange(0, 3 * triangles.shape[0] + 1, 3, dtype=np.int64)
    cells.SetData(
        numpy_to_vtk(offsets, deep=True, array_type=12),
        numpy_to_vtk(connectivity.ravel().astype(np.int64), deep=True, array_type=12),
    )
    cells.ConvertTo32BitStorage()
    surface = vtkPolyData()
    surface.SetPolys(cells)
    _attach(surface, solution, used)
    traction = numpy_to_vtk((-STRESS * on_fluid.reshape(-1, 3)).astype(np.float32), deep=True)
    traction.SetName("wall_traction")
    tags = numpy_to_vtk(region.astype(np.uint8), deep=True)
    tags.SetName("region")
    surface.GetCellData().AddArray(traction)
    surface.GetCellData().AddArray(tags)
    _save(vtkXMLPolyDataWriter(), surface, path)


def _write_volume(path: Path, solution: Solution) -> None:
    """Each tetrahedron split in eight, so that the nodes are those of the quadratic velocity."""
    from vtkmodules.util.numpy_support import numpy_to_vtk
    from vtkmodules.vtkCommonDataModel import VTK_TETRA, vtkCellArray, vtkUnstructuredGrid
    from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridWriter

    domain, mesh = solution.domain, solution.domain.mesh
    find = _midpoint_finder(solution)
    corner = [domain.velocity.nodal_dofs[0][part] for part in mesh.t]
    middle = {(i, j): find(mesh.t[i], mesh.t[j]) for i in range(4) for j in range(4) if i != j}
    parts = [(corner[i], *(middle[i, j] for j in range(4) if j != i)) for i in range(4)]
    # the octahedron left in the middle, cut along the diagonal from edge 0-2 to edge 1-3
    ring = [middle[0, 1], middle[0, 3], middle[2, 3], middle[1, 2]]
    parts += [(middle[0, 2], middle[1, 3], ring[k], ring[(k + 1) % 4]) for k in range(4)]
    tetrahedra = np.stack([np.stack(part, axis=1) for part in parts], axis=1).reshape(-1, 4)
    corners = domain.velocity.doflocs.T[tetrahedra]
    negative = np.linalg.det(corners[:, 1:] - corners[:, :1]) < 0
    tetrahedra[negative] = tetrahedra[negative][:, [0, 2, 1, 3]]
    cells = vtkCellArray()
    offsets = np.arange(0, tetrahedra.size + 1, 4, dtype=np.int64)
    cells.SetData(
        numpy_to_vtk(offsets, deep=True, array_type=12), numpy_to_vtk(tetrahedra.ravel(), deep=True, array_type=12)
    )
    cells.ConvertTo32BitStorage()
    grid = vtkUnstructuredGrid()
    grid.SetCells(VTK_TETRA, cells)
    _attach(grid, solution, np.arange(domain.velocity.N))
    _save(vtkXMLUnstructuredGridWriter(), grid, path)


def _attach(data: Any, solution: Solution, nodes: Integers) -> None:
    """Give a data set the points in millimetres, velocity in m/s and gauge pressure in Pa of some nodes."""
    from vtkmodules.util.numpy_support import numpy_to_vtk
    from vtkmodules.vtkCommonCore import vtkPoints

    domain, flow = solution.domain, solution.flow
    points = vtkPoints()
    millimetres = domain.velocity.doflocs[:, nodes].T * DIAMETER * 1e3
    points.SetData(numpy_to_vtk(millimetres.astype(np.float32), deep=True))
    data.SetPoints(points)
    velocity = SPEED * flow.velocity[:, nodes].T
    pressure = STRESS * add_midpoints(domain, flow.pressure)[nodes]
    for name, values in (("velocity", velocity), ("pressure", pressure)):
        array = numpy_to_vtk(values.astype(np.float32), deep=True)
        array.SetName(name)
        data.GetPointData().AddArray(array)
    density = numpy_to_vtk(np.full(data.GetNumberOfCells(), DENSITY, dtype=np.float32), deep=True)
    density.SetName("density")
    data.GetCellData().AddArray(density)


def _save(writer: Any, data: Any, path: Path) -> None:
    writer.SetFileName(str(path))
    writer.SetInputData(data)
    writer.SetDataModeToAppended()
    writer.EncodeAppendedDataOff()
    writer.SetCompressorTypeToZLib()
    writer.SetCompressionLevel(9)
    if writer.Write() != 1:
        raise SystemExit(f"{path} cannot be written")


if __name__ == "__main__":
    main()
