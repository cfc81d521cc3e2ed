"""The bench behind its real connections: TCP, pseudo-terminals, control port, and faults as they reach the wire."""

from __future__ import annotations

import json
import socket
import threading
from collections.abc import Callable
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest
import pyvisa

from sim_instruments.faults import Fault

if TYPE_CHECKING:
    from sim_served import Served

pytest_plugins = ["sim_served"]

Serving = Callable[..., "Served"]
Receive = Callable[[socket.socket, int], bytes]

IDENTITY = b"Hollowmere Instruments,ZA-12,HM00000,1.2.0\n"


# ── TCP ──────────────────────────────────────────────────────────────────────────────────────


def test_tcp_block_is_exact(serving: Serving, receive: Receive, is_quiet: Any) -> None:
    """Header, every byte, one line feed, and nothing after it; line feeds inside are data."""
    line = serving().tcp()
    f_hz = np.linspace(1.5e6, 1.8e6, 1601)
    line.sendall(b"FORM REAL,64;:LIST:FREQ " + ",".join(f"{f:.6f}" for f in f_hz).encode() + b"\nINIT;*OPC?\n")
    assert receive(line, 2) == b"1\n"
    line.sendall(b"TRAC? FREQ\nTRAC? IMP\n")
    assert receive(line, 7) == b"#512808"
    assert np.allclose(np.frombuffer(receive(line, 12808), ">f8"), f_hz, rtol=0, atol=1e-6)
    assert receive(line, 8) == b"\n#525616"
    assert np.all(np.isfinite(np.frombuffer(receive(line, 25616), ">f8")))
    assert receive(line, 1) == b"\n"
    assert is_quiet(line)


def test_tcp_message_in_single_bytes(serving: Serving, receive: Receive) -> None:
    """Messages end at line feeds, wherever the packets end; carriage returns do no harm."""
    line = serving().tcp()
    for byte in b"*OPC?;*IDN?\r\n*OPC?\n":
        line.sendall(bytes([byte]))
    assert receive(line, len(IDENTITY) + 4) == b"1;" + IDENTITY + b"1\n"


def test_tcp_overrun_is_an_error_not_an_end(serving: Serving, receive: Receive) -> None:
    """A message without end fills the input buffer: −363, and the connection goes on."""
    line = serving().tcp()
    line.sendall(b"A" * ((1 << 22) + (1 << 20)) + b"\nSYST:ERR?\n")
    assert receive(line, 28) == b'-363,"Input buffer overrun"\n'


def test_client_that_leaves_does_not_matter(serving: Serving, receive: Receive) -> None:
    """One closes in the middle of a message, one in the middle of a sweep; the next is served."""
    served = serving(s_per_point=0.05)
    for message in (b"*ID", b"INIT;*IDN?\n"):
        line = served.tcp()
        line.sendall(message)
        line.close()
    line = served.tcp()
    line.sendall(b"*IDN?\n")
    assert receive(line, len(IDENTITY)) == IDENTITY


def test_hislip_and_tcp_share_one_instrument(serving: Serving, receive: Receive) -> None:
    """What one sets, the other reads; no answer reaches the wrong one, however they race."""
    served = serving()
    manager = pyvisa.ResourceManager("@py")
    visa: Any = manager.open_resource(served.at.hislip, timeout=5000)
    line = served.tcp()
    visa.write("AVER:COUN 7;*OPC?")
    assert visa.read().strip() == "1"
    line.sendall(b"AVER:COUN?\n")
    assert receive(line, 2) == b"7\n"
    wrong = []

    def ask_over_tcp() -> None:
        for _ in range(100):
            line.sendall(b"LIST:FREQ 1e6;:INIT;*OPC?\n")
            wrong.append(receive(line, 2) != b"1\n")

    racing = threading.Thread(target=ask_over_tcp)
    racing.start()
    answers = {visa.query("*IDN?").encode() for _ in range(100)}
    racing.join()
    visa.close()
    manager.close()
    assert answers == {IDENTITY}
    assert wrong == [False] * 100


def test_sweep_takes_its_time_and_keeps_others_waiting(serving: Serving, is_quiet: Any, receive: Receive) -> None:
    """One instrument: while it sweeps for one client, it does not answer another."""
    served = serving(s_per_point=0.4)
    first, second = served.tcp(), served.tcp()
    first.sendall(b"INIT;*OPC?\n")
    assert is_quiet(first)
    second.sendall(b"*OPC?\n")
    assert receive(first, 2) == receive(second, 2) == b"1\n"


# ── faults at the wire ───────────────────────────────────────────────────────────────────────


def test_silence_at_the_wire(serving: Serving, is_quiet: Any, receive: Receive) -> None:
    """Nothing comes; the next query is answered."""
    line = serving(faults=[Fault("silence")]).tcp()
    line.sendall(b"*IDN?\n")
    assert is_quiet(line)
    line.sendall(b"*IDN?\n")
    assert receive(line, len(IDENTITY)) == IDENTITY


def test_late_answer_at_the_wire(serving: Serving, is_quiet: Any, receive: Receive) -> None:
    """It comes before the answer to the next query, and keeps no other connection waiting."""
    served = serving(faults=[Fault("late-answer", seconds=0.5)])
    line, other = served.tcp(), served.tcp()
    line.sendall(b"*OPC?\n*IDN?\n")
    assert is_quiet(line)
    other.sendall(b"*IDN?\n")
    assert receive(other, len(IDENTITY)) == IDENTITY
    assert receive(line, 2 + len(IDENTITY)) == b"1\n" + IDENTITY


def test_half_block_at_the_wire(serving: Serving, is_quiet: Any, receive: Receive) -> None:
    """Half of it, no line feed, then nothing."""
    line = serving(faults=[Fault("half-block")]).tcp()
    line.sendall(b"FORM REAL;:LIST:FREQ 1e6,2e6;:INIT;:TRAC? IMP\n")
    assert receive(line, 18).startswith(b"#232")
    assert is_quiet(line)


def test_dropped_connection_at_the_wire(serving: Serving, receive: Receive) -> None:
    """Closed without a byte; connecting again works."""
    served = serving(faults=[Fault("drop-connection", command="*IDN?", nth=2)])
    line = served.tcp()
    line.sendall(b"*IDN?\n")
    receive(line, len(IDENTITY))
    line.sendall(b"*IDN?\n")
    with pytest.raises((ConnectionResetError, AssertionError)):
        receive(line, 1)
    again = served.tcp()
    again.sendall(b"*IDN?\n")
    assert receive(again, len(IDENTITY)) == IDENTITY


def test_garbage_at_the_wire(serving: Serving, receive: Receive) -> None:
    """As many bytes as the identity has, none of them text."""
    line = serving(faults=[Fault("garbage")]).tcp()
    line.sendall(b"*IDN?\n")
    garbage = receive(line, len(IDENTITY))
    assert garbage[-1:] == b"\n"
    assert min(garbage[:-1]) >= 0x80


# ── scanner and handler ──────────────────────────────────────────────────────────────────────


def test_station_screens_a_lot_over_both_lines(serving: Serving) -> None:
    """READY → PRESENT and the scan → verdict → ACK, to the end of the lot."""
    served = serving(parts=3)
    handler, scanner = served.serial(served.at.handler), served.serial(served.at.scanner)
    for serial in (b"MD-0001\r", b"MD-0002\r", b"MD-0003\r"):
        handler.write(b"READY\n")
        assert handler.readline() == b"PRESENT\n"
        assert scanner.read_until(b"\r") == serial
        handler.write(b"VERDICT PASS A\n")
        assert handler.readline() == b"ACK\n"
    handler.write(b"READY\nnonsense\n")
    assert handler.readline() == b"EMPTY\n"
    assert handler.readline().startswith(b"NAK 'nonsense'")
    assert served.control()({"status": None})["verdicts"] == {
        f"MD-{n:04d}": [{"outcome": "PASS", "grade": "A"}] for n in (1, 2, 3)
    }


def test_lines_survive_a_station_that_closes_them(serving: Serving) -> None:
    """The port opened anew works as before; a line may come in pieces and with a carriage return."""
    served = serving()
    for _ in range(3):
        handler = served.serial(served.at.handler)
        handler.write(b"REA")
        handler.write(b"DY\r\n")
        assert handler.readline() == b"PRESENT\n"
        handler.write(b"VERDICT AGAIN\n")
        assert handler.readline() == b"ACK\n"
        handler.close()


def test_nothing_is_echoed_or_translated(serving: Serving, is_quiet: Any) -> None:
    """Raw at both ends: the scanner's line stays silent, whatever is written to it."""
    served = serving()
    scanner = served.serial(served.at.scanner)
    scanner.write(b"hello\r\n\x03\x04\x11\x13")
    assert is_quiet(scanner)


# ── control port ─────────────────────────────────────────────────────────────────────────────


def test_present_by_hand(serving: Serving, is_quiet: Any) -> None:
    """A waiting READY is answered when a part is put in, then its label is read; presented again, it is not."""
    served = serving()
    handler, scanner, control = served.serial(served.at.handler), served.serial(served.at.scanner), served.control()
    assert control({"command": "eject"}) == {"ok": True, "serial": None}
    handler.write(b"READY\n")
    assert is_quiet(handler)
    assert control({"present": "MD-0002"}) == {"ok": True, "serial": "MD-0002"}
    assert handler.readline() == b"PRESENT\n"
    assert scanner.read_until(b"\r") == b"MD-0002\r"
    assert control({"command": "present", "serial": "MD-0002"})["ok"]
    assert is_quiet(scanner)
    assert is_quiet(handler)
    assert control({"scan": True}) == {"ok": True, "serial": "MD-0002"}
    assert scanner.read_until(b"\r") == b"MD-0002\r"


def test_load_does_not_scan(serving: Serving, is_quiet: Any) -> None:
    """For serials that are typed; without a serial, the next part of the lot."""
    served = serving()
    scanner, control = served.serial(served.at.scanner), served.control()
    assert control({"load": None}) == {"ok": True, "serial": "MD-0001"}
    assert is_quiet(scanner)
    status = control({"command": "status"})
    assert (status["fixture"], status["mode"], status["verdicts"]) == ("MD-0001", "hand", {})


def test_present_waits_for_the_part_being_measured(serving: Serving) -> None:
    """It answers after the final verdict, not after AGAIN."""
    served = serving()
    handler, control, other = served.serial(served.at.handler), served.control(), served.control()
    control({"load": "MD-0001"})
    control.send({"present": None})
    for verdict in (b"AGAIN", b"FAIL"):
        assert other({"status": None})["fixture"] == "MD-0001"
        handler.write(b"VERDICT " + verdict + b"\n")
        assert handler.readline() == b"ACK\n"
    assert control.receive() == {"ok": True, "serial": "MD-0002"}
    assert other({"status": None})["verdicts"]["MD-0001"][-1] == {"outcome": "FAIL", "grade": None}


def test_present_gives_up_with_a_sentence(serving: Serving) -> None:
    """A part that is never judged keeps the fixture; taken out, there is room."""
    control = serving(wait_s=0.1).control()
    control({"load": "MD-0001"})
    answer = control({"present": "MD-0002"})
    assert answer == {"ok": False, "error": "part MD-0001 has sat in the fixture for 0.1 s without a final verdict"}
    assert control({"eject": True}) == {"ok": True, "serial": "MD-0001"}
    assert control({"present": "MD-0002"})["ok"]


def test_present_after_the_last_verdict_is_refused(serving: Serving) -> None:
    """There is no next part; a named one may come again."""
    served = serving(parts=1)
    handler, control = served.serial(served.at.handler), served.control()
    control({"present": None})
    handler.write(b"VERDICT HOLD\n")
    assert handler.readline() == b"ACK\n"
    assert control({"present": None}) == {"ok": False, "error": "every part of the lot has had a final verdict"}
    assert control({"present": "MD-0001"})["ok"]


def test_fault_by_control(serving: Serving, receive: Receive) -> None:
    """Armed, pending, struck; and disarmed."""
    served = serving()
    control, line = served.control(), served.tcp()
    assert control({"command": "fault", "name": "wrong-identity", "when": "at once", "times": 1})["ok"]
    assert control({"fault": "nan", "when": "sweep 3"})["ok"]
    assert control({"status": None})["faults"] == ["wrong-identity", "nan"]
    line.sendall(b"*IDN?\n")
    assert receive(line, 31) == b"Ashgrove Test Works,PS-3,0,0.9\n"
    assert control({"status": None})["faults"] == ["nan"]
    assert control({"clear-faults": None})["ok"]
    assert control({"status": None})["faults"] == []


def test_truth_and_lot(serving: Serving) -> None:
    """One serial or all; a value the part does not have is null."""
    control = serving(parts=2).control()
    assert control({"lot": None}) == {"ok": True, "lot": ["MD-0001", "MD-0002"]}
    truth = {"defect": "sound", "family": "MD-1650", "values": {"fs": 1.65e6, "fr": None}}
    assert control({"truth": None}) == {"ok": True, "truth": {"MD-0001": truth, "MD-0002": truth}}
    assert control({"command": "truth", "serial": "MD-0002"}) == {"ok": True, "truth": {"MD-0002": truth}}


@pytest.mark.parametrize(
    ("request_", "sentence"),
    [
        (b"junk", "not a JSON object on one line"),
        (b"[1]", "not a JSON object"),
        (b"\xff", "not a JSON object on one line"),
        (b"{}", "no command; write"),
        (b'{"present": null, "eject": null}', "no command; write"),
        (b'{"command": "dance"}', "there is no command 'dance'; there are present"),
        (b'{"command": ["present"]}', "there is no command"),
        (b'{"present": "MD-9999"}', "there is no part 'MD-9999' in this lot of 3"),
        (b'{"present": 7}', "'serial' must be text"),
        (b'{"eject": "MD-0001"}', "takes nothing"),
        (b'{"command": "load", "part": "MD-0001"}', "'load' has no key 'part'"),
        (b'{"truth": "MD-9999"}', "there is no part"),
        (b'{"scan": null}', "there is no part in the fixture to scan"),
        (b'{"fault": "gremlin"}', "there is no fault 'gremlin'"),
    ],
)
def test_wrong_request_gets_a_sentence(serving: Serving, request_: bytes, sentence: str) -> None:
    """Ok false and why; the connection goes on."""
    lines = serving().control()._lines
    for _ in range(2):
        lines.write(request_ + b"\n")
        lines.flush()
        answer = json.loads(lines.readline())
        assert answer["ok"] is False
        assert sentence in answer["error"]


def test_closed_rig_leaves_nothing_open(serving: Serving, descriptors: Any, receive: Receive) -> None:
    """Ports, pseudo-terminals, tasks and threads are gone, clients in the middle of things or not."""
    before, threads = descriptors(), threading.active_count()
    served = serving(s_per_point=30.0)
    line, control = served.tcp(), served.control()
    line.sendall(b"INIT;*OPC?\n")
    control({"load": "MD-0001"})
    control.send({"present": "MD-0002"})
    served.close()
    served.close = lambda: None  # type: ignore[method-assign]
    control._lines.close()
    assert descriptors() == before
    with pytest.raises(ConnectionRefusedError):
        socket.create_connection(("127.0.0.1", served.hislip_port), 1)
    assert threading.active_count() == threads
