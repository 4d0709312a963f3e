"""The words beside a picture: every force with its numbers, what the marks mean, and the caution."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from fluxmesh.assess.assumptions import CAUTIONS
from fluxmesh.report.picture_arrows import ARROW_STYLES, DrawnArrow, chained
from fluxmesh.report.picture_pressure import Bands
from fluxmesh.report.picture_sheet import Sheet
from fluxmesh.report.picture_text import engineering, engineering_vector, true_signs
from fluxmesh.report.scene import ARROW_KINDS, Scene

__all__ = ["ROLE_TINTS", "Listing", "Row", "draw_footer", "draw_legend", "stack_rows"]

#: Tints of groups that are no wall, from the "bright" and "light" schemes of Paul Tol, "Colour Schemes"
#: (SRON/EPS/TN/09-002; from memory), chosen so that their grey values differ.
ROLE_TINTS = {
    "inlet": (68, 119, 170),
    "outlet": (238, 136, 102),
    "open": (238, 221, 136),
    "symmetry": (187, 187, 187),
}

# Heights in pixels of a picture 1600 wide.
_HEADING = 36.0
_ROW = 50.0
_ONE_LINE = 27.0
# Least shrinking of rows of two lines before they become one, and of those before the smallest force goes.
_SMALLEST_ROW = 0.8
_SMALLEST_LINE = 0.7
_NOTE_LINE = 21.0
_NAME_LINE = 18.0  # the second line of a long name
_MOST_NOTE_LINES = 9


@dataclass(frozen=True, eq=False)
class Row:
    """One line of the list of forces: a heading when it has no arrow.

    Attributes
    ----------
    heading : str
        Which body acts on which.
    item : DrawnArrow or None
        The force.
    """

    heading: str
    item: DrawnArrow | None


@dataclass(frozen=True, eq=False)
class Listing:
    """The list of forces as it fits.

    Attributes
    ----------
    rows : list of Row
        Headings and forces from the top.
    shrink : float
        Factor on the heights, 1 at most.
    one_line : bool
        Whether a force takes one line, not two.
    left_out : int
        Forces for which there is no room: the smallest.
    """

    rows: list[Row]
    shrink: float
    one_line: bool
    left_out: int


def stack_rows(arrows: Sequence[DrawnArrow], room: float) -> Listing:
    """Order the forces by the bodies that act, and shrink or shorten the list to fit.

    Parameters
    ----------
    arrows : sequence of DrawnArrow
        All forces.
    room : float
        Height in pixels of a picture 1600 wide.

    Returns
    -------
    Listing
        Two lines a force where there is room, else one.
    """
    kept = list(arrows)
    shrink, one_line = 1.0, False
    while kept:
        heads = _HEADING * len({item.arrow.body for item in kept})
        shrink, one_line = min(1.0, room / (heads + _ROW * len(kept))), False
        if shrink >= _SMALLEST_ROW:
            break
        shrink, one_line = min(1.0, room / (heads + _ONE_LINE * len(kept))), True
        if shrink >= _SMALLEST_LINE:
            break
        kept.remove(min(kept, key=lambda item: item.arrow.magnitude))
    rows: list[Row] = []
    for body in dict.fromkeys(item.arrow.body for item in kept):
        mine = [item for item in kept if item.arrow.body == body]
        mine.sort(key=lambda item: ARROW_KINDS.index(item.arrow.kind))
        at_ports = one_line and all(item.arrow.group is not None for item in mine)
        rows.append(Row(f"{body}: {mine[0].arrow.kind} at" if at_ports else body, None))
        rows.extend(Row(body, item) for item in mine)
    return Listing(rows, shrink if kept else 1.0, one_line, len(arrows) - len(kept))


def draw_legend(
    sheet: Sheet,
    scene: Scene,
    arrows: Sequence[DrawnArrow],
    area: tuple[float, float, float, float],
    bands: Bands | None,
    window: float,
    cut_open: bool,
) -> None:
    """Draw the panel: forces with magnitude and components, tints, and how to read the arrows.

    Parameters
    ----------
    sheet : Sheet
        To draw on.
    scene : Scene
        What is shown.
    arrows : sequence of DrawnArrow
        All forces, also those too small to be drawn.
    area : tuple of float
        Left, bottom, right, top of the panel in pixels.
    bands : Bands or None
        The pressure, where it is drawn.
    window : float
        Opacity of ports that are tinted by role.
    cut_open : bool
        Whether ports turned to the viewer are left out.
    """
    u = sheet.unit
    left, bottom, right, top = area
    sheet.line([(left - 14 * u, bottom + 4 * u), (left - 14 * u, top)], 1.2 * u, colour="#999999")
    remarks = _remarks(arrows)
    if cut_open:
        remarks.append("Ports turned to the viewer are left clear, to show the pressure inside.")
    notes = [line for text in remarks for line in sheet.ruler.wrap(text, 15 * u, right - left)]
    notes_height = _NOTE_LINE * len(notes) * u
    tints = _tints(scene, bands, window)
    tints_height = (34.0 * ((len(tints) + 1) // 2) + 8.0) * u
    room = (top - bottom - notes_height - tints_height) / u - 40.0
    listing = stack_rows(arrows, room)
    shrink = listing.shrink
    spare = room - shrink * sum(_HEADING if row.item is None else _ONE_LINE for row in listing.rows)
    y = top
    for row in listing.rows:
        if row.item is None:
            y -= _HEADING * shrink * u
            text = sheet.ruler.cut(row.heading, 18 * shrink * u, right - left, True)
            sheet.text(left, y + 6 * shrink * u, text, 18 * shrink * u, bold=True)
            sheet.line([(left, y), (right, y)], 1.0 * u, colour="#999999")
        elif listing.one_line:
            y -= _ONE_LINE * shrink * u
            rest = _draw_line(sheet, row.item, left, right, y, shrink, spare >= _NAME_LINE)
            if rest:
                spare -= _NAME_LINE
                y -= _NAME_LINE * shrink * u
                sheet.text(left + 94 * u, y + 6 * shrink * u, rest, 15 * shrink * u)
        else:
            y -= _ROW * shrink * u
            _draw_row(sheet, row.item, left, right, y, shrink)
    if listing.left_out:
        y -= 24 * u
        sheet.text(
            left,
            y,
            f"{listing.left_out} smaller forces are drawn but not listed: see the result file",
            15 * u,
            colour="#444444",
        )
    y -= 14 * u
    for number, (word, fill, edge) in enumerate(tints):
        x = left + (number % 2) * 0.5 * (right - left)
        line = y - 34 * u * (1 + number // 2)
        sheet.box((x, line + 2 * u, x + 34 * u, line + 22 * u), fill=fill, edge=edge, width=2.5 * u)
        sheet.text(x + 44 * u, line + 6 * u, word, 17 * u)
    y = min(y - tints_height, bottom + notes_height + 8 * u)
    for number, text in enumerate(notes):
        sheet.text(left, y - (number + 1) * _NOTE_LINE * u + 4 * u, text, 15 * u, colour="#444444")


def _draw_row(sheet: Sheet, item: DrawnArrow, left: float, right: float, y: float, shrink: float) -> None:
    """Draw one force: a sample of its arrow, its tag, its name and its numbers."""
    u = sheet.unit
    f = shrink * u
    style = ARROW_STYLES[item.arrow.kind]
    if item.drawn:
        middle = y + 27 * f
        sheet.arrow(style, np.array([left + 2 * u, middle]), np.array([left + 66 * u, middle]), shrink)
    sheet.text(left + 78 * u, y + 27 * f, item.tag + ("†" if item.enlarged else ""), 18 * f, bold=True)
    x = left + 128 * u
    name = item.arrow.label + (" ‡" if item.moved else "")
    if not item.drawn:
        name += " (too small to draw)"
    sheet.text(x, y + 27 * f, sheet.ruler.shorten(name, 18 * f, right - x), 18 * f)
    length, parts = engineering_vector([float(v) for v in item.arrow.vector], "N")
    sheet.text(x, y + 5 * f, length, 17 * f, bold=True)
    gap = sheet.ruler.width(length, 17 * f, True) + 12 * u
    size = 16 * f
    wide = sheet.ruler.width(parts, size)
    # a long triple is set smaller, never cut: half a number misleads
    size *= min(1.0, (right - x - gap) / wide)
    sheet.text(x + gap, y + 5 * f, parts, size)


def _draw_line(sheet: Sheet, item: DrawnArrow, left: float, right: float, y: float, shrink: float, second: bool) -> str:
    """Draw one force in one line: a short sample of its arrow, its tag, its name and its numbers.

    Returns what of the name must stand in a second line, where there may be one.
    """
    u = sheet.unit
    f = shrink * u
    size = 15 * f
    if item.drawn:
        middle = y + 11 * f
        ends = np.array([left + 2 * u, middle]), np.array([left + 38 * u, middle])
        sheet.arrow(ARROW_STYLES[item.arrow.kind], *ends, 0.55 * shrink)
    sheet.text(left + 46 * u, y + 6 * f, item.tag + ("†" if item.enlarged else ""), size, bold=True)
    length, parts = engineering_vector([float(v) for v in item.arrow.vector], "N")
    # numbers stand flush right and whole; the name takes what they leave
    wide = min(sheet.ruler.width(parts, size), 230 * u)
    fit = min(1.0, wide / sheet.ruler.width(parts, size))
    sheet.text(right, y + 6 * f, parts, size * fit, across="right")
    sheet.text(right - wide - 8 * u, y + 6 * f, length, size, bold=True, across="right")
    x = left + 94 * u
    room = right - wide - 18 * u - sheet.ruler.width(length, size, True) - x
    name = item.arrow.label if item.arrow.group is None else item.arrow.group
    name += (" ‡" if item.moved else "") + ("" if item.drawn else " (not drawn)")
    first, rest = name, ""
    if second and sheet.ruler.width(name, size) > room:
        first, *_ = sheet.ruler.wrap(name, size, room)
        rest = sheet.ruler.shorten(name[len(first) :].lstrip(), size, right - x) if name.startswith(first) else ""
        first = first if rest else name
    sheet.text(x, y + 6 * f, sheet.ruler.shorten(first, size, room), size)
    return rest


def _remarks(arrows: Sequence[DrawnArrow]) -> list[str]:
    """Say what a reader must know to read the arrows that are there."""
    remarks = []
    if any(item.arrow.kind == "momentum" and item.arrow.group is not None for item in arrows):
        remarks.append(
            "Pressure and momentum are drawn as forces on the fluid: momentum is the push of what passes a port, "
            "minus the “momentum out” of the tables."
        )
    if any(item.drawn for item in arrows):
        remarks.append(
            "Components are along x, y, z. Arrows are to scale in space, so they look shorter where they "
            "lean towards or away from the viewer; side by side where one would hide another."
        )
    if any(item.enlarged for item in arrows):
        remarks.append("† not to scale: enlarged to be seen.")
    if any(item.moved for item in arrows):
        remarks.append("‡ its point of application lies farther out than shown.")
    if any(item.end_on for item in arrows):
        remarks.append("Ring with a dot: towards the viewer; ring with a cross: away.")
    chain = chained(arrows)
    return remarks if chain is None else [*remarks, _on_the_line(chain)]


def _on_the_line(item: DrawnArrow) -> str:
    """Say what the chain line is, or why there is none."""
    what = f"line of action of the {'reaction' if item.arrow.kind == 'reaction' else 'load'} {item.tag}"
    if item.line is not None:
        couple = f", with a couple of {engineering(item.arrow.couple, 'N·m')} about it" if item.arrow.couple else ""
        return f"Chain line: {what}{couple}."
    if item.arrow.through is None:
        return f"The {what} is not known."
    if item.end_on:
        return f"The {what} is seen from its end."
    return f"The {what} passes farther out than is shown."


def _tints(scene: Scene, bands: Bands | None, window: float) -> list[tuple[str, tuple[float, ...], str]]:
    """Return word, fill and edge for each role that is there."""
    present = {scene.groups[number][1] for number in np.unique(scene.group_of_triangle)}
    entries = []
    for role, tint in ROLE_TINTS.items():
        if role in present:
            colour = tuple(1.0 - window * (1.0 - value / 255.0) for value in tint)
            edge = "#" + "".join(f"{int(0.55 * value):02x}" for value in tint)
            entries.append((role, (1.0, 1.0, 1.0) if bands else colour, edge))
    if bands is None and "wall" in present:
        entries.append(("wall", (0.93, 0.92, 0.91), "#777777"))
    if bands is not None and scene.pressure is not None and not np.isfinite(scene.pressure).all():
        entries.append(("no pressure given", (0.95, 0.95, 0.94), "#bbbbbb"))
    return entries


def draw_footer(sheet: Sheet, notes: Sequence[str], margin: float) -> float:
    """Draw the caution and the notes along the lower edge.

    Parameters
    ----------
    sheet : Sheet
        To draw on.
    notes : sequence of str
        Sentences, with or without a full stop.
    margin : float
        Clear space at either side in pixels.

    Returns
    -------
    float
        Pixel above which the sheet is free.
    """
    u = sheet.unit
    room = sheet.size[0] - 2 * margin
    # notes run on in one paragraph: there may be many short ones
    said = true_signs(" ".join(f"{text.rstrip(' .')}." for text in notes))
    lines = sheet.ruler.wrap(said, 16 * u, room)
    if len(lines) > _MOST_NOTE_LINES:
        lines = [*lines[: _MOST_NOTE_LINES - 1], "… More stands in the result file."]
    caution = sheet.ruler.wrap(" ".join(CAUTIONS), 17 * u, room)
    y = 20 * u + 22 * u * (len(lines) + len(caution))
    top = y + 16 * u
    sheet.line([(margin, top - 4 * u), (sheet.size[0] - margin, top - 4 * u)], 1.2 * u, colour="#999999")
    for text in caution:
        y -= 22 * u
        sheet.text(margin, y, text, 17 * u, bold=False)
    for text in lines:
        y -= 22 * u
        sheet.text(margin, y, text, 16 * u, colour="#444444")
    return top + 10 * u
