"""Scripted faults: when they open, how often they strike, and what each does to a response."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from sim_instruments.analyser import Analyser, Answer
from sim_instruments.bench import Bench
from sim_instruments.faults import TARGETS, Event, Fault, FaultBook, FaultMistake, read_fault, read_faults

pytest_plugins = ["sim_served"]

LIST = b"LIST:FREQ 1E6,1.2E6,1.4E6,1.6E6,1.8E6"


def talked(bench: Bench, *faults: Fault) -> tuple[Analyser, list[Answer]]:
    """A short measurement under the faults: list, sweep, completion, readings."""
    bench.feed()
    analyser = Analyser(bench, seed=1, faults=FaultBook(faults))
    return analyser, [analyser.answer(message) for message in (LIST, b"INIT;*OPC?", b"TRAC? IMP")]


def numbers(answer: Answer) -> np.ndarray:
    """The numbers of a text response."""
    return np.array([float(text) for text in answer.data.decode("ascii").split(",")])


def test_no_fault_is_clean(bench: Bench) -> None:
    """What the others are compared with."""
    _, answers = talked(bench)
    assert [len(answer.data) > 0 for answer in answers] == [False, True, True]
    assert not any(answer.cut or answer.drop or answer.late_s for answer in answers)


def test_silence_swallows_one_answer(bench: Bench) -> None:
    """The command is carried out all the same."""
    _, (_, complete, readings) = talked(bench, Fault("silence"))
    assert complete.data == b""
    assert len(numbers(readings)) == 10


def test_late_answer_is_whole_and_late(bench: Bench) -> None:
    """Only its time is wrong."""
    _, (_, complete, readings) = talked(bench, Fault("late-answer", seconds=2.5))
    assert (complete.data, complete.late_s, readings.late_s) == (b"1\n", 2.5, 0)


def test_half_block_is_cut_in_its_middle(bench: Bench) -> None:
    """Half the bytes, no end; the same for a block."""
    _, (_, _, readings) = talked(bench, Fault("half-block"))
    _, (_, _, whole) = talked(bench)
    assert readings.cut
    assert readings.data == whole.data[: len(whole.data) // 2]


def test_wrong_count_is_one_point_short(bench: Bench) -> None:
    """A sound response of eight numbers instead of ten, in text and in blocks."""
    _, (_, _, readings) = talked(bench, Fault("wrong-count"))
    assert len(numbers(readings)) == 8
    analyser, _ = talked(bench, Fault("wrong-count", times=2))
    assert analyser.respond(b"FORM REAL;:TRAC? IMP").startswith(b"#264")


@pytest.mark.parametrize(("name", "number"), [("nan", 9.91e37), ("infinity", 9.9e37)])
def test_special_number(bench: Bench, name: str, number: float) -> None:
    """As SCPI-1999 vol. 1 §7.2.1 writes what is no number and what is too large."""
    _, (_, _, readings) = talked(bench, Fault(name))
    assert np.count_nonzero(numbers(readings) == number) == 2


def test_garbage_is_no_response(bench: Bench) -> None:
    """As long as the answer would have been, and not one byte of it is ASCII but the end."""
    _, (_, _, readings) = talked(bench, Fault("garbage", command="TRAC?"))
    _, (_, _, whole) = talked(bench)
    assert len(readings.data) == len(whole.data)
    assert min(readings.data[:-1]) >= 0x80


def test_error_in_queue_waits_to_be_read(bench: Bench) -> None:
    """The answers look right; the queue says that they are not, and clearing before the sweep does not help."""
    bench.feed()
    analyser = Analyser(bench, faults=FaultBook([Fault("error-in-queue")]))
    analyser.respond(b"*CLS")
    assert analyser.respond(b"INIT;*OPC?") == b"1\n"
    assert analyser.respond(b"TRAC? IMP").count(b",") == 1
    assert analyser.respond(b"SYST:ERR?;ERR?") == b'-240,"Hardware error";0,"No error"\n'


def test_wrong_identity(bench: Bench) -> None:
    """Another maker answers once."""
    analyser, _ = talked(bench, Fault("wrong-identity"))
    wrong, right = analyser.respond(b"*IDN?"), analyser.respond(b"*IDN?")
    assert wrong.split(b",")[:2] != right.split(b",")[:2]
    assert wrong.count(b",") == 3


def test_frequency_not_accepted_is_read_back(bench: Bench) -> None:
    """The middle one moves by 0.1 %, in the list and in the trace."""
    analyser, _ = talked(bench, Fault("frequency-not-accepted"))
    for query in (b"LIST:FREQ?", b"TRAC? FREQ"):
        back = numbers(Answer(analyser.respond(query)))
        assert np.flatnonzero(back != [1e6, 1.2e6, 1.4e6, 1.6e6, 1.8e6]).tolist() == [2]
        assert back[2] == pytest.approx(1.4014e6)


def test_drop_connection_answers_nothing(bench: Bench) -> None:
    """The first command is the last on that connection."""
    _, (first, second, _) = talked(bench, Fault("drop-connection", command="INIT"))
    assert not first.drop
    assert second == Answer(drop=True)


@pytest.mark.parametrize("name", ["contact-bounce", "part-pulled-out"])
def test_sweep_fault_reads_open_in_places(bench: Bench, name: str) -> None:
    """Some reactances are those of the open fixture."""
    _, (_, _, readings) = talked(bench, Fault(name))
    open_ohm = bench.empty(np.array([1e6, 1.2e6, 1.4e6, 1.6e6, 1.8e6]), 1.0).imag
    lifted = np.isclose(numbers(readings)[1::2], open_ohm, rtol=0.02)
    assert lifted.any()
    assert not lifted.all()


@pytest.mark.parametrize(
    ("when", "struck"),
    [
        (None, [1, 2]),
        ("at once", [1, 2]),
        ("sweep 2", [2, 3]),
        (3, [3, 4]),
        ("command *IDN? 3", [3, 4]),
        ("command trace:data? imp 2", [2, 3]),
        ("command TRAC? 4", [4]),
        ("sweep 9", []),
    ],
)
def test_moment_and_times(bench: Bench, when: object, struck: list[int]) -> None:
    """A fault opens at its moment and strikes the next two sweeps of four."""
    bench.feed()
    fault = read_fault({"name": "nan", "when": when, "times": 2})
    analyser = Analyser(bench, faults=FaultBook([fault]))
    readings = [analyser.respond(b"*IDN?;INIT;:TRAC? IMP") for _ in range(4)]
    assert [n for n, text in enumerate(readings, start=1) if b"9.910000E+37" in text] == struck


def test_cleared_faults_do_not_strike() -> None:
    """Disarming leaves nothing pending."""
    book = FaultBook([Fault("silence"), Fault("nan")])
    assert book.pending() == ["silence", "nan"]
    book.clear()
    assert book.pending() == []
    assert book.strikes(Event(frozenset({"query"}))) == {}


@pytest.mark.parametrize("name", TARGETS)
def test_every_fault_strikes_its_own_kind_once(name: str) -> None:
    """New faults are counted on arrival."""
    book = FaultBook([Fault(name)])
    assert book.strikes(Event(frozenset({"nothing of the kind"}))) == {}
    event = Event(frozenset({TARGETS[name]}))
    assert list(book.strikes(event)) == [name]
    assert book.strikes(event) == {}


def test_file_of_faults() -> None:
    """TOML tables in order."""
    text = '[[fault]]\nname = "half-block"\nwhen = "sweep 3"\n[[fault]]\nname = "silence"\nwhen = "command *OPC? 2"\n'
    assert read_faults(text) == [Fault("half-block", sweep=3), Fault("silence", command="*OPC?", nth=2)]


@pytest.mark.parametrize(
    ("table", "sentence"),
    [
        ({"name": "gremlin"}, "there is no fault 'gremlin'; there are silence"),
        ({}, "there is no fault 'None'"),
        ({"name": "nan", "wen": 1}, "no key 'wen'"),
        ({"name": "nan", "times": 0}, "'times' must be a whole number from 1 up"),
        ({"name": "nan", "times": True}, "'times' must be"),
        ({"name": "nan", "seconds": "7"}, "'seconds' must be"),
        ({"name": "nan", "when": "soon"}, "'when' must be"),
        ({"name": "nan", "when": 0}, "'when' must be"),
        ({"name": "nan", "when": "sweep 0"}, "'when' must be"),
    ],
)
def test_mistaken_fault_is_told_in_a_sentence(table: dict[str, Any], sentence: str) -> None:
    """What is wrong, and what would do."""
    with pytest.raises(FaultMistake) as caught:
        read_fault(table)
    assert sentence in str(caught.value)


@pytest.mark.parametrize("text", ["[[fault", "fault = 1", "[fault]\nname='nan'", "[[faults]]\nname='nan'"])
def test_mistaken_file_is_told_in_a_sentence(text: str) -> None:
    """Not TOML, not tables, not the key."""
    with pytest.raises(FaultMistake):
        read_faults(text)
