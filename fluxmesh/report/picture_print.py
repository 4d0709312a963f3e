"""A picture for print: SVG or PDF, whose lines stay lines and whose text stays text."""

from __future__ import annotations

import base64
import io
import re
from html import escape
from typing import Any, Final

from fluxmesh.report.picture_sheet import Sheet
from fluxmesh.report.picture_text import boxes_for_missing_letters, clean_text

__all__ = ["pdf_of", "svg_of"]

# Type 42 keeps the letters of a PDF text, to be searched and copied; a fixed salt makes the same file each time.
_HOW: Final = {"svg.fonttype": "none", "svg.hashsalt": "fluxmesh", "pdf.fonttype": 42}
_FACES: Final = {"normal": "DejaVuSans.ttf", "bold": "DejaVuSans-Bold.ttf"}


def pdf_of(sheet: Sheet, title: str) -> bytes:
    """Return a sheet as a PDF file of one page.

    Parameters
    ----------
    sheet : Sheet
        What was drawn.
    title : str
        Title of the document.

    Returns
    -------
    bytes
        Fonts are embedded, text can be searched.
    """
    return _saved(sheet, "pdf", {"Title": clean_text(title), "Creator": None, "CreationDate": None})


def svg_of(sheet: Sheet, title: str, description: str) -> bytes:
    """Return a sheet as an SVG file.

    Parameters
    ----------
    sheet : Sheet
        What was drawn.
    title : str
        Title, which a screen reader says.
    description : str
        What is seen, in words, for those who do not see it.

    Returns
    -------
    bytes
        Text stays text; the letters that it uses are embedded, so that it is as
        wide everywhere as its boxes are. Names can only be text in it.
    """
    nothing: dict[str, str | None] = {"Date": None, "Creator": None, "Format": None, "Type": None}
    text = _saved(sheet, "svg", nothing).decode("utf-8")
    start = text.index("<svg")
    end = text.index(">", start)
    spoken = f"<title>{_plain(title)}</title><desc>{_plain(description)}</desc>"
    head = f'{text[start:end]} role="img">'
    return f"{text[:start]}{head}{spoken}{_letters(text)}{text[end + 1 :]}".encode()


def _plain(text: str) -> str:
    return escape(clean_text(text))


def _saved(sheet: Sheet, kind: str, metadata: dict[str, str | None]) -> bytes:
    import matplotlib

    stream = io.BytesIO()
    with matplotlib.rc_context(_HOW), boxes_for_missing_letters():
        sheet.figure.savefig(stream, format=kind, metadata=metadata, transparent=False)
    return stream.getvalue()


def _letters(text: str) -> str:
    """Return a style element with the letters of the font that an SVG text uses."""
    from fontTools.subset import Options, Subsetter
    from fontTools.ttLib import TTFont
    from matplotlib import get_data_path

    # all that stands between tags, and entities as they are: a few letters more do no harm
    used = set("".join(re.findall(r">([^<]*)<", text))) | set("&<>")
    rules = []
    for weight, name in _FACES.items():
        font: Any = TTFont(f"{get_data_path()}/fonts/ttf/{name}", recalcTimestamp=False)
        asked = Options()
        asked.drop_tables += ["FFTM"]
        subsetter = Subsetter(asked)
        subsetter.populate(unicodes=sorted(map(ord, used)))
        subsetter.subset(font)
        stream = io.BytesIO()
        font.save(stream)
        data = base64.b64encode(stream.getvalue()).decode("ascii")
        rules.append(
            f"@font-face{{font-family:'DejaVu Sans';font-weight:{weight};"
            f"src:url(data:font/ttf;base64,{data}) format('truetype')}}"
        )
    return f"<style>{''.join(rules)}</style>"
