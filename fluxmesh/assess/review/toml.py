"""Keys and values as TOML text that any reader of TOML 1.0 takes back as they were."""

from __future__ import annotations

import json
import math
import re
from collections.abc import Mapping, Sequence
from typing import Final, TypeAlias

__all__ = ["TomlValue", "toml_key", "toml_text", "toml_value"]

TomlValue: TypeAlias = "str | bool | int | float | Sequence[TomlValue] | Mapping[str, TomlValue]"
"""What a value of a case may be."""

_BARE_KEY: Final = re.compile("[A-Za-z0-9_-]+")


def toml_text(text: str) -> str:
    """Write a text between quotes.

    Parameters
    ----------
    text : str
        Any text that UTF-8 can hold.

    Returns
    -------
    str
        A basic string of TOML: quotes, backslashes and control characters escaped.
    """
    # JSON escapes what TOML does but for the delete character, which TOML does not allow as it is
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


def toml_key(*parts: str) -> str:
    """Write a dotted key.

    Parameters
    ----------
    *parts : str
        From the outermost table inwards.

    Returns
    -------
    str
        The parts joined by points, between quotes where TOML needs them.
    """
    return ".".join(part if _BARE_KEY.fullmatch(part) else toml_text(part) for part in parts)


def toml_value(value: TomlValue) -> str:
    """Write a value on one line.

    Parameters
    ----------
    value : TomlValue
        Text, truth value, number, list, or table.

    Returns
    -------
    str
        TOML that gives the same value back; numbers keep every digit.
    """
    if isinstance(value, str):
        return toml_text(value)
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int):
        return str(value)
    if isinstance(value, float):
        if not math.isfinite(value):
            return "nan" if math.isnan(value) else "inf" if value > 0 else "-inf"
        return str(int(value)) if value == int(value) and abs(value) < 1e9 else repr(value)
    if isinstance(value, Mapping):
        return "{ " + ", ".join(f"{toml_key(key)} = {toml_value(entry)}" for key, entry in value.items()) + " }"
    return "[" + ", ".join(map(toml_value, value)) + "]"
