"""Touchstone 1.1 and 2.0 → points: one port, or the transmission S21 of two (IBIS Open Forum file specifications).

Own reader, and not scikit-rf, which serves the tests as the independent reference. Measured with its 2.2.0 on
Python 3.11: importing it adds 0.05 s to the 0.06 s of NumPy, which would do; but it brings pandas (84 MB
installed), takes "nan" and falling frequencies for data, refuses option words in another order than usual,
multiplies normalised Y by R where it ought to divide, and tells one mistake at a time without its line. A log that
judges parts needs it the other way round.

Strict where the specification is: first option line only; Z and Y of version 1 normalised to R, of version 2
not; two-port records N11 N21 N12 N22, or as [Two-Port Data Order] says; noise data of version 1 begins at the first
frequency that does not rise. Friendlier in one place: a record may be wrapped over lines at any number of ports.
"""

from __future__ import annotations

import re
from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike

from harness.correction import conversions
from harness.logs.checks import Points
from harness.logs.encoding import decode
from harness.logs.mistakes import Mistakes
from harness.logs.numbers import complaint, read_number
from harness.logs.touchstone_keywords import is_version_2, read_keywords
from harness.logs.touchstone_layout import Layout, Row, read_options
from harness.records import Complexes

_COMMENT = re.compile(rb"![^\r\n]*")
_WIDTHS = {1: 3, 2: 9}
_NOISE_WIDTH = 5
_FORMS: dict[str, Callable[[ArrayLike, ArrayLike], Complexes]] = {
    "db": conversions.db_deg_to_complex,
    "ma": conversions.ztheta_to_z,  # magnitude and angle, whatever they are of
    "ri": conversions.rx_to_z,
}
_UNREADABLE = {"h": "H (hybrid)", "g": "G (inverse hybrid)"}


def read_touchstone(data: bytes, mistakes: Mistakes, ports: int | None) -> Points:
    """The points of a Touchstone file. ``ports`` is what the file's name says (None: nothing).

    Raises FileMistakes at once when the head leaves nothing to read; wrong records are added to ``mistakes``.
    """
    # Comments are free text, often in some other encoding ("°", "Ω"); only the data must be clean.
    content = _content(decode(_COMMENT.sub(b"", data), mistakes))
    layout = (
        _version_2(content, mistakes, ports) if is_version_2(content[0][1]) else _version_1(content, mistakes, ports)
    )
    _check_parameter(layout, mistakes)
    return _points(layout, _records(layout, mistakes), mistakes)


def _content(lines: list[str]) -> list[tuple[int, str]]:
    return [(number, text.strip()) for number, text in enumerate(lines, 1) if text.strip()]


def _version_2(content: list[tuple[int, str]], mistakes: Mistakes, ports: int | None) -> Layout:
    layout = read_keywords(content, mistakes)
    if ports is not None and ports != layout.ports:
        text = f"the name says {ports} ports and the file says {layout.ports}."
        mistakes.stop(None, "[Number Of Ports]", text, "Rename the file to end in .ts.")
    return layout


def _version_1(content: list[tuple[int, str]], mistakes: Mistakes, ports: int | None) -> Layout:
    head = next(((line, text) for line, text in content if text.startswith("#")), None)
    rows = [(line, text.split()) for line, text in content if not text.startswith("#")]
    if head is None:
        remedy = "Write one above the data, such as '# MHz S RI R 50'; a CSV log's name ends in .csv."
        mistakes.stop(None, "#", "the file has no option line.", remedy)
    if rows and rows[0][0] < head[0]:
        mistakes.add(rows[0][0], "", "data stands before the option line.", "Move the option line to the top.")
    keyword = next((row for row in rows if row[1][0].startswith("[")), None)
    if keyword:
        text = "keywords in brackets need [Version] 2.0 as the first line."
        mistakes.add(keyword[0], keyword[1][0][:24], text, "Add it, or remove the keywords.")
    options = read_options(head[1], head[0], mistakes)
    mistakes.stop_if_any()
    if not rows:
        mistakes.stop(None, "", "the file holds no data.", "Export the sweep again.")
    ports = _ports_of_rows(rows, ports, mistakes)
    return Layout(options, ports, 0 if ports == 1 else 1, _WIDTHS[ports], options.r_ohm, True, rows, ports == 2)


def _ports_of_rows(rows: list[Row], ports: int | None, mistakes: Mistakes) -> int:
    """How many ports the first row speaks of, held against what the name says."""
    line, cells = rows[0]
    spoken = next((number for number, width in _WIDTHS.items() if width == len(cells)), None)
    if ports is None and spoken is None:
        text = f"the first record has {len(cells)} numbers; one port has 3 and two ports have 9."
        mistakes.stop(line, "", text, "Export one or two ports, or name the file .s1p or .s2p.")
    wrapped = ports == 2 and len(cells) == 3 and (len(rows) == 1 or len(rows[1][1]) != 3)
    if ports is not None and spoken is not None and spoken != ports and not wrapped:
        noun = "port" if spoken == 1 else "ports"
        text = f"the first record has {len(cells)} numbers, which is {spoken} {noun} and not {ports} as the name says."
        mistakes.stop(line, "", text, f"Name the file .s{spoken}p.")
    return ports or spoken or 1


def _check_parameter(layout: Layout, mistakes: Mistakes) -> None:
    parameter = layout.options.parameter
    if parameter in _UNREADABLE:
        text = f"{_UNREADABLE[parameter]} parameters do not give a part's impedance."
        mistakes.stop(None, "#", text, "Export S, or Z or Y of one port.")
    if layout.ports == 2 and parameter != "s":
        text = f"{parameter.upper()} parameters of two ports do not say how the part was connected."
        mistakes.stop(None, "#", text, "Export S of two ports, or one port.")


def _records(layout: Layout, mistakes: Mistakes) -> list[Row]:
    """Rows gathered into whole records; each begins on a line of its own, and may go on over the next ones."""
    records: list[Row] = []
    start, pending = 0, list[str]()
    for number, (line, cells) in enumerate(layout.rows):
        if layout.noise_may_follow and not pending and records and _noise_begins(cells, records[-1][1]):
            _check_noise(layout.rows[number:], mistakes)
            break
        # A frequency and pairs: a record's first line has an odd count of numbers, every further one an even count.
        if pending and len(cells) % 2:
            _wrong_width(start, len(pending), layout, mistakes)
            pending = []
        start, pending = (start, pending + cells) if pending else (line, cells)
        if len(pending) == layout.width:
            records.append((start, pending))
            pending = []
        elif len(pending) > layout.width or len(pending) % 2 == 0:
            _wrong_width(start, len(pending), layout, mistakes)
            pending = []
    if pending:
        _wrong_width(start, len(pending), layout, mistakes)
    return records


def _noise_begins(cells: list[str], last: list[str]) -> bool:
    f, before = read_number(cells[0]), read_number(last[0])
    return len(cells) == _NOISE_WIDTH and f is not None and before is not None and f <= before


def _check_noise(rows: list[Row], mistakes: Mistakes) -> None:
    """Noise data says nothing about the part; it is only made sure that noise is what it is."""
    for line, cells in rows:
        if len(cells) != _NOISE_WIDTH or any(read_number(cell) is None for cell in cells):
            text = f"the line is not {_NOISE_WIDTH} numbers, as noise data after the network data would be."
            mistakes.add(line, "", text, "Sort the records by rising frequency, or mend the noise data.")


def _wrong_width(line: int, count: int, layout: Layout, mistakes: Mistakes) -> None:
    wanted = "1 port has" if layout.ports == 1 else f"{layout.ports} ports have"
    text = f"the record has {count} numbers where {wanted} {layout.width}."
    mistakes.add(line, "", text, "Export the record again.")


def _points(layout: Layout, records: list[Row], mistakes: Mistakes) -> Points:
    lines: list[int] = []
    values: list[list[float]] = []
    for line, cells in records:
        powers = (layout.options.power, *(0 for _ in cells[1:]))
        numbers = [read_number(cell, power) for cell, power in zip(cells, powers, strict=True)]
        for cell, number in zip(cells, numbers, strict=True):
            if number is None:
                mistakes.add(line, "", *complaint(cell))
        present = [number for number in numbers if number is not None]
        if len(present) == len(numbers):
            lines.append(line)
            values.append(present)
    table = np.asarray(values, dtype=np.float64).reshape(-1, layout.width)
    kind, quantity = _quantity(layout, table[:, 1 + 2 * layout.at], table[:, 2 + 2 * layout.at])
    return Points(kind, np.asarray(lines, dtype=np.int64), table[:, 0], quantity, layout.z0_ohm, "frequency")


def _quantity(layout: Layout, first: ArrayLike, second: ArrayLike) -> tuple[str, Complexes]:
    """One pair of columns as the complex quantity it is: S as it stands, Z and Y as ohms of impedance."""
    number = _FORMS[layout.options.form](first, second)
    if layout.options.parameter == "s":
        return ("s11" if layout.ports == 1 else "s21"), number
    unit = layout.z0_ohm if layout.normalised else 1.0
    with np.errstate(all="ignore"):
        z = number if layout.options.parameter == "z" else conversions.gb_to_z(number.real, number.imag)
        return "z", np.asarray(z * unit)
