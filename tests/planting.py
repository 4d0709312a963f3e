"""Cases with one thing wrong, made from the shipped coarse manifold, and the lines of a doubt applied to them."""

from __future__ import annotations

import tomllib
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from fluxmesh.assess.review import Doubt, Review
from fluxmesh.assess.review.toml import toml_value
from fluxmesh.case.read import read_case
from fluxmesh.job.check import check_case

ROOT = Path(__file__).resolve().parent.parent
MANIFOLD = ROOT / "meshes" / "manifold" / "manifold_coarse.toml"
DENSITY, GRAVITY = 880.0, np.array([0.0, 0.0, -9.80665])


@dataclass
class Planted:
    """A case as nested tables, and its mesh as VTK data, to be spoiled and written."""

    folder: Path
    tables: dict[str, Any]
    mesh: Any

    @property
    def velocity(self) -> np.ndarray:
        return np.array(self.mesh.point_data["velocity"], dtype=np.float64)

    @property
    def pressure(self) -> np.ndarray:
        return np.array(self.mesh.point_data["pressure"], dtype=np.float64)

    @property
    def traction(self) -> np.ndarray:
        return np.array(self.mesh.cell_data["wall_traction"], dtype=np.float64)

    @property
    def region(self) -> np.ndarray:
        return np.array(self.mesh.cell_data["region"])

    @property
    def head(self) -> np.ndarray:
        """The hydrostatic head at the points, Pa."""
        return DENSITY * (np.array(self.mesh.points, dtype=np.float64) * 1e-3) @ GRAVITY

    def area_vectors(self) -> np.ndarray:
        """Area vectors of the faces, outward, mm²."""
        corners = np.array(self.mesh.points, dtype=np.float64)[self.mesh.faces.reshape(-1, 4)[:, 1:]]
        return np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0]) / 2

    def of_faces(self, values: np.ndarray) -> np.ndarray:
        """Means of point values over the faces."""
        return values[self.mesh.faces.reshape(-1, 4)[:, 1:]].mean(axis=1)

    def set(self, *path: str, value: Any) -> None:
        table = self.tables
        for key in path[:-1]:
            table = table.setdefault(key, {})
        table[path[-1]] = value

    def drop(self, *path: str) -> None:
        table = self.tables
        for key in path[:-1]:
            table = table[key]
        del table[path[-1]]

    def apply(self, doubt: Doubt) -> None:
        """Write the doubt's lines into the case."""
        for setting in doubt.settle:
            value = list(setting.value) if isinstance(setting.value, tuple) else setting.value
            self.set(*setting.path, value=value)

    def write(self) -> Path:
        if self.mesh is not None:
            self.mesh.save(self.folder / self.tables["surface"]["file"])
        case = self.folder / "case.toml"
        case.write_text("\n".join(f"{key} = {toml_value(table)}" for key, table in self.tables.items()), "utf-8")
        return case

    def review(self) -> Review:
        return check_case(read_case(self.write()))


def manifold(folder: Path) -> Planted:
    """Return the shipped coarse manifold as it is, its mesh under another name."""
    import pyvista

    tables = tomllib.loads(MANIFOLD.read_text("utf-8"))
    tables["surface"]["file"] = "spoiled.vtp"
    return Planted(folder, tables, pyvista.read(MANIFOLD.with_suffix(".vtp")))


def header(folder: Path) -> Planted:
    """Return the shipped header: port data only."""
    tables = tomllib.loads((ROOT / "meshes" / "header" / "header.toml").read_text("utf-8"))
    tables["surface"]["file"] = str(ROOT / "meshes" / "header" / "header.stl")
    return Planted(folder, tables, None)


Plant = Callable[[Planted], None]
