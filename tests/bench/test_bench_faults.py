"""Every error of the drivers by the name it gets in a record, and by the exit code it gets at start-up."""

from __future__ import annotations

import socket
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import drivers.errors as trouble
from drivers.roles import Identity, Trace
from harness.bench import Bench, BenchFault, Device, Devices, check
from harness.bench import bench as room
from harness.errors import RingtrueError, SetupError, StationError
from harness.records import Plan

METER = Device("meter", "TCPIP::127.0.0.1::5025::SOCKET", "scpi-analyser")
LINE = Device("scanner", "/dev/ttyUSB0")
IDENTITY = Identity("here", "scpi-analyser", "Invented", "M1", "7", "1.0", 1e-3, 1e-6, 2e-3)

# error of a driver → the code in the record
CODES: dict[type[trouble.DriverError], str] = {
    trouble.NoAnswer: "no-answer",
    trouble.ConnectionLost: "connection-lost",
    trouble.OutOfStep: "connection-lost",
    trouble.WireError: "connection-lost",
    trouble.InstrumentError: "instrument-error",
    trouble.NotUsable: "not-usable",
    trouble.AnswerError: "bad-answer",
    trouble.ResourceError: "bench-fault",
    trouble.DriverError: "bench-fault",
}


class FakeDevice:
    """Any instrument: raises what it is told to, else does as little as it can. ``closed`` counts."""

    def __init__(self, *_: Any, **__: Any) -> None:
        self.raises: Exception | None = None
        self.closed = 0
        self.asked: list[Any] = []

    def _asked(self, *what: Any) -> None:
        self.asked.append(what)
        if self.raises is not None:
            raise self.raises

    def identify(self) -> Identity:
        self._asked("identify")
        return IDENTITY

    def sweep(self, f_hz: Any, drive_v: float) -> Trace:
        self._asked("sweep", drive_v)
        return Trace(np.asarray(f_hz) * 1.000001, np.asarray(f_hz) * (1 - 2j))

    def reopen(self) -> None:
        self._asked("reopen")

    def read(self, timeout_s: float) -> str | None:
        self._asked("read", timeout_s)
        return None

    def next_part(self, timeout_s: float) -> bool | None:
        self._asked("next", timeout_s)
        return None

    def signal(self, outcome: str, grade: str | None) -> None:
        self._asked("signal", outcome, grade)

    def close(self) -> None:
        self.closed += 1


class Fakes:
    """The three instruments of a faked bench."""

    def __init__(self) -> None:
        self.meter, self.scanner, self.handler = FakeDevice(), FakeDevice(), FakeDevice()


@pytest.fixture
def fakes(monkeypatch: pytest.MonkeyPatch) -> Fakes:
    made = Fakes()
    monkeypatch.setattr(room, "ScpiMeter", lambda *_, **__: made.meter)
    monkeypatch.setattr(room, "SerialScanner", lambda *_: made.scanner)
    monkeypatch.setattr(room, "SerialHandler", lambda *_: made.handler)
    return made


@pytest.fixture
def bench(fakes: Fakes) -> Iterator[Bench]:
    with Bench(Devices(METER, LINE, LINE)) as made:
        yield made


def every_error() -> list[type[trouble.DriverError]]:
    """All classes of errors that the drivers have."""
    found, left = [], [trouble.DriverError]
    while left:
        kind = left.pop()
        found.append(kind)
        left += kind.__subclasses__()
    return found


ASKED: dict[str, tuple[str, Callable[[Bench], object]]] = {
    "sweep": ("meter", lambda bench: bench.sweep(Plan(np.array([1e6]), 1.0, "locate"))),
    "reading": ("meter", lambda bench: bench.reading("repeat", 1e6, 1.0)),
    "reopen": ("meter", lambda bench: bench.reopen()),
    "scan": ("scanner", lambda bench: bench.scan(0.1)),
    "early codes": ("scanner", lambda bench: bench.early_codes()),
    "next part": ("handler", lambda bench: bench.next_part(0.1)),
    "signal": ("handler", lambda bench: bench.signal("hold", None)),
}


@pytest.mark.parametrize("kind", every_error())
@pytest.mark.parametrize("what", ASKED)
def test_every_error_of_a_driver_has_its_code(fakes: Fakes, bench: Bench, what: str, kind: type[Exception]) -> None:
    """Whatever is asked of the bench, a driver's error becomes a BenchFault: its code, sentence, place and hint."""
    role, ask = ASKED[what]
    getattr(fakes, role).raises = kind("it went wrong.", resource="PORT 7", hint="Look at it.")  # type: ignore[call-arg]
    with pytest.raises(BenchFault) as caught:
        ask(bench)
    assert caught.value.code == CODES[kind]  # type: ignore[index]
    assert caught.value.exit_code == 3
    assert str(caught.value) == "PORT 7: it went wrong. Look at it."


def test_other_exceptions_are_bugs_and_pass_through(fakes: Fakes, bench: Bench) -> None:
    """What is no DriverError is not dressed up as trouble of the bench."""
    fakes.meter.raises = ZeroDivisionError()
    with pytest.raises(ZeroDivisionError):
        bench.reopen()


@pytest.mark.parametrize("kind", every_error())
@pytest.mark.parametrize("role", ["meter", "scanner", "handler"])
def test_start_up_errors_by_who_can_mend_them(
    fakes: Fakes, monkeypatch: pytest.MonkeyPatch, role: str, kind: type[Exception]
) -> None:
    """A wrong resource is set-up (2), everything else is the station's (3); what was open is closed again."""
    error = kind("it went wrong.", resource="PORT 7", hint="Look at it.")  # type: ignore[call-arg]

    def refuse(*_: Any) -> None:
        raise error

    if role == "meter":
        fakes.meter.raises = error
    else:
        monkeypatch.setattr(room, f"Serial{role.capitalize()}", refuse)
    with pytest.raises(RingtrueError) as caught:
        Bench(Devices(METER, LINE, LINE))
    wanted = SetupError if kind is trouble.ResourceError else StationError
    assert type(caught.value) is wanted
    assert caught.value.exit_code == (2 if wanted is SetupError else 3)
    assert str(caught.value) == "PORT 7: it went wrong. Look at it."
    assert fakes.meter.closed == 1
    assert fakes.scanner.closed == (role == "handler")


# ── start-up for real ────────────────────────────────────────────────────────────────────────


@pytest.mark.parametrize(
    ("resource", "said"),
    [
        ("", "resource"),
        ("TCPIP::127.0.0.1::SOCKET", "TCPIP::127.0.0.1::SOCKET"),
        ("TCPIP::127.0.0.1::99999::SOCKET", "99999"),
        ("COM1", "COM1"),
    ],
)
def test_wrong_resource_is_a_set_up_error(resource: str, said: str) -> None:
    """A string that is no meter's resource: exit code 2, the string and what would do, before any connection."""
    with pytest.raises(SetupError, match=said) as caught:
        Bench(Devices(Device("meter", resource, "scpi-analyser")))
    assert caught.value.exit_code == 2
    assert "::" in str(caught.value)


@pytest.mark.parametrize(
    ("dialect", "said"),
    [("klingon", "scpi-analyser"), ("no/such/dialect.toml", "cannot read this dialect file"), ("", "scpi-analyser")],
)
def test_unknown_dialect_is_a_set_up_error(dialect: str, said: str) -> None:
    """A dialect that is not there: exit code 2, naming those that are, or its path."""
    with pytest.raises(SetupError, match=said) as caught:
        Bench(Devices(Device("meter", METER.resource, dialect)))
    assert caught.value.exit_code == 2


def test_dialect_file_with_mistakes_is_a_set_up_error(tmp_path: Path) -> None:
    """A dialect file that is not one: exit code 2, naming it."""
    path = tmp_path / "mine.toml"
    path.write_text('name = "mine"\n', encoding="utf-8")
    with pytest.raises(SetupError, match=r"mine\.toml"):
        Bench(Devices(Device("meter", METER.resource, str(path))))


def test_check_refuses_what_cannot_be_and_opens_nothing() -> None:
    """Resource and dialect are looked at without a connection: nobody listens at this one, and that is no matter."""
    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))
        resource = f"TCPIP::127.0.0.1::{taken.getsockname()[1]}::SOCKET"
        check(Devices(Device("meter", resource, "scpi-analyser")))
        with pytest.raises(SetupError, match="klingon"):
            check(Devices(Device("meter", resource, "klingon")))
    with pytest.raises(SetupError, match="COM1"):
        check(Devices(Device("meter", "COM1", "scpi-analyser")))


@pytest.mark.parametrize(
    "resource",
    ["TCPIP::127.0.0.1::{port}::SOCKET", "TCPIP::127.0.0.1::hislip0,{port}::INSTR"],
    ids=["socket", "hislip"],
)
def test_refused_port_is_a_station_error(resource: str) -> None:
    """Nobody listens: exit code 3, naming the resource."""
    with socket.socket() as taken:  # bound and not listening: refused, and nobody else can have it
        taken.bind(("127.0.0.1", 0))
        named = resource.format(port=taken.getsockname()[1])
        with pytest.raises(StationError) as caught:
            Bench(Devices(Device("meter", named, "scpi-analyser", timeout_s=2.0)))
    assert type(caught.value) is StationError
    assert caught.value.exit_code == 3
    assert named in str(caught.value)


# ── what the bench hands on ──────────────────────────────────────────────────────────────────


def test_instrument_is_what_the_meter_said(bench: Bench) -> None:
    """Identity and the dialect's accuracy, as a record keeps them."""
    i = bench.instrument
    assert (i.role, i.resource, i.dialect, i.maker, i.model, i.serial, i.firmware) == (
        "meter", "here", "scpi-analyser", "Invented", "M1", "7", "1.0",
    )  # fmt: skip
    assert (i.u_z_relative, i.u_f_relative, i.noise_relative) == (1e-3, 1e-6, 2e-3)


def test_sweep_gives_frequencies_as_read_back(bench: Bench, fakes: Fakes) -> None:
    """The meter's frequencies, not the wanted ones, with the impedances; the drive is passed on."""
    f_hz, z_ohm = bench.sweep(Plan(np.array([2e6, 1e6]), 0.5, "locate"))
    np.testing.assert_array_equal(f_hz, np.array([2e6, 1e6]) * 1.000001)
    np.testing.assert_array_equal(z_ohm, np.array([2e6, 1e6]) * (1 - 2j))
    assert fakes.meter.asked[-1] == ("sweep", 0.5)
    reading = bench.reading("repeat", 1e6, 0.5)
    assert (reading.stage, reading.f_hz, reading.z_ohm) == ("repeat", 1e6 * 1.000001, 1e6 * (1 - 2j))


def test_early_codes_are_taken_off_the_line(bench: Bench, fakes: Fakes) -> None:
    """Everything that has come so far, in order, without waiting; then nothing."""
    lines = ["MD-0001", "MD-0002"]
    waits: list[float] = []

    def read(timeout_s: float) -> str | None:
        waits.append(timeout_s)
        return lines.pop(0) if lines else None

    fakes.scanner.read = read  # type: ignore[method-assign]
    assert bench.early_codes() == ("MD-0001", "MD-0002")
    assert bench.early_codes() == ()
    assert set(waits) == {0.0}


def test_bench_of_a_meter_alone(fakes: Fakes) -> None:
    """Without scanner and handler: no codes, a part is always there, signals go nowhere, any grade will do."""
    with Bench(Devices(METER)) as bench:
        assert (bench.has_scanner, bench.has_handler) == (False, False)
        assert bench.scan(0.1) is None
        assert bench.early_codes() == ()
        assert bench.next_part(0.1) is True
        bench.signal("hold", None)
        bench.refuse_untellable(["größer", "-"])
    assert fakes.scanner.asked == fakes.handler.asked == []
    assert (fakes.meter.closed, fakes.scanner.closed, fakes.handler.closed) == (1, 0, 0)


@pytest.mark.parametrize("grade", ["größer", "-", "a\tb"])
def test_grade_that_a_handler_cannot_be_told(bench: Bench, grade: str) -> None:
    """A grade that the handler's line cannot carry is a mistake of set-up, naming it; others are not."""
    bench.refuse_untellable(["L", "M 1", "H"])
    with pytest.raises(SetupError) as caught:
        bench.refuse_untellable(["L", grade])
    assert repr(grade) in str(caught.value)
    assert caught.value.exit_code == 2


def test_bench_closes_all_it_opened(fakes: Fakes) -> None:
    """Leaving the context closes handler, scanner and meter, each once."""
    with Bench(Devices(METER, LINE, LINE)):
        pass
    assert (fakes.meter.closed, fakes.scanner.closed, fakes.handler.closed) == (1, 1, 1)
