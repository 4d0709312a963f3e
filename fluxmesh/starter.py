"""A commented case proposed from what is found in a mesh file."""

from __future__ import annotations

import json
import os
import re
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import OutputError
from fluxmesh.surface.face_geometry import corners, face_geometry
from fluxmesh.surface.files import read_mesh
from fluxmesh.surface.planar import planar_regions
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.touching import edge_neighbours
from fluxmesh.units import unit_factor

__all__ = ["propose_case", "write_case"]

_MOST_GROUPS: Final = 64
_PLANE: Final = 0.999
_SHARP: Final = float(np.cos(np.radians(20.0)))
# words that exports commonly use for a quantity (common practice, no source; the capitals are CGNS/SIDS names)
_WORDS: Final = {
    "velocity": ("velocity", "vel", "u", "v", "uvw"),
    "pressure": ("pressure", "p", "pres", "static_pressure", "pstatic", "p_rgh"),
    "traction": ("traction", "wall_traction", "wall_shear_stress", "shear_stress", "wall_shear", "tau", "skinfriction"),
    "density": ("density", "rho"),
}


@dataclass(frozen=True)
class _Group:
    """A face group as it was found: key words of its table, and what to say about it."""

    name: str
    where: str
    remark: str
    plane: bool
    flow: float | None


def _word(name: str) -> str:
    return re.sub(r"[^a-z0-9]+", "_", name.lower()).strip("_")


def _guess(mesh: RawMesh, quantity: str) -> str | None:
    """Name of the array that is likely the quantity, by its name and number of components."""
    vector = quantity in ("velocity", "traction")
    for word in _WORDS[quantity]:
        for pool in (mesh.node_arrays, mesh.face_arrays):
            for name, values in pool.items():
                wide = values.ndim == 2 and values.shape[1] == 3
                if _word(name) == word and values.dtype.kind == "f" and wide == vector:
                    return name
    return None


def _tag_array(mesh: RawMesh) -> str | None:
    """Face array that is likely to tell groups apart: text or whole numbers with few values."""
    best: tuple[int, str] | None = None
    for name, values in mesh.face_arrays.items():
        if values.ndim != 1 or values.dtype.kind not in "iuUS":
            continue
        count = np.unique(values).size
        if 1 < count <= _MOST_GROUPS and (best is None or count < best[0]):
            best = (count, name)
    return None if best is None else best[1]


def _vector(values: Any) -> str:
    return "[" + ", ".join(f"{float(x) + 0.0:.6g}" for x in values) + "]"


def _normal_flow(mesh: RawMesh, velocity: str | None, entries: NDArray[np.int64], normals: NDArray[np.float64]) -> Any:
    """Volume flow through each face by the mean of its corners, or None."""
    if velocity is None or velocity not in mesh.node_arrays:
        return None
    sizes = np.full(mesh.face_count, 3) if mesh.offsets is None else np.diff(mesh.offsets)
    starts = np.concatenate([[0], np.cumsum(sizes)[:-1]])
    mean = np.add.reduceat(mesh.node_arrays[velocity][entries], starts, axis=0) / sizes[:, None]
    return np.einsum("ij,ij->i", mean, normals)


def _tagged(mesh: RawMesh, array: str, factor: float, velocity: str | None) -> list[_Group]:
    entries, offsets = corners(mesh.connectivity, mesh.offsets, mesh.kinds)
    points = np.asarray(mesh.points, dtype=np.float64) * factor
    geometry = face_geometry(points, entries, offsets)
    vectors = geometry.normals * geometry.areas[:, None]
    flow = _normal_flow(mesh, velocity, mesh.connectivity, vectors)
    values = mesh.face_arrays[array]
    groups = []
    for value in np.unique(values):
        chosen = values == value
        area, vector = float(geometry.areas[chosen].sum()), vectors[chosen].sum(axis=0)
        flat = float(np.linalg.norm(vector)) / area if area > 0 else 0.0
        through = None if flow is None else float(flow[chosen].sum())
        remark = f"{int(chosen.sum())} faces, {area:.4g} m²"
        if flat > _PLANE:
            remark += f", plane, normal {_vector(vector / np.linalg.norm(vector))}"
        if through is not None:
            remark += f", volume flow along the faces' normals {through:.4g} m³/s"
        text = isinstance(value, str | bytes)
        name = str(value) if text else f"group_{value}"
        tag = "" if text else f"tag = {value}"
        groups.append(_Group(name, tag, remark, flat > _PLANE, through))
    return groups


def _planes(mesh: RawMesh, factor: float) -> list[_Group]:
    points = np.asarray(mesh.points, dtype=np.float64) * factor
    found = planar_regions(points, mesh.connectivity, mesh.offsets, kinds=mesh.kinds)
    entries, offsets = corners(mesh.connectivity, mesh.offsets, mesh.kinds)
    whole = face_geometry(points, entries, offsets)
    area = float(whole.areas.sum())
    every = np.arange(mesh.face_count)
    size = float(np.linalg.norm(np.ptp(points, axis=0)))
    pairs = edge_neighbours(points, entries, offsets, every, 1e-6 * size)
    blunt = np.einsum("ij,ij->i", whole.normals[pairs[:, 0]], whole.normals[pairs[:, 1]]) > _SHARP
    groups: list[_Group] = []
    for region in found:
        inside = np.zeros(mesh.face_count, np.bool_)
        inside[region.faces] = True
        # a port ends at a sharp edge all round; a strip of a bent wall goes on smoothly
        rim = inside[pairs[:, 0]] != inside[pairs[:, 1]]
        if region.area < 1e-3 * area or (rim & blunt).any():
            continue
        name = f"port_{len(groups) + 1}"
        where = f"pick = {{ normal = {_vector(region.normal)}, near = {_vector(region.centroid)} }}"
        groups.append(_Group(name, where, f"{region.faces.size} faces, {region.area:.4g} m², plane", True, None))
    groups.append(_Group("shell", "rest = true", "all other faces", False, None))
    return groups


def _role(group: _Group, seen_inlet: bool) -> str:
    if not group.plane:
        return "wall"
    if group.flow is not None:
        return "inlet" if group.flow < 0 else "outlet" if group.flow > 0 else "wall"
    return "outlet" if seen_inlet else "inlet"


def propose_case(mesh_file: Path, *, unit: str = "m", beside: Path | None = None) -> str:
    """Return a commented case for a mesh.

    Parameters
    ----------
    mesh_file : pathlib.Path
        A file with a surface.
    unit : str, optional
        Length unit of its coordinates.
    beside : pathlib.Path, optional
        Where the case will be written, so that it names the mesh relative to
        there; the current folder by default.

    Returns
    -------
    str
        TOML. Lines that a user must fill in start with ``# FILL IN``.

    Raises
    ------
    InputError
        The file cannot be read, or the unit is no length.
    """
    factor = unit_factor(unit, "m", "--unit")
    mesh = read_mesh(mesh_file)
    folder = Path.cwd() if beside is None else beside.resolve().parent
    named = os.path.relpath(mesh_file.resolve(), folder)
    guessed = {quantity: _guess(mesh, quantity) for quantity in _WORDS}
    array = _tag_array(mesh)
    groups = _planes(mesh, factor) if array is None else _tagged(mesh, array, factor, guessed["velocity"])
    lines = [
        f"# Proposed for {mesh_file.name}: {mesh.face_count} faces, {mesh.points.shape[0]} points. Check every line.",
        f"# Arrays on points: {', '.join(sorted(mesh.node_arrays)) or 'none'}",
        f"# Arrays on faces: {', '.join(sorted(mesh.face_arrays)) or 'none'}",
        f"title = {json.dumps(mesh_file.stem)}",
        "",
        "[surface]",
        f"file = {json.dumps(named)}",
        f"length_unit = {json.dumps(unit)}",
    ]
    if array is not None:
        lines.append(f"groups = {{ array = {json.dumps(array)} }}")
    lines += [
        "",
        "[fluid]",
        'density = "1000 kg/m^3"            # FILL IN: a round number stands here',
        'ambient_pressure = "101325 Pa"',
        "gravity = [0, 0, -9.80665]         # m/s²; drop the line to leave all weights out",
        "",
    ]
    lines += _flow_lines(guessed)
    seen_inlet = False
    for group in groups:
        role = _role(group, seen_inlet)
        seen_inlet |= role == "inlet"
        lines += [f"[groups.{json.dumps(group.name)}]   # {group.remark}", f'role = "{role}"']
        if group.plane and group.flow is None and guessed["velocity"] is None:
            lines[-1] += "   # FILL IN: inlet, outlet, open, or wall; guessed by order"
        if group.where:
            lines.append(group.where)
        if role != "wall" and guessed["velocity"] is None:
            lines.append("# FILL IN one of: flow_rate, mass_flow, speed, velocity, as in the next line")
            lines.append('# flow_rate = "10 m^3/h"')
        if role != "wall" and guessed["pressure"] is None:
            lines.append('# FILL IN: pressure = "200 kPa"     # gauge')
        lines.append("")
    lines += [
        "# [hardware]                       # its weight enters the reaction",
        '# mass = "10 kg"',
        "# centre = [0, 0, 0]",
        "",
        "[anchor]",
        "at = [0, 0, 0]                     # m: moments and the reaction are about this point",
        "",
    ]
    return "\n".join(lines)


def _flow_lines(guessed: dict[str, str | None]) -> list[str]:
    extra = {
        "velocity": 'unit = "m/s"',
        "pressure": 'unit = "Pa", kind = "gauge", head = "included"',
        "traction": 'unit = "Pa", acts_on = "wall"',
        "density": 'unit = "kg/m^3"',
    }
    remark = {
        "velocity": "",
        "pressure": "   # kind: gauge, absolute, kinematic; head: removed, if the flow was computed without gravity",
        "traction": '   # viscous part only; acts_on: "wall" or "fluid"',
        "density": "",
    }
    lines = [
        f"{quantity} = {{ array = {json.dumps(name)}, {extra[quantity]} }}{remark[quantity]}"
        for quantity, name in guessed.items()
        if name is not None
    ]
    return ["[flow]", *lines, ""] if lines else []


def write_case(text: str, path: Path) -> None:
    """Write a proposed case; a file that is there already stays.

    Parameters
    ----------
    text : str
        From `propose_case`.
    path : pathlib.Path
        Where to.

    Raises
    ------
    OutputError
        The file exists, or cannot be written.
    """
    try:
        with path.open("x", encoding="utf-8") as stream:
            stream.write(text)
    except FileExistsError as error:
        raise OutputError("exists already", where=str(path), remedy="Choose another name with --to") from error
    except OSError as error:
        raise OutputError(f"cannot be written ({error.strerror})", where=str(path)) from error
