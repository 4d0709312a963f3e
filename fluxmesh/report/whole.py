"""Files that are written whole or not at all, whatever ends the process meanwhile.

A file is filled before it has a name (where the system can do that), and takes its name in one step. Where it
needs a name of its own before, it is locked; one that nobody holds is what an earlier run left when it was
killed, and is cleared away by the next.
"""

from __future__ import annotations

import contextlib
import errno
import os
import tempfile
import time
from collections.abc import Iterable, Mapping
from pathlib import Path

from fluxmesh.errors import OutputError

__all__ = ["require_writable", "write_together", "write_whole"]

_FULL = (errno.ENOSPC, errno.EFBIG, errno.EDQUOT)
_EMPTY_SINCE = 60.0  # s


def write_whole(content: bytes, path: Path, *, replace: bool = True) -> None:
    """Write a file whole or not at all.

    Parameters
    ----------
    content : bytes
        All of it.
    path : pathlib.Path
        Where to; an older file stays until the new one is complete.
    replace : bool, optional
        Whether an older file may be replaced; else it is an error.

    Raises
    ------
    OutputError
        The folder or file cannot be written, or is there already.
    """
    write_together({path: content}, replace=replace)


def write_together(files: Mapping[Path, bytes], superseded: Iterable[Path] = (), *, replace: bool = True) -> None:
    """Write several files that belong together: none takes its place before all are complete.

    Parameters
    ----------
    files : mapping of pathlib.Path to bytes
        All of each; older files stay until every new one is complete.
    superseded : iterable of pathlib.Path, optional
        Files of an earlier result that do not belong to this one: they are
        taken away when all new ones are complete.
    replace : bool, optional
        As `write_whole`.

    Raises
    ------
    OutputError
        As `write_whole`; the earlier files are still there.
    """
    parts: list[_Part] = []
    path = Path()
    try:
        for path, content in files.items():
            path.parent.mkdir(parents=True, exist_ok=True)
            _clear_left_over(path)
            parts.append(_Part(path))
            parts[-1].fill(content)
        for path in superseded:
            if path not in files:
                path.unlink(missing_ok=True)
        for part in parts:
            path = part.path
            part.put(replace)
    except (OSError, ValueError) as error:
        if isinstance(error, FileExistsError) and not replace:
            raise OutputError("exists already", where=str(path), remedy="Choose another name") from error
        # ValueError: a name that no file can have
        full = isinstance(error, OSError) and error.errno in _FULL
        raise OutputError(
            f"cannot be written ({getattr(error, 'strerror', None) or error})",
            where=str(path),
            remedy=("Make room there, or choose another place" if full else "Choose a place that can be written")
            + "; what was there before is as it was",
        ) from error
    finally:
        for part in parts:
            part.close()


class _Part:
    """A file that does not have its name yet."""

    def __init__(self, path: Path, *, named: bool = False) -> None:
        self.path = path
        self._name: Path | None = None
        self._content = b""
        handle = None if named else _without_name(path.parent)
        if handle is None:
            self._name = self._other_name()
            handle = os.open(self._name, os.O_CREAT | os.O_EXCL | os.O_WRONLY | getattr(os, "O_BINARY", 0), 0o666)
        self._handle = handle
        _lock(handle)

    def fill(self, content: bytes) -> None:
        self._content = content
        rest = memoryview(content)
        while rest:
            rest = rest[os.write(self._handle, rest) :]
        os.fsync(self._handle)

    def put(self, replace: bool) -> None:
        """Let the file take its place."""
        if self._name is None:
            try:
                self._link(self.path)
                return
            except FileExistsError:
                if not replace:
                    raise
            except OSError:
                # a file system that makes files without a name, but gives them none
                self._again_named()
        if self._name is None:
            name = self._other_name()
            self._link(name)
            self._name = name
        if replace:
            os.replace(self._name, self.path)
            self._name = None
        else:
            os.link(self._name, self.path)

    def close(self) -> None:
        """Let go of the file; one that did not take its place is gone."""
        with contextlib.suppress(OSError):
            os.close(self._handle)
        if self._name is not None:
            with contextlib.suppress(OSError):
                self._name.unlink(missing_ok=True)

    def _other_name(self) -> Path:
        return self.path.with_name(f".{self.path.name[-180:]}.{os.getpid()}-{time.monotonic_ns():x}.part")

    def _link(self, name: Path) -> None:
        # a folder is passed, though the source is absolute, because only then the link to the file is followed
        os.link(f"/proc/self/fd/{self._handle}", name, src_dir_fd=self._handle, follow_symlinks=True)

    def _again_named(self) -> None:
        other = _Part(self.path, named=True)
        os.close(self._handle)
        self._handle, self._name = other._handle, other._name
        self.fill(self._content)


def _without_name(folder: Path) -> int | None:
    """Open a new file that has no name; None where that cannot be."""
    if not hasattr(os, "O_TMPFILE") or not os.path.isdir("/proc/self/fd"):
        return None
    try:
        return os.open(folder, os.O_TMPFILE | os.O_WRONLY, 0o666)
    except OSError:
        # what is wrong with the folder itself shows when a file with a name is made
        return None


def _lock(handle: int) -> bool:
    """Hold a file as long as it is open; return whether nobody else does."""
    try:
        import fcntl

        fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except (ImportError, OSError):
        return False
    return True


def _clear_left_over(path: Path) -> None:
    """Take away what a killed run has left beside a file."""
    with os.scandir(path.parent) as entries:
        head = f".{path.name[-180:]}."
        found = [entry for entry in entries if entry.name.startswith(head) and entry.name.endswith(".part")]
    for entry in found:
        with contextlib.suppress(OSError):
            handle = os.open(entry.path, os.O_RDWR | getattr(os, "O_NOFOLLOW", 0))
            try:
                state = os.fstat(handle)
                # one that is empty may not have been locked yet
                if _lock(handle) and (state.st_size or time.time() - state.st_mtime > _EMPTY_SINCE):
                    os.unlink(entry.path)
            finally:
                os.close(handle)


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
