"""A barcode or matrix-code scanner on a serial line: one serial a line."""

from __future__ import annotations

from collections.abc import Callable

from drivers.codec.block import shown
from drivers.codec.lines import decode_serial
from drivers.errors import AnswerError, NoAnswer
from drivers.wire.deadline import Deadline
from drivers.wire.opening import open_serial
from drivers.wire.protocol import Wire

DEFAULT_BAUD = 9600

_LINE_ENDS = b"\r\n"
_LONGEST_LINE = 4096


class SerialScanner:
    """Fulfils ``roles.Scanner``. Opening the port throws away what was scanned before.

    A scanner sends a whole line within milliseconds. A piece of a line whose rest does not follow within
    ``torn_after_s`` is dropped with an AnswerError, lest it be glued to the next scan and name another part.
    """

    def __init__(
        self,
        port: str,
        baud: int = DEFAULT_BAUD,
        *,
        torn_after_s: float = 0.5,
        open_port: Callable[[str, int], Wire] = open_serial,
    ) -> None:
        self._wire = open_port(port, baud)
        self._torn_after_s = torn_after_s
        self._piece = bytearray()
        self._rest_by = Deadline(torn_after_s)

    def read(self, timeout_s: float) -> str | None:
        """The next serial without its line end (carriage return, newline or both), or None when none came in time.

        Raises AnswerError for a scan that is torn or no serial, ConnectionLost when the port is gone.
        """
        deadline = Deadline(timeout_s)
        if self._piece and self._rest_by.passed:
            self._wire.clear()  # what has come since may be the rest or another scan; nobody can tell
            raise self._torn()
        while True:
            byte = self._next_byte(min(deadline.left_s, self._rest_by.left_s) if self._piece else deadline.left_s)
            if not byte:
                if self._piece and self._rest_by.passed:
                    raise self._torn()
                if deadline.passed:
                    return None
            elif byte not in _LINE_ENDS:
                self._keep(byte)
            elif self._piece:
                line = bytes(self._piece)
                self._piece.clear()
                return decode_serial(line)

    def close(self) -> None:
        self._wire.close()

    def _next_byte(self, timeout_s: float) -> bytes:
        try:
            return self._wire.read_exactly(1, timeout_s)
        except NoAnswer:
            return b""

    def _keep(self, byte: bytes) -> None:
        self._piece += byte
        self._rest_by = Deadline(self._torn_after_s)
        if len(self._piece) > _LONGEST_LINE:
            raise self._torn()

    def _torn(self) -> AnswerError:
        began = shown(self._piece)
        self._piece.clear()
        return AnswerError(
            f"a scan broke off after {began}.",
            resource=self._wire.resource,
            hint="Scan again; if it stays, check the scanner's baud rate and line end.",
        )
