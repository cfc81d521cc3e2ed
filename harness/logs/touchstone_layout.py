"""What a Touchstone file says about its own data: the option line, and what the numbers of a record are."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from harness.logs.mistakes import Mistakes
from harness.logs.numbers import read_number

Row = tuple[int, list[str]]

POWERS = {"hz": 0, "khz": 3, "mhz": 6, "ghz": 9}
PARAMETERS = ("s", "y", "z", "h", "g")
FORMATS = ("db", "ma", "ri")
_OPTION_REMEDY = "Write it like '# MHz S RI R 50'."


@dataclass(frozen=True, slots=True)
class Options:
    """The option line; the defaults are the specification's own: GHz S MA R 50."""

    power: int = 9
    parameter: str = "s"
    form: str = "ma"
    r_ohm: float = 50.0


@dataclass(frozen=True, slots=True)
class Layout:
    """A file whose head is understood: options, ports, place of N21 in a record (0 is N11), numbers a record has with
    its frequency, reference in ohm, whether Z and Y are normalised to it (version 1), and the rows of cells."""

    options: Options
    ports: int
    at: int
    width: int
    z0_ohm: float
    normalised: bool
    rows: list[Row]
    noise_may_follow: bool


def read_options(text: str, line: int, mistakes: Mistakes) -> Options:
    """An option line: unit, parameter, format and ``R n`` in any order and case, each at most once.

    One reference a port may be given, but they have to be the same.
    """
    chosen: dict[str, Any] = {}
    words = text.lstrip("#").lower().split()
    while words:
        word = words.pop(0)
        field, value = _option(word)
        if field == "r_ohm":
            value = _reference(words, line, mistakes)
        if not field:
            mistakes.add(line, "#", f"'{word[:24]}' is no option of a Touchstone file.", _OPTION_REMEDY)
        elif field in chosen:
            mistakes.add(line, "#", f"'{word}' is a second choice of the same option.", "Keep one of them.")
        else:
            chosen[field] = value
    return Options(**chosen)


def _reference(words: list[str], line: int, mistakes: Mistakes) -> float:
    """Take the resistances off the front of ``words``; the one they agree on."""
    found: list[float] = []
    while words and (r := read_number(words[0])) is not None:
        found.append(r)
        words.pop(0)
    if not found or min(found) <= 0:
        mistakes.add(line, "#", "R is not followed by a resistance above zero.", _OPTION_REMEDY)
        return 1.0
    if len(set(found)) > 1:
        mistakes.add(line, "#", "the ports have different references.", "Renormalise both ports to the same one.")
    return found[0]


def looks_like_options(text: str) -> bool:
    """Whether a ``#`` line is an option line and not a CSV comment: a unit or format, and no strange word."""
    words = [word for word in text.lstrip("#").lower().split() if read_number(word) is None]
    fields = [_option(word)[0] for word in words]
    return all(fields) and ("power" in fields or "form" in fields)


def _option(word: str) -> tuple[str, Any]:
    """The field of Options that a word sets, and to what; an empty field for a strange word."""
    if word in POWERS:
        return "power", POWERS[word]
    if word in PARAMETERS:
        return "parameter", word
    if word in FORMATS:
        return "form", word
    return ("r_ohm", None) if word == "r" else ("", None)
