"""VISA through PyVISA and its pure-Python backend: HiSLIP, VXI-11, USBTMC, GPIB.

One resource manager serves the whole process and is never closed: closing it would end every session. What these
two libraries raise is of many unrelated kinds (measured: VisaIOError, RuntimeError when a HiSLIP peer drops,
ConnectionRefusedError for VXI-11, BrokenPipeError, ValueError for a missing backend, bare Exception); all of it
becomes a DriverError here. One session must be used by one thread at a time.
"""

from __future__ import annotations

import contextlib
from collections.abc import Iterator
from typing import Any

import pyvisa
from pyvisa.constants import StatusCode
from pyvisa.errors import InvalidSession, VisaIOError
from pyvisa.resources import MessageBasedResource

from drivers.codec.block import shown
from drivers.errors import ConnectionLost, DriverError, NoAnswer, OutOfStep, ResourceError
from drivers.wire.deadline import Deadline
from drivers.wire.protocol import RECEIVED, SENT, WireLog, keep_no_log
from drivers.wire.resource import Resource
from drivers.wire.tcp import reachable

BACKEND = "@py"

_PIECE = 4096  # a silence inside one piece is timed by the library, the whole message by our deadline
_LONGEST_MESSAGE = 1 << 28
_NOT_NEWS = (StatusCode.success_device_not_present, StatusCode.success_max_count_read)


class VisaWire:
    """One session to a message-based instrument. One answer is read for each message written."""

    def __init__(self, resource: Resource, timeout_s: float, log: WireLog = keep_no_log) -> None:
        self._resource = resource.text
        self._timeout_s = timeout_s
        self._log = log
        self._held = bytearray()
        self._fetched = False
        self._given_up = ""
        if resource.kind == "hislip" and resource.port is not None:
            # The backend waits five seconds for a HiSLIP peer whatever it is told, and then blames the resource name.
            reachable(resource.text, resource.host, resource.port, timeout_s)
        self._manager = pyvisa.ResourceManager(BACKEND)
        self._device = _opened(self._manager, resource.text, timeout_s)

    @property
    def resource(self) -> str:
        return self._resource

    def write(self, data: bytes) -> None:
        with self._translated():
            if self._held.rstrip(b"\r\n"):
                raise OutOfStep(
                    f"an earlier answer was not read to its end: {shown(self._held)}.",
                    resource=self._resource,
                    hint="Open the connection again.",
                )
            self._held.clear()
            self._fetched = False
            self._device.timeout = _milliseconds(self._timeout_s)
            self._device.write_raw(data)
        self._log(SENT, data)

    def read_line(self, timeout_s: float) -> bytes:
        with self._translated():
            self._fetch(timeout_s)
            end = self._held.find(b"\n") + 1
            if not end:  # without it, nobody can tell a whole last number from one cut short
                raise NoAnswer(
                    f"the answer ended without its line end, after {shown(self._held)}.", resource=self._resource
                )
        return self._take(end).rstrip(b"\r\n")

    def read_exactly(self, count: int, timeout_s: float) -> bytes:
        with self._translated():
            self._fetch(timeout_s)
            if len(self._held) < count:
                raise NoAnswer(f"the answer ended after {len(self._held)} of {count} bytes.", resource=self._resource)
        return self._take(count)

    def clear(self) -> None:
        self._held.clear()
        self._fetched = False
        with self._translated():
            try:
                self._device.clear()
            except VisaIOError as exc:
                if exc.error_code != StatusCode.error_nonsupported_operation:
                    raise

    def close(self) -> None:
        if not self._given_up:
            self._give_up("it was closed")

    def _take(self, count: int) -> bytes:
        taken = bytes(self._held[:count])
        del self._held[:count]
        return taken

    def _fetch(self, timeout_s: float) -> None:
        """Read the whole answer to the last message written, unless it is here already."""
        if self._fetched:
            return
        deadline = Deadline(timeout_s)
        status = StatusCode.success_max_count_read
        with self._device.ignore_warning(*_NOT_NEWS):
            while status == StatusCode.success_max_count_read:
                if deadline.passed or len(self._held) > _LONGEST_MESSAGE:
                    raise NoAnswer(f"no end of the answer within {timeout_s:g} s.", resource=self._resource)
                self._device.timeout = _milliseconds(deadline.left_s)
                piece, status = self._device.visalib.read(self._device.session, _PIECE)
                self._log(RECEIVED, bytes(piece))
                self._held += piece
        self._fetched = True

    def _give_up(self, why: str) -> None:
        self._given_up = why
        # Closing a session whose peer is gone raises in many ways, and tells nothing that is not known already.
        with contextlib.suppress(VisaIOError, InvalidSession, OSError, RuntimeError, AttributeError):
            self._device.close()

    @contextlib.contextmanager
    def _translated(self) -> Iterator[None]:
        if self._given_up:
            raise OutOfStep(
                f"this connection is not to be trusted any more ({self._given_up}).",
                resource=self._resource,
                hint="Open it again.",
            )
        try:
            yield
        except BaseException as exc:
            # Whatever happened, even the operator's Ctrl-C: an answer may still be on its way.
            self._give_up(f"after {type(exc).__name__}")
            if isinstance(exc, DriverError) or not isinstance(exc, Exception):
                raise
            raise translated(exc, self._resource, self._timeout_s) from exc


def _opened(manager: pyvisa.ResourceManager, text: str, timeout_s: float) -> MessageBasedResource:
    try:
        device = manager.open_resource(text, open_timeout=_milliseconds(timeout_s))
    except ValueError as exc:
        raise ResourceError(f"this resource cannot be opened here ({_first_line(exc)}).", resource=text) from exc
    except Exception as exc:
        raise translated(exc, text, timeout_s) from exc
    if not isinstance(device, MessageBasedResource):
        device.close()
        raise ResourceError("this resource takes no messages.", resource=text)
    return device


def translated(exc: Exception, resource: str, timeout_s: float) -> DriverError:
    """The DriverError for anything that PyVISA or its backend raised."""
    if isinstance(exc, VisaIOError) and exc.error_code in _VISA_CODES:
        kind, text = _VISA_CODES[StatusCode(exc.error_code)]
        return kind(text.format(timeout_s=timeout_s), resource=resource)
    if isinstance(exc, TimeoutError):
        return NoAnswer("no whole answer came in time.", resource=resource)
    for kind_of_exc, text in _LOST:
        if isinstance(exc, kind_of_exc):
            return ConnectionLost(text, resource=resource)
    return ConnectionLost(f"the connection broke ({_first_line(exc)}).", resource=resource)


_VISA_CODES: dict[Any, tuple[type[DriverError], str]] = {
    StatusCode.error_timeout: (
        NoAnswer,
        "no whole answer came in time (the connection waits {timeout_s:g} s, or more).",
    ),
    StatusCode.error_invalid_resource_name: (ResourceError, "this is no resource name VISA knows."),
    StatusCode.error_resource_not_found: (ConnectionLost, "nothing there speaks the protocol that the name asks for."),
    StatusCode.error_connection_lost: (ConnectionLost, "the connection was lost."),
    StatusCode.error_resource_busy: (ConnectionLost, "the instrument is in use by someone else."),
    StatusCode.error_resource_locked: (ConnectionLost, "the instrument is locked by someone else."),
}

_LOST: tuple[tuple[type[Exception], str], ...] = (
    (ConnectionRefusedError, "the connection was refused."),
    (BrokenPipeError, "the other side closed the connection."),
    (ConnectionError, "the other side dropped the connection."),
    (EOFError, "the other side closed the connection."),
    (InvalidSession, "the session is closed."),
)


def _first_line(exc: Exception) -> str:
    return (str(exc).strip().splitlines() or [type(exc).__name__])[0].rstrip(".")


def _milliseconds(seconds: float) -> int:
    return max(1, round(1000 * seconds))
