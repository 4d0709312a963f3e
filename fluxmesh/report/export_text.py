"""Texts from outside as files can hold them; unlike in pictures, letters are left as they are."""

from __future__ import annotations

import unicodedata

__all__ = ["one_line", "writable"]


def writable(text: str) -> str:
    """Return a text that can be written in UTF-8: without NUL, and with halves of pairs replaced."""
    return "".join("\ufffd" if unicodedata.category(letter) == "Cs" else letter for letter in text.replace("\0", ""))


def one_line(text: str) -> str:
    """Return a text in one line: control characters and line ends become spaces."""
    blanks = ("Cc", "Zl", "Zp")
    return "".join(" " if unicodedata.category(letter) in blanks else letter for letter in writable(text))
