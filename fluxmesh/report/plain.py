"""A stream for the terminal to which names from files cannot send what upsets it."""

from __future__ import annotations

import re
from typing import Any

__all__ = ["Plain"]

_COLOUR = r"\x1b\[[0-9;]*m"
_UNFIT = re.compile(rf"{_COLOUR}|[^\x20-\x7e\n]")


class Plain:
    """A text stream that escapes controls, and signs that turn the direction of a text.

    Parameters
    ----------
    stream : text stream
        Where to; on a terminal the colours of the tables pass.
    """

    def __init__(self, stream: Any) -> None:
        self._stream = stream

    def write(self, text: str) -> int:
        """Write a text, its unfit signs escaped.

        Parameters
        ----------
        text : str
            Any text.

        Returns
        -------
        int
            As the stream's own.
        """
        return int(self._stream.write(_UNFIT.sub(self._shown, text)))

    def _shown(self, match: re.Match[str]) -> str:
        sign = match[0]
        if sign.isprintable() or (len(sign) > 1 and self._stream.isatty()):
            return sign
        return "".join(c if c.isprintable() else f"\\u{ord(c):04x}" for c in sign)

    def __getattr__(self, name: str) -> Any:
        """Be the stream in all else."""
        return getattr(self._stream, name)
