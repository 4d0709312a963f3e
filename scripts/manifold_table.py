"""Print how the loads on the shipped manifold approach the reference with refinement.

The reference is the reaction in the assembled finite-element residual at the wall (see
make_manifold.py); it does not pass through fluxmesh. Gravity is left out here, as it was
in the flow computation.

Usage: python scripts/manifold_table.py
"""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np

import fluxmesh

FOLDER = Path(__file__).resolve().parent.parent / "meshes" / "manifold"
MESHES = ("coarse", "medium", "fine")


def run(mesh: str) -> fluxmesh.Outcome:
    """Balance one mesh without gravity: the exported pressure holds no head."""
    case = fluxmesh.read_case(FOLDER / f"manifold_{mesh}.toml")
    pressure = case.flow.pressure.model_copy(update={"head": "included"})
    fluid = case.fluid.model_copy(update={"gravity": (0.0, 0.0, 0.0)})
    flow = case.flow.model_copy(update={"pressure": pressure})
    return fluxmesh.run_case(case.model_copy(update={"fluid": fluid, "flow": flow}))


def rows() -> list[dict[str, float]]:
    """Errors of each mesh, relative to the reference."""
    reference = json.loads((FOLDER / "reference.json").read_text(encoding="utf-8"))["meshes"]
    table = []
    for mesh in MESHES:
        outcome = run(mesh)
        force = np.array(reference[mesh]["reaction"]["force"])
        moment = np.array(reference[mesh]["reaction"]["moment"])
        load, mass = outcome.balance.load, outcome.balance.mass

        def off(ours: np.ndarray, theirs: np.ndarray) -> float:
            return float(np.linalg.norm(ours - theirs) / np.linalg.norm(theirs))

        table.append(
            {
                "mesh": mesh,
                "tetrahedra": reference[mesh]["tetrahedra"],
                "faces": outcome.surface.face_count,
                "size": float(np.linalg.norm(force)),
                "mass": abs(mass.residual) / mass.inflow,
                "force_walls": off(load.from_walls.force, force),
                "force_balance": off(load.from_balance.force, force),
                "moment_walls": off(load.from_walls.moment, moment),
                "moment_balance": off(load.from_balance.moment, moment),
                "stress": off(np.array(reference[mesh]["wall_stress_force"]), force),
                "spread": reference[mesh]["reaction"]["force_spread"] / float(np.linalg.norm(force)),
                "momentum": outcome.balance.momentum.relative(),
            }
        )
    return table


def main() -> None:
    print("| mesh | tetrahedra | faces | load, N | mass residual | load from walls | load from balance", end="")
    print(" | moment from walls | moment from balance | stress over the wall | reference known to |")
    print("|---|---|---|---|---|---|---|---|---|---|---|")
    for row in rows():
        print(
            f"| {row['mesh']} | {row['tetrahedra']:,} | {row['faces']:,} | {row['size']:.5f} | {row['mass']:.1e} "
            f"| {row['force_walls']:.2%} | {row['force_balance']:.2%} | {row['moment_walls']:.2%} "
            f"| {row['moment_balance']:.2%} | {row['stress']:.2%} | {row['spread']:.3%} |"
        )


if __name__ == "__main__":
    main()
