"""A case on its way to the page: tables, entries and remarks, before they are text."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field

from fluxmesh.assess.review import Setting
from fluxmesh.assess.review.toml import TomlValue

__all__ = ["Draft", "Entry", "Section"]


@dataclass
class Entry:
    """One line of a table.

    Attributes
    ----------
    key : str
        Its key.
    value : TomlValue
        Its value, or an example where it is not in force.
    remark : str
        What stands behind it as a comment.
    in_force : bool
        False for a line that is commented out.
    fill_in : bool
        Whether the case cannot do without it, so that the user must fill it in.
    """

    key: str
    value: TomlValue
    remark: str = ""
    in_force: bool = True
    fill_in: bool = False


@dataclass
class Section:
    """One table.

    Attributes
    ----------
    path : tuple of str
        Its key; empty for the top of the file.
    remark : str
        What stands behind its head as a comment.
    notes : list of str
        Comments under its head, one a line.
    entries : list of Entry
        Its lines.
    in_force : bool
        False for a table that is commented out as a whole.
    """

    path: tuple[str, ...]
    remark: str = ""
    notes: list[str] = field(default_factory=list)
    entries: list[Entry] = field(default_factory=list)
    in_force: bool = True

    def entry(self, key: str) -> Entry | None:
        """Return the entry of a key, or None.

        Parameters
        ----------
        key : str
            The key.
        """
        return next((entry for entry in self.entries if entry.key == key), None)


@dataclass
class Draft:
    """A whole case.

    Attributes
    ----------
    notes : list of str
        Comments at the head of the file, one a line.
    sections : list of Section
        Its tables, in order.
    """

    notes: list[str]
    sections: list[Section]

    def section(self, *path: str) -> Section | None:
        """Return a table, or None.

        Parameters
        ----------
        *path : str
            Its key.
        """
        return next((section for section in self.sections if section.path == path), None)

    def missing(self) -> Iterator[tuple[str, ...]]:
        """Yield the keys that a user must still fill in."""
        for section in self.sections:
            for entry in section.entries:
                if entry.fill_in and not entry.in_force:
                    yield (*section.path, entry.key)

    def put(self, setting: Setting, remark: str = "") -> bool:
        """Put a line of the case into the draft.

        Parameters
        ----------
        setting : Setting
            The line.
        remark : str, optional
            Why, as a comment.

        Returns
        -------
        bool
            False when the draft has no table that the line fits in.
        """
        for size in range(len(setting.path) - 1, 0, -1):
            section = self.section(*setting.path[:size])
            if section is None:
                continue
            key, *inner = setting.path[size:]
            entry = section.entry(key)
            if entry is None:
                if inner:
                    return False
                entry = Entry(key, setting.value)
                section.entries.append(entry)
            value = setting.value
            if inner:
                if len(inner) > 1 or not isinstance(entry.value, dict):
                    return False
                value = {**entry.value, inner[0]: value}
            entry.value, entry.in_force = value, True
            if remark:
                section.notes.append(f"{key}: {remark}")
            return True
        return False
