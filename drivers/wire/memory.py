"""A wire whose other end is a function: for tests, and for trying a dialect without an instrument."""

from __future__ import annotations

from collections.abc import Callable

from drivers.codec.block import shown
from drivers.errors import NoAnswer, OutOfStep
from drivers.wire.protocol import RECEIVED, SENT, WireLog, keep_no_log


class MemoryWire:
    """``respond`` takes what was written and returns what comes back at once; time stands still, so a missing byte is
    NoAnswer immediately.

    >>> wire = MemoryWire(lambda data: b"1\\n" if data == b"*OPC?\\n" else b"")
    >>> wire.write(b"*OPC?\\n")
    >>> wire.read_line(timeout_s=1.0)
    b'1'
    """

    def __init__(self, respond: Callable[[bytes], bytes], resource: str = "memory", log: WireLog = keep_no_log) -> None:
        self._respond = respond
        self._resource = resource
        self._log = log
        self._held = bytearray()
        self._given_up = False

    @property
    def resource(self) -> str:
        return self._resource

    def write(self, data: bytes) -> None:
        self._check()
        if self._held:
            self._given_up = True
            raise OutOfStep(f"bytes came that nobody asked for: {shown(self._held)}.", resource=self._resource)
        self._log(SENT, data)
        self._held += self._respond(data)

    def read_line(self, timeout_s: float) -> bytes:
        self._check()
        return self._take(self._held.find(b"\n") + 1, timeout_s).rstrip(b"\r\n")

    def read_exactly(self, count: int, timeout_s: float) -> bytes:
        self._check()
        return self._take(count if count <= len(self._held) else 0, timeout_s) if count else b""

    def clear(self) -> None:
        self._check()
        self._held.clear()

    def close(self) -> None:
        self._given_up = True

    def _check(self) -> None:
        if self._given_up:
            raise OutOfStep("this connection is not to be trusted any more.", resource=self._resource)

    def _take(self, count: int, timeout_s: float) -> bytes:
        if not count:
            self._given_up = True
            raise NoAnswer(f"no whole answer came within {timeout_s:g} s.", resource=self._resource)
        taken = bytes(self._held[:count])
        del self._held[:count]
        self._log(RECEIVED, taken)
        return taken
