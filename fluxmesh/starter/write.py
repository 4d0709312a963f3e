"""A draft as TOML text, and the text in a file that was not there before."""

from __future__ import annotations

from pathlib import Path
from typing import Final

from fluxmesh.assess.review.toml import toml_key, toml_value
from fluxmesh.errors import OutputError
from fluxmesh.report.whole import write_whole
from fluxmesh.starter.draft import Draft, Entry, Section

__all__ = ["FILL_IN", "comment", "draft_text", "write_case"]

FILL_IN: Final = "FILL IN"
"""Marks the lines that a user must fill in."""
_COLUMN: Final = 36
_LONGEST: Final = 500


def comment(text: str) -> str:
    """Return a text as a comment of one line.

    Parameters
    ----------
    text : str
        Any text; what does not print is escaped, and what is very long cut.
    """
    plain = "".join(character if character.isprintable() else repr(character)[1:-1] for character in text)
    return f"# {plain if len(plain) <= _LONGEST else plain[:_LONGEST] + '…'}"


def draft_text(draft: Draft) -> str:
    """Return a draft as TOML.

    Parameters
    ----------
    draft : Draft
        The case.

    Returns
    -------
    str
        Comments and tables; lines that are not in force are comments.
    """
    blocks = ["\n".join(map(comment, draft.notes))] if draft.notes else []
    blocks += ["\n".join(_lines(section)) for section in draft.sections]
    return "\n\n".join(blocks) + "\n"


def _lines(section: Section) -> list[str]:
    lines = [_beside(f"[{toml_key(*section.path)}]", section.remark)] if section.path else []
    lines += [comment(note) for note in section.notes]
    lines += [_entry(entry) for entry in section.entries]
    return lines if section.in_force else [f"# {line}" for line in lines]


def _entry(entry: Entry) -> str:
    remark = entry.remark
    line = f"{toml_key(entry.key)} = {toml_value(entry.value)}"
    if entry.in_force:
        return _beside(line, remark)
    if entry.fill_in:
        remark = f"{FILL_IN}{': ' + remark if remark else ''}"
    return _beside(f"# {line}", remark)


def _beside(line: str, remark: str) -> str:
    return f"{line.ljust(_COLUMN)}  {comment(remark)}" if remark else line


def write_case(text: str, path: Path) -> None:
    """Write a proposed case; a file that is there already stays.

    Parameters
    ----------
    text : str
        As `draft_text` gives it.
    path : pathlib.Path
        Where to.

    Raises
    ------
    OutputError
        The file exists, or cannot be written.
    """
    if not path.parent.is_dir():
        raise OutputError(
            "cannot be written (there is no such folder)", where=str(path), remedy="Make the folder first"
        )
    try:
        content = text.encode("utf-8")
    except UnicodeEncodeError as error:
        raise OutputError(
            f"cannot be written ({error.reason})", where=str(path), remedy="Give the mesh a name in plain signs"
        ) from error
    write_whole(content, path, replace=False)
