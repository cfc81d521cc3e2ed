"""Logged sweeps judged again, from the store or from files; the original records stay as they are.

SHELL. May import station, store, logs and everything pure. The judging is ``analysis.analyse``, the same as at the
station, so the same sweep, limits and version give the same bits.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

from harness.analysis import NO_FIXTURE, analyse
from harness.errors import FileMistakes, Mistake
from harness.logs import read_log
from harness.records import Fit, Judgement, LimitSet, Reason, Sweep, Verdict
from harness.store import Store, StoredRecord


@dataclass(frozen=True, slots=True)
class Replayed:
    """One sweep judged again: where it came from, the new judgement, and the original record where there is one.

    ``trouble``: what is wrong with a file that cannot be read; its judgement is a no verdict.
    """

    serial: str
    source: str
    judgement: Judgement
    fit: Fit | None
    original: StoredRecord | None = None
    trouble: FileMistakes | None = None


def replay_lot(store: Store, lot: str, limits: LimitSet) -> Iterator[Replayed]:
    """Every attempt of a lot, in the order of the records, under ``limits``."""
    for stored in store.records_of_lot(lot):
        record = stored.record
        source = f"{lot}/{stored.seq}"
        if record.sweep is None:
            reason = Reason("no-sweep", None, None, None, "no sweep was recorded for this attempt")
            judgement = Judgement(Verdict.NONE, None, (reason,), {})
            yield Replayed(record.opening.serial, source, judgement, None, stored)
            continue
        fit, judgement = analyse(record.sweep, limits, record.correction)
        yield Replayed(record.opening.serial, source, judgement, fit, stored)


def replay_file(path: Path, limits: LimitSet, fixture: str | None) -> Replayed:
    """A logged sweep from a file; its stem is its serial. One that cannot be read is a no verdict with its mistakes."""
    try:
        sweep = read_file(path, fixture)
    except FileMistakes as trouble:
        reason = Reason("bad-data", None, None, None, trouble.mistakes[0].sentence())
        return Replayed(path.stem, str(path), Judgement(Verdict.NONE, None, (reason,), {}), None, trouble=trouble)
    fit, judgement = analyse(sweep, limits, NO_FIXTURE)
    return Replayed(path.stem, str(path), judgement, fit)


def read_file(path: Path, fixture: str | None) -> Sweep:
    """A logged sweep. Raises FileMistakes, also for a file that is not there or may not be read."""
    try:
        data = path.read_bytes()
    except OSError as exc:
        text = f"the file cannot be read ({exc.strerror or exc})."
        raise FileMistakes([Mistake(str(path), None, "", text, "Check its name and its permissions.")]) from exc
    return read_log(data, str(path), fixture=fixture)
