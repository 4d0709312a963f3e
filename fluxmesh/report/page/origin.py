"""Where the figures come from: case text, files with their hashes and sizes, versions, command, time."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

__all__ = ["Origin", "UsedFile", "origin_of"]


@dataclass(frozen=True)
class UsedFile:
    """A file that the figures rest on.

    Attributes
    ----------
    name : str
        Without its folder.
    size : str
        In bytes, with commas; empty where it is not known.
    sha256 : str
        Its hash; empty where it is not known.
    """

    name: str
    size: str = ""
    sha256: str = ""


@dataclass(frozen=True)
class Origin:
    """Where the figures come from.

    Attributes
    ----------
    case : str
        Name of the case file.
    files : tuple of UsedFile
        The case and what it names.
    versions : tuple of (str, str)
        Program and libraries.
    command, time : str
        What was run, and when.
    case_text : str
        The case as it was read.
    """

    case: str
    files: tuple[UsedFile, ...]
    versions: tuple[tuple[str, str], ...]
    command: str
    time: str
    case_text: str


def origin_of(inputs: Mapping[str, Any], extra: Mapping[str, Any]) -> Origin:
    """Return where the figures come from, as far as it is known.

    Parameters
    ----------
    inputs : mapping
        ``inputs`` of the result.
    extra : mapping
        See `fluxmesh.report.page.page.write_page`.
    """
    case = str(inputs.get("case") or "")
    files = [_file(one) for one in extra.get("files") or ()]
    known = {file.name for file in files}
    if case and case not in known:
        files.insert(0, UsedFile(case, sha256=str(inputs.get("case_sha256") or "")))
    files += [UsedFile(str(name)) for name in inputs.get("files") or () if str(name) not in known]
    return Origin(
        case=case,
        files=tuple(files),
        versions=tuple((str(name), str(version)) for name, version in (extra.get("versions") or {}).items()),
        command=str(extra.get("command") or ""),
        time=str(extra.get("time") or ""),
        case_text=str(extra.get("case_text") or ""),
    )


def _file(one: Mapping[str, Any]) -> UsedFile:
    size = one.get("size")
    return UsedFile(
        name=str(one.get("name") or ""),
        size=f"{size:,}" if isinstance(size, int) else "",
        sha256=str(one.get("sha256") or ""),
    )
