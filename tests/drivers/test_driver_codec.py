"""Codec: one table both ways, whole and in pieces and with junk; published cases; anything at all."""

from __future__ import annotations

import itertools
import math
import struct
from collections.abc import Callable

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from drivers.codec import block, lines, text
from drivers.errors import AnswerError

BLOCKS = [
    (b"", b"#10"),
    (b"AB", b"#12AB"),
    (b"X1234567890", b"#211X1234567890"),
    (b"\n\r\n#10", b"#16\n\r\n#10"),
    (b"\n" * 1000, b"#41000" + b"\n" * 1000),
    (bytes(range(256)), b"#3256" + bytes(range(256))),
]

LISTS = [
    ([], ""),
    ([1.0], "1.000000000E+00"),
    ([1.65e6, -2.5, 0.0], "1.650000000E+06,-2.500000000E+00,0.000000000E+00"),
]

# Codes and texts: SCPI-1999 vol. 2 §21.8; the quoting: IEEE 488.2 §8.7.8.
ERRORS = [
    (text.ErrorEntry(0, "No error"), '0,"No error"'),
    (text.ErrorEntry(-113, "Undefined header"), '-113,"Undefined header"'),
    (text.ErrorEntry(-350, "Queue overflow"), '-350,"Queue overflow"'),
    (text.ErrorEntry(-222, 'Data out of range;"FREQ", 5'), '-222,"Data out of range;""FREQ"", 5"'),
    (text.ErrorEntry(101, ""), '101,""'),
]

IDENTITIES = [
    (text.IdnFields("Maker", "Model 7", "S-1", "1.0"), "Maker,Model 7,S-1,1.0"),
    (text.IdnFields("Maker", "Model", "0", "1.0,build 3"), "Maker,Model,0,1.0,build 3"),
]

VERDICTS = [
    (("pass", "A"), b"VERDICT PASS A\n"),
    (("pass", None), b"VERDICT PASS -\n"),
    (("pass", "band 2"), b"VERDICT PASS band_2\n"),
    (("fail", None), b"VERDICT FAIL\n"),
    (("hold", None), b"VERDICT HOLD\n"),
    (("again", "A"), b"VERDICT AGAIN\n"),
]

HANDLER_LINES = [
    (lines.HandlerLine("PRESENT"), b"PRESENT"),
    (lines.HandlerLine("EMPTY"), b"EMPTY\r"),
    (lines.HandlerLine("ACK"), b"ACK "),
    (lines.HandlerLine("NAK", "the tray is full"), b"NAK the tray is full"),
    (lines.HandlerLine("NAK"), b"NAK"),
]


@pytest.mark.parametrize(("payload", "wire"), BLOCKS)
def test_block_both_ways(payload: bytes, wire: bytes) -> None:
    """A payload becomes its block, and the block its payload, with nothing left over."""
    assert block.encode_block(payload) == wire
    assert block.decode_block(wire) == (payload, b"")


@pytest.mark.parametrize(("payload", "wire"), BLOCKS)
def test_block_byte_by_byte(payload: bytes, wire: bytes) -> None:
    """Fed single bytes, the reader is done at the last byte and not before, and never asks beyond the block."""
    reader = block.BlockReader()
    for at in range(len(wire)):
        assert 0 < reader.wants <= len(wire) - at
        assert reader.feed(wire[at : at + 1]) == b""
    assert reader.wants == 0
    assert reader.payload == payload


@pytest.mark.parametrize(("payload", "wire"), BLOCKS)
@pytest.mark.parametrize("junk", [b"\n", b"\r\n", b"#12AB", b"\x00" * 40])
def test_block_leaves_what_follows(payload: bytes, wire: bytes, junk: bytes) -> None:
    """Bytes after a block are handed back whole."""
    assert block.decode_block(wire + junk) == (payload, junk)


# Cases of the open-source SCPI parser's own tests, as collected in references.md §10; the first is "#210ABCD, invalid".
@pytest.mark.parametrize("wire", [b"#210ABCD", b"#13AB", b"#12", b"#1", b"#", b"#204ABC"])
def test_published_incomplete_blocks(wire: bytes) -> None:
    """A block that is not all there is an AnswerError, and the reader still wants bytes."""
    reader = block.BlockReader()
    reader.feed(wire)
    assert reader.wants > 0
    with pytest.raises(AnswerError, match="broke off"):
        block.decode_block(wire)


def test_published_complete_blocks() -> None:
    """#12AB, #204ABCD (count with a leading zero) and #211X1234567890 read as published (references.md §10)."""
    assert block.decode_block(b"#12AB")[0] == b"AB"
    assert block.decode_block(b"#204ABCD")[0] == b"ABCD"
    assert block.decode_block(b"#211X1234567890")[0] == b"X1234567890"


def test_published_block_of_two_floats() -> None:
    """#18 and eight bytes are two big-endian 32-bit floats (references.md §10)."""
    payload, _ = block.decode_block(b"#18" + struct.pack(">2f", 1.5, -2.25))
    assert block.decode_numbers(payload, "float32", "big").tolist() == [1.5, -2.25]


def test_indefinite_block_takes_the_message() -> None:
    """#0 runs to the newline that ends the message, newlines inside included (IEEE 488.2 §8.7.10)."""
    assert block.decode_block(b"#0AB\nCD\n") == (b"AB\nCD", b"")
    with pytest.raises(AnswerError, match="indefinite"):
        block.BlockReader().feed(b"#0AB")


@pytest.mark.parametrize("wire", [b"AB", b"1.0,2.0", b"#H10", b"#x", b"#2x1A", b"#3 12", b"\n", b"-113"])
def test_what_is_no_block(wire: bytes) -> None:
    """An answer that cannot be a block is refused at once, with its first bytes in the sentence."""
    with pytest.raises(AnswerError) as caught:
        block.decode_block(wire + b"0" * 400)
    assert wire[:1] in caught.value.text.encode() or wire == b"\n"
    assert len(caught.value.text) < 200


def test_too_long_a_block_is_refused_by_its_header() -> None:
    """A count beyond what was asked for is refused before anyone waits for it."""
    with pytest.raises(AnswerError, match="999999999 bytes, more than the 64"):
        block.BlockReader(most_bytes=64).feed(b"#9999999999")


@pytest.mark.parametrize("number", sorted(block.NUMBERS))
@pytest.mark.parametrize("byte_order", sorted(block.BYTE_ORDERS))
def test_numbers_both_ways(number: str, byte_order: str) -> None:
    """Every number format and byte order gives back the same numbers; an odd byte is refused."""
    values = np.array([0.0, -0.0, 1.5, -2.25e6, math.inf, 9.5e37])
    payload = block.encode_numbers(values, number, byte_order)
    np.testing.assert_allclose(block.decode_numbers(payload, number, byte_order), values, rtol=1e-7)
    with pytest.raises(AnswerError, match="whole count"):
        block.decode_numbers(payload + b"\0", number, byte_order)


def test_big_endian_is_the_standard_normal() -> None:
    """1.0 in 64 bits, FORMat:BORDer NORMal, begins with its sign and exponent (SCPI-1999 vol. 2, FORMat)."""
    assert block.encode_numbers(np.array([1.0]), "float64", "big") == b"\x3f\xf0" + b"\0" * 6


@pytest.mark.parametrize(("values", "wire"), LISTS)
def test_number_lists_both_ways(values: list[float], wire: str) -> None:
    """Numbers become text, and the text the same numbers."""
    assert text.encode_list(values) == wire
    assert text.decode_list(wire).tolist() == values


@pytest.mark.parametrize("form", ["1650000", "+1650000", "1650000.", "1.65E6", "1.65e+06", " 1.65E+06 ", ".165E7"])
def test_every_form_of_a_number(form: str) -> None:
    """NR1, NR2 and NR3, with or without sign, are the same number (IEEE 488.2 §8.7.2–4)."""
    assert text.decode_number(form) == 1.65e6


@pytest.mark.parametrize("wrong", ["", "1_000", "0x10", "1,5", "nan1", "infinity", "1e", "1.2.3", "--1", "١", "1 2"])
def test_what_is_no_number(wrong: str) -> None:
    """What Python might take as a number and SCPI does not is refused."""
    with pytest.raises(AnswerError, match="expected a number"):
        text.decode_number(wrong)


@pytest.mark.parametrize(
    ("wire", "value"),
    [
        ("9.91E37", math.nan),
        ("+9.910000E+37", math.nan),
        ("9.9E37", math.inf),
        ("9.9e+37", math.inf),
        ("-9.9E37", -math.inf),
        ("NAN", math.nan),
        ("INF", math.inf),
        ("NINF", -math.inf),
        ("9.89E37", 9.89e37),
        ("9.905E37", 9.905e37),
    ],
)
def test_what_stands_for_no_number(wire: str, value: float) -> None:
    """9.91E37 is not a number, ±9.9E37 infinity (SCPI-1999 vol. 1 §7.2.1.4, .5); their neighbours are numbers."""
    np.testing.assert_equal(text.decode_number(wire), value)


def test_sentinels_survive_32_bits() -> None:
    """The sentinels are still recognised after a trip through a 32-bit float."""
    sent = block.encode_numbers(np.array([9.91e37, 9.9e37, -9.9e37, 1.0]), "float32")
    got = text.replace_sentinels(block.decode_numbers(sent, "float32"))
    np.testing.assert_equal(got, [math.nan, math.inf, -math.inf, 1.0])


@pytest.mark.parametrize(("entry", "wire"), ERRORS)
def test_error_entries_both_ways(entry: text.ErrorEntry, wire: str) -> None:
    """An error entry becomes its line and back."""
    assert text.encode_error(entry) == wire
    assert text.decode_error(wire) == entry


@pytest.mark.parametrize("wire", ['+0,"No error"', "0 , 'No error'", '  0,"No error"  '])
def test_error_entries_as_others_write_them(wire: str) -> None:
    """A plus sign, single quotes and blanks make no difference."""
    assert text.decode_error(wire) == text.ErrorEntry(0, "No error")


@pytest.mark.parametrize("wire", ["", "0", "No error", '"No error"', '0,"No error', "0,No error", '0,"a"b"', "1"])
def test_what_is_no_error_entry(wire: str) -> None:
    """Anything else is refused, never read as an empty queue."""
    with pytest.raises(AnswerError, match="error queue"):
        text.decode_error(wire)


@pytest.mark.parametrize(("fields", "wire"), IDENTITIES)
def test_identities_both_ways(fields: text.IdnFields, wire: str) -> None:
    """Four fields become a line and back."""
    assert text.encode_identity(fields) == wire
    assert text.decode_identity(wire) == fields


def test_identities_with_fields_missing() -> None:
    """Missing fields are empty; no field at all, or control characters, are refused."""
    assert text.decode_identity("Maker") == text.IdnFields("Maker", "", "", "")
    assert text.decode_identity("A, B ,C") == text.IdnFields("A", "B", "C", "")
    for wrong in ("", " , ,", "A,B\x07,C,D"):
        with pytest.raises(AnswerError):
            text.decode_identity(wrong)


def test_integers() -> None:
    """NR1 is read; a fraction is not an integer."""
    assert text.decode_integer(" +401 ") == 401
    with pytest.raises(AnswerError, match="whole number"):
        text.decode_integer("4.01E2")


def test_text_is_ascii() -> None:
    """Bytes beyond ASCII are no SCPI text."""
    assert text.to_text(b"1\r\n") == "1"
    with pytest.raises(AnswerError, match="not text"):
        text.to_text(b"\xff1")


@pytest.mark.parametrize(("verdict", "wire"), VERDICTS)
def test_verdict_lines(verdict: tuple[str, str | None], wire: bytes) -> None:
    """Each outcome has its line; a grade goes with a pass alone."""
    assert lines.encode_verdict(*verdict) == wire


@pytest.mark.parametrize(
    "verdict", [("PASS", None), ("no verdict", None), ("pass", ""), ("pass", "-"), ("pass", "A\n")]
)
def test_verdicts_that_no_line_can_carry(verdict: tuple[str, str | None]) -> None:
    """An unknown outcome, or a grade that would break the line or read as none, is refused."""
    with pytest.raises(ValueError, match=r"outcomes|grade"):
        lines.encode_verdict(*verdict)


@pytest.mark.parametrize(("said", "wire"), HANDLER_LINES)
def test_handler_lines(said: lines.HandlerLine, wire: bytes) -> None:
    """A handler's line is its word, and for NAK the sentence."""
    assert lines.decode_handler_line(wire) == said


@pytest.mark.parametrize("wire", [b"", b"present", b"ACKNOWLEDGED", b"ACK ACK", b"PRESENT 3", b"\xff\xfe", b"READY"])
def test_what_a_handler_never_says(wire: bytes) -> None:
    """Any other line is refused, an echo of our own too."""
    with pytest.raises(AnswerError, match="expected PRESENT"):
        lines.decode_handler_line(wire)


def test_serials() -> None:
    """Blanks around a serial go; control characters, bad UTF-8 and nothing at all are refused."""
    assert lines.decode_serial(b" MD-0001 ") == "MD-0001"
    for wrong in (b"", b"  ", b"MD\x1b0001", b"\xff\xfe\x80"):
        with pytest.raises(AnswerError, match="not a serial"):
            lines.decode_serial(wrong)


DECODERS: list[Callable[[bytes], object]] = [
    lambda data: block.decode_block(data),
    lambda data: block.decode_numbers(data),
    lambda data: block.decode_numbers(data, "float32", "little"),
    lambda data: text.decode_list(text.to_text(data)),
    lambda data: text.decode_number(text.to_text(data)),
    lambda data: text.decode_integer(text.to_text(data)),
    lambda data: text.decode_error(text.to_text(data)),
    lambda data: text.decode_identity(text.to_text(data)),
    lambda data: text.decode_string(text.to_text(data)),
    lambda data: lines.decode_handler_line(data),
    lambda data: lines.decode_serial(data),
]
NEARLY = st.one_of(
    st.binary(max_size=80),
    st.text("#0123456789ABE+-.,\"' \n", max_size=40).map(str.encode),
    st.binary(max_size=30).map(block.encode_block),
)


@settings(deadline=None)
@given(data=NEARLY)
def test_any_bytes_give_a_value_or_an_answer_error(data: bytes) -> None:
    """Whatever comes, every decoder returns or raises AnswerError with a sentence, and nothing else."""
    for decode in DECODERS:
        sentence = "."
        try:
            decode(data)
        except AnswerError as exc:
            sentence = exc.text
        assert sentence.endswith(".")


@settings(deadline=None)
@given(payload=st.binary(max_size=300), cuts=st.lists(st.integers(0, 320), max_size=8), junk=st.binary(max_size=20))
def test_blocks_in_any_pieces(payload: bytes, cuts: list[int], junk: bytes) -> None:
    """However a block and what follows are cut, the same payload comes out and the rest is handed back."""
    stream = block.encode_block(payload) + junk
    edges = [0, *sorted(min(cut, len(stream)) for cut in cuts), len(stream)]
    reader, rest = block.BlockReader(), b""
    for start, end in itertools.pairwise(edges):
        rest += reader.feed(stream[start:end])
    assert (reader.payload, rest) == (payload, junk)


@settings(deadline=None)
@given(
    fields=st.tuples(*[st.text("abcXYZ 0123.-", max_size=8).map(str.strip)] * 4), entry=st.text("a\"'b,;", max_size=9)
)
def test_text_round_trips(fields: tuple[str, str, str, str], entry: str) -> None:
    """Identities and quoted strings come back as they were."""
    if any(fields):
        assert text.decode_identity(text.encode_identity(text.IdnFields(*fields))) == text.IdnFields(*fields)
    assert text.decode_string(text.encode_string(entry)) == entry
