"""Serial lines through pyserial: scanners and handlers.

Opening a port throws away what came before. Silence is ordinary here (a scanner waits for a person), so a timeout
leaves the wire as it is, and what has come of a line waits for its rest.
"""

from __future__ import annotations

import contextlib
import errno
import os
from collections.abc import Iterator

import serial

from drivers.codec.block import shown
from drivers.errors import AnswerError, ConnectionLost, NoAnswer, ResourceError
from drivers.wire.deadline import Deadline
from drivers.wire.protocol import RECEIVED, SENT, WireLog, keep_no_log
from drivers.wire.tcp import reason

_LINE_ENDS = b"\r\n"
_LONGEST_LINE = 4096
_LOOK_AGAIN_S = 0.05  # how late a deadline may be noticed; bytes are noticed at once
_HINTS = {
    errno.ENOENT: "Is it plugged in, and the port's name right?",
    errno.EACCES: "May this user open serial ports (group dialout)?",
    errno.EBUSY: "Another program has it open.",
    errno.EAGAIN: "Another program has it open.",
}


class SerialWire:
    """One serial port, 8N1, this process alone. A line ends with a carriage return, a newline or both; empty lines
    are passed over."""

    def __init__(self, port: str, baud: int, timeout_s: float = 5.0, log: WireLog = keep_no_log) -> None:
        self._resource = port
        self._timeout_s = timeout_s
        self._log = log
        self._held = bytearray()
        try:
            self._port = serial.Serial(port, baud, timeout=_LOOK_AGAIN_S, write_timeout=timeout_s, exclusive=True)
        except (OSError, ValueError, OverflowError) as exc:
            raise _not_opened(exc, port, baud) from exc

    @property
    def resource(self) -> str:
        return self._resource

    def write(self, data: bytes) -> None:
        with self._translated():
            self._port.write(data)
            self._port.flush()
        self._log(SENT, data)

    def read_line(self, timeout_s: float) -> bytes:
        deadline = Deadline(timeout_s)
        while (end := self._line_end()) < 0:
            if len(self._held) > _LONGEST_LINE:
                began = shown(self._held)
                self._held.clear()
                raise AnswerError(
                    f"{_LONGEST_LINE} bytes came without a line end: {began}.",
                    resource=self._resource,
                    hint="Check the baud rate.",
                )
            self._receive(deadline, "no whole line came")
        line = bytes(self._held[:end])
        del self._held[: end + 1]
        return line

    def read_exactly(self, count: int, timeout_s: float) -> bytes:
        deadline = Deadline(timeout_s)
        while len(self._held) < count:
            self._receive(deadline, f"only {len(self._held)} of {count} bytes came")
        taken = bytes(self._held[:count])
        del self._held[:count]
        return taken

    def clear(self) -> None:
        self._held.clear()
        with self._translated():
            self._port.reset_input_buffer()

    def close(self) -> None:
        self._port.close()

    def _line_end(self) -> int:
        """Where the first line that is not empty ends; -1 when its end is not here yet."""
        del self._held[: len(self._held) - len(self._held.lstrip(_LINE_ENDS))]
        ends = [at for at in map(self._held.find, (b"\r", b"\n")) if at >= 0]
        return min(ends, default=-1)

    def _receive(self, deadline: Deadline, trouble: str) -> None:
        """Wait for bytes. What has come already is taken even when the time is up."""
        with self._translated():
            waiting = self._port.in_waiting
            late = not waiting and deadline.passed
            piece = b"" if late else bytes(self._port.read(max(1, waiting)))
        if late:
            raise NoAnswer(f"{trouble} within {deadline.timeout_s:g} s.", resource=self._resource)
        if piece:
            self._log(RECEIVED, piece)
            self._held += piece

    @contextlib.contextmanager
    def _translated(self) -> Iterator[None]:
        try:
            yield
        except serial.SerialTimeoutException as exc:
            raise NoAnswer(
                f"the port took nothing within {self._timeout_s:g} s.",
                resource=self._resource,
                hint="Check the cable and the handshake.",
            ) from exc
        except (OSError, TypeError) as exc:  # pyserial raises TypeError when the port is closed under a read
            text = reason(exc) if isinstance(exc, OSError) else "it was closed"
            raise ConnectionLost(
                f"the port is gone ({text}).", resource=self._resource, hint="Is it still plugged in?"
            ) from exc


def _not_opened(exc: Exception, port: str, baud: int) -> ResourceError | ConnectionLost:
    if not isinstance(exc, OSError):
        return ResourceError(f"a port cannot be opened with {baud} baud ({exc}).", resource=port)
    words = os.strerror(exc.errno).lower() if exc.errno else str(exc)
    hint = _HINTS.get(exc.errno or 0, "Check the port's name and cable.")
    return ConnectionLost(f"the port cannot be opened ({words}).", resource=port, hint=hint)
