"""The report page of a case that was done: the scene, and where the figures come from."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator, Mapping
from datetime import UTC, datetime
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

if TYPE_CHECKING:
    from fluxmesh.case.model import Case
    from fluxmesh.job.outcome import Outcome
    from fluxmesh.report.scene import Scene

__all__ = ["origin_of_case", "write_report"]

_LIBRARIES: Final = ("fluxmesh", "numpy", "numba", "scipy", "vtk")


def write_report(
    case: Case,
    done: Outcome,
    path: Path,
    *,
    scene: Scene | None = None,
    pictures: Mapping[str, bytes] | None = None,
    units: str = "si",
    command: str = "",
    series: Mapping[str, Any] | None = None,
    causes: Mapping[str, Any] | None = None,
    convergence: Mapping[str, Any] | None = None,
) -> None:
    """Write the report page of a case.

    Parameters
    ----------
    case : Case
        The case; of a series, the whole one.
    done : Outcome
        What it gave; of a series, the instant with the largest reaction.
    path : pathlib.Path
        File to write.
    scene : Scene, optional
        Of that outcome, not thinned, where it is at hand.
    pictures : mapping of str to bytes, optional
        PNG files by name: ``vectors``, ``pressure``, ``series``.
    units : {"si", "us"}, optional
        ``us`` shows US customary units beside SI.
    command : str, optional
        What was run.
    series, causes, convergence : mapping, optional
        The content of ``series.json``, of a search for causes, of a study of meshes.

    Raises
    ------
    OutputError
        The file cannot be written.
    """
    from fluxmesh.report.page.page import write_page
    from fluxmesh.report.page.traction import traction_sizes
    from fluxmesh.report.sketch import scene_of

    if scene is None:
        scene = scene_of(done.title, done.surface, done.flow, done.balance, notes=done.picture_notes())
    extra = {
        **origin_of_case(case),
        "command": command,
        "series": series,
        "causes": causes,
        "convergence": convergence,
        "traction": lambda triangles: traction_sizes(done.surface, done.flow, triangles),
    }
    write_page(done.data(), scene, path, pictures=pictures, units=units, extra=extra)


def origin_of_case(case: Case) -> dict[str, Any]:
    """Return the text of a case, its files with their sizes and hashes, the versions, and the time.

    Parameters
    ----------
    case : Case
        A case that was read.

    Returns
    -------
    dict
        ``case_text``, ``files``, ``versions`` and ``time`` as `fluxmesh.report.page.page.page_html` takes
        them. A file that is no longer there is left out.
    """
    named = [case.path, *dict.fromkeys(_paths(case.model_dump(exclude={"path"})))]
    files = []
    for path in named:
        try:
            with path.open("rb") as stream:
                digest = hashlib.file_digest(stream, "sha256").hexdigest()
            files.append({"name": path.name, "size": path.stat().st_size, "sha256": digest})
        except OSError:
            continue
    try:
        text = case.path.read_text("utf-8-sig")
    except OSError:
        text = ""
    return {
        "case_text": text,
        "files": files,
        "versions": {name: found for name in _LIBRARIES if (found := _version(name))},
        "time": f"{datetime.now(UTC):%Y-%m-%d %H:%M} UTC",
    }


def _paths(value: Any) -> Iterator[Path]:
    """All files that a case names."""
    if isinstance(value, Path):
        yield value
    elif isinstance(value, Mapping):
        for item in value.values():
            yield from _paths(item)
    elif isinstance(value, list | tuple):
        for item in value:
            yield from _paths(item)


def _version(name: str) -> str:
    try:
        return version(name)
    except PackageNotFoundError:
        return ""
