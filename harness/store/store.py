"""The store as the rest of the house sees it: every call is one transaction, trouble comes as this house's errors."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from types import TracebackType

from sqlalchemy import Connection, Engine

from harness.records import Correction, Judgement, LimitSet, Opening, Reason, Record, Verdict
from harness.store import engines, reading, writing
from harness.store.results import (
    AttemptId,
    AttemptSummary,
    LotInfo,
    OpenAttempt,
    Standing,
    StoredRecord,
    Written,
)

_PAGE = 200
_INTERRUPTED = "The station stopped before this attempt was judged; the part needs another attempt."


class Store:
    """One store, opened by ``open_store``. ``place`` says where it is; ``chain`` is the chain that it writes.

    Safe to use from several threads: there is one connection, and calls wait for it. Close it, or use it in ``with``.
    """

    def __init__(self, engine: Engine, *, place: str, chain: str) -> None:
        self._engine = engine
        self.place = place
        self.chain = chain

    def __enter__(self) -> Store:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def close(self) -> None:
        self._engine.dispose()

    @contextmanager
    def transaction(self) -> Iterator[Connection]:
        """One transaction, committed and flushed to disk on leaving, or undone whole if it raises."""
        with engines.translated(self.place), self._engine.begin() as connection:
            yield connection

    # ── writing ──────────────────────────────────────────────────────────────────────────────

    def open_lot(self, lot: str, limits: LimitSet, operator: str, at: str) -> LotInfo:
        """Open a lot under ``limits``, or continue it; SetupError if it was opened under another limit file."""
        with self.transaction() as connection:
            writing.put_lot(connection, lot, limits, operator, at)
            return reading.lot_info(connection, lot)

    def open_attempt(self, opening: Opening) -> AttemptId:
        """Make an attempt known, durably, before the first instrument command."""
        with self.transaction() as connection:
            return writing.put_attempt(connection, opening)

    def write_record(self, record: Record, attempt: AttemptId) -> Written:
        """Write the record of an opened attempt. Once this returns, it survives a killed process and a power cut."""
        with self.transaction() as connection:
            return writing.put_record(connection, self.chain, record, attempt)

    def close_interrupted(self, at: str, software: Mapping[str, str]) -> tuple[Written, ...]:
        """Write a no verdict, "interrupted", for every attempt that was opened and never recorded; for the next start.

        Only while no other process screens on this store: an attempt in progress looks the same.
        """
        with self.transaction() as connection:
            return tuple(
                writing.put_record(connection, self.chain, _interrupted_record(one.opening, at, software), one.id)
                for one in reading.open_attempts(connection)
            )

    # ── reading ──────────────────────────────────────────────────────────────────────────────

    def interrupted(self) -> tuple[OpenAttempt, ...]:
        """Attempts that were opened and have no record: interrupted, or in progress right now."""
        with self.transaction() as connection:
            return reading.open_attempts(connection)

    def next_number(self, lot: str, serial: str, element: int = 1) -> int:
        """The number of the next attempt at a part's element in this lot, from 1."""
        with self.transaction() as connection:
            return writing.next_number(connection, lot, serial, element)

    def standing(self, lot: str, serial: str, element: int = 1) -> Standing | None:
        """How a part's element stands after its last record in this lot; None before the first."""
        with self.transaction() as connection:
            return reading.standing(connection, lot, serial, element)

    def lots(self) -> tuple[LotInfo, ...]:
        """Every lot, in the order they were opened."""
        with self.transaction() as connection:
            return reading.lot_infos(connection)

    def lot_info(self, lot: str) -> LotInfo:
        """One lot; SetupError naming lots of like name where there is none."""
        with self.transaction() as connection:
            return reading.lot_info(connection, lot)

    def limits_text(self, sha256: str) -> str:
        """The text of the limit file of this hash."""
        with self.transaction() as connection:
            return reading.limits_text(connection, sha256)

    def history(self, serial: str) -> list[StoredRecord]:
        """Every record of a serial with its sweep, oldest first; SetupError naming like serials where there is none."""
        with self.transaction() as connection:
            return reading.history(connection, serial, self.place)

    def records_of_lot(self, lot: str, *, sweeps: bool = True) -> Iterator[StoredRecord]:
        """The records of a lot in the order written, page by page, so that others may write in between.

        Without ``sweeps`` each ``record.sweep`` is None. SetupError for an unknown lot comes at the call, not later.
        """
        self.lot_info(lot)
        return self._pages(lot, sweeps)

    def _pages(self, lot: str, sweeps: bool) -> Iterator[StoredRecord]:
        after = 0
        while True:
            with self.transaction() as connection:
                page = reading.lot_page(connection, lot, after, _PAGE, sweeps, self.place)
            yield from page
            if len(page) < _PAGE:
                return
            after = page[-1].record_id

    def lot_summaries(self, lot: str) -> tuple[AttemptSummary, ...]:
        """What statistics need of every record of a lot, in the order written; no document is opened."""
        with self.transaction() as connection:
            reading.lot_info(connection, lot)
            return reading.lot_summaries(connection, lot)


def _interrupted_record(opening: Opening, at: str, software: Mapping[str, str]) -> Record:
    judgement = Judgement(Verdict.NONE, None, (Reason("interrupted", None, None, None, _INTERRUPTED),), {})
    return Record(opening, None, None, judgement, Correction(), instruments=(), software=software, final=False, at=at)
