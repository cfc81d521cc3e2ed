"""How one value of a limit file is read, refused in one sentence, and described to an editor.

Each reader is a pydantic annotation: a function that returns the value or raises ``Unreadable``, and the
JSON Schema an editor offers for it.
"""

from __future__ import annotations

import difflib
import math
import re
from collections.abc import Callable, Iterable
from typing import Any

from pydantic import PlainValidator, WithJsonSchema

from harness.characteristics import CHARACTERISTICS
from harness.quantities import QuantityError, parse

_DECIMAL_COMMA = re.compile(r"\d,\d")


class Unreadable(ValueError):
    """A value that cannot stand here: a sentence without the place, and a remedy."""

    def __init__(self, text: str, remedy: str = "") -> None:
        self.text = text
        self.remedy = remedy
        super().__init__(text)


class Reader:
    """A pydantic annotation from a reading function and the schema of what it takes."""

    def __init__(self, read: Callable[[object], Any], schema: dict[str, Any]) -> None:
        self.read = read
        self.schema = schema

    def __get_pydantic_core_schema__(self, source: Any, handler: Any) -> Any:
        return PlainValidator(self.read).__get_pydantic_core_schema__(source, handler)

    def __get_pydantic_json_schema__(self, core: Any, handler: Any) -> dict[str, Any]:
        return dict(WithJsonSchema(self.schema).json_schema or {})


def nearest(word: str, known: Iterable[str]) -> str:
    """ "did you mean …?" for a word that is not among the known ones, or "" when nothing is like it."""
    by_lower = {name.lower(): name for name in known}
    match = difflib.get_close_matches(word.lower(), by_lower, n=1, cutoff=0.5)
    return f"Did you mean '{by_lower[match[0]]}'?" if match else ""


def text(*, empty: bool = True) -> Reader:
    """A text in quotes."""

    def read(value: object) -> str:
        if not isinstance(value, str):
            remedy = f'Write "{value}".' if isinstance(value, int | float) and not isinstance(value, bool) else ""
            raise Unreadable(f"{_what(value)} stands where a text in quotes belongs.", remedy)
        if not empty and (not value or value != value.strip()):
            raise Unreadable("is empty or has blanks around it.", "Write it without.")
        return value

    return Reader(read, {"type": "string"} if empty else {"type": "string", "minLength": 1})


def choice(*known: str) -> Reader:
    """One of a few words."""

    def read(value: object) -> str:
        if isinstance(value, str) and value in known:
            return value
        remedy = (nearest(value, known) if isinstance(value, str) else "") or f"Choose one of {', '.join(known)}."
        raise Unreadable(f"{_quoted(value)} is not known here.", remedy)

    return Reader(read, {"enum": list(known)})


def characteristic() -> Reader:
    """The id of a characteristic."""

    def read(value: object) -> str:
        if isinstance(value, str) and value in CHARACTERISTICS:
            return value
        remedy = nearest(value, CHARACTERISTICS) if isinstance(value, str) else ""
        raise Unreadable(
            f"{_quoted(value)} is not a characteristic.", remedy or f"Known are {', '.join(CHARACTERISTICS)}."
        )

    return Reader(read, {"enum": list(CHARACTERISTICS)})


def number(*, above: float | None = None, least: float | None = None, below: float | None = None) -> Reader:
    """A number without a unit, finite, within bounds."""
    schema = {"type": "number", "exclusiveMinimum": above, "minimum": least, "exclusiveMaximum": below}

    def read(value: object) -> float:
        return _bounded(_finite(value), above, least, below)

    return Reader(read, {key: item for key, item in schema.items() if item is not None})


def whole(least: int, most: int) -> Reader:
    """A whole number from ``least`` to ``most``."""

    def read(value: object) -> int:
        if not isinstance(value, int) or isinstance(value, bool):
            raise Unreadable(
                f"{_what(value)} stands where a whole number belongs.", "Write it without quotes or point."
            )
        if not least <= value <= most:
            raise Unreadable(f"{_short(value)} is not from {least} to {most}.")
        return value

    return Reader(read, {"type": "integer", "minimum": least, "maximum": most})


def switch() -> Reader:
    """true or false."""

    def read(value: object) -> bool:
        if isinstance(value, bool):
            return value
        raise Unreadable(f"{_what(value)} stands where true or false belongs.", "Write true or false without quotes.")

    return Reader(read, {"type": "boolean"})


def quantity(
    dimension: str, *, above: float | None = None, least: float | None = None, below: float | None = None
) -> Reader:
    """A number with its unit in quotes ("1.5 MHz"), returned in the SI unit ``dimension``."""

    def read(value: object) -> float:
        if isinstance(value, str):
            return _bounded(_parsed(value, dimension), above, least, below)
        if isinstance(value, int | float) and not isinstance(value, bool):
            return _bounded(_parsed(_short(value), dimension), above, least, below)
        raise Unreadable(f"{_what(value)} stands where a number with a unit in quotes belongs.")

    return Reader(read, {"type": "string", "pattern": r"^\s*[-+]?[0-9.]+([eE][-+]?[0-9]+)?\s*\S+\s*$"})


def ratio(
    *, above: float | None = None, least: float | None = None, below: float | None = None, dimension: str = "1"
) -> Reader:
    """A plain number (0.08), or in quotes with %, ppm, %/K or ppm/K."""

    def read(value: object) -> float:
        found = _parsed(value, dimension) if isinstance(value, str) else _finite(value)
        return _bounded(found, above, least, below)

    return Reader(read, {"type": ["number", "string"]})


def number_or_quantity() -> Reader:
    """A number whose unit stands beside it, or a number with its unit in quotes; kept as written."""

    def read(value: object) -> float | str:
        return value if isinstance(value, str) else _finite(value)

    return Reader(read, {"type": ["number", "string"]})


def pattern() -> Reader:
    """A regular expression in quotes."""

    def read(value: object) -> str:
        if not isinstance(value, str) or not value:
            raise Unreadable(f"{_what(value)} stands where a regular expression in quotes belongs.")
        try:
            re.compile(value)
        except (re.error, RecursionError, OverflowError) as exc:
            raise Unreadable(
                f"'{value}' is not a regular expression: {exc}.", r'In TOML, "\\d" or a literal \'\d\' is one digit.'
            ) from exc
        return value

    return Reader(read, {"type": "string", "format": "regex"})


def _parsed(value: str, dimension: str) -> float:
    try:
        found = parse(value, dimension)
    except QuantityError as exc:
        raise Unreadable(f"{exc}.", _comma_remedy(value)) from exc
    if not math.isfinite(found):
        raise Unreadable(f"'{value}' is too large a number.")
    return found


def _finite(value: object) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float):
        remedy = _comma_remedy(value) if isinstance(value, str) else ""
        raise Unreadable(f"{_what(value)} stands where a number belongs.", remedy or "Write the number without quotes.")
    try:
        found = float(value)
    except OverflowError as exc:
        raise Unreadable(f"{_short(value)} is too large a number.") from exc
    if not math.isfinite(found):
        raise Unreadable(f"{value} is not a number to judge by.", "Leave the key out where there is no limit.")
    return found


def _bounded(value: float, above: float | None, least: float | None, below: float | None) -> float:
    if above is not None and not value > above:
        raise Unreadable(f"{value:g} is not above {above:g}.")
    if least is not None and not value >= least:
        raise Unreadable(f"{value:g} is below {least:g}.")
    if below is not None and not value < below:
        remedy = f'A share is written "{value:g} %" or {value / 100:g}.' if below == 1.0 and value > 1 else ""
        raise Unreadable(f"{value:g} is not below {below:g}.", remedy)
    return value


def _comma_remedy(value: str) -> str:
    return "Write decimals with a point." if _DECIMAL_COMMA.search(value) else ""


def _quoted(value: object) -> str:
    return f"'{_cut(value)}'" if isinstance(value, str) else _what(value)


def _what(value: object) -> str:
    if isinstance(value, bool):
        return f"'{str(value).lower()}'"
    if isinstance(value, str):
        return f'the text "{_cut(value)}"'
    if isinstance(value, int | float):
        return f"the number {_short(value)}"
    return "a table" if isinstance(value, dict) else "a list" if isinstance(value, list) else "a date or time"


def _cut(value: str) -> str:
    return value if len(value) <= 60 else f"{value[:57]}..."


def _short(value: int | float) -> str:
    return repr(value) if isinstance(value, float) or abs(value) < 10**30 else "a whole number of more than 30 digits"
