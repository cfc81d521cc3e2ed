"""CSV → points: one header line of SI names, rows of numbers, ``#`` comments."""

from __future__ import annotations

import csv
from collections.abc import Iterator

import numpy as np

from harness.logs import columns
from harness.logs.checks import Points
from harness.logs.encoding import decode
from harness.logs.mistakes import Mistakes
from harness.logs.numbers import complaint, is_comma_number, is_number, read_number

SEPARATORS = (",", ";", "\t")

Row = tuple[int, list[str]]


def read_table(data: bytes, mistakes: Mistakes, z0_ohm: float) -> Points:
    """The points of a CSV log. Cells are separated by comma, semicolon or tab, whichever the header uses.

    Raises FileMistakes at once when encoding or header leave nothing to read; cells that are wrong are added
    to ``mistakes``, and their points left out.
    """
    lines = decode(data, mistakes)
    content = [(number, text) for number, text in enumerate(lines, 1) if text.strip() and not _is_comment(text)]
    if not content:
        mistakes.stop(None, "", "the file holds nothing but comments.", "Export the sweep again.")
    first_line, first = content[0]
    separator = _separator(first)
    if separator not in first and len(first.split()) > 1:
        remedy = "Separate them by commas; a Touchstone file's name ends in .s1p, .s2p or .ts."
        mistakes.stop(first_line, "", "the columns are separated by spaces.", remedy)
    rows = _split(content, separator, mistakes)
    line, header = next(rows, (1, []))
    if header and all(is_number(cell) or is_comma_number(cell) for cell in header):
        commented = any(_is_comment(text) and columns.FREQUENCY in text for text in lines)
        columns.no_names(header, line, commented, mistakes)
    pair = columns.choose_pair(header, line, mistakes)
    body = list(rows)
    wanted = {name: header.index(name) for name in (columns.FREQUENCY, pair.first, pair.second)}
    _check_decimal_points(body, len(header), list(wanted.values()), mistakes)
    return _points(body, len(header), wanted, pair, mistakes, z0_ohm)


def _is_comment(text: str) -> bool:
    return text.lstrip().startswith("#")


def _separator(header: str) -> str:
    return max(SEPARATORS, key=header.count)


def _split(content: list[tuple[int, str]], separator: str, mistakes: Mistakes) -> Iterator[Row]:
    for number, text in content:
        if '"' not in text:
            yield number, [cell.strip() for cell in text.split(separator)]
            continue
        try:
            yield number, [cell.strip() for cell in next(csv.reader([text], delimiter=separator, strict=True))]
        except csv.Error:
            mistakes.add(number, "", "a quotation mark is not closed.", "Quotation marks come in pairs around a cell.")


def _check_decimal_points(body: list[Row], width: int, wanted: list[int], mistakes: Mistakes) -> None:
    """One sentence for a whole file of decimal commas, not one a cell."""
    remedy = "Export again with decimal points and no thousands separators."
    for line, cells in body[:20]:
        comma = next((cells[at] for at in wanted if at < len(cells) and is_comma_number(cells[at])), None)
        if comma is not None:
            mistakes.stop(line, "", f"the numbers have decimal commas ('{comma[:24]}').", remedy)
        if len(cells) > width and all(cell.lstrip("+-").isdigit() for cell in cells):
            text = f"the row has {len(cells)} whole numbers for {width} columns, as decimal commas would leave it."
            mistakes.stop(line, "", text, remedy)


def _points(
    body: list[Row], width: int, wanted: dict[str, int], pair: columns.Pair, mistakes: Mistakes, z0_ohm: float
) -> Points:
    lines: list[int] = []
    values: list[list[float]] = []
    for line, cells in body:
        while len(cells) > width and not cells[-1]:
            cells.pop()  # a separator at the end of each row, as some exporters leave it
        if len(cells) != width:
            text = f"the row has {len(cells)} cells where the first line names {width} columns."
            mistakes.add(line, "", text, "Give every row one cell for each name.")
            continue
        numbers = {name: _number(cells[at], line, name, mistakes) for name, at in wanted.items()}
        size = numbers[pair.first]
        if pair.magnitude and size is not None and size < 0:
            mistakes.add(line, pair.first, f"{size:g} is a magnitude below zero.", "Check the column's meaning.")
        present = [number for number in numbers.values() if number is not None]
        if len(present) == len(numbers):
            lines.append(line)
            values.append(present)
    f_hz, first, second = np.asarray(values, dtype=np.float64).reshape(-1, 3).T
    quantity = pair.combine(first, second)
    return Points(pair.kind, np.asarray(lines, dtype=np.int64), f_hz, quantity, z0_ohm, columns.FREQUENCY)


def _number(cell: str, line: int, name: str, mistakes: Mistakes) -> float | None:
    value = read_number(cell)
    if value is None:
        mistakes.add(line, name, *complaint(cell))
    return value
