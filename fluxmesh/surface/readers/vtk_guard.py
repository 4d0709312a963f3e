"""Files that may end the process when they are damaged, tried in another one first.

On grids of polyhedra, VTK 9.7.2 was seen to end the process for 6 of 250 random
damages (memory asked for by damaged counts); on grids without them for none.
"""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

from fluxmesh.errors import FileError
from fluxmesh.guarded import is_guarded

__all__ = ["try_reader"]

_CODE = """
import sys
from importlib import import_module
from vtkmodules.vtkCommonCore import vtkLogger
vtkLogger.SetStderrVerbosity(vtkLogger.VERBOSITY_OFF)
reader = getattr(import_module(sys.argv[1]), sys.argv[2])()
reader.SetFileName(sys.argv[3])
reader.Update()
"""
_SECONDS = 30.0
_BYTES_A_SECOND = 5e6


def try_reader(reader: object, path: Path) -> None:
    """Let a VTK reader read a file in a process of its own, unless this one is guarded already.

    Parameters
    ----------
    reader : vtkAlgorithm
        A reader of that class is made anew.
    path : Path
        The file.

    Raises
    ------
    FileError
        The process was ended by a signal, or did not end within half a minute
        and a second for each 5 million bytes.
    """
    if is_guarded():
        return
    kind = type(reader)
    command = [sys.executable, "-c", _CODE, kind.__module__, kind.__name__, str(path)]
    seconds = _SECONDS + path.stat().st_size / _BYTES_A_SECOND
    try:
        ran = subprocess.run(
            command, stdin=subprocess.DEVNULL, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL, timeout=seconds
        )
    except subprocess.TimeoutExpired as error:
        raise FileError(
            f"cannot be read (its reader did not end within {seconds:.0f} s)",
            str(path),
            "It is damaged or cut short; export it again",
        ) from error
    if ran.returncode < 0:
        raise FileError(
            "cannot be read (its lists of polyhedron faces are damaged)",
            str(path),
            "It is damaged or cut short; export it again",
        )
