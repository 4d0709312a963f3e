"""Each kind of bad input: exit code 2, one clear message, no result file."""

from __future__ import annotations

import stat
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from tests.conftest import CASE, Block, Ran


@pytest.fixture
def refused(fluxmesh: Callable[..., Ran], block: Block) -> Callable[..., str]:
    """Run the spoilt case; return its message after checking how it ended."""

    def run(*, case: Path | None = None) -> str:
        out = block.folder.parent / "out"
        ran = fluxmesh("balance", case or block.case, "--out", out, "--no-pictures")
        assert ran.code == 2, ran
        assert ran.out == ""
        assert ran.err.startswith("fluxmesh: ")
        assert "Traceback" not in ran.err
        assert not list(out.glob("*")) if out.exists() else True
        return ran.err

    return run


def has(message: str, *parts: str) -> None:
    for part in parts:
        assert part in message, f"{part!r} is not in {message!r}"


def test_the_good_case_is_good(fluxmesh, block) -> None:
    ran = fluxmesh("balance", block.case, "--out", "out", "--no-pictures")
    assert ran.code == 0, ran
    assert (block.folder.parent / "out" / "balance.json").is_file()


def test_missing_case(refused, block) -> None:
    has(refused(case=block.folder / "blokc.toml"), "blokc.toml")


def test_missing_mesh(refused, block) -> None:
    block.change('"block.vtp"', '"blok.vtp"')
    has(refused(), "blok.vtp", "no such file", "Did you mean 'block.vtp'")


def test_unreadable_mesh(refused, block) -> None:
    # a folder cannot be read as a file, by root neither
    path = block.folder / "block.vtp"
    path.unlink()
    path.mkdir()
    has(refused(), "block.vtp", "folder")


def test_a_mesh_that_may_not_be_read(refused, block, monkeypatch) -> None:
    # root may read everything, so the refusal of the system is played
    def refuse(*_args: object, **_kwargs: object) -> None:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr("builtins.open", refuse)
    monkeypatch.setattr("io.open", refuse)
    monkeypatch.setattr("os.open", refuse)
    has(refused(), "Permission denied")


@pytest.mark.parametrize("share", [0.0, 0.2, 0.6, 0.97])
def test_truncated_mesh(refused, block, share: float) -> None:
    path = block.folder / "block.vtp"
    content = path.read_bytes()
    path.write_bytes(content[: int(share * len(content))])
    has(refused(), "block.vtp")


def test_a_file_that_is_no_mesh(refused, block) -> None:
    (block.folder / "block.vtp").write_text("dear diary\n", encoding="utf-8")
    has(refused(), "block.vtp")


def test_no_faces(refused, block) -> None:
    import pyvista

    block.save(pyvista.PolyData(np.zeros((3, 3))))
    has(refused(), "block.vtp", "face")


def test_missing_array(refused, block) -> None:
    block.change('velocity = { array = "U" }', 'velocity = { array = "V" }')
    has(refused(), "flow.velocity", "no array 'V'", "block.vtp")


def test_array_of_wrong_length(refused, block) -> None:
    path = block.folder / "block.vtp"
    import pyvista

    mesh = pyvista.read(path)
    pyvista.PolyData.from_regular_faces(mesh.points, mesh.regular_faces)
    lines = [
        "# vtk DataFile Version 3.0", "short", "ASCII", "DATASET POLYDATA", f"POINTS {mesh.n_points} double",
        *(" ".join(map(str, p)) for p in mesh.points.tolist()),
        f"POLYGONS {mesh.n_cells} {4 * mesh.n_cells}",
        *("3 " + " ".join(map(str, f)) for f in mesh.regular_faces.tolist()),
        f"CELL_DATA {mesh.n_cells - 1}", "SCALARS region int 1", "LOOKUP_TABLE default",
        *(str(r) for r in mesh.cell_data["region"][:-1].tolist()),
    ]  # fmt: skip
    (block.folder / "block.vtk").write_text("\n".join(lines) + "\n", encoding="utf-8")
    block.change('"block.vtp"', '"block.vtk"')
    has(refused(), "block.vtk")


def test_wrong_component_count(refused, block) -> None:
    block.change('velocity = { array = "U" }', 'velocity = { array = "p" }')
    has(refused(), "'p'", "1 components", "3 needed for velocity")


@pytest.mark.parametrize("value", [np.nan, np.inf, -np.inf])
@pytest.mark.parametrize(("name", "where"), [("U", "point"), ("p", "point"), ("tau", "face")])
def test_values_that_are_not_finite(refused, block, value: float, name: str, where: str) -> None:
    mesh = block.mesh()
    data = mesh.point_data if where == "point" else mesh.cell_data
    values = np.array(data[name])
    values[[3, 7]] = value
    data[name] = values
    block.save(mesh)
    has(refused(), f"'{name}'", "2 of", "not finite", f"first at {where} 3", "group '")


def test_unknown_key(refused, block) -> None:
    block.change("ambient_pressure", "ambient_presure")
    has(refused(), "fluid.ambient_presure", "ambient_pressure")


def test_wrong_dimension(refused, block) -> None:
    block.change('ambient_pressure = "100 kPa"', 'ambient_pressure = "3 kg"')
    has(refused(), "fluid.ambient_pressure", "3 kg", "mass", "pressure")


def test_group_without_faces(refused, block) -> None:
    block.change("tag = 2", "tag = 7")
    has(refused(), "drain", "7")


def test_faces_in_no_group(refused, block) -> None:
    block.write(CASE.replace('[groups.drain]\nrole = "outlet"\ntag = 2\n', ""))
    has(refused(), "8 ", "2")


def test_faces_in_two_groups(refused, block) -> None:
    block.change("tag = 2", "tag = [1, 2]")
    has(refused(), "feed", "drain", "1")


def test_inlet_whose_supplied_flow_leaves(refused, block) -> None:
    block.change('role = "inlet"\n', 'role = "inlet"\nvelocity = [-1, 0, 0]\n')
    has(refused(), "feed", "inlet", "leaves")
    block.change('role = "inlet"\n', 'role = "inlet"\nflow_rate = -1\n')
    has(refused(), "groups.feed.flow_rate", "negative")


def test_both_flow_rate_and_speed(refused, block) -> None:
    block.change('role = "inlet"\n', 'role = "inlet"\nflow_rate = 1\nspeed = 1\n')
    has(refused(), "groups.feed", "flow_rate", "speed")


def test_open_surface(refused, block) -> None:
    mesh = block.mesh()
    rest = mesh.extract_cells(np.flatnonzero(mesh.cell_data["region"] != 2))
    block.save(rest.extract_surface(algorithm="dataset_surface"))
    block.write(CASE.replace('[groups.drain]\nrole = "outlet"\ntag = 2\n', ""))
    has(refused(), "open", "8 ", "4 m", "shell", "closed = false")


@pytest.mark.parametrize("value", ["0", "-998.2", '"0 kg/m^3"'])
def test_density_that_is_not_positive(refused, block, value: str) -> None:
    block.change('"1000 kg/m^3"', value)
    has(refused(), "density")


def test_density_array_that_is_not_positive(refused, block) -> None:
    mesh = block.mesh()
    density = np.full(mesh.n_points, 1000.0)
    density[5] = 0.0
    mesh.point_data["rho"] = density
    block.save(mesh)
    block.write(
        CASE.replace('density = "1000 kg/m^3"\n', "")
        .replace("[flow]\n", '[flow]\ndensity = { array = "rho" }\n')
        .replace(', head = "removed"', "")
    )
    has(refused(), "'rho'", "1 of", "zero or negative", "point 5")


def test_absolute_pressure_without_ambient(refused, block) -> None:
    block.write(CASE.replace('ambient_pressure = "100 kPa"\n', "").replace('"removed"', '"removed", kind = "absolute"'))
    has(refused(), "absolute", "ambient_pressure")


@pytest.mark.parametrize(("old", "new"), [("at = [0, 0, 0]", "at = [0, 0]"), ("[0, 0, -9.80665]", "-9.80665")])
def test_points_that_are_no_3_vectors(refused, block, old: str, new: str) -> None:
    block.change(old, new)
    has(refused(), "anchor.at" if "at" in old else "fluid.gravity")


def test_output_folder_that_cannot_be_written(fluxmesh, block) -> None:
    blocked = block.folder.parent / "taken"
    blocked.write_text("a file, not a folder", encoding="utf-8")
    ran = fluxmesh("balance", block.case, "--out", blocked / "deeper", "--no-pictures")
    assert ran.code == 2
    has(ran.err, "taken", "--out")
    assert blocked.read_text(encoding="utf-8") == "a file, not a folder"


def test_an_older_result_stays_when_the_input_is_at_fault(fluxmesh, block) -> None:
    assert fluxmesh("balance", block.case, "--out", "out", "--no-pictures").code == 0
    result = block.folder.parent / "out" / "balance.json"
    before = result.read_bytes()
    block.change("tag = 2", "tag = 7")
    assert fluxmesh("balance", block.case, "--out", "out", "--no-pictures").code == 2
    assert result.read_bytes() == before
    assert [path.name for path in result.parent.iterdir()] == ["balance.json"]
    assert stat.S_IMODE(result.stat().st_mode) & 0o400


def test_point_data_on_as_many_points_as_faces_needs_a_word() -> None:
    import fluxmesh
    from fluxmesh.errors import FieldError

    faces = np.array([[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]])
    surface = fluxmesh.control_surface(np.vstack([np.zeros(3), np.eye(3)]), faces, {"a": ("wall", np.arange(4))})
    with pytest.raises(FieldError, match='Say where it sits: at = "nodes" or "faces"'):
        fluxmesh.lay_flow(surface, pressure=np.arange(4.0))
    with pytest.raises(FieldError, match='Give "nodes" or "faces"'):
        fluxmesh.lay_flow(surface, pressure=np.arange(4.0), at="corners")
    loads = [
        fluxmesh.balance_of(surface, fluxmesh.lay_flow(surface, pressure=np.arange(4.0), at=at)).balance.load
        for at in ("nodes", {"pressure": "faces"})
    ]
    # linear from 0 at the origin to 1, 2, 3 on the axes: grad p times the volume, on the fluid
    np.testing.assert_allclose(loads[0].from_walls.force, np.array([1, 2, 3]) / 6, rtol=1e-14)
    # by hand: pressures 0, 1, 2, 3 on the faces z=0, y=0, x=0 and the slanted one
    np.testing.assert_allclose(loads[1].from_walls.force, np.array([3 - 2, 3 - 1, 3 - 0]) / 2, rtol=1e-14)


def test_input_that_asks_for_more_memory_than_there_is(refused, monkeypatch) -> None:
    def run_out(_path: object, **_options: object) -> None:
        raise MemoryError

    monkeypatch.setattr("fluxmesh.job.mesh.read_mesh", run_out)
    has(refused(), "memory does not suffice", "damaged file")
