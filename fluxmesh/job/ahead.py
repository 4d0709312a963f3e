"""Reading the mesh on a thread while the compiled kernels load: both are slow, and neither needs the other."""

from __future__ import annotations

import contextlib
import sys
import threading
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from typing import TYPE_CHECKING, Final

if TYPE_CHECKING:
    from fluxmesh.case.model import Case
    from fluxmesh.job.mesh import Loaded

__all__ = ["load_ahead", "load_kernels"]

# formats that VTK reads: no other package is imported on the way
_LEAN: Final = {".vtp", ".vtu", ".vtk"}
_PATIENCE: Final = 5.0  # s; kernels that are kept on disk load in less


def load_kernels() -> None:
    """Run every kernel of the main job once on one tetrahedron.

    The first call of a kernel loads its machine code from disk, or compiles it.
    """
    import numpy as np

    from fluxmesh.field.flow import integrate_flow, still_flow
    from fluxmesh.surface.build import control_surface

    points = np.array([[0.0, 0.0, 0.0], [1.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.0, 0.0, 1.0]])
    faces = np.array([[0, 2, 1], [0, 1, 3], [1, 2, 3], [0, 3, 2]])
    surface = control_surface(points, faces, {"all": ("wall", np.arange(4))})
    integrate_flow(surface, still_flow(surface), threads=1)


def _load_without_blas() -> None:
    # numba looks for SciPy's BLAS as it loads its array functions, and importing scipy.linalg costs
    # more than all our kernels; none of them uses a BLAS. Only for a process of our own.
    blocked = "scipy.linalg" not in sys.modules
    if blocked:
        sys.modules["scipy.linalg"] = None  # type: ignore[assignment]
    try:
        import numba.np.arraymath  # noqa: F401
    finally:
        if blocked:
            del sys.modules["scipy.linalg"]


@contextlib.contextmanager
def _told_if_slow() -> Iterator[None]:
    """Say on a terminal why a first run takes long."""
    if sys.stderr is None or not sys.stderr.isatty():
        yield
        return
    words = "fluxmesh: compiling its kernels, on the first run only: a minute or two ..."
    timer = threading.Timer(_PATIENCE, print, [words], {"file": sys.stderr, "flush": True})
    timer.daemon = True
    timer.start()
    try:
        yield
    finally:
        timer.cancel()


def load_ahead(case: Case) -> Loaded:
    """Read the mesh of a case, and load the kernels in the meantime.

    For a process of its own, such as the command: it bends what numba imports.

    Parameters
    ----------
    case : Case
        The case.

    Returns
    -------
    Loaded
        Its mesh, for `fluxmesh.job.run.run_case`.

    Raises
    ------
    InputError
        As `fluxmesh.job.shape.load_mesh`.
    """
    from fluxmesh.job.mesh import load_mesh

    files = [case.surface.file, *(case.surface.files or {}).values()]
    with _told_if_slow(), ThreadPoolExecutor(1) as pool:
        reading = pool.submit(load_mesh, case)
        if all(file is None or file.suffix.lower() in _LEAN for file in files):
            _load_without_blas()
        load_kernels()
        return reading.result()
