"""The VISA wire: every kind of exception PyVISA and its backend raise becomes one of ours; messages are read whole."""

from __future__ import annotations

import contextlib
from collections.abc import Iterator

import pytest
from driver_servers import listening, refused_port
from pyvisa.constants import StatusCode
from pyvisa.errors import InvalidSession, VisaIOError
from pyvisa.resources import MessageBasedResource

from drivers.errors import ConnectionLost, DriverError, NoAnswer, OutOfStep, ResourceError
from drivers.wire.opening import open_wire
from drivers.wire.resource import parse_resource
from drivers.wire.visa import VisaWire

USB = parse_resource("USB0::0x1234::0x5678::SN01::INSTR")

# What is raised in use → what it becomes. The kinds are those measured with pyvisa-py 0.8.1.
IN_USE: list[tuple[BaseException, type[BaseException]]] = [
    (VisaIOError(StatusCode.error_timeout), NoAnswer),
    (VisaIOError(StatusCode.error_connection_lost), ConnectionLost),
    (VisaIOError(StatusCode.error_io), ConnectionLost),
    (VisaIOError(StatusCode.error_resource_locked), ConnectionLost),
    (TimeoutError("timed out"), NoAnswer),
    (RuntimeError("Connection was dropped by server."), ConnectionLost),
    (ConnectionRefusedError(111, "Connection refused"), ConnectionLost),
    (ConnectionResetError(104, "Connection reset by peer"), ConnectionLost),
    (BrokenPipeError(32, "Broken pipe"), ConnectionLost),
    (OSError(113, "No route to host"), ConnectionLost),
    (EOFError(), ConnectionLost),
    (AssertionError(), ConnectionLost),
    (InvalidSession(), ConnectionLost),
    (ValueError("odd"), ConnectionLost),
    (Exception("could not connect"), ConnectionLost),
    (KeyboardInterrupt(), KeyboardInterrupt),
]
ON_OPENING: list[tuple[Exception, type[DriverError]]] = [
    (ValueError("Please install PyUSB to use this resource type.\nNo module named 'usb'"), ResourceError),
    (VisaIOError(StatusCode.error_invalid_resource_name), ResourceError),
    (VisaIOError(StatusCode.error_resource_not_found), ConnectionLost),
    (ConnectionRefusedError(111, "Connection refused"), ConnectionLost),
    (Exception("could not connect"), ConnectionLost),
    (TimeoutError("timed out"), NoAnswer),
]


class StubDevice(MessageBasedResource):
    """A message-based session without a library: ``message`` is what reads get, ``raises`` what every call raises."""

    timeout = 0.0
    session = 1  # type: ignore[assignment]

    def __init__(self, message: bytes = b"", raises: BaseException | None = None) -> None:
        self.visalib = self  # type: ignore[assignment]
        self.message = message
        self.raises = raises
        self.closed = 0

    def __del__(self) -> None: ...

    def write_raw(self, message: bytes) -> int:
        self._fail()
        return len(message)

    def read(self, session: int, count: int) -> tuple[bytes, StatusCode]:  # type: ignore[override]
        self._fail()
        piece, self.message = self.message[:count], self.message[count:]
        return piece, StatusCode.success_max_count_read if self.message else StatusCode.success

    def clear(self) -> None:
        self._fail()

    def close(self) -> None:
        self.closed += 1
        self._fail()

    def ignore_warning(self, *_: object) -> Iterator[None]:  # type: ignore[override]
        return contextlib.nullcontext()  # type: ignore[return-value]

    def _fail(self) -> None:
        if self.raises is not None:
            raise self.raises


def wire_to(device: object, monkeypatch: pytest.MonkeyPatch) -> VisaWire:
    class Manager:
        def __init__(self, backend: str) -> None:
            assert backend == "@py"

        def open_resource(self, text: str, open_timeout: int) -> object:
            assert (text, open_timeout) == (USB.text, 1500)
            if isinstance(device, Exception):
                raise device
            return device

    monkeypatch.setattr("pyvisa.ResourceManager", Manager)
    return VisaWire(USB, 1.5)


@pytest.mark.parametrize(("raised", "kind"), IN_USE, ids=repr)
@pytest.mark.parametrize("call", ["write", "read_line", "read_exactly", "clear"])
def test_what_is_raised_in_use(
    monkeypatch: pytest.MonkeyPatch, raised: BaseException, kind: type[BaseException], call: str
) -> None:
    """Every exception in every call is ours, names the resource, closes the session and ends the wire."""
    device = StubDevice()
    wire = wire_to(device, monkeypatch)
    device.raises = raised
    calls = {
        "write": lambda: wire.write(b"X?\n"),
        "read_line": lambda: wire.read_line(1.0),
        "read_exactly": lambda: wire.read_exactly(1, 1.0),
        "clear": wire.clear,
    }
    if isinstance(raised, ValueError | AssertionError | EOFError) or type(raised) is Exception:
        monkeypatch.setattr(device, "close", lambda: None)  # those are not what closing raises
    with pytest.raises(kind) as caught:
        calls[call]()
    assert getattr(caught.value, "resource", USB.text) == USB.text
    for again in calls.values():
        with pytest.raises(OutOfStep, match="not to be trusted"):
            again()


@pytest.mark.parametrize(("raised", "kind"), ON_OPENING, ids=repr)
def test_what_is_raised_on_opening(monkeypatch: pytest.MonkeyPatch, raised: Exception, kind: type[DriverError]) -> None:
    """What opening raises is ours; a missing backend is a matter of set-up and says what is missing, on one line."""
    with pytest.raises(kind) as caught:
        wire_to(raised, monkeypatch)
    assert caught.value.resource == USB.text
    assert "\n" not in str(caught.value)


def test_a_resource_that_takes_no_messages(monkeypatch: pytest.MonkeyPatch) -> None:
    """A session that is not message-based is refused and closed."""
    closed: list[bool] = []

    class Other:
        def close(self) -> None:
            closed.append(True)

    with pytest.raises(ResourceError, match="no messages"):
        wire_to(Other(), monkeypatch)
    assert closed


def test_a_device_that_cannot_be_cleared_is_still_good(monkeypatch: pytest.MonkeyPatch) -> None:
    """Clearing is for buses that have it; "not supported" is no trouble."""
    device = StubDevice()
    wire = wire_to(device, monkeypatch)
    device.raises = VisaIOError(StatusCode.error_nonsupported_operation)
    wire.clear()
    device.raises = None
    wire.write(b"X?\n")
    wire.close()
    wire.close()
    assert device.closed == 1


@pytest.mark.parametrize("size", [0, 1, 4095, 4096, 4097, 100_000])
def test_messages_are_read_whole(monkeypatch: pytest.MonkeyPatch, size: int) -> None:
    """However many pieces a message takes, it is read to its end once, and its bytes are given out exactly."""
    device = StubDevice()
    wire = wire_to(device, monkeypatch)
    wire.write(b"X?\n")
    device.message = b"\n" * size + b"END\n"
    assert wire.read_exactly(size, 1.0) == b"\n" * size
    assert wire.read_line(1.0) == b"END"
    with pytest.raises(NoAnswer, match="ended after 0 of 1"):
        wire.read_exactly(1, 1.0)


def test_a_message_without_line_end_is_not_whole(monkeypatch: pytest.MonkeyPatch) -> None:
    """A message that ends without a line end may be cut in a number, and is NoAnswer."""
    device = StubDevice(b"1.5,-2.7")
    with pytest.raises(NoAnswer, match=r"without its line end, after '1\.5,-2\.7'"):
        wire_to(device, monkeypatch).read_line(1.0)


def test_an_answer_not_read_to_its_end_is_out_of_step(monkeypatch: pytest.MonkeyPatch) -> None:
    """A left line end does not matter at the next write; other bytes do."""
    device = StubDevice(b"AB\n")
    wire = wire_to(device, monkeypatch)
    assert wire.read_exactly(2, 1.0) == b"AB"
    wire.write(b"X?\n")
    device.message = b"AB\n"
    assert wire.read_exactly(1, 1.0) == b"A"
    with pytest.raises(OutOfStep, match="not read to its end"):
        wire.write(b"X?\n")


def test_a_message_without_end_meets_the_deadline(monkeypatch: pytest.MonkeyPatch) -> None:
    """An instrument that never stops talking is NoAnswer at the deadline."""
    device = StubDevice()
    wire = wire_to(device, monkeypatch)
    monkeypatch.setattr(device, "read", lambda session, count: (b"1", StatusCode.success_max_count_read))
    with pytest.raises(NoAnswer, match="no end of the answer"):
        wire.read_line(0.05)


def test_missing_software_says_what_to_install() -> None:
    """Without PyUSB a USB resource is a matter of set-up: ResourceError naming what to install."""
    with pytest.raises(ResourceError, match="install"):
        open_wire(USB.text, 1.0)


def test_a_refused_hislip_port_is_known_before_pyvisa_is_asked() -> None:
    """Nobody listening at a HiSLIP port is ConnectionLost at once."""
    with pytest.raises(ConnectionLost, match="refused"):
        open_wire(f"TCPIP::127.0.0.1::hislip0,{refused_port()}::INSTR", 1.0)


@pytest.mark.filterwarnings("ignore::pytest.PytestUnraisableExceptionWarning", "ignore::ResourceWarning")
def test_a_port_that_does_not_speak_hislip() -> None:
    """Something else listening there is ConnectionLost, in words about the protocol (the backend leaks its socket)."""
    with (
        listening(lambda connection: connection.sendall(b"HTTP/1.0 400 Bad Request\r\n")) as port,
        pytest.raises(ConnectionLost, match="speaks the protocol"),
    ):
        open_wire(f"TCPIP::127.0.0.1::hislip0,{port}::INSTR", 1.0)
