"""The loop over a lot: tries, verdicts out, refusals, stopping, faults. The bench is a fake, the store is real."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from run_fakes import SWEEPS_A_PART, FakeBench, FakeStation, Turns, fault, job, limits, new_store

from harness.bench import BenchFault
from harness.errors import SetupError, StationError
from harness.judging.limit_file import parse_limits
from harness.records import Verdict
from harness.run.events import BenchTrouble, Ended, Event, Held, PassedOver, Recorded, Refused, Waiting
from harness.run.lot import screen_lot
from harness.run.part import Job
from harness.run.serials import FromKeyboard, FromList, FromScanner, Numbered, SerialSource
from harness.store import Store

A, B, C = "MD-0001", "MD-0002", "MD-0003"
ANYTHING = '".*"'


@pytest.fixture
def store(tmp_path: Path) -> Iterator[Store]:
    with new_store(tmp_path) as made:
        yield made


def screened(
    store: Store, bench: FakeBench, source: SerialSource | None = None, of: Job | None = None, looks: int = 60
) -> list[Event]:
    """All events of a lot; told to stop after so many looks, as a scanner never ends by itself."""
    return list(screen_lot(FakeStation(store, bench), of or job(), source or FromScanner(bench), Turns(looks)))  # type: ignore[arg-type]


def verdicts(events: list[Event]) -> list[tuple[str, int, str, bool]]:
    """Serial, try, verdict and whether final, of each record in order."""
    found = [event.record for event in events if isinstance(event, Recorded)]
    return [(r.opening.serial, r.opening.number, r.judgement.verdict.value, r.final) for r in found]


def refusals(events: list[Event]) -> list[tuple[str, str]]:
    return [(event.serial, event.text) for event in events if isinstance(event, Refused)]


def handled(*serials: str) -> FakeBench:
    """A bench whose handler brings these parts and whose scanner reads their codes."""
    return FakeBench(serials, handler=True, codes=list(serials))


# ── tries ────────────────────────────────────────────────────────────────────────────────────


def test_pass_and_fail_are_signalled_with_the_grade(store: Store) -> None:
    """The handler hears pass with its grade and fail without; the end counts both."""
    bench = handled(A, B)
    bench.is_part(B, fs_hz=1.68e6)
    events = screened(store, bench)
    assert verdicts(events) == [(A, 1, "pass", True), (B, 1, "fail", True)]
    assert bench.told() == [("pass", "M"), ("fail", None)]
    assert isinstance(events[-1], Ended)
    assert (events[-1].judged, events[-1].refused) == (2, 0)


def test_signal_comes_after_the_record_is_durable(store: Store) -> None:
    """When the handler is told a verdict, the store gives it already; also for ``again``."""
    bench = handled(A, B)
    bench.is_open(A)
    standing: list[tuple[str, str]] = []
    signal = bench.signal

    def looked(outcome: str, grade: str | None) -> None:
        found = store.standing("L-7", bench.put)
        assert found is not None
        standing.append((outcome, f"{found.verdict.value} {found.number}"))
        signal(outcome, grade)

    bench.signal = looked  # type: ignore[method-assign]
    screened(store, bench)
    assert standing == [("again", "no verdict 1"), ("hold", "no verdict 2"), ("pass", "pass 1")]


@pytest.mark.parametrize("attempts", [1, 2, 3])
def test_no_verdict_is_repeated_up_to_attempts_then_hold(store: Store, attempts: int) -> None:
    """So many tries as the limit file says; the last is final and the part goes to hold."""
    bench = handled(A)
    bench.is_open(A)
    events = screened(store, bench, of=job(limits(attempts=str(attempts))))
    expected = [(A, k, "no verdict", k == attempts) for k in range(1, attempts + 1)]
    assert verdicts(events) == expected
    assert bench.told() == [("again", None)] * (attempts - 1) + [("hold", None)]


def test_second_try_that_passes_ends_the_tries(store: Store) -> None:
    """A fault at the first try, none at the second: pass, and no third try although three are allowed."""
    bench = handled(A)
    bench.fails_at_sweep(2, "no-answer")
    events = screened(store, bench, of=job(limits(attempts="3")))
    assert verdicts(events) == [(A, 1, "no verdict", False), (A, 2, "pass", True)]
    assert bench.told() == [("again", None), ("pass", "M")]


@pytest.mark.parametrize(("fs_hz", "verdict"), [(1.68e6, "fail"), (1.65e6, "pass")])
def test_verdict_stands_and_a_second_presentation_goes_to_hold(store: Store, fs_hz: float, verdict: str) -> None:
    """A part failed or passed in this lot is not measured again: refused with the word, and on hold."""
    bench = FakeBench([A, A, B], handler=True, codes=[A, A, B])
    bench.is_part(A, fs_hz=fs_hz)
    events = screened(store, bench)
    assert [one[:3] for one in verdicts(events)] == [(A, 1, verdict), (B, 1, "pass")]
    ((serial, text),) = refusals(events)
    assert serial == A
    assert f"already judged in this lot: {verdict} at 2026-03-02T08:" in text
    assert [outcome for outcome, _ in bench.told()] == [verdict, "hold", "pass"]
    assert bench.sweeps == 2 * SWEEPS_A_PART
    assert len(store.history(A)) == 1
    assert isinstance(events[-1], Ended)
    assert (events[-1].judged, events[-1].refused) == (2, 1)


def test_part_held_without_verdict_may_come_again(store: Store) -> None:
    """What was held without a verdict is measured when somebody presents it again; its tries count on."""
    bench = FakeBench([A, A], handler=True, codes=[A, A])
    bench.fails_at_sweep(1, "no-answer")
    bench.fails_at_sweep(2, "no-answer")
    events = screened(store, bench)
    assert verdicts(events) == [(A, 1, "no verdict", False), (A, 2, "no verdict", True), (A, 3, "pass", True)]


# ── codes ────────────────────────────────────────────────────────────────────────────────────


def test_code_against_the_pattern_goes_to_hold_unmeasured(store: Store) -> None:
    """A code of another part number's form is refused by its pattern; the part goes to hold and nothing is opened."""
    bench = FakeBench([A, B], handler=True, codes=["XX-1", B])
    events = screened(store, bench)
    ((serial, text),) = refusals(events)
    assert (serial, text) == ("XX-1", r"serial 'XX-1' does not match this part number's pattern MD-\d{4,6}.")
    assert [outcome for outcome, _ in bench.told()] == ["hold", "pass"]
    assert [summary.serial for summary in store.lot_summaries("L-7")] == [B]


def test_part_without_a_code_goes_to_hold(store: Store) -> None:
    """A handler's part whose code does not come within 20 turns of 0.5 s is refused and held; the next is measured."""
    bench = FakeBench([A, B], handler=True, codes=[None] * 20 + [B])
    events = screened(store, bench)
    assert refusals(events) == [("", "no code was read within 10 s; the part goes to hold.")]
    assert [outcome for outcome, _ in bench.told()] == ["hold", "pass"]
    assert verdicts(events) == [(B, 1, "pass", True)]
    assert (
        next(event.text for event in events if isinstance(event, Waiting))
        == "The handler brings the parts; the scanner reads their codes."
    )


def test_late_code_does_not_name_the_next_part(store: Store) -> None:
    """A code that comes when its part is on its way to hold is refused, and the next part waits for its own."""
    bench = FakeBench([A, B], handler=True, codes=[None] * 20 + [f"early {A}", B])
    events = screened(store, bench)
    assert [serial for serial, _ in refusals(events)] == [A, ""]
    assert verdicts(events) == [(B, 1, "pass", True)]


def test_without_a_handler_the_station_waits_for_a_code(store: Store) -> None:
    """No handler: no limit to the wait, and the prompt is told once a part."""
    bench = FakeBench(codes=[None] * 30 + [A, None, B])
    events = screened(store, bench, looks=70)
    assert verdicts(events) == [(A, 1, "pass", True), (B, 1, "pass", True)]
    assert [e.text for e in events if isinstance(e, Waiting)] == ["Load a part and scan its code."] * 3


def test_refused_code_at_a_hand_station_keeps_the_next_code(store: Store) -> None:
    """Without a handler the wrong code is refused and the right one, scanned at once after it, counts."""
    bench = FakeBench(codes=["XX-1", A])
    events = screened(store, bench)
    assert refusals(events)[0][0] == "XX-1"
    assert verdicts(events) == [(A, 1, "pass", True)]


@pytest.mark.parametrize("handler", [False, True])
def test_torn_code_is_told_and_the_next_one_counts(store: Store, handler: bool) -> None:
    """A torn or smudged scan ends nothing: it is told, and another scan of the same part is taken."""
    bench = FakeBench([A], handler=handler, codes=[fault("bad-answer"), A])
    events = screened(store, bench)
    assert [event.text for event in events if isinstance(event, BenchTrouble)] == [fault("bad-answer").sentence()]
    assert verdicts(events) == [(A, 1, "pass", True)]


def test_scanner_gone_ends_the_run(store: Store) -> None:
    """A scanner that is unplugged is station trouble: exit code 3, nothing opened."""
    bench = FakeBench([A], handler=True, codes=[fault("connection-lost")])
    with pytest.raises(BenchFault) as caught:
        screened(store, bench)
    assert caught.value.exit_code == 3
    assert store.lot_summaries("L-7") == ()
    assert store.interrupted() == ()


# ── lists, keyboard, numbers ─────────────────────────────────────────────────────────────────


def test_handler_empty_with_serials_left(store: Store) -> None:
    """The list is longer than the tray: each serial left over is refused by name, and the run ends."""
    bench = FakeBench([A], handler=True)
    events = screened(store, bench, FromList([A, B, C]))
    assert verdicts(events) == [(A, 1, "pass", True)]
    text = "the handler has no more parts; this serial was not measured."
    assert refusals(events) == [(B, text), (C, text)]
    assert events[-1] == Ended(1, 2, "")


def test_codes_count_for_nothing_where_serials_come_from_a_list(store: Store) -> None:
    """A scanner that reads along while a list names the parts refuses nobody and names nobody."""
    bench = FakeBench([A, B], handler=True, codes=["early MD-0009", "early MD-0008"])
    events = screened(store, bench, FromList([A, B]))
    assert [one[0] for one in verdicts(events)] == [A, B]
    assert refusals(events) == []


def test_list_at_a_hand_station_asks_for_each_part(store: Store) -> None:
    """Without a handler each part of the list is asked for by its serial; the end of input ends the lot."""
    bench, answers = FakeBench(), iter(["\n", "\n", ""])
    events = screened(store, bench, FromList([A, B, C], lambda: next(answers)))
    assert [one[0] for one in verdicts(events)] == [A, B]
    asked = [event.text for event in events if isinstance(event, Waiting)]
    assert asked == [f"Load part {serial}, then Enter. Ctrl-D ends the lot." for serial in (A, B, C)]
    assert events[-1] == Ended(2, 0, "")


def test_list_passes_over_judged_serials_without_asking_for_them(store: Store) -> None:
    """On a lot taken up again nobody has to load a part that is judged already."""
    screened(store, FakeBench(), FromList([A]))
    events = screened(store, FakeBench(), FromList([A, B], lambda: "\n"))
    assert [event.serial for event in events if isinstance(event, PassedOver)] == [A]
    assert refusals(events) == []
    waits = [event.text for event in events if isinstance(event, Waiting)]
    assert waits == [f"Load part {B}, then Enter. Ctrl-D ends the lot."]


def test_keyboard_lot(store: Store) -> None:
    """Typed serials, an empty line and the end of input: two parts, prompted for each, identity "typed"."""
    lines = iter([f"{A}\n", "\n", f"  {B} \n", ""])
    events = screened(store, FakeBench(scanner=False), FromKeyboard(lambda: next(lines)))
    assert [one[0] for one in verdicts(events)] == [A, B]
    assert {record.record.opening.identity for record in store.records_of_lot("L-7")} == {"typed"}
    assert sum(isinstance(event, Waiting) for event in events) == 3


def test_keyboard_with_a_handler_prompts_before_it_waits(store: Store) -> None:
    """The prompt comes once the handler has brought the part, before the blocking read."""
    bench = FakeBench([A], handler=True, scanner=False)
    told: list[str] = []

    def read_line() -> str:
        assert told[-1].startswith("Load a part and type its serial")
        return f"{A}\n"

    for event in screen_lot(FakeStation(store, bench), job(), FromKeyboard(read_line), Turns(40)):  # type: ignore[arg-type]
        told += [event.text] if isinstance(event, Waiting) else []
    assert bench.told() == [("pass", "M")]


def test_numbered_parts_go_by_lot_tray_and_position(store: Store) -> None:
    """Trays of two: the third part is the first of the second tray; the pattern of labels does not apply."""
    bench = FakeBench(["a", "b", "c"], handler=True)
    events = screened(store, bench, Numbered("L-7", 2, 0, None))
    assert [one[0] for one in verdicts(events)] == ["L-7-T01-P01", "L-7-T01-P02", "L-7-T02-P01"]
    assert {record.record.opening.identity for record in store.records_of_lot("L-7")} == {"auto"}


def test_numbered_parts_by_hand_end_with_the_input(store: Store) -> None:
    """Enter for each part; the end of input ends the lot without using a number up."""
    answers = iter(["\n", ""])
    events = screened(store, FakeBench(), Numbered("L-7", 20, 0, lambda: next(answers)))
    assert [one[0] for one in verdicts(events)] == ["L-7-T01-P01"]


# ── stopping ─────────────────────────────────────────────────────────────────────────────────


def test_stop_ends_after_the_part_in_hand_and_its_tries(store: Store) -> None:
    """Asked to stop at the first command to the meter, the part still gets all its tries and its signal."""
    bench = handled(A, B)
    bench.is_open(A)
    asked: list[bool] = []
    bench.on_sweep = lambda: asked.append(True)
    events = list(screen_lot(FakeStation(store, bench), job(), FromScanner(bench), lambda: bool(asked)))  # type: ignore[arg-type]
    assert verdicts(events) == [(A, 1, "no verdict", False), (A, 2, "no verdict", True)]
    assert bench.told() == [("again", None), ("hold", None)]
    assert isinstance(events[-1], Ended)


@pytest.mark.parametrize("source", [lambda bench: FromScanner(bench), lambda bench: FromList([A])])
def test_stop_while_the_handler_brings_nothing(store: Store, source: Callable[[FakeBench], SerialSource]) -> None:
    """A stop is heard between two looks at a silent handler; the wait is told once, no serial is refused."""
    bench = FakeBench([A], handler=True)
    bench.silent_turns = 1000
    events = screened(store, bench, source(bench), looks=10)
    assert [event.text for event in events if isinstance(event, Waiting)] == [
        "Waiting for the handler to bring a part."
    ]
    assert refusals(events) == []
    assert events[-1] == Ended(0, 0, "")


def test_slow_handler_is_waited_for(store: Store) -> None:
    """Three turns of silence, then the part: measured as ever."""
    bench = handled(A)
    bench.silent_turns = 3
    assert verdicts(screened(store, bench)) == [(A, 1, "pass", True)]


# ── faults ───────────────────────────────────────────────────────────────────────────────────


def test_fault_reopens_the_bench_and_the_lot_goes_on(store: Store) -> None:
    """A fault within a part: recorded with its code, one reopening before the next try, and then the next part."""
    bench = handled(A, B)
    bench.fails_at_sweep(3, "connection-lost")
    events = screened(store, bench)
    assert verdicts(events) == [(A, 1, "no verdict", False), (A, 2, "pass", True), (B, 1, "pass", True)]
    first = store.history(A)[0].record
    assert first.judgement.reasons[0].code == "connection-lost"
    assert bench.did.count(("reopen",)) == 1
    assert bench.did.index(("reopen",)) < bench.did.index(("signal", "again", None))
    trouble = [event.text for event in events if isinstance(event, BenchTrouble)]
    assert trouble == [fault("connection-lost").sentence(), "The bench was reopened."]


def test_sweep_without_a_verdict_needs_no_reopening(store: Store) -> None:
    """An open lead is the part's trouble: the connection is left as it is."""
    bench = handled(A)
    bench.is_open(A)
    screened(store, bench)
    assert ("reopen",) not in bench.did


def test_two_failed_reopenings_are_told_and_the_third_leads_on(store: Store) -> None:
    """Up to three tries to reopen; the third that succeeds lets the lot go on."""
    bench = handled(A)
    bench.fails_at_sweep(1, "no-answer")
    bench.reopen_faults = [fault("no-answer"), fault("bad-answer")]
    events = screened(store, bench)
    assert verdicts(events)[-1] == (A, 2, "pass", True)
    told = [event.text for event in events if isinstance(event, BenchTrouble)]
    assert [text[:37] for text in told[1:3]] == [f"Reopening the bench, try {k} of 3: fake" for k in (1, 2)]
    assert told[3] == "The bench was reopened."


def test_bench_not_reopened_in_three_tries_ends_with_exit_3(store: Store) -> None:
    """Three failures: StationError with the last one's words; the record is there, and no try came after it."""
    bench = handled(A, B)
    bench.fails_at_sweep(1, "no-answer")
    bench.reopen_faults = [fault("no-answer")] * 3
    with pytest.raises(StationError) as caught:
        screened(store, bench)
    assert caught.value.exit_code == 3
    assert "could not be reopened in 3 tries" in str(caught.value)
    assert "invented trouble of the kind no-answer" in str(caught.value)
    assert "recorded" in caught.value.remedy
    (stored,) = store.history(A)
    assert stored.record.judgement.reasons[0].code == "no-answer"
    assert store.interrupted() == ()
    assert bench.did.count(("reopen",)) == 3
    assert bench.told() == []


@pytest.mark.parametrize(("fs_hz", "verdict"), [(1.65e6, Verdict.PASS), (1.68e6, Verdict.FAIL)])
def test_handler_that_does_not_acknowledge_ends_with_exit_3(store: Store, fs_hz: float, verdict: Verdict) -> None:
    """The verdict is durable and shown; the unacknowledged signal is StationError, and no other part is asked for."""
    bench = handled(A, B)
    bench.is_part(A, fs_hz=fs_hz)
    bench.signal_fault = fault("no-answer")
    events: list[Event] = []
    running = screen_lot(FakeStation(store, bench), job(), FromScanner(bench), Turns(40))  # type: ignore[arg-type]
    with pytest.raises(StationError) as caught:
        events.extend(running)
    assert caught.value.exit_code == 3
    assert isinstance(events[-1], Recorded)
    (stored,) = store.history(A)
    assert stored.record.judgement.verdict is verdict
    assert stored.record.final
    assert bench.did.count(("next",)) == 1


# ── refusing to start ────────────────────────────────────────────────────────────────────────


def test_empty_acceptance_zone_refuses_before_anything_is_opened(store: Store) -> None:
    """Limits narrower than the meter's own uncertainty: SetupError naming the u that would do; no lot, no command."""
    text = limits().text.replace("min = 1638.0\nmax = 1662.0\nu_max = 0.6", "min = 1649.999\nmax = 1650.001\n", 1)
    narrow = parse_limits(text.split("# Each grade")[0] + "[lot]" + text.split("[lot]")[1], "narrow.toml")
    bench = handled(A)
    with pytest.raises(SetupError, match=r"No part can pass fs: at u .* u below 0\.0006\d* kHz would do") as caught:
        screened(store, bench, of=job(narrow))
    assert caught.value.exit_code == 2
    assert store.lots() == ()
    assert bench.did == []


def test_grade_that_the_handler_cannot_be_told_refuses_the_lot(store: Store) -> None:
    """A grade beyond the handler's line is found before the first part, not at the first pass."""
    graded = limits()
    text = graded.text.replace('name = "M"', 'name = "größer"')
    bench = handled(A)
    with pytest.raises(SetupError, match="größer"):
        screened(store, bench, of=job(parse_limits(text, "graded.toml")))
    assert store.lots() == ()
    assert bench.did == []


# ── holding the lot ──────────────────────────────────────────────────────────────────────────


def test_lot_is_held_after_so_many_of_the_same_fail(store: Store) -> None:
    """Two of the same reason in a row: held after the second part's signal, with cause and remedy; the third waits."""
    bench = handled(A, B, C)
    bench.is_part(A, fs_hz=1.68e6)
    bench.is_part(B, fs_hz=1.675e6)
    events = screened(store, bench, of=job(limits(stop_same_reason="2")))
    assert [one[0] for one in verdicts(events)] == [A, B]
    assert bench.told() == [("fail", None), ("fail", None)]
    (held,) = [event for event in events if isinstance(event, Held)]
    assert held.text.startswith("2 parts in a row failed for the same reason: fs above its limit. Likely cause: thin")
    assert "reference part" in held.text
    assert isinstance(events[-1], Ended)


def test_lot_is_held_after_so_many_without_a_verdict(store: Store) -> None:
    """Two parts without a verdict in a row, each after all its tries: held, naming contacts or leads."""
    bench = handled(A, B, C)
    bench.is_open(A)
    bench.is_open(B)
    events = screened(store, bench, of=job(limits(stop_no_verdict="2")))
    (held,) = [event for event in events if isinstance(event, Held)]
    assert held.text.startswith("2 parts in a row without a verdict. Likely cause: parts not reaching the contacts")
    assert len(verdicts(events)) == 4


def test_low_yield_is_told_at_the_end_over_the_whole_lot(store: Store) -> None:
    """One of two passes against 80 %; on the run that follows, three more passes bring the lot to its yield."""
    bench = handled(A, B)
    bench.is_part(B, fs_hz=1.68e6)
    events = screened(store, bench)
    assert isinstance(events[-1], Ended)
    assert events[-1].note.startswith("1 of the lot's 2 parts judged so far passed, below the least yield of 80 %")
    later = screened(store, handled(C, "MD-0004", "MD-0005"))
    assert later[-1] == Ended(3, 0, "")
