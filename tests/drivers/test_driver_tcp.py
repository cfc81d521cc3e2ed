"""The TCP wire against real little servers that dribble, cut, hang up, stay silent and answer late."""

from __future__ import annotations

import select
import socket
import threading
import time

import pytest
from driver_servers import SHORT_S, line_from, listening, refused_port

from drivers.codec.block import BlockReader, encode_block
from drivers.errors import ConnectionLost, DriverError, NoAnswer, OutOfStep, ResourceError
from drivers.wire.opening import open_wire
from drivers.wire.protocol import RECEIVED, SENT
from drivers.wire.tcp import TcpWire

# What a line-minded reader would trip over: line ends inside, at the end, and nothing else.
PAYLOADS = [b"AB", bytes(range(256)) * 8, b"\n" * 3000, b"\x00" * 5000 + b"\n"]


def open_to(port: int, timeout_s: float = SHORT_S) -> TcpWire:
    wire = open_wire(f"TCPIP::127.0.0.1::{port}::SOCKET", timeout_s)
    assert isinstance(wire, TcpWire)
    return wire


def read_block(wire: TcpWire, timeout_s: float = SHORT_S) -> bytes:
    reader = BlockReader()
    while reader.wants:
        reader.feed(wire.read_exactly(reader.wants, timeout_s))
    return reader.payload


@pytest.mark.parametrize("payload", PAYLOADS)
@pytest.mark.parametrize("piece", [1, 3, 1000, 1 << 20])
def test_blocks_arrive_whole_however_they_dribble(payload: bytes, piece: int) -> None:
    """A block sent in pieces of any size is read exactly, and the line end behind it stays for read_line."""
    message = encode_block(payload) + b"\r\n"

    def script(connection: socket.socket) -> None:
        connection.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        while line_from(connection):
            for at in range(0, len(message), piece):
                connection.sendall(message[at : at + piece])

    with listening(script) as port:
        wire = open_to(port, 5.0)
        for _ in range(2):
            wire.write(b"DATA?\n")
            assert read_block(wire, 5.0) == payload
            assert wire.read_line(5.0) == b""
        wire.close()


@pytest.mark.parametrize("sent", [b"", b"#", b"#2", b"#210", b"#210ABCD"])
def test_silence_in_a_block_is_no_answer_and_ends_the_wire(sent: bytes) -> None:
    """A block that stops is NoAnswer in time; after it every call is OutOfStep, even when the rest comes."""
    late = threading.Event()

    def script(connection: socket.socket) -> None:
        line_from(connection)
        connection.sendall(sent)
        late.wait(5)
        connection.sendall(b"REST\n")

    with listening(script) as port:
        wire = open_to(port)
        wire.write(b"DATA?\n")
        started = time.monotonic()
        with pytest.raises(NoAnswer, match=r"within 0\.2 s"):
            read_block(wire)
        assert SHORT_S <= time.monotonic() - started < 5
        late.set()
        for call in (
            lambda: wire.write(b"X?\n"),
            lambda: wire.read_line(SHORT_S),
            lambda: wire.read_exactly(1, SHORT_S),
            wire.clear,
        ):
            with pytest.raises(OutOfStep, match="NoAnswer"):
                call()


def test_a_slow_dribble_does_not_stretch_the_timeout() -> None:
    """The timeout bounds the whole line: a byte now and then does not start it afresh."""
    stop = threading.Event()

    def script(connection: socket.socket) -> None:
        line_from(connection)
        while not stop.wait(SHORT_S / 10):
            connection.sendall(b"1")

    with listening(script) as port:
        wire = open_to(port)
        wire.write(b"X?\n")
        started = time.monotonic()
        with pytest.raises(NoAnswer, match="only"):
            wire.read_line(SHORT_S)
        assert time.monotonic() - started < 20 * SHORT_S
        stop.set()


@pytest.mark.parametrize("sent", [b"", b"#210AB"])
def test_hanging_up_is_seen_at_once(sent: bytes) -> None:
    """A peer that closes, before or within its answer, is ConnectionLost without waiting for the timeout."""

    def script(connection: socket.socket) -> None:
        line_from(connection)
        connection.sendall(sent)

    with listening(script) as port:
        wire = open_to(port)
        wire.write(b"DATA?\n")
        started = time.monotonic()
        with pytest.raises(ConnectionLost, match="closed"):
            wire.read_exactly(14, 30.0)
        assert time.monotonic() - started < 10
        with pytest.raises(OutOfStep):
            wire.write(b"X?\n")


def test_a_peer_gone_between_messages_is_seen_at_the_next_write() -> None:
    """The first write after the peer hung up fails; it does not vanish into the network."""
    with listening(lambda connection: None) as port:
        wire = open_to(port)
        assert select.select([wire._socket], [], [], 5)[0]  # the end of the stream has arrived
        with pytest.raises(ConnectionLost, match="closed"):
            wire.write(b"*CLS\n")


def test_a_late_answer_is_never_a_fresh_one() -> None:
    """After a timeout the old wire refuses to speak, and a new one gets the new question's answer."""
    give_up = threading.Event()

    def script(connection: socket.socket) -> None:
        first = line_from(connection)
        if first == b"SLOW?\n":
            give_up.wait(5)
        connection.sendall(first.strip(b"?\n") + b"\n")

    with listening(script) as port:
        wire = open_to(port)
        wire.write(b"SLOW?\n")
        with pytest.raises(NoAnswer):
            wire.read_line(SHORT_S)
        give_up.set()
        with pytest.raises(OutOfStep):
            wire.write(b"FRESH?\n")
        fresh = open_to(port, 5.0)
        fresh.write(b"FRESH?\n")
        assert fresh.read_line(5.0) == b"FRESH"
        fresh.close()


def test_bytes_nobody_asked_for_are_out_of_step() -> None:
    """Unread bytes at the next write, in the buffer or on the socket, end the wire; clear drops them instead."""

    def script(connection: socket.socket) -> None:
        while line_from(connection):
            connection.sendall(b"ONE\nTWO\n")

    with listening(script) as port:
        wire = open_to(port, 5.0)
        wire.write(b"X?\n")
        assert wire.read_line(5.0) == b"ONE"
        assert wire.read_exactly(1, 5.0) == b"T"
        with pytest.raises(OutOfStep, match="'WO"):
            wire.write(b"X?\n")
        other = open_to(port, 5.0)
        other.write(b"X?\n")
        assert other.read_exactly(8, 5.0) == b"ONE\nTWO\n"
        other.write(b"X?\n")
        assert other.read_line(5.0) == b"ONE"
        other.clear()
        other.write(b"X?\n")
        assert other.read_line(5.0) == b"ONE"
        other.close()


def test_a_refused_port_is_connection_lost_when_opening() -> None:
    """Nobody listening is known before the first word is sent."""
    with pytest.raises(ConnectionLost, match="refused"):
        open_to(refused_port())


@pytest.mark.parametrize(
    ("raised", "kind"),
    [
        (TimeoutError("timed out"), NoAnswer),
        (socket.gaierror(-2, "Name or service not known"), ConnectionLost),
        (OSError(113, "No route to host"), ConnectionLost),
        (PermissionError(13, "Permission denied"), ConnectionLost),
        (UnicodeError("label too long"), ResourceError),
    ],
)
def test_what_connecting_raises(monkeypatch: pytest.MonkeyPatch, raised: Exception, kind: type[DriverError]) -> None:
    """Each way of not getting a connection is one of our errors, naming the resource."""

    def refuse(*_: object) -> None:
        raise raised

    monkeypatch.setattr("socket.create_connection", refuse)
    with pytest.raises(kind) as caught:
        open_to(5025)
    assert caught.value.resource == "TCPIP::127.0.0.1::5025::SOCKET"
    assert caught.value.hint or kind is ResourceError


def test_an_interrupt_ends_the_wire() -> None:
    """Ctrl-C while an answer is on its way leaves a wire that will not be used again."""

    def log(direction: str, data: bytes) -> None:
        if direction == RECEIVED:
            raise KeyboardInterrupt

    def script(connection: socket.socket) -> None:
        line_from(connection)
        connection.sendall(b"1\n")

    with listening(script) as port:
        wire = TcpWire("x", "127.0.0.1", port, 5.0, log)
        wire.write(b"X?\n")
        with pytest.raises(KeyboardInterrupt):
            wire.read_line(5.0)
        with pytest.raises(OutOfStep, match="KeyboardInterrupt"):
            wire.read_line(5.0)


def test_the_log_hears_every_byte_both_ways() -> None:
    """The log gets what was sent and what was received, in order."""
    heard: list[tuple[str, bytes]] = []

    def script(connection: socket.socket) -> None:
        line_from(connection)
        connection.sendall(b"1\n")

    with listening(script) as port:
        wire = open_wire(f"TCPIP::localhost::{port}::SOCKET", 5.0, lambda *entry: heard.append(entry))
        wire.write(b"*OPC?\n")
        wire.read_line(5.0)
        wire.close()
        wire.close()
    assert heard[0] == (SENT, b"*OPC?\n")
    assert b"".join(data for direction, data in heard if direction == RECEIVED) == b"1\n"
