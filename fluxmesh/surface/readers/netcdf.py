"""NetCDF files, classic and netCDF-4: named variables, read one at a time.

The classic form is parsed here: its layout is public ("NetCDF Classic Format
Specification", versions CDF-1, CDF-2 and CDF-5), and only an own look at it tells a
file that was cut short. NetCDF-4 files are HDF5, read with the h5py package.
"""

from __future__ import annotations

import mmap
from abc import ABC, abstractmethod
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from math import prod
from pathlib import Path
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FileError

__all__ = ["Variables", "opened_netcdf"]

_TYPES: Final = dict(enumerate(("i1", "S1", ">i2", ">i4", ">f4", ">f8", "u1", ">u2", ">u4", ">i8", ">u8"), start=1))
_DIMENSION, _VARIABLE, _ATTRIBUTE = 10, 11, 12
_CUT_SHORT: Final = "It was cut short or is still being written; export or copy it again"
_MOST_PACKED = 1000


class Variables(ABC):
    """The variables of an open file."""

    def __init__(self, where: str) -> None:
        self.where = where

    @abstractmethod
    def __contains__(self, name: str) -> bool:
        """Return whether there is a variable of that name."""

    @abstractmethod
    def dimension(self, name: str) -> int | None:
        """Return the length of a dimension.

        Parameters
        ----------
        name : str
            Dimension.

        Returns
        -------
        int or None
            None if there is none of that name.
        """

    @abstractmethod
    def shape(self, name: str) -> tuple[int, ...]:
        """Return the shape of a variable.

        Parameters
        ----------
        name : str
            One that is there.

        Returns
        -------
        tuple of int
            Records first, where it has any.
        """

    @abstractmethod
    def attribute(self, name: str, key: str) -> str:
        """Return a text attribute of a variable.

        Parameters
        ----------
        name : str
            Variable.
        key : str
            Attribute.

        Returns
        -------
        str
            Empty if there is none.
        """

    @abstractmethod
    def array(self, name: str, record: int | None = None) -> NDArray[Any]:
        """Read a variable.

        Parameters
        ----------
        name : str
            Variable.
        record : int, optional
            Only this entry along the first dimension.

        Returns
        -------
        ndarray
            A copy in the byte order of the machine.

        Raises
        ------
        FileError
            There is none of that name, or its data are not all there.
        """

    def missing(self, name: str) -> FileError:
        """Return the error for a variable that is not there.

        Parameters
        ----------
        name : str
            Variable.

        Returns
        -------
        FileError
            To be raised.
        """
        return FileError(f"has no variable {name!r}", self.where, "The file is damaged or incomplete; export it again")


@contextmanager
def opened_netcdf(path: Path) -> Iterator[Variables]:
    """Open a netCDF file of any version.

    Parameters
    ----------
    path : Path
        An existing file, not empty.

    Yields
    ------
    Variables
        Can be used until the block ends.

    Raises
    ------
    FileError
        The file is no netCDF file, is cut short, or needs a package that is
        not installed.
    """
    with path.open("rb") as stream:
        head = stream.read(8)
        if head[:3] == b"CDF" and head[3:4] in (b"\x01", b"\x02", b"\x05"):
            with mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ) as data:
                yield _Classic(data, str(path))
            return
    if not head.startswith(b"\x89HDF"):
        raise FileError("is no netCDF file", str(path), "Check that the suffix tells what the file is")
    try:
        import h5py
    except ImportError as error:
        raise FileError(
            "is a netCDF-4 file, which needs the package h5py to be read", str(path), "Install it: pip install h5py"
        ) from error
    with h5py.File(path, "r") as file:
        yield _Hdf5(file, str(path))


@dataclass(frozen=True)
class _Variable:
    """Where a variable of a classic file lies."""

    shape: tuple[int, ...]
    kind: np.dtype[Any]
    begin: int
    recorded: bool
    attributes: dict[str, str] = field(default_factory=dict)

    @property
    def stride(self) -> int:
        """Bytes of one record, or of all."""
        return prod(self.shape[1:] if self.recorded else self.shape) * self.kind.itemsize


class _Classic(Variables):
    def __init__(self, data: mmap.mmap, where: str) -> None:
        super().__init__(where)
        self._data = data
        self._at = 4
        self._wide = data[3] == 5
        self._far = data[3] in (2, 5)
        records = self._count()
        streaming = records == (1 << (64 if self._wide else 32)) - 1
        named = [(self._name(), self._count()) for _ in self._entries(_DIMENSION)]
        self._dimensions = dict(named)
        sizes = [size for _, size in named]
        for _ in self._entries(_ATTRIBUTE):
            self._attribute()
        self._variables: dict[str, _Variable] = {}
        for _ in self._entries(_VARIABLE):
            self._variable(sizes)
        recorded = [each for each in self._variables.values() if each.recorded]
        # a single record variable is not padded
        self._record = recorded[0].stride if len(recorded) == 1 else sum(-(-each.stride // 4) * 4 for each in recorded)
        if streaming:
            start = min((each.begin for each in recorded), default=len(data))
            records = (len(data) - start) // self._record if self._record else 0
        self._records = records

    def __contains__(self, name: str) -> bool:
        return name in self._variables

    def dimension(self, name: str) -> int | None:
        return self._dimensions.get(name)

    def shape(self, name: str) -> tuple[int, ...]:
        found = self._found(name)
        return (self._records, *found.shape[1:]) if found.recorded else found.shape

    def attribute(self, name: str, key: str) -> str:
        return self._found(name).attributes.get(key, "")

    def array(self, name: str, record: int | None = None) -> NDArray[Any]:
        found, shape = self._found(name), self.shape(name)
        if record is not None and not 0 <= record < shape[0]:
            raise self._short(name, record + 1)
        if found.recorded:
            chosen = range(shape[0]) if record is None else (record,)
            end = found.begin + (chosen[-1] * self._record + found.stride if len(chosen) else 0)
            if end > len(self._data):
                raise self._short(name, end)
            parts = [self._values(found, found.begin + index * self._record, shape[1:]) for index in chosen]
            whole = np.stack(parts) if parts else np.zeros(shape, found.kind.newbyteorder("="))
        else:
            if found.begin + found.stride > len(self._data):
                raise self._short(name, found.begin + found.stride)
            whole = self._values(found, found.begin, shape)
        return whole if record is None else whole[0 if found.recorded else record]

    def _values(self, found: _Variable, begin: int, shape: tuple[int, ...]) -> NDArray[Any]:
        stored = np.frombuffer(self._data[begin : begin + prod(shape) * found.kind.itemsize], dtype=found.kind)
        return stored.reshape(shape).astype(found.kind.newbyteorder("="))

    def _found(self, name: str) -> _Variable:
        if name not in self._variables:
            raise self.missing(name)
        return self._variables[name]

    def _short(self, name: str, needed: int) -> FileError:
        return FileError(
            f"ends within its variable {name!r}: {needed} bytes are needed, {len(self._data)} are there",
            self.where,
            _CUT_SHORT,
        )

    def _bytes(self, count: int) -> bytes:
        if count < 0 or self._at + count > len(self._data):
            raise FileError(f"ends within its header ({len(self._data)} bytes)", self.where, _CUT_SHORT)
        found = self._data[self._at : self._at + count]
        self._at += count
        return found

    def _count(self) -> int:
        return int.from_bytes(self._bytes(8 if self._wide else 4), "big")

    def _number(self) -> int:
        return int.from_bytes(self._bytes(4), "big")

    def _padded(self, count: int) -> bytes:
        found = self._bytes(count)
        self._bytes(-count % 4)
        return found

    def _name(self) -> str:
        return self._padded(self._count()).decode("utf-8", "replace")

    def _entries(self, kind: int) -> range:
        """Return the entries of the list that follows."""
        found, count = self._number(), self._count()
        if found not in (0, kind) or (found == 0 and count) or count > len(self._data):
            raise FileError(
                f"has a damaged header: a list of kind {found} and length {count} where {kind} is due",
                self.where,
                "Export it again",
            )
        return range(count)

    def _kind(self) -> np.dtype[Any]:
        number = self._number()
        if number not in _TYPES:
            raise FileError(f"has a damaged header: a type of number {number}", self.where, "Export it again")
        return np.dtype(_TYPES[number])

    def _attribute(self) -> tuple[str, str]:
        name, kind = self._name(), self._kind()
        stored = self._padded(self._count() * kind.itemsize)
        return name, stored.decode("utf-8", "replace").rstrip("\0 ") if kind.char == "S" else ""

    def _variable(self, sizes: list[int]) -> None:
        name = self._name()
        rank = self._count()
        dimensions = [self._count() for _ in range(min(rank, 1 + len(self._data)))]
        attributes = dict(self._attribute() for _ in self._entries(_ATTRIBUTE))
        kind = self._kind()
        self._count()  # the size: too small a word for large variables, and known from the shape
        begin = int.from_bytes(self._bytes(8 if self._far else 4), "big")
        if any(number >= len(sizes) for number in dimensions):
            raise FileError(f"variable {name!r} has a dimension that is not there", self.where, "Export it again")
        shape = tuple(sizes[number] for number in dimensions)
        self._variables[name] = _Variable(shape, kind, begin, bool(shape) and shape[0] == 0, attributes)


class _Hdf5(Variables):
    def __init__(self, file: Any, where: str) -> None:
        super().__init__(where)
        self._file = file

    def __contains__(self, name: str) -> bool:
        import h5py

        # a link may lead to another file
        return name in self._file and isinstance(self._file.get(name, getlink=True), h5py.HardLink)

    def dimension(self, name: str) -> int | None:
        # a dimension is a variable of its length
        shape = self.shape(name) if name in self else ()
        return shape[0] if shape else None

    def shape(self, name: str) -> tuple[int, ...]:
        return tuple(int(size) for size in self._found(name).shape)

    def attribute(self, name: str, key: str) -> str:
        value = self._found(name).attrs.get(key, "")
        return value.decode("utf-8", "replace") if isinstance(value, bytes) else str(value)

    def array(self, name: str, record: int | None = None) -> NDArray[Any]:
        found = self._found(name)
        stored = int(found.id.get_storage_size())
        if found.nbytes > _MOST_PACKED * (stored + 4096):
            raise FileError(
                f"variable {name!r} announces {found.nbytes} bytes, but {stored} are stored",
                self.where,
                "The file is damaged; export it again",
            )
        values: NDArray[Any] = np.asarray(found[()] if record is None else found[record])
        return values.astype(values.dtype.newbyteorder("="), copy=False)

    def _found(self, name: str) -> Any:
        import h5py

        found = self._file[name] if name in self else None
        if not isinstance(found, h5py.Dataset):
            raise self.missing(name)
        if found.is_virtual or found.external is not None:
            raise FileError(f"variable {name!r} keeps its data in another file", self.where, "Write all into one file")
        return found
