"""VTK's own messages, kept from the terminal and turned into one clause."""

from __future__ import annotations

import re
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass

__all__ = ["MessageLog", "captured_messages"]

_WHERE = re.compile(r"^(?:ERROR|Warning|Generic Warning): In .*, line \d+$")
_WHO = re.compile(r"^\w+ \((?:0x)?[0-9a-fA-F]+\): ")


@dataclass
class MessageLog:
    """What VTK said while it was listened to.

    Attributes
    ----------
    text : str
        All of it, in VTK's own layout.
    """

    text: str = ""

    @property
    def failure(self) -> str:
        """First message that says that reading failed, without VTK's own file and line; "" if none does."""
        error = False
        for line in self.text.splitlines():
            if _WHERE.match(line):
                error = line.startswith("ERROR")
            elif "InformationKey" in line:
                # notes of VTK beside an array (its range, say) that it cannot read back, such as "inf";
                # the data are whole
                error = False
            elif line.strip() and (error or "error reading" in line.lower()):
                return _WHO.sub("", line).strip().rstrip(".!")
        return ""


@contextmanager
def captured_messages() -> Iterator[MessageLog]:
    """Keep what VTK would print, for as long as the block runs.

    Yields
    ------
    MessageLog
        Filled when the block ends.
    """
    from vtkmodules.vtkCommonCore import vtkLogger, vtkOutputWindow, vtkStringOutputWindow

    log = MessageLog()
    window, before = vtkStringOutputWindow(), vtkOutputWindow.GetInstance()
    # VTK reports twice: to its output window and to its logger, which writes to stderr.
    verbosity = vtkLogger.GetCurrentVerbosityCutoff()
    vtkOutputWindow.SetInstance(window)
    vtkLogger.SetStderrVerbosity(vtkLogger.VERBOSITY_OFF)
    try:
        yield log
    finally:
        vtkLogger.SetStderrVerbosity(verbosity)
        vtkOutputWindow.SetInstance(before)
        said = window.GetOutput() or ""
        # VTK quotes the file, and what is no UTF-8 comes as bytes
        log.text = said.decode("utf-8", "replace") if isinstance(said, bytes) else said
