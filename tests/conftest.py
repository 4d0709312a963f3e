"""What several tests share: the command as a user calls it, and a small case to spoil."""

from __future__ import annotations

import sys
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from fluxmesh.errors import FileError, InputError
from fluxmesh.surface.files import read_mesh
from fluxmesh.surface.rawmesh import RawMesh
from tests.verification import Gathering, Verify, test_of

# ---- checks against published figures (tests/verification.py) --------------------------------


@pytest.fixture
def verify(request: pytest.FixtureRequest) -> Verify:
    """Hold a figure to its published source, and record that in the table of verification."""
    return Verify(test_of(request.node.nodeid), request.node.user_properties)


def pytest_addoption(parser: pytest.Parser) -> None:
    parser.addoption("--verification", metavar="PATH", help="write the table of verification, if all its checks pass")


def pytest_configure(config: pytest.Config) -> None:
    config.addinivalue_line("markers", "verification: holds a figure to a published source (set by itself)")
    config.pluginmanager.register(Gathering(config), "verification")


# ---- the command, and what it reads ----------------------------------------------------------


@dataclass(frozen=True)
class Ran:
    """How a command ended."""

    code: int
    out: str
    err: str


@pytest.fixture
def fluxmesh(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Callable[..., Ran]:
    """Call the command line as a shell would, within this process."""
    from fluxmesh.cli import main

    def call(*arguments: object) -> Ran:
        monkeypatch.setattr(sys, "argv", ["fluxmesh", *map(str, arguments)])
        capsys.readouterr()
        with pytest.raises(SystemExit) as ended:
            main()
        said = capsys.readouterr()
        code = ended.value.code
        return Ran(0 if code is None else int(code), said.out, said.err)

    return call


@pytest.fixture
def read(capfd: pytest.CaptureFixture[str]) -> Callable[..., RawMesh]:
    """Read a mesh file, and see that nothing was printed meanwhile."""

    def reading(path: Path, **options: Any) -> RawMesh:
        capfd.readouterr()
        mesh = read_mesh(path, **options)
        assert capfd.readouterr() == ("", "")
        return mesh

    return reading


@pytest.fixture
def refuse(capfd: pytest.CaptureFixture[str]) -> Callable[..., InputError]:
    """Read a mesh file, expect an error that names it and matches, and see that nothing was printed."""

    def refusing(path: Path, match: str | None = None, kind: type[InputError] = FileError) -> InputError:
        capfd.readouterr()
        with pytest.raises(kind, match=match) as caught:
            read_mesh(path)
        assert capfd.readouterr() == ("", "")
        assert caught.value.where.startswith(str(path))
        assert caught.value.remedy
        assert "\n" not in str(caught.value)
        return caught.value

    return refusing


CASE = """title = "Block"
[surface]
file = "block.vtp"
groups = { array = "region" }
[fluid]
density = "1000 kg/m^3"
ambient_pressure = "100 kPa"
gravity = [0, 0, -9.80665]
[flow]
velocity = { array = "U" }
pressure = { array = "p", head = "removed" }
traction = { array = "tau" }
[groups.feed]
role = "inlet"
tag = 1
[groups.drain]
role = "outlet"
tag = 2
[groups.shell]
role = "wall"
tag = 3
[hardware]
mass = "2 kg"
centre = [0.5, 0.5, 0.5]
[anchor]
at = [0, 0, 0]
"""


@dataclass(frozen=True)
class Block:
    """A case in a folder of its own: a unit cube of triangles, uniform flow along x."""

    folder: Path

    @property
    def case(self) -> Path:
        return self.folder / "block.toml"

    def write(self, text: str = CASE) -> Path:
        self.case.write_text(text, encoding="utf-8")
        return self.case

    def change(self, old: str, new: str) -> Path:
        """Write the case with one place changed."""
        assert CASE.count(old) == 1, f"{old!r} must stand once in the case"
        return self.write(CASE.replace(old, new))

    def mesh(self):
        import pyvista

        return pyvista.read(self.folder / "block.vtp")

    def save(self, mesh) -> None:
        mesh.save(self.folder / "block.vtp")


def block_arrays(cells: int = 2) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Points, triangles and region (1 inlet at x=0, 2 outlet at x=1, 3 rest) of a unit cube, normals outward."""
    import pyvista

    box = pyvista.Box(bounds=(0, 1, 0, 1, 0, 1), level=cells - 1, quads=False).clean()
    points = np.array(box.points, dtype=np.float64)
    triangles = box.faces.reshape(-1, 4)[:, 1:].astype(np.int64)
    a, b, c = (points[triangles[:, k]] for k in range(3))
    normals = np.cross(b - a, c - a)
    centre = points[triangles].mean(axis=1)
    inward = np.einsum("ij,ij->i", normals, centre - 0.5) < 0
    triangles[inward] = triangles[inward][:, ::-1]
    region = np.where(centre[:, 0] < 1e-9, 1, np.where(centre[:, 0] > 1 - 1e-9, 2, 3)).astype(np.int32)
    return points, triangles, region


@pytest.fixture
def block(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Block:
    """The good case; tests spoil one thing each."""
    import pyvista

    folder = tmp_path / "case"
    folder.mkdir()
    monkeypatch.chdir(tmp_path)
    points, triangles, region = block_arrays()
    mesh = pyvista.PolyData.from_regular_faces(points, triangles)
    mesh.point_data["U"] = np.tile([2.0, 0.0, 0.0], (len(points), 1))
    mesh.point_data["p"] = np.full(len(points), 500.0)
    mesh.cell_data["tau"] = np.zeros((len(triangles), 3))
    mesh.cell_data["region"] = region
    made = Block(folder)
    made.save(mesh)
    made.write()
    return made
