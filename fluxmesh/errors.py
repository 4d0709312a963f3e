"""The error tree: every message says what was found, where, and what to do.

::

    FluxmeshError
    ├── InputError (ValueError)      the input is at fault: exit code 2
    │   ├── CaseError                a key of the case file
    │   ├── FileError                a file that cannot be read as what it should be
    │   ├── SurfaceError             the surface: holes, orientation, duplicates
    │   ├── GroupError               a face group: empty, overlapping, unknown
    │   ├── FieldError               an array or a supplied value
    │   └── UnitError                a unit or a dimension
    ├── OutputError (OSError)        a result that cannot be written: exit code 2
    └── PictureError (RuntimeError)  pictures cannot be drawn; numbers never depend on them
    FluxmeshWarning (UserWarning)    something doubtful that was not fatal
"""

from __future__ import annotations

import re

__all__ = [
    "CaseError",
    "FieldError",
    "FileError",
    "FluxmeshError",
    "FluxmeshWarning",
    "GroupError",
    "InputError",
    "OutputError",
    "PictureError",
    "SurfaceError",
    "UnitError",
]


_LONGEST_WORD = 300
_UNFIT_LINE = re.compile(r"\n(?!  )")
_LONG_WORD = re.compile(rf"(\S{{{_LONGEST_WORD}}})\S+")


def _readable(message: str) -> str:
    """Escape what could upset a terminal and shorten endless words: messages hold names from files."""
    if not message.isprintable():
        # a list of several problems has lines, each set in by two blanks; any other line end is one of a name
        message = _UNFIT_LINE.sub(r"\\u000a", message)
        message = "".join(c if c.isprintable() or c == "\n" else f"\\u{ord(c):04x}" for c in message)
    return _LONG_WORD.sub(r"\1...", message) if len(message) > _LONGEST_WORD else message


class FluxmeshError(Exception):
    """Base of all errors that fluxmesh raises on purpose.

    Parameters
    ----------
    found : str
        What was found, as one clause without a final full stop.
    where : str, optional
        File, key, group or face it was found at.
    remedy : str, optional
        What is allowed, or what to do about it.

    Attributes
    ----------
    found, where, remedy : str
        As given.
    """

    def __init__(self, found: str, where: str = "", remedy: str = "") -> None:
        self.found = found
        self.where = where
        self.remedy = remedy
        head = f"{where}: {found}" if where else found
        # positional arguments, so that pickling rebuilds the same error
        super().__init__(found, where, remedy)
        self._message = _readable(f"{head}. {remedy}" if remedy else head)

    def __str__(self) -> str:
        """Return the message in one piece."""
        return self._message


class InputError(FluxmeshError, ValueError):
    """The input is at fault."""


class CaseError(InputError):
    """A key of the case file is unknown, missing, or cannot be what it is."""


class FileError(InputError):
    """A file is missing, unreadable, cut short, or not what it should be."""


class SurfaceError(InputError):
    """The surface is open where it must be closed, or is otherwise broken."""


class GroupError(InputError):
    """A face group is empty, overlaps another, or is not there."""


class FieldError(InputError):
    """An array or a supplied value is missing, of the wrong shape, or not finite."""


class UnitError(InputError):
    """A unit is unknown or has the wrong dimension."""


class OutputError(FluxmeshError, OSError):
    """A result cannot be written."""


class PictureError(FluxmeshError, RuntimeError):
    """Pictures cannot be drawn here."""


class FluxmeshWarning(UserWarning):
    """Something doubtful that was not fatal."""
