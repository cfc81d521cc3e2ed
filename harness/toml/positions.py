"""The line of every key of a TOML document, which ``tomllib`` does not tell.

``positions`` runs only on text that ``tomllib`` has accepted, so it may assume validity and stay small:
comments, all four kinds of string, dotted and quoted keys, inline tables, arrays, tables in arrays of tables.
"""

from __future__ import annotations

import re
import tomllib
from bisect import bisect_right

Path = tuple[str | int, ...]

_BLANK = re.compile(r"[ \t]*")
_FILL = re.compile(r"(?:[ \t\r\n]|#[^\n]*)*")
_STRING = re.compile(
    r'"""(?:[^\\]|\\.)*?"""(?:"{0,2})'  # up to two quotes may belong to the text's end
    r"|'''.*?'''(?:'{0,2})"
    r'|"(?:[^"\\\n]|\\.)*"'
    r"|'[^'\n]*'",
    re.DOTALL,
)
_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")
_BARE_VALUE = re.compile(r"[^,\]}#\n]*")


def positions(text: str) -> dict[Path, int]:
    """Path of every key and array element → its 1-based line.

    >>> positions("[a]\\nb = [1,\\n2]")
    {('a',): 1, ('a', 'b'): 2, ('a', 'b', 0): 2, ('a', 'b', 1): 3}
    """
    return _Scanner(text).scan()


def line_of(lines: dict[Path, int], path: Path) -> int | None:
    """The line of ``path``, or of the nearest table around it that is written down; None for the file itself."""
    for length in range(len(path), 0, -1):
        if path[:length] in lines:
            return lines[path[:length]]
    return None


class _Scanner:
    def __init__(self, text: str) -> None:
        self.text = text
        self.at = 0
        self.lines: dict[Path, int] = {}
        self.elements: dict[Path, int] = {}  # arrays of tables → how many so far
        self.newlines = [match.start() for match in re.finditer("\n", text)]

    def scan(self) -> dict[Path, int]:
        table: Path = ()
        while self.skip(_FILL):
            if self.text[self.at] == "[":
                table = self.header()
            else:
                self.pair(table)
        return self.lines

    def skip(self, pattern: re.Pattern[str]) -> bool:
        """Step over what ``pattern`` matches here; is there anything left?"""
        match = pattern.match(self.text, self.at)
        if match:
            self.at = match.end()
        return self.at < len(self.text)

    def mark(self, path: Path, at: int) -> None:
        self.lines.setdefault(path, bisect_right(self.newlines, at - 1) + 1)

    def header(self) -> Path:
        start = self.at
        array = self.text.startswith("[[", self.at)
        self.at += 2 if array else 1
        keys = self.keys()
        self.at += 2 if array else 1
        path: Path = ()
        for index, (key, _) in enumerate(keys):
            path = (*path, key)
            self.mark(path, start)
            last = index == len(keys) - 1
            if last and array:
                self.elements[path] = self.elements.get(path, 0) + 1
            if path in self.elements:
                path = (*path, self.elements[path] - 1)
                self.mark(path, start)
        return path

    def pair(self, table: Path) -> None:
        path = table
        for key, at in self.keys():
            path = (*path, key)
            self.mark(path, at)
        self.at += 1  # the equals sign
        self.value(path)

    def keys(self) -> list[tuple[str, int]]:
        """A dotted key as its parts with their offsets, up to the sign behind it."""
        parts: list[tuple[str, int]] = []
        while True:
            self.skip(_BLANK)
            parts.append((self.key(), self.at))
            self.skip(_BARE_KEY if self.text[self.at] not in "\"'" else _STRING)
            self.skip(_BLANK)
            if self.text[self.at] != ".":
                return parts
            self.at += 1

    def key(self) -> str:
        bare = _BARE_KEY.match(self.text, self.at)
        if bare:
            return bare.group()
        quoted = _STRING.match(self.text, self.at)
        assert quoted is not None, "tomllib has accepted this text"
        return str(tomllib.loads(f"key = {quoted.group()}")["key"])

    def value(self, path: Path) -> None:
        self.skip(_FILL)
        sign = self.text[self.at]
        if sign == "[":
            self.array(path)
        elif sign == "{":
            self.inline_table(path)
        else:
            self.skip(_STRING if sign in "\"'" else _BARE_VALUE)

    def array(self, path: Path) -> None:
        self.at += 1
        index = 0
        while self.skip(_FILL) and self.text[self.at] != "]":
            if self.text[self.at] == ",":
                self.at += 1
                continue
            self.mark((*path, index), self.at)
            self.value((*path, index))
            index += 1
        self.at += 1

    def inline_table(self, path: Path) -> None:
        self.at += 1
        while self.skip(_FILL) and self.text[self.at] != "}":
            if self.text[self.at] == ",":
                self.at += 1
            else:
                self.pair(path)
        self.at += 1
