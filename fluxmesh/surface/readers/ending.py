"""Text files that may have lost the end of their last number."""

from __future__ import annotations

from pathlib import Path

__all__ = ["ending_notes"]

_LOOKED_AT = 256


def ending_notes(path: Path) -> tuple[str, ...]:
    """Note a text file that ends with a number and no newline: cut there, nothing else tells.

    Parameters
    ----------
    path : Path
        An existing file.

    Returns
    -------
    tuple of str
        One note, or none.
    """
    with path.open("rb") as stream:
        stream.seek(max(0, path.stat().st_size - _LOOKED_AT))
        tail = stream.read()
    if tail[-1:].isspace() or not tail[-1:].strip(b"\0\x1a"):
        return ()
    last = tail.split()[-1]
    if not any(48 <= byte <= 57 for byte in last):
        return ()
    return (
        f"{path.name} does not end with a newline: it may be cut short within its last number "
        f"'{last[-24:].decode('utf-8', 'replace')}'",
    )
