"""The desk: a lot in the store → statistics → report.

SHELL. May import station, store, statistics, report and everything pure. Reads only.
"""

from __future__ import annotations

from harness.judging.limit_file import parse_limits
from harness.records import LimitSet
from harness.statistics.attempts import Attempt
from harness.statistics.lot import LotStatistics, summarise
from harness.store import Store


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
