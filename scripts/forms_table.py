"""Export one flow in every form that fluxmesh reads, and compare the loads.

The flow is that of the coarse shipped manifold. Each form is written to a folder with a case of its own, balanced,
and set beside the first; gravity is left out. What a form itself reports of its error: the
relative residual of momentum where the walls carry data, the error of points left out for a cloud.

Usage: python scripts/forms_table.py [FOLDER]
"""

from __future__ import annotations

import sys
import tempfile
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pyvista

import fluxmesh

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))
from tests.mesh_writing import cgns_base, cgns_condition, cgns_section, cgns_solution, cgns_zone, write_cgns

MANIFOLD = Path(__file__).resolve().parent.parent / "meshes" / "manifold"
PORTS = {"feed": ("inlet", 1), "spindle": ("outlet", 2), "gallery": ("outlet", 3)}
DENSITY = 880.0
HEAD = """title = "{title}"
[fluid]
density = "880 kg/m^3"
ambient_pressure = "101325 Pa"
viscosity = "0.15 Pa s"
"""
ARRAYS = """velocity = { array = "velocity" }
pressure = { array = "pressure" }
"""
TRACTION = 'traction = { array = "wall_traction", acts_on = "wall" }\n'
TAGGED = "".join(f'[groups.{name}]\nrole = "{role}"\ntag = {tag}\n' for name, (role, tag) in PORTS.items())
TAGGED += '[groups.housing]\nrole = "wall"\ntag = 4\n'
SETS = "".join(f'[groups.{name}]\nrole = "{role}"\n' for name, (role, _) in PORTS.items())
SETS += '[groups.housing]\nrole = "wall"\n'


@dataclass(frozen=True)
class Source:
    """The exported surface and volume, in millimetres."""

    surface: pyvista.PolyData
    volume: pyvista.UnstructuredGrid

    @property
    def triangles(self) -> np.ndarray:
        return self.surface.regular_faces

    def face_means(self, name: str) -> np.ndarray:
        return np.asarray(self.surface.point_data[name], dtype=float)[self.triangles].mean(axis=1)

    def area_vectors(self) -> np.ndarray:
        a, b, c = (np.asarray(self.surface.points, dtype=float)[self.triangles[:, k]] * 1e-3 for k in range(3))
        return np.cross(b - a, c - a) / 2

    def part(self, tag: int) -> pyvista.PolyData:
        cells = np.flatnonzero(np.asarray(self.surface.cell_data["region"]) == tag)
        return self.surface.extract_cells(cells).extract_surface(algorithm="dataset_surface")


def case(title: str, file: str, flow: str, groups: str, surface: str = "") -> str:
    named = f'[surface]\nfile = "{file}"\nlength_unit = "mm"\n{surface}'
    return HEAD.format(title=title) + named + (f"[flow]\n{flow}" if flow else "") + groups


REGION = 'groups = { array = "region" }\n'


def on_nodes(source: Source, folder: Path) -> str:
    source.surface.save(folder / "nodes.vtp")
    return case("nodes", "nodes.vtp", ARRAYS + TRACTION, TAGGED, REGION)


def on_faces(source: Source, folder: Path) -> str:
    mesh = source.surface.copy()
    for name in ("velocity", "pressure"):
        mesh.cell_data[name] = source.face_means(name)
        del mesh.point_data[name]
    mesh.save(folder / "faces.vtp")
    return case("faces", "faces.vtp", ARRAYS + TRACTION, TAGGED, REGION)


def mixed(source: Source, folder: Path) -> str:
    mesh = source.surface.copy()
    mesh.cell_data["pressure"] = source.face_means("pressure")
    del mesh.point_data["pressure"]
    mesh.save(folder / "mixed.vtp")
    return case("mixed", "mixed.vtp", ARRAYS + TRACTION, TAGGED, REGION)


def per_face_flux(source: Source, folder: Path) -> str:
    mesh = source.surface.copy()
    mean = source.face_means("velocity")
    mesh.cell_data["flux"] = DENSITY * np.einsum("ij,ij->i", mean, source.area_vectors())
    mesh.save(folder / "flux.vtp")
    return case("flux", "flux.vtp", ARRAYS + TRACTION + 'mass_flux = { array = "flux" }\n', TAGGED, REGION)


def bare(source: Source) -> pyvista.PolyData:
    """The surface with its groups and nothing else."""
    mesh = source.surface.copy()
    for name in ("velocity", "pressure"):
        del mesh.point_data[name]
    del mesh.cell_data["wall_traction"]
    return mesh


def volume(source: Source, folder: Path) -> str:
    bare(source).save(folder / "bare.vtp")
    source.volume.save(folder / "volume.vtu")
    return case("volume", "bare.vtp", ARRAYS + 'volume = { file = "volume.vtu", unit = "mm" }\n', TAGGED, REGION)


def points(source: Source, folder: Path) -> str:
    bare(source).save(folder / "bare.vtp")
    data = source.volume.point_data
    table = np.column_stack([source.volume.points, data["velocity"], data["pressure"]])
    np.savetxt(folder / "cloud.csv", table, delimiter=",", header="x,y,z,u,v,w,p", comments="", fmt="%.9g")
    flow = 'velocity = { array = ["u", "v", "w"] }\npressure = { array = "p" }\n'
    flow += 'points = { file = "cloud.csv", unit = "mm" }\n'
    return case("points", "bare.vtp", flow, TAGGED, REGION)


def blocks(source: Source, folder: Path) -> str:
    tags = {name: tag for name, (_, tag) in PORTS.items()} | {"housing": 4}
    pyvista.MultiBlock({name: source.part(tag) for name, tag in tags.items()}).save(folder / "blocks.vtm")
    return case("blocks", "blocks.vtm", ARRAYS + TRACTION, SETS, "groups = { sets = true }\n")


def cgns(source: Source, folder: Path) -> str:
    """One zone with a section and a boundary condition for each group; fields on vertices, traction on none."""
    triangles, region = source.triangles, np.asarray(source.surface.cell_data["region"])
    data = source.surface.point_data
    sections, conditions, first = [], [], 1
    kinds = {"feed": "BCInflow", "spindle": "BCOutflow", "gallery": "BCOutflow", "housing": "BCWallViscous"}
    for (name, kind), tag in zip(kinds.items(), (1, 2, 3, 4)):
        part = triangles[region == tag]
        sections.append(cgns_section(name, 5, first, part))
        conditions.append(cgns_condition(name, kind, "PointRange", [first, first + len(part) - 1]))
        first += len(part)
    fields = {f"Velocity{axis}": np.asarray(data["velocity"][:, k], dtype=float) for k, axis in enumerate("XYZ")}
    fields["Pressure"] = np.asarray(data["pressure"], dtype=float)
    sizes = np.array([[source.surface.n_points], [len(triangles)], [0]])
    zone = cgns_zone(
        "Zone",
        np.asarray(source.surface.points, dtype=float),
        sizes,
        *sections,
        ("ZoneBC", "ZoneBC_t", None, conditions),
        cgns_solution("Solution", "Vertex", fields),
    )
    write_cgns(folder / "flow.cgns", cgns_base(zone, cells=2))
    flow = 'velocity = { array = ["VelocityX", "VelocityY", "VelocityZ"] }\npressure = { array = "Pressure" }\n'
    return case("cgns", "flow.cgns", flow, SETS, "groups = { sets = true }\n")


def skin(source: Source, folder: Path) -> str:
    source.volume.save(folder / "skin.vtu")
    groups = ""
    for name, (role, tag) in PORTS.items():
        chosen = np.asarray(source.surface.cell_data["region"]) == tag
        vector = source.area_vectors()[chosen].sum(axis=0)
        near = np.asarray(source.surface.points, dtype=float)[source.triangles[chosen]].mean(axis=(0, 1)) * 1e-3
        normal = (vector / np.linalg.norm(vector)).tolist()
        groups += f'[groups.{name}]\nrole = "{role}"\npick = {{ normal = {normal}, near = {near.tolist()} }}\n'
    groups += '[groups.housing]\nrole = "wall"\nrest = true\n'
    return case("skin", "skin.vtu", ARRAYS, groups)


def supplied(source: Source, folder: Path) -> str:
    bare(source).save(folder / "bare.vtp")
    exact = fluxmesh.run_case(fluxmesh.read_case(folder / "nodes.toml")).data()
    groups = ""
    for name, (role, tag) in PORTS.items():
        flow = abs(exact["groups"][name]["mass_flow"]) / DENSITY
        pressure = exact["ports"][name]["mean_pressure"]["area"]
        groups += f'[groups.{name}]\nrole = "{role}"\ntag = {tag}\nflow_rate = {flow!r}\npressure = {pressure!r}\n'
        groups += 'profile = "laminar"\n'
    groups += '[groups.housing]\nrole = "wall"\ntag = 4\n'
    return case("supplied", "bare.vtp", "", groups, REGION)


FORMS: dict[str, Callable[[Source, Path], str]] = {
    "nodes": on_nodes,
    "faces": on_faces,
    "mixed: pressure on faces, velocity on nodes": mixed,
    "mass flux through each face": per_face_flux,
    "volume, sampled": volume,
    "scattered points": points,
    "multi-block": blocks,
    "CGNS, boundary conditions": cgns,
    "skin of a volume": skin,
    "supplied flow, laminar profile": supplied,
}


def rows(folder: Path) -> list[dict[str, float | str | None]]:
    """Loads of each form, and how far they are from those of the first."""
    source = Source(pyvista.read(MANIFOLD / "manifold_coarse.vtp"), pyvista.read(MANIFOLD / "manifold_coarse.vtu"))
    table: list[dict[str, float | str | None]] = []
    first = None
    for form, write in FORMS.items():
        path = folder / f"{write.__name__.removeprefix('on_')}.toml"
        path.write_text(write(source, folder), encoding="utf-8")
        outcome = fluxmesh.run_case(fluxmesh.read_case(path))
        load = outcome.balance.load
        force = load.from_balance.force
        first = force if first is None else first
        size = float(np.linalg.norm(first))
        walls = load.from_walls
        lacking = not outcome.balance.setting.data.traction[outcome.balance.setting.walls()].all()
        residual = None if walls is None or lacking else float(np.linalg.norm(walls.force - force)) / size
        table.append(
            {
                "form": form,
                "force": float(np.linalg.norm(force)),
                "apart": float(np.linalg.norm(force - first)) / size,
                "mass": outcome.balance.mass.relative,
                "residual": residual,
                "told": "; ".join(outcome.flow.notes),
            }
        )
    return table


def main() -> None:
    with tempfile.TemporaryDirectory() as name:
        folder = Path(sys.argv[1]) if len(sys.argv) > 1 else Path(name)
        folder.mkdir(parents=True, exist_ok=True)
        print("| form | load from balance, N | off the first | mass residual | walls against balance | it says |")
        print("|---|---|---|---|---|---|")
        for row in rows(folder):
            residual = "–" if row["residual"] is None else f"{row['residual']:.2%}"
            print(
                f"| {row['form']} | {row['force']:.5f} | {row['apart']:.2%} | {row['mass']:.1e} | {residual} "
                f"| {row['told'] or '–'} |"
            )


if __name__ == "__main__":
    main()
