"""Every error this package raises on purpose, sorted by who can mend it.

::

    RingtrueError
    ├── SetupError       exit 2   whoever called: a file, an option, a name, a store
    │   └── FileMistakes          every mistake of a file in one go, by line
    ├── StationError     exit 3   the bench, the store's disk, the station itself
    └── UnsoundError     exit 4   evidence or station found unsound by a check

Each says one clear sentence, where, and what to do about it. Anything else that escapes is a
bug of ours.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import ClassVar


class RingtrueError(Exception):
    """The root: a sentence, the place it is about, and the remedy.

    ``text`` is a full sentence without the place, ``place`` is a file, line, option or instrument
    ("" when there is none), ``remedy`` tells what to do ("" when the sentence says it all).
    """

    exit_code: ClassVar[int] = 3

    def __init__(self, text: str, *, place: str = "", remedy: str = "") -> None:
        self.text = text
        self.place = place
        self.remedy = remedy
        super().__init__(self.sentence())

    def sentence(self) -> str:
        """Place, sentence and remedy on one line."""
        head = f"{self.place}: {self.text}" if self.place else self.text
        return f"{head} {self.remedy}".rstrip() if self.remedy else head


class SetupError(RingtrueError):
    """A file, an option, a name or a store is wrong; nothing was started or written."""

    exit_code = 2


@dataclass(frozen=True, slots=True)
class Mistake:
    """One mistake in one file. ``line`` is 1-based, or None when the file as a whole is meant."""

    file: str
    line: int | None
    key: str
    text: str
    remedy: str = ""

    def sentence(self) -> str:
        place = self.file if self.line is None else f"{self.file}:{self.line}"
        key = f" {self.key}:" if self.key else ""
        remedy = f" {self.remedy}" if self.remedy else ""
        return f"{place}:{key} {self.text}{remedy}"


class FileMistakes(SetupError):
    """All the mistakes of a file (or of several), collected before raising once."""

    def __init__(self, mistakes: Sequence[Mistake]) -> None:
        self.mistakes = tuple(sorted(mistakes, key=lambda m: (m.file, m.line or 0)))
        super().__init__("\n".join(m.sentence() for m in self.mistakes))


class StationError(RingtrueError):
    """The bench, the store or the station cannot work now."""

    exit_code = 3


class UnsoundError(RingtrueError):
    """A check found the store or the station unsound."""

    exit_code = 4
