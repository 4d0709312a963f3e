"""Round trips: through a case and its mesh, in other units, and through an export that is read again."""

from __future__ import annotations

import json
import sys
from dataclasses import replace
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

import numpy as np
import pytest
import pyvista
from hypothesis import given, settings

from fluxmesh import read_case, run_case
from fluxmesh.integral.table import IntegralTable
from fluxmesh.job.export import export_case
from tests.invariants import ROUND, assert_alike, scales_of, table_figures
from tests.problems import Laid, Problem
from tests.strategies import EXAMPLES, STRAIGHT, bounded, problems

some = settings(bounded, max_examples=max(4, EXAMPLES // 3))  # files take longer
ARRAYS = {"velocity": "U", "pressure": "p", "traction": "tau", "density": "rho", "mass flux": "phi", "salt": "salt",
          "dye": "dye", "temperature": "T", "enthalpy": "h"}  # fmt: skip

# ---- a problem as a case ----------------------------------------------------------------------


def fit_for_a_case(problem: Problem) -> Problem:
    """The problem without what a case says in another way: a gas, and heat where nothing tells the enthalpy."""
    bare = replace(problem, gas=False, ambient=20.0 if problem.kind == "absolute" else None)
    if bare.frame is not None and bare.frame.turns:
        # the reader makes the axis a unit vector again, which may change the last bit of any other
        bare = replace(bare, frame=replace(bare.frame, axis=(0.0, 1.0, 0.0)))
    return bare if bare.basis else replace(bare, heat=None, shaft_power=None)


def used(problem: Problem) -> list[str]:
    return [name for name in problem.fields if name not in ("temperature", "enthalpy") or name == problem.basis]


def numbers(values: Any) -> str:
    return f"[{', '.join(repr(float(x)) for x in values)}]"


def write(problem: Problem, folder: Path, *, length: float = 1.0, speed: float = 1.0, stress: float = 1.0) -> Path:
    """Write a problem as a mesh and a case, values of the file divided by the factors of its units."""
    solid = problem.solid
    mesh = pyvista.PolyData(solid.points / length, np.concatenate([[face.size, *face] for face in solid.faces]))
    kinematic = problem.kind == "kinematic"
    units = {"velocity": speed, "pressure": 1.0 if kinematic else stress, "traction": stress}
    for name in used(problem):
        one = problem.fields[name]
        data = mesh.point_data if one.at == "nodes" else mesh.cell_data
        data[ARRAYS[name]] = one.values / units.get(name, 1.0)
    region = np.zeros(len(solid.faces), np.int32)
    for number, members in enumerate(solid.groups.values()):
        region[members] = number
    mesh.cell_data["region"] = region
    mesh.save(folder / "mesh.vtp")
    words = {1.0: "m", 1e-3: "mm"}, {1.0: "m/s", 0.3048: "ft/s"}, {1.0: "Pa", 1e3: "kPa"}
    of_length, of_speed, of_stress = (known[factor] for known, factor in zip(words, (length, speed, stress)))
    of_pressure = "" if kinematic else f'unit = "{of_stress}", '
    hardware = problem.hardware
    assert hardware is not None
    lines = [
        f'[surface]\nfile = "mesh.vtp"\nlength_unit = "{of_length}"\ngroups = {{ array = "region" }}',
        f'[fluid]\ndensity = "{problem.density!r} kg/m^3"\ngravity = {numbers(problem.gravity)}',
        f'ambient_pressure = "{problem.ambient!r} Pa"' if problem.ambient is not None else "",
        f'heat_capacity = "{problem.capacity!r} J/(kg K)"' if problem.basis == "temperature" else "",
        f'[flow]\nvelocity = {{ array = "U", unit = "{of_speed}" }}',
        f'pressure = {{ array = "p", {of_pressure}kind = "{problem.kind}", head = "{problem.head}"'
        + (f", datum = {numbers(problem.datum)} }}" if problem.head == "removed" else " }"),
        f'traction = {{ array = "tau", unit = "{of_stress}", acts_on = "fluid" }}',
        'density = { array = "rho" }' if "density" in problem.fields else "",
        'mass_flux = { array = "phi", positive = "out" }' if "mass flux" in problem.fields else "",
        f'{problem.basis} = {{ array = "{ARRAYS[problem.basis]}" }}' if problem.basis else "",
        *(f'[groups.{name}]\nrole = "{problem.roles[name]}"\ntag = {k}' for k, name in enumerate(solid.groups)),
        f'[hardware]\nmass = "{hardware.mass!r} kg"\ncentre = {numbers(hardware.centre)}',
        f"[anchor]\nat = {numbers(problem.anchor)}",
        *(
            f'[[carried]]\nname = "{name}"\narray = "{name}"\nper = "{per}"\nsource = {problem.sources[name]!r}'
            for name, per in (("salt", "mass"), ("dye", "volume"))
        ),
    ]
    if problem.heat is not None:
        lines.append(f'[energy]\nheat = "{problem.heat!r} W"\nshaft_power = "{problem.shaft_power!r} W"')
    frame = problem.frame
    if frame is not None:
        lines.append(f"[frame]\nvelocity = {numbers(frame.velocity)}\nacceleration = {numbers(frame.acceleration)}")
        if frame.turns:
            axis, through = numbers(frame.axis), numbers(frame.through)
            lines.append(f'rotation = {{ rate = "{frame.rate!r} rad/s", axis = {axis}, through = {through} }}')
    if {"feed", "drain"} <= solid.groups.keys():
        lines.append('[[loss]]\nbetween = ["feed", "drain"]')
    path = folder / "case.toml"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


def command(*arguments: object) -> None:
    """Call the command line as a shell would, within this process."""
    from fluxmesh.cli import main

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(sys, "argv", ["fluxmesh", *map(str, arguments)])
        with pytest.raises(SystemExit) as ended:
            main()
    assert ended.value.code in (0, 1, None)  # 1: random data do not close


def figures_in(data: Any, above: tuple[str, ...] = ()) -> dict[tuple[str, ...], Any]:
    """All numbers of a result by path."""
    if isinstance(data, dict):
        return {k: v for key, value in data.items() for k, v in figures_in(value, (*above, key)).items()}
    if isinstance(data, list | tuple):
        return {k: v for n, value in enumerate(data) for k, v in figures_in(value, (*above, str(n))).items()}
    return {above: data} if isinstance(data, int | float) or data is None else {}


NOT_FIGURES = (
    "inputs",
    "doubts",
    "verdict",
)  # what the file says of the case, and judgements, which rest on the doubt too


@some
@given(problem=problems(STRAIGHT, plain=True))
def test_a_case_gives_to_the_bit_what_the_library_gives(problem: Problem) -> None:
    problem = fit_for_a_case(problem)
    with TemporaryDirectory() as folder:
        case = write(problem, Path(folder))
        command("balance", case, "--out", Path(folder) / "out", "--no-pictures")
        told = json.loads((Path(folder) / "out" / "balance.json").read_text("utf-8"))
    wanted = json.loads(json.dumps(problem.outcome.data()))
    found = figures_in(told)
    kept = {path: value for path, value in figures_in(wanted).items() if path[0] not in NOT_FIGURES}
    assert len(kept) > 100
    different = {
        path: (found.get(path, "missing"), value) for path, value in kept.items() if found.get(path, "") != value
    }
    assert not different


@some
@given(problem=problems(STRAIGHT, plain=True))
def test_a_file_in_other_units_is_the_same_case(problem: Problem) -> None:
    problem = fit_for_a_case(problem)
    with TemporaryDirectory() as folder:
        done = run_case(read_case(write(problem, Path(folder), length=1e-3, speed=0.3048, stress=1e3)))
    scales = scales_of(problem)
    assert_same_table(done.balance.table, problem.outcome.balance.table, scales)


def assert_same_table(found: IntegralTable, wanted: IntegralTable, scales: Any) -> None:
    assert np.abs(found.origin - wanted.origin).max() < ROUND * scales.rounding * scales.sizes["X"]
    assert_alike(table_figures(found, scales), table_figures(wanted, scales), scales.rounding)


# ---- an export read again ---------------------------------------------------------------------


@some
@given(
    problem=problems(
        {name: STRAIGHT[name] for name in STRAIGHT if name != "prism"}, plain=True, frames=("still", "moves")
    )
)
def test_an_export_read_again_gives_the_same_balance(problem: Problem) -> None:
    # means over faces say all of data that are on faces; the head, which varies over them, is not put back then
    problem = fit_for_a_case(problem)
    rng = np.random.default_rng(len(problem.solid.points))
    shape = {"velocity": (3,), "traction": (3,)}
    count = len(problem.solid.faces)
    fields = {
        name: Laid(
            "faces",
            (20.0 if name == "pressure" and problem.kind == "absolute" else 0.0)
            + rng.random((count, *shape.get(name, ()))),
        )
        for name in problem.fields
    }
    if "density" in fields:
        fields["density"] = Laid("faces", 1 + rng.random(count))
    problem = replace(problem, fields=fields, head="included")
    with TemporaryDirectory() as folder:
        export_case(write(problem, Path(folder)), out=Path(folder) / "out")
        mesh = pyvista.read(Path(folder) / "out" / "surface.vtp")
        names = list(mesh.field_data["group_names"])
    assert names == list(problem.solid.groups)
    read = {
        "velocity": "velocity_absolute_m_per_s",
        "pressure": "gauge_pressure_Pa",
        "traction": "traction_on_fluid_Pa",
        "density": "density_kg_per_m3",
        "mass flux": "mass_flow_out_kg_per_s",
        "salt": "carried_salt_mean",
        "dye": "carried_dye_mean",
    }
    arrays = {name: np.asarray(mesh.cell_data[read[name]]) for name in fields if name in read}
    ports = np.array([problem.roles[name] != "wall" for name in names])[np.asarray(mesh.cell_data["group_number"])]
    for name in ("salt", "dye"):
        arrays[name] = np.where(ports, arrays[name], 0.0)  # not known on walls, where nothing passes
    rows = mesh.faces
    faces, at = [], 0
    while at < rows.size:
        faces.append(rows[at + 1 : at + 1 + rows[at]].astype(np.int64))
        at += rows[at] + 1
    number = np.asarray(mesh.cell_data["group_number"])
    groups = {name: np.flatnonzero(number == k) for k, name in enumerate(names)}
    solid = replace(problem.solid, points=np.asarray(mesh.points, dtype=np.float64), faces=faces, groups=groups)
    again = replace(
        problem, solid=solid, kind="gauge", ambient=None, basis="", heat=None, shaft_power=None,
        fields={**fields, **{name: Laid("faces", values) for name, values in arrays.items()}},
    )  # fmt: skip
    scales = scales_of(problem)
    assert_same_table(again.outcome.balance.table, problem.outcome.balance.table, scales)
    for one, other in zip(again.outcome.carried, problem.outcome.carried, strict=True):
        assert abs(one.residual - other.residual) < ROUND * scales.rounding * scales.terms[1, 0, -1]
