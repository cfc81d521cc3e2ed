"""Plain TCP, read exactly: newline-terminated messages both ways, blocks by their count.

An own socket instead of a VISA library's: a refused port, a closed peer and a timeout are told apart at once, and after
any of them the wire is given up until opened anew (a late answer would else be read as the next one's).
"""

from __future__ import annotations

import contextlib
import socket
from collections.abc import Iterator

from drivers.codec.block import shown
from drivers.errors import ConnectionLost, NoAnswer, OutOfStep, ResourceError
from drivers.wire.deadline import Deadline
from drivers.wire.protocol import RECEIVED, SENT, WireLog, keep_no_log

_PIECE = 1 << 16
_LONGEST_LINE = 1 << 25


class TcpWire:
    """One connection. Raises ConnectionLost (refused, no such host) or NoAnswer (silence) when it cannot open."""

    def __init__(self, resource: str, host: str, port: int, timeout_s: float, log: WireLog = keep_no_log) -> None:
        self._resource = resource
        self._timeout_s = timeout_s
        self._log = log
        self._held = bytearray()
        self._given_up = ""
        with open_errors(resource, host, port, timeout_s):
            self._socket = socket.create_connection((host, port), timeout_s)
        self._socket.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)

    @property
    def resource(self) -> str:
        return self._resource

    def write(self, data: bytes) -> None:
        with self._translated():
            self._take_what_came()
            if self._held:
                raise OutOfStep(
                    f"bytes came that nobody asked for: {shown(self._held)}.",
                    resource=self._resource,
                    hint="Open the connection again.",
                )
            self._socket.settimeout(self._timeout_s)
            self._socket.sendall(data)
        self._log(SENT, data)

    def read_line(self, timeout_s: float) -> bytes:
        deadline = Deadline(timeout_s)
        looked = 0
        with self._translated():
            while (end := self._held.find(b"\n", looked)) < 0:
                looked = len(self._held)
                if looked > _LONGEST_LINE:
                    raise OutOfStep(f"no line end in {looked} bytes.", resource=self._resource)
                self._receive(deadline)
        return self._take(end + 1).rstrip(b"\r\n")

    def read_exactly(self, count: int, timeout_s: float) -> bytes:
        deadline = Deadline(timeout_s)
        with self._translated():
            while len(self._held) < count:
                self._receive(deadline, count)
        return self._take(count)

    def clear(self) -> None:
        with self._translated():
            self._take_what_came()
        self._held.clear()

    def close(self) -> None:
        self._given_up = self._given_up or "it was closed"
        self._socket.close()

    def _take(self, count: int) -> bytes:
        taken = bytes(self._held[:count])
        del self._held[:count]
        return taken

    def _receive(self, deadline: Deadline, wanted: int | None = None) -> None:
        left_s = deadline.left_s
        if not left_s:
            of = f" of {wanted}" if wanted is not None else ""
            came = f"only {len(self._held)}{of} bytes came" if self._held else "no answer came"
            raise NoAnswer(f"{came} within {deadline.timeout_s:g} s.", resource=self._resource)
        self._socket.settimeout(left_s)
        with contextlib.suppress(TimeoutError):  # the deadline, looked at above, says so in better words
            self._keep(self._socket.recv(_PIECE))

    def _take_what_came(self) -> None:
        self._socket.setblocking(False)
        with contextlib.suppress(BlockingIOError):  # nothing more has come: what is wanted
            while len(self._held) <= _LONGEST_LINE:
                self._keep(self._socket.recv(_PIECE))

    def _keep(self, piece: bytes) -> None:
        if not piece:
            raise ConnectionLost("the other side closed the connection.", resource=self._resource)
        self._log(RECEIVED, piece)
        self._held += piece

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
            self._given_up = f"after {type(exc).__name__}"
            self._socket.close()
            if isinstance(exc, TimeoutError):
                raise NoAnswer(f"nothing was taken within {self._timeout_s:g} s.", resource=self._resource) from exc
            if isinstance(exc, OSError):
                raise ConnectionLost(f"the connection broke ({reason(exc)}).", resource=self._resource) from exc
            raise


@contextlib.contextmanager
def open_errors(resource: str, host: str, port: int, timeout_s: float) -> Iterator[None]:
    """What goes wrong while connecting, as our errors with a hint."""
    try:
        yield
    except TimeoutError as exc:
        raise NoAnswer(
            f"{host} did not answer within {timeout_s:g} s.", resource=resource, hint="Is it switched on and cabled?"
        ) from exc
    except socket.gaierror as exc:
        raise ConnectionLost(
            f"there is no host '{host}' ({reason(exc)}).", resource=resource, hint="Check the name."
        ) from exc
    except UnicodeError as exc:  # a label too long or empty, from the name's encoding
        raise ResourceError(f"'{host}' cannot be a host name.", resource=resource) from exc
    except OSError as exc:
        raise ConnectionLost(
            f"{host} port {port} cannot be reached ({reason(exc)}).",
            resource=resource,
            hint="Is the instrument on, and its remote control enabled on this port?",
        ) from exc


def reachable(resource: str, host: str, port: int, timeout_s: float) -> None:
    """Connect and hang up: raises as opening a TcpWire would."""
    with open_errors(resource, host, port, timeout_s):
        socket.create_connection((host, port), timeout_s).close()


def reason(exc: OSError) -> str:
    """The operating system's words for an error, without number and address."""
    return (exc.strerror or str(exc) or type(exc).__name__).lower()
