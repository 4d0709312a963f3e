"""Point clouds read from tables and point files: every layout the trade writes, and clear refusals."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from fluxmesh.errors import FieldError, FileError, InputError
from fluxmesh.field import points as points_module
from fluxmesh.field.points import PointCloud, point_suffixes, read_points

ROWS = [[0.1, 0.2, 0.3, 5.0], [1, 0, 0, 1.5], [0, 1, 0, -2.25], [0, 0, 1, 3e-2], [1, 1, 1, 4]]
TABLE = np.array(ROWS)
Write = Callable[..., Path]
Refuse = Callable[..., InputError]


def body(separator: str = ",", ending: str = "\n") -> str:
    return "".join(separator.join(f"{x:g}" for x in row) + ending for row in ROWS)


@pytest.fixture
def write(tmp_path: Path) -> Write:
    def writing(content: str | bytes, name: str = "cloud.csv") -> Path:
        path = tmp_path / name
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
        return path

    return writing


@pytest.fixture
def refuse(write: Write, capfd: pytest.CaptureFixture[str]) -> Refuse:
    """Read a file, expect an error that names it and matches, and see that nothing was printed."""

    def refusing(
        content: str | bytes | Path, match: str, kind: type[InputError] = FileError, name: str = "cloud.csv", **how: Any
    ) -> InputError:
        path = content if isinstance(content, Path) else write(content, name)
        capfd.readouterr()
        with pytest.raises(kind, match=match) as caught:
            read_points(path, **how)
        assert capfd.readouterr() == ("", "")
        assert caught.value.where == str(path)
        assert caught.value.remedy
        assert "\n" not in str(caught.value)
        return caught.value

    return refusing


def check(cloud: PointCloud, name: str = "p") -> None:
    assert_allclose(cloud.places, TABLE[:, :3], rtol=0, atol=0)
    assert_allclose(cloud.columns[name], TABLE[:, 3], rtol=0, atol=0)
    assert cloud.places.dtype == cloud.columns[name].dtype == np.float64


# --- tables that are read ------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "name"),
    [
        ("x,y,z,p\n" + body(), "cloud.csv"),
        ("x, y, z, p\n" + body(", "), "cloud.csv"),
        ("x\ty\tz\tp\n" + body("\t"), "cloud.tsv"),
        ("x;y;z;p\n" + body(";"), "cloud.csv"),
        ("x;y;z;p\n" + body(";").replace(".", ","), "decimal_comma.csv"),
        ("x\ty\tz\tp\n" + body("\t").replace(".", ","), "decimal_comma.tsv"),
        ("x y z p\n" + body("   "), "cloud.txt"),
        ("  x   y z p\n" + body(" ").replace("\n", "\n "), "cloud.dat"),
        ("\ufeffx,y,z,p\n" + body(), "mark.csv"),
        ("x,y,z,p\r\n" + body(ending="\r\n"), "lines.csv"),
        ('"x","y","z","p"\n' + body(), "quoted.csv"),
        ("# x y z p\n" + body(" "), "comment.txt"),
        ("% made for a trial\n%x,y,z,p\n" + body(), "comment.csv"),
        ("# one\n#\nx,y,z,p\n" + body(), "comment.csv"),
        ("A title of one line\n\nx,y,z,p\n\n" + body(ending="\n\n") + "# the end\n", "title.csv"),
        ("x,y,z,p,\n" + body(ending=",\n"), "trailing.csv"),
        ("x,y,z,p\n" + body(ending=",\n"), "trailing.csv"),
        (",x,y,z,p\n" + "".join(f"{k},{row}\n" for k, row in enumerate(body().split())), "numbered.csv"),
        ("x,y,z,p\n" + body().rstrip("\n"), "no_last_end.csv"),
        ('x,y,z,p\n"0.1","0.2","0.3","5"\n' + "\n".join(body().split()[1:]), "quoted_numbers.csv"),
    ],
)
def test_layouts(write: Write, text: str, name: str) -> None:
    cloud = read_points(write(text, name))
    check(cloud)
    assert list(cloud.columns) == ["p"]
    assert cloud.coordinates == ("x", "y", "z")
    assert cloud.units == cloud.faults == {}
    assert cloud.source.endswith(name)


def test_units_of_the_header(write: Write) -> None:
    cloud = read_points(write("x [mm],y[mm],z (mm),static p (Pa)\n" + body()))
    check(cloud, "static p")
    assert cloud.units == {"x": "mm", "y": "mm", "z": "mm", "static p": "Pa"}
    cloud = read_points(write('x [m] y [m] z [m] "h 0" [J/(kg K)]\n' + body(" "), "blanks.txt"))
    check(cloud, "h 0")
    assert cloud.units["h 0"] == "J/(kg K)"
    wide = "".join(f"{row},7\n" for row in body().split())
    cloud = read_points(write("x,y,z,U (x) [m/s],U (y) [m/s]\n" + wide))
    assert cloud.units == {"U (x)": "m/s", "U (y)": "m/s"}
    cloud = read_points(write("x,y,z,U (x),U (y)\n" + wide))  # no units: what tells the columns apart
    assert list(cloud.columns) == ["U (x)", "U (y)"]
    assert cloud.units == {}


@pytest.mark.parametrize(
    "names",
    [
        "X,Y,Z",
        "CoordinateX,CoordinateY,CoordinateZ",
        "coordinatex,COORDINATEY,CoordinateZ",
        "x-coordinate,y_coordinate,Z Coordinate",
    ],
)
def test_coordinates_are_found_by_name(write: Write, names: str) -> None:
    check(read_points(write(f"{names},p\n" + body())))


def test_coordinates_are_named(write: Write) -> None:
    path = write("a,b,c,p\n" + body())
    check(read_points(path, coordinates=("a", "b", "c")))
    turned = read_points(path, coordinates=("c", "a", "b"))
    assert_array_equal(turned.places, TABLE[:, [2, 0, 1]])
    # a column may be named though others have the usual names
    cloud = read_points(write("x,y,z,r\n" + body()), coordinates=("r", "y", "z"))
    assert_array_equal(cloud.places[:, 0], TABLE[:, 3])
    assert "x" in cloud.columns


def test_a_table_of_bare_numbers_is_read_as_xyz(write: Write) -> None:
    cloud = read_points(write(body(" "), "cloud.xyz"))
    check(cloud, "column 4")


def test_columns_of_text_gaps_and_nan_are_faults_only_when_asked_for(write: Write) -> None:
    rows = body().split()
    parts = [("wall.1", "1", "2"), ("b", "", "nan"), ("c", "2", "1e999"), ("d", "x", "3"), ("e", "5", "4")]
    text = "x,y,z,p,part,gap,tau\n" + "\n".join(",".join([row, *more]) for row, more in zip(rows, parts))
    cloud = read_points(write(text))
    check(cloud)
    assert list(cloud.columns) == ["p"]
    for name, message in {
        "part": r'line 2, column 5: "wall.1" is no number',
        "gap": r"line 3, column 6: the value is missing",
        "tau": r"2 of 5 values are not finite, the first in line 3, column 7",
    }.items():
        with pytest.raises(FieldError, match=rf'cloud.csv: column "{name}" cannot be used: {message}'):
            cloud.column(name)
    assert_array_equal(cloud.column("p"), TABLE[:, 3])


def test_line_numbers_count_blank_lines_and_comments(refuse: Refuse) -> None:
    text = "# first\n\nx,y,z,p\n" + body() + "\n# note\n1,2,oops,4\n"
    refuse(text, r'coordinate "z" cannot be used: line 11, column 3: "oops" is no number', FieldError)
    refuse(
        text.replace("oops", "inf"), r'"z" .*: 1 of 6 values are not finite, the first in line 11, column 3', FieldError
    )


# --- tables that are refused ---------------------------------------------------------------------------------------


def test_missing_coordinates(refuse: Refuse) -> None:
    error = refuse("x,b,z,p\n" + body(), "no column is the coordinate y", FieldError)
    assert error.remedy.endswith('Columns are "x", "b", "z", "p"')
    error = refuse("x,X,y,z\n" + body(), r'columns "x" and "X" could each be the coordinate x', FieldError)
    assert "coordinates = [" in error.remedy
    error = refuse("aa,bb,cc,p\n" + body(), 'no column "ab" for a', FieldError, coordinates=("aa", "ab", "cc"))
    assert 'Columns are "aa", "bb", "cc", "p"' in error.remedy
    refuse("xpos,ypos,zpos,p\n" + body(), r'Did you mean "zpos"\?', FieldError, coordinates=("xpos", "ypos", "zpo"))
    refuse("x,y,z,p\n" + body(), 'coordinates are named "x", "x" and "z"', FieldError, coordinates=("x", "x", "z"))


def test_missing_column(write: Write) -> None:
    cloud = read_points(write("x,y,z,pressure\n" + body()))
    with pytest.raises(FieldError, match=r'no column "presure". Did you mean "pressure"\? Columns are "pressure"'):
        cloud.column("presure")
    many = ",".join(f"c{k}" for k in range(60))
    text = f"x,y,z,{many}\n" + "".join(row + ",1" * 59 + "\n" for row in body().split())
    with pytest.raises(FieldError, match=r'"c29" and 30 more$'):
        read_points(write(text)).column("nothing like it")


def test_uneven_rows(refuse: Refuse) -> None:
    refuse("x,y,z,p\n" + body() + "1,2,3\n", r"line 7 has 3 values, where the header names 4 columns")
    refuse("x,y,z,p\n" + body() + "1,2,3,4,5\n", r"line 7 has 5 values, where the header names 4 columns")
    refuse("x y z p\n" + body(" ") + "1 2 3\n", r"line 7 has 3 values", name="cloud.txt")
    refuse("x,y,z,p,q\n" + body(), r"line 1 has 5 names and line 2 has 4 values \(separated by commas\)")
    error = refuse(
        "x y z static pressure\n" + body(" "), "line 1 has 5 names and line 2 has 4 values", name="cloud.txt"
    )
    assert "between quotes" in error.remedy


def test_decimal_commas_that_cannot_be_told(refuse: Refuse) -> None:
    error = refuse("x,y,z,p\n0,5,1,5,2,0,3,1\n", "line 1 has 4 names and line 2 has 8 values")
    assert "separate the columns by semicolons" in error.remedy
    mixed = "x;y;z;p\n0,5;1;2;3\n" + body(";")
    refuse(mixed, 'line 2, column 1: "0,5" has a decimal comma, where others have a decimal point', FieldError)


def test_header(refuse: Refuse) -> None:
    refuse(body(), "has no header: line 1 holds numbers already")
    refuse("x,y,z,p,p\n" + "".join(f"{row},1\n" for row in body().split()), r'line 1 names columns 4 and 5 alike: "p"')
    refuse("x,y,z,p\n", "has no row of at least 3 numbers in its first 1 lines")
    refuse("some words\nand more of them\n", "has no row of at least 3 numbers")


def test_no_table(refuse: Refuse, write: Write, tmp_path: Path) -> None:
    refuse("", "is empty")
    refuse("  \n\n", "is empty")
    refuse(b"PK\x03\x04\x00\x00rubbish", "holds binary data, not a table in text")
    refuse(np.random.default_rng(0).bytes(4000), "holds binary data")
    refuse("x,y,z,p\n1,2,3,4".encode("utf-16"), "is UTF-16 text")
    refuse(b"x,y,z,p\n" + body().encode() + b"1,2,3,\xb0\n", r"line 7 is no UTF-8 text")
    # a NUL further on than the start that is looked at
    late = "x,y,z,p\n" + "1,2,3,4\n" * 10_000 + "1,2,3,\0\n" + body()
    assert 'line 10002, column 4: "\\u0000" is no number' in read_points(write(late)).faults["p"]
    refuse("x,y,z,p\n" + body() + "1,2,3," + "4" * 200_000 + "x\n", "line 7 has 1 values")
    refuse("x,y,z\n1,2,3\n", r'its suffix ".stl" tells no known format of points', name="cloud.stl")
    refuse("x,y,z\n1,2,3\n", "has no suffix", name="cloud")
    refuse(tmp_path, "is a folder")
    write("x")
    refuse(tmp_path / "cluod.csv", r'there is no such file. Did you mean "cloud.csv"\?')
    refuse(tmp_path / "none" / "a.csv", "there is no such file. Check the path")


def test_a_file_of_gigantic_size_is_not_opened(refuse: Refuse, tmp_path: Path) -> None:
    path = tmp_path / "huge.csv"
    with path.open("wb") as stream:
        os.truncate(stream.fileno(), 9 * 1024**3)  # a hole: takes no room on the disk
    refuse(path, "has 9 GiB, where at most 8 are read")
    path.unlink()


def test_a_file_that_may_not_be_read(refuse: Refuse, write: Write, monkeypatch: pytest.MonkeyPatch) -> None:
    def denied(path: Path, nameless: bool) -> None:
        raise PermissionError(13, "Permission denied")

    path = write("x,y,z,p\n" + body())
    monkeypatch.setattr(points_module, "read_table", denied)
    refuse(path, r"cannot be read \(Permission denied\)")


def test_points_must_span_space(refuse: Refuse) -> None:
    head = "x,y,z,p\n"
    refuse(head + "0,0,0,1\n", "has 1 point. At least 4")
    refuse(head + "0,0,0,1\n1,0,0,1\n0,1,0,1\n", "has 3 points. At least 4")
    plane = "".join(f"{x},{y},{x},1\n" for x in range(4) for y in range(4))
    refuse(head + plane, r"all its 16 points lie in one plane, with normal \(0.7071, 0, -0.7071\)")
    far = "".join(f"{1e6 + x},{y},{2e6 + x + y / 3:.6f},1\n" for x in range(9) for y in range(9))
    refuse(head + far, r"all its 81 points lie in one plane, with normal \(0.6882, 0.2294, -0.6882\)")
    line = "".join(f"{t},{2 * t},{-3 * t},1\n" for t in range(5))
    refuse(head + line, r"all its 5 points lie on one line, along \(-0.2673, -0.5345, 0.8018\)")
    refuse(head + "1,2,3,1\n" * 5, "all its 5 points are at one place")


def test_a_thin_cloud_is_no_plane(write: Write) -> None:
    generator = np.random.default_rng(1)
    thin = generator.uniform(0, 1, (50, 4)) * [1, 1, 1e-3, 1]
    text = "x,y,z,p\n" + "\n".join(",".join(f"{x:.9g}" for x in row) for row in thin)
    assert read_points(write(text)).places.shape == (50, 3)


# --- point files ---------------------------------------------------------------------------------------------------


def polydata(count: int = 30) -> Any:
    import pyvista

    generator = np.random.default_rng(2)
    data = pyvista.PolyData(generator.uniform(0, 1, (count, 3)))
    data.point_data["p"] = generator.normal(size=count).astype(np.float32)
    data.point_data["U"] = generator.normal(size=(count, 3))
    data.point_data["region"] = np.arange(count, dtype=np.int32)
    data.point_data["stress"] = generator.normal(size=(count, 9))
    data.point_data["label"] = np.array([f"point {k}" for k in range(count)])
    gaps = generator.normal(size=count)
    gaps[[3, 5]] = np.nan
    data.point_data["gaps"] = gaps
    return data


@pytest.mark.parametrize("suffix", [".vtp", ".vtk", ".vtu"])
def test_vtk_points(tmp_path: Path, suffix: str) -> None:
    data = polydata()
    path = tmp_path / f"cloud{suffix}"
    (data.cast_to_unstructured_grid() if suffix == ".vtu" else data).save(path)
    cloud = read_points(path)
    assert_allclose(cloud.places, data.points, rtol=0, atol=0)
    assert set(cloud.columns) == {"p", "U", "region"}
    assert_allclose(cloud.column("U"), data.point_data["U"], rtol=0, atol=0)
    assert cloud.column("p").dtype == cloud.column("region").dtype == np.float64
    for name, message in {
        "stress": "it has 9 components, where 1 or 3 are used",
        "label": "it holds text",
        "gaps": "2 of 30 values are not finite, the first at point 3",
    }.items():
        with pytest.raises(FieldError, match=f'column "{name}" cannot be used: {message}'):
            cloud.column(name)


def test_points_of_a_volume_mesh(tmp_path: Path) -> None:
    import pyvista

    grid = pyvista.ImageData(dimensions=(3, 4, 5)).cast_to_unstructured_grid()
    grid.point_data["T"] = grid.points[:, 0]
    grid.save(tmp_path / "volume.vtu")
    assert_allclose(read_points(tmp_path / "volume.vtu").column("T"), grid.points[:, 0], rtol=0, atol=0)


@pytest.mark.parametrize("mode", ["ascii", "binary_little_endian"])
def test_ply_points(tmp_path: Path, mode: str, refuse: Refuse) -> None:
    header = f"ply\nformat {mode} 1.0\nelement vertex 5\n"
    header += "".join(f"property double {name}\n" for name in ("x", "y", "z", "p")) + "end_header\n"
    data = body(" ").encode() if mode == "ascii" else TABLE.astype("<f8").tobytes()
    path = tmp_path / "cloud.ply"
    path.write_bytes(header.encode() + data)
    check(read_points(path))
    path.write_bytes(header.encode() + data[:-12])
    refuse(path, "ends within its 5 rows of 'vertex'")
    path.write_bytes(header.replace("double z", "double h").encode() + data)
    refuse(path, "its vertices have no z")
    path.write_bytes(header.replace("vertex", "node").encode() + data)
    refuse(path, "has no vertices")


def test_point_files_that_are_refused(tmp_path: Path, refuse: Refuse) -> None:
    import pyvista

    path = tmp_path / "cloud.vtp"
    data = polydata()
    data.save(path)
    refuse(
        path,
        r'coordinates "a", "b" and "c" are named, but its points have their own',
        FieldError,
        coordinates=("a", "b", "c"),
    )
    whole = path.read_bytes()
    path.write_bytes(whole[: len(whole) // 2])
    refuse(path, "closing tag .* is missing")
    refuse("no xml at all", "is no VTK XML file", name="other.vtp")
    refuse("no vtk at all\n", "is no legacy VTK file", name="other.vtk")
    refuse("", "is empty", name="other.ply")
    pyvista.PolyData(data.points).save(path)
    refuse(path, "its points carry no arrays", FieldError)
    box = pyvista.ImageData(dimensions=(3, 3, 3)).cast_to_unstructured_grid()
    box.cell_data["p"] = np.arange(8.0)
    box.save(tmp_path / "cells.vtu")
    refuse(
        tmp_path / "cells.vtu",
        "its points carry no arrays. Note that its cells carry p: read it as a volume",
        FieldError,
    )
    bad = polydata()
    points = np.array(bad.points, np.float64)
    points[4, 1] = np.nan
    bad.points = points
    bad.save(path)
    refuse(path, "1 of 30 points have coordinates that are not finite, the first is point 4", FieldError)
    pyvista.Plane().save(path)
    refuse(path, r"lie in one plane, with normal \(0, 0, 1\)")
    pyvista.ImageData(dimensions=(3, 3, 3)).save(tmp_path / "image.vtk")
    refuse(tmp_path / "image.vtk", "holds a data set of kind StructuredPoints")


def test_suffixes_are_sorted() -> None:
    assert list(point_suffixes()) == sorted(set(point_suffixes()))
    assert {".csv", ".tsv", ".txt", ".xyz", ".vtp", ".vtu", ".vtk", ".ply"} <= set(point_suffixes())
