"""Cells → numbers, with a sentence for each kind of cell that is none."""

from __future__ import annotations

import math
import re

# Strict on purpose: float() also takes "1_000", "infinity" and digits of other scripts.
_NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]{1,6})?")
_COMMA_NUMBER = re.compile(r"[+-]?[0-9]+(?:,[0-9]+)+(?:[eE][+-]?[0-9]+)?")
_NOT_FINITE = re.compile(r"[+-]?(?:nan|inf|infinity|1\.#\w+|#n/?a|n/?a)", re.IGNORECASE)

# SCPI-1999 vol. 1, 7.2.1.4–5: infinity travels as 9.9E37, "not a number" as 9.91E37.
SCPI_INFINITY = 9.9e37

NOT_MEASURED_REMEDY = "Remove the row or measure the point again."


def is_number(cell: str) -> bool:
    return _NUMBER.fullmatch(cell.strip()) is not None


def is_comma_number(cell: str) -> bool:
    """Whether the cell is a number but for its commas: "1,65", "25,000"."""
    return _COMMA_NUMBER.fullmatch(cell.strip()) is not None


def read_number(cell: str, power: int = 0) -> float | None:
    """The number in a cell times 10**power, rounded once; None when ``complaint`` has something to say about it."""
    text = cell.strip()
    if not _NUMBER.fullmatch(text):
        return None
    value = float(_shifted(text, power)) if power else float(text)
    return value if abs(value) < SCPI_INFINITY else None


def complaint(cell: str) -> tuple[str, str]:
    """Sentence and remedy for a cell that ``read_number`` refused."""
    text = cell.strip()
    shown = text if len(text) <= 24 else text[:24] + "…"
    if not text:
        return "the cell is empty.", NOT_MEASURED_REMEDY
    if is_number(text):
        if math.isfinite(float(text)):
            return f"'{shown}' is how instruments write a reading that is not a number.", NOT_MEASURED_REMEDY
        return f"'{shown}' is infinite.", NOT_MEASURED_REMEDY
    if _NOT_FINITE.fullmatch(text):
        return f"'{shown}' is not a measured value.", NOT_MEASURED_REMEDY
    if is_comma_number(text):
        return f"'{shown}' has a comma in a number.", "Write a decimal point and no thousands separators."
    return (
        f"'{shown}' is not a number.",
        "Write a plain number without its unit, such as 1650000 or 1.65e6.",
    )


def _shifted(text: str, power: int) -> str:
    """Move the decimal exponent in the text, so that "1.6701" in MHz is 1670100 and not a rounding beside it."""
    mantissa, _, exponent = text.lower().partition("e")
    return f"{mantissa}e{int(exponent or 0) + power}"
