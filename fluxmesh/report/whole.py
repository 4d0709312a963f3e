"""Files that are written whole or not at all."""

from __future__ import annotations

import os
import tempfile
from pathlib import Path

from fluxmesh.errors import OutputError

__all__ = ["require_writable", "write_whole"]


def write_whole(content: bytes, path: Path) -> None:
    """Write a file whole or not at all.

    Parameters
    ----------
    content : bytes
        All of it.
    path : pathlib.Path
        Where to; an older file stays until the new one is complete.

    Raises
    ------
    OutputError
        The folder or file cannot be written.
    """
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        handle, name = tempfile.mkstemp(dir=path.parent, prefix=f".{path.name}.", suffix=".part")
        try:
            with os.fdopen(handle, "wb") as stream:
                stream.write(content)
                stream.flush()
                os.fsync(stream.fileno())
            # a temporary file is private to its owner; a result is as readable as any new file
            mask = os.umask(0)
            os.umask(mask)
            os.chmod(name, 0o666 & ~mask)
            os.replace(name, path)
        except BaseException:
            Path(name).unlink(missing_ok=True)
            raise
    except OSError as error:
        raise OutputError(
            f"cannot be written ({error.strerror or error})",
            where=str(path),
            remedy="Choose a folder that can be written, with --out",
        ) from error


def require_writable(folder: Path) -> None:
    """Raise before the work if a folder cannot take the results.

    Parameters
    ----------
    folder : pathlib.Path
        The folder; it is made if it is not there.

    Raises
    ------
    OutputError
        It cannot be made or written to.
    """
    try:
        folder.mkdir(parents=True, exist_ok=True)
        with tempfile.TemporaryFile(dir=folder):
            pass
    except OSError as error:
        raise OutputError(
            f"the folder cannot be written to ({error.strerror or error})",
            where=str(folder),
            remedy="Choose another with --out",
        ) from error
