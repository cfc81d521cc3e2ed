"""The SCPI syntax of the simulated instruments: one table both ways, whole and byte by byte."""

from __future__ import annotations

import struct

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sim_instruments import scpi
from sim_instruments.scpi import Command, MessageBuffer, ScpiError

# message → commands as (header, is query, parameters)
MESSAGES = [
    (b"*IDN?", [("*IDN", True, ())]),
    (b"  *idn? \r", [("*IDN", True, ())]),
    (b"", []),
    (b";;", []),
    (b"LIST:FREQ 1,2.5 , 3E3", [("LIST:FREQ", False, ("1", "2.5", "3E3"))]),
    (b"LIST:FREQ?;FREQ:POIN?", [("LIST:FREQ", True, ()), ("LIST:FREQ:POIN", True, ())]),
    (b"LIST:FREQ 1;:INIT;*OPC?", [("LIST:FREQ", False, ("1",)), ("INIT", False, ()), ("*OPC", True, ())]),
    (b"form:bord swap;*WAI;data real,64", [
        ("FORM:BORD", False, ("swap",)), ("*WAI", False, ()), ("FORM:DATA", False, ("real", "64"))]),
    (b":SYST:ERR?;VERS?", [("SYST:ERR", True, ()), ("SYST:VERS", True, ())]),
    (b"TRAC? 'a;b,c', IMP", [("TRAC", True, ("'a;b,c'", "IMP"))]),
]  # fmt: skip

BROKEN = [
    (b"\xff", -101),
    (b"?", -102),
    (b"1ABC", -102),
    (b"FREQ:MODE,LIST", -111),
    (b"FREQ::MODE", -110),
    (b"SENSITIVITYLONG:X 1", -112),
    (b"LIST:FREQ 1,,2", -109),
    (b"TRAC? 'a", -151),
]

# text, unit → value
NUMBERS = [
    ("1", "", 1.0),
    ("+.5", "", 0.5),
    ("-2.", "", -2.0),
    ("1e3", "", 1000.0),
    ("1 E +3", "", 1000.0),
    ("1.65MHZ", "HZ", 1650000.0),
    ("1650 khz", "HZ", 1650000.0),
    ("500MV", "V", 0.5),
    ("500 uv", "V", 0.0005),
    ("2MAV", "V", 2000000.0),
]
NO_NUMBERS = [
    ("abc", "", -104),
    ("1.2.3", "", -121),
    ("1e99999", "", -123),
    ("5V", "HZ", -131),
    ("5HZ", "", -138),
    ("'5'", "", -158),
    ("#15", "", -168),
]


@pytest.mark.parametrize(("message", "commands"), MESSAGES)
def test_message_becomes_commands(message: bytes, commands: list[tuple[str, bool, tuple[str, ...]]]) -> None:
    """Paths, colons, common commands, quotes and spaces, as the standard reads them."""
    assert list(scpi.parse(message)) == [Command(*command) for command in commands]


@pytest.mark.parametrize(("message", "code"), BROKEN)
def test_broken_message_has_its_error_number(message: bytes, code: int) -> None:
    """Each kind of broken syntax is told apart."""
    with pytest.raises(ScpiError) as caught:
        list(scpi.parse(message))
    assert caught.value.code == code


def test_units_before_a_broken_one_are_commands() -> None:
    """What came before the mistake has been carried out already."""
    units = scpi.parse(b"*CLS;FREQ::X;*RST")
    assert next(units) == Command("*CLS", False, ())
    with pytest.raises(ScpiError):
        next(units)


@pytest.mark.parametrize(("text", "unit", "value"), NUMBERS)
def test_number_is_read(text: str, unit: str, value: float) -> None:
    """NRf with suffixes; M is mega before HZ and milli elsewhere (IEEE 488.2 §7.7.3)."""
    assert scpi.number(text, unit) == value


@pytest.mark.parametrize(("text", "unit", "code"), NO_NUMBERS)
def test_what_is_no_number_has_its_error_number(text: str, unit: str, code: int) -> None:
    """Each way not to be a number is told apart."""
    with pytest.raises(ScpiError) as caught:
        scpi.number(text, unit)
    assert caught.value.code == code


@pytest.mark.parametrize(
    ("pattern", "count", "some"),
    [
        ("*IDN", 1, {"*IDN"}),
        ("SYSTem:ERRor[:NEXT]", 8, {"SYST:ERR", "SYSTEM:ERROR:NEXT", "SYST:ERROR"}),
        ("[SENSe:]LIST:FREQuency:POINts", 12, {"LIST:FREQ:POIN", "SENS:LIST:FREQUENCY:POIN"}),
    ],
)
def test_spellings(pattern: str, count: int, some: set[str]) -> None:
    """Long and short forms, optional nodes present and absent, and no others."""
    assert scpi.spellings(pattern) >= some
    assert len(scpi.spellings(pattern)) == count


@pytest.mark.parametrize(("messages"), [[m for m, _ in MESSAGES if m], [b"X #15AB\nCD", b"Y #H1F", b"Z #0", b"#"]])
def test_stream_is_cut_alike_in_any_pieces(messages: list[bytes]) -> None:
    """Whole and byte by byte give the same messages, line feeds inside a block being data."""
    stream = b"".join(message + b"\n" for message in messages)
    assert MessageBuffer().feed(stream) == messages
    buffer = MessageBuffer()
    assert [found for at in range(len(stream)) for found in buffer.feed(stream[at : at + 1])] == messages
    assert buffer.end() == []


def test_rest_is_a_message_at_the_end() -> None:
    """An END apart from the bytes ends what is held."""
    buffer = MessageBuffer()
    assert buffer.feed(b"*RST\n*IDN?") == [b"*RST"]
    assert buffer.end() == [b"*IDN?"]


def test_endless_message_overruns() -> None:
    """A message without end is thrown away with −363, and the next one is read."""
    buffer = MessageBuffer()
    with pytest.raises(ScpiError) as caught:
        buffer.feed(b"A" * (scpi.LONGEST_INPUT + 1))
    assert caught.value.code == -363
    assert buffer.feed(b"*IDN?\n") == [b"*IDN?"]


def test_block_that_cannot_be_is_not_waited_for() -> None:
    """A count beyond any block's ends at the line feed as other text does."""
    assert MessageBuffer().feed(b"X #9999999999\n") == [b"X #9999999999"]


# IEEE 488.2 §8.7.9, cases of a public SCPI parser's unit tests (references.md §10)
@pytest.mark.parametrize(("payload", "wire"), [(b"AB", b"#12AB"), (b"X1234567890", b"#211X1234567890"), (b"", b"#10")])
def test_block(payload: bytes, wire: bytes) -> None:
    """The count has as many digits as it needs."""
    assert scpi.block(payload) == wire


@settings(deadline=None)
@given(st.lists(st.floats(allow_nan=False, allow_infinity=False), max_size=20))
def test_doubles_travel_exactly(values: list[float]) -> None:
    """Both byte orders give back the same bits."""
    array = np.array(values, dtype=float)
    for swapped, order in ((False, ">"), (True, "<")):
        wire = scpi.real64(array, swapped)
        digits = int(wire[1:2])
        assert int(wire[2 : 2 + digits]) == 8 * len(values)
        assert struct.unpack(f"{order}{len(values)}d", wire[2 + digits :]) == tuple(values)


@settings(deadline=None)
@given(st.lists(st.integers(-(10**7) + 1, 10**7 - 1), min_size=1, max_size=20), st.integers(-12, 12))
def test_text_numbers_travel_exactly(mantissas: list[int], exponent: int) -> None:
    """Seven digits with exponent, out and in again."""
    values = [float(f"{mantissa}e{exponent}") for mantissa in mantissas]
    assert [scpi.number(text) for text in scpi.nr3(values).decode().split(",")] == values


@settings(deadline=None)
@given(st.binary(max_size=60))
def test_any_bytes_are_commands_or_an_error(message: bytes) -> None:
    """Nothing but ScpiError comes out of noise, and it is a command error."""
    code = -100
    try:
        assert all(command.header for command in scpi.parse(message))
    except ScpiError as error:
        code = error.code
    assert -200 < code <= -100
