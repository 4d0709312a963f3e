"""Speed and memory of the main job, as ratios taken in one run.

Usage: scripts/bench [faces]   (default 5,000,000)
"""

from __future__ import annotations

import os
import resource
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
from _bench_volume import measure_volume

from fluxmesh.field.flow import Flow, integrate_flow, lay_flow, near_origin
from fluxmesh.integral.layout import FaceArrays, FlowArrays, PressureTerms, make_runs
from fluxmesh.integral.plain import integrate_plainly
from fluxmesh.surface.mend import mend
from fluxmesh.surface.surface import ControlSurface, Group, Role

CASE = """title = "Bench"
[surface]
file = "{file}"
groups = {{ array = "region" }}
[fluid]
density = "998.2 kg/m^3"
ambient_pressure = "101325 Pa"
gravity = [0, 0, -9.80665]
[flow]
velocity = {{ array = "velocity" }}
pressure = {{ array = "pressure" }}
traction = {{ array = "traction" }}
[groups.one]
role = "open"
tag = 1
[groups.two]
role = "open"
tag = 2
[groups.skin]
role = "wall"
tag = 3
[closure]
tolerance = 0.99
"""


def make_arrays(faces: int) -> dict[str, np.ndarray]:
    """A closed odd ring with a wavy section; a smooth flow on all of it."""
    m = max(int(np.sqrt(faces / 4)), 3)
    n = faces // (2 * m)
    u, v = np.meshgrid(np.arange(n) * 2 * np.pi / n, np.arange(m) * 2 * np.pi / m, indexing="ij")
    r = 0.1 + 0.02 * np.sin(3 * u) * np.cos(2 * v)
    points = np.stack([(0.3 + r * np.cos(v)) * np.cos(u), (0.3 + r * np.cos(v)) * np.sin(u), r * np.sin(v)], axis=-1)
    points = points.reshape(-1, 3)
    i, j = np.meshgrid(np.arange(n), np.arange(m), indexing="ij")
    a, b = i * m + j, (i + 1) % n * m + j
    c, d = (i + 1) % n * m + (j + 1) % m, i * m + (j + 1) % m
    triangles = np.stack([a, b, c, a, c, d], axis=-1).reshape(-1, 3)
    x, y, z = points.T
    velocity = np.stack([y + 0.1, z - x, 0.5 * x + 0.2], axis=-1)
    # faces of the last tenth of the ring are the two "ports"
    region = np.full(len(triangles), 3, dtype=np.int32)
    part = len(triangles) // 20
    region[-2 * part : -part], region[-part:] = 1, 2
    return {
        "points": points,
        "triangles": triangles.astype(np.int64),
        "velocity": velocity,
        "pressure": 5000 - 998.2 * 9.80665 * z + 300 * x * y,
        "traction": 0.01 * np.stack([y, -x, z], axis=-1),
        "region": region,
    }


def write_vtp(arrays: dict[str, np.ndarray], path: Path) -> None:
    import pyvista
    from vtkmodules.vtkIOXML import vtkXMLPolyDataWriter

    triangles = arrays["triangles"]
    mesh = pyvista.PolyData.from_regular_faces(arrays["points"], triangles)
    for name in ("velocity", "pressure", "traction"):
        mesh.point_data[name] = arrays[name]
    mesh.cell_data["region"] = arrays["region"]
    writer = vtkXMLPolyDataWriter()
    writer.SetFileName(str(path))
    writer.SetInputData(mesh)
    writer.SetDataModeToAppended()
    writer.EncodeAppendedDataOff()
    writer.SetCompressorTypeToNone()
    writer.SetHeaderTypeToUInt64()
    writer.Write()


def surface_and_flow(arrays: dict[str, np.ndarray]) -> tuple[ControlSurface, Flow]:
    groups = (Group("one", Role.OPEN), Group("two", Role.OPEN), Group("skin", Role.WALL))
    owner = (arrays["region"] - 1).astype(np.int32)
    surface = ControlSurface(arrays["points"], arrays["triangles"].ravel(), None, None, owner, groups, closed=True)
    flow = lay_flow(
        surface,
        density=998.2,
        velocity=arrays["velocity"],
        pressure=arrays["pressure"],
        traction=arrays["traction"],
        gravity=(0, 0, -9.80665),
    )
    return surface, flow


def best(work: Callable[[], object], times: int) -> float:
    """Least time of several runs, s: what the machine can do when it is left alone."""
    spent = []
    for _ in range(times):
        start = time.perf_counter()
        work()
        spent.append(time.perf_counter() - start)
    return min(spent)


def check_and_integrate(surface: ControlSurface, flow: Flow) -> None:
    names = tuple(group.name for group in surface.groups)
    mend(surface.points, surface.connectivity, None, None, surface.group_of_face, names)
    integrate_flow(surface, flow)


def plainly(surface: ControlSurface, flow: Flow) -> None:
    """The same integrals in NumPy, in blocks that stay in the cache."""
    integrate_plainly(
        mesh=FaceArrays(surface.points, surface.connectivity, np.empty(0, np.int64), np.empty(0, np.int8)),
        flow=FlowArrays(
            flow.velocity.arrays(),
            flow.traction.arrays(),
            flow.pressure.arrays(),
            flow.density.arrays(),
            flow.mass_flux.arrays(),
            PressureTerms(False, 0.0, 0.0, 0.0, 0.0),
            flow.sample_start,
        ),
        runs=make_runs(surface.group_of_face, None, length=8192),
        origin=near_origin(surface),
        still_groups=np.zeros(3, np.bool_),
    )


def general_libraries(surface: ControlSurface, flow: Flow) -> None:
    """The shortest route without us: trimesh for the checks and the volume, NumPy for the sums."""
    import trimesh

    triangles = surface.connectivity.reshape(-1, 3)
    mesh = trimesh.Trimesh(surface.points, triangles, process=False, validate=False)
    assert mesh.is_watertight
    assert mesh.is_winding_consistent
    assert mesh.body_count == 1
    _ = mesh.volume, mesh.center_mass
    normal = mesh.face_normals * mesh.area_faces[:, None]
    centre = mesh.triangles_center
    u = flow.velocity.node[triangles].mean(axis=1)
    p = flow.pressure.node[triangles].mean(axis=1)
    t = flow.traction.node[triangles].mean(axis=1) * mesh.area_faces[:, None]
    carried = 998.2 * np.einsum("ij,ij->i", u, normal)
    for entry in (carried[:, None] * u, -p[:, None] * normal, t):
        for group in range(3):
            chosen = surface.group_of_face == group
            entry[chosen].sum(axis=0)
            np.cross(centre[chosen], entry[chosen]).sum(axis=0)


def child(arguments: list[str]) -> tuple[float, float]:
    """Wall time in s and peak memory in bytes of one process."""
    start = time.perf_counter()
    process = subprocess.Popen(arguments, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE)
    _, status, usage = os.wait4(process.pid, 0)
    spent = time.perf_counter() - start
    if os.waitstatus_to_exitcode(status) not in (0, 1):
        raise SystemExit(f"{' '.join(arguments)} failed:\n{process.stderr.read().decode() if process.stderr else ''}")
    return spent, usage.ru_maxrss * 1024.0


def whole(path: Path, folder: Path, times: int) -> tuple[float, float, float]:
    """Whole process of `balance`, that of a bare read, and peak memory of the first."""
    case = path.with_suffix(".toml")
    case.write_text(CASE.format(file=path.name), encoding="utf-8")
    run = [sys.executable, "-m", "fluxmesh", "balance", str(case), "--out", str(folder), "--no-pictures"]
    read = [sys.executable, "-c", f"import pyvista; pyvista.read({str(path)!r})"]
    child(run)
    runs = [(child(run), child(read)) for _ in range(times)]
    return min(r[0][0] for r in runs), min(r[1][0] for r in runs), max(r[0][1] for r in runs)


def causes_over_balance(path: Path, folder: Path, times: int) -> float:
    """Whole process of `causes` over that of `balance`, for an export that does not close."""
    case = path.with_name("open.toml")
    text = path.with_suffix(".toml").read_text(encoding="utf-8")
    # held to a tolerance that the export does not meet: there is something to explain
    case.write_text(text.replace("tolerance = 0.99", "tolerance = 1e-6"), encoding="utf-8")
    balance = [sys.executable, "-m", "fluxmesh", "balance", str(case), "--out", str(folder), "--no-pictures"]
    causes = [sys.executable, "-m", "fluxmesh", "causes", str(case)]
    child(causes)
    runs = [(child(causes)[0], child(balance)[0]) for _ in range(times)]
    return min(run[0] for run in runs) / min(run[1] for run in runs)


def line(what: str, value: str, aim: str = "") -> None:
    print(f"{what:<90}{value:>16}   {aim}")


def main() -> None:
    faces = int(sys.argv[1]) if len(sys.argv) > 1 else 5_000_000
    resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        results = {}
        for count in (faces // 10, faces):
            arrays = make_arrays(count)
            path = folder / f"export_{count}.vtp"
            write_vtp(arrays, path)
            surface, flow = surface_and_flow(arrays)
            integrate_flow(surface, flow)
            check_and_integrate(surface, flow)
            made = len(arrays["triangles"])
            kernel = best(lambda s=surface, f=flow: integrate_flow(s, f), 5)
            core = best(lambda s=surface, f=flow: check_and_integrate(s, f), 5)
            size = sum(array.nbytes for array in arrays.values()) + 8 * (made + 1)
            results[count] = (made, kernel, core, size, *whole(path, folder / "out", 5))
        asked = causes_over_balance(path, folder / "out", 3)
        made, kernel, core, size, run, read, peak = results[faces]
        small = results[faces // 10]
        plain = best(lambda: plainly(surface, flow), 1)
        general = best(lambda: general_libraries(surface, flow), 1)
        print(f"{made:,} triangles, nodal velocity, pressure and traction; {os.cpu_count()} cores")
        line("kernel, all integrals", f"{made / kernel / 1e6:.1f} M faces/s")
        line("blocked NumPy over kernel, same integrals", f"{plain / kernel:.1f}", "aim >= 15")
        line("general-purpose libraries over ours, checks and integrals", f"{general / core:.1f}", "aim >= 10")
        line("process of balance --no-pictures over import pyvista and read", f"{run / read:.2f}", "aim <= 2.5")
        line(f"  ({run:.2f} s over {read:.2f} s)", "")
        line("peak memory over the file's array bytes", f"{peak / size:.2f}", "aim <= 3")
        line(f"  ({peak / 1e6:.0f} MB over {size / 1e6:.0f} MB)", "")
        growth = (core / made) / (small[2] / small[0])
        line("time a face at this size over that at a tenth, checks and integrals", f"{growth:.2f}", "aim <= 1.10")
        slope = (run - small[4]) / (made - small[0]) * made / run
        line(
            "process of causes over that of balance --no-pictures, a balance that is open",
            f"{asked:.2f}",
            "aim <= 1.10",
        )
        line("share of the process time that grows with the faces", f"{slope:.2f}", "(the rest is start-up)")
    for row in measure_volume(max(faces // 5, 1000), max(faces // 25, 1000)):
        line(*row)


if __name__ == "__main__":
    main()
