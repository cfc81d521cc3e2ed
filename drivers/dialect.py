"""The words of one family of instruments, read from TOML and checked.

A dialect is a name of one shipped in ``drivers/dialects`` ("scpi-analyser") or the path of a file of your own. Every
mistake is reported by its key, all in one go. Every key is explained in ``dialects/scpi-analyser.toml``.
"""

from __future__ import annotations

import difflib
import math
import re
import tomllib
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from importlib import resources
from pathlib import Path
from typing import Any

from drivers.codec.block import BYTE_ORDERS, NUMBERS
from drivers.codec.text import Sentinels
from drivers.errors import ResourceError

_PLACEHOLDER = re.compile(r"\{([^{}]*)\}")
_PLACES = ("frequencies", "drive")


@dataclass(frozen=True, slots=True)
class MeterDialect:
    """Everything ``ScpiMeter`` says and expects; the fields are the keys of the TOML file."""

    name: str
    description: str
    identify: str
    reset: str
    clear: str
    error: str
    settings: tuple[str, ...]
    points: str
    drive: str
    trigger: str
    complete: str
    complete_answer: str
    frequencies: str
    impedance: str
    frequency_format: str
    drive_format: str
    answer: str
    block_number: str
    block_order: str
    sentinels: Sentinels
    min_f_hz: float
    max_f_hz: float
    max_points: int
    min_drive_v: float
    max_drive_v: float
    u_z_relative: float
    u_f_relative: float
    noise_relative: float
    f_step_relative: float
    f_step_hz: float
    drive_step_relative: float
    s_per_point: float


def shipped_dialects() -> tuple[str, ...]:
    """Names of the dialects that come with this package."""
    folder = resources.files("drivers").joinpath("dialects")
    return tuple(sorted(entry.name[:-5] for entry in folder.iterdir() if entry.name.endswith(".toml")))


def load_dialect(name: str) -> MeterDialect:
    """The dialect called ``name``, or in the file ``name``. Raises ResourceError with every mistake by its key."""
    text = _text_of(name)
    try:
        document = tomllib.loads(text)
    except tomllib.TOMLDecodeError as exc:
        raise ResourceError(f"this dialect is not valid TOML: {exc}.", resource=name) from exc
    mistakes = list(_mistakes(document))
    if mistakes:
        raise ResourceError(" ".join(mistakes), resource=f"dialect {name}")
    return _build(name, document)


def _text_of(name: str) -> str:
    is_path = "/" in name or name.endswith(".toml")
    source = Path(name) if is_path else resources.files("drivers").joinpath("dialects", f"{name}.toml")
    try:
        return source.read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError, ValueError) as exc:
        if is_path:
            reason = exc.strerror if isinstance(exc, OSError) else "it is not UTF-8 text"
            raise ResourceError(f"cannot read this dialect file ({reason}).", resource=name) from exc
        raise ResourceError(
            f"there is no dialect '{name}'.",
            hint=f"Shipped are {', '.join(shipped_dialects())}; a path to a .toml file of your own will do too.",
        ) from exc


# ── checks ───────────────────────────────────────────────────────────────────────────────────

Check = Callable[[Any], str | None]


def _one_line(value: Any) -> str | None:
    if not isinstance(value, str) or not (value.isascii() and value.isprintable()):
        return "has to be one line of printable ASCII"
    return None


def _word(value: Any) -> str | None:
    return _one_line(value) or (None if value.strip() else "may not be empty")


def _question(value: Any) -> str | None:
    return _word(value) or (None if "?" in value else f"has to be a question, with '?'; it is '{value}'")


def _question_or_none(value: Any) -> str | None:
    return None if value == "" else _question(value)


def _settings(value: Any) -> str | None:
    if not isinstance(value, list) or not value or any(_word(line) for line in value):
        return "has to be a list of commands, each one line of printable ASCII"
    found = [place for line in value for place in _PLACEHOLDER.findall(line)]
    if sorted(found) != sorted(_PLACES):
        return "needs {frequencies} and {drive}, once each, and no other placeholder"
    return None


def _float_format(value: Any) -> str | None:
    if not isinstance(value, str) or not re.fullmatch(r"\.\d{1,2}[Eefg]", value):
        return "has to be a number format such as '.9E'"
    return None


def _among(*choices: object) -> Check:
    shown = ", ".join(repr(choice) for choice in choices)
    return lambda value: None if value in choices and not isinstance(value, bool) else f"has to be one of {shown}"


def _number(at_least: float, *, or_equal: bool) -> Check:
    def check(value: Any) -> str | None:
        number = isinstance(value, int | float) and not isinstance(value, bool) and math.isfinite(value)
        if number and (value >= at_least if or_equal else value > at_least):
            return None
        return f"has to be a number {'of at least' if or_equal else 'above'} {at_least:g}"

    return check


def _count(value: Any) -> str | None:
    return None if type(value) is int and value >= 1 else "has to be a whole number of at least 1"


_POSITIVE = _number(0.0, or_equal=False)
_NOT_NEGATIVE = _number(0.0, or_equal=True)

_TABLES: dict[str, dict[str, Check]] = {
    "": {"format": _among(1), "role": _among("meter"), "description": _word},
    "words": {
        "identify": _question,
        "reset": _one_line,
        "clear": _word,
        "error": _question,
        "settings": _settings,
        "points": _question_or_none,
        "drive": _question_or_none,
        "trigger": _word,
        "complete": _question,
        "complete_answer": _word,
        "frequencies": _question,
        "impedance": _question,
    },
    "numbers": {
        "frequency": _float_format,
        "drive": _float_format,
        "answer": _among("block", "text"),
        "block_number": _among(*NUMBERS),
        "block_order": _among(*BYTE_ORDERS),
        "not_a_number": _POSITIVE,
        "infinity": _POSITIVE,
    },
    "limits": {
        "min_f_hz": _POSITIVE,
        "max_f_hz": _POSITIVE,
        "max_points": _count,
        "min_drive_v": _POSITIVE,
        "max_drive_v": _POSITIVE,
    },
    "accuracy": {
        "u_z_relative": _NOT_NEGATIVE,
        "u_f_relative": _NOT_NEGATIVE,
        "noise_relative": _NOT_NEGATIVE,
        "f_step_relative": _NOT_NEGATIVE,
        "f_step_hz": _NOT_NEGATIVE,
        "drive_step_relative": _NOT_NEGATIVE,
    },
    "timing": {"s_per_point": _NOT_NEGATIVE},
}
_ORDERED = (("min_f_hz", "max_f_hz"), ("min_drive_v", "max_drive_v"))


def _mistakes(document: Mapping[str, Any]) -> Iterator[str]:
    tables = [name for name in _TABLES if name]
    for name in tables:
        if not isinstance(document.get(name), dict):
            yield f"[{name}]: this table is missing."
    yield from _table_mistakes("", document, also=tables)
    sound = True
    for name in tables:
        if isinstance(document.get(name), dict):
            for mistake in _table_mistakes(name, document[name]):
                sound = False
                yield mistake
    if sound and isinstance(document.get("limits"), dict):
        limits = document["limits"]
        for low, high in _ORDERED:
            if limits[low] > limits[high]:
                yield f"limits.{low}: {limits[low]:g} is above {high} {limits[high]:g}."


def _table_mistakes(table: str, found: Mapping[str, Any], also: list[str] | None = None) -> Iterator[str]:
    checks, prefix = _TABLES[table], f"{table}." if table else ""
    for key in found:
        if key not in checks and key not in (also or ()):
            near = difflib.get_close_matches(key, [*checks, *(also or ())], n=1)
            yield f"{prefix}{key}: unknown key{f', did you mean {near[0]!r}?' if near else '.'}"
    for key, check in checks.items():
        if key not in found:
            yield f"{prefix}{key}: this key is missing."
        elif complaint := check(found[key]):
            yield f"{prefix}{key}: {complaint}."


def _build(name: str, document: Mapping[str, Any]) -> MeterDialect:
    numbers = document["numbers"]
    words: dict[str, Any] = {**document["words"], "settings": tuple(document["words"]["settings"])}
    floats: dict[str, Any] = {
        key: value if key == "max_points" else float(value)
        for table in ("limits", "accuracy", "timing")
        for key, value in document[table].items()
    }
    return MeterDialect(
        name=name,
        description=document["description"],
        frequency_format=numbers["frequency"],
        drive_format=numbers["drive"],
        answer=numbers["answer"],
        block_number=numbers["block_number"],
        block_order=numbers["block_order"],
        sentinels=Sentinels(float(numbers["not_a_number"]), float(numbers["infinity"])),
        **words,
        **floats,
    )
