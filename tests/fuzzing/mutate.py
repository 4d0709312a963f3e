"""Ways to spoil text, XML and binary files: by words, lines, attributes, lengths and bytes."""

from __future__ import annotations

import base64
import binascii
import re
from collections.abc import Sequence
from random import Random

__all__ = ["NUMBERS", "SIGNS", "spoil_binary", "spoil_text", "spoil_xml"]

NUMBERS = (
    "0",
    "-0",
    "1",
    "-1",
    "2",
    "3",
    "7",
    "8",
    "12",
    "13",
    "255",
    "256",
    "65536",
    "2147483647",
    "2147483648",
    "-2147483649",
    "4294967295",
    "4294967296",
    "99999999999",
    "9223372036854775807",
    "9223372036854775808",
    "-9223372036854775809",
    "18446744073709551615",
    "18446744073709551616",
    "1" + "0" * 40,
    "9" * 400,
    "nan",
    "-nan",
    "NaN",
    "inf",
    "-inf",
    "Infinity",
    "1e19",
    "-1e19",
    "1e20",
    "1e21",
    "1e38",
    "1e39",
    "1e100",
    "1e154",
    "1e155",
    "1e300",
    "-1e308",
    "1e308",
    "1e309",
    "1e400",
    "-1e400",
    "1e-10",
    "1e-38",
    "1e-45",
    "1e-160",
    "1e-308",
    "5e-324",
    "1e-400",
    "0x10",
    "0b1",
    "0o7",
    "1_000",
    "１２",
    "+5",
    "1.",
    ".5",
    "1e",
    "--1",
    "3.0",
    "1.5",
    "1d5",
    "1,5",
    "1#IND",
    "1e+",
    "٣",
    "½",
    "1e5e5",
    "0.1.2",
    "true",
    "eight",
)
"""Numbers at the ends of their types, and what is nearly one."""
SIGNS = (
    "",
    " ",
    "\t",
    "\n",
    "\r\n",
    "\r",
    "\0",
    "\x0b",
    "\x0c",
    "\x1b[31m",
    "\x7f",
    "\x85",
    "\xa0",
    "\u2028",
    "\u202e",
    "\ufeff",
    "\u200b",
    "é",
    "水",
    "🌊",
    "\ud800",
    "%",
    "%s",
    "{}",
    "{0}",
    "&",
    "&amp;",
    "&#0;",
    "&#x202e;",
    "<",
    ">",
    "</",
    "<!--",
    "-->",
    "]]>",
    "<![CDATA[",
    '"',
    "'",
    "\\",
    "/",
    "#",
    "//",
    ";",
    ",",
    ".",
    "..",
    ":",
    "=",
    "-",
    "+",
    "*",
    "(",
    ")",
    "[",
    "]",
    "$",
    "$End",
    "nan",
    "../outside/secret.txt",
    "/etc/passwd",
    "a" * 400,
)
"""Characters and words that mean something to some parser."""

_TOKEN = re.compile(rb"[+-]?[0-9.]+(?:[eE][+-]?[0-9]+)?|[A-Za-z_]+|\s+|.", re.S)
_NUMBER = re.compile(rb"[+-]?[0-9.]+(?:[eE][+-]?[0-9]+)?")
_ATTRIBUTE = re.compile(rb'\s([A-Za-z_]+)="([^"]*)"')
_TAG = re.compile(rb"<(/?)([A-Za-z]+)[^<>]*?(/?)>")
_BASE64 = re.compile(rb">\s*([A-Za-z0-9+/]{8,}={0,2})\s*<")


def _word(rng: Random, words: Sequence[str]) -> bytes:
    pool: Sequence[str] = rng.choice((NUMBERS, NUMBERS, SIGNS, words or NUMBERS))
    return rng.choice(pool).encode("utf-8", "surrogatepass")


def _span(rng: Random, size: int) -> tuple[int, int]:
    begin = rng.randrange(size + 1)
    return begin, min(size, begin + rng.choice((1, 1, 2, 3, 8, 30, 200)))


def _by_number(rng: Random, data: bytes, words: Sequence[str]) -> bytes:
    found = list(_NUMBER.finditer(data))
    if not found:
        return data
    one = rng.choice(found)
    return data[: one.start()] + _word(rng, words) + data[one.end() :]


def _by_token(rng: Random, data: bytes, words: Sequence[str]) -> bytes:
    tokens = _TOKEN.findall(data)
    if not tokens:
        return _word(rng, words)
    at, other = rng.randrange(len(tokens)), rng.randrange(len(tokens))
    act = rng.randrange(5)
    if act == 0:
        del tokens[at]
    elif act == 1:
        tokens.insert(at, tokens[other])
    elif act == 2:
        tokens[at], tokens[other] = tokens[other], tokens[at]
    elif act == 3:
        tokens[at] = _word(rng, words)
    else:
        tokens.insert(at, _word(rng, words))
    return b"".join(tokens)


def _by_line(rng: Random, data: bytes, words: Sequence[str]) -> bytes:
    lines = data.splitlines(keepends=True) or [b""]
    at, other = rng.randrange(len(lines)), rng.randrange(len(lines))
    act = rng.randrange(6)
    if act == 0:
        del lines[at]
    elif act == 1:
        lines.insert(at, lines[other])
    elif act == 2:
        lines[at], lines[other] = lines[other], lines[at]
    elif act == 3:
        lines[at] = lines[at] * rng.choice((2, 3, 50))
    elif act == 4:
        lines[at] = lines[at].replace(b"\n", rng.choice((b"", b"\r", b"\r\n", b" ", b"\\\n")))
    else:
        del lines[at:]
    return b"".join(lines)


def _by_span(rng: Random, data: bytes, words: Sequence[str]) -> bytes:
    begin, end = _span(rng, len(data))
    act = rng.randrange(5)
    if act == 0:
        return data[:begin] + data[end:]
    if act == 1:
        return data[:begin]
    if act == 2:
        return data[:begin] + data[begin:end] * rng.choice((2, 3, 40)) + data[end:]
    if act == 3:
        other, last = _span(rng, len(data))
        return data[:begin] + data[other:last] + data[end:]
    return data[:begin] + _word(rng, words) + data[end:]


def _by_bits(rng: Random, data: bytes, words: Sequence[str]) -> bytes:
    spoilt = bytearray(data)
    for _ in range(rng.choice((1, 1, 2, 4))):
        if spoilt:
            spoilt[rng.randrange(len(spoilt))] ^= 1 << rng.randrange(8)
    return bytes(spoilt)


def spoil_text(rng: Random, data: bytes, words: Sequence[str] = ()) -> bytes:
    """Return a text with one to four places changed.

    Parameters
    ----------
    rng : random.Random
        Draws.
    data : bytes
        The text.
    words : sequence of str, optional
        Words of its format.
    """
    for _ in range(rng.choice((1, 1, 1, 2, 4))):
        data = rng.choice((_by_number, _by_number, _by_token, _by_token, _by_line, _by_span, _by_bits))(
            rng, data, words
        )
    return data


def _by_attribute(rng: Random, data: bytes, words: Sequence[str]) -> bytes:
    found = list(_ATTRIBUTE.finditer(data))
    if not found:
        return data
    one = rng.choice(found)
    act = rng.randrange(6)
    if act == 0:
        return data[: one.start()] + data[one.end() :]
    if act == 1:  # the value of another attribute
        return data[: one.start(2)] + rng.choice(found)[2] + data[one.end(2) :]
    if act == 2:  # the value that such an attribute has elsewhere
        alike = [other[2] for other in found if other[1] == one[1]]
        return data[: one.start(2)] + rng.choice(alike) + data[one.end(2) :]
    if act == 3:
        return data[: one.end()] + one[0] + data[one.end() :]
    return data[: one.start(2)] + _word(rng, words).replace(b'"', b"") + data[one.end(2) :]


def _by_tag(rng: Random, data: bytes, words: Sequence[str]) -> bytes:
    found = list(_TAG.finditer(data))
    if not found:
        return data
    one, other = rng.choice(found), rng.choice(found)
    act = rng.randrange(5)
    if act == 0:
        return data[: one.start()] + data[one.end() :]
    if act == 1:
        return data[: one.start()] + other[0] + data[one.end() :]
    if act == 2:
        return data[: one.end()] + other[0] + data[one.end() :]
    if act == 3:
        return data[: one.start(2)] + other[2] + data[one.end(2) :]
    # the element with all that is in it, left out or doubled
    end = data.find(b"</" + one[2], one.end())
    end = data.find(b">", end) + 1 if end > 0 else one.end()
    return data[: one.start()] + data[one.start() : end] * rng.choice((0, 2)) + data[end:]


def _length(rng: Random, before: bytes) -> bytes:
    """Return a length of as many bytes as one before, near it or at the end of its type."""
    size = 8 * len(before)
    value = int.from_bytes(before, "little")
    value = rng.choice(
        (
            0,
            1,
            value - 1,
            value + 1,
            value + 8,
            value * 2,
            value // 2,
            1 << (size - 1),
            (1 << size) - 1,
            (1 << size - 1) - 1,
            1 << 31,
            1 << 40,
            rng.getrandbits(size),
        )
    )
    return (value % (1 << size)).to_bytes(len(before), rng.choice(("little", "little", "little", "big")))


def _by_length(rng: Random, data: bytes, words: Sequence[str]) -> bytes:
    """Change one of the length words before packed or plain data, in base64 or not."""
    width = rng.choice((4, 8, 8))
    start = data.find(b"_", data.find(b"<AppendedData"))
    inline = list(_BASE64.finditer(data))
    if start >= 0 and b"<AppendedData" in data:
        offsets = [int(text) for text in re.findall(rb'offset="(\d{1,9})"', data)] or [0]
        at = start + 1 + rng.choice(offsets)
        if b'encoding="base64"' not in data:
            at += width * rng.choice((0, 0, 1, 2, 3))
            return data[:at] + _length(rng, data[at : at + width] or b"\0") + data[at + width :]
        end = at + 44
        head = _plain(data[at:end])
    elif inline:
        one = rng.choice(inline)
        at, end = one.span(1)
        head = _plain(one[1])
    else:
        return data
    where = width * rng.choice((0, 0, 0, 1, 2, 3))
    changed = head[:where] + _length(rng, head[where : where + width] or b"\0") + head[where + width :]
    return data[:at] + base64.b64encode(changed) + data[end:]


def _plain(text: bytes) -> bytes:
    try:
        return base64.b64decode(text + b"=" * (-len(text) % 4))
    except binascii.Error:
        return b""


def spoil_xml(rng: Random, data: bytes, words: Sequence[str] = ()) -> bytes:
    """Return XML with one to four places changed; arguments as in `spoil_text`."""
    acts = (
        _by_attribute,
        _by_attribute,
        _by_attribute,
        _by_tag,
        _by_length,
        _by_length,
        _by_number,
        _by_token,
        _by_bits,
        _by_span,
    )
    for _ in range(rng.choice((1, 1, 1, 2, 4))):
        data = rng.choice(acts)(rng, data, words)
    return data


def spoil_binary(rng: Random, data: bytes, words: Sequence[str] = ()) -> bytes:
    """Return a binary file with one to four places changed; arguments as in `spoil_text`."""
    for _ in range(rng.choice((1, 1, 1, 2, 4))):
        if data and rng.randrange(3) == 0:
            at, width = rng.randrange(min(len(data), 4000)), rng.choice((4, 8))
            data = data[:at] + _length(rng, data[at : at + width]) + data[at + width :]
        else:
            data = rng.choice((_by_bits, _by_bits, _by_span, _by_number, _by_token))(rng, data, words)
    return data
