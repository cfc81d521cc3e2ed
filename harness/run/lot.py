"""The loop over a lot: part in, serial, tries, verdict out, and when to stop."""

from __future__ import annotations

from collections.abc import Callable, Generator, Iterator

from harness.bench import Bench, BenchFault
from harness.errors import StationError
from harness.judging.judge import refuse_conditions
from harness.judging.requirements import refuse_empty_zones
from harness.planning.expected import least_u
from harness.records import Record, Verdict
from harness.run.events import BenchTrouble, Ended, Event, Interrupted, PassedOver, Ready, Refused, Waiting
from harness.run.part import Job, attempt, early_codes
from harness.run.serials import Serial, SerialSource, Wait, pattern_fault
from harness.run.watch import LotWatch
from harness.station import Station
from harness.store import Store

_TURN_S = 0.5  # how long one wait lasts before the loop looks whether it is to stop
_SCAN_S = 10.0  # how long a part brought by the handler may wait for its code
_REOPENINGS = 3


def screen_lot(
    station: Station, job: Job, source: SerialSource, stopping: Callable[[], bool] = lambda: False
) -> Iterator[Event]:
    """Screen parts until the source or the handler has no more, the lot must be held, or ``stopping`` says so.

    Raises SetupError when the lot exists under other limits, when no part could pass a requirement at this station's
    uncertainty, or when the handler cannot be told a grade, and then nothing is written; StationError when the bench
    cannot be reopened or the handler does not take a verdict.
    """
    store, bench = station.store, station.bench
    refuse_conditions(job.conditions, job.limits.conditions)
    refuse_empty_zones(job.limits, least_u(job.limits, bench.instrument, job.conditions))
    bench.refuse_untellable(grade.name for grade in job.limits.grades)
    lot = store.open_lot(job.lot, job.limits, job.operator, job.clock())
    for written in store.close_interrupted(job.clock(), job.software):
        yield Interrupted(written)
    finals = {(one.serial, one.element): one.verdict for one in store.lot_summaries(job.lot) if one.final}
    watch, refused = LotWatch(job.limits.lot, job.limits.requirements, finals), 0
    yield Ready(station.name, job.lot, lot.records, source.prompt)
    for found in _serials(bench, store, job, source, stopping):
        if not isinstance(found, Serial):
            refused += isinstance(found, Refused)
            yield found
            continue
        record = yield from _tries(bench, store, job, found)
        _signal_final(bench, record)
        held = watch.see(record)
        if held is not None:
            yield held
            break
    yield Ended(watch.judged, refused, watch.short_of_yield())


def _serials(
    bench: Bench, store: Store, job: Job, source: SerialSource, stopping: Callable[[], bool]
) -> Iterator[Serial | Event]:
    """Serials of parts that sit in the fixture and may be measured; events for everything else."""
    one = _ahead if source.ahead else _after
    while not stopping():
        found = yield from one(bench, store, job, source, stopping)
        if found is Wait.END:
            return
        if not isinstance(found, Wait):
            yield found


def _ahead(
    bench: Bench, store: Store, job: Job, source: SerialSource, stopping: Callable[[], bool]
) -> Generator[Event, None, Serial | Refused | PassedOver | Wait]:
    """The serial is known first; its part is asked for only if it may be measured."""
    serial = source.next(_TURN_S)
    if isinstance(serial, Wait):
        return serial
    standing = store.standing(job.lot, serial.text, job.conditions.element)
    if standing is not None and standing.verdict is not Verdict.NONE:
        return PassedOver(serial.text)  # a list is begun again from its top
    refusal = _refusal(store, job, serial)
    if refusal is not None:
        return refusal
    then = ", then Enter. Ctrl-D ends the lot." if source.asks else "."
    there = yield from _part(bench, source, f"Load part {serial.text}{then}", stopping)
    if there:
        return serial
    if stopping() or not bench.has_handler:
        return Wait.END
    return Refused(serial.text, "the handler has no more parts; this serial was not measured.")


def _after(
    bench: Bench, store: Store, job: Job, source: SerialSource, stopping: Callable[[], bool]
) -> Generator[Event, None, Serial | Refused | Wait]:
    """The part comes first, then its code."""
    there = yield from _part(bench, source, source.prompt, stopping)
    if not there:
        return Wait.END
    serial = yield from _code(bench, source, stopping)
    if serial is Wait.END:
        return serial
    if isinstance(serial, Serial):
        refusal = _refusal(store, job, serial)
        if refusal is None:
            return serial
    else:
        refusal = Refused("", f"no code was read within {_SCAN_S:g} s; the part goes to hold.")
    if bench.has_handler:
        if not isinstance(serial, Serial) or serial.identity == "scanned":
            yield from early_codes(bench, refusal.serial)
        bench.signal("hold", None)
    return refusal


def _part(
    bench: Bench, source: SerialSource, prompt: str, stopping: Callable[[], bool]
) -> Generator[Event, None, bool]:
    """Wait for a part, from the handler or by hand: True when it is there, False when there is no more, by return."""
    if not bench.has_handler:
        yield Waiting(prompt)
        return source.confirm()
    told = False
    while not stopping():
        answer = bench.next_part(_TURN_S)
        if answer is not None:
            return answer
        if not told:
            told = True
            yield Waiting("Waiting for the handler to bring a part.")
    return False


def _code(bench: Bench, source: SerialSource, stopping: Callable[[], bool]) -> Generator[Event, None, Serial | Wait]:
    """The serial of the part in the fixture, by return; NOT_YET when a handler's part had no code in time."""
    if bench.has_handler and source.asks:
        yield Waiting(source.prompt)
    turns = 0
    while not stopping():
        try:
            serial = source.next(_TURN_S)
        except BenchFault as fault:
            if fault.code != "bad-answer":
                raise
            yield BenchTrouble(fault.sentence())  # a torn or smudged code: another scan may be whole
            serial = Wait.NOT_YET
        if serial is not Wait.NOT_YET:
            return serial
        turns += 1
        if bench.has_handler and turns * _TURN_S >= _SCAN_S:
            return Wait.NOT_YET
        if bench.has_handler and turns == 1:
            yield Waiting(source.prompt)
    return Wait.END


def _refusal(store: Store, job: Job, serial: Serial) -> Refused | None:
    """Why this serial is not measured now: its form, or a verdict that stands (only a no verdict is repeated)."""
    fault = pattern_fault(serial.text, job.limits.serial_pattern if serial.identity != "auto" else None)
    if fault is not None:
        return Refused(serial.text, fault)
    standing = store.standing(job.lot, serial.text, job.conditions.element)
    if standing is not None and standing.verdict is not Verdict.NONE:
        return Refused(
            serial.text,
            f"already judged in this lot: {standing.verdict.value} at {standing.at}. A verdict stands; "
            "set the part aside and check for a double label.",
        )
    return None


def _tries(bench: Bench, store: Store, job: Job, serial: Serial) -> Generator[Event, None, Record]:
    """As many attempts as the limit file allows while there is no verdict; the final record, by return."""
    tries = job.limits.measurement.attempts
    for k in range(1, tries + 1):
        number = store.next_number(job.lot, serial.text, job.conditions.element)
        record = yield from attempt(bench, store, job, serial.text, serial.identity, number, k == tries)
        if record.sweep is None:
            yield from _reopen(bench)
        if record.final:
            break
        bench.signal("again", None)
    return record


def _reopen(bench: Bench) -> Iterator[Event]:
    """After a fault the old connection is not to be trusted: connect and identify anew, three times at most."""
    for k in range(1, _REOPENINGS + 1):
        try:
            bench.reopen()
        except BenchFault as fault:
            yield BenchTrouble(f"Reopening the bench, try {k} of {_REOPENINGS}: {fault.sentence()}")
            last = fault
        else:
            yield BenchTrouble("The bench was reopened.")
            return
    raise StationError(
        f"the bench could not be reopened in {_REOPENINGS} tries; the last one said: {last.text}",
        place=last.place,
        remedy="Every attempt so far is recorded. Check the instrument and its cable, then start this lot again.",
    ) from last


def _signal_final(bench: Bench, record: Record) -> None:
    """Tell the handler, after the record is durable: pass with its grade, fail, or hold."""
    outcome = {Verdict.PASS: "pass", Verdict.FAIL: "fail", Verdict.NONE: "hold"}[record.judgement.verdict]
    bench.signal(outcome, record.judgement.grade)
