"""Volumes cut in two, put side by side, or with a cavity: balances add up and subtract."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from fluxmesh.balance.weight import enclosed_volume
from fluxmesh.integral.table import BASIS
from tests.balance_figures import figures_of
from tests.invariants import Figure, assert_alike, scales_of, table_figures, table_of
from tests.problems import Laid, Problem
from tests.solids import Solid, blocks, in_triangles, mapped, rigid_motion
from tests.strategies import BODIES, bounded, problems, seeds

Array = NDArray[np.float64]
ONE_SIDED = {"area", "position", "pressure_area", "density_area", "normal_momentum", "reversed_mass_flow",
             "velocity_area", "speed_area", "dynamic_pressure_area"}  # fmt: skip
"""Columns that the two sides of a face have alike; all others have opposite signs. (The traction itself turns.)"""
ON_THE_FLUID = {"viscous_force", "moment_of_viscous", "viscous_power"}
"""Columns that do not know the normal at all, where the traction is given."""
ADDED = ("volume", "fluid mass", "fluid weight", "mass residual", "momentum residual", "momentum weight",
         "momentum storage", "angular residual", "angular weight", "angular storage", "about the axis residual",
         "load from_walls force", "load from_walls moment", "load from_balance force", "load from_balance moment",
         "reaction force", "reaction moment", "energy residual", "salt residual", "dye residual")  # fmt: skip


def added(parts: list[dict[str, Figure]], whole: dict[str, Figure]) -> dict[str, Figure]:
    """Sums over parts of what is one number of a volume; a part without walls has no load on them."""
    found = {}
    walled = "load from_walls force" in whole and whole["load from_walls force"].value is not None
    for name in ADDED:
        if name not in whole or whole[name].value is None or (walled and "reaction" in name):
            continue  # what a reaction rests on, the walls or the balance, is chosen for each part
        values = [part[name].value for part in parts if name in part and part[name].value is not None]
        if len(values) < len(parts) and "from_walls" not in name:
            continue  # a part without a port has no law of energy
        found[name] = replace(whole[name], value=np.sum(values, axis=0))
    # centres, weighted
    for weight, centre in (("volume", "centroid"), ("fluid mass", "fluid centre")):
        if centre in whole:
            total = sum(part[weight].value * part[centre].value for part in parts)
            found[centre] = replace(whole[centre], value=total / whole[weight].value)
    return found


def plain(problem: Problem) -> Problem:
    """The problem without what belongs to the whole: hardware, rates, contents, heat, a mean density."""
    fields = {name: one for name, one in problem.fields.items() if name != "density"}
    return replace(
        problem, fields=fields, hardware=None, storage=None, contents=None, heat=None, shaft_power=None,
        sources={"salt": 0.0, "dye": 0.0},
    )  # fmt: skip


# ---- one volume cut in two --------------------------------------------------------------------


def cut(kind: str, rng: np.random.Generator) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
    """Cells of one part of a block, and of the rest."""
    part = np.zeros((3, 3, 3), np.bool_)
    if kind == "slab":
        part[: rng.integers(1, 3)] = True
    elif kind == "corner":
        part[: rng.integers(1, 3), : rng.integers(1, 3)] = True
    else:  # stairs that fall both ways, so that parts hang together by whole faces
        height = np.sort(np.sort(rng.integers(0, 4, (3, 3)), axis=0), axis=1)
        height[0, 0], height[2, 2] = 0, 3
        part[:] = np.arange(3) < height[:, :, None]
    return part, ~part


def one_way(solid: Solid) -> Solid:
    """The block in triangles, cut along the same diagonal on both sides of a cut."""
    lowest = [int(np.lexsort(solid.points[face].T)[0]) for face in solid.faces]
    return in_triangles(replace(solid, faces=[np.roll(face, -k) for face, k in zip(solid.faces, lowest)]))


def laid_in_space(problem: Problem, solid: Solid, seed: int) -> Problem:
    """The problem on a body, its data functions of place; traction and mass flow of faces turn with the normal."""
    middles = np.array([solid.points[face].mean(axis=0) for face in solid.faces])
    normals = []
    for face in solid.faces:
        ring = solid.points[face] - solid.points[face].mean(axis=0)
        normals.append(np.cross(ring, np.roll(ring, -1, axis=0)).sum(axis=0) / 2)
    areas = np.array(normals)
    units = areas / np.linalg.norm(areas, axis=1)[:, None]
    found: dict[str, Laid] = {}
    for number, (name, one) in enumerate(sorted(problem.fields.items())):
        rng = np.random.default_rng([seed, number])
        place = middles if one.at == "faces" or name in ("traction", "mass flux") else solid.points
        waves, phase = rng.uniform(-2, 2, (9, 3)), rng.uniform(0, 6, 9)
        values = np.sin(place @ waves.T + phase)
        if name == "traction":
            found[name] = Laid("faces", np.einsum("fij,fj->fi", values.reshape(-1, 3, 3), units))
        elif name == "mass flux":
            found[name] = Laid("faces", (values[:, :3] * areas).sum(axis=1))
        else:
            base = float(one.values.mean()) if name != "velocity" else 0.0
            found[name] = Laid(one.at, base + 0.3 * (values[:, :3] if name == "velocity" else values[:, 0]))
    return replace(problem, solid=solid, fields=found, roles=dict.fromkeys(solid.groups, "open"), supplied={})


@bounded
@given(problem=problems({"crate": BODIES["crate"]}), kind=st.sampled_from(["slab", "corner", "stairs"]), seed=seeds)
def test_the_balances_of_two_parts_add_up_to_the_whole(problem: Problem, kind: str, seed: int) -> None:
    # the cut carries the same data on both sides, out of the one and into the other
    rng = np.random.default_rng(seed)
    turn, shift = rigid_motion(rng)
    flat = bool(rng.integers(2))
    one, two = cut(kind, rng)
    told = []
    for filled in (one, two, one | two):
        solid = blocks(filled, (0, 0, 0), (1, 1.5, 0.8), quads=True)
        solid = mapped(one_way(solid) if flat else solid, lambda x: x @ turn.T + shift)
        told.append(laid_in_space(plain(problem), solid, seed))
    scales = [scales_of(one) for one in told]
    figures = [figures_of(one, scale) for one, scale in zip(told, scales)]
    rounding = max(scale.rounding for scale in scales)
    assert_alike(figures[2], added(figures[:2], figures[2]), rounding)
    # every column that turns with the normal cancels on the cut
    for name in set(BASIS) - ONE_SIDED:
        sums = [replace(part[name], value=np.asarray(part[name].value).sum(axis=0)) for part in figures]
        assert_alike({name: sums[2]}, {name: replace(sums[2], value=sums[0].value + sums[1].value)}, 8 * rounding)


# ---- several shells ---------------------------------------------------------------------------


def shells_of(solid: Solid) -> list[NDArray[np.bool_]]:
    """Faces of each piece that hangs together, by the order of its first face."""
    owner = np.arange(len(solid.points))
    for _ in range(len(solid.points)):
        before = owner.copy()
        for face in solid.faces:
            owner[face] = owner[face].min()
        if (owner == before).all():
            break
    of_face = np.array([owner[face[0]] for face in solid.faces])
    return [of_face == number for number in np.unique(of_face)]


def part_of(problem: Problem, faces: NDArray[np.bool_], *, inner: bool = False) -> Problem:
    """The problem on one of its shells; of an inner one what goes out of the fluid comes into the hole."""
    solid = problem.solid
    number = np.cumsum(faces) - 1
    groups = {name: number[members[faces[members]]] for name, members in solid.groups.items()}
    groups = {name: members for name, members in groups.items() if members.size}
    piece = Solid(solid.points, [face for face, keep in zip(solid.faces, faces) if keep], groups, solid.curved)
    other = problem.per_face(lambda values: values[faces], piece)
    supplied = {name: values for name, values in problem.supplied.items() if name in groups}
    if inner and "mass flux" in problem.fields:
        other = other.with_field("mass flux", -other.fields["mass flux"].values)
    return replace(other, supplied=supplied)


def rows_by_name(problem: Problem, scales: Any) -> dict[str, dict[str, Any]]:
    names = [group.name for group in problem.surface.groups]
    table = table_figures(table_of(problem), scales)
    return {name: dict(zip(names, one.value)) for name, one in table.items()}


@bounded
@given(problem=problems({"two shells": BODIES["two shells"]}))
def test_shells_apart_add_up(problem: Problem) -> None:
    problem = plain(problem)
    parts = [part_of(problem, faces) for faces in shells_of(problem.solid)]
    assert len(parts) == 2
    scales = [scales_of(one) for one in (problem, *parts)]
    rounding = max(scale.rounding for scale in scales)
    whole, *figures = (figures_of(one, scale) for one, scale in zip((problem, *parts), scales))
    assert_alike(whole, added(figures, whole), rounding)
    tables = [rows_by_name(part, scale) for part, scale in zip(parts, scales[1:])]
    for name in BASIS:
        rows = [table[name] for table in tables]
        total = np.array([sum(row[group] for row in rows if group in row) for group in problem.solid.groups])
        assert_alike(whole, {name: replace(whole[name], value=total)}, rounding)


@bounded
@given(problem=problems({"a cavity": BODIES["a cavity"]}))
def test_a_cavity_subtracts(problem: Problem) -> None:
    # the hole alone is a body whose normals point the other way; what lies in the hole adds again
    problem = plain(problem)
    outer, hole, core = shells_of(problem.solid)
    parts = [part_of(problem, outer), part_of(problem, hole, inner=True), part_of(problem, core)]
    scales = [scales_of(one) for one in (problem, *parts)]
    rounding = max(scale.rounding for scale in scales)
    whole = figures_of(problem, scales[0])
    tables = [rows_by_name(part, scale) for part, scale in zip(parts, scales[1:])]
    volumes = [enclosed_volume(table_of(part)) for part in parts]
    volume = volumes[0].volume - volumes[1].volume + volumes[2].volume
    centre = sum(sign * part.volume * part.centroid for sign, part in zip((1, -1, 1), volumes)) / volume
    expected = {
        "volume": replace(whole["volume"], value=volume),
        "centroid": replace(whole["centroid"], value=centre),
    }
    for name in BASIS:
        signs = (1, 1 if name in ONE_SIDED | ON_THE_FLUID else -1, 1)
        total = dict.fromkeys(problem.solid.groups, 0.0)
        for sign, table in zip(signs, tables):
            rows = table[name]
            if name == "reversed_mass_flow" and table is tables[1]:
                rows = {group: rows[group] + table["mass_flow"][group] for group in rows}  # what comes in goes out
            for group, row in rows.items():
                total[group] = total[group] + sign * row
        expected[name] = replace(whole[name], value=np.array(list(total.values())))
    assert_alike(whole, expected, rounding)
