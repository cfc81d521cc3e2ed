"""Arbitrary blocks and the numbers in them (IEEE 488.2 §7.7.6 and §8.7.9; SCPI-1999 vol. 2, FORMat).

PURE. ``#<n><n digits: count><count bytes>`` is the definite form; ``#0<bytes><newline, END>`` the indefinite one, which
only a whole message can carry.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from drivers.errors import AnswerError

NUMBERS = {"float32": "f4", "float64": "f8"}
BYTE_ORDERS = {"big": ">", "little": "<"}

_SHOWN = 24  # bytes of a wrong answer that are worth showing


class BlockReader:
    """Takes a definite-length block in any pieces and always knows how many bytes it still needs.

    Feed exactly ``wants`` bytes each time and no byte beyond the block is ever taken; feed more, and ``feed``
    hands back what it did not need. Raises AnswerError as soon as the bytes cannot be a definite-length block,
    or the block is longer than ``most_bytes``.
    """

    def __init__(self, most_bytes: int = 1 << 28) -> None:
        self._most_bytes = most_bytes
        self._held = bytearray()
        self._start = 2  # where the payload begins, once the sign and the digit are here
        self.count: int | None = None

    @property
    def wants(self) -> int:
        """Bytes still needed before the next decision; 0 when the block is complete."""
        end = self._start if self.count is None else self._start + self.count
        return end - len(self._held)

    @property
    def payload(self) -> bytes:
        """The bytes of a complete block; AnswerError when some are missing."""
        if self.count is None:
            raise AnswerError(f"the block broke off in its header: {shown(self._held)}.")
        if self.wants:
            raise AnswerError(f"the block broke off after {self.count - self.wants} of {self.count} bytes.")
        return bytes(self._held[self._start :])

    def feed(self, piece: bytes) -> bytes:
        """Take what is needed of ``piece``, return the rest."""
        while piece and self.wants:
            taken, piece = piece[: self.wants], piece[self.wants :]
            self._held += taken
            self._look()
        return piece

    def _look(self) -> None:
        if self.count is not None:
            return
        if self._held[:1] != b"#":
            raise AnswerError(f"a block begins with '#', this answer with {shown(self._held)}.")
        if len(self._held) < 2:
            return
        digit = bytes(self._held[1:2])
        if digit == b"0":
            raise AnswerError(
                "the instrument sent a block of indefinite length, whose end this connection cannot show.",
                hint="Have the dialect ask for definite-length blocks or for text.",
            )
        if not digit.isdigit():
            raise AnswerError(f"after '#' a block has a digit, this answer {shown(self._held)}.")
        self._start = 2 + int(digit)
        if len(self._held) == self._start:
            self._read_count()

    def _read_count(self) -> None:
        digits = bytes(self._held[2 : self._start])
        if not digits.isdigit():
            raise AnswerError(f"the block's byte count is not a number: {shown(self._held)}.")
        if int(digits) > self._most_bytes:
            raise AnswerError(f"the block announces {int(digits)} bytes, more than the {self._most_bytes} expected.")
        self.count = int(digits)


def encode_block(payload: bytes) -> bytes:
    """``payload`` as a definite-length block.

    >>> encode_block(b"AB")
    b'#12AB'
    """
    count = str(len(payload))
    if len(count) > 9:
        raise ValueError("a definite-length block holds less than 10**9 bytes")
    return f"#{len(count)}{count}".encode("ascii") + payload


def decode_block(message: bytes) -> tuple[bytes, bytes]:
    """The payload of the block that begins ``message``, and what follows it.

    An indefinite block (``#0``) takes the whole message but its final newline.

    >>> decode_block(b"#204ABCD;1")
    (b'ABCD', b';1')
    """
    if message[:2] == b"#0":
        return message[2:].removesuffix(b"\n"), b""
    reader = BlockReader()
    rest = reader.feed(message)
    return reader.payload, rest


def encode_numbers(values: NDArray[np.float64], number: str = "float64", byte_order: str = "big") -> bytes:
    """Numbers ``(N,)`` as the bytes of ``FORMat:DATA REAL,64`` (or REAL,32) under ``FORMat:BORDer``."""
    return np.asarray(values, dtype=BYTE_ORDERS[byte_order] + NUMBERS[number]).tobytes()


def decode_numbers(payload: bytes, number: str = "float64", byte_order: str = "big") -> NDArray[np.float64]:
    """The numbers ``(N,)`` in a block's payload; AnswerError when the bytes do not come out even."""
    dtype = np.dtype(BYTE_ORDERS[byte_order] + NUMBERS[number])
    if len(payload) % dtype.itemsize:
        raise AnswerError(f"{len(payload)} bytes are no whole count of {dtype.itemsize}-byte numbers.")
    with np.errstate(invalid="ignore"):  # a signalling NaN becomes a quiet one, and is found by whoever checks
        return np.frombuffer(payload, dtype=dtype).astype(np.float64)


def shown(data: bytes | bytearray) -> str:
    """The first bytes of an answer, for a sentence: printable, quoted, short."""
    return repr(bytes(data[:_SHOWN])).removeprefix("b") + ("…" if len(data) > _SHOWN else "")
