"""Bad input of the other ways that flow data come: exit code 2, one clear message, no result file."""

from __future__ import annotations

import json

import numpy as np
import pytest

from tests.conftest import CASE, Block
from tests.test_bad_input import has, refused

__all__ = ["refused"]

COLUMNS = CASE.replace('velocity = { array = "U" }', 'velocity = { array = ["u", "v", "w"] }').replace(
    'traction = { array = "tau" }\n', 'points = { file = "cloud.csv" }\n'
)


def write_cloud(block: Block, places: np.ndarray, header: str = "x,y,z,u,v,w,p") -> None:
    rows = np.column_stack([places, np.tile([2.0, 0.0, 0.0, 500.0], (len(places), 1))])
    np.savetxt(block.folder / "cloud.csv", rows, delimiter=",", header=header, comments="")


@pytest.fixture
def cloud(block: Block) -> Block:
    ticks = np.linspace(-0.1, 1.1, 8)
    write_cloud(block, np.stack(np.meshgrid(ticks, ticks, ticks), axis=-1).reshape(-1, 3))
    block.write(COLUMNS)
    return block


def test_the_good_cloud_is_good(fluxmesh, cloud) -> None:
    ran = fluxmesh("balance", cloud.case, "--out", "out", "--no-pictures")
    assert ran.code == 0, ran.err
    assert "points left out" in ran.out


def test_a_missing_column(refused, cloud) -> None:
    cloud.write(COLUMNS.replace('["u", "v", "w"]', '["u", "v", "ww"]'))
    has(refused(), "cloud.csv", '"ww"', '"w"')


def test_a_missing_file_of_points(refused, cloud) -> None:
    cloud.write(COLUMNS.replace('"cloud.csv"', '"clod.csv"'))
    has(refused(), "clod.csv", "no such file")


def test_a_unit_that_does_not_parse(refused, cloud) -> None:
    cloud.write(COLUMNS.replace('file = "cloud.csv"', 'file = "cloud.csv", unit = "mmm"'))
    has(refused(), "flow.points.unit", "mmm")


def test_a_heading_that_contradicts_the_case(refused, cloud) -> None:
    ticks = np.linspace(-100, 1100, 8)
    places = np.stack(np.meshgrid(ticks, ticks, ticks), axis=-1).reshape(-1, 3)
    write_cloud(cloud, places, "x [mm],y [mm],z [mm],u,v,w,p")
    assert "mm" in (cloud.folder / "cloud.csv").read_text("utf-8")
    cloud.write(COLUMNS.replace('file = "cloud.csv"', 'file = "cloud.csv", unit = "m"'))
    has(refused(), "flow.points.unit", "the heading says mm")


def test_points_in_one_plane(refused, cloud) -> None:
    ticks = np.linspace(0, 1, 9)
    x, y = np.meshgrid(ticks, ticks)
    write_cloud(cloud, np.column_stack([x.ravel(), y.ravel(), np.full(x.size, 0.5)]))
    has(refused(), "cloud.csv", "plane", "(0, 0, 1)")


def test_points_far_from_the_surface(refused, cloud) -> None:
    rng = np.random.default_rng(1)
    write_cloud(cloud, 50 + rng.random((500, 3)))
    has(refused(), "cloud.csv", "farther from the points than their reach")


def grid(shift: float = 0.0):
    import pyvista

    ticks = np.linspace(0, 1, 4) + shift
    mesh = pyvista.RectilinearGrid(ticks, ticks, ticks).cast_to_unstructured_grid()
    mesh.point_data["U"] = np.tile([2.0, 0.0, 0.0], (mesh.n_points, 1))
    mesh.point_data["p"] = np.full(mesh.n_points, 500.0)
    return mesh


VOLUME = CASE.replace('traction = { array = "tau" }\n', 'volume = "flow.vtu"\n')


def test_the_good_volume_is_good(fluxmesh, block) -> None:
    grid().save(block.folder / "flow.vtu")
    block.write(VOLUME)
    ran = fluxmesh("balance", block.case, "--out", "out", "--no-pictures")
    assert ran.code == 0, ran.err
    assert "100.00% of the quadrature points lie inside" in ran.out
    told = json.loads((block.folder.parent / "out" / "balance.json").read_text("utf-8"))["inputs"]["sampling"]
    assert told == {"source": "flow.vtu", "share_exact": 1.0, "farthest": 0.0, "leave_out_relative": {}}


def test_a_volume_that_misses_the_surface(refused, block) -> None:
    grid(5.0).save(block.folder / "flow.vtu")
    block.write(VOLUME)
    has(refused(), "flow.vtu")


def test_a_volume_in_another_unit(refused, block) -> None:
    mesh = grid()
    mesh.points *= 1000.0
    mesh.save(block.folder / "flow.vtu")
    block.write(VOLUME)
    has(refused(), "flow.vtu", "mm")


def test_a_volume_without_the_array(refused, block) -> None:
    mesh = grid()
    del mesh.point_data["p"]
    mesh.save(block.folder / "flow.vtu")
    block.write(VOLUME)
    has(refused(), "flow.vtu", "'p'")


def test_volume_and_points_at_once(refused, block) -> None:
    block.write(VOLUME.replace("[flow]\n", '[flow]\npoints = "cloud.csv"\n'))
    has(refused(), "both volume and points")


def test_a_piece_that_is_missing(refused, block) -> None:
    import pyvista

    mesh = block.mesh()
    parts = {
        name: mesh.extract_cells(np.flatnonzero(mesh.cell_data["region"] == tag)).extract_surface(
            algorithm="dataset_surface"
        )
        for name, tag in (("feed", 1), ("drain", 2), ("shell", 3))
    }
    pyvista.MultiBlock(parts).save(block.folder / "parts.vtm")
    text = CASE.replace('"block.vtp"', '"parts.vtm"').replace('{ array = "region" }', "{ sets = true }")
    for tag in (1, 2, 3):
        text = text.replace(f"tag = {tag}\n", "")
    block.write(text)
    pieces = sorted((block.folder / "parts").iterdir())
    assert len(pieces) == 3
    pieces[1].unlink()
    has(refused(), pieces[1].name)


def test_cell_values_of_a_volume_are_asked_for_as_faces(fluxmesh, block) -> None:
    # one name on points and on cells: at = "faces" takes the cells
    mesh = grid()
    mesh.cell_data["p"] = np.full(mesh.n_cells, 900.0)
    mesh.save(block.folder / "flow.vtu")
    block.write(VOLUME.replace('array = "p", head', 'array = "p", at = "faces", head'))
    ran = fluxmesh("balance", block.case, "--out", "out", "--no-pictures")
    assert ran.code == 0, ran.err
    # the head is put back from the origin: half a metre of water at the middle of a port
    assert f"{900 - 9806.65 / 2:,.1f}" in ran.out
