"""One attempt at one part: opened, measured, analysed, recorded."""

from __future__ import annotations

from collections.abc import Callable, Generator, Iterator, Mapping
from dataclasses import dataclass, replace

import numpy as np

from harness import planning
from harness.analysis import analyse, low_frequency_hz
from harness.bench import Bench, BenchFault
from harness.correction import fixture
from harness.records import (
    Complexes,
    Conditions,
    Correction,
    Fit,
    Floats,
    Judgement,
    LimitSet,
    Opening,
    Plan,
    Reading,
    Reason,
    Record,
    Sweep,
    Verdict,
)
from harness.run.events import BenchTrouble, Event, Measuring, Opened, Recorded, Refused
from harness.store import Store

Clock = Callable[[], str]
"""UTC as ISO 8601 with microseconds and Z."""


@dataclass(frozen=True, slots=True)
class Job:
    """What every attempt of a lot has in common."""

    lot: str
    limits: LimitSet
    correction: Correction
    conditions: Conditions
    operator: str
    software: Mapping[str, str]
    clock: Clock


def attempt(
    bench: Bench, store: Store, job: Job, serial: str, identity: str, number: int, last_try: bool
) -> Generator[Event, None, Record]:
    """Measure, judge and record one attempt. The last event is ``Recorded``; the record also by return.

    A bench fault is this part's no verdict, recorded like any other. ``last_try``: a no verdict now is final.
    """
    first = planning.locate(job.limits)
    opening = Opening(
        serial=serial,
        identity=identity,
        lot=job.lot,
        part_number=job.limits.part_number,
        limits_sha256=job.limits.sha256,
        operator=job.operator,
        number=number,
        element=job.conditions.element,
        plan={"strategy": job.limits.measurement.strategy, "points": job.limits.measurement.points},
        at=job.clock(),
    )
    attempt_id = store.open_attempt(opening)
    yield Opened(serial, number)
    fit: Fit | None = None
    sweep: Sweep | None = None
    try:
        sweep = yield from _measure(bench, job, serial, first)
        fit, judgement = analyse(sweep, job.limits, job.correction)
    except BenchFault as fault:
        yield BenchTrouble(fault.sentence())
        judgement = _no_verdict(fault)
    record = Record(
        opening=opening,
        sweep=sweep,
        fit=fit,
        judgement=judgement,
        correction=job.correction,
        instruments=(bench.instrument,),
        software=job.software,
        final=judgement.verdict is not Verdict.NONE or last_try,
        at=job.clock(),
    )
    written = store.write_record(record, attempt_id)
    if identity == "scanned":  # where serials come from elsewhere, what a scanner reads names no part
        yield from early_codes(bench, serial)
    yield Recorded(record, written)
    return record


def early_codes(bench: Bench, serial: str) -> Iterator[Event]:
    """Take off the line what was scanned since this part's own code: the next part is not in the fixture yet."""
    try:
        codes = bench.early_codes()
    except BenchFault as fault:
        yield BenchTrouble(fault.sentence())
        return
    for code in codes:
        if code.strip() != serial:
            yield Refused(code, "its part was not in the fixture yet. Scan it again when it is.")


def _measure(bench: Bench, job: Job, serial: str, first: Plan) -> Generator[Event, None, Sweep]:
    """Contact, locating pass, resolving pass, first frequency again, contact again → Sweep (by return)."""
    spec = job.limits.measurement
    readings: list[Reading] = []
    if spec.contact:
        yield Measuring(serial, "contact")
        readings.append(bench.reading("contact before", spec.contact.f_hz, spec.drive_v))
    at_hz = low_frequency_hz(job.limits)
    if at_hz is not None and (spec.contact is None or spec.contact.f_hz != at_hz):
        readings.append(bench.reading("low-frequency", at_hz, spec.drive_v))
    yield Measuring(serial, "locate")
    f, z = bench.sweep(first)
    second = planning.resolve(f, fixture.correct(f, z, job.correction), job.limits)
    if second is not None:
        yield Measuring(serial, "resolve")
        f, z = _joined(f, z, *bench.sweep(second))
    readings.append(bench.reading("repeat", float(first.f_hz[0]), spec.drive_v))
    if spec.contact:
        readings.append(bench.reading("contact after", spec.contact.f_hz, spec.drive_v))
    instrument = bench.instrument
    return Sweep(
        f,
        z,
        replace(job.conditions, drive_v=spec.drive_v),
        tuple(readings),
        noise_relative=instrument.noise_relative or None,
        u_z_relative=instrument.u_z_relative,
        u_f_relative=instrument.u_f_relative,
    )


def _joined(f: Floats, z: Complexes, more_f: Floats, more_z: Complexes) -> tuple[Floats, Complexes]:
    return np.concatenate([f, more_f]), np.concatenate([z, more_z])


def _no_verdict(fault: BenchFault) -> Judgement:
    return Judgement(Verdict.NONE, None, (Reason(fault.code, None, None, None, fault.sentence()),), {})
