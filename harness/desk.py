"""The desk: a lot in the store → statistics → report.

SHELL. May import station, store, statistics, report and everything pure. Reads only.
"""

from __future__ import annotations

from harness.judging.limit_file import parse_limits
from harness.quantities import format_si
from harness.records import LimitSet
from harness.report.lot_csv import lot_csv as as_csv
from harness.report.lot_page import lot_page, render
from harness.statistics.attempts import Attempt
from harness.statistics.lot import LotStatistics, summarise
from harness.store import Store, StoredRecord


def lot_limits(store: Store, lot: str) -> LimitSet:
    """The limits a lot was screened under, from the store's own copy. Raises SetupError for an unknown lot."""
    info = store.lot_info(lot)
    return parse_limits(store.limits_text(info.limits_sha256), f"limits of lot {lot}")


def lot_attempts(store: Store, lot: str) -> list[Attempt]:
    """Every attempt of a lot in the order of the records."""
    return [
        Attempt(
            one.serial,
            one.number,
            one.element,
            one.verdict.value,
            one.grade,
            one.final,
            one.at,
            one.reasons,
            one.values,
        )
        for one in store.lot_summaries(lot)
    ]


def lot_statistics(store: Store, lot: str) -> tuple[LotStatistics, LimitSet]:
    """Counts, yields and capability of a lot, and the limits it was screened under."""
    limits = lot_limits(store, lot)
    return summarise(lot_attempts(store, lot), limits), limits


def lot_html(store: Store, lot: str) -> str:
    """A lot's page, self-contained HTML."""
    limits = lot_limits(store, lot)
    records = list(store.records_of_lot(lot, sweeps=False))
    sentences = {r.record.opening.serial: r.record.judgement.reasons[0].text for r in records if _has_reason(r)}
    page = lot_page(lot, limits, lot_attempts(store, lot), _traceability(records), sentences)
    return render(page)


def lot_csv(store: Store, lot: str) -> str:
    """A lot as CSV, one row a part."""
    return as_csv(lot_attempts(store, lot))


def _has_reason(stored: StoredRecord) -> bool:
    return bool(stored.record.judgement.reasons)


def _traceability(records: list[StoredRecord]) -> dict[str, str]:
    """Which instruments, fixture, software and operators stand behind a lot's records, and which records they are."""
    if not records:
        return {}
    said: dict[str, dict[str, None]] = {"Instrument": {}, "Fixture": {}, "Software": {}, "Operator": {}}
    for stored in records:
        record = stored.record
        for i in record.instruments:
            said["Instrument"][f"{i.maker} {i.model}, serial {i.serial}, firmware {i.firmware} ({i.dialect})"] = None
        c = record.correction
        series = f"{format_si(c.rs_ohm, 'ohm')}, {format_si(c.ls_h, 'H')} in series"
        said["Fixture"][f"{c.fixture}: {series}, {format_si(c.cp_f, 'F')} across"] = None
        said["Software"][", ".join(f"{name} {version}" for name, version in record.software.items())] = None
        said["Operator"][record.opening.operator] = None
    first, last = records[0], records[-1]
    out = {label: "; ".join(texts) for label, texts in said.items()}
    out["Screened"] = f"{first.record.opening.at} to {last.record.at}"
    out["Records"] = f"chain {first.chain}, {first.seq} ({first.hash[:16]}…) to {last.seq} ({last.hash[:16]}…)"
    return out
