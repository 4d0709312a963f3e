"""Loading the compiled kernels while the main thread reads files."""

from __future__ import annotations

import sys
from collections.abc import Iterator
from contextlib import contextmanager
from threading import Thread

__all__ = ["load_kernels", "warmed"]


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


@contextmanager
def warmed() -> Iterator[None]:
    """Load the kernels on a thread beside the work inside."""
    _load_without_blas()
    thread = Thread(target=load_kernels, name="load kernels", daemon=True)
    thread.start()
    yield
