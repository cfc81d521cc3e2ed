"""A lot as CSV: one row a part (an element, where parts have several), for spreadsheets and other programs."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable

from harness.characteristics import CHARACTERISTICS
from harness.statistics.attempts import Attempt
from harness.statistics.parts import Part, first_valid, parts_of

_FIRST = (
    "serial",
    "element",
    "verdict",
    "grade",
    "final",
    "attempts",
    "at",
    "reason",
    "reason_characteristic",
    "first_valid_attempt",
    "first_valid_verdict",
)
_UNITS = {"Hz": "_hz", "ohm": "_ohm", "F": "_f", "H": "_h", "m": "_m", "deg": "_deg", "1": ""}


def lot_csv(attempts: Iterable[Attempt]) -> str:
    """CSV text with a header line: how each part stands, and the values of its first valid attempt with their u.

    The columns of values carry their SI unit ("fs_hz", "u_fs_hz"); an empty cell is a value that does not exist.
    Numbers are written so that reading them back gives the same float. Lines end in a line feed.
    """
    parts = parts_of(attempts)
    used = {name for part in parts for tries in part.tries.values() for attempt in tries for name in attempt.values}
    names = [name for name in CHARACTERISTICS if name in used]
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow([*_FIRST, *(column for name in names for column in _columns(name))])
    for part in parts:
        for element in part.tries:
            writer.writerow(_row(part, element, names))
    return out.getvalue()


def _columns(name: str) -> tuple[str, str]:
    titled = name + _UNITS[CHARACTERISTICS[name].unit]
    return titled, f"u_{titled}"


def _row(part: Part, element: int, names: list[str]) -> list[str | int | float]:
    tries = part.tries[element]
    last, valid = tries[-1], first_valid(part, element)
    code, characteristic = last.reasons[0] if last.reasons else ("", None)
    row: list[str | int | float] = [part.serial, element, str(last.verdict), last.grade or "", str(last.final).lower()]
    row += [len(tries), last.at, code, characteristic or ""]
    row += [valid.number, str(valid.verdict)] if valid is not None else ["", ""]
    for name in names:
        pair = valid.values.get(name, (None, None)) if valid is not None else (None, None)
        row += ["" if number is None else float(number) for number in pair]
    return row
