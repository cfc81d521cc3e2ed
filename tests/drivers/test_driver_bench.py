"""The drivers against the simulated bench, a process of its own, over real HiSLIP, TCP and pseudo-terminals."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pytest
from driver_servers import SimulatedBench

from drivers.dialect import shipped_dialects
from drivers.errors import (
    AnswerError,
    ConnectionLost,
    DriverError,
    InstrumentError,
    NoAnswer,
    NotUsable,
    OutOfStep,
    ResourceError,
)
from drivers.handler import SerialHandler
from drivers.meter import ScpiMeter
from drivers.scanner import SerialScanner

F_HZ = np.linspace(1.60e6, 1.72e6, 5)
WIRES = ("hislip", "socket")
SERIAL = "MD-0001"

# fault → the error a sweep ends with; a late answer is late beyond the timeout.
FAULTS: list[tuple[str, type[DriverError]]] = [
    ("silence", NoAnswer),
    ("late-answer", NoAnswer),
    ("half-block", NoAnswer),
    ("wrong-count", AnswerError),
    ("garbage", DriverError),
    ("nan", NotUsable),
    ("infinity", NotUsable),
    ("error-in-queue", InstrumentError),
    ("frequency-not-accepted", NotUsable),
    ("drop-connection", ConnectionLost),
]


@pytest.fixture(scope="module")
def bench() -> Iterator[SimulatedBench]:
    """One bench a module and process; each test puts in its part and clears the faults."""
    made = SimulatedBench(parts=6, seed=1)
    made.control(load=SERIAL)
    yield made
    made.close()


@pytest.fixture
def sound(bench: SimulatedBench) -> SimulatedBench:
    bench.control(command="clear-faults")
    return bench


@pytest.mark.parametrize("dialect", shipped_dialects())
@pytest.mark.parametrize("wire", WIRES)
def test_every_wire_and_dialect_gives_the_same_part(sound: SimulatedBench, wire: str, dialect: str) -> None:
    """Over either connection, in blocks or text, the same part reads the same within the stated noise."""
    reference = ScpiMeter(sound.ready["socket"], "scpi-analyser")
    meter = ScpiMeter(sound.ready[wire], dialect)
    identity = meter.identify()
    expected, got = reference.sweep(F_HZ, 1.0), meter.sweep(F_HZ, 1.0)
    meter.close()
    reference.close()
    assert identity.maker
    assert identity.serial
    np.testing.assert_allclose(got.f_hz, F_HZ, rtol=1e-6)
    assert np.max(np.abs(got.z_ohm / expected.z_ohm - 1)) < 8 * np.sqrt(2) * identity.noise_relative


@pytest.mark.parametrize("wire", WIRES)
def test_long_sweeps(sound: SimulatedBench, wire: str) -> None:
    """More points than one list holds, and messages of many pieces, come through whole and in order."""
    meter = ScpiMeter(sound.ready[wire], "scpi-analyser")
    f_hz = np.linspace(1.72e6, 1.60e6, 5001)
    np.testing.assert_allclose(meter.sweep(f_hz, 1.0).f_hz, f_hz, rtol=1e-6)
    meter.close()


@pytest.mark.parametrize(("fault", "kind"), FAULTS)
@pytest.mark.parametrize("dialect", shipped_dialects())
@pytest.mark.parametrize("wire", WIRES)
def test_every_fault_is_an_error_and_the_next_sweep_is_fresh(
    sound: SimulatedBench, wire: str, dialect: str, fault: str, kind: type[DriverError]
) -> None:
    """A fault during a sweep ends as its error, never as numbers; after it, a reopened meter measures afresh."""
    meter = ScpiMeter(sound.ready[wire], dialect, timeout_s=0.25)
    before = meter.sweep(F_HZ, 1.0)
    # A fault of the list strikes the settings, before the sweep; the others from the sweep on.
    when = "at once" if fault == "frequency-not-accepted" else "sweep 1"
    sound.control(fault=fault, when=when, seconds=0.8)
    with pytest.raises(kind) as caught:
        meter.sweep(F_HZ, 1.0)
    assert caught.value.resource == sound.ready[wire]
    assert caught.value.text.endswith(".")
    if not isinstance(caught.value, NotUsable | InstrumentError):
        with pytest.raises(OutOfStep):
            meter.sweep(F_HZ, 1.0)
        meter.reopen()
    f_hz = F_HZ[::-1] + 10.0
    after = meter.sweep(f_hz, 1.0)
    meter.close()
    np.testing.assert_allclose(after.f_hz, f_hz, rtol=1e-6)
    edges = [0, -1]  # far from resonance, where 10 Hz do not matter
    np.testing.assert_allclose(np.abs(after.z_ohm[::-1][edges]), np.abs(before.z_ohm[edges]), rtol=0.05)


@pytest.mark.parametrize(
    "header",
    [
        "SYSTEM:ERROR:NEXT?",
        "SENSE:LIST:FREQUENCY:POINTS?",
        "SOURCE:VOLTAGE?",
        "*OPC?",
        "TRACE:DATA? FREQ",
        "TRACE:DATA? IMP",
    ],
)
@pytest.mark.parametrize("wire", WIRES)
def test_garbage_for_any_answer(sound: SimulatedBench, wire: str, header: str) -> None:
    """Whichever answer is garbage, it is AnswerError."""
    meter = ScpiMeter(sound.ready[wire], "scpi-analyser", timeout_s=0.25)
    meter.identify()
    sound.control(fault="garbage", when=f"command {header}")
    with pytest.raises(AnswerError):
        meter.sweep(F_HZ, 1.0)
    meter.close()


@pytest.mark.parametrize("wire", WIRES)
def test_another_instrument_at_the_same_address(sound: SimulatedBench, wire: str) -> None:
    """An instrument that names itself differently after a reopen is refused by both names, until the first is back."""
    meter = ScpiMeter(sound.ready[wire], "scpi-analyser")
    first = meter.identify()
    sound.control(fault="wrong-identity")
    with pytest.raises(AnswerError, match=f"before.*{first.serial}|{first.serial} .*before"):
        meter.reopen()
    meter.reopen()
    assert meter.identify() == first
    meter.close()


@pytest.mark.parametrize("wire", WIRES)
def test_a_bench_that_is_gone(wire: str) -> None:
    """When the instrument's process ends, the next sweep and every reopen are ConnectionLost; nothing hangs."""
    bench = SimulatedBench(parts=1)
    meter = ScpiMeter(bench.ready[wire], "scpi-analyser", timeout_s=0.4)
    meter.identify()
    bench.close()
    for call in (lambda: meter.sweep(F_HZ, 1.0), meter.reopen, meter.reopen):
        with pytest.raises(ConnectionLost):
            call()


def test_drives_in_and_out_of_range(sound: SimulatedBench) -> None:
    """A drive in the dialect's range is taken, one outside it never reaches the instrument."""
    meter = ScpiMeter(sound.ready["socket"], "scpi-analyser")
    meter.sweep(F_HZ, 0.5)
    with pytest.raises(ResourceError):
        meter.sweep(F_HZ, 50.0)
    meter.sweep(F_HZ, 2.0)
    meter.close()


def test_a_lot_goes_through_handler_and_scanner() -> None:
    """Each part is brought, scanned, told its verdict; AGAIN keeps it; at the end there is no more."""
    bench = SimulatedBench(parts=3, seed=2)
    scanner, handler = SerialScanner(bench.ready["scanner"]), SerialHandler(bench.ready["handler"])
    serials = []
    for outcome, grade in (("pass", "A"), ("fail", None), ("hold", None)):
        assert handler.next_part(10.0) is True
        serials.append(scanner.read(10.0))
        handler.signal("again", None)
        handler.signal(outcome, grade)
    assert handler.next_part(10.0) is False
    with pytest.raises(AnswerError, match="handler answered it cannot"):
        handler.signal("pass", None)
    scanner.close()
    handler.close()
    bench.close()
    assert len(set(serials)) == 3
    assert all(serials)


def test_a_stuck_handler(sound: SimulatedBench) -> None:
    """A handler that neither does nor answers is NoAnswer, with the hint to hold; READY brings both in step again."""
    handler = SerialHandler(sound.ready["handler"], ack_timeout_s=0.3)
    sound.control(fault="handler-stuck")
    with pytest.raises(NoAnswer, match="hold"):
        handler.signal("again", None)
    assert handler.next_part(5.0) is True
    handler.signal("again", None)
    handler.close()
