"""Rows that belong to nothing, rows that were given a number and are gone, limit files that were edited."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator

from sqlalchemy import Column, Connection, Table, func, select

from harness.store.checks.findings import Finding
from harness.store.tables import attempt, limit_file, lot, reason, record, sweep, value

# child column, parent column, what to say of the child's key, kind
_BELONGINGS: tuple[tuple[Column[int] | Column[str], Column[int] | Column[str], str, str], ...] = (
    (value.c.record_id, record.c.id, "values are there of the record with id {key}, which is gone", "missing"),
    (reason.c.record_id, record.c.id, "reasons are there of the record with id {key}, which is gone", "missing"),
    (sweep.c.sha256, record.c.sweep_sha256, "sweep {key} is there, and no record names it", "inserted"),
    (attempt.c.lot, lot.c.id, "attempts are there in lot '{key}', which is gone", "missing"),
    (
        attempt.c.limits_sha256,
        limit_file.c.sha256,
        "attempts are there under limits {key}, which are gone",
        "missing",
    ),
    (lot.c.limits_sha256, limit_file.c.sha256, "lots are there under limits {key}, which are gone", "missing"),
)


def stray_findings(conn: Connection, chain: str) -> Iterator[Finding]:
    """All strays; ``chain`` is the one that this store writes."""
    for child, parent, text, kind in _BELONGINGS:
        known = select(parent).where(parent.is_not(None))  # one pass over each table, whatever its indexes
        for key in conn.execute(select(child).where(child.not_in(known)).distinct().order_by(child)).scalars():
            yield Finding(kind, None, None, None, text.format(key=key))
    for other in conn.execute(select(record.c.chain).where(record.c.chain != chain).distinct()).scalars():
        yield Finding("inserted", other, None, None, f"chain {other} is not the one that this store writes, {chain}")
    for sha256, text in conn.execute(select(limit_file.c.sha256, limit_file.c.text)):
        if hashlib.sha256(text.encode("utf-8", "surrogateescape")).hexdigest() != sha256:
            yield Finding("changed", None, None, None, f"limit file {sha256[:12]} does not match its hash")
    yield from _gone(conn, record, chain)
    yield from _gone(conn, attempt, None)


def _gone(conn: Connection, table: Table, chain: str | None) -> Iterator[Finding]:
    """Ids were given out from 1 without gaps, and SQLite remembers the last; an id without its row was deleted."""
    given = conn.exec_driver_sql("SELECT seq FROM sqlite_sequence WHERE name = ?", (table.name,)).scalar() or 0
    last = conn.execute(select(func.max(table.c.id))).scalar() or 0
    if last > given:
        yield Finding("inserted", chain, None, None, f"{table.name} ids go to {last}; only {given} were given out")
    elif given > last:
        after = None if chain is None else _last_seq(conn, chain) + 1
        yield Finding("tail-cut", chain, after, None, f"the last {given - last} of {given} {table.name} rows are gone")
    if table is attempt and last != conn.execute(select(func.count()).select_from(attempt)).scalar():
        yield Finding("missing", None, None, None, f"not all of the attempts up to {last} are there")


def _last_seq(conn: Connection, chain: str) -> int:
    return conn.execute(select(func.max(record.c.seq)).where(record.c.chain == chain)).scalar() or 0
