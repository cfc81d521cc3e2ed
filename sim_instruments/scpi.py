"""SCPI program messages: bytes → commands, numbers → response bytes.

PURE. Syntax after IEEE 488.2 §7–8 and SCPI-1999 vol. 1 §5–8: message units apart by ``;``, the path rule for
compound headers, short and long mnemonics in any case, optional nodes, NRf numbers with suffix, definite-length blocks.
Which commands exist is the instrument's matter (``analyser``).
"""

from __future__ import annotations

import itertools
import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

NOT_A_NUMBER = 9.91e37  # SCPI-1999 vol. 1 §7.2.1.5
INFINITE = 9.9e37  # §7.2.1.4

LONGEST_INPUT = 1 << 22
LONGEST_BLOCK = 1 << 20
_LONGEST_MNEMONIC = 12
_GREATEST_EXPONENT = 32000

_HEADER = re.compile(r"(?P<path>\*[A-Za-z]\w*|:?[A-Za-z]\w*(?::[A-Za-z]\w*)*)(?P<query>\?)?(?P<rest>\s.*|)", re.DOTALL)
_NUMBER = re.compile(
    r"(?P<mantissa>[+-]?(?:\d+\.?\d*|\.\d+))(?:\s*[eE]\s*(?P<exponent>[+-]?\d+))?\s*(?P<suffix>[A-Za-z]*)"
)
_NODE = re.compile(r"\[:?(?P<optional>[A-Za-z]+):?\]|(?P<node>\*?[A-Za-z]+)")

# Multiplier mnemonics (IEEE 488.2 §7.7.3): before HZ and OHM, M is mega; elsewhere milli.
_MULTIPLIERS = {"": 0, "K": 3, "M": -3, "MA": 6, "G": 9, "U": -6, "N": -9, "P": -12}


class ScpiError(Exception):
    """One entry of the error list of SCPI-1999 vol. 2 §21.8, by its number."""

    def __init__(self, code: int) -> None:
        self.code = code
        super().__init__(f"SCPI error {code}")


@dataclass(frozen=True, slots=True)
class Command:
    """One message unit: the full header in upper case as sent (``SENS:LIST:FREQ``), asked or set, its parameters."""

    header: str
    query: bool
    params: tuple[str, ...]


class MessageBuffer:
    """Cuts one client's byte stream into program messages at line feeds, those inside a block excepted.

    ``feed`` takes any piece, whole messages come out without their end. Raises ScpiError −363 when a message grows
    beyond ``LONGEST_INPUT``; what was collected is then gone.
    """

    def __init__(self) -> None:
        self._held = bytearray()

    def feed(self, piece: bytes) -> list[bytes]:
        self._held += piece
        messages = []
        while (end := _message_end(self._held)) is not None:
            messages.append(bytes(self._held[:end]))
            del self._held[: end + 1]
        if len(self._held) > LONGEST_INPUT:
            self._held.clear()
            raise ScpiError(-363)
        return messages

    def end(self) -> list[bytes]:
        """What is held is a message whose end was signalled apart from the bytes (END); none when nothing is held."""
        rest = bytes(self._held)
        self._held.clear()
        return [rest] if rest else []


def _message_end(held: bytearray) -> int | None:
    at = 0
    while True:
        line_feed = held.find(b"\n", at)
        sign = held.find(b"#", at) if line_feed < 0 else held.find(b"#", at, line_feed)
        if sign < 0:
            return line_feed if line_feed >= 0 else None
        past = _past_block(held, sign)
        if past is None:
            return None
        at = past


def _past_block(held: bytearray, sign: int) -> int | None:
    """The index after the block that begins at ``sign``; just after the sign if it is none; None: not all here."""
    digits = held[sign + 1 : sign + 2]
    if not digits:
        return None
    if not digits.isdigit() or digits == b"0":
        return sign + 1
    count = held[sign + 2 : sign + 2 + int(digits)]
    if count and not count.isdigit():
        return sign + 1
    if len(count) < int(digits):
        return None
    if int(count) > LONGEST_BLOCK:
        return sign + 1
    past = sign + 2 + int(digits) + int(count)
    return past if len(held) >= past else None


def parse(message: bytes) -> Iterator[Command]:
    """The commands of one program message, in order; raises ScpiError at the first unit that is none.

    Path rule (SCPI-1999 vol. 1 §6.2.4): a header without leading colon continues at the last one's level;
    common commands neither use nor change it.
    """
    path = ""
    for unit in _split(_text(message), ";"):
        if not unit.strip():
            continue
        head = _HEADER.fullmatch(unit.strip())
        if head is None:
            raise ScpiError(_header_trouble(unit.strip()))
        header = head["path"].upper()
        if max(len(node) for node in header.lstrip("*:").split(":")) > _LONGEST_MNEMONIC:
            raise ScpiError(-112)
        if not header.startswith("*"):
            header = header[1:] if header.startswith(":") else path + header
            path = header[: header.rfind(":") + 1]
        yield Command(header, head["query"] is not None, _params(head["rest"]))


def _text(message: bytes) -> str:
    try:
        return message.decode("ascii")
    except UnicodeDecodeError:
        raise ScpiError(-101) from None


def _header_trouble(unit: str) -> int:
    if re.match(r"[*:]?[A-Za-z]", unit) is None:
        return -102
    return -111 if re.match(r"[*:]?\w+(:\w+)*\??[^\w\s:?]", unit) else -110


def _params(rest: str) -> tuple[str, ...]:
    if not rest.strip():
        return ()
    params = tuple(part.strip() for part in _split(rest, ","))
    if not all(params):
        raise ScpiError(-109)
    return params


def _split(text: str, separator: str) -> list[str]:
    """Split at ``separator`` outside quotes (IEEE 488.2 §7.7.5: a string may hold any character)."""
    if '"' not in text and "'" not in text:
        return text.split(separator)
    parts, quote = [""], ""
    for char in text:
        if char == separator and not quote:
            parts.append("")
            continue
        if quote:
            quote = "" if char == quote else quote
        elif char in "\"'":
            quote = char
        parts[-1] += char
    if quote:
        raise ScpiError(-151)
    return parts


def spellings(pattern: str) -> frozenset[str]:
    """Every spelling of a header written the standard's way.

    >>> sorted(spellings("FORMat[:DATA]"))
    ['FORM', 'FORM:DATA', 'FORMAT', 'FORMAT:DATA']
    """
    choices: list[tuple[str, ...]] = []
    for node in _NODE.finditer(pattern):
        word = node["optional"] or node["node"]
        forms = (word.upper(), "".join(char for char in word if not char.islower()))
        choices.append((*forms, "") if node["optional"] else forms)
    return frozenset(":".join(filter(None, pick)) for pick in itertools.product(*choices))


def one(params: Sequence[str]) -> str:
    """The only parameter; ScpiError −109 or −108 when there is none or another."""
    if not params:
        raise ScpiError(-109)
    if len(params) > 1:
        raise ScpiError(-108)
    return params[0]


def none(params: Sequence[str]) -> None:
    """ScpiError −108 when there is a parameter."""
    if params:
        raise ScpiError(-108)


def word(text: str, choices: Sequence[str]) -> str:
    """Character data: the choice (upper-case long form) that ``text`` spells, long or short.

    >>> word("swap", ["NORMal", "SWAPped"])
    'SWAPPED'
    """
    if not text[:1].isalpha():
        raise ScpiError(-104)
    for choice in choices:
        if text.upper() in spellings(choice):
            return choice.upper()
    raise ScpiError(-224)


def number(text: str, unit: str = "") -> float:
    """A decimal number (NRf) with an optional suffix of ``unit`` ("HZ", "V", "" for none), in that unit.

    >>> number("1.65 MHZ", "HZ"), number("5e-1V", "V")
    (1650000.0, 0.5)
    """
    found = _NUMBER.fullmatch(text)
    if found is None:
        raise ScpiError(_number_trouble(text))
    exponent = int(found["exponent"] or 0)
    if abs(exponent) > _GREATEST_EXPONENT:
        raise ScpiError(-123)
    value = float(f"{found['mantissa']}e{exponent}")
    power = _suffix_power(found["suffix"].upper(), unit)
    return value * 10.0**power if power >= 0 else value / 10.0**-power


def _number_trouble(text: str) -> int:
    if text[:1] in "\"'":
        return -158
    if text[:1] == "#":
        return -168
    return -121 if re.match(r"[+-]?\.?\d", text) else -104


def _suffix_power(suffix: str, unit: str) -> int:
    if not suffix:
        return 0
    if not unit:
        raise ScpiError(-138)
    multiplier = suffix[: -len(unit)] if suffix.endswith(unit) else None
    if multiplier is None or multiplier not in _MULTIPLIERS:
        raise ScpiError(-131)
    return 6 if multiplier == "M" and unit == "HZ" else _MULTIPLIERS[multiplier]


def integer(text: str) -> int:
    """A decimal number rounded to an integer, as IEEE 488.2 §7.7.2.4 has it."""
    value = number(text)
    if not -(2**31) <= value < 2**31:
        raise ScpiError(-222)
    return round(value)


def nr3(values: NDArray[np.float64] | Sequence[float], decimals: int = 6) -> bytes:
    """Numbers with exponent, apart by commas: ``+1.650000E+06``."""
    return ",".join(f"{value:+.{decimals}E}" for value in values).encode("ascii")


def block(payload: bytes) -> bytes:
    """A definite-length arbitrary block (IEEE 488.2 §8.7.9): ``#``, digits of the count, count, bytes.

    >>> block(b"AB")
    b'#12AB'
    """
    count = str(len(payload))
    return f"#{len(count)}{count}".encode("ascii") + payload


def real64(values: NDArray[np.float64], swapped: bool) -> bytes:
    """Doubles as a block: big-endian, or little-endian when ``swapped`` (SCPI-1999 vol. 2, FORMat:BORDer)."""
    return block(values.astype("<f8" if swapped else ">f8").tobytes())
