"""CGNS and Exodus files, with counts that lie and links that lead elsewhere."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

import numpy as np

from tests.corpus.damage import cut_short, flipped, mesh_case, whole
from tests.corpus.entry import Input, files
from tests.corpus.shapes import CUBE, TRIANGLES
from tests.mesh_writing import cgns_base, cgns_section, cgns_zone, write_cgns, write_exodus

__all__ = ["inputs"]

_HEXAHEDRON = np.arange(8)[None]


def _cgns(path: Path) -> None:
    section = cgns_section("skin", 5, 1, TRIANGLES)
    write_cgns(path, cgns_base(cgns_zone("zone", CUBE, np.array([[8], [12], [0]]), section), cells=2))


def _exodus(path: Path, version: int = 2) -> None:
    write_exodus(
        path, CUBE, [("solid", "HEX8", _HEXAHEDRON)], times=[0.0], nodes={"p": np.zeros((1, 8))}, version=version
    )


def _bytes(write: Callable[[Path], None], name: str) -> Callable[[], bytes]:
    def made() -> bytes:
        with TemporaryDirectory() as folder:
            write(Path(folder) / name)
            return (Path(folder) / name).read_bytes()

    return made


def _changed(name: str, write: Callable[[Path], None], change: Callable[[Any, Path], None]) -> Callable[[Path], None]:
    """Return a maker that opens the good file with h5py and changes it."""

    def make(folder: Path) -> None:
        import h5py

        files({"case.toml": mesh_case(name)})(folder)
        write(folder / name)
        with h5py.File(folder / name, "a") as file:
            change(file, folder)

    return make


_ZONE = "Base/zone"
_X = f"{_ZONE}/GridCoordinates/CoordinateX"


def _replace(path: str, values: Any) -> Callable[[Any, Path], None]:
    def change(file: Any, folder: Path) -> None:
        del folder, file[path]
        file.create_dataset(path, data=values)

    return change


def _link_outside(path: str) -> Callable[[Any, Path], None]:
    def change(file: Any, folder: Path) -> None:
        import h5py

        _cgns(folder.parent / "outside" / "other.cgns")
        del file[path]
        file[path] = h5py.ExternalLink("../outside/other.cgns", path)

    return change


def _stored_outside(path: str, size: int) -> Callable[[Any, Path], None]:
    def change(file: Any, folder: Path) -> None:
        del file[path]
        there = str(folder.parent / "outside" / "secret.txt")
        file.create_dataset(path, (8,), "f8", external=[(there, 0, size)])

    return change


def _virtual(path: str) -> Callable[[Any, Path], None]:
    def change(file: Any, folder: Path) -> None:
        import h5py

        _cgns(folder.parent / "outside" / "other.cgns")
        layout = h5py.VirtualLayout((8,), "f8")
        layout[:] = h5py.VirtualSource("../outside/other.cgns", f"{path}", (8,))
        del file[path]
        file.create_virtual_dataset(path, layout)

    return change


def _soft_loop(file: Any, folder: Path) -> None:
    import h5py

    del folder
    file["Base/again"] = h5py.SoftLink("/Base")
    file[f"{_ZONE}/self"] = file[_ZONE]


def _huge(path: str) -> Callable[[Any, Path], None]:
    def change(file: Any, folder: Path) -> None:
        del folder, file[path]
        # nothing is stored: a few bytes that read as 80 GB
        file.create_dataset(path, (10**10,), "f8", chunks=(10**6,))

    return change


def inputs() -> Iterator[Input]:
    """Yield the inputs."""
    made = _bytes(_cgns, "cube.cgns")
    yield whole("cgns", "cube.cgns", made)
    yield from cut_short("cgns", "cube.cgns", made, (0.01, 0.3, 0.6, 0.9), alone=True)
    yield from flipped("cgns", "cube.cgns", made, 6, slice(0, 2000), alone=True)
    for fault, change in (
        ("a coordinate too few", _replace(f"{_X}/ data", np.zeros(7))),
        ("coordinates that are NaN", _replace(f"{_X}/ data", np.full(8, np.nan))),
        ("coordinates at 1e300", _replace(f"{_X}/ data", np.linspace(0, 1e300, 8))),
        ("coordinates that are texts", _replace(f"{_X}/ data", np.array([b"a"] * 8))),
        ("coordinates that are complex", _replace(f"{_X}/ data", np.zeros(8, complex))),
        ("an index that is no point", _replace(f"{_ZONE}/skin/ElementConnectivity/ data", np.arange(36) + 5)),
        ("an index below one", _replace(f"{_ZONE}/skin/ElementConnectivity/ data", np.arange(36) - 5)),
        ("too few indices", _replace(f"{_ZONE}/skin/ElementConnectivity/ data", np.arange(1, 8))),
        ("a range that falls", _replace(f"{_ZONE}/skin/ElementRange/ data", np.array([12, 1]))),
        ("a huge range", _replace(f"{_ZONE}/skin/ElementRange/ data", np.array([1, 2**62]))),
        ("elements of a kind that is not there", _replace(f"{_ZONE}/skin/ data", np.array([99, 0], np.int32))),
        ("elements without kind", _replace(f"{_ZONE}/skin/ data", np.zeros(0, np.int32))),
        ("sizes that are huge", _replace(f"{_ZONE}/ data", np.array([[2**62], [2**62], [0]]))),
        ("sizes below zero", _replace(f"{_ZONE}/ data", np.array([[-8], [-12], [0]]))),
        ("sizes of texts", _replace(f"{_ZONE}/ data", np.array([b"x"]))),
        ("a kind of zone of its own", _replace(f"{_ZONE}/ZoneType/ data", np.frombuffer(b"Origami", np.int8))),
        ("80 GB of coordinates", _huge(f"{_X}/ data")),
        ("80 GB of indices", _huge(f"{_ZONE}/skin/ElementConnectivity/ data")),
        ("links that go round", _soft_loop),
    ):
        end = "either" if fault == "links that go round" else "refused"
        yield Input(f"cgns/{fault}", f"the file has {fault}", _changed("cube.cgns", _cgns, change), end, alone=True)  # type: ignore[arg-type]
    for fault, change in (
        ("a zone in another file", _link_outside(_ZONE)),
        ("a coordinate in another file", _link_outside(f"{_X}")),
        ("data stored in another file", _stored_outside(f"{_X}/ data", 64)),
        ("data seen in another file", _virtual(f"{_X}/ data")),
    ):
        yield Input(
            f"cgns/{fault}",
            f"the file has {fault}",
            _changed("cube.cgns", _cgns, change),
            says=("cube.cgns",),
            alone=True,
        )
    yield from _exodus_files()


def _exodus_files() -> Iterator[Input]:
    made = _bytes(_exodus, "cube.exo")
    yield whole("exodus", "cube.exo", made)
    yield from cut_short("exodus", "cube.exo", made, (0.001, 0.2, 0.5, 0.9), alone=True)
    yield from flipped("exodus", "cube.exo", made, 8, slice(0, 1200), alone=True)
    modern = _bytes(lambda path: _exodus(path, 4), "cube.exo")
    yield whole("hdf exodus", "cube.exo", modern)
    yield from cut_short("hdf exodus", "cube.exo", modern, (0.1, 0.5, 0.9), alone=True)
    for count in (2**31 - 1, 2**31, 2**32 - 1):

        def make(folder: Path, count: int = count) -> None:
            # the length of the first dimensions, which follows their names
            data = bytearray(made())
            at = data.index(b"num_nodes\0\0\0") + 12
            data[at : at + 4] = count.to_bytes(4, "big")
            files({"case.toml": mesh_case("cube.exo"), "cube.exo": bytes(data)})(folder)

        yield Input(
            f"exodus/announces {count} points",
            f"the header announces {count} of 8 points",
            make,
            says=("cube.exo",),
            alone=True,
        )
    for fault, change in (
        ("coordinates that are NaN", _replace("coordx", np.full(8, np.nan))),
        ("a coordinate too few", _replace("coordx", np.zeros(7))),
        ("an index that is no point", _replace("connect1", np.arange(2, 10)[None])),
        ("80 GB of coordinates", _huge("coordx")),
        ("data stored in another file", _stored_outside("coordx", 64)),
        ("data seen in another file", _virtual("coordx")),
    ):
        yield Input(
            f"hdf exodus/{fault}",
            f"the file has {fault}",
            _changed("cube.exo", lambda path: _exodus(path, 4), change),
            says=("cube.exo",),
            alone=True,
        )
