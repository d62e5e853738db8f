"""Bytes to text: the encodings in which tables and notes are met."""

from __future__ import annotations

import codecs
from dataclasses import dataclass

_BOMS = (
    (codecs.BOM_UTF8, "utf-8-sig", "UTF-8"),
    (codecs.BOM_UTF32_LE, "utf-32", "UTF-32"),
    (codecs.BOM_UTF32_BE, "utf-32", "UTF-32"),
    (codecs.BOM_UTF16_LE, "utf-16", "UTF-16"),
    (codecs.BOM_UTF16_BE, "utf-16", "UTF-16"),
)

#: What ``[csv] encoding`` may say: the name shown, and Python's.
ENCODINGS = {
    "utf-8": "utf-8",
    "utf-16": "utf-16",
    "windows-1252": "cp1252",
    "windows-1250": "cp1250",
    "windows-1251": "cp1251",
    "iso-8859-1": "latin-1",
    "iso-8859-15": "iso8859-15",
    "mac-roman": "mac-roman",
}

#: Of the bytes in every second place of UTF-16 text in a western language, nearly all are NUL.
_NUL_SHARE_OF_UTF16 = 0.5
_BYTES_LOOKED_AT = 4096


@dataclass(frozen=True, slots=True)
class Decoded:
    """A file's text and the encoding's usual name."""

    text: str
    encoding: str


def decode(data: bytes, encoding: str | None = None) -> Decoded | None:
    """The text of a file, or None where it is in none of the encodings known here.

    A byte order mark decides; else ``encoding`` (a key of ENCODINGS); else UTF-16 where every second byte
    is NUL; else UTF-8; else Windows-1252.
    """
    for mark, codec, name in _BOMS:
        if data.startswith(mark):
            return _try(data, codec, name)
    if encoding is not None:
        return _try(data, ENCODINGS[encoding], encoding)
    wide = _utf16_order(data)
    if wide is not None:
        return _try(data, wide, "UTF-16")
    return _try(data, "utf-8", "UTF-8") or _try(data, "cp1252", "Windows-1252")


def _try(data: bytes, codec: str, name: str) -> Decoded | None:
    try:
        return Decoded(data.decode(codec), name)
    except UnicodeDecodeError:
        return None


def _utf16_order(data: bytes) -> str | None:
    """The codec of UTF-16 without a mark, told by where the NULs stand."""
    head = data[:_BYTES_LOOKED_AT]
    half = len(head) // 2
    if half == 0:
        return None
    even, odd = head[0::2].count(0), head[1::2].count(0)
    if odd > half * _NUL_SHARE_OF_UTF16 and even == 0:
        return "utf-16-le"
    if even > half * _NUL_SHARE_OF_UTF16 and odd == 0:
        return "utf-16-be"
    return None
