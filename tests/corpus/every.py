"""All inputs of the corpus, room by room."""

from __future__ import annotations

from collections.abc import Iterator
from importlib import import_module

from tests.corpus.entry import Input

__all__ = ["inputs"]

_ROOMS = (
    "case_text",
    "case_values",
    "paths",
    "mesh_text",
    "vtk_files",
    "vtk_sets",
    "hdf_files",
    "other_meshes",
    "geometry",
    "flow_files",
    "fuzzed",
)


def inputs() -> Iterator[Input]:
    """Yield every input; their names differ."""
    for room in _ROOMS:
        yield from import_module(f"tests.corpus.{room}").inputs()
