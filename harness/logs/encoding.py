"""Bytes → text, or a sentence about why they are none."""

from __future__ import annotations

import re

from harness.logs.mistakes import Mistakes

_SAVE_AS_UTF8 = "Save the file as UTF-8 text."
_UTF16_MARKS = (b"\xff\xfe", b"\xfe\xff")
_UTF8_MARK = b"\xef\xbb\xbf"
_LINE_END = re.compile(r"\r\n|\r|\n")
_BYTE_LINE_END = re.compile(rb"\r\n|\r|\n")


def decode(data: bytes, mistakes: Mistakes) -> list[str]:
    """The lines of UTF-8 text, with or without its mark; CR, LF and CRLF all end a line.

    Raises FileMistakes for an empty file, UTF-16 or UTF-32, zero bytes (binary), and bytes that are not UTF-8.
    """
    if data.startswith(_UTF16_MARKS):
        mistakes.stop(None, "", "the file is UTF-16 or UTF-32 text, not UTF-8.", _SAVE_AS_UTF8)
    data = data.removeprefix(_UTF8_MARK)
    zero = data.find(b"\0")
    if zero >= 0:
        mistakes.stop(_line_of(data, zero), "", "the file holds zero bytes: binary, or UTF-16 text.", _SAVE_AS_UTF8)
    try:
        text = data.decode("utf-8")
    except UnicodeDecodeError as error:
        mistakes.stop(
            _line_of(data, error.start),
            "",
            f"byte 0x{data[error.start]:02X} is not UTF-8 text (it may be Latin-1 or a Windows code page).",
            _SAVE_AS_UTF8,
        )
    if not text.strip():
        mistakes.stop(None, "", "the file is empty.", "Export the sweep again.")
    return _LINE_END.split(text)


def _line_of(data: bytes, position: int) -> int:
    return len(_BYTE_LINE_END.findall(data, 0, position)) + 1
