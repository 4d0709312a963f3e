"""A picture of a case, as somebody asks for it."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Final

from fluxmesh.errors import PictureError

__all__ = ["SHOWN", "picture_of_case"]

#: What may be shown, and the kinds of arrow that this is.
SHOWN: Final = {
    "pressure": "pressure",
    "momentum": "momentum",
    "weight": "weight",
    "load": "resultant",
    "reaction": "reaction",
}


def picture_of_case(
    path: Path,
    *,
    to: Path | None = None,
    view: str = "automatic",
    size: str = "1600x1200",
    background: str = "white",
    show: str = "all",
    colours: str = "groups",
) -> Path:
    """Draw one picture of a case.

    Parameters
    ----------
    path : Path
        Case file.
    to : Path, optional
        File to write; its suffix, .png, .svg or .pdf, says what it becomes. By
        default ``results/<case name>/picture.png``, whose folder is made.
    view : str, optional
        "automatic", "from +x", "from above", or three numbers that point to the viewer.
    size : str, optional
        Width and height in pixels, "1600x1200".
    background : str, optional
        "white", "transparent", or a light colour such as "#f4f1ea".
    show : str, optional
        "all", "none", or some of `SHOWN`, with commas between.
    colours : {"groups", "pressure"}, optional
        What the colours of the surface tell.

    Returns
    -------
    Path
        The file that was written.

    Raises
    ------
    FluxmeshError
        A case or a wish that cannot be used, or a picture that cannot be drawn.
    """
    from fluxmesh.case.read import read_case
    from fluxmesh.report.pictures import Look, draw_picture, require_drawable
    from fluxmesh.report.whole import require_writable

    if colours not in ("groups", "pressure"):
        raise PictureError(f"the colours are {colours!r}", remedy='Give "groups" or "pressure"')
    kinds = _kinds(show)
    look = Look(pressure=colours == "pressure", view=view, size=_size(size), background=background)
    case = read_case(path)
    target = to if to is not None else Path("results") / case.name / "picture.png"
    # whatever can be wrong with the wish is said before the work
    require_drawable(target, look)
    if to is None:
        require_writable(target.parent)

    from fluxmesh.job.done import done_case
    from fluxmesh.report.scene import only_kinds, thin
    from fluxmesh.report.sketch import scene_of

    done = done_case(case)
    scene = scene_of(done.title, done.surface, done.flow, done.balance, notes=done.picture_notes())
    draw_picture(only_kinds(thin(scene), kinds), target, look)
    return target


def _kinds(show: str) -> list[str]:
    words = [word.strip().lower() for word in show.split(",") if word.strip()]
    if words == ["all"]:
        return list(SHOWN.values())
    if words == ["none"]:
        return []
    for word in words:
        if word not in SHOWN:
            raise PictureError(f"{word!r} cannot be shown", remedy=f"Allowed: all, none, or some of {', '.join(SHOWN)}")
    return [SHOWN[word] for word in words]


def _size(text: str) -> tuple[int, int]:
    match = re.fullmatch(r"\s*(\d{1,6})\s*[x×*]\s*(\d{1,6})\s*", text)
    if match is None:
        raise PictureError(f"the size is {text!r}", remedy='Give width and height in pixels, as "1600x1200"')
    return int(match[1]), int(match[2])
