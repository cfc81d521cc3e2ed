"""The head of a Touchstone 2.0 file: bracketed keywords → Layout."""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass, field

from harness.logs.mistakes import Mistakes
from harness.logs.numbers import complaint, read_number
from harness.logs.touchstone_layout import Layout, Options, Row, read_options

_KEYWORD = re.compile(r"\[\s*([^\]]*?)\s*\]\s*(.*)")
_VERSION = re.compile(r"\[\s*version\s*\]", re.IGNORECASE)
_ORDERS = {"21_12": 1, "12_21": 2}
_MATRICES = ("full", "lower", "upper")


@dataclass(slots=True)
class _Head:
    """What the keywords have said so far."""

    mistakes: Mistakes
    ports: int | None = None
    order: str | None = None
    count: int | None = None
    reference: list[float] = field(default_factory=list)
    matrix: str = "full"
    section: str = ""
    ended: bool = False
    options: Options | None = None
    rows: list[Row] = field(default_factory=list)


def is_version_2(first_line: str) -> bool:
    return _VERSION.match(first_line) is not None


def read_keywords(content: list[tuple[int, str]], mistakes: Mistakes) -> Layout:
    """The layout a version 2.0 head describes; raises FileMistakes when it does not suffice to read the data."""
    head = _Head(mistakes)
    for line, text in content:
        if head.ended:
            mistakes.add(line, "[End]", "something follows the end.", "Remove what follows, or the early [End].")
            break
        _take(head, line, text)
    _check_head(head)
    mistakes.stop_if_any()
    return _layout(head)


def _take(head: _Head, line: int, text: str) -> None:
    match = _KEYWORD.fullmatch(text)
    if match:
        name = " ".join(match[1].lower().split())
        if head.section != "information" or name == "end information":
            _keyword(head, line, name, match[2].strip())
    elif text.startswith("#"):
        head.options = head.options or read_options(text, line, head.mistakes)
    elif head.section == "reference":
        _reference(head, line, text)
    elif head.section == "network":
        head.rows.append((line, text.split()))
    elif not head.section:
        head.mistakes.add(line, "", "data stands before [Network Data].", "Put [Network Data] above the first numbers.")


def _keyword(head: _Head, line: int, name: str, value: str) -> None:
    shown = f"[{name[:40].title()}]"
    head.section = _SECTIONS.get(name, "")
    if name in _TAKERS:
        _TAKERS[name](head, line, value)
    elif name == "mixed-mode order":
        head.mistakes.add(line, shown, "mixed-mode data cannot be read here.", "Export single-ended ports.")
    elif name not in _SECTIONS and name not in _IGNORED:
        head.mistakes.add(line, shown, "this is no keyword of Touchstone 2.0.", "Check its spelling.")


def _version(head: _Head, line: int, value: str) -> None:
    if value != "2.0":
        text = f"version '{value[:24]}' cannot be read here."
        head.mistakes.stop(line, "[Version]", text, "Export as Touchstone 1.1 or 2.0.")


def _ports(head: _Head, line: int, value: str) -> None:
    head.ports = _whole(head, line, "[Number Of Ports]", value)


def _count(head: _Head, line: int, value: str) -> None:
    head.count = _whole(head, line, "[Number Of Frequencies]", value)


def _whole(head: _Head, line: int, key: str, value: str) -> int | None:
    if re.fullmatch(r"[0-9]{1,9}", value) and int(value) > 0:
        return int(value)
    head.mistakes.add(line, key, f"'{value[:24]}' is not a whole number above zero.")
    return None


def _order(head: _Head, line: int, value: str) -> None:
    if value in _ORDERS:
        head.order = value
    else:
        text = f"'{value[:24]}' is no data order."
        head.mistakes.add(line, "[Two-Port Data Order]", text, "Write 12_21 or 21_12.")


def _matrix(head: _Head, line: int, value: str) -> None:
    if value.lower() in _MATRICES:
        head.matrix = value.lower()
    else:
        head.mistakes.add(
            line, "[Matrix Format]", f"'{value[:24]}' is no matrix format.", "Write Full, Lower or Upper."
        )


def _reference(head: _Head, line: int, value: str) -> None:
    for cell in value.split():
        ohm = read_number(cell)
        if ohm is None:
            head.mistakes.add(line, "[Reference]", *complaint(cell))
        elif ohm <= 0:
            head.mistakes.add(line, "[Reference]", f"{ohm:g} is not a resistance above zero.")
        else:
            head.reference.append(ohm)


def _end(head: _Head, line: int, value: str) -> None:
    head.ended = True


_TAKERS: dict[str, Callable[[_Head, int, str], None]] = {
    "version": _version,
    "number of ports": _ports,
    "number of frequencies": _count,
    "two-port data order": _order,
    "matrix format": _matrix,
    "reference": _reference,
    "end": _end,
}
_SECTIONS = {
    "reference": "reference",
    "network data": "network",
    "noise data": "noise",
    "begin information": "information",
}
_IGNORED = ("number of noise frequencies", "end information")


def _check_head(head: _Head) -> None:
    add = head.mistakes.add
    if head.options is None:
        add(None, "#", "the file has no option line.", "Write one above the data, such as '# MHz S RI R 50'.")
    if head.ports is None:
        add(None, "[Number Of Ports]", "the keyword is missing or unusable.", "State how many ports the data has.")
    elif head.ports > 2:
        add(None, "[Number Of Ports]", f"{head.ports} ports are more than a part has here.", "Export one or two ports.")
    elif head.ports == 2 and head.order is None:
        add(None, "[Two-Port Data Order]", "a two-port file must state it.", "Write 12_21 or 21_12.")
    if head.count is None:
        add(
            None, "[Number Of Frequencies]", "the keyword is missing or unusable.", "State how many frequencies follow."
        )
    if head.reference and head.ports is not None and len(head.reference) != head.ports:
        text = f"{len(head.reference)} references are given for {head.ports} ports."
        add(None, "[Reference]", text, "Give one for each port.")
    elif len(set(head.reference)) > 1:
        add(None, "[Reference]", "the ports have different references.", "Renormalise both ports to the same one.")
    if not head.ended:
        add(None, "[End]", "the keyword is missing, so the file may be cut short.", "Export the file again.")


def _layout(head: _Head) -> Layout:
    options, ports = head.options or Options(), head.ports or 1
    pairs = 1 if ports == 1 else (4 if head.matrix == "full" else 3)
    at = 0 if ports == 1 else (_ORDERS[head.order or "21_12"] if head.matrix == "full" else 1)
    z0 = head.reference[0] if head.reference else options.r_ohm
    layout = Layout(options, ports, at, 1 + 2 * pairs, z0, False, head.rows, False)
    found = sum(len(cells) for _, cells in head.rows)
    if head.count is not None and found != head.count * layout.width and found % layout.width == 0:
        text = f"{head.count} frequencies are announced and {found // layout.width} are there."
        head.mistakes.add(None, "[Number Of Frequencies]", text, "Export the file again; it may be cut short.")
    return layout
