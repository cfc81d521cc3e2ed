"""The simulated analyser, message by message, without any connection."""

from __future__ import annotations

import numpy as np
import pytest

from sim_instruments.analyser import Analyser
from sim_instruments.bench import Bench
from sim_instruments.scpi import MessageBuffer
from sim_instruments.status import QUEUE_LENGTH

pytest_plugins = ["sim_served"]


@pytest.fixture
def analyser(bench: Bench) -> Analyser:
    """A fresh instrument with the first part in its fixture."""
    bench.feed()
    return Analyser(bench, seed=7)


def numbers(response: bytes) -> np.ndarray:
    """The numbers of a text response."""
    return np.array([float(text) for text in response.decode("ascii").rstrip("\n").split(",")])


# message → response, each to a fresh instrument
TALK = [
    (b"*IDN?", b"Hollowmere Instruments,ZA-12,HM00007,1.2.0\n"),
    (b"*OPC?", b"1\n"),
    (b"*TST?", b"0\n"),
    (b"*WAI;*CLS;*RST", b""),
    (b"*ESE 36;*ESE?;*SRE 255;*SRE?", b"36;191\n"),
    (b"SYSTem:ERRor:NEXT?", b'0,"No error"\n'),
    (b"syst:err?;:SYST:VERS?", b'0,"No error";1999.0\n'),
    (b"FREQ:MODE LIST;MODE?", b"LIST\n"),
    (b"SENS:LIST:FREQ 1e3,1.65MHZ,2E6;FREQ?", b"+1.000000000000E+03,+1.650000000000E+06,+2.000000000000E+06\n"),
    (b"SENSE1:LIST:FREQ 1e3,2e3;FREQ:POINts?", b"2\n"),
    (b"AVER:COUN 16;COUN?", b"16\n"),
    (b"AVER:COUN MAX;COUN?;COUN MIN;COUN?", b"999;1\n"),
    (b"SOUR:VOLT 500MV;VOLT?", b"+5.000000E-01\n"),
    (b"FORM?;FORM REAL;FORM?;FORM ASC;FORM?", b"ASC;REAL,64;ASC\n"),
    (b"FORM:BORD?;BORD SWAPped;BORD?", b"NORM;SWAP\n"),
    (b"INIT;*OPC?", b"1\n"),
    (b"LIST:FREQ 3e6,1e6;:INIT:IMM;:TRAC:DATA? FREQuency", b"+3.000000000000E+06,+1.000000000000E+06\n"),
    (b"FORM REAL,64;:INIT;:TRAC? FREQ", b"#18\x40\x8f\x40\x00\x00\x00\x00\x00\n"),
    (b"FORM REAL,64;:FORM:BORD SWAP;:INIT;:TRAC? FREQ", b"#18\x00\x00\x00\x00\x00\x40\x8f\x40\n"),
]

# message → error number, event bit (SCPI-1999 vol. 2 §21.8, references.md §10)
ERRORS = [
    (b"FOO?", -113, 32),
    (b"LIST:FREQ 1e3;INIT", -113, 32),
    (b"SENS2:LIST:FREQ?", -114, 32),
    (b"VOLT 1", -113, 32),
    (b"*IDN", -113, 32),
    (b"*IDN? 1", -108, 32),
    (b"LIST:FREQ", -109, 32),
    (b"TRAC?", -109, 32),
    (b"AVER:COUN 1,2", -108, 32),
    (b"AVER:COUN many", -104, 32),
    (b"SOUR:VOLT 1HZ", -131, 32),
    (b"*ESE 1V", -138, 32),
    (b"\xc3\xa4", -101, 32),
    (b"LIST:FREQ 1e3,5", -222, 16),
    (b"LIST:FREQ 1e8", -222, 16),
    (b"SOUR:VOLT 3", -222, 16),
    (b"AVER:COUN 0", -222, 16),
    (b"*ESE 256", -222, 16),
    (b"LIST:FREQ " + b",".join([b"1e3"] * 4002), -223, 16),
    (b"FREQ:MODE SWEep", -224, 16),
    (b"FORM REAL,32", -224, 16),
    (b"TRAC? IMP", -230, 16),
    (b"TRAC? PHASE", -224, 16),
    (b"INIT;:AVER:COUN 2;:TRAC? IMP", -230, 16),
    (b"INIT;*RST;TRAC? IMP", -230, 16),
    (b"*TRG", -211, 16),
]


@pytest.mark.parametrize(("message", "response"), TALK)
def test_talk(analyser: Analyser, message: bytes, response: bytes) -> None:
    """Every command and query answers as its table says, and no error is left."""
    assert analyser.respond(message) == response
    assert analyser.respond(b"SYST:ERR?") == b'0,"No error"\n'


@pytest.mark.parametrize(("message", "response"), TALK)
def test_talk_in_single_bytes(analyser: Analyser, message: bytes, response: bytes) -> None:
    """The same, arriving byte by byte after a broken message."""
    buffer = MessageBuffer()
    stream = b"?junk\n*CLS\n" + message + b"\n"
    messages = [found for at in range(len(stream)) for found in buffer.feed(stream[at : at + 1])]
    assert b"".join(analyser.respond(found) for found in messages) == response


@pytest.mark.parametrize(("message", "code", "bit"), ERRORS)
def test_error(analyser: Analyser, message: bytes, code: int, bit: int) -> None:
    """Each mistake queues its own number and sets its class's event bit, and nothing is answered."""
    analyser.respond(b"*ESR?")
    assert analyser.respond(message) == b""
    assert analyser.respond(b"SYST:ERR:COUN?") == b"1\n"
    assert analyser.respond(b"SYST:ERR?").startswith(f"{code},".encode())
    assert analyser.respond(b"*ESR?;*ESR?") == f"{bit};0\n".encode()


def test_command_error_ends_its_message_and_execution_error_does_not(analyser: Analyser) -> None:
    """After an undefined header the rest is not carried out; after a value out of range it is."""
    assert analyser.respond(b"*OPC?;FOO;*OPC?") == b"1\n"
    assert analyser.respond(b"SOUR:VOLT 99;*OPC?") == b"1\n"


def test_refused_setting_changes_nothing(analyser: Analyser) -> None:
    """A list with one frequency out of range is not taken in part."""
    assert analyser.respond(b"LIST:FREQ 1e3,2e3;FREQ 1e3,1e9;FREQ:POIN?") == b"2\n"


def test_error_queue_overflows_into_its_last_entry(analyser: Analyser) -> None:
    """A full queue ends in −350, oldest first; *CLS empties it."""
    for _ in range(QUEUE_LENGTH + 3):
        analyser.respond(b"FOO")
    codes = [analyser.respond(b"SYST:ERR?").split(b",")[0] for _ in range(QUEUE_LENGTH + 1)]
    assert codes == [b"-113"] * (QUEUE_LENGTH - 1) + [b"-350", b"0"]
    assert analyser.respond(b"FOO;;*CLS\n*CLS;SYST:ERR?") == b'0,"No error"\n'


def test_status_byte_sums_up(analyser: Analyser) -> None:
    """Error queue, event summary and master summary, each behind its enable."""
    analyser.respond(b"*ESR?;*ESE 1")
    assert analyser.respond(b"*STB?") == b"0\n"
    analyser.respond(b"*OPC")
    assert analyser.respond(b"*STB?") == b"32\n"
    analyser.respond(b"*SRE 32;FOO")
    assert analyser.respond(b"*STB?") == b"100\n"
    assert analyser.status.byte(message_available=True) == 116


def test_power_on_is_the_first_event(bench: Bench) -> None:
    """A fresh instrument has just been switched on."""
    assert Analyser(bench).respond(b"*ESR?") == b"128\n"


def test_readings_are_the_part_within_the_stated_errors(analyser: Analyser, bench: Bench) -> None:
    """Noise 0.15 % a component, gain within 0.1 %, averages as √n, seven digits, the same in text and in blocks."""
    f_hz = np.linspace(1.0e6, 1.2e6, 1001)  # off resonance, where 2 ppm of frequency are nothing
    true = bench.lot[0].impedance(f_hz, 1.0)
    analyser.respond(b"LIST:FREQ " + ",".join(map(repr, f_hz.tolist())).encode())
    for averages, sigma in ((1, 0.0015), (16, 0.0015 / 4)):
        analyser.respond(f"AVER:COUN {averages};:INIT".encode())
        text = analyser.respond(b"FORM ASC;:TRAC? IMP")
        readings = numbers(text)
        assert text.count(b",") == 2001
        assert max(len(part.split(b"E")[0].strip(b"+-")) for part in text.split(b",")) == 8
        analyser.respond(b"FORM REAL")
        assert np.array_equal(np.frombuffer(analyser.respond(b"TRAC? IMP")[7:-1], ">f8"), readings)
        error = (readings[::2] + 1j * readings[1::2] - true) / np.abs(true)
        assert 0.9 * sigma < np.std(error.real) < 1.1 * sigma
        assert 0.9 * sigma < np.std(error.imag) < 1.1 * sigma
        assert np.abs(np.mean(error)) < 0.001 + 4 * sigma / np.sqrt(1001)


def test_seed_decides(bench: Bench) -> None:
    """The same seed and messages give the same bytes; another seed, other bytes and another serial number."""
    talk = b"LIST:FREQ 1e6,1.65e6;:INIT;:TRAC? IMP;*IDN?"
    first, again, other = (Analyser(bench, seed=seed).respond(talk) for seed in (3, 3, 4))
    assert first == again
    assert first != other


def test_sweep_states_its_time(bench: Bench) -> None:
    """Points × averages × time a point, for the server to wait."""
    analyser = Analyser(bench, s_per_point=1e-3)
    assert analyser.answer(b"LIST:FREQ 1e3,2e3,3e3;:AVER:COUN 4").busy_s == 0
    assert analyser.answer(b"INIT;*OPC?").busy_s == pytest.approx(12e-3)


def test_empty_fixture_reads_its_stray_capacitance(bench: Bench) -> None:
    """Nothing in the fixture is an open, not an error."""
    x_ohm = numbers(Analyser(bench).respond(b"LIST:FREQ 1e6;:AVER:COUN 99;:INIT;:TRAC? IMP"))[1]
    assert x_ohm == pytest.approx(-1 / (2 * np.pi * 1e6 * 4e-12), rel=0.003)
