"""Scanner and handler over pseudo-terminals."""

from __future__ import annotations

import contextlib
import os
import pty
import select
import threading
import time
import tty
from collections.abc import Callable, Iterator

import pytest
from driver_servers import SHORT_S

from drivers.errors import AnswerError, ConnectionLost, NoAnswer, ResourceError
from drivers.handler import SerialHandler
from drivers.scanner import SerialScanner
from drivers.wire.memory import MemoryWire
from drivers.wire.opening import open_serial


class Line:
    """A pseudo-terminal: ``name`` is the port to open, ``send`` and ``line`` are the instrument's end."""

    def __init__(self) -> None:
        self.master, self._slave = pty.openpty()
        tty.setraw(self.master)
        tty.setraw(self._slave)
        self.name = os.ttyname(self._slave)
        self._held = b""

    def send(self, data: bytes) -> None:
        os.write(self.master, data)

    def send_and_settle(self, data: bytes) -> None:
        """Send while nobody reads, and return when it has reached the port's side."""
        self.send(data)
        assert select.select([self._slave], [], [], 5)[0], "nothing arrived"

    def line(self) -> bytes:
        while b"\n" not in self._held:
            assert select.select([self.master], [], [], 5)[0], "nothing was sent"
            self._held += os.read(self.master, 1000)
        line, _, self._held = self._held.partition(b"\n")
        return line

    def silent(self) -> bool:
        return not self._held and not select.select([self.master], [], [], 0)[0]

    def close(self) -> None:
        for end in (self.master, self._slave):
            with contextlib.suppress(OSError):  # a test may have closed it: the plug was pulled
                os.close(end)


@pytest.fixture
def line() -> Iterator[Line]:
    made = Line()
    yield made
    made.close()


@pytest.fixture
def scanner(line: Line) -> Iterator[SerialScanner]:
    made = SerialScanner(line.name, torn_after_s=SHORT_S)
    yield made
    made.close()


@pytest.fixture
def handler(line: Line) -> Iterator[SerialHandler]:
    made = SerialHandler(line.name, ack_timeout_s=SHORT_S)
    yield made
    made.close()


# ── scanner ──────────────────────────────────────────────────────────────────────────────────


@pytest.mark.parametrize("end", [b"\r", b"\n", b"\r\n", b"\n\r"])
def test_scans_with_every_line_end(line: Line, scanner: SerialScanner, end: bytes) -> None:
    """Carriage return, newline or both end a serial, and none is read twice."""
    line.send(b"MD-0001" + end + b"MD-0002" + end)
    assert scanner.read(5.0) == "MD-0001"
    assert scanner.read(5.0) == "MD-0002"
    assert scanner.read(0.0) is None


def test_a_scan_in_pieces(line: Line, scanner: SerialScanner) -> None:
    """A serial that comes byte by byte is put together, over several reads if need be."""
    for byte in b"MD-0001":
        line.send(bytes([byte]))
        assert scanner.read(0.0) is None
    line.send(b"\r")
    assert scanner.read(5.0) == "MD-0001"


def test_no_scan_in_time(scanner: SerialScanner) -> None:
    """Silence is None, and takes about the time allowed."""
    started = time.monotonic()
    assert scanner.read(SHORT_S) is None
    assert SHORT_S <= time.monotonic() - started < 20 * SHORT_S


def test_a_torn_scan_is_not_glued_to_the_next(line: Line, scanner: SerialScanner) -> None:
    """A piece without its rest is refused while waiting, and the next scan stands alone."""
    line.send(b"MD-00")
    with pytest.raises(AnswerError, match="broke off after 'MD-00'"):
        scanner.read(30.0)
    line.send(b"MD-0002\r")
    assert scanner.read(5.0) == "MD-0002"


def test_a_piece_left_lying_is_not_glued_to_the_next(line: Line, scanner: SerialScanner) -> None:
    """A piece from an earlier read, with who knows what behind it, is refused when nobody looked in between."""
    line.send_and_settle(b"MD-00")
    assert scanner.read(0.0) is None
    time.sleep(SHORT_S)  # the silence that makes a piece torn
    line.send_and_settle(b"MD-0002\r")
    with pytest.raises(AnswerError, match="broke off"):
        scanner.read(5.0)
    assert scanner.read(0.0) is None


@pytest.mark.parametrize("scan", [b"\xff\xfe\x80\r", b"MD\x0001\r", b"   \r"])
def test_scans_that_are_no_serial(line: Line, scanner: SerialScanner, scan: bytes) -> None:
    """Noise is refused with a hint at the baud rate, and the next scan is read."""
    line.send(scan + b"MD-0001\r")
    with pytest.raises(AnswerError, match="baud"):
        scanner.read(5.0)
    assert scanner.read(5.0) == "MD-0001"


def test_an_endless_scan_is_refused(line: Line, scanner: SerialScanner) -> None:
    """Bytes without end do not fill the memory."""
    feeder = threading.Thread(target=line.send, args=(b"A" * 6000,))
    feeder.start()
    with pytest.raises(AnswerError, match="broke off"):
        scanner.read(30.0)
    while feeder.is_alive():
        with contextlib.suppress(AnswerError):
            scanner.read(0.05)
    feeder.join()


def test_what_was_scanned_before_opening_is_thrown_away(line: Line) -> None:
    """A scan from before the station was ready names no part."""
    line.send_and_settle(b"OLD-0001\r")
    scanner = SerialScanner(line.name)
    assert scanner.read(0.0) is None
    scanner.close()


def test_a_pulled_plug_is_connection_lost(line: Line, scanner: SerialScanner) -> None:
    """When the port goes, reading says so instead of waiting for ever."""
    line.close()
    with pytest.raises(ConnectionLost, match="port is gone"):
        scanner.read(5.0)


def test_ports_that_cannot_be_opened(line: Line, scanner: SerialScanner) -> None:
    """A missing port, one in use, a file that is none and an impossible speed each say what is wrong."""
    with pytest.raises(ConnectionLost, match=r"no such file.*plugged in"):
        SerialScanner("/dev/no-such-port")
    with pytest.raises(ConnectionLost, match="Another program has it open"):
        SerialScanner(line.name)
    with pytest.raises(ConnectionLost, match="cannot be opened"):
        SerialScanner("/dev/null")
    with pytest.raises(ResourceError, match="baud"):
        SerialScanner(line.name, baud=-1)


def test_the_port_is_free_after_closing(line: Line) -> None:
    """Closing gives the port back; closing twice does no harm; reading after it is ConnectionLost."""
    for _ in range(2):
        scanner = SerialScanner(line.name)
        scanner.close()
        scanner.close()
    with pytest.raises(ConnectionLost):
        scanner.read(0.0)


def test_serial_wire_reads_exactly(line: Line) -> None:
    """The serial wire keeps the rest of what came, clears it, and takes a silent line for silence only."""
    wire = open_serial(line.name, 9600)
    line.send(b"ABCD")
    assert wire.read_exactly(2, 5.0) == b"AB"
    with pytest.raises(NoAnswer, match="only 2 of 3"):
        wire.read_exactly(3, SHORT_S)
    line.send(b"E\n")
    assert wire.read_line(5.0) == b"CDE"
    line.send(b"F")
    assert wire.read_exactly(1, 5.0) == b"F"
    line.send(b"junk")
    with pytest.raises(NoAnswer):
        wire.read_line(SHORT_S)
    wire.clear()
    line.send(b"G\n")
    assert wire.read_line(5.0) == b"G"
    wire.close()


# ── handler ──────────────────────────────────────────────────────────────────────────────────


def told(line: Line, handler: SerialHandler, said: bytes, call: Callable[[], object]) -> object:
    """Do ``call`` while the instrument's end waits for a line and then says ``said``; its result."""
    heard: list[bytes] = []

    def instrument() -> None:
        heard.append(line.line())
        line.send(said)

    thread = threading.Thread(target=instrument)
    thread.start()
    try:
        return call(), heard
    finally:
        thread.join(5)
        assert not thread.is_alive()


@pytest.mark.parametrize(("said", "meant"), [(b"PRESENT\n", True), (b"EMPTY\n", False), (b"PRESENT\r\n", True)])
def test_a_part_is_asked_for(line: Line, handler: SerialHandler, said: bytes, meant: bool) -> None:
    """READY brings a part or the word that there is no more."""
    assert told(line, handler, said, lambda: handler.next_part(5.0)) == (meant, [b"READY"])


def test_a_part_that_takes_long(line: Line, handler: SerialHandler) -> None:
    """No word in time is None; the late answer counts for the same request, which is then not sent again."""
    assert handler.next_part(0.0) is None
    assert line.line() == b"READY"
    line.send(b"PRES")
    assert handler.next_part(SHORT_S) is None
    assert line.line() == b"READY"
    line.send_and_settle(b"ENT\n")
    assert handler.next_part(5.0) is True
    assert line.silent()


def test_an_old_answer_is_not_the_next_part(line: Line, handler: SerialHandler) -> None:
    """PRESENT said when nobody asked is dropped before the next READY."""
    assert told(line, handler, b"PRESENT\nPRESENT\nPRESENT\n", lambda: handler.next_part(5.0)) == (True, [b"READY"])
    assert handler.next_part(SHORT_S) is None


@pytest.mark.parametrize(
    ("verdict", "words"), [(("pass", "A"), b"VERDICT PASS A"), (("again", None), b"VERDICT AGAIN")]
)
def test_a_verdict_is_acknowledged(
    line: Line, handler: SerialHandler, verdict: tuple[str, str | None], words: bytes
) -> None:
    """A verdict is told in the handler's words and returns at ACK."""
    assert told(line, handler, b"ACK\n", lambda: handler.signal(*verdict)) == (None, [words])


def test_no_acknowledgement_means_hold(handler: SerialHandler) -> None:
    """Without ACK in time it is NoAnswer, with the hint to put the part on hold."""
    with pytest.raises(NoAnswer, match="put the part on hold"):
        handler.signal("pass", None)


def test_a_late_ack_is_not_the_next_verdicts(line: Line, handler: SerialHandler) -> None:
    """The ACK of an earlier verdict does not acknowledge a later one; one that never came is forgotten with the
    next part."""
    with pytest.raises(NoAnswer):
        handler.signal("pass", None)
    line.line()
    with pytest.raises(NoAnswer):
        told(line, handler, b"ACK\n", lambda: handler.signal("fail", None))
    assert told(line, handler, b"ACK\nPRESENT\n", lambda: handler.next_part(5.0)) == (True, [b"READY"])
    with pytest.raises(NoAnswer):
        handler.signal("pass", None)
    line.line()
    assert told(line, handler, b"PRESENT\n", lambda: handler.next_part(5.0)) == (True, [b"READY"])
    assert told(line, handler, b"ACK\n", lambda: handler.signal("fail", None)) == (None, [b"VERDICT FAIL"])


def test_a_second_answer_to_a_repeated_ready_is_passed_over(line: Line, handler: SerialHandler) -> None:
    """READY sent again while the answer was on its way is answered twice; the second does not answer the verdict."""
    assert handler.next_part(0.0) is None
    assert handler.next_part(0.0) is None
    line.send_and_settle(b"PRESENT\n")
    assert handler.next_part(5.0) is True
    assert [line.line(), line.line()] == [b"READY", b"READY"]
    assert told(line, handler, b"PRESENT\nACK\n", lambda: handler.signal("hold", None)) == (None, [b"VERDICT HOLD"])


@pytest.mark.parametrize("said", [b"NAK the gate is open\n", b"PRESENT\n", b"EMPTY\n"])
def test_a_verdict_refused(line: Line, handler: SerialHandler, said: bytes) -> None:
    """NAK, or a word that is no answer to a verdict, is AnswerError, with the handler's own reason in it."""
    with pytest.raises(AnswerError, match="goes on hold") as caught:
        told(line, handler, said, lambda: handler.signal("pass", "A"))
    assert "the gate is open" in caught.value.text or said[:3] != b"NAK"


def test_nonsense_from_the_handler(line: Line, handler: SerialHandler) -> None:
    """A line that is no word of a handler's is AnswerError, and the next request starts anew."""
    with pytest.raises(AnswerError, match="expected PRESENT"):
        told(line, handler, b"?!\n", lambda: handler.next_part(5.0))
    assert told(line, handler, b"PRESENT\n", lambda: handler.next_part(5.0)) == (True, [b"READY"])


def test_outcomes_that_cannot_be_told(line: Line, handler: SerialHandler) -> None:
    """An unknown outcome or grade is refused before a word is sent."""
    for outcome, grade in (("no verdict", None), ("pass", "Ä"), ("pass", "A\nVERDICT PASS")):
        with pytest.raises(ResourceError):
            handler.signal(outcome, grade)
    assert line.silent()


def test_a_handler_over_any_wire() -> None:
    """The same driver works over a function: what a notebook needs to try it."""
    answers = {b"READY\n": b"PRESENT\n", b"VERDICT FAIL\n": b"ACK\n"}
    handler = SerialHandler("none", open_port=lambda port, baud: MemoryWire(lambda data: answers[data], port))
    assert handler.next_part(1.0) is True
    handler.signal("fail", None)
    handler.close()
