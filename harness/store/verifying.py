"""Is the store what was written? Every document against its hash, its neighbours and everything that repeats it.

What this finds: any change by someone who does not also recompute every later hash. Whoever rewrites the end of the
chain whole, hashes and all, or puts back an older copy of the file, is not found from the store alone.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

from sqlalchemy import Connection, Row, func, select, tuple_

from harness.errors import StationError
from harness.store import engines, reading
from harness.store.checks.chain import Examined, Walk, count_claims, examine
from harness.store.checks.findings import Finding
from harness.store.checks.repeats import Repeats
from harness.store.checks.schema import schema_findings
from harness.store.checks.strays import stray_findings
from harness.store.opening import open_store
from harness.store.store import Store
from harness.store.tables import record

_PAGE = 500
Progress = Callable[[int, int], None]  # records done, records in all
_BROKEN = Finding("unreadable", None, None, None, "the file is damaged and cannot be read to its end")


@dataclass(frozen=True, slots=True)
class ChainState:
    """One chain: its id, how many records, the last one's hash (None: none yet), how far an anchor vouches."""

    chain: str
    records: int
    head: str | None
    anchored_to: int | None = None


@dataclass(frozen=True, slots=True)
class Soundness:
    """What ``verify`` found. ``open_attempts`` counts attempts without a record, which are no finding."""

    sound: bool
    chains: tuple[ChainState, ...]
    findings: tuple[Finding, ...]
    open_attempts: int


def verify(store: Store, progress: Progress | None = None) -> Soundness:
    """Check all of the store in one snapshot. A damaged file is a finding; an unreachable one a StationError."""
    check = _Check(store.chain, progress)
    try:
        with store.transaction() as connection, _any_bytes(connection):
            check.run(connection)
    except StationError as error:
        if not engines.is_damage(error):
            raise
        check.findings.append(_BROKEN)
    chains = tuple(ChainState(walk.chain, walk.records, walk.head) for walk in check.walks.values())
    return Soundness(not check.findings, chains, tuple(check.findings), check.open_attempts)


def verify_at(url_or_path: str, *, now: str, progress: Progress | None = None) -> Soundness:
    """``verify`` for the store at a path or URL, opened to read; one too damaged to open is a finding as well.

    Raises SetupError where there is no store or something that is not ours.
    """
    try:
        store = open_store(url_or_path, mode="read", now=now)
    except StationError as error:
        if not engines.is_damage(error):
            raise
        return Soundness(False, (), (_BROKEN,), 0)
    with store:
        return verify(store, progress)


class _Check:
    """One run over one store; what it has found so far stays when the file breaks off."""

    def __init__(self, chain: str, progress: Progress | None) -> None:
        self.findings: list[Finding] = []
        self.walks: dict[str, Walk] = {}
        self.open_attempts = 0
        self._chain = chain
        self._progress = progress

    def run(self, conn: Connection) -> None:
        self._walk(conn, self._chain)
        self.findings += schema_findings(conn)
        total = conn.execute(select(func.count()).select_from(record)).scalar_one()
        repeats, done = Repeats(), 0
        for page in _pages(conn):
            for one in page:
                self.findings += self._walk(conn, one.row.chain).step(one)
            self.findings += repeats.findings(conn, page)
            done += len(page)
            if self._progress:
                self._progress(done, total)
        self.findings += stray_findings(conn, self._chain)
        self.open_attempts = reading.count_open_attempts(conn)

    def _walk(self, conn: Connection, chain: str) -> Walk:
        if chain not in self.walks:
            self.walks[chain] = Walk(chain, _claims(conn, chain))
        return self.walks[chain]


def _pages(conn: Connection) -> Iterator[list[Examined]]:
    """All records, examined, by chain and number."""
    place = tuple_(record.c.chain, record.c.seq)
    query = select(record).order_by(record.c.chain, record.c.seq).limit(_PAGE)
    rows: list[Row[Any]] = list(conn.execute(query))
    while rows:
        yield [examine(row) for row in rows]
        rows = list(conn.execute(query.where(place > tuple_(rows[-1].chain, rows[-1].seq))))


def _claims(conn: Connection, chain: str) -> Callable[[], Counter[int]]:
    """Counts once, when first asked: an undamaged store never is."""
    counted: list[Counter[int]] = []

    def claims() -> Counter[int]:
        if not counted:
            rows = conn.execute(select(record).where(record.c.chain == chain).execution_options(yield_per=_PAGE))
            counted.append(count_claims(iter(rows)))
        return counted[0]

    return claims


@contextmanager
def _any_bytes(conn: Connection) -> Iterator[None]:
    """Read text that is not UTF-8, as a broken or edited file may hold, rather than break off at it."""
    driver: Any = conn.connection.driver_connection
    usual = driver.text_factory
    driver.text_factory = lambda raw: raw.decode("utf-8", "surrogateescape")
    try:
        yield
    finally:
        driver.text_factory = usual
