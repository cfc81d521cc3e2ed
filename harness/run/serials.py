"""Where serials come from: the scanner, the keyboard, a list, or numbered by lot, tray and position."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from enum import Enum
from typing import Protocol

from harness.bench import Bench
from harness.errors import FileMistakes, Mistake


class Wait(Enum):
    """No serial: not yet, or never again."""

    NOT_YET = "not yet"
    END = "end"


@dataclass(frozen=True, slots=True)
class Serial:
    """A part's serial and how it came: "scanned", "typed", "file" or "auto"."""

    text: str
    identity: str


class SerialSource(Protocol):
    """Gives the next part's serial. ``prompt`` tells the operator what the station waits for; ``ahead``: the serial
    is known before the part is there; ``asks``: somebody must press Enter before ``next`` or ``confirm`` returns."""

    prompt: str
    ahead: bool
    asks: bool

    def next(self, timeout_s: float) -> Serial | Wait: ...

    def confirm(self) -> bool:
        """Asked before each part where no handler brings it: is it in the fixture? False ends the lot."""
        ...


class FromScanner:
    """Each code the scanner reads is one part."""

    ahead = False
    asks = False

    def __init__(self, bench: Bench) -> None:
        self._bench = bench
        self.prompt = (
            "The handler brings the parts; the scanner reads their codes."
            if bench.has_handler
            else "Load a part and scan its code."
        )

    def next(self, timeout_s: float) -> Serial | Wait:
        line = self._bench.scan(timeout_s)
        text = (line or "").strip()
        return Serial(text, "scanned") if text else Wait.NOT_YET

    def confirm(self) -> bool:
        return True  # its code will say so


class FromKeyboard:
    """Each line typed is one part; an empty line asks again, the end of input ends the lot."""

    prompt = "Load a part and type its serial, then Enter. Ctrl-D ends the lot."
    ahead = False
    asks = True

    def __init__(self, read_line: Callable[[], str]) -> None:
        self._read_line = read_line

    def next(self, timeout_s: float) -> Serial | Wait:
        line = self._read_line()
        if not line:
            return Wait.END
        return Serial(line.strip(), "typed") if line.strip() else Wait.NOT_YET

    def confirm(self) -> bool:
        return True  # its serial will say so


class FromList:
    """Serials known beforehand, in the order the parts come.

    ``confirm`` is asked before each part where no handler brings it; its end of input ends the lot. Without it each
    part is taken to be there when its turn comes.
    """

    prompt = "Load the parts in the order of the list."
    ahead = True

    def __init__(self, serials: Iterable[str], confirm: Callable[[], str] | None = None) -> None:
        self._left = iter(tuple(serials))
        self._confirm = confirm
        self.asks = confirm is not None

    def next(self, timeout_s: float) -> Serial | Wait:
        text = next(self._left, None)
        return Wait.END if text is None else Serial(text, "file")

    def confirm(self) -> bool:
        return self._confirm is None or bool(self._confirm())


class Numbered:
    """Parts without a serial, numbered by lot, tray and position from ``start`` (0 is the first of the lot).

    ``confirm`` is asked before each part where no handler brings it; its end of input ends the lot.
    """

    ahead = False

    def __init__(self, lot: str, tray: int, start: int, confirm: Callable[[], str] | None) -> None:
        self._lot, self._tray, self._k, self._confirm = lot, tray, start, confirm
        self.asks = confirm is not None
        self.prompt = (
            "Load the next part of the tray, then Enter. Ctrl-D ends the lot."
            if self.asks
            else "Parts are numbered by tray and position, in the order they come."
        )

    def next(self, timeout_s: float) -> Serial | Wait:
        serial = numbered(self._lot, self._tray, self._k)
        self._k += 1
        return Serial(serial, "auto")

    def confirm(self) -> bool:
        return self._confirm is None or bool(self._confirm())


def numbered(lot: str, tray: int, k: int) -> str:
    """The serial of the k-th part (from 0) of a lot screened in trays of ``tray`` places.

    >>> numbered("L7", 20, 21)
    'L7-T02-P02'
    """
    return f"{lot}-T{k // tray + 1:02d}-P{k % tray + 1:02d}"


def read_list(text: str, file: str, pattern: str | None) -> tuple[str, ...]:
    """Serials of a list, one a line, ``#`` comments and blank lines left out.

    Raises FileMistakes naming every serial that does not match ``pattern`` or comes twice, by line.
    """
    mistakes: list[Mistake] = []
    seen: dict[str, int] = {}
    for number, line in enumerate(text.removeprefix("\ufeff").split("\n"), 1):
        serial = line.strip()
        if not serial or serial.startswith("#"):
            continue
        fault = pattern_fault(serial, pattern)
        if fault:
            mistakes.append(Mistake(file, number, "", fault))
        elif serial in seen:
            mistakes.append(
                Mistake(
                    file, number, "", f"serial '{serial}' was already in line {seen[serial]}.", "List each part once."
                )
            )
        seen.setdefault(serial, number)
    if not seen:
        mistakes.append(Mistake(file, None, "", "there is no serial in this list.", "Put one serial on each line."))
    if mistakes:
        raise FileMistakes(mistakes)
    return tuple(seen)


def pattern_fault(serial: str, pattern: str | None) -> str | None:
    """A sentence when ``serial`` does not match the part number's pattern or cannot be a serial at all."""
    if not serial.isprintable() or len(serial) > 80:
        return f"serial {serial[:80]!a} has characters that cannot be printed, or more than 80."
    if pattern is not None and not re.fullmatch(pattern, serial):
        return f"serial '{serial}' does not match this part number's pattern {pattern}."
    return None


def auto_start(existing: Sequence[str], lot: str, tray: int) -> int:
    """How many numbered places of the lot are used already: numbering goes on after the highest."""
    found = [re.fullmatch(rf"{re.escape(lot)}-T(\d+)-P(\d+)", serial) for serial in existing]
    used = [(int(m[1]) - 1) * tray + int(m[2]) for m in found if m]
    return max(used, default=0)
