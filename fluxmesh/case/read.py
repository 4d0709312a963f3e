"""A TOML file -> a case, or one message that says all that is wrong with it."""

from __future__ import annotations

import hashlib
import re
import tomllib
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from fluxmesh.case.messages import case_error
from fluxmesh.case.model import Case, CaseTables
from fluxmesh.errors import FileError

__all__ = ["parse_case", "read_case"]

_LARGEST_FILE = 4_000_000  # bytes; a case is a page or two of text
# A key of very many parts: the time that its parser takes grows with the square of them, to hours.
_LONG_KEY = re.compile(r"""(?<![\w"'-])(?:(?:[\w-]++|"[^"\n]*+"|'[^'\n]*+')[ \t]*+\.[ \t]*+){40}""")
_DEEP = "A case has tables within tables, three or four deep, and no deeper"


def read_case(path: Path) -> Case:
    """Read a case file.

    Parameters
    ----------
    path : Path
        A TOML file in UTF-8, up to 4 MB. The paths in it start from its folder.

    Returns
    -------
    Case
        Complete and consistent, in SI. That the files it names exist, and hold
        what it names, is for their readers to find.

    Raises
    ------
    FileError
        The file is missing, cannot be read, or is no TOML.
    CaseError
        A key is unknown, missing, or cannot be what it is.
    UnitError
        A quantity has an unknown unit or the wrong dimension.
    """
    path = Path(path)
    if path.is_fifo() or path.is_socket():
        # it would wait for a writer, perhaps for ever
        raise FileError("this is no regular file", where=str(path), remedy="Give the path of a case file")
    try:
        with path.open("rb") as stream:
            content = stream.read(_LARGEST_FILE + 1)
    except FileNotFoundError as error:
        raise FileError("there is no such file", where=str(path), remedy="Give the path of a case file") from error
    except IsADirectoryError as error:
        raise FileError("this is a folder", where=str(path), remedy="Give the case file in it") from error
    except (OSError, ValueError) as error:
        # ValueError: a path that no file can have
        reason = getattr(error, "strerror", None) or str(error)
        raise FileError(
            f"it cannot be read: {reason}", where=str(path), remedy="Give the path of a case file that may be read"
        ) from error
    return parse_case(content, path)


def parse_case(content: bytes, path: Path) -> Case:
    """Read a case from the bytes of a file.

    Parameters
    ----------
    content : bytes
        TOML in UTF-8, up to 4 MB.
    path : Path
        Where they are from: names the case, and its folder is where the paths
        in the case start.

    Returns
    -------
    Case
        As `read_case` gives it.

    Raises
    ------
    FileError, CaseError, UnitError
        As for `read_case`.
    """
    document = _toml(content, path)
    try:
        tables = CaseTables.model_validate(document, context={"folder": path.parent})
    except ValidationError as error:
        raise case_error(error, CaseTables, path.name) from error
    fields = {name: getattr(tables, name) for name in CaseTables.model_fields}
    # constructed, not validated again: the tables are, and must keep which keys were given
    return Case.model_construct(
        _fields_set=tables.model_fields_set | {"path", "sha256"},
        path=path,
        sha256=hashlib.sha256(content).hexdigest(),
        **fields,
    )


def _toml(content: bytes, path: Path) -> dict[str, Any]:
    where = str(path)
    if len(content) > _LARGEST_FILE:
        raise FileError(
            f"it is larger than {_LARGEST_FILE // 1_000_000} MB",
            where=where,
            remedy="Is this the mesh, not the case?",
        )
    try:
        # some editors write a byte order mark, which TOML does not know
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        raise FileError(
            f"line {line} is not UTF-8 text", where=where, remedy="Give a case file in TOML, saved as UTF-8"
        ) from error
    deep = _LONG_KEY.search(text)
    if deep is not None:
        line = text.count("\n", 0, deep.start()) + 1
        raise FileError(f"line {line} has a key of very many parts", where=where, remedy=_DEEP)
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise FileError(f"it is not valid TOML: {error}", where=where, remedy="See toml.io for the format") from error
    except RecursionError as error:
        raise FileError("its lists or tables are nested too deeply", where=where, remedy=_DEEP) from error
    except ValueError as error:
        # such as an integer of thousands of digits
        raise FileError(
            f"it is not valid TOML: {error}", where=where, remedy="Write numbers as they are meant"
        ) from error
