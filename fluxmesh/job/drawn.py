"""Pictures and report of an outcome, written beside its result file."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

from fluxmesh.case.model import Case
from fluxmesh.errors import PictureError
from fluxmesh.job.outcome import Outcome
from fluxmesh.job.page import write_report
from fluxmesh.report.pictures import draw_pressure, draw_vectors
from fluxmesh.report.scene import thin
from fluxmesh.report.sketch import scene_of

__all__ = ["draw_results"]


def draw_results(
    case: Case, done: Outcome, folder: Path, *, units: str = "si", series: Mapping[str, Any] | None = None
) -> Iterator[Path | PictureError]:
    """Draw the pictures of an outcome and write its report.

    Parameters
    ----------
    case : Case
        The case; of a series, the whole one.
    done : Outcome
        What it gave; of a series, the instant with the largest reaction.
    folder : pathlib.Path
        Where to. A chart ``series.png`` that is there already goes into the report.
    units : {"si", "us"}, optional
        ``us`` shows US customary units beside SI in the report.
    series : mapping, optional
        The content of ``series.json``.

    Yields
    ------
    Path or PictureError
        Each file when it is written, or why there are no pictures: the report comes without them.

    Raises
    ------
    OutputError
        A file that cannot be written.
    """
    scene = scene_of(done.title, done.surface, done.flow, done.balance, notes=done.picture_notes())
    thinned = thin(scene)
    try:
        draw_vectors(thinned, folder / "vectors.png")
        yield folder / "vectors.png"
        if thinned.pressure is not None:
            draw_pressure(thinned, folder / "pressure.png")
            yield folder / "pressure.png"
    except PictureError as error:
        yield error
    drawn = {
        name: (folder / f"{name}.png").read_bytes()
        for name in ("vectors", "pressure", "series")
        if (folder / f"{name}.png").is_file()
    }
    command = f"fluxmesh balance {case.path.name}"
    # the page thins by itself, and needs the triangles as they are for the traction on them
    write_report(
        case, done, folder / "report.html", scene=scene, pictures=drawn, units=units, command=command, series=series
    )
    yield folder / "report.html"
