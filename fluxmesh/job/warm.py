"""Loading the compiled kernels while the main thread reads files."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from threading import Thread

import numpy as np

__all__ = ["load_kernels", "warmed"]


def load_kernels() -> None:
    """Run every kernel of the main job once on one tetrahedron.

    The first call of a kernel loads its machine code from disk, or compiles it.
    """
    from fluxmesh.field.flow import integrate_flow, still_flow
    from fluxmesh.surface.build import control_surface

    points = np.array([[0.0, 0.0, 0.0], [1.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.0, 0.0, 1.0]])
    faces = np.array([[0, 2, 1], [0, 1, 3], [1, 2, 3], [0, 3, 2]])
    surface = control_surface(points, faces, {"all": ("wall", np.arange(4))})
    integrate_flow(surface, still_flow(surface), threads=1)


@contextmanager
def warmed() -> Iterator[None]:
    """Load the kernels on a thread beside the work inside."""
    thread = Thread(target=load_kernels, name="load kernels", daemon=True)
    thread.start()
    yield
