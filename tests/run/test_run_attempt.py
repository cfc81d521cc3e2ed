"""One attempt: what is durable when, what is measured in which order, and what a fault comes to."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest
from run_fakes import FakeBench, Ticking, disc, job, limits, new_store

from harness.bench import BenchFault
from harness.records import Opening, Record, Verdict
from harness.run.events import BenchTrouble, Event, Measuring, Opened, Recorded, Refused
from harness.run.part import Job, attempt
from harness.store import Store, open_store

SERIAL = "MD-0001"


@pytest.fixture
def store(tmp_path: Path) -> Iterator[Store]:
    with new_store(tmp_path) as made:
        yield made


@pytest.fixture
def bench() -> FakeBench:
    made = FakeBench()
    made.put = SERIAL
    return made


def tried(bench: FakeBench, store: Store, of: Job, *, last_try: bool = False) -> tuple[list[Event], Record]:
    """One attempt's events, and the record that it returns."""
    store.open_lot(of.lot, of.limits, of.operator, of.clock())
    running = attempt(bench, store, of, SERIAL, "scanned", store.next_number(of.lot, SERIAL), last_try)
    events: list[Event] = []
    while True:
        try:
            events.append(next(running))
        except StopIteration as end:
            return events, end.value


def seen(folder: Path) -> tuple[int, int]:
    """Attempts without a record, and records, as a second connection sees them."""
    with open_store(str(folder / "ringtrue.db"), mode="read", now="2026-03-02T09:00:00.000000Z") as other:
        return len(other.interrupted()), sum(lot.records for lot in other.lots())


def test_opened_is_durable_before_the_first_instrument_command(tmp_path: Path, store: Store, bench: FakeBench) -> None:
    """A second connection sees the opened attempt, and no record, whenever the bench is asked for anything."""
    found: list[tuple[int, int]] = []
    bench.on_sweep = lambda: found.append(seen(tmp_path))
    tried(bench, store, job())
    assert found == [(1, 0)] * 5


def test_recorded_comes_only_after_a_second_connection_can_read_the_record(tmp_path: Path, store: Store) -> None:
    """At each event but the last there is no record; at ``Recorded`` another store reads it, with the same verdict."""
    bench, of = FakeBench(), job()
    bench.put = SERIAL
    store.open_lot(of.lot, of.limits, of.operator, of.clock())
    for event in attempt(bench, store, of, SERIAL, "scanned", 1, False):
        if not isinstance(event, Recorded):
            assert seen(tmp_path) == (1, 0)
            continue
        with open_store(str(tmp_path / "ringtrue.db"), mode="read", now=of.clock()) as other:
            (stored,) = other.history(SERIAL)
        assert stored.record.judgement == event.record.judgement
        assert (stored.seq, stored.hash) == (event.written.seq, event.written.hash)
        break
    else:
        pytest.fail("no Recorded event came")


def test_events_and_stages_in_order(store: Store, bench: FakeBench) -> None:
    """Opened, the stages, Recorded; contact first and last, the first frequency again just before."""
    events, record = tried(bench, store, job())
    assert events[0] == Opened(SERIAL, 1)
    assert [event.stage for event in events[1:-1] if isinstance(event, Measuring)] == ["contact", "locate", "resolve"]
    assert isinstance(events[-1], Recorded)
    assert events[-1].record is record
    assert [what for _, what in bench.did] == ["contact before", "locate", "resolve", "repeat", "contact after"]
    assert record.judgement.verdict is Verdict.PASS


def test_record_holds_the_evidence(store: Store, bench: FakeBench) -> None:
    """Uncorrected sweep of both passes in the order measured, readings, drive, instrument, limits' hash, who, when."""
    clock = Ticking()
    of = job(clock=clock)
    _, record = tried(bench, store, of)
    sweep = record.sweep
    assert sweep is not None
    assert sweep.f_hz.size == 81
    assert sweep.f_hz[0] == of.limits.mode.search_hz[0]
    assert np.all(np.diff(sweep.f_hz[:40]) > 0)
    np.testing.assert_allclose(sweep.z_ohm, disc()(sweep.f_hz), rtol=0.01)
    assert [reading.stage for reading in sweep.readings] == ["contact before", "repeat", "contact after"]
    assert sweep.readings[1].f_hz == sweep.f_hz[0]
    assert sweep.conditions.drive_v == of.limits.measurement.drive_v
    assert sweep.conditions.temperature_degc == 23.0
    assert (sweep.u_z_relative, sweep.u_f_relative, sweep.noise_relative) == (1e-3, 1e-6, 1e-3)
    assert record.instruments == (bench.instrument,)
    assert record.software == of.software
    expected = Opening(
        SERIAL,
        "scanned",
        of.lot,
        "MD-1650",
        of.limits.sha256,
        "operator 3",
        1,
        1,
        record.opening.plan,
        record.opening.at,
    )
    assert record.opening == expected
    assert record.opening.at < record.at


def test_low_frequency_that_the_contact_check_does_not_see_is_measured(store: Store, bench: FakeBench) -> None:
    """A capacitance required at 2 kHz beside a contact check at 1 kHz: a reading of its own, and a verdict on it."""
    _, record = tried(bench, store, job(limits(at='"2 kHz"')))
    assert record.sweep is not None
    stages = [(reading.stage, reading.f_hz) for reading in record.sweep.readings]
    assert stages[:2] == [("contact before", 1e3), ("low-frequency", 2e3)]
    assert record.judgement.values["c_at"].value is not None
    assert record.judgement.verdict is Verdict.PASS


def test_uniform_strategy_measures_once(store: Store, bench: FakeBench) -> None:
    """With strategy "uniform" the whole window is swept in one pass of all points."""
    events, record = tried(bench, store, job(limits(161, strategy='"uniform"')))
    assert [event.stage for event in events if isinstance(event, Measuring)] == ["contact", "locate"]
    assert record.sweep is not None
    np.testing.assert_array_equal(record.sweep.f_hz, np.linspace(1.5e6, 1.9e6, 161))
    assert record.judgement.verdict is Verdict.PASS


@pytest.mark.parametrize(
    ("last_try", "serial_fs", "final"), [(False, 1.65e6, True), (True, 1.65e6, True), (False, 1.68e6, True)]
)
def test_pass_and_fail_are_final_on_any_try(
    store: Store, bench: FakeBench, last_try: bool, serial_fs: float, final: bool
) -> None:
    """A pass or a fail is final whether or not another try was to be had."""
    bench.is_part(SERIAL, fs_hz=serial_fs)
    _, record = tried(bench, store, job(), last_try=last_try)
    assert record.judgement.verdict is (Verdict.PASS if serial_fs == 1.65e6 else Verdict.FAIL)
    assert record.final is final


@pytest.mark.parametrize("last_try", [False, True])
def test_no_verdict_is_final_on_the_last_try_only(store: Store, bench: FakeBench, last_try: bool) -> None:
    """An open lead gives no verdict; it is final only where no other try follows."""
    bench.is_open(SERIAL)
    _, record = tried(bench, store, job(), last_try=last_try)
    assert record.judgement.verdict is Verdict.NONE
    assert record.judgement.reasons[0].code == "no-part"
    assert record.sweep is not None
    assert record.final is last_try


@pytest.mark.parametrize("sweep", [1, 2, 3, 4, 5])
def test_fault_at_any_stage_is_a_recorded_no_verdict(
    tmp_path: Path, store: Store, bench: FakeBench, sweep: int
) -> None:
    """A bench fault at contact, locate, resolve, repeat or contact again: its code is the reason, nothing is fitted."""
    bench.fails_at_sweep(sweep, "not-usable")
    events, record = tried(bench, store, job())
    assert [type(event) for event in events[-2:]] == [BenchTrouble, Recorded]
    assert record.judgement.verdict is Verdict.NONE
    (reason,) = record.judgement.reasons
    assert reason.code == "not-usable"
    assert reason.text == "fake meter: invented trouble of the kind not-usable."
    assert record.sweep is None
    assert record.fit is None
    assert not record.judgement.values
    assert seen(tmp_path) == (0, 1)


def test_attempt_given_up_leaves_it_opened(tmp_path: Path, store: Store, bench: FakeBench) -> None:
    """Closed in the middle of a measurement (Ctrl-C twice), the attempt stays opened without a record."""
    of = job()
    store.open_lot(of.lot, of.limits, of.operator, of.clock())
    running = attempt(bench, store, of, SERIAL, "scanned", 1, False)
    while not isinstance(next(running), Measuring):
        pass
    running.close()
    assert [one.opening.serial for one in store.interrupted()] == [SERIAL]
    assert seen(tmp_path) == (1, 0)


def test_codes_scanned_during_a_measurement_name_no_part(store: Store, bench: FakeBench) -> None:
    """Another part's code is refused before the verdict is shown; the part's own, scanned twice, is dropped quietly."""
    bench.codes = [f"early {SERIAL}", "early MD-0002", "MD-0003"]
    events, _ = tried(bench, store, job())
    assert [event.serial for event in events if isinstance(event, Refused)] == ["MD-0002"]
    assert isinstance(events[-1], Recorded)
    assert bench.codes == ["MD-0003"]


def test_scanner_gone_during_a_measurement_costs_no_verdict(store: Store, bench: FakeBench) -> None:
    """A scanner that fails while a part is measured is trouble told, and the part's verdict stands."""

    def gone() -> tuple[str, ...]:
        raise BenchFault("connection-lost", "the port is gone.")

    bench.early_codes = gone  # type: ignore[method-assign]
    events, record = tried(bench, store, job())
    assert [type(event) for event in events[-2:]] == [BenchTrouble, Recorded]
    assert record.judgement.verdict is Verdict.PASS
