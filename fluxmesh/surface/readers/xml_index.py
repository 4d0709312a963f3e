"""Small XML files that name other files: parsed without entities, and held inside their folder."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any
from xml.etree.ElementTree import Element, ParseError, TreeBuilder, XMLParser

from fluxmesh.errors import FileError

__all__ = ["file_beside", "read_xml_index"]

_MOST_BYTES = 1 << 26
_DRIVE_OR_SCHEME = re.compile(r"^[A-Za-z][A-Za-z0-9+.-]*:")


class _Builder(TreeBuilder):
    """A tree without a document type: that is where entities come from."""

    def doctype(self, name: str, pubid: str | None, system: str | None) -> Any:
        raise ParseError("a document type, which could name other files")


def read_xml_index(path: Path) -> Element:
    """Parse an XML file that lists other files.

    Parameters
    ----------
    path : Path
        An existing file, not empty.

    Returns
    -------
    Element
        Its root, of the tag "VTKFile". Entities of the file's own are never
        resolved, nor is anything fetched: a document type is an error.

    Raises
    ------
    FileError
        The file is cut short, damaged, or no VTK XML file.
    """
    with path.open("rb") as stream:
        data = stream.read(_MOST_BYTES + 1)
    if len(data) > _MOST_BYTES:
        raise FileError(
            f"is larger than {_MOST_BYTES} bytes, though it should only list other files",
            str(path),
            "Check that the suffix tells what the file is",
        )
    parser = XMLParser(target=_Builder())
    try:
        parser.feed(data)
        root: Element = parser.close()
    except (ParseError, ValueError, LookupError) as error:
        raise FileError(
            f"its XML cannot be read ({error})", str(path), "It is damaged or cut short; export or copy it again"
        ) from error
    if root.tag != "VTKFile":
        raise FileError("is no VTK XML file", str(path), "Check that the suffix tells what the file is")
    return root


def file_beside(index: Path, reference: str, where: str) -> Path:
    """Return the file that an index names, which must lie in the folder of the index or below.

    Parameters
    ----------
    index : Path
        The file that lists others.
    reference : str
        What it lists.
    where : str
        File and block, for messages.

    Returns
    -------
    Path
        An existing file, not empty.

    Raises
    ------
    FileError
        The reference leaves the folder, or the file is missing or empty.
    """
    plain = reference.strip().replace("\\", "/")
    parts = [part for part in plain.split("/") if part not in ("", ".")]
    if plain.startswith("/") or _DRIVE_OR_SCHEME.match(plain) or ".." in parts or "\0" in plain or not parts:
        raise FileError(
            f"names the file {reference!r}, which is not in its own folder",
            where,
            "Put the parts beside the file that lists them, and name them relative to it",
        )
    path = index.parent.joinpath(*parts)
    if not path.is_file():
        raise FileError(
            f"its part {plain} is {'no file' if path.exists() else 'missing'}",
            where,
            "Copy the whole set, with its folders",
        )
    if path.stat().st_size == 0:
        raise FileError(f"its part {plain} is empty", where, "Export or copy it again")
    return path
