"""Print how near port flows of the shipped manifold come to the computed ones, as exported and sharpened.

The exports are linear on each triangle, the computed velocity is quadratic: `reference.json` holds the
port integrals of the finite-element solution itself, which do not pass through fluxmesh.

Usage: python scripts/sharpened_table.py
"""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np

import fluxmesh
from fluxmesh.field.flow import near_origin
from fluxmesh.field.patches import sharpened_table

FOLDER = Path(__file__).resolve().parent.parent / "meshes" / "manifold"
MESHES = ("coarse", "medium", "fine")
COLUMNS = ("mass_flow", "momentum_flux")


def rows() -> list[dict[str, object]]:
    """Errors of each port on each mesh, relative to the computed flow."""
    reference = json.loads((FOLDER / "reference.json").read_text(encoding="utf-8"))["meshes"]
    found: list[dict[str, object]] = []
    for mesh in MESHES:
        case = fluxmesh.read_case(FOLDER / f"manifold_{mesh}.toml")
        outcome = fluxmesh.run_case(case)
        sharp = sharpened_table(
            outcome.surface, outcome.flow, facets_are_geometry=True, origin=near_origin(outcome.surface)
        )
        for k, group in enumerate(outcome.surface.groups):
            exact = reference[mesh]["ports"].get(group.name)
            if exact is None:
                continue
            row: dict[str, object] = {"mesh": mesh, "port": group.name}
            for column in COLUMNS:
                wanted = np.atleast_1d(exact[column])
                for name, table in (("plain", outcome.balance.table), ("sharpened", sharp)):
                    ours = np.atleast_1d(table.column(column)[k])
                    row[f"{column} {name}"] = float(np.linalg.norm(ours - wanted) / np.linalg.norm(wanted))
            found.append(row)
    return found


def main() -> None:
    print("| mesh | port | mass flow as exported | sharpened | times nearer", end="")
    print(" | momentum flux as exported | sharpened | times nearer |")
    print("|---|---|---|---|---|---|---|---|")
    for row in rows():
        cells = [str(row["mesh"]), str(row["port"])]
        for column in COLUMNS:
            plain, sharp = float(str(row[f"{column} plain"])), float(str(row[f"{column} sharpened"]))
            cells += [f"{plain:.3%}", f"{sharp:.3%}", f"{plain / sharp:.0f}"]
        print(f"| {' | '.join(cells)} |")


if __name__ == "__main__":
    main()
