"""HiSLIP at the wire: raw messages byte by byte, and PyVISA's own client."""

from __future__ import annotations

import socket
import struct
from collections.abc import Callable
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest
import pyvisa

from sim_instruments.faults import Fault

if TYPE_CHECKING:
    from sim_served import Served

pytest_plugins = ["sim_served"]

FIRST_ID = 0xFFFFFF00

Receive = Callable[[socket.socket, int], bytes]


class Client:
    """Both channels of one session, each message written out as the standard has it."""

    def __init__(self, served: Served, receive: Receive) -> None:
        self._receive = receive
        self.sync = served.raw_hislip()
        self.sync.sendall(b"HS\x00\x00" + b"\x01\x00" + b"tt" + struct.pack("!Q", 7) + b"hislip0")
        answer = receive(self.sync, 16)
        assert answer[:6] == b"HS\x01\x00\x01\x00"
        self.session = answer[6:8]
        self.asynchronous = served.raw_hislip()
        self.asynchronous.sendall(b"HS\x11\x00\x00\x00" + self.session + bytes(8))
        answer = receive(self.asynchronous, 16)
        assert answer[:6] == b"HS\x12\x00\x00\x00"
        assert answer[8:] == bytes(8)

    def send(self, type_: int, control: int = 0, parameter: int = 0, payload: bytes = b"") -> None:
        self.sync.sendall(struct.pack("!2sBBIQ", b"HS", type_, control, parameter, len(payload)) + payload)

    def send_async(self, type_: int, control: int = 0, parameter: int = 0, payload: bytes = b"") -> None:
        self.asynchronous.sendall(struct.pack("!2sBBIQ", b"HS", type_, control, parameter, len(payload)) + payload)

    def receive(self) -> tuple[int, int, int, bytes]:
        return self._message(self.sync)

    def receive_async(self) -> tuple[int, int, int, bytes]:
        return self._message(self.asynchronous)

    def _message(self, channel: socket.socket) -> tuple[int, int, int, bytes]:
        prologue, type_, control, parameter, length = struct.unpack("!2sBBIQ", self._receive(channel, 16))
        assert prologue == b"HS"
        return type_, control, parameter, self._receive(channel, length)


@pytest.fixture
def client(serving: Callable[..., Served], receive: Receive) -> Client:
    """A session with a fresh bench."""
    return Client(serving(), receive)


def test_query_is_answered_under_its_message_id(client: Client) -> None:
    """DataEnd with the id of the query, the response ended by a line feed."""
    for message_id in (FIRST_ID, FIRST_ID + 2, 0x10):
        client.send(7, 0 if message_id == FIRST_ID else 1, message_id, b"*OPC?")
        assert client.receive() == (7, 0, message_id, b"1\n")


def test_message_in_pieces_and_single_bytes(client: Client) -> None:
    """Data, Data, DataEnd make one program message; its header may come byte by byte."""
    for message_id, (type_, payload) in enumerate([(6, b"*O"), (6, b"PC?;*"), (7, b"OPC?\r\n")]):
        message = struct.pack("!2sBBIQ", b"HS", type_, 0, message_id, len(payload)) + payload
        for at in range(len(message)):
            client.sync.sendall(message[at : at + 1])
    assert client.receive() == (7, 0, 2, b"1;1\n")


def test_response_keeps_to_the_clients_maximum(client: Client) -> None:
    """Pieces no larger than agreed, header included, all under one id; the server states its own maximum."""
    client.send_async(15, payload=struct.pack("!Q", 64))
    assert client.receive_async() == (16, 0, 0, struct.pack("!Q", 1 << 20))
    client.send(7, 0, 8, b"LIST:FREQ " + b",".join([b"1e3"] * 11) + b";FREQ?")
    pieces = [client.receive()]
    while pieces[-1][0] == 6:
        pieces.append(client.receive())
    assert [piece[0] for piece in pieces] == [6] * (len(pieces) - 1) + [7]
    assert {piece[2] for piece in pieces} == {8}
    assert max(len(piece[3]) for piece in pieces) == 48
    assert b"".join(piece[3] for piece in pieces) == b",".join([b"+1.000000000000E+03"] * 11) + b"\n"


def test_unread_response_interrupts(client: Client) -> None:
    """A new message without RMT: Interrupted on both channels, −410 in the queue, then the new answer."""
    client.send(7, 0, 2, b"*OPC?")
    assert client.receive()[2] == 2
    client.send(7, 0, 4, b"SYST:ERR?")
    assert client.receive() == (13, 0, 4, b"")
    assert client.receive_async() == (14, 0, 4, b"")
    assert client.receive() == (7, 0, 4, b'-410,"Query INTERRUPTED"\n')


def test_status_query_tells_and_takes_rmt(client: Client) -> None:
    """MAV while a response is unread; the query itself may say that it has been read."""
    client.send_async(21, 0, 0)
    assert client.receive_async() == (22, 0, 0, b"")
    client.send(7, 0, 2, b"*OPC?")
    client.receive()
    client.send_async(21, 0, 2)
    assert client.receive_async() == (22, 16, 0, b"")
    client.send_async(21, 1, 2)
    assert client.receive_async() == (22, 0, 0, b"")
    client.send(7, 0, 4, b"*OPC?")
    assert client.receive() == (7, 0, 4, b"1\n")


def test_trigger_is_ignored_with_its_error(client: Client) -> None:
    """Nothing waits for a trigger here: −211, and no answer."""
    client.send(12, 0, 2)
    client.send(7, 0, 4, b"SYST:ERR?")
    assert client.receive() == (7, 0, 4, b'-211,"Trigger ignored"\n')


def test_device_clear_ends_a_long_sweep(serving: Callable[..., Served], receive: Receive) -> None:
    """Both handshakes, the answer under way thrown away, then all as new."""
    client = Client(serving(s_per_point=30.0), receive)
    client.send(7, 0, 2, b"INIT;*OPC?")
    client.send(7, 0, 4, b"*IDN?")
    client.send_async(19)
    assert client.receive_async() == (23, 0, 0, b"")
    client.send(8)
    assert client.receive() == (9, 0, 0, b"")
    client.send(7, 0, FIRST_ID, b"*OPC?")
    assert client.receive() == (7, 0, FIRST_ID, b"1\n")


def test_device_clear_forgets_half_a_message(client: Client) -> None:
    """What came without its end does not begin the next message."""
    client.send(6, 0, 2, b"*RST;FOO")
    client.send_async(19)
    client.receive_async()
    client.send(8)
    client.receive()
    client.send(7, 0, FIRST_ID, b"SYST:ERR?")
    assert client.receive()[3] == b'0,"No error"\n'


def test_exclusive_lock_keeps_others_out(serving: Callable[..., Served], receive: Receive, is_quiet: Any) -> None:
    """The second session's lock fails after its time, and its message waits for the release."""
    served = serving()
    first, second = Client(served, receive), Client(served, receive)
    first.send_async(4, 1, 0)
    assert first.receive_async() == (5, 1, 0, b"")
    first.send_async(4, 1, 0)
    assert first.receive_async()[:2] == (5, 3)
    second.send_async(4, 1, 20)
    assert second.receive_async()[:2] == (5, 0)
    second.send_async(24)
    assert second.receive_async() == (25, 1, 1, b"")
    second.send(7, 0, 2, b"*OPC?")
    assert is_quiet(second.sync)
    first.send_async(4, 0, 0)
    assert first.receive_async()[:2] == (5, 1)
    assert second.receive() == (7, 0, 2, b"1\n")
    second.send_async(4, 0, 0)
    assert second.receive_async()[:2] == (5, 3)


def test_shared_lock_is_shared_by_its_key(serving: Callable[..., Served], receive: Receive) -> None:
    """The same key gets in, another does not, nor does an exclusive lock."""
    served = serving()
    clients = [Client(served, receive) for _ in range(3)]
    answers = []
    for client, key in zip(clients, (b"k", b"k", b"other"), strict=True):
        client.send_async(4, 1, 10, key)
        answers.append(client.receive_async()[1])
    assert answers == [1, 1, 0]
    clients[2].send_async(4, 1, 10)
    assert clients[2].receive_async()[1] == 0
    clients[0].send_async(4, 0, 0)
    assert clients[0].receive_async()[1] == 2


def test_remote_local_is_acknowledged(client: Client) -> None:
    """There is no front panel to lock."""
    client.send_async(10, 1, 2)
    assert client.receive_async() == (11, 0, 0, b"")


@pytest.mark.parametrize(
    ("message", "code"),
    [
        (b"XX" + bytes(14), 1),
        (b"HS\x07" + bytes(13), 3),
        (b"HS\x00\x00\x01\x00tt" + struct.pack("!Q", 7) + b"hislip9", 3),
        (b"HS\x11\x00\x00\x00\xff\xff" + bytes(8), 3),
        (b"HS\x00\x00\x01\x00tt" + struct.pack("!Q", 1 << 40), 1),
    ],
)
def test_wrong_beginning_is_fatal(serving: Callable[..., Served], receive: Receive, message: bytes, code: int) -> None:
    """FatalError with its code and a sentence, then the connection closes."""
    channel = serving().raw_hislip()
    channel.sendall(message)
    answer = receive(channel, 16)
    assert answer[:4] == b"HS\x02" + bytes([code])
    assert receive(channel, struct.unpack("!Q", answer[8:])[0])
    assert channel.recv(1) == b""


def test_data_before_the_second_channel_is_fatal(serving: Callable[..., Served], receive: Receive) -> None:
    """Both channels first."""
    channel = serving().raw_hislip()
    channel.sendall(b"HS\x00\x00\x01\x00tt" + struct.pack("!Q", 7) + b"hislip0")
    receive(channel, 16)
    channel.sendall(struct.pack("!2sBBIQ", b"HS", 7, 0, 2, 5) + b"*IDN?")
    assert receive(channel, 4) == b"HS\x02\x02"


@pytest.mark.parametrize(
    ("type_", "control", "size", "code"), [(26, 0, 0, 1), (200, 0, 0, 3), (7, 4, 5, 2), (7, 0, (1 << 20) + 1, 4)]
)
def test_wrong_message_is_an_error_and_ignored(client: Client, type_: int, control: int, size: int, code: int) -> None:
    """Error with its code; the session goes on."""
    client.send(type_, control, 2, b"x" * size)
    assert client.receive()[:3] == (3, code, 0)
    client.send(7, 0, 4, b"SYST:ERR?")
    assert client.receive() == (7, 0, 4, b'0,"No error"\n')


def test_too_many_sessions_are_refused(serving: Callable[..., Served], receive: Receive) -> None:
    """The seventeenth gets a FatalError; a place that was left is free again."""
    served = serving()
    clients = [Client(served, receive) for _ in range(16)]
    channel = served.raw_hislip()
    channel.sendall(b"HS\x00\x00\x01\x00tt" + struct.pack("!Q", 7) + b"hislip0")
    assert receive(channel, 4) == b"HS\x02\x04"
    clients[0].sync.close()
    assert clients[0].asynchronous.recv(1) == b""
    Client(served, receive)


def test_either_channel_ends_the_session(client: Client) -> None:
    """Closing one closes the other."""
    client.asynchronous.close()
    assert client.sync.recv(1) == b""


def test_dropped_connection_closes_both_channels(serving: Callable[..., Served], receive: Receive) -> None:
    """The fault ends the session without an answer; a new session works."""
    served = serving(faults=[Fault("drop-connection")])
    client = Client(served, receive)
    client.send(7, 0, 2, b"*IDN?")
    assert [client.sync.recv(1), client.asynchronous.recv(1)] == [b"", b""]
    again = Client(served, receive)
    again.send(7, 0, 2, b"*OPC?")
    assert again.receive()[3] == b"1\n"


def test_half_block_is_a_short_message(serving: Callable[..., Served], receive: Receive) -> None:
    """The block promises more than its DataEnd brings."""
    client = Client(serving(faults=[Fault("half-block")]), receive)
    client.send(7, 0, 2, b"FORM REAL;:LIST:FREQ 1e6,2e6;:INIT;:TRAC? IMP")
    type_, _, _, payload = client.receive()
    assert (type_, payload[:4], len(payload)) == (7, b"#232", 18)


def test_late_answer_is_discarded_by_its_id(serving: Callable[..., Served], receive: Receive) -> None:
    """It comes under the old id, before the new message is read."""
    client = Client(serving(faults=[Fault("late-answer", seconds=0.2)]), receive)
    client.send(7, 0, 2, b"*IDN?")
    client.send(7, 0, 4, b"*OPC?")
    assert [client.receive()[:3] for _ in range(3)] == [(7, 0, 2), (13, 0, 4), (7, 0, 4)]


@pytest.fixture
def visa(serving: Callable[..., Served]) -> Any:
    """PyVISA's pure Python client on a session of its own."""
    manager = pyvisa.ResourceManager("@py")
    resource = manager.open_resource(serving().at.hislip, timeout=5000)
    yield resource
    resource.close()
    manager.close()


def test_pyvisa_measures(visa: Any) -> None:
    """Identity, list, block and text, status byte and clear, through a client that is not ours."""
    f_hz = np.linspace(1.5e6, 1.8e6, 401)
    assert visa.query("*IDN?").startswith("Hollowmere Instruments,ZA-12,")
    visa.write("FORM REAL,64;:LIST:FREQ " + ",".join(f"{f:.6f}" for f in f_hz))
    assert visa.query("INIT;*OPC?").strip() == "1"
    back = visa.query_binary_values("TRAC? FREQ", datatype="d", is_big_endian=True, container=np.array)
    readings = visa.query_binary_values("TRAC? IMP", datatype="d", is_big_endian=True, container=np.array)
    assert np.allclose(back, f_hz, rtol=0, atol=1e-6)
    visa.write("FORM ASC")
    assert np.array_equal(visa.query_ascii_values("TRAC? IMP", container=np.array), readings)
    visa.write("FOO")
    assert visa.query("*OPC?").strip() == "1"
    assert visa.read_stb() & 4
    visa.clear()
    assert visa.query("SYST:ERR?").strip() == '-113,"Undefined header"'


def test_pyvisa_message_larger_than_one_packet(visa: Any) -> None:
    """A list in pieces of one kilobyte arrives whole, and so does its answer."""
    visa.visalib.sessions[visa.session].interface.max_msg_size = 1024
    f_hz = np.linspace(1.5e6, 1.8e6, 401)
    visa.visalib.sessions[visa.session].interface._max_msg_size = 1024  # what the client itself keeps to
    visa.write("LIST:FREQ " + ",".join(f"{f:.6f}" for f in f_hz))
    assert np.allclose(visa.query_ascii_values("LIST:FREQ?", container=np.array), f_hz, rtol=0, atol=1e-6)
