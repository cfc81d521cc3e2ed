"""The meter driver against a made-up instrument: what it says, what it takes, what it refuses."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from driver_servers import FakeMeter
from hypothesis import given, settings
from hypothesis import strategies as st

from drivers.codec.block import encode_block, encode_numbers
from drivers.dialect import load_dialect, shipped_dialects
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
from drivers.meter import MOST_ERRORS, ScpiMeter
from drivers.roles import Meter, Trace

F_HZ = np.array([1.65e6, 1.66e6, 1.64e6, 1.65e6])
DIALECTS = {name: load_dialect(name) for name in shipped_dialects()}


def meter_to(fake: FakeMeter, name: str = "scpi-analyser", **changes: object) -> ScpiMeter:
    fake.transfer = DIALECTS[name].answer
    return ScpiMeter("fake", replace(DIALECTS[name], **changes), 0.1, opener=fake.open)  # type: ignore[arg-type]


def assert_right(trace: Trace, f_hz: np.ndarray) -> None:
    np.testing.assert_allclose(trace.f_hz, f_hz, rtol=1e-9)
    np.testing.assert_allclose(trace.z_ohm, 10 + f_hz / 1e6 - 5j, rtol=1e-9)


@pytest.mark.parametrize("name", sorted(DIALECTS))
def test_a_sweep_in_every_shipped_dialect(name: str) -> None:
    """Frequencies in any order, repeated ones too, come back with their impedances in that order."""
    meter: Meter = meter_to(FakeMeter(), name)
    assert_right(meter.sweep(F_HZ, 1.0), F_HZ)
    assert_right(meter.sweep([1e3], 0.5), np.array([1e3]))
    meter.close()


def test_the_conversation_in_order() -> None:
    """Clear, set, ask for errors, ask back, trigger, wait, read, ask for errors: in this order and nothing else."""
    fake = FakeMeter()
    meter = meter_to(fake)
    identity = meter.identify()
    assert fake.sent == ["*RST", "*CLS", "*IDN?", "*IDN?"]
    assert (identity.maker, identity.model, identity.serial, identity.firmware) == ("Maker", "Model", "Serial", "1.0")
    assert (identity.u_z_relative, identity.u_f_relative, identity.noise_relative) == (0.001, 2e-6, 0.0015)
    fake.sent.clear()
    meter.sweep([1.65e6], 0.5)
    assert fake.sent == [
        "*CLS",
        "SENSe:AVERage:COUNt 1",
        "SENSe:FREQuency:MODE LIST",
        "SENSe:LIST:FREQuency 1.650000000E+06",
        "SOURce:VOLTage 5.000000E-01",
        "FORMat:DATA REAL,64",
        "FORMat:BORDer NORMal",
        "SYSTem:ERRor:NEXT?",
        "SENSe:LIST:FREQuency:POINts?",
        "SOURce:VOLTage?",
        "INITiate:IMMediate",
        "*OPC?",
        "TRACe:DATA? FREQ",
        "TRACe:DATA? IMP",
        "SYSTem:ERRor:NEXT?",
    ]


def test_words_a_dialect_leaves_out_are_not_sent() -> None:
    """Without reset and asking back, those are skipped and the sweep still stands."""
    fake = FakeMeter()
    assert_right(meter_to(fake, reset="", points="", drive="").sweep(F_HZ, 1.0), F_HZ)
    assert not {"*RST", "SOURce:VOLTage?", "SENSe:LIST:FREQuency:POINts?"} & set(fake.sent)


def test_more_points_than_a_list_holds() -> None:
    """A longer sweep is measured in several lists and put together again."""
    fake = FakeMeter()
    f_hz = np.linspace(1e6, 2e6, 11)
    assert_right(meter_to(fake, max_points=4).sweep(f_hz, 1.0), f_hz)
    assert fake.sent.count("INITiate:IMMediate") == 3


@pytest.mark.parametrize(("order", "number"), [("little", "float64"), ("big", "float32"), ("little", "float32")])
def test_other_block_formats(order: str, number: str) -> None:
    """A dialect may have 32-bit numbers and the other byte order."""
    fake = FakeMeter()
    fake.numbers = lambda values: encode_block(encode_numbers(values, number, order))  # type: ignore[method-assign]
    trace = meter_to(fake, block_order=order, block_number=number).sweep(F_HZ, 1.0)
    np.testing.assert_allclose(trace.z_ohm, 10 + F_HZ / 1e6 - 5j, rtol=1e-6)


# What an answer is made to be → the error → a word in its sentence. A completed answer that cannot be used leaves the
# connection good; one that cannot be right drops it.
def _block(values: list[float]) -> bytes:
    return encode_block(encode_numbers(np.array(values))) + b"\n"


READINGS = [1.0, -1.0] * 4
SPOILED: list[tuple[str, bytes, type[DriverError], str]] = [
    ("TRACe:DATA? IMP", _block([*READINGS[:5], math.nan, 1, 1]), NotUsable, "not a number"),
    ("TRACe:DATA? IMP", _block([*READINGS[:5], 9.91e37, 1, 1]), NotUsable, "not a number"),
    ("TRACe:DATA? IMP", _block([9.9e37, *READINGS[1:]]), NotUsable, r"overload\) at 1650000 Hz"),
    ("TRACe:DATA? IMP", _block([1, -9.9e37, *READINGS[2:]]), NotUsable, "1 of 4 readings"),
    ("TRACe:DATA? IMP", _block([math.inf] * 8), NotUsable, "4 of 4 readings"),
    ("TRACe:DATA? FREQ", _block([1.65e6, 1.66e6, 1.64e6, 1.650002e6]), NotUsable, "1650002 Hz measured"),
    ("TRACe:DATA? FREQ", _block([math.nan] * 4), NotUsable, "4 of 4 frequencies"),
    ("TRACe:DATA? FREQ", _block([1.66e6, 1.65e6, 1.64e6, 1.65e6]), NotUsable, "2 of 4 frequencies"),
    ("SOURce:VOLTage?", b"0.5\n", NotUsable, "set 0.5 V"),
    ("SOURce:VOLTage?", b"NAN\n", NotUsable, "set nan V"),
    ("SENSe:LIST:FREQuency:POINts?", b"3\n", NotUsable, "took 3"),
    ("*OPC?", b"0\n", AnswerError, "expected '1'"),
    ("*OPC?", b"\n", AnswerError, "expected '1'"),
    ("*OPC?", b"", NoAnswer, "answer"),
    ("TRACe:DATA? IMP", _block(READINGS[:6]), AnswerError, "expected 8 numbers, got 6"),
    ("TRACe:DATA? IMP", _block([*READINGS, 1.0]), AnswerError, "more than the 64 expected"),
    ("TRACe:DATA? IMP", b"#9999999999", AnswerError, "more than the 64 expected"),
    ("TRACe:DATA? IMP", _block(READINGS)[:-20], NoAnswer, "answer"),
    ("TRACe:DATA? IMP", _block(READINGS)[:-1] + b"1\n", AnswerError, "after the block"),
    ("TRACe:DATA? IMP", b"1,2,3,4,5,6,7,8\n", AnswerError, "block begins with '#'"),
    ("TRACe:DATA? IMP", b"#0" + b"A" * 64 + b"\n", AnswerError, "indefinite"),
    ("TRACe:DATA? IMP", b"#17ABCDEFG\n", AnswerError, "8-byte"),
    ("TRACe:DATA? FREQ", b"-113,what\n", AnswerError, "block begins with '#'"),
    ("SYSTem:ERRor:NEXT?", b"no error\n", AnswerError, "error queue"),
    ("SYSTem:ERRor:NEXT?", b'-310,"System error"\n', AnswerError, "does not end"),
    ("SOURce:VOLTage?", b"\xb11.0\n", AnswerError, "not text"),
    ("INITiate:IMMediate", b"1\n", OutOfStep, "nobody asked"),
]


@pytest.mark.parametrize(("question", "answer", "kind", "says"), SPOILED, ids=[f"{row[0]} {row[3]}" for row in SPOILED])
def test_spoiled_answers(question: str, answer: bytes, kind: type[DriverError], says: str) -> None:
    """Each wrong answer is the error it ought to be, naming the resource; after a reopen, if needed, all is well."""
    fake = FakeMeter()
    meter = meter_to(fake)
    meter.identify()
    fake.answers[question] = answer
    with pytest.raises(kind, match=says) as caught:
        meter.sweep(F_HZ, 1.0)
    assert type(caught.value) is kind
    assert caught.value.resource == "fake"
    fake.answers.clear()
    if kind is not NotUsable:
        with pytest.raises(OutOfStep, match="given up"):
            meter.sweep(F_HZ, 1.0)
        meter.reopen()
    assert_right(meter.sweep(F_HZ, 1.0), F_HZ)
    assert fake.opened == (1 if kind is NotUsable else 2)


@pytest.mark.parametrize("answer", [b"1,2,3\n", b"1,2,3,4,5,6,7,8,9\n", b"\n", b"1,2,3,4,5,6,7,x\n", b"#12AB\n"])
def test_spoiled_text_answers(answer: bytes) -> None:
    """Text with too few, too many or no numbers is AnswerError."""
    fake = FakeMeter()
    fake.answers["TRACe:DATA? IMP"] = answer
    with pytest.raises(AnswerError):
        meter_to(fake, "scpi-analyser-text").sweep(F_HZ, 1.0)


def test_errors_in_the_queue_are_all_reported() -> None:
    """Everything in the queue is in the sentence; the sweep is not triggered when the settings were refused."""
    fake = FakeMeter()
    meter = meter_to(fake)
    meter.identify()
    fake.errors = ['-222,"Data out of range"', '-113,"Undefined header"']
    with pytest.raises(InstrumentError, match=r'-222,"Data out of range"; -113,"Undefined header"'):
        meter.sweep(F_HZ, 1.0)
    assert "INITiate:IMMediate" not in fake.sent
    assert not fake.errors
    assert_right(meter.sweep(F_HZ, 1.0), F_HZ)


def test_errors_during_the_sweep_spoil_it() -> None:
    """An error that turns up after the readings makes them worthless, however good they look."""
    fake = FakeMeter()
    respond = fake.respond

    def failing(data: bytes) -> bytes:
        if data == b"TRACe:DATA? IMP\n":
            fake.errors.append('-240,"Hardware error"')
        return respond(data)

    fake.respond = failing  # type: ignore[method-assign]
    with pytest.raises(InstrumentError, match="Hardware error"):
        meter_to(fake).sweep(F_HZ, 1.0)


def test_a_full_queue_is_emptied() -> None:
    """As many errors as the queue may hold are drained before anyone is told."""
    fake = FakeMeter()
    meter = meter_to(fake)
    fake.errors = ['-113,"Undefined header"'] * (MOST_ERRORS - 1)
    with pytest.raises(InstrumentError):
        meter.sweep(F_HZ, 1.0)
    assert not fake.errors


def test_another_instrument_after_reopening() -> None:
    """A different identity than before is AnswerError naming both, each time, until the first one is back."""
    fake = FakeMeter()
    meter = meter_to(fake)
    meter.identify()
    fake.identity = b"Maker,Model,Other,1.0"
    for call in (meter.reopen, meter.reopen):
        with pytest.raises(AnswerError, match=r"Maker Model Other 1\.0 .* Maker Model Serial 1\.0"):
            call()
    with pytest.raises(OutOfStep):
        meter.sweep(F_HZ, 1.0)
    fake.identity = b"Maker,Model,Serial,1.0"
    meter.reopen()
    assert_right(meter.sweep(F_HZ, 1.0), F_HZ)


def test_another_instrument_without_reopening() -> None:
    """A different identity in an open connection is refused just the same."""
    fake = FakeMeter()
    meter = meter_to(fake)
    meter.identify()
    fake.identity = b"Maker,Model,Other,1.0"
    with pytest.raises(AnswerError, match="answers here now"):
        meter.identify()
    meter.close()
    with pytest.raises(AnswerError, match="answers here now"):
        meter.sweep(F_HZ, 1.0)


def test_an_instrument_that_is_not_there_then_is() -> None:
    """Failing to connect needs a reopen, like any other trouble of the wire."""
    fake = FakeMeter()
    there = [False]

    def opener(resource: str, timeout_s: float) -> object:
        if not there[0]:
            raise ConnectionLost("nobody is there.", resource=resource)
        return fake.open(resource, timeout_s)

    meter = ScpiMeter("fake", "scpi-analyser", opener=opener)  # type: ignore[arg-type]
    for kind, call in ((ConnectionLost, meter.identify), (OutOfStep, meter.identify), (ConnectionLost, meter.reopen)):
        with pytest.raises(kind):
            call()
    there[0] = True
    meter.reopen()
    assert meter.identify().maker == "Maker"


def test_an_interrupt_drops_the_connection() -> None:
    """Ctrl-C in a sweep leaves no connection on which its answer could turn up later."""
    fake = FakeMeter()
    meter = meter_to(fake)
    respond = fake.respond

    def interrupted(data: bytes) -> bytes:
        if data == b"*OPC?\n":
            raise KeyboardInterrupt
        return respond(data)

    fake.respond = interrupted  # type: ignore[method-assign]
    with pytest.raises(KeyboardInterrupt):
        meter.sweep(F_HZ, 1.0)
    with pytest.raises(OutOfStep, match="KeyboardInterrupt"):
        meter.identify()


def test_the_wait_grows_with_the_points() -> None:
    """Completion is waited for as long as the points may take, other answers only the plain timeout."""
    fake = FakeMeter()
    waits: dict[int, set[float]] = {}

    def opener(resource: str, timeout_s: float) -> object:
        wire = fake.open(resource, timeout_s)
        read_line = wire.read_line
        wire.read_line = lambda wait_s: waits.setdefault(fake.f_hz.size, set()).add(wait_s) or read_line(wait_s)  # type: ignore[func-returns-value, method-assign, assignment]
        return wire

    meter = ScpiMeter("fake", "scpi-analyser", 2.0, opener=opener)  # type: ignore[arg-type]
    for points in (1, 400):
        meter.sweep(np.linspace(1e6, 2e6, points), 1.0)
    assert waits[1] == {2.0, 2.0 + 0.05}
    assert waits[400] == {2.0, 2.0 + 400 * 0.05}


@pytest.mark.parametrize("f_hz", [[], [math.nan], [-1.0], [0.0], [math.inf], [1.65e6, 2e9], [[1e6, 2e6]]])
def test_plans_the_meter_does_not_have(f_hz: list[float]) -> None:
    """Frequencies outside the dialect's range, or none, are refused before a word is sent."""
    fake = FakeMeter()
    with pytest.raises(ResourceError):
        meter_to(fake).sweep(f_hz, 1.0)
    assert not fake.sent


@pytest.mark.parametrize("drive_v", [0.0, -1.0, math.nan, math.inf, 100.0])
def test_drives_the_meter_does_not_have(drive_v: float) -> None:
    """A drive outside the dialect's range is refused before a word is sent."""
    fake = FakeMeter()
    with pytest.raises(ResourceError, match="drive"):
        meter_to(fake).sweep(F_HZ, drive_v)
    assert not fake.sent


def test_bad_resource_or_dialect_is_known_when_made() -> None:
    """A wrong resource string or dialect is refused at once, before anything is connected."""
    with pytest.raises(ResourceError, match="no resource known"):
        ScpiMeter("COM3", "scpi-analyser")
    with pytest.raises(ResourceError, match="no dialect"):
        ScpiMeter("TCPIP::127.0.0.1::1::SOCKET", "no-such-dialect")


QUESTIONS = ["*IDN?", "*OPC?", "SYSTem:ERRor:NEXT?", "SOURce:VOLTage?", "TRACe:DATA? FREQ", "TRACe:DATA? IMP"]


@settings(deadline=None)
@given(
    question=st.sampled_from(QUESTIONS),
    answer=st.one_of(
        st.binary(max_size=90),
        st.text('#0123456789+-.,eE"\n', max_size=30).map(str.encode),
        st.binary(min_size=64, max_size=64).map(lambda data: encode_block(data) + b"\n"),
    ),
    name=st.sampled_from(sorted(DIALECTS)),
)
def test_any_answer_to_any_question(question: str, answer: bytes, name: str) -> None:
    """Whatever an instrument says, a sweep gives finite impedances at the asked frequencies or a DriverError."""
    fake = FakeMeter()
    fake.answers[question] = answer
    outcome: Trace | DriverError = _outcome(lambda: meter_to(fake, name).sweep(F_HZ, 1.0))
    if isinstance(outcome, Trace):
        assert np.isfinite(outcome.z_ohm).all()
        np.testing.assert_allclose(outcome.f_hz, F_HZ, rtol=1.1e-6)
    else:
        assert outcome.resource == "fake"


def _outcome(call: Callable[[], Trace]) -> Trace | DriverError:
    try:
        return call()
    except DriverError as exc:
        return exc
