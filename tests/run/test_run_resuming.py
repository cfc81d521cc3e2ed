"""A lot taken up again: the same limits, other limits, attempts that were interrupted, numbers that go on."""

from __future__ import annotations

from pathlib import Path

import pytest
from run_fakes import FakeBench, FakeStation, Turns, job, limits, new_store

from harness.errors import SetupError
from harness.records import Verdict
from harness.run.events import Event, Interrupted, Measuring, PassedOver, Ready, Recorded
from harness.run.lot import screen_lot
from harness.run.part import Job
from harness.run.serials import FromList, Numbered, SerialSource, auto_start
from harness.store import Store

A, B, C = "MD-0001", "MD-0002", "MD-0003"


def screened(store: Store, bench: FakeBench, source: SerialSource, of: Job) -> list[Event]:
    return list(screen_lot(FakeStation(store, bench), of, source, Turns(60)))  # type: ignore[arg-type]


def begun(store: Store, serial: str, of: Job) -> None:
    """Screen until the meter is at work on ``serial``, and be killed there."""
    running = screen_lot(FakeStation(store, FakeBench()), of, FromList([serial]))  # type: ignore[arg-type]
    while not isinstance(next(running), Measuring):
        pass
    running.close()  # type: ignore[attr-defined]


def contents(folder: Path) -> bytes:
    """The store as it would be copied: file and write-ahead log."""
    return b"".join(path.read_bytes() for path in sorted(folder.glob("ringtrue.db*")) if not path.name.endswith("-shm"))


def test_same_limits_continue_the_lot(tmp_path: Path) -> None:
    """A second run under the same hash goes on: what is judged is passed over, the rest is measured."""
    with new_store(tmp_path) as store:
        screened(store, FakeBench(), FromList([A, B]), job())
    with new_store(tmp_path) as store:
        events = screened(store, FakeBench(), FromList([A, B, C]), job())
        assert events[0] == Ready("station 1", "L-7", 2, FromList.prompt)
        assert [event.serial for event in events if isinstance(event, PassedOver)] == [A, B]
        assert [event.record.opening.serial for event in events if isinstance(event, Recorded)] == [C]
        assert store.lot_info("L-7").records == 3


def test_other_limits_are_refused_and_nothing_is_written(tmp_path: Path) -> None:
    """One byte of the limit file more: SetupError, exit 2, no command to the bench, the store's bytes as before.

    That holds with an interrupted attempt in the store too: it waits for a start that succeeds.
    """
    of = job()
    with new_store(tmp_path) as store:
        screened(store, FakeBench(), FromList([A]), of)
        begun(store, B, of)
    with new_store(tmp_path) as store:
        before, bench = contents(tmp_path), FakeBench()
        with pytest.raises(SetupError, match="lot 'L-7' was opened under MD-1650 revision A") as caught:
            screened(store, bench, FromList([C]), job(limits(description='"another text"')))
        assert caught.value.exit_code == 2
        assert bench.did == []
        assert contents(tmp_path) == before
        assert len(store.interrupted()) == 1


def test_interrupted_attempt_is_closed_at_the_next_start(tmp_path: Path) -> None:
    """Opened and never recorded: a no verdict "interrupted" before anything else; the part gets all its tries anew."""
    of = job()
    with new_store(tmp_path) as store:
        begun(store, A, of)
    with new_store(tmp_path) as store:
        bench = FakeBench()
        bench.put = A
        bench.is_open(A)
        events = screened(store, bench, FromList([A]), of)
        assert isinstance(events[0], Interrupted)
        assert isinstance(events[1], Ready)
        records = [stored.record for stored in store.history(A)]
    assert [(r.opening.number, r.judgement.reasons[0].code, r.final) for r in records] == [
        (1, "interrupted", False),
        (2, "no-part", False),
        (3, "no-part", True),
    ]
    assert {record.judgement.verdict for record in records} == {Verdict.NONE}


def test_interrupted_attempt_of_another_lot_is_closed_too(tmp_path: Path) -> None:
    """Whatever lot is screened next, no attempt stays open."""
    with new_store(tmp_path) as store:
        begun(store, A, job(lot="L-6"))
        events = screened(store, FakeBench(), FromList([B]), job(lot="L-7"))
        assert isinstance(events[0], Interrupted)
        assert store.interrupted() == ()
        assert store.history(A)[0].record.opening.lot == "L-6"


def test_numbers_go_on_after_a_restart(tmp_path: Path) -> None:
    """Numbered parts of a lot taken up again go on behind the highest number used, across trays."""
    with new_store(tmp_path) as store:
        screened(store, FakeBench(["a", "b", "c"], handler=True), Numbered("L-7", 2, 0, None), job())
        used = [one.serial for one in store.lot_summaries("L-7")]
        start = auto_start(used, "L-7", 2)
        assert start == 3
        screened(store, FakeBench(["d", "e"], handler=True), Numbered("L-7", 2, start, None), job())
        serials = [one.serial for one in store.lot_summaries("L-7")]
    assert serials == ["L-7-T01-P01", "L-7-T01-P02", "L-7-T02-P01", "L-7-T02-P02", "L-7-T03-P01"]


def test_same_serial_in_another_lot_is_another_matter(tmp_path: Path) -> None:
    """A verdict stands within its lot: in the next lot the serial is measured, as try 1."""
    with new_store(tmp_path) as store:
        screened(store, FakeBench(), FromList([A]), job(lot="L-6"))
        events = screened(store, FakeBench(), FromList([A]), job(lot="L-7"))
        (recorded,) = [event for event in events if isinstance(event, Recorded)]
        assert recorded.record.opening.number == 1
