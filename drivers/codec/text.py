"""SCPI's texts: numbers, the error queue, identities, quoted strings (IEEE 488.2 §8.7, SCPI-1999 vol. 1 §7.2).

PURE. Numbers: NR1 ``-5``, NR2 ``1.65``, NR3 ``+1.65E+06`` are all taken; what stands for "not a number" and
"infinity" (9.91E37, ±9.9E37; SCPI-1999 vol. 1 §7.2.1.4 and .5) becomes NaN and ±inf.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from drivers.codec.block import shown
from drivers.errors import AnswerError

_NUMBER = re.compile(r"\s*([+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)\s*")
_INTEGER = re.compile(r"\s*([+-]?[0-9]{1,18})\s*")
_WORDS = {"NAN": math.nan, "INF": math.inf, "+INF": math.inf, "NINF": -math.inf, "-INF": -math.inf}
_ERROR_ENTRY = re.compile(r"""\s*([+-]?[0-9]{1,6})\s*,\s*("(?:[^"]|"")*"|'(?:[^']|'')*')\s*""", re.DOTALL)


@dataclass(frozen=True, slots=True)
class Sentinels:
    """The numbers an instrument writes for "not a number" and "infinity"; 32-bit roundings of them count too."""

    not_a_number: float = 9.91e37
    infinity: float = 9.9e37


SCPI_SENTINELS = Sentinels()
_ROUNDING = 2e-7  # a little more than half a step of a 32-bit float


@dataclass(frozen=True, slots=True)
class ErrorEntry:
    """One entry of the error queue; code 0 says that the queue is empty."""

    code: int
    text: str

    def __str__(self) -> str:
        return f'{self.code},"{self.text}"'


@dataclass(frozen=True, slots=True)
class IdnFields:
    """The four fields of ``*IDN?``; those an instrument leaves out are empty."""

    maker: str
    model: str
    serial: str
    firmware: str


def to_text(line: bytes) -> str:
    """An answer's bytes as ASCII text without its end; AnswerError for anything else."""
    try:
        text = line.decode("ascii")
    except UnicodeDecodeError:
        raise AnswerError(f"the answer is not text: {shown(line)}.") from None
    return text.rstrip("\r\n")


# ── numbers ──────────────────────────────────────────────────────────────────────────────────


def encode_list(values: Iterable[float], spec: str = ".9E") -> str:
    """Numbers apart by commas, each in the format ``spec``.

    >>> encode_list([1650000.0], ".3E")
    '1.650E+06'
    """
    return ",".join(format(float(value), spec) for value in values)


def decode_list(text: str, sentinels: Sentinels = SCPI_SENTINELS) -> NDArray[np.float64]:
    """Numbers ``(N,)`` apart by commas; an empty text is no numbers.

    >>> decode_list("1,-2.5,+1.65E+06,9.91E37").tolist()
    [1.0, -2.5, 1650000.0, nan]
    """
    if not text.strip():
        return np.empty(0)
    return replace_sentinels(np.array([_number(item) for item in text.split(",")]), sentinels)


def decode_number(text: str, sentinels: Sentinels = SCPI_SENTINELS) -> float:
    """One number, whatever its form."""
    return float(replace_sentinels(np.array([_number(text)]), sentinels)[0])


def decode_integer(text: str) -> int:
    """One NR1 number."""
    found = _INTEGER.fullmatch(text)
    if found is None:
        raise AnswerError(f"expected a whole number, got {_quoted(text)}.")
    return int(found[1])


def replace_sentinels(values: NDArray[np.float64], sentinels: Sentinels = SCPI_SENTINELS) -> NDArray[np.float64]:
    """The same numbers, NaN and ±inf where the instrument wrote what stands for them."""
    size = np.abs(values)
    nan = np.abs(size - sentinels.not_a_number) <= _ROUNDING * sentinels.not_a_number
    overload = np.abs(size - sentinels.infinity) <= _ROUNDING * sentinels.infinity
    plain = np.where(overload, np.copysign(np.inf, values), values)
    return np.where(nan, np.nan, plain)


def _number(text: str) -> float:
    found = _NUMBER.fullmatch(text)
    if found is not None:
        return float(found[1])
    word = text.strip().upper()
    if word in _WORDS:
        return _WORDS[word]
    raise AnswerError(f"expected a number, got {_quoted(text)}.")


# ── error queue, identity, strings ───────────────────────────────────────────────────────────


def encode_error(entry: ErrorEntry) -> str:
    """An entry as the queue sends it: ``-113,"Undefined header"``."""
    return f"{entry.code},{encode_string(entry.text)}"


def decode_error(text: str) -> ErrorEntry:
    """One entry of the queue (SCPI-1999 vol. 2 §21.8).

    >>> decode_error('-113,"Undefined header"')
    ErrorEntry(code=-113, text='Undefined header')
    """
    found = _ERROR_ENTRY.fullmatch(text)
    if found is None:
        raise AnswerError(f"""expected an entry of the error queue such as 0,"No error", got {_quoted(text)}.""")
    return ErrorEntry(int(found[1]), decode_string(found[2]))


def encode_identity(fields: IdnFields) -> str:
    """Four fields apart by commas."""
    return ",".join((fields.maker, fields.model, fields.serial, fields.firmware))


def decode_identity(text: str) -> IdnFields:
    """The fields of ``*IDN?`` (IEEE 488.2 §10.14): missing ones are empty, a comma in the last one stays.

    >>> decode_identity("Maker,Model 7")
    IdnFields(maker='Maker', model='Model 7', serial='', firmware='')
    """
    fields = [field.strip() for field in text.split(",", 3)]
    if not any(fields):
        raise AnswerError("the instrument gave an empty identity.")
    if not text.isprintable():
        raise AnswerError(f"the identity has control characters: {_quoted(text)}.")
    return IdnFields(*fields, *[""] * (4 - len(fields)))


def encode_string(text: str) -> str:
    """String response data: quoted, quotes inside doubled."""
    return '"' + text.replace('"', '""') + '"'


def decode_string(text: str) -> str:
    """A quoted string, single or double quotes, without them."""
    text = text.strip()
    if len(text) < 2 or text[0] not in "\"'" or text[-1] != text[0]:
        raise AnswerError(f"expected a quoted string, got {_quoted(text)}.")
    inner, quote = text[1:-1], text[0]
    if quote in inner.replace(quote * 2, ""):
        raise AnswerError(f"a quote inside a quoted string is not doubled: {_quoted(text)}.")
    return inner.replace(quote * 2, quote)


def _quoted(text: str) -> str:
    return shown(text.encode("ascii", "backslashreplace"))
